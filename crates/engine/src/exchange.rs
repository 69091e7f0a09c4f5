//! Designs in and out: the design file and the link.

pub mod file;
pub mod link;
mod read;
