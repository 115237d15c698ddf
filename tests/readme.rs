//! The README shows what the program prints: every console block is run, only the time taken may differ.

#![allow(missing_docs, clippy::unwrap_used)]

use std::fs;
use std::path::Path;
use std::process::Command;

use tempfile::TempDir;

const README: &str = include_str!("../README.md");

/// The fenced blocks of one language.
fn blocks(language: &str) -> Vec<&'static str> {
    let fence = format!("```{language}\n");
    README.split(fence.as_str()).skip(1).map(|rest| rest.split("```").next().unwrap()).collect()
}

/// Words of a command line; double quotes hold words together.
fn words(line: &str) -> Vec<String> {
    let quoted = line.split('"').enumerate();
    let parts = quoted.flat_map(|(i, part)| {
        if i % 2 == 1 { vec![part.to_string()] } else { part.split_whitespace().map(String::from).collect() }
    });
    parts.collect()
}

/// The text with the time taken, which differs from run to run, replaced.
fn masked(text: &str) -> String {
    let mask = |line: &str| match line.split_once(" nodes visited, ") {
        Some((before, _)) => format!("{before} nodes visited, some time"),
        None => line.to_string(),
    };
    text.lines().map(mask).collect::<Vec<_>>().join("\n")
}

/// A copy of the examples in a folder of their own, so that commands may write files.
fn examples() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    for name in ["examples", "circuits", "masks"] {
        let to = folder.path().join("data").join(name);
        fs::create_dir_all(&to).unwrap();
        for entry in fs::read_dir(Path::new("data").join(name)).unwrap() {
            let entry = entry.unwrap();
            fs::copy(entry.path(), to.join(entry.file_name())).unwrap();
        }
    }
    folder
}

#[test]
fn console_blocks_are_what_the_program_prints() {
    let folder = examples();
    let mut run = 0;
    // Each command of a block stands on a line that begins with `$ `, its output below it.
    let commands = blocks("console").into_iter().flat_map(|block| block.strip_prefix("$ ").unwrap().split("\n$ "));
    for text in commands {
        let (command, rest) = text.split_once('\n').unwrap_or((text, ""));
        if command.starts_with("cargo") {
            continue;
        }
        let (code, expected) = match rest.strip_prefix("? ").and_then(|r| r.split_once('\n')) {
            Some((code, expected)) => (code.parse().unwrap(), expected),
            None => (0, rest),
        };
        let output = Command::new(env!("CARGO_BIN_EXE_roundwell"))
            .args(&words(command)[1..])
            .current_dir(folder.path())
            .output()
            .unwrap();
        assert_eq!(output.status.code(), Some(code), "{command}");
        let printed = String::from_utf8(output.stdout).unwrap();
        assert_eq!(masked(printed.trim_end()), masked(expected.trim_end()), "{command}");
        run += 1;
    }
    assert!(run >= 9, "{run} commands were run");
}

#[test]
fn the_files_shown_are_the_examples() {
    let files = ["examples/vibration-logger", "examples/rain-gauge", "masks/vibration-logger"];
    let texts = files.map(|name| fs::read_to_string(format!("data/{name}.ron")).unwrap());
    assert_eq!(blocks("ron"), texts);
}

#[test]
fn the_stock_list_shown_is_the_example() {
    let list = fs::read_to_string("data/examples/parts-tin.csv").unwrap();
    assert_eq!(blocks("csv"), [list]);
}

/// Every example job runs and finds something.
#[test]
fn every_example_finds_something() {
    let mut run = 0;
    for entry in fs::read_dir("data/examples").unwrap() {
        let path = entry.unwrap().path();
        if path.extension().is_some_and(|e| e == "ron") {
            let status =
                Command::new(env!("CARGO_BIN_EXE_roundwell")).arg("shortlist").arg(&path).output().unwrap().status;
            assert_eq!(status.code(), Some(0), "{}", path.display());
            run += 1;
        }
    }
    assert!(run >= 3);
}
