//! Toroids: turns for an inductance from the core's A_L, and the person's own figure for its
//! losses.

use super::{FREQUENCIES, INDUCTANCES, MU0, PartError, RESISTIVITIES, skin, within};
use std::f64::consts::{PI, TAU};

/// What the core loses at the frequency, small signals.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum CoreLoss {
    /// Nothing.
    None,
    /// Quality factor of a coil on the core without the loss of its wire.
    Q(f64),
    /// Resistance parallel to the inductance, ohms for one turn; it grows by the turns squared.
    ParallelOhm(f64),
}

/// A toroid core.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Core {
    /// A_L: inductance of one turn, henries; it grows by the turns squared.
    pub al_h: f64,
    /// Outer diameter, metres.
    pub outer_m: f64,
    /// Inner diameter, metres.
    pub inner_m: f64,
    /// Height, metres.
    pub height_m: f64,
    /// Losses at the frequency.
    pub loss: CoreLoss,
}

/// The wire of a toroid.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Wire {
    /// Bare diameter, metres.
    pub diameter_m: f64,
    /// Length of each of the two leads, metres; 0 for none.
    pub lead_m: f64,
    /// Resistivity, ohm metres; see [`skin::COPPER_OHM_M`].
    pub resistivity_ohm_m: f64,
}

/// A core as wound.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Toroid {
    /// Turns, whole: how often the wire passes through the hole.
    pub turns: u32,
    /// Inductance, henries: A_L times the turns squared.
    pub inductance_h: f64,
    /// `inductance_h` over the wanted one, less 1.
    pub error: f64,
    /// Length of the wire with its leads, metres.
    pub wire_length_m: f64,
    /// Resistance of the wire at the frequency, ohms: skin effect of the straight wire; what
    /// neighbouring turns add is left out.
    pub wire_ohm: f64,
    /// Series resistance of core and wire, ohms.
    pub resistance_ohm: f64,
    /// Quality factor of core and wire.
    pub q: f64,
    /// The most turns of this wire in one layer on the hole's wall.
    pub most_turns: u32,
    /// The thickest wire, metres, of which these turns fit in one layer on the hole's wall.
    pub thickest_wire_m: f64,
}

/// The most turns on a core.
const MOST_TURNS: f64 = 10_000.0;

impl Core {
    fn check(&self, wire: &Wire, frequency_hz: f64) -> Result<(), PartError> {
        within("A_L", "H", self.al_h, [1e-12, 1e-3])?;
        within("outer diameter", "m", self.outer_m, [1e-4, 10.0])?;
        within("inner diameter", "m", self.inner_m, [1e-5, self.outer_m])?;
        within("height", "m", self.height_m, [1e-5, 10.0])?;
        match self.loss {
            CoreLoss::None => {}
            CoreLoss::Q(q) => {
                within("Q of the core", "", q, [1e-3, 1e6])?;
            }
            CoreLoss::ParallelOhm(ohm) => {
                within("parallel resistance of one turn", "Ω", ohm, [1e-6, 1e9])?;
            }
        }
        within("wire diameter", "m", wire.diameter_m, [1e-6, 0.1])?;
        within("lead length", "m", wire.lead_m, [0.0, 10.0])?;
        within("resistivity", "Ωm", wire.resistivity_ohm_m, RESISTIVITIES)?;
        within("frequency", "Hz", frequency_hz, FREQUENCIES)?;
        if 2.0 * wire.diameter_m > self.inner_m {
            return Err(PartError::Fit {
                what: "two wires in the hole",
                needed_m: 2.0 * wire.diameter_m,
                room_m: self.inner_m,
            });
        }
        Ok(())
    }

    /// The core with `turns` of `wire` at `frequency_hz`; `wanted_h` henries only for its error.
    fn wound(&self, turns: f64, wire: &Wire, frequency_hz: f64, wanted_h: f64) -> Toroid {
        let w = wire.diameter_m;
        let inductance_h = self.al_h * turns * turns;
        let reactance = TAU * frequency_hz * inductance_h;
        // Along the core's rectangle, round its four corners by half a wire.
        let around = self.outer_m - self.inner_m + 2.0 * self.height_m + PI * w;
        let wire_length_m = turns * around + 2.0 * wire.lead_m;
        let depth = (wire.resistivity_ohm_m / (PI * frequency_hz * MU0)).sqrt();
        let wire_ohm = skin::wire_ohm(wire.resistivity_ohm_m, wire_length_m, w, depth);
        let core_ohm = match self.loss {
            CoreLoss::None => 0.0,
            CoreLoss::Q(q) => reactance / q,
            CoreLoss::ParallelOhm(one) => reactance * reactance / (one * turns * turns),
        };
        let resistance_ohm = wire_ohm + core_ohm;
        // The wires' middles lie on a circle half a wire inside the hole's wall.
        let step = libm::asin(w / (self.inner_m - w));
        let sine = libm::sin(PI / turns);
        Toroid {
            turns: turns as u32,
            inductance_h,
            error: (inductance_h - wanted_h) / wanted_h,
            wire_length_m,
            wire_ohm,
            resistance_ohm,
            q: reactance / resistance_ohm,
            most_turns: (PI / step + 1e-9) as u32,
            thickest_wire_m: if turns < 2.0 {
                self.inner_m
            } else {
                self.inner_m * sine / (1.0 + sine)
            },
        }
    }
}

/// The two whole numbers of turns next to `inductance_h` (henries), the nearer inductance first;
/// one where it is met exactly or below one turn.
///
/// A core's Q is w L over its series resistance; a parallel resistance is taken as (w L)^2/R in
/// series, which is right to 1 % from a Q of 10 upwards. A_L is the person's at this frequency.
///
/// # Errors
/// A number out of range, or a wire that does not fit twice into the hole. More turns than fit
/// in one layer are no error: see [`Toroid::most_turns`].
pub fn wind(
    core: &Core,
    wire: &Wire,
    inductance_h: f64,
    frequency_hz: f64,
) -> Result<Vec<Toroid>, PartError> {
    core.check(wire, frequency_hz)?;
    within("inductance", "H", inductance_h, INDUCTANCES)?;
    let exact = (inductance_h / core.al_h).sqrt();
    within("turns", "", exact, [0.0, MOST_TURNS])?;
    let below = libm::floor(exact * (1.0 + 1e-12)).max(1.0);
    let mut wound = vec![core.wound(below, wire, frequency_hz, inductance_h)];
    if below < exact * (1.0 - 1e-12) {
        wound.push(core.wound(below + 1.0, wire, frequency_hz, inductance_h));
    }
    wound.sort_by(|a, b| a.error.abs().total_cmp(&b.error.abs()));
    Ok(wound)
}
