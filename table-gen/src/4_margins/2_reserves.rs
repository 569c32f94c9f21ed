//! How much payload can be added, or stiffness lost, until a rest state stops being stable: found by continuation.
//!
//! The rest state is followed while one parameter grows at a fixed setpoint, by pseudo-arclength, up to the first point where
//! it is no longer stable (a fold, or for a symmetric arm the loss of stability of the straight shape), which is then located
//! by halving the last step.

use crate::rest_states::modes::{Evaluation, ModalRod, morse_index};
use crate::rod::Held;
use nalgebra::{DMatrix, DVector};

/// What grows.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Grows {
    /// Mass at the tip, as a fraction of the arm's mass.
    Payload,
    /// Loss of bending stiffness, as a fraction of it.
    StiffnessLoss,
}

impl Grows {
    /// Where following stops: payload three times the arm's mass; 95 % of the stiffness, or as much as leaves an arm that the
    /// modes still resolve.
    fn most(self, gamma: f64) -> f64 {
        match self {
            Self::Payload => 3.0,
            Self::StiffnessLoss => (1.0 - SOFTEST_GAMMA / gamma).min(0.95),
        }
    }
}

/// Softest arm that the largest number of modes resolves well enough for a reserve.
const SOFTEST_GAMMA: f64 = 0.012;
/// First and longest step along the curve of (free modes, parameter).
const STEPS: [f64; 2] = [0.05, 1.0];
/// Shortest step: what cannot be followed with it ends there.
const SHORTEST_STEP: f64 = 1e-6;
/// Halvings of the step in which stability is lost: parameter to about 1e-9.
const HALVINGS: usize = 30;

/// A point of the curve: all modes and the parameter.
#[derive(Clone)]
struct Point {
    c: Vec<f64>,
    grown: f64,
    /// Unit tangent over free modes and parameter; the parameter last.
    tangent: DVector<f64>,
    stable: bool,
}

/// Follows one rest state.
pub struct Reserve<'a> {
    modal: &'a ModalRod,
    grows: Grows,
    couple: f64,
    most: f64,
    at: Evaluation,
}

impl<'a> Reserve<'a> {
    /// For rest states of `modal` at `setpoint` (dimensionless); `gamma` is the arm's mean dimensionless stiffness.
    pub fn new(modal: &'a ModalRod, setpoint: f64, gamma: f64, grows: Grows) -> Self {
        let couple = match modal.held() {
            Held::TipAngle => 0.0,
            Held::TipCouple => setpoint,
        };
        Self {
            modal,
            grows,
            couple,
            most: grows.most(gamma),
            at: Evaluation::new(modal.modes()),
        }
    }

    /// How far the parameter can grow before the stable rest state `c` stops being stable; `None` when it never does as far as
    /// it is followed.
    pub fn run(&mut self, c: &[f64]) -> Option<f64> {
        let free = self.modal.modes() - self.modal.first_free();
        let mut upward = DVector::zeros(free + 1);
        upward[free] = 1.0;
        let Some(mut point) = self.solve(c.to_vec(), 0.0, &upward) else {
            return Some(0.0);
        };
        if !point.stable {
            return Some(0.0);
        }
        let mut step = STEPS[0];
        loop {
            let ahead = self.step(&point, step).filter(|next| {
                // The tangent may turn by some 11 degrees, or all the way over at a fold that a short step passes.
                point.tangent.dot(&next.tangent) > 0.98
            });
            let Some(next) = ahead else {
                step *= 0.5;
                if step < SHORTEST_STEP {
                    return Some(point.grown);
                }
                continue;
            };
            if !next.stable || next.tangent[free] <= 0.0 {
                return Some(self.locate(&point, step));
            }
            if next.grown >= self.most {
                return None;
            }
            point = next;
            step = (1.5 * step).min(STEPS[1]);
        }
    }

    /// The largest parameter between `from`, still stable, and the point one `step` on, which is not.
    fn locate(&mut self, from: &Point, step: f64) -> f64 {
        let free = from.tangent.len() - 1;
        let (mut low, mut high) = (0.0, step);
        let mut grown = from.grown;
        for _ in 0..HALVINGS {
            let middle = 0.5 * (low + high);
            match self.step(from, middle) {
                Some(point) if point.stable && point.tangent[free] > 0.0 => {
                    low = middle;
                    grown = point.grown;
                }
                _ => high = middle,
            }
        }
        grown
    }

    fn step(&mut self, from: &Point, step: f64) -> Option<Point> {
        let first = self.modal.first_free();
        let free = from.tangent.len() - 1;
        let mut c = from.c.clone();
        for i in 0..free {
            c[first + i] += step * from.tangent[i];
        }
        self.solve(c, from.grown + step * from.tangent[free], &from.tangent)
    }

    /// Newton in the plane across `tangent` through the start.
    fn solve(&mut self, mut c: Vec<f64>, mut grown: f64, tangent: &DVector<f64>) -> Option<Point> {
        let first = self.modal.first_free();
        let free = self.modal.modes() - first;
        let mut last = f64::INFINITY;
        for _ in 0..8 {
            let rod = match self.grows {
                Grows::Payload => self.modal.varied(1.0, grown, 0.0),
                Grows::StiffnessLoss => self.modal.varied(1.0 - grown, 0.0, 0.0),
            };
            rod.evaluate(&c, &mut self.at);
            let push = match self.grows {
                Grows::Payload => rod.payload_force(&c),
                Grows::StiffnessLoss => self
                    .modal
                    .bending_force(&c)
                    .into_iter()
                    .map(|f| -f)
                    .collect(),
            };
            let mut matrix = DMatrix::zeros(free + 1, free + 1);
            matrix
                .view_mut((0, 0), (free, free))
                .copy_from(&self.at.hessian.view((first, first), (free, free)));
            for i in 0..free {
                matrix[(i, free)] = push[first + i];
            }
            matrix.row_mut(free).copy_from(&tangent.transpose());
            let mut rhs = DVector::from_fn(free + 1, |i, _| {
                if i < free {
                    -self.at.gradient[first + i]
                } else {
                    0.0
                }
            });
            if first == 0 {
                rhs[0] += self.couple;
            }
            let lu = matrix.lu();
            let step = lu.solve(&rhs)?;
            let length = step.norm();
            let shrinks = length < 0.9 * last || length < 1e-9;
            if !shrinks {
                return None;
            }
            last = length;
            for i in 0..free {
                c[first + i] += step[i];
            }
            grown += step[free];
            if length < 1e-9 {
                let mut unit = DVector::zeros(free + 1);
                unit[free] = 1.0;
                let mut along = lu.solve(&unit)?.normalize();
                if along.dot(tangent) < 0.0 {
                    along = -along;
                }
                let stable = morse_index(&self.at.hessian, first) == 0;
                return Some(Point {
                    c,
                    grown,
                    tangent: along,
                    stable,
                });
            }
        }
        None
    }
}
