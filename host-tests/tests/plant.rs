//! The simulated arm against published frequencies, conservation laws and independent mechanics.

use host_tests::arms::{UniformArm, rest_states, states_at};
use host_tests::reference::{list, number, parse, rows};
use std::f64::consts::{FRAC_PI_2, PI, TAU};
use table_gen::arm_file::{self, Arm, Profile, STANDARD_GRAVITY_M_S2};
use table_gen::plan::plant::{
    Plant, PlantOptions, SensorFault, SensorName, SensorOptions, Side, TendonOptions, TipDrive,
};
use table_gen::rest_states::curve::RestPoint;

/// Energy change over 20 units of time without damping and drive (m g L): what is asked.
const DRIFT: f64 = 1e-6;
/// Frequencies with ten modes: the tenth Legendre mode adds 1e-9 to the third frequency, the sag under the weight 1e-10.
const FREQUENCY_TEN_MODES: f64 = 1e-8;
/// Frequencies with six modes: what is asked; the third frequency of six modes is 2e-4 off.
const FREQUENCY_SIX_MODES: f64 = 1e-3;
/// Period by zero crossings: damping lengthens it by 3e-6, straight lines between 200 points a period add as much.
const FREQUENCY_IN_TIME: f64 = 2e-5;
/// Damping ratio by decrement: what is asked.
const DAMPING: f64 = 0.01;
/// Speed (m/s) of an arm at rest: rounding of forces of 1 N on masses of 0.01 kg.
const REST_SPEED_M_S: f64 = 1e-9;
/// Differences between sums over a few modes in another order.
const ROUNDING: f64 = 1e-11;
/// Kinetic energy by 4000 straight pieces and a time difference of 1e-5 s, relative.
const BY_POINTS: f64 = 1e-6;
/// Accelerations by differences of energies, relative to the largest.
const BY_DIFFERENCES: f64 = 1e-5;

fn wand() -> Arm {
    let text = include_str!("../../examples/greenhouse-wand/arm.toml");
    arm_file::parse(text, "greenhouse-wand/arm.toml").expect("the example is good")
}

fn lance() -> Arm {
    let text = include_str!("../../examples/tank-lance/arm.toml");
    arm_file::parse(text, "tank-lance/arm.toml").expect("the example is good")
}

fn probe() -> Arm {
    let text = include_str!("../../examples/duct-probe/arm.toml");
    arm_file::parse(text, "duct-probe/arm.toml").expect("the example is good")
}

fn undamped(mut arm: Arm) -> Arm {
    arm.spine.damping_ratio = 0.0;
    arm
}

fn driven_by(tip_drive: TipDrive) -> PlantOptions {
    PlantOptions {
        tip_drive,
        ..PlantOptions::default()
    }
}

fn time_unit_s(arm: &Arm) -> f64 {
    (arm.spine.length_m / STANDARD_GRAVITY_M_S2).sqrt()
}

fn energy_scale_j(arm: &Arm) -> f64 {
    arm.total_mass_kg() * STANDARD_GRAVITY_M_S2 * arm.spine.length_m
}

fn mechanical_j(plant: &Plant) -> f64 {
    let energy = plant.energy();
    energy.kinetic_j + energy.potential_j
}

/// A beam of 1 m and 1 kg with a tip mass, so stiff and level that gravity does not matter, without other inertia.
fn beam(
    tip_mass_ratio: f64,
    stiffness_n_m2: f64,
    modes: usize,
    tip_drive: TipDrive,
) -> (Arm, PlantOptions) {
    let mut arm = UniformArm {
        gamma: 1.0,
        tip_fraction: 0.5,
        tilt_rad: FRAC_PI_2,
    }
    .held_tip(0.0);
    arm.spine.bending_stiffness_n_m2 = Profile::constant(stiffness_n_m2);
    arm.spine.mass_per_length_kg_m = Profile::constant(1.0);
    arm.spine.thickness_m = 1e-6;
    arm.payload.mass_kg = tip_mass_ratio;
    let options = PlantOptions {
        modes,
        reflected_inertia_kg_m2: Some(0.0),
        tip_drive,
        ..PlantOptions::default()
    };
    (arm, options)
}

