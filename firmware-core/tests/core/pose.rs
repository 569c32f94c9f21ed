//! Which well a pose belongs to.

use firmware_core::{Drive, Payload, Pose, PoseError, Seat, which_branch};
use proptest::prelude::*;

use crate::arm::{
    Draft, MEAN_ERROR_RAD, NOMINAL_KG, draft, draft_with_payloads, exact, fold, root, with_load,
};
use crate::seed::cases;
use crate::tolerance;

fn locate(setpoint: f32, mean: f32) -> Result<Seat, PoseError> {
    locate_with(Drive::HeldTip, setpoint, setpoint, mean)
}

fn locate_with(drive: Drive, setpoint: f32, tip: f32, mean: f32) -> Result<Seat, PoseError> {
    let pose = Pose {
        tip_angle_rad: tip,
        mean_angle_rad: mean,
    };
    find(
        &draft(drive, 60.0),
        Payload::Known(NOMINAL_KG),
        setpoint,
        pose,
    )
}

fn find(draft: &Draft, payload: Payload, setpoint: f32, pose: Pose) -> Result<Seat, PoseError> {
    with_load(draft, payload, |load| which_branch(load, setpoint, pose))
}

#[test]
fn a_pose_belongs_to_the_well_on_its_side_of_the_pass() {
    let seat = locate(0.1, 0.9).expect("clear");
    let (rest, pass) = (root(2, 0.1) as f32, root(1, 0.1) as f32);
    assert_eq!(seat.branch, 2);
    let near = |a: f32, b: f32| f64::from((a - b).abs()) <= tolerance::LOOKUP;
    assert!(near(seat.off_rad, 0.9 - rest), "{seat:?}");
    assert!(
        near(seat.to_pass_rad.expect("a pass"), 0.9 - pass),
        "{seat:?}"
    );
    assert_eq!(seat.tip_off_rad, 0.0);
    assert_eq!(locate(0.1, -0.9).expect("clear").branch, 0);
    // Beyond the outermost wells too.
    assert_eq!(locate(0.1, -3.0).expect("clear").branch, 0);
    assert_eq!(locate(0.1, 3.0).expect("clear").branch, 2);
}

#[test]
fn at_the_pass_nobody_can_tell() {
    let pass = root(1, 0.1) as f32;
    for off in [0.0, 0.9 * MEAN_ERROR_RAD, -0.9 * MEAN_ERROR_RAD] {
        let expected = PoseError::Unclear {
            mean_angle_rad: pass + off,
            lower: Some(0),
            upper: Some(2),
        };
        assert_eq!(locate(0.1, pass + off), Err(expected));
    }
    assert_eq!(
        locate(0.1, pass + 1.1 * MEAN_ERROR_RAD)
            .expect("clear")
            .branch,
        2
    );
    assert_eq!(
        locate(0.1, pass - 1.1 * MEAN_ERROR_RAD)
            .expect("clear")
            .branch,
        0
    );
}

#[test]
fn the_only_well_takes_every_pose() {
    for mean in [-2.0, 0.0, 2.0] {
        let seat = locate(0.9, mean).expect("clear");
        assert_eq!((seat.branch, seat.to_pass_rad), (2, None));
    }
}

#[test]
fn an_applied_couple_has_its_own_tip_angle() {
    let x = -0.2;
    let tip = exact(Drive::AppliedCouple, 0, x)[1] as f32;
    let seat = locate_with(Drive::AppliedCouple, x as f32, tip + 0.05, tip).expect("clear");
    assert_eq!(seat.branch, 0);
    assert!(f64::from((seat.tip_off_rad - 0.05).abs()) <= tolerance::LOOKUP);
}

#[test]
fn without_a_pass_between_two_wells_nobody_can_tell() {
    let mut draft = draft(Drive::HeldTip, 60.0);
    // A hilltop instead of the pass.
    draft.slices[0].branches[1].0.index = 2;
    for well in [0, 2] {
        draft.slices[0].branches[well].0.exits = 0;
    }
    let pose = Pose {
        tip_angle_rad: 0.0,
        mean_angle_rad: 0.8,
    };
    let found = find(&draft, Payload::Unknown, 0.0, pose);
    assert!(matches!(
        found,
        Err(PoseError::Unclear {
            lower: Some(0),
            upper: Some(2),
            ..
        })
    ));
}

#[test]
fn without_a_well_there_is_no_answer() {
    let mut draft = draft(Drive::HeldTip, 60.0);
    draft.slices[0].branches.swap(0, 1);
    draft.slices[0].branches.truncate(1);
    draft.slices[0].stretches.clear();
    let pose = Pose {
        tip_angle_rad: 0.0,
        mean_angle_rad: 0.0,
    };
    let none = PoseError::NoStable { setpoint: 0.0 };
    assert_eq!(find(&draft, Payload::Unknown, 0.0, pose), Err(none));
    let outside = PoseError::OutsideTable {
        setpoint: 0.7,
        from: -1.0,
        to: 1.0,
    };
    assert_eq!(find(&draft, Payload::Unknown, 0.7, pose), Err(outside));
}

