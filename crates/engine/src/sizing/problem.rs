//! What is given and what is to be found: a design in the form that the solver takes.

use super::SizingError;
use super::stack::Stack;
use super::thermal::Thermal;
use crate::charge::{ChargeLaw, LawError};
use crate::design::{Capacitance, Coil, Design, Diode, Feed, Form, Load, Mismatch};
use crate::stage::{Pair, Part, Stage, Trap, Upper};
use std::f64::consts::TAU;

/// A design, checked, with its unknowns named.
#[derive(Debug, Clone)]
pub(super) struct Problem {
    pub(super) carrier_hz: f64,
    pub(super) duty: f64,
    /// Given supply; none where power and load determine it.
    pub(super) supply_v: Option<f64>,
    pub(super) power_w: Option<f64>,
    pub(super) loaded_q: f64,
    pub(super) feed: Feed,
    pub(super) coil_q: Option<f64>,
    pub(super) capacitor_q: Option<f64>,
    pub(super) on_resistance_ohm: f64,
    pub(super) fall_s: f64,
    /// The second side, where there is one; `cross.value` is the share of the fitted shunt
    /// susceptance that lies between the drains.
    pub(super) pair: Option<Pair>,
    pub(super) trap_ratio: Option<f64>,
    pub(super) stack: Option<Stack>,
    /// Output capacitance of the lowest switch.
    pub(super) low_f: f64,
    /// Output capacitance as the drain sees it, with a charge law the one of the same energy at the expected peak.
    pub(super) device_f: f64,
    pub(super) device_law: Option<ChargeLaw>,
    pub(super) diode: Option<Diode>,
    pub(super) drain_limit_v: Option<f64>,
    /// How the device heats up; none where its thermal resistance is not given.
    pub(super) thermal: Option<Thermal>,
    pub(super) pins: crate::design::Fitted,
    pub(super) notes: Vec<String>,
}

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

pub(super) fn field(field: &'static str, reason: String) -> SizingError {
    SizingError::Field { field, reason }
}

/// A positive finite number, or the sentence that says it is not.
pub(super) fn positive(path: &'static str, what: &str, value: f64) -> Result<f64, SizingError> {
    in_range(path, what, value, 1e-30, 1e30)
}

pub(super) fn in_range(
    path: &'static str,
    what: &str,
    value: f64,
    least: f64,
    most: f64,
) -> Result<f64, SizingError> {
    if value >= least && value <= most {
        Ok(value)
    } else if least == 1e-30 {
        Err(field(
            path,
            format!("{what} must be greater than zero and finite, not {value}"),
        ))
    } else {
        Err(field(
            path,
            format!("{what} must lie between {least} and {most}, not at {value}"),
        ))
    }
}

pub(super) fn not_negative(path: &'static str, what: &str, value: f64) -> Result<f64, SizingError> {
    if (0.0..=1e30).contains(&value) {
        Ok(value)
    } else {
        Err(field(
            path,
            format!("{what} must be zero or more, not {value}"),
        ))
    }
}

