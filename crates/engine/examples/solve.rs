//! Design file(s) on standard input, results on standard output.
//!
//! One design gives one result object, an array of them an array of results. A refused
//! design is a result too; input that is no design file ends with status 2.
#![allow(
    clippy::print_stdout,
    clippy::print_stderr,
    reason = "a command line program"
)]

use evenfall_engine::{exchange::file, solve};
use std::io::Read;
use std::process::ExitCode;

fn main() -> ExitCode {
    let mut text = String::new();
    if let Err(error) = std::io::stdin().read_to_string(&mut text) {
        eprintln!("standard input: {error}");
        return ExitCode::from(2);
    }
    let results = match file::read_many(&text) {
        Ok((designs, many)) => {
            let answers: Vec<_> = designs.iter().map(solve).collect();
            if many {
                serde_json::to_string_pretty(&answers)
            } else {
                serde_json::to_string_pretty(&answers[0])
            }
        }
        Err(error) => {
            eprintln!("{error}");
            return ExitCode::from(2);
        }
    };
    match results {
        Ok(text) => {
            println!("{text}");
            ExitCode::SUCCESS
        }
        Err(error) => {
            eprintln!("the results could not be written: {error}");
            ExitCode::FAILURE
        }
    }
}
