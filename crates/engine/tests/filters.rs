//! Filter prototypes and ladders against published values and their own response.
//!
//! Sources: MYJ64 G.L. Matthaei, L. Young, E.M.T. Jones, Microwave Filters,
//! Impedance-Matching Networks, and Coupling Structures, 1964, tables 4.05-1 and 4.05-2
//! (recomputed); F50 R.M. Fano, J. Franklin Inst. 249, 1950.

use evenfall_engine::network::filter::{FilterError, LowPass, Shape, Trap, prototype};
use evenfall_engine::network::{Place, Quality, two_port};
use std::f64::consts::{PI, TAU};

#[track_caller]
fn near(value: f64, want: f64, relative: f64) {
    assert!(
        (value / want - 1.0).abs() <= relative,
        "{value} against {want}"
    );
}

#[test]
fn butterworth_prototypes() {
    // MYJ64 table 4.05-1.
    let g = |n| prototype(Shape::Butterworth, n).expect("a prototype");
    for (got, want) in g(3).iter().zip([1.0, 2.0, 1.0, 1.0]) {
        near(*got, want, 1e-15);
    }
    for (got, want) in g(5).iter().zip([0.6180, 1.6180, 2.0, 1.6180, 0.6180, 1.0]) {
        assert!((got - want).abs() < 0.5e-4);
    }
}

#[test]
fn chebyshev_prototypes() {
    // MYJ64 table 4.05-2, recomputed.
    let table: [(f64, &[&[f64]]); 3] = [
        (
            0.01,
            &[
                &[0.6292, 0.9703],
                &[0.7563, 1.3049, 1.5773],
                &[0.7969, 1.3924, 1.7481, 1.6331],
            ],
        ),
        (
            0.1,
            &[
                &[1.0316, 1.1474],
                &[1.1468, 1.3712, 1.9750],
                &[1.1812, 1.4228, 2.0967, 1.5734],
            ],
        ),
        (
            0.5,
            &[
                &[1.5963, 1.0967],
                &[1.7058, 1.2296, 2.5408],
                &[1.7373, 1.2582, 2.6383, 1.3443],
            ],
        ),
    ];
    for (ripple_db, rows) in table {
        for row in rows {
            let n = 2 * row.len() - 1;
            let g = prototype(Shape::Chebyshev { ripple_db }, n).expect("a prototype");
            assert_eq!((g.len(), g[n]), (n + 1, 1.0));
            for (k, want) in row.iter().enumerate() {
                assert!(
                    (g[k] - want).abs() <= 0.51e-4,
                    "{ripple_db} dB, n {n}: {g:?}"
                );
                near(g[n - 1 - k], g[k], 1e-12);
            }
        }
    }
}

fn low_pass(shape: Shape, elements: usize, first: Place) -> LowPass {
    LowPass {
        shape,
        elements,
        first,
        cutoff_hz: 10e6,
        source_ohm: 50.0,
        carrier_hz: 7e6,
        quality: Quality::default(),
        traps: Vec::new(),
    }
}

#[test]
fn ladders_have_the_response_of_their_prototype() {
    for elements in 1..=9 {
        for first in [Place::Series, Place::Shunt] {
            for shape in [Shape::Butterworth, Shape::Chebyshev { ripple_db: 0.5 }] {
                let ladder = low_pass(shape, elements, first).make().expect("a ladder");
                for ratio in [0.01_f64, 0.3, 0.77, 1.0, 1.4, 3.0] {
                    let ends = [50.0, ladder.load_ohm];
                    let p = two_port(&ladder.rungs, ends, ratio * 10e6).expect("an answer");
                    let n = elements as f64;
                    let loss = match shape {
                        Shape::Butterworth => 1.0 + libm::pow(ratio, 2.0 * n),
                        Shape::Chebyshev { ripple_db } => {
                            let t = if ratio <= 1.0 {
                                libm::cos(n * libm::acos(ratio))
                            } else {
                                libm::cosh(n * libm::acosh(ratio))
                            };
                            1.0 + (libm::pow(10.0, ripple_db / 10.0) - 1.0) * t * t
                        }
                    };
                    near(p.transducer_gain() * loss, 1.0, 1e-10);
                }
            }
        }
    }
}

