//! Each switch by itself: the two sides of a differential stage, the members of a stack.

use crate::figures::{of_last, tidy};
use crate::pieces::{list, live, number, row, when};
use crate::state::App;
use evenfall_engine::answer::Solved;
use evenfall_engine::quantity;
use leptos::prelude::*;

fn sides(_: App, s: &Solved) -> Vec<AnyView> {
    let volt = |v: f64| number(quantity::format(tidy(v, s.figures.drain_peak_v), "V"));
    let names = ["first side", "second side"];
    let line = |(name, side): (&str, &evenfall_engine::stage::SideFigures)| {
        let cells = vec![
            volt(side.drain_peak_v),
            volt(side.turn_on_v),
            number(quantity::format(side.switch_peak_a, "A")),
            number(quantity::format(side.switch_w, "W")),
        ];
        row("", None, name.to_owned(), cells)
    };
    names.into_iter().zip(&s.detail.sides).map(line).collect()
}

fn stack(_: App, s: &Solved) -> Vec<AnyView> {
    let volt = |v: f64| number(quantity::format(v, "V"));
    let supplies = std::iter::once(None).chain(s.values.gate_supplies_v.iter().map(Some));
    let lines = s.detail.stack.iter().zip(supplies).enumerate();
    lines
        .map(|(k, (stress, supply))| {
            let name = if k == 0 {
                "switch 1, lowest".to_owned()
            } else {
                format!("switch {}", k + 1)
            };
            let cells = vec![
                volt(stress.drain_source_v),
                volt(stress.drain_gate_v),
                supply.map_or_else(|| number("driven".to_owned()), |v| volt(*v)),
            ];
            row("", None, name, cells)
        })
        .collect()
}

/// What two sides leave over in common.
fn common(_: App, s: &Solved) -> String {
    let at = |list: &[f64], order: usize| list.get(order).copied().unwrap_or(0.0);
    let leak = s
        .harmonics_dbc
        .first()
        .copied()
        .unwrap_or(f64::NEG_INFINITY);
    let leak = if leak < -150.0 {
        "the second harmonic cancels in the load".to_owned()
    } else {
        format!("{leak:.1} dBc of the second harmonic leak into the load")
    };
    format!(
        "The drains' mean voltage carries {} at the second harmonic and the supply {}; {leak}.",
        quantity::format(at(&s.detail.common_mode_v, 2), "V"),
        quantity::format(
            tidy(
                at(&s.detail.supply_harmonics_a, 2),
                s.figures.supply_current_a
            ),
            "A"
        )
    )
}

/// The card of the switches, where there is more than one.
pub(crate) fn switches(app: App) -> AnyView {
    let several =
        move |pick: fn(&Solved) -> bool| app.last.with(|s| s.as_ref().is_some_and(|s| pick(s)));
    let pair = when(
        move || several(|s| !s.detail.sides.is_empty()),
        move || {
            view! {
                <div class="scroll"><table data-test="sides">
                    <thead><tr><th scope="col">"Side"</th><th scope="col" class="number">"Drain peak"</th><th scope="col" class="number">"At turn-on"</th><th scope="col" class="number">"Peak current"</th><th scope="col" class="number">"Conduction"</th></tr></thead>
                    <tbody>{list(move || of_last(app, sides))}</tbody>
                </table></div>
                <p class="origin" data-test="common">{live(move || of_last(app, common))}</p>
            }
            .into_any()
        },
    );
    let stacked = when(
        move || several(|s| !s.detail.stack.is_empty()),
        move || {
            view! {
                <div class="scroll"><table data-test="stack">
                    <thead><tr><th scope="col">"Stack"</th><th scope="col" class="number">"Drain to source"</th><th scope="col" class="number">"Drain to gate"</th><th scope="col" class="number">"Gate supply"</th></tr></thead>
                    <tbody>{list(move || of_last(app, stack))}</tbody>
                </table></div>
                <p class="origin">"Peaks over the period. An upper gate stands at its supply; the switch lets go where its lower node comes within a threshold of that."</p>
            }
            .into_any()
        },
    );
    when(
        move || several(|s| !s.detail.is_empty()),
        move || {
            view! {
                <section class="card">
                    <h2>"Switch by switch"</h2>
                    {pair.clone()}
                    {stacked.clone()}
                </section>
            }
            .into_any()
        },
    )
    .into_any()
}
