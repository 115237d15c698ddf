//! What the steps of `tighten` cost: against sums by hand, and the command as it is run.

#![allow(missing_docs, clippy::unwrap_used)]

mod command;
mod support;

use std::path::Path;

use command::{code, in_one_line, json, out, refused, run};
use roundwell::analysis::{Built, Step, StepPrices, cheapest, costs};
use roundwell::job::Listed;

/// Four resistors, two capacitors of which one is measured, and another row with a pair more.
fn rows() -> Vec<Built> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("data/examples/vibration-logger.json");
    let listed = Listed::parse(&std::fs::read_to_string(path).unwrap()).unwrap();
    let mut rows: Vec<Built> =
        listed.rows[..2].iter().map(|row| listed.built(row, &mut |id| Ok(support::library(id))).unwrap()).collect();
    let capacitor = rows[0].sections[0].parts.iter_mut().find(|part| part.pieces[0].label.to_f64() < 1.0).unwrap();
    capacitor.pieces[0].is_measured = true;
    let resistor = &mut rows[1].sections[1].parts[0];
    resistor.pieces.push(resistor.pieces[0]);
    rows
}

fn step(row: usize, passed: u64, low: f64) -> Step {
    Step { resistors: 0.0, capacitors: 0.0, row, boards: 1000, passed, interval: (low, 1.0) }
}

/// Two Tow-Thomas sections have twelve resistors and four capacitors; measured parts are there, a pair is two parts.
#[test]
fn a_board_costs_its_parts_times_their_prices() {
    let rows = rows();
    let steps = [
        step(0, 900, 0.8),
        step(1, 990, 0.96),
        step(0, 980, 0.96),
        step(1, 999, 0.99),
        step(0, 1000, 0.99),
        step(0, 999, 0.99),
    ];
    let prices =
        StepPrices { resistors: vec![Some(5_000), Some(11_000)], capacitors: vec![Some(40_000), None, Some(90_000)] };
    let found = costs(&steps, &rows, &prices);
    let expected = [
        Some(12 * 5_000 + 3 * 40_000),
        None,
        Some(12 * 5_000 + 3 * 90_000),
        Some(13 * 11_000 + 4 * 40_000),
        None,
        Some(12 * 11_000 + 3 * 90_000),
    ];
    assert_eq!(found, expected);
    // Cheapest of those that reach 95 % for sure: not the first, which does not; not those without a price.
    assert_eq!(cheapest(&steps, &found, 0.95), Some(3));
    assert_eq!(cheapest(&steps, &found, 0.5), Some(0));
    assert_eq!(cheapest(&steps, &found, 0.995), None);
    // Of equal costs that with the higher yield, then the first.
    let equal = [Some(1), Some(1), Some(1), None, Some(2), Some(0)];
    let same = [
        step(0, 960, 0.95),
        step(0, 970, 0.95),
        step(0, 970, 0.95),
        step(0, 999, 0.99),
        step(0, 990, 0.97),
        step(0, 1, 0.0),
    ];
    assert_eq!(cheapest(&same, &equal, 0.9), Some(1));
    assert_eq!(costs(&steps, &rows, &StepPrices::default()), [None; 6]);
}

const LINE: &str =
    "tighten data/examples/vibration-logger.json --mask data/masks/vibration-logger.ron --wanted-yield 95%";
const PRICES: &str = "--resistor-price 5%=0.004EUR,2%=0.006EUR,1%=0.007EUR,0.5%=0.02EUR,0.1%=0.09EUR \
                      --capacitor-price 10%=0.03EUR,5%=0.04EUR,2%=0.12EUR";

#[test]
fn the_cheapest_step_is_marked() {
    let here = Path::new(env!("CARGO_MANIFEST_DIR"));
    let shown = run(here, &format!("{LINE} {PRICES}"));
    assert_eq!(code(&shown), 0);
    let text = out(&shown);
    assert!(text.lines().all(|line| line.chars().count() <= 80), "{text}");
    insta::assert_snapshot!(text);
    let value = json(&run(here, &format!("{LINE} {PRICES} --format json")));
    assert_eq!((&value["currency"], value["resistor_prices"][2].as_f64()), (&"EUR".into(), Some(0.007)));
    assert_eq!(value["capacitor_prices"][0], serde_json::Value::Null);
    let steps = value["steps"].as_array().unwrap();
    let low = |step: &serde_json::Value| step["interval"][0].as_f64().unwrap();
    let known = steps.iter().filter(|step| low(step) >= 0.95).filter_map(|step| Some((step["cost"].as_f64()?, step)));
    let least = known.min_by(|(a, _), (b, _)| a.total_cmp(b)).unwrap().1;
    assert_eq!(least["cheapest"], true);
    assert_eq!(steps.iter().filter(|step| step["cheapest"] == true).count(), 1);
    // 1 % resistors and 5 % capacitors: twelve and four of them.
    let asked = steps.iter().find(|step| step["resistors"] == 0.01 && step["capacitors"] == 0.05).unwrap();
    assert!((asked["cost"].as_f64().unwrap() - (12.0 * 0.007 + 4.0 * 0.04)).abs() < 1e-9);
    assert!(steps.iter().filter(|step| step["capacitors"] == 0.2).all(|step| step["cost"].is_null()));
    // Without prices there is no cost, and nothing is said of it.
    let plain = run(here, LINE);
    assert!(!out(&plain).contains('#') && !out(&plain).contains("Costs"));
    // The only price is that of steps that do not do.
    let none = run(here, &format!("{LINE} --resistor-price 5%=0.004 --capacitor-price 20%=0.03"));
    assert!(in_one_line(&out(&none)).contains("No step that reaches it has a price for all its parts."));
}

#[test]
fn wrong_prices_are_refused_with_what_is_allowed() {
    let here = Path::new(env!("CARGO_MANIFEST_DIR"));
    let mut shown = Vec::new();
    for flags in [
        "--resistor-price 1%=0.02",
        "--capacitor-price 1%=0.02",
        "--resistor-price 3%=0.02 --capacitor-price 1=0.02",
        "--resistor-price 1%=-0.02 --capacitor-price 1%=cheap",
        "--resistor-price 0.02 --capacitor-price 1%=0.1,1%=0.2",
        "--resistor-price 1%=0.02EUR --capacitor-price 1%=0.1USD,2%=0.08",
    ] {
        shown.push(format!("$ {flags}\n{}", refused(&run(here, &format!("{LINE} {flags}")))));
    }
    insta::assert_snapshot!(shown.join("\n"));
}
