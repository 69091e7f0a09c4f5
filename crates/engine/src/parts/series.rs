//! Preferred values (IEC 60063): the nearest one, and the best single part or pair for a value.

use super::{PartError, within};

/// A series of preferred values.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Series {
    /// Six values a decade.
    E6,
    /// Twelve values a decade.
    E12,
    /// Twenty-four values a decade.
    E24,
    /// Forty-eight values a decade.
    E48,
    /// Ninety-six values a decade.
    E96,
}

/// E24 as the standard lists it; every second is E12, every fourth E6.
const E24: [u16; 24] = [
    100, 110, 120, 130, 150, 160, 180, 200, 220, 240, 270, 300, 330, 360, 390, 430, 470, 510, 560,
    620, 680, 750, 820, 910,
];

/// The values, in any unit, that preferred values are looked up for.
const VALUES: [f64; 2] = [1e-18, 1e9];

/// What of a part is wanted, and with it how two of them add.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// Farads; they add in parallel.
    Capacitance,
    /// Henries, of coils that do not couple; they add in series.
    Inductance,
}

impl Kind {
    /// Values of which such parts are commonly stocked (common practice): 0.1 pF to 100 µF, 0.1 nH
    /// to 100 mH; farads or henries.
    pub fn stock(self) -> [f64; 2] {
        match self {
            Self::Capacitance => [1e-13, 1e-4],
            Self::Inductance => [1e-10, 1e-1],
        }
    }
}

/// How the parts of a combination are connected; farads or henries, the larger first.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Parts {
    /// One part.
    Single(f64),
    /// Two in series.
    Series(f64, f64),
    /// Two in parallel.
    Parallel(f64, f64),
}

/// One way to make a value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Combination {
    /// The parts.
    pub parts: Parts,
    /// What they make, farads or henries.
    pub value: f64,
    /// `value` over the wanted one, less 1.
    pub error: f64,
}

/// The most pairs that [`combine`] gives.
pub const MOST_PAIRS: usize = 4;

impl Series {
    /// Number of values in a decade.
    pub fn per_decade(self) -> usize {
        match self {
            Self::E6 => 6,
            Self::E12 => 12,
            Self::E24 => 24,
            Self::E48 => 48,
            Self::E96 => 96,
        }
    }

    /// Tolerance that parts of the series commonly have, as a fraction (common practice).
    pub fn tolerance(self) -> f64 {
        match self {
            Self::E6 => 0.20,
            Self::E12 => 0.10,
            Self::E24 => 0.05,
            Self::E48 => 0.02,
            Self::E96 => 0.01,
        }
    }

    /// The `index`-th value from 1 upwards, or downwards where negative: exactly the number that
    /// its decimal text reads as.
    fn at(self, index: i32) -> f64 {
        let n = self.per_decade() as i32;
        let (decade, step) = (index.div_euclid(n), index.rem_euclid(n));
        let hundreds = match self {
            Self::E6 | Self::E12 | Self::E24 => f64::from(E24[(step * 24 / n) as usize]),
            // IEC 60063 rounds the geometric row for these without exception.
            Self::E48 | Self::E96 => {
                libm::round(100.0 * libm::pow(10.0, f64::from(step) / f64::from(n)))
            }
        };
        // Powers of ten to the 22nd are exact, so that one rounding is all there is.
        let power = decade - 2;
        let mut ten = 1.0;
        for _ in 0..power.unsigned_abs() {
            ten *= 10.0;
        }
        if power < 0 {
            hundreds / ten
        } else {
            hundreds * ten
        }
    }

    /// Index of the greatest value that is not above `value`, to a part in 1e12.
    fn index(self, value: f64) -> i32 {
        let value = value * (1.0 + 1e-12);
        let n = self.per_decade() as f64;
        let mut index = libm::floor(n * libm::log10(value)) as i32;
        while self.at(index) > value {
            index -= 1;
        }
        while self.at(index + 1) <= value {
            index += 1;
        }
        index
    }

