//! A number with its multiplier and unit, taken apart as text: the part of reading that the IEC 60062
//! notation and the physical quantities share.

/// A number as written, before anybody knows what it measures.
#[derive(Debug, PartialEq)]
pub(super) struct Written<'a> {
    /// Whether a minus sign leads.
    pub negative: bool,
    /// The digits before and after the point, run together; at least one.
    pub digits: String,
    /// The power of ten that belongs to `digits`, without the multiplier; saturates.
    pub power: i32,
    /// What stands around the digits.
    pub suffix: Suffix<'a>,
}

/// Where the multiplier and the unit stand. Both are as written; nothing is known about them yet.
#[derive(Debug, PartialEq)]
pub(super) enum Suffix<'a> {
    /// Behind the number, run together or empty: the `kΩ` of `4.7 kΩ`.
    Behind(&'a str),
    /// The multiplier takes the place of the decimal point: the `k` and `Ω` of `4k7Ω`.
    AsPoint {
        /// The multiplier.
        letter: &'a str,
        /// The unit behind the digits, or empty.
        unit: &'a str,
    },
}

impl<'a> Written<'a> {
    /// Takes `text` apart, or `None` when it has no digit where a number needs one.
    pub fn take_apart(text: &'a str) -> Option<Written<'a>> {
        let text = text.trim();
        let unsigned = text.strip_prefix('-');
        let negative = unsigned.is_some();
        let (whole, rest) = split_digits(unsigned.unwrap_or(text));
        let behind_point = rest.strip_prefix('.');
        let (mut fraction, rest) = behind_point.map_or(("", rest), split_digits);
        let (exponent, rest) = split_exponent(rest);

        let letter_end = rest.find(|c: char| c.is_ascii_digit());
        let suffix = match letter_end {
            Some(end) if behind_point.is_none() && exponent.is_none() => {
                let (letter, tail) = rest.split_at(end);
                let (digits, unit) = split_digits(tail);
                fraction = digits;
                let unit = unit.trim_start();
                Suffix::AsPoint { letter, unit }
            }
            _ => Suffix::Behind(rest.trim_start()),
        };
        let digits = format!("{whole}{fraction}");
        let places = i32::try_from(fraction.len()).unwrap_or(i32::MAX);
        (!digits.is_empty()).then(|| Written {
            negative,
            digits,
            power: exponent.unwrap_or(0).saturating_sub(places),
            suffix,
        })
    }

    /// The nearest float to the number times `10^shift`, infinite where it is too large.
    pub fn to_f64(&self, shift: i32) -> f64 {
        let magnitude = format!("{}e{}", self.digits, self.power.saturating_add(shift)).parse().unwrap_or(f64::NAN);
        if self.negative { -magnitude } else { magnitude }
    }
}

/// The power of ten of an SI prefix, of `K` for kilo, and of `meg` in any case. The empty text is no
/// prefix.
pub(super) fn prefix_power(text: &str) -> Option<i32> {
    Some(match text {
        "f" => -15,
        "p" => -12,
        "n" => -9,
        // The micro sign U+00B5 and the Greek letter U+03BC look the same.
        "u" | "\u{b5}" | "\u{3bc}" => -6,
        "m" => -3,
        "k" | "K" => 3,
        "M" => 6,
        "G" => 9,
        "T" => 12,
        _ if text.eq_ignore_ascii_case("meg") => 6,
        _ => return None,
    })
}

/// The text for a message: shortened, so that a wrong file as input does not flood the terminal.
pub(crate) fn excerpt(text: &str) -> String {
    const LONGEST: usize = 40;
    let mut kept: String = text.chars().take(LONGEST).collect();
    if kept.len() < text.len() {
        kept.push_str("...");
    }
    kept
}

fn split_digits(text: &str) -> (&str, &str) {
    let end = text.find(|c: char| !c.is_ascii_digit());
    text.split_at(end.unwrap_or(text.len()))
}

/// Splits off an exponent such as `e-9`, if there is a whole one.
fn split_exponent(text: &str) -> (Option<i32>, &str) {
    let Some(signed) = text.strip_prefix(['e', 'E']) else {
        return (None, text);
    };
    let (digits, rest) = split_digits(signed.strip_prefix(['-', '+']).unwrap_or(signed));
    if digits.is_empty() {
        return (None, text);
    }
    let size = digits.parse().unwrap_or(i32::MAX);
    let exponent = if signed.starts_with('-') { -size } else { size };
    (Some(exponent), rest)
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    #[test]
    fn text_comes_apart() {
        let behind = |digits: &str, power, suffix| Written {
            negative: false,
            digits: digits.to_owned(),
            power,
            suffix: Suffix::Behind(suffix),
        };
        let parts = |text| Written::take_apart(text).unwrap();
        assert_eq!(parts(" 4.70 kΩ "), behind("470", -2, "kΩ"));
        assert_eq!(parts("1E-8F"), behind("1", -8, "F"));
        assert_eq!(parts(".5"), behind("5", -1, ""));
        assert_eq!(parts("2e"), behind("2", 0, "e"));
        assert_eq!(parts("1e99999999999"), behind("1", i32::MAX, ""));
        assert_eq!(parts("1.0e-99999999999"), behind("10", i32::MIN, ""));
        let (letter, unit) = ("k", "Ω");
        let suffix = Suffix::AsPoint { letter, unit };
        assert_eq!((parts("4k7 Ω").digits, parts("4k7 Ω").suffix), ("47".to_owned(), suffix));
        assert!(parts("-1").negative);
        for text in ["", "-", ".", "k", "Ω", "e"] {
            assert_eq!(Written::take_apart(text), None, "{text}");
        }
    }

    #[test]
    fn excerpts_are_short() {
        assert_eq!(excerpt("4k7"), "4k7");
        assert_eq!(excerpt(&"Ω".repeat(41)), format!("{}...", "Ω".repeat(40)));
    }
}
