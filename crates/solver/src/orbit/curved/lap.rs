//! One period: stretches of the clock, cut into steps, with what switches by itself.

use super::radau::{NODES, S, SPREAD};
use super::step::{Nodes, Step, Varying};
use super::{Lap, Piece, Solver, matrix, read, value};
use crate::orbit::guards::Guard;
use crate::orbit::{ClockStep, OrbitError};
use nalgebra::{DMatrix, DVector};

const MOST_EVENTS: usize = 64;
const MOST_STEPS: usize = 1000;
/// Shortest step, as a share of its stretch.
const LEAST_SHARE: f64 = 1e-14;
/// How coarse a step counts whose equations were not solved.
const COARSEST: f64 = 4096.0;
/// Last term of a step's polynomial, relative to the state: the end of the step is better by
/// about its square.
const LAST_TERM: f64 = 3e-6;
/// The same of the curve itself, whatever follows from it.
const WORST_TERM: f64 = 1e-3;
/// What counts as next to nothing, as a share of the root of the greatest energy.
const TRIFLE: f64 = 1e-5;
/// Rounding of a guard, relative to its largest term.
const GUARD_ROUNDING: f64 = 1e-9;
const GUARD_STEPS: usize = 6;
const MOST_ITERATIONS: usize = 60;

impl Solver<'_> {
    /// One period from `x`.
    pub(super) fn lap(&mut self, x: &DVector<f64>, conducting: u32) -> Result<Lap, OrbitError> {
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
            done += self.until_event(mode, guard, share * length, start_s + done, lap)?;
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
        let a = &self.modes[mode].a;
        let added = |k: usize| length * (0..n).map(|c| a[(k, c)] * last[c]).sum::<f64>();
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
                (added(k).abs() / bound).max(last[k].abs() / worst)
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
    fn until_event(
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
                at[i + 1] = value(row, states.iter());
                tolerance = tolerance.max(rounding(row, states.iter()));
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
