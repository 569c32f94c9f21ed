//! The arm with its table: where scenarios are played.

use super::scenario::{RealArm, Scenario};
use firmware_core::{Payload, Table};
use std::fmt;
use table_gen::arm_file::Arm;
use table_gen::plan::plant::{Plant, PlantError, PlantOptions, SensorOptions};
use table_gen::rest_states::RestStates;
use table_gen::rest_states::RestStatesError;
use table_gen::rest_states::curve::Solver;
use table_gen::rod::Rod;
use table_gen::table::crossings::with_crossings;
use table_gen::table::{Tabulation, TabulationError};

/// Steps from the nominal arm to the one that is really there.
const STEPS: u32 = 8;
/// Standard deviation of the noise of the tension sensors (N).
const TENSION_NOISE_N: f64 = 0.05;

/// Why a rehearsal cannot be made or could not go on.
#[derive(Debug)]
pub enum StageError {
    /// The table is not one of this arm, or damaged.
    Table(String),
    /// The arm has no certified rest states.
    RestStates(RestStatesError),
    /// The firmware makes no settings for this arm.
    Settings(String),
    /// Nothing rests where the scenario begins.
    Start {
        /// The scenario.
        scenario: String,
        /// What is missing.
        why: String,
    },
    /// The simulated arm could not be followed.
    Motion {
        /// The scenario.
        scenario: String,
        /// Where and why.
        error: PlantError,
    },
}

impl StageError {
    /// Exit code of a program that ends with this error: 2 for bad input, 1 for a failed job.
    pub fn exit_code(&self) -> u8 {
        match self {
            Self::Table(_) | Self::Start { .. } => 2,
            Self::RestStates(_) | Self::Settings(_) | Self::Motion { .. } => 1,
        }
    }
}

impl fmt::Display for StageError {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        match self {
            Self::Table(why) | Self::Settings(why) => f.write_str(why),
            Self::RestStates(error) => error.fmt(f),
            Self::Start { scenario, why } => {
                write!(f, "scenario \"{scenario}\" cannot begin: {why}")
            }
            Self::Motion { scenario, error } => write!(f, "scenario \"{scenario}\": {error}"),
        }
    }
}

impl std::error::Error for StageError {}

/// An arm, its table and its rest states.
pub struct Stage {
    /// The arm as in its file.
    pub arm: Arm,
    /// Its rest states; branch numbers are positions in `rest.branches`.
    pub rest: RestStates,
    bytes: Vec<u8>,
    without_plans: Vec<u8>,
}

impl Stage {
    /// The arm with a table that was made from it.
    ///
    /// # Errors
    /// [`StageError::Table`] when it was not, [`StageError::RestStates`].
    pub fn new(arm: Arm, bytes: Vec<u8>) -> Result<Self, StageError> {
        let unsound = |error: &dyn fmt::Display| StageError::Table(format!("the table: {error}"));
        let table = Table::new(&bytes).map_err(|error| unsound(&error))?;
        let header = table.header().map_err(|error| unsound(&error))?;
        if header.fingerprint != arm.fingerprint() {
            return Err(StageError::Table(format!(
                "the table was made from another arm file, of \"{}\"; build it anew",
                header.name
            )));
        }
        let rest = RestStates::find(&Rod::new(&arm), &arm.accuracy, arm.gamma())
            .map_err(StageError::RestStates)?;
        Self::with_rest(arm, rest, bytes)
    }

    /// From a finished tabulation, with these bytes of it: with or without crossings.
    ///
    /// # Errors
    /// [`StageError::Table`].
    pub fn of(tabulation: &Tabulation, bytes: Vec<u8>) -> Result<Self, StageError> {
        Self::with_rest(
            tabulation.arm.clone(),
            tabulation.corners.nominal.clone(),
            bytes,
        )
    }

