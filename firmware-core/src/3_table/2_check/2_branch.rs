//! One branch: its number, its cover, its exits and its knots.

use super::{Own, below, sound};
use crate::bytes::float;
use crate::format::{BranchEntry, MOST_BRANCHES};
use crate::table::{BranchFault, Limits};

/// How far the cover of a branch may reach beyond the header's range, relative to the range: the rounding of an end
/// that was computed in f64.
const RANGE_SLACK: f32 = 1e-5;
/// How far the first and last knot may fall short of the ends of the cover, in units of the parameter: f32 rounding,
/// with a factor of some ten. A lookup there takes the value of the end knot.
const PARAMETER_SLACK: f32 = 1e-5;

/// The branch numbers of the slices so far, one bit each.
#[derive(Default)]
pub(super) struct Numbers {
    stable: u32,
    unstable: u32,
}

impl Numbers {
    /// Adds the next branch of a slice, `previous` being the number of the one before it.
    pub(super) fn take(
        &mut self,
        entry: &BranchEntry,
        previous: Option<u8>,
    ) -> Result<(), BranchFault> {
        let BranchEntry { number, index, .. } = *entry;
        let bit = 1u32.checked_shl(number.into());
        let increases = previous.is_none_or(|previous| number > previous);
        let bit = bit
            .filter(|_| increases)
            .ok_or(BranchFault::Number { number, previous })?;
        let (own, other) = if entry.is_stable() {
            (&mut self.stable, self.unstable)
        } else {
            (&mut self.unstable, self.stable)
        };
        if other & bit != 0 {
            return Err(BranchFault::Stability { number, index });
        }
        *own |= bit;
        Ok(())
    }
}

pub(super) fn cover(entry: &BranchEntry, limits: &Limits) -> Result<(), BranchFault> {
    let BranchEntry {
        from,
        to,
        anchor_from,
        anchor_to,
        ..
    } = *entry;
    if ![from, to, anchor_from, anchor_to].into_iter().all(sound) {
        return Err(BranchFault::NotFinite);
    }
    if !below(from, to) {
        return Err(BranchFault::EmptyCover { from, to });
    }
    if !(anchor_from <= from && to <= anchor_to) {
        return Err(BranchFault::Anchors {
            anchor_from,
            from,
            to,
            anchor_to,
        });
    }
    let (lo, hi) = (limits.setpoint_lo, limits.setpoint_hi);
    let slack = RANGE_SLACK * (hi - lo);
    if lo - slack <= from && to <= hi + slack {
        Ok(())
    } else {
        Err(BranchFault::OutsideRange { from, to, lo, hi })
    }
}

pub(super) fn exits(entry: &BranchEntry, own: Own<'_>) -> Result<(), BranchFault> {
    let mut bits = entry.exits;
    if bits != 0 && !entry.is_stable() {
        return Err(BranchFault::ExitOfUnstable { exits: bits });
    }
    for exit in 0..MOST_BRANCHES {
        let is_exit = bits & 1 == 1;
        bits >>= 1;
        if is_exit && own.branch(exit).is_none_or(|pass| pass.index != 1) {
            return Err(BranchFault::Exit { exit });
        }
    }
    Ok(())
}

/// Checks the knots of one branch at the front of `values` and returns the values after them.
pub(super) fn curve<'a>(entry: &BranchEntry, values: &'a [u8]) -> Result<&'a [u8], BranchFault> {
    if entry.knots < 2 {
        return Err(BranchFault::TooFewKnots { knots: entry.knots });
    }
    let width = entry.floats_per_knot();
    let wanted = usize::from(entry.knots)
        .saturating_mul(width)
        .saturating_mul(4);
    let (own, rest) = values
        .split_at_checked(wanted)
        .ok_or(BranchFault::KnotsMissing {
            expected: wanted as u32,
            found: values.len() as u32,
        })?;
    let (mut first, mut last) = (f32::NAN, f32::NAN);
    for knot in 0..entry.knots {
        let start = usize::from(knot).saturating_mul(width);
        for place in 0..width {
            // A value that cannot be read counts as one that is not a number.
            if !float(own, start.saturating_add(place)).is_some_and(sound) {
                return Err(BranchFault::Knot {
                    knot,
                    place: place as u8,
                });
            }
        }
        let t = float(own, start).unwrap_or(f32::NAN);
        if knot == 0 {
            first = t;
        } else if !below(last, t) {
            return Err(BranchFault::KnotOrder {
                knot,
                previous: last,
                t,
            });
        }
        last = t;
    }
    let map = entry.map();
    let (begin, end) = (map.t(entry.from), map.t(entry.to));
    if first <= begin + PARAMETER_SLACK && last >= end - PARAMETER_SLACK {
        Ok(rest)
    } else {
        Err(BranchFault::KnotCover {
            first,
            begin,
            last,
            end,
        })
    }
}
