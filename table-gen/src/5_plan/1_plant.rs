//! The simulated arm: what the firmware and the plan are tried on.
//!
//! The converged rod in `n` curvature modes, with distributed and point masses, section inertia, the drive's inertia,
//! Kelvin-Voigt damping, two tendons that only pull, actuators and sensors. It shares the potential energy with the rest
//! states ([`ModalRod`]) and nothing with the firmware's two-coordinate model. Equations of motion
//!
//! ```text
//! M(c) c_ddot + b(c, c_dot) + damping B c_dot + dU/dc = (tip couple, 0, ..)
//! ```
//!
//! in `2_chain.rs`, time integration in `4_gauss.rs`, tendons in `5_tendon.rs`, sensors in `6_sensor.rs`.
//!
//! Signs: angles turn towards +x, `x = L int sin`, `y = L int cos` of the tilt plus the orientation; tendon A (index 0) pulls
//! the tip towards +x, B (index 1) towards -x.
//!
//! Damping: the ratio in the arm file is that of the first mode with the tip held, about the unloaded shape and without
//! gravity, as measured with the arm lying on its side. It fixes the material's time constant; at a rest state under gravity
//! the ratio differs and is read from [`Plant::small_motion`].
//!
//! Integrator: two-stage Gauss collocation with a step that follows the motion, against the classical Runge-Kutta method of
//! order 4 (which needs a mass matrix per evaluation), both in six modes. Undamped, the duct probe in violent motion: energy
//! right to 3e-7 m g L against 6e-6 with Runge-Kutta steps of 0.001 sqrt(L/g), which cost two to three times as much. Damped,
//! Runge-Kutta stays bound to steps of 2.8 over the damping rate of the highest mode however calm the motion (0.0058 sqrt(L/g)
//! for the greenhouse wand with six modes, 0.00007 with twelve), where Gauss takes about 0.006 when the
//! wand is driven violently and up to its longest step when it is not, with either number of modes.

#[path = "1_plant/2_chain.rs"]
mod chain;
#[path = "1_plant/4_gauss.rs"]
mod gauss;
#[path = "1_plant/1_options.rs"]
mod options;
#[path = "1_plant/8_readings.rs"]
mod readings;
#[path = "1_plant/6_sensor.rs"]
mod sensor;
#[path = "1_plant/3_sine.rs"]
mod sine;
#[path = "1_plant/7_small_motion.rs"]
mod small_motion;
#[path = "1_plant/5_tendon.rs"]
mod tendon;

use crate::arm_file::{Arm, STANDARD_GRAVITY_M_S2};
use crate::rest_states::modes::{Evaluation, ModalRod};
use crate::rod::Rod;
use chain::Chain;
use gauss::{Gauss, Load, Refused};
use nalgebra::{DMatrix, DVector};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;
use sensor::Sensor;
use tendon::Tendon;

pub use options::{PlantOptions, SensorFault, SensorOptions, TendonOptions, TipDrive};
pub use readings::{Energy, PlantError, Sensed, SensorName, Side, Tip};
pub use small_motion::SmallMotion;

/// Share of m L^2 that the drive reflects onto the tip orientation when the options do not say.
const DEFAULT_REFLECTED_SHARE: f64 = 0.02;
/// A rest shape is reached when no mode lacks more than this (m g L).
const REST_TOLERANCE: f64 = 1e-13;
/// Newton steps from a rest shape in other modes to the plant's.
const MOST_REST_STEPS: usize = 30;
/// How far a rest shape may move on the way (rad, largest coefficient): further is another rest state.
const FARTHEST_REST: f64 = 0.3;

/// A simulated arm in motion. A clone goes on from the same state with the same noise.
#[derive(Clone, Debug)]
pub struct Plant {
    arm: Arm,
    options: PlantOptions,
    modal: ModalRod,
    chain: Chain,
    gauss: Gauss,
    /// Kelvin-Voigt time constant of bending, in units of sqrt(L/g).
    damping: f64,
    reflected_inertia_kg_m2: f64,
    c: Vec<f64>,
    v: Vec<f64>,
    tip_drive: TipDrive,
    tendons: [Tendon; 2],
    command_n: [f64; 2],
    sensors: [Sensor; 4],
    rng: ChaCha8Rng,
    time_s: f64,
}

