//! A field for one quantity: engineering notation, arrow keys, and what is wrong beside it.

use crate::state::App;
use evenfall_engine::design::Design;
use evenfall_engine::quantity;
use leptos::ev::KeyboardEvent;
use leptos::prelude::*;

/// A quantity of the design. Wrong text keeps the last good value and says what is wrong.
#[component]
pub(crate) fn Field(
    app: App,
    /// Name for the label and for finding the field.
    name: &'static str,
    label: &'static str,
    unit: &'static str,
    get: fn(&Design) -> Option<f64>,
    set: fn(&mut Design, Option<f64>),
    /// Whether it may be left empty.
    #[prop(optional)]
    optional: bool,
    /// A slider from the first to the second value, logarithmic.
    #[prop(optional)]
    slider: Option<(f64, f64)>,
    /// One line on what the quantity is.
    #[prop(optional)]
    hint: &'static str,
) -> impl IntoView {
    let typed: RwSignal<Option<String>> = RwSignal::new(None);
    let problem: RwSignal<Option<String>> = RwSignal::new(None);
    let value = Memo::new(move |_| app.design.with(get));
    let shown = move || {
        typed.get().unwrap_or_else(|| {
            value
                .get()
                .map_or_else(String::new, |v| quantity::format(v, unit))
        })
    };
    let input = move |text: String| {
        if text.trim().is_empty() && optional {
            problem.set(None);
            app.design.update(|d| set(d, None));
        } else {
            match quantity::parse(&text, unit) {
                Ok(number) => {
                    problem.set(None);
                    if value.get_untracked() != Some(number) {
                        app.design.update(|d| set(d, Some(number)));
                    }
                }
                Err(error) => problem.set(Some(error.to_string())),
            }
        }
        typed.set(Some(text));
    };
    let key = move |event: KeyboardEvent| {
        let up = match event.key().as_str() {
            "ArrowUp" => true,
            "ArrowDown" => false,
            _ => return,
        };
        let Some(old) = value.get_untracked() else {
            return;
        };
        event.prevent_default();
        let share = if event.shift_key() { 0.1 } else { 0.01 };
        let stepped = if up {
            old * (1.0 + share)
        } else {
            old / (1.0 + share)
        };
        let rounded = quantity::parse(&quantity::format(stepped, unit), unit).unwrap_or(stepped);
        problem.set(None);
        typed.set(None);
        app.design.update(|d| set(d, Some(rounded)));
    };
    let blur = move |_| {
        if problem.get_untracked().is_none() {
            typed.set(None);
        }
    };
    let id = format!("field-{name}");
    let error_id = format!("{id}-problem");
    let described = error_id.clone();
    let slide = move |event: leptos::ev::Event, range: (f64, f64)| {
        let at: f64 = event_target_value(&event).parse().unwrap_or(0.0);
        let text = quantity::format(range.0 * libm::pow(range.1 / range.0, at / 1000.0), unit);
        if let Ok(number) = quantity::parse(&text, unit) {
            problem.set(None);
            typed.set(None);
            app.design.update(|d| set(d, Some(number)));
        }
    };
    view! {
        <span class="field" title=hint>
            <label for=id.clone()>{label}</label>
            <input
                id=id.clone()
                data-test=id.clone()
                type="text"
                autocomplete="off"
                spellcheck="false"
                prop:value=shown
                aria-invalid=move || problem.get().is_some().to_string()
                aria-describedby=described
                on:input:target=move |event| input(event.target().value())
                on:keydown=key
                on:blur=blur
            />
            {slider.map(|range| view! {
                <input
                    type="range"
                    min="0"
                    max="1000"
                    aria-label=format!("{label}, slider")
                    data-test=format!("slide-{name}")
                    prop:value=move || {
                        let now = value.get().unwrap_or(range.0).max(1e-300);
                        (1000.0 * libm::log(now / range.0) / libm::log(range.1 / range.0)).clamp(0.0, 1000.0).to_string()
                    }
                    on:input=move |event| slide(event, range)
                />
            })}
            <span class="problem" id=error_id role="status">{move || problem.get()}</span>
        </span>
    }
}
