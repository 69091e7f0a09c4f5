//! The solution of x' = A x over a stretch: e^(At) - 1 at a ladder of doubling times.
//!
//! e^(At) - 1 is kept instead of e^(At), and doubled as 2E + E^2: with an on-resistance a
//! millionth of the load the first rung is a millionth of the stretch, and adding 1 there
//! would cost the slow states six of their digits.

use nalgebra::{SMatrix, SVector};

/// Terms of the series on the first rung.
const TERMS: usize = 17;
/// Balanced norm of A h on the first rung: the series' remainder is below 2e-16.
const FIRST_RUNG: f64 = 1.0;
/// A stretch is looked at in at least this many cells (as a power of two).
pub(super) const CELLS_LOG2: usize = 5;
/// Most rungs: beyond these the stretch is 2^70 times the fastest time constant.
const MOST_RUNGS: usize = 70;

/// A matrix of the augmented state.
pub(super) type Square<const N: usize> = SMatrix<f64, N, N>;
/// The augmented state.
pub(super) type State<const N: usize> = SVector<f64, N>;

/// e^(At) - 1 at t = step, 2 step, 4 step, ... , the whole stretch.
#[derive(Clone)]
pub(super) struct Flow<const N: usize> {
    pub(super) a: Square<N>,
    pub(super) step: f64,
    pub(super) ladder: Vec<Square<N>>,
}

impl<const N: usize> Flow<N> {
    /// The flow of `a` over `duration`; none where the numbers overflow.
    pub(super) fn new(a: &Square<N>, duration: f64) -> Option<Self> {
        let norm = balanced_norm(a) * duration;
        if !norm.is_finite() {
            return None;
        }
        let mut rungs = CELLS_LOG2;
        let mut step = duration / (1u64 << CELLS_LOG2) as f64;
        let mut first = norm / (1u64 << CELLS_LOG2) as f64;
        while first > FIRST_RUNG {
            first *= 0.5;
            step *= 0.5;
            rungs += 1;
        }
        if rungs > MOST_RUNGS {
            return None;
        }
        let mut ladder = Vec::with_capacity(rungs + 1);
        ladder.push(exp_minus_one(&(a * step)));
        for k in 0..rungs {
            let e: Square<N> = ladder[k];
            ladder.push(e * 2.0 + e * e);
        }
        ladder[rungs].iter().all(|x| x.is_finite()).then_some(Self {
            a: *a,
            step,
            ladder,
        })
    }

    /// Rungs from one cell to the whole stretch.
    pub(super) fn cell_rung(&self) -> usize {
        self.ladder.len() - 1 - CELLS_LOG2
    }

    /// Duration of a rung.
    #[inline]
    pub(super) fn rung_duration(&self, rung: usize) -> f64 {
        self.step * 2f64.powi(rung as i32)
    }

    /// The state one rung later.
    #[inline]
    pub(super) fn advance(&self, rung: usize, x: &State<N>) -> State<N> {
        x + self.ladder[rung] * x
    }

    /// The state at the end of the stretch.
    pub(super) fn end(&self, x: &State<N>) -> State<N> {
        self.advance(self.ladder.len() - 1, x)
    }

    /// e^(At) over the stretch.
    pub(super) fn transition(&self) -> Square<N> {
        self.ladder[self.ladder.len() - 1] + Square::identity()
    }

    /// Coefficients of x(t) in powers of t/step, good for 0 <= t <= step.
    pub(super) fn series(&self, x: &State<N>) -> [State<N>; TERMS + 1] {
        let mut terms = [*x; TERMS + 1];
        for k in 1..=TERMS {
            terms[k] = self.a * terms[k - 1] * (self.step / k as f64);
        }
        terms
    }
}

/// The state at `fraction` of the first rung, from its series.
pub(super) fn series_at<const N: usize>(terms: &[State<N>; TERMS + 1], fraction: f64) -> State<N> {
    let mut x = terms[TERMS];
    for k in (0..TERMS).rev() {
        x = x * fraction + terms[k];
    }
    x
}

/// e^X - 1 for a small X: the series to degree 17 by Paterson and Stockmeyer's grouping
/// (SIAM J. Comput. 2, 1973; from memory).
fn exp_minus_one<const N: usize>(x: &Square<N>) -> Square<N> {
    let mut c = [1.0; TERMS + 1];
    for k in 1..=TERMS {
        c[k] = c[k - 1] / k as f64;
    }
    let x2 = x * x;
    let x3 = x2 * x;
    let group = |k: usize| Square::<N>::identity() * c[k] + x * c[k + 1] + x2 * c[k + 2];
    let mut high = group(15);
    for k in [12, 9, 6, 3] {
        high = group(k) + x3 * high;
    }
    x + x2 * c[2] + x3 * high
}

