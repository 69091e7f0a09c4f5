//! The waveforms on one time axis, with a readout under the pointer and from the keyboard.

use crate::figures::tidy;
use crate::pieces::{live, press, toggle};
use crate::plot::{Plane, ink};
use crate::state::App;
use evenfall_engine::answer::Waveforms;
use evenfall_engine::quantity;
use leptos::html::Canvas;
use leptos::prelude::*;
use plotters::style::{Color, RGBColor};
use wasm_bindgen::JsCast;

const HEIGHT: f64 = 132.0;

/// One trace of the scope, with a second curve where there is one.
struct Trace {
    other: Option<fn(&Waveforms) -> &[f64]>,
    label: &'static str,
    unit: &'static str,
    values: fn(&Waveforms) -> &[f64],
    light: RGBColor,
    dark: RGBColor,
}

const TRACES: [Trace; 3] = [
    Trace {
        other: Some(|w| &w.drain_b_v),
        label: "Drain voltage",
        unit: "V",
        values: |w| &w.drain_v,
        light: RGBColor(156, 54, 26),
        dark: RGBColor(244, 162, 120),
    },
    Trace {
        other: None,
        label: "Switch current",
        unit: "A",
        values: |w| &w.switch_a,
        light: RGBColor(18, 94, 120),
        dark: RGBColor(122, 200, 226),
    },
    Trace {
        other: None,
        label: "Load voltage",
        unit: "V",
        values: |w| &w.load_v,
        light: RGBColor(84, 84, 20),
        dark: RGBColor(206, 204, 118),
    },
];

/// The scope with its three traces.
pub(crate) fn scope(app: App) -> AnyView {
    let periods = RwSignal::new(1usize);
    let cursor: RwSignal<Option<usize>> = RwSignal::new(None);
    let by_key = RwSignal::new(false);
    let readout = move || {
        let Some(s) = app.last.get() else {
            return String::new();
        };
        let w = &s.waveforms;
        let count = w.t_s.len().saturating_sub(1).max(1);
        let Some(k) = cursor.get() else {
            return "Point at a trace, or focus it and use the left and right keys, to read values.".to_owned();
        };
        let within = k % count;
        let t = w.t_s.get(within).copied().unwrap_or(0.0) + (k / count) as f64 * w.t_s[count];
        let mut text = format!("at {}", quantity::format(t, "s"));
        for trace in &TRACES {
            if let Some(v) = (trace.values)(w).get(within) {
                text.push_str(&format!(
                    " · {} {}",
                    trace.label.to_ascii_lowercase(),
                    quantity::format(*v, trace.unit)
                ));
            }
        }
        text
    };
    let axis = move || {
        let Some(period) = app.last.get().and_then(|s| s.waveforms.t_s.last().copied()) else {
            return String::new();
        };
        let opens = period * app.shown.with(|d| d.stage.duty);
        format!(
            "Time from 0 to {}: the switch closes at 0 and opens at {} (upright lines).",
            quantity::format(period * periods.get() as f64, "s"),
            quantity::format(opens, "s")
        )
    };
    let total = move || {
        app.last.with(|s| {
            s.as_ref()
                .map_or(1, |s| s.waveforms.t_s.len().saturating_sub(1).max(1))
        }) * periods.get()
    };
    let key = move |event: leptos::ev::KeyboardEvent| {
        let step: i64 = match event.key().as_str() {
            "ArrowLeft" => -1,
            "ArrowRight" => 1,
            _ => return,
        };
        event.prevent_default();
        by_key.set(true);
        let span = total() as i64;
        let now = cursor.get_untracked().map_or(0, |k| k as i64);
        let step = if event.shift_key() { 16 * step } else { step };
        cursor.set(usize::try_from((now + step).rem_euclid(span)).ok());
    };
    let point = move |event: leptos::ev::PointerEvent| {
        by_key.set(false);
        if let Some(element) = event
            .target()
            .and_then(|t| t.dyn_into::<web_sys::Element>().ok())
        {
            let frame = element.get_bounding_client_rect();
            let share = (f64::from(event.client_x()) - frame.left()) / frame.width().max(1.0);
            cursor.set(Some(
                (share.clamp(0.0, 1.0) * (total() - 1) as f64) as usize,
            ));
        }
    };
    let mode = live(move || if by_key.get() { "polite" } else { "off" }.to_owned());
    let span = |count: usize, words: &'static str| {
        let pressed = live(move || (periods.get() == count).to_string());
        toggle(words, pressed, press(move || periods.set(count)))
    };
    let look = Look { periods, cursor };
    let traces: Vec<AnyView> = TRACES.iter().map(|trace| view(app, trace, look)).collect();
    view! {
        <section class="card">
            <h2>"Waveforms"</h2>
            <p class="buttons">{span(1, "one period")}{span(2, "two periods")}</p>
            <div class="traces" data-test="traces" tabindex="0" role="group" aria-label="Waveforms; left and right keys move the readout" on:keydown=key on:pointermove=point on:pointerleave=move |_| cursor.set(None)>
                {traces}
            </div>
            <p class="origin">{live(axis)}</p>
            <p class="readout" aria-live=mode data-test="readout">{live(readout)}</p>
        </section>
    }
    .into_any()
}

