//! `table-gen equilibria --json` as a script reads it: the keys, the units, and which stable states of
//! the two-coordinate model are false.

use host_tests::program::table_gen;
use host_tests::reference::{list, number, parse, rows};
use host_tests::tolerances::{PRINTED_FOUR_DECIMALS, PRINTED_THREE_DECIMALS, REST_STATE};
use serde_json::Value;
use std::f64::consts::PI;
use std::process::Command;
use table_gen::arm_file::STANDARD_GRAVITY_M_S2;

const LENGTH_M: f64 = 0.5;
const MASS_KG: f64 = 0.2;
/// m g L (J).
const SCALE_J: f64 = MASS_KG * STANDARD_GRAVITY_M_S2 * LENGTH_M;

/// An upright arm; the file's own drive is the other one on purpose where a couple is asked for.
fn arm_file(gamma: f64, tip_fraction: f64) -> String {
    let (angle_deg, couple_percent) = if gamma < 0.03 {
        (SOFT_ANGLE_DEG, SOFT_COUPLE_PERCENT)
    } else {
        (ANGLE_DEG, COUPLE_PERCENT)
    };
    let stiffness = gamma * SCALE_J * LENGTH_M;
    let (payload, per_length) = (
        tip_fraction * MASS_KG,
        (1.0 - tip_fraction) * MASS_KG / LENGTH_M,
    );
    format!(
        "name = \"upright\"\n[spine]\nlength_m = {LENGTH_M}\nbending_stiffness_n_m2 = {stiffness:e}\n\
         mass_per_length_kg_m = {per_length:e}\nthickness_m = 0.001\nallowed_strain = 0.01\ndamping_ratio = 0.03\n\
         [payload]\nmass_kg = {payload:e}\n[base]\ntilt_deg = 0.0\n\
         [tendons]\noffset_m = 0.01\npretension_n = 1.0\nmax_tension_n = 100.0\n\
         [drive]\nkind = \"held-tip\"\nsetpoints_deg = [-30.0, 30.0]\n\
         [accuracy]\nangle_deg = {angle_deg:e}\ncouple_percent = {couple_percent:e}\n"
    )
}

/// Accuracy asked: 1e-7 rad and m g L.
const ANGLE_DEG: f64 = 6e-6;
const COUPLE_PERCENT: f64 = 1e-5;
/// Of soft arms, which the most modes reach.
const SOFT_ANGLE_DEG: f64 = 0.03;
const SOFT_COUPLE_PERCENT: f64 = 0.05;

/// What the program prints for one setpoint.
fn equilibria(arm_file: &str, setpoint: [&str; 2]) -> Value {
    let dir = tempfile::tempdir().expect("a temporary directory");
    let path = dir.path().join("arm.toml");
    std::fs::write(&path, arm_file).expect("the file is written");
    let output = Command::new(table_gen())
        .arg("equilibria")
        .arg(&path)
        .args(setpoint)
        .arg("--json")
        .output()
        .expect("table-gen runs");
    let message = String::from_utf8_lossy(&output.stderr);
    assert_eq!(output.status.code(), Some(0), "{message}");
    parse(&String::from_utf8(output.stdout).expect("JSON is UTF-8"))
}

fn held_at(gamma: f64, tip_fraction: f64, tip_angle_rad: f64) -> Value {
    let tip_angle_deg = tip_angle_rad.to_degrees().to_string();
    equilibria(
        &arm_file(gamma, tip_fraction),
        ["--hold-tip-deg", &tip_angle_deg],
    )
}

#[track_caller]
fn assert_near(found: f64, expected: f64, tolerance: f64) {
    assert!(
        (found - expected).abs() <= tolerance,
        "{found} found, {expected} expected, off by {:e}",
        found - expected
    );
}

/// The keys of a JSON object in alphabetical order.
fn keys(value: &Value) -> Vec<&str> {
    let mut keys: Vec<&str> = value
        .as_object()
        .expect("an object")
        .keys()
        .map(String::as_str)
        .collect();
    keys.sort_unstable();
    keys
}

