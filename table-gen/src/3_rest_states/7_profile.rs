//! The potential over the mean angle at a fixed setpoint, everything else relaxed: wells and passes as a picture.

use super::curve::RestPoint;
use super::modes::{Evaluation, ModalRod, mean_angle};
use crate::rod::Held;
use nalgebra::{DMatrix, DVector};

/// Spacing of the mean angles (rad).
const SPACING: f64 = 0.05;
/// How far beyond the outermost wells the profile goes (rad).
const BEYOND: f64 = 0.5;

/// `(mean angle (rad), potential (m g L))` for each well of `states` (all rest states of one setpoint), each from the pass
/// before it to the pass after it. A piece ends early where the relaxed shape itself becomes unstable.
pub fn profile(modal: &ModalRod, states: &[RestPoint]) -> Vec<Vec<(f64, f64)>> {
    let mut sorted: Vec<&RestPoint> = states.iter().filter(|s| s.index <= 1).collect();
    sorted.sort_by(|a, b| a.mean_angle().total_cmp(&b.mean_angle()));
    let wells = sorted.iter().enumerate().filter(|(_, s)| s.index == 0);
    wells
        .map(|(place, well)| {
            let neighbour = |place: Option<usize>| {
                place
                    .and_then(|p| sorted.get(p))
                    .filter(|s| s.index == 1)
                    .map(|s| s.mean_angle())
            };
            let q = well.mean_angle();
            let from = neighbour(place.checked_sub(1)).unwrap_or(q - BEYOND);
            let to = neighbour(Some(place + 1)).unwrap_or(q + BEYOND);
            let mut piece = relaxed_towards(modal, well, from);
            piece.reverse();
            piece.push((q, well.potential(modal)));
            piece.extend(relaxed_towards(modal, well, to));
            piece
        })
        .collect()
}

/// Relaxed potentials from beside `well` up to the mean angle `end`.
fn relaxed_towards(modal: &ModalRod, well: &RestPoint, end: f64) -> Vec<(f64, f64)> {
    let start = well.mean_angle();
    let count = ((end - start).abs() / SPACING).ceil() as usize;
    let mut relaxation = Relaxation::new(modal, well);
    let mut c = well.c.clone();
    let mut piece = Vec::new();
    for k in 1..=count {
        let q1 = start + (end - start) * k as f64 / count as f64;
        match relaxation.at(&c, q1) {
            Some((relaxed, potential)) => {
                piece.push((q1, potential));
                c = relaxed;
            }
            None => break,
        }
    }
    piece
}

/// Newton with the mean angle as a constraint.
struct Relaxation<'a> {
    modal: &'a ModalRod,
    at: Evaluation,
    couple: f64,
}

impl<'a> Relaxation<'a> {
    fn new(modal: &'a ModalRod, well: &RestPoint) -> Self {
        let couple = match modal.held() {
            Held::TipAngle => 0.0,
            Held::TipCouple => well.couple,
        };
        Self {
            modal,
            at: Evaluation::new(modal.modes()),
            couple,
        }
    }

    /// The relaxed shape with mean angle `q1` near `guess`, and its potential.
    fn at(&mut self, guess: &[f64], q1: f64) -> Option<(Vec<f64>, f64)> {
        let (n, first) = (self.modal.modes(), self.modal.first_free());
        let free = n - first;
        let mut c = guess.to_vec();
        for _ in 0..12 {
            self.modal.evaluate(&c, &mut self.at);
            let mut matrix = DMatrix::zeros(free + 1, free + 1);
            matrix
                .view_mut((0, 0), (free, free))
                .copy_from(&self.at.hessian.view((first, first), (free, free)));
            let mut along = vec![0.0; n];
            (along[0], along[1]) = (0.5, -1.0 / 6.0);
            for j in 0..free {
                matrix[(free, j)] = along[first + j];
                matrix[(j, free)] = along[first + j];
            }
            let mut rhs = DVector::from_fn(free + 1, |j, _| {
                if j < free {
                    -self.at.gradient[first + j]
                } else {
                    0.0
                }
            });
            if first == 0 {
                rhs[0] += self.couple;
            }
            rhs[free] = q1 - mean_angle(&c);
            let step = matrix.lu().solve(&rhs)?;
            let length = step.rows(0, free).norm();
            if length > 1.0 {
                return None;
            }
            for j in 0..free {
                c[first + j] += step[j];
            }
            if length < 1e-8 {
                self.modal.evaluate(&c, &mut self.at);
                return Some((c.clone(), self.at.energy - self.couple * c[0]));
            }
        }
        None
    }
}
