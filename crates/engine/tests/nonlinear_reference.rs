//! Stages with a voltage-dependent capacitance against an independent integration with scipy:
//! tests/reference/nonlinear.py makes the values.

use evenfall_engine::answer::Answer;
use evenfall_engine::design::Design;
use evenfall_engine::solve;
use serde_json::Value;
use std::f64::consts::TAU;

#[test]
fn a_hundred_nonlinear_stages_agree_with_an_integration() {
    let path = concat!(
        env!("CARGO_MANIFEST_DIR"),
        "/../../tests/reference/nonlinear.json"
    );
    let rows: Vec<Value> =
        serde_json::from_str(&std::fs::read_to_string(path).expect("the reference")).expect("JSON");
    assert_eq!(rows.len(), 100);
    let mut worst = (0.0, String::new());
    for (number, row) in rows.iter().enumerate() {
        let design: Design = serde_json::from_value(row["design"].clone()).expect("a design");
        let want = |name: &str| row["expect"][name].as_f64().expect("a number");
        let solved = match solve(&design) {
            Answer::Solved(solved) => solved,
            Answer::Refused(refusal) => panic!("stage {number}: {}", refusal.reason),
        };
        let f = solved.figures;
        let supply = design.brief.supply_v.expect("a supply");
        // A slope is held to a tenth of what a voltage is: it goes with the capacitance at turn-on.
        let slope = 10.0 * supply * TAU * design.brief.carrier_hz;
        let amplitude = |dbc: f64| libm::pow(10.0, dbc / 20.0);
        let mut rows = vec![
            (
                "supply_power_w",
                f.supply_power_w,
                want("supply_power_w"),
                want("supply_power_w"),
            ),
            (
                "output_power_w",
                f.output_power_w,
                want("output_power_w"),
                want("output_power_w"),
            ),
            (
                "total_output_power_w",
                f.total_output_power_w,
                want("total_output_power_w"),
                want("supply_power_w"),
            ),
            ("drain_peak_v", f.drain_peak_v, want("drain_peak_v"), supply),
            (
                "drain_least_v",
                f.drain_least_v,
                want("drain_least_v"),
                supply,
            ),
            (
                "switch_peak_a",
                f.switch_peak_a,
                want("switch_peak_a"),
                want("switch_peak_a"),
            ),
            ("turn_on_v", f.turn_on_v, want("turn_on_v"), supply),
            (
                "turn_on_slope_v_per_s",
                f.turn_on_slope_v_per_s,
                want("turn_on_slope_v_per_s"),
                slope,
            ),
            (
                "diode_w",
                solved.losses.diode_w,
                want("diode_w"),
                want("supply_power_w"),
            ),
            (
                // What turn-on burns goes through the switch and the shunt's resistance.
                "switch_w and shunt_capacitor_w",
                solved.losses.switch_w + solved.losses.turn_on_w + solved.losses.shunt_capacitor_w,
                want("switch_w") + want("shunt_capacitor_w"),
                want("supply_power_w"),
            ),
        ];
        let harmonics = row["expect"]["harmonics_dbc"]
            .as_array()
            .expect("harmonics");
        for (got, want) in solved.harmonics_dbc.iter().zip(harmonics) {
            rows.push((
                "harmonic",
                amplitude(*got),
                amplitude(want.as_f64().expect("a number")),
                1.0,
            ));
        }
        for (name, got, want, scale) in rows {
            let error = ((got - want) / scale).abs();
            if error > worst.0 {
                worst = (
                    error,
                    format!("stage {number} {name}: {got} against {want}"),
                );
            }
        }
    }
    assert!(worst.0 < 1e-5, "off by {:.1e}: {}", worst.0, worst.1);
}
