//! The lossless sections: which reactance stands where.

use super::super::{Place, Reactance};
use super::MatchError;
use num_complex::Complex64;

/// Which way a section passes.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Pass {
    /// Coils in the line, capacitors to ground.
    Low,
    /// Capacitors in the line, coils to ground.
    High,
}

/// What kind of section.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Form {
    /// Two parts; their Q follows from the resistances.
    L(Pass),
    /// Two L sections by way of the geometric mean of the resistances.
    TwoL(Pass),
    /// Shunt, series, shunt by way of a resistance below both.
    Pi {
        /// Which way it passes.
        pass: Pass,
        /// Q of the half beside the greater resistance.
        q: f64,
    },
    /// Series, shunt, series by way of a resistance above both.
    T {
        /// Which way it passes.
        pass: Pass,
        /// Q of the half beside the smaller resistance.
        q: f64,
    },
    /// A coil across the greater resistance, two capacitors in a row across it as well, the
    /// smaller resistance at their tap.
    TappedCapacitor {
        /// Q of the coil with the greater resistance.
        q: f64,
    },
}

/// Least Q that [`Form::Pi`], [`Form::T`] and [`Form::TappedCapacitor`] can have between two
/// resistances.
pub fn least_q(one_ohm: f64, other_ohm: f64) -> f64 {
    let ratio = one_ohm / other_ohm;
    (ratio.max(1.0 / ratio) - 1.0).sqrt()
}

/// Series and shunt places from the input on, without losses; L sections step `down` from the
/// input to the load's series resistance or up to its parallel resistance.
pub(super) fn lossless(
    form: Form,
    input: f64,
    load: Complex64,
    down: bool,
) -> Result<Vec<Reactance>, MatchError> {
    let sign = |pass| match pass {
        Pass::Low => 1.0,
        Pass::High => -1.0,
    };
    let series = |value| Reactance {
        place: Place::Series,
        value,
    };
    let shunt = |value| Reactance {
        place: Place::Shunt,
        value,
    };
    let admittance = load.inv();
    // A part of the load that a series or a shunt place beside it takes up.
    let (resistance, beside_series) = (load.re, load.im);
    let (parallel, beside_shunt) = (1.0 / admittance.re, admittance.im);
    let quarter = |high: f64, low: f64| (high / low - 1.0).max(0.0).sqrt();
    let enough = |q: f64, a: f64, b: f64| {
        let least = least_q(a, b);
        if q.is_finite() && q >= least {
            Ok(())
        } else {
            Err(MatchError::Quality { q, least })
        }
    };
    Ok(match form {
        Form::L(pass) if down => {
            let q = sign(pass) * quarter(input, resistance);
            vec![shunt(q / input), series(q * resistance - beside_series)]
        }
        Form::L(pass) => {
            let q = sign(pass) * quarter(parallel, input);
            vec![series(q * input), shunt(q / parallel - beside_shunt)]
        }
        Form::TwoL(pass) if down => {
            let mean = (input * resistance).sqrt();
            let q = sign(pass) * quarter(input, mean);
            let last = q * resistance - beside_series;
            vec![
                shunt(q / input),
                series(q * mean),
                shunt(q / mean),
                series(last),
            ]
        }
        Form::TwoL(pass) => {
            let mean = (input * parallel).sqrt();
            let q = sign(pass) * quarter(parallel, mean);
            let last = q / parallel - beside_shunt;
            vec![
                series(q * input),
                shunt(q / mean),
                series(q * mean),
                shunt(last),
            ]
        }
        Form::Pi { pass, q } => {
            enough(q, input, parallel)?;
            let middle = input.max(parallel) / (q * q + 1.0);
            let first = sign(pass) * quarter(input, middle);
            let second = sign(pass) * quarter(parallel, middle);
            vec![
                shunt(first / input),
                series((first + second) * middle),
                shunt(second / parallel - beside_shunt),
            ]
        }
        Form::T { pass, q } => {
            enough(q, input, resistance)?;
            let middle = input.min(resistance) * (q * q + 1.0);
            let first = sign(pass) * quarter(middle, input);
            let second = sign(pass) * quarter(middle, resistance);
            vec![
                series(first * input),
                shunt((first + second) / middle),
                series(second * resistance - beside_series),
            ]
        }
        Form::TappedCapacitor { q } => {
            enough(q, input, parallel)?;
            let middle = input.max(parallel) / (q * q + 1.0);
            let mut first = quarter(input, middle);
            let mut second = quarter(parallel, middle);
            // The coil is on the greater resistance's side.
            if input > parallel {
                first = -first;
            } else {
                second = -second;
            }
            vec![
                shunt(first / input),
                series((first + second) * middle),
                shunt(second / parallel - beside_shunt),
            ]
        }
    })
}
