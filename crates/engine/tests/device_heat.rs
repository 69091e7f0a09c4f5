//! Junction temperature, gate drive and power-added efficiency.

use evenfall_engine::answer::{Answer, Solved};
use evenfall_engine::design::{Design, Diode};
use evenfall_engine::exchange::link;
use evenfall_engine::solve;

fn hot(k_per_w: f64, per_k: f64) -> Design {
    let mut design = link::base();
    design.device.on_resistance_ohm = 0.5;
    design.device.diode = Some(Diode {
        forward_v: 0.8,
        slope_ohm: 0.05,
    });
    design.device.junction_to_ambient_k_per_w = Some(k_per_w);
    design.device.on_resistance_per_k = Some(per_k);
    design
}

fn solved(design: &Design) -> Solved {
    match solve(design) {
        Answer::Solved(solved) => solved,
        Answer::Refused(refusal) => panic!("{}", refusal.reason),
    }
}

fn heat(s: &Solved) -> f64 {
    s.losses.switch_w + s.losses.turn_on_w + s.losses.diode_w
}

#[test]
fn temperature_resistance_and_loss_agree() {
    for (k_per_w, per_k) in [
        (0.0, 0.007),
        (5.0, 0.0),
        (5.0, 0.004),
        (15.0, 0.006),
        (20.0, -0.002),
    ] {
        let design = hot(k_per_w, per_k);
        let s = solved(&design);
        let junction = s.figures.junction_c.expect("a temperature");
        assert!(
            (junction - 25.0 - k_per_w * heat(&s)).abs() < 1e-6,
            "{junction}"
        );
        // The same stage, stated at its warm resistance.
        let mut warm = link::base();
        warm.device.diode = design.device.diode;
        warm.device.on_resistance_ohm = 0.5 * (1.0 + per_k * (junction - 25.0));
        let other = solved(&warm);
        assert!((other.losses.switch_w / s.losses.switch_w - 1.0).abs() < 1e-7);
        assert!(other.figures.junction_c.is_none());
    }
}

#[test]
fn runaway_is_refused_and_says_so() {
    let Answer::Refused(refusal) = solve(&hot(120.0, 0.01)) else {
        panic!("solved")
    };
    assert!(refusal.reason.contains("runaway"), "{}", refusal.reason);
    assert_eq!(
        refusal.field.as_deref(),
        Some("device.junction_to_ambient_k_per_w")
    );
}

#[test]
fn a_hotter_place_makes_a_hotter_junction_and_its_verdict() {
    let mut design = hot(8.0, 0.005);
    design.brief.limits.junction_c = Some(60.0);
    let cool = solved(&design);
    design.brief.ambient_c = 50.0;
    let warm = solved(&design);
    assert!(warm.figures.junction_c > cool.figures.junction_c);
    let verdict = warm
        .verdicts
        .iter()
        .find(|v| v.limit == "junction temperature")
        .expect("a verdict");
    assert!(!verdict.met && verdict.help.is_some());
    assert_eq!(Some(verdict.value), warm.figures.junction_c);
}

#[test]
fn drive_power_is_taken_off_the_efficiency() {
    let mut design = hot(1.0, 0.0);
    design.device.gate_charge_c = Some(12e-9);
    design.device.gate_drive_v = Some(10.0);
    let s = solved(&design);
    let drive = s.figures.gate_drive_w.expect("drive power");
    assert!((drive / (12e-9 * 10.0 * 13.56e6) - 1.0).abs() < 1e-12);
    let added = s
        .figures
        .power_added_efficiency
        .expect("power-added efficiency");
    assert!((added - (s.figures.output_power_w - drive) / s.figures.supply_power_w).abs() < 1e-12);
    assert!(added < s.figures.drain_efficiency);
}
