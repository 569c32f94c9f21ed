//! The firmware with the greenhouse wand's finished table: whatever is asked, nothing is commanded outside the usable
//! stretches of every slice that the payload brings into play.

use firmware_core::{
    Answer, Limit, Payload, Present, Refusal, Requirement, Slice, Table, TensionPair, choose,
};
use host_tests::arms::wand;
use host_tests::random_arms::draws;
use host_tests::tolerances::STORED;
use proptest::prelude::*;
use proptest::test_runner::TestRunner;
use std::sync::OnceLock;
use table_gen::arm_file::{Arm, KeepOut, Region};
use table_gen::margins::requirements::Assessor;
use table_gen::rest_states::RestStates;
use table_gen::rest_states::curve::Solver;
use table_gen::rod::Rod;
use table_gen::table::{Tabulation, tabulate};

/// Places looked at between two setpoints.
const BETWEEN: usize = 60;
/// Ends of stretches are known to the coarse grid halved ten times (rad, the wand's range).
const END: f64 = 3e-4;

fn made(arm: &Arm) -> Tabulation {
    tabulate(arm, &|_| {}).unwrap_or_else(|error| panic!("{}: {error}", arm.name))
}

fn tabulation() -> &'static Tabulation {
    static MADE: OnceLock<Tabulation> = OnceLock::new();
    MADE.get_or_init(|| made(&wand()))
}

/// The slices that count with `payload`: all, or the nearest below and above. `None` when it is not the table's.
fn slices<'a>(table: &Table<'a>, payload: Payload) -> Option<Vec<Slice<'a>>> {
    let all: Vec<Slice> = table.slices().collect();
    let Payload::Known(payload_kg) = payload else {
        return Some(all);
    };
    let below = all.iter().rfind(|slice| slice.payload_kg <= payload_kg)?;
    let above = all.iter().find(|slice| slice.payload_kg >= payload_kg)?;
    Some(vec![*below, *above])
}

fn usable(slices: &[Slice], branch: u8, setpoint: f32) -> bool {
    slices.iter().all(|slice| {
        slice
            .stretches(branch)
            .any(|stretch| stretch.entry.from <= setpoint && setpoint <= stretch.entry.to)
    })
}

/// Whether one can go from `a` to `b` without leaving usable setpoints: in each slice one stretch holds both.
fn joined(slices: &[Slice], branch: u8, a: f32, b: f32) -> bool {
    let finite = a.is_finite() && b.is_finite();
    let joins = |slice: &Slice| {
        slice.stretches(branch).any(|stretch| {
            let (from, to) = (stretch.entry.from, stretch.entry.to);
            from <= a.min(b) && a.max(b) <= to
        })
    };
    finite && slices.iter().all(joins)
}

fn places_between(a: f32, b: f32) -> impl Iterator<Item = f32> {
    (0..=BETWEEN).map(move |k| {
        let x = k as f32 / BETWEEN as f32;
        (a * (1.0 - x) + b * x).clamp(a.min(b), a.max(b))
    })
}

/// The commanded setpoint with its tensions, and what forbids going on.
fn commanded(answer: &Answer) -> Option<(f32, TensionPair, Option<Limit>)> {
    match *answer {
        Answer::Go {
            setpoint, tensions, ..
        } => Some((setpoint, tensions, None)),
        Answer::OnlyAsFarAs {
            setpoint,
            tensions,
            why,
            ..
        } => Some((setpoint, tensions, Some(why))),
        Answer::NotOnThisSide {
            as_far_as,
            tensions,
            why,
            ..
        } => Some((as_far_as, tensions, Some(why))),
        Answer::Refused(_) => None,
    }
}

