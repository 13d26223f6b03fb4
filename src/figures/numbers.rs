//! Numbers as text: true minus signs, superscript powers, no more digits than asked for.

use crate::numeric::ln;

/// `10^power`, exactly rounded.
#[must_use]
pub fn power_of_ten(power: i32) -> f64 {
    format!("1e{power}").parse().unwrap_or(f64::NAN)
}

/// The decimal exponent of a finite, non-zero number: 3 for 1000 and for 9999.
#[must_use]
pub fn exponent_of(value: f64) -> i32 {
    let value = value.abs();
    let guess = (ln(value) / std::f64::consts::LN_10).floor() as i32;
    // The logarithm may be off by its last bit at a power of ten.
    if value >= power_of_ten(guess + 1) {
        guess + 1
    } else if value < power_of_ten(guess) {
        guess - 1
    } else {
        guess
    }
}

/// `log10`, with the same bits on every machine.
#[must_use]
pub fn log10(value: f64) -> f64 {
    ln(value) / std::f64::consts::LN_10
}

/// `value` with `decimals` digits after the point and a true minus sign.
///
/// ```
/// use evenpoise::figures::numbers::fixed;
/// assert_eq!(fixed(-0.25, 1), "−0.2");
/// assert_eq!(fixed(-0.001, 1), "0.0");
/// ```
#[must_use]
pub fn fixed(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    match text.strip_prefix('-') {
        Some(digits) if digits.bytes().all(|byte| matches!(byte, b'0' | b'.')) => digits.to_owned(),
        Some(digits) => format!("−{digits}"),
        None => text,
    }
}

/// `10` with `power` as a superscript.
#[must_use]
pub fn ten_to(power: i32) -> String {
    const DIGITS: [char; 10] = ['⁰', '¹', '²', '³', '⁴', '⁵', '⁶', '⁷', '⁸', '⁹'];
    let mut text = String::from(if power < 0 { "10⁻" } else { "10" });
    for byte in power.unsigned_abs().to_string().bytes() {
        text.push(DIGITS[usize::from(byte - b'0') % 10]);
    }
    text
}

/// `value` to `digits` significant digits: plain between 0.001 and 100,000, otherwise with a power of ten.
///
/// ```
/// use evenpoise::figures::numbers::significant;
/// assert_eq!(significant(0.09149, 2), "0.091");
/// assert_eq!(significant(-3.2e-7, 2), "−3.2×10⁻⁷");
/// assert_eq!(significant(1e9, 3), "10⁹");
/// ```
#[must_use]
pub fn significant(value: f64, digits: usize) -> String {
    if value == 0.0 {
        return "0".to_owned();
    }
    if value.is_nan() {
        return "no number".to_owned();
    }
    if value.is_infinite() {
        return if value > 0.0 { "∞".to_owned() } else { "−∞".to_owned() };
    }
    // Rounding first: 9.996 to three digits is 10.0 and has another exponent.
    let places = digits.max(1) - 1;
    let rounded: f64 = format!("{value:.places$e}").parse().unwrap_or(value);
    let exponent = exponent_of(rounded);
    if (-3..6).contains(&exponent) {
        let decimals = places as i32 - exponent;
        return fixed(rounded, decimals.max(0) as usize);
    }
    let mantissa = rounded / power_of_ten(exponent);
    let mut text = fixed(mantissa, places);
    if text.contains('.') {
        text = text.trim_end_matches('0').trim_end_matches('.').to_owned();
    }
    match text.as_str() {
        "1" => ten_to(exponent),
        "−1" => format!("−{}", ten_to(exponent)),
        _ => format!("{text}×{}", ten_to(exponent)),
    }
}

/// A share between 0 and 1 in per cent, to two significant digits (whole per cents above ten).
///
/// ```
/// use evenpoise::figures::numbers::percent;
/// assert_eq!(percent(0.0312), "3.1 %");
/// assert_eq!(percent(1.0), "100 %");
/// ```
#[must_use]
pub fn percent(share: f64) -> String {
    let value = share * 100.0;
    if value.abs() >= 9.95 { format!("{} %", fixed(value, 0)) } else { format!("{} %", significant(value, 2)) }
}

/// `value` as by [`fixed`], with commas in its whole part from 10,000 on.
///
/// ```
/// use evenpoise::figures::numbers::fixed_grouped;
/// assert_eq!(fixed_grouped(-20_000.5, 1), "−20,000.5");
/// assert_eq!(fixed_grouped(5000.0, 0), "5000");
/// ```
#[must_use]
pub fn fixed_grouped(value: f64, decimals: usize) -> String {
    let text = fixed(value, decimals);
    let whole = text.trim_start_matches('−').split('.').next().unwrap_or_default().to_owned();
    if whole.len() > 4 { text.replacen(&whole, &grouped(&whole), 1) } else { text }
}

/// A whole number with commas between groups of three digits.
///
/// ```
/// assert_eq!(evenpoise::figures::numbers::count(20_000), "20,000");
/// ```
#[must_use]
pub fn count(value: usize) -> String {
    grouped(&value.to_string())
}

/// Digits with commas between groups of three.
fn grouped(digits: &str) -> String {
    let mut text = String::new();
    for (place, digit) in digits.chars().enumerate() {
        if place > 0 && (digits.len() - place).is_multiple_of(3) {
            text.push(',');
        }
        text.push(digit);
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exponents_at_powers_of_ten() {
        for power in -300..300 {
            assert_eq!(exponent_of(power_of_ten(power)), power);
            assert_eq!(exponent_of(-9.999 * power_of_ten(power)), power);
        }
    }

    #[test]
    fn numbers_read_well() {
        for (value, digits, want) in [
            (9.996, 3, "10.0"),
            (123_456.0, 3, "123000"),
            (1.25e9, 3, "1.25×10⁹"),
            (-1e-12, 2, "−10⁻¹²"),
            (0.5, 2, "0.50"),
            (0.0, 2, "0"),
            (0.000_99, 1, "0.001"),
        ] {
            assert_eq!(significant(value, digits), want);
        }
        assert_eq!(percent(0.5), "50 %");
        assert_eq!(percent(0.000_41), "0.041 %");
        assert_eq!(count(7), "7");
        assert_eq!(count(1_234_567), "1,234,567");
    }
}
