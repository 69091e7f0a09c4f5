//! Verdicts, figures, spectrum, and where each watt goes.

use crate::state::App;
use evenfall_engine::quantity;
use leptos::prelude::*;

pub(crate) fn per_cent(share: f64) -> String {
    format!("{:.2} %", 100.0 * share)
}

/// Whether this stage may be built: each limit with value, bound and margin.
#[component]
pub(crate) fn Ledger(app: App) -> impl IntoView {
    let summary = move || {
        if let Some(reason) = app.refusal() {
            let below = if app.last.get().is_some() {
                " Shown below is the last stage that exists."
            } else {
                ""
            };
            return format!("No such stage: {reason}.{below}");
        }
        let failing: Vec<String> = app
            .last
            .get()
            .map(|s| {
                s.verdicts
                    .iter()
                    .filter(|v| !v.met)
                    .map(|v| v.limit.clone())
                    .collect()
            })
            .unwrap_or_default();
        if failing.is_empty() {
            "Every limit is met: this stage may be built.".to_owned()
        } else {
            format!("Not yet: {}.", failing.join(", "))
        }
    };
    let good = move || {
        app.refusal().is_none()
            && app
                .last
                .get()
                .is_some_and(|s| s.verdicts.iter().all(|v| v.met))
    };
    let rows = move || {
        let verdicts = app
            .last
            .get()
            .map(|s| s.verdicts.clone())
            .unwrap_or_default();
        verdicts
            .into_iter()
            .map(|v| {
                let margin = match v.limit.as_str() {
                    "junction temperature" => format!("{:+.1} K", v.bound - v.value),
                    "efficiency" => format!("{:+.1} pt", 100.0 * (v.value - v.bound)),
                    "harmonics" => format!("{:+.1} dB", v.bound - v.value),
                    "output power" => format!("{:+.1} %", 100.0 * tidy(v.value / v.bound - 1.0, 1.0)),
                    _ => format!("{:+.1} %", 100.0 * (1.0 - v.value / v.bound)),
                };
                // Rounding of the solver is shown as zero.
                let show = |x: f64| if v.unit.is_empty() { per_cent(x) } else { quantity::format(x, v.unit) };
                let test = format!("verdict-{}", v.limit.replace(' ', "_"));
                view! {
                    <tr class:unmet=!v.met data-test=test>
                        <th scope="row"><span aria-hidden="true">{if v.met { "✓ " } else { "✗ " }}</span>{v.limit.clone()}</th>
                        <td class="number">{show(tidy(v.value, v.bound.abs()))}</td>
                        <td class="number">{show(v.bound)}</td>
                        <td class="number">{margin}</td>
                        <td class="met-word">{if v.met { "met" } else { "not met" }}</td>
                    </tr>
                    {v.help.clone().map(|help| view! { <tr class="help"><td colspan="5">{help}</td></tr> })}
                }
            })
            .collect_view()
    };
    view! {
        <section class="card">
            <h2>"Verdict"</h2>
            <p class="summary" class:good=good class:bad=move || !good() aria-live="polite" data-test="summary">{summary}</p>
            <div class="scroll"><table class="ledger">
                <thead><tr><th scope="col">"Limit"</th><th scope="col" class="number">"Value"</th><th scope="col" class="number">"Bound"</th><th scope="col" class="number">"Margin"</th><th scope="col" class="met-word">"Met"</th></tr></thead>
                <tbody>{rows}</tbody>
            </table></div>
            <ul class="plain">
                {move || app.last.get().map(|s| s.notes.clone()).unwrap_or_default().into_iter().map(|n| view! { <li>{n}</li> }).collect_view()}
            </ul>
        </section>
    }
}

