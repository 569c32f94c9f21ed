//! The checks of [`super::Table::new`], in their order.

#[path = "2_branch.rs"]
mod branch;
#[path = "4_crossing.rs"]
mod crossing;
#[path = "1_header.rs"]
mod header;
#[path = "3_stretch.rs"]
mod stretch;

use serde::Deserialize;

use super::error::{Fault, Section, TableError};
use super::{Limits, Table};
use crate::bytes::{array_at, crc32, section, u16_at, u32_at};
use crate::format::{
    BranchEntry, CRC_LEN, Crossing, MAGIC, PREFIX_LEN, SliceEntry, Stretch, VERSION, at, take,
};
use branch::Numbers;

/// No number in a table is larger: products of two of them stay far from the largest f32, so that no lookup can
/// overflow.
const LARGEST: f32 = 1e9;
/// How far the nominal payload may be from that of its slice, relative to it: some f32 roundings.
const NOMINAL_SLACK: f32 = 1e-6;

pub(super) fn table(bytes: &[u8]) -> Result<Table<'_>, TableError> {
    let (header_len, directory_len, knots_len) = frame(bytes)?;
    let header_bytes = section(bytes, PREFIX_LEN, header_len.into());
    let directory_at = PREFIX_LEN.saturating_add(header_len.into());
    let directory = section(bytes, directory_at, directory_len.into());
    let knots_at = directory_at.saturating_add(directory_len.into());
    let knots = section(bytes, knots_at, knots_len as usize);
    let limits = header::check(header_bytes)?;
    let slice_count = u16_at(bytes, at::SLICE_COUNT).unwrap_or(0);
    slices(slice_count, &limits, directory, knots)?;
    Ok(Table {
        bytes,
        header_len,
        directory_len,
        limits,
    })
}

/// Length, magic, version, sizes, checksum; the lengths of header, directory and knots.
fn frame(bytes: &[u8]) -> Result<(u16, u16, u32), TableError> {
    let len = bytes.len();
    let short = TableError::TooShort {
        least: (PREFIX_LEN + CRC_LEN) as u32,
        found: len as u32,
    };
    if len < PREFIX_LEN + CRC_LEN {
        return Err(short);
    }
    let magic = array_at(bytes, at::MAGIC).ok_or(short)?;
    if magic != MAGIC {
        return Err(TableError::Magic { found: magic });
    }
    let version = u16_at(bytes, at::VERSION).ok_or(short)?;
    if version != VERSION {
        return Err(TableError::Version {
            expected: VERSION,
            found: version,
        });
    }
    let size = |section, expected: u64, found: u64| {
        if expected == found {
            Ok(())
        } else {
            Err(TableError::Size {
                section,
                expected: u32::try_from(expected).unwrap_or(u32::MAX),
                found: u32::try_from(found).unwrap_or(u32::MAX),
            })
        }
    };
    let total_len = u32_at(bytes, at::TOTAL_LEN).ok_or(short)?;
    size(Section::Total, total_len.into(), len as u64)?;
    let header_len = u16_at(bytes, at::HEADER_LEN).ok_or(short)?;
    let directory_len = u16_at(bytes, at::DIRECTORY_LEN).ok_or(short)?;
    let knots_len = u32_at(bytes, at::KNOTS_LEN).ok_or(short)?;
    let sum = (PREFIX_LEN + CRC_LEN) as u64
        + u64::from(header_len)
        + u64::from(directory_len)
        + u64::from(knots_len);
    size(Section::Sum, total_len.into(), sum)?;
    let reserved = u32_at(bytes, at::RESERVED).ok_or(short)?;
    size(Section::Reserved, 0, reserved.into())?;

    let (body, tail) = bytes.split_at_checked(len - CRC_LEN).ok_or(short)?;
    let stored = u32_at(tail, 0).ok_or(short)?;
    let computed = crc32(body);
    if stored != computed {
        return Err(TableError::Crc { stored, computed });
    }
    Ok((header_len, directory_len, knots_len))
}

/// Whether `value` is finite and not too large for the arithmetic; false for NaN.
fn sound(value: f32) -> bool {
    value.abs() <= LARGEST
}

/// Whether `a` is below `b`; false when either is NaN.
fn below(a: f32, b: f32) -> bool {
    a < b
}

