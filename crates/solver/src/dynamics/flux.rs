//! Coils: couplings and cut-sets.

use super::DynamicsError;
use super::equations::{Equations, Places};
use super::rows::Rows;
use crate::circuit::Element;
use nalgebra::DMatrix;

/// The coils: their inductances, couplings and cut-sets.
pub(super) struct Flux {
    /// State number of the first coil.
    first: usize,
    /// Henries, by coil.
    own: Vec<f64>,
    /// Pairs of coil numbers with their mutual inductance.
    mutual: Vec<(usize, usize, f64)>,
    /// Whether every coil's slope is its own voltage over its own inductance.
    plain: bool,
}

impl Flux {
    pub(super) fn of(
        equations: &Equations<'_>,
        places: &Places,
        state_of: &[usize],
        first: usize,
    ) -> Self {
        let circuit = equations.circuit;
        let own: Vec<f64> = circuit
            .branches
            .iter()
            .filter_map(|b| {
                if let Element::Inductor { henry, .. } = b.element {
                    Some(henry)
                } else {
                    None
                }
            })
            .collect();
        let coil = |branch: usize| {
            state_of
                .get(branch)
                .and_then(|s| s.checked_sub(first))
                .filter(|&k| k < own.len())
        };
        let mutual: Vec<(usize, usize, f64)> = circuit
            .couplings
            .iter()
            .filter_map(|c| Some((coil(c.first)?, coil(c.second)?, c.mutual_henry)))
            .collect();
        let plain = mutual.is_empty() && places.tree_l.is_empty();
        Self {
            first,
            own,
            mutual,
            plain,
        }
    }

    /// Inductances in the row of a coil's state: (other coil's state, henries).
    pub(super) fn row(&self, state: usize) -> Vec<(usize, f64)> {
        let k = state - self.first;
        let mut row = vec![(state, self.own[k])];
        for &(a, b, henry) in &self.mutual {
            if a == k {
                row.push((b + self.first, henry));
            }
            if b == k {
                row.push((a + self.first, henry));
            }
        }
        row
    }

    /// Entry (coil, link coil): the link's current in each coil.
    fn spread(
        &self,
        equations: &Equations<'_>,
        places: &Places,
        state_of: &[usize],
    ) -> DMatrix<f64> {
        let mut spread = DMatrix::zeros(self.own.len(), places.link_l.len());
        for l in places.link_l.clone() {
            let column = l - places.link_l.start;
            spread[(state_of[equations.link_part(l).branch] - self.first, column)] = 1.0;
            for &(t, sign) in equations.tree.links[l]
                .1
                .iter()
                .filter(|(t, _)| places.tree_l.contains(t))
            {
                spread[(state_of[equations.tree_part(t).branch] - self.first, column)] -= sign;
            }
        }
        spread
    }

    fn matrix(&self) -> DMatrix<f64> {
        let count = self.own.len();
        let mut matrix = DMatrix::from_diagonal(&nalgebra::DVector::from_row_slice(&self.own));
        for &(a, b, henry) in self
            .mutual
            .iter()
            .filter(|(a, b, _)| *a < count && *b < count)
        {
            matrix[(a, b)] += henry;
            matrix[(b, a)] += henry;
        }
        matrix
    }

    /// Rows of the link coils' currents, flux kept where coils form cut-sets.
    pub(super) fn free_currents(
        &self,
        equations: &Equations<'_>,
        places: &Places,
        state_of: &[usize],
        link_i: &mut Rows,
    ) -> Result<(), DynamicsError> {
        if places.tree_l.is_empty() {
            for l in places.link_l.clone() {
                link_i.row_mut(l)[state_of[equations.link_part(l).branch]] = 1.0;
            }
            return Ok(());
        }
        if places.link_l.is_empty() {
            return Ok(());
        }
        let spread = self.spread(equations, places, state_of);
        let kept = spread.transpose() * self.matrix();
        let solved = (&kept * &spread)
            .lu()
            .solve(&kept)
            .ok_or_else(|| equations.singular(equations.link_part(places.link_l.start)))?;
        for l in places.link_l.clone() {
            for coil in 0..self.own.len() {
                link_i.row_mut(l)[self.first + coil] = solved[(l - places.link_l.start, coil)];
            }
        }
        Ok(())
    }

    /// Slopes of every coil from the voltages around its loop.
    pub(super) fn slopes(
        &self,
        equations: &Equations<'_>,
        places: &Places,
        state_of: &[usize],
        tree_v: &Rows,
        slopes: &mut Rows,
    ) -> Result<(), DynamicsError> {
        if places.link_l.is_empty() {
            return Ok(());
        }
        let mut drive = Rows::zeros(places.link_l.len(), tree_v.width);
        for l in places.link_l.clone() {
            for &(t, sign) in equations.tree.links[l]
                .1
                .iter()
                .filter(|(t, _)| !places.tree_l.contains(t))
            {
                drive.add(l - places.link_l.start, tree_v.row(t), sign);
            }
        }
        if self.plain {
            for l in places.link_l.clone() {
                let state = state_of[equations.link_part(l).branch];
                slopes.add(
                    state,
                    drive.row(l - places.link_l.start),
                    1.0 / self.own[state - self.first],
                );
            }
            return Ok(());
        }
        let spread = self.spread(equations, places, state_of);
        drive
            .solve(&(spread.transpose() * self.matrix() * &spread))
            .ok_or_else(|| equations.singular(equations.link_part(places.link_l.start)))?;
        for coil in 0..self.own.len() {
            for k in 0..places.link_l.len() {
                slopes.add(self.first + coil, drive.row(k), spread[(coil, k)]);
            }
        }
        Ok(())
    }
}
