//! The answer to a requested setpoint.

use firmware_core::{
    Answer, Drive, Input, Limit, Payload, Present, Refusal, Requirement, Slice, Stretch, Table,
    TensionPair, choose,
};
use proptest::prelude::*;

use crate::arm::{
    Draft, GAP_EDGE, NOMINAL_KG, OFFSET_M, PRETENSION_N, draft, draft_with_gap, fold, root, scale,
    with_load,
};
use crate::seed::cases;
use crate::tolerance;

fn ask(draft: &Draft, branch: u8, setpoint: f32, request: f32) -> Answer {
    with_load(draft, Payload::Known(NOMINAL_KG), |load| {
        choose(load, Present { branch, setpoint }, request)
    })
}

/// Tensions of the arm on a branch, from the closed form.
fn exact_tensions(drive: Drive, branch: usize, setpoint: f32) -> TensionPair {
    let couple = match drive {
        Drive::HeldTip => -scale(drive) as f32 * root(branch, setpoint.into()) as f32,
        Drive::AppliedCouple => setpoint,
    };
    let pulling = PRETENSION_N + couple.abs() / OFFSET_M;
    if couple > 0.0 {
        TensionPair {
            a_n: pulling,
            b_n: PRETENSION_N,
        }
    } else {
        TensionPair {
            a_n: PRETENSION_N,
            b_n: pulling,
        }
    }
}

fn alike(a: TensionPair, b: TensionPair) -> bool {
    // The couple's error over the offset.
    let allowed = tolerance::LOOKUP as f32 / OFFSET_M;
    (a.a_n - b.a_n).abs() <= allowed && (a.b_n - b.b_n).abs() <= allowed
}

#[test]
fn a_safe_request_is_granted_with_its_tensions() {
    for (drive, max) in [(Drive::HeldTip, 60.0), (Drive::AppliedCouple, 200.0)] {
        for (branch, setpoint, request) in [(2, 0.0, 0.8), (0, 0.0, -0.8), (0, -0.5, 0.2)] {
            let answer = ask(&draft(drive, max), branch, setpoint, request);
            let Answer::Go {
                setpoint,
                tensions,
                reserves,
            } = answer
            else {
                panic!("{answer:?}");
            };
            assert_eq!(setpoint, request);
            let expected = crate::arm::reserves(branch, request, 1.0).to_values();
            for (found, expected) in reserves.to_values().iter().zip(expected) {
                assert!((found - expected).abs() <= tolerance::RESERVES);
            }
            assert!(alike(
                tensions,
                exact_tensions(drive, branch.into(), request)
            ));
        }
    }
}

#[test]
fn the_fold_is_kept_at_its_distance() {
    let answer = ask(&draft(Drive::HeldTip, 60.0), 0, 0.0, 0.384);
    let Answer::NotOnThisSide {
        other,
        as_far_as,
        why,
        reserves,
        ..
    } = answer
    else {
        panic!("{answer:?}");
    };
    assert_eq!(other, 2);
    let expected = fold() as f32 - 1e-3;
    assert_eq!(as_far_as, expected);
    assert!((reserves.setpoint_reserve.expect("bounded") - 1e-3).abs() <= tolerance::RESERVES);
    let limit = Limit {
        requirement: Requirement::SetpointReserve,
        value: 1e-3,
        limit: 1e-3,
    };
    assert_eq!(why, limit);
}

#[test]
fn beyond_the_table_only_its_end() {
    let answer = ask(&draft(Drive::HeldTip, 60.0), 2, 0.5, 7.0);
    let why = Limit {
        requirement: Requirement::TableRange,
        value: 1.0,
        limit: 1.0,
    };
    assert!(
        matches!(answer, Answer::OnlyAsFarAs { setpoint: 1.0, why: found, .. } if found == why),
        "{answer:?}"
    );
}

#[test]
fn a_tendon_at_its_limit_ends_the_way() {
    let draft = draft(Drive::HeldTip, 16.0);
    let end = draft.slices[0].stretches[1].0.to;
    assert!(end < 0.9);
    let answer = ask(&draft, 2, 0.5, 0.95);
    let Answer::OnlyAsFarAs {
        setpoint,
        why,
        tensions,
        ..
    } = answer
    else {
        panic!("{answer:?}");
    };
    assert!(
        (setpoint - end).abs() <= tolerance::REACH,
        "{setpoint} {end}"
    );
    assert_eq!(why.requirement, Requirement::TensionFactor);
    assert!(tensions.b_n <= 16.0 && tensions.b_n > 15.9);
}

