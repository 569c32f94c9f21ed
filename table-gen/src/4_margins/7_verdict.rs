//! What would help most: how much more could be used with a stiffer spine or a lighter payload.
//!
//! Each change is made to the arm and the changed arm is judged like the first: its rest states are certified anew in both ends
//! of every tolerance, and every requirement is assessed at setpoints spread evenly over the range. The width is how much of the
//! range is usable, whatever the payload, on at least one branch. The arm itself is judged in the same coarse way, so that two
//! widths differ by what the change does and not by how they were found. A stiffer spine keeps its mass, its thickness and its
//! tolerance in percent; a lighter payload is lighter at both ends of its range.

use super::corners::{Corners, Levels};
use super::requirements::{Assessor, Finding, Kind};
use crate::arm_file::Arm;
use crate::rest_states::RestStatesError;

/// Steps of the scan over the setpoint range.
const STEPS: usize = 24;
/// Factors on the bending stiffness that are tried, smallest change first.
const STIFFER: [f64; 4] = [1.1, 1.25, 1.5, 2.0];
/// Factors on the payload that are tried, smallest change first.
const LIGHTER: [f64; 3] = [0.9, 0.75, 0.5];
/// A gain counts from this fraction of the width there is ...
const MATERIAL_OF_WIDTH: f64 = 0.05;
/// ... and this fraction of the setpoint range: less is within what the scan may be off.
const MATERIAL_OF_RANGE: f64 = 0.02;

/// What is changed.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Change {
    /// Bending stiffness of the spine.
    Stiffness,
    /// Payload, at both ends of its range.
    Payload,
}

/// A changed arm.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Tried {
    /// What was changed.
    pub change: Change,
    /// By which factor.
    pub factor: f64,
    /// Width that could be used (rad or N m); `None` when the changed arm's rest states cannot be certified.
    pub width: Option<f64>,
}

/// What changes of the arm would do for it.
#[derive(Clone, Debug)]
pub struct Verdict {
    /// Width that can be used as the arm is (rad or N m).
    pub width: f64,
    /// Width of the setpoint range (rad or N m).
    pub range: f64,
    /// The changes tried, by kind, smallest first, up to the first with a material gain; none when all of the range can be used.
    pub tried: Vec<Tried>,
}

impl Verdict {
    /// Judges `arm` and its changes.
    ///
    /// # Errors
    /// [`RestStatesError`] when the rest states of the arm itself cannot be certified.
    pub fn find(arm: &Arm) -> Result<Self, RestStatesError> {
        let (width, range) = usable_width(arm)?;
        let mut verdict = Self {
            width,
            range,
            tried: Vec::new(),
        };
        if width < range * (1.0 - MATERIAL_OF_RANGE) {
            verdict.try_until_material(arm, Change::Stiffness, &STIFFER);
            // Without payload there is nothing to lighten.
            if arm.payload.range_kg[1] > 0.0 {
                verdict.try_until_material(arm, Change::Payload, &LIGHTER);
            }
        }
        Ok(verdict)
    }

    fn try_until_material(&mut self, arm: &Arm, change: Change, factors: &[f64]) {
        for &factor in factors {
            let found = usable_width(&changed(arm, change, factor));
            self.tried.push(Tried {
                change,
                factor,
                width: found.ok().map(|found| found.0),
            });
            if self.smallest(change).is_some() {
                break;
            }
        }
    }

    /// The smallest change of a kind with a material gain.
    pub fn smallest(&self, change: Change) -> Option<&Tried> {
        let least = (MATERIAL_OF_WIDTH * self.width).max(MATERIAL_OF_RANGE * self.range);
        self.tried
            .iter()
            .filter(|tried| tried.change == change)
            .find(|tried| tried.width.is_some_and(|width| width - self.width >= least))
    }
}

fn changed(arm: &Arm, change: Change, factor: f64) -> Arm {
    let mut arm = arm.clone();
    match change {
        Change::Stiffness => {
            arm.spine.bending_stiffness_n_m2 = arm.spine.bending_stiffness_n_m2.scaled(factor);
        }
        Change::Payload => {
            arm.payload.mass_kg *= factor;
            arm.payload.range_kg = arm.payload.range_kg.map(|kg| kg * factor);
        }
    }
    arm
}

/// Width of the setpoints that are usable on at least one branch whatever the payload, and of the range.
fn usable_width(arm: &Arm) -> Result<(f64, f64), RestStatesError> {
    let corners = Corners::find(arm, Levels::Ends, &|_| {})?;
    let assessor = Assessor::new(arm, &corners);
    let rod = &corners.nominal.rod;
    let [lo, hi] = rod.setpoints.map(|setpoint| rod.setpoint_si(setpoint));
    let mut traces = vec![Vec::new(); corners.nominal.branches.len()];
    for k in 0..=STEPS {
        let x = k as f64 / STEPS as f64;
        let setpoint = lo * (1.0 - x) + hi * x;
        let assessed = assessor.assess(setpoint, None, None)?;
        for (label, trace) in traces.iter_mut().enumerate() {
            let findings = match assessed.iter().find(|assessed| assessed.label == label) {
                Some(assessed) => assessor.findings(assessed, None),
                None => absent(arm),
            };
            trace.push((setpoint, findings));
        }
    }
    let mut runs: Vec<[f64; 2]> = traces
        .iter()
        .flat_map(|trace| holding(trace, None))
        .collect();
    runs.sort_by(|a, b| a[0].total_cmp(&b[0]));
    let mut width = 0.0;
    let mut covered = f64::NEG_INFINITY;
    for [from, to] in runs {
        width += (to - from.max(covered)).max(0.0);
        covered = covered.max(to);
    }
    Ok((width, hi - lo))
}

