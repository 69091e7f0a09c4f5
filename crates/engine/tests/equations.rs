//! State equations against hand analysis: loops of capacitors, cut-sets of coils, coupled
//! coils, ideal switches, and circuits that have no equations.

use evenfall_engine::circuit::{Circuit, Coupling, Element};
use evenfall_engine::dynamics::{DynamicsError, Mode, mode};
use evenfall_engine::orbit::{self, ClockStep, OrbitError, Probe};

fn r(ohm: f64) -> Element {
    Element::Resistor { ohm }
}
fn l(henry: f64) -> Element {
    Element::Inductor { henry, ohm: 0.0 }
}
fn c(farad: f64) -> Element {
    Element::Capacitor { farad, ohm: 0.0 }
}
fn v(volt: f64) -> Element {
    Element::Source { volt }
}

#[track_caller]
fn near(a: f64, b: f64) {
    assert!(
        (a - b).abs() <= 1e-12 * a.abs().max(b.abs()).max(1e-300),
        "{a} against {b}"
    );
}

/// A row applied to a state with its constant.
fn apply(row: &[f64], x: &[f64]) -> f64 {
    row.iter().zip(x).map(|(a, b)| a * b).sum()
}

fn projected(mode: &Mode, x: &[f64]) -> Vec<f64> {
    let project = mode
        .project
        .as_ref()
        .expect("a mode that does not allow every state");
    (0..project.len())
        .map(|k| apply(project.row(k), x))
        .chain([1.0])
        .collect()
}

#[test]
fn a_loop_of_capacitors_shares_charge_and_keeps_it() {
    // C3 across C1 and C2 in series, R across C1.
    let (c1, c2, c3, ohm) = (2e-9, 3e-9, 5e-9, 100.0);
    let mut circuit = Circuit::default();
    circuit.add("C1", 1, 0, c(c1));
    circuit.add("C2", 2, 1, c(c2));
    circuit.add("C3", 2, 0, c(c3));
    circuit.add("R", 1, 0, r(ohm));
    let m = mode(&circuit, 0).expect("equations");
    let before = [1.0, -2.0, 4.0, 1.0];
    let after = projected(&m, &before);
    near(after[0] + after[1], after[2]);
    // Charge on node 2 and on node 1 is what it was.
    near(
        c2 * after[1] + c3 * after[2],
        c2 * before[1] + c3 * before[2],
    );
    near(
        c1 * after[0] - c2 * after[1],
        c1 * before[0] - c2 * before[1],
    );
    // C1 with C2 and C3 in series beside it, discharged by R.
    let whole = c1 + c2 * c3 / (c2 + c3);
    near(apply(m.slopes.row(0), &after), -after[0] / (ohm * whole));
    near(apply(m.current.row(3), &after), after[0] / ohm);
}

#[test]
fn coils_in_series_share_one_current_with_their_flux_kept() {
    let (l1, l2, ohm, volt) = (2e-6, 3e-6, 50.0, 12.0);
    let mut circuit = Circuit::default();
    circuit.add("V", 1, 0, v(volt));
    circuit.add("L1", 1, 2, l(l1));
    circuit.add("L2", 2, 3, l(l2));
    circuit.add("R", 3, 0, r(ohm));
    let m = mode(&circuit, 0).expect("equations");
    let after = projected(&m, &[1.0, -0.5, 1.0]);
    near(after[0], after[1]);
    near(after[0], (l1 * 1.0 + l2 * -0.5) / (l1 + l2));
    near(
        apply(m.slopes.row(0), &after),
        (volt - ohm * after[0]) / (l1 + l2),
    );
    near(
        apply(m.voltage.row(1), &after),
        l1 * apply(m.slopes.row(0), &after),
    );
}

#[test]
fn coupled_coils_follow_their_inductance_matrix() {
    let (l1, l2, mutual, r1, r2, volt) = (4e-6, 9e-6, 3e-6, 5.0, 20.0, 7.0);
    let mut circuit = Circuit::default();
    circuit.add("V", 1, 0, v(volt));
    let first = circuit.add("L1", 1, 2, l(l1));
    circuit.add("R1", 2, 0, r(r1));
    let second = circuit.add("L2", 3, 0, l(l2));
    circuit.add("R2", 3, 0, r(r2));
    circuit.couplings.push(Coupling {
        first,
        second,
        mutual_henry: mutual,
    });
    let m = mode(&circuit, 0).expect("equations");
    let x = [0.3, -0.2, 1.0];
    let (d1, d2) = (apply(m.slopes.row(0), &x), apply(m.slopes.row(1), &x));
    near(l1 * d1 + mutual * d2, volt - r1 * x[0]);
    near(mutual * d1 + l2 * d2, -r2 * x[1]);
}

#[test]
fn an_ideal_switch_takes_a_capacitor_out_of_the_state() {
    let mut circuit = Circuit::default();
    circuit.add("V", 1, 0, v(10.0));
    circuit.add("R", 1, 2, r(5.0));
    circuit.add("C", 2, 0, c(1e-9));
    let switch = circuit.add("switch", 2, 0, Element::Switch { ohm: 0.0 });
    let open = mode(&circuit, 0).expect("open");
    assert!(open.project.is_none());
    near(
        apply(open.slopes.row(0), &[4.0, 1.0]),
        (10.0 - 4.0) / (5.0 * 1e-9),
    );
    near(apply(open.voltage.row(switch), &[4.0, 1.0]), 4.0);
    let closed = mode(&circuit, 1).expect("closed");
    assert_eq!(projected(&closed, &[4.0, 1.0]), [0.0, 1.0]);
    near(apply(closed.current.row(switch), &[0.0, 1.0]), 2.0);
}

