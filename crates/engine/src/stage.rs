//! The stage: parts and device to a circuit (`layout`), and the solved circuit to the figures
//! that an engineer reads (`reading`).

mod layout;
mod reading;

pub use layout::Layout;
pub use reading::{Detail, Reading, SAMPLES, SideFigures, SwitchStress};

use crate::answer::{Values, Waveforms};
use crate::charge::ChargeLaw;
use crate::design::{Capacitor, Coil, Diode, Load, Mismatch};
use crate::orbit::{OrbitError, Probe};
use std::fmt;

/// Unaccounted part of the supply power above which a solve is an error.
pub const BALANCE_BOUND: f64 = 1e-9;
/// The same where a capacitance depends on its voltage.
pub const CURVED_BALANCE_BOUND: f64 = 1e-6;
/// Harmonics that are reported.
pub const HARMONICS: usize = 20;

/// A stage as built: every value known. SI units.
#[derive(Debug, Clone, PartialEq)]
pub struct Stage {
    /// Carrier, hertz.
    pub carrier_hz: f64,
    /// On-fraction of the switch.
    pub duty: f64,
    /// Supply, volts.
    pub supply_v: f64,
    /// On-resistance, ohms; 0 is ideal.
    pub on_resistance_ohm: f64,
    /// Time in which the switch current falls to zero at turn-off, seconds; 0 for at once.
    pub fall_s: f64,
    /// Output capacitance of the device, farads; 0 for none. With a charge law a typical
    /// value: the constant capacitance of the same energy at the expected peak.
    pub device_f: f64,
    /// Charge law of the output capacitance; none where it is constant.
    pub device_law: Option<ChargeLaw>,
    /// Body diode.
    pub diode: Option<Diode>,
    /// Feed coil.
    pub feed: Part,
    /// Capacitor fitted beside the device; value 0 for none.
    pub shunt: Part,
    /// Series coil.
    pub series_coil: Part,
    /// Series capacitor.
    pub series_capacitor: Part,
    /// Load of the series branch; between the drains of a pair.
    pub load: Load,
    /// Series trap at the second harmonic across the switch.
    pub trap: Option<Trap>,
    /// The second side of a differential stage; everything above is then that of one side, but
    /// for the series branch and the load, which lie between the drains.
    pub pair: Option<Pair>,
    /// The switches above the lowest, from the ground up.
    pub uppers: Vec<Upper>,
    /// Gate threshold of the upper switches, volts.
    pub threshold_v: f64,
}

/// A coil and a capacitor in series.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Trap {
    /// The coil.
    pub coil: Part,
    /// The capacitor.
    pub capacitor: Part,
}

/// What two sides half a period apart have between them.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Pair {
    /// Coupling coefficient of the two feed coils.
    pub feed_coupling: f64,
    /// Capacitor between the drains; value 0 for none.
    pub cross: Part,
    /// What the second side has more than the first.
    pub mismatch: Mismatch,
}

/// An upper switch of a stack: its gate stands at a fixed voltage.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Upper {
    /// On-resistance, ohms.
    pub on_resistance_ohm: f64,
    /// What its gate lets through for each volt that its lower node lies below the clamp,
    /// amperes per volt.
    pub siemens: f64,
    /// Gate supply less threshold, volts.
    pub clamp_v: f64,
    /// Capacitance across it, farads.
    pub across_f: f64,
    /// Capacitance from its lower node to ground, farads; 0 for none.
    pub node_f: f64,
}

/// A reactive part with its series resistance.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Part {
    /// Henries or farads.
    pub value: f64,
    /// Ohms in series.
    pub esr_ohm: f64,
}

/// Why a stage has no figures.
#[derive(Debug, Clone, PartialEq)]
pub enum StageError {
    /// The steady state was not found.
    Orbit(OrbitError),
    /// The powers do not add up.
    Balance {
        /// Unaccounted part of the supply power, relative.
        balance: f64,
    },
}

impl fmt::Display for StageError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Orbit(error) => error.fmt(f),
            Self::Balance { balance } => {
                write!(
                    f,
                    "the steady state failed its own power balance by {balance:.1e} of the supply power"
                )
            }
        }
    }
}

impl std::error::Error for StageError {}

impl From<OrbitError> for StageError {
    fn from(error: OrbitError) -> Self {
        Self::Orbit(error)
    }
}

