//! Part values as they are printed on parts and written in lists: the letter code of IEC 60062
//! (`4k7`, `2R2`, `R47`, `4n7`), and the usual spellings with a unit (`4.7 kΩ`, `10 nF`, `1e-8`).

use thiserror::Error;

use super::written::{Suffix, Written, excerpt, prefix_power};
use super::{Kind, Value, format_si};

/// Why a text is not the value of a part. Every message quotes the text and says what to write.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum NotationError {
    /// Nothing but blanks.
    #[error("the {} value is empty: write one such as {}", .0.name(), example(*.0))]
    Empty(Kind),
    /// A comma in the number.
    #[error("\"{0}\" has a comma: write a decimal point, and no separator between thousands")]
    Comma(String),
    /// No number, or letters that mean nothing here.
    #[error("cannot read \"{text}\" as a {} value: {}, for example {}", .kind.name(), letters(*.kind), example(*.kind))]
    Unreadable {
        /// The text.
        text: String,
        /// The kind of part that was expected.
        kind: Kind,
    },
    /// A value of the other kind of part.
    #[error("\"{text}\" is a {} value where a {} value is needed: write one such as {}", other(*.kind).name(), .kind.name(), example(*.kind))]
    OtherKind {
        /// The text.
        text: String,
        /// The kind of part that was expected.
        kind: Kind,
    },
    /// A capacitor in megafarads.
    #[error("\"{0}\" is in megafarads: M is mega, m is milli, u is micro; write one such as 1u or 1m")]
    Megafarad(String),
    /// A capacitor with a lone `f`, which is femto or farad.
    #[error("\"{0}\" could mean femtofarads or farads: write fF or F")]
    FemtoOrFarad(String),
    /// Zero, or a minus sign.
    #[error("\"{text}\" is not positive: a {} value is larger than zero, for example {}", .kind.name(), example(*.kind))]
    NotPositive {
        /// The text.
        text: String,
        /// The kind of part that was expected.
        kind: Kind,
    },
    /// More significant digits than a [`Value`] holds.
    #[error("\"{0}\" has too many digits: a part value holds at most {max} significant digits, round it", max = Value::MAX_DIGITS)]
    TooManyDigits(String),
    /// Outside [`Kind::range`].
    #[error("\"{text}\" is out of range: a {} value lies between {}; {}", .kind.name(), range_in_words(*.kind), range_hint(*.kind))]
    OutOfRange {
        /// The text.
        text: String,
        /// The kind of part that was expected.
        kind: Kind,
    },
}

/// Reads the value of a part of the given kind, exactly.
///
/// - The multiplier may take the place of the decimal point (`4k7`, `R47`, `p33`) or follow the
///   number (`4.7k`, `4.7 kΩ`, `0.1uF`). Resistors take `m R k M G T`, capacitors `p n u m F`, and
///   with the unit `fF`; also `K`, `meg`, and `µ` in either encoding.
/// - Case matters: `1m` is a milliohm, `1M` a megohm.
/// - Without a multiplier the number is in ohms or farads (`4700`, `1e-8`). The unit is optional: `Ω`,
///   `ohm`, `F`, `farad`.
///
/// # Errors
/// One [`NotationError`] for each way to go wrong; the value has to lie in [`Kind::range`].
///
/// ```
/// use roundwell::units::{Kind, format_part, parse_part};
///
/// let value = parse_part("4.70 nF", Kind::Capacitor)?;
/// assert_eq!(value, parse_part("4n7", Kind::Capacitor)?);
/// assert_eq!(format_part(value, Kind::Capacitor), "4n7");
/// assert!(parse_part("10 nF", Kind::Resistor).is_err());
/// # Ok::<(), roundwell::units::NotationError>(())
/// ```
pub fn parse_part(text: &str, kind: Kind) -> Result<Value, NotationError> {
    if text.trim().is_empty() {
        return Err(NotationError::Empty(kind));
    }
    let quoted = excerpt(text.trim());
    if text.contains(',') {
        return Err(NotationError::Comma(quoted));
    }
    let Some(written) = Written::take_apart(text) else {
        return Err(NotationError::Unreadable { text: quoted, kind });
    };
    let shift = match (suffix_power(&written.suffix, kind), kind) {
        (Some(6), Kind::Capacitor) => return Err(NotationError::Megafarad(quoted)),
        (Some(shift), _) => shift,
        (None, Kind::Capacitor) if has_lone_f(&written.suffix) => {
            return Err(NotationError::FemtoOrFarad(quoted));
        }
        (None, _) if suffix_power(&written.suffix, other(kind)).is_some() => {
            return Err(NotationError::OtherKind { text: quoted, kind });
        }
        (None, _) => return Err(NotationError::Unreadable { text: quoted, kind }),
    };

    // Zeros at either end are dropped as text, so that any length of them is read exactly.
    let ended = written.digits.trim_end_matches('0');
    let digits = ended.trim_start_matches('0');
    if written.negative || digits.is_empty() {
        return Err(NotationError::NotPositive { text: quoted, kind });
    }
    if digits.len() > Value::MAX_DIGITS as usize {
        return Err(NotationError::TooManyDigits(quoted));
    }
    let dropped = i32::try_from(written.digits.len() - ended.len()).unwrap_or(i32::MAX);
    let power = written.power.saturating_add(dropped).saturating_add(shift);
    digits
        .parse()
        .ok()
        .and_then(|mantissa| Value::new(mantissa, power).ok())
        .filter(|value| kind.allows(*value))
        .ok_or(NotationError::OutOfRange { text: quoted, kind })
}

