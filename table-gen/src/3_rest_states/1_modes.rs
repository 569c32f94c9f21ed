//! The rod in curvature modes: energy, gradient and Hessian.
//!
//! `alpha' = sum_i c_i P_i(2s - 1)` with shifted Legendre polynomials, so `alpha = sum_i c_i phi_i` with `phi_0 = s` and
//! `phi_i = (P_{i+1} - P_{i-1}) / (2 (2i + 1))`. For every number of modes the tip angle is `q0 = c_0` and the mean angle
//! `q1 = int alpha ds = c_0/2 - c_1/6`, exactly. The gravity integrals use Gauss-Legendre nodes in panels that break where
//! the rod's properties do.

use crate::rod::{Held, Rod};
use gauss_quad::GaussLegendre;
use nalgebra::{DMatrix, DVector};
use std::num::NonZeroUsize;

/// A rod restricted to the first `n` curvature modes.
#[derive(Clone, Debug)]
pub struct ModalRod {
    n: usize,
    held: Held,
    tilt_rad: f64,
    /// Quadrature weight of each node.
    weight: Vec<f64>,
    /// Weight times outboard mass of each node.
    gravity_weight: Vec<f64>,
    /// `phi_i` at the nodes, node-major, `n` per node.
    phi: Vec<f64>,
    /// `int gamma P_i P_j ds`.
    bending: DMatrix<f64>,
    /// `int gamma kappa0 P_i ds`.
    rest_load: Vec<f64>,
    /// `1/2 int gamma kappa0^2 ds`.
    rest_energy: f64,
}

/// Energy, gradient and Hessian at one shape; reused between evaluations.
#[derive(Clone, Debug)]
pub struct Evaluation {
    /// Potential energy without the drive's work (m g L).
    pub energy: f64,
    /// `dU/dc_i`.
    pub gradient: Vec<f64>,
    /// `d2U/dc_i dc_j`, both triangles.
    pub hessian: DMatrix<f64>,
}

impl Evaluation {
    /// Room for `n` modes.
    pub fn new(n: usize) -> Self {
        Self {
            energy: 0.0,
            gradient: vec![0.0; n],
            hessian: DMatrix::zeros(n, n),
        }
    }
}

/// Values of `P_0..=P_n` at `x` in -1..=1 by the three-term recurrence.
pub(crate) fn legendre(n: usize, x: f64) -> Vec<f64> {
    let mut p = vec![1.0, x];
    for i in 1..n {
        let k = i as f64;
        p.push(((2.0 * k + 1.0) * x * p[i] - k * p[i - 1]) / (k + 1.0));
    }
    p
}

/// `phi_0..phi_{n-1}` at `s`.
pub(crate) fn angle_modes(n: usize, s: f64) -> Vec<f64> {
    let p = legendre(n, 2.0 * s - 1.0);
    (0..n)
        .map(|i| {
            if i == 0 {
                s
            } else {
                (p[i + 1] - p[i - 1]) / (2.0 * (2 * i + 1) as f64)
            }
        })
        .collect()
}

impl ModalRod {
    /// `rod` in `n >= 2` modes.
    pub fn new(rod: &Rod, n: usize) -> Self {
        assert!(n >= 2, "the tip angle and the mean angle need two modes");
        let mut modal = Self {
            n,
            held: rod.held,
            tilt_rad: rod.tilt_rad,
            weight: Vec::new(),
            gravity_weight: Vec::new(),
            phi: Vec::new(),
            bending: DMatrix::zeros(n, n),
            rest_load: vec![0.0; n],
            rest_energy: 0.0,
        };
        for ends in rod.panel_ends().windows(2) {
            let (from, to) = (ends[0], ends[1]);
            // Exact for the bending integrals (degree 2n - 2 times at most 3 from the profiles), and 12 more nodes, in
            // proportion to the panel's length, for the sine and cosine of the shape.
            let count = n + 3 + (12.0 * (to - from)).ceil() as usize;
            let rule = GaussLegendre::new(NonZeroUsize::new(count).expect("at least n + 3 nodes"));
            for &(x, w) in rule.iter() {
                let s = from + 0.5 * (to - from) * (x + 1.0);
                modal.add_node(rod, s, to, 0.5 * (to - from) * w);
            }
        }
        modal
    }

    fn add_node(&mut self, rod: &Rod, s: f64, panel_end: f64, weight: f64) {
        let (gamma, kappa0) = (rod.stiffness(s), rod.rest_curvature(s));
        let p = legendre(self.n, 2.0 * s - 1.0);
        for i in 0..self.n {
            for j in 0..self.n {
                self.bending[(i, j)] += weight * gamma * p[i] * p[j];
            }
            self.rest_load[i] += weight * gamma * kappa0 * p[i];
        }
        self.rest_energy += 0.5 * weight * gamma * kappa0 * kappa0;
        self.weight.push(weight);
        self.gravity_weight
            .push(weight * rod.outboard(s, panel_end));
        self.phi.extend(angle_modes(self.n, s));
    }

