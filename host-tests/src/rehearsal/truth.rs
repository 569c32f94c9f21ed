//! What is really the case with the simulated arm, whatever its sensors and its firmware say.

use firmware_core::{Drive, Table};
use table_gen::arm_file::{Arm, KeepOut};
use table_gen::margins::shape::Stations;
use table_gen::plan::plant::Plant;
use table_gen::rest_states::modes::mean_angle;
use table_gen::rod::Rod;

/// Looks at the arm itself.
pub struct Observer {
    stations: Stations,
    rod: Rod,
    keep_out: Vec<KeepOut>,
}

/// What was seen in one look.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Look {
    /// Distance of the whole arm from the nearest keep-out region (m); `None` without regions.
    pub clearance_m: Option<f64>,
    /// Largest bending strain.
    pub strain: f64,
}

impl Observer {
    /// For a simulated version of `arm`.
    pub fn new(arm: &Arm, plant: &Plant) -> Self {
        Self {
            stations: Stations::new(plant.curvature_modes().len()),
            rod: Rod::new(arm),
            keep_out: arm.keep_out.clone(),
        }
    }

    /// Looks.
    pub fn look(&self, plant: &Plant) -> Look {
        let arm = plant.arm();
        let shape = self
            .stations
            .shape(plant.curvature_modes(), arm.base.tilt_rad);
        let clearance = shape.clearance_m(&self.keep_out, arm.spine.length_m);
        Look {
            clearance_m: clearance.map(|(clearance_m, _)| clearance_m),
            strain: shape.strain(arm, &self.rod),
        }
    }
}

/// The stable branch of the table that the arm is nearest to, by its true mean angle: of the slice nearest to the payload
/// carried, at the true tip angle or couple.
pub fn branch(table: &Table, plant: &Plant) -> Option<u8> {
    let payload_kg = plant.arm().payload.mass_kg as f32;
    let away = |kg: f32| (kg - payload_kg).abs();
    let slice = table
        .slices()
        .min_by(|a, b| away(a.payload_kg).total_cmp(&away(b.payload_kg)))?;
    let at = match table.limits().drive {
        Drive::HeldTip => plant.tip().angle_rad,
        Drive::AppliedCouple => plant.couple_n_m(),
    } as f32;
    let mean = mean_angle(plant.curvature_modes()) as f32;
    let stable = slice.branches().filter(|branch| branch.entry.index == 0);
    stable
        .filter_map(|branch| {
            let at = at.clamp(branch.entry.from, branch.entry.to);
            let state = slice.at(branch.number, at).ok()?;
            Some((branch.number, (state.mean_angle_rad - mean).abs()))
        })
        .min_by(|a, b| a.1.total_cmp(&b.1))
        .map(|(number, _)| number)
}
