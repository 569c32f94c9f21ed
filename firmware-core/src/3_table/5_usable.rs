//! A stretch of usable setpoints with its reserves.

use crate::bytes::float;
use crate::format::{RESERVES, Reserves, Stretch};

/// A stretch of one slice, as stored.
#[derive(Clone, Copy, Debug)]
pub struct Usable<'a> {
    /// Its entry in the directory.
    pub entry: Stretch,
    reserves: &'a [u8],
}

impl<'a> Usable<'a> {
    pub(super) const fn new(entry: Stretch, reserves: &'a [u8]) -> Self {
        Self { entry, reserves }
    }

    /// Whether `setpoint` lies in the stretch; false for NaN.
    pub fn contains(&self, setpoint: f32) -> bool {
        self.entry.contains(setpoint)
    }

    /// All reserve values in the order of the format.
    pub fn reserve_values(&self) -> impl Iterator<Item = f32> + use<'a> {
        let values = self.reserves;
        (0..values.len() / 4).map_while(move |number| float(values, number))
    }

    /// The reserves stored at one of the stretch's points; `None` beyond the last.
    pub fn point(&self, point: u8) -> Option<Reserves> {
        let mut values = [0.0; RESERVES];
        let first = usize::from(point).checked_mul(RESERVES)?;
        for (place, value) in values.iter_mut().enumerate() {
            *value = float(self.reserves, first.checked_add(place)?)?;
        }
        Some(Reserves::from_values(values))
    }

    /// The reserves at `setpoint`; `None` when it is not in the stretch.
    pub fn reserves(&self, setpoint: f32) -> Option<Reserves> {
        if !self.contains(setpoint) {
            return None;
        }
        let Stretch {
            points, from, to, ..
        } = self.entry;
        let last = points.checked_sub(1)?;
        let place = (setpoint - from) / (to - from) * f32::from(last);
        // The conversion keeps within 0..=255 whatever the place, and the fraction is within 0..=1.
        let below = (place as u8).min(last.saturating_sub(1));
        let fraction = (place - f32::from(below)).clamp(0.0, 1.0);
        let (low, high) = (self.point(below)?, self.point(below.checked_add(1)?)?);
        Some(low.towards(&high, fraction))
    }
}
