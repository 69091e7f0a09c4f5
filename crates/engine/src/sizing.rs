//! Finds the values: zero drain voltage with zero slope at turn-on, with every loss in
//! place. What is pinned stays pinned and the rest is found.
//!
//! The unknowns are normalised: w C1 R, the series branch's net reactance over R, and R
//! itself where power and supply ask for it. Newton's method starts from the ideal stage
//! in closed form ([`ideal`]); where that is too far, feed, loaded Q and losses are moved
//! from the ideal to the wanted ones in steps.

mod alternatives;
mod assembly;
mod checks;
mod ideal;
mod least_loss;
mod newton;
mod path;
mod problem;
mod stack;
mod thermal;
mod verdict;
mod width;

pub use alternatives::{Alternative, COUNT as ALTERNATIVES, alternative, alternatives};
pub use ideal::{Ideal, ideal};
pub use verdict::judge;

use crate::answer::{Answer, Refusal, Solved, Values, Waveforms};
use crate::design::{Aim, Design, Feed};
use crate::stage::{Reading, Stage, StageError};
use problem::Problem;
use std::fmt;

/// Why there is no sized stage.
#[derive(Debug, Clone, PartialEq)]
pub enum SizingError {
    /// A field of the design is missing or out of range.
    Field {
        /// Path in the design file.
        field: &'static str,
        /// What is wrong, with the number.
        reason: String,
    },
    /// The loaded Q is too low for soft switching.
    LoadedQ {
        /// What was asked.
        asked: f64,
        /// The least that allows soft switching here.
        least: f64,
        /// Whether it is solved for, and not only the lowest that was found.
        exact: bool,
        /// On-fraction of the switch.
        duty: f64,
    },
    /// The device's own capacitance exceeds what the stage needs.
    Capacitance {
        /// Of the device, farads.
        device_f: f64,
        /// Whether that is the constant capacitance of the same energy.
        by_energy: bool,
        /// Whole shunt capacitance that the stage needs, farads.
        needed_f: f64,
        /// Highest carrier that it allows with this load and supply, hertz.
        highest_hz: f64,
        /// The load resistance at which it would be right, ohms.
        load_ohm: f64,
        /// Resonance q and inductance of the feed coil that absorbs it, where there is one.
        feed: Option<(f64, f64)>,
    },
    /// Too many elements are pinned for soft switching.
    Pinned {
        /// The nearest that exists, one sentence.
        nearest: String,
    },
    /// The feed coil and duty do not allow soft switching.
    Feed {
        /// On-fraction of the switch.
        duty: f64,
        /// What was asked and the nearest that was found.
        nearest: String,
        /// Whether the feed coil is pinned.
        pinned: bool,
    },
    /// The device's charge law does not allow soft switching.
    Law {
        /// The part of the way from a constant capacitance to the law at which it was still
        /// found.
        share: f64,
        /// Whether it is the stack and not the law.
        stack: bool,
    },
    /// The losses do not allow soft switching.
    Losses {
        /// The part of them with which it was still found.
        fraction: f64,
    },
    /// The losses do not allow this power from this supply.
    Power {
        /// What was asked, watts.
        asked: f64,
        /// The most that was found, watts.
        most: f64,
    },
    /// The device heats up without end.
    Runaway {
        /// Ambient temperature, degrees Celsius.
        ambient_c: f64,
        /// Junction temperature up to which no balance was found, degrees Celsius.
        reached_c: f64,
    },
    /// Newton's method found no soft-switching stage.
    NoSolution {
        /// Least that remained of voltage and slope, relative to the supply.
        residual: f64,
    },
    /// The stage as sized has no figures.
    Stage(StageError),
}

impl SizingError {
    /// Path of the field at fault in the design file.
    pub fn field(&self) -> Option<&'static str> {
        match self {
            Self::Field { field, .. } => Some(field),
            Self::LoadedQ { .. } => Some("stage.loaded_q"),
            Self::Capacitance { .. } => Some("device.capacitance"),
            Self::Pinned { .. } => Some("fitted"),
            Self::Feed { pinned: true, .. } => Some("fitted.feed"),
            Self::Feed { pinned: false, .. } => Some("stage.feed"),
            Self::Law { stack: true, .. } => Some("stage.stack"),
            Self::Law { .. } => Some("device.capacitance"),
            Self::Losses { .. } => Some("stage.coil_q"),
            Self::Power { .. } => Some("brief.power_w"),
            Self::Runaway { .. } => Some("device.junction_to_ambient_k_per_w"),
            Self::NoSolution { .. } | Self::Stage(_) => None,
        }
    }
}

