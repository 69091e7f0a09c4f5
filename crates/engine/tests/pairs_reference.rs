//! Differential and stacked circuits against an independent integration with scipy:
//! tests/reference/pairs.py makes the values.

use evenfall_engine::charge::ChargeLaw;
use evenfall_engine::circuit::{Circuit, Coupling, Element};
use evenfall_engine::orbit::{self, ClockStep, Orbit, Probe};
use serde_json::Value;

struct Row<'a>(&'a Value);

impl Row<'_> {
    fn get(&self, name: &str) -> f64 {
        self.0[name].as_f64().unwrap_or_else(|| panic!("no {name}"))
    }

    fn list(&self, name: &str) -> Vec<f64> {
        let list = self.0[name]
            .as_array()
            .unwrap_or_else(|| panic!("no {name}"));
        list.iter().map(|x| x.as_f64().expect("a number")).collect()
    }
}

fn rows() -> Vec<Value> {
    let path = concat!(
        env!("CARGO_MANIFEST_DIR"),
        "/../../tests/reference/pairs.json"
    );
    serde_json::from_str(&std::fs::read_to_string(path).expect("the reference")).expect("JSON")
}

fn capacitor(farad: f64, ohm: f64) -> Element {
    Element::Capacitor { farad, ohm }
}

fn coil(henry: f64, ohm: f64) -> Element {
    Element::Inductor { henry, ohm }
}

fn amplitude(orbit: &dyn Orbit, parts: &[(Probe, f64)], order: usize) -> f64 {
    let probes: Vec<Probe> = parts.iter().map(|(p, _)| *p).collect();
    let found = orbit.harmonics(&probes, order);
    let sum: num_complex::Complex64 = found
        .iter()
        .zip(parts)
        .map(|(h, (_, s))| h[order] * *s)
        .sum();
    2.0 * sum.norm_sqr().sqrt()
}

struct Checks {
    number: usize,
    worst: f64,
}

impl Checks {
    fn near(&mut self, name: &str, got: f64, want: f64, scale: f64, bound: f64) {
        let error = ((got - want) / scale).abs();
        assert!(
            error < bound,
            "circuit {} {name}: {got} against {want}, off by {error:.1e}",
            self.number
        );
        self.worst = self.worst.max(error);
    }
}

/// Clock steps from the instants at which sets of switches change, in shares of the period.
fn clock(period_s: f64, until: f64, spans: &[(f64, f64, u32)]) -> Vec<ClockStep> {
    let mut cuts = vec![0.0, until];
    for &(from, to, _) in spans {
        cuts.extend(
            [from, to, to - 1.0]
                .iter()
                .filter(|c| (0.0..until).contains(*c)),
        );
    }
    cuts.sort_by(f64::total_cmp);
    cuts.dedup_by(|a, b| (*a - *b).abs() < 1e-12);
    cuts.windows(2)
        .map(|w| {
            let middle = 0.5 * (w[0] + w[1]);
            let inside = |from: f64, to: f64| {
                (from..to).contains(&middle) || (from..to).contains(&(middle + 1.0))
            };
            ClockStep {
                duration_s: (w[1] - w[0]) * period_s,
                closed: spans
                    .iter()
                    .filter(|&&(from, to, _)| inside(from, to))
                    .fold(0, |set, &(_, _, bit)| set | bit),
            }
        })
        .collect()
}

