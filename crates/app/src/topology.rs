//! How many switches there are and how they stand: one or two sides, stacked or not, known by
//! their width, with or without a trap.

use crate::fields::{Quantity, always, field, fields, maybe};
use crate::pieces::{choice, when};
use crate::state::App;
use evenfall_engine::design::{Design, Form, PerWidth, Upper};
use leptos::prelude::*;

static PAIR: [Quantity; 5] = [
    Quantity::needed(
        "feed_coupling",
        "Coupling of the feed coils, -1 to 1",
        "",
        always!(stage.feed_coupling),
    )
    .hint("0: two coils of their own; towards 1: one coil with a centre tap."),
    Quantity::needed(
        "cross_share",
        "Part of C1 between the drains, 0 to 1",
        "",
        always!(stage.cross_share),
    )
    .hint("One capacitor between the drains instead of one on either side."),
    Quantity::needed(
        "mismatch_ron",
        "Second side: on-resistance, relative difference",
        "",
        always!(stage.mismatch.on_resistance),
    ),
    Quantity::needed(
        "mismatch_duty",
        "Second side: duty, relative difference",
        "",
        always!(stage.mismatch.duty),
    ),
    Quantity::needed(
        "mismatch_c",
        "Second side: capacitance, relative difference",
        "",
        always!(stage.mismatch.capacitance),
    ),
];

const STACK: Quantity = Quantity::needed(
    "stack",
    "Stacked switches, 1 to 4",
    "",
    (
        |d| Some(f64::from(d.stage.stack)),
        |d, v| {
            if let Some(v) = v {
                // What is no count is refused beside the field.
                d.stage.stack = if v.fract() == 0.0 && (0.0..1e6).contains(&v) {
                    v as u32
                } else {
                    0
                };
            }
        },
    ),
)
.hint("Switches in series share the drain voltage; the upper gates stand at fixed supplies.");

const TRAP: Quantity = Quantity::optional(
    "trap_ratio",
    "Trap at 2 f: C1 over trap capacitance (empty: no trap)",
    "",
    maybe!(stage.trap_ratio),
)
.hint("A coil and a capacitor in series across the switch, in resonance at the second harmonic: lowers the drain peak.");

fn upper(d: &mut Design) -> &mut Upper {
    let low = d.device.on_resistance_ohm;
    d.device.upper.get_or_insert(Upper {
        on_resistance_ohm: low,
        across_f: 10e-12,
        rating_v: None,
    })
}

static STACKED: [Quantity; 5] = [
    Quantity::needed(
        "node_f",
        "Each node within the stack to ground",
        "F",
        always!(device.node_f),
    ),
    Quantity::needed(
        "threshold_v",
        "Gate threshold of the upper switches",
        "V",
        always!(device.threshold_v),
    ),
    Quantity::optional(
        "upper_ron",
        "Upper switch, on-resistance (empty: as the lowest)",
        "Ω",
        (
            |d| d.device.upper.map(|u| u.on_resistance_ohm),
            |d, v| match v {
                Some(ohm) => upper(d).on_resistance_ohm = ohm,
                None => d.device.upper = None,
            },
        ),
    ),
    Quantity::optional(
        "upper_f",
        "Upper switch, capacitance across it",
        "F",
        (
            |d| d.device.upper.map(|u| u.across_f),
            |d, v| match v {
                Some(farad) => upper(d).across_f = farad,
                None => d.device.upper = None,
            },
        ),
    ),
    Quantity::optional(
        "upper_rating",
        "Upper switch, rating",
        "V",
        (
            |d| d.device.upper.and_then(|u| u.rating_v),
            |d, v| {
                if v.is_some() || d.device.upper.is_some() {
                    upper(d).rating_v = v;
                }
            },
        ),
    ),
];

/// A number of the switch per width, where it is known by it.
macro_rules! per_width {
    ($place:ident) => {
        (
            |d: &Design| d.device.per_width.map(|p| p.$place),
            |d: &mut Design, v: Option<f64>| {
                if let (Some(p), Some(v)) = (&mut d.device.per_width, v) {
                    p.$place = v;
                }
            },
        )
    };
}

