//! How far a safe interval reaches once the tensions are taken into account.

use super::interval::Interval;
use super::{Present, TensionPair};
use crate::format::{Limit, Requirement, Reserves};
use crate::load::Load;

/// Halvings when the tensions end an interval earlier than the table says: 24 exhaust the digits of an f32.
const HALVINGS: u32 = 24;

/// What holds the arm at a safe setpoint.
#[derive(Clone, Copy)]
pub(super) struct Hold {
    pub(super) tensions: TensionPair,
    pub(super) reserves: Reserves,
    /// Couple that the tendons can make over the couple needed, in the worst slice.
    factor: f32,
}

impl Hold {
    /// `None` when `setpoint` is not in a stretch of every slice, or the tension it takes in one of them is not
    /// allowed.
    pub(super) fn at(load: &Load<'_>, branch: u8, setpoint: f32) -> Option<Self> {
        let limits = load.limits();
        let reserves = load.reserves(branch, setpoint)?;
        let mut factor = f32::INFINITY;
        for slice in load.slices() {
            let state = slice.branch(branch)?.state(limits, setpoint)?;
            let here = TensionPair::factor(state.couple_n_m, &limits);
            if !TensionPair::for_couple(state.couple_n_m, &limits).allowed(&limits) {
                return None;
            }
            if here < factor {
                factor = here;
            }
        }
        let state = load.state(branch, setpoint).ok()?;
        let tensions = TensionPair::for_couple(state.couple_n_m, &limits);
        tensions.allowed(&limits).then_some(Self {
            tensions,
            reserves,
            factor,
        })
    }
}

/// The nearest safe setpoint to a request.
#[derive(Clone, Copy)]
pub(super) struct Reach {
    pub(super) setpoint: f32,
    pub(super) hold: Hold,
    pub(super) why: Limit,
}

impl Reach {
    /// The nearest safe setpoint to `request` in `home`. `None` when the tensions allow nothing there.
    pub(super) fn towards(
        load: &Load<'_>,
        home: Interval,
        present: Present,
        request: f32,
    ) -> Option<Self> {
        let branch = present.branch;
        let target = home.nearest(request);
        if let Some(hold) = Hold::at(load, branch, target) {
            return Some(Self {
                setpoint: target,
                hold,
                why: home.limit_towards(request),
            });
        }
        // The table ends its stretches before the tension does, so that this is the last line of defence. Whatever
        // the tensions do in between, what is kept has been evaluated.
        let middle = home.from + 0.5 * (home.to - home.from);
        let starts = [home.nearest(present.setpoint), middle, home.from, home.to];
        let start = starts
            .into_iter()
            .find_map(|at| Some((at, Hold::at(load, branch, at)?)));
        let (mut setpoint, mut hold) = start?;
        let mut refused = target;
        for _ in 0..HALVINGS {
            let half = setpoint + 0.5 * (refused - setpoint);
            if !home.contains(half) {
                break;
            }
            match Hold::at(load, branch, half) {
                Some(held) => (setpoint, hold) = (half, held),
                None => refused = half,
            }
        }
        Some(Self {
            setpoint,
            hold,
            why: Limit {
                requirement: Requirement::TensionFactor,
                value: hold.factor,
                limit: 1.0,
            },
        })
    }
}
