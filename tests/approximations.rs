//! Poles, zeros and orders against scipy.signal and published tables, and what every filter promises.

#![allow(clippy::unwrap_used, clippy::approx_constant, clippy::excessive_precision)]

use num_complex::Complex64;
use roundwell::target::{
    Approximation, Band, Design, DesignError, EdgeAt, Parts, Pole, PoleFigures, Reference, Specification, StopBand,
    Zeros,
};

/// A low-pass with its edge at 1 rad/s.
fn low_pass(approximation: Approximation) -> Specification {
    Specification {
        approximation,
        band: Band::LowPass(1.0),
        edge_at: EdgeAt::HalfPower,
        ripple: None,
        attenuation: None,
        reference: Reference::Peak,
        order: Some(1),
        stop_band: None,
    }
}

/// The same with the figures that the approximation needs.
fn usual(approximation: Approximation, order: usize) -> Specification {
    let ripple = approximation.has_ripple().then_some(0.5);
    Specification {
        ripple,
        attenuation: approximation.has_attenuation().then_some(60.0),
        edge_at: if ripple.is_some() { EdgeAt::Ripple } else { EdgeAt::HalfPower },
        order: Some(order),
        ..low_pass(approximation)
    }
}

/// Upper poles by rising frequency of their imaginary parts, and zeros by rising frequency.
fn roots(design: &Design) -> (Vec<Complex64>, Vec<f64>) {
    let pair = |pole: &Pole| match pole {
        Pole::Pair(p) => Some(*p),
        _ => None,
    };
    let mut poles: Vec<Complex64> = design.roots.poles.iter().filter_map(pair).collect();
    poles.sort_by(|a, b| a.im.total_cmp(&b.im));
    let mut zeros = design.roots.zeros.clone();
    zeros.sort_by(f64::total_cmp);
    (poles, zeros)
}

/// The largest relative distance between lists of the same length.
fn largest_miss(found: &(Vec<Complex64>, Vec<f64>), poles: &[(f64, f64)], zeros: &[f64]) -> f64 {
    assert_eq!((found.0.len(), found.1.len()), (poles.len(), zeros.len()));
    let of_poles = found.0.iter().zip(poles).map(|(a, &(re, im))| (a / Complex64::new(re, im) - 1.0).norm());
    let of_zeros = found.1.iter().zip(zeros).map(|(a, b)| (a / b - 1.0).abs());
    of_poles.chain(of_zeros).fold(0.0, f64::max)
}

