//! What is required of a rest state, and how much of it there is, in one corner and over all.

use super::corners::{Corner, CornerArm, CornerStates, Corners};
use super::reserves::{Grows, Reserve};
use super::shape::Stations;
use crate::arm_file::{Arm, Drive, Require};
use crate::rest_states::RestStatesError;
use crate::rest_states::curve::BranchEnd;
use rayon::prelude::*;

/// Reserves of a rest state in one corner, SI; `None` where no bound was found.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Margins {
    /// The branch of the corner's own rest states that it lies on.
    pub branch: usize,
    /// Energy to the lowest pass out of the well (J).
    pub barrier_j: Option<f64>,
    /// Lateral impulse at the tip that carries that energy (N s).
    pub knock_n_s: Option<f64>,
    /// Bending stiffness that can be lost beyond the tolerance until the same, as a fraction of the nominal; only known from the
    /// softest corners.
    pub stiffness_reserve: Option<f64>,
    /// Distance of the setpoint to the nearest fold of the branch, less how far the fold may be off (rad or N m).
    pub setpoint_reserve: Option<f64>,
    /// Restoring stiffness along the mean angle (N m/rad).
    pub restoring_n_m_per_rad: f64,
    /// Couple the tendons can give over the couple that holds.
    pub tension_factor: Option<f64>,
    /// Largest strain.
    pub strain: f64,
    /// Smallest distance of the arm to a keep-out region (m).
    pub clearance_m: Option<f64>,
}

/// The requirements, in the order they are reported.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Kind {
    /// The branch exists, stable, in every corner.
    Stable,
    /// Lateral knock at the tip.
    Knock,
    /// Payload reserve.
    PayloadReserve,
    /// Stiffness reserve.
    StiffnessReserve,
    /// Setpoint reserve.
    SetpointReserve,
    /// Couple available over couple needed.
    TensionFactor,
    /// Strain.
    Strain,
    /// Clearance.
    Clearance,
}

impl Kind {
    /// All that have a number, in order.
    pub const NUMBERED: [Self; 7] = [
        Self::Knock,
        Self::PayloadReserve,
        Self::StiffnessReserve,
        Self::SetpointReserve,
        Self::TensionFactor,
        Self::Strain,
        Self::Clearance,
    ];

    /// Its key in the arm file, and its unit there.
    pub fn key_and_unit(self, drive: &Drive) -> (&'static str, &'static str) {
        match (self, drive) {
            (Self::Stable, _) => ("stable", ""),
            (Self::Knock, _) => ("knock_n_s", "N s"),
            (Self::PayloadReserve, _) => ("payload_reserve_kg", "kg"),
            (Self::StiffnessReserve, _) => ("stiffness_reserve_percent", "%"),
            (Self::SetpointReserve, Drive::HeldTip { .. }) => ("setpoint_reserve_deg", "deg"),
            (Self::SetpointReserve, Drive::AppliedCouple { .. }) => ("setpoint_reserve_n_m", "N m"),
            (Self::TensionFactor, _) => ("tension_factor", ""),
            (Self::Strain, _) => ("strain", ""),
            (Self::Clearance, _) => ("clearance_m", "m"),
        }
    }

    /// A value in SI as the arm file would have it: percent and degrees.
    pub fn as_typed(self, drive: &Drive, value: f64) -> f64 {
        match (self, drive) {
            (Self::StiffnessReserve, _) => 100.0 * value,
            (Self::SetpointReserve, Drive::HeldTip { .. }) => value.to_degrees(),
            _ => value,
        }
    }

    /// The limit, SI.
    pub fn limit(self, arm: &Arm) -> f64 {
        let require: &Require = &arm.require;
        match self {
            Self::Stable => 0.0,
            Self::Knock => require.knock_n_s,
            Self::PayloadReserve => require.payload_reserve_kg,
            Self::StiffnessReserve => require.stiffness_reserve_fraction,
            Self::SetpointReserve => require.setpoint_reserve,
            Self::TensionFactor => require.tension_factor,
            Self::Strain => arm.spine.allowed_strain,
            Self::Clearance => require.clearance_m,
        }
    }

    /// The value in one corner, SI; `None` without bound.
    pub fn value(self, margins: &Margins) -> Option<f64> {
        match self {
            // Neither belongs to a single corner: see [`Assessed`].
            Self::Stable | Self::PayloadReserve => None,
            Self::Knock => margins.knock_n_s,
            Self::StiffnessReserve => margins.stiffness_reserve,
            Self::SetpointReserve => margins.setpoint_reserve,
            Self::TensionFactor => margins.tension_factor,
            Self::Strain => Some(margins.strain),
            Self::Clearance => margins.clearance_m,
        }
    }

    /// Whether more is worse.
    pub fn is_upper_limit(self) -> bool {
        self == Self::Strain
    }

