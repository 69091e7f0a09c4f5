//! Studies: rows that agree with the design itself, and windows that are true.

use evenfall_engine::answer::Answer;
use evenfall_engine::design::{Capacitance, Design, Diode, Feed};
use evenfall_engine::exchange::link;
use evenfall_engine::solve;
use evenfall_engine::study::{Moves, Row, Study, collision, window};

fn design() -> Design {
    let mut design = link::base();
    design.device.on_resistance_ohm = 0.12;
    design.device.capacitance = Capacitance::Constant { c_f: 60e-12 };
    design.device.diode = Some(Diode {
        forward_v: 0.8,
        slope_ohm: 0.05,
    });
    design.device.rating_v = Some(250.0);
    design.stage.coil_q = Some(150.0);
    design.stage.feed = Feed::Choke {
        reactance_ratio: 10.0,
    };
    design
}

fn rows(study: &Study) -> Vec<Row> {
    (0..study.len()).map(|k| study.row(k)).collect()
}

#[test]
fn a_row_is_the_design_at_that_loaded_q() {
    let study = Study::new(&design(), Moves::LoadedQ, 1.5, 30.0, 25).expect("a study");
    let mut refused = 0;
    for row in rows(&study) {
        let mut there = design();
        there.stage.loaded_q = row.at;
        match (solve(&there), row.outcome) {
            (Answer::Solved(s), Ok(p)) => {
                assert_eq!(s.figures.output_power_w, p.output_power_w);
                assert_eq!(s.figures.drain_efficiency, p.drain_efficiency);
                assert_eq!(s.harmonics_dbc[..4], p.harmonics_dbc);
                assert_eq!(
                    s.verdicts.iter().filter(|v| !v.met).count(),
                    p.failing.len()
                );
            }
            (Answer::Refused(r), Err(reason)) => {
                refused += 1;
                assert_eq!(r.reason, reason);
            }
            (answer, outcome) => panic!("{answer:?} against {outcome:?}"),
        }
    }
    assert!(refused > 0, "the range starts below the least loaded Q");
}

#[test]
fn the_stage_as_built_is_in_its_own_studies() {
    let Answer::Solved(own) = solve(&design()) else {
        panic!("refused")
    };
    for (moves, at) in [
        (Moves::Carrier, 13.56e6),
        (Moves::Load, own.values.drain_load.r_ohm),
        (Moves::Supply, 48.0),
        (Moves::Duty, 0.5),
    ] {
        let study = Study::new(&design(), moves, 0.8 * at, at, 9).expect("a study");
        let last = study.row(8).outcome.expect("a stage");
        assert!(
            (last.output_power_w / own.figures.output_power_w - 1.0).abs() < 1e-9,
            "{moves:?}"
        );
        assert!(
            (last.drain_peak_v / own.figures.drain_peak_v - 1.0).abs() < 1e-9,
            "{moves:?}"
        );
        assert!(study.row(0).outcome.expect("a stage").output_power_w != last.output_power_w);
    }
    // Power goes with the square of the supply.
    let study = Study::new(&design(), Moves::Supply, 24.0, 48.0, 2).expect("a study");
    let power = |k: usize| study.row(k).outcome.expect("a stage").output_power_w;
    assert!((power(1) / power(0) / 4.0 - 1.0).abs() < 1e-6);
}

#[test]
fn the_window_meets_every_limit_and_its_neighbours_do_not() {
    let mut wanted = design();
    wanted.brief.limits.harmonic_dbc = Some(-24.0);
    wanted.brief.limits.efficiency = Some(0.85);
    wanted.brief.band_hz = Some([13.0e6, 14.0e6]);
    let study = Study::new(&wanted, Moves::LoadedQ, 2.0, 40.0, 60).expect("a study");
    let rows = rows(&study);
    let found = window(&rows).expect("a window");
    for row in &rows {
        let good = row.outcome.as_ref().is_ok_and(|p| p.failing.is_empty());
        assert_eq!(
            good,
            row.at >= found.from && row.at <= found.to,
            "at {}",
            row.at
        );
        if let Ok(p) = &row.outcome {
            let [least, most] = p.band_power_w.expect("a band");
            assert!(least <= p.output_power_w && p.output_power_w <= most);
        }
    }
    // A low loaded Q keeps the power flatter over the band than a high one.
    let flat = |k: usize| {
        rows[k]
            .outcome
            .as_ref()
            .map(|p| p.band_power_w.map(|[a, b]| b / a))
            .ok()
            .flatten()
    };
    assert!(flat(5) < flat(55));
    wanted.brief.limits.efficiency = Some(0.94);
    wanted.brief.limits.harmonic_dbc = Some(-30.0);
    let study = Study::new(&wanted, Moves::LoadedQ, 2.0, 40.0, 60).expect("a study");
    let rows: Vec<Row> = (0..60).map(|k| study.row(k)).collect();
    assert_eq!(window(&rows), None);
    let why = collision(&rows);
    assert!(
        why.contains("harmonics") || why.contains("efficiency"),
        "{why}"
    );
}

#[test]
fn what_cannot_be_studied_is_refused() {
    for (from, to, points) in [
        (5.0, 2.0, 10),
        (0.0, 2.0, 10),
        (f64::NAN, 2.0, 10),
        (2.0, 5.0, 1),
        (2.0, 5.0, 100_000),
    ] {
        assert!(Study::new(&design(), Moves::LoadedQ, from, to, points).is_err());
    }
    let mut pinned = design();
    pinned.fitted.series_coil = Some(evenfall_engine::design::Coil {
        l_h: 1.5e-6,
        esr_ohm: None,
    });
    assert!(Study::new(&pinned, Moves::LoadedQ, 2.0, 9.0, 5).is_err());
    let study = Study::new(&design(), Moves::Duty, 0.5, 1.5, 3).expect("a study");
    assert!(study.row(2).outcome.is_err());
}
