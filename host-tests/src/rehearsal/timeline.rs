//! What happened, in words.

use super::scenario::What;
use super::words::{degrees, mode_in_words, refusal_in_words, setpoint};
use firmware_core::supervisor::{CrossingRefusal, Events, Mode, Output, Request};
use firmware_core::{Answer, Drive, Payload};
use serde::Serialize;
use table_gen::plan::plant::{SensorFault, SensorName, Side};

/// An event that pauses for less than this is still the same one (s).
const PAUSE_S: f64 = 0.5;
/// Distance of the tip from the setpoint at which it has arrived (rad).
const ARRIVED_RAD: f64 = 0.03;
/// Distance of the commanded setpoint from where it is going at which it has arrived there.
const AT_GOAL: f32 = 1e-4;

/// Who acts.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Who {
    /// The caller asks something of the firmware.
    Caller,
    /// Something happens to the arm.
    Arm,
    /// The firmware notices or does something.
    Firmware,
}

/// One line of the timeline.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct Line {
    /// When (s).
    pub at_s: f64,
    /// Who.
    pub who: Who,
    /// What, in words.
    pub text: String,
}

/// Writes the timeline while a scenario is played.
pub struct Narrator {
    /// What it has written.
    pub lines: Vec<Line>,
    drive: Drive,
    mode: Mode,
    branch: Option<u8>,
    refused: Option<CrossingRefusal>,
    answered: Option<String>,
    arrived: bool,
    asked: f32,
    /// When each event was last there (s).
    last_s: Vec<f64>,
}

impl Narrator {
    /// A firmware that has just been switched on with this request.
    pub fn new(drive: Drive, request: Request) -> Self {
        let mut narrator = Self {
            lines: Vec::new(),
            drive,
            mode: Mode::Stopped,
            branch: None,
            refused: None,
            answered: None,
            arrived: true,
            asked: request.setpoint,
            last_s: vec![f64::NEG_INFINITY; Events::ALL.len()],
        };
        let at = setpoint(drive, request.setpoint.into());
        let text = format!(
            "switches the firmware on, says it carries {}, asks to arm at {at}",
            told(request.payload)
        );
        narrator.say(0.0, Who::Caller, text);
        narrator
    }

    fn say(&mut self, at_s: f64, who: Who, text: impl Into<String>) {
        let text = text.into();
        self.lines.push(Line { at_s, who, text });
    }

    /// Something happens as the scenario says.
    pub fn action(&mut self, at_s: f64, what: What) {
        let (who, text) = match what {
            What::Setpoint(value) => {
                self.answered = None;
                self.arrived = false;
                (
                    Who::Caller,
                    format!("asks for {}", setpoint(self.drive, value)),
                )
            }
            What::Branch(branch) => (Who::Caller, format!("asks for branch {branch}")),
            What::Permit(true) => (Who::Caller, "permits swinging".into()),
            What::Permit(false) => (Who::Caller, "permits no swinging any more".into()),
            What::Rearm(true) => (Who::Caller, "asks to arm".into()),
            What::Rearm(false) => (Who::Caller, "takes the request to arm back".into()),
            What::Stop(true) => (Who::Caller, "asks to stop".into()),
            What::Stop(false) => (Who::Caller, "takes the request to stop back".into()),
            What::Told(payload) => (Who::Caller, format!("says it carries {}", told(payload))),
            What::Knock(impulse) => (
                Who::Arm,
                format!("is knocked across the tip with {impulse} N s"),
            ),
            What::Payload(kg) => (Who::Arm, format!("carries {:.0} g from now on", 1e3 * kg)),
            What::BreakTendon(side) => (
                Who::Arm,
                format!("loses tendon {}: it breaks", letter(side)),
            ),
            What::Fault(sensor, fault) => (
                Who::Arm,
                format!(
                    "has a {} that {} from now on",
                    sensor_name(sensor),
                    fault_in_words(sensor, fault)
                ),
            ),
        };
        self.say(at_s, who, text);
    }

    /// What the firmware decided on a tick; `tip_rad` is where the tip really is.
    pub fn tick(&mut self, at_s: f64, request: &Request, output: &Output, tip_rad: f64) {
        self.events(at_s, output);
        if output.mode != self.mode {
            self.mode = output.mode;
            let on = match (output.mode, output.branch) {
                (Mode::Hold, Some(branch)) => {
                    self.branch = Some(branch);
                    format!(" on branch {branch}, tip at {}", degrees(tip_rad))
                }
                _ => String::new(),
            };
            let words = mode_in_words(output.mode);
            self.say(at_s, Who::Firmware, format!("{words}{on}"));
        } else if output.mode == Mode::Hold && output.branch != self.branch {
            self.branch = output.branch;
            let text = match output.branch {
                Some(branch) => format!("believes the arm on branch {branch}"),
                None => "no longer knows which branch the arm is on".to_string(),
            };
            self.say(at_s, Who::Firmware, text);
        }
        if output.mode == Mode::Hold {
            self.refusal(at_s, output.refused);
            self.answer(at_s, output.answer);
            self.arrival(at_s, request, output, tip_rad);
        }
    }

