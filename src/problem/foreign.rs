//! What distributions, their parameters and the keys of variables are called elsewhere.

use crate::distribution::Distribution;
use crate::expression::nearest;

/// What the keys that every variable has are called elsewhere.
pub(crate) const COMMON_SYNONYMS: [(&str, &str); 30] = [
    ("width", "spread"),
    ("step", "spread"),
    ("spreads", "spread"),
    ("start", "near"),
    ("init", "near"),
    ("initial", "near"),
    ("guess", "near"),
    ("center", "near"),
    ("centre", "near"),
    ("around", "near"),
    ("bounds", "between"),
    ("limits", "between"),
    ("truncate", "between"),
    ("truncated", "between"),
    ("interval", "range"),
    ("for_each", "each"),
    ("foreach", "each"),
    ("by", "each"),
    ("per", "each"),
    ("group", "each"),
    ("groups", "each"),
    ("units", "unit"),
    ("title", "label"),
    ("name", "label"),
    ("description", "note"),
    ("comment", "note"),
    ("remark", "note"),
    ("dist", "distribution"),
    ("prior", "distribution"),
    ("type", "distribution"),
];

/// What distributions are called elsewhere.
const FOREIGN_FAMILIES: [(&str, &str); 22] = [
    ("gaussian", "normal"),
    ("gauss", "normal"),
    ("norm", "normal"),
    ("log-gaussian", "lognormal"),
    ("lognorm", "lognormal"),
    ("flat", "uniform"),
    ("unif", "uniform"),
    ("rectangular", "uniform"),
    ("exp", "exponential"),
    ("expon", "exponential"),
    ("t", "student-t"),
    ("student", "student-t"),
    ("studentt", "student-t"),
    ("chi2", "chi-squared"),
    ("chisquare", "chi-squared"),
    ("invgamma", "inverse-gamma"),
    ("halfnormal", "half-normal"),
    ("halfcauchy", "half-cauchy"),
    ("extreme-value", "gumbel"),
    ("triangle", "triangular"),
    ("discrete-uniform", "integers"),
    ("randint", "integers"),
];

/// The distribution that is probably meant by a word.
pub(crate) fn meant_family(word: &str) -> Option<&'static str> {
    let plain = word.to_lowercase().replace(['_', ' '], "-");
    let exact = Distribution::NAMES.iter().copied().find(|known| *known == plain);
    let foreign = FOREIGN_FAMILIES.iter().find(|(known, _)| *known == plain).map(|(_, meant)| *meant);
    exact.or(foreign).or_else(|| nearest(word, Distribution::NAMES.iter().copied()))
}

/// What the parameters of the lognormal distribution are called elsewhere: those of the logarithm.
pub(crate) const OF_LOGARITHM: [(&str, &str); 12] = [
    ("mu", "log_mean"),
    ("m", "log_mean"),
    ("meanlog", "log_mean"),
    ("mean_log", "log_mean"),
    ("mulog", "log_mean"),
    ("mu_log", "log_mean"),
    ("sigma", "log_sd"),
    ("s", "log_sd"),
    ("sdlog", "log_sd"),
    ("sd_log", "log_sd"),
    ("sigmalog", "log_sd"),
    ("sigma_log", "log_sd"),
];

/// What keys of `[target]`, `[[correlation]]` and `[tuning]` are called elsewhere.
const FOREIGN_KEYS: [(&str, &str); 39] = [
    ("log_likelihood", "log_factor"),
    ("loglikelihood", "log_factor"),
    ("loglik", "log_factor"),
    ("log_posterior", "log_density"),
    ("log_target", "log_density"),
    ("logp", "log_density"),
    ("log_prob", "log_density"),
    ("failure", "event"),
    ("limit_state", "event"),
    ("condition", "event"),
    ("function", "integrand"),
    ("cost", "integrand"),
    ("constraint", "require"),
    ("constraints", "require"),
    ("requirements", "require"),
    ("goal", "aim"),
    ("kind", "aim"),
    ("variables", "among"),
    ("between", "among"),
    ("names", "among"),
    ("rho", "linear"),
    ("r", "linear"),
    ("pearson", "linear"),
    ("matrix", "linear"),
    ("coefficient", "linear"),
    ("value", "linear"),
    ("spearman", "rank"),
    ("copula", "score"),
    ("samples", "budget"),
    ("n_samples", "budget"),
    ("draws", "budget"),
    ("evaluations", "budget"),
    ("iterations", "rounds"),
    ("n_components", "components"),
    ("random_seed", "seed"),
    ("random_state", "seed"),
    ("proposal", "family"),
    ("cores", "threads"),
    ("workers", "threads"),
];

/// The key among `known` that is probably meant by one that is none of them.
pub(crate) fn meant_key<'k>(key: &str, known: &[&'k str]) -> Option<&'k str> {
    let foreign = FOREIGN_KEYS.iter().filter(|(other, _)| *other == key);
    let mut foreign = foreign.filter_map(|(_, meant)| known.iter().copied().find(|known| known == meant));
    foreign.next().or_else(|| nearest(key, known.iter().copied()))
}

/// The aim that is meant by a word of another trade.
pub(crate) fn meant_aim(word: &str) -> Option<&'static str> {
    Some(match word.to_lowercase().as_str() {
        "posterior" | "evidence" | "inference" | "bayes" | "normalisation" | "normalization" => "density",
        "mean" | "average" | "expected" | "integral" | "risk" => "expectation",
        "failure" | "reliability" | "rare" | "event" | "rare-event" | "rare event" => "probability",
        _ => return None,
    })
}

/// What parameters are called elsewhere.
pub(crate) const SYNONYMS: [(&str, &str); 38] = [
    ("cov", "cv"),
    ("sigma", "sd"),
    ("stdev", "sd"),
    ("std", "sd"),
    ("stddev", "sd"),
    ("sigma", "scale"),
    ("sd", "scale"),
    ("sigma", "log_sd"),
    ("sdlog", "log_sd"),
    ("mu", "mean"),
    ("m", "mean"),
    ("average", "mean"),
    ("s", "sd"),
    ("std_dev", "sd"),
    ("loc", "location"),
    ("mu", "location"),
    ("mean", "location"),
    ("mu", "log_mean"),
    ("meanlog", "log_mean"),
    ("lambda", "rate"),
    ("lambda", "mean"),
    ("beta", "rate"),
    ("alpha", "shape"),
    ("k", "shape"),
    ("alpha", "a"),
    ("beta", "b"),
    ("min", "low"),
    ("max", "high"),
    ("lower", "low"),
    ("upper", "high"),
    ("a", "low"),
    ("b", "high"),
    ("nu", "df"),
    ("mid", "mode"),
    ("peak", "mode"),
    ("most_likely", "mode"),
    ("prob", "p"),
    ("probability", "p"),
];
