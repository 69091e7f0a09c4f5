//! What is given and what is to be found: a design in the form that the solver takes.

use super::SizingError;
use super::checks::{field, in_range, not_negative, positive};
use super::stack::Stack;
use super::thermal::Thermal;
use crate::charge::{ChargeLaw, LawError};
use crate::design::{Capacitance, Coil, Design, Diode, Feed, Form, Load, Mismatch};
use crate::stage::{Pair, Part, Stage};

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
    /// A stage sized for nearly the same, to start from.
    pub(super) near: Option<Box<Stage>>,
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
            near: None,
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
}
