//! A couple alone bends a uniform arm into a circle, exactly.

use host_tests::arms::UniformArm;
use host_tests::reference::{number, parse, rows};
use host_tests::tolerances::CIRCLE;
use table_gen::rest_states::curve::Solver;
use table_gen::rest_states::modes::ModalRod;
use table_gen::rest_states::shooting::Shooting;
use table_gen::rod::Rod;

/// So stiff that gravity does not matter: it turns no part of an arm by more than `1 / gamma`, a
/// hundredth of the tolerance.
const WEIGHTLESS: f64 = 100.0 / CIRCLE;

fn rod(tilt_rad: f64) -> Rod {
    let arm = UniformArm {
        gamma: WEIGHTLESS,
        tip_fraction: 0.5,
        tilt_rad,
    };
    Rod::new(&arm.applied_couple(0.0))
}

#[track_caller]
fn assert_near(found: f64, expected: f64, what: &str) {
    assert!(
        (found - expected).abs() <= CIRCLE,
        "{what}: {found} found, {expected} expected, off by {:e}",
        found - expected
    );
}

#[test]
fn couple_alone_bends_the_arm_into_a_circle() {
    let rod = rod(0.0);
    let modal = ModalRod::new(&rod, 6);
    let straight = ModalRod::new(&rod, 6);
    for row in rows(&parse(include_str!("../reference/pure_couple_circle.json"))) {
        let couple = number(&row["ML_EI"]) * WEIGHTLESS;
        let state = Solver::new(&modal)
            .at_setpoint(&[0.0; 6], couple)
            .expect("a rest state");
        assert_eq!(state.index, 0, "a couple alone leaves the arm stable");
        let (x, y) = straight.tip(&state.c);
        assert_near(state.tip_angle(), number(&row["tip_angle"]), "tip angle");
        assert_near(
            state.mean_angle(),
            0.5 * number(&row["tip_angle"]),
            "mean angle",
        );
        assert_near(x, number(&row["x_over_L"]), "tip x");
        assert_near(y, number(&row["y_over_L"]), "tip y");
        let energy = state.energy / WEIGHTLESS;
        assert_near(
            energy,
            number(&row["bending_energy_over_EI_L"]),
            "bending energy",
        );
    }
}

#[test]
fn circle_by_shooting_from_the_base() {
    let rod = rod(2.0);
    for row in rows(&parse(include_str!("../reference/pure_couple_circle.json"))) {
        let couple = number(&row["ML_EI"]);
        let shooting = Shooting::scan(&rod, [-10.0 * WEIGHTLESS, 10.0 * WEIGHTLESS], 1e-6);
        let states = shooting.rest_states(couple * WEIGHTLESS);
        assert_eq!(states.len(), 1, "one rest state at couple {couple}");
        assert_near(states[0].base_curvature, couple, "curvature of the circle");
        assert_near(states[0].tip_angle, number(&row["tip_angle"]), "tip angle");
    }
}
