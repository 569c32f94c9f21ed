//! The whole arm in space: positions, strain, distance to keep-out regions, and what a lateral knock at the tip moves.

use crate::arm_file::{Arm, KeepOut, Region};
use crate::rest_states::modes::{ModalRod, angle_modes, legendre};
use crate::rod::Rod;
use nalgebra::{DMatrix, DVector};

/// Intervals between the stations along the arm; even, for Simpson's rule.
const INTERVALS: usize = 400;

/// Inertia below this share of the largest is rounding.
const NO_INERTIA: f64 = 1e-12;
/// A direction with more than this share in motions without inertia meets no mass; less is rounding.
const IDLE_SHARE: f64 = 1e-9;

/// Stations along an arm in a number of modes.
#[derive(Clone, Debug)]
pub struct Stations {
    n: usize,
    /// `phi_i` at the stations, station-major.
    angle: Vec<f64>,
    /// `P_i` at the stations, station-major.
    curvature: Vec<f64>,
}

/// The arm's shape at the stations, in L.
#[derive(Clone, Debug)]
pub struct Shape {
    /// Sine and cosine of the orientation from the upward vertical.
    direction: Vec<[f64; 2]>,
    /// Positions, base first.
    pub positions: Vec<[f64; 2]>,
    /// Curvature times L.
    pub curvature: Vec<f64>,
}

impl Stations {
    /// Stations for shapes in `n` modes.
    pub fn new(n: usize) -> Self {
        let at = |k: usize| k as f64 / INTERVALS as f64;
        let angle = (0..=INTERVALS)
            .flat_map(|k| angle_modes(n, at(k)))
            .collect();
        let curvature = (0..=INTERVALS)
            .flat_map(|k| legendre(n, 2.0 * at(k) - 1.0).into_iter().take(n))
            .collect();
        Self {
            n,
            angle,
            curvature,
        }
    }

    /// The shape of the coefficients `c` on a base tilted by `tilt_rad`.
    pub fn shape(&self, c: &[f64], tilt_rad: f64) -> Shape {
        let dot = |row: &[f64]| row.iter().zip(c).map(|(a, b)| a * b).sum::<f64>();
        let direction: Vec<[f64; 2]> = self
            .angle
            .chunks_exact(self.n)
            .map(|row| (tilt_rad + dot(row)).sin_cos().into())
            .collect();
        let curvature = self.curvature.chunks_exact(self.n).map(dot).collect();
        let x = integrals(direction.iter().map(|d| d[0]));
        let y = integrals(direction.iter().map(|d| d[1]));
        let positions = x.into_iter().zip(y).map(|(x, y)| [x, y]).collect();
        Shape {
            direction,
            positions,
            curvature,
        }
    }

    /// Effective mass of a lateral impulse at the tip (kg) with the drive holding its setpoint: impulse over the tip speed it
    /// causes, `1 / (b' M^-1 b)` over the free modes. The more modes, the less of the spine takes part; the payload always
    /// does. This is the energy-rich, and so the safe, reading of a knock: a push slow enough to move the arm in its first mode
    /// alone meets more mass.
    pub fn tip_mass_kg(&self, modal: &ModalRod, rod: &Rod, arm: &Arm, shape: &Shape) -> f64 {
        let (mass, tip) = self.kinetics(rod, shape);
        let first = modal.first_free();
        let free = self.n - first;
        let mass = mass.view((first, first), (free, free)).into_owned();
        arm.total_mass_kg() * effective_mass(&mass, &tip.rows(first, free).into_owned())
    }

