//! Many drawn cases within the tolerances, and how they end.
//!
//! Every case draws the arm that is really there (stiffness, payload, tilt within the arm file's tolerances, damping, friction,
//! sensors), what the firmware is told, a task (move or cross) and perhaps a knock, and goes on until nothing happens any
//! more. The same seed draws the same cases, on any number of cores.

use super::closed_loop::{LOOK_TICKS, Loop, TICK_S};
use super::scenario::{RealArm, What};
use super::stage::{Stage, StageError};
use super::truth::{self, Look, Observer};
use super::words::refusal_name;
use firmware_core::supervisor::{Events, Mode, Request};
use firmware_core::{Payload, Table};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use rayon::prelude::*;
use serde::Serialize;

/// Noise and largest bias of the angle sensors (rad): 0.5 and 1 degree.
const NOISE_RAD: f64 = 0.008_726_646;
const MOST_BIAS_RAD: f64 = 0.017_453_293;
/// Largest part of the tension that the guides keep.
const MOST_FRICTION: f64 = 0.1;
/// Age of the readings (ticks).
const DELAY_TICKS: [u64; 2] = [1, 3];
/// The task is set (s).
const TASK_S: f64 = 2.0;
/// A knock comes between these (s).
const KNOCK_S: [f64; 2] = [2.5, 12.0];
/// Smallest and largest knock over the one the arm file requires to withstand: from a touch to one that throws it over.
const KNOCK_FACTORS: [f64; 2] = [0.2, 30.0];
/// Nothing has happened for so long: the case is over (s).
const QUIET_S: f64 = 3.0;
/// Longest case (s).
const LONGEST_S: f64 = 90.0;
/// A knock is over when the tip has been slower than this (m/s)
const CALM_M_S: f64 = 0.1;
/// for so long (s).
const CALM_S: f64 = 0.5;
/// Draws of a setpoint before a case counts as impossible.
const MOST_DRAWS: u32 = 2000;

/// What is asked in a case.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Task {
    /// Another setpoint on the same branch (rad or N m).
    Move(f64),
    /// The other branch, with permission, and this setpoint there.
    Cross {
        /// The branch.
        branch: u8,
        /// The setpoint (rad or N m).
        setpoint: f64,
    },
}

/// A drawn case.
#[derive(Clone, Copy, Debug)]
pub struct Case {
    /// Its number.
    pub number: u64,
    /// What is really there.
    pub real: RealArm,
    /// What the firmware is told.
    pub told: Payload,
    /// Where it begins.
    pub branch: u8,
    /// At this setpoint (rad or N m).
    pub setpoint: f64,
    /// What is asked.
    pub task: Task,
    /// When a knock comes (s) and how hard (N s).
    pub knock: Option<(f64, f64)>,
    /// Seed of the noise.
    pub seed: u64,
}

/// How a case ended.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum End {
    /// Holds.
    Holds,
    /// Stopped.
    Stopped,
    /// Still doing something after the longest time.
    UnderWay,
    /// Nothing rests where it was to begin, in this corner of the tolerances.
    NoRest,
}

/// What became of a case.
#[derive(Clone, Debug, Serialize)]
pub struct Outcome {
    /// Number of the case.
    pub number: u64,
    /// What was asked.
    pub task: Task,
    /// How it ended.
    pub end: End,
    /// Why it was not swung over, if a crossing was asked for and none begun.
    pub refused: Option<&'static str>,
    /// A crossing was begun.
    pub begun: bool,
    /// The arm is really on the branch that was asked for, or the first one.
    pub on_wanted: bool,
    /// Holds and reports a branch that the arm is not on.
    pub wrong_side: bool,
    /// A crossing was under way, or had not begun, when a knock harder than required came.
    pub knocked_hard: bool,
    /// The arm went over by a knock.
    pub knocked_over: bool,
    /// What limit was broken without being noticed.
    pub unnoticed: Option<&'static str>,
    /// A knock harder than required threw the arm for a moment closer to a region than required.
    pub thrown_close: bool,
    /// Everything the firmware noticed.
    #[serde(serialize_with = "names")]
    pub seen: Events,
    /// Time simulated (s).
    pub lasted_s: f64,
}

fn names<S: serde::Serializer>(events: &Events, to: S) -> Result<S::Ok, S::Error> {
    to.collect_seq(events.names())
}

struct Dice(ChaCha8Rng);

impl Dice {
    /// Uniform in 0..1.
    fn share(&mut self) -> f64 {
        (self.0.next_u64() >> 11) as f64 / (1_u64 << 53) as f64
    }

