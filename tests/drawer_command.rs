//! `roundwell shortlist` with a stock list as it is run: what it takes, what it says, what it refuses.

#![allow(clippy::unwrap_used)]

mod command;

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::Path;

use command::drawer::*;
use command::*;
use serde_json::Value;

/// Everything that a row has on a board: each piece by kind, value on the label and identifier, with its number.
fn pieces(sections: &Value) -> BTreeMap<(String, String), u64> {
    let mut pieces = BTreeMap::new();
    for part in sections.as_array().unwrap().iter().flat_map(|section| section["parts"].as_array().unwrap()) {
        for piece in part["made_of"].as_array().unwrap() {
            let text = |value: &Value| value.as_str().unwrap_or_default().to_string();
            let id = (text(&part["kind"]), format!("{} {}", text(&piece["notation"]), text(&piece["id"])));
            *pieces.entry(id).or_default() += 1;
        }
    }
    pieces
}

/// No row takes more than there is. Reference: the lines of the drawer, taken apart at their commas.
fn nothing_is_overdrawn(value: &Value, drawer: &str, boards: u64, spares: u64) {
    let mut there: BTreeMap<(String, String), (u64, bool)> = BTreeMap::new();
    for line in drawer.lines().skip(1) {
        let cells: Vec<&str> = line.split(',').collect();
        there.insert(
            (cells[0].into(), format!("{} {}", cells[1], cells[6])),
            (cells[2].parse().unwrap(), !cells[7].is_empty()),
        );
    }
    for row in rows(value) {
        let differing = row["boards"].as_array().unwrap();
        let mut need: BTreeMap<(String, String), u64> = BTreeMap::new();
        if differing.is_empty() {
            pieces(&row["sections"])
                .into_iter()
                .for_each(|(part, bodies)| *need.entry(part).or_default() += bodies * boards);
        } else {
            assert_eq!(differing.len() as u64, boards);
            for board in differing {
                pieces(&board["sections"]).into_iter().for_each(|(part, n)| *need.entry(part).or_default() += n);
            }
        }
        for (part, bodies) in need {
            let (quantity, measured) = there[&part];
            let left_over = if measured { 0 } else { spares };
            assert!(bodies + left_over <= quantity, "{bodies} of {part:?} for {boards} boards: {row}");
        }
    }
}

#[test]
fn a_section_is_taken_from_the_drawer() {
    let folder = workshop();
    let output = run(folder.path(), &format!("{SECTION} --stock drawer.csv --boards 2 --spares 1"));
    assert_eq!(code(&output), 0, "{}", err(&output));
    assert!(err(&output).is_empty());
    insta::assert_snapshot!(without_time(&out(&output)));
}

#[test]
fn the_number_of_boards_changes_the_result_and_nothing_is_overdrawn() {
    let folder = workshop();
    let mut found = BTreeSet::new();
    for boards in [1, 2, 3, 4, 6, 8, 9] {
        for spares in [0, 1] {
            let flags = format!("--stock drawer.csv --boards {boards} --spares {spares} --error-limit 6");
            let value = listed(&folder, &format!("{SECTION} {flags}"));
            assert_eq!(
                (value["stock"]["boards"].as_u64(), value["stock"]["spares"].as_u64()),
                (Some(boards), Some(spares))
            );
            nothing_is_overdrawn(&value, DRAWER, boards, spares);
            found.insert(errors(&value));
        }
    }
    assert!(found.len() >= 4, "{found:?}");
}

/// What is needed holds over the whole filter, not for each section.
#[test]
fn two_sections_draw_on_one_stock() {
    let folder = workshop();
    for boards in [1, 2, 3] {
        let value = listed(&folder, &format!("shortlist job.ron --boards {boards}"));
        nothing_is_overdrawn(&value, DRAWER, boards, 0);
    }
    // 4n7 six times: for three boards it can be in one slot of each section, for four in one slot of all.
    let pinned = JOB.replace("q: 0.5412", "q: 0.5412, slots: {\"C2\": (pin: \"4n7\")}");
    let pinned = pinned.replace("q: 1.3066", "q: 1.3066, slots: {\"C2\": (pin: \"4n7\")}");
    fs::write(folder.path().join("pinned.ron"), pinned).unwrap();
    let value = listed(&folder, "shortlist pinned.ron --boards 3");
    nothing_is_overdrawn(&value, DRAWER, 3, 0);
    let output = run(folder.path(), "shortlist pinned.ron --boards 4");
    assert_eq!(code(&output), 3);
    assert!(rows(&listed(&folder, "shortlist pinned.ron --boards 4")).is_empty());
    let text = in_one_line(&out(&output));
    assert!(text.contains("C2") && text.contains("2 x 4 boards = 8"), "{text}");
    assert!(text.contains("6 of 4n7 in stock") && text.contains("--buy"), "{text}");
}

