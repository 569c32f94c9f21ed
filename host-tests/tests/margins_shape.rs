//! Strain, clearance and effective mass of whole arms in closed form.

use host_tests::arms::{UniformArm, carry, plain};
use host_tests::reference::{number, parse, rows};
use host_tests::tolerances::{CIRCLE, CLEARANCE, EFFECTIVE_MASS};
use nalgebra::{DMatrix, DVector};
use std::f64::consts::{FRAC_PI_4, PI};
use table_gen::arm_file::{Arm, KeepOut, Profile, Region};
use table_gen::margins::corners::{Corners, Levels};
use table_gen::margins::requirements::{Assessor, Look, Margins};
use table_gen::margins::shape::{Stations, effective_mass};
use table_gen::rest_states::curve::Solver;
use table_gen::rest_states::modes::ModalRod;
use table_gen::rod::Rod;

/// So stiff that gravity does not matter: it turns no part of an arm by more than `1 / gamma`, a
/// hundredth of the tolerance.
const WEIGHTLESS: f64 = 100.0 / CIRCLE;

#[track_caller]
fn assert_near(found: f64, expected: f64, tolerance: f64, what: &str) {
    assert!(
        (found - expected).abs() <= tolerance,
        "{what}: {found} found, {expected} expected, off by {:e}",
        found - expected
    );
}

/// A weightless arm of 1 m, `thickness_m` thick, that lies in a circle of `rest_turn_rad` from base to tip
/// when nothing pulls.
fn strip(thickness_m: f64, rest_turn_rad: f64) -> Arm {
    let mut arm = UniformArm {
        gamma: WEIGHTLESS,
        tip_fraction: 0.5,
        tilt_rad: 0.0,
    }
    .applied_couple(0.0);
    arm.spine.thickness_m = thickness_m;
    arm.spine.rest_curvature_rad_m = Profile::constant(rest_turn_rad);
    arm
}

/// A couple alone adds `M L / B` to the turn at rest and strains the strip by half its thickness times
/// the curvature added, everywhere.
#[test]
fn couple_alone_strains_by_half_the_thickness_times_its_curvature() {
    const MODES: usize = 6;
    for row in rows(&parse(include_str!("../reference/pure_couple_circle.json"))) {
        for rest_turn in [0.0, 1.5, -2.0] {
            let arm = strip(0.0004, rest_turn);
            let rod = Rod::new(&arm);
            let modal = ModalRod::new(&rod, MODES);
            let turn = number(&row["ML_EI"]);
            let mut at_rest = [0.0; MODES];
            at_rest[0] = rest_turn;
            let state = Solver::new(&modal)
                .at_setpoint(&at_rest, turn * WEIGHTLESS)
                .expect("a rest state");
            let shape = Stations::new(MODES).shape(&state.c, 0.0);
            let expected = 0.5 * 0.0004 * turn;
            let what = format!("turn {turn} added to {rest_turn}");
            // As exact as the circle itself.
            assert_near(
                shape.strain(&arm, &rod) / 0.0002,
                expected / 0.0002,
                CIRCLE,
                &what,
            );
        }
    }
}

#[test]
fn strip_at_its_rest_shape_has_no_strain() {
    let mut arm = strip(0.0004, 0.0);
    // Curvature 3 - 5 s: the turn to the tip is 1/2, and P_1 = 2s - 1 comes in -5/2 times.
    let knots = vec![(0.0, 3.0), (1.0, -2.0)];
    arm.spine.rest_curvature_rad_m = Profile::from_knots(knots).expect("in order");
    let shape = |c: &[f64]| Stations::new(2).shape(c, 0.0).strain(&arm, &Rod::new(&arm));
    assert_near(shape(&[0.5, -2.5]), 0.0, 1e-15, "at rest");
    // Straightened, it is strained most at the base.
    assert_near(shape(&[0.0, 0.0]), 0.0002 * 3.0, 1e-15, "straightened");
}

/// Through the whole margins, with an arm that gravity bends by no more than `1 / gamma`.
#[test]
fn strain_of_a_stiff_arm_counts_from_its_rest_shape() {
    let gamma = 1e5;
    let mut arm = UniformArm {
        gamma,
        tip_fraction: 0.5,
        tilt_rad: 0.0,
    }
    .held_tip(1.0);
    arm.spine.thickness_m = 0.002;
    arm.spine.rest_curvature_rad_m = Profile::constant(1.4);
    let margins = only_margins(&arm, 0.9);
    assert_near(
        margins.strain,
        0.001 * 0.5,
        0.001 * 2.0 / gamma,
        "half a radian from rest",
    );
}

/// Margins of the one stable shape of the nominal arm at `setpoint`.
fn only_margins(arm: &Arm, setpoint: f64) -> Margins {
    let corners = Corners::find(arm, Levels::Nominal, &|_| {})
        .unwrap_or_else(|error| panic!("{}: {error}", arm.name));
    let assessor = Assessor::new(arm, &corners);
    let assessed = assessor.assess(setpoint, None, None).expect("rest states");
    assert_eq!(assessed.len(), 1, "{}: one stable shape", arm.name);
    match assessed[0].margins[0] {
        Look::There(margins) => margins,
        other => panic!("the nominal arm is its own corner, not {other:?}"),
    }
}

