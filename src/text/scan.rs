//! A tolerant scan of a RON text: which bytes belong to which value. It knows no types and takes any text.

use std::ops::Range;

/// A value: a name, number, string or character, or a group of entries in brackets.
#[derive(Debug, Default)]
struct Node {
    span: Range<usize>,
    /// The opening bracket of a group.
    bracket: Option<char>,
    entries: Vec<Entry>,
}

/// What stands between two commas of a group.
#[derive(Debug)]
struct Entry {
    /// The key, of a field of a struct or an entry of a map.
    key: Option<Range<usize>>,
    value: Node,
}

impl Entry {
    fn span(&self) -> Range<usize> {
        self.key.as_ref().unwrap_or(&self.value.span).start..self.value.span.end
    }
}

/// A place in a text, seen as a value or a key.
#[derive(Debug, PartialEq)]
pub(super) struct Spot {
    /// The innermost value or key there.
    pub mark: Range<usize>,
    /// The innermost keyed value or list member there: it can be taken out without harm to its neighbours.
    pub removable: Option<Range<usize>>,
    /// The key of what can be taken out, where it has one.
    pub key: Option<Range<usize>>,
}

/// The values of a text.
#[derive(Debug)]
pub(super) struct Tree<'a> {
    text: &'a str,
    root: Node,
    /// Where the innermost bracket stands that is never closed.
    pub unclosed: Option<usize>,
}

impl<'a> Tree<'a> {
    /// Scans a text; of one that is not RON it finds what there is.
    pub fn of(text: &'a str) -> Tree<'a> {
        let mut scanner = Scanner { text, at: 0, depth: 0, unclosed: None };
        scanner.attributes();
        let root = scanner.value();
        Tree { text, root, unclosed: scanner.unclosed }
    }

    /// The span of the value at a path, or of the nearest value that encloses it.
    pub fn nearest(&self, path: &str) -> Range<usize> {
        let (mut node, mut rest) = (&self.root, path);
        while let Some((inner, tail)) = self.step(node, rest).filter(|(_, tail)| tail.len() < rest.len()) {
            (node, rest) = (inner, tail);
        }
        node.span.clone()
    }

    /// The value that the first step of a path leads to, and the rest of the path.
    fn step<'n, 'p>(&self, node: &'n Node, path: &'p str) -> Option<(&'n Node, &'p str)> {
        if let Some((index, tail)) = path.strip_prefix('[').and_then(|p| p.split_once(']')) {
            let index: usize = index.parse().ok()?;
            return match node.entries.get(index) {
                Some(Entry { key: None, value }) => Some((value, tail)),
                _ => (index == 0).then_some((node, tail)),
            };
        }
        let path = path.strip_prefix('.').unwrap_or(path);
        // Keys of maps may contain the signs of a path: the longest key that fits is meant.
        let fitting = node.entries.iter().filter_map(|entry| {
            let key = self.text[entry.key.clone()?].trim_start_matches("r#").trim_matches('"');
            let tail = path.strip_prefix(key)?;
            (tail.is_empty() || tail.starts_with(['.', '['])).then_some((&entry.value, tail))
        });
        fitting.min_by_key(|(_, tail)| tail.len())
    }

    /// The value or key at a byte.
    pub fn spot(&self, at: usize) -> Spot {
        let mut spot = Spot { mark: self.root.span.clone(), removable: None, key: None };
        let mut node = &self.root;
        while let Some(entry) = node.entries.iter().find(|e| e.span().contains(&at)) {
            if entry.key.is_some() || node.bracket == Some('[') {
                spot.removable = Some(entry.span());
                spot.key = entry.key.clone();
            }
            node = &entry.value;
            if let Some(key) = entry.key.clone().filter(|key| key.contains(&at)) {
                return Spot { mark: key, ..spot };
            }
            spot.mark = node.span.clone();
        }
        spot
    }
}

/// The first byte at or after `at` that is neither blank nor comment.
pub(super) fn skip_blank(text: &str, at: usize) -> usize {
    let mut scanner = Scanner { text, at, depth: 0, unclosed: None };
    scanner.blank();
    scanner.at
}

/// Whether a character ends a bare word.
fn ends_word(c: char) -> bool {
    c.is_whitespace() || ",:()[]{}\"'/".contains(c)
}

/// The deepest nesting that is followed, that of the RON reader.
const DEEPEST: usize = 128;

struct Scanner<'a> {
    text: &'a str,
    at: usize,
    depth: usize,
    unclosed: Option<usize>,
}

