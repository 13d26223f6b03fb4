//! What the sums say: the answer, the estimates, their intervals, the verdict.

use super::job::Job;
use super::moments;
use super::sums::EstimateSums;
use super::sums::Sums;
use super::verdict;
use crate::numeric::exp;
use crate::numeric::ln;
use crate::weights::StratifiedMean;
use crate::weights::TailReason;
use crate::weights::TailShape;
use crate::weights::gamma_interval_of;
use crate::weights::log_interval;
use crate::weights::no_hit_bound;
use crate::weights::normal_interval;
use crate::weights::verdict::Check;
use crate::weights::verdict::Verdict;
use crate::weights::verdict::Word;
use serde::Serialize;
use serde::Serializer;

/// Effective draws from which an interval may be normal on the log scale.
const LOG_SCALE_DRAWS: f64 = 100.0;
/// A mean that is so many standard errors above zero has an interval on the log scale.
const SIGNED: f64 = 5.0;

/// Everything that a production run says. NaN, and what is not known, is `null` in JSON.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Outcome {
    /// What the reader may do with the numbers.
    pub verdict: Word,
    /// Why it is not "sound"; the worst reason first.
    pub reasons: Vec<String>,
    /// What no check can see.
    pub caution: String,
    /// Draws.
    pub draws: u64,
    /// Failed evaluations among them.
    pub failed: u64,
    /// Effective draws of the answer over draws.
    pub ess_fraction: f64,
    /// Variance of the terms' sizes scaled to mean one.
    pub weight_variance: f64,
    /// Tail shape of the terms.
    pub tail_shape: f64,
    /// Whether it was fitted.
    pub tail_reason: TailReason,
    /// Share of the draw that carries most.
    pub largest_share: f64,
    /// Log of the normalising constant (of the answer's size for other aims), with its 95 % interval.
    pub log_normaliser: LogOutcome,
    /// The probability, where that is the aim; `null` where the event was never met.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub probability: Option<Option<ValueOutcome>>,
    /// The expectation, where that is the aim.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub expectation: Option<Option<ValueOutcome>>,
    /// What is known where the event was never met.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub no_hit: Option<NoHitOutcome>,
    /// The probability with failures counted both ways, where there were any.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub failures_counted: Option<FailuresOutcome>,
    /// Probability that the model fails, where it did.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub failing: Option<Pair>,
    /// The estimates, by name.
    #[serde(serialize_with = "by_name")]
    pub estimates: Vec<(String, EstimateOutcome)>,
    /// Every check.
    pub checks: Vec<Check>,
}

/// A logarithm with its standard error and interval, nats.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct LogOutcome {
    /// The logarithm.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
    /// Its 95 % interval.
    pub interval_95: [f64; 2],
}

/// A value with its standard error.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Pair {
    /// The value.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
}

/// The answer with failures counted either way.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct FailuresOutcome {
    /// All failures outside the event.
    pub outside: Pair,
    /// All failures inside it.
    pub inside: Pair,
}

/// An event that was never met.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct NoHitOutcome {
    /// One-sided 95 % upper bound of the probability of meeting it.
    pub upper_bound: f64,
    /// Draws of the nominal density that the bound rests on.
    pub nominal_draws: u64,
}

/// A probability or an expectation.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct ValueOutcome {
    /// The value.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
    /// Coefficient of variation.
    pub cv: f64,
    /// Its 95 % interval; with failed evaluations it spans both ways of counting them.
    pub interval_95: [f64; 2],
    /// How the interval was made.
    pub interval_method: &'static str,
    /// `(sum |z|)^2 / sum z^2`.
    pub effective_draws: f64,
}

/// An estimate: the mean of a quantity under the target; for a probability under the variables' distributions within the event,
/// for an expectation under them weighted by the integrand's size.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct EstimateOutcome {
    /// The value.
    pub value: f64,
    /// Its standard error.
    pub se: f64,
    /// Its 95 % interval.
    pub interval_95: [f64; 2],
    /// How the interval was made.
    pub interval_method: &'static str,
    /// Independent draws from the target that would do as well.
    pub effective_draws: f64,
    /// Share of the weight where it is undefined; then nothing else is given.
    pub share_undefined: f64,
    /// Quantiles that were asked for.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub quantiles: Vec<QuantileOutcome>,
    /// What the verdict looks at.
    #[serde(skip)]
    pub(super) evenness: Evenness,
    /// Difference of the halves, in standard errors.
    #[serde(skip)]
    pub(super) halves_z: f64,
}

