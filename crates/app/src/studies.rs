//! Studies: one thing moves, and the stage is drawn against it.
//!
//! Rows are made a few milliseconds at a time, so that the page answers meanwhile; the last
//! picture stays until the new one is whole.

use crate::fields::{Input, Quantity, Typing, fields, input};
use crate::figures::{per_cent, tidy};
use crate::pieces::{button, cell, choice, live, number, one_of, press, row, when};
use crate::state::App;
use evenfall_engine::design::Design;
use evenfall_engine::quantity;
use evenfall_engine::study::{Moves, Point, Row, Study, Window, collision, window};
use leptos::prelude::*;
use std::sync::Arc;
use std::time::Duration;

const POINTS: usize = 61;
/// Milliseconds of rows between two looks at the page.
const SLICE_MS: f64 = 7.0;
/// Milliseconds that the design has to rest before a study starts again.
const REST_MS: u64 = 250;

/// What can move, with its name, unit, and the range that is offered first.
const KINDS: [(Moves, &str, &str); 5] = [
    (Moves::LoadedQ, "loaded Q, sized anew at each point", ""),
    (Moves::Carrier, "carrier, parts as they are", "Hz"),
    (Moves::Load, "load, parts as they are", "Ω"),
    (Moves::Supply, "supply, parts as they are", "V"),
    (Moves::Duty, "duty, parts as they are", ""),
];

fn offered(kind: usize, app: App) -> (f64, f64) {
    let load = app
        .last
        .get_untracked()
        .map_or(50.0, |s| s.values.drain_load.r_ohm);
    let supply = app.last.get_untracked().map_or(12.0, |s| s.values.supply_v);
    let carrier = app.design.with_untracked(|d| d.brief.carrier_hz);
    match KINDS[kind].0 {
        Moves::LoadedQ => (1.5, 20.0),
        Moves::Carrier => (0.9 * carrier, 1.1 * carrier),
        Moves::Load => (load / 3.0, load * 3.0),
        Moves::Supply => (0.2 * supply, 1.2 * supply),
        Moves::Duty => (0.3, 0.7),
    }
}

/// One strip of the picture.
struct Strip {
    label: &'static str,
    unit: &'static str,
    value: fn(&Point) -> f64,
}

const STRIPS: [Strip; 5] = [
    Strip {
        label: "Output power",
        unit: "W",
        value: |p| p.output_power_w,
    },
    Strip {
        label: "Drain efficiency",
        unit: "%",
        value: |p| 100.0 * p.drain_efficiency,
    },
    Strip {
        label: "Drain peak",
        unit: "V",
        value: |p| p.drain_peak_v,
    },
    Strip {
        label: "Drain voltage at turn-on",
        unit: "V",
        value: |p| tidy(p.turn_on_v, p.drain_peak_v),
    },
    Strip {
        label: "Strongest harmonic",
        unit: "dBc",
        value: |p| {
            p.harmonics_dbc
                .iter()
                .copied()
                .fold(f64::NEG_INFINITY, f64::max)
        },
    },
];

static BAND: [Quantity; 2] = [
    Quantity::optional(
        "band_low",
        "Band from (for the loaded Q)",
        "Hz",
        (
            |d| d.brief.band_hz.map(|b| b[0]),
            |d, v| d.brief.band_hz = v.map(|v| [v, d.brief.band_hz.map_or(v, |b| b[1])]),
        ),
    )
    .hint("Power and efficiency at the band's edges are shown beside each loaded Q."),
    Quantity::optional(
        "band_high",
        "Band to",
        "Hz",
        (
            |d| d.brief.band_hz.map(|b| b[1]),
            |d, v| d.brief.band_hz = v.map(|v| [d.brief.band_hz.map_or(v, |b| b[0]), v]),
        ),
    ),
];

