//! Every rest state of an arm over its setpoint range, followed in curvature modes and certified by shooting.
//!
//! Read in this order: [`modes`] the discretised rod, [`two_coordinate`] the roots it starts from, [`curve`] continuation
//! through folds, [`shooting`] the independent audit, [`wells`] barriers, [`confirm`] what of the two-coordinate model is true,
//! [`profile`] the energy as a picture, [`listing`] one setpoint in SI.

#[path = "6_confirm.rs"]
pub mod confirm;
#[path = "3_curve.rs"]
pub mod curve;
#[path = "8_listing.rs"]
pub mod listing;
#[path = "1_modes.rs"]
pub mod modes;
#[path = "7_profile.rs"]
pub mod profile;
#[path = "4_shooting.rs"]
pub mod shooting;
#[path = "2_two_coordinate.rs"]
pub mod two_coordinate;
#[path = "5_wells.rs"]
pub mod wells;

use crate::arm_file::Accuracy;
use crate::rod::{Held, Rod};
use curve::{Branch, Fold, RestPoint, Solver};
use modes::ModalRod;
use shooting::{Shooting, Shot};
use std::fmt;

/// Most curvature modes a table is made from.
pub const MOST_MODES: usize = 24;
/// Fewest modes tried.
const FEWEST_MODES: usize = 6;
/// Setpoints spread over the range at which the list of rest states is audited.
const AUDIT_SETPOINTS: usize = 17;
/// How far beside a fold it is audited, as a fraction of the setpoint range.
const BESIDE_FOLD: f64 = 1e-3;
/// Closer to a fold than this, as a fraction of the setpoint range, rest states go like the root of the distance from it.
const NEAR_FOLD: f64 = 0.02;
/// How far beyond the setpoint range curves are followed, as a fraction of it: a fold just outside shapes the branch inside.
const BEYOND_RANGE: f64 = 0.25;

/// All rest states of a rod over its setpoint range.
#[derive(Clone, Debug)]
pub struct RestStates {
    /// The rod.
    pub rod: Rod,
    /// The rod in the number of modes found sufficient.
    pub modal: ModalRod,
    /// Branches that reach into the setpoint range, by base curvature.
    pub branches: Vec<Branch>,
    /// Folds within the setpoint range, by setpoint.
    pub folds: Vec<Fold>,
    /// Largest distance of a rest state from its exact counterpart at the audit setpoints.
    pub distance: Distance,
    /// Setpoints at which the list was compared with the shooting's.
    pub audited: usize,
    /// Rest states solved and classified on the way, for the benchmark.
    pub solved: usize,
    /// The exact rest curve it was audited against.
    pub shooting: Shooting,
}

/// How far rest states are from their exact counterparts.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Distance {
    /// Largest difference of mean or tip angles (rad), of tip positions (L), and of fold setpoints that are angles (rad).
    pub angle_rad: f64,
    /// Largest difference of couples, of energies, and of fold setpoints that are couples (m g L).
    pub couple: f64,
}

impl Distance {
    fn is_within(&self, allowed: &Self) -> bool {
        self.angle_rad <= allowed.angle_rad && self.couple <= allowed.couple
    }

    fn widen(&mut self, angle_rad: f64, couple: f64) {
        self.angle_rad = self.angle_rad.max(angle_rad.abs());
        self.couple = self.couple.max(couple.abs());
    }
}

/// Why no certified list of rest states came about.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum RestStatesError {
    /// More than [`MOST_MODES`] curvature modes would be needed.
    TooSoft {
        /// Dimensionless bending stiffness.
        gamma: f64,
    },
    /// The list differs from what shooting from the base finds.
    AuditFailed {
        /// Where (rad or N m).
        setpoint: f64,
        /// Rest states in the list.
        listed: usize,
        /// Rest states by shooting.
        shot: usize,
    },
    /// The folds differ from those that shooting from the base finds.
    FoldsDiffer {
        /// A fold that only one of the two has (rad or N m).
        setpoint: f64,
        /// Folds in the list.
        listed: usize,
        /// Folds by shooting.
        shot: usize,
    },
    /// The indices do not sum to one.
    DegreeSum {
        /// Where (rad or N m).
        setpoint: f64,
        /// The sum of (-1)^index found.
        sum: i32,
    },
    /// A curve could not be followed.
    CurveLost {
        /// Where (rad or N m).
        setpoint: f64,
    },
    /// No way down from a pass was found.
    PassWithoutWells {
        /// Where (rad or N m).
        setpoint: f64,
    },
}

