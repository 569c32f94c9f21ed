//! Whether a rehearsal went as expected.

use super::closed_loop::Run;
use super::scenario::Expected;
use super::words::{degrees, mode_name, refusal_name};
use firmware_core::supervisor::{Events, Mode};

/// What is expected of `run` with the table at hand.
pub fn expected(run: &Run) -> &Expected {
    match &run.scenario.expect_without_plan {
        Some(expected) if !run.planned => expected,
        _ => &run.scenario.expect,
    }
}

/// What did not go as expected, a sentence each; empty when everything did.
///
/// Beside what the scenario says, no run may end holding on another branch than the firmware believes, or command tensions
/// outside the table's limits.
pub fn unmet(run: &Run) -> Vec<String> {
    let (expected, last) = (expected(run), &run.last);
    let mut unmet = Vec::new();
    let branch =
        |branch: Option<u8>| branch.map_or("no known branch".into(), |b| format!("branch {b}"));
    if last.mode != expected.mode {
        unmet.push(format!(
            "mode at the end: {}, expected {}",
            mode_name(last.mode),
            mode_name(expected.mode)
        ));
    }
    if expected.branch.is_some() && run.true_branch != expected.branch {
        unmet.push(format!(
            "at the end the arm is on {}, expected {}",
            branch(run.true_branch),
            branch(expected.branch)
        ));
    }
    let refused = last.refused.map(refusal_name);
    let as_expected = expected.refused.iter().any(|&name| Some(name) == refused);
    if !expected.refused.is_empty() && !as_expected {
        unmet.push(format!(
            "crossing refused at the end: {}, expected {}",
            refused.unwrap_or("not at all"),
            expected.refused.join(" or ")
        ));
    }
    if let Some((tip_rad, within_rad)) = expected.tip
        && (run.tip_rad - tip_rad).abs() > within_rad
    {
        unmet.push(format!(
            "tip at the end: {}, expected {} within {}",
            degrees(run.tip_rad),
            degrees(tip_rad),
            degrees(within_rad)
        ));
    }
    let missing = expected.must.without(run.seen);
    if !missing.is_empty() {
        unmet.push(format!("did not occur: {missing}"));
    }
    let unwanted = Events::from_bits(expected.must_not.bits() & run.seen.bits());
    if !unwanted.is_empty() {
        unmet.push(format!("occurred and must not: {unwanted}"));
    }
    if last.mode == Mode::Hold && last.branch != run.true_branch {
        unmet.push(format!(
            "the firmware reports {} and the arm is on {}",
            branch(last.branch),
            branch(run.true_branch)
        ));
    }
    if !run.tensions_kept {
        unmet.push("a tension outside the table's limits was commanded".into());
    }
    unmet
}
