//! Rows of coefficients.

use nalgebra::DMatrix;

/// Rows of coefficients of the state and its constant, in one piece of memory.
#[derive(Debug, Clone, PartialEq)]
pub struct Rows {
    pub(super) width: usize,
    data: Vec<f64>,
}

impl Rows {
    pub(super) fn zeros(count: usize, width: usize) -> Self {
        Self {
            width,
            data: vec![0.0; count * width],
        }
    }

    /// Row `k`.
    pub fn row(&self, k: usize) -> &[f64] {
        &self.data[k * self.width..(k + 1) * self.width]
    }

    pub(super) fn row_mut(&mut self, k: usize) -> &mut [f64] {
        &mut self.data[k * self.width..(k + 1) * self.width]
    }

    /// Number of rows.
    pub fn len(&self) -> usize {
        self.data.len() / self.width.max(1)
    }

    /// Number of coefficients of a row.
    pub fn width(&self) -> usize {
        self.width
    }

    /// Whether there is none.
    pub fn is_empty(&self) -> bool {
        self.data.is_empty()
    }

    pub(super) fn add(&mut self, k: usize, other: &[f64], scale: f64) {
        if scale != 0.0 {
            for (sum, x) in self.row_mut(k).iter_mut().zip(other) {
                *sum += scale * x;
            }
        }
    }

    /// Solves `matrix` x = rows for every column; nothing where there are no rows.
    pub(super) fn solve(&mut self, matrix: &DMatrix<f64>) -> Option<()> {
        let count = self.len();
        if count == 0 {
            return Some(());
        }
        let right = DMatrix::from_row_slice(count, self.width, &self.data);
        let solved = matrix.clone().lu().solve(&right)?;
        for k in 0..count {
            for (column, x) in self.row_mut(k).iter_mut().enumerate() {
                *x = solved[(k, column)];
            }
        }
        Some(())
    }
}
