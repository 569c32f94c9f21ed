//! What a report is drawn from: plain numbers in SI units and radians, already solved.
//!
//! The page turns radians into degrees; nothing here is computed again there. Everything is serialised into the page,
//! so a report holds no clock, path or machine name: the same arm gives the same bytes.

use crate::arm_file::KeepOut;
use serde::Serialize;

/// Everything one report page shows.
#[derive(Clone, Debug, Serialize)]
pub struct ReportData {
    /// The arm and the range it was solved over.
    pub arm: Arm,
    /// Every branch of rest states, in the order of the table.
    pub branches: Vec<Branch>,
    /// Setpoints at which two branches end in each other.
    pub folds: Vec<Fold>,
    /// Shapes and energies at the slider's setpoints, setpoints increasing. May be empty: the slider is then left out.
    pub frames: Vec<Frame>,
    /// Rest states the two-coordinate model calls stable and the converged rod does not have.
    pub false_friends: Vec<FalseFriend>,
    /// Where the two-coordinate model differs from the rod, in words.
    #[serde(skip)]
    pub disagreements: Vec<Disagreement>,
    /// The judgement on top of the page; written, not drawn.
    #[serde(skip)]
    pub verdict: Verdict,
    /// Every required reserve over the setpoint.
    pub reserves: Vec<Reserve>,
    /// Where which requirement holds, by branch.
    pub strips: Vec<Strip>,
    /// Regions where no part of the arm may be.
    pub keep_out: Vec<KeepOut>,
    /// The short table of limits, in words.
    #[serde(skip)]
    pub limits: Vec<Limit>,
    /// Worst measured interpolation errors of the table.
    pub worst_errors: Vec<WorstError>,
    /// Size of the table for the target, in bytes.
    pub table_bytes: usize,
}

/// How the tendons are driven, and so what a setpoint means.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Drive {
    /// Take-up is controlled: a setpoint is a tip angle in radians.
    HeldTip,
    /// Tension is controlled: a setpoint is a tip couple in N m.
    AppliedCouple,
}

/// The arm the report is about.
#[derive(Clone, Debug, Serialize)]
pub struct Arm {
    /// Name from the arm file; shown as the title.
    pub name: String,
    /// How it is driven.
    pub drive: Drive,
    /// Length from clamp to tip, m.
    pub length_m: f64,
    /// Mean bending stiffness over `m g L^2`; no unit.
    pub gamma: f64,
    /// Curvature modes of the converged rod.
    pub modes: usize,
    /// Spine, lumps and payload together, kg.
    pub mass_kg: f64,
    /// `m g L`, J: also the scale of a couple in N m.
    pub energy_scale_j: f64,
    /// Base tangent from the upward vertical, degrees (as typed in the arm file).
    pub tilt_deg: f64,
    /// Tendon offset from the spine, m.
    pub offset_m: f64,
    /// Tension kept in the slacker tendon, N.
    pub pretension_n: f64,
    /// Largest tension allowed in either tendon, N.
    pub max_tension_n: f64,
    /// Lower end of the setpoint range: rad (held tip) or N m (applied couple).
    pub setpoint_lo: f64,
    /// Upper end of the setpoint range: rad (held tip) or N m (applied couple).
    pub setpoint_hi: f64,
    /// Fingerprint of the arm file as the table header carries it, in hexadecimal.
    pub fingerprint: String,
}

/// One branch: rest states that turn into each other as the setpoint moves, single-valued over the setpoint.
#[derive(Clone, Debug, Serialize)]
pub struct Branch {
    /// Number people and the firmware know the branch by.
    pub number: usize,
    /// Morse index: 0 stable, 1 a pass between two wells, more a hilltop.
    pub index: usize,
    /// Whether the rest states of this branch are stable in the converged rod.
    pub stable: bool,
    /// Why the branch begins where it does.
    pub from_end: End,
    /// Why the branch ends where it does.
    pub to_end: End,
    /// Rest states along it, setpoints increasing, close enough to be joined by straight lines.
    pub points: Vec<BranchPoint>,
    /// Parts of it the firmware may command; empty for an unstable branch.
    pub stretches: Vec<Stretch>,
}

