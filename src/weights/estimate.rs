//! Estimates from weighted draws, with their errors and what they rest on.

use super::LogWeights;
use super::Strata;
use super::TailShape;
use super::interval::{LOG_NORMAL, NORMAL, log_interval, normal_interval};
use crate::numeric::exp;
use serde::Serialize;

/// An estimate. NaN (`null` in JSON) stands for "not given": an estimate that is undefined where there is weight has a
/// [`share_undefined`](Self::share_undefined) and nothing else.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Estimate {
    /// The value.
    pub value: f64,
    /// Its standard error: stratified, by the delta method.
    pub se: f64,
    /// 95 % interval.
    pub interval_95: [f64; 2],
    /// How the interval was made.
    pub interval_method: &'static str,
    /// Variance of the quantity divided by the squared error: the number of independent draws from the target (for a
    /// plain mean: from the nominal density) that would do as well.
    pub effective_draws: f64,
    /// Share of the weight (of the draws, for a plain mean) where the quantity is undefined.
    pub share_undefined: f64,
    /// What the answer rests on.
    pub answer: Answer,
}

/// How evenly an answer `sum_i z_i` is carried by its draws.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Answer {
    /// `(sum |z|)^2 / sum z^2`, in draws.
    pub effective_draws: f64,
    /// `max |z| / sum |z|`.
    pub largest_share: f64,
    /// Tail shape of what makes the error: of `|f - mean| w` for a ratio, of `|z|` for a plain mean.
    pub tail: TailShape,
}

impl Answer {
    /// What an answer rests on whose draws contribute `contributions`, its error made by `residuals` (both in any unit).
    /// With no contribution at all: no effective draw, and one draw could be everything.
    #[must_use]
    pub fn of(contributions: &[f64], residuals: &[f64]) -> Self {
        let sizes = |values: &[f64]| -> (Vec<f64>, f64) {
            let largest = values.iter().fold(0.0_f64, |largest, value| largest.max(value.abs()));
            (values.iter().map(|value| value.abs() / largest).collect(), largest)
        };
        let (relative, largest) = sizes(contributions);
        let (mut effective_draws, mut largest_share) = (0.0, 1.0);
        if largest > 0.0 {
            let sum: f64 = relative.iter().sum();
            effective_draws = sum * sum / relative.iter().map(|z| z * z).sum::<f64>();
            largest_share = 1.0 / sum;
        }
        let (residuals, unit) = sizes(residuals);
        Self { effective_draws, largest_share, tail: TailShape::of(&residuals, crate::numeric::ln(unit)) }
    }
}

/// Self-normalised ratio `sum w f / sum w`, the mean of `f` under the target, one value of `f` a draw.
///
/// With `W = w / mean w` the error is that of the mean of `W (f - value)` (delta method), stratified. A value that is
/// not finite counts as undefined; where the weight is zero it does not matter.
///
/// # Panics
/// When weights, values and strata differ in number.
///
/// # Source
/// Hesterberg, Technometrics 37 (1995) 185-194, for the delta-method error of the ratio.
///
/// ```
/// use evenpoise::weights::{LogWeights, Strata, ratio_estimate};
/// let weights = LogWeights::new(vec![3.0_f64.ln(), 0.0, 0.0, f64::NEG_INFINITY])?;
/// let estimate = ratio_estimate(&weights, &[1.0, 2.0, 5.0, f64::NAN], &Strata::single(4));
/// assert!((estimate.value - 2.0).abs() < 1e-15);
/// # Ok::<(), evenpoise::weights::WeightError>(())
/// ```
#[must_use]
pub fn ratio_estimate(weights: &LogWeights, values: &[f64], strata: &Strata) -> Estimate {
    assert_eq!(values.len(), weights.len(), "one value a draw");
    let sum: f64 = weights.relative().iter().sum();
    let weighted = || weights.relative().iter().zip(values).filter(|(v, _)| **v > 0.0);
    let undefined: f64 = weighted().filter(|(_, f)| !f.is_finite()).map(|(v, _)| v).sum();
    if undefined > 0.0 {
        return not_given(undefined / sum);
    }
    let value = weighted().map(|(v, f)| v / sum * f).sum::<f64>();
    let variance = weighted().map(|(v, f)| v / sum * ((f - value) * (f - value))).sum::<f64>();
    let each = |of: &dyn Fn(f64) -> f64| -> Vec<f64> {
        let kernel = |(v, f): (&f64, &f64)| if *v > 0.0 { v * of(*f) } else { 0.0 };
        weights.relative().iter().zip(values).map(kernel).collect()
    };
    let residuals = each(&|f| f - value);
    let se = strata.mean(&residuals).se / (sum / weights.len() as f64);
    // A constant is known exactly; it is worth what the weights are.
    let effective_draws = if variance == 0.0 { weights.ess() } else { variance / se / se };
    Estimate {
        value,
        se,
        interval_95: normal_interval(value, se),
        interval_method: NORMAL,
        effective_draws,
        share_undefined: 0.0,
        answer: Answer::of(&each(&|f| f), &residuals),
    }
}

