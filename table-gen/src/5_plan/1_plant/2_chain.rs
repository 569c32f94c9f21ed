//! The forces on the moving rod, in curvature modes.
//!
//! With the orientation `theta = phi + alpha`, the velocity of the point at `s` is `int_0^s alpha_dot (cos, -sin) theta` and
//! its acceleration
//!
//! ```text
//! r_ddot(s) = int_0^s [alpha_ddot (cos, -sin) - alpha_dot^2 (sin, cos)] theta ds'
//! ```
//!
//! d'Alembert's principle gives the force of inertia on mode i, `int dm J_i . r_ddot` with `J_i = int_0^s phi_i (cos, -sin)`.
//! Every integral over `s` is a sum over Gauss nodes, `J_i(k) = sum_l A_kl phi_i(l) (cos, -sin)(l)` with the constant matrix
//! `A` that integrates each panel's interpolation polynomial. So `int dm J . J` needs only the constant node matrix
//! `G = A^T diag(dm) A`, and one force evaluation is a product of `G` with two node vectors: no mass matrix, and no
//! Christoffel symbols, yet all velocity-dependent terms in full. Because the sums are those of one Lagrangian whatever the
//! number of nodes, quadrature costs no energy.
//!
//! Units: L, the total mass m, sqrt(L/g).

use super::sine::sin_cos;
use crate::arm_file::Arm;
use crate::rest_states::modes::{ModalRod, legendre};
use crate::rod::Rod;
use gauss_quad::GaussLegendre;
use nalgebra::DMatrix;
use std::num::NonZeroUsize;

/// Node vectors are padded with weightless nodes to a multiple of this, so that loops over them vectorise.
const LANES: usize = 4;
/// Below this share of the mass the spine gets [`LEAST_SECTION_INERTIA`]: without any, its bending waves have no speed.
const LIGHT_SPINE: f64 = 1e-3;
/// Section inertia (m L) of a massless spine.
const LEAST_SECTION_INERTIA: f64 = 1e-6;

/// Positions, masses and stiffness of a rod, ready for its equations of motion.
#[derive(Clone, Debug)]
pub(super) struct Chain {
    n: usize,
    /// Number of nodes, padding included.
    nodes: usize,
    tilt_rad: f64,
    /// `phi_i` at the nodes, one row of `nodes` per mode.
    phi: Vec<f64>,
    /// Quadrature weights.
    weight: Vec<f64>,
    /// Weight times outboard mass.
    gravity: Vec<f64>,
    /// The node matrix `G`, row by row.
    reach: Vec<f64>,
    /// Inertia that does not depend on the shape: `int rho I phi_i phi_j ds`, and the drive's on `c_0`. Row by row.
    constant_inertia: Vec<f64>,
    /// `int gamma P_i P_j ds`, row by row.
    bending: Vec<f64>,
    /// `int gamma kappa0 P_i ds`.
    rest_load: Vec<f64>,
}

/// Node vectors, reused between evaluations.
#[derive(Clone, Debug)]
pub(super) struct Nodes {
    alpha: Vec<f64>,
    rate: Vec<f64>,
    turn: Vec<f64>,
    sin: Vec<f64>,
    cos: Vec<f64>,
    fx: Vec<f64>,
    fy: Vec<f64>,
    yx: Vec<f64>,
    yy: Vec<f64>,
}

