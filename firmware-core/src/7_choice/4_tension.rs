//! The pair of tensions that makes a tip couple.

use core::fmt;

use serde::Serialize;

use crate::format::UNBOUNDED;
use crate::table::Limits;
use crate::words::Word::{F, T};
use crate::words::Words;

/// Tensions to command (N). Tendon A turns the tip towards +x.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct TensionPair {
    /// Tension of tendon A (N).
    pub a_n: f32,
    /// Tension of tendon B (N).
    pub b_n: f32,
}

impl TensionPair {
    /// The pair for a tip couple (N m): the pulling tendon carries the pretension plus couple / offset, the other
    /// the pretension. Not checked against the maximum; see [`Self::allowed`].
    pub fn for_couple(couple_n_m: f32, limits: &Limits) -> Self {
        let pulling_n = limits.pretension_n + couple_n_m.abs() / limits.offset_m;
        if couple_n_m > 0.0 {
            Self {
                a_n: pulling_n,
                b_n: limits.pretension_n,
            }
        } else {
            Self {
                a_n: limits.pretension_n,
                b_n: pulling_n,
            }
        }
    }

    /// The couple that the tendons can make, up to the maximum tension with the part kept back for interpolation, over
    /// a couple to be held (N m). At least 1 where [`Self::allowed`] allows it, up to rounding;
    /// [`UNBOUNDED`](crate::UNBOUNDED) without a couple.
    pub fn factor(couple_n_m: f32, limits: &Limits) -> f32 {
        let spare_n = limits.max_tension_n - limits.pretension_n - limits.deducted_tension_n;
        let factor = spare_n * limits.offset_m / couple_n_m.abs();
        // 0 / 0 too: nothing is needed.
        if factor < UNBOUNDED || spare_n < 0.0 {
            factor
        } else {
            UNBOUNDED
        }
    }

    /// The larger tension with the part kept back for interpolation added (N): the one to hold against the maximum.
    pub fn worst_n(&self, limits: &Limits) -> f32 {
        let larger = if self.a_n > self.b_n {
            self.a_n
        } else {
            self.b_n
        };
        larger + limits.deducted_tension_n
    }

    /// Whether both tensions lie within 0 and the maximum, with the part kept back for interpolation; false for NaN.
    pub fn allowed(&self, limits: &Limits) -> bool {
        self.a_n >= 0.0 && self.b_n >= 0.0 && self.worst_n(limits) <= limits.max_tension_n
    }
}

impl fmt::Display for TensionPair {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.say(&[
            T("tendon A "),
            F(self.a_n),
            T(" N, tendon B "),
            F(self.b_n),
            T(" N"),
        ])
    }
}
