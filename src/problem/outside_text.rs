//! The table of a model outside the file written out again, and its meaning alone.

use std::fmt::Write as _;
use std::path::Path;

use super::outside::ModelMeans;
use super::outside_table::Means;
use super::outside_table::OutsideSpec;
use super::text::key;
use super::text::quoted;
use super::text::relative;
use crate::model::ProgramFormat;

/// What is written.
#[derive(Debug, Clone, Copy)]
pub(crate) enum Showing<'a> {
    /// The table with every default, its paths as seen from a folder (or as they were given).
    Whole {
        /// Where the text will lie.
        folder: Option<&'a Path>,
    },
    /// What the model takes and returns, however it is asked.
    Meaning,
}

/// The table as a text.
pub(crate) fn written(spec: &OutsideSpec, means: &ModelMeans, showing: &Showing<'_>) -> String {
    let mut out = String::new();
    let gradient = matches!(means, ModelMeans::Program(program) if program.gradient);
    match showing {
        Showing::Meaning => {
            let _ = write!(out, "\n[model]\ngradient = {gradient}\n");
        }
        Showing::Whole { folder } => {
            let _ = write!(out, "\n{}\n", spec.table);
            write_means(&mut out, spec, means, *folder);
        }
    }
    let names =
        |texts: &[super::text_value::Text]| texts.iter().map(|text| quoted(&text.value)).collect::<Vec<_>>().join(", ");
    if let Some(takes) = &spec.takes {
        let _ = writeln!(out, "takes = [{}]", names(takes));
    }
    if !spec.returns.is_empty() {
        let _ = writeln!(out, "returns = [{}]", names(&spec.returns));
    }
    let rows: Vec<String> = spec
        .returns_rows
        .iter()
        .map(|(name, table)| match table {
            Some(table) => format!("{} = {}", key(&name.value), quoted(&table.value)),
            None => quoted(&name.value),
        })
        .collect();
    if !rows.is_empty() {
        let named = spec.returns_rows.iter().any(|(_, table)| table.is_some());
        let _ = if named {
            writeln!(out, "returns_rows = {{ {} }}", rows.join(", "))
        } else {
            writeln!(out, "returns_rows = [{}]", rows.join(", "))
        };
    }
    out
}

fn write_means(out: &mut String, spec: &OutsideSpec, means: &ModelMeans, folder: Option<&Path>) {
    match (&spec.means, means) {
        (Means::Program(keys), ModelMeans::Program(program)) => {
            let run: Vec<String> = program.run.iter().map(|part| quoted(part)).collect();
            let _ = writeln!(out, "run = [{}]", run.join(", "));
            let place = match (folder, &keys.folder) {
                (Some(folder), _) => Some(seen_from(&program.folder, folder)),
                (None, given) => given.as_ref().map(|given| given.value.clone()),
            };
            if let Some(place) = place {
                let _ = writeln!(out, "folder = {}", quoted(&place));
            }
            // The number of cores is the machine's, not the problem's.
            if keys.workers.is_some() {
                let _ = writeln!(out, "workers = {}", program.workers);
            }
            let batch = program.batch.map_or_else(|| "\"auto\"".to_owned(), |batch| batch.to_string());
            let timeout = program.timeout.map_or(f64::INFINITY, |timeout| timeout.as_secs_f64());
            let format = if program.format == ProgramFormat::F64 { "f64" } else { "text" };
            let _ = write!(out, "batch = {batch}\ntimeout = {timeout:?}\ntries = {}\n", program.tries);
            let _ = write!(out, "format = \"{format}\"\ngradient = {}\n", program.gradient);
        }
        (Means::Library { file, symbol, any_thread }, ModelMeans::Library { file: path }) => {
            let file = folder.map_or_else(|| file.value.clone(), |folder| seen_from(path, folder));
            let _ = write!(out, "file = {}\nsymbol = {}\n", quoted(&file), quoted(&symbol.value));
            let _ = writeln!(out, "threads = {}", if *any_thread { "\"any\"" } else { "1" });
        }
        _ => {}
    }
}

/// A path as seen from a folder; the empty one is the working folder.
fn seen_from(path: &Path, folder: &Path) -> String {
    let path = if path.as_os_str().is_empty() { Path::new(".") } else { path };
    let seen = relative(path, folder);
    if seen.is_empty() { ".".to_owned() } else { seen }
}