impl Chain {
    /// The chain of `arm` (whose rod in modes is `modal`), with the drive's inertia in m L^2.
    pub fn new(arm: &Arm, rod: &Rod, modal: &ModalRod, drive_inertia: f64) -> Self {
        let n = modal.modes();
        let (mass_kg, length_m) = (arm.total_mass_kg(), arm.spine.length_m);
        let density = arm.spine.mass_per_length_kg_m.scaled(length_m / mass_kg);
        // A rectangular section: I/A = thickness^2 / 12.
        let gyration2 = (arm.spine.thickness_m / length_m).powi(2) / 12.0;
        let least = if density.integral_to_tip(0.0) < LIGHT_SPINE {
            LEAST_SECTION_INERTIA
        } else {
            0.0
        };
        let ends = rod.panel_ends();
        let point_mass = |s: f64| -> f64 {
            let lumps = arm.lumps.iter().map(|lump| (lump.at, lump.mass_kg));
            let at_s = lumps
                .chain([(1.0, arm.payload.mass_kg)])
                .filter(|m| (m.0 - s).abs() < 1e-12);
            at_s.map(|m| m.1 / mass_kg).sum()
        };

        let counts: Vec<usize> = ends
            .windows(2)
            .map(|e| nodes_in_panel(n, e[1] - e[0]))
            .collect();
        let nodes = counts.iter().sum::<usize>().next_multiple_of(LANES);
        let mut chain = Self {
            n,
            nodes,
            tilt_rad: arm.base.tilt_rad,
            phi: vec![0.0; n * nodes],
            weight: vec![0.0; nodes],
            gravity: vec![0.0; nodes],
            reach: vec![0.0; nodes * nodes],
            constant_inertia: vec![0.0; n * n],
            bending: modal.bending().transpose().as_slice().to_vec(),
            rest_load: modal.force_bounds().0.to_vec(),
        };
        chain.constant_inertia[0] = drive_inertia;
        let mut first = 0;
        for (ends, &count) in ends.windows(2).zip(&counts) {
            let (from, to) = (ends[0], ends[1]);
            let half = 0.5 * (to - from);
            let count_nonzero = NonZeroUsize::new(count).expect("a panel has nodes");
            let rule: Vec<(f64, f64)> = GaussLegendre::new(count_nonzero).iter().copied().collect();
            for (k, &(x, w)) in rule.iter().enumerate() {
                let s = from + half * (x + 1.0);
                let node = first + k;
                chain.weight[node] = half * w;
                chain.gravity[node] = half * w * rod.outboard(s, to);
                let mut unit = vec![0.0; n];
                for i in 0..n {
                    unit[i] = 1.0;
                    chain.phi[i * nodes + node] = modal.angle(&unit, s);
                    unit[i] = 0.0;
                }
                let section = half * w * (density.at(s) * gyration2).max(least);
                for i in 0..n {
                    for j in 0..n {
                        let (phi_i, phi_j) =
                            (chain.phi[i * nodes + node], chain.phi[j * nodes + node]);
                        chain.constant_inertia[i * n + j] += section * phi_i * phi_j;
                    }
                }
            }
            // One mass element per node, reached by everything inboard of it, and the point masses at the panel's end.
            for &(x, w) in &rule {
                let mass = half * w * density.at(from + half * (x + 1.0));
                let to_node = integral_weights(&rule, x).into_iter().map(|a| half * a);
                chain.add_mass(first, to_node.collect(), mass);
            }
            let whole_panel = rule.iter().map(|&(_, w)| half * w).collect();
            chain.add_mass(first, whole_panel, point_mass(to));
            first += count;
        }
        chain
    }

    /// Adds `mass` at the point reached by all panels before node `first` and by `within` of the panel from there.
    fn add_mass(&mut self, first: usize, within: Vec<f64>, mass: f64) {
        if mass == 0.0 {
            return;
        }
        let row: Vec<f64> = self.weight[..first].iter().copied().chain(within).collect();
        for (l, a) in row.iter().enumerate() {
            for (m, b) in row.iter().enumerate() {
                self.reach[l * self.nodes + m] += mass * a * b;
            }
        }
    }

    /// Number of modes.
    pub fn modes(&self) -> usize {
        self.n
    }

    /// Bending stiffness matrix, row by row (m g L).
    pub fn bending(&self) -> &[f64] {
        &self.bending
    }

    /// Room for node vectors.
    pub fn room(&self) -> Nodes {
        let zeros = || vec![0.0; self.nodes];
        Nodes {
            alpha: zeros(),
            rate: zeros(),
            turn: zeros(),
            sin: zeros(),
            cos: zeros(),
            fx: zeros(),
            fy: zeros(),
            yx: zeros(),
            yy: zeros(),
        }
    }

