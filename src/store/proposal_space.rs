//! The space of a proposal out of its file alone: enough to draw from it and to evaluate it in natural units.

use super::StoreError;
use super::proposal::ProposalFile;
use super::proposal::VariableEntry;
use crate::distribution::Distribution;
use crate::model::Closure;
use crate::problem::Aim;
use crate::problem::CoordinateChoice;
use crate::problem::CorrelationKind;
use crate::problem::Problem;
use crate::problem::TuningKeys;
use crate::problem::Variable;
use serde_json::Value;
use std::path::Path;

impl ProposalFile {
    /// A problem with this proposal's variables, coordinates and correlations, and no target.
    ///
    /// # Errors
    /// [`StoreError::Json`], with `path` as the file's name, where a variable's distribution cannot be made of the file alone
    /// (its parameters depend on other variables), or is none.
    pub fn space(&self, path: &Path) -> Result<Problem, StoreError> {
        let wrong = |at: String, reason: String| StoreError::Json { path: path.to_path_buf(), at, reason };
        let each = self.variables.iter().enumerate();
        let made = each.map(|(j, entry)| variable(entry).map_err(|reason| wrong(format!("variables[{j}]"), reason)));
        let variables = made.collect::<Result<Vec<_>, _>>()?;
        let d = variables.len();
        let nothing = Box::new(Closure::new(d, |_: &[f64]| 0.0));
        let keys = TuningKeys { coordinates: Some(CoordinateChoice::StandardNormal), ..TuningKeys::default() };
        let mut problem = Problem::from_model(&self.title, variables, Aim::Density, nothing)
            .and_then(|problem| problem.with_tuning(&keys))
            .map_err(|error| wrong("variables".to_owned(), error.to_string()))?;
        for (k, entry) in self.correlations.iter().enumerate() {
            let names: Vec<&str> = entry.among.iter().map(String::as_str).collect();
            problem = problem
                .with_correlation(&names, CorrelationKind::Score, &entry.score.concat())
                .map_err(|error| wrong(format!("correlations[{k}]"), error.to_string()))?;
        }
        Ok(problem)
    }

    /// What of this file does not belong to `problem`: nothing where the proposal lives in the problem's own coordinates.
    #[must_use]
    pub fn misfit(&self, problem: &Problem) -> Option<String> {
        let own = Self::new(problem, &self.mixture().ok()?, self.made_by.clone());
        if self.variables.len() != own.variables.len() {
            return Some(format!("it has {} variables, the problem has {}", self.variables.len(), own.variables.len()));
        }
        let other = self.variables.iter().zip(&own.variables).find(|(a, b)| {
            (&a.name, &a.coordinate, a.lower, a.upper, &a.distribution)
                != (&b.name, &b.coordinate, b.lower, b.upper, &b.distribution)
        });
        if let Some((a, b)) = other {
            return Some(if a.name == b.name {
                format!("its variable {:?} has another coordinate or distribution than the problem's", a.name)
            } else {
                format!("its variable {:?} stands where the problem has {:?}", a.name, b.name)
            });
        }
        (self.correlations != own.correlations).then(|| "its correlations are not those of the problem".to_owned())
    }
}

fn variable(entry: &VariableEntry) -> Result<Variable, String> {
    let (low, high) = (entry.lower.unwrap_or(f64::NEG_INFINITY), entry.upper.unwrap_or(f64::INFINITY));
    let mut variable = match &entry.distribution {
        Some(value) => Variable::random(&entry.name, distribution(value)?),
        None => {
            // Where a search would start plays no part here; it has to lie inside.
            let near = match (low.is_finite(), high.is_finite()) {
                (true, true) => 0.5 * (low + high),
                (true, false) => low + 1.0,
                (false, true) => high - 1.0,
                (false, false) => 0.0,
            };
            Variable::range(
                &entry.name,
                low,
                high,
                near,
                if low.is_finite() && high.is_finite() { 0.25 * (high - low) } else { 1.0 },
            )
        }
    };
    variable.unit.clone_from(&entry.unit);
    Ok(variable)
}

