//! The choice of the setpoint with several slices to be respected, on stretches drawn at random.

use firmware_core::{
    Answer, Limit, Load, Payload, Present, Refusal, Requirement, Stretch, Table, choose,
};
use proptest::prelude::*;

use crate::arm::{Draft, PAYLOADS, draft_with_payloads, fold, payload_limit, reserves, with_load};
use crate::choice::{any_setpoint, is_safe};
use crate::seed::cases;
use crate::tolerance;

fn ask(draft: &Draft, payload: Payload, branch: u8, setpoint: f32, request: f32) -> Answer {
    with_load(draft, payload, |load| {
        choose(load, Present { branch, setpoint }, request)
    })
}

/// The upper well's stretches of each slice, as pairs of ends.
fn with_stretches(ends: [&[(f32, f32)]; 3]) -> Draft {
    let mut draft = draft_with_payloads(60.0);
    for ((slice, ends), (payload_kg, factor)) in draft.slices.iter_mut().zip(ends).zip(PAYLOADS) {
        let stretch = |(from, to): &(f32, f32)| Stretch {
            branch: 2,
            points: 3,
            from: *from,
            to: *to,
            from_limit: payload_limit(payload_kg),
            to_limit: payload_limit(payload_kg),
        };
        slice.set_stretches(ends.iter().map(stretch).collect(), factor);
    }
    draft
}

#[test]
fn the_slice_that_ends_first_sets_the_limit() {
    let draft = with_stretches([&[(-0.1, 0.6)], &[(-0.2, 0.5)], &[(-0.3, 0.7)]]);
    for (payload, below, above) in [
        (Payload::Known(0.05), (-0.1, 0.05), (0.6, 0.05)),
        (Payload::Known(0.055), (-0.1, 0.05), (0.5, 0.06)),
        (Payload::Known(0.07), (-0.2, 0.06), (0.5, 0.06)),
        (Payload::Known(0.08), (-0.3, 0.08), (0.7, 0.08)),
        (Payload::Unknown, (-0.1, 0.05), (0.5, 0.06)),
    ] {
        for (request, (end, slice_kg)) in [(-0.35, below), (0.9, above)] {
            let answer = ask(&draft, payload, 2, 0.0, request);
            let Answer::OnlyAsFarAs {
                setpoint,
                why,
                reserves: found,
                ..
            } = answer
            else {
                panic!("{answer:?}");
            };
            assert_eq!(
                (setpoint, why),
                (end, payload_limit(slice_kg)),
                "{payload:?}"
            );
            let factors = PAYLOADS.iter().filter(|(kg, _)| match payload {
                Payload::Unknown => true,
                Payload::Known(0.055) => *kg < 0.07,
                Payload::Known(0.07) => *kg > 0.055,
                Payload::Known(payload_kg) => *kg == payload_kg,
            });
            let each = factors.map(|(_, factor)| reserves(2, end, *factor));
            let expected = each
                .reduce(|a, b| a.worse(&b))
                .expect("a slice")
                .to_values();
            for (found, expected) in found.to_values().iter().zip(expected) {
                assert!((found - expected).abs() <= tolerance::RESERVES);
            }
        }
    }
}

#[test]
fn the_gap_of_one_slice_is_a_gap() {
    let draft = with_stretches([
        &[(-0.1, 0.6)],
        &[(-0.1, 0.2), (0.3, 0.6)],
        &[(-0.1, 0.25), (0.35, 0.6)],
    ]);
    let gap = |from, to, slice_kg| {
        Answer::Refused(Refusal::Gap {
            from,
            to,
            limit: payload_limit(slice_kg),
        })
    };
    let unknown = |setpoint, request| ask(&draft, Payload::Unknown, 2, setpoint, request);
    assert_eq!(unknown(0.0, 0.5), gap(0.2, 0.35, 0.06));
    assert_eq!(unknown(0.5, 0.0), gap(0.2, 0.35, 0.08));
    let known = |payload_kg, request| ask(&draft, Payload::Known(payload_kg), 2, 0.0, request);
    assert_eq!(known(0.055, 0.5), gap(0.2, 0.3, 0.06));
    assert_eq!(known(0.08, 0.5), gap(0.25, 0.35, 0.08));
    assert!(matches!(known(0.05, 0.5), Answer::Go { setpoint: 0.5, .. }));
    // Beyond the gap, but not safe there: only what can be reached on this side.
    assert!(matches!(
        unknown(0.0, 0.9),
        Answer::OnlyAsFarAs { setpoint: 0.2, .. }
    ));
}

