//! Other ways to meet the brief, side by side, each sized for it.

use crate::figures::{decibels, per_cent};
use crate::pieces::{button, list, live, named_button, number, press};
use crate::state::App;
use evenfall_engine::design::Design;
use evenfall_engine::quantity;
use evenfall_engine::sizing::{self, Alternative};
use leptos::prelude::*;
use std::sync::Arc;
use std::time::Duration;

/// One way a turn, so that the page breathes between them.
fn next(app: App, design: Arc<Design>, ways: RwSignal<Vec<Arc<Alternative>>>, way: usize) {
    if way == sizing::ALTERNATIVES || app.design.with_untracked(|d| *d != *design) {
        return;
    }
    let found = Arc::new(sizing::alternative(&design, way));
    ways.update(|all| all.push(found));
    set_timeout(move || next(app, design, ways, way + 1), Duration::ZERO);
}

fn line(app: App, way: &Alternative) -> AnyView {
    let name = format!("{}{}", way.name, if way.own { " (this stage)" } else { "" });
    let head = view! { <b>{name}</b><span class="beside">{way.what}</span> }.into_any();
    let solved = match &way.outcome {
        Ok(solved) => solved,
        Err(reason) => {
            let reason = format!("None: {reason}.");
            return view! { <tr><th scope="row">{head}</th><td colspan="7">{reason}</td></tr> }
                .into_any();
        }
    };
    let (f, v) = (solved.figures, &solved.values);
    let dbc = |k: usize| {
        let dbc = solved
            .harmonics_dbc
            .get(k)
            .copied()
            .unwrap_or(f64::NEG_INFINITY);
        number(decibels(dbc, 1))
    };
    let design = way.design.clone();
    let take = press(move || app.replace(design.clone()));
    let take = (!way.own).then(|| {
        let name = format!("Take over: {}", way.name);
        named_button("take-way", "take over", Some(name), take)
    });
    let cells: Vec<AnyView> = vec![
        number(per_cent(f.drain_efficiency)),
        number(quantity::format(f.drain_peak_v, "V")),
        number(quantity::format(f.switch_peak_a, "A")),
        number(quantity::format(v.drain_load.r_ohm, "Ω")),
        dbc(0),
        dbc(1),
        view! { <td>{take}</td> }.into_any(),
    ];
    view! { <tr><th scope="row">{head}</th>{cells}</tr> }.into_any()
}

/// The card that compares them.
pub(crate) fn ways(app: App) -> AnyView {
    let ways: RwSignal<Vec<Arc<Alternative>>> = RwSignal::new(Vec::new());
    let of = RwSignal::new(Arc::new(app.design.get_untracked()));
    let compare = press(move || {
        let design = Arc::new(app.design.get_untracked());
        ways.set(Vec::new());
        of.set(design.clone());
        next(app, design, ways, 0);
    });
    let rows = list(move || ways.with(|all| all.iter().map(|w| line(app, w)).collect()));
    let stale = live(move || {
        let old = !ways.with(Vec::is_empty) && app.design.with(|d| *d != *of.get());
        if old {
            "The design has changed since; compare again."
        } else {
            ""
        }
        .to_owned()
    });
    view! {
        <section class="card">
            <h2>"Other ways to meet this brief"</h2>
            <p class="origin">"Each is sized for the same brief, device and losses; nothing here comes from a table of the books."</p>
            <p class="buttons">{button("compare-ways", "Compare", compare)}<span class="bad" role="status">{stale}</span></p>
            <div class="scroll"><table class="ways" data-test="ways">
                <thead><tr><th scope="col">"Way"</th><th scope="col" class="number">"Efficiency"</th><th scope="col" class="number">"Drain peak"</th><th scope="col" class="number">"Peak current"</th><th scope="col" class="number">"Load R"</th><th scope="col" class="number">"2nd, dBc"</th><th scope="col" class="number">"3rd, dBc"</th><th></th></tr></thead>
                <tbody>{rows}</tbody>
            </table></div>
        </section>
    }
    .into_any()
}
