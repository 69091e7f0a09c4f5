//! Matching sections against published values and against the circuit they become.
//!
//! Source: HP06 Y. Han, D.J. Perreault, IEEE Trans. Power Electron. 21(5), 2006 (values
//! recomputed).

use evenfall_engine::circuit::{Circuit, Element};
use evenfall_engine::design::Load;
use evenfall_engine::network::matching::{
    Form, Match, MatchError, Pass, Wanted, least_q, measure, synthesise,
};
use evenfall_engine::network::{Parts, Place, Quality, build, two_port};
use evenfall_engine::{ac, circuit};
use proptest::prelude::*;
use std::f64::consts::TAU;

const CARRIER_HZ: f64 = 13.56e6;

fn wanted(input_ohm: f64, r_ohm: f64, form: Form, coil_q: f64, capacitor_q: f64) -> Wanted {
    let finite = |q: f64| q.is_finite().then_some(q);
    Wanted {
        carrier_hz: CARRIER_HZ,
        input_ohm,
        load: Load { r_ohm, x_ohm: 0.0 },
        form,
        quality: Quality {
            coil_q: finite(coil_q),
            capacitor_q: finite(capacitor_q),
        },
        exact: false,
    }
}

#[track_caller]
fn found(wanted: &Wanted) -> Match {
    synthesise(wanted).expect("a match")
}

#[track_caller]
fn near(value: f64, want: f64, relative: f64) {
    assert!(
        (value / want - 1.0).abs() <= relative,
        "{value} against {want}"
    );
}

/// A plain coil or capacitor's value.
#[track_caller]
fn value(parts: &Parts) -> f64 {
    match parts {
        Parts::Coil(p) | Parts::Capacitor(p) => p.value,
        trap => panic!("{trap:?}"),
    }
}

fn both(q: f64) -> [Form; 8] {
    let (low, high) = (Pass::Low, Pass::High);
    [
        Form::L(low),
        Form::L(high),
        Form::TwoL(low),
        Form::TwoL(high),
        Form::Pi { pass: low, q },
        Form::Pi { pass: high, q },
        Form::T { pass: low, q },
        Form::TappedCapacitor { q },
    ]
}

#[test]
fn l_section_efficiencies() {
    // HP06, recomputed: exactly 1/(1 + Q/Qu) with the loss in the series coil alone.
    let low = Form::L(Pass::Low);
    for (from, to, coil_q, capacitor_q, want) in [
        (50.0, 5.0, 50.0, f64::INFINITY, 0.943396),
        (50.0, 5.0, 100.0, 1000.0, 0.968037),
        (50.0, 12.5, 100.0, 1000.0, 0.981289),
        (50.0, 2.0, 100.0, 1000.0, 0.948849),
    ] {
        let m = found(&wanted(from, to, low, coil_q, capacitor_q));
        assert!((m.efficiency - want).abs() < 0.5e-6, "{}", m.efficiency);
        let q = (from / to - 1.0_f64).sqrt();
        let first_order = 1.0 - q / coil_q - q / capacitor_q;
        assert!((m.first_order_efficiency - first_order).abs() < 1e-14);
        if capacitor_q.is_infinite() {
            near(m.efficiency, 1.0 / (1.0 + q / coil_q), 1e-14);
        }
        // The first order is what the loss tends to.
        let m = found(&wanted(from, to, low, coil_q * 1e4, capacitor_q * 1e4));
        near(1.0 - m.efficiency, 1.0 - m.first_order_efficiency, 1e-4 * q);
    }
}

