//! The tolerance of a part.

use thiserror::Error;

use super::decimal::positive;
use crate::units::{Kind, Value, excerpt, parse_part};

/// How far a part may be from its nominal value when it is delivered. Exact, so that tolerances can be told apart.
///
/// ```
/// use roundwell::parts::Tolerance;
/// use roundwell::units::{Kind, parse_part};
///
/// let nominal = parse_part("10n", Kind::Capacitor)?;
/// let tolerance = Tolerance::read("J", Kind::Capacitor, nominal)?;
/// assert_eq!(tolerance, Tolerance::read("±5 %", Kind::Capacitor, nominal)?);
/// assert_eq!(tolerance.in_words(Kind::Capacitor), "±5 %");
/// // Below 10 pF the letters stand for picofarads.
/// let small = parse_part("4p7", Kind::Capacitor)?;
/// assert_eq!(Tolerance::read("C", Kind::Capacitor, small)?.in_words(Kind::Capacitor), "±0.25 pF");
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Tolerance {
    /// In proportion to the nominal value: 0.05 is 5 %.
    Relative {
        /// How far below, as a ratio less than 1.
        below: Value,
        /// How far above, as a ratio of at most 1.
        above: Value,
    },
    /// The same amount on either side, in ohms or farads, less than the nominal value.
    Absolute(Value),
}

/// Why a text is no tolerance.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
pub enum ToleranceError {
    /// Nothing that can be read.
    #[error("\"{text}\" is no tolerance: expected a percentage, a letter of IEC 60062 or {}, for example 5 %, J or {}", amount(*.kind), example(*.kind))]
    Unreadable {
        /// The text.
        text: String,
        /// The kind of part.
        kind: Kind,
    },
    /// A number alone, which could be a percentage or a ratio.
    #[error("\"{0}\" has no unit: write {0} % if it is a percentage")]
    NoUnit(String),
    /// Zero or below, or too large.
    #[error(
        "\"{0}\" is out of range: a tolerance is larger than 0, and less than 100 % of the value below it, at most 100 % above"
    )]
    OutOfRange(String),
}

impl ToleranceError {
    /// The same error with another text in its quotes.
    pub(super) fn requoted(self, with: String) -> ToleranceError {
        match self {
            ToleranceError::Unreadable { kind, .. } => ToleranceError::Unreadable { text: with, kind },
            ToleranceError::NoUnit(_) => ToleranceError::NoUnit(with),
            ToleranceError::OutOfRange(_) => ToleranceError::OutOfRange(with),
        }
    }
}

fn amount(kind: Kind) -> &'static str {
    match kind {
        Kind::Resistor => "an amount in ohms",
        Kind::Capacitor => "an amount in farads",
    }
}

fn example(kind: Kind) -> &'static str {
    match kind {
        Kind::Resistor => "0.05 ohm",
        Kind::Capacitor => "0.25 pF",
    }
}

impl Tolerance {
    /// Reads the tolerance of a part of this kind and nominal value: `1%`, `±5 %`, `-20/+80 %`, `0.25 pF`, or a letter
    /// of IEC 60062.
    ///
    /// The letters are W 0.05, B 0.1, C 0.25, D 0.5, F 1, G 2, H 3, J 5, K 10, M 20 and N 30 %, and on two sides
    /// Q -10/+30, T -10/+50, S -20/+50 and Z -20/+80 %. For capacitors below 10 pF, B, C, D, F and G are 0.1, 0.25,
    /// 0.5, 1 and 2 pF. A number alone is refused: `0.05` could be meant as 5 %.
    ///
    /// # Errors
    /// [`ToleranceError`], one for each way to go wrong.
    pub fn read(text: &str, kind: Kind, nominal: Value) -> Result<Tolerance, ToleranceError> {
        let text = text.trim();
        let plain = text.replace('\u{2212}', "-").replace("+/-", "±").replace("+-", "±");
        let quoted = excerpt(text);
        if let Some(tolerance) = of_letter(&plain, kind, nominal) {
            return tolerance.within(nominal).ok_or(ToleranceError::OutOfRange(quoted));
        }
        let one_sided = plain.strip_prefix('±').unwrap_or(&plain).trim();
        let read = match two_sides(&plain) {
            Some([below, above]) => percent(below).zip(percent(above)),
            None => match one_sided.strip_suffix('%') {
                Some(number) => percent(number).map(|side| (side, side)),
                None if is_number(one_sided) => return Err(ToleranceError::NoUnit(quoted)),
                None => {
                    let amount = parse_part(one_sided, kind);
                    let amount = amount.map_err(|_| ToleranceError::Unreadable { text: quoted.clone(), kind })?;
                    return Tolerance::Absolute(amount).within(nominal).ok_or(ToleranceError::OutOfRange(quoted));
                }
            },
        };
        let Some((below, above)) = read else {
            return Err(match one_sided.trim_end_matches('%').trim().strip_prefix('-') {
                Some(number) if is_number(number) => ToleranceError::OutOfRange(quoted),
                _ => ToleranceError::Unreadable { text: quoted, kind },
            });
        };
        let tolerance =
            below.zip(above).and_then(|(below, above)| Tolerance::Relative { below, above }.within(nominal));
        tolerance.ok_or(ToleranceError::OutOfRange(quoted))
    }

