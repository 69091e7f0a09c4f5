//! Small pieces that the views are made of. Each is compiled once: a closure that is handed to
//! the view library as it is would be compiled with everything that holds it.

use leptos::ev::{Event, MouseEvent};
use leptos::prelude::*;
use leptos::tachys::reactive_graph::SharedReactiveFunction;
use std::sync::{Arc, Mutex};

/// Something on the page that follows the state.
pub(crate) type Live<T> = SharedReactiveFunction<T>;
/// What a press of a button does.
pub(crate) type Press = Box<dyn FnMut(MouseEvent)>;
/// What typing or choosing does.
pub(crate) type Typed = Box<dyn FnMut(Event)>;

/// A text, a condition or a part of the page that follows the state.
pub(crate) fn live<T>(read: impl FnMut() -> T + Send + 'static) -> Live<T> {
    Arc::new(Mutex::new(read))
}

pub(crate) fn press(mut act: impl FnMut() + 'static) -> Press {
    Box::new(move |_| act())
}

pub(crate) fn typed(mut act: impl FnMut(String) + 'static) -> Typed {
    Box::new(move |event| act(event_target_value(&event)))
}

/// A part that is there while the condition holds; it is not made anew while that stays.
pub(crate) fn when(
    condition: impl Fn() -> bool + Send + Sync + 'static,
    part: impl Fn() -> AnyView + Send + 'static,
) -> Live<AnyView> {
    let holds = kept(Box::new(move || usize::from(condition())));
    live(move || {
        if holds.get() == 1 {
            part()
        } else {
            ().into_any()
        }
    })
}

/// One of several parts, by number; it is not made anew while the number stays.
pub(crate) fn one_of(
    which: impl Fn() -> usize + Send + Sync + 'static,
    part: impl Fn(usize) -> AnyView + Send + 'static,
) -> Live<AnyView> {
    let which = kept(Box::new(which));
    live(move || part(which.get()))
}

fn kept(number: Box<dyn Fn() -> usize + Send + Sync>) -> Memo<usize> {
    Memo::new(move |_| number())
}

/// A part that is made anew from a list of views.
pub(crate) fn list(items: impl Fn() -> Vec<AnyView> + Send + 'static) -> Live<AnyView> {
    live(move || items().into_any())
}

/// A button with words on it; the test id is its name for the tests.
pub(crate) fn button(test: &str, words: &str, act: Press) -> AnyView {
    named_button(test, words, None, act)
}

/// A button whose words need more for those who do not see where it stands.
pub(crate) fn named_button(test: &str, words: &str, name: Option<String>, act: Press) -> AnyView {
    let words = words.to_owned();
    let test = (!test.is_empty()).then(|| test.to_owned());
    view! { <button type="button" data-test=test aria-label=name on:click=act>{words}</button> }
        .into_any()
}

/// A button that stays pressed while something holds.
pub(crate) fn toggle(words: &'static str, pressed: Live<String>, act: Press) -> AnyView {
    view! { <button type="button" aria-pressed=pressed on:click=act>{words}</button> }.into_any()
}

/// A choice with its label: pairs of value and words.
pub(crate) fn choice(
    id: &'static str,
    label: &'static str,
    options: &[(String, &'static str)],
    now: impl Fn() -> String + Send + Sync + 'static,
    chosen: Box<dyn FnMut(String)>,
) -> AnyView {
    let now = Memo::new(move |_| now());
    let options: Vec<AnyView> = options
        .iter()
        .map(|(value, words)| {
            let (own, words) = (value.clone(), *words);
            // On the options: the choice itself is there before they are.
            let selected = live(move || now.get() == own);
            view! { <option value=value.clone() prop:selected=selected>{words}</option> }.into_any()
        })
        .collect();
    let change = typed(chosen);
    view! {
        <label for=id>{label}</label>
        <select id=id data-test=id on:change=change>{options}</select>
    }
    .into_any()
}

/// A table's row: what heads it, and its cells.
pub(crate) fn row(
    class: &'static str,
    test: Option<String>,
    head: String,
    cells: Vec<AnyView>,
) -> AnyView {
    view! { <tr class=class data-test=test><th scope="row">{head}</th>{cells}</tr> }.into_any()
}

/// A cell with a test id where that is not empty.
pub(crate) fn cell(class: &'static str, test: &str, text: String) -> AnyView {
    let test = (!test.is_empty()).then(|| test.to_owned());
    view! { <td class=class data-test=test>{text}</td> }.into_any()
}

/// A cell with a number.
pub(crate) fn number(text: String) -> AnyView {
    cell("number", "", text)
}

/// A line of a plain list.
pub(crate) fn line(class: &'static str, text: String) -> AnyView {
    view! { <li class=class>{text}</li> }.into_any()
}
