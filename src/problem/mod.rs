//! Problems: what is integrated, stated in one file or in code.
//!
//! A [`Problem`] is read from a TOML file ([`Problem::read`]) or built from a model in code
//! ([`Problem::from_model`]). It knows its variables, chooses coordinates in which the proposal has an easy life, and
//! answers with log densities, margins or integrands there ([`Problem::evaluate`]), with exact gradients where the
//! target is a formula. Everything is checked when it is read: a `Problem` that exists can be evaluated.
//!
//! The data's way: `statement` (the tables, typed and placed) -> `data`, `columns` (CSV files) -> `expand` (members of
//! `each`) -> `programs` (formulas) -> `natures` (distributions) -> `start` (coordinates) -> `space` (maps and
//! Jacobians) -> `evaluate`. What is wrong is kept in `faults` on the way and shown together.

mod angles;
mod columns;
mod coordinates;
mod correlation;
mod correlation_table;
mod data;
mod digest;
mod evaluate;
mod expand;
mod faults;
mod foreign;
mod from_model;
mod given;
mod memo;
mod names;
mod natures;
mod outside;
mod outside_table;
mod outside_text;
mod programs;
mod read;
mod slips;
mod space;
mod start;
mod statement;
mod syntax;
mod table;
mod target;
mod text;
mod text_value;
mod tuning;
mod variable;
mod variables_table;
mod written;
mod written_numbers;

pub use angles::Degrees;
pub use correlation::Correlation;
pub use correlation::CorrelationError;
pub use correlation::Mendable;
pub use correlation_table::CorrelationKind;
pub use data::Rows;
pub use evaluate::EvaluateError;
pub use evaluate::Evaluation;
pub use faults::Fault;
pub use faults::ProblemErrors;
pub use outside::ModelMeans;
pub use read::DataFile;
pub use start::Start;
pub use target::Aim;
pub use target::Failed;
pub use tuning::CoordinateChoice;
pub use tuning::Family;
pub use tuning::Method;
pub use tuning::Structure;
pub use tuning::TuningKeys;
pub use variable::Coordinate;
pub use variable::Member;
pub use variable::Nature;
pub use variable::Variable;
pub use written::Written;

use crate::expression::Program;
use crate::model::Model;
use crate::numeric::Points;

use columns::DataTable;
use outside::Outside;
use programs::FormulaTarget;
use space::Space;
use statement::Statement;

/// An integral, ready to be evaluated: variables, coordinates, aim and target.
///
/// ```
/// use evenpoise::numeric::Points;
/// use evenpoise::problem::{Aim, Problem};
/// let text = r#"
/// title = "Depth of a pond, measured twice"
/// [variables]
/// depth = { distribution = "normal", mean = 2.0, sd = 1.0, unit = "m" }
/// [target]
/// aim = "density"
/// log_factor = "log_density_normal(2.3, depth, 0.2) + log_density_normal(2.5, depth, 0.2)"
/// "#;
/// let problem = Problem::parse(text, "pond.toml", std::path::Path::new(".")).unwrap();
/// assert_eq!((problem.dim(), problem.aim()), (1, Aim::Density));
/// let answer = problem.evaluate(&Points::from_rows(1, &[2.4])).unwrap();
/// // SciPy 1.17.1: norm.logpdf(2.4, 2, 1) + norm.logpdf(2.3, 2.4, 0.2) + norm.logpdf(2.5, 2.4, 0.2)
/// assert!((answer.log_density[0] - 0.132_060_225_254_182_15).abs() < 1e-14);
/// ```
pub struct Problem {
    title: String,
    variables: Vec<Variable>,
    correlations: Vec<Correlation>,
    aim: Aim,
    failed: Option<Failed>,
    space: Space,
    start: Start,
    target: Target,
    /// A model of the problem file that is no formula; the formulas of the target know its values.
    outside: Option<Outside>,
    estimates: Estimates,
    estimate_names: Vec<String>,
    tuning: TuningKeys,
    data: Vec<DataTable>,
    /// None for a problem that was built in code.
    statement: Option<Statement>,
}

/// What answers for the target.
enum Target {
    Formulas(Box<FormulaTarget>),
    Model(Box<dyn Model>),
}

