//! Differential and stacked stages and the relatives of class E: published values and limits.
//!
//! Sources: GS07 A. Grebennikov, N.O. Sokal, Switchmode RF Power Amplifiers, 2007; ZG90 R.E.
//! Zulinski, K.J. Grady, IEEE Trans. CAS-37(8), 1990; KC06 Z. Kaczmarczyk, IEEE Trans. Ind.
//! Electron. 53(5), 2006 (all values from memory of the cited papers, recomputed).

mod common;

use common::{near, solved};
use evenfall_engine::answer::{Answer, Solved};
use evenfall_engine::design::{Capacitance, Design, Feed, Form, Mismatch, PerWidth, Upper};
use evenfall_engine::exchange::link;
use evenfall_engine::sizing;
use evenfall_engine::solve;
use evenfall_engine::stage::Stage;
use std::f64::consts::TAU;

/// Lossless, at 1 V into 1 ohm at 1 rad/s.
fn unit(loaded_q: f64) -> Design {
    let mut design = link::base();
    design.brief.carrier_hz = 1.0 / TAU;
    design.brief.power_w = None;
    design.brief.supply_v = Some(1.0);
    design.brief.load.r_ohm = 1.0;
    design.stage.loaded_q = loaded_q;
    design
}

#[test]
fn parallel_circuit() {
    let mut design = unit(400.0);
    design.stage.feed = Feed::Parallel {};
    let got = solved(&design);
    // GS07: q 1.412, K_L 0.732, K_C 0.685, K_P 1.365, peak 3.647; exact values to five digits.
    near("K_L", got.values.feed.l_h, 0.73326, 5e-3);
    near("K_C", got.values.shunt.c_f, 0.68408, 5e-3);
    near("K_P", got.figures.output_power_w, 1.36324, 5e-3);
    near("peak", got.figures.drain_peak_v, 3.6468, 2e-3);
    let branch = got.values.series_coil.l_h - 1.0 / got.values.series_capacitor.c_f;
    assert!(branch.abs() < 1e-9, "X is {branch}");
}

#[test]
fn load_independent() {
    let mut design = unit(200.0);
    design.stage.feed = Feed::LoadIndependent {};
    let got = solved(&design);
    // ZG90: q 1.2915, K_L 1.0371, K_C 0.5781, K_P 1.2633, X 0.2662 w L1.
    near("K_L", got.values.feed.l_h, 1.0371, 1e-2);
    near("K_C", got.values.shunt.c_f, 0.5781, 1e-2);
    near("K_P", got.figures.output_power_w, 1.2633, 1e-2);
    let (stage, _) = sizing::sized_stage(&design).expect("sized");
    let amplitude = |stage: &Stage| {
        let reading = stage.solve().expect("a stage");
        assert!(
            reading.figures.turn_on_v.abs() < 0.02,
            "turn-on at {} ohm: {}",
            stage.load.r_ohm,
            reading.figures.turn_on_v
        );
        reading.load_harmonics_a[1] * stage.load.r_ohm
    };
    // Whatever the load: zero voltage at turn-on, and 1.58951 V out.
    for factor in [1.0, 2.0, 3.0, 6.0] {
        let mut other = stage.clone();
        other.load.r_ohm *= factor;
        near("output amplitude", amplitude(&other), 1.58951, 1e-2);
    }
}

#[test]
fn trap_at_the_second_harmonic() {
    let mut design = unit(1000.0);
    design.stage.duty = 0.375;
    design.stage.trap_ratio = Some(0.867);
    design.stage.feed = Feed::Choke {
        reactance_ratio: 5000.0,
    };
    let got = solved(&design);
    // KC06: D 0.375, k 0.867: peak 2.3162, P R / V^2 0.15559, X / R 2.0339, w C1 R 0.13184.
    near("peak", got.figures.drain_peak_v, 2.3162, 5e-3);
    near("power", got.figures.output_power_w, 0.15559, 1e-2);
    near("shunt", got.values.shunt.c_f, 0.13184, 1e-2);
    let x = got.values.series_coil.l_h - 1.0 / got.values.series_capacitor.c_f;
    near("X", x, 2.0339, 1e-2);
    let capability =
        got.figures.output_power_w / (got.figures.drain_peak_v * got.figures.switch_peak_a);
    near("output capability", capability, 0.13231, 2e-2);
}