#[test]
fn what_may_be_bought_is_bought_and_no_more() {
    let folder = workshop();
    let line = format!("{SECTION} --stock drawer.csv --boards 3 --capacitors E6:1n..100n --resistors E24:4k7..47k");
    let mut best = Vec::new();
    for (buy, most, only) in [
        ("none", Some(0), None),
        ("0", Some(0), None),
        ("1", Some(1), None),
        ("2", Some(2), None),
        ("resistors:1", Some(1), Some("R")),
        ("resistors", None, Some("R")),
        ("capacitors:1", Some(1), Some("C")),
        ("capacitors", None, Some("C")),
        ("any", None, None),
    ] {
        let value = listed(&folder, &format!("{line} --buy {buy}"));
        let stock = &value["stock"];
        assert_eq!((stock["most_to_buy"].as_u64(), stock["buying_only"].as_str()), (most, only), "{buy}");
        for row in rows(&value) {
            let to_buy = row["to_buy"].as_u64().unwrap();
            assert!(most.is_none_or(|most| to_buy <= most), "{buy}: {row}");
            let taken = row["taken"].as_array().unwrap();
            let bought: Vec<&Value> = taken.iter().filter(|part| part["to_buy"].as_u64().unwrap() > 0).collect();
            assert_eq!(bought.len() as u64, to_buy, "{buy}: {row}");
            assert!(only.is_none_or(|only| bought.iter().all(|part| part["kind"] == only)), "{buy}: {row}");
            for part in taken {
                let number = |key: &str| part[key].as_u64().unwrap();
                assert_eq!(number("need"), 3 * number("per_board"), "{buy}: {part}");
                let there = part["available"].as_u64().unwrap_or(0);
                assert_eq!(number("to_buy"), number("need").saturating_sub(there), "{buy}: {part}");
            }
        }
        let least =
            rows(&value).iter().map(|row| row["ranking_error"].as_f64().unwrap()).fold(f64::INFINITY, f64::min);
        best.push((buy, least));
    }
    // What may be bought beside cannot make the best error worse.
    let of = |name: &str| best.iter().find(|(buy, _)| *buy == name).unwrap().1;
    for (less, more) in [
        ("none", "1"),
        ("1", "2"),
        ("2", "any"),
        ("none", "resistors:1"),
        ("resistors:1", "resistors"),
        ("resistors", "any"),
        ("capacitors:1", "1"),
        ("none", "capacitors"),
        ("capacitors", "any"),
    ] {
        assert!(of(more) <= of(less) + 1e-3, "{more} {less} {best:?}");
    }
    assert!(of("any") < of("none"));
}

#[test]
fn what_is_bought_is_shown() {
    let folder = workshop();
    let line =
        format!("{SECTION} --stock drawer.csv --boards 5 --buy 1 --capacitors E6:1n..100n --resistors E12:4k7..47k");
    let output = run(folder.path(), &line);
    assert_eq!(code(&output), 0, "{}", err(&output));
    insta::assert_snapshot!(without_time(&out(&output)));
}

#[test]
fn ceramics_of_class_2_are_warned_of_and_can_be_barred() {
    let folder = workshop();
    let line = format!("{SECTION} --stock drawer.csv --slot C1=22n,47n --error-limit 6");
    let text = in_one_line(&out(&run(folder.path(), &line)));
    assert!(text.contains("class 2") && text.contains("C1") && text.contains("--bar-class-2"), "{text}");
    let with = listed(&folder, &line);
    let warned = |row: &&Value| !row["class_2"].as_array().unwrap().is_empty();
    assert!(rows(&with).iter().any(|row| warned(&row)));
    for row in rows(&with) {
        let has = pieces(&row["sections"]).keys().any(|(_, part)| part.contains("Q47"));
        assert_eq!(warned(&row), has, "{row}");
    }
    let without = listed(&folder, &format!("{line} --bar-class-2"));
    assert!(!rows(&without).is_empty());
    assert!(rows(&without).iter().all(|row| !warned(&row)));
    assert_eq!(errors(&listed(&folder, &format!("{line} --bar-class-2=false"))), errors(&with));
    let text = out(&run(folder.path(), &format!("{line} --bar-class-2")));
    assert!(!text.contains("class 2"), "{text}");
    // Only X7R is left of that value: barred, nothing is.
    let told = refused(&run(folder.path(), &format!("{SECTION} --stock drawer.csv --slot C1=47n --bar-class-2")));
    assert!(in_one_line(&told).contains("class 2") || in_one_line(&told).contains("bar"), "{told}");
}

