//! The problem written out again, every default included, so that reading the text gives the same problem.

use std::fmt::Write as _;
use std::path::Component;
use std::path::Path;
use std::path::PathBuf;

use super::Problem;
use super::columns::DataTable;
use super::digest::Digest;
use super::outside_text;
use super::outside_text::Showing;
use super::statement::NamedFormula;
use super::statement::Statement;
use super::variable::Nature;
use super::variables_table::Each;
use super::variables_table::NatureSpec;
use super::variables_table::ParameterEntry;
use super::variables_table::ParameterSpec;
use super::variables_table::VariableSpec;
use crate::distribution::Distribution;

impl Problem {
    /// The problem as a problem file with every default written out; paths of data as they were given.
    #[must_use]
    pub fn text(&self) -> String {
        self.written(|table| table.raw.spec.file.value.clone(), &Showing::Whole { folder: None })
    }

    /// [`Problem::text`] with the paths of data relative to `folder`, for a copy that is kept there.
    #[must_use]
    pub fn text_for(&self, folder: &Path) -> String {
        self.written(|table| relative(&table.raw.path, folder), &Showing::Whole { folder: Some(folder) })
    }

    /// 32 hexadecimal digits that stand for the problem and the contents of its data files, wherever these lie.
    ///
    /// Two runs of the 64-bit FNV-1a hash over the text with every default and over the files. The model of a problem
    /// that was built in code is not part of it, nor is the way in which a model outside the file is asked (what it takes
    /// and returns is): the same model gives the same proposal as a program, as a library and by exchange.
    #[must_use]
    pub fn digest(&self) -> String {
        let mut digest = Digest::new();
        digest.add(self.written(|_| String::new(), &Showing::Meaning).as_bytes());
        for table in &self.data {
            digest.add(&table.raw.bytes);
        }
        digest.finish()
    }

    /// Every data file, as the problem names it, with 32 hexadecimal digits that stand for its contents.
    #[must_use]
    pub fn data_digests(&self) -> Vec<(String, String)> {
        let of = |table: &DataTable| {
            let mut digest = Digest::new();
            digest.add(&table.raw.bytes);
            (table.raw.spec.file.value.clone(), digest.finish())
        };
        self.data.iter().map(of).collect()
    }

    fn written(&self, path: impl Fn(&DataTable) -> String, showing: &Showing<'_>) -> String {
        let mut out = format!("title = {}\n", quoted(&self.title));
        match &self.statement {
            Some(statement) => {
                let model = statement.outside.as_ref().zip(self.model_means());
                let model = model.map(|(spec, means)| outside_text::written(spec, means, showing)).unwrap_or_default();
                write_statement(&mut out, statement, &self.data, path, &model);
            }
            None => self.write_built(&mut out),
        }
        out.push('\n');
        out.push_str(&self.tuning.written());
        out
    }

    /// A problem built in code: its variables and its aim. The model itself cannot be written.
    fn write_built(&self, out: &mut String) {
        for variable in &self.variables {
            let _ = write!(out, "\n[variables.{}]\n", key(&variable.name));
            match &variable.nature {
                Nature::Range { low, high } => {
                    let _ = writeln!(out, "range = [{low:?}, {high:?}]");
                }
                Nature::Random(distribution) => {
                    let _ = writeln!(out, "distribution = {}", quoted(distribution.family()));
                    for (name, value) in distribution.parameters() {
                        let _ = writeln!(out, "{name} = {value:?}");
                    }
                    if distribution.shift() != 0.0 {
                        let _ = writeln!(out, "shift = {:?}", distribution.shift());
                    }
                    if distribution.is_truncated() {
                        let (low, high) = distribution.support();
                        let _ = writeln!(out, "between = [{low:?}, {high:?}]");
                    }
                }
                Nature::Dependent { family, parameters } => {
                    let _ = writeln!(out, "distribution = {}", quoted(family));
                    for (name, text) in parameters {
                        let _ = writeln!(out, "{name} = {}", quoted(text));
                    }
                }
            }
            for (name, value) in [("near", variable.near), ("spread", variable.spread)] {
                if let Some(value) = value {
                    let _ = writeln!(out, "{name} = {value:?}");
                }
            }
            write_words(out, variable.unit.as_ref(), variable.label.as_ref(), variable.note.as_ref());
        }
        let _ = write!(out, "\n[target] # a model in code\naim = {}\n", quoted(self.aim.word()));
    }
}

