//! Integration in time: two-stage Gauss collocation.
//!
//! Order 4, symplectic and A-stable (Hairer, Lubich and Wanner, Geometric Numerical Integration, 2006, II.1.3 and VI.4): the
//! energy of undamped motion does not drift, and the highest curvature modes, whose Kelvin-Voigt damping is far too quick to
//! follow (its rate grows like the eighth power of the mode number), need no shorter steps. The unknowns are the
//! accelerations at both stages, found by Newton's method with one matrix per step. The two stages are decoupled by the
//! complex eigenvectors of the collocation matrix (Hairer and Wanner, Solving Ordinary Differential Equations II, 1996,
//! IV.8), which leaves one complex n by n factorisation.

use super::chain::{Chain, Nodes};

/// sqrt(3)/6.
const OFFSET: f64 = 0.288_675_134_594_812_87;
/// Stage times.
const TIME: [f64; 2] = [0.5 - OFFSET, 0.5 + OFFSET];
/// The collocation matrix.
const A: [[f64; 2]; 2] = [[0.25, 0.25 - OFFSET], [0.25 + OFFSET, 0.25]];
/// Its square: what an acceleration does to the shape.
const A2: [[f64; 2]; 2] = [
    [
        A[0][0] * A[0][0] + A[0][1] * A[1][0],
        A[0][0] * A[0][1] + A[0][1] * A[1][1],
    ],
    [
        A[1][0] * A[0][0] + A[1][1] * A[1][0],
        A[1][0] * A[0][1] + A[1][1] * A[1][1],
    ],
];
/// Eigenvalue `1/4 + i sqrt(3)/12` of the collocation matrix, its square, and the imaginary second entry of its eigenvector.
const EIGENVALUE: (f64, f64) = (0.25, 0.5 * OFFSET);
const EIGENVALUE2: (f64, f64) = (
    EIGENVALUE.0 * EIGENVALUE.0 - EIGENVALUE.1 * EIGENVALUE.1,
    2.0 * EIGENVALUE.0 * EIGENVALUE.1,
);
const EIGENVECTOR: f64 = EIGENVALUE.1 / A[0][1];

/// Newton stops when the rates at the end of the step are this well known (rad per unit of time).
const RATE_TOLERANCE: f64 = 1e-9;
/// Smooth motion takes 2 to 6 corrections; what takes more than this wants a shorter step.
const MOST_CORRECTIONS: usize = 12;
/// A matrix serves so many steps of the same length, as long as it takes no more than this many corrections.
const MATRIX_STEPS: u32 = 6;
const MATRIX_CORRECTIONS: usize = 4;

/// The step is chosen so that the rates guessed from the step before are right to this, in the norm of the mass matrix (the
/// square root of twice the energy of the difference, m g L). Undamped arms in violent motion then keep their energy to
/// 2e-7 m g L over 20 units of time.
const SURPRISE: f64 = 5e-4;
/// A step with a surprise this many times larger is taken again, shorter ...
const REPEATED: f64 = 8.0;
/// ... unless it is already this much shorter than the longest: a cord that jerks tight surprises at every length.
const SHORT: f64 = 1.0 / 32.0;
/// The first step after an interference, when there is nothing to guess from, in longest steps.
const FIRST: f64 = 1.0 / 16.0;
/// Shortest step before the motion counts as lost, in longest steps.
const SHORTEST: f64 = 1.0 / 4096.0;

/// What acts on the moving rod beside bending and gravity.
pub(super) struct Load<'a> {
    /// Kelvin-Voigt damping of bending, a time.
    pub damping: f64,
    /// First mode that moves: 1 when the tip orientation is held.
    pub first_free: usize,
    /// Tip couple and its slope over the tip orientation, of the tip orientation (m g L, rad).
    pub tip_couple: &'a dyn Fn(f64) -> (f64, f64),
}

/// The integrator's memory and room.
#[derive(Clone, Debug)]
pub(super) struct Gauss {
    /// Longest step allowed.
    longest: f64,
    /// Length of step to take next.
    pace: f64,
    /// Stage accelerations of the last step and its length; nothing after an interference.
    known: [Vec<f64>; 2],
    known_h: Option<f64>,
    /// Stage accelerations of this step: as guessed, and as corrected so far.
    guess: [Vec<f64>; 2],
    stage: [Vec<f64>; 2],
    nodes: Nodes,
    c: Vec<f64>,
    v: Vec<f64>,
    imbalance: [Vec<f64>; 2],
    mass: Vec<f64>,
    stiffness: Vec<f64>,
    factor: Vec<(f64, f64)>,
    /// The step length the matrix was made for, and how many steps it has served.
    factor_h: f64,
    factor_age: u32,
    wave: Vec<(f64, f64)>,
    evaluations: u64,
}

/// The step did not come about; the next one should be shorter.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Refused {
    /// [`Gauss::pace`] has the length to try.
    TooLong,
    /// It was the shortest already.
    Lost,
}

