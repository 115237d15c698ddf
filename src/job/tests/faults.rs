//! What is said about jobs that cannot be.

use super::*;

/// Each text with the faults of the job that holds it: what is marked, the message, the advice.
fn told(texts: &[&str], job: impl Fn(&str) -> String) -> String {
    let mut all = String::new();
    for inner in texts {
        let text = job(inner);
        all += &format!("{inner}\n");
        for fault in read(&text).expect_err(inner) {
            let marked = fault.span.map_or("", |span| text[span].lines().next().unwrap_or(""));
            all += &format!("    {marked} -> {}\n", fault.message);
            all += &fault.help.map_or(String::new(), |help| format!("        {help}\n"));
        }
    }
    all
}

#[test]
fn faults_of_figures() {
    let texts = [
        "",
        "f0: 1, q: 1",
        "shape: LowPass, q: 1",
        "shape: LowPass, f0: 1, w0: 1, q: 1",
        "shape: LowPass, f0: \"6283 rad/s\", q: 1",
        "shape: LowPass, w0: \"1 kHz\", q: 1",
        "shape: LowPass, f0: 0, q: -1, gain: NaN",
        "shape: LowPass, f0: 2e12, q: 1001, gain: inf",
        "shape: LowPass, f0: -5, q: \"ten\", gain: 0",
        "shape: LowPass, f0: 1",
        "shape: LowPass, f0: 1, q: 1, fz: 2",
        "shape: LowPass, poles: (1, \"2 s\"), q: 1",
        "shape: LowPass, poles: (1, 2), q: 1",
        "shape: LowPass, poles: (1, 2e4)",
        "shape: FirstOrderLowPass, f0: 1, q: 1",
        "shape: FirstOrderLowPass, poles: (1, 2)",
        "shape: Notch, f0: 1, q: 1, fz: 1, wz: 1, gain: 1e7",
        "shape: Lowpass, f0: [1], q: 1, gian: 1",
    ];
    insta::assert_snapshot!(told(&texts, in_section), @r#"

        () -> section 1 has no shape
            write shape: with one of LowPass, HighPass, BandPass, Notch, AllPass, FirstOrderLowPass, FirstOrderHighPass, FirstOrderAllPass
        () -> section 1 has no frequency
            write f0 in Hz, w0 in rad/s, or poles: (.., ..) in Hz
    f0: 1, q: 1
        (f0: 1, q: 1) -> section 1 has no shape
            write shape: with one of LowPass, HighPass, BandPass, Notch, AllPass, FirstOrderLowPass, FirstOrderHighPass, FirstOrderAllPass
    shape: LowPass, q: 1
        (shape: LowPass, q: 1) -> section 1 has no frequency
            write f0 in Hz, w0 in rad/s, or poles: (.., ..) in Hz
    shape: LowPass, f0: 1, w0: 1, q: 1
        1 -> f0 and w0 are both given
            leave one of them out
    shape: LowPass, f0: "6283 rad/s", q: 1
        "6283 rad/s" -> "6283 rad/s" is not a frequency: give an angular frequency with the key w0, or divide it by 2 pi and write Hz
    shape: LowPass, w0: "1 kHz", q: 1
        "1 kHz" -> "1 kHz" is not an angular frequency: give a frequency with the key f0, or multiply it by 2 pi and write rad/s
    shape: LowPass, f0: 0, q: -1, gain: NaN
        0 -> "0" is out of range: a frequency lies between 1e-6 and 1e12 Hz
        -1 -> q must lie between 0.01 and 1000, found -1
        NaN -> cannot read "NaN" as a number: expected a finite number without a unit, or a percentage, for example 0.7071 or 1 %
    shape: LowPass, f0: 2e12, q: 1001, gain: inf
        2e12 -> "2e12" is out of range: a frequency lies between 1e-6 and 1e12 Hz
        1001 -> q must lie between 0.01 and 1000, found 1001
        inf -> cannot read "inf" as a number: expected a finite number without a unit, or a percentage, for example 0.7071 or 1 %
    shape: LowPass, f0: -5, q: "ten", gain: 0
        -5 -> "-5" is out of range: a frequency lies between 1e-6 and 1e12 Hz
        "ten" -> cannot read "ten" as a number: expected a finite number without a unit, or a percentage, for example 0.7071 or 1 %
        0 -> gain must lie between 1e-6 and 1e6 or between -1e6 and -1e-6, found 0
    shape: LowPass, f0: 1
        (shape: LowPass, f0: 1) -> a low-pass section needs a q (or two poles)
    shape: LowPass, f0: 1, q: 1, fz: 2
        2 -> a low-pass section has no fz: leave it out, or ask for a notch
    shape: LowPass, poles: (1, "2 s"), q: 1
        (1, "2 s") -> two poles stand for f0 and q, which are given too
            leave out either the poles, or f0 (or w0) and q
        "2 s" -> cannot read "2 s" as a frequency: expected a finite number in Hz, for example 1 kHz
    shape: LowPass, poles: (1, 2), q: 1
        (1, 2) -> two poles stand for f0 and q, which are given too
            leave out either the poles, or f0 (or w0) and q
    shape: LowPass, poles: (1, 2e4)
        (1, 2e4) -> the poles are too far apart: they make q 7.07e-3, and it must be at least 0.01
            use two first-order sections
    shape: FirstOrderLowPass, f0: 1, q: 1
        1 -> a first-order low-pass section has no q: leave it out
    shape: FirstOrderLowPass, poles: (1, 2)
        (1, 2) -> a first-order low-pass section has one pole
            write f0 instead
    shape: Notch, f0: 1, q: 1, fz: 1, wz: 1, gain: 1e7
        1 -> fz and wz are both given
            leave one of them out
        1e7 -> gain must lie between 1e-6 and 1e6 or between -1e6 and -1e-6, found 1e7
    shape: Lowpass, f0: [1], q: 1, gian: 1
        Lowpass -> `Lowpass` is none of the names that can stand here
            did you mean `LowPass`?
        [1] -> expected a number or a text in quotes
        gian -> there is no key `gian` here
            did you mean `gain`?
    "#);
}

#[test]
fn faults_of_circuits_and_outputs() {
    let texts = [
        "circuit: \"tow-tomas\"",
        "output: \"lowpass\"",
        "output: \"band-pass\"",
        "circuit: \"fliege-notch\"",
        "circuit: \"multiple-feedback-low-pass\"",
        "circuit: \"sallen-key-low-pass\", gain: 2",
        "circuit: \"sallen-key-low-pass-gain\", gain: 1.5, equal: [[\"RA\", \"RB\"]]",
        "circuit: \"sallen-key-low-pass\", gain: -1",
    ];
    insta::assert_snapshot!(told(&texts, in_low_pass), @r#"
    circuit: "tow-tomas"
        "tow-tomas" -> there is no circuit `tow-tomas`
            did you mean `tow-thomas`?
    output: "lowpass"
        "lowpass" -> tow-thomas has no output `lowpass`
            did you mean `low-pass`?
    output: "band-pass"
        "band-pass" -> `band-pass` of tow-thomas gives a band-pass, not a low-pass
            the outputs are band-pass (band-pass), low-pass (low-pass), low-pass-inverted (low-pass)
    circuit: "fliege-notch"
        LowPass -> fliege-notch gives no low-pass
            its outputs are notch (notch); a low-pass comes from akerberg-mossberg, multiple-feedback-low-pass, sallen-key-low-pass, sallen-key-low-pass-gain, state-variable, tow-thomas
    circuit: "multiple-feedback-low-pass"
        (shape: LowPass, f0: "1k", q: 1, circuit: "multiple-feedback-low-pass") -> multiple-feedback-low-pass gives a low-pass only with negative gain
            write gain: -1 or sign: Either, or take another circuit
    circuit: "sallen-key-low-pass", gain: 2
        2 -> the gain of sallen-key-low-pass is 1 for all part values
            write gain: 1, set ignore_gain: true for the job, or take another circuit
    circuit: "sallen-key-low-pass-gain", gain: 1.5, equal: [["RA", "RB"]]
        1.5 -> the gain of sallen-key-low-pass-gain is 2 for all part values
            write gain: 2, set ignore_gain: true for the job, or take another circuit
    circuit: "sallen-key-low-pass", gain: -1
        -1 -> sallen-key-low-pass gives a low-pass only with positive gain
            write gain: 1 or sign: Either, or take another circuit
    "#);
    let unity = "circuit: \"sallen-key-low-pass\", gain: 2";
    assert!(read(&in_low_pass(unity).replace("sections", "ignore_gain: true, sections")).is_ok());
    assert!(read(&in_low_pass("circuit: \"sallen-key-low-pass-gain\", gain: 2, equal: [[\"RA\", \"RB\"]]")).is_ok());
}

#[test]
fn faults_of_slots() {
    let texts = [
        "slots: {\"R9\": (pin: 1), \"RG\": (pin: \"10 nF\"), \"C1\": (pin: \"1n\", shelf: (series: E6))}",
        "slots: {\"RG\": (exclude: [\"1k\"], shelf: (values: [\"1k\"])), \"RQ\": (shelf: (from: \"2M\"))}",
        "slots: {\"RG\": (pin: \"1k\"), \"RG\": (pin: \"2k\")}",
        "slots: {\"RA\": (pin: \"1k\"), \"RB\": (pin: \"2k\")}",
        "equal: [[\"RG\", \"C1\"]], untie: [[\"RA\", \"RQ\"]]",
        "equal: [[\"RG\", \"RX\"], [\"RZ\", \"RQ\"]], untie: \"all\"",
        "equal: [[\"RG\", \"RX\"], [\"RZ\", \"RQ\"]], untie: true",
        "equal: [[\"C1\", \"C2\"]], slots: {\"C1\": (pin: \"1n\"), \"C2\": (shelf: (values: \"2n\"))}",
        "circuit: \"sallen-key-low-pass\", untie: [[\"R1\", \"R2\"]]",
    ];
    insta::assert_snapshot!(told(&texts, in_low_pass), @r#"
    slots: {"R9": (pin: 1), "RG": (pin: "10 nF"), "C1": (pin: "1n", shelf: (series: E6))}
        (pin: 1) -> tow-thomas has no slot `R9`
            the slots are RG, RQ, C1, RF, R2, C2, RA, RB
        "10 nF" -> "10 nF" is a capacitor value where a resistor value is needed: write one such as 4k7, 2R2 or 1M
        "1n" -> `C1` is pinned and has a shelf or exclusions too
            leave out either the pin or the others
    slots: {"RG": (exclude: ["1k"], shelf: (values: ["1k"])), "RQ": (shelf: (from: "2M"))}
        ["1k"] -> no resistor is left on the shelf: exclude fewer values, or add a series or single values
        (from: "2M") -> the resistor shelf is empty: no E96 value from 2M to 1M
            widen the range, or name another series or other values
    slots: {"RG": (pin: "1k"), "RG": (pin: "2k")}
        "RG" -> the slot `RG` is there twice
    slots: {"RA": (pin: "1k"), "RB": (pin: "2k")}
        {"RA": (pin: "1k"), "RB": (pin: "2k")} -> RA and RB must carry the same value, but their shelves share none
            let their shelves or pins agree, or untie them
    equal: [["RG", "C1"]], untie: [["RA", "RQ"]]
        ["RG", "C1"] -> `RG` and `C1` are different kinds of part
            name resistors only, or capacitors only
        ["RA", "RQ"] -> tow-thomas does not tie RA and RQ
            it ties RA and RB
    equal: [["RG", "RX"], ["RZ", "RQ"]], untie: "all"
        "all" -> expected true, false or a list such as [["RA", "RB"]]
    equal: [["RG", "RX"], ["RZ", "RQ"]], untie: true
        "RX" -> tow-thomas has no slot `RX`
            the slots are RG, RQ, C1, RF, R2, C2, RA, RB
        "RZ" -> tow-thomas has no slot `RZ`
            the slots are RG, RQ, C1, RF, R2, C2, RA, RB
    equal: [["C1", "C2"]], slots: {"C1": (pin: "1n"), "C2": (shelf: (values: "2n"))}
        [["C1", "C2"]] -> C1 and C2 must carry the same value, but their shelves share none
            let their shelves or pins agree, or untie them
    circuit: "sallen-key-low-pass", untie: [["R1", "R2"]]
        ["R1", "R2"] -> sallen-key-low-pass does not tie R1 and R2
            it has no ties
    "#);
    let notch = |inner: &str| format!("(sections: [(shape: Notch, f0: 1, q: 1, sign: Either, {inner})])");
    insta::assert_snapshot!(told(&["slots: {\"R6\": (pin: \"1k\")}, equal: [[\"RG\", \"R2\"]]"], notch), @r#"
    slots: {"R6": (pin: "1k")}, equal: [["RG", "R2"]]
        (pin: "1k") -> the slot `R6` stays empty for the output `notch`
            leave it out, or take another output
        "RG" -> the slot `RG` stays empty for the output `notch`
            leave it out, or take another output
    "#);
}

#[test]
fn faults_of_names() {
    let long = format!("name: \"{}\"", "x".repeat(41));
    insta::assert_snapshot!(told(&[&long, "name: \"a\\nb\""], in_low_pass), @r#"
    name: "xxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxx"
        "xxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxxx" -> the name has 41 characters, 40 at most are shown
            shorten it; the title may be longer
    name: "a\nb"
        "a\nb" -> the control character \u{a} cannot be shown
            leave out line breaks, tabs and other control characters
    "#);
    assert!(read(&in_low_pass(&format!("name: \"{}\"", "Ω".repeat(40)))).is_ok());
}

#[test]
fn faults_of_signs_and_measures() {
    let weighted = |inner: &str| format!("(sections: [({inner})], measure: Weighted(f0: 1))");
    let texts = [
        "shape: AllPass, f0: 1, q: 1",
        "shape: Notch, f0: 1, q: 1, circuit: \"fliege-notch\", untie: true",
        "shape: Notch, f0: 1, q: 1, circuit: \"fliege-notch\", untie: [[\"R7\", \"R8\"]]",
    ];
    insta::assert_snapshot!(told(&texts, weighted), @r#"
    shape: AllPass, f0: 1, q: 1
        Weighted(f0: 1) -> the weighted misses say nothing about the zeros of the all-pass section 1
            write measure: Vector
    shape: Notch, f0: 1, q: 1, circuit: "fliege-notch", untie: true
        Weighted(f0: 1) -> the weighted misses say nothing about the depth of the null of section 1, which depends on the part values
            keep the ties of the circuit, or write measure: Decibel or Vector
    shape: Notch, f0: 1, q: 1, circuit: "fliege-notch", untie: [["R7", "R8"]]
        Weighted(f0: 1) -> the weighted misses say nothing about the depth of the null of section 1, which depends on the part values
            keep the ties of the circuit, or write measure: Decibel or Vector
    "#);
    // Its null needs R6 R8 = R4 R7, which pairs across the ties keep too; that of the feed-forward biquad needs nothing.
    for inner in [
        "circuit: \"fliege-notch\"",
        "circuit: \"fliege-notch\", untie: true, equal: [[\"R6\", \"R7\"], [\"R4\", \"R8\"]]",
        "circuit: \"feed-forward-biquad\", gain: -1, untie: true",
    ] {
        sound(&weighted(&format!("shape: Notch, f0: 1, q: 1, {inner}")));
    }
    let texts = [
        "shape: Notch, f0: 1, q: 1, fz: 2, gain: 1",
        "shape: AllPass, f0: 1, q: 1, gain: 1",
        "shape: BandPass, f0: 1, q: 1, gain: 2",
        "shape: HighPass, f0: 1, q: 1, gain: -2",
        "shape: AllPass, f0: 1, q: 1, circuit: \"feed-forward-biquad\"",
        "shape: AllPass, f0: 1",
    ];
    insta::assert_snapshot!(told(&texts, in_section), @r#"
    shape: Notch, f0: 1, q: 1, fz: 2, gain: 1
        1 -> feed-forward-biquad, taken by default, gives a notch only with negative gain
            write gain: -1 or sign: Either, or take another circuit
    shape: AllPass, f0: 1, q: 1, gain: 1
        1 -> feed-forward-biquad, taken by default, gives an all-pass only with negative gain
            write gain: -1 or sign: Either, or take another circuit
    shape: BandPass, f0: 1, q: 1, gain: 2
        2 -> tow-thomas, taken by default, gives a band-pass only with negative gain
            write gain: -2 or sign: Either, or take another circuit
    shape: HighPass, f0: 1, q: 1, gain: -2
        -2 -> state-variable, taken by default, gives a high-pass only with positive gain
            write gain: 2 or sign: Either, or take another circuit
    shape: AllPass, f0: 1, q: 1, circuit: "feed-forward-biquad"
        (shape: AllPass, f0: 1, q: 1, circuit: "feed-forward-biquad") -> feed-forward-biquad gives an all-pass only with negative gain
            write gain: -1 or sign: Either, or take another circuit
    shape: AllPass, f0: 1
        (shape: AllPass, f0: 1) -> an all-pass section needs a q (or two poles)
    "#);
}

#[test]
fn faults_of_shelves() {
    let texts = [
        "resistors: (series: E7, from: \"10 nF\", to: 0), capacitors: (values: [\"1k\", \"1n\", -1])",
        "resistors: (series: [E6, \"E12\"], from: \"1k05\", to: \"1k1\")",
        "resistors: (from: \"1M\", to: \"1k\"), capacitors: (values: [\"1n\"], exclude: \"1n\")",
        "resistors: [(series: E6), (values: [\"4k99\"], from: \"5k\")]",
        "resistors: [], capacitors: (form: \"1n\", serie: E6)",
        "resistors: [], capacitors: [(values: [])]",
        "resistors: E24, capacitors: (3, 4), band: 3, impedance: [1, 2]",
    ];
    insta::assert_snapshot!(told(&texts, in_job), @r#"
    resistors: (series: E7, from: "10 nF", to: 0), capacitors: (values: ["1k", "1n", -1])
        E7 -> "E7" is no series of preferred numbers: write E3, E6, E12, E24, E48, E96 or E192
        "10 nF" -> "10 nF" is a capacitor value where a resistor value is needed: write one such as 4k7, 2R2 or 1M
        0 -> "0" is not positive: a resistor value is larger than zero, for example 4k7, 2R2 or 1M
        "1k" -> "1k" is a resistor value where a capacitor value is needed: write one such as 4n7, 330p or 1u
        -1 -> "-1" is not positive: a capacitor value is larger than zero, for example 4n7, 330p or 1u
    resistors: (series: [E6, "E12"], from: "1k05", to: "1k1")
        (series: [E6, "E12"], from: "1k05", to: "1k1") -> the resistor shelf is empty: no E6 or E12 value from 1k05 to 1k1
            widen the range, or name another series or other values
    resistors: (from: "1M", to: "1k"), capacitors: (values: ["1n"], exclude: "1n")
        (from: "1M", to: "1k") -> the range from 1M to 1k is reversed
            write the smaller value first
        "1n" -> the capacitor shelf is empty: every value is excluded
            exclude fewer values, or widen the range
    resistors: [(series: E6), (values: ["4k99"], from: "5k")]
        (values: ["4k99"], from: "5k") -> the resistor shelf is empty: none of its values lies in its range
            widen the range, or name another series or other values
    resistors: [], capacitors: (form: "1n", serie: E6)
        form -> there is no key `form` here
            did you mean `from`?
        serie -> there is no key `serie` here
            did you mean `series`?
    resistors: [], capacitors: [(values: [])]
        [] -> the resistor shelf is empty: widen its range, or add a series or single values
        (values: []) -> the capacitor shelf is empty: none of its values lies in its range
            widen the range, or name another series or other values
    resistors: E24, capacitors: (3, 4), band: 3, impedance: [1, 2]
        E24 -> expected a shelf such as (series: E24, from: "1k", to: "1M"), or a list of shelves
        3 -> expected a group in ( )
        3 -> expected a group in ( )
        [1, 2] -> expected a group in ( )
    "#);
}

#[test]
fn faults_of_the_job() {
    let texts = [
        "band: (\"20 kHz\", \"10 Hz\"), floor: \"0 dB\", rows: 0, alternatives: -1, max_part_numbers: 2.5",
        "band: (1, 1), floor: \"400 dB\", impedance: (\"50k\", \"2k\"), time_limit: \"10 m\"",
        "wanted_error: \"2 dB\", error_limit: \"1 dB\"",
        "wanted_error: 0, error_limit: \"1 %\", error_resolution: -1",
        "error_resolution: \"0.2 dB\"",
        "measure: Vector, wanted_error: \"1 dB\"",
        "measure: Weighted(f0: 0), ignore_gain: 1",
        "measure: Weighted(f0: -1, q: \"x\", fz: 1e9)",
        "measure: Weighted(w0: 1)",
        "measure: decibels",
        "impedance: (1, 900)",
        "impedance: (\"1M1\", \"2M\")",
        "title: \"a\\u{1b}[31m\"",
    ];
    insta::assert_snapshot!(told(&texts, in_job), @r#"
    band: ("20 kHz", "10 Hz"), floor: "0 dB", rows: 0, alternatives: -1, max_part_numbers: 2.5
        ("20 kHz", "10 Hz") -> the range from 20 kHz to 10 Hz holds nothing
            write the smaller value first
        "0 dB" -> floor must be larger than 0 and at most 300, found 0 dB
        0 -> rows must be a whole number from 1 to 10000, found 0
        -1 -> alternatives must be a whole number from 0 to 10000, found -1
        2.5 -> max_part_numbers must be a whole number from 1 to 1000, found 2.5
    band: (1, 1), floor: "400 dB", impedance: ("50k", "2k"), time_limit: "10 m"
        (1, 1) -> the range from 1 to 1 holds nothing
            write the smaller value first
        "400 dB" -> floor must be larger than 0 and at most 300, found 400 dB
        ("50k", "2k") -> the range from 50k to 2k holds nothing
            write the smaller value first
        "10 m" -> cannot read "10 m" as a time: expected a finite number in s, ms, us, min or h, for example 10 s
    wanted_error: "2 dB", error_limit: "1 dB"
        "2 dB" -> wanted_error 2 is above error_limit 1
            raise the limit, or want a smaller error
    wanted_error: 0, error_limit: "1 %", error_resolution: -1
        0 -> wanted_error must be larger than 0 and at most 100, found 0
        "1 %" -> cannot read "1 %" as a level: expected a finite number in dB, for example 0.1 dB
        -1 -> error_resolution must be larger than 0 and at most 100, found -1
    error_resolution: "0.2 dB"
        "0.2 dB" -> error_resolution 0.2 is above wanted_error 0.1
            choose a finer resolution
    measure: Vector, wanted_error: "1 dB"
        "1 dB" -> cannot read "1 dB" as a number: expected a finite number without a unit, or a percentage, for example 0.7071 or 1 %
    measure: Weighted(f0: 0), ignore_gain: 1
        1 -> expected true or false
    measure: Weighted(f0: -1, q: "x", fz: 1e9)
        -1 -> a weight must lie between 0 and 1000000, found -1
        "x" -> cannot read "x" as a number: expected a finite number without a unit, or a percentage, for example 0.7071 or 1 %
        1e9 -> a weight must lie between 0 and 1000000, found 1e9
    measure: Weighted(w0: 1)
        w0 -> there is no key `w0` here
            the keys are f0, q, gain, fz
    measure: decibels
        decibels -> `decibels` is none of the names that can stand here
            did you mean `Decibel`?
    impedance: (1, 900)
        (1, 900) -> no impedance from 1 to 900 is possible: the resistors of section 1 run from 1k to 1M
            choose a range among them, or other resistors
    impedance: ("1M1", "2M")
        ("1M1", "2M") -> no impedance from 1M1 to 2M is possible: the resistors of section 1 run from 1k to 1M
            choose a range among them, or other resistors
    title: "a\u{1b}[31m"
        "a\u{1b}[31m" -> the control character \u{1b} cannot be shown
            leave out line breaks, tabs and other control characters
    "#);
    let texts = [
        "()",
        "(sections: [])",
        "(sections: [(name: \"2\", shape: LowPass, f0: 1, q: 1), (shape: LowPass, f0: 1, q: 1)])",
        "(measure: Decibel, sections: [(name: \"A\", shape: FirstOrderAllPass, f0: 1, sign: Either)])",
        "(circuit: \"x\", output: \"y\", sections: [(shape: LowPass, f0: 1, q: 1), (shape: LowPass, f0: 2, q: 1)])",
    ];
    insta::assert_snapshot!(told(&texts, str::to_string), @r#"
    ()
        () -> the job has no sections
            write sections: [(shape: LowPass, f0: "1 kHz", q: 0.7071)], for example
    (sections: [])
        [] -> the job has no sections
            write sections: [(shape: LowPass, f0: "1 kHz", q: 0.7071)], for example
    (sections: [(name: "2", shape: LowPass, f0: 1, q: 1), (shape: LowPass, f0: 1, q: 1)])
        (shape: LowPass, f0: 1, q: 1) -> two sections are named 2
            give each section its own name
    (measure: Decibel, sections: [(name: "A", shape: FirstOrderAllPass, f0: 1, sign: Either)])
        Decibel -> the magnitude in dB says nothing about the all-pass section A
            write measure: Vector
    (circuit: "x", output: "y", sections: [(shape: LowPass, f0: 1, q: 1), (shape: LowPass, f0: 2, q: 1)])
        "x" -> there is no circuit `x`
            the circuits are akerberg-mossberg, feed-forward-biquad, first-order-all-pass, first-order-all-pass-lead, fliege-notch, inverting-low-pass, multiple-feedback-band-pass, multiple-feedback-low-pass, rc-high-pass, rc-low-pass, sallen-key-high-pass, sallen-key-low-pass, sallen-key-low-pass-gain, state-variable, tow-thomas
    "#);
}

#[test]
fn all_faults_are_shown_in_text_order_with_their_places() {
    let text = "\u{feff}(\r\n\trows: 0, /* µ */ sections: [\r\n\t\t(name: \"Ω\", shape: LowPass, f0: 4700, q: 0),\r\n\
        \t\t(shape: HighPass, gain: 1,\r\n\t\t\tcircuit: \"tow-thomas\", f0: \"1 µHz\", q: 1)],\r\n\tfloor: \"x\")\r\n";
    insta::assert_snapshot!(render(&read(text).unwrap_err(), "job.ron", text, false), @r#"
    error: rows must be a whole number from 1 to 10000, found 0
     --> job.ron:2:8
      |
    2 |     rows: 0, /* µ */ sections: [
      |           ^

    error: q must lie between 0.01 and 1000, found 0
     --> job.ron:3:44
      |
    3 |         (name: "Ω", shape: LowPass, f0: 4700, q: 0),
      |                                                  ^

    error: tow-thomas gives no high-pass
     --> job.ron:4:11
      |
    4 |         (shape: HighPass, gain: 1,
      |                 ^^^^^^^^
      |
      = help: its outputs are band-pass (band-pass), low-pass (low-pass),
              low-pass-inverted (low-pass); a high-pass comes from
              sallen-key-high-pass, state-variable

    error: cannot read "x" as a level: expected a finite number in dB, for example
           0.1 dB
     --> job.ron:6:9
      |
    6 |     floor: "x")
      |            ^^^
    "#);
}
