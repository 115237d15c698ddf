//! `shortlist --yield`: the yields of the rows are those of `vet` and `tighten`, the order and choice that follow from them,
//! masks in jobs and lists, and what is refused.

#![allow(missing_docs, clippy::unwrap_used)]

mod command;

use std::fs;

use serde_json::{Value as Json, json};
use tempfile::TempDir;

use command::{code, drawer, err, folder_with, json as json_of, out, refused, run, without_time};

const JOB: &str = r#"(
    title: "Vibration logger, anti-alias",
    mask: "mask.ron",
    sections: [
        (name: "A", shape: LowPass, f0: "1 kHz", q: 0.5412, gain: 1.0, circuit: "sallen-key-low-pass"),
        (name: "B", shape: LowPass, f0: "1 kHz", q: 1.3066, gain: 1.0, circuit: "sallen-key-low-pass"),
    ],
    resistors: (series: E24, from: "1k", to: "100k"),
    capacitors: (series: E6, from: "1n", to: "100n"),
)
"#;

const MASK: &str = r#"(
    reference: Dc,
    limits: [
        (from: "10 Hz", to: "600 Hz", lower: "-0.5 dB", upper: "0.5 dB"),
        (from: "4 kHz", to: "10 kHz", upper: "-46 dB"),
    ],
    delays: [(from: "10 Hz", to: "600 Hz", lower: "350 us", upper: "600 us")],
    figures: [(section: "B", f0: ("900 Hz", "1100 Hz"), q: (1.1, 1.5))],
)
"#;

/// The same job in a folder of its own, from which it names its mask.
fn prepared() -> TempDir {
    let folder = folder_with(&[("mask.ron", MASK)]);
    fs::create_dir(folder.path().join("jobs")).unwrap();
    fs::write(folder.path().join("jobs/job.ron"), JOB).unwrap();
    fs::write(folder.path().join("jobs/mask.ron"), MASK).unwrap();
    folder
}

/// Runs and gives the list, whatever its exit code says of the mask.
fn listed(folder: &TempDir, line: &str) -> Json {
    let output = run(folder.path(), &format!("shortlist {line} --format json"));
    assert!([0, 3].contains(&code(&output)), "{line}: {}", err(&output));
    fs::write(folder.path().join("list.json"), &output.stdout).unwrap();
    json_of(&output)
}

fn rows(list: &Json) -> &Vec<Json> {
    list["shortlist"].as_array().unwrap()
}

fn number(value: &Json) -> f64 {
    value.as_f64().unwrap_or_else(|| panic!("{value}"))
}

/// Each row of the list just written as `vet` sees it with the mask of the list.
fn vetted(folder: &TempDir, row: usize, flags: &str) -> Json {
    let output = run(folder.path(), &format!("vet list.json --row {row} --format json {flags}"));
    assert!([0, 3].contains(&code(&output)), "{}", err(&output));
    json_of(&output)
}

fn same_as_vet(folder: &TempDir, list: &Json, flags: &str) {
    for (k, row) in rows(list).iter().enumerate() {
        let page = vetted(folder, k + 1, flags);
        assert_eq!(row["built"]["yield"], page["mask"]["yield"], "row {}", k + 1);
        for key in ["response_deviation", "response_deviation_at_hz"] {
            let (found, expected) = (number(&row["built"][key]), number(&page["spread"][key]));
            assert!((found / expected - 1.0).abs() < 1e-9, "row {}: {key} {found} {expected}", k + 1);
        }
        assert_eq!(row["built"]["nominal_error_is_lost"], page["spread"]["nominal_error_is_lost"]);
        let limits = page["mask"]["limits"].as_array().unwrap();
        let kept = limits.iter().all(|limit| number(&limit["nominal_margin"]) >= 0.0);
        assert_eq!(row["built"]["nominal_keeps"], kept);
    }
}

