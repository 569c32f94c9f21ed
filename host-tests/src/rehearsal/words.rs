//! The supervisor's modes, refusals and quantities in words.

use firmware_core::Drive;
use firmware_core::supervisor::{CrossingRefusal, Mode};

/// Modes with their names in files.
const MODES: [(Mode, &str); 6] = [
    (Mode::Hold, "hold"),
    (Mode::Survey, "survey"),
    (Mode::Inject, "inject"),
    (Mode::Lean, "lean"),
    (Mode::Catch, "catch"),
    (Mode::Stopped, "stopped"),
];

/// Refusals of a crossing by their names in files.
const REFUSALS: [&str; 7] = [
    "not-permitted",
    "not-for-this-drive",
    "no-plan",
    "not-allowed",
    "survey-does-not-fit",
    "survey-unclear",
    "too-many-tries",
];

/// The name of a mode in files.
pub fn mode_name(mode: Mode) -> &'static str {
    MODES
        .iter()
        .find(|(known, _)| *known == mode)
        .map_or("?", |(_, name)| name)
}

/// The mode with this name.
///
/// # Errors
/// The names there are.
pub fn mode_named(name: &str) -> Result<Mode, String> {
    MODES
        .iter()
        .find(|(_, known)| *known == name)
        .map(|(mode, _)| *mode)
        .ok_or_else(|| MODES.map(|(_, name)| name).join(", "))
}

/// The name of a refusal in files.
pub fn refusal_name(refusal: CrossingRefusal) -> &'static str {
    REFUSALS[match refusal {
        CrossingRefusal::NotPermitted => 0,
        CrossingRefusal::NotForThisDrive => 1,
        CrossingRefusal::NoPlan => 2,
        CrossingRefusal::NotAllowed { .. } => 3,
        CrossingRefusal::SurveyDoesNotFit { .. } => 4,
        CrossingRefusal::SurveyUnclear => 5,
        CrossingRefusal::TooManyTries => 6,
    }]
}

/// The refusal with this name.
///
/// # Errors
/// The names there are.
pub fn refusal_named(name: &str) -> Result<&'static str, String> {
    REFUSALS
        .into_iter()
        .find(|known| *known == name)
        .ok_or_else(|| REFUSALS.join(", "))
}

/// A refusal as a sentence.
pub fn refusal_in_words(refusal: CrossingRefusal) -> String {
    let why = match refusal {
        CrossingRefusal::NotPermitted => "swinging is not permitted".to_string(),
        CrossingRefusal::NotForThisDrive => {
            "with an applied couple the arm is never swung over".to_string()
        }
        CrossingRefusal::NoPlan => {
            "the table has no plan for this direction and payload at any setpoint in reach"
                .to_string()
        }
        CrossingRefusal::NotAllowed { successes, trials } => {
            format!("the plan succeeded in only {successes} of {trials} trials")
        }
        CrossingRefusal::SurveyDoesNotFit { stiffness } => format!(
            "the resting shape fits no declared payload: it would take {:.0} % of the nominal stiffness",
            100.0 * stiffness
        ),
        CrossingRefusal::SurveyUnclear => {
            "the resting shape does not tell the stiffness".to_string()
        }
        CrossingRefusal::TooManyTries => "it has been tried as often as allowed".to_string(),
    };
    format!("does not swing over: {why}")
}

/// A mode as what the firmware does now.
pub fn mode_in_words(mode: Mode) -> &'static str {
    match mode {
        Mode::Hold => "holds",
        Mode::Survey => "rests and finds out what the arm carries",
        Mode::Inject => "swings the arm up, in phase with it",
        Mode::Lean => "leans the arm over slowly",
        Mode::Catch => "brakes on the other side",
        Mode::Stopped => "has stopped: keeps the tip where it is until it is armed again",
    }
}

/// A setpoint with its unit.
pub fn setpoint(drive: Drive, value: f64) -> String {
    match drive {
        Drive::HeldTip => degrees(value),
        Drive::AppliedCouple => format!("{value:.4} N m"),
    }
}

/// An angle (rad) in degrees.
pub fn degrees(angle_rad: f64) -> String {
    let text = format!("{:.1}", angle_rad.to_degrees());
    // No negative zero.
    let text = if text == "-0.0" { "0.0" } else { &text };
    format!("{text} deg")
}
