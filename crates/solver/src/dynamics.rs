//! From a circuit and the set of conducting switches to x' = A x.
//!
//! The state is every capacitor's voltage, then every coil's current, then the constant 1
//! (so that sources are a column of A). Where capacitors form a loop, coils a cut-set, or
//! an ideal switch shorts a capacitor, fewer of them are free: the normal tree (Bryant,
//! "The order of complexity of electrical networks", Proc. IEE C 106, 1959; value from
//! memory) tells which, `project` carries a state over to the nearest one the mode
//! allows with charge and flux conserved, and A keeps it there.

mod equations;
mod flux;
mod rows;
mod tree;

pub use rows::Rows;

use crate::circuit::{Circuit, Element};
use equations::Equations;
use std::fmt;
use tree::Tree;

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

/// The equations of one set of conducting switches. Every row is in the whole state with
/// its constant last.
#[derive(Debug, Clone, PartialEq)]
pub struct Mode {
    /// Row k: slope of state k.
    pub slopes: Rows,
    /// Row k: state k projected onto what this mode allows; none where it allows all.
    pub project: Option<Rows>,
    /// Row k: state k as it is when the clock enters this mode; none where nothing changes.
    pub latch: Option<Rows>,
    /// Row k: how much every state's voltage moves for a coulomb moved into capacitor k of
    /// [`Circuit::varying`] beyond what its typical capacitance holds.
    pub lift: Rows,
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
    /// A current that states determine: a falling one, or a follower's.
    Fall,
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
    let mut mode = Equations {
        circuit,
        parts: &parts,
        tree: &tree,
    }
    .mode()?;
    mode.latch = latch(circuit, conducting)?;
    Ok(mode)
}

/// What the falling currents start from when the clock enters a mode: the current that their
/// switch carried while closed, or nothing.
fn latch(circuit: &Circuit, conducting: u32) -> Result<Option<Rows>, DynamicsError> {
    let states = circuit.state_count();
    let falls = circuit.falls().count();
    if falls == 0 {
        return Ok(None);
    }
    let mut latch = Rows::zeros(states, states + 1);
    let first = states - 2 * falls;
    (0..first).for_each(|k| latch.row_mut(k)[k] = 1.0);
    let switching = circuit.switching_branches();
    let bit = |branch: usize| {
        switching
            .iter()
            .position(|&b| b == branch)
            .map_or(0, |k| 1 << k)
    };
    for (k, branch) in circuit.falls().enumerate() {
        let Element::Fall { of, second } = circuit.branches[branch].element else {
            continue;
        };
        if conducting & bit(branch) != 0 && bit(of) != 0 {
            let closed = mode(circuit, conducting & !bit(branch) | bit(of))?;
            latch.add(first + 2 * k, closed.current.row(of), 1.0);
            latch.add(first + 2 * k + 1, closed.current.row(of), -1.0 / second);
        }
    }
    Ok(Some(latch))
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
            Element::Varying { law, farad } => {
                let law = circuit.laws.get(law).map_or(f64::NAN, |_| law as f64);
                check(law, 0.0)?;
                (Some(Kind::Capacitor), check(farad, f64::MIN_POSITIVE)?, 0.0)
            }
            Element::Source { volt } => (Some(Kind::Source), check(volt, f64::MIN)?, 0.0),
            Element::Switch { ohm } | Element::Channel { ohm } => (None, 0.0, check(ohm, 0.0)?),
            Element::Follower { siemens, .. } => {
                (Some(Kind::Fall), check(siemens, f64::MIN_POSITIVE)?, 0.0)
            }
            Element::Fall { second, .. } => {
                (Some(Kind::Fall), check(second, f64::MIN_POSITIVE)?, 0.0)
            }
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