impl fmt::Display for RestStatesError {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        match self {
            Self::TooSoft { gamma } => write!(
                f,
                "too soft to tabulate: gamma = B/(m g L^2) = {gamma:.5}; {MOST_MODES} curvature modes do not reach the accuracy \
                 asked. Stiffen the spine, lighten the arm, narrow the setpoint range or ask for less accuracy"
            ),
            Self::AuditFailed {
                setpoint,
                listed,
                shot,
            } => write!(
                f,
                "audit failed at setpoint {setpoint:.6} (rad or N m): {listed} rest states listed, shooting from the base finds \
                 {shot}"
            ),
            Self::FoldsDiffer {
                setpoint,
                listed,
                shot,
            } => write!(
                f,
                "audit failed at the fold at setpoint {setpoint:.6} (rad or N m): {listed} folds listed, shooting from the base \
                 finds {shot}"
            ),
            Self::DegreeSum { setpoint, sum } => write!(
                f,
                "rest states incomplete at setpoint {setpoint:.6} (rad or N m): the sum of (-1)^index is {sum}, must be 1"
            ),
            Self::CurveLost { setpoint } => {
                write!(
                    f,
                    "a curve of rest states could not be followed past setpoint {setpoint:.6} (rad or N m)"
                )
            }
            Self::PassWithoutWells { setpoint } => write!(
                f,
                "at setpoint {setpoint:.6} (rad or N m) no way down from a pass to the wells it joins was found"
            ),
        }
    }
}

impl std::error::Error for RestStatesError {}

impl RestStates {
    /// Finds all rest states of `rod` over its setpoint range. The number of modes rises until none is further than a quarter
    /// of `accuracy` from its exact counterpart.
    ///
    /// # Errors
    /// See [`RestStatesError`]: nothing is returned that was not certified.
    pub fn find(rod: &Rod, accuracy: &Accuracy, gamma: f64) -> Result<Self, RestStatesError> {
        let [lo, hi] = rod.setpoints;
        let beyond = BEYOND_RANGE * (hi - lo);
        let outer = [lo - beyond, hi + beyond];
        let allowed = Distance {
            angle_rad: 0.25 * accuracy.angle_rad,
            couple: 0.25 * accuracy.couple_fraction,
        };
        let shooting = Shooting::scan(
            rod,
            outer,
            0.05 * allowed.angle_rad.min(allowed.couple).min(1e-5),
        );
        let starts = two_coordinate_starts(rod);
        let exact: Vec<(f64, Vec<Shot>)> = spread(rod.setpoints, AUDIT_SETPOINTS)
            .map(|x| beside_folds(x, &shooting, rod, &allowed))
            .map(|x| (x, shooting.rest_states(x)))
            .collect();
        let mut solved = 0;
        let mut last = RestStatesError::TooSoft { gamma };
        for n in FEWEST_MODES..=MOST_MODES {
            let modal = ModalRod::new(rod, n);
            // Once more in finer steps where a list is not the exact one: two folds may have hidden in one step.
            for fineness in [1.0, 0.2] {
                let mut search = Search {
                    rod,
                    shooting: &shooting,
                    solver: Solver::finer(&modal, fineness),
                    outer,
                    allowed,
                    branches: vec![],
                    folds: vec![],
                };
                let distance = search.list_and_compare(&starts, &exact);
                solved += std::mem::take(&mut search.solver.solved);
                match distance {
                    Err(error) => {
                        last = error.unwrap_or(RestStatesError::TooSoft { gamma });
                        continue;
                    }
                    Ok(distance) if !distance.is_within(&allowed) => {
                        last = RestStatesError::TooSoft { gamma };
                        break;
                    }
                    Ok(distance) => {
                        let audited = search.certify()?;
                        solved += search.solver.solved;
                        let (branches, folds) = search.within_range();
                        return Ok(Self {
                            rod: rod.clone(),
                            modal,
                            branches,
                            folds,
                            distance,
                            audited,
                            solved,
                            shooting,
                        });
                    }
                }
            }
        }
        Err(last)
    }

