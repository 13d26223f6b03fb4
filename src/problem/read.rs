//! From a problem file to a checked problem.

use std::fs;
use std::path::Path;

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
use super::natures;
use super::outside::Outside;
use super::programs;
use super::programs::Programs;
use super::start;
use super::start::Misplaced;
use super::statement;
use super::statement::Statement;
use super::table::Reader;
use super::target::Aim;
use super::target::TargetKey;
use super::tuning::TuningKeys;
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
        let mut reader = Reader::new(text);
        let problem = assemble(&mut reader, folder, change);
        match problem {
            Some(problem) if reader.faults.is_empty() => Ok(problem),
            _ => {
                let source = Source { file: file_name.to_owned(), text: text.to_owned(), first_line: 1 };
                Err(reader.faults.into_errors(source))
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

/// None only where `reader` holds a fault that says why.
fn assemble(reader: &mut Reader<'_>, folder: &Path, change: KeysChange<'_>) -> Option<Problem> {
    let mut names = Names::default();
    let statement = statement::read(reader, &mut names);
    let mut statement = statement?;
    statement.tuning = change(&statement.tuning);
    check_aim(reader, &statement);
    let before = reader.faults.len();
    let tables = load(reader, &mut names, &statement, folder)?;
    if !statement.names_known || reader.faults.len() > before {
        return None; // Names that are wrong or missing would be told again, less clearly, by the formulas.
    }
    let expanded = expand::expand(reader, &statement, &tables)?;
    let Some(programs) = programs::compile(reader, &names, &statement, &expanded, &tables) else {
        natures::check_numbers(reader, &expanded);
        return None;
    };
    let Programs { target, estimates, estimate_labels, parameters, takes } = programs;
    let settled = natures::settle(reader, &expanded, &parameters)?;
    let mut variables = settled.variables;
    let correlations = correlation::settle(reader, &statement.correlations, &expanded, &variables)?;
    if !reader.faults.is_empty() {
        return None;
    }
    let outside = match (&statement.outside, takes) {
        (Some(spec), Some(takes)) => Some(Outside::open(reader, spec, folder, takes, &tables)?),
        _ => None,
    };
    let aim = statement.target.aim;
    let choice = statement.tuning.coordinates;
    let placed = start::place(&mut variables, &settled.groups, &correlations, aim, choice);
    let (space, start) = match placed {
        Ok(placed) => placed,
        Err(errors) => {
            misplaced(reader, &errors, &expanded);
            return None;
        }
    };
    let centre = space.to_natural(&Points::from_rows(variables.len(), &start.near));
    natures::try_at_start(reader, &expanded, &settled.groups, &centre);
    let estimate_names = estimate_names(&statement, &estimate_labels);
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
        statement: Some(statement),
    })
}

/// What aim and variables ask of each other.
fn check_aim(reader: &mut Reader<'_>, statement: &Statement) {
    let target = &statement.target;
    for spec in &statement.variables {
        let random = matches!(spec.nature, NatureSpec::Random { .. });
        if !random && target.aim != Aim::Density {
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
fn load(reader: &mut Reader<'_>, names: &mut Names, statement: &Statement, folder: &Path) -> Option<Vec<DataTable>> {
    let mut uses = Uses::default();
    for formula in statement.formulas.iter().chain(&statement.estimates) {
        uses.note(&formula.formula.value);
    }
    uses.note(&statement.target.formula.value);
    statement.target.require.iter().for_each(|text| uses.note(&text.value));
    for spec in &statement.variables {
        if let Some(Each::Column(column)) = &spec.each {
            uses.note_labels(&column.value);
        }
        if let NatureSpec::Random { parameters, .. } = &spec.nature {
            for parameter in parameters {
                if let ParameterSpec::Formula(text) = &parameter.value {
                    uses.note(&text.value);
                }
            }
        }
    }
    let mut tables = Vec::new();
    let mut whole = true;
    for spec in &statement.data {
        let table = data::load(reader, spec, folder).and_then(|raw| columns::settle(reader, names, raw, &uses));
        match table {
            Some(table) => tables.push(table),
            None => whole = false,
        }
    }
    whole.then_some(tables)
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
