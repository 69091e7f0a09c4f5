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

/// The equations of one set of conducting switches, in the whole state with its constant.
#[derive(Debug, Clone, PartialEq)]
pub struct Mode {
    /// x' = A x; the last row is zero.
    pub a: DMatrix<f64>,
    /// The projection onto the states that this mode allows; none where it allows all.
    pub project: Option<DMatrix<f64>>,
    /// Row k: voltage of branch k.
    pub voltage: DMatrix<f64>,
    /// Row k: current of branch k.
    pub current: DMatrix<f64>,
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
    tree.equations(circuit, &parts)
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
    /// Parts in the tree.
    tree: Vec<usize>,
    /// Parts outside it.
    links: Vec<usize>,
    /// Entry (link, tree): sign of the tree part's voltage in the link's.
    path: DMatrix<f64>,
}

impl Tree {
    fn grow(circuit: &Circuit, parts: &[Part]) -> Result<Self, DynamicsError> {
        let nodes = parts.iter().map(|p| p.from.max(p.to)).max().unwrap_or(0) + 1;
        let mut group: Vec<usize> = (0..nodes).collect();
        let mut order: Vec<usize> = (0..parts.len()).collect();
        order.sort_by_key(|&k| parts[k].kind);
        let (mut tree, mut links) = (Vec::new(), Vec::new());
        for k in order {
            let (a, b) = (group[parts[k].from], group[parts[k].to]);
            if a == b {
                links.push(k);
            } else {
                for g in &mut group {
                    if *g == b {
                        *g = a;
                    }
                }
                tree.push(k);
            }
        }
        let mut path = DMatrix::zeros(links.len(), tree.len());
        for (row, &link) in links.iter().enumerate() {
            let steps = walk(parts, &tree, nodes, parts[link].from, parts[link].to);
            if parts[link].kind == Kind::Source {
                let mut elements = vec![circuit.branches[parts[link].branch].name];
                elements.extend(
                    steps
                        .iter()
                        .map(|&(t, _)| circuit.branches[parts[tree[t]].branch].name),
                );
                return Err(DynamicsError::SourceLoop { elements });
            }
            for (t, sign) in steps {
                path[(row, t)] = sign;
            }
        }
        Ok(Self { tree, links, path })
    }

