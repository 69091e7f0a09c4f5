//! Per-solve times: a steady state without and with diode, its figures, and a sizing.

#![allow(missing_docs, reason = "criterion's macros make undocumented items")]

use criterion::{Criterion, criterion_group, criterion_main};
use evenfall_engine::design::{Capacitance, Diode, Form, Load};
use evenfall_engine::exchange::link;
use evenfall_engine::sizing;
use evenfall_engine::stage::Stage;
use std::hint::black_box;

fn solves(c: &mut Criterion) {
    let plain = Stage::example();
    let diode = Stage {
        diode: Some(Diode {
            forward_v: 0.7,
            slope_ohm: 0.02,
        }),
        load: Load {
            r_ohm: 4.0,
            x_ohm: 0.0,
        },
        ..plain.clone()
    };
    let circuit = plain.layout().circuit;
    c.bench_function("equations of one mode", |b| {
        b.iter(|| evenfall_engine::dynamics::mode(black_box(&circuit), black_box(1)));
    });
    c.bench_function("steady state of four states, ten harmonics", |b| {
        b.iter(|| black_box(&plain).solve_to_harmonic(10))
    });
    c.bench_function("the same with diode intervals", |b| {
        b.iter(|| black_box(&diode).solve_to_harmonic(10))
    });
    c.bench_function("what sizing asks of a stage", |b| {
        b.iter(|| black_box(&plain).turn_on())
    });
    c.bench_function("waveforms of four curves", |b| {
        b.iter(|| black_box(&plain).waveforms())
    });
    let mut curved = link::base();
    curved.device.on_resistance_ohm = 0.12;
    curved.device.capacitance = Capacitance::Junction {
        cj0_f: 900e-12,
        built_in_v: 0.8,
        grading: 0.5,
    };
    curved.stage.coil_q = Some(200.0);
    if let Ok((stage, _)) = sizing::sized_stage(&curved) {
        c.bench_function("steady state with a junction capacitance", |b| {
            b.iter(|| black_box(&stage).solve_to_harmonic(10))
        });
    }
    c.bench_function("a full sizing with a junction capacitance", |b| {
        b.iter(|| evenfall_engine::solve(black_box(&curved)))
    });
    let mut pair = link::base();
    pair.stage.form = Form::Differential;
    pair.device.on_resistance_ohm = 0.12;
    pair.device.capacitance = Capacitance::Constant { c_f: 20e-12 };
    pair.stage.coil_q = Some(200.0);
    pair.stage.capacitor_q = Some(1000.0);
    if let Ok((stage, _)) = sizing::sized_stage(&pair) {
        let half = stage.layout().circuit.state_count();
        c.bench_function(
            &format!("differential steady state of {half} states, in halves"),
            |b| b.iter(|| black_box(&stage).solve_to_harmonic(10)),
        );
        c.bench_function("what its sizing asks", |b| {
            b.iter(|| black_box(&stage).turn_on())
        });
    }
    let design = link::base();
    c.bench_function("a full sizing", |b| {
        b.iter(|| evenfall_engine::solve(black_box(&design)))
    });
}

criterion_group!(benches, solves);
criterion_main!(benches);
