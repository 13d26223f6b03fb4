//! The survey: wide scouts, then searches from them for every design point or mode in reach.

mod waves;

use super::design_point::{self, Ended};
use super::directed::Directed;
use super::mode;
use super::plan::{FULL, Plan, wide_sd};
use super::scores::{Answered, Look, Scores, log_size};
use super::smoothing::{log_indicator, smallest};
use super::subspace::Subspace;
use crate::adapt::TuneError;
use crate::numeric::linear::dot;
use crate::numeric::{Points, Purpose, Stream, exp, normal, stream, uniform};

/// Wide draws and what they met.
#[derive(Debug)]
pub(crate) struct Scouts {
    pub(crate) points: Points,
    pub(crate) answered: Answered,
    pub(crate) log_proposal: Vec<f64>,
    /// Component of each: 0 is the nominal density.
    pub(crate) labels: Vec<u32>,
    /// Standard deviation of the wide ones.
    pub(crate) sd: f64,
}

/// A point that a search found.
#[derive(Debug, Clone)]
pub(crate) struct Found {
    pub(crate) at: Vec<f64>,
    pub(crate) converged: bool,
    /// Unit gradient of the margin there.
    pub(crate) normal: Option<Vec<f64>>,
    /// Distance from the point on to the surface, by the gradient there.
    pub(crate) short: f64,
}

/// What the survey leaves for the rounds.
#[derive(Debug)]
pub(crate) struct Explored {
    pub(crate) found: Vec<Found>,
    pub(crate) searches: usize,
    pub(crate) space: Subspace,
    /// Scouts that count but that no found point explains.
    pub(crate) unexplained: Vec<usize>,
}

/// Share of the scouts that is nominal.
const NOMINAL_SHARE: f64 = 0.25;
/// Effective scouts that the first smoothing leaves, at most.
const SMOOTHED_SCOUTS: f64 = 20.0;
/// Searches that end in a known point before the survey stops, from weighted scouts and from unexplained ones.
const REPEATS: usize = 3;
const REPEATS_UNEXPLAINED: usize = 4;
/// Points nearer than this are one.
const SAME: f64 = 0.7;
/// A scout within this angle (cosine) or distance of a found point is left for later, by so many nats.
const NEAR_COSINE: f64 = 0.6;
const NEAR_DISTANCE: f64 = 1.0;
const LATER: f64 = 6.0;
/// A scout that reaches to within this of the tangent plane at a found point is explained by it.
const TANGENT_SLACK: f64 = 0.3;
/// Where the way from a found point to a scout is looked at.
const ON_THE_WAY: [f64; 3] = [0.25, 0.5, 0.75];
/// One way for so many evaluations of the budget.
const BUDGET_PER_CHECK: u64 = 500;
/// Gradients taken around the best point to tell the directions, where a gradient costs `d` evaluations or one.
const GRADIENTS: usize = 4;
const CHEAP_GRADIENTS: usize = 16;
/// Share of the budget that those may take beyond the searches.
const GRADIENTS_SHARE: f64 = 0.05;

/// Draws and evaluates the scouts: a quarter from the nominal density, the others wider.
pub(crate) fn scouts(target: &Scores, plan: &Plan) -> Result<Scouts, TuneError> {
    let d = target.dim();
    let sd = wide_sd(d);
    let space = Subspace::whole(d);
    let q = scout_density(d, 0, sd, sd)?;
    let (points, labels) = space.draw(&q, plan.scouts, plan.seed, Purpose::Survey, 0);
    let log_proposal = q.log_density(&points);
    let answered = target.answers(&points)?;
    Ok(Scouts { points, answered, log_proposal, labels, sd })
}

/// The density of the scouts in `k` directions and a rest.
pub(crate) fn scout_density(k: usize, rest: usize, sd: f64, rest_sd: f64) -> Result<Directed, TuneError> {
    let nominal = Directed::central(k, rest, 1.0, 1.0)?;
    let wide = Directed::central(k, rest, sd * sd, rest_sd * rest_sd)?;
    Ok(Directed::union(&[(NOMINAL_SHARE, &nominal), (1.0 - NOMINAL_SHARE, &wide)])?)
}

