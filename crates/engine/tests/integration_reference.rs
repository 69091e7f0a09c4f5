//! Stages as built against an independent integration with scipy: tests/reference makes the
//! values (event detection, relative tolerance 1e-11, no matrix exponential).

use evenfall_engine::answer::Answer;
use evenfall_engine::design::Design;
use evenfall_engine::solve;
use serde_json::Value;

#[test]
fn three_hundred_stages_agree_with_an_integration() {
    let path = concat!(
        env!("CARGO_MANIFEST_DIR"),
        "/../../tests/reference/stages.json"
    );
    let rows: Vec<Value> =
        serde_json::from_str(&std::fs::read_to_string(path).expect("the reference")).expect("JSON");
    assert_eq!(rows.len(), 300);
    let mut with_diode = 0;
    for (number, row) in rows.iter().enumerate() {
        let design: Design = serde_json::from_value(row["design"].clone()).expect("a design");
        let want = |name: &str| row["expect"][name].as_f64().expect("a number");
        let Answer::Solved(solved) = solve(&design) else {
            panic!("stage {number} was refused")
        };
        let f = solved.figures;
        let supply = design.brief.supply_v.expect("a supply");
        for (name, got, scale) in [
            ("supply_power_w", f.supply_power_w, want("supply_power_w")),
            ("output_power_w", f.output_power_w, want("output_power_w")),
            (
                "total_output_power_w",
                f.total_output_power_w,
                want("total_output_power_w"),
            ),
            ("drain_peak_v", f.drain_peak_v, want("drain_peak_v")),
            ("turn_on_v", f.turn_on_v, supply),
        ] {
            let error = (got - want(name)) / scale;
            assert!(
                error.abs() < 1e-6,
                "stage {number} {name}: {got} against {}",
                want(name)
            );
        }
        let harmonics = row["expect"]["harmonics_dbc"]
            .as_array()
            .expect("harmonics");
        assert_eq!(harmonics.len(), 3);
        for (order, (got, want)) in (2..).zip(solved.harmonics_dbc.iter().zip(harmonics)) {
            // As amplitudes relative to the carrier.
            let amplitude = |dbc: f64| libm::pow(10.0, dbc / 20.0);
            let error = amplitude(*got) - amplitude(want.as_f64().expect("a number"));
            assert!(
                error.abs() < 1e-6,
                "stage {number} harmonic {order}: off by {error:e}"
            );
        }
        with_diode += usize::from(want("diode_intervals") > 0.0);
    }
    assert!(
        with_diode > 60,
        "the diode conducts in only {with_diode} of them"
    );
}
