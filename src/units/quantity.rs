//! Frequencies, times, levels and plain numbers as text, and numbers with an engineering prefix.

use thiserror::Error;

use super::written::{Suffix, Written, excerpt, prefix_power};

/// Why a text is not the quantity that was asked for. Every message quotes the text and says what
/// to write.
#[derive(Clone, Debug, PartialEq, Error)]
pub enum QuantityError {
    /// Nothing but blanks.
    #[error("nothing is written where {name} is needed: write one such as {example}")]
    Empty {
        /// What was asked for, with its article.
        name: &'static str,
        /// A text that can be read.
        example: &'static str,
    },
    /// A comma in the number.
    #[error("\"{0}\" has a comma: write a decimal point, and no separator between thousands")]
    Comma(String),
    /// No finite number, or a unit that does not fit.
    #[error("cannot read \"{text}\" as {name}: expected a finite number {unit}, for example {example}")]
    Unreadable {
        /// The text.
        text: String,
        /// What was asked for, with its article.
        name: &'static str,
        /// The units that are known, in words.
        unit: &'static str,
        /// A text that can be read.
        example: &'static str,
    },
    /// A quantity that belongs under another key.
    #[error("\"{text}\" is not {name}: {hint}")]
    OtherQuantity {
        /// The text.
        text: String,
        /// What was asked for, with its article.
        name: &'static str,
        /// Where the text belongs.
        hint: &'static str,
    },
    /// Outside the allowed range.
    #[error("\"{text}\" is out of range: {name} lies between {low:e} and {high:e}{symbol}")]
    OutOfRange {
        /// The text.
        text: String,
        /// What was asked for, with its article.
        name: &'static str,
        /// Smallest allowed number.
        low: f64,
        /// Largest allowed number.
        high: f64,
        /// The unit of both, with a blank before it; empty for plain numbers.
        symbol: &'static str,
    },
}

/// A unit as written: its text, whether a prefix may stand before it, the power of ten and the
/// factor that lead to the basic unit.
struct Unit {
    text: &'static str,
    prefixed: bool,
    power: i32,
    factor: f64,
}

impl Unit {
    const fn prefixed(text: &'static str) -> Unit {
        Unit { prefixed: true, ..Unit::plain(text, 0, 1.0) }
    }

    const fn plain(text: &'static str, power: i32, factor: f64) -> Unit {
        Unit { text, prefixed: false, power, factor }
    }
}

/// What can be read as one quantity.
struct Quantity {
    name: &'static str,
    example: &'static str,
    unit: &'static str,
    symbol: &'static str,
    units: &'static [Unit],
    /// Whether a prefix without a unit is plain enough: `1k` and `3k4`.
    bare_prefix: bool,
    low: f64,
    high: f64,
    /// The unit of the quantity it is mistaken for, and the way there.
    mistaken: Option<(&'static str, &'static str)>,
}

const FREQUENCY: Quantity = Quantity {
    name: "a frequency",
    example: "1 kHz",
    unit: "in Hz",
    symbol: " Hz",
    units: &[Unit::prefixed("Hz"), Unit::prefixed("hz"), Unit::prefixed("HZ")],
    bare_prefix: true,
    low: 1e-6,
    high: 1e12,
    mistaken: Some(("rad/s", "give an angular frequency with the key w0, or divide it by 2 pi and write Hz")),
};

// A little wider than the frequencies, so that every one of them has its angular frequency.
const ANGULAR: Quantity = Quantity {
    name: "an angular frequency",
    example: "6283 rad/s",
    unit: "in rad/s",
    symbol: " rad/s",
    units: &[Unit::prefixed("rad/s")],
    bare_prefix: true,
    low: 1e-6,
    high: 1e13,
    mistaken: Some(("Hz", "give a frequency with the key f0, or multiply it by 2 pi and write rad/s")),
};

