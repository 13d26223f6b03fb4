//! A model outside the file at work: what it is asked, what its answers mean to the formulas, and what is remembered.

use std::fs;
use std::path::Path;
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::Mutex;
use std::sync::MutexGuard;
use std::sync::PoisonError;
use std::time::Duration;

use super::Problem;
use super::columns::DataTable;
use super::digest::Digest;
use super::faults::Fault;
use super::memo::Memo;
use super::outside_table::Means;
use super::outside_table::OutsideSpec;
use super::outside_table::ProgramKeys;
use super::table::Reader;
use crate::expression::Program;
use crate::model::ExchangeModel;
use crate::model::LibraryModel;
use crate::model::LibrarySpec;
use crate::model::Model;
use crate::model::ModelError;
use crate::model::Post;
use crate::model::ProgramModel;
use crate::model::ProgramSpec;
use crate::model::Surroundings;
use crate::model::cores;
use crate::numeric::Points;

/// By what means the model of a problem is asked.
#[derive(Debug, Clone, PartialEq)]
pub enum ModelMeans {
    /// A program that is kept running.
    Program(ProgramSpec),
    /// Compiled code in this process.
    Library {
        /// The file.
        file: PathBuf,
    },
    /// Files, answered elsewhere.
    Exchange,
}

/// The model of a problem file, with its way from variables to questions and from answers to names.
pub(crate) struct Outside {
    model: Box<dyn Model>,
    means: ModelMeans,
    /// The values that the model takes, from the variables.
    takes: Program,
    take_names: Vec<String>,
    return_names: Vec<String>,
    /// The values that formulas know, among all that the model returns.
    picked: Vec<usize>,
    digests: Vec<(String, String)>,
    /// Answers by their questions: `picked` values each.
    memo: Mutex<Memo>,
    /// Whole answers of a batch that was never finished.
    unfinished: Mutex<Memo>,
}

/// Answers to points: the values that formulas know, and whether the evaluation failed.
pub(crate) struct Known {
    /// Variables, then the picked values: the inputs of formulas. NaN where the model was not asked.
    pub(crate) inputs: Points,
    pub(crate) failed: Vec<bool>,
    /// Derivatives of the one value with respect to the variables, where they were asked for.
    pub(crate) slopes: Option<Points>,
}

impl Outside {
    /// Makes the model ready; what is wrong goes to `reader`.
    pub(crate) fn open(
        reader: &mut Reader<'_>,
        spec: &OutsideSpec,
        folder: &Path,
        (takes, take_names): (Program, Vec<String>),
        tables: &[DataTable],
    ) -> Option<Self> {
        let (return_names, picked) = returned(spec, tables);
        let n_outputs = return_names.len();
        let mut digests = Vec::new();
        let (model, means): (Box<dyn Model>, ModelMeans) = match &spec.means {
            Means::Program(keys) => {
                let program = program_spec(keys, folder, &take_names, n_outputs);
                digests = program_digests(&program);
                (Box::new(ProgramModel::new(program.clone())), ModelMeans::Program(program))
            }
            Means::Library { file, symbol, any_thread } => {
                let path = folder.join(&file.value);
                let library = LibrarySpec {
                    file: path.clone(),
                    symbol: symbol.value.clone(),
                    n_inputs: take_names.len(),
                    n_outputs,
                    any_thread: *any_thread,
                };
                let opened = LibraryModel::open(library).map_err(|error| {
                    reader.fault(
                        Fault::new(file.span.clone(), error.to_string())
                            .help("a path is taken from the folder of the problem file"),
                    );
                });
                digests.extend(file_digest("the library file", &path));
                digests.push(("the function of the library".to_owned(), symbol.value.clone()));
                (Box::new(opened.ok()?), ModelMeans::Library { file: path })
            }
            Means::Exchange => {
                (Box::new(ExchangeModel::new(take_names.clone(), return_names.clone())), ModelMeans::Exchange)
            }
        };
        let (memo, unfinished) = (Mutex::default(), Mutex::default());
        Some(Self { model, means, takes, take_names, return_names, picked, digests, memo, unfinished })
    }