/// A quantile, where it can be given.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct QuantileOutcome {
    /// The share below it.
    pub share: f64,
    /// The quantile; not given where it lies in an open bin.
    pub value: Option<f64>,
    /// Its 95 % interval, the widths of the bins included.
    pub interval_95: Option<[f64; 2]>,
}

/// How evenly an answer is carried.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Evenness {
    pub(super) effective_draws: f64,
    pub(super) largest_share: f64,
    pub(super) tail: TailShape,
}

/// The answer in scaled units, and what it rests on.
#[derive(Debug, Clone, Copy)]
pub(super) struct Main {
    pub(super) mean: StratifiedMean,
    /// Mean of `|z|`.
    pub(super) size: f64,
    pub(super) evenness: Evenness,
    pub(super) weight_variance: f64,
    pub(super) halves_z: f64,
    pub(super) interval: [f64; 2],
    pub(super) method: &'static str,
}

impl Outcome {
    /// What the sums of a job say. It depends on them alone.
    #[must_use]
    pub fn of(job: &Job, sums: &Sums) -> Self {
        let main = Main::of(job, sums);
        let failing = moments::mean(&moments::of_failed(sums));
        let failures = (sums.failed > 0 && job.is_event()).then(|| failures(job, sums, &main));
        let value = (sums.hits > 0).then(|| value(job, &main, failures.as_ref()));
        let estimates: Vec<(String, EstimateOutcome)> = job
            .estimates
            .iter()
            .zip(&sums.estimates)
            .enumerate()
            .map(|(k, (e, s))| (e.name.clone(), estimate(job, sums, k, s)))
            .collect();
        let Verdict { word, checks, reasons, caution } =
            verdict::judge(job, sums, &main, &estimates, value.as_ref(), failures.as_ref());
        let scale = exp(job.log_scale);
        let log_se = main.mean.se / main.mean.mean.abs();
        let log = moments::log_unscaled(job, main.mean.mean.abs());
        Self {
            verdict: word,
            reasons,
            caution,
            draws: sums.draws,
            failed: sums.failed,
            ess_fraction: main.evenness.effective_draws / sums.draws as f64,
            weight_variance: main.weight_variance,
            tail_shape: main.evenness.tail.shape,
            tail_reason: main.evenness.tail.reason,
            largest_share: main.evenness.largest_share,
            log_normaliser: LogOutcome { value: log, se: log_se, interval_95: normal_interval(log, log_se) },
            probability: job.is_event().then_some(value),
            expectation: job.signed().then_some(value),
            no_hit: (job.is_event() && sums.hits == 0).then(|| NoHitOutcome {
                upper_bound: no_hit_bound(sums.nominal as usize),
                nominal_draws: sums.nominal,
            }),
            failures_counted: failures,
            failing: (sums.failed > 0 && (job.is_event() || job.signed()))
                .then_some(Pair { value: failing.mean * scale, se: failing.se * scale }),
            estimates,
            checks,
        }
    }

    /// The answer: the probability or expectation, where there is one; none for a density.
    #[must_use]
    pub fn value(&self) -> Option<&ValueOutcome> {
        self.probability.as_ref().or(self.expectation.as_ref()).and_then(Option::as_ref)
    }
}

impl Main {
    pub(super) fn of(job: &Job, sums: &Sums) -> Self {
        let parts = moments::of_terms(sums);
        let mean = moments::mean(&parts);
        let sizes = moments::total(sums.cells.iter().map(|cell| cell.sizes()));
        let squares = moments::total(sums.strata.iter().map(|s| &s.squares));
        let evenness = Evenness::of(sizes, squares, &sums.largest, sums.hits, job.log_scale);
        let few = !(evenness.effective_draws >= LOG_SCALE_DRAWS);
        let (interval, method) = if job.is_event() && few {
            let top = sums.largest.top();
            (gamma_interval_of(top / sums.draws as f64, sizes / top, squares / top / top), "gamma")
        } else if mean.mean > SIGNED * mean.se && !few {
            (log_interval(mean.mean, mean.se), "log-normal")
        } else {
            (normal_interval(mean.mean, mean.se), "normal")
        };
        let n = sums.draws as f64;
        let weight_variance = (n / evenness.effective_draws - 1.0).max(0.0);
        Self { mean, size: sizes / n, evenness, weight_variance, halves_z: moments::halves_z(&parts), interval, method }
    }
}

