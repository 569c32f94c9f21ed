//! Which setpoints are usable on each stable branch, with how much reserve, slice by slice of payload.

use super::requirements::{Assessed, Assessor, Finding, Kind, Look, Margins};
use crate::rest_states::RestStatesError;

/// Setpoints along a branch at which it is assessed before the ends of its usable stretches are refined.
const COARSE: usize = 48;
/// Halvings of a step of the coarse grid: an end is known to about 1/50000 of the branch.
const HALVINGS: usize = 10;
/// Points of a stretch at which its reserves are kept.
pub const POINTS: usize = 17;
/// What linear interpolation overstates is largest near the middle of an interval, where it is measured; this covers the rest.
const OVERSTATED: f64 = 1.25;

/// Reserves in the order of the table: barrier (J), knock (N s), payload (kg), stiffness (fraction), setpoint (rad or N m),
/// restoring stiffness (N m/rad), tension factor, clearance (m), strain. `None` without bound.
pub type Reserves = [Option<f64>; 9];
/// Position of the payload reserve among them.
const PAYLOAD: usize = 2;
/// Position of the strain among them, the only one of which more is worse.
const STRAIN: usize = 8;

/// What ends a stretch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct EndLimit {
    /// The requirement that fails beyond; `None` at an end of the branch's range.
    pub kind: Option<Kind>,
    /// Its value at the end, SI; the setpoint itself at an end of the range.
    pub value: f64,
    /// Its limit, SI.
    pub limit: f64,
}

/// A run of usable setpoints of one branch with the payload of one slice.
#[derive(Clone, Debug)]
pub struct UsableStretch {
    /// Nominal branch.
    pub label: usize,
    /// Position of the payload among the slices'.
    pub slice: usize,
    /// Lowest and highest setpoint, SI.
    pub ends: [f64; 2],
    /// What ends it, below and above.
    pub limits: [EndLimit; 2],
    /// Worst reserves at [`POINTS`] setpoints spread evenly from end to end, less what linear interpolation would overstate.
    pub reserves: Vec<Reserves>,
}

/// Everything assessed along one branch.
#[derive(Clone, Debug)]
pub struct Along {
    /// Nominal branch.
    pub label: usize,
    /// Setpoints (SI) with the margins of every corner.
    pub points: Vec<(f64, Assessed)>,
}

/// The usable stretches of an arm.
#[derive(Clone, Debug)]
pub struct Usable {
    /// By slice, branch and setpoint.
    pub stretches: Vec<UsableStretch>,
    /// What they were found from.
    pub along: Vec<Along>,
}

impl Usable {
    /// Assesses every stable branch and finds its stretches. `progress` is called with the fraction done.
    ///
    /// # Errors
    /// [`RestStatesError`] when a corner's rest states cannot be solved.
    pub fn find(
        assessor: &Assessor,
        progress: &mut dyn FnMut(f64),
    ) -> Result<Self, RestStatesError> {
        let corners = assessor.corners();
        let nominal = &corners.nominal;
        let stable: Vec<usize> = (0..nominal.branches.len())
            .filter(|&l| nominal.branches[l].index == 0)
            .collect();
        let mut usable = Self {
            stretches: Vec::new(),
            along: Vec::new(),
        };
        let parts = (stable.len() * (1 + corners.payloads_kg.len())) as f64;
        let mut part = 0.0;
        for &label in &stable {
            usable.along.push(along(assessor, label)?);
            part += 1.0;
            progress(part / parts);
        }
        for slice in 0..corners.payloads_kg.len() {
            for along in &usable.along {
                let search = Search {
                    assessor,
                    label: along.label,
                    slice,
                };
                usable.stretches.extend(search.stretches(along)?);
                part += 1.0;
                progress(part / parts);
            }
        }
        Ok(usable)
    }

    /// Runs of setpoints of branch `label` that are usable whatever the payload, with what ends them.
    pub fn any_payload(&self, label: usize, slices: usize) -> Vec<([f64; 2], [EndLimit; 2])> {
        let of = |slice: usize| {
            self.stretches
                .iter()
                .filter(move |s| s.label == label && s.slice == slice)
        };
        let mut runs: Vec<([f64; 2], [EndLimit; 2])> = of(0).map(|s| (s.ends, s.limits)).collect();
        for slice in 1..slices {
            let mut both = Vec::new();
            for (ends, limits) in &runs {
                for other in of(slice) {
                    let low = if other.ends[0] > ends[0] {
                        (other.ends[0], other.limits[0])
                    } else {
                        (ends[0], limits[0])
                    };
                    let high = if other.ends[1] < ends[1] {
                        (other.ends[1], other.limits[1])
                    } else {
                        (ends[1], limits[1])
                    };
                    if low.0 < high.0 {
                        both.push(([low.0, high.0], [low.1, high.1]));
                    }
                }
            }
            runs = both;
        }
        runs
    }
}

