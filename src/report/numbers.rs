//! Numbers as people read them.

use crate::units::{Kind, Value, format_part, format_si};

/// A whole number with a comma between groups of three digits.
pub fn count(number: u64) -> String {
    let digits = number.to_string();
    let mut shown = String::new();
    for (index, digit) in digits.chars().enumerate() {
        if index > 0 && (digits.len() - index).is_multiple_of(3) {
            shown.push(',');
        }
        shown.push(digit);
    }
    shown
}

/// A number rounded to `digits` significant digits, without trailing zeros.
pub fn short(number: f64, digits: usize) -> String {
    let rounded = format!("{number:.*e}", digits.saturating_sub(1));
    rounded.parse::<f64>().map_or(rounded, |value| {
        if value.abs() < 1e-4 && value.abs() > 0.0 { format!("{value:e}") } else { value.to_string() }
    })
}

/// A number rounded to `digits` significant digits with an SI prefix and a unit, without trailing zeros.
pub fn level(number: f64, digits: usize, unit: &str) -> String {
    let text = format_si(number, digits, unit);
    let end = text.find(|c: char| !(c.is_ascii_digit() || "+-.".contains(c))).unwrap_or(text.len());
    let (digits, suffix) = text.split_at(end);
    let digits = if digits.contains('.') { digits.trim_end_matches('0').trim_end_matches('.') } else { digits };
    format!("{digits}{suffix}").trim_end().to_string()
}

/// Numbers of one column with the same count of decimals: as many as give the smallest that counts three significant
/// digits, from two to six. What is not known is a dash.
pub fn decimal_column(numbers: &[Option<f64>]) -> Vec<String> {
    const LEAST: f64 = 5e-7;
    let smallest = numbers.iter().flatten().map(|x| x.abs()).filter(|x| *x >= LEAST).fold(f64::INFINITY, f64::min);
    let decimals = if smallest.is_finite() { (2.0 - smallest.log10().floor()).clamp(2.0, 6.0) as usize } else { 2 };
    numbers.iter().map(|number| number.map_or("-".to_string(), |x| format!("{x:.decimals$}"))).collect()
}

/// A relative difference in percent with its sign.
pub fn percent(ratio: f64) -> String {
    let shown = 100.0 * ratio;
    let text = if shown.abs() < 0.1 { format!("{shown:+.4}") } else { format!("{shown:+.2}") };
    let is_zero = text.chars().all(|c| "+-0.".contains(c));
    if is_zero { "0 %".to_string() } else { format!("{text} %") }
}

/// An error in the unit of its measure: dB, or in percent where it is a plain ratio.
pub fn error_in_words(unit: &str, error: f64) -> String {
    match unit {
        "" => format!("{} %", short(100.0 * error, 4)),
        unit => format!("{} {unit}", short(error, 4)),
    }
}

/// A span of time.
pub fn span_of_time(seconds: f64) -> String {
    if seconds < 0.1 { format!("{:.1} ms", seconds * 1e3) } else { format!("{seconds:.2} s") }
}

/// A value that cannot be bought, in the notation of parts, rounded to four digits.
pub fn rounded_part(value: f64, kind: Kind) -> String {
    let text = format!("{value:.3e}");
    let rounded = text.split_once('e').and_then(|(digits, power)| {
        let mantissa: u64 = digits.replace('.', "").parse().ok()?;
        Value::new(mantissa, power.parse::<i32>().ok()? - 3).ok()
    });
    rounded.map_or(text, |value| format_part(value, kind))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_are_short_and_clear() {
        assert_eq!([0, 999, 1000, 1_234_567].map(count), ["0", "999", "1,000", "1,234,567"]);
        assert_eq!(short(0.541_200_01, 6), "0.5412");
        assert_eq!(short(-2.0, 4), "-2");
        assert_eq!(short(1.234_56e-7, 3), "1.23e-7");
        assert_eq!(short(123_456.0, 3), "123000");
        assert_eq!(level(1000.0, 6, "Hz"), "1 kHz");
        assert_eq!(level(999.97, 6, "Hz"), "999.97 Hz");
        assert_eq!(level(16_234.0, 2, ""), "16 k");
        assert_eq!(percent(0.001_234), "+0.12 %");
        assert_eq!(percent(-0.000_001), "-0.0001 %");
        assert_eq!(percent(1e-12), "0 %");
        assert_eq!(span_of_time(0.0123), "12.3 ms");
        assert_eq!(span_of_time(1.5), "1.50 s");
    }

    #[test]
    fn a_column_has_one_count_of_decimals() {
        let column = [Some(0.006_103_8), Some(1.0), None, Some(1e-12)];
        assert_eq!(decimal_column(&column), ["0.00610", "1.00000", "-", "0.00000"]);
        assert_eq!(decimal_column(&[Some(25.0)]), ["25.00"]);
        assert_eq!(decimal_column(&[Some(0.0), None]), ["0.00", "-"]);
    }

    #[test]
    fn unrounded_values_read_like_parts() {
        assert_eq!(rounded_part(15_915.494, Kind::Resistor), "15k92");
        assert_eq!(rounded_part(9_999.9, Kind::Resistor), "10k");
        assert_eq!(rounded_part(1.0e-8, Kind::Capacitor), "10n");
    }
}
