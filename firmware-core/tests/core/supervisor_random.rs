//! The control loop under arbitrary readings and requests.

use firmware_core::supervisor::{Events, Input, Measured, Mode, Output, Request, State, step};
use firmware_core::{Payload, Table};
use proptest::prelude::*;
use proptest::test_runner::TestRunner;
use std::cell::Cell;

use crate::arm::{NOMINAL_KG, OFFSET_M, fold, root};
use crate::crossings::draft_with_crossings;
use crate::seed::cases;
use crate::supervisor::{TICK_S, config, pose, request};

/// What the readings do for a while.
#[derive(Clone, Debug)]
enum Readings {
    /// At rest on a branch where the tip is told to be.
    Rest { branch: usize },
    /// The mean angle moves steadily from one branch to another.
    Carried { from: usize, to: usize },
    /// Anything.
    Anything([f32; 4]),
    /// The last ones again.
    Frozen,
    /// One of the four is spoilt, the rest is fine.
    Spoilt { which: usize, value: f32 },
}

#[derive(Clone, Debug)]
struct Part {
    readings: Readings,
    ticks: u32,
    dt_s: f32,
    request: Request,
}

fn number() -> impl Strategy<Value = f32> {
    prop_oneof![
        6 => -2.0f32..2.0,
        2 => -100.0f32..100.0,
        1 => Just(f32::NAN),
        1 => Just(f32::INFINITY),
        1 => Just(f32::NEG_INFINITY),
        1 => Just(f32::MAX),
        1 => Just(-f32::MAX),
        1 => Just(-0.0f32),
        1 => any::<f32>(),
    ]
}

fn readings() -> impl Strategy<Value = Readings> {
    let well = prop_oneof![Just(0usize), Just(2usize)];
    prop_oneof![
        5 => well.clone().prop_map(|branch| Readings::Rest { branch }),
        4 => (well.clone(), well).prop_map(|(from, to)| Readings::Carried { from, to }),
        2 => [number(), number(), number(), number()].prop_map(Readings::Anything),
        1 => Just(Readings::Frozen),
        2 => (0usize..4, number()).prop_map(|(which, value)| Readings::Spoilt { which, value }),
    ]
}

fn any_request() -> impl Strategy<Value = Request> {
    let branch = prop_oneof![
        3 => Just(None),
        2 => Just(Some(0)),
        2 => Just(Some(2)),
        1 => any::<u8>().prop_map(Some),
    ];
    let payload = prop_oneof![
        8 => Just(Payload::Known(NOMINAL_KG)),
        1 => Just(Payload::Unknown),
        1 => number().prop_map(Payload::Known),
    ];
    let setpoint = prop_oneof![4 => -0.1f32..0.1, 2 => number()];
    let flags = (
        prop::bool::weighted(0.7),
        prop::bool::weighted(0.05),
        any::<bool>(),
    );
    (setpoint, branch, payload, flags).prop_map(
        |(setpoint, branch, payload, (swing_permitted, stop, rearm))| Request {
            setpoint,
            branch,
            swing_permitted,
            payload,
            stop,
            rearm,
        },
    )
}

fn parts() -> impl Strategy<Value = Vec<Part>> {
    let dt_s = prop_oneof![12 => Just(TICK_S), 1 => number()];
    let part = (readings(), 1u32..150, dt_s, any_request()).prop_map(
        |(readings, ticks, dt_s, request)| Part {
            readings,
            ticks,
            dt_s,
            request,
        },
    );
    prop::collection::vec(part, 1..8)
}

/// The readings of one tick.
fn measured(readings: &Readings, done: f32, last: Option<&Output>, before: Measured) -> Measured {
    let holding = last.filter(|last| last.mode != Mode::Stopped);
    // The invented arm has both wells only between its folds.
    let most = fold() as f32 - 0.01;
    let x = holding.map_or(0.0, |last| last.setpoint.clamp(-most, most));
    let mean = |branch: usize| root(branch, x.into()) as f32;
    match *readings {
        Readings::Rest { branch } => pose(x, mean(branch), last),
        Readings::Carried { from, to } => {
            pose(x, mean(from) + (mean(to) - mean(from)) * done, last)
        }
        Readings::Anything([tip_angle_rad, mid_angle_rad, tension_a_n, tension_b_n]) => Measured {
            tip_angle_rad,
            mid_angle_rad,
            tension_a_n,
            tension_b_n,
        },
        Readings::Frozen => before,
        Readings::Spoilt { which, value } => {
            let mut sound = pose(x, mean(0), last);
            *[
                &mut sound.tip_angle_rad,
                &mut sound.mid_angle_rad,
                &mut sound.tension_a_n,
                &mut sound.tension_b_n,
            ][which] = value;
            sound
        }
    }
}

