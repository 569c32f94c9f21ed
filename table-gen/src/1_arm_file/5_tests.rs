//! Each kind of badness: the message holds the place, the value and what is allowed, on one screen.

use super::{Arm, Drive, Profile, STANDARD_GRAVITY_M_S2, limits, parse, read};

#[path = "5_tests/1_safety.rs"]
mod safety;

const GOOD: &str = r#"name = "test arm"
[spine]
length_m = 0.5
bending_stiffness_n_m2 = [[0, 0.04], [1, 0.02]]
mass_per_length_kg_m = 0.1
thickness_m = 0.001
allowed_strain = 0.004
damping_ratio = 0.03
[[lump]]
at = 0.5
mass_kg = 0.01
[payload]
mass_kg = 0.04
[base]
tilt_deg = 180
[tendons]
offset_m = 0.01
pretension_n = 3
max_tension_n = 60
[drive]
kind = "held-tip"
setpoints_deg = [-90, 90]
"#;

fn good() -> Arm {
    parse(GOOD, "arm.toml").unwrap_or_else(|error| panic!("{error}"))
}

fn with(from: &str, to: &str) -> String {
    assert!(GOOD.contains(from), "the good file does not hold {from:?}");
    GOOD.replacen(from, to, 1)
}

/// `text` is refused at `place` in words that hold every one of `said`.
#[track_caller]
fn refused_text(text: &str, place: &str, said: &[&str]) {
    let message = match parse(text, "arm.toml") {
        Ok(_) => panic!("accepted:\n{text}"),
        Err(error) => error.to_string(),
    };
    for part in said
        .iter()
        .copied()
        .chain([format!("arm.toml:{place}\n").as_str()])
    {
        assert!(message.contains(part), "{part:?} is not in\n{message}");
    }
    assert!(message.starts_with("error: "), "{message}");
    assert!(message.lines().count() <= 10, "too tall:\n{message}");
    assert!(
        message.lines().all(|line| line.chars().count() <= 180),
        "too wide:\n{message}"
    );
    assert!(
        !message.contains('\u{1b}'),
        "colours in plain text: {message}"
    );
}

/// The good file with `from` turned into `to` is refused.
#[track_caller]
fn refused(from: &str, to: &str, place: &str, said: &[&str]) {
    refused_text(&with(from, to), place, said);
}

#[test]
fn good_file_is_read_in_si_units() {
    let arm = good();
    assert_eq!(arm.name, "test arm");
    assert_eq!(
        arm.spine.bending_stiffness_n_m2.knots(),
        [(0.0, 0.04), (1.0, 0.02)]
    );
    assert_eq!(arm.spine.rest_curvature_rad_m, Profile::constant(0.0));
    assert_eq!(arm.base.tilt_rad, std::f64::consts::PI);
    let Drive::HeldTip { setpoints_rad } = arm.drive else {
        panic!("{:?}", arm.drive)
    };
    assert_eq!(setpoints_rad, [-90f64, 90.0].map(f64::to_radians));
    assert_eq!(arm.accuracy.angle_rad, 0.05f64.to_radians());
    assert_eq!(arm.accuracy.couple_fraction, 0.005);
    let no_lump = with("[[lump]]\nat = 0.5\nmass_kg = 0.01\n", "");
    assert!(parse(&no_lump, "arm.toml").unwrap().lumps.is_empty());
    let couple = with(
        "held-tip\"\nsetpoints_deg",
        "applied-couple\"\nsetpoints_n_m",
    );
    let drive = parse(&couple, "arm.toml").unwrap().drive;
    assert_eq!(
        drive,
        Drive::AppliedCouple {
            setpoints_n_m: [-90.0, 90.0]
        }
    );
    let fine = format!("{GOOD}[accuracy]\nangle_deg = 1e-6\n");
    assert_eq!(
        parse(&fine, "arm.toml").unwrap().accuracy.angle_rad,
        1e-6f64.to_radians()
    );
}

