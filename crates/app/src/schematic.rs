//! The stage drawn, with the value of each element on it.

use crate::parts::ELEMENTS;
use crate::state::App;
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
        let pinned = app.design.with(|d| (ELEMENTS[index].pinned)(d)).is_some();
        if pinned { "pinned" } else { "sized" }
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
    let on = move || quantity::format(app.design.with(|d| d.device.on_resistance_ohm), "Ω");
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
            <svg class="schematic" viewBox="0 0 650 270" role="img" aria-label="Class-E stage: supply through the feed coil to the drain; switch and shunt capacitor from drain to ground; series coil, series capacitor and load. Values are in the table of elements.">
                <g class="wire">
                    <path d="M40 250V150M40 110V50H70M130 50H200V250M200 50H200"/>
                    <path d=coil(70, 50)/>
                    <path d="M200 110H470M200 110V50M330 110H330"/>
                    <path d="M300 110V165M285 165H315M285 173H315M300 173V250" class="c1"/>
                    <path d=coil(360, 110)/>
                    <path d="M470 110V100M470 110V120M470 96V124M478 96V124M478 110H550V150"/>
                    <path d="M540 150H560V200H540ZM550 200V250"/>
                    <path d="M30 250H560M28 150H52M34 142H46M40 142V110M34 158H46M28 134H52"/>
                </g>
                <g class="gap"><path d="M200 150V200"/><path d="M362 110H418"/></g>
                <g class="wire"><path d="M200 200L180 158M200 150V152"/><path d=coil(360, 110)/><circle cx="200" cy="110" r="3"/><circle cx="300" cy="110" r="3"/></g>
                <text x="52" y="190" class="name">"Supply"</text>
                <text x="52" y="207" class="value">{supply}</text>
                {label(0, 72, 78, "L1 feed")}
                <text x="208" y="180" class="name">"Switch"</text>
                <text x="208" y="197" class="value">{on}</text>
                {label(1, 322, 166, "C1 shunt")}
                {label(2, 352, 50, "L2 series")}
                {label(3, 452, 50, "C2 series")}
                {label(4, 566, 166, "Load")}
                <text x="208" y="100" class="volt">{peak}</text>
                <text x="566" y="228" class="watt">{power}</text>
            </svg>
        </section>
    }
}
