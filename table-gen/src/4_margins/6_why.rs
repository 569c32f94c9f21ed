//! Why a setpoint may or may not be used: every requirement with value, limit and worst corner.

use super::corners::{Corner, Corners, Levels};
use super::requirements::{Assessor, Kind};
use super::usable::Usable;
use crate::arm_file::Arm;
use crate::rest_states::RestStatesError;
use serde::Serialize;

/// The judgement of one setpoint.
#[derive(Clone, Debug, Serialize)]
pub struct Why {
    /// The setpoint (rad or N m).
    pub setpoint: f64,
    /// Every stable branch of the nominal arm there.
    pub branches: Vec<BranchWhy>,
    /// The nearest setpoint (rad or N m) that is usable whatever the payload, on any branch; `None` when there is none.
    pub nearest_usable: Option<f64>,
}

/// The judgement of one rest state.
#[derive(Clone, Debug, Serialize)]
pub struct BranchWhy {
    /// Its branch.
    pub branch: usize,
    /// Its nominal mean angle (rad).
    pub mean_angle_rad: f64,
    /// Whether every requirement holds in every corner.
    pub usable: bool,
    /// The requirements.
    pub requirements: Vec<RequirementWhy>,
}

/// One requirement.
#[derive(Clone, Copy, Debug, Serialize)]
pub struct RequirementWhy {
    /// Its key in the arm file, or `strain`.
    pub name: &'static str,
    /// Worst value, in `unit`; `None` without bound.
    pub value: Option<f64>,
    /// Its limit, in `unit`.
    pub limit: f64,
    /// Unit; empty for a plain number.
    pub unit: &'static str,
    /// Whether it holds.
    pub holds: bool,
    /// The corner of the worst value; `None` without bound.
    pub corner: Option<Corner>,
}

impl Why {
    /// Judges `setpoint` (rad or N m, within the arm's range). `progress` is called with the fraction done.
    ///
    /// # Errors
    /// [`RestStatesError`] when the rest states of a corner cannot be certified.
    pub fn new(
        arm: &Arm,
        setpoint: f64,
        progress: &(dyn Fn(f64) + Sync),
    ) -> Result<Self, RestStatesError> {
        let corners = Corners::find(arm, Levels::EndsAndMiddle, &|done| progress(0.2 * done))?;
        let assessor = Assessor::new(arm, &corners);
        let branches: Vec<BranchWhy> = assessor
            .assess(setpoint, None, None)?
            .iter()
            .map(|assessed| {
                let findings = assessor.findings(assessed, None);
                let is_stable = findings.iter().all(|f| f.kind != Kind::Stable || f.holds);
                let requirements =
                    findings
                        .iter()
                        .filter(|f| f.kind != Kind::Stable)
                        .map(|finding| {
                            let (name, unit) = finding.kind.key_and_unit(&arm.drive);
                            let typed = |value| finding.kind.as_typed(&arm.drive, value);
                            RequirementWhy {
                                name,
                                value: finding.value.map(typed),
                                limit: typed(finding.limit),
                                unit,
                                // What has ceased to be stable in a corner has lost its setpoint reserve there, even if none is asked.
                                holds: finding.holds
                                    && (is_stable || finding.kind != Kind::SetpointReserve),
                                corner: finding.corner,
                            }
                        });
                let state = corners.nominal_state(assessed.label, setpoint);
                BranchWhy {
                    branch: assessed.label,
                    mean_angle_rad: state.map_or(f64::NAN, |state| state.mean_angle()),
                    usable: findings.iter().all(|finding| finding.holds),
                    requirements: requirements.collect(),
                }
            })
            .collect();
        let nearest_usable = if branches.iter().any(|branch| branch.usable) {
            Some(setpoint)
        } else {
            let usable = Usable::find(&assessor, &mut |done| progress(0.2 + 0.8 * done))?;
            let slices = corners.payloads_kg.len();
            let runs = (0..corners.nominal.branches.len())
                .flat_map(|label| usable.any_payload(label, slices));
            runs.map(|([from, to], _)| setpoint.clamp(from, to))
                .min_by(|a, b| (a - setpoint).abs().total_cmp(&(b - setpoint).abs()))
        };
        Ok(Self {
            setpoint,
            branches,
            nearest_usable,
        })
    }
}
