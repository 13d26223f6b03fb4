//! Problems built in code, and problems changed after they were built.

use super::Aim;
use super::CorrelationKind;
use super::Estimates;
use super::Problem;
use super::ProblemErrors;
use super::Target;
use super::TuningKeys;
use super::Variable;
use super::correlation;
use super::start;
use super::variable::Nature;
use crate::model::Model;

impl Problem {
    /// A problem whose target is a model in code, asked in natural units.
    ///
    /// The model takes one value a variable, in order, and answers with one number. For the aim density that is the
    /// log factor: the log densities of the variables that have a distribution are added to it (with ranges alone it is
    /// the log target). For a probability it is the margin, negative or zero inside the event; for an expectation the
    /// integrand. NaN says that the evaluation failed.
    ///
    /// # Errors
    /// A model of other shapes, names that are equal or empty, a range without a place to start, an aim that needs
    /// distributions.
    ///
    /// ```
    /// use evenpoise::distribution::Distribution;
    /// use evenpoise::model::Closure;
    /// use evenpoise::numeric::Points;
    /// use evenpoise::problem::{Aim, Problem, Variable};
    /// let load = Variable::random("load", Distribution::new("normal", &[("mean", 5.0), ("sd", 1.0)]).unwrap());
    /// let strength = Variable::random("strength", Distribution::new("normal", &[("mean", 9.0), ("sd", 1.0)]).unwrap());
    /// let margin = Closure::new(2, |x| x[1] - x[0]);
    /// let problem =
    ///     Problem::from_model("A sluice gate", vec![load, strength], Aim::Probability, Box::new(margin)).unwrap();
    /// let answer = problem.evaluate(&Points::from_rows(2, &[0.0, 0.0, 3.0, -2.0])).unwrap();
    /// assert_eq!(answer.value, vec![4.0, -1.0]);
    /// assert_eq!(answer.hit, vec![false, true]);
    /// ```
    pub fn from_model(
        title: &str,
        variables: Vec<Variable>,
        aim: Aim,
        model: Box<dyn Model>,
    ) -> Result<Self, ProblemErrors> {
        check(&variables, model.as_ref())?;
        let mut variables = variables;
        let tuning = TuningKeys::default();
        let (space, start) = start::place(&mut variables, &[], &[], aim, None).map_err(|errors| of_code(&errors))?;
        Ok(Self {
            title: title.to_owned(),
            variables,
            correlations: Vec::new(),
            aim,
            failed: None,
            space,
            start,
            target: Target::Model(model),
            outside: None,
            estimates: Estimates::None,
            estimate_names: Vec::new(),
            tuning,
            data: Vec::new(),
            statement: None,
        })
    }

    /// The same problem with estimates that a model answers: one output for each of `names`.
    ///
    /// # Errors
    /// A model whose inputs are not the variables, or whose outputs are not as many as the names.
    pub fn with_estimates(mut self, names: &[&str], model: Box<dyn Model>) -> Result<Self, ProblemErrors> {
        if model.n_inputs() != self.dim() || model.n_outputs() != names.len() {
            return Err(ProblemErrors::of_code(format!(
                "the estimates' model takes {} values and gives {}; it must take {} and give {}",
                model.n_inputs(),
                model.n_outputs(),
                self.dim(),
                names.len()
            )));
        }
        self.estimate_names = names.iter().map(|&name| name.to_owned()).collect();
        self.estimates = Estimates::Model(model);
        Ok(self)
    }

    /// The same problem with correlated variables: `matrix` is the whole symmetric matrix among `names`, row by row.
    ///
    /// # Errors
    /// As for `[[correlation]]` in a problem file: unknown or unsuitable variables, numbers that cannot be reached.
    pub fn with_correlation(
        mut self,
        names: &[&str],
        kind: CorrelationKind,
        matrix: &[f64],
    ) -> Result<Self, ProblemErrors> {
        let mut members = Vec::new();
        for name in names {
            match self.variables.iter().position(|variable| variable.name == *name) {
                Some(place) if !members.contains(&place) => members.push(place),
                _ => return Err(ProblemErrors::of_code(format!("`{name}` is no variable, or is named twice"))),
            }
        }
        if matrix.len() != members.len() * members.len() {
            let message =
                format!("{} correlations for {} variables; give the whole matrix", matrix.len(), members.len());
            return Err(ProblemErrors::of_code(message));
        }
        let taken = self.correlations.iter().flat_map(|known| &known.members).find(|place| members.contains(place));
        if let Some(&place) = taken {
            let message = format!("`{}` is correlated already; give one matrix for all", self.variables[place].name);
            return Err(ProblemErrors::of_code(message));
        }
        let found = correlation::of_matrix(&self.variables, members, kind, matrix).map_err(|error| {
            let (message, help) = error.explained();
            ProblemErrors::of_code(format!("{message}; {help}"))
        })?;
        self.correlations.push(found);
        self.placed()
    }

    /// The same problem with these keys of `[tuning]` in place of its own, where they are set.
    ///
    /// # Errors
    /// Coordinates that the variables or the aim do not allow.
    pub fn with_tuning(mut self, over: &TuningKeys) -> Result<Self, ProblemErrors> {
        self.tuning = self.tuning.overridden_by(over);
        self.placed()
    }

    /// Chooses the coordinates anew.
    fn placed(mut self) -> Result<Self, ProblemErrors> {
        let groups = std::mem::take(&mut self.space.groups);
        let choice = self.tuning.coordinates;
        let (space, start) = start::place(&mut self.variables, &groups, &self.correlations, self.aim, choice)
            .map_err(|errors| of_code(&errors))?;
        self.space = space;
        self.start = start;
        Ok(self)
    }
}

fn of_code(errors: &[start::Misplaced]) -> ProblemErrors {
    let texts: Vec<String> = errors.iter().map(|error| format!("{error}; {}", error.help())).collect();
    ProblemErrors::of_code(texts.join("\n"))
}

fn check(variables: &[Variable], model: &dyn Model) -> Result<(), ProblemErrors> {
    let refuse = |message: String| Err(ProblemErrors::of_code(message));
    if variables.is_empty() {
        return refuse("a problem needs at least one variable".into());
    }
    if model.n_inputs() != variables.len() || model.n_outputs() != 1 {
        return refuse(format!(
            "the model takes {} values and gives {}; it must take {}, one a variable, and give 1",
            model.n_inputs(),
            model.n_outputs(),
            variables.len()
        ));
    }
    for (k, variable) in variables.iter().enumerate() {
        if variable.name.is_empty() || variables[..k].iter().any(|other| other.name == variable.name) {
            return refuse(format!("variable {} needs a name of its own, and is called `{}`", k + 1, variable.name));
        }
        match variable.nature {
            Nature::Range { low, high } if low.is_nan() || high.is_nan() || low >= high => {
                return refuse(format!("the range of `{}` is empty: [{low:?}, {high:?}]", variable.name));
            }
            Nature::Dependent { .. } => {
                return refuse(format!(
                    "`{}` depends on other variables, which only a problem file can state",
                    variable.name
                ));
            }
            _ => {}
        }
    }
    Ok(())
}
