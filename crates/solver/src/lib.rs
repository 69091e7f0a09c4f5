//! The solver under Evenfall's engine: a circuit of resistors, coils, capacitors, sources,
//! switches and diodes, its state equations, and its periodic steady state.
//!
//! A crate of its own because it alone is compiled for speed; what stands on it is compiled
//! for size, since it is sent to a browser. Plain data in and out; SI units; no unsafe.
//!
//! [`charge`] → [`circuit`] → [`dynamics`] → [`orbit`].
#![forbid(unsafe_code)]

pub mod charge;
pub mod circuit;
pub mod dynamics;
pub mod orbit;
