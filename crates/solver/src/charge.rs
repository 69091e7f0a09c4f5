//! How much charge a capacitor that depends on its voltage holds.
//!
//! Capacitance, charge and energy of a law are one another's exact integrals, so that the
//! power balance of a stage closes however the law looks.

use std::fmt;

/// Charge over voltage of a capacitor: a curve, and a constant capacitance beside it.
#[derive(Debug, Clone, PartialEq)]
pub struct ChargeLaw {
    curve: Curve,
    scale: f64,
    beside_f: f64,
}

#[derive(Debug, Clone, PartialEq)]
enum Curve {
    Junction {
        cj0_f: f64,
        built_in_v: f64,
        grading: f64,
    },
    Points(Vec<Knot>),
}

/// A point of the curve, with what has gathered from 0 V up to it.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Knot {
    volt: f64,
    farad: f64,
    slope: f64,
    coulomb: f64,
    joule: f64,
}

/// Why there is no such law.
#[derive(Debug, Clone, PartialEq)]
pub enum LawError {
    /// A number that cannot be.
    Value {
        /// Which.
        what: &'static str,
        /// The number.
        value: f64,
    },
    /// A row of the points that cannot be.
    Row {
        /// Which row, from 1.
        row: usize,
        /// What is wrong with it.
        reason: &'static str,
        /// Its voltage.
        volt: f64,
        /// Its capacitance, farads.
        farad: f64,
    },
    /// Too few points, too many, or columns of different length.
    Count {
        /// Voltages given.
        volts: usize,
        /// Capacitances given.
        farads: usize,
    },
}

impl fmt::Display for LawError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Value { what, value } => write!(f, "{what} cannot be {value}"),
            Self::Row {
                row,
                reason,
                volt,
                farad,
            } => write!(
                f,
                "row {row} of the capacitance points ({volt} V, {:.4} pF): {reason}",
                farad * 1e12
            ),
            Self::Count { volts, farads } => write!(
                f,
                "the capacitance points need 2 to {MOST_POINTS} rows of two numbers, not {volts} voltages and {farads} capacitances"
            ),
        }
    }
}

impl std::error::Error for LawError {}

/// The most points that a curve takes.
pub const MOST_POINTS: usize = 200;
/// Below this fraction of the built-in potential in the forward direction the junction law
/// goes on in a straight line (common practice: it has a pole at the whole of it).
const STRAIGHT_BELOW: f64 = 0.5;
const HIGHEST_GRADING: f64 = 2.0;

impl ChargeLaw {
    /// The junction law Cj0 / (1 + v/Vbi)^m; farads, volts, and the grading exponent (0 to 2).
    ///
    /// # Errors
    /// A number that is out of range.
    pub fn junction(cj0_f: f64, built_in_v: f64, grading: f64) -> Result<Self, LawError> {
        let within = |what, value: f64, least: f64, most: f64| {
            if value >= least && value <= most {
                Ok(value)
            } else {
                Err(LawError::Value { what, value })
            }
        };
        Ok(Self::of(Curve::Junction {
            cj0_f: within("the capacitance at 0 V", cj0_f, 1e-30, 1e3)?,
            built_in_v: within("the built-in potential", built_in_v, 1e-3, 1e3)?,
            grading: within("the grading", grading, 0.0, HIGHEST_GRADING)?,
        }))
    }

