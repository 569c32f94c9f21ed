//! What must not change: an arm seen in a mirror, an arm of another size, the same arm again.

use firmware_core::{RestState, Slice, Table};
use host_tests::arms::{carry, states_at};
use host_tests::random_arms::{self, setpoints_si, with_setpoints_si};
use host_tests::tolerances::{BESIDE_A_FOLD, SCALED};
use proptest::prelude::*;
use table_gen::arm_file::{Arm, Drive};
use table_gen::rest_states::{RestStates, RestStatesError};
use table_gen::rod::Rod;
use table_gen::table::{Tabulation, TabulationError, tabulate};

/// Stiff enough for few modes, soft enough for several rest states.
const GAMMAS: std::ops::Range<f64> = 0.06..0.5;

fn tabulated(arm: &Arm) -> Result<Tabulation, TestCaseError> {
    tabulate(arm, &|_| {}).map_err(|error| match error {
        TabulationError::RestStates(error) => refused(&error),
        error => TestCaseError::fail(error.to_string()),
    })
}

fn found(arm: &Arm) -> Result<RestStates, TestCaseError> {
    RestStates::find(&Rod::new(arm), &arm.accuracy, arm.gamma()).map_err(|error| refused(&error))
}

/// An arm that is too soft is no case to look at; every other refusal is a fault.
fn refused(error: &RestStatesError) -> TestCaseError {
    match error {
        RestStatesError::TooSoft { .. } => TestCaseError::reject("too soft"),
        error => TestCaseError::fail(error.to_string()),
    }
}

/// Left and right exchanged.
fn mirrored(arm: &Arm) -> Arm {
    let [lo, hi] = setpoints_si(arm);
    let mut arm = with_setpoints_si(arm, [-hi, -lo]);
    arm.base.tilt_rad = -arm.base.tilt_rad;
    arm.spine.rest_curvature_rad_m = arm.spine.rest_curvature_rad_m.scaled(-1.0);
    arm
}

/// `length` times as long and `mass` times as heavy, and stiffer so that gamma stays.
fn scaled(arm: &Arm, length: f64, mass: f64) -> Arm {
    let couple = match arm.drive {
        Drive::HeldTip { .. } => 1.0,
        Drive::AppliedCouple { .. } => mass * length,
    };
    let mut arm = with_setpoints_si(arm, setpoints_si(arm).map(|x| x * couple));
    let spine = &mut arm.spine;
    spine.length_m *= length;
    spine.bending_stiffness_n_m2 = spine.bending_stiffness_n_m2.scaled(mass * length * length);
    spine.mass_per_length_kg_m = spine.mass_per_length_kg_m.scaled(mass / length);
    spine.rest_curvature_rad_m = spine.rest_curvature_rad_m.scaled(1.0 / length);
    arm.lumps.iter_mut().for_each(|lump| lump.mass_kg *= mass);
    let payload_kg = mass * arm.payload.mass_kg;
    carry(&mut arm, payload_kg);
    arm
}

/// A setpoint at the fraction `x` of the range.
fn within([lo, hi]: [f64; 2], x: f64) -> f64 {
    lo * (1.0 - x) + hi * x
}

fn lookups(slice: &Slice, setpoint: f32) -> Vec<RestState> {
    let mut states: Vec<RestState> = slice.all_at(setpoint).collect();
    states.sort_by(|a, b| a.mean_angle_rad.total_cmp(&b.mean_angle_rad));
    states
}

fn near(a: f32, b: f32, tolerance: f32) -> Result<(), TestCaseError> {
    prop_assert!(
        (a - b).abs() <= tolerance,
        "{a} and {b} are further apart than {tolerance}"
    );
    Ok(())
}

