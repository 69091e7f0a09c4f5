//! What an engineer reads off a solved stage.

use super::Stage;
use super::layout::{Layout, Side};
use crate::answer::{Figures, Losses, Waveforms};
use crate::orbit::{Orbit, Probe};
use num_complex::Complex64;
use serde::Serialize;
use std::f64::consts::TAU;
use std::ops::Range;

/// Samples in one period of the waveforms.
pub const SAMPLES: usize = 256;
/// Harmonics of the common mode that are reported.
const COMMON_HARMONICS: usize = 5;

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
    /// Sides and stacked switches one by one.
    pub detail: Detail,
}

/// What only a stage of several switches has.
#[derive(Debug, Clone, PartialEq, Default, Serialize)]
pub struct Detail {
    /// The two sides of a differential stage.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub sides: Vec<SideFigures>,
    /// Harmonics 0 to 5 of the drains' mean voltage, volts.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub common_mode_v: Vec<f64>,
    /// Harmonics 0 to 5 of the supply current, amperes; of a differential stage.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub supply_harmonics_a: Vec<f64>,
    /// The switches of a stack, from the ground up.
    #[serde(skip_serializing_if = "Vec::is_empty")]
    pub stack: Vec<SwitchStress>,
}

impl Detail {
    /// Whether there is nothing in it.
    pub fn is_empty(&self) -> bool {
        *self == Self::default()
    }
}

/// One side of a differential stage.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct SideFigures {
    /// Highest drain voltage, volts.
    pub drain_peak_v: f64,
    /// Drain voltage just before its switch closes, volts.
    pub turn_on_v: f64,
    /// Highest switch current, amperes.
    pub switch_peak_a: f64,
    /// RMS switch current, amperes.
    pub switch_rms_a: f64,
    /// What its switch turns into heat by conducting, watts.
    pub switch_w: f64,
}

/// One switch of a stack.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct SwitchStress {
    /// Highest voltage across it, volts.
    pub drain_source_v: f64,
    /// Highest voltage from its drain to its gate, volts, the gate of an upper switch standing at
    /// its supply and that of the lowest at 0 V.
    pub drain_gate_v: f64,
    /// Gate supply less threshold, volts; 0 for the lowest.
    pub clamp_v: f64,
}

/// Means over a solved stage.
struct Meter<'a> {
    orbit: &'a dyn Orbit,
}

impl Meter<'_> {
    fn square(&self, branch: usize) -> f64 {
        let probe = Probe::Current(branch);
        self.orbit.mean_product(probe, probe)
    }

    fn absorbed(&self, branch: usize) -> f64 {
        self.orbit
            .mean_product(Probe::Voltage(branch), Probe::Current(branch))
    }

    /// What goes through a side's switches, falling current included; and its lowest drain voltage.
    fn side(
        &self,
        side: &Side,
        discharged_w: f64,
        period_s: f64,
        closes_s: f64,
    ) -> (SideFigures, f64) {
        let through: f64 = side
            .uppers
            .iter()
            .map(|u| self.absorbed(u.channel) + self.absorbed(u.follower))
            .sum();
        let drain = Probe::Voltage(side.drain);
        let closes_s = if closes_s > 0.0 { closes_s } else { period_s };
        let range = self.orbit.extremes(drain);
        let figures = SideFigures {
            drain_peak_v: range.greatest,
            turn_on_v: self.orbit.before(drain, closes_s).0,
            switch_peak_a: self.orbit.extremes(Probe::Current(side.switch)).greatest,
            switch_rms_a: (self.square(side.switch) + side.fall.map_or(0.0, |b| self.square(b)))
                .max(0.0)
                .sqrt(),
            switch_w: self.absorbed(side.switch) + through - discharged_w,
        };
        (figures, range.least)
    }
}

