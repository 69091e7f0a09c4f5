//! Reading a solved orbit: means and products, peaks, spectra, samples.
//!
//! Integrals start from Gauss-Legendre quadrature with 8 nodes on the first rung of the
//! ladder, where it is exact to rounding (the norm of A h there is at most 1), and are
//! doubled rung by rung: W(2h) = W(h) + F W(h) F' for the integral of x x', and
//! I(2h) = I(h) + e^(-jkwh) F I(h) for that of x e^(-jkwt), with F = e^(Ah).

use super::flow::{CELLS_LOG2, Flow, Square, State, narrow, series_at};
use super::shoot::{Piece, Solution};
use super::{Extremes, Orbit, Probe, ending};
use num_complex::Complex64;

/// Nodes on 0..1 and weights of 8-point Gauss-Legendre quadrature.
pub(super) const GAUSS: [(f64, f64); 8] = [
    (0.019_855_071_751_231_884, 0.050_614_268_145_188_13),
    (0.101_666_761_293_186_63, 0.111_190_517_226_687_24),
    (0.237_233_795_041_835_5, 0.156_853_322_938_943_64),
    (0.408_282_678_752_175_1, 0.181_341_891_689_181),
    (0.591_717_321_247_825, 0.181_341_891_689_181),
    (0.762_766_204_958_164_5, 0.156_853_322_938_943_64),
    (0.898_333_238_706_813_4, 0.111_190_517_226_687_24),
    (0.980_144_928_248_768_1, 0.050_614_268_145_188_13),
];

/// e^(j angle), from libm for the same digits everywhere.
fn cis(angle: f64) -> Complex64 {
    let (sin, cos) = libm::sincos(angle);
    Complex64::new(cos, sin)
}

/// The integral of x x' over a stretch.
fn moment<const N: usize>(flow: &Flow<N>, nodes: &[State<N>; 8]) -> Square<N> {
    let mut w = Square::<N>::zeros();
    for (at, (_, weight)) in nodes.iter().zip(GAUSS) {
        w += at * at.transpose() * (weight * flow.step);
    }
    for e in &flow.ladder[..flow.ladder.len() - 1] {
        let carried = w + e * w;
        w += carried + carried * e.transpose();
    }
    w
}

/// The integrals of x e^(-jkwt) over a stretch, t from its start.
fn fourier<const N: usize>(
    flow: &Flow<N>,
    nodes: &[State<N>; 8],
    omega: f64,
    count: usize,
) -> Vec<(State<N>, State<N>)> {
    let mut sums = vec![(State::<N>::zeros(), State::<N>::zeros()); count + 1];
    for (at, (node, weight)) in nodes.iter().zip(GAUSS) {
        let at = at * (weight * flow.step);
        let turn = cis(-omega * node * flow.step);
        let mut phase = Complex64::new(1.0, 0.0);
        for (re, im) in &mut sums {
            *re += at * phase.re;
            *im += at * phase.im;
            phase *= turn;
        }
    }
    for (rung, e) in flow.ladder[..flow.ladder.len() - 1].iter().enumerate() {
        let turn = cis(-omega * flow.rung_duration(rung));
        let mut phase = Complex64::new(1.0, 0.0);
        for (re, im) in &mut sums {
            let (later_re, later_im) = (*re + e * *re, *im + e * *im);
            *re += later_re * phase.re - later_im * phase.im;
            *im += later_re * phase.im + later_im * phase.re;
            phase *= turn;
        }
    }
    sums
}

impl<const N: usize> Solution<N> {
    fn row(&self, piece: &Piece<N>, probe: Probe) -> State<N> {
        let mode = &self.modes[piece.mode];
        match probe {
            Probe::Voltage(branch) => mode.voltage[branch],
            Probe::Current(branch) => mode.current[branch],
        }
    }

    /// The states at the ends of each piece's cells.
    fn grids(&self) -> &[Vec<State<N>>] {
        self.grids.get_or_init(|| {
            let grid = |piece: &Piece<N>| {
                let flow = &self.flows[piece.flow];
                let mut states = Vec::with_capacity((1 << CELLS_LOG2) + 1);
                states.push(piece.start);
                for k in 0..1usize << CELLS_LOG2 {
                    states.push(flow.advance(flow.cell_rung(), &states[k]));
                }
                states
            };
            self.pieces.iter().map(grid).collect()
        })
    }

    /// The states at the nodes of quadrature on each piece's first rung.
    fn nodes(&self) -> &[[State<N>; 8]] {
        self.nodes.get_or_init(|| {
            let states = |piece: &Piece<N>| {
                let terms = self.flows[piece.flow].series(&piece.start);
                GAUSS.map(|(node, _)| series_at(&terms, node))
            };
            self.pieces.iter().map(states).collect()
        })
    }

    fn moments(&self) -> &[Square<N>] {
        self.moments.get_or_init(|| {
            self.pieces
                .iter()
                .zip(self.nodes())
                .map(|(p, nodes)| moment(&self.flows[p.flow], nodes))
                .collect()
        })
    }
}

