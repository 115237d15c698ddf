//! Texts in RON (rusty object notation, <https://github.com/ron-rs/ron>): reading them with all their faults at once,
//! and showing each fault where it stands. Shared by everything that reads RON.

mod names;
mod read;
mod render;
mod scan;
mod words;

use std::ops::Range;

pub use names::suggestion;
pub use read::parse;
pub use render::render;
pub use words::{CONTROL_HELP, control_character, with_article, wrapped};

/// One thing that is wrong with a text, a file or a flag.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Fault {
    /// Where: a path such as `sections[0].q` in a RON text, a flag such as `--series`, or nothing for the whole.
    pub path: String,
    /// The bytes of the text, once located.
    pub span: Option<Range<usize>>,
    /// What is wrong: names the value and what was expected.
    pub message: String,
    /// What to do.
    pub help: Option<String>,
}

impl Fault {
    /// A fault at a path.
    pub fn at(path: impl Into<String>, message: impl Into<String>) -> Fault {
        Fault { path: path.into(), span: None, message: message.into(), help: None }
    }

    /// The same fault with advice; empty advice is none.
    pub fn help(mut self, help: impl Into<String>) -> Fault {
        self.help = Some(help.into()).filter(|h: &String| !h.is_empty());
        self
    }
}

/// The faults with the spans of their paths in the text, in text order.
///
/// A path is made of keys and indices: `sections[1].q`, `slots.R1.pin` (keys of maps without their quotes), `band[0]`
/// (a member of a list or tuple). Where a path leads nowhere, the nearest value that encloses it is taken; `[0]` of a
/// value that stands alone is that value. Flags (paths that begin with `-`) have no span and come last.
pub fn located(text: &str, mut faults: Vec<Fault>) -> Vec<Fault> {
    let tree = scan::Tree::of(text);
    for fault in faults.iter_mut().filter(|f| f.span.is_none() && !f.path.starts_with('-')) {
        fault.span = Some(tree.nearest(&fault.path));
    }
    faults.sort_by_key(|f| f.span.as_ref().map_or((usize::MAX, 0), |span| (span.start, span.end)));
    faults
}