fn board() -> Design {
    let mut design = link::base();
    design.device.on_resistance_ohm = 0.1;
    design.device.capacitance = Capacitance::Constant { c_f: 20e-12 };
    design.stage.coil_q = Some(200.0);
    design.stage.capacitor_q = Some(1000.0);
    design
}

fn differential(cross_share: f64) -> Design {
    let mut design = board();
    design.stage.form = Form::Differential;
    design.stage.cross_share = cross_share;
    design
}

/// Common practice: at equal power and supply four times the load resistance, one capacitor of half
/// the susceptance across the drains does the work of both, even harmonics cancel in the load.
#[test]
fn a_pair_against_one_switch() {
    let lossless = |form| {
        let mut design = link::base();
        design.stage.form = form;
        design.stage.loaded_q = 100.0;
        design.stage.feed = Feed::Choke {
            reactance_ratio: 1000.0,
        };
        design
    };
    let (one, two) = (
        solved(&lossless(Form::Single)),
        solved(&lossless(Form::Differential)),
    );
    near(
        "load",
        two.values.drain_load.r_ohm,
        4.0 * one.values.drain_load.r_ohm,
        5e-3,
    );
    near(
        "peak",
        two.figures.drain_peak_v,
        one.figures.drain_peak_v,
        2e-3,
    );
    near(
        "current",
        two.figures.switch_peak_a,
        0.5 * one.figures.switch_peak_a,
        2e-3,
    );
    assert!(two.harmonics_dbc[0] < -200.0 && two.harmonics_dbc[2] < -200.0);
    assert!(two.detail.common_mode_v[2] > 10.0);
    let mut across = lossless(Form::Differential);
    across.stage.cross_share = 1.0;
    let across = solved(&across);
    let cross = across.values.cross.expect("a capacitor across").c_f;
    assert_eq!(across.values.shunt.c_f, 0.0);
    near("does the work of two", cross, two.values.shunt.c_f, 5e-3);
    near(
        "half the susceptance",
        cross,
        0.5 * one.values.shunt.c_f,
        2e-2,
    );
}

/// Equal sides solved as a whole are the sides solved in halves, and a vanishing mismatch leaks
/// nothing.
#[test]
fn a_vanishing_mismatch_is_the_like_pair() {
    for capacitance in [
        Capacitance::Constant { c_f: 20e-12 },
        Capacitance::Junction {
            cj0_f: 200e-12,
            built_in_v: 0.8,
            grading: 0.5,
        },
    ] {
        let mut like = differential(0.4);
        like.device.capacitance = capacitance;
        let mut unlike = like.clone();
        unlike.stage.mismatch = Mismatch {
            on_resistance: 1e-12,
            ..Mismatch::default()
        };
        let (a, b) = (solved(&like), solved(&unlike));
        near(
            "power",
            a.figures.output_power_w,
            b.figures.output_power_w,
            1e-8,
        );
        near("peak", a.figures.drain_peak_v, b.figures.drain_peak_v, 1e-5);
        near("losses", a.losses.total_w(), b.losses.total_w(), 1e-5);
        near("third", a.harmonics_dbc[1], b.harmonics_dbc[1], 1e-5);
        assert!(b.harmonics_dbc[0] < -150.0, "{}", b.harmonics_dbc[0]);
        unlike.stage.mismatch.duty = 0.02;
        assert!(solved(&unlike).harmonics_dbc[0] > -60.0, "a mismatch leaks");
    }
}