#[test]
fn outputs_stay_within_limits_and_modes_on_written_ways() {
    let bytes = draft_with_crossings().bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let config = config(&table);
    let settings = config.settings();
    let limits = table.limits();
    let slice = table.slices().next().expect("one slice");
    let visited = Cell::new(0u32);
    let noticed = Cell::new(Events::NONE);
    let mut runner = TestRunner::new(cases(10_000));
    let strategy = (0usize..5, parts());
    let result = runner.run(&strategy, |(begin_with, parts)| {
        let mut state = State::new();
        let mut before = Measured {
            tip_angle_rad: 0.0,
            mid_angle_rad: -1.5,
            tension_a_n: 13.0,
            tension_b_n: 3.0,
        };
        let mut last: Option<Output> = None;
        let mut armed_before = false;
        // Armed, then with permission to the other side, then carried over, then at rest there.
        let begin = |readings, ticks, rearm| Part {
            readings,
            ticks,
            dt_s: TICK_S,
            request: Request {
                rearm,
                branch: (!rearm).then_some(2),
                swing_permitted: true,
                ..request(0.0)
            },
        };
        let begun = [
            begin(Readings::Rest { branch: 0 }, 120, true),
            begin(Readings::Rest { branch: 0 }, 130, false),
            begin(Readings::Carried { from: 0, to: 2 }, 100, false),
            begin(Readings::Rest { branch: 2 }, 150, false),
        ];
        for part in begun.iter().take(begin_with).chain(&parts) {
            for tick in 0..part.ticks {
                let done = tick as f32 / part.ticks as f32;
                let mut measured = measured(&part.readings, done, last.as_ref(), before);
                if !matches!(part.readings, Readings::Frozen) {
                    measured.tip_angle_rad += 1e-5 * (tick % 3) as f32;
                }
                let input = Input {
                    measured,
                    dt_s: part.dt_s,
                    request: part.request,
                };
                let was = state.mode();
                let output = step(&table, &config, &mut state, &input);
                for tension in [output.tensions.a_n, output.tensions.b_n] {
                    prop_assert!(
                        limits.pretension_n <= tension && tension <= limits.max_tension_n,
                        "{tension} N"
                    );
                }
                prop_assert!(output.setpoint.is_finite() && output.energy_j.is_finite());
                prop_assert!(was.may_become(output.mode), "{was:?} to {:?}", output.mode);
                prop_assert_eq!(output.mode, state.mode());
                if was == Mode::Stopped && output.mode != Mode::Stopped {
                    // Only after an edge of the request, and never while stop is asked for.
                    prop_assert!(part.request.rearm && !part.request.stop || armed_before);
                    prop_assert!(!part.request.stop);
                }
                if part.request.stop {
                    prop_assert_eq!(output.mode, Mode::Stopped);
                }
                if let (Mode::Hold, Mode::Hold, Some(last)) = (was, output.mode, last) {
                    let step = settings.setpoint_rate * 2.0 * TICK_S;
                    prop_assert!((output.setpoint - last.setpoint).abs() <= step * 1.001);
                    // What moves goes towards usable setpoints of its branch.
                    if let Some(branch) = output.branch.filter(|_| output.setpoint != last.setpoint)
                    {
                        let usable = slice.stretch_at(branch, output.setpoint).is_some();
                        let came_from = slice.stretch_at(branch, last.setpoint).is_some();
                        prop_assert!(usable || !came_from);
                    }
                }
                if matches!(output.mode, Mode::Inject | Mode::Lean | Mode::Survey)
                    && was != output.mode
                {
                    prop_assert!(part.request.swing_permitted);
                }
                if output.crossing.is_some() && output.mode == Mode::Inject {
                    let couple = OFFSET_M * (output.tensions.a_n - output.tensions.b_n);
                    prop_assert!(couple.abs() <= 0.2 + 1e-5);
                }
                visited.set(visited.get() | 1 << output.mode as u32);
                noticed.set(noticed.get().with(output.events));
                armed_before = part.request.rearm || armed_before;
                (before, last) = (measured, Some(output));
            }
        }
        Ok(())
    });
    if let Err(error) = result {
        panic!("{error}");
    }
    for mode in [
        Mode::Hold,
        Mode::Survey,
        Mode::Inject,
        Mode::Catch,
        Mode::Stopped,
    ] {
        assert!(
            visited.get() & 1 << mode as u32 != 0,
            "{mode:?} never came up"
        );
    }
    let all = Events::CROSSING_DONE
        .with(Events::KNOCKED_OVER)
        .with(Events::SENSOR_JUMPED)
        .with(Events::SENSOR_FROZEN)
        .with(Events::PERMISSION_WITHDRAWN);
    assert!(noticed.get().contains(all), "{}", noticed.get());
}
