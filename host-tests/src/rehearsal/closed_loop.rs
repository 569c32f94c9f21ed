//! The firmware in a loop with the simulated arm.

use super::scenario::{Action, Scenario, What};
use super::stage::{Stage, StageError};
use super::timeline::{Line, Narrator};
use super::truth::{self, Look, Observer};
use firmware_core::Table;
use firmware_core::supervisor::{
    Config, DriveFacts, Events, Input, Measured, Mode, Output, Request, State, step,
};
use std::time::Instant;
use table_gen::plan::plant::{Plant, PlantError};

/// Time between ticks (s).
pub const TICK_S: f64 = 1e-3;
/// Ticks between the moments that are recorded: 40 a second.
const RECORD_TICKS: u64 = 25;
/// Ticks between looks at clearance and strain.
pub const LOOK_TICKS: u64 = 5;
/// Points along the arm that are recorded, less one.
const SEGMENTS: usize = 24;

/// The firmware, the arm, and what goes between them.
pub struct Loop<'a> {
    /// The table.
    pub table: Table<'a>,
    /// The simulated arm.
    pub plant: Plant,
    /// What the caller asks for.
    pub request: Request,
    /// What the sensors said on the last tick.
    pub measured: Measured,
    /// What the firmware decided on the last tick.
    pub output: Output,
    /// Everything it has noticed so far.
    pub seen: Events,
    /// Ticks so far.
    pub ticks: u64,
    config: Config,
    state: State,
}

impl<'a> Loop<'a> {
    /// At rest with `tensions_n`, firmware switched on and asked to arm.
    ///
    /// # Errors
    /// [`StageError::Settings`]; [`StageError::Motion`] without a name.
    pub fn new(
        table: Table<'a>,
        mut plant: Plant,
        tensions_n: [f64; 2],
        request: Request,
    ) -> Result<Self, StageError> {
        let config = Config::for_arm(&table, &DriveFacts::default())
            .map_err(|error| StageError::Settings(error.to_string()))?;
        let mut state = State::new();
        let measured = sense(&mut plant);
        let input = Input {
            measured,
            dt_s: TICK_S as f32,
            request,
        };
        let output = step(&table, &config, &mut state, &input);
        // The drive keeps what it held with until the firmware's first answer is out.
        plant
            .step(TICK_S, tensions_n)
            .map_err(|error| StageError::Motion {
                scenario: String::new(),
                error,
            })?;
        Ok(Self {
            table,
            plant,
            request,
            measured,
            output,
            seen: output.events,
            ticks: 1,
            config,
            state,
        })
    }

    /// One tick.
    ///
    /// # Errors
    /// The motion could not be followed.
    pub fn tick(&mut self) -> Result<(), PlantError> {
        self.measured = sense(&mut self.plant);
        let input = Input {
            measured: self.measured,
            dt_s: TICK_S as f32,
            request: self.request,
        };
        self.output = step(&self.table, &self.config, &mut self.state, &input);
        self.seen |= self.output.events;
        self.ticks += 1;
        let tensions = self.output.tensions;
        self.plant
            .step(TICK_S, [tensions.a_n.into(), tensions.b_n.into()])
    }

    /// Time simulated (s).
    pub fn time_s(&self) -> f64 {
        self.ticks as f64 * TICK_S
    }

    /// What happens to the arm or is asked of the firmware.
    pub fn act(&mut self, what: What) {
        match what {
            What::Setpoint(setpoint) => self.request.setpoint = setpoint as f32,
            What::Branch(branch) => self.request.branch = Some(branch),
            What::Permit(permitted) => self.request.swing_permitted = permitted,
            What::Rearm(rearm) => self.request.rearm = rearm,
            What::Stop(stop) => self.request.stop = stop,
            What::Told(payload) => self.request.payload = payload,
            What::Knock(impulse_n_s) => {
                // A tip without inertia across cannot be knocked.
                self.plant.knock(impulse_n_s);
            }
            What::Payload(mass_kg) => self.plant.set_payload_kg(mass_kg),
            What::BreakTendon(side) => self.plant.break_tendon(side),
            What::Fault(sensor, fault) => self.plant.set_sensor_fault(sensor, fault),
        }
    }

    /// Whether the tensions commanded are finite and within the table's limits.
    pub fn tensions_within_limits(&self) -> bool {
        let (limits, pair) = (self.table.limits(), self.output.tensions);
        let allowed = limits.pretension_n..=limits.max_tension_n;
        allowed.contains(&pair.a_n) && allowed.contains(&pair.b_n)
    }
}

fn sense(plant: &mut Plant) -> Measured {
    let sensed = plant.sense();
    Measured {
        tip_angle_rad: sensed.tip_angle_rad as f32,
        mid_angle_rad: sensed.mid_angle_rad as f32,
        tension_a_n: sensed.tension_n[0] as f32,
        tension_b_n: sensed.tension_n[1] as f32,
    }
}

/// The loop at one moment.
#[derive(Clone, Debug)]
pub struct Moment {
    /// Time (s).
    pub time_s: f64,
    /// True tip orientation (rad).
    pub tip_rad: f64,
    /// True orientation at half length (rad).
    pub mid_rad: f64,
    /// What the tip sensor says (rad); NaN from one that has dropped out.
    pub tip_measured_rad: f64,
    /// What the mid-length sensor says (rad).
    pub mid_measured_rad: f64,
    /// Setpoint commanded (rad or N m).
    pub setpoint: f64,
    /// Couple of the tendons on the tip (N m).
    pub couple_n_m: f64,
    /// Couple commanded (N m).
    pub commanded_n_m: f64,
    /// Tensions at the actuators (N).
    pub tensions_n: [f64; 2],
    /// The firmware's mode.
    pub mode: Mode,
    /// The branch that the firmware believes the arm to be on.
    pub branch: Option<u8>,
    /// Points along the arm, `[x, y]` (m), base first.
    pub shape_m: Vec<[f64; 2]>,
}

