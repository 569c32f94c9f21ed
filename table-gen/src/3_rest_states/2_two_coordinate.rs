//! Every rest state of the two-coordinate arm, with a proof that none is missed.
//!
//! In two modes the rest conditions are one equation (tip held) or two (couple applied) in as many unknowns, and the Hessian
//! changes between two shapes by at most `sum_k T_ijk |dc_k|` with `T_ijk = int w |phi_i phi_j phi_k| ds`, for the cosine has
//! slope at most 1. That makes the interval Newton operator of Krawczyk (R. Krawczyk, Computing 4 (1969) 187-201; from memory)
//! computable: a box either holds no root, or exactly one, or is halved.

use super::modes::{Evaluation, ModalRod, mean_angle, morse_index};
use nalgebra::{DMatrix, DVector};

/// A rest state of the two-coordinate arm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TwoCoordinateState {
    /// Mode coefficients `c_0, c_1`.
    pub c: [f64; 2],
    /// Potential energy without the drive's work (m g L).
    pub energy: f64,
    /// Morse index within the two coordinates.
    pub index: usize,
}

impl TwoCoordinateState {
    /// Mean angle (rad).
    pub fn mean_angle(&self) -> f64 {
        mean_angle(&self.c)
    }

    /// Whether the two-coordinate model calls it stable.
    pub fn is_stable(&self) -> bool {
        self.index == 0
    }
}

/// Boxes narrower than this are not halved any more: two rest states merge there (a fold).
const NARROWEST_BOX: f64 = 1e-9;
/// Boxes are tested a little wider than they are, so that a root on a common side is proved by both.
const INFLATION: f64 = 1.0 + 1e-3;
/// Roots closer than this are one.
const SAME_ROOT: f64 = 1e-6;

/// All rest states at `setpoint` (dimensionless) of `modal`, which must have two modes, sorted by mean angle.
pub fn rest_states(modal: &ModalRod, setpoint: f64) -> Vec<TwoCoordinateState> {
    assert_eq!(modal.modes(), 2, "the proof is for two coordinates");
    let first = modal.first_free();
    let problem = Problem {
        modal,
        setpoint,
        first,
        third: modal.third_derivative_bounds(),
    };
    let mut roots: Vec<TwoCoordinateState> = Vec::new();
    let mut boxes = vec![problem.outer_box()];
    let mut at = Evaluation::new(2);
    while let Some(cell) = boxes.pop() {
        match problem.test(&cell, &mut at) {
            Verdict::Empty => {}
            Verdict::One(c) => {
                let distinct = |r: &TwoCoordinateState| {
                    (r.c[0] - c[0]).abs().max((r.c[1] - c[1]).abs()) > SAME_ROOT
                };
                if roots.iter().all(distinct) {
                    modal.evaluate(&c, &mut at);
                    let index = morse_index(&at.hessian, first);
                    roots.push(TwoCoordinateState {
                        c,
                        energy: at.energy,
                        index,
                    });
                }
            }
            Verdict::Halve => boxes.extend(cell.halves()),
        }
    }
    roots.sort_by(|a, b| a.mean_angle().total_cmp(&b.mean_angle()));
    roots
}

/// A box of shapes: middle and half widths, zero for a coordinate that is held.
struct Cell {
    middle: [f64; 2],
    reach: [f64; 2],
}

impl Cell {
    /// The two halves across the longer side.
    fn halves(&self) -> [Cell; 2] {
        let side = usize::from(self.reach[1] > self.reach[0]);
        [-0.5, 0.5].map(|shift| {
            let (mut middle, mut reach) = (self.middle, self.reach);
            middle[side] += shift * reach[side];
            reach[side] *= 0.5;
            Cell { middle, reach }
        })
    }
}

enum Verdict {
    Empty,
    One([f64; 2]),
    Halve,
}

struct Problem<'a> {
    modal: &'a ModalRod,
    setpoint: f64,
    first: usize,
    third: [[[f64; 2]; 2]; 2],
}