/// The figures of the solved stage.
#[component]
pub(crate) fn Figures(app: App) -> impl IntoView {
    let rows = move || {
        let Some(s) = app.last.get() else {
            return Vec::new();
        };
        let f = s.figures;
        let mut list = vec![
            (
                "output_power_w",
                "Output power at the carrier",
                quantity::format(f.output_power_w, "W"),
                "RF burns; transmitting needs permission.",
            ),
            (
                "total_output_power_w",
                "Output power with harmonics",
                quantity::format(f.total_output_power_w, "W"),
                "",
            ),
            (
                "supply_power_w",
                "Supply power",
                quantity::format(f.supply_power_w, "W"),
                "",
            ),
            (
                "supply_current_a",
                "Supply current",
                quantity::format(f.supply_current_a, "A"),
                "",
            ),
            (
                "drain_efficiency",
                "Drain efficiency",
                per_cent(f.drain_efficiency),
                "",
            ),
            (
                "drain_peak_v",
                "Drain voltage, peak",
                quantity::format(f.drain_peak_v, "V"),
                "Several times the supply: do not touch, and mind stored charge.",
            ),
            (
                "drain_least_v",
                "Drain voltage, least",
                quantity::format(tidy(f.drain_least_v, f.drain_peak_v), "V"),
                "",
            ),
            (
                "switch_peak_a",
                "Switch current, peak",
                quantity::format(f.switch_peak_a, "A"),
                "",
            ),
            (
                "switch_rms_a",
                "Switch current, RMS",
                quantity::format(f.switch_rms_a, "A"),
                "",
            ),
            (
                "turn_on_v",
                "Drain voltage at turn-on",
                quantity::format(tidy(f.turn_on_v, f.drain_peak_v), "V"),
                "",
            ),
            (
                "turn_on_slope_v_per_s",
                "Slope of the drain voltage at turn-on",
                quantity::format(
                    tidy(
                        f.turn_on_slope_v_per_s,
                        f.drain_peak_v * app.shown.with(|d| d.brief.carrier_hz),
                    ),
                    "V/s",
                ),
                "",
            ),
            (
                "diode_fraction",
                "Body diode conducts",
                per_cent(f.diode_fraction),
                "",
            ),
            ("loaded_q", "Loaded Q", quantity::format(f.loaded_q, ""), ""),
            (
                "balance",
                "Power not accounted for",
                format!("{:.0e}", s.balance.abs()),
                "The solve's own check, relative; above 1e-9 it is refused.",
            ),
        ];
        let optional = [
            (
                "junction_c",
                "Junction temperature",
                f.junction_c.map(|t| quantity::format(t, "°C")),
                "A hot package burns the finger too.",
            ),
            (
                "gate_drive_w",
                "Gate drive power",
                f.gate_drive_w.map(|w| quantity::format(w, "W")),
                "",
            ),
            (
                "power_added_efficiency",
                "Power-added efficiency",
                f.power_added_efficiency.map(per_cent),
                "",
            ),
        ];
        list.extend(
            optional
                .into_iter()
                .filter_map(|(key, label, value, caution)| Some((key, label, value?, caution))),
        );
        list
    };
    view! {
        <section class="card">
            <h2>"Figures"</h2>
            <p class="origin">"From the exact periodic solution of the stage drawn above."</p>
            <table class="figures"><tbody>
                {move || rows().into_iter().map(|(key, label, value, caution)| view! {
                    <tr>
                        <th scope="row">{label}</th>
                        <td class="number" data-test=format!("figure-{key}")>{value}</td>
                        <td class="caution">{caution}</td>
                    </tr>
                }).collect_view()}
            </tbody></table>
        </section>
    }
}

/// What is below a millionth of the scale is shown as zero: it is the solver's rounding.
pub(crate) fn tidy(value: f64, scale: f64) -> f64 {
    if value.abs() < 1e-6 * scale {
        0.0
    } else {
        value
    }
}

