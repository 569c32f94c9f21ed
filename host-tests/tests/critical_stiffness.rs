//! The stiffness at which the upright straight arm stops standing: Euler, Greenhill and mixes, with
//! the tip free and held; and at which its further directions go.

use host_tests::arms::UniformArm;
use host_tests::reference::{list, number, parse, rows};
use host_tests::tolerances::{BISECTION, CRITICAL_STIFFNESS};
use serde_json::Value;
use table_gen::rest_states::MOST_MODES;
use table_gen::rest_states::modes::{Evaluation, ModalRod, morse_index};
use table_gen::rest_states::shooting::Shooting;
use table_gen::rod::{Held, Rod};

fn reference() -> Value {
    parse(include_str!("../reference/critical_stiffness.json"))
}

fn upright(gamma: f64, tip_fraction: f64, held: Held) -> Rod {
    let arm = UniformArm {
        gamma,
        tip_fraction,
        tilt_rad: 0.0,
    };
    Rod::new(&match held {
        Held::TipAngle => arm.held_tip(0.0),
        Held::TipCouple => arm.applied_couple(0.0),
    })
}

/// Unstable directions of the straight shape in as many modes as a table may have.
fn index_in_modes(rod: &Rod) -> usize {
    let modal = ModalRod::new(rod, MOST_MODES);
    let mut at = Evaluation::new(MOST_MODES);
    modal.evaluate(&[0.0; MOST_MODES], &mut at);
    morse_index(&at.hessian, modal.first_free())
}

/// The same by conjugate points of the shot that leaves the base straight.
fn index_by_shooting(rod: &Rod) -> usize {
    Shooting::scan(rod, [0.0, 0.0], CRITICAL_STIFFNESS)
        .shoot(0.0)
        .index
}

/// Highest gamma at which more than `order` directions are unstable.
fn critical_gamma(index: impl Fn(f64) -> usize, order: usize) -> f64 {
    let (mut soft, mut stiff) = (1e-4, 1.0);
    assert!(
        index(soft) > order && index(stiff) <= order,
        "the bracket holds the loss of stability"
    );
    while stiff - soft > BISECTION {
        let middle = 0.5 * (soft + stiff);
        if index(middle) > order {
            soft = middle
        } else {
            stiff = middle
        }
    }
    0.5 * (soft + stiff)
}

#[track_caller]
fn assert_critical(found: f64, expected: f64, what: &str) {
    assert!(
        (found - expected).abs() <= CRITICAL_STIFFNESS,
        "{what}: gamma {found} found, {expected} expected"
    );
}

fn check_modes(tip_fraction: f64, held: Held, order: usize, expected: f64) {
    let found = critical_gamma(|g| index_in_modes(&upright(g, tip_fraction, held)), order);
    assert_critical(
        found,
        expected,
        &format!("{held:?}, tip fraction {tip_fraction}, order {order}"),
    );
}

/// Timoshenko and Gere, Theory of Elastic Stability, 2nd ed. 1961, ch. 2 (from memory).
#[test]
fn tip_mass_alone_is_eulers_column_in_every_order() {
    for (order, gamma) in list(&reference()["euler"]["higher_gamma"])
        .iter()
        .enumerate()
    {
        check_modes(1.0, Held::TipCouple, order, number(gamma));
    }
}

/// Greenhill, Proc. Camb. Phil. Soc. 4 (1881) 65-73 (citation from memory).
#[test]
fn own_weight_alone_is_greenhills_column_in_every_order() {
    let greenhill = &reference()["greenhill"];
    for (order, gamma) in list(&greenhill["higher_gamma"]).iter().enumerate() {
        check_modes(0.0, Held::TipCouple, order, number(gamma));
    }
    // The printed 7.837 has three decimals.
    let found = critical_gamma(|g| index_in_modes(&upright(g, 0.0, Held::TipCouple)), 0);
    let printed = number(&greenhill["q_l3_over_b_printed"]);
    assert!(
        (1.0 / found - printed).abs() <= 0.5e-3,
        "{} against the printed {printed}",
        1.0 / found
    );
}

#[test]
fn mixes_of_tip_mass_and_own_weight_with_the_tip_free() {
    for row in rows(&reference()["free_tip"]) {
        check_modes(
            number(&row["tip_fraction"]),
            Held::TipCouple,
            0,
            number(&row["gamma_cr"]),
        );
    }
}

#[test]
fn mixes_of_tip_mass_and_own_weight_with_the_tip_held_in_every_order() {
    for row in rows(&reference()["held_tip"]) {
        for (order, gamma) in list(&row["first3"]).iter().enumerate() {
            check_modes(
                number(&row["tip_fraction"]),
                Held::TipAngle,
                order,
                number(gamma),
            );
        }
    }
}

/// The audit of every table rests on the shooting's index: it must turn at the same stiffness.
#[test]
fn conjugate_points_appear_at_the_critical_stiffness() {
    let reference = reference();
    for (table, held) in [("free_tip", Held::TipCouple), ("held_tip", Held::TipAngle)] {
        for row in rows(&reference[table]) {
            let (fraction, critical) = (number(&row["tip_fraction"]), number(&row["gamma_cr"]));
            let index = |gamma| index_by_shooting(&upright(gamma, fraction, held));
            let beside = [critical - CRITICAL_STIFFNESS, critical + CRITICAL_STIFFNESS];
            assert_eq!(
                beside.map(index),
                [1, 0],
                "{held:?}, tip fraction {fraction}"
            );
        }
    }
}
