//! Air-core single-layer coils of round wire.
//!
//! Inductance is Nagaoka's for the current sheet by Lundin's fit, with Rosa's correction for
//! round wire and the leads; resistance is the skin effect of the straight wire times Medhurst's
//! factor for the winding, self-capacitance Medhurst's. A coil standing free, one end at ground:
//! what is near it changes all of them.

pub mod wind;

mod medhurst;

use super::{FREQUENCIES, MU0, PartError, RESISTIVITIES, skin, within};
use std::f64::consts::{PI, TAU};

pub use medhurst::{capacitance_factor, resistance_factor};

/// A coil as wound.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Solenoid {
    /// Turns.
    pub turns: f64,
    /// Mean diameter, metres: of the former and one wire.
    pub diameter_m: f64,
    /// From one turn's middle to the next one's, metres.
    pub pitch_m: f64,
    /// Diameter of the bare wire, metres.
    pub wire_m: f64,
    /// Length of each of the two leads, metres; 0 for none.
    pub lead_m: f64,
    /// Resistivity of the wire, ohm metres; see [`skin::COPPER_OHM_M`].
    pub resistivity_ohm_m: f64,
}

/// What a coil is at a frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Figures {
    /// Inductance well below self-resonance, henries: current sheet, correction and leads.
    pub inductance_h: f64,
    /// Inductance of the current sheet alone, henries.
    pub current_sheet_h: f64,
    /// Length of the winding, metres: turns times pitch.
    pub length_m: f64,
    /// Length of the wire with its leads, metres.
    pub wire_length_m: f64,
    /// Series resistance at the frequency, ohms.
    pub resistance_ohm: f64,
    /// Radius of the wire over the skin depth. Below about 2 Medhurst's factor overstates the
    /// resistance.
    pub radius_in_depths: f64,
    /// Quality factor of the winding, w L/R.
    pub q: f64,
    /// Self-capacitance, farads; none where Medhurst has not measured it.
    pub self_capacitance_f: Option<f64>,
    /// Self-resonance, hertz; none without the capacitance.
    pub self_resonance_hz: Option<f64>,
    /// Inductance and quality factor that the terminals show at the frequency, L/(1 - u) and
    /// Q (1 - u) with u the square of frequency over self-resonance (common practice); none
    /// above self-resonance and without it.
    pub at_terminals: Option<[f64; 2]>,
}

/// Turns that are computed.
const TURNS: [f64; 2] = [1.0, 10_000.0];
/// Diameters that are computed, metres.
const DIAMETERS: [f64; 2] = [1e-5, 100.0];

/// Nagaoka's coefficient from length over diameter: the inductance of a current sheet over that
/// of as long a piece of an endless one.
///
/// H. Nagaoka 1909, by R. Lundin's fit, Proc. IEEE 73(9), 1985, 1428-1429 (error under 3e-6).
/// `length_per_diameter` must be positive.
pub fn nagaoka(length_per_diameter: f64) -> f64 {
    let x = length_per_diameter;
    let f1 = |x: f64| (1.0 + x * (0.383901 + 0.017108 * x)) / (1.0 + 0.258952 * x);
    if x >= 1.0 {
        f1(1.0 / (x * x)) - 4.0 / (3.0 * PI * x)
    } else {
        let square = x * x;
        let f2 = square * (0.093842 + square * (0.002029 - 0.000801 * square));
        2.0 * x / PI * ((libm::log(4.0 / x) - 0.5) * f1(square) + f2)
    }
}

/// The part of Rosa's correction that depends on the number of turns: how much more two turns of
/// a current sheet couple than two thin wires, over all pairs.
///
/// E.B. Rosa, Bulletin of the Bureau of Standards 2(2), 1906 (from memory); here from the
/// geometric mean distance of two strips in one plane, which gives his table. Between whole
/// numbers linear.
#[derive(Debug, Clone, Copy, Default)]
struct Coupling {
    turns: f64,
    /// Sums of `strip` and of distance times `strip` over all distances below `turns`.
    sums: [f64; 2],
}

impl Coupling {
    /// Logarithm of the mean distance of two strips as wide as the pitch over their distance,
    /// `k` pitches; never positive.
    fn strip(k: f64) -> f64 {
        if k < 1.5 {
            return 2.0 * std::f64::consts::LN_2 - 1.5;
        }
        if k > 8.0 {
            let s = 1.0 / (k * k);
            return -s * (1.0 / 12.0 + s * (1.0 / 60.0 + s / 168.0));
        }
        let log = libm::log;
        0.5 * ((k + 1.0) * (k + 1.0) * log(k + 1.0) + (k - 1.0) * (k - 1.0) * log(k - 1.0))
            - (k * k + 1.0) * log(k)
            - 1.5
    }

    /// Of `turns`, at least 1.
    fn of(turns: f64) -> f64 {
        let mut whole = Self {
            turns: 1.0,
            sums: [0.0; 2],
        };
        while whole.turns + 1.0 <= turns {
            whole.step();
        }
        let low = whole.value();
        let share = turns - whole.turns;
        whole.step();
        low + share * (whole.value() - low)
    }

    fn step(&mut self) {
        let strip = Self::strip(self.turns);
        self.sums[0] += strip;
        self.sums[1] += self.turns * strip;
        self.turns += 1.0;
    }

    fn value(&self) -> f64 {
        -2.0 * (self.sums[0] - self.sums[1] / self.turns)
    }
}

