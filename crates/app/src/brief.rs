//! The brief: a sentence whose values are fields, and the details beneath it.

use crate::examples;
use crate::fields::{Quantity, always, field, fields, maybe};
use crate::pieces::{choice, line, list, one_of, when};
use crate::state::App;
use crate::topology::topology;
use evenfall_engine::design::{Aim, Feed};
use leptos::prelude::*;

static SENTENCE: [Quantity; 3] = [
    Quantity::optional("power", "Deliver", "W", maybe!(brief.power_w))
        .sliding(0.01, 1000.0)
        .hint("Power at the carrier wanted in the load."),
    Quantity::needed("carrier", "at", "Hz", always!(brief.carrier_hz))
        .sliding(1e5, 3e9)
        .hint("Carrier frequency."),
    Quantity::optional("supply", "from a supply of", "V", maybe!(brief.supply_v))
        .sliding(1.0, 400.0)
        .hint("Direct supply voltage at the feed coil."),
];

static STAGE: [Quantity; 2] = [
    Quantity::needed("duty", "Duty (on-fraction)", "", always!(stage.duty))
        .sliding(0.2, 0.8)
        .hint("The part of the period in which the switch is closed."),
    Quantity::needed("loaded_q", "Loaded Q, ωL2/R", "", always!(stage.loaded_q))
        .sliding(1.2, 100.0)
        .hint("Reactance of the whole series coil over the load resistance: high is clean, low is wide-band."),
];

/// The kinds of feed coil: name in the design file, words, and the quantity that it has.
const FEEDS: [(&str, &str, Option<Quantity>); 5] = [
    (
        "choke",
        "choke",
        Some(Quantity::needed(
            "feed_value",
            "Feed reactance over load",
            "",
            (
                |d| match d.stage.feed {
                    Feed::Choke { reactance_ratio } => Some(reactance_ratio),
                    _ => None,
                },
                |d, v| {
                    if let Some(reactance_ratio) = v {
                        d.stage.feed = Feed::Choke { reactance_ratio };
                    }
                },
            ),
        )),
    ),
    (
        "resonant",
        "resonant",
        Some(Quantity::needed(
            "feed_value",
            "Feed resonance over carrier, q",
            "",
            (
                |d| match d.stage.feed {
                    Feed::Resonant { q } => Some(q),
                    _ => None,
                },
                |d, v| {
                    if let Some(q) = v {
                        d.stage.feed = Feed::Resonant { q };
                    }
                },
            ),
        )),
    ),
    (
        "inductance",
        "given L1",
        Some(Quantity::needed(
            "feed_value",
            "Feed inductance",
            "H",
            (
                |d| match d.stage.feed {
                    Feed::Inductance { l_h } => Some(l_h),
                    _ => None,
                },
                |d, v| {
                    if let Some(l_h) = v {
                        d.stage.feed = Feed::Inductance { l_h };
                    }
                },
            ),
        )),
    ),
    ("parallel", "found: series branch resonant, X = 0", None),
    ("load_independent", "found: soft for other loads too", None),
];

static QUALITY: [Quantity; 2] = [
    Quantity::optional(
        "coil_q",
        "Q of the coils (empty: lossless)",
        "",
        maybe!(stage.coil_q),
    ),
    Quantity::optional(
        "capacitor_q",
        "Q of the capacitors (empty: lossless)",
        "",
        maybe!(stage.capacitor_q),
    ),
];

static LOAD: [Quantity; 1] = [Quantity::needed(
    "load",
    "Load, where power or supply is left open",
    "Ω",
    always!(brief.load.r_ohm),
)];

static LIMITS: [Quantity; 4] = [
    Quantity::needed(
        "limit_drain",
        "Drain peak, fraction of rating",
        "",
        always!(brief.limits.drain_fraction_of_rating),
    ),
    Quantity::optional(
        "limit_efficiency",
        "Least efficiency, fraction",
        "",
        maybe!(brief.limits.efficiency),
    ),
    Quantity::optional(
        "limit_junction",
        "Junction temperature",
        "°C",
        maybe!(brief.limits.junction_c),
    ),
    Quantity::optional(
        "limit_harmonic",
        "Strongest harmonic",
        "dBc",
        maybe!(brief.limits.harmonic_dbc),
    )
    .hint("Decibels relative to the carrier, of the load current."),
];

