//! The circuit library against published closed forms.
//!
//! Each output of each circuit has its closed form here, in the figures that the literature gives: w0, bandwidth,
//! gain with its sign, and for a notch the null wz. The forms are those of the publications that the circuit files
//! name (from memory). Both routes of the circuit module must meet them: the coefficients of the symbolic nodal
//! analysis, and the numeric nodal solve at single frequencies.
#![allow(clippy::unwrap_used)]

use num_complex::Complex64;
use roundwell::circuit::{self, Circuit, Need, Output};
use roundwell::units::Kind;

/// Values drawn for each output.
const DRAWS: usize = 50;
/// Allowed error of a coefficient, relative to the sum of the magnitudes of its terms.
const COEFFICIENT_ERROR: f64 = 1e-12;
/// Allowed error of the response, relative to the sum of the magnitudes of the terms of the numerator.
const RESPONSE_ERROR: f64 = 1e-9;

// ---- closed forms -------------------------------------------------------------------------------------------------

/// Looks up the value of a slot by its name, in ohms or farads.
type Value<'a> = &'a dyn Fn(&str) -> f64;

/// A transfer function N(s)/D(s) in ascending powers of s, with 1 before the highest power of D.
/// Each coefficient is the list of terms that add up to it: where terms cancel, rounding scales with the terms.
struct Form {
    numerator: [Vec<f64>; 3],
    denominator: Vec<Vec<f64>>,
}

/// One output and its closed form.
struct Case {
    circuit: &'static str,
    output: &'static str,
    form: fn(Value) -> Form,
}

const fn case(circuit: &'static str, output: &'static str, form: fn(Value) -> Form) -> Case {
    Case { circuit, output, form }
}

/// (dc w0 + hf s) / (s + w0), from the gains at zero and at infinite frequency.
fn first_order(w0: f64, dc: f64, hf: f64) -> Form {
    Form { numerator: [vec![dc * w0], vec![hf], vec![]], denominator: vec![vec![w0], vec![1.0]] }
}

/// The poles of a second-order section: w0^2, and the terms that add up to the bandwidth w0/Q.
struct Poles(f64, Vec<f64>);

impl Poles {
    fn with(self, numerator: [Vec<f64>; 3]) -> Form {
        Form { numerator, denominator: vec![vec![self.0], self.1, vec![1.0]] }
    }

    /// Low-pass with the gain at zero frequency.
    fn low_pass(self, dc: f64) -> Form {
        let constant = vec![dc * self.0];
        self.with([constant, vec![], vec![]])
    }

    /// High-pass with the gain at infinite frequency.
    fn high_pass(self, hf: f64) -> Form {
        self.with([vec![], vec![], vec![hf]])
    }

    /// Band-pass with the gain at w0.
    fn band_pass(self, centre: f64) -> Form {
        let middle = self.1.iter().map(|term| centre * term).collect();
        self.with([vec![], middle, vec![]])
    }

    /// Notch or all-pass: hf (s^2 + wz^2) + middle s. The literature also gives the gain at zero frequency, which must
    /// agree.
    fn biquad(self, dc: f64, hf: f64, wz_squared: f64, middle: Vec<f64>) -> Form {
        let constant = hf * wz_squared;
        assert!((dc * self.0 - constant).abs() <= 1e-12 * constant.abs());
        self.with([vec![constant], middle, vec![hf]])
    }
}

fn sallen_key_low_pass(v: Value, k: f64) -> Form {
    let (r1, r2, c1, c2) = (v("R1"), v("R2"), v("C1"), v("C2"));
    let bandwidth = vec![1.0 / (r1 * c1), 1.0 / (r2 * c1), -(k - 1.0) / (r2 * c2)];
    Poles(1.0 / (r1 * r2 * c1 * c2), bandwidth).low_pass(k)
}

fn sallen_key_high_pass(v: Value) -> Form {
    let (r1, r2, c1, c2) = (v("R1"), v("R2"), v("C1"), v("C2"));
    let bandwidth = vec![(c1 + c2) / (r2 * c1 * c2)];
    Poles(1.0 / (r1 * r2 * c1 * c2), bandwidth).high_pass(1.0)
}