/// The same draws: same row, seed and tolerances, same boards counted; the mask is that of the list.
#[test]
fn the_yields_are_those_of_vet() {
    let folder = prepared();
    let list = listed(&folder, "jobs/job.ron --yield --alternatives 2 --rows 20");
    assert!(rows(&list).len() >= 4, "{}", rows(&list).len());
    same_as_vet(&folder, &list, "");
    let page = out(&run(folder.path(), "vet list.json")).split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(page.contains("delay, 10 Hz to 600 Hz 350 µs 600 µs"), "{page}");
    let flags = "--resistor-tolerance 2% --capacitor-tolerance 3% --distribution normal --reel-share 40% --seed 7 \
                 --interval 1% --draws 20000";
    let list = listed(&folder, &format!("jobs/job.ron --yield {flags}"));
    assert_eq!(list["yields"]["tolerances"], vetted(&folder, 1, flags)["tolerances"]);
    assert_eq!(rows(&list)[0]["built"]["yield"]["seed"], 7);
    same_as_vet(&folder, &list, flags);
    // A mask that a flag names is taken in place of the job's, from the working folder, and goes into the list.
    fs::write(folder.path().join("other.ron"), "(limits: [(from: 10, to: 300, lower: \"-0.1 dB\")])").unwrap();
    let list = listed(&folder, "jobs/job.ron --yield --mask other.ron");
    assert_eq!(list["mask"]["limits"], json!([{"from_hz": 10.0, "to_hz": 300.0, "lower": -0.1, "upper": null}]));
    same_as_vet(&folder, &list, "");
    same_as_vet(&folder, &list, "--mask other.ron");
}

/// Pairs, what is bought, and the tolerances of a stock list.
#[test]
fn rows_of_a_drawer_have_the_yields_of_vet() {
    let folder = drawer::workshop();
    fs::write(folder.path().join("mask.ron"), MASK).unwrap();
    for flags in ["--pairs resistors", "--boards 2", "--buy 1 --rank to-buy"] {
        let line = format!("job.ron --yield --mask mask.ron --bar-class-2 {flags}");
        let list = listed(&folder, &line);
        assert!(!rows(&list).is_empty(), "{flags}");
        same_as_vet(&folder, &list, "");
    }
}

/// Two boards whose only capacitors are measured ones: what is looked at is the worse of them, which has them without a
/// tolerance; the resistor is a pair with lopsided tolerances.
#[test]
fn where_boards_differ_the_worst_counts() {
    let drawer = "kind,value,quantity,tolerance,measured,id\nR,10k,9,1%,,\nR,20k,9,-2/+8 %,,\nC,10n,1,5%,9.87n,C7\n\
                  C,10n,1,5%,10.2n,C8\n";
    let job = "(circuit: \"rc-low-pass\", stock: \"drawer.csv\", boards: 2, pairs: (resistors: [Series, Parallel]),\n\
               mask: \"mask.ron\", sections: [(name: \"A\", shape: FirstOrderLowPass, f0: \"537.5 Hz\")])";
    let mask = "(figures: [(section: \"A\", f0: (\"500 Hz\", \"525 Hz\"))])";
    let folder = folder_with(&[("drawer.csv", drawer), ("job.ron", job), ("mask.ron", mask)]);
    let list = listed(&folder, "job.ron --yield");
    assert_eq!(rows(&list)[0]["boards"].as_array().unwrap().len(), 2);
    let share = number(&rows(&list)[0]["built"]["yield"]["share"]);
    assert!(share > 0.2 && share < 0.9, "{share}");
    same_as_vet(&folder, &list, "");
    let table = out(&run(folder.path(), "shortlist job.ron --yield"));
    assert!(
        table.contains("of the worst where boards") && table.lines().all(|line| line.chars().count() <= 80),
        "{table}"
    );
    let alike = out(&run(folder.path(), "shortlist job.ron --yield --boards 1"));
    assert!(!alike.contains("of the worst where boards"), "{alike}");
}

/// `tighten` draws the same boards at the same tolerances, with an error in place of a mask, and with the mask of the list.
#[test]
fn the_yields_are_those_of_tighten() {
    let folder = prepared();
    for wanted in ["", "--within 0.7dB"] {
        let list = listed(&folder, &format!("jobs/job.ron --yield {wanted} --draws 1024 --interval 0"));
        for (k, row) in rows(&list).iter().enumerate() {
            let line =
                format!("tighten list.json {wanted} --rows {} --boards 1024 --interval 0 --format json", k + 1);
            let output = run(folder.path(), &line);
            let table = json_of(&output);
            let steps = table["steps"].as_array().unwrap();
            let step = steps.iter().find(|s| s["resistors"] == 0.01 && s["capacitors"] == 0.05).unwrap();
            assert_eq!(row["built"]["yield"]["passed"], step["passed"], "{wanted} row {}", k + 1);
            assert_eq!(row["built"]["yield"]["interval"], step["interval"]);
        }
        let within = if wanted.is_empty() { Json::Null } else { json!(0.7) };
        assert_eq!(list["yields"]["within"], within);
        // Both take the mask that the list carries.
        assert_eq!(list["mask"]["delays"][0]["upper"], 600e-6);
    }
}