fn feed_kind(app: App) -> usize {
    app.design.with(|d| match d.stage.feed {
        Feed::Choke { .. } => 0,
        Feed::Resonant { .. } => 1,
        Feed::Inductance { .. } => 2,
        Feed::Parallel {} => 3,
        Feed::LoadIndependent {} => 4,
    })
}

fn feed_choice(app: App) -> AnyView {
    let options = FEEDS.map(|(value, words, _)| (value.to_owned(), words));
    let set = move |wanted: String| {
        let now = app.last.get_untracked().map_or(1e-6, |s| s.values.feed.l_h);
        app.design.update(|d| {
            d.stage.feed = match wanted.as_str() {
                "resonant" => Feed::Resonant { q: 1.412 },
                "inductance" => Feed::Inductance { l_h: now },
                "parallel" => Feed::Parallel {},
                "load_independent" => Feed::LoadIndependent {},
                _ => Feed::default(),
            }
        });
    };
    choice(
        "field-feed_kind",
        "Feed coil",
        &options,
        move || FEEDS[feed_kind(app)].0.to_owned(),
        Box::new(set),
    )
}

fn start_choice(app: App) -> AnyView {
    let mut options = vec![(String::new(), "a starting design…")];
    options.extend(
        examples::ALL
            .iter()
            .map(|(title, _)| ((*title).to_owned(), *title)),
    );
    let start = move |wanted: String| {
        if let Some((_, link)) = examples::ALL.iter().find(|(title, _)| *title == wanted) {
            app.notices.set(Vec::new());
            app.replace(examples::open(link));
        }
    };
    choice(
        "start",
        "Start from ",
        &options,
        String::new,
        Box::new(start),
    )
}

fn aim_choice(app: App) -> AnyView {
    let options = [
        ("soft", "soft switching: no voltage and no slope at turn-on"),
        ("least", "least loss under the drain limit"),
    ]
    .map(|(value, words)| (value.to_owned(), words));
    let now = move || {
        let least = app.design.with(|d| d.stage.aim == Aim::LeastLoss);
        options_value(least)
    };
    let set = move |wanted: String| {
        let aim = if wanted == "least" {
            Aim::LeastLoss
        } else {
            Aim::SoftSwitching
        };
        app.design.update(|d| d.stage.aim = aim);
    };
    choice("field-aim", "Size for ", &options, now, Box::new(set))
}

fn options_value(least: bool) -> String {
    if least { "least" } else { "soft" }.to_owned()
}

/// The brief and its details.
pub(crate) fn brief(app: App) -> AnyView {
    let notices = list(move || {
        let all = app.notices.get();
        all.into_iter().map(|n| line("", n)).collect()
    });
    let open_load = when(
        move || {
            app.design
                .with(|d| d.brief.power_w.is_none() || d.brief.supply_v.is_none())
        },
        move || view! { <div class="grid">{fields(app, &LOAD)}</div> }.into_any(),
    );
    view! {
        <section class="card">
            <h2>"Brief"</h2>
            <p class="starts">{start_choice(app)}</p>
            <ul class="notices" role="alert">{notices}</ul>
            <div class="sentence">{fields(app, &SENTENCE)}</div>
            <h3>"Stage"</h3>
            <div class="grid">
                {fields(app, &STAGE)}
                <span class="field">{feed_choice(app)}</span>
                {one_of(move || feed_kind(app), move |kind| FEEDS[kind].2.map(|q| field(app, q)).into_any())}
                {fields(app, &QUALITY)}
            </div>
            {topology(app)}
            <p class="starts">{aim_choice(app)}</p>
            {open_load}
            <h3>"Limits"</h3>
            <div class="grid">{fields(app, &LIMITS)}</div>
        </section>
    }
    .into_any()
}
