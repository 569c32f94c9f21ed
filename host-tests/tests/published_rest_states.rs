//! Every rest state, fold and barrier of the upright arm with a tip mass, against values computed
//! independently: exhaustive high-precision shooting, elliptic functions and 48 curvature modes.
//! Nothing may be missing, nothing may be too many, and every Morse index must be the same.

use host_tests::arms::{UniformArm, rest_states, states_at};
use host_tests::reference::{list, number, parse, rows};
use host_tests::tolerances::{BASE_CURVATURE, REST_STATE, SHOOTING, SOFTEST, SOFTEST_FOLD};
use serde_json::Value;
use table_gen::arm_file::Arm;
use table_gen::rest_states::curve::RestPoint;
use table_gen::rest_states::degree_sum;
use table_gen::rest_states::shooting::Shooting;
use table_gen::rest_states::wells::wells;

fn off(found: f64, expected: f64, tolerance: f64, what: &str) -> Option<String> {
    let off = (found - expected).abs();
    // Written so that a NaN is reported.
    let holds = off <= tolerance;
    (!holds).then(|| format!("{what}: {found} found, {expected} expected, off by {off:.1e}"))
}

#[track_caller]
fn none(complaints: Vec<String>) {
    assert!(complaints.is_empty(), "{}", complaints.join("\n"));
}

/// Compares all rest states of `arm` at `setpoint` with `row`, by base curvature.
fn complaints(
    arm: &Arm,
    setpoint: f64,
    row: &Value,
    conjugate: (&str, fn(&RestPoint) -> f64),
) -> Vec<String> {
    let what = format!("gamma {}, setpoint {setpoint:.3}", row["gamma"]);
    let rest = rest_states(arm);
    let states = states_at(&rest, setpoint);
    let expected = list(&row["equilibria"]);
    let found: Vec<_> = states.iter().map(|s| s.index as u64).collect();
    let indices: Vec<_> = expected
        .iter()
        .map(|e| e["index"].as_u64().expect("an index"))
        .collect();
    assert_eq!(found, indices, "{what}: Morse indices by base curvature");
    assert_eq!(degree_sum(states.iter().map(|s| s.index)), 1, "{what}");
    let shots = rest.shooting.rest_states(setpoint);
    assert_eq!(
        shots.len(),
        expected.len(),
        "{what}: rest states by shooting"
    );
    let mut complaints = Vec::new();
    for ((state, shot), expected) in states.iter().zip(&shots).zip(expected) {
        let (x, y) = rest.modal.tip(&state.c);
        let (key, value) = conjugate;
        let found = [
            ("q1", state.mean_angle()),
            ("E", state.energy),
            ("x", x),
            ("y", y),
            (key, value(state)),
        ];
        for (key, found) in found {
            complaints.extend(off(
                found,
                number(&expected[key]),
                REST_STATE,
                &format!("{what}, {key}"),
            ));
        }
        let base = number(&expected["dalpha0"]);
        complaints.extend(off(
            shot.base_curvature,
            base,
            BASE_CURVATURE,
            &format!("{what}, base curvature"),
        ));
    }
    complaints
}

fn rest_state_reference() -> Value {
    parse(include_str!("../reference/rest_states.json"))
}

#[test]
fn every_rest_state_with_the_tip_held() {
    let mut all = Vec::new();
    for row in rows(&rest_state_reference()["held_tip"]) {
        let setpoint = number(&row["q0"]);
        let arm = UniformArm::with_tip_mass(number(&row["gamma"])).held_tip(setpoint);
        all.extend(complaints(
            &arm,
            setpoint,
            row,
            ("tau", |state| state.couple),
        ));
    }
    none(all);
}

#[test]
fn every_rest_state_with_the_couple_applied() {
    let mut all = Vec::new();
    for row in rows(&rest_state_reference()["applied_couple"]) {
        let setpoint = number(&row["tau"]);
        let arm = UniformArm::with_tip_mass(number(&row["gamma"])).applied_couple(setpoint);
        all.extend(complaints(
            &arm,
            setpoint,
            row,
            ("q0", RestPoint::tip_angle),
        ));
    }
    none(all);
}

