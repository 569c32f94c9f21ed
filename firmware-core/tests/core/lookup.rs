//! Lookups against the closed form.

use firmware_core::{Drive, LookupError, ParameterMap, Slice, Table};
use proptest::prelude::*;

use crate::arm::{RANGE, draft, exact, fold, scale};
use crate::seed::cases;
use crate::{parameter, tolerance};

/// Setpoints per branch of the dense comparison.
const GRID: u32 = 20_011;

fn first<'a>(table: &Table<'a>) -> Slice<'a> {
    table.slices().next().expect("one slice")
}

/// The largest error of a lookup, the restoring stiffness apart.
fn errors(slice: &Slice<'_>, branch: u8, setpoint: f32) -> (f64, f64) {
    let drive = slice.limits().drive;
    let found = slice.at(branch, setpoint).expect("covered");
    let truth = exact(drive, branch.into(), setpoint.into());
    let conjugate = match drive {
        Drive::HeldTip => found.couple_n_m,
        Drive::AppliedCouple => found.tip_angle_rad,
    };
    let mut values = vec![found.mean_angle_rad, conjugate, found.energy_j];
    assert_eq!(found.well.is_some(), branch != 1);
    values.extend(
        found
            .well
            .iter()
            .flat_map(|well| [well.tip_x_m, well.tip_y_m]),
    );
    let error = |(value, exact): (&f32, f64)| (f64::from(*value) - exact).abs();
    let worst = values.iter().zip(truth).map(error).fold(0.0, f64::max);
    let stiffness = found.well.map(|well| well.restoring_n_m_per_rad);
    (
        worst,
        stiffness.map_or(0.0, |value| error((&value, truth[5]))),
    )
}

#[test]
fn agrees_with_the_closed_form_on_a_dense_grid() {
    for drive in [Drive::HeldTip, Drive::AppliedCouple] {
        let bytes = draft(drive, 60.0).bytes();
        let table = Table::new(&bytes).expect("a sound table");
        let slice = first(&table);
        let (mut worst, mut worst_stiffness) = (0f64, 0f64);
        for branch in slice.branches() {
            let (from, to) = (branch.entry.from, branch.entry.to);
            // Without the very ends, which the next test looks at.
            for step in 1..GRID {
                let setpoint = from + (to - from) * step as f32 / GRID as f32;
                let (error, stiffness) = errors(&slice, branch.number, setpoint);
                worst = worst.max(error);
                worst_stiffness = worst_stiffness.max(stiffness);
            }
        }
        println!("{drive:?}: worst error {worst:e}, of the stiffness {worst_stiffness:e}");
        assert!(worst <= tolerance::LOOKUP && worst_stiffness <= tolerance::STIFFNESS);
    }
}

#[test]
fn agrees_with_the_closed_form_up_to_the_folds() {
    for drive in [Drive::HeldTip, Drive::AppliedCouple] {
        let bytes = draft(drive, 60.0).bytes();
        let table = Table::new(&bytes).expect("a sound table");
        let slice = first(&table);
        let mut worst = 0f64;
        for (branch, upper) in [(0, true), (1, true), (1, false), (2, false)] {
            let mut setpoint = fold() as f32;
            for _ in 0..2000 {
                let side = if upper { setpoint } else { -setpoint };
                worst = worst.max(errors(&slice, branch, side).0);
                setpoint = setpoint.next_down();
            }
        }
        println!("{drive:?}: worst error at the folds {worst:e}");
        assert!(worst <= tolerance::AT_FOLD);
        // A tolerance that nothing comes near is too loose.
        assert!(worst >= tolerance::AT_FOLD / 20.0);
    }
}

#[test]
fn setpoint_and_conjugate_are_told_apart_by_the_drive() {
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let held = first(&table).at(2, 0.5).expect("covered");
    assert_eq!(held.tip_angle_rad, 0.5);
    let bytes = draft(Drive::AppliedCouple, 60.0).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let applied = first(&table).at(2, 0.5).expect("covered");
    assert_eq!(applied.couple_n_m, 0.5);
}