/// Searches from the scouts, then (in many dimensions) the directions that matter.
pub(crate) fn explore(target: &Scores, plan: &Plan, scouts: &Scouts) -> Result<Explored, TuneError> {
    let mut search = Searching::new(target, plan, scouts);
    if target.problem().asks_in_batches() {
        search.run_together()?;
    } else {
        search.run()?;
    }
    let space = if plan.directions { search.directions()? } else { Subspace::whole(target.dim()) };
    let unexplained = (0..scouts.points.len()).filter(|&i| search.unexplained[i]).collect();
    Ok(Explored { found: search.found, searches: search.searches, space, unexplained })
}

struct Searching<'a, 'b> {
    target: &'a Scores<'b>,
    plan: &'a Plan,
    scouts: &'a Scouts,
    rows: Vec<Vec<f64>>,
    norms: Vec<f64>,
    /// Log weight of every scout towards the (smoothed) event or the integrand.
    log_weights: Vec<f64>,
    unexplained: Vec<bool>,
    /// Scouts from which an unexplained search was started, or that lie in the direction of one.
    hunted: Vec<bool>,
    found: Vec<Found>,
    gradients: Vec<Vec<f64>>,
    searches: usize,
    /// Ways looked at between scouts and found points.
    checks: u64,
    cap: u64,
    rng: Stream,
}

impl<'a, 'b> Searching<'a, 'b> {
    fn new(target: &'a Scores<'b>, plan: &'a Plan, scouts: &'a Scouts) -> Self {
        let n = scouts.points.len();
        let rows: Vec<Vec<f64>> = (0..n).map(|i| scouts.points.point(i)).collect();
        let norms = rows.iter().map(|u| dot(u, u).sqrt().max(1e-9)).collect();
        let event = target.is_event();
        let unexplained = scouts.answered.hit.iter().map(|&h| h && event).collect();
        Self {
            target,
            plan,
            scouts,
            rows,
            norms,
            log_weights: first_weights(scouts, event),
            unexplained,
            hunted: vec![false; n],
            found: Vec::new(),
            gradients: Vec::new(),
            searches: 0,
            checks: 0,
            cap: target.spent() + plan.search_cap,
            rng: stream(plan.seed, Purpose::Survey, 1, 0),
        }
    }

    fn run(&mut self) -> Result<(), TuneError> {
        let room = 3 * (self.target.slope_cost() + 2);
        let anything = self.log_weights.iter().any(|l| l.is_finite());
        let (mut repeats, mut useless) = (0, 0);
        // In many dimensions scouts lie far out: the first search starts in the middle.
        let mut from_middle = self.plan.directions && self.target.is_event();
        while anything && repeats < REPEATS && self.target.spent() + room < self.cap {
            let (start, hunt) = if std::mem::take(&mut from_middle) {
                (self.target.look(&vec![0.0; self.target.dim()])?, false)
            } else if let Some(i) = self.nearest_unexplained().filter(|_| useless < REPEATS_UNEXPLAINED) {
                if self.connected(i)? {
                    self.unexplained[i] = false;
                    continue;
                }
                self.mark_direction(i);
                (self.scout(i)?, true)
            } else {
                let i = self.weighted_scout();
                (self.scout(i)?, false)
            };
            let known = !self.search(start)?;
            match (known, hunt) {
                (true, true) => useless += 1,
                (true, false) => repeats += 1,
                (false, _) => repeats = 0,
            }
        }
        self.neighbours()?;
        self.connect_rest()
    }

