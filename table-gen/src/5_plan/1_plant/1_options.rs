//! What a simulated arm has beyond its arm file: drive, tendons, sensors, seed.

/// How the tip is driven.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum TipDrive {
    /// By the two tendons.
    Tendons,
    /// Not at all: no couple acts on the tip.
    Free,
    /// The tip orientation is held where it is, as by an ideal drive.
    Held,
}

/// Everything about a simulated arm that its arm file does not say.
#[derive(Clone, Debug, PartialEq)]
pub struct PlantOptions {
    /// Curvature modes, at least 2. Six show what two coordinates hide; more cost time like their square.
    pub modes: usize,
    /// Inertia of motors, gears and spools as felt at the tip orientation (kg m2), >= 0. `None`: 2 % of m L^2.
    pub reflected_inertia_kg_m2: Option<f64>,
    /// How the tip is driven at first.
    pub tip_drive: TipDrive,
    /// Both tendons with their actuators.
    pub tendons: TendonOptions,
    /// Tip orientation sensor (rad).
    pub tip_angle: SensorOptions,
    /// Sensor of the orientation at half length (rad).
    pub mid_angle: SensorOptions,
    /// Tension sensors at the actuators (N).
    pub tension: SensorOptions,
    /// Seed of all sensor noise: the same seed, the same readings.
    pub seed: u64,
    /// Longest integration step, in units of sqrt(L/g), above 0 to 0.1. Violent motion is followed in shorter ones.
    pub longest_step: f64,
}

impl Default for PlantOptions {
    fn default() -> Self {
        Self {
            modes: 6,
            reflected_inertia_kg_m2: None,
            tip_drive: TipDrive::Tendons,
            tendons: TendonOptions::default(),
            tip_angle: SensorOptions::default(),
            mid_angle: SensorOptions::default(),
            tension: SensorOptions::default(),
            seed: 1,
            longest_step: 0.025,
        }
    }
}

/// One tendon with its actuator, commanded in tension.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TendonOptions {
    /// Tension per stretch, spool to tip (N/m), > 0. Default 20 000: a 0.5 mm aramid cord of half a metre.
    pub stiffness_n_m: f64,
    /// Part of the tension that the guides keep when the cord slides, `1 - exp(-mu theta)` of the capstan law, in 0..1.
    /// Default 0.05.
    pub friction_fraction: f64,
    /// Time constant with which the actuator follows its command (s), > 0. Default 0.008.
    pub lag_s: f64,
    /// Fastest change of the commanded tension that the actuator accepts (N/s), > 0. Default 1000.
    pub rate_limit_n_s: f64,
    /// Fastest winding and paying out (m/s), > 0. Default 0.5.
    pub winding_speed_limit_m_s: f64,
}

impl Default for TendonOptions {
    fn default() -> Self {
        Self {
            stiffness_n_m: 20_000.0,
            friction_fraction: 0.05,
            lag_s: 0.008,
            rate_limit_n_s: 1000.0,
            winding_speed_limit_m_s: 0.5,
        }
    }
}

/// One sensor, in the unit of what it measures. The default is a perfect one.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct SensorOptions {
    /// Standard deviation of normally distributed noise, >= 0.
    pub noise: f64,
    /// Constant error.
    pub bias: f64,
    /// Readings are this many calls of `sense` old.
    pub delay_ticks: usize,
    /// Smallest step of a reading; 0: continuous.
    pub quantum: f64,
}

/// What is wrong with a sensor.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub enum SensorFault {
    /// Nothing.
    #[default]
    None,
    /// It repeats its last reading.
    Frozen,
    /// It reads NaN.
    Dropout,
    /// It reads this much too high (the same unit), beyond its bias: a slipped magnet, a jump.
    Offset(f64),
}

impl PlantOptions {
    /// Panics with the option and its range when one is outside.
    pub(super) fn check(&self) {
        let require =
            |allowed: bool, what: &str| assert!(allowed, "plant option out of range: {what}");
        require(self.modes >= 2, "modes, at least 2");
        require(
            self.reflected_inertia_kg_m2
                .is_none_or(|j| j >= 0.0 && j.is_finite()),
            "reflected_inertia_kg_m2, >= 0",
        );
        require(
            self.longest_step > 0.0 && self.longest_step <= 0.1,
            "longest_step, above 0 to 0.1",
        );
        let tendons = self.tendons;
        for (value, name) in [
            (tendons.stiffness_n_m, "tendons.stiffness_n_m, > 0"),
            (tendons.lag_s, "tendons.lag_s, > 0"),
            (tendons.rate_limit_n_s, "tendons.rate_limit_n_s, > 0"),
            (
                tendons.winding_speed_limit_m_s,
                "tendons.winding_speed_limit_m_s, > 0",
            ),
        ] {
            require(value > 0.0 && value.is_finite(), name);
        }
        require(
            (0.0..1.0).contains(&tendons.friction_fraction),
            "tendons.friction_fraction, in 0..1",
        );
        for sensor in [self.tip_angle, self.mid_angle, self.tension] {
            require(
                sensor.noise >= 0.0 && sensor.noise.is_finite(),
                "noise of a sensor, >= 0",
            );
            require(
                sensor.quantum >= 0.0 && sensor.quantum.is_finite(),
                "quantum of a sensor, >= 0",
            );
            require(sensor.bias.is_finite(), "bias of a sensor, finite");
        }
    }
}
