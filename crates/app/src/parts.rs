//! The stage's elements as a table: each is sized or pinned, and says which.

use crate::fields::{Field, Typing, step};
use crate::state::App;
use evenfall_engine::answer::Values;
use evenfall_engine::design::{Capacitor, Coil, Design, Fitted, Load};
use leptos::prelude::*;

/// One element of the stage as the page knows it.
#[derive(Clone, Copy)]
pub(crate) struct Element {
    /// Its name in the design file.
    pub(crate) key: &'static str,
    /// What an engineer calls it.
    pub(crate) label: &'static str,
    /// Unit of its value.
    pub(crate) unit: &'static str,
    /// Its value in the answer.
    pub(crate) value: fn(&Values) -> f64,
    /// Its pinned value.
    pub(crate) pinned: fn(&Design) -> Option<f64>,
    /// Pins or frees it.
    pub(crate) pin: fn(&mut Fitted, Option<f64>),
    /// What else a pinned part may state.
    more: More,
}

/// A second value of a pinned part, ohms.
#[derive(Clone, Copy)]
struct More {
    name: &'static str,
    label: &'static str,
    get: fn(&Design) -> Option<f64>,
    set: fn(&mut Design, Option<f64>),
}

/// Every element, from the supply to the load.
pub(crate) const ELEMENTS: [Element; 5] = [
    Element {
        key: "feed",
        label: "Feed coil L1",
        unit: "H",
        value: |v| v.feed.l_h,
        pinned: |d| d.fitted.feed.map(|p| p.l_h),
        pin: |f, v| {
            f.feed = v.map(|l_h| Coil {
                l_h,
                esr_ohm: f.feed.and_then(|p| p.esr_ohm),
            })
        },
        more: More {
            name: "esr-feed",
            label: "series resistance (empty: from its Q)",
            get: |d| d.fitted.feed.and_then(|p| p.esr_ohm),
            set: |d, v| {
                if let Some(p) = &mut d.fitted.feed {
                    p.esr_ohm = v;
                }
            },
        },
    },
    Element {
        key: "shunt",
        label: "Shunt capacitor C1",
        unit: "F",
        value: |v| v.shunt.c_f,
        pinned: |d| d.fitted.shunt.map(|p| p.c_f),
        pin: |f, v| {
            f.shunt = v.map(|c_f| Capacitor {
                c_f,
                esr_ohm: f.shunt.and_then(|p| p.esr_ohm),
            })
        },
        more: More {
            name: "esr-shunt",
            label: "series resistance (empty: from its Q)",
            get: |d| d.fitted.shunt.and_then(|p| p.esr_ohm),
            set: |d, v| {
                if let Some(p) = &mut d.fitted.shunt {
                    p.esr_ohm = v;
                }
            },
        },
    },
    Element {
        key: "series_coil",
        label: "Series coil L2",
        unit: "H",
        value: |v| v.series_coil.l_h,
        pinned: |d| d.fitted.series_coil.map(|p| p.l_h),
        pin: |f, v| {
            f.series_coil = v.map(|l_h| Coil {
                l_h,
                esr_ohm: f.series_coil.and_then(|p| p.esr_ohm),
            })
        },
        more: More {
            name: "esr-series_coil",
            label: "series resistance (empty: from its Q)",
            get: |d| d.fitted.series_coil.and_then(|p| p.esr_ohm),
            set: |d, v| {
                if let Some(p) = &mut d.fitted.series_coil {
                    p.esr_ohm = v;
                }
            },
        },
    },
    Element {
        key: "series_capacitor",
        label: "Series capacitor C2",
        unit: "F",
        value: |v| v.series_capacitor.c_f,
        pinned: |d| d.fitted.series_capacitor.map(|p| p.c_f),
        pin: |f, v| {
            f.series_capacitor = v.map(|c_f| Capacitor {
                c_f,
                esr_ohm: f.series_capacitor.and_then(|p| p.esr_ohm),
            });
        },
        more: More {
            name: "esr-series_capacitor",
            label: "series resistance (empty: from its Q)",
            get: |d| d.fitted.series_capacitor.and_then(|p| p.esr_ohm),
            set: |d, v| {
                if let Some(p) = &mut d.fitted.series_capacitor {
                    p.esr_ohm = v;
                }
            },
        },
    },
    Element {
        key: "drain_load",
        label: "Drain load R",
        unit: "Ω",
        value: |v| v.drain_load.r_ohm,
        pinned: |d| d.fitted.drain_load.map(|p| p.r_ohm),
        pin: |f, v| {
            f.drain_load = v.map(|r_ohm| Load {
                r_ohm,
                x_ohm: f.drain_load.map_or(0.0, |p| p.x_ohm),
            })
        },
        more: More {
            name: "load-reactance",
            label: "series reactance",
            get: |d| d.fitted.drain_load.map(|p| p.x_ohm),
            set: |d, v| {
                if let Some(p) = &mut d.fitted.drain_load {
                    p.x_ohm = v.unwrap_or(0.0);
                }
            },
        },
    },
];

