//! The rounds: draw, evaluate, pool, fit; until the budget is spent.

use super::aim::FitTarget;
use super::control::{Controlled, controlled};
use super::directed::{Directed, Part, scaled_identity};
use super::layers::{Layer, Layers, Seen};
use super::plan::Plan;
use super::planes::{Control, Plane, planes};
use super::pool::{Pool, counted};
use super::refit::{Decision, Twin, refit};
use super::scores::{Answered, Scores};
use super::subspace::Subspace;
use super::surrogate::{Surrogate, surrogates};
use super::survey::{Explored, Scouts, scout_density};
use super::tuning::{RareRound, RareStep};
use crate::adapt::TuneError;
use crate::adapt::observer::Stage;
use crate::adapt::tuning::Extension;
use crate::numeric::{Points, Purpose, exp, ln, log_sum_exp};
use crate::weights::StratifiedMean;

/// One round's draws and what is known of the proposal that they came from.
#[derive(Debug)]
pub(crate) struct Drawn {
    pub(crate) points: Points,
    pub(crate) labels: Vec<u32>,
    pub(crate) answered: Answered,
    pub(crate) log_proposal: Vec<f64>,
    /// `f w` of every draw.
    pub(crate) terms: Vec<f64>,
    /// The same with control variates.
    pub(crate) controlled: Vec<f64>,
    /// Their mean.
    pub(crate) mean: StratifiedMean,
    pub(crate) counted: bool,
    pub(crate) spent_before: u64,
    /// Components of the proposal that are fitted.
    pub(crate) fitted: usize,
}

/// What the rounds leave.
#[derive(Debug)]
pub(crate) struct Course {
    pub(crate) rounds: Vec<RareRound>,
    pub(crate) drawn: Vec<Drawn>,
    pub(crate) pool: Pool,
    pub(crate) layers: Layers,
    pub(crate) twin: Twin,
    /// Regions first met in the last refits: the round and its new component.
    pub(crate) born: Vec<(usize, Part)>,
    /// Earlier budgets.
    pub(crate) extended_from: Vec<Extension>,
}

impl Course {
    /// What there is when a budget is spent that was raised later.
    fn extension(&self, budget: u64) -> Extension {
        let counted = self.drawn.iter().filter(|drawn| drawn.counted);
        Extension {
            budget,
            rounds: self.rounds.len() as u32,
            confirm_draws: 0,
            report_draws: counted.map(|drawn| drawn.terms.len() as u64).sum(),
        }
    }
}

/// Responsibility of the fitted components below which a draw is not explained by them.
const EXPLAINED: f64 = 0.05;
/// Variance of the first proposal where no point was found, and how it widens while nothing is met.
const BLIND_VARIANCE: f64 = 2.0;
const WIDEN: f64 = 1.5;

/// What has a known mean, fixed before a round is drawn.
struct Known<'a> {
    space: &'a Subspace,
    planes: &'a [Plane],
    surrogates: &'a [Surrogate],
}

