//! Jobs that draw on a stock list: what comes of them, and what is said about those that cannot be.

use super::*;
use crate::parts::{Buying, Choice, Shelf, Stock};
use crate::search::{Joint, Rank};

const LIST: &str = "\
kind,value,quantity,tolerance,dielectric,price EUR,id,measured
R,4k7,10,1 %,,0.02,,
R,10k,20,1 %,,0.02,,
R,10k,5,0.1 %,,0.30,,
R,2M2,5,1 %,,0.02,,
C,10n,8,5 %,PP,0.20,,
C,10n,1,5 %,PP,0.20,M1,9.9n
C,47n,9,10 %,X7R,0.04,,
";

fn stock(text: &str) -> Stock {
    Stock::read(text.as_bytes()).unwrap()
}

fn read_with(text: &str, stock: &Stock) -> Result<Job, Vec<Fault>> {
    let resolved = JobFile::parse(text).and_then(|job| resolve(&job, &mut circuits, Some(stock)));
    resolved.map_err(|faults| located(text, faults))
}

fn sound_with(inner: &str, list: &str) -> Job {
    let text = in_job(&format!("stock: \"list.csv\", {inner}"));
    read_with(&text, &stock(list)).unwrap_or_else(|faults| panic!("{}", render(&faults, "job.ron", &text, false)))
}

/// The choices of the first shelf of a kind: the value that counts, and the lines that it is taken from.
fn choices(job: &Job, kind: Kind) -> String {
    let section = &job.problem.sections[0];
    let shelf = section.shelves.iter().find(|shelf| shelf.kind() == kind).unwrap();
    let one = |&choice: &Choice| {
        let lines =
            job.problem.supply.lot_of(choice).map(|lot| lot.lines.iter().map(|line| line.line).collect::<Vec<_>>());
        format!(
            "{} {}",
            format_part(choice.value, kind),
            lines.map_or("new".to_string(), |lines| format!("{lines:?}"))
        )
    };
    shelf.choices().iter().map(one).collect::<Vec<_>>().join(", ")
}

#[test]
fn without_a_stock_list_everything_can_be_had() {
    let supply = sound(&in_job("")).problem.supply;
    assert_eq!(supply, crate::parts::Supply::default());
    assert!(!supply.has_stock());
}

#[test]
fn a_list_alone_is_for_one_board_and_nothing_is_bought() {
    let job = sound_with("", LIST);
    let supply = &job.problem.supply;
    assert_eq!((supply.boards, supply.spares, supply.buying, supply.buying_only), (1, 0, Buying::Forbidden, None));
    assert!(supply.has_stock());
    // The usual range, 1k to 1M, holds for what is in stock too; a measured part counts by its label.
    assert_eq!(choices(&job, Kind::Resistor), "4k7 [2], 10k [3], 10k [4]");
    assert_eq!(choices(&job, Kind::Capacitor), "9n9 [7], 10n [6], 47n [8]");
    assert!(job.problem.sections[0].pairs.joints.concat().is_empty());
    assert_eq!((job.problem.goals.rank, job.problem.goals.each_board_its_own), (Rank::Error, false));
}

#[test]
fn boards_spares_and_what_may_be_bought() {
    for (inner, boards, spares) in
        [("boards: 3, spares: \"2\"", 3, 2), ("boards: 1000000, spares: 1000000", 1_000_000, 1_000_000)]
    {
        let supply = sound_with(inner, LIST).problem.supply;
        assert_eq!((supply.boards, supply.spares), (boards, spares), "{inner}");
    }
    for (buy, buying, only) in [
        ("\"none\"", Buying::Forbidden, None),
        ("0", Buying::Forbidden, None),
        ("2", Buying::AtMost(2), None),
        ("\"1000\"", Buying::AtMost(1000), None),
        ("\"any\"", Buying::Allowed, None),
        ("\"resistors\"", Buying::Allowed, Some(Kind::Resistor)),
        ("\"capacitors\"", Buying::Allowed, Some(Kind::Capacitor)),
        ("\"resistors:3\"", Buying::AtMost(3), Some(Kind::Resistor)),
        ("\"capacitors:any\"", Buying::Allowed, Some(Kind::Capacitor)),
        ("\"capacitors:none\"", Buying::Forbidden, Some(Kind::Capacitor)),
    ] {
        let supply = sound_with(&format!("buy: {buy}"), LIST).problem.supply;
        assert_eq!((supply.buying, supply.buying_only), (buying, only), "{buy}");
    }
}

