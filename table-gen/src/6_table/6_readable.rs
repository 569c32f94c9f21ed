//! A table's content to read: what `table.json` holds and `show` prints, taken from the bytes the firmware reads.

use firmware_core::{BranchEntry, Header, Stretch, Table};
use serde::Serialize;

/// Everything in a table.
#[derive(Clone, Debug, Serialize)]
pub struct Readable<'a> {
    /// Version of the format.
    pub format_version: u16,
    /// Length in bytes.
    pub bytes: usize,
    /// The header.
    pub header: Header<'a>,
    /// One slice for each payload.
    pub slices: Vec<ReadableSlice>,
}

/// The arm with one payload.
#[derive(Clone, Debug, Serialize)]
pub struct ReadableSlice {
    /// Payload (kg).
    pub payload_kg: f32,
    /// Its branches.
    pub branches: Vec<ReadableBranch>,
    /// Setpoints that may be commanded.
    pub stretches: Vec<Stretch>,
}

/// One branch.
#[derive(Clone, Debug, Serialize)]
pub struct ReadableBranch {
    /// Its number.
    pub number: u8,
    /// Its directory entry.
    pub entry: BranchEntry,
    /// Names of the values of a knot.
    pub knot_values: Vec<&'static str>,
    /// Its knots.
    pub knots: Vec<Vec<f32>>,
}

/// Names of the values of a knot in the order of the format.
const KNOT_VALUES: [&str; 13] = [
    "t",
    "mean_angle_rad",
    "mean_angle_slope",
    "conjugate",
    "conjugate_slope",
    "energy_j",
    "energy_slope",
    "tip_x_m",
    "tip_x_slope",
    "tip_y_m",
    "tip_y_slope",
    "restoring_n_m_per_rad",
    "restoring_slope",
];

impl<'a> Readable<'a> {
    /// The content of a checked table.
    ///
    /// # Errors
    /// [`firmware_core::TableError`] when the header no longer decodes.
    pub fn new(table: &Table<'a>) -> Result<Self, firmware_core::TableError> {
        let slices = table
            .slices()
            .map(|slice| ReadableSlice {
                payload_kg: slice.payload_kg,
                branches: slice
                    .branches()
                    .map(|branch| {
                        let width = branch.entry.floats_per_knot();
                        let values: Vec<f32> = branch.knot_values().collect();
                        ReadableBranch {
                            number: branch.number,
                            entry: branch.entry,
                            knot_values: KNOT_VALUES[..width].to_vec(),
                            knots: values.chunks(width).map(<[f32]>::to_vec).collect(),
                        }
                    })
                    .collect(),
                stretches: slice
                    .branches()
                    .flat_map(|branch| slice.stretches(branch.number))
                    .map(|usable| usable.entry)
                    .collect(),
            })
            .collect();
        Ok(Self {
            format_version: firmware_core::format::VERSION,
            bytes: table.byte_len(),
            header: table.header()?,
            slices,
        })
    }
}