    fn equations(&self, circuit: &Circuit, parts: &[Part]) -> Result<Mode, DynamicsError> {
        let (capacitors, inductors) = circuit.state_branches();
        let n = capacitors.len() + inductors.len();
        let state_of = |branch: usize| {
            capacitors
                .iter()
                .position(|&b| b == branch)
                .or_else(|| {
                    inductors
                        .iter()
                        .position(|&b| b == branch)
                        .map(|k| k + capacitors.len())
                })
                .unwrap_or(n)
        };
        let inductance = inductance_matrix(circuit, &inductors);
        let name = |part: usize| circuit.branches[parts[part].branch].name;
        let in_tree = |kind: Kind| -> Vec<usize> {
            (0..self.tree.len())
                .filter(|&t| parts[self.tree[t]].kind == kind)
                .collect()
        };
        let in_links = |kind: Kind| -> Vec<usize> {
            (0..self.links.len())
                .filter(|&l| parts[self.links[l]].kind == kind)
                .collect()
        };
        let (tree_e, tree_c, tree_r, tree_l) = (
            in_tree(Kind::Source),
            in_tree(Kind::Capacitor),
            in_tree(Kind::Resistor),
            in_tree(Kind::Inductor),
        );
        let (link_c, link_r, link_l) = (
            in_links(Kind::Capacitor),
            in_links(Kind::Resistor),
            in_links(Kind::Inductor),
        );
        // Free states: tree capacitors' voltages, link coils' currents; the last column is 1.
        let free = tree_c.len() + link_l.len();
        let row_of_state = |from_tree_c: usize| from_tree_c;
        let mut tree_v = DMatrix::<f64>::zeros(self.tree.len(), free + 1);
        let mut link_i = DMatrix::<f64>::zeros(self.links.len(), free + 1);
        for &t in &tree_e {
            tree_v[(t, free)] = parts[self.tree[t]].value;
        }
        for (k, &t) in tree_c.iter().enumerate() {
            tree_v[(t, row_of_state(k))] = 1.0;
        }
        for (k, &l) in link_l.iter().enumerate() {
            link_i[(l, tree_c.len() + k)] = 1.0;
        }
        // Resistors: v = R i in the tree, i = v / R outside it.
        let m = tree_r.len();
        let mut lhs = DMatrix::<f64>::identity(m, m);
        let mut rhs = DMatrix::<f64>::zeros(m, free + 1);
        for (row, &t) in tree_r.iter().enumerate() {
            let ohm = parts[self.tree[t]].value;
            for &l in &link_l {
                add_scaled(&mut rhs, row, &link_i, l, -ohm * self.path[(l, t)]);
            }
            for &l in &link_r {
                let through = ohm * self.path[(l, t)] / parts[self.links[l]].value;
                if through == 0.0 {
                    continue;
                }
                for (column, &other) in tree_r.iter().enumerate() {
                    lhs[(row, column)] += through * self.path[(l, other)];
                }
                for &other in tree_e.iter().chain(&tree_c) {
                    add_scaled(
                        &mut rhs,
                        row,
                        &tree_v,
                        other,
                        -through * self.path[(l, other)],
                    );
                }
            }
        }
        let solved = lhs
            .lu()
            .solve(&rhs)
            .ok_or_else(|| DynamicsError::Singular {
                element: name(self.tree[tree_r.first().copied().unwrap_or(0)]),
            })?;
        for (row, &t) in tree_r.iter().enumerate() {
            tree_v.set_row(t, &solved.row(row));
        }
        for &l in &link_r {
            for &t in tree_e.iter().chain(&tree_c).chain(&tree_r) {
                let scale = self.path[(l, t)] / parts[self.links[l]].value;
                if scale != 0.0 {
                    add_scaled(&mut link_i, l, &tree_v, t, scale);
                }
            }
        }
        // Masses and derivatives. `spread_c`, `spread_l`: every state from the free ones.
        let spread_c = DMatrix::from_fn(capacitors.len(), tree_c.len(), |state, k| {
            self.part_of_state(parts, capacitors[state])
                .map_or(0.0, |place| match place {
                    Place::Tree(t) => f64::from(u8::from(t == tree_c[k])),
                    Place::Link(l) => self.path[(l, tree_c[k])],
                })
        });
        let spread_l = DMatrix::from_fn(inductors.len(), link_l.len(), |state, k| {
            self.part_of_state(parts, inductors[state])
                .map_or(0.0, |place| match place {
                    Place::Link(l) => f64::from(u8::from(l == link_l[k])),
                    Place::Tree(t) => -self.path[(link_l[k], t)],
                })
        });
        let farads = DMatrix::from_diagonal(&nalgebra::DVector::from_iterator(
            capacitors.len(),
            capacitors
                .iter()
                .map(|&b| match circuit.branches[b].element {
                    Element::Capacitor { farad, .. } => farad,
                    _ => 0.0,
                }),
        ));
        let mass_c = spread_c.transpose() * &farads * &spread_c;
        let mass_l = spread_l.transpose() * &inductance * &spread_l;
        let mut drive_c = DMatrix::<f64>::zeros(tree_c.len(), free + 1);
        for (row, &t) in tree_c.iter().enumerate() {
            for &l in link_r.iter().chain(&link_l) {
                add_scaled(&mut drive_c, row, &link_i, l, -self.path[(l, t)]);
            }
        }
        let mut drive_l = DMatrix::<f64>::zeros(link_l.len(), free + 1);
        for (row, &l) in link_l.iter().enumerate() {
            for &t in tree_e.iter().chain(&tree_c).chain(&tree_r) {
                add_scaled(&mut drive_l, row, &tree_v, t, self.path[(l, t)]);
            }
        }
        let singular = |branches: &[usize]| DynamicsError::Singular {
            element: branches
                .first()
                .map_or("the circuit", |&b| circuit.branches[b].name),
        };
        let lu_c = mass_c.lu();
        let lu_l = mass_l.lu();
        let slope_c = lu_c.solve(&drive_c).ok_or_else(|| singular(&capacitors))?;
        let slope_l = lu_l.solve(&drive_l).ok_or_else(|| singular(&inductors))?;
        // From the free states to all (columns: free, then 1), and back with charge and flux kept.
        let mut expand = DMatrix::<f64>::zeros(n + 1, free + 1);
        expand
            .view_mut((0, 0), (capacitors.len(), tree_c.len()))
            .copy_from(&spread_c);
        expand
            .view_mut(
                (capacitors.len(), tree_c.len()),
                (inductors.len(), link_l.len()),
            )
            .copy_from(&spread_l);
        expand[(n, free)] = 1.0;
        for &l in &link_c {
            let state = state_of(parts[self.links[l]].branch);
            for &t in &tree_e {
                expand[(state, free)] += self.path[(l, t)] * parts[self.tree[t]].value;
            }
        }
        let mut gather = DMatrix::<f64>::zeros(free + 1, n + 1);
        gather[(free, n)] = 1.0;
        let charge = spread_c.transpose() * &farads;
        let offset = &charge * expand.view((0, free), (capacitors.len(), 1));
        let keep_c = lu_c.solve(&charge).ok_or_else(|| singular(&capacitors))?;
        let keep_offset = lu_c.solve(&offset).ok_or_else(|| singular(&capacitors))?;
        let keep_l = lu_l
            .solve(&(spread_l.transpose() * &inductance))
            .ok_or_else(|| singular(&inductors))?;
        gather
            .view_mut((0, 0), (tree_c.len(), capacitors.len()))
            .copy_from(&keep_c);
        gather
            .view_mut((0, n), (tree_c.len(), 1))
            .copy_from(&(-keep_offset));
        gather
            .view_mut(
                (tree_c.len(), capacitors.len()),
                (link_l.len(), inductors.len()),
            )
            .copy_from(&keep_l);
        let mut slope = DMatrix::<f64>::zeros(free + 1, free + 1);
        slope
            .view_mut((0, 0), (tree_c.len(), free + 1))
            .copy_from(&slope_c);
        slope
            .view_mut((tree_c.len(), 0), (link_l.len(), free + 1))
            .copy_from(&slope_l);
        // The remaining voltages and currents, then each branch as the sum of its parts.
        for &l in &link_c {
            let part = parts[self.links[l]];
            let state = state_of(part.branch);
            let rows = part.value * (expand.row(state) * &slope);
            link_i.set_row(l, &rows);
        }
        let all_slopes = &expand * &slope;
        let coil_v = &inductance * all_slopes.rows(capacitors.len(), inductors.len());
        for &t in &tree_l {
            let state = state_of(parts[self.tree[t]].branch) - capacitors.len();
            tree_v.set_row(t, &coil_v.row(state));
        }
        let tree_i = -(self.path.transpose() * &link_i);
        let link_v = &self.path * &tree_v;
        let count = circuit.branches.len();
        let mut voltage = DMatrix::<f64>::zeros(count, free + 1);
        let mut current = DMatrix::<f64>::zeros(count, free + 1);
        for (k, &part) in self.tree.iter().enumerate() {
            add_scaled(&mut voltage, parts[part].branch, &tree_v, k, 1.0);
            current.set_row(parts[part].branch, &tree_i.row(k));
        }
        for (k, &part) in self.links.iter().enumerate() {
            add_scaled(&mut voltage, parts[part].branch, &link_v, k, 1.0);
            current.set_row(parts[part].branch, &link_i.row(k));
        }
        self.open_branches(circuit, parts, &tree_v, &mut voltage);
        let whole = free == n;
        Ok(Mode {
            a: &expand * slope * &gather,
            project: if whole { None } else { Some(&expand * &gather) },
            voltage: voltage * &gather,
            current: current * &gather,
        })
    }

