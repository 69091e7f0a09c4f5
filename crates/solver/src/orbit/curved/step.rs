//! One step of collocation, the linear part of the circuit condensed.
//!
//! With d_k the charge of varying capacitor k beyond that of its typical capacitance and r_k
//! what a coulomb there does to every voltage, x + sum r_k d_k has the slope A x + b. Collocation
//! of that is linear in x and d, so the states at the nodes are
//! x = from x0 + constant + first d0 - pull d, worked out once per mode and step length, and
//! only the voltages of the varying capacitors at the nodes are solved for by Newton's method.

use super::radau::{EIGEN, IN, NODES, OUT, PAIRS, S};
use crate::charge::ChargeLaw;
use nalgebra::{DMatrix, DVector, DVectorView};
use num_complex::Complex64;

/// A varying capacitor as the steps see it.
pub(super) struct Varying {
    /// Its state.
    pub(super) state: usize,
    pub(super) farad: f64,
    pub(super) law: ChargeLaw,
}

impl Varying {
    /// Charge beyond that of the typical capacitance, and its derivative.
    pub(super) fn excess(&self, volt: f64) -> (f64, f64) {
        let (farad, coulomb) = self.law.at(volt);
        (coulomb - self.farad * volt, farad - self.farad)
    }
}

/// The condensed equations of one mode and step length. Rows are node-major; `own` rows are
/// those of the varying voltages alone.
pub(super) struct Step {
    pub(super) length: f64,
    states: usize,
    from: DMatrix<f64>,
    constant: DVector<f64>,
    first: DMatrix<f64>,
    pull: DMatrix<f64>,
    own_pull: Vec<f64>,
}

/// The states at the nodes of a step, and how they were found.
pub(super) struct Nodes {
    /// Node-major: the start is not among them.
    pub(super) states: DVector<f64>,
    /// Voltages of the varying capacitors, node-major.
    pub(super) volts: Vec<f64>,
    /// Derivatives of their excess charges.
    slopes: Vec<f64>,
}

const MOST_ITERATIONS: usize = 6;
/// What may be left of a voltage, relative to its greatest.
const CLOSE: f64 = 1e-12;

impl Step {
    /// By the table's eigenvectors: for each eigenvalue one matrix of the circuit's own size.
    pub(super) fn new(
        a: &DMatrix<f64>,
        b: &DVector<f64>,
        lift: &DMatrix<f64>,
        varying: &[Varying],
        length: f64,
    ) -> Option<Self> {
        let n = a.nrows();
        let m = varying.len();
        let mut from = DMatrix::<f64>::zeros(S * n, n);
        let mut constant = DVector::<f64>::zeros(S * n);
        let mut pull = DMatrix::<f64>::zeros(S * n, m * S);
        // Of each complex equation the real and the imaginary half, for every column at once:
        // the start, the charges, the sources.
        let columns = n + m + 1;
        let mut matrix = vec![0.0; 4 * n * n];
        let mut right = vec![0.0; 2 * n * columns];
        for e in 0..PAIRS {
            let (re, im) = (EIGEN[e].0 * length, EIGEN[e].1 * length);
            // A real eigenvalue has no imaginary half.
            let count = if im == 0.0 { n } else { 2 * n };
            right.fill(0.0);
            for r in 0..n {
                for c in 0..n {
                    let own = if r == c { 1.0 } else { 0.0 };
                    matrix[r * count + c] = own - re * a[(r, c)];
                    if im == 0.0 {
                        continue;
                    }
                    matrix[r * count + n + c] = im * a[(r, c)];
                    matrix[(n + r) * count + c] = -im * a[(r, c)];
                    matrix[(n + r) * count + n + c] = own - re * a[(r, c)];
                }
                right[r * columns + r] = 1.0;
                for k in 0..m {
                    right[r * columns + n + k] = lift[(r, k)];
                }
                right[r * columns + n + m] = b[r];
            }
            if !eliminate(
                &mut matrix[..count * count],
                &mut right[..count * columns],
                count,
            ) {
                return None;
            }
            let ahead: Complex64 = (0..S)
                .map(|j| Complex64::new(IN[e][j].0, IN[e][j].1) * (NODES[j] * length))
                .sum();
            for r in 0..n {
                let at =
                    |c: usize| Complex64::new(right[r * columns + c], right[(n + r) * columns + c]);
                // The real part of what leaves each node.
                let out = |i: usize, g: Complex64| OUT[e][i].0 * g.re - OUT[e][i].1 * g.im;
                let driven = at(n + m) * ahead;
                for i in 0..S {
                    let row = i * n + r;
                    (0..n).for_each(|c| from[(row, c)] += out(i, at(c)));
                    constant[row] += out(i, driven);
                    for k in 0..m {
                        for j in 0..S {
                            let into = at(n + k) * Complex64::new(IN[e][j].0, IN[e][j].1);
                            pull[(row, j * m + k)] += out(i, into);
                        }
                    }
                }
            }
        }
        if from.iter().any(|x| !x.is_finite()) {
            return None;
        }
        let mut first = DMatrix::zeros(S * n, m);
        for j in 0..S {
            first += pull.columns(j * m, m);
        }
        let mut own_pull = Vec::with_capacity(S * m * S * m);
        for at in 0..S * m {
            let row = at / m * n + varying[at % m].state;
            own_pull.extend((0..S * m).map(|column| pull[(row, column)]));
        }
        Some(Self {
            length,
            states: n,
            from,
            constant,
            first,
            pull,
            own_pull,
        })
    }

