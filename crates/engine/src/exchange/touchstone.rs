//! Touchstone files of one and two ports: versions 1.1 and 2.0 in, version 1.1 out (IBIS Open
//! Forum, Touchstone File Format Specification, 1.1 of 2003 and 2.0 of 2009; from memory).

mod read;
mod rows;
mod write;

pub use read::read;

use num_complex::Complex64;
use std::fmt;

/// Scattering parameters at one frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Point {
    /// Hertz.
    pub hz: f64,
    /// `s[i][j]` is the wave out of port i for one into port j; of a one-port only `s[0][0]`.
    pub s: [[Complex64; 2]; 2],
}

/// A one-port or two-port over frequency: at least one point, frequencies strictly rising,
/// every number finite. The parameters are scattering parameters whatever the file stated.
#[derive(Debug, Clone, PartialEq)]
pub struct Touchstone {
    ports: usize,
    reference_ohm: [f64; 2],
    points: Vec<Point>,
}

/// What is wrong; the line is counted from 1.
#[derive(Debug, Clone, PartialEq)]
pub struct TouchstoneError {
    /// Line of the file; 0 where the data did not come from a text.
    pub line: usize,
    /// What is wrong there.
    pub fault: Fault,
}

/// What can be wrong.
#[derive(Debug, Clone, PartialEq)]
pub enum Fault {
    /// A word or keyword that the format does not have.
    Unknown {
        /// The word, its first 40 characters.
        word: String,
    },
    /// Part of the format that is not read here, such as hybrid parameters.
    Unsupported {
        /// The word, its first 40 characters.
        word: String,
    },
    /// Something before what has to come first, or a second time.
    Order {
        /// What was found.
        found: &'static str,
        /// What has to come first.
        wanted: &'static str,
    },
    /// Not a number of the kind that belongs there.
    Number {
        /// The text, its first 40 characters.
        text: String,
    },
    /// A row with the wrong count of numbers.
    Columns {
        /// How many there are (counting stops at 10).
        found: usize,
        /// How many belong there.
        wanted: usize,
    },
    /// Not one port and not two.
    Ports {
        /// How many.
        ports: usize,
    },
    /// A frequency not above the one before.
    NotRising {
        /// The frequency, hertz.
        hz: f64,
        /// The one before, hertz.
        before_hz: f64,
    },
    /// A frequency below zero, impedances or admittances without scattering parameters, or a
    /// number out of range.
    NotFinite {
        /// Frequency of the row, hertz.
        hz: f64,
    },
    /// The file ends too early.
    Truncated {
        /// Rows found.
        rows: usize,
        /// Rows announced; 0 where none were.
        announced: usize,
    },
    /// More rows than announced.
    TooMany {
        /// Rows announced.
        announced: usize,
    },
    /// No reference resistance above zero, or two that version 1.1 cannot state.
    Reference {
        /// Ohms of each port.
        ohm: [f64; 2],
    },
}

impl fmt::Display for TouchstoneError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        if self.line > 0 {
            write!(f, "line {}: ", self.line)?;
        }
        match &self.fault {
            Fault::Unknown { word } => write!(f, "\"{word}\" is no word of this format"),
            Fault::Unsupported { word } => write!(f, "\"{word}\" is not read here"),
            Fault::Order { found, wanted } => write!(f, "{found} comes before {wanted}"),
            Fault::Number { text } => write!(f, "\"{text}\" is not a number that belongs here"),
            Fault::Columns { found, wanted } => {
                write!(f, "the row has {found} numbers; it needs {wanted}")
            }
            Fault::Ports { ports } => write!(f, "{ports} ports; one or two are read"),
            Fault::NotRising { hz, before_hz } => {
                write!(f, "{hz} Hz does not lie above the {before_hz} Hz before it")
            }
            Fault::NotFinite { hz } => {
                write!(
                    f,
                    "the values at {hz} Hz have no finite scattering parameters"
                )
            }
            Fault::Truncated { rows, announced: 0 } => {
                write!(f, "the file ends too early, after {rows} rows")
            }
            Fault::Truncated { rows, announced } => {
                write!(f, "the data end after {rows} of {announced} rows")
            }
            Fault::TooMany { announced } => {
                write!(f, "there are more than the {announced} rows announced")
            }
            Fault::Reference { ohm: [a, b] } => {
                write!(f, "{a} and {b} ohm cannot be the references here")
            }
        }
    }
}

