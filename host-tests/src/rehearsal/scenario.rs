//! Scenario files.
//!
//! ```toml
//! name = "move"
//! shows = "what a reader is to learn from it"
//! lasts_s = 10.0
//!
//! [arm]                        # what is really there; left out: as in the arm file
//! payload_kg = 0.060
//! stiffness_factor = 1.0
//! damping_factor = 1.0
//! tilt_off_deg = 0.0
//! friction = 0.05              # part of the tension that the guides keep
//! angle_noise_deg = 0.1
//! angle_bias_deg = 0.0
//! delay_ticks = 1
//!
//! [told]                       # what the firmware is told
//! payload_kg = 0.060           # left out: that of the arm file; or payload = "unknown"
//! plans = true                 # false: the crossings are taken out of its table
//!
//! [start]
//! branch = 0
//! setpoint_deg = 0.0           # or setpoint_n_m, after the drive of the arm
//!
//! [[do]]                       # any number, in any order; every key but at_s may be left out
//! at_s = 2.0
//! setpoint_deg = -30.0         # ask for a setpoint, a branch, give or take permission, arm, stop
//! branch = 2
//! swing_permitted = true
//! rearm = true
//! stop = true
//! told_payload_kg = 0.050
//! knock_n_s = 0.1              # what happens to the arm: a knock across the tip, another payload, a broken tendon
//! payload_kg = 0.075
//! break_tendon = "a"
//! sensor = "tip-angle"         # tip-angle, mid-angle, tension-a, tension-b
//! fault = "frozen"             # frozen, dropout, none; or offset_deg, offset_n
//!
//! [expect]                     # at the end
//! mode = "hold"
//! branch = 0
//! refused = ["no-plan"]        # why the crossing to the wanted branch is not made, any of these
//! tip_angle_deg = -30.0        # where the tip really is, within within_deg (2 when left out)
//! must = ["knocked over"]      # events by their names
//! must_not = ["timed out"]
//!
//! [expect_without_plan]        # instead of [expect] when the table has no allowed crossing for the payload told
//! ```

use super::place::Page;
pub use super::place::ScenarioError;
use super::words::{mode_named, refusal_named};
use firmware_core::Payload;
use firmware_core::supervisor::{Events, Mode};
use serde::Deserialize;
use std::ops::RangeInclusive;
use std::path::Path;
use table_gen::arm_file::{Arm, Drive};
use table_gen::plan::plant::{SensorFault, SensorName, Side};
use toml::Spanned;

/// Where the shipped scenarios lie.
pub const SHIPPED: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/scenarios");
/// Longest run (s).
const LONGEST_S: f64 = 600.0;
/// How far the tip may be from where it is expected when the file does not say (rad).
const DEFAULT_WITHIN_RAD: f64 = 0.035;

/// A rehearsal, checked.
#[derive(Clone, Debug, PartialEq)]
pub struct Scenario {
    /// What it is called.
    pub name: String,
    /// What it is meant to show.
    pub shows: String,
    /// How long it runs (s).
    pub lasts_s: f64,
    /// What is really there.
    pub real: RealArm,
    /// What the firmware is told about the payload at first.
    pub payload: Payload,
    /// Whether the firmware has the crossings of its table.
    pub plans: bool,
    /// Branch at the beginning.
    pub branch: u8,
    /// Setpoint at the beginning (rad or N m).
    pub setpoint: f64,
    /// What happens, in order of time.
    pub actions: Vec<Action>,
    /// What is expected.
    pub expect: Expected,
    /// What is expected instead when the table has no allowed crossing for the payload told.
    pub expect_without_plan: Option<Expected>,
}

