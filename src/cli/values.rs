//! `roundwell values`: series of preferred values and neighbours in them.

use super::FOUND;
use super::args::ValuesArgs;
use super::failure::{Failure, Faulty};
use super::output::Output;
use crate::parts::Series;
use crate::report::{Column, grid, percent};
use crate::text::Fault;
use crate::units::{Kind, Value, format_part, parse_part};

/// Runs the command and gives its exit code.
///
/// # Errors
/// Series and values that cannot be read, an output that cannot be written.
pub fn run(args: &ValuesArgs) -> Result<u8, Failure> {
    let text = answer(args)?;
    Output::Standard.write(text.as_bytes())?;
    Ok(FOUND)
}

const WIDTH: usize = 80;

fn answer(args: &ValuesArgs) -> Result<String, Failure> {
    let mut faults = Vec::new();
    let mut series = Vec::new();
    for name in &args.series {
        match name.parse::<Series>() {
            Ok(one) => series.push(one),
            Err(error) => faults.push(Fault::at("--series", error.to_string())),
        }
    }
    let kind = args
        .kind
        .as_deref()
        .map(|letter| if letter.eq_ignore_ascii_case("C") { Kind::Capacitor } else { Kind::Resistor });
    let mut values = Vec::new();
    for text in &args.values {
        match read(text, kind) {
            Ok(found) => values.push(found),
            Err(message) => faults.push(Fault::at("", message)),
        }
    }
    if !faults.is_empty() {
        return Err(Failure::Input(vec![Faulty {
            file: String::new(),
            text: String::new(),
            faults,
            is_first_round: false,
        }]));
    }
    Ok(match (values.as_slice(), series.as_slice()) {
        ([], []) => overview(),
        ([], chosen) => chosen.iter().map(|series| whole(*series)).collect::<Vec<_>>().join("\n"),
        (values, []) => neighbours(values, &Series::ALL),
        (values, chosen) => neighbours(values, chosen),
    })
}

/// A value and its kind: the one that is given, or the one as which it can be read, resistors first.
fn read(text: &str, kind: Option<Kind>) -> Result<(Value, Kind), String> {
    let as_kind = |kind| parse_part(text, kind).map(|value| (value, kind)).map_err(|error| error.to_string());
    match kind {
        Some(kind) => as_kind(kind),
        None => as_kind(Kind::Resistor).or_else(|message| as_kind(Kind::Capacitor).map_err(|_| message)),
    }
}

/// The series by name.
fn overview() -> String {
    let column = |cell: &dyn Fn(Series) -> String| Series::ALL.into_iter().map(cell).collect::<Vec<_>>();
    grid(
        &[
            Column::left("series", column(&|series| series.name().to_string())),
            Column::right("values to\nthe decade", column(&|series| series.per_decade().to_string())),
            Column::right(
                "customary\ntolerance %",
                column(&|series| series.customary_tolerance_percent().to_string()),
            ),
        ],
        1,
        WIDTH,
    )
}

/// All values of one decade.
fn whole(series: Series) -> String {
    let count = series.per_decade();
    let mut text = format!("{series}: {count} values to the decade\n");
    for line in series.mantissas().chunks(12) {
        let cells: Vec<String> = line.iter().map(|mantissa| format!("{mantissa:>4}")).collect();
        text += &format!("{}\n", cells.join(" "));
    }
    text
}

/// The neighbours of values in series.
fn neighbours(values: &[(Value, Kind)], series: &[Series]) -> String {
    let mut cells: [Vec<String>; 7] = Default::default();
    for (value, kind) in values {
        for series in series {
            let ideal = value.to_f64();
            let (below, above) = series.neighbours(ideal);
            let nearest = series.nearest(ideal);
            let off = |value: Value| percent(value.to_f64() / ideal - 1.0);
            let show = |value| format_part(value, *kind);
            let unit = kind.unit();
            let row = [
                format!("{} {unit}", show(*value)),
                series.name().to_string(),
                show(below),
                off(below),
                show(above),
                off(above),
                show(nearest),
            ];
            cells.iter_mut().zip(row).for_each(|(column, cell)| column.push(cell));
        }
    }
    let [value, series, below, below_off, above, above_off, nearest] = cells;
    let columns = [
        Column::left("value", value),
        Column::left("series", series),
        Column::right("below", below),
        Column::right("off by", below_off),
        Column::right("above", above),
        Column::right("off by", above_off),
        Column::right("nearest", nearest),
    ];
    grid(&columns, 2, WIDTH)
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    fn told(values: &[&str], series: &[&str], kind: Option<&str>) -> String {
        let owned = |list: &[&str]| list.iter().map(|text| text.to_string()).collect();
        let args = ValuesArgs { values: owned(values), series: owned(series), kind: kind.map(str::to_string) };
        answer(&args).unwrap_or_else(|failure| failure.show(false))
    }

    // Source: IEC 60063 for the values.
    #[test]
    fn neighbours_of_values() {
        insta::assert_snapshot!(told(&["4.8k", "4n7"], &["E12", "E24"], None), @r"
        value  series  below   off by  above    off by  nearest
        -------------------------------------------------------
        4k8 Ω  E12       4k7  -2.08 %    5k6  +16.67 %      4k7
        4k8 Ω  E24       4k7  -2.08 %    5k1   +6.25 %      4k7
        4n7 F  E12       4n7      0 %    4n7       0 %      4n7
        4n7 F  E24       4n7      0 %    4n7       0 %      4n7
        ");
    }

    #[test]
    fn a_series_as_a_whole() {
        insta::assert_snapshot!(told(&[], &["E24"], None), @r"
        E24: 24 values to the decade
          10   11   12   13   15   16   18   20   22   24   27   30
          33   36   39   43   47   51   56   62   68   75   82   91
        ");
        assert_eq!(told(&[], &[], None).lines().count(), 2 + 1 + 7);
    }

    #[test]
    fn all_faults_are_told() {
        insta::assert_snapshot!(told(&["ten", "-1"], &["E25", "E12"], Some("R")), @r#"
        error: --series: "E25" is no series of preferred numbers: write E3, E6, E12,
               E24, E48, E96 or E192

        error: cannot read "ten" as a resistor value: expected a number in ohms, or one
               with m, R, k, M, G or T, for example 4k7, 2R2 or 1M

        error: "-1" is not positive: a resistor value is larger than zero, for example
               4k7, 2R2 or 1M
        "#);
    }
}
