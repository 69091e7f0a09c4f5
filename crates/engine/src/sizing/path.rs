//! From the ideal stage to the wanted one.
//!
//! Newton's method is tried at once; where the ideal stage is too far a start, the feed, then
//! the losses, then the loaded Q are moved to the wanted ones in steps, each step starting
//! from the last. Where a leg cannot be finished, its end is the nearest that exists, and
//! that leg is the reason.

use super::assembly::{Point, Way};
use super::newton::{Missed, Search, Unknown};
use super::problem::Problem;
use super::{Ideal, SizingError, ideal};
use crate::design::Feed;
use crate::stage::Stage;

const MOST_ITERATIONS: usize = 40;
const MOST_STEPS: usize = 200;
const LEAST_STEP: f64 = 1.0 / 256.0;
/// A step of the right length converges in a few iterations.
const STEP_ITERATIONS: usize = 9;
/// A step that moves the point further than this has jumped to another branch.
const LONGEST_MOVE: f64 = 0.8;
const LONGEST_FACTOR: f64 = 2.2;

/// The stage that meets the conditions, the body diode put back.
pub(super) fn size(problem: &Problem, notes: &mut Vec<String>) -> Result<Stage, SizingError> {
    let (Some(_), None, Some(power)) = (&problem.device_law, problem.supply_v, problem.power_w)
    else {
        return size_at(problem, notes);
    };
    // Where the capacitance depends on the voltage, another supply is another stage.
    let mut supply_v = problem.expected_supply_v();
    for _ in 0..MOST_ITERATIONS {
        let given = Problem {
            supply_v: Some(supply_v),
            ..problem.clone()
        };
        let stage = size_at(&given, &mut notes.clone())?;
        let factor = (power / probe_w(&stage)?).sqrt();
        if (factor - 1.0).abs() < 1e-10 {
            size_at(&given, notes)?;
            return Ok(stage);
        }
        supply_v *= factor;
    }
    Err(no_supply(power))
}

fn probe_w(stage: &Stage) -> Result<f64, SizingError> {
    stage
        .probe()
        .map(|probed| probed.output_power_w)
        .map_err(|e| SizingError::Stage(e.into()))
}

fn no_supply(power: f64) -> SizingError {
    SizingError::Field {
        field: "brief.power_w",
        reason: format!("no supply was found that gives {power} W with this load"),
    }
}

