//! The bytes of a stock file as text, and its lines.

use std::str;

use super::StockError;

/// The text of a file, without byte-order mark.
pub(super) fn decode(bytes: &[u8]) -> Result<&str, StockError> {
    if bytes.starts_with(b"PK\x03\x04") {
        return Err(StockError::Workbook);
    }
    if bytes.starts_with(&[0xff, 0xfe]) || bytes.starts_with(&[0xfe, 0xff]) {
        return Err(StockError::Utf16);
    }
    if let Some(at) = bytes.iter().position(|&byte| byte == 0) {
        // Plain letters in UTF-16 have every other byte zero.
        let alternates = bytes.chunks_exact(2).take(8).all(|pair| (pair[0] == 0) != (pair[1] == 0));
        let line = line_count(&bytes[..at]);
        return Err(if alternates { StockError::Utf16 } else { StockError::NoText { line } });
    }
    let text = str::from_utf8(bytes).map_err(|error| {
        let at = error.valid_up_to();
        StockError::NotUtf8 { line: line_count(&bytes[..at]), byte: bytes[at] }
    })?;
    Ok(text.trim_start_matches('\u{feff}'))
}

/// The line that comes next after these bytes, from 1.
fn line_count(before: &[u8]) -> usize {
    line_starts(before).count()
}

/// The bytes at which lines start; a line ends with LF, CR or both.
fn line_starts(text: &[u8]) -> impl Iterator<Item = usize> {
    let ends = text.iter().enumerate().filter(|&(at, &byte)| match byte {
        b'\n' => true,
        b'\r' => text.get(at + 1) != Some(&b'\n'),
        _ => false,
    });
    [0].into_iter().chain(ends.map(|(at, _)| at + 1))
}

/// The lines of a text, to number its bytes.
pub(super) struct Lines<'a> {
    text: &'a [u8],
    starts: Vec<usize>,
}

impl<'a> Lines<'a> {
    pub fn of(text: &'a str) -> Lines<'a> {
        Lines { text: text.as_bytes(), starts: line_starts(text.as_bytes()).collect() }
    }

    /// The line, from 1, of the first byte at or after `at` that ends no line.
    pub fn number(&self, at: usize) -> usize {
        let rest = self.text.get(at..).unwrap_or_default();
        let skipped = rest.iter().take_while(|&&byte| byte == b'\r' || byte == b'\n').count();
        self.starts.partition_point(|&start| start <= at + skipped)
    }
}

/// The line breaks in a cell; CR and LF together are one.
pub(super) fn breaks(cell: &str) -> usize {
    line_count(cell.as_bytes()) - 1
}

/// A first line `sep=;`, as some spreadsheets write it: the separator, and the bytes of that line.
pub(super) fn declared_separator(text: &str) -> Option<(char, usize)> {
    let end = text.find(['\r', '\n']).unwrap_or(text.len());
    let line = &text[..end];
    let head = line.get(..4).filter(|head| head.eq_ignore_ascii_case("sep="))?;
    let mut signs = line[head.len()..].chars();
    let separator = signs.next().filter(|sign| super::SEPARATORS.contains(sign))?;
    signs.as_str().trim().is_empty().then_some((separator, end))
}

/// The byte of a quote that opens a cell and is never closed.
///
/// A quote opens a cell only as its first sign, and two of them within a quoted cell are one: the rules by which the
/// lines are read.
pub(super) fn unclosed_quote(text: &str, separator: char) -> Option<usize> {
    enum State {
        Start,
        Plain,
        Quoted(usize),
        Quote(usize),
    }
    let mut state = State::Start;
    for (at, byte) in text.bytes().enumerate() {
        let ends_cell = char::from(byte) == separator || byte == b'\r' || byte == b'\n';
        state = match state {
            State::Quoted(open) if byte != b'"' => State::Quoted(open),
            State::Quoted(open) => State::Quote(open),
            State::Quote(open) if byte == b'"' => State::Quoted(open),
            State::Start if byte == b'"' => State::Quoted(at),
            _ if ends_cell => State::Start,
            _ => State::Plain,
        };
    }
    match state {
        State::Quoted(open) => Some(open),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use super::*;

    #[test]
    fn other_encodings_are_named_with_what_to_do() {
        let utf16 = |text: &str, mark: &[u8]| -> Vec<u8> {
            mark.iter().copied().chain(text.encode_utf16().flat_map(u16::to_le_bytes)).collect()
        };
        let told = |bytes: &[u8]| decode(bytes).unwrap_err().to_string();
        let save = "save the sheet as CSV in UTF-8";
        let message = format!("the file is in UTF-16: {save}");
        assert_eq!(told(&utf16("kind;value", &[0xff, 0xfe])), message);
        assert_eq!(told(&utf16("kind;value", &[])), message);
        assert_eq!(told(&[0xfe, 0xff, 0, b'k', 0, b'i']), message);
        assert_eq!(told(&[0, b'k', 0, b'i', 0, b'n', 0, b'd']), message);
        assert_eq!(
            told(b"kind,value\r\nC,10\xb5F\r\n"),
            format!(
                "line 2 holds the byte 0xb5, which is not UTF-8 (the file may be in Latin-1 or Windows-1252): {save}"
            )
        );
        assert_eq!(told(b"kind\rvalue\nR\0"), format!("line 3 holds a zero byte, so the file is no text: {save}"));
        assert_eq!(told(b"PK\x03\x04\x14\0\x06"), format!("the file is a packed workbook and not CSV: {save}"));
        assert_eq!(decode("\u{feff}µ".as_bytes()).unwrap(), "µ");
    }

    #[test]
    fn lines_are_counted_whatever_ends_them() {
        let text = "a\nb\rc\r\n\r\nd\n\ne";
        let lines = Lines::of(text);
        for (sign, line) in [('a', 1), ('b', 2), ('c', 3), ('d', 5), ('e', 7)] {
            assert_eq!(lines.number(text.find(sign).unwrap()), line, "{sign}");
        }
        // Where a reader stands after CR, the LF is still ahead.
        assert_eq!(lines.number(text.find("\n\r").unwrap()), 5);
        assert_eq!(lines.number(text.len()), 7);
        assert_eq!(breaks("a\r\nb\rc\n"), 3);
    }

    #[test]
    fn a_quote_without_end_is_found() {
        for (text, open) in [
            ("\"a;b\";c\n\"d\"\"e\"\n", None),
            ("3\" nail;x\"y\n", None),
            ("\"a\"b;\"\"\n", None),
            ("a;\"b\nc;d\n", Some(2)),
            ("a;\"b\"\"\n", Some(2)),
            ("a;b\n\"", Some(4)),
        ] {
            assert_eq!(unclosed_quote(text, ';'), open, "{text}");
        }
        // With another separator the quote does not begin a cell.
        assert_eq!(unclosed_quote("a;\"b\n", ','), None);
    }

    #[test]
    fn a_separator_may_be_declared() {
        assert_eq!(declared_separator("sep=;\r\nkind;value"), Some((';', 5)));
        assert_eq!(declared_separator("SEP=\t\n"), Some(('\t', 5)));
        for text in ["sep=|\n", "sep=;;\n", "sep=\n", "kind;value", "", "seß=;"] {
            assert_eq!(declared_separator(text), None, "{text}");
        }
    }
}
