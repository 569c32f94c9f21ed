//! The control loop of the firmware against the simulated arm: the greenhouse wand moved, knocked, swung over, stopped.

#[path = "supervisor/loop_with_arm.rs"]
mod loop_with_arm;

use firmware_core::supervisor::{CrossingRefusal, Events, Mode};
use firmware_core::{Answer, Method, Table};
use host_tests::arms::{UniformArm, crossing};
use loop_with_arm::{Loop, TICK_S};
use std::f64::consts::PI;
use table_gen::plan::plant::{
    PlantOptions, SensorFault, SensorName, SensorOptions, Side, TendonOptions,
};
use table_gen::rest_states::modes::ModalRod;
use table_gen::rest_states::two_coordinate::rest_states;
use table_gen::rod::Rod;
use table_gen::table::tabulate;

/// Where the tip may be once it rests (rad): what the trim has not yet taken of the friction.
const ARRIVED_RAD: f64 = 0.04;
/// Highest setpoint of the nominal slice's stretch on branch 0, rounded outwards (rad).
const END_OF_STRETCH_RAD: f32 = 0.103;
/// A knock that carries the wand over at setpoint 0 (N s); it withstands less than 0.1.
const KNOCK_N_S: f64 = 0.3;

/// Sides by the sign of the true mean angle.
fn side(arm: &Loop) -> u8 {
    if arm.mean() < 0.0 { 0 } else { 2 }
}

fn stopped_by(arm: &Loop, event: Events) {
    assert_eq!(arm.last.mode, Mode::Stopped, "{}", arm.seen);
    assert!(arm.seen.contains(event), "{}", arm.seen);
}

#[test]
fn moves_within_usable_setpoints() {
    let mut arm = Loop::at_rest(0, 0.0);
    arm.arm();
    arm.request.setpoint = -0.5;
    let step = arm.config.settings().setpoint_rate * TICK_S as f32;
    let mut before = arm.last.setpoint;
    for _ in 0..6000 {
        arm.tick();
        assert!((arm.last.setpoint - before).abs() <= step * 1.001);
        before = arm.last.setpoint;
    }
    assert_eq!((arm.last.mode, arm.last.branch), (Mode::Hold, Some(0)));
    assert_eq!(arm.last.setpoint, -0.5);
    assert!(
        (arm.plant.tip().angle_rad + 0.5).abs() < ARRIVED_RAD,
        "{}",
        arm.plant.tip().angle_rad
    );
    assert_eq!(arm.seen, Events::REARMED);
}

#[test]
fn goes_only_as_far_as_usable() {
    let mut arm = Loop::at_rest(0, 0.0);
    arm.arm();
    arm.request.setpoint = 1.0;
    for _ in 0..4000 {
        arm.tick();
        assert!(arm.last.setpoint <= END_OF_STRETCH_RAD);
    }
    assert!(matches!(
        arm.last.answer,
        Some(Answer::NotOnThisSide { other: 2, .. })
    ));
    assert_eq!((arm.last.mode, side(&arm)), (Mode::Hold, 0));
    assert!(arm.last.setpoint > END_OF_STRETCH_RAD - 0.002);
}

/// With a tip mass, a stiffness of 0.02 m g L^2 and the tip upside down two coordinates believe in a rest state with mean
/// angle -1.024; the rod has only the one at 2.624.
#[test]
fn is_never_sent_to_a_rest_state_that_only_two_coordinates_believe_in() {
    let mut arm = UniformArm::with_tip_mass(0.02).held_tip(PI);
    arm.spine.damping_ratio = 0.03;
    arm.tendons.max_tension_n = 2000.0;
    let modal = ModalRod::new(&Rod::new(&arm), 2);
    let believed = rest_states(&modal, PI);
    let friend = believed
        .iter()
        .find(|state| state.is_stable() && state.mean_angle() < 0.0);
    assert!((friend.expect("a false friend").mean_angle() + 1.024).abs() < 0.01);

    let made = tabulate(&arm, &|_| {}).expect("the arm can be tabulated");
    let bytes: &'static [u8] = made.bytes.clone().leak();
    let table = Table::new(bytes).expect("a sound table");
    let slice = table.slices().next().expect("a slice");
    let stable: Vec<_> = slice
        .all_at(PI as f32)
        .filter(|state| state.index == 0)
        .collect();
    assert_eq!(stable.len(), 1, "{stable:?}");
    assert!((stable[0].mean_angle_rad - 2.6244).abs() < 0.01);
    let branch = stable[0].branch;
    let mut arm = Loop::on(&made, bytes, branch.into(), PI, PlantOptions::default());
    arm.arm();
    arm.request.swing_permitted = true;
    for other in 0..8 {
        arm.request.branch = Some(other);
        for setpoint in [3.0, PI as f32, 3.3] {
            arm.request.setpoint = setpoint;
            arm.run(0.5);
            assert_eq!(arm.last.branch, Some(branch), "{}", arm.seen);
            assert!(arm.mean() > 2.0, "{}", arm.mean());
        }
    }
    assert_eq!(arm.last.mode, Mode::Hold, "{}", arm.seen);
    assert!(
        !arm.seen
            .any(Events::CROSSING_BEGUN.with(Events::KNOCKED_OVER))
    );
}

