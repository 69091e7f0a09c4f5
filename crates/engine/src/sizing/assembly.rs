//! The stage at a point of the search, at a place on the way to the wanted one.

use super::problem::Problem;
use crate::design::{Coil, Feed, Load};
use crate::stage::{Pair, Part, Stage, Trap, Upper};
use std::f64::consts::TAU;

/// A point of the search. `shunt` is w C1 R of the whole shunt capacitance of a side and what
/// it sees of the load, `reactance` the series branch's net reactance over R, `feed_q` the feed
/// coil's resonance with the shunt where that is sought.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Point {
    pub(super) shunt: f64,
    pub(super) reactance: f64,
    pub(super) load_ohm: f64,
    pub(super) supply_v: f64,
    pub(super) feed_q: f64,
}

/// Where between the ideal stage and the wanted one: losses and feed from 0 (ideal) to 1
/// (wanted), the loaded Q, and the device from one switch
/// with a constant capacitance (0) to its stack or charge law (1).
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Way {
    pub(super) bend: f64,
    pub(super) losses: f64,
    pub(super) feed: f64,
    pub(super) loaded_q: f64,
}

impl Problem {
    pub(super) fn omega(&self) -> f64 {
        TAU * self.carrier_hz
    }

    /// Reactance of the load in the series branch beside R, ohms.
    pub(super) fn load_x(&self) -> f64 {
        self.pins.drain_load.map_or(0.0, |l| l.x_ohm)
    }

    /// Whether the load resistance is to be found from power and supply.
    pub(super) fn seeks_load(&self) -> bool {
        self.pins.drain_load.is_none()
    }

    /// Whether the feed coil is found together with the stage.
    pub(super) fn seeks_feed(&self) -> bool {
        self.pins.feed.is_none()
            && matches!(self.feed, Feed::Parallel {} | Feed::LoadIndependent {})
    }

    /// The series branch at a point: w L2 / R and 1/(w C2 R). The second is not positive
    /// where the point asks for more reactance than the coil has.
    pub(super) fn branch(&self, point: &Point, way: Way) -> (f64, f64) {
        let scale = self.omega() / point.load_ohm;
        match (self.pins.series_coil, self.pins.series_capacitor) {
            (Some(l), Some(c)) => (l.l_h * scale, 1.0 / (self.omega() * c.c_f * point.load_ohm)),
            (Some(l), None) => (l.l_h * scale, l.l_h * scale - point.reactance),
            (None, Some(c)) => {
                let elastance = 1.0 / (self.omega() * c.c_f * point.load_ohm);
                (elastance + point.reactance, elastance)
            }
            (None, None) => (way.loaded_q, way.loaded_q - point.reactance),
        }
    }

    /// The point at which a stage lies.
    pub(super) fn point_of(&self, stage: &Stage) -> Point {
        let omega = self.omega();
        let side_ohm = stage.load.r_ohm / self.sides();
        let device_f = match (&self.stack, &self.device_law) {
            (Some(stack), _) => stack.drain_f(self.low_f),
            _ => stage.device_f,
        };
        let cross_f = stage.pair.map_or(0.0, |p| p.cross.value);
        let total_f = device_f + stage.shunt.value + cross_f;
        let series = omega * stage.series_coil.value - 1.0 / (omega * stage.series_capacitor.value);
        Point {
            shunt: omega * total_f * side_ohm,
            reactance: series / stage.load.r_ohm,
            load_ohm: stage.load.r_ohm,
            supply_v: stage.supply_v,
            feed_q: 1.0 / (omega * (stage.feed.value * total_f).sqrt()),
        }
    }

    /// Whether the device is more than a switch with a constant capacitance.
    pub(super) fn bends(&self) -> bool {
        self.device_law.is_some() || self.stack.is_some()
    }

    /// The end of the way but for the device's charge law or stack.
    pub(super) fn wanted(&self) -> Way {
        Way {
            bend: 0.0,
            losses: 1.0,
            feed: 1.0,
            loaded_q: self.loaded_q,
        }
    }

    /// The end of the way.
    pub(super) fn bent(&self) -> Way {
        Way {
            bend: 1.0,
            ..self.wanted()
        }
    }

    /// q of a resonant feed on its way to `q`: from that of a choke of 30 R.
    pub(super) fn feed_q(q: f64, way: Way) -> f64 {
        let start = q.min(0.43);
        start + (q - start) * way.feed
    }