/// What a row takes, and its error in the steps by which errors are compared.
fn rest(row: &Json) -> (u64, u64, u64) {
    let error = (number(&row["ranking_error"]) * 1e7).round() as u64;
    (row["part_numbers"].as_u64().unwrap(), row["placed_parts"].as_u64().unwrap(), error)
}

fn interval(row: &Json) -> (f64, f64) {
    let interval = &row["built"]["yield"]["interval"];
    (number(&interval[0]), number(&interval[1]))
}

fn ranks(list: &Json) -> Vec<u64> {
    rows(list).iter().map(|row| row["rank"].as_u64().unwrap()).collect()
}

/// Written anew from what the output says of the order: groups that begin with the highest share that is left.
#[test]
fn rows_are_ranked_by_yield_and_by_spread() {
    let folder = prepared();
    let bare = "jobs/job.ron --yield --alternatives 6 --error-limit 3";
    let line = &format!("{bare} --rows 40");
    let found = listed(&folder, line);
    let share = |row: &Json| number(&row["built"]["yield"]["share"]);
    let mut left: Vec<Json> = rows(&found).clone();
    left.sort_by(|a, b| share(b).total_cmp(&share(a)).then(rest(a).cmp(&rest(b))));
    let (mut expected, mut groups) = (Vec::new(), 0);
    while !left.is_empty() {
        let low = interval(&left[0]).0;
        let count = left.iter().take_while(|row| interval(row).1 >= low).count();
        let mut group: Vec<Json> = left.drain(..count).collect();
        group.sort_by_key(rest);
        expected.extend(group.iter().map(rest));
        groups += 1;
    }
    assert!(groups > 1 && groups < expected.len(), "{groups} of {}", expected.len());
    let by_yield = listed(&folder, &format!("{line} --rank yield"));
    assert_eq!(rows(&by_yield).iter().map(rest).collect::<Vec<_>>(), expected);
    assert_eq!(ranks(&by_yield), (1..=expected.len() as u64).collect::<Vec<_>>());
    assert_eq!(by_yield["yields"]["order"], "yield");

    let by_spread = listed(&folder, &format!("{line} --rank spread"));
    let spreads: Vec<u64> = rows(&by_spread)
        .iter()
        .map(|row| (number(&row["built"]["response_deviation"]) * 1e7).round() as u64)
        .collect();
    assert!(spreads.is_sorted() && spreads[0] < spreads[spreads.len() - 1], "{spreads:?}");
    assert_eq!(rows(&by_spread).len(), expected.len());

    let by_placed = listed(&folder, &format!("{line} --rank placed-parts"));
    assert!(rows(&by_placed).iter().map(|row| row["placed_parts"].as_u64()).is_sorted());
    // The mark follows its row.
    let marked = |list: &Json| rest(&rows(list)[list["marked"].as_u64().unwrap() as usize - 1]);
    assert_eq!(
        (marked(&by_yield), marked(&by_spread), marked(&by_placed)),
        (marked(&found), marked(&found), marked(&found))
    );
    // Fewer rows: the first ones of that order, and the marked one.
    let few = listed(&folder, &format!("{bare} --rank yield --rows 3"));
    let mut first = expected[..3].to_vec();
    if !first.contains(&marked(&found)) {
        first[2] = marked(&found);
    }
    assert_eq!(rows(&few).iter().map(rest).collect::<Vec<_>>(), first);
    assert_eq!(few["search"]["more_rows"], expected.len() as u64 - 3);
}

