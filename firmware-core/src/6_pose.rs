//! Which branch a measured pose belongs to.
//!
//! At one setpoint the wells are told apart by the mean angle: the passes between two neighbouring wells mark where
//! one ends and the other begins. Beyond all the passes on one side the pose belongs to the well on that side; between
//! passes, or where the table knows of no pass, nobody can tell from the pose alone.
//!
//! With several slices to be respected each is asked: those that can tell must agree.

use core::fmt;

use serde::Serialize;

use crate::format::smaller;
use crate::load::Load;
use crate::lookup::RestState;
use crate::table::Slice;
use crate::words::Word::{F, N, T};
use crate::words::Words;

/// A measured pose of the arm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Pose {
    /// Tip angle q0 (rad).
    pub tip_angle_rad: f32,
    /// Mean angle q1 (rad).
    pub mean_angle_rad: f32,
}

/// Where a pose lies in the well it belongs to.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Seat {
    /// The stable branch.
    pub branch: u8,
    /// Measured minus rest mean angle (rad), the rest state being that of [`Load::state`], or where it has none that of
    /// the first slice which knows the branch here.
    pub off_rad: f32,
    /// Measured minus rest tip angle (rad).
    pub tip_off_rad: f32,
    /// Distance in mean angle to the nearest pass out of the well (rad), >= 0, in the worst of the slices; `None` when
    /// none has a pass at this setpoint.
    pub to_pass_rad: Option<f32>,
}

/// Why a pose belongs to no branch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum PoseError {
    /// The setpoint or a measured angle is NaN or infinite.
    NotFinite,
    /// The table has no rest states at this setpoint.
    OutsideTable {
        /// The setpoint.
        setpoint: f32,
        /// Lowest setpoint of the table.
        from: f32,
        /// Highest setpoint of the table.
        to: f32,
    },
    /// No rest state at this setpoint is stable.
    NoStable {
        /// The setpoint.
        setpoint: f32,
    },
    /// The pose may belong to either of two wells: it is too near a pass between them, or means the one with one
    /// payload and the other with another.
    Unclear {
        /// The measured mean angle (rad).
        mean_angle_rad: f32,
        /// The well below, `None` when the pose lies below all wells.
        lower: Option<u8>,
        /// The well above, `None` when the pose lies above all wells.
        upper: Option<u8>,
    },
}

/// The branch that `pose` belongs to while the drive is at `setpoint` (rad or N m).
///
/// With a single stable rest state it is that one. Otherwise the passes between the nearest wells below and above the
/// measured mean angle decide; nearer to a pass than the table's worst interpolation error is too near to tell. All
/// slices of the load that can tell must agree.
///
/// # Errors
/// [`PoseError`] when an input is not finite, no slice has anything at the setpoint, or the pose is unclear.
pub fn which_branch(load: &Load<'_>, setpoint: f32, pose: Pose) -> Result<Seat, PoseError> {
    let measured = pose.mean_angle_rad;
    if !(setpoint.is_finite() && measured.is_finite() && pose.tip_angle_rad.is_finite()) {
        return Err(PoseError::NotFinite);
    }
    let mut told: Option<Told> = None;
    let mut why_not = PoseError::NoStable { setpoint };
    for (number, slice) in load.slices().enumerate() {
        match in_slice(&slice, setpoint, measured) {
            Ok(found) => match &mut told {
                None => told = Some(found),
                Some(before) if before.rest.branch == found.rest.branch => {
                    before.to_pass_rad = smaller(before.to_pass_rad, found.to_pass_rad);
                }
                Some(before) => return Err(between(&before.rest, &found.rest, measured)),
            },
            // Of several reasons the one most worth hearing.
            Err(error) if number == 0 || matches!(error, PoseError::Unclear { .. }) => {
                why_not = error;
            }
            Err(_) => {}
        }
    }
    let told = told.ok_or(why_not)?;
    let rest = load.state(told.rest.branch, setpoint).unwrap_or(told.rest);
    Ok(Seat {
        branch: rest.branch,
        off_rad: measured - rest.mean_angle_rad,
        tip_off_rad: pose.tip_angle_rad - rest.tip_angle_rad,
        to_pass_rad: told.to_pass_rad,
    })
}

/// Two slices disagree.
fn between(one: &RestState, other: &RestState, measured: f32) -> PoseError {
    let (lower, upper) = if one.mean_angle_rad <= other.mean_angle_rad {
        (one, other)
    } else {
        (other, one)
    };
    PoseError::Unclear {
        mean_angle_rad: measured,
        lower: Some(lower.branch),
        upper: Some(upper.branch),
    }
}

/// What one slice makes of a pose.
struct Told {
    /// The rest state it belongs to.
    rest: RestState,
    to_pass_rad: Option<f32>,
}