fn multiple_feedback_low_pass(v: Value) -> Form {
    let (r1, r2, r3, c1, c2) = (v("R1"), v("R2"), v("R3"), v("C1"), v("C2"));
    let bandwidth = vec![(1.0 / r1 + 1.0 / r2 + 1.0 / r3) / c1];
    Poles(1.0 / (r2 * r3 * c1 * c2), bandwidth).low_pass(-r2 / r1)
}

fn multiple_feedback_band_pass(v: Value) -> Form {
    let (r1, r2, r3, c1, c2) = (v("R1"), v("R2"), v("R3"), v("C1"), v("C2"));
    let bandwidth = vec![(1.0 / c1 + 1.0 / c2) / r3];
    let centre = -(r3 / r1) * c2 / (c1 + c2);
    Poles((1.0 / r1 + 1.0 / r2) / (r3 * c1 * c2), bandwidth).band_pass(centre)
}

/// The poles of a two-integrator loop with an inverter of the gain -`inverter`.
fn loop_poles(v: Value, inverter: f64) -> Poles {
    let w0_squared = inverter / (v("RF") * v("R2") * v("C1") * v("C2"));
    Poles(w0_squared, vec![1.0 / (v("RQ") * v("C1"))])
}

/// Poles, and the gain k at infinite frequency of the high-pass output.
fn state_variable(v: Value) -> (Poles, f64) {
    let (r3, r4, r5, r6) = (v("R3"), v("R4"), v("R5"), v("R6"));
    let w0_squared = (r3 / r4) / (v("R1") * v("R2") * v("C1") * v("C2"));
    let bandwidth = (1.0 + r3 / r4) * (r5 / (r5 + r6)) / (v("R1") * v("C1"));
    let k = (1.0 + r3 / r4) * r6 / (r5 + r6);
    (Poles(w0_squared, vec![bandwidth]), k)
}

/// The feed-forward biquad without RG; `middle` are the terms before s.
fn feed_forward(v: Value, middle: Vec<f64>) -> Form {
    let inverter = v("RB") / v("RA");
    let wz_squared = inverter / (v("RF") * v("R5") * v("CF") * v("C2"));
    loop_poles(v, inverter).biquad(-v("R2") / v("R5"), -v("CF") / v("C1"), wz_squared, middle)
}

fn fliege_notch(v: Value, ratio: f64) -> Form {
    let (g7, g8, c7) = (1.0 / v("R7"), 1.0 / v("R8"), v("C7"));
    let w0_squared = ratio / (v("R1") * v("R3") * v("C2") * c7);
    let middle = vec![g7 / c7, -ratio * g8 / c7];
    Poles(w0_squared, vec![(g7 + g8) / c7]).biquad(1.0, 1.0, w0_squared, middle)
}

/// The closed form of each output for any values.
const FORMS: &[Case] = &[
    case("rc-low-pass", "low-pass", |v| first_order(1.0 / (v("R1") * v("C1")), 1.0, 0.0)),
    case("rc-high-pass", "high-pass", |v| first_order(1.0 / (v("R1") * v("C1")), 0.0, 1.0)),
    case("inverting-low-pass", "low-pass", |v| first_order(1.0 / (v("R2") * v("C2")), -v("R2") / v("R1"), 0.0)),
    case("first-order-all-pass", "all-pass", |v| first_order(1.0 / (v("R1") * v("C1")), 1.0, -v("RB") / v("RA"))),
    case("first-order-all-pass-lead", "all-pass", |v| {
        first_order(1.0 / (v("R1") * v("C1")), -v("RB") / v("RA"), 1.0)
    }),
    case("sallen-key-low-pass", "low-pass", |v| sallen_key_low_pass(v, 1.0)),
    case("sallen-key-low-pass-gain", "low-pass", |v| sallen_key_low_pass(v, 1.0 + v("RB") / v("RA"))),
    case("sallen-key-high-pass", "high-pass", sallen_key_high_pass),
    case("multiple-feedback-low-pass", "low-pass", multiple_feedback_low_pass),
    case("multiple-feedback-band-pass", "band-pass", multiple_feedback_band_pass),
    case("tow-thomas", "band-pass", |v| loop_poles(v, v("RB") / v("RA")).band_pass(-v("RQ") / v("RG"))),
    case("tow-thomas", "low-pass", |v| {
        loop_poles(v, v("RB") / v("RA")).low_pass((v("RA") / v("RB")) * v("RF") / v("RG"))
    }),
    case("tow-thomas", "low-pass-inverted", |v| loop_poles(v, v("RB") / v("RA")).low_pass(-v("RF") / v("RG"))),
    case("state-variable", "high-pass", |v| {
        let (poles, k) = state_variable(v);
        poles.high_pass(k)
    }),
    case("state-variable", "band-pass", |v| state_variable(v).0.band_pass(-v("R6") / v("R5"))),
    case("state-variable", "low-pass", |v| {
        let dc = (1.0 + v("R4") / v("R3")) * v("R6") / (v("R5") + v("R6"));
        state_variable(v).0.low_pass(dc)
    }),
    case("feed-forward-biquad", "notch", |v| feed_forward(v, vec![])),
    case("feed-forward-biquad", "all-pass", |v| feed_forward(v, vec![v("RB") / (v("RF") * v("R6") * v("C1"))])),
    case("akerberg-mossberg", "band-pass", |v| loop_poles(v, v("RA") / v("RB")).band_pass(-v("RQ") / v("RG"))),
    case("akerberg-mossberg", "low-pass-inverted", |v| loop_poles(v, v("RA") / v("RB")).low_pass(-v("RF") / v("RG"))),
    case("akerberg-mossberg", "low-pass", |v| {
        loop_poles(v, v("RA") / v("RB")).low_pass((v("RB") / v("RA")) * v("RF") / v("RG"))
    }),
    case("fliege-notch", "notch", |v| fliege_notch(v, v("R4") / v("R6"))),
];

