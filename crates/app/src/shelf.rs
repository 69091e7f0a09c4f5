//! What is saved by name in this browser: save, open, copy, rename, delete, undo. Designs and
//! devices are kept alike.

use crate::pieces::{Press, button, line, list, live, named_button, press, when};
use crate::state::App;
use crate::storage::{Shelved, forget, load, store};
use leptos::prelude::*;

/// A kind of thing that is kept, and how it and its text become one another.
pub(crate) struct Kind {
    /// Test ids of saving, undoing a deletion, going back, and the message.
    pub(crate) tests: [&'static str; 4],
    /// Words on the button that saves.
    pub(crate) save: &'static str,
    /// What stands before the names in storage; the version is in it.
    pub(crate) prefix: &'static str,
    /// Whether a text can be read.
    pub(crate) good: fn(&str) -> bool,
    /// The name of the one on the page.
    pub(crate) name: fn(App) -> String,
    /// Gives the one on the page a name.
    pub(crate) set_name: fn(App, &str),
    /// The text of the one on the page.
    pub(crate) text: fn(App) -> String,
    /// A text with another name in it.
    pub(crate) renamed: fn(&str, &str) -> String,
    /// Puts a text on the page.
    pub(crate) take: fn(App, &str),
    /// What a line of the list says beside the name.
    pub(crate) detail: fn(&str) -> String,
}

/// A shelf as the page holds it.
#[derive(Clone, Copy)]
pub(crate) struct Shelf {
    app: App,
    kind: &'static Kind,
    shelved: RwSignal<Shelved>,
    /// What the person is told.
    pub(crate) message: RwSignal<String>,
    /// The last one deleted.
    removed: RwSignal<Option<(String, String)>>,
    /// What stood on the page before the last one was opened.
    before: RwSignal<Option<String>>,
    /// What this tab last read from or wrote to storage: an entry that has changed since is
    /// somebody else's and is not replaced.
    known: StoredValue<Option<(String, String)>>,
}

impl Shelf {
    /// The shelf of a kind, read from storage and kept at what other tabs write.
    pub(crate) fn new(app: App, kind: &'static Kind) -> Self {
        let shelf = Self {
            app,
            kind,
            shelved: RwSignal::new(load(kind.prefix, kind.good)),
            message: RwSignal::new(String::new()),
            removed: RwSignal::new(None),
            before: RwSignal::new(None),
            known: StoredValue::new(None),
        };
        let listener = window_event_listener(leptos::ev::storage, move |_| shelf.reload());
        on_cleanup(move || listener.remove());
        shelf
    }

    fn reload(self) {
        self.shelved.set(load(self.kind.prefix, self.kind.good));
    }

    fn report(self, outcome: Result<(), String>, done: String) {
        self.message.set(outcome.err().unwrap_or(done));
        self.reload();
    }

    /// Puts a text under a name.
    fn put(self, name: &str, text: &str) -> Result<(), String> {
        store(self.kind.prefix, name, text)
    }

    fn save(self) {
        let wanted = (self.kind.name)(self.app).trim().to_owned();
        let wanted = if wanted.is_empty() {
            "unnamed".to_owned()
        } else {
            wanted
        };
        self.reload();
        let now = self.shelved.get_untracked();
        let ours = now.text(&wanted).is_some_and(|text| {
            self.known
                .with_value(|k| k.as_ref().is_some_and(|(n, t)| *n == wanted && t == text))
        });
        let name = if ours {
            wanted.clone()
        } else {
            now.free_name(&wanted)
        };
        let text = (self.kind.renamed)(&(self.kind.text)(self.app), &name);
        let outcome = self.put(&name, &text);
        if outcome.is_ok() {
            (self.kind.set_name)(self.app, &name);
            self.known.set_value(Some((name.clone(), text)));
        }
        let done = if name == wanted {
            format!("Saved as \"{name}\".")
        } else {
            format!("There was another \"{wanted}\" already, which stays: saved as \"{name}\".")
        };
        self.report(outcome, done);
    }

    /// Puts a text under its name, or under a free one beside it; the name that it has now.
    pub(crate) fn add(self, wanted: &str, text: &str) -> Result<String, String> {
        self.reload();
        let name = self.shelved.with_untracked(|s| s.free_name(wanted));
        let outcome = self.put(&name, &(self.kind.renamed)(text, &name));
        self.reload();
        outcome.map(|()| name)
    }

    fn open(self, name: &str, text: &str) {
        self.known
            .set_value(Some((name.to_owned(), text.to_owned())));
        self.take(name, text);
    }

