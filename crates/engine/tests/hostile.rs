//! Input that nobody should give: the engine answers or refuses, and never panics.

use evenfall_engine::answer::Answer;
use evenfall_engine::design::{
    Aim, Capacitance, Capacitor, Coil, Design, Device, Diode, Feed, Fitted, Form, Limits, Load,
    Mismatch, PerWidth, StageChoice, Upper,
};
use evenfall_engine::exchange::{file, link};
use evenfall_engine::{quantity, solve};
use proptest::prelude::*;

/// Numbers as they come and as they should not.
fn number() -> impl Strategy<Value = f64> {
    prop_oneof![
        6 => 1e-3..1e3f64,
        2 => (-15.0..12.0f64).prop_map(|e| libm::pow(10.0, e)),
        1 => prop::sample::select(vec![
            0.0, -0.0, -1.0, f64::NAN, f64::INFINITY, f64::NEG_INFINITY, f64::MIN_POSITIVE, 5e-324, 1e300, -1e300, f64::MAX,
        ]),
    ]
}

fn finite() -> impl Strategy<Value = f64> {
    prop_oneof![
        (-15.0..12.0f64).prop_map(|e| libm::pow(10.0, e)),
        any::<f64>().prop_filter("finite", |x| x.is_finite())
    ]
}

