//! Coordinates of every variable, the space they make, and where the search starts in it.

use thiserror::Error;

use super::Problem;
use super::correlation::Correlation;
use super::given::GivenGroup;
use super::space::Axis;
use super::space::Bundle;
use super::space::Space;
use super::target::Aim;
use super::tuning::CoordinateChoice;
use super::variable::Coordinate;
use super::variable::Nature;
use super::variable::Variable;
use crate::distribution::Distribution;
use crate::numeric::Points;
use crate::numeric::linear;

/// The 97.5 % point of the standard normal distribution: a normal start has its central 95 % within this many scales.
const CENTRAL_95: f64 = 1.959_963_984_540_054;
/// Widest start in a score that `spread` can ask for.
const WIDEST_SCORE: f64 = 2.5;

/// Where the search starts, in the proposal's coordinates: a centre and a scale (that of a normal start) for each.
#[derive(Debug, Clone, PartialEq)]
pub struct Start {
    /// Centres.
    pub near: Vec<f64>,
    /// Scales, above zero.
    pub spread: Vec<f64>,
}

impl Problem {
    /// Where the search starts with variable `j`, in its own unit: the centre, and the ends of the central 95 %.
    ///
    /// They are those of the variable alone, whatever it is correlated with. Of a variable whose parameters depend on
    /// others they are given those at their centres.
    ///
    /// ```
    /// use evenpoise::problem::Problem;
    /// let text = "title = \"Two\"\n[variables]\na = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n\
    ///             b = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n[[correlation]]\namong = [\"a\", \"b\"]\nscore = 0.9\n\
    ///             [target]\naim = \"probability\"\nevent = \"a + b > 6\"\n";
    /// let problem = Problem::parse(text, "two.toml", std::path::Path::new(".")).unwrap();
    /// let [centre, low, high] = problem.start_of(1);
    /// assert!(centre == 0.0 && (low + 1.96).abs() < 1e-3 && (high - 1.96).abs() < 1e-3);
    /// ```
    ///
    /// # Panics
    /// `j` is not below [`Problem::dim`].
    #[must_use]
    pub fn start_of(&self, j: usize) -> [f64; 3] {
        let Start { near, spread } = &self.start;
        let bundle = self.space.bundles.iter().find(|bundle| bundle.mixed && bundle.members.contains(&j));
        if let (Some(bundle), Axis::Score(distribution)) = (bundle, &self.space.axes[j]) {
            // The score is the sum of independent ones, `u = L e`.
            let d = bundle.members.len();
            let row = bundle.members.iter().position(|&member| member == j).unwrap_or(0);
            let factors = || bundle.members.iter().enumerate().map(|(k, &member)| (bundle.lower[row * d + k], member));
            let centre: f64 = factors().map(|(factor, member)| factor * near[member]).sum();
            let variance: f64 =
                factors().map(|(factor, member)| (factor * spread[member]) * (factor * spread[member])).sum();
            let half = CENTRAL_95 * variance.sqrt();
            return [centre, centre - half, centre + half].map(|u| distribution.from_score(u));
        }
        let mut corners = Points::from_rows(near.len(), near);
        for side in [-CENTRAL_95, CENTRAL_95] {
            let mut corner = near.clone();
            corner[j] += side * spread[j];
            corners.push(&corner);
        }
        let natural = self.space.to_natural(&corners);
        let ends = [natural.get(1, j), natural.get(2, j)];
        [natural.get(0, j), ends[0].min(ends[1]), ends[0].max(ends[1])]
    }
}