/// What ends a branch.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum End {
    /// The setpoint range of the arm file ends here; the branch goes on outside.
    Range,
    /// The branch meets another one and both cease.
    Fold,
}

/// One rest state on a branch.
#[derive(Clone, Debug, Serialize)]
pub struct BranchPoint {
    /// Setpoint, rad or N m.
    pub setpoint: f64,
    /// Orientation averaged along the arm, from the base tangent, rad.
    pub mean_angle_rad: f64,
    /// Orientation of the tip, from the base tangent, rad.
    pub tip_angle_rad: f64,
    /// Couple the tendons hold the tip with, N m.
    pub couple_n_m: f64,
    /// Tension in tendon A (its pull turns the tip towards +x), N.
    pub tension_a_n: f64,
    /// Tension in tendon B (its pull turns the tip towards -x), N.
    pub tension_b_n: f64,
    /// Elastic plus gravity energy, without the drive's work, J.
    pub energy_j: f64,
    /// Tip position, m, +x as in the drawing.
    pub tip_x_m: f64,
    /// Tip position, m, up.
    pub tip_y_m: f64,
    /// Energy from here to the lowest pass out of this well, J; none when there is no pass.
    pub barrier_j: Option<f64>,
    /// Stiffness against a change of mean angle at this setpoint, N m/rad; none where it means nothing.
    pub restoring_n_m_per_rad: Option<f64>,
}

/// A part of a branch that may be commanded.
#[derive(Clone, Debug, Serialize)]
pub struct Stretch {
    /// Lower setpoint, rad or N m.
    pub from: f64,
    /// Upper setpoint, rad or N m.
    pub to: f64,
    /// What forbids going lower, in words, for example "5° short of the fold".
    pub from_why: String,
    /// What forbids going higher, in words.
    pub to_why: String,
}

/// A setpoint at which two branches end in each other.
#[derive(Clone, Debug, Serialize)]
pub struct Fold {
    /// Setpoint, rad or N m.
    pub setpoint: f64,
    /// Mean angle there, rad.
    pub mean_angle_rad: f64,
    /// Numbers of the two branches.
    pub branches: [usize; 2],
}

/// Everything shown at one position of the slider.
#[derive(Clone, Debug, Serialize)]
pub struct Frame {
    /// Setpoint, rad or N m.
    pub setpoint: f64,
    /// Every rest state at this setpoint, mean angle increasing.
    pub states: Vec<FrameState>,
    /// Potential over the mean angle, `[rad, J]`, with everything but the mean angle relaxed; one or more pieces of curve.
    ///
    /// Held tip: elastic plus gravity energy. Applied couple: the same less couple times tip angle, so that the states are
    /// its level points.
    pub profile: Vec<Vec<[f64; 2]>>,
}

/// One rest state with the shape of the whole arm.
#[derive(Clone, Debug, Serialize)]
pub struct FrameState {
    /// Number of its branch.
    pub branch: usize,
    /// Morse index.
    pub index: usize,
    /// Whether it is stable in the converged rod.
    pub stable: bool,
    /// Whether the firmware may command it, whatever the payload.
    pub usable: bool,
    /// Why it may not, in words: the first requirement that fails.
    pub why_not: Option<String>,
    /// Orientation averaged along the arm, from the base tangent, rad.
    pub mean_angle_rad: f64,
    /// Orientation of the tip, from the base tangent, rad.
    pub tip_angle_rad: f64,
    /// Couple the tendons hold the tip with, N m.
    pub couple_n_m: f64,
    /// Elastic plus gravity energy, without the drive's work, J.
    pub energy_j: f64,
    /// Energy from here to the lowest pass out of this well, J; none when there is no pass.
    pub barrier_j: Option<f64>,
    /// Centre line from clamp to tip, `[x, y]` in m, clamp at the origin, y up.
    pub shape: Vec<[f64; 2]>,
    /// The same rest state in the worst corner of the tolerances; none for an unstable one.
    pub worst: Option<WorstShape>,
}