/// The table of elements.
#[component]
pub(crate) fn Parts(app: App) -> impl IntoView {
    let hold = move |_| {
        if let Some(solved) = app.last.get_untracked() {
            app.design.update(|d| {
                for element in ELEMENTS {
                    (element.pin)(&mut d.fitted, Some((element.value)(&solved.values)));
                }
            });
        }
    };
    let free = move |_| {
        let mut design = app.design.get_untracked();
        design.fitted = Fitted::default();
        app.replace(design);
    };
    let as_built = move || app.design.with(|d| d.fitted.is_complete());
    view! {
        <section class="card">
            <h2>"Elements"</h2>
            <p class="mode" data-test="mode">
                {move || if as_built() {
                    "Every element is pinned: this is the stage as built, nothing is sized."
                } else {
                    "Elements marked sized follow the brief; type a value to pin one."
                }}
            </p>
            <table class="elements">
                <thead><tr><th scope="col">"Element"</th><th scope="col">"Value"</th><th scope="col">"State"</th></tr></thead>
                <tbody>{ELEMENTS.into_iter().map(|element| view! { <Row app element/> }).collect_view()}</tbody>
            </table>
            <p class="buttons">
                <button type="button" data-test="hold-all" on:click=hold>"Pin all as they are"</button>
                <button type="button" data-test="free-all" on:click=free>"Free all"</button>
            </p>
        </section>
    }
}

#[component]
fn Row(app: App, element: Element) -> impl IntoView {
    let typing = Typing::new(app);
    let pinned = Memo::new(move |_| app.design.with(element.pinned));
    let sized = Memo::new(move |_| app.last.get().map(|s| (element.value)(&s.values)));
    let value = move || pinned.get().or(sized.get());
    let set = move |value: Option<f64>| app.design.update(|d| (element.pin)(&mut d.fitted, value));
    let input = move |text: String| {
        if let Some(value) = typing.read(text, element.unit, true) {
            set(Some(value));
        }
    };
    let key = move |event: leptos::ev::KeyboardEvent| {
        let old = pinned.get_untracked().or(sized.get_untracked());
        if let Some(next) = old.and_then(|old| step(&event, old, element.unit)) {
            typing.forget();
            set(Some(next));
        }
    };
    let id = format!("pin-{}", element.key);
    let error_id = format!("{id}-problem");
    view! {
        <tr class:pinned=move || pinned.get().is_some()>
            <th scope="row"><label for=id.clone()>{element.label}</label></th>
            <td>
                <input id=id.clone() data-test=id type="text" autocomplete="off" spellcheck="false" prop:value=move || typing.shown(value(), element.unit)
                    aria-invalid=move || typing.problem.get().is_some().to_string()
                    aria-describedby=error_id.clone()
                    on:input:target=move |e| input(e.target().value())
                    on:keydown=key
                    on:blur=move |_| if typing.leave() { set(None) }/>
                <span class="problem" id=error_id role="status">{move || typing.problem.get()}</span>
                <Show when=move || pinned.get().is_some()>
                    <Field app name=element.more.name label=element.more.label unit="Ω" get=element.more.get set=element.more.set optional=true/>
                </Show>
            </td>
            <td>
                {move || if pinned.get().is_some() { "pinned" } else { "sized" }}
                " "
                <Show when=move || pinned.get().is_some()>
                    <button type="button" data-test=format!("free-{}", element.key)
                        aria-label=format!("Free {}", element.label)
                        on:click=move |_| { typing.forget(); set(None); }>"free"</button>
                </Show>
            </td>
        </tr>
    }
}
