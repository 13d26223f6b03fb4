//! Numbers as the page prints them: no more digits than their errors allow.

use crate::figures::numbers::{exponent_of, fixed, fixed_grouped, power_of_ten, significant, ten_to};

/// What stands where a number is not known.
pub(crate) const UNKNOWN: &str = "not known";

/// What stands in a column where there is no number.
pub(crate) const NOTHING: &str = "–";

/// A whole number with commas.
pub(crate) fn count(n: u64) -> String {
    crate::figures::numbers::count(usize::try_from(n).unwrap_or(usize::MAX))
}

/// Four digits.
pub(crate) fn number(x: f64) -> String {
    trimmed(x, 4)
}

/// Three digits.
pub(crate) fn short(x: f64) -> String {
    trimmed(x, 3)
}

fn trimmed(x: f64, digits: usize) -> String {
    if x.is_nan() {
        return UNKNOWN.to_owned();
    }
    let text = significant(x, digits);
    let plain = text.contains('.') && !text.contains('×');
    if plain { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

/// A share in per cent.
pub(crate) fn share(x: f64) -> String {
    if x.is_nan() { UNKNOWN.to_owned() } else { format!("{} %", trimmed(100.0 * x, 3)) }
}

/// A share in per cent with one decimal, for a column; a dash where there is none.
pub(crate) fn share_column(x: f64) -> String {
    if x.is_nan() { NOTHING.to_owned() } else { format!("{} %", fixed(100.0 * x, 1)) }
}

/// A number for a column; a dash where there is none.
pub(crate) fn column(x: f64) -> String {
    if x.is_nan() { NOTHING.to_owned() } else { short(x) }
}

/// A value, its standard error and its interval, all to the second digit of the error.
pub(crate) fn measured(value: f64, se: f64, interval: [f64; 2]) -> [String; 3] {
    let unknown_ends = interval.iter().any(|x| x.is_nan());
    if !(value.is_finite() && se.is_finite() && se > 0.0) {
        let ends = if unknown_ends {
            UNKNOWN.to_owned()
        } else {
            format!("{} to {}", number(interval[0]), number(interval[1]))
        };
        return [number(value), number(se), ends];
    }
    let precision = exponent_of(se) - 1;
    let size = exponent_of(if value == 0.0 { se } else { value });
    let plain = (-3..9).contains(&size) && precision >= -9;
    let shift = if plain { 0 } else { size };
    let write = |x: f64| {
        let digits = fixed_grouped(x / power_of_ten(shift), (shift - precision).max(0) as usize);
        if plain { digits } else { format!("{digits}×{}", ten_to(shift)) }
    };
    let ends =
        if unknown_ends { UNKNOWN.to_owned() } else { format!("{} to {}", write(interval[0]), write(interval[1])) };
    [write(value), write(se), ends]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_error_decides_the_digits() {
        for (value, se, interval, want) in [
            (1_965.572_4, 0.460_2, [1964.67, 1966.474], ["1965.57", "0.46", "1964.67 to 1966.47"]),
            (-23.147_9, 0.002_8, [-23.153_4, -23.142_4], ["−23.1479", "0.0028", "−23.1534 to −23.1424"]),
            (3.214e-7, 1.2e-9, [3.19e-7, 3.238e-7], ["3.214×10⁻⁷", "0.012×10⁻⁷", "3.190×10⁻⁷ to 3.238×10⁻⁷"]),
            (f64::NAN, f64::NAN, [f64::NAN; 2], [UNKNOWN, UNKNOWN, UNKNOWN]),
            (2.0, 0.0, [2.0, 2.0], ["2", "0", "2 to 2"]),
        ] {
            assert_eq!(measured(value, se, interval), want);
        }
    }

    #[test]
    fn numbers_carry_no_empty_digits() {
        assert_eq!([number(0.5), number(-0.625), number(120.0), number(1e-9)], ["0.5", "−0.625", "120", "10⁻⁹"]);
        assert_eq!(
            [share(0.048_7), share(f64::NAN), share_column(0.953), share_column(f64::NAN)],
            ["4.87 %", UNKNOWN, "95.3 %", "–"]
        );
        assert_eq!([number(f64::INFINITY), number(f64::NEG_INFINITY)], ["∞", "−∞"]);
    }
}
