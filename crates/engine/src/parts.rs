//! Parts that can be bought or wound: preferred values, air coils, toroids, on-chip spirals.
//!
//! Each kind has a forward direction (dimensions in, figures out) and an inverse (wanted value
//! in, several choices out). Nothing here knows of class E.

pub mod series;
pub mod skin;
pub mod solenoid;
pub mod spiral;
pub mod toroid;

mod root;

use crate::quantity;
use std::f64::consts::PI;
use std::fmt;

/// Permeability of free space, H/m. The value before the SI of 2019; today's differs by less
/// than 1e-9 of it.
pub const MU0: f64 = 4e-7 * PI;

/// Why there is no part.
#[derive(Debug, Clone, PartialEq)]
pub enum PartError {
    /// A number is not one, or lies outside what can be built or computed.
    Range {
        /// Which number.
        what: &'static str,
        /// Its unit; empty for a plain number.
        unit: &'static str,
        /// The number given.
        value: f64,
        /// The least allowed.
        least: f64,
        /// The greatest allowed.
        most: f64,
    },
    /// Too many or too few entries in a list.
    Count {
        /// Which list.
        what: &'static str,
        /// How many there are.
        found: usize,
        /// The most allowed; one is the least.
        most: usize,
    },
    /// The conductors do not fit: the space they need and the space there is, metres.
    Fit {
        /// What must fit.
        what: &'static str,
        /// Metres needed.
        needed_m: f64,
        /// Metres there are.
        room_m: f64,
    },
    /// No coil within the limits has the inductance; the nearest on either side, henries.
    Unreachable {
        /// Henries asked for.
        wanted_h: f64,
        /// The highest below it that the limits allow.
        below_h: Option<f64>,
        /// The lowest above it that the limits allow.
        above_h: Option<f64>,
    },
}

impl fmt::Display for PartError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let show = quantity::format;
        match *self {
            Self::Range {
                what,
                unit,
                value,
                least,
                most,
            } => write!(
                f,
                "{what} must be from {} to {}, not {}",
                show(least, unit),
                show(most, unit),
                show(value, unit)
            ),
            Self::Count { what, found, most } => {
                write!(f, "{what}: 1 to {most} entries, not {found}")
            }
            Self::Fit {
                what,
                needed_m,
                room_m,
            } => write!(
                f,
                "{what}: {} needed, {} there",
                show(needed_m, "m"),
                show(room_m, "m")
            ),
            Self::Unreachable {
                wanted_h,
                below_h,
                above_h,
            } => {
                let wanted = show(wanted_h, "H");
                write!(f, "no coil within these limits has {wanted}; ")?;
                match (below_h.map(|l| show(l, "H")), above_h.map(|l| show(l, "H"))) {
                    (Some(low), Some(high)) => write!(f, "the nearest have {low} and {high}"),
                    (Some(one), None) | (None, Some(one)) => write!(f, "the nearest has {one}"),
                    (None, None) => write!(f, "not even the least winding fits them"),
                }
            }
        }
    }
}

impl std::error::Error for PartError {}

/// In what a coil that has the wanted inductance falls short of the other demands.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Shortfall {
    /// Quality factor at the frequency.
    Q {
        /// The coil's.
        found: f64,
        /// The least asked for.
        least: f64,
    },
    /// Self-resonance as a multiple of the frequency.
    Resonance {
        /// The coil's.
        found: f64,
        /// The least asked for.
        least: f64,
    },
    /// Temperature rise of the surface, kelvin.
    Rise {
        /// The coil's.
        found_k: f64,
        /// The most allowed.
        most_k: f64,
    },
}

impl fmt::Display for Shortfall {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Q { found, least } => write!(f, "Q {found:.0}, at least {least:.0} asked"),
            Self::Resonance { found, least } => write!(
                f,
                "self-resonance at {found:.2} times the frequency, at least {least:.2} asked"
            ),
            Self::Rise { found_k, most_k } => {
                write!(f, "{found_k:.0} K warmer, at most {most_k:.0} K asked")
            }
        }
    }
}

/// `value` if it is a number from `least` to `most`.
fn within(
    what: &'static str,
    unit: &'static str,
    value: f64,
    [least, most]: [f64; 2],
) -> Result<f64, PartError> {
    if value >= least && value <= most {
        Ok(value)
    } else {
        Err(PartError::Range {
            what,
            unit,
            value,
            least,
            most,
        })
    }
}

/// The frequencies at which parts are computed, hertz.
const FREQUENCIES: [f64; 2] = [1.0, 1e12];
/// The inductances that are wound, henries.
const INDUCTANCES: [f64; 2] = [1e-12, 10.0];
/// Resistivities of what counts as a conductor, ohm metres.
const RESISTIVITIES: [f64; 2] = [1e-9, 1e-4];

/// The nearest inductances on either side of the wanted one, as they are met.
#[derive(Default)]
struct Nearest {
    below: Option<f64>,
    above: Option<f64>,
}

impl Nearest {
    fn meet(&mut self, inductance: f64, wanted: f64) {
        if inductance < wanted {
            self.below = Some(self.below.map_or(inductance, |b| b.max(inductance)));
        } else {
            self.above = Some(self.above.map_or(inductance, |a| a.min(inductance)));
        }
    }

    fn error(&self, wanted_h: f64) -> PartError {
        PartError::Unreachable {
            wanted_h,
            below_h: self.below,
            above_h: self.above,
        }
    }
}
