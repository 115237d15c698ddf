//! Decimal numbers in the cells of a stock file: which sign is the decimal mark, and the exact number.

use std::borrow::Cow;

use super::StockFault;
use crate::units::{Value, excerpt};

/// What the numbers of a file tell about its decimal marks.
///
/// `4,7` and `0.25` leave no doubt. `4,700` does: with a decimal comma it is 4.7, with a separator between thousands
/// 4700. It is read as a decimal only when the rest of the file shows that its mark is the decimal mark.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub(super) struct Marks {
    /// Some number has a comma that can only be a decimal mark.
    pub comma: bool,
    /// Some number has a point that can only be a decimal mark.
    pub point: bool,
}

impl Marks {
    /// The marks of the numbers in these cells.
    pub fn of<'a>(cells: impl IntoIterator<Item = &'a str>) -> Marks {
        let mut marks = Marks::default();
        for cell in cells {
            match only_mark(cell) {
                Some((at, ',')) if !may_be_thousands(cell, at) => marks.comma = true,
                Some((at, '.')) if !may_be_thousands(cell, at) => marks.point = true,
                _ => {}
            }
        }
        marks
    }

    /// The number with a decimal point.
    pub fn plain<'a>(&self, text: &'a str) -> Result<Cow<'a, str>, StockFault> {
        if !text.contains([',', '.']) {
            return Ok(Cow::Borrowed(text));
        }
        let Some((at, mark)) = only_mark(text) else {
            return Err(StockFault::SeveralMarks(excerpt(text)));
        };
        let is_decimal = match mark {
            ',' => self.comma && !self.point,
            _ => !self.comma,
        };
        if may_be_thousands(text, at) && !is_decimal {
            return Err(StockFault::DecimalOrThousands(excerpt(text)));
        }
        Ok(Cow::Owned(text.replace(',', ".")))
    }
}

/// The place of the comma or point of a text, if there is just one of both.
fn only_mark(text: &str) -> Option<(usize, char)> {
    let mut marks = text.char_indices().filter(|&(_, sign)| sign == ',' || sign == '.');
    marks.next().filter(|_| marks.next().is_none())
}

/// Whether the mark at a byte stands where a separator between thousands would: `4,700` and `12.500k`.
fn may_be_thousands(text: &str, at: usize) -> bool {
    let before = &text[..at];
    let whole = before.trim_start_matches(|sign: char| !sign.is_ascii_digit());
    let behind = &text[at + 1..];
    let places = behind.bytes().take_while(u8::is_ascii_digit).count();
    let digits = whole.bytes().rev().take_while(u8::is_ascii_digit).count();
    let leading = &whole[whole.len() - digits..];
    (1..=3).contains(&digits) && !leading.starts_with('0') && places == 3
}

/// A plain decimal number such as `0.25`, as its digits and the count of those behind the point; no sign, no power
/// of ten, at most 15 digits.
fn decimal(text: &str) -> Option<(u64, u32)> {
    let (whole, fraction) = text.split_once('.').unwrap_or((text, ""));
    if whole.is_empty() && fraction.is_empty() {
        return None;
    }
    let fraction_digits = fraction.trim_end_matches('0');
    let digits = format!("{whole}{fraction_digits}");
    let is_plain = [whole, fraction].iter().all(|part| part.bytes().all(|byte| byte.is_ascii_digit()));
    let digits = digits.trim_start_matches('0');
    if !is_plain || digits.len() > 15 {
        return None;
    }
    let number = if digits.is_empty() { 0 } else { digits.parse().ok()? };
    Some((number, u32::try_from(fraction_digits.len()).ok()?))
}

/// A plain decimal number larger than zero.
pub(super) fn positive(text: &str) -> Option<Value> {
    let (digits, places) = decimal(text)?;
    Value::new(digits, -i32::try_from(places).ok()?).ok()
}

/// A plain decimal number in units of `10^-places`, when it has no more places than that.
pub(super) fn scaled(text: &str, places: u32) -> Option<u64> {
    let (digits, given) = decimal(text)?;
    digits.checked_mul(10_u64.checked_pow(places.checked_sub(given)?)?)
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    fn told(marks: Marks, text: &str) -> String {
        marks.plain(text).map_or_else(|fault| fault.to_string(), Cow::into_owned)
    }

    #[test]
    fn certain_marks_are_told_from_doubtful_ones() {
        let certain = |texts: &[&str]| {
            let marks = Marks::of(texts.iter().copied());
            (marks.comma, marks.point)
        };
        assert_eq!(certain(&["4k7", "4,700", "4.700", "12,500k", "-1,000", "EUR 1,000"]), (false, false));
        assert_eq!(certain(&["4,7k"]), (true, false));
        assert_eq!(certain(&["0,250", "2.5 %"]), (true, true));
        assert_eq!(certain(&["4700,125"]), (true, false));
        // Two marks say nothing.
        assert_eq!(certain(&["1,000,000", "1.234,5"]), (false, false));
    }

    #[test]
    fn a_doubtful_mark_is_read_only_where_the_file_explains_it() {
        let marks = |comma, point| Marks { comma, point };
        for (comma, point, text, expected) in [
            (false, false, "4,7k", "4.7k"),
            (false, false, "4.700", "4.700"),
            (false, true, "4.700", "4.700"),
            (true, false, "4,712k", "4.712k"),
            (true, true, "4,7k", "4.7k"),
            (true, false, "4k7", "4k7"),
        ] {
            assert_eq!(told(marks(comma, point), text), expected);
        }
        for (comma, point, text) in
            [(false, false, "4,700"), (false, true, "4,700"), (true, false, "4.700"), (true, true, "4,700")]
        {
            let expected = format!(
                "\"{text}\" could have decimals or a separator between thousands: write it without the sign, or \
                 with another count of decimals"
            );
            assert_eq!(told(marks(comma, point), text), expected);
        }
        assert_eq!(
            told(marks(false, false), "1.234,50"),
            "\"1.234,50\" has several commas or points: write one decimal mark, and no separator between thousands"
        );
    }

    #[test]
    fn decimals_are_exact() {
        assert_eq!(positive("0.250"), Some(Value::new(25, -2).unwrap()));
        assert_eq!(positive("5"), Some(Value::new(5, 0).unwrap()));
        assert_eq!(positive(".5"), Some(Value::new(5, -1).unwrap()));
        assert_eq!(scaled("1.20", 6), Some(1_200_000));
        assert_eq!(scaled("0.000", 3), Some(0));
        assert_eq!(scaled("0.0001", 3), None);
        assert_eq!(scaled("999999999999999", 0), Some(999_999_999_999_999));
        for text in ["", ".", "-1", "+1", "1e3", "1.2.3", "1,2", "٤", "0.00", "1000000000000000"] {
            assert_eq!(positive(text), None, "{text}");
        }
    }
}