impl Plant {
    /// A simulated `arm`, straight and unmoving along its base tangent with slack tendons; continue with
    /// [`Self::set_rest`] or [`Self::set_motion`].
    ///
    /// # Panics
    /// When an option lies outside its documented range: options come from code.
    pub fn new(arm: &Arm, options: PlantOptions) -> Self {
        options.check();
        let length_m = arm.spine.length_m;
        let reflected_inertia_kg_m2 = options
            .reflected_inertia_kg_m2
            .unwrap_or(DEFAULT_REFLECTED_SHARE * arm.total_mass_kg() * length_m * length_m);
        let (modal, chain) = discretise(arm, options.modes, reflected_inertia_kg_m2);
        let loaded = DVector::from_column_slice(modal.force_bounds().0);
        let bending = modal.bending();
        let unloaded = bending
            .clone()
            .cholesky()
            .expect("a spine resists bending")
            .solve(&loaded);
        let damping = small_motion::damping_time(
            &chain,
            bending,
            unloaded.as_slice(),
            arm.spine.damping_ratio,
        );
        let offset_m = arm.tendons.offset_m;
        let sensors = [
            options.tip_angle,
            options.mid_angle,
            options.tension,
            options.tension,
        ]
        .map(Sensor::new);
        Self {
            arm: arm.clone(),
            gauss: Gauss::new(&chain, options.longest_step),
            damping,
            reflected_inertia_kg_m2,
            c: vec![0.0; options.modes],
            v: vec![0.0; options.modes],
            tip_drive: options.tip_drive,
            tendons: [1.0, -1.0].map(|sign| Tendon::new(options.tendons, sign, offset_m)),
            command_n: [0.0; 2],
            sensors,
            rng: ChaCha8Rng::seed_from_u64(options.seed),
            time_s: 0.0,
            modal,
            chain,
            options,
        }
    }

    /// Rests at the shape near `c` (curvature modes of any number, such as a rest state of the converged rod) with the same
    /// tip orientation, and tendons that carry the hold couple above the pretension. Returns the tensions to go on
    /// commanding (N).
    ///
    /// # Errors
    /// [`PlantError::NoRestNearby`]; nothing has changed then.
    pub fn set_rest(&mut self, c: &[f64]) -> Result<[f64; 2], PlantError> {
        let n = self.chain.modes();
        let start: Vec<f64> = (0..n).map(|i| c.get(i).copied().unwrap_or(0.0)).collect();
        let lost = PlantError::NoRestNearby {
            tip_angle_rad: start[0],
        };
        let mut rest = start.clone();
        let mut at = Evaluation::new(n);
        for _ in 0..MOST_REST_STEPS {
            self.modal.evaluate(&rest, &mut at);
            let lacking = DVector::from_column_slice(&at.gradient[1..]);
            if lacking.amax() < REST_TOLERANCE.max(1e-15 * self.modal.bending().amax()) {
                let couple_n_m = at.gradient[0] * self.energy_scale_j();
                self.set_motion(&rest, &vec![0.0; n]);
                return Ok(self.hold(couple_n_m));
            }
            let hessian = at.hessian.view((1, 1), (n - 1, n - 1)).into_owned();
            let change = hessian.lu().solve(&lacking).ok_or(lost)?;
            rest[1..]
                .iter_mut()
                .zip(change.iter())
                .for_each(|(c, d)| *c -= d);
            // Written so that NaN is lost.
            let near = rest
                .iter()
                .zip(&start)
                .all(|(a, b)| (a - b).abs() <= FARTHEST_REST);
            if !near {
                return Err(lost);
            }
        }
        Err(lost)
    }

    /// Moves with shape `c` and its rates `c_dot` (1/s), missing modes zero; tendons and sensors stay as they are.
    pub fn set_motion(&mut self, c: &[f64], c_dot_1_s: &[f64]) {
        let unit_s = self.time_unit_s();
        for i in 0..self.chain.modes() {
            self.c[i] = c.get(i).copied().unwrap_or(0.0);
            self.v[i] = c_dot_1_s.get(i).copied().unwrap_or(0.0) * unit_s;
        }
        self.gauss.forget();
    }

