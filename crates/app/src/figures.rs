//! Verdicts, figures, spectrum, and where each watt goes.

use crate::pieces::{button, cell, line, list, live, number, press, row, when};
use crate::state::App;
use evenfall_engine::answer::{Solved, Verdict};
use evenfall_engine::quantity;
use leptos::prelude::*;

pub(crate) fn per_cent(share: f64) -> String {
    format!("{:.2} %", 100.0 * share)
}

/// What is below a millionth of the scale is shown as zero: it is the solver's rounding.
pub(crate) fn tidy(value: f64, scale: f64) -> f64 {
    if value.abs() < 1e-6 * scale {
        0.0
    } else {
        value
    }
}

/// Something made of the last stage; nothing before there is one.
pub(crate) fn of_last<T: Default>(app: App, make: fn(App, &Solved) -> T) -> T {
    app.last
        .get()
        .map_or_else(T::default, |solved| make(app, &solved))
}

fn failing(solved: &Solved) -> Vec<String> {
    let failing = solved.verdicts.iter().filter(|v| !v.met);
    failing.map(|v| v.limit.clone()).collect()
}

fn summary(app: App) -> String {
    if let Some(reason) = app.refusal() {
        let below = if app.last.get().is_some() {
            " Shown below is the last stage that exists."
        } else {
            ""
        };
        return format!("No such stage: {reason}.{below}");
    }
    let failing = of_last(app, |_, s| failing(s));
    if failing.is_empty() {
        "Every limit is met: this stage may be built.".to_owned()
    } else {
        format!("Not yet: {}.", failing.join(", "))
    }
}

fn verdict_rows(v: &Verdict) -> Vec<AnyView> {
    let percent = |share: f64| format!("{:+.1} %", 100.0 * share);
    let margin = match v.limit.as_str() {
        "junction temperature" => format!("{:+.1} K", v.bound - v.value),
        "efficiency" => format!("{:+.1} pt", 100.0 * (v.value - v.bound)),
        "harmonics" => format!("{:+.1} dB", v.bound - v.value),
        "output power" => percent(tidy(v.value / v.bound - 1.0, 1.0)),
        _ => percent(1.0 - v.value / v.bound),
    };
    let show = |x: f64| {
        if v.unit.is_empty() {
            per_cent(x)
        } else {
            quantity::format(x, v.unit)
        }
    };
    let (class, word) = if v.met {
        ("", "met")
    } else {
        ("unmet", "not met")
    };
    let cells = vec![
        // Rounding of the solver is shown as zero.
        number(show(tidy(v.value, v.bound.abs()))),
        number(show(v.bound)),
        number(margin),
        cell("met-word", "", word.to_owned()),
    ];
    let test = format!("verdict-{}", v.limit.replace(' ', "_"));
    let mut rows = vec![row(class, Some(test), v.limit.clone(), cells)];
    if let Some(help) = v.help.clone() {
        rows.push(view! { <tr class="help"><td colspan="5">{help}</td></tr> }.into_any());
    }
    rows
}

/// Whether this stage may be built: each limit with value, bound and margin.
pub(crate) fn ledger(app: App) -> AnyView {
    let class = live(move || {
        let good = app.refusal().is_none() && of_last(app, |_, s| failing(s)).is_empty();
        if good && app.last.get().is_some() {
            "summary good"
        } else {
            "summary bad"
        }
        .to_owned()
    });
    let rows = list(move || {
        of_last(app, |_, s| {
            s.verdicts.iter().flat_map(verdict_rows).collect()
        })
    });
    let notes = list(move || {
        of_last(app, |_, s| {
            s.notes.iter().map(|n| line("", n.clone())).collect()
        })
    });
    let offer = when(
        move || app.offer().is_some(),
        move || {
            let take = press(move || {
                if let Some(feed) = app.offer() {
                    app.design.update(|d| d.stage.feed = feed);
                }
            });
            button("use-feed", "Use this feed coil", take)
        },
    );
    view! {
        <section class="card">
            <h2>"Verdict"</h2>
            <p class=class aria-live="polite" data-test="summary">{live(move || summary(app))}</p>
            <p class="buttons">{offer}</p>
            <div class="scroll"><table class="ledger">
                <thead><tr><th scope="col">"Limit"</th><th scope="col" class="number">"Value"</th><th scope="col" class="number">"Bound"</th><th scope="col" class="number">"Margin"</th><th scope="col" class="met-word">"Met"</th></tr></thead>
                <tbody>{rows}</tbody>
            </table></div>
            <ul class="plain">{notes}</ul>
        </section>
    }
    .into_any()
}

