//! Why a command ends without a result, and the exit code that goes with it.

use std::io;
use std::path::Path;

use super::{BAD_INPUT, INTERNAL_FAULT};
use crate::text::{Fault, render};
use crate::verify::VerifyError;

/// Faults of one text.
#[derive(Debug)]
pub struct Faulty {
    /// The name under which the text is known; empty for the command line.
    pub file: String,
    /// The text; empty for the command line.
    pub text: String,
    /// What is wrong with it.
    pub faults: Vec<Fault>,
    /// Whether more is checked only once these are put right.
    pub is_first_round: bool,
}

/// A command that cannot give a result.
#[derive(Debug)]
pub enum Failure {
    /// The input is wrong.
    Input(Vec<Faulty>),
    /// The output cannot be written.
    Output {
        /// Where it should go.
        target: String,
        /// Why it does not.
        error: io::Error,
        /// What to do.
        help: &'static str,
    },
    /// The result failed its independent check.
    Unverified(VerifyError),
    /// The result cannot be put into its format.
    Unwritable(String),
    /// The threads cannot be started.
    Threads(String),
}

impl Failure {
    /// One fault of the command line, or of a file as a whole.
    pub fn input(fault: Fault) -> Failure {
        Failure::inputs(vec![fault])
    }

    /// Faults that concern no text.
    pub fn inputs(faults: Vec<Fault>) -> Failure {
        Failure::Input(vec![Faulty { file: String::new(), text: String::new(), faults, is_first_round: false }])
    }

    /// A file that cannot be read.
    pub fn reading(path: &Path, error: &io::Error) -> Failure {
        let message = format!("cannot read {}: {}", path.display(), plain(error));
        let help = match error.kind() {
            io::ErrorKind::NotFound => "check the path; `roundwell --help` shows the commands",
            io::ErrorKind::IsADirectory => "name a file in it",
            _ => "",
        };
        Failure::input(Fault::at("", message).help(help))
    }

    /// The last fault of an input, for a text that names it; any other failure as one.
    pub fn into_fault(self) -> Fault {
        let fault = match &self {
            Failure::Input(texts) => texts.last().and_then(|text| text.faults.last()).cloned(),
            _ => None,
        };
        fault.unwrap_or_else(|| Fault::at("", self.show(false).trim_end().to_string()))
    }

    /// The exit code: 1 for faults of the program, 2 for everything that the user can put right.
    pub fn exit_code(&self) -> u8 {
        match self {
            Failure::Unverified(_) | Failure::Unwritable(_) => INTERNAL_FAULT,
            Failure::Input(_) | Failure::Output { .. } | Failure::Threads(_) => BAD_INPUT,
        }
    }

    /// The failure as text, with colours if `styled`.
    pub fn show(&self, styled: bool) -> String {
        let one = |message: String, help: &str| render(&[Fault::at("", message).help(help)], "", "", styled);
        match self {
            Failure::Input(texts) => {
                let shown = texts.iter().map(|text| render(&text.faults, &text.file, &text.text, styled));
                let mut shown = shown.collect::<Vec<_>>().join("\n");
                if texts.iter().any(|text| text.is_first_round) {
                    let count: usize = texts.iter().map(|text| text.faults.len()).sum();
                    let what = if count == 1 { "this is" } else { "these are" };
                    shown += &format!("\nnote: more is checked once {what} put right\n");
                }
                shown
            }
            Failure::Output { target, error, help } => one(format!("cannot write {target}: {}", plain(error)), help),
            Failure::Unverified(error) => {
                let message = format!("internal fault: the result failed its independent check: {error}");
                one(message, "no set is shown; please report this with the job")
            }
            Failure::Unwritable(error) => {
                let message = format!("internal fault: the result cannot be put into its format: {error}");
                one(message, "please report this with the command")
            }
            Failure::Threads(error) => one(format!("cannot start the threads: {error}"), "ask for fewer --threads"),
        }
    }
}

/// The text of an error of the system, without its number.
fn plain(error: &io::Error) -> String {
    let text = error.to_string();
    let text = text.split(" (os error").next().unwrap_or_default();
    let first = text.chars().next().map_or(0, char::len_utf8);
    text[..first].to_lowercase() + &text[first..]
}

#[cfg(test)]
mod tests {
    use super::*;

    fn in_one_line(failure: &Failure) -> String {
        failure.show(false).split_whitespace().collect::<Vec<_>>().join(" ")
    }

    #[test]
    fn a_result_that_fails_its_check_is_an_internal_fault() {
        let error = VerifyError::Tie { row: 2, section: "A".to_string() };
        let failure = Failure::Unverified(error.clone());
        assert_eq!(failure.exit_code(), 1);
        let shown = in_one_line(&failure);
        assert!(shown.contains(&error.to_string()) && shown.contains("no set is shown"), "{shown}");
    }

    #[test]
    fn a_result_that_fits_no_format_is_an_internal_fault() {
        let failure = Failure::Unwritable("key must be a string".to_string());
        assert_eq!(failure.exit_code(), 1);
        assert!(in_one_line(&failure).contains("key must be a string"));
    }

    #[test]
    fn errors_of_the_system_are_told_without_their_numbers() {
        let error = io::Error::from_raw_os_error(2);
        let failure = Failure::reading(Path::new("job.ron"), &error);
        assert_eq!(failure.exit_code(), 2);
        assert!(!failure.show(false).contains("os error"), "{}", failure.show(false));
        assert!(failure.show(false).starts_with("error: cannot read job.ron: "), "{}", failure.show(false));
    }
}
