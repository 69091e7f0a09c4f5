//! Serving the finished page to the person who built it.

use crate::{Outcome, setup};
use xtask::site::Site;

/// The port that is tried first.
const PORT: u16 = 8460;

/// Serves dist/ until interrupted and prints the address.
pub(crate) fn forever() -> Outcome {
    let site = Site::of(setup::root().join("dist"), PORT)
        .map_err(|e| format!("no port to serve on: {e}"))?;
    println!("Evenfall is at {}  (Ctrl-C ends it)", site.address);
    loop {
        std::thread::park();
    }
}
