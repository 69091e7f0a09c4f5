//! The same circuit at one frequency: impedances, two-port parameters, every voltage and
//! current of a driven network.
//!
//! Modified nodal analysis (C.-W. Ho, A.E. Ruehli, P.A. Brennan, IEEE Trans. Circuits Syst.
//! CAS-22(6), 1975; from memory): node voltages, and the currents of the branches that are
//! nearer to a short than to an open, so that neither a short nor a blocking capacitor costs
//! digits. Complex amplitudes with time factor e^(+jwt); SI units.
//!
//! Direct sources are shorts. Switches, diodes and falling currents are left out: the port at
//! which they meet the rest is where it is driven.

mod elimination;
mod system;
mod two_port;

pub use two_port::TwoPort;

use crate::circuit::{Circuit, Node};
use num_complex::Complex64;
use std::fmt;
use system::{Form, System};

/// Most unknowns that a system may have; its time goes with the cube.
pub const MOST_UNKNOWNS: usize = 256;
/// Resistance that voltages and currents are scaled by inside, ohms: branches below it are
/// solved by their current.
const SCALE_OHM: f64 = 50.0;

/// Why a network has no answer at a frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum AcError {
    /// Not a frequency above zero.
    Frequency {
        /// Hertz.
        hz: f64,
    },
    /// A value that no passive part has (negative or not finite).
    Value {
        /// Branch number.
        branch: usize,
        /// The value, SI units.
        value: f64,
    },
    /// A coupling of something else than two different coils, or above the geometric mean of
    /// the two.
    Coupling {
        /// Number of the coupling.
        coupling: usize,
        /// Its mutual inductance, henries.
        mutual_henry: f64,
        /// Most that the coils allow, henries; 0 where there are none.
        most_henry: f64,
    },
    /// Not a resistance above zero.
    Reference {
        /// Ohms.
        ohm: f64,
    },
    /// Ground is no port.
    Port {
        /// Node number.
        node: Node,
    },
    /// More unknowns than [`MOST_UNKNOWNS`].
    Size {
        /// How many.
        unknowns: usize,
    },
    /// No finite answer: a current into a node without a path to ground (or a lossless
    /// parallel resonance), a voltage across a short.
    Unbounded {
        /// What is left of the largest pivot, relative.
        pivot: f64,
    },
}

impl fmt::Display for AcError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Frequency { hz } => write!(f, "{hz} Hz is not a frequency above zero"),
            Self::Value { branch, value } => {
                write!(
                    f,
                    "branch {branch} has the value {value}, which no passive part has"
                )
            }
            Self::Coupling {
                coupling,
                mutual_henry,
                most_henry,
            } => write!(
                f,
                "coupling {coupling} of {mutual_henry} H is beyond the {most_henry} H that its coils allow"
            ),
            Self::Reference { ohm } => write!(f, "{ohm} ohm is not a reference above zero"),
            Self::Port { node } => write!(f, "node {node} cannot be a port"),
            Self::Size { unknowns } => write!(
                f,
                "the network has {unknowns} unknowns; at most {MOST_UNKNOWNS} are solved"
            ),
            Self::Unbounded { pivot } => write!(
                f,
                "the network has no finite answer here (pivot {pivot:.1e}): an open node or an exact resonance"
            ),
        }
    }
}

impl std::error::Error for AcError {}

/// What drives a node against ground.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Drive {
    /// A current into the node, amperes.
    Current(Complex64),
    /// A voltage of the node against ground, volts.
    Voltage(Complex64),
}

/// A driven network: the complex amplitude of everything.
#[derive(Debug, Clone, PartialEq)]
pub struct Driven {
    nodes: Vec<Node>,
    voltages: Vec<Complex64>,
    currents: Vec<Complex64>,
    into: Complex64,
}

impl Driven {
    /// Voltage of a node against ground, volts; 0 for ground and for nodes that do not exist.
    pub fn voltage(&self, node: Node) -> Complex64 {
        self.nodes
            .binary_search(&node)
            .map_or(Complex64::ZERO, |k| self.voltages[k])
    }