/// What holds for every answer.
fn check(table: &Table, payload: Payload, present: Present, request: f32) {
    let what = format!("{payload:?}, {present:?}, request {request}");
    let slices = slices(table, payload);
    let load = match (table.load(payload), &slices) {
        (Ok(load), Some(_)) => load,
        (Err(error), None) => return assert!(!error.to_string().is_empty()),
        (found, _) => panic!("{what}: {found:?}"),
    };
    let slices = slices.expect("loaded");
    let Present {
        branch,
        setpoint: at,
    } = present;
    let answer = choose(&load, present, request);
    let message = answer.to_string();
    let what = format!("{what}: {answer:?}");
    assert!(!message.contains("not a number"), "{what}");
    let starts_usable = usable(&slices, branch, at);
    if starts_usable && joined(&slices, branch, at, request) {
        assert!(
            matches!(answer, Answer::Go { .. }),
            "{what}: it can be reached"
        );
    }
    let Some((commanded, tensions, why)) = commanded(&answer) else {
        return refusal(&slices, present, request, &answer, &what);
    };
    assert!(
        usable(&slices, branch, commanded),
        "{what}: outside the usable stretches"
    );
    let most_n = table.limits().max_tension_n;
    for tension_n in [tensions.a_n, tensions.b_n] {
        assert!((0.0..=most_n).contains(&tension_n), "{what}: tension");
    }
    if starts_usable {
        assert!(
            joined(&slices, branch, at, commanded),
            "{what}: a gap on the way"
        );
        for place in places_between(at, commanded) {
            assert!(usable(&slices, branch, place), "{what}: {place} on the way");
        }
    }
    match why {
        None => assert_eq!(commanded, request, "{what}"),
        Some(limit) => {
            let next = if request > commanded {
                commanded.next_up()
            } else {
                commanded.next_down()
            };
            assert!(
                !joined(&slices, branch, commanded, next),
                "{what}: one can go on"
            );
            limit_holds(&limit, &what);
            assert!(message.contains(&limit.to_string()), "{what}: {message}");
        }
    }
    if let Answer::NotOnThisSide { other, .. } = answer {
        assert!(
            other != branch && usable(&slices, other, request),
            "{what}: other side"
        );
        assert!(
            !usable(&slices, branch, request),
            "{what}: it is on this side"
        );
    }
}

/// The value at the end of a stretch still meets the limit, barely.
fn limit_holds(limit: &Limit, what: &str) {
    let Limit {
        requirement,
        value,
        limit,
    } = *limit;
    match requirement {
        Requirement::TableRange | Requirement::Stable => {}
        Requirement::Strain => assert!(value <= limit, "{what}: strain {value}, limit {limit}"),
        _ => assert!(
            value >= limit * (1.0 - STORED as f32),
            "{what}: {value}, limit {limit}"
        ),
    }
}

fn refusal(slices: &[Slice], present: Present, request: f32, answer: &Answer, what: &str) {
    let Answer::Refused(refusal) = *answer else {
        panic!("{what}: neither commanded nor refused")
    };
    let Present { branch, setpoint } = present;
    match refusal {
        Refusal::NotFinite { .. } => {
            assert!(!setpoint.is_finite() || !request.is_finite(), "{what}");
        }
        Refusal::Gap { from, to, limit } => {
            assert!(usable(slices, branch, request), "{what}: nothing to reach");
            assert!(
                from < to && !joined(slices, branch, from, to),
                "{what}: no gap"
            );
            limit_holds(&limit, what);
        }
        Refusal::NoSuchBranch { .. } => {
            assert!(
                slices.iter().all(|slice| slice.branch(branch).is_none()),
                "{what}"
            );
        }
        Refusal::UnstableBranch { index, .. } => assert!(index > 0, "{what}"),
        Refusal::PresentOutsideBranch { from, to, .. } => {
            assert!(!(from..=to).contains(&setpoint), "{what}");
        }
        Refusal::NothingSafeHere { .. } => {
            assert!(
                !usable(slices, branch, setpoint),
                "{what}: it may stay where it is"
            );
        }
    }
}

fn setpoints() -> impl Strategy<Value = f32> {
    prop_oneof![
        6 => -2.3f32..2.3,
        2 => -0.5f32..0.5,
        1 => any::<f32>(),
        1 => prop_oneof![Just(f32::NAN), Just(f32::INFINITY), Just(f32::NEG_INFINITY)],
    ]
}

fn payloads() -> impl Strategy<Value = Payload> {
    prop_oneof![
        3 => Just(Payload::Unknown),
        5 => (0.050f32..=0.075).prop_map(Payload::Known),
        2 => prop_oneof![Just(0.05f32), Just(0.06), Just(0.075)].prop_map(Payload::Known),
        1 => any::<f32>().prop_map(Payload::Known),
        1 => prop_oneof![Just(f32::NAN), Just(f32::INFINITY), Just(f32::NEG_INFINITY)]
            .prop_map(Payload::Known),
    ]
}

fn branches() -> impl Strategy<Value = u8> {
    prop_oneof![8 => 0u8..4, 1 => any::<u8>()]
}

/// Checks `cases` draws of everything the firmware can be asked.
fn anything(table: &Table, cases: u32) {
    let asked = (payloads(), branches(), setpoints(), setpoints());
    TestRunner::new(draws(cases))
        .run(&asked, |(payload, branch, setpoint, request)| {
            check(table, payload, Present { branch, setpoint }, request);
            Ok(())
        })
        .unwrap_or_else(|error| panic!("{error}"));
}

