//! Bytes that are not, or no longer, a table.

use firmware_core::format::{MAGIC, VERSION};
use firmware_core::table::{Fault, Section};
use firmware_core::{
    Answer, Drive, Payload, Pose, Present, Table, TableError, choose, which_branch,
};
use proptest::prelude::*;

use crate::arm::{draft, draft_with_gap, draft_with_payloads, reseal};
use crate::seed::cases;

/// Where the knots begin.
fn knots_at(bytes: &[u8]) -> usize {
    let u16_at = |at: usize| usize::from(u16::from_le_bytes([bytes[at], bytes[at + 1]]));
    24 + u16_at(12) + u16_at(14)
}

#[test]
fn the_first_reason_is_the_deepest() {
    // Wrong in every way at once; repaired one by one in the order of the checks.
    let mut draft = draft(Drive::HeldTip, 60.0);
    draft.header.gamma = -1.0;
    let sound = draft.bytes();
    let total = sound.len() as u32;
    let mut bytes = sound.clone();
    bytes[0] = b'X';
    bytes[4] = 9;
    bytes[8..12].copy_from_slice(&(total + 1).to_le_bytes());
    bytes[16] ^= 4;
    bytes[20] = 1;
    let last = bytes.len() - 1;
    bytes[last] ^= 1;

    let short = TableError::TooShort {
        least: 28,
        found: 27,
    };
    assert_eq!(Table::new(&bytes[..27]).err(), Some(short));
    let magic = TableError::Magic { found: *b"XTHY" };
    assert_eq!(Table::new(&bytes).err(), Some(magic));
    bytes[..4].copy_from_slice(&MAGIC);
    let version = TableError::Version {
        expected: VERSION,
        found: 9,
    };
    assert_eq!(Table::new(&bytes).err(), Some(version));
    bytes[4] = VERSION as u8;
    let size = |section, expected, found| TableError::Size {
        section,
        expected,
        found,
    };
    let error = size(Section::Total, total + 1, total);
    assert_eq!(Table::new(&bytes).err(), Some(error));
    bytes[8..12].copy_from_slice(&total.to_le_bytes());
    let found = Table::new(&bytes).err();
    assert!(
        matches!(found, Some(TableError::Size { section: Section::Sum, expected, .. }) if expected == total),
        "{found:?}"
    );
    bytes[16] ^= 4;
    assert_eq!(
        Table::new(&bytes).err(),
        Some(size(Section::Reserved, 0, 1))
    );
    bytes[20] = 0;
    let found = Table::new(&bytes).err();
    assert!(matches!(found, Some(TableError::Crc { .. })), "{found:?}");
    bytes[last] ^= 1;
    let meaning = TableError::Meaning(Fault::HeaderValue {
        field: "gamma",
        value: -1.0,
    });
    assert_eq!(Table::new(&bytes).err(), Some(meaning));
}

#[test]
fn every_cut_is_noticed() {
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    for len in 0..bytes.len() {
        let found = Table::new(&bytes[..len]).err();
        let as_expected = match found {
            Some(TableError::TooShort { .. }) => len < 28,
            Some(TableError::Size { .. }) => len >= 28,
            _ => false,
        };
        assert!(as_expected, "{len}: {found:?}");
    }
}

#[test]
fn every_flipped_bit_before_the_knots_is_noticed() {
    let mut bytes = draft(Drive::HeldTip, 60.0).bytes();
    assert!(Table::new(&bytes).is_ok());
    for at in 0..knots_at(&bytes) {
        for bit in 0..8 {
            bytes[at] ^= 1 << bit;
            assert!(Table::new(&bytes).is_err(), "byte {at}, bit {bit}");
            bytes[at] ^= 1 << bit;
        }
    }
}

