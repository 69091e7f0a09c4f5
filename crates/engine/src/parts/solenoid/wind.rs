//! Coils for a wanted inductance: turns, wire and former, stretched to the value.

use super::{Coupling, Figures, Solenoid, inductances};
use crate::parts::series::Series;
use crate::parts::skin::COPPER_OHM_M;
use crate::parts::{
    FREQUENCIES, INDUCTANCES, Nearest, PartError, RESISTIVITIES, Shortfall, root, within,
};
use std::cmp::Ordering;
use std::f64::consts::PI;

/// Common diameters of winding wire, metres: of IEC 60317-0-1's, from memory, those that are
/// widely sold (common practice).
pub const WIRES_M: [f64; 17] = [
    0.1e-3, 0.16e-3, 0.2e-3, 0.25e-3, 0.315e-3, 0.4e-3, 0.5e-3, 0.63e-3, 0.71e-3, 0.8e-3, 0.9e-3,
    1.0e-3, 1.25e-3, 1.5e-3, 1.6e-3, 2.0e-3, 2.5e-3,
];

/// Heat that a coil gives off by convection and radiation, W/(m² K) (common practice, coarse).
const COOLING: f64 = 10.0;
/// The most turns that are wound.
const MOST_TURNS: f64 = 500.0;
/// The most wires to choose from.
const MOST_WIRES: usize = 64;
/// The most formers that are tried, and with them the most choices.
const MOST_FORMERS: usize = 26;

/// What is wanted of a coil, and what it may be wound from.
#[derive(Debug, Clone, PartialEq)]
pub struct Wanted {
    /// Inductance well below self-resonance, leads included, henries.
    pub inductance_h: f64,
    /// Frequency, hertz.
    pub frequency_hz: f64,
    /// Bare diameters of the wires there are, metres; see [`WIRES_M`].
    pub wires_m: Vec<f64>,
    /// Least and greatest outer diameter of the former, metres. Tried are the ends and the values
    /// of E24 between them (only some in a wide range).
    pub formers_m: [f64; 2],
    /// Whether half turns may be wound, or whole ones only.
    pub half_turns: bool,
    /// Least and greatest pitch over wire diameter, 1 to 20; the least covers the insulation.
    pub pitch_per_wire: [f64; 2],
    /// Greatest length of the winding, metres.
    pub longest_m: f64,
    /// Length of each lead, metres.
    pub lead_m: f64,
    /// Resistivity of the wire, ohm metres.
    pub resistivity_ohm_m: f64,
    /// Least quality factor, if one is asked for.
    pub least_q: Option<f64>,
    /// Least self-resonance over the frequency, if one is asked for; not judged where the
    /// self-capacitance is not known.
    pub least_resonance: Option<f64>,
    /// Effective current, amperes, and the greatest temperature rise with it, kelvin, if asked
    /// for.
    pub current_a_rise_k: Option<[f64; 2]>,
}

impl Wanted {
    /// A coil of `inductance_h` henries at `frequency_hz`, of enamelled copper wire on 3 to 40 mm,
    /// pitch 1.1 to 4 wires, up to 100 mm long, self-resonance at least three times the frequency
    /// (all of these common practice).
    pub fn new(inductance_h: f64, frequency_hz: f64) -> Self {
        Self {
            inductance_h,
            frequency_hz,
            wires_m: WIRES_M.to_vec(),
            formers_m: [3e-3, 40e-3],
            half_turns: true,
            pitch_per_wire: [1.1, 4.0],
            longest_m: 0.1,
            lead_m: 0.0,
            resistivity_ohm_m: COPPER_OHM_M,
            least_q: None,
            least_resonance: Some(3.0),
            current_a_rise_k: None,
        }
    }

