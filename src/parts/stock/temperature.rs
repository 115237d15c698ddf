//! The temperature coefficient of a part.

use std::fmt;

use super::decimal::scaled;

/// A temperature coefficient in ppm/K: a mean, and how far single parts may be from it on either side.
///
/// Exact to a thousandth of a ppm/K. Read from `-200` (a mean with its sign), `±50` or `50` (a limit on either side, as
/// resistors are sold; common practice) and `-750±120` (both, as for class 1 ceramics).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct TemperatureCoefficient {
    mean: i32,
    spread: i32,
}

impl TemperatureCoefficient {
    /// The largest mean and the largest spread, 10000 ppm/K (1 %/K): beyond any resistor or capacitor that is not
    /// a sensor.
    pub const LARGEST: u32 = 10_000;

    /// The mean in ppm/K, with its sign; 0 when only a limit on either side is known.
    pub fn mean(self) -> f64 {
        f64::from(self.mean) / 1e3
    }

    /// The limit on either side of the mean in ppm/K, from 0.
    pub fn spread(self) -> f64 {
        f64::from(self.spread) / 1e3
    }

    /// Reads a number with at most three decimals, the unit `ppm/K`, `ppm/°C` or `ppm` allowed.
    ///
    /// `None` for anything else, and beyond [`TemperatureCoefficient::LARGEST`].
    pub fn read(text: &str) -> Option<TemperatureCoefficient> {
        let text = text.replace('\u{2212}', "-").replace("+/-", "±").replace("+-", "±");
        let number = strip_unit(text.trim()).trim();
        let (mean, spread) = number.split_once('±').unwrap_or(match number {
            signed if signed.starts_with(['-', '+']) => (signed, "0"),
            limit => ("", limit),
        });
        let (mean, spread) = (mean.trim(), spread.trim());
        let mean = match mean.strip_prefix('-') {
            _ if mean.is_empty() => 0,
            Some(size) => -thousandths(size.trim())?,
            None => thousandths(mean.strip_prefix('+').unwrap_or(mean).trim())?,
        };
        Some(TemperatureCoefficient { mean, spread: thousandths(spread)? })
    }
}

impl fmt::Display for TemperatureCoefficient {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match (self.mean, self.spread) {
            (0, _) => write!(f, "±{} ppm/K", self.spread()),
            (_, 0) => write!(f, "{:+} ppm/K", self.mean()),
            _ => write!(f, "{:+}±{} ppm/K", self.mean(), self.spread()),
        }
    }
}

fn thousandths(text: &str) -> Option<i32> {
    let size = i32::try_from(scaled(text, 3)?).ok()?;
    (size.unsigned_abs() <= 1000 * TemperatureCoefficient::LARGEST).then_some(size)
}

/// Whether a text is the unit of a temperature coefficient.
pub(super) fn is_unit(text: &str) -> bool {
    ["ppm/k", "ppm/°c", "ppm/c", "ppm"].contains(&text.to_lowercase().as_str())
}

/// Takes the unit off the end.
fn strip_unit(text: &str) -> &str {
    let is_number = |sign: char| sign.is_ascii_digit() || sign.is_whitespace() || sign == '.';
    let end = text.rfind(is_number).and_then(|at| Some(at + text[at..].chars().next()?.len_utf8()));
    match text.split_at(end.unwrap_or(0)) {
        (number, unit) if is_unit(unit) => number,
        _ => text,
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    // Common practice: what catalogues of resistors and capacitors write.
    #[test]
    fn a_sign_makes_a_mean_and_its_absence_a_limit() {
        for (texts, mean, spread, shown) in [
            ("50|±50|+/-50|+-50 ppm|50 ppm/K|± 50 ppm/°C|50ppm|50.000 PPM/C|0±50", 0, 50_000, "±50 ppm/K"),
            ("-200|\u{2212}200 ppm/K|- 200", -200_000, 0, "-200 ppm/K"),
            ("+350", 350_000, 0, "+350 ppm/K"),
            ("-750±120|-750 +/- 120 ppm/K", -750_000, 120_000, "-750±120 ppm/K"),
            ("2.5", 0, 2_500, "±2.5 ppm/K"),
            ("0|-0|±0", 0, 0, "±0 ppm/K"),
            ("10000", 0, 10_000_000, "±10000 ppm/K"),
        ] {
            for text in texts.split('|') {
                let read = TemperatureCoefficient::read(text).expect(text);
                assert_eq!((read.mean, read.spread), (mean, spread), "{text}");
                assert_eq!(read.to_string(), shown);
            }
        }
        let both = TemperatureCoefficient::read("-750±120").unwrap();
        assert_eq!((both.mean().to_bits(), both.spread().to_bits()), ((-750.0_f64).to_bits(), 120.0_f64.to_bits()));
        for text in
            ["", "ppm", "x", "10001", "-10000.1", "0.0001", "--5", "5 %", "50 ppm/F", "±", "±-5", "1e3", "5±5±5"]
        {
            assert_eq!(TemperatureCoefficient::read(text), None, "{text}");
        }
    }
}
