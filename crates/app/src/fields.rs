//! A field for one quantity: engineering notation, arrow keys, and what is wrong beside it.

use crate::state::App;
use evenfall_engine::design::Design;
use evenfall_engine::quantity;
use leptos::ev::KeyboardEvent;
use leptos::prelude::*;

/// What is being typed into one field.
#[derive(Clone, Copy)]
pub(crate) struct Typing {
    text: RwSignal<Option<String>>,
    /// What is wrong with it.
    pub(crate) problem: RwSignal<Option<String>>,
}

impl Typing {
    /// Nothing typed; forgotten whenever another design is opened.
    pub(crate) fn new(app: App) -> Self {
        let typing = Self {
            text: RwSignal::new(None),
            problem: RwSignal::new(None),
        };
        Effect::new(move |_| {
            app.opened.track();
            typing.forget();
        });
        typing
    }

    /// Shows the value again instead of the text.
    pub(crate) fn forget(self) {
        self.text.set(None);
        self.problem.set(None);
    }

    /// On leaving the field: wrong text stays to be mended. True where the field was emptied
    /// and left so; until then what it held is kept, since the next key may fill it again.
    pub(crate) fn leave(self) -> bool {
        let emptied = self
            .text
            .with_untracked(|t| t.as_ref().is_some_and(|t| t.trim().is_empty()));
        if self.problem.get_untracked().is_none() {
            self.text.set(None);
            return emptied;
        }
        false
    }

    /// The text, or the value where nothing is being typed.
    pub(crate) fn shown(self, value: Option<f64>, unit: &str) -> String {
        self.text
            .get()
            .unwrap_or_else(|| value.map_or_else(String::new, |v| quantity::format(v, unit)))
    }

    /// Takes what was typed: a value, or none where it is wrong or still empty.
    pub(crate) fn read(self, text: String, unit: &str, optional: bool) -> Option<f64> {
        let empty = text.trim().is_empty() && optional;
        let read = quantity::parse(&text, unit);
        self.text.set(Some(text));
        self.problem.set(
            read.as_ref()
                .err()
                .filter(|_| !empty)
                .map(ToString::to_string),
        );
        read.ok()
    }
}

/// The value one arrow key away: a hundredth, with shift a tenth; from zero a first small step.
pub(crate) fn step(event: &KeyboardEvent, old: f64, unit: &str) -> Option<f64> {
    const FIRST: f64 = 0.01;
    let up = match event.key().as_str() {
        "ArrowUp" => true,
        "ArrowDown" => false,
        _ => return None,
    };
    event.prevent_default();
    let share = if event.shift_key() { 0.1 } else { 0.01 };
    let stepped = match (old == 0.0, up == (old >= 0.0)) {
        (true, true) => FIRST,
        (true, false) => 0.0,
        (false, true) => old * (1.0 + share),
        (false, false) => old / (1.0 + share),
    };
    Some(quantity::parse(&quantity::format(stepped, unit), unit).unwrap_or(stepped))
}

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
    let typing = Typing::new(app);
    let value = Memo::new(move |_| app.design.with(get));
    let put = move |number: Option<f64>| {
        if value.get_untracked() != number {
            app.design.update(|d| set(d, number));
        }
    };
    let input = move |text: String| {
        if let Some(number) = typing.read(text, unit, optional) {
            put(Some(number));
        }
    };
    let key = move |event: KeyboardEvent| {
        if let Some(next) = value
            .get_untracked()
            .and_then(|old| step(&event, old, unit))
        {
            typing.forget();
            put(Some(next));
        }
    };
    let id = format!("field-{name}");
    let error_id = format!("{id}-problem");
    let described = error_id.clone();
    let slide = move |event: leptos::ev::Event, range: (f64, f64)| {
        let at: f64 = event_target_value(&event).parse().map_or(0.0, |at: u16| f64::from(at));
        let text = quantity::format(range.0 * libm::pow(range.1 / range.0, at / 1000.0), unit);
        if let Ok(number) = quantity::parse(&text, unit) {
            typing.forget();
            put(Some(number));
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
                prop:value=move || typing.shown(value.get(), unit)
                aria-invalid=move || typing.problem.get().is_some().to_string()
                aria-describedby=described
                on:input:target=move |event| input(event.target().value())
                on:keydown=key
                on:blur=move |_| if typing.leave() { put(None) }
            />
            {slider.map(|range| view! {
                <input
                    type="range"
                    min="0"
                    max="1000"
                    aria-label=format!("{label}, slider")
                    aria-valuetext=move || value.get().map_or_else(String::new, |v| quantity::format(v, unit))
                    data-test=format!("slide-{name}")
                    prop:value=move || {
                        let now = value.get().unwrap_or(range.0).max(1e-300);
                        (1000.0 * libm::log(now / range.0) / libm::log(range.1 / range.0)).clamp(0.0, 1000.0).to_string()
                    }
                    on:input=move |event| slide(event, range)
                />
            })}
            <span class="problem" id=error_id role="status">{move || typing.problem.get()}</span>
        </span>
    }
}