fn slices(count: u16, limits: &Limits, directory: &[u8], values: &[u8]) -> Result<(), Fault> {
    if count == 0 {
        return Err(Fault::NoSlices);
    }
    let mut rest = Rest { directory, values };
    let mut numbers = Numbers::default();
    let mut lightest: Option<f32> = None;
    let nominal_kg = limits.nominal_payload_kg;
    let away = |payload: f32| (payload - nominal_kg).abs();
    let mut nearest_kg = f32::INFINITY;
    for slice in 0..count {
        let broken = Fault::DirectoryBroken { slice };
        let entry = rest.record::<SliceEntry>().ok_or(broken)?;
        let payload = entry.payload_kg;
        let above = match lightest {
            Some(previous) => payload > previous,
            None => payload >= 0.0,
        };
        if !above || !sound(payload) {
            return Err(Fault::Payload {
                slice,
                found: payload,
                previous: lightest,
            });
        }
        lightest = Some(payload);
        if away(payload) < away(nearest_kg) {
            nearest_kg = payload;
        }
        if entry.branches == 0 {
            return Err(Fault::NoBranches { slice });
        }
        content(slice, &entry, limits, &mut numbers, &mut rest)?;
    }
    if !rest.directory.is_empty() {
        return Err(Fault::DirectoryLeftOver {
            bytes: rest.directory.len() as u32,
        });
    }
    if !rest.values.is_empty() {
        return Err(Fault::KnotsLeftOver {
            bytes: rest.values.len() as u32,
        });
    }
    if away(nearest_kg) <= NOMINAL_SLACK * nominal_kg {
        Ok(())
    } else {
        Err(Fault::NominalPayload {
            nominal_kg,
            nearest_kg,
        })
    }
}

/// The branches and stretches of one slice.
fn content(
    slice: u16,
    entry: &SliceEntry,
    limits: &Limits,
    numbers: &mut Numbers,
    rest: &mut Rest<'_>,
) -> Result<(), Fault> {
    let broken = Fault::DirectoryBroken { slice };
    let own = Own {
        branches: rest.directory,
        count: entry.branches,
        stretches: entry.stretches,
    };
    let mut previous: Option<u8> = None;
    for branch in 0..entry.branches {
        let found = rest.record::<BranchEntry>().ok_or(broken)?;
        let place = |fault| Fault::Branch {
            slice,
            branch,
            fault,
        };
        numbers.take(&found, previous).map_err(place)?;
        branch::cover(&found, limits).map_err(place)?;
        branch::exits(&found, own).map_err(place)?;
        rest.values = branch::curve(&found, rest.values).map_err(place)?;
        previous = Some(found.number);
    }
    let mut before: Option<Stretch> = None;
    for number in 0..entry.stretches {
        let found = rest.record::<Stretch>().ok_or(broken)?;
        let place = |fault| Fault::Stretch {
            slice,
            stretch: number,
            fault,
        };
        stretch::ends(&found, before, own).map_err(place)?;
        rest.values = stretch::reserves(&found, rest.values).map_err(place)?;
        before = Some(found);
    }
    crossing::band(slice, entry.survey)?;
    for number in 0..entry.crossings {
        let found = rest.record::<Crossing>().ok_or(broken)?;
        crossing::check(&found, limits, own).map_err(|fault| Fault::Crossing {
            slice,
            crossing: number,
            fault,
        })?;
    }
    Ok(())
}

/// What has not been checked yet.
struct Rest<'a> {
    directory: &'a [u8],
    values: &'a [u8],
}

impl<'a> Rest<'a> {
    /// The next record of the directory.
    fn record<T: Deserialize<'a>>(&mut self) -> Option<T> {
        let (record, after) = take::<T>(self.directory)?;
        self.directory = after;
        Some(record)
    }
}

/// The branches of the slice being checked.
#[derive(Clone, Copy)]
struct Own<'a> {
    branches: &'a [u8],
    count: u8,
    stretches: u8,
}

impl Own<'_> {
    /// The entry of the branch with this number.
    fn branch(&self, number: u8) -> Option<BranchEntry> {
        let mut rest = self.branches;
        for _ in 0..self.count {
            let (entry, after) = take::<BranchEntry>(rest)?;
            if entry.number == number {
                return Some(entry);
            }
            rest = after;
        }
        None
    }

    /// Whether `setpoint` lies in a stretch of the branch with this number.
    fn usable(&self, number: u8, setpoint: f32) -> Option<bool> {
        let mut rest = self.branches;
        for _ in 0..self.count {
            rest = take::<BranchEntry>(rest)?.1;
        }
        for _ in 0..self.stretches {
            let (stretch, after) = take::<Stretch>(rest)?;
            if stretch.branch == number && stretch.contains(setpoint) {
                return Some(true);
            }
            rest = after;
        }
        Some(false)
    }
}
