//! Small motion about a shape: frequencies and damping of its modes.

use super::chain::Chain;
use nalgebra::{DMatrix, SymmetricEigen};

/// One mode of small motion about the present shape.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SmallMotion {
    /// Square of the circular frequency without damping (rad2/s2); negative where the shape is unstable.
    pub omega2_rad2_s2: f64,
    /// Rate at which damping shrinks the amplitude (1/s), >= 0; exact for modes that damping does not couple.
    pub decay_1_s: f64,
}

impl SmallMotion {
    /// Circular frequency without damping (rad/s); NaN where the shape is unstable.
    pub fn omega_rad_s(&self) -> f64 {
        self.omega2_rad2_s2.sqrt()
    }

    /// Damping ratio; NaN where the shape is unstable.
    pub fn damping_ratio(&self) -> f64 {
        self.decay_1_s / self.omega_rad_s()
    }
}

/// Modes of `stiffness` and `mass` from coordinate `first` on, slowest first, in their own units: `(omega^2, decay)`, with
/// damping forces `damping * bending`. Empty when the mass matrix is singular.
pub(super) fn modes(
    mass: &DMatrix<f64>,
    stiffness: &DMatrix<f64>,
    bending: &DMatrix<f64>,
    damping: f64,
    first: usize,
) -> Vec<(f64, f64)> {
    let free = mass.nrows() - first;
    let part = |m: &DMatrix<f64>| m.view((first, first), (free, free)).into_owned();
    let Some(cholesky) = part(mass).cholesky() else {
        return Vec::new();
    };
    let lower = cholesky.l();
    // L^-1 K L^-T, whose eigenvectors are L^T times the modes.
    let reduce = |m: DMatrix<f64>| {
        let half = lower
            .solve_lower_triangular(&m)
            .expect("a Cholesky factor has no zero pivot");
        lower
            .solve_lower_triangular(&half.transpose())
            .expect("a Cholesky factor has no zero pivot")
    };
    let reduced_bending = reduce(part(bending));
    let eigen = SymmetricEigen::new(reduce(part(stiffness)));
    let mut modes: Vec<_> = (0..free)
        .map(|k| {
            let shape = eigen.eigenvectors.column(k);
            (
                eigen.eigenvalues[k],
                0.5 * damping * shape.dot(&(&reduced_bending * shape)),
            )
        })
        .collect();
    modes.sort_by(|a, b| a.0.total_cmp(&b.0));
    modes
}

/// Time constant of Kelvin-Voigt damping that gives the first held-tip mode this damping ratio about the unloaded shape
/// without gravity. With damping forces proportional to bending forces, `ratio = damping omega / 2`.
pub(super) fn damping_time(
    chain: &Chain,
    bending: &DMatrix<f64>,
    unloaded: &[f64],
    ratio: f64,
) -> f64 {
    let modes = modes(&chain.mass_matrix(unloaded), bending, bending, 0.0, 1);
    modes
        .first()
        .map_or(0.0, |first| 2.0 * ratio / first.0.sqrt())
}
