//! Every way from one mode to another, each with its guard, in the order in which they are asked.
//!
//! Guards are geometric, or they are time-outs; none asks for an energy, which two coordinates know no better than the
//! barrier is high.

use super::Mode;

/// What the guards ask about, found out once per tick.
#[derive(Clone, Copy, Debug, Default)]
pub(super) struct Facts {
    /// The caller asks to stop.
    pub(super) stop: bool,
    /// Something is in doubt.
    pub(super) doubt: bool,
    /// Arming was asked for and everything is sound: at rest, on a known branch.
    pub(super) may_arm: bool,
    /// A crossing is wanted, permitted and planned from here, and the arm rests at the planned setpoint.
    pub(super) wants_over: bool,
    /// The arm is over and may neither stay nor be brought back.
    pub(super) no_way_back: bool,
    /// The survey is over and fits, and the plan injects.
    pub(super) may_inject: bool,
    /// The survey is over and fits, and the plan leans.
    pub(super) may_lean: bool,
    /// The survey is over and forbids the crossing, or it is no longer wanted.
    pub(super) not_now: bool,
    /// The mean angle is beyond the pass and on its way.
    pub(super) over: bool,
    /// Permission or what it was given for has changed.
    pub(super) withdrawn: bool,
    /// A limit of the plan is broken.
    pub(super) limit_broken: bool,
    /// The mode has lasted longer than it may.
    pub(super) too_long: bool,
    /// The arm rests on the wanted branch.
    pub(super) caught: bool,
    /// The arm rests on the branch it came from, and may try again.
    pub(super) fell_back: bool,
    /// The arm rests on the branch it came from, once too often.
    pub(super) gave_up: bool,
}

/// One way from one mode to another.
pub struct Transition {
    /// From this mode,
    pub from: Mode,
    /// to this one,
    pub to: Mode,
    /// when.
    pub when: &'static str,
    guard: Guard,
}

type Guard = fn(&Facts) -> bool;

const fn way(from: Mode, to: Mode, when: &'static str, guard: Guard) -> Transition {
    Transition {
        from,
        to,
        when,
        guard,
    }
}

use Mode::{Catch, Hold, Inject, Lean, Stopped, Survey};

const STOP: &str = "the caller asks to stop or something is in doubt";
const ABORT: &str = "permission withdrawn, limit of the plan broken, or too long";

/// Every transition there is. Of those from one mode the first whose guard holds is taken.
pub const TRANSITIONS: &[Transition] = &[
    way(Hold, Stopped, STOP, |f| f.stop || f.doubt),
    way(
        Hold,
        Stopped,
        "over, may not stay and may not be brought back",
        |f| f.no_way_back,
    ),
    way(
        Hold,
        Survey,
        "a crossing is wanted, permitted and planned from where the arm rests",
        |f| f.wants_over,
    ),
    way(Survey, Stopped, STOP, |f| f.stop || f.doubt),
    way(
        Survey,
        Hold,
        "the survey forbids the crossing, or it is no longer wanted",
        |f| f.not_now,
    ),
    way(
        Survey,
        Inject,
        "the survey fits and the plan injects",
        |f| f.may_inject,
    ),
    way(Survey, Lean, "the survey fits and the plan leans", |f| {
        f.may_lean
    }),
    way(Inject, Stopped, STOP, |f| f.stop || f.doubt),
    way(Inject, Stopped, ABORT, aborted),
    way(
        Inject,
        Catch,
        "the mean angle is beyond the pass and on its way",
        |f| f.over,
    ),
    way(Lean, Stopped, STOP, |f| f.stop || f.doubt),
    way(Lean, Stopped, ABORT, aborted),
    way(
        Lean,
        Catch,
        "the mean angle is beyond the pass and on its way",
        |f| f.over,
    ),
    way(Catch, Stopped, STOP, |f| f.stop || f.doubt),
    way(Catch, Hold, "the arm rests on the wanted branch", |f| {
        f.caught
    }),
    way(
        Catch,
        Hold,
        "the arm fell back to rest and may try again",
        |f| f.fell_back,
    ),
    way(
        Catch,
        Stopped,
        "limit of the plan broken, too long, or fell back once too often",
        |f| f.limit_broken || f.too_long || f.gave_up,
    ),
    way(
        Stopped,
        Hold,
        "the caller arms, the arm rests on a known branch and all sensors are sound",
        |f| f.may_arm && !f.stop && !f.doubt,
    ),
];

fn aborted(facts: &Facts) -> bool {
    facts.withdrawn || facts.limit_broken || facts.too_long
}

/// The mode after this tick.
pub(super) fn next(mode: Mode, facts: &Facts) -> Mode {
    TRANSITIONS
        .iter()
        .find(|way| way.from == mode && (way.guard)(facts))
        .map_or(mode, |way| way.to)
}

impl Mode {
    /// Whether there is a transition from this mode to `other`, or they are the same.
    pub fn may_become(self, other: Self) -> bool {
        self == other
            || TRANSITIONS
                .iter()
                .any(|way| way.from == self && way.to == other)
    }
}