    fn check(&self) -> Result<(), PartError> {
        within("inductance", "H", self.inductance_h, INDUCTANCES)?;
        within("frequency", "Hz", self.frequency_hz, FREQUENCIES)?;
        if !(1..=MOST_WIRES).contains(&self.wires_m.len()) {
            return Err(PartError::Count {
                what: "wires",
                found: self.wires_m.len(),
                most: MOST_WIRES,
            });
        }
        for wire in &self.wires_m {
            within("wire diameter", "m", *wire, [1e-6, 0.1])?;
        }
        let [least, most] = self.formers_m;
        within("least former diameter", "m", least, [1e-5, 10.0])?;
        within("greatest former diameter", "m", most, [least, 10.0])?;
        let [least, most] = self.pitch_per_wire;
        within("least pitch per wire", "", least, [1.0, 20.0])?;
        within("greatest pitch per wire", "", most, [least, 20.0])?;
        within("greatest length", "m", self.longest_m, [1e-6, 100.0])?;
        within("lead length", "m", self.lead_m, [0.0, 10.0])?;
        within("resistivity", "Ωm", self.resistivity_ohm_m, RESISTIVITIES)?;
        if let Some(q) = self.least_q {
            within("least Q", "", q, [0.0, 1e6])?;
        }
        if let Some(ratio) = self.least_resonance {
            within("least self-resonance ratio", "", ratio, [0.0, 1e6])?;
        }
        if let Some([current, rise]) = self.current_a_rise_k {
            within("current", "A", current, [0.0, 1e6])?;
            within("temperature rise", "K", rise, [1e-3, 1e4])?;
        }
        Ok(())
    }

    fn formers(&self) -> Vec<f64> {
        let [least, most] = self.formers_m;
        let mut between = Series::E24.values(self.formers_m).unwrap_or_default();
        between.retain(|d| *d > least * 1.001 && *d < most * 0.999);
        let stride = between.len().div_ceil(MOST_FORMERS - 2).max(1);
        let mut formers = vec![least];
        formers.extend(between.into_iter().step_by(stride));
        if most > least {
            formers.push(most);
        }
        formers
    }

    fn choice(&self, coil: Solenoid, coupling: f64) -> Choice {
        let figures = coil.at(self.frequency_hz, coupling);
        let mut shortfalls = Vec::new();
        if let Some(least) = self.least_q.filter(|q| figures.q < *q) {
            let found = figures.q;
            shortfalls.push(Shortfall::Q { found, least });
        }
        if let (Some(least), Some(f0)) = (self.least_resonance, figures.self_resonance_hz) {
            let found = f0 / self.frequency_hz;
            if found < least {
                shortfalls.push(Shortfall::Resonance { found, least });
            }
        }
        let rise_k = self.current_a_rise_k.map(|[current, most_k]| {
            let surface = PI * (coil.diameter_m + coil.wire_m) * figures.length_m;
            let found_k = current * current * figures.resistance_ohm / (COOLING * surface);
            if found_k > most_k {
                shortfalls.push(Shortfall::Rise { found_k, most_k });
            }
            found_k
        });
        Choice {
            coil,
            figures,
            rise_k,
            shortfalls,
        }
    }
}

/// A coil that has the wanted inductance.
#[derive(Debug, Clone, PartialEq)]
pub struct Choice {
    /// The coil.
    pub coil: Solenoid,
    /// Its figures at the frequency.
    pub figures: Figures,
    /// Temperature rise with the current, kelvin: its loss over the winding's outer surface at
    /// 10 W/(m² K) (common practice, coarse).
    pub rise_k: Option<f64>,
    /// In what it falls short; empty for a feasible one.
    pub shortfalls: Vec<Shortfall>,
}

impl Choice {
    /// Outer diameter of the former, metres.
    pub fn former_m(&self) -> f64 {
        self.coil.diameter_m - self.coil.wire_m
    }

    fn order(&self, other: &Self) -> Ordering {
        let short = |c: &Self| !c.shortfalls.is_empty();
        let by_q = other.figures.q.total_cmp(&self.figures.q);
        short(self).cmp(&short(other)).then(by_q)
    }
}