#[test]
fn l_section_values() {
    // 50 to 5 ohm: Q 3, series 15 ohm, shunt 50/3 ohm.
    let omega = TAU * CARRIER_HZ;
    let m = found(&wanted(50.0, 5.0, Form::L(Pass::Low), 1e9, 1e9));
    assert_eq!(m.rungs.len(), 2);
    assert_eq!(m.rungs[0].place, Place::Shunt);
    near(value(&m.rungs[0].parts), 3.0 / (50.0 * omega), 1e-14);
    near(value(&m.rungs[1].parts), 15.0 / omega, 1e-14);
    assert!(matches!(m.rungs[1].parts, Parts::Coil(_)));
    let m = found(&wanted(5.0, 50.0, Form::L(Pass::High), 1e9, 1e9));
    assert_eq!(m.rungs[0].place, Place::Series);
    near(value(&m.rungs[0].parts), 1.0 / (15.0 * omega), 1e-14);
    near(value(&m.rungs[1].parts), 50.0 / (3.0 * omega), 1e-14);
    assert!(matches!(m.rungs[1].parts, Parts::Coil(_)));
    // Equal resistances need nothing.
    let m = found(&wanted(50.0, 50.0, Form::L(Pass::Low), 100.0, 100.0));
    assert!(m.rungs.is_empty() && m.efficiency == 1.0);
    // 50 to 5 ohm by pi at Q 7 and T at Q 4, by hand: 1 ohm and 85 ohm in between.
    let m = found(&wanted(
        50.0,
        5.0,
        Form::Pi {
            pass: Pass::Low,
            q: 7.0,
        },
        1e9,
        1e9,
    ));
    near(value(&m.rungs[0].parts) * omega, 7.0 / 50.0, 1e-14);
    near(value(&m.rungs[1].parts) * omega, 9.0, 1e-14);
    near(value(&m.rungs[2].parts) * omega, 2.0 / 5.0, 1e-14);
    let m = found(&wanted(
        50.0,
        5.0,
        Form::T {
            pass: Pass::Low,
            q: 4.0,
        },
        1e9,
        1e9,
    ));
    near(
        value(&m.rungs[0].parts) * omega,
        50.0 * 0.7_f64.sqrt(),
        1e-14,
    );
    near(value(&m.rungs[2].parts) * omega, 20.0, 1e-14);
    // Tapped capacitor, 50 to 5 ohm at Q 7: coil 50/7 ohm, tap capacitor 2.5 ohm, the other
    // (7 - 2) 1 ohm.
    let m = found(&wanted(
        50.0,
        5.0,
        Form::TappedCapacitor { q: 7.0 },
        1e9,
        1e9,
    ));
    near(value(&m.rungs[0].parts) * omega, 50.0 / 7.0, 1e-14);
    near(1.0 / (value(&m.rungs[1].parts) * omega), 5.0, 1e-14);
    near(1.0 / (value(&m.rungs[2].parts) * omega), 2.5, 1e-14);
}

#[test]
fn every_form_is_exact_with_its_losses_in_place() {
    for (input, r_ohm, x_ohm) in [
        (50.0, 5.0, 0.0),
        (7.4, 50.0, 0.0),
        (2.0, 50.0, 30.0),
        (18.0, 9.0, -70.0),
        (100.0, 36.0, 22.0),
    ] {
        for form in both(9.0) {
            for exact in [false, true] {
                let mut w = wanted(input, r_ohm, form, 120.0, 800.0);
                w.load.x_ohm = x_ohm;
                w.exact = exact;
                if exact {
                    let m = found(&w);
                    let gap = (m.input - input).norm_sqr().sqrt();
                    assert!(gap < 1e-11 * input, "{form:?} {input}: {}", m.input);
                    assert!(m.efficiency > 0.5 && m.efficiency < 1.0);
                    // What the ladder is asked is what the circuit answers.
                    let (again, efficiency) = measure(&m.rungs, &w.load, CARRIER_HZ).expect("it");
                    assert_eq!((again, efficiency), (m.input, m.efficiency));
                } else {
                    w.quality = Quality::default();
                    let m = found(&w);
                    let gap = (m.input - input).norm_sqr().sqrt();
                    assert!(gap < 1e-12 * input, "{form:?} {input}: {}", m.input);
                    near(m.efficiency, 1.0, 1e-12);
                    assert_eq!(m.first_order_efficiency, 1.0);
                }
            }
        }
    }
}

#[test]
fn a_load_too_lossy_from_one_side_is_taken_from_the_other() {
    // The coil that takes up the load's reactance has more resistance than lies between 50 and
    // 49.8 ohm; as a parallel load the antenna lies above 50 ohm.
    let mut w = wanted(50.0, 49.8, Form::L(Pass::Low), 100.0, 1000.0);
    w.load.x_ohm = -80.0;
    assert_eq!(found(&w).rungs[0].place, Place::Shunt);
    w.exact = true;
    let m = found(&w);
    assert_eq!(m.rungs[0].place, Place::Series);
    assert!((m.input - 50.0).norm_sqr() < 1e-20);
}

