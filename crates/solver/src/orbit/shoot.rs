//! Newton's method on the period map.

use super::flow::{Flow, Square, State, first_fall};
use super::guards;
use super::mirror::Mirror;
use super::{ClockStep, OrbitError};
use crate::circuit::{Circuit, Element};
use crate::dynamics::{self, Rows};
use nalgebra::{Const, DimMin};
use std::cell::OnceCell;

const MOST_ITERATIONS: usize = 60;
/// Iterations after which plain periods are mixed in to leave a cycle.
const CALM_AFTER: usize = 15;
const MOST_EVENTS: usize = 64;
/// A state that repeats to this, relative to its size, has settled.
const SETTLED: f64 = 1e-13;
/// What is accepted when rounding keeps Newton from settling fully. A very stiff choke
/// amplifies rounding in the state, so after `PATIENCE` iterations the change over a period
/// alone decides; the power balance is checked in any case.
const ACCEPTED: f64 = 1e-9;
const PATIENCE: usize = 6;
/// Rounding of a guard, relative to its largest term.
const GUARD_ROUNDING: f64 = 1e-12;

/// The equations of one conduction set, in fixed size.
pub(super) struct SizedMode<const N: usize> {
    pub(super) conducting: u32,
    pub(super) a: Square<N>,
    pub(super) project: Option<Square<N>>,
    pub(super) latch: Option<Square<N>>,
    pub(super) voltage: Vec<State<N>>,
    pub(super) current: Vec<State<N>>,
    guards: Vec<(State<N>, u32)>,
}

/// A stretch between events.
#[derive(Clone)]
pub(super) struct Piece<const N: usize> {
    pub(super) mode: usize,
    pub(super) start_s: f64,
    pub(super) duration_s: f64,
    pub(super) start: State<N>,
    pub(super) end: State<N>,
    pub(super) flow: usize,
}

/// The solved orbit.
pub(super) struct Solution<const N: usize> {
    pub(super) period_s: f64,
    pub(super) iterations: usize,
    pub(super) states: usize,
    pub(super) modes: Vec<SizedMode<N>>,
    pub(super) flows: Vec<Flow<N>>,
    pub(super) pieces: Vec<Piece<N>>,
    pub(super) switching: Vec<usize>,
    pub(super) jump_energy_j: f64,
    /// Integrals of x x' over each piece, made when first asked for.
    pub(super) moments: OnceCell<Vec<Square<N>>>,
    /// States at the nodes of quadrature, made when first asked for.
    pub(super) nodes: OnceCell<Vec<[State<N>; 8]>>,
    /// States at the ends of each piece's cells, made when first asked for.
    pub(super) grids: OnceCell<Vec<Vec<State<N>>>>,
}

struct Solver<'a, const N: usize> {
    circuit: &'a Circuit,
    clock: &'a [ClockStep],
    /// Bits of the elements that switch by themselves.
    own_bits: u32,
    mirror: Option<&'a Mirror>,
    masses: State<N>,
    period_s: f64,
    modes: Vec<SizedMode<N>>,
    /// Flows over whole clock steps, kept between iterations: (mode, duration, flow).
    kept: Vec<(usize, f64, usize)>,
    flows: Vec<Flow<N>>,
}

struct Lap<const N: usize> {
    end: State<N>,
    derivative: Square<N>,
    pieces: Vec<Piece<N>>,
    jump_energy_j: f64,
    conducting: u32,
}

