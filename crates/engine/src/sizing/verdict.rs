//! The limits, judged, each with what is closest to helping.

use crate::answer::Verdict;
use crate::design::Design;
use crate::stage::{Reading, Stage};

/// Turn-on voltage that still counts as soft, as a fraction of the supply (common
/// practice: the energy lost at a tenth of the supply is some 0.03 % of the power).
const SOFT_FRACTION: f64 = 0.1;
/// Power within this of the wanted counts as met (common practice).
const POWER_FRACTION: f64 = 0.05;

/// Every verdict that the design has a bound for.
pub fn judge(design: &Design, stage: &Stage, reading: &Reading) -> Vec<Verdict> {
    let (limits, figures) = (&design.brief.limits, &reading.figures);
    let mut verdicts = Vec::new();
    let mut add = |limit: &str, value: f64, bound: f64, met: bool, unit, help: String| {
        verdicts.push(Verdict {
            limit: limit.to_owned(),
            value,
            bound,
            met,
            unit,
            help: (!met).then_some(help),
        });
    };
    let soft_bound = SOFT_FRACTION * stage.supply_v;
    let turn_on = figures.turn_on_v.abs();
    add(
        "soft switching",
        turn_on,
        soft_bound,
        turn_on <= soft_bound,
        "V",
        if figures.turn_on_v > 0.0 {
            format!(
                "The switch closes on {:.4} V and burns {:.4} W: a lower load resistance, less shunt capacitance or more series reactance brings it down; free the shunt or series capacitor to have it sized.",
                figures.turn_on_v, reading.losses.turn_on_w
            )
        } else {
            format!(
                "The drain is pulled to {:.4} V before turn-on: a higher load resistance, more shunt capacitance or less series reactance lifts it; free the shunt or series capacitor to have it sized.",
                figures.turn_on_v
            )
        },
    );
    let upper_rating = design
        .device
        .upper
        .and_then(|u| u.rating_v)
        .or(design.device.rating_v);
    // Each switch of a stack by itself, or the one there is.
    let mut rated: Vec<(String, f64, Option<f64>)> = reading
        .detail
        .stack
        .iter()
        .enumerate()
        .map(|(k, stress)| {
            let rating = if k == 0 {
                design.device.rating_v
            } else {
                upper_rating
            };
            let name = format!("drain voltage of switch {}", k + 1);
            (name, stress.drain_source_v, rating)
        })
        .collect();
    if rated.is_empty() {
        rated.push((
            "drain voltage".to_owned(),
            figures.drain_peak_v,
            design.device.rating_v,
        ));
    }
    for (name, peak, rating) in rated {
        let Some(rating) = rating else {
            continue;
        };
        let bound = rating * limits.drain_fraction_of_rating;
        add(
            &name,
            peak,
            bound,
            peak <= bound,
            "V",
            format!(
                "A supply of {:.4} V would bring the peak to the bound with the same parts (at {:.2} of the power).",
                stage.supply_v * bound / peak,
                (bound / peak) * (bound / peak)
            ),
        );
    }
    if let Some(rating) = design.device.rating_a {
        let peak = figures.switch_peak_a;
        add(
            "switch current",
            peak,
            rating,
            peak <= rating,
            "A",
            format!(
                "The peak is {:.2} times the rating; the same power from a supply {:.2} times higher would bring it to the bound, at a higher drain voltage.",
                peak / rating,
                peak / rating
            ),
        );
    }
    if let Some(bound) = limits.efficiency {
        let (name, worst) =
            reading
                .losses
                .named()
                .into_iter()
                .fold(
                    ("none", 0.0),
                    |best, (name, w)| if w > best.1 { (name, w) } else { best },
                );
        add(
            "efficiency",
            figures.drain_efficiency,
            bound,
            figures.drain_efficiency >= bound,
            "",
            format!(
                "The largest loss is {} with {:.4} W, {:.1} % of the supply power.",
                plain_name(name),
                worst,
                100.0 * worst / figures.supply_power_w
            ),
        );
    }
    if let (Some(bound), Some(junction)) = (limits.junction_c, figures.junction_c) {
        let heat = super::thermal::device_w(&reading.losses);
        let ambient = design.brief.ambient_c;
        add(
            "junction temperature",
            junction,
            bound,
            junction <= bound,
            "°C",
            format!(
                "The device turns {heat:.4} W into heat; {:.3} K/W from junction to ambient would keep it at the bound.",
                (bound - ambient).max(0.0) / heat
            ),
        );
    }
    if let Some(bound) = limits.harmonic_dbc {
        let (order, worst) = reading.harmonics_dbc.iter().enumerate().fold(
            (0, f64::NEG_INFINITY),
            |best, (k, &dbc)| {
                if dbc > best.1 { (k + 2, dbc) } else { best }
            },
        );
        add(
            "harmonics",
            worst,
            bound,
            worst <= bound,
            "dBc",
            format!(
                "Harmonic {order} of the load current is {:.1} dB too strong: a higher loaded Q lowers it by about 6 dB for each doubling; a filter after the stage does more.",
                worst - bound
            ),
        );
    }
    if let Some(wanted) = design.brief.power_w {
        let power = figures.output_power_w;
        add(
            "output power",
            power,
            wanted,
            (power / wanted - 1.0).abs() <= POWER_FRACTION,
            "W",
            format!(
                "With these parts a supply of {:.4} V would give the wanted power, as long as the diode stays off.",
                stage.supply_v * (wanted / power).sqrt()
            ),
        );
    }
    verdicts
}

/// What an engineer calls a loss.
fn plain_name(name: &str) -> String {
    name.trim_end_matches("_w").replace('_', " ")
}
