//! Tolerances, reserves, keep-outs and swing limits: defaults, values, and each kind of badness.

use super::{GOOD, good, limits, parse, refused, refused_text, with};
use crate::arm_file::{Arm, KeepOut, Payload, Region, Require, Swing, Tolerance};

/// Everything that may be added after the good file; its first line is line 23.
const MORE: &str = r#"[tolerance]
stiffness_percent = 10
[require]
knock_n_s = 0.01
payload_reserve_kg = 0.02
stiffness_reserve_percent = 20
setpoint_reserve_deg = 4
tension_factor = 1.5
clearance_m = 0.03
[[keep_out]]
name = "bench"
half_plane = { point_m = [0, -0.05], normal = [3, 4] }
[[keep_out]]
name = "lamp"
disc = { centre_m = [0.3, 0.5], radius_m = 0.06 }
[swing]
max_tip_travel_deg = 60
max_tip_speed_m_s = 3.5
max_couple_n_m = 0.35
"#;

fn full() -> Arm {
    let text = with(
        "mass_kg = 0.04\n",
        "mass_kg = 0.04\nrange_kg = [0.03, 0.05]\n",
    )
    .replace("tilt_deg = 180\n", "tilt_deg = 180\ntolerance_deg = 2\n")
        + MORE;
    parse(&text, "arm.toml").unwrap_or_else(|error| panic!("{error}"))
}

/// The good file with `MORE`, of which `from` turned into `to`, is refused.
#[track_caller]
fn refused_more(from: &str, to: &str, place: &str, said: &[&str]) {
    assert!(MORE.contains(from), "no {from:?}");
    refused_text(
        &format!("{GOOD}{}", MORE.replacen(from, to, 1)),
        place,
        said,
    );
}

/// The good file for the other drive kind, with `lines` added.
fn couple_with(lines: &str) -> String {
    let text = GOOD.replace(
        "\"held-tip\"\nsetpoints_deg",
        "\"applied-couple\"\nsetpoints_n_m",
    );
    format!("{text}{lines}")
}

#[test]
fn defaults() {
    let arm = good();
    assert_eq!(arm.payload.range_kg, [0.04, 0.04]);
    assert_eq!(arm.base.tolerance_rad, 0.0);
    assert_eq!(arm.tolerance, Tolerance::default());
    assert_eq!(arm.tolerance.stiffness_fraction, 0.0);
    assert_eq!(arm.require, Require::default());
    assert_eq!(
        arm.require,
        Require {
            knock_n_s: 0.0,
            payload_reserve_kg: 0.0,
            stiffness_reserve_fraction: 0.0,
            setpoint_reserve: 1f64.to_radians(),
            tension_factor: 1.3,
            clearance_m: 0.0,
        }
    );
    assert_eq!((arm.keep_out.len(), arm.swing), (0, None));
    let empty = format!("{GOOD}[tolerance]\n[require]\n");
    assert_eq!(parse(&empty, "arm.toml").unwrap(), arm);
    let couple = parse(&couple_with(""), "arm.toml").unwrap();
    assert!((couple.require.setpoint_reserve - 1.8).abs() < 1e-12);
    assert_eq!(couple.require.tension_factor, 1.3);
}

#[test]
fn values_are_read_in_si_units() {
    let arm = full();
    assert_eq!(arm.payload.range_kg, [0.03, 0.05]);
    assert_eq!(arm.base.tolerance_rad, 2f64.to_radians());
    assert_eq!(arm.tolerance.stiffness_fraction, 0.1);
    assert_eq!(
        arm.require,
        Require {
            knock_n_s: 0.01,
            payload_reserve_kg: 0.02,
            stiffness_reserve_fraction: 0.2,
            setpoint_reserve: 4f64.to_radians(),
            tension_factor: 1.5,
            clearance_m: 0.03,
        }
    );
    let [bench, lamp] = arm.keep_out.as_slice() else {
        panic!("{:?}", arm.keep_out)
    };
    assert_eq!(bench.name, "bench");
    let Region::HalfPlane { point_m, normal } = bench.region else {
        panic!("{bench:?}")
    };
    assert_eq!(point_m, [0.0, -0.05]);
    assert!((normal[0] - 0.6).abs() < 1e-15 && (normal[1] - 0.8).abs() < 1e-15);
    assert_eq!(
        *lamp,
        KeepOut {
            name: "lamp".to_owned(),
            region: Region::Disc {
                centre_m: [0.3, 0.5],
                radius_m: 0.06
            }
        }
    );
    assert_eq!(
        arm.swing,
        Some(Swing {
            max_tip_travel_rad: 60f64.to_radians(),
            max_tip_speed_m_s: 3.5,
            max_couple_n_m: 0.35
        })
    );
    let couple = couple_with("[require]\nsetpoint_reserve_n_m = 0.5\n");
    let couple = parse(&couple, "arm.toml").unwrap();
    assert_eq!(couple.require.setpoint_reserve, 0.5);
}

