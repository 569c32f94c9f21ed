//! Where the stretches of all slices of a load overlap.

use crate::format::{Limit, Stretch};
use crate::load::Load;
use crate::table::Slice;

/// Setpoints that lie in one stretch of every slice, from end to end.
#[derive(Clone, Copy)]
pub(super) struct Interval {
    pub(super) from: f32,
    pub(super) to: f32,
    from_limit: Limit,
    to_limit: Limit,
}

/// The way from a setpoint.
#[derive(Clone, Copy, PartialEq)]
pub(super) enum Way {
    Up,
    Down,
}

impl Interval {
    /// The interval around `setpoint`; `None` where a slice has no stretch.
    pub(super) fn around(load: &Load<'_>, branch: u8, setpoint: f32) -> Option<Self> {
        Self::common(load, |slice| {
            Some(slice.stretch_at(branch, setpoint)?.entry)
        })
    }

    /// Where the arm can be led to from `setpoint`: with each slice's payload that is the stretch it is in or, if in
    /// none, the nearest. `None` where these do not overlap: with one payload or another the way would cross a gap.
    pub(super) fn home(load: &Load<'_>, branch: u8, setpoint: f32) -> Option<Self> {
        Self::common(load, |slice| {
            let mut nearest: Option<(f32, Stretch)> = None;
            for usable in slice.stretches(branch) {
                let entry = usable.entry;
                let away = (clamp(setpoint, entry.from, entry.to) - setpoint).abs();
                if nearest.is_none_or(|(least, _)| away < least) {
                    nearest = Some((away, entry));
                }
            }
            nearest.map(|(_, entry)| entry)
        })
    }

    /// The overlap of one stretch of each slice. Its ends, and the limits there, are those of the slice whose stretch
    /// ends first.
    fn common(load: &Load<'_>, pick: impl Fn(&Slice<'_>) -> Option<Stretch>) -> Option<Self> {
        let mut common: Option<Self> = None;
        for slice in load.slices() {
            let Stretch {
                from,
                to,
                from_limit,
                to_limit,
                ..
            } = pick(&slice)?;
            let mut narrowed = common.unwrap_or(Self {
                from,
                to,
                from_limit,
                to_limit,
            });
            if from > narrowed.from {
                (narrowed.from, narrowed.from_limit) = (from, from_limit);
            }
            if to < narrowed.to {
                (narrowed.to, narrowed.to_limit) = (to, to_limit);
            }
            common = Some(narrowed);
        }
        common.filter(|interval| interval.from <= interval.to)
    }

    pub(super) fn contains(&self, setpoint: f32) -> bool {
        self.from <= setpoint && setpoint <= self.to
    }

    /// The point of the interval nearest to `setpoint`.
    pub(super) fn nearest(&self, setpoint: f32) -> f32 {
        clamp(setpoint, self.from, self.to)
    }

    /// What ends the interval on the side of `request`.
    pub(super) fn limit_towards(&self, request: f32) -> Limit {
        if request > self.to {
            self.to_limit
        } else {
            self.from_limit
        }
    }
}

/// The nearest setpoint from `start` on, itself included, that lies in a stretch of every slice.
pub(super) fn next_common(load: &Load<'_>, branch: u8, start: f32, way: Way) -> Option<f32> {
    let stretches = load.slices().fold(0u32, |sum, slice| {
        sum.saturating_add(slice.stretch_count().into())
    });
    let mut at = start;
    // Each round but the last moves to an end of a stretch that has not been visited.
    for _ in 0..=stretches {
        let mut moved = at;
        for slice in load.slices() {
            moved = next_in(&slice, branch, moved, way)?;
        }
        if moved == at {
            return Some(at);
        }
        at = moved;
    }
    None
}

/// The same in one slice.
fn next_in(slice: &Slice<'_>, branch: u8, start: f32, way: Way) -> Option<f32> {
    let mut nearest: Option<f32> = None;
    for usable in slice.stretches(branch) {
        let Stretch { from, to, .. } = usable.entry;
        let ahead = match way {
            Way::Up => start <= to,
            Way::Down => start >= from,
        };
        if ahead {
            let here = clamp(start, from, to);
            let closer = nearest.is_none_or(|best| (here - start).abs() < (best - start).abs());
            if closer {
                nearest = Some(here);
            }
        }
    }
    nearest
}

/// `value`, or the end of `from..=to` that it lies beyond; the lower end for NaN.
fn clamp(value: f32, from: f32, to: f32) -> f32 {
    if value >= to {
        to
    } else if value >= from {
        value
    } else {
        from
    }
}
