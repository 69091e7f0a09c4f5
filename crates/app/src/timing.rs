//! The engine's speed in this browser, for the tests' log; nothing on the page calls it.

use evenfall_engine::exchange::link;
use evenfall_engine::stage::Stage;
use std::hint::black_box;
use wasm_bindgen::prelude::wasm_bindgen;

/// Microseconds for one steady state of four states with ten harmonics, and for one sizing,
/// each the mean of `rounds`.
#[wasm_bindgen]
#[allow(unreachable_pub, reason = "the glue calls it")]
pub fn microseconds_a_solve(rounds: u32) -> Vec<f64> {
    let clock = || {
        leptos::prelude::window()
            .performance()
            .map_or(f64::NAN, |p| p.now())
    };
    let stage = Stage::example();
    let time = |work: &dyn Fn()| {
        let start = clock();
        (0..rounds).for_each(|_| work());
        (clock() - start) * 1e3 / f64::from(rounds)
    };
    let design = link::base();
    vec![
        time(&|| drop(black_box(black_box(&stage).solve_to_harmonic(10)))),
        time(&|| drop(black_box(evenfall_engine::solve(black_box(&design))))),
    ]
}
