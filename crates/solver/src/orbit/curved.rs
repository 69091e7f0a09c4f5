//! The periodic steady state where a capacitance depends on its voltage, and of circuits with
//! more states than are worth a solver of fixed size.
//!
//! Each stretch is cut into steps of Radau collocation (`step`), halved until the polynomial
//! through a step's nodes has died out in its last term. The cuts of one period serve the next,
//! so that the period map that Newton's method sees stays the same. It starts from the exact
//! steady state with typical, constant capacitances. One size for any number of states.

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
use radau::{NODES, S, SPREAD};
use std::rc::Rc;
use step::{Nodes, Step, Varying};

const MOST_ITERATIONS: usize = 60;
/// Iterations after which plain periods are mixed in to leave a cycle.
const CALM_AFTER: usize = 15;
/// Iteration at which the cuts are made anew.
const ANEW_AT: usize = 2;
/// Iteration from which on the cuts are as fine as they shall be, and before it how much less.
const FINE_FROM: usize = 3;
const LOOSE: f64 = 300.0;
const MOST_EVENTS: usize = 64;
const MOST_STEPS: usize = 4000;
/// Shortest step, as a share of its stretch.
const LEAST_SHARE: f64 = 1e-14;
/// How coarse a step counts whose equations were not solved.
const COARSEST: f64 = 4096.0;
/// Change of a state over the period, relative to that state, that counts as settled.
const SETTLED: f64 = 1e-10;
const ACCEPTED: f64 = 1e-8;
/// Last term of a step's polynomial, relative to the state: the end of the step is better by
/// about its square.
const LAST_TERM: f64 = 3e-6;
/// How much less where the law has knots: there the terms die out slowly, and the last one says
/// little of those that follow.
const KNOTTED: f64 = 1e-2;
/// And where no law stands in the way of the bound that holds for linear circuits.
const LINEAR: f64 = 1e-3;
/// The same of the curve itself, whatever follows from it.
const WORST_TERM: f64 = 1e-3;
/// What counts as next to nothing, as a share of the root of the greatest energy.
const TRIFLE: f64 = 1e-5;
/// Rounding of a guard, relative to its largest term.
const GUARD_ROUNDING: f64 = 1e-9;
const GUARD_STEPS: usize = 6;

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
    let (start, sizes) = if circuit.laws.is_empty() {
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
        fine: if circuit.laws.is_empty() {
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

    /// One period from `x`.
    fn lap(&mut self, x: &DVector<f64>, conducting: u32) -> Result<Lap, OrbitError> {
        let n = x.len();
        let mut lap = Lap {
            end: x.clone(),
            derivative: DMatrix::identity(n, n),
            pieces: Vec::with_capacity(32),
            jump_energy_j: 0.0,
            conducting: conducting & self.own_bits,
        };
        let mut start_s = 0.0;
        let clock = self.clock;
        for (number, clock_step) in clock.iter().enumerate() {
            let entered = self.mode(clock_step.closed | lap.conducting)?;
            if let Some(latch) = &self.modes[entered].rows.latch {
                let (latch, constant) = matrix(latch, n);
                lap.end = &latch * &lap.end + constant;
                lap.derivative = latch * &lap.derivative;
            }
            self.stretch(number, start_s, clock_step, &mut lap)?;
            start_s += clock_step.duration_s;
        }
        if lap.end.iter().all(|v| v.is_finite()) {
            Ok(lap)
        } else {
            Err(OrbitError::Overflow)
        }
    }

    /// One clock step, with what its diodes do.
    fn stretch(
        &mut self,
        number: usize,
        start_s: f64,
        clock: &ClockStep,
        lap: &mut Lap,
    ) -> Result<(), OrbitError> {
        let mut events = 0;
        let mut count = |more: usize| {
            events += more;
            if events > MOST_EVENTS {
                Err(OrbitError::Chatter { events })
            } else {
                Ok(())
            }
        };
        let mut mode = self.mode(clock.closed | lap.conducting)?;
        self.enter(mode, lap)?;
        while let Some(flips) = self.inconsistent(mode, lap) {
            count(1)?;
            lap.conducting ^= flips;
            mode = self.mode(clock.closed | lap.conducting)?;
            self.enter(mode, lap)?;
        }
        let mut done = 0.0;
        // Cuts still to be made, the next one last.
        let mut plan = std::mem::take(&mut self.plans[number]);
        let mut ahead = if plan.duration == clock.duration_s && plan.mode == mode {
            plan.steps.iter().rev().cloned().collect()
        } else {
            quarters(clock.duration_s)
        };
        plan.steps.clear();
        (plan.duration, plan.mode) = (clock.duration_s, mode);
        let mut whole = true;
        while let Some((length, guess)) = ahead.pop() {
            if lap.pieces.len() > MOST_STEPS {
                return Err(OrbitError::TooManySteps { steps: MOST_STEPS });
            }
            let step = self.step(mode, length)?;
            let tried = step.solve(&self.varying, &lap.end, guess.as_deref(), &self.sizes);
            let coarse = tried
                .as_ref()
                .map_or(COARSEST, |n| self.coarseness(mode, length, &lap.end, n));
            let Some(nodes) = tried.as_ref().filter(|_| coarse <= 1.0) else {
                if length < clock.duration_s * LEAST_SHARE {
                    return Err(OrbitError::TooManySteps {
                        steps: lap.pieces.len(),
                    });
                }
                self.split(length, coarse, &lap.end, tried.as_ref(), &mut ahead);
                continue;
            };
            let event = self.first_event(mode, &lap.end, nodes);
            let Some((guard, share)) = event else {
                if whole {
                    plan.steps.push((length, Some(nodes.volts.clone())));
                }
                self.accept(mode, &step, nodes, start_s + done, lap)?;
                done += length;
                continue;
            };
            count(1)?;
            whole = false;
            done += self.to_event(mode, guard, share * length, start_s + done, lap)?;
            self.change(&mut mode, guard, clock.closed, lap)?;
            ahead = quarters((clock.duration_s - done).max(0.0));
            if clock.duration_s - done <= 1e-15 * clock.duration_s {
                break;
            }
        }
        if whole {
            self.plans[number] = plan;
        }
        Ok(())
    }

    /// How far the last term of the polynomial through a step's nodes lies beyond its bound:
    /// what that term adds to the charges and fluxes within the step, and the term itself.
    fn coarseness(&self, mode: usize, length: f64, start: &DVector<f64>, nodes: &Nodes) -> f64 {
        let n = start.len();
        let last = DVector::from_fn(n, |k, _| {
            let sum: f64 = (0..S)
                .map(|i| SPREAD[i + 1] * nodes.states[i * n + k])
                .sum();
            (sum + SPREAD[0] * start[k]) / (1u64 << (2 * S - 1)) as f64
        });
        let added = &self.modes[mode].a * &last * length;
        let size = |k: usize| {
            let end = nodes.states[(S - 1) * n + k].abs();
            self.sizes[k].max(start[k].abs()).max(end)
        };
        // Next to nothing is a trifle of what would hold the energy of the others.
        let energy = (0..n).map(|k| self.masses[k] * size(k) * size(k));
        let root = TRIFLE * energy.fold(0.0, f64::max).sqrt();
        (0..n)
            .map(|k| {
                let least = if self.masses[k] > 0.0 {
                    root / self.masses[k].sqrt()
                } else {
                    0.0
                };
                let size = size(k).max(least);
                let bound = LAST_TERM * size * self.loose * self.fine + f64::MIN_POSITIVE;
                let worst = WORST_TERM * size * self.loose.sqrt() + f64::MIN_POSITIVE;
                (added[k].abs() / bound).max(last[k].abs() / worst)
            })
            .fold(0.0, f64::max)
    }

    /// Halves a step that is too coarse as often as its last term asks for, and gives each part
    /// what was found there as a guess.
    fn split(
        &self,
        length: f64,
        coarse: f64,
        start: &DVector<f64>,
        tried: Option<&Nodes>,
        ahead: &mut Vec<(f64, Option<Vec<f64>>)>,
    ) {
        let m = self.varying.len();
        let halvings = (libm::log2(coarse.min(COARSEST)) / (S + 1) as f64)
            .ceil()
            .max(1.0);
        let guess = |from: f64, share: f64| {
            tried.map(|nodes| {
                let value = |at: usize| {
                    let k = at % m;
                    let values: [f64; S + 1] = std::array::from_fn(|i| match i {
                        0 => start[self.varying[k].state],
                        _ => nodes.volts[(i - 1) * m + k],
                    });
                    read::between(&values, from + share * NODES[at / m])
                };
                (0..S * m).map(value).collect()
            })
        };
        let mut share = 0.5;
        for _ in 0..halvings as usize {
            ahead.push((share * length, guess(share, share)));
            share *= 0.5;
        }
        ahead.push((2.0 * share * length, guess(0.0, 2.0 * share)));
    }

    fn accept(
        &self,
        mode: usize,
        step: &Step,
        nodes: &Nodes,
        start_s: f64,
        lap: &mut Lap,
    ) -> Result<(), OrbitError> {
        let n = lap.end.len();
        let tangent = step
            .tangent(&self.varying, &lap.end, nodes)
            .ok_or(OrbitError::Overflow)?;
        lap.derivative = tangent * &lap.derivative;
        let mut states = DMatrix::zeros(n, S + 1);
        states.set_column(0, &lap.end);
        for i in 0..S {
            states.set_column(i + 1, &nodes.states.rows(i * n, n));
        }
        lap.end = nodes.end(n).into_owned();
        lap.pieces.push(Piece {
            mode,
            start_s,
            length: step.length,
            states,
        });
        Ok(())
    }

    /// Steps from the state at hand to the instant at which a diode's guard is zero, and gives
    /// the time it took.
    fn to_event(
        &mut self,
        mode: usize,
        guard: usize,
        guess_s: f64,
        start_s: f64,
        lap: &mut Lap,
    ) -> Result<f64, OrbitError> {
        let guard = self.modes[mode].guards[guard].row.clone();
        let n = lap.end.len();
        let mut length = guess_s;
        if length <= 0.0 {
            return Ok(0.0);
        }
        for round in 0..GUARD_STEPS {
            let step = Step::new(
                &self.modes[mode].a,
                &self.modes[mode].b,
                &self.modes[mode].lift,
                &self.varying,
                length,
            )
            .ok_or(OrbitError::Overflow)?;
            let nodes = step
                .solve(&self.varying, &lap.end, None, &self.sizes)
                .ok_or(OrbitError::Overflow)?;
            let end = nodes.end(n).into_owned();
            let left = value(&guard, &end);
            let mut still = guard.clone();
            still[n] = 0.0;
            let rate = value(&still, &self.slopes(mode, &end));
            let change = if rate < 0.0 { -left / rate } else { 0.0 };
            if change.abs() <= 1e-13 * length || round + 1 == GUARD_STEPS {
                self.accept(mode, &step, &nodes, start_s, lap)?;
                return Ok(length);
            }
            length = (length + change).clamp(0.5 * length, 1.5 * length);
        }
        Ok(length)
    }

    /// A diode starts or stops: the instant moves with the state.
    fn change(
        &mut self,
        mode: &mut usize,
        guard: usize,
        closed: u32,
        lap: &mut Lap,
    ) -> Result<(), OrbitError> {
        let Guard {
            row: mut guard,
            flips,
        } = self.modes[*mode].guards[guard].clone();
        let n = lap.end.len();
        guard[n] = 0.0;
        let before = self.slopes(*mode, &lap.end);
        let rate = value(&guard, &before);
        let row = DMatrix::from_fn(1, n, |_, c| {
            (0..n).map(|r| guard[r] * lap.derivative[(r, c)]).sum()
        });
        lap.conducting ^= flips;
        *mode = self.mode(closed | lap.conducting)?;
        let old = lap.end.clone();
        self.enter(*mode, lap)?;
        if rate != 0.0 {
            let moved = self.entered(*mode, &old, &lap.end, &DMatrix::from_columns(&[before]));
            let after = self.slopes(*mode, &lap.end);
            lap.derivative -= (moved.column(0) - after) * row / rate;
        }
        Ok(())
    }

    /// Carries the state over to what the mode allows, its charges conserved, and books the
    /// energy that is lost.
    fn enter(&self, mode: usize, lap: &mut Lap) -> Result<(), OrbitError> {
        let Some(project) = &self.modes[mode].rows.project else {
            return Ok(());
        };
        let n = lap.end.len();
        let lift = &self.modes[mode].lift;
        let (project, constant) = matrix(project, n);
        let mut free = project * &lap.end + constant;
        for (k, v) in self.varying.iter().enumerate() {
            free.axpy(v.excess(lap.end[v.state]).0, &lift.column(k), 1.0);
        }
        // x + sum r d(x) = free.
        let mut x = free.clone();
        for _ in 0..MOST_ITERATIONS {
            let mut left = &x - &free;
            for (k, v) in self.varying.iter().enumerate() {
                left.axpy(v.excess(x[v.state]).0, &lift.column(k), 1.0);
            }
            let step = self.spread(mode, &x, &left);
            x -= &step;
            if (0..n).all(|k| step[k].abs() <= 1e-14 * self.sizes[k].max(x[k].abs())) {
                break;
            }
        }
        let energy = |x: &DVector<f64>| {
            let mut sum = 0.0;
            for k in 0..n {
                if !self.varying.iter().any(|v| v.state == k) {
                    sum += 0.5 * self.masses[k] * x[k] * x[k];
                }
            }
            let held = |v: &Varying| v.law.energy_j(x[v.state]);
            sum + self.varying.iter().map(held).sum::<f64>()
        };
        lap.jump_energy_j += energy(&lap.end) - energy(&x);
        let derivative = self.entered(mode, &lap.end, &x, &lap.derivative);
        (lap.end, lap.derivative) = (x, derivative);
        Ok(())
    }

    /// What entering a mode does to changes of the state.
    fn entered(
        &self,
        mode: usize,
        old: &DVector<f64>,
        new: &DVector<f64>,
        changes: &DMatrix<f64>,
    ) -> DMatrix<f64> {
        let Some(project) = &self.modes[mode].rows.project else {
            return changes.clone();
        };
        let (project, _) = matrix(project, old.len());
        let lift = &self.modes[mode].lift;
        let mut free = project * changes;
        for (k, v) in self.varying.iter().enumerate() {
            let slope = v.excess(old[v.state]).1;
            free += lift.column(k) * changes.row(v.state) * slope;
        }
        let columns: Vec<_> = free
            .column_iter()
            .map(|column| self.spread(mode, new, &column.into_owned()))
            .collect();
        DMatrix::from_columns(&columns)
    }

    /// The bits that contradict the state at hand.
    fn inconsistent(&self, mode: usize, lap: &Lap) -> Option<u32> {
        let contradicts = |g: &&Guard| value(&g.row, &lap.end) < -rounding(&g.row, &lap.end);
        self.modes[mode]
            .guards
            .iter()
            .find(contradicts)
            .map(|g| g.flips)
    }

    /// The first guard to fall below zero within a step, and the share of the step until then.
    fn first_event(
        &self,
        mode: usize,
        start: &DVector<f64>,
        nodes: &Nodes,
    ) -> Option<(usize, f64)> {
        let n = start.len();
        let mut earliest: Option<(usize, f64)> = None;
        for (k, Guard { row, .. }) in self.modes[mode].guards.iter().enumerate() {
            let mut at = [value(row, start); S + 1];
            let mut tolerance = rounding(row, start);
            for i in 0..S {
                let states = nodes.states.rows(i * n, n);
                at[i + 1] = value(row, &states);
                tolerance = tolerance.max(rounding(row, &states));
            }
            if let Some(share) = read::first_fall(&at, tolerance)
                && earliest.is_none_or(|(_, before)| share < before)
            {
                earliest = Some((k, share));
            }
        }
        earliest
    }
}

/// A stretch in four parts, the next one last.
fn quarters(duration: f64) -> Vec<(f64, Option<Vec<f64>>)> {
    vec![(0.25 * duration, None); 4]
}

fn rounding<'a>(row: &[f64], x: impl IntoIterator<Item = &'a f64>) -> f64 {
    let largest = row
        .iter()
        .zip(x)
        .map(|(r, v)| (r * v).abs())
        .fold(row.last().map_or(0.0, |c| c.abs()), f64::max);
    GUARD_ROUNDING * largest
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
