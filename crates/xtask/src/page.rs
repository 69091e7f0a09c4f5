//! Building the page into dist/.

use crate::{Outcome, offline, setup};
use std::process::Command;

/// Builds the release page.
pub(crate) fn build() -> Outcome {
    let wasm = setup::wasm()?;
    let tools = setup::page_tools()?;
    setup::run(
        wasm.dress(
            Command::new("trunk").args(["build", "--release", "--offline"]),
            &tools,
        )
        .env_remove("NO_COLOR"),
    )?;
    offline::write_service_worker(&setup::root().join("dist"))
}
