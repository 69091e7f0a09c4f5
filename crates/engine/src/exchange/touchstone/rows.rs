//! The option line, and rows of numbers to scattering parameters.

use super::{Fault, Point, finite};
use num_complex::Complex64;
use std::f64::consts::PI;

/// Numbers in the longest row: a frequency and four pairs.
const LONGEST: usize = 9;

/// What is stated.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Parameter {
    Scattering,
    Impedance,
    Admittance,
}

/// How a complex number is stated.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Format {
    MagnitudeAngle,
    DecibelAngle,
    RealImaginary,
}

/// The option line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Options {
    unit_hz: f64,
    parameter: Parameter,
    format: Format,
    pub(super) reference_ohm: f64,
}

/// Where the four pairs of a two-port stand.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Order {
    /// 11 21 12 22, always so in version 1.
    Columns,
    /// 11 12 21 22.
    Rows,
    /// Three pairs: 11, 12 and 21 at once, 22.
    Symmetric,
}

/// What a row is read with.
#[derive(Debug, Clone, Copy)]
pub(super) struct Layout {
    pub(super) options: Options,
    pub(super) ports: usize,
    pub(super) order: Order,
    pub(super) reference_ohm: [f64; 2],
    /// Version 1 states impedances and admittances relative to the reference.
    pub(super) normalised: bool,
}

/// The start of a hostile word is enough to name it.
pub(super) fn start_of(word: &str) -> String {
    word.chars().take(40).collect()
}

/// A finite number.
pub(super) fn number(text: &str) -> Result<f64, Fault> {
    let wrong = || Fault::Number {
        text: start_of(text),
    };
    // Rust also reads "inf" and "nan"; a number here has digits only.
    if text.len() > 400 || text.contains(['n', 'N']) {
        return Err(wrong());
    }
    let value: f64 = text.parse().map_err(|_| wrong())?;
    if value.is_finite() {
        Ok(value)
    } else {
        Err(wrong())
    }
}

/// A resistance above zero.
pub(super) fn resistance(text: &str) -> Result<f64, Fault> {
    let ohm = number(text)?;
    if ohm > 0.0 {
        Ok(ohm)
    } else {
        Err(Fault::Reference { ohm: [ohm; 2] })
    }
}

impl Options {
    /// What follows the '#': any order; unit GHz, parameter S, format MA and 50 ohm unless said.
    pub(super) fn read(text: &str) -> Result<Self, Fault> {
        let mut options = Self {
            unit_hz: 1e9,
            parameter: Parameter::Scattering,
            format: Format::MagnitudeAngle,
            reference_ohm: 50.0,
        };
        let mut words = text.split_whitespace();
        while let Some(word) = words.next() {
            match word.to_ascii_lowercase().as_str() {
                "hz" => options.unit_hz = 1.0,
                "khz" => options.unit_hz = 1e3,
                "mhz" => options.unit_hz = 1e6,
                "ghz" => options.unit_hz = 1e9,
                "s" => options.parameter = Parameter::Scattering,
                "z" => options.parameter = Parameter::Impedance,
                "y" => options.parameter = Parameter::Admittance,
                "ma" => options.format = Format::MagnitudeAngle,
                "db" => options.format = Format::DecibelAngle,
                "ri" => options.format = Format::RealImaginary,
                "r" => options.reference_ohm = resistance(words.next().unwrap_or_default())?,
                "g" | "h" => {
                    let word = start_of(word);
                    return Err(Fault::Unsupported { word });
                }
                _ => {
                    let word = start_of(word);
                    return Err(Fault::Unknown { word });
                }
            }
        }
        Ok(options)
    }

    pub(super) fn hertz(&self, text: &str) -> Result<f64, Fault> {
        let hz = number(text)? * self.unit_hz;
        if hz.is_finite() && hz >= 0.0 {
            Ok(hz)
        } else {
            let text = start_of(text);
            Err(Fault::Number { text })
        }
    }

    fn complex(&self, a: f64, b: f64) -> Complex64 {
        let polar = |size: f64| {
            let (sin, cos) = libm::sincos(b * (PI / 180.0));
            Complex64::new(size * cos, size * sin)
        };
        match self.format {
            Format::RealImaginary => Complex64::new(a, b),
            Format::MagnitudeAngle => polar(a),
            Format::DecibelAngle => polar(libm::pow(10.0, a / 20.0)),
        }
    }
}

impl Layout {
    /// How many numbers a row has.
    pub(super) fn columns(&self) -> usize {
        match (self.ports, self.order) {
            (1, _) => 3,
            (_, Order::Symmetric) => 7,
            _ => LONGEST,
        }
    }

    /// One row.
    pub(super) fn row(&self, text: &str) -> Result<Point, Fault> {
        let mut numbers = [0.0; LONGEST];
        let (mut found, wanted) = (0, self.columns());
        for word in text.split_whitespace().take(LONGEST + 1) {
            let value = if found == 0 {
                self.options.hertz(word)?
            } else {
                number(word)?
            };
            if let Some(place) = numbers.get_mut(found) {
                *place = value;
            }
            found += 1;
        }
        if found != wanted {
            return Err(Fault::Columns { found, wanted });
        }
        let pair = |k: usize| self.options.complex(numbers[2 * k + 1], numbers[2 * k + 2]);
        let zero = Complex64::ZERO;
        let m = match (self.ports, self.order) {
            (1, _) => [[pair(0), zero], [zero, zero]],
            (_, Order::Columns) => [[pair(0), pair(2)], [pair(1), pair(3)]],
            (_, Order::Rows) => [[pair(0), pair(1)], [pair(2), pair(3)]],
            (_, Order::Symmetric) => [[pair(0), pair(1)], [pair(1), pair(2)]],
        };
        let hz = numbers[0];
        let s = self.scattering(m);
        if finite(&s) {
            Ok(Point { hz, s })
        } else {
            Err(Fault::NotFinite { hz })
        }
    }

    /// S = (z - 1)/(z + 1) or (1 - y)/(1 + y), with z and y relative to the references.
    fn scattering(&self, mut m: [[Complex64; 2]; 2]) -> [[Complex64; 2]; 2] {
        let sign = match self.options.parameter {
            Parameter::Scattering => return m,
            Parameter::Impedance => 1.0,
            Parameter::Admittance => -1.0,
        };
        if !self.normalised {
            for i in 0..2 {
                for j in 0..2 {
                    let scale = self.reference_ohm[i].sqrt() * self.reference_ohm[j].sqrt();
                    m[i][j] *= if sign > 0.0 { 1.0 / scale } else { scale };
                }
            }
        }
        let one = Complex64::ONE;
        let [[a, b], [c, d]] = m;
        if self.ports == 1 {
            let zero = Complex64::ZERO;
            return [[(a - one) / (a + one) * sign, zero], [zero, zero]];
        }
        // (m - 1)(m + 1)^-1 = 1 - 2 (m + 1)^-1.
        let determinant = (a + one) * (d + one) - b * c;
        let inverse = [[d + one, -b], [-c, a + one]];
        let mut s = inverse.map(|row| row.map(|e| e / determinant * (-2.0 * sign)));
        s[0][0] += sign;
        s[1][1] += sign;
        s
    }
}