#[test]
fn the_tension_is_judged_again_whatever_the_table_says() {
    // Stretches as if there were no maximum, under a header that has one.
    let mut draft = draft(Drive::HeldTip, 60.0);
    draft.header.max_tension_n = 15.0;
    let answer = ask(&draft, 2, 0.2, 0.9);
    let Answer::OnlyAsFarAs {
        setpoint,
        why,
        tensions,
        ..
    } = answer
    else {
        panic!("{answer:?}");
    };
    // 0.1 q / 0.01 + 3 + 0.01 = 15
    let q = 1.199f64;
    let exact = (q.powi(3) - q) as f32;
    assert!(
        (setpoint - exact).abs() <= tolerance::REACH,
        "{setpoint} {exact}"
    );
    assert_eq!(
        (why.requirement, why.limit),
        (Requirement::TensionFactor, 1.0)
    );
    assert!(why.value >= 1.0 - f32::EPSILON && why.value < 1.001);
    assert!(tensions.b_n + 0.01 <= 15.0);
}

#[test]
fn a_gap_is_not_crossed() {
    let draft = draft_with_gap(Drive::HeldTip, 60.0);
    let gap = Refusal::Gap {
        from: 0.1,
        to: 0.3,
        limit: GAP_EDGE,
    };
    assert_eq!(ask(&draft, 2, 0.0, 0.5), Answer::Refused(gap));
    assert_eq!(ask(&draft, 2, 0.5, 0.0), Answer::Refused(gap));
    // Into the gap: only to its edge (here the lower well has the request).
    let answer = ask(&draft, 2, 0.0, 0.2);
    let to_edge = matches!(
        answer,
        Answer::NotOnThisSide {
            other: 0,
            as_far_as: 0.1,
            ..
        }
    );
    assert!(to_edge, "{answer:?}");
    // From inside the gap: to the nearer side.
    let answer = ask(&draft, 2, 0.28, 0.31);
    assert!(
        matches!(answer, Answer::Go { setpoint: 0.31, .. }),
        "{answer:?}"
    );
    let answer = ask(&draft, 2, 0.12, 0.31);
    assert_eq!(answer, Answer::Refused(gap));
}

#[test]
fn of_several_sides_the_deepest_is_named() {
    // Without stretches on its own branch the present one has nothing safe; both others would do.
    let mut draft = draft(Drive::HeldTip, 60.0);
    let mut twin = draft.slices[0].branches[2].clone();
    twin.0.number = 3;
    draft.slices[0].branches.push(twin);
    let mut twin = draft.slices[0].stretches[1].clone();
    twin.0.branch = 3;
    draft.slices[0].stretches.push(twin);
    // Branch 3 is the upper well with 0.5 J less.
    for knot in draft.slices[0].branches[3].1.chunks_mut(13) {
        knot[5] -= 0.5;
    }
    draft.slices[0].stretches.remove(0);
    let refusal = Refusal::NothingSafeHere {
        branch: 0,
        other: Some(3),
    };
    assert_eq!(ask(&draft, 0, 0.0, 0.2), Answer::Refused(refusal));
}

#[test]
fn refusals_name_their_reason() {
    let draft = draft(Drive::HeldTip, 60.0);
    let refused = |branch, setpoint, request| match ask(&draft, branch, setpoint, request) {
        Answer::Refused(refusal) => refusal,
        other => panic!("{other:?}"),
    };
    for bad in [f32::NAN, f32::INFINITY, f32::NEG_INFINITY] {
        let which = Input::Request;
        assert_eq!(refused(2, 0.0, bad), Refusal::NotFinite { which });
        let which = Input::PresentSetpoint;
        assert_eq!(refused(2, bad, 0.0), Refusal::NotFinite { which });
    }
    let missing = Refusal::NoSuchBranch { branch: 3 };
    assert_eq!(refused(3, 0.0, 0.0), missing);
    let unstable = Refusal::UnstableBranch {
        branch: 1,
        index: 1,
    };
    assert_eq!(refused(1, 0.0, 0.0), unstable);
    let outside = Refusal::PresentOutsideBranch {
        setpoint: -0.5,
        from: -(fold() as f32),
        to: 1.0,
    };
    assert_eq!(refused(2, -0.5, 0.0), outside);
    // Without stretches nothing is safe.
    let mut draft = draft;
    draft.slices[0].stretches.clear();
    let nothing = Refusal::NothingSafeHere {
        branch: 2,
        other: None,
    };
    assert_eq!(ask(&draft, 2, 0.0, 0.5), Answer::Refused(nothing));
}

