//! The ideal stage in closed form, the start of every sizing.

use std::f64::consts::PI;

/// The ideal stage at one duty: infinite loaded Q, no loss, a perfect choke.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ideal {
    /// w C1 R.
    pub shunt: f64,
    /// X / R, the net series reactance.
    pub reactance: f64,
    /// P R / V^2.
    pub power: f64,
}

/// The ideal stage at on-fraction `duty` (0 to 1, exclusive): Raab, IEEE Trans. Circuits
/// Syst. CAS-24(12), 1977, and Kazimierczuk, RF Power Amplifiers, 2008, ch. 5 (formulas
/// from memory, checked against the exact solution). X follows from the phase between
/// the drain voltage's fundamental and the current, by quadrature of the waveform.
pub fn ideal(duty: f64) -> Ideal {
    let d = duty;
    let (s, c) = libm::sincos(PI * d);
    let phi = libm::atan2(
        libm::cos(2.0 * PI * d) - 1.0,
        2.0 * PI * (1.0 - d) + libm::sin(2.0 * PI * d),
    ) + PI;
    let (sp, cp) = libm::sincos(PI * d + phi);
    let shunt = 2.0 * s * cp * sp * ((1.0 - d) * PI * c + s) / (PI * PI * (1.0 - d));
    let power = 2.0 * s * s * sp * sp / (PI * PI * (1.0 - d) * (1.0 - d));
    // Current into the shunt capacitor while off, in units of the supply current:
    // 1 - sin(t + phi)/sin(phi); t from turn-on. The drain voltage is its integral.
    let amplitude = 1.0 / libm::sin(phi);
    let off = 2.0 * PI * d;
    let voltage = |t: f64| (t - off) + amplitude * (libm::cos(t + phi) - libm::cos(off + phi));
    let (mut in_phase, mut leading) = (0.0, 0.0);
    const STEPS: usize = 400;
    for k in 0..STEPS {
        let t = off + (2.0 * PI - off) * (k as f64 + 0.5) / STEPS as f64;
        let (st, ct) = libm::sincos(t + phi);
        in_phase += voltage(t) * st;
        leading += voltage(t) * ct;
    }
    Ideal {
        shunt,
        reactance: leading / in_phase,
        power,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Raab 1977; Sokal and Sokal 1975: closed forms at half duty and a table over duty
    /// (values recomputed by an exact state-space solution to the digits shown).
    #[test]
    fn published_table_over_duty() {
        for (duty, shunt, reactance, power) in [
            (0.25, 0.213221, 3.56187, 0.0594683),
            (0.35, 0.252510, 2.08330, 0.190532),
            (0.40, 0.243320, 1.68136, 0.294002),
            (0.50, 0.18360142, 1.15249413, 0.57680088),
            (0.60, 0.104496, 0.808853, 0.937685),
            (0.75, 0.0221139, 0.448252, 1.50851),
        ] {
            let got = ideal(duty);
            for (name, value, want) in [
                ("shunt", got.shunt, shunt),
                ("reactance", got.reactance, reactance),
                ("power", got.power, power),
            ] {
                assert!(
                    (value / want - 1.0).abs() < 1e-4,
                    "duty {duty} {name}: {value} against {want}"
                );
            }
        }
    }
}