impl<'a> Scanner<'a> {
    fn rest(&self) -> &'a str {
        &self.text[self.at..]
    }

    fn peek(&self) -> Option<char> {
        self.rest().chars().next()
    }

    /// Moves behind the next `end`, or to the end of the text.
    fn skip_past(&mut self, end: &str) {
        self.at = self.rest().find(end).map_or(self.text.len(), |found| self.at + found + end.len());
    }

    fn skip_while(&mut self, wanted: impl Fn(char) -> bool) {
        self.at = self.rest().find(|c| !wanted(c)).map_or(self.text.len(), |found| self.at + found);
    }

    /// Skips blanks and comments; a byte order mark counts as blank.
    fn blank(&mut self) {
        loop {
            self.skip_while(|c| c.is_whitespace() || c == '\u{feff}');
            if self.rest().starts_with("//") {
                self.skip_past("\n");
            } else if self.rest().starts_with("/*") {
                self.block_comment();
            } else {
                return;
            }
        }
    }

    fn block_comment(&mut self) {
        let mut open = 0;
        while let Some(c) = self.peek() {
            match self.rest().get(..2) {
                Some("/*") => (open, self.at) = (open + 1, self.at + 2),
                Some("*/") => (open, self.at) = (open - 1, self.at + 2),
                _ => self.at += c.len_utf8(),
            }
            if open == 0 {
                return;
            }
        }
    }

    /// Skips attributes such as `#![enable(implicit_some)]`.
    fn attributes(&mut self) {
        self.blank();
        while self.rest().starts_with("#!") {
            self.skip_past("]");
            self.blank();
        }
    }

    fn value(&mut self) -> Node {
        self.blank();
        let start = self.at;
        self.token();
        let end = self.at;
        self.blank();
        let bracket = self.peek().filter(|&c| c == '(' || end == start && (c == '[' || c == '{'));
        let Some(bracket) = bracket.filter(|_| self.depth < DEEPEST) else {
            self.at = end;
            return Node { span: start..end, ..Node::default() };
        };
        self.depth += 1;
        let entries = self.entries();
        self.depth -= 1;
        Node { span: start..self.at, bracket: Some(bracket), entries }
    }

    /// The entries of a group, from its opening bracket to behind its closing one, whichever that is.
    fn entries(&mut self) -> Vec<Entry> {
        let open = self.at;
        self.at += 1;
        let mut entries = Vec::new();
        loop {
            self.blank();
            match self.peek() {
                None => {
                    self.unclosed.get_or_insert(open);
                    return entries;
                }
                Some(')' | ']' | '}') => {
                    self.at += 1;
                    return entries;
                }
                Some(',' | ':') => self.at += 1,
                Some(first) => {
                    let before = self.at;
                    let value = self.value();
                    // A bracket too deep, or one that does not fit here: step over it.
                    if self.at == before {
                        self.at += first.len_utf8();
                    }
                    let end = self.at;
                    self.blank();
                    if self.peek() == Some(':') {
                        self.at += 1;
                        entries.push(Entry { key: Some(value.span), value: self.value() });
                    } else {
                        self.at = end;
                        entries.push(Entry { key: None, value });
                    }
                }
            }
        }
    }

    /// Skips a word, number, string or character; nothing where a bracket, comma or colon stands.
    fn token(&mut self) {
        let start = self.at;
        self.skip_while(|c| !ends_word(c));
        let word = &self.text[start..self.at];
        match self.peek() {
            Some('"') if word.trim_start_matches('b').starts_with('r') => {
                let hashes = word.len() - word.trim_end_matches('#').len();
                self.at += 1;
                self.skip_past(&format!("\"{}", "#".repeat(hashes)));
            }
            Some(quote @ ('"' | '\'')) if word.is_empty() || word == "b" => self.quoted(quote),
            Some('/') if word.is_empty() => self.at += 1,
            _ => {}
        }
    }

    fn quoted(&mut self, quote: char) {
        let mut escaped = false;
        for (offset, c) in self.rest().char_indices().skip(1) {
            if c == quote && !escaped {
                self.at += offset + 1;
                return;
            }
            escaped = c == '\\' && !escaped;
        }
        self.at = self.text.len();
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const TEXT: &str = "\u{feff}#![enable(implicit_some)]\r\n(\t// (a comment, with: signs]\r\n\
        title: \"a \\\" ) tìtle\", sections: [\r\n(q: 1, raw: r#\"x\")\"#, c: '\\''), /* [ /* nested */ ( */ Section(q: Some(2))],\
        slots: {\"R1\": (pin: \"1k\"), \"R1.x\": (pin: \"2k\")}, band: (\"1\", -2e3), alone: E6, r#type: b\"9\")";

    #[test]
    fn paths_lead_to_their_values() {
        let tree = Tree::of(TEXT);
        for (path, value) in [
            ("title", "\"a \\\" ) tìtle\""),
            ("sections[0].q", "1"),
            ("sections[0].raw", "r#\"x\")\"#"),
            ("sections[0].c", "'\\''"),
            ("sections[1]", "Section(q: Some(2))"),
            ("sections[1].q[0]", "2"),
            ("slots.R1.pin", "\"1k\""),
            ("slots.R1.x.pin", "\"2k\""),
            ("band[1]", "-2e3"),
            ("alone[0]", "E6"),
            ("type", "b\"9\""),
            // The nearest value that encloses what is not there.
            ("slots.R1.shelf[2].from", "(pin: \"1k\")"),
            ("sections[1].gain", "Section(q: Some(2))"),
            ("band[7]", "(\"1\", -2e3)"),
            ("alone[1]", "E6"),
        ] {
            assert_eq!(&TEXT[tree.nearest(path)], value, "{path}");
        }
        assert_eq!(tree.nearest("nowhere"), tree.root.span);
        assert_eq!(tree.unclosed, None);
    }

    #[test]
    fn spots_are_the_innermost_values() {
        let text = "(a: [1, (b: 2)], c: (3, 4))";
        let tree = Tree::of(text);
        let spot = |at| {
            let spot = tree.spot(at);
            (&text[spot.mark], spot.removable.map(|r| &text[r]), spot.key.map(|k| &text[k]))
        };
        assert_eq!(spot(0), (text, None, None));
        assert_eq!(spot(1), ("a", Some("a: [1, (b: 2)]"), Some("a")));
        assert_eq!(spot(5), ("1", Some("1"), None));
        assert_eq!(spot(12), ("2", Some("b: 2"), Some("b")));
        assert_eq!(spot(21), ("3", Some("c: (3, 4)"), Some("c")));
    }

    #[test]
    fn unfinished_texts_are_scanned_to_their_end() {
        for (text, unclosed) in [
            ("(a: [1, 2", Some(4)),
            ("(a: \"x", Some(0)),
            ("(a: /* x", Some(0)),
            ("(a: r#\"x\"", Some(0)),
            ("(a: 'x", Some(0)),
            ("", None),
            (")", None),
            ("/", None),
        ] {
            assert_eq!(Tree::of(text).unclosed, unclosed, "{text}");
        }
        let deep = "(".repeat(100_000);
        assert!(Tree::of(&deep).unclosed.is_some());
    }
}