fn write_statement(
    out: &mut String,
    statement: &Statement,
    data: &[DataTable],
    path: impl Fn(&DataTable) -> String,
    model: &str,
) {
    if !statement.constants.is_empty() {
        out.push_str("\n[constants]\n");
        for (name, value, _) in &statement.constants {
            let _ = writeln!(out, "{} = {value:?}", key(name));
        }
    }
    for spec in &statement.variables {
        write_variable(out, spec);
    }
    for spec in &statement.correlations {
        let among: Vec<String> = spec.among.iter().map(|name| quoted(&name.value)).collect();
        let d = among.len();
        let row = |i: usize| {
            let cells: Vec<String> = (0..=i).map(|j| format!("{:?}", spec.matrix[i * d + j])).collect();
            format!("[{}]", cells.join(", "))
        };
        let rows: Vec<String> = (0..d).map(row).collect();
        let _ = write!(out, "\n[[correlation]]\namong = [{}]\n", among.join(", "));
        let _ = writeln!(out, "{} = [{}]", spec.kind.word(), rows.join(", "));
    }
    for table in data {
        write_data(out, table, &path(table));
    }
    out.push_str(model);
    write_formulas(out, "formulas", &statement.formulas);
    let target = &statement.target;
    let _ = write!(out, "\n[target]\naim = {}\n", quoted(target.aim.word()));
    let _ = writeln!(out, "{} = {}", target.key.word(), quoted(&target.formula.value));
    let require: Vec<String> = target.require.iter().map(|text| quoted(&text.value)).collect();
    let _ = writeln!(out, "require = [{}]", require.join(", "));
    if let Some(failed) = target.failed {
        let word = if failed == super::Failed::Inside { "inside" } else { "outside" };
        let _ = writeln!(out, "failed = {}", quoted(word));
    }
    write_formulas(out, "estimates", &statement.estimates);
}

fn write_formulas(out: &mut String, table: &str, formulas: &[NamedFormula]) {
    if formulas.is_empty() {
        return;
    }
    let _ = write!(out, "\n[{table}]\n");
    for formula in formulas {
        let _ = writeln!(out, "{} = {}", key(&formula.name), quoted(&formula.formula.value));
    }
}

fn write_variable(out: &mut String, spec: &VariableSpec) {
    let _ = write!(out, "\n[variables.{}]\n", key(&spec.name));
    match &spec.each {
        Some(Each::Column(column)) => {
            let _ = writeln!(out, "each = {}", quoted(&column.value));
        }
        Some(Each::Count(n)) => {
            let _ = writeln!(out, "each = {n}");
        }
        None => {}
    }
    match &spec.nature {
        NatureSpec::Faulty { .. } => {}
        NatureSpec::Range { low, high } => {
            let _ = writeln!(out, "range = [{low:?}, {high:?}]");
        }
        NatureSpec::Random { family, parameters, between, shift } => {
            let _ = writeln!(out, "distribution = {}", quoted(&family.value));
            for parameter in parameters {
                let value = match &parameter.value {
                    ParameterSpec::Number(number) => format!("{number:?}"),
                    ParameterSpec::Formula(text) => quoted(&text.value),
                };
                let _ = writeln!(out, "{} = {value}", parameter.key);
            }
            for (name, value) in left_out(&family.value, parameters) {
                let _ = writeln!(out, "{name} = {value:?}");
            }
            if let Some(((low, high), _)) = between {
                let _ = writeln!(out, "between = [{low:?}, {high:?}]");
            }
            if let Some((shift, _)) = shift {
                let _ = writeln!(out, "shift = {shift:?}");
            }
        }
    }
    for (name, value) in [("near", &spec.near), ("spread", &spec.spread)] {
        if let Some((value, _)) = value {
            let _ = writeln!(out, "{name} = {value:?}");
        }
    }
    write_words(out, spec.unit.as_ref(), spec.label.as_ref(), spec.note.as_ref());
}

fn write_words(out: &mut String, unit: Option<&String>, label: Option<&String>, note: Option<&String>) {
    for (name, value) in [("unit", unit), ("label", label), ("note", note)] {
        if let Some(value) = value {
            let _ = writeln!(out, "{name} = {}", quoted(value));
        }
    }
}

/// Parameters that are left out, with what they then are.
fn left_out(family: &str, given: &[ParameterEntry]) -> Vec<(&'static str, f64)> {
    let has = |name: &str| given.iter().any(|parameter| parameter.key == name);
    let sets = Distribution::parameters_of(family).unwrap_or_default();
    let chosen = sets.iter().find(|set| {
        set.required.iter().all(|name| has(name))
            && given.iter().all(|parameter| {
                let key = parameter.key.as_str();
                set.required.contains(&key) || set.optional.iter().any(|(name, _)| *name == key)
            })
    });
    let optional = chosen.map_or(&[][..], |set| set.optional);
    optional.iter().copied().filter(|(name, _)| !has(name)).collect()
}