fn line(point_m: [f64; 2], towards: [f64; 2]) -> KeepOut {
    let size = towards[0].hypot(towards[1]);
    KeepOut {
        name: format!("line through {point_m:?}"),
        region: Region::HalfPlane {
            point_m,
            normal: towards.map(|x| x / size),
        },
    }
}

fn disc(centre_m: [f64; 2], radius_m: f64) -> KeepOut {
    KeepOut {
        name: format!("disc at {centre_m:?}"),
        region: Region::Disc { centre_m, radius_m },
    }
}

/// Clearance of an arm of `length_m` that turns by `turn_rad` in a circle, its base tilted.
fn clearance_m(turn_rad: f64, tilt_rad: f64, length_m: f64, keep_out: &[KeepOut]) -> (f64, usize) {
    let shape = Stations::new(2).shape(&[turn_rad, 0.0], tilt_rad);
    shape
        .clearance_m(keep_out, length_m)
        .expect("regions given")
}

/// A straight arm of 1 m along `(sin tilt, cos tilt)`: which part is nearest depends on the region.
#[test]
fn clearance_of_a_straight_arm() {
    for tilt in [0.0, 0.3, -FRAC_PI_4, PI / 2.0, PI] {
        let (sin, cos) = tilt.sin_cos();
        // Along the arm and to its side, from the base.
        let place = |along: f64, aside: f64| [along * sin + aside * cos, along * cos - aside * sin];
        let cases = [
            (
                "line across beyond the tip",
                line(place(1.2, 5.0), place(-1.0, 0.0)),
                0.2,
            ),
            (
                "line beside",
                line(place(-7.0, 0.25), place(0.0, -1.0)),
                0.25,
            ),
            // Distances of base and tip to a line inclined by 3 : 4 through a place beside the arm.
            (
                "line inclined",
                line(place(1.0, 0.5), place(-0.6, -0.8)),
                0.4,
            ),
            ("disc beside the middle", disc(place(0.5, 0.3), 0.1), 0.2),
            // Between two of the places the arm is looked at.
            ("disc beside, between", disc(place(0.3337, -0.2), 0.1), 0.1),
            ("disc beyond the tip", disc(place(1.3, 0.4), 0.1), 0.4),
            ("disc behind the base", disc(place(-0.3, 0.4), 0.1), 0.4),
            ("disc on the arm", disc(place(0.25, 0.0), 0.1), -0.1),
        ];
        for (what, region, expected) in cases {
            let (found, _) = clearance_m(0.0, tilt, 1.0, &[region]);
            assert_near(found, expected, CLEARANCE, &format!("{what}, tilt {tilt}"));
        }
    }
}

/// Upright, turning to +x by `turn` in a circle of radius `1 / turn` about `(1 / turn, 0)`.
#[test]
fn clearance_of_a_circular_arm() {
    for turn in [PI / 2.0, PI, 1.5 * PI] {
        let radius = 1.0 / turn;
        let at = |angle: f64, far: f64| [radius - far * angle.cos(), far * angle.sin()];
        let half = 0.5 * turn;
        let outward = at(half, 1.0).map(|x| -x);
        let outward = [outward[0] + radius, outward[1]];
        let cases = [
            // Only for half a turn and more the top is between base and tip; for a quarter it is the tip.
            ("line above", line([3.0, 0.5 + radius], [0.0, -1.0]), 0.5),
            (
                "line across outside the middle",
                line(at(half, radius + 0.07), outward),
                0.07,
            ),
            (
                "disc outside the middle",
                disc(at(half, radius + 0.2), 0.05),
                0.15,
            ),
            (
                "disc inside the middle",
                disc(at(half, 0.4 * radius), 0.02),
                0.6 * radius - 0.02,
            ),
        ];
        for (what, region, expected) in cases {
            let (found, _) = clearance_m(turn, 0.0, 1.0, &[region]);
            assert_near(found, expected, CLEARANCE, &format!("{what}, turn {turn}"));
        }
    }
    // An arm of 2 m is twice as far from a disc twice as far.
    let (found, _) = clearance_m(PI, 0.0, 2.0, &[disc([2.0 / PI, 2.0 / PI + 0.4], 0.1)]);
    assert_near(found, 0.3, 2.0 * CLEARANCE, "twice as long");
}

/// Base and tip of half a circle are far from the line; only the middle is near.
#[test]
fn whole_arm_counts_and_the_nearest_region() {
    let regions = [
        disc([5.0, 5.0], 0.5),
        line([0.0, 0.4], [0.0, -1.0]),
        line([0.0, -1.0], [0.0, 1.0]),
    ];
    let (found, nearest) = clearance_m(PI, 0.0, 1.0, &regions);
    assert_near(found, 0.4 - 1.0 / PI, CLEARANCE, "the middle is highest");
    assert_eq!(nearest, 1, "the line above is nearest");
    let shape = Stations::new(2).shape(&[PI, 0.0], 0.0);
    assert!(
        shape.clearance_m(&[], 1.0).is_none(),
        "no region, no clearance"
    );
}

