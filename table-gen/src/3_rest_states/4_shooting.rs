//! All rest states of the full rod, by shooting from the clamped base: an independent second method.
//!
//! A rest state obeys `alpha' = kappa0 + M / gamma`, `M' = -w sin(phi + alpha)` with `alpha(0) = 0`, so it is fixed by the one
//! number `v = alpha'(0)`. Shooting from every `v` gives the setpoint as a function of `v` (tip angle `alpha(1; v)` or tip
//! couple `M(1; v)`): the rest states at a setpoint are the roots, the folds are the extrema. `|v|` has an a-priori bound,
//! for `|M(s) - M(1)| <= int_s^1 w`. The derivative in `v` is a Jacobi field; its zeros along the arm are the conjugate points
//! that give the Morse index (Legendre-Jacobi test; Gelfand and Fomin, Calculus of Variations, 1963, ch. 5; from memory).

use crate::rod::{Held, Rod};

/// The rod's coefficients at the three abscissae of one Runge-Kutta step.
#[derive(Clone, Copy, Debug)]
struct Step {
    length: f64,
    compliance: [f64; 3],
    rest_curvature: [f64; 3],
    outboard: [f64; 3],
}

/// One shot from the base.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Shot {
    /// Base curvature `v` times L.
    pub base_curvature: f64,
    /// The setpoint that this shape rests at (rad or m g L).
    pub setpoint: f64,
    /// Its derivative in `v`.
    pub setpoint_slope: f64,
    /// Tip angle (rad).
    pub tip_angle: f64,
    /// Mean angle (rad).
    pub mean_angle: f64,
    /// Tip couple (m g L).
    pub couple: f64,
    /// Potential energy without the drive's work (m g L).
    pub energy: f64,
    /// Tip position (L).
    pub tip: [f64; 2],
    /// Morse index by conjugate points.
    pub index: usize,
}

/// The whole rest curve of a rod over the base curvature.
#[derive(Clone, Debug)]
pub struct Shooting {
    held: Held,
    tilt_rad: f64,
    base_stiffness: f64,
    base_rest_curvature: f64,
    steps: Vec<Step>,
    /// Shots in order of base curvature; between neighbours the setpoint is monotone.
    shots: Vec<Shot>,
    /// Extrema of the setpoint.
    folds: Vec<Shot>,
}

/// State of the integration: angle, couple, mean angle, the first two's derivatives in `v`, energy, tip x and y.
type State = [f64; 8];

impl Shooting {
    /// Scans the base curvature over the bound that holds for setpoints within `range` (dimensionless).
    /// `accuracy` is the error allowed in the shots' angles and couples (rad, m g L).
    pub fn scan(rod: &Rod, range: [f64; 2], accuracy: f64) -> Self {
        let bound = base_curvature_bound(rod, range);
        let mut shooting = Self {
            held: rod.held,
            tilt_rad: rod.tilt_rad,
            base_stiffness: rod.stiffness(0.0),
            base_rest_curvature: rod.rest_curvature(0.0),
            steps: steps(rod, 64),
            shots: Vec::new(),
            folds: Vec::new(),
        };
        shooting.refine_steps(rod, bound, accuracy);
        let grid: Vec<Shot> = (0..=FIRST_GRID)
            .map(|k| {
                shooting.shoot(bound[0] + (bound[1] - bound[0]) * k as f64 / FIRST_GRID as f64)
            })
            .collect();
        let mut shots = vec![grid[0]];
        for pair in grid.windows(2) {
            shooting.subdivide(pair[0], pair[1], DEEPEST_SUBDIVISION, &mut shots);
        }
        for pair in shots.windows(2) {
            shooting.shots.push(pair[0]);
            shooting.find_folds(pair[0], pair[1], FLATTEST_TRIALS);
        }
        shooting.shots.extend(shots.last());
        shooting
    }

    /// Adds the folds between two shots. Where the slope keeps its sign but comes close to zero between them, the flattest
    /// place is tried: two folds may lie close together.
    fn find_folds(&mut self, a: Shot, b: Shot, trials: usize) {
        let (da, db) = (a.setpoint_slope, b.setpoint_slope);
        if (da > 0.0) != (db > 0.0) {
            let fold = self.bracketed(a, b, |shot| shot.setpoint_slope);
            self.shots.push(fold);
            self.folds.push(fold);
            return;
        }
        // Slope of the cubic between the shots: a parabola over x in 0..1, flattest at its vertex.
        let h = b.base_curvature - a.base_curvature;
        let chord = (b.setpoint - a.setpoint) / h;
        let (linear, square) = (
            6.0 * chord - 4.0 * da - 2.0 * db,
            3.0 * (da + db) - 6.0 * chord,
        );
        let x = -0.5 * linear / square;
        let flattest = da + x * (linear + x * square);
        let is_suspect = flattest * da < 0.1 * da.abs().min(db.abs()) * da.abs();
        if trials > 0 && (0.02..=0.98).contains(&x) && is_suspect {
            let middle = self.shoot(a.base_curvature + x * h);
            self.find_folds(a, middle, trials - 1);
            self.shots.push(middle);
            self.find_folds(middle, b, trials - 1);
        }
    }