    /// Sum of the modes at the nodes.
    fn along(&self, c: &[f64], out: &mut [f64]) {
        out.fill(0.0);
        for (phi, &c) in self.phi.chunks_exact(self.nodes).zip(c) {
            out.iter_mut().zip(phi).for_each(|(o, p)| *o += c * p);
        }
    }

    fn orient(&self, c: &[f64], at: &mut Nodes) {
        self.along(c, &mut at.alpha);
        for ((alpha, sin), cos) in at.alpha.iter().zip(&mut at.sin).zip(&mut at.cos) {
            (*sin, *cos) = sin_cos(self.tilt_rad + alpha);
        }
    }

    /// `G` times the node vectors `fx` and `fy`.
    fn gather(&self, at: &mut Nodes) {
        at.yx.fill(0.0);
        at.yy.fill(0.0);
        // G is symmetric: adding up its rows keeps the inner loop contiguous and free of a running sum. Four rows at a time
        // load and store the sums a quarter as often.
        let fours = self.reach.chunks_exact(LANES * self.nodes);
        let (fx, fy) = (at.fx.as_chunks::<LANES>().0, at.fy.as_chunks::<LANES>().0);
        for ((rows, fx), fy) in fours.zip(fx).zip(fy) {
            let (first, rest) = rows.split_at(self.nodes);
            let (second, rest) = rest.split_at(self.nodes);
            let (third, fourth) = rest.split_at(self.nodes);
            let sums = at.yx.iter_mut().zip(&mut at.yy);
            for ((((a, b), c), d), (yx, yy)) in
                first.iter().zip(second).zip(third).zip(fourth).zip(sums)
            {
                *yx += (a * fx[0] + b * fx[1]) + (c * fx[2] + d * fx[3]);
                *yy += (a * fy[0] + b * fy[1]) + (c * fy[2] + d * fy[3]);
            }
        }
    }

    /// The force that the motion lacks, per mode: inertia + bending (with Kelvin-Voigt damping `damping`, a time) + gravity,
    /// for shape `c`, rates `v`, accelerations `a`. Zero on every mode that nothing else acts on.
    pub fn imbalance(
        &self,
        c: &[f64],
        v: &[f64],
        a: &[f64],
        damping: f64,
        at: &mut Nodes,
        out: &mut [f64],
    ) {
        let n = self.n;
        self.orient(c, at);
        self.along(v, &mut at.rate);
        self.along(a, &mut at.turn);
        for k in 0..self.nodes {
            let (sin, cos, turn, rate2) =
                (at.sin[k], at.cos[k], at.turn[k], at.rate[k] * at.rate[k]);
            at.fx[k] = cos * turn - sin * rate2;
            at.fy[k] = -sin * turn - cos * rate2;
        }
        self.gather(at);
        for k in 0..self.nodes {
            at.fx[k] = at.cos[k] * at.yx[k] - at.sin[k] * (at.yy[k] + self.gravity[k]);
        }
        for (i, out) in out.iter_mut().enumerate() {
            let row = i * n..(i + 1) * n;
            let mut sum =
                dot(&self.phi[i * self.nodes..(i + 1) * self.nodes], &at.fx) - self.rest_load[i];
            for (((b, m), (c, v)), a) in self.bending[row.clone()]
                .iter()
                .zip(&self.constant_inertia[row])
                .zip(c.iter().zip(v))
                .zip(a)
            {
                sum += b * (c + damping * v) + m * a;
            }
            *out = sum;
        }
    }

