//! Tables that arrive as written and say what cannot be.

use firmware_core::format::RESERVES;
use firmware_core::table::{BranchFault, Fault, StretchFault};
use firmware_core::{Drive, Table, TableError, UNBOUNDED};

use crate::arm::{Draft, draft, reseal};

fn fault_of(change: impl FnOnce(&mut Draft)) -> Fault {
    let mut draft = draft(Drive::HeldTip, 60.0);
    change(&mut draft);
    match Table::new(&draft.bytes()) {
        Err(TableError::Meaning(fault)) => {
            assert!(!fault.to_string().is_empty());
            fault
        }
        other => panic!("expected a fault of meaning, found {other:?}"),
    }
}

fn branch_fault_of(branch: u8, change: impl FnOnce(&mut Draft)) -> BranchFault {
    match fault_of(change) {
        Fault::Branch {
            slice: 0,
            branch: found,
            fault,
        } if found == branch => fault,
        other => panic!("expected a fault of branch {branch}, found {other:?}"),
    }
}

fn stretch_fault_of(stretch: u8, change: impl FnOnce(&mut Draft)) -> StretchFault {
    match fault_of(change) {
        Fault::Stretch {
            slice: 0,
            stretch: found,
            fault,
        } if found == stretch => fault,
        other => panic!("expected a fault of stretch {stretch}, found {other:?}"),
    }
}

#[test]
fn header_values_out_of_range() {
    type Change = fn(&mut Draft, f32);
    let positive: [(&str, Change); 6] = [
        ("gamma", |d, v| d.header.gamma = v),
        ("length_m", |d, v| d.header.length_m = v),
        ("mass_kg", |d, v| d.header.mass_kg = v),
        ("energy_scale_j", |d, v| d.header.energy_scale_j = v),
        ("offset_m", |d, v| d.header.offset_m = v),
        ("max_tension_n", |d, v| d.header.max_tension_n = v),
    ];
    let not_negative: [(&str, Change); 11] = [
        ("nominal_payload_kg", |d, v| d.header.nominal_payload_kg = v),
        ("pretension_n", |d, v| d.header.pretension_n = v),
        ("worst_error.mean_angle_rad", |d, v| {
            d.header.worst_error.mean_angle_rad = v;
        }),
        ("worst_error.tip_angle_rad", |d, v| {
            d.header.worst_error.tip_angle_rad = v;
        }),
        ("worst_error.couple_n_m", |d, v| {
            d.header.worst_error.couple_n_m = v;
        }),
        ("worst_error.energy_j", |d, v| {
            d.header.worst_error.energy_j = v
        }),
        ("worst_error.tip_m", |d, v| d.header.worst_error.tip_m = v),
        ("worst_error.barrier_j", |d, v| {
            d.header.worst_error.barrier_j = v;
        }),
        ("worst_error.restoring_n_m_per_rad", |d, v| {
            d.header.worst_error.restoring_n_m_per_rad = v;
        }),
        ("deducted.setpoint", |d, v| d.header.deducted.setpoint = v),
        ("deducted.tension_n", |d, v| d.header.deducted.tension_n = v),
    ];
    let anything: [(&str, Change); 3] = [
        ("tilt_rad", |d, v| d.header.tilt_rad = v),
        ("setpoint_lo", |d, v| d.header.setpoint_lo = v),
        ("setpoint_hi", |d, v| d.header.setpoint_hi = v),
    ];
    let never = [f32::NAN, f32::INFINITY, f32::NEG_INFINITY, 2e9];
    let check = |name: &str, change: Change, bad: &[f32]| {
        for value in bad {
            match fault_of(|d| change(d, *value)) {
                Fault::HeaderValue {
                    field,
                    value: found,
                } => {
                    assert_eq!((field, found.to_bits()), (name, value.to_bits()));
                }
                other => panic!("{name} = {value}: {other:?}"),
            }
        }
    };
    for (name, change) in positive {
        check(name, change, &never);
        check(name, change, &[0.0, -1.0]);
    }
    for (name, change) in not_negative {
        check(name, change, &never);
        check(name, change, &[-1e-6]);
    }
    for (name, change) in anything {
        check(name, change, &never);
    }
    check("tilt_rad", |d, v| d.header.tilt_rad = v, &[3.15, -3.15]);
    check("pretension_n", |d, v| d.header.pretension_n = v, &[60.5]);
    check("modes", |d, v| d.header.modes = v as u8, &[0.0]);
    let reversed = fault_of(|d| d.header.setpoint_hi = -1.0);
    assert_eq!(reversed, Fault::SetpointRange { lo: -1.0, hi: -1.0 });
}

