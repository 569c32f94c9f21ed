//! Reserves between their points, and the worse of two.

use firmware_core::format::RESERVES;
use firmware_core::{Drive, Reserves, Table, UNBOUNDED};
use proptest::prelude::*;

use crate::arm::{draft, reserves};
use crate::seed::cases;
use crate::tolerance;

/// The reserves of the upper well's stretch with its values changed.
fn changed(change: impl FnOnce(&mut [f32]), at: f32) -> Option<Reserves> {
    let mut draft = draft(Drive::HeldTip, 60.0);
    change(&mut draft.slices[0].stretches[1].1);
    let bytes = draft.bytes();
    let table = Table::new(&bytes).expect("a sound table");
    let slice = table.slices().next().expect("a slice");
    slice.reserves(2, at)
}

/// The ends of the upper well's stretch and its points.
fn upper() -> (f32, f32, u8) {
    let stretch = draft(Drive::HeldTip, 60.0).slices[0].stretches[1].0;
    (stretch.from, stretch.to, stretch.points)
}

#[test]
fn lines_are_followed() {
    let (from, to, _) = upper();
    let mut worst = 0f32;
    for step in 0..=1000u16 {
        let x = (from + (to - from) * f32::from(step) / 1000.0).min(to);
        let found = changed(|_| (), x).expect("in the stretch").to_values();
        for (found, exact) in found.iter().zip(reserves(2, x, 1.0).to_values()) {
            worst = worst.max((found - exact).abs());
        }
    }
    println!("worst {worst:e}");
    assert!(worst <= tolerance::RESERVES);
    // A tolerance that nothing comes near is too loose.
    assert!(worst >= tolerance::RESERVES / 20.0);
}

#[test]
fn the_points_themselves_are_kept_and_beyond_is_nothing() {
    let (from, to, points) = upper();
    let mut values = Vec::new();
    let record = |v: &mut [f32]| values.extend_from_slice(v);
    let low = changed(record, from)
        .expect("the lower end is in")
        .to_values();
    assert_eq!(low[..], values[..RESERVES]);
    let high = changed(|_| (), to)
        .expect("the upper end is in")
        .to_values();
    assert_eq!(high[..], values[usize::from(points - 1) * RESERVES..]);
    for outside in [from.next_down(), to.next_up(), f32::NAN, f32::INFINITY] {
        assert_eq!(changed(|_| (), outside), None);
    }
}

#[test]
fn beside_a_point_without_bound_the_bounded_one_counts() {
    let (from, to, points) = upper();
    let step = (to - from) / f32::from(points - 1);
    // The barrier is unbounded at the points 2 and 3 only.
    let lift = |values: &mut [f32]| {
        for point in [2, 3] {
            values[point * RESERVES] = UNBOUNDED;
        }
    };
    let barrier = |place: f32| changed(lift, from + place * step).expect("in").barrier_j;
    let stored = |point: f32| {
        reserves(2, from + point * step, 1.0)
            .barrier_j
            .expect("bounded")
    };
    let near = |found: Option<f32>, exact: f32| {
        let found = found.expect("bounded");
        assert!(
            (found - exact).abs() <= tolerance::RESERVES,
            "{found} {exact}"
        );
    };
    near(barrier(1.1), stored(1.0));
    near(barrier(1.9), stored(1.0));
    assert_eq!(barrier(2.5), None);
    near(barrier(3.1), stored(4.0));
    near(barrier(4.5), stored(4.5));
}

#[test]
fn messages_name_every_reserve() {
    let text = reserves(2, 0.0, 1.0).to_string();
    for part in [
        "barrier 0.0",
        " J, knock ",
        " N s, payload ",
        "clearance without bound, strain 0.2 %",
    ] {
        assert!(text.contains(part), "{text}");
    }
}

fn any_reserves() -> impl Strategy<Value = Reserves> {
    let reserve = || prop::option::of(-10f32..10.0);
    let first = (reserve(), reserve(), reserve(), reserve());
    let second = (reserve(), reserve(), reserve(), reserve(), 0f32..1.0);
    (first, second).prop_map(|(a, b)| Reserves {
        barrier_j: a.0,
        knock_n_s: a.1,
        payload_reserve_kg: a.2,
        stiffness_reserve: a.3,
        setpoint_reserve: b.0,
        restoring_n_m_per_rad: b.1,
        tension_factor: b.2,
        clearance_m: b.3,
        strain: b.4,
    })
}

proptest! {
    #![proptest_config(cases(500))]

    #[test]
    fn the_worse_of_two_is_better_than_neither(a in any_reserves(), b in any_reserves()) {
        let worse = a.worse(&b);
        prop_assert_eq!(worse, b.worse(&a));
        let values = worse.to_values();
        for (place, value) in values.into_iter().enumerate() {
            let (a, b) = (a.to_values()[place], b.to_values()[place]);
            let expected = if place + 1 == RESERVES { a.max(b) } else { a.min(b) };
            prop_assert_eq!(value, expected);
        }
    }

    #[test]
    fn between_two_points_no_reserve_is_better_than_both(
        a in any_reserves(), b in any_reserves(), x in 0f32..=1.0,
    ) {
        let (from, to, points) = upper();
        let step = (to - from) / f32::from(points - 1);
        let found = changed(|values| {
            values[..RESERVES].copy_from_slice(&a.to_values());
            values[RESERVES..2 * RESERVES].copy_from_slice(&b.to_values());
        }, (from + x * step).min(from + step));
        let found = found.expect("in the stretch").to_values();
        for (place, value) in found.into_iter().enumerate() {
            let (a, b) = (a.to_values()[place], b.to_values()[place]);
            let least = a.min(b);
            // Without a bound on one side the other side is all that is known.
            let most = if a.max(b) == UNBOUNDED { least } else { a.max(b) };
            let rounding = 1e-5;
            prop_assert!(value >= least - rounding && value <= most + rounding, "{} {} {}", a, b, value);
        }
    }
}
