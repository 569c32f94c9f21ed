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
const OFFSET: f64 = 0.288_675_134_594_812_882_25;
/// Stage times.
const TIME: [f64; 2] = [0.5 - OFFSET, 0.5 + OFFSET];
/// The collocation matrix.
const A: [[f64; 2]; 2] = [[0.25, 0.25 - OFFSET], [0.25 + OFFSET, 0.25]];
/// Its square: what an acceleration does to the shape.
const A2: [[f64; 2]; 2] = [
    [A[0][0] * A[0][0] + A[0][1] * A[1][0], A[0][0] * A[0][1] + A[0][1] * A[1][1]],
    [A[1][0] * A[0][0] + A[1][1] * A[1][0], A[1][0] * A[0][1] + A[1][1] * A[1][1]],
];
/// Eigenvalue `1/4 + i sqrt(3)/12` of the collocation matrix, its square, and the imaginary second entry of its eigenvector.
const EIGENVALUE: (f64, f64) = (0.25, 0.5 * OFFSET);
const EIGENVALUE2: (f64, f64) =
    (EIGENVALUE.0 * EIGENVALUE.0 - EIGENVALUE.1 * EIGENVALUE.1, 2.0 * EIGENVALUE.0 * EIGENVALUE.1);
const EIGENVECTOR: f64 = EIGENVALUE.1 / A[0][1];

/// Newton stops when the rates at the end of the step are this well known (rad per unit of time).
const RATE_TOLERANCE: f64 = 1e-10;
/// Smooth motion takes 3 or 4 corrections; what takes more than this wants a shorter step.
const MOST_CORRECTIONS: usize = 14;

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
    /// Stage accelerations of the last step, where the next one's are extrapolated from, and that step's length.
    last: Option<f64>,
    stage: [Vec<f64>; 2],
    nodes: Nodes,
    c: Vec<f64>,
    v: Vec<f64>,
    imbalance: [Vec<f64>; 2],
    mass: Vec<f64>,
    stiffness: Vec<f64>,
    factor: Vec<(f64, f64)>,
    wave: Vec<(f64, f64)>,
    /// Force evaluations so far.
    pub evaluations: u64,
    /// TEMP
    pub hist: [u64; 16],
    /// TEMP
    pub est: Vec<f64>,
    pred: [Vec<f64>; 2],
}

/// The step is too long for Newton's method.
#[derive(Clone, Copy, Debug)]
pub(super) struct NotConverged;

impl Gauss {
    /// An integrator for `chain`.
    pub fn new(chain: &Chain) -> Self {
        let n = chain.modes();
        let zeros = || vec![0.0; n];
        Self {
            last: None,
            stage: [zeros(), zeros()],
            nodes: chain.room(),
            c: zeros(),
            v: zeros(),
            imbalance: [zeros(), zeros()],
            mass: vec![0.0; n * n],
            stiffness: vec![0.0; n * n],
            factor: vec![(0.0, 0.0); n * n],
            wave: vec![(0.0, 0.0); n],
            evaluations: 0,
            hist: [0; 16],
            est: vec![],
            pred: [zeros(), zeros()],
        }
    }

    /// Forgets the last step: the motion has been interfered with.
    pub fn forget(&mut self) {
        self.last = None;
    }