#[test]
fn holds_still_with_noisy_late_sensors() {
    let angle = SensorOptions {
        noise: 0.5_f64.to_radians(),
        delay_ticks: 3,
        ..SensorOptions::default()
    };
    let options = PlantOptions {
        tip_angle: angle,
        mid_angle: angle,
        tension: SensorOptions {
            noise: 0.1,
            ..SensorOptions::default()
        },
        ..PlantOptions::default()
    };
    let mut arm = Loop::with(2, 0.3, options);
    arm.arm();
    let mut fastest: f64 = 0.0;
    for _ in 0..8000 {
        arm.tick();
        fastest = fastest.max(arm.plant.tip().speed_m_s());
    }
    assert_eq!((arm.last.mode, arm.last.branch), (Mode::Hold, Some(2)));
    assert_eq!(arm.seen, Events::REARMED);
    assert!(fastest < 0.06, "{fastest}");
}

#[test]
fn swings_over_to_either_side() {
    for (from, to) in [(0, 2), (2, 0)] {
        let mut arm = Loop::at_rest(from.into(), 0.0);
        arm.arm();
        arm.request.branch = Some(to);
        arm.run(1.0);
        assert_eq!(arm.last.refused, Some(CrossingRefusal::NotPermitted));
        assert_eq!((arm.last.mode, side(&arm)), (Mode::Hold, from));
        arm.request.swing_permitted = true;
        assert!(arm.until(Mode::Inject, 5.0), "{}", arm.seen);
        assert_eq!(arm.last.crossing, Some(Method::Inject));
        assert!(arm.until(Mode::Hold, 15.0), "{}", arm.seen);
        assert!(arm.seen.contains(Events::CROSSING_DONE));
        assert_eq!((arm.last.branch, side(&arm)), (Some(to), to));
        arm.run(3.0);
        assert_eq!((arm.last.mode, side(&arm)), (Mode::Hold, to));
        let plan = crossing(from, to);
        assert!(arm.peak_speed_m_s < plan.most_tip_speed_m_s.into());
        assert!(arm.peak_couple_n_m <= f64::from(plan.most_couple_n_m) + 1e-6);
        assert!(arm.farthest_tip_rad < plan.most_tip_travel_rad.into());
        let found = arm.last.surveyed.expect("surveyed before");
        assert!(
            (found.stiffness - 1.0).abs() < 0.04 && found.payload_kg == 0.06,
            "{found:?}"
        );
    }
}

#[test]
fn goes_on_to_the_request_after_a_crossing() {
    let mut arm = Loop::at_rest(0, 0.0);
    arm.arm();
    arm.request.branch = Some(2);
    arm.request.setpoint = 1.0;
    arm.request.swing_permitted = true;
    arm.run(20.0);
    assert_eq!((arm.last.mode, side(&arm)), (Mode::Hold, 2));
    assert_eq!(arm.last.setpoint, 1.0);
    assert!((arm.plant.tip().angle_rad - 1.0).abs() < ARRIVED_RAD);
}

#[test]
fn leans_over() {
    let mut plan = crossing(0, 2);
    plan.method = Method::Lean;
    // Past the fold by 35 %.
    plan.lean_setpoint = 1.35 * 0.402;
    plan.amplitude_rad = 0.3;
    let mut arm = Loop::at_rest(0, 0.0).with_plans(&[plan]);
    arm.arm();
    arm.request.branch = Some(2);
    arm.request.swing_permitted = true;
    assert!(arm.until(Mode::Lean, 5.0), "{}", arm.seen);
    assert!(arm.until(Mode::Hold, 15.0), "{}", arm.seen);
    assert_eq!((arm.last.branch, side(&arm)), (Some(2), 2));
    println!(
        "leaning: tip speed {:.2} m/s, couple {:.3} N m",
        arm.peak_speed_m_s, arm.peak_couple_n_m
    );
}