    /// The feed coil at a point, henries.
    pub(super) fn feed_l(&self, point: &Point, way: Way) -> f64 {
        let omega = self.omega();
        let scale = point.load_ohm / self.sides() / omega;
        let wanted = match (self.pins.feed, self.feed) {
            (Some(pin), _) => pin.l_h,
            (None, Feed::Choke { reactance_ratio }) => reactance_ratio * scale,
            (None, Feed::Resonant { q }) => {
                let q = Self::feed_q(q, way);
                return scale / (q * q * point.shunt);
            }
            (None, Feed::Inductance { l_h }) => l_h,
            (None, Feed::Parallel {} | Feed::LoadIndependent {}) => {
                return scale / (point.feed_q * point.feed_q * point.shunt);
            }
        };
        if way.feed >= 1.0 {
            return wanted;
        }
        let start = (30.0 * scale).max(wanted);
        1.0 / ((1.0 - way.feed) / start + way.feed / wanted)
    }

    /// The stage at a point, at a place on the way to the wanted one.
    pub(super) fn stage(&self, point: &Point, way: Way) -> Stage {
        let omega = self.omega();
        let r = point.load_ohm;
        let (coil_x, capacitor_x) = self.branch(point, way);
        let total_f = point.shunt / (omega * r / self.sides());
        let loss = |q: Option<f64>| q.map_or(0.0, |q| way.losses / q);
        let coil = |l_h: f64, pin: Option<Coil>| Part {
            value: l_h,
            esr_ohm: pin
                .and_then(|p| p.esr_ohm)
                .unwrap_or(omega * l_h * loss(self.coil_q)),
        };
        let capacitor = |c_f: f64, pin: Option<f64>| Part {
            value: c_f,
            esr_ohm: pin.unwrap_or(if c_f > 0.0 {
                loss(self.capacitor_q) / (omega * c_f)
            } else {
                0.0
            }),
        };
        let feed_l = self.feed_l(point, way);
        let shunt_f = self.pins.shunt.map_or(total_f - self.device_f, |p| p.c_f);
        // Where the device alone is too large, as much of it as the stage needs.
        let device_f = if shunt_f > 0.0 {
            self.device_f
        } else {
            total_f
        };
        let share = if self.device_f > 0.0 {
            device_f / self.device_f
        } else {
            1.0
        };
        // At half duty one drain is always at ground, so that a capacitor between the drains does
        // what one on either side would.
        let pair = self.pair.map(|pair| {
            let cross_f = match (self.pins.cross, self.pins.shunt) {
                (Some(pin), _) => pin.c_f,
                (None, Some(_)) => 0.0,
                (None, None) => pair.cross.value * shunt_f.max(0.0),
            };
            Pair {
                cross: capacitor(cross_f, self.pins.cross.and_then(|p| p.esr_ohm)),
                ..pair
            }
        });
        let side_f = match (self.pins.shunt, &pair) {
            (None, Some(pair)) => shunt_f - pair.cross.value,
            _ => shunt_f,
        };
        let trap = self.trap_ratio.map(|ratio| {
            let farad = total_f / ratio;
            Trap {
                coil: coil(1.0 / (4.0 * omega * omega * farad), None),
                capacitor: capacitor(farad, None),
            }
        });
        // Before the bend a stack is one switch of the same resistance and capacitance.
        let stacked = self.stack.iter().flat_map(|stack| &stack.uppers);
        let upper_ohm: f64 = stacked.clone().map(|u| u.on_resistance_ohm).sum();
        let (low_f, more_ohm) = if way.bend > 0.0 {
            (self.low_f * share, 0.0)
        } else {
            (device_f, upper_ohm)
        };
        let uppers = stacked
            .filter(|_| way.bend > 0.0)
            .map(|upper| Upper {
                on_resistance_ohm: upper.on_resistance_ohm,
                across_f: upper.across_f * share,
                node_f: upper.node_f * share,
                ..*upper
            })
            .collect();
        Stage {
            carrier_hz: self.carrier_hz,
            duty: self.duty,
            supply_v: point.supply_v,
            on_resistance_ohm: (self.on_resistance_ohm + more_ohm) * way.losses,
            fall_s: self.fall_s * way.losses,
            device_f: low_f,
            device_law: self
                .device_law
                .as_ref()
                .filter(|_| way.bend > 0.0)
                .map(|law| {
                    law.scaled(way.bend * share)
                        .beside((1.0 - way.bend) * device_f)
                }),
            pair,
            trap,
            uppers,
            threshold_v: self.stack.as_ref().map_or(0.0, |s| s.threshold_v),
            diode: None,
            feed: coil(feed_l, self.pins.feed),
            shunt: capacitor(side_f.max(0.0), self.pins.shunt.and_then(|p| p.esr_ohm)),
            series_coil: coil(coil_x * r / omega, self.pins.series_coil),
            series_capacitor: capacitor(
                1.0 / (omega * r * capacitor_x),
                self.pins.series_capacitor.and_then(|p| p.esr_ohm),
            ),
            load: Load {
                r_ohm: r,
                x_ohm: self.load_x(),
            },
        }
    }
}
