//! Points that somebody else evaluates: `asked/0001.csv` goes out, `answered/0001.csv` comes back.

use super::StoreError;
use super::atomic::write_atomically;
use super::table::decimal;
use crate::model::ModelError;
use crate::model::Post;
use crate::numeric::Points;
use std::collections::BTreeMap;
use std::fs;
use std::io;
use std::path::Path;
use std::path::PathBuf;

/// The two folders inside a run's folder.
const ASKED: &str = "asked";
const ANSWERED: &str = "answered";
/// Name of the column that says which answer belongs to which point.
const ID: &str = "id";
/// Ids that a message lists.
const LISTED: usize = 6;

/// The exchange of a run.
#[derive(Debug, Clone)]
pub struct ExchangeFolder {
    run: PathBuf,
}

impl ExchangeFolder {
    /// That of the run in this folder.
    #[must_use]
    pub fn new(run: &Path) -> Self {
        Self { run: run.to_path_buf() }
    }

    /// The number of the file that asks for these points, written now if it was not there; and the id of its first point.
    fn ask(&self, takes: &[String], inputs: &Points) -> Result<(u32, u64), StoreError> {
        let folder = self.run.join(ASKED);
        fs::create_dir_all(&folder).map_err(StoreError::io("create the folder", &folder))?;
        let (mut number, mut first) = (1, 1);
        if let Some(last) = last_number(&folder)? {
            let path = folder.join(name(last));
            let text = fs::read_to_string(&path).map_err(StoreError::io("read", &path))?;
            let ids: Vec<u64> = text.lines().skip(1).filter_map(|line| line.split(',').next()?.parse().ok()).collect();
            let begins = ids.first().copied().unwrap_or(1);
            if text.into_bytes() == table(takes, inputs, begins)? {
                return Ok((last, begins));
            }
            (number, first) = (last + 1, ids.last().copied().unwrap_or(0) + 1);
        }
        let bytes = table(takes, inputs, first)?;
        write_atomically(&folder.join(name(number)), |file| file.write_all(&bytes))?;
        Ok((number, first))
    }
}

impl Post for ExchangeFolder {
    fn deliver(&self, takes: &[String], returns: &[String], inputs: &Points) -> Result<Points, ModelError> {
        let failed = |error: StoreError| {
            let reason = std::error::Error::source(&error).map_or(String::new(), |source| format!(": {source}"));
            ModelError::Exchange(format!("{error}{reason}"))
        };
        let (number, first) = self.ask(takes, inputs).map_err(failed)?;
        let folder = self.run.join(ANSWERED);
        fs::create_dir_all(&folder).map_err(StoreError::io("create the folder", &folder)).map_err(failed)?;
        let path = folder.join(name(number));
        let asked = self.run.join(ASKED).join(name(number));
        let n = inputs.len();
        let waiting = |missing: &str| ModelError::Waiting {
            points: n,
            text: format!(
                "{n} points are asked in\n  {}\n{missing}Put the answers into\n  {}\nwith the columns {ID},{} (rows and columns in any order).\n\
                 A blank cell or nan says that a point failed.",
                asked.display(),
                path.display(),
                returns.join(",")
            ),
        };
        let bytes = match fs::read(&path) {
            Ok(bytes) => bytes,
            Err(error) if error.kind() == io::ErrorKind::NotFound => return Err(waiting("")),
            Err(error) => return Err(failed(StoreError::io("read", &path)(error))),
        };
        let answers = read(&bytes, returns, first, n).map_err(|(line, reason)| {
            ModelError::Exchange(format!(
                "{}: line {line}: {reason}. Mend it, then go on with --resume",
                path.display()
            ))
        })?;
        let missing: Vec<u64> = (0..n as u64).map(|i| first + i).filter(|id| !answers.contains_key(id)).collect();
        if !missing.is_empty() {
            let listed: Vec<String> = missing.iter().take(LISTED).map(ToString::to_string).collect();
            let more = if missing.len() > LISTED { ", ..." } else { "" };
            let text = format!("{} of them have no row yet (id {}{more}).\n", missing.len(), listed.join(", "));
            return Err(waiting(&text));
        }
        let rows: Vec<f64> = answers.into_values().flatten().collect();
        Ok(Points::from_rows(returns.len(), &rows))
    }
}

fn name(number: u32) -> String {
    format!("{number:04}.csv")
}

fn last_number(folder: &Path) -> Result<Option<u32>, StoreError> {
    let mut last = None;
    for entry in fs::read_dir(folder).map_err(StoreError::io("read", folder))? {
        let entry = entry.map_err(StoreError::io("read", folder))?.file_name();
        let number = entry.to_str().and_then(|name| name.strip_suffix(".csv")).and_then(|stem| stem.parse().ok());
        last = last.max(number);
    }
    Ok(last)
}

/// A row a point, its id first.
fn table(takes: &[String], inputs: &Points, first: u64) -> Result<Vec<u8>, StoreError> {
    let mut out = csv::Writer::from_writer(Vec::new());
    let header = std::iter::once(ID).chain(takes.iter().map(String::as_str));
    let mut written = out.write_record(header);
    for i in 0..inputs.len() {
        let id = (first + i as u64).to_string();
        let row = std::iter::once(id).chain((0..inputs.dim()).map(|j| decimal(inputs.get(i, j))));
        written = written.and_then(|()| out.write_record(row));
    }
    let io = |error: String| StoreError::io("write", Path::new(ASKED))(io::Error::other(error));
    written.map_err(|error| io(error.to_string()))?;
    out.into_inner().map_err(|error| io(error.to_string()))
}