impl Problem<'_> {
    /// Holds every root: bending must balance gravity, whose forces are bounded.
    fn outer_box(&self) -> Cell {
        let free = 2 - self.first;
        let stiffness = self
            .modal
            .bending()
            .view((self.first, self.first), (free, free))
            .into_owned();
        let inverse = stiffness
            .try_inverse()
            .expect("bending stiffness is positive");
        let (rest, bound) = self.modal.force_bounds();
        let mut force = DVector::zeros(free);
        for i in 0..free {
            force[i] = rest[self.first + i];
            match self.first {
                1 => force[i] -= self.modal.bending()[(1, 0)] * self.setpoint,
                _ => force[i] += if i == 0 { self.setpoint } else { 0.0 },
            }
        }
        let middle_free = &inverse * force;
        let mut cell = Cell {
            middle: [self.setpoint, 0.0],
            reach: [0.0, 0.0],
        };
        for i in 0..free {
            cell.middle[self.first + i] = middle_free[i];
            cell.reach[self.first + i] = 1.01
                * (0..free)
                    .map(|j| inverse[(i, j)].abs() * bound[self.first + j])
                    .sum::<f64>();
        }
        cell
    }

    fn residual(&self, at: &Evaluation, i: usize) -> f64 {
        at.gradient[i]
            - if self.first == 0 && i == 0 {
                self.setpoint
            } else {
                0.0
            }
    }

    fn test(&self, cell: &Cell, at: &mut Evaluation) -> Verdict {
        let (first, free) = (self.first, 2 - self.first);
        let reach = cell.reach.map(|r| r * INFLATION);
        self.modal.evaluate(&cell.middle, at);
        // How far the Hessian can be from the middle's anywhere in the box.
        let spread =
            |i: usize, j: usize| -> f64 { (0..2).map(|k| self.third[i][j][k] * reach[k]).sum() };
        for i in first..2 {
            let change: f64 = (first..2)
                .map(|j| (at.hessian[(i, j)].abs() + spread(i, j)) * reach[j])
                .sum();
            if self.residual(at, i).abs() > change {
                return Verdict::Empty;
            }
        }
        let hessian = at.hessian.view((first, first), (free, free)).into_owned();
        if let Some(inverse) = hessian.try_inverse() {
            // Krawczyk: middle - Y g(middle) + (I - Y H(box)) (box - middle), with |I - Y H| <= |Y| spread.
            let residual = DVector::from_fn(free, |i, _| self.residual(at, first + i));
            let shift = &inverse * residual;
            let wobble = DMatrix::from_fn(free, free, |i, j| spread(first + i, first + j));
            let contraction = inverse.abs() * wobble;
            let image: Vec<f64> = (0..free)
                .map(|i| {
                    (0..free)
                        .map(|j| contraction[(i, j)] * reach[first + j])
                        .sum()
                })
                .collect();
            if (0..free).all(|i| shift[i].abs() + image[i] < reach[first + i]) {
                let start = std::array::from_fn(|i| {
                    cell.middle[i] - if i < first { 0.0 } else { shift[i - first] }
                });
                return Verdict::One(self.polish(start, at));
            }
            if (0..free).any(|i| shift[i].abs() - image[i] > reach[first + i]) {
                return Verdict::Empty;
            }
        }
        if reach.iter().all(|&r| r < NARROWEST_BOX) {
            return Verdict::One(cell.middle);
        }
        Verdict::Halve
    }

    /// Newton from inside a box that is proved to hold one root.
    fn polish(&self, mut c: [f64; 2], at: &mut Evaluation) -> [f64; 2] {
        let (first, free) = (self.first, 2 - self.first);
        for _ in 0..30 {
            self.modal.evaluate(&c, at);
            let residual = DVector::from_fn(free, |i, _| self.residual(at, first + i));
            let hessian = at.hessian.view((first, first), (free, free)).into_owned();
            let Some(step) = hessian.lu().solve(&residual) else {
                break;
            };
            for i in first..2 {
                c[i] -= step[i - first];
            }
            if step.norm() < 1e-13 {
                break;
            }
        }
        c
    }
}