#[test]
fn traps_block_their_harmonic_and_leave_the_carrier() {
    for first in [Place::Series, Place::Shunt] {
        let mut filter = low_pass(Shape::Chebyshev { ripple_db: 0.1 }, 5, first);
        let plain = filter.make().expect("a ladder");
        filter.traps = [(1, 14e6), (2, 21e6)]
            .map(|(element, trap_hz)| Trap { element, trap_hz })
            .to_vec();
        let trapped = filter.make().expect("a ladder");
        let at = |rungs: &[_], hz| two_port(rungs, [50.0, 50.0], hz).expect("an answer");
        let (a, b) = (at(&plain.rungs, 7e6), at(&trapped.rungs, 7e6));
        for (a, b) in a.s.iter().flatten().zip(b.s.iter().flatten()) {
            assert!((a - b).norm_sqr() < 1e-24);
        }
        for hz in [14e6, 21e6] {
            assert!(at(&trapped.rungs, hz).transducer_gain() < 1e-20);
            assert!(at(&plain.rungs, hz).transducer_gain() > 1e-8);
        }
        // With Q 100 a trap still blocks by far more than the plain element.
        filter.quality.coil_q = Some(100.0);
        let lossy = filter.make().expect("a ladder");
        let gain = at(&lossy.rungs, 14e6).transducer_gain();
        assert!(gain < 1e-2 * at(&plain.rungs, 14e6).transducer_gain() && gain > 1e-12);
        filter.traps.push(Trap {
            element: 1,
            trap_hz: 28e6,
        });
        let (element, elements) = (1, 5);
        assert_eq!(
            filter.make(),
            Err(FilterError::TrapElement { element, elements })
        );
    }
}

#[test]
fn no_match_beats_bode_and_fano() {
    // F50 for parallel R and C: the integral of ln(1/|G|) is at most pi/(R C). 20 ohm and
    // 0.9 pF from 6 to 18 GHz: nothing below |G| = 0.09878 all over the band.
    let (r, c) = (20.0, 0.9e-12);
    let bound: f64 = libm::exp(-PI / (r * c) / (TAU * 12e9));
    assert!((bound - 0.09878).abs() < 0.5e-5);
    // Low-pass ladders whose last element the capacitance is: reactively matched without loss,
    // they keep the integral and come to within a third of it.
    let low = |first, n, ripple_db| {
        let mut filter = low_pass(Shape::Chebyshev { ripple_db }, n, first);
        filter.source_ohm = r;
        let g = prototype(filter.shape, n).expect("a prototype");
        filter.cutoff_hz = g[n - 1] / (TAU * r * c);
        (filter.make().expect("a ladder"), filter.cutoff_hz)
    };
    for (n, ripple_db) in [(1, 0.1), (3, 0.1), (5, 0.01), (7, 0.5), (9, 0.1)] {
        let (ladder, cutoff_hz) = low(Place::Shunt, n, ripple_db);
        // Midpoints; the far tail beyond 30 cut-offs is cut, which only lowers the sum.
        let count = 60_000;
        let step = 30.0 * cutoff_hz / f64::from(count);
        let mut sum = 0.0;
        for k in 0..count {
            let hz = (f64::from(k) + 0.5) * step;
            let p = two_port(&ladder.rungs, [r, ladder.load_ohm], hz).expect("an answer");
            sum -= 0.5 * libm::log(p.s[1][1].norm_sqr()) * TAU * step;
        }
        let part = sum / (PI / (r * c));
        assert!(
            part < 1.0 + 1e-6 && part > 0.66,
            "n {n}: {part} of the bound"
        );
    }
}

#[test]
fn refusals_of_a_filter() {
    for elements in [0, 32] {
        let error = prototype(Shape::Butterworth, elements);
        assert_eq!(error, Err(FilterError::Elements { elements }));
    }
    for ripple_db in [0.0, -1.0, f64::NAN, f64::INFINITY, 1e300, 5e-324] {
        let g = prototype(Shape::Chebyshev { ripple_db }, 31);
        assert!(g.is_err() || g.is_ok_and(|g| g.iter().all(|g| g.is_finite() && *g > 0.0)));
    }
    let mut filter = low_pass(Shape::Butterworth, 3, Place::Shunt);
    filter.traps.push(Trap {
        element: 3,
        trap_hz: 14e6,
    });
    let (element, elements) = (3, 3);
    assert_eq!(
        filter.make(),
        Err(FilterError::TrapElement { element, elements })
    );
    filter.traps[0] = Trap {
        element: 0,
        trap_hz: 7e6,
    };
    let (trap_hz, carrier_hz) = (7e6, 7e6);
    let refused = FilterError::TrapFrequency {
        trap_hz,
        carrier_hz,
    };
    assert_eq!(filter.make(), Err(refused));
    filter.cutoff_hz = f64::NAN;
    assert!(matches!(
        filter.make(),
        Err(FilterError::Value {
            what: "cut-off",
            ..
        })
    ));
}