/// Assesses a branch over its cover within the setpoint range, in every corner.
fn along(assessor: &Assessor, label: usize) -> Result<Along, RestStatesError> {
    let nominal = &assessor.corners().nominal;
    let rod = &nominal.rod;
    let branch = &nominal.branches[label];
    let [from, to] = [
        branch.from().max(rod.setpoints[0]),
        branch.to().min(rod.setpoints[1]),
    ]
    .map(|s| rod.setpoint_si(s));
    let mut points = Vec::new();
    for k in 0..=COARSE {
        let setpoint = between(from, to, k as f64 / COARSE as f64);
        points.extend(
            assessor
                .assess(setpoint, Some(label), None)?
                .into_iter()
                .map(|a| (setpoint, a)),
        );
    }
    Ok(Along { label, points })
}

fn between(from: f64, to: f64, x: f64) -> f64 {
    from * (1.0 - x) + to * x
}

struct Search<'a, 'b> {
    assessor: &'a Assessor<'b>,
    label: usize,
    slice: usize,
}

impl Search<'_, '_> {
    /// The state at `setpoint` with this slice's corners; `None` where the branch is not.
    fn assess(&self, setpoint: f64) -> Result<Option<Assessed>, RestStatesError> {
        Ok(self
            .assessor
            .assess(setpoint, Some(self.label), Some(self.slice))?
            .pop())
    }

    /// What forbids a state, if anything: the first requirement that does not hold.
    fn forbids(&self, assessed: &Assessed) -> Option<Finding> {
        self.assessor
            .findings(assessed, Some(self.slice))
            .into_iter()
            .find(|finding| !finding.holds)
    }

    fn stretches(&self, along: &Along) -> Result<Vec<UsableStretch>, RestStatesError> {
        let mut found = Vec::new();
        let mut open: Option<(f64, EndLimit)> = None;
        for (k, (setpoint, assessed)) in along.points.iter().enumerate() {
            let forbids = self.forbids(assessed);
            match (open, forbids) {
                (None, None) if k == 0 => open = Some((*setpoint, range_end(*setpoint))),
                (None, None) => {
                    let (bad, why) = &along.points[k - 1];
                    open = Some(self.end(*setpoint, *bad, self.forbids(why))?);
                }
                (Some(start), Some(why)) => {
                    let end = self.end(along.points[k - 1].0, *setpoint, Some(why))?;
                    self.complete(start, end, &mut found)?;
                    open = None;
                }
                _ => {}
            }
        }
        if let (Some(start), Some((last, _))) = (open, along.points.last()) {
            self.complete(start, (*last, range_end(*last)), &mut found)?;
        }
        Ok(found)
    }

    /// The last good setpoint between a good one and a bad one, and what forbids going on.
    fn end(
        &self,
        mut good: f64,
        mut bad: f64,
        mut why: Option<Finding>,
    ) -> Result<(f64, EndLimit), RestStatesError> {
        let mut at_end = None;
        for _ in 0..HALVINGS {
            let middle = 0.5 * (good + bad);
            let assessed = self.assess(middle)?;
            match assessed.as_ref().map(|a| self.forbids(a)) {
                Some(None) => {
                    good = middle;
                    at_end = assessed;
                }
                Some(Some(finding)) => {
                    bad = middle;
                    why = Some(finding);
                }
                None => bad = middle,
            }
        }
        let Some(why) = why else {
            return Ok((good, range_end(good)));
        };
        let at_end = match at_end {
            Some(assessed) => Some(assessed),
            None => self.assess(good)?,
        };
        let value = at_end
            .map(|assessed| self.assessor.findings(&assessed, Some(self.slice)))
            .and_then(|findings| {
                findings
                    .into_iter()
                    .find(|finding| finding.kind == why.kind)
            })
            .and_then(|finding| finding.value)
            .unwrap_or(why.limit);
        Ok((
            good,
            EndLimit {
                kind: Some(why.kind),
                value,
                limit: why.limit,
            },
        ))
    }

    /// Adds the stretch with its reserves; where a point between proves unusable, the two parts beside it.
    fn complete(
        &self,
        start: (f64, EndLimit),
        end: (f64, EndLimit),
        found: &mut Vec<UsableStretch>,
    ) -> Result<(), RestStatesError> {
        if start.0 >= end.0 {
            return Ok(());
        }
        // Every other one is a stored point, the others measure what interpolation overstates.
        let mut fine = Vec::new();
        let mut good = start.0;
        for k in 0..2 * POINTS - 1 {
            let setpoint = between(start.0, end.0, k as f64 / (2 * POINTS - 2) as f64);
            let Some(assessed) = self.assess(setpoint)? else {
                return Ok(());
            };
            let is_end = k == 0 || k == 2 * POINTS - 2;
            if let Some(why) = self.forbids(&assessed).filter(|_| !is_end) {
                let before = self.end(good, setpoint, Some(why))?;
                self.complete(start, before, found)?;
                let beyond = between(start.0, end.0, (k + 1) as f64 / (2 * POINTS - 2) as f64);
                let usable_beyond = self
                    .assess(beyond)?
                    .is_some_and(|a| self.forbids(&a).is_none());
                if usable_beyond {
                    let after = self.end(beyond, setpoint, Some(why))?;
                    self.complete(after, end, found)?;
                }
                return Ok(());
            }
            good = setpoint;
            fine.push(self.worst(&assessed));
        }
        found.push(UsableStretch {
            label: self.label,
            slice: self.slice,
            ends: [start.0, end.0],
            limits: [start.1, end.1],
            reserves: understated(&fine),
        });
        Ok(())
    }

