//! Networks between the stage and what it drives: matching sections and harmonic filters,
//! as parts in a row that become branches of a circuit.
//!
//! [`matching`] finds the parts of a match, [`filter`] those of a low-pass ladder; both give
//! [`Rung`]s from the stage's side to the load's, which [`build`] puts between two nodes.

pub mod filter;
pub mod matching;

use crate::ac::{self, AcError, TwoPort};
use crate::circuit::{Circuit, Element, Node};
use crate::stage::Part;
use num_complex::Complex64;
use std::f64::consts::TAU;

/// Where a part of a ladder stands.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Place {
    /// In the line.
    Series,
    /// From the line to ground.
    Shunt,
}

impl Place {
    /// The other one.
    pub fn other(self) -> Self {
        match self {
            Self::Series => Self::Shunt,
            Self::Shunt => Self::Series,
        }
    }
}

/// What a rung is made of. Henries and farads, each with its series resistance in ohms.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Parts {
    /// One coil.
    Coil(Part),
    /// One capacitor.
    Capacitor(Part),
    /// Coil and capacitor in a row: a short at their resonance.
    SeriesTrap {
        /// The coil.
        coil: Part,
        /// The capacitor.
        capacitor: Part,
    },
    /// Coil and capacitor beside each other: an open at their resonance.
    ParallelTrap {
        /// The coil.
        coil: Part,
        /// The capacitor.
        capacitor: Part,
    },
}

/// One place of a ladder and what stands there.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rung {
    /// In the line or to ground.
    pub place: Place,
    /// What it is made of.
    pub parts: Parts,
}

/// Quality of the parts that a network is made of; none is lossless.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Quality {
    /// Q of every coil at the carrier.
    pub coil_q: Option<f64>,
    /// Q of every capacitor at the carrier.
    pub capacitor_q: Option<f64>,
}

impl Quality {
    /// Series resistance over reactance of a part with reactance `x`.
    fn loss(&self, x: f64) -> f64 {
        let q = if x > 0.0 {
            self.coil_q
        } else {
            self.capacitor_q
        };
        q.map_or(0.0, |q| 1.0 / q)
    }

    /// Impedance of a part with reactance `x`, ohms.
    fn impedance(&self, x: f64) -> Complex64 {
        Complex64::new(x.abs() * self.loss(x), x)
    }

    /// The coil or capacitor of reactance `x` at an angular frequency.
    fn part(&self, x: f64, omega: f64) -> Parts {
        let esr_ohm = self.impedance(x).re;
        if x > 0.0 {
            let value = x / omega;
            Parts::Coil(Part { value, esr_ohm })
        } else {
            let value = -1.0 / (omega * x);
            Parts::Capacitor(Part { value, esr_ohm })
        }
    }

    /// The first quality that is not above zero.
    fn wrong(&self) -> Option<f64> {
        [self.coil_q, self.capacitor_q]
            .into_iter()
            .flatten()
            .find(|&q| !above_zero(q))
    }
}

fn above_zero(value: f64) -> bool {
    value.is_finite() && value > 0.0
}

/// A ladder of reactances at one frequency before it is made of parts: what a series place
/// holds in ohms, what a shunt place holds in siemens; positive is what a low-pass has there.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Reactance {
    place: Place,
    value: f64,
}

impl Reactance {
    /// Reactance of the part, ohms; none where the place stays empty.
    fn reactance(&self) -> Option<f64> {
        match self.place {
            _ if self.value == 0.0 => None,
            Place::Series => Some(self.value),
            Place::Shunt => Some(-1.0 / self.value),
        }
    }

    /// Impedance seen into the place with `load` behind it, ohms.
    fn seen(&self, load: Complex64, quality: &Quality) -> Complex64 {
        let Some(x) = self.reactance() else {
            return load;
        };
        let z = quality.impedance(x);
        match self.place {
            Place::Series => load + z,
            Place::Shunt => load * z / (load + z),
        }
    }

    fn rung(&self, quality: &Quality, omega: f64) -> Option<Rung> {
        let parts = quality.part(self.reactance()?, omega);
        Some(Rung {
            place: self.place,
            parts,
        })
    }
}

/// Puts a ladder between two nodes of a circuit, with new nodes where it needs them; without
/// anything in the line the two are joined by a short.
pub fn build(rungs: &[Rung], circuit: &mut Circuit, from: Node, to: Node) {
    let mut used: Vec<Node> = circuit
        .branches
        .iter()
        .flat_map(|b| [b.from, b.to])
        .collect();
    used.extend([0, from, to]);
    let mut fresh = move || {
        let free = (1..Node::MAX).find(|n| !used.contains(n)).unwrap_or(0);
        used.push(free);
        free
    };
    let mut left = rungs.iter().filter(|r| r.place == Place::Series).count();
    if left == 0 {
        circuit.add("link", from, to, Element::Resistor { ohm: 0.0 });
    }
    let mut here = from;
    for rung in rungs {
        let end = match rung.place {
            Place::Shunt => 0,
            Place::Series => {
                left -= 1;
                if left == 0 { to } else { fresh() }
            }
        };
        let coil = |p: Part| Element::Inductor {
            henry: p.value,
            ohm: p.esr_ohm,
        };
        let capacitor = |p: Part| Element::Capacitor {
            farad: p.value,
            ohm: p.esr_ohm,
        };
        match rung.parts {
            Parts::Coil(p) => {
                circuit.add("network coil", here, end, coil(p));
            }
            Parts::Capacitor(p) => {
                circuit.add("network capacitor", here, end, capacitor(p));
            }
            Parts::SeriesTrap {
                coil: l,
                capacitor: c,
            } => {
                let between = fresh();
                circuit.add("trap coil", here, between, coil(l));
                circuit.add("trap capacitor", between, end, capacitor(c));
            }
            Parts::ParallelTrap {
                coil: l,
                capacitor: c,
            } => {
                circuit.add("trap coil", here, end, coil(l));
                circuit.add("trap capacitor", here, end, capacitor(c));
            }
        }
        if rung.place == Place::Series {
            here = end;
        }
    }
}

/// Scattering parameters of a ladder at `hz` between two real resistances, ohms.
///
/// # Errors
/// See [`AcError`].
pub fn two_port(rungs: &[Rung], reference_ohm: [f64; 2], hz: f64) -> Result<TwoPort, AcError> {
    let (input, output) = (1, 2);
    let mut circuit = Circuit::default();
    build(rungs, &mut circuit, input, output);
    ac::two_port(&circuit, [input, output], reference_ohm, hz)
}

fn omega_of(hz: f64) -> f64 {
    TAU * hz
}
