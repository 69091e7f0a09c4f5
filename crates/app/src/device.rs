//! The switch: its fields, its capacitance, and the devices that are kept.

use crate::capacitance::capacitance;
use crate::devices::devices;
use crate::fields::{Quantity, always, fields, maybe};
use crate::pieces::when;
use crate::state::App;
use evenfall_engine::design::Diode;
use leptos::prelude::*;

/// Hidden where it follows from the width.
static RESISTANCE: [Quantity; 1] = [Quantity::needed(
    "on_resistance",
    "On-resistance",
    "Ω",
    always!(device.on_resistance_ohm),
)];

static SWITCH: [Quantity; 1] = [Quantity::optional(
    "diode_v",
    "Body diode, forward (empty: none)",
    "V",
    (
        |d| d.device.diode.map(|x| x.forward_v),
        |d, v| {
            d.device.diode = v.map(|forward_v| Diode {
                forward_v,
                slope_ohm: d.device.diode.map_or(0.05, |x| x.slope_ohm),
            });
        },
    ),
)];

static SLOPE: [Quantity; 1] = [Quantity::needed(
    "diode_slope",
    "Body diode, slope",
    "Ω",
    (
        |d| d.device.diode.map(|x| x.slope_ohm),
        |d, v| {
            if let (Some(x), Some(v)) = (&mut d.device.diode, v) {
                x.slope_ohm = v;
            }
        },
    ),
)];

static RATINGS: [Quantity; 3] = [
    Quantity::optional(
        "fall_time",
        "Turn-off fall time (empty: none)",
        "s",
        maybe!(device.fall_time_s),
    )
    .hint("Time in which the switch current falls to zero in a straight line."),
    Quantity::optional("rating_v", "Drain rating", "V", maybe!(device.rating_v)),
    Quantity::optional(
        "rating_a",
        "Switch current rating",
        "A",
        maybe!(device.rating_a),
    ),
];

static HEAT: [Quantity; 5] = [
    Quantity::optional(
        "thermal",
        "Junction to ambient (empty: not judged)",
        "K/W",
        maybe!(device.junction_to_ambient_k_per_w),
    )
    .hint("Thermal resistance from the junction to the air, heatsink included."),
    Quantity::optional(
        "per_k",
        "On-resistance rise per kelvin",
        "",
        maybe!(device.on_resistance_per_k),
    )
    .hint("Relative to 25 °C: 0.007 is 0.7 % a kelvin."),
    Quantity::needed(
        "ambient",
        "Ambient temperature",
        "°C",
        always!(brief.ambient_c),
    ),
    Quantity::optional(
        "gate_charge",
        "Gate charge (empty: not counted)",
        "C",
        maybe!(device.gate_charge_c),
    ),
    Quantity::optional(
        "gate_drive",
        "Gate drive voltage",
        "V",
        maybe!(device.gate_drive_v),
    ),
];

/// The card of the switch: its fields, its capacitance, and the shelf of devices.
pub(crate) fn device(app: App) -> AnyView {
    let slope = when(
        move || app.design.with(|d| d.device.diode.is_some()),
        move || fields(app, &SLOPE),
    );
    let resistance = when(
        move || app.design.with(|d| d.device.per_width.is_none()),
        move || fields(app, &RESISTANCE),
    );
    let (capacitance, curve) = capacitance(app);
    view! {
        <section class="card">
            <h2>"Switch"</h2>
            <div class="grid">
                {resistance}
                {fields(app, &SWITCH)}
                {slope}
                {fields(app, &RATINGS)}
                {capacitance}
            </div>
            {curve}
            <details open>
                <summary><h3>"Heat and drive"</h3></summary>
                <div class="grid">{fields(app, &HEAT)}</div>
            </details>
            {crate::topology::chip(app)}
            {devices(app)}
        </section>
    }
    .into_any()
}
