//! Reading a curved orbit: every quantity is the polynomial through a step's nodes.

use super::radau::{NODES, S, SPREAD, TABLE};
use super::step::{Step, spread};
use super::{Piece, Solution, value};
use crate::orbit::meter::GAUSS;
use crate::orbit::{Extremes, Orbit, Probe, ending};
use nalgebra::DVector;
use num_complex::Complex64;
use std::f64::consts::FRAC_PI_2;

/// Looks within a step.
const LOOKS: usize = 16;
const MOST_HALVINGS: usize = 60;

/// The polynomial through values at 0 and the nodes, at `share` of the step (0 to 1).
pub(super) fn between(values: &[f64; S + 1], share: f64) -> f64 {
    let (mut above, mut below) = (0.0, 0.0);
    for (k, (&value, &weight)) in values.iter().zip(&SPREAD).enumerate() {
        let gap = share - if k == 0 { 0.0 } else { NODES[k - 1] };
        if gap == 0.0 {
            return value;
        }
        above += weight / gap * value;
        below += weight / gap;
    }
    above / below
}

/// Where the polynomial first falls below `-tolerance`: the share of the step at which it
/// crosses zero.
pub(super) fn first_fall(values: &[f64; S + 1], tolerance: f64) -> Option<f64> {
    let mut left = 0.0;
    for look in 1..=LOOKS {
        let right = look as f64 / LOOKS as f64;
        if between(values, right) < -tolerance {
            let (mut low, mut high) = (left, right);
            for _ in 0..MOST_HALVINGS {
                let middle = 0.5 * (low + high);
                if between(values, middle) < 0.0 {
                    high = middle;
                } else {
                    low = middle;
                }
            }
            return Some(high);
        }
        left = right;
    }
    None
}

impl Solution {
    fn row(&self, piece: &Piece, probe: Probe) -> &[f64] {
        let rows = &self.modes[piece.mode].rows;
        match probe {
            Probe::Voltage(branch) => rows.voltage.row(branch),
            Probe::Current(branch) => rows.current.row(branch),
        }
    }

    /// A quantity at the start and the nodes of a step.
    fn values(&self, piece: &Piece, probe: Probe) -> [f64; S + 1] {
        let row = self.row(piece, probe);
        std::array::from_fn(|k| value(row, piece.states.column(k).iter()))
    }

    /// The state at `share` of a step.
    fn state_within(&self, piece: &Piece, share: f64) -> Option<DVector<f64>> {
        if share <= 0.0 || share >= 1.0 {
            let column = if share <= 0.0 { 0 } else { S };
            return Some(piece.states.column(column).into_owned());
        }
        let mode = &self.modes[piece.mode];
        let length = share * piece.length;
        let step = Step::new(&mode.a, &mode.b, &mode.lift, &self.varying, length)?;
        let start = piece.states.column(0).into_owned();
        let nodes = step.solve(&self.varying, &start, None, &self.sizes)?;
        Some(nodes.end(start.len()).into_owned())
    }

    /// The extreme near `share` of a step: a step that ends there knows better than the
    /// polynomial across, and its slope says where to look next.
    fn turn_within(&self, piece: &Piece, probe: Probe, share: f64, sign: f64) -> Option<f64> {
        const MOST_STEPS: usize = 6;
        const CLOSE: f64 = 1e-4;
        let row = self.row(piece, probe);
        let constant = row.last().copied().unwrap_or(0.0);
        let look = |share: f64| {
            let state = self.state_within(piece, share)?;
            let slopes = self.slopes(piece.mode, &state);
            Some((value(row, &state), value(row, &slopes) - constant))
        };
        let (mut at, (mut best, mut rate)) = (share, look(share)?);
        let mut next = (at + 0.01 * sign * rate.signum()).clamp(0.0, 1.0);
        for _ in 0..MOST_STEPS {
            let Some((there, slope)) = look(next) else {
                break;
            };
            if sign * there > sign * best {
                best = there;
            }
            let ahead = next - slope * (next - at) / (slope - rate);
            (at, rate, next) = (next, slope, ahead.clamp(0.0, 1.0));
            if next.is_nan() || (next - at).abs() <= CLOSE {
                break;
            }
        }
        Some(best)
    }