    /// The curve through points of a datasheet, volts and farads: a monotone cubic (Fritsch and
    /// Carlson, SIAM J. Numer. Anal. 17, 1980, with the slopes of Fritsch and Butland, SIAM J.
    /// Sci. Stat. Comput. 5, 1984; from memory), constant beyond either end.
    ///
    /// # Errors
    /// The row at fault: voltages that do not rise, capacitances that are not positive.
    pub fn points(volts: &[f64], farads: &[f64]) -> Result<Self, LawError> {
        let count = volts.len();
        if count != farads.len() || !(2..=MOST_POINTS).contains(&count) {
            return Err(LawError::Count {
                volts: count,
                farads: farads.len(),
            });
        }
        for k in 0..count {
            let (volt, farad) = (volts[k], farads[k]);
            let wrong = if !(volt.abs() <= 1e6 && farad.abs() <= 1e3) {
                "out of range"
            } else if farad < 1e-30 {
                "the capacitance must be greater than zero, or the charge would fall"
            } else if k > 0 && volt <= volts[k - 1] {
                "the voltage must rise from row to row"
            } else {
                continue;
            };
            return Err(LawError::Row {
                row: k + 1,
                reason: wrong,
                volt,
                farad,
            });
        }
        let slopes = monotone_slopes(volts, farads);
        let mut knots: Vec<Knot> = (0..count)
            .map(|k| Knot {
                volt: volts[k],
                farad: farads[k],
                slope: slopes[k],
                coulomb: 0.0,
                joule: 0.0,
            })
            .collect();
        for k in 1..count {
            let end = between(&knots[k - 1], &knots[k], knots[k].volt);
            (knots[k].coulomb, knots[k].joule) = (end.coulomb, end.joule);
        }
        let mut law = Self::of(Curve::Points(knots));
        // Counted from 0 V, wherever the first point lies.
        let zero = law.curve_at(0.0);
        if let Curve::Points(knots) = &mut law.curve {
            for knot in knots {
                knot.coulomb -= zero.coulomb;
                knot.joule -= zero.joule;
            }
        }
        Ok(law)
    }

    fn of(curve: Curve) -> Self {
        Self {
            curve,
            scale: 1.0,
            beside_f: 0.0,
        }
    }

    /// Whether every derivative of the capacitance is continuous where a stage moves.
    pub fn is_smooth(&self) -> bool {
        matches!(self.curve, Curve::Junction { .. })
    }

    /// The law with its curve `factor` times as high, what stands beside it unchanged.
    pub fn scaled(&self, factor: f64) -> Self {
        Self {
            scale: self.scale * factor,
            ..self.clone()
        }
    }

    /// The law with a constant capacitance beside it, farads.
    pub fn beside(&self, farad: f64) -> Self {
        Self {
            beside_f: self.beside_f + farad,
            ..self.clone()
        }
    }

    /// Capacitance (farads) and charge (coulombs, counted from 0 V) at a voltage.
    pub fn at(&self, volt: f64) -> (f64, f64) {
        let (farad, coulomb) = match &self.curve {
            // Without the energy, one power will do.
            Curve::Junction {
                cj0_f,
                built_in_v,
                grading,
            } if volt >= -STRAIGHT_BELOW * built_in_v && (1.0 - grading).abs() > 1e-3 => {
                let u = 1.0 + volt / built_in_v;
                let farad = if *grading == 0.5 {
                    cj0_f / u.sqrt()
                } else {
                    cj0_f * libm::exp(-grading * libm::log(u))
                };
                (farad, built_in_v * (farad * u - cj0_f) / (1.0 - grading))
            }
            _ => {
                let here = self.curve_at(volt);
                (here.farad, here.coulomb)
            }
        };
        (
            self.scale * farad + self.beside_f,
            self.scale * coulomb + self.beside_f * volt,
        )
    }

    /// Energy held at a voltage, joules.
    pub fn energy_j(&self, volt: f64) -> f64 {
        self.scale * self.curve_at(volt).joule + 0.5 * self.beside_f * volt * volt
    }

    /// The constant capacitance that holds the same energy at a voltage, farads.
    pub fn energy_equivalent_f(&self, volt: f64) -> f64 {
        2.0 * self.energy_j(volt) / (volt * volt)
    }

    fn curve_at(&self, volt: f64) -> Knot {
        match &self.curve {
            Curve::Junction {
                cj0_f,
                built_in_v,
                grading,
            } => junction_at(*cj0_f, *built_in_v, *grading, volt),
            Curve::Points(knots) => {
                let after = knots.partition_point(|knot| knot.volt <= volt);
                match (after.checked_sub(1), knots.get(after)) {
                    (None, Some(first)) => flat(first, volt),
                    (Some(before), Some(next)) => between(&knots[before], next, volt),
                    (Some(last), None) => flat(&knots[last], volt),
                    (None, None) => Knot {
                        volt,
                        farad: 0.0,
                        slope: 0.0,
                        coulomb: 0.0,
                        joule: 0.0,
                    },
                }
            }
        }
    }
}