#[test]
fn slices_that_do_not_add_up() {
    assert_eq!(fault_of(|d| d.slices.clear()), Fault::NoSlices);
    let empty = fault_of(|d| {
        d.slices[0].branches.clear();
        d.slices[0].stretches.clear();
    });
    assert_eq!(empty, Fault::NoBranches { slice: 0 });
    let equal = fault_of(|d| {
        let again = d.slices[0].clone();
        d.slices.push(again);
    });
    let expected = Fault::Payload {
        slice: 1,
        found: 0.06,
        previous: Some(0.06),
    };
    assert_eq!(equal, expected);
    let nominal = fault_of(|d| d.header.nominal_payload_kg = 0.061);
    let expected = Fault::NominalPayload {
        nominal_kg: 0.061,
        nearest_kg: 0.06,
    };
    assert_eq!(nominal, expected);
    for payload in [-0.1, f32::NAN, f32::INFINITY] {
        let fault = fault_of(|d| d.slices[0].payload_kg = payload);
        assert!(matches!(
            fault,
            Fault::Payload {
                slice: 0,
                previous: None,
                ..
            }
        ));
    }
}

#[test]
fn numbers_that_are_no_labels() {
    let number = |number: u8, previous| BranchFault::Number { number, previous };
    let fault = branch_fault_of(2, |d| d.slices[0].branches[2].0.number = 32);
    assert_eq!(fault, number(32, Some(1)));
    let fault = branch_fault_of(0, |d| d.slices[0].branches[0].0.number = 255);
    assert_eq!(fault, number(255, None));
    let fault = branch_fault_of(1, |d| {
        d.slices[0].branches[0].0.exits = 0;
        d.slices[0].branches[1].0.number = 0;
    });
    assert_eq!(fault, number(0, Some(0)));
    let fault = branch_fault_of(1, |d| d.slices[0].branches[0].0.number = 9);
    assert_eq!(fault, number(1, Some(9)));
    // The pass of one slice cannot be the well of another.
    let swapped = |d: &mut Draft| {
        let mut heavier = d.slices[0].heavier(0.08, 1.2);
        heavier.branches.drain(..2);
        heavier.branches[0].0.number = 1;
        heavier.branches[0].0.exits = 0;
        heavier.stretches.clear();
        d.slices.push(heavier);
    };
    let expected = Fault::Branch {
        slice: 1,
        branch: 0,
        fault: BranchFault::Stability {
            number: 1,
            index: 0,
        },
    };
    assert_eq!(fault_of(swapped), expected);
}