impl Problem {
    pub(super) fn of(design: &Design) -> Result<Self, SizingError> {
        let (brief, device, stage, pins) =
            (&design.brief, &design.device, &design.stage, design.fitted);
        let mut notes = Vec::new();
        if design.evenfall != crate::design::VERSION {
            return Err(field(
                "evenfall",
                format!(
                    "version {} of the design file is not known",
                    design.evenfall
                ),
            ));
        }
        let differential = stage.form == Form::Differential;
        let trap_ratio = stage
            .trap_ratio
            .map(|k| {
                in_range(
                    "stage.trap_ratio",
                    "the shunt over the trap capacitance",
                    k,
                    0.01,
                    100.0,
                )
            })
            .transpose()?;
        if trap_ratio.is_some() && stage.stack > 1 {
            return Err(field(
                "stage.trap_ratio",
                "a trap across a stack of switches is not solved: take one or the other".into(),
            ));
        }
        let pair = if differential {
            let Mismatch {
                on_resistance,
                duty,
                capacitance,
            } = stage.mismatch;
            for part in [on_resistance, duty, capacitance] {
                in_range(
                    "stage.mismatch",
                    "a difference of the second side",
                    part,
                    -0.5,
                    0.5,
                )?;
            }
            Some(Pair {
                feed_coupling: in_range(
                    "stage.feed_coupling",
                    "the coupling of the feed coils",
                    stage.feed_coupling,
                    -0.99,
                    0.99,
                )?,
                cross: Part {
                    value: in_range(
                        "stage.cross_share",
                        "the share of the capacitor between the drains",
                        stage.cross_share,
                        0.0,
                        1.0,
                    )?,
                    esr_ohm: 0.0,
                },
                mismatch: stage.mismatch,
            })
        } else {
            None
        };
        let law = |law: Result<ChargeLaw, LawError>| {
            law.map(Some)
                .map_err(|e| field("device.capacitance", e.to_string()))
        };
        let (constant_f, device_law) = match &device.capacitance {
            Capacitance::None => (0.0, None),
            Capacitance::Constant { c_f } => (
                not_negative("device.capacitance", "the device's capacitance", *c_f)?,
                None,
            ),
            Capacitance::Junction {
                cj0_f,
                built_in_v,
                grading,
            } => (
                0.0,
                law(ChargeLaw::junction(*cj0_f, *built_in_v, *grading))?,
            ),
            Capacitance::Points { v, c_f } => (0.0, law(ChargeLaw::points(v, c_f))?),
        };
        let thermal = match device.junction_to_ambient_k_per_w {
            None => {
                if device.on_resistance_per_k.is_some_and(|t| t != 0.0) {
                    notes.push(
                        "Without a thermal resistance the on-resistance is taken as at 25 °C."
                            .into(),
                    );
                }
                None
            }
            Some(k_per_w) => Some(Thermal {
                ambient_c: in_range(
                    "brief.ambient_c",
                    "the ambient temperature",
                    brief.ambient_c,
                    -273.0,
                    400.0,
                )?,
                k_per_w: not_negative(
                    "device.junction_to_ambient_k_per_w",
                    "the thermal resistance",
                    k_per_w,
                )?,
                per_k: in_range(
                    "device.on_resistance_per_k",
                    "the rise of on-resistance per kelvin",
                    device.on_resistance_per_k.unwrap_or(0.0),
                    -0.01,
                    1.0,
                )?,
            }),
        };
        let diode = match device.diode {
            None => None,
            Some(d) => Some(Diode {
                forward_v: not_negative(
                    "device.diode",
                    "the diode's forward voltage",
                    d.forward_v,
                )?,
                slope_ohm: not_negative(
                    "device.diode",
                    "the diode's slope resistance",
                    d.slope_ohm,
                )?,
            }),
        };
        let quality =
            |path, value: Option<f64>| value.map(|q| in_range(path, "Q", q, 0.1, 1e12)).transpose();
        let feed = match stage.feed {
            Feed::Choke { reactance_ratio } => {
                in_range(
                    "stage.feed",
                    "the choke's reactance ratio",
                    reactance_ratio,
                    0.1,
                    1e6,
                )?;
                stage.feed
            }
            Feed::Resonant { q } => {
                in_range("stage.feed", "q of the resonant feed", q, 0.01, 2.5)?;
                stage.feed
            }
            Feed::Inductance { l_h } => {
                positive("stage.feed", "the feed inductance", l_h)?;
                stage.feed
            }
            Feed::Parallel {} | Feed::LoadIndependent {} => stage.feed,
        };
        let mut problem = Self {
            carrier_hz: in_range(
                "brief.carrier_hz",
                "the carrier in hertz",
                brief.carrier_hz,
                1e-3,
                1e13,
            )?,
            duty: in_range("stage.duty", "the duty", stage.duty, 0.05, 0.95)?,
            supply_v: brief
                .supply_v
                .map(|v| positive("brief.supply_v", "the supply", v))
                .transpose()?,
            power_w: brief
                .power_w
                .map(|w| positive("brief.power_w", "the power", w))
                .transpose()?,
            loaded_q: in_range("stage.loaded_q", "loaded Q", stage.loaded_q, 0.01, 1e4)?,
            feed,
            coil_q: quality("stage.coil_q", stage.coil_q)?,
            capacitor_q: quality("stage.capacitor_q", stage.capacitor_q)?,
            on_resistance_ohm: not_negative(
                "device.on_resistance_ohm",
                "the on-resistance",
                device.on_resistance_ohm,
            )?,
            fall_s: not_negative(
                "device.fall_time_s",
                "the fall time",
                device.fall_time_s.unwrap_or(0.0),
            )?,
            stack: Stack::of(design, constant_f, device_law.is_some())?,
            low_f: constant_f,
            device_f: constant_f,
            device_law,
            pair,
            trap_ratio,
            diode,
            drain_limit_v: device
                .rating_v
                .map(|v| v * brief.limits.drain_fraction_of_rating),
            thermal,
            pins,
            notes,
        };
        problem.check_fall()?;
        problem.settle_load(brief.load)?;
        problem.settle_device();
        problem.check_pins()?;
        Ok(problem)
    }