#[test]
fn keys_are_the_documented_ones() {
    let found = held_at(0.05, 1.0, 0.0);
    let top = [
        "degree_sum",
        "drive",
        "equilibria",
        "gamma",
        "modes",
        "setpoint",
        "two_coordinate",
    ];
    assert_eq!(keys(&found), top);
    let state = [
        "barrier_j",
        "couple_n_m",
        "energy_j",
        "index",
        "mean_angle_rad",
        "stable",
        "tip_angle_rad",
        "tip_x_m",
        "tip_y_m",
    ];
    for equilibrium in list(&found["equilibria"]) {
        assert_eq!(keys(equilibrium), state);
    }
    for model in list(&found["two_coordinate"]) {
        assert_eq!(
            keys(model),
            ["confirmed", "mean_angle_rad", "stable", "tip_angle_rad"]
        );
    }
}

/// Compares the rest states of a row of the reference with what is printed, in SI.
fn compare(
    found: &Value,
    row: &Value,
    tip_angle: impl Fn(&Value) -> f64,
    couple: impl Fn(&Value) -> f64,
) {
    let mut expected = list(&row["equilibria"]).to_vec();
    expected.sort_by(|a, b| number(&a["q1"]).total_cmp(&number(&b["q1"])));
    assert_eq!(found["degree_sum"], 1);
    assert_near(number(&found["gamma"]), number(&row["gamma"]), REST_STATE);
    let states = list(&found["equilibria"]);
    assert_eq!(states.len(), expected.len(), "rest states");
    for (state, expected) in states.iter().zip(&expected) {
        assert_eq!(state["index"], expected["index"]);
        assert_eq!(state["stable"], expected["index"] == 0);
        assert_near(
            number(&state["tip_angle_rad"]),
            tip_angle(expected),
            REST_STATE,
        );
        assert_near(
            number(&state["mean_angle_rad"]),
            number(&expected["q1"]),
            REST_STATE,
        );
        assert_near(
            number(&state["couple_n_m"]) / SCALE_J,
            couple(expected),
            REST_STATE,
        );
        assert_near(
            number(&state["energy_j"]) / SCALE_J,
            number(&expected["E"]),
            REST_STATE,
        );
        assert_near(
            number(&state["tip_x_m"]) / LENGTH_M,
            number(&expected["x"]),
            REST_STATE,
        );
        assert_near(
            number(&state["tip_y_m"]) / LENGTH_M,
            number(&expected["y"]),
            REST_STATE,
        );
        let pass = expected_pass(row);
        match (state["stable"].as_bool(), pass) {
            (Some(true), Some(pass)) => {
                let potential = |e: &Value| number(&e["E"]) - applied(row) * tip_angle(e);
                let barrier = number(&state["barrier_j"]) / SCALE_J;
                assert_near(
                    barrier,
                    potential(&pass) - potential(expected),
                    2.0 * REST_STATE,
                );
            }
            _ => assert!(
                state["barrier_j"].is_null(),
                "no barrier without a pass, nor of a pass"
            ),
        }
    }
}

/// The couple that does work when the arm moves: none when the tip is held.
fn applied(row: &Value) -> f64 {
    row.get("tau").map_or(0.0, number)
}

/// The only pass of rows with two wells.
fn expected_pass(row: &Value) -> Option<Value> {
    list(&row["equilibria"])
        .iter()
        .find(|e| e["index"] == 1)
        .cloned()
}

#[test]
fn rest_states_with_the_tip_held_in_si() {
    let reference = parse(include_str!("../reference/rest_states.json"));
    let mut compared = 0;
    for row in rows(&reference["held_tip"])
        .iter()
        .filter(|row| number(&row["gamma"]) == 0.05)
    {
        let tip_angle = number(&row["q0"]);
        let found = held_at(0.05, 1.0, tip_angle);
        assert_eq!(found["drive"], "held-tip");
        assert_near(number(&found["setpoint"]), tip_angle, REST_STATE);
        compare(&found, row, |_| tip_angle, |state| number(&state["tau"]));
        compared += 1;
    }
    assert_eq!(compared, 6);
}

