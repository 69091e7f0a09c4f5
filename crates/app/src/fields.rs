//! A field for one quantity: engineering notation, arrow keys, and what is wrong beside it.

use crate::pieces::{live, typed};
use crate::state::App;
use evenfall_engine::design::Design;
use evenfall_engine::quantity;
use leptos::ev::{FocusEvent, KeyboardEvent};
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

/// A text input that speaks of one quantity: its id, what it shows, and what typing in it, its
/// keys and emptying it do.
pub(crate) struct Input {
    pub(crate) id: String,
    pub(crate) unit: &'static str,
    pub(crate) optional: bool,
    pub(crate) value: Memo<Option<f64>>,
    pub(crate) put: Box<dyn Fn(Option<f64>) + Send + Sync>,
}

/// The input and, beneath it, what is wrong with what was typed.
pub(crate) fn input(typing: Typing, input: Input) -> AnyView {
    let Input {
        id,
        unit,
        optional,
        value,
        put,
    } = input;
    let put = StoredValue::new(put);
    let put = move |number: Option<f64>| put.with_value(|put| put(number));
    let type_in = typed(move |text| {
        if let Some(number) = typing.read(text, unit, optional) {
            put(Some(number));
        }
    });
    let key = move |event: KeyboardEvent| {
        if let Some(next) = value
            .get_untracked()
            .and_then(|old| step(&event, old, unit))
        {
            typing.forget();
            put(Some(next));
        }
    };
    let leave = move |_: FocusEvent| {
        if typing.leave() {
            put(None);
        }
    };
    let problem_id = format!("{id}-problem");
    view! {
        <input
            id=id.clone()
            data-test=id
            type="text"
            autocomplete="off"
            spellcheck="false"
            prop:value=live(move || typing.shown(value.get(), unit))
            aria-invalid=live(move || typing.problem.get().is_some().to_string())
            aria-describedby=problem_id.clone()
            on:input=type_in
            on:keydown=key
            on:blur=leave
        />
        <span class="problem" id=problem_id role="status">{live(move || typing.problem.get().unwrap_or_default())}</span>
    }
    .into_any()
}

/// A quantity of the design as the page asks for it.
#[derive(Clone, Copy)]
pub(crate) struct Quantity {
    /// Name for the label and for finding the field.
    name: &'static str,
    label: &'static str,
    unit: &'static str,
    get: fn(&Design) -> Option<f64>,
    set: fn(&mut Design, Option<f64>),
    /// Whether it may be left empty.
    optional: bool,
    /// A slider from the first to the second value, logarithmic.
    slider: Option<(f64, f64)>,
    /// One line on what the quantity is.
    hint: &'static str,
}

/// Reads a quantity off a design.
pub(crate) type Getter = fn(&Design) -> Option<f64>;
/// Puts a quantity into a design.
pub(crate) type Setter = fn(&mut Design, Option<f64>);

impl Quantity {
    /// One that has to be there: what empties it is no change.
    pub(crate) const fn needed(
        name: &'static str,
        label: &'static str,
        unit: &'static str,
        (get, set): (Getter, Setter),
    ) -> Self {
        Self {
            name,
            label,
            unit,
            get,
            set,
            optional: false,
            slider: None,
            hint: "",
        }
    }

    /// One that may be left empty.
    pub(crate) const fn optional(
        name: &'static str,
        label: &'static str,
        unit: &'static str,
        access: (Getter, Setter),
    ) -> Self {
        Self {
            optional: true,
            ..Self::needed(name, label, unit, access)
        }
    }

    /// With a slider.
    pub(crate) const fn sliding(self, from: f64, to: f64) -> Self {
        Self {
            slider: Some((from, to)),
            ..self
        }
    }

    /// With a line on what it is.
    pub(crate) const fn hint(self, hint: &'static str) -> Self {
        Self { hint, ..self }
    }
}

/// A place of the design that always holds a number.
macro_rules! always {
    ($($place:ident).+) => {
        (
            |d: &evenfall_engine::design::Design| Some(d.$($place).+),
            |d: &mut evenfall_engine::design::Design, v: Option<f64>| {
                if let Some(v) = v {
                    d.$($place).+ = v;
                }
            },
        )
    };
}

/// A place of the design that may hold none.
macro_rules! maybe {
    ($($place:ident).+) => {
        (
            |d: &evenfall_engine::design::Design| d.$($place).+,
            |d: &mut evenfall_engine::design::Design, v: Option<f64>| d.$($place).+ = v,
        )
    };
}

pub(crate) use {always, maybe};

/// The fields of some quantities.
pub(crate) fn fields(app: App, quantities: &'static [Quantity]) -> AnyView {
    let all: Vec<AnyView> = quantities.iter().map(|q| field(app, *q)).collect();
    all.into_any()
}

/// A quantity of the design. Wrong text keeps the last good value and says what is wrong.
pub(crate) fn field(app: App, quantity: Quantity) -> AnyView {
    let Quantity {
        name,
        label,
        unit,
        get,
        set,
        optional,
        slider,
        hint,
    } = quantity;
    let value = Memo::new(move |_| app.design.with(get));
    let put = move |number: Option<f64>| {
        if value.get_untracked() != number {
            app.design.update(|d| set(d, number));
        }
    };
    let typing = Typing::new(app);
    let id = format!("field-{name}");
    let own = Input {
        id: id.clone(),
        unit,
        optional,
        value,
        put: Box::new(put),
    };
    let slide = slider.map(|(from, to)| {
        let span = libm::log(to / from);
        let moved = typed(move |at| {
            let at = at.parse().map_or(0.0, |at: u16| f64::from(at));
            let text = quantity::format(from * libm::exp(span * at / 1000.0), unit);
            if let Ok(number) = quantity::parse(&text, unit) {
                typing.forget();
                put(Some(number));
            }
        });
        let place = move || {
            let now = value.get().unwrap_or(from).max(1e-300);
            let at = (1000.0 * libm::log(now / from) / span).clamp(0.0, 1000.0);
            (at as u32).to_string()
        };
        let said = move || {
            value
                .get()
                .map_or_else(String::new, |v| quantity::format(v, unit))
        };
        view! {
            <input type="range" min="0" max="1000" aria-label=format!("{label}, slider")
                aria-valuetext=live(said) data-test=format!("slide-{name}")
                prop:value=live(place) on:input=moved/>
        }
        .into_any()
    });
    view! {
        <span class="field" title=hint>
            <label for=id>{label}</label>
            {input(typing, own)}
            <span class="problem" role="status" data-test=format!("refused-{name}")>{live(move || app.refused(name))}</span>
            {slide}
        </span>
    }
    .into_any()
}
