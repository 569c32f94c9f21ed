//! What the page shows of the margins: reserves over the setpoint, where they suffice, the shape in the worst corner.

use super::data::{Drive, Reserve, ReserveCurve, RowKind, Strip, StripRow, WorstShape};
use super::words;
use crate::margins::corners::CornerArm;
use crate::margins::requirements::{Assessed, Assessor, Finding, Kind, Look};
use crate::margins::shape::Stations;
use crate::margins::verdict::holding;
use crate::rest_states::curve::RestPoint;
use crate::table::Tabulation;

/// Straight pieces that an arm in its worst corner is drawn with.
const SEGMENTS: usize = 24;

/// One stable branch with what was found along it, worst over all corners.
pub(super) struct Trace {
    /// Nominal branch.
    pub(super) label: usize,
    /// Findings at increasing setpoints (SI).
    pub(super) points: Vec<(f64, Vec<Finding>)>,
}

/// The margins of a table.
pub(super) struct Margins<'a> {
    pub(super) tabulation: &'a Tabulation,
    pub(super) drive: Drive,
    pub(super) assessor: Assessor<'a>,
    pub(super) traces: Vec<Trace>,
    /// In the nominal number of modes, in which states are followed into corners.
    stations: Stations,
}

impl<'a> Margins<'a> {
    pub(super) fn new(tabulation: &'a Tabulation, drive: Drive) -> Self {
        let assessor = Assessor::new(&tabulation.arm, &tabulation.corners);
        let traces = tabulation
            .usable
            .along
            .iter()
            .map(|along| Trace {
                label: along.label,
                points: along
                    .points
                    .iter()
                    .map(|(setpoint, assessed)| (*setpoint, assessor.findings(assessed, None)))
                    .collect(),
            })
            .collect();
        Self {
            tabulation,
            drive,
            assessor,
            traces,
            stations: Stations::new(tabulation.corners.nominal.modal.modes()),
        }
    }

    /// The requirements that have a number for this arm.
    pub(super) fn kinds(&self) -> impl Iterator<Item = Kind> {
        let is_clear = self.tabulation.arm.keep_out.is_empty();
        Kind::NUMBERED
            .into_iter()
            .filter(move |kind| *kind != Kind::Clearance || !is_clear)
    }

    pub(super) fn reserves(&self) -> Vec<Reserve> {
        let reserve = |kind: Kind| {
            let (unit, factor) = words::unit(kind, self.drive);
            let value = |findings: &[Finding]| {
                let found = findings.iter().find(|finding| finding.kind == kind);
                found.and_then(|finding| finding.value).map(|v| v * factor)
            };
            let curve = |trace: &Trace| ReserveCurve {
                branch: trace.label,
                points: trace
                    .points
                    .iter()
                    .filter(|(setpoint, _)| !self.is_at_fold(*setpoint))
                    .map(|(setpoint, findings)| (*setpoint, value(findings)))
                    .collect(),
            };
            Reserve {
                key: kind.key_and_unit(&self.tabulation.arm.drive).0.to_string(),
                name: words::name(kind).to_string(),
                unit: unit.to_string(),
                limit: kind.limit(&self.tabulation.arm) * factor,
                is_upper_limit: kind.is_upper_limit(),
                curves: self.traces.iter().map(curve).collect(),
            }
        };
        self.kinds().map(reserve).collect()
    }

    /// At a fold itself no state can be followed into the corners, and what is left says nothing about them.
    fn is_at_fold(&self, setpoint: f64) -> bool {
        let nominal = &self.tabulation.corners.nominal;
        let at = nominal.rod.setpoint_from_si(setpoint);
        nominal
            .folds
            .iter()
            .any(|fold| (fold.point.setpoint - at).abs() < 1e-6)
    }

    pub(super) fn strips(&self) -> Vec<Strip> {
        self.traces
            .iter()
            .filter_map(|trace| {
                let ends = [trace.points.first()?.0, trace.points.last()?.0];
                Some(Strip {
                    branch: trace.label,
                    cover: ends,
                    rows: self.rows(trace),
                })
            })
            .collect()
    }

    fn rows(&self, trace: &Trace) -> Vec<StripRow> {
        let requirements = std::iter::once(Kind::Stable)
            .chain(self.kinds())
            .map(|kind| StripRow {
                name: words::name(kind).to_string(),
                kind: RowKind::Requirement,
                runs: holding(&trace.points, Some(kind)),
            });
        let all = StripRow {
            name: "all together".to_string(),
            kind: RowKind::All,
            runs: self.usable(trace.label),
        };
        let payloads = &self.tabulation.corners.payloads_kg;
        let payload = |slice: usize| StripRow {
            name: format!("with {} only", words::grams(payloads[slice])),
            kind: RowKind::Payload,
            runs: self.usable_with(trace.label, slice),
        };
        let slices = if payloads.len() > 1 {
            payloads.len()
        } else {
            0
        };
        requirements
            .chain([all])
            .chain((0..slices).map(payload))
            .collect()
    }

    /// Setpoints of a branch usable whatever the payload.
    pub(super) fn usable(&self, label: usize) -> Vec<[f64; 2]> {
        let slices = self.tabulation.corners.payloads_kg.len();
        let runs = self.tabulation.usable.any_payload(label, slices);
        runs.into_iter().map(|(ends, _)| ends).collect()
    }