    /// Sets both tendons, at rest, to what makes a tip couple above the pretension; returns the tensions (N).
    pub fn hold(&mut self, couple_n_m: f64) -> [f64; 2] {
        let pull_n = couple_n_m / self.arm.tendons.offset_m;
        self.command_n =
            [pull_n, -pull_n].map(|pull_n| self.arm.tendons.pretension_n + pull_n.max(0.0));
        for (tendon, tension_n) in self.tendons.iter_mut().zip(self.command_n) {
            tendon.set(tension_n, self.c[0]);
        }
        self.command_n
    }

    /// Moves on by `dt_s` while the actuators are commanded these tensions (N). Negative commands count as 0; one that is
    /// not a number leaves the last one standing, as an actuator's own electronics would.
    ///
    /// # Errors
    /// [`PlantError::MotionLost`].
    ///
    /// # Panics
    /// When `dt_s` is negative or not finite.
    pub fn step(&mut self, dt_s: f64, tension_command_n: [f64; 2]) -> Result<(), PlantError> {
        assert!(dt_s >= 0.0 && dt_s.is_finite(), "time runs forward: {dt_s}");
        for (command, asked) in self.command_n.iter_mut().zip(tension_command_n) {
            if asked.is_finite() {
                *command = asked.max(0.0);
            }
        }
        let span = dt_s / self.time_unit_s();
        let mut left = span;
        // The last step ends exactly at the end up to rounding.
        while left > 1e-12 * span {
            let steps_left = (left / self.gauss.pace() - 1e-9).ceil().max(1.0);
            let h = left / steps_left;
            if self.advance(h)? {
                left -= h;
            }
        }
        Ok(())
    }

    /// One integration step, or false when it wants to be shorter. Actuators wind in two halves around the motion, which
    /// keeps the whole of second order.
    fn advance(&mut self, h: f64) -> Result<bool, PlantError> {
        let dt_s = h * self.time_unit_s();
        let before = self.tendons;
        self.wind(0.5 * dt_s);
        match self.integrate(h) {
            Ok(()) => {
                self.wind(0.5 * dt_s);
                self.time_s += dt_s;
                Ok(true)
            }
            Err(Refused::TooLong) => {
                self.tendons = before;
                Ok(false)
            }
            Err(Refused::Lost) => {
                self.tendons = before;
                Err(PlantError::MotionLost {
                    time_s: self.time_s,
                })
            }
        }
    }

    fn wind(&mut self, dt_s: f64) {
        for (tendon, command_n) in self.tendons.iter_mut().zip(self.command_n) {
            tendon.wind(command_n, self.c[0], dt_s);
        }
    }

    fn integrate(&mut self, h: f64) -> Result<(), Refused> {
        let (scale_j, tendons, driven) = (
            self.energy_scale_j(),
            self.tendons,
            self.tip_drive == TipDrive::Tendons,
        );
        let tip_couple = |tip_rad: f64| {
            if !driven {
                return (0.0, 0.0);
            }
            let [a, b] = tendons.map(|tendon| tendon.couple(tip_rad));
            ((a.0 + b.0) / scale_j, (a.1 + b.1) / scale_j)
        };
        let load = Load {
            damping: self.damping,
            first_free: self.first_free(),
            tip_couple: &tip_couple,
        };
        self.gauss
            .step(&self.chain, &load, h, &mut self.c, &mut self.v)?;
        self.tendons
            .iter_mut()
            .for_each(|tendon| tendon.settle(self.c[0]));
        Ok(())
    }

    /// What the sensors read; to be called once per control tick, as delays count calls.
    pub fn sense(&mut self) -> Sensed {
        let [a, b] = self.actuator_tensions_n();
        let truth = [self.c[0], self.modal.angle(&self.c, 0.5), a, b];
        let mut read = [0.0; 4];
        for ((read, sensor), truth) in read.iter_mut().zip(&mut self.sensors).zip(truth) {
            *read = sensor.read(truth, &mut self.rng);
        }
        Sensed {
            tip_angle_rad: read[0],
            mid_angle_rad: read[1],
            tension_n: [read[2], read[3]],
        }
    }

    /// Something goes wrong with a sensor, or right again.
    pub fn set_sensor_fault(&mut self, sensor: SensorName, fault: SensorFault) {
        let index = match sensor {
            SensorName::TipAngle => 0,
            SensorName::MidAngle => 1,
            SensorName::Tension(Side::A) => 2,
            SensorName::Tension(Side::B) => 3,
        };
        self.sensors[index].set_fault(fault);
    }

