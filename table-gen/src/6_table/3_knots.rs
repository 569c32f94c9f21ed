//! Knots of a branch: the quantities of the table, their slopes, and as many knots as the accuracy needs.

use super::labels::Numbered;
use super::parameter::ExactMap;
use crate::rest_states::RestStates;
use crate::rest_states::curve::{Branch, BranchEnd, RestPoint, Solver};
use crate::rod::Held;
use firmware_core::BranchEntry;

/// Quantities of a stable branch in the order of the format.
pub const QUANTITIES: usize = 6;
/// Quantities kept for an unstable branch.
pub const UNSTABLE_QUANTITIES: usize = 3;
/// Share of the accuracy that interpolation may use between the places it is tried at; the modes have used a quarter.
const INTERPOLATION_SHARE: f64 = 0.6;
/// Distance in the parameter for difference quotients.
const DIFFERENCE: f64 = 1e-4;
/// The same beside a fold, where they are one-sided.
const ONE_SIDED_DIFFERENCE: f64 = 1e-3;
/// Halvings of a branch at most, against a branch that no polynomial follows.
const DEEPEST_HALVING: usize = 12;

/// Mean angle (rad), conjugate (couple (N m) or tip angle (rad)), energy (J), tip x and y (m), restoring stiffness
/// (N m/rad).
pub type Quantities = [f64; QUANTITIES];

/// One knot: parameter, values and slopes.
#[derive(Clone, Copy, Debug)]
pub(super) struct Knot {
    t: f64,
    value: Quantities,
    slope: Quantities,
}

/// Solves the quantities of one branch afresh.
pub(super) struct Sampler<'a> {
    rest: &'a RestStates,
    branch: &'a Branch,
    numbered: Numbered,
    map: ExactMap,
    solver: Solver<'a>,
}

impl<'a> Sampler<'a> {
    /// For the part of a branch that `numbered` names.
    pub(super) fn new(rest: &'a RestStates, numbered: Numbered) -> Self {
        let branch = &rest.branches[numbered.branch];
        let map = ExactMap::new(&rest.rod, branch);
        Self {
            rest,
            branch,
            numbered,
            map,
            solver: Solver::new(&rest.modal),
        }
    }

    pub(super) fn map(&self) -> &ExactMap {
        &self.map
    }

    /// Its number in the table.
    pub(super) fn number(&self) -> usize {
        self.numbered.number
    }

    /// Its position among the slice's own branches.
    pub(super) fn branch(&self) -> usize {
        self.numbered.branch
    }

    /// Setpoints covered, SI.
    pub(super) fn cover(&self) -> [f64; 2] {
        self.numbered.cover
    }

    /// Distance of a setpoint (SI) to the nearest fold of its branch; infinite when it has none.
    pub(super) fn to_fold(&self, setpoint: f64) -> f64 {
        let rod = &self.rest.rod;
        let ends = [
            (self.branch.from_end, self.branch.from()),
            (self.branch.to_end, self.branch.to()),
        ];
        ends.into_iter()
            .filter(|(end, _)| *end == BranchEnd::Fold)
            .map(|(_, at)| (setpoint - rod.setpoint_si(at)).abs())
            .fold(f64::INFINITY, f64::min)
    }

    /// The rest state at `setpoint` (SI), which is taken as the branch's end when rounding puts it beyond.
    pub(super) fn state(&mut self, setpoint: f64) -> Option<RestPoint> {
        let at = self
            .rest
            .rod
            .setpoint_from_si(setpoint)
            .clamp(self.branch.from(), self.branch.to());
        self.branch.state_at(&mut self.solver, at)
    }

    /// The quantities at `setpoint` (SI).
    pub(super) fn quantities(&mut self, setpoint: f64) -> Option<Quantities> {
        let state = self.state(setpoint)?;
        Some(quantities(self.rest, &state))
    }

    fn at(&mut self, t: f64) -> Option<Quantities> {
        let setpoint = self.map.setpoint(t);
        self.quantities(setpoint)
    }