    /// Current of a branch from its first node to its second, amperes; 0 for a branch that
    /// does not exist.
    pub fn current(&self, branch: usize) -> Complex64 {
        self.currents.get(branch).copied().unwrap_or_default()
    }

    /// Current that the drive sends into the network, amperes.
    pub fn drive_current(&self) -> Complex64 {
        self.into
    }
}

/// Driving-point impedance of a node against ground at `hz`, ohms.
///
/// # Errors
/// See [`AcError`]; an open circuit is [`AcError::Unbounded`].
pub fn impedance(circuit: &Circuit, node: Node, hz: f64) -> Result<Complex64, AcError> {
    drive(circuit, node, Drive::Current(Complex64::ONE), hz).map(|driven| driven.voltage(node))
}

/// Every voltage and current at `hz` while one node is driven.
///
/// # Errors
/// See [`AcError`].
pub fn drive(circuit: &Circuit, node: Node, drive: Drive, hz: f64) -> Result<Driven, AcError> {
    let voltage = match drive {
        Drive::Current(_) => None,
        Drive::Voltage(_) => Some(node),
    };
    let mut system = System::new(circuit, &[node], voltage, 1, hz)?;
    let (right, at) = (system.unknowns, system.row(node));
    let at = at.ok_or(AcError::Port { node })?;
    match drive {
        Drive::Current(ampere) => system.matrix.add(at, right, ampere * SCALE_OHM),
        Drive::Voltage(volt) => system.matrix.add(right - 1, right, volt),
    }
    let solution = system.solve()?;
    let x = &solution[0];
    let count = system.nodes.len();
    let across = |from: Node, to: Node| {
        let v = |n: Node| system.row(n).map_or(Complex64::ZERO, |k| x[k]);
        v(from) - v(to)
    };
    let currents = circuit.branches.iter().zip(&system.forms);
    let currents = currents.map(|(branch, form)| match *form {
        Form::Admittance(y) => y * across(branch.from, branch.to) / SCALE_OHM,
        Form::Current { unknown, .. } => x[unknown] / SCALE_OHM,
    });
    Ok(Driven {
        currents: currents.collect(),
        voltages: x[..count].to_vec(),
        into: match drive {
            Drive::Current(ampere) => ampere,
            Drive::Voltage(_) => -x[right - 1] / SCALE_OHM,
        },
        nodes: system.nodes,
    })
}

/// Scattering parameters at `hz` of the two-port between two nodes and ground, each port
/// closed with its real reference resistance (power waves, K. Kurokawa, IEEE Trans. MTT
/// 13(2), 1965; from memory).
///
/// # Errors
/// See [`AcError`].
pub fn two_port(
    circuit: &Circuit,
    ports: [Node; 2],
    reference_ohm: [f64; 2],
    hz: f64,
) -> Result<TwoPort, AcError> {
    if let Some(&ohm) = reference_ohm.iter().find(|r| !(r.is_finite() && **r > 0.0)) {
        return Err(AcError::Reference { ohm });
    }
    let mut system = System::new(circuit, &ports, None, 2, hz)?;
    let row = |node| system.row(node).ok_or(AcError::Port { node });
    let rows = [row(ports[0])?, row(ports[1])?];
    let root = reference_ohm.map(f64::sqrt);
    for j in 0..2 {
        let y = SCALE_OHM / reference_ohm[j];
        system.matrix.add(rows[j], rows[j], y.into());
        let column = system.unknowns + j;
        system
            .matrix
            .add(rows[j], column, (2.0 * SCALE_OHM / root[j]).into());
    }
    let solution = system.solve()?;
    let entry =
        |i: usize, j: usize| solution[j][rows[i]] / root[i] - if i == j { 1.0 } else { 0.0 };
    Ok(TwoPort {
        s: [[entry(0, 0), entry(0, 1)], [entry(1, 0), entry(1, 1)]],
        reference_ohm,
    })
}
