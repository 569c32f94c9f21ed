//! The answers to a requested setpoint.

use core::fmt;

use serde::Serialize;

use super::TensionPair;
use crate::format::{Limit, Reserves};
use crate::words::Word::{F, N, T};
use crate::words::Words;

/// What to do about a requested setpoint. Setpoints in rad or N m, after the drive.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Answer {
    /// Command the request.
    Go {
        /// The setpoint to command.
        setpoint: f32,
        /// The tensions to command.
        tensions: TensionPair,
        /// Worst-case reserves there.
        reserves: Reserves,
    },
    /// Nothing safe that can be reached without leaving safe setpoints is nearer to the request than this.
    OnlyAsFarAs {
        /// The setpoint to command.
        setpoint: f32,
        /// The tensions to command.
        tensions: TensionPair,
        /// Worst-case reserves there.
        reserves: Reserves,
        /// What forbids going further.
        why: Limit,
    },
    /// The request is safe, but on another branch.
    NotOnThisSide {
        /// The branch where it is safe; of several the one with the lowest energy.
        other: u8,
        /// The nearest safe setpoint on the present branch.
        as_far_as: f32,
        /// The tensions that hold it there.
        tensions: TensionPair,
        /// Worst-case reserves there.
        reserves: Reserves,
        /// What forbids going further on the present branch.
        why: Limit,
    },
    /// Command nothing new.
    Refused(Refusal),
}

/// Which input a refusal speaks of.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Input {
    /// The present setpoint.
    PresentSetpoint,
    /// The requested setpoint.
    Request,
}

/// Why nothing may be commanded.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Refusal {
    /// An input is NaN or infinite.
    NotFinite {
        /// Which.
        which: Input,
    },
    /// The present branch is not in the table, not with this load.
    NoSuchBranch {
        /// Its number.
        branch: u8,
    },
    /// The present branch is unstable: nothing can rest there.
    UnstableBranch {
        /// Its number.
        branch: u8,
        /// Its Morse index.
        index: u8,
    },
    /// The present branch does not reach the present setpoint, in no slice of the load.
    PresentOutsideBranch {
        /// The present setpoint.
        setpoint: f32,
        /// Lowest setpoint of the branch.
        from: f32,
        /// Highest setpoint of the branch.
        to: f32,
    },
    /// Nothing that can be reached on the present branch is safe.
    NothingSafeHere {
        /// The present branch.
        branch: u8,
        /// A branch where the request is safe.
        other: Option<u8>,
    },
    /// The request is safe on the present branch, but unsafe setpoints lie between.
    Gap {
        /// Where the gap begins.
        from: f32,
        /// Where it ends.
        to: f32,
        /// What makes it unsafe, at the end on this side.
        limit: Limit,
    },
}

impl fmt::Display for Answer {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Go {
                setpoint, tensions, ..
            } => {
                f.say(&[T("go to setpoint "), F(setpoint), T(": ")])?;
                fmt::Display::fmt(&tensions, f)
            }
            Self::OnlyAsFarAs {
                setpoint,
                tensions,
                why,
                ..
            } => {
                f.say(&[T("go only as far as setpoint "), F(setpoint), T(" (")])?;
                fmt::Display::fmt(&why, f)?;
                f.say(&[T("): ")])?;
                fmt::Display::fmt(&tensions, f)
            }
            Self::NotOnThisSide {
                other,
                as_far_as,
                tensions,
                why,
                ..
            } => {
                f.say(&[
                    T("not on this side: the request is safe on branch "),
                    N(other.into()),
                    T("; here go only as far as setpoint "),
                    F(as_far_as),
                    T(" ("),
                ])?;
                fmt::Display::fmt(&why, f)?;
                f.say(&[T("): ")])?;
                fmt::Display::fmt(&tensions, f)
            }
            Self::Refused(refusal) => {
                f.say(&[T("refused: ")])?;
                fmt::Display::fmt(&refusal, f)
            }
        }
    }
}

impl fmt::Display for Refusal {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::NotFinite { which } => f.say(&[
                T(match which {
                    Input::PresentSetpoint => "the present setpoint",
                    Input::Request => "the requested setpoint",
                }),
                T(" is not a finite number; check where it comes from"),
            ]),
            Self::NoSuchBranch { branch } => f.say(&[
                T("there is no branch "),
                N(branch.into()),
                T(" with this payload; find the branch from the measured pose"),
            ]),
            Self::UnstableBranch { branch, index } => f.say(&[
                T("branch "),
                N(branch.into()),
                T(" is unstable (index "),
                N(index.into()),
                T("), the arm cannot rest there; find the branch from the measured pose"),
            ]),
            Self::PresentOutsideBranch { setpoint, from, to } => f.say(&[
                T("the branch does not reach the present setpoint "),
                F(setpoint),
                T(", only "),
                F(from),
                T(" to "),
                F(to),
                T("; find the branch from the measured pose"),
            ]),
            Self::NothingSafeHere { branch, other } => {
                f.say(&[
                    T("nothing that can be reached on branch "),
                    N(branch.into()),
                    T(" is safe; hold"),
                ])?;
                match other {
                    Some(other) => f.say(&[
                        T(" (the request is safe on branch "),
                        N(other.into()),
                        T(")"),
                    ]),
                    None => Ok(()),
                }
            }
            Self::Gap { from, to, limit } => {
                f.say(&[
                    T("unsafe setpoints lie between, from "),
                    F(from),
                    T(" to "),
                    F(to),
                    T(" ("),
                ])?;
                fmt::Display::fmt(&limit, f)?;
                f.say(&[T("); ask for a setpoint on this side of them")])
            }
        }
    }
}
