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
//!
//! A heavier payload makes a held tip's K larger: the branches stay where they are, couples and energies grow.

use std::sync::OnceLock;

use firmware_core::format::write::{
    BranchContents, Contents, SliceContents, StretchContents, buffer_len, write,
};
use firmware_core::{
    BranchEntry, Crossing, Deducted, Drive, Header, Limit, Load, ParameterMap, Payload,
    Requirement, Reserves, Stretch, SurveyBand, Table, Units, WorstError,
};

use crate::parameter::{parameter, setpoint};

/// Table range.
pub const RANGE: (f64, f64) = (-1.0, 1.0);
pub const KNOTS: u16 = 33;
pub const OFFSET_M: f32 = 0.01;
pub const PRETENSION_N: f32 = 3.0;
pub const MEAN_ERROR_RAD: f32 = 2e-4;
pub const NOMINAL_KG: f32 = 0.06;
/// Payloads of [`draft_with_payloads`], and how much larger K is with each.
pub const PAYLOADS: [(f32, f32); 3] = [(0.05, 0.9), (NOMINAL_KG, 1.0), (0.08, 1.2)];

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
    pub stretches: Vec<(Stretch, Vec<f32>)>,
    pub survey: SurveyBand,
    pub crossings: Vec<Crossing>,
}

impl DraftSlice {
    /// Another payload, with K larger by `factor`.
    pub fn heavier(&self, payload_kg: f32, factor: f32) -> Self {
        let mut heavier = self.clone();
        heavier.payload_kg = payload_kg;
        for (entry, knots) in &mut heavier.branches {
            for knot in knots.chunks_mut(entry.floats_per_knot()) {
                // Conjugate and energy, and the restoring stiffness of a stable branch.
                for at in [3, 4, 5, 6, 11, 12] {
                    if let Some(value) = knot.get_mut(at) {
                        *value *= factor;
                    }
                }
            }
        }
        heavier
    }

    /// Replaces the stretches, with reserves to suit; `factor` as the K of the slice.
    pub fn set_stretches(&mut self, stretches: Vec<Stretch>, factor: f32) {
        let with = |stretch| (stretch, reserve_values(&stretch, factor));
        self.stretches = stretches.into_iter().map(with).collect();
    }
}

impl std::fmt::Debug for Draft {
    /// What the random tests vary.
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        writeln!(f, "max_tension_n {}", self.header.max_tension_n)?;
        for slice in &self.slices {
            let numbers: Vec<u8> = slice
                .branches
                .iter()
                .map(|(entry, _)| entry.number)
                .collect();
            writeln!(f, "{} kg, branches {numbers:?}", slice.payload_kg)?;
            for (stretch, _) in &slice.stretches {
                writeln!(f, "  {stretch:?}")?;
            }
        }
        Ok(())
    }
}

impl Draft {
    pub fn bytes(&self) -> Vec<u8> {
        let branches: Vec<Vec<BranchContents<'_>>> = self
            .slices
            .iter()
            .map(|slice| {
                let contents = |(entry, knots)| BranchContents { entry, knots };
                let entries = slice
                    .branches
                    .iter()
                    .map(|(entry, knots)| (*entry, &knots[..]));
                entries.map(contents).collect()
            })
            .collect();
        let stretches: Vec<Vec<StretchContents<'_>>> = self
            .slices
            .iter()
            .map(|slice| {
                let contents = |(entry, reserves)| StretchContents { entry, reserves };
                let entries = slice
                    .stretches
                    .iter()
                    .map(|(entry, values)| (*entry, &values[..]));
                entries.map(contents).collect()
            })
            .collect();
        let slices: Vec<SliceContents<'_>> = (0..self.slices.len())
            .map(|number| SliceContents {
                payload_kg: self.slices[number].payload_kg,
                branches: &branches[number],
                stretches: &stretches[number],
                survey: self.slices[number].survey,
                crossings: &self.slices[number].crossings,
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
            number: branch as u8,
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
        .map(|branch| {
            let stretch = stretch(drive, branch, &branches[branch].0, max_tension_n, deducted);
            (stretch, reserve_values(&stretch, 1.0))
        })
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
            nominal_payload_kg: NOMINAL_KG,
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
            payload_kg: NOMINAL_KG,
            branches,
            stretches,
            survey: SurveyBand::default(),
            crossings: Vec::new(),
        }],
    }
}

/// The same with the upper well's stretch cut in two, 0.1 to 0.3 left out.
pub fn draft_with_gap(drive: Drive, max_tension_n: f32) -> Draft {
    let mut draft = draft(drive, max_tension_n);
    let slice = &mut draft.slices[0];
    let [lower, mut below] = [0, 1].map(|number| slice.stretches[number].0);
    let mut above = below;
    (below.to, below.to_limit) = (0.1, GAP_EDGE);
    (above.from, above.from_limit) = (0.3, GAP_EDGE);
    slice.set_stretches(vec![lower, below, above], 1.0);
    draft
}

