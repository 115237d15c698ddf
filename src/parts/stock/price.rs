//! The price of one part.

use std::fmt;

use super::decimal::scaled;

/// The price of one part, exact, with its currency as it was written.
#[derive(Clone, Debug, PartialEq, Eq, Hash)]
pub struct Price {
    /// The amount in millionths of the currency, so that sums stay exact; from 0 to 10^12.
    pub millionths: u64,
    /// The currency sign (`€`) or the three letters of ISO 4217 (`EUR`), or none when none was written. Signs and
    /// letters are not told to be the same currency, and nothing is converted.
    pub currency: Option<String>,
}

impl Price {
    /// The largest amount, a million of the currency: more for one part is a slip.
    const LARGEST: u64 = 1_000_000_000_000;

    /// Reads an amount with at most six decimals, and a currency before or behind it; `None` for anything else, and beyond a
    /// million of the currency.
    pub fn read(text: &str) -> Option<Price> {
        let is_amount = |sign: char| sign.is_ascii_digit() || sign == '.';
        let start = text.find(is_amount)?;
        let end = text.rfind(is_amount)? + 1;
        let (before, behind) = (text[..start].trim(), text[end..].trim());
        let currency = match (before, behind) {
            ("", "") => None,
            ("", sign) | (sign, "") => Some(sign),
            _ => return None,
        };
        let millionths = scaled(&text[start..end], 6).filter(|amount| *amount <= Price::LARGEST)?;
        currency.is_none_or(is_currency).then(|| Price { millionths, currency: currency.map(str::to_owned) })
    }
}

impl fmt::Display for Price {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let (whole, rest) = (self.millionths / 1_000_000, self.millionths % 1_000_000);
        let decimals = format!("{rest:06}");
        let shown = decimals.trim_end_matches('0');
        // Money has two decimals at least.
        write!(f, "{whole}.{shown:0<2}")?;
        self.currency.as_ref().map_or(Ok(()), |currency| write!(f, " {currency}"))
    }
}

/// Whether a text is a currency sign or could be the letters of one; signs of a hundredth, such as `c`, are not taken,
/// because the amount would be a hundred times too large.
pub(super) fn is_currency(text: &str) -> bool {
    let mut signs = text.chars();
    match (signs.next(), signs.next()) {
        (Some(sign), None) => "€$£¥₹₩₽₺₴₫₱₪₦".contains(sign),
        _ => text.len() == 3 && text.bytes().all(|byte| byte.is_ascii_uppercase()),
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    #[test]
    fn prices_keep_their_currency() {
        for (text, millionths, currency, shown) in [
            ("0.12", 120_000, None, "0.12"),
            ("0", 0, None, "0.00"),
            (".5", 500_000, None, "0.50"),
            ("€0.0125", 12_500, Some("€"), "0.0125 €"),
            ("0.10 EUR", 100_000, Some("EUR"), "0.10 EUR"),
            ("$ 1000000", 1_000_000_000_000, Some("$"), "1000000.00 $"),
            ("0.000001", 1, None, "0.000001"),
        ] {
            let price = Price::read(text).unwrap();
            assert_eq!((price.millionths, price.currency.as_deref()), (millionths, currency), "{text}");
            assert_eq!(price.to_string(), shown);
        }
        for text in
            ["", "-1", "5 c", "5 ct", "0.0000001", "1000001", "1e3", "€1 EUR", "1/100", "free", "1.2 eur", "1 €€"]
        {
            assert_eq!(Price::read(text), None, "{text}");
        }
    }
}
