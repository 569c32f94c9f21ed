//! One tick: look, notice, decide the mode, act.

use super::config::{ArmFacts, Config, Settings};
use super::crossing::{self, Start, Under};
use super::estimates::Estimate;
use super::hold;
use super::inputs_outputs::{CrossingRefusal, Input, Mode, Output, Request};
use super::state::{State, Stay};
use super::survey::{self, Resting};
use super::transitions::{self, Facts};
use super::{Events, survey::Listened};
use crate::choice::{Answer, Present, TensionPair, choose, usable_around};
use crate::format::{Drive, Method};
use crate::load::{Load, Payload};
use crate::pose::which_branch;
use crate::table::{Limits, Table};

/// Time for which the estimated tip speed may be above the limit (s): some ticks of noise.
const FAST_S: f32 = 0.01;

/// Corner of the filter of the rates that tell whether the arm is at rest, in units of 1/sqrt(L/g): above that of any
/// swing, below that of sensor noise.
const CALM_CORNER: f32 = 5.0;

/// One control tick: call it once per time step with the same table and configuration, and command the tensions of the
/// [`Output`]. Never panics, whatever the input; see the module for the contract.
pub fn step(table: &Table<'_>, config: &Config, state: &mut State, input: &Input) -> Output {
    let limits = table.limits();
    let payload = match input.request.payload {
        known @ Payload::Known(_) if table.load(known).is_ok() => known,
        _ => Payload::Unknown,
    };
    let Ok(load) = table.load(payload) else {
        return without_table(&limits, config, state);
    };
    let mut tick = Tick {
        table,
        load,
        limits,
        settings: &config.settings,
        arm: &config.arm,
        request: input.request,
        payload_known: payload == input.request.payload,
        events: Events::NONE,
        dt_s: config.settings.tick_s,
        now: Estimate::new(&state.watch.tip, &state.watch.mid),
        found: None,
        answer: None,
        refused: None,
        facts: Facts::default(),
    };
    tick.look(state, input);
    tick.decide(state, input);
    let before = state.mode;
    let mode = transitions::next(before, &tick.facts);
    if mode != before {
        tick.enter(state, input, before, mode);
    } else {
        state.mode_s += tick.dt_s;
    }
    tick.act(state)
}

/// The table's memory has changed under it: pretension, nothing else is known.
fn without_table(limits: &Limits, config: &Config, state: &mut State) -> Output {
    let (tensions, ..) = hold::tensions(0.0, 0.0, limits, &config.settings);
    let events = if state.mode == Mode::Stopped {
        Events::NONE
    } else {
        Events::TABLE_BROKEN
    };
    (state.mode, state.stay, state.branch) = (Mode::Stopped, Stay::Slack, None);
    state.command = Some(tensions);
    Output {
        tensions,
        mode: Mode::Stopped,
        branch: None,
        setpoint: state.held,
        reserves: None,
        events,
        energy_j: 0.0,
        answer: None,
        refused: None,
        crossing: None,
        surveyed: None,
    }
}

/// Everything about the present tick.
struct Tick<'a> {
    table: &'a Table<'a>,
    load: Load<'a>,
    limits: Limits,
    settings: &'a Settings,
    arm: &'a ArmFacts,
    request: Request,
    payload_known: bool,
    events: Events,
    dt_s: f32,
    now: Estimate,
    /// The branch that the pose belongs to.
    found: Option<u8>,
    answer: Option<Answer>,
    refused: Option<CrossingRefusal>,
    facts: Facts,
}