/// Stable rest states of the wand with the tip held here (rad).
fn stable_rest(arm: &Arm, tip_angle_rad: f64) -> Vec<RestPoint> {
    let mut states = states_at(&rest_states(arm), tip_angle_rad);
    states.retain(|state| state.index == 0);
    assert!(!states.is_empty(), "somewhere the arm must rest");
    states
}

#[test]
fn energy_does_not_drift_without_damping_and_drive() {
    let start = [0.7, 0.4, -0.2];
    // Hanging, the lance must be bent further for the same energy.
    let far = [1.5, 2.0, -0.5];
    for (arm, tip_drive, start) in [
        (wand(), TipDrive::Free, start),
        (wand(), TipDrive::Held, start),
        (lance(), TipDrive::Free, far),
        (lance(), TipDrive::Held, far),
        (probe(), TipDrive::Free, start),
        (probe(), TipDrive::Held, start),
    ] {
        let arm = undamped(arm);
        let mut plant = Plant::new(&arm, driven_by(tip_drive));
        plant.set_motion(&start, &[]);
        let before_j = mechanical_j(&plant);
        let (mut drift, mut fastest_j) = (0.0_f64, 0.0_f64);
        for _ in 0..200 {
            plant
                .step(0.1 * time_unit_s(&arm), [0.0; 2])
                .expect("the motion can be followed");
            drift = drift.max((mechanical_j(&plant) - before_j).abs() / energy_scale_j(&arm));
            fastest_j = fastest_j.max(plant.energy().kinetic_j);
        }
        println!(
            "{} {tip_drive:?}: drift {drift:.1e}, up to {:.2} m g L of motion",
            arm.name,
            fastest_j / energy_scale_j(&arm)
        );
        assert!(drift < DRIFT, "{} {tip_drive:?}: {drift:e}", arm.name);
        assert!(
            fastest_j > 0.01 * energy_scale_j(&arm),
            "{}: it hardly moved",
            arm.name
        );
    }
}

#[test]
fn small_motion_has_the_published_frequencies() {
    let table = parse(include_str!("../reference/plant-frequencies.json"));
    for row in rows(&table) {
        let ratio = number(&row["tip_mass_ratio"]);
        for (modes, tolerance) in [(10, FREQUENCY_TEN_MODES), (6, FREQUENCY_SIX_MODES)] {
            let stiffness_n_m2 = 1e6;
            let (arm, options) = beam(ratio, stiffness_n_m2, modes, TipDrive::Free);
            let found = Plant::new(&arm, options).small_motion();
            for (mode, expected) in found.iter().zip(list(&row["omega"])) {
                let omega = mode.omega_rad_s() / stiffness_n_m2.sqrt();
                let error = (omega / number(expected) - 1.0).abs();
                println!("mu {ratio}, {modes} modes: {omega:.10}, off by {error:.1e}");
                assert!(
                    error < tolerance,
                    "mu {ratio}, {modes} modes: {omega} for {expected}"
                );
            }
        }
    }
}

#[test]
fn released_beam_swings_at_the_published_frequency() {
    let table = parse(include_str!("../reference/plant-frequencies.json"));
    for row in rows(&table) {
        let expected = number(&list(&row["omega"])[0]);
        let stiffness_n_m2 = 1e9;
        let (mut arm, options) = beam(
            number(&row["tip_mass_ratio"]),
            stiffness_n_m2,
            6,
            TipDrive::Free,
        );
        // Held-tip ratio: enough for the higher modes to die down in 20 periods, and next to none of the first.
        arm.spine.damping_ratio = 0.004;
        let mut plant = Plant::new(&arm, options);
        // Bent by a force at the tip: curvature 1 - s, nearly the first mode.
        plant.set_motion(&[0.5e-3, -0.5e-3], &[]);
        let dt_s = TAU / expected / stiffness_n_m2.sqrt() / 200.0;
        let mut crossings_s = vec![];
        let mut before = plant.tip().position_m[1];
        while crossings_s.len() < 81 {
            plant
                .step(dt_s, [0.0; 2])
                .expect("the motion can be followed");
            let now = plant.tip().position_m[1];
            if before.signum() != now.signum() {
                crossings_s.push(plant.time_s() - dt_s * now / (now - before));
            }
            before = now;
        }
        // Full periods only: sag makes the halves unequal.
        let omega = TAU * 20.0 / (crossings_s[80] - crossings_s[40]) / stiffness_n_m2.sqrt();
        let error = (omega / expected - 1.0).abs();
        println!("mu {}: off by {error:.1e}", row["tip_mass_ratio"]);
        assert!(
            error < FREQUENCY_IN_TIME,
            "mu {}: {omega} for {expected}",
            row["tip_mass_ratio"]
        );
    }
}

