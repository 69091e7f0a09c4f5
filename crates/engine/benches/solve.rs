//! Per-solve times: a steady state without and with diode, its figures, and a sizing.

#![allow(missing_docs, reason = "criterion's macros make undocumented items")]

use criterion::{Criterion, criterion_group, criterion_main};
use evenfall_engine::design::{Diode, Load};
use evenfall_engine::exchange::link;
use evenfall_engine::stage::{Part, Stage};
use std::hint::black_box;

fn stage(diode: Option<Diode>, load_ohm: f64) -> Stage {
    let part = |value: f64, esr_ohm: f64| Part { value, esr_ohm };
    Stage {
        carrier_hz: 7e6,
        duty: 0.5,
        supply_v: 12.0,
        on_resistance_ohm: 0.1,
        device_f: 0.0,
        diode,
        feed: part(5e-6, 0.1),
        shunt: part(638.975e-12, 0.01),
        series_coil: part(845.712e-9, 0.2),
        series_capacitor: part(822.859e-12, 0.02),
        load: Load {
            r_ohm: load_ohm,
            x_ohm: 0.0,
        },
    }
}

fn solves(c: &mut Criterion) {
    let plain = stage(None, 7.43927);
    let diode = stage(
        Some(Diode {
            forward_v: 0.7,
            slope_ohm: 0.02,
        }),
        4.0,
    );
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
    let design = link::base();
    c.bench_function("a full sizing", |b| {
        b.iter(|| evenfall_engine::solve(black_box(&design)))
    });
}

criterion_group!(benches, solves);
criterion_main!(benches);
