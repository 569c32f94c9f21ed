//! Reserves to the limit of stability and energy barriers against published and computed values.
//!
//! The upright straight arm loses its stability at the critical stiffness of `critical_stiffness.json`.
//! A stiffer one can lose `1 - gamma_cr / gamma` of its stiffness until then. Payload `p` added to an arm
//! of unit mass with the fraction `f0` at its tip makes the fraction `f1 = (f0 + p) / (1 + p)` and divides
//! gamma by `1 + p`: with `gamma = (1 + p) gamma_cr(f1)` the reserve is `p = (f1 - f0) / (1 - f1)`.

use host_tests::arms::{UniformArm, carry};
use host_tests::reference::{number, parse, rows};
use host_tests::tolerances::{ASKED, ASKED_FOR_RESERVES, RESERVE, REST_STATE, ROUNDING};
use serde_json::Value;
use table_gen::arm_file::{Accuracy, Arm, STANDARD_GRAVITY_M_S2, Tolerance};
use table_gen::margins::corners::{Corners, Levels};
use table_gen::margins::requirements::{Assessed, Assessor, Look};
use table_gen::margins::reserves::{Grows, Reserve};
use table_gen::margins::shape::Stations;
use table_gen::margins::why::Why;
use table_gen::rest_states::RestStatesError;
use table_gen::rest_states::modes::ModalRod;
use table_gen::rod::{Held, Rod};

/// Enough modes for the critical stiffness of a straight arm to 1e-9.
const MODES: usize = 12;
/// How much stiffer than critical the arms are.
const STIFFER: [f64; 3] = [1.02, 1.3, 4.0];

fn critical_stiffness() -> Value {
    parse(include_str!("../reference/critical_stiffness.json"))
}

/// Drive, tip fraction and critical stiffness of every row.
fn mixes() -> Vec<(Held, f64, f64)> {
    let reference = critical_stiffness();
    let mut mixes = Vec::new();
    for (table, held) in [("free_tip", Held::TipCouple), ("held_tip", Held::TipAngle)] {
        for row in rows(&reference[table]) {
            mixes.push((held, number(&row["tip_fraction"]), number(&row["gamma_cr"])));
        }
    }
    mixes
}

fn upright(gamma: f64, tip_fraction: f64, held: Held) -> Arm {
    let arm = UniformArm {
        gamma,
        tip_fraction,
        tilt_rad: 0.0,
    };
    let mut arm = match held {
        Held::TipAngle => arm.held_tip(0.0),
        Held::TipCouple => arm.applied_couple(0.0),
    };
    arm.accuracy = Accuracy {
        angle_rad: ASKED_FOR_RESERVES,
        couple_fraction: ASKED_FOR_RESERVES,
    };
    arm
}

/// The reserve of the straight shape at the setpoint 0, as a fraction of stiffness or of the arm's mass.
fn straight_reserve(arm: &Arm, grows: Grows) -> Option<f64> {
    let modal = ModalRod::new(&Rod::new(arm), MODES);
    Reserve::new(&modal, 0.0, arm.gamma(), grows).run(&[0.0; MODES])
}

#[track_caller]
fn assert_reserve(found: Option<f64>, expected: f64, what: &str) {
    let found = found.unwrap_or_else(|| panic!("{what}: no bound found, {expected} expected"));
    assert!(
        (found - expected).abs() <= RESERVE,
        "{what}: {found} found, {expected} expected, off by {:e}",
        found - expected
    );
}

#[test]
fn stiffness_can_fall_to_the_critical_one() {
    for (held, fraction, critical) in mixes() {
        for stiffer in STIFFER {
            let arm = upright(stiffer * critical, fraction, held);
            assert_reserve(
                straight_reserve(&arm, Grows::StiffnessLoss),
                1.0 - 1.0 / stiffer,
                &format!("{held:?}, tip fraction {fraction}, {stiffer} of the critical stiffness"),
            );
        }
        let softer = upright(0.98 * critical, fraction, held);
        let nothing = straight_reserve(&softer, Grows::StiffnessLoss);
        assert_eq!(
            nothing,
            Some(0.0),
            "an arm softer than critical has no reserve"
        );
    }
}

