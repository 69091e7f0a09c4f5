//! A design as a person states it: the brief, the device, the choices made, the parts fitted.
//!
//! This is the content of a design file (version 1). SI units; names carry them.

use serde::{Deserialize, Serialize};

/// The version of the design file that this engine writes.
pub const VERSION: u32 = 1;

/// One whole design.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Design {
    /// File version; only 1 exists.
    pub evenfall: u32,
    /// The design's own name. Default: empty.
    #[serde(default)]
    pub name: String,
    /// What is wanted.
    pub brief: Brief,
    /// The switch. Default: an ideal one.
    #[serde(default)]
    pub device: Device,
    /// How the stage is to be built.
    #[serde(default)]
    pub stage: StageChoice,
    /// What is already chosen; absent elements are found by sizing. Default: nothing.
    #[serde(default, skip_serializing_if = "Fitted::is_empty")]
    pub fitted: Fitted,
}

/// What the stage has to do.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Brief {
    /// Carrier frequency, hertz.
    pub carrier_hz: f64,
    /// Edges of the band to cover, hertz. Default: the carrier alone.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub band_hz: Option<[f64; 2]>,
    /// Carrier power wanted in the load, watts. Default: whatever supply and load give.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub power_w: Option<f64>,
    /// Supply voltage, volts. Default: whatever power and load ask for.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub supply_v: Option<f64>,
    /// The antenna, coil or cable to be driven, behind any match. Default: 50 ohm.
    #[serde(default)]
    pub load: Load,
    /// Bounds for the verdicts.
    #[serde(default)]
    pub limits: Limits,
    /// Temperature around the device, degrees Celsius. Default: 25.
    #[serde(default = "room", skip_serializing_if = "is_room")]
    pub ambient_c: f64,
}

fn room() -> f64 {
    25.0
}

fn is_room(celsius: &f64) -> bool {
    *celsius == room()
}

/// A load at the carrier: a resistance in series with a reactance.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Load {
    /// Series resistance, ohms.
    pub r_ohm: f64,
    /// Series reactance at the carrier, ohms (an inductor if positive, a capacitor if
    /// negative). Default: 0.
    #[serde(default)]
    pub x_ohm: f64,
}

impl Default for Load {
    fn default() -> Self {
        Self {
            r_ohm: 50.0,
            x_ohm: 0.0,
        }
    }
}

/// Bounds against which the solved stage is judged.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct Limits {
    /// Highest drain peak as a fraction of the device's rating. Default: 0.8.
    pub drain_fraction_of_rating: f64,
    /// Least drain efficiency, as a fraction. Default: none.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub efficiency: Option<f64>,
    /// Highest junction temperature, degrees Celsius. Default: none.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub junction_c: Option<f64>,
    /// Highest harmonic of the load current, dB relative to the carrier. Default: none.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub harmonic_dbc: Option<f64>,
}

impl Default for Limits {
    fn default() -> Self {
        Self {
            drain_fraction_of_rating: 0.8,
            efficiency: None,
            junction_c: None,
            harmonic_dbc: None,
        }
    }
}

/// The switch.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct Device {
    /// What the person calls it. Default: empty.
    #[serde(skip_serializing_if = "String::is_empty")]
    pub name: String,
    /// On-resistance, ohms; 0 is an ideal switch. Default: 0.
    pub on_resistance_ohm: f64,
    /// Relative rise of the on-resistance per kelvin. Default: none.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub on_resistance_per_k: Option<f64>,
    /// Output capacitance. Default: none.
    pub capacitance: Capacitance,
    /// Body diode. Default: none.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub diode: Option<Diode>,
    /// Greatest drain voltage, volts. Default: not given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub rating_v: Option<f64>,
    /// Greatest switch current, amperes. Default: not given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub rating_a: Option<f64>,
    /// Gate charge of one switching, coulombs. Default: not given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub gate_charge_c: Option<f64>,
    /// Gate drive voltage, volts. Default: not given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub gate_drive_v: Option<f64>,
    /// Time in which the switch current falls to zero at turn-off, seconds. Default: 0.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub fall_time_s: Option<f64>,
    /// The switch by its width; on-resistance, capacitance, gate charge and `node_f` then follow
    /// from it, and the data of `upper` are per width too. Default: not given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub per_width: Option<PerWidth>,
    /// The switches above the lowest of a stack. Default: like the lowest, with its capacitance.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub upper: Option<Upper>,
    /// Gate threshold of the upper switches of a stack, volts. Default: 0.
    #[serde(skip_serializing_if = "is_nothing")]
    pub threshold_v: f64,
    /// Capacitance from each node within a stack to ground, farads. Default: 0.
    #[serde(skip_serializing_if = "is_nothing")]
    pub node_f: f64,
    /// Thermal resistance from junction to ambient, kelvin per watt. Default: not given.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub junction_to_ambient_k_per_w: Option<f64>,
}

