//! Set-up, serve and test.

fn main() {}