impl fmt::Display for SizingError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Field { reason, .. } => f.write_str(reason),
            Self::LoadedQ {
                asked,
                least,
                exact,
                duty,
            } => {
                let what = if *exact {
                    "the least for soft switching"
                } else {
                    "the lowest that was found to switch softly"
                };
                write!(
                    f,
                    "loaded Q {asked:.4} is below {least:.4}, {what} at duty {duty} with this feed and these losses"
                )
            }
            Self::Capacitance {
                device_f,
                by_energy,
                needed_f,
                highest_hz,
                load_ohm,
                feed,
            } => {
                write!(
                    f,
                    "the device's own capacitance, {}{:.4} pF, exceeds the {:.4} pF that the whole shunt needs; a carrier up to {:.4} MHz would do, or a drain load of about {:.4} ohm (more power or a lower supply), or a smaller device",
                    if *by_energy {
                        "in energy equal to "
                    } else {
                        ""
                    },
                    device_f * 1e12,
                    needed_f * 1e12,
                    highest_hz * 1e-6,
                    load_ohm
                )?;
                match feed {
                    Some((q, henry)) => write!(
                        f,
                        ", or a feed coil of {:.4} µH that resonates at q = {q:.3} and absorbs the rest",
                        henry * 1e6
                    ),
                    None => Ok(()),
                }
            }
            Self::Pinned { nearest } => f.write_str(nearest),
            Self::Feed { duty, nearest, .. } => {
                write!(
                    f,
                    "at duty {duty} there is no soft switching with {nearest}"
                )
            }
            Self::Law { stack: true, .. } => write!(
                f,
                "with the switches stacked no soft switching was found, although one switch of the same resistance and capacitance has it: other gate supplies, or smaller capacitances within the stack"
            ),
            Self::Law { share, .. } => write!(
                f,
                "with the device's charge law no soft switching was found, only up to {:.0} % of the way from a constant capacitance of the same energy to it: a larger capacitor beside the device or a smaller device makes it tamer",
                100.0 * share
            ),
            Self::Losses { fraction } => write!(
                f,
                "the losses leave no soft switching: it was found with {:.0} % of them, so coils of higher Q, a lower on-resistance or a higher supply are needed",
                100.0 * fraction
            ),
            Self::Power { asked, most } => write!(
                f,
                "with these losses this supply gives at most about {most:.4} W with soft switching, not {asked:.4} W: a higher supply, a lower on-resistance or coils of higher Q would"
            ),
            Self::Runaway {
                ambient_c,
                reached_c,
            } => write!(
                f,
                "thermal runaway: from {ambient_c} °C around it the junction passes {reached_c:.0} °C and finds no balance; a better heatsink, a lower on-resistance or less power is needed"
            ),
            Self::NoSolution { residual } => write!(
                f,
                "no soft-switching stage was found: voltage or slope at turn-on stayed at {:.2e} % of the supply; a duty nearer 0.5, a higher loaded Q or lower losses bring it back",
                100.0 * residual
            ),
            Self::Stage(error) => error.fmt(f),
        }
    }
}

impl std::error::Error for SizingError {}

/// Sizes and solves a design: the whole answer, as the design file's result object states it.
pub fn solve(design: &Design) -> Answer {
    let answer = settled(design).and_then(|sized| {
        let waveforms = sized.stage.waveforms().map_err(SizingError::Stage)?;
        Ok((sized, waveforms))
    });
    match answer {
        Ok((sized, waveforms)) => {
            let Sized {
                stage,
                reading,
                notes,
                width_m,
            } = sized;
            let verdicts = judge(design, &stage, &reading);
            let values = Values {
                width_m,
                stack: (!stage.uppers.is_empty()).then_some(stage.uppers.len() + 1),
                gate_supplies_v: stage
                    .uppers
                    .iter()
                    .map(|u| u.clamp_v + stage.threshold_v)
                    .collect(),
                ..stage.values()
            };
            Answer::Solved(Solved {
                values,
                figures: reading.figures,
                losses: reading.losses,
                harmonics_dbc: reading.harmonics_dbc,
                balance: reading.balance,
                detail: reading.detail,
                verdicts,
                notes,
                waveforms,
                drain_harmonics_v: reading.drain_harmonics_v,
                load_harmonics_a: reading.load_harmonics_a,
            })
        }
        Err(error) => Answer::Refused(refusal(design, error)),
    }
}

