//! Branches are followed from the nominal arm into the corners, not matched by their angles.

use host_tests::arms::{UniformArm, wand};
use table_gen::arm_file::{Arm, Tolerance};
use table_gen::margins::corners::{CornerArm, Corners, Levels};
use table_gen::margins::requirements::{Assessor, Kind, Look};
use table_gen::margins::usable::Usable;
use table_gen::margins::why::Why;
use table_gen::rest_states::RestStates;
use table_gen::rest_states::curve::{RestPoint, Solver};

/// Steps of the slow way into a corner.
const SLOW_STEPS: usize = 150;
/// Farthest that a rest state moves in one of them unless it has vanished (rad).
const SLOW_MOVE: f64 = 0.15;

fn corners(arm: &Arm) -> Corners {
    Corners::find(arm, Levels::EndsAndMiddle, &|_| {})
        .unwrap_or_else(|error| panic!("{}: {error}", arm.name))
}

/// The fold of the left branch is at 1.0143 with gamma .05, at .3997 with .07 (`folds.json`): at 1.0 the
/// branch is there, with 10 % more stiffness it is not.
#[test]
fn branch_that_vanishes_on_the_way_is_not_usable() {
    let mut arm = UniformArm::with_tip_mass(0.05).held_tip(1.0);
    arm.tolerance = Tolerance {
        stiffness_fraction: 0.1,
    };
    arm.require.setpoint_reserve = 0.0;
    let corners = corners(&arm);
    let assessor = Assessor::new(&arm, &corners);
    let assessed = assessor.assess(1.0, None, None).expect("rest states");
    let mean_angle = |label| {
        let state = corners.nominal_state(label, 1.0).expect("on the branch");
        state.mean_angle()
    };
    let left = assessed
        .iter()
        .find(|a| mean_angle(a.label) < 0.0)
        .expect("there with gamma .05");
    let right = assessed
        .iter()
        .find(|a| mean_angle(a.label) > 0.0)
        .expect("there with any gamma");
    for (corner, (left, right)) in corners
        .arms
        .iter()
        .zip(left.margins.iter().zip(&right.margins))
    {
        let stiffer = corner.corner.stiffness_percent > 0.0;
        assert_eq!(
            *left == Look::Vanished,
            stiffer,
            "left, {:?}",
            corner.corner
        );
        assert!(
            matches!(right, Look::There(_)),
            "right, {:?}",
            corner.corner
        );
    }
    let findings = assessor.findings(left, None);
    let stable = findings
        .iter()
        .find(|f| f.kind == Kind::Stable)
        .expect("always judged");
    assert!(!stable.holds);
    assert!(
        stable
            .corner
            .expect("the corner is named")
            .stiffness_percent
            > 0.0
    );

    let usable = Usable::find(&assessor, &mut |_| {}).expect("rest states");
    let reaches = |label| {
        usable
            .stretches
            .iter()
            .any(|s| s.label == label && s.ends[0] <= 1.0 && 1.0 <= s.ends[1])
    };
    assert!(!reaches(left.label), "the left branch is usable at 1.0");
    assert!(
        reaches(right.label),
        "the right branch is not usable at 1.0"
    );
    // Nearer to the middle it is there in every corner.
    let left_end = usable
        .stretches
        .iter()
        .filter(|s| s.label == left.label)
        .map(|s| s.ends[1])
        .fold(f64::NEG_INFINITY, f64::max);
    assert!(
        left_end > 0.75 && left_end < 1.0,
        "the left branch is usable up to {left_end}"
    );

    let why = Why::new(&arm, 1.0, &|_| {}).expect("rest states");
    for branch in &why.branches {
        assert_eq!(
            branch.usable,
            branch.branch == right.label,
            "branch {}",
            branch.branch
        );
    }
}

