//! Newton's method on the conditions of soft switching and power.

use super::assembly::{Point, Way};
use super::problem::Problem;
use crate::stage::Stage;
use nalgebra::{DMatrix, DVector};

/// Conditions count as met when they are below this, relative to the supply.
const MET: f64 = 1e-10;
/// What is left where a very high Q and a very stiff choke amplify rounding: a millionth
/// of the supply is far below anything that can be measured.
const ROUNDING: f64 = 1e-6;
/// The same where a charge law is followed in steps.
const CURVED_MET: f64 = 1e-8;
const MOST_ITERATIONS: usize = 40;
/// The other load at which a load-independent stage switches at zero voltage, over its own.
const OTHER_LOAD: f64 = 3.0;
const LONGEST: f64 = 0.5;
/// Least 1/(w C2 R): below it the series capacitor has become a blocking capacitor.
const LEAST_ELASTANCE: f64 = 1e-7;

/// What may be moved.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Unknown {
    Shunt,
    Reactance,
    Load,
    /// The feed coil's resonance with the shunt.
    Feed,
    /// Only in the search for the least loaded Q: the coil moves, the capacitor blocks.
    LoadedQ,
}

/// One set of unknowns and conditions.
pub(super) struct Search<'a> {
    pub(super) problem: &'a Problem,
    pub(super) unknowns: Vec<Unknown>,
    pub(super) seeks_power: bool,
    /// Whether the turn-on voltage is to be zero at another load as well.
    pub(super) seeks_load_range: bool,
}

/// Newton's method found nothing; the least that remained of the conditions.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Missed(pub(super) f64);