fn in_slice(slice: &Slice<'_>, setpoint: f32, measured: f32) -> Result<Told, PoseError> {
    let wells = Wells::around(slice, setpoint, measured);
    match (wells.states, wells.stable, wells.lower, wells.upper) {
        (0, ..) => {
            let limits = slice.limits();
            Err(PoseError::OutsideTable {
                setpoint,
                from: limits.setpoint_lo,
                to: limits.setpoint_hi,
            })
        }
        (_, 0, ..) | (_, _, None, None) => Err(PoseError::NoStable { setpoint }),
        (_, 1, Some(only), None) | (_, 1, None, Some(only)) => {
            tell(slice, setpoint, measured, only.branch)
        }
        (_, _, lower, upper) => {
            let branch = decide(slice, setpoint, measured, lower, upper);
            let unclear = PoseError::Unclear {
                mean_angle_rad: measured,
                lower: lower.map(|well| well.branch),
                upper: upper.map(|well| well.branch),
            };
            tell(slice, setpoint, measured, branch.ok_or(unclear)?)
        }
    }
}

/// A stable rest state at the setpoint.
#[derive(Clone, Copy)]
struct Neighbour {
    branch: u8,
    mean: f32,
}

/// The stable rest states around a measured mean angle.
struct Wells {
    /// Rest states at the setpoint.
    states: u32,
    /// Stable ones among them.
    stable: u32,
    /// The nearest at or below the measured mean angle.
    lower: Option<Neighbour>,
    /// The nearest above it.
    upper: Option<Neighbour>,
}

impl Wells {
    fn around(slice: &Slice<'_>, setpoint: f32, measured: f32) -> Self {
        let mut wells = Self {
            states: 0,
            stable: 0,
            lower: None,
            upper: None,
        };
        for branch in slice.branches() {
            let Some(state) = branch.state(slice.limits(), setpoint) else {
                continue;
            };
            wells.states += 1;
            if state.index != 0 {
                continue;
            }
            wells.stable += 1;
            let mean = state.mean_angle_rad;
            let found = Some(Neighbour {
                branch: state.branch,
                mean,
            });
            if mean <= measured && wells.lower.is_none_or(|nearest| mean > nearest.mean) {
                wells.lower = found;
            }
            if mean > measured && wells.upper.is_none_or(|nearest| mean < nearest.mean) {
                wells.upper = found;
            }
        }
        wells
    }
}

/// The branch on whose side of all the passes between the neighbours the pose lies.
fn decide(
    slice: &Slice<'_>,
    setpoint: f32,
    measured: f32,
    lower: Option<Neighbour>,
    upper: Option<Neighbour>,
) -> Option<u8> {
    let error = slice.limits().mean_angle_error_rad;
    let (mut passes, mut below_all, mut above_all) = (false, true, true);
    for branch in slice.branches().filter(|branch| branch.entry.index == 1) {
        let Some(state) = branch.state(slice.limits(), setpoint) else {
            continue;
        };
        let pass = state.mean_angle_rad;
        // Without a neighbour on one side, the passes beyond the measured angle on that side do not matter.
        let above_lower = lower.map_or(pass > measured - error, |well| pass > well.mean);
        let below_upper = upper.map_or(pass < measured + error, |well| pass < well.mean);
        if above_lower && below_upper {
            passes = true;
            below_all &= measured < pass - error;
            above_all &= measured > pass + error;
        }
    }
    match (lower, upper) {
        (Some(lower), Some(_)) if passes && below_all => Some(lower.branch),
        (Some(_), Some(upper)) if passes && above_all => Some(upper.branch),
        (Some(only), None) | (None, Some(only)) if !passes => Some(only.branch),
        _ => None,
    }
}

fn tell(slice: &Slice<'_>, setpoint: f32, measured: f32, number: u8) -> Result<Told, PoseError> {
    let no_stable = PoseError::NoStable { setpoint };
    let branch = slice.branch(number).ok_or(no_stable)?;
    let rest = branch.state(slice.limits(), setpoint).ok_or(no_stable)?;
    let mut to_pass_rad: Option<f32> = None;
    for pass in slice.exits(&branch) {
        if let Some(state) = pass.state(slice.limits(), setpoint) {
            let distance = (state.mean_angle_rad - measured).abs();
            to_pass_rad = smaller(to_pass_rad, Some(distance));
        }
    }
    Ok(Told { rest, to_pass_rad })
}

impl fmt::Display for PoseError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::NotFinite => f.say(&[T(
                "the setpoint or a measured angle is not a finite number; check the sensors",
            )]),
            Self::OutsideTable { setpoint, from, to } => f.say(&[
                T("the table has no rest state at setpoint "),
                F(setpoint),
                T("; it reaches from "),
                F(from),
                T(" to "),
                F(to),
            ]),
            Self::NoStable { setpoint } => f.say(&[
                T("the arm has no stable rest state at setpoint "),
                F(setpoint),
                T("; move the setpoint back to where it has one"),
            ]),
            Self::Unclear {
                mean_angle_rad,
                lower,
                upper,
            } => {
                f.say(&[
                    T("the mean angle "),
                    F(mean_angle_rad),
                    T(" rad does not tell the branch"),
                ])?;
                match (lower, upper) {
                    (Some(lower), Some(upper)) => f.say(&[
                        T(" (branch "),
                        N(lower.into()),
                        T(" or "),
                        N(upper.into()),
                        T(")"),
                    ])?,
                    (Some(only), None) | (None, Some(only)) => {
                        f.say(&[T(" (branch "), N(only.into()), T(" is nearest)")])?;
                    }
                    (None, None) => {}
                }
                f.say(&[T("; let the arm come to rest and measure again")])
            }
        }
    }
}

impl core::error::Error for PoseError {}
