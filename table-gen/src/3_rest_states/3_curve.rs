//! Rest states followed along the setpoint by pseudo-arclength continuation.
//!
//! Every rest state, at whatever setpoint, makes the gradient vanish in all modes but the first: `n - 1` equations for `n`
//! coefficients. Their solutions are smooth curves, whichever quantity the drive holds: what it holds (the setpoint) only
//! decides where a curve folds. In the exact rod they are the graph of the setpoint over the base curvature `alpha'(0)`, so
//! they never cross; an arm at its critical stiffness shows a flat spot there, not a branching.

use super::modes::{Evaluation, ModalRod, base_curvature, mean_angle, morse_index};
use crate::rod::Held;
use nalgebra::{DMatrix, DVector, Dyn, LU};

/// Longest step along a curve, in the Euclidean norm of the coefficients (rad).
const LONGEST_STEP: f64 = 0.5;
/// Shortest step before the continuation gives up.
const SHORTEST_STEP: f64 = 1e-7;
/// Points after which a curve counts as going round in circles, which no rest curve of a rod does.
const LONGEST_CURVE: usize = 20_000;
/// Cosine of the largest turn of the tangent in one step.
const TURN_COSINE: f64 = 0.97;
/// Newton has converged when its last step was below this: the next would be its square.
const CONVERGED_STEP: f64 = 1e-8;
/// Newton steps before it counts as lost.
const NEWTON_STEPS: usize = 8;

/// One rest state on a curve.
#[derive(Clone, Debug)]
pub struct RestPoint {
    /// Mode coefficients.
    pub c: Vec<f64>,
    /// Unit tangent of the curve.
    pub tangent: Vec<f64>,
    /// Setpoint at which it rests (rad or m g L).
    pub setpoint: f64,
    /// Change of the setpoint along the tangent; zero at a fold.
    pub setpoint_rate: f64,
    /// The same relative to the steepest direction there is, in 0..=1: how far from a fold the curve runs.
    pub rise: f64,
    /// Morse index: 0 stable, 1 a pass between two wells, more a hilltop.
    pub index: usize,
    /// Potential energy without the drive's work (m g L).
    pub energy: f64,
    /// Tip couple that holds it (m g L).
    pub couple: f64,
}

impl RestPoint {
    /// Mean angle (rad).
    pub fn mean_angle(&self) -> f64 {
        mean_angle(&self.c)
    }

    /// Tip angle (rad).
    pub fn tip_angle(&self) -> f64 {
        self.c[0]
    }

    /// Base curvature times L.
    pub fn base_curvature(&self) -> f64 {
        base_curvature(&self.c)
    }

    /// The same point with the curve run through the other way.
    fn reversed(mut self) -> Self {
        self.tangent.iter_mut().for_each(|t| *t = -*t);
        self.setpoint_rate = -self.setpoint_rate;
        self
    }

    /// The potential that is stationary at the setpoint: the energy less the drive's work (m g L).
    pub fn potential(&self, modal: &ModalRod) -> f64 {
        match modal.held() {
            Held::TipAngle => self.energy,
            Held::TipCouple => self.energy - self.couple * self.c[0],
        }
    }
}

/// Change of the mean angle along the tangent.
pub(super) fn mean_angle_rate(point: &RestPoint) -> f64 {
    mean_angle(&point.tangent)
}

/// A condition that picks one point of a curve.
#[derive(Clone, Copy)]
enum Pick<'a> {
    /// The setpoint has this value.
    Setpoint(f64),
    /// The point lies in the plane through `through` across `tangent`.
    Across {
        through: &'a [f64],
        tangent: &'a [f64],
    },
}

/// Solves for rest points; owns the working space.
pub struct Solver<'a> {
    modal: &'a ModalRod,
    at: Evaluation,
    /// Factor on the steps along curves, at most 1.
    fineness: f64,
    /// Points solved and classified so far.
    pub solved: usize,
}

impl<'a> Solver<'a> {
    /// A solver for `modal`.
    pub fn new(modal: &'a ModalRod) -> Self {
        Self::finer(modal, 1.0)
    }

    /// A solver that follows curves in steps of `fineness` times the usual length, at most 1.
    pub fn finer(modal: &'a ModalRod, fineness: f64) -> Self {
        Self {
            modal,
            at: Evaluation::new(modal.modes()),
            fineness,
            solved: 0,
        }
    }

