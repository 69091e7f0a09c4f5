//! Sizing over the whole of its range: what is solved is soft and true, what is refused has a
//! reason in numbers.

use evenfall_engine::answer::{Answer, Solved};
use evenfall_engine::design::{Capacitance, Capacitor, Coil, Design, Diode, Feed, Load};
use evenfall_engine::exchange::link;
use evenfall_engine::solve;
use std::f64::consts::TAU;

fn soft(solved: &Solved, design: &Design) -> Result<(), String> {
    let f = &solved.figures;
    let v = solved.values.supply_v;
    let slope = f.turn_on_slope_v_per_s / (v * TAU * design.brief.carrier_hz);
    if f.turn_on_v.abs() > 1e-6 * v || slope.abs() > 1e-6 {
        return Err(format!("turn-on at {} V, slope {slope}", f.turn_on_v));
    }
    if solved.balance.abs() > 1e-9 {
        return Err(format!("balance {}", solved.balance));
    }
    if !(f.drain_efficiency > 0.0 && f.drain_efficiency <= 1.0) {
        return Err(format!("efficiency {}", f.drain_efficiency));
    }
    Ok(())
}

#[test]
fn every_duty_feed_q_and_loss_is_sized_or_refused_with_a_number() {
    let mut unexplained = Vec::new();
    let mut count = 0;
    let mut sized = 0;
    for duty in [0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8] {
        for loaded_q in [1.5, 2.0, 2.5, 3.0, 5.0, 10.0, 30.0, 100.0] {
            for feed in [
                Feed::Choke {
                    reactance_ratio: 30.0,
                },
                Feed::Choke {
                    reactance_ratio: 3.0,
                },
                Feed::Resonant { q: 0.5 },
                Feed::Resonant { q: 1.2915 },
                Feed::Resonant { q: 1.412 },
                Feed::Resonant { q: 1.8 },
            ] {
                for (coil_q, capacitor_q, on_ohm) in [
                    (None, None, 0.0),
                    (Some(200.0), Some(1000.0), 0.1),
                    (Some(20.0), Some(100.0), 0.4),
                ] {
                    let mut design = link::base();
                    design.stage.duty = duty;
                    design.stage.loaded_q = loaded_q;
                    design.stage.feed = feed;
                    design.stage.coil_q = coil_q;
                    design.stage.capacitor_q = capacitor_q;
                    design.device.on_resistance_ohm = on_ohm;
                    count += 1;
                    match solve(&design) {
                        Answer::Solved(solved) => {
                            sized += 1;
                            if let Err(fault) = soft(&solved, &design) {
                                unexplained.push(format!(
                                    "D {duty} Q {loaded_q} {feed:?} {coil_q:?}: {fault}"
                                ));
                            }
                        }
                        Answer::Refused(refusal) if refusal.field.is_some() => {}
                        Answer::Refused(refusal) => {
                            unexplained.push(format!(
                                "D {duty} Q {loaded_q} {feed:?} {coil_q:?}: {}",
                                refusal.reason
                            ));
                        }
                    }
                }
            }
        }
    }
    assert!(sized > 700, "only {sized} of {count} are sized");
    assert!(
        unexplained.is_empty(),
        "{} of {count}:\n{}",
        unexplained.len(),
        unexplained.join("\n")
    );
}

fn solved(design: &Design) -> Solved {
    match solve(design) {
        Answer::Solved(solved) => solved,
        Answer::Refused(refusal) => panic!("{}", refusal.reason),
    }
}

fn lossy() -> Design {
    let mut design = link::base();
    design.stage.coil_q = Some(150.0);
    design.stage.capacitor_q = Some(800.0);
    design.device.on_resistance_ohm = 0.15;
    design.device.diode = Some(Diode {
        forward_v: 0.8,
        slope_ohm: 0.05,
    });
    design.device.capacitance = Capacitance::Constant { c_f: 60e-12 };
    design
}

#[test]
fn power_supply_and_load_agree_two_by_two() {
    let all = solved(&lossy());
    let load = all.values.drain_load;
    let mut without_power = lossy();
    without_power.brief.power_w = None;
    without_power.fitted.drain_load = Some(load);
    let mut without_supply = lossy();
    without_supply.brief.supply_v = None;
    without_supply.fitted.drain_load = Some(load);
    for design in [without_power, without_supply] {
        let other = solved(&design);
        for (a, b) in [
            (all.figures.output_power_w, other.figures.output_power_w),
            (all.values.supply_v, other.values.supply_v),
            (all.values.shunt.c_f, other.values.shunt.c_f),
            (
                all.values.series_capacitor.c_f,
                other.values.series_capacitor.c_f,
            ),
        ] {
            assert!((a / b - 1.0).abs() < 1e-6, "{a} against {b}");
        }
    }
}

