//! The value of a part as an exact decimal, and the kind of part it belongs to.
//!
//! Two parts are the same part number when their values are equal. Floats cannot decide that:
//! `15.0 * 1e-10` and `1.5e-9` may differ in the last bit. So a value is kept as an integer and a
//! power of ten, and turned into a float only where the physics starts.

use std::cmp::Ordering;
use std::fmt;

use serde::{Deserialize, Serialize};
use thiserror::Error;

/// The kind of part a value belongs to. Ordered and serialised by its letter, `"R"` or `"C"`.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub enum Kind {
    /// A resistor, in ohms.
    #[serde(rename = "R")]
    Resistor,
    /// A capacitor, in farads.
    #[serde(rename = "C")]
    Capacitor,
}

impl Kind {
    /// The letter of the reference designator: `R` or `C`.
    pub fn letter(self) -> char {
        match self {
            Kind::Resistor => 'R',
            Kind::Capacitor => 'C',
        }
    }

    /// The symbol of the SI unit: `Ω` (U+03A9) or `F`.
    pub fn unit(self) -> &'static str {
        match self {
            Kind::Resistor => "Ω",
            Kind::Capacitor => "F",
        }
    }

    /// The name in running text: `resistor` or `capacitor`.
    pub fn name(self) -> &'static str {
        match self {
            Kind::Resistor => "resistor",
            Kind::Capacitor => "capacitor",
        }
    }

    /// The smallest and the largest value that is taken for a part of this kind: 1 mΩ to 1 TΩ, 1 fF
    /// to 100 F.
    ///
    /// The limits hold every part that is sold with room to spare, and are there to catch slips: a
    /// power of ten out of place, or a three-digit marking code such as `104` read as 104 F.
    pub fn range(self) -> (Value, Value) {
        let power = |exponent| Value { exponent, ..Value::ONE };
        match self {
            Kind::Resistor => (power(-3), power(12)),
            Kind::Capacitor => (power(-15), power(2)),
        }
    }

    /// Whether `value` lies within [`Kind::range`], ends included.
    pub fn allows(self, value: Value) -> bool {
        let (low, high) = self.range();
        (low..=high).contains(&value)
    }
}

/// Why a number cannot be a [`Value`].
#[derive(Clone, Copy, Debug, PartialEq, Eq, Error)]
pub enum ValueError {
    /// The mantissa is zero; a value is positive.
    #[error("zero is no part value: give a positive number")]
    Zero,
    /// More significant digits than a value holds.
    #[error(
        "{0} has too many digits: a part value holds at most {max} significant digits, round it",
        max = Value::MAX_DIGITS
    )]
    TooManyDigits(u64),
    /// The power of ten does not fit.
    #[error(
        "the power of ten {0} is out of range: allowed are {min} to {max}",
        min = i8::MIN,
        max = i8::MAX
    )]
    Exponent(i64),
}

/// A positive decimal number, exact: `mantissa * 10^exponent`, in ohms or farads.
///
/// It is kept without trailing zeros in the mantissa, so equal numbers are equal in every bit, and
/// equality, order and hash are those of the numbers. `Display` writes plain scientific notation,
/// for example `4.7e-9`; [`format_part`](super::format_part) writes what is printed on parts.
///
/// ```
/// use roundwell::units::Value;
///
/// let value = Value::new(4700, -12)?;
/// assert_eq!((value.mantissa(), value.exponent()), (47, -10));
/// assert_eq!(value, Value::new(47, -10)?);
/// assert_eq!(value.to_string(), "4.7e-9");
/// # Ok::<(), roundwell::units::ValueError>(())
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub struct Value {
    mantissa: u64,
    exponent: i8,
}

/// The powers of ten that a float holds exactly.
const EXACT_POWERS: [f64; 23] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19,
    1e20, 1e21, 1e22,
];

impl Value {
    /// The number 1: one ohm or one farad.
    pub const ONE: Value = Value { mantissa: 1, exponent: 0 };

    /// The largest number of significant digits, 12. Small enough that every mantissa is also an
    /// exact float.
    pub const MAX_DIGITS: u32 = 12;