/// Runs all rounds.
pub(crate) fn run(target: &Scores, plans: &[Plan], scouts: &Scouts, explored: &Explored) -> Result<Course, TuneError> {
    let space = &explored.space;
    let (k, rest) = (space.k(), space.rest_dim());
    let event = target.is_event();
    let (mut plan, mut raises) = (&plans[0], plans[1..].iter());
    let budget = plans[plans.len() - 1].budget;
    let planes = planes(&explored.found, space);
    let layers = Layers::new(plan, k, rest, scouts.sd)?;
    let mut pool = Pool::new(if rest > 0 { k + 1 } else { k }, event, plan.seed);
    let scout_q = scout_density(k, rest, scouts.sd, scouts.sd)?;
    let reduced = space.reduce(&scouts.points);
    let log_q = scout_q.log_density(&reduced);
    pool.add(&reduced, &scouts.answered, &log_q, scout_q);

    let mut twin = Twin::same(first_fit(explored)?);
    let mut earlier: Option<Twin> = None;
    let mut course = Course {
        rounds: Vec::new(),
        drawn: Vec::new(),
        pool,
        layers,
        twin: twin.clone(),
        born: Vec::new(),
        extended_from: Vec::new(),
    };
    let (mut at_event, mut before) = (None::<usize>, 0);
    let (mut step, mut predicted) = (RareStep::Survey, None);
    while target.spent() < budget {
        if target.spent() >= plan.budget
            && let Some(raise) = raises.next()
        {
            course.extended_from.push(course.extension(plan.budget));
            (plan, before, at_event) = (raise, course.rounds.len() as u32, at_event.map(|_| 0));
        }
        let index = course.rounds.len() as u32 + 1;
        target.enter(Stage::Round(index));
        let n = plan.next_round(at_event, target.spent(), index - 1 - before);
        let whole = course.layers.whole(&twin.full)?;
        let fits =
            if event && at_event.is_some() { surrogates(&course.pool, &explored.found, space) } else { Vec::new() };
        let known = Known { space, planes: &planes, surrogates: &fits };
        let (drawn, reduced) = draw(target, plan, &known, &whole, &twin, n, index, at_event.is_some())?;
        let mut record = record(&drawn, &reduced, &whole, &twin, index, target.spent());
        (record.step, record.predicted_ess_fraction) = (step, predicted);
        course.pool.add(&reduced, &drawn.answered, &drawn.log_proposal, whole);
        course.drawn.push(drawn);
        at_event = at_event.map(|t| t + 1);
        if target.spent() < budget {
            let wanted = plan.effective(k);
            match FitTarget::of(&course.pool, event, wanted) {
                Some(fit) => {
                    let decision = refit(&course.pool, &fit, &course.layers, plan, &twin, earlier.as_ref(), index)?;
                    if fit.at_event {
                        at_event = at_event.or(Some(0));
                    }
                    let Decision { twin: next, step: won, predicted_variance, candidates } = decision;
                    record.smoothing = fit.smoothing;
                    record.candidates = candidates;
                    if won == RareStep::Seeded {
                        course.born.extend(next.full.parts().last().map(|p| (index as usize, p.clone())));
                    }
                    step = won;
                    predicted =
                        (fit.at_event && predicted_known(predicted_variance)).then(|| 1.0 / (1.0 + predicted_variance));
                    if fit.at_event {
                        let seen = seen(&course.pool, &fit, explored);
                        course.layers.put_outposts(&next.full, &seen)?;
                    }
                    earlier = Some(std::mem::replace(&mut twin, next));
                }
                None => twin = Twin::same(widened(&twin.full)?),
            }
        }
        target.tell(|o| o.rare_round(&record));
        course.rounds.push(record);
    }
    course.twin = twin;
    Ok(course)
}

/// The pool's draws that count; its first ones are the scouts.
fn seen(pool: &Pool, fit: &FitTarget, explored: &Explored) -> Seen {
    let rows: Vec<usize> = (0..pool.len()).filter(|&i| fit.log_weights[i] > f64::NEG_INFINITY).collect();
    let of = |values: &[f64]| -> Vec<f64> { rows.iter().map(|&i| values[i]).collect() };
    Seen {
        points: pool.points.select(&rows),
        log_target: of(&fit.log_target),
        log_weights: of(&fit.log_weights),
        unexplained: rows.iter().map(|i| explored.unexplained.binary_search(i).is_ok()).collect(),
        log_mean: log_sum_exp(&fit.log_weights) - ln(pool.len() as f64),
    }
}

fn predicted_known(variance: f64) -> bool {
    variance.is_finite() && variance > -1.0
}

/// Unit covariances at the points found, the near ones heaviest; where nothing was found, around the origin.
fn first_fit(explored: &Explored) -> Result<Directed, TuneError> {
    let space = &explored.space;
    let (k, rest) = (space.k(), space.rest_dim());
    if explored.found.is_empty() {
        return Ok(Directed::central(k, rest, BLIND_VARIANCE, 1.0)?);
    }
    let mut all = Points::new(explored.found[0].at.len());
    explored.found.iter().for_each(|p| all.push(&p.at));
    let reduced = space.reduce(&all);
    let squares: Vec<f64> =
        (0..reduced.len()).map(|i| reduced.point(i)[..k].iter().map(|v| v * v).sum::<f64>()).collect();
    let nearest = squares.iter().copied().fold(f64::INFINITY, f64::min);
    let parts: Vec<Part> = squares
        .iter()
        .enumerate()
        .map(|(i, square)| Part {
            // Half of what the distances say in logarithms, floored: a nearer point is no proof of more mass.
            mass: exp((-(square - nearest) / 4.0).max(-3.0)),
            mean: reduced.point(i)[..k].to_vec(),
            covariance: scaled_identity(k, 1.0),
            rest: 1.0,
        })
        .collect();
    Ok(Directed::new(&parts, rest)?)
}

