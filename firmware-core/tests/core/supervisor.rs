//! The control loop on the invented arm: readings by script, every mode and event.

use firmware_core::supervisor::{
    Config, ConfigError, CrossingRefusal, DriveFacts, Events, Input, Measured, Mode, Output,
    Request, State, TRANSITIONS, step,
};
use firmware_core::{Drive, Payload, Table};

use crate::arm::{NOMINAL_KG, OFFSET_M, PRETENSION_N, draft, exact, root};
use crate::crossings::draft_with_crossings;

pub const TICK_S: f32 = 0.01;

pub fn config(table: &Table<'_>) -> Config {
    let drive = DriveFacts {
        tick_s: TICK_S,
        ..DriveFacts::default()
    };
    Config::for_arm(table, &drive).expect("sound settings")
}

pub fn request(setpoint: f32) -> Request {
    Request {
        setpoint,
        branch: None,
        swing_permitted: false,
        payload: Payload::Known(NOMINAL_KG),
        stop: false,
        rearm: false,
    }
}

/// Readings of the arm at rest on a branch with its tip at `x`, tensions as commanded.
pub fn resting(branch: usize, x: f32, output: Option<&Output>) -> Measured {
    let q1 = root(branch, x.into()) as f32;
    pose(x, q1, output)
}

pub fn pose(x: f32, q1: f32, output: Option<&Output>) -> Measured {
    let couple = -0.1 * q1 / OFFSET_M;
    let (a, b) = (couple.max(0.0), (-couple).max(0.0));
    Measured {
        tip_angle_rad: x,
        mid_angle_rad: 1.5 * q1 - 0.25 * x,
        tension_a_n: output.map_or(PRETENSION_N + a, |output| output.tensions.a_n),
        tension_b_n: output.map_or(PRETENSION_N + b, |output| output.tensions.b_n),
    }
}

/// A script that plays readings to the supervisor.
struct Script<'a> {
    table: Table<'a>,
    config: Config,
    state: State,
    request: Request,
    last: Option<Output>,
    seen: Events,
    ticks: u32,
    /// The tip sensor repeats itself.
    dead: bool,
}

impl<'a> Script<'a> {
    fn new(table: Table<'a>) -> Self {
        Self {
            config: config(&table),
            table,
            state: State::new(),
            request: request(0.0),
            last: None,
            seen: Events::NONE,
            ticks: 0,
            dead: false,
        }
    }

    fn read(&mut self, measured: Measured) -> Output {
        self.read_after(measured, TICK_S)
    }

    fn read_after(&mut self, measured: Measured, dt_s: f32) -> Output {
        // A live sensor does not repeat bit by bit.
        self.ticks += 1;
        let mut measured = measured;
        if !self.dead {
            measured.tip_angle_rad += 1e-5 * (self.ticks % 3) as f32;
        }
        let input = Input {
            measured,
            dt_s,
            request: self.request,
        };
        let output = step(&self.table, &self.config, &mut self.state, &input);
        self.last = Some(output);
        self.seen |= output.events;
        output
    }

    /// Rests on a branch at the setpoint held, for some ticks.
    fn rest(&mut self, branch: usize, ticks: u32) -> Output {
        for _ in 0..ticks {
            let x = match self.last {
                Some(last) if last.mode != Mode::Stopped => last.setpoint,
                _ => 0.0,
            };
            self.read(resting(branch, x, self.last.as_ref()));
        }
        self.last.expect("some tick")
    }

    fn armed(mut self, branch: usize) -> Self {
        self.request.rearm = true;
        let output = self.rest(branch, 200);
        assert_eq!(output.mode, Mode::Hold, "{}", self.seen);
        self.request.rearm = false;
        self.seen = Events::NONE;
        self
    }
}

