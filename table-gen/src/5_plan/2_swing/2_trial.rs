//! One crossing in one corner: the firmware's supervisor in a loop with the simulated arm.

use crate::arm_file::{Arm, Swing};
use crate::margins::shape::Stations;
use crate::plan::plant::{Plant, PlantOptions, SensorOptions};
use crate::rest_states::modes::mean_angle;
use crate::rod::Rod;
use firmware_core::supervisor::{
    Config, Events, Input, Measured, Mode, Output, Request, State, step,
};
use firmware_core::{Crossing, Payload, Table};

/// Time between ticks (s).
pub(super) const TICK_S: f64 = 1e-3;
/// Ticks between looks at strain and clearance, which change by less than a millimetre meanwhile.
const LOOK_TICKS: u64 = 4;
/// How long the firmware may take to begin (s), and the whole trial, in units of sqrt(L/g) beyond.
const LONGEST_START_S: f64 = 10.0;
const LONGEST_UNITS: f64 = 160.0;
/// How long the arm must go on holding afterwards, in units of sqrt(L/g).
const AFTER_UNITS: f64 = 4.0;
/// Curvature modes of the simulated arm at least.
const MODES: usize = 6;

/// What distinguishes a trial from the others.
#[derive(Clone, Copy, Debug)]
pub(super) struct Corner {
    /// Stiffness as a fraction of the nominal one.
    pub(super) stiffness: f64,
    /// Base tilt off the nominal one (rad).
    pub(super) tilt_rad: f64,
    /// Damping as a fraction of the nominal one.
    pub(super) damping: f64,
    /// Part of the tension that the guides keep.
    pub(super) friction: f64,
    /// Age of the readings (ticks).
    pub(super) delay_ticks: usize,
    /// Constant error of the angle sensors (rad), of opposite sign.
    pub(super) bias_rad: f64,
    /// Where in the run it begins, 0 to 1.
    pub(super) place: f64,
    /// Seed of the noise.
    pub(super) seed: u64,
}

/// Standard deviations of the sensor noise (rad, N).
const ANGLE_NOISE_RAD: f64 = 0.0087;
const TENSION_NOISE_N: f64 = 0.1;

/// What was measured on the simulated arm itself.
#[derive(Clone, Copy, Debug)]
pub(super) struct Measures {
    pub(super) peak_couple_n_m: f64,
    pub(super) peak_speed_m_s: f64,
    pub(super) clearance_m: Option<f64>,
    pub(super) travel_rad: f64,
    pub(super) strain: f64,
    /// From the beginning of the crossing until it had passed over (s).
    pub(super) passed_s: f64,
    /// From the beginning of the crossing until it rested (s).
    pub(super) takes_s: f64,
}

/// The arm in its corner and where it starts.
pub(super) struct Trial<'a> {
    /// As measured, with the payload of the slice.
    pub(super) arm: &'a Arm,
    pub(super) payload_kg: f64,
    pub(super) swing: &'a Swing,
    pub(super) corner: Corner,
    /// The rest state to begin from, of an arm close by.
    pub(super) begins: &'a [f64],
    pub(super) crossing: &'a Crossing,
}

