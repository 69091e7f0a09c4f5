//! The circuit at one frequency: hand analysis, random ladders, hostile circuits, and the
//! time-domain steady state.

use evenfall_engine::ac::{AcError, Drive, TwoPort, drive, impedance, two_port};
use evenfall_engine::circuit::{Branch, Circuit, Coupling, Element};
use evenfall_engine::stage::Stage;
use num_complex::Complex64;
use proptest::prelude::*;
use std::f64::consts::TAU;

fn resistor(ohm: f64) -> Element {
    Element::Resistor { ohm }
}

fn coil(henry: f64) -> Element {
    Element::Inductor { henry, ohm: 0.0 }
}

fn capacitor(farad: f64) -> Element {
    Element::Capacitor { farad, ohm: 0.0 }
}

/// Hertz at which reactances are the values themselves.
const UNIT_HZ: f64 = 1.0 / TAU;

#[track_caller]
fn near(got: Complex64, re: f64, im: f64) {
    let gap = (got - Complex64::new(re, im)).norm_sqr().sqrt();
    assert!(gap < 1e-12 * (1.0 + got.norm_sqr().sqrt()), "{got}");
}

#[test]
fn impedances_by_hand() {
    let mut c = Circuit::default();
    c.add("r", 1, 2, resistor(3.0));
    c.add("l", 2, 0, coil(4.0));
    near(impedance(&c, 1, UNIT_HZ).expect("an answer"), 3.0, 4.0);
    // Beside 5 ohm that a short joins on: Z = 5 (3 + 4j)/(8 + 4j) = 2.5 + 1.25j.
    c.add("short", 1, 7, resistor(0.0));
    c.add("short", 7, 1, resistor(0.0));
    c.add("beside", 7, 0, resistor(5.0));
    near(impedance(&c, 1, UNIT_HZ).expect("an answer"), 2.5, 1.25);
    near(impedance(&c, 7, UNIT_HZ).expect("an answer"), 2.5, 1.25);
    // An island, a self-loop and a capacitor of nothing change nothing.
    c.add("island", 20, 21, resistor(1.0));
    c.add("loop", 2, 2, resistor(0.0));
    c.add("open", 2, 0, capacitor(0.0));
    near(impedance(&c, 1, UNIT_HZ).expect("an answer"), 2.5, 1.25);
    // A direct source is a short.
    c.add("supply", 2, 0, Element::Source { volt: 12.0 });
    near(impedance(&c, 1, UNIT_HZ).expect("an answer"), 1.875, 0.0);
    near(impedance(&c, 2, UNIT_HZ).expect("an answer"), 0.0, 0.0);
}

#[test]
fn a_huge_blocking_capacitor_costs_no_digits() {
    let mut c = Circuit::default();
    c.add("block", 1, 2, capacitor(1e6));
    c.add("short", 2, 3, coil(1e-12));
    c.add("load", 3, 0, resistor(50.0));
    let z = impedance(&c, 1, 1e6).expect("an answer");
    assert!((z.re / 50.0 - 1.0).abs() < 1e-15, "{z}");
    let s = two_port(&c, [1, 3], [50.0, 50.0], 1e6).expect("an answer");
    // 50 ohm across a 50 ohm line, behind the little coil.
    let z = Complex64::new(25.0, TAU * 1e-6);
    let want = (z - 50.0) / (z + 50.0);
    near(s.s[0][0], want.re, want.im);
}

#[test]
fn coupled_coils_by_hand() {
    // Seen through a pair: w L1 j + (w M)^2/(R + w L2 j), M = 2 of L1 = 4, L2 = 9, R = 3.
    for sign in [1.0, -1.0] {
        let mut c = Circuit::default();
        let first = c.add("first", 1, 0, coil(4.0));
        let second = c.add("second", 2, 0, coil(9.0));
        c.add("load", 2, 0, resistor(3.0));
        c.couplings.push(Coupling {
            first,
            second,
            mutual_henry: sign * 2.0,
        });
        let want = Complex64::new(0.0, 4.0) + 4.0 / Complex64::new(3.0, 9.0);
        near(
            impedance(&c, 1, UNIT_HZ).expect("an answer"),
            want.re,
            want.im,
        );
        let driven = drive(&c, 1, Drive::Voltage(Complex64::ONE), UNIT_HZ).expect("an answer");
        let through = driven.drive_current() * want;
        near(through, 1.0, 0.0);
        near(driven.current(first) * want, 1.0, 0.0);
        near(driven.voltage(2) + 3.0 * driven.current(second), 0.0, 0.0);
    }
    // Coupled completely, 1:2 in turns: 3 ohm at the second are 0.75 beside L1.
    let mut c = Circuit::default();
    let first = c.add("first", 1, 0, coil(4.0));
    let second = c.add("second", 2, 0, coil(16.0));
    c.add("load", 2, 0, resistor(3.0));
    c.couplings.push(Coupling {
        first,
        second,
        mutual_henry: 8.0,
    });
    let want = Complex64::new(0.75, 0.0) * Complex64::new(0.0, 4.0) / Complex64::new(0.75, 4.0);
    near(
        impedance(&c, 1, UNIT_HZ).expect("an answer"),
        want.re,
        want.im,
    );
}

