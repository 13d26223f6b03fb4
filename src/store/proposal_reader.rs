//! Reads `proposal.json`, and believes nothing that is not checked.

use super::StoreError;
use super::json::At;
use super::json::Misfit;
use super::proposal::ComponentEntry;
use super::proposal::CorrelationEntry;
use super::proposal::MadeBy;
use super::proposal::PROPOSAL_FORMAT;
use super::proposal::ProposalFile;
use super::proposal::ScoresEntry;
use super::proposal::VariableEntry;
use crate::proposal::ProposalError;
use serde_json::Value;
use std::fs;
use std::path::Path;

/// Shares written by other programs may be rounded to ten digits.
const SHARES_WITHIN: f64 = 1e-9;
/// A scale written by other programs may be asymmetric by its rounding.
const SYMMETRIC_WITHIN: f64 = 1e-9;

/// Reads a proposal; a folder means the `proposal.json` in it.
///
/// # Errors
/// [`StoreError::Json`] with the path inside the file and what was expected there: an unknown version, shares that do not
/// sum to one, a scale that is not symmetric positive definite, wrong lengths, numbers that are not finite.
pub fn read_proposal(path: &Path) -> Result<ProposalFile, StoreError> {
    let path = if path.is_dir() { path.join("proposal.json") } else { path.to_path_buf() };
    let text = fs::read_to_string(&path).map_err(StoreError::io("read", &path))?;
    let wrong = |misfit: Misfit| StoreError::Json { path: path.clone(), at: misfit.at, reason: misfit.reason };
    let value: Value = serde_json::from_str(&text).map_err(|error| {
        let at = format!("line {}, column {}", error.line(), error.column());
        let reason = format!("not JSON that can be read ({error})");
        wrong(Misfit { at, reason })
    })?;
    proposal(&At::root(&value)).map_err(wrong)
}

fn proposal(root: &At) -> Result<ProposalFile, Misfit> {
    let format = root.key("format")?;
    if format.text()? != PROPOSAL_FORMAT {
        return Err(format.wrong(format!("is {:?}; this program reads {PROPOSAL_FORMAT:?}", format.text()?)));
    }
    let variables = root.key("variables")?.items()?.iter().map(variable).collect::<Result<Vec<_>, _>>()?;
    let d = variables.len();
    if d == 0 {
        return Err(root.key("variables")?.wrong("is empty; expected at least one variable"));
    }
    let components = components(&root.key("components")?, d)?;
    let correlations = match root.maybe("correlations") {
        Some(list) => list.items()?.iter().map(correlation).collect::<Result<_, _>>()?,
        None => Vec::new(),
    };
    Ok(ProposalFile {
        format: PROPOSAL_FORMAT.to_owned(),
        title: root.key("title")?.text()?.to_owned(),
        variables,
        correlations,
        components,
        scores: root.maybe("scores").map(|at| scores(&at)).transpose()?,
        verdict: root.maybe("verdict").map(|at| at.text().map(str::to_owned)).transpose()?,
        made_by: made_by(&root.key("made_by")?)?,
    })
}

fn variable(at: &At) -> Result<VariableEntry, Misfit> {
    let coordinate = at.key("coordinate")?;
    let (lower, upper) = (optional_number(at, "lower")?, optional_number(at, "upper")?);
    let distribution = at.maybe("distribution").map(|value| value.raw().clone());
    let complete = match coordinate.text()? {
        "natural" => true,
        "log" => lower.is_some() != upper.is_some(),
        "logit" => lower.zip(upper).is_some_and(|(lower, upper)| lower < upper),
        "standard-normal" => distribution.is_some(),
        other => {
            let known = "natural, log, logit or standard-normal";
            return Err(coordinate.wrong(format!("is {other:?}; expected {known}")));
        }
    };
    if !complete {
        return Err(at.wrong(
            "lacks what its coordinate needs: one of lower and upper for log, lower below upper for logit, distribution for \
             standard-normal",
        ));
    }
    Ok(VariableEntry {
        name: at.key("name")?.text()?.to_owned(),
        unit: at.maybe("unit").map(|unit| unit.text().map(str::to_owned)).transpose()?,
        coordinate: coordinate.text()?.to_owned(),
        lower,
        upper,
        distribution,
    })
}

fn correlation(at: &At) -> Result<CorrelationEntry, Misfit> {
    let names = at.key("among")?.items()?;
    let among = names.iter().map(|name| name.text().map(str::to_owned)).collect::<Result<Vec<_>, _>>()?;
    let score = matrix(&at.key("score")?, among.len())?;
    Ok(CorrelationEntry { among, score })
}