    /// The number `mantissa * 10^exponent`.
    ///
    /// # Errors
    /// [`ValueError::Zero`], [`ValueError::TooManyDigits`] when more than [`Value::MAX_DIGITS`]
    /// digits are left without the trailing zeros, and [`ValueError::Exponent`] when the power of ten
    /// that goes with them is outside -128 to 127.
    pub fn new(mantissa: u64, exponent: i32) -> Result<Value, ValueError> {
        if mantissa == 0 {
            return Err(ValueError::Zero);
        }
        let (mut short, mut power) = (mantissa, i64::from(exponent));
        while short.is_multiple_of(10) {
            short /= 10;
            power += 1;
        }
        if digit_count(short) > Value::MAX_DIGITS {
            return Err(ValueError::TooManyDigits(mantissa));
        }
        let exponent = i8::try_from(power).map_err(|_| ValueError::Exponent(power))?;
        Ok(Value { mantissa: short, exponent })
    }

    /// The significant digits as an integer: positive, no trailing zeros, at most 12 digits.
    pub fn mantissa(self) -> u64 {
        self.mantissa
    }

    /// The power of ten that belongs to [`Value::mantissa`].
    pub fn exponent(self) -> i32 {
        i32::from(self.exponent)
    }

    /// The power of ten of the leading digit: 3 for 4.7e3.
    pub fn decade(self) -> i32 {
        self.exponent() + digit_count(self.mantissa).cast_signed() - 1
    }

    /// The nearest float: the same bits as the decimal literal, always finite and positive.
    pub fn to_f64(self) -> f64 {
        let power = EXACT_POWERS.get(usize::from(self.exponent.unsigned_abs()));
        // With both operands exact, one rounding is the correct rounding.
        let mantissa = self.mantissa as f64;
        match power {
            Some(power) if self.exponent < 0 => mantissa / power,
            Some(power) => mantissa * power,
            None => format!("{}e{}", self.mantissa, self.exponent).parse().unwrap_or(f64::NAN),
        }
    }

    /// This value times `10^decades`, or `None` when the power of ten does not fit.
    pub fn shifted(self, decades: i32) -> Option<Value> {
        let exponent = self.exponent().checked_add(decades)?;
        Some(Value { mantissa: self.mantissa, exponent: i8::try_from(exponent).ok()? })
    }

    /// The exact sum, or `None` when it needs more digits than a value holds.
    pub fn sum(self, other: Value) -> Option<Value> {
        let (high, low) = if self.exponent >= other.exponent { (self, other) } else { (other, self) };
        let shift = u32::try_from(high.exponent() - low.exponent()).ok()?;
        let raised = 10_u64.checked_pow(shift)?.checked_mul(high.mantissa)?;
        Value::new(raised.checked_add(low.mantissa)?, low.exponent()).ok()
    }

    /// The mantissa padded to [`Value::MAX_DIGITS`] digits, for comparison within one decade.
    fn padded(self) -> u64 {
        self.mantissa * 10_u64.pow(Value::MAX_DIGITS - digit_count(self.mantissa))
    }
}

/// The number of decimal digits of a positive integer.
fn digit_count(number: u64) -> u32 {
    number.checked_ilog10().map_or(1, |power| power + 1)
}

impl Ord for Value {
    fn cmp(&self, other: &Value) -> Ordering {
        (self.decade(), self.padded()).cmp(&(other.decade(), other.padded()))
    }
}

impl PartialOrd for Value {
    fn partial_cmp(&self, other: &Value) -> Option<Ordering> {
        Some(self.cmp(other))
    }
}

impl fmt::Display for Value {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let digits = self.mantissa.to_string();
        let (lead, rest) = digits.split_at(1);
        let point = if rest.is_empty() { "" } else { "." };
        f.pad(&format!("{lead}{point}{rest}e{}", self.decade()))
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use std::collections::HashSet;

    use proptest::prelude::*;

    use super::*;
    use crate::units::test_support::deterministic;

    fn value(mantissa: u64, exponent: i32) -> Value {
        Value::new(mantissa, exponent).unwrap()
    }

    #[test]
    fn one_number_is_one_value_however_it_is_written() {
        let same = [value(15, -10), value(150, -11), value(15_000_000_000_000_000, -25)];
        assert_eq!(same.into_iter().collect::<HashSet<_>>().len(), 1);
        assert_eq!((same[2].mantissa(), same[2].exponent()), (15, -10));
    }

