//! The errors written into a table hold: the firmware's answers at setpoints drawn at random, none of
//! which the generator tried, against the rod solved afresh there.

use firmware_core::{Header, RestState, Slice, Table};
use host_tests::random_arms;
use proptest::prelude::*;
use std::path::Path;
use std::sync::OnceLock;
use table_gen::arm_file::Tolerance;
use table_gen::rest_states::curve::{RestPoint, Solver};
use table_gen::rest_states::wells::wells;
use table_gen::table::{Tabulation, tabulate};

const EXAMPLES: [&str; 3] = ["greenhouse-wand", "tank-lance", "duct-probe"];

fn tables() -> &'static [Tabulation] {
    static TABLES: OnceLock<Vec<Tabulation>> = OnceLock::new();
    TABLES.get_or_init(|| {
        let examples = Path::new(env!("CARGO_MANIFEST_DIR")).join("../examples");
        EXAMPLES
            .iter()
            .map(|name| {
                let file = examples.join(name).join("arm.toml");
                let arm =
                    table_gen::arm_file::read(&file).unwrap_or_else(|error| panic!("{error}"));
                tabulate(&arm, &|_| {}).unwrap_or_else(|error| panic!("{name}: {error}"))
            })
            .collect()
    })
}

/// What the firmware answers on one branch, and the rod solved afresh.
struct Pair {
    answer: RestState,
    truth: RestPoint,
    /// Barrier of a well by going downhill from every pass (J).
    barrier_j: Option<f64>,
}

/// The slice of the nominal payload, whose rest states `made.corners.nominal` are.
fn nominal_slice<'a>(table: &Table<'a>, made: &Tabulation) -> Slice<'a> {
    let number = made.corners.nominal_slice;
    table.slices().nth(number).expect("the nominal slice")
}

/// All branches at `setpoint` (SI).
fn pairs(made: &Tabulation, setpoint: f32) -> Vec<Pair> {
    let table = Table::new(&made.bytes).expect("a table");
    let slice = nominal_slice(&table, made);
    let rest = &made.corners.nominal;
    let at = rest.rod.setpoint_from_si(setpoint.into());
    let states = rest
        .at(&mut Solver::new(&rest.modal), at)
        .unwrap_or_else(|error| panic!("{error}"));
    let (numbers, points): (Vec<usize>, Vec<RestPoint>) = states.into_iter().unzip();
    let barriers = wells(&rest.modal, &points)
        .expect("a way down from every pass")
        .barrier;
    let answers: Vec<RestState> = slice.all_at(setpoint).collect();
    assert_eq!(answers.len(), points.len(), "branches at {setpoint}");
    points
        .into_iter()
        .zip(numbers)
        .zip(barriers)
        .map(|((truth, number), barrier)| Pair {
            answer: slice
                .at(number as u8, setpoint)
                .expect("the branch reaches this setpoint"),
            truth,
            barrier_j: barrier.map(|barrier| barrier * rest.rod.energy_scale_j),
        })
        .collect()
}

fn within(what: &str, found: f32, truth: f64, error: f32) -> Result<(), TestCaseError> {
    let off = (f64::from(found) - truth).abs();
    prop_assert!(
        off <= f64::from(error),
        "{what}: {found} answered, {truth} solved, {off:e} apart, {error:e} in the header"
    );
    Ok(())
}

fn header_holds(made: &Tabulation, header: &Header, pair: &Pair) -> Result<(), TestCaseError> {
    let (rod, modal, error) = (
        &made.corners.nominal.rod,
        &made.corners.nominal.modal,
        header.worst_error,
    );
    let (answer, truth) = (&pair.answer, &pair.truth);
    prop_assert_eq!(usize::from(answer.index), truth.index);
    within(
        "mean angle",
        answer.mean_angle_rad,
        truth.mean_angle(),
        error.mean_angle_rad,
    )?;
    match header.drive {
        firmware_core::Drive::HeldTip => {
            within(
                "couple",
                answer.couple_n_m,
                truth.couple * rod.energy_scale_j,
                error.couple_n_m,
            )?;
        }
        firmware_core::Drive::AppliedCouple => {
            within(
                "tip angle",
                answer.tip_angle_rad,
                truth.tip_angle(),
                error.tip_angle_rad,
            )?;
        }
    }
    within(
        "energy",
        answer.energy_j,
        truth.energy * rod.energy_scale_j,
        error.energy_j,
    )?;
    prop_assert_eq!(answer.well.is_some(), truth.index == 0);
    if let Some(well) = answer.well {
        let (x, y) = modal.tip(&truth.c);
        within("tip x", well.tip_x_m, x * rod.length_m, error.tip_m)?;
        within("tip y", well.tip_y_m, y * rod.length_m, error.tip_m)?;
        let restoring = modal.restoring_stiffness(&truth.c).expect("stable") * rod.energy_scale_j;
        within(
            "restoring stiffness",
            well.restoring_n_m_per_rad,
            restoring,
            error.restoring_n_m_per_rad,
        )?;
        prop_assert_eq!(well.barrier_j.is_some(), pair.barrier_j.is_some());
        if let (Some(found), Some(truth)) = (well.barrier_j, pair.barrier_j) {
            within(
                "barrier",
                found,
                truth,
                f64::from(made.worst_error.barrier_j) as f32,
            )?;
        }
    }
    Ok(())
}