    /// How far a stored fold may be from the exact one (rad or N m): what the number of modes leaves, and rounding to f32.
    pub fn fold_uncertainty_si(&self) -> f64 {
        let largest = self
            .rod
            .setpoints
            .iter()
            .map(|s| self.rod.setpoint_si(*s).abs())
            .fold(0.0, f64::max);
        let modes = match self.rod.held {
            Held::TipAngle => self.distance.angle_rad,
            Held::TipCouple => self.distance.couple * self.rod.energy_scale_j,
        };
        modes + 2.0 * largest * f64::from(f32::EPSILON)
    }

    /// Every rest state at `setpoint` (dimensionless, within the range), by base curvature, with its branch number.
    ///
    /// # Errors
    /// [`RestStatesError::DegreeSum`] when their indices do not sum to one.
    pub fn at(
        &self,
        solver: &mut Solver,
        setpoint: f64,
    ) -> Result<Vec<(usize, RestPoint)>, RestStatesError> {
        states_at(&self.rod, &self.branches, solver, setpoint)
    }
}

/// Rest states of `branches` at `setpoint` with their branch numbers, by base curvature; the degree sum is checked.
fn states_at(
    rod: &Rod,
    branches: &[Branch],
    solver: &mut Solver,
    setpoint: f64,
) -> Result<Vec<(usize, RestPoint)>, RestStatesError> {
    let lost = || RestStatesError::CurveLost {
        setpoint: rod.setpoint_si(setpoint),
    };
    let mut states = Vec::new();
    for (number, branch) in branches.iter().enumerate() {
        if branch.covers(setpoint) {
            states.push((number, branch.state_at(solver, setpoint).ok_or_else(lost)?));
        }
    }
    states.sort_by(|a, b| a.1.base_curvature().total_cmp(&b.1.base_curvature()));
    let sum = degree_sum(states.iter().map(|s| s.1.index));
    if sum == 1 {
        Ok(states)
    } else {
        Err(RestStatesError::DegreeSum {
            setpoint: rod.setpoint_si(setpoint),
            sum,
        })
    }
}

/// `sum (-1)^index`, which is 1 over all rest states of one setpoint (Poincare-Hopf; the energy grows at infinity).
pub fn degree_sum(indices: impl Iterator<Item = usize>) -> i32 {
    indices
        .map(|index| if index % 2 == 0 { 1 } else { -1 })
        .sum()
}

/// Rest states of the two-coordinate arm at the range's ends and between: where curves are first looked for.
fn two_coordinate_starts(rod: &Rod) -> Vec<(f64, [f64; 2])> {
    let modal = ModalRod::new(rod, 2);
    spread(rod.setpoints, 9)
        .flat_map(|setpoint| {
            two_coordinate::rest_states(&modal, setpoint)
                .into_iter()
                .map(move |root| (setpoint, root.c))
        })
        .collect()
}

/// An audit setpoint, moved off a fold that it is closer to than folds have to agree: how many rest states there are that close
/// to it says nothing.
fn beside_folds(setpoint: f64, shooting: &Shooting, rod: &Rod, allowed: &Distance) -> f64 {
    let agree = match rod.held {
        Held::TipAngle => allowed.angle_rad,
        Held::TipCouple => allowed.couple,
    };
    let [lo, hi] = rod.setpoints;
    let near = |fold: &&Shot| (fold.setpoint - setpoint).abs() < 2.0 * agree;
    match shooting.folds().iter().find(near) {
        None => setpoint,
        Some(fold) if fold.setpoint + 4.0 * agree <= hi => fold.setpoint + 4.0 * agree,
        Some(fold) => (fold.setpoint - 4.0 * agree).max(lo),
    }
}

/// `count` setpoints spread evenly over `range`, ends included.
fn spread(range: [f64; 2], count: usize) -> impl Iterator<Item = f64> {
    (0..count).map(move |k| {
        let x = k as f64 / (count - 1) as f64;
        range[0] * (1.0 - x) + range[1] * x
    })
}

/// The search with one number of modes.
struct Search<'a> {
    rod: &'a Rod,
    shooting: &'a Shooting,
    solver: Solver<'a>,
    outer: [f64; 2],
    allowed: Distance,
    branches: Vec<Branch>,
    folds: Vec<Fold>,
}