impl Stage {
    /// A lossy 7 MHz stage of four states without a diode: what speed is measured on.
    pub fn example() -> Self {
        let part = |value: f64, esr_ohm: f64| Part { value, esr_ohm };
        Self {
            carrier_hz: 7e6,
            duty: 0.5,
            supply_v: 12.0,
            on_resistance_ohm: 0.1,
            fall_s: 0.0,
            device_f: 0.0,
            device_law: None,
            diode: None,
            feed: part(5e-6, 0.1),
            shunt: part(638.975e-12, 0.01),
            series_coil: part(845.712e-9, 0.2),
            series_capacitor: part(822.859e-12, 0.02),
            load: Load {
                r_ohm: 7.43927,
                x_ohm: 0.0,
            },
            trap: None,
            pair: None,
            uppers: Vec::new(),
            threshold_v: 0.0,
        }
    }

    /// Only what soft switching asks: drain voltage (volts) and slope (volts per second) just
    /// before turn-on, and the carrier power in the load (watts).
    ///
    /// # Errors
    /// Where there is no periodic state.
    pub fn turn_on(&self) -> Result<(f64, f64, f64), OrbitError> {
        let layout = self.layout();
        let orbit = layout.solve(self)?;
        let (v, slope) = orbit.before_end(Probe::Voltage(layout.sides[0].drain));
        let i1 = orbit.harmonics(&[Probe::Current(layout.load)], 1)[0][1];
        let i1 = i1.norm_sqr().sqrt();
        Ok((v, slope, 2.0 * i1 * i1 * self.load.r_ohm))
    }

    /// What the search for the least loss asks: carrier power, supply power and drain peak.
    ///
    /// # Errors
    /// Where there is no periodic state.
    pub fn probe(&self) -> Result<Probed, OrbitError> {
        let layout = self.layout();
        let orbit = layout.solve(self)?;
        let i1 = orbit.harmonics(&[Probe::Current(layout.load)], 1)[0][1];
        let i1 = i1.norm_sqr().sqrt();
        Ok(Probed {
            output_power_w: 2.0 * i1 * i1 * self.load.r_ohm,
            supply_power_w: -self.supply_v * orbit.mean(Probe::Current(layout.supply)),
            drain_peak_v: layout
                .sides
                .iter()
                .map(|side| orbit.extremes(Probe::Voltage(side.drain)).greatest)
                .fold(f64::NEG_INFINITY, f64::max),
        })
    }

    /// Solves the stage and reads every figure.
    ///
    /// # Errors
    /// Where there is no periodic state, or it fails its own power balance.
    pub fn solve(&self) -> Result<Reading, StageError> {
        self.solve_to_harmonic(HARMONICS)
    }

    /// The same with fewer or more harmonics.
    ///
    /// # Errors
    /// As [`Self::solve`].
    pub fn solve_to_harmonic(&self, highest: usize) -> Result<Reading, StageError> {
        let layout = self.layout();
        let orbit = layout.solve(self)?;
        let reading = reading::read(self, &layout, orbit.as_ref(), highest.max(1));
        let bound = match self.device_law {
            Some(_) => CURVED_BALANCE_BOUND,
            None => BALANCE_BOUND,
        };
        if reading.balance.abs() <= bound {
            Ok(reading)
        } else {
            Err(StageError::Balance {
                balance: reading.balance,
            })
        }
    }

    /// The curves over one period.
    ///
    /// # Errors
    /// As [`Self::solve`].
    pub fn waveforms(&self) -> Result<Waveforms, StageError> {
        let layout = self.layout();
        let orbit = layout.solve(self)?;
        Ok(reading::waveforms(&layout, orbit.as_ref()))
    }

    /// The elements as the result object states them.
    pub fn values(&self) -> Values {
        let coil = |p: Part| Coil {
            l_h: p.value,
            esr_ohm: Some(p.esr_ohm),
        };
        let capacitor = |p: Part| Capacitor {
            c_f: p.value,
            esr_ohm: Some(p.esr_ohm),
        };
        Values {
            feed: coil(self.feed),
            shunt: capacitor(self.shunt),
            series_coil: coil(self.series_coil),
            series_capacitor: capacitor(self.series_capacitor),
            drain_load: self.load,
            supply_v: self.supply_v,
            cross: self
                .pair
                .map(|p| p.cross)
                .filter(|c| c.value > 0.0)
                .map(capacitor),
            width_m: None,
            stack: None,
            gate_supplies_v: Vec::new(),
            trap_coil: self.trap.map(|t| coil(t.coil)),
            trap_capacitor: self.trap.map(|t| capacitor(t.capacitor)),
        }
    }
}

/// What the search for the least loss asks of a stage.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Probed {
    /// Carrier power in the load, watts.
    pub output_power_w: f64,
    /// Power from the supply, watts.
    pub supply_power_w: f64,
    /// Highest drain voltage, volts.
    pub drain_peak_v: f64,
}