/// Order 12, edge at 1 rad/s: scipy.signal 1.17.1, butter, cheby1, cheby2, ellip and bessel (norm="mag"), analog.
#[test]
fn poles_and_zeros_of_order_twelve_are_those_of_scipy() {
    let asked = Specification {
        ripple: None,
        attenuation: None,
        edge_at: EdgeAt::HalfPower,
        order: Some(12),
        ..low_pass(Approximation::Butterworth)
    };
    let poles = [
        (-0.9914448613738104, 0.13052619222005157),
        (-0.9238795325112867, 0.3826834323650898),
        (-0.7933533402912353, 0.6087614290087205),
        (-0.6087614290087207, 0.7933533402912352),
        (-0.38268343236508984, 0.9238795325112867),
        (-0.13052619222005193, 0.9914448613738104),
    ];
    let miss = largest_miss(&roots(&asked.design().unwrap()), &poles, &[]);
    assert!(miss < 1e-12, "Butterworth {miss:e}");
    let asked = Specification {
        ripple: Some(0.5),
        attenuation: None,
        edge_at: EdgeAt::Ripple,
        order: Some(12),
        ..low_pass(Approximation::Chebyshev)
    };
    let poles = [
        (-0.14711433842815863, 0.13195531486332296),
        (-0.13708873938221888, 0.38687340794850184),
        (-0.11772076929723439, 0.6154267176205259),
        (-0.09033032332741295, 0.8020397135274493),
        (-0.056784015100745704, 0.9339950283907723),
        (-0.01936797008498451, 1.0023001255690276),
    ];
    let miss = largest_miss(&roots(&asked.design().unwrap()), &poles, &[]);
    assert!(miss < 1e-12, "Chebyshev {miss:e}");
    let asked = Specification {
        ripple: None,
        attenuation: Some(60.0),
        edge_at: EdgeAt::Attenuation,
        order: Some(12),
        ..low_pass(Approximation::InverseChebyshev)
    };
    let poles = [
        (-1.4127159421757154, 0.3318867142691843),
        (-1.0345110691833508, 0.7646547232584797),
        (-0.061297926483373726, 0.8308499542677866),
        (-0.19745133813254992, 0.8506319394679617),
        (-0.37885494623054977, 0.8810456419851715),
        (-0.647990529893181, 0.8872684747333371),
    ];
    let miss = largest_miss(
        &roots(&asked.design().unwrap()),
        &poles,
        &[
            1.0086289605801528,
            1.082392200292394,
            1.2604724140102646,
            1.6426796317045815,
            2.613125929752753,
            7.66129757554039,
        ],
    );
    assert!(miss < 1e-12, "InverseChebyshev {miss:e}");
    let asked = Specification {
        ripple: Some(0.5),
        attenuation: Some(60.0),
        edge_at: EdgeAt::Ripple,
        order: Some(12),
        ..low_pass(Approximation::Elliptic)
    };
    let poles = [
        (-0.2871141061183149, 0.282646378976226),
        (-0.16796329129206455, 0.6982836041740602),
        (-0.07181997054729576, 0.892044054453008),
        (-0.026810831740208714, 0.9660134040025612),
        (-0.009217140400529704, 0.9921850524724226),
        (-0.0022006035494954233, 1.0003842809101442),
    ];
    let miss = largest_miss(
        &roots(&asked.design().unwrap()),
        &poles,
        &[
            1.0152938725097995,
            1.025393352960266,
            1.0586395678472347,
            1.16197645925979,
            1.526992550749804,
            3.902928940851906,
        ],
    );
    assert!(miss < 1e-12, "Elliptic {miss:e}");
    let asked = Specification {
        ripple: None,
        attenuation: None,
        edge_at: EdgeAt::HalfPower,
        order: Some(12),
        ..low_pass(Approximation::Bessel)
    };
    let poles = [
        (-2.0846445069315775, 0.21916153518975698),
        (-2.019945933075123, 0.6589965007172213),
        (-1.8856496197318504, 1.1038148812152306),
        (-1.6698035888528284, 1.558802700841165),
        (-1.346174680290512, 2.033998508278488),
        (-0.8443788728503965, 2.5571889692029117),
    ];
    let miss = largest_miss(&roots(&asked.design().unwrap()), &poles, &[]);
    assert!(miss < 1e-12, "Bessel {miss:e}");
}

/// scipy.signal 1.17.1: ellip(3, 0.5, 40, [0.9, 1.1], "bandpass") and cheby1(3, 1, [0.5, 2], "bandstop"), analog.
#[test]
fn band_pass_and_band_stop_are_those_of_scipy() {
    let asked = Specification {
        band: Band::BandPass(0.9, 1.1),
        ripple: Some(0.5),
        attenuation: Some(40.0),
        edge_at: EdgeAt::Ripple,
        order: Some(3),
        ..low_pass(Approximation::Elliptic)
    };
    let poles = [
        (-0.026039860096488645, 0.8968429554678858),
        (-0.0659093088079849, 0.9928020764545438),
        (-0.03202396249975129, 1.102942376327994),
    ];
    let design = asked.design().unwrap();
    let miss = largest_miss(&roots(&design), &poles, &[0.7319436349802255, 1.3525631656414991]);
    assert!(miss < 1e-12, "{miss:e}");
    assert_eq!(design.roots.at_origin, 1);

    let asked = Specification {
        band: Band::BandStop(0.5, 2.0),
        ripple: Some(1.0),
        edge_at: EdgeAt::Ripple,
        order: Some(3),
        ..low_pass(Approximation::Chebyshev)
    };
    let poles = [(-0.07580356374593444, 0.4994974390638849), (-0.29698485287540205, 1.956941944698266)];
    let design = asked.design().unwrap();
    let miss = largest_miss(&roots(&design), &poles, &[1.0, 1.0, 1.0]);
    assert!(miss < 1e-12, "{miss:e}");
    // The real pole of the prototype makes two real poles here.
    let real = design.roots.poles.iter().find_map(|pole| match pole {
        Pole::Reals(a, b) => Some((a.min(*b), a.max(*b))),
        _ => None,
    });
    let (far, near) = real.unwrap();
    assert!((far / -2.659358415737624 - 1.0).abs() < 1e-12 && (near / -0.37603054709819195 - 1.0).abs() < 1e-12);
}

