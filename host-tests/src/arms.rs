//! Arms from dimensionless numbers, and their rest states.

use crate::tolerances::ASKED;
use firmware_core::{Crossing, Method};
use table_gen::arm_file::{Accuracy, Arm, Drive, Profile, STANDARD_GRAVITY_M_S2, parse};
use table_gen::rest_states::curve::{RestPoint, Solver};
use table_gen::rest_states::{RestStates, RestStatesError};
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
}

impl UniformArm {
    /// Upright, all mass at the tip.
    pub fn with_tip_mass(gamma: f64) -> Self {
        Self {
            gamma,
            tip_fraction: 1.0,
            tilt_rad: 0.0,
        }
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
        let mut arm = plain();
        arm.name = format!("uniform arm, gamma {}", self.gamma);
        arm.spine.bending_stiffness_n_m2 = Profile::constant(self.gamma * STANDARD_GRAVITY_M_S2);
        arm.spine.mass_per_length_kg_m = Profile::constant(1.0 - self.tip_fraction);
        carry(&mut arm, self.tip_fraction);
        arm.base.tilt_rad = self.tilt_rad;
        arm.drive = drive;
        arm
    }
}

/// The greenhouse wand of the examples, with all its tolerances and requirements.
pub fn wand() -> Arm {
    let file = include_str!("../../examples/greenhouse-wand/arm.toml");
    parse(file, "greenhouse-wand/arm.toml").unwrap_or_else(|error| panic!("{error}"))
}

/// An upright arm of 1 m and 1 kg without tolerances, to be changed.
pub fn plain() -> Arm {
    parse(include_str!("plain_arm.toml"), "plain_arm.toml")
        .unwrap_or_else(|error| panic!("{error}"))
}

/// Makes `arm` carry `payload_kg`, no more and no less.
pub fn carry(arm: &mut Arm, payload_kg: f64) {
    arm.payload.mass_kg = payload_kg;
    arm.payload.range_kg = [payload_kg; 2];
}

/// The certified rest states of `arm`, with the tightest of the accuracies [`ASKED`] that the most
/// modes reach.
pub fn rest_states(arm: &Arm) -> RestStates {
    let rod = Rod::new(arm);
    let mut refusal = None;
    for asked in ASKED {
        let accuracy = Accuracy {
            angle_rad: asked,
            couple_fraction: asked,
        };
        match RestStates::find(&rod, &accuracy, arm.gamma()) {
            Ok(rest) => return rest,
            Err(error @ RestStatesError::TooSoft { .. }) => refusal = Some(error),
            Err(error) => panic!("{}: {error}", arm.name),
        }
    }
    panic!(
        "{}: {}",
        arm.name,
        refusal.expect("some accuracy was asked")
    );
}

/// Every rest state at `setpoint` (rad or m g L), by base curvature.
pub fn states_at(rest: &RestStates, setpoint: f64) -> Vec<RestPoint> {
    let states = rest
        .at(&mut Solver::new(&rest.modal), setpoint)
        .unwrap_or_else(|error| panic!("{error}"));
    states.into_iter().map(|(_, state)| state).collect()
}

/// A crossing of the [`wand`] about the upright, tuned by hand.
pub fn crossing(from: u8, to: u8) -> Crossing {
    Crossing {
        from,
        to,
        setpoint_from: -0.09,
        setpoint_to: 0.09,
        method: Method::Inject,
        rest_setpoint: 0.0,
        amplitude_rad: 0.5,
        eta: 4.0,
        lean_setpoint: 0.0,
        longest_s: 8.0,
        most_tip_travel_rad: 1.05,
        most_couple_n_m: 0.35,
        most_tip_speed_m_s: 3.5,
        lowest_clearance_m: 0.02,
        peak_couple_n_m: 0.3,
        peak_tip_speed_m_s: 3.0,
        takes_s: 6.0,
        successes: 1,
        trials: 1,
        allowed: true,
    }
}