/// The rule of the safe setpoint in one slice, written down a second time.
pub fn is_safe(slice: &Slice<'_>, branch: u8, setpoint: f32) -> bool {
    let limits = slice.limits();
    let inside = |s: Stretch| setpoint >= s.from && setpoint <= s.to;
    let Ok(state) = slice.at(branch, setpoint) else {
        return false;
    };
    let pulling = limits.pretension_n + state.couple_n_m.abs() / limits.offset_m;
    slice.stretches(branch).any(|usable| inside(usable.entry))
        && pulling + limits.deducted_tension_n <= limits.max_tension_n
}

pub fn any_setpoint() -> impl Strategy<Value = f32> {
    prop_oneof![
        8 => -1.2f32..1.2,
        2 => prop::num::f32::ANY,
        1 => prop::sample::select(vec![0.1f32, 0.3, -1.0, 1.0, fold() as f32, -fold() as f32]),
    ]
}

proptest! {
    #![proptest_config(cases(2000))]

    #[test]
    fn whatever_is_asked_only_safe_setpoints_are_commanded(
        drive in prop::sample::select(vec![Drive::HeldTip, Drive::AppliedCouple]),
        gap: bool,
        max_tension_n in prop::sample::select(vec![14.0f32, 16.0, 60.0, 200.0]),
        lower_maximum in prop::option::of(3f32..20.0),
        branch in 0u8..5,
        setpoint in any_setpoint(),
        request in any_setpoint(),
    ) {
        let mut draft = if gap && max_tension_n > 60.0 {
            draft_with_gap(drive, max_tension_n)
        } else {
            draft(drive, max_tension_n)
        };
        if let Some(lower) = lower_maximum {
            draft.header.max_tension_n = lower;
        }
        let bytes = draft.bytes();
        let table = Table::new(&bytes).expect("a sound table");
        let slice = table.slices().next().expect("a slice");
        let limits = slice.limits();
        let load = table.load(Payload::Known(NOMINAL_KG)).expect("the only slice");
        let answer = choose(&load, Present { branch, setpoint }, request);
        let commanded = match answer {
            Answer::Go { setpoint, tensions, .. } => {
                prop_assert_eq!(setpoint, request);
                Some((setpoint, tensions))
            }
            Answer::OnlyAsFarAs { setpoint, tensions, .. } => {
                prop_assert!(!is_safe(&slice, branch, request));
                for other in 0..3 {
                    prop_assert!(!is_safe(&slice, other, request));
                }
                Some((setpoint, tensions))
            }
            Answer::NotOnThisSide { other, as_far_as, tensions, .. } => {
                prop_assert!(other != branch && is_safe(&slice, other, request));
                prop_assert!(!is_safe(&slice, branch, request));
                Some((as_far_as, tensions))
            }
            Answer::Refused(refusal) => {
                prop_assert!(!refusal.to_string().is_empty());
                if let Refusal::Gap { from, to, .. } = refusal {
                    prop_assert!(from < to && is_safe(&slice, branch, request));
                }
                None
            }
        };
        if !(setpoint.is_finite() && request.is_finite()) {
            let refused = matches!(answer, Answer::Refused(Refusal::NotFinite { .. }));
            prop_assert!(refused, "{:?}", answer);
        }
        if let Some((setpoint, tensions)) = commanded {
            prop_assert!(is_safe(&slice, branch, setpoint), "{:?}", answer);
            for tension in [tensions.a_n, tensions.b_n] {
                prop_assert!((0.0..=limits.max_tension_n).contains(&tension));
            }
            // Nothing safe lies between the answer and the request, up to the halving's last step.
            for step in 1..50u8 {
                let nearer = setpoint + (request - setpoint) * f32::from(step) / 50.0;
                if (nearer - setpoint).abs() > tolerance::REACH && nearer != request {
                    let crossed_gap = gap && slice.stretches(branch).count() > 1;
                    let missed = is_safe(&slice, branch, nearer);
                    prop_assert!(setpoint == request || crossed_gap || !missed, "{}", nearer);
                }
            }
        }
    }
}