/// Published section tables, w0 and Q of the pairs and w0 of the real pole: -3 dB at 1 for Butterworth and Bessel, ripple
/// edge at 1 for Chebyshev. Tables of the kind of A. B. Williams and F. J. Taylor, Electronic Filter Design Handbook,
/// recomputed with scipy.signal and checked by closed form.
#[test]
fn section_tables_come_out() {
    type Row<'a> = (Approximation, Option<f64>, usize, &'a [(f64, f64)], Option<f64>);
    let rows: [Row<'_>; 17] = [
        (Approximation::Butterworth, None, 2, &[(1.0, 0.7071)], None),
        (Approximation::Butterworth, None, 3, &[(1.0, 1.0)], Some(1.0)),
        (Approximation::Butterworth, None, 4, &[(1.0, 0.5412), (1.0, 1.3066)], None),
        (Approximation::Butterworth, None, 8, &[(1.0, 0.5098), (1.0, 0.6013), (1.0, 0.9), (1.0, 2.5629)], None),
        (Approximation::Chebyshev, Some(0.5), 2, &[(1.2313, 0.8637)], None),
        (Approximation::Chebyshev, Some(0.5), 3, &[(1.0689, 1.7062)], Some(0.6265)),
        (Approximation::Chebyshev, Some(0.5), 4, &[(0.597, 0.7051), (1.0313, 2.9406)], None),
        (
            Approximation::Chebyshev,
            Some(0.5),
            7,
            &[(0.5039, 1.0916), (0.8227, 2.5755), (1.008, 8.8418)],
            Some(0.2562),
        ),
        (Approximation::Chebyshev, Some(1.0), 3, &[(0.9971, 2.0177)], Some(0.4942)),
        (Approximation::Chebyshev, Some(1.0), 5, &[(0.6552, 1.3988), (0.9941, 5.5564)], Some(0.2895)),
        (
            Approximation::Chebyshev,
            Some(1.0),
            8,
            &[(0.2651, 0.753), (0.5838, 1.9565), (0.8506, 4.2661), (0.9971, 14.2405)],
            None,
        ),
        (Approximation::Bessel, None, 2, &[(1.272, 0.5774)], None),
        (Approximation::Bessel, None, 3, &[(1.4476, 0.691)], Some(1.3227)),
        (Approximation::Bessel, None, 4, &[(1.4302, 0.5219), (1.6034, 0.8055)], None),
        (Approximation::Bessel, None, 5, &[(1.5563, 0.5635), (1.7554, 0.9165)], Some(1.5023)),
        (Approximation::Bessel, None, 7, &[(1.7164, 0.5324), (1.8224, 0.6608), (2.0495, 1.1263)], Some(1.6844)),
        (
            Approximation::Bessel,
            None,
            8,
            &[(1.7785, 0.506), (1.8321, 0.5596), (1.9532, 0.7109), (2.1887, 1.2257)],
            None,
        ),
    ];
    for (approximation, ripple, order, pairs, real) in rows {
        let edge_at = if ripple.is_some() { EdgeAt::Ripple } else { EdgeAt::HalfPower };
        let design =
            Specification { ripple, edge_at, order: Some(order), ..low_pass(approximation) }.design().unwrap();
        check_table(&format!("{approximation:?} {order}"), &design, pairs, real);
    }
}