#[test]
fn first_held_tip_mode_is_damped_as_asked() {
    for (ratio, asked) in [(0.0, 0.03), (1.0, 0.03), (1.0, 0.1), (5.0, 0.005)] {
        let (mut arm, options) = beam(ratio, 1e4, 6, TipDrive::Held);
        arm.spine.damping_ratio = asked;
        let mut plant = Plant::new(&arm, options);
        let omega = plant.small_motion()[0].omega_rad_s();
        plant.set_motion(&[0.0, 1e-2], &[]);
        let period_s = TAU / omega;
        // Two periods for the higher modes to die down, then the span of motion in one, and in one five periods later.
        let mut span = |periods: f64| {
            let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
            let steps = (400.0 * periods).round() as usize;
            for _ in 0..steps {
                plant
                    .step(period_s / 400.0, [0.0; 2])
                    .expect("the motion can be followed");
                let angle = plant.angle_rad(0.5);
                (low, high) = (low.min(angle), high.max(angle));
            }
            high - low
        };
        span(2.0);
        let first = span(1.0);
        span(4.0);
        let decrement = (first / span(1.0)).ln() / 5.0;
        let found = decrement / (4.0 * PI * PI + decrement * decrement).sqrt();
        assert!(
            (found / asked - 1.0).abs() < DAMPING,
            "asked {asked}, found {found}"
        );
    }
}

#[test]
fn arm_at_rest_stays_at_rest() {
    for arm in [wand(), lance()] {
        for state in stable_rest(&arm, 0.5) {
            let mut plant = Plant::new(&arm, PlantOptions::default());
            let tensions_n = plant.set_rest(&state.c).expect("the plant rests there too");
            assert!(
                (plant.couple_n_m() / energy_scale_j(&arm) - state.couple).abs() < 1e-4,
                "{}",
                arm.name
            );
            let start = plant.curvature_modes().to_vec();
            for _ in 0..1000 {
                plant
                    .step(0.005, tensions_n)
                    .expect("the motion can be followed");
                assert!(
                    plant.tip().speed_m_s() < REST_SPEED_M_S,
                    "{}: {:?}",
                    arm.name,
                    plant.tip()
                );
            }
            let moved = start
                .iter()
                .zip(plant.curvature_modes())
                .map(|(a, b)| (a - b).abs())
                .fold(0.0, f64::max);
            assert!(moved < 1e-8, "{}: moved by {moved}", arm.name);
        }
    }
}

#[test]
fn arm_given_up_by_its_drive_comes_to_rest_elsewhere() {
    let arm = wand();
    let state = &stable_rest(&arm, 0.5)[0];
    let mut plant = Plant::new(&arm, PlantOptions::default());
    plant.set_rest(&state.c).expect("the plant rests there too");
    plant.set_tip_drive(TipDrive::Free);
    let before_j = mechanical_j(&plant);
    for _ in 0..10_000 {
        plant
            .step(0.02, [0.0; 2])
            .expect("the motion can be followed");
    }
    assert!(
        mechanical_j(&plant) < before_j - 0.05 * energy_scale_j(&arm),
        "damping takes energy"
    );
    assert!(plant.tip().speed_m_s() < 1e-3 && (plant.tip().angle_rad - 0.5).abs() > 0.5);
}

#[test]
fn no_rest_where_there_is_none() {
    let mut plant = Plant::new(&wand(), PlantOptions::default());
    let before = plant.curvature_modes().to_vec();
    let error = plant
        .set_rest(&[0.0, 40.0, -30.0])
        .expect_err("nothing rests there");
    assert!(error.to_string().contains("no rest shape near"), "{error}");
    assert_eq!(before, plant.curvature_modes());
    plant
        .set_rest(&[f64::NAN; 6])
        .expect_err("nothing rests there");
}