impl Tick<'_> {
    fn held_tip(&self) -> bool {
        self.limits.drive == Drive::HeldTip
    }

    /// The setpoint at which the pose is looked up: the measured tip, or the couple commanded.
    fn here(&self, state: &State) -> f32 {
        let at = if self.held_tip() {
            self.now.q0
        } else {
            state.held
        };
        hold::within(at, self.limits.setpoint_lo, self.limits.setpoint_hi)
    }

    /// Readings, estimates, branch, rest; and what is noticed in them.
    fn look(&mut self, state: &mut State, input: &Input) {
        let rising = self.request.rearm && !state.armed_before;
        state.armed_before = self.request.rearm;
        if state.mode == Mode::Stopped && rising {
            // Look afresh: what was in doubt may have been put right.
            state.watch = super::noticing::Watch::NEW;
            (state.arming_s, state.rest_s) = (self.settings.rearm_s, 0.0);
        }
        let (dt_s, mut events, irregular) = state.watch.time(input.dt_s, self.settings);
        self.dt_s = dt_s;
        let mut doubts = Events::NONE;
        if irregular {
            doubts |= Events::TIME_IRREGULAR;
        }
        doubts |= state.watch.readings(
            &input.measured,
            &self.limits,
            state.reference,
            self.settings,
            dt_s,
        );
        if let Some(command) = state.command {
            doubts |= state
                .watch
                .tensions(&input.measured, command, self.settings, dt_s);
        }
        self.now = Estimate::new(&state.watch.tip, &state.watch.mid);
        self.rest(state);
        self.found = if state.watch.mid.begun && state.watch.tip.begun {
            which_branch(&self.load, self.here(state), self.now.pose())
                .ok()
                .map(|seat| seat.branch)
        } else {
            None
        };
        let branch = state
            .watch
            .branch(state.mode, state.branch, self.found, self.settings, dt_s);
        events |= branch.without(Events::NO_KNOWN_BRANCH);
        doubts |= branch.without(Events::KNOCKED_OVER);
        if branch.contains(Events::KNOCKED_OVER) {
            (state.branch, state.tries, state.trim_n_m) = (self.found, 0, 0.0);
        }
        if self.held_tip() {
            let standing = matches!(state.mode, Mode::Hold | Mode::Survey);
            let off_rad = if standing {
                state.held - self.now.q0
            } else {
                0.0
            };
            doubts |= state.watch.reach(off_rad, self.settings, dt_s);
        }
        if self.request.stop && state.mode != Mode::Stopped {
            events |= Events::STOP_REQUESTED;
        }
        self.facts.stop = self.request.stop;
        self.facts.doubt = !doubts.is_empty();
        self.events = events.with(doubts);
    }

    fn rest(&self, state: &mut State) {
        let corner = CALM_CORNER * self.dt_s / self.arm.unit_s;
        let share = corner / (1.0 + corner);
        let mut at_rest = true;
        for (calm, rate) in state
            .calm
            .iter_mut()
            .zip([self.now.q0_rate, self.now.q1_rate])
        {
            *calm += share * (rate - *calm);
            at_rest &= calm.abs() <= self.settings.rest_rate_rad_s;
        }
        if at_rest {
            state.rest_s += self.dt_s;
        } else {
            state.rest_s = 0.0;
        }
    }

    fn at_rest(&self, state: &State) -> bool {
        state.rest_s >= self.settings.rest_s
    }

    fn sound(&self, state: &State) -> bool {
        state.watch.tip.sound(self.settings)
            && state.watch.mid.sound(self.settings)
            && state.watch.tensions_sound()
    }

    /// The facts of the mode.
    fn decide(&mut self, state: &mut State, input: &Input) {
        let usable = self.payload_known && self.request.setpoint.is_finite();
        if !usable {
            self.events |= Events::REQUEST_UNUSABLE;
        }
        if self.request.branch.is_some() && state.mode != Mode::Stopped {
            state.wanted = self.request.branch;
        }
        if !self.request.swing_permitted || state.refused_for != state.wanted {
            (state.refused, state.refused_for, state.tries) = (None, state.wanted, 0);
        }
        match state.mode {
            Mode::Hold => self.decide_hold(state, usable),
            Mode::Survey => self.decide_survey(state, input),
            Mode::Inject | Mode::Lean | Mode::Catch => self.decide_crossing(state, input),
            Mode::Stopped => self.decide_stopped(state),
        }
    }

    fn decide_hold(&mut self, state: &mut State, usable: bool) {
        let Some(branch) = state.branch else {
            return;
        };
        let present = Present {
            branch,
            setpoint: state.held,
        };
        let requested = choose(&self.load, present, self.request.setpoint);
        self.answer = Some(requested);
        let wanted = state.wanted.unwrap_or(branch);
        let target = if wanted == branch {
            usable.then(|| commanded(&requested)).flatten()
        } else {
            match self.may_cross(state, branch, wanted) {
                Ok(start) => {
                    let at = hold::within(state.held, start.from, start.to);
                    let there = state.rest_s >= self.settings.rest_s
                        && state.still_s >= self.settings.rest_s
                        && self.found == Some(branch)
                        && self.sound(state);
                    self.facts.wants_over = start.contains(state.held) && there;
                    if start.contains(state.held) {
                        None
                    } else {
                        commanded(&choose(&self.load, present, at))
                    }
                }
                Err(refusal) => {
                    self.refused = Some(refusal);
                    // It may stay where it is usable, but goes nowhere.
                    if !self.load.safe_at(branch, state.held) && self.at_rest(state) {
                        self.facts.no_way_back = true;
                        self.events |= Events::NO_WAY_BACK;
                    }
                    None
                }
            }
        };
        let before = state.held;
        if let Some(target) = target {
            let step = self.settings.setpoint_rate * self.dt_s;
            state.held = hold::towards(state.held, target, step);
        }
        if state.held == before {
            state.still_s += self.dt_s;
        } else {
            state.still_s = 0.0;
        }
    }

    fn may_cross(&self, state: &State, from: u8, to: u8) -> Result<Start, CrossingRefusal> {
        if !self.held_tip() {
            return Err(CrossingRefusal::NotForThisDrive);
        }
        if !self.request.swing_permitted || !self.payload_known {
            return Err(CrossingRefusal::NotPermitted);
        }
        if let Some(refusal) = state.refused {
            return Err(refusal);
        }
        if state.tries >= self.settings.most_tries {
            return Err(CrossingRefusal::TooManyTries);
        }
        crossing::start(&self.load, from, to, state.held)
    }

    /// Whether what was permitted when the crossing began no longer is.
    fn withdrawn(&self, state: &State, to: u8) -> bool {
        !self.request.swing_permitted
            || !self.payload_known
            || state.permitted_for != self.request.payload
            || state.wanted != Some(to)
    }

    fn decide_survey(&mut self, state: &mut State, input: &Input) {
        let (Some(from), Some(to)) = (state.branch, state.wanted) else {
            self.facts.not_now = true;
            return;
        };
        if self.withdrawn(state, to) || from == to {
            self.facts.not_now = true;
            return;
        }
        if !(self.at_rest(state) && self.sound(state) && self.found == Some(from)) {
            state.listened = Listened::NEW;
            if state.mode_s > self.settings.survey_wait_s {
                self.refuse(state, CrossingRefusal::SurveyUnclear);
            }
            return;
        }
        state.listened.add(Resting {
            q0: self.now.q0,
            q1: self.now.q1,
            couple_n_m: self.limits.offset_m
                * (input.measured.tension_a_n - input.measured.tension_b_n),
        });
        if state.listened.time_s(self.dt_s) < self.settings.survey_s {
            return;
        }
        let verdict = survey::survey(
            self.table,
            &self.load,
            from,
            &state.listened,
            self.settings,
            self.arm,
        );
        state.surveyed = verdict.surveyed;
        let Some(payload_kg) = verdict.fits_kg else {
            let refusal = verdict
                .nearest
                .map_or(CrossingRefusal::SurveyUnclear, |nearest| {
                    CrossingRefusal::SurveyDoesNotFit {
                        stiffness: nearest.stiffness,
                    }
                });
            self.refuse(state, refusal);
            return;
        };
        let plan = crossing::plan(&self.load, payload_kg, from, to, state.held);
        let under = plan.and_then(|plan| Under::begin(plan, &self.load, payload_kg, self.now.q1));
        match under {
            Some(under) => {
                self.events |= Events::SURVEY_FITS;
                self.facts.may_inject = under.plan.method == Method::Inject;
                self.facts.may_lean = under.plan.method == Method::Lean;
                state.under = Some(under);
            }
            None => self.refuse(state, CrossingRefusal::NoPlan),
        }
    }

    fn refuse(&mut self, state: &mut State, refusal: CrossingRefusal) {
        self.events |= Events::SURVEY_REFUSED;
        self.facts.not_now = true;
        (state.refused, state.refused_for) = (Some(refusal), state.wanted);
    }

    fn decide_crossing(&mut self, state: &mut State, _input: &Input) {
        let Some(mut under) = state.under else {
            self.facts.too_long = true;
            return;
        };
        under.time_s += self.dt_s;
        let plan = under.plan;
        let catching = state.mode == Mode::Catch;
        self.facts.withdrawn = self.withdrawn(state, plan.to);
        let speed_m_s = self.now.tip_speed_m_s(self.arm);
        if speed_m_s > plan.most_tip_speed_m_s {
            under.fast_s += self.dt_s;
        } else {
            under.fast_s = 0.0;
        }
        let kinetic_j = self.kinetic_j(speed_m_s);
        let travel_rad = (self.now.q0 - plan.rest_setpoint).abs();
        self.facts.limit_broken = under.fast_s > FAST_S
            || travel_rad > plan.most_tip_travel_rad + self.settings.reach_tolerance_rad
            || kinetic_j > self.settings.most_kinetic * self.arm.energy_scale_j;
        if catching {
            let rests = self.at_rest(state)
                && state.held == plan.rest_setpoint
                && (state.held - self.now.q0).abs() <= self.settings.reach_tolerance_rad;
            self.facts.too_long = state.mode_s > self.settings.catch_s;
            self.facts.caught = rests && self.found == Some(plan.to);
            let back = rests && self.found == Some(plan.from);
            let last = state.tries >= self.settings.most_tries;
            (self.facts.fell_back, self.facts.gave_up) = (back && !last, back && last);
        } else {
            self.facts.too_long = under.time_s > plan.longest_s;
            self.facts.over = under.over(&self.load, &self.now, self.settings);
        }
        let aborts =
            self.facts.limit_broken || self.facts.too_long || (self.facts.withdrawn && !catching);
        if aborts {
            for (holds, event) in [
                (self.facts.limit_broken, Events::LIMIT_BROKEN),
                (self.facts.too_long, Events::TIMED_OUT),
                (
                    self.facts.withdrawn && !catching,
                    Events::PERMISSION_WITHDRAWN,
                ),
            ] {
                if holds {
                    self.events |= event;
                }
            }
        }
        state.under = Some(under);
    }

    fn decide_stopped(&mut self, state: &mut State) {
        if state.arming_s <= 0.0 {
            return;
        }
        state.arming_s -= self.dt_s;
        let sound = self.sound(state) && state.watch.tip.same_s <= self.settings.still_s;
        self.facts.may_arm = sound && self.at_rest(state) && self.found.is_some();
        let waits = state.arming_s > 0.0 && !self.facts.doubt && !self.facts.stop;
        if !self.facts.may_arm && !waits {
            state.arming_s = 0.0;
            self.events |= Events::REARM_REFUSED;
        }
    }

    /// What changes when a mode begins.
    fn enter(&mut self, state: &mut State, input: &Input, before: Mode, mode: Mode) {
        (state.mode, state.mode_s) = (mode, 0.0);
        match (before, mode) {
            (_, Mode::Stopped) => {
                if before == Mode::Catch && self.facts.gave_up {
                    self.events |= Events::FELL_BACK;
                }
                state.stay = self.stay(state, input);
                (state.arming_s, state.under) = (0.0, None);
            }
            (Mode::Stopped, _) => {
                state.branch = self.found;
                state.wanted = self.request.branch.or(self.found);
                state.held = if self.held_tip() {
                    self.here(state)
                } else {
                    let couple = input.measured.tension_a_n - input.measured.tension_b_n;
                    hold::within(
                        couple * self.limits.offset_m,
                        self.limits.setpoint_lo,
                        self.limits.setpoint_hi,
                    )
                };
                (state.still_s, state.trim_n_m, state.tries) = (0.0, 0.0, 0);
                (state.refused, state.surveyed, state.under) = (None, None, None);
                (state.arming_s, state.stay) = (0.0, Stay::Anywhere);
                self.events |= Events::REARMED;
            }
            (_, Mode::Survey) => {
                (state.listened, state.permitted_for) = (Listened::NEW, self.request.payload);
            }
            (_, Mode::Inject | Mode::Lean) => {
                state.tries = state.tries.saturating_add(1);
                state.branch = None;
                self.events |= Events::CROSSING_BEGUN;
            }
            (_, Mode::Catch) => {
                state.rest_s = 0.0;
                self.events |= Events::PASSED_OVER;
            }
            (Mode::Catch, Mode::Hold) => {
                state.branch = self.found;
                state.under = None;
                if self.facts.caught {
                    state.tries = 0;
                    self.events |= Events::CROSSING_DONE;
                } else {
                    self.events |= Events::FELL_BACK;
                }
            }
            (_, Mode::Hold) => {}
        }
    }

    /// How to hold from now on.
    fn stay(&self, state: &State, input: &Input) -> Stay {
        let tendons = Events::TENSION_NOT_FOLLOWING.with(Events::TENDON_SLACK);
        let measured = &input.measured;
        let couple_n_m = self.limits.offset_m * (measured.tension_a_n - measured.tension_b_n);
        let couple_n_m = if couple_n_m.is_finite() && state.watch.tensions_sound() {
            couple_n_m
        } else {
            0.0
        };
        if self.events.any(tendons) {
            Stay::Slack
        } else if !state.watch.tip.sound(self.settings)
            || self.events.contains(Events::SENSOR_FROZEN)
        {
            let known = state
                .branch
                .and_then(|branch| self.load.state(branch, state.held).ok());
            Stay::Couple(known.map_or(couple_n_m, |rest| rest.couple_n_m))
        } else if !self.held_tip() {
            Stay::Couple(state.held)
        } else {
            Stay::Tip {
                angle_rad: self.now.q0,
                couple_n_m,
            }
        }
    }

    /// The couple of the mode, and the output.
    fn act(&mut self, state: &mut State) -> Output {
        let (asked_n_m, most_n_m) = match state.mode {
            Mode::Stopped => (self.stopped_couple(state), f32::INFINITY),
            _ if !self.held_tip() => {
                state.reference = None;
                let damping = self.settings.kd_n_m_s_per_rad * self.now.q0_rate;
                (state.held - damping, f32::INFINITY)
            }
            Mode::Hold | Mode::Survey => self.hold_couple(state),
            Mode::Inject | Mode::Lean | Mode::Catch => self.crossing_couple(state),
        };
        let (tensions, _, cut) = hold::tensions(asked_n_m, most_n_m, &self.limits, self.settings);
        if cut && !state.cut {
            self.events |= Events::COUPLE_LIMITED;
        }
        state.cut = cut;
        state.command = Some(tensions);
        self.output(state, tensions)
    }

    fn hold_couple(&self, state: &mut State) -> (f32, f32) {
        let Some(branch) = state.branch else {
            return (state.trim_n_m, f32::INFINITY);
        };
        let rest = self.load.state(branch, state.held).ok();
        let off_rad = state.held - self.now.q0;
        state.trim_n_m = hold::trim(state.trim_n_m, off_rad, state.cut, self.settings, self.dt_s);
        let brake = hold::brake(&self.now, self.settings, self.arm);
        // The brake stays where the arm may be.
        let reference = match usable_around(&self.load, branch, state.held) {
            Some((from, to)) => hold::within(state.held + brake, from, to),
            None => state.held,
        };
        state.reference = Some(reference);
        let couple = rest.map_or(0.0, |rest| rest.couple_n_m)
            + state.trim_n_m
            + hold::feedback(&self.now, reference, self.settings);
        (couple, f32::INFINITY)
    }

    fn crossing_couple(&self, state: &mut State) -> (f32, f32) {
        let Some(mut under) = state.under else {
            return (state.trim_n_m, f32::INFINITY);
        };
        let plan = under.plan;
        let step = self.settings.lean_rate_rad_s * self.dt_s;
        let catching = state.mode == Mode::Catch;
        under.returning |= catching && (plan.method == Method::Inject || self.at_rest(state));
        (state.held, under.returning) = match state.mode {
            Mode::Lean => (hold::towards(state.held, plan.lean_setpoint, step), false),
            Mode::Catch if !under.returning => (state.held, false),
            _ => (
                hold::towards(state.held, plan.rest_setpoint, step),
                under.returning,
            ),
        };
        let (held, dt_s) = (state.held, self.dt_s);
        let reference = match state.mode {
            Mode::Inject => under.inject(held, &self.now, self.settings, self.arm, dt_s),
            Mode::Catch => under.brake(held, &self.now, self.settings, self.arm),
            _ => under.limited(held),
        };
        state.under = Some(under);
        state.reference = Some(reference);
        // What the nearest rest state at the tip's angle takes, on whichever side it is.
        let static_n_m = self.static_couple(state).unwrap_or(0.0);
        let couple =
            static_n_m + state.trim_n_m + hold::feedback(&self.now, reference, self.settings);
        (couple, plan.most_couple_n_m)
    }

    fn stopped_couple(&self, state: &mut State) -> f32 {
        if matches!(state.stay, Stay::Anywhere) && state.watch.tip.sound(self.settings) {
            state.stay = Stay::Tip {
                angle_rad: self.now.q0,
                couple_n_m: 0.0,
            };
        }
        state.reference = None;
        match state.stay {
            Stay::Anywhere | Stay::Slack => 0.0,
            Stay::Couple(couple_n_m) => couple_n_m,
            Stay::Tip {
                angle_rad,
                couple_n_m,
            } => {
                let known = self.static_couple(state).unwrap_or(couple_n_m);
                if !state.watch.tip.sound(self.settings) {
                    state.stay = Stay::Couple(known);
                    return known;
                }
                let brake = if state.watch.mid.sound(self.settings) {
                    hold::brake(&self.now, self.settings, self.arm)
                } else {
                    0.0
                };
                state.reference = Some(angle_rad + brake);
                known + hold::feedback(&self.now, angle_rad + brake, self.settings)
            }
        }
    }

    /// Static couple at the present pose: that of the stable rest state nearest in mean angle at the tip's angle, and
    /// what the arm takes more for being bent otherwise.
    fn static_couple(&self, state: &State) -> Option<f32> {
        if !(self.held_tip() && state.watch.mid.begun) {
            return None;
        }
        let at = self.here(state);
        let mut nearest: Option<(f32, f32, f32)> = None;
        for branch in self.load.branches() {
            let Ok(rest) = self.load.state(branch, at) else {
                continue;
            };
            let away = (rest.mean_angle_rad - self.now.q1).abs();
            if rest.index == 0 && nearest.is_none_or(|(least, ..)| away < least) {
                nearest = Some((away, rest.mean_angle_rad, rest.couple_n_m));
            }
        }
        nearest.map(|(_, q1, couple)| couple + hold::couple_off_rest(&self.now, q1, self.arm))
    }

    fn kinetic_j(&self, tip_speed_m_s: f32) -> f32 {
        let drive = self.settings.inertia_kg_m2 * self.now.q0_rate * self.now.q0_rate;
        0.5 * (self.arm.mass_kg * tip_speed_m_s * tip_speed_m_s + drive)
    }

    /// Potential energy of the branch with its restoring stiffness, and kinetic energy with all mass at the tip.
    fn energy_j(&self, state: &State) -> f32 {
        let Some(branch) = self.found else {
            return 0.0;
        };
        let Ok(rest) = self.load.state(branch, self.here(state)) else {
            return 0.0;
        };
        let off = self.now.q1 - rest.mean_angle_rad;
        let stiffness = rest.well.map_or(0.0, |well| well.restoring_n_m_per_rad);
        rest.energy_j
            + 0.5 * stiffness * off * off
            + self.kinetic_j(self.now.tip_speed_m_s(self.arm))
    }

    fn output(&self, state: &State, tensions: TensionPair) -> Output {
        let branch = match state.mode {
            Mode::Hold | Mode::Survey => state.branch,
            Mode::Stopped => self.found,
            _ => None,
        };
        let reserves = branch
            .filter(|_| state.mode != Mode::Stopped)
            .and_then(|branch| self.load.reserves(branch, state.held));
        Output {
            tensions,
            mode: state.mode,
            branch,
            setpoint: match state.stay {
                Stay::Tip { angle_rad, .. } if state.mode == Mode::Stopped => angle_rad,
                _ => state.held,
            },
            reserves,
            events: self.events,
            energy_j: self.energy_j(state),
            answer: self.answer,
            refused: self.refused.or(state.refused),
            crossing: state.under.map(|under| under.plan.method),
            surveyed: state.surveyed,
        }
    }
}

/// The setpoint that an answer commands.
fn commanded(answer: &Answer) -> Option<f32> {
    match *answer {
        Answer::Go { setpoint, .. } | Answer::OnlyAsFarAs { setpoint, .. } => Some(setpoint),
        Answer::NotOnThisSide { as_far_as, .. } => Some(as_far_as),
        Answer::Refused(_) => None,
    }
}
