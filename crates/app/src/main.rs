//! The page of Evenfall.

fn main() {
    console_error_panic_hook::set_once();
    use leptos::prelude::*;
    leptos::mount::mount_to_body(|| leptos::view! { <h1>"Evenfall"</h1> });
}