#[test]
fn notices_being_knocked_over_and_comes_back_when_permitted() {
    let mut arm = Loop::at_rest(0, 0.0);
    arm.arm();
    assert!(arm.plant.knock(KNOCK_N_S));
    arm.run(6.0);
    assert_eq!(side(&arm), 2, "the knock carries the wand over");
    assert!(arm.seen.contains(Events::KNOCKED_OVER), "{}", arm.seen);
    assert_eq!((arm.last.mode, arm.last.branch), (Mode::Hold, Some(2)));
    assert_eq!(arm.last.setpoint, 0.0);
    assert_eq!(arm.last.refused, Some(CrossingRefusal::NotPermitted));
    arm.request.swing_permitted = true;
    arm.run(15.0);
    assert!(arm.seen.contains(Events::CROSSING_DONE), "{}", arm.seen);
    assert_eq!(
        (arm.last.mode, arm.last.branch, side(&arm)),
        (Mode::Hold, Some(0), 0)
    );
}

#[test]
fn stops_where_it_may_not_stay() {
    let mut arm = Loop::at_rest(0, -0.15);
    arm.arm();
    assert!(arm.plant.knock(KNOCK_N_S));
    arm.run(6.0);
    assert_eq!(side(&arm), 2, "the knock carries the wand over");
    stopped_by(&arm, Events::KNOCKED_OVER.with(Events::NO_WAY_BACK));
}

#[test]
fn a_plan_that_is_not_allowed_is_not_made() {
    let mut plan = crossing(0, 2);
    (plan.allowed, plan.successes, plan.trials) = (false, 7, 9);
    let mut arm = Loop::at_rest(0, 0.0).with_plans(&[plan]);
    arm.arm();
    arm.request.branch = Some(2);
    arm.request.swing_permitted = true;
    arm.run(4.0);
    assert_eq!((arm.last.mode, side(&arm)), (Mode::Hold, 0));
    let refusal = CrossingRefusal::NotAllowed {
        successes: 7,
        trials: 9,
    };
    assert_eq!(arm.last.refused, Some(refusal));
}

#[test]
fn a_weak_plan_times_out() {
    let mut plan = crossing(0, 2);
    (plan.amplitude_rad, plan.longest_s) = (0.05, 4.0);
    let mut arm = Loop::at_rest(0, 0.0).with_plans(&[plan]);
    arm.arm();
    arm.request.branch = Some(2);
    arm.request.swing_permitted = true;
    arm.run(10.0);
    stopped_by(&arm, Events::TIMED_OUT);
    assert_eq!(side(&arm), 0);
}

#[test]
fn breaks_off_a_crossing_that_breaks_a_limit() {
    let mut plan = crossing(0, 2);
    plan.most_tip_speed_m_s = 0.4;
    let mut arm = Loop::at_rest(0, 0.0).with_plans(&[plan]);
    arm.arm();
    arm.request.branch = Some(2);
    arm.request.swing_permitted = true;
    arm.run(10.0);
    stopped_by(&arm, Events::LIMIT_BROKEN);
}

#[test]
fn a_survey_refuses_another_payload_than_declared() {
    // Lighter looks like stiffer, within the band, and swings like it; heavier looks like softer than any that was tried.
    for (payload_kg, refused) in [(0.050, false), (0.075, true)] {
        let mut arm = Loop::at_rest(0, 0.0);
        arm.plant.set_payload_kg(payload_kg);
        arm.run(8.0);
        arm.arm();
        arm.request.branch = Some(2);
        arm.request.swing_permitted = true;
        arm.run(8.0);
        let seen = arm.seen;
        assert_eq!(
            seen.contains(Events::SURVEY_REFUSED),
            refused,
            "{payload_kg} kg: {seen}"
        );
        assert_eq!(
            seen.contains(Events::CROSSING_BEGUN),
            !refused,
            "{payload_kg} kg: {seen}"
        );
        let found = arm.last.surveyed.expect("surveyed");
        assert_eq!(found.payload_kg, payload_kg as f32, "{found:?}");
        assert!((found.stiffness - 1.0).abs() < 0.08, "{found:?}");
    }
}