#[test]
fn pairs_stand_where_they_are_allowed_and_count_two_parts() {
    let folder = workshop();
    let line = format!("{SECTION} --stock drawer.csv --boards 2");
    let joints = |value: &Value| {
        let mut found = BTreeSet::new();
        for part in rows(value).iter().flat_map(|row| row["sections"][0]["parts"].as_array().unwrap()) {
            let kind = part["kind"].as_str().unwrap();
            found.extend(part["joint"].as_str().map(|joint| format!("{kind} {joint}")));
        }
        found
    };
    let of = |list: &[&str]| list.iter().map(ToString::to_string).collect::<BTreeSet<String>>();
    for (flags, allowed, most) in [
        ("", of(&[]), 0),
        ("--pairs resistors", of(&["R series", "R parallel"]), 1),
        ("--pairs resistors --pairs-at-most 2", of(&["R series", "R parallel"]), 2),
        ("--pairs capacitors", of(&["C parallel"]), 1),
        ("--pairs series-capacitors", of(&["C series"]), 1),
        (
            "--pairs resistors,capacitors,series-capacitors --pairs-at-most 2",
            of(&["R series", "R parallel", "C series", "C parallel"]),
            2,
        ),
        ("--pairs resistors --pairs-at-most 0", of(&[]), 0),
    ] {
        let value = listed(&folder, &format!("{line} {flags}"));
        assert!(joints(&value).is_subset(&allowed), "{flags}: {:?}", joints(&value));
        assert_eq!(most == 0, joints(&value).is_empty(), "{flags}");
        nothing_is_overdrawn(&value, DRAWER, 2, 0);
        for row in rows(&value) {
            let parts = row["sections"][0]["parts"].as_array().unwrap();
            let pairs = parts.iter().filter(|part| part["joint"].is_string()).count();
            assert!(pairs <= most, "{flags}: {row}");
            assert_eq!(row["placed_parts"].as_u64().unwrap() as usize, 4 + pairs, "{flags}");
            for part in parts {
                // R1 + R2, R1 R2/(R1 + R2), and the other way round for capacitors: the definitions.
                let values: Vec<f64> = part["made_of"]
                    .as_array()
                    .unwrap()
                    .iter()
                    .map(|piece| piece["measured"].as_f64().unwrap_or(piece["value"].as_f64().unwrap()))
                    .collect();
                let adds = part["joint"].is_null() || (part["joint"] == "series") == (part["kind"] == "R");
                let value =
                    if adds { values.iter().sum::<f64>() } else { 1.0 / values.iter().map(|v| 1.0 / v).sum::<f64>() };
                assert!((value / part["value"].as_f64().unwrap() - 1.0).abs() < 1e-12, "{part}");
            }
        }
    }
    let output = run(folder.path(), &format!("{line} --pairs resistors,capacitors --pairs-at-most 2 --bar-class-2"));
    assert_eq!(code(&output), 0, "{}", err(&output));
    insta::assert_snapshot!(without_time(&out(&output)));
}

#[test]
fn rows_are_ranked_as_asked() {
    let folder = workshop();
    let line = format!("{SECTION} --stock drawer.csv --boards 2 --error-limit 6");
    let numbers =
        |value: &Value, key: &str| -> Vec<f64> { rows(value).iter().map(|row| row[key].as_f64().unwrap()).collect() };
    for (flags, key) in [
        ("--rank error", "ranking_error"),
        ("--rank part-numbers", "part_numbers"),
        ("--rank to-buy --buy 2 --resistors E12:4k7..47k", "to_buy"),
        ("--rank cost", "cost"),
    ] {
        let value = listed(&folder, &format!("{line} {flags}"));
        let found = numbers(&value, key);
        assert!(found.len() > 1 && found.is_sorted(), "{flags}: {found:?}");
    }
    // With cost in the front a cheaper row is listed; and each row costs what its parts on one board cost.
    let dear = listed(&folder, &format!("{line} --rank error"));
    let cheap = listed(&folder, &format!("{line} --rank cost"));
    assert!(numbers(&cheap, "cost")[0] <= numbers(&dear, "cost").into_iter().fold(f64::INFINITY, f64::min) + 1e-12);
    let price: BTreeMap<String, f64> = DRAWER
        .lines()
        .skip(1)
        .map(|line| line.split(',').collect::<Vec<_>>())
        .map(|cells| (format!("{} {}", cells[1], cells[6]), cells[5].parse().unwrap()))
        .collect();
    for row in rows(&cheap).iter().chain(rows(&dear)) {
        let sum: f64 = pieces(&row["sections"]).iter().map(|((_, part), bodies)| price[part] * *bodies as f64).sum();
        assert!((row["cost"].as_f64().unwrap() - sum).abs() < 1e-9, "{row}");
    }
    assert_eq!(cheap["stock"]["currency"], "EUR");
}

