//! The stage drawn, with the value of each element on it.

use crate::parts::ELEMENTS;
use crate::pieces::{Live, live, when};
use crate::state::App;
use evenfall_engine::answer::Solved;
use evenfall_engine::design::Capacitance;
use evenfall_engine::quantity;
use leptos::prelude::*;

/// One of the answer's values as text; empty before there is an answer.
fn shown(app: App, read: impl Fn(&Solved) -> String + Send + 'static) -> Live<String> {
    live(move || app.last.get().map_or_else(String::new, |s| read(&s)))
}

fn text(class: &'static str, x: i32, y: i32, words: Live<String>) -> AnyView {
    let (x, y) = (x.to_string(), y.to_string());
    view! { <text x=x y=y class=class>{words}</text> }.into_any()
}

fn label(app: App, index: usize, x: i32, y: i32, name: &'static str) -> Vec<AnyView> {
    let element = &ELEMENTS[index];
    let value = shown(app, |s| {
        quantity::format((element.value)(&s.values), element.unit)
    });
    let state = live(move || {
        let pinned = app.shown.with(|d| (element.pinned)(d)).is_some();
        if pinned { "● pinned" } else { "○ sized" }.to_owned()
    });
    vec![
        text("name", x, y, live(move || name.to_owned())),
        text("value", x, y + 17, value),
        text("state", x, y + 31, state),
    ]
}

/// The schematic.
pub(crate) fn schematic(app: App) -> AnyView {
    let on = live(move || quantity::format(app.shown.with(|d| d.device.on_resistance_ohm), "Ω"));
    let output_capacitance = live(move || {
        app.shown.with(|d| match &d.device.capacitance {
            Capacitance::None => String::new(),
            Capacitance::Constant { c_f } => format!("with {}", quantity::format(*c_f, "F")),
            _ => "with C(v)".to_owned(),
        })
    });
    let volt = |v: f64| quantity::format(v, "V");
    let diode = when(
        move || app.shown.with(|d| d.device.diode.is_some()),
        || {
            view! { <g class="wire"><path d="M200 130H228V168M219 168H237M228 168L219 184H237ZM228 184V225H200"/></g> }
                .into_any()
        },
    );
    view! {
        <section class="card">
            <h2>"Stage"</h2>
            <svg class="schematic" viewBox="0 0 650 275" role="img" aria-label="Class-E stage: supply through the feed coil to the drain; switch, body diode and shunt capacitor from drain to ground; series coil, series capacitor and load. Values are in the table of elements.">
                <g class="wire">
                    // Supply and feed coil.
                    <path d="M40 250V166M28 166H52M34 158H46M28 150H52M34 142H46M40 142V50H80M140 50H200V110"/>
                    <path d="M80 50a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0"/>
                    // Switch.
                    <path d="M200 110V150M200 200L183 157M200 200V250"/>
                    // Shunt capacitor.
                    <path d="M320 110V168M305 168H335M305 176H335M320 176V250"/>
                    // Series branch and load.
                    <path d="M200 110H370M430 110H480M480 96V124M488 96V124M488 110H560V150M550 150H570V200H550ZM560 200V250"/>
                    <path d="M370 110a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0"/>
                    // Ground.
                    <path d="M40 250H560M190 258H210M194 263H206M198 268H202M200 250V258"/>
                </g>
                <circle cx="200" cy="110" r="3"/>
                <circle cx="320" cy="110" r="3"/>
                <circle cx="200" cy="152" r="2.5"/>
                <circle cx="200" cy="200" r="2.5"/>
                {diode}
                <text x="56" y="182" class="name">"Supply"</text>
                {text("value", 56, 199, shown(app, move |s| volt(s.values.supply_v)))}
                {label(app, 0, 82, 78, "L1 feed")}
                <text x="136" y="206" class="name">"Switch"</text>
                {text("value", 136, 223, on)}
                {text("state", 136, 238, output_capacitance)}
                {label(app, 1, 342, 166, "C1 shunt")}
                {label(app, 2, 362, 46, "L2 series")}
                {label(app, 3, 462, 46, "C2 series")}
                {label(app, 4, 576, 158, "Load")}
                {text("volt", 208, 102, shown(app, move |s| format!("peak {}", volt(s.figures.drain_peak_v))))}
                {text("watt", 576, 222, shown(app, |s| quantity::format(s.figures.output_power_w, "W")))}
            </svg>
        </section>
    }
    .into_any()
}