#[test]
fn clearance_is_positive_where_the_arm_may_be() {
    let (bench, lamp) = (full().keep_out[0].region, full().keep_out[1].region);
    // The line through (0, -0.05) across (3, 4)/5: the origin is 0.8 x 0.05 above it.
    assert!((bench.clearance_m([0.0, 0.0]) - 0.04).abs() < 1e-15);
    assert!((bench.clearance_m([0.0, -0.15]) + 0.08).abs() < 1e-15);
    assert!((lamp.clearance_m([0.3, 0.6]) - 0.04).abs() < 1e-15);
    assert!((lamp.clearance_m([0.27, 0.54]) + 0.01).abs() < 1e-15);
}

/// Components whose squares vanish still have a direction.
#[test]
fn tiny_normals_have_a_direction() {
    let text = format!("{GOOD}{}", MORE.replace("[3, 4]", "[3e-200, 4e-200]"));
    let arm = parse(&text, "arm.toml").unwrap();
    let Region::HalfPlane { normal, .. } = arm.keep_out[0].region else {
        panic!()
    };
    assert!((normal[0] - 0.6).abs() < 1e-15 && (normal[1] - 0.8).abs() < 1e-15);
}

#[test]
fn a_corner_is_one_definite_arm() {
    let arm = full();
    let corner = arm.varied(0.05, 0.9, -0.03);
    assert_eq!(
        corner.payload,
        Payload {
            mass_kg: 0.05,
            range_kg: [0.05; 2]
        }
    );
    assert_eq!(corner.base.tilt_rad, arm.base.tilt_rad - 0.03);
    assert_eq!(corner.base.tolerance_rad, 0.0);
    assert_eq!(corner.tolerance, Tolerance::default());
    let ratio = corner.mean_bending_stiffness_n_m2() / arm.mean_bending_stiffness_n_m2();
    assert!((ratio - 0.9).abs() < 1e-15);
    assert!((corner.total_mass_kg() - arm.total_mass_kg() - 0.01).abs() < 1e-15);
    assert_eq!(
        (corner.require, &corner.keep_out, corner.swing),
        (arm.require, &arm.keep_out, arm.swing)
    );
    assert_ne!(corner.fingerprint(), arm.fingerprint());
}

#[test]
fn payload_range() {
    let bad = |range: &str, place: &str, said: &[&str]| {
        refused(
            "mass_kg = 0.04\n",
            &format!("mass_kg = 0.04\nrange_kg = {range}\n"),
            place,
            said,
        );
    };
    let outside = [
        "range_kg does not contain the payload",
        "around mass_kg, 0.04 kg",
    ];
    bad("[0.05, 0.06]", "14:12", &outside);
    bad("[0.01, 0.03]", "14:12", &outside);
    bad(
        "[0.06, 0.03]",
        "14:12",
        &["found [0.06, 0.03]", "not a range", "[lowest, highest]"],
    );
    bad("[-0.01, 0.05]", "14:13", &["found -0.01", "0 to 200 kg"]);
    bad("[0.01, nan]", "14:19", &["found nan", "0 to 200 kg"]);
    bad("0.04", "14:12", &["found 0.04", "two numbers"]);
    let massless = with("mass_per_length_kg_m = 0.1", "mass_per_length_kg_m = 0.0")
        .replace("mass_kg = 0.01", "mass_kg = 0")
        .replace("mass_kg = 0.04", "mass_kg = 0.04\nrange_kg = [0, 0.04]");
    refused_text(
        &massless,
        "14:13",
        &["lightest payload", "found 0", "more than 0 kg in total"],
    );
}

