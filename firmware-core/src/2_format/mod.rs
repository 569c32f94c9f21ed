//! What a table file holds. Little endian throughout:
//!
//! ```text
//! prefix, 24 bytes   magic "WTHY", version u16, slice count u16, total length u32, header length u16,
//!                    directory length u16, knots length u32, reserved u32 = 0
//! header             postcard, [`Header`]
//! directory          postcard, for each slice a [`SliceEntry`], its [`BranchEntry`]s, its [`Stretch`]es,
//!                    its [`Crossing`]s
//! knots              f32, for each slice its branches' knots, then its stretches' reserves, both in directory order.
//!                    A knot is t, then (value, d/dt) of each quantity:
//!                    stable branch    mean angle, conjugate, energy, tip x, tip y, restoring stiffness   13 f32
//!                    unstable branch  mean angle, conjugate, energy                                       7 f32
//!                    Reserves are 9 f32 at each point of a stretch, see [`Reserves`].
//! checksum           CRC-32 (ISO-HDLC) of everything before it
//! ```
//!
//! Between knots every quantity is a cubic Hermite polynomial in `t`; [`ParameterMap`] takes a setpoint to `t`.
//! Between the points of a stretch reserves are linear in the setpoint. They are worst cases over the tolerances, and
//! the generator has taken off what the straight lines could overstate.

#[path = "5_crossing.rs"]
mod crossing;
#[path = "2_directory.rs"]
mod directory;
#[path = "1_header.rs"]
mod header;
#[path = "3_parameter.rs"]
mod parameter;
#[path = "4_reserves.rs"]
mod reserves;
#[cfg(feature = "write")]
#[path = "6_write.rs"]
pub mod write;

pub use crossing::{Crossing, Method, SurveyBand};
pub use directory::{BranchEntry, Limit, MOST_BRANCHES, Requirement, SliceEntry, Stretch};
pub use header::{Deducted, Drive, Header, Units, WorstError};
pub use parameter::ParameterMap;
pub(crate) use reserves::smaller;
pub use reserves::{RESERVES, Reserves, UNBOUNDED};

use serde::Deserialize;

/// The first four bytes of every table.
pub const MAGIC: [u8; 4] = *b"WTHY";
/// The version of the format that this crate reads and writes. It rises with every change of meaning.
pub const VERSION: u16 = 3;
/// Length of the prefix in bytes.
pub const PREFIX_LEN: usize = 24;
/// Length of the checksum at the end in bytes.
pub const CRC_LEN: usize = 4;

/// Byte positions in the prefix.
pub(crate) mod at {
    pub(crate) const MAGIC: usize = 0;
    pub(crate) const VERSION: usize = 4;
    pub(crate) const SLICE_COUNT: usize = 6;
    pub(crate) const TOTAL_LEN: usize = 8;
    pub(crate) const HEADER_LEN: usize = 12;
    pub(crate) const DIRECTORY_LEN: usize = 14;
    pub(crate) const KNOTS_LEN: usize = 16;
    pub(crate) const RESERVED: usize = 20;
}

/// One postcard record from the front of `bytes`, and the bytes after it; `None` when it does not decode.
pub(crate) fn take<'a, T: Deserialize<'a>>(bytes: &'a [u8]) -> Option<(T, &'a [u8])> {
    postcard::take_from_bytes(bytes).ok()
}