impl std::error::Error for TouchstoneError {}

impl Touchstone {
    /// A one-port from its reflection coefficients: (hertz, reflection).
    ///
    /// # Errors
    /// See [`Fault`]; the line is 0.
    pub fn one_port(
        reference_ohm: f64,
        points: impl IntoIterator<Item = (f64, Complex64)>,
    ) -> Result<Self, TouchstoneError> {
        let zero = Complex64::ZERO;
        let points = points.into_iter().map(|(hz, reflection)| Point {
            hz,
            s: [[reflection, zero], [zero, zero]],
        });
        Self::checked(1, [reference_ohm; 2], points.collect())
    }

    /// A two-port from its scattering parameters.
    ///
    /// # Errors
    /// See [`Fault`]; the line is 0.
    pub fn two_port(reference_ohm: [f64; 2], points: Vec<Point>) -> Result<Self, TouchstoneError> {
        Self::checked(2, reference_ohm, points)
    }

    fn checked(
        ports: usize,
        reference_ohm: [f64; 2],
        points: Vec<Point>,
    ) -> Result<Self, TouchstoneError> {
        let wrong = |fault| Err(TouchstoneError { line: 0, fault });
        if reference_ohm.iter().any(|r| !(r.is_finite() && *r > 0.0)) {
            return wrong(Fault::Reference { ohm: reference_ohm });
        }
        if points.is_empty() {
            let (rows, announced) = (0, 0);
            return wrong(Fault::Truncated { rows, announced });
        }
        let mut before_hz = -1.0;
        for &Point { hz, s } in &points {
            if !finite(&s) || !hz.is_finite() || hz < 0.0 {
                return wrong(Fault::NotFinite { hz });
            }
            if hz <= before_hz {
                return wrong(Fault::NotRising { hz, before_hz });
            }
            before_hz = hz;
        }
        Ok(Self {
            ports,
            reference_ohm,
            points,
        })
    }

    /// Number of ports, 1 or 2.
    pub fn ports(&self) -> usize {
        self.ports
    }

    /// Reference resistance of each port, ohms; the second of a one-port means nothing.
    pub fn reference_ohm(&self) -> [f64; 2] {
        self.reference_ohm
    }

    /// The points, frequency rising.
    pub fn points(&self) -> &[Point] {
        &self.points
    }

    /// Scattering parameters at `hz`, each linear between its neighbours in the plane; none
    /// outside the file's range.
    pub fn scattering_at(&self, hz: f64) -> Option<[[Complex64; 2]; 2]> {
        let above = self.points.partition_point(|p| p.hz < hz);
        let right = self.points.get(above)?;
        if right.hz == hz {
            return Some(right.s);
        }
        let left = self.points.get(above.checked_sub(1)?)?;
        let part = (hz - left.hz) / (right.hz - left.hz);
        let mut s = left.s;
        for i in 0..2 {
            for j in 0..2 {
                s[i][j] += (right.s[i][j] - left.s[i][j]) * part;
            }
        }
        Some(s)
    }

    /// Impedance of a one-port at `hz`, ohms, from its interpolated reflection coefficient; none
    /// outside the file's range, for a two-port, and for a perfect open.
    pub fn impedance_at(&self, hz: f64) -> Option<Complex64> {
        if self.ports != 1 {
            return None;
        }
        let reflection = self.scattering_at(hz)?[0][0];
        let one = Complex64::ONE;
        let z = (one + reflection) / (one - reflection) * self.reference_ohm[0];
        (z.re.is_finite() && z.im.is_finite()).then_some(z)
    }
}

fn finite(s: &[[Complex64; 2]; 2]) -> bool {
    let mut all = s.iter().flatten();
    all.all(|c| c.re.is_finite() && c.im.is_finite())
}