    fn between(&mut self, [from, to]: [f64; 2]) -> f64 {
        from + (to - from) * self.share()
    }

    fn either_way(&mut self, most: f64) -> f64 {
        self.between([-most, most])
    }

    fn factor(&mut self, [from, to]: [f64; 2]) -> f64 {
        self.between([from.ln(), to.ln()]).exp()
    }

    fn chance(&mut self, share: f64) -> bool {
        self.share() < share
    }

    fn below(&mut self, end: usize) -> usize {
        ((self.share() * end as f64) as usize).min(end - 1)
    }
}

/// Draws case `number` of `seed`; `None` when the table has no usable setpoint for it.
pub fn draw(stage: &Stage, seed: u64, number: u64) -> Option<Case> {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    rng.set_stream(number);
    let mut dice = Dice(rng);
    let arm = &stage.arm;
    let tolerance = arm.tolerance.stiffness_fraction;
    let real = RealArm {
        payload_kg: dice.between(arm.payload.range_kg),
        stiffness_factor: 1.0 + dice.either_way(tolerance),
        damping_factor: dice.factor([0.5, 2.0]),
        tilt_off_rad: dice.either_way(arm.base.tolerance_rad),
        friction: dice.between([0.0, MOST_FRICTION]),
        angle_noise_rad: NOISE_RAD,
        angle_bias_rad: dice.either_way(MOST_BIAS_RAD),
        delay_ticks: (DELAY_TICKS[0]
            + dice.below((DELAY_TICKS[1] - DELAY_TICKS[0] + 1) as usize) as u64)
            as usize,
    };
    let table = stage.table(true);
    let told = told(&mut dice, &table, real.payload_kg);
    let stable = stable_branches(&table);
    let branch = stable[dice.below(stable.len())];
    let setpoint = usable_setpoint(&mut dice, &table, told, branch)?;
    let others: Vec<u8> = stable
        .iter()
        .copied()
        .filter(|&other| other != branch)
        .collect();
    let task = if !others.is_empty() && dice.chance(0.6) {
        let to = others[dice.below(others.len())];
        let setpoint = usable_setpoint(&mut dice, &table, told, to)?;
        Task::Cross {
            branch: to,
            setpoint,
        }
    } else {
        let limits = table.limits();
        Task::Move(dice.between([limits.setpoint_lo.into(), limits.setpoint_hi.into()]))
    };
    let required = if arm.require.knock_n_s > 0.0 {
        arm.require.knock_n_s
    } else {
        0.01
    };
    let knock = dice.chance(0.5).then(|| {
        let size = required * dice.factor(KNOCK_FACTORS);
        (
            dice.between(KNOCK_S),
            if dice.chance(0.5) { size } else { -size },
        )
    });
    Some(Case {
        number,
        real,
        told,
        branch,
        setpoint,
        task,
        knock,
        seed: dice.0.next_u64(),
    })
}

/// Half the time the true payload, else the nearest slice's or nothing.
fn told(dice: &mut Dice, table: &Table, payload_kg: f64) -> Payload {
    let away = |kg: f32| (f64::from(kg) - payload_kg).abs();
    let nearest = table
        .slices()
        .map(|slice| slice.payload_kg)
        .min_by(|a, b| away(*a).total_cmp(&away(*b)));
    match (dice.below(4), nearest) {
        (0 | 1, _) => Payload::Known(payload_kg as f32),
        (2, Some(kg)) => Payload::Known(kg),
        _ => Payload::Unknown,
    }
}

fn stable_branches(table: &Table) -> Vec<u8> {
    let mut numbers: Vec<u8> = table
        .slices()
        .flat_map(|slice| {
            slice
                .branches()
                .filter(|b| b.entry.index == 0)
                .map(|b| b.number)
        })
        .collect();
    numbers.sort_unstable();
    numbers.dedup();
    numbers
}

fn usable_setpoint(dice: &mut Dice, table: &Table, told: Payload, branch: u8) -> Option<f64> {
    let load = table.load(told).ok()?;
    let limits = table.limits();
    (0..MOST_DRAWS)
        .map(|_| dice.between([limits.setpoint_lo.into(), limits.setpoint_hi.into()]))
        .find(|&setpoint| load.safe_at(branch, setpoint as f32))
}

/// What is watched while a case runs.
struct Watched {
    /// First limit broken otherwise than by a hard knock.
    broken: Option<&'static str>,
    thrown_close: bool,
    /// A knock harder than required has come and the arm has not been calm since.
    thrown: bool,
    calm_s: f64,
}

