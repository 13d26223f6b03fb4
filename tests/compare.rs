//! Which tails a comparison recommends where the answer is known, and what it may spend.
#![allow(clippy::unwrap_used)]

use evenpoise::BoxError;
use evenpoise::adapt::compare::{Comparison, Kind, Tails, Wanted, compare};
use evenpoise::adapt::{Answers, Batch, Observer, Settings, Silent, TuneError};
use evenpoise::model::Closure;
use evenpoise::problem::{Aim, Problem, Variable};

/// A Student-t density in two dimensions; infinite `df`: Gaussian.
fn target(df: f64) -> Problem {
    let density = move |x: &[f64]| {
        let square = x[0] * x[0] + (x[1] - 0.5 * x[0]) * (x[1] - 0.5 * x[0]);
        if df.is_finite() { -0.5 * (df + 2.0) * libm::log1p(square / df) } else { -0.5 * square }
    };
    let line = |name: &str| Variable::range(name, f64::NEG_INFINITY, f64::INFINITY, 0.5, 2.0);
    let model = Closure::new(2, density);
    Problem::from_model("tails", vec![line("a"), line("b")], Aim::Density, Box::new(model)).unwrap()
}

fn wanted(budget: u64, seed: u64) -> Wanted {
    Wanted { settings: Settings::new(budget, seed), df: vec![], given: vec![] }
}

fn recommended(df: f64, budget: u64) -> Vec<Comparison> {
    let problem = target(df);
    (1..=6).map(|seed| compare(&problem, &wanted(budget, seed), &mut Silent).unwrap()).collect()
}

fn count(comparisons: &[Comparison], tails: Tails) -> usize {
    comparisons.iter().filter(|c| c.recommendation.tails == tails).count()
}

/// Six seeds each. Were the right answer given with chance .85 (17 of 20), fewer than four of six would be right with chance .047
/// (binomial); the seeds are fixed, so nothing is left to chance. The wrong answer never comes.
#[test]
fn known_tails_are_recommended_and_never_the_opposite() {
    let heavy = recommended(3.0, 12_000);
    assert!(count(&heavy, Tails::Heavy) >= 4, "{:?}", sentences(&heavy));
    assert_eq!(count(&heavy, Tails::Light), 0, "{:?}", sentences(&heavy));
    for one in heavy.iter().filter(|c| c.recommendation.tails == Tails::Heavy) {
        let said = &one.recommendation.sentence;
        assert!(
            said.contains("Gaussian") && (said.contains("tail shape") || said.contains("ESS fraction is")),
            "{said}"
        );
    }
    let light = recommended(f64::INFINITY, 12_000);
    assert!(count(&light, Tails::Light) >= 4, "{:?}", sentences(&light));
    assert_eq!(count(&light, Tails::Heavy), 0, "{:?}", sentences(&light));
}

fn sentences(comparisons: &[Comparison]) -> Vec<&str> {
    comparisons.iter().map(|c| c.recommendation.sentence.as_str()).collect()
}

/// Counts the points that are evaluated.
#[derive(Default)]
struct Counter {
    points: u64,
    turns: usize,
}

impl Observer for Counter {
    fn evaluated(&mut self, batch: &Batch, _answers: &Answers) -> Result<(), BoxError> {
        assert_eq!(batch.first, self.points, "evaluations are numbered through");
        self.points += batch.points.len() as u64;
        Ok(())
    }

    fn contestant(&mut self, _name: &str) {
        self.turns += 1;
    }
}

#[test]
fn evaluations_are_counted_once_and_stay_within_the_budget() {
    let problem = target(5.0);
    let tuned = evenpoise::adapt::tune(&problem, &Settings::new(1500, 4), &mut Silent).unwrap().chosen;
    let wishes = Wanted { df: vec![6.0], given: vec![("earlier.run".into(), tuned)], ..wanted(8000, 2) };
    let mut counter = Counter::default();
    let comparison = compare(&problem, &wishes, &mut counter).unwrap();
    assert_eq!(comparison.evaluations, counter.points);
    // Fresh draws are shared out evenly, so fewer than the number of contestants remain.
    assert!(counter.points <= 8000 && counter.points > 8000 - 5, "{}", counter.points);
    let kinds: Vec<Kind> = comparison.contestants.iter().map(|c| c.kind).collect();
    assert_eq!(kinds, [Kind::Gaussian, Kind::StudentT, Kind::FixedDf, Kind::Moments, Kind::Given]);
    assert_eq!(counter.turns, 4 + 5);
    assert_eq!((comparison.contestants[2].df, comparison.differences.len()), (6.0, 4));
    assert!(comparison.survey_evaluations > 0);
    // Three tunings did not pay for the survey again.
    let had: u64 = comparison.contestants.iter().map(|c| c.tuning_evaluations).sum();
    assert_eq!(had - 3 * comparison.survey_evaluations, comparison.tuning_evaluations);
    for contestant in &comparison.contestants {
        let merits = &contestant.merits;
        let (e, d) = (merits.ess_fraction, merits.draws_for_one_percent);
        assert!(e.low <= e.value && e.value <= e.high, "{}", contestant.name);
        assert!(d.low < d.high && d.value > 0.0, "{}", contestant.name);
    }
}

#[test]
fn the_same_wishes_give_the_same_bits_on_any_number_of_threads() {
    let problem = target(4.0);
    let on = |threads: usize| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| compare(&problem, &wanted(6000, 3), &mut Silent).unwrap())
    };
    let (a, b) = (on(1), on(3));
    assert_eq!(a.recommendation, b.recommendation);
    assert_eq!(a.differences, b.differences);
    for (a, b) in a.contestants.iter().zip(&b.contestants) {
        assert_eq!(a.draws.log_weights, b.draws.log_weights);
    }
}

#[test]
fn a_budget_too_small_names_one_that_is_enough() {
    let problem = target(4.0);
    let error = compare(&problem, &wanted(500, 1), &mut Silent).unwrap_err();
    let TuneError::Budget { least, .. } = error else { panic!("{error}") };
    assert!(compare(&problem, &wanted(least, 1), &mut Silent).is_ok());
    assert!(matches!(compare(&problem, &wanted(least - 10, 1), &mut Silent), Err(TuneError::Budget { .. })));
}

/// A normal variable above 3: the probability is 1.349898e-3 (SciPy 1.17.1, scipy.stats.norm.sf(3)), so plain draws have that ESS
/// fraction. Its error is resampled; five times the half-width of the 95 % interval is ten standard errors.
#[test]
fn plain_draws_are_the_yardstick_of_a_probability() {
    let text = "title = \"Crest (invented)\"\n[variables]\nlevel = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n\
                wave = { distribution = \"normal\", mean = 0.0, sd = 1.0 }\n[target]\naim = \"probability\"\nevent = \"level > 3\"\n";
    let problem = Problem::parse(text, "crest.toml", std::path::Path::new(".")).unwrap();
    let comparison = compare(&problem, &wanted(4000, 1), &mut Silent).unwrap();
    let plain = comparison.yardstick.unwrap().ess_fraction;
    assert!((plain.value - 1.349_898e-3).abs() < 2.5 * (plain.high - plain.low), "{plain:?}");
    assert!(comparison.contestants.iter().any(|c| c.kind == Kind::Tuned));
    assert!(comparison.contestants.iter().all(|c| c.merits.ess_fraction.value > 10.0 * plain.value));
    assert!(comparison.evaluations <= 4000);
}