pub(super) fn solve<const N: usize>(
    circuit: &Circuit,
    clock: &[ClockStep],
    mirror: Option<&Mirror>,
) -> Result<Solution<N>, OrbitError>
where
    Const<N>: DimMin<Const<N>, Output = Const<N>>,
{
    for step in clock {
        if !(step.duration_s > 0.0 && step.duration_s.is_finite()) {
            return Err(OrbitError::Clock {
                duration_s: step.duration_s,
            });
        }
    }
    let switching = circuit.switching_branches();
    let (capacitors, inductors) = circuit.state_branches();
    let mut masses = State::<N>::zeros();
    for (k, &branch) in capacitors.iter().chain(&inductors).enumerate() {
        masses[k] = match circuit.branches[branch].element {
            Element::Capacitor { farad, .. } => farad,
            Element::Inductor { henry, .. } => henry,
            _ => 0.0,
        };
    }
    let mut solver = Solver {
        circuit,
        clock,
        own_bits: guards::own_bits(circuit),
        mirror,
        masses,
        period_s: clock.iter().map(|s| s.duration_s).sum(),
        modes: Vec::new(),
        kept: Vec::new(),
        flows: Vec::new(),
    };
    solver.settle().map(|(lap, iterations)| Solution {
        period_s: solver.period_s,
        iterations,
        states: circuit.state_count(),
        modes: solver.modes,
        flows: solver.flows,
        pieces: lap.pieces,
        switching,
        jump_energy_j: lap.jump_energy_j,
        moments: OnceCell::new(),
        nodes: OnceCell::new(),
        grids: OnceCell::new(),
    })
}

