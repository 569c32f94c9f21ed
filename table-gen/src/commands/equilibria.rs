//! `table-gen equilibria`.

use crate::Failure;
use std::path::PathBuf;
use table_gen::arm_file;
use table_gen::rest_states::listing::{Listing, Question};

#[derive(clap::Args)]
pub struct Arguments {
    /// The arm file.
    arm: PathBuf,
    #[command(flatten)]
    setpoint: Setpoint,
    /// Print JSON in SI units and radians.
    #[arg(long)]
    json: bool,
}

#[derive(clap::Args)]
#[group(required = true, multiple = false)]
struct Setpoint {
    /// Tip angle held, in degrees from the base tangent, within 720 either way.
    #[arg(long, value_name = "X", allow_hyphen_values = true, value_parser = tip_angle_deg)]
    hold_tip_deg: Option<f64>,
    /// Couple applied to the tip, in N m, within 100000 either way.
    #[arg(long, value_name = "X", allow_hyphen_values = true, value_parser = couple_n_m)]
    couple_n_m: Option<f64>,
}

fn tip_angle_deg(text: &str) -> Result<f64, String> {
    within(text, 720.0)
}

fn couple_n_m(text: &str) -> Result<f64, String> {
    within(text, 1e5)
}

fn within(text: &str, most: f64) -> Result<f64, String> {
    match text.parse::<f64>() {
        Ok(value) if value.abs() <= most => Ok(value),
        _ => Err(format!("a number from -{most} to {most} is allowed")),
    }
}

pub fn run(arguments: &Arguments) -> Result<(), Failure> {
    let arm = arm_file::read(&arguments.arm).map_err(table_gen::BuildError::from)?;
    let question = match (
        arguments.setpoint.hold_tip_deg,
        arguments.setpoint.couple_n_m,
    ) {
        (Some(angle_deg), _) => Question::HoldTip(angle_deg.to_radians()),
        (None, couple) => Question::Couple(couple.expect("one of the two is required")),
    };
    let listing = Listing::new(&arm, question).map_err(Failure::job)?;
    if arguments.json {
        println!(
            "{}",
            serde_json::to_string(&listing).expect("numbers serialise")
        );
    } else {
        print(&arm.name, &listing, question);
    }
    Ok(())
}

fn print(name: &str, listing: &Listing, question: Question) {
    let held = match question {
        Question::HoldTip(angle) => format!("tip held at {:.3} deg", angle.to_degrees()),
        Question::Couple(couple) => format!("couple of {couple:.5} N m applied"),
    };
    println!(
        "{name}: {held}; gamma {:.4}, {} curvature modes",
        listing.gamma, listing.modes
    );
    println!("\n mean angle   tip angle      couple      energy     barrier    tip x    tip y");
    println!("        deg         deg         N m           J           J        m        m");
    for state in &listing.equilibria {
        let barrier = state
            .barrier_j
            .map_or("-".to_string(), |barrier| format!("{barrier:.5}"));
        let kind = match state.index {
            0 => "stable".to_string(),
            1 => "pass".to_string(),
            index => format!("hilltop, index {index}"),
        };
        println!(
            "{:11.3} {:11.3} {:11.5} {:11.5} {barrier:>11} {:8.4} {:8.4}  {kind}",
            state.mean_angle_rad.to_degrees(),
            state.tip_angle_rad.to_degrees(),
            state.couple_n_m,
            state.energy_j,
            state.tip_x_m,
            state.tip_y_m,
        );
    }
    println!("\nThe two-coordinate model says:");
    for state in &listing.two_coordinate {
        let verdict = match state.confirmed {
            Some(true) => "stable, confirmed by the rod",
            Some(false) => "stable, FALSE: the rod has no such rest state",
            None => "unstable",
        };
        println!(
            "{:11.3} {:11.3}  {verdict}",
            state.mean_angle_rad.to_degrees(),
            state.tip_angle_rad.to_degrees()
        );
    }
}
