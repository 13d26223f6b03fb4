//! Numbers as people write them, and what TOML calls them: grouped thousands, gaps, units, arithmetic.

use crate::expression::Scope;
use crate::expression::Wanted;
use crate::numeric::Points;

/// A number whose thousands are grouped, by commas as `1,250.0` and `1,250,000` or by points as `1.250,00` and
/// `1.250.000`, without them; none where a single comma or point may be a decimal one.
pub(crate) fn ungrouped(text: &str) -> Option<String> {
    let (sign, digits) = match text.strip_prefix('-') {
        Some(rest) => ("-", rest),
        None => ("", text),
    };
    for (group, point) in [(',', '.'), ('.', ',')] {
        let (whole, part) = match digits.split_once(point) {
            Some((whole, part)) => (whole, Some(part)),
            None => (digits, None),
        };
        let groups: Vec<&str> = whole.split(group).collect();
        let is_number = |text: &str| !text.is_empty() && text.chars().all(|c| c.is_ascii_digit());
        let right = groups[1..].iter().all(|group| group.len() == 3) && groups.iter().all(|group| is_number(group));
        let plain = part.is_none_or(is_number) && groups[0].len() <= 3 && groups[0] != "0";
        let certain = groups.len() > 2 || (groups.len() == 2 && part.is_some());
        if right && plain && certain {
            let part = part.map_or(String::new(), |part| format!(".{part}"));
            return Some(format!("{sign}{}{part}", groups.concat()));
        }
    }
    None
}

/// A number to fifteen digits, so that 30 % is 0.3.
pub(super) fn trimmed(number: f64) -> String {
    format!("{number:.15}").trim_end_matches('0').trim_end_matches('.').to_owned()
}

/// Whether a word is a number, a truth or a date of TOML.
pub(super) fn is_plain(text: &str) -> bool {
    toml::de::DeTable::parse(&format!("x = {text}\n")).is_ok()
}

/// A number with a slip in its form.
pub(super) fn mended_number(text: &str) -> Option<(String, String)> {
    let (sign, digits) = match text.strip_prefix('-') {
        Some(rest) => ("-", rest),
        None => ("", text.strip_prefix('+').unwrap_or(text)),
    };
    if ["inf", "infinity", "infty", "oo", "∞"].contains(&digits.to_lowercase().as_str()) {
        return Some((format!("`{text}` is no number"), format!("{sign}inf")));
    }
    if ["true", "false"].contains(&text.to_lowercase().as_str()) {
        return Some((format!("`{text}` is written with small letters"), text.to_lowercase()));
    }
    let joined: String = digits.chars().filter(|c| !matches!(c, ' ' | '\'' | '\u{a0}' | '\u{202f}')).collect();
    let grouped = joined != digits && joined.chars().all(|c| c.is_ascii_digit() || c == '.');
    let number = joined.parse::<f64>().ok().filter(|_| joined.starts_with(|c: char| c.is_ascii_digit() || c == '.'))?;
    if grouped {
        return Some((format!("the number `{text}` has gaps"), format!("{sign}{joined}")));
    }
    if joined != digits {
        return None;
    }
    let (mantissa, exponent) = match joined.find(['e', 'E']) {
        Some(place) => joined.split_at(place),
        None => (joined.as_str(), ""),
    };
    let mut written = mantissa.to_owned();
    if written.starts_with('.') {
        written.insert(0, '0');
    }
    if written.ends_with('.') {
        written.push('0');
    }
    let stripped = written.trim_start_matches('0');
    if written.len() > 1 && stripped.len() + 1 < written.len() + usize::from(!stripped.starts_with('.')) {
        let whole =
            if stripped.is_empty() || stripped.starts_with('.') { format!("0{stripped}") } else { stripped.to_owned() };
        written = whole;
    }
    let written = format!("{sign}{written}{exponent}");
    let same = written.parse::<f64>().is_ok_and(|read| read.abs() == number);
    (written != text && same && is_plain(&written))
        .then(|| (format!("`{text}` lacks a digit, or has a zero too many"), written))
}

/// `5 m` or `20%`: a number and what follows it.
pub(super) fn number_and_rest(text: &str) -> Option<(&str, &str)> {
    let end = text.find(|c: char| !(c.is_ascii_digit() || matches!(c, '.' | '-' | '+')))?;
    let (number, rest) = text.split_at(end);
    let rest = rest.trim();
    let unit = rest.starts_with(|c: char| c.is_alphabetic() || matches!(c, '%' | '°'))
        && !rest.contains(['*', '(', '+', ',', '=']);
    (is_plain(number) && !number.is_empty() && unit && rest.parse::<f64>().is_err()).then_some((number, rest))
}

/// The value of arithmetic with plain numbers, as `2*pi` or `10^3`.
pub(super) fn worked_out(text: &str) -> Option<f64> {
    let program = Scope::new().compile(&[("value", text, Wanted::Number)]).ok()?;
    let value = program.values(&Points::zeros(0, 1)).first()?.get(0, 0);
    value.is_finite().then_some(value)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn groups_of_thousands_are_told_from_decimal_commas() {
        for (text, want) in [
            ("1,250.0", Some("1250.0")),
            ("-1,250,000", Some("-1250000")),
            ("1.250,00", Some("1250.00")),
            ("12.500.000", Some("12500000")),
            ("1,250", None),
            ("1.250", None),
            ("0,250.0", None),
            ("1,25,000", None),
            ("1,2.5", None),
        ] {
            assert_eq!(ungrouped(text).as_deref(), want, "{text}");
        }
    }
}