#[test]
fn each_pin_stays_and_the_rest_keeps_soft_switching() {
    let free = solved(&lossy()).values;
    let coil = |l_h: f64| Some(Coil { l_h, esr_ohm: None });
    let capacitor = |c_f: f64| Some(Capacitor { c_f, esr_ohm: None });
    for factor in [0.93, 1.0, 1.06] {
        for pin in 0..7 {
            let mut design = lossy();
            let f = &mut design.fitted;
            match pin {
                0 => f.feed = coil(free.feed.l_h * factor),
                1 => f.shunt = capacitor(free.shunt.c_f * factor),
                2 => f.series_coil = coil(free.series_coil.l_h * factor),
                3 => f.series_capacitor = capacitor(free.series_capacitor.c_f * factor),
                4 => {
                    f.drain_load = Some(Load {
                        r_ohm: free.drain_load.r_ohm * factor,
                        x_ohm: 2.0,
                    })
                }
                5 => {
                    f.feed = coil(free.feed.l_h * factor);
                    f.series_capacitor = capacitor(free.series_capacitor.c_f * factor);
                }
                _ => {
                    f.shunt = capacitor(free.shunt.c_f * factor);
                    f.series_coil = coil(free.series_coil.l_h * factor);
                }
            }
            let got = solved(&design);
            soft(&got, &design).unwrap_or_else(|fault| panic!("pin {pin} at {factor}: {fault}"));
            let (wanted, v) = (design.fitted, got.values);
            assert!(wanted.feed.is_none_or(|p| p.l_h == v.feed.l_h));
            assert!(wanted.shunt.is_none_or(|p| p.c_f == v.shunt.c_f));
            assert!(
                wanted
                    .series_coil
                    .is_none_or(|p| (p.l_h / v.series_coil.l_h - 1.0).abs() < 1e-12)
            );
            assert!(
                wanted
                    .series_capacitor
                    .is_none_or(|p| (p.c_f / v.series_capacitor.c_f - 1.0).abs() < 1e-12)
            );
            assert!(wanted.drain_load.is_none_or(|p| p == v.drain_load));
            if pin != 1 && pin != 4 && pin != 6 {
                assert!(
                    (got.figures.output_power_w / 60.0 - 1.0).abs() < 1e-6,
                    "pin {pin} keeps the power"
                );
            }
        }
    }
}

#[test]
fn too_many_pins_name_what_would_do() {
    let free = solved(&lossy()).values;
    let mut design = lossy();
    design.fitted.shunt = Some(Capacitor {
        c_f: 1.2 * free.shunt.c_f,
        esr_ohm: None,
    });
    design.fitted.drain_load = Some(free.drain_load);
    let Answer::Refused(refusal) = solve(&design) else {
        panic!("solved")
    };
    assert_eq!(refusal.field.as_deref(), Some("fitted"));
    assert!(refusal.reason.contains("pF"), "{}", refusal.reason);
}

#[test]
fn a_device_with_too_much_capacitance_is_refused_with_the_highest_carrier() {
    let mut design = lossy();
    design.device.capacitance = Capacitance::Constant { c_f: 2e-9 };
    let Answer::Refused(refusal) = solve(&design) else {
        panic!("solved")
    };
    assert_eq!(refusal.field.as_deref(), Some("device.capacitance"));
    assert!(refusal.reason.contains("MHz"), "{}", refusal.reason);
}

#[test]
fn least_loss_is_never_worse_than_soft_switching_and_keeps_the_limit() {
    for on_ohm in [0.1, 0.5, 1.5] {
        let mut design = lossy();
        design.device.on_resistance_ohm = on_ohm;
        design.device.rating_v = Some(215.0);
        let soft = solved(&design);
        design.stage.aim = evenfall_engine::design::Aim::LeastLoss;
        let least = solved(&design);
        assert!(least.figures.drain_efficiency >= soft.figures.drain_efficiency - 1e-9);
        assert!(least.figures.drain_peak_v <= 0.8 * 215.0 + 1e-6);
        assert!((least.figures.output_power_w / 60.0 - 1.0).abs() < 1e-6);
    }
}