/// Through the whole margins: the upright arm stands straight.
#[test]
fn clearance_of_a_standing_arm() {
    let mut arm = UniformArm {
        gamma: 2.0,
        tip_fraction: 0.5,
        tilt_rad: 0.0,
    }
    .held_tip(0.0);
    arm.keep_out = vec![disc([0.3, 0.5], 0.06), line([0.0, -0.4], [0.0, 1.0])];
    let clearance_m = only_margins(&arm, 0.0).clearance_m.expect("regions given");
    assert_near(clearance_m, 0.24, CLEARANCE, "the middle to the disc");
}

/// Effective mass at the tip in the one shape `c` of small motion about a straight arm.
fn in_one_shape(mass: &DMatrix<f64>, tip: &DVector<f64>, c: &DVector<f64>) -> f64 {
    let one = |value: f64| DMatrix::from_element(1, 1, value);
    effective_mass(
        &one((c.transpose() * mass * c)[(0, 0)]),
        &DVector::from_element(1, tip.dot(c)),
    )
}

/// Rayleigh's mass of a uniform cantilever in the shape that a force at the tip bends it to: 33/140 of the
/// beam's with the tip free (W. Thomson, Theory of Vibration; S. S. Rao, Mechanical Vibrations; from
/// memory), 13/35 with its orientation held (the deflection `3 x^2 - 2 x^3`; the consistent mass of a
/// beam's end in any finite-element text, from memory). The first is near the first mode's .2427.
#[test]
fn stiff_cantilever_in_its_first_shape() {
    let mut arm = plain();
    arm.spine.mass_per_length_kg_m = Profile::constant(1.0);
    carry(&mut arm, 0.0);
    for modes in [2, 6] {
        let stations = Stations::new(modes);
        let straight = stations.shape(&vec![0.0; modes], 0.0);
        let (mass, tip) = stations.kinetics(&Rod::new(&arm), &straight);
        let shape = |c0: f64, c1: f64| {
            DVector::from_fn(modes, |i, _| [c0, c1].get(i).copied().unwrap_or(0.0))
        };
        // Curvature 1 - s, and 1 - 2s.
        let free = in_one_shape(&mass, &tip, &shape(0.5, -0.5));
        let held = in_one_shape(&mass, &tip, &shape(0.0, -1.0));
        assert_near(free, 33.0 / 140.0, EFFECTIVE_MASS, "tip free");
        assert_near(held, 13.0 / 35.0, EFFECTIVE_MASS, "tip orientation held");
    }
}

/// An impulse takes the way of least mass: never more than any one shape, and less with more modes, down to
/// the payload.
#[test]
fn impulse_meets_no_more_mass_than_any_shape() {
    for payload_kg in [0.05, 0.5] {
        let mut arm = plain();
        arm.spine.mass_per_length_kg_m = Profile::constant(1.0);
        carry(&mut arm, payload_kg);
        let rod = Rod::new(&arm);
        for c in [
            vec![0.0; 24],
            (0..24).map(|i| 1.5 / f64::from(1 + i * i)).collect(),
        ] {
            let mut before = f64::INFINITY;
            for modes in [2, 4, 6, 9, 12, 18, 24] {
                let stations = Stations::new(modes);
                let shape = stations.shape(&c[..modes], 0.4);
                let (mass, tip) = stations.kinetics(&rod, &shape);
                let met = stations.tip_mass_kg(&ModalRod::new(&rod, modes), &rod, &arm, &shape);
                // With the tip held the first mode does not move.
                for moved in 1..modes {
                    let one = DVector::from_fn(modes, |i, _| f64::from(u8::from(i == moved)));
                    let other = arm.total_mass_kg() * in_one_shape(&mass, &tip, &one);
                    assert!(
                        met <= other * (1.0 + 1e-9),
                        "{met} kg met, {other} kg in mode {moved}"
                    );
                }
                if c[0] == 0.0 {
                    assert!(met <= before * (1.0 + 1e-9), "more mass in {modes} modes");
                }
                assert!(
                    met >= payload_kg,
                    "{met} kg met, the payload alone is {payload_kg}"
                );
                before = met;
            }
        }
    }
}

#[test]
fn massless_spine_leaves_the_payload() {
    let mut arm = plain();
    carry(&mut arm, 0.3);
    let rod = Rod::new(&arm);
    for modes in [2, 3, 4, 6, 9, 16, 24] {
        for turn in [0.0, 1.0, PI] {
            let stations = Stations::new(modes);
            let mut c = vec![0.0; modes];
            c[0] = turn;
            let shape = stations.shape(&c, 0.2);
            let found = stations.tip_mass_kg(&ModalRod::new(&rod, modes), &rod, &arm, &shape);
            // Two modes with the tip held are one motion, which may also have an axial part.
            if modes > 2 || turn == 0.0 {
                assert_near(
                    found,
                    0.3,
                    EFFECTIVE_MASS,
                    &format!("{modes} modes, turn {turn}"),
                );
            }
        }
    }
}
