//! Little-endian numbers out of bytes, at any alignment, and the checksum over them.

use crc::{CRC_32_ISO_HDLC, Crc};

const CRC: Crc<u32> = Crc::<u32>::new(&CRC_32_ISO_HDLC);

/// CRC-32 (ISO-HDLC) of `bytes`.
pub(crate) fn crc32(bytes: &[u8]) -> u32 {
    CRC.checksum(bytes)
}

/// The `N` bytes at `at`, or `None` when they are not all there.
pub(crate) fn array_at<const N: usize>(bytes: &[u8], at: usize) -> Option<[u8; N]> {
    bytes.get(at..)?.first_chunk::<N>().copied()
}

pub(crate) fn u16_at(bytes: &[u8], at: usize) -> Option<u16> {
    array_at(bytes, at).map(u16::from_le_bytes)
}

pub(crate) fn u32_at(bytes: &[u8], at: usize) -> Option<u32> {
    array_at(bytes, at).map(u32::from_le_bytes)
}

/// The `number`-th of consecutive f32 values.
pub(crate) fn float(bytes: &[u8], number: usize) -> Option<f32> {
    array_at(bytes, number.checked_mul(4)?).map(f32::from_le_bytes)
}

/// `len` bytes from `at`, empty when they are not all there.
pub(crate) fn section(bytes: &[u8], at: usize, len: usize) -> &[u8] {
    bytes
        .get(at..)
        .and_then(|rest| rest.get(..len))
        .unwrap_or(&[])
}
