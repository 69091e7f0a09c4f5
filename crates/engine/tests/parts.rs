//! Coils against published and independently computed values.
//!
//! Sources: N09 H. Nagaoka 1909, by L85 R. Lundin, Proc. IEEE 73(9), 1985, 1428-1429; W28
//! H.A. Wheeler, Proc. IRE 16(10), 1928, 1398-1400; MD47 R.G. Medhurst, Wireless Engineer 24,
//! 1947; MO99 S.S. Mohan et al., IEEE JSSC 34(10), 1999, 1419-1424 (examples recomputed).

use evenfall_engine::parts::solenoid::{self, Solenoid, nagaoka};
use evenfall_engine::parts::spiral::{self, Metal, Shape, Spiral};
use evenfall_engine::parts::toroid::{self, Core, CoreLoss, Wire};
use evenfall_engine::parts::{MU0, PartError, Shortfall, skin};
use std::f64::consts::{PI, TAU};

#[track_caller]
fn near(found: f64, want: f64, relative: f64) {
    assert!(
        (found / want - 1.0).abs() <= relative,
        "{found} against {want}"
    );
}

fn coil(turns: f64, diameter_m: f64, pitch_m: f64, wire_m: f64) -> Solenoid {
    Solenoid {
        turns,
        diameter_m,
        pitch_m,
        wire_m,
        lead_m: 0.0,
        resistivity_ohm_m: skin::COPPER_OHM_M,
    }
}

/// N09.
#[test]
fn nagaokas_coefficient() {
    for (shape, want) in [
        (0.1, 0.203324),
        (0.2, 0.319825),
        (0.5, 0.525510),
        (1.0, 0.688423),
        (2.0, 0.818136),
        (5.0, 0.920093),
        (10.0, 0.958807),
    ] {
        let found = nagaoka(shape);
        assert!(
            (found - want).abs() < 3e-6 + 5e-7,
            "{shape}: {found}, {want}"
        );
    }
}

#[test]
fn solenoid_example() {
    let figures = coil(10.0, 20e-3, 2e-3, 1e-3).figures(10e6).unwrap();
    near(figures.current_sheet_h, 1.35889e-6, 4e-6);
    near(figures.length_m, 20e-3, 1e-12);
}

/// W28 within its 1 % wherever the coil is longer than 0.8 radii.
#[test]
fn solenoid_against_wheeler() {
    for turns in [5.0, 8.0, 20.0, 50.0, 100.0] {
        let (d, pitch) = (20e-3, 2e-3);
        let sheet = coil(turns, d, pitch, 1e-3)
            .figures(1e6)
            .unwrap()
            .current_sheet_h;
        let (r, l) = (0.5 * d / 25.4e-3, turns * pitch / 25.4e-3);
        near(
            sheet,
            1e-6 * r * r * turns * turns / (9.0 * r + 10.0 * l),
            0.01,
        );
    }
}

/// The coil as coaxial rings: Maxwell's mutual inductance of two filaments by arithmetic and
/// geometric means, a ring's own mu0 r (ln(16 r/w) - 2) with its current on the surface.
fn rings(turns: u32, r: f64, pitch: f64, wire: f64) -> f64 {
    let mutual = |z: f64| {
        let m = 4.0 * r * r / (4.0 * r * r + z * z);
        let (mut a, mut g, mut sum, mut weight) = (1.0, (1.0 - m).sqrt(), 0.5 * m, 0.5);
        for _ in 0..20 {
            let c = 0.5 * (a - g);
            (a, g) = (0.5 * (a + g), (a * g).sqrt());
            weight *= 2.0;
            sum += weight * c * c;
        }
        let k = PI / (2.0 * a);
        let e = k * (1.0 - sum);
        let root = m.sqrt();
        MU0 * r * ((2.0 / root - root) * k - 2.0 / root * e)
    };
    let own = MU0 * r * (libm::log(16.0 * r / wire) - 2.0);
    (1..turns).fold(f64::from(turns) * own, |sum, k| {
        sum + 2.0 * f64::from(turns - k) * mutual(f64::from(k) * pitch)
    })
}

/// Rosa's correction, which the sheet alone lacks.
#[test]
fn round_wire_against_rings() {
    for turns in [2, 3, 5, 10, 30] {
        for (pitch, wire) in [(1.2e-3, 1e-3), (2e-3, 1e-3), (2e-3, 0.4e-3)] {
            let found = coil(f64::from(turns), 20e-3, pitch, wire)
                .figures(10e6)
                .unwrap();
            let want = rings(turns, 10e-3, pitch, wire);
            near(found.inductance_h, want, 3e-3);
            assert!((found.current_sheet_h / want - 1.0).abs() > 5e-3);
        }
    }
}

