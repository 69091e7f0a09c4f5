//! Resistance of conductors at high frequency: skin depth, round wire, thin trace.

use super::{FREQUENCIES, MU0, PartError, RESISTIVITIES, within};
use num_complex::Complex64;
use std::f64::consts::PI;

/// Resistivity of annealed copper at 20 °C, ohm metres (IEC 60028).
pub const COPPER_OHM_M: f64 = 1.7241e-8;

/// Skin depth, metres, of a conductor of `resistivity_ohm_m` (ohm metres) at `frequency_hz`:
/// sqrt(rho / (pi f mu0)).
///
/// # Errors
/// A number out of range.
pub fn depth(resistivity_ohm_m: f64, frequency_hz: f64) -> Result<f64, PartError> {
    let rho = within("resistivity", "Ωm", resistivity_ohm_m, RESISTIVITIES)?;
    let f = within("frequency", "Hz", frequency_hz, FREQUENCIES)?;
    Ok((rho / (PI * f * MU0)).sqrt())
}

/// Resistance of a straight round wire over its resistance to direct current, from the radius
/// over the skin depth: Re[(ka/2) J0(ka)/J1(ka)] with k = (1 - j)/depth (Kelvin 1889; any text
/// on electromagnetics). `radius_in_depths` must be positive; the factor is at least 1.
pub(super) fn round_wire(radius_in_depths: f64) -> f64 {
    /// Above this the asymptotic series is as exact as the continued fraction (1e-6).
    const LARGE: f64 = 25.0;
    const TERMS: u32 = 60;
    let z = radius_in_depths;
    if z > LARGE {
        return 0.5 * z + 0.25 + 3.0 / (32.0 * z);
    }
    // J0/J1 as a continued fraction in the square of the argument: 2 - u/(4 - u/(6 - ...)).
    let u = Complex64::new(0.0, -2.0 * z * z);
    let mut tail = Complex64::new(f64::from(2 * TERMS), 0.0);
    for n in (1..TERMS).rev() {
        tail = f64::from(2 * n) - u / tail;
    }
    0.5 * tail.re
}

/// Resistance, ohms, of a straight round wire, all in metres, to high frequency.
pub(super) fn wire_ohm(resistivity_ohm_m: f64, length: f64, diameter: f64, depth: f64) -> f64 {
    let direct = resistivity_ohm_m * length / (0.25 * PI * diameter * diameter);
    direct * round_wire(0.5 * diameter / depth)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn copper() {
        for (f, want, half_digit) in [
            (1e6, 66.085, 5e-4),
            (13.56e6, 17.946, 5e-4),
            (1e8, 6.6085, 5e-5),
        ] {
            let um = 1e6 * depth(COPPER_OHM_M, f).unwrap();
            assert!((um - want).abs() <= half_digit, "{um} against {want}");
        }
        assert!(depth(COPPER_OHM_M, f64::NAN).is_err());
        assert!(depth(0.0, 1e6).is_err());
    }

    /// Computed from the Bessel functions to 30 digits.
    #[test]
    fn round_wire_against_bessel_functions() {
        for (z, want) in [
            (0.1, 1.00000208332986),
            (1.0, 1.02049238885562),
            (2.0, 1.26464290627321),
            (5.0, 2.76810760073429),
            (10.0, 5.2593018575108),
            (24.9, 12.7037607887397),
            (25.1, 12.8037308918746),
            (200.0, 100.250468742243),
        ] {
            let factor = round_wire(z);
            assert!(
                (factor / want - 1.0).abs() < 1e-6,
                "{z}: {factor} against {want}"
            );
        }
    }
}