#[test]
fn mass_stiffness_and_gamma() {
    let arm = good();
    assert!((arm.total_mass_kg() - 0.1).abs() < 1e-15);
    assert!((arm.mean_bending_stiffness_n_m2() - 0.03).abs() < 1e-15);
    let gamma = 0.03 / (0.1 * STANDARD_GRAVITY_M_S2 * 0.25);
    assert!((arm.gamma() / gamma - 1.0).abs() < 1e-14);
}

#[test]
fn fingerprint_follows_values_and_not_layout() {
    let arm = good();
    let other_layout = with("length_m = 0.5", "  length_m = 5e-1   # half a metre");
    assert_eq!(
        arm.fingerprint(),
        parse(&other_layout, "b.toml").unwrap().fingerprint()
    );
    for (from, to) in [
        ("0.04]", "0.041]"),
        ("tilt_deg = 180", "tilt_deg = 179"),
        ("test", "best"),
        ("[-90, 90]", "[-90, 91]"),
    ] {
        let changed = parse(&with(from, to), "arm.toml").unwrap();
        assert_ne!(arm.fingerprint(), changed.fingerprint(), "{from} -> {to}");
    }
}

#[test]
fn shipped_examples_are_accepted() {
    for (example, text) in [
        (
            "greenhouse-wand",
            include_str!("../../../examples/greenhouse-wand/arm.toml"),
        ),
        (
            "tank-lance",
            include_str!("../../../examples/tank-lance/arm.toml"),
        ),
        (
            "duct-probe",
            include_str!("../../../examples/duct-probe/arm.toml"),
        ),
    ] {
        let arm = parse(text, example).unwrap_or_else(|error| panic!("{error}"));
        assert!(
            text.starts_with("# Invented example"),
            "{example} must say it is invented"
        );
        assert!(
            (0.05..0.5).contains(&arm.gamma()),
            "{example}: gamma {}",
            arm.gamma()
        );
    }
}

#[test]
fn readme_lists_the_ranges() {
    let readme = include_str!("../../../README.md");
    for limits in [
        limits::LENGTH,
        limits::STIFFNESS,
        limits::MASS_PER_LENGTH,
        limits::REST_CURVATURE,
        limits::THICKNESS,
        limits::STRAIN,
        limits::DAMPING,
        limits::LUMP_AT,
        limits::MASS,
        limits::TILT,
        limits::OFFSET,
        limits::PRETENSION,
        limits::MAX_TENSION,
        limits::SETPOINTS_DEG,
        limits::SETPOINTS_N_M,
        limits::ANGLE,
        limits::COUPLE,
        limits::PAYLOAD_RANGE,
        limits::TILT_TOLERANCE,
        limits::STIFFNESS_TOLERANCE,
        limits::KNOCK,
        limits::PAYLOAD_RESERVE,
        limits::STIFFNESS_RESERVE,
        limits::SETPOINT_RESERVE_DEG,
        limits::SETPOINT_RESERVE_N_M,
        limits::TENSION_FACTOR,
        limits::CLEARANCE,
        limits::POINT,
        limits::NORMAL,
        limits::CENTRE,
        limits::RADIUS,
        limits::TIP_TRAVEL,
        limits::TIP_SPEED,
        limits::SWING_COUPLE,
    ] {
        let row = readme
            .lines()
            .find(|line| line.starts_with('|') && line.contains(&format!("{}`", limits.key)))
            .unwrap_or_else(|| panic!("README.md has no row for {}", limits.key));
        assert!(
            row.contains(&limits.to_string()),
            "{row}\ndoes not say {limits}"
        );
    }
}

#[test]
fn syntax() {
    refused("0.5\n", "\n", "3:12", &["length_m =", "allowed: a number"]);
    refused(
        "0.5\n",
        "0.5 m\n",
        "3:12",
        &["found 0.5 m", "allowed: a number"],
    );
    refused(
        "\"test arm\"",
        "\"test arm",
        "1:17",
        &["invalid basic string", "allowed: \""],
    );
    refused("[base]", "[base", "14:6", &["[base", "allowed: ]"]);
    refused(
        "at = 0.5",
        "at = 0.5\nat = 0.6",
        "11:1",
        &["found at", "each key once"],
    );
}

