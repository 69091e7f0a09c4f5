//! From a circuit and the set of conducting switches to x' = A x.
//!
//! The state is every capacitor's voltage, then every coil's current, then the constant 1
//! (so that sources are a column of A). Where capacitors form a loop, coils a cut-set, or
//! an ideal switch shorts a capacitor, fewer of them are free: the normal tree (Bryant,
//! "The order of complexity of electrical networks", Proc. IEE C 106, 1959; value from
//! memory) tells which, `project` carries a state over to the nearest one the mode
//! allows with charge and flux conserved, and A keeps it there.

use crate::circuit::{Circuit, Element};
use nalgebra::DMatrix;
use std::fmt;
use std::ops::Range;

/// Why a circuit has no state equations.
#[derive(Debug, Clone, PartialEq)]
pub enum DynamicsError {
    /// Sources, conducting ideal switches or shorts form a loop.
    SourceLoop {
        /// The elements in it.
        elements: Vec<&'static str>,
    },
    /// An element's value is not a number, or of a sign that it cannot have.
    Value {
        /// The element.
        element: &'static str,
        /// Its value.
        value: f64,
    },
    /// The equations have no unique solution at this element.
    Singular {
        /// The element.
        element: &'static str,
    },
}

impl fmt::Display for DynamicsError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::SourceLoop { elements } => {
                write!(
                    f,
                    "a loop of voltages with nothing to limit the current: {}",
                    elements.join(", ")
                )
            }
            Self::Value { element, value } => write!(f, "{element} cannot have the value {value}"),
            Self::Singular { element } => {
                write!(f, "nothing determines the current or voltage of {element}")
            }
        }
    }
}

impl std::error::Error for DynamicsError {}

/// Rows of coefficients of the state and its constant, in one piece of memory.
#[derive(Debug, Clone, PartialEq)]
pub struct Rows {
    width: usize,
    data: Vec<f64>,
}

impl Rows {
    fn zeros(count: usize, width: usize) -> Self {
        Self {
            width,
            data: vec![0.0; count * width],
        }
    }

    /// Row `k`.
    pub fn row(&self, k: usize) -> &[f64] {
        &self.data[k * self.width..(k + 1) * self.width]
    }

    fn row_mut(&mut self, k: usize) -> &mut [f64] {
        &mut self.data[k * self.width..(k + 1) * self.width]
    }

    /// Number of rows.
    pub fn len(&self) -> usize {
        self.data.len() / self.width.max(1)
    }

    /// Whether there is none.
    pub fn is_empty(&self) -> bool {
        self.data.is_empty()
    }

    fn add(&mut self, k: usize, other: &[f64], scale: f64) {
        if scale != 0.0 {
            for (sum, x) in self.row_mut(k).iter_mut().zip(other) {
                *sum += scale * x;
            }
        }
    }