fn components(at: &At, d: usize) -> Result<Vec<ComponentEntry>, Misfit> {
    let read = at.items()?.iter().map(|item| component(item, d)).collect::<Result<Vec<_>, _>>()?;
    let sum: f64 = read.iter().map(|c| c.share).sum();
    if (sum - 1.0).abs() <= SHARES_WITHIN {
        Ok(read)
    } else {
        Err(at.wrong(format!("their shares sum to {sum}; expected one")))
    }
}

fn component(at: &At, d: usize) -> Result<ComponentEntry, Misfit> {
    let share = at.key("share")?;
    if share.number()? <= 0.0 {
        return Err(share.wrong(format!("is {}; expected above zero", share.number()?)));
    }
    let family = at.key("family")?;
    let df = match family.text()? {
        "gaussian" => None,
        "student-t" => {
            let df = at.key("df")?;
            if df.number()? <= 0.0 {
                return Err(df.wrong(format!("is {}; expected above zero", df.number()?)));
            }
            Some(df.number()?)
        }
        other => return Err(family.wrong(format!("is {other:?}; expected gaussian or student-t"))),
    };
    let location = at.key("location")?.items_of(d)?.iter().map(At::number).collect::<Result<Vec<_>, _>>()?;
    let scale = matrix(&at.key("scale")?, d)?;
    let entry = ComponentEntry { share: share.number()?, family: family.text()?.to_owned(), df, location, scale };
    match entry.component() {
        Ok(_) => Ok(entry),
        Err(ProposalError::NotPositiveDefinite { .. }) => Err(at.key("scale")?.wrong("is not positive definite")),
        Err(error) => Err(at.wrong(error.to_string())),
    }
}

/// A symmetric `d × d` matrix.
fn matrix(at: &At, d: usize) -> Result<Vec<Vec<f64>>, Misfit> {
    let row = |row: &At| row.items_of(d)?.iter().map(At::number).collect::<Result<Vec<f64>, Misfit>>();
    let rows = at.items_of(d)?.iter().map(row).collect::<Result<Vec<_>, _>>()?;
    for i in 0..d {
        for j in 0..i {
            let size = (rows[i][i] * rows[j][j]).abs().sqrt();
            if (rows[i][j] - rows[j][i]).abs() > SYMMETRIC_WITHIN * size {
                return Err(
                    at.wrong(format!("is not symmetric: [{i}][{j}] is {} and [{j}][{i}] {}", rows[i][j], rows[j][i]))
                );
            }
        }
    }
    Ok(rows)
}

fn scores(at: &At) -> Result<ScoresEntry, Misfit> {
    let interval = match at.maybe("ess_fraction_interval") {
        Some(pair) => {
            let ends = pair.items_of(2)?;
            Some([ends[0].number()?, ends[1].number()?])
        }
        None => None,
    };
    Ok(ScoresEntry {
        draws: at.key("draws")?.count()?,
        ess_fraction: optional_number(at, "ess_fraction")?,
        ess_fraction_interval: interval,
        weight_variance: optional_number(at, "weight_variance")?,
        perplexity: optional_number(at, "perplexity")?,
        tail_shape: optional_number(at, "tail_shape")?,
        tail_shape_limit: at.key("tail_shape_limit")?.number()?,
        largest_share: optional_number(at, "largest_share")?,
        log_normaliser: optional_number(at, "log_normaliser")?,
        log_normaliser_se: optional_number(at, "log_normaliser_se")?,
    })
}

fn made_by(at: &At) -> Result<MadeBy, Misfit> {
    let digests = at.key("digests")?;
    let entries = digests.raw().as_object().ok_or_else(|| digests.wrong("expected an object of digests"))?;
    let digest = |key: &String| Ok((key.clone(), digests.key(key)?.text()?.to_owned()));
    Ok(MadeBy {
        program: at.key("program")?.text()?.to_owned(),
        digests: entries.keys().map(digest).collect::<Result<_, Misfit>>()?,
        seed: at.key("seed")?.count()?,
        evaluations: at.key("evaluations")?.count()?,
    })
}

