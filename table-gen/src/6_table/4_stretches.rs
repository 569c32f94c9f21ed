//! The usable stretches as the table stores them.

use crate::margins::requirements::Kind;
use crate::margins::usable::{EndLimit, POINTS, UsableStretch};
use firmware_core::{BranchEntry, Limit, Requirement, Stretch, UNBOUNDED};

/// A stretch with its reserves, point after point.
pub(super) struct StoredStretch {
    pub(super) stretch: Stretch,
    pub(super) reserves: Vec<f32>,
}

/// Rounds a stretch inwards to f32, and to the cover of its branch in the slice; `None` when nothing is left, or the slice has
/// no branch of its number.
pub(super) fn stored_stretch(
    usable: &UsableStretch,
    branches: &[(BranchEntry, Vec<f32>)],
) -> Option<StoredStretch> {
    let number = usable.label as u8;
    let (entry, _) = branches
        .iter()
        .find(|(entry, _)| entry.number == number && entry.is_stable())?;
    let inward = |value: f64, up: bool| match (value as f32, up) {
        (rounded, true) if f64::from(rounded) < value => rounded.next_up(),
        (rounded, false) if f64::from(rounded) > value => rounded.next_down(),
        (rounded, _) => rounded,
    };
    let from = inward(usable.ends[0], true).max(entry.from);
    let to = inward(usable.ends[1], false).min(entry.to);
    let [from_limit, to_limit] = usable.limits.map(stored_limit);
    let stretch = Stretch {
        branch: number,
        from,
        to,
        from_limit,
        to_limit,
        points: POINTS as u8,
    };
    let reserves = usable
        .reserves
        .iter()
        .flatten()
        .map(|reserve| reserve.map_or(UNBOUNDED, |r| r as f32));
    (from < to).then(|| StoredStretch {
        stretch,
        reserves: reserves.collect(),
    })
}

fn stored_limit(end: EndLimit) -> Limit {
    let requirement = match end.kind {
        None => Requirement::TableRange,
        Some(Kind::Stable) => Requirement::Stable,
        Some(Kind::Knock) => Requirement::KnockImpulse,
        Some(Kind::PayloadReserve) => Requirement::PayloadReserve,
        Some(Kind::StiffnessReserve) => Requirement::StiffnessReserve,
        Some(Kind::SetpointReserve) => Requirement::SetpointReserve,
        Some(Kind::TensionFactor) => Requirement::TensionFactor,
        Some(Kind::Strain) => Requirement::Strain,
        Some(Kind::Clearance) => Requirement::Clearance,
    };
    Limit {
        requirement,
        value: end.value as f32,
        limit: end.limit as f32,
    }
}