fn refusal(design: &Design, mut error: SizingError) -> Refusal {
    let mut offer = None;
    if let SizingError::Capacitance { feed, .. } = &mut error
        && let Ok(problem) = Problem::of(design)
        && let Some(found) = path::absorbing_feed(&problem)
    {
        *feed = Some(found);
        // A little rounder, on the side that leaves room.
        offer = Some(Feed::Resonant {
            q: libm::ceil(found.0 * 1e4) / 1e4,
        });
    }
    Refusal {
        reason: error.to_string(),
        field: error.field().map(str::to_owned),
        offer,
    }
}

/// Gate drive power: charge times voltage times frequency (common practice), where both are given.
fn drive(design: &Design) -> Result<Option<f64>, SizingError> {
    let device = &design.device;
    let (Some(charge), Some(volt)) = (device.gate_charge_c, device.gate_drive_v) else {
        return Ok(None);
    };
    let power = charge * volt * design.brief.carrier_hz;
    if power.is_finite() && charge >= 0.0 && volt >= 0.0 {
        Ok(Some(power))
    } else {
        Err(SizingError::Field {
            field: "device.gate_charge_c",
            reason: format!(
                "gate charge {charge} C and drive {volt} V must be zero or more and finite"
            ),
        })
    }
}

/// A sized stage with all that is known of it.
struct Sized {
    stage: Stage,
    reading: Reading,
    notes: Vec<String>,
    width_m: Option<f64>,
}

/// The stage of a design with its reading.
///
/// # Errors
/// See [`SizingError`].
pub fn sized_stage(design: &Design) -> Result<(Stage, Reading), SizingError> {
    settled(design).map(|sized| (sized.stage, sized.reading))
}

/// The stage of a design, its reading, its curves, and what the person should know about it.
///
/// # Errors
/// See [`SizingError`].
pub fn sized(design: &Design) -> Result<(Stage, Reading, Waveforms, Vec<String>), SizingError> {
    let Sized {
        stage,
        reading,
        notes,
        ..
    } = settled(design)?;
    let waveforms = stage.waveforms().map_err(SizingError::Stage)?;
    Ok((stage, reading, waveforms, notes))
}

fn settled(design: &Design) -> Result<Sized, SizingError> {
    let chosen = width::resolve(design)?;
    let design = &chosen.design;
    let mut problem = Problem::of(design)?;
    problem.notes.extend(chosen.note);
    let trial = |problem: &Problem| {
        let mut notes = problem.notes.clone();
        let mut stage = stack::size(problem, &mut notes)?;
        let plain =
            problem.pair.is_none() && problem.stack.is_none() && problem.trap_ratio.is_none();
        if design.stage.aim == Aim::LeastLoss && !plain {
            notes.push(
                "Least loss is sought for one plain switch only: this is the soft-switching stage."
                    .into(),
            );
        } else if design.stage.aim == Aim::LeastLoss {
            stage = least_loss::improve(problem, stage, &mut notes)?;
        }
        let reading = stage.solve().map_err(SizingError::Stage)?;
        Ok((stage, reading, notes))
    };
    let ((stage, mut reading, notes), junction_c) =
        thermal::settle(&problem, trial, |(stage, r, _)| (r.losses, stage))?;
    let figures = &mut reading.figures;
    if problem.device_law.is_some() {
        let constant = Problem {
            device_law: None,
            ..problem.clone()
        };
        figures.constant_capacitance_peak_v = path::size(&constant, &mut Vec::new())
            .ok()
            .and_then(|stage| stage.probe().ok())
            .map(|probed| probed.drain_peak_v);
    }
    figures.junction_c = junction_c;
    figures.gate_drive_w = drive(design)?.map(|watt| watt * problem.sides());
    figures.power_added_efficiency = figures
        .gate_drive_w
        .map(|drive| (figures.output_power_w - drive) / figures.supply_power_w);
    Ok(Sized {
        stage,
        reading,
        notes,
        width_m: chosen.width_m,
    })
}
