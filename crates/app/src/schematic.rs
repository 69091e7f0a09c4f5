//! The stage drawn, with the value of each element on it.

use crate::parts::ELEMENTS;
use crate::pieces::{Live, live, one_of, when};
use crate::state::App;
use evenfall_engine::answer::Solved;
use evenfall_engine::design::{Capacitance, Form};
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

/// What stands at the switch besides its resistance.
fn switch_words(app: App) -> String {
    app.shown.with(|d| match &d.device.capacitance {
        _ if d.device.per_width.is_some() => String::new(),
        Capacitance::None => String::new(),
        Capacitance::Constant { c_f } => format!("with {}", quantity::format(*c_f, "F")),
        _ => "with C(v)".to_owned(),
    })
}

/// What the switch is: its resistance, or its width where that is known; how many are stacked.
fn switch_value(app: App) -> String {
    let (width, stack) = app.last.with(|s| {
        s.as_ref()
            .map_or((None, None), |s| (s.values.width_m, s.values.stack))
    });
    let one = match width {
        Some(metre) => quantity::format(metre, "m"),
        None => quantity::format(app.shown.with(|d| d.device.on_resistance_ohm), "Ω"),
    };
    match stack {
        Some(count) => format!("{count} × {one}"),
        None => one,
    }
}

fn volt(v: f64) -> String {
    quantity::format(v, "V")
}

fn peak(app: App, x: i32, y: i32) -> AnyView {
    let peak = shown(app, |s| format!("peak {}", volt(s.figures.drain_peak_v)));
    text("volt", x, y, peak)
}

fn path(d: &'static str) -> AnyView {
    view! { <g class="wire"><path d=d/></g> }.into_any()
}

/// The trap across one switch.
fn trap(app: App) -> AnyView {
    let value = shown(app, |s| {
        match (s.values.trap_coil, s.values.trap_capacitor) {
            (Some(l), Some(c)) => format!(
                "{}, {}",
                quantity::format(l.l_h, "H"),
                quantity::format(c.c_f, "F")
            ),
            _ => String::new(),
        }
    });
    view! {
        <path d="M264 110V126a9 7 0 0 1 0 14a9 7 0 0 1 0 14a9 7 0 0 1 0 14V184M250 184H278M250 192H278M264 192V250"/>
        <circle cx="264" cy="110" r="3"/>
        {text("state", 224, 264, value)}
        {text("name", 280, 148, live(|| "2f".to_owned()))}
    }
    .into_any()
}

/// One switch, the load to ground.
fn single(app: App) -> AnyView {
    let diode = when(
        move || app.shown.with(|d| d.device.diode.is_some()),
        || path("M200 130H228V168M219 168H237M228 168L219 184H237ZM228 184V225H200"),
    );
    let trap = when(
        move || {
            app.last
                .with(|s| s.as_ref().is_some_and(|s| s.values.trap_coil.is_some()))
        },
        move || trap(app),
    );
    view! {
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
            {trap}
            <text x="56" y="182" class="name">"Supply"</text>
            {text("value", 56, 199, shown(app, |s| volt(s.values.supply_v)))}
            {label(app, 0, 82, 78, "L1 feed")}
            <text x="120" y="206" class="name">"Switch"</text>
            {text("value", 112, 223, live(move || switch_value(app)))}
            {text("state", 112, 238, live(move || switch_words(app)))}
            {label(app, 1, 342, 166, "C1 shunt")}
            {label(app, 2, 362, 46, "L2 series")}
            {label(app, 3, 462, 46, "C2 series")}
            {label(app, 4, 576, 158, "Load")}
            {peak(app, 208, 102)}
            {text("watt", 576, 222, shown(app, |s| quantity::format(s.figures.output_power_w, "W")))}
        </svg>
    }
    .into_any()
}

/// Two switches half a period apart, the load between their drains.
fn pair(app: App) -> AnyView {
    let cross = when(
        move || {
            app.last
                .with(|s| s.as_ref().is_some_and(|s| s.values.cross.is_some()))
        },
        move || {
            let value = shown(app, |s| {
                s.values
                    .cross
                    .map_or_else(String::new, |c| quantity::format(c.c_f, "F"))
            });
            view! {
                <g class="wire"><path d="M214 120V176H321M321 162V190M329 162V190M329 176H436V120"/></g>
                {text("value", 336, 198, value)}
            }
            .into_any()
        },
    );
    view! {
        <svg class="schematic" viewBox="-26 0 650 290" role="img" aria-label="Differential class-E stage: supply through a feed coil to each of two drains; a switch and a shunt capacitor from each drain to ground; series coil, series capacitor and load between the drains. Values are in the table of elements.">
            <g class="wire">
                // Supply and feed coils.
                <path d="M100 30H550M100 30V44M550 30V44M100 104V120M550 104V120"/>
                <path d="M100 44a9 7.5 0 0 1 0 15a9 7.5 0 0 1 0 15a9 7.5 0 0 1 0 15a9 7.5 0 0 1 0 15"/>
                <path d="M550 44a9 7.5 0 0 0 0 15a9 7.5 0 0 0 0 15a9 7.5 0 0 0 0 15a9 7.5 0 0 0 0 15"/>
                // Switches.
                <path d="M100 120V160M100 210L83 167M100 210V260M550 120V160M550 210L567 167M550 210V260"/>
                // Shunt capacitors.
                <path d="M190 120V204M175 204H205M175 212H205M190 212V260M460 120V204M445 204H475M445 212H475M460 212V260"/>
                // Series branch and load between the drains.
                <path d="M100 120H230M290 120H325M325 106V134M333 106V134M333 120H375M375 110H420V130H375ZM420 120H550"/>
                <path d="M230 120a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0a7.5 9 0 0 1 15 0"/>
                // Ground.
                <path d="M100 260H550M315 268H335M319 273H331M323 278H327M325 260V268"/>
            </g>
            <circle cx="100" cy="120" r="3"/>
            <circle cx="550" cy="120" r="3"/>
            <circle cx="190" cy="120" r="3"/>
            <circle cx="460" cy="120" r="3"/>
            {cross}
            <text x="262" y="20" class="name">"Supply"</text>
            {text("value", 332, 20, shown(app, |s| volt(s.values.supply_v)))}
            {label(app, 0, 118, 64, "L1 feed, each")}
            <text x="-24" y="236" class="name">"Switches"</text>
            {text("value", -24, 253, live(move || switch_value(app)))}
            {text("state", -24, 268, live(move || switch_words(app)))}
            {label(app, 1, 212, 214, "C1 shunt, each")}
            {label(app, 2, 232, 66, "L2 series")}
            {label(app, 3, 316, 66, "C2 series")}
            {label(app, 4, 398, 66, "Load")}
            {peak(app, -24, 148)}
            {text("watt", 376, 152, shown(app, |s| quantity::format(s.figures.output_power_w, "W")))}
        </svg>
    }
    .into_any()
}

/// The schematic.
pub(crate) fn schematic(app: App) -> AnyView {
    let two = move || {
        app.shown
            .with(|d| usize::from(d.stage.form == Form::Differential))
    };
    let drawing = one_of(
        two,
        move |two| if two == 1 { pair(app) } else { single(app) },
    );
    view! {
        <section class="card">
            <h2>"Stage"</h2>
            {drawing}
        </section>
    }
    .into_any()
}