fn with_script(then: impl FnOnce(Script<'_>)) {
    let bytes = draft_with_crossings().bytes();
    then(Script::new(Table::new(&bytes).expect("a sound table")));
}

#[test]
fn begins_stopped_and_is_armed_once() {
    with_script(|mut script| {
        assert_eq!(script.rest(0, 300).mode, Mode::Stopped);
        script.request.rearm = true;
        assert_eq!(script.rest(0, 200).mode, Mode::Hold);
        assert!(script.seen.contains(Events::REARMED));
        script.request.stop = true;
        assert_eq!(script.rest(0, 1).mode, Mode::Stopped);
        script.request.stop = false;
        // The request to arm still stands as it did; it has been used.
        assert_eq!(script.rest(0, 2000).mode, Mode::Stopped);
        script.request.rearm = false;
        script.rest(0, 1);
        script.request.rearm = true;
        assert_eq!(script.rest(0, 200).mode, Mode::Hold);
    });
}

#[test]
fn is_not_armed_in_motion_or_on_no_branch() {
    with_script(|mut script| {
        script.request.rearm = true;
        for tick in 0..1000 {
            let q1 = -1.0 + 0.2 * (0.2 * tick as f32).sin();
            let last = script.last;
            let output = script.read(pose(0.0, q1, last.as_ref()));
            assert_eq!(output.mode, Mode::Stopped);
        }
        assert!(script.seen.contains(Events::REARM_REFUSED));
        script.request.rearm = false;
        // On the pass.
        script.rest(1, 1);
        script.request.rearm = true;
        assert_eq!(script.rest(1, 2000).mode, Mode::Stopped);
    });
}

#[test]
fn holds_with_the_couple_of_the_table() {
    with_script(|script| {
        let mut script = script.armed(0);
        script.request.setpoint = -0.3;
        let output = script.rest(0, 1000);
        assert_eq!((output.mode, output.branch), (Mode::Hold, Some(0)));
        assert_eq!(output.setpoint, -0.3);
        let couple = OFFSET_M * (output.tensions.a_n - output.tensions.b_n);
        let expected = exact(Drive::HeldTip, 0, -0.3)[1] as f32;
        assert!((couple - expected).abs() < 1e-3, "{couple} {expected}");
        assert!(output.reserves.is_some() && output.energy_j != 0.0);
        assert_eq!(script.seen, Events::NONE);
    });
}

#[test]
fn each_doubt_stops() {
    let ok = |last: &Option<Output>| {
        let x = last.map_or(0.0, |last| last.setpoint);
        resting(0, x, last.as_ref())
    };
    type Spoil = fn(&mut Measured, u32);
    let cases: [(Events, Spoil); 9] = [
        (Events::SENSOR_NOT_FINITE, |m, _| m.tip_angle_rad = f32::NAN),
        (Events::SENSOR_NOT_FINITE, |m, _| {
            m.tension_b_n = f32::INFINITY;
        }),
        (Events::SENSOR_OUT_OF_RANGE, |m, _| m.mid_angle_rad = 50.0),
        (Events::SENSOR_OUT_OF_RANGE, |m, _| m.tension_a_n = 1e4),
        (Events::SENSOR_JUMPED, |m, _| m.tip_angle_rad += 1.0),
        (Events::SENSOR_FROZEN, |m, _| m.tip_angle_rad = 0.0),
        (Events::TENSION_NOT_FOLLOWING, |m, _| m.tension_a_n += 30.0),
        (Events::TENDON_SLACK, |m, _| m.tension_b_n = 0.0),
        (Events::SETPOINT_NOT_REACHED, |m, tick| {
            m.tip_angle_rad += 0.3 * (tick as f32 / 100.0).min(1.0);
        }),
    ];
    for (event, spoil) in cases {
        with_script(|script| {
            let mut script = script.armed(0);
            script.request.setpoint = -0.5;
            for tick in 0..1000 {
                script.dead = event == Events::SENSOR_FROZEN;
                let mut measured = ok(&script.last);
                spoil(&mut measured, tick);
                if script.read(measured).mode == Mode::Stopped {
                    break;
                }
            }
            let last = script.last.expect("some tick");
            assert_eq!(last.mode, Mode::Stopped, "{event}: {}", script.seen);
            assert!(script.seen.contains(event), "{event}: {}", script.seen);
            assert_eq!(script.rest(0, 500).mode, Mode::Stopped, "latched");
        });
    }
}

#[test]
fn a_short_disturbance_of_a_sensor_is_bridged() {
    with_script(|script| {
        let mut script = script.armed(0);
        for tick in 0..200 {
            let mut measured = resting(0, 0.0, script.last.as_ref());
            if tick % 20 == 0 {
                measured.tip_angle_rad = f32::NAN;
            }
            assert_eq!(script.read(measured).mode, Mode::Hold);
        }
    });
}

#[test]
fn irregular_time_stops_when_it_goes_on() {
    for dt_s in [0.0, -1.0, f32::NAN, f32::INFINITY, 1.0] {
        with_script(|script| {
            let mut script = script.armed(0);
            let measured = resting(0, 0.0, script.last.as_ref());
            let once = script.read_after(measured, dt_s);
            assert_eq!(once.mode, Mode::Hold);
            assert!(once.events.contains(Events::TIME_IRREGULAR));
            assert_eq!(script.rest(0, 10).mode, Mode::Hold);
            for _ in 0..20 {
                script.read_after(measured, dt_s);
            }
            assert_eq!(script.state.mode(), Mode::Stopped);
        });
    }
}

#[test]
fn on_the_pass_it_is_on_no_known_branch() {
    with_script(|script| {
        let mut script = script.armed(0);
        // Slowly there, so that it is not a jump.
        for tick in 0..1500 {
            let q1 = (-1.0 + 0.01 * tick as f32).min(0.0);
            let last = script.last;
            script.read(pose(0.0, q1, last.as_ref()));
        }
        assert_eq!(script.state.mode(), Mode::Stopped);
        assert!(script.seen.contains(Events::NO_KNOWN_BRANCH));
    });
}

/// Moves the mean angle to that of another branch.
fn carry(script: &mut Script<'_>, from: f32, to: f32) {
    for tick in 0..100 {
        let q1 = from + (to - from) * tick as f32 / 100.0;
        let last = script.last;
        script.read(pose(0.0, q1, last.as_ref()));
    }
}

#[test]
fn knocked_over_it_holds_there_and_comes_back_only_with_permission() {
    with_script(|script| {
        let mut script = script.armed(0);
        carry(&mut script, -1.0, 1.0);
        let output = script.rest(2, 300);
        assert!(script.seen.contains(Events::KNOCKED_OVER));
        assert_eq!((output.mode, output.branch), (Mode::Hold, Some(2)));
        assert_eq!(output.refused, Some(CrossingRefusal::NotPermitted));
        script.request.swing_permitted = true;
        for _ in 0..300 {
            script.rest(2, 1);
            if script.state.mode() == Mode::Inject {
                break;
            }
        }
        assert_eq!(script.state.mode(), Mode::Inject, "{}", script.seen);
        carry(&mut script, 1.0, -1.0);
        assert_eq!(script.state.mode(), Mode::Catch, "{}", script.seen);
        let output = script.rest(0, 300);
        assert!(script.seen.contains(Events::CROSSING_DONE));
        assert_eq!((output.mode, output.branch), (Mode::Hold, Some(0)));
    });
}

#[test]
fn falls_back_and_gives_up_in_the_end() {
    with_script(|script| {
        let mut script = script.armed(0);
        script.request.branch = Some(2);
        script.request.swing_permitted = true;
        for tries in 0..2 {
            for _ in 0..400 {
                script.rest(0, 1);
                if script.state.mode() == Mode::Inject {
                    break;
                }
            }
            assert_eq!(script.state.mode(), Mode::Inject, "{tries} {}", script.seen);
            carry(&mut script, -1.0, 1.0);
            assert_eq!(script.state.mode(), Mode::Catch);
            carry(&mut script, 1.0, -1.0);
        }
        let output = script.rest(0, 500);
        assert!(script.seen.contains(Events::FELL_BACK));
        assert_eq!(output.mode, Mode::Stopped);
    });
}

#[test]
fn a_payload_outside_the_table_moves_nothing() {
    with_script(|script| {
        let mut script = script.armed(0);
        script.request.setpoint = -0.4;
        for payload in [Payload::Known(9.0), Payload::Known(f32::NAN)] {
            script.request.payload = payload;
            let output = script.rest(0, 50);
            assert_eq!((output.mode, output.setpoint), (Mode::Hold, 0.0));
            assert!(output.events.contains(Events::REQUEST_UNUSABLE));
        }
    });
}

#[test]
fn an_applied_couple_is_moved_and_never_swung_over() {
    let bytes = draft(Drive::AppliedCouple, 60.0).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let mut script = Script::new(table);
    let at = |couple: f32, output: Option<&Output>| {
        let q = root(0, couple.into()) as f32;
        Measured {
            tension_a_n: output.map_or(PRETENSION_N, |output| output.tensions.a_n),
            tension_b_n: output.map_or(PRETENSION_N, |output| output.tensions.b_n),
            ..pose(q, q, None)
        }
    };
    script.request.rearm = true;
    for _ in 0..200 {
        let last = script.last;
        script.read(at(0.0, last.as_ref()));
    }
    assert_eq!(script.state.mode(), Mode::Hold, "{}", script.seen);
    script.request.setpoint = -0.2;
    for _ in 0..3000 {
        let last = script.last;
        let couple = last.map_or(0.0, |last| last.setpoint);
        let output = script.read(at(couple, last.as_ref()));
        assert_eq!(output.mode, Mode::Hold, "{}", script.seen);
        assert!((output.setpoint - couple).abs() < 0.02);
    }
    let last = script.last.expect("some tick");
    assert_eq!(last.setpoint, -0.2);
    let couple = OFFSET_M * (last.tensions.a_n - last.tensions.b_n);
    assert!((couple + 0.2).abs() < 1e-3, "{couple}");
    (script.request.branch, script.request.swing_permitted) = (Some(2), true);
    let last = script.last;
    let output = script.read(at(-0.2, last.as_ref()));
    assert_eq!(output.refused, Some(CrossingRefusal::NotForThisDrive));
}

#[test]
fn settings_outside_their_range_are_refused() {
    let bytes = draft_with_crossings().bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let good = config(&table).settings();
    let refused = |change: &dyn Fn(&mut firmware_core::supervisor::Settings)| {
        let mut settings = good;
        change(&mut settings);
        Config::checked(settings, &table).expect_err("refused")
    };
    assert!(matches!(
        refused(&|s| s.kp_n_m_per_rad = f32::NAN),
        ConfigError::Range {
            field: "kp_n_m_per_rad",
            ..
        }
    ));
    assert!(matches!(
        refused(&|s| s.kd_n_m_s_per_rad *= 2.0),
        ConfigError::Damping { .. }
    ));
    assert!(matches!(
        refused(&|s| s.mid_filter_rad_s = 200.0),
        ConfigError::Filter { .. }
    ));
    assert!(matches!(
        refused(&|s| s.pretension_n = 1.0),
        ConfigError::Pretension { .. }
    ));
    assert!(matches!(
        refused(&|s| s.most_tries = 0),
        ConfigError::Range { .. }
    ));
    assert_eq!(
        refused(&|s| s.rest_s = 99.0).to_string(),
        "setting rest_s = 99; 0.01 to 10 is allowed"
    );
}

#[test]
fn events_have_names_and_bits_of_their_own() {
    let all = Events::ALL
        .iter()
        .fold(Events::NONE, |all, (event, _)| all.with(*event));
    assert_eq!(all.bits().count_ones() as usize, Events::ALL.len());
    assert_eq!(all.names().count(), Events::ALL.len());
    assert_eq!(Events::from_bits(u32::MAX), all);
    let two = Events::KNOCKED_OVER.with(Events::TIMED_OUT);
    assert_eq!(two.to_string(), "knocked over, timed out");
    assert!(!two.contains(Events::TABLE_BROKEN) && two.any(Events::TIMED_OUT));
}

#[test]
fn stopped_is_left_only_by_arming() {
    let from_stopped: Vec<Mode> = TRANSITIONS
        .iter()
        .filter(|way| way.from == Mode::Stopped)
        .map(|way| way.to)
        .collect();
    assert_eq!(from_stopped, [Mode::Hold]);
    for mode in [
        Mode::Hold,
        Mode::Survey,
        Mode::Inject,
        Mode::Lean,
        Mode::Catch,
    ] {
        assert!(mode.may_become(Mode::Stopped));
    }
}

#[test]
fn the_state_is_small() {
    assert!(size_of::<State>() <= 512, "{}", size_of::<State>());
}