/// What answers for the estimates.
enum Estimates {
    None,
    Formulas(Box<Program>),
    Model(Box<dyn Model>),
}

impl Problem {
    /// The title.
    #[must_use]
    pub fn title(&self) -> &str {
        &self.title
    }

    /// Number of coordinates: one for every variable, members of an `each` included.
    #[must_use]
    pub fn dim(&self) -> usize {
        self.variables.len()
    }

    /// The variables in the order of coordinates.
    #[must_use]
    pub fn variables(&self) -> &[Variable] {
        &self.variables
    }

    /// What is asked of the integral.
    #[must_use]
    pub fn aim(&self) -> Aim {
        self.aim
    }

    /// How failed model runs count in a probability, where the problem says.
    #[must_use]
    pub fn failed(&self) -> Option<Failed> {
        self.failed
    }

    /// What the problem says about its tuning.
    #[must_use]
    pub fn tuning(&self) -> &TuningKeys {
        &self.tuning
    }

    /// Names of the estimates, one for every column of [`Problem::estimates`].
    #[must_use]
    pub fn estimate_names(&self) -> Vec<String> {
        self.estimate_names.clone()
    }

    /// Where the search starts, in coordinates.
    #[must_use]
    pub fn start(&self) -> &Start {
        &self.start
    }

    /// Groups of correlated variables.
    #[must_use]
    pub fn correlations(&self) -> &[Correlation] {
        &self.correlations
    }

    /// Natural units of points in coordinates.
    ///
    /// ```
    /// use evenpoise::model::Closure;
    /// use evenpoise::numeric::Points;
    /// use evenpoise::problem::{Aim, Problem, Variable};
    /// let depth = Variable::range("depth", 0.0, f64::INFINITY, 1.0, 1.0);
    /// let problem = Problem::from_model("A pond", vec![depth], Aim::Density, Box::new(Closure::new(1, |x| -x[0]))).unwrap();
    /// let z = Points::from_rows(1, &[0.0]);
    /// assert_eq!(problem.to_natural(&z).point(0), vec![1.0]);
    /// assert_eq!(problem.to_coordinates(&problem.to_natural(&z)).point(0), vec![0.0]);
    /// ```
    #[must_use]
    pub fn to_natural(&self, coordinates: &Points) -> Points {
        self.space.to_natural(coordinates)
    }

    /// Coordinates of points in natural units; infinite or NaN for a value on an end of its support or outside.
    ///
    /// A discrete value has a whole interval of scores; the one given is inside it.
    #[must_use]
    pub fn to_coordinates(&self, natural: &Points) -> Points {
        self.space.to_coordinates(natural)
    }

    /// `ln |dx/dz|` of points in coordinates `z`: a log density in natural units is the one in coordinates minus this.
    ///
    /// For a discrete variable it is the density of its score over its mass, so that weights agree on both sides.
    #[must_use]
    pub fn log_jacobian(&self, coordinates: &Points) -> Vec<f64> {
        self.space.log_jacobian(coordinates, &self.space.to_natural(coordinates))
    }

    /// Names of variables that neither target nor estimates nor other variables use.
    ///
    /// Such a variable only dilutes the search. Empty for a problem that was built in code, whose model is not known.
    #[must_use]
    pub fn unused_variables(&self) -> Vec<&str> {
        let Target::Formulas(target) = &self.target else { return Vec::new() };
        let used = |i: usize| {
            target.program.uses_input(i)
                || self.outside.as_ref().is_some_and(|outside| outside.uses_variable(i))
                || matches!(&self.estimates, Estimates::Formulas(program) if program.uses_input(i))
                || self.space.groups.iter().any(|group| group.program.uses_input(i))
        };
        (0..self.dim()).filter(|&i| !used(i)).map(|i| self.variables[i].name.as_str()).collect()
    }
}

impl std::fmt::Debug for Problem {
    fn fmt(&self, formatter: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        formatter
            .debug_struct("Problem")
            .field("title", &self.title)
            .field("aim", &self.aim)
            .field("variables", &self.variables)
            .finish_non_exhaustive()
    }
}