/// All rows of the front stay; an alternative stays only where it is told to yield more than all that are as good in the rest.
#[test]
fn alternatives_take_part_by_their_yield() {
    let folder = prepared();
    let line = "jobs/job.ron --alternatives 4 --rows 100 --error-limit 3";
    let all = listed(&folder, line);
    let every: Vec<(Json, (f64, f64))> = (rows(&all).iter().enumerate())
        .map(|(k, row)| {
            let found = &vetted(&folder, k + 1, "")["mask"]["yield"]["interval"];
            (row.clone(), (number(&found[0]), number(&found[1])))
        })
        .collect();
    let list = listed(&folder, &format!("{line} --yield"));
    let no_worse =
        |one: (u64, u64, u64), other: (u64, u64, u64)| one.0 <= other.0 && one.1 <= other.1 && one.2 <= other.2;
    let parts = |row: &Json| row["sections"].clone();
    let is_listed = |row: &Json| rows(&list).iter().any(|kept| parts(kept) == parts(row));
    let (mut kept, mut dropped) = (0, 0);
    for (row, (low, _)) in &every {
        let mut as_good =
            rows(&list).iter().filter(|other| no_worse(rest(other), rest(row)) && parts(other) != parts(row));
        let beaten = as_good.any(|other| *low <= interval(other).1);
        if row["alternative"] == false {
            assert!(is_listed(row));
        } else if is_listed(row) {
            assert!(!beaten, "{row}");
            kept += 1;
        } else {
            assert!(beaten, "{row}");
            dropped += 1;
        }
    }
    assert!(kept > 0 && dropped > 0, "{kept} {dropped}");
    assert_eq!(list["yields"]["dropped"], dropped);
    assert_eq!(rows(&list).len(), every.len() - dropped);
}

fn without_seconds(bytes: &[u8]) -> String {
    let text = String::from_utf8(bytes.to_vec()).unwrap();
    text.lines().filter(|line| !line.contains("\"seconds\"")).collect::<Vec<_>>().join("\n")
}

#[test]
fn the_list_is_the_same_for_any_number_of_threads() {
    let folder = prepared();
    let line = "shortlist jobs/job.ron --yield --alternatives 3 --rank yield --format";
    for format in ["json", "csv"] {
        let threads = |count: usize| run(folder.path(), &format!("{line} {format} --threads {count}"));
        let one = threads(1);
        assert_eq!(code(&one), 0, "{}", err(&one));
        assert_eq!(without_seconds(&one.stdout), without_seconds(&threads(3).stdout));
    }
    let other = run(folder.path(), &format!("{line} json --seed 2"));
    assert_ne!(without_seconds(&other.stdout), without_seconds(&run(folder.path(), &format!("{line} json")).stdout));
}

#[test]
fn the_table_says_how_the_rows_were_judged() {
    let folder = prepared();
    let page = |flags: &str| {
        let output = run(folder.path(), &format!("shortlist jobs/job.ron --yield {flags}"));
        assert_eq!(code(&output), 0, "{}", err(&output));
        let text = without_time(&out(&output));
        text[text.find("Error:").unwrap()..text.find("Values of").unwrap()].to_string()
    };
    let shown =
        [page(""), page("--alternatives 6 --error-limit 3 --rank yield"), page("--within 0.5dB --reel-share 50%")];
    insta::assert_snapshot!(shown.join("\n--------\n"));
    for width in [40, 60, 100] {
        let text = page(&format!("--alternatives 6 --error-limit 3 --rank spread --width {width}"));
        assert!(text.lines().all(|line| line.chars().count() <= width), "{text}");
    }
    // Under the vector measure errors and spread are ratios, shown in percent.
    let text = page("--measure vector --within 5%");
    assert!(text.contains("share of boards within 5 % of the target"), "{text}");
    // Without yields nothing of them is shown, but the mask is in the list all the same.
    let plain = out(&run(folder.path(), "shortlist jobs/job.ron"));
    assert!(!plain.contains("yield") && !plain.contains("Mask"), "{plain}");
    let list = listed(&folder, "jobs/job.ron");
    assert_eq!((&list["yields"], &rows(&list)[0]["built"]), (&Json::Null, &Json::Null));
    assert_eq!((&list["mask"]["reference"], &list["mask"]["figures"][0]["q"]), (&json!("dc"), &json!([1.1, 1.5])));
}

