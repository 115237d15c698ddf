//! The record as CSV: one line for each part, with the figures of its section and of its row repeated.

use std::io::{self, Write};

use super::record::{ChosenRecord, PartRecord, Record, RowRecord};

/// The columns, in order, with what each holds. Numbers are unrounded, in SI units; what is not known is empty.
pub const CSV_COLUMNS: [(&str, &str); 37] = [
    ("row", "`shortlist`, `ideal parts` or `nearest value to each`"),
    ("rank", "place in the shortlist, from 1"),
    ("marked", "whether the row has the fewest part numbers within the wanted error"),
    ("alternative", "whether the row is listed only as an alternative"),
    ("proved", "whether the row is proved"),
    ("proof", "`exhaustive` or `stopped`, for the search as a whole"),
    ("response_error_db", "response error of the row, dB"),
    ("ranking_error", "error by which the row is ranked, in the unit of the measure"),
    ("measure", "`decibel`, `vector` or `weighted`"),
    ("worst_miss", "largest relative miss in f0, Q, gain and fz of the row, plain ratio"),
    ("part_numbers", "different parts that the row needs"),
    ("placed_parts", "parts that the row places"),
    ("section", "name of the section"),
    ("circuit", "its circuit"),
    ("output", "the output taken"),
    ("f0_hz", "achieved pole frequency of the section, Hz"),
    ("q", "achieved Q"),
    ("gain", "achieved gain, signed"),
    ("fz_hz", "achieved zero frequency of a notch, Hz"),
    ("impedance_ohm", "geometric mean of the resistances of the section, ohms"),
    ("levels_ohm", "all impedance levels at which the set exists, ohms, separated by blanks"),
    ("slot", "the slot"),
    ("kind", "R or C"),
    ("value", "value of the part, ohms or farads"),
    ("notation", "the value in IEC 60062 notation; empty where it cannot be bought"),
    ("ideal", "unrounded value that belongs in the slot, ohms or farads"),
    ("joint", "how the two parts of a pair are joined, `series` or `parallel`; empty for a single part"),
    ("id", "what the part or its drawer is called in the stock list; of a pair both, separated by blanks"),
    ("board", "number of the board, from 1, where measured parts make boards differ; empty where all are alike"),
    ("to_buy", "different parts of the row that must be bought; empty without a stock list"),
    ("cost", "what the parts of one board of the row cost, in the currency of the stock list"),
    ("yield", "share of boards of the row that keep the mask or the error; this and the next only with --yield"),
    ("yield_low", "lower end of its interval"),
    ("yield_high", "upper end of its interval"),
    (
        "response_deviation",
        "largest standard deviation of the response of the row, dB, or a ratio under the vector measure",
    ),
    ("nominal_keeps", "whether the nominal parts of the row keep the mask or the error"),
    ("nominal_error_is_lost", "whether the nominal error of the row is below a third of that deviation"),
];

/// Writes the record as CSV (RFC 4180 quoting, line feed as line end), columns as in [`CSV_COLUMNS`].
///
/// # Errors
/// Those of the writer.
pub fn write_csv(record: &Record, out: &mut dyn Write) -> io::Result<()> {
    let mut writer = ::csv::Writer::from_writer(out);
    writer.write_record(CSV_COLUMNS.map(|(name, _)| name)).map_err(io_error)?;
    for row in record.shortlist.iter().chain(&record.references) {
        let alike = row.boards.is_empty().then_some((None, &row.sections));
        let boards = row.boards.iter().map(|board| (Some(board.board), &board.sections));
        for (board, sections) in alike.into_iter().chain(boards) {
            for section in sections {
                for part in &section.parts {
                    writer.write_record(fields(record, row, board, section, part)).map_err(io_error)?;
                }
            }
        }
    }
    writer.flush()
}

/// The writer's own error, so that its kind is kept.
fn io_error(error: ::csv::Error) -> io::Error {
    match error.into_kind() {
        ::csv::ErrorKind::Io(error) => error,
        other => io::Error::other(format!("{other:?}")),
    }
}

