//! Matching a resistance at the stage to a load at one frequency.
//!
//! Every section is made of quarter turns between a resistance and a greater or smaller one,
//! Q = sqrt(R_hi/R_lo - 1), series Q R_lo, shunt Q/R_hi (textbook; Y. Han, D.J. Perreault,
//! IEEE Trans. Power Electron. 21(5), 2006). A load's own reactance is taken into the part
//! beside it, which may turn a coil into a capacitor.

mod section;

pub use section::{Form, Pass, least_q};

use super::{Place, Quality, Reactance, Rung, above_zero, build, omega_of};
use crate::ac::{self, AcError, Drive};
use crate::circuit::{Circuit, Element};
use crate::design::Load;
use num_complex::Complex64;
use section::lossless;
use std::fmt;

/// What is to be matched.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Wanted {
    /// Frequency of the match, hertz.
    pub carrier_hz: f64,
    /// Resistance wanted at the input, ohms.
    pub input_ohm: f64,
    /// What is driven, at that frequency.
    pub load: Load,
    /// Kind of section.
    pub form: Form,
    /// Quality of the parts.
    pub quality: Quality,
    /// Whether the two parts beside the input are moved until the input is exact with the
    /// losses in place; otherwise the parts are those of the lossless section.
    pub exact: bool,
}

/// A match.
#[derive(Debug, Clone, PartialEq)]
pub struct Match {
    /// Its parts, from the input to the load.
    pub rungs: Vec<Rung>,
    /// Impedance at the input with the losses in place, ohms.
    pub input: Complex64,
    /// Part of the input power that reaches the load, exactly.
    pub efficiency: f64,
    /// The same to first order in the losses, from the lossless section: 1 - Q/Qu of Han and
    /// Perreault 2006, summed over all parts.
    pub first_order_efficiency: f64,
}

/// Why there is no match.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum MatchError {
    /// A frequency, resistance or quality that is not above zero, or a load reactance that is
    /// not finite.
    Value {
        /// Which one.
        what: &'static str,
        /// The value, SI units.
        value: f64,
    },
    /// The Q asked for is below what the resistances need.
    Quality {
        /// What was asked for.
        q: f64,
        /// The least that there is.
        least: f64,
    },
    /// With these losses the input cannot be made exact.
    NotReached {
        /// Nearest reflection coefficient found, magnitude.
        reflection: f64,
    },
    /// The network that came out has no answer.
    Network(AcError),
}

impl fmt::Display for MatchError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Value { what, value } => write!(f, "the {what} cannot be {value}"),
            Self::Quality { q, least } => {
                write!(
                    f,
                    "a Q of {q} is too low for these resistances; the least is {least:.4}"
                )
            }
            Self::NotReached { reflection } => write!(
                f,
                "with these losses the section cannot be made exact; a reflection of {reflection:.1e} remains"
            ),
            Self::Network(error) => error.fmt(f),
        }
    }
}

impl std::error::Error for MatchError {}

impl From<AcError> for MatchError {
    fn from(error: AcError) -> Self {
        Self::Network(error)
    }
}

/// Finds a match.
///
/// # Errors
/// See [`MatchError`].
pub fn synthesise(wanted: &Wanted) -> Result<Match, MatchError> {
    let load = Complex64::new(wanted.load.r_ohm, wanted.load.x_ohm);
    for (what, value) in [
        ("frequency", wanted.carrier_hz),
        ("input resistance", wanted.input_ohm),
        ("load resistance", load.re),
        (
            "quality of the parts",
            wanted.quality.wrong().unwrap_or(1.0),
        ),
    ] {
        if !above_zero(value) {
            return Err(MatchError::Value { what, value });
        }
    }
    if !load.im.is_finite() {
        let (what, value) = ("load reactance", load.im);
        return Err(MatchError::Value { what, value });
    }
    // Down the resistances from the input when the load's is the smaller one.
    let down = wanted.input_ohm > load.re;
    let mut ladder = lossless(wanted.form, wanted.input_ohm, load, down)?;
    let mut first_order_efficiency = first_order(&ladder, load, &wanted.quality);
    if wanted.exact
        && let Err(error) = correct(&mut ladder, wanted, load)
    {
        // Losses may eat up a small step down; the load's parallel resistance is a step up.
        if !down || 1.0 / load.inv().re <= wanted.input_ohm {
            return Err(error);
        }
        ladder = lossless(wanted.form, wanted.input_ohm, load, false)?;
        first_order_efficiency = first_order(&ladder, load, &wanted.quality);
        correct(&mut ladder, wanted, load).map_err(|_| error)?;
    }
    let omega = omega_of(wanted.carrier_hz);
    let rungs = ladder.iter().filter_map(|r| r.rung(&wanted.quality, omega));
    let rungs: Vec<Rung> = rungs.collect();
    let (input, efficiency) = measure(&rungs, &wanted.load, wanted.carrier_hz)?;
    Ok(Match {
        rungs,
        input,
        efficiency,
        first_order_efficiency,
    })
}