/// Runs a case.
///
/// # Errors
/// [`StageError`] when the loop cannot be set up or the motion is lost: an error of the simulation.
pub fn run(stage: &Stage, case: &Case) -> Result<Outcome, StageError> {
    let wanted = match case.task {
        Task::Move(_) => case.branch,
        Task::Cross { branch, .. } => branch,
    };
    let mut outcome = Outcome {
        number: case.number,
        task: case.task,
        end: End::NoRest,
        refused: None,
        begun: false,
        on_wanted: false,
        wrong_side: false,
        knocked_hard: false,
        knocked_over: false,
        unnoticed: None,
        thrown_close: false,
        seen: Events::NONE,
        lasted_s: 0.0,
    };
    let placed = stage.plant(&case.real, case.branch, case.setpoint, case.seed);
    let Ok((plant, tensions_n)) = placed else {
        return Ok(outcome);
    };
    let request = Request {
        setpoint: case.setpoint as f32,
        branch: None,
        swing_permitted: false,
        payload: case.told,
        stop: false,
        rearm: true,
    };
    let observer = Observer::new(&stage.arm, &plant);
    let mut playing = Loop::new(stage.table(true), plant, tensions_n, request)?;
    let mut watched = Watched {
        broken: None,
        thrown_close: false,
        thrown: false,
        calm_s: 0.0,
    };
    let (mut asked, mut knocked, mut quiet_s) = (false, false, 0.0);
    let mut before = playing.output;
    outcome.end = End::UnderWay;
    while playing.time_s() < LONGEST_S {
        let now_s = playing.time_s();
        if !asked && now_s >= TASK_S {
            asked = true;
            match case.task {
                Task::Move(setpoint) => playing.act(What::Setpoint(setpoint)),
                Task::Cross { branch, setpoint } => {
                    playing.act(What::Setpoint(setpoint));
                    playing.act(What::Branch(branch));
                    playing.act(What::Permit(true));
                }
            }
        }
        if let Some((at_s, impulse_n_s)) = case.knock
            && !knocked
            && now_s >= at_s
        {
            knocked = true;
            playing.act(What::Knock(impulse_n_s));
            let crossed = playing.seen.contains(Events::CROSSING_DONE);
            watched.thrown = impulse_n_s.abs() > stage.arm.require.knock_n_s;
            outcome.knocked_hard = !crossed && watched.thrown;
        }
        playing.tick().map_err(|error| StageError::Motion {
            scenario: format!("random case {}", case.number),
            error,
        })?;
        if playing.ticks.is_multiple_of(LOOK_TICKS) {
            watch(stage, &playing, observer.look(&playing.plant), &mut watched);
        }
        let output = playing.output;
        let settled = matches!(output.mode, Mode::Hold | Mode::Stopped)
            && output.mode == before.mode
            && output.setpoint == before.setpoint
            && output.branch == before.branch
            && watched.calm_s >= CALM_S;
        // What is wanted and not refused is still to come.
        let to_come =
            output.mode == Mode::Hold && output.branch != Some(wanted) && output.refused.is_none();
        let over = asked && (knocked || case.knock.is_none());
        quiet_s = if settled && !to_come && over {
            quiet_s + TICK_S
        } else {
            0.0
        };
        before = output;
        if quiet_s > QUIET_S {
            outcome.end = if output.mode == Mode::Hold {
                End::Holds
            } else {
                End::Stopped
            };
            break;
        }
    }
    let output = playing.output;
    let truly = truth::branch(&playing.table, &playing.plant);
    outcome.begun = playing.seen.contains(Events::CROSSING_BEGUN);
    outcome.refused = output.refused.filter(|_| !outcome.begun).map(refusal_name);
    outcome.on_wanted = truly == Some(wanted);
    outcome.wrong_side = output.mode == Mode::Hold && output.branch != truly;
    outcome.knocked_over = playing.seen.contains(Events::KNOCKED_OVER);
    outcome.thrown_close = watched.thrown_close;
    outcome.seen = playing.seen;
    outcome.lasted_s = playing.time_s();
    if output.mode == Mode::Hold {
        let look = observer.look(&playing.plant);
        let at_rest = broken_at_rest(stage, look);
        outcome.unnoticed = at_rest.or(watched.broken);
    }
    Ok(outcome)
}

