//! How far a stretch reaches once the configuration and the tensions are taken into account.

use super::{Config, Present, TensionPair};
use crate::format::{Limit, Requirement, Stretch};
use crate::table::Slice;

/// Halvings when the tensions end a stretch earlier than the table says: 24 exhaust the digits of an f32.
const HALVINGS: u32 = 24;

/// A stretch, shortened by the configured distance from the fold.
#[derive(Clone, Copy)]
pub(super) struct Trimmed {
    pub(super) from: f32,
    pub(super) to: f32,
    from_limit: Limit,
    to_limit: Limit,
}

impl Trimmed {
    /// `None` when nothing is left.
    pub(super) fn new(stretch: &Stretch, config: &Config) -> Option<Self> {
        let cut = |limit: &Limit| match limit.requirement {
            Requirement::FoldDistance => config.fold_distance(),
            Requirement::TableRange | Requirement::TensionMax => 0.0,
        };
        let shifted = |limit: Limit| Limit {
            value: limit.value + cut(&limit),
            limit: limit.limit + cut(&limit),
            ..limit
        };
        let trimmed = Self {
            from: stretch.from + cut(&stretch.from_limit),
            to: stretch.to - cut(&stretch.to_limit),
            from_limit: shifted(stretch.from_limit),
            to_limit: shifted(stretch.to_limit),
        };
        (trimmed.from <= trimmed.to).then_some(trimmed)
    }

    pub(super) fn contains(&self, setpoint: f32) -> bool {
        self.from <= setpoint && setpoint <= self.to
    }

    /// The point of the stretch nearest to `setpoint`.
    pub(super) fn nearest(&self, setpoint: f32) -> f32 {
        if setpoint >= self.to {
            self.to
        } else if setpoint >= self.from {
            setpoint
        } else {
            self.from
        }
    }

    /// What ends the stretch on the side of `request`.
    pub(super) fn limit_towards(&self, request: f32) -> Limit {
        if request > self.to {
            self.to_limit
        } else {
            self.from_limit
        }
    }
}

/// The tensions that hold `branch` at `setpoint`, if they are allowed.
pub(super) fn holding(slice: &Slice<'_>, branch: u8, setpoint: f32) -> Option<TensionPair> {
    let limits = slice.limits();
    let state = slice.branch(branch)?.state(limits, setpoint)?;
    let tensions = TensionPair::for_couple(state.couple_n_m, &limits);
    tensions.allowed(&limits).then_some(tensions)
}

/// The nearest safe setpoint to a request.
#[derive(Clone, Copy)]
pub(super) struct Reach {
    pub(super) setpoint: f32,
    pub(super) tensions: TensionPair,
    pub(super) why: Limit,
}

impl Reach {
    /// The nearest safe setpoint to `request` in `base`. `None` when the tensions allow nothing there.
    pub(super) fn towards(
        slice: &Slice<'_>,
        branch: u8,
        base: Trimmed,
        present: Present,
        request: f32,
    ) -> Option<Self> {
        let target = base.nearest(request);
        if let Some(tensions) = holding(slice, branch, target) {
            return Some(Self {
                setpoint: target,
                tensions,
                why: base.limit_towards(request),
            });
        }
        // The table ends its stretches where the tension does, so that only rounding is left to find here. Whatever
        // the tensions do in between, what is kept has been evaluated.
        let middle = base.from + 0.5 * (base.to - base.from);
        let starts = [base.nearest(present.setpoint), middle, base.from, base.to];
        let start = starts
            .into_iter()
            .find_map(|at| Some((at, holding(slice, branch, at)?)));
        let (mut setpoint, mut tensions) = start?;
        let mut refused = target;
        for _ in 0..HALVINGS {
            let half = setpoint + 0.5 * (refused - setpoint);
            if !base.contains(half) {
                break;
            }
            match holding(slice, branch, half) {
                Some(held) => (setpoint, tensions) = (half, held),
                None => refused = half,
            }
        }
        let limits = slice.limits();
        Some(Self {
            setpoint,
            tensions,
            why: Limit {
                requirement: Requirement::TensionMax,
                value: tensions.worst_n(&limits),
                limit: limits.max_tension_n,
            },
        })
    }
}