/// What the traces are looked at with.
#[derive(Clone, Copy)]
struct Look {
    periods: RwSignal<usize>,
    cursor: RwSignal<Option<usize>>,
}

fn view(app: App, trace: &'static Trace, look: Look) -> AnyView {
    let Look { periods, cursor } = look;
    let canvas: NodeRef<Canvas> = NodeRef::new();
    Effect::new(move |_| {
        let (Some(canvas), Some(solved)) = (canvas.get(), app.last.get()) else {
            return;
        };
        // A canvas without a context leaves the readout and the figures to speak.
        let moment = Moment {
            periods: periods.get(),
            cursor: cursor.get(),
            duty: app.shown.with(|d| d.stage.duty),
            dark: app.sight.is_dark(),
        };
        let _ = draw(&canvas, trace, &solved.waveforms, moment);
    });
    let range = move || {
        app.last.with(|s| {
            s.as_ref().map_or_else(String::new, |s| {
                let values = (trace.values)(&s.waveforms);
                let least = values.iter().copied().fold(f64::INFINITY, f64::min);
                let most = values.iter().copied().fold(f64::NEG_INFINITY, f64::max);
                let scale = most.max(-least);
                let (least, most) = (tidy(least, scale), tidy(most, scale));
                format!(
                    "{} to {}",
                    quantity::format(least, trace.unit),
                    quantity::format(most, trace.unit)
                )
            })
        })
    };
    view! {
        <figure>
            <figcaption><b>{trace.label}</b>" "<span>{live(range)}</span></figcaption>
            <canvas node_ref=canvas role="img" aria-label=format!("{} over time", trace.label)></canvas>
        </figure>
    }
    .into_any()
}

/// What a trace is drawn for.
struct Moment {
    periods: usize,
    cursor: Option<usize>,
    duty: f64,
    dark: bool,
}

fn draw(
    canvas: &web_sys::HtmlCanvasElement,
    trace: &Trace,
    waveforms: &Waveforms,
    moment: Moment,
) -> Option<()> {
    let Moment {
        periods,
        cursor,
        duty,
        dark,
    } = moment;
    let colour = if dark { trace.dark } else { trace.light };
    let ink = ink(dark);
    let values = (trace.values)(waveforms);
    let count = values.len().checked_sub(1).filter(|c| *c > 0)?;
    let least = values.iter().copied().fold(0.0, f64::min);
    let most = values.iter().copied().fold(0.0, f64::max);
    let span = (most - least).max(1e-12);
    let end = (periods * count) as f64;
    let plane = Plane::on(
        canvas,
        HEIGHT,
        (0.0, end),
        (least - 0.06 * span, most + 0.06 * span),
    )?;
    plane.line(vec![(0.0, 0.0), (end, 0.0)], ink.mix(1.0), 1.0)?;
    for period in 0..periods {
        for instant in [period as f64, period as f64 + duty] {
            let x = instant * count as f64;
            plane.line(vec![(x, least), (x, most)], ink.mix(0.45), 1.0)?;
        }
    }
    let other = trace.other.map_or(&[][..], |other| other(waveforms));
    // The other side's drain is drawn thinner, beneath.
    for (curve, width) in [(other, 0.9), (values, 1.8)] {
        let points = (0..=periods * count).filter_map(|k| {
            let within = if k == periods * count {
                count
            } else {
                k % count
            };
            curve.get(within).map(|value| (k as f64, *value))
        });
        plane.line(points.collect(), colour.mix(1.0), width)?;
    }
    if let Some(k) = cursor {
        let x = k as f64;
        plane.line(vec![(x, least), (x, most)], ink.mix(1.0), 1.0)?;
        plane.dot((x, values[k % count]), colour)?;
    }
    Some(())
}