/// Compares the fold of `arm` nearest in mean angle with `row`, in curvature modes and by shooting.
fn fold_complaints(arm: &Arm, row: &Value) -> Vec<String> {
    let rest = rest_states(arm);
    let expected = number(&row["q1_fold"]);
    let nearer = |a: f64, b: f64| (a - expected).abs().total_cmp(&(b - expected).abs());
    let fold = rest
        .folds
        .iter()
        .map(|fold| &fold.point)
        .min_by(|a, b| nearer(a.mean_angle(), b.mean_angle()))
        .unwrap_or_else(|| panic!("{}: no fold", arm.name));
    let shooting = Shooting::scan(&rest.rod, rest.rod.setpoints, SHOOTING);
    let shot = shooting
        .folds()
        .iter()
        .min_by(|a, b| nearer(a.mean_angle, b.mean_angle))
        .unwrap_or_else(|| panic!("{}: no fold by shooting", arm.name));
    let couple = row.get("tau").or(row.get("tau_fold")).expect("a couple");
    let modes = if arm.gamma() < SOFTEST {
        SOFTEST_FOLD
    } else {
        REST_STATE
    };
    [
        ("tip angle", fold.tip_angle(), modes, &row["q0_fold"]),
        ("mean angle", fold.mean_angle(), modes, &row["q1_fold"]),
        ("energy", fold.energy, REST_STATE, &row["E"]),
        ("couple", fold.couple, modes, couple),
        (
            "tip angle by shooting",
            shot.tip_angle,
            REST_STATE,
            &row["q0_fold"],
        ),
        (
            "mean angle by shooting",
            shot.mean_angle,
            REST_STATE,
            &row["q1_fold"],
        ),
        ("couple by shooting", shot.couple, REST_STATE, couple),
    ]
    .into_iter()
    .filter_map(|(key, found, tolerance, expected)| {
        let what = format!("{}, {} modes, {key}", arm.name, rest.modal.modes());
        off(found, number(expected), tolerance, &what)
    })
    .collect()
}

fn fold_reference() -> Value {
    parse(include_str!("../reference/folds.json"))
}

#[test]
fn folds_with_the_tip_held() {
    let mut all = Vec::new();
    for row in rows(&fold_reference()["held_tip"]) {
        let arm = UniformArm::with_tip_mass(number(&row["gamma"]));
        all.extend(fold_complaints(&arm.held_tip(number(&row["q0_fold"])), row));
    }
    none(all);
}

#[test]
fn folds_with_the_couple_applied() {
    let mut all = Vec::new();
    for row in rows(&fold_reference()["applied_couple"]) {
        let arm = UniformArm::with_tip_mass(number(&row["gamma"]));
        all.extend(fold_complaints(
            &arm.applied_couple(number(&row["tau_fold"])),
            row,
        ));
    }
    none(all);
}

#[test]
fn barriers_with_the_tip_held() {
    let mut all = Vec::new();
    for row in rows(&parse(include_str!("../reference/barriers.json"))["held_tip"]) {
        let setpoint = number(&row["q0"]);
        let what = format!("gamma {}, setpoint {setpoint:.3}", row["gamma"]);
        let rest =
            rest_states(&UniformArm::with_tip_mass(number(&row["gamma"])).held_tip(setpoint));
        let states = states_at(&rest, setpoint);
        let wells = wells(&rest.modal, &states).expect("a way down from every pass");
        let stable: Vec<usize> = (0..states.len())
            .filter(|&i| states[i].index == 0)
            .collect();
        let expected = list(&row["states"]);
        assert_eq!(stable.len(), expected.len(), "{what}: wells");
        for (&place, expected) in stable.iter().zip(expected) {
            let barrier = wells.barrier[place].expect("a pass leads out of each of two wells");
            all.extend(off(
                states[place].mean_angle(),
                number(&expected["q1"]),
                REST_STATE,
                &what,
            ));
            all.extend(off(
                barrier,
                number(&expected["barrier"]),
                REST_STATE,
                &what,
            ));
        }
    }
    none(all);
}
