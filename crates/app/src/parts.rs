//! The stage's elements as a table: each is sized or pinned, and says which.

use crate::fields::{Getter, Input, Quantity, Setter, Typing, field, input};
use crate::pieces::{button, live, named_button, press, when};
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
    more: Quantity,
}

/// Series resistance of a pinned part.
const fn esr(name: &'static str, access: (Getter, Setter)) -> Quantity {
    Quantity::optional(name, "series resistance (empty: from its Q)", "Ω", access)
}

/// Every element, from the supply to the load.
pub(crate) static ELEMENTS: [Element; 5] = [
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
        more: esr(
            "esr-feed",
            (
                |d| d.fitted.feed.and_then(|p| p.esr_ohm),
                |d, v| {
                    if let Some(p) = &mut d.fitted.feed {
                        p.esr_ohm = v;
                    }
                },
            ),
        ),
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
        more: esr(
            "esr-shunt",
            (
                |d| d.fitted.shunt.and_then(|p| p.esr_ohm),
                |d, v| {
                    if let Some(p) = &mut d.fitted.shunt {
                        p.esr_ohm = v;
                    }
                },
            ),
        ),
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
        more: esr(
            "esr-series_coil",
            (
                |d| d.fitted.series_coil.and_then(|p| p.esr_ohm),
                |d, v| {
                    if let Some(p) = &mut d.fitted.series_coil {
                        p.esr_ohm = v;
                    }
                },
            ),
        ),
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
        more: esr(
            "esr-series_capacitor",
            (
                |d| d.fitted.series_capacitor.and_then(|p| p.esr_ohm),
                |d, v| {
                    if let Some(p) = &mut d.fitted.series_capacitor {
                        p.esr_ohm = v;
                    }
                },
            ),
        ),
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
        more: Quantity::optional(
            "load-reactance",
            "series reactance",
            "Ω",
            (
                |d| d.fitted.drain_load.map(|p| p.x_ohm),
                |d, v| {
                    if let Some(p) = &mut d.fitted.drain_load {
                        p.x_ohm = v.unwrap_or(0.0);
                    }
                },
            ),
        ),
    },
];

/// The table of elements.
pub(crate) fn parts(app: App) -> AnyView {
    let hold = press(move || {
        if let Some(solved) = app.last.get_untracked() {
            app.design.update(|d| {
                for element in &ELEMENTS {
                    (element.pin)(&mut d.fitted, Some((element.value)(&solved.values)));
                }
            });
        }
    });
    let free = press(move || {
        let mut design = app.design.get_untracked();
        design.fitted = Fitted::default();
        app.replace(design);
    });
    let mode = live(move || {
        if app.design.with(|d| d.fitted.is_complete()) {
            "Every element is pinned: this is the stage as built, nothing is sized."
        } else {
            "Elements marked sized follow the brief; type a value to pin one."
        }
        .to_owned()
    });
    let rows: Vec<AnyView> = ELEMENTS.iter().map(|element| row(app, element)).collect();
    view! {
        <section class="card">
            <h2>"Elements"</h2>
            <p class="mode" data-test="mode">{mode}</p>
            <table class="elements">
                <thead><tr><th scope="col">"Element"</th><th scope="col">"Value"</th><th scope="col">"State"</th></tr></thead>
                <tbody>{rows}</tbody>
            </table>
            <p class="buttons">
                {button("hold-all", "Pin all as they are", hold)}
                {button("free-all", "Free all", free)}
            </p>
        </section>
    }
    .into_any()
}

fn row(app: App, element: &'static Element) -> AnyView {
    let typing = Typing::new(app);
    let pinned = Memo::new(move |_| app.design.with(element.pinned));
    let value = Memo::new(move |_| {
        let sized = app.last.get().map(|s| (element.value)(&s.values));
        pinned.get().or(sized)
    });
    let set = move |value: Option<f64>| app.design.update(|d| (element.pin)(&mut d.fitted, value));
    let is_pinned = move || pinned.get().is_some();
    let free = move || {
        let act = press(move || {
            typing.forget();
            set(None);
        });
        let name = format!("Free {}", element.label);
        named_button(&format!("free-{}", element.key), "free", Some(name), act)
    };
    let id = format!("pin-{}", element.key);
    let own = Input {
        id: id.clone(),
        unit: element.unit,
        optional: true,
        value,
        put: Box::new(set),
    };
    let state = live(move || if is_pinned() { "pinned " } else { "sized " }.to_owned());
    view! {
        <tr class:pinned=live(is_pinned)>
            <th scope="row"><label for=id>{element.label}</label></th>
            <td>
                {input(typing, own)}
                {when(is_pinned, move || field(app, element.more))}
            </td>
            <td>{state}{when(is_pinned, free)}</td>
        </tr>
    }
    .into_any()
}