/// Looks for a broken limit. In a crossing every one counts; where a knock harder than required throws the arm in Hold is not
/// in the firmware's hands: its part is to notice what comes of it. What ends in Stopped was noticed.
fn watch(stage: &Stage, playing: &Loop, look: Look, watched: &mut Watched) {
    let crossing = matches!(playing.output.mode, Mode::Inject | Mode::Lean | Mode::Catch);
    let speed_m_s = playing.plant.tip().speed_m_s();
    watched.calm_s = if speed_m_s < CALM_M_S {
        watched.calm_s + LOOK_TICKS as f64 * TICK_S
    } else {
        0.0
    };
    // The knock itself has come after the last look.
    watched.thrown &= watched.calm_s < CALM_S || speed_m_s >= CALM_M_S;
    let mut broken = broken_at_rest(stage, look);
    if !playing.tensions_within_limits() {
        broken = Some("tension");
    }
    if crossing && let Some(swing) = stage.arm.swing {
        let offset_m = f64::from(playing.table.limits().offset_m);
        let pair = playing.output.tensions;
        let couple_n_m = f64::from((pair.a_n - pair.b_n).abs()) * offset_m;
        if speed_m_s > swing.max_tip_speed_m_s {
            broken = Some("tip speed");
        }
        if couple_n_m > swing.max_couple_n_m * (1.0 + 1e-4) {
            broken = Some("couple");
        }
    }
    if watched.thrown && !crossing && broken != Some("tension") {
        watched.thrown_close |= broken == Some("clearance");
    } else if playing.output.mode != Mode::Stopped {
        watched.broken = watched.broken.or(broken);
    }
}

fn broken_at_rest(stage: &Stage, look: Look) -> Option<&'static str> {
    let required_m = stage.arm.require.clearance_m;
    if look
        .clearance_m
        .is_some_and(|clearance_m| clearance_m < required_m)
    {
        return Some("clearance");
    }
    (look.strain > stage.arm.spine.allowed_strain).then_some("strain")
}

/// How many cases ended how.
#[derive(Clone, Debug, Default, Serialize)]
pub struct Counts {
    /// Cases run.
    pub cases: usize,
    /// Cases where nothing rests at the beginning, or no setpoint is usable.
    pub impossible: usize,
    /// Holds and reports the wrong branch: must be 0.
    pub wrong_side: usize,
    /// A limit was broken and the case did not end in Stopped: must be 0.
    pub unnoticed: usize,
    /// Still under way at the end: must be 0.
    pub under_way: usize,
    /// Crossings asked for.
    pub crossings_asked: usize,
    /// Of these refused, the arm staying where it was.
    pub crossings_refused: usize,
    /// Of these carried over all the same, by a knock.
    pub crossings_by_knock: usize,
    /// By reason.
    pub refusals: Vec<(&'static str, usize)>,
    /// Of these stopped before a crossing began.
    pub stopped_before: usize,
    /// Crossings begun that no knock harder than required disturbed.
    pub crossings_begun: usize,
    /// Of these ended holding on the branch asked for.
    pub crossings_succeeded: usize,
    /// Of these ended in Stopped.
    pub crossings_stopped: usize,
    /// Crossings begun that were knocked harder than required.
    pub knocked_crossings: usize,
    /// Of these succeeded.
    pub knocked_succeeded: usize,
    /// Of these stopped.
    pub knocked_stopped: usize,
    /// Moves asked for.
    pub moves: usize,
    /// Of these holding on the other side, and saying so, where a knock threw them.
    pub moves_thrown: usize,
    /// Of these holding on their branch.
    pub moves_held: usize,
    /// Of these stopped.
    pub moves_stopped: usize,
    /// Arms that a knock threw over.
    pub knocked_over: usize,
    /// Arms that a knock harder than required threw for a moment closer to a region than required.
    pub thrown_close: usize,
    /// Time simulated (s).
    pub simulated_s: f64,
}

impl Counts {
    /// Counts outcomes.
    pub fn of(outcomes: &[Outcome]) -> Self {
        let mut counts = Self {
            cases: outcomes.len(),
            ..Self::default()
        };
        for outcome in outcomes {
            counts.take(outcome);
        }
        counts
    }

