//! Stacked switches: what stands above the lowest, and the gate supplies that share the voltage.

use super::checks::{field, in_range, not_negative, positive};
use super::problem::Problem;
use super::{SizingError, path};
use crate::design::Design;
use crate::stage::{Reading, Stage, Upper};

/// The most switches of a stack.
const MOST: u32 = 4;
/// Of the current that its on-resistance would carry, what a gate lets through for each volt
/// below the clamp, times the on-resistance: half, for a device of square law (common practice).
const GATE_SHARE: f64 = 0.5;
/// Shares of the peak are met to this.
const CLOSE: f64 = 2e-3;
const MOST_TRIALS: usize = 4;
const MOST_MOVES: usize = 6;

/// The switches above the lowest.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Stack {
    /// From the ground up; their clamps are a start where no gate supplies are given.
    pub(super) uppers: Vec<Upper>,
    pub(super) threshold_v: f64,
    /// Whether the gate supplies are to be found.
    sought: bool,
    /// Of the peak drain voltage, what lies below the upper node of each switch but the top one
    /// where the ratings are used alike.
    shares: Vec<f64>,
}

impl Stack {
    /// What the design asks for; nothing where it is one plain switch.
    pub(super) fn of(
        design: &Design,
        low_f: f64,
        varying: bool,
    ) -> Result<Option<Self>, SizingError> {
        let count = design.stage.stack;
        if !(1..=MOST).contains(&count) {
            return Err(field(
                "stage.stack",
                format!("a stack has 1 to {MOST} switches, not {count}"),
            ));
        }
        if count == 1 {
            return Ok(None);
        }
        let device = &design.device;
        if varying {
            return Err(field(
                "device.capacitance",
                "in a stack the capacitances have to be constant: give that of the same energy"
                    .into(),
            ));
        }
        let (on_resistance_ohm, across_f, rating_v) = match &device.upper {
            Some(upper) => (upper.on_resistance_ohm, upper.across_f, upper.rating_v),
            None => (device.on_resistance_ohm, low_f, None),
        };
        positive(
            "device.upper",
            "the on-resistance of an upper switch",
            on_resistance_ohm,
        )?;
        positive(
            "device.upper",
            "the capacitance across an upper switch",
            across_f,
        )?;
        positive(
            "device.capacitance",
            "the capacitance across the lowest switch of a stack",
            low_f,
        )?;
        let node_f = not_negative("device.node_f", "the capacitance of a node", device.node_f)?;
        if count > 2 && node_f == 0.0 {
            return Err(field(
                "device.node_f",
                format!("a stack of {count} needs the capacitance from its nodes to ground"),
            ));
        }
        let threshold_v = in_range(
            "device.threshold_v",
            "the gate threshold",
            device.threshold_v,
            -1e4,
            1e4,
        )?;
        let given = &design.stage.gate_supplies_v;
        if let Some(volts) = given
            && (volts.len() + 1 != count as usize || volts.iter().any(|v| !v.is_finite()))
        {
            return Err(field(
                "stage.gate_supplies_v",
                format!(
                    "a stack of {count} has {} upper switches, and {} gate supplies are given",
                    count - 1,
                    volts.len()
                ),
            ));
        }
        // Ratings are used alike; without them, the voltage is shared evenly.
        let low = device.rating_v.unwrap_or(1.0);
        let high = match device.rating_v {
            Some(rating) => rating_v.unwrap_or(rating),
            None => 1.0,
        };
        let whole = low + f64::from(count - 1) * high;
        let shares: Vec<f64> = (0..count - 1)
            .map(|k| (low + f64::from(k) * high) / whole)
            .collect();
        let upper = |k: usize| Upper {
            on_resistance_ohm,
            siemens: GATE_SHARE / on_resistance_ohm,
            clamp_v: given.as_ref().map_or(0.0, |volts| volts[k] - threshold_v),
            across_f,
            node_f,
        };
        Ok(Some(Self {
            uppers: (0..shares.len()).map(upper).collect(),
            threshold_v,
            sought: given.is_none(),
            shares,
        }))
    }