    fn slopes(&self, mode: usize, state: &DVector<f64>) -> DVector<f64> {
        let mode = &self.modes[mode];
        let free = &mode.a * state + &mode.b;
        spread(&self.varying, &mode.lift, state, &free)
    }

    fn integral(&self, of: impl Fn(&Piece) -> [f64; S + 1]) -> f64 {
        let piece = |piece: &Piece| {
            let values = of(piece);
            let sum: f64 = TABLE[S - 1]
                .iter()
                .zip(&values[1..])
                .map(|(w, v)| w * v)
                .sum();
            piece.length * sum
        };
        self.pieces.iter().map(piece).sum()
    }
}

impl Orbit for Solution {
    fn period_s(&self) -> f64 {
        self.period_s
    }

    fn iterations(&self) -> usize {
        self.iterations
    }

    fn pieces(&self) -> usize {
        self.pieces.len()
    }

    fn start(&self) -> Vec<f64> {
        self.pieces
            .first()
            .map_or_else(Vec::new, |p| p.states.column(0).iter().copied().collect())
    }

    fn sizes(&self) -> Vec<f64> {
        self.sizes.clone()
    }

    fn mean_product(&self, first: Probe, second: Probe) -> f64 {
        let product = |piece: &Piece| {
            let (a, b) = (self.values(piece, first), self.values(piece, second));
            std::array::from_fn(|k| a[k] * b[k])
        };
        self.integral(product) / self.period_s
    }

    fn mean(&self, probe: Probe) -> f64 {
        self.integral(|piece| self.values(piece, probe)) / self.period_s
    }

    fn extremes(&self, probe: Probe) -> Extremes {
        let mut found = Extremes {
            least: f64::INFINITY,
            least_at_s: 0.0,
            greatest: f64::NEG_INFINITY,
            greatest_at_s: 0.0,
        };
        let (mut least, mut greatest) = (None, None);
        for (number, piece) in self.pieces.iter().enumerate() {
            let values = self.values(piece, probe);
            let mut look = |share: f64| {
                let (value, at) = (
                    between(&values, share),
                    piece.start_s + share * piece.length,
                );
                if value < found.least {
                    (found.least, found.least_at_s) = (value, at);
                    least = Some((number, share));
                }
                if value > found.greatest {
                    (found.greatest, found.greatest_at_s) = (value, at);
                    greatest = Some((number, share));
                }
                value
            };
            let grid: [f64; LOOKS + 1] = std::array::from_fn(|k| look(look_at(k)));
            for k in 1..LOOKS {
                let (a, b, c) = (grid[k - 1], grid[k], grid[k + 1]);
                if (b - a) * (c - b) < 0.0 {
                    look(turn(&values, look_at(k - 1), look_at(k + 1)));
                }
            }
        }
        // On a border it may lie on either side.
        let count = self.pieces.len();
        let better = |at: Option<(usize, f64)>, sign: f64| {
            let (number, share) = at?;
            let beyond = if share >= 1.0 {
                self.pieces.get((number + 1) % count).map(|p| (p, 0.0))
            } else if share <= 0.0 {
                self.pieces
                    .get((number + count - 1) % count)
                    .map(|p| (p, 1.0))
            } else {
                None
            };
            [Some((&self.pieces[number], share)), beyond]
                .into_iter()
                .flatten()
                .filter_map(|(piece, share)| self.turn_within(piece, probe, share, sign))
                .max_by(|a, b| (sign * a).total_cmp(&(sign * b)))
        };
        found.least = better(least, -1.0).unwrap_or(found.least);
        found.greatest = better(greatest, 1.0).unwrap_or(found.greatest);
        found
    }

