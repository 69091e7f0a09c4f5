//! The stage's circuit: the one description that everything else takes it from.

use super::{Part, Stage};
use crate::circuit::{Circuit, Coupling, Element, Node};
use crate::design::Mismatch;
use crate::orbit::{self, ClockStep, Orbit, OrbitError};
use std::f64::consts::TAU;

/// The stage's circuit and where its parts are in it, as branch numbers.
#[derive(Debug, Clone, PartialEq)]
pub struct Layout {
    /// What is built.
    pub circuit: Circuit,
    pub(super) supply: usize,
    /// One side, or two half a period apart.
    pub(super) sides: Vec<Side>,
    pub(super) cross: Option<usize>,
    pub(super) series_coil: usize,
    pub(super) series_capacitor: usize,
    pub(super) load: usize,
    pub(super) load_reactance: Option<usize>,
}

/// One switch with what stands beside it.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Side {
    pub(super) feed: usize,
    pub(super) switch: usize,
    pub(super) fall: Option<usize>,
    pub(super) diode: Option<usize>,
    pub(super) device: Option<usize>,
    pub(super) shunt: Option<usize>,
    /// Coil and capacitor of the trap.
    pub(super) trap: Option<[usize; 2]>,
    pub(super) uppers: Vec<UpperBranches>,
    /// A branch from the drain to ground, for its voltage.
    pub(super) drain: usize,
    /// When the switch closes and for how long, in periods.
    closes: f64,
    duty: f64,
    more_capacitance: f64,
}

impl Side {
    /// When its switch closes, in periods.
    pub(super) fn closes(&self) -> f64 {
        self.closes
    }

    /// What its device capacitance has more than stated, relative.
    pub(super) fn more_capacitance(&self) -> f64 {
        self.more_capacitance
    }
}

/// An upper switch.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct UpperBranches {
    pub(super) channel: usize,
    pub(super) follower: usize,
    pub(super) across: usize,
    pub(super) node: Option<usize>,
}

const GROUND: Node = 0;
const SUPPLY: Node = 1;
const COIL_END: Node = 2;
const BRANCH_END: Node = 3;
const LOAD_END: Node = 4;
const FIRST_DRAIN: Node = 5;

fn coil(part: Part) -> Element {
    Element::Inductor {
        henry: part.value,
        ohm: part.esr_ohm,
    }
}

fn capacitor(part: Part) -> Element {
    Element::Capacitor {
        farad: part.value,
        ohm: part.esr_ohm,
    }
}

impl Stage {
    /// The stage's circuit.
    pub fn layout(&self) -> Layout {
        let mut c = Circuit {
            branches: Vec::with_capacity(12),
            ..Circuit::default()
        };
        let volt = self.supply_v;
        let supply = c.add("supply", SUPPLY, GROUND, Element::Source { volt });
        let first = FIRST_DRAIN;
        let mut sides = vec![self.side(&mut c, first, 0.0)];
        let mut end = GROUND;
        let mut cross = None;
        if let Some(pair) = &self.pair {
            end = first + 1 + self.uppers.len() + 1;
            sides.push(self.side(&mut c, end, 0.5));
            if pair.feed_coupling != 0.0 {
                c.couplings.push(Coupling {
                    first: sides[0].feed,
                    second: sides[1].feed,
                    mutual_henry: pair.feed_coupling * self.feed.value,
                });
            }
            cross = (pair.cross.value > 0.0)
                .then(|| c.add("cross capacitor", first, end, capacitor(pair.cross)));
        }
        let series_coil = c.add("series coil", first, COIL_END, coil(self.series_coil));
        let series_capacitor = c.add(
            "series capacitor",
            COIL_END,
            BRANCH_END,
            capacitor(self.series_capacitor),
        );
        let (x, omega) = (self.load.x_ohm, TAU * self.carrier_hz);
        let lossless = |value: f64| Part {
            value,
            esr_ohm: 0.0,
        };
        let reactance = if x > 0.0 {
            Some(coil(lossless(x / omega)))
        } else if x < 0.0 {
            Some(capacitor(lossless(-1.0 / (omega * x))))
        } else {
            None
        };
        let load_to = if reactance.is_some() { LOAD_END } else { end };
        let ohm = self.load.r_ohm;
        let load = c.add("load", BRANCH_END, load_to, Element::Resistor { ohm });
        let load_reactance =
            reactance.map(|element| c.add("load reactance", LOAD_END, end, element));
        Layout {
            circuit: c,
            supply,
            sides,
            cross,
            series_coil,
            series_capacitor,
            load,
            load_reactance,
        }
    }