    pub(crate) fn has_gradient(&self) -> bool {
        self.model.has_gradient()
    }

    pub(crate) fn uses_variable(&self, i: usize) -> bool {
        self.takes.uses_input(i)
    }

    /// Number of values that formulas know.
    pub(crate) fn n_values(&self) -> usize {
        self.picked.len()
    }

    /// What the model is asked at points in natural units.
    fn questions(&self, x: &Points) -> Points {
        let values = self.takes.values(x);
        let mut questions = Points::zeros(values.len(), x.len());
        for (j, value) in values.iter().enumerate() {
            (0..x.len()).for_each(|i| questions.set(i, j, value.get(i, 0)));
        }
        questions
    }

    /// Asks the model at those points of `x` that are `inside`, with derivatives if `gradient`.
    pub(crate) fn ask(&self, x: &Points, inside: &[usize], gradient: bool) -> Result<Known, ModelError> {
        let there = x.select(inside);
        let questions = self.questions(&there);
        let mut slopes = None;
        let answers = if gradient {
            let (values, found) = self.derivatives(&there, &questions)?;
            let mut all = Points::zeros(x.dim(), x.len());
            for (from, &to) in inside.iter().enumerate() {
                (0..x.dim()).for_each(|j| all.set(to, j, found.get(from, j)));
            }
            slopes = Some(all);
            values
        } else {
            self.values(&questions)?
        };
        let mut inputs = self.padded(x);
        let mut failed = vec![false; x.len()];
        let mut memo = lock(&self.memo);
        for (from, &to) in inside.iter().enumerate() {
            let picked: Vec<f64> = self.picked.iter().map(|&k| answers.get(from, k)).collect();
            failed[to] = picked.iter().any(|value| value.is_nan());
            picked.iter().enumerate().for_each(|(k, &value)| inputs.set(to, x.dim() + k, value));
            memo.keep(&questions.point(from), &picked);
        }
        Ok(Known { inputs, failed, slopes })
    }

    /// Inputs of formulas from what is remembered; the points of `inside` that are not, are asked.
    pub(crate) fn recall(&self, x: &Points, inside: &[usize]) -> Result<Points, ModelError> {
        let questions = self.questions(x);
        let missing: Vec<usize> = {
            let memo = lock(&self.memo);
            inside.iter().copied().filter(|&i| memo.find(&questions.point(i)).is_none()).collect()
        };
        let mut inputs = if missing.is_empty() { self.padded(x) } else { self.ask(x, &missing, false)?.inputs };
        let memo = lock(&self.memo);
        for &i in inside {
            for (k, &value) in memo.find(&questions.point(i)).unwrap_or_default().iter().enumerate() {
                inputs.set(i, x.dim() + k, value);
            }
        }
        Ok(inputs)
    }

    /// Variables with room for the model's values, NaN as yet.
    pub(crate) fn padded(&self, x: &Points) -> Points {
        let mut inputs = Points::zeros(x.dim() + self.n_values(), x.len());
        for i in 0..x.len() {
            (0..x.dim()).for_each(|j| inputs.set(i, j, x.get(i, j)));
            (0..self.n_values()).for_each(|k| inputs.set(i, x.dim() + k, f64::NAN));
        }
        inputs
    }

    /// Whole answers; those of an unfinished batch are not asked again.
    fn values(&self, questions: &Points) -> Result<Points, ModelError> {
        let mut answers = Points::zeros(self.model.n_outputs(), questions.len());
        let mut unfinished = lock(&self.unfinished);
        if unfinished.is_empty() {
            drop(unfinished);
            self.model.evaluate(questions, &mut answers)?;
            return Ok(answers);
        }
        let mut open = Vec::new();
        for i in 0..questions.len() {
            match unfinished.find(&questions.point(i)).filter(|found| found.len() == answers.dim()) {
                Some(found) => found.iter().enumerate().for_each(|(k, &value)| answers.set(i, k, value)),
                None => open.push(i),
            }
        }
        if !open.is_empty() {
            let mut rest = Points::zeros(answers.dim(), open.len());
            self.model.evaluate(&questions.select(&open), &mut rest)?;
            for (from, &to) in open.iter().enumerate() {
                (0..answers.dim()).for_each(|k| answers.set(to, k, rest.get(from, k)));
            }
        }
        if !open.is_empty() {
            // Something new was asked: the batch that was broken off is behind.
            unfinished.clear();
        }
        Ok(answers)
    }