fn distribution(value: &Value) -> Result<Distribution, String> {
    let family = value["family"].as_str().ok_or("its distribution has no family")?;
    let parameters = value["parameters"].as_object().ok_or("its distribution has no parameters")?;
    let mut given: Vec<(&str, f64)> = Vec::new();
    for (name, number) in parameters {
        let number = number.as_f64().ok_or_else(|| {
            format!(
                "{name} of its distribution depends on other variables; name the run folder, whose problem says how"
            )
        })?;
        given.push((name, number));
    }
    let told = |error: crate::distribution::DistributionError| error.to_string();
    let mut made = Distribution::new(family, &given).map_err(told)?;
    if let Some(shift) = value["shift"].as_f64() {
        made = made.shifted(shift).map_err(told)?;
    }
    if let Some(ends) = value["between"].as_array() {
        let end = |k: usize, open: f64| ends.get(k).and_then(Value::as_f64).unwrap_or(open);
        made = made.truncated(end(0, f64::NEG_INFINITY), end(1, f64::INFINITY)).map_err(told)?;
    }
    Ok(made)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::Purpose;
    use crate::proposal::Component;
    use crate::proposal::Mixture;
    use crate::store::MadeBy;

    const GATES: &str = r#"
        title = "Gates"
        [variables]
        load = { distribution = "gumbel", mean = 5.0, sd = 1.0 }
        wear = { distribution = "normal", mean = 1.0, sd = 0.5, between = [0.0, inf] }
        strength = { distribution = "gamma", mean = 9.0, cv = 0.1, shift = 2.0 }
        stuck = { distribution = "binomial", n = 3, p = 0.1 }
        [[correlation]]
        among = ["load", "strength"]
        rank = -0.3
        [target]
        aim = "probability"
        event = "load * (1 + stuck) > strength - wear"
    "#;

    const POND: &str = r#"
        title = "A pond"
        [variables]
        depth = { range = [0.5, inf], near = 2.0, spread = 1.0 }
        level = { range = [-inf, 3.0], near = 2.0, spread = 1.0 }
        share = { range = [0.0, 0.9], near = 0.5, spread = 0.1 }
        slope = { range = [-inf, inf], near = 0.0, spread = 1.0 }
        [target]
        aim = "density"
        log_density = "-(depth - 2)^2 - level^2 - share - slope^2"
    "#;

    /// Natural units, Jacobians and log priors come out of the file as out of the problem.
    #[test]
    fn the_file_alone_is_the_same_space() {
        for text in [GATES, POND] {
            let problem = Problem::parse(text, "a.toml", Path::new(".")).unwrap();
            let d = problem.dim();
            let scale: Vec<f64> = (0..d * d).map(|at| f64::from(u8::from(at / d == at % d))).collect();
            let mixture = Mixture::single(Component::new(vec![0.3; d], &scale, 5.0).unwrap());
            let made_by = MadeBy { program: "p".into(), digests: [].into(), seed: 1, evaluations: 1 };
            let file = ProposalFile::new(&problem, &mixture, made_by);
            assert_eq!(file.misfit(&problem), None);
            let space = file.space(Path::new("proposal.json")).unwrap();
            assert_eq!(file.misfit(&space), None);
            let z = mixture.draw(300, 1, Purpose::Trial, 0).points;
            let (own, other) = (problem.to_natural(&z), space.to_natural(&z));
            for i in 0..z.len() {
                for (a, b) in own.point(i).iter().zip(other.point(i)) {
                    assert!((a - b).abs() <= 1e-13 * a.abs(), "{a} {b}");
                }
            }
            for (a, b) in problem.log_jacobian(&z).iter().zip(space.log_jacobian(&z)) {
                assert!((a - b).abs() <= 1e-11 * a.abs().max(1.0), "{a} {b}");
            }
        }
    }

    #[test]
    fn another_problem_is_told_apart() {
        let [gates, pond] = [GATES, POND].map(|text| Problem::parse(text, "a.toml", Path::new(".")).unwrap());
        let scale: Vec<f64> = (0..16).map(|at| f64::from(u8::from(at % 5 == 0))).collect();
        let mixture = Mixture::single(Component::new(vec![0.0; 4], &scale, 5.0).unwrap());
        let made_by = MadeBy { program: "p".into(), digests: [].into(), seed: 1, evaluations: 1 };
        let file = ProposalFile::new(&gates, &mixture, made_by);
        assert!(file.misfit(&pond).unwrap().contains("\"load\" stands where the problem has \"depth\""));
        let other = Problem::parse(&GATES.replace("sd = 1.0", "sd = 1.1"), "a.toml", Path::new(".")).unwrap();
        assert!(file.misfit(&other).unwrap().contains("\"load\" has another"));
        let other = Problem::parse(&GATES.replace("-0.3", "-0.4"), "a.toml", Path::new(".")).unwrap();
        assert!(file.misfit(&other).unwrap().contains("correlations"));
    }
}