    #[test]
    fn refusals_name_the_number_and_the_limit() {
        let message = |mantissa, exponent| Value::new(mantissa, exponent).unwrap_err().to_string();
        assert_eq!(message(0, 3), "zero is no part value: give a positive number");
        assert_eq!(
            message(1_234_567_890_123, 0),
            "1234567890123 has too many digits: a part value holds at most 12 significant digits, round it"
        );
        assert_eq!(message(1, 128), "the power of ten 128 is out of range: allowed are -128 to 127");
        assert!(Value::new(1, 127).is_ok() && Value::new(999_999_999_999, -128).is_ok());
        assert_eq!(Value::new(10, i32::MAX), Err(ValueError::Exponent(1 << 31)));
        assert_eq!(Value::new(10, -129), Ok(value(1, -128)));
    }

    #[test]
    fn order_is_that_of_the_numbers() {
        let rising = [
            value(1, -128),
            value(999_999_999_999, -27),
            value(1, -15),
            value(47, -10),
            value(470_000_000_001, -20),
            value(5, -9),
            value(10, 0),
            value(1, 127),
        ];
        assert!(rising.is_sorted_by(|a, b| a < b));
    }

    #[test]
    fn display_is_plain_scientific() {
        for (value, text) in
            [(value(47, -10), "4.7e-9"), (value(1000, 0), "1e3"), (value(100_000_000_001, -12), "1.00000000001e-1")]
        {
            assert_eq!(value.to_string(), text);
        }
        assert_eq!(format!("{:>8}", value(1, 0)), "     1e0");
    }

    #[test]
    fn shifts_and_sums_are_exact_or_refused() {
        assert_eq!(value(47, -10).shifted(3), Some(value(47, -7)));
        assert_eq!(value(1, 127).shifted(1), None);
        assert_eq!(value(1, 127).shifted(i32::MAX), None);
        // Pairs that binary floats add inexactly.
        assert_eq!(value(1, -1).sum(value(2, -1)), Some(value(3, -1)));
        assert_eq!(value(33, -10).sum(value(1, -12)), Some(value(3301, -12)));
        assert_eq!(value(95, 0).sum(value(5, 0)), Some(value(1, 2)));
        assert_eq!(value(1, 11).sum(value(1, 0)), Some(value(100_000_000_001, 0)));
        assert_eq!(value(1, 12).sum(value(1, 0)), None);
        assert_eq!(value(1, 127).sum(value(1, -128)), None);
    }

    #[test]
    fn ranges_hold_their_ends_only() {
        for kind in [Kind::Resistor, Kind::Capacitor] {
            let (low, high) = kind.range();
            assert!(kind.allows(low) && kind.allows(high));
            assert!(!kind.allows(low.shifted(-1).unwrap()));
            assert!(!kind.allows(high.sum(high).unwrap()));
        }
        assert_eq!(Kind::Resistor.range().1.to_string(), "1e12");
        assert_eq!(Kind::Capacitor.range().0.to_string(), "1e-15");
        assert_eq!(
            [Kind::Resistor, Kind::Capacitor].map(|kind| (kind.letter(), kind.unit(), kind.name())),
            [('R', "Ω", "resistor"), ('C', "F", "capacitor")]
        );
        assert_eq!(serde_json::to_string(&[Kind::Resistor, Kind::Capacitor]).unwrap(), r#"["R","C"]"#);
    }

    proptest! {
        #![proptest_config(deterministic(4096))]

        // Reference: the decimal parser of the standard library, which rounds correctly.
        #[test]
        fn floats_are_correctly_rounded(mantissa in 1_u64..1_000_000_000_000, exponent in -128..=115_i32) {
            let expected: f64 = format!("{mantissa}e{exponent}").parse().unwrap();
            prop_assert_eq!(value(mantissa, exponent).to_f64().to_bits(), expected.to_bits());
        }

        // Reference: integer arithmetic on a common power of ten.
        #[test]
        fn order_and_sum_agree_with_integers(
            (a, b) in (1_u64..1_000_000, 1_u64..1_000_000),
            (p, q) in (0_u32..12, 0_u32..12),
        ) {
            let wide = |mantissa: u64, power: u32| u128::from(mantissa) * 10_u128.pow(power);
            let [left, right] = [(a, p), (b, q)].map(|(m, e)| value(m, e.cast_signed() - 20));
            prop_assert_eq!(left.cmp(&right), wide(a, p).cmp(&wide(b, q)));
            let total = wide(a, p) + wide(b, q);
            let expected = u64::try_from(total).ok().and_then(|sum| Value::new(sum, -20).ok());
            prop_assert_eq!(left.sum(right), expected);
            prop_assert_eq!(right.sum(left), expected);
        }
    }
}
