//! Angles in degrees that reach `sin`, `cos` or `tan`, which take radians.
//!
//! A look at the texts only: which names reach the argument of such a function, through formulas as well, and whether a
//! factor that makes radians of degrees (`pi`, 180, 57.29..., 0.01745...) stands on the way.

use super::Problem;
use super::columns::Cells;
use super::names::Piece;
use super::names::pieces;
use super::statement::Statement;
use super::variables_table::ParameterSpec;
use crate::expression::call_places;
use crate::numeric::Points;

/// A name that reaches a function of angles, and is probably in degrees.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Degrees {
    /// `sin`, `cos` or `tan`.
    pub function: String,
    /// The variable or data column.
    pub name: String,
    /// Whether its unit or its name says degrees; else its size alone speaks for it.
    pub said: bool,
}

/// Functions of angles.
const OF_ANGLES: [&str; 3] = ["sin", "cos", "tan"];
/// What stands in a text where degrees become radians.
const FACTORS: [&str; 4] = ["180", "0.0174", ".01745", "57.2"];

/// What reaches an argument.
#[derive(Default)]
struct Reached {
    names: Vec<String>,
    formulas: Vec<String>,
    converted: bool,
}

impl Reached {
    fn add(&mut self, statement: &Statement, text: &str) {
        self.converted |= FACTORS.iter().any(|factor| text.contains(factor));
        for piece in pieces(text) {
            let Piece::Name(name) = piece else { continue };
            let formula = statement.formulas.iter().find(|formula| formula.name == name);
            let constant = statement.constants.iter().find(|(constant, _, _)| constant == name);
            let factor = std::f64::consts::PI / 180.0;
            let is_factor = |value: f64| [factor, 1.0 / factor, 180.0].iter().any(|f| (value / f - 1.0).abs() < 1e-3);
            self.converted |= name == "pi" || constant.is_some_and(|(_, value, _)| is_factor(*value));
            match formula {
                Some(formula) if !self.formulas.iter().any(|known| known == name) => {
                    self.formulas.push(name.to_owned());
                    self.add(statement, &formula.formula.value);
                }
                Some(_) => {}
                None if !self.names.iter().any(|known| known == name) => self.names.push(name.to_owned()),
                None => {}
            }
        }
    }
}

impl Problem {
    /// Names that reach `sin`, `cos` or `tan` and are probably in degrees: by a unit (`deg`, `degrees`, `°`) or a name
    /// (`..._deg`) that says so, or because they are the argument itself and most of their values at `natural`, points
    /// in natural units, are beyond `2 pi`. Empty for a problem that was built in code.
    #[must_use]
    pub fn degrees(&self, natural: &Points) -> Vec<Degrees> {
        let Some(statement) = &self.statement else { return Vec::new() };
        let mut found: Vec<Degrees> = Vec::new();
        for text in texts(statement) {
            for call in call_places(text, &OF_ANGLES) {
                let argument = &text[call.argument.clone()];
                let mut reached = Reached::default();
                reached.add(statement, argument);
                if reached.converted {
                    continue;
                }
                let alone = argument.trim_matches(['(', ')', ' ', '-']);
                for name in reached.names {
                    let said = self.says_degrees(&name);
                    let known = found.iter().any(|other| other.name == name);
                    if !known && (said || (alone == name && self.is_beyond_a_turn(&name, natural))) {
                        found.push(Degrees { function: call.function.clone(), name, said });
                    }
                }
            }
        }
        found
    }

    /// Whether the unit of a variable, or the name or header of it or of a column, says degrees.
    fn says_degrees(&self, name: &str) -> bool {
        let words = ["deg", "degs", "deg.", "degree", "degrees", "°", "arc degrees", "degrees of arc"];
        let is_word = |unit: &str| words.contains(&unit.trim().to_lowercase().as_str());
        let ends = |name: &str| {
            let name = name.to_lowercase();
            name.ends_with("_deg") || name.ends_with("_degrees") || name.ends_with("_degree")
        };
        let headers = |header: &str| {
            let inner = header.split_once('(').and_then(|(_, rest)| rest.split_once(')'));
            inner.is_some_and(|(unit, _)| is_word(unit))
        };
        let columns = self.data.iter().flat_map(|table| &table.columns);
        let mut own = columns.filter(|column| column.name == name);
        let of_name = |variable: &&super::Variable| {
            variable.name == name || variable.member.as_ref().is_some_and(|member| member.group == name)
        };
        match self.variables.iter().find(of_name) {
            Some(variable) => ends(name) || variable.unit.as_deref().is_some_and(is_word),
            None => own.any(|column| ends(name) || headers(&column.header)),
        }
    }