    /// Advances shape `c` and rates `v` by `h`; both are unchanged on failure.
    pub fn step(&mut self, chain: &Chain, load: &Load, h: f64, c: &mut [f64], v: &mut [f64]) -> Result<(), NotConverged> {
        self.predict(load.first_free, h);
        self.pred = self.stage.clone();
        for ((mid, &c), &v) in self.c.iter_mut().zip(&*c).zip(&*v) {
            *mid = c + 0.5 * h * v;
        }
        chain.linearise(&self.c, &mut self.nodes, &mut self.mass, &mut self.stiffness);
        self.stiffness[0] -= (load.tip_couple)(self.c[0]).1;
        self.factorise(chain.modes(), load, h);
        let mut before = f64::INFINITY;
        for correction in 0..MOST_CORRECTIONS {
            self.evaluate(chain, load, h, c, v);
            let change = h * self.correct(load.first_free);
            // The next correction would shrink like this one did; unknown for the first.
            let shrink = if correction == 0 { 1.0 } else { change / before };
            if !change.is_finite() || (correction > 3 && shrink > 2.0) {
                break;
            }
            if change * shrink.min(1.0) < RATE_TOLERANCE {
                self.hist[correction] += 1;
                let n = c.len();
                let mut e = 0.0_f64;
                for st in 0..2 {
                    let d: Vec<f64> = (0..n).map(|k| self.stage[st][k] - self.pred[st][k]).collect();
                    let mut q = 0.0;
                    for i in 0..n { for j in 0..n { q += d[i] * d[j] * self.mass[i * n + j]; } }
                    e = e.max(h * q.abs().sqrt());
                }
                self.est.push(e);
                self.finish(h, c, v);
                return Ok(());
            }
            before = change;
        }
        self.last = None;
        Err(NotConverged)
    }

    /// First guess of the stage accelerations: the line through the last step's, continued.
    fn predict(&mut self, first_free: usize, h: f64) {
        let [first, second] = &mut self.stage;
        for (i, (a, b)) in first.iter_mut().zip(second).enumerate() {
            match self.last {
                Some(last_h) if i >= first_free => {
                    let slope = (*b - *a) / ((TIME[1] - TIME[0]) * last_h);
                    let at = |time: f64| *a + slope * (last_h + time * h - TIME[0] * last_h);
                    (*a, *b) = (at(TIME[0]), at(TIME[1]));
                }
                _ => (*a, *b) = (0.0, 0.0),
            }
        }
    }

    fn evaluate(&mut self, chain: &Chain, load: &Load, h: f64, c: &[f64], v: &[f64]) {
        for i in 0..2 {
            for k in 0..c.len() {
                let (a0, a1) = (self.stage[0][k], self.stage[1][k]);
                self.v[k] = v[k] + h * (A[i][0] * a0 + A[i][1] * a1);
                self.c[k] = c[k] + h * (TIME[i] * v[k] + h * (A2[i][0] * a0 + A2[i][1] * a1));
            }
            let imbalance = &mut self.imbalance[i];
            chain.imbalance(&self.c, &self.v, &self.stage[i], load.damping, &mut self.nodes, imbalance);
            imbalance[0] -= (load.tip_couple)(self.c[0]).0;
        }
        self.evaluations += 2;
    }

    /// `L D L^T` of `mass + h mu (damping bending) + h^2 mu^2 stiffness`, complex symmetric with a positive real part.
    fn factorise(&mut self, n: usize, load: &Load, h: f64) {
        let (damped, stiff) = (h * load.damping, h * h);
        for (f, (m, k)) in self.factor.iter_mut().zip(self.mass.iter().zip(&self.stiffness)) {
            // Gravity's part of the stiffness is damped here too: it is small beside bending's where damping matters.
            let (re, im) = (damped * EIGENVALUE.0 + stiff * EIGENVALUE2.0, damped * EIGENVALUE.1 + stiff * EIGENVALUE2.1);
            *f = (m + re * k, im * k);
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
            self.wave[k] = (-0.5 * self.imbalance[0][k], 0.5 / EIGENVECTOR * self.imbalance[1][k]);
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
            // Written so that NaN is kept.
            for change in change {
                if !(change.abs() <= largest) {
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
        self.last = Some(h);
    }
}

fn times(a: (f64, f64), b: (f64, f64)) -> (f64, f64) {
    (a.0 * b.0 - a.1 * b.1, a.0 * b.1 + a.1 * b.0)
}

fn reciprocal(a: (f64, f64)) -> (f64, f64) {
    let square = a.0 * a.0 + a.1 * a.1;
    (a.0 / square, -a.1 / square)
}
