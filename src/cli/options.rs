//! The keys of `[tuning]` as options, which win over the file.

use super::ending::Misuse;
use evenpoise::problem::CoordinateChoice;
use evenpoise::problem::Family;
use evenpoise::problem::Method;
use evenpoise::problem::Structure;
use evenpoise::problem::TuningKeys;
use evenpoise::production::Shard;
use evenpoise::store::MOST_SHARDS;
use std::str::FromStr;

/// Everything about a tuning that a problem file may say in `[tuning]`; what is said here wins.
#[derive(Debug, clap::Args)]
#[command(next_help_heading = "Tuning (each wins over the key of the same name in the problem file)")]
pub(crate) struct TuningOptions {
    /// Evaluations in all: survey, rounds, confirm and report draws [default: 20000].
    #[arg(long, value_name = "N", value_parser = budget)]
    pub(crate) budget: Option<u64>,
    /// Draws of a round, or auto.
    #[arg(long, value_name = "N", value_parser = setting(count_from::<10>))]
    pub(crate) round_draws: Option<Setting<u64>>,
    /// Rounds, at most [default: 20].
    #[arg(long, value_name = "N", value_parser = count_from::<1>)]
    pub(crate) rounds: Option<u64>,
    /// Share of the budget for the report draws, between 0 and 1, or auto.
    #[arg(long, value_name = "SHARE", value_parser = setting(|text| number(text, "between 0 and 1", |x| x > 0.0 && x < 1.0)))]
    pub(crate) report_share: Option<Setting<f64>>,
    /// Family of the components: gaussian, student-t or auto.
    #[arg(long, value_name = "WORD", value_parser = setting(family))]
    pub(crate) family: Option<Setting<Family>>,
    /// Degrees of freedom of the components, above 0, or auto.
    #[arg(long, value_name = "NUMBER", value_parser = setting(|text| number(text, "above 0", |x| x > 0.0 && x.is_finite())))]
    pub(crate) df: Option<Setting<f64>>,
    /// Number of components, or auto.
    #[arg(long, value_name = "N", value_parser = setting(count_from::<1>))]
    pub(crate) components: Option<Setting<u64>>,
    /// Structure of the scales: full, diagonal, directions or auto.
    #[arg(long, value_name = "WORD", value_parser = setting(structure))]
    pub(crate) structure: Option<Setting<Structure>>,
    /// How refits are made: cross-entropy, moments, variance or auto.
    #[arg(long, value_name = "WORD", value_parser = setting(method))]
    pub(crate) method: Option<Setting<Method>>,
    /// Coordinates of the proposal: standard-normal, natural or auto.
    #[arg(long, value_name = "WORD", value_parser = setting(coordinates))]
    pub(crate) coordinates: Option<Setting<CoordinateChoice>>,
    /// Share of the wide start (density) or of the nominal density (otherwise) kept, from 0 to below 1, or auto.
    #[arg(long, value_name = "SHARE", value_parser = setting(|text| number(text, "from 0 to below 1", |x| (0.0..1.0).contains(&x))))]
    pub(crate) defensive: Option<Setting<f64>>,
    /// Seed of every draw; the same seed writes the same bytes [default: 1].
    #[arg(long, value_name = "N")]
    pub(crate) seed: Option<u64>,
    /// Threads, or auto; results do not depend on their number.
    #[arg(long, value_name = "N", value_parser = setting(count_from::<1>))]
    pub(crate) threads: Option<Setting<u64>>,
}

/// A value, or "auto" in place of what the file says.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Setting<T> {
    /// Chosen by the program.
    Auto,
    /// As given.
    Of(T),
}

impl TuningOptions {
    /// The keys of a file with these in their place. Threads stay as they are: they change no result, and so are no part
    /// of a run's problem.
    pub(crate) fn over(&self, keys: &TuningKeys) -> TuningKeys {
        // Gaussian components have no degrees of freedom, whatever the file says about those of others.
        let gaussian = self.family == Some(Setting::Of(Family::Gaussian));
        TuningKeys {
            budget: self.budget.or(keys.budget),
            extended_from: keys.extended_from.clone(),
            round_draws: chosen(self.round_draws, keys.round_draws),
            rounds: self.rounds.or(keys.rounds),
            report_share: chosen(self.report_share, keys.report_share),
            family: chosen(self.family, keys.family),
            df: chosen(self.df, keys.df.filter(|_| !gaussian)),
            components: chosen(self.components, keys.components),
            structure: chosen(self.structure, keys.structure),
            method: chosen(self.method, keys.method),
            coordinates: chosen(self.coordinates, keys.coordinates),
            defensive: chosen(self.defensive, keys.defensive),
            threads: keys.threads,
            seed: self.seed.or(keys.seed),
        }
    }