    fn take(&mut self, outcome: &Outcome) {
        self.simulated_s += outcome.lasted_s;
        if outcome.end == End::NoRest {
            self.impossible += 1;
            return;
        }
        self.wrong_side += usize::from(outcome.wrong_side);
        self.unnoticed += usize::from(outcome.unnoticed.is_some());
        self.under_way += usize::from(outcome.end == End::UnderWay);
        self.knocked_over += usize::from(outcome.knocked_over);
        self.thrown_close += usize::from(outcome.thrown_close);
        let stopped = usize::from(outcome.end == End::Stopped);
        let succeeded = usize::from(outcome.end == End::Holds && outcome.on_wanted);
        match outcome.task {
            Task::Move(_) => {
                self.moves += 1;
                self.moves_held += succeeded;
                self.moves_thrown += usize::from(outcome.end == End::Holds && !outcome.on_wanted);
                self.moves_stopped += stopped;
            }
            Task::Cross { .. } => {
                self.crossings_asked += 1;
                if !outcome.begun {
                    self.stopped_before += stopped;
                    self.crossings_refused += usize::from(outcome.end == End::Holds);
                    self.crossings_by_knock += succeeded;
                    if let (Some(name), End::Holds) = (outcome.refused, outcome.end) {
                        match self.refusals.iter_mut().find(|(known, _)| *known == name) {
                            Some((_, count)) => *count += 1,
                            None => self.refusals.push((name, 1)),
                        }
                    }
                } else if outcome.knocked_hard {
                    self.knocked_crossings += 1;
                    self.knocked_succeeded += succeeded;
                    self.knocked_stopped += stopped;
                } else {
                    self.crossings_begun += 1;
                    self.crossings_succeeded += succeeded;
                    self.crossings_stopped += stopped;
                }
            }
        }
    }

    /// Whether nothing happened that must not.
    pub fn sound(&self) -> bool {
        self.wrong_side == 0 && self.unnoticed == 0 && self.under_way == 0
    }

    /// Rows to print: what and how many.
    pub fn rows(&self) -> Vec<(String, usize)> {
        let mut rows = vec![
            ("cases".to_string(), self.cases),
            (
                "  impossible: nothing rests or may be used there".to_string(),
                self.impossible,
            ),
            (
                "holds the wrong side and reports success (must be 0)".to_string(),
                self.wrong_side,
            ),
            (
                "limit or clearance broken unnoticed (must be 0)".to_string(),
                self.unnoticed,
            ),
            (
                "still under way at the end (must be 0)".to_string(),
                self.under_way,
            ),
            ("crossings asked for".to_string(), self.crossings_asked),
            ("  refused".to_string(), self.crossings_refused),
            (
                "    carried over by a knock, and said so".to_string(),
                self.crossings_by_knock,
            ),
        ];
        rows.extend(
            self.refusals
                .iter()
                .map(|(name, count)| (format!("    {name}"), *count)),
        );
        rows.extend([
            (
                "  stopped before one began".to_string(),
                self.stopped_before,
            ),
            (
                "  begun, knocked no harder than required".to_string(),
                self.crossings_begun,
            ),
            ("    succeeded".to_string(), self.crossings_succeeded),
            ("    stopped".to_string(), self.crossings_stopped),
            (
                "  begun, knocked harder than required before the end".to_string(),
                self.knocked_crossings,
            ),
            ("    succeeded".to_string(), self.knocked_succeeded),
            ("    stopped".to_string(), self.knocked_stopped),
            ("moves asked for".to_string(), self.moves),
            ("  hold on their side".to_string(), self.moves_held),
            (
                "  hold where a knock threw them, and say so".to_string(),
                self.moves_thrown,
            ),
            ("  stopped".to_string(), self.moves_stopped),
            ("knocked over".to_string(), self.knocked_over),
            (
                "thrown closer to a region than required, by a harder knock".to_string(),
                self.thrown_close,
            ),
        ]);
        rows
    }
}

/// Draws and runs `cases` cases, on all cores. `done` is called after each.
///
/// # Errors
/// The first [`StageError`].
pub fn monte_carlo(
    stage: &Stage,
    cases: u64,
    seed: u64,
    done: &(dyn Fn() + Sync),
) -> Result<Vec<Outcome>, StageError> {
    (0..cases)
        .into_par_iter()
        .map(|number| {
            let outcome = match draw(stage, seed, number) {
                Some(case) => run(stage, &case),
                None => Ok(impossible(number)),
            };
            done();
            outcome
        })
        .collect()
}

fn impossible(number: u64) -> Outcome {
    Outcome {
        number,
        task: Task::Move(0.0),
        end: End::NoRest,
        refused: None,
        begun: false,
        on_wanted: false,
        wrong_side: false,
        knocked_hard: false,
        knocked_over: false,
        unnoticed: None,
        thrown_close: false,
        seen: Events::NONE,
        lasted_s: 0.0,
    }
}