    /// Worst reserves over the slice's corners.
    fn worst(&self, assessed: &Assessed) -> Fine {
        let mut worst: Reserves = [None; 9];
        let mut bounded = [0; 9];
        worst[PAYLOAD] = assessed.payload_reserve.map(|(reserve, _)| reserve);
        bounded[PAYLOAD] = usize::from(worst[PAYLOAD].is_some());
        for (corner, look) in self.assessor.corners().arms.iter().zip(&assessed.margins) {
            let Look::There(margins) = look else { continue };
            if corner.slice != self.slice {
                continue;
            }
            for (place, value) in reserves(margins).into_iter().enumerate() {
                if let Some(value) = value {
                    worst[place] = Some(worse(place, worst[place], value));
                    bounded[place] += 1;
                }
            }
        }
        Fine { worst, bounded }
    }
}

/// Worst reserves at one of the finer setpoints.
struct Fine {
    worst: Reserves,
    /// In how many corners each has a bound.
    bounded: [usize; 9],
}

fn range_end(setpoint: f64) -> EndLimit {
    EndLimit {
        kind: None,
        value: setpoint,
        limit: setpoint,
    }
}

/// One corner's reserves; the payload reserve is not one corner's.
fn reserves(margins: &Margins) -> Reserves {
    [
        margins.barrier_j,
        margins.knock_n_s,
        None,
        margins.stiffness_reserve,
        margins.setpoint_reserve,
        Some(margins.restoring_n_m_per_rad),
        margins.tension_factor,
        margins.clearance_m,
        Some(margins.strain),
    ]
}

/// The worse of two values of one reserve.
fn worse(place: usize, a: Option<f64>, b: f64) -> f64 {
    match a {
        None => b,
        Some(a) if place == STRAIN => a.max(b),
        Some(a) => a.min(b),
    }
}

/// Every other of the `fine` reserves, made worse by what linear interpolation between them would overstate.
fn understated(fine: &[Fine]) -> Vec<Reserves> {
    let mut kept: Vec<Reserves> = fine.iter().step_by(2).map(|f| f.worst).collect();
    for k in 0..kept.len() - 1 {
        let lowered: [[Option<f64>; 2]; 9] =
            std::array::from_fn(|place| lowered(fine, 2 * k, place));
        for (end, point) in kept[k..=k + 1].iter_mut().enumerate() {
            for (place, reserve) in point.iter_mut().enumerate() {
                if let Some(lowered) = lowered[place][end] {
                    *reserve = Some(worse(place, *reserve, lowered));
                }
            }
        }
    }
    kept
}

/// What one reserve has to be at both ends of the interval that begins at the fine point `from`, so that the straight line
/// between them overstates nothing.
fn lowered(fine: &[Fine], from: usize, place: usize) -> [Option<f64>; 2] {
    let points = [0, 1, 2].map(|i| &fine[from + i]);
    let values @ [left, truth, right] = points.map(|f| f.worst[place]);
    let bounded = points.map(|f| f.bounded[place]);
    // Where a corner gains or loses its bound on the way, its own value goes on past the last point that shows it: the least
    // of the three, less the steepest fall seen beside the interval, holds all along.
    if bounded[0] != bounded[1] || bounded[1] != bounded[2] {
        let least = values.into_iter().flatten().min_by(f64::total_cmp);
        return [least.map(|least| least - OVERSTATED * steepest_fall(fine, from, place)); 2];
    }
    let (Some(left), Some(truth), Some(right)) = (left, truth, right) else {
        return [None; 2];
    };
    let overstated = 0.5 * (left + right) - truth;
    let change = match place {
        STRAIN => OVERSTATED * (-overstated).max(0.0),
        _ => -OVERSTATED * overstated.max(0.0),
    };
    [Some(left + change), Some(right + change)]
}

/// How much a reserve falls over one interval towards the one that begins at the fine point `from`, on either side of it.
fn steepest_fall(fine: &[Fine], from: usize, place: usize) -> f64 {
    let fall = |outer: Option<usize>, inner: usize| -> f64 {
        let value = |at: usize| fine.get(at).and_then(|f| f.worst[place]);
        match (outer.and_then(value), value(inner)) {
            (Some(outer), Some(inner)) => (outer - inner).max(0.0),
            _ => 0.0,
        }
    };
    fall(from.checked_sub(2), from).max(fall(Some(from + 4), from + 2))
}