#[test]
fn branches_that_cannot_be() {
    type Change = fn(&mut firmware_core::BranchEntry);
    let fault = |change: Change| branch_fault_of(0, |d| change(&mut d.slices[0].branches[0].0));
    assert_eq!(fault(|e| e.from = f32::NAN), BranchFault::NotFinite);
    assert_eq!(
        fault(|e| e.anchor_to = f32::INFINITY),
        BranchFault::NotFinite
    );
    let empty = fault(|e| e.from = e.to);
    assert!(matches!(empty, BranchFault::EmptyCover { .. }));
    let anchors = fault(|e| e.anchor_from = e.from + 0.1);
    assert!(matches!(anchors, BranchFault::Anchors { .. }));
    let anchors = fault(|e| e.anchor_to = e.to - 0.1);
    assert!(matches!(anchors, BranchFault::Anchors { .. }));
    let outside = fault(|e| {
        e.from = -1.001;
        e.anchor_from = -1.001;
    });
    assert!(matches!(
        outside,
        BranchFault::OutsideRange { from: -1.001, .. }
    ));
    assert_eq!(fault(|e| e.exits = 0b1), BranchFault::Exit { exit: 0 });
    assert_eq!(fault(|e| e.exits = 0b1000), BranchFault::Exit { exit: 3 });
    // Exits go by number, not by place.
    let renumbered = branch_fault_of(0, |d| {
        d.slices[0].branches[1].0.number = 5;
        d.slices[0].branches[2].0.number = 6;
        d.slices[0].stretches[1].0.branch = 6;
    });
    assert_eq!(renumbered, BranchFault::Exit { exit: 1 });
    assert_eq!(fault(|e| e.exits = 1 << 31), BranchFault::Exit { exit: 31 });
    let unstable = branch_fault_of(1, |d| d.slices[0].branches[1].0.exits = 2);
    assert_eq!(unstable, BranchFault::ExitOfUnstable { exits: 2 });
    let one_knot = branch_fault_of(0, |d| {
        let (entry, knots) = &mut d.slices[0].branches[0];
        entry.knots = 1;
        knots.truncate(13);
    });
    assert_eq!(one_knot, BranchFault::TooFewKnots { knots: 1 });
}

#[test]
fn knots_that_cannot_be() {
    let fault =
        |at: usize, value: f32| branch_fault_of(2, |d| d.slices[0].branches[2].1[at] = value);
    for value in [f32::NAN, f32::INFINITY, -2e9] {
        let expected = BranchFault::Knot { knot: 2, place: 3 };
        assert_eq!(fault(2 * 13 + 3, value), expected);
    }
    assert!(matches!(
        fault(13, -0.1),
        BranchFault::KnotOrder { knot: 1, .. }
    ));
    let equal = branch_fault_of(2, |d| {
        let knots = &mut d.slices[0].branches[2].1;
        knots[13] = knots[0];
    });
    assert!(matches!(equal, BranchFault::KnotOrder { knot: 1, .. }));
    assert!(matches!(fault(0, 0.01), BranchFault::KnotCover { .. }));
    assert!(matches!(
        fault(32 * 13, 0.99),
        BranchFault::KnotCover { .. }
    ));
}

#[test]
fn stretches_that_cannot_be() {
    type Change = fn(&mut firmware_core::Stretch);
    let fault = |change: Change| stretch_fault_of(1, |d| change(&mut d.slices[0].stretches[1].0));
    let missing = fault(|s| s.branch = 7);
    assert_eq!(missing, StretchFault::NoSuchBranch { branch: 7 });
    let unstable = fault(|s| s.branch = 1);
    let expected = StretchFault::UnstableBranch {
        branch: 1,
        index: 1,
    };
    assert_eq!(unstable, expected);
    assert_eq!(fault(|s| s.to = f32::NAN), StretchFault::NotFinite);
    assert_eq!(
        fault(|s| s.to_limit.value = f32::NAN),
        StretchFault::NotFinite
    );
    assert!(matches!(
        fault(|s| s.to = s.from),
        StretchFault::Empty { .. }
    ));
    let outside = fault(|s| s.from = -0.4);
    assert!(matches!(outside, StretchFault::OutsideBranch { .. }));
    let order = stretch_fault_of(1, |d| d.slices[0].stretches.reverse());
    let expected = StretchFault::BranchOrder {
        previous: 2,
        branch: 0,
    };
    assert_eq!(order, expected);
    let touching = stretch_fault_of(2, |d| {
        let mut above = d.slices[0].stretches[1].clone();
        d.slices[0].stretches[1].0.to = 0.2;
        above.0.from = 0.2;
        d.slices[0].stretches.push(above);
    });
    let expected = StretchFault::Overlap {
        previous_to: 0.2,
        from: 0.2,
    };
    assert_eq!(touching, expected);
}

