//! Parts from any numbers: an answer that holds or a refusal, never a panic or a hang.

use evenfall_engine::parts::series::{Kind, Series, combine};
use evenfall_engine::parts::solenoid::{self, Solenoid};
use evenfall_engine::parts::spiral::{self, Metal, Shape, Spiral};
use evenfall_engine::parts::toroid::{self, Core, CoreLoss, Wire};
use evenfall_engine::parts::{PartError, skin};
use proptest::prelude::*;

/// Numbers that a form may send, around `usual`.
fn number(usual: std::ops::Range<f64>) -> impl Strategy<Value = f64> {
    let logs = libm::log(usual.start)..libm::log(usual.end);
    prop_oneof![
        12 => logs.prop_map(libm::exp),
        1 => prop::sample::select(vec![
            0.0, -0.0, -1.0, f64::NAN, f64::INFINITY, f64::NEG_INFINITY, f64::MIN_POSITIVE, 5e-324,
            1e300, -1e300, f64::MAX,
        ]),
        1 => any::<f64>(),
    ]
}

fn series() -> impl Strategy<Value = Series> {
    prop::sample::select(vec![
        Series::E6,
        Series::E12,
        Series::E24,
        Series::E48,
        Series::E96,
    ])
}

fn shape() -> impl Strategy<Value = Shape> {
    prop::sample::select(vec![Shape::Square, Shape::Hexagon, Shape::Octagon])
}

