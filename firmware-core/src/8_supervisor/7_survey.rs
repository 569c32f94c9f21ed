//! What the arm carries, from how it rests.
//!
//! At rest with the tip held, the first curvature coefficient that is free balances bending against weight,
//!
//! ```text
//! gamma int alpha' phi_1' ds = int w sin(phi + alpha) phi_1 ds,   phi_1 = -s (1 - s)
//! gamma c_1 / 3 = -int w sin(phi + alpha) s (1 - s) ds,           c_1 = 3 q0 - 6 q1
//! ```
//!
//! so that the shape alone tells `gamma`, the stiffness over the weight. Mass along the arm (`w`) and what two
//! coordinates leave out are calibrated away: the same sum is made of the tabulated rest state of each slice at the
//! measured tip angle, and the ratio is the stiffness it takes for this payload, as a fraction of the nominal one. The
//! second balance, that of the tip angle, then tells the couple to expect, which is proportional to the weight.
//!
//! What it can tell: that no declared payload fits, with any stiffness for which crossings were tried. What it cannot
//! tell from the shape: a heavier payload from a softer spine (both lower `gamma`); only the couple does, as far as the
//! friction of the tendons lets it be known. Nor anything of an arm that is nearly straight: it bends by less than
//! [`super::Settings::survey_bend_rad`] then and the survey says so.

use super::config::{ArmFacts, Settings};
use super::estimates::{GAUSS, affine, sin_cos};
use super::inputs_outputs::Surveyed;
use crate::load::Load;
use crate::table::{Slice, Table};

/// Means over the time of listening.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Listened {
    sums: [f32; 3],
    ticks: f32,
}

/// How the arm rests.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Resting {
    /// Tip angle (rad).
    pub(super) q0: f32,
    /// Mean angle (rad).
    pub(super) q1: f32,
    /// Couple (N m).
    pub(super) couple_n_m: f32,
}

impl Listened {
    pub(super) const NEW: Self = Self {
        sums: [0.0; 3],
        ticks: 0.0,
    };

    pub(super) fn add(&mut self, resting: Resting) {
        let Resting { q0, q1, couple_n_m } = resting;
        for (sum, value) in self.sums.iter_mut().zip([q0, q1, couple_n_m]) {
            *sum += value;
        }
        self.ticks += 1.0;
    }

    /// How long it has listened, in steps of `dt_s` (s).
    pub(super) fn time_s(&self, dt_s: f32) -> f32 {
        self.ticks * dt_s
    }

    fn mean(&self) -> Resting {
        let [q0, q1, couple_n_m] = self.sums.map(|sum| sum / self.ticks);
        Resting { q0, q1, couple_n_m }
    }
}

/// What a survey says.
#[derive(Clone, Copy)]
pub(super) struct Verdict {
    /// The best fit of all slices.
    pub(super) surveyed: Option<Surveyed>,
    /// The best of the load's slices, when it fits (kg).
    pub(super) fits_kg: Option<f32>,
    /// The best of the load's slices, whether or not it fits.
    pub(super) nearest: Option<Surveyed>,
}

/// Compares how the arm rests on `branch` with every slice.
pub(super) fn survey(
    table: &Table<'_>,
    load: &Load<'_>,
    branch: u8,
    listened: &Listened,
    settings: &Settings,
    arm: &ArmFacts,
) -> Verdict {
    let rests = listened.mean();
    let best = |slices: &mut dyn Iterator<Item = Slice<'_>>| {
        let mut best: Option<(f32, Surveyed)> = None;
        for slice in slices {
            let Some(found) = against(&slice, table, branch, rests, settings, arm) else {
                continue;
            };
            // What does not fit counts only where nothing does.
            let misfit = (found.stiffness - 1.0).abs() * 10.0
                + found.couple_off_n_m.abs() / settings.survey_couple_n_m
                + if fits(&found, settings) { 0.0 } else { 1e6 };
            if best.is_none_or(|(least, _)| misfit < least) {
                best = Some((misfit, found));
            }
        }
        best.map(|(_, found)| found)
    };
    let nearest = best(&mut load.slices());
    Verdict {
        surveyed: best(&mut table.slices()),
        fits_kg: nearest
            .filter(|found| fits(found, settings))
            .map(|found| found.payload_kg),
        nearest,
    }
}

fn fits(found: &Surveyed, settings: &Settings) -> bool {
    found.within_band && found.couple_off_n_m.abs() <= settings.survey_couple_n_m
}

fn against(
    slice: &Slice<'_>,
    table: &Table<'_>,
    branch: u8,
    rests: Resting,
    settings: &Settings,
    arm: &ArmFacts,
) -> Option<Surveyed> {
    let expected = slice.at(branch, rests.q0).ok()?;
    let measured = Balance::of(rests.q0, rests.q1, arm);
    let tabulated = Balance::of(rests.q0, expected.mean_angle_rad, arm);
    let bent = measured.bend.abs() >= settings.survey_bend_rad
        && tabulated.bend.abs() >= settings.survey_bend_rad;
    if !bent {
        return None;
    }
    let stiffness = measured.stiffness() / tabulated.stiffness();
    let mass_kg = arm.mass_kg + slice.payload_kg - table.limits().nominal_payload_kg;
    let share = mass_kg / arm.mass_kg;
    let (scale_j, gamma) = (arm.energy_scale_j * share, arm.gamma / share);
    let couple = expected.couple_n_m
        + scale_j * (gamma * (stiffness - 1.0) * rests.q0 - (measured.turn - tabulated.turn));
    let couple_off_n_m = rests.couple_n_m - couple;
    (stiffness.is_finite() && couple_off_n_m.is_finite()).then_some(Surveyed {
        payload_kg: slice.payload_kg,
        stiffness,
        couple_off_n_m,
        within_band: slice.survey.contains(stiffness),
    })
}

/// Both sides of the balances of an affine arm with all its weight at the tip.
struct Balance {
    /// c_1 (rad).
    bend: f32,
    /// int sin(phi + alpha) phi_1 ds.
    weight: f32,
    /// int sin(phi + alpha) s ds.
    turn: f32,
}

impl Balance {
    fn of(q0: f32, q1: f32, arm: &ArmFacts) -> Self {
        let (mut weight, mut turn) = (0.0, 0.0);
        for (s, share) in GAUSS {
            let (sin, _) = sin_cos(arm.tilt_rad + affine(q0, q1, s));
            weight -= share * sin * s * (1.0 - s);
            turn += share * sin * s;
        }
        Self {
            bend: 3.0 * q0 - 6.0 * q1,
            weight,
            turn,
        }
    }

    fn stiffness(&self) -> f32 {
        3.0 * self.weight / self.bend
    }
}