    /// Threads to work on; none where the machine decides.
    pub(crate) fn threads(&self, keys: &TuningKeys) -> Option<u64> {
        chosen(self.threads, keys.threads)
    }
}

/// Refuses degrees of freedom for Gaussian components, wherever each was said.
pub(crate) fn check(keys: &TuningKeys) -> Result<(), Misuse> {
    if keys.family == Some(Family::Gaussian) && keys.df.is_some() {
        let advice = "Gaussian components have no degrees of freedom; drop --df, or say --family student-t";
        return Err(Misuse(advice.to_owned()));
    }
    Ok(())
}

fn chosen<T>(over: Option<Setting<T>>, key: Option<T>) -> Option<T> {
    match over {
        None => key,
        Some(Setting::Auto) => None,
        Some(Setting::Of(value)) => Some(value),
    }
}

fn setting<T>(read: fn(&str) -> Result<T, String>) -> impl Fn(&str) -> Result<Setting<T>, String> + Clone {
    move |text| if text == "auto" { Ok(Setting::Auto) } else { read(text).map(Setting::Of) }
}

/// A whole number, also as `2e4`.
pub(crate) fn count(text: &str) -> Result<u64, String> {
    let whole = |x: f64| (0.0..=9_007_199_254_740_992.0).contains(&x) && x.floor() == x;
    let rounded = || f64::from_str(text).ok().filter(|&x| whole(x)).map(|x| x as u64);
    text.parse().ok().or_else(rounded).ok_or_else(|| "expected a whole number, as 20000 or 2e4".to_owned())
}

pub(crate) fn count_from<const LEAST: u64>(text: &str) -> Result<u64, String> {
    let n = count(text)?;
    if n >= LEAST { Ok(n) } else { Err(format!("expected {LEAST} or more")) }
}

/// `3/64`: part 3 of 64.
pub(crate) fn shard(text: &str) -> Result<Shard, String> {
    let expected = || format!("expected I/N with I from 1 to N, as 3/64, and N at most {MOST_SHARDS}");
    let (index, of) = text.split_once('/').ok_or_else(expected)?;
    let shard = index.parse().ok().zip(of.parse().ok()).map(|(index, of)| Shard { index, of });
    shard.filter(|s| (1..=s.of).contains(&s.index) && s.of <= MOST_SHARDS).ok_or_else(expected)
}

/// `5%` or `0.05`, above zero and below one.
pub(crate) fn share(text: &str) -> Result<f64, String> {
    let number = match text.strip_suffix('%') {
        Some(number) => number.trim().parse::<f64>().map(|x| x / 100.0),
        None => text.parse(),
    };
    number.ok().filter(|&x| x > 0.0 && x < 1.0).ok_or_else(|| "expected a share above 0, as 5% or 0.05".to_owned())
}

/// Seconds: `90`, `90s`, `15min`, `2h`.
pub(crate) fn seconds(text: &str) -> Result<f64, String> {
    let units = [("min", 60.0), ("h", 3600.0), ("s", 1.0)];
    let unit = units.iter().find_map(|(unit, each)| text.strip_suffix(unit).map(|number| (number, *each)));
    let (number, each) = unit.unwrap_or((text, 1.0));
    let seconds = number.trim().parse::<f64>().ok().map(|x| x * each).filter(|&x| x > 0.0 && x.is_finite());
    seconds.ok_or_else(|| "expected a time, as 90s, 15min or 2h".to_owned())
}

fn budget(text: &str) -> Result<u64, String> {
    count_from::<100>(text)
}

fn number(text: &str, allowed: &str, holds: fn(f64) -> bool) -> Result<f64, String> {
    let expected = || format!("expected a number {allowed}");
    f64::from_str(text).ok().filter(|&x| holds(x)).ok_or_else(expected)
}

fn word<T: Copy>(text: &str, words: &[(&str, T)]) -> Result<T, String> {
    let known: Vec<&str> = words.iter().map(|(word, _)| *word).collect();
    let found = words.iter().find(|(word, _)| *word == text).map(|(_, value)| *value);
    found.ok_or_else(|| format!("expected {} or auto", known.join(", ")))
}

fn family(text: &str) -> Result<Family, String> {
    word(text, &[("gaussian", Family::Gaussian), ("student-t", Family::StudentT)])
}

fn structure(text: &str) -> Result<Structure, String> {
    let words = [("full", Structure::Full), ("diagonal", Structure::Diagonal), ("directions", Structure::Directions)];
    word(text, &words)
}

fn method(text: &str) -> Result<Method, String> {
    let words = [("cross-entropy", Method::CrossEntropy), ("moments", Method::Moments), ("variance", Method::Variance)];
    word(text, &words)
}

fn coordinates(text: &str) -> Result<CoordinateChoice, String> {
    word(text, &[("standard-normal", CoordinateChoice::StandardNormal), ("natural", CoordinateChoice::Natural)])
}