    /// Whether the straight way from a scout to a found point stays in the event: they belong together. The point is the one in the
    /// most similar direction, then the nearest one.
    fn connected(&mut self, i: usize) -> Result<bool, TuneError> {
        let row = &self.rows[i];
        let cosine = |p: &Found| dot(&p.at, row) / dot(&p.at, &p.at).sqrt().max(1e-9);
        let alike = self.found.iter().max_by(|a, b| cosine(a).total_cmp(&cosine(b)));
        let near = self.found.iter().min_by(|a, b| distance(&a.at, row).total_cmp(&distance(&b.at, row)));
        let mut ways: Vec<&Found> = alike.into_iter().chain(near).collect();
        ways.dedup_by(|a, b| a.at == b.at);
        for point in ways {
            if self.target.spent() + ON_THE_WAY.len() as u64 > self.cap
                || self.checks >= self.plan.budget / BUDGET_PER_CHECK
            {
                return Ok(false);
            }
            self.checks += 1;
            let mut between = Points::new(row.len());
            for share in ON_THE_WAY {
                let at: Vec<f64> = point.at.iter().zip(row).map(|(p, u)| p + share * (u - p)).collect();
                between.push(&at);
            }
            if self.target.answers(&between)?.hit.iter().all(|&h| h) {
                return Ok(true);
            }
        }
        Ok(false)
    }

    /// Scouts left unexplained by the searches from them are held against all that was found.
    fn connect_rest(&mut self) -> Result<(), TuneError> {
        for i in 0..self.rows.len() {
            if self.unexplained[i] && self.connected(i)? {
                self.unexplained[i] = false;
            }
        }
        Ok(())
    }

    /// One search; whether it found something new.
    fn search(&mut self, start: Look) -> Result<bool, TuneError> {
        let ended = if self.target.is_event() {
            design_point::search(self.target, start, self.cap)?
        } else {
            mode::climb(self.target, start, self.cap)?
        };
        self.searches += 1;
        self.keep(ended)
    }

    fn keep(&mut self, ended: Ended) -> Result<bool, TuneError> {
        self.gradients.extend(ended.gradients);
        let Some(at) = ended.at else { return Ok(false) };
        let length = dot(&at, &at).sqrt();
        for (i, row) in self.rows.iter().enumerate() {
            if dot(row, &at) / length.max(1e-9) >= length - TANGENT_SLACK {
                self.unexplained[i] = false;
            }
        }
        if self.found.iter().any(|p| distance(&p.at, &at) < SAME) {
            return Ok(false);
        }
        self.found.push(Found { at, converged: ended.converged, normal: ended.normal, short: ended.short });
        Ok(true)
    }

    /// Discrete variables have no slope: from every point found, the next value towards the likeliest one is tried.
    fn neighbours(&mut self) -> Result<(), TuneError> {
        let mut at = 0;
        while at < self.found.len() {
            for next in self.target.neighbours(&self.found[at].at.clone()) {
                if self.target.spent() + 3 * (self.target.slope_cost() + 2) < self.cap {
                    let start = self.target.look(&next)?;
                    self.search(start)?;
                }
            }
            at += 1;
        }
        Ok(())
    }

    fn scout(&self, i: usize) -> Result<Look, TuneError> {
        let answered = &self.scouts.answered;
        Ok(Look { at: self.rows[i].clone(), value: answered.value[i], hit: answered.hit[i], gradient: None })
    }

    fn nearest_unexplained(&self) -> Option<usize> {
        (0..self.rows.len())
            .filter(|&i| self.unexplained[i] && !self.hunted[i])
            .min_by(|&a, &b| self.norms[a].total_cmp(&self.norms[b]))
    }

    /// Scouts in the direction of a start are left to the search from it.
    fn mark_direction(&mut self, start: usize) {
        for i in 0..self.rows.len() {
            let cosine = dot(&self.rows[i], &self.rows[start]) / (self.norms[i] * self.norms[start]);
            if cosine > NEAR_COSINE {
                self.hunted[i] = true;
            }
        }
    }