    /// The states at the nodes from `start`; none where Newton's method does not settle.
    pub(super) fn solve(
        &self,
        varying: &[Varying],
        start: &DVector<f64>,
        guess: Option<&[f64]>,
        sizes: &[f64],
    ) -> Option<Nodes> {
        let (n, m) = (self.states, varying.len());
        let count = S * m;
        let mut base = self.constant.clone();
        base.gemv(1.0, &self.from, start, 1.0);
        for (k, v) in varying.iter().enumerate() {
            base.axpy(v.excess(start[v.state]).0, &self.first.column(k), 1.0);
        }
        let mut volts: Vec<f64> = match guess {
            Some(guess) => guess.to_vec(),
            None => (0..count).map(|at| start[varying[at % m].state]).collect(),
        };
        let mut excess = DVector::zeros(count);
        let mut slopes = vec![0.0; count];
        let mut residual = vec![0.0; count];
        let mut matrix = vec![0.0; count * count];
        for _ in 0..=MOST_ITERATIONS {
            let mut left = 0.0f64;
            for (at, volt) in volts.iter().enumerate() {
                (excess[at], slopes[at]) = varying[at % m].excess(*volt);
            }
            for at in 0..count {
                let state = varying[at % m].state;
                let pull = &self.own_pull[at * count..(at + 1) * count];
                let pulled: f64 = pull.iter().zip(excess.iter()).map(|(p, d)| p * d).sum();
                residual[at] = volts[at] - base[at / m * n + state] + pulled;
                let size = sizes[state].max(volts[at].abs()).max(f64::MIN_POSITIVE);
                left = left.max(residual[at].abs() / size);
                if residual[at].is_nan() {
                    return None;
                }
            }
            if left <= CLOSE {
                base.gemv(-1.0, &self.pull, &excess, 1.0);
                return Some(Nodes {
                    states: base,
                    volts,
                    slopes,
                });
            }
            self.derivative(&slopes, &mut matrix);
            if !eliminate(&mut matrix, &mut residual, count) {
                return None;
            }
            volts.iter_mut().zip(&residual).for_each(|(v, d)| *v -= d);
        }
        None
    }

    /// Derivative of the equations of the varying voltages.
    fn derivative(&self, slopes: &[f64], matrix: &mut [f64]) {
        let count = slopes.len();
        for (at, row) in matrix.chunks_exact_mut(count).enumerate() {
            let pull = &self.own_pull[at * count..(at + 1) * count];
            for ((to, pull), slope) in row.iter_mut().zip(pull).zip(slopes) {
                *to = pull * slope;
            }
            row[at] += 1.0;
        }
    }