    /// A tendon breaks, for good.
    pub fn break_tendon(&mut self, side: Side) {
        self.tendons[usize::from(side == Side::B)].tear();
        self.gauss.forget();
    }

    /// Lets go of the tip, holds it or gives it back to the tendons. A tip taken hold of stops at once.
    pub fn set_tip_drive(&mut self, tip_drive: TipDrive) {
        self.tip_drive = tip_drive;
        if tip_drive == TipDrive::Held {
            self.v[0] = 0.0;
        }
        self.gauss.forget();
    }

    /// A knock across the tip (N s): positive along `(cos, -sin)` of tilt plus tip orientation, which is the way the tip
    /// moves when all orientations grow. False, and nothing has changed, when the tip has no inertia that way.
    pub fn knock(&mut self, impulse_n_s: f64) -> bool {
        assert!(impulse_n_s.is_finite(), "an impulse: {impulse_n_s}");
        let Some((_, response)) = self.tip_across() else {
            return false;
        };
        // In m L / sqrt(L/g).
        let impulse =
            impulse_n_s * self.time_unit_s() / (self.arm.total_mass_kg() * self.arm.spine.length_m);
        let first = self.first_free();
        self.v[first..]
            .iter_mut()
            .zip(response.iter())
            .for_each(|(v, response)| *v += impulse * response);
        self.gauss.forget();
        true
    }

    /// The mass that a knock across the tip moves (kg): impulse over change of tip speed across. `None` when it has none.
    pub fn tip_effective_mass_kg(&self) -> Option<f64> {
        let (across, response) = self.tip_across()?;
        Some(self.arm.total_mass_kg() / across.dot(&response))
    }

    /// Tip motion across per rate of each free mode, and the rates that a unit impulse across the tip gives them.
    fn tip_across(&self) -> Option<(DVector<f64>, DVector<f64>)> {
        let first = self.first_free();
        let free = self.chain.modes() - first;
        let (sin, cos) = (self.arm.base.tilt_rad + self.c[0]).sin_cos();
        let reach = self.chain.tip_reach(&self.c);
        let across =
            DVector::from_iterator(free, reach[first..].iter().map(|j| j[0] * cos - j[1] * sin));
        let mass = self.chain.mass_matrix(&self.c);
        let response = mass
            .view((first, first), (free, free))
            .into_owned()
            .cholesky()?
            .solve(&across);
        Some((across, response))
    }

    /// Changes the payload (kg). Orientations and their rates go on unchanged: what is let go flies on, what is taken up
    /// already moves along.
    pub fn set_payload_kg(&mut self, mass_kg: f64) {
        assert!(mass_kg >= 0.0 && mass_kg.is_finite(), "a mass: {mass_kg}");
        self.arm.payload.mass_kg = mass_kg;
        self.rebuild();
    }

    /// Tilts the base further by this much (rad), at once; the arm goes along as a rigid body.
    pub fn tilt_base(&mut self, extra_rad: f64) {
        assert!(extra_rad.is_finite(), "an angle: {extra_rad}");
        self.arm.base.tilt_rad += extra_rad;
        self.rebuild();
    }

    fn rebuild(&mut self) {
        // The unit of time does not depend on the mass: rates and the damping's time constant keep their numbers.
        (self.modal, self.chain) =
            discretise(&self.arm, self.options.modes, self.reflected_inertia_kg_m2);
        self.gauss = Gauss::new(&self.chain, self.options.longest_step);
    }

    /// Energy of the arm as it is.
    pub fn energy(&self) -> Energy {
        let scale_j = self.energy_scale_j();
        let mut at = Evaluation::new(self.chain.modes());
        self.modal.evaluate(&self.c, &mut at);
        Energy {
            kinetic_j: scale_j * self.chain.kinetic_energy(&self.c, &self.v),
            potential_j: scale_j * at.energy,
            tendons_j: self
                .tendons
                .iter()
                .map(|tendon| tendon.energy_j(self.c[0]))
                .sum(),
        }
    }

    /// Where the tip is and how it moves.
    pub fn tip(&self) -> Tip {
        let length_m = self.arm.spine.length_m;
        let (unit_s, at) = (self.time_unit_s(), self.modal.tip(&self.c));
        let mut velocity = [0.0; 2];
        for (reach, v) in self.chain.tip_reach(&self.c).iter().zip(&self.v) {
            velocity[0] += reach[0] * v;
            velocity[1] += reach[1] * v;
        }
        Tip {
            position_m: [at.0 * length_m, at.1 * length_m],
            velocity_m_s: velocity.map(|v| v * length_m / unit_s),
            angle_rad: self.c[0],
            rate_rad_s: self.v[0] / unit_s,
        }
    }

