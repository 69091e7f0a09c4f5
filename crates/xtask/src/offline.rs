//! The service worker: a list of every file of the page, named after their contents.

use crate::{Outcome, setup};
use std::collections::hash_map::DefaultHasher;
use std::hash::{Hash, Hasher};
use std::path::Path;

/// Writes dist/sw.js from web/sw.js.
pub(crate) fn write_service_worker(dist: &Path) -> Outcome {
    let say = |error: std::io::Error| format!("service worker: {error}");
    let mut names = Vec::new();
    for entry in std::fs::read_dir(dist).map_err(say)? {
        let name = entry
            .map_err(say)?
            .file_name()
            .to_string_lossy()
            .into_owned();
        if name != "sw.js" {
            names.push(name);
        }
    }
    names.sort();
    let mut hasher = DefaultHasher::new();
    for name in &names {
        name.hash(&mut hasher);
        std::fs::read(dist.join(name))
            .map_err(say)?
            .hash(&mut hasher);
    }
    let files: Vec<String> = names
        .iter()
        .map(|n| {
            if n == "index.html" {
                "\"./\"".to_owned()
            } else {
                format!("{n:?}")
            }
        })
        .collect();
    let template = std::fs::read_to_string(setup::root().join("web/sw.js")).map_err(say)?;
    let script = template
        .replace(
            "\"EVENFALL_VERSION\"",
            &format!("\"{:016x}\"", hasher.finish()),
        )
        .replace("[\"EVENFALL_FILES\"]", &format!("[{}]", files.join(", ")));
    std::fs::write(dist.join("sw.js"), script).map_err(say)
}
