//! `roundwell shortlist` with a stock list: what it refuses, and where the stock cannot suffice.

#![allow(clippy::unwrap_used)]

mod command;

use std::fs;

use command::drawer::*;
use command::*;

#[test]
fn pins_and_ties_that_the_stock_cannot_serve_are_explained_by_the_inequality() {
    let folder = workshop();
    for (flags, inequality) in [
        ("--slot C1=22n --boards 5", "C1: 1 x 5 boards = 5 of one part needed, 4 of 22n in stock"),
        (
            "--slot C1=22n --boards 4 --spares 1",
            "C1: 1 x 4 boards + 1 spare = 5 of one part needed, 4 of 22n in stock",
        ),
        ("--slot R1=12k --slot R2=12k --boards 2", "R1, R2: 2 x 2 boards = 4 of one part needed, 3 of 12k in stock"),
        (
            "--equal R1=R2 --resistors 12k,22k --boards 4",
            "R1=R2 alike: 2 x 4 boards = 8 of one part needed, 6 of 22k in stock",
        ),
        ("--resistors 12k --boards 4 --spares 2", "+ 2 spares = "),
    ] {
        let output = run(folder.path(), &format!("{SECTION} --stock drawer.csv {flags}"));
        assert_eq!(code(&output), 3, "{flags}: {}", err(&output));
        let text = in_one_line(&out(&output));
        assert!(text.contains(inequality), "{flags}: {text}");
        assert!(text.contains("--buy") && text.contains("fewer boards"), "{flags}: {text}");
        // One board without spares is served.
        let one = flags.split(" --boards").next().unwrap();
        let value = listed(&folder, &format!("{SECTION} --stock drawer.csv {one} --error-limit 60"));
        assert!(!rows(&value).is_empty(), "{flags}");
    }
}

#[test]
fn bad_lines_are_faults_or_are_left_out_as_asked() {
    let folder = workshop();
    let line = format!("{SECTION} --stock bad.csv --error-limit 60");
    let told = in_one_line(&refused(&run(folder.path(), &line)));
    for word in ["bad.csv", "line 3", "4q7", "line 4", "lots", "--skip-bad-lines"] {
        assert!(told.contains(word), "{word}: {told}");
    }
    assert!(refused(&run(folder.path(), &format!("{line} --skip-bad-lines=false"))).contains("4q7"));
    let output = run(folder.path(), &format!("{line} --skip-bad-lines"));
    assert_eq!(code(&output), 0, "{}", err(&output));
    let text = in_one_line(&out(&output));
    assert!(text.contains("2 lines left out"), "{text}");
    assert_eq!(listed(&folder, &format!("{line} --skip-bad-lines"))["stock"]["lines_left_out"], 2);
    // The same as a list without these lines.
    let sound: String = BAD
        .lines()
        .filter(|line| !line.contains("4q7") && !line.contains("lots"))
        .map(|l| format!("{l}\n"))
        .collect();
    fs::write(folder.path().join("sound.csv"), sound).unwrap();
    let clean = listed(&folder, &line.replace("bad.csv", "sound.csv"));
    assert_eq!(errors(&clean), errors(&listed(&folder, &format!("{line} --skip-bad-lines"))));
    // Nothing is left.
    fs::write(folder.path().join("none.csv"), "kind,value,quantity\nR,4q7,3\n").unwrap();
    refused(&run(folder.path(), &format!("{SECTION} --stock none.csv --skip-bad-lines")));
}

#[test]
fn lists_are_named_from_the_right_folder() {
    let folder = workshop();
    fs::create_dir(folder.path().join("jobs")).unwrap();
    fs::write(folder.path().join("jobs/job.ron"), JOB).unwrap();
    // A job names its list from its own folder, a flag from the working folder.
    let told = refused(&run(folder.path(), "shortlist jobs/job.ron"));
    assert!(told.contains("jobs/drawer.csv") && told.contains("jobs/job.ron:"), "{told}");
    let by_flag = listed(&folder, "shortlist jobs/job.ron --stock drawer.csv");
    assert_eq!(errors(&by_flag), errors(&listed(&folder, "shortlist job.ron")));
}

#[test]
fn a_list_or_a_job_comes_from_standard_input() {
    let folder = workshop();
    let line = format!("{SECTION} --format csv");
    let expected = run(folder.path(), &format!("{line} --stock drawer.csv"));
    let output = piped(folder.path(), &format!("{line} --stock -"), "drawer.csv");
    assert_eq!(code(&output), 0, "{}", err(&output));
    assert_eq!(output.stdout, expected.stdout);
    let output = piped(folder.path(), "shortlist - --format csv", "job.ron");
    assert_eq!(output.stdout, run(folder.path(), "shortlist job.ron --format csv").stdout, "{}", err(&output));
    // Both cannot be.
    let told = refused(&piped(folder.path(), "shortlist - --stock -", "job.ron"));
    assert!(told.contains("standard input"), "{told}");
    assert!(refused(&run(folder.path(), &format!("{line} --stock -"))).contains("standard input"));
}