#[test]
fn knock_changes_the_tip_speed_by_impulse_over_effective_mass() {
    for tip_drive in [TipDrive::Free, TipDrive::Held] {
        let arm = wand();
        let state = &stable_rest(&arm, 0.5)[0];
        let mut plant = Plant::new(&arm, driven_by(tip_drive));
        plant.set_rest(&state.c).expect("the plant rests there too");
        let mass_kg = plant
            .tip_effective_mass_kg()
            .expect("the tip carries a payload");
        assert!(
            mass_kg >= arm.payload.mass_kg && mass_kg < arm.total_mass_kg(),
            "{mass_kg}"
        );
        let before_j = mechanical_j(&plant);
        let impulse_n_s = 0.01;
        assert!(plant.knock(impulse_n_s));
        let (sin, cos) = (arm.base.tilt_rad + plant.tip().angle_rad).sin_cos();
        let [x, y] = plant.tip().velocity_m_s;
        assert!((x * cos - y * sin - impulse_n_s / mass_kg).abs() < ROUNDING);
        let gained_j = mechanical_j(&plant) - before_j;
        assert!(
            (gained_j - 0.5 * impulse_n_s * impulse_n_s / mass_kg).abs() < ROUNDING,
            "work is half impulse times speed"
        );
        if tip_drive == TipDrive::Held {
            assert_eq!(plant.tip().rate_rad_s, 0.0, "a held tip does not turn");
        }
    }
}

#[test]
fn kinetic_energy_is_that_of_the_moving_masses() {
    let arm = wand();
    let options = PlantOptions {
        reflected_inertia_kg_m2: Some(0.003),
        ..driven_by(TipDrive::Free)
    };
    let mut plant = Plant::new(&arm, options);
    let (c, rates) = (
        [1.2, -0.9, 0.5, 0.3, -0.2, 0.1],
        [2.0, 3.0, -4.0, 1.0, 2.0, -1.0],
    );
    plant.set_motion(&c, &rates);
    let found_j = plant.energy().kinetic_j;

    let (pieces, dt_s) = (4000, 1e-5);
    let mut shape_at = |time_s: f64| {
        let moved: Vec<f64> = c
            .iter()
            .zip(rates)
            .map(|(c, rate)| c + time_s * rate)
            .collect();
        plant.set_motion(&moved, &[]);
        plant.shape(pieces)
    };
    let (before, after) = (shape_at(-dt_s), shape_at(dt_s));
    let speed2 = |k: usize| {
        let each = [0, 1].map(|axis| (after[k][axis] - before[k][axis]) / (2.0 * dt_s));
        each[0] * each[0] + each[1] * each[1]
    };
    let piece_kg = arm.spine.mass_per_length_kg_m.at(0.5) * arm.spine.length_m / pieces as f64;
    let spine: f64 = (0..pieces)
        .map(|k| 0.25 * piece_kg * (speed2(k) + speed2(k + 1)))
        .sum();
    let lumps: f64 = arm
        .lumps
        .iter()
        .map(|lump| 0.5 * lump.mass_kg * speed2((lump.at * pieces as f64) as usize))
        .sum();
    let payload = 0.5 * arm.payload.mass_kg * speed2(pieces);
    let drive = 0.5 * 0.003 * rates[0] * rates[0];
    let by_points_j = spine + lumps + payload + drive;
    assert!(
        (found_j / by_points_j - 1.0).abs() < BY_POINTS,
        "{found_j} {by_points_j}"
    );
}

