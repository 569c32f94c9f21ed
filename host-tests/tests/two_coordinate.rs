//! The two-coordinate arm: its rest states against values of 18 digits, and the proof that none is
//! missed against a dense scan.

use host_tests::arms::UniformArm;
use host_tests::random_arms;
use host_tests::reference::{list, number, parse, rows};
use host_tests::tolerances::{DENSE_SCAN, TWO_COORDINATE};
use proptest::prelude::*;
use table_gen::arm_file::Drive;
use table_gen::rest_states::modes::{Evaluation, ModalRod};
use table_gen::rest_states::two_coordinate::rest_states;
use table_gen::rod::Rod;

#[track_caller]
fn assert_near(found: f64, expected: f64, tolerance: f64, what: &str) {
    assert!(
        (found - expected).abs() <= tolerance,
        "{what}: {found} found, {expected} expected, off by {:e}",
        found - expected
    );
}

#[test]
fn every_two_coordinate_rest_state_with_the_tip_held() {
    for row in rows(&parse(include_str!("../reference/two_coordinate.json"))["held_tip"]) {
        let setpoint = number(&row["q0"]);
        let what = format!("gamma {}, tip held at {setpoint:.3}", row["gamma"]);
        let arm = UniformArm::with_tip_mass(number(&row["gamma"])).held_tip(setpoint);
        let modal = ModalRod::new(&Rod::new(&arm), 2);
        let found = rest_states(&modal, setpoint);
        let expected = list(&row["roots"]);
        assert_eq!(found.len(), expected.len(), "{what}: number of rest states");
        let mut at = Evaluation::new(2);
        for (state, expected) in found.iter().zip(expected) {
            assert_near(
                state.mean_angle(),
                number(&expected["q1"]),
                TWO_COORDINATE,
                &what,
            );
            assert_near(state.energy, number(&expected["E"]), TWO_COORDINATE, &what);
            assert_eq!(
                Some(state.is_stable()),
                expected["affine_stable"].as_bool(),
                "{what}: stable"
            );
            modal.evaluate(&state.c, &mut at);
            assert_near(
                at.gradient[0],
                number(&expected["tau"]),
                TWO_COORDINATE,
                &what,
            );
            // Second derivative along q1 = c_0/2 - c_1/6 at fixed c_0.
            assert_near(
                36.0 * at.hessian[(1, 1)],
                number(&expected["d2E"]),
                TWO_COORDINATE,
                &what,
            );
            let (x, y) = modal.tip(&state.c);
            assert_near(x, number(&expected["x"]), TWO_COORDINATE, &what);
            assert_near(y, number(&expected["y"]), TWO_COORDINATE, &what);
        }
    }
}

/// Every `c_1` within `reach` of 0 at which its force vanishes with the tip held, by the sign changes
/// of a dense scan and bisection, mean angles increasing.
fn scanned(modal: &ModalRod, tip_angle: f64, reach: f64) -> Vec<f64> {
    const POINTS: usize = 20_000;
    let mut at = Evaluation::new(2);
    let mut force = |c1: f64| {
        modal.evaluate(&[tip_angle, c1], &mut at);
        at.gradient[1]
    };
    let place = |k: usize| -reach + 2.0 * reach * k as f64 / POINTS as f64;
    let mut found = Vec::new();
    let mut before = force(place(0));
    for k in 1..=POINTS {
        let here = force(place(k));
        if (before < 0.0) != (here < 0.0) {
            let (mut low, mut high) = (place(k - 1), place(k));
            for _ in 0..60 {
                let middle = 0.5 * (low + high);
                if (force(middle) < 0.0) == (before < 0.0) {
                    low = middle
                } else {
                    high = middle
                }
            }
            found.push(0.5 * (low + high));
        }
        before = here;
    }
    // Mean angles increase as c_1 falls.
    found.reverse();
    found
}

proptest! {
    #![proptest_config(random_arms::draws(60))]

    /// Soft arms on purpose: they have many rest states.
    #[test]
    fn dense_scan_finds_what_the_proof_lists(mut arm in random_arms::arm(0.004..0.2), tip_angle in -7.0..7.0) {
        arm.drive = Drive::HeldTip { setpoints_rad: [tip_angle - 0.1, tip_angle + 0.1] };
        let modal = ModalRod::new(&Rod::new(&arm), 2);
        let listed = rest_states(&modal, tip_angle);
        // Bending must balance gravity, rest curvature and the held tip angle: no root lies beyond.
        let (rest, bound) = modal.force_bounds();
        let [coupling, stiffness]: [f64; 2] = [modal.bending()[(1, 0)], modal.bending()[(1, 1)]];
        let pull = rest[1].abs() + bound[1] + (coupling * tip_angle).abs();
        let scan = scanned(&modal, tip_angle, 1.1 * pull / stiffness);
        prop_assert_eq!(listed.len(), scan.len(), "listed {:?}, scanned {:?}", &listed, &scan);
        for (state, c1) in listed.iter().zip(&scan) {
            prop_assert!((state.c[1] - c1).abs() <= DENSE_SCAN, "{} listed, {c1} scanned", state.c[1]);
        }
    }
}