fn check_table(label: &str, design: &Design, pairs: &[(f64, f64)], real: Option<f64>) {
    let mut parts = Parts::new(&design.roots);
    parts.poles.sort_by(|a, b| a.q.unwrap().total_cmp(&b.q.unwrap()));
    assert_eq!(parts.poles.len(), pairs.len(), "{label}");
    for (PoleFigures { w0, q }, (w0_table, q_table)) in parts.poles.iter().zip(pairs) {
        assert!((w0 - w0_table).abs() < 6e-5 && (q.unwrap() - q_table).abs() < 6e-5, "{label} {w0} {q:?}");
    }
    let single = parts.first_order.first().map(|(poles, _)| poles.w0);
    assert_eq!(single.is_some(), real.is_some(), "{label}");
    assert!(single.zip(real).is_none_or(|(a, b)| (a - b).abs() < 6e-5), "{label} {single:?}");
}

/// Elliptic, 0.5 dB and 40 dB, ripple edge at 1, in the order w0, Q, real pole, zeros, start of the stop band: from
/// scipy.signal 1.17.1 (ellip), the last where the response of its poles and zeros first reaches 40 dB.
#[test]
fn elliptic_sections_come_out() {
    type Row<'a> = (usize, &'a [(f64, f64)], Option<f64>, &'a [f64], f64);
    let rows: [Row<'_>; 4] = [
        (2, &[(1.2335, 0.8699)], None, &[11.9846], 8.489209256157),
        (3, &[(1.0706, 1.8439)], Some(0.6591), &[3.1031], 2.711466110592),
        (5, &[(0.7995, 1.4499), (1.0144, 7.6748)], Some(0.47), &[1.3126, 1.88], 1.272634807018),
        (
            8,
            &[(0.5391, 0.7314), (0.8552, 2.8791), (0.9722, 11.8538), (1.0017, 62.9044)],
            None,
            &[1.0337, 1.0788, 1.2977, 3.0146],
            1.029867970076,
        ),
    ];
    for (order, pairs, real, zeros, stop) in rows {
        let asked = Specification { attenuation: Some(40.0), ..usual(Approximation::Elliptic, order) };
        let design = asked.design().unwrap();
        check_table(&format!("elliptic {order}"), &design, pairs, real);
        let found = roots(&design).1;
        assert!(found.iter().zip(zeros).all(|(a, b)| (a - b).abs() < 6e-5), "{found:?}");
        let found = design.prototype.stop_edge.unwrap();
        assert!((found - stop).abs() < 1e-11, "{order} {found}");
    }
}

/// The transfer function's magnitude straight from the poles and zeros, 1 at the peak of the pass band.
fn magnitude(design: &Design, band: Band, w: f64) -> f64 {
    let s = Complex64::new(0.0, w);
    // Relative to the frequency of the reference, factor by factor.
    let at = |s: Complex64| -> f64 {
        let mut h = 1.0;
        for pole in &design.roots.poles {
            h /= match *pole {
                Pole::Pair(p) => ((s - p) * (s - p.conj())).norm(),
                Pole::Reals(a, b) => ((s - a) * (s - b)).norm(),
                Pole::Real(a) => (s - a).norm(),
            };
        }
        h * design.roots.zeros.iter().map(|z| (s * s + z * z).norm()).product::<f64>()
            * s.norm().powi(design.roots.at_origin as i32)
    };
    let reference = match band {
        Band::LowPass(edge) => edge * 1e-9,
        Band::HighPass(edge) => edge * 1e9,
        Band::BandPass(..) => band.centre(),
        Band::BandStop(low, _) => low * 1e-9,
    };
    at(s) / at(Complex64::new(0.0, reference)) / 10f64.powf(design.prototype.peak_db / 20.0)
}