/// A switch known by its width.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct PerWidth {
    /// On-resistance times width, ohm metres.
    pub on_resistance_ohm_m: f64,
    /// Output capacitance per width, farads per metre (at 0 V where a junction law is given).
    pub output_f_per_m: f64,
    /// Gate capacitance per width, farads per metre. Default: 0.
    pub gate_f_per_m: f64,
    /// Width, metres. Default: the one of least loss.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub width_m: Option<f64>,
    /// Whether the number of stacked switches is chosen too, under the voltage limit of each.
    /// Default: no.
    pub choose_stack: bool,
}

/// An upper switch of a stack, with data of its own.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct Upper {
    /// On-resistance, ohms.
    pub on_resistance_ohm: f64,
    /// Capacitance across it, farads.
    pub across_f: f64,
    /// Greatest voltage across it, volts. Default: that of the lowest.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub rating_v: Option<f64>,
}

/// Output capacitance of the switch.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(tag = "kind", rename_all = "lowercase", deny_unknown_fields)]
pub enum Capacitance {
    /// None worth counting.
    #[default]
    None,
    /// The same at every voltage.
    Constant {
        /// Farads.
        c_f: f64,
    },
    /// A junction: cj0 / (1 + v/built_in)^grading.
    Junction {
        /// At zero volts, farads.
        cj0_f: f64,
        /// Built-in potential, volts.
        built_in_v: f64,
        /// Grading exponent.
        grading: f64,
    },
    /// Points of the datasheet's small-signal curve.
    Points {
        /// Drain voltages, volts, rising.
        v: Vec<f64>,
        /// Capacitances there, farads.
        c_f: Vec<f64>,
    },
}

/// Body diode: conducts when the drain is below `-forward_v`, then
/// `v = -forward_v - slope_ohm * i`.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Diode {
    /// Forward voltage, volts.
    pub forward_v: f64,
    /// Slope resistance, ohms. Default: 0.
    #[serde(default)]
    pub slope_ohm: f64,
}

/// How the stage is to be built.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct StageChoice {
    /// Single-ended or differential. Default: single.
    pub form: Form,
    /// Number of stacked switches. Default: 1.
    pub stack: u32,
    /// On-fraction of the switch. Default: 0.5.
    pub duty: f64,
    /// Loaded Q: w L2 / R of the whole series coil. Default: 7.
    pub loaded_q: f64,
    /// The feed coil. Default: a choke.
    pub feed: Feed,
    /// Q of every coil at the carrier; null is lossless. Default: null.
    pub coil_q: Option<f64>,
    /// Q of every capacitor at the carrier; null is lossless. Default: null.
    pub capacitor_q: Option<f64>,
    /// What sizing strives for. Default: soft switching.
    #[serde(skip_serializing_if = "is_soft")]
    pub aim: Aim,
    /// Coupling coefficient of a differential stage's feed coils: 0 for two coils of their own,
    /// towards 1 for one with a centre tap. Default: 0.
    #[serde(skip_serializing_if = "is_nothing")]
    pub feed_coupling: f64,
    /// Part of a differential stage's fitted shunt susceptance that one capacitor between the
    /// drains does, 0 to 1. Default: 0.
    #[serde(skip_serializing_if = "is_nothing")]
    pub cross_share: f64,
    /// What the second side of a differential stage has more than the first. Default: nothing.
    #[serde(skip_serializing_if = "Mismatch::is_none")]
    pub mismatch: Mismatch,
    /// Series trap at the second harmonic across the switch: the shunt capacitance over the
    /// trap's. Default: no trap.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub trap_ratio: Option<f64>,
    /// Gate supplies of the upper switches of a stack, volts, from the ground up. Default: those
    /// that share the voltage in proportion to the ratings.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub gate_supplies_v: Option<Vec<f64>>,
}