#[test]
fn stops_on_request_and_stays_stopped() {
    let mut arm = Loop::at_rest(0, 0.0);
    arm.arm();
    arm.request.branch = Some(2);
    arm.request.swing_permitted = true;
    assert!(arm.until(Mode::Inject, 5.0));
    arm.run(1.5);
    arm.request.stop = true;
    arm.tick();
    stopped_by(&arm, Events::STOP_REQUESTED);
    arm.request.stop = false;
    for _ in 0..8000 {
        arm.tick();
        assert_eq!(arm.last.mode, Mode::Stopped);
    }
    let speed = arm.plant.tip().speed_m_s();
    assert!(speed < 0.02, "it came to rest: {speed}");
    (arm.request.swing_permitted, arm.request.branch) = (false, None);
    arm.arm();
    assert_eq!(arm.last.branch, Some(side(&arm)));
}

#[test]
fn stops_when_permission_is_withdrawn() {
    let mut arm = Loop::at_rest(0, 0.0);
    arm.arm();
    arm.request.branch = Some(2);
    arm.request.swing_permitted = true;
    assert!(arm.until(Mode::Inject, 5.0));
    arm.run(0.5);
    arm.request.swing_permitted = false;
    arm.run(0.1);
    stopped_by(&arm, Events::PERMISSION_WITHDRAWN);
}

#[test]
fn stops_when_a_sensor_fails() {
    let cases = [
        (
            SensorName::TipAngle,
            SensorFault::Frozen,
            Events::SENSOR_FROZEN,
        ),
        (
            SensorName::MidAngle,
            SensorFault::Frozen,
            Events::SENSOR_FROZEN,
        ),
        (
            SensorName::TipAngle,
            SensorFault::Dropout,
            Events::SENSOR_NOT_FINITE,
        ),
        (
            SensorName::MidAngle,
            SensorFault::Dropout,
            Events::SENSOR_NOT_FINITE,
        ),
        (
            SensorName::Tension(Side::A),
            SensorFault::Dropout,
            Events::SENSOR_NOT_FINITE,
        ),
        (
            SensorName::TipAngle,
            SensorFault::Offset(0.6),
            Events::SENSOR_JUMPED,
        ),
        (
            SensorName::MidAngle,
            SensorFault::Offset(-0.6),
            Events::SENSOR_JUMPED,
        ),
        (
            SensorName::MidAngle,
            SensorFault::Offset(9.0),
            Events::SENSOR_OUT_OF_RANGE,
        ),
        (
            SensorName::Tension(Side::B),
            SensorFault::Offset(20.0),
            Events::TENSION_NOT_FOLLOWING,
        ),
    ];
    for (sensor, fault, event) in cases {
        let mut arm = Loop::at_rest(0, 0.0);
        arm.arm();
        arm.request.setpoint = -0.6;
        arm.run(0.3);
        arm.plant.set_sensor_fault(sensor, fault);
        arm.run(3.0);
        assert!(
            arm.last.mode == Mode::Stopped && arm.seen.contains(event),
            "{sensor:?} {fault:?}: {}",
            arm.seen
        );
        // And the arm has not been driven over meanwhile.
        arm.run(3.0);
        assert_eq!(side(&arm), 0, "{sensor:?} {fault:?}");
    }
}

#[test]
fn stops_when_a_tendon_breaks() {
    for (side, event) in [
        (Side::A, Events::TENSION_NOT_FOLLOWING),
        (Side::B, Events::TENDON_SLACK),
    ] {
        let mut arm = Loop::at_rest(0, 0.0);
        arm.arm();
        arm.plant.break_tendon(side);
        arm.run(1.0);
        stopped_by(&arm, event);
    }
}

#[test]
fn stops_when_the_tip_cannot_be_brought_where_it_should_be() {
    // Guides that take half of the tension away.
    let options = PlantOptions {
        tendons: TendonOptions {
            friction_fraction: 0.9,
            ..TendonOptions::default()
        },
        ..PlantOptions::default()
    };
    let mut arm = Loop::with(0, 0.0, options);
    arm.arm();
    arm.request.setpoint = -1.2;
    arm.run(12.0);
    stopped_by(&arm, Events::SETPOINT_NOT_REACHED);
}