fn fields(
    record: &Record,
    row: &RowRecord,
    board: Option<usize>,
    section: &ChosenRecord,
    part: &PartRecord,
) -> [String; 37] {
    let number = |value: Option<f64>| value.map_or(String::new(), plain);
    let count = |value: Option<usize>| value.map_or(String::new(), |value| value.to_string());
    let levels: Vec<String> = section.levels_ohm.iter().map(|&level| plain(level)).collect();
    let achieved = &section.achieved;
    let built = row.built.as_ref();
    [
        row.name.unwrap_or("shortlist").to_string(),
        count(row.rank),
        (row.rank.is_some() && row.rank == record.marked).to_string(),
        row.alternative.to_string(),
        row.proved.to_string(),
        record.search.proof.to_string(),
        number(row.response_error_db),
        number(row.ranking_error),
        record.measure.name.to_string(),
        number(row.worst_miss),
        count(row.part_numbers),
        row.placed_parts.to_string(),
        section.name.clone(),
        section.circuit.clone(),
        section.output.clone(),
        number(achieved.f0_hz),
        number(achieved.q),
        number(achieved.gain),
        number(achieved.fz_hz),
        number(section.impedance_ohm),
        levels.join(" "),
        part.slot.clone(),
        part.kind.letter().to_string(),
        plain(part.value),
        part.notation.clone().unwrap_or_default(),
        number(part.ideal),
        part.joint.unwrap_or_default().to_string(),
        part.made_of.iter().filter_map(|piece| piece.id.as_deref()).collect::<Vec<_>>().join(" "),
        count(board),
        count(row.to_buy),
        number(row.cost),
        number(built.map(|built| built.r#yield.share)),
        number(built.map(|built| built.r#yield.interval[0])),
        number(built.map(|built| built.r#yield.interval[1])),
        number(built.map(|built| built.response_deviation)),
        built.map_or(String::new(), |built| built.nominal_keeps.to_string()),
        built.map_or(String::new(), |built| built.nominal_error_is_lost.to_string()),
    ]
}

/// The shortest text that reads back as the same number, with an exponent where that is shorter.
fn plain(value: f64) -> String {
    format!("{value:?}")
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;
    use crate::report::sample;

    #[test]
    fn every_part_has_a_line_that_reads_back() {
        let record = sample::record();
        let mut bytes = Vec::new();
        write_csv(&record, &mut bytes).unwrap();
        let mut reader = ::csv::Reader::from_reader(bytes.as_slice());
        let header: Vec<String> = reader.headers().unwrap().iter().map(str::to_string).collect();
        assert_eq!(header, CSV_COLUMNS.map(|(name, _)| name));
        let column = |name: &str| header.iter().position(|known| known == name).unwrap();
        let lines: Vec<::csv::StringRecord> = reader.records().collect::<Result<_, _>>().unwrap();
        let rows = record.shortlist.iter().chain(&record.references);
        let parts: Vec<&PartRecord> = rows.flat_map(|row| &row.sections).flat_map(|s| &s.parts).collect();
        assert_eq!(lines.len(), parts.len());
        for (line, part) in lines.iter().zip(parts) {
            assert_eq!(line[column("slot")], part.slot);
            let value: f64 = line[column("value")].parse().unwrap();
            assert_eq!(value.to_bits(), part.value.to_bits());
            assert_eq!(line[column("notation")], part.notation.clone().unwrap_or_default());
            assert_eq!(line[column("fz_hz")], *"");
        }
        let marked: Vec<&str> =
            lines.iter().filter(|line| &line[column("marked")] == "true").map(|l| &l[1]).collect();
        assert!(!marked.is_empty() && marked.iter().all(|rank| Some(rank.parse().unwrap()) == record.marked));
        let ideal = lines.iter().filter(|line| &line[0] == "ideal parts");
        assert!(ideal.clone().count() > 0 && ideal.clone().all(|line| line[column("part_numbers")].is_empty()));
    }
}
