//! The proposal as a file: `proposal.json`, format `evenpoise-proposal/1`.
//!
//! [`ProposalFile`] holds the numbers just as the file does; what it writes, it reads back to the same bits.
//! [`read_proposal`] is in `proposal_reader`.

use super::StoreError;
use super::atomic::write_json;
use crate::problem::Coordinate;
use crate::problem::Nature;
use crate::problem::Problem;
use crate::problem::Variable;
use crate::proposal::Component;
use crate::proposal::Mixture;
use crate::proposal::ProposalError;
use crate::weights::Score;
use crate::weights::verdict::checks::TAIL_SOUND;
use serde::Serialize;
use serde_json::Value;
use serde_json::json;
use std::collections::BTreeMap;
use std::path::Path;

/// The version that is written, and the only one that is read.
pub const PROPOSAL_FORMAT: &str = "evenpoise-proposal/1";

/// A proposal with all that is needed to draw from it and to judge it.
///
/// Invariant, for one that was read: shares sum to one, every component has one number a variable and a positive
/// definite scale, every number is finite.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ProposalFile {
    /// [`PROPOSAL_FORMAT`].
    pub format: String,
    /// Title of the problem.
    pub title: String,
    /// The variables, in the order of coordinates.
    pub variables: Vec<VariableEntry>,
    /// Correlations of the standard normal scores of some variables.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub correlations: Vec<CorrelationEntry>,
    /// The components.
    pub components: Vec<ComponentEntry>,
    /// What the report draws say about it, where there were any.
    pub scores: Option<ScoresEntry>,
    /// The verdict's word, where there was one.
    pub verdict: Option<String>,
    /// Where it comes from.
    pub made_by: MadeBy,
}

/// A variable and its coordinate.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct VariableEntry {
    /// Its name.
    pub name: String,
    /// Its unit.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub unit: Option<String>,
    /// `natural`, `log`, `logit` or `standard-normal`.
    pub coordinate: String,
    /// Low end of the support, for `log` (upwards) and `logit`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub lower: Option<f64>,
    /// High end of the support, for `log` (downwards) and `logit`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub upper: Option<f64>,
    /// The distribution that a `standard-normal` coordinate is a score of.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub distribution: Option<Value>,
}

/// Variables whose scores are correlated: `u = L e`, `L L' = score`, `e` the coordinates.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct CorrelationEntry {
    /// Their names.
    pub among: Vec<String>,
    /// The correlation of their scores, row by row.
    pub score: Vec<Vec<f64>>,
}

/// A component, in coordinates.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ComponentEntry {
    /// Its share.
    pub share: f64,
    /// `gaussian` or `student-t`.
    pub family: String,
    /// Degrees of freedom of a Student-t component.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub df: Option<f64>,
    /// Location.
    pub location: Vec<f64>,
    /// Scale matrix, row by row: the covariance of a Gaussian.
    pub scale: Vec<Vec<f64>>,
}

/// Scores from the report draws; a number that is not known is `null`.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ScoresEntry {
    /// Report draws.
    pub draws: u64,
    /// Effective sample size over draws.
    pub ess_fraction: Option<f64>,
    /// Its 95 % interval.
    pub ess_fraction_interval: Option<[f64; 2]>,
    /// Variance of the weights scaled to mean one.
    pub weight_variance: Option<f64>,
    /// `exp(entropy) / draws`.
    pub perplexity: Option<f64>,
    /// Tail shape; `null` also where the largest weights are all equal.
    pub tail_shape: Option<f64>,
    /// The limit for "sound", which the upper bound of the shape is held against.
    pub tail_shape_limit: f64,
    /// Share of the heaviest draw.
    pub largest_share: Option<f64>,
    /// Log of the normalising constant.
    pub log_normaliser: Option<f64>,
    /// Its standard error.
    pub log_normaliser_se: Option<f64>,
}

/// Provenance.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct MadeBy {
    /// Program and version.
    pub program: String,
    /// Digests of what went in, by what it is.
    pub digests: BTreeMap<String, String>,
    /// The seed.
    pub seed: u64,
    /// All evaluations.
    pub evaluations: u64,
}

/// A number that JSON can hold; nothing for one that is not known or not finite.
#[must_use]
pub fn finite(x: f64) -> Option<f64> {
    x.is_finite().then_some(x)
}

