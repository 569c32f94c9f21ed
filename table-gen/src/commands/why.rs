//! `table-gen why`.

use crate::Failure;
use crate::build::{Unit, progress_bar};
use crate::setpoint::Setpoint;
use std::path::PathBuf;
use table_gen::arm_file::{self, Arm, Drive};
use table_gen::margins::why::Why;
use table_gen::rest_states::listing::Question;

#[derive(clap::Args)]
pub struct Arguments {
    /// The arm file.
    arm: PathBuf,
    #[command(flatten)]
    setpoint: Setpoint,
    /// Print JSON: setpoints and mean angles in SI and radians, requirements in the units of their keys.
    #[arg(long)]
    json: bool,
}

pub fn run(arguments: &Arguments) -> Result<(), Failure> {
    let arm = arm_file::read(&arguments.arm).map_err(table_gen::BuildError::from)?;
    let (setpoint, unit) = within_range(&arm, arguments.setpoint.question())?;
    let bar = progress_bar();
    let why = Why::new(&arm, setpoint, &|done| {
        bar.set_position((1000.0 * done) as u64)
    });
    bar.finish_and_clear();
    let why = why.map_err(Failure::job)?;
    if arguments.json {
        println!(
            "{}",
            serde_json::to_string(&why).expect("numbers serialise")
        );
    } else {
        print(&arm, &why, unit);
    }
    Ok(())
}

/// The setpoint in SI, when it suits the arm's drive and range.
fn within_range(arm: &Arm, question: Question) -> Result<(f64, Unit), Failure> {
    let (setpoint, [lo, hi], unit, option) = match (arm.drive, question) {
        (Drive::HeldTip { setpoints_rad }, Question::HoldTip(angle)) => {
            (angle, setpoints_rad, Unit::Degrees, "--hold-tip-deg")
        }
        (Drive::AppliedCouple { setpoints_n_m }, Question::Couple(couple)) => {
            (couple, setpoints_n_m, Unit::NewtonMetres, "--couple-n-m")
        }
        (Drive::HeldTip { .. }, _) => {
            return Err(Failure::input(
                "--couple-n-m: this arm\u{2019}s tip is held, ask with --hold-tip-deg",
            ));
        }
        (Drive::AppliedCouple { .. }, _) => {
            return Err(Failure::input(
                "--hold-tip-deg: a couple is applied to this arm, ask with --couple-n-m",
            ));
        }
    };
    // A degree typed at the end of the range may round beyond it.
    let slack = 1e-9 * (hi - lo);
    if (lo - slack..=hi + slack).contains(&setpoint) {
        return Ok((setpoint.clamp(lo, hi), unit));
    }
    Err(Failure::input(format!(
        "{option}: {} is outside the setpoint range; {} to {} is allowed",
        unit.of_value(setpoint as f32),
        unit.of_value(lo as f32),
        unit.of_value(hi as f32)
    )))
}

fn print(arm: &Arm, why: &Why, unit: Unit) {
    println!(
        "{}: setpoint {}",
        arm.name,
        unit.of_value(why.setpoint as f32)
    );
    for branch in &why.branches {
        let verdict = if branch.usable {
            "usable"
        } else {
            "NOT usable"
        };
        println!(
            "\nbranch {}, mean angle {:.3} deg: {verdict}",
            branch.branch,
            branch.mean_angle_rad.to_degrees()
        );
        println!("  requirement                      value       limit          worst corner");
        for requirement in &branch.requirements {
            let value = requirement
                .value
                .map_or("no bound".to_string(), |value| format!("{value:.5}"));
            let corner = requirement.corner.map_or(String::new(), |corner| {
                format!(
                    "{:.4} kg, stiffness {:+.0} %, tilt {:+.1} deg",
                    corner.payload_kg, corner.stiffness_percent, corner.tilt_deg
                )
            });
            let holds = if requirement.holds { "  " } else { "NO" };
            println!(
                "{holds} {:25} {value:>12} {:11.5} {:4}  {corner}",
                requirement.name, requirement.limit, requirement.unit
            );
        }
    }
    match why.nearest_usable {
        Some(nearest) => println!(
            "\nnearest usable setpoint, whatever the payload: {}",
            unit.of_value(nearest as f32)
        ),
        None => println!("\nno setpoint of this arm is usable whatever the payload"),
    }
}