#[test]
fn differential_circuits_agree_with_an_integration() {
    let (mut equal, mut curved, mut all) = (0, 0, 0);
    for (number, row) in rows().iter().enumerate() {
        let (c, want) = (Row(&row["circuit"]), Row(&row["expect"]));
        if row["circuit"]["form"] != "differential" {
            continue;
        }
        all += 1;
        let mut circuit = Circuit::default();
        let supply = circuit.add(
            "supply",
            1,
            0,
            Element::Source {
                volt: c.get("supply_v"),
            },
        );
        let mut sides = Vec::new();
        for (side, drain) in [("a", 2), ("b", 3)] {
            let get = |name: &str| c.get(&format!("{side}_{name}"));
            let feed = circuit.add("feed", 1, drain, coil(get("feed_l_h"), get("feed_esr_ohm")));
            let ohm = get("on_resistance_ohm");
            let switch = circuit.add("switch", drain, 0, Element::Switch { ohm });
            let diode = Element::Diode {
                forward_v: get("diode_forward_v"),
                ohm: get("diode_slope_ohm"),
            };
            let diode = circuit.add("diode", drain, 0, diode);
            let law = Row(&row["circuit"][format!("{side}_capacitance")]);
            let device = if law.0["kind"] == "constant" {
                capacitor(law.get("c_f"), 0.0)
            } else {
                let found = ChargeLaw::junction(
                    law.get("cj0_f"),
                    law.get("built_in_v"),
                    law.get("grading"),
                );
                let found = found.expect("a law");
                let farad = found.energy_equivalent_f(3.6 * c.get("supply_v"));
                circuit.laws.push(found);
                Element::Varying {
                    law: circuit.laws.len() - 1,
                    farad,
                }
            };
            let device = circuit.add("device", drain, 0, device);
            let shunt = capacitor(get("shunt_c_f"), get("shunt_esr_ohm"));
            let shunt = circuit.add("shunt", drain, 0, shunt);
            sides.push([feed, switch, diode, device, shunt]);
        }
        let (a, b) = (sides[0], sides[1]);
        circuit.couplings.push(Coupling {
            first: a[0],
            second: b[0],
            mutual_henry: c.get("feed_coupling")
                * (c.get("a_feed_l_h") * c.get("b_feed_l_h")).sqrt(),
        });
        let mut partners = vec![(0, 1.0); circuit.branches.len()];
        partners[supply] = (supply, 1.0);
        for (x, y) in a.iter().zip(&b) {
            (partners[*x], partners[*y]) = ((*y, 1.0), (*x, 1.0));
        }
        for (name, from, to, element) in [
            (
                "cross",
                2,
                3,
                capacitor(c.get("cross_c_f"), c.get("cross_esr_ohm")),
            ),
            (
                "series coil",
                2,
                4,
                coil(c.get("series_l_h"), c.get("series_coil_esr_ohm")),
            ),
            (
                "series capacitor",
                4,
                5,
                capacitor(c.get("series_c_f"), c.get("series_capacitor_esr_ohm")),
            ),
            (
                "load",
                5,
                3,
                Element::Resistor {
                    ohm: c.get("load_ohm"),
                },
            ),
        ] {
            let branch = circuit.add(name, from, to, element);
            partners.push((branch, -1.0));
        }
        let load = circuit.branches.len() - 1;
        let period = 1.0 / c.get("carrier_hz");
        let bit = |branch: usize| {
            1u32 << circuit
                .switching_branches()
                .iter()
                .position(|&x| x == branch)
                .expect("a switch")
        };
        let spans = [
            (0.0, c.get("a_duty"), bit(a[1])),
            (0.5, 0.5 + c.get("b_duty"), bit(b[1])),
        ];
        let whole = orbit::solve(&circuit, &clock(period, 1.0, &spans))
            .unwrap_or_else(|e| panic!("circuit {number}: {e}"));
        let like = (number / 3) % 3 == 0;
        let mut orbits = vec![whole];
        if like {
            equal += 1;
            let half = orbit::solve_halves(&circuit, &clock(period, 0.5, &spans), &partners);
            orbits.push(half.unwrap_or_else(|e| panic!("circuit {number} in halves: {e}")));
        }
        curved += usize::from(!circuit.laws.is_empty());
        for orbit in &orbits {
            let orbit = orbit.as_ref();
            let mut checks = Checks { number, worst: 0.0 };
            let watts = want.get("supply_power_w");
            let volts = c.get("supply_v");
            let load_a = (watts / c.get("load_ohm")).sqrt();
            let rms = |branch: usize| {
                orbit
                    .mean_product(Probe::Current(branch), Probe::Current(branch))
                    .sqrt()
            };
            let peak = |branch: usize| orbit.extremes(Probe::Voltage(branch)).greatest;
            let absorbed =
                |branch: usize| orbit.mean_product(Probe::Voltage(branch), Probe::Current(branch));
            let first = amplitude(orbit, &[(Probe::Current(load), 1.0)], 1);
            let even = |branch: usize| (Probe::Voltage(branch), 0.5);
            for (name, got, scale) in [
                ("supply_power_w", -absorbed(supply), watts),
                (
                    "output_power_w",
                    0.5 * first * first * c.get("load_ohm"),
                    watts,
                ),
                ("total_output_power_w", absorbed(load), watts),
                ("diodes_w", absorbed(a[2]) + absorbed(b[2]), watts),
                ("drain_a_peak_v", peak(a[1]), volts),
                ("drain_b_peak_v", peak(b[1]), volts),
                ("switch_a_rms_a", rms(a[1]), want.get("switch_a_rms_a")),
                ("switch_b_rms_a", rms(b[1]), want.get("switch_a_rms_a")),
                (
                    "turn_on_a_v",
                    orbit.before_end(Probe::Voltage(a[1])).0,
                    volts,
                ),
                (
                    "turn_on_b_v",
                    orbit.before(Probe::Voltage(b[1]), 0.5 * period).0,
                    volts,
                ),
                (
                    "load_second_harmonic_a",
                    amplitude(orbit, &[(Probe::Current(load), 1.0)], 2),
                    load_a,
                ),
                (
                    "load_third_harmonic_a",
                    amplitude(orbit, &[(Probe::Current(load), 1.0)], 3),
                    load_a,
                ),
                (
                    "common_mode_second_harmonic_v",
                    amplitude(orbit, &[even(a[1]), even(b[1])], 2),
                    volts,
                ),
                (
                    "supply_second_harmonic_a",
                    amplitude(orbit, &[(Probe::Current(supply), 1.0)], 2),
                    watts / volts,
                ),
            ] {
                checks.near(name, got, want.get(name), scale, 1e-5);
            }
        }
    }
    assert_eq!((all, equal), (30, 12));
    assert!(curved >= 8, "{curved} with a charge law");
}

