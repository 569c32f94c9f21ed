//! `table-gen equilibria`.

use crate::Failure;
use crate::setpoint::Setpoint;
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

pub fn run(arguments: &Arguments) -> Result<(), Failure> {
    let arm = arm_file::read(&arguments.arm).map_err(table_gen::BuildError::from)?;
    let question = arguments.setpoint.question();
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