const LEVEL: Quantity = Quantity {
    name: "a level",
    example: "0.1 dB",
    unit: "in dB",
    symbol: " dB",
    units: &[Unit::plain("dB", 0, 1.0), Unit::plain("db", 0, 1.0)],
    bare_prefix: false,
    low: -1e3,
    high: 1e3,
    mistaken: None,
};

const TIME: Quantity = Quantity {
    name: "a time",
    example: "10 s",
    unit: "in s, ms, us, min or h",
    symbol: " s",
    units: &[Unit::prefixed("s"), Unit::plain("min", 0, 60.0), Unit::plain("h", 0, 3600.0)],
    bare_prefix: false,
    low: 1e-6,
    high: 1e7,
    mistaken: None,
};

const DELAY: Quantity = Quantity {
    name: "a delay",
    example: "100 us",
    unit: "in s, ms, us or ns",
    symbol: " s",
    units: &[Unit::prefixed("s")],
    bare_prefix: false,
    low: -1e6,
    high: 1e6,
    mistaken: None,
};

const NUMBER: Quantity = Quantity {
    name: "a number",
    example: "0.7071 or 1 %",
    unit: "without a unit, or a percentage",
    symbol: "",
    units: &[Unit::plain("%", -2, 1.0)],
    bare_prefix: false,
    low: -1e15,
    high: 1e15,
    mistaken: None,
};

/// Reads a frequency in hertz: `1 kHz`, `1k`, `3k4`, `1000`, `1e3 Hz`.
///
/// Prefixes are those of the SI, so `1 mHz` is a millihertz; `K` and `meg` are read too.
///
/// # Errors
/// [`QuantityError`] for anything but a number from 1 µHz to 1 THz. A text in rad/s is refused
/// with a hint.
///
/// ```
/// use roundwell::units::parse_frequency;
///
/// assert_eq!(parse_frequency("1.5 MHz")?, 1.5e6);
/// assert!(parse_frequency("6283 rad/s").is_err());
/// # Ok::<(), roundwell::units::QuantityError>(())
/// ```
pub fn parse_frequency(text: &str) -> Result<f64, QuantityError> {
    FREQUENCY.parse(text)
}

/// Reads an angular frequency in rad/s: `6283 rad/s`, `6.283 krad/s`, `6283`.
///
/// # Errors
/// [`QuantityError`] for anything but a number from 1e-6 to 1e13 rad/s. A text in hertz is
/// refused with a hint.
pub fn parse_angular(text: &str) -> Result<f64, QuantityError> {
    ANGULAR.parse(text)
}

/// Reads a level or a level difference in decibels: `0.1 dB`, `-40`. The sign is left to the caller.
///
/// # Errors
/// [`QuantityError`] for anything but a number from -1000 to 1000.
pub fn parse_decibels(text: &str) -> Result<f64, QuantityError> {
    LEVEL.parse(text)
}

/// Reads a span of time in seconds: `10 s`, `500 ms`, `2 min`, `1 h`, `10`.
///
/// # Errors
/// [`QuantityError`] for anything but a number from 1 µs to 1e7 s.
pub fn parse_seconds(text: &str) -> Result<f64, QuantityError> {
    TIME.parse(text)
}

/// Reads a delay in seconds, which may be negative: `100 us`, `2.5 ms`, `1e-4`.
///
/// # Errors
/// [`QuantityError`] for anything but a number from -1e6 s to 1e6 s.
pub fn parse_delay(text: &str) -> Result<f64, QuantityError> {
    DELAY.parse(text)
}

/// Reads a plain number, or a percentage as its hundredth: `0.7071`, `-2`, `1 %`.
///
/// # Errors
/// [`QuantityError`] for anything but a finite number from -1e15 to 1e15.
pub fn parse_number(text: &str) -> Result<f64, QuantityError> {
    NUMBER.parse(text)
}