/// What is left of the closed form once the ties of the circuit hold: no ratio of tied slots appears.
const TIED_FORMS: &[Case] = &[
    case("first-order-all-pass", "all-pass", |v| first_order(1.0 / (v("R1") * v("C1")), 1.0, -1.0)),
    case("first-order-all-pass-lead", "all-pass", |v| first_order(1.0 / (v("R1") * v("C1")), -1.0, 1.0)),
    case("tow-thomas", "band-pass", |v| loop_poles(v, 1.0).band_pass(-v("RQ") / v("RG"))),
    case("tow-thomas", "low-pass", |v| loop_poles(v, 1.0).low_pass(v("RF") / v("RG"))),
    case("tow-thomas", "low-pass-inverted", |v| loop_poles(v, 1.0).low_pass(-v("RF") / v("RG"))),
    case("feed-forward-biquad", "notch", |v| {
        let wz_squared = 1.0 / (v("RF") * v("R5") * v("CF") * v("C2"));
        loop_poles(v, 1.0).biquad(-v("R2") / v("R5"), -v("CF") / v("C1"), wz_squared, vec![])
    }),
    case("akerberg-mossberg", "band-pass", |v| loop_poles(v, 1.0).band_pass(-v("RQ") / v("RG"))),
    case("akerberg-mossberg", "low-pass-inverted", |v| loop_poles(v, 1.0).low_pass(-v("RF") / v("RG"))),
    case("akerberg-mossberg", "low-pass", |v| loop_poles(v, 1.0).low_pass(v("RF") / v("RG"))),
    case("fliege-notch", "notch", |v| {
        let w0_squared = 1.0 / (v("R1") * v("R3") * v("C2") * v("C7"));
        let bandwidth = 2.0 / (v("R7") * v("C7"));
        Poles(w0_squared, vec![bandwidth]).biquad(1.0, 1.0, w0_squared, vec![0.5 * bandwidth, -0.5 * bandwidth])
    }),
];

#[test]
fn every_output_has_a_closed_form() {
    assert!(!circuit::library().is_empty());
    for circuit in circuit::library() {
        for output in &circuit.outputs {
            let (id, name) = (circuit.id.as_str(), output.name.as_str());
            let cases = FORMS.iter().filter(|c| c.circuit == id && c.output == name);
            assert_eq!(cases.count(), 1, "{id}, {name}");
        }
    }
}

#[test]
fn both_routes_meet_the_closed_forms() {
    let mut random = Random(0x0123_4567_89ab_cdef);
    for case in FORMS {
        let (circuit, output) = case.find();
        for _ in 0..DRAWS {
            check(case, circuit, output, &random.values(circuit));
        }
    }
}

