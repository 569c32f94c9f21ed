//! One stretch: its branch, its ends and its reserves.

use super::{Own, below, sound};
use crate::bytes::float;
use crate::format::{RESERVES, Stretch};
use crate::table::StretchFault;

/// Its branch, its ends, and its place among the other stretches; `before` is the one before it.
pub(super) fn ends(
    found: &Stretch,
    before: Option<Stretch>,
    own: Own<'_>,
) -> Result<(), StretchFault> {
    let Stretch {
        branch, from, to, ..
    } = *found;
    let entry = own
        .branch(branch)
        .ok_or(StretchFault::NoSuchBranch { branch })?;
    if !entry.is_stable() {
        return Err(StretchFault::UnstableBranch {
            branch,
            index: entry.index,
        });
    }
    let limits = [found.from_limit, found.to_limit];
    let values_sound = limits
        .iter()
        .all(|end| sound(end.value) && sound(end.limit));
    if !(values_sound && sound(from) && sound(to)) {
        return Err(StretchFault::NotFinite);
    }
    if !below(from, to) {
        return Err(StretchFault::Empty { from, to });
    }
    if !(entry.from <= from && to <= entry.to) {
        return Err(StretchFault::OutsideBranch {
            from,
            to,
            branch_from: entry.from,
            branch_to: entry.to,
        });
    }
    match before {
        Some(earlier) if earlier.branch > branch => Err(StretchFault::BranchOrder {
            previous: earlier.branch,
            branch,
        }),
        Some(earlier) if earlier.branch == branch && !below(earlier.to, from) => {
            Err(StretchFault::Overlap {
                previous_to: earlier.to,
                from,
            })
        }
        _ => Ok(()),
    }
}

/// Checks the reserves of one stretch at the front of `values` and returns the values after them.
pub(super) fn reserves<'a>(found: &Stretch, values: &'a [u8]) -> Result<&'a [u8], StretchFault> {
    let points = found.points;
    if points < 2 {
        return Err(StretchFault::TooFewPoints { points });
    }
    let wanted = found.reserve_values().saturating_mul(4);
    let (own, rest) = values
        .split_at_checked(wanted)
        .ok_or(StretchFault::ReservesMissing {
            expected: wanted as u32,
            found: values.len() as u32,
        })?;
    for point in 0..points {
        for place in 0..RESERVES {
            let at = usize::from(point) * RESERVES + place;
            // The last of them is the strain.
            let holds = |value: f32| sound(value) && (value >= 0.0 || place + 1 < RESERVES);
            if !float(own, at).is_some_and(holds) {
                return Err(StretchFault::Reserve {
                    point,
                    place: place as u8,
                });
            }
        }
    }
    Ok(rest)
}