/// Largest column sum of |A| after the best diagonal scaling of the states, the constant's
/// column left out. Only the number of rungs depends on it.
fn balanced_norm<const N: usize>(a: &Square<N>) -> f64 {
    let n = N - 1;
    let mut m = a.map(f64::abs);
    for _ in 0..3 {
        for k in 0..n {
            let (mut row, mut column) = (0.0, 0.0);
            for j in 0..n {
                if j != k {
                    row += m[(k, j)];
                    column += m[(j, k)];
                }
            }
            if row > 0.0 && column > 0.0 {
                let scale = (row / column).sqrt();
                for j in 0..n {
                    m[(j, k)] *= scale;
                    m[(k, j)] /= scale;
                }
            }
        }
    }
    (0..n)
        .map(|k| (0..n).map(|j| m[(j, k)]).sum::<f64>())
        .fold(0.0, f64::max)
}

/// Where a row first rises above zero within a stretch.
pub(super) struct Crossing<const N: usize> {
    /// Time into the stretch.
    pub(super) at: f64,
    /// The state there.
    pub(super) state: State<N>,
}

/// Narrows a change that lies within the rung that starts at `x`: the first instant at which
/// one of `rows` rises above zero. Halves down to one first rung, then solves the series
/// there.
pub(super) fn narrow<const N: usize>(
    flow: &Flow<N>,
    mut x: State<N>,
    mut at: f64,
    rung: usize,
    rows: &[State<N>],
) -> Crossing<N> {
    for k in (0..rung).rev() {
        let middle = flow.advance(k, &x);
        if rows.iter().all(|row| row.dot(&middle) <= 0.0) {
            x = middle;
            at += flow.rung_duration(k);
        }
    }
    let terms = flow.series(&x);
    let fraction = rows
        .iter()
        .map(|row| first_rise(&terms.map(|term| row.dot(&term))))
        .fold(1.0, f64::min);
    Crossing {
        at: at + fraction * flow.step,
        state: series_at(&terms, fraction),
    }
}

/// Where the polynomial with these coefficients rises above zero in 0..=1 (1 where it does
/// not): Newton's method kept within a shrinking bracket.
fn first_rise(c: &[f64; TERMS + 1]) -> f64 {
    const MOST_STEPS: usize = 80;
    /// Of a first rung, which is at most a 32nd of the stretch.
    const CLOSE: f64 = 1e-13;
    let value_and_slope = |t: f64| {
        let (mut value, mut slope) = (c[TERMS], 0.0);
        for k in (0..TERMS).rev() {
            slope = slope * t + value;
            value = value * t + c[k];
        }
        (value, slope)
    };
    let (mut low, mut high) = (0.0, 1.0);
    if c[0] > 0.0 {
        return 0.0;
    }
    let at_end = value_and_slope(1.0).0;
    if at_end <= 0.0 {
        return 1.0;
    }
    let mut t = c[0] / (c[0] - at_end);
    for _ in 0..MOST_STEPS {
        let (value, slope) = value_and_slope(t);
        if value > 0.0 {
            high = t;
        } else {
            low = t;
        }
        let mut next = t - value / slope;
        if !(next > low && next < high) {
            next = 0.5 * (low + high);
        }
        if (next - t).abs() <= CLOSE || high - low <= CLOSE {
            return high.min(next.max(low));
        }
        t = next;
    }
    high
}

/// Where `row` . x first falls below zero: by a change of sign between cells, or by a dip
/// within one whose slope changes sign.
pub(super) fn first_fall<const N: usize>(
    flow: &Flow<N>,
    x: &State<N>,
    row: &State<N>,
    tolerance: f64,
) -> Option<Crossing<N>> {
    let slope_row = flow.a.tr_mul(row);
    let below = -row;
    let cell = flow.cell_rung();
    let width = flow.rung_duration(cell);
    let (mut left, mut at, mut rung) = (*x, 0.0, 0);
    let mut k = usize::from(cell == 0);
    while k <= 1usize << CELLS_LOG2 {
        let right = flow.advance(rung, &left);
        if row.dot(&right) < -tolerance {
            return Some(narrow(flow, left, at, rung, &[below]));
        }
        if slope_row.dot(&left) < 0.0 && slope_row.dot(&right) > 0.0 {
            let bottom = narrow(flow, left, at, rung, &[slope_row]);
            if row.dot(&bottom.state) < -tolerance {
                return Some(narrow(flow, left, at, rung, &[below, slope_row]));
            }
        }
        left = right;
        at += flow.rung_duration(rung);
        if k > 0 || at > 0.75 * width {
            (rung, k) = (cell, k.max(1) + 1);
        } else if at > 1.5 * flow.step {
            // The first cell by its rungs, each as long as what lies behind it: transients live
            // there.
            rung += 1;
        }
    }
    None
}