/// Pairs of rows of one drive: from tip fraction and gamma, to the payload that makes the other row.
fn payload_pairs() -> Vec<(Held, f64, f64, f64)> {
    let mixes = mixes();
    let mut pairs = Vec::new();
    for &(held, from, _) in &mixes {
        for &(_, to, critical) in mixes.iter().filter(|mix| mix.0 == held) {
            if from < to && to < 0.8 {
                let payload = (to - from) / (1.0 - to);
                pairs.push((held, from, payload, (1.0 + payload) * critical));
            }
        }
    }
    assert!(pairs.len() >= 12, "every two mixes of a drive make a pair");
    pairs
}

#[test]
fn payload_can_grow_to_the_next_mix_that_is_critical() {
    for (held, fraction, payload, gamma) in payload_pairs() {
        assert_reserve(
            straight_reserve(&upright(gamma, fraction, held), Grows::Payload),
            payload,
            &format!("{held:?}, tip fraction {fraction}"),
        );
    }
}

/// The straight shape at the setpoint 0, judged in all corners.
fn straight(arm: &Arm, check: impl FnOnce(&Assessor, &Assessed)) {
    let corners = Corners::find(arm, Levels::EndsAndMiddle, &|_| {})
        .unwrap_or_else(|error| panic!("{}: {error}", arm.name));
    let assessor = Assessor::new(arm, &corners);
    let assessed = assessor.assess(0.0, None, None).expect("rest states at 0");
    assert_eq!(assessed.len(), 1, "{}: one stable shape", arm.name);
    check(&assessor, &assessed[0]);
}

/// Beyond the tolerance and in percent of the nominal stiffness, in the words of `why`.
fn stiffness_reserve_percent(arm: &Arm) -> Option<f64> {
    let why = Why::new(arm, 0.0, &|_| {}).unwrap_or_else(|error| panic!("{}: {error}", arm.name));
    let [branch] = &why.branches[..] else {
        panic!("{}: one stable shape", arm.name)
    };
    let mut requirements = branch.requirements.iter();
    let stiffness = requirements
        .find(|requirement| requirement.name == "stiffness_reserve_percent")
        .expect("named as in the arm file");
    assert_eq!(stiffness.unit, "%");
    stiffness.value
}

#[test]
fn whole_arms_keep_their_stiffness_reserve_beyond_the_tolerance() {
    for (held, fraction, critical) in mixes() {
        for tolerance in [0.0, 0.1] {
            let mut arm = upright(1.5 * critical, fraction, held);
            arm.tolerance = Tolerance {
                stiffness_fraction: tolerance,
            };
            let expected = 1.0 - tolerance - 1.0 / 1.5;
            let what = format!("{held:?}, tip fraction {fraction}, tolerance {tolerance}");
            let percent = stiffness_reserve_percent(&arm);
            assert_reserve(percent.map(|percent| 0.01 * percent), expected, &what);
        }
    }
}

/// The softest arm of the tolerances is the critical mix when it carries `payload` more than the nominal;
/// of that, `heavier` is already in the payload range.
#[test]
fn whole_arms_keep_their_payload_reserve_beyond_the_range() {
    for (held, fraction, payload, gamma) in payload_pairs() {
        for (tolerance, heavier) in [(0.0, 0.0), (0.0, 0.3), (0.1, 0.3)] {
            let mut arm = upright(gamma / (1.0 - tolerance), fraction, held);
            arm.tolerance = Tolerance {
                stiffness_fraction: tolerance,
            };
            let heaviest_kg = fraction + heavier * payload;
            arm.payload.range_kg = [fraction, heaviest_kg];
            let what = format!(
                "{held:?}, tip fraction {fraction}, {heavier} of {payload} kg, {tolerance}"
            );
            straight(&arm, |_, assessed| {
                let (reserve_kg, corner) = assessed.payload_reserve.expect("bounded");
                assert_reserve(Some(reserve_kg), (1.0 - heavier) * payload, &what);
                assert_eq!(corner.payload_kg, heaviest_kg, "{what}");
                assert!(
                    (corner.stiffness_percent + 100.0 * tolerance).abs() < ROUNDING,
                    "{what}"
                );
            });
        }
    }
}

/// The corners of the nominal arm alone, in the tightest accuracy that 24 modes reach.
fn nominal(arm: &mut Arm) -> Corners {
    for asked in ASKED {
        arm.accuracy = Accuracy {
            angle_rad: asked,
            couple_fraction: asked,
        };
        match Corners::find(arm, Levels::Nominal, &|_| {}) {
            Ok(corners) => return corners,
            Err(RestStatesError::TooSoft { .. }) => {}
            Err(error) => panic!("{}: {error}", arm.name),
        }
    }
    panic!("{}: too soft", arm.name)
}