const BANDS: [Band; 4] =
    [Band::LowPass(2.0), Band::HighPass(2.0), Band::BandPass(0.8, 3.0), Band::BandStop(0.8, 3.0)];

fn edges(band: Band) -> Vec<f64> {
    match band {
        Band::LowPass(edge) | Band::HighPass(edge) => vec![edge],
        Band::BandPass(low, high) | Band::BandStop(low, high) => vec![low, high],
    }
}

/// Every approximation, response and order keeps what is promised at its edges, whatever the level and the reference.
#[test]
fn edges_lie_where_they_are_promised() {
    let half_power = 10.0 * 2f64.log10();
    let mut checked = 0;
    for approximation in Approximation::ALL {
        for band in BANDS {
            for order in (1..=10).filter(|order| approximation.has_order(*order)) {
                for reference in [Reference::Peak, Reference::Dc] {
                    for (edge_at, level) in [
                        (EdgeAt::HalfPower, half_power),
                        (EdgeAt::Ripple, 0.5),
                        (EdgeAt::Decibels(1.0), 1.0),
                        (EdgeAt::Decibels(20.0), 20.0),
                        (EdgeAt::Attenuation, 60.0),
                    ] {
                        let asked = Specification {
                            band,
                            edge_at,
                            reference,
                            ripple: Some(0.5),
                            attenuation: Some(60.0),
                            ..usual(approximation, order)
                        };
                        let design = asked.design().unwrap();
                        let under = match reference {
                            Reference::Dc if edge_at != EdgeAt::Ripple => design.prototype.peak_db,
                            _ => 0.0,
                        };
                        for edge in edges(band) {
                            let db = -20.0 * magnitude(&design, band, edge).log10();
                            let label = format!("{approximation:?} {band:?} {order} {edge_at:?} {reference:?}: {db}");
                            assert!((db - level - under).abs() < 1e-6, "{label}");
                            checked += 1;
                        }
                    }
                }
            }
        }
    }
    assert!(checked > 3000, "{checked}");
}

/// Orders from scipy.signal 1.17.1: buttord, cheb1ord, cheb2ord, ellipord (1, ws, ripple, attenuation, analog=True).
#[test]
fn least_orders_are_those_of_scipy() {
    let names = [
        Approximation::Butterworth,
        Approximation::Chebyshev,
        Approximation::InverseChebyshev,
        Approximation::Elliptic,
    ];
    for (stop, attenuation, ripple, orders) in
        [(2.0, 40.0, 1.0, [8, 5, 5, 4]), (1.2, 60.0, 0.5, [44, 14, 14, 8]), (3.0, 80.0, 3.0, [9, 6, 6, 5])]
    {
        for (approximation, order) in names.into_iter().zip(orders) {
            let asked = Specification {
                ripple: Some(ripple),
                attenuation: Some(attenuation),
                edge_at: EdgeAt::Ripple,
                order: None,
                stop_band: Some(StopBand { edges: (stop, stop), attenuation }),
                ..low_pass(approximation)
            };
            match asked.design() {
                Ok(design) => assert_eq!(design.order, order, "{approximation:?} {stop}"),
                Err(DesignError::Attenuation { order: highest, .. }) => {
                    assert!(order > highest, "{approximation:?} {stop}");
                }
                Err(error) => panic!("{error}"),
            }
        }
    }
}