/// Calls everything there is to call. Returns whether anything was a table.
fn use_it(bytes: &[u8], setpoint: f32, request: f32, mean: f32) -> Result<bool, TestCaseError> {
    let table = match Table::new(bytes) {
        Ok(table) => table,
        Err(error) => {
            prop_assert!(!error.to_string().is_empty());
            return Ok(false);
        }
    };
    let limits = table.limits();
    prop_assert!(table.header().is_ok());
    let mut payloads = vec![Payload::Unknown, Payload::Known(mean)];
    for slice in table.slices() {
        payloads.extend([slice.payload_kg, slice.payload_kg.next_up()].map(Payload::Known));
        for state in slice.all_at(setpoint) {
            prop_assert!(state.mean_angle_rad.is_finite() && state.energy_j.is_finite());
            prop_assert!(state.potential_j(limits.drive).is_finite());
        }
    }
    let pose = Pose {
        tip_angle_rad: setpoint,
        mean_angle_rad: mean,
    };
    for payload in payloads {
        let load = match table.load(payload) {
            Ok(load) => load,
            Err(error) => {
                prop_assert!(!error.to_string().is_empty());
                continue;
            }
        };
        prop_assert!(load.slices().count() >= 1);
        if let Err(error) = which_branch(&load, setpoint, pose) {
            prop_assert!(!error.to_string().is_empty());
        }
        for branch in 0..=32 {
            let answer = choose(&load, Present { branch, setpoint }, request);
            prop_assert!(!answer.to_string().is_empty());
            if let Answer::Go {
                setpoint,
                tensions,
                reserves,
            } = answer
            {
                prop_assert!(tensions.allowed(&limits) && load.safe_at(branch, setpoint));
                prop_assert!(reserves.to_values().into_iter().all(f32::is_finite));
                prop_assert_eq!(load.reserves(branch, setpoint), Some(reserves));
            }
        }
    }
    Ok(true)
}

proptest! {
    #![proptest_config(cases(1000))]

    #[test]
    fn every_flipped_bit_of_knots_and_reserves_is_noticed(place in any::<prop::sample::Index>(), bit in 0u8..8) {
        let mut bytes = draft(Drive::HeldTip, 60.0).bytes();
        let start = knots_at(&bytes);
        let at = start + place.index(bytes.len() - start);
        bytes[at] ^= 1u8 << bit;
        let noticed = matches!(Table::new(&bytes), Err(TableError::Crc { .. }));
        prop_assert!(noticed);
    }

    #[test]
    fn any_bytes_are_survived(bytes in prop::collection::vec(any::<u8>(), 0..300)) {
        prop_assert!(!use_it(&bytes, 0.0, 0.0, 0.0)?);
    }

    /// The right frame around anything, so that the checks of the meaning see it.
    #[test]
    fn any_content_is_survived(
        header in prop::collection::vec(any::<u8>(), 0..120),
        directory in prop::collection::vec(any::<u8>(), 0..120),
        knots in prop::collection::vec(any::<u8>(), 0..200),
        keep_header: bool,
    ) {
        let sound = draft(Drive::HeldTip, 60.0).bytes();
        let header = if keep_header {
            let len = usize::from(u16::from_le_bytes([sound[12], sound[13]]));
            sound[24..24 + len].to_vec()
        } else {
            header
        };
        let mut bytes = sound[..24].to_vec();
        bytes[12..14].copy_from_slice(&(header.len() as u16).to_le_bytes());
        bytes[14..16].copy_from_slice(&(directory.len() as u16).to_le_bytes());
        bytes[16..20].copy_from_slice(&(knots.len() as u32).to_le_bytes());
        for part in [&header, &directory, &knots, &vec![0; 4]] {
            bytes.extend(part);
        }
        let total = bytes.len() as u32;
        bytes[8..12].copy_from_slice(&total.to_le_bytes());
        reseal(&mut bytes);
        let error = Table::new(&bytes).err();
        prop_assert!(matches!(error, Some(TableError::Meaning(_))), "{:?}", error);
        use_it(&bytes, 0.0, 0.0, 0.0)?;
    }

    /// A sound table with a few bytes changed and the checksum put right: most still decode, many still pass.
    #[test]
    fn changed_bytes_under_a_right_checksum_are_survived(
        changes in prop::collection::vec((any::<prop::sample::Index>(), any::<u8>()), 1..6),
        in_directory: bool,
        several: bool,
        setpoint in -1.1f32..1.1,
        request in any::<f32>(),
        mean in -2f32..2.0,
    ) {
        let draft = if several {
            draft_with_payloads(16.0)
        } else {
            draft_with_gap(Drive::HeldTip, 60.0)
        };
        let mut bytes = draft.bytes();
        let end = if in_directory { knots_at(&bytes) } else { bytes.len() - 4 };
        for (place, byte) in changes {
            bytes[place.index(end)] = byte;
        }
        reseal(&mut bytes);
        use_it(&bytes, setpoint, request, mean)?;
    }
}
