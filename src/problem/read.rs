//! From a problem file to a checked problem.

use std::fs;
use std::path::Path;

use toml::de::DeTable;

use super::Estimates;
use super::Problem;
use super::ProblemErrors;
use super::Target;
use super::columns;
use super::columns::DataTable;
use super::columns::Uses;
use super::correlation;
use super::data;
use super::expand;
use super::expand::Expanded;
use super::faults::Fault;
use super::faults::Faults;
use super::faults::Source;
use super::names::Names;
use super::names::Piece;
use super::names::pieces;
use super::natures;
use super::natures::Natures;
use super::outside::Outside;
use super::programs;
use super::programs::Programs;
use super::start;
use super::start::Misplaced;
use super::statement;
use super::statement::Stated;
use super::statement::Statement;
use super::syntax;
use super::table::Reader;
use super::target::Aim;
use super::target::TargetKey;
use super::tuning::CoordinateChoice;
use super::tuning::TuningKeys;
use super::variable::Variable;
use super::variables_table::Each;
use super::variables_table::NatureSpec;
use super::variables_table::ParameterSpec;
use crate::numeric::Points;

/// What was read from a data file, for reports.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct DataFile {
    /// The path as the problem file gives it.
    pub file: String,
    /// Names of its columns in formulas.
    pub columns: Vec<String>,
    /// Rows below the header.
    pub rows: usize,
    /// Rows left out because a cell that a formula uses was missing.
    pub dropped: usize,
}

impl Problem {
    /// Reads a problem file, and the data files that it names.
    ///
    /// # Errors
    /// Everything that is wrong with them, as far as it can be told at once, each with its place and what to write
    /// instead.
    pub fn read(path: &Path) -> Result<Self, ProblemErrors> {
        Self::read_with(path, TuningKeys::clone)
    }

    /// Reads a problem file, with what `change` makes of the keys of its `[tuning]`.
    ///
    /// # Errors
    /// As [`Problem::read`].
    pub fn read_with(path: &Path, change: impl Fn(&TuningKeys) -> TuningKeys) -> Result<Self, ProblemErrors> {
        let shown = path.display().to_string();
        let refused = |message: String, help: &str| {
            let mut faults = Faults::default();
            faults.push(Fault::new(0..0, message).help(help));
            faults.into_errors(Source { file: String::new(), text: String::new(), first_line: 1 })
        };
        let bytes = fs::read(path).map_err(|error| {
            refused(format!("the problem file `{shown}` cannot be read: {}", data::reason(&error)), "check its path")
        })?;
        let text = String::from_utf8(bytes).map_err(|error| {
            let valid = error.utf8_error().valid_up_to();
            let line = 1 + error.as_bytes()[..valid].iter().filter(|&&byte| byte == b'\n').count();
            refused(format!("line {line} of `{shown}` is not UTF-8 text"), "save the file with the encoding UTF-8")
        })?;
        Self::parse_with(&text, &shown, path.parent().unwrap_or(Path::new("")), &change)
    }

    /// Reads the text of a problem file; messages call it `file_name`, and paths of data start from `folder`.
    ///
    /// # Errors
    /// As [`Problem::read`].
    pub fn parse(text: &str, file_name: &str, folder: &Path) -> Result<Self, ProblemErrors> {
        Self::parse_with(text, file_name, folder, &TuningKeys::clone)
    }

    fn parse_with(text: &str, file_name: &str, folder: &Path, change: KeysChange<'_>) -> Result<Self, ProblemErrors> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let mended = syntax::mend(text);
        let mut reader = Reader::new(&mended.text);
        for line in &mended.left_out {
            reader.mentions.push(line.clone());
            reader.faulty.extend(line.split_once('=').map(|(key, _)| key.trim().to_owned()));
        }
        let problem = if mended.readable { assemble(&mut reader, folder, change) } else { None };
        match problem {
            Some(problem) if reader.faults.is_empty() && mended.faults.is_empty() => Ok(problem),
            _ => {
                let mut faults = Faults::default();
                mended.faults.iter().cloned().for_each(|fault| faults.push(fault));
                let placed = reader.faults.placed(|span| mended.place(span));
                let told = |fault: &Fault| fault.is_elsewhere() || !mended.is_muted(text, fault.start());
                placed.into_iter().filter(told).for_each(|fault| faults.push(fault));
                let source = Source { file: file_name.to_owned(), text: text.to_owned(), first_line: 1 };
                Err(faults.into_errors(source))
            }
        }
    }

