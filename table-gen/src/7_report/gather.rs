//! Solves what the page shows: curves over the setpoint, and shapes and energies at the slider's setpoints.

use super::cross_check::CrossCheck;
use super::data::{
    Arm, Branch, BranchPoint, Drive, End, FalseFriend, Fold, Frame, FrameState, Limit, ReportData,
    Stretch, WorstError,
};
use super::margins::Margins;
use super::{verdict, words};
use crate::arm_file;
use crate::margins::usable::EndLimit;
use crate::rest_states::confirm::judge;
use crate::rest_states::curve::{self, BranchEnd, RestPoint, Solver};
use crate::rest_states::profile::profile;
use crate::rest_states::wells::{Wells, wells};
use crate::rest_states::{RestStates, RestStatesError};
use crate::table::Tabulation;
use firmware_core::{Table, TensionPair};

/// Positions of the slider.
const FRAMES: usize = 97;
/// Points along a branch.
const POINTS: usize = 80;
/// Straight pieces an arm is drawn with.
const SEGMENTS: usize = 40;

/// The page's data for a finished table.
///
/// # Errors
/// [`RestStatesError`] when a rest state cannot be solved again.
pub fn gather(tabulation: &Tabulation) -> Result<ReportData, RestStatesError> {
    let rest = &tabulation.corners.nominal;
    let drive = drive(&tabulation.arm);
    let gatherer = Gatherer {
        tabulation,
        rest,
        drive,
        margins: Margins::new(tabulation, drive),
    };
    let branches = (0..rest.branches.len())
        .map(|number| gatherer.branch(number))
        .collect::<Result<Vec<_>, _>>()?;
    let mut frames = Vec::new();
    let mut false_friends = Vec::new();
    let mut cross_check = CrossCheck::default();
    for k in 0..FRAMES {
        let x = k as f64 / (FRAMES - 1) as f64;
        let at = rest.rod.setpoints[0] * (1.0 - x) + rest.rod.setpoints[1] * x;
        let frame = gatherer.frame(at)?;
        let setpoint = frame.setpoint;
        let judged = judge(&rest.rod, &rest.modal, rest.rod.setpoint_from_si(setpoint));
        cross_check.frame(&rest.rod, setpoint, &judged, &frame.states);
        false_friends.extend(
            judged
                .iter()
                .filter(|j| j.confirmed == Some(false))
                .map(|j| FalseFriend {
                    setpoint,
                    mean_angle_rad: j.state.mean_angle(),
                }),
        );
        frames.push(frame);
    }
    Ok(ReportData {
        arm: gatherer.arm(),
        limits: gatherer.limits(&branches),
        branches,
        folds: gatherer.folds(),
        frames,
        false_friends,
        disagreements: cross_check.in_words(drive),
        verdict: verdict::verdict(&gatherer.margins)?,
        reserves: gatherer.margins.reserves(),
        strips: gatherer.margins.strips(),
        keep_out: tabulation.arm.keep_out.clone(),
        worst_errors: gatherer.worst_errors(),
        table_bytes: tabulation.bytes.len(),
    })
}

fn drive(arm: &arm_file::Arm) -> Drive {
    match arm.drive {
        arm_file::Drive::HeldTip { .. } => Drive::HeldTip,
        arm_file::Drive::AppliedCouple { .. } => Drive::AppliedCouple,
    }
}

struct Gatherer<'a> {
    tabulation: &'a Tabulation,
    rest: &'a RestStates,
    drive: Drive,
    margins: Margins<'a>,
}

