//! What the engine says of a design: the result object of the design file, and the pictures.

use crate::design::{Capacitor, Coil, Feed, Load};
use crate::stage::Detail;
use serde::Serialize;

/// The answer to one design.
#[derive(Debug, Clone, PartialEq, Serialize)]
#[serde(tag = "status", rename_all = "lowercase")]
#[allow(
    clippy::large_enum_variant,
    reason = "one value a design; boxing buys nothing"
)]
pub enum Answer {
    /// There is a stage, and it passed its own power balance.
    Solved(Solved),
    /// There is none, and why.
    Refused(Refusal),
}

/// Why there is no answer.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Refusal {
    /// One sentence for an engineer, with numbers.
    pub reason: String,
    /// The field at fault, as a path in the design file such as `stage.loaded_q`.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub field: Option<String>,
    /// A feed coil with which there would be an answer.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub offer: Option<Feed>,
}

/// A solved stage.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Solved {
    /// The stage's elements, sized or as given.
    pub values: Values,
    /// What an engineer reads.
    pub figures: Figures,
    /// Where each watt goes.
    pub losses: Losses,
    /// Harmonics of the load current from the second on, dB relative to the carrier.
    pub harmonics_dbc: Vec<f64>,
    /// Unaccounted part of the supply power, relative.
    pub balance: f64,
    /// Sides and stacked switches one by one.
    #[serde(skip_serializing_if = "Detail::is_empty")]
    pub detail: Detail,
    /// Each limit with value, bound and whether it is met.
    pub verdicts: Vec<Verdict>,
    /// What the person should know about how the answer was reached.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub notes: Vec<String>,
    /// Curves for the page; not part of the design file's result object.
    #[serde(skip)]
    pub waveforms: Waveforms,
    /// Magnitude of the drain voltage's harmonics 0 to 20, volts (peak of each sinusoid;
    /// entry 0 is the mean). Not part of the result object.
    #[serde(skip)]
    pub drain_harmonics_v: Vec<f64>,
    /// Magnitude of the load current's harmonics 0 to 20, amperes (peak). Not part of the
    /// result object.
    #[serde(skip)]
    pub load_harmonics_a: Vec<f64>,
}

/// The elements of the stage, every series resistance filled in.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Values {
    /// Feed coil.
    pub feed: Coil,
    /// Capacitor beside the device's own capacitance.
    pub shunt: Capacitor,
    /// Series coil.
    pub series_coil: Coil,
    /// Series capacitor.
    pub series_capacitor: Capacitor,
    /// What the series branch ends in.
    pub drain_load: Load,
    /// Supply voltage, volts.
    pub supply_v: f64,
    /// Capacitor between the drains of a differential stage.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cross: Option<Capacitor>,
    /// Width of each switch, metres, where the device is known by its width.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub width_m: Option<f64>,
    /// Number of stacked switches, where there is more than one.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub stack: Option<usize>,
    /// Gate supplies of the upper switches, volts, from the ground up.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub gate_supplies_v: Vec<f64>,
    /// Coil of the trap across the switch.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub trap_coil: Option<Coil>,
    /// Capacitor of the trap across the switch.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub trap_capacitor: Option<Capacitor>,
}