impl Quantity {
    fn parse(&self, text: &str) -> Result<f64, QuantityError> {
        let &Quantity { name, example, .. } = self;
        let text = text.trim();
        if text.is_empty() {
            return Err(QuantityError::Empty { name, example });
        }
        let quoted = excerpt(text);
        if text.contains(',') {
            return Err(QuantityError::Comma(quoted));
        }
        let number = Written::take_apart(text).and_then(|written| {
            let (power, factor) = self.scale(&written.suffix)?;
            Some(written.to_f64(power) * factor)
        });
        match (number, self.mistaken) {
            (Some(number), _) if (self.low..=self.high).contains(&number) => Ok(number),
            (Some(_), _) => Err(QuantityError::OutOfRange {
                text: quoted,
                name,
                low: self.low,
                high: self.high,
                symbol: self.symbol,
            }),
            (None, Some((unit, hint))) if text.ends_with(unit) => {
                Err(QuantityError::OtherQuantity { text: quoted, name, hint })
            }
            (None, _) => Err(QuantityError::Unreadable { text: quoted, name, unit: self.unit, example }),
        }
    }

    /// The power of ten and the factor that a suffix stands for.
    fn scale(&self, suffix: &Suffix) -> Option<(i32, f64)> {
        let bare = |prefix| Some((prefix_power(prefix).filter(|_| self.bare_prefix)?, 1.0));
        let with_unit = |text: &str| {
            self.units.iter().find_map(|unit| {
                let power = match text.strip_suffix(unit.text)? {
                    "" => 0,
                    prefix => prefix_power(prefix).filter(|_| unit.prefixed)?,
                };
                Some((power + unit.power, unit.factor))
            })
        };
        match *suffix {
            Suffix::Behind("") => Some((0, 1.0)),
            Suffix::Behind(text) => with_unit(text).or_else(|| bare(text)),
            Suffix::AsPoint { letter, unit } => {
                let unit_fits = unit.is_empty() || self.units.iter().any(|known| known.text == unit);
                bare(letter).filter(|_| unit_fits)
            }
        }
    }
}

/// Writes a number for people: `digits` significant digits, at least one, and an engineering prefix
/// before the unit, `1.000 kHz` or `15.9 kΩ`.
///
/// A number beyond the prefixes f to T is written with a power of ten, and one that is not finite as
/// `NaN`, `inf` or `-inf`. With an empty unit the prefix stands alone.
///
/// ```
/// use roundwell::units::format_si;
///
/// assert_eq!(format_si(1000.0, 4, "Hz"), "1.000 kHz");
/// assert_eq!(format_si(-4.7e-9, 2, "F"), "-4.7 nF");
/// ```
pub fn format_si(value: f64, digits: usize, unit: &str) -> String {
    // The prefix is chosen after rounding: 999.96 with four digits is 1.000 k.
    let rounded = format!("{value:.*e}", digits.max(1) - 1);
    let split = rounded.split_once('e');
    let parsed = split.and_then(|(digits, power)| Some((digits, power.parse::<i32>().ok()?)));
    let Some((mantissa, power)) = parsed else {
        return join(&value.to_string(), unit);
    };
    let prefix = match power.div_euclid(3) {
        -5 => "f",
        -4 => "p",
        -3 => "n",
        -2 => "µ",
        -1 => "m",
        0 => "",
        1 => "k",
        2 => "M",
        3 => "G",
        4 => "T",
        _ => return join(&rounded, unit),
    };
    let (sign, mantissa) = match mantissa.strip_prefix('-') {
        Some(unsigned) => ("-", unsigned),
        None => ("", mantissa),
    };
    let figures = mantissa.replace('.', "");
    let whole = 1 + usize::try_from(power.rem_euclid(3)).unwrap_or(0);
    let number = match figures.split_at_checked(whole) {
        Some((all, "")) => all.to_owned(),
        Some((whole, fraction)) => format!("{whole}.{fraction}"),
        None => format!("{figures:0<whole$}"),
    };
    join(&format!("{sign}{number}"), &format!("{prefix}{unit}"))
}