    /// Mass matrix of the modes in m L^2 and the lateral displacement of the tip per unit of each mode, in L.
    pub fn kinetics(&self, rod: &Rod, shape: &Shape) -> (DMatrix<f64>, DVector<f64>) {
        // Displacements of every station per unit of each mode: int (cos, -sin) phi_i.
        let motion: Vec<[Vec<f64>; 2]> = (0..self.n)
            .map(|i| {
                let turning = |k: usize| (shape.direction[k], self.angle[k * self.n + i]);
                let each = || (0..=INTERVALS).map(turning);
                [
                    integrals(each().map(|([_, cos], phi)| cos * phi)),
                    integrals(each().map(|([sin, _], phi)| -sin * phi)),
                ]
            })
            .collect();
        let together = |i: usize, j: usize, k: usize| {
            motion[i][0][k] * motion[j][0][k] + motion[i][1][k] * motion[j][1][k]
        };
        let mut mass = DMatrix::zeros(self.n, self.n);
        for i in 0..self.n {
            for j in 0..=i {
                let density = (0..=INTERVALS)
                    .map(|k| rod.mass_per_length(k as f64 / INTERVALS as f64) * together(i, j, k));
                let spine = integrals(density)[INTERVALS];
                let points: f64 = rod
                    .point_masses()
                    .iter()
                    .map(|&(s, fraction)| {
                        let place = s * INTERVALS as f64;
                        let k = (place as usize).min(INTERVALS - 1);
                        let x = place - k as f64;
                        fraction * ((1.0 - x) * together(i, j, k) + x * together(i, j, k + 1))
                    })
                    .sum();
                mass[(i, j)] = spine + points;
                mass[(j, i)] = spine + points;
            }
        }
        let [sin, cos] = shape.direction[INTERVALS];
        let tip = DVector::from_fn(self.n, |i, _| {
            motion[i][0][INTERVALS] * cos - motion[i][1][INTERVALS] * sin
        });
        (mass, tip)
    }
}

/// Mass that an impulse along `direction` meets: `1 / (b' M^-1 b)`, in the units of `mass`. Directions without inertia (a spine
/// whose mass is neglected has them) take no part; zero when `direction` needs one of them.
pub fn effective_mass(mass: &DMatrix<f64>, direction: &DVector<f64>) -> f64 {
    let eigen = mass.clone().symmetric_eigen();
    let least_inertia = NO_INERTIA * eigen.eigenvalues.amax();
    let (mut mobility, mut idle) = (0.0, 0.0);
    for (inertia, motion) in eigen
        .eigenvalues
        .iter()
        .zip(eigen.eigenvectors.column_iter())
    {
        let share = motion.dot(direction).powi(2);
        if *inertia > least_inertia {
            mobility += share / inertia;
        } else {
            idle += share;
        }
    }
    if idle > IDLE_SHARE * direction.norm_squared() || mobility == 0.0 {
        return 0.0;
    }
    1.0 / mobility
}

impl Shape {
    /// Largest strain: half the thickness times the largest change of curvature from rest.
    pub fn strain(&self, arm: &Arm, rod: &Rod) -> f64 {
        let largest = self
            .curvature
            .iter()
            .enumerate()
            .map(|(k, curvature)| {
                (curvature - rod.rest_curvature(k as f64 / INTERVALS as f64)).abs()
            })
            .fold(0.0, f64::max);
        0.5 * arm.spine.thickness_m * largest / arm.spine.length_m
    }

    /// Smallest distance of any part of the arm to any of the regions (m), with the region's position in the list; `None`
    /// without regions.
    pub fn clearance_m(&self, keep_out: &[KeepOut], length_m: f64) -> Option<(f64, usize)> {
        let step_m = length_m / INTERVALS as f64;
        let curvature = self
            .curvature
            .iter()
            .fold(0.0, |largest: f64, c| largest.max(c.abs()))
            / length_m;
        keep_out
            .iter()
            .enumerate()
            .map(|(number, keep_out)| {
                let at = |p: &[f64; 2]| keep_out.region.clearance_m(p.map(|x| x * length_m));
                let nearest = self.positions.iter().map(at).fold(f64::INFINITY, f64::min);
                // Between two stations arm and border can bulge towards each other by this much.
                let arm_bulge_m = step_m * step_m * curvature / 8.0;
                let border_bulge_m = match keep_out.region {
                    Region::HalfPlane { .. } => 0.0,
                    Region::Disc { radius_m, .. } => {
                        let to_centre_m = nearest + radius_m;
                        (step_m * step_m / (8.0 * to_centre_m)).min(to_centre_m)
                    }
                };
                (nearest - arm_bulge_m - border_bulge_m, number)
            })
            .min_by(|a, b| a.0.total_cmp(&b.0))
    }
}

/// Integrals from the base to every station (Simpson's rule over pairs of intervals, the parabola's first half between).
fn integrals(values: impl Iterator<Item = f64>) -> Vec<f64> {
    let values: Vec<f64> = values.collect();
    let step = 1.0 / INTERVALS as f64;
    let mut sum = 0.0;
    let mut out = vec![0.0];
    for k in (0..INTERVALS).step_by(2) {
        let [a, b, c] = [values[k], values[k + 1], values[k + 2]];
        out.push(sum + step / 12.0 * (5.0 * a + 8.0 * b - c));
        sum += step / 3.0 * (a + 4.0 * b + c);
        out.push(sum);
    }
    out
}
