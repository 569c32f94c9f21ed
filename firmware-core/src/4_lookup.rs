//! The rest state of a branch at a setpoint, with one payload.
//!
//! The setpoint goes through the branch's parameter map; between the two knots around the parameter each quantity is
//! the cubic Hermite polynomial of its values and slopes. With `h` the distance of the knots and `s` in 0..1 the
//! place between them,
//!
//! ```text
//! p(s) = v0 + s^2 (3 - 2 s) (v1 - v0) + h s (1 - s) ((1 - s) d0 - s d1)
//! ```

use core::fmt;

use serde::Serialize;

use crate::format::Drive;
use crate::table::{Branch, Limits, Slice};
use crate::words::Word::{F, N, T};
use crate::words::Words;

/// A rest state of the arm, interpolated from the table.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct RestState {
    /// The branch it lies on.
    pub branch: u8,
    /// Morse index: 0 stable, 1 a pass between two wells.
    pub index: u8,
    /// Mean angle q1 (rad).
    pub mean_angle_rad: f32,
    /// Tip angle q0 (rad).
    pub tip_angle_rad: f32,
    /// Tip couple tau that holds it (N m).
    pub couple_n_m: f32,
    /// Elastic and gravity energy (J), without the work of the drive.
    pub energy_j: f32,
    /// What only stable states have.
    pub well: Option<Well>,
}

/// What the table holds of stable rest states only.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Well {
    /// Tip position along x (m).
    pub tip_x_m: f32,
    /// Tip position along y (m).
    pub tip_y_m: f32,
    /// Restoring stiffness along the mean angle (N m/rad).
    pub restoring_n_m_per_rad: f32,
    /// Energy to the lowest pass out of the well at the same setpoint, the work of the drive taken into account (J),
    /// >= 0; `None` when there is no pass at this setpoint.
    pub barrier_j: Option<f32>,
}

impl RestState {
    /// What the drive does not let go of: the energy that rest states at one setpoint are compared by (J). U when the
    /// tip is held, U - tau q0 when a couple is applied.
    pub fn potential_j(&self, drive: Drive) -> f32 {
        match drive {
            Drive::HeldTip => self.energy_j,
            Drive::AppliedCouple => self.energy_j - self.couple_n_m * self.tip_angle_rad,
        }
    }
}

/// Why there is no rest state to answer with.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum LookupError {
    /// The setpoint is NaN or infinite.
    NotFinite,
    /// There is no branch of this number with this payload.
    NoSuchBranch {
        /// The number asked for.
        branch: u8,
    },
    /// The branch does not reach the setpoint.
    OutsideBranch {
        /// The setpoint asked for.
        setpoint: f32,
        /// Lowest setpoint of the branch.
        from: f32,
        /// Highest setpoint of the branch.
        to: f32,
    },
}

impl<'a> Slice<'a> {
    /// The rest state of `branch` at `setpoint` (rad or N m, after the drive).
    ///
    /// # Errors
    /// [`LookupError`] when the setpoint is not finite, or the branch does not exist or does not reach it.
    pub fn at(&self, branch: u8, setpoint: f32) -> Result<RestState, LookupError> {
        if !setpoint.is_finite() {
            return Err(LookupError::NotFinite);
        }
        let missing = LookupError::NoSuchBranch { branch };
        let found = self.branch(branch).ok_or(missing)?;
        let outside = LookupError::OutsideBranch {
            setpoint,
            from: found.entry.from,
            to: found.entry.to,
        };
        self.state(&found, setpoint).ok_or(outside)
    }

