//! The gains and thresholds of the control loop. Every value has a range, and only checked ones take part.
//!
//! # Gains
//!
//! The tip angle is steered against the inertia `J0` that the drive reflects onto it. The damping gain `KD` has a
//! ceiling from the fast bending modes that two coordinates do not show: with the loop's delay, half a tick and the
//! rate filter's delay `1.6/w`,
//!
//! ```text
//! KD (delay + tick/2 + 1.6/w) / J0 < 1.9
//! ```
//!
//! [`Config::for_arm`] takes six tenths of that, and a position gain whose corner `KP/KD` lies well below one over the same
//! delay.

use core::fmt;

use serde::Serialize;

use crate::table::{Table, TableError};
use crate::words::Word::{F, T};
use crate::words::Words;

/// Damping gain times delay over inertia beyond which a fast mode is driven.
pub const DAMPING_CEILING: f32 = 1.9;
/// Delay of the rate filter times its corner: twice its damping ratio.
pub const FILTER_DELAY: f32 = 1.6;
/// Corner of a filter times the tick: the filter stays stable with a step twice as long.
const FASTEST_FILTER: f32 = 0.3;
/// Share of the ceiling that [`Config::for_arm`] takes.
const CEILING_SHARE: f32 = 0.6;
/// Corner of the position gain times the loop's delay that it takes.
const CORNER_TIMES_DELAY: f32 = 0.35;
/// Share of m L^2 that a drive reflects when nobody says.
const REFLECTED_SHARE: f32 = 0.02;

/// What the builder of the arm knows about its drive.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct DriveFacts {
    /// Nominal time between ticks (s), 1e-4 to 0.02.
    pub tick_s: f32,
    /// From a change of the tip to the answering change of the couple: actuator lag plus age of the readings (s),
    /// 0 to 0.1.
    pub delay_s: f32,
    /// Inertia of motors, gears and spools as felt at the tip angle (kg m2), > 0; `None`: 2 % of m L^2.
    pub reflected_inertia_kg_m2: Option<f32>,
}

impl Default for DriveFacts {
    /// 1 kHz, 11 ms.
    fn default() -> Self {
        Self {
            tick_s: 1e-3,
            delay_s: 0.011,
            reflected_inertia_kg_m2: None,
        }
    }
}

