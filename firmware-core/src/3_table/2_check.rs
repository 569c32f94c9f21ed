//! The checks of [`super::Table::new`], in their order.

use super::error::{BranchFault, Fault, Section, StretchFault, TableError};
use super::{Limits, Table};
use crate::bytes::{array_at, crc32, float, section, u16_at, u32_at};
use crate::format::{
    BranchEntry, CRC_LEN, Header, MAGIC, PREFIX_LEN, SliceEntry, Stretch, VERSION, at, take,
};

/// No number in a table is larger: products of two of them stay far from the largest f32, so that no lookup can
/// overflow.
const LARGEST: f32 = 1e9;
/// How far the cover of a branch may reach beyond the header's range, relative to the range: the rounding of an end
/// that was computed in f64.
const RANGE_SLACK: f32 = 1e-5;
/// How far the first and last knot may fall short of the ends of the cover, in units of the parameter: f32 rounding,
/// with a factor of some ten. A lookup there takes the value of the end knot.
const PARAMETER_SLACK: f32 = 1e-5;

pub(super) fn table(bytes: &[u8]) -> Result<Table<'_>, TableError> {
    let (header_len, directory_len, knots_len) = frame(bytes)?;
    let header_bytes = section(bytes, PREFIX_LEN, header_len.into());
    let directory_at = PREFIX_LEN.saturating_add(header_len.into());
    let directory = section(bytes, directory_at, directory_len.into());
    let knots_at = directory_at.saturating_add(directory_len.into());
    let knots = section(bytes, knots_at, knots_len as usize);
    let limits = header(header_bytes)?;
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

fn header(bytes: &[u8]) -> Result<Limits, Fault> {
    let (header, rest) = take::<Header<'_>>(bytes).ok_or(Fault::HeaderBroken)?;
    if !rest.is_empty() {
        return Err(Fault::HeaderLeftOver {
            bytes: rest.len() as u32,
        });
    }
    let must = |holds: bool, field: &'static str, value: f32| {
        if holds && sound(value) {
            Ok(())
        } else {
            Err(Fault::HeaderValue { field, value })
        }
    };
    must(header.modes >= 1, "modes", header.modes.into())?;
    for (field, value) in [
        ("gamma", header.gamma),
        ("length_m", header.length_m),
        ("mass_kg", header.mass_kg),
        ("energy_scale_j", header.energy_scale_j),
        ("offset_m", header.offset_m),
        ("max_tension_n", header.max_tension_n),
    ] {
        must(value > 0.0, field, value)?;
    }
    // One rounding step above pi: a tilt of 180 degrees computed in f64 may round up.
    let tilt_most = core::f32::consts::PI + 1e-6;
    must(
        header.tilt_rad.abs() <= tilt_most,
        "tilt_rad",
        header.tilt_rad,
    )?;
    let pretension = header.pretension_n;
    must(
        pretension >= 0.0 && pretension <= header.max_tension_n,
        "pretension_n",
        pretension,
    )?;
    let error = header.worst_error;
    for (field, value) in [
        ("worst_error.mean_angle_rad", error.mean_angle_rad),
        ("worst_error.tip_angle_rad", error.tip_angle_rad),
        ("worst_error.couple_n_m", error.couple_n_m),
        ("worst_error.energy_j", error.energy_j),
        ("worst_error.tip_m", error.tip_m),
        (
            "worst_error.restoring_n_m_per_rad",
            error.restoring_n_m_per_rad,
        ),
        ("deducted.setpoint", header.deducted.setpoint),
        ("deducted.tension_n", header.deducted.tension_n),
    ] {
        must(value >= 0.0, field, value)?;
    }
    must(true, "setpoint_lo", header.setpoint_lo)?;
    must(true, "setpoint_hi", header.setpoint_hi)?;
    if header.setpoint_lo < header.setpoint_hi {
        Ok(Limits {
            drive: header.drive,
            offset_m: header.offset_m,
            pretension_n: header.pretension_n,
            max_tension_n: header.max_tension_n,
            deducted_tension_n: header.deducted.tension_n,
            mean_angle_error_rad: error.mean_angle_rad,
            setpoint_lo: header.setpoint_lo,
            setpoint_hi: header.setpoint_hi,
        })
    } else {
        Err(Fault::SetpointRange {
            lo: header.setpoint_lo,
            hi: header.setpoint_hi,
        })
    }
}

fn slices(count: u16, limits: &Limits, directory: &[u8], knots: &[u8]) -> Result<(), Fault> {
    if count == 0 {
        return Err(Fault::NoSlices);
    }
    let mut rest = directory;
    let mut knots = knots;
    let mut lightest: Option<f32> = None;
    for slice in 0..count {
        let broken = Fault::DirectoryBroken { slice };
        let (entry, branches_at) = take::<SliceEntry>(rest).ok_or(broken)?;
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
        if entry.branches == 0 {
            return Err(Fault::NoBranches { slice });
        }
        rest = branches_at;
        for branch in 0..entry.branches {
            let (found, after) = take::<BranchEntry>(rest).ok_or(broken)?;
            rest = after;
            let place = |fault| Fault::Branch {
                slice,
                branch,
                fault,
            };
            cover(&found, limits).map_err(place)?;
            exits(&found, branches_at, entry.branches).map_err(place)?;
            knots = curve(&found, knots).map_err(place)?;
        }
        let mut before: Option<Stretch> = None;
        for number in 0..entry.stretches {
            let (found, after) = take::<Stretch>(rest).ok_or(broken)?;
            rest = after;
            let fault = stretch(&found, before, branches_at, entry.branches);
            fault.map_err(|fault| Fault::Stretch {
                slice,
                stretch: number,
                fault,
            })?;
            before = Some(found);
        }
    }
    if !rest.is_empty() {
        return Err(Fault::DirectoryLeftOver {
            bytes: rest.len() as u32,
        });
    }
    if !knots.is_empty() {
        return Err(Fault::KnotsLeftOver {
            bytes: knots.len() as u32,
        });
    }
    Ok(())
}

