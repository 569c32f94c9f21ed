//! Which branch of a slice bears which number: the same number means the same branch in every slice.
//!
//! Numbers are those of the nominal arm. A stable branch of another payload bears the number of the nominal branch that was
//! followed to it; where two nominal branches arrive on one (the arm has fewer rest shapes with that payload), it is cut
//! half way between the setpoints at which they do. What no nominal branch arrives at gets a number of its own.

use crate::margins::corners::Corners;
use crate::margins::requirements::Look;
use crate::margins::usable::Usable;

/// A numbered part of a branch of one slice.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Numbered {
    /// Its number in the table.
    pub(super) number: usize,
    /// Its position among the slice's own branches.
    pub(super) branch: usize,
    /// Setpoints it covers, SI.
    pub(super) cover: [f64; 2],
}

/// The setpoints at which one nominal branch arrives on a branch of the slice.
#[derive(Clone, Copy)]
struct Claim {
    label: usize,
    branch: usize,
    from: f64,
    to: f64,
}

/// All branches of the slice whose own arm is `corners.arms[arm]`, by number. `spare` is the first number no slice has used: a
/// number stands for one branch throughout the table.
pub(super) fn numbered(
    corners: &Corners,
    usable: &Usable,
    arm: usize,
    spare: &mut usize,
) -> Vec<Numbered> {
    let claims = claims(usable, arm, corners.arms[arm].slice);
    let rest = &corners.arms[arm].rest;
    let nominal = &corners.nominal;
    let pattern = |branches: &[crate::rest_states::curve::Branch]| -> Vec<usize> {
        branches.iter().map(|branch| branch.index).collect()
    };
    let same_pattern = pattern(&rest.branches) == pattern(&nominal.branches)
        && claims.iter().all(|claim| claim.branch == claim.label);
    let mut unused = || {
        *spare += 1;
        *spare - 1
    };
    let mut found: Vec<Numbered> = Vec::new();
    for (position, branch) in rest.branches.iter().enumerate() {
        let [lo, hi] = rest.rod.setpoints;
        let [from, to] =
            [branch.from().max(lo), branch.to().min(hi)].map(|s| rest.rod.setpoint_si(s));
        let mut own: Vec<&Claim> = claims
            .iter()
            .filter(|claim| claim.branch == position)
            .collect();
        own.sort_by(|a, b| a.from.total_cmp(&b.from));
        if same_pattern || own.is_empty() {
            let number = if same_pattern { position } else { unused() };
            found.push(Numbered {
                number,
                branch: position,
                cover: [from, to],
            });
            continue;
        }
        for (place, claim) in own.iter().enumerate() {
            let cut = |a: &Claim, b: &Claim| 0.5 * (a.to + b.from);
            let low = place
                .checked_sub(1)
                .map_or(from, |before| cut(own[before], claim));
            let high = own.get(place + 1).map_or(to, |after| cut(claim, after));
            // A nominal branch that arrives on two branches keeps its number on the first.
            let taken = found.iter().any(|n| n.number == claim.label);
            let number = if taken { unused() } else { claim.label };
            found.push(Numbered {
                number,
                branch: position,
                cover: [low, high],
            });
        }
    }
    found.sort_by_key(|numbered| numbered.number);
    found
}

fn claims(usable: &Usable, arm: usize, slice: usize) -> Vec<Claim> {
    let mut claims: Vec<Claim> = Vec::new();
    for along in &usable.along {
        for (setpoint, assessed) in &along.points {
            let Look::There(margins) = &assessed.margins[arm] else {
                continue;
            };
            let known = claims
                .iter_mut()
                .find(|c| c.label == along.label && c.branch == margins.branch);
            match known {
                Some(claim) => {
                    claim.from = claim.from.min(*setpoint);
                    claim.to = claim.to.max(*setpoint);
                }
                None => claims.push(Claim {
                    label: along.label,
                    branch: margins.branch,
                    from: *setpoint,
                    to: *setpoint,
                }),
            }
        }
    }
    // Stretches reach between the points that were looked at; no cut may go through one.
    for stretch in usable
        .stretches
        .iter()
        .filter(|stretch| stretch.slice == slice)
    {
        let [from, to] = stretch.ends;
        let own = claims.iter_mut().filter(|c| c.label == stretch.label);
        if let Some(claim) =
            own.max_by(|a, b| overlap(a, from, to).total_cmp(&overlap(b, from, to)))
        {
            claim.from = claim.from.min(from);
            claim.to = claim.to.max(to);
        }
    }
    claims
}

/// How far a claim and the interval overlap; negative when they do not.
fn overlap(claim: &Claim, from: f64, to: f64) -> f64 {
    claim.to.min(to) - claim.from.max(from)
}
