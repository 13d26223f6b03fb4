//! What the page is made from: plain values, none of them formatted yet.

use crate::figures::Drawing;
use crate::problem::Aim;
use crate::weights::Score;
use crate::weights::verdict::Verdict;

/// All that the page says about a run. `NaN` stands for a number that is not known.
#[derive(Debug, Clone, PartialEq)]
pub struct PageData {
    /// Title of the problem.
    pub title: String,
    /// What is asked of the integral.
    pub aim: Aim,
    /// The word, the checks and the reasons.
    pub verdict: Verdict,
    /// Variables in the order of coordinates.
    pub variables: Vec<VariableLine>,
    /// The problem as a problem file, every default written out.
    pub statement: String,
    /// Further facts about the problem, a sentence each: data, correlations, failures.
    pub notes: Vec<String>,
    /// What the search before the first round found.
    pub survey: SurveyLine,
    /// What a round adapts besides the proposal.
    pub schedule: ScheduleKind,
    /// The rounds.
    pub rounds: Vec<RoundLine>,
    /// Why the rounds ended, as the end of a sentence.
    pub stop: String,
    /// Who stood for choice at the end; empty where nothing was chosen.
    pub finalists: Vec<FinalistLine>,
    /// The chosen proposal in words.
    pub proposal: String,
    /// Score of the report draws; none where no draw met the target.
    pub score: Option<Score>,
    /// The answers: the integral itself first, then the estimates.
    pub answers: Vec<AnswerLine>,
    /// What else is to be said about them, a sentence each.
    pub remarks: Vec<String>,
    /// How the budget was raised, a sentence for each time; empty for most.
    pub raises: Vec<String>,
    /// Figures, in the order in which they are shown.
    pub figures: Vec<PageFigure>,
    /// Seed, versions, digests, evaluations.
    pub run: RunFacts,
}

/// A variable as the problem states it and as the proposal sees it.
#[derive(Debug, Clone, PartialEq)]
pub struct VariableLine {
    /// Its name.
    pub name: String,
    /// Its name in figures.
    pub label: Option<String>,
    /// Its unit.
    pub unit: Option<String>,
    /// A remark.
    pub note: Option<String>,
    /// Distribution with parameters, or flat range.
    pub law: String,
    /// Ends of its support, its own unit.
    pub support: [f64; 2],
    /// Whether it takes whole numbers only.
    pub discrete: bool,
    /// `natural`, `log`, `logit` or `standard-normal`.
    pub coordinate: &'static str,
    /// Centre of the start and the ends of its central 95 %, its own unit, the other variables at their centres.
    pub start: [f64; 3],
}

/// What a search before the first round found.
#[derive(Debug, Clone, PartialEq)]
pub struct SurveyLine {
    /// What was done and found, a sentence each.
    pub sentences: Vec<String>,
    /// What its points are called: `mode`, `design point`.
    pub point_name: &'static str,
    /// Titles of the facts about each; those of numbers end in `#`.
    pub fact_titles: Vec<&'static str>,
    /// The points found.
    pub points: Vec<PointLine>,
    /// Share of the start whose basin could have been missed with a chance of 5 %.
    pub basin_share: f64,
    /// Evaluations spent.
    pub evaluations: u64,
}

/// A mode or a design point.
#[derive(Debug, Clone, PartialEq)]
pub struct PointLine {
    /// Where, one number a variable, natural units.
    pub location: Vec<f64>,
    /// Facts about it, one for every title.
    pub facts: Vec<String>,
}

/// What a round adapts besides the proposal.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ScheduleKind {
    /// The exponent of the tempered target; 1 is the target itself.
    Exponent,
    /// The width of the smoothed event; 0 is the event itself.
    Smoothing,
}

