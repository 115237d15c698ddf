//! The drawer of an invented workshop, and what is drawn from it.

use serde_json::Value;
use tempfile::TempDir;

use super::{code, err, folder_with, json, run};

/// The drawer of an invented workshop that builds hive scales.
pub const DRAWER: &str = "\
kind,value,quantity,tolerance,dielectric,price EUR,id,measured,box
R,4k7,12,1 %,,0.02,R4,,1
R,10k,40,1 %,,0.02,R10,,1
R,10k,6,0.1 %,,0.30,P10,,2
R,12k,3,1 %,,0.02,R12,,1
R,15k,20,1 %,,0.02,R15,,1
R,22k,6,1 %,,0.02,R22,,1
R,33k,8,1 %,,0.02,R33,,1
C,2n2,9,5 %,C0G,0.09,G2,,3
C,4n7,6,5 %,PP,0.17,F4,,3
C,10n,8,5 %,PP,0.20,F10,,3
C,10n,1,5 %,PP,0.20,M1,9.92n,4
C,10n,1,5 %,PP,0.20,M2,10.11n,4
C,10n,1,5 %,PP,0.20,M3,10.04n,4
C,22n,4,5 %,PP,0.32,F22,,3
C,47n,9,10 %,X7R,0.04,Q47,,5
";

/// Two of its lines cannot be used.
pub const BAD: &str = "kind,value,quantity\nR,10k,5\nR,4q7,3\nC,10n,lots\nC,22n,4\nR,15k,4\n";

pub const SECTION: &str = "shortlist --shape low-pass --f0 1k --q 0.7071 --circuit sallen-key-low-pass";

pub const JOB: &str = r#"(
    title: "Hive scale, two sections",
    circuit: "sallen-key-low-pass",
    sections: [
        (name: "A", shape: LowPass, f0: "1 kHz", q: 0.5412),
        (name: "B", shape: LowPass, f0: "1 kHz", q: 1.3066),
    ],
    stock: "drawer.csv",
    error_limit: 3,
)
"#;

pub fn workshop() -> TempDir {
    folder_with(&[("drawer.csv", DRAWER), ("bad.csv", BAD), ("job.ron", JOB)])
}

/// A sound run in the workshop, and its JSON.
pub fn listed(folder: &TempDir, line: &str) -> Value {
    let output = run(folder.path(), &format!("{line} --format json"));
    assert!([0, 3].contains(&code(&output)), "{line}: {}", err(&output));
    assert!(err(&output).is_empty(), "{}", err(&output));
    json(&output)
}

pub fn rows(value: &Value) -> &Vec<Value> {
    value["shortlist"].as_array().unwrap()
}

/// The errors of the rows as text, to be compared.
pub fn errors(value: &Value) -> Vec<String> {
    rows(value).iter().map(|row| format!("{:.7}", row["ranking_error"].as_f64().unwrap())).collect()
}