fn widened(fitted: &Directed) -> Result<Directed, TuneError> {
    let mut parts = fitted.parts();
    for part in &mut parts {
        part.covariance.iter_mut().for_each(|v| *v *= WIDEN);
    }
    Ok(Directed::new(&parts, fitted.rest_dim())?)
}

#[expect(clippy::too_many_arguments, reason = "one round's whole circumstances, used once")]
fn draw(
    target: &Scores,
    plan: &Plan,
    known: &Known<'_>,
    whole: &Directed,
    twin: &Twin,
    n: usize,
    index: u32,
    counts: bool,
) -> Result<(Drawn, Points), TuneError> {
    let spent_before = target.spent();
    let Known { space, planes, surrogates } = known;
    let (points, labels) = space.draw(whole, n, plan.seed, Purpose::Round, index);
    let reduced = space.reduce(&points);
    let log_proposal = whole.log_density(&reduced);
    let answered = target.answers(&points)?;
    let event = target.is_event();
    let terms: Vec<f64> = (0..n)
        .map(|i| match counted(&answered, i, event) {
            0.0 => 0.0,
            f => f * exp(answered.log_nominal[i] - log_proposal[i]),
        })
        .collect();
    let (columns, _) = whole.responsibilities(&reduced);
    let mut controls: Vec<Control> =
        columns.into_iter().zip(whole.mixture().shares()).map(|(values, &mean)| Control { values, mean }).collect();
    let needed = controls.len();
    if event {
        let log_ratio: Vec<f64> = answered.log_nominal.iter().zip(&log_proposal).map(|(p, q)| p - q).collect();
        controls.extend(surrogates.iter().flat_map(|fit| fit.controls(&reduced, &log_ratio)));
        controls.extend(planes.iter().flat_map(|plane| plane.controls(&points, &log_ratio)));
    }
    let Controlled { terms: controlled, mean } =
        controlled(&terms, &labels, whole.mixture().shares(), &controls, needed);
    let fitted = twin.full.len();
    let drawn = Drawn {
        points,
        labels,
        answered,
        log_proposal,
        terms,
        controlled,
        mean,
        counted: counts,
        spent_before,
        fitted,
    };
    Ok((drawn, reduced))
}

fn record(drawn: &Drawn, reduced: &Points, whole: &Directed, twin: &Twin, index: u32, spent: u64) -> RareRound {
    let sizes: Vec<f64> = drawn.terms.iter().map(|z| z.abs()).collect();
    let sum: f64 = sizes.iter().sum();
    let squares: f64 = sizes.iter().map(|z| z * z).sum();
    let n = sizes.len() as f64;
    let fitted_share: f64 = whole.mixture().shares()[..drawn.fitted].iter().sum();
    let log_fitted = twin.full.log_density(reduced);
    let outside: f64 = (0..sizes.len())
        .filter(|&i| fitted_share * exp(log_fitted[i] - drawn.log_proposal[i]) < EXPLAINED)
        .map(|i| sizes[i])
        .sum();
    let StratifiedMean { mean, se } = drawn.mean;
    RareRound {
        index,
        draws: sizes.len() as u32,
        evaluations: spent,
        failed: drawn.answered.value.iter().filter(|v| v.is_nan()).count() as u32,
        hits: drawn.answered.hit.iter().filter(|&&h| h).count() as u32,
        counted: drawn.counted,
        share: 0.0,
        value: mean,
        se,
        cv: se / mean.abs(),
        components: drawn.fitted,
        step: RareStep::Survey,
        predicted_ess_fraction: None,
        ess_fraction: if squares > 0.0 { sum * sum / squares / n } else { 0.0 },
        largest_share: if sum > 0.0 { sizes.iter().copied().fold(0.0, f64::max) / sum } else { 0.0 },
        outside_share: if sum > 0.0 { outside / sum } else { 0.0 },
        smoothing: None,
        candidates: Vec::new(),
    }
}

impl Drawn {
    /// Draws that came from the nominal density itself.
    pub(crate) fn nominal_draws(&self, layers: &Layers) -> usize {
        self.labels.iter().filter(|&&l| layers.layer_of(l as usize, self.fitted) == Layer::Nominal).count()
    }
}