#[test]
fn requests_anywhere() {
    let table = Table::new(&tabulation().bytes).expect("a table");
    anything(&table, 30_000);
    // The ends themselves, and their neighbours.
    let ends: Vec<(u8, f32)> = table
        .slices()
        .flat_map(|slice| (0..4).flat_map(move |branch| slice.stretches(branch)))
        .flat_map(|stretch| {
            [stretch.entry.from, stretch.entry.to].map(|at| (stretch.entry.branch, at))
        })
        .flat_map(|(branch, at)| [at.next_down(), at, at.next_up()].map(|at| (branch, at)))
        .collect();
    for payload in [
        Payload::Unknown,
        Payload::Known(0.05),
        Payload::Known(0.0551),
    ] {
        for &(branch, setpoint) in &ends {
            for &(_, request) in &ends {
                check(&table, payload, Present { branch, setpoint }, request);
            }
        }
    }
}

/// Far beyond the fold: as far as the margins of every slice allow, by name and number.
#[test]
fn far_request_is_answered_by_the_nearest_usable_setpoint() {
    let table = Table::new(&tabulation().bytes).expect("a table");
    let load = table.load(Payload::Unknown).expect("always");
    let slices: Vec<Slice> = table.slices().collect();
    // The branches mirror each other: 0 leans to the left, 2 to the right.
    let present = Present {
        branch: 2,
        setpoint: 1.0,
    };
    let answer = choose(&load, present, 10.0);
    let Answer::OnlyAsFarAs { setpoint, why, .. } = answer else {
        panic!("{answer:?}")
    };
    assert_eq!(setpoint, highest_usable(&slices, 2));
    let message = answer.to_string();
    let (value, limit) = (why.value, why.limit);
    assert!(value >= limit && value < limit * 1.02, "{message}");
    assert!(message.contains("0.02"), "{message}");
    let back = choose(&load, present, -1.5);
    let Answer::NotOnThisSide { other, why, .. } = back else {
        panic!("{back:?}")
    };
    assert_eq!(other, 0, "{back}");
    assert_eq!(why.requirement, Requirement::SetpointReserve, "{back}");
    assert_eq!(f64::from(why.limit), f64::from(4f32.to_radians()), "{back}");
}

/// The highest setpoint usable in all slices.
fn highest_usable(slices: &[Slice], branch: u8) -> f32 {
    let ends = slices.iter().map(|slice| {
        let all = slice.stretches(branch).map(|stretch| stretch.entry.to);
        all.fold(f32::NEG_INFINITY, f32::max)
    });
    ends.fold(f32::INFINITY, f32::min)
}

/// What `why` calls usable is what the table allows whatever the payload.
#[test]
fn why_and_the_table_agree() {
    let made = tabulation();
    let table = Table::new(&made.bytes).expect("a table");
    let slices: Vec<Slice> = table.slices().collect();
    let assessor = Assessor::new(&made.arm, &made.corners);
    let ends: Vec<f32> = slices
        .iter()
        .flat_map(|slice| (0..4).flat_map(|branch| slice.stretches(branch)))
        .flat_map(|stretch| [stretch.entry.from, stretch.entry.to])
        .collect();
    let mut seen = [0; 2];
    for k in 0..60 {
        let setpoint = -2.09 + 4.18 * (f64::from(k) * 0.618_033_988_749_894_9).fract();
        if ends
            .iter()
            .any(|end| (f64::from(*end) - setpoint).abs() < END)
        {
            continue;
        }
        for assessed in assessor.assess(setpoint, None, None).expect("rest states") {
            let findings = assessor.findings(&assessed, None);
            let usable_by_why = findings.iter().all(|finding| finding.holds);
            let usable_by_table = usable(&slices, assessed.label as u8, setpoint as f32);
            assert_eq!(
                usable_by_why, usable_by_table,
                "branch {}, setpoint {setpoint}: {findings:#?}",
                assessed.label
            );
            seen[usize::from(usable_by_why)] += 1;
        }
    }
    assert!(seen[0] > 10 && seen[1] > 20, "usable or not: {seen:?}");
}