/// Writes a value in the letter code of IEC 60062: `4k7`, `2R2`, `R47`, `100R`, `1M`, `330p`, `4n7`.
///
/// All digits are kept: [`parse_part`] reads back the same value for every value in
/// [`Kind::range`]. Values below 1 Ω and 1 pF begin with the letter (`R047`, `p47`).
pub fn format_part(value: Value, kind: Kind) -> String {
    let multipliers = match kind {
        Kind::Resistor => [(12, 'T'), (9, 'G'), (6, 'M'), (3, 'k'), (0, 'R')],
        Kind::Capacitor => [(0, 'F'), (-3, 'm'), (-6, 'u'), (-9, 'n'), (-12, 'p')],
    };
    let fits = |(power, _): &(i32, char)| *power <= value.decade();
    let smallest = multipliers[multipliers.len() - 1];
    let (power, letter) = multipliers.into_iter().find(fits).unwrap_or(smallest);

    let whole_digits = value.decade() - power + 1;
    let zeros = |count: i32| "0".repeat(usize::try_from(count).unwrap_or(0));
    let digits = format!("{}{}", zeros(-whole_digits), value.mantissa());
    let split = usize::try_from(whole_digits).unwrap_or(0);
    match digits.split_at_checked(split) {
        Some((whole, fraction)) => format!("{whole}{letter}{fraction}"),
        None => format!("{digits}{}{letter}", zeros(value.exponent() - power)),
    }
}

/// The power of ten that a suffix stands for, or `None` when it says nothing about this kind of part.
fn suffix_power(suffix: &Suffix, kind: Kind) -> Option<i32> {
    match *suffix {
        Suffix::AsPoint { letter, unit } => {
            let unit_fits = unit.is_empty() || strip_unit(unit, kind) == Some("");
            letter_power(letter, kind).filter(|_| unit_fits)
        }
        Suffix::Behind("") => Some(0),
        Suffix::Behind(text) => letter_power(text, kind).or_else(|| match strip_unit(text, kind)? {
            "" => (text != "f").then_some(0),
            prefix => multiplier_power(prefix, kind),
        }),
    }
}

/// A multiplier on its own; the letter of the unit stands for one.
fn letter_power(letter: &str, kind: Kind) -> Option<i32> {
    match (kind, letter) {
        (Kind::Resistor, "R" | "r") | (Kind::Capacitor, "F") => Some(0),
        (Kind::Capacitor, "f") => None,
        _ => multiplier_power(letter, kind),
    }
}

/// The prefixes that go with a kind of part. Mega is let through for capacitors to be named as such.
fn multiplier_power(prefix: &str, kind: Kind) -> Option<i32> {
    prefix_power(prefix).filter(|power| match kind {
        Kind::Resistor => *power >= -3,
        Kind::Capacitor => *power <= -3 || *power == 6,
    })
}

/// Strips the unit at the end, in any case, and returns what stands before it.
fn strip_unit(text: &str, kind: Kind) -> Option<&str> {
    // U+03A9 is the Greek letter, U+2126 the ohm sign.
    let units: &[&str] = match kind {
        Kind::Resistor => &["\u{3a9}", "\u{2126}", "ohm", "ohms"],
        Kind::Capacitor => &["f", "farad", "farads"],
    };
    units.iter().find_map(|unit| {
        let (before, end) = text.split_at_checked(text.len().checked_sub(unit.len())?)?;
        end.eq_ignore_ascii_case(unit).then_some(before)
    })
}

fn has_lone_f(suffix: &Suffix) -> bool {
    matches!(suffix, Suffix::Behind("f") | Suffix::AsPoint { letter: "f", .. })
}

fn other(kind: Kind) -> Kind {
    match kind {
        Kind::Resistor => Kind::Capacitor,
        Kind::Capacitor => Kind::Resistor,
    }
}

fn example(kind: Kind) -> &'static str {
    match kind {
        Kind::Resistor => "4k7, 2R2 or 1M",
        Kind::Capacitor => "4n7, 330p or 1u",
    }
}