/// Windings with the wanted inductance: the best one on each former diameter, stretched by its
/// pitch to the value; those that fall short of nothing first, each group by falling Q.
///
/// The pitch stays below half the coil's diameter, beyond which the formulas are not made for it,
/// and there are at least 1.5 turns (2 where only whole ones are wound): one turn cannot be
/// stretched.
///
/// # Errors
/// A number out of range, or the nearest inductances that the limits allow.
pub fn wind(wanted: &Wanted) -> Result<Vec<Choice>, PartError> {
    wanted.check()?;
    let grid = Grid::new(wanted.half_turns);
    let mut nearest = Nearest::default();
    let mut choices = Vec::new();
    for former in wanted.formers() {
        let best = wanted
            .wires_m
            .iter()
            .filter_map(|wire| stretched(wanted, &grid, former, *wire, &mut nearest))
            .min_by(Choice::order);
        choices.extend(best);
    }
    if choices.is_empty() {
        return Err(nearest.error(wanted.inductance_h));
    }
    choices.sort_by(Choice::order);
    Ok(choices)
}

/// The numbers of turns that are wound, with Rosa's correction for each.
struct Grid(Vec<(f64, f64)>);

impl Grid {
    fn new(half_turns: bool) -> Self {
        let mut whole = Coupling {
            turns: 1.0,
            sums: [0.0; 2],
        };
        let mut last = 0.0;
        let mut grid = Vec::new();
        while whole.turns < MOST_TURNS {
            whole.step();
            let value = whole.value();
            if half_turns {
                grid.push((whole.turns - 0.5, 0.5 * (last + value)));
            }
            grid.push((whole.turns, value));
            last = value;
        }
        Self(grid)
    }
}

/// The best winding of one wire on one former.
fn stretched(
    wanted: &Wanted,
    grid: &Grid,
    former: f64,
    wire: f64,
    nearest: &mut Nearest,
) -> Option<Choice> {
    /// The next number of turns that is tried, over the last.
    const STRIDE: f64 = 1.06;
    let diameter = former + wire;
    let closest = wanted.pitch_per_wire[0] * wire;
    let widest = (wanted.pitch_per_wire[1] * wire).min(0.5 * diameter);
    if widest < closest || Solenoid::wire_range(diameter)[0] > wire {
        return None;
    }
    let fitting = grid
        .0
        .partition_point(|(turns, _)| turns * closest <= wanted.longest_m);
    let grid = &grid.0[..fitting];
    let coil = |turns, pitch_m| Solenoid {
        turns,
        diameter_m: diameter,
        pitch_m,
        wire_m: wire,
        lead_m: wanted.lead_m,
        resistivity_ohm_m: wanted.resistivity_ohm_m,
    };
    let target = wanted.inductance_h;
    let value = |(turns, coupling), pitch| inductances(&coil(turns, pitch), coupling)[1];
    // Close windings gain inductance by turns; stretching takes what is too much.
    let mut at = grid.partition_point(|place| value(*place, closest) < target);
    if let Some(below) = at.checked_sub(1) {
        nearest.meet(value(grid[below], closest), target);
    }
    let mut best: Option<Choice> = None;
    while let Some(&(turns, coupling)) = grid.get(at) {
        let place = (turns, coupling);
        let loosest = widest.min(wanted.longest_m / turns).max(closest);
        let loose = value(place, loosest);
        if loose > target * (1.0 + 1e-11) {
            nearest.meet(loose, target);
            break;
        }
        let surplus = |pitch: f64| value(place, pitch) / target - 1.0;
        if let Some(pitch) = root::between(&surplus, closest, loosest) {
            let choice = wanted.choice(coil(turns, pitch), coupling);
            if best.as_ref().is_none_or(|b| choice.order(b).is_lt()) {
                best = Some(choice);
            }
        }
        let next = turns * STRIDE;
        at += 1 + grid[at + 1..].partition_point(|(turns, _)| *turns < next);
    }
    best
}
