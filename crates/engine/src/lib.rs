//! The engine of Evenfall: from a brief to a sized class-E power stage.
//!
//! Plain data in, plain data out; SI units and `f64` throughout; no browser, no clock,
//! no input or output. The same design gives the same digits natively and in WebAssembly.
//!
//! Layers, each knowing only those above it:
//! [`quantity`] → [`circuit`] → [`dynamics`] → [`orbit`] → [`design`] → [`stage`] →
//! [`sizing`] → [`exchange`]. Beside the stage, on the circuit alone: [`ac`] → [`network`];
//! [`parts`] knows [`quantity`] alone.
#![forbid(unsafe_code)]

pub mod ac;
pub mod answer;
pub mod design;
pub mod exchange;
pub mod network;
pub mod parts;
pub mod quantity;
pub mod sizing;
pub mod stage;
pub mod study;

pub use evenfall_solver::{charge, circuit, dynamics, orbit};
pub use sizing::solve;