impl Search<'_> {
    /// Lists the branches from the two-coordinate starts, adds those that only shooting shows, and measures the distance of
    /// all from the exact rest states.
    ///
    /// # Errors
    /// Why the list is not the exact one; nothing when these modes do not have all the exact rest states.
    fn list_and_compare(
        &mut self,
        starts: &[(f64, [f64; 2])],
        exact: &[(f64, Vec<Shot>)],
    ) -> Result<Distance, Option<RestStatesError>> {
        for &(setpoint, c) in starts {
            let mut guess = c.to_vec();
            guess.resize(self.solver.modes(), 0.0);
            if let Some(point) = self.solver.at_setpoint(&guess, setpoint) {
                self.add_curve(&point)?;
            }
        }
        let mut distance = Distance::default();
        for (setpoint, shots) in exact {
            let mut resolved = true;
            if self.listed_at(*setpoint) != shots.len() {
                for shot in shots {
                    let guess = project(
                        &self.shooting.curvatures(shot.base_curvature),
                        self.solver.modes(),
                    );
                    let point = self.solver.at_setpoint(&guess, *setpoint);
                    match point.filter(|point| point.index == shot.index) {
                        Some(point) => self.add_curve(&point)?,
                        None => resolved = false,
                    }
                }
            }
            let states = match self.compare(*setpoint, shots) {
                Ok(states) => states,
                Err(error) => return Err(Some(error).filter(|_| resolved)),
            };
            for (state, shot) in states.iter().zip(shots) {
                self.widen(&mut distance, state, shot);
            }
        }
        for (fold, exact) in self.matched_folds()? {
            let setpoint_off = fold.setpoint - exact.setpoint;
            let angle = fold.mean_angle() - exact.mean_angle;
            match self.rod.held {
                Held::TipAngle => distance.widen(
                    angle.abs().max(setpoint_off.abs()),
                    fold.couple - exact.couple,
                ),
                Held::TipCouple => distance.widen(angle, setpoint_off),
            }
        }
        Ok(distance)
    }

    /// Widens `distance` by that of a state from its exact counterpart. Close to a fold, where the state goes like the root of
    /// the distance from it, what counts is how far the setpoint would have to move to make up for the difference.
    fn widen(&self, distance: &mut Distance, state: &RestPoint, shot: &Shot) {
        let (x, y) = self.solver.modal().tip(&state.c);
        let tip = (x - shot.tip[0]).hypot(y - shot.tip[1]);
        let mean_angle = (state.mean_angle() - shot.mean_angle).abs();
        let mut angle = mean_angle
            .max((state.tip_angle() - shot.tip_angle).abs())
            .max(tip);
        let mut couple = (state.couple - shot.couple)
            .abs()
            .max((state.energy - shot.energy).abs());
        let [lo, hi] = self.rod.setpoints;
        let near = |fold: &Shot| (fold.setpoint - shot.setpoint).abs() < NEAR_FOLD * (hi - lo);
        if self.shooting.folds().iter().any(near) {
            let along = curve::mean_angle_rate(state).abs();
            let setpoint_off =
                mean_angle * state.setpoint_rate.abs() / along.max(f64::MIN_POSITIVE);
            let allowed = match self.rod.held {
                Held::TipAngle => self.allowed.angle_rad,
                Held::TipCouple => self.allowed.couple,
            };
            // As a share of what is allowed for the setpoint.
            let share = setpoint_off / allowed;
            angle = angle.min(share * self.allowed.angle_rad);
            couple = couple.min(share * self.allowed.couple);
        }
        distance.widen(angle, couple);
    }

    /// Branches and folds that reach into the setpoint range, sorted.
    fn within_range(mut self) -> (Vec<Branch>, Vec<Fold>) {
        let [lo, hi] = self.rod.setpoints;
        self.branches.retain(|b| b.to() > lo && b.from() < hi);
        self.folds.retain(|f| (lo..=hi).contains(&f.point.setpoint));
        self.branches.sort_by(|a, b| {
            a.middle_base_curvature()
                .total_cmp(&b.middle_base_curvature())
        });
        self.folds
            .sort_by(|a, b| a.point.setpoint.total_cmp(&b.point.setpoint));
        (self.branches, self.folds)
    }

    /// Audits the finished list at setpoints not used to make it, and on both sides of every fold.
    ///
    /// Returns the number of audited setpoints.
    fn certify(&mut self) -> Result<usize, RestStatesError> {
        let [lo, hi] = self.rod.setpoints;
        let between = 0.5 * (hi - lo) / (AUDIT_SETPOINTS - 1) as f64;
        let mut setpoints: Vec<f64> =
            spread([lo + between, hi - between], AUDIT_SETPOINTS - 1).collect();
        let beside = BESIDE_FOLD * (hi - lo);
        for fold in &self.folds {
            setpoints.extend([fold.point.setpoint - beside, fold.point.setpoint + beside]);
        }
        setpoints.retain(|s| (lo..=hi).contains(s));
        for &setpoint in &setpoints {
            self.compare(setpoint, &self.shooting.rest_states(setpoint))?;
        }
        Ok(AUDIT_SETPOINTS + setpoints.len())
    }

    /// The listed rest states at `setpoint`, when number and indices agree with the shooting's.
    fn compare(
        &mut self,
        setpoint: f64,
        shots: &[Shot],
    ) -> Result<Vec<RestPoint>, RestStatesError> {
        let states: Vec<RestPoint> =
            states_at(self.rod, &self.branches, &mut self.solver, setpoint)?
                .into_iter()
                .map(|s| s.1)
                .collect();
        let agree = states.len() == shots.len()
            && states.iter().zip(shots).all(|(a, b)| a.index == b.index);
        if agree {
            Ok(states)
        } else {
            Err(RestStatesError::AuditFailed {
                setpoint: self.rod.setpoint_si(setpoint),
                listed: states.len(),
                shot: shots.len(),
            })
        }
    }

    fn listed_at(&self, setpoint: f64) -> usize {
        self.branches.iter().filter(|b| b.covers(setpoint)).count()
    }

    /// Follows the curve through `point` unless it is already listed.
    fn add_curve(&mut self, point: &RestPoint) -> Result<(), RestStatesError> {
        for branch in self
            .branches
            .iter()
            .filter(|b| b.index == point.index && b.covers(point.setpoint))
        {
            if let Some(known) = branch.state_at(&mut self.solver, point.setpoint) {
                let apart = known
                    .c
                    .iter()
                    .zip(&point.c)
                    .map(|(a, b)| (a - b).abs())
                    .fold(0.0, f64::max);
                if apart < 1e-6 {
                    return Ok(());
                }
            }
        }
        let (branches, folds) = self.solver.follow(point, self.outer).map_err(|setpoint| {
            RestStatesError::CurveLost {
                setpoint: self.rod.setpoint_si(setpoint),
            }
        })?;
        self.branches.extend(branches);
        self.folds.extend(folds);
        Ok(())
    }

    /// Folds within the setpoint range beside their exact counterparts.
    fn matched_folds(&self) -> Result<Vec<(RestPoint, Shot)>, RestStatesError> {
        let [lo, hi] = self.rod.setpoints;
        let mut listed: Vec<&Fold> = self
            .folds
            .iter()
            .filter(|f| (lo..=hi).contains(&f.point.setpoint))
            .collect();
        listed.sort_by(|a, b| {
            a.point
                .base_curvature()
                .total_cmp(&b.point.base_curvature())
        });
        let exact: Vec<&Shot> = self
            .shooting
            .folds()
            .iter()
            .filter(|f| (lo..=hi).contains(&f.setpoint))
            .collect();
        if listed.len() != exact.len() {
            let near = |a: f64, b: f64| (a - b).abs() < BESIDE_FOLD * (hi - lo);
            let only_exact = exact
                .iter()
                .map(|e| e.setpoint)
                .find(|&e| listed.iter().all(|l| !near(l.point.setpoint, e)));
            let only_listed = listed
                .iter()
                .map(|l| l.point.setpoint)
                .find(|&l| exact.iter().all(|e| !near(e.setpoint, l)));
            let setpoint = only_exact
                .or(only_listed)
                .or(exact.first().map(|e| e.setpoint))
                .unwrap_or(lo);
            return Err(RestStatesError::FoldsDiffer {
                setpoint: self.rod.setpoint_si(setpoint),
                listed: listed.len(),
                shot: exact.len(),
            });
        }
        Ok(listed
            .iter()
            .zip(exact)
            .map(|(fold, shot)| (fold.point.clone(), *shot))
            .collect())
    }
}

/// Legendre coefficients of a curvature given at arc lengths (trapezoids: it only has to start Newton).
fn project(curvatures: &[(f64, f64)], n: usize) -> Vec<f64> {
    let mut c = vec![0.0; n];
    for pair in curvatures.windows(2) {
        let width = pair[1].0 - pair[0].0;
        for (s, curvature) in pair {
            for (i, p) in modes::legendre(n, 2.0 * s - 1.0).iter().take(n).enumerate() {
                c[i] += 0.5 * width * curvature * p * (2 * i + 1) as f64;
            }
        }
    }
    c
}