/// What is really there, beside the arm file.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RealArm {
    /// Payload carried (kg), >= 0.
    pub payload_kg: f64,
    /// Bending stiffness over that of the arm file, > 0.
    pub stiffness_factor: f64,
    /// Damping ratio over that of the arm file, > 0.
    pub damping_factor: f64,
    /// Base tilt beyond that of the arm file (rad).
    pub tilt_off_rad: f64,
    /// Part of the tension that the guides keep, 0 to below 1.
    pub friction: f64,
    /// Standard deviation of the noise of the angle sensors (rad).
    pub angle_noise_rad: f64,
    /// Constant error of the tip sensor (rad); the mid-length sensor has the opposite one.
    pub angle_bias_rad: f64,
    /// Age of all readings (ticks).
    pub delay_ticks: usize,
}

impl RealArm {
    /// As the arm file says, with good sensors.
    pub fn nominal(arm: &Arm) -> Self {
        Self {
            payload_kg: arm.payload.mass_kg,
            stiffness_factor: 1.0,
            damping_factor: 1.0,
            tilt_off_rad: 0.0,
            friction: 0.05,
            angle_noise_rad: 0.1_f64.to_radians(),
            angle_bias_rad: 0.0,
            delay_ticks: 1,
        }
    }
}

/// Something that happens.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Action {
    /// When (s).
    pub at_s: f64,
    /// What.
    pub what: What,
}

/// What may happen.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum What {
    /// A setpoint is asked for (rad or N m).
    Setpoint(f64),
    /// A branch is asked for.
    Branch(u8),
    /// Swinging is permitted, or no longer.
    Permit(bool),
    /// The request to arm is given, or taken back.
    Rearm(bool),
    /// The request to stop is given, or taken back.
    Stop(bool),
    /// Another payload is declared.
    Told(Payload),
    /// A knock across the tip (N s).
    Knock(f64),
    /// The tip really carries this from now on (kg).
    Payload(f64),
    /// A tendon breaks.
    BreakTendon(Side),
    /// A sensor goes wrong, or right again.
    Fault(SensorName, SensorFault),
}

/// What is expected at the end.
#[derive(Clone, Debug, PartialEq)]
pub struct Expected {
    /// The mode.
    pub mode: Mode,
    /// The branch, when it matters.
    pub branch: Option<u8>,
    /// Why the crossing is not made: one of these names; empty when it does not matter.
    pub refused: Vec<&'static str>,
    /// Where the tip really is and how far off it may be (rad), when it matters.
    pub tip: Option<(f64, f64)>,
    /// Events that must have occurred.
    pub must: Events,
    /// Events that must not.
    pub must_not: Events,
}

type Written<T> = Option<Spanned<T>>;

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct WrittenScenario {
    name: Spanned<String>,
    shows: Spanned<String>,
    lasts_s: Spanned<f64>,
    #[serde(default)]
    arm: WrittenArm,
    #[serde(default)]
    told: WrittenTold,
    start: Spanned<WrittenStart>,
    #[serde(default, rename = "do")]
    actions: Vec<Spanned<WrittenAction>>,
    expect: WrittenExpected,
    expect_without_plan: Option<WrittenExpected>,
}

#[derive(Default, Deserialize)]
#[serde(deny_unknown_fields)]
struct WrittenArm {
    payload_kg: Written<f64>,
    stiffness_factor: Written<f64>,
    damping_factor: Written<f64>,
    tilt_off_deg: Written<f64>,
    friction: Written<f64>,
    angle_noise_deg: Written<f64>,
    angle_bias_deg: Written<f64>,
    delay_ticks: Written<i64>,
}

