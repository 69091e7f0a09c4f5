//! Published values: sizing against the literature.
//!
//! Sources: R77 F.H. Raab, IEEE Trans. Circuits Syst. CAS-24(12), 1977; S01 N.O. Sokal,
//! QEX 204, 2001 (table from memory, C1 and C2 recomputed); KZ M.K. Kazimierczuk, RF Power
//! Amplifiers, 2008, example 5.1 (from memory, recomputed); GS07 A. Grebennikov, N.O.
//! Sokal, Switchmode RF Power Amplifiers, 2007 (from memory, recomputed); RS78 F.H. Raab,
//! N.O. Sokal, IEEE JSSC SC-13(6), 1978 (from memory, recomputed).

mod common;

use common::{near, solved};
use evenfall_engine::answer::{Answer, Solved};
use evenfall_engine::design::{
    Brief, Capacitor, Coil, Design, Device, Feed, Limits, Load, StageChoice,
};
use evenfall_engine::solve;
use std::f64::consts::{PI, TAU};

/// A lossless design at 1 V into 1 ohm, choke of `ratio` times the load.
fn unit_design(duty: f64, loaded_q: f64, feed: Feed) -> Design {
    Design {
        evenfall: 1,
        name: String::new(),
        brief: Brief {
            carrier_hz: 1.0 / TAU,
            band_hz: None,
            power_w: None,
            supply_v: Some(1.0),
            load: Load {
                r_ohm: 1.0,
                x_ohm: 0.0,
            },
            limits: Limits::default(),
            ambient_c: 25.0,
        },
        device: Device::default(),
        stage: StageChoice {
            duty,
            loaded_q,
            feed,
            ..StageChoice::default()
        },
        fitted: evenfall_engine::design::Fitted::default(),
    }
}

fn choke(reactance_ratio: f64) -> Feed {
    Feed::Choke { reactance_ratio }
}

/// Net series reactance of a unit design.
fn reactance(s: &Solved) -> f64 {
    s.values.series_coil.l_h - 1.0 / s.values.series_capacitor.c_f
}

#[test]
fn ideal_stage_over_duty() {
    // R77 / KZ ch. 5. Loaded Q 10000 and a choke of 1e5 leave 3e-4 of difference.
    for (duty, shunt, x, power, peak, current) in [
        (0.25, 0.213221, 3.56187, 0.0594683, 2.40689, 6.71239),
        (0.35, 0.252510, 2.08330, 0.190532, 2.75364, 4.23989),
        (0.40, 0.243320, 1.68136, 0.294002, 2.97617, 3.60819),
        (
            0.50, 0.18360142, 1.15249413, 0.57680088, 3.56201004, 2.86209589,
        ),
        (0.60, 0.104496, 0.808853, 0.937685, 4.44735, 2.46045),
        (0.75, 0.0221139, 0.448252, 1.50851, 7.11173, 2.15144),
    ] {
        let s = solved(&unit_design(duty, 1e4, choke(1e5)));
        near("shunt", s.values.shunt.c_f, shunt, 6e-4);
        near("reactance", reactance(&s), x, 4e-4);
        near("power", s.figures.output_power_w, power, 4e-4);
        near("peak", s.figures.drain_peak_v, peak, 4e-4);
        near(
            "switch current",
            s.figures.switch_peak_a / s.figures.supply_current_a,
            current,
            4e-4,
        );
    }
}

#[test]
fn ideal_stage_harmonics_of_the_drain() {
    // R77, recomputed.
    let s = solved(&unit_design(0.5, 1e4, choke(1e5)));
    let wanted = [
        1.63886,
        0.84770,
        2.0 / 9.0,
        0.14325,
        2.0 / 25.0,
        0.05907,
        2.0 / 49.0,
    ];
    for (order, want) in (1..).zip(wanted) {
        near(
            &format!("harmonic {order}"),
            s.drain_harmonics_v[order],
            want,
            1e-3,
        );
    }
    near(
        "switch rms",
        s.figures.switch_rms_a / s.figures.supply_current_a,
        (PI * PI + 28.0).sqrt() / 4.0,
        3e-4,
    );
}

#[test]
fn finite_loaded_q() {
    // S01 table: power with every harmonic to 3e-4, capacitors to every digit.
    for (q, power, shunt, series) in [
        (20.0, 0.56402, 0.19111, 0.05313),
        (10.0, 0.54974, 0.19790, 0.11375),
        (5.0, 0.51659, 0.20907, 0.26924),
        (3.0, 0.46453, 0.21834, 0.63467),
        (2.5, 0.43550, 0.22036, 1.01219),
        (2.0, 0.38888, 0.21994, 3.05212),
    ] {
        let s = solved(&unit_design(0.5, q, choke(1e6)));
        near("power", s.figures.total_output_power_w, power, 4e-4);
        near("shunt", s.values.shunt.c_f, shunt, 1e-4);
        near("series", s.values.series_capacitor.c_f, series, 1e-4);
        near(
            "lossless efficiency",
            s.figures.total_output_power_w / s.figures.supply_power_w,
            1.0,
            1e-9,
        );
        assert!(s.figures.turn_on_v.abs() < 1e-7 && s.figures.turn_on_slope_v_per_s.abs() < 1e-7);
    }
}

#[test]
fn least_loaded_q_is_found_and_named() {
    // S01: 1.7879 at half duty with a choke.
    let Answer::Refused(refusal) = solve(&unit_design(0.5, 1.6, choke(1e6))) else {
        panic!("solved")
    };
    assert_eq!(refusal.field.as_deref(), Some("stage.loaded_q"));
    assert!(refusal.reason.contains("1.7879"), "{}", refusal.reason);
}

