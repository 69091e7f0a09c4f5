//! Studies: the stage while one thing moves, as rows.
//!
//! The loaded-Q study sizes the stage anew at every point; the others keep the parts and the
//! warm on-resistance of the design's own stage and move carrier, load, supply or duty. A row
//! depends on nothing but the design and its place, so rows can be made in any order and in
//! as many pieces as suits the page.

use crate::answer::Verdict;
use crate::design::Design;
use crate::sizing::{self, SizingError};
use crate::stage::{Reading, Stage};

/// What moves.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Moves {
    /// Loaded Q; every stage is sized anew.
    LoadedQ,
    /// Carrier frequency, hertz, of the stage as built.
    Carrier,
    /// Load resistance, ohms, of the stage as built.
    Load,
    /// Supply, volts, of the stage as built.
    Supply,
    /// On-fraction of the stage as built.
    Duty,
}

/// A study, ready to be run.
#[derive(Debug, Clone, PartialEq)]
pub struct Study {
    design: Design,
    moves: Moves,
    from: f64,
    to: f64,
    points: usize,
    /// The design's own stage, where the parts stay.
    built: Option<Stage>,
}

/// The most points of one study.
pub const MOST_POINTS: usize = 2001;

/// One point.
#[derive(Debug, Clone, PartialEq)]
pub struct Row {
    /// Where, in the unit of what moves.
    pub at: f64,
    /// The stage there, or why there is none.
    pub outcome: Result<Point, String>,
}

/// A stage within a study.
#[derive(Debug, Clone, PartialEq)]
pub struct Point {
    /// Carrier power in the load, watts.
    pub output_power_w: f64,
    /// Carrier power over supply power.
    pub drain_efficiency: f64,
    /// Highest drain voltage, volts.
    pub drain_peak_v: f64,
    /// Drain voltage just before turn-on, volts.
    pub turn_on_v: f64,
    /// Highest switch current, amperes.
    pub switch_peak_a: f64,
    /// Harmonics 2 to 5 of the load current, dBc.
    pub harmonics_dbc: [f64; 4],
    /// Lowest and highest carrier power at the band's edges and here, watts, with the parts of
    /// this point; none without a band.
    pub band_power_w: Option<[f64; 2]>,
    /// Lowest efficiency at the band's edges and here; none without a band.
    pub band_efficiency: Option<f64>,
    /// The limits that are not met.
    pub failing: Vec<String>,
}

/// The stretch of a study in which every limit is met.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Window {
    /// Where it starts.
    pub from: f64,
    /// Where it ends.
    pub to: f64,
    /// Row of the highest efficiency within it.
    pub best: usize,
}

impl Study {
    /// A study of `points` points from `from` to `to`, both included.
    ///
    /// # Errors
    /// A range without points, or what sizing says of the design's own stage.
    pub fn new(
        design: &Design,
        moves: Moves,
        from: f64,
        to: f64,
        points: usize,
    ) -> Result<Self, SizingError> {
        let wrong = |field, reason| SizingError::Field { field, reason };
        if !(from.is_finite() && to.is_finite() && from > 0.0 && to > from) {
            return Err(wrong(
                "study.range",
                format!("a study needs a range of positive numbers that rises, not {from} to {to}"),
            ));
        }
        if !(2..=MOST_POINTS).contains(&points) {
            return Err(wrong(
                "study.points",
                format!("a study has 2 to {MOST_POINTS} points, not {points}"),
            ));
        }
        let built = if moves == Moves::LoadedQ {
            if design.fitted.series_coil.is_some() || design.fitted.series_capacitor.is_some() {
                return Err(wrong(
                    "fitted.series_coil",
                    "with the series coil or capacitor pinned the loaded Q cannot move: free them for this study".to_owned(),
                ));
            }
            None
        } else {
            Some(sizing::sized(design)?.0)
        };
        Ok(Self {
            design: design.clone(),
            moves,
            from,
            to,
            points,
            built,
        })
    }

    /// Number of rows.
    pub fn len(&self) -> usize {
        self.points
    }

    /// Whether there is none; never true.
    pub fn is_empty(&self) -> bool {
        self.points == 0
    }

    /// Where row `index` lies: evenly spaced, loaded Q and load by equal ratios.
    pub fn at(&self, index: usize) -> f64 {
        let share = index as f64 / (self.points - 1) as f64;
        if index + 1 == self.points {
            return self.to;
        }
        match self.moves {
            Moves::LoadedQ | Moves::Load => self.from * libm::pow(self.to / self.from, share),
            _ => self.from + (self.to - self.from) * share,
        }
    }

    /// Row `index`.
    pub fn row(&self, index: usize) -> Row {
        let at = self.at(index);
        Row {
            at,
            outcome: self.point(at),
        }
    }