#[test]
fn ties_leave_the_simpler_forms() {
    let mut random = Random(0x1357_9bdf_0246_8ace);
    for case in TIED_FORMS {
        let (circuit, output) = case.find();
        for _ in 0..DRAWS {
            check(case, circuit, output, &random.tied_values(circuit));
        }
    }
    for circuit in circuit::library().iter().filter(|c| !c.ties.is_empty()) {
        assert!(
            circuit.id == "feed-forward-biquad" || TIED_FORMS.iter().any(|case| case.circuit == circuit.id),
            "{}: no form for tied values",
            circuit.id
        );
    }
}

/// Design relations from the literature: R5 = R2 C1/CF and R6 = RQ RB C1/(RF CF) put the zeros opposite the poles.
#[test]
fn feed_forward_biquad_becomes_an_all_pass() {
    let mut random = Random(0x0f1e_2d3c_4b5a_6978);
    let circuit = circuit::find("feed-forward-biquad").unwrap();
    let output = circuit.output("all-pass").unwrap();
    for _ in 0..DRAWS {
        let mut values = random.tied_values(circuit);
        let v = |name: &str| values[circuit.slot(name).unwrap()];
        let r5 = v("R2") * v("C1") / v("CF");
        let r6 = v("RQ") * v("RB") * v("C1") / (v("RF") * v("CF"));
        let (gain, w0) = (v("CF") / v("C1"), loop_poles(&v, 1.0).0.sqrt());
        values[circuit.slot("R5").unwrap()] = r5;
        values[circuit.slot("R6").unwrap()] = r6;
        for factor in FREQUENCIES {
            let h = circuit::response(circuit, output, &values, w0 * factor).unwrap();
            assert!((h.norm() / gain - 1.0).abs() <= RESPONSE_ERROR, "{h}");
        }
        // Inverting far from f0 and upright at f0: the phase turns once.
        let h = circuit::response(circuit, output, &values, w0).unwrap();
        assert!((h / gain - 1.0).norm() <= RESPONSE_ERROR, "{h}");
    }
}

// ---- comparison ---------------------------------------------------------------------------------------------------

/// Frequencies at which responses are compared, as multiples of f0.
const FREQUENCIES: [f64; 7] = [0.01, 0.3, 0.9, 1.0, 1.2, 4.0, 100.0];

impl Case {
    fn find(&self) -> (&'static Circuit, &'static Output) {
        let circuit = circuit::find(self.circuit).unwrap();
        (circuit, circuit.output(self.output).unwrap())
    }
}

/// Sum of the terms, and sum of their magnitudes.
fn sum(terms: &[f64]) -> (f64, f64) {
    (terms.iter().sum(), terms.iter().map(|term| term.abs()).sum())
}

fn check(case: &Case, circuit: &Circuit, output: &Output, values: &[f64]) {
    let form = (case.form)(&|name| values[circuit.slot(name).unwrap()]);
    check_coefficients(case, output, &form, values);
    check_response(case, circuit, output, &form, values);
}

fn check_coefficients(case: &Case, output: &Output, form: &Form, values: &[f64]) {
    let label = format!("{}, {}", case.circuit, case.output);
    let (numerator, denominator) = output.transfer.coefficients(values);
    let order = form.denominator.len() - 1;
    let lead = denominator[order];
    for (part, expected, got) in
        [("numerator", &form.numerator[..], &numerator), ("denominator", &form.denominator[..], &denominator)]
    {
        for power in 0..expected.len().max(got.len()) {
            let (value, size) = expected.get(power).map_or((0.0, 0.0), |terms| sum(terms));
            let got = got.get(power).map_or(0.0, |coefficient| coefficient / lead);
            assert!(
                (got - value).abs() <= COEFFICIENT_ERROR * size,
                "{label}, {part}, s^{power}: {got:e}, closed form {value:e}, values {values:?}"
            );
        }
    }
}