impl Trial<'_> {
    /// Runs it.
    ///
    /// # Errors
    /// What went wrong, in words; the measures as far as it got.
    pub(super) fn run(
        &self,
        table: &Table,
        config: &Config,
    ) -> Result<Measures, (String, Measures)> {
        let mut run = Run::new(self, table);
        let begun = self.begin(&mut run);
        let ended = begun.and_then(|()| self.cross(&mut run, table, config));
        match ended {
            Ok(()) => Ok(run.measures),
            Err(why) => Err((why, run.measures)),
        }
    }

    fn begin(&self, run: &mut Run) -> Result<(), String> {
        let tensions = run.plant.set_rest(self.begins);
        run.command = tensions.map_err(|error| error.to_string())?;
        Ok(())
    }

    fn cross(&self, run: &mut Run, table: &Table, config: &Config) -> Result<(), String> {
        let unit_s = (self.arm.spine.length_m / crate::arm_file::STANDARD_GRAVITY_M_S2).sqrt();
        let mut state = State::new();
        let mut request = Request {
            setpoint: self.crossing.rest_setpoint,
            branch: Some(self.crossing.to),
            swing_permitted: true,
            payload: Payload::Known(self.payload_kg as f32),
            stop: false,
            rearm: false,
        };
        let (mut begun, mut done, mut armed): (Option<f64>, Option<f64>, bool) =
            (None, None, false);
        loop {
            let output = run.tick(self, table, config, &mut state, request)?;
            let now_s = run.plant.time_s();
            let events = output.events;
            request.rearm = true;
            armed |= events.contains(Events::REARMED);
            if events.contains(Events::CROSSING_BEGUN) {
                begun = Some(begun.unwrap_or(now_s));
            }
            let since_s = now_s - begun.unwrap_or(now_s);
            if events.contains(Events::PASSED_OVER) {
                run.measures.passed_s = run.measures.passed_s.max(since_s);
            }
            let never = [
                Events::FELL_BACK,
                Events::KNOCKED_OVER,
                Events::SURVEY_REFUSED,
                Events::REARM_REFUSED,
            ];
            if let Some(&event) = never.iter().find(|&&e| events.contains(e)) {
                return Err(format!("{event}{}", found(&output)));
            }
            if armed && output.mode == Mode::Stopped {
                return Err(format!("stopped: {events}"));
            }
            if let (Some(refused), None) = (output.refused, done) {
                return Err(format!("refused: {refused:?}"));
            }
            self.within_limits(&run.measures)?;
            if events.contains(Events::CROSSING_DONE) {
                run.measures.takes_s = since_s;
                done = Some(now_s);
            }
            if done.is_some_and(|at| now_s > at + AFTER_UNITS * unit_s) {
                return self.arrived(run, table);
            }
            if begun.is_none() && now_s > LONGEST_START_S || since_s > LONGEST_UNITS * unit_s {
                return Err(format!(
                    "still in mode {:?} after {now_s:.1} s",
                    output.mode
                ));
            }
        }
    }

    fn within_limits(&self, measures: &Measures) -> Result<(), String> {
        let swing = self.swing;
        if measures.peak_speed_m_s > swing.max_tip_speed_m_s {
            return Err(format!("tip at {:.2} m/s", measures.peak_speed_m_s));
        }
        if measures.travel_rad > swing.max_tip_travel_rad {
            let travel = measures.travel_rad.to_degrees();
            return Err(format!("tip {travel:.1} deg beyond the rest states"));
        }
        if measures.peak_couple_n_m > swing.max_couple_n_m * (1.0 + 1e-5) {
            return Err(format!("couple of {:.3} N m", measures.peak_couple_n_m));
        }
        if measures.strain > self.arm.spine.allowed_strain {
            return Err(format!("strain of {:.4}", measures.strain));
        }
        match measures.clearance_m {
            Some(clearance) if clearance < self.arm.require.clearance_m => {
                Err(format!("{:.1} mm from a keep-out region", 1e3 * clearance))
            }
            _ => Ok(()),
        }
    }

    /// Whether the simulated arm itself, whatever its firmware says, is on the other side.
    fn arrived(&self, run: &Run, table: &Table) -> Result<(), String> {
        let payload_kg = self.payload_kg as f32;
        let mean = |branch: u8, setpoint: f32| {
            let slice = table.slices().find(|s| s.payload_kg == payload_kg)?;
            let covers = slice.branch(branch)?.entry;
            let at = setpoint.clamp(covers.from, covers.to);
            slice
                .at(branch, at)
                .ok()
                .map(|s| f64::from(s.mean_angle_rad))
        };
        let crossing = self.crossing;
        let here = mean_angle(run.plant.curvature_modes());
        let away = |branch| mean(branch, crossing.rest_setpoint).map(|m| (m - here).abs());
        match (away(crossing.to), away(crossing.from)) {
            (Some(to), Some(from)) if to < from => Ok(()),
            _ => Err("on the wrong side afterwards".to_string()),
        }
    }
}

/// What a survey found, for the message.
fn found(output: &Output) -> String {
    match (output.surveyed, output.refused) {
        (Some(surveyed), Some(refused)) => format!(
            ", {refused:?}, couple off by {:.4} N m",
            surveyed.couple_off_n_m
        ),
        (_, Some(refused)) => format!(", {refused:?}"),
        _ => String::new(),
    }
}