#[test]
fn the_barrier_counts_the_work_of_the_drive() {
    for drive in [Drive::HeldTip, Drive::AppliedCouple] {
        let bytes = draft(drive, 60.0).bytes();
        let table = Table::new(&bytes).expect("a sound table");
        let slice = first(&table);
        let potential = |branch, x: f64| {
            let q = exact(drive, branch, x)[0];
            scale(drive) * (q.powi(4) / 4.0 - q * q / 2.0 - x * q)
        };
        for setpoint in [-0.35f32, -0.1, 0.0, 0.2, 0.35] {
            for branch in [0, 2] {
                let state = slice.at(branch, setpoint).expect("covered");
                let barrier = state.well.and_then(|well| well.barrier_j);
                let barrier = f64::from(barrier.expect("a pass at this setpoint"));
                let x = f64::from(setpoint);
                let exact = potential(1, x) - potential(branch.into(), x);
                assert!(
                    (barrier - exact).abs() <= tolerance::LOOKUP,
                    "{setpoint} {branch}"
                );
            }
        }
        let beyond = slice.at(2, 0.9).expect("covered").well.expect("stable");
        assert_eq!(beyond.barrier_j, None, "there is no pass beyond the fold");
    }
}

#[test]
fn every_branch_at_a_setpoint_is_listed() {
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let slice = first(&table);
    let numbers = |setpoint| -> Vec<u8> { slice.all_at(setpoint).map(|s| s.branch).collect() };
    assert_eq!(numbers(0.0), [0, 1, 2]);
    assert_eq!(numbers(0.9), [2]);
    assert_eq!(numbers(-0.9), [0]);
    assert!(numbers(1.5).is_empty() && numbers(f32::NAN).is_empty());
}

#[test]
fn what_cannot_be_looked_up_says_why() {
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let slice = first(&table);
    for setpoint in [f32::NAN, f32::INFINITY, f32::NEG_INFINITY] {
        assert_eq!(slice.at(0, setpoint), Err(LookupError::NotFinite));
    }
    let missing = LookupError::NoSuchBranch { branch: 3 };
    assert_eq!(slice.at(3, 0.0), Err(missing));
    let outside = LookupError::OutsideBranch {
        setpoint: 0.5,
        from: RANGE.0 as f32,
        to: fold() as f32,
    };
    assert_eq!(slice.at(0, 0.5), Err(outside));
}

proptest! {
    #![proptest_config(cases(500))]

    #[test]
    fn the_two_parameter_maps_agree(
        from in -10f32..10.0, span in 1e-3f32..10.0, u in 0f32..=1.0, fold_from: bool, fold_to: bool,
    ) {
        let map = ParameterMap { anchor_from: from, anchor_to: from + span, fold_from, fold_to };
        prop_assume!(map.anchor_from < map.anchor_to);
        let setpoint = (from + u * span).clamp(map.anchor_from, map.anchor_to);
        let exact = parameter::parameter(&map, setpoint.into());
        prop_assert!((f64::from(map.t(setpoint)) - exact).abs() <= tolerance::PARAMETER);
        let back = parameter::setpoint(&map, exact);
        prop_assert!((back - f64::from(setpoint)).abs() <= tolerance::PARAMETER_INVERSE);
    }

    #[test]
    fn whatever_is_asked_the_answer_is_finite(branch: u8, setpoint in any::<f32>()) {
        let bytes = draft(Drive::HeldTip, 60.0).bytes();
        let table = Table::new(&bytes).expect("a sound table");
        match first(&table).at(branch, setpoint) {
            Ok(state) => prop_assert!(state.mean_angle_rad.is_finite() && state.energy_j.is_finite()),
            Err(LookupError::NotFinite) => prop_assert!(!setpoint.is_finite()),
            Err(_) => prop_assert!(branch > 2 || setpoint.abs() > 0.3),
        }
    }
}
