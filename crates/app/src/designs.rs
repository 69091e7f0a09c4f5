//! Designs saved by name, and the design as a file.

use crate::pieces::{button, live, press, typed};
use crate::shelf::{Kind, Shelf};
use crate::state::App;
use evenfall_engine::exchange::file;
use leptos::prelude::*;

static DESIGNS: Kind = Kind {
    tests: ["save", "undo", "design-back", "shelf-message"],
    save: "Save in this browser",
    prefix: "evenfall/1/design/",
    good: |text| file::read(text).is_ok(),
    name: |app| app.design.with_untracked(|d| d.name.clone()),
    set_name: |app, name| app.design.update(|d| name.clone_into(&mut d.name)),
    text: |app| app.design.with_untracked(file::write),
    renamed: |text, name| {
        file::read(text).map_or_else(
            |_| text.to_owned(),
            |mut design| {
                name.clone_into(&mut design.name);
                file::write(&design)
            },
        )
    },
    take: |app, text| {
        if let Ok(design) = file::read(text) {
            app.replace(design);
        }
    },
    detail: |_| String::new(),
};

/// The shelf of saved designs.
pub(crate) fn designs(app: App) -> AnyView {
    let shelf = Shelf::new(app, &DESIGNS);
    let pasted = StoredValue::new(String::new());
    let open_file = press(move || {
        let said = match file::read(&pasted.get_value()) {
            Ok(design) => {
                app.replace(design);
                "The pasted design is open.".to_owned()
            }
            Err(error) => error.to_string(),
        };
        shelf.message.set(said);
    });
    let rename = typed(move |name| app.design.update(|d| d.name = name));
    view! {
        <section class="card">
            <h2>"Designs"</h2>
            <p class="field">
                <label for="field-name">"Name of this design"</label>
                <input id="field-name" data-test="field-name" type="text" maxlength="80" autocomplete="off"
                    prop:value=live(move || app.design.with(|d| d.name.clone()))
                    on:input=rename/>
            </p>
            {shelf.buttons()}
            {shelf.list()}
            <details>
                <summary>"This design as a file"</summary>
                <textarea readonly rows="8" aria-label="Design file" data-test="file">{live(move || app.design.with(file::write))}</textarea>
                <textarea rows="4" aria-label="Paste a design file" placeholder="Paste a design file here" on:input=typed(move |text| pasted.set_value(text))></textarea>
                <p class="buttons">{button("", "Open the pasted file", open_file)}</p>
            </details>
        </section>
    }
    .into_any()
}