    /// The same rod with its bending stiffness multiplied, more payload (as a fraction of the arm's mass; energies and couples
    /// stay in units of the unchanged m g L) and its base tilted further.
    pub fn varied(&self, stiffness_factor: f64, more_payload: f64, tilt_change_rad: f64) -> Self {
        let mut varied = self.clone();
        varied.bending *= stiffness_factor;
        varied
            .rest_load
            .iter_mut()
            .for_each(|load| *load *= stiffness_factor);
        varied.rest_energy *= stiffness_factor;
        varied
            .gravity_weight
            .iter_mut()
            .zip(&self.weight)
            .for_each(|(g, w)| *g += more_payload * w);
        varied.tilt_rad += tilt_change_rad;
        varied
    }

    /// Derivative of the gradient with respect to the payload (as a fraction of the arm's mass).
    pub fn payload_force(&self, c: &[f64]) -> Vec<f64> {
        let mut force = vec![0.0; self.n];
        for (phi, &weight) in self.phi.chunks_exact(self.n).zip(&self.weight) {
            let alpha: f64 = phi.iter().zip(c).map(|(p, c)| p * c).sum();
            let pull = weight * (self.tilt_rad + alpha).sin();
            force.iter_mut().zip(phi).for_each(|(f, p)| *f -= pull * p);
        }
        force
    }

    /// Derivative of the gradient with respect to a factor on the bending stiffness.
    pub fn bending_force(&self, c: &[f64]) -> Vec<f64> {
        (0..self.n)
            .map(|i| {
                (0..self.n)
                    .map(|j| self.bending[(j, i)] * c[j])
                    .sum::<f64>()
                    - self.rest_load[i]
            })
            .collect()
    }

    /// Number of modes.
    pub fn modes(&self) -> usize {
        self.n
    }

    /// What the drive holds.
    pub fn held(&self) -> Held {
        self.held
    }

    /// First mode that is free to move when the drive holds its setpoint.
    pub fn first_free(&self) -> usize {
        match self.held {
            Held::TipAngle => 1,
            Held::TipCouple => 0,
        }
    }

    /// Bending stiffness matrix `int gamma P_i P_j ds`.
    pub fn bending(&self) -> &DMatrix<f64> {
        &self.bending
    }

    /// Energy, gradient and Hessian at `c` (length `n`).
    pub fn evaluate(&self, c: &[f64], out: &mut Evaluation) {
        let n = self.n;
        out.hessian.copy_from(&self.bending);
        out.energy = self.rest_energy;
        for i in 0..n {
            let force: f64 = (0..n).map(|j| self.bending[(j, i)] * c[j]).sum();
            out.gradient[i] = force - self.rest_load[i];
            out.energy += c[i] * (0.5 * force - self.rest_load[i]);
        }
        // Column-major storage: filling the upper triangle column by column keeps the inner loop contiguous.
        let hessian = out.hessian.as_mut_slice();
        for (phi, &weight) in self.phi.chunks_exact(n).zip(&self.gravity_weight) {
            let alpha: f64 = phi.iter().zip(c).map(|(p, c)| p * c).sum();
            let (sin, cos) = (self.tilt_rad + alpha).sin_cos();
            out.energy += weight * cos;
            for (j, &phi_j) in phi.iter().enumerate() {
                out.gradient[j] -= weight * sin * phi_j;
                let factor = weight * cos * phi_j;
                for (h, p) in hessian[j * n..j * n + j + 1].iter_mut().zip(phi) {
                    *h -= factor * p;
                }
            }
        }
        out.hessian.fill_lower_triangle_with_upper_triangle();
    }

    /// For two modes: `T_ijk = int w |phi_i phi_j phi_k| ds`, a bound on the third derivatives of the energy.
    pub fn third_derivative_bounds(&self) -> [[[f64; 2]; 2]; 2] {
        let mut bounds = [[[0.0; 2]; 2]; 2];
        for (phi, &weight) in self.phi.chunks_exact(self.n).zip(&self.gravity_weight) {
            for (i, j, k) in (0..8).map(|b| (b >> 2, (b >> 1) & 1, b & 1)) {
                bounds[i][j][k] += weight * (phi[i] * phi[j] * phi[k]).abs();
            }
        }
        bounds
    }