impl Evenness {
    fn of(sizes: f64, squares: f64, largest: &super::Largest, draws: u64, log_unit: f64) -> Self {
        let top = largest.top();
        let any = sizes > 0.0;
        Self {
            effective_draws: if any { sizes * sizes / squares } else { 0.0 },
            largest_share: if any { top / sizes } else { 1.0 },
            tail: TailShape::of_largest(largest.sorted(), draws as usize, log_unit),
        }
    }
}

fn value(job: &Job, main: &Main, failures: Option<&FailuresOutcome>) -> ValueOutcome {
    let scale = exp(job.log_scale);
    let mut interval_95 = main.interval.map(|end| end * scale);
    if let Some(counted) = failures {
        let way = |pair: Pair| if pair.value > 0.0 { log_interval(pair.value, pair.se) } else { [0.0; 2] };
        interval_95 = [interval_95[0].min(way(counted.outside)[0]), interval_95[1].max(way(counted.inside)[1])];
    }
    ValueOutcome {
        value: main.mean.mean * scale,
        se: main.mean.se * scale,
        cv: main.mean.se / main.mean.mean.abs(),
        interval_95,
        interval_method: main.method,
        effective_draws: main.evenness.effective_draws,
    }
}

/// Failures and hits exclude each other, so that sums and squares add up, or leave the rest.
fn failures(job: &Job, sums: &Sums, main: &Main) -> FailuresOutcome {
    let scale = exp(job.log_scale);
    let sign = if job.failures_are_inside() { -1.0 } else { 1.0 };
    let (terms, failed) = (moments::of_terms(sums), moments::of_failed(sums));
    let mut other = terms.clone();
    for (part, failed) in other.iter_mut().zip(&failed) {
        part.sum += sign * failed.sum;
        part.square += sign * failed.square;
    }
    let pair = |mean: StratifiedMean| Pair { value: (mean.mean * scale).max(0.0), se: mean.se * scale };
    let (here, other) = (pair(main.mean), pair(moments::mean(&other)));
    if sign < 0.0 {
        FailuresOutcome { outside: other, inside: here }
    } else {
        FailuresOutcome { outside: here, inside: other }
    }
}

fn estimate(job: &Job, sums: &Sums, k: usize, estimate: &EstimateSums) -> EstimateOutcome {
    let weight = moments::total(sums.cells.iter().map(|cell| cell.sizes()));
    let undefined = estimate.undefined.value();
    let evenness =
        Evenness::of(estimate.sizes.value(), estimate.size_squares.value(), &estimate.largest_size, sums.hits, 0.0);
    let tail = TailShape::of_largest(estimate.largest.sorted(), sums.hits as usize, 0.0);
    let evenness = Evenness { tail, ..evenness };
    if undefined > 0.0 || !(weight > 0.0) {
        return EstimateOutcome {
            value: f64::NAN,
            se: f64::NAN,
            interval_95: [f64::NAN; 2],
            interval_method: "not given",
            effective_draws: f64::NAN,
            share_undefined: if weight > 0.0 { undefined / weight } else { 0.0 },
            quantiles: Vec::new(),
            evenness,
            halves_z: f64::NAN,
        };
    }
    let m = moments::total(&estimate.cells) / weight;
    let parts = moments::of_residuals(sums, estimate, m);
    let se = moments::mean(&parts).se / (weight / sums.draws as f64);
    let variance = (estimate.spread.value() / weight - m * m).max(0.0);
    let value = job.estimates[k].centre + m;
    let of_weights = sums.draws as f64 / (1.0 + Main::of(job, sums).weight_variance);
    let quantile = |&share: &f64| {
        let found = estimate.bins.as_ref().and_then(|bins| bins.quantile(&job.estimates[k].borders, share));
        QuantileOutcome { share, value: found.map(|q| q.value), interval_95: found.map(|q| q.interval_95) }
    };
    EstimateOutcome {
        value,
        se,
        interval_95: normal_interval(value, se),
        interval_method: "normal",
        effective_draws: if variance == 0.0 { of_weights } else { variance / se / se },
        share_undefined: 0.0,
        quantiles: job.quantiles.iter().map(quantile).collect(),
        evenness,
        halves_z: moments::halves_z(&parts),
    }
}

/// The running answer with its error and interval, for a line of progress: the log normaliser of a density, else the value.
#[must_use]
pub fn course_point(job: &Job, sums: &Sums) -> (f64, f64, [f64; 2]) {
    let main = Main::of(job, sums);
    if job.is_event() || job.signed() {
        let scale = exp(job.log_scale);
        return (main.mean.mean * scale, main.mean.se * scale, main.interval.map(|end| end * scale));
    }
    let (log, se) = (job.log_scale + ln(main.mean.mean), main.mean.se / main.mean.mean);
    (log, se, normal_interval(log, se))
}

