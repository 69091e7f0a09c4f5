//! The project's commands: `cargo xtask serve`, `cargo xtask build`, `cargo xtask test`.
#![allow(
    clippy::print_stdout,
    clippy::print_stderr,
    reason = "a command line tool speaks by printing"
)]

mod checks;
mod offline;
mod page;
mod serve;
mod setup;

use std::process::ExitCode;

/// What a step says when it fails.
type Outcome = Result<(), String>;

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    let outcome = match arguments.first().map(String::as_str) {
        Some("serve") => page::build().and_then(|()| serve::forever()),
        Some("build") => page::build(),
        Some("test") => checks::all(),
        _ => Err("use: cargo xtask serve | build | test".to_owned()),
    };
    match outcome {
        Ok(()) => ExitCode::SUCCESS,
        Err(reason) => {
            eprintln!("xtask: {reason}");
            ExitCode::FAILURE
        }
    }
}
