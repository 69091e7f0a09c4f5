//! What watches the elements that switch by themselves: a row that is positive while nothing
//! changes, and the switching bits that flip when it falls through zero.

use crate::circuit::{Circuit, Element};
use crate::dynamics::Mode;

/// One condition under which a mode stays as it is.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Guard {
    /// In the whole state, its constant last.
    pub(super) row: Vec<f64>,
    /// Bits of the conduction set that change.
    pub(super) flips: u32,
}

/// Bits of the elements that switch by themselves.
pub(super) fn own_bits(circuit: &Circuit) -> u32 {
    let by_itself = |e: &Element| {
        matches!(
            e,
            Element::Diode { .. } | Element::Channel { .. } | Element::Follower { .. }
        )
    };
    circuit
        .switching_branches()
        .iter()
        .enumerate()
        .filter(|&(_, &branch)| by_itself(&circuit.branches[branch].element))
        .fold(0, |bits, (k, _)| bits | 1 << k)
}

/// The guards of one mode.
pub(super) fn of(circuit: &Circuit, mode: &Mode, conducting: u32) -> Vec<Guard> {
    let switching = circuit.switching_branches();
    let bit = |branch: usize| {
        switching
            .iter()
            .position(|&b| b == branch)
            .map_or(0, |k| 1u32 << k)
    };
    let sum = |parts: &[(&[f64], f64)], constant: f64| {
        let mut row = vec![0.0; mode.voltage.width()];
        for (part, scale) in parts {
            row.iter_mut()
                .zip(*part)
                .for_each(|(to, x)| *to += scale * x);
        }
        if let Some(last) = row.last_mut() {
            *last += constant;
        }
        row
    };
    let mut guards = Vec::new();
    for &branch in &switching {
        let own = bit(branch);
        let on = conducting & own != 0;
        let voltage = mode.voltage.row(branch);
        match circuit.branches[branch].element {
            Element::Diode { forward_v, .. } => guards.push(Guard {
                row: if on {
                    sum(&[(mode.current.row(branch), -1.0)], 0.0)
                } else {
                    sum(&[(voltage, 1.0)], forward_v)
                },
                flips: own,
            }),
            Element::Follower {
                siemens,
                node,
                clamp_v,
                channel,
            } => {
                let Element::Channel { ohm } = circuit.branches[channel].element else {
                    continue;
                };
                let through = bit(channel);
                let node = mode.voltage.row(node);
                // Of the two currents the smaller one flows.
                let ratio = siemens * ohm;
                let spare = |sign: f64| {
                    sum(
                        &[(node, -sign * ratio), (voltage, -sign)],
                        sign * ratio * clamp_v,
                    )
                };
                if conducting & through != 0 {
                    guards.push(Guard {
                        row: spare(1.0),
                        flips: own | through,
                    });
                } else if on {
                    guards.push(Guard {
                        row: sum(&[(node, -1.0)], clamp_v),
                        flips: own,
                    });
                    guards.push(Guard {
                        row: spare(-1.0),
                        flips: own | through,
                    });
                } else {
                    guards.push(Guard {
                        row: sum(&[(node, 1.0)], -clamp_v),
                        flips: own,
                    });
                }
            }
            _ => {}
        }
    }
    guards
}