    fn events(&mut self, at_s: f64, output: &Output) {
        for (number, (event, name)) in Events::ALL.iter().enumerate() {
            if !output.events.contains(*event) {
                continue;
            }
            let anew = at_s - self.last_s[number] > PAUSE_S;
            self.last_s[number] = at_s;
            if !anew {
                continue;
            }
            let surveyed = match output.surveyed {
                Some(found) if event_is_survey(*event) => format!(
                    ": it looks like {:.0} g with {:.0} % of the nominal stiffness",
                    1e3 * found.payload_kg,
                    100.0 * found.stiffness
                ),
                _ => String::new(),
            };
            self.say(at_s, Who::Firmware, format!("notes: {name}{surveyed}"));
        }
    }

    fn refusal(&mut self, at_s: f64, refused: Option<CrossingRefusal>) {
        let kind = |refusal: &CrossingRefusal| std::mem::discriminant(refusal);
        if refused.as_ref().map(kind) != self.refused.as_ref().map(kind) {
            if let Some(refusal) = refused {
                self.say(at_s, Who::Firmware, refusal_in_words(refusal));
            }
            self.refused = refused;
        }
    }

    fn answer(&mut self, at_s: f64, answer: Option<Answer>) {
        let at = |value: f32| setpoint(self.drive, value.into());
        let text = match answer {
            None | Some(Answer::Go { .. }) => None,
            Some(Answer::OnlyAsFarAs { setpoint, why, .. }) => {
                Some(format!("goes only as far as {}: {why}", at(setpoint)))
            }
            Some(Answer::NotOnThisSide {
                other,
                as_far_as,
                why,
                ..
            }) => Some(format!(
                "goes only as far as {} on this side: {why}; the request may be held on branch {other}",
                at(as_far_as)
            )),
            Some(Answer::Refused(refusal)) => Some(format!("stays where it is: {refusal}")),
        };
        if text != self.answered {
            if let Some(text) = &text {
                self.say(at_s, Who::Firmware, text.clone());
            }
            self.answered = text;
        }
    }

    fn arrival(&mut self, at_s: f64, request: &Request, output: &Output, tip_rad: f64) {
        if request.setpoint != self.asked {
            self.asked = request.setpoint;
            self.arrived = false;
        }
        let goal = match output.answer {
            Some(Answer::Go { setpoint, .. } | Answer::OnlyAsFarAs { setpoint, .. }) => setpoint,
            Some(Answer::NotOnThisSide { as_far_as, .. }) => as_far_as,
            Some(Answer::Refused(_)) | None => return,
        };
        let there = (output.setpoint - goal).abs() <= AT_GOAL;
        let followed = self.drive == Drive::AppliedCouple
            || (tip_rad - f64::from(output.setpoint)).abs() <= ARRIVED_RAD;
        if !self.arrived && there && followed {
            self.arrived = true;
            let text = format!("has arrived at {}", setpoint(self.drive, goal.into()));
            self.say(at_s, Who::Firmware, text);
        }
    }
}

fn event_is_survey(event: Events) -> bool {
    Events::SURVEY_FITS.with(Events::SURVEY_REFUSED).any(event)
}

fn told(payload: Payload) -> String {
    match payload {
        Payload::Unknown => "anything in the table's range".to_string(),
        Payload::Known(kg) => format!("{:.0} g", 1e3 * kg),
    }
}

fn letter(side: Side) -> &'static str {
    match side {
        Side::A => "A",
        Side::B => "B",
    }
}

fn sensor_name(sensor: SensorName) -> &'static str {
    match sensor {
        SensorName::TipAngle => "tip sensor",
        SensorName::MidAngle => "mid-length sensor",
        SensorName::Tension(Side::A) => "tension sensor A",
        SensorName::Tension(Side::B) => "tension sensor B",
    }
}

fn fault_in_words(sensor: SensorName, fault: SensorFault) -> String {
    match (fault, sensor) {
        (SensorFault::None, _) => "works again".to_string(),
        (SensorFault::Frozen, _) => "repeats its last reading".to_string(),
        (SensorFault::Dropout, _) => "reads nothing".to_string(),
        (SensorFault::Offset(n), SensorName::Tension(_)) => format!("reads {n} N too high"),
        (SensorFault::Offset(rad), _) => format!("reads {} too high", degrees(rad)),
    }
}