    /// Puts a text on the page; the one that stood there can be had back.
    fn take(self, name: &str, text: &str) {
        let before = (self.kind.text)(self.app);
        self.before.set(Some(before));
        self.message.set(format!("\"{name}\" is on the page."));
        (self.kind.take)(self.app, text);
    }

    fn copy(self, name: &str, text: &str) {
        match self.add(name, text) {
            Ok(name) => self.message.set(format!("Copied to \"{name}\".")),
            Err(problem) => self.message.set(problem),
        }
    }

    fn rename(self, old: &str, text: &str) {
        let wanted = (self.kind.name)(self.app).trim().to_owned();
        if wanted.is_empty() || wanted == old {
            self.message
                .set("Type the new name in the name field above first.".to_owned());
            return;
        }
        match self.add(&wanted, text) {
            Ok(name) => {
                forget(self.kind.prefix, old);
                self.report(Ok(()), format!("\"{old}\" is now \"{name}\"."));
            }
            Err(problem) => self.message.set(problem),
        }
    }

    fn remove(self, name: &str, text: &str) {
        forget(self.kind.prefix, name);
        self.removed.set(Some((name.to_owned(), text.to_owned())));
        self.report(Ok(()), format!("\"{name}\" was deleted."));
    }

    fn undo(self) {
        let Some((name, text)) = self.removed.get_untracked() else {
            return;
        };
        match self.add(&name, &text) {
            Ok(name) => {
                self.removed.set(None);
                self.message.set(format!("\"{name}\" is back."));
            }
            Err(problem) => self.message.set(problem),
        }
    }

    fn go_back(self) {
        if let Some(text) = self.before.get_untracked() {
            self.before.set(None);
            self.message.set("The one before is back.".to_owned());
            (self.kind.take)(self.app, &text);
        }
    }

    /// A line of what comes with the page: it can be taken, not changed.
    pub(crate) fn sample(self, name: String, text: &'static str, detail: String) -> AnyView {
        let own = name.clone();
        let take = press(move || self.take(&own, text));
        view! { <li>{opener(name, detail, take)}</li> }.into_any()
    }

    fn entry(self, name: String, text: String) -> AnyView {
        let act = |what: &'static str, act: fn(Self, &str, &str)| {
            let (own, text) = (name.clone(), text.clone());
            let said = Some(format!("{what} {name}"));
            named_button("", what, said, press(move || act(self, &own, &text)))
        };
        let buttons = vec![
            act("copy", Self::copy),
            act("rename", Self::rename),
            act("delete", Self::remove),
        ];
        let detail = (self.kind.detail)(&text);
        let (own, own_text) = (name.clone(), text);
        let open = press(move || self.open(&own, &own_text));
        view! { <li>{opener(name, detail, open)}{buttons}</li> }.into_any()
    }

    /// The button that saves, and the way back from a deletion.
    pub(crate) fn buttons(self) -> AnyView {
        let [save, undo, back, message] = self.kind.tests;
        let undelete = when(
            move || self.removed.get().is_some(),
            move || button(undo, "Undo delete", press(move || self.undo())),
        );
        let before = when(
            move || self.before.get().is_some(),
            move || {
                let words = "Back to the one before";
                button(back, words, press(move || self.go_back()))
            },
        );
        let blocked = when(
            move || self.shelved.get().blocked,
            || {
                view! { <p class="problem">"This browser blocks storage: what is on the page lives in its link alone."</p> }
                    .into_any()
            },
        );
        view! {
            <p class="buttons">
                {button(save, self.kind.save, press(move || self.save()))}
                {undelete}
                {before}
            </p>
            <p role="status" class="origin" data-test=message>{live(move || self.message.get())}</p>
            {blocked}
        }
        .into_any()
    }

    /// What is saved.
    pub(crate) fn list(self) -> AnyView {
        let entries = list(move || {
            let entries = self.shelved.get().entries;
            entries
                .into_iter()
                .map(|(name, text)| self.entry(name, text))
                .collect()
        });
        let damaged = list(move || {
            let damaged = self.shelved.get().damaged;
            let say =
                |name| format!("\"{name}\" is stored but cannot be read; it is left as it is.");
            damaged
                .into_iter()
                .map(|name| line("problem", say(name)))
                .collect()
        });
        view! {
            <ul class="shelf">{entries}</ul>
            <ul class="plain">{damaged}</ul>
        }
        .into_any()
    }

    /// Every text that is saved.
    pub(crate) fn texts(self) -> Vec<String> {
        let entries = self.shelved.get().entries;
        entries.into_iter().map(|(_, text)| text).collect()
    }
}

/// The button that puts a kept thing on the page.
fn opener(name: String, detail: String, open: Press) -> AnyView {
    view! { <button type="button" class="open" on:click=open><span>{name}</span><small>{detail}</small></button> }
        .into_any()
}
