//! Every way in which the bytes of a table can be wrong.

/// Why bytes are not a table. Checked in this order, so that the first reason is the deepest.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum TableError {
    /// Fewer bytes than the prefix and the checksum take.
    TooShort {
        /// The least possible length.
        least: u32,
        /// The length found.
        found: u32,
    },
    /// The first four bytes are not those of a table.
    Magic {
        /// The bytes found.
        found: [u8; 4],
    },
    /// A format version that this program does not read.
    Version {
        /// The version it reads.
        expected: u16,
        /// The version found.
        found: u16,
    },
    /// The lengths in the prefix contradict each other or the bytes given.
    Size {
        /// Which length.
        section: Section,
        /// What the prefix says.
        expected: u32,
        /// What there is.
        found: u32,
    },
    /// The bytes have changed since they were written.
    Crc {
        /// The checksum stored at the end.
        stored: u32,
        /// The checksum of the bytes.
        computed: u32,
    },
    /// The bytes arrived as written, but what they say cannot be.
    Meaning(Fault),
}

/// The lengths that [`TableError::Size`] speaks of.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Section {
    /// Total length against the bytes given.
    Total,
    /// Total length against the sum of the sections.
    Sum,
    /// The reserved word, which must be 0.
    Reserved,
}

/// What a table says that cannot be.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Fault {
    /// The header does not decode.
    HeaderBroken,
    /// Bytes are left after the header.
    HeaderLeftOver {
        /// How many.
        bytes: u32,
    },
    /// A value of the header is outside its physical range.
    HeaderValue {
        /// The field.
        field: &'static str,
        /// Its value.
        value: f32,
    },
    /// The setpoint range is empty or reversed.
    SetpointRange {
        /// Lowest setpoint.
        lo: f32,
        /// Highest setpoint.
        hi: f32,
    },
    /// No slice at all.
    NoSlices,
    /// A record of the directory does not decode.
    DirectoryBroken {
        /// The slice.
        slice: u16,
    },
    /// Bytes are left after the directory's last record.
    DirectoryLeftOver {
        /// How many.
        bytes: u32,
    },
    /// A payload is negative, not finite, or not above that of the slice before.
    Payload {
        /// The slice.
        slice: u16,
        /// Its payload (kg).
        found: f32,
        /// The payload of the slice before (kg).
        previous: Option<f32>,
    },
    /// No slice has the nominal payload.
    NominalPayload {
        /// The nominal payload (kg).
        nominal_kg: f32,
        /// The nearest payload of a slice (kg).
        nearest_kg: f32,
    },
    /// A slice without branches.
    NoBranches {
        /// The slice.
        slice: u16,
    },
    /// A branch is wrong.
    Branch {
        /// The slice.
        slice: u16,
        /// The branch, counted in the slice: its number may be what is wrong.
        branch: u8,
        /// In what way.
        fault: BranchFault,
    },
    /// A stretch is wrong.
    Stretch {
        /// The slice.
        slice: u16,
        /// The stretch, counted in the slice.
        stretch: u8,
        /// In what way.
        fault: StretchFault,
    },
    /// The survey band of a slice is not around 1.
    SurveyBand {
        /// The slice.
        slice: u16,
        /// Least fraction.
        lo: f32,
        /// Largest fraction.
        hi: f32,
    },
    /// A crossing is wrong.
    Crossing {
        /// The slice.
        slice: u16,
        /// The crossing, counted in the slice.
        crossing: u8,
        /// In what way.
        fault: CrossingFault,
    },
    /// Values are left after the last reserves.
    KnotsLeftOver {
        /// How many bytes.
        bytes: u32,
    },
}