impl Gatherer<'_> {
    fn arm(&self) -> Arm {
        let (arm, rod) = (&self.tabulation.arm, &self.rest.rod);
        let [setpoint_lo, setpoint_hi] = rod.setpoints.map(|s| rod.setpoint_si(s));
        Arm {
            name: arm.name.clone(),
            drive: self.drive,
            length_m: rod.length_m,
            gamma: arm.gamma(),
            modes: self.rest.modal.modes(),
            mass_kg: arm.total_mass_kg(),
            energy_scale_j: rod.energy_scale_j,
            tilt_deg: rod.tilt_rad.to_degrees(),
            offset_m: arm.tendons.offset_m,
            pretension_n: arm.tendons.pretension_n,
            max_tension_n: arm.tendons.max_tension_n,
            setpoint_lo,
            setpoint_hi,
            fingerprint: arm
                .fingerprint()
                .iter()
                .map(|byte| format!("{byte:02x}"))
                .collect(),
        }
    }

    fn branch(&self, number: usize) -> Result<Branch, RestStatesError> {
        let branch = &self.rest.branches[number];
        let [lo, hi] = self.rest.rod.setpoints;
        let (from, to) = (branch.from().max(lo), branch.to().min(hi));
        let mut points = Vec::new();
        for k in 0..=POINTS {
            // Closer together at the ends, where a fold bends the curve.
            let x = 0.5 * (1.0 - (k as f64 / POINTS as f64 * std::f64::consts::PI).cos());
            points.push(self.point(number, (from * (1.0 - x) + to * x).clamp(from, to))?);
        }
        let end = |is_fold: bool, at: f64| {
            if is_fold && (lo..=hi).contains(&at) {
                End::Fold
            } else {
                End::Range
            }
        };
        Ok(Branch {
            number,
            index: branch.index,
            stable: branch.index == 0,
            from_end: end(branch.from_end == BranchEnd::Fold, branch.from()),
            to_end: end(branch.to_end == BranchEnd::Fold, branch.to()),
            points,
            stretches: self.stretches(number),
        })
    }

    /// Setpoints that are usable whatever the payload.
    fn stretches(&self, number: usize) -> Vec<Stretch> {
        let why = |limit: &EndLimit| match limit.kind {
            None => "end of the setpoint range".to_string(),
            Some(kind) => format!(
                "{} {}",
                words::name(kind),
                words::quantity(kind, self.drive, limit.value)
            ),
        };
        let slices = self.tabulation.corners.payloads_kg.len();
        let runs = self.tabulation.usable.any_payload(number, slices);
        runs.iter()
            .map(|([from, to], limits)| Stretch {
                from: *from,
                to: *to,
                from_why: why(&limits[0]),
                to_why: why(&limits[1]),
            })
            .collect()
    }

    fn point(&self, number: usize, at: f64) -> Result<BranchPoint, RestStatesError> {
        let (rod, branch) = (&self.rest.rod, &self.rest.branches[number]);
        let setpoint = rod.setpoint_si(at);
        let mut solver = Solver::new(&self.rest.modal);
        let state = branch
            .state_at(&mut solver, at)
            .ok_or(RestStatesError::CurveLost { setpoint })?;
        let barrier = if state.index == 0 {
            self.barrier_of(number, at)?
        } else {
            None
        };
        let (x, y) = self.rest.modal.tip(&state.c);
        let couple_n_m = state.couple * rod.energy_scale_j;
        let limits = Table::new(&self.tabulation.bytes)
            .expect("the table was checked when it was made")
            .limits();
        let tensions = TensionPair::for_couple(couple_n_m as f32, &limits);
        Ok(BranchPoint {
            setpoint,
            mean_angle_rad: state.mean_angle(),
            tip_angle_rad: state.tip_angle(),
            couple_n_m,
            tension_a_n: f64::from(tensions.a_n),
            tension_b_n: f64::from(tensions.b_n),
            energy_j: state.energy * rod.energy_scale_j,
            tip_x_m: x * rod.length_m,
            tip_y_m: y * rod.length_m,
            barrier_j: barrier.map(|b| b * rod.energy_scale_j),
            restoring_n_m_per_rad: self
                .rest
                .modal
                .restoring_stiffness(&state.c)
                .filter(|_| state.index == 0)
                .map(|k| k * rod.energy_scale_j),
        })
    }

    /// Barrier of one branch; at a fold, where pass and well are one, it is zero.
    fn barrier_of(&self, number: usize, at: f64) -> Result<Option<f64>, RestStatesError> {
        if self.is_at_fold(at) {
            return Ok(None);
        }
        let (numbers, _, wells) = self.states(at)?;
        Ok(numbers
            .iter()
            .position(|&n| n == number)
            .and_then(|place| wells.barrier[place]))
    }

    fn is_at_fold(&self, at: f64) -> bool {
        self.rest
            .folds
            .iter()
            .any(|fold| (fold.point.setpoint - at).abs() < 1e-6)
    }

    fn states(&self, at: f64) -> Result<(Vec<usize>, Vec<RestPoint>, Wells), RestStatesError> {
        let setpoint = self.rest.rod.setpoint_si(at);
        let states = self.rest.at(&mut Solver::new(&self.rest.modal), at)?;
        let (numbers, points): (Vec<usize>, Vec<RestPoint>) = states.into_iter().unzip();
        let wells = wells(&self.rest.modal, &points)
            .map_err(|_| RestStatesError::PassWithoutWells { setpoint })?;
        Ok((numbers, points, wells))
    }

    fn frame(&self, at: f64) -> Result<Frame, RestStatesError> {
        let rod = &self.rest.rod;
        // A frame exactly at a fold moves aside by what nobody sees.
        let at = if self.is_at_fold(at) {
            at + 1e-5 * (rod.setpoints[1] - rod.setpoints[0])
        } else {
            at
        };
        let setpoint = rod.setpoint_si(at);
        let (numbers, points, wells) = self.states(at)?;
        let mut states: Vec<FrameState> = numbers
            .iter()
            .zip(&points)
            .zip(&wells.barrier)
            .map(|((&branch, state), barrier)| FrameState {
                branch,
                index: state.index,
                stable: state.index == 0,
                usable: state.index == 0 && self.margins.why_not(branch, setpoint).is_none(),
                why_not: if state.index == 0 {
                    self.margins.why_not(branch, setpoint)
                } else {
                    Some("unstable".to_string())
                },
                mean_angle_rad: state.mean_angle(),
                tip_angle_rad: state.tip_angle(),
                couple_n_m: state.couple * rod.energy_scale_j,
                energy_j: state.energy * rod.energy_scale_j,
                barrier_j: barrier.map(|b| b * rod.energy_scale_j),
                shape: self.shape(&state.c),
                worst: if state.index == 0 {
                    self.margins.worst_shape(branch, state)
                } else {
                    None
                },
            })
            .collect();
        states.sort_by(|a, b| a.mean_angle_rad.total_cmp(&b.mean_angle_rad));
        let profile = profile(&self.rest.modal, &points)
            .into_iter()
            .map(|piece| {
                piece
                    .into_iter()
                    .map(|(q, e)| [q, e * rod.energy_scale_j])
                    .collect()
            })
            .collect();
        Ok(Frame {
            setpoint,
            states,
            profile,
        })
    }

    fn shape(&self, c: &[f64]) -> Vec<[f64; 2]> {
        let length_m = self.rest.rod.length_m;
        self.rest
            .modal
            .polyline(c, SEGMENTS)
            .into_iter()
            .map(|(x, y)| [x * length_m, y * length_m])
            .collect()
    }

    /// Folds with the two branches that end in each.
    fn folds(&self) -> Vec<Fold> {
        let meets = |branch: &curve::Branch, fold: &curve::Fold| {
            let end = if fold.is_highest {
                branch.points.last()
            } else {
                branch.points.first()
            };
            end.is_some_and(|end| end.setpoint == fold.point.setpoint && end.c == fold.point.c)
        };
        let fold = |fold: &curve::Fold| {
            let mut numbers = self
                .rest
                .branches
                .iter()
                .enumerate()
                .filter(|(_, b)| meets(b, fold))
                .map(|(number, _)| number);
            Some(Fold {
                setpoint: self.rest.rod.setpoint_si(fold.point.setpoint),
                mean_angle_rad: fold.point.mean_angle(),
                branches: [numbers.next()?, numbers.next()?],
            })
        };
        self.rest.folds.iter().filter_map(fold).collect()
    }

    /// The limits in words.
    fn limits(&self, branches: &[Branch]) -> Vec<Limit> {
        let mut limits = Vec::new();
        let stable: Vec<&Branch> = branches.iter().filter(|b| b.stable).collect();
        let usable = || {
            stable.iter().flat_map(|b| {
                b.points.iter().filter(|p| {
                    b.stretches
                        .iter()
                        .any(|s| (s.from..=s.to).contains(&p.setpoint))
                })
            })
        };
        let highest = usable()
            .map(|p| p.tension_a_n.max(p.tension_b_n))
            .fold(0.0, f64::max);
        let maximum = self.tabulation.arm.tendons.max_tension_n;
        limits.push(Limit {
            what: "Highest tendon tension at rest".to_string(),
            value: format!("{highest:.1} N of {maximum:.1} N"),
            note: "Over all usable setpoints, pretension included. A swing needs more.".to_string(),
        });
        if let Some(lowest) = usable().filter_map(|p| p.barrier_j).min_by(f64::total_cmp) {
            limits.push(Limit {
                what: "Lowest barrier".to_string(),
                value: format!("{:.1} mJ", 1e3 * lowest),
                note: "Energy that carries the arm over to another rest shape at a usable setpoint; it falls to nothing at a fold."
                    .to_string(),
            });
        }
        limits
    }

    fn worst_errors(&self) -> Vec<WorstError> {
        let worst = &self.tabulation.worst_error;
        let scale = self.rest.rod.energy_scale_j;
        let degrees =
            |quantity: &str, value: f32| (quantity.to_string(), f64::from(value).to_degrees(), "°");
        let percent = |quantity: &str, value: f64| {
            (quantity.to_string(), 100.0 * value / scale, "% of m g L")
        };
        let conjugate = match self.drive {
            Drive::HeldTip => percent("couple", f64::from(worst.couple_n_m)),
            Drive::AppliedCouple => degrees("tip angle", worst.tip_angle_rad),
        };
        [
            degrees("mean angle", worst.mean_angle_rad),
            conjugate,
            percent("energy", f64::from(worst.energy_j)),
            percent("barrier", f64::from(worst.barrier_j)),
            (
                "tip position".to_string(),
                1e3 * f64::from(worst.tip_m),
                "mm",
            ),
            (
                "restoring stiffness".to_string(),
                f64::from(worst.restoring_n_m_per_rad),
                "N m/rad",
            ),
        ]
        .into_iter()
        .map(|(quantity, value, unit)| WorstError {
            quantity,
            value,
            unit: unit.to_string(),
        })
        .collect()
    }
}