    /// Whether `value` meets `limit`; a missing bound does, NaN does not.
    pub fn holds(self, value: Option<f64>, limit: f64) -> bool {
        match value {
            None => true,
            Some(value) if self.is_upper_limit() => value <= limit,
            Some(value) => value >= limit,
        }
    }
}

/// One requirement, worst over some corners.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Finding {
    /// Which requirement.
    pub kind: Kind,
    /// Worst value, SI; `None` without bound.
    pub value: Option<f64>,
    /// Its limit, SI.
    pub limit: f64,
    /// Whether it holds.
    pub holds: bool,
    /// The corner of the worst value; `None` without bound.
    pub corner: Option<Corner>,
}

/// A stable nominal rest state with its margins in every corner.
#[derive(Clone, Debug)]
pub struct Assessed {
    /// Nominal branch.
    pub label: usize,
    /// Margins in each of the corners, in their order.
    pub margins: Vec<Look>,
    /// Mass at the tip beyond the payload range until the state stops being stable (kg), least over the heaviest corners, and
    /// the corner; `None` without bound.
    pub payload_reserve: Option<(f64, Corner)>,
}

/// What one corner shows of a nominal rest state.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Look {
    /// The corner was not asked for.
    NotLookedAt,
    /// The state has ceased to be stable on the way there.
    Vanished,
    /// It is there.
    There(Margins),
}

/// Everything that judging a setpoint needs.
pub struct Assessor<'a> {
    arm: &'a Arm,
    corners: &'a Corners,
    stations: Vec<Stations>,
}

impl<'a> Assessor<'a> {
    /// For `arm` in its `corners`.
    pub fn new(arm: &'a Arm, corners: &'a Corners) -> Self {
        let stations = corners
            .arms
            .iter()
            .map(|corner| Stations::new(corner.rest.modal.modes()))
            .collect();
        Self {
            arm,
            corners,
            stations,
        }
    }