/// A trial under way.
struct Run {
    plant: Plant,
    stations: Stations,
    rod: Rod,
    command: [f64; 2],
    ticks: u64,
    measures: Measures,
    /// Tip orientations at rest before and after.
    rests: [f64; 2],
    /// Couple per difference of the tensions (m).
    offset_m: f64,
}

impl Run {
    fn new(trial: &Trial, table: &Table) -> Self {
        let corner = trial.corner;
        let mut arm = trial
            .arm
            .varied(trial.payload_kg, corner.stiffness, corner.tilt_rad);
        arm.spine.damping_ratio = (arm.spine.damping_ratio * corner.damping).min(0.99);
        let angle = |bias| SensorOptions {
            noise: ANGLE_NOISE_RAD,
            bias,
            delay_ticks: corner.delay_ticks,
            quantum: 0.0,
        };
        let mut options = PlantOptions {
            modes: MODES.max(trial.begins.len().min(8)),
            tip_angle: angle(corner.bias_rad),
            mid_angle: angle(-corner.bias_rad),
            tension: SensorOptions {
                noise: TENSION_NOISE_N,
                delay_ticks: corner.delay_ticks,
                ..SensorOptions::default()
            },
            seed: corner.seed,
            ..PlantOptions::default()
        };
        options.tendons.friction_fraction = corner.friction;
        let rests = [trial.begins[0], f64::from(trial.crossing.rest_setpoint)];
        Self {
            stations: Stations::new(options.modes),
            rod: Rod::new(&arm),
            plant: Plant::new(&arm, options),
            command: [arm.tendons.pretension_n; 2],
            ticks: 0,
            measures: Measures {
                peak_couple_n_m: 0.0,
                peak_speed_m_s: 0.0,
                clearance_m: None,
                travel_rad: 0.0,
                strain: 0.0,
                passed_s: 0.0,
                takes_s: 0.0,
            },
            rests: [rests[0].min(rests[1]), rests[0].max(rests[1])],
            offset_m: f64::from(table.limits().offset_m),
        }
    }

    fn tick(
        &mut self,
        trial: &Trial,
        table: &Table,
        config: &Config,
        state: &mut State,
        request: Request,
    ) -> Result<Output, String> {
        let sensed = self.plant.sense();
        let input = Input {
            measured: Measured {
                tip_angle_rad: sensed.tip_angle_rad as f32,
                mid_angle_rad: sensed.mid_angle_rad as f32,
                tension_a_n: sensed.tension_n[0] as f32,
                tension_b_n: sensed.tension_n[1] as f32,
            },
            dt_s: TICK_S as f32,
            request,
        };
        let output = step(table, config, state, &input);
        // Before it is armed the firmware holds with what it knows; the arm came to rest with these tensions.
        if output.mode != Mode::Stopped {
            self.command = [output.tensions.a_n.into(), output.tensions.b_n.into()];
        }
        let moved = self.plant.step(TICK_S, self.command);
        moved.map_err(|error| error.to_string())?;
        self.ticks += 1;
        self.look(trial);
        Ok(output)
    }

    fn look(&mut self, trial: &Trial) {
        let [low, high] = self.rests;
        let measures = &mut self.measures;
        let tip = self.plant.tip();
        let couple = (self.command[0] - self.command[1]).abs() * self.offset_m;
        measures.peak_couple_n_m = measures.peak_couple_n_m.max(couple);
        measures.peak_speed_m_s = measures.peak_speed_m_s.max(tip.speed_m_s());
        let travel = (low - tip.angle_rad).max(tip.angle_rad - high);
        measures.travel_rad = measures.travel_rad.max(travel);
        if self.ticks.is_multiple_of(LOOK_TICKS) {
            let arm = self.plant.arm();
            let tilt_rad = arm.base.tilt_rad;
            let shape = self.stations.shape(self.plant.curvature_modes(), tilt_rad);
            measures.strain = measures.strain.max(shape.strain(arm, &self.rod));
            let clearance = shape.clearance_m(&trial.arm.keep_out, arm.spine.length_m);
            if let Some((clearance, _)) = clearance {
                let least = measures.clearance_m.unwrap_or(f64::INFINITY);
                measures.clearance_m = Some(least.min(clearance));
            }
        }
    }
}