fn size_at(problem: &Problem, notes: &mut Vec<String>) -> Result<Stage, SizingError> {
    let pins = &problem.pins;
    let branch_pinned = pins.series_coil.is_some() && pins.series_capacitor.is_some();
    let shunt_pinned = pins.shunt.is_some();
    let mut point = start(problem);
    if branch_pinned && shunt_pinned && !problem.seeks_load() {
        // Nothing that soft switching depends on is left open.
        let stage = Stage {
            diode: problem.diode,
            ..problem.stage(&point, problem.bent())
        };
        return with_supply(problem, stage);
    }
    let mut unknowns = Vec::new();
    if !shunt_pinned {
        unknowns.push(Unknown::Shunt);
    }
    if problem.seeks_feed() {
        if shunt_pinned
            || branch_pinned
            || pins.series_coil.is_some()
            || pins.series_capacitor.is_some()
        {
            return Err(SizingError::Field {
                field: "stage.feed",
                reason: "with this feed the shunt capacitor and the series branch follow from it: free them, or choose another feed".into(),
            });
        }
        unknowns.push(Unknown::Feed);
    }
    let parallel = problem.pins.feed.is_none() && problem.feed == Feed::Parallel {};
    if !branch_pinned && !parallel {
        unknowns.push(Unknown::Reactance);
    }
    let mut seeks_power = problem.seeks_load();
    if problem.seeks_load() {
        unknowns.push(Unknown::Load);
        if shunt_pinned || branch_pinned {
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
        seeks_load_range: problem.pins.feed.is_none() && problem.feed == Feed::LoadIndependent {},
    };
    let end = if problem.bends() {
        problem.bent()
    } else {
        problem.wanted()
    };
    // From a stage sized for nearly the same the way is short.
    let close = problem.near.as_ref().and_then(|near| {
        let from = Point {
            supply_v: point.supply_v,
            ..problem.point_of(near)
        };
        let found = search.newton_within(from, end, STEP_ITERATIONS).ok()?;
        close_by(&from, found)
    });
    point = if let Some(close) = close {
        close
    } else if problem.bends() {
        bend(&search, point)?
    } else {
        arrive(&search, point)?
    };
    let stage = problem.stage(&point, problem.bent());
    if !shunt_pinned {
        let needed_f = point.shunt * problem.sides() / (problem.omega() * point.load_ohm);
        if needed_f < problem.device_f * (1.0 - 1e-9) {
            return Err(SizingError::Capacitance {
                device_f: problem.device_f,
                by_energy: problem.device_law.is_some(),
                needed_f,
                highest_hz: problem.carrier_hz * needed_f / problem.device_f,
                load_ohm: point.load_ohm * needed_f / problem.device_f,
                feed: None,
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

/// The feed resonance q at which the stage needs all of the device's capacitance and hardly
/// more, with its coil in henries; none where no feed coil absorbs so much.
pub(super) fn absorbing_feed(problem: &Problem) -> Option<(f64, f64)> {
    const SOFTEST: f64 = 0.43;
    /// Where the shunt capacitance that a stage needs is greatest (Acar, Annema and Nauta, IEEE
    /// TCAS-I 54(12), 2007; value from memory).
    const GREATEST: f64 = 1.468;
    const MOST_TRIALS: usize = 14;
    const LEFT: std::ops::Range<f64> = 1.0..1.02;
    if problem.pins.feed.is_some() || problem.pins.shunt.is_some() {
        return None;
    }
    let needed = |q: f64| {
        let with = Problem {
            feed: Feed::Resonant { q },
            ..problem.clone()
        };
        match size(&with, &mut Vec::new()) {
            Ok(stage) => Some((
                (stage.device_f + stage.shunt.value) / problem.device_f,
                stage.feed.value,
            )),
            Err(SizingError::Capacitance { needed_f, .. }) => {
                Some((needed_f / problem.device_f, 0.0))
            }
            Err(_) => None,
        }
    };
    let (mut low, mut high) = (SOFTEST, GREATEST);
    if needed(high)?.0 < LEFT.start {
        return None;
    }
    for _ in 0..MOST_TRIALS {
        let q = 0.5 * (low + high);
        let (share, henry) = needed(q)?;
        if LEFT.contains(&share) {
            return Some((q, henry));
        }
        if share < LEFT.start {
            low = q;
        } else {
            high = q;
        }
    }
    needed(high).map(|(_, henry)| (high, henry))
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
        let got = probe_w(&Stage {
            supply_v,
            ..stage.clone()
        })?;
        let factor = (power / got).sqrt();
        if !(factor.is_finite() && factor > 0.0) {
            break;
        }
        supply_v *= factor;
        if (factor - 1.0).abs() < 1e-12 {
            return Ok(Stage { supply_v, ..stage });
        }
    }
    Err(no_supply(power))
}

fn start(problem: &Problem) -> Point {
    // The two feeds that are found with the stage, at infinite loaded Q and half duty: Grebennikov
    // and Sokal 2007; Zulinski and Grady 1990 (values from memory, recomputed).
    let (ideal, feed_q) = match problem.feed {
        Feed::Parallel {} => {
            let (shunt, reactance, power) = (0.68408, 0.0, 1.36324);
            (
                Ideal {
                    shunt,
                    reactance,
                    power,
                },
                1.41193,
            )
        }
        Feed::LoadIndependent {} => {
            let (shunt, reactance, power) = (0.5781, 0.2761, 1.2633);
            (
                Ideal {
                    shunt,
                    reactance,
                    power,
                },
                1.2915,
            )
        }
        _ => (ideal(problem.duty), 1.0),
    };
    let sides = problem.sides();
    let supply_v = problem.expected_supply_v();
    let load_ohm = match (problem.pins.drain_load, problem.power_w) {
        (Some(load), _) => load.r_ohm,
        (None, Some(power)) => sides * sides * ideal.power * supply_v * supply_v / power,
        (None, None) => 1.0,
    };
    let shunt = match problem.pins.shunt {
        Some(pin) => {
            let cross_f = pins_cross(problem);
            problem.omega() * (pin.c_f + cross_f + problem.device_f) * load_ohm / sides
        }
        None => ideal.shunt,
    };
    Point {
        shunt,
        reactance: ideal.reactance - problem.load_x() / load_ohm,
        load_ohm,
        supply_v,
        feed_q,
    }
}

/// A pinned capacitor between the drains, farads.
fn pins_cross(problem: &Problem) -> f64 {
    problem.pins.cross.map_or(0.0, |c| c.c_f)
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

/// With the device's charge law: from the stage with the constant capacitance of the same
/// energy. Where there is none for want of loaded Q, down to it with the law in place.
fn bend(search: &Search<'_>, start: Point) -> Result<Point, SizingError> {
    let problem = search.problem;
    let bent = problem.bent();
    let (from, missing) = match arrive(search, start) {
        Ok(point) => (point, problem.loaded_q),
        Err(SizingError::LoadedQ { least, .. }) => {
            const ABOVE: f64 = 1.3;
            let more = Problem {
                loaded_q: ABOVE * least,
                ..problem.clone()
            };
            let above = Search {
                problem: &more,
                unknowns: search.unknowns.clone(),
                seeks_power: search.seeks_power,
                seeks_load_range: search.seeks_load_range,
            };
            (arrive(&above, start)?, ABOVE * least)
        }
        Err(error) => return Err(error),
    };
    let law = |t: f64| Way {
        bend: t,
        loaded_q: missing,
        ..bent
    };
    let point = walk(search, from, law).map_err(|stalled| SizingError::Law {
        share: stalled.way.bend,
        stack: problem.stack.is_some(),
    })?;
    if missing == problem.loaded_q {
        return Ok(point);
    }
    let lower = |t: f64| Way {
        loaded_q: missing * libm::pow(problem.loaded_q / missing, t),
        ..bent
    };
    walk(search, point, lower).map_err(|stalled| loaded_q_error(search, &stalled))
}

/// Where a leg ended short.
struct Stalled {
    point: Point,
    way: Way,
}

fn arrive(search: &Search<'_>, start: Point) -> Result<Point, SizingError> {
    let problem = search.problem;
    let wanted = problem.wanted();
    if let Ok(point) = search.newton(start, wanted) {
        return Ok(point);
    }
    // The closed form holds at infinite loaded Q: the higher, the nearer it is.
    let mut residual = f64::INFINITY;
    let begun = [20.0, 60.0, 300.0]
        .into_iter()
        .map(|q| problem.loaded_q.max(q))
        .find_map(|q0| {
            let ideal = Way {
                bend: 0.0,
                losses: 0.0,
                feed: 0.0,
                loaded_q: q0,
            };
            match search.newton(start, ideal) {
                Ok(point) => Some((ideal, point)),
                Err(Missed(left)) => {
                    residual = residual.min(left);
                    None
                }
            }
        });
    let Some((ideal, point)) = begun else {
        return Err(SizingError::NoSolution { residual });
    };
    let q0 = ideal.loaded_q;
    let fed = |t: f64| Way { feed: t, ..ideal };
    let point = walk(search, point, fed).map_err(|stalled| feed_error(problem, &stalled))?;
    let lossy = |t: f64| Way {
        bend: 0.0,
        losses: t,
        feed: 1.0,
        loaded_q: q0,
    };
    let point = match walk(search, point, lossy) {
        Ok(point) => point,
        Err(stalled) if search.seeks_power => return by_load(search, point, &stalled, q0),
        Err(stalled) => {
            return Err(SizingError::Losses {
                fraction: stalled.way.losses,
            });
        }
    };
    match to_loaded_q(search, point, q0) {
        // A lower loaded Q may only stand in the way of the power.
        Err(stalled) if search.seeks_power => by_load(search, point, &stalled, q0),
        other => other.map_err(|stalled| loaded_q_error(search, &stalled)),
    }
}

/// The last leg: down to the wanted loaded Q.
fn to_loaded_q(search: &Search<'_>, point: Point, q0: f64) -> Result<Point, Stalled> {
    let wanted = search.problem.wanted();
    let q1 = wanted.loaded_q;
    let along = |t: f64| {
        let loaded_q = if t >= 1.0 {
            q1
        } else {
            q0 * libm::pow(q1 / q0, t)
        };
        Way { loaded_q, ..wanted }
    };
    walk(search, point, along)
}

/// At the least loaded Q the capacitor is a short and the coil alone makes the reactance:
/// that stage, solved for, is the least where the leg ended close to it.
fn loaded_q_error(search: &Search<'_>, stalled: &Stalled) -> SizingError {
    const CLOSE: f64 = 1.1;
    let problem = search.problem;
    let short = |&u: &Unknown| {
        if u == Unknown::Reactance {
            Unknown::LoadedQ
        } else {
            u
        }
    };
    let unknowns = search.unknowns.iter().map(short).collect();
    let reached = stalled.way.loaded_q;
    let least = Search {
        problem,
        unknowns,
        seeks_power: search.seeks_power,
        seeks_load_range: search.seeks_load_range,
    }
    .newton(stalled.point, stalled.way)
    .ok()
    .map(|found| found.reactance)
    .filter(|least| {
        *least > problem.loaded_q && *least < CLOSE * reached && *least > reached / CLOSE
    });
    SizingError::LoadedQ {
        asked: problem.loaded_q,
        least: least.unwrap_or(reached),
        exact: least.is_some(),
        duty: problem.duty,
    }
}

/// Where the losses stand in the way of the power: soft switching at one load after another,
/// from the ideal one down, until the power is there or falls again.
fn by_load(
    search: &Search<'_>,
    lossless: Point,
    stalled: &Stalled,
    q0: f64,
) -> Result<Point, SizingError> {
    const MOST_LOADS: usize = 80;
    const NEXT_LOAD: f64 = 0.9;
    let problem = search.problem;
    let power = problem.power_w.unwrap_or(f64::INFINITY);
    let unknowns: Vec<Unknown> = search
        .unknowns
        .iter()
        .copied()
        .filter(|&u| u != Unknown::Load)
        .collect();
    if unknowns.len() < 2 {
        return Err(SizingError::Losses {
            fraction: stalled.way.losses,
        });
    }
    let at_load = Search {
        problem,
        unknowns,
        seeks_power: false,
        seeks_load_range: search.seeks_load_range,
    };
    let lossy = |t: f64| Way {
        bend: 0.0,
        losses: t,
        feed: 1.0,
        loaded_q: q0,
    };
    // At a load ten times the ideal one the switch's resistance matters a tenth as much.
    let mut point = Point {
        load_ohm: 10.0 * lossless.load_ohm,
        ..lossless
    };
    point = at_load
        .newton(point, lossy(0.0))
        .ok()
        .and_then(|p| walk(&at_load, p, lossy).ok())
        .ok_or(SizingError::Losses {
            fraction: stalled.way.losses,
        })?;
    point =
        to_loaded_q(&at_load, point, q0).map_err(|stalled| loaded_q_error(&at_load, &stalled))?;
    let mut most: f64 = 0.0;
    for _ in 0..MOST_LOADS {
        let got = at_load.power(&point).unwrap_or(0.0);
        if got >= power {
            return search
                .newton(point, problem.wanted())
                .map_err(|Missed(residual)| SizingError::NoSolution { residual });
        }
        if got < 0.98 * most {
            break;
        }
        most = most.max(got);
        match at_load.newton(
            Point {
                load_ohm: NEXT_LOAD * point.load_ohm,
                ..point
            },
            problem.wanted(),
        ) {
            Ok(next) => point = next,
            Err(_) => break,
        }
    }
    Err(SizingError::Power { asked: power, most })
}

fn feed_error(problem: &Problem, stalled: &Stalled) -> SizingError {
    let nearest = match (problem.pins.feed, problem.feed) {
        (None, Feed::Resonant { q }) => format!(
            "a feed resonance q of {q:.4}; the nearest that was found is q = {:.4}",
            Problem::feed_q(q, stalled.way)
        ),
        _ => format!(
            "so small a feed coil; the smallest that was found is {:.4} µH, {:.3} times the load in reactance",
            problem.feed_l(&stalled.point, stalled.way) * 1e6,
            problem.feed_l(&stalled.point, stalled.way) * problem.omega() * problem.sides()
                / stalled.point.load_ohm
        ),
    };
    SizingError::Feed {
        duty: problem.duty,
        nearest,
        pinned: problem.pins.feed.is_some(),
    }
}

/// Follows the solution along `way` from 0 to 1 with steps as long as Newton's method bears.
fn walk(search: &Search<'_>, start: Point, way: impl Fn(f64) -> Way) -> Result<Point, Stalled> {
    let (mut t, mut point) = (0.0, start);
    let mut before: Option<(f64, Point)> = None;
    let mut step = 1.0;
    for _ in 0..MOST_STEPS {
        let next = f64::min(t + step, 1.0);
        let found = before
            .map(|(earlier, old)| extrapolate(&old, &point, (next - t) / (t - earlier)))
            .and_then(|guess| {
                close_by(
                    &guess,
                    search
                        .newton_within(guess, way(next), STEP_ITERATIONS)
                        .ok()?,
                )
            })
            .or_else(|| {
                close_by(
                    &point,
                    search
                        .newton_within(point, way(next), STEP_ITERATIONS)
                        .ok()?,
                )
            });
        match found {
            Some(found) if next >= 1.0 => return Ok(found),
            Some(found) => {
                before = Some((t, point));
                (t, point) = (next, found);
                step *= 2.0;
            }
            None => {
                step *= 0.5;
                if step < LEAST_STEP {
                    break;
                }
            }
        }
    }
    Err(Stalled { point, way: way(t) })
}

fn close_by(guess: &Point, found: Point) -> Option<Point> {
    let far = |a: f64, b: f64| !(1.0 / LONGEST_FACTOR..=LONGEST_FACTOR).contains(&(a / b));
    let jumped = far(found.shunt, guess.shunt)
        || far(found.load_ohm, guess.load_ohm)
        || (found.reactance - guess.reactance).abs() > LONGEST_MOVE * (1.0 + guess.reactance.abs());
    (!jumped).then_some(found)
}

fn extrapolate(old: &Point, now: &Point, share: f64) -> Point {
    let share = share.min(2.0);
    let ratio = |a: f64, b: f64| b * libm::pow(b / a, share);
    Point {
        shunt: ratio(old.shunt, now.shunt),
        reactance: now.reactance + share * (now.reactance - old.reactance),
        load_ohm: ratio(old.load_ohm, now.load_ohm),
        supply_v: now.supply_v,
        feed_q: ratio(old.feed_q, now.feed_q),
    }
}
