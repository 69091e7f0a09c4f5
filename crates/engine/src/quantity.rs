//! Reading and writing engineering notation: 13.56M, 13.56e6, 4k7, 2.2 nF, 2,2n.
//!
//! Prefixes are those of the SI; a prefix letter in place of the decimal point is the
//! letter code of IEC 60062 (4k7, 2R2, R47).

use std::fmt;

/// Prefixes that are read and written, with their powers of ten.
const PREFIXES: [(char, i32); 9] = [
    ('f', -15),
    ('p', -12),
    ('n', -9),
    ('µ', -6),
    ('m', -3),
    ('k', 3),
    ('M', 6),
    ('G', 9),
    ('T', 12),
];

/// Why a text is no quantity.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum QuantityError {
    /// Nothing was typed.
    Empty,
    /// The text is not a number with a prefix and unit.
    NotANumber {
        /// What was typed.
        text: String,
    },
    /// The unit is another one.
    Unit {
        /// What was typed as unit.
        found: String,
        /// What belongs there.
        wanted: String,
    },
    /// Too large for a number.
    Range {
        /// What was typed.
        text: String,
    },
}

impl fmt::Display for QuantityError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Empty => write!(f, "Type a number, such as 4k7 or 13.56M."),
            Self::NotANumber { text } => write!(
                f,
                "\"{text}\" is not a number; write 13.56M, 13.56e6, 4k7 or 2.2n."
            ),
            Self::Unit { found, wanted } if wanted.is_empty() => {
                write!(f, "This is a plain number without the unit \"{found}\".")
            }
            Self::Unit { found, wanted } => {
                write!(f, "The unit here is {wanted}, not \"{found}\".")
            }
            Self::Range { text } => {
                write!(f, "{text} is beyond any number that can be computed with.")
            }
        }
    }
}

impl std::error::Error for QuantityError {}

fn prefix_power(c: char) -> Option<i32> {
    match c {
        'u' | 'μ' => Some(-6),
        'K' => Some(3),
        _ => PREFIXES
            .iter()
            .find(|(p, _)| *p == c)
            .map(|(_, power)| *power),
    }
}

fn is_unit(found: &str, wanted: &str) -> bool {
    // The tables of every alphabet's small letters are 5 kB to send: only the ohm sign and the
    // Greek letter need them here.
    let plain = |s: &str| match s.to_ascii_lowercase().trim_start_matches('°') {
        "\u{3c9}" | "\u{3a9}" | "\u{2126}" | "ohms" | "r" | "ohm" => "ohm".to_owned(),
        other => other.to_owned(),
    };
    found.is_empty() || plain(found) == plain(wanted)
}