/// The next number of draws after `draws` at which the course of an answer is noted: eight to a power of ten, from 100.
#[must_use]
pub fn course_stop(draws: u64) -> u64 {
    let stop = |k: u32| libm::round(libm::pow(10.0, f64::from(k) / 8.0)) as u64;
    (16..).map(stop).find(|&stop| stop > draws).unwrap_or(u64::MAX)
}

fn by_name<S: Serializer>(estimates: &[(String, EstimateOutcome)], serializer: S) -> Result<S::Ok, S::Error> {
    serializer.collect_map(estimates.iter().map(|(name, estimate)| (name, estimate)))
}

#[cfg(test)]
mod tests {
    use super::super::EstimateJob;
    use super::super::Production;
    use super::super::Sequence;
    use super::*;
    use crate::model::Closure;
    use crate::problem::Aim;
    use crate::problem::Problem;
    use crate::problem::Variable;
    use crate::proposal::Component;
    use crate::proposal::Mixture;
    use crate::weights::LogWeights;
    use crate::weights::Strata;
    use crate::weights::plain_mean;
    use crate::weights::probability_interval;
    use crate::weights::ratio_estimate;
    use crate::weights::score;

    fn mixture() -> Mixture {
        let one = |x: f64, df: f64| Component::new(vec![x, 0.2], &[1.2, 0.3, 0.3, 1.5], df).unwrap();
        Mixture::new(&[0.6, 0.3, 0.1], vec![one(0.0, 7.0), one(1.0, 9.0), one(-1.0, 5.0)]).unwrap()
    }

    fn density() -> Problem {
        let range = |name| Variable::range(name, f64::NEG_INFINITY, f64::INFINITY, 0.0, 1.0);
        let target =
            Closure::new(2, |x: &[f64]| if x[0] > 2.5 { f64::NAN } else { -0.5 * (x[0] * x[0] + x[1] * x[1]) - 40.0 });
        Problem::from_model("A pond", vec![range("a"), range("b")], Aim::Density, Box::new(target))
            .unwrap()
            .with_estimates(
                &["sum", "high"],
                Box::new(Closure::vector(2, 2, |x, out| {
                    out[0] = 1e6 + x[0] + x[1];
                    out[1] = x[1] * x[1];
                })),
            )
            .unwrap()
    }

    fn gates() -> Problem {
        use crate::distribution::Distribution;
        let normal = |name| Variable::random(name, Distribution::new("normal", &[("mean", 0.0), ("sd", 1.0)]).unwrap());
        let margin = Closure::new(2, |x: &[f64]| if x[1] > 2.8 { f64::NAN } else { 2.0 - x[0] - 0.2 * x[1] * x[1] });
        Problem::from_model("Gates", vec![normal("a"), normal("b")], Aim::Probability, Box::new(margin)).unwrap()
    }

    fn job(problem: &Problem, mixture: &Mixture, draws: u64) -> Job {
        let centres = [1e6 + 0.1, 1.0];
        let names = problem.estimate_names();
        let estimates =
            names.into_iter().zip(centres).map(|(name, centre)| EstimateJob { name, centre, borders: Vec::new() });
        Job {
            program: "test".into(),
            title: problem.title().into(),
            aim: problem.aim().word().into(),
            problem: problem.digest(),
            proposal: "none".into(),
            seed: 11,
            stage: 1,
            draws: Some(draws),
            failed: None,
            log_scale: -37.0,
            predicted_ess_fraction: None,
            proposal_verdict: None,
            strata: 1 + Sequence::new(mixture, 0, 0, Some(draws)).strata().into_iter().max().unwrap(),
            quantiles: Vec::new(),
            estimates: estimates.collect(),
        }
    }

    fn close(got: f64, want: f64, relative: f64) {
        assert!((got - want).abs() <= relative * want.abs(), "{got:e} {want:e}");
    }

