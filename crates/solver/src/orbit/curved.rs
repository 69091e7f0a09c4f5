//! The periodic steady state where a capacitance depends on its voltage, and of circuits with
//! more states than are worth a solver of fixed size.
//!
//! Each stretch is cut into steps of Radau collocation (`step`), halved until the polynomial
//! through a step's nodes has died out in its last term. The cuts of one period serve the next,
//! so that the period map that Newton's method sees stays the same. It starts from the exact
//! steady state with typical, constant capacitances. One size for any number of states.

mod lap;
mod radau;
mod read;
mod step;

use super::guards::{self, Guard};
use super::mirror::Mirror;
use super::{ClockStep, OrbitError};
use crate::charge::ChargeLaw;
use crate::circuit::{Circuit, Element};
use crate::dynamics::{self, Rows};
use nalgebra::{DMatrix, DVector};
use std::rc::Rc;
use step::{Step, Varying};

const MOST_ITERATIONS: usize = 60;
/// Iterations after which plain periods are mixed in to leave a cycle.
const CALM_AFTER: usize = 15;
/// Iteration at which the cuts are made anew.
const ANEW_AT: usize = 2;
/// Iteration from which on the cuts are as fine as they shall be, and before it how much less.
const FINE_FROM: usize = 3;
const LOOSE: f64 = 1000.0;
/// Change of a state over the period, relative to that state, that counts as settled.
const SETTLED: f64 = 1e-10;
const ACCEPTED: f64 = 1e-8;
/// How much finer the cuts are where the law has knots: there the terms die out slowly, and the last one says
/// little of those that follow.
const KNOTTED: f64 = 1e-2;
/// And where no law stands in the way of the bound that holds for linear circuits.
const LINEAR: f64 = 3e-4;

/// One mode of the circuit.
struct Mode {
    conducting: u32,
    a: DMatrix<f64>,
    b: DVector<f64>,
    lift: DMatrix<f64>,
    rows: dynamics::Mode,
    guards: Vec<Guard>,
    steps: Vec<Rc<Step>>,
}

/// A solved step.
struct Piece {
    mode: usize,
    start_s: f64,
    length: f64,
    /// States at the start and at each node.
    states: DMatrix<f64>,
}

/// The cuts of a whole clock step, with the varying voltages found there.
#[derive(Default)]
struct Plan {
    duration: f64,
    mode: usize,
    steps: Vec<(f64, Option<Vec<f64>>)>,
}

/// The solved orbit.
pub(super) struct Solution {
    period_s: f64,
    iterations: usize,
    modes: Vec<Mode>,
    pieces: Vec<Piece>,
    switching: Vec<usize>,
    varying: Vec<Varying>,
    /// The greatest magnitude of each state that was met.
    sizes: Vec<f64>,
    jump_energy_j: f64,
}

struct Solver<'a> {
    circuit: &'a Circuit,
    clock: &'a [ClockStep],
    /// Bits of the elements that switch by themselves.
    own_bits: u32,
    mirror: Option<&'a Mirror>,
    varying: Vec<Varying>,
    masses: Vec<f64>,
    modes: Vec<Mode>,
    plans: Vec<Plan>,
    sizes: Vec<f64>,
    /// Multiple of the bounds on the last term: the first periods need not be fine.
    loose: f64,
    /// Multiple of them that the circuit asks for.
    fine: f64,
}

struct Lap {
    end: DVector<f64>,
    derivative: DMatrix<f64>,
    pieces: Vec<Piece>,
    jump_energy_j: f64,
    conducting: u32,
}

/// A row of coefficients at a state; the constant is the row's last entry.
fn value<'a>(row: &[f64], state: impl IntoIterator<Item = &'a f64>) -> f64 {
    let constant = row.last().copied().unwrap_or(0.0);
    row.iter().zip(state).map(|(r, x)| r * x).sum::<f64>() + constant
}

fn matrix(rows: &Rows, states: usize) -> (DMatrix<f64>, DVector<f64>) {
    (
        DMatrix::from_fn(rows.len(), states, |r, c| rows.row(r)[c]),
        DVector::from_fn(rows.len(), |r, _| rows.row(r)[states]),
    )
}

/// The circuit with every varying capacitor at its typical capacitance.
fn constant(circuit: &Circuit) -> Circuit {
    let mut typical = circuit.clone();
    for branch in &mut typical.branches {
        if let Element::Varying { farad, .. } = branch.element {
            branch.element = Element::Capacitor { farad, ohm: 0.0 };
        }
    }
    typical
}

pub(super) fn solve(
    circuit: &Circuit,
    clock: &[ClockStep],
    mirror: Option<&Mirror>,
) -> Result<Solution, OrbitError> {
    let states = circuit.state_count();
    // Without a varying capacitor the period map is as good as linear, and any start will do.
    let (start, sizes) = if circuit.varying().next().is_none() {
        (vec![0.0; states], vec![0.0; states])
    } else {
        let typical = super::solve_with(&constant(circuit), clock, mirror)?;
        (typical.start(), typical.sizes())
    };
    let switching = circuit.switching_branches();
    let (capacitors, inductors) = circuit.state_branches();
    let (mut masses, mut varying) = (vec![0.0; states], Vec::new());
    for (state, &branch) in capacitors.iter().chain(&inductors).enumerate() {
        masses[state] = match circuit.branches[branch].element {
            Element::Capacitor { farad, .. } => farad,
            Element::Inductor { henry, .. } => henry,
            Element::Varying { law, farad } => {
                varying.push(Varying {
                    state,
                    farad,
                    law: circuit.laws[law].clone(),
                });
                farad
            }
            _ => 0.0,
        };
    }
    let start = DVector::from_vec(start);
    let mut solver = Solver {
        circuit,
        clock,
        own_bits: guards::own_bits(circuit),
        mirror,
        varying,
        masses,
        modes: Vec::new(),
        plans: clock.iter().map(|_| Plan::default()).collect(),
        sizes,
        loose: LOOSE,
        fine: if circuit.varying().next().is_none() {
            LINEAR
        } else if circuit.laws.iter().all(ChargeLaw::is_smooth) {
            1.0
        } else {
            KNOTTED
        },
    };
    let (lap, iterations) = solver.settle(start)?;
    Ok(Solution {
        period_s: clock.iter().map(|s| s.duration_s).sum(),
        iterations,
        modes: solver.modes,
        pieces: lap.pieces,
        switching,
        varying: solver.varying,
        sizes: solver.sizes,
        jump_energy_j: lap.jump_energy_j,
    })
}