impl ScoresEntry {
    /// The scores of a set of weights.
    #[must_use]
    pub fn of(score: &Score) -> Self {
        Self {
            draws: score.draws as u64,
            ess_fraction: finite(score.ess_fraction),
            ess_fraction_interval: score.ess_fraction_interval,
            weight_variance: finite(score.weight_variance),
            perplexity: finite(score.perplexity),
            tail_shape: finite(score.tail.shape),
            tail_shape_limit: TAIL_SOUND,
            largest_share: finite(score.largest_share),
            log_normaliser: finite(score.log_normaliser),
            log_normaliser_se: finite(score.log_normaliser_se),
        }
    }
}

impl ProposalFile {
    /// The file of a mixture in the coordinates of a problem.
    #[must_use]
    pub fn new(problem: &Problem, mixture: &Mixture, made_by: MadeBy) -> Self {
        let name = |&j: &usize| problem.variables()[j].name.clone();
        let correlations = problem.correlations().iter().map(|c| CorrelationEntry {
            among: c.members.iter().map(name).collect(),
            score: c.score.chunks(c.members.len()).map(<[f64]>::to_vec).collect(),
        });
        Self {
            format: PROPOSAL_FORMAT.to_owned(),
            title: problem.title().to_owned(),
            variables: problem.variables().iter().map(variable_entry).collect(),
            correlations: correlations.collect(),
            components: mixture.shares().iter().zip(mixture.components()).map(component_entry).collect(),
            scores: None,
            verdict: None,
            made_by,
        }
    }

    /// The mixture.
    ///
    /// # Errors
    /// [`ProposalError`] where the numbers make none; a file that [`read_proposal`](super::read_proposal) accepted has one.
    pub fn mixture(&self) -> Result<Mixture, ProposalError> {
        let shares: Vec<f64> = self.components.iter().map(|c| c.share).collect();
        let each = self.components.iter().enumerate().map(|(k, entry)| entry.component().map_err(|error| error.at(k)));
        Mixture::new(&shares, each.collect::<Result<_, _>>()?)
    }

    /// Writes the file, whole or not at all.
    ///
    /// # Errors
    /// [`StoreError::Io`] with the path.
    pub fn write(&self, path: &Path) -> Result<(), StoreError> {
        write_json(path, self)
    }
}

impl ComponentEntry {
    /// The component itself.
    ///
    /// # Errors
    /// As [`Component::new`].
    pub fn component(&self) -> Result<Component, ProposalError> {
        Component::new(self.location.clone(), &self.scale.concat(), self.df.unwrap_or(f64::INFINITY))
    }
}

fn component_entry((&share, component): (&f64, &Component)) -> ComponentEntry {
    let df = finite(component.df());
    ComponentEntry {
        share,
        family: if df.is_some() { "student-t" } else { "gaussian" }.to_owned(),
        df,
        location: component.location().to_vec(),
        scale: component.scale().chunks(component.dim()).map(<[f64]>::to_vec).collect(),
    }
}

fn variable_entry(variable: &Variable) -> VariableEntry {
    let (lower, upper) = match variable.coordinate {
        Coordinate::Natural | Coordinate::StandardNormal => (None, None),
        Coordinate::Log { end, upward: true } => (Some(end), None),
        Coordinate::Log { end, upward: false } => (None, Some(end)),
        Coordinate::Logit { low, high } => (Some(low), Some(high)),
    };
    let scored = variable.coordinate == Coordinate::StandardNormal;
    VariableEntry {
        name: variable.name.clone(),
        unit: variable.unit.clone(),
        coordinate: variable.coordinate.word().to_owned(),
        lower,
        upper,
        distribution: if scored { distribution_entry(&variable.nature) } else { None },
    }
}

/// Family and parameters; formulas stand as texts, an infinite end of a truncation as `null`.
fn distribution_entry(nature: &Nature) -> Option<Value> {
    match nature {
        Nature::Range { .. } => None,
        Nature::Random(distribution) => {
            let parameters: BTreeMap<&str, f64> = distribution.parameters().into_iter().collect();
            let mut entry = json!({ "family": distribution.family(), "parameters": parameters });
            if distribution.shift() != 0.0 {
                entry["shift"] = json!(distribution.shift());
            }
            if distribution.is_truncated() {
                let (low, high) = distribution.support();
                entry["between"] = json!([finite(low), finite(high)]);
            }
            Some(entry)
        }
        Nature::Dependent { family, parameters } => {
            let parameters: BTreeMap<&str, Value> =
                parameters.iter().map(|(name, text)| (name.as_str(), number_or_formula(text))).collect();
            Some(json!({ "family": family, "parameters": parameters }))
        }
    }
}

fn number_or_formula(text: &str) -> Value {
    text.parse::<f64>().ok().and_then(finite).map_or_else(|| json!(text), |number| json!(number))
}