#[test]
fn csv_has_the_yields_too() {
    let folder = prepared();
    let list = listed(&folder, "jobs/job.ron --yield");
    let output = run(folder.path(), "shortlist jobs/job.ron --yield --format csv");
    let mut reader = csv::Reader::from_reader(output.stdout.as_slice());
    let header: Vec<String> = reader.headers().unwrap().iter().map(str::to_string).collect();
    let column = |name: &str| header.iter().position(|known| known == name).unwrap();
    for line in reader.records().map(Result::unwrap) {
        let built = match &line[0] {
            "shortlist" => rows(&list)[line[1].parse::<usize>().unwrap() - 1]["built"].clone(),
            name => {
                let references = list["references"].as_array().unwrap();
                references.iter().find(|row| row["name"] == name).unwrap()["built"].clone()
            }
        };
        let expected = [
            ("yield", &built["yield"]["share"]),
            ("yield_low", &built["yield"]["interval"][0]),
            ("yield_high", &built["yield"]["interval"][1]),
            ("response_deviation", &built["response_deviation"]),
        ];
        for (name, value) in expected {
            // The reader of JSON is not exact to the last bit.
            let (found, expected) = (line[column(name)].parse::<f64>().ok(), value.as_f64());
            let same = found.zip(expected).is_some_and(|(found, expected)| (found - expected).abs() < 1e-12);
            assert!(same || (found.is_none() && expected.is_none()), "{name} {found:?} {expected:?}");
        }
        let flag = |value: &Json| value.as_bool().map_or(String::new(), |flag| flag.to_string());
        assert_eq!(line[column("nominal_keeps")], flag(&built["nominal_keeps"]));
        assert_eq!(line[column("nominal_error_is_lost")], flag(&built["nominal_error_is_lost"]));
    }
    let references = list["references"].as_array().unwrap();
    assert!(references[0]["built"].is_null() && references[1]["built"]["yield"]["share"].is_number());
}

/// Which of target and nominal parts misses what is wanted is said, and in the exit code.
#[test]
fn a_target_that_fails_is_told_first() {
    let folder = prepared();
    let shown = |mask: &str, flags: &str| {
        fs::write(folder.path().join("m.ron"), mask).unwrap();
        let output = run(folder.path(), &format!("shortlist jobs/job.ron --yield --mask m.ron {flags}"));
        let text = out(&output).replace('\u{a0}', " ");
        (code(&output), text.split_whitespace().collect::<Vec<_>>().join(" "))
    };
    // Fourth-order Butterworth, closed form: -10 log10(1 + 4^8) = -48.16 dB at 4 kHz.
    let (exit, text) = shown("(limits: [(from: \"4 kHz\", to: \"10 kHz\", upper: \"-60 dB\")])", "");
    assert_eq!(exit, 3);
    let words =
        "Mask: absolute; the target itself misses it: 4 kHz to 10 kHz by 11.8 dB at 4 kHz. No parts mend that";
    assert!(text.contains(words), "{text}");
    assert!(text.contains("The nominal parts of every row miss the mask."), "{text}");
    // Its group delay at DC is 1/w0 (1/Q1 + 1/Q2) = 415.9 us, closed form.
    let (exit, text) = shown("(delays: [(from: 1, to: 1, upper: \"400 us\")])", "");
    assert_eq!(exit, 3);
    assert!(text.contains("misses it: delay, 1 Hz by 15.9 µs at 1 Hz"), "{text}");
    let exact = "(figures: [(section: \"A\", f0: (\"999.9999 Hz\", \"1000.0001 Hz\"))])";
    let (exit, text) = shown(exact, "");
    assert_eq!(exit, 3);
    assert!(text.contains("the ideal response keeps it") && text.contains("parts of every row miss"), "{text}");
    let (exit, text) = shown("(limits: [(from: 10, to: 20, upper: 20)])", "--rows 1");
    assert!(exit == 0 && text.contains("100.0") && !text.contains("miss the mask"), "{text}");
}