    /// Solves `matrix` x = rows for every column.
    fn solve(&mut self, matrix: &DMatrix<f64>) -> Option<()> {
        let count = self.len();
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

/// The equations of one set of conducting switches. Every row is in the whole state with
/// its constant last.
#[derive(Debug, Clone, PartialEq)]
pub struct Mode {
    /// Row k: slope of state k.
    pub slopes: Rows,
    /// Row k: state k projected onto what this mode allows; none where it allows all.
    pub project: Option<Rows>,
    /// Row k: voltage of branch k.
    pub voltage: Rows,
    /// Row k: current of branch k.
    pub current: Rows,
}

#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
enum Kind {
    Source,
    Capacitor,
    Resistor,
    Inductor,
}

/// A two-terminal part with one law; a branch is one or two of them in series.
#[derive(Clone, Copy)]
struct Part {
    branch: usize,
    kind: Kind,
    value: f64,
    from: usize,
    to: usize,
}

/// State equations of `circuit` while the switching branches whose bits are set in
/// `conducting` conduct (bit k belongs to entry k of [`Circuit::switching_branches`]).
///
/// # Errors
/// A loop of sources, a value out of range, or equations without a unique solution.
pub fn mode(circuit: &Circuit, conducting: u32) -> Result<Mode, DynamicsError> {
    let parts = parts(circuit, conducting)?;
    let tree = Tree::grow(circuit, &parts)?;
    Equations {
        circuit,
        parts: &parts,
        tree: &tree,
    }
    .mode()
}

fn parts(circuit: &Circuit, conducting: u32) -> Result<Vec<Part>, DynamicsError> {
    let mut next_node = circuit
        .branches
        .iter()
        .map(|b| b.from.max(b.to))
        .max()
        .unwrap_or(0)
        + 1;
    let mut parts = Vec::with_capacity(2 * circuit.branches.len());
    let mut switching = 0;
    for (number, branch) in circuit.branches.iter().enumerate() {
        let check = |value: f64, least: f64| {
            if value.is_finite() && value >= least {
                Ok(value)
            } else {
                Err(DynamicsError::Value {
                    element: branch.name,
                    value,
                })
            }
        };
        let (kind, value, ohm) = match branch.element {
            Element::Resistor { ohm } => (None, 0.0, check(ohm, 0.0)?),
            Element::Inductor { henry, ohm } => (
                Some(Kind::Inductor),
                check(henry, f64::MIN_POSITIVE)?,
                check(ohm, 0.0)?,
            ),
            Element::Capacitor { farad, ohm } => (
                Some(Kind::Capacitor),
                check(farad, f64::MIN_POSITIVE)?,
                check(ohm, 0.0)?,
            ),
            Element::Source { volt } => (Some(Kind::Source), check(volt, f64::MIN)?, 0.0),
            Element::Switch { ohm } => (None, 0.0, check(ohm, 0.0)?),
            Element::Diode { forward_v, ohm } => (
                Some(Kind::Source),
                -check(forward_v, 0.0)?,
                check(ohm, 0.0)?,
            ),
        };
        if branch.element.is_switching() {
            let on = conducting >> switching & 1 == 1;
            switching += 1;
            if !on {
                continue;
            }
        }
        let mut from = branch.from;
        if let Some(kind) = kind {
            let to = if ohm > 0.0 {
                next_node += 1;
                next_node - 1
            } else {
                branch.to
            };
            parts.push(Part {
                branch: number,
                kind,
                value,
                from,
                to,
            });
            from = to;
        }
        if ohm > 0.0 {
            parts.push(Part {
                branch: number,
                kind: Kind::Resistor,
                value: ohm,
                from,
                to: branch.to,
            });
        } else if kind.is_none() {
            parts.push(Part {
                branch: number,
                kind: Kind::Source,
                value: 0.0,
                from,
                to: branch.to,
            });
        }
    }
    Ok(parts)
}

/// A spanning tree that prefers sources, then capacitors, then resistors, then coils.
struct Tree {
    /// Parts in the tree, in the order of their kinds.
    tree: Vec<usize>,
    /// Parts outside it, in the order of their kinds, each with the tree parts (as positions
    /// in `tree`) along its path and the sign of each voltage in its own.
    links: Vec<(usize, Vec<(usize, f64)>)>,
}

impl Tree {
    fn grow(circuit: &Circuit, parts: &[Part]) -> Result<Self, DynamicsError> {
        let nodes = node_count(parts);
        let mut group: Vec<usize> = (0..nodes).collect();
        let (mut tree, mut outside) = (
            Vec::with_capacity(parts.len()),
            Vec::with_capacity(parts.len()),
        );
        for kind in [
            Kind::Source,
            Kind::Capacitor,
            Kind::Resistor,
            Kind::Inductor,
        ] {
            for (k, part) in parts
                .iter()
                .enumerate()
                .filter(|(_, part)| part.kind == kind)
            {
                let (a, b) = (group[part.from], group[part.to]);
                if a == b {
                    outside.push(k);
                } else {
                    group.iter_mut().filter(|g| **g == b).for_each(|g| *g = a);
                    tree.push(k);
                }
            }
        }
        let routes = Routes::of(parts, &tree, nodes);
        let mut links = Vec::with_capacity(outside.len());
        for link in outside {
            let steps = routes.between(parts[link].from, parts[link].to);
            if parts[link].kind == Kind::Source {
                let mut elements = vec![circuit.branches[parts[link].branch].name];
                elements.extend(
                    steps
                        .iter()
                        .map(|&(t, _)| circuit.branches[parts[tree[t]].branch].name),
                );
                return Err(DynamicsError::SourceLoop { elements });
            }
            links.push((link, steps));
        }
        Ok(Self { tree, links })
    }
}

fn node_count(parts: &[Part]) -> usize {
    parts.iter().map(|p| p.from.max(p.to)).max().unwrap_or(0) + 1
}

/// The tree seen from its roots: each node's way up.
struct Routes {
    /// Parent node, tree position and sign of the step up; none at a root.
    up: Vec<Option<(usize, usize, f64)>>,
    depth: Vec<usize>,
}

impl Routes {
    fn of(parts: &[Part], tree: &[usize], nodes: usize) -> Self {
        let mut up = vec![None; nodes];
        let mut depth = vec![usize::MAX; nodes];
        let mut queue = Vec::with_capacity(nodes);
        for root in 0..nodes {
            if depth[root] != usize::MAX {
                continue;
            }
            depth[root] = 0;
            queue.clear();
            queue.push(root);
            let mut head = 0;
            while head < queue.len() {
                let node = queue[head];
                head += 1;
                for (t, &part) in tree.iter().enumerate() {
                    let part = &parts[part];
                    // The voltage of the lower node against the upper one.
                    let (other, sign) = if part.from == node {
                        (part.to, -1.0)
                    } else if part.to == node {
                        (part.from, 1.0)
                    } else {
                        continue;
                    };
                    if depth[other] == usize::MAX {
                        depth[other] = depth[node] + 1;
                        up[other] = Some((node, t, sign));
                        queue.push(other);
                    }
                }
            }
        }
        Self { up, depth }
    }

    /// Tree positions on the way between two nodes, each with the sign of its voltage in the
    /// voltage of `from` against `to`; what is reached where the two are not connected.
    fn between(&self, mut from: usize, mut to: usize) -> Vec<(usize, f64)> {
        let mut steps = Vec::new();
        while from != to {
            let lower = self.depth[from] >= self.depth[to];
            let node = if lower { from } else { to };
            let Some((parent, t, sign)) = self.up[node] else {
                break;
            };
            steps.push((t, if lower { sign } else { -sign }));
            if lower {
                from = parent;
            } else {
                to = parent;
            }
        }
        steps
    }
}

/// What the equations are made from.
struct Equations<'a> {
    circuit: &'a Circuit,
    parts: &'a [Part],
    tree: &'a Tree,
}

/// Positions of each kind.
struct Places {
    tree_e: Range<usize>,
    tree_c: Range<usize>,
    tree_r: Range<usize>,
    tree_l: Range<usize>,
    link_c: Range<usize>,
    link_r: Range<usize>,
    link_l: Range<usize>,
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
        }
    }

    fn tree_part(&self, t: usize) -> &Part {
        &self.parts[self.tree.tree[t]]
    }

    fn link_part(&self, l: usize) -> &Part {
        &self.parts[self.tree.links[l].0]
    }

    fn singular(&self, part: &Part) -> DynamicsError {
        DynamicsError::Singular {
            element: self.circuit.branches[part.branch].name,
        }
    }

    fn mode(&self) -> Result<Mode, DynamicsError> {
        let places = self.places();
        let (capacitors, inductors) = self.circuit.state_branches();
        let states = capacitors.len() + inductors.len();
        let width = states + 1;
        // State number of each branch that has one.
        let mut state_of = vec![states; self.circuit.branches.len()];
        for (state, &branch) in capacitors.iter().chain(&inductors).enumerate() {
            state_of[branch] = state;
        }
        let mut tree_v = Rows::zeros(self.tree.tree.len(), width);
        let mut link_i = Rows::zeros(self.tree.links.len(), width);
        for t in places.tree_e.clone() {
            tree_v.row_mut(t)[states] = self.tree_part(t).value;
        }
        let mass_c = self.free_voltages(&places, &state_of, &mut tree_v)?;
        let flux = Flux::of(self, &places, &state_of, capacitors.len());
        flux.free_currents(self, &places, &state_of, &mut link_i)?;
        self.resistors(&places, &mut tree_v, &mut link_i)?;

        // Slopes of the free states, then of all.
        let mut slopes = Rows::zeros(states, width);
        let mut project = (!places.link_c.is_empty() || !places.tree_l.is_empty())
            .then(|| Rows::zeros(states, width));
        let mut drive = Rows::zeros(places.tree_c.len(), width);
        for l in places.link_r.start..places.link_l.end {
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
        for t in places.tree_l.clone() {
            let state = state_of[self.tree_part(t).branch];
            for (other, henry) in flux.row(state) {
                tree_v.add(t, slopes.row(other), henry);
            }
        }
        if let Some(project) = &mut project {
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
        let (voltage, current) = self.branches(&tree_v, &link_i);
        Ok(Mode {
            slopes,
            project,
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

    /// v = R i in the tree, i = v / R outside it.
    fn resistors(
        &self,
        places: &Places,
        tree_v: &mut Rows,
        link_i: &mut Rows,
    ) -> Result<(), DynamicsError> {
        for l in places.link_l.clone() {
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
        let conducts: Vec<bool> = (0..count)
            .map(|branch| self.parts.iter().any(|p| p.branch == branch))
            .collect();
        if conducts.contains(&false) {
            let nodes = node_count(self.parts);
            let routes = Routes::of(self.parts, &self.tree.tree, nodes);
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

/// The coils: their inductances, couplings and cut-sets.
struct Flux {
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
    fn of(equations: &Equations<'_>, places: &Places, state_of: &[usize], first: usize) -> Self {
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
    fn row(&self, state: usize) -> Vec<(usize, f64)> {
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
    fn free_currents(
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
    fn slopes(
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
