//! A switch known by its width: the width, and where asked for the number of stacked switches, with
//! the least loss, drive included, under the voltage limit.
//!
//! The search treats the device as one switch with a constant capacitance of the same energy,
//! which decides between widths; the stage itself is then sized with the device as it is.

use super::checks::{field, positive};
use super::problem::Problem;
use super::{SizingError, path};
use crate::charge::ChargeLaw;
use crate::design::{Capacitance, Design, Upper};
use crate::quantity;

/// The most switches that are stacked.
const MOST_STACKED: u32 = 4;
/// From one width to the next while looking for the least loss, and how often.
const STEP: f64 = 1.6;
const MOST_STEPS: usize = 16;
/// Relative width to which the least loss is found: it is flat there.
const CLOSE: f64 = 2e-3;
/// On-resistance over load of the first guess (common practice).
const FIRST_SHARE: f64 = 0.02;

/// What was chosen.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Chosen {
    /// The design with the device of that width.
    pub(super) design: Design,
    /// Width of each switch, metres.
    pub(super) width_m: Option<f64>,
    /// What set it, one sentence.
    pub(super) note: Option<String>,
}

/// One width, tried.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Trial {
    width_m: f64,
    stack: u32,
    /// All that is lost, drive included, over the output power.
    loss: f64,
    conduction_w: f64,
    drive_w: f64,
    /// Highest voltage across one switch, as if they shared it evenly, volts.
    each_v: f64,
}

/// The design with its device resolved to one of a definite width.
///
/// # Errors
/// Numbers per width that cannot be, or no width that makes a stage.
pub(super) fn resolve(design: &Design) -> Result<Chosen, SizingError> {
    let Some(per) = &design.device.per_width else {
        return Ok(Chosen {
            design: design.clone(),
            width_m: None,
            note: None,
        });
    };
    let path = "device.per_width";
    positive(
        path,
        "the on-resistance times width",
        per.on_resistance_ohm_m,
    )?;
    positive(path, "the output capacitance per width", per.output_f_per_m)?;
    if !(per.gate_f_per_m >= 0.0 && per.gate_f_per_m <= 1e30) {
        return Err(field(
            path,
            format!(
                "the gate capacitance per width cannot be {}",
                per.gate_f_per_m
            ),
        ));
    }
    let stacks = if per.choose_stack {
        1..=MOST_STACKED
    } else {
        design.stage.stack..=design.stage.stack
    };
    if let Some(width_m) = per.width_m {
        positive(path, "the width", width_m)?;
        if !per.choose_stack {
            return Ok(Chosen {
                design: of_width(design, width_m, design.stage.stack),
                width_m: Some(width_m),
                note: None,
            });
        }
    }
    let limit_v = design.device.rating_v.map_or(f64::INFINITY, |v| {
        v * design.brief.limits.drain_fraction_of_rating
    });
    let mut reason = None;
    let mut best: Option<Trial> = None;
    let mut over: Option<Trial> = None;
    for stack in stacks {
        let found = match per.width_m {
            Some(width_m) => tried(design, width_m, stack),
            None => least(design, stack),
        };
        match found {
            Ok(trial) if trial.each_v > limit_v => {
                over = over.filter(|o| o.each_v <= trial.each_v).or(Some(trial));
            }
            Ok(trial) => best = best.filter(|b| b.loss <= trial.loss).or(Some(trial)),
            Err(error) => reason = Some(error),
        }
    }
    let Some(trial) = best.or(over) else {
        return Err(reason.unwrap_or(SizingError::NoSolution {
            residual: f64::INFINITY,
        }));
    };
    Ok(Chosen {
        design: of_width(design, trial.width_m, trial.stack),
        width_m: Some(trial.width_m),
        note: Some(what_sets_it(design, &trial, limit_v)),
    })
}

/// The design with a device of a width, explicit.
fn of_width(design: &Design, width_m: f64, stack: u32) -> Design {
    let mut explicit = design.clone();
    let Some(per) = explicit.device.per_width.take() else {
        return explicit;
    };
    let device = &mut explicit.device;
    device.on_resistance_ohm = per.on_resistance_ohm_m / width_m;
    let output_f = per.output_f_per_m * width_m;
    device.capacitance = match &device.capacitance {
        Capacitance::Junction {
            built_in_v,
            grading,
            ..
        } => Capacitance::Junction {
            cj0_f: output_f,
            built_in_v: *built_in_v,
            grading: *grading,
        },
        _ => Capacitance::Constant { c_f: output_f },
    };
    if let Some(upper) = &mut device.upper {
        // Data of its own are per width as well: ohm metres and farads per metre.
        *upper = Upper {
            on_resistance_ohm: upper.on_resistance_ohm / width_m,
            across_f: upper.across_f * width_m,
            ..*upper
        };
    }
    device.node_f *= width_m;
    let drive_v = device.gate_drive_v.unwrap_or(0.0);
    // Only the lowest gate of a stack moves.
    device.gate_charge_c =
        (per.gate_f_per_m > 0.0 && drive_v > 0.0).then_some(per.gate_f_per_m * width_m * drive_v);
    explicit.stage.stack = stack;
    explicit
}