/// What an engineer reads.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Figures {
    /// Power from the supply, watts.
    pub supply_power_w: f64,
    /// Mean supply current, amperes.
    pub supply_current_a: f64,
    /// Carrier power in the load, watts.
    pub output_power_w: f64,
    /// Power in the load with every harmonic, watts.
    pub total_output_power_w: f64,
    /// Carrier power over supply power.
    pub drain_efficiency: f64,
    /// Highest drain voltage, volts.
    pub drain_peak_v: f64,
    /// What the highest drain voltage would be with a constant device capacitance, everything
    /// sized alike, volts; only where the capacitance depends on the voltage.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub constant_capacitance_peak_v: Option<f64>,
    /// Lowest drain voltage, volts.
    pub drain_least_v: f64,
    /// Highest switch current, amperes.
    pub switch_peak_a: f64,
    /// RMS switch current, amperes.
    pub switch_rms_a: f64,
    /// Drain voltage just before turn-on, volts.
    pub turn_on_v: f64,
    /// Its slope there, volts per second.
    pub turn_on_slope_v_per_s: f64,
    /// Loaded Q of the series coil as it is: w L2 / R.
    pub loaded_q: f64,
    /// Fraction of the period in which the body diode conducts.
    pub diode_fraction: f64,
    /// Junction temperature, degrees Celsius, where the thermal resistance is given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub junction_c: Option<f64>,
    /// Gate drive power, watts, where gate charge and drive voltage are given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub gate_drive_w: Option<f64>,
    /// Carrier power less drive power over supply power.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub power_added_efficiency: Option<f64>,
}

/// Where each watt goes.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize)]
pub struct Losses {
    /// Conduction loss of the switch, watts.
    pub switch_w: f64,
    /// Energy of the shunt capacitance discharged at turn-on, times frequency, watts.
    pub turn_on_w: f64,
    /// Loss while the switch current falls, watts.
    pub turn_off_w: f64,
    /// Body diode, watts.
    pub diode_w: f64,
    /// Series resistance of the feed coil, watts.
    pub feed_coil_w: f64,
    /// Series resistance of the shunt capacitor, watts.
    pub shunt_capacitor_w: f64,
    /// Series resistance of the series coil, watts.
    pub series_coil_w: f64,
    /// Series resistance of the series capacitor, watts.
    pub series_capacitor_w: f64,
    /// Series resistance of the capacitor between the drains, watts.
    #[serde(skip_serializing_if = "is_zero")]
    pub cross_capacitor_w: f64,
    /// Series resistances of the trap, watts.
    #[serde(skip_serializing_if = "is_zero")]
    pub trap_w: f64,
}

fn is_zero(watt: &f64) -> bool {
    *watt == 0.0
}

impl Losses {
    /// Each loss with the design file's name for it.
    pub fn named(&self) -> [(&'static str, f64); 10] {
        [
            ("switch_w", self.switch_w),
            ("turn_on_w", self.turn_on_w),
            ("turn_off_w", self.turn_off_w),
            ("diode_w", self.diode_w),
            ("feed_coil_w", self.feed_coil_w),
            ("shunt_capacitor_w", self.shunt_capacitor_w),
            ("series_coil_w", self.series_coil_w),
            ("series_capacitor_w", self.series_capacitor_w),
            ("cross_capacitor_w", self.cross_capacitor_w),
            ("trap_w", self.trap_w),
        ]
    }

    /// All of them together, watts.
    pub fn total_w(&self) -> f64 {
        self.named().iter().map(|(_, w)| w).sum()
    }
}

/// One limit, judged.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Verdict {
    /// Which limit: "drain voltage", "switch current", "efficiency", "harmonics",
    /// "soft switching" or "output power".
    pub limit: String,
    /// What the stage does, in the unit of `unit`.
    pub value: f64,
    /// What it may do.
    pub bound: f64,
    /// Whether it is met.
    pub met: bool,
    /// Unit of value and bound ("V", "A", "W", "dBc", or empty for a fraction).
    pub unit: &'static str,
    /// When not met: what is closest to helping, one sentence.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub help: Option<String>,
}

/// One period of every curve at equal steps; time 0 is turn-on, the last sample is one
/// period later.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Waveforms {
    /// Time, seconds.
    pub t_s: Vec<f64>,
    /// Drain voltage, volts.
    pub drain_v: Vec<f64>,
    /// Drain voltage of the other side, volts; empty where there is none.
    pub drain_b_v: Vec<f64>,
    /// Current through the switch, diode not included, amperes.
    pub switch_a: Vec<f64>,
    /// Current into the shunt capacitance, amperes.
    pub capacitor_a: Vec<f64>,
    /// Voltage across the load, volts.
    pub load_v: Vec<f64>,
}
