//! From where to where crossings are planned.
//!
//! A crossing begins within a run of setpoints of one stable branch and ends at one setpoint of another. The firmware goes to
//! the nearest run by itself, so a few runs at the end towards the other branch do. All slices share the borders of the runs:
//! with an unknown payload the firmware begins only where the runs of all slices meet. A crossing ends where the arm may rest
//! whatever its payload, if there is such a place.

use crate::arm_file::Swing;
use crate::margins::corners::Corners;
use crate::margins::usable::Usable;
use crate::rest_states::curve::BranchEnd;

/// Width of a run (rad): 3 degrees.
const RUN_RAD: f64 = 0.052_36;
/// Runs within what is usable whatever the payload.
const COMMON_RUNS: usize = 2;
/// Most runs of one slice beyond that.
const MOST_OWN_RUNS: usize = 5;
/// Distance from the end of a stretch to where a crossing ends (rad).
const INSET_RAD: f64 = 0.01;
/// How much further towards the other branch it may end (rad).
const FURTHER_RAD: [f64; 4] = [0.0, 0.14, 0.28, 0.42];
/// A run narrower than this is no use (rad).
const NARROWEST_RAD: f64 = 2e-3;

/// From where to where.
#[derive(Clone, Debug)]
pub(super) struct Place {
    /// Position of the payload among the slices'.
    pub(super) slice: usize,
    /// Nominal branches.
    pub(super) from: usize,
    pub(super) to: usize,
    /// Setpoints from which the crossing begins (rad).
    pub(super) run: [f64; 2],
    /// Setpoints at which it may end (rad), the nearest first: further towards the other branch the pass is lower, and on the
    /// way there the arm leans.
    pub(super) rests: Vec<f64>,
    /// The end of the branch `from` towards `to`, the farthest in any corner (rad), where it is a fold.
    pub(super) fold: Option<f64>,
}

/// A run of setpoints, lowest and highest.
type Ends = [f64; 2];

/// All places, in a fixed order.
pub(super) fn places(corners: &Corners, usable: &Usable, swing: &Swing) -> Vec<Place> {
    let nominal = &corners.nominal;
    let stable: Vec<usize> = (0..nominal.branches.len())
        .filter(|&label| nominal.branches[label].index == 0)
        .collect();
    let middle = |label: usize| {
        let branch = &nominal.branches[label];
        0.5 * (branch.from() + branch.to())
    };
    let mut places = Vec::new();
    for &from in &stable {
        for &to in &stable {
            if from == to || middle(from) == middle(to) {
                continue;
            }
            // +1 when the way to the other branch leads to higher setpoints.
            let way = (middle(to) - middle(from)).signum();
            for slice in 0..corners.payloads_kg.len() {
                let pair = Pair {
                    corners,
                    usable,
                    from,
                    to,
                    slice,
                    way,
                };
                places.extend(pair.places(swing));
            }
        }
    }
    places
}

struct Pair<'a> {
    corners: &'a Corners,
    usable: &'a Usable,
    from: usize,
    to: usize,
    slice: usize,
    way: f64,
}

impl Pair<'_> {
    fn common(&self, label: usize) -> Vec<Ends> {
        let runs = self
            .usable
            .any_payload(label, self.corners.payloads_kg.len());
        runs.into_iter().map(|(ends, _)| ends).collect()
    }

    fn own(&self, label: usize) -> Vec<Ends> {
        let of = self.usable.stretches.iter();
        of.filter(|s| s.label == label && s.slice == self.slice)
            .map(|s| s.ends)
            .collect()
    }

    /// Of `runs` the one that reaches furthest towards the other branch.
    fn furthest(&self, runs: &[Ends]) -> Option<Ends> {
        let end = |run: &Ends| self.way * self.end(*run);
        runs.iter()
            .copied()
            .max_by(|a, b| end(a).total_cmp(&end(b)))
    }

    /// The end of a run towards the other branch.
    fn end(&self, run: Ends) -> f64 {
        if self.way > 0.0 { run[1] } else { run[0] }
    }

    fn places(&self, swing: &Swing) -> Vec<Place> {
        let Some(own) = self.furthest(&self.own(self.from)) else {
            return Vec::new();
        };
        let common = self.furthest(&self.common(self.from)).unwrap_or(own);
        let mut goals = self.common(self.to);
        if goals.is_empty() {
            goals = self.own(self.to);
        }
        let fold = self.fold();
        let border = self.end(common);
        let runs = (-(COMMON_RUNS as i32)..MOST_OWN_RUNS as i32).map(|k| {
            let near = border + self.way * RUN_RAD * f64::from(k);
            let far = near + self.way * RUN_RAD;
            [near.min(far).max(own[0]), near.max(far).min(own[1])]
        });
        runs.filter(|run| run[1] - run[0] > NARROWEST_RAD)
            .filter_map(|run| {
                let middle = 0.5 * (run[0] + run[1]);
                let first = nearest(&goals, middle)?;
                let mut rests: Vec<f64> = FURTHER_RAD
                    .iter()
                    .filter_map(|further| nearest(&goals, first + self.way * further))
                    .filter(|rest| (rest - middle).abs() <= swing.max_tip_travel_rad)
                    .collect();
                rests.dedup();
                (!rests.is_empty()).then_some(Place {
                    slice: self.slice,
                    from: self.from,
                    to: self.to,
                    run,
                    rests,
                    fold,
                })
            })
            .collect()
    }

    /// The farthest fold at the end of `from` towards `to` in the slice's corners.
    fn fold(&self) -> Option<f64> {
        let nominal = &self.corners.nominal;
        let own = &nominal.branches[self.from];
        let inner = nominal
            .rod
            .setpoint_si(0.5 * (own.from().max(nominal.rod.setpoints[0]) + own.to()));
        let start = self.corners.nominal_state(self.from, inner)?;
        let in_slice = |corner: &&crate::margins::corners::CornerArm| corner.slice == self.slice;
        let mut farthest: Option<f64> = None;
        for corner in self.corners.arms.iter().filter(in_slice) {
            let c = corner.follow(nominal, &start)?;
            let states = corner.states(inner).ok()?;
            let number = states.numbers[states.nearest_well(&c)?];
            let branch = &corner.rest.branches[number];
            let (end, at) = if self.way > 0.0 {
                (branch.to_end, branch.to())
            } else {
                (branch.from_end, branch.from())
            };
            if end != BranchEnd::Fold {
                return None;
            }
            let at = corner.rest.rod.setpoint_si(at);
            if farthest.is_none_or(|before| self.way * (at - before) > 0.0) {
                farthest = Some(at);
            }
        }
        farthest
    }
}

/// The place nearest to `at` within `runs`, kept off their ends.
fn nearest(runs: &[Ends], at: f64) -> Option<f64> {
    let within = |run: &Ends| {
        let inset = INSET_RAD.min(0.25 * (run[1] - run[0]));
        at.clamp(run[0] + inset, run[1] - inset)
    };
    runs.iter()
        .map(within)
        .min_by(|a, b| (a - at).abs().total_cmp(&(b - at).abs()))
}