pub(super) fn read(stage: &Stage, layout: &Layout, orbit: &dyn Orbit, highest: usize) -> Reading {
    let meter = Meter { orbit };
    let period_s = 1.0 / stage.carrier_hz;
    let first = &layout.sides[0];
    let drain = Probe::Voltage(first.drain);
    let supply_current_a = -orbit.mean(Probe::Current(layout.supply));
    let supply_power_w = stage.supply_v * supply_current_a;
    let total_output_power_w = stage.load.r_ohm * meter.square(layout.load);
    let [load_harmonics_a, drain_harmonics_v] =
        amplitudes(orbit, [Probe::Current(layout.load), drain], highest);
    let carrier_a = load_harmonics_a[1];
    let output_power_w = 0.5 * carrier_a * carrier_a * stage.load.r_ohm;

    let mut losses = Losses {
        series_coil_w: stage.series_coil.esr_ohm * meter.square(layout.series_coil),
        series_capacitor_w: stage.series_capacitor.esr_ohm * meter.square(layout.series_capacitor),
        cross_capacitor_w: match (layout.cross, &stage.pair) {
            (Some(branch), Some(pair)) => pair.cross.esr_ohm * meter.square(branch),
            _ => 0.0,
        },
        ..Losses::default()
    };
    let mut sides = Vec::with_capacity(2);
    let mut least_v = f64::MAX;
    for side in &layout.sides {
        let discharged = Discharge::at_turn_on(stage, side, orbit, period_s);
        let (figures, lowest_v) = meter.side(
            side,
            discharged.in_switch_w,
            period_s,
            side.closes() * period_s,
        );
        least_v = least_v.min(lowest_v);
        losses.switch_w += figures.switch_w;
        losses.turn_on_w += discharged.total_w;
        losses.turn_off_w += side.fall.map_or(0.0, |b| meter.absorbed(b));
        losses.diode_w += side.diode.map_or(0.0, |b| meter.absorbed(b));
        losses.feed_coil_w += stage.feed.esr_ohm * meter.square(side.feed);
        losses.shunt_capacitor_w += side.shunt.map_or(0.0, |b| {
            stage.shunt.esr_ohm * meter.square(b) - discharged.in_shunt_resistance_w
        });
        if let (Some(branches), Some(trap)) = (side.trap, stage.trap) {
            losses.trap_w += trap.coil.esr_ohm * meter.square(branches[0])
                + trap.capacitor.esr_ohm * meter.square(branches[1]);
        }
        sides.push(figures);
    }
    let greatest = |of: fn(&SideFigures) -> f64| sides.iter().map(of).fold(f64::MIN, f64::max);
    let turn_on_v = sides
        .iter()
        .map(|s| s.turn_on_v)
        .max_by(|a, b| a.abs().total_cmp(&b.abs()))
        .unwrap_or(0.0);
    let omega = TAU * stage.carrier_hz;
    let figures = Figures {
        supply_power_w,
        supply_current_a,
        output_power_w,
        total_output_power_w,
        drain_efficiency: output_power_w / supply_power_w,
        drain_peak_v: greatest(|s| s.drain_peak_v),
        constant_capacitance_peak_v: None,
        drain_least_v: least_v,
        switch_peak_a: greatest(|s| s.switch_peak_a),
        switch_rms_a: greatest(|s| s.switch_rms_a),
        turn_on_v,
        turn_on_slope_v_per_s: orbit.before_end(drain).1,
        loaded_q: omega * stage.series_coil.value / stage.load.r_ohm,
        diode_fraction: first.diode.map_or(0.0, |b| orbit.conducting_fraction(b)),
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
        detail: detail(stage, layout, orbit, sides),
    }
}

fn detail(stage: &Stage, layout: &Layout, orbit: &dyn Orbit, sides: Vec<SideFigures>) -> Detail {
    let mut detail = Detail::default();
    if let [a, b] = &layout.sides[..] {
        let [own, other, supply] = spectra(
            orbit,
            [
                Probe::Voltage(a.drain),
                Probe::Voltage(b.drain),
                Probe::Current(layout.supply),
            ],
            COMMON_HARMONICS,
        );
        let common: Vec<Complex64> = own.iter().zip(&other).map(|(a, b)| (a + b) * 0.5).collect();
        detail.common_mode_v = sizes(&common);
        detail.supply_harmonics_a = sizes(&supply);
        detail.sides = sides;
    }
    let side = &layout.sides[0];
    if !side.uppers.is_empty() {
        let peak = |branch: usize| orbit.extremes(Probe::Voltage(branch)).greatest;
        // The upper node of each switch against ground.
        let mut nodes: Vec<usize> = vec![side.switch];
        nodes.extend(side.uppers.iter().skip(1).filter_map(|u| u.node));
        nodes.push(side.drain);
        // Clamp and gate voltage: the lowest gate is at 0 V while its switch is open.
        let gates = std::iter::once((0.0, 0.0)).chain(
            stage
                .uppers
                .iter()
                .map(|u| (u.clamp_v, u.clamp_v + stage.threshold_v)),
        );
        let across = std::iter::once(side.switch).chain(side.uppers.iter().map(|u| u.across));
        detail.stack = nodes
            .into_iter()
            .zip(across)
            .zip(gates)
            .map(|((node, across), (clamp_v, gate_v))| SwitchStress {
                drain_source_v: peak(across),
                drain_gate_v: peak(node) - gate_v,
                clamp_v,
            })
            .collect();
    }
    detail
}