#[test]
fn accelerations_are_those_of_lagranges_equations() {
    let arm = undamped(wand());
    let mut plant = Plant::new(&arm, driven_by(TipDrive::Free));
    let (c, v) = (
        [1.2, -0.9, 0.5, 0.3, -0.2, 0.1],
        [4.0, 3.0, -4.0, 2.0, 2.0, -1.0],
    );
    let n = c.len();
    // Lagrange's equations from nothing but the energies: d/dt (dT/dv) - dT/dc + dU/dc = 0.
    let step = 1e-4;
    let energies = |plant: &mut Plant, c: &[f64], v: &[f64]| {
        plant.set_motion(c, v);
        let energy = plant.energy();
        (energy.kinetic_j, energy.potential_j)
    };
    let shifted = |a: &[f64], i: usize, by: f64| {
        let mut a = a.to_vec();
        a[i] += by;
        a
    };
    // T is quadratic in v: its differences are exact whatever the step.
    let momentum = |plant: &mut Plant, c: &[f64], i: usize| {
        0.5 * (energies(plant, c, &shifted(&v, i, 1.0)).0
            - energies(plant, c, &shifted(&v, i, -1.0)).0)
    };
    let along = |by: f64| -> Vec<f64> { c.iter().zip(v).map(|(c, v)| c + by * v).collect() };
    let mut force = vec![0.0; n];
    for (i, force) in force.iter_mut().enumerate() {
        let carried = (momentum(&mut plant, &along(step), i)
            - momentum(&mut plant, &along(-step), i))
            / (2.0 * step);
        let ahead = energies(&mut plant, &shifted(&c, i, step), &v);
        let behind = energies(&mut plant, &shifted(&c, i, -step), &v);
        *force = ((ahead.0 - behind.0) - (ahead.1 - behind.1)) / (2.0 * step) - carried;
    }
    // Measured: the change of the rates over a short time to both sides of the present.
    let dt_s = 1e-4;
    let mut rates_after = |sign: f64| {
        let reversed: Vec<f64> = v.iter().map(|v| sign * v).collect();
        plant.set_motion(&c, &reversed);
        plant
            .step(dt_s, [0.0; 2])
            .expect("the motion can be followed");
        plant.curvature_rates_1_s()
    };
    // Running backwards is running forwards with reversed rates.
    let (ahead, behind) = (rates_after(1.0), rates_after(-1.0));
    let acceleration: Vec<f64> = ahead
        .iter()
        .zip(&behind)
        .map(|(a, b)| (a + b) / (2.0 * dt_s))
        .collect();
    let largest = force.iter().fold(0.0_f64, |m, f| m.max(f.abs()));
    for (i, force) in force.iter().enumerate() {
        // Row i of the mass matrix times the acceleration, by polarisation of T.
        let (sum, difference) = ([1.0, -1.0])
            .map(|sign| {
                let turned = shifted(&acceleration, i, sign);
                energies(&mut plant, &c, &turned).0
            })
            .into();
        let inertia = 0.5 * (sum - difference);
        assert!(
            (inertia - force).abs() < BY_DIFFERENCES * largest,
            "mode {i}: {inertia} for {force}"
        );
    }
}

#[test]
fn tendons_never_push() {
    let arm = wand();
    let mut plant = Plant::new(&arm, PlantOptions::default());
    plant.set_motion(&[0.7, 0.4, -0.2], &[]);
    plant.hold(0.0);
    let commands = [
        [20.0, -5.0],
        [f64::NAN, 0.0],
        [0.0, 30.0],
        [-1.0, f64::INFINITY],
        [60.0, 3.0],
        [0.0, 0.0],
    ];
    let mut slack = 0;
    for k in 0..4000 {
        plant
            .step(0.002, commands[(k / 40) % commands.len()])
            .expect("the motion can be followed");
        let [a, b] = plant.tip_tensions_n();
        let at_actuators = plant.actuator_tensions_n();
        assert!(
            a >= 0.0 && b >= 0.0 && at_actuators.iter().all(|t| *t >= 0.0 && t.is_finite()),
            "{k}: {a} {b}"
        );
        assert!((plant.couple_n_m() - arm.tendons.offset_m * (a - b)).abs() < ROUNDING);
        slack += usize::from(a == 0.0) + usize::from(b == 0.0);
    }
    assert!(slack > 0, "commands of 0 N must slacken a tendon");
}

