//! Capacitance that depends on voltage: the law itself, the stage on it, its sizing.

use evenfall_engine::answer::Answer;
use evenfall_engine::charge::{ChargeLaw, LawError};
use evenfall_engine::design::{Capacitance, Design, Diode, Feed};
use evenfall_engine::exchange::link;
use evenfall_engine::sizing::{self, SizingError};

fn laws() -> Vec<ChargeLaw> {
    let volts = [0.0, 1.0, 3.0, 10.0, 40.0, 100.0];
    let farads = [900e-12, 610e-12, 400e-12, 240e-12, 130e-12, 95e-12];
    let mut laws = vec![
        ChargeLaw::points(&volts, &farads).expect("falling points"),
        ChargeLaw::points(&[2.0, 5.0], &[1e-10, 2e-10]).expect("two rising points"),
    ];
    for grading in [0.0, 0.3, 0.5, 0.9995, 1.0, 1.5, 2.0] {
        laws.push(ChargeLaw::junction(900e-12, 0.8, grading).expect("a junction"));
    }
    let more = laws[2].scaled(0.4).beside(50e-12);
    laws.push(more);
    laws
}

#[test]
fn charge_and_energy_are_the_integrals_of_the_capacitance() {
    for (number, law) in laws().iter().enumerate() {
        let ends = [-2.0, -0.41, -0.3, 0.0, 0.7, 2.5, 17.0, 63.0, 140.0];
        for pair in ends.windows(2) {
            // Simpson's rule on short cells; the straight part's bend lies on none of them.
            const CELLS: usize = 20_000;
            let h = (pair[1] - pair[0]) / CELLS as f64;
            let (mut charge, mut energy) = (0.0, 0.0);
            for k in 0..=2 * CELLS {
                let v = pair[0] + 0.5 * h * k as f64;
                let weight = if k == 0 || k == 2 * CELLS {
                    1.0
                } else if k % 2 == 1 {
                    4.0
                } else {
                    2.0
                };
                let c = law.at(v).0;
                assert!(c > 0.0, "law {number} at {v} V");
                charge += weight * c * h / 6.0;
                energy += weight * c * v * h / 6.0;
            }
            let got = law.at(pair[1]).1 - law.at(pair[0]).1;
            assert!(
                (got / charge - 1.0).abs() < 1e-7,
                "law {number}, {pair:?}: {got:e} {charge:e}"
            );
            let got = law.energy_j(pair[1]) - law.energy_j(pair[0]);
            assert!(
                (got - energy).abs() < 1e-7 * energy.abs().max(1e-3 * charge),
                "law {number}, {pair:?}: {got:e} {energy:e}"
            );
        }
        assert!(
            law.at(0.0).1.abs() < 1e-26,
            "law {number} holds charge at 0 V"
        );
    }
}

#[test]
fn points_are_met_and_never_overshot() {
    let volts = [0.0, 1.0, 3.0, 10.0, 40.0, 100.0];
    let farads = [900e-12, 610e-12, 400e-12, 240e-12, 130e-12, 95e-12];
    let law = ChargeLaw::points(&volts, &farads).expect("points");
    for (v, c) in volts.iter().zip(&farads) {
        assert!((law.at(*v).0 / c - 1.0).abs() < 1e-12);
    }
    let mut before = f64::INFINITY;
    for k in 0..5000 {
        let c = law.at(k as f64 * 0.025).0;
        assert!(c <= before, "rises at {} V", k as f64 * 0.025);
        before = c;
    }
}

#[test]
fn what_cannot_be_is_refused_with_its_row() {
    let row = |volts: &[f64], farads: &[f64]| match ChargeLaw::points(volts, farads) {
        Err(LawError::Row { row, .. }) => row,
        other => panic!("{other:?}"),
    };
    assert_eq!(row(&[0.0, 5.0, 5.0], &[3e-10, 2e-10, 1e-10]), 3);
    assert_eq!(row(&[0.0, 5.0, 9.0], &[3e-10, -2e-10, 1e-10]), 2);
    assert_eq!(row(&[0.0, f64::NAN, 9.0], &[3e-10, 2e-10, 1e-10]), 2);
    assert!(matches!(
        ChargeLaw::points(&[1.0], &[1e-10]),
        Err(LawError::Count {
            volts: 1,
            farads: 1
        })
    ));
    assert!(matches!(
        ChargeLaw::junction(1e-10, 0.8, -0.1),
        Err(LawError::Value {
            what: "the grading",
            ..
        })
    ));
    let mut design = link::base();
    design.device.capacitance = Capacitance::Points {
        v: vec![0.0, 4.0, 3.0],
        c_f: vec![3e-10, 2e-10, 1e-10],
    };
    match evenfall_engine::solve(&design) {
        Answer::Refused(refusal) => {
            assert_eq!(refusal.field.as_deref(), Some("device.capacitance"));
            assert!(refusal.reason.contains("row 3"), "{}", refusal.reason);
        }
        Answer::Solved(_) => panic!("solved"),
    }
}

fn junction(cj0_f: f64, built_in_v: f64, grading: f64) -> Design {
    let mut design = link::base();
    design.device.capacitance = Capacitance::Junction {
        cj0_f,
        built_in_v,
        grading,
    };
    design
}