fn write_data(out: &mut String, table: &DataTable, path: &str) {
    let spec = &table.raw.spec;
    let name = spec.name.as_ref().map_or_else(|| "data".to_owned(), |name| format!("data.{}", key(name)));
    let _ = write!(out, "\n[{name}]\nfile = {}\n", quoted(path));
    if !spec.renamed.is_empty() {
        let names: Vec<String> = spec
            .renamed
            .iter()
            .map(|(name, header)| format!("{} = {}", key(&name.value), quoted(&header.value)))
            .collect();
        let _ = writeln!(out, "names = {{ {} }}", names.join(", "));
    }
    if let Some(missing) = &spec.missing {
        let texts: Vec<String> = missing.iter().map(|text| quoted(text)).collect();
        let _ = writeln!(out, "missing = [{}]", texts.join(", "));
        let _ =
            writeln!(out, "rows = {}", if spec.rows == Some(super::Rows::All) { "\"all\"" } else { "\"complete\"" });
    } else if let Some(rows) = spec.rows {
        let _ = writeln!(out, "rows = {}", if rows == super::Rows::All { "\"all\"" } else { "\"complete\"" });
    }
}

/// A TOML key, in quotes where it needs them.
pub(crate) fn key(name: &str) -> String {
    let bare = !name.is_empty() && name.chars().all(|c| c.is_ascii_alphanumeric() || c == '_' || c == '-');
    if bare { name.to_owned() } else { quoted(name) }
}

/// A TOML text in double quotes.
pub(crate) fn quoted(text: &str) -> String {
    let mut out = String::from("\"");
    for character in text.chars() {
        match character {
            '"' => out.push_str("\\\""),
            '\\' => out.push_str("\\\\"),
            '\n' => out.push_str("\\n"),
            '\t' => out.push_str("\\t"),
            '\r' => out.push_str("\\r"),
            c if c.is_control() => {
                let _ = write!(out, "\\u{:04x}", u32::from(c));
            }
            c => out.push(c),
        }
    }
    out.push('"');
    out
}

/// `path` as seen from `folder`, with `/` between its parts; unchanged where they share no root.
pub(crate) fn relative(path: &Path, folder: &Path) -> String {
    let (Some(path), Some(folder)) = (plain(path), plain(folder)) else { return path.display().to_string() };
    let (path_parts, folder_parts): (Vec<_>, Vec<_>) = (path.components().collect(), folder.components().collect());
    let shared = path_parts.iter().zip(&folder_parts).take_while(|(a, b)| a == b).count();
    if shared == 0 {
        return path.display().to_string();
    }
    let up = folder_parts[shared..].iter().map(|_| "..".to_owned());
    let down = path_parts[shared..].iter().map(|part| part.as_os_str().to_string_lossy().into_owned());
    up.chain(down).collect::<Vec<_>>().join("/")
}

/// The absolute path with `.` and `..` worked out.
fn plain(path: &Path) -> Option<PathBuf> {
    let mut out = PathBuf::new();
    for part in std::path::absolute(path).ok()?.components() {
        match part {
            Component::ParentDir => {
                out.pop();
            }
            Component::CurDir => {}
            other => out.push(other),
        }
    }
    Some(out)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn paths_are_seen_from_the_folder() {
        for (path, folder, want) in [
            ("a/b/data.csv", "a/b/run", "../data.csv"),
            ("a/b/data.csv", "a/b", "data.csv"),
            ("a/data/x.csv", "a/runs/one", "../../data/x.csv"),
            ("a/b/../c.csv", "a/run", "../c.csv"),
        ] {
            assert_eq!(relative(Path::new(path), Path::new(folder)), want);
        }
    }

    #[test]
    fn texts_read_back_whatever_they_hold() {
        for text in ["plain", "with \"quotes\" and \\", "two\nlines\tand\u{1}", "größe 'x'"] {
            let line = format!("{} = {}", key(text), quoted(text));
            let read = toml::de::DeTable::parse(&line).unwrap();
            let (name, value) = read.get_ref().iter().next().unwrap();
            assert_eq!((name.get_ref().as_ref(), value.get_ref().as_str()), (text, Some(text)));
        }
    }
}
