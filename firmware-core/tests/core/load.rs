//! Which slices a payload brings into play, and what they answer together.

use firmware_core::{Load, LoadError, LookupError, Payload, Reserves, RestState, Table};

use crate::arm::{
    Draft, NOMINAL_KG, PAYLOADS, draft_with_payloads, exact, fold, reserves, with_load,
};
use crate::tolerance;

const TENSION_N: f32 = 60.0;

fn payloads_of(load: &Load<'_>) -> Vec<f32> {
    load.slices().map(|slice| slice.payload_kg).collect()
}

fn respected(payload: Payload) -> Vec<f32> {
    with_load(&draft_with_payloads(TENSION_N), payload, payloads_of)
}

#[test]
fn a_payload_is_enclosed_by_its_neighbours() {
    for (payload_kg, expected) in [
        (0.05, vec![0.05]),
        (0.053, vec![0.05, 0.06]),
        (0.06, vec![0.06]),
        (0.06f32.next_up(), vec![0.06, 0.08]),
        (0.0799, vec![0.06, 0.08]),
        (0.08, vec![0.08]),
    ] {
        assert_eq!(respected(Payload::Known(payload_kg)), expected);
    }
    assert_eq!(respected(Payload::Unknown), vec![0.05, 0.06, 0.08]);
}

#[test]
fn what_the_table_is_not_made_for_is_refused() {
    let bytes = draft_with_payloads(TENSION_N).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let error = |payload_kg| table.load(Payload::Known(payload_kg)).err();
    for payload_kg in [f32::NAN, f32::INFINITY, f32::NEG_INFINITY] {
        assert_eq!(error(payload_kg), Some(LoadError::NotFinite));
    }
    for payload_kg in [0.049, 0.081, 0.0, -1.0, 1e30] {
        let outside = LoadError::OutsideTable {
            payload_kg,
            from_kg: 0.05,
            to_kg: 0.08,
        };
        assert_eq!(error(payload_kg), Some(outside));
    }
    let text = error(0.1).expect("outside").to_string();
    assert!(
        text.contains("0.1 kg") && text.contains("0.05 to 0.08 kg"),
        "{text}"
    );
}

#[test]
fn a_setpoint_is_safe_where_every_slice_has_it() {
    // The upper well's stretch ends at 1 less the payload.
    let draft = draft_with_payloads(TENSION_N);
    let safe = |payload, setpoint| with_load(&draft, payload, |load| load.safe_at(2, setpoint));
    let end = |payload_kg: f32| {
        draft
            .slices
            .iter()
            .find(|s| s.payload_kg == payload_kg)
            .expect("a slice")
            .stretches[1]
            .0
            .to
    };
    for (payload, heaviest_kg) in [
        (Payload::Known(0.05), 0.05),
        (Payload::Known(0.055), 0.06),
        (Payload::Known(0.07), 0.08),
        (Payload::Unknown, 0.08),
    ] {
        assert!(safe(payload, end(heaviest_kg)));
        assert!(!safe(payload, end(heaviest_kg).next_up()));
        assert!(!safe(payload, f32::NAN));
    }
    with_load(&draft, Payload::Unknown, |load| {
        assert!(!load.safe_at(1, 0.0) && !load.safe_at(7, 0.0));
    });
}

#[test]
fn reserves_are_the_worst_of_the_slices() {
    let draft = draft_with_payloads(TENSION_N);
    let x = 0.25;
    for (payload, factors) in [
        (Payload::Known(0.05), vec![0.9]),
        (Payload::Known(0.055), vec![0.9, 1.0]),
        (Payload::Known(0.07), vec![1.0, 1.2]),
        (Payload::Unknown, vec![0.9, 1.0, 1.2]),
    ] {
        let found = with_load(&draft, payload, |load| load.reserves(2, x)).expect("safe");
        let each = factors.iter().map(|factor| reserves(2, x, *factor));
        let expected = each.reduce(|a, b| a.worse(&b)).expect("a slice");
        for (found, expected) in found.to_values().iter().zip(expected.to_values()) {
            assert!(
                (found - expected).abs() <= tolerance::RESERVES,
                "{payload:?} {found} {expected}"
            );
        }
    }
    let none = |x| with_load(&draft, Payload::Unknown, |load| load.reserves(2, x));
    assert_eq!(none(0.93), None, "safe with the lightest payload only");
    assert_eq!(none(f32::NAN), None);
}

/// The state of the upper well at 0.2 with K larger by `factor`, from the closed form.
fn expected(factor: f64) -> [f64; 6] {
    let mut values = exact(firmware_core::Drive::HeldTip, 2, 0.2);
    for at in [1, 2, 5] {
        values[at] *= factor;
    }
    values
}

fn differs(state: &RestState, exact: [f64; 6]) -> f64 {
    let well = state.well.expect("a well");
    let found = [
        state.mean_angle_rad,
        state.couple_n_m,
        state.energy_j,
        well.tip_x_m,
        well.tip_y_m,
        well.restoring_n_m_per_rad,
    ];
    let error = |(found, exact): (f32, f64)| (f64::from(found) - exact).abs();
    found.into_iter().zip(exact).map(error).fold(0.0, f64::max)
}

