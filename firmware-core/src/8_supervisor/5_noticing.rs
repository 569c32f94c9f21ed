//! What is noticed, each with the time it must last. The reaction to each is in `9_transitions.rs`: to doubt it is to
//! stop.

use super::config::Settings;
use super::estimates::{Angle, Believable};
use super::hold::within;
use super::inputs_outputs::Measured;
use super::{Events, Mode};
use crate::choice::TensionPair;
use crate::format::Drive;
use crate::table::Limits;

/// How long something has lasted.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Timer(pub(super) f32);

impl Timer {
    /// Runs while `holds`; true on the tick on which it has lasted longer than `limit`.
    fn lasts(&mut self, holds: bool, dt: f32, limit: f32) -> bool {
        if !holds {
            self.0 = 0.0;
            return false;
        }
        let before = self.0 > limit;
        // Saturates where one step no longer counts.
        if self.0 < 1e6 {
            self.0 += dt;
        }
        self.0 > limit && !before
    }
}

/// Both angle sensors, the tensions to expect, and how long what has lasted.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Watch {
    pub(super) tip: Angle,
    pub(super) mid: Angle,
    /// Tensions that the commands lead to; `None` before the first believable reading.
    expected: Option<TensionPair>,
    /// Command and mid angle when the tip angle last changed.
    at_tip_change: (f32, f32),
    /// Tip angle when the mid angle last changed.
    at_mid_change: f32,
    frozen: Timer,
    tension_bad: Timer,
    tension_off: Timer,
    slack: Timer,
    irregular: Timer,
    no_branch: Timer,
    other_branch: Timer,
    not_reached: Timer,
    /// Something that stops has been noticed and has not gone.
    pub(super) in_doubt: bool,
}

impl Watch {
    pub(super) const NEW: Self = Self {
        tip: Angle::NEW,
        mid: Angle::NEW,
        expected: None,
        at_tip_change: (0.0, 0.0),
        at_mid_change: 0.0,
        frozen: Timer(0.0),
        tension_bad: Timer(0.0),
        tension_off: Timer(0.0),
        slack: Timer(0.0),
        irregular: Timer(0.0),
        no_branch: Timer(0.0),
        other_branch: Timer(0.0),
        not_reached: Timer(0.0),
        in_doubt: false,
    };

    /// The time step to reckon with, and whether the given one is irregular for too long.
    pub(super) fn time(&mut self, dt_s: f32, settings: &Settings) -> (f32, Events, bool) {
        let tick_s = settings.tick_s;
        let regular = 0.5 * tick_s <= dt_s && dt_s <= 2.0 * tick_s;
        // Counted in ticks: what the step says is what is in doubt.
        let stop = self
            .irregular
            .lasts(!regular, 1.0, settings.irregular_ticks);
        if regular {
            (dt_s, Events::NONE, stop)
        } else {
            (tick_s, Events::TIME_IRREGULAR, stop)
        }
    }

    /// Takes the readings. `reference` is the tip angle commanded on the tick before, when one was.
    pub(super) fn readings(
        &mut self,
        measured: &Measured,
        limits: &Limits,
        reference: Option<f32>,
        settings: &Settings,
        dt_s: f32,
    ) -> Events {
        let held = limits.drive == Drive::HeldTip;
        let (lo, hi) = if held {
            (limits.setpoint_lo, limits.setpoint_hi)
        } else {
            (0.0, 0.0)
        };
        let tip = Believable {
            from: lo - settings.tip_beyond_rad,
            to: hi + settings.tip_beyond_rad,
            corner_rad_s: settings.tip_filter_rad_s,
        };
        let mid = Believable {
            from: -settings.most_mid_rad,
            to: settings.most_mid_rad,
            corner_rad_s: settings.mid_filter_rad_s,
        };
        let mut events = Events::NONE;
        for (angle, reading, within) in [
            (&mut self.tip, measured.tip_angle_rad, tip),
            (&mut self.mid, measured.mid_angle_rad, mid),
        ] {
            let before = angle.bad_s > settings.sensor_s;
            let doubt = angle.take(reading, within, settings, dt_s);
            if !before && angle.bad_s > settings.sensor_s {
                events |= doubt;
            }
        }
        events |= self.frozen(reference, settings, dt_s);
        events
    }

