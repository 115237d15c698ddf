//! Running the program, and what must hold of whatever it says.
#![allow(dead_code, clippy::unwrap_used, reason = "each test program uses its own part of this module")]

pub mod drawer;

use std::fs;
use std::path::Path;
use std::process::{Command, Output, Stdio};

use serde_json::Value;
use tempfile::TempDir;

/// The program in a folder, without standard input; the line is taken apart at its spaces.
pub fn command(folder: &Path, line: &str) -> Command {
    let mut command = Command::new(assert_cmd::cargo::cargo_bin!("roundwell"));
    command.current_dir(folder).args(line.split_whitespace()).stdin(Stdio::null());
    command
}

/// Runs in a folder.
pub fn run(folder: &Path, line: &str) -> Output {
    command(folder, line).output().unwrap()
}

/// Runs where no file is needed, or with those of the package.
pub fn plain(line: &str) -> Output {
    run(Path::new("."), line)
}

/// Runs with a file of the folder as standard input.
pub fn piped(folder: &Path, line: &str, input: &str) -> Output {
    command(folder, line).stdin(fs::File::open(folder.join(input)).unwrap()).output().unwrap()
}

/// Runs with standard output to a reader that has gone.
pub fn unread(folder: &Path, line: &str) -> Output {
    let (reader, writer) = std::io::pipe().unwrap();
    drop(reader);
    command(folder, line).stdout(writer).output().unwrap()
}

/// The exit code.
pub fn code(output: &Output) -> i32 {
    output.status.code().unwrap()
}

/// Standard output.
pub fn out(output: &Output) -> String {
    String::from_utf8(output.stdout.clone()).unwrap()
}

/// Standard error.
pub fn err(output: &Output) -> String {
    String::from_utf8(output.stderr.clone()).unwrap()
}

/// Standard output as JSON.
pub fn json(output: &Output) -> Value {
    serde_json::from_slice(&output.stdout).unwrap()
}

/// A new folder with these texts.
pub fn folder_with(files: &[(&str, &str)]) -> TempDir {
    let files: Vec<(&str, &[u8])> = files.iter().map(|(name, text)| (*name, text.as_bytes())).collect();
    folder_of(&files)
}

/// A new folder with these files.
pub fn folder_of(files: &[(&str, &[u8])]) -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    for (name, bytes) in files {
        fs::write(folder.path().join(name), bytes).unwrap();
    }
    folder
}

/// What must hold of every refusal: exit code 2, nothing on standard output, a message without colour and panic.
pub fn refused(output: &Output) -> String {
    let told = err(output);
    assert_eq!(code(output), 2, "{told}");
    assert!(output.stdout.is_empty());
    assert!(!told.is_empty() && !told.contains('\u{1b}') && !told.contains("panicked"), "{told}");
    told
}

/// A text in one line, however it was broken into several.
pub fn in_one_line(text: &str) -> String {
    text.lines().map(|line| line.trim_start_matches([' ', '|', '='])).collect::<Vec<_>>().join(" ")
}

/// A table without the time that it took.
pub fn without_time(text: &str) -> String {
    let lines = text.lines().map(|line| match line.starts_with("Search:") {
        true => line.rsplit_once(',').map_or(line, |(rest, _)| rest).to_string() + ", [time]",
        false => line.to_string(),
    });
    lines.collect::<Vec<_>>().join("\n")
}