#[test]
fn barriers_of_the_nominal_arm() {
    for row in rows(&parse(include_str!("../reference/barriers.json"))["held_tip"]) {
        assert_eq!(
            row["mass"], "tip",
            "the arms here carry all their mass at the tip"
        );
        let setpoint = number(&row["q0"]);
        let mut arm = UniformArm::with_tip_mass(number(&row["gamma"])).held_tip(setpoint);
        let corners = nominal(&mut arm);
        let assessor = Assessor::new(&arm, &corners);
        let assessed = assessor.assess(setpoint, None, None).expect("rest states");
        let states = row["states"].as_array().expect("a list");
        assert_eq!(
            assessed.len(),
            states.len(),
            "stable states at gamma {} q0 {setpoint}",
            row["gamma"]
        );
        for state in states {
            let what = format!("gamma {}, q0 {setpoint}, q1 {}", row["gamma"], state["q1"]);
            let mean_angle = number(&state["q1"]);
            let found = assessed
                .iter()
                .find(|assessed| {
                    let own = corners
                        .nominal_state(assessed.label, setpoint)
                        .expect("on the branch");
                    (own.mean_angle() - mean_angle).abs() < 1e-4
                })
                .unwrap_or_else(|| panic!("{what}: not found"));
            let Look::There(margins) = found.margins[0] else {
                panic!("{what}: the nominal arm is its own corner")
            };
            let barrier_j = margins.barrier_j.expect("a pass leads out");
            let expected = number(&state["barrier"]);
            assert!(
                (barrier_j / STANDARD_GRAVITY_M_S2 - expected).abs() <= REST_STATE,
                "{what}: barrier {} found, {expected} expected",
                barrier_j / STANDARD_GRAVITY_M_S2
            );
        }
    }
}

/// All mass at the tip: the impulse meets 1 kg, whatever the shape.
#[test]
fn knock_of_a_payload_alone() {
    for setpoint in [0.0, 0.5] {
        let mut arm = UniformArm::with_tip_mass(0.05).held_tip(setpoint);
        let corners = nominal(&mut arm);
        let assessor = Assessor::new(&arm, &corners);
        for assessed in assessor.assess(setpoint, None, None).expect("rest states") {
            let Look::There(margins) = assessed.margins[0] else {
                panic!("the nominal arm is its own corner")
            };
            let expected = (2.0 * margins.barrier_j.expect("a pass leads out")).sqrt();
            let knock = margins.knock_n_s.expect("as the barrier");
            assert!(
                (knock - expected).abs() <= RESERVE * expected,
                "tip held at {setpoint}: knock {knock} N s found, {expected} expected"
            );
        }
    }
}

/// With mass along the spine too: `sqrt(2 m barrier)` of the library's own mass and barrier.
#[test]
fn knock_is_consistent_with_mass_and_barrier() {
    let mut arm = UniformArm {
        gamma: 0.05,
        tip_fraction: 0.7,
        tilt_rad: 0.0,
    }
    .held_tip(0.3);
    carry(&mut arm, 0.7);
    let corners = nominal(&mut arm);
    let assessor = Assessor::new(&arm, &corners);
    let assessed = assessor.assess(0.3, None, None).expect("rest states");
    assert_eq!(assessed.len(), 2, "two stable shapes");
    let stations = Stations::new(corners.nominal.modal.modes());
    for assessed in assessed {
        let state = corners
            .nominal_state(assessed.label, 0.3)
            .expect("on the branch");
        let shape = stations.shape(&state.c, 0.0);
        let corner = &corners.arms[0];
        let mass_kg =
            stations.tip_mass_kg(&corner.rest.modal, &corner.rest.rod, &corner.arm, &shape);
        assert!(
            mass_kg > 0.7 && mass_kg < 1.0,
            "the payload and some of the spine take part, not {mass_kg} kg"
        );
        let Look::There(margins) = assessed.margins[0] else {
            panic!("the nominal arm is its own corner")
        };
        let (knock, barrier_j) = (margins.knock_n_s, margins.barrier_j);
        let expected = (2.0 * mass_kg * barrier_j.expect("a pass leads out")).sqrt();
        let knock = knock.expect("as the barrier");
        assert!(
            (knock - expected).abs() <= 1e-9 * expected,
            "{knock} N s, {expected} expected"
        );
    }
}