/// Chudobiak, IEEE TCAS-I 41(12), 1994 (from memory; proof by charge): with all of the shunt a
/// junction, power and currents stay those of the ideal stage and only the drain's waveform
/// changes; with V far above the built-in potential and m = 1/2 the peak is 4.3 to 4.6 V.
#[test]
fn a_pure_junction_leaves_power_and_currents_ideal() {
    let mut design = junction(1000e-12, 0.5, 0.5);
    design.device.on_resistance_ohm = 0.0;
    design.brief.supply_v = Some(100.0);
    design.stage.loaded_q = 300.0;
    design.stage.feed = Feed::Choke {
        reactance_ratio: 1000.0,
    };
    // The device that leaves nothing to fit: its needed size is what the refusal or the fitted
    // capacitor says, twice refined.
    for _ in 0..60 {
        let factor = match sizing::sized_stage(&design) {
            Ok((stage, _)) => {
                let factor = 1.0 + stage.shunt.value / stage.device_f;
                if factor - 1.0 < 1e-7 {
                    break;
                }
                factor
            }
            Err(SizingError::Capacitance {
                device_f, needed_f, ..
            }) => needed_f / device_f - 1e-8,
            Err(error) => panic!("{error}"),
        };
        if let Capacitance::Junction { cj0_f, .. } = &mut design.device.capacitance {
            *cj0_f *= factor;
        }
    }
    let (stage, reading) = sizing::sized_stage(&design).expect("the pure junction");
    assert!(stage.shunt.value < 1e-6 * stage.device_f);
    let f = &reading.figures;
    let load = stage.load.r_ohm;
    let power = f.output_power_w * load / (100.0 * 100.0);
    assert!((power / 0.57680088 - 1.0).abs() < 2e-3, "P R / V^2 {power}");
    let peak_a = f.switch_peak_a / f.supply_current_a;
    assert!(
        (peak_a / 2.86209589 - 1.0).abs() < 3e-3,
        "ipk / Idc {peak_a}"
    );
    let peak_v = f.drain_peak_v / 100.0;
    assert!((4.3..=4.6).contains(&peak_v), "vpk / V {peak_v}");
}

#[test]
fn a_grading_of_zero_is_a_constant_capacitance() {
    for diode in [
        None,
        Some(Diode {
            forward_v: 0.7,
            slope_ohm: 0.05,
        }),
    ] {
        let mut curved = junction(80e-12, 0.8, 0.0);
        curved.device.on_resistance_ohm = 0.2;
        curved.device.diode = diode;
        curved.stage.coil_q = Some(150.0);
        curved.stage.capacitor_q = Some(800.0);
        let mut flat = curved.clone();
        flat.device.capacitance = Capacitance::Constant { c_f: 80e-12 };
        let (stage, a) = sizing::sized_stage(&curved).expect("curved");
        let (_, b) = sizing::sized_stage(&flat).expect("flat");
        let close = |x: f64, y: f64| assert!((x / y - 1.0).abs() < 2e-6, "{x} {y}");
        close(a.figures.drain_peak_v, b.figures.drain_peak_v);
        close(a.figures.supply_power_w, b.figures.supply_power_w);
        close(a.losses.switch_w, b.losses.switch_w);
        close(a.harmonics_dbc[0], b.harmonics_dbc[0]);
        // As built with a load off by half, so that diode or hard switching come in.
        for factor in [0.5, 1.8] {
            let mut built = stage.clone();
            built.load.r_ohm *= factor;
            let constant = evenfall_engine::stage::Stage {
                device_law: None,
                ..built.clone()
            };
            let (a, b) = (
                built.solve().expect("curved"),
                constant.solve().expect("flat"),
            );
            close(a.figures.output_power_w, b.figures.output_power_w);
            close(a.figures.switch_peak_a, b.figures.switch_peak_a);
            close(a.figures.drain_peak_v, b.figures.drain_peak_v);
            assert!((a.figures.diode_fraction - b.figures.diode_fraction).abs() < 1e-6);
        }
    }
}

#[test]
fn the_peak_rises_above_that_of_a_constant_capacitance() {
    let mut design = junction(900e-12, 0.8, 0.5);
    design.device.on_resistance_ohm = 0.12;
    let (_, reading) = sizing::sized_stage(&design).expect("sized");
    let flat = reading
        .figures
        .constant_capacitance_peak_v
        .expect("a peak to compare with");
    assert!(reading.figures.drain_peak_v > 1.1 * flat);
    assert!(reading.balance.abs() < 1e-6);
    assert!(reading.figures.turn_on_v.abs() < 1e-4 * 48.0);
}

/// A device too large says by how much, and the feed coil on offer makes room for it.
#[test]
fn a_device_too_large_is_offered_a_feed_coil() {
    for capacitance in [
        Capacitance::Constant { c_f: 140e-12 },
        Capacitance::Junction {
            cj0_f: 1100e-12,
            built_in_v: 0.8,
            grading: 0.5,
        },
    ] {
        let mut design = link::base();
        design.device.on_resistance_ohm = 0.1;
        design.device.capacitance = capacitance;
        let Err(SizingError::Capacitance { highest_hz, .. }) = sizing::sized_stage(&design) else {
            panic!("room for it");
        };
        let Answer::Refused(refusal) = evenfall_engine::solve(&design) else {
            panic!("room for it");
        };
        let feed = refusal.offer.expect("a feed coil");
        let with = Design {
            stage: evenfall_engine::design::StageChoice {
                feed,
                ..design.stage.clone()
            },
            ..design.clone()
        };
        let (stage, _) = sizing::sized_stage(&with).expect("the feed coil on offer");
        assert!(stage.shunt.value < 0.1 * stage.device_f);
        // And so does the carrier that it names.
        design.brief.carrier_hz = highest_hz * (1.0 - 1e-6);
        let (stage, _) = sizing::sized_stage(&design).expect("at the highest carrier");
        assert!(
            stage.shunt.value < 1e-3 * stage.device_f,
            "{:e}",
            stage.shunt.value
        );
    }
}