#[test]
fn tolerances_are_held_to_their_ranges() {
    for bad in ["-1", "46", "nan"] {
        refused(
            "tilt_deg = 180\n",
            &format!("tilt_deg = 180\ntolerance_deg = {bad}\n"),
            "16:17",
            &["base.tolerance_deg", &format!("found {bad}"), "0 to 45 deg"],
        );
    }
    for bad in ["-1", "91", "inf"] {
        refused_more(
            "= 10\n",
            &format!("= {bad}\n"),
            "24:21",
            &[
                "tolerance.stiffness_percent",
                &format!("found {bad}"),
                "0 to 90 percent",
            ],
        );
    }
    // Stiff enough as measured, too stiff at the end of the tolerance.
    let stiff = with("[[0, 0.04], [1, 0.02]]", "2400") + "[tolerance]\nstiffness_percent = 50\n";
    refused_text(
        &stiff,
        "4:26",
        &["found 2400", "gamma", "at an end of", "1e-6 to 10000"],
    );
}

#[test]
fn reserves_are_held_to_their_ranges() {
    for (line, place, allowed) in [
        ("knock_n_s = 0.01", "26", limits::KNOCK),
        ("payload_reserve_kg = 0.02", "27", limits::PAYLOAD_RESERVE),
        (
            "stiffness_reserve_percent = 20",
            "28",
            limits::STIFFNESS_RESERVE,
        ),
        (
            "setpoint_reserve_deg = 4",
            "29",
            limits::SETPOINT_RESERVE_DEG,
        ),
        ("tension_factor = 1.5", "30", limits::TENSION_FACTOR),
        ("clearance_m = 0.03", "31", limits::CLEARANCE),
    ] {
        let key = line.split(' ').next().unwrap();
        for bad in ["-0.5", "1e9", "nan"] {
            let place = format!("{place}:{}", key.len() + 4);
            let said = [
                &format!("require.{key} is out of range"),
                &format!("found {bad}"),
                &allowed.to_string(),
            ];
            refused_more(
                line,
                &format!("{key} = {bad}"),
                &place,
                &said.map(String::as_str),
            );
        }
    }
    refused_more("= 1.5", "= 0.9", "30:18", &["found 0.9", "1 to 100"]);
    refused_more(
        "percent = 20",
        "percent = 90",
        "28:29",
        &["no stiffness is left", "found 90", "less than 90 percent"],
    );
    refused_more(
        "knock_n_s",
        "knock",
        "26:1",
        &["unknown key `knock`", "allowed: knock_n_s, payload_reserve"],
    );
}

#[test]
fn setpoint_reserve_goes_with_the_drive() {
    refused_more(
        "setpoint_reserve_deg = 4",
        "setpoint_reserve_n_m = 4",
        "29:24",
        &[
            "does not belong to drive kind \"held-tip\"",
            "found 4",
            "only setpoint_reserve_deg, 0 to 90 deg",
        ],
    );
    refused_text(
        &couple_with("[require]\nsetpoint_reserve_deg = 4\n"),
        "24:24",
        &[
            "does not belong to drive kind \"applied-couple\"",
            "found 4",
            "only setpoint_reserve_n_m, 0 to 1e5 N m",
        ],
    );
    refused_text(
        &couple_with("[require]\nsetpoint_reserve_n_m = -1\n"),
        "24:24",
        &["found -1", "0 to 1e5 N m"],
    );
}

