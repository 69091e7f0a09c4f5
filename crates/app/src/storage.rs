//! Named entries in local storage, one key each: never overwritten or deleted because they
//! could not be read.

use gloo_storage::{LocalStorage, Storage};
use leptos::prelude::window;

/// What the storage holds: entries that can be read, and names of those that cannot.
#[derive(Clone, Default, PartialEq)]
pub(crate) struct Shelved {
    /// Names with what is stored under them, in the order of names.
    pub(crate) entries: Vec<(String, String)>,
    /// Names under which something stands that cannot be read.
    pub(crate) damaged: Vec<String>,
    /// Whether the browser lets the page store nothing.
    pub(crate) blocked: bool,
}

impl Shelved {
    /// Whether an entry bears the name, a damaged one included.
    pub(crate) fn has(&self, name: &str) -> bool {
        self.text(name).is_some() || self.damaged.iter().any(|n| n == name)
    }

    /// What is stored under a name.
    pub(crate) fn text(&self, name: &str) -> Option<&String> {
        let mut entries = self.entries.iter();
        entries.find(|(n, _)| n == name).map(|(_, text)| text)
    }

    /// The name, or it with the first number that makes it one that no entry bears.
    pub(crate) fn free_name(&self, wanted: &str) -> String {
        let mut name = wanted.to_owned();
        let mut number = 2;
        while self.has(&name) {
            name = format!("{wanted} {number}");
            number += 1;
        }
        name
    }
}

/// gloo's storage panics where storage is blocked, so its presence is asked first.
fn raw() -> Option<web_sys::Storage> {
    window().local_storage().ok().flatten()
}

/// Everything under the prefix; `good` says whether a text can be read.
pub(crate) fn load(prefix: &str, good: fn(&str) -> bool) -> Shelved {
    let mut shelved = Shelved::default();
    let Some(storage) = raw() else {
        shelved.blocked = true;
        return shelved;
    };
    for index in 0..storage.length().unwrap_or(0) {
        let Some(key) = storage.key(index).ok().flatten() else {
            continue;
        };
        let Some(name) = key.strip_prefix(prefix) else {
            continue;
        };
        let text = LocalStorage::get::<String>(&key).ok();
        match text.filter(|text| good(text)) {
            // Placed in the order of names; the standard library's sort is 6 kB to send.
            Some(text) => {
                let before = |(other, _): &(String, String)| other.as_str() < name;
                let at = shelved.entries.partition_point(before);
                shelved.entries.insert(at, (name.to_owned(), text));
            }
            None => {
                let at = shelved.damaged.partition_point(|n| n.as_str() < name);
                shelved.damaged.insert(at, name.to_owned());
            }
        }
    }
    shelved
}

/// Puts an entry.
pub(crate) fn store(prefix: &str, name: &str, text: &str) -> Result<(), String> {
    if raw().is_none() {
        return Err(
            "This browser does not let the page store anything; copy the link instead.".to_owned(),
        );
    }
    LocalStorage::set(format!("{prefix}{name}"), text).map_err(|_| {
        format!("\"{name}\" could not be saved: the storage is full. Delete something that is saved here, or copy the link instead.")
    })
}

/// Deletes an entry; nothing where storage is gone.
pub(crate) fn forget(prefix: &str, name: &str) {
    if raw().is_some() {
        LocalStorage::delete(format!("{prefix}{name}"));
    }
}
