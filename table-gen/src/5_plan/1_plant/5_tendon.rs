//! One tendon and its actuator.
//!
//! The actuator winds the cord; the cord is two springs in series with the guides' friction between them, and slides through
//! the guides only when the tensions on either side differ by more than the capstan ratio `e = exp(mu theta)` (Euler,
//! Eytelwein). With `x` wound in, `u` slid through and the tip having come `y` closer to the spool,
//!
//! ```text
//! spool side  T_s = k1 (x - u)        T_s <= e T_t    while winding in
//! tip side    T_t = k2 (u - y)        T_t <= e T_s    while paying out
//! ```
//!
//! so `u` lies between two bounds linear in `x` and `y`, and stays where it was inside them: hysteresis, without a stiff
//! regularisation. A cord with `x <= y` is slack and carries nothing.

use super::options::TendonOptions;

/// State of a tendon; its command lives in the plant.
#[derive(Clone, Copy, Debug)]
pub(super) struct Tendon {
    options: TendonOptions,
    /// Direction in which the tip orientation shortens its path: 1 for tendon A, -1 for B.
    sign: f64,
    offset_m: f64,
    wound_m: f64,
    slid_m: f64,
    /// What the actuator is after, on its way to the command (N).
    target_n: f64,
    broken: bool,
}

/// The tip end of a tendon.
#[derive(Clone, Copy, Debug)]
struct TipEnd {
    tension_n: f64,
    /// Growth of the tension per metre of lengthening.
    stiffness_n_m: f64,
    slid_m: f64,
}

impl Tendon {
    /// A slack tendon at tip orientation 0.
    pub fn new(options: TendonOptions, sign: f64, offset_m: f64) -> Self {
        Self {
            options,
            sign,
            offset_m,
            wound_m: 0.0,
            slid_m: 0.0,
            target_n: 0.0,
            broken: false,
        }
    }

    /// Stiffness of either side (N/m).
    fn side_n_m(&self) -> f64 {
        2.0 * self.options.stiffness_n_m
    }

    /// How much closer to the spool the tip's attachment is than at orientation 0 (m).
    fn closer_m(&self, tip_rad: f64) -> f64 {
        self.sign * self.offset_m * tip_rad
    }

    fn tip_end(&self, closer_m: f64) -> TipEnd {
        let (x, y, side) = (self.wound_m, closer_m, self.side_n_m());
        if self.broken || x <= y {
            let slid_m = self.slid_m.clamp(x.min(y), x.max(y));
            return TipEnd {
                tension_n: 0.0,
                stiffness_n_m: 0.0,
                slid_m,
            };
        }
        let ratio = 1.0 / (1.0 - self.options.friction_fraction);
        let least = (x + ratio * y) / (1.0 + ratio);
        let most = (ratio * x + y) / (ratio + 1.0);
        let slid_m = self.slid_m.clamp(least, most.max(least));
        let given_way = if slid_m == least {
            ratio / (1.0 + ratio)
        } else if slid_m == most {
            1.0 / (1.0 + ratio)
        } else {
            0.0
        };
        TipEnd {
            tension_n: side * (slid_m - y),
            stiffness_n_m: side * (1.0 - given_way),
            slid_m,
        }
    }

    /// Couple on the tip (N m) and its slope over the tip orientation (N m/rad).
    pub fn couple(&self, tip_rad: f64) -> (f64, f64) {
        let end = self.tip_end(self.closer_m(tip_rad));
        (
            self.sign * self.offset_m * end.tension_n,
            -self.offset_m * self.offset_m * end.stiffness_n_m,
        )
    }

    /// Tensions at the tip and at the spool (N), both >= 0.
    pub fn tensions_n(&self, tip_rad: f64) -> [f64; 2] {
        let end = self.tip_end(self.closer_m(tip_rad));
        let spool_n = if end.tension_n > 0.0 {
            self.side_n_m() * (self.wound_m - end.slid_m)
        } else {
            0.0
        };
        [end.tension_n, spool_n]
    }

    /// Elastic energy (J).
    pub fn energy_j(&self, tip_rad: f64) -> f64 {
        let square: f64 = self.tensions_n(tip_rad).iter().map(|t| t * t).sum();
        0.5 * square / self.side_n_m()
    }

    /// The tip has moved here: what slid through the guides stays there.
    pub fn settle(&mut self, tip_rad: f64) {
        self.slid_m = self.tip_end(self.closer_m(tip_rad)).slid_m;
    }

    /// The actuator winds for `dt_s` towards `command_n`.
    pub fn wind(&mut self, command_n: f64, tip_rad: f64, dt_s: f64) {
        let reach_n = self.options.rate_limit_n_s * dt_s;
        self.target_n += (command_n - self.target_n).clamp(-reach_n, reach_n);
        let [_, spool_n] = self.tensions_n(tip_rad);
        let lacking_m = (self.target_n - spool_n) / self.options.stiffness_n_m;
        let reach_m = self.options.winding_speed_limit_m_s * dt_s;
        self.wound_m +=
            (-lacking_m * (-dt_s / self.options.lag_s).exp_m1()).clamp(-reach_m, reach_m);
        self.settle(tip_rad);
    }

    /// At rest with `tension_n` on both sides of the guides.
    pub fn set(&mut self, tension_n: f64, tip_rad: f64) {
        let closer_m = self.closer_m(tip_rad);
        self.target_n = tension_n;
        self.wound_m = closer_m + tension_n / self.options.stiffness_n_m;
        self.slid_m = closer_m + tension_n / self.side_n_m();
    }

    /// The cord breaks, for good.
    pub fn tear(&mut self) {
        self.broken = true;
    }
}