    /// Mass matrix and stiffness (bending and gravity) at shape `c`, both row by row.
    pub fn linearise(&self, c: &[f64], at: &mut Nodes, mass: &mut [f64], stiffness: &mut [f64]) {
        let (n, nodes) = (self.n, self.nodes);
        self.orient(c, at);
        for j in 0..n {
            let phi_j = &self.phi[j * nodes..(j + 1) * nodes];
            for (k, phi) in phi_j.iter().enumerate() {
                at.fx[k] = at.cos[k] * phi;
                at.fy[k] = -at.sin[k] * phi;
            }
            self.gather(at);
            for (k, phi) in phi_j.iter().enumerate() {
                at.fx[k] = at.cos[k] * at.yx[k] - at.sin[k] * at.yy[k];
                at.fy[k] = self.gravity[k] * at.cos[k] * phi;
            }
            for i in 0..=j {
                let phi_i = &self.phi[i * nodes..(i + 1) * nodes];
                let m = dot(phi_i, &at.fx) + self.constant_inertia[i * n + j];
                let k = self.bending[i * n + j] - dot(phi_i, &at.fy);
                (mass[i * n + j], mass[j * n + i]) = (m, m);
                (stiffness[i * n + j], stiffness[j * n + i]) = (k, k);
            }
        }
    }

    /// Mass matrix at shape `c` (m L^2).
    pub fn mass_matrix(&self, c: &[f64]) -> DMatrix<f64> {
        let n = self.n;
        let (mut mass, mut stiffness) = (vec![0.0; n * n], vec![0.0; n * n]);
        self.linearise(c, &mut self.room(), &mut mass, &mut stiffness);
        DMatrix::from_row_slice(n, n, &mass)
    }

    /// Kinetic energy (m g L).
    pub fn kinetic_energy(&self, c: &[f64], v: &[f64]) -> f64 {
        let mut at = self.room();
        self.orient(c, &mut at);
        self.along(v, &mut at.rate);
        for k in 0..self.nodes {
            at.fx[k] = at.cos[k] * at.rate[k];
            at.fy[k] = -at.sin[k] * at.rate[k];
        }
        self.gather(&mut at);
        let constant: f64 = (0..self.n)
            .map(|i| v[i] * dot_short(&self.constant_inertia[i * self.n..], v))
            .sum();
        0.5 * (dot(&at.fx, &at.yx) + dot(&at.fy, &at.yy) + constant)
    }

    /// Tip velocity `(x, y)` per unit rate of each mode (L).
    pub fn tip_reach(&self, c: &[f64]) -> Vec<[f64; 2]> {
        let mut at = self.room();
        self.orient(c, &mut at);
        let each = self.phi.chunks_exact(self.nodes).map(|phi| {
            let mut reach = [0.0; 2];
            for (k, phi) in phi.iter().enumerate() {
                reach[0] += self.weight[k] * at.cos[k] * phi;
                reach[1] -= self.weight[k] * at.sin[k] * phi;
            }
            reach
        });
        each.collect()
    }
}

/// Gauss nodes in a panel of this length: as many as sine and cosine of the most bent shapes need. Measured on the examples
/// with 6 to 12 modes of up to 2 rad: kinetic energies are right to 1e-9, the tip's effective mass to 1e-7.
fn nodes_in_panel(n: usize, length: f64) -> usize {
    4 + ((n + 8) as f64 * length).ceil() as usize
}

/// Weights that integrate the interpolation polynomial through the nodes of `rule` from -1 to `x`.
fn integral_weights(rule: &[(f64, f64)], x: f64) -> Vec<f64> {
    let count = rule.len();
    let to_x = legendre(count, x);
    let weight = |&(node, w): &(f64, f64)| {
        // The polynomial that is 1 at this node in Legendre polynomials, each integrated by its recurrence.
        let at_node = legendre(count, node);
        let higher: f64 = (1..count)
            .map(|j| at_node[j] * (to_x[j + 1] - to_x[j - 1]))
            .sum();
        0.5 * w * (x + 1.0 + higher)
    };
    rule.iter().map(weight).collect()
}

/// Scalar product of node vectors, in `LANES` running sums.
fn dot(a: &[f64], b: &[f64]) -> f64 {
    let mut sums = [0.0; LANES];
    for (a, b) in a.chunks_exact(LANES).zip(b.chunks_exact(LANES)) {
        for lane in 0..LANES {
            sums[lane] += a[lane] * b[lane];
        }
    }
    (sums[0] + sums[1]) + (sums[2] + sums[3])
}

fn dot_short(a: &[f64], b: &[f64]) -> f64 {
    a.iter().zip(b).map(|(a, b)| a * b).sum()
}
