//! What several tests ask.

use evenfall_engine::answer::{Answer, Solved};
use evenfall_engine::design::Design;
use evenfall_engine::solve;

/// The solved stage of a design that has one.
#[track_caller]
pub(crate) fn solved(design: &Design) -> Solved {
    match solve(design) {
        Answer::Solved(solved) => solved,
        Answer::Refused(refusal) => panic!("refused: {}", refusal.reason),
    }
}

/// That a value is another one within a relative bound.
#[track_caller]
pub(crate) fn near(what: &str, value: f64, want: f64, relative: f64) {
    assert!(
        (value / want - 1.0).abs() <= relative,
        "{what}: {value} against {want}"
    );
}