    /// Sums of 5,000 draws say what the batch formulas say of the same draws kept in memory.
    #[test]
    fn sums_say_what_the_draws_say() {
        let (problem, mixture) = (density(), mixture());
        let job = job(&problem, &mixture, 5000);
        let mut production = Production::new(&problem, &mixture, &job, Sums::new(&job));
        let step = production.advance(0..5000).unwrap();
        let outcome = Outcome::of(&job, production.sums());
        let log: Vec<f64> = step
            .evaluation
            .log_density
            .iter()
            .zip(&step.log_proposal)
            .map(|(t, q)| if t.is_nan() { f64::NEG_INFINITY } else { t - q })
            .collect();
        let labels = Sequence::new(&mixture, job.seed, 1, Some(5000)).labels(0..5000);
        let weights = LogWeights::new(log).unwrap();
        let batch = score(&weights, &labels);
        assert_eq!(outcome.failed as usize, step.evaluation.log_density.iter().filter(|l| l.is_nan()).count());
        assert!(outcome.failed > 10);
        close(outcome.log_normaliser.value, batch.log_normaliser, 1e-13);
        close(outcome.log_normaliser.se, batch.log_normaliser_se, 1e-10);
        close(outcome.ess_fraction, batch.ess_fraction, 1e-12);
        close(outcome.tail_shape, batch.tail.shape, 1e-9);
        close(outcome.largest_share, batch.largest_share, 1e-12);
        let strata = Strata::new(&labels);
        for (k, column) in step.estimates.iter().enumerate() {
            let (batch, own) = (ratio_estimate(&weights, column, &strata), &outcome.estimates[k].1);
            close(own.value, batch.value, 1e-13);
            close(own.se, batch.se, 1e-6);
            close(own.effective_draws, batch.effective_draws, 1e-6);
            close(own.evenness.effective_draws, batch.answer.effective_draws, 1e-9);
            close(own.evenness.largest_share, batch.answer.largest_share, 1e-9);
        }
        let halves = production.sums().cells.iter().map(|c| c.draws).collect::<Vec<_>>();
        assert!(halves.iter().all(|&n| n > 50) && outcome.estimates[0].1.halves_z.abs() < 5.0, "{halves:?}");
    }

    /// A probability with failures: the value, both ways of counting, and the interval are those of the batch formulas.
    #[test]
    fn failures_count_both_ways() {
        let (problem, mixture) = (gates(), mixture());
        for draws in [6000, 60] {
            let mut job = job(&problem, &mixture, draws);
            job.log_scale = -4.0;
            let mut production = Production::new(&problem, &mixture, &job, Sums::new(&job));
            let step = production.advance(0..draws).unwrap();
            let outcome = Outcome::of(&job, production.sums());
            let of = |counts: &dyn Fn(usize) -> bool| -> Vec<f64> {
                (0..draws as usize).map(|i| f64::from(u8::from(counts(i)))).collect()
            };
            let log: Vec<f64> =
                step.evaluation.log_density.iter().zip(&step.log_proposal).map(|(t, q)| t - q).collect();
            let labels = Sequence::new(&mixture, job.seed, 1, Some(draws)).labels(0..draws);
            let weights = LogWeights::new(log).unwrap();
            let strata = if draws > 100 { Strata::new(&labels) } else { Strata::single(draws as usize) };
            let hit = plain_mean(&weights, &of(&|i| step.evaluation.hit[i]), &strata);
            let both =
                plain_mean(&weights, &of(&|i| step.evaluation.hit[i] || step.evaluation.value[i].is_nan()), &strata);
            let value = outcome.value().unwrap();
            close(value.value, hit.value, 1e-12);
            let terms: Vec<f64> = (0..draws as usize)
                .map(|i| if step.evaluation.hit[i] { exp(weights.as_slice()[i]) / draws as f64 } else { 0.0 })
                .collect();
            let (interval, method) = probability_interval(hit.value, value.se, &hit.answer, &terms);
            assert_eq!(value.interval_method, method);
            if draws > 100 {
                let counted = outcome.failures_counted.unwrap();
                close(counted.inside.value, both.value, 1e-12);
                close(counted.inside.se, both.se, 1e-8);
                close(value.interval_95[0], interval[0], 1e-10);
                assert!(value.interval_95[1] > interval[1]);
            }
        }
    }

    #[test]
    fn without_a_draw_nothing_is_said() {
        let (problem, mixture) = (density(), mixture());
        let job = job(&problem, &mixture, 5000);
        let outcome = Outcome::of(&job, &Sums::new(&job));
        assert_eq!((outcome.verdict, outcome.draws), (Word::Unfit, 0));
        assert!(serde_json::to_string(&outcome).unwrap().contains("\"log_normaliser\":{\"value\":null"));
    }

    #[test]
    fn the_course_is_noted_eight_times_to_a_power_of_ten() {
        let mut stops = vec![course_stop(0)];
        while stops.len() < 17 {
            stops.push(course_stop(stops[stops.len() - 1]));
        }
        assert_eq!(stops[..9], [100, 133, 178, 237, 316, 422, 562, 750, 1000]);
        assert_eq!(stops[16], 10_000);
    }
}