    /// The one value and its derivatives with respect to the variables: those with respect to what the model takes, led
    /// back through the formulas of `takes`.
    fn derivatives(&self, x: &Points, questions: &Points) -> Result<(Points, Points), ModelError> {
        let n = x.len();
        let (mut values, mut inner) = (vec![0.0; n], Points::zeros(questions.dim(), n));
        self.model.gradient(questions, &mut values, &mut inner)?;
        let mut slopes = Points::zeros(x.dim(), n);
        for k in 0..questions.dim() {
            let (_, outer) = self.takes.value_and_gradient(k, x);
            for i in 0..n {
                for j in (0..x.dim()).filter(|&j| self.takes.output_uses_input(k, j)) {
                    slopes.set(i, j, slopes.get(i, j) + inner.get(i, k) * outer.get(i, j));
                }
            }
        }
        Ok((if n == 0 { Points::new(1) } else { Points::from_rows(1, &values) }, slopes))
    }
}

impl Problem {
    /// By what means the model of the problem file is asked; none where the target is formulas alone.
    #[must_use]
    pub fn model_means(&self) -> Option<&ModelMeans> {
        self.outside.as_ref().map(|outside| &outside.means)
    }

    /// Whether evaluations are best asked for many at a time: a model outside the file without derivatives, where every
    /// question on its own costs a round trip, or a file that somebody has to answer.
    ///
    /// It says the same for a program, a library and an exchange, so that a tuning is the same by whatever means.
    #[must_use]
    pub fn asks_in_batches(&self) -> bool {
        self.outside.as_ref().is_some_and(|outside| !outside.has_gradient())
    }

    /// Names of the values that the model takes, and of those that it returns.
    #[must_use]
    pub fn model_names(&self) -> Option<(&[String], &[String])> {
        self.outside.as_ref().map(|outside| (outside.take_names.as_slice(), outside.return_names.as_slice()))
    }

    /// What the model is asked at `points` in coordinates.
    #[must_use]
    pub fn model_questions(&self, points: &Points) -> Option<Points> {
        self.outside.as_ref().map(|outside| outside.questions(&self.space.to_natural(points)))
    }

    /// Files and settings that belong to the model, each with what stands for its contents.
    #[must_use]
    pub fn model_digests(&self) -> &[(String, String)] {
        self.outside.as_ref().map_or(&[], |outside| &outside.digests)
    }

    /// Tells the model whom to tell while it works; before the first evaluation.
    pub fn connect(&self, surroundings: &Arc<dyn Surroundings>) {
        if let Some(outside) = &self.outside {
            outside.model.connect(surroundings);
        }
    }

    /// Gives the model of `[exchange]` its way to the outside.
    pub fn send_by(&self, post: Box<dyn Post>) {
        if let Some(outside) = &self.outside {
            outside.model.send_by(post);
        }
    }

    /// The model's values at points in coordinates that were just evaluated, as formulas know them: for a journal. NaN
    /// where it was not asked.
    #[must_use]
    pub fn model_values(&self, points: &Points) -> Option<Points> {
        let outside = self.outside.as_ref()?;
        let questions = outside.questions(&self.space.to_natural(points));
        let mut values = Points::zeros(outside.n_values(), points.len());
        let memo = lock(&outside.memo);
        for i in 0..points.len() {
            let found = memo.find(&questions.point(i));
            (0..outside.n_values()).for_each(|k| values.set(i, k, found.map_or(f64::NAN, |found| found[k])));
        }
        Some(values)
    }