#[test]
fn tendon_goes_slack_when_the_tip_runs_ahead_of_the_spool() {
    let arm = wand();
    let tendons = TendonOptions {
        winding_speed_limit_m_s: 0.01,
        friction_fraction: 0.0,
        ..TendonOptions::default()
    };
    let mut plant = Plant::new(
        &arm,
        PlantOptions {
            tendons,
            ..driven_by(TipDrive::Held)
        },
    );
    let commanded = plant.hold(0.0);
    let turned_rad = 0.5;
    plant.set_motion(&[turned_rad], &[]);
    // Turning towards A's side gives A slack and stretches B.
    let moved_m = arm.tendons.offset_m * turned_rad;
    let [a, b] = plant.tip_tensions_n();
    assert_eq!(a, 0.0);
    assert!(
        (b - (arm.tendons.pretension_n + tendons.stiffness_n_m * moved_m)).abs() < 1e-9,
        "{b}"
    );
    // What A lacks is wound in no faster than the spool turns.
    let lacking_m = moved_m - arm.tendons.pretension_n / tendons.stiffness_n_m;
    let slack_s = lacking_m / tendons.winding_speed_limit_m_s;
    plant
        .step(0.95 * slack_s, commanded)
        .expect("the motion can be followed");
    assert_eq!(plant.tip_tensions_n()[0], 0.0);
    plant
        .step(0.2 * slack_s + 10.0 * tendons.lag_s, commanded)
        .expect("the motion can be followed");
    for tension_n in plant.tip_tensions_n() {
        assert!(
            (tension_n - arm.tendons.pretension_n).abs() < 0.01,
            "{tension_n}"
        );
    }
}

#[test]
fn tension_follows_its_command_with_lag_and_rate_limit() {
    let arm = wand();
    let quick = TendonOptions {
        friction_fraction: 0.0,
        rate_limit_n_s: 1e9,
        winding_speed_limit_m_s: 1e3,
        ..TendonOptions::default()
    };
    let mut plant = Plant::new(
        &arm,
        PlantOptions {
            tendons: quick,
            ..driven_by(TipDrive::Held)
        },
    );
    let [start, _] = plant.hold(0.0);
    plant
        .step(quick.lag_s, [start + 10.0, start])
        .expect("the motion can be followed");
    let reached = (plant.actuator_tensions_n()[0] - start) / 10.0;
    assert!(
        (reached - (1.0 - (-1.0_f64).exp())).abs() < 1e-9,
        "{reached} after one time constant"
    );

    let limited = TendonOptions {
        rate_limit_n_s: 100.0,
        ..quick
    };
    let mut plant = Plant::new(
        &arm,
        PlantOptions {
            tendons: limited,
            ..driven_by(TipDrive::Held)
        },
    );
    plant.hold(0.0);
    for k in 1..=100 {
        plant
            .step(0.002, [start + 40.0, start])
            .expect("the motion can be followed");
        let gained = plant.actuator_tensions_n()[0] - start;
        assert!(
            gained <= 100.0 * 0.002 * f64::from(k) + 1e-9,
            "{gained} after {k} ticks"
        );
    }
    // A ramp is followed one time constant behind.
    let behind = start + 20.0 - plant.actuator_tensions_n()[0];
    assert!(
        (behind / (100.0 * limited.lag_s) - 1.0).abs() < 0.1,
        "{behind}"
    );
}

#[test]
fn guides_keep_part_of_the_tension_either_way() {
    let arm = wand();
    let friction_fraction = 0.1;
    let tendons = TendonOptions {
        friction_fraction,
        ..TendonOptions::default()
    };
    let mut plant = Plant::new(
        &arm,
        PlantOptions {
            tendons,
            ..driven_by(TipDrive::Held)
        },
    );
    plant.hold(0.0);
    let mut ratio_at = |command_n: f64| {
        plant
            .step(0.5, [command_n, 3.0])
            .expect("the motion can be followed");
        assert!((plant.actuator_tensions_n()[0] - command_n).abs() < 1e-6);
        plant.tip_tensions_n()[0] / command_n
    };
    let kept = 1.0 - friction_fraction;
    assert!(
        (ratio_at(30.0) - kept).abs() < 1e-9,
        "wound in: the tip feels less"
    );
    let stuck = ratio_at(28.0);
    assert!(
        stuck > kept && stuck < 1.0 / kept,
        "a small change does not slide through the guides: {stuck}"
    );
    assert!(
        (ratio_at(10.0) - 1.0 / kept).abs() < 1e-9,
        "paid out: the tip feels more"
    );
}

