//! The other aim: the highest drain efficiency under the drain limit.
//!
//! With a lossy switch the least loss lies a little off soft switching. A pattern search
//! (Hooke and Jeeves, J. ACM 8, 1961; from memory) over shunt capacitance and series
//! reactance starts from the soft-switching stage; the load keeps the power where it is
//! free to.

use super::SizingError;
use super::problem::Problem;
use crate::stage::Stage;
use std::f64::consts::TAU;

const LEAST_STEP: f64 = 1e-5;
const MOST_TRIALS: usize = 600;

/// The stage of least loss near `stage`.
pub(super) fn improve(
    problem: &Problem,
    stage: Stage,
    notes: &mut Vec<String>,
) -> Result<Stage, SizingError> {
    if problem.pins.shunt.is_some()
        || problem.pins.series_capacitor.is_some()
        || problem.supply_v.is_none()
    {
        notes.push("Least loss needs both capacitors free and a given supply: this is the soft-switching stage.".into());
        return Ok(stage);
    }
    let best = |s: &Stage| judged(problem, s);
    let mut trials = 0;
    let mut at = [0.0, 0.0];
    let (mut winner, mut efficiency) = match best(&stage) {
        Some(found) => found,
        None => {
            notes.push(
                "The drain limit cannot be kept at this supply: this is the soft-switching stage."
                    .into(),
            );
            return Ok(stage);
        }
    };
    let mut step = 0.05;
    while step > LEAST_STEP && trials < MOST_TRIALS {
        let mut gained = false;
        for (axis, sign) in [(0, 1.0), (0, -1.0), (1, 1.0), (1, -1.0)] {
            let mut trial = at;
            trial[axis] += sign * step;
            trials += 1;
            if let Some((candidate, better)) = moved(problem, &stage, trial).as_ref().and_then(best)
                && better > efficiency
            {
                (at, winner, efficiency, gained) = (trial, candidate, better, true);
            }
        }
        if !gained {
            step *= 0.5;
        }
    }
    Ok(winner)
}

/// The stage with its shunt capacitance and net reactance moved.
fn moved(problem: &Problem, stage: &Stage, [shunt, reactance]: [f64; 2]) -> Option<Stage> {
    let total = (stage.device_f + stage.shunt.value) * libm::exp(shunt);
    let omega = TAU * stage.carrier_hz;
    let elastance = 1.0 / (omega * stage.series_capacitor.value) - reactance * stage.load.r_ohm;
    if total < stage.device_f || elastance <= 0.0 {
        return None;
    }
    let mut next = stage.clone();
    let capacitor_q = |c: f64| problem.capacitor_q.map_or(0.0, |q| 1.0 / (omega * c * q));
    next.shunt.value = total - stage.device_f;
    next.shunt.esr_ohm = if next.shunt.value > 0.0 {
        capacitor_q(next.shunt.value)
    } else {
        0.0
    };
    next.series_capacitor.value = 1.0 / (omega * elastance);
    next.series_capacitor.esr_ohm = capacitor_q(next.series_capacitor.value);
    Some(next)
}

/// The stage at the wanted power, with its efficiency; none beyond the drain limit.
fn judged(problem: &Problem, stage: &Stage) -> Option<(Stage, f64)> {
    let mut stage = stage.clone();
    let mut probed = stage.probe().ok()?;
    if problem.seeks_load() {
        let power = problem.power_w?;
        for _ in 0..20 {
            let factor = probed.output_power_w / power;
            if (factor - 1.0).abs() < 1e-10 {
                break;
            }
            stage = scaled(&stage, factor, problem);
            probed = stage.probe().ok()?;
        }
    }
    let within = problem
        .drain_limit_v
        .is_none_or(|limit| probed.drain_peak_v <= limit);
    within.then_some((stage, probed.output_power_w / probed.supply_power_w))
}

/// The stage at `factor` times the impedance, the device staying as it is.
fn scaled(stage: &Stage, factor: f64, problem: &Problem) -> Stage {
    let mut next = stage.clone();
    let total = (stage.device_f + stage.shunt.value) / factor;
    next.load.r_ohm *= factor;
    if problem.pins.feed.is_none()
        && !matches!(problem.feed, crate::design::Feed::Inductance { .. })
    {
        next.feed.value *= factor;
        next.feed.esr_ohm *= factor;
    }
    next.shunt.value = (total - stage.device_f).max(0.0);
    if stage.shunt.value > 0.0 && next.shunt.value > 0.0 {
        next.shunt.esr_ohm *= stage.shunt.value / next.shunt.value;
    }
    if problem.pins.series_coil.is_none() {
        next.series_coil.value *= factor;
        next.series_coil.esr_ohm *= factor;
    }
    next.series_capacitor.value /= factor;
    next.series_capacitor.esr_ohm *= factor;
    next
}
