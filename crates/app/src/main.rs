//! The page of Evenfall: installs the panic message and mounts the views.
#![allow(
    unreachable_pub,
    reason = "the component macro makes its property types public"
)]

mod brief;
mod examples;
mod fields;
mod figures;
mod fine;
mod parts;
mod schematic;
mod scope;
mod shelf;
mod state;
mod studies;
mod timing;

use leptos::prelude::*;

fn main() {
    console_error_panic_hook::set_once();
    mount_to_body(Page);
}

/// The whole page, from the brief down.
#[component]
fn Page() -> impl IntoView {
    let app = state::App::open();
    state::keep_address(app);
    view! {
        <header class="top">
            <h1>"Evenfall"</h1>
            <p>"Class-E power stages, sized with every loss in place."</p>
        </header>
        <main>
            <section class="left" aria-label="Brief and elements">
                <brief::Brief app/>
                <parts::Parts app/>
            </section>
            <section class="right" aria-label="Answer">
                <figures::Ledger app/>
                <schematic::Schematic app/>
                <scope::Scope app/>
                <figures::Spectrum app/>
                <figures::Watts app/>
                <figures::Figures app/>
                <studies::Studies app/>
                <shelf::Shelf app/>
            </section>
        </main>
        <footer>
            <p>
                "Several times the supply stands on the drain; radio-frequency voltage burns; capacitors stay charged after the supply is off; strong fields are limited by exposure rules; transmitting needs permission. Follow your local codes and leave to licensed practice what belongs there."
            </p>
        </footer>
    }
}