/// Plain mean of `z = f w`: unbiased for the integral of `f` against the (normalised) nominal density.
///
/// The interval is normal on the log scale when no `z` is negative, else normal. A value of `f` that is not finite at
/// a draw of some weight leaves the estimate undefined.
///
/// # Panics
/// When weights, values and strata differ in number.
#[must_use]
pub fn plain_mean(weights: &LogWeights, values: &[f64], strata: &Strata) -> Estimate {
    assert_eq!(values.len(), weights.len(), "one value a draw");
    let terms: Vec<f64> =
        weights.relative().iter().zip(values).map(|(v, f)| if *v > 0.0 { v * f } else { 0.0 }).collect();
    let n_undefined = terms.iter().filter(|z| !z.is_finite()).count();
    if n_undefined > 0 {
        return not_given(n_undefined as f64 / terms.len() as f64);
    }
    let mean = strata.mean(&terms);
    let unit = exp(weights.largest());
    let (value, se) = (mean.mean * unit, mean.se * unit);
    let positive = mean.mean > 0.0 && terms.iter().all(|&z| z >= 0.0);
    let squares = |(v, f): (&f64, &f64)| if *v > 0.0 { v * ((f - value) * (f - value)) } else { 0.0 };
    let variance = unit * (weights.relative().iter().zip(values).map(squares).sum::<f64>() / terms.len() as f64);
    Estimate {
        value,
        se,
        interval_95: if positive { log_interval(value, se) } else { normal_interval(value, se) },
        interval_method: if positive { LOG_NORMAL } else { NORMAL },
        effective_draws: if variance == 0.0 { weights.ess() } else { variance / se / se },
        share_undefined: 0.0,
        answer: Answer::of(&terms, &terms),
    }
}