#[test]
fn chain_parameters_and_gains_by_hand() {
    // Series 3 + 4j: A = D = 1, B = 3 + 4j, C = 0.
    let mut c = Circuit::default();
    c.add("r", 1, 2, resistor(3.0));
    c.add("l", 2, 3, coil(4.0));
    let p = two_port(&c, [1, 3], [20.0, 7.0], UNIT_HZ).expect("an answer");
    let [[a, b], [cc, d]] = p.chain().expect("it passes");
    near(a, 1.0, 0.0);
    near(b, 3.0, 4.0);
    near(cc, 0.0, 0.0);
    near(d, 1.0, 0.0);
    // Port 2's 7 ohm behind 3 ohm: seven tenths arrive.
    assert!((p.efficiency().expect("power enters") - 0.7).abs() < 1e-14);
    // Both ports one node, with 25 ohm across it.
    let mut c = Circuit::default();
    c.add("r", 1, 0, resistor(25.0));
    let p = two_port(&c, [1, 1], [50.0, 50.0], UNIT_HZ).expect("an answer");
    near(p.s[1][0], 0.5, 0.0);
    near(p.s[0][0], -0.5, 0.0);
}

#[test]
fn greatest_efficiency_of_a_link_and_of_a_pad() {
    // Coupled coils: with x = k sqrt(Q1 Q2), x^2/(1 + sqrt(1 + x^2))^2 (textbook, from memory).
    let (k, q1, q2) = (0.1, 100.0, 200.0);
    let mut c = Circuit::default();
    let lossy = |q: f64| Element::Inductor {
        henry: 1.0,
        ohm: 1.0 / q,
    };
    let first = c.add("first", 1, 0, lossy(q1));
    let second = c.add("second", 2, 0, lossy(q2));
    c.couplings.push(Coupling {
        first,
        second,
        mutual_henry: k,
    });
    let p = two_port(&c, [1, 2], [1.0, 1.0], UNIT_HZ).expect("an answer");
    let x2 = k * k * q1 * q2;
    let side = 1.0 + (1.0_f64 + x2).sqrt();
    let want = x2 / (side * side);
    let got = p.greatest_efficiency().expect("passive");
    assert!((got / want - 1.0).abs() < 1e-11, "{got} against {want}");
    // A matched 6 dB T pad: R (1 - a)/(1 + a) in the line, 2 R a/(1 - a^2) across, a = 1/2.
    let mut c = Circuit::default();
    c.add("in", 1, 3, resistor(50.0 / 3.0));
    c.add("out", 3, 2, resistor(50.0 / 3.0));
    c.add("across", 3, 0, resistor(200.0 / 3.0));
    let p = two_port(&c, [1, 2], [50.0, 50.0], 1e6).expect("an answer");
    assert!(p.s[0][0].norm_sqr() < 1e-28);
    assert!((p.greatest_efficiency().expect("passive") - 0.25).abs() < 1e-13);
    // As it is published, where it differs each way.
    let c = Complex64::new;
    let s = [[c(0.3, 0.1), c(0.0, 0.05)], [c(0.5, -0.2), c(0.2, 0.0)]];
    let reference_ohm = [50.0, 50.0];
    let size = |c: Complex64| c.norm_sqr();
    let determinant = s[0][0] * s[1][1] - s[0][1] * s[1][0];
    let both = (size(s[0][1]) * size(s[1][0])).sqrt();
    let k = (1.0 - size(s[0][0]) - size(s[1][1]) + size(determinant)) / (2.0 * both);
    let want = (size(s[1][0]) / size(s[0][1])).sqrt() * (k - (k * k - 1.0).sqrt());
    let got = TwoPort { s, reference_ohm }.greatest_efficiency();
    assert!((got.expect("stable") / want - 1.0).abs() < 1e-12);
    // Nothing passes: nothing arrives.
    let mut c = Circuit::default();
    c.add("in", 1, 0, resistor(10.0));
    c.add("out", 2, 0, resistor(10.0));
    let p = two_port(&c, [1, 2], [50.0, 50.0], 1e6).expect("an answer");
    assert_eq!(p.greatest_efficiency(), Some(0.0));
    assert_eq!(p.chain(), None);
}

