//! The command line: the only place that opens files, prints and reads the clock.

mod args;
mod around;
mod circuits;
mod failure;
mod files;
mod output;
mod price_args;
mod progress;
mod sections;
mod sections_args;
mod settings;
mod shortlist;
mod stock;
mod swap;
mod tighten;
mod tighten_args;
mod tolerance_args;
mod values;
mod vet;
mod vet_args;
mod vet_settings;

use std::ffi::OsString;
use std::io::{IsTerminal, Write};
use std::panic::{AssertUnwindSafe, catch_unwind};
use std::process::ExitCode;

use clap::Parser;

use args::{Arguments, Command};
use failure::Failure;

/// Exit code: found.
pub const FOUND: u8 = 0;
/// Exit code: an internal fault; a result that failed its independent check is not shown.
pub const INTERNAL_FAULT: u8 = 1;
/// Exit code: bad input or usage, or a file that cannot be read or written.
pub const BAD_INPUT: u8 = 2;
/// Exit code: nothing lies within the limits; what comes nearest is shown.
pub const NOTHING_WITHIN_LIMITS: u8 = 3;
/// Exit code: interrupted; the best found so far is shown.
pub const INTERRUPTED: u8 = 130;

/// Runs the program with the words of a command line, the program's name first, and gives its exit code.
pub fn run(words: impl IntoIterator<Item = OsString>) -> ExitCode {
    let arguments = match Arguments::try_parse_from(words) {
        Ok(arguments) => arguments,
        Err(error) => {
            // Help and version go to standard output, where a closed pipe is no failure.
            let _ = error.print();
            return ExitCode::from(if error.use_stderr() { BAD_INPUT } else { FOUND });
        }
    };
    let command = || match &arguments.command {
        Command::Shortlist(args) => shortlist::run(args),
        Command::Swap(args) => swap::run(args),
        Command::Sections(args) => sections::run(args),
        Command::Circuits(args) => circuits::run(args),
        Command::Values(args) => values::run(args),
        Command::Stock(args) => stock::run(args),
        Command::Vet(args) => vet::run(args),
        Command::Tighten(args) => tighten::run(args),
    };
    // The panic's own message has been told by then.
    ExitCode::from(match catch_unwind(AssertUnwindSafe(command)) {
        Ok(result) => result.unwrap_or_else(|failure| told(&failure)),
        Err(_) => INTERNAL_FAULT,
    })
}

/// Tells a failure on standard error, in colour only on a terminal and unless NO_COLOR is set.
fn told(failure: &Failure) -> u8 {
    let mut stderr = std::io::stderr().lock();
    let colourless = std::env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty());
    let styled = stderr.is_terminal() && !colourless;
    // Nobody is left to be told where standard error is closed.
    let _ = stderr.write_all(failure.show(styled).as_bytes());
    failure.exit_code()
}
