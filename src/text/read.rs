//! RON text into typed values, with every fault that can be told independently.

use ron::Options;
use ron::error::{Error, Position, SpannedError};
use ron::extensions::Extensions;
use serde::de::{DeserializeOwned, IgnoredAny};

use super::Fault;
use super::names::{nearest, suggestion};
use super::scan::{Tree, skip_blank};

/// How many faults of one text are told.
const MOST: usize = 20;

/// Reads a RON text into `T`. Optional values need no `Some(..)`; a byte order mark is skipped.
///
/// # Errors
/// A text that is no RON: the first fault. Otherwise keys that do not exist, keys that are missing, values of another
/// type and names that are none of the allowed ones: all of them, each with its span, up to twenty. Values that `T`
/// refuses by itself are told likewise.
pub fn parse<T: DeserializeOwned>(text: &str) -> Result<T, Vec<Fault>> {
    let options = Options::default().with_default_extension(Extensions::IMPLICIT_SOME | Extensions::UNWRAP_NEWTYPES);
    // The reader refuses a byte order mark; blanks of the same length keep every span.
    let mut copy = match text.strip_prefix('\u{feff}') {
        Some(rest) => format!("   {rest}"),
        None => text.to_string(),
    };
    let mut error = match options.from_str::<T>(&copy) {
        Ok(value) => return Ok(value),
        Err(error) => error,
    };
    let tree = Tree::of(text);
    if let Err(error) = options.from_str::<IgnoredAny>(&copy) {
        return Err(vec![syntax_fault(&copy, &tree, &error)]);
    }
    // The syntax is sound, so a value that does not fit can be blanked out to see what else is wrong.
    let mut faults = Vec::new();
    let mut removed = Vec::new();
    while faults.len() < MOST {
        let spot = tree.spot(refused_at(&copy, &error));
        let follows = matches!(&error.code, Error::MissingStructField { field, .. } if removed.contains(field));
        if !follows {
            let (message, help) = in_words(&error.code);
            faults.push(Fault { span: Some(spot.mark), ..Fault::at("", message).help(help) });
        }
        let Some(range) = spot.removable.filter(|r| !copy[r.clone()].trim().is_empty()) else { break };
        removed.extend(spot.key.map(|key| &text[key]));
        if let Error::NoSuchStructField { expected, found, .. } = &error.code {
            removed.extend(nearest(found, expected));
        }
        let comma = skip_blank(&copy, range.end);
        let end = if copy[comma..].starts_with(',') { comma + 1 } else { range.end };
        copy.replace_range(range.start..end, &" ".repeat(end - range.start));
        match options.from_str::<T>(&copy) {
            Ok(_) => break,
            Err(next) => error = next,
        }
    }
    Err(faults)
}

/// The byte at a position that counts lines and characters from one.
fn byte_of(text: &str, position: &Position) -> usize {
    let start: usize = text.split_inclusive('\n').take(position.line - 1).map(str::len).sum();
    let within = text[start..].char_indices().nth(position.col - 1);
    within.map_or(text.len(), |(offset, _)| start + offset)
}

/// A byte of what the reader refuses in a text of sound syntax.
fn refused_at(text: &str, error: &SpannedError) -> usize {
    let start = byte_of(text, &error.span.start);
    let at = skip_blank(text, start);
    // A value that is refused as a whole has been read by then: the reader stands behind it.
    let is_whole = matches!(error.code, Error::Message(_) | Error::InvalidValueForType { .. });
    match text[..start].trim_end().char_indices().next_back() {
        Some((last, _)) if is_whole && text[at..].starts_with([',', ')', ']', '}']) => last,
        _ => at,
    }
}

