//! Ways of driving a crossing, and the first of them that succeeds in every corner.

use super::places::Place;
use super::trial::{Corner, Measures, TICK_S, Trial};
use super::{Found, SEED};
use crate::arm_file::{Arm, STANDARD_GRAVITY_M_S2, Swing};
use crate::margins::corners::Corners;
use crate::table::TabulationError;
use crate::table::crossings::{SliceCrossings, with_crossings};
use firmware_core::supervisor::{Config, DriveFacts};
use firmware_core::{Crossing, Method, SurveyBand, Table, UNBOUNDED};

/// First amplitudes of an injection that are tried (rad), gentlest first.
const AMPLITUDES_RAD: [f64; 4] = [0.3, 0.4, 0.5, 0.6];
/// Steepness of the tip's motion over the rate of the mean angle.
const ETA: f64 = 2.5;
/// How far a lean goes, as fractions of the way from where it begins to the fold.
const LEANS: [f64; 2] = [1.35, 1.1];
/// Least lean past the fold (rad).
const LEAST_LEAN_RAD: f64 = 0.1;
/// Amplitude of the brake after a lean (rad).
const BRAKE_RAD: f64 = 0.3;
/// Longest injection that is tried, in units of sqrt(L/g); a lean has the time for its way besides.
const LONGEST_UNITS: f64 = 48.0;
/// What the firmware tolerates beyond the travel of a plan (rad): kept back from the arm file's limit.
const TRAVEL_KEPT_RAD: f64 = 0.12;
/// Stiffness bands while trying: the survey must not spare the plan its corners.
const WIDE: SurveyBand = SurveyBand { lo: 0.5, hi: 2.0 };
/// Range of the damping, the guides' friction (fractions) and the sensors' bias (rad): one degree.
const DAMPING: [f64; 3] = [0.5, 1.0, 2.0];
const FRICTION: [f64; 3] = [0.0, 0.05, 0.1];
const BIAS_RAD: [f64; 3] = [-0.017_45, 0.0, 0.017_45];

/// What every place is searched with.
pub(super) struct Search<'a> {
    pub(super) arm: &'a Arm,
    pub(super) swing: Swing,
    pub(super) corners: &'a Corners,
    pub(super) draft: &'a [u8],
    pub(super) stiffness_reach: f64,
}

/// How far a way got.
struct Tried {
    crossing: Crossing,
    failed: Option<String>,
}

