//! Designs saved by name in local storage, and the design as a file.
//!
//! One entry a design. An entry that cannot be read is reported and left as it is.

use crate::state::App;
use evenfall_engine::design::Design;
use evenfall_engine::exchange::file;
use gloo_storage::{LocalStorage, Storage};
use leptos::prelude::*;

const PREFIX: &str = "evenfall/1/design/";

/// What the storage holds: names that can be read, and names that cannot.
#[derive(Clone, Default, PartialEq)]
struct Shelved {
    designs: Vec<(String, Design)>,
    damaged: Vec<String>,
    blocked: bool,
}

/// gloo's storage panics where storage is blocked, so its presence is asked first.
fn available() -> bool {
    window().local_storage().ok().flatten().is_some()
}

fn load() -> Shelved {
    let Some(storage) = window().local_storage().ok().flatten() else {
        return Shelved {
            blocked: true,
            ..Shelved::default()
        };
    };
    let mut shelved = Shelved::default();
    for index in 0..storage.length().unwrap_or(0) {
        let Some(key) = storage.key(index).ok().flatten() else {
            continue;
        };
        let Some(name) = key.strip_prefix(PREFIX) else {
            continue;
        };
        match LocalStorage::get::<String>(&key)
            .ok()
            .and_then(|text| file::read(&text).ok())
        {
            // Placed in the order of names; the standard library's sort is 6 kB to send.
            Some(design) => {
                let at = shelved
                    .designs
                    .partition_point(|(other, _)| other.as_str() < name);
                shelved.designs.insert(at, (name.to_owned(), design));
            }
            None => {
                let at = shelved
                    .damaged
                    .partition_point(|other| other.as_str() < name);
                shelved.damaged.insert(at, name.to_owned());
            }
        }
    }
    shelved
}

fn store(name: &str, design: &Design) -> Result<(), String> {
    if !available() {
        return Err(
            "This browser does not let the page store anything; copy the link instead.".to_owned(),
        );
    }
    LocalStorage::set(format!("{PREFIX}{name}"), file::write(design)).map_err(|_| {
        format!("\"{name}\" could not be saved: the storage is full. Delete a design or copy the link instead.")
    })
}

/// Deletes an entry; nothing where storage is gone.
fn forget(name: &str) {
    if available() {
        LocalStorage::delete(format!("{PREFIX}{name}"));
    }
}

/// A name that no entry bears, damaged ones included.
fn free_name(wanted: &str, shelved: &Shelved) -> String {
    let taken = |name: &str| {
        shelved.designs.iter().any(|(n, _)| n == name) || shelved.damaged.iter().any(|n| n == name)
    };
    let mut name = wanted.to_owned();
    let mut number = 2;
    while taken(&name) {
        name = format!("{wanted} {number}");
        number += 1;
    }
    name
}

