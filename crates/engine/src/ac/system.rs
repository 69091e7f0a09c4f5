//! The equations of a network at one frequency.

use super::elimination::Augmented;
use super::{AcError, MOST_UNKNOWNS, SCALE_OHM};
use crate::circuit::{Circuit, Element, Node};
use num_complex::Complex64;
use std::f64::consts::TAU;

/// How a branch enters the equations, scaled by [`SCALE_OHM`].
#[derive(Clone, Copy)]
pub(super) enum Form {
    /// By its admittance.
    Admittance(Complex64),
    /// By its current, an unknown of its own.
    Current { unknown: usize, z: Complex64 },
}

/// The equations of a network at one frequency.
pub(super) struct System {
    /// Numbers of the nodes but ground, ascending; row k is the current balance of the k-th.
    pub(super) nodes: Vec<Node>,
    pub(super) forms: Vec<Form>,
    pub(super) unknowns: usize,
    pub(super) matrix: Augmented,
}

impl System {
    /// `extra` nodes exist besides those of the branches; a `voltage` source at a node gets the
    /// last unknown.
    pub(super) fn new(
        circuit: &Circuit,
        extra: &[Node],
        voltage: Option<Node>,
        right_sides: usize,
        hz: f64,
    ) -> Result<Self, AcError> {
        if !(hz.is_finite() && hz > 0.0) {
            return Err(AcError::Frequency { hz });
        }
        let omega = TAU * hz;
        let ends = circuit.branches.iter().flat_map(|b| [b.from, b.to]);
        let mut nodes: Vec<Node> = ends
            .chain(extra.iter().copied())
            .filter(|&n| n != 0)
            .collect();
        nodes.sort_unstable();
        nodes.dedup();

        let coupled = |k| {
            circuit
                .couplings
                .iter()
                .any(|c| c.first == k || c.second == k)
        };
        let mut unknowns = nodes.len();
        let mut forms = Vec::with_capacity(circuit.branches.len());
        for (number, branch) in circuit.branches.iter().enumerate() {
            let z = impedance_of(&branch.element, number, omega)?;
            forms.push(match z {
                None => Form::Admittance(Complex64::ZERO),
                Some(z) if z.norm_sqr() > SCALE_OHM * SCALE_OHM && !coupled(number) => {
                    Form::Admittance(SCALE_OHM / z)
                }
                Some(z) => {
                    unknowns += 1;
                    Form::Current {
                        unknown: unknowns - 1,
                        z: z / SCALE_OHM,
                    }
                }
            });
        }
        unknowns += usize::from(voltage.is_some());
        if unknowns > MOST_UNKNOWNS {
            return Err(AcError::Size { unknowns });
        }
        let mut system = Self {
            nodes,
            matrix: Augmented::new(unknowns, right_sides),
            forms,
            unknowns,
        };
        for (number, branch) in circuit.branches.iter().enumerate() {
            system.stamp(number, branch.from, branch.to);
        }
        system.couple(circuit, omega)?;
        if let Some(row) = voltage.and_then(|node| system.row(node)) {
            system.matrix.add(row, unknowns - 1, Complex64::ONE);
            system.matrix.add(unknowns - 1, row, Complex64::ONE);
        }
        Ok(system)
    }

    pub(super) fn row(&self, node: Node) -> Option<usize> {
        self.nodes.binary_search(&node).ok()
    }

    fn stamp(&mut self, number: usize, from: Node, to: Node) {
        let ends = [(self.row(from), 1.0), (self.row(to), -1.0)];
        let ends = ends.iter().filter_map(|&(row, sign)| Some((row?, sign)));
        match self.forms[number] {
            Form::Admittance(y) => {
                for (row, sign) in ends.clone() {
                    for (column, other) in ends.clone() {
                        self.matrix.add(row, column, y * (sign * other));
                    }
                }
            }
            Form::Current { unknown, z } => {
                for (row, sign) in ends {
                    self.matrix.add(row, unknown, sign.into());
                    self.matrix.add(unknown, row, sign.into());
                }
                self.matrix.add(unknown, unknown, -z);
            }
        }
    }

    fn couple(&mut self, circuit: &Circuit, omega: f64) -> Result<(), AcError> {
        for (coupling, c) in circuit.couplings.iter().enumerate() {
            let henry = |k: usize| match circuit.branches.get(k)?.element {
                Element::Inductor { henry, .. } => Some(henry),
                _ => None,
            };
            let most_henry = match (henry(c.first), henry(c.second)) {
                (Some(a), Some(b)) if c.first != c.second => a.sqrt() * b.sqrt(),
                _ => 0.0,
            };
            // A coupling of exactly 1 is itself a rounded product.
            let within = c.mutual_henry.abs() <= most_henry * (1.0 + 1e-12);
            match (self.forms.get(c.first), self.forms.get(c.second)) {
                (
                    Some(&Form::Current { unknown: a, .. }),
                    Some(&Form::Current { unknown: b, .. }),
                ) if within && a != b => {
                    let z = Complex64::new(0.0, omega * c.mutual_henry / SCALE_OHM);
                    self.matrix.add(a, b, -z);
                    self.matrix.add(b, a, -z);
                }
                _ => {
                    return Err(AcError::Coupling {
                        coupling,
                        mutual_henry: c.mutual_henry,
                        most_henry,
                    });
                }
            }
        }
        Ok(())
    }

    pub(super) fn solve(&mut self) -> Result<Vec<Vec<Complex64>>, AcError> {
        self.matrix
            .solve()
            .map_err(|pivot| AcError::Unbounded { pivot })
    }
}

/// Impedance of an element, ohms; none for an open.
fn impedance_of(
    element: &Element,
    branch: usize,
    omega: f64,
) -> Result<Option<Complex64>, AcError> {
    let passive = |value: f64| {
        if value.is_finite() && value >= 0.0 {
            Ok(value)
        } else {
            Err(AcError::Value { branch, value })
        }
    };
    let z = match *element {
        Element::Resistor { ohm } => Complex64::new(passive(ohm)?, 0.0),
        Element::Inductor { henry, ohm } => Complex64::new(passive(ohm)?, omega * passive(henry)?),
        Element::Capacitor { farad, ohm } => {
            let b = omega * passive(farad)?;
            passive(ohm)?;
            // Too small for a reciprocal is as open as none.
            if !(1.0 / b).is_finite() {
                return Ok(None);
            }
            Complex64::new(ohm, -1.0 / b)
        }
        Element::Source { .. } => Complex64::ZERO,
        // A varying capacitance at its typical value.
        Element::Varying { farad, .. } => {
            return impedance_of(&Element::Capacitor { farad, ohm: 0.0 }, branch, omega);
        }
        Element::Switch { .. }
        | Element::Fall { .. }
        | Element::Diode { .. }
        | Element::Channel { .. }
        | Element::Follower { .. } => return Ok(None),
    };
    if z.re.is_finite() && z.im.is_finite() {
        Ok(Some(z))
    } else {
        Err(AcError::Value {
            branch,
            value: z.im,
        })
    }
}