/// A small disc just outside the way of the tip, at the tip angle `at`: the wand can rest on either side of it.
fn wand_with_a_gap(at: f64) -> Arm {
    let mut arm = wand();
    arm.name = "wand with a post in its way".into();
    // Narrow tolerances: the tip passes in nearly the same place in every corner.
    arm.payload.range_kg = [0.0595, 0.0605];
    arm.tolerance.stiffness_fraction = 0.01;
    arm.base.tolerance_rad = 0.003;
    arm.require.clearance_m = 0.004;
    arm.keep_out.clear();
    let plain = RestStates::find(&Rod::new(&arm), &arm.accuracy, arm.gamma())
        .unwrap_or_else(|error| panic!("{error}"));
    let right = plain.branches.last().expect("some branch");
    let tip = |setpoint: f64| {
        let mut solver = Solver::new(&plain.modal);
        let state = right
            .state_at(&mut solver, setpoint)
            .expect("on the branch");
        let (x, y) = plain.modal.tip(&state.c);
        [x * arm.spine.length_m, y * arm.spine.length_m]
    };
    let (before, there, after) = (tip(at - 0.01), tip(at), tip(at + 0.01));
    let along = [after[0] - before[0], after[1] - before[1]];
    let size = along[0].hypot(along[1]);
    // Outside is where the way of the tip curves away from.
    let bend = [
        before[0] + after[0] - 2.0 * there[0],
        before[1] + after[1] - 2.0 * there[1],
    ];
    let across = [along[1] / size, -along[0] / size];
    let side = if bend[0] * across[0] + bend[1] * across[1] > 0.0 {
        -1.0
    } else {
        1.0
    };
    let centre_m = [0, 1].map(|i| there[i] + side * 0.010 * across[i]);
    arm.keep_out.push(KeepOut {
        name: "post".into(),
        region: Region::Disc {
            centre_m,
            radius_m: 0.006,
        },
    });
    arm
}

#[test]
fn gap_on_the_same_branch_is_refused_by_name() {
    let made = made(&wand_with_a_gap(0.9));
    let table = Table::new(&made.bytes).expect("a table");
    let slices: Vec<Slice> = table.slices().collect();
    let number = slices[0]
        .branches()
        .filter(|b| b.entry.is_stable())
        .last()
        .expect("stable")
        .number;
    for slice in &slices {
        let ends: Vec<_> = slice
            .stretches(number)
            .map(|s| (s.entry.from, s.entry.to))
            .collect();
        println!("{} kg: {ends:?}", slice.payload_kg);
        assert!(ends.len() >= 2, "the post cuts no gap: {ends:?}");
    }
    let load = table.load(Payload::Unknown).expect("always");
    let present = Present {
        branch: number,
        setpoint: 0.3,
    };
    let answer = choose(&load, present, 1.6);
    let Answer::Refused(Refusal::Gap { from, to, limit }) = answer else {
        panic!("{answer:?}")
    };
    assert!(0.3 < from && from < 0.9 && 0.9 < to && to < 1.6, "{answer}");
    assert_eq!(limit.requirement, Requirement::Clearance);
    let message = answer.to_string();
    assert!(message.contains("keep-out region"), "{message}");
    // Into the gap: as far as its edge.
    let answer = choose(&load, present, 0.9);
    let Answer::OnlyAsFarAs { setpoint, .. } = answer else {
        panic!("{answer:?}")
    };
    assert_eq!(setpoint, from);
    // And back from the other side.
    let beyond = Present {
        branch: number,
        setpoint: 1.6,
    };
    let answer = choose(&load, beyond, 0.3);
    assert!(
        matches!(answer, Answer::Refused(Refusal::Gap { .. })),
        "{answer}"
    );
    anything(&table, 10_000);
}

#[test]
fn table_is_small_and_read_where_it_lies() {
    let bytes = &tabulation().bytes;
    let table = Table::new(bytes).expect("a table");
    println!(
        "{} bytes, {} slices, Table of {} bytes",
        bytes.len(),
        table.slices().count(),
        size_of::<Table>()
    );
    assert!(bytes.len() <= 16 * 1024, "{} bytes", bytes.len());
    assert!(table.slices().count() >= 3, "slices");
    // Pointer and length, two lengths, the constants of the arm: nothing that grows with the table.
    assert!(size_of::<Table>() <= 80, "{} bytes", size_of::<Table>());
    // At any alignment, with the same answers.
    let mut shifted = vec![0; bytes.len() + 8];
    for shift in 1..8 {
        shifted[shift..shift + bytes.len()].copy_from_slice(bytes);
        let moved = Table::new(&shifted[shift..shift + bytes.len()]).expect("a table");
        for (here, there) in table.slices().zip(moved.slices()) {
            for setpoint in [-1.5, -0.4, 0.7, 1.6] {
                for branch in [0, 2] {
                    assert_eq!(
                        here.reserves(branch, setpoint),
                        there.reserves(branch, setpoint)
                    );
                    assert_eq!(here.at(branch, setpoint), there.at(branch, setpoint));
                }
            }
        }
    }
}