/// Extremes of a run, measured on the simulated arm.
#[derive(Clone, Copy, Debug)]
pub struct Extremes {
    /// Fastest tip (m/s).
    pub tip_speed_m_s: f64,
    /// Largest couple of the tendons on the tip, either way (N m).
    pub couple_n_m: f64,
    /// Highest tension at an actuator (N).
    pub tension_n: f64,
    /// Largest strain.
    pub strain: f64,
    /// Least distance from a keep-out region (m); `None` without regions.
    pub clearance_m: Option<f64>,
}

impl Extremes {
    /// Before anything was seen.
    pub const NONE: Self = Self {
        tip_speed_m_s: 0.0,
        couple_n_m: 0.0,
        tension_n: 0.0,
        strain: 0.0,
        clearance_m: None,
    };

    /// Takes what is seen now into account.
    pub fn take(&mut self, plant: &Plant, look: Look) {
        let [a, b] = plant.actuator_tensions_n();
        self.tip_speed_m_s = self.tip_speed_m_s.max(plant.tip().speed_m_s());
        self.couple_n_m = self.couple_n_m.max(plant.couple_n_m().abs());
        self.tension_n = self.tension_n.max(a).max(b);
        self.strain = self.strain.max(look.strain);
        if let Some(clearance_m) = look.clearance_m {
            let least = self.clearance_m.unwrap_or(f64::INFINITY);
            self.clearance_m = Some(least.min(clearance_m));
        }
    }
}

/// A scenario that has been played.
pub struct Run {
    /// What was to be played.
    pub scenario: Scenario,
    /// Whether the table has an allowed crossing for the payload told.
    pub planned: bool,
    /// The recording.
    pub moments: Vec<Moment>,
    /// What happened, in words.
    pub timeline: Vec<Line>,
    /// What the firmware said last.
    pub last: Output,
    /// Everything it noticed.
    pub seen: Events,
    /// The branch that the arm is really nearest to at the end.
    pub true_branch: Option<u8>,
    /// True tip orientation at the end (rad).
    pub tip_rad: f64,
    /// Extremes on the way.
    pub extremes: Extremes,
    /// Whether every command was finite and within the table's tensions.
    pub tensions_kept: bool,
    /// How many times faster than real time it was played.
    pub times_real_time: f64,
}

/// Plays `scenario`; `seed` decides the sensor noise.
///
/// # Errors
/// [`StageError`].
pub fn play(stage: &Stage, scenario: &Scenario, seed: u64) -> Result<Run, StageError> {
    let begun = Instant::now();
    let table = stage.table(scenario.plans);
    let placed = stage.plant(&scenario.real, scenario.branch, scenario.setpoint, seed);
    let (plant, tensions_n) = placed.map_err(|why| StageError::Start {
        scenario: scenario.name.clone(),
        why,
    })?;
    let request = Request {
        setpoint: scenario.setpoint as f32,
        branch: None,
        swing_permitted: false,
        payload: scenario.payload,
        stop: false,
        rearm: true,
    };
    let lost = |error| StageError::Motion {
        scenario: scenario.name.clone(),
        error,
    };
    let observer = Observer::new(&stage.arm, &plant);
    let mut narrator = Narrator::new(table.limits().drive, request);
    let mut playing = Loop::new(table, plant, tensions_n, request)?;
    let mut ahead: &[Action] = &scenario.actions;
    let (mut moments, mut extremes, mut tensions_kept) = (Vec::new(), Extremes::NONE, true);
    let ticks = (scenario.lasts_s / TICK_S).round() as u64;
    while playing.ticks < ticks {
        while let [action, rest @ ..] = ahead
            && action.at_s <= playing.time_s()
        {
            narrator.action(playing.time_s(), action.what);
            playing.act(action.what);
            ahead = rest;
        }
        playing.tick().map_err(lost)?;
        tensions_kept &= playing.tensions_within_limits();
        narrator.tick(
            playing.time_s(),
            &playing.request,
            &playing.output,
            playing.plant.tip().angle_rad,
        );
        if playing.ticks.is_multiple_of(LOOK_TICKS) {
            extremes.take(&playing.plant, observer.look(&playing.plant));
        }
        if playing.ticks.is_multiple_of(RECORD_TICKS) {
            moments.push(moment(&playing));
        }
    }
    Ok(Run {
        scenario: scenario.clone(),
        planned: stage.has_plan(scenario),
        moments,
        timeline: narrator.lines,
        last: playing.output,
        seen: playing.seen,
        true_branch: truth::branch(&playing.table, &playing.plant),
        tip_rad: playing.plant.tip().angle_rad,
        extremes,
        tensions_kept,
        times_real_time: scenario.lasts_s / begun.elapsed().as_secs_f64(),
    })
}

fn moment(playing: &Loop) -> Moment {
    let (plant, output) = (&playing.plant, &playing.output);
    let offset_m = f64::from(playing.table.limits().offset_m);
    Moment {
        time_s: playing.time_s(),
        tip_rad: plant.tip().angle_rad,
        mid_rad: plant.angle_rad(0.5),
        tip_measured_rad: playing.measured.tip_angle_rad.into(),
        mid_measured_rad: playing.measured.mid_angle_rad.into(),
        setpoint: output.setpoint.into(),
        couple_n_m: plant.couple_n_m(),
        commanded_n_m: f64::from(output.tensions.a_n - output.tensions.b_n) * offset_m,
        tensions_n: plant.actuator_tensions_n(),
        mode: output.mode,
        branch: output.branch,
        shape_m: plant.shape(SEGMENTS),
    }
}