#[test]
fn a_match_fits_between_nodes_of_a_circuit() {
    // The two L sections need a node of their own; it is none that exists.
    let m = found(&wanted(50.0, 5.0, Form::TwoL(Pass::Low), 100.0, 500.0));
    let mut c = Circuit::default();
    c.add("load", 2, 0, Element::Resistor { ohm: 5.0 });
    c.add("elsewhere", 1, 3, Element::Resistor { ohm: 5.0 });
    build(&m.rungs, &mut c, 1, 2);
    let seen = ac::impedance(&c, 1, CARRIER_HZ).expect("an answer");
    assert!((seen - m.input).norm_sqr() < 1e-24);
    let nodes: Vec<circuit::Node> = c.branches.iter().flat_map(|b| [b.from, b.to]).collect();
    assert_eq!(nodes.iter().filter(|n| **n == 3).count(), 1);
    // The greatest efficiency of a matched section is at least what it has.
    let p = two_port(&m.rungs, [50.0, 5.0], CARRIER_HZ).expect("an answer");
    let best = p.greatest_efficiency().expect("passive");
    assert!(best >= m.efficiency - 1e-12 && best < 1.0, "{best}");
    near(p.efficiency().expect("power enters"), m.efficiency, 1e-12);
}

#[test]
fn refusals_of_a_match() {
    let w = wanted(
        50.0,
        5.0,
        Form::Pi {
            pass: Pass::Low,
            q: 2.0,
        },
        100.0,
        100.0,
    );
    let (q, least) = (2.0, least_q(5.0, 50.0));
    near(least, 3.0, 1e-15);
    assert_eq!(synthesise(&w), Err(MatchError::Quality { q, least }));
    let w = wanted(-1.0, 5.0, Form::L(Pass::Low), 100.0, 100.0);
    let (what, value) = ("input resistance", -1.0);
    assert_eq!(synthesise(&w), Err(MatchError::Value { what, value }));
    // A coil of Q 2 has more than 5 ohm of its own before 50 to 0.1 ohm are matched.
    let mut w = wanted(
        50.0,
        0.001,
        Form::T {
            pass: Pass::High,
            q: 300.0,
        },
        0.01,
        0.01,
    );
    w.exact = true;
    assert!(synthesise(&w).is_err(), "{:?}", synthesise(&w));
}

proptest! {
    #[test]
    fn any_wish_is_answered_or_refused(
        carrier_hz in proptest::num::f64::ANY,
        input_ohm in proptest::num::f64::ANY,
        r_ohm in proptest::num::f64::ANY,
        x_ohm in proptest::num::f64::ANY,
        q in proptest::num::f64::ANY,
        coil_q in any::<Option<f64>>(),
        capacitor_q in any::<Option<f64>>(),
        kind in 0..8_usize,
        exact: bool,
    ) {
        let w = Wanted {
            carrier_hz: carrier_hz.abs(),
            input_ohm: input_ohm.abs(),
            load: Load { r_ohm: r_ohm.abs(), x_ohm },
            form: both(q)[kind],
            quality: Quality { coil_q, capacitor_q },
            exact,
        };
        if let Ok(m) = synthesise(&w) {
            prop_assert!(m.input.re.is_finite());
        }
    }

    #[test]
    fn real_wishes_are_met(
        input in 1.0..200.0_f64,
        load in (1.0..200.0_f64, -100.0..100.0_f64),
        q in 15.0..30.0_f64,
        kind in 0..8_usize,
        coil_q in 150.0..500.0_f64,
    ) {
        let mut w = wanted(input, load.0, both(q)[kind], coil_q, 1000.0);
        w.load.x_ohm = load.1;
        let plain = synthesise(&w);
        w.exact = true;
        match (plain, synthesise(&w)) {
            (Ok(plain), Ok(m)) => {
                let gap = (m.input - input).norm_sqr().sqrt();
                prop_assert!(gap < 1e-9 * input, "{}", m.input);
                prop_assert!(m.efficiency > 0.0 && m.efficiency <= 1.0 + 1e-12);
                prop_assert!(plain.efficiency > 0.0 && plain.efficiency <= 1.0 + 1e-12);
            }
            // Only a reactive load can ask more of the Q than there is.
            (Err(MatchError::Quality { least, .. }), _) => prop_assert!(least > q),
            (a, b) => prop_assert!(false, "{:?} {:?}", a, b),
        }
    }
}
