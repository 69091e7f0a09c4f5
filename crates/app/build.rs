//! Keeps the section that tells wasm-bindgen the module's features when symbols are stripped.
#![allow(
    clippy::print_stdout,
    reason = "a build script speaks to cargo by printing"
)]

fn main() {
    if std::env::var("TARGET").is_ok_and(|target| target.starts_with("wasm32")) {
        println!("cargo::rustc-link-arg-bins=--keep-section=target_features");
    }
}