/// The least order meets the specification everywhere in the stop band, and the next smaller one does not.
#[test]
fn the_least_order_meets_what_is_asked_and_no_smaller_one_does() {
    let stops = [
        (Band::LowPass(1.0), (2.3, 2.3)),
        (Band::HighPass(1.0), (0.4, 0.4)),
        (Band::BandPass(0.8, 1.2), (0.55, 1.9)),
        (Band::BandStop(0.5, 2.0), (0.8, 1.3)),
    ];
    for approximation in Approximation::ALL {
        for (band, edges) in stops {
            for reference in [Reference::Peak, Reference::Dc] {
                let attenuation =
                    if matches!(approximation, Approximation::Bessel | Approximation::Gaussian) { 5.0 } else { 30.0 };
                let asked = Specification {
                    band,
                    reference,
                    ripple: Some(1.0),
                    edge_at: EdgeAt::Ripple,
                    attenuation: Some(attenuation),
                    order: None,
                    stop_band: Some(StopBand { edges, attenuation }),
                    ..low_pass(approximation)
                };
                let design = asked.design().unwrap();
                let label = format!("{approximation:?} {band:?} {reference:?} order {}", design.order);
                let under = if reference == Reference::Dc { design.prototype.peak_db } else { 0.0 };
                let beyond = |t: f64| match band {
                    Band::LowPass(_) => vec![edges.0 / t],
                    Band::HighPass(_) => vec![edges.0 * t],
                    Band::BandPass(..) => vec![edges.0 * t, edges.1 / t],
                    Band::BandStop(..) => vec![edges.0 * (edges.1 / edges.0).powf(t)],
                };
                for step in 1..=1000 {
                    for w in beyond(f64::from(step) / 1000.0) {
                        let db = -20.0 * magnitude(&design, band, w).log10() - under;
                        assert!(db > attenuation - 1e-6, "{label}: {db} at {w}");
                    }
                }
                assert!(design.attenuation.unwrap() >= attenuation - 1e-9);
                for reached in &design.reached {
                    let db = -20.0 * magnitude(&design, band, *reached).log10() - under;
                    assert!((db - attenuation).abs() < 1e-6, "{label}: {db} where it is reached");
                }
                let Some((smaller, gives)) = design.smaller else { continue };
                assert!(gives < attenuation, "{label}");
                let failed = Specification { order: Some(smaller), ..asked }.design();
                assert!(matches!(failed, Err(DesignError::Attenuation { is_given: true, .. })), "{label}");
            }
        }
    }
}

/// Linkwitz-Riley: low-pass plus high-pass of one edge have magnitude 1 everywhere (the high-pass inverted for orders
/// 2, 6, ...). S. H. Linkwitz, Active Crossover Networks for Noncoincident Drivers, Journal of the AES 24, 1976 (from
/// memory).
#[test]
fn linkwitz_riley_filters_add_up_to_an_all_pass() {
    for order in [2, 4, 6, 8, 12] {
        let asked = |band| Specification {
            band,
            edge_at: EdgeAt::Decibels(20.0 * 2f64.log10()),
            ..usual(Approximation::LinkwitzRiley, order)
        };
        let [low, high] = [Band::LowPass(1.0), Band::HighPass(1.0)].map(|band| asked(band).design().unwrap());
        let value = |design: &Design, w: f64, zeros: i32| {
            let s = Complex64::new(0.0, w);
            let factor = |pole: &Pole| match *pole {
                Pole::Pair(p) => (s - p) * (s - p.conj()),
                Pole::Reals(a, b) => (s - a) * (s - b),
                Pole::Real(a) => s - a,
            };
            s.powi(zeros) / design.roots.poles.iter().map(factor).product::<Complex64>()
        };
        let sign = if order % 4 == 2 { -1.0 } else { 1.0 };
        for w in [0.1, 0.7, 1.0, 1.3, 5.0] {
            let sum = value(&low, w, 0) + sign * value(&high, w, order as i32);
            assert!((sum.norm() - 1.0).abs() < 1e-12, "{order} {w} {sum}");
        }
        assert_eq!(asked(Band::LowPass(1.0)).design().unwrap().order, order);
    }
}

/// The delay of a Bessel filter at DC is 1/edge: minus the derivative of the phase, the sum of -1/p over the poles.
#[test]
fn a_bessel_filter_by_delay_has_that_delay() {
    for order in 1..=24 {
        let asked =
            Specification { band: Band::LowPass(1e3), edge_at: EdgeAt::Delay, ..usual(Approximation::Bessel, order) };
        let delay: f64 = asked
            .design()
            .unwrap()
            .roots
            .poles
            .iter()
            .map(|pole| match *pole {
                Pole::Pair(p) => -2.0 * p.inv().re,
                Pole::Reals(a, b) => -1.0 / a - 1.0 / b,
                Pole::Real(a) => -1.0 / a,
            })
            .sum();
        assert!((delay * 1e3 - 1.0).abs() < 1e-12, "{order} {delay}");
    }
}