/// A number rounded to `digits` significant digits, as short as it can be written; it reads back as the same number.
///
/// ```
/// use roundwell::units::rounded;
///
/// assert_eq!(rounded(2.0 / 3.0, 4), "0.6667");
/// assert_eq!(rounded(1500.0, 10), "1500");
/// ```
pub fn rounded(number: f64, digits: usize) -> String {
    let text = format!("{number:.*e}", digits.max(1) - 1);
    text.parse::<f64>().map_or(text, |number| number.to_string())
}

fn join(number: &str, unit: &str) -> String {
    let blank = if unit.is_empty() { "" } else { " " };
    format!("{number}{blank}{unit}")
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use proptest::prelude::*;

    use super::*;
    use crate::units::test_support::deterministic;

    type Parser = fn(&str) -> Result<f64, QuantityError>;

    // The expected numbers are literals, compared bit by bit.
    #[test]
    fn quantities_are_read() {
        let cases: [(Parser, f64, &str); 14] = [
            (parse_frequency, 1e3, "1 kHz|1k|1000|1e3 Hz|1kHz|1 khz|1K|1k0|1k0Hz|1000.00| 1 kHz "),
            (parse_frequency, 1.5e6, "1.5 MHz|1M5|1.5meg|1500 kHz"),
            (parse_frequency, 1.5e-3, "1.5 mHz|1m5"),
            (parse_frequency, 1e-6, "1 uHz|1µHz|1μHz"),
            (parse_angular, 6283.0, "6283 rad/s|6.283 krad/s|6283|6.283k|6k283"),
            (parse_decibels, 0.1, "0.1 dB|0.1|.1dB|0.1 db"),
            (parse_decibels, -40.0, "-40 dB|-40"),
            (parse_seconds, 10.0, "10 s|10|10s|1e4 ms"),
            (parse_seconds, 120.0, "2 min|2min|120"),
            (parse_seconds, 0.5, "500 ms|.5"),
            (parse_seconds, 5400.0, "1.5 h|90 min"),
            (parse_number, 0.01, "1 %|1%|0.01|1e-2"),
            (parse_number, -2.0, "-2|-200 %|-2.0"),
            (parse_number, 0.0, "0|0 %"),
        ];
        for (parse, expected, texts) in cases {
            for text in texts.split('|') {
                assert_eq!(parse(text).map(f64::to_bits), Ok(expected.to_bits()), "{text}");
            }
        }
    }

    #[test]
    fn refusals_say_what_is_wrong_and_what_to_write() {
        let cases: [(Parser, &str, &str); 17] = [
            (parse_frequency, "| ", "nothing is written where a frequency is needed: write one such as 1 kHz"),
            (parse_number, "0,7", "\"*\" has a comma: write a decimal point, and no separator between thousands"),
            (
                parse_frequency,
                "6283 rad/s|6.283krad/s",
                "\"*\" is not a frequency: give an angular frequency with the key w0, or divide it by 2 pi and write Hz",
            ),
            (
                parse_angular,
                "1 kHz|1000Hz",
                "\"*\" is not an angular frequency: give a frequency with the key f0, or multiply it by 2 pi and write rad/s",
            ),
            (
                parse_frequency,
                "NaN|inf|Hz|k|1 s|1 kk|1 xHz|1k 5|1 Hz Hz|1 kHz/|1.5M5|1e3k5|one",
                "cannot read \"*\" as a frequency: expected a finite number in Hz, for example 1 kHz",
            ),
            (
                parse_angular,
                "nan|6 rad|6 s",
                "cannot read \"*\" as an angular frequency: expected a finite number in rad/s, for example 6283 rad/s",
            ),
            (
                parse_decibels,
                "0.1 %|1k|1 mdB|1k5",
                "cannot read \"*\" as a level: expected a finite number in dB, for example 0.1 dB",
            ),
            (
                parse_seconds,
                "10 m|10 S|1 kmin|10 minutes|1k",
                "cannot read \"*\" as a time: expected a finite number in s, ms, us, min or h, for example 10 s",
            ),
            (
                parse_number,
                "inf|NaN|1k|1 k%|1 dB|4k7|%",
                "cannot read \"*\" as a number: expected a finite number without a unit, or a percentage, for example 0.7071 or 1 %",
            ),
            (
                parse_frequency,
                "0|-1k|0.9 uHz|1.1 THz|1e999|1e99999999999",
                "\"*\" is out of range: a frequency lies between 1e-6 and 1e12 Hz",
            ),
            (
                parse_angular,
                "0|1e14|-1",
                "\"*\" is out of range: an angular frequency lies between 1e-6 and 1e13 rad/s",
            ),
            (parse_decibels, "1001|-1001 dB", "\"*\" is out of range: a level lies between -1e3 and 1e3 dB"),
            (parse_seconds, "0|-1|1e8|3000 h", "\"*\" is out of range: a time lies between 1e-6 and 1e7 s"),
            (parse_number, "1e16|-1e16|1e400|-1e400", "\"*\" is out of range: a number lies between -1e15 and 1e15"),
            (parse_seconds, "", "nothing is written where a time is needed: write one such as 10 s"),
            (parse_decibels, "", "nothing is written where a level is needed: write one such as 0.1 dB"),
            (parse_number, "", "nothing is written where a number is needed: write one such as 0.7071 or 1 %"),
        ];
        for (parse, texts, message) in cases {
            for text in texts.split('|') {
                let error = parse(text).expect_err(text);
                assert_eq!(error.to_string(), message.replace('*', text.trim()), "{text}");
            }
        }
    }

    #[test]
    fn numbers_get_an_engineering_prefix() {
        for (value, digits, unit, expected) in [
            (1000.0, 4, "Hz", "1.000 kHz"),
            (15_915.494, 3, "Ω", "15.9 kΩ"),
            (159.0, 1, "Hz", "200 Hz"),
            (159.0, 0, "Hz", "200 Hz"),
            (159.0, 3, "Hz", "159 Hz"),
            (999.96, 4, "Hz", "1.000 kHz"),
            (0.999_96, 4, "V", "1.000 V"),
            (-4.7e-9, 2, "F", "-4.7 nF"),
            (2.2e-6, 3, "F", "2.20 µF"),
            (1e-15, 1, "F", "1 fF"),
            (9.99e14, 3, "Hz", "999 THz"),
            (1e15, 3, "Hz", "1.00e15 Hz"),
            (1e-16, 1, "F", "1e-16 F"),
            (0.0, 3, "Hz", "0.00 Hz"),
            (1e3, 2, "", "1.0 k"),
            (1.0, 2, "", "1.0"),
            (f64::NAN, 3, "Hz", "NaN Hz"),
            (f64::NEG_INFINITY, 3, "", "-inf"),
        ] {
            assert_eq!(format_si(value, digits, unit), expected);
        }
    }

    proptest! {
        #![proptest_config(deterministic(2048))]

        // Reference: the decimal parser of the standard library.
        #[test]
        fn plain_numbers_read_like_the_standard_library(number in -1e15..1e15_f64) {
            for text in [format!("{number}"), format!("{number:e}")] {
                prop_assert_eq!(parse_number(&text).map(f64::to_bits), Ok(number.to_bits()));
            }
        }

        #[test]
        fn what_is_written_reads_back_within_its_digits(power in -5.9..11.9_f64, digits in 1_usize..12) {
            let number = 10_f64.powf(power);
            let read = parse_frequency(&format_si(number, digits, "Hz")).unwrap();
            let half_unit = 5.0 * 0.1_f64.powi(i32::try_from(digits).unwrap());
            prop_assert!((read / number - 1.0).abs() <= half_unit * 1.000_001);
        }

        #[test]
        fn no_text_is_read_as_anything_but_a_finite_number(text in "[-0-9.e]{0,5}[ kMmu]{0,2}(Hz|rad/s|dB|s|min|%)?") {
            for parse in [parse_frequency, parse_angular, parse_decibels, parse_seconds, parse_number] {
                if let Ok(number) = parse(&text) {
                    prop_assert!(number.is_finite());
                }
            }
        }
    }
}
