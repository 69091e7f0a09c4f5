//! Spiral coils on a chip, in one layer of metal.
//!
//! The losses are those of the metal alone. Those of the substrate and the capacitance to it are
//! left out, and with them self-resonance: on silicon they take more of the Q the larger the
//! spiral and the higher the frequency, so the Q here is the most that can be expected.

use super::{FREQUENCIES, INDUCTANCES, MU0, Nearest, PartError, Shortfall, root, within};
use std::cmp::Ordering;
use std::f64::consts::{PI, TAU};

/// The outline.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Shape {
    /// Four sides.
    Square,
    /// Six sides.
    Hexagon,
    /// Eight sides.
    Octagon,
}

impl Shape {
    /// K1 and K2 of the modified Wheeler formula.
    fn wheeler(self) -> [f64; 2] {
        match self {
            Self::Square => [2.34, 2.75],
            Self::Hexagon => [2.33, 3.82],
            Self::Octagon => [2.25, 3.55],
        }
    }

    /// c1 to c4 of the current sheet expression.
    fn sheet(self) -> [f64; 4] {
        match self {
            Self::Square => [1.27, 2.07, 0.18, 0.13],
            Self::Hexagon => [1.09, 2.23, 0.0, 0.17],
            Self::Octagon => [1.07, 2.29, 0.0, 0.19],
        }
    }

    /// Length of the outline over the distance of opposite sides.
    fn outline(self) -> f64 {
        let sides = match self {
            Self::Square => 4.0,
            Self::Hexagon => 6.0,
            Self::Octagon => 8.0,
        };
        sides * libm::tan(PI / sides)
    }
}

/// The metal that spirals are made of.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Metal {
    /// Resistance of a square to direct current, ohms.
    pub sheet_ohm: f64,
    /// Thickness, metres.
    pub thickness_m: f64,
}

/// A spiral.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Spiral {
    /// Outline.
    pub shape: Shape,
    /// Turns; quarters are common.
    pub turns: f64,
    /// Outer distance of opposite sides, metres.
    pub outer_m: f64,
    /// Width of the trace, metres.
    pub width_m: f64,
    /// Space between traces, metres.
    pub spacing_m: f64,
    /// Metal.
    pub metal: Metal,
}

/// What a spiral is at a frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Figures {
    /// Inductance by the current sheet expression, henries.
    pub inductance_h: f64,
    /// Inductance by the modified Wheeler formula, henries.
    pub wheeler_h: f64,
    /// Inner distance of opposite sides, metres.
    pub inner_m: f64,
    /// (outer - inner)/(outer + inner).
    pub fill: f64,
    /// Length of the trace, metres: turns times the mean outline.
    pub trace_m: f64,
    /// Series resistance of the metal, ohms.
    pub resistance_ohm: f64,
    /// Quality factor of the metal alone, w L/R.
    pub q: f64,
}

const OUTERS: [f64; 2] = [1e-7, 1.0];
const WIDTHS: [f64; 2] = [1e-9, 0.1];

impl Metal {
    fn check(&self) -> Result<(), PartError> {
        within("sheet resistance", "Ω", self.sheet_ohm, [1e-9, 1e6])?;
        within("metal thickness", "m", self.thickness_m, [1e-10, 1e-2])?;
        Ok(())
    }
}

impl Spiral {
    /// Width of the traces and spaces on both sides, metres: 2 n w + 2 (n - 1) s.
    fn sides(&self) -> f64 {
        2.0 * (self.turns * self.width_m + (self.turns - 1.0) * self.spacing_m)
    }

    /// Inductances, henries, by the current sheet expression and the modified Wheeler formula:
    /// S.S. Mohan et al., "Simple accurate expressions for planar spiral inductances", IEEE JSSC
    /// 34(10), 1999, 1419-1424.
    fn inductances(&self) -> [f64; 2] {
        let across = self.outer_m - 0.5 * self.sides();
        let fill = 0.5 * self.sides() / across;
        let scale = MU0 * self.turns * self.turns * across;
        let [k1, k2] = self.shape.wheeler();
        let [c1, c2, c3, c4] = self.shape.sheet();
        let sheet = 0.5 * c1 * (libm::log(c2 / fill) + fill * (c3 + fill * c4));
        [scale * sheet, scale * k1 / (1.0 + k2 * fill)]
    }

    /// The spiral's figures at `frequency_hz`.
    ///
    /// The resistance is rho l/(w d (1 - exp(-t/d))) with the skin depth d, for a current on one
    /// face of a trace of length l, width w and thickness t (C.P. Yue, S.S. Wong, "Physical
    /// modeling of spiral inductors on silicon", IEEE Trans. Electron Devices 47(3), 2000, 560-568;
    /// from memory). That neighbouring turns crowd the current is left out.
    ///
    /// # Errors
    /// A number out of range, or turns that leave no hole.
    pub fn figures(&self, frequency_hz: f64) -> Result<Figures, PartError> {
        within("turns", "", self.turns, [1.0, 1000.0])?;
        within("outer diameter", "m", self.outer_m, OUTERS)?;
        within("trace width", "m", self.width_m, WIDTHS)?;
        within("trace spacing", "m", self.spacing_m, WIDTHS)?;
        within("frequency", "Hz", frequency_hz, FREQUENCIES)?;
        self.metal.check()?;
        if self.sides() >= self.outer_m {
            return Err(PartError::Fit {
                what: "turns of the spiral",
                needed_m: self.sides(),
                room_m: self.outer_m,
            });
        }
        Ok(self.at(frequency_hz))
    }