#[test]
fn measured_parts_are_named_with_the_board_they_stand_on() {
    let folder = workshop();
    let line = format!("{SECTION} --stock drawer.csv --slot C2=10n --boards 3 --error-limit 6");
    // Without the plain 10n only the measured ones are left.
    let drawer: String =
        DRAWER.lines().filter(|line| !line.contains("F10")).map(|line| format!("{line}\n")).collect();
    fs::write(folder.path().join("drawer.csv"), &drawer).unwrap();
    let same = listed(&folder, &line);
    let own = listed(&folder, &format!("{line} --own-set-per-board"));
    for value in [&same, &own] {
        nothing_is_overdrawn(value, &drawer, 3, 0);
        for row in rows(value) {
            let boards = row["boards"].as_array().unwrap();
            let names = |board: &Value| -> Vec<String> {
                pieces(&board["sections"])
                    .into_keys()
                    .map(|(_, part)| part)
                    .filter(|part| part.contains('M'))
                    .collect()
            };
            let all: Vec<String> = boards.iter().flat_map(names).collect();
            assert_eq!(
                all.iter().collect::<BTreeSet<_>>(),
                ["10n M1", "10n M2", "10n M3"].map(String::from).iter().collect()
            );
            assert_eq!(all.len(), 3, "each is there once: {row}");
            // The row is as good as its worst board.
            let worst = boards.iter().map(|board| board["error"].as_f64().unwrap()).fold(0.0, f64::max);
            assert!((worst - row["ranking_error"].as_f64().unwrap()).abs() < 1e-12, "{row}");
        }
    }
    // One set for all boards: besides the measured parts all boards are alike.
    for row in rows(&same) {
        let others = |board: &Value| -> Vec<_> {
            pieces(&board["sections"]).into_iter().filter(|((_, part), _)| !part.contains('M')).collect()
        };
        let boards = row["boards"].as_array().unwrap();
        assert!(boards.iter().all(|board| others(board) == others(&boards[0])), "{row}");
    }
    let least = |value: &Value| rows(value)[0]["ranking_error"].as_f64().unwrap();
    assert!(least(&own) <= least(&same) + 1e-9);
    let output = run(folder.path(), &line);
    insta::assert_snapshot!(without_time(&out(&output)));
    // Four boards would need four.
    let output = run(folder.path(), &line.replace("--boards 3", "--boards 4"));
    assert_eq!(code(&output), 3, "{}", out(&output));
}

#[test]
fn csv_names_part_board_and_what_is_to_buy() {
    let folder = workshop();
    let drawer: String =
        DRAWER.lines().filter(|line| !line.contains("F10")).map(|line| format!("{line}\n")).collect();
    fs::write(folder.path().join("drawer.csv"), drawer).unwrap();
    let line = format!("{SECTION} --stock drawer.csv --slot C2=10n --boards 2 --pairs resistors --rows 1");
    let output = run(folder.path(), &format!("{line} --format csv"));
    assert_eq!(code(&output), 0, "{}", err(&output));
    let text = out(&output);
    let mut lines = text.lines().map(|line| line.split(',').collect::<Vec<_>>());
    let header = lines.next().unwrap();
    let column = |name: &str| header.iter().position(|column| *column == name).unwrap();
    let mut boards = BTreeSet::new();
    for cells in lines.filter(|cells| cells[0] == "shortlist") {
        assert_eq!(cells.len(), header.len());
        boards.insert(cells[column("board")].to_string());
        assert_eq!(cells[column("to_buy")], "0");
        assert!(cells[column("cost")].parse::<f64>().unwrap() > 0.0);
        let names = cells[column("id")].split(' ').count();
        assert_eq!(names, if cells[column("joint")].is_empty() { 1 } else { 2 }, "{cells:?}");
        if cells[column("slot")] == "C2" {
            assert!(cells[column("id")].starts_with('M'), "{cells:?}");
        }
    }
    assert_eq!(boards, ["1", "2"].map(String::from).into());
}