    fn point(&self, at: f64) -> Result<Point, String> {
        let mut design = self.design.clone();
        let (stage, reading) = match &self.built {
            None => {
                design.stage.loaded_q = at;
                let (stage, reading) = sizing::sized_stage(&design).map_err(|e| e.to_string())?;
                (stage, reading)
            }
            Some(built) => {
                let stage = moved(built, self.moves, at)?;
                let reading = stage.solve().map_err(|e| e.to_string())?;
                (stage, reading)
            }
        };
        let mut point = Point::of(&reading, &sizing::judge(&design, &stage, &reading));
        if self.moves == Moves::LoadedQ
            && let Some(edges) = self.design.brief.band_hz
        {
            let (mut power, mut efficiency) = ([point.output_power_w; 2], point.drain_efficiency);
            for edge in edges {
                let there = moved(&stage, Moves::Carrier, edge)?
                    .probe()
                    .map_err(|e| e.to_string())?;
                power = [
                    power[0].min(there.output_power_w),
                    power[1].max(there.output_power_w),
                ];
                efficiency = efficiency.min(there.output_power_w / there.supply_power_w);
            }
            point.band_power_w = Some(power);
            point.band_efficiency = Some(efficiency);
        }
        Ok(point)
    }
}

impl Point {
    fn of(reading: &Reading, verdicts: &[Verdict]) -> Self {
        let f = &reading.figures;
        let mut harmonics_dbc = [f64::NEG_INFINITY; 4];
        harmonics_dbc
            .iter_mut()
            .zip(&reading.harmonics_dbc)
            .for_each(|(to, from)| *to = *from);
        Self {
            output_power_w: f.output_power_w,
            drain_efficiency: f.drain_efficiency,
            drain_peak_v: f.drain_peak_v,
            turn_on_v: f.turn_on_v,
            switch_peak_a: f.switch_peak_a,
            harmonics_dbc,
            band_power_w: None,
            band_efficiency: None,
            failing: verdicts
                .iter()
                .filter(|v| !v.met)
                .map(|v| v.limit.clone())
                .collect(),
        }
    }
}

/// The stage with one thing moved.
fn moved(built: &Stage, moves: Moves, to: f64) -> Result<Stage, String> {
    let mut stage = built.clone();
    match moves {
        Moves::LoadedQ => {}
        Moves::Carrier => {
            // The load's reactance is that of one coil or capacitor.
            let ratio = to / stage.carrier_hz;
            stage.load.x_ohm *= if stage.load.x_ohm > 0.0 {
                ratio
            } else {
                1.0 / ratio
            };
            stage.carrier_hz = to;
        }
        Moves::Load => stage.load.r_ohm = to,
        Moves::Supply => stage.supply_v = to,
        Moves::Duty => stage.duty = to,
    }
    let open_s = (1.0 - stage.duty) / stage.carrier_hz;
    if stage.duty > 0.0 && stage.duty < 1.0 && stage.fall_s < open_s {
        Ok(stage)
    } else {
        Err(format!(
            "a duty of {} leaves no room for the switch to open and close",
            stage.duty
        ))
    }
}

/// The longest stretch of neighbouring rows in which every limit is met.
pub fn window(rows: &[Row]) -> Option<Window> {
    let good = |row: &Row| row.outcome.as_ref().is_ok_and(|p| p.failing.is_empty());
    let mut longest = 0..0;
    let mut start = 0;
    for (k, row) in rows.iter().enumerate() {
        if !good(row) {
            start = k + 1;
        } else if k + 1 - start > longest.len() {
            longest = start..k + 1;
        }
    }
    let efficiency = |k: usize| rows[k].outcome.as_ref().map_or(0.0, |p| p.drain_efficiency);
    let best = longest
        .clone()
        .max_by(|&a, &b| efficiency(a).total_cmp(&efficiency(b)))?;
    Some(Window {
        from: rows[longest.start].at,
        to: rows[longest.end - 1].at,
        best,
    })
}

/// Where no row meets every limit: what stands in the way, one sentence.
pub fn collision(rows: &[Row]) -> String {
    let solved: Vec<(f64, &Point)> = rows
        .iter()
        .filter_map(|row| row.outcome.as_ref().ok().map(|p| (row.at, p)))
        .collect();
    if solved.is_empty() {
        return match rows.first().map(|row| &row.outcome) {
            Some(Err(reason)) => format!("No stage exists in this range: {reason}."),
            _ => "No stage exists in this range.".to_owned(),
        };
    }
    let mut limits: Vec<&str> = Vec::new();
    for name in solved.iter().flat_map(|(_, p)| &p.failing) {
        if !limits.contains(&name.as_str()) {
            limits.push(name);
        }
    }
    let fails = |p: &Point, limit: &str| p.failing.iter().any(|f| f == limit);
    let span = |limit: &str| {
        let met = || {
            solved
                .iter()
                .filter(|(_, p)| !fails(p, limit))
                .map(|(at, _)| *at)
        };
        let least = met().fold(f64::INFINITY, f64::min);
        let most = met().fold(f64::NEG_INFINITY, f64::max);
        (least <= most).then(|| format!("{limit} is met from {least:.4} to {most:.4}"))
    };
    if let Some(never) = limits.iter().find(|limit| span(limit).is_none()) {
        return format!("The limit on {never} is met nowhere in this range.");
    }
    for (k, one) in limits.iter().enumerate() {
        for other in &limits[k + 1..] {
            if solved.iter().all(|(_, p)| fails(p, one) || fails(p, other)) {
                let both = [span(one), span(other)]
                    .into_iter()
                    .flatten()
                    .collect::<Vec<_>>()
                    .join(", ");
                return format!("Two limits collide: {both}.");
            }
        }
    }
    let each: Vec<String> = limits.iter().filter_map(|limit| span(limit)).collect();
    format!("No point meets all of them: {}.", each.join(", "))
}
