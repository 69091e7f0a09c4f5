//! The stage: parts and device to a circuit, and the solved circuit to the figures that an
//! engineer reads.

use crate::answer::{Figures, Losses, Values, Waveforms};
use crate::charge::ChargeLaw;
use crate::circuit::{Circuit, Element};
use crate::design::{Capacitor, Coil, Diode, Load};
use crate::orbit::{self, ClockStep, Orbit, OrbitError, Probe};
use num_complex::Complex64;
use std::f64::consts::TAU;
use std::fmt;
use std::ops::Range;

/// Unaccounted part of the supply power above which a solve is an error.
pub const BALANCE_BOUND: f64 = 1e-9;
/// The same where a capacitance depends on its voltage.
pub const CURVED_BALANCE_BOUND: f64 = 1e-6;
/// Harmonics that are reported.
pub const HARMONICS: usize = 20;
/// Samples in one period of the waveforms.
pub const SAMPLES: usize = 256;

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
    /// Load of the series branch.
    pub load: Load,
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

/// Branch numbers of the stage's circuit.
#[derive(Debug, Clone, PartialEq)]
pub struct Layout {
    /// What is built.
    pub circuit: Circuit,
    supply: usize,
    feed: usize,
    switch: usize,
    fall: Option<usize>,
    diode: Option<usize>,
    device: Option<usize>,
    shunt: Option<usize>,
    series_coil: usize,
    series_capacitor: usize,
    load: usize,
    load_reactance: Option<usize>,
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
        }
    }

    /// The stage's circuit.
    pub fn layout(&self) -> Layout {
        let (ground, supply, drain, coil_end, branch_end, load_end) = (0, 1, 2, 3, 4, 5);
        let coil = |p: Part| Element::Inductor {
            henry: p.value,
            ohm: p.esr_ohm,
        };
        let capacitor = |p: Part| Element::Capacitor {
            farad: p.value,
            ohm: p.esr_ohm,
        };
        let omega = TAU * self.carrier_hz;
        let mut c = Circuit {
            branches: Vec::with_capacity(12),
            ..Circuit::default()
        };
        let source = c.add(
            "supply",
            supply,
            ground,
            Element::Source {
                volt: self.supply_v,
            },
        );
        let feed = c.add("feed coil", supply, drain, coil(self.feed));
        let switch = c.add(
            "switch",
            drain,
            ground,
            Element::Switch {
                ohm: self.on_resistance_ohm,
            },
        );
        let diode = self.diode.map(|d| {
            let element = Element::Diode {
                forward_v: d.forward_v,
                ohm: d.slope_ohm,
            };
            c.add("body diode", drain, ground, element)
        });
        let fall = (self.fall_s > 0.0).then(|| {
            let element = Element::Fall {
                of: switch,
                second: self.fall_s,
            };
            c.add("falling switch current", drain, ground, element)
        });
        let device = (self.device_f > 0.0).then(|| {
            let farad = self.device_f;
            let element = match &self.device_law {
                Some(law) => {
                    c.laws.push(law.clone());
                    Element::Varying { law: 0, farad }
                }
                None => Element::Capacitor { farad, ohm: 0.0 },
            };
            c.add("device capacitance", drain, ground, element)
        });
        let shunt = (self.shunt.value > 0.0)
            .then(|| c.add("shunt capacitor", drain, ground, capacitor(self.shunt)));
        let series_coil = c.add("series coil", drain, coil_end, coil(self.series_coil));
        let series_capacitor = c.add(
            "series capacitor",
            coil_end,
            branch_end,
            capacitor(self.series_capacitor),
        );
        let x = self.load.x_ohm;
        let reactance = if x > 0.0 {
            Some(Element::Inductor {
                henry: x / omega,
                ohm: 0.0,
            })
        } else if x < 0.0 {
            Some(Element::Capacitor {
                farad: -1.0 / (omega * x),
                ohm: 0.0,
            })
        } else {
            None
        };
        let load_to = if reactance.is_some() {
            load_end
        } else {
            ground
        };
        let load = c.add(
            "load",
            branch_end,
            load_to,
            Element::Resistor {
                ohm: self.load.r_ohm,
            },
        );
        let load_reactance =
            reactance.map(|element| c.add("load reactance", load_end, ground, element));
        Layout {
            circuit: c,
            supply: source,
            feed,
            switch,
            fall,
            diode,
            device,
            shunt,
            series_coil,
            series_capacitor,
            load,
            load_reactance,
        }
    }

    fn solve_layout(&self, layout: &Layout) -> Result<Box<dyn Orbit>, OrbitError> {
        let period = 1.0 / self.carrier_hz;
        let bit = |branch: usize| {
            let switching = layout.circuit.switching_branches();
            switching
                .iter()
                .position(|&b| b == branch)
                .map_or(0, |k| 1 << k)
        };
        let on_s = self.duty * period;
        let on = ClockStep {
            duration_s: on_s,
            closed: bit(layout.switch),
        };
        let falling = layout.fall.map(|fall| ClockStep {
            duration_s: self.fall_s,
            closed: bit(fall),
        });
        let off = ClockStep {
            duration_s: period - on_s - falling.map_or(0.0, |f| f.duration_s),
            closed: 0,
        };
        match falling {
            Some(falling) => orbit::solve(&layout.circuit, &[on, falling, off]),
            None => orbit::solve(&layout.circuit, &[on, off]),
        }
    }

    /// Only what soft switching asks: drain voltage (volts) and slope (volts per second) just
    /// before turn-on, and the carrier power in the load (watts).
    ///
    /// # Errors
    /// Where there is no periodic state.
    pub fn turn_on(&self) -> Result<(f64, f64, f64), OrbitError> {
        let layout = self.layout();
        let orbit = self.solve_layout(&layout)?;
        let (v, slope) = orbit.before_end(Probe::Voltage(layout.switch));
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
        let orbit = self.solve_layout(&layout)?;
        let i1 = orbit.harmonics(&[Probe::Current(layout.load)], 1)[0][1];
        let i1 = i1.norm_sqr().sqrt();
        Ok(Probed {
            output_power_w: 2.0 * i1 * i1 * self.load.r_ohm,
            supply_power_w: -self.supply_v * orbit.mean(Probe::Current(layout.supply)),
            drain_peak_v: orbit.extremes(Probe::Voltage(layout.switch)).greatest,
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
        let orbit = self.solve_layout(&layout)?;
        let reading = read(self, &layout, orbit.as_ref(), highest.max(1));
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
        let orbit = self.solve_layout(&layout)?;
        Ok(waveforms(&layout, orbit.as_ref()))
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

/// Everything read off a solved stage.
#[derive(Debug, Clone, PartialEq)]
pub struct Reading {
    /// What an engineer reads.
    pub figures: Figures,
    /// Where each watt goes.
    pub losses: Losses,
    /// Harmonics of the load current from the second on, dBc.
    pub harmonics_dbc: Vec<f64>,
    /// Unaccounted part of the supply power, relative.
    pub balance: f64,
    /// Drain voltage's harmonics from 0 on, volts.
    pub drain_harmonics_v: Vec<f64>,
    /// Load current's harmonics from 0 on, amperes.
    pub load_harmonics_a: Vec<f64>,
}

fn read(stage: &Stage, layout: &Layout, orbit: &dyn Orbit, highest: usize) -> Reading {
    let drain = Probe::Voltage(layout.switch);
    let square = |probe| orbit.mean_product(probe, probe);
    let ohmic = |branch: usize, ohm: f64| ohm * square(Probe::Current(branch));
    let absorbed = |branch| orbit.mean_product(Probe::Voltage(branch), Probe::Current(branch));

    let supply_current_a = -orbit.mean(Probe::Current(layout.supply));
    let supply_power_w = stage.supply_v * supply_current_a;
    let total_output_power_w = ohmic(layout.load, stage.load.r_ohm);
    let [load_harmonics_a, drain_harmonics_v] =
        amplitudes(orbit, [Probe::Current(layout.load), drain], highest);
    let carrier_a = load_harmonics_a[1];
    let output_power_w = 0.5 * carrier_a * carrier_a * stage.load.r_ohm;
    let (turn_on_v, turn_on_slope_v_per_s) = orbit.before_end(drain);

    let discharged = Discharge::at_turn_on(stage, turn_on_v, layout, orbit);
    let losses = Losses {
        switch_w: absorbed(layout.switch) - discharged.in_switch_w,
        turn_on_w: discharged.total_w,
        turn_off_w: layout.fall.map_or(0.0, absorbed),
        diode_w: layout.diode.map_or(0.0, absorbed),
        feed_coil_w: ohmic(layout.feed, stage.feed.esr_ohm),
        shunt_capacitor_w: layout.shunt.map_or(0.0, |b| ohmic(b, stage.shunt.esr_ohm))
            - discharged.in_shunt_resistance_w,
        series_coil_w: ohmic(layout.series_coil, stage.series_coil.esr_ohm),
        series_capacitor_w: ohmic(layout.series_capacitor, stage.series_capacitor.esr_ohm),
    };
    let drain_range = orbit.extremes(drain);
    let switch = Probe::Current(layout.switch);
    let omega = TAU * stage.carrier_hz;
    let figures = Figures {
        supply_power_w,
        supply_current_a,
        output_power_w,
        total_output_power_w,
        drain_efficiency: output_power_w / supply_power_w,
        drain_peak_v: drain_range.greatest,
        constant_capacitance_peak_v: None,
        drain_least_v: drain_range.least,
        switch_peak_a: orbit.extremes(switch).greatest,
        switch_rms_a: (square(switch) + layout.fall.map_or(0.0, |b| square(Probe::Current(b))))
            .max(0.0)
            .sqrt(),
        turn_on_v,
        turn_on_slope_v_per_s,
        loaded_q: omega * stage.series_coil.value / stage.load.r_ohm,
        diode_fraction: layout.diode.map_or(0.0, |b| orbit.conducting_fraction(b)),
        junction_c: None,
        gate_drive_w: None,
        power_added_efficiency: None,
    };
    Reading {
        balance: (supply_power_w - total_output_power_w - losses.total_w()) / supply_power_w,
        harmonics_dbc: load_harmonics_a[2..]
            .iter()
            .map(|a| 20.0 * libm::log10(a / carrier_a))
            .collect(),
        figures,
        losses,
        drain_harmonics_v,
        load_harmonics_a,
    }
}

/// The energy of the shunt capacitance at turn-on, and where it goes.
struct Discharge {
    total_w: f64,
    in_switch_w: f64,
    in_shunt_resistance_w: f64,
}

impl Discharge {
    fn at_turn_on(stage: &Stage, turn_on_v: f64, layout: &Layout, orbit: &dyn Orbit) -> Self {
        let frequency = stage.carrier_hz;
        let device_j = match &stage.device_law {
            Some(law) => law.energy_j(turn_on_v),
            None => 0.5 * stage.device_f * turn_on_v * turn_on_v,
        };
        let device_w = device_j * frequency;
        let shunt_v = layout.shunt.map_or(0.0, |branch| {
            let (current, _) = orbit.before_end(Probe::Current(branch));
            turn_on_v - current * stage.shunt.esr_ohm
        });
        let shunt_w = 0.5 * stage.shunt.value * shunt_v * shunt_v * frequency;
        // An ideal switch takes the energy of capacitors without resistance in a jump that
        // no resistor sees; any other goes through the switch and the capacitor's own
        // resistance in proportion.
        let (ron, esr) = (stage.on_resistance_ohm, stage.shunt.esr_ohm);
        let share = if ron > 0.0 { ron / (ron + esr) } else { 0.0 };
        Self {
            total_w: device_w + shunt_w,
            in_switch_w: if ron > 0.0 {
                device_w + share * shunt_w
            } else {
                0.0
            },
            in_shunt_resistance_w: if esr > 0.0 {
                (1.0 - share) * shunt_w
            } else {
                0.0
            },
        }
    }
}

/// Peak of each sinusoid, orders 0 (the mean) to `highest`.
fn amplitudes<const M: usize>(
    orbit: &dyn Orbit,
    probes: [Probe; M],
    highest: usize,
) -> [Vec<f64>; M] {
    let mut harmonics = orbit.harmonics(&probes, highest).into_iter();
    probes.map(|_| {
        let coefficients = harmonics.next().unwrap_or_default();
        let size = |(order, c): (usize, Complex64)| {
            if order == 0 {
                c.norm_sqr().sqrt()
            } else {
                2.0 * c.norm_sqr().sqrt()
            }
        };
        coefficients.into_iter().enumerate().map(size).collect()
    })
}

fn waveforms(layout: &Layout, orbit: &dyn Orbit) -> Waveforms {
    let capacitors = [layout.device, layout.shunt]
        .into_iter()
        .flatten()
        .map(Probe::Current);
    let load = [Some(layout.load), layout.load_reactance]
        .into_iter()
        .flatten()
        .map(Probe::Voltage);
    let (capacitors, load): (Vec<_>, Vec<_>) = (capacitors.collect(), load.collect());
    let switch = [Some(layout.switch), layout.fall]
        .into_iter()
        .flatten()
        .map(Probe::Current);
    let switch: Vec<_> = switch.collect();
    let mut probes = vec![Probe::Voltage(layout.switch)];
    probes.extend(switch.iter().chain(&capacitors).chain(&load));
    let curves = orbit.samples(&probes, SAMPLES);
    let sum = |range: Range<usize>| {
        let mut total = vec![0.0; SAMPLES + 1];
        for curve in &curves[range] {
            total
                .iter_mut()
                .zip(curve)
                .for_each(|(sum, value)| *sum += value);
        }
        total
    };
    let capacitors_from = 1 + switch.len();
    let load_from = capacitors_from + capacitors.len();
    let step = orbit.period_s() / SAMPLES as f64;
    Waveforms {
        t_s: (0..=SAMPLES).map(|k| k as f64 * step).collect(),
        drain_v: sum(0..1),
        switch_a: sum(1..capacitors_from),
        capacitor_a: sum(capacitors_from..load_from),
        load_v: sum(load_from..probes.len()),
    }
}