#[test]
fn the_gaps_of_several_slices_make_one() {
    // Wherever one slice has a stretch between, another one has a gap.
    let draft = with_stretches([
        &[(-0.1, 0.1), (0.2, 0.3), (0.4, 0.6)],
        &[(-0.1, 0.15), (0.32, 0.38), (0.41, 0.6)],
        &[(-0.1, 0.6)],
    ]);
    let answer = ask(&draft, Payload::Unknown, 2, 0.0, 0.5);
    let gap = Refusal::Gap {
        from: 0.1,
        to: 0.41,
        limit: payload_limit(0.05),
    };
    assert_eq!(answer, Answer::Refused(gap));
}

#[test]
fn no_way_home_crosses_a_gap_of_any_slice() {
    // From 0.25 the lightest arm is led to 0.2, the heavier ones have nothing there.
    let draft = with_stretches([&[(-0.1, 0.2), (0.4, 0.6)], &[(0.4, 0.6)], &[(0.4, 0.6)]]);
    let nothing = Refusal::NothingSafeHere {
        branch: 2,
        other: None,
    };
    let answer = |payload| ask(&draft, payload, 2, 0.25, 0.5);
    assert_eq!(answer(Payload::Unknown), Answer::Refused(nothing));
    assert!(matches!(
        answer(Payload::Known(0.06)),
        Answer::Go { setpoint: 0.5, .. }
    ));
    // From the other side of the middle all agree.
    let answer = ask(&draft, Payload::Unknown, 2, 0.35, 0.5);
    assert!(
        matches!(answer, Answer::Go { setpoint: 0.5, .. }),
        "{answer:?}"
    );
}

#[test]
fn the_tension_must_be_allowed_in_every_slice() {
    let mut draft = with_stretches([&[(-0.1, 0.6)], &[(-0.1, 0.6)], &[(-0.1, 0.6)]]);
    // Enough for 0.1 q / 0.01 with the nominal payload at q = 1.15, where x = 0.37.
    draft.header.max_tension_n = 14.51;
    let end = |payload| match ask(&draft, payload, 2, 0.0, 0.6) {
        Answer::OnlyAsFarAs { setpoint, why, .. } => {
            assert_eq!(
                (why.requirement, why.limit),
                (Requirement::TensionFactor, 1.0)
            );
            setpoint
        }
        answer => panic!("{answer:?}"),
    };
    let exact = |factor: f64| {
        let q = 1.15 / factor;
        (q.powi(3) - q) as f32
    };
    let near = |a: f32, b: f32| assert!((a - b).abs() <= tolerance::REACH, "{a} {b}");
    near(end(Payload::Known(0.06)), exact(1.0));
    // The tensions commanded are those of a smaller K, but the larger one must be held too.
    draft.header.max_tension_n = 16.51;
    let end = |payload| match ask(&draft, payload, 2, 0.0, 0.6) {
        Answer::OnlyAsFarAs {
            setpoint, tensions, ..
        } => (setpoint, tensions.b_n),
        answer => panic!("{answer:?}"),
    };
    let q = 1.35 / 1.2f64;
    let (setpoint, tension_n) = end(Payload::Unknown);
    near(setpoint, (q.powi(3) - q) as f32);
    assert!(
        (tension_n - (3.0 + 10.0 * q as f32)).abs() < 1e-3,
        "{tension_n}"
    );
    assert_eq!(end(Payload::Known(0.07)).0, setpoint);
}

#[test]
fn a_branch_that_one_payload_lacks_is_not_used() {
    let mut draft = draft_with_payloads(60.0);
    let heaviest = &mut draft.slices[2];
    heaviest.branches.drain(..2);
    heaviest.branches[0].0.exits = 0;
    heaviest.stretches.remove(0);
    let nothing = |other| Answer::Refused(Refusal::NothingSafeHere { branch: 0, other });
    for payload in [Payload::Unknown, Payload::Known(0.07)] {
        assert_eq!(ask(&draft, payload, 0, 0.0, 0.1), nothing(Some(2)));
    }
    let missing = Refusal::NoSuchBranch { branch: 0 };
    let answer = ask(&draft, Payload::Known(0.08), 0, 0.0, 0.1);
    assert_eq!(answer, Answer::Refused(missing));
    assert!(missing.to_string().contains("no branch 0"));
}

