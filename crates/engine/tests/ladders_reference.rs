//! Lossy ladders, coupled pairs among them, against scikit-rf: tests/reference/ladders.py makes
//! the values (cascades of two-ports, no nodal equations).

use evenfall_engine::ac::two_port;
use evenfall_engine::circuit::{Circuit, Coupling, Element};
use serde_json::Value;

fn coil(part: &Value) -> Element {
    Element::Inductor {
        henry: number(&part["henry"]),
        ohm: number(&part["ohm"]),
    }
}

fn capacitor(part: &Value) -> Element {
    Element::Capacitor {
        farad: number(&part["farad"]),
        ohm: number(&part["ohm"]),
    }
}

#[track_caller]
fn number(value: &Value) -> f64 {
    value.as_f64().expect("a number")
}

/// The circuit between node 1 and the node that is given.
fn circuit(elements: &[Value]) -> (Circuit, usize) {
    let mut circuit = Circuit::default();
    let (mut here, mut free) = (1, 2);
    let mut fresh = move || {
        free += 1;
        free - 1
    };
    for e in elements {
        if e["kind"] == "pair" {
            let other = fresh();
            let first = circuit.add("first", here, 0, coil(&e["first"]));
            let second = circuit.add("second", other, 0, coil(&e["second"]));
            circuit.couplings.push(Coupling {
                first,
                second,
                mutual_henry: number(&e["mutual_henry"]),
            });
            here = other;
            continue;
        }
        let to = if e["place"] == "series" { fresh() } else { 0 };
        match e["kind"].as_str().expect("a kind") {
            "resistor" => {
                let ohm = number(&e["ohm"]);
                circuit.add("resistor", here, to, Element::Resistor { ohm });
            }
            "coil" => {
                circuit.add("coil", here, to, coil(&e["coil"]));
            }
            "capacitor" => {
                circuit.add("capacitor", here, to, capacitor(&e["capacitor"]));
            }
            "series_trap" => {
                let between = fresh();
                circuit.add("coil", here, between, coil(&e["coil"]));
                circuit.add("capacitor", between, to, capacitor(&e["capacitor"]));
            }
            "parallel_trap" => {
                circuit.add("coil", here, to, coil(&e["coil"]));
                circuit.add("capacitor", here, to, capacitor(&e["capacitor"]));
            }
            other => panic!("{other}"),
        }
        if to != 0 {
            here = to;
        }
    }
    (circuit, here)
}

#[test]
fn fifty_ladders_agree_with_cascades() {
    let path = concat!(
        env!("CARGO_MANIFEST_DIR"),
        "/../../tests/reference/ladders.json"
    );
    let rows: Vec<Value> =
        serde_json::from_str(&std::fs::read_to_string(path).expect("the reference")).expect("JSON");
    assert_eq!(rows.len(), 50);
    let (mut pairs, mut compared) = (0, 0);
    for (index, row) in rows.iter().enumerate() {
        let ladder = &row["ladder"];
        let elements = ladder["elements"].as_array().expect("elements");
        pairs += elements.iter().filter(|e| e["kind"] == "pair").count();
        let (circuit, end) = circuit(elements);
        let reference = [0, 1].map(|k| number(&ladder["reference_ohm"][k]));
        let frequencies = ladder["frequencies_hz"].as_array().expect("frequencies");
        for (k, hz) in frequencies.iter().enumerate() {
            let hz = number(hz);
            let got = two_port(&circuit, [1, end], reference, hz).expect("an answer");
            for (place, c) in got.s.iter().flatten().enumerate() {
                for (part, value) in [c.re, c.im].into_iter().enumerate() {
                    let want = number(&row["s"][k][2 * place + part]);
                    assert!(
                        (value - want).abs() < 1e-9,
                        "ladder {index} at {hz} Hz, entry {place}: {value} against {want}"
                    );
                    compared += 1;
                }
            }
        }
    }
    assert_eq!((pairs, compared), (25, 50 * 3 * 8));
}
