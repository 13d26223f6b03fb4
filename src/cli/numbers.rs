//! Numbers for the terminal: no more digits than their errors allow, plain ASCII, so that they can be copied.

use evenpoise::figures::numbers::count as grouped;
use evenpoise::figures::numbers::exponent_of;
use evenpoise::figures::numbers::power_of_ten;

/// What stands where a number is not known.
pub(crate) const UNKNOWN: &str = "not known";
/// Sizes that are written without a power of ten.
const PLAIN: std::ops::RangeInclusive<i32> = -3..=6;
/// Most decimals of a plain number.
const MOST_DECIMALS: i32 = 9;

/// A whole number with commas.
pub(crate) fn count(n: u64) -> String {
    grouped(usize::try_from(n).unwrap_or(usize::MAX))
}

/// `x` with `digits` significant digits.
pub(crate) fn significant(x: f64, digits: i32) -> String {
    if !x.is_finite() {
        return if x.is_nan() { UNKNOWN.to_owned() } else { format!("{x}") };
    }
    if x == 0.0 {
        return "0".to_owned();
    }
    let exponent = exponent_of(x);
    if PLAIN.contains(&exponent) {
        fixed(x, digits - 1 - exponent)
    } else {
        format!("{x:.*e}", (digits - 1).max(0) as usize)
    }
}

/// `x` with at most `digits` significant digits and no zeros that say nothing.
pub(crate) fn trimmed(x: f64, digits: i32) -> String {
    let text = significant(x, digits);
    if !text.contains('.') || text.contains('e') {
        return text;
    }
    text.trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// A rough number: two digits, and zeros.
pub(crate) fn rough(x: f64) -> String {
    let rounded = format!("{x:.1e}").parse().unwrap_or(x);
    trimmed(rounded, 2)
}

/// `x` with that many decimals (fewer than zero: none), commas in its whole part.
fn fixed(x: f64, decimals: i32) -> String {
    let text = format!("{x:.*}", decimals.clamp(0, MOST_DECIMALS) as usize);
    let (sign, digits) = text.strip_prefix('-').map_or(("", text.as_str()), |digits| ("-", digits));
    let (whole, part) = digits.split_once('.').map_or((digits, None), |(whole, part)| (whole, Some(part)));
    let whole = whole.parse().map_or_else(|_| whole.to_owned(), count);
    part.map_or_else(|| format!("{sign}{whole}"), |part| format!("{sign}{whole}.{part}"))
}

/// A value, its error and its interval, all to the error's second digit, under one power of ten where that is shorter.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(crate) struct Measured {
    /// The value.
    pub(crate) value: String,
    /// Its standard error.
    pub(crate) error: String,
    /// Its interval.
    pub(crate) interval: String,
}

/// Writes a value with its standard error and interval.
pub(crate) fn measured(value: f64, se: f64, interval: [f64; 2]) -> Measured {
    if !(value.is_finite() && se.is_finite() && se > 0.0) {
        let error = if se == 0.0 { "0".to_owned() } else { UNKNOWN.to_owned() };
        return Measured { value: significant(value, 6), error, interval: ends(interval, |x| significant(x, 6)) };
    }
    let (size, precision) = (exponent_of(if value == 0.0 { se } else { value }), exponent_of(se) - 1);
    if PLAIN.contains(&size) && -precision <= MOST_DECIMALS {
        let write = |x: f64| fixed(x, -precision);
        return Measured { value: write(value), error: write(se), interval: ends(interval, write) };
    }
    let shift = size.max(precision);
    let write = |x: f64| format!("{}e{shift}", fixed(x / power_of_ten(shift), shift - precision));
    Measured { value: write(value), error: write(se), interval: ends(interval, write) }
}

fn ends(interval: [f64; 2], write: impl Fn(f64) -> String) -> String {
    if interval.iter().any(|end| end.is_nan()) {
        return UNKNOWN.to_owned();
    }
    format!("{} to {}", write(interval[0]), write(interval[1]))
}

/// A share in per cent with three digits.
pub(crate) fn percent(share: f64) -> String {
    if share.is_finite() { format!("{} %", short(100.0 * share)) } else { UNKNOWN.to_owned() }
}

/// Three digits, and no more than two decimals.
fn short(x: f64) -> String {
    if x == 0.0 { "0".to_owned() } else { fixed(x, (2 - exponent_of(x)).clamp(0, 2)) }
}

/// A share in per cent with one decimal.
pub(crate) fn percent_fixed(share: f64) -> String {
    if share.is_finite() { format!("{:.1} %", 100.0 * share) } else { "-".to_owned() }
}

/// Seconds as people say them.
pub(crate) fn duration(seconds: f64) -> String {
    let whole = seconds.round() as u64;
    match whole {
        0..60 => format!("{whole} s"),
        60..3600 => format!("{} min {:02} s", whole / 60, whole % 60),
        3600..3_600_000 => format!("{} h {:02} min", whole / 3600, whole / 60 % 60),
        _ => "over 1,000 h".to_owned(),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn errors_decide_the_digits() {
        for (value, se, [low, high], want) in [
            (1415.317, 2.12, [1411.16, 1419.47], ["1,415.3", "2.1", "1,411.2 to 1,419.5"]),
            (-58.684_03, 0.003_42, [-58.690_7, -58.677_3], ["-58.6840", "0.0034", "-58.6907 to -58.6773"]),
            (3.214e-7, 1.2e-9, [3.19e-7, 3.238e-7], ["3.214e-7", "0.012e-7", "3.190e-7 to 3.238e-7"]),
            (0.0, 0.25, [-0.5, 0.5], ["0.00", "0.25", "-0.50 to 0.50"]),
            (2.5e9, 3.1e8, [1.9e9, 3.1e9], ["2.50e9", "0.31e9", "1.90e9 to 3.10e9"]),
            (12.0, 340.0, [-654.0, 678.0], ["12", "340", "-654 to 678"]),
            (f64::NAN, f64::NAN, [f64::NAN, f64::NAN], [UNKNOWN, UNKNOWN, UNKNOWN]),
            (2.0, 0.0, [2.0, 2.0], ["2.00000", "0", "2.00000 to 2.00000"]),
        ] {
            let got = measured(value, se, [low, high]);
            assert_eq!([got.value.as_str(), got.error.as_str(), got.interval.as_str()], want);
        }
    }

    #[test]
    fn numbers_read_well() {
        assert_eq!(
            (significant(0.0593, 2), significant(1e-9, 2), significant(12_345.6, 3)),
            ("0.059".into(), "1.0e-9".into(), "12,346".into())
        );
        assert_eq!(
            (percent(0.944), percent(0.00018), percent(0.0487)),
            ("94.4 %".into(), "0.02 %".into(), "4.87 %".into())
        );
        assert_eq!(
            (duration(3.4), duration(75.0), duration(7_320.0)),
            ("3 s".into(), "1 min 15 s".into(), "2 h 02 min".into())
        );
    }
}