#[test]
fn a_stack_of_next_to_nothing_above_is_the_plain_switch() {
    let mut stacked = board();
    stacked.stage.stack = 2;
    stacked.device.upper = Some(Upper {
        on_resistance_ohm: 1e-7,
        across_f: 1e-7,
        rating_v: None,
    });
    stacked.stage.gate_supplies_v = Some(vec![1000.0]);
    let mut plain = board();
    plain.stage.stack = 1;
    let (a, b) = (solved(&stacked), solved(&plain));
    near(
        "power",
        a.figures.output_power_w,
        b.figures.output_power_w,
        1e-6,
    );
    near("peak", a.figures.drain_peak_v, b.figures.drain_peak_v, 1e-4);
    near("conduction", a.losses.switch_w, b.losses.switch_w, 1e-3);
    near("shunt", a.values.shunt.c_f, b.values.shunt.c_f, 1e-3);
}

#[test]
fn a_stack_shares_the_voltage_as_its_ratings_do() {
    let mut design = board();
    design.stage.stack = 3;
    design.device.node_f = 8e-12;
    design.device.rating_v = Some(60.0);
    design.device.upper = Some(Upper {
        on_resistance_ohm: 0.15,
        across_f: 15e-12,
        rating_v: Some(90.0),
    });
    let got = solved(&design);
    let shares: Vec<f64> = got.detail.stack.iter().map(|s| s.drain_source_v).collect();
    let whole: f64 = shares.iter().sum();
    for (share, rating) in shares.iter().zip([60.0, 90.0, 90.0]) {
        near("share", share / whole, rating / 240.0, 0.01);
    }
    assert!(got.figures.turn_on_v.abs() < 0.01);
    assert_eq!(got.detail.stack.len(), 3);
    let verdicts: Vec<&str> = got.verdicts.iter().map(|v| v.limit.as_str()).collect();
    assert!(
        verdicts.contains(&"drain voltage of switch 3"),
        "{verdicts:?}"
    );
}

#[test]
fn what_cannot_be_is_refused_beside_its_field() {
    let refused = |change: fn(&mut Design), field: &str| {
        let mut design = board();
        change(&mut design);
        match solve(&design) {
            Answer::Refused(r) => assert_eq!(r.field.as_deref(), Some(field), "{}", r.reason),
            Answer::Solved(_) => panic!("{field} solved"),
        }
    };
    refused(|d| d.stage.stack = 0, "stage.stack");
    refused(|d| d.stage.stack = 9, "stage.stack");
    refused(|d| d.stage.trap_ratio = Some(-1.0), "stage.trap_ratio");
    refused(
        |d| {
            d.stage.form = Form::Differential;
            d.stage.feed_coupling = 1.2;
        },
        "stage.feed_coupling",
    );
    refused(|d| d.stage.stack = 3, "device.node_f");
    refused(
        |d| {
            d.stage.stack = 2;
            d.stage.gate_supplies_v = Some(vec![3.0, 4.0]);
        },
        "stage.gate_supplies_v",
    );
}

/// Ten states and more go through the solver of any size.
#[test]
fn a_pair_with_everything_lossy() {
    let mut design = differential(0.5);
    design.stage.feed_coupling = 0.4;
    design.stage.trap_ratio = Some(2.0);
    design.device.capacitance = Capacitance::Constant { c_f: 4e-12 };
    let got = solved(&design);
    assert!(got.balance.abs() < 1e-9, "balance {:e}", got.balance);
    assert!(got.figures.turn_on_v.abs() < 1e-6);
    // A little less loss makes a little difference.
    design.stage.capacitor_q = Some(1100.0);
    let other = solved(&design);
    near(
        "peak",
        got.figures.drain_peak_v,
        other.figures.drain_peak_v,
        5e-3,
    );
    assert!(other.figures.drain_efficiency > got.figures.drain_efficiency);
}