fn optional_number(at: &At, name: &str) -> Result<Option<f64>, Misfit> {
    at.maybe(name).map(|number| number.number()).transpose()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::problem::Problem;
    use crate::proposal::Component;
    use crate::proposal::Mixture;
    use crate::weights::LogWeights;
    use crate::weights::score;
    use tempfile::tempdir;

    const POND: &str = r#"
        title = "A pond"
        [variables]
        depth = { distribution = "gamma", shape = 2.0, rate = 0.7, shift = 0.1, unit = "m" }
        level = { range = [-1.0, inf], near = 2.0, spread = 1.0 }
        slope = { range = [-inf, inf], near = 0.0, spread = 1.0 }
        [target]
        aim = "density"
        log_factor = "-depth * level - slope^2"
        [tuning]
        coordinates = "standard-normal"
    "#;

    fn written() -> ProposalFile {
        let problem = Problem::parse(POND, "pond.toml", Path::new(".")).unwrap();
        let scale = [0.1 + 0.2, 0.05, -1.0 / 30.0, 0.05, 1e-7_f64.sqrt(), 1e-6, -1.0 / 30.0, 1e-6, 1e5];
        let heavy =
            Component::new(vec![0.1, 1.0 / 3.0, -7e-300], &[2.0, 0.0, 0.0, 0.0, 1.0, 0.5, 0.0, 0.5, 3.0], 7.3).unwrap();
        let scale: Vec<f64> =
            scale.iter().enumerate().map(|(at, v)| if at % 4 == 0 { v + 100.0 } else { *v }).collect();
        let light = Component::new(vec![1.0, 2.0, 3.0], &scale, f64::INFINITY).unwrap();
        let mixture = Mixture::new(&[1.0, 6.0], vec![heavy, light]).unwrap();
        let made_by = MadeBy {
            program: "evenpoise 0.1.0".to_owned(),
            digests: [("problem".to_owned(), problem.digest())].into(),
            seed: u64::MAX,
            evaluations: 20_000,
        };
        let weights = LogWeights::new((0..4000).map(|i| 1e-3 * f64::from(i % 977)).collect()).unwrap();
        let mut file = ProposalFile::new(&problem, &mixture, made_by);
        file.scores = Some(ScoresEntry::of(&score(&weights, &[])));
        file.verdict = Some("sound".to_owned());
        file
    }

    #[test]
    fn what_is_written_reads_back_to_the_same_bits() {
        let folder = tempdir().unwrap();
        let path = folder.path().join("proposal.json");
        let file = written();
        file.write(&path).unwrap();
        let back = read_proposal(folder.path()).unwrap();
        assert_eq!(back, file);
        let again = folder.path().join("again.json");
        back.write(&again).unwrap();
        assert_eq!(fs::read(&path).unwrap(), fs::read(&again).unwrap());
        assert_eq!(back.mixture().unwrap().len(), 2);
        let text = fs::read_to_string(&path).unwrap();
        let value: Value = serde_json::from_str(&text).unwrap();
        assert_eq!(value["components"][1]["family"], "gaussian");
        assert!(value["components"][1].get("df").is_none());
        assert_eq!(value["variables"][0]["distribution"]["family"], "gamma");
        assert_eq!(value["variables"][0]["distribution"]["shift"], 0.1);
        assert_eq!(
            (&value["variables"][1]["coordinate"], &value["variables"][1]["lower"]),
            (&"log".into(), &(-1.0).into())
        );
    }

    /// Every fault is told with its place.
    #[test]
    fn faults_are_told_with_their_place() {
        let folder = tempdir().unwrap();
        let path = folder.path().join("proposal.json");
        written().write(&path).unwrap();
        let whole: Value = serde_json::from_str(&fs::read_to_string(&path).unwrap()).unwrap();
        for (pointer, value, at, reason) in [
            ("/format", "\"evenpoise-proposal/2\"", "format", "evenpoise-proposal/1"),
            ("/components/0/share", "0.2", "components", "sum to"),
            ("/components/0/share", "-0.2", "components[0].share", "above zero"),
            ("/components/0/scale/1/1", "-4", "components[0].scale", "not positive definite"),
            ("/components/0/scale/1/2", "0.4", "components[0].scale", "not symmetric"),
            ("/components/1/location", "[1, 2]", "components[1].location", "has 2 items; expected 3"),
            ("/components/1/location/2", "null", "components[1].location[2]", "expected a finite number"),
            ("/components/1/scale/0", "[1]", "components[1].scale[0]", "has 1 items; expected 3"),
            ("/components/0/df", "0", "components[0].df", "above zero"),
            ("/components/0/family", "\"cauchy\"", "components[0].family", "student-t"),
            ("/variables/1/lower", "null", "variables[1]", "lacks"),
            ("/variables/2/coordinate", "\"angle\"", "variables[2].coordinate", "natural"),
            ("/scores/draws", "-1", "scores.draws", "whole number"),
            ("/made_by/seed", "null", "made_by.seed", "whole number"),
        ] {
            let mut changed = whole.clone();
            *changed.pointer_mut(pointer).unwrap() = serde_json::from_str(value).unwrap();
            fs::write(&path, changed.to_string()).unwrap();
            match read_proposal(&path).unwrap_err() {
                StoreError::Json { at: found, reason: why, .. } => {
                    assert_eq!(found, at, "{pointer}: {why}");
                    assert!(why.contains(reason), "{pointer}: {why}");
                }
                other => panic!("{other}"),
            }
        }
        for text in ["{\"format\": 1e999}", "{", ""] {
            fs::write(&path, text).unwrap();
            let error = read_proposal(&path).unwrap_err();
            assert!(matches!(&error, StoreError::Json { at, .. } if at.starts_with("line 1, column")), "{error}");
        }
    }
}