/// What is wrong with a branch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum BranchFault {
    /// The number is too large, or not above that of the branch before.
    Number {
        /// The number.
        number: u8,
        /// The number of the branch before.
        previous: Option<u8>,
    },
    /// The branch of this number is stable in one slice and unstable in another: it cannot be the same.
    Stability {
        /// The number.
        number: u8,
        /// Its Morse index here.
        index: u8,
    },
    /// An end or an anchor is not finite, or larger than 1e9.
    NotFinite,
    /// The cover is empty or reversed.
    EmptyCover {
        /// Lower end.
        from: f32,
        /// Upper end.
        to: f32,
    },
    /// The anchors lie inside the cover.
    Anchors {
        /// Lower anchor.
        anchor_from: f32,
        /// Lower end of the cover.
        from: f32,
        /// Upper end of the cover.
        to: f32,
        /// Upper anchor.
        anchor_to: f32,
    },
    /// The cover reaches beyond the setpoint range of the header.
    OutsideRange {
        /// Lower end of the cover.
        from: f32,
        /// Upper end of the cover.
        to: f32,
        /// Lowest setpoint of the table.
        lo: f32,
        /// Highest setpoint of the table.
        hi: f32,
    },
    /// An unstable branch has exits.
    ExitOfUnstable {
        /// The exits, one bit each.
        exits: u32,
    },
    /// An exit is not a branch of index 1 in this slice.
    Exit {
        /// The number it refers to.
        exit: u8,
    },
    /// Fewer than two knots.
    TooFewKnots {
        /// How many.
        knots: u16,
    },
    /// The knots end before those of this branch do.
    KnotsMissing {
        /// Bytes that the branch takes.
        expected: u32,
        /// Bytes that are left.
        found: u32,
    },
    /// A knot value is not finite, or larger than 1e9.
    Knot {
        /// The knot.
        knot: u16,
        /// The place in the knot, 0 for t.
        place: u8,
    },
    /// The parameter does not increase.
    KnotOrder {
        /// The knot.
        knot: u16,
        /// The parameter of the knot before.
        previous: f32,
        /// Its own parameter.
        t: f32,
    },
    /// The knots do not reach the ends of the cover.
    KnotCover {
        /// Parameter of the first knot.
        first: f32,
        /// Parameter of the lower end.
        begin: f32,
        /// Parameter of the last knot.
        last: f32,
        /// Parameter of the upper end.
        end: f32,
    },
}

/// What is wrong with a stretch.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum StretchFault {
    /// The slice has no such branch.
    NoSuchBranch {
        /// Its number.
        branch: u8,
    },
    /// The branch is unstable.
    UnstableBranch {
        /// Its number.
        branch: u8,
        /// Its Morse index.
        index: u8,
    },
    /// An end or a limit is not finite, or larger than 1e9.
    NotFinite,
    /// The stretch is empty or reversed.
    Empty {
        /// Lower end.
        from: f32,
        /// Upper end.
        to: f32,
    },
    /// The stretch reaches beyond the cover of its branch.
    OutsideBranch {
        /// Lower end.
        from: f32,
        /// Upper end.
        to: f32,
        /// Lower end of the cover.
        branch_from: f32,
        /// Upper end of the cover.
        branch_to: f32,
    },
    /// The stretches are not sorted by branch.
    BranchOrder {
        /// Branch of the stretch before.
        previous: u8,
        /// Its own branch.
        branch: u8,
    },
    /// The stretch begins before the one below it has ended.
    Overlap {
        /// Upper end of the one below.
        previous_to: f32,
        /// Lower end of this one.
        from: f32,
    },
    /// Fewer than two points of reserves.
    TooFewPoints {
        /// How many.
        points: u8,
    },
    /// The values end before the reserves of this stretch do.
    ReservesMissing {
        /// Bytes that the stretch takes.
        expected: u32,
        /// Bytes that are left.
        found: u32,
    },
    /// A reserve is not finite or larger than 1e9, or a strain is negative.
    Reserve {
        /// The point.
        point: u8,
        /// The place in the point.
        place: u8,
    },
}

/// What is wrong with a crossing.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum CrossingFault {
    /// It ends where it begins.
    SameBranch {
        /// The branch.
        branch: u8,
    },
    /// The slice has no such branch, or the arm cannot rest on it.
    NotStable {
        /// Its number.
        branch: u8,
    },
    /// A value is not finite or outside its range.
    Value {
        /// The field.
        field: &'static str,
        /// Its value.
        value: f32,
    },
    /// The couples of an applied-couple drive do not swing a tip about.
    Drive,
    /// More trials succeeded than were made.
    Trials {
        /// Trials that succeeded.
        successes: u16,
        /// Trials made.
        trials: u16,
    },
    /// It is allowed although not every trial succeeded.
    AllowedWithFailures {
        /// Trials that succeeded.
        successes: u16,
        /// Trials made.
        trials: u16,
    },
    /// It is allowed and ends where the arm may not be held.
    EndsOutsideStretches {
        /// Where it ends.
        rest_setpoint: f32,
    },
}

impl From<Fault> for TableError {
    fn from(fault: Fault) -> Self {
        Self::Meaning(fault)
    }
}