#[test]
fn finite_feed_coil() {
    // GS07, recomputed, at infinite loaded Q; here 10000. Feed w L1/R, shunt, power, X/R, peak.
    for (q, feed, shunt, power, x, peak) in [
        (1.41193, 0.73326, 0.68408, 1.36324, 0.0, 3.6468),
        (1.468, 0.661, 0.702, 1.331, -0.160, 3.655),
        (1.2915, 1.0371, 0.5781, 1.2633, 0.2761, 3.631),
        (2.0, 3.534, 0.071, 0.056, -4.902, 3.776),
    ] {
        let s = solved(&unit_design(0.5, 1e4, Feed::Resonant { q }));
        near("feed", s.values.feed.l_h, feed, 8e-3);
        near("shunt", s.values.shunt.c_f, shunt, 8e-3);
        near("power", s.figures.output_power_w, power, 1.2e-2);
        assert!(
            (reactance(&s) - x).abs() < 2e-3 * (1.0 + x.abs()),
            "X {} against {x}",
            reactance(&s)
        );
        near("peak", s.figures.drain_peak_v, peak, 1e-3);
    }
}

#[test]
fn small_losses() {
    // RS78: on-resistance; S01: shunt capacitor; KZ: feed coil; the series branch is 1.
    let base = unit_design(0.5, 1e4, choke(1e5));
    let r = 1e-5;
    let mut on = base.clone();
    on.device.on_resistance_ohm = r;
    let s = solved(&on);
    near(
        "on-resistance",
        s.losses.switch_w / s.figures.output_power_w / r,
        (PI * PI + 28.0) / (2.0 * (PI * PI + 4.0)),
        5e-4,
    );
    let ideal = solved(&base).values;
    let mut built = base;
    built.fitted = evenfall_engine::design::Fitted {
        cross: None,
        feed: Some(Coil {
            l_h: ideal.feed.l_h,
            esr_ohm: Some(r),
        }),
        shunt: Some(Capacitor {
            c_f: ideal.shunt.c_f,
            esr_ohm: Some(r),
        }),
        series_coil: Some(Coil {
            l_h: ideal.series_coil.l_h,
            esr_ohm: Some(r),
        }),
        series_capacitor: Some(Capacitor {
            c_f: ideal.series_capacitor.c_f,
            esr_ohm: Some(r),
        }),
        drain_load: Some(ideal.drain_load),
    };
    let s = solved(&built);
    let part = |w: f64| w / s.figures.output_power_w / r;
    near("feed coil", part(s.losses.feed_coil_w), 0.5768, 5e-4);
    near(
        "shunt capacitor",
        part(s.losses.shunt_capacitor_w),
        (PI * PI - 4.0) / (2.0 * (PI * PI + 4.0)),
        1e-3,
    );
    near("series coil", part(s.losses.series_coil_w), 1.0, 5e-4);
}

#[test]
fn worked_example_of_kazimierczuk() {
    // KZ example 5.1 gives infinite-Q values; at infinite loaded Q they must come back.
    let mut design = unit_design(0.5, 1e4, choke(1e5));
    design.brief.carrier_hz = 1.2e6;
    design.brief.supply_v = Some(100.0);
    design.brief.power_w = Some(80.0);
    let s = solved(&design);
    near("load", s.values.drain_load.r_ohm, 72.100, 4e-4);
    near("supply current", s.figures.supply_current_a, 0.8, 4e-4);
    near("drain peak", s.figures.drain_peak_v, 356.20, 4e-4);
    near("switch peak", s.figures.switch_peak_a, 2.2897, 4e-4);
    near("shunt", s.values.shunt.c_f, 337.74e-12, 5e-4);
}

#[test]
fn computed_reference() {
    // 12 V, 10 W in all, 7 MHz, loaded Q 5, choke, lossless (recomputed).
    let mut design = unit_design(0.5, 5.0, choke(1e6));
    design.brief.carrier_hz = 7e6;
    design.brief.supply_v = Some(12.0);
    design.fitted.drain_load = Some(Load {
        r_ohm: 7.43927,
        x_ohm: 0.0,
    });
    let s = solved(&design);
    near("power", s.figures.total_output_power_w, 10.0, 1e-4);
    near("shunt", s.values.shunt.c_f, 638.975e-12, 1e-4);
    near("coil", s.values.series_coil.l_h, 845.712e-9, 1e-4);
    near("series", s.values.series_capacitor.c_f, 822.859e-12, 1e-4);
    near("drain peak", s.figures.drain_peak_v, 43.397, 1e-4);
    near("switch peak", s.figures.switch_peak_a, 2.3124, 1e-4);
    for (got, want) in s.harmonics_dbc.iter().zip([-19.61, -35.53, -43.43, -50.19]) {
        assert!((got - want).abs() < 0.006, "{got} dBc against {want}");
    }
}

#[test]
fn resonant_part_of_one_still_converts_well() {
    // Common practice: network Q as low as 1, excess reactance apart (recomputed: 92.5 %).
    let mut design = unit_design(0.5, 2.1525, choke(1e6));
    design.fitted = evenfall_engine::design::Fitted {
        cross: None,
        feed: Some(Coil {
            l_h: 1e6,
            esr_ohm: None,
        }),
        shunt: Some(Capacitor {
            c_f: 0.18360142,
            esr_ohm: None,
        }),
        series_coil: Some(Coil {
            l_h: 2.15249413,
            esr_ohm: None,
        }),
        series_capacitor: Some(Capacitor {
            c_f: 1.0,
            esr_ohm: None,
        }),
        drain_load: Some(Load {
            r_ohm: 1.0,
            x_ohm: 0.0,
        }),
    };
    let efficiency = solved(&design).figures.drain_efficiency;
    assert!(efficiency > 0.92 && efficiency < 0.93, "{efficiency}");
}