    /// The rod whose rest states it solves.
    pub fn modal(&self) -> &'a ModalRod {
        self.modal
    }

    /// Number of modes.
    pub fn modes(&self) -> usize {
        self.modal.modes()
    }

    /// The rest state at `setpoint` nearest to `guess`, or `None` when Newton does not settle there.
    pub fn at_setpoint(&mut self, guess: &[f64], setpoint: f64) -> Option<RestPoint> {
        let mut start = guess.to_vec();
        if self.modal.first_free() == 1 {
            start[0] = setpoint;
        }
        self.solve(start, Pick::Setpoint(setpoint), None)
    }

    /// The point of the curve in the plane across `tangent` through `through`.
    fn across(&mut self, through: &[f64], tangent: &[f64]) -> Option<RestPoint> {
        self.solve(
            through.to_vec(),
            Pick::Across { through, tangent },
            Some(tangent),
        )
    }

    /// Newton on the rest conditions and `pick`; the tangent is oriented along `forward`, or along rising setpoint.
    fn solve(&mut self, mut c: Vec<f64>, pick: Pick, forward: Option<&[f64]>) -> Option<RestPoint> {
        let n = c.len();
        let mut last_step = f64::INFINITY;
        for _ in 0..NEWTON_STEPS {
            self.modal.evaluate(&c, &mut self.at);
            let mut matrix = self.at.hessian.clone();
            let mut rhs = DVector::from_iterator(n, self.at.gradient.iter().map(|g| -g));
            self.set_row(&mut matrix, pick);
            rhs[0] = match pick {
                Pick::Setpoint(value) => value - self.modal.setpoint(&c, &self.at),
                Pick::Across { through, tangent } => {
                    (0..n).map(|j| tangent[j] * (through[j] - c[j])).sum()
                }
            };
            let lu = matrix.lu();
            let step = lu.solve(&rhs)?;
            let length = step.norm();
            if !(length < 0.9 * last_step || length < CONVERGED_STEP) {
                return None;
            }
            last_step = length;
            c.iter_mut().zip(step.iter()).for_each(|(c, d)| *c += d);
            if length < CONVERGED_STEP {
                return self.finish(c, &step, &lu, forward);
            }
        }
        None
    }

    fn set_row(&self, matrix: &mut DMatrix<f64>, pick: Pick) {
        for j in 0..matrix.ncols() {
            matrix[(0, j)] = match pick {
                Pick::Setpoint(_) => self.modal.setpoint_slope(&self.at, j),
                Pick::Across { tangent, .. } => tangent[j],
            };
        }
    }

    /// Tangent, index, energy and couple at the converged `c`. The last evaluation was one `step` before: energy and couple
    /// are carried over to first order, the rest differs by less than [`CONVERGED_STEP`].
    fn finish(
        &mut self,
        c: Vec<f64>,
        step: &DVector<f64>,
        lu: &LU<f64, Dyn, Dyn>,
        forward: Option<&[f64]>,
    ) -> Option<RestPoint> {
        let n = c.len();
        let mut unit = DVector::zeros(n);
        unit[0] = 1.0;
        let mut tangent = lu.solve(&unit)?.normalize();
        let along = match forward {
            Some(forward) => (0..n).map(|j| forward[j] * tangent[j]).sum(),
            None => self.setpoint_rate(tangent.as_slice()),
        };
        if along < 0.0 {
            tangent = -tangent;
        }
        self.solved += 1;
        let steepest = (0..n)
            .map(|j| self.modal.setpoint_slope(&self.at, j).powi(2))
            .sum::<f64>()
            .sqrt();
        let mut energy = self.at.energy;
        let mut couple = self.at.gradient[0];
        for j in 0..n {
            energy += self.at.gradient[j] * step[j];
            couple += self.at.hessian[(0, j)] * step[j];
        }
        Some(RestPoint {
            setpoint: match self.modal.held() {
                Held::TipAngle => c[0],
                Held::TipCouple => couple,
            },
            setpoint_rate: self.setpoint_rate(tangent.as_slice()),
            rise: self.setpoint_rate(tangent.as_slice()).abs() / steepest,
            index: morse_index(&self.at.hessian, self.modal.first_free()),
            energy,
            couple,
            tangent: tangent.as_slice().to_vec(),
            c,
        })
    }

    fn setpoint_rate(&self, tangent: &[f64]) -> f64 {
        (0..tangent.len())
            .map(|j| self.modal.setpoint_slope(&self.at, j) * tangent[j])
            .sum()
    }
}

