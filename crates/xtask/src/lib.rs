//! What the commands share with the browser tests.

pub mod site;