#[test]
fn refusals_carry_their_numbers() {
    let mut c = Circuit::default();
    c.add("r", 1, 2, resistor(1.0));
    assert!(matches!(
        impedance(&c, 1, 1e6),
        Err(AcError::Unbounded { .. })
    ));
    assert!(matches!(
        impedance(&c, 9, 1e6),
        Err(AcError::Unbounded { .. })
    ));
    assert_eq!(impedance(&c, 0, 1e6), Err(AcError::Port { node: 0 }));
    assert_eq!(impedance(&c, 1, 0.0), Err(AcError::Frequency { hz: 0.0 }));
    let refused = two_port(&c, [1, 2], [50.0, -1.0], 1e6);
    assert_eq!(refused, Err(AcError::Reference { ohm: -1.0 }));
    assert!(two_port(&c, [1, 0], [50.0, 50.0], 1e6).is_err());
    c.add("short", 2, 0, resistor(0.0));
    let shorted = drive(&c, 2, Drive::Voltage(Complex64::ONE), 1e6);
    assert!(matches!(shorted, Err(AcError::Unbounded { .. })));
    let bad = c.add("bad", 1, 0, capacitor(-1e-9));
    let (branch, value) = (bad, -1e-9);
    assert_eq!(impedance(&c, 1, 1e6), Err(AcError::Value { branch, value }));
    c.branches[bad].element = coil(1e-6);
    c.couplings.push(Coupling {
        first: bad,
        second: 0,
        mutual_henry: 1e-9,
    });
    let (coupling, mutual_henry, most_henry) = (0, 1e-9, 0.0);
    assert_eq!(
        impedance(&c, 1, 1e6),
        Err(AcError::Coupling {
            coupling,
            mutual_henry,
            most_henry
        })
    );
    let mut long = Circuit::default();
    for k in 1..400 {
        long.add("r", k, k + 1, resistor(1.0));
    }
    assert!(matches!(
        impedance(&long, 1, 1e6),
        Err(AcError::Size { unknowns: 799 })
    ));
}

#[test]
fn the_steady_state_has_the_transfer_of_its_own_network() {
    // Behind the drain the stage is linear: the drain's harmonics times the transfer to the
    // load are the load's. Three kinds of load.
    for x_ohm in [0.0, 3.0, -2.0] {
        let mut stage = Stage::example();
        stage.load.x_ohm = x_ohm;
        let solved = stage.solve().expect("a steady state");
        let circuit = stage.layout().circuit;
        let find = |name| {
            let mut names = circuit.branches.iter().map(|b| b.name);
            names.position(|n| n == name).expect("a branch")
        };
        let (load, drain) = (find("load"), circuit.branches[find("switch")].from);
        for order in 1..=10 {
            let hz = order as f64 * stage.carrier_hz;
            let volt = Complex64::from(solved.drain_harmonics_v[order]);
            let driven = drive(&circuit, drain, Drive::Voltage(volt), hz).expect("an answer");
            let got = driven.current(load).norm_sqr().sqrt();
            let want = solved.load_harmonics_a[order];
            // Small harmonics are differences of what is as large as the carrier's.
            let scale = want + 1e-3 * solved.load_harmonics_a[1];
            assert!(
                (got - want).abs() < 1e-9 * scale,
                "load reactance {x_ohm}, harmonic {order}: {got} against {want}"
            );
        }
    }
}