    /// The capacitance that the drain sees while every switch is open, farads.
    pub(super) fn drain_f(&self, low_f: f64) -> f64 {
        self.uppers.iter().fold(low_f, |below, upper| {
            let node = below + upper.node_f;
            node * upper.across_f / (node + upper.across_f)
        })
    }

    /// Where the nodes would come to lie in an ideal stage.
    pub(super) fn start(&mut self, peak_v: f64) {
        if self.sought {
            for (upper, share) in self.uppers.iter_mut().zip(&self.shares) {
                upper.clamp_v = 0.7 * share * peak_v;
            }
        }
    }
}

/// Sizes a stage, and where its gate supplies are sought moves them until the switches share the
/// peak as their ratings do.
pub(super) fn size(problem: &Problem, notes: &mut Vec<String>) -> Result<Stage, SizingError> {
    let Some(stack) = problem.stack.as_ref().filter(|s| s.sought) else {
        return path::size(problem, notes);
    };
    let mut trial = problem.clone();
    let mut best: Option<(f64, Stage)> = None;
    for _ in 0..MOST_TRIALS {
        let mut said = notes.clone();
        let stage = path::size(&trial, &mut said)?;
        trial.near = Some(Box::new(stage.clone()));
        // The gates are moved on the stage as it is, and it is sized again with what they came to.
        let mut gated = stage.clone();
        let mut first = None;
        for _ in 0..MOST_MOVES {
            let reading = gated.solve_to_harmonic(1).map_err(SizingError::Stage)?;
            let (off, clamps) = shifted(stack, &gated, &reading);
            let first = *first.get_or_insert(off);
            if best.as_ref().is_none_or(|(least, _)| first < *least) {
                best = Some((first, stage.clone()));
            }
            let still = |(upper, clamp_v): (&Upper, &f64)| {
                (upper.clamp_v - clamp_v).abs() <= 0.1 * CLOSE * clamp_v.abs()
            };
            if off < 0.3 * CLOSE || gated.uppers.iter().zip(&clamps).all(still) {
                break;
            }
            for (upper, clamp_v) in gated.uppers.iter_mut().zip(clamps) {
                upper.clamp_v = clamp_v;
            }
        }
        if first.is_some_and(|off| off < CLOSE) || gated.uppers == stage.uppers {
            break;
        }
        if let Some(stack) = &mut trial.stack {
            for (upper, gated) in stack.uppers.iter_mut().zip(&gated.uppers) {
                upper.clamp_v = gated.clamp_v;
            }
        }
    }
    let (off, stage) = best.ok_or(SizingError::NoSolution {
        residual: f64::INFINITY,
    })?;
    if off > 10.0 * CLOSE {
        notes.push(format!(
            "The gate supplies cannot share the voltage as the ratings do: the capacitances within the stack leave {:.0} % of the peak on the wrong switch.",
            100.0 * off
        ));
    }
    Ok(stage)
}

/// How far the nodes' peaks lie from their shares, relative to the whole, and better clamps.
fn shifted(stack: &Stack, stage: &Stage, reading: &Reading) -> (f64, Vec<f64>) {
    let stresses = &reading.detail.stack;
    let whole: f64 = stresses.iter().map(|s| s.drain_source_v).sum();
    let (mut below, mut chain) = (0.0, stage.device_f);
    let mut off = 0.0f64;
    let mut clamps = Vec::new();
    for ((stress, share), upper) in stresses.iter().zip(&stack.shares).zip(&stage.uppers) {
        below += stress.drain_source_v;
        let error = share * whole - below;
        off = off.max(error.abs() / whole);
        // The part of a clamp's rise that arrives at the peak.
        let node = chain + upper.node_f;
        let gain = node / (node + upper.across_f);
        chain = node * upper.across_f / (node + upper.across_f);
        clamps.push((upper.clamp_v + error / gain).max(0.02 * whole));
    }
    (off, clamps)
}