    /// The force of the rest curvature on each mode, and a bound `int w |phi_i| ds` on gravity's.
    pub fn force_bounds(&self) -> (&[f64], Vec<f64>) {
        let mut bound = vec![0.0; self.n];
        for (phi, &weight) in self.phi.chunks_exact(self.n).zip(&self.gravity_weight) {
            bound
                .iter_mut()
                .zip(phi)
                .for_each(|(b, p)| *b += weight * p.abs());
        }
        (&self.rest_load, bound)
    }

    /// The setpoint at which `c` rests, if it rests: tip angle, or tip couple (m g L) from the gradient.
    pub fn setpoint(&self, c: &[f64], at: &Evaluation) -> f64 {
        match self.held {
            Held::TipAngle => c[0],
            Held::TipCouple => at.gradient[0],
        }
    }

    /// Gradient of [`Self::setpoint`] with respect to `c`, entry `j`.
    pub fn setpoint_slope(&self, at: &Evaluation, j: usize) -> f64 {
        match self.held {
            Held::TipAngle => f64::from(u8::from(j == 0)),
            Held::TipCouple => at.hessian[(0, j)],
        }
    }

    /// Condensed second derivative of the potential along the mean angle at the held setpoint (m g L/rad): everything else
    /// relaxed. `None` where the Hessian is not positive definite.
    pub fn restoring_stiffness(&self, c: &[f64]) -> Option<f64> {
        let mut at = Evaluation::new(self.n);
        self.evaluate(c, &mut at);
        let first = self.first_free();
        let free = self.n - first;
        let hessian = at.hessian.view((first, first), (free, free)).into_owned();
        let mut along = DVector::zeros(free);
        if first == 0 {
            along[0] = 0.5;
        }
        along[1 - first] = -1.0 / 6.0;
        Some(1.0 / along.dot(&hessian.cholesky()?.solve(&along)))
    }

    /// Tip position `(x, y)` in L, base at the origin, y up.
    pub fn tip(&self, c: &[f64]) -> (f64, f64) {
        let mut tip = (0.0, 0.0);
        for (phi, &weight) in self.phi.chunks_exact(self.n).zip(&self.weight) {
            let alpha: f64 = phi.iter().zip(c).map(|(p, c)| p * c).sum();
            let (sin, cos) = (self.tilt_rad + alpha).sin_cos();
            tip.0 += weight * sin;
            tip.1 += weight * cos;
        }
        tip
    }

    /// Positions of `segments + 1` points along the arm in L, base first (midpoint orientations, Gauss nodes not needed
    /// for a picture).
    pub fn polyline(&self, c: &[f64], segments: usize) -> Vec<(f64, f64)> {
        let step = 1.0 / segments as f64;
        let mut at = (0.0, 0.0);
        let mut line = vec![at];
        for k in 0..segments {
            let (sin, cos) = (self.tilt_rad + self.angle(c, (k as f64 + 0.5) * step)).sin_cos();
            at = (at.0 + step * sin, at.1 + step * cos);
            line.push(at);
        }
        line
    }

    /// Orientation `alpha(s)` relative to the base tangent.
    pub fn angle(&self, c: &[f64], s: f64) -> f64 {
        angle_modes(self.n, s)
            .iter()
            .zip(c)
            .map(|(p, c)| p * c)
            .sum()
    }
}

/// Mean angle `q1 = int alpha ds` of a shape.
pub fn mean_angle(c: &[f64]) -> f64 {
    0.5 * c[0] - c[1] / 6.0
}

/// Curvature at the base, `alpha'(0)`: it orders the rest states of one setpoint, and no two share it.
pub fn base_curvature(c: &[f64]) -> f64 {
    c.iter()
        .enumerate()
        .map(|(i, c)| if i % 2 == 0 { *c } else { -c })
        .sum()
}

/// Number of negative pivots of `L D L^T` of the block of `hessian` from `first` on: by Sylvester's law of inertia the
/// Morse index. A zero pivot counts as negative: what cannot be shown stable is not.
pub fn morse_index(hessian: &DMatrix<f64>, first: usize) -> usize {
    let n = hessian.nrows() - first;
    let mut a: Vec<f64> = (0..n * n)
        .map(|k| hessian[(first + k / n, first + k % n)])
        .collect();
    let mut negative = 0;
    // From the last coordinate up: the stiff high modes first, so that a vanishing pivot can only come last, where it is
    // the answer and divides nothing.
    for k in (0..n).rev() {
        let pivot = a[k * n + k];
        let is_positive = pivot > 0.0;
        negative += usize::from(!is_positive);
        for i in 0..k {
            let factor = a[i * n + k] / pivot;
            for j in 0..k {
                a[i * n + j] -= factor * a[j * n + k];
            }
        }
    }
    negative
}
