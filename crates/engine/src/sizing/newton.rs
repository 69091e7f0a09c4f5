//! Newton's method on the conditions of soft switching and power.

use super::problem::{Point, Problem, Way};
use super::{SizingError, ideal};
use crate::stage::Stage;
use nalgebra::{DMatrix, DVector};

/// Conditions count as met when they are below this, relative to the supply.
const MET: f64 = 1e-10;
/// What is left where a very high Q and a very stiff choke amplify rounding: a ten-millionth
/// of the supply is far below anything that can be measured.
const ROUNDING: f64 = 1e-7;
const MOST_ITERATIONS: usize = 40;
const STEPS_OF_THE_WAY: [usize; 3] = [1, 8, 40];
/// Least 1/(w C2 R): below it the series capacitor has become a blocking capacitor.
const LEAST_ELASTANCE: f64 = 1e-7;

/// What may be moved.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Unknown {
    Shunt,
    Reactance,
    Load,
    /// Only in the search for the least loaded Q: the coil moves, the capacitor blocks.
    LoadedQ,
}

struct Search<'a> {
    problem: &'a Problem,
    unknowns: Vec<Unknown>,
    seeks_power: bool,
    loaded_q: Option<f64>,
}

/// The stage that meets the conditions, the body diode put back.
pub(super) fn size(problem: &Problem, notes: &mut Vec<String>) -> Result<Stage, SizingError> {
    let pins = &problem.pins;
    let branch_pinned = pins.series_coil.is_some() && pins.series_capacitor.is_some();
    let shunt_pinned = pins.shunt.is_some();
    let mut point = start(problem);
    if branch_pinned && shunt_pinned && !problem.seeks_load() {
        // Nothing that soft switching depends on is left open.
        let stage = Stage {
            diode: problem.diode,
            ..problem.stage(&point, Way(1.0))
        };
        return with_supply(problem, stage);
    }
    let mut unknowns = Vec::new();
    if !shunt_pinned {
        unknowns.push(Unknown::Shunt);
    }
    if !branch_pinned {
        unknowns.push(Unknown::Reactance);
    }
    let mut seeks_power = problem.seeks_load();
    if problem.seeks_load() {
        unknowns.push(Unknown::Load);
        if unknowns.len() == 2 {
            seeks_power = false;
            notes.push(
                "With this many parts pinned the power is what they give, not what was asked."
                    .into(),
            );
        }
    }
    if unknowns.len() < 2 {
        return Err(too_many_pins(problem));
    }
    if !shunt_pinned && pins.series_capacitor.is_some() && !branch_pinned {
        notes.push("The series capacitor is pinned, so the series coil follows it and the loaded Q is a result.".into());
    }
    let search = Search {
        problem,
        unknowns,
        seeks_power,
        loaded_q: None,
    };
    point = search.along_the_way(point)?;
    let stage = problem.stage(&point, Way(1.0));
    if !shunt_pinned {
        let needed_f = point.shunt / (problem.omega() * point.load_ohm);
        if needed_f < problem.device_f * (1.0 - 1e-9) {
            return Err(SizingError::Capacitance {
                device_f: problem.device_f,
                needed_f,
                highest_hz: problem.carrier_hz * needed_f / problem.device_f,
            });
        }
    }
    with_supply(
        problem,
        Stage {
            diode: problem.diode,
            ..stage
        },
    )
}

/// Scales the supply to the power where the supply was left open.
fn with_supply(problem: &Problem, stage: Stage) -> Result<Stage, SizingError> {
    let (None, Some(power)) = (problem.supply_v, problem.power_w) else {
        return Ok(stage);
    };
    let mut supply_v = stage.supply_v;
    // Power goes with the square of the supply as long as no diode conducts; where one
    // does, a few secant steps settle it.
    for _ in 0..MOST_ITERATIONS {
        let got = Stage { supply_v, ..stage }
            .probe()
            .map_err(|e| SizingError::Stage(e.into()))?
            .output_power_w;
        let factor = (power / got).sqrt();
        if !(factor.is_finite() && factor > 0.0) {
            break;
        }
        supply_v *= factor;
        if (factor - 1.0).abs() < 1e-12 {
            return Ok(Stage { supply_v, ..stage });
        }
    }
    Err(SizingError::Field {
        field: "brief.power_w",
        reason: format!("no supply was found that gives {power} W with this load"),
    })
}

fn start(problem: &Problem) -> Point {
    let ideal = ideal(problem.duty);
    let supply_v = problem.supply_v.unwrap_or(10.0);
    let load_ohm = match (problem.pins.drain_load, problem.power_w) {
        (Some(load), _) => load.r_ohm,
        (None, Some(power)) => ideal.power * supply_v * supply_v / power,
        (None, None) => 1.0,
    };
    let shunt = match problem.pins.shunt {
        Some(pin) => problem.omega() * (pin.c_f + problem.device_f) * load_ohm,
        None => ideal.shunt,
    };
    Point {
        shunt,
        reactance: ideal.reactance - problem.load_x() / load_ohm,
        load_ohm,
        supply_v,
    }
}

/// What is pinned leaves no room: say what the pinned shunt would have to be.
fn too_many_pins(problem: &Problem) -> SizingError {
    let mut freed = problem.clone();
    freed.pins.shunt = None;
    freed.pins.series_capacitor = None;
    let nearest = match size(&freed, &mut Vec::new()) {
        Ok(stage) => format!(
            "what is pinned leaves too little open for soft switching; with this load it needs a shunt capacitor of {:.4} pF and a series capacitor of {:.4} pF: free one of them, or pin every part to see the stage as built",
            stage.shunt.value * 1e12,
            stage.series_capacitor.value * 1e12
        ),
        Err(error) => format!(
            "what is pinned leaves too little open for soft switching, and even with both capacitors freed: {error}"
        ),
    };
    SizingError::Pinned { nearest }
}

