//! The one description of what is built: nodes, and branches between them.
//!
//! Everything that needs the stage takes it from here; nothing keeps a second copy of
//! the topology. A branch's current flows from its first node to its second, and its
//! voltage is that of the first node against the second.

use crate::charge::ChargeLaw;

/// A node's number; 0 is ground.
pub type Node = usize;

/// What a branch is made of. SI units.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Element {
    /// A resistance, ohms (0 is a short).
    Resistor {
        /// Ohms.
        ohm: f64,
    },
    /// A coil with its series resistance.
    Inductor {
        /// Henries.
        henry: f64,
        /// Ohms in series.
        ohm: f64,
    },
    /// A capacitor with its series resistance.
    Capacitor {
        /// Farads.
        farad: f64,
        /// Ohms in series.
        ohm: f64,
    },
    /// A capacitor whose capacitance depends on its voltage.
    Varying {
        /// Number of its charge law in [`Circuit::laws`].
        law: usize,
        /// A typical capacitance of it, farads: where the search for the steady state starts,
        /// and the scale of its charge.
        farad: f64,
    },
    /// A direct voltage.
    Source {
        /// Volts, first node against second.
        volt: f64,
    },
    /// A switch, opened and closed by the clock; 0 ohm is an ideal one.
    Switch {
        /// On-resistance, ohms.
        ohm: f64,
    },
    /// What a switch beside it still carries while it opens: its current at that instant,
    /// falling to zero in a straight line.
    Fall {
        /// Branch number of the switch.
        of: usize,
        /// Time to zero, seconds.
        second: f64,
    },
    /// A diode whose cathode is the first node: it conducts when the branch voltage is
    /// below `-forward_v`, and then the voltage is `-forward_v - ohm * forward current`.
    Diode {
        /// Forward voltage, volts.
        forward_v: f64,
        /// Slope resistance, ohms (0 for none).
        ohm: f64,
    },
    /// The channel of a switch whose gate stands at a fixed voltage, wide open: a resistance.
    /// Driven by the [`Element::Follower`] beside it.
    Channel {
        /// On-resistance, ohms.
        ohm: f64,
    },
    /// The same channel while its gate holds the lower node: the current that the gate lets
    /// through, `siemens` for each volt that the lower node lies below the clamp. Nothing flows
    /// while that is above it, and the channel's resistance limits it.
    Follower {
        /// Amperes per volt.
        siemens: f64,
        /// Branch number of a capacitor whose voltage is that of the lower node.
        node: usize,
        /// Gate supply less threshold, volts.
        clamp_v: f64,
        /// Branch number of the channel.
        channel: usize,
    },
}

impl Element {
    /// Whether the element conducts only some of the time.
    pub fn is_switching(&self) -> bool {
        matches!(
            self,
            Self::Switch { .. }
                | Self::Fall { .. }
                | Self::Diode { .. }
                | Self::Channel { .. }
                | Self::Follower { .. }
        )
    }
}

/// One element between two nodes.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Branch {
    /// What an engineer calls it.
    pub name: &'static str,
    /// Where its current enters.
    pub from: Node,
    /// Where its current leaves.
    pub to: Node,
    /// What it is.
    pub element: Element,
}

/// Mutual inductance between two coils, henries; positive when currents entering both
/// first nodes aid each other.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Coupling {
    /// Branch number of one coil.
    pub first: usize,
    /// Branch number of the other.
    pub second: usize,
    /// Henries.
    pub mutual_henry: f64,
}

/// What is built.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Circuit {
    /// Every element.
    pub branches: Vec<Branch>,
    /// Every pair of coupled coils.
    pub couplings: Vec<Coupling>,
    /// Charge laws of the capacitors that have one.
    pub laws: Vec<ChargeLaw>,
}

impl Circuit {
    /// Adds a branch and gives its number.
    pub fn add(&mut self, name: &'static str, from: Node, to: Node, element: Element) -> usize {
        self.branches.push(Branch {
            name,
            from,
            to,
            element,
        });
        self.branches.len() - 1
    }

    /// Numbers of the branches that carry a state: capacitors, then coils.
    pub fn state_branches(&self) -> (Vec<usize>, Vec<usize>) {
        let pick = |want: fn(&Element) -> bool| {
            (0..self.branches.len())
                .filter(|&k| want(&self.branches[k].element))
                .collect()
        };
        (
            pick(|e| matches!(e, Element::Capacitor { .. } | Element::Varying { .. })),
            pick(|e| matches!(e, Element::Inductor { .. })),
        )
    }

    /// Numbers of the branches with a falling current; each has two states after those of the
    /// capacitors and coils, the current and its slope.
    pub fn falls(&self) -> impl Iterator<Item = usize> + '_ {
        (0..self.branches.len())
            .filter(|&k| matches!(self.branches[k].element, Element::Fall { .. }))
    }

    /// Numbers of the branches whose capacitance depends on their voltage.
    pub fn varying(&self) -> impl Iterator<Item = usize> + '_ {
        (0..self.branches.len())
            .filter(|&k| matches!(self.branches[k].element, Element::Varying { .. }))
    }

    /// Number of states.
    pub fn state_count(&self) -> usize {
        let (capacitors, inductors) = self.state_branches();
        capacitors.len() + inductors.len() + 2 * self.falls().count()
    }

    /// Numbers of the branches that switch: bit k of a conduction set is entry k.
    pub fn switching_branches(&self) -> Vec<usize> {
        (0..self.branches.len())
            .filter(|&k| self.branches[k].element.is_switching())
            .collect()
    }
}