/// A switch on a chip: 0.8 ohm mm, 0.5 fF/um, 1 fF/um of gate (invented).
fn chip() -> Design {
    let mut design = link::base();
    design.brief.carrier_hz = 433.92e6;
    design.brief.power_w = Some(0.1);
    design.brief.supply_v = Some(1.2);
    design.device.gate_drive_v = Some(1.2);
    design.device.node_f = 1e-10;
    design.device.per_width = Some(PerWidth {
        on_resistance_ohm_m: 8e-4,
        output_f_per_m: 5e-10,
        gate_f_per_m: 1e-9,
        width_m: None,
        choose_stack: false,
    });
    design.stage.loaded_q = 4.0;
    design.stage.feed = Feed::Resonant { q: 1.2 };
    design.stage.coil_q = Some(12.0);
    design
}

fn lost_w(solved: &Solved) -> f64 {
    let f = &solved.figures;
    f.supply_power_w + f.gate_drive_w.expect("a drive") - f.output_power_w
}

#[test]
fn the_width_of_least_loss() {
    let best = solved(&chip());
    let width_m = best.values.width_m.expect("a width");
    for factor in [0.8, 0.9, 1.1, 1.25] {
        let mut other = chip();
        if let Some(per) = &mut other.device.per_width {
            per.width_m = Some(factor * width_m);
        }
        let other = solved(&other);
        assert!(
            lost_w(&other) > lost_w(&best),
            "{factor} of the width loses less"
        );
    }
    assert!(
        best.notes.iter().any(|n| n.contains("wide")),
        "{:?}",
        best.notes
    );
    // Without a drive to pay for, the device grows until it is the whole shunt.
    let mut free = chip();
    free.device.gate_drive_v = None;
    let free = solved(&free);
    assert!(free.values.width_m > Some(1.5 * width_m));
}

#[test]
fn the_stack_is_chosen_under_the_limit_of_each_switch() {
    let mut design = chip();
    design.brief.supply_v = Some(2.5);
    design.device.rating_v = Some(3.6);
    if let Some(per) = &mut design.device.per_width {
        per.choose_stack = true;
    }
    let got = solved(&design);
    assert_eq!(got.values.stack, Some(3));
    assert!(
        got.detail
            .stack
            .iter()
            .all(|s| s.drain_source_v < 0.8 * 3.6)
    );
    let refused = |per: PerWidth| {
        let mut design = chip();
        design.device.per_width = Some(per);
        match solve(&design) {
            Answer::Refused(r) => {
                assert_eq!(r.field.as_deref(), Some("device.per_width"), "{}", r.reason)
            }
            Answer::Solved(_) => panic!("solved"),
        }
    };
    let per = chip().device.per_width.expect("widths");
    refused(PerWidth {
        width_m: Some(0.0),
        ..per
    });
    refused(PerWidth {
        output_f_per_m: -1.0,
        ..per
    });
}

#[test]
fn other_ways_to_meet_the_brief() {
    let design = board();
    let all = sizing::alternatives(&design);
    assert_eq!(all.len(), sizing::ALTERNATIVES);
    assert_eq!(all.iter().filter(|a| a.own).count(), 1);
    let of = |name: &str| {
        let found = all.iter().find(|a| a.name == name).expect("the way");
        found.outcome.as_ref().expect("solved")
    };
    // Each is sized for the same power and switches softly.
    for way in &all {
        let figures = way.outcome.as_ref().expect("solved").figures;
        near(way.name, figures.output_power_w, 60.0, 1e-6);
        assert!(figures.turn_on_v.abs() < 0.01, "{}", way.name);
        assert_eq!(
            solve(&way.design),
            Answer::Solved((**way.outcome.as_ref().expect("solved")).clone())
        );
    }
    let own = of("choke feed");
    assert_eq!(own.figures, solved(&design).figures);
    assert!(of("trap at 2 f").figures.drain_peak_v < 0.8 * own.figures.drain_peak_v);
    assert!(of("differential").harmonics_dbc[0] < -200.0);
    assert!(of("resonant feed, X = 0").values.shunt.c_f > own.values.shunt.c_f);
}
