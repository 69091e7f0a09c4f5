//! The brief: a sentence whose values are fields, and the details beneath it.

use crate::examples;
use crate::fields::Field;
use crate::state::App;
use evenfall_engine::design::{Aim, Capacitance, Diode, Feed};
use leptos::prelude::*;

/// The brief and its details.
#[component]
pub(crate) fn Brief(app: App) -> impl IntoView {
    let kind = move || {
        app.design.with(|d| match d.stage.feed {
            Feed::Choke { .. } => "choke",
            Feed::Resonant { .. } => "resonant",
            Feed::Inductance { .. } => "inductance",
        })
    };
    let set_kind = move |wanted: String| {
        let now = app.last.get_untracked().map_or(1e-6, |s| s.values.feed.l_h);
        app.design.update(|d| {
            d.stage.feed = match wanted.as_str() {
                "resonant" => Feed::Resonant { q: 1.412 },
                "inductance" => Feed::Inductance { l_h: now },
                _ => Feed::default(),
            }
        });
    };
    view! {
        <section class="card">
            <h2>"Brief"</h2>
            <p class="starts">
                "Start from "
                <select aria-label="Starting design" data-test="start" on:change:target=move |event| {
                    let wanted = event.target().value();
                    if let Some((_, design)) = examples::all().into_iter().find(|(title, _)| *title == wanted) {
                        app.notices.set(Vec::new());
                        app.replace(design);
                    }
                }>
                    <option value="">"a starting design…"</option>
                    {examples::all().into_iter().map(|(title, _)| view! { <option value=title>{title}</option> }).collect_view()}
                </select>
            </p>
            <ul class="notices" role="alert">
                {move || app.notices.get().into_iter().map(|n| view! { <li>{n}</li> }).collect_view()}
            </ul>
            <div class="sentence">
                <Field app name="power" label="Deliver" unit="W" slider=(0.01, 1000.0) hint="Power at the carrier wanted in the load." get=|d| d.brief.power_w set=|d, v| d.brief.power_w = v optional=true/>
                <Field app name="carrier" label="at" unit="Hz" slider=(1e5, 3e9) hint="Carrier frequency." get=|d| Some(d.brief.carrier_hz) set=|d, v| if let Some(v) = v { d.brief.carrier_hz = v }/>
                <Field app name="supply" label="from a supply of" unit="V" slider=(1.0, 400.0) hint="Direct supply voltage at the feed coil." get=|d| d.brief.supply_v set=|d, v| d.brief.supply_v = v optional=true/>
            </div>
            <h3>"Stage"</h3>
            <div class="grid">
                <Field app name="duty" label="Duty (on-fraction)" unit="" slider=(0.2, 0.8) hint="The part of the period in which the switch is closed." get=|d| Some(d.stage.duty) set=|d, v| if let Some(v) = v { d.stage.duty = v }/>
                <Field app name="loaded_q" label="Loaded Q, ωL2/R" unit="" slider=(1.2, 100.0) hint="Reactance of the whole series coil over the load resistance: high is clean, low is wide-band." get=|d| Some(d.stage.loaded_q) set=|d, v| if let Some(v) = v { d.stage.loaded_q = v }/>
                <span class="field">
                    <label for="field-feed_kind">"Feed coil"</label>
                    <select id="field-feed_kind" data-test="field-feed_kind" prop:value=kind on:change:target=move |e| set_kind(e.target().value())>
                        <option value="choke">"choke"</option>
                        <option value="resonant">"resonant"</option>
                        <option value="inductance">"given L1"</option>
                    </select>
                </span>
                {move || match kind() {
                    "choke" => view! { <Field app name="feed_value" label="Feed reactance over load" unit="" get=|d| if let Feed::Choke { reactance_ratio } = d.stage.feed { Some(reactance_ratio) } else { None } set=|d, v| if let Some(v) = v { d.stage.feed = Feed::Choke { reactance_ratio: v } }/> }.into_any(),
                    "resonant" => view! { <Field app name="feed_value" label="Feed resonance over carrier, q" unit="" get=|d| if let Feed::Resonant { q } = d.stage.feed { Some(q) } else { None } set=|d, v| if let Some(v) = v { d.stage.feed = Feed::Resonant { q: v } }/> }.into_any(),
                    _ => view! { <Field app name="feed_value" label="Feed inductance" unit="H" get=|d| if let Feed::Inductance { l_h } = d.stage.feed { Some(l_h) } else { None } set=|d, v| if let Some(v) = v { d.stage.feed = Feed::Inductance { l_h: v } }/> }.into_any(),
                }}
                <Field app name="coil_q" label="Q of the coils (empty: lossless)" unit="" get=|d| d.stage.coil_q set=|d, v| d.stage.coil_q = v optional=true/>
                <Field app name="capacitor_q" label="Q of the capacitors (empty: lossless)" unit="" get=|d| d.stage.capacitor_q set=|d, v| d.stage.capacitor_q = v optional=true/>
            </div>
            <p class="starts">
                <label for="field-aim">"Size for "</label>
                <select id="field-aim" data-test="field-aim"
                    prop:value=move || app.design.with(|d| if d.stage.aim == Aim::LeastLoss { "least" } else { "soft" })
                    on:change:target=move |e| {
                        let aim = if e.target().value() == "least" { Aim::LeastLoss } else { Aim::SoftSwitching };
                        app.design.update(|d| d.stage.aim = aim);
                    }>
                    <option value="soft">"soft switching: no voltage and no slope at turn-on"</option>
                    <option value="least">"least loss under the drain limit"</option>
                </select>
            </p>
            <Show when=move || app.design.with(|d| d.brief.power_w.is_none() || d.brief.supply_v.is_none())>
                <div class="grid">
                    <Field app name="load" label="Load, where power or supply is left open" unit="Ω" get=|d| Some(d.brief.load.r_ohm) set=|d, v| if let Some(v) = v { d.brief.load.r_ohm = v }/>
                </div>
            </Show>
            <h3>"Switch"</h3>
            <div class="grid">
                <Field app name="on_resistance" label="On-resistance" unit="Ω" get=|d| Some(d.device.on_resistance_ohm) set=|d, v| if let Some(v) = v { d.device.on_resistance_ohm = v }/>
                <Field app name="capacitance" label="Output capacitance (constant)" unit="F" hint="Of the switch itself; the shunt capacitor is sized beside it." optional=true
                    get=|d| if let Capacitance::Constant { c_f } = d.device.capacitance { Some(c_f) } else { None }
                    set=|d, v| d.device.capacitance = v.map_or(Capacitance::None, |c_f| Capacitance::Constant { c_f })/>
                <Field app name="diode_v" label="Body diode, forward (empty: none)" unit="V" optional=true
                    get=|d| d.device.diode.map(|x| x.forward_v)
                    set=|d, v| d.device.diode = v.map(|forward_v| Diode { forward_v, slope_ohm: d.device.diode.map_or(0.05, |x| x.slope_ohm) })/>
                <Show when=move || app.design.with(|d| d.device.diode.is_some())>
                    <Field app name="diode_slope" label="Body diode, slope" unit="Ω"
                        get=|d| d.device.diode.map(|x| x.slope_ohm)
                        set=|d, v| if let (Some(x), Some(v)) = (&mut d.device.diode, v) { x.slope_ohm = v }/>
                </Show>
                <Field app name="fall_time" label="Turn-off fall time (empty: none)" unit="s" optional=true hint="Time in which the switch current falls to zero in a straight line." get=|d| d.device.fall_time_s set=|d, v| d.device.fall_time_s = v/>
                <Field app name="rating_v" label="Drain rating" unit="V" optional=true get=|d| d.device.rating_v set=|d, v| d.device.rating_v = v/>
                <Field app name="rating_a" label="Switch current rating" unit="A" optional=true get=|d| d.device.rating_a set=|d, v| d.device.rating_a = v/>
            </div>
            {move || app.design.with(|d| matches!(d.device.capacitance, Capacitance::Junction { .. } | Capacitance::Points { .. })).then(|| view! {
                <p class="problem">"This design's device has a capacitance that depends on voltage. It is kept in the design, but not solved yet: type a constant one to go on."</p>
            })}
            <details open>
                <summary><h3>"Heat and drive"</h3></summary>
            <div class="grid">
                <Field app name="thermal" label="Junction to ambient (empty: not judged)" unit="K/W" optional=true hint="Thermal resistance from the junction to the air, heatsink included." get=|d| d.device.junction_to_ambient_k_per_w set=|d, v| d.device.junction_to_ambient_k_per_w = v/>
                <Field app name="per_k" label="On-resistance rise per kelvin" unit="" optional=true hint="Relative to 25 °C: 0.007 is 0.7 % a kelvin." get=|d| d.device.on_resistance_per_k set=|d, v| d.device.on_resistance_per_k = v/>
                <Field app name="ambient" label="Ambient temperature" unit="°C" get=|d| Some(d.brief.ambient_c) set=|d, v| if let Some(v) = v { d.brief.ambient_c = v }/>
                <Field app name="gate_charge" label="Gate charge (empty: not counted)" unit="C" optional=true get=|d| d.device.gate_charge_c set=|d, v| d.device.gate_charge_c = v/>
                <Field app name="gate_drive" label="Gate drive voltage" unit="V" optional=true get=|d| d.device.gate_drive_v set=|d, v| d.device.gate_drive_v = v/>
            </div>
            </details>
            <h3>"Limits"</h3>
            <div class="grid">
                <Field app name="limit_drain" label="Drain peak, fraction of rating" unit="" get=|d| Some(d.brief.limits.drain_fraction_of_rating) set=|d, v| if let Some(v) = v { d.brief.limits.drain_fraction_of_rating = v }/>
                <Field app name="limit_efficiency" label="Least efficiency, fraction" unit="" optional=true get=|d| d.brief.limits.efficiency set=|d, v| d.brief.limits.efficiency = v/>
                <Field app name="limit_junction" label="Junction temperature" unit="°C" optional=true get=|d| d.brief.limits.junction_c set=|d, v| d.brief.limits.junction_c = v/>
                <Field app name="limit_harmonic" label="Strongest harmonic" unit="dBc" hint="Decibels relative to the carrier, of the load current." optional=true get=|d| d.brief.limits.harmonic_dbc set=|d, v| d.brief.limits.harmonic_dbc = v/>
            </div>
        </section>
    }
}