/// One round.
#[derive(Debug, Clone, PartialEq)]
pub struct RoundLine {
    /// From 1.
    pub index: u32,
    /// Its draws.
    pub draws: u32,
    /// All evaluations up to and with it.
    pub evaluations: u64,
    /// Fitted components of the proposal that was drawn from.
    pub components: usize,
    /// Their degrees of freedom; infinite for Gaussian ones.
    pub df: f64,
    /// ESS fraction that the pool predicted.
    pub predicted_ess_fraction: f64,
    /// ESS fraction of the fresh draws.
    pub ess_fraction: f64,
    /// Variance of the weights scaled to mean one.
    pub weight_variance: f64,
    /// Tail shape of the weights.
    pub tail_shape: f64,
    /// Share of the heaviest draw.
    pub largest_share: f64,
    /// Exponent or smoothing width of the refit that followed.
    pub schedule: f64,
    /// The round's own estimate and its coefficient of variation, where the aim has one.
    pub estimate: Option<[f64; 2]>,
    /// Candidates tried after it.
    pub tried: usize,
    /// The kind of refit that won.
    pub winner: String,
    /// With [`ScheduleKind::Exponent`] the held-out log density of the winner less that of the present proposal, nats; with
    /// [`ScheduleKind::Smoothing`] the relative variance per draw that the held-out draws predict for it.
    pub merit: f64,
    /// Components added at heavy draws.
    pub births: u32,
}

/// A finalist.
#[derive(Debug, Clone, PartialEq)]
pub struct FinalistLine {
    /// Where it comes from.
    pub name: String,
    /// ESS fraction that was predicted.
    pub predicted_ess_fraction: f64,
    /// ESS fraction of its fresh draws.
    pub ess_fraction: f64,
    /// Whether it was chosen.
    pub chosen: bool,
}

/// An answer with its error.
#[derive(Debug, Clone, PartialEq)]
pub struct AnswerLine {
    /// What it is.
    pub name: String,
    /// The value; NaN where it is not given.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
    /// Its 95 % interval.
    pub interval_95: [f64; 2],
    /// How the interval was made.
    pub interval_method: String,
    /// What it rests on, in independent draws.
    pub effective_draws: f64,
    /// A remark: `pooled, adapted`, or why there is no value.
    pub note: String,
}

/// A figure.
#[derive(Debug, Clone, PartialEq)]
pub struct PageFigure {
    /// Stem of its file name.
    pub name: String,
    /// What it shows, with the numbers that matter.
    pub caption: String,
    /// What there is to see, for readers who do not see it.
    pub alternative: String,
    /// The PNG file.
    pub png: Vec<u8>,
}

impl PageFigure {
    /// The figure of a drawing.
    #[must_use]
    pub fn of(drawing: &Drawing) -> Self {
        let stem = drawing.name.split('-').next().unwrap_or_default();
        let alternative = match stem {
            "progress" => "Chart: score of every round against the evaluations spent.",
            "evenness" => {
                "Two charts: how evenly the draws share the total weight, and how often a draw is heavier than a given weight."
            }
            "variables" => {
                "Charts in rows, one a variable: its distribution with the proposal's, then its draws against those of its closest partners."
            }
            "convergence" => {
                "Two charts: the estimate with its interval after every counted round, and its standard error."
            }
            "margin" => "Chart: every draw by its distance from the origin of the scores and its margin or integrand.",
            "event" => {
                "Chart: the draws in the plane of two variables, with the outlines of the proposal's components over them."
            }
            "importance" => "Bar chart: the signed squared direction cosine of every variable, the largest first.",
            "tails" => {
                "Chart: how often the weights of every proposal are larger than a given weight, with the fits to their upper tails."
            }
            "degrees" => "Chart: ESS fraction of the Student-t mixture against its degrees of freedom.",
            "errors" => "Chart: relative standard error of every proposal against the draws spent.",
            "radial" => "Chart: share of the target and of every proposal further out than a distance.",
            "heavy" => "Chart: where the heaviest draws lie in every variable, against an even spread.",
            _ => "Chart; its numbers stand in the CSV file of the same name.",
        };
        Self {
            name: drawing.name.clone(),
            caption: drawing.caption.clone(),
            alternative: alternative.to_owned(),
            png: drawing.png(),
        }
    }
}

/// Where the numbers come from.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct RunFacts {
    /// Program and version.
    pub program: String,
    /// The seed.
    pub seed: u64,
    /// What went in, by name, with its digest.
    pub digests: Vec<(String, String)>,
    /// All evaluations.
    pub evaluations: u64,
    /// Those that failed.
    pub failed: u64,
    /// Report draws.
    pub report_draws: u64,
    /// The command that makes the same run again.
    pub command: String,
    /// The problem file as it stands in the run's folder, with every default.
    pub statement: String,
}