impl Gauss {
    /// An integrator for `chain` with steps up to `longest`.
    pub fn new(chain: &Chain, longest: f64) -> Self {
        let n = chain.modes();
        let zeros = || vec![0.0; n];
        Self {
            longest,
            pace: FIRST * longest,
            known: [zeros(), zeros()],
            known_h: None,
            guess: [zeros(), zeros()],
            stage: [zeros(), zeros()],
            nodes: chain.room(),
            c: zeros(),
            v: zeros(),
            imbalance: [zeros(), zeros()],
            mass: vec![0.0; n * n],
            stiffness: vec![0.0; n * n],
            factor: vec![(0.0, 0.0); n * n],
            factor_h: 0.0,
            factor_age: 0,
            wave: vec![(0.0, 0.0); n],
            evaluations: 0,
        }
    }

    /// Forgets the last step: the motion has been interfered with.
    pub fn forget(&mut self) {
        self.known_h = None;
        self.factor_h = 0.0;
        self.pace = FIRST * self.longest;
    }

    /// Length of step to take next; shorter is always allowed.
    pub fn pace(&self) -> f64 {
        self.pace
    }

    /// Force evaluations so far.
    pub fn evaluations(&self) -> u64 {
        self.evaluations
    }

    /// Advances shape `c` and rates `v` by `h`; both are unchanged when refused.
    pub fn step(
        &mut self,
        chain: &Chain,
        load: &Load,
        h: f64,
        c: &mut [f64],
        v: &mut [f64],
    ) -> Result<(), Refused> {
        self.predict(load.first_free, h);
        if self.factor_h != h || self.factor_age >= MATRIX_STEPS {
            self.factorise(chain, load, h, c, v);
        }
        let Some(corrections) = self.solve(chain, load, h, c, v) else {
            self.factor_h = 0.0;
            self.pace = 0.25 * h;
            return Err(if h < SHORTEST * self.longest {
                Refused::Lost
            } else {
                Refused::TooLong
            });
        };
        self.factor_age = if corrections > MATRIX_CORRECTIONS {
            MATRIX_STEPS
        } else {
            self.factor_age + 1
        };
        let growth = match self.known_h {
            // The guess is a straight line: it misses by the cube of the step, counted in rates.
            Some(_) => (SURPRISE / self.surprise(h)).cbrt(),
            None => f64::INFINITY,
        };
        if growth.powi(3) * REPEATED < 1.0 && h > SHORT * self.longest {
            self.pace = h * growth.max(0.25);
            return Err(Refused::TooLong);
        }
        // A step cut short by the end of a call says little about a longer one.
        let next = (0.9 * h * growth).clamp(0.3 * h, 2.0 * h.max(0.5 * self.pace));
        self.pace = next.clamp(SHORTEST * self.longest, self.longest);
        self.finish(h, c, v);
        Ok(())
    }

    /// First guess of the stage accelerations: the line through the last step's, continued.
    fn predict(&mut self, first_free: usize, h: f64) {
        for i in 0..self.wave.len() {
            let (a, b) = (self.known[0][i], self.known[1][i]);
            for (stage, time) in TIME.iter().enumerate() {
                self.guess[stage][i] = match self.known_h {
                    Some(known_h) if i >= first_free => {
                        let passed = (1.0 - TIME[0]) + time * h / known_h;
                        a + (b - a) * passed / (TIME[1] - TIME[0])
                    }
                    _ => 0.0,
                };
                self.stage[stage][i] = self.guess[stage][i];
            }
        }
    }

    /// Corrects the stage accelerations until they fit; how many corrections that took, `None` when it fails.
    fn solve(&mut self, chain: &Chain, load: &Load, h: f64, c: &[f64], v: &[f64]) -> Option<usize> {
        let mut before = f64::INFINITY;
        for correction in 0..MOST_CORRECTIONS {
            self.evaluate(chain, load, h, c, v);
            let change = h * self.correct(load.first_free);
            // The next correction would shrink like this one did; unknown for the first.
            let shrink = if correction == 0 {
                1.0
            } else {
                change / before
            };
            if !change.is_finite() || (correction > 3 && shrink > 2.0) {
                return None;
            }
            if change * shrink.min(1.0) < RATE_TOLERANCE {
                return Some(correction + 1);
            }
            before = change;
        }
        None
    }

    /// How far off the guess was: the larger of both stages, as rates in the norm of the mass matrix.
    fn surprise(&self, h: f64) -> f64 {
        let n = self.wave.len();
        let miss = |stage: usize, i: usize| self.stage[stage][i] - self.guess[stage][i];
        let square = |stage: usize| -> f64 {
            let row =
                |i: usize| -> f64 { (0..n).map(|j| self.mass[i * n + j] * miss(stage, j)).sum() };
            (0..n).map(|i| miss(stage, i) * row(i)).sum()
        };
        h * square(0).max(square(1)).max(1e-24).sqrt()
    }

