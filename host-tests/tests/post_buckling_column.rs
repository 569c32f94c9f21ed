//! How far a column leans beyond its critical load: the elastica in complete elliptic integrals, and
//! the table in Timoshenko and Gere, Theory of Elastic Stability 1961, art. 2.7 (from memory).

use host_tests::arms::{UniformArm, rest_states, states_at};
use host_tests::reference::{number, parse, rows};
use host_tests::tolerances::{COLUMN, PRINTED_COLUMN};
use serde_json::Value;
use std::f64::consts::PI;

/// The column leaning towards +x: tip angle (rad), tip x and y (L), mean angle (rad), energy (m g L).
fn leaning(gamma: f64) -> [f64; 5] {
    let rest = rest_states(&UniformArm::with_tip_mass(gamma).applied_couple(0.0));
    let states = states_at(&rest, 0.0);
    let leaning: Vec<_> = states
        .iter()
        .filter(|s| s.index == 0 && s.mean_angle() > 0.0)
        .collect();
    assert_eq!(
        leaning.len(),
        1,
        "one stable shape leans towards +x at gamma {gamma}"
    );
    let (x, y) = rest.modal.tip(&leaning[0].c);
    [
        leaning[0].tip_angle(),
        x,
        y,
        leaning[0].mean_angle(),
        leaning[0].energy,
    ]
}

fn reference() -> Value {
    parse(include_str!("../reference/post_buckling_column.json"))
}

#[test]
fn leaning_column_agrees_with_the_exact_columns() {
    for row in rows(&reference()) {
        let found = leaning(number(&row["gamma"]));
        let keys = ["ya_over_L", "xa_over_L", "q1", "energy"].map(|key| number(&row[key]));
        let tip_angle = number(&row["tip_angle_deg"]).to_radians();
        let expected = [tip_angle, keys[0], keys[1], keys[2], keys[3]];
        for (found, expected) in found.iter().zip(expected) {
            assert!(
                (found - expected).abs() <= COLUMN,
                "{} degrees: {found} found, {expected} expected",
                row["tip_angle_deg"]
            );
        }
    }
}

/// The load is printed over the critical one, so the stiffness that goes with it is rounded as well.
#[test]
fn leaning_column_agrees_with_the_printed_table_from_memory() {
    for row in rows(&reference()) {
        let [_, x, y, ..] = leaning(number(&row["gamma"]));
        let load = 4.0 / (PI * PI * number(&row["gamma"]));
        let printed = &row["book_from_memory"];
        for (place, found) in [load, y, x].into_iter().enumerate() {
            let printed = number(&printed[place]);
            assert!(
                (found - printed).abs() <= PRINTED_COLUMN,
                "{} degrees: {found} found, {printed} printed",
                row["tip_angle_deg"]
            );
        }
    }
}