#[test]
fn the_present_setpoint_must_be_reached_with_some_payload() {
    let mut draft = draft_with_payloads(60.0);
    // The lightest arm's upper well begins at -0.1 only.
    let (entry, knots) = &mut draft.slices[0].branches[2];
    let fold = fold() as f32;
    entry.from = -0.1;
    let begin = entry.map().t(-0.1);
    knots.retain({
        let mut at = 0;
        let keep: Vec<bool> = knots
            .chunks(13)
            .map(|knot| knot[0] >= begin - 0.02)
            .collect();
        move |_| {
            at += 1;
            keep[(at - 1) / 13]
        }
    });
    entry.knots = (knots.len() / 13) as u16;
    knots[0] = begin;
    draft.slices[0].stretches.clear();
    let answer = ask(&draft, Payload::Known(0.05), 2, -0.3, 0.0);
    let outside = |from| {
        Answer::Refused(Refusal::PresentOutsideBranch {
            setpoint: -0.3,
            from,
            to: 1.0,
        })
    };
    assert_eq!(answer, outside(-0.1));
    let answer = ask(&draft, Payload::Known(0.055), 2, -0.3, 0.0);
    assert!(matches!(
        answer,
        Answer::Refused(Refusal::NothingSafeHere { .. })
    ));
    let answer = ask(&draft, Payload::Known(0.055), 2, -0.5, 0.0);
    let Answer::Refused(Refusal::PresentOutsideBranch { from, .. }) = answer else {
        panic!("{answer:?}");
    };
    assert_eq!(from, -fold, "the widest cover is named");
}

/// Stretches of one slice: of either well, at most four, between sorted cuts.
fn any_stretches(payload_kg: f32) -> impl Strategy<Value = Vec<Stretch>> {
    let limit = move |requirement| Limit {
        requirement,
        value: payload_kg,
        limit: payload_kg,
    };
    // Few values, so that ends of different slices coincide now and then.
    let cuts = || prop::collection::btree_set(0u8..40, 0..9);
    (cuts(), cuts(), 2u8..5).prop_map(move |(lower, upper, points)| {
        let edge = fold() as f32;
        let mut stretches = Vec::new();
        for (branch, cuts, from, to) in [(0, lower, -1.0, edge), (2, upper, -edge, 1.0)] {
            let cuts: Vec<f32> = cuts
                .iter()
                .map(|cut| from + (to - from) * f32::from(*cut) / 39.0)
                .collect();
            for pair in cuts.chunks_exact(2) {
                stretches.push(Stretch {
                    branch,
                    points,
                    from: pair[0].max(from),
                    to: pair[1].min(to),
                    from_limit: limit(Requirement::Strain),
                    to_limit: limit(Requirement::KnockImpulse),
                });
            }
        }
        stretches
    })
}

fn any_draft() -> impl Strategy<Value = Draft> {
    let stretches = PAYLOADS.map(|(payload_kg, _)| any_stretches(payload_kg));
    let lost = prop::option::weighted(0.2, 0usize..3);
    let maximum = prop_oneof![3 => Just(60.0f32), 1 => 10f32..20.0];
    (stretches, lost, maximum).prop_map(|(stretches, lost, max_tension_n)| {
        let mut draft = draft_with_payloads(60.0);
        draft.header.max_tension_n = max_tension_n;
        for ((slice, stretches), (_, factor)) in
            draft.slices.iter_mut().zip(stretches).zip(PAYLOADS)
        {
            slice.set_stretches(stretches, factor);
        }
        // One payload without the lower well.
        if let Some(slice) = lost.and_then(|number| draft.slices.get_mut(number)) {
            slice.branches.drain(..2);
            slice.branches[0].0.exits = 0;
            slice.stretches.retain(|(stretch, _)| stretch.branch == 2);
        }
        draft
    })
}

fn any_payload() -> impl Strategy<Value = Payload> {
    let on_a_slice = prop::sample::select(PAYLOADS.map(|(payload_kg, _)| payload_kg).to_vec());
    prop_oneof![
        2 => Just(Payload::Unknown),
        1 => (0.05f32..0.08).prop_map(Payload::Known),
        1 => on_a_slice.prop_map(Payload::Known),
    ]
}

/// Whether a setpoint is safe with a load: in every slice.
fn is_safe_load(load: &Load<'_>, branch: u8, setpoint: f32) -> bool {
    load.slices().all(|slice| is_safe(&slice, branch, setpoint))
}

fn commanded(answer: Answer) -> Option<f32> {
    match answer {
        Answer::Go { setpoint, .. } | Answer::OnlyAsFarAs { setpoint, .. } => Some(setpoint),
        Answer::NotOnThisSide { as_far_as, .. } => Some(as_far_as),
        Answer::Refused(_) => None,
    }
}