/// What ends the stretches beside the gap.
pub const GAP_EDGE: Limit = Limit {
    requirement: Requirement::Clearance,
    value: 0.02,
    limit: 0.02,
};

/// A held tip with the payloads of [`PAYLOADS`], where the stretches of each heavier one end earlier on both sides.
pub fn draft_with_payloads(max_tension_n: f32) -> Draft {
    let mut draft = draft(Drive::HeldTip, max_tension_n);
    let nominal = draft.slices[0].clone();
    draft.slices = PAYLOADS
        .iter()
        .map(|(payload_kg, factor)| {
            let mut slice = nominal.heavier(*payload_kg, *factor);
            let shorter = |(stretch, _): &(Stretch, Vec<f32>)| Stretch {
                from: stretch.from + payload_kg,
                to: stretch.to - payload_kg,
                from_limit: payload_limit(*payload_kg),
                to_limit: payload_limit(*payload_kg),
                ..*stretch
            };
            slice.set_stretches(nominal.stretches.iter().map(shorter).collect(), *factor);
            slice
        })
        .collect();
    draft
}

/// The limit that ends the stretches of [`draft_with_payloads`]: it tells of which slice.
pub fn payload_limit(payload_kg: f32) -> Limit {
    Limit {
        requirement: Requirement::PayloadReserve,
        value: payload_kg,
        limit: payload_kg,
    }
}

/// Invented reserves, linear in the setpoint, so that interpolation is exact up to rounding.
pub fn reserves(branch: u8, x: f32, factor: f32) -> Reserves {
    let fold = fold() as f32;
    let to_fold = if branch == 0 { fold - x } else { x + fold };
    Reserves {
        barrier_j: Some(0.1 * to_fold * factor),
        knock_n_s: Some(0.02 * to_fold / factor),
        payload_reserve_kg: Some(0.05 * to_fold / factor),
        stiffness_reserve: Some(0.2 * to_fold),
        setpoint_reserve: Some(to_fold),
        restoring_n_m_per_rad: Some(0.1 * to_fold * factor),
        tension_factor: Some(4.0 - x / factor),
        clearance_m: None,
        strain: (0.002 + 0.001 * x) * factor,
    }
}

fn reserve_values(stretch: &Stretch, factor: f32) -> Vec<f32> {
    let last = f32::from(stretch.points - 1);
    (0..stretch.points)
        .flat_map(|point| {
            let x = stretch.from + (stretch.to - stretch.from) * f32::from(point) / last;
            reserves(stretch.branch, x, factor).to_values()
        })
        .collect()
}

/// Does something with the load of a payload.
pub fn with_load<T>(draft: &Draft, payload: Payload, then: impl FnOnce(&Load<'_>) -> T) -> T {
    let bytes = draft.bytes();
    let table = Table::new(&bytes).expect("a sound table");
    then(&table.load(payload).expect("a payload of the table"))
}

/// The knots of a branch, solved once.
fn knots(drive: Drive, branch: usize, entry: &BranchEntry) -> Vec<f32> {
    static SOLVED: [OnceLock<Vec<f32>>; 6] = [const { OnceLock::new() }; 6];
    let place = 3 * usize::from(drive == Drive::AppliedCouple) + branch;
    let solved = SOLVED[place].get_or_init(|| solve_knots(drive, branch, entry));
    solved.clone()
}

/// Knots at equal steps of the parameter, slopes by differences within the branch (it ends at the folds).
fn solve_knots(drive: Drive, branch: usize, entry: &BranchEntry) -> Vec<f32> {
    const STEP: f64 = 2e-3;
    let map = entry.map();
    let (begin, end) = (
        parameter(&map, entry.from.into()),
        parameter(&map, entry.to.into()),
    );
    // From anchor to anchor as they are before rounding: against rounded ones the branch is not smooth at its folds.
    let (from, to) = [(RANGE.0, fold()), (-fold(), fold()), (-fold(), RANGE.1)][branch];
    let unit = ParameterMap {
        anchor_from: 0.0,
        anchor_to: 1.0,
        ..map
    };
    let at = |t: f64| from + (to - from) * setpoint(&unit, t);
    let value = |t: f64, quantity: usize| exact(drive, branch, at(t))[quantity];
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
        requirement: Requirement::SetpointReserve,
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
        (outermost, Requirement::TensionFactor, 1.0)
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
            points: 4,
            from: -outer.0,
            to: (entry.to - deducted.setpoint).min(outer.0),
            from_limit: limit(-1.0),
            to_limit: at_fold,
        }
    } else {
        Stretch {
            branch: 2,
            points: 7,
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