#[test]
fn broken_tendon_stays_without_tension() {
    let arm = wand();
    let state = &stable_rest(&arm, 0.5)[0];
    let mut plant = Plant::new(&arm, PlantOptions::default());
    let tensions_n = plant.set_rest(&state.c).expect("the plant rests there too");
    let loaded = usize::from(tensions_n[1] > tensions_n[0]);
    plant.break_tendon([Side::A, Side::B][loaded]);
    for _ in 0..400 {
        plant
            .step(0.005, tensions_n)
            .expect("the motion can be followed");
        assert_eq!(
            (
                plant.tip_tensions_n()[loaded],
                plant.actuator_tensions_n()[loaded]
            ),
            (0.0, 0.0)
        );
    }
    assert!(
        (plant.tip().angle_rad - 0.5).abs() > 0.1,
        "nothing holds the tip any more"
    );
    assert_eq!(plant.sense().tension_n[loaded], 0.0);
}

#[test]
fn sensors_are_late_by_whole_ticks_and_step_by_their_quantum() {
    let quantum = 0.01;
    let tip_angle = SensorOptions {
        delay_ticks: 3,
        ..SensorOptions::default()
    };
    let mid_angle = SensorOptions {
        quantum,
        bias: 0.02,
        ..SensorOptions::default()
    };
    let mut plant = Plant::new(
        &wand(),
        PlantOptions {
            tip_angle,
            mid_angle,
            ..driven_by(TipDrive::Free)
        },
    );
    plant.set_motion(&[0.7, 0.4, -0.2], &[]);
    let mut truth = vec![];
    for k in 0..100_usize {
        truth.push(plant.tip().angle_rad);
        let mid = plant.angle_rad(0.5) + 0.02;
        let sensed = plant.sense();
        assert_eq!(sensed.tip_angle_rad, truth[k.saturating_sub(3)], "tick {k}");
        let steps = sensed.mid_angle_rad / quantum;
        assert!(
            (steps - steps.round()).abs() < 1e-9
                && (sensed.mid_angle_rad - mid).abs() <= 0.5001 * quantum
        );
        plant
            .step(0.004, [0.0; 2])
            .expect("the motion can be followed");
    }
}

#[test]
fn noise_is_normal_with_the_asked_deviation() {
    let sensor = SensorOptions {
        noise: 0.2,
        bias: -0.05,
        ..SensorOptions::default()
    };
    let mut plant = Plant::new(
        &wand(),
        PlantOptions {
            tip_angle: sensor,
            mid_angle: sensor,
            ..PlantOptions::default()
        },
    );
    let count = 40_000;
    let (mut sum, mut square, mut cross, mut beyond) = (0.0, 0.0, 0.0, 0);
    for _ in 0..count {
        let sensed = plant.sense();
        let [a, b] = [sensed.tip_angle_rad, sensed.mid_angle_rad].map(|x| (x + 0.05) / 0.2);
        sum += a;
        square += a * a;
        cross += a * b;
        beyond += u32::from(a.abs() > 1.959_964);
    }
    // Five standard deviations of each estimate, with a fixed seed.
    let count = f64::from(count);
    let error = 1.0 / count.sqrt();
    assert!((sum / count).abs() < 5.0 * error);
    assert!((square / count - 1.0).abs() < 5.0 * 2.0_f64.sqrt() * error);
    assert!(
        (cross / count).abs() < 5.0 * error,
        "two sensors err independently"
    );
    assert!((f64::from(beyond) / count - 0.05).abs() < 5.0 * (0.05_f64 * 0.95).sqrt() * error);
}

#[test]
fn faulty_sensors_freeze_drop_out_and_jump() {
    let tip_angle = SensorOptions {
        noise: 0.01,
        ..SensorOptions::default()
    };
    let mut plant = Plant::new(
        &wand(),
        PlantOptions {
            tip_angle,
            ..PlantOptions::default()
        },
    );
    let mut sound = plant.clone();
    let before = plant.sense().tip_angle_rad;
    sound.sense();
    plant.set_sensor_fault(SensorName::TipAngle, SensorFault::Frozen);
    plant.set_sensor_fault(SensorName::MidAngle, SensorFault::Dropout);
    plant.set_sensor_fault(SensorName::Tension(Side::B), SensorFault::Offset(2.5));
    for _ in 0..5 {
        let (sensed, sound) = (plant.sense(), sound.sense());
        assert_eq!(sensed.tip_angle_rad, before);
        assert!(sound.tip_angle_rad != before);
        assert!(sensed.mid_angle_rad.is_nan());
        assert_eq!(
            sensed.tension_n,
            [sound.tension_n[0], sound.tension_n[1] + 2.5]
        );
    }
    for name in [
        SensorName::TipAngle,
        SensorName::MidAngle,
        SensorName::Tension(Side::B),
    ] {
        plant.set_sensor_fault(name, SensorFault::None);
    }
    assert_eq!(plant.sense(), sound.sense(), "faults leave no trace");
}