/// Relative differences of the second side of a differential stage.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct Mismatch {
    /// Of the on-resistance.
    pub on_resistance: f64,
    /// Of the on-fraction.
    pub duty: f64,
    /// Of the device's capacitance.
    pub capacitance: f64,
}

impl Mismatch {
    /// Whether there is none.
    pub fn is_none(&self) -> bool {
        *self == Self::default()
    }
}

fn is_nothing(value: &f64) -> bool {
    *value == 0.0
}

fn is_soft(aim: &Aim) -> bool {
    *aim == Aim::SoftSwitching
}

impl Default for StageChoice {
    fn default() -> Self {
        Self {
            form: Form::Single,
            stack: 1,
            duty: 0.5,
            loaded_q: 7.0,
            feed: Feed::default(),
            coil_q: None,
            capacitor_q: None,
            aim: Aim::SoftSwitching,
            feed_coupling: 0.0,
            cross_share: 0.0,
            mismatch: Mismatch::default(),
            trap_ratio: None,
            gate_supplies_v: None,
        }
    }
}

/// Single-ended or differential.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Form {
    /// One switch.
    #[default]
    Single,
    /// Two switches half a period apart.
    Differential,
}

/// What sizing strives for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Aim {
    /// Zero drain voltage with zero slope at turn-on.
    #[default]
    SoftSwitching,
    /// The highest drain efficiency under the drain limit.
    LeastLoss,
}

/// The feed coil.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(tag = "kind", rename_all = "lowercase", deny_unknown_fields)]
pub enum Feed {
    /// A coil whose reactance is `reactance_ratio` times the drain load.
    Choke {
        /// w L1 / R. Default: 30.
        #[serde(default = "thirty", skip_serializing_if = "is_thirty")]
        reactance_ratio: f64,
    },
    /// A coil that resonates with the shunt capacitance at q times the carrier.
    Resonant {
        /// q = 1/(w sqrt(L1 C1)), C1 being the whole shunt capacitance.
        q: f64,
    },
    /// A coil of a given inductance.
    Inductance {
        /// Henries.
        l_h: f64,
    },
    /// The coil with which the series branch is in resonance at the carrier (X = 0).
    Parallel {},
    /// The coil with which switching stays soft for other load resistances as well.
    #[serde(rename = "load_independent")]
    LoadIndependent {},
}

fn thirty() -> f64 {
    30.0
}

fn is_thirty(ratio: &f64) -> bool {
    *ratio == 30.0
}

impl Default for Feed {
    fn default() -> Self {
        Self::Choke {
            reactance_ratio: thirty(),
        }
    }
}

/// Parts already chosen.
#[derive(Debug, Clone, Copy, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct Fitted {
    /// Feed coil.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub feed: Option<Coil>,
    /// Capacitor beside the device's own capacitance.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub shunt: Option<Capacitor>,
    /// Series coil.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub series_coil: Option<Coil>,
    /// Series capacitor.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub series_capacitor: Option<Capacitor>,
    /// Capacitor between the drains of a differential stage.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub cross: Option<Capacitor>,
    /// What the series branch ends in.
    #[serde(skip_serializing_if = "Option::is_none")]
    pub drain_load: Option<Load>,
}

impl Fitted {
    /// Whether nothing is pinned.
    pub fn is_empty(&self) -> bool {
        *self == Self::default()
    }

    /// Whether every element is pinned, so that the stage is one as built.
    pub fn is_complete(&self) -> bool {
        self.feed.is_some()
            && self.shunt.is_some()
            && self.series_coil.is_some()
            && self.series_capacitor.is_some()
            && self.drain_load.is_some()
    }
}

/// A coil.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Coil {
    /// Henries.
    pub l_h: f64,
    /// Series resistance, ohms. Default: from `coil_q`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub esr_ohm: Option<f64>,
}

/// A capacitor.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Capacitor {
    /// Farads.
    pub c_f: f64,
    /// Series resistance, ohms. Default: from `capacitor_q`.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub esr_ohm: Option<f64>,
}