/// Why a variable cannot be placed.
#[derive(Debug, Clone, PartialEq, Error)]
pub(crate) enum Misplaced {
    #[error("the aim {aim} needs a distribution for every variable, and `{name}` has a range")]
    NoDistribution { name: String, aim: &'static str },
    #[error("natural coordinates need variables on the whole line, and `{name}` lives {support}")]
    NotWholeLine { name: String, support: String },
    #[error("natural coordinates belong to the aim density, not to {0}")]
    NaturalElsewhere(&'static str),
    #[error("`near` = {near} is outside the support of `{name}`, or on its end")]
    NearOutside { name: String, near: f64 },
    #[error("`spread` of `{name}` must be above zero and finite")]
    SpreadNotPositive { name: String },
    #[error("`near` and `spread` have no use for `{name}`, whose parameters depend on other variables")]
    StartOfDependent { name: String },
}

impl Misplaced {
    /// What to do about it.
    pub(crate) fn help(&self) -> String {
        match self {
            Self::NoDistribution { .. } => "give it a distribution; a range is flat and has no probability".into(),
            Self::NotWholeLine { .. } => {
                "drop coordinates = \"natural\": half-lines and intervals then get their own coordinates".into()
            }
            Self::NaturalElsewhere(_) => "drop coordinates = \"natural\"".into(),
            Self::NearOutside { .. } => "put it strictly inside the support".into(),
            Self::SpreadNotPositive { .. } => "write how wide to look first, in the variable's own unit".into(),
            Self::StartOfDependent { .. } => "drop them: it starts at its median, given the others".into(),
        }
    }

    /// The variable it is about.
    pub(crate) fn variable(&self) -> Option<&str> {
        match self {
            Self::NoDistribution { name, .. }
            | Self::NotWholeLine { name, .. }
            | Self::NearOutside { name, .. }
            | Self::SpreadNotPositive { name }
            | Self::StartOfDependent { name } => Some(name),
            Self::NaturalElsewhere(_) => None,
        }
    }
}

/// Chooses coordinates, writes them into `variables`, and builds the space and the start.
pub(crate) fn place(
    variables: &mut [Variable],
    groups: &[GivenGroup],
    correlations: &[Correlation],
    aim: Aim,
    choice: Option<CoordinateChoice>,
) -> Result<(Space, Start), Vec<Misplaced>> {
    let mut misplaced = Vec::new();
    if choice == Some(CoordinateChoice::Natural) && aim != Aim::Density {
        return Err(vec![Misplaced::NaturalElsewhere(aim.word())]);
    }
    for variable in variables.iter_mut() {
        match coordinate(variable, aim, choice) {
            Ok(coordinate) => variable.coordinate = coordinate,
            Err(error) => misplaced.push(error),
        }
    }
    let (mut near, mut spread) = (Vec::new(), Vec::new());
    for variable in variables.iter() {
        match start_of(variable) {
            Ok((centre, scale)) => {
                near.push(centre);
                spread.push(scale);
            }
            Err(error) => misplaced.push(error),
        }
    }
    if !misplaced.is_empty() {
        return Err(misplaced);
    }
    let axes = (0..variables.len()).map(|i| axis(variables, groups, i)).collect();
    let bundles: Vec<Bundle> = correlations.iter().map(|correlation| bundle(variables, correlation)).collect();
    for bundle in bundles.iter().filter(|bundle| bundle.mixed) {
        let scores: Vec<f64> = bundle.members.iter().map(|&j| near[j]).collect();
        for (&j, e) in bundle.members.iter().zip(linear::lower_times(&bundle.inverse, &scores)) {
            near[j] = e;
        }
    }
    Ok((Space { axes, bundles, groups: groups.to_vec() }, Start { near, spread }))
}

/// What stands against placing one variable.
pub(crate) fn misplaced(variable: &Variable, aim: Aim, choice: Option<CoordinateChoice>) -> Vec<Misplaced> {
    match coordinate(variable, aim, choice) {
        Ok(coordinate) => start_of(&Variable { coordinate, ..variable.clone() }).err().into_iter().collect(),
        Err(error) => vec![error],
    }
}

fn coordinate(variable: &Variable, aim: Aim, choice: Option<CoordinateChoice>) -> Result<Coordinate, Misplaced> {
    let name = || variable.name.clone();
    let by_support = |low: f64, high: f64| match Coordinate::of_support(low, high) {
        Coordinate::Natural => Ok(Coordinate::Natural),
        _ if choice == Some(CoordinateChoice::Natural) => {
            Err(Misplaced::NotWholeLine { name: name(), support: format!("on [{low:?}, {high:?}]") })
        }
        other => Ok(other),
    };
    match &variable.nature {
        Nature::Range { .. } if aim != Aim::Density => Err(Misplaced::NoDistribution { name: name(), aim: aim.word() }),
        Nature::Range { low, high } => by_support(*low, *high),
        Nature::Random(distribution) => {
            let scores = aim != Aim::Density || choice == Some(CoordinateChoice::StandardNormal);
            let (low, high) = distribution.support();
            match (scores, distribution.is_discrete(), choice) {
                (_, true, Some(CoordinateChoice::Natural)) => {
                    Err(Misplaced::NotWholeLine { name: name(), support: "on whole numbers".into() })
                }
                (false, false, _) => by_support(low, high),
                _ => Ok(Coordinate::StandardNormal),
            }
        }
        Nature::Dependent { .. } if choice == Some(CoordinateChoice::Natural) => Err(Misplaced::NotWholeLine {
            name: name(),
            support: "in its score, as its parameters depend on other variables".into(),
        }),
        Nature::Dependent { .. } => Ok(Coordinate::StandardNormal),
    }
}

fn start_of(variable: &Variable) -> Result<(f64, f64), Misplaced> {
    let name = || variable.name.clone();
    let (near, spread) = (variable.near, variable.spread);
    if spread.is_some_and(|spread| !(spread > 0.0 && spread.is_finite())) {
        return Err(Misplaced::SpreadNotPositive { name: name() });
    }
    let check = |(centre, scale): (f64, f64), near: f64| {
        if centre.is_finite() { Ok((centre, scale)) } else { Err(Misplaced::NearOutside { name: name(), near }) }
    };
    match &variable.nature {
        Nature::Range { .. } => {
            let (near, spread) = (near.unwrap_or(f64::NAN), spread.unwrap_or(1.0));
            check(variable.coordinate.start(near, spread), near)
        }
        Nature::Random(distribution) => {
            let (centre, scale) = match variable.coordinate {
                Coordinate::StandardNormal => start_in_score(distribution, near, spread),
                seen => start_in_support(distribution, seen, near, spread),
            };
            check((centre, scale), near.unwrap_or_else(|| distribution.median()))
        }
        Nature::Dependent { .. } if near.is_some() || spread.is_some() => {
            Err(Misplaced::StartOfDependent { name: name() })
        }
        Nature::Dependent { .. } => Ok((0.0, 1.0)),
    }
}

/// The median, and the scale of the normal distribution whose central 95 % are as wide, unless the variable says.
fn start_in_support(
    distribution: &Distribution,
    seen: Coordinate,
    near: Option<f64>,
    spread: Option<f64>,
) -> (f64, f64) {
    let centre = near.unwrap_or_else(|| distribution.median());
    match spread {
        Some(spread) => seen.start(centre, spread),
        None => {
            let low = seen.of_natural(distribution.quantile_of_tail(0.025, false));
            let high = seen.of_natural(distribution.quantile_of_tail(0.025, true));
            (seen.of_natural(centre), (high - low).abs() / (2.0 * CENTRAL_95))
        }
    }
}

/// Standard normal, unless the variable says; a spread is half the distance of the scores at `near ± spread`.
fn start_in_score(distribution: &Distribution, near: Option<f64>, spread: Option<f64>) -> (f64, f64) {
    let centre = near.map_or(0.0, |near| distribution.score(near));
    let scale = spread.map_or(1.0, |spread| {
        let middle = near.unwrap_or_else(|| distribution.median());
        let (up, down) = (distribution.score(middle + spread), distribution.score(middle - spread));
        let sides: Vec<f64> =
            [up - centre, centre - down].into_iter().filter(|side| side.is_finite() && *side > 0.0).collect();
        let mean = sides.iter().sum::<f64>() / sides.len().max(1) as f64;
        if sides.is_empty() { WIDEST_SCORE } else { mean.min(WIDEST_SCORE) }
    });
    (centre, scale)
}

fn axis(variables: &[Variable], groups: &[GivenGroup], i: usize) -> Axis {
    let variable = &variables[i];
    match (&variable.nature, variable.coordinate) {
        (Nature::Range { .. }, coordinate) => Axis::Flat(coordinate),
        (Nature::Random(distribution), Coordinate::StandardNormal) => Axis::Score(distribution.clone()),
        (Nature::Random(distribution), coordinate) => Axis::Own(distribution.clone(), coordinate),
        (Nature::Dependent { .. }, _) => {
            let group = groups.iter().position(|group| group.members.contains(&i));
            Axis::Given(group.expect("every dependent variable is a member of the group that was made for it"))
        }
    }
}

fn bundle(variables: &[Variable], correlation: &Correlation) -> Bundle {
    let d = correlation.members.len();
    let lower = correlation.lower.clone();
    let log_det = (0..d).map(|i| libm::log(lower[i * d + i])).sum();
    let mixed = correlation.members.iter().all(|&j| variables[j].coordinate == Coordinate::StandardNormal);
    Bundle { members: correlation.members.clone(), inverse: linear::invert_lower(&lower, d), lower, log_det, mixed }
}