#[test]
fn what_may_be_bought_is_what_the_shelves_name_beside_the_list() {
    let shelves = "resistors: (values: [\"4k7\", \"6k8\", \"10k\"]), capacitors: (values: [\"10n\", \"22n\"])";
    for (buy, resistors, capacitors) in [
        ("none", "4k7 [2], 10k [3], 10k [4]", "9n9 [7], 10n [6]"),
        ("any", "4k7 [2], 6k8 new, 10k [3], 10k [4]", "9n9 [7], 10n [6], 22n new"),
        ("resistors", "4k7 [2], 6k8 new, 10k [3], 10k [4]", "9n9 [7], 10n [6]"),
        ("capacitors:1", "4k7 [2], 10k [3], 10k [4]", "9n9 [7], 10n [6], 22n new"),
    ] {
        let job = sound_with(&format!("{shelves}, buy: \"{buy}\""), LIST);
        assert_eq!(choices(&job, Kind::Resistor), resistors, "{buy}");
        assert_eq!(choices(&job, Kind::Capacitor), capacitors, "{buy}");
    }
    // A value of which there are measured parts only can be bought as a plain one.
    let job = sound_with(
        "buy: \"any\", capacitors: (values: [\"10n\"])",
        "kind,value,quantity,measured\nR,10k,9,\nC,10n,1,9.9n\n",
    );
    assert_eq!(choices(&job, Kind::Capacitor), "9n9 [3], 10n new");
}

#[test]
fn shelves_give_range_and_exclusions_of_what_is_in_stock() {
    for (inner, expected) in [
        ("resistors: (from: \"5k\")", "10k [3], 10k [4]"),
        ("resistors: (from: \"1k\", to: \"5M\")", "4k7 [2], 10k [3], 10k [4], 2M2 [5]"),
        ("resistors: (exclude: [\"10k\"])", "4k7 [2]"),
        ("resistors: (values: [\"10k\", \"22k\"])", "10k [3], 10k [4]"),
        // What is in stock need not be of the series.
        ("resistors: (series: E3, from: \"1k\", to: \"1M\")", "4k7 [2], 10k [3], 10k [4]"),
    ] {
        assert_eq!(choices(&sound_with(inner, LIST), Kind::Resistor), expected, "{inner}");
    }
}

#[test]
fn ceramics_of_class_2_stay_in_the_drawer_where_they_are_barred() {
    assert_eq!(choices(&sound_with("bar_class_2: true", LIST), Kind::Capacitor), "9n9 [7], 10n [6]");
    assert_eq!(choices(&sound_with("bar_class_2: false", LIST), Kind::Capacitor), "9n9 [7], 10n [6], 47n [8]");
    // A value that the drawer has as class 2 only can be bought in another dielectric.
    let job = sound_with("bar_class_2: true, buy: \"any\", capacitors: (values: [\"47n\"])", LIST);
    assert_eq!(choices(&job, Kind::Capacitor), "47n new");
}

#[test]
fn pins_take_every_part_of_that_label() {
    let text = in_low_pass("slots: {\"C1\": (pin: \"10n\"), \"RG\": (pin: \"10k\")}");
    let job = read_with(&text, &stock(LIST)).unwrap();
    let section = &job.problem.sections[0];
    let of = |slot: &str| -> &Shelf { &section.shelves[section.circuit.slot(slot).unwrap()] };
    assert_eq!((of("C1").len(), listed(of("C1"))), (2, "9n9 10n".to_string()));
    assert_eq!((of("RG").len(), listed(of("RG"))), (2, "10k".to_string()));
}

#[test]
fn pairs_stand_where_section_or_job_allow_them() {
    use Joint::{Parallel, Series};
    let joints = |job: &str, section: &str| {
        let text = format!(
            "(sections: [(shape: LowPass, f0: \"1k\", q: 1, circuit: \"sallen-key-low-pass\", {section})], {job})"
        );
        let problem = sound(&text).problem;
        let pairs = problem.sections[0].pairs.clone();
        let slot = |name: &str| problem.sections[0].circuit.slot(name).unwrap();
        // Slots beyond the list allow none.
        let of = |name: &str| pairs.joints.get(slot(name)).cloned().unwrap_or_default();
        (of("R1"), of("R2"), of("C1"), pairs.most)
    };
    let none = Vec::new;
    let (r1, r2, c1, _) = joints("", "");
    assert!(r1.is_empty() && r2.is_empty() && c1.is_empty());
    let job = "pairs: (resistors: [Parallel, Series, Series], capacitors: [Parallel], at_most: 2)";
    assert_eq!(joints(job, ""), (vec![Series, Parallel], vec![Series, Parallel], vec![Parallel], 2));
    // A slot by its name wins over its kind.
    let slot = "pairs: (resistors: [Series], slots: {\"R2\": [], \"C1\": [Series]})";
    assert_eq!(joints(slot, ""), (vec![Series], none(), vec![Series], 1));
    // A section wins as a whole.
    assert_eq!(joints(job, "pairs: (resistors: [Series])"), (vec![Series], vec![Series], none(), 1));
    assert_eq!(joints(job, "pairs: (at_most: 0)").3, 0);
}

