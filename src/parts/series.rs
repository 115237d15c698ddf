//! The preferred number series of IEC 60063.

use std::fmt;
use std::str::FromStr;

use serde::{Deserialize, Serialize};
use thiserror::Error;

use super::closer;
use crate::units::{Value, excerpt};

/// A series of preferred numbers for resistors and capacitors (IEC 60063), named by the count of
/// values in a decade.
///
/// ```
/// use roundwell::parts::Series;
/// use roundwell::units::{Kind, format_part};
///
/// let series: Series = "e24".parse()?;
/// assert_eq!(format_part(series.nearest(15_915.0), Kind::Resistor), "16k");
/// # Ok::<(), roundwell::parts::UnknownSeries>(())
/// ```
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash, Serialize, Deserialize)]
pub enum Series {
    /// 3 values in a decade.
    E3,
    /// 6 values in a decade.
    E6,
    /// 12 values in a decade.
    E12,
    /// 24 values in a decade.
    E24,
    /// 48 values in a decade.
    E48,
    /// 96 values in a decade.
    E96,
    /// 192 values in a decade.
    E192,
}

/// A name that is no series.
#[derive(Clone, Debug, PartialEq, Eq, Error)]
#[error("\"{0}\" is no series of preferred numbers: write E3, E6, E12, E24, E48, E96 or E192")]
pub struct UnknownSeries(String);

// Neither table follows the rounded powers throughout: E24 has eight exceptions, E192 has one (920).
const E24: [u64; 24] =
    [10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91];
const E192: [u64; 192] = [
    100, 101, 102, 104, 105, 106, 107, 109, 110, 111, 113, 114, 115, 117, 118, 120, //
    121, 123, 124, 126, 127, 129, 130, 132, 133, 135, 137, 138, 140, 142, 143, 145, //
    147, 149, 150, 152, 154, 156, 158, 160, 162, 164, 165, 167, 169, 172, 174, 176, //
    178, 180, 182, 184, 187, 189, 191, 193, 196, 198, 200, 203, 205, 208, 210, 213, //
    215, 218, 221, 223, 226, 229, 232, 234, 237, 240, 243, 246, 249, 252, 255, 258, //
    261, 264, 267, 271, 274, 277, 280, 284, 287, 291, 294, 298, 301, 305, 309, 312, //
    316, 320, 324, 328, 332, 336, 340, 344, 348, 352, 357, 361, 365, 370, 374, 379, //
    383, 388, 392, 397, 402, 407, 412, 417, 422, 427, 432, 437, 442, 448, 453, 459, //
    464, 470, 475, 481, 487, 493, 499, 505, 511, 517, 523, 530, 536, 542, 549, 556, //
    562, 569, 576, 583, 590, 597, 604, 612, 619, 626, 634, 642, 649, 657, 665, 673, //
    681, 690, 698, 706, 715, 723, 732, 741, 750, 759, 768, 777, 787, 796, 806, 816, //
    825, 835, 845, 856, 866, 876, 887, 898, 909, 920, 931, 942, 953, 965, 976, 988,
];
// By the standard, a coarser series is every second value of the next finer one.
const E12: [u64; 12] = thinned(&E24);
const E6: [u64; 6] = thinned(&E24);
const E3: [u64; 3] = thinned(&E24);
const E96: [u64; 96] = thinned(&E192);
const E48: [u64; 48] = thinned(&E192);

/// `COUNT` values of a finer series at even steps, beginning with the first.
const fn thinned<const COUNT: usize>(finer: &[u64]) -> [u64; COUNT] {
    let mut kept = [0; COUNT];
    let mut index = 0;
    while index < COUNT {
        kept[index] = finer[index * (finer.len() / COUNT)];
        index += 1;
    }
    kept
}

impl Series {
    /// All series, from the coarsest to the finest.
    pub const ALL: [Series; 7] =
        [Series::E3, Series::E6, Series::E12, Series::E24, Series::E48, Series::E96, Series::E192];