#[test]
fn what_has_no_equations_is_refused_with_its_elements() {
    let mut circuit = Circuit::default();
    circuit.add("first supply", 1, 0, v(10.0));
    circuit.add("second supply", 1, 0, v(11.0));
    let Err(DynamicsError::SourceLoop { elements }) = mode(&circuit, 0) else {
        panic!("a loop of sources")
    };
    assert!(elements.contains(&"first supply") && elements.contains(&"second supply"));
    let mut circuit = Circuit::default();
    circuit.add("coil", 1, 0, l(-1e-6));
    assert_eq!(
        mode(&circuit, 0),
        Err(DynamicsError::Value {
            element: "coil",
            value: -1e-6
        })
    );
    circuit.branches[0].element = l(f64::NAN);
    assert!(matches!(
        mode(&circuit, 0),
        Err(DynamicsError::Value {
            element: "coil",
            ..
        })
    ));
}

#[test]
fn a_resistor_that_is_switched_across_a_capacitor_settles_to_the_closed_form() {
    // R charges C from V; half of each period a second resistor discharges it.
    let (volt, ra, rb, farad, half) = (10.0, 1e3, 2e3, 1e-6, 1e-3);
    let mut circuit = Circuit::default();
    circuit.add("V", 1, 0, v(volt));
    circuit.add("Ra", 1, 2, r(ra));
    let capacitor = circuit.add("C", 2, 0, c(farad));
    circuit.add("switch", 2, 0, Element::Switch { ohm: rb });
    let clock = [
        ClockStep {
            duration_s: half,
            closed: 1,
        },
        ClockStep {
            duration_s: half,
            closed: 0,
        },
    ];
    let orbit = orbit::solve(&circuit, &clock).expect("an orbit");
    let (end, tau) = (volt * rb / (ra + rb), farad * ra * rb / (ra + rb));
    let (a, b) = (libm::exp(-half / tau), libm::exp(-half / (farad * ra)));
    // Closed: low = end + (high - end) a. Open: high = volt + (low - volt) b.
    let high = (volt * (1.0 - b) + end * (1.0 - a) * b) / (1.0 - a * b);
    let low = end + (high - end) * a;
    let range = orbit.extremes(Probe::Voltage(capacitor));
    assert!((range.greatest / high - 1.0).abs() < 1e-12 && (range.least / low - 1.0).abs() < 1e-12);
    assert!((range.least_at_s / half - 1.0).abs() < 1e-9);
}

#[test]
fn a_state_that_nothing_determines_is_said() {
    let mut circuit = Circuit::default();
    circuit.add("V", 1, 0, v(10.0));
    circuit.add("L", 1, 0, l(1e-6));
    let clock = [ClockStep {
        duration_s: 1e-6,
        closed: 0,
    }];
    assert!(matches!(
        orbit::solve(&circuit, &clock),
        Err(OrbitError::Undetermined)
    ));
    assert!(matches!(
        orbit::solve(
            &circuit,
            &[ClockStep {
                duration_s: f64::NAN,
                closed: 0
            }]
        ),
        Err(OrbitError::Clock { .. })
    ));
}

#[test]
fn any_number_of_states_is_solved() {
    // A ladder of RC sections, charged and discharged; its power balance must close.
    let ladder = |sections: usize| {
        let mut circuit = Circuit::default();
        let source = circuit.add("V", 1, 0, v(10.0));
        let mut resistors = Vec::new();
        for k in 0..sections {
            resistors.push(circuit.add("R", 1 + k, 2 + k, r(10.0)));
            circuit.add("C", 2 + k, 0, c(1e-9));
        }
        resistors.push(circuit.add("switch", 1 + sections, 0, Element::Switch { ohm: 3.0 }));
        let clock = [
            ClockStep {
                duration_s: 1e-6,
                closed: 1,
            },
            ClockStep {
                duration_s: 2e-6,
                closed: 0,
            },
        ];
        orbit::solve(&circuit, &clock).map(|orbit| {
            let taken = -10.0 * orbit.mean(Probe::Current(source));
            let lost: f64 = resistors
                .iter()
                .map(|&k| orbit.mean_product(Probe::Voltage(k), Probe::Current(k)))
                .sum();
            (taken, lost)
        })
    };
    for (sections, bound) in [
        (1, 1e-11),
        (3, 1e-11),
        (4, 1e-11),
        (5, 1e-11),
        (8, 1e-11),
        (9, 1e-11),
        // Beyond these by steps, as where a charge law is followed.
        (10, 1e-9),
        (16, 1e-9),
        (20, 1e-9),
        (40, 1e-9),
    ] {
        let (taken, lost) = ladder(sections).expect("an orbit");
        assert!(
            taken > 0.0 && (lost / taken - 1.0).abs() < bound,
            "{sections}: {lost} of {taken}"
        );
    }
}
