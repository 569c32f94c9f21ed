//! The plan of crossings: tried honestly, the same every time, kept and checked.

use firmware_core::{Method, Table};
use std::path::Path;
use std::sync::OnceLock;
use table_gen::arm_file::{self, Arm};
use table_gen::plan::swing::{Plans, plan, plan_or_kept, plan_path};
use table_gen::table::crossings::with_crossings;
use table_gen::table::{Tabulation, tabulate};

/// The greenhouse wand with one payload on a level bench: few trials.
fn wand(change: fn(String) -> String) -> Arm {
    let text = include_str!("../../examples/greenhouse-wand/arm.toml");
    let text = text
        .replace("range_kg = [0.050, 0.075]", "")
        .replace("tolerance_deg = 2.0", "tolerance_deg = 0.0");
    arm_file::parse(&change(text), "wand.toml").expect("the example is good")
}

fn tabulated() -> &'static Tabulation {
    static TABLE: OnceLock<Tabulation> = OnceLock::new();
    TABLE.get_or_init(|| tabulate(&wand(|text| text), &|_| {}).expect("can be tabulated"))
}

fn planned(arm: &Arm) -> Plans {
    let made = tabulated();
    plan(arm, &made.corners, &made.usable, &made.bytes, &|_| {}).expect("the table is the arm's")
}

fn plans() -> &'static Plans {
    static PLANS: OnceLock<Plans> = OnceLock::new();
    PLANS.get_or_init(|| planned(&tabulated().arm))
}

#[test]
fn both_directions_are_allowed_and_pass_the_firmwares_checks() {
    let made = tabulated();
    let bytes = with_crossings(&made.bytes, &plans().by_slice(1)).expect("fits the format");
    let table = Table::new(&bytes).expect("sound");
    let slice = table.slices().next().expect("one slice");
    for [from, to] in [[0, 2], [2, 0]] {
        let allowed = slice
            .crossings()
            .filter(|c| c.from == from && c.to == to && c.allowed)
            .count();
        assert!(allowed > 0, "{from} to {to}: {:?}", plans().found);
    }
}

#[test]
fn what_is_allowed_kept_every_limit_in_every_trial() {
    let arm = &tabulated().arm;
    let swing = arm.swing.expect("the wand may swing");
    for found in &plans().found {
        let plan = found.crossing;
        assert_eq!(plan.allowed, found.failed.is_none());
        assert!(plan.trials > 0);
        if !plan.allowed {
            assert!(plan.successes < plan.trials, "{found:?}");
            continue;
        }
        assert_eq!(plan.successes, plan.trials);
        assert!(f64::from(plan.peak_tip_speed_m_s) <= swing.max_tip_speed_m_s);
        assert!(f64::from(plan.peak_couple_n_m) <= swing.max_couple_n_m * 1.001);
        assert!(f64::from(plan.lowest_clearance_m) >= arm.require.clearance_m);
        assert!(plan.takes_s > 0.0 && plan.takes_s < 30.0, "{plan:?}");
        assert!(plan.peak_tip_speed_m_s > 0.1, "it moved: {plan:?}");
        let leans = plan.method == Method::Lean;
        assert_eq!(leans, plan.lean_setpoint != plan.rest_setpoint);
    }
}

#[test]
fn the_same_plan_every_time() {
    assert_eq!(&planned(&tabulated().arm), plans());
}

#[test]
fn a_limit_nobody_can_keep_allows_nothing() {
    let slow = wand(|text| text.replace("max_tip_speed_m_s = 3.5", "max_tip_speed_m_s = 0.05"));
    let plans = planned(&slow);
    assert!(!plans.found.is_empty());
    for found in plans.found {
        assert!(!found.crossing.allowed, "{found:?}");
    }
}

#[test]
fn without_limits_nothing_is_planned() {
    let mut arm = tabulated().arm.clone();
    arm.swing = None;
    assert_eq!(planned(&arm), Plans::default());
}

#[test]
fn a_plan_is_kept_and_a_damaged_one_made_anew() {
    let made = tabulated();
    let directory = tempfile::tempdir().expect("a directory");
    let place = directory.path().join("plans");
    let kept = |draft: &[u8]| {
        let (corners, usable) = (&made.corners, &made.usable);
        plan_or_kept(&made.arm, corners, usable, draft, &place, &|_| {}).expect("planned")
    };
    assert_eq!(&kept(&made.bytes), plans());
    let path = plan_path(&place, &made.arm);
    let written = std::fs::read(&path).expect("kept");
    let begun = std::time::Instant::now();
    assert_eq!(&kept(&made.bytes), plans());
    assert!(
        begun.elapsed().as_secs_f64() < 0.2,
        "read, not planned again"
    );
    assert_eq!(files(&place), 1, "nothing half written is left");

    let mut damaged = written.clone();
    damaged[written.len() / 2] ^= 1;
    std::fs::write(&path, damaged).expect("writable");
    assert_eq!(&kept(&made.bytes), plans());
    assert_eq!(std::fs::read(&path).expect("kept"), written, "mended");
}

fn files(directory: &Path) -> usize {
    std::fs::read_dir(directory).expect("exists").count()
}
