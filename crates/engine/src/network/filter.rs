//! Low-pass ladders against harmonics, from the prototypes of G.L. Matthaei, L. Young, E.M.T.
//! Jones, Microwave Filters, Impedance-Matching Networks, and Coupling Structures, 1964,
//! section 4.05 (formulas from memory, tables recomputed).

use super::{Parts, Place, Quality, Rung, above_zero, omega_of};
use crate::stage::Part;
use std::f64::consts::{LN_10, PI};
use std::fmt;

/// Most elements that a ladder may have.
pub const MOST_ELEMENTS: usize = 31;

/// Shape of the pass band.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Shape {
    /// Flat; 3.01 dB at the cut-off.
    Butterworth,
    /// Equal ripples; their depth once more at the cut-off.
    Chebyshev {
        /// Depth of the ripples, decibels.
        ripple_db: f64,
    },
}

/// An element that also blocks one harmonic.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Trap {
    /// Number of the element, from the source side, counted from 0.
    pub element: usize,
    /// Frequency that it blocks, hertz; above the carrier.
    pub trap_hz: f64,
}

/// A low-pass ladder to be made.
#[derive(Debug, Clone, PartialEq)]
pub struct LowPass {
    /// Shape of the pass band.
    pub shape: Shape,
    /// Number of elements.
    pub elements: usize,
    /// Where the first one stands, seen from the source.
    pub first: Place,
    /// Cut-off, hertz.
    pub cutoff_hz: f64,
    /// Resistance of the source, ohms.
    pub source_ohm: f64,
    /// Carrier, hertz: what the Q of the parts refers to, and where a trap leaves the element
    /// as it was.
    pub carrier_hz: f64,
    /// Quality of the parts.
    pub quality: Quality,
    /// Elements replaced by traps.
    pub traps: Vec<Trap>,
}

/// A low-pass ladder.
#[derive(Debug, Clone, PartialEq)]
pub struct Ladder {
    /// Its elements, from the source to the load.
    pub rungs: Vec<Rung>,
    /// The resistance that it has to end in, ohms.
    pub load_ohm: f64,
}

/// Why there is no filter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum FilterError {
    /// A value that is not above zero.
    Value {
        /// Which one.
        what: &'static str,
        /// The value, SI units.
        value: f64,
    },
    /// No element, or more than [`MOST_ELEMENTS`].
    Elements {
        /// How many.
        elements: usize,
    },
    /// A trap at an element that does not exist or is a trap already.
    TrapElement {
        /// Its number.
        element: usize,
        /// How many elements there are.
        elements: usize,
    },
    /// A trap that does not lie above the carrier.
    TrapFrequency {
        /// The trap's, hertz.
        trap_hz: f64,
        /// The carrier, hertz.
        carrier_hz: f64,
    },
}

impl fmt::Display for FilterError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Value { what, value } => write!(f, "the {what} cannot be {value}"),
            Self::Elements { elements } => write!(
                f,
                "a ladder has 1 to {MOST_ELEMENTS} elements, not {elements}"
            ),
            Self::TrapElement { element, elements } => write!(
                f,
                "element {element} of {elements} (from 0) cannot be made a trap"
            ),
            Self::TrapFrequency {
                trap_hz,
                carrier_hz,
            } => write!(
                f,
                "a trap at {trap_hz} Hz has to lie above the carrier, {carrier_hz} Hz"
            ),
        }
    }
}

impl std::error::Error for FilterError {}