#[derive(Default, Deserialize)]
#[serde(deny_unknown_fields)]
struct WrittenTold {
    payload_kg: Written<f64>,
    payload: Written<String>,
    plans: Option<bool>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct WrittenStart {
    branch: Spanned<i64>,
    setpoint_deg: Written<f64>,
    setpoint_n_m: Written<f64>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct WrittenAction {
    at_s: Spanned<f64>,
    setpoint_deg: Written<f64>,
    setpoint_n_m: Written<f64>,
    branch: Written<i64>,
    swing_permitted: Option<bool>,
    rearm: Option<bool>,
    stop: Option<bool>,
    told_payload_kg: Written<f64>,
    knock_n_s: Written<f64>,
    payload_kg: Written<f64>,
    break_tendon: Written<String>,
    sensor: Written<String>,
    fault: Written<String>,
    offset_deg: Written<f64>,
    offset_n: Written<f64>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct WrittenExpected {
    mode: Spanned<String>,
    branch: Written<i64>,
    #[serde(default)]
    refused: Vec<Spanned<String>>,
    tip_angle_deg: Written<f64>,
    within_deg: Written<f64>,
    #[serde(default)]
    must: Vec<Spanned<String>>,
    #[serde(default)]
    must_not: Vec<Spanned<String>>,
}

/// Reads the scenario at `path` for `arm`.
///
/// # Errors
/// One message with file, line and column.
pub fn read(path: &Path, arm: &Arm) -> Result<Scenario, ScenarioError> {
    let file_name = path.display().to_string();
    let text = std::fs::read_to_string(path).map_err(|error| {
        ScenarioError::of_file(&file_name, format_args!("cannot be read: {error}"))
    })?;
    parse(&text, &file_name, arm)
}

/// Checks the scenario `text` for `arm`; `file_name` is for messages only.
///
/// # Errors
/// One message with file, line and column.
pub fn parse(text: &str, file_name: &str, arm: &Arm) -> Result<Scenario, ScenarioError> {
    let page = Page { file_name, text };
    let written: WrittenScenario = toml::from_str(text).map_err(|error| page.toml_fault(&error))?;
    Checking { page, arm }.scenario(&written)
}

/// Every scenario in `directory`, in order of file names.
///
/// # Errors
/// The first file that is wrong, or the directory cannot be read or holds none.
pub fn read_all(directory: &Path, arm: &Arm) -> Result<Vec<Scenario>, ScenarioError> {
    let name = directory.display().to_string();
    let unreadable = |error| ScenarioError::of_file(&name, format_args!("cannot be read: {error}"));
    let mut paths = Vec::new();
    for entry in std::fs::read_dir(directory).map_err(unreadable)? {
        let path = entry.map_err(unreadable)?.path();
        if path.extension().is_some_and(|end| end == "toml") {
            paths.push(path);
        }
    }
    if paths.is_empty() {
        return Err(ScenarioError::of_file(&name, "no scenario (*.toml) in it"));
    }
    paths.sort();
    paths.iter().map(|path| read(path, arm)).collect()
}

struct Checking<'a> {
    page: Page<'a>,
    arm: &'a Arm,
}

type Checked<T> = Result<T, ScenarioError>;

impl Checking<'_> {
    fn scenario(&self, written: &WrittenScenario) -> Checked<Scenario> {
        let lasts_s = self.number(&written.lasts_s, "lasts_s", "s", 0.1..=LONGEST_S)?;
        let start = written.start.get_ref();
        let Some(setpoint) = self.setpoint(&start.setpoint_deg, &start.setpoint_n_m)? else {
            let key = self.setpoint_key();
            return Err(self
                .page
                .fault(written.start.span(), format_args!("[start] lacks {key}")));
        };
        let mut actions = Vec::new();
        for action in &written.actions {
            self.action(action, lasts_s, &mut actions)?;
        }
        actions.sort_by(|a, b| a.at_s.total_cmp(&b.at_s));
        Ok(Scenario {
            name: self.words(&written.name, "name")?,
            shows: self.words(&written.shows, "shows")?,
            lasts_s,
            real: self.real(&written.arm)?,
            payload: self.told(&written.told)?,
            plans: written.told.plans.unwrap_or(true),
            branch: self.branch(&start.branch)?,
            setpoint,
            actions,
            expect: self.expected(&written.expect)?,
            expect_without_plan: written
                .expect_without_plan
                .as_ref()
                .map(|expected| self.expected(expected))
                .transpose()?,
        })
    }

    fn real(&self, written: &WrittenArm) -> Checked<RealArm> {
        let nominal = RealArm::nominal(self.arm);
        let number = |value: &Written<f64>, key, unit, allowed, default| match value {
            Some(value) => self.number(value, key, unit, allowed),
            None => Ok(default),
        };
        let degrees = |value: &Written<f64>, key, most: f64, default: f64| {
            number(value, key, "deg", -most..=most, default.to_degrees()).map(f64::to_radians)
        };
        let noise = number(
            &written.angle_noise_deg,
            "angle_noise_deg",
            "deg",
            0.0..=20.0,
            0.0,
        )?;
        Ok(RealArm {
            payload_kg: number(
                &written.payload_kg,
                "payload_kg",
                "kg",
                0.0..=1e4,
                nominal.payload_kg,
            )?,
            stiffness_factor: number(
                &written.stiffness_factor,
                "stiffness_factor",
                "",
                0.1..=10.0,
                1.0,
            )?,
            damping_factor: number(
                &written.damping_factor,
                "damping_factor",
                "",
                0.01..=10.0,
                1.0,
            )?,
            tilt_off_rad: degrees(&written.tilt_off_deg, "tilt_off_deg", 90.0, 0.0)?,
            friction: number(
                &written.friction,
                "friction",
                "",
                0.0..=0.95,
                nominal.friction,
            )?,
            angle_noise_rad: match written.angle_noise_deg {
                Some(_) => noise.to_radians(),
                None => nominal.angle_noise_rad,
            },
            angle_bias_rad: degrees(&written.angle_bias_deg, "angle_bias_deg", 45.0, 0.0)?,
            delay_ticks: match &written.delay_ticks {
                None => nominal.delay_ticks,
                Some(ticks) => usize::try_from(*ticks.get_ref())
                    .ok()
                    .filter(|&t| t <= 100)
                    .ok_or_else(|| {
                        self.page.fault(
                            ticks.span(),
                            format_args!("delay_ticks = {}; 0 to 100 is allowed", ticks.get_ref()),
                        )
                    })?,
            },
        })
    }

    fn told(&self, written: &WrittenTold) -> Checked<Payload> {
        match (&written.payload_kg, &written.payload) {
            (Some(_), Some(word)) => Err(self
                .page
                .fault(word.span(), "either payload_kg or payload, not both")),
            (Some(kg), None) => self
                .number(kg, "payload_kg", "kg", 0.0..=1e4)
                .map(|kg| Payload::Known(kg as f32)),
            (None, Some(word)) if word.get_ref() == "unknown" => Ok(Payload::Unknown),
            (None, Some(word)) => Err(self.page.fault(
                word.span(),
                format_args!(
                    "payload = {:?}; only \"unknown\" is allowed",
                    word.get_ref()
                ),
            )),
            (None, None) => Ok(Payload::Known(self.arm.payload.mass_kg as f32)),
        }
    }

    fn action(
        &self,
        written: &Spanned<WrittenAction>,
        lasts_s: f64,
        actions: &mut Vec<Action>,
    ) -> Checked<()> {
        let (span, written) = (written.span(), written.get_ref());
        let at_s = self.number(&written.at_s, "at_s", "s", 0.0..=lasts_s)?;
        let before = actions.len();
        let mut add = |what| actions.push(Action { at_s, what });
        if let Some(setpoint) = self.setpoint(&written.setpoint_deg, &written.setpoint_n_m)? {
            add(What::Setpoint(setpoint));
        }
        if let Some(branch) = &written.branch {
            add(What::Branch(self.branch(branch)?));
        }
        written.swing_permitted.map(What::Permit).map(&mut add);
        written.rearm.map(What::Rearm).map(&mut add);
        written.stop.map(What::Stop).map(&mut add);
        if let Some(kg) = &written.told_payload_kg {
            let kg = self.number(kg, "told_payload_kg", "kg", 0.0..=1e4)?;
            add(What::Told(Payload::Known(kg as f32)));
        }
        if let Some(impulse) = &written.knock_n_s {
            add(What::Knock(self.number(
                impulse,
                "knock_n_s",
                "N s",
                -1e4..=1e4,
            )?));
        }
        if let Some(kg) = &written.payload_kg {
            add(What::Payload(self.number(
                kg,
                "payload_kg",
                "kg",
                0.0..=1e4,
            )?));
        }
        if let Some(side) = &written.break_tendon {
            let sides = [("a", Side::A), ("b", Side::B)];
            add(What::BreakTendon(self.one_of(
                side,
                "break_tendon",
                &sides,
            )?));
        }
        if let Some(what) = self.fault(written)? {
            add(what);
        }
        if actions.len() == before {
            return Err(self.page.fault(span, "nothing happens here beside at_s"));
        }
        Ok(())
    }

    fn fault(&self, written: &WrittenAction) -> Checked<Option<What>> {
        let given = [
            (written.fault.as_ref().map(Spanned::span), "fault"),
            (written.offset_deg.as_ref().map(Spanned::span), "offset_deg"),
            (written.offset_n.as_ref().map(Spanned::span), "offset_n"),
        ];
        let mut given = given
            .into_iter()
            .filter_map(|(span, key)| Some((span?, key)));
        let (first, second) = (given.next(), given.next());
        let Some(sensor) = &written.sensor else {
            return first.map_or(Ok(None), |(span, key)| {
                Err(self
                    .page
                    .fault(span, format_args!("{key} needs sensor = \"...\" beside it")))
            });
        };
        let sensors = [
            ("tip-angle", SensorName::TipAngle),
            ("mid-angle", SensorName::MidAngle),
            ("tension-a", SensorName::Tension(Side::A)),
            ("tension-b", SensorName::Tension(Side::B)),
        ];
        let name = self.one_of(sensor, "sensor", &sensors)?;
        let angle = !matches!(name, SensorName::Tension(_));
        if let Some((span, key)) = second {
            return Err(self.page.fault(
                span,
                format_args!("{key} beside another fault of the same sensor"),
            ));
        }
        let fault = if let Some(fault) = &written.fault {
            let faults = [
                ("frozen", SensorFault::Frozen),
                ("dropout", SensorFault::Dropout),
                ("none", SensorFault::None),
            ];
            self.one_of(fault, "fault", &faults)?
        } else if let (Some(offset), true) = (&written.offset_deg, angle) {
            let offset = self.number(offset, "offset_deg", "deg", -720.0..=720.0)?;
            SensorFault::Offset(offset.to_radians())
        } else if let (Some(offset), false) = (&written.offset_n, angle) {
            SensorFault::Offset(self.number(offset, "offset_n", "N", -1e5..=1e5)?)
        } else {
            let offset = if angle { "offset_deg" } else { "offset_n" };
            let span = first.map_or(sensor.span(), |(span, _)| span);
            return Err(self.page.fault(
                span,
                format_args!("sensor = {:?} needs fault or {offset}", sensor.get_ref()),
            ));
        };
        Ok(Some(What::Fault(name, fault)))
    }

    fn expected(&self, written: &WrittenExpected) -> Checked<Expected> {
        let mode = mode_named(written.mode.get_ref()).map_err(|allowed| {
            self.page.fault(
                written.mode.span(),
                format_args!("mode = {:?}; allowed is {allowed}", written.mode.get_ref()),
            )
        })?;
        let mut refused = Vec::new();
        for name in &written.refused {
            refused.push(refusal_named(name.get_ref()).map_err(|allowed| {
                self.page.fault(
                    name.span(),
                    format_args!("refused = {:?}; allowed is {allowed}", name.get_ref()),
                )
            })?);
        }
        let within = match &written.within_deg {
            Some(within) => self
                .number(within, "within_deg", "deg", 0.0..=180.0)?
                .to_radians(),
            None => DEFAULT_WITHIN_RAD,
        };
        let tip = match &written.tip_angle_deg {
            Some(tip) => Some((
                self.number(tip, "tip_angle_deg", "deg", -720.0..=720.0)?
                    .to_radians(),
                within,
            )),
            None => None,
        };
        Ok(Expected {
            mode,
            branch: written
                .branch
                .as_ref()
                .map(|branch| self.branch(branch))
                .transpose()?,
            refused,
            tip,
            must: self.events(&written.must)?,
            must_not: self.events(&written.must_not)?,
        })
    }

    fn events(&self, names: &[Spanned<String>]) -> Checked<Events> {
        let mut events = Events::NONE;
        for name in names {
            let known = Events::ALL
                .iter()
                .find(|(_, known)| known == name.get_ref());
            let Some((event, _)) = known else {
                let all: Vec<&str> = Events::ALL.iter().map(|(_, name)| *name).collect();
                return Err(self.page.fault(
                    name.span(),
                    format_args!(
                        "no event is called {:?}; there are: {}",
                        name.get_ref(),
                        all.join(", ")
                    ),
                ));
            };
            events |= *event;
        }
        Ok(events)
    }

    fn words(&self, text: &Spanned<String>, key: &str) -> Checked<String> {
        let trimmed = text.get_ref().trim();
        if trimmed.is_empty() {
            return Err(self.page.fault(text.span(), format_args!("{key} is empty")));
        }
        Ok(trimmed.to_string())
    }

    fn branch(&self, number: &Spanned<i64>) -> Checked<u8> {
        let most = firmware_core::format::MOST_BRANCHES - 1;
        u8::try_from(*number.get_ref())
            .ok()
            .filter(|&branch| branch <= most)
            .ok_or_else(|| {
                self.page.fault(
                    number.span(),
                    format_args!("branch = {}; 0 to {most} is allowed", number.get_ref()),
                )
            })
    }

    fn setpoint_key(&self) -> &'static str {
        match self.arm.drive {
            Drive::HeldTip { .. } => "setpoint_deg",
            Drive::AppliedCouple { .. } => "setpoint_n_m",
        }
    }