#[test]
fn unknown_keys_list_the_known_ones() {
    refused(
        "length_m",
        "lenght_m",
        "3:1",
        &[
            "unknown key `lenght_m`",
            "allowed: length_m, bending_stiffness_n_m2, mass_per_length_kg_m",
        ],
    );
    refused(
        "[payload]",
        "[paylod]",
        "12:2",
        &["`paylod`", "allowed: name, spine, lump, payload"],
    );
    refused(
        "at = 0.5",
        "at = 0.5\nkg = 2",
        "11:1",
        &["`kg`", "allowed: at or mass_kg"],
    );
}

#[test]
fn wrong_kinds() {
    refused(
        "= 0.5\n",
        "= \"0.5\"\n",
        "3:12",
        &["found \"0.5\"", "allowed: a number"],
    );
    refused(
        "= 0.1\n",
        "= true\n",
        "5:24",
        &["found true", "a number, or knots [[s, value], ...]"],
    );
    refused(
        "\"test arm\"",
        "7",
        "1:8",
        &["found 7", "allowed: a string"],
    );
    refused(
        "[[lump]]",
        "[lump]",
        "9:1",
        &["found [lump]", "[[lump]] sections (double brackets)"],
    );
    refused(
        "[-90, 90]",
        "90",
        "22:17",
        &["found 90", "allowed: two numbers [lowest, highest]"],
    );
    refused(
        "[-90, 90]",
        "[1, 2, 3]",
        "22:17",
        &["found [1, 2, 3]", "two numbers [lowest"],
    );
    refused(
        "[1, 0.02]",
        "[1]",
        "4:38",
        &["found [1]", "a knot [s, value] of two numbers"],
    );
    refused(
        "[1, 0.02]",
        "[1, 'x']",
        "4:42",
        &["found 'x'", "allowed: a number"],
    );
    refused(
        "[[0, 0.04], [1, 0.02]]",
        "[1, 0.02]",
        "4:27",
        &["found 1", "a knot [s, value]"],
    );
    let section = format!("payload = 3\n{}", with("[payload]\nmass_kg = 0.04\n", ""));
    refused_text(
        &section,
        "1:11",
        &["found 3", "a section, [payload] with mass_kg"],
    );
}

#[test]
fn missing_keys_and_sections() {
    refused(
        "length_m = 0.5\n",
        "",
        "2:1",
        &["spine.length_m is missing", "0.01 to 20 m"],
    );
    refused(
        "at = 0.5\n",
        "",
        "9:1",
        &["lump.at is missing", "more than 0, at most 1"],
    );
    refused(
        "tilt_deg = 180\n",
        "",
        "14:1",
        &["base.tilt_deg is missing", "-360 to 360 deg"],
    );
    refused(
        "kind = \"held-tip\"\n",
        "",
        "20:1",
        &["drive.kind is missing", "\"applied-couple\""],
    );
    refused(
        "name = \"test arm\"",
        "",
        "1:1",
        &["key name is missing", "1 to 60 characters"],
    );
    refused(
        "setpoints_deg = [-90, 90]\n",
        "",
        "20:1",
        &["setpoints_deg is missing", "-720 to 720"],
    );
    let no_drive = &GOOD[..GOOD.find("[drive]").unwrap()];
    refused_text(
        no_drive,
        "19:19",
        &["section [drive] is missing", "[spine], [payload], [base]"],
    );
    refused_text("", "1:1", &["name is missing"]);
}