/// The prototype's g values g1 to gn and its end g(n+1), for a source of 1 and a cut-off of
/// 1 radian per second.
///
/// # Errors
/// See [`FilterError`].
pub fn prototype(shape: Shape, elements: usize) -> Result<Vec<f64>, FilterError> {
    if !(1..=MOST_ELEMENTS).contains(&elements) {
        return Err(FilterError::Elements { elements });
    }
    let n = elements as f64;
    let a = |k: usize| libm::sin((2 * k - 1) as f64 * PI / (2.0 * n));
    let mut g = Vec::with_capacity(elements + 1);
    match shape {
        Shape::Butterworth => {
            g.extend((1..=elements).map(|k| 2.0 * a(k)));
            g.push(1.0);
        }
        Shape::Chebyshev { ripple_db } => {
            let (what, value) = ("ripple", ripple_db);
            if !above_zero(ripple_db) {
                return Err(FilterError::Value { what, value });
            }
            let beta = -libm::log(libm::tanh(ripple_db * LN_10 / 40.0));
            let gamma = libm::sinh(beta / (2.0 * n));
            g.push(2.0 * a(1) / gamma);
            for k in 2..=elements {
                let s = libm::sin((k - 1) as f64 * PI / n);
                let b = gamma * gamma + s * s;
                g.push(4.0 * a(k - 1) * a(k) / (b * g[k - 2]));
            }
            let end = libm::tanh(beta / 4.0);
            g.push(if elements % 2 == 1 {
                1.0
            } else {
                1.0 / (end * end)
            });
            if let Some(&value) = g.iter().find(|g| !above_zero(**g)) {
                return Err(FilterError::Value { what, value });
            }
        }
    }
    Ok(g)
}

impl LowPass {
    /// Makes the ladder.
    ///
    /// # Errors
    /// See [`FilterError`].
    pub fn make(&self) -> Result<Ladder, FilterError> {
        for (what, value) in [
            ("cut-off", self.cutoff_hz),
            ("source resistance", self.source_ohm),
            ("carrier", self.carrier_hz),
            ("quality of the parts", self.quality.wrong().unwrap_or(1.0)),
        ] {
            if !above_zero(value) {
                return Err(FilterError::Value { what, value });
            }
        }
        let g = prototype(self.shape, self.elements)?;
        let (cutoff, omega) = (omega_of(self.cutoff_hz), omega_of(self.carrier_hz));
        let mut place = self.first;
        let mut rungs = Vec::with_capacity(self.elements);
        for value in &g[..self.elements] {
            // Reactance or susceptance at the carrier.
            let parts = match place {
                Place::Series => {
                    let x = value * self.source_ohm * (omega / cutoff);
                    self.quality.part(x, omega)
                }
                Place::Shunt => {
                    let x = -self.source_ohm / (value * (omega / cutoff));
                    self.quality.part(x, omega)
                }
            };
            rungs.push(Rung { place, parts });
            place = place.other();
        }
        for trap in &self.traps {
            self.set(trap, &mut rungs)?;
        }
        // The end is a resistance behind a shunt element, a conductance behind a series one;
        // `place` is already the one after the last.
        let end = g[self.elements];
        let load_ohm = match place {
            Place::Series => self.source_ohm * end,
            Place::Shunt => self.source_ohm / end,
        };
        Ok(Ladder { rungs, load_ohm })
    }

    /// Turns an element into a trap that is the same at the carrier.
    fn set(&self, trap: &Trap, rungs: &mut [Rung]) -> Result<(), FilterError> {
        let (element, elements) = (trap.element, rungs.len());
        let missing = FilterError::TrapElement { element, elements };
        let rung = rungs.get_mut(element).ok_or(missing)?;
        if !(trap.trap_hz.is_finite() && trap.trap_hz > self.carrier_hz) {
            return Err(FilterError::TrapFrequency {
                trap_hz: trap.trap_hz,
                carrier_hz: self.carrier_hz,
            });
        }
        let ratio = self.carrier_hz / trap.trap_hz;
        let rest = 1.0 - ratio * ratio;
        let (omega, resonance) = (omega_of(self.carrier_hz), omega_of(trap.trap_hz));
        let coil = |value: f64| Part {
            value,
            esr_ohm: self.quality.impedance(omega * value).re,
        };
        let capacitor = |value: f64| Part {
            value,
            esr_ohm: self.quality.impedance(-1.0 / (omega * value)).re,
        };
        let partner = |value: f64| 1.0 / (resonance * resonance * value);
        rung.parts = match rung.parts {
            Parts::Coil(p) => Parts::ParallelTrap {
                coil: coil(p.value * rest),
                capacitor: capacitor(partner(p.value * rest)),
            },
            Parts::Capacitor(p) => Parts::SeriesTrap {
                coil: coil(partner(p.value * rest)),
                capacitor: capacitor(p.value * rest),
            },
            Parts::SeriesTrap { .. } | Parts::ParallelTrap { .. } => return Err(missing),
        };
        Ok(())
    }
}
