//! Planned crossings: they arrive as written, and what makes no sense is refused.

use firmware_core::table::{CrossingFault, Fault};
use firmware_core::{Crossing, Drive, Method, SurveyBand, Table, TableError};

use crate::arm::{Draft, draft};

/// A sound crossing of the invented arm.
pub fn crossing(from: u8, to: u8) -> Crossing {
    Crossing {
        from,
        to,
        setpoint_from: -0.1,
        setpoint_to: 0.1,
        method: Method::Inject,
        rest_setpoint: 0.0,
        amplitude_rad: 0.3,
        eta: 2.5,
        lean_setpoint: 0.0,
        longest_s: 3.0,
        most_tip_travel_rad: 0.8,
        most_couple_n_m: 0.2,
        most_tip_speed_m_s: 3.0,
        lowest_clearance_m: 0.05,
        peak_couple_n_m: 0.15,
        peak_tip_speed_m_s: 2.0,
        takes_s: 4.0,
        successes: 9,
        trials: 9,
        allowed: true,
    }
}

/// The invented arm with both crossings.
pub fn draft_with_crossings() -> Draft {
    let mut draft = draft(Drive::HeldTip, 40.0);
    draft.slices[0].crossings = vec![crossing(0, 2), crossing(2, 0)];
    draft.slices[0].survey = SurveyBand { lo: 0.8, hi: 1.2 };
    draft
}

fn fault(change: impl FnOnce(&mut Crossing)) -> Option<CrossingFault> {
    let mut draft = draft_with_crossings();
    change(&mut draft.slices[0].crossings[1]);
    match Table::new(&draft.bytes()) {
        Err(TableError::Meaning(Fault::Crossing {
            slice: 0,
            crossing: 1,
            fault,
        })) => Some(fault),
        Ok(_) => None,
        Err(other) => panic!("{other}"),
    }
}

#[test]
fn arrive_as_written() {
    let draft = draft_with_crossings();
    let bytes = draft.bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let slice = table.slices().next().expect("one slice");
    let read: Vec<Crossing> = slice.crossings().collect();
    assert_eq!(read, draft.slices[0].crossings);
    assert_eq!(slice.survey, draft.slices[0].survey);
}

#[test]
fn of_one_slice_do_not_reach_the_next() {
    let mut draft = crate::arm::draft_with_payloads(40.0);
    draft.slices[0].crossings = vec![crossing(0, 2)];
    draft.slices[2].crossings = vec![crossing(2, 0), crossing(0, 2)];
    let bytes = draft.bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let counts: Vec<usize> = table
        .slices()
        .map(|slice| slice.crossings().count())
        .collect();
    assert_eq!(counts, [1, 0, 2]);
}

#[test]
fn that_make_no_sense_are_refused() {
    use CrossingFault as F;
    let value = |field, value| Some(F::Value { field, value });
    assert_eq!(fault(|_| ()), None);
    assert_eq!(fault(|c| c.to = 2), Some(F::SameBranch { branch: 2 }));
    assert_eq!(fault(|c| c.to = 1), Some(F::NotStable { branch: 1 }));
    assert_eq!(fault(|c| c.to = 7), Some(F::NotStable { branch: 7 }));
    assert_eq!(
        fault(|c| c.setpoint_from = -0.9),
        value("setpoint_from", -0.9)
    );
    assert_eq!(fault(|c| c.setpoint_to = -0.2), value("setpoint_to", -0.2));
    assert_eq!(
        fault(|c| c.rest_setpoint = 0.9),
        value("rest_setpoint", 0.9)
    );
    assert_eq!(
        fault(|c| c.amplitude_rad = 0.0),
        value("amplitude_rad", 0.0)
    );
    assert_eq!(fault(|c| c.eta = 0.0), value("eta", 0.0));
    assert_eq!(fault(|c| c.longest_s = -1.0), value("longest_s", -1.0));
    assert_eq!(
        fault(|c| c.most_tip_travel_rad = 0.2),
        value("most_tip_travel_rad", 0.2)
    );
    assert_eq!(
        fault(|c| c.most_couple_n_m = 0.5),
        value("most_couple_n_m", 0.5)
    );
    assert_eq!(
        fault(|c| c.most_tip_speed_m_s = 0.0),
        value("most_tip_speed_m_s", 0.0)
    );
    assert_eq!(
        fault(|c| c.peak_couple_n_m = -0.1),
        value("peak_couple_n_m", -0.1)
    );
    assert_eq!(fault(|c| c.takes_s = 2e9), value("takes_s", 2e9));
    assert_eq!(
        fault(|c| c.successes = 10),
        Some(F::Trials {
            successes: 10,
            trials: 9
        })
    );
    assert_eq!(
        fault(|c| c.successes = 8),
        Some(F::AllowedWithFailures {
            successes: 8,
            trials: 9
        })
    );
    // Not allowed, it may have failed and end anywhere on the branch.
    assert_eq!(fault(|c| (c.successes, c.allowed) = (8, false)), None);
    let fold = crate::arm::fold() as f32;
    let beyond = fold - 5e-4;
    assert_eq!(
        fault(|c| c.rest_setpoint = beyond),
        Some(F::EndsOutsideStretches {
            rest_setpoint: beyond
        })
    );
    assert!(fault(|c| c.lean_setpoint = f32::NAN).is_some());
}

#[test]
fn are_for_a_held_tip() {
    let mut draft = draft(Drive::AppliedCouple, 40.0);
    draft.slices[0].crossings = vec![crossing(0, 2)];
    assert_eq!(
        Table::new(&draft.bytes()).err(),
        Some(TableError::Meaning(Fault::Crossing {
            slice: 0,
            crossing: 0,
            fault: CrossingFault::Drive
        }))
    );
}

#[test]
fn a_survey_band_holds_one() {
    for (lo, hi) in [
        (1.1, 1.2),
        (0.8, 0.9),
        (0.0, 1.0),
        (f32::NAN, 1.0),
        (1.0, 1e10),
    ] {
        let mut draft = draft_with_crossings();
        draft.slices[0].survey = SurveyBand { lo, hi };
        assert!(matches!(
            Table::new(&draft.bytes()),
            Err(TableError::Meaning(Fault::SurveyBand { slice: 0, .. }))
        ));
    }
}

#[test]
fn say_what_they_are() {
    assert_eq!(
        crossing(0, 2).to_string(),
        "from branch 0 to 2 at setpoints -0.1 to 0.1 by swinging: allowed, 9 of 9 trials succeeded"
    );
}