    /// The name in the standard, `E24`.
    pub fn name(self) -> &'static str {
        match self {
            Series::E3 => "E3",
            Series::E6 => "E6",
            Series::E12 => "E12",
            Series::E24 => "E24",
            Series::E48 => "E48",
            Series::E96 => "E96",
            Series::E192 => "E192",
        }
    }

    /// The count of values in a decade.
    pub fn per_decade(self) -> usize {
        self.mantissas().len()
    }

    /// The values of one decade as integers of [`Series::digits`] digits, ascending: `10, 22, 47` for
    /// E3, `100, 105, ...` for E48.
    pub fn mantissas(self) -> &'static [u64] {
        match self {
            Series::E3 => &E3,
            Series::E6 => &E6,
            Series::E12 => &E12,
            Series::E24 => &E24,
            Series::E48 => &E48,
            Series::E96 => &E96,
            Series::E192 => &E192,
        }
    }

    /// The significant digits of every value: 2 up to E24, 3 from E48 on.
    pub fn digits(self) -> u32 {
        if self <= Series::E24 { 2 } else { 3 }
    }

    /// The tolerance in percent that goes with the series by custom; it is not a property of any
    /// part, and finer series are also sold with tighter tolerances.
    pub fn customary_tolerance_percent(self) -> &'static str {
        match self {
            Series::E3 => "more than 20",
            Series::E6 => "20",
            Series::E12 => "10",
            Series::E24 => "5",
            Series::E48 => "2",
            Series::E96 => "1",
            Series::E192 => "0.5",
        }
    }

    /// The values of the series from `from` to `to`, both included, ascending; none when `from` is
    /// larger than `to` or no value lies between.
    pub fn values_between(self, from: Value, to: Value) -> Vec<Value> {
        let indices = self.index_of_decade(from.decade())..self.index_of_decade(to.decade() + 1);
        indices.filter_map(|index| self.at(index)).filter(|value| (from..=to).contains(value)).collect()
    }

    /// The largest value of the series that is not above `ideal`, and the smallest that is not
    /// below; both are the same when `ideal` is a value of the series.
    ///
    /// `ideal` is in the unit of the values. It is held within 1e-30 to 1e30, far beyond any part;
    /// a number that is not positive, or no number, counts as the lower end.
    pub fn neighbours(self, ideal: f64) -> (Value, Value) {
        let ideal = if ideal.is_nan() { 0.0 } else { ideal }.clamp(1e-30, 1e30);
        // Every value exists within these limits.
        self.search(ideal).unwrap_or((Value::ONE, Value::ONE))
    }

    /// The value of the series with the smallest ratio to `ideal`, the smaller of two that are
    /// equally far. For the range of `ideal` see [`Series::neighbours`].
    pub fn nearest(self, ideal: f64) -> Value {
        let (below, above) = self.neighbours(ideal);
        closer(below, above, ideal)
    }

    /// The values are numbered through all decades, 0 is the number 1.
    fn at(self, index: i32) -> Option<Value> {
        let count = self.index_of_decade(1);
        let place = usize::try_from(index.rem_euclid(count)).ok()?;
        let last_digit = self.digits().cast_signed() - 1;
        Value::new(self.mantissas()[place], index.div_euclid(count) - last_digit).ok()
    }

    fn index_of_decade(self, decade: i32) -> i32 {
        self.mantissas().len() as i32 * decade
    }

    /// The neighbours by halving, or `None` beyond what a [`Value`] holds.
    fn search(self, ideal: f64) -> Option<(Value, Value)> {
        // The logarithm may be off by a rounding at a power of ten, so a decade more on either side.
        let decade = ideal.log10().floor() as i32;
        let mut low = self.index_of_decade(decade - 1);
        let mut high = self.index_of_decade(decade + 2);
        while low < high {
            let middle = low + (high - low) / 2;
            if self.at(middle)?.to_f64() < ideal {
                low = middle + 1;
            } else {
                high = middle;
            }
        }
        let above = self.at(low)?;
        let exact = above.to_f64() <= ideal;
        Some((if exact { above } else { self.at(low - 1)? }, above))
    }
}

impl fmt::Display for Series {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(self.name())
    }
}

impl FromStr for Series {
    type Err = UnknownSeries;