#[test]
fn every_number_is_held_to_its_range() {
    for bad in [
        "0.005",
        "600",
        "-1",
        "nan",
        "-nan",
        "inf",
        "99999999999999999999999999",
    ] {
        let found = format!("found {bad}\n");
        refused(
            "0.5\n",
            &format!("{bad}\n"),
            "3:12",
            &[&found, "0.01 to 20 m"],
        );
    }
    refused("0.001\n", "1\n", "6:15", &["found 1", "1e-5 to 0.2 m"]);
    refused(
        "0.004\n",
        "0.5\n",
        "7:18",
        &["found 0.5", "more than 0, less than 0.5"],
    );
    refused(
        "0.03\n",
        "1\n",
        "8:17",
        &["found 1", "at least 0, less than 1"],
    );
    refused(
        "= 0.1\n",
        "= -0.1\n",
        "5:24",
        &["found -0.1", "0 to 50 kg/m"],
    );
    refused(
        "at = 0.5",
        "at = 0",
        "10:6",
        &["found 0", "more than 0, at most 1"],
    );
    refused(
        "mass_kg = 0.01\n",
        "mass_kg = -1\n",
        "11:11",
        &["found -1", "0 to 200 kg"],
    );
    refused(
        "mass_kg = 0.04\n",
        "mass_kg = -0.04\n",
        "13:11",
        &["payload.mass_kg", "0 to 200 kg"],
    );
    refused("= 180", "= 361", "15:12", &["found 361", "-360 to 360 deg"]);
    refused(
        "= 0.01\npre",
        "= 12\npre",
        "17:12",
        &["found 12", "1e-4 to 1 m"],
    );
    refused("= 3\n", "= -3\n", "18:16", &["found -3", "0 to 1e5 N"]);
    refused(
        "= 60\n",
        "= inf\n",
        "19:17",
        &["found inf", "more than 0, at most 1e5 N"],
    );
    refused(
        "= 60\n",
        "= 3\n",
        "19:17",
        &["found 3", "more than pretension_n, 3 N"],
    );
    refused(
        "[-90, 90]",
        "[-90, 721]",
        "22:23",
        &["found 721", "-720 to 720 deg"],
    );
    for (line, allowed) in [
        ("angle_deg = 0", "more than 0, at most 5 deg"),
        ("couple_percent = 11", "more than 0, at most 10 percent"),
    ] {
        let column = line.find("= ").unwrap() + 3;
        refused_text(
            &format!("{GOOD}[accuracy]\n{line}\n"),
            &format!("24:{column}"),
            &[allowed],
        );
    }
}

#[test]
fn knots() {
    let bad = |knots, place: &str, said: &[&str]| {
        refused("[[0, 0.04], [1, 0.02]]", knots, place, said);
    };
    bad(
        "[[0, 0.04], [0.5, 1], [0.4, 1]]",
        "4:49",
        &["found 0.4", "s above 0.5"],
    );
    bad(
        "[[0, 0.04], [0, 1]]",
        "4:39",
        &["out of order", "found 0", "s above 0"],
    );
    bad(
        "[[0, 0.04], [1.5, 1]]",
        "4:39",
        &["found 1.5", "s from 0 (base) to 1 (tip)"],
    );
    bad(
        "[[nan, 0.04]]",
        "4:28",
        &["found nan", "s from 0 (base) to 1 (tip)"],
    );
    bad(
        "[[0, 0.04], [1, 0]]",
        "4:42",
        &["bending_stiffness_n_m2", "found 0", "1e-9 to 1e6 N m2"],
    );
    bad(
        "[]",
        "4:26",
        &["has no knots", "found []", "1e-9 to 1e6 N m2"],
    );
    bad(
        "[\n  [0, 0.04],\n  [1, nan],\n]",
        "6:7",
        &["found nan", "1e-9 to 1e6 N m2"],
    );
}

