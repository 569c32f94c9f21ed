//! What the arm carries, and which slices of the table have to be respected because of it.
//!
//! A payload between two slices is bounded by both: a setpoint must be usable in both, and the reserves are the worse
//! ones. When the payload is unknown the same goes for all slices. Only what the tendons have to pull is interpolated
//! (or, with an unknown payload, taken from the slice with the nominal one): the arm follows the tip whether or not
//! the couple is exact, and its reserves are those of the worst case all the same.

use core::fmt;

use serde::Serialize;

use crate::format::{Reserves, smaller};
use crate::lookup::{LookupError, RestState, Well};
use crate::table::{Limits, Slice, Table};
use crate::words::Word::{F, T};
use crate::words::Words;

/// What the tip carries.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Payload {
    /// Anything in the range of the table.
    Unknown,
    /// So much (kg).
    Known(f32),
}

/// The slices that a payload brings into play.
#[derive(Clone, Copy, Debug)]
pub struct Load<'a> {
    payload: Payload,
    table: Table<'a>,
    /// The slice that the tensions are made from, or the lower one of two.
    lower: Slice<'a>,
    upper: Option<Slice<'a>>,
    /// How far the payload is from the lower to the upper one, within 0..=1.
    fraction: f32,
}

/// Why a table has nothing to say about a payload.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum LoadError {
    /// The payload is NaN or infinite.
    NotFinite,
    /// The payload is lighter or heavier than every slice.
    OutsideTable {
        /// The payload (kg).
        payload_kg: f32,
        /// Lightest payload of the table (kg).
        from_kg: f32,
        /// Heaviest payload of the table (kg).
        to_kg: f32,
    },
}

impl<'a> Table<'a> {
    /// The slices to be respected with `payload`: all of them when it is unknown, else the one with this payload or
    /// the two around it.
    ///
    /// # Errors
    /// [`LoadError`] when the payload is not finite or outside the range of the slices.
    pub fn load(&self, payload: Payload) -> Result<Load<'a>, LoadError> {
        let table = *self;
        let single = |lower| Load {
            payload,
            table,
            lower,
            upper: None,
            fraction: 0.0,
        };
        match payload {
            Payload::Unknown => {
                let nominal_kg = self.limits().nominal_payload_kg;
                let away = |slice: &Slice<'_>| (slice.payload_kg - nominal_kg).abs();
                let nearest = self.slices().reduce(|best, slice| {
                    if away(&slice) < away(&best) {
                        slice
                    } else {
                        best
                    }
                });
                nearest.map(single).ok_or(LoadError::OutsideTable {
                    payload_kg: nominal_kg,
                    from_kg: nominal_kg,
                    to_kg: nominal_kg,
                })
            }
            Payload::Known(payload_kg) if !payload_kg.is_finite() => Err(LoadError::NotFinite),
            Payload::Known(payload_kg) => {
                let mut lower: Option<Slice<'a>> = None;
                let (mut from_kg, mut to_kg) = (payload_kg, payload_kg);
                for (number, slice) in self.slices().enumerate() {
                    let here_kg = slice.payload_kg;
                    if here_kg == payload_kg {
                        return Ok(single(slice));
                    }
                    match lower {
                        Some(lower) if here_kg > payload_kg => {
                            let span_kg = here_kg - lower.payload_kg;
                            return Ok(Load {
                                upper: Some(slice),
                                fraction: (payload_kg - lower.payload_kg) / span_kg,
                                ..single(lower)
                            });
                        }
                        _ => {}
                    }
                    if here_kg < payload_kg {
                        lower = Some(slice);
                    }
                    if number == 0 {
                        from_kg = here_kg;
                    }
                    to_kg = here_kg;
                }
                Err(LoadError::OutsideTable {
                    payload_kg,
                    from_kg,
                    to_kg,
                })
            }
        }
    }
}

impl<'a> Load<'a> {
    /// The payload it stands for.
    pub const fn payload(&self) -> Payload {
        self.payload
    }

    /// The constants of the arm.
    pub const fn limits(&self) -> Limits {
        self.table.limits()
    }