/// The first fault of a text that is no RON.
fn syntax_fault(text: &str, tree: &Tree, error: &SpannedError) -> Fault {
    let at = skip_blank(text, byte_of(text, &error.span.end));
    if let Some(open) = tree.unclosed.filter(|_| at == text.len()) {
        let message = format!("this `{}` is never closed", &text[open..=open]);
        return Fault { span: Some(open..open + 1), ..Fault::at("", message) };
    }
    let in_word = |c: char| c.is_alphanumeric() || "_.+-%".contains(c);
    let start = text[..at].trim_end_matches(in_word).len();
    let rest = &text[at..];
    let end = text.len() - rest.trim_start_matches(in_word).len();
    let word = &text[start..end];
    let (message, help) = match &error.code {
        // A number with letters, such as 4k7 or 10Hz, ends for the reader where its letters begin.
        _ if word.starts_with(|c: char| c.is_ascii_digit()) && start < at => {
            (format!("`{word}` is neither a number nor a name"), format!("write it in quotes: \"{word}\""))
        }
        _ if rest.starts_with('=') => ("expected a colon".to_string(), "write key: value".to_string()),
        Error::ExpectedComma => {
            let help = "put commas between values, and a value with blanks or units in quotes";
            ("a comma is missing before this".to_string(), help.to_string())
        }
        code => in_words(code),
    };
    let span = if word.is_empty() { at..at + rest.chars().next().map_or(0, char::len_utf8) } else { start..end };
    Fault { span: Some(span), ..Fault::at("", message) }.help(help)
}

/// What is wrong, and what to do.
fn in_words(error: &Error) -> (String, String) {
    match error {
        Error::NoSuchStructField { expected, found, .. } => {
            (format!("there is no key `{found}` here"), suggestion(found, "the keys are", expected))
        }
        Error::NoSuchEnumVariant { expected, found, .. } => {
            (format!("`{found}` is none of the names that can stand here"), suggestion(found, "they are", expected))
        }
        Error::MissingStructField { field, .. } => {
            (format!("the key `{field}` is missing"), format!("add `{field}: ...`"))
        }
        Error::DuplicateStructField { field, .. } => {
            (format!("the key `{field}` is there twice"), "keep one of the two".to_string())
        }
        other => (other_in_words(other), String::new()),
    }
}

fn other_in_words(error: &Error) -> String {
    let plain = match error {
        Error::ExpectedFloat | Error::ExpectedInteger => "expected a number",
        Error::ExpectedString => "expected a text in quotes",
        Error::ExpectedStringEnd => "this text in quotes is never closed",
        Error::ExpectedBoolean => "expected true or false",
        Error::ExpectedArray => "expected a list in [ ]",
        Error::ExpectedMap => "expected entries in { }",
        Error::ExpectedStructLike | Error::ExpectedNamedStructLike(_) => "expected a group in ( )",
        Error::ExpectedStructLikeEnd => "expected a closing bracket: there is more here than can be used",
        Error::ExpectedIdentifier => "expected a key or a name",
        Error::TrailingCharacters => "expected the end of the text",
        Error::Eof => "the text ends too early",
        Error::ExceededRecursionLimit => "brackets are nested too deep here",
        // The value is marked, so what was found need not be said.
        Error::InvalidValueForType { expected, .. } => return format!("expected {expected}"),
        other => {
            let text = other.to_string();
            let first = text.chars().next().map_or(0, char::len_utf8);
            return text[..first].to_lowercase() + &text[first..];
        }
    };
    plain.to_string()
}

#[cfg(test)]
mod tests {
    #![allow(clippy::unwrap_used)]
    use serde::Deserialize;

    use super::*;
    use crate::text::render;

    #[derive(Debug, Deserialize, PartialEq)]
    enum Colour {
        DarkRed,
        LightBlue,
    }

    #[derive(Debug, Deserialize, PartialEq)]
    #[serde(deny_unknown_fields)]
    struct Part {
        name: String,
        gain: Option<f64>,
        colour: Option<Colour>,
        pair: Option<(f64, f64)>,
        parts: Option<Vec<Part>>,
    }

    fn told(text: &str) -> String {
        render(&parse::<Part>(text).unwrap_err(), "part.ron", text, false)
    }

    #[test]
    fn sound_texts_are_read() {
        let part = parse::<Part>("\u{feff}(name: \"µ\", // x\r\n\tgain: 2, colour: Some(DarkRed))").unwrap();
        assert_eq!((part.name.as_str(), part.gain, part.colour), ("µ", Some(2.0), Some(Colour::DarkRed)));
    }