proptest! {
    #![proptest_config(cases(3000))]

    #[test]
    fn a_commanded_setpoint_is_safe_in_every_slice(
        draft in any_draft(),
        payload in any_payload(),
        branch in 0u8..4,
        setpoint in any_setpoint(),
        request in any_setpoint(),
    ) {
        let bytes = draft.bytes();
        let table = Table::new(&bytes).expect("a sound table");
        let load = table.load(payload).expect("a payload of the table");
        let limits = load.limits();
        let answer = choose(&load, Present { branch, setpoint }, request);
        if let Some(at) = commanded(answer) {
            prop_assert!(is_safe_load(&load, branch, at) && load.safe_at(branch, at), "{answer:?}");
        }
        match answer {
            Answer::Go { setpoint: at, tensions, reserves } => {
                prop_assert!(at == request && tensions.allowed(&limits));
                prop_assert_eq!(Some(reserves), load.reserves(branch, at));
            }
            Answer::OnlyAsFarAs { setpoint: at, tensions, reserves, why } => {
                prop_assert!(tensions.allowed(&limits) && !is_safe_load(&load, branch, request));
                prop_assert_eq!(Some(reserves), load.reserves(branch, at));
                // The limit is that of a slice of this load, or the last line of defence.
                let from_slice = load.slices().any(|slice| why.value == slice.payload_kg);
                prop_assert!(from_slice || why.requirement == Requirement::TensionFactor);
            }
            Answer::NotOnThisSide { other, as_far_as, tensions, reserves, .. } => {
                prop_assert!(tensions.allowed(&limits) && other != branch);
                prop_assert!(is_safe_load(&load, other, request));
                prop_assert!(!is_safe_load(&load, branch, request));
                prop_assert_eq!(Some(reserves), load.reserves(branch, as_far_as));
            }
            Answer::Refused(Refusal::Gap { from, to, .. }) => {
                prop_assert!(from < to && is_safe_load(&load, branch, request));
                // From end to end nothing of the gap is safe.
                prop_assert!(load.safe_at(branch, from) && load.safe_at(branch, to));
                for step in 1..40u8 {
                    let inside = from + (to - from) * f32::from(step) / 40.0;
                    let within = inside > from && inside < to;
                    prop_assert!(!within || !load.safe_at(branch, inside), "{inside}");
                }
            }
            Answer::Refused(_) => {}
        }
    }

    /// The way from a safe setpoint to a commanded one is safe throughout, the tensions apart.
    #[test]
    fn nothing_unsafe_is_crossed_on_the_way(
        draft in any_draft(),
        payload in any_payload(),
        branch in prop::sample::select(vec![0u8, 2]),
        setpoint in -1f32..1.0,
        request in -1f32..1.0,
    ) {
        with_load(&draft, payload, |load| {
            let answer = choose(load, Present { branch, setpoint }, request);
            if let Some(at) = commanded(answer).filter(|_| load.safe_at(branch, setpoint)) {
                for step in 0..=60u8 {
                    let on_the_way = setpoint + (at - setpoint) * f32::from(step) / 60.0;
                    // Rounding must not carry it beyond the ends.
                    let on_the_way = on_the_way.clamp(setpoint.min(at), setpoint.max(at));
                    prop_assert!(load.safe_at(branch, on_the_way), "{on_the_way} {answer:?}");
                }
            }
            Ok(())
        })?;
    }

    #[test]
    fn an_unknown_payload_allows_nothing_that_a_known_one_refuses(
        draft in any_draft(),
        payload_kg in prop_oneof![0.05f32..=0.08, prop::sample::select(vec![0.05f32, 0.06, 0.08])],
        branch in prop::sample::select(vec![0u8, 2]),
        setpoint in -1f32..1.0,
        request in -1f32..1.0,
    ) {
        let bytes = draft.bytes();
        let table = Table::new(&bytes).expect("a sound table");
        let unknown = table.load(Payload::Unknown).expect("always");
        let known = table.load(Payload::Known(payload_kg)).expect("in the table");
        let present = Present { branch, setpoint };
        if let Some(at) = commanded(choose(&unknown, present, request)) {
            let answer = choose(&known, present, at);
            // With this payload the arm cannot be where it is said to be: nothing can be said about the way.
            if !matches!(answer, Answer::Refused(Refusal::PresentOutsideBranch { .. })) {
                let goes = matches!(answer, Answer::Go { .. });
                prop_assert!(goes, "{answer:?}");
            }
            prop_assert!(is_safe_load(&known, branch, at));
            let (worst, reserves) = (unknown.reserves(branch, at), known.reserves(branch, at));
            let (worst, reserves) = (worst.expect("safe"), reserves.expect("safe"));
            prop_assert_eq!(worst.worse(&reserves), worst);
        }
    }
}