    /// The knot at `t`, with slopes from difference quotients: central ones, or at a fold one-sided of second order.
    fn knot(&mut self, t: f64) -> Option<Knot> {
        let value = self.at(t)?;
        let [low, high] = self.cover().map(|setpoint| self.map.t(setpoint));
        let beside =
            |is_fold: bool, end: f64| is_fold && (t - end).abs() < 2.0 * ONE_SIDED_DIFFERENCE;
        let inward = if beside(self.map.fold_from(), low) {
            1.0
        } else if beside(self.map.fold_to(), high) {
            -1.0
        } else {
            let (before, after) = (self.at(t - DIFFERENCE)?, self.at(t + DIFFERENCE)?);
            let slope = std::array::from_fn(|q| (after[q] - before[q]) / (2.0 * DIFFERENCE));
            return Some(Knot { t, value, slope });
        };
        let h = inward * ONE_SIDED_DIFFERENCE;
        let (one, two) = (self.at(t + h)?, self.at(t + 2.0 * h)?);
        let slope = std::array::from_fn(|q| (4.0 * one[q] - 3.0 * value[q] - two[q]) / (2.0 * h));
        Some(Knot { t, value, slope })
    }

    /// As many knots as keep every quantity within its share of `allowed`; `None` when a state cannot be solved.
    pub(super) fn knots(&mut self, allowed: &Quantities) -> Option<Vec<Knot>> {
        let [low, high] = self.cover().map(|setpoint| self.map.t(setpoint));
        let mut knots = vec![self.knot(low)?];
        let last = self.knot(high)?;
        self.refine(last, allowed, DEEPEST_HALVING, &mut knots)?;
        Some(knots)
    }

    /// Appends knots up to `to`, halving the interval from the last one until it is followed well enough.
    fn refine(
        &mut self,
        to: Knot,
        allowed: &Quantities,
        depth: usize,
        knots: &mut Vec<Knot>,
    ) -> Option<()> {
        let from = knots[knots.len() - 1];
        let kept = self.kept();
        let mut follows = true;
        for x in [0.15, 0.3, 0.5, 0.7, 0.85] {
            let truth = self.at(from.t + x * (to.t - from.t))?;
            let foretold = hermite(&from, &to, x);
            follows &= (0..kept)
                .all(|q| (foretold[q] - truth[q]).abs() <= INTERPOLATION_SHARE * allowed[q]);
        }
        if follows || depth == 0 {
            knots.push(to);
            return Some(());
        }
        let middle = self.knot(0.5 * (from.t + to.t))?;
        self.refine(middle, allowed, depth - 1, knots)?;
        self.refine(to, allowed, depth - 1, knots)
    }

    /// How many quantities the table keeps for this branch.
    fn kept(&self) -> usize {
        if self.branch.index == 0 {
            QUANTITIES
        } else {
            UNSTABLE_QUANTITIES
        }
    }

    /// The branch's directory entry and the values of its knots, as stored.
    pub(super) fn stored(&self, knots: &[Knot], exits: u32) -> (BranchEntry, Vec<f32>) {
        let map = self.map.stored();
        let [from, to] = self.cover().map(|setpoint| setpoint as f32);
        let entry = BranchEntry {
            number: self.numbered.number as u8,
            index: self.branch.index as u8,
            from,
            to,
            anchor_from: map.anchor_from,
            anchor_to: map.anchor_to,
            fold_from: map.fold_from,
            fold_to: map.fold_to,
            exits,
            knots: knots.len() as u16,
        };
        let mut values = Vec::new();
        for knot in knots {
            values.push(knot.t as f32);
            for q in 0..self.kept() {
                values.extend([knot.value[q] as f32, knot.slope[q] as f32]);
            }
        }
        (entry, values)
    }
}

impl Knot {
    /// Its parameter.
    pub(super) fn t(&self) -> f64 {
        self.t
    }
}

/// Cubic Hermite interpolation between two knots at the fraction `x`.
fn hermite(a: &Knot, b: &Knot, x: f64) -> Quantities {
    let (h, y) = (b.t - a.t, 1.0 - x);
    std::array::from_fn(|q| {
        a.value[q]
            + x * x * (3.0 - 2.0 * x) * (b.value[q] - a.value[q])
            + h * x * y * (y * a.slope[q] - x * b.slope[q])
    })
}

/// The table's quantities of a rest state.
pub fn quantities(rest: &RestStates, state: &RestPoint) -> Quantities {
    let rod = &rest.rod;
    let (x, y) = rest.modal.tip(&state.c);
    let conjugate = match rod.held {
        Held::TipAngle => state.couple * rod.energy_scale_j,
        Held::TipCouple => state.tip_angle(),
    };
    [
        state.mean_angle(),
        conjugate,
        state.energy * rod.energy_scale_j,
        x * rod.length_m,
        y * rod.length_m,
        rest.modal.restoring_stiffness(&state.c).unwrap_or(0.0) * rod.energy_scale_j,
    ]
}