    /// Setpoints of a branch usable with the payload of one slice.
    pub(super) fn usable_with(&self, label: usize, slice: usize) -> Vec<[f64; 2]> {
        self.tabulation
            .usable
            .stretches
            .iter()
            .filter(|stretch| stretch.label == label && stretch.slice == slice)
            .map(|stretch| stretch.ends)
            .collect()
    }

    /// The first requirement that fails at `setpoint`, in words; `None` when all hold.
    pub(super) fn why_not(&self, label: usize, setpoint: f64) -> Option<String> {
        let usable = |[from, to]: &[f64; 2]| (*from..=*to).contains(&setpoint);
        if self.usable(label).iter().any(usable) {
            return None;
        }
        let unknown = || "not usable".to_string();
        let Some(trace) = self.traces.iter().find(|trace| trace.label == label) else {
            return Some(unknown());
        };
        let after = trace.points.partition_point(|point| point.0 < setpoint);
        let [below, above] =
            [after.saturating_sub(1), after.min(trace.points.len() - 1)].map(|k| &trace.points[k]);
        let x = if above.0 > below.0 {
            (setpoint - below.0) / (above.0 - below.0)
        } else {
            0.0
        };
        let between: Vec<Finding> = below
            .1
            .iter()
            .zip(&above.1)
            .map(|(a, b)| between(a, b, x))
            .collect();
        let fails = |finding: &&Finding| {
            let runs = holding(&trace.points, Some(finding.kind));
            !runs.iter().any(usable)
        };
        // So near an end that interpolation sees all requirements met, the neighbour beyond says which is not.
        let beyond = || {
            [below, above]
                .into_iter()
                .find_map(|p| p.1.iter().find(|f| !f.holds))
        };
        let first = between.iter().find(fails).or_else(beyond);
        // It stands in a narrow column, where it must be free to wrap.
        Some(first.map_or_else(unknown, |finding| {
            words::shortfall(finding, self.drive).replace('\u{a0}', " ")
        }))
    }

    /// The stable state `from` of branch `label` in the corner with the least clearance or, without keep-out regions, the
    /// largest strain, as judged at the nearest setpoint assessed.
    pub(super) fn worst_shape(&self, label: usize, from: &RestPoint) -> Option<WorstShape> {
        let nominal = &self.tabulation.corners.nominal;
        let setpoint = nominal.rod.setpoint_si(from.setpoint);
        let along = self
            .tabulation
            .usable
            .along
            .iter()
            .find(|along| along.label == label)?;
        let (_, assessed) = along
            .points
            .iter()
            .min_by(|a, b| (a.0 - setpoint).abs().total_cmp(&(b.0 - setpoint).abs()))?;
        let corner = self.worst_corner(assessed)?;
        let c = corner.follow(nominal, from)?;
        let arm = &self.tabulation.arm;
        let rod = &corner.rest.rod;
        let shape = self.stations.shape(&c, rod.tilt_rad);
        let what = match shape.clearance_m(&arm.keep_out, rod.length_m) {
            Some((clearance, region)) => format!(
                "{} {} {}",
                words::quantity(Kind::Clearance, self.drive, clearance.abs()),
                if clearance < 0.0 { "inside" } else { "from" },
                arm.keep_out[region].name
            ),
            None => format!(
                "strain {}",
                words::quantity(Kind::Strain, self.drive, shape.strain(arm, rod))
            ),
        };
        let line = corner.rest.modal.polyline(&c, SEGMENTS);
        Some(WorstShape {
            words: format!("{what} {}", words::corner(&corner.corner, arm)),
            shape: line
                .into_iter()
                .map(|(x, y)| [x * rod.length_m, y * rod.length_m])
                .collect(),
        })
    }

    fn worst_corner(&self, assessed: &Assessed) -> Option<&'a CornerArm> {
        let corners = &self.tabulation.corners.arms;
        let badness = |look: &Look| match look {
            Look::There(margins) => Some(margins.clearance_m.map_or(margins.strain, |c| -c)),
            _ => None,
        };
        corners
            .iter()
            .zip(&assessed.margins)
            .filter_map(|(corner, look)| Some((corner, badness(look)?)))
            .max_by(|a, b| a.1.total_cmp(&b.1))
            .map(|(corner, _)| corner)
    }

    /// Name of the region that the branch comes nearest to in `corner` at `setpoint` (SI).
    pub(super) fn nearest_region(
        &self,
        label: usize,
        setpoint: f64,
        corner: &crate::margins::corners::Corner,
    ) -> Option<&'a str> {
        let corners = &self.tabulation.corners;
        let arm = corners.arms.iter().find(|arm| arm.corner == *corner)?;
        let c = arm.follow(&corners.nominal, &corners.nominal_state(label, setpoint)?)?;
        let shape = self.stations.shape(&c, arm.rest.rod.tilt_rad);
        let keep_out = &self.tabulation.arm.keep_out;
        let (_, region) = shape.clearance_m(keep_out, arm.rest.rod.length_m)?;
        Some(&keep_out[region].name)
    }
}

/// The finding between two of one kind, by linear interpolation.
fn between(a: &Finding, b: &Finding, x: f64) -> Finding {
    let value = match (a.value, b.value) {
        (Some(a), Some(b)) => Some(a * (1.0 - x) + b * x),
        (one, other) => one.or(other),
    };
    let holds = match a.kind {
        Kind::Stable => a.holds && b.holds,
        kind => kind.holds(value, a.limit),
    };
    Finding {
        value,
        holds,
        ..if x < 0.5 { *a } else { *b }
    }
}