/// A ladder of passive parts with values of either size of 50 ohm at 1 rad/s.
fn ladder() -> impl Strategy<Value = (Circuit, usize)> {
    let value = -2.0..2.0_f64;
    let rung = (
        0..6_usize,
        value.clone(),
        value,
        1.0..3.0_f64,
        any::<bool>(),
    );
    proptest::collection::vec(rung, 1..10).prop_map(|rungs| {
        let mut c = Circuit::default();
        let mut here = 1;
        for (kind, size, second, loss, series) in rungs {
            let x = 50.0 * libm::pow(10.0, size);
            let y = 50.0 * libm::pow(10.0, second);
            let ohm = x * libm::pow(10.0, -loss);
            let to = if series { here + 1 } else { 0 };
            let lossy = |x: f64| Element::Inductor { henry: x, ohm };
            match kind {
                0 => {
                    c.add("r", here, to, resistor(x));
                }
                1 => {
                    c.add("l", here, to, lossy(x));
                }
                2 => {
                    let farad = 1.0 / x;
                    c.add("c", here, to, Element::Capacitor { farad, ohm });
                }
                3 => {
                    c.add("l", here, to, lossy(x));
                    c.add("c", here, to, capacitor(1.0 / y));
                }
                4 => {
                    c.add("short", here, to, resistor(0.0));
                }
                _ => {
                    let first = c.add("first", here, 0, lossy(x));
                    let second = c.add("second", here + 1, 0, lossy(y));
                    let k = 2.0 * (loss - 2.0) / 2.0;
                    c.couplings.push(Coupling {
                        first,
                        second,
                        mutual_henry: k * (x * y).sqrt(),
                    });
                    here += 1;
                    continue;
                }
            }
            if series {
                here += 1;
            }
        }
        (c, here)
    })
}

/// Any element with any numbers.
fn hostile() -> impl Strategy<Value = Element> {
    let any = proptest::num::f64::ANY;
    (0..7_usize, any, any, 0..9_usize).prop_map(|(kind, a, b, of)| match kind {
        0 => resistor(a),
        1 => Element::Inductor { henry: a, ohm: b },
        2 => Element::Capacitor { farad: a, ohm: b },
        3 => Element::Source { volt: a },
        4 => Element::Switch { ohm: a },
        5 => Element::Fall { of, second: a },
        _ => Element::Diode {
            forward_v: a,
            ohm: b,
        },
    })
}

proptest! {
    #[test]
    fn ladders_are_reciprocal_and_passive(
        (circuit, end) in ladder(),
        references in (0.1..1e3_f64, 0.1..1e3_f64),
        hz in 0.01..10.0_f64,
    ) {
        let p = two_port(&circuit, [1, end], references.into(), hz).expect("an answer");
        let gap = (p.s[0][1] - p.s[1][0]).norm_sqr().sqrt();
        prop_assert!(gap < 1e-10, "not reciprocal by {gap:e}");
        for from in 0..2 {
            let out = p.s[0][from].norm_sqr() + p.s[1][from].norm_sqr();
            prop_assert!(out < 1.0 + 1e-10, "{out} comes out of 1");
        }
        // 1 - S^H S has no negative determinant either.
        let columns = [[p.s[0][0], p.s[1][0]], [p.s[0][1], p.s[1][1]]];
        let dot = |a: [Complex64; 2], b: [Complex64; 2]| a[0].conj() * b[0] + a[1].conj() * b[1];
        let kept = columns.map(|c| 1.0 - dot(c, c).re);
        let across = dot(columns[0], columns[1]).norm_sqr();
        prop_assert!(kept[0] * kept[1] - across > -1e-10);
        if let Some(best) = p.greatest_efficiency() {
            let here = p.efficiency().unwrap_or(0.0);
            prop_assert!((0.0..=1.0 + 1e-9).contains(&best), "{best}");
            prop_assert!(kept[0] < 1e-4 || here <= best + 1e-7, "{here} above {best}");
        }
    }

    #[test]
    fn any_circuit_is_answered_or_refused(
        parts in proptest::collection::vec((0..5_usize, 0..5_usize, hostile()), 0..12),
        couplings in proptest::collection::vec((0..14_usize, 0..14_usize, proptest::num::f64::ANY), 0..3),
        far in any::<usize>(),
        hz in proptest::num::f64::ANY,
        references in (proptest::num::f64::ANY, proptest::num::f64::ANY),
    ) {
        let node = |k: usize| if k == 4 { far } else { k };
        let branches = parts.into_iter().map(|(from, to, element)| Branch {
            name: "any",
            from: node(from),
            to: node(to),
            element,
        });
        let couplings = couplings.into_iter().map(|(first, second, mutual_henry)| Coupling {
            first,
            second,
            mutual_henry,
        });
        let circuit = Circuit { branches: branches.collect(), couplings: couplings.collect(), laws: Vec::new() };
        if let Ok(z) = impedance(&circuit, 1, hz.abs()) {
            prop_assert!(z.re.is_finite() && z.im.is_finite());
        }
        let _ = impedance(&circuit, far, hz);
        let _ = drive(&circuit, far, Drive::Voltage(Complex64::new(hz, 1.0)), 1e6);
        if let Ok(p) = two_port(&circuit, [1, far], references.into(), hz.abs()) {
            let _ = (p.chain(), p.efficiency(), p.greatest_efficiency());
        }
    }
}