/// Inductances of the sheet and of the whole coil, henries.
fn inductances(coil: &Solenoid, coupling: f64) -> [f64; 2] {
    let Solenoid {
        turns,
        diameter_m: d,
        pitch_m,
        wire_m,
        lead_m,
        ..
    } = *coil;
    let length = turns * pitch_m;
    let sheet = MU0 * PI * 0.25 * d * d * turns * turns * nagaoka(length / d) / length;
    // Rosa's 5/4 - ln(2p/w) is for a current all through the wire; on its surface it is 3/2.
    let own = 1.5 - libm::log(2.0 * pitch_m / wire_m);
    let correction = MU0 * 0.5 * d * turns * (own + coupling);
    [sheet, sheet - correction + 2.0 * lead_h(lead_m, wire_m)]
}

/// Inductance, henries, of a straight piece of wire with its current on the surface: the flux
/// of the axis through the surface, mu0/(2 pi) [s asinh(s/r) - sqrt(s^2 + r^2) + r] for length s
/// and radius r (Neumann's integral; E.B. Rosa, Bulletin of the Bureau of Standards 4, 1908, from
/// memory, is the same for long wires). Metres.
fn lead_h(length: f64, wire: f64) -> f64 {
    let r = 0.5 * wire;
    MU0 / TAU * (length * libm::asinh(length / r) - length * length / (libm::hypot(length, r) + r))
}

impl Solenoid {
    /// Wires that a coil of `diameter` may have, metres.
    fn wire_range(diameter: f64) -> [f64; 2] {
        [1e-6 * diameter, 0.5 * diameter]
    }

    fn check(&self) -> Result<(), PartError> {
        within("turns", "", self.turns, TURNS)?;
        within("coil diameter", "m", self.diameter_m, DIAMETERS)?;
        let d = self.diameter_m;
        within("wire diameter", "m", self.wire_m, Self::wire_range(d))?;
        within("pitch", "m", self.pitch_m, [self.wire_m, d])?;
        within("lead length", "m", self.lead_m, [0.0, 100.0])?;
        within("resistivity", "Ωm", self.resistivity_ohm_m, RESISTIVITIES)?;
        Ok(())
    }

    /// The coil's figures at `frequency_hz`.
    ///
    /// # Errors
    /// A number out of range: 1 to 10,000 turns, wire up to half the coil's diameter, pitch from
    /// the wire to the coil's diameter.
    pub fn figures(&self, frequency_hz: f64) -> Result<Figures, PartError> {
        self.check()?;
        within("frequency", "Hz", frequency_hz, FREQUENCIES)?;
        Ok(self.at(frequency_hz, Coupling::of(self.turns)))
    }

    /// The figures of a coil whose numbers are in range.
    fn at(&self, frequency_hz: f64, coupling: f64) -> Figures {
        let [current_sheet_h, inductance_h] = inductances(self, coupling);
        let length_m = self.turns * self.pitch_m;
        let around = PI * self.diameter_m;
        let winding = self.turns * (around * around + self.pitch_m * self.pitch_m).sqrt();
        let depth = (self.resistivity_ohm_m / (PI * frequency_hz * MU0)).sqrt();
        let ohm = |length| skin::wire_ohm(self.resistivity_ohm_m, length, self.wire_m, depth);
        let shape = length_m / self.diameter_m;
        let resistance_ohm = ohm(winding) * resistance_factor(shape, self.pitch_m / self.wire_m)
            + ohm(2.0 * self.lead_m);
        let q = TAU * frequency_hz * inductance_h / resistance_ohm;
        let self_capacitance_f = capacitance_factor(shape).map(|h| 1e-10 * h * self.diameter_m);
        let self_resonance_hz = self_capacitance_f.map(|c| 1.0 / (TAU * (inductance_h * c).sqrt()));
        let at_terminals = self_resonance_hz.filter(|f0| frequency_hz < *f0).map(|f0| {
            let left = 1.0 - (frequency_hz / f0) * (frequency_hz / f0);
            [inductance_h / left, q * left]
        });
        Figures {
            inductance_h,
            current_sheet_h,
            length_m,
            wire_length_m: winding + 2.0 * self.lead_m,
            resistance_ohm,
            radius_in_depths: 0.5 * self.wire_m / depth,
            q,
            self_capacitance_f,
            self_resonance_hz,
            at_terminals,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Rosa's table of 1906, from memory.
    #[test]
    fn coupling_is_rosas() {
        for (turns, want) in [
            (1.0, 0.0),
            (2.0, 0.1137),
            (3.0, 0.1663),
            (4.0, 0.1973),
            (5.0, 0.2180),
            (10.0, 0.2664),
        ] {
            let found = Coupling::of(turns);
            assert!((found - want).abs() < 6e-5, "{turns}: {found}, {want}");
        }
        let endless = Coupling::of(10_000.0);
        assert!((endless - 0.3379).abs() < 2e-3, "{endless}");
        assert!((Coupling::of(2.5) - 0.5 * (Coupling::of(2.0) + Coupling::of(3.0))).abs() < 1e-12);
        // The series for far strips carries on where the logarithms end.
        let (near, far) = (Coupling::strip(8.0), Coupling::strip(8.0 + 1e-9));
        assert!((near - far).abs() < 1e-9, "{near} {far}");
    }

    /// The long form of a straight wire's inductance, mu0 s/(2 pi) (ln(4s/d) - 1), from memory.
    #[test]
    fn straight_wire() {
        let (length, wire) = (0.1, 1e-3);
        let long = MU0 * length / TAU * (libm::log(4.0 * length / wire) - 1.0);
        assert!((lead_h(length, wire) / long - 1.0).abs() < 2e-3);
        assert_eq!(lead_h(0.0, wire), 0.0);
        assert!(lead_h(1e-6, wire) > 0.0);
    }
}
