//! Every check: formatting, lints, documentation, tests, the page in a browser.

use crate::setup::{self, run};
use crate::{Outcome, page};
use std::process::Command;

fn cargo(arguments: &[&str]) -> Command {
    let mut command = Command::new("cargo");
    command.args(arguments);
    command
}

/// Runs them all; the first that fails ends it.
pub(crate) fn all() -> Outcome {
    run(&mut cargo(&["fmt", "--all", "--check"]))?;
    run(&mut cargo(&[
        "clippy",
        "--workspace",
        "--all-targets",
        "--",
        "-D",
        "warnings",
    ]))?;
    run(cargo(&["doc", "--workspace", "--no-deps"]).env("RUSTDOCFLAGS", "-D warnings"))?;
    run(&mut cargo(&[
        "test",
        "--workspace",
        "--exclude",
        "evenfall-browser-tests",
    ]))?;
    lint_wasm()?;
    page::build()?;
    setup::browser()?;
    run(&mut cargo(&["test", "--package", "evenfall-browser-tests"]))
}

/// Lints for wasm32 where this toolchain has the target; else the compiler's own warnings
/// are denied with the packaged toolchain, which has no clippy of its own.
fn lint_wasm() -> Outcome {
    let wasm = setup::wasm()?;
    let target = [
        "--target",
        "wasm32-unknown-unknown",
        "-p",
        "evenfall-solver",
        "-p",
        "evenfall-engine",
        "-p",
        "evenfall-app",
    ];
    if wasm == setup::Wasm::Target {
        return run(cargo(&["clippy"])
            .args(target)
            .args(["--", "-D", "warnings"]));
    }
    println!(
        "The packaged toolchain has no clippy: compiler warnings are denied for wasm32 instead."
    );
    let mut check = cargo(&["check"]);
    check.args(target).env("RUSTFLAGS", "-D warnings");
    run(wasm.dress(&mut check, &[]))
}