/// A rest state in the corner of the tolerances with the least clearance or, without keep-out regions, the largest strain.
#[derive(Clone, Debug, Serialize)]
pub struct WorstShape {
    /// The clearance or strain and the corner, in words.
    pub words: String,
    /// Centre line from clamp to tip, `[x, y]` in m.
    pub shape: Vec<[f64; 2]>,
}

/// The judgement in words, one screen of it.
#[derive(Clone, Debug, Default)]
pub struct Verdict {
    /// Where the arm may be used.
    pub summary: String,
    /// What that holds for: payload range, tolerances.
    pub holds_for: String,
    /// Every usable stretch with its ends, or every branch without one.
    pub stretches: Vec<VerdictStretch>,
    /// What a stiffer spine and a lighter payload would do.
    pub helps: Vec<String>,
}

/// A usable stretch, or a branch without one.
#[derive(Clone, Debug)]
pub struct VerdictStretch {
    /// Number of the branch.
    pub branch: usize,
    /// Its setpoints whatever the payload, or "nowhere".
    pub setpoints: String,
    /// What limits it: one sentence for each end.
    pub limits: Vec<String>,
    /// Setpoints with each payload of the range, where they differ.
    pub by_payload: Vec<String>,
}

/// One reserve, worst over all corners, along every stable branch.
#[derive(Clone, Debug, Serialize)]
pub struct Reserve {
    /// Key in the arm file.
    pub key: String,
    /// Name for people.
    pub name: String,
    /// Unit of values and limit; empty for a plain number.
    pub unit: String,
    /// The limit.
    pub limit: f64,
    /// Whether more is worse.
    pub is_upper_limit: bool,
    /// One curve for each stable branch.
    pub curves: Vec<ReserveCurve>,
}

/// A reserve along one branch.
#[derive(Clone, Debug, Serialize)]
pub struct ReserveCurve {
    /// Number of the branch.
    pub branch: usize,
    /// Setpoint (rad or N m) and value; none without bound.
    pub points: Vec<(f64, Option<f64>)>,
}

/// Where the requirements hold along one stable branch.
#[derive(Clone, Debug, Serialize)]
pub struct Strip {
    /// Number of the branch.
    pub branch: usize,
    /// Setpoints of the branch within the range, rad or N m.
    pub cover: [f64; 2],
    /// A row for each requirement, all together, and each payload.
    pub rows: Vec<StripRow>,
}

/// One row of a strip.
#[derive(Clone, Debug, Serialize)]
pub struct StripRow {
    /// What it shows, for people.
    pub name: String,
    /// What kind of row it is.
    pub kind: RowKind,
    /// Runs of setpoints where it holds, rad or N m.
    pub runs: Vec<[f64; 2]>,
}

/// Kinds of rows.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum RowKind {
    /// One requirement, worst over all corners.
    Requirement,
    /// All requirements, whatever the payload.
    All,
    /// All requirements with one payload.
    Payload,
}

/// A run of setpoints where the two-coordinate model is wrong.
#[derive(Clone, Debug)]
pub struct Disagreement {
    /// The rod's branch, or what stands for it.
    pub branch: String,
    /// Setpoints, in words.
    pub setpoints: String,
    /// What is wrong, in words.
    pub what: String,
}

/// A rest state that only the two-coordinate model believes in.
#[derive(Clone, Debug, Serialize)]
pub struct FalseFriend {
    /// Setpoint, rad or N m.
    pub setpoint: f64,
    /// Mean angle the model gives, rad.
    pub mean_angle_rad: f64,
}

/// One line of the table of limits.
#[derive(Clone, Debug, Serialize)]
pub struct Limit {
    /// What is limited, for example "Highest tendon tension".
    pub what: String,
    /// The number with its unit, for example "14.2 N of 60 N".
    pub value: String,
    /// What it means for the user, in a sentence.
    pub note: String,
}

/// The worst error of one tabulated quantity against the rod itself.
#[derive(Clone, Debug, Serialize)]
pub struct WorstError {
    /// Name of the quantity, for example "mean angle".
    pub quantity: String,
    /// The error, in `unit`.
    pub value: f64,
    /// Unit as a person reads it, for example "°" or "% of m g L".
    pub unit: String,
}