impl Search<'_> {
    /// The best way found for `place`; `None` when the table's slice does not have its branches there.
    pub(super) fn best(&self, place: &Place) -> Result<Option<Found>, TabulationError> {
        let mut corners = self.trial_corners();
        let mut best: Option<Tried> = None;
        for way in self.ways(place) {
            let Some(tried) = self.attempt(place, way, &mut corners)? else {
                continue;
            };
            let better = best
                .as_ref()
                .is_none_or(|b| tried.crossing.successes > b.crossing.successes);
            let allowed = tried.crossing.allowed;
            if allowed || better {
                best = Some(tried);
            }
            if allowed {
                break;
            }
        }
        Ok(best.map(|tried| Found {
            slice: place.slice,
            crossing: tried.crossing,
            failed: tried.failed,
        }))
    }

    fn unit_s(&self) -> f64 {
        (self.arm.spine.length_m / STANDARD_GRAVITY_M_S2).sqrt()
    }

    /// Plans worth a try, as they are written while being tried: the least tip movement first.
    fn ways(&self, place: &Place) -> Vec<Crossing> {
        let travel = self.swing.max_tip_travel_rad - TRAVEL_KEPT_RAD;
        let middle = 0.5 * (place.run[0] + place.run[1]);
        let mut ways = Vec::new();
        for &rest in &place.rests {
            let inject = self.injection(place, rest, travel);
            let amplitudes = AMPLITUDES_RAD
                .iter()
                .filter(|&&amplitude| amplitude <= travel);
            ways.extend(amplitudes.map(|&amplitude| Crossing {
                amplitude_rad: amplitude as f32,
                ..inject
            }));
        }
        let Some(fold) = place.fold else {
            return ways;
        };
        let way = (fold - middle).signum();
        for &rest in &place.rests {
            let ahead = way * (fold - rest);
            for share in LEANS {
                let past = ahead + ((share - 1.0) * (fold - middle).abs()).max(LEAST_LEAN_RAD);
                if ahead > 0.0 && past <= travel {
                    ways.push(Crossing {
                        method: Method::Lean,
                        amplitude_rad: BRAKE_RAD.min(travel) as f32,
                        lean_setpoint: (rest + way * past) as f32,
                        longest_s: (2.0 * LONGEST_UNITS * self.unit_s()) as f32,
                        ..self.injection(place, rest, travel)
                    });
                }
            }
        }
        ways
    }

    /// An injection that ends at `rest`, without its amplitude.
    fn injection(&self, place: &Place, rest: f64, travel: f64) -> Crossing {
        let tendons = &self.arm.tendons;
        let most_n_m = (tendons.max_tension_n - tendons.pretension_n) * tendons.offset_m;
        Crossing {
            from: place.from as u8,
            to: place.to as u8,
            setpoint_from: (place.run[0] as f32).next_up(),
            setpoint_to: (place.run[1] as f32).next_down(),
            method: Method::Inject,
            rest_setpoint: rest as f32,
            amplitude_rad: 0.0,
            eta: ETA as f32,
            lean_setpoint: rest as f32,
            longest_s: (LONGEST_UNITS * self.unit_s()) as f32,
            most_tip_travel_rad: travel as f32,
            most_couple_n_m: self.swing.max_couple_n_m.min(0.999_99 * most_n_m) as f32,
            most_tip_speed_m_s: self.swing.max_tip_speed_m_s as f32,
            lowest_clearance_m: UNBOUNDED,
            peak_couple_n_m: 0.0,
            peak_tip_speed_m_s: 0.0,
            takes_s: 0.0,
            successes: 1,
            trials: 1,
            allowed: true,
        }
    }

    /// Tries one way in every corner until one fails. The corner that fails comes first from then on, as it is the likeliest
    /// to fail the next way too.
    fn attempt(
        &self,
        place: &Place,
        way: Crossing,
        corners: &mut [Corner],
    ) -> Result<Option<Tried>, TabulationError> {
        let mut slices = vec![SliceCrossings::default(); self.corners.payloads_kg.len()];
        slices[place.slice] = SliceCrossings {
            survey: WIDE,
            crossings: vec![way],
        };
        let bytes = match with_crossings(self.draft, &slices) {
            Ok(bytes) => bytes,
            // The slice's own branches do not reach so far.
            Err(TabulationError::Refused(_)) => return Ok(None),
            Err(error) => return Err(error),
        };
        let table = Table::new(&bytes).map_err(TabulationError::Refused)?;
        let facts = DriveFacts {
            tick_s: TICK_S as f32,
            ..DriveFacts::default()
        };
        let Ok(config) = Config::for_arm(&table, &facts) else {
            return Ok(None);
        };
        let mut measured: Vec<Measures> = Vec::new();
        let mut failed = None;
        for at in 0..corners.len() {
            let corner = corners[at];
            match self.trial(place, &way, corner, &table, &config) {
                Ok(measures) => measured.push(measures),
                Err((why, measures)) => {
                    measured.extend(measures);
                    failed = Some(format!("{why} ({})", described(&corner)));
                    corners[..=at].rotate_right(1);
                    break;
                }
            }
        }
        let crossing = self.recorded(&way, &measured, failed.is_none(), corners.len());
        Ok(Some(Tried { crossing, failed }))
    }

    fn trial(
        &self,
        place: &Place,
        way: &Crossing,
        corner: Corner,
        table: &Table,
        config: &Config,
    ) -> Result<Measures, (String, Option<Measures>)> {
        let [lo, hi] = place.run;
        let inset = 0.05 * (hi - lo);
        let setpoint = lo + inset + corner.place * (hi - lo - 2.0 * inset);
        let lost = || ("no rest state to begin from".to_string(), None);
        let begins = self.start(place, corner, setpoint).ok_or_else(lost)?;
        let trial = Trial {
            arm: self.arm,
            payload_kg: self.corners.payloads_kg[place.slice],
            swing: &self.swing,
            corner,
            begins: &begins,
            crossing: way,
        };
        trial
            .run(table, config)
            .map_err(|(why, measures)| (why, Some(measures)))
    }

    /// The rest state on the branch at `setpoint` of the arm in `corner`.
    fn start(&self, place: &Place, corner: Corner, setpoint: f64) -> Option<Vec<f64>> {
        let state = self.corners.nominal_state(place.from, setpoint)?;
        let mut arms = self.corners.arms.iter();
        let mut arm = arms.find(|arm| arm.slice == place.slice)?.clone();
        arm.corner.stiffness_percent = 100.0 * (corner.stiffness - 1.0);
        arm.corner.tilt_deg = corner.tilt_rad.to_degrees();
        arm.follow(&self.corners.nominal, &state)
    }

    /// The plan with what was measured. `longest_s` is cut to what it took, with half as much again.
    fn recorded(
        &self,
        way: &Crossing,
        measured: &[Measures],
        allowed: bool,
        trials: usize,
    ) -> Crossing {
        let most = |of: fn(&Measures) -> f64| measured.iter().map(of).fold(0.0, f64::max) as f32;
        let clearance = measured.iter().filter_map(|m| m.clearance_m);
        let passed_s = most(|m| m.passed_s);
        let successes = if allowed {
            measured.len()
        } else {
            measured.len().saturating_sub(1)
        };
        let tried = if allowed { trials } else { successes + 1 };
        Crossing {
            longest_s: if allowed {
                way.longest_s.min(1.5 * passed_s + self.unit_s() as f32)
            } else {
                way.longest_s
            },
            lowest_clearance_m: clearance.fold(f64::from(UNBOUNDED), f64::min) as f32,
            peak_couple_n_m: most(|m| m.peak_couple_n_m),
            peak_tip_speed_m_s: most(|m| m.peak_speed_m_s),
            takes_s: most(|m| m.takes_s),
            successes: successes as u16,
            trials: tried as u16,
            allowed,
            ..*way
        }
    }

    /// The corners of stiffness and tilt, each with its share of the rest; the outermost ones twice.
    fn trial_corners(&self) -> Vec<Corner> {
        let reach = self.stiffness_reach;
        let tilt = self.arm.base.tolerance_rad;
        let tilts: &[f64] = if tilt > 0.0 {
            &[-1.0, 1.0, 0.0]
        } else {
            &[0.0]
        };
        let mut corners: Vec<Corner> = Vec::new();
        for round in 0..2_usize {
            for (i, side) in [-1.0, 1.0, 0.0].into_iter().enumerate() {
                for (j, &lean) in tilts.iter().enumerate() {
                    if round == 1 && (side == 0.0 || (lean == 0.0 && tilts.len() > 1)) {
                        continue;
                    }
                    let k = corners.len();
                    corners.push(Corner {
                        stiffness: 1.0 + side * reach,
                        tilt_rad: lean * tilt,
                        damping: DAMPING[(i + 2 * j + 2 * round) % 3],
                        friction: FRICTION[(2 * i + j + 1 + round) % 3],
                        delay_ticks: 1 + (i + j + round) % 3,
                        bias_rad: BIAS_RAD[(i + j + 2 * round) % 3],
                        place: [0.0, 1.0][(i + j + round) % 2],
                        seed: SEED + k as u64,
                    });
                }
            }
        }
        corners
    }
}

/// A corner in words.
fn described(corner: &Corner) -> String {
    format!(
        "stiffness {:+.0} %, tilt {:+.1} deg, damping x{}, friction {:.0} %, bias {:+.1} deg, delay {} ticks",
        100.0 * (corner.stiffness - 1.0),
        corner.tilt_rad.to_degrees(),
        corner.damping,
        100.0 * corner.friction,
        corner.bias_rad.to_degrees(),
        corner.delay_ticks,
    )
}
