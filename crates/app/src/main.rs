//! The page of Evenfall: installs the panic message and mounts the views.
mod brief;
mod capacitance;
mod designs;
mod device;
mod devices;
mod examples;
mod fields;
mod figures;
mod fine;
mod parts;
mod pieces;
mod plot;
mod points;
mod schematic;
mod scope;
mod shelf;
mod state;
mod storage;
mod studies;
mod switches;
mod timing;
mod topology;
mod ways;

use leptos::prelude::*;

fn main() {
    console_error_panic_hook::set_once();
    mount_to_body(page);
}

/// The whole page, from the brief down.
fn page() -> AnyView {
    let app = state::App::open();
    state::keep_address(app);
    view! {
        <header class="top">
            <h1>"Evenfall"</h1>
            <p>"Class-E power stages, sized with every loss in place."</p>
        </header>
        <main>
            <section class="left" aria-label="Brief, switch and elements">
                {brief::brief(app)}
                {device::device(app)}
                {parts::parts(app)}
            </section>
            <section class="right" aria-label="Answer">
                {figures::ledger(app)}
                {schematic::schematic(app)}
                {scope::scope(app)}
                {figures::spectrum(app)}
                {switches::switches(app)}
                {figures::watts(app)}
                {figures::figures(app)}
                {ways::ways(app)}
                {studies::studies(app)}
                {designs::designs(app)}
            </section>
        </main>
        <footer>
            <p>
                "Several times the supply stands on the drain; radio-frequency voltage burns; capacitors stay charged after the supply is off; strong fields are limited by exposure rules; transmitting needs permission. Follow your local codes and leave to licensed practice what belongs there."
            </p>
        </footer>
    }
    .into_any()
}
