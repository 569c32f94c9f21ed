//! The plan of crossings: how the arm gets from one stable branch to another, tried before the board may do it.
//!
//! For every payload slice and both directions: where a crossing may begin and where it ends (`2_swing/1_places.rs`), which
//! ways of driving it are worth a try (`2_swing/3_ways.rs`), and what becomes of each when the firmware's own supervisor drives
//! the simulated arm in every corner of the tolerances (`2_swing/2_trial.rs`). The first way that succeeds in every corner within
//! every limit is stored as allowed; where none does, the one that got furthest is stored as not allowed.
//!
//! A crossing may end further towards the other branch than need be: then the arm leans that way while it swings, and the pass it
//! has to get over is lower.
//!
//! The trials differ from each other in stiffness and tilt (the tolerances of the arm file; the stiffness a little beyond, by
//! what the board's survey can be wrong), damping, friction, sensor noise, bias and delay. The same arm and the same seed give the
//! same plan, on any number of cores.

#[path = "2_swing/4_kept.rs"]
mod kept;
#[path = "2_swing/1_places.rs"]
mod places;
#[path = "2_swing/2_trial.rs"]
mod trial;
#[path = "2_swing/3_ways.rs"]
mod ways;

use crate::arm_file::{Arm, Drive};
use crate::margins::corners::Corners;
use crate::margins::usable::Usable;
use crate::table::TabulationError;
use crate::table::crossings::SliceCrossings;
use firmware_core::{Crossing, SurveyBand};
use rayon::prelude::*;
use serde::{Deserialize, Serialize};
use std::sync::atomic::{AtomicUsize, Ordering};

pub use kept::{plan_or_kept, plan_path};

/// To be raised with every change of the planner, the simulated arm or the firmware's supervisor: plans kept from another version
/// are made anew.
pub const PLANNER_VERSION: u32 = 1;
/// Seed of the sensor noise in the trials.
pub const SEED: u64 = 20;
/// By what fraction the stiffness that a survey finds may be wrong: trials and band reach that far beyond the tolerance.
const SURVEY_ERROR: f64 = 0.04;

/// Everything planned for an arm.
#[derive(Clone, Debug, Default, PartialEq, Serialize, Deserialize)]
pub struct Plans {
    /// Stiffness for which crossings were tried, as fractions of the nominal one.
    pub survey: SurveyBand,
    /// One entry for each place.
    pub found: Vec<Found>,
}

/// What was found for one place.
#[derive(Clone, Debug, PartialEq, Serialize, Deserialize)]
pub struct Found {
    /// Position of the payload among the slices'.
    pub slice: usize,
    /// The plan, allowed or not.
    pub crossing: Crossing,
    /// Why it is not allowed, and in which trial; `None` when it is.
    pub failed: Option<String>,
}

impl Plans {
    /// The plans slice by slice, as the table takes them.
    pub fn by_slice(&self, slices: usize) -> Vec<SliceCrossings> {
        (0..slices)
            .map(|slice| SliceCrossings {
                survey: self.survey,
                crossings: self
                    .found
                    .iter()
                    .filter(|found| found.slice == slice)
                    .map(|found| found.crossing)
                    .collect(),
            })
            .collect()
    }
}

/// Plans the crossings of `arm`, whose table so far is `draft`. Nothing is planned without limits of a swing in the arm file, or
/// with an applied couple. `progress` is called with the fraction done.
///
/// # Errors
/// [`TabulationError`] when `draft` is not a table of this arm.
pub fn plan(
    arm: &Arm,
    corners: &Corners,
    usable: &Usable,
    draft: &[u8],
    progress: &(dyn Fn(f64) + Sync),
) -> Result<Plans, TabulationError> {
    let (Some(swing), Drive::HeldTip { .. }) = (arm.swing, arm.drive) else {
        return Ok(Plans::default());
    };
    let reach = arm.tolerance.stiffness_fraction + SURVEY_ERROR;
    let search = ways::Search {
        arm,
        swing,
        corners,
        draft,
        stiffness_reach: reach.min(0.9),
    };
    let places = places::places(corners, usable, &swing);
    let done = AtomicUsize::new(0);
    let found = places
        .par_iter()
        .map(|place| {
            let found = search.best(place);
            let before = done.fetch_add(1, Ordering::Relaxed);
            progress((before + 1) as f64 / places.len() as f64);
            found
        })
        .collect::<Result<Vec<Option<Found>>, TabulationError>>()?;
    Ok(Plans {
        survey: SurveyBand {
            lo: (1.0 - search.stiffness_reach) as f32,
            hi: (1.0 + search.stiffness_reach) as f32,
        },
        found: found.into_iter().flatten().collect(),
    })
}