#[test]
fn same_seed_same_run() {
    let run = |seed: u64| {
        let noisy = SensorOptions {
            noise: 0.01,
            bias: 0.001,
            delay_ticks: 2,
            quantum: 1e-4,
        };
        let options = PlantOptions {
            tip_angle: noisy,
            mid_angle: noisy,
            seed,
            ..PlantOptions::default()
        };
        let mut plant = Plant::new(&wand(), options);
        plant.set_motion(&[0.7, 0.4, -0.2], &[]);
        plant.hold(0.0);
        let mut sums = vec![];
        for _ in 0..200 {
            // The commands depend on the readings: every difference comes through.
            let pull_n = 20.0 * plant.sense().tip_angle_rad;
            plant
                .step(0.005, [3.0 - pull_n, 3.0 + pull_n])
                .expect("the motion can be followed");
            sums.push(plant.tip().angle_rad.to_bits());
        }
        sums
    };
    assert_eq!(run(7), run(7));
    assert_ne!(run(7), run(8));
}

#[test]
fn payload_and_tilt_change_what_they_should() {
    let arm = wand();
    let state = &stable_rest(&arm, 0.5)[0];
    let mut plant = Plant::new(&arm, PlantOptions::default());
    let tensions_n = plant.set_rest(&state.c).expect("the plant rests there too");
    let (light_kg, energy, height_m) = (
        plant.tip_effective_mass_kg().expect("mass"),
        plant.energy(),
        plant.tip().position_m[1],
    );
    plant.set_payload_kg(arm.payload.mass_kg + 0.04);
    assert!(plant.tip_effective_mass_kg().expect("mass") > light_kg + 0.039);
    let lifted_j = 0.04 * STANDARD_GRAVITY_M_S2 * height_m;
    assert!(
        (plant.energy().potential_j - energy.potential_j - lifted_j).abs() < 1e-9,
        "the extra mass hangs at the tip"
    );
    plant
        .step(0.2, tensions_n)
        .expect("the motion can be followed");
    assert!(plant.tip().speed_m_s() > 0.01, "the balance is gone");

    let mut plant = Plant::new(&arm, PlantOptions::default());
    plant.set_rest(&state.c).expect("the plant rests there too");
    let [x, y] = plant.tip().position_m;
    let tilt_rad = 0.1_f64;
    plant.tilt_base(tilt_rad);
    let (sin, cos) = tilt_rad.sin_cos();
    let [tilted_x, tilted_y] = plant.tip().position_m;
    assert!(
        (tilted_x - (x * cos + y * sin)).abs() < 1e-9
            && (tilted_y - (y * cos - x * sin)).abs() < 1e-9
    );
    assert_eq!(plant.arm().base.tilt_rad, arm.base.tilt_rad + tilt_rad);
}

#[test]
fn massless_spine_and_many_modes_can_be_followed() {
    let massless = UniformArm::with_tip_mass(0.08).held_tip(0.0);
    for (arm, modes) in [(massless, 6), (wand(), 2), (wand(), 12)] {
        let mut plant = Plant::new(
            &arm,
            PlantOptions {
                modes,
                ..PlantOptions::default()
            },
        );
        plant.set_motion(&[0.7, 0.4], &[]);
        plant.hold(0.0);
        let before_j = mechanical_j(&plant);
        for _ in 0..400 {
            plant
                .step(0.005, [1.0, 1.0])
                .expect("the motion can be followed");
        }
        assert!(
            plant.tip().angle_rad.is_finite() && mechanical_j(&plant) < before_j,
            "{} {modes}",
            arm.name
        );
    }
}
