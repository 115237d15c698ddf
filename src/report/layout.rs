//! Columns and paragraphs of plain text.

use comfy_table::{CellAlignment, ContentArrangement, LineStyle, Table, TableStyle};

use crate::text::wrapped;

/// On which side the cells of a column stand.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Align {
    /// Text.
    Left,
    /// Numbers.
    Right,
}

/// One column: its header, which may have several lines, and its cells from top to bottom.
#[derive(Clone, Debug, PartialEq)]
pub struct Column {
    /// The header.
    pub header: String,
    /// The side.
    pub align: Align,
    /// The cells.
    pub cells: Vec<String>,
}

/// Blanks between two columns.
const GAP: usize = 2;

/// Nothing narrower is laid out: words would fall apart into letters.
const NARROWEST: usize = 40;

impl Column {
    /// A column of text.
    pub fn left(header: impl Into<String>, cells: Vec<String>) -> Column {
        Column { header: header.into(), align: Align::Left, cells }
    }

    /// A column of numbers.
    pub fn right(header: impl Into<String>, cells: Vec<String>) -> Column {
        Column { header: header.into(), align: Align::Right, cells }
    }

    /// How many characters its longest line has.
    fn width(&self) -> usize {
        let lines = self.header.lines().chain(self.cells.iter().flat_map(|cell| cell.lines()));
        lines.map(|line| line.chars().count()).max().unwrap_or(0)
    }
}

/// The columns side by side in `width` characters, with a rule under the headers. Columns that do not fit follow in
/// further grids below, each of which begins with the first `lead` columns; only a column that is too wide even by
/// itself is wrapped.
pub fn grid(columns: &[Column], lead: usize, width: usize) -> String {
    let width = width.max(NARROWEST);
    let (lead, mut rest) = columns.split_at(lead.min(columns.len()));
    let start: usize = lead.iter().map(|column| column.width() + GAP).sum();
    let mut grids = Vec::new();
    loop {
        let mut used = start;
        let fits = |column: &&Column| {
            used += column.width() + GAP;
            used <= width + GAP
        };
        let count = rest.iter().take_while(fits).count().max(1).min(rest.len());
        let (now, later) = rest.split_at(count);
        grids.push(one_grid(&lead.iter().chain(now).collect::<Vec<_>>(), width));
        if later.is_empty() {
            return grids.join("\n");
        }
        rest = later;
    }
}

fn one_grid(columns: &[&Column], width: usize) -> String {
    let mut table = Table::new();
    let rule = LineStyle::none().fill('-').junction('-');
    table
        .load_style(TableStyle::new().header_separator(rule))
        .set_content_arrangement(ContentArrangement::Dynamic)
        .set_width(u16::try_from(width).unwrap_or(u16::MAX))
        .set_header(columns.iter().map(|column| column.header.as_str()));
    let rows = columns.iter().map(|column| column.cells.len()).max().unwrap_or(0);
    for row in 0..rows {
        table.add_row(columns.iter().map(|column| column.cells.get(row).map_or("", String::as_str)));
    }
    let last = columns.len().saturating_sub(1);
    for (index, column) in columns.iter().enumerate() {
        if let Some(shown) = table.column_mut(index) {
            // The table puts one blank between columns by itself.
            shown.set_padding((0, if index == last { 0 } else { GAP as u16 - 1 }));
            shown.set_cell_alignment(match column.align {
                Align::Left => CellAlignment::Left,
                Align::Right => CellAlignment::Right,
            });
        }
    }
    let lines: Vec<String> = table.lines().map(|line| line.trim_end().to_string()).collect();
    lines.join("\n") + "\n"
}

/// The text with blanks at which [`paragraph`] does not break it.
pub fn unbroken(text: &str) -> String {
    text.replace(' ', "\u{a0}")
}

/// The text with a blank for every control character: such a character would break a column, or change the terminal.
pub fn printable(text: &str) -> String {
    text.chars().map(|sign| if sign.is_control() { ' ' } else { sign }).collect()
}

/// Text broken between words into lines of at most `width` characters, each with a line end; the first begins with
/// `first`, the others with as many blanks, but never more than half the width. A word that is longer than a line stays
/// whole, and so does what is [`unbroken`].
pub fn paragraph(first: &str, text: &str, width: usize) -> String {
    let width = width.max(NARROWEST);
    let start = first.chars().count();
    let indent = start.min(width / 2);
    let lines = wrapped(text, width.saturating_sub(start), width - indent);
    let blanks = " ".repeat(indent);
    let starts = std::iter::once(first).chain(std::iter::repeat(blanks.as_str()));
    starts.zip(&lines).map(|(start, line)| format!("{}\n", format!("{start}{line}").trim_end())).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cells(list: &[&str]) -> Vec<String> {
        list.iter().map(|cell| cell.to_string()).collect()
    }

    #[test]
    fn columns_stand_side_by_side() {
        let columns = [
            Column::left("row", cells(&["1", "2 *"])),
            Column::right("error\ndB", cells(&["0.1", "12.25"])),
            Column::left("R1", cells(&["4k7", ""])),
        ];
        insta::assert_snapshot!(grid(&columns, 1, 80), @r"
        row  error  R1
                dB
        ---------------
        1      0.1  4k7
        2 *  12.25
        ");
    }

    #[test]
    fn what_does_not_fit_follows_below() {
        let wide = "x".repeat(15);
        let columns: Vec<Column> = std::iter::once(Column::left("row", cells(&["1"])))
            .chain((0..4).map(|k| Column::right(format!("R{k}"), cells(&[wide.as_str()]))))
            .collect();
        let text = grid(&columns, 1, 40);
        assert!(text.lines().all(|line| line.chars().count() <= 40), "{text}");
        let headers: Vec<&str> = text.lines().filter(|line| line.starts_with("row")).collect();
        assert_eq!(headers.len(), 2, "{text}");
        assert!(headers[0].contains("R0") && headers[0].contains("R1") && headers[1].contains("R2"), "{text}");
    }

    #[test]
    fn a_grid_that_fits_exactly_stays_one() {
        let columns: Vec<Column> = (0..4).map(|_| Column::left("h", cells(&["x".repeat(18).as_str()]))).collect();
        let text = grid(&columns, 0, 4 * 18 + 3 * 2);
        assert_eq!(text.lines().count(), 3, "{text}");
        assert!(text.lines().all(|line| line.chars().count() <= 78), "{text}");
    }

    #[test]
    fn control_characters_become_blanks() {
        assert_eq!(printable("a\u{1b}[31m\r\n\u{9b}µ"), "a [31m   µ");
    }

    #[test]
    fn paragraphs_break_between_words() {
        let text = paragraph("A: ", &"word ".repeat(12), 40);
        insta::assert_snapshot!(text, @r"
        A: word word word word word word word
           word word word word word
        ");
        let text = paragraph("", &format!("{} {}", "x".repeat(35), unbroken("10 kHz")), 40);
        assert_eq!(text, format!("{}\n10 kHz\n", "x".repeat(35)));
        assert_eq!(paragraph("- ", "", 80), "-\n");
        let text = paragraph(&format!("{}: ", "x".repeat(28)), &"word ".repeat(6), 40);
        assert_eq!(text, format!("{}: word word\n{}word word word word\n", "x".repeat(28), " ".repeat(20)));
        let text = paragraph(&format!("{}: ", "x".repeat(38)), "word", 40);
        assert_eq!(text, format!("{}:\n{}word\n", "x".repeat(38), " ".repeat(20)));
        assert_eq!(paragraph("", &"x".repeat(90), 80), "x".repeat(90) + "\n");
    }
}