    #[test]
    fn all_faults_are_told_at_once() {
        let text = "\u{feff}(\r\n\tname: \"µΩ\", /* µ */ gian: 2, parts: [\r\n\
            \t\t(nam: \"x\"),\r\n\
            \t\t(name: 3, gain: \"4\", colour: darkred),\r\n\
            \t\t(name: \"y\", gain: 1, gain: 2, pair: (1, true), colour: Green)],\r\n\tpair: (1, 2, 3),\r\n\
            )";
        insta::assert_snapshot!(told(text), @r#"
        error: there is no key `gian` here
         --> part.ron:2:22
          |
        2 |     name: "µΩ", /* µ */ gian: 2, parts: [
          |                         ^^^^
          |
          = help: did you mean `gain`?

        error: there is no key `nam` here
         --> part.ron:3:4
          |
        3 |         (nam: "x"),
          |          ^^^
          |
          = help: did you mean `name`?

        error: expected a text in quotes
         --> part.ron:4:10
          |
        4 |         (name: 3, gain: "4", colour: darkred),
          |                ^

        error: expected a number
         --> part.ron:4:19
          |
        4 |         (name: 3, gain: "4", colour: darkred),
          |                         ^^^

        error: `darkred` is none of the names that can stand here
         --> part.ron:4:32
          |
        4 |         (name: 3, gain: "4", colour: darkred),
          |                                      ^^^^^^^
          |
          = help: did you mean `DarkRed`?

        error: the key `gain` is there twice
         --> part.ron:5:24
          |
        5 |         (name: "y", gain: 1, gain: 2, pair: (1, true), colour: Green)],
          |                              ^^^^
          |
          = help: keep one of the two

        error: expected a number
         --> part.ron:5:43
          |
        5 |         (name: "y", gain: 1, gain: 2, pair: (1, true), colour: Green)],
          |                                                 ^^^^

        error: `Green` is none of the names that can stand here
         --> part.ron:5:58
          |
        5 |         (name: "y", gain: 1, gain: 2, pair: (1, true), colour: Green)],
          |                                                                ^^^^^
          |
          = help: they are DarkRed, LightBlue

        error: expected a closing bracket: there is more here than can be used
         --> part.ron:6:15
          |
        6 |     pair: (1, 2, 3),
          |                  ^
        "#);
    }

    #[test]
    fn faults_of_syntax_are_told_one_by_one() {
        let texts = [
            "(name: \"x\", gain: 4k7)",
            "(name: \"x\", gain: 10 kHz)",
            "(name: \"x\" gain: 1)",
            "(name: \"x\", parts: [(name: \"y\", ],\n gain: 1",
            "(name: \"x",
            "(name: \"x\") more",
            "(name = 1)",
            "(name: \"\\q\")",
            "",
        ];
        insta::assert_snapshot!(texts.map(told).join("\n"), @r#"
        error: `4k7` is neither a number nor a name
         --> part.ron:1:19
          |
        1 | (name: "x", gain: 4k7)
          |                   ^^^
          |
          = help: write it in quotes: "4k7"

        error: a comma is missing before this
         --> part.ron:1:22
          |
        1 | (name: "x", gain: 10 kHz)
          |                      ^^^
          |
          = help: put commas between values, and a value with blanks or units in quotes

        error: a comma is missing before this
         --> part.ron:1:12
          |
        1 | (name: "x" gain: 1)
          |            ^^^^
          |
          = help: put commas between values, and a value with blanks or units in quotes

        error: expected a key or a name
         --> part.ron:1:33
          |
        1 | (name: "x", parts: [(name: "y", ],
          |                                 ^

        error: this text in quotes is never closed
         --> part.ron:1:9
          |
        1 | (name: "x
          |         ^

        error: expected the end of the text
         --> part.ron:1:13
          |
        1 | (name: "x") more
          |             ^^^^

        error: expected a colon
         --> part.ron:1:7
          |
        1 | (name = 1)
          |       ^
          |
          = help: write key: value

        error: unknown escape character
         --> part.ron:1:10
          |
        1 | (name: "\q")
          |          ^

        error: the text ends too early
         --> part.ron:1:1
          |
        1 |
          | ^
        "#);
    }
}
