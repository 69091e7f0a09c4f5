//! Writing version 1.1.

use super::{Fault, Point, Touchstone, TouchstoneError};
use crate::quantity::format_exact;
use std::fmt::Write as _;

impl Touchstone {
    /// The file's text (.s1p or .s2p, version 1.1): hertz, real and imaginary parts, every
    /// number so that it reads back the same. Each line of `comment` becomes a comment.
    ///
    /// # Errors
    /// Version 1.1 has one reference for both ports: [`Fault::Reference`] where they differ.
    pub fn write(&self, comment: &str) -> Result<String, TouchstoneError> {
        let ohm = self.reference_ohm();
        if self.ports() == 2 && ohm[0] != ohm[1] {
            let fault = Fault::Reference { ohm };
            return Err(TouchstoneError { line: 0, fault });
        }
        let mut text = String::new();
        for line in comment.split(['\n', '\r']).filter(|l| !l.is_empty()) {
            let _ = writeln!(text, "! {line}");
        }
        let _ = writeln!(text, "# Hz S RI R {}", format_exact(ohm[0]));
        for &Point { hz, s } in self.points() {
            text.push_str(&format_exact(hz));
            let order = [s[0][0], s[1][0], s[0][1], s[1][1]];
            for c in &order[..self.ports() * self.ports()] {
                let _ = write!(text, " {} {}", format_exact(c.re), format_exact(c.im));
            }
            text.push('\n');
        }
        Ok(text)
    }
}
