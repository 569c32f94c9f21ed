//! Numbers and sentences in messages.

use firmware_core::{Answer, ConfigError, Limit, Refusal, Requirement, TensionPair};
use proptest::prelude::*;

use crate::seed::cases;
use crate::tolerance;

/// A number as messages write it.
fn written(value: f32) -> String {
    let text = ConfigError::FoldDistance { found: value }.to_string();
    let text = text.strip_prefix("the distance from the fold is ");
    let text = text.and_then(|rest| rest.strip_suffix("; give a finite value of 0 or more"));
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
        requirement: Requirement::FoldDistance,
        value: 0.05,
        limit: 0.05,
    };
    let answer = Answer::OnlyAsFarAs {
        setpoint: 0.25,
        tensions,
        why,
    };
    assert_eq!(
        answer.to_string(),
        "go only as far as setpoint 0.25 (the distance to the fold is 0.05 and may not be less than 0.05): \
         tendon A 3 N, tendon B 9.5 N"
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