/// Skin effect times MD47 at a place of its table, by hand: 20 turns, as long as wide.
#[test]
fn solenoid_losses() {
    let (d, pitch, wire, f) = (40e-3, 2e-3, 1e-3, 10e6);
    let found = coil(20.0, d, pitch, wire).figures(f).unwrap();
    let length = 20.0 * ((PI * d) * (PI * d) + pitch * pitch).sqrt();
    let depth = skin::depth(skin::COPPER_OHM_M, f).unwrap();
    let tube = skin::COPPER_OHM_M * length / (PI * (wire - depth) * depth);
    near(found.resistance_ohm, 1.67 * tube, 2e-3);
    near(found.self_capacitance_f.unwrap(), 0.46 * 4.0e-12, 1e-9);
    let l = found.inductance_h;
    near(found.q, TAU * f * l / found.resistance_ohm, 1e-12);
    let f0 = 1.0 / (TAU * (l * 1.84e-12).sqrt());
    near(found.self_resonance_hz.unwrap(), f0, 1e-9);
    let [l_seen, q_seen] = found.at_terminals.unwrap();
    near(l_seen * q_seen, l * found.q, 1e-12);
    near(l_seen, l / (1.0 - f * f / (f0 * f0)), 1e-9);
    // Short coils have no measured capacitance; leads add inductance and resistance.
    let mut short = coil(2.0, 40e-3, 1.5e-3, wire);
    let bare = short.figures(f).unwrap();
    assert_eq!(bare.self_resonance_hz, None);
    short.lead_m = 10e-3;
    let led = short.figures(f).unwrap();
    assert!(led.inductance_h > bare.inductance_h + 8e-9);
    assert!(led.resistance_ohm > bare.resistance_ohm);
}

#[test]
fn wound_coils() {
    let mut wanted = solenoid::wind::Wanted::new(845.712e-9, 7e6);
    wanted.least_q = Some(200.0);
    wanted.current_a_rise_k = Some([1.0, 40.0]);
    let choices = solenoid::wind::wind(&wanted).unwrap();
    assert!(choices.len() > 8, "{}", choices.len());
    for choice in &choices {
        let again = choice.coil.figures(7e6).unwrap();
        near(again.inductance_h, 845.712e-9, 1e-9);
        near(again.q, choice.figures.q, 1e-9);
        assert!((3e-3 - 1e-12..=40e-3 + 1e-12).contains(&choice.former_m()));
        assert!(again.length_m <= 0.1 + 1e-12);
        assert_eq!(
            choice.figures.q < 200.0,
            choice
                .shortfalls
                .iter()
                .any(|s| matches!(s, Shortfall::Q { .. }))
        );
    }
    assert!(choices.is_sorted_by_key(|c| !c.shortfalls.is_empty()));
    assert!(choices[0].shortfalls.is_empty());
    let feasible = choices.iter().take_while(|c| c.shortfalls.is_empty());
    assert!(feasible.map(|c| -c.figures.q).is_sorted());
    // Out of reach, with what is within it.
    wanted.inductance_h = 10e-3;
    match solenoid::wind::wind(&wanted).unwrap_err() {
        PartError::Unreachable {
            below_h: Some(below),
            above_h: None,
            ..
        } => {
            assert!(below > 1e-3 && below < 10e-3, "{below}");
        }
        other => panic!("{other}"),
    }
    wanted.inductance_h = 1e-9;
    assert!(matches!(
        solenoid::wind::wind(&wanted).unwrap_err(),
        PartError::Unreachable {
            below_h: None,
            above_h: Some(_),
            ..
        }
    ));
}

