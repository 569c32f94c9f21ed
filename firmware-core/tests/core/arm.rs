//! An invented arm with one coordinate q, potential `K (q^4/4 - q^2/2 - x q)` and setpoint x. Its rest states are the
//! roots of `q^3 - q = x`: two wells and, between the folds at `x = -+2/(3 sqrt 3)`, the pass between them.
//!
//! ```text
//! branch 0  lower well   q <= -1/sqrt 3    from the table's low end to the upper fold
//! branch 1  pass         between           from fold to fold
//! branch 2  upper well   q >= 1/sqrt 3     from the lower fold to the table's high end
//! ```
//!
//! Tip held: x is the tip angle, the hold couple is the slope of the potential over it, `-K q`. Couple applied:
//! K = 1, x is the couple, the tip angle is q, and the stored energy lacks the term with x.

use firmware_core::format::write::{BranchContents, Contents, SliceContents, buffer_len, write};
use firmware_core::{
    BranchEntry, Deducted, Drive, Header, Limit, ParameterMap, Requirement, Stretch, Units,
    WorstError,
};

/// Table range.
pub const RANGE: (f64, f64) = (-1.0, 1.0);
pub const KNOTS: u16 = 33;
pub const OFFSET_M: f32 = 0.01;
pub const PRETENSION_N: f32 = 3.0;
pub const MEAN_ERROR_RAD: f32 = 2e-4;

/// Setpoint of the upper fold; the lower one is its mirror image.
pub fn fold() -> f64 {
    2.0 / (3.0 * 3f64.sqrt())
}

pub fn scale(drive: Drive) -> f64 {
    match drive {
        Drive::HeldTip => 0.1,
        Drive::AppliedCouple => 1.0,
    }
}

/// The root of `q^3 - q = x` on a branch, by halving its bracket.
pub fn root(branch: usize, x: f64) -> f64 {
    let turn = 1.0 / 3f64.sqrt();
    let (mut lo, mut hi) = [(-2.0, -turn), (-turn, turn), (turn, 2.0)][branch];
    let falling = branch == 1;
    for _ in 0..100 {
        let middle: f64 = 0.5 * (lo + hi);
        if (middle.powi(3) - middle < x) != falling {
            lo = middle;
        } else {
            hi = middle;
        }
    }
    0.5 * (lo + hi)
}

/// Mean angle, conjugate, energy, tip x, tip y, restoring stiffness.
pub fn exact(drive: Drive, branch: usize, x: f64) -> [f64; 6] {
    let q = root(branch, x);
    let k = scale(drive);
    let stored = k * (q.powi(4) / 4.0 - q * q / 2.0);
    let (conjugate, energy) = match drive {
        Drive::HeldTip => (-k * q, stored - k * x * q),
        Drive::AppliedCouple => (q, stored),
    };
    [
        q,
        conjugate,
        energy,
        q.sin(),
        q.cos(),
        k * (3.0 * q * q - 1.0),
    ]
}

/// A table before it is written, to be changed by a test.
#[derive(Clone)]
pub struct Draft {
    pub header: Header<'static>,
    pub slices: Vec<DraftSlice>,
}

#[derive(Clone)]
pub struct DraftSlice {
    pub payload_kg: f32,
    pub branches: Vec<(BranchEntry, Vec<f32>)>,
    pub stretches: Vec<Stretch>,
}

impl Draft {
    pub fn bytes(&self) -> Vec<u8> {
        let branches: Vec<Vec<BranchContents<'_>>> = self
            .slices
            .iter()
            .map(|slice| {
                slice
                    .branches
                    .iter()
                    .map(|(entry, knots)| BranchContents {
                        entry: *entry,
                        knots,
                    })
                    .collect()
            })
            .collect();
        let slices: Vec<SliceContents<'_>> = self
            .slices
            .iter()
            .zip(&branches)
            .map(|(slice, branches)| SliceContents {
                payload_kg: slice.payload_kg,
                branches,
                stretches: &slice.stretches,
            })
            .collect();
        let contents = Contents {
            header: self.header,
            slices: &slices,
        };
        let mut bytes = vec![0; buffer_len(&contents)];
        let len = write(&contents, &mut bytes).expect("the draft fits the format");
        bytes.truncate(len);
        bytes
    }
}

/// The arm's table; `max_tension_n` ends the stretches of a held tip at 10 |q| + 3 N.
pub fn draft(drive: Drive, max_tension_n: f32) -> Draft {
    let fold = fold() as f32;
    let (lo, hi) = (RANGE.0 as f32, RANGE.1 as f32);
    let entry = |branch: usize| {
        let (from, to) = [(lo, fold), (-fold, fold), (-fold, hi)][branch];
        BranchEntry {
            index: u8::from(branch == 1),
            from,
            to,
            anchor_from: from,
            anchor_to: to,
            fold_from: branch != 0,
            fold_to: branch != 2,
            exits: if branch == 1 { 0 } else { 0b10 },
            knots: KNOTS,
        }
    };
    let branches: Vec<_> = (0..3)
        .map(|branch| {
            let entry = entry(branch);
            (entry, knots(drive, branch, &entry))
        })
        .collect();
    let deducted = Deducted {
        setpoint: 1e-3,
        tension_n: 0.01,
    };
    let stretches = [0, 2]
        .map(|branch| stretch(drive, branch, &branches[branch].0, max_tension_n, deducted))
        .to_vec();
    Draft {
        header: Header {
            name: "invented one-coordinate arm",
            fingerprint: *b"invented",
            units: Units::SiRadians,
            drive,
            modes: 6,
            gamma: 0.05,
            length_m: 0.6,
            mass_kg: 0.1,
            energy_scale_j: 0.589,
            tilt_rad: 0.0,
            offset_m: OFFSET_M,
            pretension_n: PRETENSION_N,
            max_tension_n,
            setpoint_lo: lo,
            setpoint_hi: hi,
            worst_error: WorstError {
                mean_angle_rad: MEAN_ERROR_RAD,
                ..WorstError::default()
            },
            deducted,
        },
        slices: vec![DraftSlice {
            payload_kg: 0.06,
            branches,
            stretches,
        }],
    }
}