#[test]
fn keep_outs() {
    let region = [
        "one of half_plane = { point_m = [x, y], normal",
        "disc = { centre_m",
    ];
    let disc = "disc = { centre_m = [0.3, 0.5], radius_m = 0.06 }";
    refused_more(
        disc,
        "",
        "35:1",
        &["this keep-out has no region", region[0], region[1]],
    );
    refused_more(
        disc,
        &format!("{disc}\nhalf_plane = {{ point_m = [0, -1], normal = [0, 1] }}"),
        "38:14",
        &["two regions", "found { point_m", region[0], region[1]],
    );
    refused_more(
        "\"lamp\"",
        "\" bench \"",
        "36:8",
        &[
            "there already",
            "found \" bench \"",
            "no other [[keep_out]]",
        ],
    );
    refused_more(
        "\"lamp\"",
        "\"a\\u001b[31m\"",
        "36:8",
        &["keep_out.name is not allowed", "without control characters"],
    );
    refused_more(
        "name = \"lamp\"\n",
        "",
        "35:1",
        &["keep_out.name is missing", "1 to 60 characters"],
    );
    refused_more(
        "name = \"lamp\"\n",
        "name = \"lamp\"\ncircle = 1\n",
        "37:1",
        &["unknown key `circle`", "allowed: name, half_plane, disc"],
    );
    refused_text(
        &format!("{GOOD}[keep_out]\nname = \"a\"\n"),
        "23:1",
        &[
            "found [keep_out]",
            "[[keep_out]] sections (double brackets)",
        ],
    );
}

#[test]
fn regions() {
    refused_more(
        "[3, 4]",
        "[0, -0.0]",
        "34:47",
        &["no direction", "found [0, -0.0]", "not both 0"],
    );
    refused_more("[3, 4]", "[3, nan]", "34:51", &["found nan", "-1e6 to 1e6"]);
    refused_more(
        "[0, -0.05]",
        "[0, -101]",
        "34:30",
        &["half_plane.point_m", "found -101", "-100 to 100 m"],
    );
    refused_more(
        "[0, -0.05]",
        "[0, -1, 2]",
        "34:26",
        &["found [0, -1, 2]", "two numbers [x, y]"],
    );
    refused_more(
        ", normal = [3, 4]",
        "",
        "34:14",
        &["keep_out.half_plane.normal is missing", "[x, y], each -1e6"],
    );
    refused_more(
        "{ centre_m = [0.3, 0.5], radius_m = 0.06 }",
        "0.06",
        "37:8",
        &["found 0.06", "{ centre_m = [x, y], radius_m = r }"],
    );
    refused_more(
        "[0.3, 0.5]",
        "[0.3, inf]",
        "37:27",
        &["found inf", "-100 to 100 m"],
    );
    for bad in ["0", "-0.06", "nan"] {
        refused_more(
            "radius_m = 0.06",
            &format!("radius_m = {bad}"),
            "37:44",
            &[
                "keep_out.disc.radius_m",
                &format!("found {bad}"),
                "more than 0, at most 100 m",
            ],
        );
    }
    refused_more(
        ", radius_m = 0.06",
        ", radius_mm = 60",
        "37:33",
        &["`radius_mm`", "allowed: centre_m or radius_m"],
    );
}

#[test]
fn the_base_itself_must_be_clear() {
    refused_more(
        "radius_m = 0.06",
        "radius_m = 0.6",
        "37:8",
        &["contains the base", "found { centre_m", "-0.017 m"],
    );
    refused_more(
        "clearance_m = 0.03",
        "clearance_m = 0.05",
        "34:14",
        &["too near", "require.clearance_m, 0.05 m", "0.040 m"],
    );
}

#[test]
fn swing() {
    for (line, place, allowed) in [
        ("max_tip_travel_deg = 60", "39:22", limits::TIP_TRAVEL),
        ("max_tip_speed_m_s = 3.5", "40:21", limits::TIP_SPEED),
        ("max_couple_n_m = 0.35", "41:18", limits::SWING_COUPLE),
    ] {
        let key = line.split(' ').next().unwrap();
        for bad in ["0", "-1", "1e9", "nan"] {
            let said = [
                &format!("swing.{key} is out of range"),
                &format!("found {bad}"),
                &allowed.to_string(),
            ];
            refused_more(
                line,
                &format!("{key} = {bad}"),
                place,
                &said.map(String::as_str),
            );
        }
        let missing = format!("swing.{key} is missing");
        refused_more(
            &format!("{line}\n"),
            "",
            "38:1",
            &[&missing, &allowed.to_string()],
        );
    }
    refused_more(
        "max_couple_n_m",
        "max_couple",
        "41:1",
        &["unknown key `max_couple`", "max_tip_speed_m_s"],
    );
}