fn letters(kind: Kind) -> &'static str {
    match kind {
        Kind::Resistor => "expected a number in ohms, or one with m, R, k, M, G or T",
        Kind::Capacitor => "expected a number in farads, or one with p, n, u, m or F",
    }
}

/// [`Kind::range`] for a message: "1 fF and 100 F".
pub(crate) fn range_in_words(kind: Kind) -> String {
    let (low, high) = kind.range();
    let [low, high] = [low, high].map(|end| format_si(end.to_f64(), 1, kind.unit()));
    format!("{low} and {high}")
}

fn range_hint(kind: Kind) -> &'static str {
    match kind {
        Kind::Resistor => "check the multiplier (m is milli, M is mega)",
        Kind::Capacitor => "check the multiplier (p, n, u), and write a marking code such as 104 as 100n",
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use proptest::prelude::*;

    use super::*;
    use crate::units::test_support::deterministic;
    use Kind::{Capacitor, Resistor};

    fn value(mantissa: u64, exponent: i32) -> Value {
        Value::new(mantissa, exponent).unwrap()
    }

    // Source: the letter code of IEC 60062; the spellings with a unit are common practice.
    #[test]
    fn every_spelling_is_read() {
        for (kind, mantissa, exponent, texts) in [
            (Resistor, 47, 2, "4k7|4K7|4.7k|4700|4.7 kohm|4k7Ω|4k7\u{2126}|4k7 ohm|4.7e3|4.7E+3 Ω|04700.0|0M0047"),
            (Resistor, 22, -1, "2R2|2r2|2.2|2.2R|2.2 Ohms|2R2Ω|2200m"),
            (Resistor, 47, -2, "R47|0R47|.47|0.47Ω|470m|470 mΩ"),
            (Resistor, 1, 2, "100R|100|100.|0.1k|k1|1e2"),
            (Resistor, 1, 6, "1M|1meg|1MEG|1 Megohm|1MΩ|1000k|1e6|1e3k|  1M\t"),
            (Resistor, 1, -3, "1m|R001|1mΩ|1e-3"),
            (Resistor, 1, 12, "1T|1000G|1 TΩ"),
            (Resistor, 47, 9, "47G"),
            (Capacitor, 1, -8, "10n|10nF|10 nF|10nf|1e-8|1E-8 F|0.01u|0.010 uF|10000p|10 nfarad"),
            (Capacitor, 47, -10, "4n7|4n7F|4.7e-9|4700p|4.7 nF|4.70nF"),
            (Capacitor, 33, -14, "p33|0p33|.33pF|330 fF"),
            (Capacitor, 22, -7, "2u2|2µ2|2μ2|2.2µF|2.2μF|2200n|2u2 F"),
            (Capacitor, 1, -7, "0.1uF|100n|u1"),
            (Capacitor, 47, -1, "4F7|4.7|4.7F|4700m|4.7 farads"),
            (Capacitor, 1, -3, "1m|1mF|1000u"),
        ] {
            for text in texts.split('|') {
                assert_eq!(parse_part(text, kind), Ok(value(mantissa, exponent)), "{text}");
            }
        }
    }

    // Source: the letter code of IEC 60062.
    #[test]
    fn values_are_written_in_the_letter_code() {
        for (kind, texts) in [
            (Resistor, "4k7|2R2|R47|100R|1M|10k7|1k02|499R|1R|R047|R001|R0047|47G|1T|123M456789012"),
            (Capacitor, "10n|4n7|330p|1u5|100p|p47|p001|p0015|1p|4m7|100n|4F7|100F|10u"),
        ] {
            for text in texts.split('|') {
                assert_eq!(format_part(parse_part(text, kind).unwrap(), kind), text);
            }
        }
        // Beyond the range the text is long but still exact.
        assert_eq!(format_part(value(1, 15), Resistor), "1000T");
        assert_eq!(format_part(value(1, -6), Resistor), "R000001");
    }

    #[test]
    fn refusals_say_what_is_wrong_and_what_to_write() {
        let resistor_letters =
            "expected a number in ohms, or one with m, R, k, M, G or T, for example 4k7, 2R2 or 1M";
        let capacitor_letters =
            "expected a number in farads, or one with p, n, u, m or F, for example 4n7, 330p or 1u";
        let capacitor_range = "a capacitor value lies between 1 fF and 100 F; check the multiplier (p, n, u), and write a marking code such as 104 as 100n";
        for (kind, texts, message) in [
            (Resistor, "| \t", "the resistor value is empty: write one such as 4k7, 2R2 or 1M".to_owned()),
            (Capacitor, "", "the capacitor value is empty: write one such as 4n7, 330p or 1u".to_owned()),
            (Resistor, "4,7k|1,000", "\"*\" has a comma: write a decimal point, and no separator between thousands".to_owned()),
            (
                Resistor,
                "NaN|inf|-inf|k|R|.|-|4k7x|4k7k|4k 7|4 k7|4.7k5|1e|1.2.3|--5|+5|1_000|4kR|10kF|0x10|1e3.5|٤k٧|10nΩ|4k7F|4..7",
                format!("cannot read \"*\" as a resistor value: {resistor_letters}"),
            ),
            (
                Capacitor,
                "NaN|inf|n|10x|10N|10nn|4n7Ω|10kF|F|10GF|10FF|100m F",
                format!("cannot read \"*\" as a capacitor value: {capacitor_letters}"),
            ),
            (Resistor, "10nF|10n|4n7|10 uF|p33|10F|1MF", "\"*\" is a capacitor value where a resistor value is needed: write one such as 4k7, 2R2 or 1M".to_owned()),
            (Capacitor, "10k|4k7|10Ω|100R|1 Mohm|1G", "\"*\" is a resistor value where a capacitor value is needed: write one such as 4n7, 330p or 1u".to_owned()),
            (Capacitor, "1M|1M5|1meg|0.00001MF", "\"*\" is in megafarads: M is mega, m is milli, u is micro; write one such as 1u or 1m".to_owned()),
            (Capacitor, "10f|4f7|10 f", "\"*\" could mean femtofarads or farads: write fF or F".to_owned()),
            (Resistor, "0|-4k7|0R|0.000k|-0|0e9", "\"*\" is not positive: a resistor value is larger than zero, for example 4k7, 2R2 or 1M".to_owned()),
            (Capacitor, "-10n", "\"*\" is not positive: a capacitor value is larger than zero, for example 4n7, 330p or 1u".to_owned()),
            (Resistor, "1.234567890123k|0.0010000000001234", "\"*\" has too many digits: a part value holds at most 12 significant digits, round it".to_owned()),
            (
                Resistor,
                "1e300|1e-300|0.9m|1.1T|1e99999999999|1e-99999999999",
                "\"*\" is out of range: a resistor value lies between 1 mΩ and 1 TΩ; check the multiplier (m is milli, M is mega)".to_owned(),
            ),
            (Capacitor, "104|473|1e3|0.9fF|p0001|101F", format!("\"*\" is out of range: {capacitor_range}")),
        ] {
            for text in texts.split('|') {
                let error = parse_part(text, kind).expect_err(text);
                assert_eq!(error.to_string(), message.replace('*', text.trim()), "{text}");
            }
        }
    }

    #[test]
    fn long_texts_are_read_exactly_and_quoted_shortly() {
        let zeros = "0".repeat(5000);
        let text = format!("{zeros}4.7{zeros}k");
        assert_eq!(parse_part(&text, Resistor), Ok(value(47, 2)));
        assert_eq!(parse_part(&format!("1{zeros}e-5000"), Resistor), Ok(value(1, 0)));
        let message = parse_part(&"9".repeat(5000), Resistor).unwrap_err().to_string();
        assert!(message.len() < 150 && message.contains("999...\""), "{message}");
    }

    proptest! {
        #![proptest_config(deterministic(8192))]

        #[test]
        fn what_is_written_reads_back(
            kind in prop_oneof![Just(Resistor), Just(Capacitor)],
            digits in 1_u32..=12,
            seed in any::<u64>(),
            place in any::<prop::sample::Index>(),
        ) {
            let one = 10_u64.pow(digits - 1);
            let mantissa = one + seed % (9 * one);
            let (low, high) = kind.range();
            let decades: Vec<i32> = (low.decade()..high.decade()).collect();
            let decade = *place.get(&decades);
            let value = value(mantissa, decade + 1 - digits.cast_signed());
            prop_assert!(kind.allows(value));
            let text = format_part(value, kind);
            prop_assert_eq!(parse_part(&text, kind), Ok(value));
            prop_assert_eq!(text.chars().filter(char::is_ascii_alphabetic).count(), 1);
            // The other spellings mean the same.
            let unit = kind.unit();
            for text in [value.to_string(), format!("{value}{unit}"), format!(" {value} {unit}")] {
                prop_assert_eq!(parse_part(&text, kind), Ok(value));
            }
            if !text.ends_with(['R', 'F']) {
                prop_assert_eq!(parse_part(&format!("{text}{unit}"), kind), Ok(value));
            }
        }

        #[test]
        fn no_text_is_read_out_of_range(text in "\\PC{0,12}", digits in "[0-9.eE+-]{0,6}[kKmMunpRfFΩ]{0,2}[0-9]{0,3}") {
            for kind in [Resistor, Capacitor] {
                for text in [&text, &digits] {
                    if let Ok(value) = parse_part(text, kind) {
                        prop_assert!(kind.allows(value));
                    }
                }
            }
        }
    }
}