/// A fold: two branches meet and end there.
#[derive(Clone, Debug)]
pub struct Fold {
    /// The rest state at the fold.
    pub point: RestPoint,
    /// Whether the setpoint is highest there (else lowest).
    pub is_highest: bool,
}

/// How one end of a branch comes about.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum BranchEnd {
    /// The range that was followed ends; the branch goes on.
    Range,
    /// A fold.
    Fold,
}

/// A stretch of curve over which the setpoint rises monotonically and the Morse index is constant.
#[derive(Clone, Debug)]
pub struct Branch {
    /// Points with increasing setpoint; the first and the last are the branch's ends.
    pub points: Vec<RestPoint>,
    /// How the low end comes about.
    pub from_end: BranchEnd,
    /// How the high end comes about.
    pub to_end: BranchEnd,
    /// Morse index of all its states.
    pub index: usize,
}

impl Branch {
    /// Lowest setpoint.
    pub fn from(&self) -> f64 {
        self.points[0].setpoint
    }

    /// Highest setpoint.
    pub fn to(&self) -> f64 {
        self.points[self.points.len() - 1].setpoint
    }

    /// Whether `setpoint` lies on the branch, ends included.
    pub fn covers(&self, setpoint: f64) -> bool {
        (self.from()..=self.to()).contains(&setpoint)
    }

    /// Base curvature half way along: sorts branches, for on no setpoint do two of them cross in it.
    pub fn middle_base_curvature(&self) -> f64 {
        self.points[self.points.len() / 2].base_curvature()
    }

    /// The rest state at `setpoint`, solved afresh from the neighbouring points; `None` outside the branch.
    pub fn state_at(&self, solver: &mut Solver, setpoint: f64) -> Option<RestPoint> {
        if !self.covers(setpoint) {
            return None;
        }
        let after = self
            .points
            .partition_point(|p| p.setpoint < setpoint)
            .clamp(1, self.points.len() - 1);
        let (a, b) = (&self.points[after - 1], &self.points[after]);
        for end in [a, b] {
            if end.setpoint == setpoint {
                return Some(end.clone());
            }
        }
        let guess = between(a, b, setpoint);
        solver
            .at_setpoint(&guess, setpoint)
            .filter(|found| found.index == self.index && is_between(a, b, found))
            .or_else(|| solver.bisect(a, b, setpoint))
    }
}

/// Curve length between two neighbouring points, from the chord and the turn of the tangent.
fn span(a: &RestPoint, b: &RestPoint) -> f64 {
    let chord =
        a.c.iter()
            .zip(&b.c)
            .map(|(a, b)| (b - a).powi(2))
            .sum::<f64>()
            .sqrt();
    let cosine: f64 = a.tangent.iter().zip(&b.tangent).map(|(a, b)| a * b).sum();
    chord * (1.0 + (1.0 - cosine.abs()) / 12.0)
}

/// Cubic Hermite interpolation of values `v` with slopes `d` over an interval of length `h`, at the fraction `x`.
fn hermite(x: f64, h: f64, v: [f64; 2], d: [f64; 2]) -> f64 {
    let y = 1.0 - x;
    y * y * ((1.0 + 2.0 * x) * v[0] + x * h * d[0])
        + x * x * ((1.0 + 2.0 * y) * v[1] - y * h * d[1])
}

/// Coefficients at `setpoint` between two points whose setpoints enclose it.
fn between(a: &RestPoint, b: &RestPoint, setpoint: f64) -> Vec<f64> {
    let h = span(a, b);
    // Tangents may point either way along the curve; here they must point from `a` to `b`.
    let forward = |p: &RestPoint| -> f64 {
        let along: f64 =
            a.c.iter()
                .zip(&b.c)
                .zip(&p.tangent)
                .map(|((a, b), t)| (b - a) * t)
                .sum();
        along.signum()
    };
    let (sa, sb) = (forward(a), forward(b));
    let rates = [a.setpoint_rate.abs(), b.setpoint_rate.abs()];
    let (mut low, mut high) = (0.0, 1.0);
    for _ in 0..40 {
        let mid = 0.5 * (low + high);
        if hermite(mid, h, [a.setpoint, b.setpoint], rates) < setpoint {
            low = mid;
        } else {
            high = mid;
        }
    }
    let x = 0.5 * (low + high);
    (0..a.c.len())
        .map(|j| {
            hermite(
                x,
                h,
                [a.c[j], b.c[j]],
                [sa * a.tangent[j], sb * b.tangent[j]],
            )
        })
        .collect()
}