/// A width with its losses.
fn tried(design: &Design, width_m: f64, stack: u32) -> Result<Trial, SizingError> {
    let mut plain = of_width(design, width_m, stack);
    let stacked = Problem::of(&plain)?;
    // One switch of the same resistance and energy.
    plain.device.capacitance = match &plain.device.capacitance {
        Capacitance::Junction {
            cj0_f,
            built_in_v,
            grading,
        } if stack == 1 => {
            ChargeLaw::junction(*cj0_f, *built_in_v, *grading).map_or(Capacitance::None, |law| {
                Capacitance::Constant {
                    c_f: law.energy_equivalent_f(3.56 * stacked.expected_supply_v()),
                }
            })
        }
        _ => Capacitance::Constant {
            c_f: stacked.device_f,
        },
    };
    plain.device.on_resistance_ohm += stacked
        .stack
        .iter()
        .flat_map(|s| &s.uppers)
        .map(|u| u.on_resistance_ohm)
        .sum::<f64>();
    plain.stage.stack = 1;
    plain.device.upper = None;
    plain.stage.gate_supplies_v = None;
    let problem = Problem::of(&plain)?;
    let stage = path::size(&problem, &mut Vec::new())?;
    let reading = stage.solve_to_harmonic(1).map_err(SizingError::Stage)?;
    let drive_w = super::drive(&plain)?.unwrap_or(0.0) * problem.sides();
    let figures = &reading.figures;
    Ok(Trial {
        width_m,
        stack,
        loss: (figures.supply_power_w + drive_w - figures.output_power_w) / figures.output_power_w,
        conduction_w: reading.losses.switch_w,
        drive_w,
        each_v: figures.drain_peak_v / f64::from(stack),
    })
}

/// The width of least loss for a number of switches: downhill in steps, then by golden
/// section (Kiefer, Proc. Amer. Math. Soc. 4, 1953; from memory).
fn least(design: &Design, stack: u32) -> Result<Trial, SizingError> {
    const GOLDEN: f64 = 0.618_033_988_749_894_9;
    let per = design.device.per_width.as_ref();
    let ohm_m = per.map_or(1.0, |p| p.on_resistance_ohm_m);
    let first = ohm_m * f64::from(stack) / (FIRST_SHARE * expected_load_ohm(design));
    // The first width that makes a stage at all, from the guess up.
    let mut at = first;
    let mut best = tried(design, at, stack);
    for _ in 0..MOST_STEPS {
        if best.is_ok() {
            break;
        }
        at *= STEP;
        best = tried(design, at, stack).or(best);
    }
    let mut best = best?;
    // Downhill, wider or narrower, until it rises or there is no stage.
    let (mut low, mut high) = (best.width_m / STEP, best.width_m * STEP);
    for factor in [STEP, 1.0 / STEP] {
        let start = best.width_m;
        for _ in 0..MOST_STEPS {
            match tried(design, best.width_m * factor, stack) {
                Ok(next) if next.loss < best.loss => best = next,
                _ => break,
            }
        }
        (low, high) = (best.width_m / STEP, best.width_m * STEP);
        if best.width_m != start {
            break;
        }
    }
    let loss = |width_m: f64| tried(design, width_m, stack).map_or(f64::INFINITY, |t| t.loss);
    let at = |low: f64, high: f64, share: f64| low * libm::pow(high / low, share);
    let mut left = at(low, high, 1.0 - GOLDEN);
    let mut right = at(low, high, GOLDEN);
    let (mut on_left, mut on_right) = (loss(left), loss(right));
    while high / low > 1.0 + CLOSE {
        // A width that is too large makes no stage.
        if on_left <= on_right {
            (high, right, on_right) = (right, left, on_left);
            left = at(low, high, 1.0 - GOLDEN);
            on_left = loss(left);
        } else {
            (low, left, on_left) = (left, right, on_right);
            right = at(low, high, GOLDEN);
            on_right = loss(right);
        }
    }
    match tried(design, left, stack) {
        Ok(trial) if trial.loss < best.loss => Ok(trial),
        _ => Ok(best),
    }
}

/// About the drain load, ohms.
fn expected_load_ohm(design: &Design) -> f64 {
    let brief = &design.brief;
    if let Some(load) = design.fitted.drain_load {
        return load.r_ohm;
    }
    match (brief.supply_v, brief.power_w) {
        (Some(v), Some(w)) => super::ideal(design.stage.duty).power * v * v / w,
        _ => brief.load.r_ohm,
    }
}

fn what_sets_it(design: &Design, trial: &Trial, limit_v: f64) -> String {
    let wider = tried(design, trial.width_m * 1.02, trial.stack);
    let width = quantity::format(trial.width_m, "m");
    let set = match wider {
        Err(SizingError::Capacitance { .. }) => {
            "the whole shunt capacitance is the device's, and a wider one does not fit".to_owned()
        }
        Err(_) => "a wider switch makes no stage".to_owned(),
        Ok(_) if trial.drive_w > 0.0 => format!(
            "conduction loses {:.4} W and the drive {:.4} W: a narrower switch would lose more in the one, a wider one in the other",
            trial.conduction_w, trial.drive_w
        ),
        Ok(_) => format!(
            "conduction loses {:.4} W; a wider switch would lose more in the rest of the stage",
            trial.conduction_w
        ),
    };
    let stack = match trial.stack {
        1 => String::new(),
        n => format!(", {n} of them stacked"),
    };
    let choose = design.device.per_width.is_some_and(|p| p.choose_stack);
    let over = if trial.each_v <= limit_v {
        String::new()
    } else if choose {
        format!(" No stack of up to {MOST_STACKED} keeps each switch under {limit_v:.4} V.")
    } else {
        format!(
            " Each switch sees about {:.4} V, more than its limit of {limit_v:.4} V: stack more of them.",
            trial.each_v
        )
    };
    format!("A switch {width} wide{stack}: {set}.{over}")
}