/// Anywhere, and more often near the ends of the range.
fn place() -> impl Strategy<Value = f64> {
    prop_oneof![3 => 0.0..1.0, 1 => 0.0..0.02, 1 => 0.98..1.0]
}

proptest! {
    #![proptest_config(random_arms::draws(1500))]

    #[test]
    fn errors_in_the_header_hold_at_setpoints_never_tried(example in 0..EXAMPLES.len(), x in place()) {
        let made = &tables()[example];
        let table = Table::new(&made.bytes).expect("a table");
        let header = table.header().expect("a header");
        let setpoint = header.setpoint_lo * (1.0 - x as f32) + header.setpoint_hi * x as f32;
        for pair in pairs(made, setpoint) {
            header_holds(made, &header, &pair)?;
        }
    }

    /// On both sides of every fold a branch goes like a root, where interpolation is hardest.
    #[test]
    fn errors_in_the_header_hold_beside_folds(example in 0..EXAMPLES.len(), pick in any::<prop::sample::Index>(), decades in 1.0..5.0_f64, up in any::<bool>()) {
        let made = &tables()[example];
        let rest = &made.corners.nominal;
        if rest.folds.is_empty() {
            return Ok(());
        }
        let [lo, hi] = rest.rod.setpoints;
        let off = (hi - lo) * 10_f64.powf(-decades);
        let fold = rest.folds[pick.index(rest.folds.len())].point.setpoint;
        let setpoint = if up { fold + off } else { fold - off };
        if !(lo..=hi).contains(&setpoint) {
            return Ok(());
        }
        let table = Table::new(&made.bytes).expect("a table");
        let header = table.header().expect("a header");
        for pair in pairs(made, rest.rod.setpoint_si(setpoint) as f32) {
            header_holds(made, &header, &pair)?;
        }
    }

    /// What the arm file asked for, against the exact rod: shooting, no modes, no interpolation.
    #[test]
    fn answers_are_as_accurate_as_asked(example in 0..EXAMPLES.len(), x in 0.0..1.0) {
        let made = &tables()[example];
        let rest = &made.corners.nominal;
        let [lo, hi] = rest.rod.setpoints;
        let at: f64 = lo * (1.0 - x) + hi * x;
        let beside = 1e-3 * (hi - lo);
        if rest.folds.iter().any(|fold| (fold.point.setpoint - at).abs() < beside) {
            return Ok(());
        }
        let setpoint = rest.rod.setpoint_si(at) as f32;
        let shots = rest.shooting.rest_states(rest.rod.setpoint_from_si(setpoint.into()));
        let table = Table::new(&made.bytes).expect("a table");
        let slice = nominal_slice(&table, made);
        let answers: Vec<RestState> = slice.all_at(setpoint).collect();
        prop_assert_eq!(answers.len(), shots.len());
        let asked = made.arm.accuracy;
        for answer in &answers {
            let nearest = shots.iter().filter(|shot| shot.index == usize::from(answer.index)).min_by(|a, b| {
                let off = |mean: f64| (mean - f64::from(answer.mean_angle_rad)).abs();
                off(a.mean_angle).total_cmp(&off(b.mean_angle))
            });
            let shot = nearest.expect("a rest state of this index");
            within("mean angle", answer.mean_angle_rad, shot.mean_angle, asked.angle_rad as f32)?;
            within("tip angle", answer.tip_angle_rad, shot.tip_angle, asked.angle_rad as f32)?;
            let couple = (asked.couple_fraction * rest.rod.energy_scale_j) as f32;
            within("couple", answer.couple_n_m, shot.couple * rest.rod.energy_scale_j, couple)?;
        }
    }
}

/// The wand as measured, with nothing declared to vary: its table fits the 4 KiB that a small controller spares for it.
#[test]
fn wand_as_measured_fits_four_kibibytes() {
    let mut arm = tables()[0].arm.clone();
    arm.payload.range_kg = [arm.payload.mass_kg; 2];
    arm.base.tolerance_rad = 0.0;
    arm.tolerance = Tolerance::default();
    let made = tabulate(&arm, &|_| {}).unwrap_or_else(|error| panic!("{error}"));
    assert_eq!(made.corners.arms.len(), 1);
    assert!(made.bytes.len() <= 4096, "{} bytes", made.bytes.len());
}