/// Whether `p` lies between `a` and `b` along the chord, with a little slack for its bow.
fn is_between(a: &RestPoint, b: &RestPoint, p: &RestPoint) -> bool {
    let along = |q: &RestPoint| -> f64 {
        a.c.iter()
            .zip(&b.c)
            .zip(&q.c)
            .map(|((a, b), q)| (b - a) * (q - a))
            .sum()
    };
    (-0.1..=1.1).contains(&(along(p) / along(b)))
}

impl Solver<'_> {
    /// The rest state at `setpoint` between two points of one branch, by halving the stretch of curve between them.
    fn bisect(&mut self, a: &RestPoint, b: &RestPoint, setpoint: f64) -> Option<RestPoint> {
        let (mut low, mut high) = (a.clone(), b.clone());
        for _ in 0..60 {
            let chord: Vec<f64> = low.c.iter().zip(&high.c).map(|(a, b)| b - a).collect();
            let length = chord.iter().map(|d| d * d).sum::<f64>().sqrt();
            if length < 1e-12 {
                break;
            }
            let direction: Vec<f64> = chord.iter().map(|d| d / length).collect();
            let middle: Vec<f64> = low.c.iter().zip(&chord).map(|(c, d)| c + 0.5 * d).collect();
            let point = self.across(&middle, &direction)?;
            if let Some(found) = self.at_setpoint(&point.c, setpoint)
                && is_between(&low, &high, &found)
            {
                return Some(found);
            }
            if point.setpoint < setpoint {
                low = point;
            } else {
                high = point;
            }
        }
        Some(low)
    }

    /// Follows the curve through `start` both ways until it leaves `range`, and splits it into branches at its folds.
    ///
    /// # Errors
    /// The setpoint at which the continuation could not go on.
    pub fn follow(
        &mut self,
        start: &RestPoint,
        range: [f64; 2],
    ) -> Result<(Vec<Branch>, Vec<Fold>), f64> {
        let backward = self.follow_one_way(start.clone().reversed(), range)?;
        let mut points: Vec<_> = backward
            .into_iter()
            .skip(1)
            .rev()
            .map(RestPoint::reversed)
            .collect();
        points.extend(self.follow_one_way(start.clone(), range)?);
        self.split(points)
    }

    /// Points from `start` along its tangent up to the end of `range` (solved for exactly).
    fn follow_one_way(&mut self, start: RestPoint, range: [f64; 2]) -> Result<Vec<RestPoint>, f64> {
        let mut step = 0.2 * self.longest_step(&start);
        let mut points = vec![start];
        while points.len() < LONGEST_CURVE {
            let last = &points[points.len() - 1];
            let Some(next) = self.step_along(last, step) else {
                step *= 0.5;
                if step < SHORTEST_STEP {
                    return Err(last.setpoint);
                }
                continue;
            };
            if !(range[0]..=range[1]).contains(&next.setpoint) {
                let end = if next.setpoint > range[1] {
                    range[1]
                } else {
                    range[0]
                };
                let rising = next.setpoint_rate > 0.0;
                // The way out must be monotone for the end to be one point of it.
                if rising == (last.setpoint_rate > 0.0) && rising == (end == range[1]) {
                    if last.setpoint != end {
                        let (a, b) = if rising { (last, &next) } else { (&next, last) };
                        let point = self
                            .at_setpoint(&between(a, b, end), end)
                            .filter(|found| is_between(a, b, found))
                            .or_else(|| self.bisect(a, b, end))
                            .ok_or(end)?;
                        points.push(if rising { point } else { point.reversed() });
                    }
                    return Ok(points);
                }
                step *= 0.5;
                if step < SHORTEST_STEP {
                    return Err(end);
                }
                continue;
            }
            points.push(next);
            step = (1.5 * step).min(self.longest_step(&points[points.len() - 1]));
        }
        Err(points[points.len() - 1].setpoint)
    }

    /// Longest step from or to `point`: short where the curve runs close to a fold, for there two may follow each other.
    fn longest_step(&self, point: &RestPoint) -> f64 {
        self.fineness * LONGEST_STEP * (4.0 * point.rise).clamp(0.1, 1.0)
    }

    /// One step of length `step`; `None` when it must be shorter: Newton lost, the curve turned too far, or the Morse index
    /// and the folds passed do not agree (two folds inside the step, or a jump to another curve).
    fn step_along(&mut self, from: &RestPoint, step: f64) -> Option<RestPoint> {
        let predicted: Vec<f64> = from
            .c
            .iter()
            .zip(&from.tangent)
            .map(|(c, t)| c + step * t)
            .collect();
        let next = self.across(&predicted, &from.tangent)?;
        let turn: f64 = from
            .tangent
            .iter()
            .zip(&next.tangent)
            .map(|(a, b)| a * b)
            .sum();
        let short_enough = step <= 1.5 * self.longest_step(&next);
        let passed_fold = (from.setpoint_rate > 0.0) != (next.setpoint_rate > 0.0);
        let consistent = from.index.abs_diff(next.index) == usize::from(passed_fold);
        (turn > TURN_COSINE && consistent && short_enough).then_some(next)
    }

    /// Locates the folds of a followed curve and cuts it there.
    fn split(&mut self, points: Vec<RestPoint>) -> Result<(Vec<Branch>, Vec<Fold>), f64> {
        let mut folds = Vec::new();
        let mut branches = Vec::new();
        let mut piece: Vec<RestPoint> = Vec::new();
        let mut begins_at_fold = false;
        for point in points {
            if let Some(last) = piece.last()
                && (last.setpoint_rate > 0.0) != (point.setpoint_rate > 0.0)
            {
                let fold = self.locate_fold(last, &point).ok_or(last.setpoint)?;
                let is_highest = last.setpoint_rate > 0.0;
                let index = last.index;
                piece.push(RestPoint {
                    index,
                    ..fold.clone()
                });
                branches.push(oriented(piece, begins_at_fold, true));
                piece = vec![RestPoint {
                    index: point.index,
                    ..fold.clone()
                }];
                begins_at_fold = true;
                folds.push(Fold {
                    point: fold,
                    is_highest,
                });
            }
            piece.push(point);
        }
        branches.push(oriented(piece, begins_at_fold, false));
        branches.retain(|b| b.points.len() > 1);
        Ok((branches, folds))
    }

    /// The fold between two neighbouring points: where the setpoint's rate along the curve vanishes (Illinois false
    /// position on the step length).
    fn locate_fold(&mut self, a: &RestPoint, b: &RestPoint) -> Option<RestPoint> {
        let reach: f64 =
            b.c.iter()
                .zip(&a.c)
                .zip(&a.tangent)
                .map(|((b, a), t)| (b - a) * t)
                .sum();
        let (mut low, mut high) = (0.0, reach);
        let (mut rate_low, mut rate_high) = (a.setpoint_rate, b.setpoint_rate);
        let mut found = None;
        let mut moved_low = None;
        for _ in 0..60 {
            let step = low - rate_low * (high - low) / (rate_high - rate_low);
            let predicted: Vec<f64> =
                a.c.iter()
                    .zip(&a.tangent)
                    .map(|(c, t)| c + step * t)
                    .collect();
            let point = self.across(&predicted, &a.tangent)?;
            let rate = point.setpoint_rate;
            found = Some(point);
            if rate.abs() < 1e-11 || (high - low).abs() < 1e-13 {
                break;
            }
            let moves_low = (rate > 0.0) == (rate_low > 0.0);
            let halve = if moved_low == Some(moves_low) {
                0.5
            } else {
                1.0
            };
            if moves_low {
                (low, rate_low, rate_high) = (step, rate, halve * rate_high);
            } else {
                (high, rate_high, rate_low) = (step, rate, halve * rate_low);
            }
            moved_low = Some(moves_low);
        }
        found
    }
}

/// A branch from points in the order they were followed, turned so that the setpoint rises.
fn oriented(mut points: Vec<RestPoint>, begins_at_fold: bool, ends_at_fold: bool) -> Branch {
    let end = |is_fold| {
        if is_fold {
            BranchEnd::Fold
        } else {
            BranchEnd::Range
        }
    };
    let (mut from_end, mut to_end) = (end(begins_at_fold), end(ends_at_fold));
    let index = points[points.len() / 2].index;
    if points[0].setpoint > points[points.len() - 1].setpoint {
        points.reverse();
        std::mem::swap(&mut from_end, &mut to_end);
    }
    Branch {
        points,
        from_end,
        to_end,
        index,
    }
}