/// The same with the upper well's stretch cut in two, 0.1 to 0.3 left out.
pub fn draft_with_gap(drive: Drive, max_tension_n: f32) -> Draft {
    let mut draft = draft(drive, max_tension_n);
    let stretches = &mut draft.slices[0].stretches;
    let mut above = stretches[1];
    let edge = Limit {
        requirement: Requirement::TensionMax,
        value: max_tension_n,
        limit: max_tension_n,
    };
    stretches[1].to = 0.1;
    stretches[1].to_limit = edge;
    above.from = 0.3;
    above.from_limit = edge;
    stretches.push(above);
    draft
}

/// Knots at equal steps of the parameter, slopes by differences within the branch (it ends at the folds).
fn knots(drive: Drive, branch: usize, entry: &BranchEntry) -> Vec<f32> {
    const STEP: f64 = 2e-3;
    let map = entry.map();
    let (begin, end) = (map.t_f64(entry.from.into()), map.t_f64(entry.to.into()));
    // From anchor to anchor as they are before rounding: against rounded ones the branch is not smooth at its folds.
    let (from, to) = [(RANGE.0, fold()), (-fold(), fold()), (-fold(), RANGE.1)][branch];
    let unit = ParameterMap {
        anchor_from: 0.0,
        anchor_to: 1.0,
        ..map
    };
    let setpoint = |t: f64| from + (to - from) * unit.setpoint_f64(t);
    let value = |t: f64, quantity: usize| exact(drive, branch, setpoint(t))[quantity];
    let quantities = if entry.is_stable() { 6 } else { 3 };
    let mut knots = Vec::new();
    for knot in 0..KNOTS {
        let t = begin + (end - begin) * f64::from(knot) / f64::from(KNOTS - 1);
        let step = if t < 0.5 * (begin + end) { STEP } else { -STEP };
        knots.push(t as f32);
        for quantity in 0..quantities {
            let at = |steps: f64| value(t + steps * step, quantity);
            // One-sided, exact to the fourth order.
            let slope = (-25.0 * at(0.0) + 48.0 * at(1.0) - 36.0 * at(2.0) + 16.0 * at(3.0)
                - 3.0 * at(4.0))
                / (12.0 * step);
            knots.extend([at(0.0) as f32, slope as f32]);
        }
    }
    knots
}

fn stretch(
    drive: Drive,
    branch: usize,
    entry: &BranchEntry,
    max_tension_n: f32,
    deducted: Deducted,
) -> Stretch {
    let at_fold = Limit {
        requirement: Requirement::FoldDistance,
        value: deducted.setpoint,
        limit: deducted.setpoint,
    };
    // Outwards the tension grows with |q| (held) or |x| (applied): where does it reach the maximum?
    let couple = OFFSET_M * (max_tension_n - deducted.tension_n - PRETENSION_N);
    let outermost = match drive {
        Drive::HeldTip => {
            let q = f64::from(couple) / scale(drive);
            (q.powi(3) - q) as f32
        }
        Drive::AppliedCouple => couple,
    };
    let outer = if outermost < RANGE.1 as f32 {
        (outermost, Requirement::TensionMax, max_tension_n)
    } else {
        (RANGE.1 as f32, Requirement::TableRange, RANGE.1 as f32)
    };
    let limit = |side: f32| {
        let (_, requirement, limit) = outer;
        let limit = match requirement {
            Requirement::TableRange => side * limit,
            _ => limit,
        };
        Limit {
            requirement,
            value: limit,
            limit,
        }
    };
    if branch == 0 {
        Stretch {
            branch: 0,
            from: -outer.0,
            to: (entry.to - deducted.setpoint).min(outer.0),
            from_limit: limit(-1.0),
            to_limit: at_fold,
        }
    } else {
        Stretch {
            branch: 2,
            from: (entry.from + deducted.setpoint).max(-outer.0),
            to: outer.0,
            from_limit: at_fold,
            to_limit: limit(1.0),
        }
    }
}

/// CRC-32 (ISO-HDLC) bit by bit, independent of the one under test.
pub fn crc32(bytes: &[u8]) -> u32 {
    !bytes.iter().fold(!0u32, |mut crc, byte| {
        crc ^= u32::from(*byte);
        for _ in 0..8 {
            crc = (crc >> 1) ^ (0xedb8_8320 & 0u32.wrapping_sub(crc & 1));
        }
        crc
    })
}

/// Writes the right checksum under changed bytes.
pub fn reseal(bytes: &mut [u8]) {
    let body = bytes.len() - 4;
    let crc = crc32(&bytes[..body]);
    bytes[body..].copy_from_slice(&crc.to_le_bytes());
}