#[test]
fn drive() {
    refused(
        "held-tip",
        "held",
        "21:8",
        &["found \"held\"", "\"held-tip\" (setpoints_deg) or"],
    );
    refused(
        "[-90, 90]",
        "[90, -90]",
        "22:17",
        &["found [90, -90]", "lowest below highest"],
    );
    refused(
        "[-90, 90]",
        "[5, 5]",
        "22:17",
        &["found [5, 5]", "lowest below highest"],
    );
    refused(
        "[-90, 90]",
        "[nan, 5]",
        "22:18",
        &["found nan", "-720 to 720 deg"],
    );
    let wrong = ["these setpoints do not belong", "found [-90, 90]"];
    refused("setpoints_deg", "setpoints_n_m", "22:17", &wrong);
    refused("held-tip", "applied-couple", "22:17", &wrong);
    let both = with("[-90, 90]", "[-90, 90]\nsetpoints_n_m = [-1, 1]");
    refused_text(&both, "23:17", &["found [-1, 1]", "only setpoints_deg"]);
}

#[test]
fn name() {
    refused(
        "test arm",
        "  ",
        "1:8",
        &["found \"  \"", "1 to 60 characters"],
    );
    refused(
        "test arm",
        "a\\u001b[31m",
        "1:8",
        &["a\\u001b[31m", "without control characters"],
    );
    refused(
        "test arm",
        &"Ω".repeat(61),
        "1:8",
        &["ΩΩΩ", "1 to 60 characters"],
    );
    refused(
        "test arm",
        &"Ω".repeat(9000),
        "1:8",
        &["ΩΩΩ", "1 to 60 characters"],
    );
    assert!(parse(&with("test arm", &"Ω".repeat(60)), "arm.toml").is_ok());
}

#[test]
fn values_that_do_not_go_together() {
    let massless = with("mass_per_length_kg_m = 0.1", "mass_per_length_kg_m = 0.0")
        .replace("mass_kg = 0.01", "mass_kg = 0")
        .replace("mass_kg = 0.04", "mass_kg = 0");
    refused_text(
        &massless,
        "13:11",
        &["no mass", "found 0", "more than 0 kg in total"],
    );
    let stiff = "30000";
    refused(
        "[[0, 0.04], [1, 0.02]]",
        stiff,
        "4:26",
        &["found 30000", "gamma", "1e-6 to 10000"],
    );
    let curl = "0.1\nrest_curvature_rad_m = -30";
    refused(
        "0.1",
        curl,
        "6:24",
        &["found -30", "up to 25.133 rad/m", "two full turns"],
    );
}

#[test]
fn line_ends_marks_and_tabs_do_not_move_the_place() {
    let bad = with("0.5\n", "600\n");
    refused_text(&bad.replace('\n', "\r\n"), "3:12", &["found 600"]);
    refused_text(&format!("\u{feff}{bad}"), "3:12", &["found 600"]);
    refused("at = 0.5", "at\t=\t\"é\" # \t", "10:6", &["found \"é\""]);
}

#[test]
fn colours_only_on_request() {
    let error = parse("", "arm.toml").unwrap_err();
    assert!(error.render(true).contains('\u{1b}'));
    assert_eq!(error.render(false), error.to_string());
}

#[test]
fn unreadable_files_say_path_and_reason() {
    let dir = tempfile::tempdir().unwrap();
    let absent = dir.path().join("absent.toml");
    let message = read(&absent).unwrap_err().to_string();
    assert!(
        message.contains("absent.toml: cannot be read: "),
        "{message}"
    );
    assert_eq!(message.lines().count(), 1, "{message}");
    let binary = dir.path().join("binary.toml");
    std::fs::write(&binary, b"name = \"a\"\n\xff\xfe").unwrap();
    let message = read(&binary).unwrap_err().to_string();
    assert!(
        message.contains("binary.toml: is not UTF-8 text (byte 12"),
        "{message}"
    );
    assert!(message.contains("on line 2"), "{message}");
    let long = dir.path().join("long.toml");
    std::fs::write(&long, vec![b'#'; (1 << 20) + 1]).unwrap();
    assert!(
        read(&long)
            .unwrap_err()
            .to_string()
            .contains("longer than 1 MiB")
    );
    let good_path = dir.path().join("good.toml");
    std::fs::write(&good_path, GOOD).unwrap();
    assert_eq!(read(&good_path).unwrap(), good());
}