    /// What was read from data files.
    #[must_use]
    pub fn data_files(&self) -> Vec<DataFile> {
        let summary = |table: &DataTable| DataFile {
            file: table.raw.spec.file.value.clone(),
            columns: table.columns.iter().map(|column| column.name.clone()).collect(),
            rows: table.raw.records.len(),
            dropped: table.raw.records.len() - table.kept.len(),
        };
        self.data.iter().map(summary).collect()
    }
}

/// What is made of the keys that a file has.
type KeysChange<'a> = &'a dyn Fn(&TuningKeys) -> TuningKeys;

/// None only where `reader` holds a fault that says why. Every step goes on with what the steps before could make out, so
/// that one look at a file shows all that is wrong with it and does not follow from something else.
fn assemble(reader: &mut Reader<'_>, folder: &Path, change: KeysChange<'_>) -> Option<Problem> {
    // What is wrong with it as TOML was told already.
    let (document, _) = DeTable::parse_recoverable(reader.source);
    let mut names = Names::default();
    let mut stated = statement::read(reader, &mut names, &document);
    stated.statement.tuning = change(&stated.statement.tuning);
    let statement = &stated.statement;
    check_aim(reader, &stated);
    let tables = load(reader, &mut names, &stated, folder);
    let expanded = expand::expand(reader, statement, &tables);
    let (programs, parameters) = programs::compile(reader, &stated, &expanded, &tables);
    let natures = natures::settle(reader, &expanded, &parameters);
    let correlations = correlation::settle(reader, &statement.correlations, &expanded, &natures.variables);
    let choice = statement.tuning.coordinates;
    if let Some(aim) = stated.target.aim {
        check_places(reader, &expanded, &natures, aim, choice);
    }
    if !reader.faults.is_empty() {
        return None;
    }
    let Programs { target, estimates, estimate_labels, takes } = programs?;
    let mut variables: Vec<Variable> = natures.variables.into_iter().collect::<Option<_>>()?;
    let outside = match (&statement.outside, takes) {
        (Some(spec), Some(takes)) => Some(Outside::open(reader, spec, folder, takes, &tables)?),
        _ => None,
    };
    let aim = statement.target.aim;
    let placed = start::place(&mut variables, &natures.groups, &correlations, aim, choice);
    let (space, start) = match placed {
        Ok(placed) => placed,
        Err(errors) => {
            misplaced(reader, &errors, &expanded);
            return None;
        }
    };
    let centre = space.to_natural(&Points::from_rows(variables.len(), &start.near));
    natures::try_at_start(reader, &expanded, &natures.groups, &centre);
    let estimate_names = estimate_names(statement, &estimate_labels);
    Some(Problem {
        title: statement.title.clone(),
        correlations,
        aim,
        failed: statement.target.failed,
        space,
        start,
        target: Target::Formulas(Box::new(target)),
        outside,
        estimate_names,
        estimates: estimates.map_or(Estimates::None, |program| Estimates::Formulas(Box::new(program))),
        tuning: statement.tuning.clone(),
        data: tables,
        variables,
        statement: Some(statement.clone()),
    })
}