/// The Gaussian filter: |H|^2 is the reciprocal of the Taylor series, from its definition.
#[test]
fn a_gaussian_filter_follows_the_taylor_series() {
    for order in 1..=24 {
        let prototype = Approximation::Gaussian.prototype(order, 0.0, 0.0);
        for w in [0.3, 1.0, 2.0, 4.0f64] {
            let (mut sum, mut term) = (1.0, 1.0);
            for k in 1..=order {
                term *= w * w / k as f64;
                sum += term;
            }
            assert!((prototype.attenuation(w) - 10.0 * f64::log10(sum)).abs() < 1e-10, "{order} {w}");
        }
    }
}

#[test]
fn specifications_that_cannot_be_are_refused() {
    let told = |asked: Specification| asked.design().unwrap_err().to_string();
    let asked = usual(Approximation::Butterworth, 4);
    assert!(told(Specification { order: Some(25), ..asked }).contains("orders up to 24 as low-pass"));
    let narrow = Specification { band: Band::BandPass(1.0, 2.0), order: Some(13), ..asked };
    assert!(told(narrow).contains("orders up to 12 as band-pass"));
    assert!(told(usual(Approximation::LinkwitzRiley, 3)).contains("even orders"));
    assert!(told(Specification { ripple: None, ..usual(Approximation::Chebyshev, 3) }).contains("needs the ripple"));
    assert!(told(Specification { order: None, ..asked }).contains("needs an order"));
    let low = Specification { edge_at: EdgeAt::Decibels(0.1), ..usual(Approximation::Chebyshev, 3) };
    assert!(told(low).contains("the ripple band ends only 0.5 dB"));
    let deep = Specification { edge_at: EdgeAt::Decibels(70.0), ..usual(Approximation::InverseChebyshev, 3) };
    assert!(told(deep).contains("the stop band begins already 60 dB"));
    let stop = |edges| Specification { stop_band: Some(StopBand { edges, attenuation: 40.0 }), ..asked };
    assert_eq!(stop((0.9, 0.9)).design(), Err(DesignError::StopBand));
    assert!(told(stop((1.5, 1.5))).contains("order 4 gives"));
    let never = Specification { order: None, attenuation: Some(150.0), ..stop((1.1, 1.1)) };
    assert!(told(never).starts_with("no order up to 24 will do"));
}

/// Real poles that are far apart become two sections of first order, and only in a band-pass.
#[test]
fn real_poles_share_a_section_unless_they_lie_too_far_apart() {
    let of = |approximation, order, low, high| {
        let band = Band::BandPass(low, high);
        Parts::new(&Specification { band, ..usual(approximation, order) }.design().unwrap().roots)
    };
    let wide = of(Approximation::Butterworth, 1, 1.0, 9.0);
    assert_eq!((wide.poles.len(), wide.first_order.len()), (1, 0));
    assert!((wide.poles[0].q.unwrap() - 3.0 / 8.0).abs() < 1e-12);
    let wider = of(Approximation::Butterworth, 1, 1.0, 1e5);
    assert_eq!((wider.poles.len(), wider.first_order.len()), (0, 2));
    assert_eq!(wider.first_order[0].1, Zeros::AtOrigin);
    assert_eq!(wider.first_order[1].1, Zeros::AtInfinity);
    // Two equal real poles: Q 1/2.
    let pair = Parts::new(&usual(Approximation::LinkwitzRiley, 2).design().unwrap().roots);
    assert!((pair.poles[0].q.unwrap() - 0.5).abs() < 1e-15 && pair.first_order.is_empty());
}