#[test]
fn reserves_that_cannot_be() {
    let one_point = stretch_fault_of(1, |d| {
        let (stretch, values) = &mut d.slices[0].stretches[1];
        stretch.points = 1;
        values.truncate(RESERVES);
    });
    assert_eq!(one_point, StretchFault::TooFewPoints { points: 1 });
    let fault =
        |at: usize, value: f32| stretch_fault_of(1, |d| d.slices[0].stretches[1].1[at] = value);
    let never = [f32::NAN, f32::INFINITY, f32::NEG_INFINITY, 2e9];
    for value in never {
        for place in 0..RESERVES {
            let expected = StretchFault::Reserve {
                point: 3,
                place: place as u8,
            };
            assert_eq!(fault(3 * RESERVES + place, value), expected);
        }
    }
    // The strain alone is never negative, and "no bound" is allowed.
    let expected = StretchFault::Reserve { point: 0, place: 8 };
    assert_eq!(fault(8, -1e-6), expected);
    let mut sound = draft(Drive::HeldTip, 60.0);
    sound.slices[0].stretches[1].1[..8]
        .copy_from_slice(&[-0.5, -0.5, 0.0, 0.0, 1.0, 1e9, UNBOUNDED, UNBOUNDED]);
    assert!(Table::new(&sound.bytes()).is_ok());
}

/// Adds to (or takes from) one section and its length, and puts total length and checksum right.
fn resized(bytes: &[u8], length_at: usize, width: usize, end: usize, by: isize) -> Vec<u8> {
    let mut bytes = bytes.to_vec();
    if by > 0 {
        bytes.splice(end..end, vec![0; by as usize]);
    } else {
        bytes.drain(end.wrapping_add_signed(by)..end);
    }
    for (at, width) in [(length_at, width), (8, 4)] {
        let mut field = [0; 4];
        field[..width].copy_from_slice(&bytes[at..at + width]);
        let changed = u32::from_le_bytes(field).wrapping_add_signed(by as i32);
        bytes[at..at + width].copy_from_slice(&changed.to_le_bytes()[..width]);
    }
    reseal(&mut bytes);
    bytes
}

#[test]
fn sections_that_are_too_long_or_too_short() {
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    let field = |at: usize| usize::from(u16::from_le_bytes([bytes[at], bytes[at + 1]]));
    let header_end = 24 + field(12);
    let directory_end = header_end + field(14);
    let knots_end = bytes.len() - 4;
    let fault = |bytes: &[u8]| match Table::new(bytes) {
        Err(TableError::Meaning(fault)) => fault,
        other => panic!("expected a fault of meaning, found {other:?}"),
    };
    let longer = |at, width, end| fault(&resized(&bytes, at, width, end, 4));
    let shorter = |at, width, end| fault(&resized(&bytes, at, width, end, -4));
    assert_eq!(
        longer(12, 2, header_end),
        Fault::HeaderLeftOver { bytes: 4 }
    );
    assert_eq!(shorter(12, 2, header_end), Fault::HeaderBroken);
    let left = Fault::DirectoryLeftOver { bytes: 4 };
    assert_eq!(longer(14, 2, directory_end), left);
    let broken = Fault::DirectoryBroken { slice: 0 };
    assert_eq!(shorter(14, 2, directory_end), broken);
    let left = Fault::KnotsLeftOver { bytes: 4 };
    assert_eq!(longer(16, 4, knots_end), left);
    let missing = shorter(16, 4, knots_end);
    let expected = StretchFault::ReservesMissing {
        expected: 7 * 36,
        found: 7 * 36 - 4,
    };
    let expected = Fault::Stretch {
        slice: 0,
        stretch: 1,
        fault: expected,
    };
    assert_eq!(missing, expected);
    // Without any reserves the knots themselves are too few.
    let reserves = 11 * 36;
    let missing = fault(&resized(&bytes, 16, 4, knots_end, -reserves - 4));
    assert!(matches!(
        missing,
        Fault::Branch {
            branch: 2,
            fault: BranchFault::KnotsMissing { .. },
            ..
        }
    ));
}