    /// The nominal arm.
    pub fn arm(&self) -> &'a Arm {
        self.arm
    }

    /// The corners.
    pub fn corners(&self) -> &'a Corners {
        self.corners
    }

    /// Every stable nominal branch at `setpoint` (SI), or only the one called `only`, with its margins in every corner, or only
    /// in those of one `slice`.
    ///
    /// # Errors
    /// [`RestStatesError`] when a corner's rest states cannot be solved.
    pub fn assess(
        &self,
        setpoint: f64,
        only: Option<usize>,
        slice: Option<usize>,
    ) -> Result<Vec<Assessed>, RestStatesError> {
        let nominal = &self.corners.nominal;
        let at = nominal.rod.setpoint_from_si(setpoint);
        let labels: Vec<usize> = (0..nominal.branches.len())
            .filter(|&label| {
                nominal.branches[label].index == 0 && nominal.branches[label].covers(at)
            })
            .filter(|&label| only.is_none_or(|only| only == label))
            .collect();
        let from: Vec<_> = labels
            .iter()
            .map(|&label| {
                self.corners
                    .nominal_state(label, setpoint)
                    .ok_or(RestStatesError::CurveLost { setpoint })
            })
            .collect::<Result<_, _>>()?;
        let by_corner: Vec<Vec<(Look, Option<f64>)>> = self
            .corners
            .arms
            .par_iter()
            .zip(&self.stations)
            .map(|(corner, stations)| {
                let in_slice = slice.is_none_or(|slice| corner.slice == slice);
                let there: Vec<_> = from
                    .iter()
                    .map(|from| {
                        if in_slice || corner.is_heaviest {
                            corner.follow(nominal, from)
                        } else {
                            None
                        }
                    })
                    .collect();
                let reserve = |c: &Option<Vec<f64>>| match c {
                    // A state that is not there has no reserve.
                    None => Some(0.0),
                    Some(c) => self.payload_reserve_kg(corner, setpoint, c),
                };
                let payload = there
                    .iter()
                    .map(|c| reserve(c).filter(|_| corner.is_heaviest));
                let looks = if in_slice {
                    let states = corner.states(setpoint)?;
                    let look = |c: &Option<Vec<f64>>| match c
                        .as_ref()
                        .and_then(|c| states.nearest_well(c))
                    {
                        None => Look::Vanished,
                        Some(place) => Look::There(self.margins(corner, stations, &states, place)),
                    };
                    there.iter().map(look).collect()
                } else {
                    vec![Look::NotLookedAt; labels.len()]
                };
                Ok(looks.into_iter().zip(payload).collect())
            })
            .collect::<Result<_, RestStatesError>>()?;
        let assessed = |(k, label): (usize, usize)| Assessed {
            label,
            margins: by_corner.iter().map(|corner| corner[k].0).collect(),
            payload_reserve: by_corner
                .iter()
                .zip(&self.corners.arms)
                .filter_map(|(corner, arm)| Some((corner[k].1?, arm.corner)))
                .min_by(|a, b| a.0.total_cmp(&b.0)),
        };
        Ok(labels.into_iter().enumerate().map(assessed).collect())
    }

    /// Mass that the state `c` of a corner bears in addition (kg).
    fn payload_reserve_kg(&self, corner: &CornerArm, setpoint: f64, c: &[f64]) -> Option<f64> {
        let rest = &corner.rest;
        let at = rest.rod.setpoint_from_si(setpoint);
        // It was followed in the nominal number of modes.
        let mut c = c.to_vec();
        c.resize(rest.modal.modes(), 0.0);
        let fraction = Reserve::new(&rest.modal, at, corner.arm.gamma(), Grows::Payload).run(&c)?;
        Some(fraction * corner.arm.total_mass_kg())
    }

    /// Margins of the state at `place` among a corner's states.
    fn margins(
        &self,
        corner: &CornerArm,
        stations: &Stations,
        states: &CornerStates,
        place: usize,
    ) -> Margins {
        let (rest, arm) = (&corner.rest, &corner.arm);
        let (rod, modal) = (&rest.rod, &rest.modal);
        let state = &states.states[place];
        let shape = stations.shape(&state.c, rod.tilt_rad);
        let barrier_j = states.wells.barrier[place].map(|barrier| barrier * rod.energy_scale_j);
        let branch = &rest.branches[states.numbers[place]];
        let to_folds = [
            (branch.from_end == BranchEnd::Fold).then(|| state.setpoint - branch.from()),
            (branch.to_end == BranchEnd::Fold).then(|| branch.to() - state.setpoint),
        ];
        let tendons = &arm.tendons;
        let available = (tendons.max_tension_n - tendons.pretension_n) * tendons.offset_m;
        let needed = state.couple.abs() * rod.energy_scale_j;
        Margins {
            branch: states.numbers[place],
            barrier_j,
            knock_n_s: barrier_j.map(|barrier| {
                (2.0 * stations.tip_mass_kg(modal, rod, arm, &shape) * barrier.max(0.0)).sqrt()
            }),
            stiffness_reserve: if corner.is_softest {
                let factor = 1.0 + 0.01 * corner.corner.stiffness_percent;
                let mut reserve =
                    Reserve::new(modal, state.setpoint, arm.gamma(), Grows::StiffnessLoss);
                reserve.run(&state.c).map(|fraction| fraction * factor)
            } else {
                None
            },
            setpoint_reserve: to_folds
                .into_iter()
                .flatten()
                .min_by(f64::total_cmp)
                .map(|distance| rod.setpoint_si(distance) - rest.fold_uncertainty_si()),
            restoring_n_m_per_rad: modal.restoring_stiffness(&state.c).unwrap_or(0.0)
                * rod.energy_scale_j,
            // A couple this small needs no tendon worth speaking of.
            tension_factor: (needed > 1e-9 * available).then(|| available / needed),
            strain: shape.strain(arm, rod),
            clearance_m: shape
                .clearance_m(&self.arm.keep_out, rod.length_m)
                .map(|(clearance, _)| clearance),
        }
    }

    /// The requirements of an assessed state, each worst over the corners of one slice (or of all). The payload reserve counts
    /// from the heaviest corners for every slice.
    pub fn findings(&self, assessed: &Assessed, slice: Option<usize>) -> Vec<Finding> {
        let looked_at = || {
            let each = self.corners.arms.iter().zip(&assessed.margins);
            each.filter(|(corner, _)| slice.is_none_or(|slice| corner.slice == slice))
        };
        let vanished = looked_at()
            .find(|(_, look)| **look == Look::Vanished)
            .map(|(corner, _)| corner.corner);
        let stable = Finding {
            kind: Kind::Stable,
            value: None,
            limit: 0.0,
            holds: vanished.is_none(),
            corner: vanished,
        };
        let numbered = Kind::NUMBERED.into_iter().map(|kind| {
            let limit = kind.limit(self.arm);
            let in_corners = looked_at().filter_map(|(corner, look)| match look {
                Look::There(margins) => kind.value(margins).map(|value| (value, corner.corner)),
                // A state that is not there has no reserve against anything that could end it.
                Look::Vanished => kind.is_of_stability().then_some((0.0, corner.corner)),
                Look::NotLookedAt => None,
            });
            let worst = match kind {
                Kind::PayloadReserve => assessed.payload_reserve,
                _ if kind.is_upper_limit() => in_corners.max_by(|a, b| a.0.total_cmp(&b.0)),
                _ => in_corners.min_by(|a, b| a.0.total_cmp(&b.0)),
            };
            let value = worst.map(|w| w.0);
            Finding {
                kind,
                value,
                limit,
                holds: kind.holds(value, limit),
                corner: worst.map(|w| w.1),
            }
        });
        std::iter::once(stable).chain(numbered).collect()
    }
}

impl Kind {
    /// Whether a vanished state leaves none of it.
    fn is_of_stability(self) -> bool {
        matches!(
            self,
            Self::Knock | Self::StiffnessReserve | Self::SetpointReserve
        )
    }
}