/// The line of a mistake, and what it is.
type Wrong = (u64, String);

/// Answers by their ids.
fn read(bytes: &[u8], returns: &[String], first: u64, n: usize) -> Result<BTreeMap<u64, Vec<f64>>, Wrong> {
    let bytes = bytes.strip_prefix("\u{feff}".as_bytes()).unwrap_or(bytes);
    let mut table = csv::ReaderBuilder::new().trim(csv::Trim::All).flexible(true).from_reader(bytes);
    let headers: Vec<String> = match table.headers() {
        Ok(headers) => headers.iter().map(str::to_owned).collect(),
        Err(error) => return Err((1, format!("the header cannot be read ({error})"))),
    };
    let column = |wanted: &str| {
        let found: Vec<usize> = (0..headers.len()).filter(|&k| headers[k] == wanted).collect();
        match found.as_slice() {
            [one] => Ok(*one),
            [] => Err((1, format!("there is no column `{wanted}`; the columns are {}", headers.join(", ")))),
            _ => Err((1, format!("there are several columns `{wanted}`"))),
        }
    };
    let id_column = column(ID)?;
    let columns: Vec<usize> = returns.iter().map(|name| column(name)).collect::<Result<_, _>>()?;
    let mut answers = BTreeMap::new();
    let mut lines: BTreeMap<u64, u64> = BTreeMap::new();
    for record in table.records() {
        let record = record.map_err(|error| {
            let line = error.position().map_or(0, csv::Position::line);
            (line, format!("it cannot be read ({error})"))
        })?;
        let line = record.position().map_or(0, csv::Position::line);
        if record.len() != headers.len() {
            return Err((line, format!("{} cells where the header has {}", record.len(), headers.len())));
        }
        let text = &record[id_column];
        let last = first + n as u64 - 1;
        let id = text.parse().ok().filter(|id| (first..=last).contains(id));
        let Some(id) = id else {
            return Err((line, format!("the id \"{text}\" was not asked: the ids of this file are {first} to {last}")));
        };
        if let Some(before) = lines.insert(id, line) {
            return Err((line, format!("the id {id} stands in line {before} already")));
        }
        let mut values = Vec::new();
        for (&at, name) in columns.iter().zip(returns) {
            let cell = &record[at];
            let number = if cell.is_empty() { Some(f64::NAN) } else { cell.parse::<f64>().ok() };
            let Some(number) = number else {
                return Err((
                    line,
                    format!("\"{cell}\" in the column `{name}` is no number (a blank cell or nan: failed)"),
                ));
            };
            values.push(number);
        }
        answers.insert(id, values);
    }
    Ok(answers)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn names(names: &[&str]) -> Vec<String> {
        names.iter().map(|&name| name.to_owned()).collect()
    }

    #[test]
    fn points_go_out_and_answers_come_back() {
        let run = tempfile::tempdir().unwrap();
        let post = ExchangeFolder::new(run.path());
        let (takes, returns) = (names(&["inflow", "gate"]), names(&["level", "flow"]));
        let points = Points::from_rows(2, &[0.1, 2.0, 0.3, 4.0]);
        let asks = |points: &Points| post.deliver(&takes, &returns, points);
        assert!(matches!(asks(&points), Err(ModelError::Waiting { points: 2, .. })));
        let asked = fs::read_to_string(run.path().join("asked/0001.csv")).unwrap();
        assert_eq!(asked, "id,inflow,gate\n1,0.1,2\n2,0.3,4\n");
        assert!(matches!(asks(&points), Err(ModelError::Waiting { .. })));
        assert!(!run.path().join("asked/0002.csv").exists());
        let answer = |text: &str| fs::write(run.path().join("answered/0001.csv"), text).unwrap();
        answer("id,flow,level\n2,7,8\n");
        let Err(ModelError::Waiting { text, .. }) = asks(&points) else { panic!("half an answer is none") };
        assert!(text.contains("1 of them have no row yet (id 1)"), "{text}");
        answer("flow,id,level\n7,2,8\n,1, nan \n");
        let answers = asks(&points).unwrap();
        assert!(answers.get(0, 0).is_nan() && answers.get(0, 1).is_nan());
        assert_eq!(answers.point(1), [8.0, 7.0]);
        let more = Points::from_rows(2, &[5.0, 6.0]);
        assert!(matches!(asks(&more), Err(ModelError::Waiting { .. })));
        assert_eq!(fs::read_to_string(run.path().join("asked/0002.csv")).unwrap(), "id,inflow,gate\n3,5,6\n");
    }

    #[test]
    fn mistakes_are_told_with_their_line() {
        for (text, line, part) in [
            ("id,level\n1,2\n9,3\n", 3, "\"9\" was not asked: the ids of this file are 1 to 2"),
            ("id,level\n1,2\n1,3\n", 3, "the id 1 stands in line 2 already"),
            ("id,peak\n1,2\n", 1, "there is no column `level`; the columns are id, peak"),
            ("number,level\n1,2\n", 1, "there is no column `id`"),
            ("id,level,level\n1,2,3\n", 1, "several columns `level`"),
            ("id,level\n1,two\n", 2, "\"two\" in the column `level` is no number"),
            ("id,level\n1\n", 2, "1 cells where the header has 2"),
        ] {
            let (found, reason) = read(text.as_bytes(), &names(&["level"]), 1, 2).unwrap_err();
            assert!(found == line && reason.contains(part), "{text:?}: line {found}: {reason}");
        }
    }
}