    fn frozen(&mut self, reference: Option<f32>, settings: &Settings, dt_s: f32) -> Events {
        let (tip, mid) = (self.tip, self.mid);
        let command = reference.unwrap_or(tip.value);
        if tip.same_s <= 0.0 {
            self.at_tip_change = (command, mid.value);
        }
        if mid.same_s <= 0.0 {
            self.at_mid_change = tip.value;
        }
        let most = settings.frozen_rad;
        let tip_should = reference.is_some() && (command - self.at_tip_change.0).abs() > most
            || (mid.value - self.at_tip_change.1).abs() > 3.0 * most;
        let mid_should = (tip.value - self.at_mid_change).abs() > 3.0 * most;
        let frozen = tip_should && tip.same_s > settings.frozen_s
            || mid_should && mid.same_s > settings.frozen_s
            || tip.same_s > settings.still_s
            || mid.same_s > settings.still_s;
        if self.frozen.lasts(frozen, dt_s, 0.0) {
            Events::SENSOR_FROZEN
        } else {
            Events::NONE
        }
    }

    /// Compares the tensions with what the commands lead to. `command` is that of the tick before.
    pub(super) fn tensions(
        &mut self,
        measured: &Measured,
        command: TensionPair,
        settings: &Settings,
        dt_s: f32,
    ) -> Events {
        let read = [measured.tension_a_n, measured.tension_b_n];
        let finite = read.iter().all(|tension| tension.is_finite());
        let most = settings.most_tension_n;
        let believable = read.iter().all(|tension| tension.abs() <= most);
        let mut events = Events::NONE;
        if self.tension_bad.lasts(!believable, dt_s, settings.sensor_s) {
            events |= if finite {
                Events::SENSOR_OUT_OF_RANGE
            } else {
                Events::SENSOR_NOT_FINITE
            };
        }
        if !believable {
            return events;
        }
        let expected = self.expected.get_or_insert(TensionPair {
            a_n: measured.tension_a_n,
            b_n: measured.tension_b_n,
        });
        let share = dt_s / (settings.tension_lag_s + dt_s);
        let reach_n = settings.tension_rate_n_s * dt_s;
        let follow = |from: f32, to: f32| from + within((to - from) * share, -reach_n, reach_n);
        expected.a_n = follow(expected.a_n, command.a_n);
        expected.b_n = follow(expected.b_n, command.b_n);
        let moving = settings.tension_off_per_rate * self.tip.rate.abs();
        let off = |read: f32, expected: f32| {
            let allowed =
                settings.tension_off_n + settings.tension_off_fraction * expected.abs() + moving;
            (read - expected).abs() > allowed
        };
        let either = off(read[0], expected.a_n) || off(read[1], expected.b_n);
        if self.tension_off.lasts(either, dt_s, settings.tension_s) {
            events |= Events::TENSION_NOT_FOLLOWING;
        }
        let least_n = settings.slack_fraction * settings.pretension_n;
        // A moving tip slackens a tendon for a moment.
        let slack = |read: f32, expected: f32| read + moving < least_n && expected > 2.0 * least_n;
        let either = slack(read[0], expected.a_n) || slack(read[1], expected.b_n);
        if self.slack.lasts(either, dt_s, 2.0 * settings.tension_s) {
            events |= Events::TENDON_SLACK;
        }
        events
    }

    /// Whether both tensions are as the commands lead to.
    pub(super) fn tensions_sound(&self) -> bool {
        self.tension_bad.0 <= 0.0 && self.tension_off.0 <= 0.0 && self.slack.0 <= 0.0
    }

    /// What the branch found says. `found` is `None` when the pose belongs to none.
    pub(super) fn branch(
        &mut self,
        mode: Mode,
        on: Option<u8>,
        found: Option<u8>,
        settings: &Settings,
        dt_s: f32,
    ) -> Events {
        let resting = matches!(mode, Mode::Hold | Mode::Survey);
        let mut events = Events::NONE;
        if self
            .no_branch
            .lasts(resting && found.is_none(), dt_s, settings.no_branch_s)
        {
            events |= Events::NO_KNOWN_BRANCH;
        }
        let other = resting && found.is_some() && found != on;
        if self
            .other_branch
            .lasts(other, dt_s, settings.other_branch_s)
        {
            events |= Events::KNOCKED_OVER;
            self.other_branch = Timer(0.0);
        }
        events
    }

    /// Whether the tip is away from where it is told to be, by `off_rad`, for too long.
    pub(super) fn reach(&mut self, off_rad: f32, settings: &Settings, dt_s: f32) -> Events {
        // Written so that NaN counts as away.
        let there = off_rad.abs() <= settings.reach_tolerance_rad;
        if self.not_reached.lasts(!there, dt_s, settings.reach_s) {
            Events::SETPOINT_NOT_REACHED
        } else {
            Events::NONE
        }
    }
}