/// The value that `text` states in `unit` (such as "Hz", "Ω" or ""), in that unit.
///
/// # Errors
/// See [`QuantityError`].
pub fn parse(text: &str, unit: &str) -> Result<f64, QuantityError> {
    let typed: String = text.chars().filter(|c| !c.is_whitespace()).collect();
    if typed.is_empty() {
        return Err(QuantityError::Empty);
    }
    let wrong = || QuantityError::NotANumber {
        text: text.trim().to_owned(),
    };
    let body = typed.replace('−', "-");
    let points = body.matches(['.', ',']).count();
    if points > 1 || body.len() > 64 {
        return Err(wrong());
    }
    let body = body.replace(',', ".");
    // The longest leading run that is a plain number.
    let mut end = 0;
    let bytes: Vec<char> = body.chars().collect();
    let digit = |k: usize| bytes.get(k).is_some_and(char::is_ascii_digit);
    if matches!(bytes.first(), Some('+' | '-')) {
        end = 1;
    }
    while digit(end) || bytes.get(end) == Some(&'.') {
        end += 1;
    }
    if matches!(bytes.get(end), Some('e' | 'E')) {
        let sign = usize::from(matches!(bytes.get(end + 1), Some('+' | '-')));
        if digit(end + 1 + sign) {
            end += 1 + sign;
            while digit(end) {
                end += 1;
            }
        }
    }
    let mut number: String = bytes[..end].iter().collect();
    let rest: Vec<char> = bytes[end..].to_vec();
    let mut power = 0;
    let mut tail = rest.as_slice();
    let is_point_letter = |c: char| c == 'R' || c == 'r' || prefix_power(c).is_some();
    if let [letter, digits @ ..] = tail
        && digits.first().is_some_and(char::is_ascii_digit)
        && is_point_letter(*letter)
        && !number.contains(['.', 'e', 'E'])
    {
        let count = digits.iter().take_while(|c| c.is_ascii_digit()).count();
        if number.trim_start_matches(['+', '-']).is_empty() {
            number.push('0');
        }
        number.push('.');
        number.extend(&digits[..count]);
        power = prefix_power(*letter).unwrap_or(0);
        tail = &digits[count..];
        if matches!(letter, 'R' | 'r') && unit != "Ω" && unit != "ohm" {
            return Err(QuantityError::Unit {
                found: "R".to_owned(),
                wanted: unit.to_owned(),
            });
        }
    } else {
        let word: String = tail.iter().collect();
        if !is_unit(&word, unit)
            && let Some((&letter, after)) = tail.split_first()
            && let Some(found) = prefix_power(letter)
        {
            power = found;
            tail = after;
        }
    }
    let word: String = tail.iter().collect();
    let value = decimal(&number).ok_or_else(wrong)?;
    if !is_unit(&word, unit) {
        let odd = word.chars().any(|c| c.is_ascii_digit() || c == '.');
        return Err(if odd {
            wrong()
        } else {
            QuantityError::Unit {
                found: word,
                wanted: unit.to_owned(),
            }
        });
    }
    // One decimal reading of the digits: 2.2n is the double nearest to 2.2e-9.
    let value = if power == 0 {
        value
    } else {
        shift(&number, power).ok_or_else(wrong)?
    };
    if value.is_finite() {
        Ok(value)
    } else {
        Err(QuantityError::Range {
            text: text.trim().to_owned(),
        })
    }
}

/// The number that the digits of `number` make with `power` added to their exponent.
fn shift(number: &str, power: i32) -> Option<f64> {
    let (digits, exponent) = match number.split_once(['e', 'E']) {
        Some((digits, exponent)) => (digits, exponent.parse::<i32>().ok()?),
        None => (number, 0),
    };
    decimal(&format!("{digits}e{}", exponent.saturating_add(power)))
}

/// The double nearest to a decimal number, infinite where there is none. Read by the reader
/// of design files, so that the page does not carry the standard library's beside it (12 kB).
fn decimal(number: &str) -> Option<f64> {
    let (sign, rest) = match number.strip_prefix('-') {
        Some(rest) => ("-", rest),
        None => ("", number.strip_prefix('+').unwrap_or(number)),
    };
    let (digits, exponent) = rest.split_once(['e', 'E']).unwrap_or((rest, "0"));
    let (whole, part) = digits.split_once('.').unwrap_or((digits, ""));
    let plain = |s: &str| s.bytes().all(|b| b.is_ascii_digit());
    if (whole.is_empty() && part.is_empty()) || !plain(whole) || !plain(part) {
        return None;
    }
    let whole = whole.trim_start_matches('0');
    // Both padded with a nought, so that JSON takes them.
    let whole = if whole.is_empty() { "0" } else { whole };
    let json = format!("{sign}{whole}.{part}0e{exponent}");
    Some(serde_json::from_str(&json).unwrap_or(f64::INFINITY))
}

/// `value` with four significant digits, an SI prefix and the unit: "13.56 MHz".
pub fn format(value: f64, unit: &str) -> String {
    let space = if unit.is_empty() { "" } else { " " };
    if value == 0.0 {
        return format!("0{space}{unit}");
    }
    if !value.is_finite() {
        return "no number".to_owned();
    }
    let rounded = format!("{:.3e}", value.abs());
    let (digits, exponent) = rounded.split_once('e').unwrap_or((&rounded, "0"));
    let exponent: i32 = exponent.parse().unwrap_or(0);
    let group = exponent.div_euclid(3) * 3;
    let prefixed = unit.is_empty() && (-3..6).contains(&exponent);
    let sign = if value < 0.0 { "-" } else { "" };
    let prefix = PREFIXES
        .iter()
        .find(|(_, power)| *power == group)
        .map(|(c, _)| c.to_string());
    let (prefix, shift) = match (prefixed, group, prefix) {
        (true, _, _) => (String::new(), exponent),
        (_, 0, _) => (String::new(), exponent),
        (_, _, Some(prefix)) => (prefix, exponent - group),
        _ => return format!("{sign}{}e{exponent}{space}{unit}", trimmed(digits)),
    };
    let mantissa: f64 = decimal(&format!("{digits}e{shift}")).unwrap_or(0.0);
    let decimals = usize::try_from((3 - shift).clamp(0, 9)).unwrap_or(0);
    let text = format!("{mantissa:.decimals$}");
    let space = if prefix.is_empty() && unit.is_empty() {
        ""
    } else {
        " "
    };
    format!("{sign}{}{space}{prefix}{unit}", trimmed(&text))
}