    /// The slices to be respected, payload increasing.
    pub fn slices(&self) -> impl Iterator<Item = Slice<'a>> + use<'a> {
        let (pair, all) = match self.payload {
            Payload::Unknown => (None, Some(self.table.slices())),
            Payload::Known(_) => (Some((self.lower, self.upper)), None),
        };
        let known = pair
            .into_iter()
            .flat_map(|(lower, upper)| Some(lower).into_iter().chain(upper));
        known.chain(all.into_iter().flatten())
    }

    /// Numbers of the branches that [`Self::state`] knows, increasing.
    pub fn branches(&self) -> impl Iterator<Item = u8> + use<'a> {
        let upper = self.upper;
        self.lower
            .branches()
            .map(|branch| branch.number)
            .filter(move |number| upper.is_none_or(|slice| slice.branch(*number).is_some()))
    }

    /// Whether `setpoint` lies in a stretch of `branch` in every slice; false for NaN.
    pub fn safe_at(&self, branch: u8, setpoint: f32) -> bool {
        let mut slices = self.slices().peekable();
        slices.peek().is_some() && slices.all(|slice| slice.stretch_at(branch, setpoint).is_some())
    }

    /// Reserves of `branch` at `setpoint`, each the worst of all slices; `None` where the setpoint is not safe.
    pub fn reserves(&self, branch: u8, setpoint: f32) -> Option<Reserves> {
        let mut worst: Option<Reserves> = None;
        for slice in self.slices() {
            let here = slice.reserves(branch, setpoint)?;
            worst = Some(worst.map_or(here, |worst| worst.worse(&here)));
        }
        worst
    }

    /// The rest state to expect on `branch` at `setpoint` (rad or N m, after the drive): between two slices on the
    /// straight line over the payload, the barrier apart, which is the lower one.
    ///
    /// # Errors
    /// [`LookupError`] when the setpoint is not finite, or the branch does not exist or does not reach it in a slice
    /// that is needed.
    pub fn state(&self, branch: u8, setpoint: f32) -> Result<RestState, LookupError> {
        let lower = self.lower.at(branch, setpoint)?;
        match self.upper {
            None => Ok(lower),
            Some(upper) => {
                let upper = upper.at(branch, setpoint)?;
                Ok(between(&lower, &upper, self.fraction))
            }
        }
    }
}

/// The rest state at the fraction `x` of the way from one payload to the other.
fn between(lower: &RestState, upper: &RestState, x: f32) -> RestState {
    let line = |a: f32, b: f32| {
        let value = a * (1.0 - x) + b * x;
        // Rounding must not carry it beyond the two.
        let (least, most) = if a <= b { (a, b) } else { (b, a) };
        if value < least {
            least
        } else if value > most {
            most
        } else {
            value
        }
    };
    let well = |a: Well, b: Well| Well {
        tip_x_m: line(a.tip_x_m, b.tip_x_m),
        tip_y_m: line(a.tip_y_m, b.tip_y_m),
        restoring_n_m_per_rad: line(a.restoring_n_m_per_rad, b.restoring_n_m_per_rad),
        barrier_j: smaller(a.barrier_j, b.barrier_j),
    };
    RestState {
        branch: lower.branch,
        index: lower.index,
        mean_angle_rad: line(lower.mean_angle_rad, upper.mean_angle_rad),
        tip_angle_rad: line(lower.tip_angle_rad, upper.tip_angle_rad),
        couple_n_m: line(lower.couple_n_m, upper.couple_n_m),
        energy_j: line(lower.energy_j, upper.energy_j),
        well: lower.well.zip(upper.well).map(|(a, b)| well(a, b)),
    }
}

impl fmt::Display for LoadError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::NotFinite => f.say(&[T(
                "the payload is not a finite number; check where it comes from",
            )]),
            Self::OutsideTable {
                payload_kg,
                from_kg,
                to_kg,
            } => f.say(&[
                T("the table is not made for a payload of "),
                F(payload_kg),
                T(" kg; "),
                F(from_kg),
                T(" to "),
                F(to_kg),
                T(" kg is allowed"),
            ]),
        }
    }
}

impl core::error::Error for LoadError {}
