//! Numbers and sentences in messages.

use firmware_core::{Answer, Limit, Refusal, Requirement, TensionPair};
use proptest::prelude::*;

use crate::arm::reserves;
use crate::seed::cases;
use crate::tolerance;

/// A number as messages write it.
fn written(value: f32) -> String {
    let limit = Limit {
        requirement: Requirement::TableRange,
        value,
        limit: value,
    };
    let text = limit.to_string();
    let text = text.strip_prefix("the table ends at setpoint ");
    text.expect("the message holds the number").to_string()
}

#[test]
fn numbers_read_as_people_write_them() {
    for (value, text) in [
        (0.0, "0"),
        (1.0, "1"),
        (-1.5, "-1.5"),
        (0.05, "0.05"),
        (12.34567, "12.34567"),
        (0.999_999_9, "1"),
        (100.0, "100"),
        (2.5e9, "2.5e9"),
        (1e-4, "1e-4"),
        (f32::NAN, "not a number"),
        (f32::INFINITY, "infinity"),
        (f32::NEG_INFINITY, "-infinity"),
    ] {
        assert_eq!(written(value), text);
    }
}

#[test]
fn answers_say_what_to_do() {
    let tensions = TensionPair { a_n: 3.0, b_n: 9.5 };
    let why = Limit {
        requirement: Requirement::SetpointReserve,
        value: 0.05,
        limit: 0.05,
    };
    let answer = Answer::OnlyAsFarAs {
        setpoint: 0.25,
        tensions,
        reserves: reserves(2, 0.25, 1.0),
        why,
    };
    assert_eq!(
        answer.to_string(),
        "go only as far as setpoint 0.25 (the distance to the fold is 0.05 and may not be less than 0.05, in rad or \
         N m as the setpoint): tendon A 3 N, tendon B 9.5 N"
    );
    let refused = Answer::Refused(Refusal::NothingSafeHere {
        branch: 0,
        other: Some(2),
    });
    assert_eq!(
        refused.to_string(),
        "refused: nothing that can be reached on branch 0 is safe; hold (the request is safe on branch 2)"
    );
}

#[test]
fn every_requirement_names_its_value_and_its_limit() {
    let said = |requirement| {
        let limit = Limit {
            requirement,
            value: 0.125,
            limit: 0.25,
        };
        limit.to_string()
    };
    for (requirement, value, limit) in [
        (Requirement::KnockImpulse, "0.125 N s", "0.25 N s"),
        (Requirement::PayloadReserve, "0.125 kg", "0.25 kg"),
        (Requirement::StiffnessReserve, "12.5 %", "25 %"),
        (Requirement::SetpointReserve, "0.125", "0.25, in rad or N m"),
        (Requirement::TensionFactor, "0.125 times", "0.25 times"),
        (Requirement::Strain, "12.5 %", "25 %"),
        (Requirement::Clearance, "0.125 m ", "0.25 m"),
    ] {
        let text = said(requirement);
        assert!(text.contains(value) && text.contains(limit), "{text}");
    }
    assert!(said(Requirement::TableRange).ends_with("setpoint 0.25"));
    // This one has no number.
    let stable = said(Requirement::Stable);
    assert!(
        stable.contains("corner") && !stable.contains("0.125"),
        "{stable}"
    );
}

proptest! {
    #![proptest_config(cases(2000))]

    #[test]
    fn numbers_can_be_read_back(value in prop::num::f32::NORMAL | prop::num::f32::SUBNORMAL | prop::num::f32::ZERO) {
        let back: f64 = written(value).parse().expect("a number");
        let exact = f64::from(value);
        let allowed = tolerance::MESSAGE.min(exact.abs() * 1e-2) + exact.abs() * tolerance::MESSAGE_RELATIVE;
        prop_assert!((back - exact).abs() <= allowed, "{} {}", back, exact);
    }
}
