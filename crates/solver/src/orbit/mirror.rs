//! Circuits with two sides half a period apart: half a period and an exchange of sides is the
//! whole orbit.

use super::{Extremes, Orbit, Probe};
use crate::circuit::Circuit;
use nalgebra::{DMatrix, DVector};
use num_complex::Complex64;

/// Which branch takes whose place after half a period, and with what sign.
pub(super) struct Mirror {
    branches: Vec<(usize, f64)>,
    /// The same of states.
    pub(super) states: Vec<(usize, f64)>,
    /// Switching bits in the order of the branches, and their partners.
    bits: Vec<(u32, u32)>,
}

impl Mirror {
    /// From each branch's partner and sign; none where that is no exchange of like branches.
    pub(super) fn of(circuit: &Circuit, branches: &[(usize, f64)]) -> Option<Self> {
        if branches.len() != circuit.branches.len()
            || (0..branches.len()).any(|k| branches.get(branches[k].0).is_none_or(|p| p.0 != k))
            || circuit.falls().next().is_some()
        {
            return None;
        }
        let (capacitors, inductors) = circuit.state_branches();
        let order: Vec<usize> = capacitors.iter().chain(&inductors).copied().collect();
        let states = order
            .iter()
            .map(|&branch| {
                let (partner, sign) = branches[branch];
                let state = order.iter().position(|&b| b == partner)?;
                Some((state, sign))
            })
            .collect::<Option<_>>()?;
        let switching = circuit.switching_branches();
        let bits = switching
            .iter()
            .enumerate()
            .map(|(k, &branch)| {
                let partner = switching.iter().position(|&b| b == branches[branch].0)?;
                Some((1 << k, 1 << partner))
            })
            .collect::<Option<_>>()?;
        Some(Self {
            branches: branches.to_vec(),
            states,
            bits,
        })
    }

    /// A conduction set after the exchange.
    pub(super) fn bits(&self, set: u32) -> u32 {
        self.bits
            .iter()
            .filter(|(_, partner)| set & partner != 0)
            .fold(0, |bits, (own, _)| bits | own)
    }

    /// A state and its derivative after the exchange.
    pub(super) fn fold(&self, end: &mut DVector<f64>, derivative: &mut DMatrix<f64>) {
        let (old, was) = (end.clone(), derivative.clone());
        for (k, &(partner, sign)) in self.states.iter().enumerate() {
            end[k] = sign * old[partner];
            derivative.set_row(k, &(was.row(partner) * sign));
        }
    }

    fn partner(&self, probe: Probe) -> (Probe, f64) {
        match probe {
            Probe::Voltage(branch) => {
                let (partner, sign) = self.branches[branch];
                (Probe::Voltage(partner), sign)
            }
            Probe::Current(branch) => {
                let (partner, sign) = self.branches[branch];
                (Probe::Current(partner), sign)
            }
        }
    }
}

/// A whole orbit read off its first half.
pub(super) struct Halved {
    pub(super) half: Box<dyn Orbit>,
    pub(super) mirror: Mirror,
}

impl Orbit for Halved {
    fn period_s(&self) -> f64 {
        2.0 * self.half.period_s()
    }

    fn iterations(&self) -> usize {
        self.half.iterations()
    }

    fn pieces(&self) -> usize {
        2 * self.half.pieces()
    }

    fn start(&self) -> Vec<f64> {
        self.half.start()
    }

    fn sizes(&self) -> Vec<f64> {
        let half = self.half.sizes();
        self.mirror
            .states
            .iter()
            .zip(&half)
            .map(|(&(partner, _), own)| own.max(half[partner]))
            .collect()
    }

    fn mean_product(&self, first: Probe, second: Probe) -> f64 {
        let ((a, sign), (b, other)) = (self.mirror.partner(first), self.mirror.partner(second));
        0.5 * (self.half.mean_product(first, second) + sign * other * self.half.mean_product(a, b))
    }

    fn mean(&self, probe: Probe) -> f64 {
        let (partner, sign) = self.mirror.partner(probe);
        0.5 * (self.half.mean(probe) + sign * self.half.mean(partner))
    }

    fn extremes(&self, probe: Probe) -> Extremes {
        let (partner, sign) = self.mirror.partner(probe);
        let mut found = self.half.extremes(probe);
        let other = self.half.extremes(partner);
        let later = self.half.period_s();
        let (least, greatest) = if sign > 0.0 {
            (
                (other.least, other.least_at_s),
                (other.greatest, other.greatest_at_s),
            )
        } else {
            (
                (-other.greatest, other.greatest_at_s),
                (-other.least, other.least_at_s),
            )
        };
        if least.0 < found.least {
            (found.least, found.least_at_s) = (least.0, least.1 + later);
        }
        if greatest.0 > found.greatest {
            (found.greatest, found.greatest_at_s) = (greatest.0, greatest.1 + later);
        }
        found
    }

    fn fourier(&self, probes: &[Probe], count: usize, omega: f64) -> Vec<Vec<Complex64>> {
        let partners: Vec<(Probe, f64)> = probes.iter().map(|&p| self.mirror.partner(p)).collect();
        let mut all = probes.to_vec();
        all.extend(partners.iter().map(|(p, _)| *p));
        let mut own = self.half.fourier(&all, count, omega);
        let others = own.split_off(probes.len());
        let (sin, cos) = libm::sincos(-omega * self.half.period_s());
        let turn = Complex64::new(cos, sin);
        for ((own, other), (_, sign)) in own.iter_mut().zip(&others).zip(&partners) {
            let mut phase = Complex64::new(0.5 * sign, 0.0);
            for (own, other) in own.iter_mut().zip(other) {
                *own = *own * 0.5 + other * phase;
                phase *= turn;
            }
        }
        own
    }

    fn before(&self, probe: Probe, time_s: f64) -> (f64, f64) {
        let half_s = self.half.period_s();
        if time_s < 1.25 * half_s {
            return self.half.before(probe, time_s);
        }
        let (partner, sign) = self.mirror.partner(probe);
        let (value, slope) = self.half.before(partner, time_s - half_s);
        (sign * value, sign * slope)
    }

    fn samples(&self, probes: &[Probe], count: usize) -> Vec<Vec<f64>> {
        let half = count.div_ceil(2).max(1);
        let partners: Vec<(Probe, f64)> = probes.iter().map(|&p| self.mirror.partner(p)).collect();
        let mut all = probes.to_vec();
        all.extend(partners.iter().map(|(p, _)| *p));
        let mut own = self.half.samples(&all, half);
        let others = own.split_off(probes.len());
        for ((own, other), (_, sign)) in own.iter_mut().zip(&others).zip(&partners) {
            own.truncate(half);
            own.extend(other.iter().map(|x| sign * x));
        }
        own
    }

    fn conducting_fraction(&self, branch: usize) -> f64 {
        let (partner, _) = self.mirror.branches[branch];
        0.5 * (self.half.conducting_fraction(branch) + self.half.conducting_fraction(partner))
    }

    fn jump_energy_j(&self) -> f64 {
        2.0 * self.half.jump_energy_j()
    }
}
