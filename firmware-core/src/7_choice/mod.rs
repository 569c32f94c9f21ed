//! The choice of the setpoint: what to command when someone asks for a setpoint.
//!
//! A setpoint is *safe* on a branch when it lies in one of the branch's stretches in every slice of the load, and when
//! in each of them the tensions that hold it there stay within 0 and the maximum. Whatever makes a setpoint unsafe
//! shortens the stretches in the table, and nothing here changes.
//!
//! Within one stretch the arm follows a moved setpoint. Between stretches it may not, even on one branch: a gap is
//! never crossed, not that of any slice either.

#[path = "1_answer.rs"]
mod answer;
#[path = "2_interval.rs"]
mod interval;
#[path = "3_reach.rs"]
mod reach;
#[path = "4_tension.rs"]
mod tension;

pub use answer::{Answer, Input, Refusal};
pub use tension::TensionPair;

use crate::load::Load;
use interval::{Interval, Way, next_common};
use reach::{Hold, Reach};

/// Where the arm is now.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Present {
    /// The branch it rests on, from [`crate::which_branch`].
    pub branch: u8,
    /// The setpoint the drive holds (rad or N m).
    pub setpoint: f32,
}

/// What to command when `request` is asked for (rad or N m, after the drive). Every setpoint in the answer is safe.
pub fn choose(load: &Load<'_>, present: Present, request: f32) -> Answer {
    decide(load, present, request).unwrap_or_else(Answer::Refused)
}

/// The safe setpoints around `setpoint` on `branch`, lowest and highest; `None` where it is not safe.
pub(crate) fn usable_around(load: &Load<'_>, branch: u8, setpoint: f32) -> Option<(f32, f32)> {
    let around = Interval::around(load, branch, setpoint)?;
    Some((around.from, around.to))
}

fn decide(load: &Load<'_>, present: Present, request: f32) -> Result<Answer, Refusal> {
    check(load, present, request)?;
    let branch = present.branch;
    let home = Interval::home(load, branch, present.setpoint);
    let there = Interval::around(load, branch, request);
    let held = there.and_then(|there| Some((there, Hold::at(load, branch, request)?)));
    if let (Some(home), Some((there, hold))) = (home, held) {
        if there.from == home.from {
            return Ok(Answer::Go {
                setpoint: request,
                tensions: hold.tensions,
                reserves: hold.reserves,
            });
        }
        return Err(gap(load, branch, home, request));
    }
    let other = deepest_other(load, branch, request);
    let here = home.and_then(|home| Reach::towards(load, home, present, request));
    let Some(Reach {
        setpoint,
        hold,
        why,
    }) = here
    else {
        return Err(Refusal::NothingSafeHere { branch, other });
    };
    let (tensions, reserves) = (hold.tensions, hold.reserves);
    Ok(match other {
        Some(other) => Answer::NotOnThisSide {
            other,
            as_far_as: setpoint,
            tensions,
            reserves,
            why,
        },
        None => Answer::OnlyAsFarAs {
            setpoint,
            tensions,
            reserves,
            why,
        },
    })
}

/// Refuses what cannot be answered at all.
fn check(load: &Load<'_>, present: Present, request: f32) -> Result<(), Refusal> {
    let Present { branch, setpoint } = present;
    for (which, value) in [
        (Input::PresentSetpoint, setpoint),
        (Input::Request, request),
    ] {
        if !value.is_finite() {
            return Err(Refusal::NotFinite { which });
        }
    }
    // With one payload the branch may end earlier than with another: somewhere it must reach the present setpoint.
    let mut refusal = Refusal::NoSuchBranch { branch };
    for slice in load.slices() {
        let Some(found) = slice.branch(branch) else {
            continue;
        };
        let entry = found.entry;
        if !entry.is_stable() {
            let index = entry.index;
            return Err(Refusal::UnstableBranch { branch, index });
        }
        if entry.covers(setpoint) {
            return Ok(());
        }
        let (from, to) = match refusal {
            Refusal::PresentOutsideBranch { from, to, .. } => (
                if entry.from < from { entry.from } else { from },
                if entry.to > to { entry.to } else { to },
            ),
            _ => (entry.from, entry.to),
        };
        refusal = Refusal::PresentOutsideBranch { setpoint, from, to };
    }
    Err(refusal)
}

/// The gap next to `home` in the direction of `request`, which is safe and lies beyond.
fn gap(load: &Load<'_>, branch: u8, home: Interval, request: f32) -> Refusal {
    let (from, to) = if request > home.to {
        let beyond = next_common(load, branch, home.to.next_up(), Way::Up);
        (home.to, beyond.unwrap_or(request))
    } else {
        let beyond = next_common(load, branch, home.from.next_down(), Way::Down);
        (beyond.unwrap_or(request), home.from)
    };
    Refusal::Gap {
        from,
        to,
        limit: home.limit_towards(request),
    }
}

/// The stable branch other than `branch` where `setpoint` is safe; of several the one with the lowest potential.
fn deepest_other(load: &Load<'_>, branch: u8, setpoint: f32) -> Option<u8> {
    let drive = load.limits().drive;
    let mut deepest: Option<(f32, u8)> = None;
    for other in load.branches() {
        if other == branch || Hold::at(load, other, setpoint).is_none() {
            continue;
        }
        if let Ok(state) = load.state(other, setpoint) {
            let depth = state.potential_j(drive);
            if deepest.is_none_or(|(lowest, _)| depth < lowest) {
                deepest = Some((depth, other));
            }
        }
    }
    deepest.map(|(_, number)| number)
}