fn trimmed(text: &str) -> &str {
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.')
    } else {
        text
    }
}

/// The shortest plain text that reads back as the same number.
pub fn format_exact(value: f64) -> String {
    let plain = format!("{value}");
    let scientific = format!("{value:e}");
    if scientific.len() < plain.len() {
        scientific
    } else {
        plain
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn reads_what_engineers_type() {
        for (text, unit, want) in [
            ("13.56M", "Hz", 13.56e6),
            ("13.56e6", "Hz", 13.56e6),
            ("13.56 MHz", "Hz", 13.56e6),
            ("4k7", "Ω", 4700.0),
            ("2n2", "F", 2.2e-9),
            ("2R2", "Ω", 2.2),
            ("R47", "Ω", 0.47),
            ("2.2nF", "F", 2.2e-9),
            ("2,2n", "F", 2.2e-9),
            ("120 mΩ", "Ω", 0.12),
            ("0.12 ohm", "Ω", 0.12),
            ("48", "V", 48.0),
            ("48V", "V", 48.0),
            ("-43", "dBc", -43.0),
            ("7", "", 7.0),
            ("1u", "H", 1e-6),
            ("1 µH", "H", 1e-6),
            ("5m", "m", 5.0),
            ("125 C", "°C", 125.0),
            ("3 K/W", "K/W", 3.0),
            ("12nC", "C", 12e-9),
            (".5", "", 0.5),
            ("+007.", "", 7.0),
            ("-0.1e-3", "", -1e-4),
            ("4,7 \u{2126}", "Ω", 4.7),
            ("1 Ω", "ohm", 1.0),
            ("12345678901234567890123", "", 12345678901234567890123.0),
        ] {
            assert_eq!(parse(text, unit), Ok(want), "{text} in {unit}");
        }
    }

    #[test]
    fn refuses_what_is_no_quantity() {
        for (text, unit) in [
            ("", "V"),
            ("abc", "V"),
            ("1e400", "V"),
            ("NaN", "V"),
            ("inf", "V"),
            ("1,234,567", "V"),
            ("5 V", "Ω"),
            ("1.2.3", ""),
            ("4k7k", "Ω"),
            ("-", "V"),
            (".", "V"),
        ] {
            assert!(
                parse(text, unit).is_err(),
                "{text} in {unit}: {:?}",
                parse(text, unit)
            );
        }
    }

    #[test]
    fn writes_four_digits_with_prefix() {
        for (value, unit, want) in [
            (13.56e6, "Hz", "13.56 MHz"),
            (4700.0, "Ω", "4.7 kΩ"),
            (638.975e-12, "F", "639 pF"),
            (0.99996, "V", "1 V"),
            (999.96, "V", "1 kV"),
            (-2.5e-3, "A", "-2.5 mA"),
            (0.0, "W", "0 W"),
            (7.0, "", "7"),
            (0.5, "", "0.5"),
            (0.98456, "", "0.9846"),
        ] {
            assert_eq!(format(value, unit), want);
        }
    }

    #[test]
    fn any_magnitude_reads_back() {
        for k in -160..160 {
            for digits in [1.0, 1.2345, 9.9994, 9.99996] {
                let value = digits * libm::pow(10.0, f64::from(k) / 10.0);
                let back = parse(&format(value, "F"), "F").expect("its own text");
                assert!((back / value - 1.0).abs() < 6e-4, "{value} became {back}");
                assert_eq!(parse(&format_exact(value), ""), Ok(value));
            }
        }
    }
}
