//! Ground state: one design. Everything else on the page is derived from it.

use crate::examples;
use crate::plot::Sight;
use evenfall_engine::answer::{Answer, Solved};
use evenfall_engine::design::{Design, Feed};
use evenfall_engine::exchange::link;
use evenfall_engine::quantity;
use leptos::prelude::*;
use std::sync::Arc;
use std::time::Duration;

/// The page's state, handed to every view.
#[derive(Clone, Copy)]
pub(crate) struct App {
    /// The design: the only thing that is edited.
    pub(crate) design: RwSignal<Design>,
    /// The engine's answer to it.
    pub(crate) answer: Memo<Arc<Answer>>,
    /// The last answer that was a stage: stays when the design is refused.
    pub(crate) last: Memo<Option<Arc<Solved>>>,
    /// The design that `last` belongs to.
    pub(crate) shown: Memo<Arc<Design>>,
    /// Counts the designs opened: text half typed belongs to the one before.
    pub(crate) opened: RwSignal<u32>,
    /// What the plots are seen on.
    pub(crate) sight: Sight,
    /// What the person should be told outside any field.
    pub(crate) notices: RwSignal<Vec<String>>,
}

impl App {
    /// Opens the address's design, or the starting one.
    pub(crate) fn open() -> Self {
        let (design, notices) = from_address();
        let design = RwSignal::new(design);
        let answer = Memo::new(move |_| design.with(|d| Arc::new(evenfall_engine::solve(d))));
        let last = Memo::new(
            move |old: Option<&Option<Arc<Solved>>>| match &*answer.get() {
                Answer::Solved(solved) => Some(Arc::new(solved.clone())),
                Answer::Refused(_) => old.cloned().flatten(),
            },
        );
        let shown = Memo::new(
            move |old: Option<&Arc<Design>>| match (&*answer.get(), old) {
                (Answer::Refused(_), Some(old)) => Arc::clone(old),
                _ => Arc::new(design.get()),
            },
        );
        Self {
            design,
            answer,
            last,
            shown,
            opened: RwSignal::new(0),
            sight: Sight::new(),
            notices: RwSignal::new(notices),
        }
    }

    /// Replaces the design by another one.
    pub(crate) fn replace(&self, design: Design) {
        self.design.set(design);
        self.opened.update(|count| *count += 1);
    }

    /// Why there is no stage, if there is none.
    pub(crate) fn refusal(&self) -> Option<String> {
        match &*self.answer.get() {
            Answer::Refused(refusal) => Some(refusal.reason.clone()),
            Answer::Solved(_) => None,
        }
    }

    /// What the engine refuses about the field of this name.
    pub(crate) fn refused(&self, name: &str) -> String {
        match &*self.answer.get() {
            Answer::Refused(refusal)
                if refusal.field.as_deref().is_some_and(|f| is_at(f, name)) =>
            {
                refusal.reason.clone()
            }
            _ => String::new(),
        }
    }

    /// A feed coil with which there would be a stage, where the design is refused for want of it.
    pub(crate) fn offer(&self) -> Option<Feed> {
        match &*self.answer.get() {
            Answer::Refused(refusal) => refusal.offer,
            Answer::Solved(_) => None,
        }
    }
}

/// Whether a path of the design file is that of a field; most fields bear its last word.
fn is_at(path: &str, name: &str) -> bool {
    let last = path.rsplit('.').next().unwrap_or(path);
    let own = match last {
        "power_w" => "power",
        "carrier_hz" => "carrier",
        "supply_v" => "supply",
        "load" if path.starts_with("brief") => "load",
        "ambient_c" => "ambient",
        "feed" if path.starts_with("stage") => "feed_value",
        "mismatch" => "mismatch_duty",
        "per_width" => "width",
        "upper" => "upper_f",
        "on_resistance_ohm" => "on_resistance",
        "on_resistance_per_k" => "per_k",
        "junction_to_ambient_k_per_w" => "thermal",
        "fall_time_s" => "fall_time",
        "gate_charge_c" => "gate_charge",
        "diode" => "diode_v",
        "capacitance" => "capacitance_at",
        other => other,
    };
    own == name
}

fn from_address() -> (Design, Vec<String>) {
    let hash = window().location().hash().unwrap_or_default();
    if hash.len() < 2 {
        return (examples::first(), Vec::new());
    }
    let (design, mut problems) = link::read(&hash);
    if problems.is_empty() {
        return (design, problems);
    }
    problems.insert(
        0,
        "The link could not be read whole, so the starting design is shown.".to_owned(),
    );
    (examples::first(), problems)
}

/// Keeps the address's fragment at the design, and the design at a fragment edited by hand.
pub(crate) fn keep_address(app: App) {
    let pending: StoredValue<Option<TimeoutHandle>> = StoredValue::new(None);
    Effect::new(move |_| {
        let fragment = app.design.with(link::write);
        if let Some(old) = pending.get_value() {
            old.clear();
        }
        let write = move || {
            let address = format!("#{fragment}");
            if window().location().hash().is_ok_and(|now| now != address)
                && let Ok(history) = window().history()
                && history
                    .replace_state_with_url(&wasm_bindgen::JsValue::NULL, "", Some(&address))
                    .is_err()
            {
                app.notices
                    .update(|n| n.push("The address could not be kept at the design.".to_owned()));
            }
        };
        pending.set_value(set_timeout_with_handle(write, Duration::from_millis(200)).ok());
    });
    // The title says which design a tab, a bookmark or a shared link holds.
    Effect::new(move |_| {
        let title = app.design.with(|d| {
            let name = if d.name.is_empty() {
                "Evenfall".to_owned()
            } else {
                format!("{} · Evenfall", d.name)
            };
            let power = d
                .brief
                .power_w
                .map_or_else(String::new, |w| format!(" · {}", quantity::format(w, "W")));
            format!(
                "{name}{power} at {}",
                quantity::format(d.brief.carrier_hz, "Hz")
            )
        });
        document().set_title(&title);
    });
    let listener = window_event_listener(leptos::ev::hashchange, move |_| {
        let hash = window().location().hash().unwrap_or_default();
        if hash.trim_start_matches('#') != app.design.with_untracked(link::write) {
            let (design, mut problems) = link::read(&hash);
            if problems.is_empty() && hash.len() > 1 {
                app.replace(design);
            } else {
                // What is on the page may be unsaved: it stays.
                problems.insert(
                    0,
                    "The edited address is no design; the one on the page stays.".to_owned(),
                );
            }
            app.notices.set(if problems.len() > 1 {
                problems
            } else {
                Vec::new()
            });
        }
    });
    on_cleanup(move || listener.remove());
}
