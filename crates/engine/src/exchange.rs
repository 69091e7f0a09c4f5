//! Designs in and out: the design file and the link; networks: Touchstone files.

pub mod file;
pub mod link;
mod read;
pub mod touchstone;
