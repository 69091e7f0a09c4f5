//! Numbers of a design that cannot be, each a sentence with its field.

use super::SizingError;

pub(super) fn field(field: &'static str, reason: String) -> SizingError {
    SizingError::Field { field, reason }
}

/// A positive finite number, or the sentence that says it is not.
pub(super) fn positive(path: &'static str, what: &str, value: f64) -> Result<f64, SizingError> {
    in_range(path, what, value, 1e-30, 1e30)
}

pub(super) fn in_range(
    path: &'static str,
    what: &str,
    value: f64,
    least: f64,
    most: f64,
) -> Result<f64, SizingError> {
    if value >= least && value <= most {
        Ok(value)
    } else if least == 1e-30 {
        Err(field(
            path,
            format!("{what} must be greater than zero and finite, not {value}"),
        ))
    } else {
        Err(field(
            path,
            format!("{what} must lie between {least} and {most}, not at {value}"),
        ))
    }
}

pub(super) fn not_negative(path: &'static str, what: &str, value: f64) -> Result<f64, SizingError> {
    if (0.0..=1e30).contains(&value) {
        Ok(value)
    } else {
        Err(field(
            path,
            format!("{what} must be zero or more, not {value}"),
        ))
    }
}