#[test]
fn wrong_input_is_refused_with_what_is_allowed() {
    let folder = prepared();
    let with = |name: &str, text: &str| fs::write(folder.path().join(name), text).unwrap();
    with("plain.ron", &JOB.replace("    mask: \"mask.ron\",\n", ""));
    with("ranked.ron", &JOB.replace("mask: \"mask.ron\"", "rank: Spread"));
    with("lost.ron", &JOB.replace("mask.ron", "nowhere.ron"));
    with("bad.ron", &JOB.replace("mask.ron", "bad-mask.ron"));
    with("q.ron", &JOB.replace("q: 0.5412", "q: -1").replace("mask.ron", "bad-mask.ron"));
    with(
        "bad-mask.ron",
        "(\n    reference: Dc,\n    limits: [\n        (from: \"2 kHz\", to: \"1 kHz\", upper: 0),\n    ],\n    delays: [\n        \
         (from: 10, to: 20, lower: \"2 ms\", upper: \"1 ms\"),\n        (from: 1, to: 2),\n        (from: 30, to: 40, lower: \"1 dB\"),\n    ],\n    \
         figures: [(section: \"Z\", q: (1, 2))],\n)\n",
    );
    let lines = [
        "shortlist plain.ron --yield",
        "shortlist plain.ron --rank yield",
        "shortlist ranked.ron",
        "shortlist lost.ron",
        "shortlist lost.ron --mask missing.ron",
        "shortlist bad.ron",
        "shortlist bad.ron --yield --rank yield",
        "shortlist q.ron",
        "shortlist plain.ron --yield --within 1kHz",
        "shortlist plain.ron --yield --within 0dB",
        "shortlist plain.ron --within 1dB --seed 2 --draws 5 --reel-share 10% --interval 1%",
        "shortlist plain.ron --resistor-tolerance 1% --capacitor-tolerance 1% --distribution normal",
        "shortlist plain.ron --yield --mask mask.ron --resistor-tolerance 120% --capacitor-tolerance 5 --reel-share -1% \
         --draws 0 --interval 60% --seed x",
        "shortlist - --mask -",
    ];
    let mut shown = Vec::new();
    for line in lines {
        let output = if line.contains(" - ") {
            command::piped(folder.path(), line, "plain.ron")
        } else {
            run(folder.path(), line)
        };
        shown.push(format!("$ {line}\n{}", refused(&output)));
    }
    insta::assert_snapshot!(shown.join("\n"));
    let told = refused(&run(folder.path(), "shortlist plain.ron --yield --within 1dB --mask mask.ron"));
    assert!(told.contains("cannot be used with"), "{told}");
}

/// The mask in a list is checked like one in a file.
#[test]
fn a_mask_in_a_list_is_checked() {
    let folder = prepared();
    let list = listed(&folder, "jobs/job.ron");
    let told = |change: &dyn Fn(&mut Json)| {
        let mut changed = list.clone();
        change(&mut changed);
        fs::write(folder.path().join("changed.json"), serde_json::to_string_pretty(&changed).unwrap()).unwrap();
        let told = refused(&run(folder.path(), "vet changed.json"));
        assert!(told.contains(" --> changed.json:"), "{told}");
        command::in_one_line(&told)
    };
    assert!(told(&|list| list["mask"]["reference"] = json!("pole")).contains("`pole` cannot be used as a reference"));
    assert!(told(&|list| list["mask"]["reference"] = json!("frequency")).contains("frequency needs reference_hz"));
    assert!(told(&|list| list["mask"]["limits"][0]["to_hz"] = json!(1.0)).contains("holds nothing"));
    assert!(told(&|list| list["mask"]["limits"][1]["upper"] = Json::Null).contains("limits nothing"));
    assert!(told(&|list| list["mask"]["figures"][0]["section"] = json!("C")).contains("there is no section `C`"));
    assert!(told(&|list| list["mask"]["limits"] = json!(3)).contains("mask.limits"));
    let mut empty = list.clone();
    for key in ["limits", "delays", "figures"] {
        empty["mask"][key] = json!([]);
    }
    fs::write(folder.path().join("changed.json"), empty.to_string()).unwrap();
    assert!(refused(&run(folder.path(), "vet changed.json")).contains("the mask has no limits"));
    // What a list says of the frequency of its reference comes back.
    fs::write(
        folder.path().join("at.ron"),
        "(reference: At(\"123.4 Hz\"), limits: [(from: 20, to: 90, lower: \"-0.05 dB\")])",
    )
    .unwrap();
    let list = listed(&folder, "jobs/job.ron --yield --mask at.ron");
    assert_eq!(list["mask"]["reference_hz"], 123.4);
    same_as_vet(&folder, &list, "");
}

/// Commands that need no mask do not ask for the one that the job names.
#[test]
fn other_commands_pass_over_the_mask_of_a_job() {
    let pinned = r#"(
        circuit: "sallen-key-low-pass", mask: "nowhere.ron", rank: Yield,
        sections: [(name: "LP", shape: LowPass, f0: "1.578 kHz", q: 0.7416, slots: {
            "R1": (pin: "6k8"), "R2": (pin: "6k8"), "C1": (pin: "22n"), "C2": (pin: "10n")})],
    )"#;
    let folder = folder_with(&[("built.ron", pinned)]);
    let output = run(folder.path(), "swap built.ron --gone C1 --others 3");
    assert_eq!(code(&output), 0, "{}", err(&output));
}
