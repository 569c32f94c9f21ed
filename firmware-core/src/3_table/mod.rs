//! The checked view of a table's bytes. Nothing is copied, and any alignment will do.

#[path = "2_check/mod.rs"]
mod check;
#[path = "1_error.rs"]
mod error;
#[path = "4_message.rs"]
mod message;
#[path = "3_slice.rs"]
mod slice;
#[path = "5_usable.rs"]
mod usable;

pub use error::{BranchFault, CrossingFault, Fault, Section, StretchFault, TableError};
pub use slice::{Branch, Branches, Crossings, Slice, Slices, Stretches};
pub use usable::Usable;

use serde::Serialize;

use crate::bytes::section;
use crate::format::{CRC_LEN, Drive, Header, PREFIX_LEN, take};

/// The constants of the arm that every decision needs.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct Limits {
    /// What the setpoint is.
    pub drive: Drive,
    /// Distance of either tendon from the centre line (m).
    pub offset_m: f32,
    /// Tension of the tendon that does not pull (N).
    pub pretension_n: f32,
    /// Largest allowed tension (N).
    pub max_tension_n: f32,
    /// Part of the tension kept back for the interpolation error of the couple (N).
    pub deducted_tension_n: f32,
    /// Worst interpolation error of the mean angle (rad).
    pub mean_angle_error_rad: f32,
    /// Payload that the tensions are made for when the payload is unknown (kg).
    pub nominal_payload_kg: f32,
    /// Lowest tabulated setpoint (rad or N m).
    pub setpoint_lo: f32,
    /// Highest tabulated setpoint.
    pub setpoint_hi: f32,
}

/// A table whose bytes have been checked: a few words that point into them.
#[derive(Clone, Copy, Debug)]
pub struct Table<'a> {
    bytes: &'a [u8],
    header_len: u16,
    directory_len: u16,
    limits: Limits,
}

impl<'a> Table<'a> {
    /// Checks `bytes` and takes them for a table. Call it once at start; it reads every byte.
    ///
    /// # Errors
    /// The first of the following that does not hold, as a [`TableError`]: length, magic, version, sizes, CRC-32,
    /// then meaning.
    pub fn new(bytes: &'a [u8]) -> Result<Self, TableError> {
        check::table(bytes)
    }

    /// The constants that every decision needs.
    pub const fn limits(&self) -> Limits {
        self.limits
    }

    /// The header.
    ///
    /// # Errors
    /// [`Fault::HeaderBroken`] when the bytes no longer decode: the memory under the table has changed since
    /// [`Table::new`].
    pub fn header(&self) -> Result<Header<'a>, TableError> {
        let bytes = section(self.bytes, PREFIX_LEN, self.header_len.into());
        match take(bytes) {
            Some((header, _)) => Ok(header),
            None => Err(TableError::Meaning(Fault::HeaderBroken)),
        }
    }

    /// The slices, payload increasing.
    pub fn slices(&self) -> Slices<'a> {
        let directory_len = usize::from(self.directory_len);
        let directory_at = PREFIX_LEN.saturating_add(self.header_len.into());
        let knots_at = directory_at.saturating_add(directory_len);
        let knots_end = self.bytes.len().saturating_sub(CRC_LEN);
        let directory = section(self.bytes, directory_at, directory_len);
        let knots = self.bytes.get(knots_at..knots_end);
        Slices::new(self.limits, directory, knots.unwrap_or(&[]))
    }

    /// Length of the table in bytes.
    pub const fn byte_len(&self) -> usize {
        self.bytes.len()
    }
}
