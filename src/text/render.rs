//! Faults as a person reads them: what, where in the text, and what to do.

use std::ops::Range;

use annotate_snippets::{AnnotationKind, Group, Level, Renderer, Snippet};

use super::{Fault, wrapped};

/// The faults, one below the other: message, `file:line:column`, the line with the value marked, advice. A fault
/// without a span, such as one of a flag, is shown by its path. Messages and advice are broken into lines of 80
/// characters. `styled` sets colours for a terminal.
pub fn render(faults: &[Fault], file: &str, text: &str, styled: bool) -> String {
    let renderer = if styled { Renderer::styled() } else { Renderer::plain() };
    // A byte order mark is no column.
    let source = text.strip_prefix('\u{feff}').unwrap_or(text);
    let mark = text.len() - source.len();
    let shown = faults.iter().map(|fault| {
        let title = match (&fault.span, fault.path.as_str()) {
            (Some(_), _) | (None, "") => fault.message.clone(),
            (None, path) => format!("{path}: {}", fault.message),
        };
        let title = Level::ERROR.primary_title(within(&title, "error: ".len()));
        let snippet = fault.span.as_ref().map(|span| {
            let shifted = span.start.saturating_sub(mark)..span.end.saturating_sub(mark);
            let annotation = AnnotationKind::Primary.span(first_line(source, shifted));
            Snippet::source(source).path(file).annotation(annotation)
        });
        // Advice stands behind the room for the line number.
        let line =
            fault.span.as_ref().map_or(0, |span| source[..boundary(source, span.start)].lines().count().max(1));
        let room = if line == 0 { 0 } else { line.to_string().len() };
        let help = fault.help.as_ref().map(|help| Level::HELP.message(within(help, room + " = help: ".len())));
        renderer.render(&[Group::with_title(title).elements(snippet).elements(help)]) + "\n"
    });
    shown.collect::<Vec<_>>().join("\n")
}

/// How many characters a line of a message has.
const WIDTH: usize = 80;

/// A text broken into lines that leave room for `start` characters before them. Blanks stay as they are where the text
/// fits, and signs that steer a terminal are not let through.
fn within(text: &str, start: usize) -> String {
    let text: String = text.chars().map(|c| if c.is_control() && c != '\n' { '\u{fffd}' } else { c }).collect();
    let room = WIDTH - start;
    let lines = text.lines().map(|line| match line.chars().count() {
        long if long > room => wrapped(line, room, room).join("\n"),
        _ => line.to_string(),
    });
    lines.collect::<Vec<_>>().join("\n")
}

fn boundary(text: &str, at: usize) -> usize {
    text.floor_char_boundary(at.min(text.len()))
}

/// The part of a span on its first line, within the text and between whole characters.
fn first_line(text: &str, span: Range<usize>) -> Range<usize> {
    let start = text.floor_char_boundary(span.start);
    let line = text[start..].lines().next().map_or(0, str::len);
    start..text.floor_char_boundary(span.end).clamp(start, start + line)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::text::located;

    #[test]
    fn faults_are_shown_at_their_line_and_column() {
        let text = "\u{feff}(\r\n\tname: \"µ\", q: -1,\r\n\tslots: (\r\n\t\ta: 1))\r\n";
        let faults = vec![
            Fault::at("--series", "`E7` is no series").help("write E6 or E12"),
            Fault::at("slots", "there is no slot `a`"),
            Fault::at("q", "q must be positive, found -1").help("write a positive number"),
        ];
        insta::assert_snapshot!(render(&located(text, faults), "job.ron", text, false), @r#"
        error: q must be positive, found -1
         --> job.ron:2:16
          |
        2 |     name: "µ", q: -1,
          |                   ^^
          |
          = help: write a positive number

        error: there is no slot `a`
         --> job.ron:3:9
          |
        3 |     slots: (
          |            ^

        error: --series: `E7` is no series
         |
         = help: write E6 or E12
        "#);
    }

    #[test]
    fn a_span_that_does_not_fit_the_text_is_cut() {
        for span in [0..99, 98..99, 1..2, Range { start: 3, end: 1 }] {
            let fault = Fault { span: Some(span), ..Fault::at("", "wrong") };
            assert!(render(&[fault], "job.ron", "aµb", false).contains("--> job.ron:1:"));
        }
        assert_eq!(render(&[Fault::at("", "no file")], "", "", false), "error: no file\n");
    }

    #[test]
    fn long_messages_are_broken_into_lines() {
        let fault = Fault { span: Some(4..5), ..Fault::at("", "word ".repeat(30)) }.help("advice ".repeat(30));
        let flag = Fault::at("--series", "word ".repeat(30)).help("advice ".repeat(30));
        let text = format!("{}x", "\n".repeat(12));
        let shown = render(&[fault, flag], "job.ron", &text, false);
        assert!(shown.lines().all(|line| line.chars().count() <= 80), "{shown}");
        assert_eq!((shown.matches("word").count(), shown.matches("advice").count()), (60, 60), "{shown}");
    }

    #[test]
    fn control_characters_are_not_let_through() {
        let shown = render(&[Fault::at("", "a\u{1b}[31m").help("b\u{9b}1m\tc")], "", "", false);
        assert!(!shown.contains(['\u{1b}', '\u{9b}', '\t']), "{shown:?}");
    }

    #[test]
    fn colours_come_only_when_asked_for() {
        let fault = [Fault::at("", "wrong")];
        assert!(render(&fault, "", "", true).contains('\u{1b}') && !render(&fault, "", "", false).contains('\u{1b}'));
    }
}