    /// The values of the series next to `value` (any unit): the greatest not above and the least
    /// not below it; twice the same where `value` is in the series.
    ///
    /// # Errors
    /// A value outside 1e-18 to 1e9.
    pub fn neighbours(self, value: f64) -> Result<[f64; 2], PartError> {
        within("the wanted value", "", value, VALUES)?;
        let index = self.index(value);
        let below = self.at(index);
        if below >= value * (1.0 - 1e-12) {
            return Ok([below, below]);
        }
        Ok([below, self.at(index + 1)])
    }

    /// The value of the series nearest to `value` (any unit).
    ///
    /// # Errors
    /// A value outside 1e-18 to 1e9.
    pub fn nearest(self, value: f64) -> Result<f64, PartError> {
        let [below, above] = self.neighbours(value)?;
        Ok(if value - below <= above - value {
            below
        } else {
            above
        })
    }

    /// The values of the series from the first to the second of `range` (any unit), rising.
    ///
    /// # Errors
    /// A range outside 1e-18 to 1e9, or one without a value of the series.
    pub fn values(self, [least, most]: [f64; 2]) -> Result<Vec<f64>, PartError> {
        let above = self.neighbours(least)?[1];
        let below = self.neighbours(most)?[0];
        within("the greatest value in stock", "", below, [above, VALUES[1]])?;
        let indices = self.index(above)..=self.index(below);
        Ok(indices.map(|i| self.at(i)).collect())
    }
}

/// The best ways to make `wanted` (farads or henries) from parts of `series` within `stock` (the
/// least and greatest part there is, see [`Kind::stock`]): first the nearest single part, then
/// up to [`MOST_PAIRS`] pairs that come nearer, the nearest first. No pair of the stock comes
/// nearer than the first of these.
///
/// # Errors
/// A value or stock outside 1e-18 to 1e9, or a stock without a value of the series.
pub fn combine(
    series: Series,
    wanted: f64,
    kind: Kind,
    stock: [f64; 2],
) -> Result<Vec<Combination>, PartError> {
    within("the wanted value", "", wanted, VALUES)?;
    let values = series.values(stock)?;
    let made = |parts, value: f64| Combination {
        parts,
        value,
        error: (value - wanted) / wanted,
    };
    let singles = values.iter().map(|v| made(Parts::Single(*v), *v));
    let order = |a: &Combination, b: &Combination| a.error.abs().total_cmp(&b.error.abs());
    let mut best: Vec<Combination> = singles.min_by(order).into_iter().collect();
    let single = best.first().map_or(0.0, |s| s.error.abs());
    let mut pairs = Vec::new();
    let mut offer = |parts, value| {
        let pair = made(parts, value);
        // More than rounding nearer than one part.
        if pair.error.abs() < single - 1e-12 {
            pairs.push(pair);
        }
    };
    // With one part of a pair given, the value rises with the other: the best partners are those
    // next to the one that would be exact. A pair whose parts are in the other order comes up
    // when its other part is given.
    let partners = |exact: f64| {
        let place = values.partition_point(|v| *v < exact);
        let from = place.saturating_sub(MOST_PAIRS);
        &values[from..(place + MOST_PAIRS).min(values.len())]
    };
    for &a in &values {
        for &b in partners(wanted - a).iter().filter(|b| **b <= a) {
            match kind {
                Kind::Capacitance => offer(Parts::Parallel(a, b), a + b),
                Kind::Inductance => offer(Parts::Series(a, b), a + b),
            }
        }
        let exact = if a > wanted {
            wanted * a / (a - wanted)
        } else {
            f64::INFINITY
        };
        for &b in partners(exact).iter().filter(|b| **b >= a) {
            let value = a / (1.0 + a / b);
            match kind {
                Kind::Capacitance => offer(Parts::Series(b, a), value),
                Kind::Inductance => offer(Parts::Parallel(b, a), value),
            }
        }
    }
    pairs.sort_by(order);
    pairs.truncate(MOST_PAIRS);
    best.append(&mut pairs);
    Ok(best)
}