#[test]
fn stacked_circuits_agree_with_an_integration() {
    let (mut all, mut gated) = (0, 0);
    for (number, row) in rows().iter().enumerate() {
        let (c, want) = (Row(&row["circuit"]), Row(&row["expect"]));
        if row["circuit"]["form"] != "stacked" {
            continue;
        }
        all += 1;
        let ohms = c.list("on_resistance_ohm");
        let count = ohms.len();
        let mut circuit = Circuit::default();
        // Node 1 is the supply, 2 the drain, 3 the branch, 4 the load, 5 and up the stack's own.
        let level = |k: usize| match k {
            0 => 0,
            k if k == count => 2,
            k => 4 + k,
        };
        let supply = circuit.add(
            "supply",
            1,
            0,
            Element::Source {
                volt: c.get("supply_v"),
            },
        );
        circuit.add("feed", 1, 2, coil(c.get("feed_l_h"), c.get("feed_esr_ohm")));
        let lowest = circuit.add("switch", level(1), 0, Element::Switch { ohm: ohms[0] });
        let mut across = Vec::new();
        for (k, farad) in c.list("across_c_f").into_iter().enumerate() {
            across.push(circuit.add("across", level(k + 1), level(k), capacitor(farad, 0.0)));
        }
        for (k, farad) in c.list("ground_c_f").into_iter().enumerate() {
            let node = circuit.add("node", level(k + 1), 0, capacitor(farad, 0.0));
            let (upper, lower) = (level(k + 2), level(k + 1));
            let ohm = ohms[k + 1];
            let channel = circuit.add("channel", upper, lower, Element::Channel { ohm });
            circuit.add(
                "follower",
                upper,
                lower,
                Element::Follower {
                    siemens: c.list("siemens")[k],
                    node,
                    clamp_v: c.list("clamp_v")[k],
                    channel,
                },
            );
        }
        circuit.add(
            "shunt",
            2,
            0,
            capacitor(c.get("shunt_c_f"), c.get("shunt_esr_ohm")),
        );
        circuit.add(
            "series coil",
            2,
            3,
            coil(c.get("series_l_h"), c.get("series_coil_esr_ohm")),
        );
        circuit.add(
            "series capacitor",
            3,
            4,
            capacitor(c.get("series_c_f"), c.get("series_capacitor_esr_ohm")),
        );
        let load = circuit.add(
            "load",
            4,
            0,
            Element::Resistor {
                ohm: c.get("load_ohm"),
            },
        );
        let period = 1.0 / c.get("carrier_hz");
        let orbit = orbit::solve(&circuit, &clock(period, 1.0, &[(0.0, c.get("duty"), 1)]))
            .unwrap_or_else(|e| panic!("circuit {number}: {e}"));
        gated += usize::from(want.get("gated") > 0.0);
        let mut checks = Checks { number, worst: 0.0 };
        let (watts, volts) = (want.get("supply_power_w"), c.get("supply_v"));
        let absorbed =
            |branch: usize| orbit.mean_product(Probe::Voltage(branch), Probe::Current(branch));
        let first = amplitude(orbit.as_ref(), &[(Probe::Current(load), 1.0)], 1);
        let drain = 0.5 * first * first * c.get("load_ohm");
        let shunt = circuit
            .branches
            .iter()
            .position(|b| b.name == "shunt")
            .expect("a shunt");
        for (name, got, scale) in [
            ("supply_power_w", -absorbed(supply), watts),
            ("output_power_w", drain, watts),
            ("total_output_power_w", absorbed(load), watts),
            (
                "drain_peak_v",
                orbit.extremes(Probe::Voltage(shunt)).greatest,
                volts,
            ),
            (
                "turn_on_v",
                orbit.before_end(Probe::Voltage(shunt)).0,
                volts,
            ),
            (
                "lowest_switch_rms_a",
                orbit
                    .mean_product(Probe::Current(lowest), Probe::Current(lowest))
                    .sqrt(),
                want.get("lowest_switch_rms_a"),
            ),
        ] {
            checks.near(name, got, want.get(name), scale, 1e-5);
        }
        for (k, want) in want.list("switch_peaks_v").into_iter().enumerate() {
            let got = orbit.extremes(Probe::Voltage(across[k])).greatest;
            checks.near("switch_peaks_v", got, want, volts, 1e-5);
        }
    }
    assert_eq!(all, 20);
    assert!(gated > 15, "{gated} with a gate that lets less through");
}