    /// Capacitance from the lowest switch's upper node to ground, farads.
    pub(super) fn low_node_f(&self) -> f64 {
        self.device_f + self.uppers.first().map_or(0.0, |upper| upper.node_f)
    }

    /// One side on its drain; nodes above the drain's are its own.
    fn side(&self, c: &mut Circuit, drain: Node, closes: f64) -> Side {
        let more = match &self.pair {
            Some(pair) if closes > 0.0 => pair.mismatch,
            _ => Mismatch::default(),
        };
        let feed = c.add("feed coil", SUPPLY, drain, coil(self.feed));
        // The lowest switch's upper node; above it the others, the last at the drain.
        let node = |k: usize| {
            if k == self.uppers.len() {
                drain
            } else {
                drain + 1 + k
            }
        };
        let low = node(0);
        let ohm = self.on_resistance_ohm * (1.0 + more.on_resistance);
        let switch = c.add("switch", low, GROUND, Element::Switch { ohm });
        let diode = self.diode.map(|d| {
            let element = Element::Diode {
                forward_v: d.forward_v,
                ohm: d.slope_ohm,
            };
            c.add("body diode", low, GROUND, element)
        });
        let fall = (self.fall_s > 0.0).then(|| {
            let element = Element::Fall {
                of: switch,
                second: self.fall_s,
            };
            c.add("falling switch current", low, GROUND, element)
        });
        let device = (self.device_f > 0.0).then(|| {
            // The lowest node's capacitance is the device's to ground.
            let farad = self.low_node_f() * (1.0 + more.capacitance);
            let element = match &self.device_law {
                Some(law) => {
                    c.laws.push(law.scaled(1.0 + more.capacitance));
                    let law = c.laws.len() - 1;
                    Element::Varying { law, farad }
                }
                None => Element::Capacitor { farad, ohm: 0.0 },
            };
            c.add("device capacitance", low, GROUND, element)
        });
        let mut uppers = Vec::new();
        for (k, upper) in self.uppers.iter().enumerate() {
            let (above, below) = (node(k + 1), node(k));
            let constant = |value: f64| {
                capacitor(Part {
                    value,
                    esr_ohm: 0.0,
                })
            };
            let own = (k > 0 && upper.node_f > 0.0)
                .then(|| c.add("node capacitance", below, GROUND, constant(upper.node_f)));
            let across = c.add("device capacitance", above, below, constant(upper.across_f));
            let channel = Element::Channel {
                ohm: upper.on_resistance_ohm * (1.0 + more.on_resistance),
            };
            let channel = c.add("upper switch", above, below, channel);
            let follower = Element::Follower {
                siemens: upper.siemens,
                node: own.or(device.filter(|_| k == 0)).unwrap_or(across),
                clamp_v: upper.clamp_v,
                channel,
            };
            let follower = c.add("upper switch, held by its gate", above, below, follower);
            uppers.push(UpperBranches {
                channel,
                follower,
                across,
                node: own,
            });
        }
        let shunt = (self.shunt.value > 0.0)
            .then(|| c.add("shunt capacitor", drain, GROUND, capacitor(self.shunt)));
        let trap = self.trap.map(|trap| {
            let middle = drain + 1 + self.uppers.len();
            [
                c.add("trap coil", drain, middle, coil(trap.coil)),
                c.add("trap capacitor", middle, GROUND, capacitor(trap.capacitor)),
            ]
        });
        let sense = if uppers.is_empty() {
            switch
        } else {
            shunt.unwrap_or_else(|| {
                // Never closed: it is there for the drain's voltage.
                c.add("drain", drain, GROUND, Element::Switch { ohm: 0.0 })
            })
        };
        Side {
            feed,
            switch,
            fall,
            diode,
            device,
            shunt,
            trap,
            uppers,
            drain: sense,
            closes,
            duty: self.duty * (1.0 + more.duty),
            more_capacitance: more.capacitance,
        }
    }
}