static WIDTH: [Quantity; 4] = [
    Quantity::needed(
        "per_width_ron",
        "On-resistance times width (1 Ω·mm is 1 mΩm)",
        "Ωm",
        per_width!(on_resistance_ohm_m),
    ),
    Quantity::needed(
        "per_width_c",
        "Output capacitance per width (1 fF/µm is 1 nF/m)",
        "F/m",
        per_width!(output_f_per_m),
    ),
    Quantity::needed(
        "per_width_g",
        "Gate capacitance per width",
        "F/m",
        per_width!(gate_f_per_m),
    ),
    Quantity::optional(
        "width",
        "Width (empty: the one of least loss)",
        "m",
        (
            |d| d.device.per_width.and_then(|p| p.width_m),
            |d, v| {
                if let Some(p) = &mut d.device.per_width {
                    p.width_m = v;
                }
            },
        ),
    ),
];

/// A switch on a chip to begin with (invented): 0.8 ohm mm, 0.5 fF and 1 fF per micrometre.
const FIRST: PerWidth = PerWidth {
    on_resistance_ohm_m: 8e-4,
    output_f_per_m: 5e-10,
    gate_f_per_m: 1e-9,
    width_m: None,
    choose_stack: false,
};

fn form_choice(app: App) -> AnyView {
    let options = [
        ("single", "one switch"),
        ("differential", "differential pair"),
    ]
    .map(|(value, words)| (value.to_owned(), words));
    let now = move || {
        let two = app.design.with(|d| d.stage.form == Form::Differential);
        options_value(two, "differential", "single")
    };
    let set = move |wanted: String| {
        app.design.update(|d| {
            d.stage.form = if wanted == "differential" {
                Form::Differential
            } else {
                Form::Single
            };
        });
    };
    choice("field-form", "Form", &options, now, Box::new(set))
}

fn options_value(is: bool, yes: &str, no: &str) -> String {
    if is { yes } else { no }.to_owned()
}

/// The form of the stage, for the brief.
pub(crate) fn topology(app: App) -> AnyView {
    let two = move || app.design.with(|d| d.stage.form == Form::Differential);
    let pair = when(two, move || {
        view! { <div class="grid">{fields(app, &PAIR)}</div> }.into_any()
    });
    view! {
        <div class="grid">
            <span class="field">{form_choice(app)}</span>
            {field(app, STACK)}
            {field(app, TRAP)}
        </div>
        {pair}
    }
    .into_any()
}

/// What a switch on a chip and a stack have to say beside the plain switch.
pub(crate) fn chip(app: App) -> AnyView {
    let options = [
        ("whole", "as a whole"),
        ("width", "per unit of width"),
        ("both", "per unit of width, stack chosen too"),
    ]
    .map(|(value, words)| (value.to_owned(), words));
    let now = move || {
        app.design.with(|d| match &d.device.per_width {
            None => "whole",
            Some(p) if p.choose_stack => "both",
            Some(_) => "width",
        })
    };
    let set = move |wanted: String| {
        app.design.update(|d| {
            let old = d.device.per_width.unwrap_or(FIRST);
            d.device.per_width = (wanted != "whole").then_some(PerWidth {
                choose_stack: wanted == "both",
                ..old
            });
        });
    };
    let known = choice(
        "field-known",
        "The switch is known",
        &options,
        move || now().to_owned(),
        Box::new(set),
    );
    let width = when(
        move || app.design.with(|d| d.device.per_width.is_some()),
        move || fields(app, &WIDTH),
    );
    let stacked = move || {
        app.design
            .with(|d| d.stage.stack > 1 || d.device.per_width.is_some_and(|p| p.choose_stack))
    };
    let stack = when(stacked, move || {
        view! {
            <h3>"Stack"</h3>
            <div class="grid">{fields(app, &STACKED)}</div>
        }
        .into_any()
    });
    view! {
        <details>
            <summary><h3>"On a chip: width and stack"</h3></summary>
            <p class="origin">"Known by its width, on-resistance, output capacitance and gate charge follow from it."</p>
            <div class="grid"><span class="field">{known}</span>{width}</div>
            {stack}
        </details>
    }
    .into_any()
}
