//! The stage drawn, with the value of each element on it.

use crate::parts::ELEMENTS;
use crate::state::App;
use evenfall_engine::design::Capacitance;
use evenfall_engine::quantity;
use leptos::prelude::*;

/// A coil along x from `x` to `x + 60`.
fn coil(x: i32, y: i32) -> String {
    let mut path = format!("M{x} {y}");
    for _ in 0..4 {
        path.push_str("a7.5 9 0 0 1 15 0");
    }
    path
}

/// The schematic.
#[component]
pub(crate) fn Schematic(app: App) -> impl IntoView {
    let value = move |index: usize| {
        let element = ELEMENTS[index];
        app.last.get().map_or_else(String::new, |s| {
            quantity::format((element.value)(&s.values), element.unit)
        })
    };
    let state = move |index: usize| {
        let pinned = app.shown.with(|d| (ELEMENTS[index].pinned)(d)).is_some();
        if pinned { "● pinned" } else { "○ sized" }
    };
    let label = move |index: usize, x: i32, y: i32, name: &'static str| {
        view! {
            <text x=x y=y class="name">{name}</text>
            <text x=x y=y + 17 class="value">{move || value(index)}</text>
            <text x=x y=y + 31 class="state">{move || state(index)}</text>
        }
    };
    let supply = move || {
        app.last
            .get()
            .map_or_else(String::new, |s| quantity::format(s.values.supply_v, "V"))
    };
    let on = move || quantity::format(app.shown.with(|d| d.device.on_resistance_ohm), "Ω");
    let output_capacitance = move || {
        app.shown.with(|d| match d.device.capacitance {
            Capacitance::Constant { c_f } => format!("with {}", quantity::format(c_f, "F")),
            _ => String::new(),
        })
    };
    let peak = move || {
        app.last.get().map_or_else(String::new, |s| {
            format!("peak {}", quantity::format(s.figures.drain_peak_v, "V"))
        })
    };
    let power = move || {
        app.last.get().map_or_else(String::new, |s| {
            quantity::format(s.figures.output_power_w, "W")
        })
    };
    view! {
        <section class="card">
            <h2>"Stage"</h2>
            <svg class="schematic" viewBox="0 0 650 275" role="img" aria-label="Class-E stage: supply through the feed coil to the drain; switch, body diode and shunt capacitor from drain to ground; series coil, series capacitor and load. Values are in the table of elements.">
                <g class="wire">
                    // Supply and feed coil.
                    <path d="M40 250V166M28 166H52M34 158H46M28 150H52M34 142H46M40 142V50H80M140 50H200V110"/>
                    <path d=coil(80, 50)/>
                    // Switch.
                    <path d="M200 110V150M200 200L183 157M200 200V250"/>
                    // Shunt capacitor.
                    <path d="M320 110V168M305 168H335M305 176H335M320 176V250"/>
                    // Series branch and load.
                    <path d="M200 110H370M430 110H480M480 96V124M488 96V124M488 110H560V150M550 150H570V200H550ZM560 200V250"/>
                    <path d=coil(370, 110)/>
                    // Ground.
                    <path d="M40 250H560M190 258H210M194 263H206M198 268H202M200 250V258"/>
                </g>
                <circle cx="200" cy="110" r="3"/>
                <circle cx="320" cy="110" r="3"/>
                <circle cx="200" cy="152" r="2.5"/>
                <circle cx="200" cy="200" r="2.5"/>
                <Show when=move || app.shown.with(|d| d.device.diode.is_some())>
                    <g class="wire"><path d="M200 130H228V168M219 168H237M228 168L219 184H237ZM228 184V225H200"/></g>
                </Show>
                <text x="56" y="182" class="name">"Supply"</text>
                <text x="56" y="199" class="value">{supply}</text>
                {label(0, 82, 78, "L1 feed")}
                <text x="136" y="206" class="name">"Switch"</text>
                <text x="136" y="223" class="value">{on}</text>
                <text x="136" y="238" class="state">{output_capacitance}</text>
                {label(1, 342, 166, "C1 shunt")}
                {label(2, 362, 46, "L2 series")}
                {label(3, 462, 46, "C2 series")}
                {label(4, 576, 158, "Load")}
                <text x="208" y="102" class="volt">{peak}</text>
                <text x="576" y="222" class="watt">{power}</text>
            </svg>
        </section>
    }
}