/// The shelf of saved designs.
#[component]
pub(crate) fn Shelf(app: App) -> impl IntoView {
    let shelved = RwSignal::new(load());
    let message: RwSignal<Option<String>> = RwSignal::new(None);
    let removed: RwSignal<Option<(String, Design)>> = RwSignal::new(None);
    let listener = window_event_listener(leptos::ev::storage, move |_| shelved.set(load()));
    on_cleanup(move || listener.remove());
    let report = move |outcome: Result<(), String>, done: String| {
        message.set(Some(outcome.map_or_else(|problem| problem, |()| done)));
        shelved.set(load());
    };
    // What this tab last read from or wrote to storage: an entry that has changed since is
    // somebody else's and is not replaced.
    let known: StoredValue<Option<(String, Design)>> = StoredValue::new(None);
    let save = move |_| {
        let mut design = app.design.get_untracked();
        let wanted = if design.name.trim().is_empty() {
            "unnamed".to_owned()
        } else {
            design.name.trim().to_owned()
        };
        let now = load();
        let stored = now
            .designs
            .iter()
            .find(|(name, _)| *name == wanted)
            .cloned();
        let ours = stored.is_none() || stored == known.get_value();
        let name = if ours && !now.damaged.contains(&wanted) {
            wanted.clone()
        } else {
            free_name(&wanted, &now)
        };
        design.name.clone_from(&name);
        let outcome = store(&name, &design);
        if outcome.is_ok() {
            known.set_value(Some((name.clone(), design.clone())));
            app.design.set(design);
        }
        let done = if name == wanted {
            format!("Saved as \"{name}\".")
        } else {
            format!("There was another \"{wanted}\" already, which stays: saved as \"{name}\".")
        };
        report(outcome, done);
    };
    let remove = move |name: String, design: Design| {
        forget(&name);
        removed.set(Some((name.clone(), design)));
        report(Ok(()), format!("\"{name}\" was deleted."));
    };
    let undo = move |_| {
        if let Some((name, design)) = removed.get_untracked() {
            let name = free_name(&name, &shelved.get_untracked());
            let outcome = store(&name, &design);
            if outcome.is_ok() {
                removed.set(None);
            }
            report(outcome, format!("\"{name}\" is back."));
        }
    };
    let duplicate = move |name: String, design: Design| {
        let name = free_name(&name, &shelved.get_untracked());
        let design = Design {
            name: name.clone(),
            ..design
        };
        report(store(&name, &design), format!("Copied to \"{name}\"."));
    };
    let rename = move |old: String, design: Design| {
        let wanted = app.design.with_untracked(|d| d.name.trim().to_owned());
        if wanted.is_empty() || wanted == old {
            message.set(Some(
                "Type the new name in the name field above first.".to_owned(),
            ));
            return;
        }
        let name = free_name(&wanted, &shelved.get_untracked());
        let outcome = store(
            &name,
            &Design {
                name: name.clone(),
                ..design
            },
        );
        if outcome.is_ok() {
            forget(&old);
        }
        report(outcome, format!("\"{old}\" is now \"{name}\"."));
    };
    let pasted = RwSignal::new(String::new());
    let open_file = move |_| match file::read(&pasted.get_untracked()) {
        Ok(design) => {
            app.replace(design);
            message.set(Some("The pasted design is open.".to_owned()));
        }
        Err(error) => message.set(Some(error.to_string())),
    };
    view! {
        <section class="card">
            <h2>"Designs"</h2>
            <p class="field">
                <label for="field-name">"Name of this design"</label>
                <input id="field-name" data-test="field-name" type="text" maxlength="80" autocomplete="off"
                    prop:value=move || app.design.with(|d| d.name.clone())
                    on:input:target=move |e| app.design.update(|d| d.name = e.target().value())/>
            </p>
            <p class="buttons">
                <button type="button" data-test="save" on:click=save>"Save in this browser"</button>
                <Show when=move || removed.get().is_some()>
                    <button type="button" data-test="undo" on:click=undo>"Undo delete"</button>
                </Show>
            </p>
            <p role="status" class="readout" data-test="shelf-message">{move || message.get()}</p>
            {move || shelved.get().blocked.then(|| view! { <p class="problem">"This browser blocks storage: designs live in the link alone."</p> })}
            <ul class="shelf">
                {move || shelved.get().designs.into_iter().map(|(name, design)| {
                    let (d1, d2, d3, d4) = (design.clone(), design.clone(), design.clone(), design);
                    let (n1, n2, n3, n4) = (name.clone(), name.clone(), name.clone(), name.clone());
                    view! {
                        <li>
                            <button type="button" class="open" on:click=move |_| { known.set_value(Some((n4.clone(), d1.clone()))); app.replace(d1.clone()); }>{name}</button>
                            <button type="button" on:click=move |_| duplicate(n1.clone(), d2.clone())>"copy"</button>
                            <button type="button" on:click=move |_| rename(n2.clone(), d3.clone())>"rename"</button>
                            <button type="button" on:click=move |_| remove(n3.clone(), d4.clone())>"delete"</button>
                        </li>
                    }
                }).collect_view()}
            </ul>
            <ul class="plain">
                {move || shelved.get().damaged.into_iter().map(|name| view! { <li class="problem">{format!("\"{name}\" is stored but cannot be read; it is left as it is.")}</li> }).collect_view()}
            </ul>
            <details>
                <summary>"This design as a file"</summary>
                <textarea readonly rows="8" aria-label="Design file" data-test="file">{move || app.design.with(file::write)}</textarea>
                <textarea rows="4" aria-label="Paste a design file" placeholder="Paste a design file here" on:input:target=move |e| pasted.set(e.target().value())></textarea>
                <p class="buttons"><button type="button" on:click=open_file>"Open the pasted file"</button></p>
            </details>
        </section>
    }
}