/// Both are within their own worst error of states that mirror each other exactly.
fn mirror_each_other(a: &Tabulation, b: &Tabulation, places: &[f64]) -> Result<(), TestCaseError> {
    prop_assert_eq!(
        a.corners.nominal.modal.modes(),
        b.corners.nominal.modal.modes()
    );
    prop_assert_eq!(
        a.corners.nominal.branches.len(),
        b.corners.nominal.branches.len()
    );
    prop_assert_eq!(a.corners.nominal.folds.len(), b.corners.nominal.folds.len());
    prop_assert_eq!(a.usable.stretches.len(), b.usable.stretches.len());
    let tables = [a, b].map(|t| Table::new(&t.bytes).expect("a table"));
    let [left, right] = tables.map(|table| table.slices().next().expect("a slice"));
    let (ea, eb) = (a.worst_error, b.worst_error);
    for &x in places {
        let setpoint = within(setpoints_si(&a.arm), x) as f32;
        let found = lookups(&left, setpoint);
        let mirror = lookups(&right, -setpoint);
        prop_assert_eq!(found.len(), mirror.len(), "rest states at {}", setpoint);
        for (one, other) in found.iter().zip(mirror.iter().rev()) {
            prop_assert_eq!(one.index, other.index);
            near(
                one.mean_angle_rad,
                -other.mean_angle_rad,
                ea.mean_angle_rad + eb.mean_angle_rad,
            )?;
            near(
                one.tip_angle_rad,
                -other.tip_angle_rad,
                ea.tip_angle_rad + eb.tip_angle_rad,
            )?;
            near(
                one.couple_n_m,
                -other.couple_n_m,
                ea.couple_n_m + eb.couple_n_m,
            )?;
            near(one.energy_j, other.energy_j, ea.energy_j + eb.energy_j)?;
            prop_assert_eq!(one.well.is_some(), other.well.is_some());
            if let (Some(one), Some(other)) = (one.well, other.well) {
                near(one.tip_x_m, -other.tip_x_m, ea.tip_m + eb.tip_m)?;
                near(one.tip_y_m, other.tip_y_m, ea.tip_m + eb.tip_m)?;
                prop_assert_eq!(one.barrier_j.is_some(), other.barrier_j.is_some());
            }
        }
    }
    Ok(())
}

proptest! {
    #![proptest_config(random_arms::draws(12))]

    #[test]
    fn mirrored_arm_has_the_mirrored_table(arm in random_arms::arm(GAMMAS), places in proptest::collection::vec(0.0..1.0, 40)) {
        mirror_each_other(&tabulated(&arm)?, &tabulated(&mirrored(&arm))?, &places)?;
    }

    #[test]
    fn same_arm_has_the_same_bytes(arm in random_arms::arm(GAMMAS)) {
        prop_assert_eq!(tabulated(&arm)?.bytes, tabulated(&arm)?.bytes);
    }
}

proptest! {
    #![proptest_config(random_arms::draws(24))]

    #[test]
    fn arm_of_another_size_rests_at_the_same_angles(
        arm in random_arms::arm(GAMMAS),
        length in 0.2..5.0,
        mass in 0.1..10.0,
        places in proptest::collection::vec(0.0..1.0, 10),
    ) {
        let other = scaled(&arm, length, mass);
        prop_assert!((arm.gamma() / other.gamma() - 1.0).abs() < SCALED);
        let (one, two) = (found(&arm)?, found(&other)?);
        prop_assert_eq!(one.modal.modes(), two.modal.modes());
        for x in places {
            let setpoint = within(one.rod.setpoints, x);
            if one.folds.iter().any(|fold| (fold.point.setpoint - setpoint).abs() < BESIDE_A_FOLD) {
                continue;
            }
            let (a, b) = (states_at(&one, setpoint), states_at(&two, setpoint));
            prop_assert_eq!(a.len(), b.len());
            for (a, b) in a.iter().zip(&b) {
                prop_assert_eq!(a.index, b.index);
                for off in [a.mean_angle() - b.mean_angle(), a.tip_angle() - b.tip_angle(), a.energy - b.energy, a.couple - b.couple] {
                    prop_assert!(off.abs() <= SCALED, "off by {off:e} at {setpoint}");
                }
            }
        }
    }

    /// At setpoints that the finished list was never audited at.
    #[test]
    fn shooting_finds_the_listed_rest_states(arm in random_arms::arm(GAMMAS), places in proptest::collection::vec(0.0..1.0, 20)) {
        let rest = found(&arm)?;
        for x in places {
            let setpoint = within(rest.rod.setpoints, x);
            // Nearer to a fold than the modes' distance the two methods may disagree on which side it lies.
            if rest.folds.iter().any(|fold| (fold.point.setpoint - setpoint).abs() < BESIDE_A_FOLD) {
                continue;
            }
            let (states, shots) = (states_at(&rest, setpoint), rest.shooting.rest_states(setpoint));
            let indices: Vec<usize> = states.iter().map(|s| s.index).collect();
            prop_assert_eq!(&indices, &shots.iter().map(|s| s.index).collect::<Vec<_>>(), "at {}", setpoint);
            for (state, shot) in states.iter().zip(&shots) {
                for off in [state.mean_angle() - shot.mean_angle, state.tip_angle() - shot.tip_angle] {
                    prop_assert!(off.abs() <= arm.accuracy.angle_rad, "off by {off:e} at {setpoint}");
                }
                let off = state.couple - shot.couple;
                prop_assert!(off.abs() <= arm.accuracy.couple_fraction, "couple off by {off:e} at {setpoint}");
            }
        }
    }
}