impl Solver<'_> {
    fn settle(&mut self, start: DVector<f64>) -> Result<(Lap, usize), OrbitError> {
        let mut x = start;
        let mut conducting = 0;
        let mut residual = f64::INFINITY;
        for iteration in 1..=MOST_ITERATIONS {
            if iteration == ANEW_AT {
                // Cuts made for a start that was not yet soft are finer than need be.
                self.plans.iter_mut().for_each(|p| *p = Plan::default());
            }
            if iteration == FINE_FROM {
                self.loose = 1.0;
            }
            let mut lap = self.lap(&x, conducting)?;
            if let Some(mirror) = self.mirror {
                mirror.fold(&mut lap.end, &mut lap.derivative);
                lap.conducting = mirror.bits(lap.conducting);
            }
            self.sizes = sizes(&lap, &self.sizes);
            residual = self.distance(&x, &lap.end);
            let repeats = lap.conducting == conducting;
            conducting = lap.conducting;
            if iteration >= FINE_FROM && repeats && residual <= SETTLED {
                return Ok((lap, iteration));
            }
            let next = self.newton(&x, &lap)?;
            let moved = self.distance(&x, &next);
            if iteration >= FINE_FROM && repeats && residual <= ACCEPTED && moved <= ACCEPTED {
                return Ok((lap, iteration));
            }
            x = if iteration > CALM_AFTER && iteration % 4 != 0 {
                lap.end
            } else {
                next
            };
        }
        Err(OrbitError::NotConverged {
            iterations: MOST_ITERATIONS,
            residual,
        })
    }

    fn distance(&self, x: &DVector<f64>, y: &DVector<f64>) -> f64 {
        (0..x.len())
            .filter(|&k| self.sizes[k] > 0.0)
            .map(|k| (x[k] - y[k]).abs() / self.sizes[k])
            .fold(0.0, f64::max)
    }

    /// The state that repeats, by the derivative of the period map.
    fn newton(&self, x: &DVector<f64>, lap: &Lap) -> Result<DVector<f64>, OrbitError> {
        let n = x.len();
        let scale: Vec<f64> = self
            .masses
            .iter()
            .map(|&m| if m > 0.0 { 1.0 / m.sqrt() } else { 1.0 })
            .collect();
        let matrix = DMatrix::from_fn(n, n, |r, c| {
            let own = if r == c { 1.0 } else { 0.0 };
            own - lap.derivative[(r, c)] * scale[c] / scale[r]
        });
        let mut step = DVector::from_fn(n, |r, _| (lap.end[r] - x[r]) / scale[r]);
        if !matrix.lu().solve_mut(&mut step) || step.iter().any(|v| !v.is_finite()) {
            return Err(OrbitError::Undetermined);
        }
        Ok(DVector::from_fn(n, |r, _| x[r] + step[r] * scale[r]))
    }

    fn mode(&mut self, conducting: u32) -> Result<usize, OrbitError> {
        if let Some(found) = self.modes.iter().position(|m| m.conducting == conducting) {
            return Ok(found);
        }
        let rows = dynamics::mode(self.circuit, conducting)?;
        let guards = guards::of(self.circuit, &rows, conducting);
        let states = rows.slopes.len();
        let (a, b) = matrix(&rows.slopes, states);
        let (lift, _) = matrix(&rows.lift, states);
        self.modes.push(Mode {
            conducting,
            a,
            b,
            lift: lift.transpose(),
            rows,
            guards,
            steps: Vec::new(),
        });
        Ok(self.modes.len() - 1)
    }

    fn step(&mut self, mode: usize, length: f64) -> Result<Rc<Step>, OrbitError> {
        let mode = &mut self.modes[mode];
        if let Some(step) = mode.steps.iter().find(|s| s.length == length) {
            return Ok(step.clone());
        }
        let step = Step::new(&mode.a, &mode.b, &mode.lift, &self.varying, length)
            .ok_or(OrbitError::Overflow)?;
        let step = Rc::new(step);
        mode.steps.push(step.clone());
        Ok(step)
    }

    /// Slopes of the states.
    fn slopes(&self, mode: usize, x: &DVector<f64>) -> DVector<f64> {
        let m = &self.modes[mode];
        let free = &m.a * x + &m.b;
        self.spread(mode, x, &free)
    }

    /// From the slope of a state with its charges, `x + sum r d`, to the slope of the state.
    fn spread(&self, mode: usize, x: &DVector<f64>, free: &DVector<f64>) -> DVector<f64> {
        step::spread(&self.varying, &self.modes[mode].lift, x, free)
    }
}

fn sizes(lap: &Lap, before: &[f64]) -> Vec<f64> {
    let mut sizes = vec![0.0f64; before.len()];
    for piece in &lap.pieces {
        for column in piece.states.column_iter() {
            for (size, x) in sizes.iter_mut().zip(column.iter()) {
                *size = size.max(x.abs());
            }
        }
    }
    sizes
}