impl Search<'_> {
    fn seeks_loaded_q(&self) -> bool {
        self.unknowns.contains(&Unknown::LoadedQ)
    }

    fn stage(&self, point: &Point, way: Way) -> Stage {
        if !self.seeks_loaded_q() {
            return self.problem.stage(point, way);
        }
        // The coil alone makes the reactance; the capacitor only blocks.
        let loaded_q = point.reactance + 10.0 * LEAST_ELASTANCE;
        self.problem.stage(point, Way { loaded_q, ..way })
    }

    fn conditions(&self, point: &Point, way: Way) -> Option<DVector<f64>> {
        if !(point.shunt > 0.0 && point.load_ohm > 0.0) {
            return None;
        }
        if !self.seeks_loaded_q() {
            let (coil, capacitor) = self.problem.branch(point, way);
            if coil <= 0.0 || capacitor < LEAST_ELASTANCE {
                return None;
            }
        }
        let stage = self.stage(point, way);
        let (turn_on_v, slope, power_w) = stage.turn_on().ok()?;
        let v = point.supply_v;
        let mut conditions = vec![turn_on_v / v, slope / (v * self.problem.omega())];
        if self.seeks_power {
            conditions.push(power_w / self.problem.power_w? - 1.0);
        }
        if self.seeks_load_range {
            let mut light = stage;
            light.load.r_ohm *= OTHER_LOAD;
            conditions.push(light.turn_on().ok()?.0 / v);
        }
        let conditions = DVector::from_vec(conditions);
        conditions
            .iter()
            .all(|c| c.is_finite())
            .then_some(conditions)
    }

    /// Carrier power of the stage at a point, watts.
    pub(super) fn power(&self, point: &Point) -> Option<f64> {
        self.stage(point, self.problem.wanted())
            .turn_on()
            .ok()
            .map(|(_, _, power)| power)
    }

    fn moved(&self, point: &Point, unknown: Unknown, step: f64) -> Point {
        let mut moved = *point;
        match unknown {
            Unknown::Shunt => moved.shunt *= libm::exp(step),
            Unknown::Feed => moved.feed_q *= libm::exp(step),
            Unknown::Reactance | Unknown::LoadedQ => moved.reactance += step,
            Unknown::Load => {
                let factor = libm::exp(step);
                moved.load_ohm *= factor;
                if self.problem.pins.shunt.is_some() {
                    moved.shunt *= factor;
                }
            }
        }
        moved
    }

    fn moved_by(&self, point: &Point, step: &DVector<f64>, scale: f64) -> Point {
        self.unknowns
            .iter()
            .zip(step)
            .fold(*point, |at, (&unknown, &length)| {
                self.moved(&at, unknown, scale * length)
            })
    }

    /// How the conditions move with the unknowns, by differences.
    fn jacobian(&self, point: &Point, way: Way, here: &DVector<f64>) -> Option<DMatrix<f64>> {
        const PROBE_STEP: f64 = 2e-5;
        let count = self.unknowns.len();
        let mut jacobian = DMatrix::<f64>::zeros(count, count);
        for (column, &unknown) in self.unknowns.iter().enumerate() {
            let up = self.conditions(&self.moved(point, unknown, PROBE_STEP), way);
            let down = self.conditions(&self.moved(point, unknown, -PROBE_STEP), way);
            let difference = match (up, down) {
                (Some(up), Some(down)) => (up - down) / (2.0 * PROBE_STEP),
                (Some(up), None) => (up - here) / PROBE_STEP,
                (None, Some(down)) => (here - down) / PROBE_STEP,
                (None, None) => return None,
            };
            jacobian.set_column(column, &difference);
        }
        Some(jacobian)
    }

    /// Broyden's method (Math. Comp. 19, 1965; from memory) from the derivative with a constant
    /// capacitance, which costs next to nothing beside one steady state with a charge law.
    fn broyden(&self, start: Point, way: Way) -> Result<Point, Missed> {
        const MOST_STEPS: usize = 24;
        let mut point = start;
        let mut here = self.conditions(&point, way).ok_or(Missed(f64::INFINITY))?;
        let flat = Way { bend: 0.0, ..way };
        let mut jacobian = self
            .conditions(&point, flat)
            .and_then(|at| self.jacobian(&point, flat, &at))
            .ok_or(Missed(here.amax()))?;
        let mut anew = false;
        for _ in 0..MOST_STEPS {
            let residual = here.amax();

            if residual < CURVED_MET {
                return Ok(point);
            }
            let missed = Missed(residual);
            let step = jacobian.clone().lu().solve(&-&here).ok_or(missed)?;
            let scale = (LONGEST / step.amax()).min(1.0);
            let mut next = None;
            for shorter in [1.0, 0.25] {
                let candidate = self.moved_by(&point, &step, shorter * scale);
                if let Some(there) = self.conditions(&candidate, way)
                    && there.amax() < residual
                {
                    next = Some((candidate, there, shorter * scale));
                    break;
                }
            }
            match next {
                Some((candidate, there, scale)) => {
                    let taken = step * scale;
                    let error = &there - &here - &jacobian * &taken;
                    jacobian += error * taken.transpose() / taken.norm_squared();
                    (point, here) = (candidate, there);
                }
                None if residual < ROUNDING => return Ok(point),
                // Once more with the true derivative.
                None if !anew => {
                    anew = true;
                    jacobian = self.jacobian(&point, way, &here).ok_or(missed)?;
                }
                None => return Err(missed),
            }
        }
        if here.amax() < ROUNDING {
            Ok(point)
        } else {
            Err(Missed(here.amax()))
        }
    }

    /// The point that meets every condition, from `start`.
    pub(super) fn newton(&self, start: Point, way: Way) -> Result<Point, Missed> {
        self.newton_within(start, way, MOST_ITERATIONS)
    }

    /// The same with a cap on the iterations.
    pub(super) fn newton_within(
        &self,
        start: Point,
        way: Way,
        most: usize,
    ) -> Result<Point, Missed> {
        if way.bend > 0.0 {
            return self.broyden(start, way);
        }
        let mut point = start;
        let mut here = self.conditions(&point, way).ok_or(Missed(f64::INFINITY))?;
        for _ in 0..most {
            let residual = here.amax();
            if residual < MET {
                return Ok(point);
            }
            let stuck = Missed(residual);
            let Some(jacobian) = self.jacobian(&point, way, &here) else {
                if residual < ROUNDING {
                    return Ok(point);
                }
                return Err(stuck);
            };
            let Some(step) = jacobian.lu().solve(&-&here) else {
                return Err(stuck);
            };
            let mut scale = (LONGEST / step.amax()).min(1.0);
            let mut accepted = None;
            for _ in 0..8 {
                let candidate = self.moved_by(&point, &step, scale);
                if let Some(there) = self.conditions(&candidate, way)
                    && (there.amax() < residual * (1.0 - 0.1 * scale) || there.amax() < MET)
                {
                    accepted = Some((candidate, there));
                    break;
                }
                scale *= 0.5;
            }
            match accepted {
                Some((next, there)) => (point, here) = (next, there),
                // Rounding ends the descent close to the goal.
                None if residual < ROUNDING => return Ok(point),
                None => return Err(stuck),
            }
        }
        if here.amax() < ROUNDING {
            Ok(point)
        } else {
            Err(Missed(here.amax()))
        }
    }
}