/// Harmonics of the load current, in dBc.
#[component]
pub(crate) fn Spectrum(app: App) -> impl IntoView {
    const FLOOR: f64 = -80.0;
    let bars = move || {
        let harmonics = app
            .last
            .get()
            .map(|s| s.harmonics_dbc.clone())
            .unwrap_or_default();
        harmonics
            .into_iter()
            .take(9)
            .enumerate()
            .map(|(k, dbc)| {
                let x = 44 + 38 * (k + 1);
                let height = 120.0 * (1.0 - dbc.max(FLOOR) / FLOOR);
                view! {
                    <rect class="bar" x=x y=150.0 - height width="22" height=height.max(0.5)/>
                    <text class="tick" x=x + 11 y="166" text-anchor="middle">{k + 2}</text>
                    <text class="tick" x=x + 11 y=144.0 - height text-anchor="middle">{format!("{dbc:.1}")}</text>
                }
            })
            .collect_view()
    };
    view! {
        <section class="card">
            <h2>"Spectrum of the load current"</h2>
            <svg class="plot" viewBox="0 0 440 180" role="img" aria-label="Harmonics of the load current relative to the carrier, in dBc, orders 1 to 10">
                <path class="axis" d="M40 150H436"/>
                <rect class="bar carrier" x="44" y="30" width="22" height="120"/>
                <text class="tick" x="55" y="166" text-anchor="middle">"1"</text>
                <text class="tick" x="55" y="24" text-anchor="middle">"0"</text>
                {bars}
            </svg>
            <p class="origin">"dBc by order of harmonic; the carrier is 0 dBc, the foot of the bars -80 dBc."</p>
            <details>
                <summary>"Harmonics 2 to 20 as figures"</summary>
                <table><thead><tr><th scope="col">"Order"</th><th scope="col" class="number">"Load current"</th><th scope="col" class="number">"Drain voltage"</th></tr></thead>
                <tbody>{move || app.last.get().map(|s| {
                    s.harmonics_dbc.iter().zip(&s.drain_harmonics_v[2..]).enumerate().map(|(k, (dbc, volt))| view! {
                        <tr><th scope="row">{k + 2}</th><td class="number">{format!("{dbc:.2} dBc")}</td><td class="number">{quantity::format(*volt, "V")}</td></tr>
                    }).collect_view()
                })}</tbody></table>
            </details>
        </section>
    }
}

/// Where each watt of the supply goes.
#[component]
pub(crate) fn Watts(app: App) -> impl IntoView {
    let parts = move || {
        let Some(s) = app.last.get() else {
            return Vec::new();
        };
        let l = s.losses;
        let f = s.figures;
        let mut list = vec![
            ("load, carrier", f.output_power_w, "figure-share-carrier"),
            (
                "load, harmonics",
                f.total_output_power_w - f.output_power_w,
                "figure-share-harmonics",
            ),
            ("switch, conduction", l.switch_w, "figure-switch_w"),
            ("turn-on discharge", l.turn_on_w, "figure-turn_on_w"),
            ("body diode", l.diode_w, "figure-diode_w"),
            ("feed coil", l.feed_coil_w, "figure-feed_coil_w"),
            (
                "shunt capacitor",
                l.shunt_capacitor_w,
                "figure-shunt_capacitor_w",
            ),
            ("series coil", l.series_coil_w, "figure-series_coil_w"),
            (
                "series capacitor",
                l.series_capacitor_w,
                "figure-series_capacitor_w",
            ),
        ];
        for part in &mut list {
            part.1 = tidy(part.1, f.supply_power_w);
        }
        list.into_iter()
            .map(|(name, w, test)| (name, w, w / f.supply_power_w, test))
            .collect()
    };
    let largest_loss = move || parts().iter().skip(1).map(|p| p.2).fold(1e-9, f64::max);
    view! {
        <section class="card">
            <h2>"Where each watt goes"</h2>
            <table class="watts"><tbody>
                {move || parts().into_iter().enumerate().map(|(k, (name, watts, share, test))| {
                    let width = if k == 0 { 100.0 * share } else { 100.0 * share / largest_loss() };
                    view! {
                        <tr>
                            <th scope="row">{name}</th>
                            <td class="number" data-test=test>{quantity::format(watts, "W")}</td>
                            <td class="number">{per_cent(share)}</td>
                            <td class="barcell"><svg viewBox="0 0 100 8" preserveAspectRatio="none" aria-hidden="true"><rect class=if k == 0 { "bar carrier" } else { "bar" } width=width.clamp(0.0, 100.0) height="8"/></svg></td>
                        </tr>
                    }
                }).collect_view()}
            </tbody></table>
            <p class="origin">"The first bar is a share of the supply power; the others are drawn against the largest loss."</p>
        </section>
    }
}