/// A refusal has something to say.
fn told(error: &PartError) -> bool {
    !error.to_string().is_empty()
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 400, ..ProptestConfig::default() })]

    #[test]
    fn preferred_values(s in series(), wanted in number(1e-16..1e3), stock in [number(1e-16..1e3), number(1e-16..1e3)]) {
        match s.neighbours(wanted) {
            Ok([below, above]) => {
                prop_assert!(below <= wanted * (1.0 + 2e-12) && above >= wanted * (1.0 - 2e-12));
                let nearest = s.nearest(wanted).unwrap();
                prop_assert!(nearest == below || nearest == above);
                prop_assert!((nearest / wanted - 1.0).abs() < 0.25);
            }
            Err(error) => prop_assert!(told(&error)),
        }
        match combine(s, wanted, Kind::Capacitance, stock) {
            Ok(found) => prop_assert!(!found.is_empty() && found.iter().all(|c| c.error.is_finite())),
            Err(error) => prop_assert!(told(&error)),
        }
    }

    #[test]
    fn any_solenoid(
        turns in number(1.0..300.0), d in number(1e-3..0.3), pitch in number(1.0..5.0), wire in number(0.001..0.4),
        lead_m in number(1e-3..1e-1), rho in number(1e-8..1e-6), f in number(1e3..1e10),
    ) {
        let wire_m = wire * d;
        let coil = Solenoid { turns, diameter_m: d, pitch_m: pitch * wire_m, wire_m, lead_m, resistivity_ohm_m: rho };
        match coil.figures(f) {
            Ok(found) => {
                for number in [found.inductance_h, found.resistance_ohm, found.q, found.current_sheet_h] {
                    prop_assert!(number.is_finite() && number > 0.0, "{coil:?} {found:?}");
                }
            }
            Err(error) => prop_assert!(told(&error)),
        }
        prop_assert!(skin::depth(rho, f).is_ok_and(|d| d > 0.0) || skin::depth(rho, f).is_err());
    }

    #[test]
    fn any_toroid(
        al_h in number(1e-9..1e-6), outer_m in number(1e-2..1e-1), inner_m in number(3e-3..5e-2), height_m in number(1e-3..1e-1),
        q in prop_oneof![Just(None), number(1.0..1e3).prop_map(Some)], ohm in any::<bool>(),
        diameter_m in number(1e-4..3e-3), lead_m in number(1e-3..1e-1), l in number(1e-8..1e-3), f in number(1e3..1e9),
    ) {
        let loss = match q {
            None => CoreLoss::None,
            Some(ohms) if ohm => CoreLoss::ParallelOhm(ohms),
            Some(q) => CoreLoss::Q(q),
        };
        let core = Core { al_h, outer_m, inner_m, height_m, loss };
        let wire = Wire { diameter_m, lead_m, resistivity_ohm_m: skin::COPPER_OHM_M };
        match toroid::wind(&core, &wire, l, f) {
            Ok(found) => {
                prop_assert!((1..=2).contains(&found.len()));
                for t in &found {
                    prop_assert!(t.turns > 0 && t.q > 0.0 && t.q.is_finite() && t.most_turns >= 1);
                    prop_assert!((t.inductance_h / (l * (1.0 + t.error)) - 1.0).abs() < 1e-9);
                }
                prop_assert!(found.len() < 2 || found[0].error * found[1].error < 0.0);
            }
            Err(error) => prop_assert!(told(&error)),
        }
    }

    #[test]
    fn any_spiral(
        shape in shape(), turns in number(1.0..20.0), outer_m in number(5e-5..1e-3), width_m in number(1e-6..3e-5),
        spacing_m in number(1e-6..1e-5), sheet_ohm in number(1e-3..1e-1), thickness_m in number(3e-7..5e-6), f in number(1e7..1e11),
    ) {
        let metal = Metal { sheet_ohm, thickness_m };
        match (Spiral { shape, turns, outer_m, width_m, spacing_m, metal }).figures(f) {
            Ok(found) => {
                for number in [found.inductance_h, found.wheeler_h, found.resistance_ohm, found.q] {
                    prop_assert!(number.is_finite() && number > 0.0, "{found:?}");
                }
                // The authors' two expressions agree within a few per cent for usual fills.
                if (0.1..0.8).contains(&found.fill) {
                    prop_assert!((found.inductance_h / found.wheeler_h - 1.0).abs() < 0.08, "{found:?}");
                }
            }
            Err(error) => prop_assert!(told(&error)),
        }
    }

    #[test]
    fn any_spiral_wanted(
        shape in shape(), l in number(1e-10..1e-7), f in number(1e7..1e11), widths in [number(1e-6..5e-6), number(5e-6..1e-4)],
        spacing_m in number(1e-6..1e-5), outer_m in number(5e-5..2e-3), least_hole in number(0.01..0.8), least_q in prop::option::of(number(1.0..100.0)),
        sheet_ohm in number(1e-3..1e-1), thickness_m in number(3e-7..5e-6),
    ) {
        let metal = Metal { sheet_ohm, thickness_m };
        let wanted = spiral::Wanted { inductance_h: l, frequency_hz: f, shape, metal, widths_m: widths, spacing_m, outer_m, least_hole, least_q };
        match spiral::draw(&wanted) {
            Ok(found) => {
                prop_assert!(!found.is_empty());
                for choice in found {
                    let again = choice.spiral.figures(f).unwrap();
                    prop_assert!((again.inductance_h / l - 1.0).abs() < 1e-9);
                    prop_assert!(choice.spiral.outer_m <= outer_m && again.inner_m >= least_hole * choice.spiral.outer_m * 0.999_999);
                    prop_assert!((widths[0]..=widths[1]).contains(&choice.spiral.width_m));
                }
            }
            Err(error) => prop_assert!(told(&error)),
        }
    }
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 150, ..ProptestConfig::default() })]

    #[test]
    fn any_solenoid_wanted(
        l in number(1e-8..1e-3), f in number(1e4..1e9), wires_m in prop::collection::vec(number(1e-4..3e-3), 0..6),
        formers_m in [number(1e-3..1e-2), number(1e-2..1e-1)], half_turns in any::<bool>(), ratio in [number(1.0..1.5), number(1.5..10.0)],
        longest_m in number(1e-2..1.0), lead_m in prop_oneof![Just(0.0), number(1e-3..1e-1)],
        limits in [prop::option::of(number(1.0..500.0)), prop::option::of(number(1.0..10.0)), prop::option::of(number(0.1..10.0))],
    ) {
        let mut wanted = solenoid::wind::Wanted::new(l, f);
        wanted.wires_m = wires_m;
        wanted.formers_m = formers_m;
        wanted.half_turns = half_turns;
        wanted.pitch_per_wire = ratio;
        wanted.longest_m = longest_m;
        wanted.lead_m = lead_m;
        wanted.least_q = limits[0];
        wanted.least_resonance = limits[1];
        wanted.current_a_rise_k = limits[2].map(|a| [a, 40.0]);
        match solenoid::wind::wind(&wanted) {
            Ok(found) => {
                prop_assert!(!found.is_empty());
                for choice in found {
                    let again = choice.coil.figures(f).unwrap();
                    prop_assert!((again.inductance_h / l - 1.0).abs() < 1e-9, "{wanted:?} {choice:?}");
                    prop_assert!(again.length_m <= longest_m * (1.0 + 1e-9));
                    let steps = if half_turns { 2.0 } else { 1.0 } * choice.coil.turns;
                    prop_assert_eq!(steps, libm::round(steps));
                }
            }
            Err(error) => prop_assert!(told(&error)),
        }
    }
}