#[test]
fn the_keys_of_the_json_are_there() {
    let folder = workshop();
    let value = listed(&folder, &format!("{SECTION} --stock drawer.csv --boards 2 --buy 1"));
    let keys = |value: &Value| -> BTreeSet<String> { value.as_object().unwrap().keys().cloned().collect() };
    let all = |list: &[&str]| -> BTreeSet<String> { list.iter().map(ToString::to_string).collect() };
    assert_eq!(value["format"], "roundwell-shortlist/1");
    assert_eq!(
        keys(&value["stock"]),
        all(&["boards", "spares", "lots", "most_to_buy", "buying_only", "currency", "lines_left_out"])
    );
    let row = &rows(&value)[0];
    assert!(all(&["to_buy", "cost", "taken", "class_2", "boards"]).is_subset(&keys(row)));
    let expected =
        ["kind", "value", "notation", "grade", "measured", "id", "lines", "per_board", "need", "available", "to_buy"];
    assert_eq!(keys(&row["taken"][0]), all(&expected));
    let piece = &row["sections"][0]["parts"][0]["made_of"][0];
    let expected =
        ["value", "notation", "measured", "tolerance", "temperature_coefficient_ppm", "ageing", "id", "lines"];
    assert_eq!(keys(piece), all(&expected));
    // Without a stock list nothing is said of one.
    assert!(listed(&folder, SECTION)["stock"].is_null());
}

#[test]
fn no_line_is_longer_than_asked() {
    let folder = workshop();
    let wide =
        DRAWER.replace("F10", "a drawer with a very long name that goes on and on, on the left").replace(',', ";");
    let wide = wide.replace("on and on; on", "on and on, on");
    fs::write(folder.path().join("wide.csv"), wide).unwrap();
    for width in [40, 80, 120] {
        for line in [
            format!(
                "{SECTION} --stock drawer.csv --boards 2 --spares 1 --pairs resistors,capacitors --pairs-at-most 2"
            ),
            format!("{SECTION} --stock drawer.csv --boards 3 --slot C2=10n --own-set-per-board --error-limit 9"),
            format!("{SECTION} --stock wide.csv --boards 3 --buy 2 --rank to-buy"),
            format!("{SECTION} --stock drawer.csv --boards 1000000"),
            "shortlist job.ron --boards 3 --rank cost".to_string(),
            "shortlist job.ron --boards 900 --spares 3".to_string(),
        ] {
            let output = run(folder.path(), &format!("{line} --width {width}"));
            assert!([0, 3].contains(&code(&output)), "{line}: {}", err(&output));
            let text = out(&output);
            let long = text.lines().find(|line| line.chars().count() > width);
            assert_eq!(long, None, "{line} --width {width}\n{text}");
            assert!(!text.contains('\u{1b}'));
        }
    }
}

#[test]
fn a_reader_that_has_gone_is_no_failure() {
    let folder = workshop();
    let output = unread(folder.path(), &format!("{SECTION} --stock drawer.csv"));
    assert_eq!((code(&output), err(&output)), (0, String::new()));
}

#[test]
fn the_threads_do_not_change_a_byte() {
    let folder = workshop();
    for flags in [
        "--stock drawer.csv --boards 2 --pairs resistors",
        "--stock drawer.csv --boards 3 --slot C2=10n --own-set-per-board",
    ] {
        let [one, two] = [1, 2].map(|n| run(folder.path(), &format!("{SECTION} {flags} --format csv --threads {n}")));
        assert_eq!(code(&one), 0, "{}", err(&one));
        assert_eq!(one.stdout, two.stdout);
    }
}

#[test]
fn the_example_job_keeps_to_its_drawer() {
    let value = json(&plain("shortlist data/examples/rain-gauge.ron --format json"));
    assert_eq!(value["search"]["within_limit"], true);
    let drawer = fs::read_to_string("data/examples/bench-drawer.csv").unwrap();
    let quantity: BTreeMap<usize, u64> = drawer
        .lines()
        .enumerate()
        .skip(1)
        .map(|(at, line)| (at + 1, line.split(',').nth(2).unwrap().parse().unwrap()))
        .collect();
    for row in rows(&value) {
        assert!(row["class_2"].as_array().unwrap().is_empty());
        let taken = row["taken"].as_array().unwrap();
        assert!(!taken.is_empty());
        for part in taken {
            let lines = part["lines"].as_array().unwrap();
            let there: u64 = lines.iter().map(|line| quantity[&(line.as_u64().unwrap() as usize)]).sum();
            let (per_board, need) = (part["per_board"].as_u64().unwrap(), part["need"].as_u64().unwrap());
            let expected = if part["measured"].is_null() { 3 * per_board + 1 } else { per_board };
            assert_eq!(need, expected, "{part}");
            assert!(need <= there, "{part}");
        }
    }
    assert_eq!(code(&run(Path::new("."), "shortlist data/examples/rain-gauge.ron")), 0);
}