    /// Halves the integration steps until halving once more changes a sample of shots by less than `accuracy`.
    fn refine_steps(&mut self, rod: &Rod, bound: [f64; 2], accuracy: f64) {
        let sample = |shooting: &Self| -> Vec<Shot> {
            // Towards the middle of the bound, where rest states lie and shots are most sensitive.
            (1..16)
                .map(|k| 0.5 * (1.0 - (k as f64 * std::f64::consts::PI / 16.0).cos()))
                .map(|x| shooting.shoot(bound[0] + (bound[1] - bound[0]) * x))
                .collect()
        };
        let mut before = sample(self);
        for doubling in 1..=5 {
            self.steps = steps(rod, 64 << doubling);
            let after = sample(self);
            let worst = before
                .iter()
                .zip(&after)
                .map(|(a, b)| {
                    (a.tip_angle - b.tip_angle)
                        .abs()
                        .max((a.couple - b.couple).abs())
                })
                .fold(0.0, f64::max);
            // Fourth order: the finer shots' error is a fifteenth of the difference.
            if worst < 15.0 * accuracy {
                break;
            }
            before = after;
        }
    }

    /// Integrates the rest conditions from the base with curvature `v`.
    pub fn shoot(&self, v: f64) -> Shot {
        let moment = self.base_stiffness * (v - self.base_rest_curvature);
        let mut y: State = [0.0, moment, 0.0, 0.0, self.base_stiffness, 0.0, 0.0, 0.0];
        let mut conjugate_points = 0;
        for step in &self.steps {
            let before = y[3];
            y = self.advance(step, y);
            conjugate_points += usize::from(before * y[3] < 0.0);
        }
        let (setpoint, setpoint_slope) = match self.held {
            Held::TipAngle => (y[0], y[3]),
            Held::TipCouple => (y[1], y[4]),
        };
        // With a free tip angle the end itself can yield: once more when the field bends back towards zero there.
        let free_end = self.held == Held::TipCouple && y[3] * y[4] < 0.0;
        Shot {
            base_curvature: v,
            setpoint,
            setpoint_slope,
            tip_angle: y[0],
            mean_angle: y[2],
            couple: y[1],
            energy: y[5],
            tip: [y[6], y[7]],
            index: conjugate_points + usize::from(free_end),
        }
    }

    /// Curvatures `alpha'` at the step ends with their arc lengths, for projecting a shot on modes.
    pub fn curvatures(&self, v: f64) -> Vec<(f64, f64)> {
        let moment = self.base_stiffness * (v - self.base_rest_curvature);
        let mut y: State = [0.0, moment, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0];
        let mut s = 0.0;
        let mut out = vec![(0.0, v)];
        for step in &self.steps {
            y = self.advance(step, y);
            s += step.length;
            out.push((s, step.rest_curvature[2] + y[1] * step.compliance[2]));
        }
        out
    }

    /// One classical Runge-Kutta step.
    fn advance(&self, step: &Step, y: State) -> State {
        let rate = |at: usize, y: &State| -> State {
            let (sin, cos) = (self.tilt_rad + y[0]).sin_cos();
            let (compliance, outboard) = (step.compliance[at], step.outboard[at]);
            [
                step.rest_curvature[at] + y[1] * compliance,
                -outboard * sin,
                y[0],
                y[4] * compliance,
                -outboard * cos * y[3],
                0.5 * y[1] * y[1] * compliance + outboard * cos,
                sin,
                cos,
            ]
        };
        let moved = |k: &State, h: f64| -> State { std::array::from_fn(|i| y[i] + h * k[i]) };
        let h = step.length;
        let k1 = rate(0, &y);
        let k2 = rate(1, &moved(&k1, 0.5 * h));
        let k3 = rate(1, &moved(&k2, 0.5 * h));
        let k4 = rate(2, &moved(&k3, h));
        std::array::from_fn(|i| y[i] + h / 6.0 * (k1[i] + 2.0 * (k2[i] + k3[i]) + k4[i]))
    }

    /// Appends shots between `a` and `b` (and `b`) until cubic interpolation foretells the middle one.
    fn subdivide(&self, a: Shot, b: Shot, depth: usize, out: &mut Vec<Shot>) {
        let h = b.base_curvature - a.base_curvature;
        let middle = self.shoot(a.base_curvature + 0.5 * h);
        let foretold =
            0.5 * (a.setpoint + b.setpoint) + h / 8.0 * (a.setpoint_slope - b.setpoint_slope);
        let foretold_slope =
            1.5 * (b.setpoint - a.setpoint) / h - 0.25 * (a.setpoint_slope + b.setpoint_slope);
        let error = (foretold - middle.setpoint).abs()
            + 0.25 * h * (foretold_slope - middle.setpoint_slope).abs();
        let smooth = error < FORETOLD + 1e-3 * (b.setpoint - a.setpoint).abs();
        if depth == 0 || smooth {
            out.extend([middle, b]);
        } else {
            self.subdivide(a, middle, depth - 1, out);
            self.subdivide(middle, b, depth - 1, out);
        }
    }

