//! Arms that reach out horizontally: large deflection under a tip load and under their own weight.
//!
//! Tip load: Bisshopp and Drucker, Quart. Appl. Math. 3 (1945) 272-275; Mattiasson, Int. J. Numer.
//! Meth. Eng. 17 (1981) 145-153, Table 1 (printed values from memory). Own weight: the problem of
//! Rohde, Quart. Appl. Math. 11 (1953) 337-338, and Wang, Int. J. Mech. Sci. 28 (1986) 549-559
//! (citations from memory), values computed.

use host_tests::arms::{UniformArm, rest_states, states_at};
use host_tests::reference::{list, number, parse, rows};
use host_tests::tolerances::{PRINTED_FIVE_DECIMALS, REST_STATE};
use serde_json::Value;
use std::f64::consts::FRAC_PI_2;

fn reference() -> Value {
    parse(include_str!("../reference/horizontal_cantilevers.json"))
}

/// Tip deflection, loss of reach and tip slope of the stable shape whose tip sags least: the one that
/// grows out of the unloaded arm. A very soft arm may also rest curled up the other way round.
fn sagging(gamma: f64, tip_fraction: f64) -> [f64; 3] {
    let arm = UniformArm {
        gamma,
        tip_fraction,
        tilt_rad: FRAC_PI_2,
    };
    let rest = rest_states(&arm.applied_couple(0.0));
    let states = states_at(&rest, 0.0);
    let sagging = states
        .iter()
        .filter(|s| s.index == 0)
        .min_by(|a, b| a.tip_angle().abs().total_cmp(&b.tip_angle().abs()))
        .expect("a stable shape");
    let (x, y) = rest.modal.tip(&sagging.c);
    [-y, 1.0 - x, sagging.tip_angle()]
}

fn check(table: &str, tip_fraction: f64) {
    for row in rows(&reference()[table]) {
        let gamma = number(&row["gamma"]);
        let found = sagging(gamma, tip_fraction);
        for (found, key) in found.into_iter().zip(["w_over_L", "u_over_L", "tip_slope"]) {
            let expected = number(&row[key]);
            assert!(
                (found - expected).abs() <= REST_STATE,
                "gamma {gamma}, {key}: {found} found, {expected} expected, off by {:e}",
                found - expected
            );
        }
    }
}

#[test]
fn tip_load_bends_a_horizontal_arm_as_elliptic_integrals_say() {
    check("tip_load", 1.0);
}

#[test]
fn own_weight_bends_a_horizontal_arm_as_high_precision_shooting_says() {
    check("own_weight", 0.0);
}

#[test]
fn tip_load_agrees_with_printed_values_from_memory() {
    let reference = reference();
    let printed = rows(&reference["tip_load"])
        .iter()
        .filter(|row| row.get("book_from_memory_w_u_slope").is_some());
    let mut compared = 0;
    for row in printed {
        let found = sagging(number(&row["gamma"]), 1.0);
        for (found, printed) in found
            .into_iter()
            .zip(list(&row["book_from_memory_w_u_slope"]))
        {
            let printed = number(printed);
            assert!(
                (found - printed).abs() <= PRINTED_FIVE_DECIMALS,
                "load {}: {found} found, {printed} printed",
                row["PL2_EI"]
            );
            compared += 1;
        }
    }
    assert_eq!(compared, 12, "four printed loads of three values");
}