    /// Takes back what [`Problem::model_values`] gave for the same points, so that the model need not be asked again.
    pub fn remember(&self, points: &Points, values: &Points) {
        let Some(outside) = self.outside.as_ref().filter(|outside| outside.n_values() == values.dim()) else { return };
        let questions = outside.questions(&self.space.to_natural(points));
        let mut memo = lock(&outside.memo);
        (0..points.len()).for_each(|i| memo.keep(&questions.point(i), &values.point(i)));
    }

    /// Takes answers of a batch that was never finished: questions as the model takes them, and whole answers.
    pub fn remember_unfinished(&self, questions: &Points, answers: &Points) {
        let Some(outside) = &self.outside else { return };
        let mut unfinished = lock(&outside.unfinished);
        (0..questions.len()).for_each(|i| unfinished.keep(&questions.point(i), &answers.point(i)));
    }
}

/// Names of all that the model returns, and the numbers of those that formulas know: dropped rows are returned and ignored.
fn returned(spec: &OutsideSpec, tables: &[DataTable]) -> (Vec<String>, Vec<usize>) {
    let mut names: Vec<String> = spec.returns.iter().map(|name| name.value.clone()).collect();
    let mut picked: Vec<usize> = (0..names.len()).collect();
    for (column, table) in &spec.returns_rows {
        if let Some(table) = table_of(table.as_ref().map(|name| name.value.as_str()), tables) {
            picked.extend(table.kept.iter().map(|row| names.len() + row));
            names.extend((1..=table.raw.records.len()).map(|row| format!("{}[{row}]", column.value)));
        }
    }
    (names, picked)
}

/// The data table of that name, or the only one.
pub(crate) fn table_of<'t>(name: Option<&str>, tables: &'t [DataTable]) -> Option<&'t DataTable> {
    match (name, tables) {
        (None, [only]) => Some(only),
        (None, _) => None,
        (Some(name), _) => tables.iter().find(|table| table.raw.spec.name.as_deref() == Some(name)),
    }
}

fn program_spec(keys: &ProgramKeys, folder: &Path, takes: &[String], n_outputs: usize) -> ProgramSpec {
    let count = |value: Option<u64>| value.and_then(|n| usize::try_from(n).ok());
    ProgramSpec {
        run: keys.run.iter().map(|part| part.value.clone()).collect(),
        folder: keys.folder.as_ref().map_or_else(|| folder.to_path_buf(), |inner| folder.join(&inner.value)),
        takes: takes.to_vec(),
        n_outputs,
        workers: count(keys.workers).unwrap_or_else(cores),
        batch: count(keys.batch),
        timeout: match keys.timeout {
            None => Some(ProgramSpec::TIMEOUT),
            Some(seconds) => Duration::try_from_secs_f64(seconds).ok(),
        },
        tries: keys.tries.and_then(|n| u32::try_from(n).ok()).unwrap_or(ProgramSpec::TRIES),
        format: keys.format,
        gradient: keys.gradient,
    }
}

/// The command line, and every file that it names: another one gives other answers.
fn program_digests(spec: &ProgramSpec) -> Vec<(String, String)> {
    let mut digests = vec![("the command of the model program".to_owned(), spec.run.join(" "))];
    for (k, part) in spec.run.iter().enumerate() {
        if k > 0 || part.contains('/') {
            digests.extend(file_digest("the program file", &spec.folder.join(part)));
        }
    }
    digests
}

fn file_digest(what: &str, path: &Path) -> Option<(String, String)> {
    let bytes = fs::metadata(path).ok().filter(fs::Metadata::is_file).and_then(|_| fs::read(path).ok())?;
    let mut digest = Digest::new();
    digest.add(&bytes);
    Some((format!("{what} {}", path.file_name()?.to_string_lossy()), digest.finish()))
}

/// A panic elsewhere leaves remembered answers as good as they were.
fn lock(memo: &Mutex<Memo>) -> MutexGuard<'_, Memo> {
    memo.lock().unwrap_or_else(PoisonError::into_inner)
}