/// The energy of the shunt capacitance at turn-on, and where it goes.
struct Discharge {
    total_w: f64,
    in_switch_w: f64,
    in_shunt_resistance_w: f64,
}

impl Discharge {
    fn at_turn_on(stage: &Stage, side: &Side, orbit: &dyn Orbit, period_s: f64) -> Self {
        let frequency = stage.carrier_hz;
        let closes_s = if side.closes() > 0.0 {
            side.closes() * period_s
        } else {
            period_s
        };
        let before = |probe| orbit.before(probe, closes_s).0;
        let low_v = before(Probe::Voltage(side.switch));
        let turn_on_v = before(Probe::Voltage(side.drain));
        let more = 1.0 + side.more_capacitance();
        let mut device_j = more
            * match &stage.device_law {
                Some(law) => law.energy_j(low_v),
                None => 0.5 * stage.low_node_f() * low_v * low_v,
            };
        for (upper, branches) in stage.uppers.iter().zip(&side.uppers) {
            let across_v = before(Probe::Voltage(branches.across));
            device_j += 0.5 * upper.across_f * across_v * across_v;
            if let Some(node) = branches.node {
                let node_v = before(Probe::Voltage(node));
                device_j += 0.5 * upper.node_f * node_v * node_v;
            }
        }
        let device_w = device_j * frequency;
        let shunt_v = side.shunt.map_or(0.0, |branch| {
            turn_on_v - before(Probe::Current(branch)) * stage.shunt.esr_ohm
        });
        let shunt_w = 0.5 * stage.shunt.value * shunt_v * shunt_v * frequency;
        // An ideal switch takes the energy of capacitors without resistance in a jump that
        // no resistor sees; any other goes through the switch and the capacitor's own
        // resistance in proportion.
        let upper_ohm: f64 = stage.uppers.iter().map(|u| u.on_resistance_ohm).sum();
        let (ron, esr) = (stage.on_resistance_ohm + upper_ohm, stage.shunt.esr_ohm);
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
    spectra(orbit, probes, highest).map(|coefficients| sizes(&coefficients))
}

fn spectra<const M: usize>(
    orbit: &dyn Orbit,
    probes: [Probe; M],
    highest: usize,
) -> [Vec<Complex64>; M] {
    let mut harmonics = orbit.harmonics(&probes, highest).into_iter();
    probes.map(|_| harmonics.next().unwrap_or_default())
}

fn sizes(coefficients: &[Complex64]) -> Vec<f64> {
    let size = |(order, c): (usize, &Complex64)| {
        let peak = if order == 0 { 1.0 } else { 2.0 };
        peak * c.norm_sqr().sqrt()
    };
    coefficients.iter().enumerate().map(size).collect()
}

pub(super) fn waveforms(layout: &Layout, orbit: &dyn Orbit) -> Waveforms {
    let side = &layout.sides[0];
    let currents = |branches: &[Option<usize>]| -> Vec<Probe> {
        branches
            .iter()
            .flatten()
            .map(|&b| Probe::Current(b))
            .collect()
    };
    let switch = currents(&[Some(side.switch), side.fall]);
    let capacitors = if side.uppers.is_empty() {
        currents(&[side.device, side.shunt, layout.cross])
    } else {
        // Of a stack, what flows into its top switch's capacitance is the drain's share.
        currents(&[
            side.uppers.last().map(|u| u.across),
            side.shunt,
            layout.cross,
        ])
    };
    let load: Vec<Probe> = [Some(layout.load), layout.load_reactance]
        .into_iter()
        .flatten()
        .map(Probe::Voltage)
        .collect();
    let drains: Vec<Probe> = layout
        .sides
        .iter()
        .map(|side| Probe::Voltage(side.drain))
        .collect();
    let mut probes = drains.clone();
    probes.extend(switch.iter().chain(&capacitors).chain(&load));
    let mut curves = orbit.samples(&probes, SAMPLES);
    let drain_b_v = if drains.len() > 1 {
        curves.remove(1)
    } else {
        Vec::new()
    };
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
        drain_b_v,
        switch_a: sum(1..capacitors_from),
        capacitor_a: sum(capacitors_from..load_from),
        load_v: sum(load_from..curves.len()),
    }
}