#[test]
fn rest_states_with_the_couple_applied_in_si() {
    let reference = parse(include_str!("../reference/rest_states.json"));
    for row in rows(&reference["applied_couple"]) {
        let couple = number(&row["tau"]);
        let file = arm_file(number(&row["gamma"]), 1.0);
        let found = equilibria(&file, ["--couple-n-m", &(couple * SCALE_J).to_string()]);
        assert_eq!(found["drive"], "applied-couple");
        assert_near(number(&found["setpoint"]), couple * SCALE_J, REST_STATE);
        compare(&found, row, |state| number(&state["q0"]), |_| couple);
    }
}

/// The stable states of the two-coordinate model with its verdicts, and those of the rod.
fn stable(found: &Value) -> (Vec<(f64, bool)>, Vec<f64>) {
    let model = list(&found["two_coordinate"])
        .iter()
        .filter(|state| state["stable"] == true)
        .map(|state| {
            let confirmed = state["confirmed"]
                .as_bool()
                .expect("a verdict on every stable state");
            (number(&state["mean_angle_rad"]), confirmed)
        })
        .collect();
    let rod = list(&found["equilibria"])
        .iter()
        .filter(|state| state["stable"] == true)
        .map(|state| number(&state["mean_angle_rad"]))
        .collect();
    (model, rod)
}

/// Mean angles, computed: of the two-coordinate model to three decimals with whether the rod has them
/// too, and of the rod to four.
#[track_caller]
fn verdicts(gamma: f64, tip_fraction: f64, tip_angle: f64, model: &[(f64, bool)], rod: &[f64]) {
    let (found_model, found_rod) = stable(&held_at(gamma, tip_fraction, tip_angle));
    assert_eq!(found_model.len(), model.len(), "{found_model:?}");
    for (found, expected) in found_model.iter().zip(model) {
        assert_near(found.0, expected.0, PRINTED_THREE_DECIMALS);
        assert_eq!(found.1, expected.1, "confirmed, at mean angle {}", found.0);
    }
    assert_eq!(found_rod.len(), rod.len(), "{found_rod:?}");
    for (found, expected) in found_rod.iter().zip(rod) {
        assert_near(*found, *expected, PRINTED_FOUR_DECIMALS);
    }
}

#[test]
fn both_wells_of_the_upright_arm_are_confirmed() {
    verdicts(
        0.05,
        1.0,
        0.0,
        &[(-1.464, true), (1.464, true)],
        &[-1.4602, 1.4602],
    );
}

#[test]
fn well_beside_a_near_fold_is_confirmed() {
    verdicts(
        0.05,
        1.0,
        1.0,
        &[(-0.865, true), (1.801, true)],
        &[-0.7135, 1.8090],
    );
}

#[test]
fn well_beyond_the_rods_fold_is_false() {
    verdicts(0.02, 1.0, PI, &[(-1.024, false), (2.539, true)], &[2.6244]);
}

#[test]
fn curled_wells_of_a_very_soft_arm_are_false() {
    verdicts(
        0.01,
        1.0,
        2.0 * PI,
        &[(-0.524, false), (PI, true), (6.807, false)],
        &[PI],
    );
}

/// The model's own critical stiffness is exactly 1/20, the rod's .05275: between them the model says
/// upright and the rod leans.
#[test]
fn upright_arm_with_its_own_weight_is_false_between_the_two_critical_stiffnesses() {
    let (model, rod) = stable(&held_at(0.051, 0.0, 0.0));
    assert_eq!(model.len(), 1, "{model:?}");
    assert_near(model[0].0, 0.0, REST_STATE);
    assert!(!model[0].1, "upright is confirmed");
    assert_eq!(rod.len(), 2, "{rod:?}");
    assert_near(rod[0] + rod[1], 0.0, REST_STATE);
}