/// The card; its studies run while it is open.
pub(crate) fn studies(app: App) -> AnyView {
    let open = RwSignal::new(false);
    let kind = RwSignal::new(0usize);
    let range = RwSignal::new(offered(0, app));
    let rows: RwSignal<Arc<Vec<Row>>> = RwSignal::new(Arc::new(Vec::new()));
    let progress: RwSignal<Option<usize>> = RwSignal::new(None);
    let refused: RwSignal<Option<String>> = RwSignal::new(None);
    let run = StoredValue::new(0u32);
    Effect::new(move |_| {
        if !open.get() {
            return;
        }
        let (design, moves, (from, to)) = (app.design.get(), KINDS[kind.get()].0, range.get());
        let number = run.get_value() + 1;
        run.set_value(number);
        set_timeout(
            move || {
                start(
                    design,
                    moves,
                    (from, to),
                    number,
                    Run {
                        run,
                        rows,
                        progress,
                        refused,
                    },
                )
            },
            Duration::from_millis(REST_MS),
        );
    });
    let choose = move |text: String| {
        if let Ok(index) = text.parse::<usize>() {
            rows.set(Arc::new(Vec::new()));
            kind.set(index);
            range.set(offered(index, app));
        }
    };
    let unit = move || KINDS[kind.get()].2;
    let verdict = move || {
        let rows = rows.get();
        if rows.is_empty() {
            return String::new();
        }
        match window(&rows) {
            Some(w) => {
                let best = rows[w.best].at;
                format!(
                    "Every limit is met from {} to {}; the efficiency is highest at {}.",
                    quantity::format(w.from, unit()),
                    quantity::format(w.to, unit()),
                    quantity::format(best, unit())
                )
            }
            None => collision(&rows),
        }
    };
    let best = move || {
        let rows = rows.get();
        let found = window(&rows)?;
        (KINDS[kind.get()].0 == Moves::LoadedQ).then(|| rows[found.best].at)
    };
    let take = move || {
        if let Some(q) = best() {
            let q = quantity::parse(&quantity::format(q, ""), "").unwrap_or(q);
            app.design.update(|d| d.stage.loaded_q = q);
        }
    };
    let options: Vec<(String, &'static str)> = KINDS
        .iter()
        .enumerate()
        .map(|(k, (_, name, _))| (k.to_string(), *name))
        .collect();
    let ends = one_of(
        move || kind.get(),
        move |kind| {
            let unit = KINDS[kind].2;
            vec![edge(app, range, unit, false), edge(app, range, unit, true)].into_any()
        },
    );
    let take_over = when(
        move || best().is_some(),
        move || {
            let words = "Take the best point over as the design";
            button("study-take", words, press(take))
        },
    );
    let done = move || {
        let done = progress.get();
        done.map_or_else(String::new, |done| format!("{done} of {POINTS} points"))
    };
    view! {
        <section class="card">
            <details on:toggle=move |_| open.update(|o| *o = !*o)>
                <summary data-test="studies"><h2>"Studies"</h2></summary>
                <div class="grid">
                    <span class="field">{choice("study-kind", "Move", &options, move || kind.get().to_string(), Box::new(choose))}</span>
                    {ends}
                    {fields(app, &BAND)}
                </div>
                <p class="problem" role="status">{live(move || refused.get().unwrap_or_default())}</p>
                <p class="summary" data-test="study-verdict" aria-live="polite">{live(verdict)}</p>
                <p class="buttons">{take_over}</p>
                <p class="origin">{live(done)}</p>
                {live(move || picture(&rows.get(), unit()))}
                <details>
                    <summary>"As figures"</summary>
                    {live(move || table(&rows.get(), unit()))}
                </details>
                <p class="origin">"Each point is an exact solve. Parts and the warm on-resistance stay where the parts are as they are."</p>
            </details>
        </section>
    }
    .into_any()
}

/// An end of the range.
fn edge(app: App, range: RwSignal<(f64, f64)>, unit: &'static str, upper: bool) -> AnyView {
    let (id, label) = if upper {
        ("study-to", "to")
    } else {
        ("study-from", "from")
    };
    let put = move |number: Option<f64>| {
        if let Some(number) = number {
            range.update(|r| if upper { r.1 = number } else { r.0 = number });
        }
    };
    let own = Input {
        id: id.to_owned(),
        unit,
        optional: false,
        value: Memo::new(move |_| Some(if upper { range.get().1 } else { range.get().0 })),
        put: Box::new(put),
    };
    view! {
        <span class="field">
            <label for=id>{label}</label>
            {input(Typing::new(app), own)}
        </span>
    }
    .into_any()
}

/// Where a run puts what it makes.
#[derive(Clone, Copy)]
struct Run {
    run: StoredValue<u32>,
    rows: RwSignal<Arc<Vec<Row>>>,
    progress: RwSignal<Option<usize>>,
    refused: RwSignal<Option<String>>,
}

fn start(design: Design, moves: Moves, (from, to): (f64, f64), number: u32, to_put: Run) {
    if to_put.run.get_value() != number {
        return;
    }
    match Study::new(&design, moves, from, to, POINTS) {
        Ok(study) => {
            to_put.refused.set(None);
            slice(study, Vec::with_capacity(POINTS), number, to_put);
        }
        Err(error) => to_put.refused.set(Some(error.to_string())),
    }
}

/// Makes rows until the slice is over, then lets the page breathe.
fn slice(study: Study, mut made: Vec<Row>, number: u32, to_put: Run) {
    // A newer run has taken over.
    if to_put.run.get_value() != number {
        return;
    }
    let now = || window_performance();
    let begun = now();
    while made.len() < study.len() && now() - begun < SLICE_MS {
        made.push(study.row(made.len()));
    }
    if made.len() == study.len() {
        to_put.progress.set(None);
        to_put.rows.set(Arc::new(made));
    } else {
        to_put.progress.set(Some(made.len()));
        set_timeout(move || slice(study, made, number, to_put), Duration::ZERO);
    }
}

fn window_performance() -> f64 {
    leptos::prelude::window()
        .performance()
        .map_or(0.0, |p| p.now())
}

/// One strip: its caption, the window in which every limit is met, and the line.
fn strip(strip: &Strip, rows: &[Row], shade: Option<(f64, f64)>) -> AnyView {
    let value = |row: &Row| row.outcome.as_ref().ok().map(strip.value);
    let known = || rows.iter().filter_map(value);
    let least = known().fold(f64::INFINITY, f64::min);
    let most = known().fold(f64::NEG_INFINITY, f64::max);
    // A line that moves by less than a ten-thousandth is drawn straight.
    let scale = 1e-4 * most.abs().max(least.abs());
    let span = (most - least).max(scale).max(1e-300);
    let mut path = String::new();
    let mut pen = 'M';
    for (k, row) in rows.iter().enumerate() {
        match value(row) {
            Some(v) => {
                let y = HEIGHT - 4.0 - (HEIGHT - 8.0) * (v - least) / span;
                path.push_str(&format!("{pen}{:.1} {y:.1}", place(rows, k)));
                pen = 'L';
            }
            None => pen = 'M',
        }
    }
    let show = |v: f64| match strip.unit {
        "%" => format!("{v:.2} %"),
        unit => quantity::format(v, unit),
    };
    let caption = if least <= most {
        format!(" {} to {}", show(least), show(most))
    } else {
        " no stage in this range".to_owned()
    };
    let shade = shade.map(|(a, b)| {
        let (x, wide) = (a.to_string(), (b - a).max(2.0).to_string());
        view! { <rect class="window" x=x y="0" width=wide height="64"/> }.into_any()
    });
    view! {
        <figure>
            <figcaption><b>{strip.label}</b>{caption}</figcaption>
            <svg class="strip" viewBox="0 0 560 64" preserveAspectRatio="none" role="img" aria-label=strip.label>
                {shade}
                <path d=path/>
            </svg>
        </figure>
    }
    .into_any()
}

const WIDTH: f64 = 560.0;
const HEIGHT: f64 = 64.0;

/// How far to the right a row stands.
fn place(rows: &[Row], k: usize) -> f64 {
    WIDTH * k as f64 / (rows.len() - 1) as f64
}

fn picture(rows: &[Row], unit: &'static str) -> AnyView {
    let [first, .., last] = rows else {
        return ().into_any();
    };
    let shade = window(rows).map(|Window { from, to, .. }| {
        let find = |at: f64| rows.iter().position(|row| row.at == at).unwrap_or(0);
        (place(rows, find(from)), place(rows, find(to)))
    });
    let strips: Vec<AnyView> = STRIPS.iter().map(|s| strip(s, rows, shade)).collect();
    let ends = format!(
        "{} to {}; shaded where every limit is met",
        quantity::format(first.at, unit),
        quantity::format(last.at, unit)
    );
    view! { <div class="study">{strips}</div><p class="origin">{ends}</p> }.into_any()
}

fn table_row(table: &Row, unit: &str) -> AnyView {
    let at = quantity::format(table.at, unit);
    let cells = match &table.outcome {
        Ok(p) => {
            let most = f64::NEG_INFINITY;
            let harmonic = p.harmonics_dbc.iter().copied().fold(most, f64::max);
            let watt = |w: f64| quantity::format(w, "W");
            let band = p.band_power_w;
            let band =
                band.map_or_else(String::new, |[a, b]| format!("{} to {}", watt(a), watt(b)));
            vec![
                number(watt(p.output_power_w)),
                number(per_cent(p.drain_efficiency)),
                number(quantity::format(p.drain_peak_v, "V")),
                number(format!("{harmonic:.1} dBc")),
                number(band),
                cell("", "", p.failing.join(", ")),
            ]
        }
        Err(reason) => vec![view! { <td colspan="6">{reason.clone()}</td> }.into_any()],
    };
    row("", None, at, cells)
}

fn table(rows: &[Row], unit: &'static str) -> AnyView {
    let lines: Vec<AnyView> = rows.iter().map(|row| table_row(row, unit)).collect();
    view! {
        <div class="scroll"><table>
            <thead><tr><th scope="col">"At"</th><th scope="col" class="number">"Power"</th><th scope="col" class="number">"Efficiency"</th><th scope="col" class="number">"Drain peak"</th><th scope="col" class="number">"Harmonic"</th><th scope="col" class="number">"Power over the band"</th><th scope="col">"Not met"</th></tr></thead>
            <tbody>{lines}</tbody>
        </table></div>
    }
    .into_any()
}