#[test]
fn ranks_and_sets_of_single_boards() {
    for (inner, rank) in [
        ("rank: Error", Rank::Error),
        ("rank: PartNumbers", Rank::PartNumbers),
        ("rank: PlacedParts", Rank::PlacedParts),
        ("rank: Yield", Rank::Error),
        ("rank: ToBuy, buy: 1", Rank::ToBuy),
        ("rank: Cost", Rank::Cost),
        // A bought part of a value that the list names has the price of its line.
        ("rank: Cost, buy: 1, resistors: (values: \"10k\"), capacitors: (values: \"10n\")", Rank::Cost),
    ] {
        assert_eq!(sound_with(inner, LIST).problem.goals.rank, rank, "{inner}");
    }
    assert!(sound_with("own_set_per_board: true", LIST).problem.goals.each_board_its_own);
    assert!(!sound_with("own_set_per_board: false", LIST).problem.goals.each_board_its_own);
}

const BAD: &str = "kind,value,quantity\nR,10k,5\nR,4q7,3\nC,10n,lots\nC,10n,4\n";

#[test]
fn lines_that_cannot_be_used_are_left_out_where_the_job_says_so() {
    let job = sound_with("skip_bad_lines: true", BAD);
    assert_eq!(choices(&job, Kind::Resistor), "10k [2]");
    assert_eq!(choices(&job, Kind::Capacitor), "10n [5]");
}

/// Each text with the faults of the job that holds it, as [`told`](super::faults) does, with a stock list.
fn told(texts: &[&str], list: &str) -> String {
    let list = stock(list);
    let mut all = String::new();
    for inner in texts {
        let text = in_job(inner);
        all += &format!("{inner}\n");
        for fault in read_with(&text, &list).expect_err(inner) {
            let marked = fault.span.map_or("", |span| text[span].lines().next().unwrap_or(""));
            all += &format!("    {marked} -> {}\n", fault.message);
            all += &fault.help.map_or(String::new(), |help| format!("        {help}\n"));
        }
    }
    all
}

#[test]
fn faults_of_what_is_wanted_of_the_stock() {
    let texts = [
        "stock: \"list.csv\", boards: 0, spares: -1",
        "stock: \"list.csv\", boards: 1000001, spares: 1.5",
        "stock: \"list.csv\", boards: \"three\"",
        "stock: \"list.csv\", buy: \"coils\"",
        "stock: \"list.csv\", buy: \"coils:2\"",
        "stock: \"list.csv\", buy: \"resistors:-1\"",
        "stock: \"list.csv\", buy: 1001",
        "stock: \"list.csv\", rank: ToBuy",
        "stock: \"list.csv\", rank: Cost, buy: \"any\"",
        "stock: \"list.csv\", resistors: (from: \"3M\", to: \"4M\")",
        "stock: \"list.csv\", resistors: (values: [\"1k\"]), capacitors: (values: [\"1n\"])",
        "stock: \"list.csv\", bar_class_2: true, capacitors: (values: [\"47n\"])",
    ];
    insta::assert_snapshot!(told(&texts, LIST));
}

#[test]
fn faults_of_keys_that_need_a_stock_list() {
    let texts = [
        "boards: 2, spares: 1, buy: 2, bar_class_2: true, skip_bad_lines: true, own_set_per_board: true",
        "rank: ToBuy",
        "rank: Cost",
    ];
    let mut all = String::new();
    for inner in texts {
        let text = in_job(inner);
        all += &format!("{inner}\n{}\n", render(&read(&text).unwrap_err(), "job.ron", &text, false));
    }
    insta::assert_snapshot!(all);
}

#[test]
fn faults_of_prices() {
    let header = "kind,value,quantity,price";
    let mut all = String::new();
    for list in [
        format!("{header}\nR,10k,5,\nC,10n,5,\n"),
        format!("{header}\nR,10k,5,EUR 0.1\nC,10n,5,USD 0.1\n"),
        format!("{header}\nR,10k,5,EUR 0.1\nR,22k,5,\nC,10n,5,EUR 0.1\n"),
        // The price of the parts of one choice differs between its lines.
        format!("{header}\nR,10k,5,EUR 0.1\nR,10k,5,EUR 0.2\nC,10n,5,EUR 0.1\n"),
    ] {
        all += &told(&["stock: \"list.csv\", rank: Cost"], &list);
    }
    insta::assert_snapshot!(all);
}

