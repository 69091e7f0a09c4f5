//! R.G. Medhurst's tables for single-layer coils: "H.F. resistance and self-capacitance of
//! single-layer solenoids", Wireless Engineer 24, 1947, 35-43 and 80-92.

/// Length over diameter, and picofarads per centimetre of diameter.
const CAPACITANCE: [(f64, f64); 14] = [
    (0.1, 0.96),
    (0.2, 0.70),
    (0.3, 0.60),
    (0.4, 0.54),
    (0.5, 0.50),
    (0.7, 0.47),
    (1.0, 0.46),
    (1.5, 0.47),
    (2.0, 0.50),
    (3.0, 0.61),
    (4.0, 0.72),
    (5.0, 0.81),
    (10.0, 1.32),
    (20.0, 2.36),
];

/// Length over diameter of the rows of [`RESISTANCE`]; the last row is an endless coil.
const SHAPES: [f64; 6] = [0.0, 0.4, 1.0, 2.0, 4.0, 10.0];

/// Resistance over that of the straight wire; columns by wire diameter over pitch: 1, 0.9 to
/// 0.1, and 0, where turns so far apart do not touch each other's field.
const RESISTANCE: [[f64; 11]; 7] = [
    [
        5.31, 3.73, 2.74, 2.12, 1.74, 1.44, 1.20, 1.16, 1.07, 1.02, 1.0,
    ],
    [
        5.65, 3.99, 2.97, 2.28, 1.83, 1.54, 1.33, 1.21, 1.08, 1.03, 1.0,
    ],
    [
        5.55, 4.10, 3.17, 2.47, 1.94, 1.67, 1.45, 1.24, 1.10, 1.03, 1.0,
    ],
    [
        4.10, 3.36, 2.74, 2.32, 1.98, 1.74, 1.50, 1.28, 1.13, 1.04, 1.0,
    ],
    [
        3.54, 3.05, 2.60, 2.27, 2.01, 1.78, 1.54, 1.32, 1.15, 1.04, 1.0,
    ],
    [
        3.23, 2.93, 2.65, 2.37, 2.10, 1.83, 1.58, 1.35, 1.17, 1.04, 1.0,
    ],
    [
        3.41, 3.11, 2.815, 2.51, 2.22, 1.93, 1.65, 1.395, 1.19, 1.05, 1.0,
    ],
];

/// Self-capacitance of a coil with one end at ground, picofarads per centimetre of diameter
/// (1e-10 F/m), from length over diameter: Medhurst's table, linear between its entries. None
/// outside it, 0.1 to 20.
pub fn capacitance_factor(length_per_diameter: f64) -> Option<f64> {
    let x = length_per_diameter;
    CAPACITANCE.windows(2).find_map(|pair| {
        let [(x0, h0), (x1, h1)] = [pair[0], pair[1]];
        (x0 <= x && x <= x1).then(|| h0 + (h1 - h0) * (x - x0) / (x1 - x0))
    })
}

/// Resistance of a coil at high frequency over that of its wire laid straight, from length over
/// diameter and pitch over wire diameter (at least 1): Medhurst's table, linear between its
/// entries in length over diameter (in its inverse beyond 10) and in wire diameter over pitch, in
/// which the columns are evenly spaced.
///
/// Measured on coils of many turns: for a few it overstates the resistance.
pub fn resistance_factor(length_per_diameter: f64, pitch_per_wire: f64) -> f64 {
    let x = length_per_diameter.max(0.0);
    let column = 10.0 - (10.0 / pitch_per_wire).clamp(0.0, 10.0);
    let (row, down) = match SHAPES.windows(2).position(|pair| x < pair[1]) {
        Some(row) => (row, (x - SHAPES[row]) / (SHAPES[row + 1] - SHAPES[row])),
        None => (5, 1.0 - 10.0 / x),
    };
    let left = (column as usize).min(9);
    let right = column - left as f64;
    let along = |row: &[f64; 11]| row[left] + right * (row[left + 1] - row[left]);
    let (upper, lower) = (along(&RESISTANCE[row]), along(&RESISTANCE[row + 1]));
    upper + down * (lower - upper)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Every entry comes back, at the pitches that the table names.
    #[test]
    fn tables() {
        const PITCHES: [f64; 10] = [1.0, 1.111, 1.25, 1.429, 1.667, 2.0, 2.5, 3.333, 5.0, 10.0];
        for (x, h) in CAPACITANCE {
            assert!((capacitance_factor(x).unwrap() - h).abs() < 1e-12);
        }
        for (row, x) in SHAPES.into_iter().chain([1e12]).enumerate() {
            for (column, pitch) in PITCHES.into_iter().enumerate() {
                let found = resistance_factor(x, pitch);
                let want = RESISTANCE[row][column];
                assert!(
                    (found - want).abs() < 2e-3 * want,
                    "{x} {pitch}: {found}, {want}"
                );
            }
        }
        assert!((resistance_factor(0.7, 1.0) - 5.60).abs() < 1e-12);
        assert!((resistance_factor(1.5, 4.0) - 1.1875).abs() < 1e-12);
    }

    #[test]
    fn outside() {
        assert_eq!(capacitance_factor(0.09), None);
        assert_eq!(capacitance_factor(20.5), None);
        assert_eq!(capacitance_factor(f64::NAN), None);
        for x in [f64::NAN, -1.0, 0.0, 1e300, f64::INFINITY] {
            for pitch in [f64::NAN, -1.0, 0.0, 1e300, f64::INFINITY] {
                let _ = resistance_factor(x, pitch);
            }
        }
        assert!((resistance_factor(1.0, f64::INFINITY) - 1.0).abs() < 1e-12);
    }
}
