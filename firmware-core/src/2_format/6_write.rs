//! The writer of tables: the other half of the format, next to its reader. Uses `core` only.

use core::fmt;

use serde::Serialize;

use super::{
    BranchEntry, CRC_LEN, Crossing, Header, MAGIC, PREFIX_LEN, SliceEntry, Stretch, SurveyBand,
    VERSION, at,
};
use crate::bytes::crc32;
use crate::words::Word::{N, T};
use crate::words::Words;

/// Everything a table holds.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Contents<'a> {
    /// The header.
    pub header: Header<'a>,
    /// The slices, payload increasing.
    pub slices: &'a [SliceContents<'a>],
}

/// One slice: the arm with one payload.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SliceContents<'a> {
    /// Payload at the tip (kg).
    pub payload_kg: f32,
    /// The branches, numbers increasing.
    pub branches: &'a [BranchContents<'a>],
    /// The stretches, at most 255, sorted by branch and setpoint.
    pub stretches: &'a [StretchContents<'a>],
    /// Stiffness for which the crossings were tried.
    pub survey: SurveyBand,
    /// The planned crossings, at most 255.
    pub crossings: &'a [Crossing],
}

/// One branch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct BranchContents<'a> {
    /// Its entry in the directory.
    pub entry: BranchEntry,
    /// Its knots, `entry.knots` times `entry.floats_per_knot()` values in the order of the format.
    pub knots: &'a [f32],
}

/// One stretch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct StretchContents<'a> {
    /// Its entry in the directory.
    pub entry: Stretch,
    /// Its reserves, [`Stretch::reserve_values`] values: at each point in the order of [`super::Reserves`],
    /// [`super::UNBOUNDED`] where there is no bound.
    pub reserves: &'a [f32],
}

/// The part of a table that a [`WriteError`] speaks of.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Part {
    /// Number of slices.
    Slices,
    /// Number of branches of one slice.
    Branches,
    /// Number of stretches of one slice.
    Stretches,
    /// Number of crossings of one slice.
    Crossings,
    /// Bytes of the header.
    Header,
    /// Bytes of the directory.
    Directory,
    /// Bytes of the whole table.
    Total,
}

/// Why a table could not be written.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum WriteError {
    /// The buffer is too small; [`buffer_len`] gives a sufficient length.
    BufferTooSmall {
        /// Bytes in the buffer.
        len: usize,
    },
    /// More of one part than the format can hold.
    TooMany {
        /// The part.
        part: Part,
        /// How many there are.
        found: usize,
        /// How many there may be.
        most: usize,
    },
    /// The number of knot values does not match the entry of the branch.
    KnotValues {
        /// Number of the slice.
        slice: usize,
        /// The branch, counted in the slice.
        branch: usize,
        /// Values that the entry asks for.
        expected: usize,
        /// Values that are there.
        found: usize,
    },
    /// The number of reserve values does not match the entry of the stretch.
    ReserveValues {
        /// Number of the slice.
        slice: usize,
        /// The stretch, counted in the slice.
        stretch: usize,
        /// Values that the entry asks for.
        expected: usize,
        /// Values that are there.
        found: usize,
    },
}

/// A sufficient buffer length for [`write()`], in bytes.
pub fn buffer_len(contents: &Contents<'_>) -> usize {
    // Upper bounds of postcard records: every varint at its longest, every other field at its fixed width.
    const HEADER: usize = 160;
    const SLICE: usize = 15;
    const BRANCH: usize = 28;
    const STRETCH: usize = 29;
    const CROSSING: usize = 70;
    let mut len = PREFIX_LEN + HEADER + contents.header.name.len() + CRC_LEN;
    for slice in contents.slices {
        len += SLICE + slice.branches.len() * BRANCH + slice.stretches.len() * STRETCH;
        len += slice.crossings.len() * CROSSING;
        for branch in slice.branches {
            len += branch.knots.len() * 4;
        }
        for stretch in slice.stretches {
            len += stretch.reserves.len() * 4;
        }
    }
    len
}

/// Writes a table to the front of `out` and returns its length in bytes. Only what the format cannot hold is an error
/// here; whether the contents make sense is for [`crate::Table::new`] to say.
///
/// # Errors
/// [`WriteError`] when the buffer is too small, a count exceeds its field, or knots and entries disagree.
pub fn write(contents: &Contents<'_>, out: &mut [u8]) -> Result<usize, WriteError> {
    let len = out.len();
    let slice_count = count(Part::Slices, contents.slices.len(), u16::MAX.into())? as u16;
    let mut sink = Sink {
        out,
        used: PREFIX_LEN,
    };
    sink.record(&contents.header)?;
    let header_end = sink.used;
    for slice in contents.slices {
        directory(&mut sink, slice)?;
    }
    let directory_end = sink.used;
    for (number, slice) in contents.slices.iter().enumerate() {
        values(&mut sink, number, slice)?;
    }
    let knots_end = sink.used;
    let total = count(Part::Total, knots_end + CRC_LEN, u32::MAX as usize)?;
    let header_len = count(Part::Header, header_end - PREFIX_LEN, u16::MAX.into())?;
    let directory_len = count(Part::Directory, directory_end - header_end, u16::MAX.into())?;

    sink.put(at::MAGIC, &MAGIC)?;
    sink.put(at::VERSION, &VERSION.to_le_bytes())?;
    sink.put(at::SLICE_COUNT, &slice_count.to_le_bytes())?;
    sink.put(at::TOTAL_LEN, &(total as u32).to_le_bytes())?;
    sink.put(at::HEADER_LEN, &(header_len as u16).to_le_bytes())?;
    sink.put(at::DIRECTORY_LEN, &(directory_len as u16).to_le_bytes())?;
    let knots_len = (knots_end - directory_end) as u32;
    sink.put(at::KNOTS_LEN, &knots_len.to_le_bytes())?;
    sink.put(at::RESERVED, &[0; 4])?;
    let written = sink.out.get(..knots_end);
    let crc = crc32(written.ok_or(WriteError::BufferTooSmall { len })?);
    sink.put(knots_end, &crc.to_le_bytes())?;
    Ok(total)
}

