//! Poles and zeros of the elliptic approximation (W. Cauer, 1931), from theta functions.
//!
//! With the nome q1 of k1 = ε_p/ε_s the degree equation n K'/K = K1'/K1 is solved by q = q1^(1/n). The Jacobi functions
//! with quotients of theta series in q (DLMF, chapter 20 and section 22.2), which converge fast and do not cancel; the
//! elliptic integrals with Carlson's R_F by duplication (B. C. Carlson, Numerical Algorithms 10, 1995).

use std::f64::consts::PI;

use num_complex::Complex64;

use super::prototype::{Pole, Prototype};

/// Carlson's symmetric elliptic integral of the first kind, at most one argument zero.
fn carlson_rf(mut x: f64, mut y: f64, mut z: f64) -> f64 {
    loop {
        let mean = (x + y + z) / 3.0;
        let [dx, dy, dz] = [x, y, z].map(|t| 1.0 - t / mean);
        // The error of the series below is of the sixth order in these.
        if dx.abs().max(dy.abs()).max(dz.abs()) < 1e-3 {
            let (e2, e3) = (dx * dy - dz * dz, dx * dy * dz);
            return (1.0 - e2 / 10.0 + e3 / 14.0 + e2 * e2 / 24.0 - 3.0 * e2 * e3 / 44.0) / mean.sqrt();
        }
        let (rx, ry, rz) = (x.sqrt(), y.sqrt(), z.sqrt());
        let lambda = rx * ry + ry * rz + rz * rx;
        (x, y, z) = ((x + lambda) / 4.0, (y + lambda) / 4.0, (z + lambda) / 4.0);
    }
}

/// Terms of the theta series: q^400 is nothing for every nome that occurs.
const TERMS: i32 = 20;

/// θ2(z, q) and θ3(z, q).
fn thetas(z: Complex64, q: f64) -> (Complex64, Complex64) {
    let mut two = Complex64::new(0.0, 0.0);
    let mut three = Complex64::new(1.0, 0.0);
    for m in 0..TERMS {
        let half = f64::from(m) + 0.5;
        two += 2.0 * q.powf(half * half) * (f64::from(2 * m + 1) * z).cos();
        if m > 0 {
            three += 2.0 * q.powi(m * m) * (f64::from(2 * m) * z).cos();
        }
    }
    (two, three)
}

/// The prototype with the edge of the ripple band at 1, and the frequency from which the attenuation holds.
///
/// `ripple` and `attenuation` in dB, 0 < ripple < attenuation, `order` at least 1.
pub(super) fn prototype(order: usize, ripple: f64, attenuation: f64) -> Prototype {
    let excess = |db: f64| (db * std::f64::consts::LN_10 / 10.0).exp_m1();
    let (pass, stop) = (excess(ripple), excess(attenuation));
    // ε_p² and k1² = ε_p²/ε_s².
    let k1k1 = pass / stop;
    let n = order as f64;
    let (quarter, complement) = (carlson_rf(0.0, 1.0 - k1k1, 1.0), carlson_rf(0.0, k1k1, 1.0));
    let q = (-PI * complement / (quarter * n)).exp();
    let (two, three) = thetas(Complex64::new(0.0, 0.0), q);
    let (two, three) = (two.re, three.re);
    let stop_edge = (three / two).powi(2);
    // sn(j v0 n K1, k1) = j/ε_p, so sc(v0 n K1, k1') = 1/ε_p.
    let v0 = carlson_rf(pass, pass + k1k1, 1.0 + pass) / (n * quarter);
    let cd = |z: Complex64| {
        let (a, b) = thetas(z, q);
        a / b * (three / two)
    };
    let mut poles = Vec::new();
    let mut zeros = Vec::new();
    for i in 1..=order / 2 {
        let u = (2 * i - 1) as f64 / n;
        zeros.push(stop_edge / cd(Complex64::new(PI * u / 2.0, 0.0)).re);
        let root = Complex64::i() * cd(Complex64::new(PI * u / 2.0, -PI * v0 / 2.0));
        poles.push(Pole::Pair(Complex64::new(-root.re.abs(), root.im.abs())));
    }
    if order % 2 == 1 {
        let root = Complex64::i() * cd(Complex64::new(PI / 2.0, -PI * v0 / 2.0));
        poles.push(Pole::Real(-root.re.abs()));
    }
    let peak_db = if order.is_multiple_of(2) { ripple } else { 0.0 };
    Prototype { poles, zeros, peak_db, stop_edge: Some(stop_edge) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn complete_integrals_are_those_of_the_tables() {
        // K(k²): Abramowitz & Stegun, table 17.1: m = 0.5 and m = 0.99.
        for (m, k) in [(0.5, 1.854_074_677_301_372), (0.99, 3.695_637_362_989_874_7), (0.0, PI / 2.0)] {
            assert!((carlson_rf(0.0, 1.0 - m, 1.0) / k - 1.0).abs() < 1e-15, "{m}");
        }
    }

    #[test]
    fn the_band_is_equal_ripple() {
        for order in 1..=12 {
            for (ripple, attenuation) in [(0.5, 40.0), (1e-3, 80.0), (3.0, 20.0), (0.1, 120.0)] {
                let p = prototype(order, ripple, attenuation);
                let label = format!("{order} {ripple} {attenuation}");
                // Rounding of a pole shows in the level in proportion to how near it lies to the axis.
                let nearest = p.poles.iter().map(|pole| match pole {
                    Pole::Pair(p) => -p.re,
                    Pole::Reals(a, _) | Pole::Real(a) => -a,
                });
                let allowed = (1e-14 / nearest.fold(f64::INFINITY, f64::min)).max(1e-9);
                assert!((p.attenuation(1.0) - ripple).abs() < allowed, "{label}");
                let edge = p.stop_edge.unwrap_or(f64::NAN);
                assert!((p.attenuation(edge) - attenuation).abs() < 1e-7, "{label} {}", p.attenuation(edge));
                let (mut inside, mut outside) = (0.0f64, f64::INFINITY);
                for step in 0..=2000 {
                    let t = f64::from(step) / 2000.0;
                    inside = inside.max(p.attenuation(t));
                    outside = outside.min(p.attenuation(edge * (1.0 / (1.0 - 0.999 * t))));
                    assert!(p.attenuation(t) > -allowed, "{label} {t}");
                }
                assert!(inside < ripple + allowed && outside > attenuation - 1e-7, "{label} {inside} {outside}");
            }
        }
    }
}
