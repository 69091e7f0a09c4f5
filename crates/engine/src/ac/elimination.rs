//! Gauss's elimination of a small complex system with complete pivoting.
//!
//! Complete, because what is undetermined but irrelevant (a current around a loop of shorts, the
//! voltage of an island) then shows as rows of nothing against nothing, and is set to zero.

use num_complex::Complex64;

/// Pivots below this are nothing; every row starts with a largest entry of 1.
const NOTHING: f64 = 1e-14;
/// A right side above this against nothing is a contradiction.
const CONTRADICTION: f64 = 1e-9;

/// A square matrix with right sides beside it.
pub(super) struct Augmented {
    size: usize,
    width: usize,
    entries: Vec<Complex64>,
}

fn size_of(c: Complex64) -> f64 {
    c.re.abs().max(c.im.abs())
}

impl Augmented {
    pub(super) fn new(size: usize, right_sides: usize) -> Self {
        let width = size + right_sides;
        Self {
            size,
            width,
            entries: vec![Complex64::ZERO; size * width],
        }
    }

    /// Adds to an entry; right sides are the columns from `size` on.
    pub(super) fn add(&mut self, row: usize, column: usize, value: Complex64) {
        self.entries[row * self.width + column] += value;
    }

    fn at(&self, row: usize, column: usize) -> Complex64 {
        self.entries[row * self.width + column]
    }

    /// The solution for each right side, or the largest pivot left where there is none.
    pub(super) fn solve(&mut self) -> Result<Vec<Vec<Complex64>>, f64> {
        let (n, width) = (self.size, self.width);
        for row in self.entries.chunks_mut(width.max(1)) {
            let largest = row[..n].iter().fold(0.0, |m: f64, &c| m.max(size_of(c)));
            if largest > 0.0 {
                row.iter_mut().for_each(|c| *c /= largest);
            }
        }
        let mut order: Vec<usize> = (0..n).collect();
        let mut rank = n;
        let mut pivot = 0.0;
        for step in 0..n {
            pivot = 0.0;
            let mut place = (step, step);
            for row in step..n {
                for column in step..n {
                    let size = size_of(self.at(row, column));
                    if size > pivot {
                        (pivot, place) = (size, (row, column));
                    }
                }
            }
            if pivot <= NOTHING {
                rank = step;
                break;
            }
            for column in 0..width {
                self.entries
                    .swap(step * width + column, place.0 * width + column);
            }
            for row in 0..n {
                self.entries.swap(row * width + step, row * width + place.1);
            }
            order.swap(step, place.1);
            let (above, below) = self.entries.split_at_mut((step + 1) * width);
            let pivot_row = &above[step * width..];
            for row in below.chunks_mut(width) {
                if row[step] == Complex64::ZERO {
                    continue;
                }
                let factor = row[step] / pivot_row[step];
                for column in step..width {
                    row[column] -= factor * pivot_row[column];
                }
            }
        }
        let mut solutions = Vec::with_capacity(width - n);
        for column in n..width {
            let right = |row: usize| size_of(self.at(row, column));
            let largest = (0..n).map(right).fold(0.0, f64::max);
            if (rank..n).any(|row| right(row) > CONTRADICTION * largest) {
                return Err(pivot);
            }
            let mut x = vec![Complex64::ZERO; n];
            for row in (0..rank).rev() {
                let mut sum = self.at(row, column);
                for k in row + 1..rank {
                    sum -= self.at(row, k) * x[order[k]];
                }
                x[order[row]] = sum / self.at(row, row);
            }
            if x.iter().any(|c| !(c.re.is_finite() && c.im.is_finite())) {
                return Err(pivot);
            }
            solutions.push(x);
        }
        Ok(solutions)
    }
}