/// The findings of a branch where it is not.
fn absent(arm: &Arm) -> Vec<Finding> {
    let finding = |kind: Kind| Finding {
        kind,
        value: None,
        limit: kind.limit(arm),
        holds: kind != Kind::Stable,
        corner: None,
    };
    std::iter::once(Kind::Stable)
        .chain(Kind::NUMBERED)
        .map(finding)
        .collect()
}

/// Runs of setpoints along a branch where requirement `which` holds, or all of them. `trace` has the findings at increasing
/// setpoints; between two of them an end is placed by interpolation.
pub fn holding(trace: &[(f64, Vec<Finding>)], which: Option<Kind>) -> Vec<[f64; 2]> {
    let asked = |finding: &&Finding| which.is_none_or(|kind| finding.kind == kind);
    let holds = |findings: &[Finding]| findings.iter().filter(asked).all(|f| f.holds);
    let end = |good: &(f64, Vec<Finding>), bad: &(f64, Vec<Finding>)| {
        let step = bad.0 - good.0;
        let fraction = bad
            .1
            .iter()
            .filter(asked)
            .filter(|finding| !finding.holds)
            .map(|finding| crossing(&good.1, &bad.1, finding.kind, step.abs()))
            .fold(1.0, f64::min);
        good.0 + fraction * step
    };
    let mut runs = Vec::new();
    let mut open = None;
    for (k, point) in trace.iter().enumerate() {
        match (open, holds(&point.1)) {
            (None, true) if k == 0 => open = Some(point.0),
            (None, true) => open = Some(end(point, &trace[k - 1])),
            (Some(from), false) => {
                runs.push([from, end(&trace[k - 1], point)]);
                open = None;
            }
            _ => {}
        }
    }
    if let (Some(from), Some(last)) = (open, trace.last()) {
        runs.push([from, last.0]);
    }
    runs
}

/// Where between a setpoint at which `kind` holds and one, `step` away, at which it does not, it ceases to: 0 to 1.
fn crossing(good: &[Finding], bad: &[Finding], kind: Kind, step: f64) -> f64 {
    let of = |findings: &[Finding], kind: Kind| {
        let found = findings.iter().find(|finding| finding.kind == kind);
        found.and_then(|finding| finding.value)
    };
    let limit = bad
        .iter()
        .find(|finding| finding.kind == kind)
        .map_or(0.0, |finding| finding.limit);
    let vanished = bad
        .iter()
        .any(|finding| finding.kind == Kind::Stable && !finding.holds);
    // The setpoint reserve falls by as much as the setpoint moves, so it tells where the state vanishes in its worst corner.
    let reserve = of(good, Kind::SetpointReserve);
    let end = match reserve {
        Some(reserve) if vanished => (reserve / step).clamp(0.0, 1.0),
        _ => 1.0,
    };
    let fraction = match (kind, of(good, kind), of(bad, kind)) {
        (Kind::Stable, ..) => reserve.map_or(0.5, |_| end),
        (Kind::SetpointReserve, Some(reserve), _) if vanished => (reserve - limit) / step,
        (_, Some(from), Some(to)) if from != to => end * (from - limit) / (from - to),
        _ => 0.5,
    };
    fraction.clamp(0.0, 1.0)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Findings of a branch with a setpoint reserve of `reserve` and a strain of `strain`, whose limits are 1 and 0.5.
    fn findings(reserve: f64, strain: f64) -> Vec<Finding> {
        let is_there = reserve > 0.0;
        [
            (Kind::Stable, None, 0.0, is_there),
            (
                Kind::SetpointReserve,
                Some(reserve.max(0.0)),
                1.0,
                reserve >= 1.0,
            ),
            (Kind::Strain, Some(strain), 0.5, strain <= 0.5),
        ]
        .into_iter()
        .map(|(kind, value, limit, holds)| Finding {
            kind,
            value,
            limit,
            holds,
            corner: None,
        })
        .collect()
    }

    #[test]
    fn ends_lie_where_the_values_cross_their_limits() {
        // A fold at setpoint 5.5, strain falling from 1 at -2 by 0.1 per step of 2.
        let trace: Vec<(f64, Vec<Finding>)> = (-1..6)
            .map(|k| 2.0 * f64::from(k))
            .map(|x| (x, findings(5.5 - x, 1.0 - 0.1 * (x + 2.0))))
            .collect();
        let near = |runs: Vec<[f64; 2]>, expected: [f64; 2]| {
            assert_eq!(runs.len(), 1);
            for (found, expected) in runs[0].into_iter().zip(expected) {
                assert!((found - expected).abs() < 1e-12, "{runs:?}");
            }
        };
        near(holding(&trace, Some(Kind::Stable)), [-2.0, 5.5]);
        near(holding(&trace, Some(Kind::SetpointReserve)), [-2.0, 4.5]);
        near(holding(&trace, Some(Kind::Strain)), [3.0, 10.0]);
        near(holding(&trace, None), [3.0, 4.5]);
    }
}