fn usual(range: std::ops::Range<f64>) -> impl Strategy<Value = f64> {
    (libm::log(range.start)..libm::log(range.end)).prop_map(libm::exp)
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 200, ..ProptestConfig::default() })]

    /// Whatever is asked within reason is met to 1e-9, or bracketed by what can be had.
    #[test]
    fn usual_coils(l in usual(2e-9..2e-3), f in usual(1e5..1e9), half_turns in any::<bool>(), lead_m in prop_oneof![Just(0.0), usual(1e-3..3e-2)]) {
        let mut wanted = solenoid::wind::Wanted::new(l, f);
        wanted.half_turns = half_turns;
        wanted.lead_m = lead_m;
        match solenoid::wind::wind(&wanted) {
            Ok(found) => for choice in found {
                let again = choice.coil.figures(f).unwrap();
                prop_assert!((again.inductance_h / l - 1.0).abs() < 1e-9, "{choice:?}");
                prop_assert!(again.q > 0.0);
            },
            Err(PartError::Unreachable { below_h, above_h, .. }) => {
                prop_assert!(below_h.is_some() || above_h.is_some());
                prop_assert!(below_h.is_none_or(|b| b < l) && above_h.is_none_or(|a| a > l));
            }
            Err(other) => prop_assert!(false, "{other}"),
        }
    }

    #[test]
    fn usual_spirals(shape in shape(), l in usual(2e-10..5e-8), f in usual(1e8..3e10), outer_m in usual(1e-4..1e-3)) {
        let metal = Metal { sheet_ohm: 0.02, thickness_m: 2e-6 };
        let wanted = spiral::Wanted { inductance_h: l, frequency_hz: f, shape, metal, widths_m: [2e-6, 20e-6], spacing_m: 2e-6, outer_m, least_hole: 0.2, least_q: Some(8.0) };
        match spiral::draw(&wanted) {
            Ok(found) => for choice in found {
                let again = choice.spiral.figures(f).unwrap();
                prop_assert!((again.inductance_h / l - 1.0).abs() < 1e-9, "{choice:?}");
            },
            Err(PartError::Unreachable { below_h, above_h, .. }) => {
                prop_assert!(below_h.is_some() || above_h.is_some());
                prop_assert!(below_h.is_none_or(|b| b < l) && above_h.is_none_or(|a| a > l));
            }
            Err(other) => prop_assert!(false, "{other}"),
        }
    }

    /// More turns or a closer pitch never make less inductance where coils are searched for.
    #[test]
    fn solenoids_rise(turns in usual(1.5..200.0), d in usual(2e-3..5e-2), wire in usual(0.005..0.3), pitch in usual(1.0..4.0)) {
        let coil = Solenoid { turns, diameter_m: d, pitch_m: (pitch * wire * d).min(0.45 * d), wire_m: wire * d, lead_m: 0.0, resistivity_ohm_m: skin::COPPER_OHM_M };
        prop_assume!(coil.pitch_m >= coil.wire_m);
        let value = |coil: Solenoid| coil.figures(1e6).unwrap().inductance_h;
        let wider = Solenoid { pitch_m: 1.05 * coil.pitch_m, ..coil };
        let longer = Solenoid { turns: turns + 0.5, ..coil };
        prop_assert!(value(wider) < value(coil) && value(coil) < value(longer), "{coil:?}");
    }
}
