//! Crossings into a finished table: everything else in it stays as it is.

use super::TabulationError;
use firmware_core::format::write::{
    BranchContents, Contents, SliceContents, StretchContents, buffer_len, write,
};
use firmware_core::{BranchEntry, Crossing, Slice, Stretch, SurveyBand, Table};

/// What one slice is to say about crossings.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct SliceCrossings {
    /// Stiffness for which they were tried.
    pub survey: SurveyBand,
    /// The crossings, at most 255.
    pub crossings: Vec<Crossing>,
}

/// The table in `bytes` with these crossings instead of its own, slice by slice; a slice beyond the list gets none.
///
/// # Errors
/// [`TabulationError::Refused`] when `bytes` or the result does not pass the firmware's checks, [`TabulationError::Write`] when
/// the format cannot hold the result.
pub fn with_crossings(
    bytes: &[u8],
    crossings: &[SliceCrossings],
) -> Result<Vec<u8>, TabulationError> {
    let table = Table::new(bytes).map_err(TabulationError::Refused)?;
    let header = table.header().map_err(TabulationError::Refused)?;
    let values: Vec<Values> = table.slices().map(|slice| Values::of(&slice)).collect();
    let branches: Vec<Vec<BranchContents>> = values.iter().map(Values::branches).collect();
    let stretches: Vec<Vec<StretchContents>> = values.iter().map(Values::stretches).collect();
    let none = SliceCrossings::default();
    let slices: Vec<SliceContents> = values
        .iter()
        .enumerate()
        .map(|(number, values)| {
            let own = crossings.get(number).unwrap_or(&none);
            SliceContents {
                payload_kg: values.payload_kg,
                branches: &branches[number],
                stretches: &stretches[number],
                survey: own.survey,
                crossings: &own.crossings,
            }
        })
        .collect();
    let contents = Contents {
        header,
        slices: &slices,
    };
    let mut out = vec![0; buffer_len(&contents)];
    let len = write(&contents, &mut out).map_err(TabulationError::Write)?;
    out.truncate(len);
    Table::new(&out).map_err(TabulationError::Refused)?;
    Ok(out)
}

/// The content of one slice.
struct Values {
    payload_kg: f32,
    branches: Vec<(BranchEntry, Vec<f32>)>,
    stretches: Vec<(Stretch, Vec<f32>)>,
}

impl Values {
    fn of(slice: &Slice) -> Self {
        Self {
            payload_kg: slice.payload_kg,
            branches: slice
                .branches()
                .map(|branch| (branch.entry, branch.knot_values().collect()))
                .collect(),
            stretches: slice
                .branches()
                .flat_map(|branch| slice.stretches(branch.number))
                .map(|usable| (usable.entry, usable.reserve_values().collect()))
                .collect(),
        }
    }

    fn branches(&self) -> Vec<BranchContents<'_>> {
        let each = self.branches.iter();
        each.map(|(entry, knots)| BranchContents {
            entry: *entry,
            knots,
        })
        .collect()
    }

    fn stretches(&self) -> Vec<StretchContents<'_>> {
        let each = self.stretches.iter();
        each.map(|(entry, reserves)| StretchContents {
            entry: *entry,
            reserves,
        })
        .collect()
    }
}