    /// The rest state of every branch that reaches `setpoint`; none when it is not finite.
    pub fn all_at(&self, setpoint: f32) -> impl Iterator<Item = RestState> + use<'a> {
        let slice = *self;
        slice
            .branches()
            .filter_map(move |branch| slice.state(&branch, setpoint))
    }

    fn state(&self, branch: &Branch<'_>, setpoint: f32) -> Option<RestState> {
        let mut state = branch.state(self.limits(), setpoint)?;
        if let Some(well) = &mut state.well {
            well.barrier_j = self.barrier(branch, setpoint);
        }
        Some(state)
    }

    /// Energy to the lowest of the branch's exits at `setpoint`.
    fn barrier(&self, branch: &Branch<'_>, setpoint: f32) -> Option<f32> {
        let limits = self.limits();
        let own = branch.state(limits, setpoint)?.potential_j(limits.drive);
        let mut lowest: Option<f32> = None;
        for pass in self.exits(branch) {
            if let Some(state) = pass.state(limits, setpoint) {
                let climb = state.potential_j(limits.drive) - own;
                let climb = if climb > 0.0 { climb } else { 0.0 };
                if lowest.is_none_or(|least| climb < least) {
                    lowest = Some(climb);
                }
            }
        }
        lowest
    }

    /// The passes out of the well that `branch` is.
    pub fn exits(&self, branch: &Branch<'_>) -> impl Iterator<Item = Branch<'a>> + use<'a> {
        let exits = branch.entry.exits;
        self.branches().filter(move |other| {
            exits
                .checked_shr(other.number.into())
                .is_some_and(|bits| bits & 1 == 1)
        })
    }
}

impl Branch<'_> {
    /// The rest state at `setpoint` without the barrier, for which the other branches are needed; `None` when the
    /// branch does not reach it.
    pub(crate) fn state(&self, limits: Limits, setpoint: f32) -> Option<RestState> {
        if !self.entry.covers(setpoint) {
            return None;
        }
        let place = self.place(self.entry.map().t(setpoint))?;
        let conjugate = self.interpolate(place, 1)?;
        let (tip_angle_rad, couple_n_m) = match limits.drive {
            Drive::HeldTip => (setpoint, conjugate),
            Drive::AppliedCouple => (conjugate, setpoint),
        };
        let well = if self.entry.is_stable() {
            Some(Well {
                tip_x_m: self.interpolate(place, 3)?,
                tip_y_m: self.interpolate(place, 4)?,
                restoring_n_m_per_rad: self.interpolate(place, 5)?,
                barrier_j: None,
            })
        } else {
            None
        };
        Some(RestState {
            branch: self.number,
            index: self.entry.index,
            mean_angle_rad: self.interpolate(place, 0)?,
            tip_angle_rad,
            couple_n_m,
            energy_j: self.interpolate(place, 2)?,
            well,
        })
    }

    /// The knots around `t`, found by halving; `t` beyond the end knots counts as on them.
    fn place(&self, t: f32) -> Option<Place> {
        let mut below = 0;
        let mut above = self.entry.knots.checked_sub(1)?;
        // Halving 65535 knots takes 16 steps.
        for _ in 0..16 {
            if above - below <= 1 {
                break;
            }
            let middle = below + (above - below) / 2;
            if self.knot_value(middle, 0)? <= t {
                below = middle;
            } else {
                above = middle;
            }
        }
        let (start, end) = (self.knot_value(below, 0)?, self.knot_value(above, 0)?);
        let h = end - start;
        let s = (t - start) / h;
        // Written so that a NaN falls out instead of through.
        let s = if s <= 0.0 {
            0.0
        } else if s >= 1.0 {
            1.0
        } else if s.is_nan() {
            return None;
        } else {
            s
        };
        Some(Place { below, above, h, s })
    }

    fn interpolate(&self, at: Place, quantity: usize) -> Option<f32> {
        let value = 1 + 2 * quantity;
        let (v0, d0) = (
            self.knot_value(at.below, value)?,
            self.knot_value(at.below, value + 1)?,
        );
        let (v1, d1) = (
            self.knot_value(at.above, value)?,
            self.knot_value(at.above, value + 1)?,
        );
        let (s, r) = (at.s, 1.0 - at.s);
        Some(v0 + s * s * (3.0 - 2.0 * s) * (v1 - v0) + at.h * s * r * (r * d0 - s * d1))
    }
}

/// A place between two knots.
#[derive(Clone, Copy)]
struct Place {
    below: u16,
    above: u16,
    h: f32,
    s: f32,
}

impl fmt::Display for LookupError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::NotFinite => f.say(&[T("the setpoint is not a finite number; check the sensor")]),
            Self::NoSuchBranch { branch } => f.say(&[
                T("there is no branch "),
                N(branch.into()),
                T(" with this payload; find the branch from the measured pose"),
            ]),
            Self::OutsideBranch { setpoint, from, to } => f.say(&[
                T("the branch does not reach setpoint "),
                F(setpoint),
                T("; ask between "),
                F(from),
                T(" and "),
                F(to),
            ]),
        }
    }
}

impl core::error::Error for LookupError {}