    /// A scout drawn by its weight, those near found points put back.
    fn weighted_scout(&mut self) -> usize {
        let mut log_weights = self.log_weights.clone();
        for found in &self.found {
            let length = dot(&found.at, &found.at).sqrt().max(1e-9);
            for (i, l) in log_weights.iter_mut().enumerate() {
                let cosine = dot(&self.rows[i], &found.at) / (self.norms[i] * length);
                if cosine > NEAR_COSINE || distance(&self.rows[i], &found.at) < NEAR_DISTANCE {
                    *l -= LATER;
                }
            }
        }
        pick(&log_weights, &mut self.rng)
    }

    /// The directions told by points, gradients on the way, and gradients around the best point.
    fn directions(&mut self) -> Result<Subspace, TuneError> {
        let d = self.target.dim();
        let lengths: Vec<f64> = self.found.iter().map(|p| dot(&p.at, &p.at).sqrt()).collect();
        if let Some(best) = (0..self.found.len()).min_by(|&a, &b| lengths[a].total_cmp(&lengths[b])) {
            let cost = self.target.slope_cost() + 1;
            let wanted = if self.target.slope_cost() == 1 { CHEAP_GRADIENTS } else { GRADIENTS };
            let limit = self.cap + (GRADIENTS_SHARE * self.plan.budget as f64) as u64;
            for _ in 0..wanted {
                if self.target.spent() + cost > limit {
                    break;
                }
                let at: Vec<f64> = self.found[best].at.iter().map(|p| p + normal::draw(&mut self.rng)).collect();
                let look = self.target.look(&at)?;
                let slope = self.target.slope(&look)?;
                let length = dot(&slope, &slope).sqrt();
                if length > 0.0 && length.is_finite() {
                    self.gradients.push(slope.iter().map(|s| s / length).collect());
                }
            }
        }
        let mut rows: Vec<Vec<f64>> = self
            .found
            .iter()
            .zip(&lengths)
            .filter(|(_, length)| **length > 1e-6)
            .map(|(p, length)| p.at.iter().map(|v| 2.0 * v / length).collect())
            .collect();
        rows.extend(self.gradients.iter().cloned());
        Ok(Subspace::leading(&rows, d).unwrap_or_else(|| fallback(d)))
    }
}

/// Nothing is known of the directions: the first few coordinates stand for them, and the rest is left to its common variance.
fn fallback(d: usize) -> Subspace {
    if d <= FULL {
        return Subspace::whole(d);
    }
    let mut first = vec![0.0; d];
    first[0] = 1.0;
    Subspace::leading(&[first], d).unwrap_or_else(|| Subspace::whole(d))
}

/// Log weights of the scouts: towards the event under the smallest smoothing that leaves some twenty of them, or `|f|` times the nominal.
fn first_weights(scouts: &Scouts, event: bool) -> Vec<f64> {
    let answered = &scouts.answered;
    let base: Vec<f64> = answered.log_nominal.iter().zip(&scouts.log_proposal).map(|(p, q)| p - q).collect();
    if event {
        let wanted = SMOOTHED_SCOUTS.min(base.len() as f64 / 10.0);
        let s = smallest(&base, &answered.value, wanted);
        base.iter().zip(&answered.value).map(|(b, &m)| b + log_indicator(m, s)).collect()
    } else {
        base.iter().zip(&answered.value).map(|(b, &f)| b + log_size(f)).collect()
    }
}

/// An index drawn by weight.
pub(crate) fn pick(log_weights: &[f64], rng: &mut Stream) -> usize {
    let top = log_weights.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let weights: Vec<f64> = log_weights.iter().map(|l| if top.is_finite() { exp(l - top) } else { 1.0 }).collect();
    let mut left = uniform(rng) * weights.iter().sum::<f64>();
    for (i, w) in weights.iter().enumerate() {
        left -= w;
        if left <= 0.0 && *w > 0.0 {
            return i;
        }
    }
    weights.len() - 1
}

fn distance(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(x, y)| (x - y) * (x - y)).sum::<f64>().sqrt()
}