    /// Voltages of branches that do not conduct, along the tree.
    fn open_branches(
        &self,
        circuit: &Circuit,
        parts: &[Part],
        tree_v: &DMatrix<f64>,
        voltage: &mut DMatrix<f64>,
    ) {
        let nodes = parts.iter().map(|p| p.from.max(p.to)).max().unwrap_or(0) + 1;
        for (number, branch) in circuit.branches.iter().enumerate() {
            let conducts = parts.iter().any(|p| p.branch == number);
            if conducts || branch.from >= nodes || branch.to >= nodes {
                continue;
            }
            for (t, sign) in walk(parts, &self.tree, nodes, branch.from, branch.to) {
                add_scaled(voltage, number, tree_v, t, sign);
            }
        }
    }

    fn part_of_state(&self, parts: &[Part], branch: usize) -> Option<Place> {
        let is = |&part: &usize| {
            parts[part].branch == branch
                && matches!(parts[part].kind, Kind::Capacitor | Kind::Inductor)
        };
        self.tree
            .iter()
            .position(&is)
            .map(Place::Tree)
            .or_else(|| self.links.iter().position(is).map(Place::Link))
    }
}

enum Place {
    Tree(usize),
    Link(usize),
}

fn inductance_matrix(circuit: &Circuit, inductors: &[usize]) -> DMatrix<f64> {
    let mut matrix = DMatrix::zeros(inductors.len(), inductors.len());
    for (k, &branch) in inductors.iter().enumerate() {
        if let Element::Inductor { henry, .. } = circuit.branches[branch].element {
            matrix[(k, k)] = henry;
        }
    }
    for coupling in &circuit.couplings {
        let place = |branch: usize| inductors.iter().position(|&b| b == branch);
        if let (Some(a), Some(b)) = (place(coupling.first), place(coupling.second)) {
            matrix[(a, b)] = coupling.mutual_henry;
            matrix[(b, a)] = coupling.mutual_henry;
        }
    }
    matrix
}

fn add_scaled(
    target: &mut DMatrix<f64>,
    row: usize,
    source: &DMatrix<f64>,
    from: usize,
    scale: f64,
) {
    if scale != 0.0 {
        for column in 0..target.ncols() {
            target[(row, column)] += scale * source[(from, column)];
        }
    }
}

/// Tree parts (as positions in `tree`) on the way between two nodes, each with the sign of
/// its voltage in the voltage of `from` against `to`.
fn walk(parts: &[Part], tree: &[usize], nodes: usize, from: usize, to: usize) -> Vec<(usize, f64)> {
    let mut came: Vec<Option<(usize, usize, f64)>> = vec![None; nodes];
    let mut queue = vec![from];
    let mut head = 0;
    while head < queue.len() {
        let node = queue[head];
        head += 1;
        for (t, &part) in tree.iter().enumerate() {
            let part = parts[part];
            let (other, sign) = if part.from == node {
                (part.to, 1.0)
            } else if part.to == node {
                (part.from, -1.0)
            } else {
                continue;
            };
            if other != from && came[other].is_none() {
                came[other] = Some((node, t, sign));
                queue.push(other);
            }
        }
    }
    let mut steps = Vec::new();
    let mut node = to;
    while node != from {
        let Some((previous, t, sign)) = came[node] else {
            break;
        };
        steps.push((t, sign));
        node = previous;
    }
    steps
}
