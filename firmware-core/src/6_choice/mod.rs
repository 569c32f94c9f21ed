//! The choice of the setpoint: what to command when someone asks for a setpoint.
//!
//! A setpoint is *safe* on a branch when it lies in one of the branch's stretches, shortened by the configured
//! distance at ends that a fold sets, and when the tensions that hold it there stay within 0 and the maximum. The
//! stretches come from the table; whatever else makes a setpoint unsafe shortens them there, and nothing here changes.
//!
//! Within one stretch the arm follows a moved setpoint. Between stretches it may not, even on one branch: a gap is
//! never crossed.

#[path = "1_answer.rs"]
mod answer;
#[path = "2_reach.rs"]
mod reach;
#[path = "3_tension.rs"]
mod tension;

pub use answer::{Answer, Input, Refusal};
pub use tension::TensionPair;

use core::fmt;

use crate::table::Slice;
use crate::words::Word::{F, T};
use crate::words::Words;
use reach::{Reach, Trimmed, holding};

/// What the operator of the arm asks for beyond the table.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Config {
    fold_distance: f32,
}

/// Why a configuration is not usable.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum ConfigError {
    /// The distance from the fold is negative, NaN or infinite.
    FoldDistance {
        /// The value given.
        found: f32,
    },
}

impl Config {
    /// `fold_distance`: how far from a fold a setpoint must stay, in units of the setpoint (rad or N m), >= 0.
    ///
    /// # Errors
    /// [`ConfigError`] when the distance is negative or not finite.
    pub fn new(fold_distance: f32) -> Result<Self, ConfigError> {
        if fold_distance >= 0.0 && fold_distance.is_finite() {
            Ok(Self { fold_distance })
        } else {
            Err(ConfigError::FoldDistance {
                found: fold_distance,
            })
        }
    }

    /// How far from a fold a setpoint must stay, in units of the setpoint.
    pub const fn fold_distance(&self) -> f32 {
        self.fold_distance
    }
}

/// Where the arm is now.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Present {
    /// The branch it rests on, from [`crate::which_branch`].
    pub branch: u8,
    /// The setpoint the drive holds (rad or N m).
    pub setpoint: f32,
}

/// What to command when `request` is asked for (rad or N m, after the drive). Every setpoint in the answer is safe.
pub fn choose(slice: &Slice<'_>, config: &Config, present: Present, request: f32) -> Answer {
    decide(slice, config, present, request).unwrap_or_else(Answer::Refused)
}

fn decide(
    slice: &Slice<'_>,
    config: &Config,
    present: Present,
    request: f32,
) -> Result<Answer, Refusal> {
    check(slice, present, request)?;
    let branch = present.branch;
    let base = base(slice, config, present);
    let safe = safe_at(slice, config, branch, request);
    if let (Some(base), Some((there, tensions))) = (base, safe) {
        if there.from == base.from {
            let setpoint = request;
            return Ok(Answer::Go { setpoint, tensions });
        }
        return Err(gap(slice, config, branch, base, request));
    }
    let other = deepest_other(slice, config, branch, request);
    let here = base.and_then(|base| Reach::towards(slice, branch, base, present, request));
    match (here, other) {
        (None, other) => Err(Refusal::NothingSafeHere { branch, other }),
        (Some(reach), Some(other)) => Ok(Answer::NotOnThisSide {
            other,
            as_far_as: reach.setpoint,
            tensions: reach.tensions,
            why: reach.why,
        }),
        (Some(reach), None) => Ok(Answer::OnlyAsFarAs {
            setpoint: reach.setpoint,
            tensions: reach.tensions,
            why: reach.why,
        }),
    }
}

/// Refuses what cannot be answered at all.
fn check(slice: &Slice<'_>, present: Present, request: f32) -> Result<(), Refusal> {
    let Present { branch, setpoint } = present;
    for (which, value) in [
        (Input::PresentSetpoint, setpoint),
        (Input::Request, request),
    ] {
        if !value.is_finite() {
            return Err(Refusal::NotFinite { which });
        }
    }
    let branches = slice.branch_count();
    let found = slice.branch(branch);
    let entry = found
        .ok_or(Refusal::NoSuchBranch { branch, branches })?
        .entry;
    if !entry.is_stable() {
        let index = entry.index;
        return Err(Refusal::UnstableBranch { branch, index });
    }
    if !entry.covers(setpoint) {
        return Err(Refusal::PresentOutsideBranch {
            setpoint,
            from: entry.from,
            to: entry.to,
        });
    }
    Ok(())
}

/// The stretch the arm is in, shortened; when it is in none, the nearest of its branch. `None` when nothing is left.
fn base(slice: &Slice<'_>, config: &Config, present: Present) -> Option<Trimmed> {
    let mut nearest: Option<(f32, Trimmed)> = None;
    for stretch in slice.stretches(present.branch) {
        let trimmed = Trimmed::new(&stretch, config);
        if stretch.contains(present.setpoint) {
            // Not the neighbour when nothing of this one is left: that would cross a gap.
            return trimmed;
        }
        if let Some(trimmed) = trimmed {
            let away = (trimmed.nearest(present.setpoint) - present.setpoint).abs();
            if nearest.is_none_or(|(least, _)| away < least) {
                nearest = Some((away, trimmed));
            }
        }
    }
    nearest.map(|(_, trimmed)| trimmed)
}

/// The stretch of `branch` that makes `setpoint` safe, and the tensions to command there.
fn safe_at(
    slice: &Slice<'_>,
    config: &Config,
    branch: u8,
    setpoint: f32,
) -> Option<(Trimmed, TensionPair)> {
    let there = slice
        .stretches(branch)
        .filter_map(|stretch| Trimmed::new(&stretch, config))
        .find(|trimmed| trimmed.contains(setpoint))?;
    Some((there, holding(slice, branch, setpoint)?))
}

/// The gap next to `base` in the direction of `request`.
fn gap(slice: &Slice<'_>, config: &Config, branch: u8, base: Trimmed, request: f32) -> Refusal {
    let upward = request > base.to;
    let mut far = request;
    for stretch in slice.stretches(branch) {
        if let Some(trimmed) = Trimmed::new(&stretch, config) {
            if upward && trimmed.from > base.to && trimmed.from < far {
                far = trimmed.from;
            }
            if !upward && trimmed.to < base.from && trimmed.to > far {
                far = trimmed.to;
            }
        }
    }
    let (from, to) = if upward {
        (base.to, far)
    } else {
        (far, base.from)
    };
    Refusal::Gap {
        from,
        to,
        limit: base.limit_towards(request),
    }
}

/// The stable branch other than `branch` where `setpoint` is safe; of several the one with the lowest potential.
fn deepest_other(slice: &Slice<'_>, config: &Config, branch: u8, setpoint: f32) -> Option<u8> {
    let mut deepest: Option<(f32, u8)> = None;
    for other in slice.branches() {
        if other.number == branch || safe_at(slice, config, other.number, setpoint).is_none() {
            continue;
        }
        let limits = slice.limits();
        if let Some(state) = other.state(limits, setpoint) {
            let depth = state.potential_j(limits.drive);
            if deepest.is_none_or(|(lowest, _)| depth < lowest) {
                deepest = Some((depth, other.number));
            }
        }
    }
    deepest.map(|(_, number)| number)
}

impl fmt::Display for ConfigError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self::FoldDistance { found } = *self;
        f.say(&[
            T("the distance from the fold is "),
            F(found),
            T("; give a finite value of 0 or more"),
        ])
    }
}

impl core::error::Error for ConfigError {}