/// Defines the configuration with the range of each value in one place.
macro_rules! config {
    ($($(#[$doc:meta])* $name:ident: $lo:literal ..= $hi:literal;)*) => {
        /// Gains and thresholds. The fields are public to be adjusted; [`Config::checked`] is the door, and
        /// [`super::step`] takes nothing else than its result.
        #[derive(Clone, Copy, Debug, PartialEq, Serialize)]
        pub struct Settings {
            $($(#[$doc])* #[doc = concat!(" Range ", stringify!($lo), " to ", stringify!($hi), ".")] pub $name: f32,)*
            /// Crossings tried in a row without success before the arm is stopped. Range 1 to 255.
            pub most_tries: u8,
        }

        impl Settings {
            /// Name, lower end, value and upper end of every field.
            fn ranges(&self) -> impl Iterator<Item = (&'static str, f32, f32, f32)> + use<> {
                [$((stringify!($name), $lo, self.$name, $hi)),*].into_iter()
            }
        }
    };
}

config! {
    /// Nominal time between ticks (s).
    tick_s: 1e-4 ..= 0.02;
    /// Delay of the loop (s): actuator lag plus age of the readings.
    delay_s: 0.0 ..= 0.1;
    /// Inertia that the drive reflects onto the tip angle (kg m2).
    inertia_kg_m2: 1e-9 ..= 1e3;
    /// Position gain (N m/rad).
    kp_n_m_per_rad: 0.0 ..= 1e4;
    /// Integral gain (N m/(rad s)); 0 for none. It takes up friction and what the table does not know.
    ki_n_m_per_rad_s: 0.0 ..= 1e4;
    /// Largest couple that the integral may add (N m).
    most_trim_n_m: 0.0 ..= 1e3;
    /// Rate gain (N m s/rad); see [`DAMPING_CEILING`].
    kd_n_m_s_per_rad: 0.0 ..= 1e3;
    /// Corner of the filter of the tip angle and its rate (rad/s).
    tip_filter_rad_s: 1.0 ..= 1e4;
    /// Corner of the filter of the mid angle and its rate (rad/s).
    mid_filter_rad_s: 1.0 ..= 1e4;
    /// Fastest change of the setpoint (rad/s, or N m/s with an applied couple).
    setpoint_rate: 1e-4 ..= 100.0;
    /// Least tension of either tendon (N); not below the table's pretension.
    pretension_n: 0.0 ..= 1e5;
    /// Largest tip movement with which a disturbance is braked (rad); 0 for no brake.
    brake_amplitude_rad: 0.0 ..= 1.0;
    /// Steepness of the brake over the rate of the mean angle, in units of sqrt(L/g).
    brake_eta: 0.0 ..= 20.0;
    /// Rate of the mean angle below which nothing is braked: sensor noise (rad/s).
    brake_deadband_rad_s: 0.0 ..= 10.0;
    /// Rates of tip and mean angle below which the arm is at rest (rad/s).
    rest_rate_rad_s: 1e-3 ..= 10.0;
    /// How long they must be (s).
    rest_s: 0.01 ..= 10.0;
    /// How long another branch must be seen before the arm counts as knocked over (s).
    other_branch_s: 0.005 ..= 10.0;
    /// How long the branch may be unclear (s).
    no_branch_s: 0.005 ..= 10.0;
    /// Largest distance of the tip from a standing setpoint (rad).
    reach_tolerance_rad: 1e-3 ..= 1.0;
    /// How long it may be larger (s).
    reach_s: 0.01 ..= 60.0;
    /// How long a reading may be unbelievable (s): not finite, out of range, jumped. Shorter spells are bridged.
    sensor_s: 0.0 ..= 1.0;
    /// Largest believable tip angle beyond the table's setpoints, or size with an applied couple (rad).
    tip_beyond_rad: 0.0 ..= 20.0;
    /// Largest believable size of the mid angle (rad).
    most_mid_rad: 0.1 ..= 20.0;
    /// Largest believable tension (N).
    most_tension_n: 0.1 ..= 1e6;
    /// Largest difference between a reading and its prediction (rad).
    jump_rad: 1e-3 ..= 10.0;
    /// Movement of the command during which an angle must change, and a third of that of the other angle (rad).
    frozen_rad: 1e-3 ..= 10.0;
    /// How long an angle may repeat bit by bit while it should change (s).
    frozen_s: 0.002 ..= 10.0;
    /// How long a reading may repeat bit by bit at all (s); 1e9 where a quantised sensor at rest does.
    still_s: 0.002 ..= 1e9;
    /// Lag of the tension behind its command (s).
    tension_lag_s: 0.0 ..= 1.0;
    /// Fastest change of tension that the actuators make (N/s).
    tension_rate_n_s: 1.0 ..= 1e7;
    /// Allowed difference of a tension from what its command leads to (N).
    tension_off_n: 0.01 ..= 1e5;
    /// The same, as a fraction of that tension, added.
    tension_off_fraction: 0.0 ..= 2.0;
    /// The same per tip rate (N s/rad), added.
    tension_off_per_rate: 0.0 ..= 1e4;
    /// Tension below which a tendon is slack, as a fraction of the pretension floor; 0 for no such check.
    slack_fraction: 0.0 ..= 1.0;
    /// How long tensions may be wrong (s).
    tension_s: 0.002 ..= 10.0;
    /// How long ticks may be irregular, counted in nominal ticks.
    irregular_ticks: 0.0 ..= 1000.0;
    /// How long a survey listens (s).
    survey_s: 0.01 ..= 10.0;
    /// Longest wait for rest before it (s).
    survey_wait_s: 0.05 ..= 60.0;
    /// Largest difference between measured and expected hold couple (N m): friction of the tendons.
    survey_couple_n_m: 1e-6 ..= 1e3;
    /// Least bending that tells the stiffness: the second curvature coefficient (rad).
    survey_bend_rad: 0.01 ..= 10.0;
    /// Pull away from the pass before an injection, in units of sqrt(L/g).
    pull_away: 0.0 ..= 20.0;
    /// Time after which the amplitude of an injection grows by half, in units of sqrt(L/g).
    grow_after: 0.5 ..= 100.0;
    /// Distance beyond the pass at which the arm counts as over (rad).
    beyond_pass_rad: 0.0 ..= 2.0;
    /// Setpoint rate of a lean (rad/s).
    lean_rate_rad_s: 1e-3 ..= 100.0;
    /// Longest braking after a crossing (s).
    catch_s: 0.1 ..= 120.0;
    /// Kinetic energy above which a crossing is broken off, in units of m g L.
    most_kinetic: 0.01 ..= 100.0;
    /// How long a request to arm stands while the arm comes to rest (s).
    rearm_s: 0.01 ..= 600.0;
}

/// Checked settings with what the step needs of the table's header.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Config {
    pub(super) settings: Settings,
    pub(super) arm: ArmFacts,
}

/// Constants of the arm, from the header.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub(super) struct ArmFacts {
    pub(super) length_m: f32,
    pub(super) mass_kg: f32,
    pub(super) gamma: f32,
    pub(super) tilt_rad: f32,
    pub(super) energy_scale_j: f32,
    /// sqrt(L/g), g being the energy scale over m L.
    pub(super) unit_s: f32,
}

/// Why there is no configuration.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum ConfigError {
    /// A value is not finite or outside its range.
    Range {
        /// The field.
        field: &'static str,
        /// Lowest value allowed.
        from: f32,
        /// The value.
        found: f32,
        /// Highest value allowed.
        to: f32,
    },
    /// The damping gain would drive the fast bending modes.
    Damping {
        /// Gain times delay over inertia.
        found: f32,
    },
    /// The filter is too fast for the tick.
    Filter {
        /// Corner (rad/s).
        found: f32,
        /// Highest corner (rad/s).
        most: f32,
    },
    /// The pretension floor is outside the table's tensions.
    Pretension {
        /// The floor (N).
        found: f32,
        /// The table's pretension (N).
        from: f32,
        /// The table's maximum tension (N).
        to: f32,
    },
    /// The table's header cannot be read.
    Table(TableError),
}

impl Config {
    /// Settings for the arm of `table`, with gains from its header and the drive.
    ///
    /// # Errors
    /// [`ConfigError`] when a fact about the drive is outside its range or the header cannot be read.
    pub fn for_arm(table: &Table<'_>, drive: &DriveFacts) -> Result<Self, ConfigError> {
        Self::checked(Settings::for_arm(table, drive)?, table)
    }

    /// Checks settings against their ranges, the damping ceiling and the table.
    ///
    /// # Errors
    /// [`ConfigError`], the first that applies.
    pub fn checked(settings: Settings, table: &Table<'_>) -> Result<Self, ConfigError> {
        for (field, from, found, to) in settings.ranges() {
            range(field, from, found, to)?;
        }
        range("most_tries", 1.0, settings.most_tries.into(), 255.0)?;
        let most = FASTEST_FILTER / settings.tick_s;
        for found in [settings.tip_filter_rad_s, settings.mid_filter_rad_s] {
            if found > most {
                return Err(ConfigError::Filter { found, most });
            }
        }
        let found = settings.kd_n_m_s_per_rad * settings.loop_delay_s() / settings.inertia_kg_m2;
        if found >= DAMPING_CEILING {
            return Err(ConfigError::Damping { found });
        }
        let (from, to) = (table.limits().pretension_n, table.limits().max_tension_n);
        let found = settings.pretension_n;
        if !(found >= from && found <= to) {
            return Err(ConfigError::Pretension { found, from, to });
        }
        Ok(Self {
            settings,
            arm: ArmFacts::of(table)?,
        })
    }

    /// The settings, to be changed and checked again.
    pub const fn settings(&self) -> Settings {
        self.settings
    }
}

impl ArmFacts {
    fn of(table: &Table<'_>) -> Result<Self, ConfigError> {
        let header = table.header().map_err(ConfigError::Table)?;
        let weight_n = header.energy_scale_j / header.length_m;
        Ok(Self {
            length_m: header.length_m,
            mass_kg: header.mass_kg,
            gamma: header.gamma,
            tilt_rad: header.tilt_rad,
            energy_scale_j: header.energy_scale_j,
            unit_s: libm::sqrtf(header.length_m * header.mass_kg / weight_n),
        })
    }
}

impl Settings {
    /// Delay of the loop with half a tick and the filter (s).
    fn loop_delay_s(&self) -> f32 {
        self.delay_s + 0.5 * self.tick_s + FILTER_DELAY / self.tip_filter_rad_s
    }

    /// Settings for the arm of `table`, not yet checked.
    ///
    /// # Errors
    /// [`ConfigError`] when a fact about the drive is outside its range or the header cannot be read.
    pub fn for_arm(table: &Table<'_>, drive: &DriveFacts) -> Result<Self, ConfigError> {
        let arm = ArmFacts::of(table)?;
        let limits = table.limits();
        range("tick_s", 1e-4, drive.tick_s, 0.02)?;
        range("delay_s", 0.0, drive.delay_s, 0.1)?;
        let inertia_kg_m2 = drive
            .reflected_inertia_kg_m2
            .unwrap_or(REFLECTED_SHARE * arm.mass_kg * arm.length_m * arm.length_m);
        range("reflected_inertia_kg_m2", 1e-9, inertia_kg_m2, 1e3)?;
        let tip_filter_rad_s = at_most(150.0, FASTEST_FILTER / drive.tick_s);
        let delay_s = drive.delay_s + 0.5 * drive.tick_s + FILTER_DELAY / tip_filter_rad_s;
        let kd = CEILING_SHARE * DAMPING_CEILING * inertia_kg_m2 / delay_s;
        let kp = CORNER_TIMES_DELAY * kd / delay_s;
        let rate = 1.0 / arm.unit_s;
        let most_couple_n_m = (limits.max_tension_n - limits.pretension_n) * limits.offset_m;
        Ok(Self {
            tick_s: drive.tick_s,
            delay_s: drive.delay_s,
            inertia_kg_m2,
            kp_n_m_per_rad: kp,
            ki_n_m_per_rad_s: kp,
            most_trim_n_m: 0.25 * most_couple_n_m,
            kd_n_m_s_per_rad: kd,
            tip_filter_rad_s,
            mid_filter_rad_s: at_most(15.0 * rate, FASTEST_FILTER / drive.tick_s),
            setpoint_rate: match limits.drive {
                crate::format::Drive::HeldTip => 0.06 * rate,
                crate::format::Drive::AppliedCouple => 0.03 * arm.energy_scale_j * rate,
            },
            pretension_n: limits.pretension_n,
            brake_amplitude_rad: 0.3,
            brake_eta: 4.0,
            brake_deadband_rad_s: 0.05 * rate,
            rest_rate_rad_s: 0.08 * rate,
            rest_s: 2.0 * arm.unit_s,
            other_branch_s: 0.5 * arm.unit_s,
            no_branch_s: 4.0 * arm.unit_s,
            reach_tolerance_rad: 0.12,
            reach_s: 1.0 + 4.0 * arm.unit_s,
            sensor_s: 0.01,
            tip_beyond_rad: 1.5,
            most_mid_rad: 6.0,
            most_tension_n: 2.0 * limits.max_tension_n,
            jump_rad: 0.4,
            frozen_rad: 0.05,
            frozen_s: 0.05,
            still_s: 1e9,
            tension_lag_s: drive.delay_s,
            tension_rate_n_s: 1000.0,
            tension_off_n: 2.0 + limits.pretension_n,
            tension_off_fraction: 0.25,
            tension_off_per_rate: 3.0,
            slack_fraction: 0.3,
            tension_s: 0.05,
            irregular_ticks: 5.0,
            survey_s: 1.5 * arm.unit_s,
            survey_wait_s: 40.0 * arm.unit_s,
            survey_couple_n_m: 0.04 * arm.energy_scale_j,
            survey_bend_rad: 0.3,
            pull_away: 1.5,
            grow_after: 12.0,
            beyond_pass_rad: 0.1,
            lean_rate_rad_s: 0.12 * rate,
            catch_s: 60.0 * arm.unit_s,
            most_kinetic: 2.0,
            rearm_s: 20.0 * arm.unit_s,
            most_tries: 2,
        })
    }
}

fn at_most(value: f32, most: f32) -> f32 {
    if value < most { value } else { most }
}

fn range(field: &'static str, from: f32, found: f32, to: f32) -> Result<(), ConfigError> {
    if from <= found && found <= to {
        Ok(())
    } else {
        Err(ConfigError::Range {
            field,
            from,
            found,
            to,
        })
    }
}

impl fmt::Display for ConfigError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Range {
                field,
                from,
                found,
                to,
            } => f.say(&[
                T("setting "),
                T(field),
                T(" = "),
                F(found),
                T("; "),
                F(from),
                T(" to "),
                F(to),
                T(" is allowed"),
            ]),
            Self::Damping { found } => f.say(&[
                T("the rate gain times the delay over the inertia is "),
                F(found),
                T(" and must be below "),
                F(DAMPING_CEILING),
                T("; lower kd_n_m_s_per_rad or the delays"),
            ]),
            Self::Filter { found, most } => f.say(&[
                T("a filter corner of "),
                F(found),
                T(" rad/s is too fast for the tick; at most "),
                F(most),
                T(" rad/s"),
            ]),
            Self::Pretension { found, from, to } => f.say(&[
                T("a pretension of "),
                F(found),
                T(" N is outside the table's tensions, "),
                F(from),
                T(" to "),
                F(to),
                T(" N"),
            ]),
            Self::Table(error) => fmt::Display::fmt(&error, f),
        }
    }
}

impl core::error::Error for ConfigError {}