#[test]
fn the_state_lies_on_a_line_between_two_payloads() {
    let draft = draft_with_payloads(TENSION_N);
    for (payload, factor) in [
        (Payload::Known(0.05), 0.9),
        (Payload::Known(0.055), 0.95),
        (Payload::Known(0.065), 1.05),
        (Payload::Known(0.08), 1.2),
        // The nominal one, whatever else is respected.
        (Payload::Unknown, 1.0),
    ] {
        let state = with_load(&draft, payload, |load| load.state(2, 0.2)).expect("covered");
        assert!(
            differs(&state, expected(factor)) <= tolerance::LOOKUP,
            "{payload:?} {state:?}"
        );
        assert_eq!(state.tip_angle_rad, 0.2);
    }
}

#[test]
fn the_barrier_between_two_payloads_is_the_lower_one() {
    let draft = draft_with_payloads(TENSION_N);
    let barrier = |payload_kg| {
        let state = with_load(&draft, Payload::Known(payload_kg), |load| {
            load.state(2, 0.2)
        });
        state
            .expect("covered")
            .well
            .expect("a well")
            .barrier_j
            .expect("a pass")
    };
    // It grows with K.
    assert!(barrier(0.06) < barrier(0.08));
    assert_eq!(barrier(0.079), barrier(0.06));
}

/// The heaviest payload has lost the lower well and its pass.
fn without_lower_well() -> Draft {
    let mut draft = draft_with_payloads(TENSION_N);
    let heaviest = &mut draft.slices[2];
    heaviest.branches.drain(..2);
    heaviest.branches[0].0.exits = 0;
    heaviest.stretches.remove(0);
    draft
}

#[test]
fn a_branch_may_end_between_two_payloads() {
    let draft = without_lower_well();
    let branches =
        |payload| with_load(&draft, payload, |load| load.branches().collect::<Vec<u8>>());
    assert_eq!(branches(Payload::Known(0.06)), [0, 1, 2]);
    assert_eq!(branches(Payload::Known(0.07)), [2]);
    assert_eq!(branches(Payload::Known(0.08)), [2]);
    assert_eq!(branches(Payload::Unknown), [0, 1, 2]);
    with_load(&draft, Payload::Known(0.07), |load| {
        assert!(!load.safe_at(0, -0.5));
        let missing = LookupError::NoSuchBranch { branch: 0 };
        assert_eq!(load.state(0, -0.5), Err(missing));
    });
    with_load(&draft, Payload::Unknown, |load| {
        assert!(!load.safe_at(0, -0.5), "not with the heaviest payload");
        assert!(load.state(0, -0.5).is_ok(), "the nominal one has it");
    });
    // The pass is gone too: the well knows no barrier there.
    let well = with_load(&draft, Payload::Known(0.08), |load| load.state(2, 0.2));
    assert_eq!(well.expect("covered").well.expect("a well").barrier_j, None);
    let well = with_load(&draft, Payload::Known(0.07), |load| load.state(2, 0.2));
    assert!(
        well.expect("covered")
            .well
            .expect("a well")
            .barrier_j
            .is_some()
    );
}

#[test]
fn errors_are_those_of_the_lookup() {
    let draft = draft_with_payloads(TENSION_N);
    with_load(&draft, Payload::Known(0.07), |load| {
        assert_eq!(load.state(2, f32::NAN), Err(LookupError::NotFinite));
        let outside = load.state(2, -0.9);
        let from = -fold() as f32;
        let expected = LookupError::OutsideBranch {
            setpoint: -0.9,
            from,
            to: 1.0,
        };
        assert_eq!(outside, Err(expected));
        assert_eq!(load.payload(), Payload::Known(0.07));
        assert_eq!(load.limits().nominal_payload_kg, NOMINAL_KG);
    });
}

#[test]
fn the_nominal_slice_is_found_wherever_it_is() {
    for (payload_kg, factor) in PAYLOADS {
        let mut draft = draft_with_payloads(TENSION_N);
        // Within rounding.
        draft.header.nominal_payload_kg = payload_kg.next_up();
        let state = with_load(&draft, Payload::Unknown, |load| load.state(2, 0.2));
        assert!(differs(&state.expect("covered"), expected(factor.into())) <= tolerance::LOOKUP);
    }
}

#[test]
fn a_load_is_copied_and_outlives_the_table_view() {
    let bytes = draft_with_payloads(TENSION_N).bytes();
    let load: Load<'_> = {
        let table = Table::new(&bytes).expect("a sound table");
        table.load(Payload::Unknown).expect("any table has it")
    };
    let copy = load;
    let both: [Option<Reserves>; 2] = [load.reserves(2, 0.1), copy.reserves(2, 0.1)];
    assert!(both[0].is_some() && both[0] == both[1]);
}
