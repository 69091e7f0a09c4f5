//! Sizing.
mod ideal;
pub use ideal::{Ideal, ideal};