    /// Reads the name in either case, blanks around it allowed.
    fn from_str(text: &str) -> Result<Series, UnknownSeries> {
        let name = text.trim();
        Series::ALL
            .into_iter()
            .find(|series| series.name().eq_ignore_ascii_case(name))
            .ok_or_else(|| UnknownSeries(excerpt(name)))
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use std::collections::BTreeSet;

    use proptest::prelude::*;

    use super::*;
    use crate::units::test_support::deterministic;
    use crate::units::{Kind, parse_part};

    fn value(mantissa: u64, exponent: i32) -> Value {
        Value::new(mantissa, exponent).unwrap()
    }

    /// The values of one decade as three-digit numbers.
    fn decade(series: Series) -> BTreeSet<u64> {
        let raised = 10_u64.pow(3 - series.digits());
        series.mantissas().iter().map(|m| m * raised).collect()
    }

    // Source: IEC 60063, rule and exceptions from memory; the rounding itself is computed here.
    #[test]
    fn tables_follow_the_rounding_rule_but_for_the_exceptions_of_the_standard() {
        let exceptions = |series| match series {
            Series::E3 => vec![(46, 47)],
            Series::E6 => vec![(32, 33), (46, 47)],
            Series::E12 => vec![(26, 27), (32, 33), (38, 39), (46, 47), (83, 82)],
            Series::E24 => vec![(26, 27), (29, 30), (32, 33), (35, 36), (38, 39), (42, 43), (46, 47), (83, 82)],
            Series::E192 => vec![(919, 920)],
            Series::E48 | Series::E96 => vec![],
        };
        for series in Series::ALL {
            let one = 10_f64.powi(series.digits().cast_signed() - 1);
            let rule = |index| one * 10_f64.powf(f64::from(index) / series.per_decade() as f64);
            let found: Vec<(u64, u64)> = (0_u32..)
                .zip(series.mantissas())
                .map(|(index, mantissa)| (rule(index).round() as u64, *mantissa))
                .filter(|(rounded, mantissa)| rounded != mantissa)
                .collect();
            assert_eq!(found, exceptions(series), "{series}");
        }
    }

    // Source: IEC 60063 (E3 to E12 in full; which two-digit values the fine series contain), from memory.
    #[test]
    fn series_share_the_values_that_they_should() {
        assert_eq!(Series::E3.mantissas(), [10, 22, 47]);
        assert_eq!(Series::E6.mantissas(), [10, 15, 22, 33, 47, 68]);
        assert_eq!(Series::E12.mantissas(), [10, 12, 15, 18, 22, 27, 33, 39, 47, 56, 68, 82]);
        for pair in Series::ALL.windows(2).filter(|pair| pair[1] != Series::E48) {
            assert!(decade(pair[0]).is_subset(&decade(pair[1])), "{pair:?}");
        }
        let shared = |fine| -> Vec<u64> { decade(Series::E24).intersection(&decade(fine)).copied().collect() };
        assert_eq!(shared(Series::E48), [100, 110, 750]);
        assert_eq!(shared(Series::E96), [100, 110, 130, 150, 200, 750]);
        assert_eq!(shared(Series::E192), [100, 110, 120, 130, 150, 160, 180, 200, 240, 470, 750]);
    }

    #[test]
    fn figures_of_a_series_fit_its_table() {
        for (series, count) in Series::ALL.into_iter().zip([3, 6, 12, 24, 48, 96, 192]) {
            assert_eq!(series.per_decade(), count);
            assert_eq!(series.name(), format!("E{count}"));
            assert!(series.mantissas().is_sorted_by(|a, b| a < b));
            let (low, high) = (10_u64.pow(series.digits() - 1), 10_u64.pow(series.digits()));
            assert!(series.mantissas().iter().all(|m| (low..high).contains(m)));
        }
        // Common practice.
        assert_eq!(
            Series::ALL.map(Series::customary_tolerance_percent),
            ["more than 20", "20", "10", "5", "2", "1", "0.5"]
        );
    }

    #[test]
    fn names_are_read_in_either_case() {
        for series in Series::ALL {
            assert_eq!(series.name().parse(), Ok(series));
            assert_eq!(format!(" {} ", series.name().to_lowercase()).parse(), Ok(series));
            assert_eq!(ron::from_str(series.name()), Ok(series));
            assert_eq!(ron::to_string(&series).unwrap(), series.name());
        }
        for text in ["E25", "", "24", "E 24"] {
            let error = text.parse::<Series>().unwrap_err();
            assert_eq!(
                error.to_string(),
                format!("\"{text}\" is no series of preferred numbers: write E3, E6, E12, E24, E48, E96 or E192")
            );
        }
    }

    #[test]
    fn values_lie_between_the_ends_and_include_them() {
        let ohms = |text| parse_part(text, Kind::Resistor).unwrap();
        let between = |from, to| Series::E3.values_between(ohms(from), ohms(to));
        assert_eq!(between("470R", "2k2"), ["470R", "1k", "2k2"].map(ohms));
        assert_eq!(between("471R", "2k199"), [ohms("1k")]);
        assert_eq!(between("1k", "1k"), [ohms("1k")]);
        assert_eq!(between("1k1", "2k"), []);
        assert_eq!(between("2k2", "1k"), []);
        let decades = Series::E96.values_between(ohms("1k"), ohms("1M"));
        assert_eq!(decades.len(), 3 * 96 + 1);
        assert!(decades.is_sorted_by(|a, b| a < b));
        // At the end of what a value holds, 1.2e-128 and its like are left out.
        let smallest = Series::E12.values_between(value(1, -128), value(12, -128));
        assert_eq!(smallest, [value(1, -128), value(1, -127), value(12, -128)]);
    }

    // Source: IEC 60063; the largest gap of each series, in the ratio of its ends.
    #[test]
    fn neighbours_enclose_the_ideal() {
        let e24 = Series::E24;
        assert_eq!(e24.neighbours(15.9e3), (value(15, 3), value(16, 3)));
        assert_eq!(e24.neighbours(4.7e-9), (value(47, -10), value(47, -10)));
        assert_eq!(e24.neighbours(9.5), (value(91, -1), value(10, 0)));
        assert_eq!(e24.neighbours(1000.0_f64.next_down()), (value(910, 0), value(1, 3)));
        assert_eq!(e24.neighbours(1000.0_f64.next_up()), (value(1, 3), value(11, 2)));
        for (ideal, end) in [
            (f64::NAN, -30),
            (0.0, -30),
            (-1.0, -30),
            (f64::NEG_INFINITY, -30),
            (1e-31, -30),
            (1e31, 30),
            (f64::INFINITY, 30),
        ] {
            assert_eq!(e24.neighbours(ideal), (value(1, end), value(1, end)), "{ideal}");
            assert_eq!(e24.nearest(ideal), value(1, end));
        }
    }

    #[test]
    fn nearest_is_by_ratio() {
        // Half way between 10 and 22 by ratio is 14.83, by difference 16.
        assert_eq!(Series::E3.nearest(14.8), value(10, 0));
        assert_eq!(Series::E3.nearest(14.9), value(22, 0));
        assert_eq!(Series::E192.nearest(0.919), value(92, -2));
        // 20 is as far from 16 as from 25 by ratio; no series has such a pair, so ask directly.
        assert_eq!(closer(value(16, 0), value(25, 0), 20.0), value(16, 0));
    }

    proptest! {
        #![proptest_config(deterministic(4096))]

        // Reference: a scan of every value in sight.
        #[test]
        fn neighbours_and_nearest_agree_with_a_scan(
            power in -15.0..12.0_f64,
            series in prop::sample::select(Series::ALL.to_vec()),
        ) {
            let ideal = 10_f64.powf(power);
            let all = series.values_between(value(1, -17), value(1, 14));
            let below = all.iter().copied().rfind(|value| value.to_f64() <= ideal).unwrap();
            let above = all.iter().copied().find(|value| value.to_f64() >= ideal).unwrap();
            prop_assert_eq!(series.neighbours(ideal), (below, above));
            let distance = |value: Value| (value.to_f64() / ideal).ln().abs();
            let least = all.iter().copied().map(distance).fold(f64::INFINITY, f64::min);
            prop_assert!(distance(series.nearest(ideal)) <= least + 1e-12);
        }

        #[test]
        fn every_value_of_a_series_is_its_own_neighbour(
            series in prop::sample::select(Series::ALL.to_vec()),
            index in 0_usize..192,
            exponent in -17..=12_i32,
        ) {
            let own = value(series.mantissas()[index % series.per_decade()], exponent);
            prop_assert_eq!(series.neighbours(own.to_f64()), (own, own));
            prop_assert_eq!(series.nearest(own.to_f64()), own);
        }
    }
}
