//! Published closed forms, for what the response at single frequencies does not show.

use roundwell::search::SectionProblem;
use roundwell::target::{Biquad, Section, Shape};

/// Published closed forms (the sources that the circuit files name), for what frequencies alone do not show: the
/// coefficients of N(s)/D(s) in ascending powers of s, with 1 before s² of D.
pub fn closed_form(section: &SectionProblem, ohms_farads: &[f64]) -> Option<Biquad> {
    let v = |name: &str| ohms_farads[section.circuit.slot(name).unwrap()];
    let output = section.output().name.as_str();
    let den = |w0_squared: f64, bandwidth: f64| [w0_squared, bandwidth, 1.0];
    Some(match section.circuit.id.as_str() {
        "sallen-key-low-pass" => {
            let w0w0 = 1.0 / (v("R1") * v("R2") * v("C1") * v("C2"));
            let bandwidth = (1.0 / v("R1") + 1.0 / v("R2")) / v("C1");
            Biquad { num: [w0w0, 0.0, 0.0], den: den(w0w0, bandwidth) }
        }
        "sallen-key-low-pass-gain" => {
            let gain = 1.0 + v("RB") / v("RA");
            let w0w0 = 1.0 / (v("R1") * v("R2") * v("C1") * v("C2"));
            let bandwidth = (1.0 / v("R1") + 1.0 / v("R2")) / v("C1") - (gain - 1.0) / (v("R2") * v("C2"));
            Biquad { num: [gain * w0w0, 0.0, 0.0], den: den(w0w0, bandwidth) }
        }
        "multiple-feedback-low-pass" => {
            let w0w0 = 1.0 / (v("R2") * v("R3") * v("C1") * v("C2"));
            let bandwidth = (1.0 / v("R1") + 1.0 / v("R2") + 1.0 / v("R3")) / v("C1");
            Biquad { num: [-w0w0 * v("R2") / v("R1"), 0.0, 0.0], den: den(w0w0, bandwidth) }
        }
        "multiple-feedback-band-pass" => {
            let w0w0 = (1.0 / v("R1") + 1.0 / v("R2")) / (v("R3") * v("C1") * v("C2"));
            let bandwidth = (1.0 / v("C1") + 1.0 / v("C2")) / v("R3");
            Biquad { num: [0.0, -1.0 / (v("R1") * v("C1")), 0.0], den: den(w0w0, bandwidth) }
        }
        "tow-thomas" => {
            let w0w0 = v("RB") / (v("RA") * v("RF") * v("R2") * v("C1") * v("C2"));
            let bandwidth = 1.0 / (v("RQ") * v("C1"));
            let low_pass = w0w0 * v("RF") / v("RG");
            let num = match output {
                "low-pass" => [low_pass * v("RA") / v("RB"), 0.0, 0.0],
                "low-pass-inverted" => [-low_pass, 0.0, 0.0],
                _ => [0.0, -1.0 / (v("RG") * v("C1")), 0.0],
            };
            Biquad { num, den: den(w0w0, bandwidth) }
        }
        "state-variable" => {
            let w0w0 = v("R3") / (v("R4") * v("R1") * v("R2") * v("C1") * v("C2"));
            let divider = v("R5") / (v("R5") + v("R6"));
            let bandwidth = (1.0 + v("R3") / v("R4")) * divider / (v("R1") * v("C1"));
            let k = (1.0 + v("R3") / v("R4")) * (1.0 - divider);
            let num = match output {
                "high-pass" => [0.0, 0.0, k],
                "band-pass" => [0.0, -k / (v("R1") * v("C1")), 0.0],
                _ => [k / (v("R1") * v("R2") * v("C1") * v("C2")), 0.0, 0.0],
            };
            Biquad { num, den: den(w0w0, bandwidth) }
        }
        "feed-forward-biquad" if output == "notch" => {
            let ratio = v("RB") / v("RA");
            let w0w0 = ratio / (v("RF") * v("R2") * v("C1") * v("C2"));
            let num = [-ratio / (v("RF") * v("R5") * v("C1") * v("C2")), 0.0, -v("CF") / v("C1")];
            Biquad { num, den: den(w0w0, 1.0 / (v("RQ") * v("C1"))) }
        }
        "fliege-notch" => {
            let w0w0 = v("R4") / (v("R6") * v("R1") * v("R3") * v("C2") * v("C7"));
            let bandwidth = (1.0 / v("R7") + 1.0 / v("R8")) / v("C7");
            let middle = (1.0 / v("R7") - v("R4") / (v("R6") * v("R8"))) / v("C7");
            Biquad { num: [w0w0, middle, 1.0], den: den(w0w0, bandwidth) }
        }
        _ => return None,
    })
}

/// The misses in w0, Q, gain and wz of a closed form.
pub fn misses(target: &Section, h: &Biquad) -> [f64; 4] {
    let miss = |x: f64, ideal: f64| (x / ideal - 1.0).abs();
    let w0 = h.den[0].sqrt();
    let gain = match target.shape {
        Shape::HighPass => h.num[2],
        Shape::BandPass => h.num[1] / h.den[1],
        Shape::Notch if target.wz.unwrap() < target.w0 => h.num[2],
        _ => h.num[0] / h.den[0],
    };
    let wz = target.wz.map_or(0.0, |wz| miss((h.num[0] / h.num[2]).sqrt(), wz));
    [miss(w0, target.w0), miss(w0 / h.den[1], target.q.unwrap()), miss(gain, target.gain), wz]
}