    /// The smallest and the largest value that a good part of this nominal value may have, in ohms or farads.
    pub fn limits(self, nominal: Value) -> (f64, f64) {
        let value = nominal.to_f64();
        match self {
            Tolerance::Relative { below, above } => (value - value * below.to_f64(), value + value * above.to_f64()),
            Tolerance::Absolute(amount) => (value - amount.to_f64(), value + amount.to_f64()),
        }
    }

    /// The tolerance for people: `±5 %`, `-20/+80 %`, `±0.25 pF`, `±0.05 Ω`.
    pub fn in_words(self, kind: Kind) -> String {
        let scaled = |value: Value, decades| value.shifted(decades).unwrap_or(value).to_f64();
        match (self, kind) {
            (Tolerance::Relative { below, above }, _) if below == above => format!("±{} %", scaled(below, 2)),
            (Tolerance::Relative { below, above }, _) => format!("-{}/+{} %", scaled(below, 2), scaled(above, 2)),
            (Tolerance::Absolute(amount), Kind::Resistor) => format!("±{} Ω", scaled(amount, 0)),
            (Tolerance::Absolute(amount), Kind::Capacitor) => format!("±{} pF", scaled(amount, 12)),
        }
    }

    /// The tolerance, if it leaves every part of this nominal value larger than zero and none more than twice as large.
    fn within(self, nominal: Value) -> Option<Tolerance> {
        let fits = match self {
            Tolerance::Relative { below, above } => below < Value::ONE && above <= Value::ONE,
            Tolerance::Absolute(amount) => amount < nominal,
        };
        fits.then_some(self)
    }
}

/// The tolerance that a letter of IEC 60062 stands for. W, H, N and the two-sided ones are from memory.
fn of_letter(text: &str, kind: Kind, nominal: Value) -> Option<Tolerance> {
    let hundredths = |count: u64| Value::new(count, -4).ok();
    let letter = text.chars().next().filter(|_| text.len() == 1)?.to_ascii_uppercase();
    let sides =
        |below: u64, above: u64| Some(Tolerance::Relative { below: hundredths(below)?, above: hundredths(above)? });
    let size = match letter {
        'W' => 5,
        'B' => 10,
        'C' => 25,
        'D' => 50,
        'F' => 100,
        'G' => 200,
        'H' => 300,
        'J' => 500,
        'K' => 1000,
        'M' => 2000,
        'N' => 3000,
        'Q' => return sides(1000, 3000),
        'T' => return sides(1000, 5000),
        'S' => return sides(2000, 5000),
        'Z' => return sides(2000, 8000),
        _ => return None,
    };
    let is_small = kind == Kind::Capacitor && Value::new(1, -11).is_ok_and(|limit| nominal < limit);
    if is_small && "BCDFG".contains(letter) {
        return Value::new(size, -14).ok().map(Tolerance::Absolute);
    }
    sides(size, size)
}

/// The numbers below and above of `-20/+80 %` or `+80 % -20 %`, without signs and units.
fn two_sides(text: &str) -> Option<[&str; 2]> {
    let unsigned = text.strip_suffix('%')?;
    let second = unsigned.rfind(['+', '-']).filter(|at| *at > 0)?;
    let (first, last) = unsigned.split_at(second);
    let first = first.trim().trim_end_matches('/').trim().trim_end_matches('%');
    let (below, above) = if first.starts_with('-') { (first, last) } else { (last, first) };
    Some([below.strip_prefix('-')?, above.strip_prefix('+')?])
}

/// A percentage as a ratio; the inner nothing is zero.
fn percent(text: &str) -> Option<Option<Value>> {
    let number = text.trim();
    is_number(number).then(|| positive(number).and_then(|value| value.shifted(-2)))
}

