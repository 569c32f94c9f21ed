//! Getting the arm over: which plan, which reference, and when it is over.
//!
//! *Inject*: `q0_ref = q0bar + A (2/pi) atan(eta q1' sqrt(L/g))`, in phase with the swing; first the tip is pulled away
//! from the pass for a moment, and the amplitude grows by half when it takes long. *Lean*: the setpoint moves slowly
//! past the fold where the branch ends, and comes back when the arm has come to rest beyond: earlier, the pass would come back
//! under the arm. Both are over when the mean angle is beyond the pass and still on its way; no
//! guard asks for an energy.

use super::config::{ArmFacts, Settings};
use super::estimates::Estimate;
use super::hold::{in_phase, within};
use super::inputs_outputs::CrossingRefusal;
use crate::format::{Crossing, Drive, Method};
use crate::load::Load;
use crate::table::Slice;

/// Time over which the tip is pulled away, in units of sqrt(L/g).
const PULL_RAMP: f32 = 0.75;

/// Where a crossing may begin.
#[derive(Clone, Copy)]
pub(super) struct Start {
    pub(super) from: f32,
    pub(super) to: f32,
}

impl Start {
    pub(super) fn contains(&self, setpoint: f32) -> bool {
        self.from <= setpoint && setpoint <= self.to
    }
}

/// The setpoints nearest to `held` from which every slice of the load has an allowed plan.
pub(super) fn start(
    load: &Load<'_>,
    from: u8,
    to: u8,
    held: f32,
) -> Result<Start, CrossingRefusal> {
    if load.limits().drive != Drive::HeldTip {
        return Err(CrossingRefusal::NotForThisDrive);
    }
    let mut common: Option<Start> = None;
    for slice in load.slices() {
        let plan = nearest(load, &slice, from, to, held)?;
        let so_far = common.unwrap_or(Start {
            from: plan.setpoint_from,
            to: plan.setpoint_to,
        });
        let both = Start {
            from: within(so_far.from, plan.setpoint_from, f32::INFINITY),
            to: within(so_far.to, f32::NEG_INFINITY, plan.setpoint_to),
        };
        if both.from > both.to {
            return Err(CrossingRefusal::NoPlan);
        }
        common = Some(both);
    }
    common.ok_or(CrossingRefusal::NoPlan)
}

/// The allowed plan of one slice nearest to `held`, of those that begin there or at a safe setpoint.
fn nearest(
    load: &Load<'_>,
    slice: &Slice<'_>,
    from: u8,
    to: u8,
    held: f32,
) -> Result<Crossing, CrossingRefusal> {
    let mut best: Option<(f32, Crossing)> = None;
    let mut refusal = CrossingRefusal::NoPlan;
    for plan in slice.crossings() {
        if plan.from != from || plan.to != to {
            continue;
        }
        let at = within(held, plan.setpoint_from, plan.setpoint_to);
        if at != held && !load.safe_at(from, at) {
            continue;
        }
        if !plan.allowed {
            refusal = CrossingRefusal::NotAllowed {
                successes: plan.successes,
                trials: plan.trials,
            };
            continue;
        }
        let away = (at - held).abs();
        if best.is_none_or(|(least, _)| away < least) {
            best = Some((away, plan));
        }
    }
    best.map(|(_, plan)| plan).ok_or(refusal)
}

/// The plan of the slice with `payload_kg` for a crossing that begins at `held`.
pub(super) fn plan(
    load: &Load<'_>,
    payload_kg: f32,
    from: u8,
    to: u8,
    held: f32,
) -> Option<Crossing> {
    let mut slices = load.slices();
    let slice = slices.find(|slice| slice.payload_kg == payload_kg)?;
    slice
        .crossings()
        .find(|plan| plan.allowed && plan.from == from && plan.to == to && plan.covers(held))
}

/// A crossing under way.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Under {
    pub(super) plan: Crossing,
    /// 1 when the mean angle has to grow, -1 when it has to fall.
    pub(super) way: f32,
    /// The slice it was planned for (kg).
    pub(super) payload_kg: f32,
    /// Time since it began (s).
    pub(super) time_s: f32,
    /// Time for which the estimated tip speed has been above the limit (s).
    pub(super) fast_s: f32,
    /// The arm has come to rest after the crossing, and the setpoint is on its way to where it is to be held.
    pub(super) returning: bool,
    /// The amplitude now (rad).
    amplitude_rad: f32,
    /// Time since it last grew (s).
    since_s: f32,
}