    /// The figures of a spiral whose numbers are in range.
    fn at(&self, frequency_hz: f64) -> Figures {
        let [inductance_h, wheeler_h] = self.inductances();
        let sides = self.sides();
        let across = self.outer_m - 0.5 * sides;
        let trace_m = self.turns * self.shape.outline() * across;
        let Metal {
            sheet_ohm,
            thickness_m,
        } = self.metal;
        let depth = (sheet_ohm * thickness_m / (PI * frequency_hz * MU0)).sqrt();
        let squares = trace_m / self.width_m;
        let deep = thickness_m / depth;
        let resistance_ohm = sheet_ohm * squares * deep / -libm::expm1(-deep);
        Figures {
            inductance_h,
            wheeler_h,
            inner_m: self.outer_m - sides,
            fill: 0.5 * sides / across,
            trace_m,
            resistance_ohm,
            q: TAU * frequency_hz * inductance_h / resistance_ohm,
        }
    }
}

/// What is wanted of a spiral, and the limits it has to keep.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Wanted {
    /// Inductance by the current sheet expression, henries.
    pub inductance_h: f64,
    /// Frequency, hertz.
    pub frequency_hz: f64,
    /// Outline.
    pub shape: Shape,
    /// Metal.
    pub metal: Metal,
    /// Least and greatest width of the trace, metres.
    pub widths_m: [f64; 2],
    /// Space between traces, metres: the least that the process allows is the best here.
    pub spacing_m: f64,
    /// Greatest outer distance of opposite sides, metres.
    pub outer_m: f64,
    /// Least inner distance over outer one, 0 to 0.95 (0.2 and more is common practice: the
    /// innermost turns add more resistance than inductance).
    pub least_hole: f64,
    /// Least quality factor of the metal alone, if one is asked for.
    pub least_q: Option<f64>,
}

/// A spiral that has the wanted inductance.
#[derive(Debug, Clone, PartialEq)]
pub struct Choice {
    /// The spiral.
    pub spiral: Spiral,
    /// Its figures at the frequency.
    pub figures: Figures,
    /// In what it falls short; empty for a feasible one.
    pub shortfalls: Vec<Shortfall>,
}

impl Choice {
    fn order(&self, other: &Self) -> Ordering {
        let short = |c: &Self| !c.shortfalls.is_empty();
        let by_q = other.figures.q.total_cmp(&self.figures.q);
        short(self).cmp(&short(other)).then(by_q)
    }
}

/// Spirals with the wanted inductance: for each of a dozen widths the quarter turns and outer
/// diameter of the highest Q; those that fall short of nothing first, each group by falling Q.
///
/// # Errors
/// A number out of range, or the nearest inductances that the limits allow.
pub fn draw(wanted: &Wanted) -> Result<Vec<Choice>, PartError> {
    /// Widths that are tried.
    const TRIED: i32 = 12;
    within("inductance", "H", wanted.inductance_h, INDUCTANCES)?;
    within("frequency", "Hz", wanted.frequency_hz, FREQUENCIES)?;
    wanted.metal.check()?;
    let [least, most] = wanted.widths_m;
    within("least trace width", "m", least, WIDTHS)?;
    within("greatest trace width", "m", most, [least, WIDTHS[1]])?;
    within("trace spacing", "m", wanted.spacing_m, WIDTHS)?;
    within("outer diameter", "m", wanted.outer_m, OUTERS)?;
    within("least hole", "", wanted.least_hole, [0.0, 0.95])?;
    if let Some(q) = wanted.least_q {
        within("least Q", "", q, [0.0, 1e6])?;
    }
    let mut nearest = Nearest::default();
    let mut choices: Vec<Choice> = Vec::new();
    let tried = if most > least { TRIED } else { 1 };
    for step in 0..tried {
        let share = f64::from(step) / f64::from(TRIED - 1);
        let width = (least * libm::pow(most / least, share)).min(most);
        choices.extend(sized(wanted, width, &mut nearest));
    }
    if choices.is_empty() {
        return Err(nearest.error(wanted.inductance_h));
    }
    choices.sort_by(Choice::order);
    Ok(choices)
}

/// The best spiral with a trace of `width`.
fn sized(wanted: &Wanted, width: f64, nearest: &mut Nearest) -> Option<Choice> {
    /// Turns that are drawn, in quarters.
    const QUARTERS: std::ops::RangeInclusive<u32> = 4..=200;
    let target = wanted.inductance_h;
    let mut best: Option<Choice> = None;
    for quarters in QUARTERS {
        let spiral = |outer_m| Spiral {
            shape: wanted.shape,
            turns: 0.25 * f64::from(quarters),
            outer_m,
            width_m: width,
            spacing_m: wanted.spacing_m,
            metal: wanted.metal,
        };
        let value = |outer| spiral(outer).inductances()[0];
        // The traces leave the hole asked for; a hair more, so that there is one at all.
        let smallest = spiral(0.0).sides() / (1.0 - wanted.least_hole) * (1.0 + 1e-9);
        if smallest > wanted.outer_m {
            break;
        }
        let (low, high) = (value(smallest), value(wanted.outer_m));
        if high < target {
            nearest.meet(high, target);
            continue;
        }
        // More turns only raise the least inductance.
        if low > target {
            nearest.meet(low, target);
            break;
        }
        let surplus = |outer: f64| value(outer) / target - 1.0;
        let Some(outer) = root::between(&surplus, smallest, wanted.outer_m) else {
            continue;
        };
        let figures = spiral(outer).at(wanted.frequency_hz);
        let found = figures.q;
        let short = wanted.least_q.filter(|least| found < *least);
        let choice = Choice {
            spiral: spiral(outer),
            figures,
            shortfalls: short
                .map(|least| Shortfall::Q { found, least })
                .into_iter()
                .collect(),
        };
        if best.as_ref().is_none_or(|b| choice.order(b).is_lt()) {
            best = Some(choice);
        }
    }
    best
}