/// Whether each variable that is known can have its coordinate and its start.
fn check_places(
    reader: &mut Reader<'_>,
    expanded: &[Expanded<'_>],
    natures: &Natures,
    aim: Aim,
    choice: Option<CoordinateChoice>,
) {
    if choice == Some(CoordinateChoice::Natural) && aim != Aim::Density {
        misplaced(reader, &[Misplaced::NaturalElsewhere(aim.word())], expanded);
        return;
    }
    for variable in expanded.iter().filter(|variable| variable.spec.sound) {
        if !matches!(variable.spec.nature, NatureSpec::Range { .. }) || aim == Aim::Density {
            let one = natures.variables[variable.places.start].as_ref();
            let errors = match one {
                Some(one) => start::misplaced(one, aim, choice),
                None if depends(variable, expanded)
                    && (variable.spec.near.is_some() || variable.spec.spread.is_some()) =>
                {
                    vec![Misplaced::StartOfDependent { name: variable.names()[0].0.clone() }]
                }
                None => Vec::new(),
            };
            misplaced(reader, &errors, expanded);
        }
    }
}

/// Whether a formula among the parameters names another variable.
fn depends(variable: &Expanded<'_>, expanded: &[Expanded<'_>]) -> bool {
    variable.spec.nature.parameters().iter().any(|parameter| match &parameter.value {
        ParameterSpec::Formula(text) => pieces(&text.value)
            .iter()
            .any(|piece| matches!(piece, Piece::Name(name) if expanded.iter().any(|other| other.spec.name == *name))),
        ParameterSpec::Number(_) => false,
    })
}

/// What aim and variables ask of each other.
fn check_aim(reader: &mut Reader<'_>, stated: &Stated) {
    let Some(target) = &stated.target.spec else { return };
    for spec in &stated.statement.variables {
        let range = matches!(spec.nature, NatureSpec::Range { .. });
        let random = matches!(spec.nature, NatureSpec::Random { .. });
        if range && target.aim != Aim::Density {
            let error = Misplaced::NoDistribution { name: spec.name.clone(), aim: target.aim.word() };
            reader.fault(
                Fault::new(spec.name_span.clone(), error.to_string())
                    .also(target.aim_span.clone(), "this aim")
                    .help(error.help()),
            );
        }
        if random && target.key == TargetKey::LogDensity {
            reader.fault(
                Fault::new(
                    spec.name_span.clone(),
                    format!("`log_density` is the whole target, and `{}` brings a distribution of its own", spec.name),
                )
                .also(target.formula.span.clone(), "the whole target")
                .help("write log_factor, to which the log densities of the variables are added, or give the variable a range"),
            );
        }
    }
}

/// Reads all data files; formulas are looked through first, to know which columns are used.
fn load(reader: &mut Reader<'_>, names: &mut Names, stated: &Stated, folder: &Path) -> Vec<DataTable> {
    let statement = &stated.statement;
    let mut uses = Uses::default();
    for formula in statement.formulas.iter().chain(&statement.estimates) {
        uses.note(&formula.formula.value);
    }
    stated.target.texts.iter().for_each(|(_, text, _)| uses.note(&text.value));
    for spec in &statement.variables {
        if let Some(Each::Column(column)) = &spec.each {
            uses.note_labels(&column.value);
        }
        for parameter in spec.nature.parameters() {
            if let ParameterSpec::Formula(text) = &parameter.value {
                uses.note(&text.value);
            }
        }
    }
    let mut tables = Vec::new();
    for spec in &statement.data {
        if let Some(raw) = data::load(reader, spec, folder) {
            tables.push(columns::settle(reader, names, raw, &uses));
        }
    }
    tables
}

fn misplaced(reader: &mut Reader<'_>, errors: &[Misplaced], expanded: &[Expanded<'_>]) {
    for error in errors {
        let about = error
            .variable()
            .and_then(|name| expanded.iter().find(|variable| variable.names().iter().any(|(known, _)| known == name)));
        let span = about.map_or(0..0, |variable| match error {
            Misplaced::NearOutside { .. } | Misplaced::StartOfDependent { .. } => {
                let said = variable.spec.near.as_ref().or(variable.spec.spread.as_ref());
                said.map_or(variable.spec.name_span.clone(), |(_, span)| span.clone())
            }
            _ => variable.spec.name_span.clone(),
        });
        reader.fault(Fault::new(span, error.to_string()).help(error.help()));
    }
}

/// Columns of estimates are named by what they run over: `level[Alder]` over labels, `level[3]` over rows.
fn estimate_names(statement: &Statement, labels: &[Option<Vec<String>>]) -> Vec<String> {
    let mut names = Vec::new();
    for (estimate, labels) in statement.estimates.iter().zip(labels) {
        match labels {
            None => names.push(estimate.name.clone()),
            Some(labels) => names.extend(labels.iter().map(|label| format!("{}[{label}]", estimate.name))),
        }
    }
    names
}