fn check_response(case: &Case, circuit: &Circuit, output: &Output, form: &Form, values: &[f64]) {
    let label = format!("{}, {}", case.circuit, case.output);
    let order = form.denominator.len() - 1;
    let w0 = sum(&form.denominator[0]).0.powf(1.0 / order as f64);
    for factor in FREQUENCIES {
        let s = Complex64::new(0.0, w0 * factor);
        let evaluate = |coefficients: &[Vec<f64>]| -> (Complex64, f64) {
            let powers = (0..).map(|power| s.powi(power));
            powers.zip(coefficients).fold((Complex64::ZERO, 0.0), |(total, size), (power, terms)| {
                let (value, magnitude) = sum(terms);
                (total + power * value, size + power.norm() * magnitude)
            })
        };
        let (n, size) = evaluate(&form.numerator);
        let (d, _) = evaluate(&form.denominator);
        let got = circuit::response(circuit, output, values, w0 * factor).unwrap();
        assert!(
            (got - n / d).norm() <= RESPONSE_ERROR * size / d.norm(),
            "{label}, {factor} f0: {got}, closed form {}, values {values:?}",
            n / d
        );
    }
}

// ---- inequalities -------------------------------------------------------------------------------------------------

/// A design at which an inequality holds with equality, for Q and the magnitude of the gain.
struct Edge {
    circuit: &'static str,
    /// Q and |gain|
    targets: &'static [(f64, f64)],
    /// slots and values
    design: fn(f64, f64) -> Vec<(&'static str, f64)>,
}

/// w0 of the designs, in rad/s; any other would do.
const W0: f64 = 6283.0;

/// The designs follow from the solutions of the closed forms for the resistances, where the root vanishes.
const EDGES: &[Edge] = &[
    Edge {
        circuit: "sallen-key-low-pass",
        targets: &[(0.6, 1.0), (0.707, 1.0), (5.0, 1.0)],
        design: |q, _| {
            let r = 1e4;
            let (c1, c2) = (2.0 * q / (W0 * r), 0.5 / (q * W0 * r));
            vec![("R1", r), ("R2", r), ("C1", c1), ("C2", c2)]
        },
    },
    Edge {
        circuit: "sallen-key-low-pass-gain",
        targets: &[(0.6, 1.2), (0.707, 3.0), (3.0, 1.1), (5.0, 10.0)],
        design: |q, k| {
            let c1 = 1e-8;
            let c2 = c1 * (k - 1.0 + 0.25 / (q * q));
            let r1 = 2.0 * q / (W0 * c1);
            let r2 = 1.0 / (W0 * W0 * r1 * c1 * c2);
            let (ra, rb) = (1e4, 1e4 * (k - 1.0));
            vec![("R1", r1), ("R2", r2), ("C1", c1), ("C2", c2), ("RA", ra), ("RB", rb)]
        },
    },
    Edge {
        circuit: "multiple-feedback-low-pass",
        targets: &[(0.6, 1.0), (0.707, 10.0), (5.0, 0.2)],
        design: |q, h| {
            let c2 = 1e-9;
            let c1 = 4.0 * q * q * (1.0 + h) * c2;
            let r2 = 2.0 * q * (1.0 + h) / (W0 * c1);
            let r3 = 1.0 / (W0 * W0 * r2 * c1 * c2);
            vec![("R1", r2 / h), ("R2", r2), ("R3", r3), ("C1", c1), ("C2", c2)]
        },
    },
    Edge {
        circuit: "multiple-feedback-band-pass",
        targets: &[(0.707, 1.0), (1.0, 10.0), (5.0, 40.0)],
        design: |q, h| {
            let c1 = 1e-8;
            let c2 = c1 * (h / (q * q) - 1.0);
            let r1 = q / (h * W0 * c1);
            let r3 = q * (1.0 / c1 + 1.0 / c2) / W0;
            // R2 is absent at equality
            let r2 = 1e9 * r1;
            vec![("R1", r1), ("R2", r2), ("R3", r3), ("C1", c1), ("C2", c2)]
        },
    },
];

/// Q and |gain| from the coefficients of a second-order low-pass, high-pass or band-pass; `None` where the poles do not
/// lie in the left half plane.
fn q_and_gain(output: &Output, values: &[f64]) -> Option<(f64, f64)> {
    let (n, d) = output.transfer.coefficients(values);
    let gain = n.iter().zip(&d).map(|(n, d)| (n / d).abs()).fold(0.0, f64::max);
    let q = (d[0] / d[2]).sqrt() / (d[1] / d[2]);
    (q > 0.0).then_some((q, gain))
}

/// How much larger the larger side of an inequality is: at least 1 where it holds, 1 at equality.
/// Infinite where the bound is met by any ratio.
fn slack(need: &Need, values: &[f64], q: f64, gain: f64) -> f64 {
    let product = |slots: &[usize]| slots.iter().map(|&slot| values[slot]).product::<f64>();
    let ratio = product(&need.above) / product(&need.below);
    let bound = need.bound(q, gain);
    match need.at_least {
        true if bound <= 0.0 => f64::INFINITY,
        true => ratio / bound,
        false => bound / ratio,
    }
}

/// The outputs that an inequality speaks of.
fn outputs_of<'a>(circuit: &'a Circuit, need: &'a Need) -> impl Iterator<Item = &'a Output> {
    need.outputs.iter().map(|name| circuit.output(name).unwrap())
}

#[test]
fn every_realisation_meets_the_inequalities() {
    let mut random = Random(0x0246_8ace_1357_9bdf);
    for circuit in circuit::library() {
        for need in &circuit.needs {
            for output in outputs_of(circuit, need) {
                let realised = (0..20_000).filter_map(|_| {
                    let values = random.values(circuit);
                    q_and_gain(output, &values).map(|(q, gain)| (values, q, gain))
                });
                let mut drawn = 0;
                let mut bounded = 0;
                for (values, q, gain) in realised {
                    let slack = slack(need, &values, q, gain);
                    assert!(slack >= 1.0 - 1e-9, "{}, Q {q}, gain {gain}: {slack}, {values:?}", circuit.id);
                    drawn += 1;
                    bounded += usize::from(slack.is_finite());
                }
                assert!(drawn > 1000 && bounded > 100, "{}: {bounded} of {drawn}", circuit.id);
            }
        }
    }
}

#[test]
fn inequalities_are_tight() {
    for circuit in circuit::library().iter().filter(|c| !c.needs.is_empty()) {
        assert!(EDGES.iter().any(|edge| edge.circuit == circuit.id), "{}: no design at equality", circuit.id);
    }
    for edge in EDGES {
        let circuit = circuit::find(edge.circuit).unwrap();
        assert!(!circuit.needs.is_empty(), "{}: no inequality", circuit.id);
        for (need, &(q, gain)) in circuit.needs.iter().flat_map(|need| edge.targets.iter().map(move |t| (need, t))) {
            let label = format!("{}, Q {q}, gain {gain}", circuit.id);
            let mut values = vec![f64::NAN; circuit.slots.len()];
            for (name, value) in (edge.design)(q, gain) {
                values[circuit.slot(name).unwrap()] = value;
            }
            for output in outputs_of(circuit, need) {
                // 1e-6 because R2 of the band-pass is only nearly absent.
                let (realised_q, realised_gain) = q_and_gain(output, &values).unwrap();
                assert!((realised_q / q - 1.0).abs() < 1e-6, "{label}: Q {realised_q}");
                assert!((realised_gain / gain - 1.0).abs() < 1e-6, "{label}: gain {realised_gain}");
                let slack = slack(need, &values, q, gain);
                assert!((slack - 1.0).abs() < 0.01, "{label}: {slack}");
            }
        }
    }
}

// ---- op-amp inputs ------------------------------------------------------------------------------------------------

/// Determinant of the nodal equations with op-amps of the gain wt/s: its zeros in s are the natural frequencies.
fn nodal_determinant(circuit: &Circuit, output: &Output, values: &[f64], wt: f64, s: Complex64) -> Complex64 {
    let size = circuit.nodes.len() - 2;
    let unknown = |node: usize| node.checked_sub(2);
    let mut matrix = vec![vec![Complex64::ZERO; size]; size];
    for slot in output.filled(circuit) {
        let admittance = match circuit.slots[slot].kind {
            Kind::Resistor => Complex64::from(1.0 / values[slot]),
            Kind::Capacitor => s * values[slot],
        };
        let [a, b] = circuit.slots[slot].nodes.map(unknown);
        for (here, there) in [(a, b), (b, a)] {
            let Some(row) = here else { continue };
            matrix[row][row] += admittance;
            there.into_iter().for_each(|column| matrix[row][column] -= admittance);
        }
    }
    // The output of an op-amp supplies any current: its own equation takes the place of the current law.
    for op_amp in &circuit.op_amps {
        let row = unknown(op_amp.out).unwrap();
        matrix[row].fill(Complex64::ZERO);
        matrix[row][row] += s / wt;
        unknown(op_amp.plus).into_iter().for_each(|column| matrix[row][column] -= 1.0);
        unknown(op_amp.minus).into_iter().for_each(|column| matrix[row][column] += 1.0);
    }
    let mut determinant = Complex64::ONE;
    for k in 0..size {
        let pivot = (k..size).max_by(|&a, &b| matrix[a][k].norm().total_cmp(&matrix[b][k].norm())).unwrap();
        if pivot != k {
            matrix.swap(pivot, k);
            determinant = -determinant;
        }
        let lead = matrix[k].clone();
        determinant *= lead[k];
        for row in &mut matrix[k + 1..] {
            let factor = row[k] / lead[k];
            row.iter_mut().zip(&lead).for_each(|(entry, above)| *entry -= factor * above);
        }
    }
    determinant
}

/// Natural frequencies in the right half plane, by the principle of the argument: from w = 0 to infinity each of the
/// left half plane turns the determinant by +90 degrees on average, each of the right by -90 degrees.
fn growing_modes(circuit: &Circuit, output: &Output, w0: f64, values: &[f64]) -> i64 {
    let wt = 1e3 * w0;
    let at = |decade: f64| {
        let s = Complex64::new(0.0, w0 * 10f64.powf(decade));
        nodal_determinant(circuit, output, values, wt, s)
    };
    let steps = (0..=3000).map(|step| at(f64::from(step) / 200.0 - 5.0));
    let (from, to) = (steps.clone(), steps.skip(1));
    let turn: f64 = from.zip(to).map(|(a, b)| (b / a).arg()).sum();
    let order = (at(10.0).norm() / at(9.0).norm()).log10();
    let surplus = turn / std::f64::consts::FRAC_PI_2;
    let growing = (order - surplus) / 2.0;
    assert!((growing - growing.round()).abs() < 0.01, "{}: {order}, {surplus}", circuit.id);
    growing.round() as i64
}

/// Ideal op-amps do not tell + from -, real ones do: with a bandwidth of 1000 f0 each circuit must settle, and it must
/// not once the inputs of any one op-amp are exchanged.
#[test]
fn op_amp_inputs_are_the_right_way_round() {
    for circuit in circuit::library() {
        let equal = |slot: &circuit::Slot| if slot.kind == Kind::Resistor { 1e4 } else { 1e-8 };
        let values: Vec<f64> = circuit.slots.iter().map(equal).collect();
        for output in &circuit.outputs {
            let label = format!("{}, {}", circuit.id, output.name);
            assert_eq!(growing_modes(circuit, output, 1e4, &values), 0, "{label}");
            for k in 0..circuit.op_amps.len() {
                let mut exchanged = circuit.clone();
                let op_amp = &mut exchanged.op_amps[k];
                (op_amp.plus, op_amp.minus) = (op_amp.minus, op_amp.plus);
                assert!(growing_modes(&exchanged, output, 1e4, &values) > 0, "{label}, {}", circuit.op_amps[k].name);
            }
        }
    }
}

// ---- values -------------------------------------------------------------------------------------------------------

/// Pseudo-random numbers from a fixed seed: the xorshift64* generator (S. Vigna, An Experimental Exploration of
/// Marsaglia's xorshift Generators, Scrambled, 2016; from memory).
struct Random(u64);

impl Random {
    /// Uniform in [0, 1).
    fn unit(&mut self) -> f64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        let bits = self.0.wrapping_mul(0x2545_f491_4f6c_dd1d) >> 11;
        bits as f64 / (1u64 << 53) as f64
    }

    /// A value for each slot, log-uniform: resistors 1 kΩ to 100 kΩ, capacitors 1 nF to 100 nF.
    fn values(&mut self, circuit: &Circuit) -> Vec<f64> {
        let smallest = |kind| match kind {
            Kind::Resistor => 1e3,
            Kind::Capacitor => 1e-9,
        };
        circuit.slots.iter().map(|slot| smallest(slot.kind) * 100f64.powf(self.unit())).collect()
    }

    /// The same, with the ties of the circuit kept.
    fn tied_values(&mut self, circuit: &Circuit) -> Vec<f64> {
        let mut values = self.values(circuit);
        for tie in &circuit.ties {
            for slot in tie {
                values[*slot] = values[tie[0]];
            }
        }
        values
    }
}
