//! The examples end as they promise: sound, with even weights, and with what they are about.

// Helpers of tests.
#![allow(clippy::unwrap_used)]

use evenpoise::adapt::{Settings, Silent, Tuning, tune};
use evenpoise::problem::Problem;
use evenpoise::weights::verdict::Word;
use std::path::Path;

fn tuned(name: &str, seed: u64) -> Tuning {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("examples").join(name);
    let problem = Problem::read(&path).unwrap_or_else(|errors| panic!("{}", errors.render(false)));
    let settings = Settings { budget: 20_000, seed, ..Settings::from_keys(problem.tuning()) };
    let tuning = tune(&problem, &settings, &mut Silent).unwrap();
    assert_eq!(tuning.verdict.word, Word::Sound, "{name}: {:?}", tuning.verdict.reasons);
    let fraction = tuning.score.as_ref().unwrap().ess_fraction;
    assert!(fraction >= 0.8, "{name}: ESS fraction {fraction}");
    tuning
}

fn estimate(tuning: &Tuning, name: &str) -> (f64, f64) {
    let (_, estimate) = tuning.estimates.iter().find(|(n, _)| n == name).unwrap();
    (estimate.value, estimate.se)
}

/// The dye was made with 0.44 m/s over 850 m: 1932 s; the readings put the travel time within a few per cent of that.
#[test]
fn the_dye_test_is_sound() {
    let tuning = tuned("tracer.toml", 1);
    assert_eq!(tuning.survey.modes.len(), 1);
    let (time, se) = estimate(&tuning, "travel_time");
    assert!((time - 1932.0).abs() < 0.05 * 1932.0 && se < 2.0, "{time} +- {se}");
}

/// The leak was put north of the line. Its mirror image holds nearly half of the probability.
#[test]
fn the_leak_has_both_places() {
    let tuning = tuned("leak.toml", 1);
    assert_eq!(tuning.survey.modes.len(), 2);
    let norths: Vec<f64> = tuning.survey.modes.iter().map(|mode| mode.location[1]).collect();
    assert!(norths.iter().any(|y| *y > 5.0) && norths.iter().any(|y| *y < -5.0), "{norths:?}");
    let (share, se) = estimate(&tuning, "on_the_north_side");
    assert!(share > 0.3 && share < 0.7 && se < 0.01, "{share} +- {se}");
}

/// The curve was made with 11.5 (3.2 - 0.31)^1.62 = 64.2 m3/s at the flood stage.
#[test]
fn the_rating_curve_is_sound() {
    let tuning = tuned("rating.toml", 1);
    let (flow, se) = estimate(&tuning, "flood_flow");
    assert!((flow - 64.2).abs() < 0.1 * 64.2 && se < 0.2, "{flow} +- {se}");
}

/// What the README shows to be typed or written is there.
#[test]
fn the_readme_says_what_is_so() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let readme = std::fs::read_to_string(root.join("README.md")).unwrap();
    let example = readme.split_once("```toml\n").unwrap().1.split_once("```").unwrap().0;
    let problem =
        Problem::parse(example, "README.md", root).unwrap_or_else(|errors| panic!("{}", errors.render(false)));
    let tuning = tune(&problem, &Settings::new(5000, 1), &mut Silent).unwrap();
    assert!(tuning.verdict.word < Word::Unfit, "{:?}", tuning.verdict.reasons);
    let mut links = 0;
    for piece in readme.split("](").skip(1) {
        let target = piece.split_once(')').unwrap().0;
        assert!(root.join(target).exists(), "{target}");
        links += 1;
    }
    assert!(links > 5);
    for named in readme.split_whitespace().filter(|word| word.trim_matches('`').starts_with("examples/")) {
        let path = named.trim_matches(|letter: char| !letter.is_alphanumeric());
        assert!(path.ends_with(".run") || root.join(path).exists(), "{path}");
    }
}