/// Nothing but the share where the quantity is undefined.
fn not_given(share_undefined: f64) -> Estimate {
    Estimate {
        value: f64::NAN,
        se: f64::NAN,
        interval_95: [f64::NAN; 2],
        interval_method: "not given",
        effective_draws: f64::NAN,
        share_undefined,
        answer: Answer { effective_draws: f64::NAN, largest_share: f64::NAN, tail: TailShape::of(&[], 0.0) },
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::numeric::ln;
    use crate::numeric::normal;
    use crate::numeric::{Purpose, stream};

    fn of(weights: &[f64]) -> LogWeights {
        LogWeights::new(weights.iter().map(|w| ln(*w)).collect()).unwrap()
    }

    /// Source: NumPy 2.4.6. w = [1,2,3,4], f = [2,-1,0,5]; m = (w*f).sum()/w.sum(); r = w/w.mean()*(f-m);
    /// se = r.std(ddof=1)/2; (w*(f-m)**2).sum()/w.sum()/se**2; z = abs(w*f): z.sum()**2/(z*z).sum(), z.max()/z.sum().
    #[test]
    fn ratio_matches_numpy() {
        for shift in [0.0, 5000.0, -5000.0] {
            let log = [1.0_f64, 2.0, 3.0, 4.0].iter().map(|w| ln(*w) + shift).collect();
            let got = ratio_estimate(&LogWeights::new(log).unwrap(), &[2.0, -1.0, 0.0, 5.0], &Strata::single(4));
            let bound = if shift == 0.0 { 1e-14 } else { 1e-11 };
            for (got, want) in [
                (got.value, 2.0),
                (got.se, 1.697_056_274_847_714_3),
                (got.effective_draws, 2.291_666_666_666_666),
                (got.answer.effective_draws, 1.411_764_705_882_353),
                (got.answer.largest_share, 5.0 / 6.0),
            ] {
                assert!((got - want).abs() <= bound * want, "shift {shift}: {got} against {want}");
            }
            assert_eq!(got.interval_method, NORMAL);
        }
    }

    /// Source: NumPy 2.4.6. z = w*f with w = [.5, .25, 1, .25], f = [1, 0, 2, 4]; z.mean(); z.std(ddof=1)/2;
    /// (w*(f-z.mean())**2).mean()/se**2; m*exp(1.959963984540054*se/m).
    #[test]
    fn plain_mean_matches_numpy() {
        let got = plain_mean(&of(&[0.5, 0.25, 1.0, 0.25]), &[1.0, 0.0, 2.0, 4.0], &Strata::single(4));
        for (got, want) in [
            (got.value, 0.875),
            (got.se, 0.426_956_281_914_983_25),
            (got.effective_draws, 5.357_142_857_142_858),
            (got.interval_95[1], 2.276_941_522_924_441),
        ] {
            assert!((got - want).abs() <= 1e-14 * want, "{got} against {want}");
        }
        assert_eq!(got.interval_method, LOG_NORMAL);
        let signed = plain_mean(&of(&[1.0, 1.0, 1.0]), &[-1.0, 0.0, 2.0], &Strata::single(3));
        assert_eq!(signed.interval_method, NORMAL);
        assert!((signed.interval_95[0] + signed.interval_95[1] - 2.0 * signed.value).abs() < 1e-15);
    }

    #[test]
    fn undefined_values_count_only_where_there_is_weight() {
        let weights = LogWeights::new(vec![0.0, 0.0, f64::NEG_INFINITY, 0.0]).unwrap();
        let strata = Strata::single(4);
        assert!(ratio_estimate(&weights, &[1.0, 2.0, f64::NAN, 3.0], &strata).value == 2.0);
        assert!(plain_mean(&weights, &[1.0, 2.0, f64::INFINITY, 3.0], &strata).value == 1.5);
        let undefined = ratio_estimate(&weights, &[1.0, f64::NAN, 0.0, 3.0], &strata);
        assert!(undefined.value.is_nan() && undefined.interval_95[0].is_nan());
        assert!((undefined.share_undefined - 1.0 / 3.0).abs() < 1e-15);
        assert_eq!(plain_mean(&weights, &[1.0, f64::NAN, 0.0, 3.0], &strata).share_undefined, 0.25);
    }

    #[test]
    fn constants_are_known_and_nothing_is_carried_by_nothing() {
        let weights = of(&[1.0, 2.0, 3.0]);
        let constant = ratio_estimate(&weights, &[4.0; 3], &Strata::single(3));
        assert_eq!((constant.value, constant.se, constant.effective_draws), (4.0, 0.0, weights.ess()));
        let none = plain_mean(&weights, &[0.0; 3], &Strata::single(3));
        assert_eq!((none.value, none.answer.effective_draws, none.answer.largest_share), (0.0, 0.0, 1.0));
    }

    /// Target N(0, 1) under N(0, 1.3^2), mean of x^2 (ratio) and of exp(x/2) (plain, exp(1/8)), n = 1,500, 1,000
    /// repetitions: 95 % intervals cover 92.5 to 97.1 % (3.2 binomial standard errors, false alarm 1.4e-3 each).
    #[test]
    fn intervals_cover() {
        let (s, n) = (1.3_f64, 1500);
        let truth = libm::exp(0.125);
        let (mut ratio, mut plain) = (0, 0);
        for repetition in 0..1000 {
            let mut rng = stream(31, Purpose::Trial, repetition, 0);
            let x: Vec<f64> = (0..n).map(|_| s * normal::draw(&mut rng)).collect();
            let log = x.iter().map(|x| ln(s) - 0.5 * x * x * (1.0 - 1.0 / (s * s))).collect();
            let weights = LogWeights::new(log).unwrap();
            let squares: Vec<f64> = x.iter().map(|x| x * x).collect();
            let [low, high] = ratio_estimate(&weights, &squares, &Strata::single(n)).interval_95;
            ratio += i32::from(low <= 1.0 && 1.0 <= high);
            let grown: Vec<f64> = x.iter().map(|x| libm::exp(0.5 * x)).collect();
            let [low, high] = plain_mean(&weights, &grown, &Strata::single(n)).interval_95;
            plain += i32::from(low <= truth && truth <= high);
        }
        assert!((925..=971).contains(&ratio), "ratio: {ratio} of 1000");
        assert!((925..=971).contains(&plain), "plain: {plain} of 1000");
    }
}