/// A straight line of capacitance from a knot.
fn straight(from: &Knot, volt: f64) -> Knot {
    let d = volt - from.volt;
    let charge = d * (from.farad + 0.5 * from.slope * d);
    Knot {
        volt,
        farad: from.farad + from.slope * d,
        slope: from.slope,
        coulomb: from.coulomb + charge,
        joule: from.joule + from.volt * charge + d * d * (0.5 * from.farad + from.slope * d / 3.0),
    }
}

fn flat(from: &Knot, volt: f64) -> Knot {
    straight(
        &Knot {
            slope: 0.0,
            ..*from
        },
        volt,
    )
}

/// The cubic between two knots.
fn between(a: &Knot, b: &Knot, volt: f64) -> Knot {
    let h = b.volt - a.volt;
    let d = volt - a.volt;
    let secant = (b.farad - a.farad) / h;
    let c1 = a.slope;
    let c2 = (3.0 * secant - 2.0 * a.slope - b.slope) / h;
    let c3 = (a.slope + b.slope - 2.0 * secant) / (h * h);
    let charge = d * (a.farad + d * (c1 / 2.0 + d * (c2 / 3.0 + d * c3 / 4.0)));
    let moment = d * d * (a.farad / 2.0 + d * (c1 / 3.0 + d * (c2 / 4.0 + d * c3 / 5.0)));
    Knot {
        volt,
        farad: a.farad + d * (c1 + d * (c2 + d * c3)),
        slope: c1 + d * (2.0 * c2 + d * 3.0 * c3),
        coulomb: a.coulomb + charge,
        joule: a.joule + a.volt * charge + moment,
    }
}

fn monotone_slopes(x: &[f64], y: &[f64]) -> Vec<f64> {
    let n = x.len();
    let h = |k: usize| x[k + 1] - x[k];
    let secant = |k: usize| (y[k + 1] - y[k]) / h(k);
    if n == 2 {
        return vec![secant(0); 2];
    }
    // One-sided three-point slope, kept from overshooting.
    let end = |h0: f64, h1: f64, s0: f64, s1: f64| {
        let slope = ((2.0 * h0 + h1) * s0 - h0 * s1) / (h0 + h1);
        if slope * s0 <= 0.0 {
            0.0
        } else if s0 * s1 <= 0.0 && slope.abs() > 3.0 * s0.abs() {
            3.0 * s0
        } else {
            slope
        }
    };
    (0..n)
        .map(|k| {
            if k == 0 {
                return end(h(0), h(1), secant(0), secant(1));
            }
            if k == n - 1 {
                return end(h(n - 2), h(n - 3), secant(n - 2), secant(n - 3));
            }
            let (s0, s1) = (secant(k - 1), secant(k));
            if s0 * s1 <= 0.0 {
                return 0.0;
            }
            let (w0, w1) = (2.0 * h(k) + h(k - 1), h(k) + 2.0 * h(k - 1));
            (w0 + w1) / (w0 / s0 + w1 / s1)
        })
        .collect()
}

fn junction_at(cj0: f64, built_in: f64, grading: f64, volt: f64) -> Knot {
    let u = 1.0 + volt / built_in;
    if u >= 1.0 - STRAIGHT_BELOW {
        let ln = libm::log(u);
        let farad = cj0 * libm::exp(-grading * ln);
        // (u^p - 1) / p, by way of what both integrals share.
        let over = |p: f64| {
            if p == 0.0 {
                ln
            } else {
                libm::expm1(p * ln) / p
            }
        };
        let (first, second) = (over(1.0 - grading), over(2.0 - grading));
        return Knot {
            volt,
            farad,
            slope: -grading * farad / (built_in * u),
            coulomb: cj0 * built_in * first,
            joule: cj0 * built_in * built_in * (second - first),
        };
    }
    let knee = junction_at(cj0, built_in, grading, -STRAIGHT_BELOW * built_in);
    straight(&knee, volt)
}