fn directory(sink: &mut Sink<'_>, slice: &SliceContents<'_>) -> Result<(), WriteError> {
    sink.record(&SliceEntry {
        payload_kg: slice.payload_kg,
        branches: count(Part::Branches, slice.branches.len(), u8::MAX.into())? as u8,
        stretches: count(Part::Stretches, slice.stretches.len(), u8::MAX.into())? as u8,
        crossings: count(Part::Crossings, slice.crossings.len(), u8::MAX.into())? as u8,
        survey: slice.survey,
    })?;
    for branch in slice.branches {
        sink.record(&branch.entry)?;
    }
    for stretch in slice.stretches {
        sink.record(&stretch.entry)?;
    }
    for crossing in slice.crossings {
        sink.record(crossing)?;
    }
    Ok(())
}

/// The knots of a slice, then its reserves.
fn values(sink: &mut Sink<'_>, number: usize, slice: &SliceContents<'_>) -> Result<(), WriteError> {
    for (branch, contents) in slice.branches.iter().enumerate() {
        let expected = usize::from(contents.entry.knots) * contents.entry.floats_per_knot();
        if contents.knots.len() != expected {
            return Err(WriteError::KnotValues {
                slice: number,
                branch,
                expected,
                found: contents.knots.len(),
            });
        }
        sink.floats(contents.knots)?;
    }
    for (stretch, contents) in slice.stretches.iter().enumerate() {
        let expected = contents.entry.reserve_values();
        if contents.reserves.len() != expected {
            return Err(WriteError::ReserveValues {
                slice: number,
                stretch,
                expected,
                found: contents.reserves.len(),
            });
        }
        sink.floats(contents.reserves)?;
    }
    Ok(())
}

fn count(part: Part, found: usize, most: usize) -> Result<usize, WriteError> {
    if found <= most {
        Ok(found)
    } else {
        Err(WriteError::TooMany { part, found, most })
    }
}

/// The output buffer and how much of it is used.
struct Sink<'a> {
    out: &'a mut [u8],
    used: usize,
}

impl Sink<'_> {
    fn record(&mut self, record: &impl Serialize) -> Result<(), WriteError> {
        let full = WriteError::BufferTooSmall {
            len: self.out.len(),
        };
        let free = self.out.get_mut(self.used..).ok_or(full)?;
        let written = postcard::to_slice(record, free).map_err(|_| full)?;
        self.used += written.len();
        Ok(())
    }

    fn floats(&mut self, values: &[f32]) -> Result<(), WriteError> {
        for value in values {
            self.put(self.used, &value.to_le_bytes())?;
            self.used += 4;
        }
        Ok(())
    }

    fn put(&mut self, at: usize, bytes: &[u8]) -> Result<(), WriteError> {
        let full = WriteError::BufferTooSmall {
            len: self.out.len(),
        };
        let place = self.out.get_mut(at..at + bytes.len()).ok_or(full)?;
        place.copy_from_slice(bytes);
        Ok(())
    }
}

impl fmt::Display for WriteError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::BufferTooSmall { len } => f.say(&[
                T("the table does not fit into a buffer of "),
                N(len as u32),
                T(" bytes; ask `buffer_len` for a sufficient length"),
            ]),
            Self::TooMany { part, found, most } => f.say(&[
                T("the table has "),
                N(found as u32),
                T(match part {
                    Part::Slices => " slices",
                    Part::Branches => " branches in a slice",
                    Part::Stretches => " stretches in a slice",
                    Part::Crossings => " crossings in a slice",
                    Part::Header => " bytes of header",
                    Part::Directory => " bytes of directory",
                    Part::Total => " bytes",
                }),
                T("; the format holds at most "),
                N(most as u32),
            ]),
            Self::KnotValues {
                slice,
                branch,
                expected,
                found,
            } => f.say(&[
                T("slice "),
                N(slice as u32),
                T(", branch "),
                N(branch as u32),
                T(": "),
                N(found as u32),
                T(" knot values where its entry asks for "),
                N(expected as u32),
            ]),
            Self::ReserveValues {
                slice,
                stretch,
                expected,
                found,
            } => f.say(&[
                T("slice "),
                N(slice as u32),
                T(", stretch "),
                N(stretch as u32),
                T(": "),
                N(found as u32),
                T(" reserve values where its entry asks for "),
                N(expected as u32),
            ]),
        }
    }
}

impl core::error::Error for WriteError {}