fn design(n: impl Strategy<Value = f64> + 'static) -> impl Strategy<Value = Design> {
    let n = n.boxed();
    let some = prop::option::of(n.clone()).boxed();
    let capacitance = prop_oneof![
        Just(Capacitance::None),
        n.clone().prop_map(|c_f| Capacitance::Constant { c_f }),
        (n.clone(), n.clone(), n.clone()).prop_map(|(cj0_f, built_in_v, grading)| {
            Capacitance::Junction {
                cj0_f,
                built_in_v,
                grading,
            }
        }),
        prop::collection::vec((n.clone(), n.clone()), 1..5).prop_map(|points| {
            let (v, c_f) = points.into_iter().unzip();
            Capacitance::Points { v, c_f }
        }),
    ];
    let feed = prop_oneof![
        n.clone()
            .prop_map(|reactance_ratio| Feed::Choke { reactance_ratio }),
        n.clone().prop_map(|q| Feed::Resonant { q }),
        n.clone().prop_map(|l_h| Feed::Inductance { l_h }),
    ];
    let load = (n.clone(), n.clone())
        .prop_map(|(r_ohm, x_ohm)| Load { r_ohm, x_ohm })
        .boxed();
    let coil = prop::option::of(
        (n.clone(), some.clone()).prop_map(|(l_h, esr_ohm)| Coil { l_h, esr_ohm }),
    )
    .boxed();
    let capacitor = prop::option::of(
        (n.clone(), some.clone()).prop_map(|(c_f, esr_ohm)| Capacitor { c_f, esr_ohm }),
    )
    .boxed();
    let fitted = (
        coil.clone(),
        capacitor.clone(),
        coil,
        capacitor.clone(),
        capacitor,
        prop::option::of(load.clone()),
    )
        .prop_map(
            |(feed, shunt, series_coil, series_capacitor, cross, drain_load)| Fitted {
                cross,
                feed,
                shunt,
                series_coil,
                series_capacitor,
                drain_load,
            },
        );
    let limits = (n.clone(), some.clone(), some.clone(), some.clone()).prop_map(
        |(d, efficiency, junction_c, harmonic_dbc)| Limits {
            drain_fraction_of_rating: d,
            efficiency,
            junction_c,
            harmonic_dbc,
        },
    );
    let brief = (
        n.clone(),
        some.clone(),
        some.clone(),
        load,
        limits,
        prop::option::of([n.clone(), n.clone()]),
        n.clone(),
    );
    let device = (
        n.clone(),
        capacitance,
        prop::option::of(
            (n.clone(), n.clone()).prop_map(|(forward_v, slope_ohm)| Diode {
                forward_v,
                slope_ohm,
            }),
        ),
        [
            some.clone(),
            some.clone(),
            some.clone(),
            some.clone(),
            some.clone(),
            some.clone(),
            some.clone(),
        ],
        ".{0,12}",
        (
            prop::option::of((n.clone(), n.clone(), some.clone())),
            n.clone(),
            n.clone(),
            prop::option::weighted(
                0.3,
                (n.clone(), n.clone(), n.clone(), some.clone(), any::<bool>()).prop_map(
                    |(on_resistance_ohm_m, output_f_per_m, gate_f_per_m, width_m, choose_stack)| {
                        PerWidth {
                            on_resistance_ohm_m,
                            output_f_per_m,
                            gate_f_per_m,
                            width_m,
                            choose_stack,
                        }
                    },
                ),
            ),
        ),
    );
    let stage = (
        prop_oneof![4 => Just(Form::Single), 1 => Just(Form::Differential)],
        prop_oneof![4 => Just(1u32), 1 => 0..6u32],
        prop_oneof![3 => 0.2..0.8f64, 1 => n.clone()],
        n.clone(),
        feed,
        [some.clone(), some],
        prop_oneof![3 => Just(Aim::SoftSwitching), 1 => Just(Aim::LeastLoss)],
        (
            prop_oneof![1 => Just([0.0; 5]), 1 => [-0.3..0.9f64, 0.0..1.0f64, -0.1..0.1f64, -0.1..0.1f64, -0.1..0.1f64].prop_map(|x| x), 1 => [n.clone(), n.clone(), n.clone(), n.clone(), n.clone()]],
            prop::option::weighted(0.3, prop_oneof![0.2..3.0f64, n.clone()]),
            prop::option::weighted(0.2, prop::collection::vec(n.clone(), 1..4)),
        ),
    );
    (".{0,12}", brief, device, stage, fitted).prop_map(|(name, b, d, s, fitted)| Design {
        evenfall: 1,
        name,
        brief: evenfall_engine::design::Brief {
            carrier_hz: b.0,
            power_w: b.1,
            supply_v: b.2,
            load: b.3,
            limits: b.4,
            band_hz: b.5,
            ambient_c: b.6,
        },
        device: Device {
            on_resistance_ohm: d.0,
            capacitance: d.1,
            diode: d.2,
            rating_v: d.3[0],
            rating_a: d.3[1],
            on_resistance_per_k: d.3[2],
            gate_charge_c: d.3[3],
            gate_drive_v: d.3[4],
            fall_time_s: d.3[5],
            junction_to_ambient_k_per_w: d.3[6],
            name: d.4,
            upper: d.5.0.map(|(on_resistance_ohm, across_f, rating_v)| Upper {
                on_resistance_ohm,
                across_f,
                rating_v,
            }),
            threshold_v: d.5.1,
            node_f: d.5.2,
            per_width: d.5.3,
        },
        stage: StageChoice {
            form: s.0,
            stack: s.1,
            duty: s.2,
            loaded_q: s.3,
            feed: s.4,
            coil_q: s.5[0],
            capacitor_q: s.5[1],
            aim: s.6,
            feed_coupling: s.7.0[0],
            cross_share: s.7.0[1],
            mismatch: Mismatch {
                on_resistance: s.7.0[2],
                duty: s.7.0[3],
                capacitance: s.7.0[4],
            },
            trap_ratio: s.7.1,
            gate_supplies_v: s.7.2,
        },
        fitted,
    })
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 3000, ..ProptestConfig::default() })]

    #[test]
    fn any_design_is_answered(d in design(number())) {
        match solve(&d) {
            Answer::Solved(solved) => {
                let curved = matches!(
                    d.device.capacitance,
                    Capacitance::Junction { .. } | Capacitance::Points { .. }
                );
                let bound = if curved { 1e-6 } else { 1e-9 };
                prop_assert!(solved.balance.abs() <= bound, "balance {}", solved.balance);
                prop_assert!(solved.figures.output_power_w.is_finite());
            }
            Answer::Refused(refusal) => prop_assert!(refusal.reason.len() > 10),
        }
    }

    #[test]
    fn any_finite_design_comes_back_from_link_and_file(d in design(finite())) {
        prop_assert_eq!(&file::read(&file::write(&d)).expect("its own file"), &d);
        let (back, problems) = link::read(&link::write(&d));
        prop_assert_eq!(problems, Vec::<String>::new());
        prop_assert_eq!(back, d);
    }

    #[test]
    fn any_text_is_read_or_refused(text in ".{0,80}", unit in prop::sample::select(vec!["", "Hz", "Ω", "F", "dBc"])) {
        if let Ok(value) = quantity::parse(&text, unit) {
            prop_assert!(value.is_finite());
        }
        let (design, _) = link::read(&text);
        prop_assert_eq!(design.evenfall, 1);
        prop_assert!(file::read(&text).is_err());
    }

    #[test]
    fn links_of_odd_pairs_are_read_or_reported(pairs in prop::collection::vec(
        (prop::sample::select(vec!["f", "p", "v", "ck", "c", "fk", "fq", "vf", "l1", "xl", "stage.form", "fitted.shunt.esr_ohm",
            "device.capacitance.v.3", "device.capacitance.v.99999", "brief", "e", "a.b.0.c"]), "[-0-9a-z.+%]{0,9}"), 0..8)) {
        let text: Vec<String> = pairs.iter().map(|(k, v)| format!("{k}={v}")).collect();
        let (design, _) = link::read(&text.join("&"));
        prop_assert_eq!(design.evenfall, 1);
    }
}
