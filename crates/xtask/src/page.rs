//! Building the page into dist/.

use crate::{Outcome, offline, setup};
use std::process::Command;

/// Builds the release page.
pub(crate) fn build() -> Outcome {
    let wasm = setup::wasm()?;
    let tools = setup::page_tools()?;
    // Trunk builds offline, so that it fetches no tools of its own; whatever cargo still has
    // to fetch (with the packaged toolchain the standard library's crates) comes first.
    let mut compile = Command::new("cargo");
    compile.args([
        "build",
        "--release",
        "--target",
        "wasm32-unknown-unknown",
        "--package",
        "evenfall-app",
    ]);
    setup::run(wasm.dress(&mut compile, &tools))?;
    setup::run(
        wasm.dress(
            Command::new("trunk").args(["build", "--release", "--offline"]),
            &tools,
        )
        .env_remove("NO_COLOR"),
    )?;
    offline::write_service_worker(&setup::root().join("dist"))
}