impl Layout {
    /// The periodic steady state; in halves where two sides are alike.
    pub(super) fn solve(&self, stage: &Stage) -> Result<Box<dyn Orbit>, OrbitError> {
        let switching = self.circuit.switching_branches();
        let bit = |branch: usize| {
            switching
                .iter()
                .position(|&b| b == branch)
                .map_or(0, |k| 1 << k)
        };
        let mut spans = Vec::with_capacity(4);
        for side in &self.sides {
            let opens = side.closes + side.duty;
            spans.push((side.closes, opens, bit(side.switch)));
            if let Some(fall) = side.fall {
                spans.push((opens, opens + stage.fall_s * stage.carrier_hz, bit(fall)));
            }
        }
        let period_s = 1.0 / stage.carrier_hz;
        match self.partners(stage) {
            Some(partners) => {
                orbit::solve_halves(&self.circuit, &clock(period_s, 0.5, &spans), &partners)
            }
            None => orbit::solve(&self.circuit, &clock(period_s, 1.0, &spans)),
        }
    }

    /// Each branch's partner on the other side, where the sides are alike.
    fn partners(&self, stage: &Stage) -> Option<Vec<(usize, f64)>> {
        let [a, b] = &self.sides[..] else {
            return None;
        };
        if stage.pair?.mismatch != Mismatch::default() || stage.fall_s > 0.0 {
            return None;
        }
        let mut partners: Vec<(usize, f64)> = (0..self.circuit.branches.len())
            .map(|branch| (branch, -1.0))
            .collect();
        partners[self.supply] = (self.supply, 1.0);
        // A side's branches follow one another.
        let (first, second) = (a.feed, b.feed);
        for k in 0..second - first {
            partners[first + k] = (second + k, 1.0);
            partners[second + k] = (first + k, 1.0);
        }
        Some(partners)
    }
}

/// Clock steps up to `until` (in periods) from the spans in which switches are closed: start,
/// end and bit.
fn clock(period_s: f64, until: f64, spans: &[(f64, f64, u32)]) -> Vec<ClockStep> {
    let within = |at: f64| {
        if at > 1.0 { at - 1.0 } else { at }
    };
    // Placed in order; the standard library's sort is 2 kB to send.
    let mut cuts: Vec<f64> = vec![0.0, until];
    for &(from, to, _) in spans {
        for at in [from, within(to)] {
            if at > 0.0 && at < until {
                let place = cuts.partition_point(|cut| *cut < at);
                cuts.insert(place, at);
            }
        }
    }
    let mut steps = Vec::with_capacity(cuts.len());
    for pair in cuts.windows(2).filter(|pair| pair[1] > pair[0]) {
        let middle = 0.5 * (pair[0] + pair[1]);
        let inside = |from: f64, to: f64| {
            (from..to).contains(&middle) || (from..to).contains(&(middle + 1.0))
        };
        steps.push(ClockStep {
            duration_s: (pair[1] - pair[0]) * period_s,
            closed: spans
                .iter()
                .filter(|&&(from, to, _)| inside(from, to))
                .fold(0, |set, &(_, _, bit)| set | bit),
        });
    }
    steps
}