/// Each wrong flag with what the message must name: the value, what is allowed, what to do next.
#[test]
fn wrong_flags_are_refused_with_what_is_allowed() {
    let folder = workshop();
    fs::create_dir(folder.path().join("trays")).unwrap();
    let two = "kind,value,quantity,price\nR,10k,5,EUR 0.1\nR,22k,5,USD 0.2\nC,10n,5,EUR 0.2\nC,22n,9,EUR 0.3\n";
    let free = "kind,value,quantity\nR,10k,5\nR,22k,5\nC,10n,5\nC,22n,9\n";
    let some = "kind,value,quantity,price EUR\nR,10k,5,0.1\nR,22k,5,\nC,10n,5,0.1\nC,22n,9,0.1\n";
    for (name, text) in
        [("two.csv", two), ("free.csv", free), ("some.csv", some), ("empty.csv", ""), ("bare.csv", "kind,value\n")]
    {
        fs::write(folder.path().join(name), text).unwrap();
    }
    let mut all = String::new();
    for (flags, words) in [
        ("--stock drawer.csv --buy inductors", &["--buy", "inductors", "resistors"][..]),
        ("--stock drawer.csv --buy inductors:2", &["--buy", "inductors", "resistors"]),
        ("--stock drawer.csv --buy resistors:", &["--buy", "resistors:", "1000"]),
        ("--stock drawer.csv --buy -1", &["--buy", "-1", "1000"]),
        ("--stock drawer.csv --buy 1001", &["--buy", "1001", "1000"]),
        ("--stock drawer.csv --buy 1.5", &["--buy", "1.5", "1000"]),
        ("--stock drawer.csv --boards -3", &["--boards", "-3", "1 to 1000000"]),
        ("--stock drawer.csv --boards 0", &["--boards", "found 0", "1 to 1000000"]),
        ("--stock drawer.csv --boards 1000001", &["--boards", "1000001", "1 to 1000000"]),
        (
            "--stock drawer.csv --boards 99999999999999999999999",
            &["--boards", "99999999999999999999999", "1 to 1000000"],
        ),
        ("--stock drawer.csv --boards three", &["--boards", "three", "1 to 1000000"]),
        ("--stock drawer.csv --spares -1", &["--spares", "-1", "0 to 1000000"]),
        ("--stock drawer.csv --spares 1e3", &["--spares", "1e3", "0 to 1000000"]),
        (
            "--stock drawer.csv --pairs inductors",
            &["--pairs", "inductors", "resistors, capacitors, series-capacitors"],
        ),
        ("--stock drawer.csv --pairs resistors --pairs-at-most -1", &["--pairs-at-most", "-1", "0 to 100"]),
        ("--stock drawer.csv --pairs resistors --pairs-at-most 101", &["--pairs-at-most", "101", "0 to 100"]),
        ("--pairs-at-most 1", &["--pairs"]),
        ("--stock drawer.csv --rank price", &["--rank", "price", "part-numbers, to-buy, cost"]),
        ("--stock drawer.csv --rank to-buy", &["--rank", "nothing to buy", "--buy"]),
        ("--rank to-buy", &["--rank", "nothing to buy", "stock"]),
        ("--rank cost", &["--rank", "cost is not known", "stock list"]),
        ("--stock free.csv --rank cost", &["--rank", "no prices", "give"]),
        ("--stock two.csv --rank cost", &["--rank", "EUR", "USD"]),
        ("--stock some.csv --rank cost", &["--rank", "22k", "line 3", "no price"]),
        ("--stock drawer.csv --rank cost --buy 1", &["--rank", "may be bought", "no price"]),
        ("--stock missing.csv", &["--stock", "missing.csv", "check the path"]),
        ("--stock trays", &["--stock", "trays", "is a directory", "name a file"]),
        ("--stock job.ron", &["--stock", "job.ron", "kind,value"]),
        ("--stock empty.csv", &["--stock", "empty.csv", "empty"]),
        ("--stock bare.csv", &["--stock", "list at least one part"]),
        ("--stock drawer.csv --resistors 2M..3M", &["--resistors", "in stock", "resistor", "--buy"]),
        ("--stock drawer.csv --slot R1=9k1", &["9k1", "not in stock", "--buy"]),
        ("--spares 1", &["--spares", "stock list"]),
        ("--buy 1", &["--buy", "stock list"]),
        ("--boards 2", &["--boards", "stock list"]),
        ("--bar-class-2", &["--bar-class-2", "stock list"]),
        ("--skip-bad-lines", &["--skip-bad-lines", "stock list"]),
        ("--own-set-per-board", &["--own-set-per-board", "stock list"]),
        ("--stock drawer.csv --own-set-per-board=2", &["--own-set-per-board", "true, false"]),
        ("--stock drawer.csv --stock drawer.csv", &["--stock"]),
    ] {
        let output = run(folder.path(), &format!("{SECTION} {flags}"));
        assert_eq!(code(&output), 2, "{flags}: {}", out(&output));
        let told = refused(&output);
        for word in words {
            assert!(in_one_line(&told).contains(word), "{flags}: {word:?} is missing\n{told}");
        }
        all += &format!("$ {flags}\n{told}\n");
    }
    insta::assert_snapshot!(all);
}

#[test]
fn the_faults_of_a_job_stand_at_their_places() {
    let folder = workshop();
    let job = JOB
        .replace("\"drawer.csv\"", "\"bad.csv\"")
        .replace("error_limit: 3", "boards: 0, spares: -1, buy: \"coils:2\", rank: Price");
    fs::write(folder.path().join("faulty.ron"), &job).unwrap();
    fs::write(
        folder.path().join("other.ron"),
        job.replace("rank: Price", "rank: Cost, pairs: (resistors: [Series], at_most: -1)"),
    )
    .unwrap();
    fs::write(folder.path().join("no.ron"), JOB.replace("drawer.csv", "no such.csv")).unwrap();
    let mut told = String::new();
    for name in ["faulty.ron", "other.ron", "no.ron"] {
        told += &format!(
            "$ roundwell shortlist {name}\n{}\n",
            refused(&run(folder.path(), &format!("shortlist {name}")))
        );
    }
    insta::assert_snapshot!(told);
}