    /// Positions `[x, y]` (m) of `segments + 1` points along the arm, base first.
    pub fn shape(&self, segments: usize) -> Vec<[f64; 2]> {
        let length_m = self.arm.spine.length_m;
        self.modal
            .polyline(&self.c, segments)
            .into_iter()
            .map(|p| [p.0 * length_m, p.1 * length_m])
            .collect()
    }

    /// Orientation relative to the base tangent at `s` in 0..=1 (rad).
    pub fn angle_rad(&self, s: f64) -> f64 {
        self.modal.angle(&self.c, s)
    }

    /// The shape: curvature modes, dimensionless.
    pub fn curvature_modes(&self) -> &[f64] {
        &self.c
    }

    /// Rates of the curvature modes (1/s).
    pub fn curvature_rates_1_s(&self) -> Vec<f64> {
        self.v.iter().map(|v| v / self.time_unit_s()).collect()
    }

    /// Couple of the tendons on the tip (N m).
    pub fn couple_n_m(&self) -> f64 {
        self.tendons
            .iter()
            .map(|tendon| tendon.couple(self.c[0]).0)
            .sum()
    }

    /// Tensions where the tendons pull at the tip (N), both >= 0.
    pub fn tip_tensions_n(&self) -> [f64; 2] {
        self.tendons.map(|tendon| tendon.tensions_n(self.c[0])[0])
    }

    /// Tensions at the actuators (N), both >= 0: the tip's and the guides' friction.
    pub fn actuator_tensions_n(&self) -> [f64; 2] {
        self.tendons.map(|tendon| tendon.tensions_n(self.c[0])[1])
    }

    /// Modes of small motion about the present shape, slowest (or most unstable) first: with the tip held when
    /// [`TipDrive::Held`], with a free tip otherwise (the tendons' elasticity left out).
    pub fn small_motion(&self) -> Vec<SmallMotion> {
        let n = self.chain.modes();
        let (mut mass, mut stiffness) = (vec![0.0; n * n], vec![0.0; n * n]);
        self.chain
            .linearise(&self.c, &mut self.chain.room(), &mut mass, &mut stiffness);
        let [mass, stiffness] = [mass, stiffness].map(|m| DMatrix::from_row_slice(n, n, &m));
        let unit_s = self.time_unit_s();
        small_motion::modes(
            &mass,
            &stiffness,
            self.modal.bending(),
            self.damping,
            self.first_free(),
        )
        .into_iter()
        .map(|(omega2, decay)| SmallMotion {
            omega2_rad2_s2: omega2 / (unit_s * unit_s),
            decay_1_s: decay / unit_s,
        })
        .collect()
    }

    /// Time simulated (s).
    pub fn time_s(&self) -> f64 {
        self.time_s
    }

    /// The arm as it is now: payload and tilt may have changed since [`Self::new`].
    pub fn arm(&self) -> &Arm {
        &self.arm
    }

    /// Force evaluations of the integrator since the last change of the arm, for the benchmark.
    pub fn evaluations(&self) -> u64 {
        self.gauss.evaluations()
    }

    fn first_free(&self) -> usize {
        usize::from(self.tip_drive == TipDrive::Held)
    }

    fn time_unit_s(&self) -> f64 {
        (self.arm.spine.length_m / STANDARD_GRAVITY_M_S2).sqrt()
    }

    fn energy_scale_j(&self) -> f64 {
        self.arm.total_mass_kg() * STANDARD_GRAVITY_M_S2 * self.arm.spine.length_m
    }
}

fn discretise(arm: &Arm, modes: usize, reflected_inertia_kg_m2: f64) -> (ModalRod, Chain) {
    let rod = Rod::new(arm);
    let modal = ModalRod::new(&rod, modes);
    let unit_kg_m2 = arm.total_mass_kg() * arm.spine.length_m * arm.spine.length_m;
    let chain = Chain::new(arm, &rod, &modal, reflected_inertia_kg_m2 / unit_kg_m2);
    (modal, chain)
}