/// Barely below the critical stiffness the two shapes lie close together and a slight tilt leaves one. The
/// other is no further away than rest states move between corners: its angle does not tell it from the lost one.
#[test]
fn other_shape_nearby_is_not_taken_for_the_lost_one() {
    let mut arm = UniformArm::with_tip_mass(0.1).held_tip(0.0);
    arm.base.tolerance_rad = 0.02;
    let corners = corners(&arm);
    let assessor = Assessor::new(&arm, &corners);
    let assessed = assessor.assess(0.0, None, None).expect("rest states");
    assert_eq!(assessed.len(), 2, "two shapes side by side");
    let mut lost = 0;
    for assessed in &assessed {
        let own = corners
            .nominal_state(assessed.label, 0.0)
            .expect("on the branch");
        for (corner, look) in corners.arms.iter().zip(&assessed.margins) {
            let states = corner.states(0.0).expect("rest states");
            let wells: Vec<f64> = states
                .states
                .iter()
                .filter(|state| state.index == 0)
                .map(RestPoint::mean_angle)
                .collect();
            let same_side = wells.iter().any(|angle| angle * own.mean_angle() > 0.0);
            match look {
                Look::There(_) => assert!(same_side, "{:?}: taken for {wells:?}", corner.corner),
                Look::Vanished => {
                    lost += 1;
                    assert!(!same_side, "{:?}: {wells:?} overlooked", corner.corner);
                    let away = (wells[0] - own.mean_angle()).abs();
                    println!(
                        "{:?}: lost, the nearest stable shape is {away:.3} rad away",
                        corner.corner
                    );
                    assert!(away < 1.0, "the other shape is near");
                }
                Look::NotLookedAt => panic!("every corner was asked for"),
            }
        }
    }
    assert_eq!(lost, 2, "each shape is lost in one tilt");
}

/// The same way in many small steps, without any control of their length.
fn slowly(nominal: &RestStates, corner: &CornerArm, from: &RestPoint) -> Option<Vec<f64>> {
    let stiffness = 0.01 * corner.corner.stiffness_percent;
    let more_payload = corner.rest.rod.energy_scale_j / nominal.rod.energy_scale_j - 1.0;
    let tilt = corner.corner.tilt_deg.to_radians();
    let mut state = from.clone();
    for step in 1..=SLOW_STEPS {
        let x = step as f64 / SLOW_STEPS as f64;
        let rod = nominal
            .modal
            .varied(1.0 + x * stiffness, x * more_payload, x * tilt);
        let next = Solver::new(&rod).at_setpoint(&state.c, from.setpoint)?;
        let moved = next
            .c
            .iter()
            .zip(&state.c)
            .map(|(a, b)| (a - b).powi(2))
            .sum::<f64>()
            .sqrt();
        if next.index != 0 || moved > SLOW_MOVE {
            return None;
        }
        state = next;
    }
    Some(state.c)
}

#[test]
fn wand_is_followed_into_its_corners_as_if_slowly() {
    let mut arm = wand();
    // Wider tolerances, so that branches vanish on the way.
    arm.tolerance.stiffness_fraction = 0.25;
    arm.base.tolerance_rad = 0.15;
    let corners = corners(&arm);
    let (mut there, mut lost) = (0, 0);
    for k in 0..12 {
        let setpoint = -2.0 + 4.0 * (f64::from(k) * 0.618_033_988_749_894_9).fract();
        for (label, branch) in corners.nominal.branches.iter().enumerate() {
            if branch.index != 0 || !branch.covers(setpoint) {
                continue;
            }
            let from = corners
                .nominal_state(label, setpoint)
                .expect("on the branch");
            for corner in &corners.arms {
                let what = format!("branch {label}, setpoint {setpoint}, {:?}", corner.corner);
                match (
                    corner.follow(&corners.nominal, &from),
                    slowly(&corners.nominal, corner, &from),
                ) {
                    (Some(found), Some(slow)) => {
                        let off = found
                            .iter()
                            .zip(&slow)
                            .map(|(a, b)| (a - b).abs())
                            .fold(0.0, f64::max);
                        assert!(off < 1e-6, "{what}: ends {off:e} rad elsewhere");
                        let states = corner.states(setpoint).expect("rest states");
                        assert!(
                            states.nearest_well(&found).is_some(),
                            "{what}: no rest state of the corner"
                        );
                        there += 1;
                    }
                    (None, None) => lost += 1,
                    (found, slow) => panic!("{what}: {found:?} followed, {slow:?} slowly"),
                }
            }
        }
    }
    println!("{there} followed to their corner, {lost} lost on the way");
    assert!(there > 100 && lost > 10, "both happen");
}