    fn is_beyond_a_turn(&self, name: &str, natural: &Points) -> bool {
        let turn = std::f64::consts::TAU;
        let mut sizes: Vec<f64> = match self.variables.iter().position(|variable| variable.name == name) {
            Some(j) => (0..natural.len()).map(|i| natural.get(i, j).abs()).collect(),
            None => {
                let columns = self.data.iter().flat_map(|table| &table.columns);
                let numbers = columns.filter(|column| column.name == name).map(|column| match &column.cells {
                    Cells::Numbers(numbers, _) => numbers.iter().map(|x| x.abs()).collect(),
                    Cells::Texts(_) => Vec::new(),
                });
                numbers.flat_map(|numbers: Vec<f64>| numbers).filter(|x| !x.is_nan()).collect()
            }
        };
        sizes.sort_by(f64::total_cmp);
        sizes.get(sizes.len() / 2).is_some_and(|middle| *middle > turn)
    }
}

/// Every formula of a problem.
fn texts(statement: &Statement) -> impl Iterator<Item = &str> {
    let named = statement.formulas.iter().chain(&statement.estimates).map(|formula| formula.formula.value.as_str());
    let target = &statement.target;
    let of_target = std::iter::once(&target.formula).chain(&target.require).map(|text| text.value.as_str());
    let parameters = statement.variables.iter().flat_map(|spec| spec.nature.parameters());
    let of_parameters = parameters.filter_map(|parameter| match &parameter.value {
        ParameterSpec::Formula(text) => Some(text.value.as_str()),
        ParameterSpec::Number(_) => None,
    });
    named.chain(of_target).chain(of_parameters)
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::path::Path;

    fn found(unit: &str, mean: f64, factor: &str) -> Vec<(String, bool)> {
        let text = format!(
            "title = \"A sloping pipe\"\n[constants]\nto_radians = 0.0174533\n[variables]\n\
             slope = {{ distribution = \"normal\", mean = {mean:?}, sd = 0.1, unit = \"{unit}\" }}\n[formulas]\n\
             angle = \"{factor}\"\n[target]\naim = \"density\"\nlog_factor = \"-cos(angle)^2 + to_radians\"\n"
        );
        let problem = Problem::parse(&text, "pipe.toml", Path::new(".")).unwrap();
        let natural = problem.to_natural(&Points::from_rows(1, &problem.start().near));
        problem.degrees(&natural).into_iter().map(|degrees| (degrees.name, degrees.said)).collect()
    }

    #[test]
    fn degrees_are_found_through_formulas_unless_they_become_radians() {
        for factor in ["slope", "slope + 0.1", "2*slope"] {
            assert_eq!(found("deg", 1.0, factor), [("slope".to_owned(), true)], "{factor}");
        }
        for factor in ["slope*pi/180", "slope*to_radians", "slope/57.29578", "0.3"] {
            let factor = if factor == "0.3" { "0.3 + 0*slope*pi".to_owned() } else { factor.to_owned() };
            assert_eq!(found("°", 30.0, &factor), [], "{factor}");
        }
        assert_eq!(found("°C", 1.0, "slope"), []);
    }

    #[test]
    fn size_alone_speaks_where_the_name_is_the_argument() {
        let text = |mean: f64, argument: &str| {
            format!(
                "title = \"A pipe\"\n[variables]\nslope = {{ distribution = \"normal\", mean = {mean:?}, sd = 0.1 }}\n\
                 [target]\naim = \"density\"\nlog_factor = \"-sin({argument})^2\"\n"
            )
        };
        for (mean, argument, want) in [(30.0, "slope", 1), (30.0, "-slope", 1), (30.0, "4*slope", 0), (1.0, "slope", 0)]
        {
            let problem = Problem::parse(&text(mean, argument), "pipe.toml", Path::new(".")).unwrap();
            let natural = problem.to_natural(&Points::from_rows(1, &problem.start().near));
            let found = problem.degrees(&natural);
            assert_eq!(found.len(), want, "{mean} {argument}");
            assert!(found.iter().all(|degrees| !degrees.said));
        }
    }
}
