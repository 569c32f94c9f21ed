//! Where the two-coordinate model differs from the rod, frame by frame, then as runs of setpoints in words.

use super::data::{Disagreement, Drive, FrameState};
use super::text::number;
use super::words;
use crate::rest_states::confirm::Judged;
use crate::rod::{Held, Rod};

/// Barriers that differ by more than this factor are reported.
const FACTOR: f64 = 2.0;

/// How the model is wrong about one rest state.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord)]
enum Wrong {
    /// It has a stable state that the rod has not.
    FalseFriend,
    /// It lacks a stable state of the rod.
    Missing,
    /// Its barrier is more than [`FACTOR`] times the rod's.
    TooHigh,
    /// Its barrier is less than the rod's by more than [`FACTOR`].
    TooLow,
    /// It has no pass out of a well that the rod can leave.
    NoPass,
    /// It has a pass out of a well that the rod cannot leave.
    ExtraPass,
}

/// One run under way.
struct Run {
    branch: Option<usize>,
    wrong: Wrong,
    last_frame: usize,
    setpoints: [f64; 2],
    ratios: [f64; 2],
}

/// Collects the disagreements of frames in the order of their setpoints.
#[derive(Default)]
pub(super) struct CrossCheck {
    frames: usize,
    runs: Vec<Run>,
}

impl CrossCheck {
    /// Compares one frame: `judged` are the model's states and `states` the rod's at `setpoint` (SI).
    pub(super) fn frame(
        &mut self,
        rod: &Rod,
        setpoint: f64,
        judged: &[Judged],
        states: &[FrameState],
    ) {
        let frame = self.frames;
        self.frames += 1;
        if judged.iter().any(|j| j.confirmed == Some(false)) {
            self.add(frame, None, Wrong::FalseFriend, setpoint, 1.0);
        }
        for state in states.iter().filter(|state| state.stable) {
            let Some(place) = same_well(judged, states, state) else {
                self.add(frame, Some(state.branch), Wrong::Missing, setpoint, 1.0);
                continue;
            };
            let barrier = barrier(judged, place, rod.setpoint_from_si(setpoint), rod.held);
            let barrier_j = barrier.map(|barrier| barrier * rod.energy_scale_j);
            let wrong = match (barrier_j, state.barrier_j) {
                (Some(model), Some(true_j)) if model > FACTOR * true_j => Wrong::TooHigh,
                (Some(model), Some(true_j)) if FACTOR * model < true_j => Wrong::TooLow,
                (None, Some(_)) => Wrong::NoPass,
                (Some(_), None) => Wrong::ExtraPass,
                _ => continue,
            };
            let ratio = match (barrier_j, state.barrier_j) {
                (Some(model), Some(true_j)) => model / true_j,
                _ => 1.0,
            };
            self.add(frame, Some(state.branch), wrong, setpoint, ratio);
        }
    }

    fn add(
        &mut self,
        frame: usize,
        branch: Option<usize>,
        wrong: Wrong,
        setpoint: f64,
        ratio: f64,
    ) {
        let open = self
            .runs
            .iter_mut()
            .find(|run| run.branch == branch && run.wrong == wrong && run.last_frame + 1 >= frame);
        match open {
            Some(run) => {
                run.last_frame = frame;
                run.setpoints[1] = setpoint;
                run.ratios = [run.ratios[0].min(ratio), run.ratios[1].max(ratio)];
            }
            None => self.runs.push(Run {
                branch,
                wrong,
                last_frame: frame,
                setpoints: [setpoint; 2],
                ratios: [ratio; 2],
            }),
        }
    }

    /// The runs in words, by branch and setpoint, false friends first.
    pub(super) fn in_words(mut self, drive: Drive) -> Vec<Disagreement> {
        self.runs.sort_by(|a, b| {
            let by_start = a.setpoints[0].total_cmp(&b.setpoints[0]);
            a.branch.cmp(&b.branch).then(by_start)
        });
        self.runs
            .iter()
            .map(|run| Disagreement {
                branch: run
                    .branch
                    .map_or("none of the rod's".to_string(), |branch| {
                        format!("branch {branch}")
                    }),
                setpoints: words::range(drive, run.setpoints),
                what: match run.wrong {
                    Wrong::FalseFriend => {
                        "calls a rest state stable that the rod does not have".to_string()
                    }
                    Wrong::Missing => "has no such rest state".to_string(),
                    Wrong::TooHigh | Wrong::TooLow => {
                        format!("barrier {} times the rod's", times(run.ratios))
                    }
                    Wrong::NoPass => "sees no pass out of this well; the rod has one".to_string(),
                    Wrong::ExtraPass => {
                        "sees a pass out of this well; the rod has none".to_string()
                    }
                },
            })
            .collect()
    }
}

fn times([least, most]: [f64; 2]) -> String {
    // Beside a fold the rod's barrier goes to nothing, and the ratio beyond all bounds.
    const MOST_SAID: f64 = 100.0;
    let say = |ratio: f64| {
        if ratio > MOST_SAID {
            format!("more than {MOST_SAID:.0}")
        } else {
            number(ratio)
        }
    };
    let (least, most) = (say(least), say(most));
    if least == most {
        least
    } else {
        format!("{least} to {most}")
    }
}

/// The model's counterpart of the rod's stable `state`: no unstable state of the model lies between them, and each is the other's
/// nearest by mean angle.
fn same_well(judged: &[Judged], states: &[FrameState], state: &FrameState) -> Option<usize> {
    let own = state.mean_angle_rad;
    let in_its_well = |k: &usize| {
        let there = judged[*k].state.mean_angle();
        judged[*k].confirmed == Some(true)
            && !judged.iter().any(|other| {
                let between = other.state.mean_angle();
                !other.state.is_stable() && (between - there) * (between - own) < 0.0
            })
    };
    let off = |k: usize| (judged[k].state.mean_angle() - own).abs();
    let nearest = (0..judged.len())
        .filter(in_its_well)
        .min_by(|a, b| off(*a).total_cmp(&off(*b)))?;
    let there = judged[nearest].state.mean_angle();
    let is_nearer = |other: &FrameState| {
        other.stable && (other.mean_angle_rad - there).abs() < (own - there).abs()
    };
    (!states.iter().any(is_nearer)).then_some(nearest)
}

/// The model's own barrier out of the well at `place`: the lower of its neighbouring passes, by mean angle (m g L).
fn barrier(judged: &[Judged], place: usize, setpoint: f64, held: Held) -> Option<f64> {
    let potential = |j: &Judged| match held {
        Held::TipAngle => j.state.energy,
        Held::TipCouple => j.state.energy - setpoint * j.state.c[0],
    };
    let is_pass = |j: &&Judged| j.state.index == 1;
    let below = judged[..place].iter().rev().find(is_pass);
    let above = judged[place + 1..].iter().find(is_pass);
    let well = potential(&judged[place]);
    [below, above]
        .into_iter()
        .flatten()
        .map(|pass| potential(pass) - well)
        .min_by(f64::total_cmp)
}