impl<const N: usize> Solver<'_, N> {
    fn settle(&mut self) -> Result<(Lap<N>, usize), OrbitError>
    where
        Const<N>: DimMin<Const<N>, Output = Const<N>>,
    {
        let mut x = State::<N>::zeros();
        x[N - 1] = 1.0;
        // Diodes left out: the exact answer where none conducts, a start where some do.
        let mut conducting = 0;
        let first = self.folded(&x, conducting, false)?;
        x = newton(&x, &first, &self.masses)?;
        let mut residual = f64::INFINITY;
        for iteration in 1..=MOST_ITERATIONS {
            self.flows.truncate(self.kept.len());
            let lap = self.folded(&x, conducting, true)?;
            residual = self.distance(&x, &lap.end, &lap);
            let repeats = lap.conducting == conducting;
            conducting = lap.conducting;
            if residual <= SETTLED && repeats {
                return Ok((lap, iteration));
            }
            let next = newton(&x, &lap, &self.masses)?;
            let moved = self.distance(&x, &next, &lap);
            if residual <= ACCEPTED && (moved <= ACCEPTED || iteration > PATIENCE) && repeats {
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

    /// The greatest magnitude of each state at the ends of the pieces; where that is next to
    /// nothing, a millionth of what would hold the energy of the others.
    fn sizes(&self, lap: &Lap<N>) -> State<N> {
        const TRIFLE: f64 = 1e-6;
        let mut size = State::<N>::zeros();
        for piece in &lap.pieces {
            for k in 0..N {
                size[k] = size[k].max(piece.start[k].abs()).max(piece.end[k].abs());
            }
        }
        let energy = (0..N).map(|k| self.masses[k] * size[k] * size[k]);
        let root = TRIFLE * energy.fold(0.0, f64::max).sqrt();
        for k in (0..N).filter(|&k| self.masses[k] > 0.0) {
            size[k] = size[k].max(root / self.masses[k].sqrt());
        }
        size
    }

    fn distance(&self, x: &State<N>, y: &State<N>, lap: &Lap<N>) -> f64 {
        let size = self.sizes(lap);
        (0..N)
            .filter(|&k| size[k] > 0.0)
            .map(|k| (x[k] - y[k]).abs() / size[k])
            .fold(0.0, f64::max)
    }

    fn mode(&mut self, conducting: u32) -> Result<usize, OrbitError> {
        if let Some(found) = self.modes.iter().position(|m| m.conducting == conducting) {
            return Ok(found);
        }
        let mode = dynamics::mode(self.circuit, conducting)?;
        let n = mode.slopes.len();
        // The states beyond the circuit's own only decay; the constant comes last.
        let wide = |row: &[f64]| {
            let mut state = State::<N>::zeros();
            state.as_mut_slice()[..n].copy_from_slice(&row[..n]);
            state[N - 1] = row[n];
            state
        };
        let square = |rows: &Rows, filler: f64, constant: f64| {
            let mut matrix = Square::<N>::zeros();
            for k in 0..n {
                matrix.set_row(k, &wide(rows.row(k)).transpose());
            }
            for k in n..N - 1 {
                matrix[(k, k)] = filler;
            }
            matrix[(N - 1, N - 1)] = constant;
            matrix
        };
        let rows = |rows: &Rows| (0..rows.len()).map(|k| wide(rows.row(k))).collect();
        let guards = guards::of(self.circuit, &mode, conducting);
        self.modes.push(SizedMode {
            conducting,
            a: square(&mode.slopes, -1.0 / self.period_s, 0.0),
            project: mode.project.as_ref().map(|p| square(p, 1.0, 1.0)),
            latch: mode.latch.as_ref().map(|l| square(l, 1.0, 1.0)),
            voltage: rows(&mode.voltage),
            current: rows(&mode.current),
            guards: guards.iter().map(|g| (wide(&g.row), g.flips)).collect(),
        });
        Ok(self.modes.len() - 1)
    }

    fn flow(&mut self, mode: usize, duration: f64, keep: bool) -> Result<usize, OrbitError> {
        if let Some(&(_, _, flow)) = self
            .kept
            .iter()
            .find(|(m, d, _)| *m == mode && *d == duration)
        {
            return Ok(flow);
        }
        let flow = Flow::new(&self.modes[mode].a, duration).ok_or(OrbitError::Overflow)?;
        self.flows.push(flow);
        let number = self.flows.len() - 1;
        // Kept flows stand first, so that the others can be dropped after a lap.
        if keep && number == self.kept.len() {
            self.kept.push((mode, duration, number));
        }
        Ok(number)
    }

    /// One period from `x`, or half of one and an exchange of sides.
    fn folded(
        &mut self,
        x: &State<N>,
        conducting: u32,
        with_events: bool,
    ) -> Result<Lap<N>, OrbitError> {
        let mut lap = self.lap(x, conducting, with_events)?;
        if let Some(mirror) = self.mirror {
            let (end, derivative) = (lap.end, lap.derivative);
            for (k, &(partner, sign)) in mirror.states.iter().enumerate() {
                lap.end[k] = sign * end[partner];
                lap.derivative.set_row(k, &(derivative.row(partner) * sign));
            }
            lap.conducting = mirror.bits(lap.conducting);
        }
        Ok(lap)
    }

    /// One period from `x`.
    fn lap(
        &mut self,
        x: &State<N>,
        conducting: u32,
        with_events: bool,
    ) -> Result<Lap<N>, OrbitError> {
        let mut lap = Lap {
            end: *x,
            derivative: Square::identity(),
            pieces: Vec::with_capacity(8),
            jump_energy_j: 0.0,
            conducting: conducting & self.own_bits,
        };
        let mut start_s = 0.0;
        for step in self.clock {
            let mut left = step.duration_s;
            let entered = self.mode(step.closed | lap.conducting)?;
            if let Some(latch) = &self.modes[entered].latch {
                lap.end = latch * lap.end;
                lap.derivative = latch * lap.derivative;
            }
            let mut settled = !with_events;
            let mut events = 0;
            loop {
                let mode = self.mode(step.closed | lap.conducting)?;
                self.enter(mode, &mut lap);
                if !settled {
                    settled = true;
                    if let Some(flips) = self.inconsistent(mode, &lap) {
                        lap.conducting ^= flips;
                        settled = false;
                        events += 1;
                        if events > MOST_EVENTS {
                            return Err(OrbitError::Chatter { events });
                        }
                        continue;
                    }
                }
                let whole = left == step.duration_s;
                let flow = self.flow(mode, left, whole)?;
                let event = if with_events {
                    self.first_event(mode, flow, &lap)
                } else {
                    None
                };
                let Some((guard, at, state)) = event else {
                    let end = self.flows[flow].end(&lap.end);
                    lap.pieces.push(Piece {
                        mode,
                        start_s,
                        duration_s: left,
                        start: lap.end,
                        end,
                        flow,
                    });
                    lap.derivative = self.flows[flow].transition() * lap.derivative;
                    lap.end = end;
                    start_s += left;
                    break;
                };
                events += 1;
                if events > MOST_EVENTS {
                    return Err(OrbitError::Chatter { events });
                }
                let (before, flips) = self.modes[mode].guards[guard];
                if at > 0.0 {
                    let part = self.flow(mode, at, false)?;
                    lap.pieces.push(Piece {
                        mode,
                        start_s,
                        duration_s: at,
                        start: lap.end,
                        end: state,
                        flow: part,
                    });
                    lap.derivative = self.flows[part].transition() * lap.derivative;
                }
                lap.end = state;
                // The instant moves with the state: d(at) = -(g . dx) / (g . x').
                let slope_before = self.modes[mode].a * state;
                lap.conducting ^= flips;
                let next = self.mode(step.closed | lap.conducting)?;
                let moved = self.modes[next]
                    .project
                    .map_or(slope_before, |p| p * slope_before);
                let jump = moved
                    - self.modes[next].a * self.modes[next].project.map_or(state, |p| p * state);
                let rate = before.dot(&slope_before);
                if rate != 0.0 {
                    let row = before.transpose() * lap.derivative;
                    if let Some(p) = self.modes[next].project {
                        lap.derivative = p * lap.derivative;
                    }
                    lap.derivative -= jump * row / rate;
                }
                left -= at;
                start_s += at;
                if left <= 1e-15 * step.duration_s {
                    break;
                }
            }
        }
        if lap.end.iter().all(|v| v.is_finite()) {
            Ok(lap)
        } else {
            Err(OrbitError::Overflow)
        }
    }

    /// Projects the state onto what the mode allows, booking the energy that is lost.
    fn enter(&self, mode: usize, lap: &mut Lap<N>) {
        if let Some(project) = &self.modes[mode].project {
            let after = project * lap.end;
            for k in 0..N - 1 {
                lap.jump_energy_j +=
                    0.5 * self.masses[k] * (lap.end[k] * lap.end[k] - after[k] * after[k]);
            }
            lap.end = after;
            lap.derivative = project * lap.derivative;
        }
    }

    /// The bits that contradict the state at the start of a stretch.
    fn inconsistent(&self, mode: usize, lap: &Lap<N>) -> Option<u32> {
        self.modes[mode]
            .guards
            .iter()
            .find(|(row, _)| row.dot(&lap.end) < -rounding(row, &lap.end))
            .map(|(_, flips)| *flips)
    }

    fn first_event(
        &self,
        mode: usize,
        flow: usize,
        lap: &Lap<N>,
    ) -> Option<(usize, f64, State<N>)> {
        let mut earliest: Option<(usize, f64, State<N>)> = None;
        for (k, (row, _)) in self.modes[mode].guards.iter().enumerate() {
            let tolerance = rounding(row, &lap.end);
            if let Some(fall) = first_fall(&self.flows[flow], &lap.end, row, tolerance)
                && earliest.as_ref().is_none_or(|(_, at, _)| fall.at < *at)
            {
                earliest = Some((k, fall.at, fall.state));
            }
        }
        earliest
    }
}

fn rounding<const N: usize>(row: &State<N>, x: &State<N>) -> f64 {
    GUARD_ROUNDING
        * row
            .iter()
            .zip(x)
            .map(|(r, v)| (r * v).abs())
            .fold(0.0, f64::max)
}

/// The state that repeats, by the derivative of the period map. Solved in states scaled by
/// the root of their energy, in which a circuit's matrices are balanced.
fn newton<const N: usize>(
    x: &State<N>,
    lap: &Lap<N>,
    masses: &State<N>,
) -> Result<State<N>, OrbitError>
where
    Const<N>: DimMin<Const<N>, Output = Const<N>>,
{
    let scale = masses.map(|mass| if mass > 0.0 { 1.0 / mass.sqrt() } else { 1.0 });
    let mut matrix = Square::<N>::identity();
    let mut residual = State::<N>::zeros();
    for row in 0..N - 1 {
        residual[row] = (lap.end[row] - x[row]) / scale[row];
        for column in 0..N - 1 {
            matrix[(row, column)] -= lap.derivative[(row, column)] * scale[column] / scale[row];
        }
    }
    let step = matrix
        .lu()
        .solve(&residual)
        .ok_or(OrbitError::Undetermined)?
        .component_mul(&scale);
    if step.iter().all(|v| v.is_finite()) {
        Ok(x + step)
    } else {
        Err(OrbitError::Undetermined)
    }
}
