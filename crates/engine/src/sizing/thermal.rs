//! Junction temperature, solved together with the stage.
//!
//! The on-resistance rises with the junction's temperature, the temperature with the device's
//! losses, and the losses with the on-resistance: each trial temperature sizes and solves the
//! whole stage anew, and the temperature is a root of what the losses would make of it. Where
//! no temperature up to the highest is one, the device runs away.

use super::SizingError;
use super::problem::Problem;
use crate::answer::Losses;
use crate::stage::Stage;

/// Highest temperature that is looked at, degrees Celsius: no semiconductor is left there.
const HIGHEST_C: f64 = 500.0;
/// Temperature at which the on-resistance is stated, degrees Celsius (common practice).
const REFERENCE_C: f64 = 25.0;
const MOST_TRIALS: usize = 60;
/// Kelvin to which the temperature is found.
const CLOSE_K: f64 = 1e-9;

/// How a device heats up.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Thermal {
    pub(super) ambient_c: f64,
    pub(super) k_per_w: f64,
    /// Relative rise of the on-resistance per kelvin.
    pub(super) per_k: f64,
}

impl Thermal {
    /// The on-resistance at a temperature, as a multiple of that at 25 degrees Celsius.
    fn factor(&self, junction_c: f64) -> f64 {
        (1.0 + self.per_k * (junction_c - REFERENCE_C)).max(0.0)
    }
}

/// Watts that heat the junction.
pub(super) fn device_w(losses: &Losses) -> f64 {
    losses.switch_w + losses.turn_on_w + losses.turn_off_w + losses.diode_w
}

/// The answer of `trial` at the junction temperature that it itself makes, with that
/// temperature; without thermal data the answer at 25 degrees Celsius and none.
///
/// # Errors
/// What `trial` says, or thermal runaway.
pub(super) fn settle<T>(
    problem: &Problem,
    mut trial: impl FnMut(&Problem) -> Result<T, SizingError>,
    losses: impl Fn(&T) -> (Losses, &Stage),
) -> Result<(T, Option<f64>), SizingError> {
    let Some(thermal) = problem.thermal else {
        return Ok((trial(problem)?, None));
    };
    let mut before: Option<Box<Stage>> = None;
    let mut at = |junction_c: f64| {
        let mut warm = problem.clone();
        warm.near = before.take();
        warm.on_resistance_ohm *= thermal.factor(junction_c);
        for upper in warm.stack.iter_mut().flat_map(|s| &mut s.uppers) {
            upper.on_resistance_ohm *= thermal.factor(junction_c);
        }
        let answer = trial(&warm)?;
        let (lost, stage) = losses(&answer);
        before = Some(Box::new(stage.clone()));
        let rises_to = thermal.ambient_c + thermal.k_per_w * device_w(&lost) / problem.sides();
        Ok::<_, SizingError>((answer, rises_to))
    };
    let (answer, first) = at(thermal.ambient_c)?;
    if thermal.per_k == 0.0 {
        return Ok((answer, Some(first)));
    }
    // `low` heats up further; `high`, once found, would cool down.
    let (mut low, mut low_gap) = (thermal.ambient_c, first - thermal.ambient_c);
    let mut high: Option<(f64, f64)> = None;
    let mut next = first;
    for _ in 0..MOST_TRIALS {
        if next.is_nan() || next >= HIGHEST_C {
            return Err(SizingError::Runaway {
                ambient_c: thermal.ambient_c,
                reached_c: low,
            });
        }
        let found = match at(next) {
            Ok(found) => found,
            // The stage ceases to exist on the way up: the heat is what ends it.
            Err(_) if high.is_none() => {
                return Err(SizingError::Runaway {
                    ambient_c: thermal.ambient_c,
                    reached_c: next,
                });
            }
            Err(error) => return Err(error),
        };
        let gap = found.1 - next;
        if gap.abs() <= CLOSE_K || high.is_some_and(|(h, _)| h - low <= CLOSE_K) {
            return Ok((found.0, Some(next)));
        }
        if gap > 0.0 {
            // The losses grow faster than in proportion, so the line through the last two
            // points meets zero before the root does, and where it never falls there is none.
            let slope = (gap - low_gap) / (next - low);
            let ahead = if slope < 0.0 {
                next - gap / slope
            } else {
                f64::INFINITY
            };
            (low, low_gap) = (next, gap);
            next = match high {
                Some((h, h_gap)) => low + (h - low) * low_gap / (low_gap - h_gap),
                None => ahead,
            };
        } else {
            high = Some((next, gap));
            next = low + (next - low) * low_gap / (low_gap - gap);
        }
    }
    Err(SizingError::Runaway {
        ambient_c: thermal.ambient_c,
        reached_c: low,
    })
}
