//! An arm near a cusp: two folds 1.7e-4 m g L apart, a stretch of curve that one long step passes over.

use host_tests::arms::{carry, plain};
use table_gen::arm_file::{Accuracy, Arm, Drive, Lump, Profile};
use table_gen::rest_states::shooting::Shooting;
use table_gen::rest_states::{RestStates, RestStatesError};
use table_gen::rod::Rod;

/// Invented, as a random draw found it.
fn near_a_cusp() -> Arm {
    let profile =
        |knots: &[(f64, f64)]| Profile::from_knots(knots.to_vec()).expect("knots in order");
    let mut arm = plain();
    arm.spine.length_m = 0.8493075086508319;
    arm.spine.bending_stiffness_n_m2 = profile(&[
        (0.0, 1.0495294766856689),
        (0.5, 1.228715859484784),
        (1.0, 0.8603654595525251),
    ]);
    arm.spine.mass_per_length_kg_m =
        profile(&[(0.0, 0.49559553946441853), (1.0, 0.30646194660977755)]);
    arm.spine.rest_curvature_rad_m =
        profile(&[(0.0, 0.6940104807846058), (1.0, -1.021141018843479)]);
    arm.lumps = vec![Lump {
        at: 0.9291755315096408,
        mass_kg: 0.1084261387684612,
    }];
    carry(&mut arm, 0.22312011109901567);
    arm.base.tilt_rad = -0.8299071001086896;
    arm.drive = Drive::AppliedCouple {
        setpoints_n_m: [-0.194327117737628, 2.481960559856655],
    };
    arm.accuracy = Accuracy {
        angle_rad: 1e-3,
        couple_fraction: 5e-3,
    };
    arm
}

/// Both folds are listed, or the refusal says that the audit failed: gamma is .23, the arm is not soft.
#[test]
fn folds_close_together_are_listed_or_the_audit_says_so() {
    let arm = near_a_cusp();
    let rod = Rod::new(&arm);
    let exact = Shooting::scan(&rod, rod.setpoints, 1e-8);
    assert_eq!(exact.folds().len(), 2);
    match RestStates::find(&rod, &arm.accuracy, arm.gamma()) {
        Ok(rest) => assert_eq!(rest.folds.len(), 2),
        Err(error) => assert!(
            matches!(error, RestStatesError::AuditFailed { .. }),
            "{error}"
        ),
    }
}
