//! The parameters of a variable's distribution as the problem file gives them.

use super::Problem;
use super::variables_table::ParameterSpec;

/// A parameter as it was written.
#[derive(Debug, Clone, PartialEq)]
pub enum Written {
    /// A number.
    Number(f64),
    /// A formula.
    Formula(String),
}

impl Problem {
    /// Parameters of the distribution of variable `j` by the names under which the problem file gives them (`mean` and
    /// `cv`, say, of what is a shape and a rate); empty for a range, and for a problem that was built in code.
    ///
    /// ```
    /// use evenpoise::problem::{Problem, Written};
    /// let text = "title = \"A pond\"\n[variables]\ndepth = { distribution = \"gamma\", mean = 2.0, cv = 0.3 }\n\
    ///             [target]\naim = \"density\"\nlog_factor = \"-depth\"\n";
    /// let problem = Problem::parse(text, "pond.toml", std::path::Path::new(".")).unwrap();
    /// assert_eq!(problem.written_parameters(0)[1], ("cv".to_owned(), Written::Number(0.3)));
    /// ```
    #[must_use]
    pub fn written_parameters(&self, j: usize) -> Vec<(String, Written)> {
        let (Some(statement), Some(variable)) = (&self.statement, self.variables.get(j)) else { return Vec::new() };
        let name = variable.member.as_ref().map_or(&variable.name, |member| &member.group);
        let spec = statement.variables.iter().find(|spec| spec.name == *name);
        let parameters = spec.map_or(&[][..], |spec| spec.nature.parameters());
        let written = parameters.iter().map(|parameter| {
            let value = match &parameter.value {
                ParameterSpec::Number(number) => Written::Number(*number),
                ParameterSpec::Formula(text) => Written::Formula(text.value.clone()),
            };
            (parameter.key.clone(), value)
        });
        written.collect()
    }
}