    fn with_rest(arm: Arm, rest: RestStates, bytes: Vec<u8>) -> Result<Self, StageError> {
        let refused = |error: TabulationError| StageError::Table(format!("the table: {error}"));
        Ok(Self {
            without_plans: with_crossings(&bytes, &[]).map_err(refused)?,
            arm,
            rest,
            bytes,
        })
    }

    /// The table, with its crossings or without.
    pub fn table(&self, plans: bool) -> Table<'_> {
        let bytes = if plans {
            &self.bytes
        } else {
            &self.without_plans
        };
        Table::new(bytes).expect("checked when the stage was made")
    }

    /// Whether the table has an allowed crossing for the payload that `scenario` tells.
    pub fn has_plan(&self, scenario: &Scenario) -> bool {
        scenario.plans && self.plan_for(scenario.payload)
    }

    /// Whether the table has an allowed crossing for `payload`, in every slice that it brings into play.
    pub fn plan_for(&self, payload: Payload) -> bool {
        let table = self.table(true);
        let Ok(load) = table.load(payload) else {
            return false;
        };
        load.slices()
            .all(|slice| slice.crossings().any(|crossing| crossing.allowed))
    }

    /// The arm that is really there, at rest on the branch at the setpoint (rad or N m), and the tensions that hold it (N).
    ///
    /// # Errors
    /// What is missing, in words.
    pub fn plant(
        &self,
        real: &RealArm,
        branch: u8,
        setpoint: f64,
        seed: u64,
    ) -> Result<(Plant, [f64; 2]), String> {
        let rod = &self.rest.rod;
        let at = rod.setpoint_from_si(setpoint);
        let [lo, hi] = rod.setpoints;
        if !(lo..=hi).contains(&at) {
            return Err("its setpoint is outside the range of the arm file".to_string());
        }
        let states = self
            .rest
            .at(&mut Solver::new(&self.rest.modal), at)
            .map_err(|error| error.to_string())?;
        let rests: Vec<String> = states
            .iter()
            .filter(|(_, point)| point.index == 0)
            .map(|(number, _)| number.to_string())
            .collect();
        let own = states
            .into_iter()
            .find(|(number, point)| *number == usize::from(branch) && point.index == 0);
        let Some((_, point)) = own else {
            return Err(format!(
                "nothing rests on branch {branch} at its setpoint; the stable branches there are {}",
                rests.join(", ")
            ));
        };
        // From the arm of the file to the real one in steps, so that the rest state stays the same one.
        let mut c = point.c;
        for step in 1..=STEPS {
            let share = f64::from(step) / f64::from(STEPS);
            let towards = |from: f64, to: f64| from + share * (to - from);
            let mut arm = self.arm.varied(
                towards(self.arm.payload.mass_kg, real.payload_kg),
                towards(1.0, real.stiffness_factor),
                share * real.tilt_off_rad,
            );
            arm.spine.damping_ratio = (arm.spine.damping_ratio * real.damping_factor).min(0.99);
            let mut plant = Plant::new(&arm, options(real, seed));
            let tensions = plant.set_rest(&c).map_err(|_| {
                format!("the arm really there has no rest state on branch {branch} at its setpoint")
            })?;
            c = plant.curvature_modes().to_vec();
            if step == STEPS {
                return Ok((plant, tensions));
            }
        }
        unreachable!("the last step returns")
    }
}

fn options(real: &RealArm, seed: u64) -> PlantOptions {
    let angle = |bias| SensorOptions {
        noise: real.angle_noise_rad,
        bias,
        delay_ticks: real.delay_ticks,
        quantum: 0.0,
    };
    let mut options = PlantOptions {
        tip_angle: angle(real.angle_bias_rad),
        mid_angle: angle(-real.angle_bias_rad),
        tension: SensorOptions {
            noise: TENSION_NOISE_N,
            delay_ticks: real.delay_ticks,
            ..SensorOptions::default()
        },
        seed,
        ..PlantOptions::default()
    };
    options.tendons.friction_fraction = real.friction;
    options
}