fn cover(entry: &BranchEntry, limits: &Limits) -> Result<(), BranchFault> {
    let BranchEntry {
        from,
        to,
        anchor_from,
        anchor_to,
        ..
    } = *entry;
    if ![from, to, anchor_from, anchor_to].into_iter().all(sound) {
        return Err(BranchFault::NotFinite);
    }
    if !below(from, to) {
        return Err(BranchFault::EmptyCover { from, to });
    }
    if !(anchor_from <= from && to <= anchor_to) {
        return Err(BranchFault::Anchors {
            anchor_from,
            from,
            to,
            anchor_to,
        });
    }
    let (lo, hi) = (limits.setpoint_lo, limits.setpoint_hi);
    let slack = RANGE_SLACK * (hi - lo);
    if lo - slack <= from && to <= hi + slack {
        Ok(())
    } else {
        Err(BranchFault::OutsideRange { from, to, lo, hi })
    }
}

/// The entry of branch `number` of the slice whose branches begin at `branches`.
fn branch_entry(branches: &[u8], count: u8, number: u8) -> Option<BranchEntry> {
    let mut rest = branches;
    for at in 0..count {
        let (entry, after) = take::<BranchEntry>(rest)?;
        if at == number {
            return Some(entry);
        }
        rest = after;
    }
    None
}

fn exits(entry: &BranchEntry, branches: &[u8], count: u8) -> Result<(), BranchFault> {
    let mut bits = entry.exits;
    if bits != 0 && !entry.is_stable() {
        return Err(BranchFault::ExitOfUnstable { exits: bits });
    }
    for exit in 0..32u8 {
        let is_exit = bits & 1 == 1;
        bits >>= 1;
        if is_exit && branch_entry(branches, count, exit).is_none_or(|pass| pass.index != 1) {
            return Err(BranchFault::Exit { exit });
        }
    }
    Ok(())
}

/// Checks the knots of one branch at the front of `knots` and returns the knots after them.
fn curve<'a>(entry: &BranchEntry, knots: &'a [u8]) -> Result<&'a [u8], BranchFault> {
    if entry.knots < 2 {
        return Err(BranchFault::TooFewKnots { knots: entry.knots });
    }
    let width = entry.floats_per_knot();
    let wanted = usize::from(entry.knots)
        .saturating_mul(width)
        .saturating_mul(4);
    let (own, rest) = knots
        .split_at_checked(wanted)
        .ok_or(BranchFault::KnotsMissing {
            expected: wanted as u32,
            found: knots.len() as u32,
        })?;
    let (mut first, mut last) = (f32::NAN, f32::NAN);
    for knot in 0..entry.knots {
        let start = usize::from(knot).saturating_mul(width);
        for place in 0..width {
            // A value that cannot be read counts as one that is not a number.
            if !float(own, start.saturating_add(place)).is_some_and(sound) {
                return Err(BranchFault::Knot {
                    knot,
                    place: place as u8,
                });
            }
        }
        let t = float(own, start).unwrap_or(f32::NAN);
        if knot == 0 {
            first = t;
        } else if !below(last, t) {
            return Err(BranchFault::KnotOrder {
                knot,
                previous: last,
                t,
            });
        }
        last = t;
    }
    let map = entry.map();
    let (begin, end) = (map.t(entry.from), map.t(entry.to));
    if first <= begin + PARAMETER_SLACK && last >= end - PARAMETER_SLACK {
        Ok(rest)
    } else {
        Err(BranchFault::KnotCover {
            first,
            begin,
            last,
            end,
        })
    }
}

fn stretch(
    found: &Stretch,
    before: Option<Stretch>,
    branches: &[u8],
    count: u8,
) -> Result<(), StretchFault> {
    let Stretch {
        branch, from, to, ..
    } = *found;
    let entry = branch_entry(branches, count, branch);
    let entry = entry.ok_or(StretchFault::NoSuchBranch { branch })?;
    if !entry.is_stable() {
        return Err(StretchFault::UnstableBranch {
            branch,
            index: entry.index,
        });
    }
    let limits = [found.from_limit, found.to_limit];
    let values_sound = limits
        .iter()
        .all(|end| sound(end.value) && sound(end.limit));
    if !(values_sound && sound(from) && sound(to)) {
        return Err(StretchFault::NotFinite);
    }
    if !below(from, to) {
        return Err(StretchFault::Empty { from, to });
    }
    if !(entry.from <= from && to <= entry.to) {
        return Err(StretchFault::OutsideBranch {
            from,
            to,
            branch_from: entry.from,
            branch_to: entry.to,
        });
    }
    match before {
        Some(earlier) if earlier.branch > branch => Err(StretchFault::BranchOrder {
            previous: earlier.branch,
            branch,
        }),
        Some(earlier) if earlier.branch == branch && !below(earlier.to, from) => {
            Err(StretchFault::Overlap {
                previous_to: earlier.to,
                from,
            })
        }
        _ => Ok(()),
    }
}