    /// The shot between `a` and `b` at which `f` vanishes, by false position with the Illinois rule.
    fn bracketed(&self, a: Shot, b: Shot, f: impl Fn(&Shot) -> f64) -> Shot {
        let (mut low, mut high) = (a.base_curvature, b.base_curvature);
        let (mut f_low, mut f_high) = (f(&a), f(&b));
        let mut best = a;
        let mut moved_low = None;
        for _ in 0..100 {
            let v = high - f_high * (high - low) / (f_high - f_low);
            best = self.shoot(v);
            let value = f(&best);
            if value == 0.0 || (high - low).abs() < 1e-13 * (1.0 + v.abs()) || value.abs() < 1e-14 {
                break;
            }
            let moves_low = (value > 0.0) == (f_low > 0.0);
            let halve = if moved_low == Some(moves_low) {
                0.5
            } else {
                1.0
            };
            if moves_low {
                (low, f_low, f_high) = (v, value, halve * f_high);
            } else {
                (high, f_high, f_low) = (v, value, halve * f_low);
            }
            moved_low = Some(moves_low);
        }
        best
    }

    /// Every rest state at `setpoint`, in order of base curvature.
    pub fn rest_states(&self, setpoint: f64) -> Vec<Shot> {
        self.shots
            .windows(2)
            .filter(|pair| (pair[0].setpoint < setpoint) != (pair[1].setpoint < setpoint))
            .map(|pair| self.bracketed(pair[0], pair[1], |shot| shot.setpoint - setpoint))
            .collect()
    }

    /// Every fold, in order of base curvature.
    pub fn folds(&self) -> &[Shot] {
        &self.folds
    }

    /// Shots taken for the scan.
    pub fn shots_taken(&self) -> usize {
        self.shots.len()
    }
}

/// Intervals of base curvature before subdivision.
const FIRST_GRID: usize = 96;
/// Halvings of one of them at most.
const DEEPEST_SUBDIVISION: usize = 24;
/// Places tried, one inside the other, where two folds may lie close together.
const FLATTEST_TRIALS: usize = 3;
/// How well cubic interpolation must foretell the setpoint before an interval counts as resolved (rad or m g L).
const FORETOLD: f64 = 1e-3;

/// `count` integration steps spread over the panels, at least 8 in each.
fn steps(rod: &Rod, count: usize) -> Vec<Step> {
    let mut steps = Vec::new();
    for ends in rod.panel_ends().windows(2) {
        let (from, to) = (ends[0], ends[1]);
        let here = ((count as f64 * (to - from)).ceil() as usize).max(8);
        let length = (to - from) / here as f64;
        for k in 0..here {
            let at = [0.0, 0.5, 1.0].map(|x| from + (k as f64 + x) * length);
            steps.push(Step {
                length,
                compliance: at.map(|s| 1.0 / rod.stiffness(s)),
                rest_curvature: at.map(|s| rod.rest_curvature(s)),
                outboard: at.map(|s| rod.outboard(s, to)),
            });
        }
    }
    steps
}

/// Interval that holds the base curvature of every rest state with its setpoint in `range`.
fn base_curvature_bound(rod: &Rod, range: [f64; 2]) -> [f64; 2] {
    let steps = steps(rod, 64);
    // From the tip down: int_s^1 w bounds how far the couple can be from the tip's.
    let (mut outboard, mut rest_turn, mut sag) = (0.0, 0.0, 0.0);
    for step in steps.iter().rev() {
        outboard += step.length * step.outboard[0];
        rest_turn += step.length * step.rest_curvature[1];
        sag += step.length * outboard * step.compliance.iter().copied().fold(0.0, f64::max);
    }
    let least_compliance: f64 = steps
        .iter()
        .map(|s| s.length * s.compliance.iter().copied().fold(f64::INFINITY, f64::min))
        .sum();
    let tip_couple = match rod.held {
        Held::TipAngle => {
            let turn = range
                .iter()
                .map(|q0| (q0 - rest_turn).abs())
                .fold(0.0, f64::max);
            (turn + sag) / least_compliance
        }
        Held::TipCouple => range.iter().map(|couple| couple.abs()).fold(0.0, f64::max),
    };
    // A hundredth more covers the quadrature of the bound itself.
    let reach = 1.01 * (tip_couple + outboard) / rod.stiffness(0.0);
    [
        rod.rest_curvature(0.0) - reach,
        rod.rest_curvature(0.0) + reach,
    ]
}