/// Input impedance (ohms) of a ladder that ends in a load, and the part of the power into it
/// that reaches the load, by the circuit's exact solution at `hz`.
///
/// # Errors
/// See [`AcError`].
pub fn measure(rungs: &[Rung], load: &Load, hz: f64) -> Result<(Complex64, f64), AcError> {
    let (input, output, middle) = (1, 2, 3);
    let mut circuit = Circuit::default();
    let omega = omega_of(hz);
    let x = load.x_ohm;
    let end = if x == 0.0 { 0 } else { middle };
    let ohm = load.r_ohm;
    let resistance = circuit.add("load", output, end, Element::Resistor { ohm });
    if x > 0.0 {
        let (henry, ohm) = (x / omega, 0.0);
        circuit.add("load reactance", end, 0, Element::Inductor { henry, ohm });
    } else if x < 0.0 {
        let (farad, ohm) = (-1.0 / (omega * x), 0.0);
        circuit.add("load reactance", end, 0, Element::Capacitor { farad, ohm });
    }
    build(rungs, &mut circuit, input, output);
    let driven = ac::drive(&circuit, input, Drive::Current(Complex64::ONE), hz)?;
    let seen = driven.voltage(input);
    let out = driven.current(resistance).norm_sqr() * load.r_ohm;
    Ok((seen, out / seen.re))
}

/// Impedance at the input of a ladder, ohms.
fn seen(ladder: &[Reactance], load: Complex64, quality: &Quality) -> Complex64 {
    let inward = ladder.iter().rev();
    inward.fold(load, |behind, place| place.seen(behind, quality))
}

/// One less the losses to first order: each part's reactive power over its Q, with the
/// lossless section's currents and the load's power as 1.
fn first_order(ladder: &[Reactance], load: Complex64, quality: &Quality) -> f64 {
    let ideal = Quality::default();
    let mut behind = load;
    let mut loss = 0.0;
    for place in ladder.iter().rev() {
        let Some(x) = place.reactance() else { continue };
        let before = place.seen(behind, &ideal);
        // Power is the same everywhere: current squared is 1/Re Z, voltage squared 1/Re Y.
        let reactive = match place.place {
            Place::Series => x.abs() / behind.re,
            Place::Shunt => 1.0 / (x.abs() * behind.inv().re),
        };
        loss += reactive * quality.loss(x);
        behind = before;
    }
    1.0 - loss
}

/// Moves the two places beside the input until the input is exact with the losses in place:
/// Newton's method on the reflection coefficient, a difference quotient for the slope.
fn correct(ladder: &mut [Reactance], wanted: &Wanted, load: Complex64) -> Result<(), MatchError> {
    const MOST_ITERATIONS: usize = 60;
    const MET: f64 = 1e-13;
    // Where rounding of a very high ratio ends the descent.
    const ROUNDING: f64 = 1e-10;
    let r = wanted.input_ohm;
    let reflection = |ladder: &[Reactance]| {
        let z = seen(ladder, load, &wanted.quality);
        (z - r) / (z + r)
    };
    // Natural size of what is moved: the input's resistance or conductance.
    let scale = |place: &Reactance| match place.place {
        Place::Series => r,
        Place::Shunt => 1.0 / r,
    };
    let mut left = reflection(ladder);
    for _ in 0..MOST_ITERATIONS {
        let size = left.norm_sqr().sqrt();
        if size < MET {
            return Ok(());
        }
        let mut slopes = [Complex64::ZERO; 2];
        for (k, slope) in slopes.iter_mut().enumerate() {
            let kept = ladder[k].value;
            let step = 1e-7 * scale(&ladder[k]).max(kept.abs());
            ladder[k].value = kept + step;
            *slope = (reflection(ladder) - left) / step;
            ladder[k].value = kept;
        }
        let [a, b] = slopes;
        let determinant = a.re * b.im - b.re * a.im;
        let steps = [
            (b.re * left.im - b.im * left.re) / determinant,
            (a.im * left.re - a.re * left.im) / determinant,
        ];
        let kept = [ladder[0].value, ladder[1].value];
        let mut part = 1.0;
        let mut next = None;
        while part > 1e-3 {
            for k in 0..2 {
                ladder[k].value = kept[k] + part * steps[k];
            }
            let there = reflection(ladder);
            if there.norm_sqr().sqrt() < size {
                next = Some(there);
                break;
            }
            part *= 0.5;
        }
        let Some(there) = next else {
            (ladder[0].value, ladder[1].value) = (kept[0], kept[1]);
            break;
        };
        left = there;
    }
    let reflection = left.norm_sqr().sqrt();
    if reflection < ROUNDING {
        Ok(())
    } else {
        Err(MatchError::NotReached { reflection })
    }
}