fn is_number(text: &str) -> bool {
    let digits = text.bytes().filter(u8::is_ascii_digit).count();
    let points = text.bytes().filter(|byte| *byte == b'.').count();
    digits > 0 && points <= 1 && digits + points == text.len()
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    fn read(text: &str, kind: Kind, nominal: &str) -> Result<String, String> {
        let tolerance = Tolerance::read(text, kind, parse_part(nominal, kind).unwrap());
        tolerance.map(|tolerance| tolerance.in_words(kind)).map_err(|error| error.to_string())
    }

    #[test]
    fn percentages_and_amounts_are_read() {
        for (texts, kind, nominal, expected) in [
            ("5%|±5 %|5.00 %|+/-5%|+-5 %|± 5%| 5 % |J|j", Kind::Resistor, "4k7", "±5 %"),
            ("0.1 %|.1%|B", Kind::Resistor, "4k7", "±0.1 %"),
            ("-20/+80 %|+80/-20%|-20% +80%|+80 % / -20 %|\u{2212}20/+80%|Z", Kind::Capacitor, "100n", "-20/+80 %"),
            ("0.25pF|±0.25 pF|250 fF|C", Kind::Capacitor, "4p7", "±0.25 pF"),
            ("0.05 ohm|±50 mΩ|R05", Kind::Resistor, "1R", "±0.05 Ω"),
            ("-99.9/+100 %", Kind::Resistor, "1R", "-99.9/+100 %"),
        ] {
            for text in texts.split('|') {
                assert_eq!(read(text, kind, nominal).as_deref(), Ok(expected), "{text}");
            }
        }
    }

    // Source: IEC 60062, tolerance letters; W, H, N and the two-sided ones from memory.
    #[test]
    fn letters_depend_on_kind_and_value() {
        for (letters, large, small) in [
            ("W", "±0.05 %", "±0.05 %"),
            ("B", "±0.1 %", "±0.1 pF"),
            ("C", "±0.25 %", "±0.25 pF"),
            ("D", "±0.5 %", "±0.5 pF"),
            ("F", "±1 %", "±1 pF"),
            ("G", "±2 %", "±2 pF"),
            ("H", "±3 %", "±3 %"),
            ("J", "±5 %", "±5 %"),
            ("K", "±10 %", "±10 %"),
            ("M", "±20 %", "±20 %"),
            ("N", "±30 %", "±30 %"),
            ("Q", "-10/+30 %", "-10/+30 %"),
            ("T", "-10/+50 %", "-10/+50 %"),
            ("S", "-20/+50 %", "-20/+50 %"),
            ("Z", "-20/+80 %", "-20/+80 %"),
        ] {
            assert_eq!(read(letters, Kind::Capacitor, "10p").as_deref(), Ok(large), "{letters}");
            assert_eq!(read(letters, Kind::Resistor, "4R7").as_deref(), Ok(large), "{letters}");
            assert_eq!(read(letters, Kind::Capacitor, "9p99").as_deref(), Ok(small), "{letters}");
        }
    }

    #[test]
    fn refusals_say_what_to_write() {
        let range = "is out of range: a tolerance is larger than 0, and less than 100 % of the value below it, at most 100 % above";
        for (text, kind, nominal) in [
            ("0 %", Kind::Resistor, "1k"),
            ("100 %", Kind::Resistor, "1k"),
            ("-5 %", Kind::Resistor, "1k"),
            ("-0/+50 %", Kind::Capacitor, "1u"),
            ("-20/+101 %", Kind::Capacitor, "1u"),
            ("0.5 pF", Kind::Capacitor, "p5"),
            ("D", Kind::Capacitor, "p5"),
            ("1.0000000000000001 %", Kind::Resistor, "1k"),
        ] {
            assert_eq!(read(text, kind, nominal), Err(format!("\"{text}\" {range}")));
        }
        assert_eq!(
            read("0.05", Kind::Resistor, "1k"),
            Err("\"0.05\" has no unit: write 0.05 % if it is a percentage".into())
        );
        for text in
            ["x", "5 % J", "L", "%", "", "5 %%", "5 kg", "-20/80 %", "20/80 %", "1e1 %", "±", "--5 %", "10 nF"]
        {
            assert_eq!(
                read(text, Kind::Resistor, "1k"),
                Err(format!(
                    "\"{text}\" is no tolerance: expected a percentage, a letter of IEC 60062 or an amount in ohms, \
                     for example 5 %, J or 0.05 ohm"
                ))
            );
        }
        assert_eq!(
            read("1 ohm", Kind::Capacitor, "1p"),
            Err("\"1 ohm\" is no tolerance: expected a percentage, a letter of IEC 60062 or an amount in farads, \
                 for example 5 %, J or 0.25 pF"
                .into())
        );
    }

    #[test]
    fn limits_are_those_of_the_part() {
        let nominal = parse_part("100R", Kind::Resistor).unwrap();
        let tolerance = |text| Tolerance::read(text, Kind::Resistor, nominal).unwrap();
        assert_eq!(tolerance("5 %").limits(nominal), (95.0, 105.0));
        assert_eq!(tolerance("-25/+50 %").limits(nominal), (75.0, 150.0));
        assert_eq!(tolerance("2 ohm").limits(nominal), (98.0, 102.0));
    }
}