    /// The end's derivative with respect to the start.
    pub(super) fn tangent(
        &self,
        varying: &[Varying],
        start: &DVector<f64>,
        nodes: &Nodes,
    ) -> Option<DMatrix<f64>> {
        let (n, m) = (self.states, varying.len());
        let count = S * m;
        let last = (S - 1) * n;
        let mut end = self.from.rows(last, n).into_owned();
        if count == 0 {
            return Some(end);
        }
        let at_start: Vec<f64> = varying.iter().map(|v| v.excess(start[v.state]).1).collect();
        let mut right = vec![0.0; count * n];
        for (at, right) in right.chunks_exact_mut(n).enumerate() {
            let row = at / m * n + varying[at % m].state;
            for (c, to) in right.iter_mut().enumerate() {
                *to = self.from[(row, c)];
            }
            for (k, v) in varying.iter().enumerate() {
                right[v.state] += self.first[(row, k)] * at_start[k];
            }
        }
        let mut matrix = vec![0.0; count * count];
        self.derivative(&nodes.slopes, &mut matrix);
        if !eliminate(&mut matrix, &mut right, count) {
            return None;
        }
        for (k, v) in varying.iter().enumerate() {
            for r in 0..n {
                end[(r, v.state)] += self.first[(last + r, k)] * at_start[k];
            }
        }
        for (at, moved) in right.chunks_exact(n).enumerate() {
            for r in 0..n {
                let pull = self.pull[(last + r, at)] * nodes.slopes[at];
                for (c, moved) in moved.iter().enumerate() {
                    end[(r, c)] -= pull * moved;
                }
            }
        }
        Some(end)
    }
}

/// Solves in place by elimination with row pivots: `matrix` row by row, `right` likewise with
/// as many columns as fit. By hand because it is small, and half of the time of an answer.
fn eliminate(matrix: &mut [f64], right: &mut [f64], count: usize) -> bool {
    if count == 0 {
        return true;
    }
    let columns = right.len() / count;
    for k in 0..count {
        let size = |row: usize, matrix: &[f64]| matrix[row * count + k].abs();
        let pivot = (k..count).fold(k, |best, row| {
            if size(row, matrix) > size(best, matrix) {
                row
            } else {
                best
            }
        });
        if pivot != k {
            (k..count).for_each(|c| matrix.swap(k * count + c, pivot * count + c));
            (0..columns).for_each(|c| right.swap(k * columns + c, pivot * columns + c));
        }
        let scale = 1.0 / matrix[k * count + k];
        if !scale.is_finite() {
            return false;
        }
        let (done, below) = matrix.split_at_mut((k + 1) * count);
        let (solved, open) = right.split_at_mut((k + 1) * columns);
        let (upper, known) = (&done[k * count..], &solved[k * columns..]);
        for (row, to) in below
            .chunks_exact_mut(count)
            .zip(open.chunks_exact_mut(columns))
        {
            let factor = row[k] * scale;
            if factor != 0.0 {
                for c in k + 1..count {
                    row[c] -= factor * upper[c];
                }
                for c in 0..columns {
                    to[c] -= factor * known[c];
                }
            }
        }
    }
    for k in (0..count).rev() {
        let (known, open) = right.split_at_mut((k + 1) * columns);
        let row = &matrix[k * count..(k + 1) * count];
        let to = &mut known[k * columns..];
        for (later, solved) in open.chunks_exact(columns).enumerate() {
            let factor = row[k + 1 + later];
            for c in 0..columns {
                to[c] -= factor * solved[c];
            }
        }
        let scale = 1.0 / row[k];
        to.iter_mut().for_each(|x| *x *= scale);
    }
    true
}

impl Nodes {
    /// The state at the end.
    pub(super) fn end(&self, states: usize) -> DVectorView<'_, f64> {
        self.states.rows((S - 1) * states, states)
    }
}

/// From the slope of a state with its charges to the slope of the state.
pub(super) fn spread(
    varying: &[Varying],
    lift: &DMatrix<f64>,
    x: &DVector<f64>,
    free: &DVector<f64>,
) -> DVector<f64> {
    if varying.is_empty() {
        return free.clone();
    }
    let m = varying.len();
    let slope: Vec<f64> = varying.iter().map(|v| v.excess(x[v.state]).1).collect();
    let matrix = DMatrix::from_fn(m, m, |r, c| {
        let own = if r == c { 1.0 } else { 0.0 };
        own + lift[(varying[r].state, c)] * slope[c]
    });
    let mut own = DVector::from_fn(m, |r, _| free[varying[r].state]);
    let mut all = free.clone();
    if matrix.lu().solve_mut(&mut own) {
        for c in 0..m {
            all.axpy(-slope[c] * own[c], &lift.column(c), 1.0);
        }
    }
    all
}