    fn evaluate(&mut self, chain: &Chain, load: &Load, h: f64, c: &[f64], v: &[f64]) {
        for i in 0..2 {
            for k in 0..c.len() {
                let (a0, a1) = (self.stage[0][k], self.stage[1][k]);
                self.v[k] = v[k] + h * (A[i][0] * a0 + A[i][1] * a1);
                self.c[k] = c[k] + h * (TIME[i] * v[k] + h * (A2[i][0] * a0 + A2[i][1] * a1));
            }
            let imbalance = &mut self.imbalance[i];
            chain.imbalance(
                &self.c,
                &self.v,
                &self.stage[i],
                load.damping,
                &mut self.nodes,
                imbalance,
            );
            imbalance[0] -= (load.tip_couple)(self.c[0]).0;
        }
        self.evaluations += 2;
    }

    /// `L D L^T` of `mass + h mu (damping bending) + h^2 mu^2 stiffness`, complex symmetric with a positive real part.
    fn factorise(&mut self, chain: &Chain, load: &Load, h: f64, c: &[f64], v: &[f64]) {
        for (mid, (c, v)) in self.c.iter_mut().zip(c.iter().zip(v)) {
            *mid = c + 0.5 * h * v;
        }
        chain.linearise(
            &self.c,
            &mut self.nodes,
            &mut self.mass,
            &mut self.stiffness,
        );
        self.stiffness[0] -= (load.tip_couple)(self.c[0]).1;
        (self.factor_h, self.factor_age) = (h, 0);
        let (n, damped, stiff) = (chain.modes(), h * load.damping, h * h);
        let parts = self.mass.iter().zip(&self.stiffness).zip(chain.bending());
        for (f, ((m, k), b)) in self.factor.iter_mut().zip(parts) {
            f.0 = m + damped * EIGENVALUE.0 * b + stiff * EIGENVALUE2.0 * k;
            f.1 = damped * EIGENVALUE.1 * b + stiff * EIGENVALUE2.1 * k;
        }
        for k in load.first_free..n {
            let inverse = reciprocal(self.factor[k * n + k]);
            self.factor[k * n + k] = inverse;
            for i in k + 1..n {
                let below = self.factor[i * n + k];
                let ratio = times(below, inverse);
                for j in k + 1..=i {
                    // Column k still holds L D; the row already divided lies above the diagonal.
                    let product = times(ratio, self.factor[j * n + k]);
                    let f = &mut self.factor[i * n + j];
                    *f = (f.0 - product.0, f.1 - product.1);
                }
                self.factor[k * n + i] = ratio;
            }
        }
    }

    /// One Newton correction of the stage accelerations; returns the largest change.
    fn correct(&mut self, first_free: usize) -> f64 {
        let n = self.wave.len();
        for k in first_free..n {
            self.wave[k] = (
                -0.5 * self.imbalance[0][k],
                0.5 / EIGENVECTOR * self.imbalance[1][k],
            );
            for j in first_free..k {
                let product = times(self.factor[j * n + k], self.wave[j]);
                self.wave[k] = (self.wave[k].0 - product.0, self.wave[k].1 - product.1);
            }
        }
        let mut largest = 0.0_f64;
        for k in (first_free..n).rev() {
            self.wave[k] = times(self.wave[k], self.factor[k * n + k]);
            for j in k + 1..n {
                let product = times(self.factor[k * n + j], self.wave[j]);
                self.wave[k] = (self.wave[k].0 - product.0, self.wave[k].1 - product.1);
            }
            let change = [2.0 * self.wave[k].0, -2.0 * EIGENVECTOR * self.wave[k].1];
            self.stage[0][k] += change[0];
            self.stage[1][k] += change[1];
            for change in change {
                // Once NaN, it stays.
                if change.abs() > largest || change.is_nan() {
                    largest = change.abs();
                }
            }
        }
        largest
    }

    fn finish(&mut self, h: f64, c: &mut [f64], v: &mut [f64]) {
        for k in 0..c.len() {
            let (a0, a1) = (self.stage[0][k], self.stage[1][k]);
            // Weights 1/2, 1/2 for the rates; they times the collocation matrix for the shape.
            c[k] += h * (v[k] + h * (0.5 * TIME[1] * a0 + 0.5 * TIME[0] * a1));
            v[k] += 0.5 * h * (a0 + a1);
        }
        std::mem::swap(&mut self.known, &mut self.stage);
        self.known_h = Some(h);
    }
}

fn times(a: (f64, f64), b: (f64, f64)) -> (f64, f64) {
    (a.0 * b.0 - a.1 * b.1, a.0 * b.1 + a.1 * b.0)
}

fn reciprocal(a: (f64, f64)) -> (f64, f64) {
    let square = a.0 * a.0 + a.1 * a.1;
    (a.0 / square, -a.1 / square)
}
