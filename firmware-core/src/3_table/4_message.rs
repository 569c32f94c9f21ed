//! What the errors of a table say to people.

use core::fmt;

use super::error::{BranchFault, CrossingFault, Fault, Section, StretchFault, TableError};
use crate::format::MOST_BRANCHES;
use crate::words::Word::{F, N, T, X};
use crate::words::Words;

impl fmt::Display for TableError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::TooShort { least, found } => f.say(&[
                T("a table has at least "),
                N(least),
                T(" bytes, these are "),
                N(found),
                T("; give the whole file"),
            ]),
            Self::Magic { found } => f.say(&[
                T("not a table: the first four bytes are "),
                X(u32::from_be_bytes(found)),
                T(" instead of \"WTHY\""),
            ]),
            Self::Version { expected, found } => f.say(&[
                T("the table has format version "),
                N(found.into()),
                T(", this program reads version "),
                N(expected.into()),
                T("; build the table again"),
            ]),
            Self::Size {
                section,
                expected,
                found,
            } => f.say(&[
                T(match section {
                    Section::Total => {
                        "the table is cut short or has bytes added: its length should be "
                    }
                    Section::Sum => {
                        "the lengths of the table contradict each other: they should sum to "
                    }
                    Section::Reserved => "the reserved word of the table should be ",
                }),
                N(expected),
                T(" and is "),
                N(found),
                T("; build or transfer the table again"),
            ]),
            Self::Crc { stored, computed } => f.say(&[
                T("the table is damaged: checksum "),
                X(computed),
                T(" instead of "),
                X(stored),
                T("; transfer it again"),
            ]),
            Self::Meaning(fault) => {
                f.say(&[T("the table makes no sense: ")])?;
                fmt::Display::fmt(&fault, f)?;
                f.say(&[T("; build it again")])
            }
        }
    }
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::HeaderBroken => f.say(&[T("the header does not decode")]),
            Self::HeaderLeftOver { bytes } => {
                f.say(&[N(bytes), T(" bytes are left after the header")])
            }
            Self::HeaderValue { field, value } => f.say(&[
                T("header value "),
                T(field),
                T(" = "),
                F(value),
                T(" is outside its range"),
            ]),
            Self::SetpointRange { lo, hi } => f.say(&[
                T("the setpoint range "),
                F(lo),
                T(" to "),
                F(hi),
                T(" is empty"),
            ]),
            Self::NoSlices => f.say(&[T("there is no slice")]),
            Self::DirectoryBroken { slice } => f.say(&[
                T("the directory of slice "),
                N(slice.into()),
                T(" does not decode"),
            ]),
            Self::DirectoryLeftOver { bytes } => {
                f.say(&[N(bytes), T(" bytes are left after the directory")])
            }
            Self::Payload {
                slice,
                found,
                previous,
            } => f.say(&[
                T("the payload of slice "),
                N(slice.into()),
                T(" is "),
                F(found),
                T(" kg; it must be finite and above "),
                F(previous.unwrap_or(0.0)),
                T(" kg"),
            ]),
            Self::NominalPayload {
                nominal_kg,
                nearest_kg,
            } => f.say(&[
                T("no slice has the nominal payload "),
                F(nominal_kg),
                T(" kg, the nearest has "),
                F(nearest_kg),
                T(" kg"),
            ]),
            Self::NoBranches { slice } => {
                f.say(&[T("slice "), N(slice.into()), T(" has no branches")])
            }
            Self::Branch {
                slice,
                branch,
                fault,
            } => {
                f.say(&[
                    T("slice "),
                    N(slice.into()),
                    T(", branch "),
                    N(branch.into()),
                    T(": "),
                ])?;
                fmt::Display::fmt(&fault, f)
            }
            Self::Stretch {
                slice,
                stretch,
                fault,
            } => {
                f.say(&[
                    T("slice "),
                    N(slice.into()),
                    T(", stretch "),
                    N(stretch.into()),
                    T(": "),
                ])?;
                fmt::Display::fmt(&fault, f)
            }
            Self::SurveyBand { slice, lo, hi } => f.say(&[
                T("slice "),
                N(slice.into()),
                T(": the survey band "),
                F(lo),
                T(" to "),
                F(hi),
                T(" should be positive and include 1"),
            ]),
            Self::Crossing {
                slice,
                crossing,
                fault,
            } => {
                f.say(&[
                    T("slice "),
                    N(slice.into()),
                    T(", crossing "),
                    N(crossing.into()),
                    T(": "),
                ])?;
                fmt::Display::fmt(&fault, f)
            }
            Self::KnotsLeftOver { bytes } => {
                f.say(&[N(bytes), T(" bytes are left after the reserves")])
            }
        }
    }
}