/// The mean angles of the heaviest payload's branches are turned by `turn` (rad).
fn turned(turn: f32) -> Draft {
    let mut draft = draft_with_payloads(60.0);
    for (entry, knots) in &mut draft.slices[2].branches {
        for knot in knots.chunks_mut(entry.floats_per_knot()) {
            knot[1] += turn;
        }
    }
    draft
}

#[test]
fn slices_that_can_tell_must_agree() {
    let pose = |mean_angle_rad| Pose {
        tip_angle_rad: 0.0,
        mean_angle_rad,
    };
    // With the heaviest payload the pass lies 0.3 rad higher: in between, the slices disagree.
    let draft = turned(0.3);
    let find = |payload, mean| find(&draft, payload, 0.0, pose(mean));
    let branch = |payload, mean| find(payload, mean).map(|seat| seat.branch);
    for payload in [Payload::Unknown, Payload::Known(0.07)] {
        assert_eq!(branch(payload, 0.9), Ok(2));
        assert_eq!(branch(payload, -0.9), Ok(0));
        let unclear = PoseError::Unclear {
            mean_angle_rad: 0.15,
            lower: Some(0),
            upper: Some(2),
        };
        assert_eq!(branch(payload, 0.15), Err(unclear));
        // On the pass of one slice the other one tells.
        assert_eq!(branch(payload, 0.0), Ok(0));
        assert_eq!(branch(payload, 0.3), Ok(2));
    }
    assert_eq!(branch(Payload::Known(0.05), 0.15), Ok(2));
    assert_eq!(branch(Payload::Known(0.08), 0.15), Ok(0));
    // The nearest pass of any slice; the rest state of the nominal one or the interpolated one.
    let near = |a: f32, b: f32| f64::from((a - b).abs()) <= tolerance::LOOKUP;
    for (payload, rest) in [(Payload::Unknown, 1.0), (Payload::Known(0.07), 1.15)] {
        let seat = find(payload, 0.9).expect("clear");
        assert!(near(seat.off_rad, 0.9 - rest), "{seat:?}");
        assert!(near(seat.to_pass_rad.expect("a pass"), 0.6), "{seat:?}");
    }
}

#[test]
fn a_branch_that_the_nominal_payload_lacks_is_found_too() {
    let mut draft = draft_with_payloads(60.0);
    // Without its lower well the nominal arm has one place to be, the others have two.
    let nominal = &mut draft.slices[1];
    nominal.branches.drain(..2);
    nominal.branches[0].0.exits = 0;
    nominal.stretches.remove(0);
    let pose = Pose {
        tip_angle_rad: 0.0,
        mean_angle_rad: -0.9,
    };
    let disagree = find(&draft, Payload::Unknown, 0.0, pose);
    let unclear = PoseError::Unclear {
        mean_angle_rad: -0.9,
        lower: Some(0),
        upper: Some(2),
    };
    assert_eq!(disagree, Err(unclear));
    // It says nothing where it has no branch at all, and the others decide.
    let below = find(&draft, Payload::Unknown, -0.5, pose).expect("clear");
    assert_eq!(below.branch, 0);
    let rest = root(0, -0.5) as f32;
    assert!(f64::from((below.off_rad - (-0.9 - rest)).abs()) <= tolerance::LOOKUP);
}

proptest! {
    #![proptest_config(cases(500))]

    #[test]
    fn a_pose_is_never_put_beyond_the_pass(
        setpoint in prop_oneof![-1f32..1.0, any::<f32>()],
        mean in prop_oneof![-2f32..2.0, any::<f32>()],
    ) {
        let found = locate(setpoint, mean);
        if !(setpoint.is_finite() && mean.is_finite()) {
            prop_assert_eq!(found, Err(PoseError::NotFinite));
        } else if setpoint.abs() > 1.0 {
            let outside = matches!(found, Err(PoseError::OutsideTable { .. }));
            prop_assert!(outside, "{:?}", found);
        } else if f64::from(setpoint.abs()) < fold() - tolerance::NEAR_FOLD {
            let pass = root(1, setpoint.into()) as f32;
            match found {
                Ok(seat) if mean < pass => prop_assert_eq!(seat.branch, 0),
                Ok(seat) => prop_assert_eq!(seat.branch, 2),
                Err(_) => prop_assert!((mean - pass).abs() < 1.1 * MEAN_ERROR_RAD),
            }
        }
    }
}