    /// A setpoint in rad or N m. Requests outside the arm's range are allowed: the firmware has to answer them.
    fn setpoint(&self, deg: &Written<f64>, n_m: &Written<f64>) -> Checked<Option<f64>> {
        let held = matches!(self.arm.drive, Drive::HeldTip { .. });
        let (own, other) = if held { (deg, n_m) } else { (n_m, deg) };
        if let Some(other) = other {
            return Err(self.page.fault(
                other.span(),
                format_args!(
                    "the setpoint of this arm is given by {}",
                    self.setpoint_key()
                ),
            ));
        }
        let Some(own) = own else { return Ok(None) };
        let (unit, most) = if held { ("deg", 720.0) } else { ("N m", 1e4) };
        let value = self.number(own, self.setpoint_key(), unit, -most..=most)?;
        Ok(Some(if held { value.to_radians() } else { value }))
    }

    fn number(
        &self,
        value: &Spanned<f64>,
        key: &str,
        unit: &str,
        allowed: RangeInclusive<f64>,
    ) -> Checked<f64> {
        let number = *value.get_ref();
        if allowed.contains(&number) {
            return Ok(number);
        }
        let unit = if unit.is_empty() {
            String::new()
        } else {
            format!(" {unit}")
        };
        Err(self.page.fault(
            value.span(),
            format_args!(
                "{key} = {number}; {} to {}{unit} is allowed",
                allowed.start(),
                allowed.end()
            ),
        ))
    }

    fn one_of<T: Copy>(
        &self,
        word: &Spanned<String>,
        key: &str,
        allowed: &[(&str, T)],
    ) -> Checked<T> {
        let found = allowed.iter().find(|(name, _)| name == word.get_ref());
        found.map(|(_, value)| *value).ok_or_else(|| {
            let names: Vec<&str> = allowed.iter().map(|(name, _)| *name).collect();
            self.page.fault(
                word.span(),
                format_args!(
                    "{key} = {:?}; allowed is {}",
                    word.get_ref(),
                    names.join(", ")
                ),
            )
        })
    }
}
