//! Arms from dimensionless numbers, and their rest states.

use crate::tolerances::{ASKED, ASKED_OF_SOFTEST, SOFTEST};
use table_gen::arm_file::{
    Accuracy, Arm, Base, Drive, Payload, Profile, STANDARD_GRAVITY_M_S2, Spine, Tendons,
};
use table_gen::rest_states::RestStates;
use table_gen::rest_states::curve::{RestPoint, Solver};
use table_gen::rod::Rod;

/// Half the setpoint range searched around a held tip angle (rad).
pub const TIP_ANGLE_REACH_RAD: f64 = 0.25;
/// Half the setpoint range searched around an applied couple (m g L).
pub const COUPLE_REACH: f64 = 0.02;

/// A uniform straight arm of 1 m and 1 kg: its couples and energies in `m g L` are those in N m and
/// J divided by standard gravity.
#[derive(Clone, Copy, Debug)]
pub struct UniformArm {
    /// Bending stiffness `B / (m g L^2)`, `m` the total mass.
    pub gamma: f64,
    /// Share of the mass that sits at the tip; the rest is spread evenly.
    pub tip_fraction: f64,
    /// Base tilt from the upward vertical (rad).
    pub tilt_rad: f64,
    /// Accuracy asked of angles (rad) and of couples and energies (m g L).
    pub accuracy: f64,
}

impl UniformArm {
    /// As accurate as the comparison with reference values needs.
    pub fn new(gamma: f64, tip_fraction: f64, tilt_rad: f64) -> Self {
        let accuracy = if gamma < SOFTEST { ASKED_OF_SOFTEST } else { ASKED };
        Self {
            gamma,
            tip_fraction,
            tilt_rad,
            accuracy,
        }
    }

    /// Upright, all mass at the tip.
    pub fn with_tip_mass(gamma: f64) -> Self {
        Self::new(gamma, 1.0, 0.0)
    }

    /// With the tip held within [`TIP_ANGLE_REACH_RAD`] of `tip_angle_rad`.
    pub fn held_tip(self, tip_angle_rad: f64) -> Arm {
        let reach = TIP_ANGLE_REACH_RAD;
        self.driven(Drive::HeldTip {
            setpoints_rad: [tip_angle_rad - reach, tip_angle_rad + reach],
        })
    }

    /// With a tip couple within [`COUPLE_REACH`] of `couple` (m g L).
    pub fn applied_couple(self, couple: f64) -> Arm {
        let ends = [couple - COUPLE_REACH, couple + COUPLE_REACH];
        self.driven(Drive::AppliedCouple {
            setpoints_n_m: ends.map(|couple| couple * STANDARD_GRAVITY_M_S2),
        })
    }

    fn driven(self, drive: Drive) -> Arm {
        Arm {
            name: format!("uniform arm, gamma {}", self.gamma),
            spine: Spine {
                length_m: 1.0,
                bending_stiffness_n_m2: Profile::constant(self.gamma * STANDARD_GRAVITY_M_S2),
                mass_per_length_kg_m: Profile::constant(1.0 - self.tip_fraction),
                rest_curvature_rad_m: Profile::constant(0.0),
                thickness_m: 0.001,
                allowed_strain: 0.01,
                damping_ratio: 0.03,
            },
            lumps: vec![],
            payload: Payload {
                mass_kg: self.tip_fraction,
            },
            base: Base {
                tilt_rad: self.tilt_rad,
            },
            tendons: Tendons {
                offset_m: 0.01,
                pretension_n: 1.0,
                max_tension_n: 100.0,
            },
            drive,
            accuracy: Accuracy {
                angle_rad: self.accuracy,
                couple_fraction: self.accuracy,
            },
        }
    }
}

/// The certified rest states of `arm`.
pub fn rest_states(arm: &Arm) -> RestStates {
    RestStates::find(&Rod::new(arm), &arm.accuracy, arm.gamma())
        .unwrap_or_else(|error| panic!("{}: {error}", arm.name))
}

/// Every rest state at `setpoint` (rad or m g L), by base curvature.
pub fn states_at(rest: &RestStates, setpoint: f64) -> Vec<RestPoint> {
    let states = rest
        .at(&mut Solver::new(&rest.modal), setpoint)
        .unwrap_or_else(|error| panic!("{error}"));
    states.into_iter().map(|(_, state)| state).collect()
}