/// Name for the tests, label, value where there is one, and what to be careful of.
type Figure = (&'static str, &'static str, Option<String>, &'static str);

fn figure_list(app: App, s: &Solved) -> Vec<Figure> {
    let f = s.figures;
    let show = |value: f64, unit: &str| Some(quantity::format(value, unit));
    let volt = |value: f64| show(tidy(value, f.drain_peak_v), "V");
    let slope = tidy(
        f.turn_on_slope_v_per_s,
        f.drain_peak_v * app.shown.with(|d| d.brief.carrier_hz),
    );
    vec![
        (
            "output_power_w",
            "Output power at the carrier",
            show(f.output_power_w, "W"),
            "RF burns; transmitting needs permission.",
        ),
        (
            "total_output_power_w",
            "Output power with harmonics",
            show(f.total_output_power_w, "W"),
            "",
        ),
        (
            "supply_power_w",
            "Supply power",
            show(f.supply_power_w, "W"),
            "",
        ),
        (
            "supply_current_a",
            "Supply current",
            show(f.supply_current_a, "A"),
            "",
        ),
        (
            "drain_efficiency",
            "Drain efficiency",
            Some(per_cent(f.drain_efficiency)),
            "",
        ),
        (
            "drain_peak_v",
            "Drain voltage, peak",
            show(f.drain_peak_v, "V"),
            "Several times the supply: do not touch, and mind stored charge.",
        ),
        (
            "drain_least_v",
            "Drain voltage, least",
            volt(f.drain_least_v),
            "",
        ),
        (
            "switch_peak_a",
            "Switch current, peak",
            show(f.switch_peak_a, "A"),
            "",
        ),
        (
            "switch_rms_a",
            "Switch current, RMS",
            show(f.switch_rms_a, "A"),
            "",
        ),
        (
            "turn_on_v",
            "Drain voltage at turn-on",
            volt(f.turn_on_v),
            "",
        ),
        (
            "turn_on_slope_v_per_s",
            "Slope of the drain voltage at turn-on",
            show(slope, "V/s"),
            "",
        ),
        (
            "diode_fraction",
            "Body diode conducts",
            Some(per_cent(f.diode_fraction)),
            "",
        ),
        ("loaded_q", "Loaded Q", show(f.loaded_q, ""), ""),
        (
            "balance",
            "Power not accounted for",
            Some(format!("{:.0e}", s.balance.abs())),
            "The solve's own check, relative; above 1e-9 (1e-6 where a capacitance depends on its voltage) it is refused.",
        ),
        (
            "junction_c",
            "Junction temperature",
            f.junction_c.and_then(|t| show(t, "°C")),
            "A hot package burns the finger too.",
        ),
        (
            "gate_drive_w",
            "Gate drive power",
            f.gate_drive_w.and_then(|w| show(w, "W")),
            "",
        ),
        (
            "power_added_efficiency",
            "Power-added efficiency",
            f.power_added_efficiency.map(per_cent),
            "",
        ),
    ]
}

/// How far the drain peak is from the one of a constant capacitance, where that is known.
fn beside_constant(_: App, s: &Solved) -> String {
    let peak = s.figures.drain_peak_v;
    let Some(constant) = s.figures.constant_capacitance_peak_v else {
        return String::new();
    };
    let rise = 100.0 * (peak / constant - 1.0);
    let way = if rise < 0.0 { "below" } else { "above" };
    let [peak, constant] = [peak, constant].map(|v| quantity::format(v, "V"));
    let rise = rise.abs();
    format!("{peak}, {rise:.1} % {way} the {constant} of a constant capacitance")
}

/// The figures of the solved stage.
pub(crate) fn figures(app: App) -> AnyView {
    let rows = list(move || {
        of_last(app, figure_list)
            .into_iter()
            .filter_map(|(key, label, value, caution)| {
                let last = if key == "drain_peak_v" {
                    let beside = of_last(app, beside_constant);
                    view! { <td class="caution">{caution}<span class="beside" data-test="beside-constant">{beside}</span></td> }.into_any()
                } else {
                    cell("caution", "", caution.to_owned())
                };
                let cells = vec![cell("number", &format!("figure-{key}"), value?), last];
                Some(row("", None, label.to_owned(), cells))
            })
            .collect()
    });
    view! {
        <section class="card">
            <h2>"Figures"</h2>
            <p class="origin">"From the exact periodic solution of the stage drawn above."</p>
            <table class="figures"><tbody>{rows}</tbody></table>
        </section>
    }
    .into_any()
}

fn tick(x: f64, y: f64, text: String) -> AnyView {
    let (x, y) = (x.to_string(), y.to_string());
    view! { <text class="tick" x=x y=y text-anchor="middle">{text}</text> }.into_any()
}

/// Decibels relative to the carrier; what cancels to rounding is none.
pub(crate) fn decibels(dbc: f64, digits: usize) -> String {
    if dbc < -150.0 {
        "none".to_owned()
    } else {
        format!("{dbc:.digits$}")
    }
}

fn harmonic_bars(_: App, s: &Solved) -> Vec<AnyView> {
    const FLOOR: f64 = -80.0;
    let mut bars = Vec::new();
    for (k, dbc) in s.harmonics_dbc.iter().take(9).enumerate() {
        let x = 44.0 + 38.0 * (k + 1) as f64;
        let height = 120.0 * (1.0 - dbc.max(FLOOR) / FLOOR);
        let (left, top) = (x.to_string(), (150.0 - height).to_string());
        let tall = height.max(0.5).to_string();
        bars.push(view! { <rect class="bar" x=left y=top width="22" height=tall/> }.into_any());
        bars.push(tick(x + 11.0, 166.0, (k + 2).to_string()));
        bars.push(tick(x + 11.0, 144.0 - height, decibels(*dbc, 1)));
    }
    bars
}

fn harmonic_rows(_: App, s: &Solved) -> Vec<AnyView> {
    let pairs = s.harmonics_dbc.iter().zip(&s.drain_harmonics_v[2..]);
    pairs
        .enumerate()
        .map(|(k, (dbc, volt))| {
            let cells = vec![
                number(decibels(*dbc, 2)),
                number(quantity::format(*volt, "V")),
            ];
            row("", None, (k + 2).to_string(), cells)
        })
        .collect()
}

/// Harmonics of the load current, in dBc.
pub(crate) fn spectrum(app: App) -> AnyView {
    view! {
        <section class="card">
            <h2>"Spectrum of the load current"</h2>
            <svg class="plot" viewBox="0 0 440 180" role="img" aria-label="Harmonics of the load current relative to the carrier, in dBc, orders 1 to 10">
                <path class="axis" d="M40 150H436"/>
                <rect class="bar carrier" x="44" y="30" width="22" height="120"/>
                <text class="tick" x="55" y="166" text-anchor="middle">"1"</text>
                <text class="tick" x="55" y="24" text-anchor="middle">"0"</text>
                {list(move || of_last(app, harmonic_bars))}
            </svg>
            <p class="origin">"dBc by order of harmonic; the carrier is 0 dBc, the foot of the bars -80 dBc."</p>
            <details>
                <summary>"Harmonics 2 to 20 as figures"</summary>
                <table><thead><tr><th scope="col">"Order"</th><th scope="col" class="number">"Load current, dBc"</th><th scope="col" class="number">"Drain voltage"</th></tr></thead>
                <tbody>{list(move || of_last(app, harmonic_rows))}</tbody></table>
            </details>
        </section>
    }
    .into_any()
}

fn watt_rows(_: App, s: &Solved) -> Vec<AnyView> {
    let l = s.losses;
    let f = s.figures;
    let parts = [
        ("load, carrier", f.output_power_w, "figure-share-carrier"),
        (
            "load, harmonics",
            f.total_output_power_w - f.output_power_w,
            "figure-share-harmonics",
        ),
        ("switch, conduction", l.switch_w, "figure-switch_w"),
        ("turn-on discharge", l.turn_on_w, "figure-turn_on_w"),
        (
            "turn-off, falling current",
            l.turn_off_w,
            "figure-turn_off_w",
        ),
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
        (
            "capacitor between the drains",
            l.cross_capacitor_w,
            "figure-cross_capacitor_w",
        ),
        ("trap", l.trap_w, "figure-trap_w"),
    ]
    .map(|(name, watts, test)| (name, tidy(watts, f.supply_power_w), test));
    let share = |watts: f64| watts / f.supply_power_w;
    let losses = parts[1..].iter().map(|p| share(p.1));
    let largest = losses.fold(1e-9, f64::max);
    // What only some stages have is listed where they have it.
    let there = |(k, p): &(usize, &(&str, f64, &str))| *k < 10 || p.1 > 0.0;
    let rows = parts.iter().enumerate().filter(there).map(|(k, (name, watts, test))| {
        let (class, whole) = if k == 0 {
            ("bar carrier", 1.0)
        } else {
            ("bar", largest)
        };
        let width = (100.0 * share(*watts) / whole).clamp(0.0, 100.0).to_string();
        let bar = view! {
            <td class="barcell"><svg viewBox="0 0 100 8" preserveAspectRatio="none" aria-hidden="true"><rect class=class width=width height="8"/></svg></td>
        };
        let cells = vec![
            cell("number", test, quantity::format(*watts, "W")),
            number(per_cent(share(*watts))),
            bar.into_any(),
        ];
        row("", None, (*name).to_owned(), cells)
    });
    rows.collect()
}

/// Where each watt of the supply goes.
pub(crate) fn watts(app: App) -> AnyView {
    view! {
        <section class="card">
            <h2>"Where each watt goes"</h2>
            <table class="watts"><tbody>{list(move || of_last(app, watt_rows))}</tbody></table>
            <p class="origin">"The first bar is a share of the supply power; the others are drawn against the largest loss."</p>
        </section>
    }
    .into_any()
}