#[test]
fn faults_of_pairs() {
    let texts = [
        "pairs: (resistors: [Serial])",
        "pairs: (resistors: Series, inductors: [Series])",
        "pairs: (at_most: -1)",
        "pairs: (at_most: 101)",
        "pairs: (slots: {\"R9\": [Series]})",
        "pairs: [Series]",
        "rank: Price",
        "own_set_per_board: 1",
        "bar_class_2: \"yes\"",
        "stok: \"list.csv\"",
    ];
    let mut all = String::new();
    for inner in texts {
        let text = in_job(inner);
        all += &format!("{inner}\n");
        for fault in read(&text).expect_err(inner) {
            let marked = fault.span.map_or("", |span| text[span].lines().next().unwrap_or(""));
            all += &format!("    {marked} -> {}\n", fault.message);
            all += &fault.help.map_or(String::new(), |help| format!("        {help}\n"));
        }
    }
    insta::assert_snapshot!(all);
}

#[test]
fn faults_of_the_list_stand_where_the_job_names_it() {
    let text = in_job("\n    stock: \"list.csv\",\n    boards: 2,\n    rows: 0,\n");
    let mut all = render(&read_with(&text, &stock(BAD)).unwrap_err(), "job.ron", &text, false);
    // All else is checked as if there were no list; nothing is said of what needs one.
    let text = in_job("stock: \"list.csv\", spares: 1, buy: 1");
    all += &render(&read_with(&text, &stock(BAD)).unwrap_err(), "job.ron", &text, false);
    let text = in_job("stock: \"list.csv\", skip_bad_lines: true");
    all += &render(&read_with(&text, &stock("kind,value\nR,4q7\n")).unwrap_err(), "job.ron", &text, false);
    insta::assert_snapshot!(all);
}

#[test]
fn faults_of_pins_that_are_not_in_stock() {
    let list = stock(LIST);
    let mut all = String::new();
    for inner in [
        "slots: {\"RG\": (pin: \"9k1\"), \"C1\": (pin: \"47n\")}",
        "slots: {\"RG\": (pin: \"10 nF\")}",
        "slots: {\"RG\": (shelf: (values: [\"9k1\", \"12k\"]))}",
        "slots: {\"RG\": (exclude: [\"4k7\", \"10k\"])}",
    ] {
        let text = format!(
            "(stock: \"list.csv\", bar_class_2: true, sections: [(shape: LowPass, f0: 1000, q: 1,\n    {inner})])"
        );
        all += &render(&read_with(&text, &list).unwrap_err(), "job.ron", &text, false);
        all += "\n";
    }
    insta::assert_snapshot!(all);
    // What may be bought can be pinned.
    let text = "(stock: \"list.csv\", buy: 1, sections: [(shape: LowPass, f0: 1000, q: 1, slots: {\"RG\": (pin: \"9k1\")})])";
    assert!(read_with(text, &list).is_ok());
}

#[test]
fn flags_win_over_the_keys_of_the_stock() {
    let text = in_job("stock: \"list.csv\", boards: 2, spares: 1, buy: 1, bar_class_2: true, rank: ToBuy");
    let mut job = JobFile::parse(&text).unwrap();
    job.overlay(JobFile {
        boards: Some(Given::flag("--boards", "7")),
        buy: Some(Given::flag("--buy", "resistors:2")),
        bar_class_2: Some(Given::flag("--bar-class-2", false)),
        rank: Some(Given::flag("--rank", RankFile::PartNumbers)),
        ..JobFile::default()
    });
    let problem = resolve(&job, &mut circuits, Some(&stock(LIST))).unwrap().problem;
    let supply = &problem.supply;
    assert_eq!((supply.boards, supply.spares, supply.buying), (7, 1, Buying::AtMost(2)));
    assert_eq!((supply.buying_only, problem.goals.rank), (Some(Kind::Resistor), Rank::PartNumbers));
    job.overlay(JobFile {
        boards: Some(Given::flag("--boards", "none")),
        buy: Some(Given::flag("--buy", "coils:1")),
        spares: Some(Given::flag("--spares", "-1")),
        ..JobFile::default()
    });
    let faults = resolve(&job, &mut circuits, Some(&stock(LIST))).unwrap_err();
    insta::assert_snapshot!(render(&located(&text, faults), "job.ron", &text, false));
}
