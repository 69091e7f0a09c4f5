//! Voltages, currents and slopes of one mode, in rows of the whole state.

use super::flux::Flux;
use super::rows::Rows;
use super::tree::{List, Tree};
use super::{DynamicsError, Kind, Mode, Part};
use crate::circuit::{Circuit, Element};
use nalgebra::DMatrix;
use std::ops::Range;

/// What the equations are made from.
pub(super) struct Equations<'a> {
    pub(super) circuit: &'a Circuit,
    pub(super) parts: &'a [Part],
    pub(super) tree: &'a Tree,
}

/// Positions of each kind.
pub(super) struct Places {
    pub(super) tree_e: Range<usize>,
    pub(super) tree_c: Range<usize>,
    pub(super) tree_r: Range<usize>,
    pub(super) tree_l: Range<usize>,
    pub(super) link_c: Range<usize>,
    pub(super) link_r: Range<usize>,
    pub(super) link_l: Range<usize>,
    pub(super) link_fall: Range<usize>,
}

impl Equations<'_> {
    fn places(&self) -> Places {
        let in_tree = |kind| range(self.tree.tree.iter().map(|&k| self.parts[k].kind), kind);
        let in_links = |kind| {
            range(
                self.tree.links.iter().map(|(k, _)| self.parts[*k].kind),
                kind,
            )
        };
        Places {
            tree_e: in_tree(Kind::Source),
            tree_c: in_tree(Kind::Capacitor),
            tree_r: in_tree(Kind::Resistor),
            tree_l: in_tree(Kind::Inductor),
            link_c: in_links(Kind::Capacitor),
            link_r: in_links(Kind::Resistor),
            link_l: in_links(Kind::Inductor),
            link_fall: in_links(Kind::Fall),
        }
    }

    pub(super) fn tree_part(&self, t: usize) -> &Part {
        &self.parts[self.tree.tree[t]]
    }

    pub(super) fn link_part(&self, l: usize) -> &Part {
        &self.parts[self.tree.links[l].0]
    }

    pub(super) fn singular(&self, part: &Part) -> DynamicsError {
        DynamicsError::Singular {
            element: self.circuit.branches[part.branch].name,
        }
    }

    pub(super) fn mode(&self) -> Result<Mode, DynamicsError> {
        let places = self.places();
        let (capacitors, inductors) = self.circuit.state_branches();
        let states = self.circuit.state_count();
        let width = states + 1;
        // State number of each branch that has one.
        let mut state_of: List<usize> = smallvec::smallvec![states; self.circuit.branches.len()];
        for (state, &branch) in capacitors.iter().chain(&inductors).enumerate() {
            state_of[branch] = state;
        }
        let first_fall = capacitors.len() + inductors.len();
        for (k, branch) in self.circuit.falls().enumerate() {
            state_of[branch] = first_fall + 2 * k;
        }
        let mut tree_v = Rows::zeros(self.tree.tree.len(), width);
        let mut link_i = Rows::zeros(self.tree.links.len(), width);
        for t in places.tree_e.clone() {
            tree_v.row_mut(t)[states] = self.tree_part(t).value;
        }
        let mass_c = self.free_voltages(&places, &state_of, &mut tree_v)?;
        let flux = Flux::of(self, &places, &state_of, capacitors.len());
        flux.free_currents(self, &places, &state_of, &mut link_i)?;
        for l in places.link_fall.clone() {
            // Beside coils alone the current would have to jump.
            if self.tree.links[l]
                .1
                .iter()
                .any(|(t, _)| places.tree_l.contains(t))
            {
                return Err(self.singular(self.link_part(l)));
            }
            let part = self.link_part(l);
            if let Element::Follower { node, clamp_v, .. } =
                self.circuit.branches[part.branch].element
            {
                let node = &self.circuit.branches[node];
                for (t, sign) in self.tree.routes.between(node.from, node.to) {
                    if !places.tree_c.contains(&t) && !places.tree_e.contains(&t) {
                        return Err(self.singular(part));
                    }
                    link_i.add(l, tree_v.row(t), -sign * part.value);
                }
                link_i.row_mut(l)[states] += part.value * clamp_v;
            } else {
                link_i.row_mut(l)[state_of[part.branch]] = 1.0;
            }
        }
        self.resistors(&places, &mut tree_v, &mut link_i)?;

        // Slopes of the free states, then of all.
        let mut slopes = Rows::zeros(states, width);
        let mut project = (!places.link_c.is_empty() || !places.tree_l.is_empty())
            .then(|| Rows::zeros(states, width));
        let mut drive = Rows::zeros(places.tree_c.len(), width);
        for l in places.link_r.start..places.link_fall.end {
            for &(t, sign) in self.tree.links[l]
                .1
                .iter()
                .filter(|(t, _)| places.tree_c.contains(t))
            {
                drive.add(t - places.tree_c.start, link_i.row(l), -sign);
            }
        }
        match &mass_c {
            Some(mass) => {
                let first = places.tree_c.start;
                drive
                    .solve(mass)
                    .ok_or_else(|| self.singular(self.tree_part(first)))?;
            }
            None => places.tree_c.clone().for_each(|t| {
                let farad = self.tree_part(t).value;
                drive
                    .row_mut(t - places.tree_c.start)
                    .iter_mut()
                    .for_each(|x| *x /= farad);
            }),
        }
        for t in places.tree_c.clone() {
            let state = state_of[self.tree_part(t).branch];
            slopes
                .row_mut(state)
                .copy_from_slice(drive.row(t - places.tree_c.start));
            if let Some(project) = &mut project {
                project.row_mut(state).copy_from_slice(tree_v.row(t));
            }
        }
        for l in places.link_c.clone() {
            let state = state_of[self.link_part(l).branch];
            for &(t, sign) in &self.tree.links[l].1 {
                if places.tree_c.contains(&t) {
                    slopes.add(state, drive.row(t - places.tree_c.start), sign);
                }
                if let Some(project) = &mut project {
                    project.add(state, tree_v.row(t), sign);
                }
            }
            let farad = self.link_part(l).value;
            let row: Vec<f64> = slopes.row(state).iter().map(|x| farad * x).collect();
            link_i.row_mut(l).copy_from_slice(&row);
        }
        flux.slopes(self, &places, &state_of, &tree_v, &mut slopes)?;
        for l in places.link_fall.clone() {
            let state = state_of[self.link_part(l).branch];
            if state < states {
                slopes.row_mut(state)[state + 1] = 1.0;
            }
        }
        for t in places.tree_l.clone() {
            let state = state_of[self.tree_part(t).branch];
            for (other, henry) in flux.row(state) {
                tree_v.add(t, slopes.row(other), henry);
            }
        }
        if let Some(project) = &mut project {
            (first_fall..states).for_each(|state| project.row_mut(state)[state] = 1.0);
            for l in places.link_l.clone() {
                let state = state_of[self.link_part(l).branch];
                project.row_mut(state).copy_from_slice(link_i.row(l));
            }
            for l in places.link_l.clone() {
                for &(t, sign) in self.tree.links[l]
                    .1
                    .iter()
                    .filter(|(t, _)| places.tree_l.contains(t))
                {
                    project.add(state_of[self.tree_part(t).branch], link_i.row(l), -sign);
                }
            }
        }
        let lift = self.lift(&places, &state_of, mass_c.as_ref())?;
        let (voltage, current) = self.branches(&tree_v, &link_i);
        Ok(Mode {
            lift,
            slopes,
            project,
            latch: None,
            voltage,
            current,
        })
    }

    /// Rows of the tree capacitors' voltages; with the mass matrix where capacitors form loops.
    fn free_voltages(
        &self,
        places: &Places,
        state_of: &[usize],
        tree_v: &mut Rows,
    ) -> Result<Option<DMatrix<f64>>, DynamicsError> {
        if places.link_c.is_empty() {
            for t in places.tree_c.clone() {
                tree_v.row_mut(t)[state_of[self.tree_part(t).branch]] = 1.0;
            }
            return Ok(None);
        }
        // Charge on each free node is kept: (Ct + F' Cl F) v = Ct vt + F' Cl (vl - Fe e).
        let first = places.tree_c.start;
        let count = places.tree_c.len();
        let mut mass = DMatrix::zeros(count, count);
        let mut charge = Rows::zeros(count, tree_v.width);
        for t in places.tree_c.clone() {
            let part = self.tree_part(t);
            mass[(t - first, t - first)] += part.value;
            charge.row_mut(t - first)[state_of[part.branch]] += part.value;
        }
        for l in places.link_c.clone() {
            let part = self.link_part(l);
            let path = &self.tree.links[l].1;
            let mut kept = vec![0.0; tree_v.width];
            kept[state_of[part.branch]] = 1.0;
            for &(t, sign) in path.iter().filter(|(t, _)| places.tree_e.contains(t)) {
                kept[tree_v.width - 1] -= sign * self.tree_part(t).value;
            }
            for &(t, sign) in path.iter().filter(|(t, _)| places.tree_c.contains(t)) {
                charge.add(t - first, &kept, sign * part.value);
                for &(other, other_sign) in path.iter().filter(|(t, _)| places.tree_c.contains(t)) {
                    mass[(t - first, other - first)] += sign * other_sign * part.value;
                }
            }
        }
        if count > 0 {
            charge
                .solve(&mass)
                .ok_or_else(|| self.singular(self.tree_part(first)))?;
        }
        for t in places.tree_c.clone() {
            tree_v.row_mut(t).copy_from_slice(charge.row(t - first));
        }
        Ok(Some(mass))
    }

    /// What a coulomb in each varying capacitor does to every voltage: it spreads over the
    /// capacitors that share a loop with it, and does nothing where a source holds the voltage.
    fn lift(
        &self,
        places: &Places,
        state_of: &[usize],
        mass: Option<&DMatrix<f64>>,
    ) -> Result<Rows, DynamicsError> {
        let states = self.circuit.state_count();
        let mut lift = Rows::zeros(self.circuit.varying().count(), states + 1);
        let first = places.tree_c.start;
        for (k, branch) in self.circuit.varying().enumerate() {
            let mut spread = Rows::zeros(places.tree_c.len(), 1);
            let own = |&t: &usize| self.tree_part(t).branch == branch;
            if let Some(t) = places.tree_c.clone().find(own) {
                spread.row_mut(t - first)[0] = 1.0;
            }
            for l in places.link_c.clone() {
                if self.link_part(l).branch == branch {
                    for &(t, sign) in &self.tree.links[l].1 {
                        if places.tree_c.contains(&t) {
                            spread.row_mut(t - first)[0] = sign;
                        }
                    }
                }
            }
            match mass {
                Some(mass) => spread
                    .solve(mass)
                    .ok_or_else(|| self.singular(self.tree_part(first)))?,
                None => places.tree_c.clone().for_each(|t| {
                    spread.row_mut(t - first)[0] /= self.tree_part(t).value;
                }),
            }
            for t in places.tree_c.clone() {
                lift.row_mut(k)[state_of[self.tree_part(t).branch]] = spread.row(t - first)[0];
            }
            for l in places.link_c.clone() {
                let state = state_of[self.link_part(l).branch];
                for &(t, sign) in &self.tree.links[l].1 {
                    if places.tree_c.contains(&t) {
                        lift.row_mut(k)[state] += sign * spread.row(t - first)[0];
                    }
                }
            }
        }
        Ok(lift)
    }

    /// v = R i in the tree, i = v / R outside it.
    fn resistors(
        &self,
        places: &Places,
        tree_v: &mut Rows,
        link_i: &mut Rows,
    ) -> Result<(), DynamicsError> {
        for l in places.link_l.start..places.link_fall.end {
            for &(t, sign) in self.tree.links[l]
                .1
                .iter()
                .filter(|(t, _)| places.tree_r.contains(t))
            {
                tree_v.add(t, link_i.row(l), -sign * self.tree_part(t).value);
            }
        }
        // Tree resistors that share a loop with one outside the tree are solved together.
        let mut shared: Vec<usize> = Vec::new();
        for l in places.link_r.clone() {
            for &(t, _) in self.tree.links[l]
                .1
                .iter()
                .filter(|(t, _)| places.tree_r.contains(t))
            {
                if !shared.contains(&t) {
                    shared.push(t);
                }
            }
        }
        if !shared.is_empty() {
            let mut matrix = DMatrix::identity(shared.len(), shared.len());
            let mut right = Rows::zeros(shared.len(), tree_v.width);
            for (row, &t) in shared.iter().enumerate() {
                right.add(row, tree_v.row(t), 1.0);
            }
            for l in places.link_r.clone() {
                let ohm = self.link_part(l).value;
                let path = &self.tree.links[l].1;
                for &(t, sign) in path {
                    let Some(row) = shared.iter().position(|&s| s == t) else {
                        continue;
                    };
                    let through = self.tree_part(t).value * sign / ohm;
                    for &(other, other_sign) in path {
                        match shared.iter().position(|&s| s == other) {
                            Some(column) => matrix[(row, column)] += through * other_sign,
                            None => right.add(row, tree_v.row(other), -through * other_sign),
                        }
                    }
                }
            }
            if let [only] = shared[..] {
                let scale = 1.0 / matrix[(0, 0)];
                right.row_mut(0).iter_mut().for_each(|x| *x *= scale);
                tree_v.row_mut(only).copy_from_slice(right.row(0));
            } else {
                right
                    .solve(&matrix)
                    .ok_or_else(|| self.singular(self.tree_part(shared[0])))?;
                for (row, &t) in shared.iter().enumerate() {
                    tree_v.row_mut(t).copy_from_slice(right.row(row));
                }
            }
        }
        for l in places.link_r.clone() {
            let ohm = self.link_part(l).value;
            for &(t, sign) in &self.tree.links[l].1 {
                link_i.add(l, tree_v.row(t), sign / ohm);
            }
        }
        Ok(())
    }

    /// Voltage and current of each branch from those of its parts.
    fn branches(&self, tree_v: &Rows, link_i: &Rows) -> (Rows, Rows) {
        let count = self.circuit.branches.len();
        let mut voltage = Rows::zeros(count, tree_v.width);
        let mut current = Rows::zeros(count, tree_v.width);
        for (t, &part) in self.tree.tree.iter().enumerate() {
            voltage.add(self.parts[part].branch, tree_v.row(t), 1.0);
        }
        // A branch of two parts in series has one current: that of its first part. What flows
        // in a tree part is what the links that pass through it carry.
        let first =
            |part: usize| part == 0 || self.parts[part - 1].branch != self.parts[part].branch;
        for (l, (part, path)) in self.tree.links.iter().enumerate() {
            let branch = self.parts[*part].branch;
            if first(*part) {
                current.add(branch, link_i.row(l), 1.0);
            }
            for &(t, sign) in path {
                voltage.add(branch, tree_v.row(t), sign);
                let passed = self.tree.tree[t];
                if first(passed) {
                    current.add(self.parts[passed].branch, link_i.row(l), -sign);
                }
            }
        }
        let conducts: List<bool> = (0..count)
            .map(|branch| self.parts.iter().any(|p| p.branch == branch))
            .collect();
        if conducts.contains(&false) {
            let routes = &self.tree.routes;
            let nodes = routes.nodes();
            for (number, branch) in self.circuit.branches.iter().enumerate() {
                if !conducts[number] && branch.from < nodes && branch.to < nodes {
                    for (t, sign) in routes.between(branch.from, branch.to) {
                        voltage.add(number, tree_v.row(t), sign);
                    }
                }
            }
        }
        (voltage, current)
    }
}

fn range(kinds: impl Iterator<Item = Kind> + Clone, wanted: Kind) -> Range<usize> {
    let start = kinds.clone().filter(|&kind| kind < wanted).count();
    start..start + kinds.filter(|&kind| kind == wanted).count()
}