impl Search<'_> {
    fn along_the_way(&self, start: Point) -> Result<Point, SizingError> {
        let mut last = SizingError::NoSolution {
            residual: f64::INFINITY,
        };
        for steps in STEPS_OF_THE_WAY {
            let mut point = start;
            let mut failed = None;
            for step in 0..=steps {
                if steps == 1 && step == 0 {
                    continue;
                }
                match self.newton(point, Way(step as f64 / steps as f64)) {
                    Ok(next) => point = next,
                    Err(error) => {
                        failed = Some(error);
                        break;
                    }
                }
            }
            match failed {
                None => return Ok(point),
                Some(error) => last = error,
            }
        }
        Err(self.least_loaded_q(start).unwrap_or(last))
    }

    /// Where the loaded Q is what stands in the way: the least that would do.
    fn least_loaded_q(&self, start: Point) -> Option<SizingError> {
        let pins = &self.problem.pins;
        if pins.series_coil.is_some() || pins.series_capacitor.is_some() || self.loaded_q.is_some()
        {
            return None;
        }
        let mut high = self.problem.clone();
        let mut point = start;
        let mut q = self.problem.loaded_q.max(10.0);
        let unknowns = self.unknowns.clone();
        // Walk down in loaded Q until the capacitor has almost become a short.
        while q > self.problem.loaded_q {
            high.loaded_q = q;
            let search = Search {
                problem: &high,
                unknowns: unknowns.clone(),
                seeks_power: self.seeks_power,
                loaded_q: None,
            };
            match search.newton(point, Way(1.0)) {
                Ok(next) => point = next,
                Err(_) => break,
            }
            if high.branch(&point, Way(1.0)).1 < 0.2 {
                break;
            }
            q *= 0.93;
        }
        let unknowns = unknowns
            .iter()
            .map(|&u| {
                if u == Unknown::Reactance {
                    Unknown::LoadedQ
                } else {
                    u
                }
            })
            .collect();
        let search = Search {
            problem: &high,
            unknowns,
            seeks_power: self.seeks_power,
            loaded_q: Some(q),
        };
        let found = search.newton(point, Way(1.0)).ok()?;
        let least = found.reactance;
        (least > self.problem.loaded_q).then_some(SizingError::LoadedQ {
            asked: self.problem.loaded_q,
            least,
            duty: self.problem.duty,
        })
    }

    fn stage(&self, point: &Point, way: Way) -> Stage {
        if self.loaded_q.is_none() {
            return self.problem.stage(point, way);
        }
        // The coil alone makes the reactance; the capacitor only blocks.
        let mut problem = self.problem.clone();
        problem.loaded_q = point.reactance + 10.0 * LEAST_ELASTANCE;
        problem.stage(point, way)
    }

    fn conditions(&self, point: &Point, way: Way) -> Option<DVector<f64>> {
        if !(point.shunt > 0.0 && point.load_ohm > 0.0) {
            return None;
        }
        if self.loaded_q.is_none() {
            let (coil, capacitor) = self.problem.branch(point, way);
            if coil <= 0.0 || capacitor < LEAST_ELASTANCE {
                return None;
            }
        }
        let (turn_on_v, slope, power_w) = self.stage(point, way).turn_on().ok()?;
        let v = point.supply_v;
        let mut conditions = vec![turn_on_v / v, slope / (v * self.problem.omega())];
        if self.seeks_power {
            conditions.push(power_w / self.problem.power_w? - 1.0);
        }
        let conditions = DVector::from_vec(conditions);
        conditions
            .iter()
            .all(|c| c.is_finite())
            .then_some(conditions)
    }

    fn moved(&self, point: &Point, unknown: Unknown, step: f64) -> Point {
        let mut moved = *point;
        match unknown {
            Unknown::Shunt => moved.shunt *= libm::exp(step),
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

    fn newton(&self, start: Point, way: Way) -> Result<Point, SizingError> {
        const PROBE_STEP: f64 = 2e-5;
        const LONGEST: f64 = 0.5;
        let mut point = start;
        let no_start = SizingError::NoSolution {
            residual: f64::INFINITY,
        };
        let mut here = self.conditions(&point, way).ok_or(no_start)?;
        for _ in 0..MOST_ITERATIONS {
            let residual = here.amax();
            if residual < MET {
                return Ok(point);
            }
            let stuck = SizingError::NoSolution { residual };
            let count = self.unknowns.len();
            let mut jacobian = DMatrix::<f64>::zeros(count, count);
            for (column, &unknown) in self.unknowns.iter().enumerate() {
                let up = self.conditions(&self.moved(&point, unknown, PROBE_STEP), way);
                let down = self.conditions(&self.moved(&point, unknown, -PROBE_STEP), way);
                let difference = match (up, down) {
                    (Some(up), Some(down)) => (up - down) / (2.0 * PROBE_STEP),
                    (Some(up), None) => (up - &here) / PROBE_STEP,
                    (None, Some(down)) => (&here - down) / PROBE_STEP,
                    (None, None) => return Err(stuck),
                };
                jacobian.set_column(column, &difference);
            }
            let Some(step) = jacobian.lu().solve(&-&here) else {
                return Err(stuck);
            };
            let mut scale = (LONGEST / step.amax()).min(1.0);
            let mut accepted = None;
            for _ in 0..14 {
                let mut candidate = point;
                for (&unknown, &length) in self.unknowns.iter().zip(&step) {
                    candidate = self.moved(&candidate, unknown, scale * length);
                }
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
            Err(SizingError::NoSolution {
                residual: here.amax(),
            })
        }
    }
}
