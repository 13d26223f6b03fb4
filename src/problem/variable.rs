//! A variable of a problem: what it is, how it is shown, and the coordinate that the proposal sees.

use crate::distribution::Distribution;

/// What a variable is, before the target speaks.
#[derive(Debug, Clone, PartialEq)]
pub enum Nature {
    /// A flat, improper measure on an interval; an end may be infinite.
    Range {
        /// Low end.
        low: f64,
        /// High end.
        high: f64,
    },
    /// A random variable with a distribution of its own.
    Random(Distribution),
    /// A random variable whose distribution has parameters that depend on other variables.
    Dependent {
        /// Name of the distribution.
        family: String,
        /// Every parameter with its formula or number, as written.
        parameters: Vec<(String, String)>,
    },
}

/// The coordinate in which the proposal sees a variable `x`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Coordinate {
    /// `z = x`.
    Natural,
    /// `z = ln(x - end)` when `upward`, else `z = ln(end - x)`.
    Log {
        /// End of the half-line.
        end: f64,
        /// Whether the half-line goes up from its end.
        upward: bool,
    },
    /// `z = ln((x - low) / (high - x))`.
    Logit {
        /// Low end of the interval.
        low: f64,
        /// High end of the interval.
        high: f64,
    },
    /// `z = Phi^-1(F(x))`: the standard normal score; of a correlated group, its independent scores.
    StandardNormal,
}

impl Coordinate {
    /// The word for it in files: `natural`, `log`, `logit` or `standard-normal`.
    #[must_use]
    pub fn word(self) -> &'static str {
        match self {
            Self::Natural => "natural",
            Self::Log { .. } => "log",
            Self::Logit { .. } => "logit",
            Self::StandardNormal => "standard-normal",
        }
    }
}

/// Which member of an `each` a variable is.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Member {
    /// The name that the whole has in formulas.
    pub group: String,
    /// Its label, or its position from 1 where members have no labels.
    pub label: String,
    /// Its position, from 0.
    pub position: usize,
}

/// One variable: one coordinate of a point.
///
/// ```
/// use evenpoise::distribution::Distribution;
/// use evenpoise::problem::Variable;
/// let depth = Variable::range("depth", 0.0, f64::INFINITY, 2.0, 1.0).with_unit("m");
/// let inflow = Variable::random("inflow", Distribution::new("lognormal", &[("mean", 3.0), ("cv", 0.4)]).unwrap());
/// assert_eq!((depth.unit.as_deref(), inflow.near), (Some("m"), None));
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Variable {
    /// Its name in files, draws and reports: `effect[Alder]` for a member of an `each`.
    pub name: String,
    /// Its name in figures.
    pub label: Option<String>,
    /// Its unit.
    pub unit: Option<String>,
    /// A remark for the report.
    pub note: Option<String>,
    /// What it is.
    pub nature: Nature,
    /// The coordinate that the proposal sees. A problem settles it; what a new variable carries is not read.
    pub coordinate: Coordinate,
    /// Where to look first, in its own unit, where that is said.
    pub near: Option<f64>,
    /// How wide to look first, in its own unit, where that is said.
    pub spread: Option<f64>,
    /// The group it is a member of, if any.
    pub member: Option<Member>,
}

impl Variable {
    /// A flat measure on `[low, high]` (ends may be infinite), to be looked for about `near`, `spread` wide.
    #[must_use]
    pub fn range(name: &str, low: f64, high: f64, near: f64, spread: f64) -> Self {
        let mut variable = Self::plain(name, Nature::Range { low, high });
        (variable.near, variable.spread) = (Some(near), Some(spread));
        variable
    }

    /// A random variable; the search starts at its median, with its central 95 % as width.
    #[must_use]
    pub fn random(name: &str, distribution: Distribution) -> Self {
        Self::plain(name, Nature::Random(distribution))
    }

    pub(crate) fn plain(name: &str, nature: Nature) -> Self {
        Self {
            name: name.to_owned(),
            label: None,
            unit: None,
            note: None,
            nature,
            coordinate: Coordinate::Natural,
            near: None,
            spread: None,
            member: None,
        }
    }

    /// The same variable with a unit.
    #[must_use]
    pub fn with_unit(mut self, unit: &str) -> Self {
        self.unit = Some(unit.to_owned());
        self
    }

    /// The same variable with a label for figures.
    #[must_use]
    pub fn with_label(mut self, label: &str) -> Self {
        self.label = Some(label.to_owned());
        self
    }

    /// The same variable, looked for about `near`, `spread` wide (its own unit).
    #[must_use]
    pub fn with_start(mut self, near: f64, spread: f64) -> Self {
        (self.near, self.spread) = (Some(near), Some(spread));
        self
    }

    /// Whether its values are whole numbers that are summed over.
    #[must_use]
    pub fn is_discrete(&self) -> bool {
        match &self.nature {
            Nature::Range { .. } => false,
            Nature::Random(distribution) => distribution.is_discrete(),
            Nature::Dependent { family, .. } => {
                ["bernoulli", "binomial", "poisson", "geometric", "integers"].contains(&family.as_str())
            }
        }
    }
}