impl<const N: usize> Orbit for Solution<N> {
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
            .map_or_else(Vec::new, |p| p.start.as_slice()[..self.states].to_vec())
    }

    fn sizes(&self) -> Vec<f64> {
        let size = |k: usize| {
            self.pieces
                .iter()
                .map(|p| p.start[k].abs().max(p.end[k].abs()))
                .fold(0.0, f64::max)
        };
        (0..self.states).map(size).collect()
    }

    fn mean_product(&self, first: Probe, second: Probe) -> f64 {
        let sum: f64 = self
            .pieces
            .iter()
            .zip(self.moments())
            .map(|(piece, w)| self.row(piece, first).dot(&(w * self.row(piece, second))))
            .sum();
        sum / self.period_s
    }

    fn mean(&self, probe: Probe) -> f64 {
        let sum: f64 = self
            .pieces
            .iter()
            .zip(self.moments())
            .map(|(piece, w)| self.row(piece, probe).dot(&w.column(N - 1)))
            .sum();
        sum / self.period_s
    }

    fn extremes(&self, probe: Probe) -> Extremes {
        let mut found = Extremes {
            least: f64::INFINITY,
            least_at_s: 0.0,
            greatest: f64::NEG_INFINITY,
            greatest_at_s: 0.0,
        };
        let mut look = |value: f64, at: f64| {
            if value < found.least {
                (found.least, found.least_at_s) = (value, at);
            }
            if value > found.greatest {
                (found.greatest, found.greatest_at_s) = (value, at);
            }
            (found.least, found.greatest)
        };
        for (piece, grid) in self.pieces.iter().zip(self.grids()) {
            let flow = &self.flows[piece.flow];
            let row = self.row(piece, probe);
            let slope_row = flow.a.tr_mul(&row);
            let cell = flow.cell_rung();
            let width = flow.rung_duration(cell);
            // The first cell by its rungs: transients live there.
            let mut left = grid[0];
            let (mut at, mut rung) = (0.0, 0);
            let mut before = (row.dot(&left), slope_row.dot(&left));
            look(before.0, piece.start_s);
            let mut k = usize::from(cell == 0);
            while k < grid.len() {
                let length = flow.rung_duration(rung);
                let right = if at + length < width * 0.75 {
                    flow.advance(rung, &left)
                } else {
                    k = k.max(1);
                    grid[k]
                };
                let after = (row.dot(&right), slope_row.dot(&right));
                let (least, greatest) = look(after.0, piece.start_s + at + length);
                if before.1 * after.1 < 0.0 {
                    // Only where the turning point can lie beyond what is known already.
                    let reach = length * before.1.abs().max(after.1.abs());
                    if before.0.max(after.0) + reach > greatest
                        || before.0.min(after.0) - reach < least
                    {
                        let rows = [slope_row * after.1.signum()];
                        let turn = narrow(flow, left, at, rung, &rows);
                        look(row.dot(&turn.state), piece.start_s + turn.at);
                    }
                }
                if k == 0 {
                    // After the first rung the next is as long as what lies behind it.
                    rung += usize::from(at > 0.0);
                } else {
                    (rung, k) = (cell, k + 1);
                }
                (before, left) = (after, right);
                at += length;
            }
        }
        found
    }

    fn fourier(&self, probes: &[Probe], count: usize, omega: f64) -> Vec<Vec<Complex64>> {
        let mut sums = vec![vec![Complex64::new(0.0, 0.0); count + 1]; probes.len()];
        for (piece, nodes) in self.pieces.iter().zip(self.nodes()) {
            let parts = fourier(&self.flows[piece.flow], nodes, omega, count);
            let turn = cis(-omega * piece.start_s);
            for (sums, &probe) in sums.iter_mut().zip(probes) {
                let row = self.row(piece, probe);
                let mut phase = Complex64::new(1.0 / self.period_s, 0.0);
                for (sum, (re, im)) in sums.iter_mut().zip(&parts) {
                    *sum += Complex64::new(row.dot(re), row.dot(im)) * phase;
                    phase *= turn;
                }
            }
        }
        sums
    }

    fn before(&self, probe: Probe, time_s: f64) -> (f64, f64) {
        let end_s = |p: &Piece<N>| p.start_s + p.duration_s;
        let Some(piece) = ending(&self.pieces, time_s, end_s) else {
            return (0.0, 0.0);
        };
        let row = self.row(piece, probe);
        (
            row.dot(&piece.end),
            row.dot(&(self.modes[piece.mode].a * piece.end)),
        )
    }

    fn samples(&self, probes: &[Probe], count: usize) -> Vec<Vec<f64>> {
        let count = count.max(1);
        let step = self.period_s / count as f64;
        let mut samples = vec![Vec::with_capacity(count + 1); probes.len()];
        let mut index = 0;
        for (number, piece) in self.pieces.iter().enumerate() {
            let rows: Vec<State<N>> = probes.iter().map(|&probe| self.row(piece, probe)).collect();
            let mut note = |x: &State<N>| {
                for (samples, row) in samples.iter_mut().zip(&rows) {
                    samples.push(row.dot(x));
                }
            };
            let last = number + 1 == self.pieces.len();
            let end_s = piece.start_s + piece.duration_s;
            // To the first sample within the piece, then by equal steps.
            let mut stride = index as f64 * step - piece.start_s;
            let mut flow: Option<Flow<N>> = None;
            let mut x = piece.start;
            while index < count && (last || (index as f64 * step) < end_s) {
                if flow.is_none() && stride > 0.0 {
                    flow = Flow::new(&self.modes[piece.mode].a, stride);
                }
                if let Some(flow) = &flow {
                    x = flow.end(&x);
                }
                if stride != step {
                    (stride, flow) = (step, None);
                }
                note(&x);
                index += 1;
            }
            if last {
                note(&piece.end);
            }
        }
        samples
    }

    fn conducting_fraction(&self, branch: usize) -> f64 {
        let Some(bit) = self.switching.iter().position(|&b| b == branch) else {
            return 0.0;
        };
        let sum: f64 = self
            .pieces
            .iter()
            .filter(|p| self.modes[p.mode].conducting >> bit & 1 == 1)
            .map(|p| p.duration_s)
            .fold(0.0, |total, duration| total + duration);
        sum / self.period_s
    }

    fn jump_energy_j(&self) -> f64 {
        self.jump_energy_j
    }
}