    /// The supply, or about the one that power and load ask for, volts.
    pub(super) fn expected_supply_v(&self) -> f64 {
        let load_ohm = self.pins.drain_load.map_or(1.0, |l| l.r_ohm);
        let power = self.power_w.unwrap_or(1.0);
        self.supply_v.unwrap_or_else(|| {
            (power * load_ohm / super::ideal(self.duty).power).sqrt() / self.sides()
        })
    }

    /// Number of sides.
    pub(super) fn sides(&self) -> f64 {
        if self.pair.is_some() { 2.0 } else { 1.0 }
    }

    /// The typical capacitance of a charge law: the one of the same energy at the peak of the
    /// ideal stage at half duty, 3.56 times the supply (Raab 1977).
    fn settle_device(&mut self) {
        let peak_v = 3.56 * self.expected_supply_v();
        if let Some(law) = &self.device_law {
            self.device_f = law.energy_equivalent_f(peak_v);
            self.low_f = self.device_f;
        }
        if let Some(stack) = &mut self.stack {
            stack.start(peak_v);
            self.device_f = stack.drain_f(self.low_f);
        }
    }

    fn check_fall(&self) -> Result<(), SizingError> {
        let off_s = (1.0 - self.duty) / self.carrier_hz;
        if self.fall_s < off_s {
            return Ok(());
        }
        Err(field(
            "device.fall_time_s",
            format!(
                "the fall time of {} s does not fit into the {off_s:.3e} s that the switch is open",
                self.fall_s
            ),
        ))
    }

    fn check_pins(&self) -> Result<(), SizingError> {
        let coil = |path, pin: Option<Coil>| -> Result<(), SizingError> {
            if let Some(c) = pin {
                positive(path, "the inductance", c.l_h)?;
                not_negative(path, "the series resistance", c.esr_ohm.unwrap_or(0.0))?;
            }
            Ok(())
        };
        coil("fitted.feed", self.pins.feed)?;
        coil("fitted.series_coil", self.pins.series_coil)?;
        if let Some(c) = self.pins.series_capacitor {
            positive("fitted.series_capacitor", "the capacitance", c.c_f)?;
            not_negative(
                "fitted.series_capacitor",
                "the series resistance",
                c.esr_ohm.unwrap_or(0.0),
            )?;
        }
        if let Some(c) = self.pins.shunt {
            not_negative("fitted.shunt", "the capacitance", c.c_f)?;
            not_negative(
                "fitted.shunt",
                "the series resistance",
                c.esr_ohm.unwrap_or(0.0),
            )?;
            if c.c_f + self.device_f <= 0.0 {
                return Err(field(
                    "fitted.shunt",
                    "with no device capacitance the shunt capacitor cannot be zero".into(),
                ));
            }
        }
        Ok(())
    }

    /// Any two of power, supply and drain load: the load itself stands in where only one is given.
    fn settle_load(&mut self, load: Load) -> Result<(), SizingError> {
        if let Some(load) = self.pins.drain_load {
            positive("fitted.drain_load", "the load resistance", load.r_ohm)?;
            if !load.x_ohm.is_finite() {
                return Err(field(
                    "fitted.drain_load",
                    format!("the load reactance cannot be {}", load.x_ohm),
                ));
            }
        } else if self.power_w.is_none() || self.supply_v.is_none() {
            positive("brief.load", "the load resistance", load.r_ohm)?;
            self.pins.drain_load = Some(load);
            self.notes.push(format!(
                "With power or supply left open, the load of {} ohm is taken as the drain load.",
                load.r_ohm
            ));
        }
        if self.supply_v.is_none() && self.power_w.is_none() {
            return Err(field(
                "brief.supply_v",
                "of power, supply and load resistance two are needed; only the load is given"
                    .into(),
            ));
        }
        Ok(())
    }

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