/// A core of 4 nH and 12.7 x 7.7 x 4.9 mm: an example of size, no maker's figures.
#[test]
fn toroids() {
    let mut core = Core {
        al_h: 4e-9,
        outer_m: 12.7e-3,
        inner_m: 7.7e-3,
        height_m: 4.9e-3,
        loss: CoreLoss::None,
    };
    let wire = Wire {
        diameter_m: 0.5e-3,
        lead_m: 20e-3,
        resistivity_ohm_m: skin::COPPER_OHM_M,
    };
    let wound = toroid::wind(&core, &wire, 850e-9, 7e6).unwrap();
    assert_eq!([wound[0].turns, wound[1].turns], [15, 14]);
    near(wound[0].inductance_h, 900e-9, 1e-12);
    near(wound[0].error, 50.0 / 850.0, 1e-12);
    near(
        wound[0].wire_length_m,
        15.0 * (5e-3 + 9.8e-3 + PI * 0.5e-3) + 40e-3,
        1e-12,
    );
    assert_eq!(wound[0].most_turns, 45);
    // A wire of the thickest size fits exactly as often as it is wound.
    let thick = Wire {
        diameter_m: wound[0].thickest_wire_m,
        ..wire
    };
    assert_eq!(
        toroid::wind(&core, &thick, 900e-9, 7e6).unwrap()[0].most_turns,
        15
    );
    // The core's loss comes on top: the reciprocals of the quality factors add.
    core.loss = CoreLoss::Q(150.0);
    let lossy = toroid::wind(&core, &wire, 850e-9, 7e6).unwrap()[0];
    near(1.0 / lossy.q, 1.0 / wound[0].q + 1.0 / 150.0, 1e-12);
    let parallel = 150.0 * TAU * 7e6 * 4e-9;
    core.loss = CoreLoss::ParallelOhm(parallel);
    let same = toroid::wind(&core, &wire, 850e-9, 7e6).unwrap()[0];
    near(same.q, lossy.q, 1e-12);
    // Exactly met: one choice.
    let exact = toroid::wind(&core, &wire, 400e-9, 7e6).unwrap();
    assert_eq!((exact.len(), exact[0].turns), (1, 10));
    let tight = Wire {
        diameter_m: 4e-3,
        ..wire
    };
    assert!(matches!(
        toroid::wind(&core, &tight, 4e-7, 7e6),
        Err(PartError::Fit { .. })
    ));
}

const METAL: Metal = Metal {
    sheet_ohm: 10e-3,
    thickness_m: 3e-6,
};

fn spiral_of(shape: Shape, turns: f64, outer_um: f64) -> Spiral {
    Spiral {
        shape,
        turns,
        outer_m: 1e-6 * outer_um,
        width_m: 10e-6,
        spacing_m: 2e-6,
        metal: METAL,
    }
}

/// MO99, recomputed: modified Wheeler, then current sheet.
#[test]
fn spirals() {
    for (shape, turns, outer_um, wheeler, sheet) in [
        (Shape::Square, 3.0, 200.0, 2.810, 2.808),
        (Shape::Square, 5.0, 300.0, 10.723, 10.653),
        (Shape::Hexagon, 5.0, 300.0, 9.248, 9.282),
        (Shape::Octagon, 5.0, 300.0, 9.242, 9.225),
    ] {
        let figures = spiral_of(shape, turns, outer_um).figures(1e9).unwrap();
        for (found, want) in [(figures.wheeler_h, wheeler), (figures.inductance_h, sheet)] {
            assert!(
                (1e9 * found - want).abs() <= 5.001e-4,
                "{shape:?}: {found} {want}"
            );
        }
    }
    assert!(matches!(
        spiral_of(Shape::Square, 20.0, 300.0).figures(1e9),
        Err(PartError::Fit { .. })
    ));
}

/// At a low frequency squares times sheet resistance, at a high one a skin depth of metal.
#[test]
fn spiral_losses() {
    let spiral = spiral_of(Shape::Square, 5.0, 300.0);
    let low = spiral.figures(1e3).unwrap();
    let squares = 5.0 * 4.0 * (300.0 + 184.0) / 2.0 / 10.0;
    near(low.trace_m, squares * 10e-6, 1e-12);
    near(low.inner_m, 184e-6, 1e-12);
    near(low.resistance_ohm, squares * 10e-3, 1e-3);
    let high = spiral.figures(1e12).unwrap();
    let depth = skin::depth(30e-9, 1e12).unwrap();
    near(high.resistance_ohm, squares * 30e-9 / depth, 1e-6);
    near(
        high.q,
        TAU * 1e12 * high.inductance_h / high.resistance_ohm,
        1e-12,
    );
}

#[test]
fn drawn_spirals() {
    let mut wanted = spiral::Wanted {
        inductance_h: 3.3856e-9,
        frequency_hz: 1e9,
        shape: Shape::Octagon,
        metal: METAL,
        widths_m: [5e-6, 30e-6],
        spacing_m: 2e-6,
        outer_m: 400e-6,
        least_hole: 0.2,
        least_q: Some(10.0),
    };
    let choices = spiral::draw(&wanted).unwrap();
    assert!(choices.len() > 6, "{}", choices.len());
    for choice in &choices {
        let again = choice.spiral.figures(1e9).unwrap();
        near(again.inductance_h, 3.3856e-9, 1e-9);
        assert!(choice.spiral.outer_m <= 400e-6 && again.inner_m >= 0.2 * choice.spiral.outer_m);
        assert_eq!(again.q < 10.0, !choice.shortfalls.is_empty());
    }
    assert!(choices.is_sorted_by_key(|c| !c.shortfalls.is_empty()));
    wanted.inductance_h = 1e-6;
    assert!(matches!(
        spiral::draw(&wanted),
        Err(PartError::Unreachable {
            below_h: Some(_),
            ..
        })
    ));
}