impl Under {
    /// Begins `plan` while the mean angle is `q1`.
    pub(super) fn begin(plan: Crossing, load: &Load<'_>, payload_kg: f32, q1: f32) -> Option<Self> {
        let goal = load.state(plan.to, plan.rest_setpoint).ok()?;
        Some(Self {
            way: if goal.mean_angle_rad > q1 { 1.0 } else { -1.0 },
            plan,
            payload_kg,
            time_s: 0.0,
            fast_s: 0.0,
            returning: false,
            amplitude_rad: plan.amplitude_rad,
            since_s: 0.0,
        })
    }

    /// The reference of an injection about `base`, after `dt_s`.
    pub(super) fn inject(
        &mut self,
        base: f32,
        now: &Estimate,
        settings: &Settings,
        arm: &ArmFacts,
        dt_s: f32,
    ) -> f32 {
        let plan = &self.plan;
        if self.time_s < settings.pull_away * arm.unit_s {
            // Not at once: a tip that leaps slackens the tendon behind it.
            let share = within(self.time_s / (PULL_RAMP * arm.unit_s), 0.0, 1.0);
            return self.limited(base - self.way * share * self.amplitude_rad);
        }
        self.since_s += dt_s;
        if self.since_s > settings.grow_after * arm.unit_s {
            self.since_s = 0.0;
            let most = plan.most_tip_travel_rad;
            self.amplitude_rad = within(1.5 * self.amplitude_rad, 0.0, most);
        }
        self.limited(base + in_phase(self.amplitude_rad, plan.eta, now.q1_rate, arm))
    }

    /// The reference that brakes about `base`.
    pub(super) fn brake(
        &self,
        base: f32,
        now: &Estimate,
        settings: &Settings,
        arm: &ArmFacts,
    ) -> f32 {
        let least = settings.brake_amplitude_rad;
        let planned = self.plan.amplitude_rad;
        let amplitude = if planned > least { planned } else { least };
        self.limited(base - in_phase(amplitude, self.plan.eta, now.q1_rate, arm))
    }

    /// A reference within the travel of the plan.
    pub(super) fn limited(&self, reference: f32) -> f32 {
        let (rest, most) = (self.plan.rest_setpoint, self.plan.most_tip_travel_rad);
        within(reference, rest - most, rest + most)
    }

    /// Whether the mean angle is beyond the pass and on its way; false when the slice is gone.
    pub(super) fn over(&self, load: &Load<'_>, now: &Estimate, settings: &Settings) -> bool {
        let slice = load
            .slices()
            .find(|slice| slice.payload_kg == self.payload_kg);
        let Some((pass, goal)) = slice.and_then(|slice| self.marks(&slice, now.q0)) else {
            return false;
        };
        let line = match self.plan.method {
            Method::Inject => pass + self.way * settings.beyond_pass_rad,
            // Past the fold the pass is where the branch ends, and the arm must have left that for good.
            Method::Lean => 0.5 * (pass + goal),
        };
        self.way * (now.q1 - line) > 0.0 && self.way * now.q1_rate > 0.0
    }

    /// Mean angles of the pass and of the branch to reach, at the tip angle or the nearest that they reach.
    fn marks(&self, slice: &Slice<'_>, q0: f32) -> Option<(f32, f32)> {
        let limits = slice.limits();
        let from = slice.branch(self.plan.from)?;
        let goal = slice.branch(self.plan.to)?;
        let nearest = |from: f32, to: f32| within(q0, from, to);
        let at = nearest(goal.entry.from, goal.entry.to);
        let goal = goal.state(limits, at)?.mean_angle_rad;
        let mut furthest: Option<f32> = None;
        for pass in slice.exits(&from) {
            let at = nearest(pass.entry.from, pass.entry.to);
            let mean = pass.state(limits, at)?.mean_angle_rad;
            // Of several passes the last one on the way.
            let between = self.way * (goal - mean) > 0.0;
            if between && furthest.is_none_or(|before| self.way * (mean - before) > 0.0) {
                furthest = Some(mean);
            }
        }
        Some((furthest?, goal))
    }
}
