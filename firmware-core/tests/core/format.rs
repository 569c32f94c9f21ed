//! Writer against reader.

use firmware_core::format::write::{
    BranchContents, Contents, Part, SliceContents, StretchContents, WriteError, buffer_len, write,
};
use firmware_core::{BranchEntry, Drive, SurveyBand, Table};

use crate::arm::{crc32, draft, draft_with_gap};

#[test]
fn what_is_written_is_read() {
    let mut draft = draft_with_gap(Drive::AppliedCouple, 200.0);
    let mut heavier = draft.slices[0].heavier(0.08, 1.2);
    // Numbers are labels: this slice lacks one and has one that the other lacks.
    heavier.branches[2].0.number = 9;
    for (stretch, _) in &mut heavier.stretches[1..] {
        stretch.branch = 9;
    }
    draft.slices.push(heavier);
    let bytes = draft.bytes();
    let table = Table::new(&bytes).expect("a sound table");
    assert_eq!(table.header(), Ok(draft.header));
    assert_eq!(table.byte_len(), bytes.len());
    assert_eq!(table.slices().count(), draft.slices.len());
    for (slice, written) in table.slices().zip(&draft.slices) {
        assert_eq!(slice.payload_kg, written.payload_kg);
        assert_eq!(usize::from(slice.branch_count()), written.branches.len());
        assert_eq!(slice.branches().count(), written.branches.len());
        for (branch, (entry, knots)) in slice.branches().zip(&written.branches) {
            assert_eq!(branch.entry, *entry);
            assert!(branch.knot_values().eq(knots.iter().copied()));
            assert_eq!(
                branch.knot_value(1, 0),
                Some(knots[entry.floats_per_knot()])
            );
            assert_eq!(branch.knot_value(0, entry.floats_per_knot()), None);
            assert_eq!(branch.knot_value(entry.knots, 0), None);
        }
        assert_eq!(usize::from(slice.stretch_count()), written.stretches.len());
        for number in 0..=32 {
            let entry = written.branches.iter().find(|(e, _)| e.number == number);
            let found = slice.branch(number).map(|branch| branch.entry);
            assert_eq!(found, entry.map(|(entry, _)| *entry));
            let mut found = slice.stretches(number);
            for (entry, values) in written.stretches.iter().filter(|(s, _)| s.branch == number) {
                let usable = found.next().expect("as many as written");
                assert_eq!(usable.entry, *entry);
                assert!(usable.reserve_values().eq(values.iter().copied()));
                assert_eq!(usable.point(entry.points), None);
                let last = usable.point(entry.points - 1).expect("a point").to_values();
                assert_eq!(last[..], values[values.len() - last.len()..]);
            }
            assert!(found.next().is_none());
        }
    }
}

#[test]
fn the_checksum_is_the_published_one() {
    // Check value of CRC-32/ISO-HDLC in the catalogue of parametrised CRC algorithms.
    assert_eq!(crc32(b"123456789"), 0xcbf4_3926);
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    let (body, tail) = bytes.split_at(bytes.len() - 4);
    assert_eq!(tail, crc32(body).to_le_bytes());
}

#[test]
fn a_table_is_a_few_words_and_points_into_the_bytes() {
    assert!(size_of::<Table<'_>>() <= 12 * size_of::<usize>());
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let name = table.header().expect("decodes").name.as_bytes();
    assert!(bytes.as_ptr_range().contains(&name.as_ptr()));
}

#[test]
fn any_alignment_will_do() {
    let bytes = draft(Drive::HeldTip, 60.0).bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let expected = table.slices().next().expect("a slice").at(2, 0.3);
    for offset in 0..9 {
        let mut moved = vec![0xa5; offset];
        moved.extend(&bytes);
        let table = Table::new(&moved[offset..]).expect("a sound table");
        let slice = table.slices().next().expect("a slice");
        assert_eq!(slice.at(2, 0.3), expected);
    }
}

#[test]
fn the_writer_says_what_the_format_cannot_hold() {
    let draft = draft(Drive::HeldTip, 60.0);
    let (entry, knots) = &draft.slices[0].branches[0];
    let entry = BranchEntry { exits: 0, ..*entry };
    let branch = BranchContents { entry, knots };
    let slice = SliceContents {
        payload_kg: 0.06,
        branches: &[branch],
        stretches: &[],
        survey: SurveyBand::default(),
        crossings: &[],
    };
    let contents = Contents {
        header: draft.header,
        slices: &[slice],
    };
    let mut buffer = vec![0; buffer_len(&contents)];
    let len = write(&contents, &mut buffer).expect("the buffer is sufficient");
    assert!(Table::new(&buffer[..len]).is_ok());
    for short in 0..len {
        let result = write(&contents, &mut buffer[..short]);
        assert_eq!(result, Err(WriteError::BufferTooSmall { len: short }));
    }

    let broken = [BranchContents {
        knots: &knots[1..],
        ..branch
    }];
    let broken = [SliceContents {
        branches: &broken,
        ..slice
    }];
    let contents = Contents {
        slices: &broken,
        ..contents
    };
    let expected = WriteError::KnotValues {
        slice: 0,
        branch: 0,
        expected: knots.len(),
        found: knots.len() - 1,
    };
    assert_eq!(write(&contents, &mut buffer), Err(expected));

    let (stretch, reserves) = &draft.slices[0].stretches[0];
    let broken = [StretchContents {
        entry: *stretch,
        reserves: &reserves[1..],
    }];
    let broken = [SliceContents {
        stretches: &broken,
        ..slice
    }];
    let contents = Contents {
        slices: &broken,
        ..contents
    };
    let expected = WriteError::ReserveValues {
        slice: 0,
        stretch: 0,
        expected: reserves.len(),
        found: reserves.len() - 1,
    };
    assert_eq!(write(&contents, &mut buffer), Err(expected));
    assert!(!expected.to_string().is_empty());

    let many = vec![branch; 256];
    let many = [SliceContents {
        branches: &many,
        ..slice
    }];
    let contents = Contents {
        slices: &many,
        ..contents
    };
    let expected = WriteError::TooMany {
        part: Part::Branches,
        found: 256,
        most: 255,
    };
    assert_eq!(write(&contents, &mut buffer), Err(expected));
}
