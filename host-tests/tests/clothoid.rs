//! Tip position of the two-coordinate arm, whose curvature is affine: a clothoid, in Fresnel
//! integrals. Abramowitz and Stegun 1964, Table 7.7 (7 decimals; C(1) and S(1) agree with a
//! second-hand quotation, the other points from memory).

use host_tests::arms::UniformArm;
use host_tests::reference::{list, number, parse};
use host_tests::tolerances::{CLOTHOID, CLOTHOID_OF_TWO_MODES, PRINTED_SEVEN_DECIMALS};
use serde_json::Value;
use std::f64::consts::FRAC_PI_2;
use table_gen::rest_states::MOST_MODES;
use table_gen::rest_states::modes::{ModalRod, base_curvature, mean_angle};
use table_gen::rod::Rod;

fn reference() -> Value {
    parse(include_str!("../reference/fresnel_clothoid.json"))
}

/// Curvature modes of the arm with tip angle `q0` and mean angle `q1`.
fn affine(q0: f64, q1: f64) -> [f64; 2] {
    [q0, 3.0 * q0 - 6.0 * q1]
}

fn upright(modes: usize) -> ModalRod {
    ModalRod::new(
        &Rod::new(&UniformArm::with_tip_mass(1.0).held_tip(0.0)),
        modes,
    )
}

#[track_caller]
fn assert_near(found: f64, expected: f64, tolerance: f64, what: &str) {
    assert!(
        (found - expected).abs() <= tolerance,
        "{what}: {found} found, {expected} expected, off by {:e}",
        found - expected
    );
}

#[test]
fn two_coordinate_arm_is_a_clothoid() {
    let (modal, finest) = (upright(2), upright(MOST_MODES));
    for row in list(&reference()["clothoid"]) {
        let (q0, q1) = (number(&row["q0"]), number(&row["q1"]));
        let c = affine(q0, q1);
        let what = format!("q0 {q0}, q1 {q1}");
        assert_near(modal.angle(&c, 1.0), q0, CLOTHOID, &what);
        assert_near(mean_angle(&c), q1, CLOTHOID, &what);
        // q1 from a sensor half way along.
        assert_near(
            (modal.angle(&c, 0.5) + 0.25 * q0) / 1.5,
            q1,
            CLOTHOID,
            &what,
        );
        assert_near(base_curvature(&c), 6.0 * q1 - 2.0 * q0, CLOTHOID, &what);
        let tip = [number(&row["x_tip"]), number(&row["y_tip"])];
        let (x, y) = modal.tip(&c);
        assert_near(x, tip[0], CLOTHOID_OF_TWO_MODES, &what);
        assert_near(y, tip[1], CLOTHOID_OF_TWO_MODES, &what);
        // The same shape among the most modes, for their quadrature has the most nodes.
        let mut c = c.to_vec();
        c.resize(MOST_MODES, 0.0);
        let (x, y) = finest.tip(&c);
        assert_near(x, tip[0], CLOTHOID, &what);
        assert_near(y, tip[1], CLOTHOID, &what);
    }
}

/// An arm straight at the base whose curvature grows evenly turns by `q0 s^2`, and its tip lies at
/// `(S(x), C(x)) / x` with `q0 = pi x^2 / 2`.
#[test]
fn arm_straight_at_the_base_ends_at_the_fresnel_integrals() {
    let modal = upright(MOST_MODES);
    for row in list(&reference()["fresnel"]) {
        let x = number(&row["x"]);
        let q0 = FRAC_PI_2 * x * x;
        let mut c = affine(q0, q0 / 3.0).to_vec();
        c.resize(MOST_MODES, 0.0);
        let (tip_x, tip_y) = modal.tip(&c);
        for (found, key, place) in [(x * tip_y, "C", 0), (x * tip_x, "S", 1)] {
            assert_near(found, number(&row[key]), CLOTHOID, &format!("{key}({x})"));
            let printed = number(&row["book_from_memory"][place]);
            assert_near(
                found,
                printed,
                PRINTED_SEVEN_DECIMALS,
                &format!("printed {key}({x})"),
            );
        }
    }
}