impl fmt::Display for BranchFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::Number { number, previous } => {
                f.say(&[T("its number "), N(number.into())])?;
                match previous {
                    Some(previous) => f.say(&[
                        T(" is not above "),
                        N(previous.into()),
                        T(", that of the branch before, or not below "),
                    ])?,
                    None => f.say(&[T(" is not below ")])?,
                }
                f.say(&[N(MOST_BRANCHES.into())])
            }
            Self::Stability { number, index } => f.say(&[
                T("number "),
                N(number.into()),
                T(" has index "),
                N(index.into()),
                T(match index {
                    0 => " and is unstable in a slice before",
                    _ => " and is stable in a slice before",
                }),
            ]),
            Self::NotFinite => f.say(&[T("an end or anchor is not finite or above 1e9")]),
            Self::EmptyCover { from, to } => {
                f.say(&[T("it covers nothing: "), F(from), T(" to "), F(to)])
            }
            Self::Anchors {
                anchor_from,
                from,
                to,
                anchor_to,
            } => f.say(&[
                T("its anchors "),
                F(anchor_from),
                T(" and "),
                F(anchor_to),
                T(" lie inside its cover "),
                F(from),
                T(" to "),
                F(to),
            ]),
            Self::OutsideRange { from, to, lo, hi } => f.say(&[
                T("its cover "),
                F(from),
                T(" to "),
                F(to),
                T(" leaves the setpoint range "),
                F(lo),
                T(" to "),
                F(hi),
            ]),
            Self::ExitOfUnstable { exits } => {
                f.say(&[T("it is unstable and has exits "), X(exits)])
            }
            Self::Exit { exit } => f.say(&[
                T("its exit "),
                N(exit.into()),
                T(" is not a branch of index 1 in this slice"),
            ]),
            Self::TooFewKnots { knots } => {
                f.say(&[N(knots.into()), T(" knots; it needs at least 2")])
            }
            Self::KnotsMissing { expected, found } => f.say(&[
                T("its knots take "),
                N(expected),
                T(" bytes, "),
                N(found),
                T(" are left"),
            ]),
            Self::Knot { knot, place } => f.say(&[
                T("value "),
                N(place.into()),
                T(" of knot "),
                N(knot.into()),
                T(" is not finite or above 1e9"),
            ]),
            Self::KnotOrder { knot, previous, t } => f.say(&[
                T("knot "),
                N(knot.into()),
                T(" has parameter "),
                F(t),
                T(" after "),
                F(previous),
            ]),
            Self::KnotCover {
                first,
                begin,
                last,
                end,
            } => f.say(&[
                T("its knots reach from "),
                F(first),
                T(" to "),
                F(last),
                T(" and should reach from "),
                F(begin),
                T(" to "),
                F(end),
            ]),
        }
    }
}

impl fmt::Display for StretchFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::NoSuchBranch { branch } => f.say(&[T("there is no branch "), N(branch.into())]),
            Self::UnstableBranch { branch, index } => f.say(&[
                T("branch "),
                N(branch.into()),
                T(" is unstable, of index "),
                N(index.into()),
            ]),
            Self::NotFinite => f.say(&[T("an end or limit is not finite or above 1e9")]),
            Self::Empty { from, to } => f.say(&[T("it is empty: "), F(from), T(" to "), F(to)]),
            Self::OutsideBranch {
                from,
                to,
                branch_from,
                branch_to,
            } => f.say(&[
                F(from),
                T(" to "),
                F(to),
                T(" leaves its branch, "),
                F(branch_from),
                T(" to "),
                F(branch_to),
            ]),
            Self::BranchOrder { previous, branch } => f.say(&[
                T("branch "),
                N(branch.into()),
                T(" comes after branch "),
                N(previous.into()),
            ]),
            Self::Overlap { previous_to, from } => f.say(&[
                T("it begins at "),
                F(from),
                T(", before the one below ends at "),
                F(previous_to),
            ]),
            Self::TooFewPoints { points } => f.say(&[
                N(points.into()),
                T(" points of reserves; it needs at least 2"),
            ]),
            Self::ReservesMissing { expected, found } => f.say(&[
                T("its reserves take "),
                N(expected),
                T(" bytes, "),
                N(found),
                T(" are left"),
            ]),
            Self::Reserve { point, place } => f.say(&[
                T("value "),
                N(place.into()),
                T(" of its reserves at point "),
                N(point.into()),
                T(" is not finite, above 1e9, or a negative strain"),
            ]),
        }
    }
}

impl fmt::Display for CrossingFault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match *self {
            Self::SameBranch { branch } => f.say(&[
                T("it ends on branch "),
                N(branch.into()),
                T(", where it begins"),
            ]),
            Self::NotStable { branch } => f.say(&[
                T("the arm cannot rest on branch "),
                N(branch.into()),
                T(" in this slice"),
            ]),
            Self::Value { field, value } => {
                f.say(&[T(field), T(" = "), F(value), T(" is outside its range")])
            }
            Self::Drive => f.say(&[T("only a held tip can be swung over")]),
            Self::Trials { successes, trials } => f.say(&[
                N(successes.into()),
                T(" successes in "),
                N(trials.into()),
                T(" trials"),
            ]),
            Self::AllowedWithFailures { successes, trials } => f.say(&[
                T("it is allowed although only "),
                N(successes.into()),
                T(" of "),
                N(trials.into()),
                T(" trials succeeded"),
            ]),
            Self::EndsOutsideStretches { rest_setpoint } => f.say(&[
                T("it is allowed and ends at setpoint "),
                F(rest_setpoint),
                T(", which is in no stretch of its branch"),
            ]),
        }
    }
}

impl core::error::Error for TableError {}
