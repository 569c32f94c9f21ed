//! Which wells each pass joins, and so how much energy it takes to leave a well.
//!
//! A pass (index 1) has one direction in which the potential falls both ways; going down from there ends in the wells it joins.
//! The lowest pass out of a well is the lowest one that joins the well to anything else: wells merge in order of the passes'
//! height (a Kruskal tree), which does not depend on the path taken downhill.

use super::curve::RestPoint;
use super::modes::{Evaluation, ModalRod};
use crate::rod::Held;
use nalgebra::{DMatrix, DVector};

/// Longest downhill step (rad): short against the distance between rest states, so that no ridge is jumped.
const LONGEST_STEP: f64 = 0.15;
/// Growth of the longest step allowed from one step to the next, away from a start where it had to be short.
const STEP_GROWTH: f64 = 1.3;
/// Downhill steps before giving up.
const STEPS: usize = 400;
/// First step away from the pass along its unstable direction (rad).
const FIRST_STEP: f64 = 0.02;

/// What joins the wells at one setpoint.
#[derive(Clone, Debug)]
pub struct Wells {
    /// For each rest state given: energy from it to the lowest pass out of its well (m g L), if it is a well and there is a
    /// pass.
    pub barrier: Vec<Option<f64>>,
    /// For each rest state given: the wells that it joins, if it is a pass and both ways down were found.
    pub joins: Vec<Option<[usize; 2]>>,
}

/// Works out [`Wells`] for all rest states of one setpoint.
///
/// # Errors
/// The position in `states` of a pass from which no way down to a listed well was found.
pub fn wells(modal: &ModalRod, states: &[RestPoint]) -> Result<Wells, usize> {
    let mut passes: Vec<usize> = (0..states.len())
        .filter(|&i| states[i].index == 1)
        .collect();
    passes.sort_by(|&a, &b| {
        states[a]
            .potential(modal)
            .total_cmp(&states[b].potential(modal))
    });
    let mut found = Wells {
        barrier: vec![None; states.len()],
        joins: vec![None; states.len()],
    };
    let mut group: Vec<usize> = (0..states.len()).collect();
    for &pass in &passes {
        let joined = ways_down(modal, states, pass).ok_or(pass)?;
        found.joins[pass] = Some(joined);
        let [a, b] = joined.map(|well| group[well]);
        if a == b {
            continue;
        }
        // A well that is still alone leaves by this pass: every lower pass has been looked at.
        for well in joined {
            if found.barrier[well].is_none() {
                found.barrier[well] =
                    Some(states[pass].potential(modal) - states[well].potential(modal));
            }
        }
        group.iter_mut().filter(|g| **g == b).for_each(|g| *g = a);
    }
    Ok(found)
}

/// The two wells below a pass.
fn ways_down(modal: &ModalRod, states: &[RestPoint], pass: usize) -> Option<[usize; 2]> {
    let first = modal.first_free();
    let mut descent = Descent::new(modal, &states[pass]);
    modal.evaluate(&states[pass].c, &mut descent.at);
    let free = modal.modes() - first;
    let eigen = descent
        .at
        .hessian
        .view((first, first), (free, free))
        .into_owned()
        .symmetric_eigen();
    let steepest = eigen.eigenvalues.imin();
    let direction = eigen.eigenvectors.column(steepest).into_owned();
    let well = |sign: f64| -> Option<usize> {
        let mut descent = Descent::new(modal, &states[pass]);
        let mut c = states[pass].c.clone();
        // Near a fold the well is close to the pass: do not step over it.
        let nearest = states
            .iter()
            .enumerate()
            .filter(|&(i, _)| i != pass)
            .map(|(_, other)| distance(&other.c, &c))
            .fold(f64::INFINITY, f64::min);
        let length = FIRST_STEP.min(0.25 * nearest);
        for i in 0..free {
            c[first + i] += sign * length * direction[i];
        }
        let end = descent.run(c, 0.5 * nearest)?;
        let (place, off) = states
            .iter()
            .enumerate()
            .filter(|(_, state)| state.index == 0)
            .map(|(i, state)| (i, distance(&state.c, &end)))
            .min_by(|a, b| a.1.total_cmp(&b.1))?;
        (off < 1e-4).then_some(place)
    };
    Some([well(-1.0)?, well(1.0)?])
}

fn distance(a: &[f64], b: &[f64]) -> f64 {
    a.iter()
        .zip(b)
        .map(|(a, b)| (a - b).powi(2))
        .sum::<f64>()
        .sqrt()
}

/// Goes downhill at a fixed setpoint; also what "the rod does from this shape" means for a two-coordinate state.
pub struct Descent<'a> {
    modal: &'a ModalRod,
    at: Evaluation,
    /// Tip couple that does work, when the couple is what is applied.
    couple: f64,
}

impl<'a> Descent<'a> {
    /// Downhill at the setpoint of `state`.
    pub fn new(modal: &'a ModalRod, state: &RestPoint) -> Self {
        Self::at_setpoint(modal, state.setpoint)
    }

    /// Downhill at `setpoint`; a held tip angle is taken from the start.
    pub fn at_setpoint(modal: &'a ModalRod, setpoint: f64) -> Self {
        let couple = match modal.held() {
            Held::TipAngle => 0.0,
            Held::TipCouple => setpoint,
        };
        Self {
            modal,
            at: Evaluation::new(modal.modes()),
            couple,
        }
    }

    fn potential(&mut self, c: &[f64]) -> f64 {
        self.modal.evaluate(c, &mut self.at);
        self.at.gradient[0] -= self.couple;
        self.at.energy - self.couple * c[0]
    }

    /// From `c` down to where the gradient vanishes; the first no longer than `longest`. Newton where the potential is convex,
    /// stiffened by the bending matrix where it is not; every step must lower the potential.
    pub fn run(&mut self, mut c: Vec<f64>, mut longest: f64) -> Option<Vec<f64>> {
        let first = self.modal.first_free();
        let free = self.modal.modes() - first;
        let bending = self
            .modal
            .bending()
            .view((first, first), (free, free))
            .into_owned();
        let mut potential = self.potential(&c);
        for _ in 0..STEPS {
            let gradient = DVector::from_fn(free, |i, _| self.at.gradient[first + i]);
            let hessian = self
                .at
                .hessian
                .view((first, first), (free, free))
                .into_owned();
            let step = downhill(&hessian, &bending, &gradient)?;
            let length = step.norm();
            if length < 1e-9 {
                return Some(c);
            }
            let mut scale = (longest.min(LONGEST_STEP) / length).min(1.0);
            longest *= STEP_GROWTH;
            loop {
                let mut moved = c.clone();
                for i in 0..free {
                    moved[first + i] -= scale * step[i];
                }
                let lower = self.potential(&moved);
                if lower < potential || scale * length < 1e-9 {
                    (c, potential) = (moved, lower);
                    break;
                }
                scale *= 0.5;
            }
        }
        None
    }
}

/// `(H + mu K)^-1 g` with the smallest `mu` of a doubling series that makes the matrix positive definite.
fn downhill(
    hessian: &DMatrix<f64>,
    bending: &DMatrix<f64>,
    gradient: &DVector<f64>,
) -> Option<DVector<f64>> {
    let mut mu = 0.0;
    for _ in 0..20 {
        if let Some(cholesky) = (hessian + bending * mu).cholesky() {
            return Some(cholesky.solve(gradient));
        }
        mu = if mu == 0.0 { 0.05 } else { 2.0 * mu };
    }
    None
}