    fn fourier(&self, probes: &[Probe], count: usize, omega: f64) -> Vec<Vec<Complex64>> {
        let mut sums = vec![vec![Complex64::new(0.0, 0.0); count + 1]; probes.len()];
        for piece in &self.pieces {
            // Parts short enough for eight nodes at the highest harmonic.
            let turns = omega * piece.length * count as f64;
            let parts = libm::ceil(turns / 4.0).max(1.0) as usize;
            let values: Vec<[f64; S + 1]> = probes.iter().map(|&p| self.values(piece, p)).collect();
            for part in 0..parts {
                for (node, weight) in GAUSS {
                    let share = (part as f64 + node) / parts as f64;
                    let at = piece.start_s + share * piece.length;
                    let (sin, cos) = libm::sincos(-omega * at);
                    let turn = Complex64::new(cos, sin);
                    let scale = weight * piece.length / (parts as f64 * self.period_s);
                    for (sums, values) in sums.iter_mut().zip(&values) {
                        let mut phase = Complex64::new(scale * between(values, share), 0.0);
                        for sum in sums {
                            *sum += phase;
                            phase *= turn;
                        }
                    }
                }
            }
        }
        sums
    }

    fn before(&self, probe: Probe, time_s: f64) -> (f64, f64) {
        let end_s = |p: &Piece| p.start_s + p.length;
        let Some(piece) = ending(&self.pieces, time_s, end_s) else {
            return (0.0, 0.0);
        };
        let row = self.row(piece, probe);
        let end = DVector::from_column_slice(piece.states.column(S).as_slice());
        let slopes = self.slopes(piece.mode, &end);
        let constant = row.last().copied().unwrap_or(0.0);
        (value(row, &end), value(row, &slopes) - constant)
    }

    fn samples(&self, probes: &[Probe], count: usize) -> Vec<Vec<f64>> {
        let count = count.max(1);
        let step = self.period_s / count as f64;
        let mut samples = vec![Vec::with_capacity(count + 1); probes.len()];
        let mut index = 0;
        for (number, piece) in self.pieces.iter().enumerate() {
            let last = number + 1 == self.pieces.len();
            let values: Vec<[f64; S + 1]> = probes.iter().map(|&p| self.values(piece, p)).collect();
            while index <= count && (last || index as f64 * step < piece.start_s + piece.length) {
                let share = (index as f64 * step - piece.start_s) / piece.length;
                for (samples, values) in samples.iter_mut().zip(&values) {
                    samples.push(between(values, share.clamp(0.0, 1.0)));
                }
                index += 1;
            }
        }
        samples
    }

    fn conducting_fraction(&self, branch: usize) -> f64 {
        let Some(bit) = self.switching.iter().position(|&b| b == branch) else {
            return 0.0;
        };
        let time: f64 = self
            .pieces
            .iter()
            .filter(|p| self.modes[p.mode].conducting >> bit & 1 == 1)
            .map(|p| p.length)
            .sum();
        time / self.period_s
    }

    fn jump_energy_j(&self) -> f64 {
        self.jump_energy_j
    }
}

/// Share of a step at which it is looked at: more often towards its ends.
fn look_at(look: usize) -> f64 {
    let root = libm::sin(look as f64 * FRAC_PI_2 / LOOKS as f64);
    root * root
}

/// Where the polynomial turns between two shares of the step, by golden section.
fn turn(values: &[f64; S + 1], from: f64, to: f64) -> f64 {
    const GOLDEN: f64 = 0.618_033_988_749_894_9;
    let at = |share: f64| between(values, share);
    let sign = if at(0.5 * (from + to)) > at(from) {
        1.0
    } else {
        -1.0
    };
    let (mut low, mut high) = (from, to);
    for _ in 0..MOST_HALVINGS {
        let (a, b) = (high - GOLDEN * (high - low), low + GOLDEN * (high - low));
        if sign * at(a) > sign * at(b) {
            high = b;
        } else {
            low = a;
        }
    }
    0.5 * (low + high)
}
