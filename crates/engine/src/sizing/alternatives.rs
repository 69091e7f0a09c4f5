//! The same brief with other feeds and forms: what each buys and costs, computed for this brief.

use super::solve;
use crate::answer::{Answer, Solved};
use crate::design::{Design, Feed, Form};

/// One other way to meet the brief.
#[derive(Debug, Clone, PartialEq)]
pub struct Alternative {
    /// What an engineer calls it.
    pub name: &'static str,
    /// What it is, one phrase.
    pub what: &'static str,
    /// The design, to be taken over.
    pub design: Design,
    /// Whether it is what the design already is.
    pub own: bool,
    /// Its figures, or why there are none.
    pub outcome: Result<Box<Solved>, String>,
}

/// Published values of the trap's stage: duty 0.375, shunt over trap capacitance 0.867
/// (Kaczmarczyk, IEEE Trans. Ind. Electron. 53(5), 2006; from memory).
const TRAP: (f64, f64) = (0.375, 0.867);

/// Names and descriptions, in the order of [`alternatives`].
const WAYS: [(&str, &str); 5] = [
    (
        "choke feed",
        "one switch, the supply current nearly constant",
    ),
    (
        "resonant feed, X = 0",
        "the feed coil takes part and the series branch is in resonance",
    ),
    (
        "load-independent",
        "switching stays soft while the load resistance moves",
    ),
    (
        "trap at 2 f",
        "a coil and capacitor across the switch take the second harmonic off the drain",
    ),
    (
        "differential",
        "two switches half a period apart, the load between their drains",
    ),
];

/// Every way to meet the brief of `design`, each sized by the same machinery with the same
/// device, losses and loaded Q.
pub fn alternatives(design: &Design) -> Vec<Alternative> {
    (0..WAYS.len())
        .map(|way| alternative(design, way))
        .collect()
}

/// Number of ways.
pub const COUNT: usize = WAYS.len();

/// One of them, by its place (0 to [`COUNT`], exclusive; beyond, the last).
pub fn alternative(design: &Design, way: usize) -> Alternative {
    let way = way.min(COUNT - 1);
    let mut other = design.clone();
    let stage = &mut other.stage;
    // Parts that were pinned belong to the stage that they were pinned in.
    other.fitted = crate::design::Fitted {
        drain_load: None,
        ..Default::default()
    };
    if way != 4 {
        stage.form = Form::Single;
    }
    let trapped = stage.trap_ratio.take().is_some();
    match way {
        0 => stage.feed = Feed::default(),
        1 => stage.feed = Feed::Parallel {},
        2 => stage.feed = Feed::LoadIndependent {},
        3 => {
            (stage.duty, stage.feed) = (TRAP.0, Feed::default());
            stage.trap_ratio = Some(TRAP.1);
        }
        _ => stage.form = Form::Differential,
    }
    if way != 3 && trapped {
        stage.duty = 0.5;
    }
    let own = other.stage == design.stage;
    if own {
        other.fitted = design.fitted;
    }
    let outcome = match solve(&other) {
        Answer::Solved(solved) => Ok(Box::new(solved)),
        Answer::Refused(refusal) => Err(refusal.reason),
    };
    let (name, what) = WAYS[way];
    Alternative {
        name,
        what,
        design: other,
        own,
        outcome,
    }
}
