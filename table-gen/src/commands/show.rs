//! `table-gen show`.

use crate::Failure;
use crate::build::Unit;
use firmware_core::{Drive, RestState, Table};
use serde::Serialize;
use std::path::PathBuf;
use table_gen::table::readable::Readable;

#[derive(clap::Args)]
pub struct Arguments {
    /// A table.bin.
    table: PathBuf,
    #[command(flatten)]
    setpoint: Setpoint,
    /// Print JSON in SI units and radians.
    #[arg(long)]
    json: bool,
}

#[derive(clap::Args)]
#[group(multiple = false)]
struct Setpoint {
    /// What the firmware answers at this tip angle, in degrees (tables with the tip held).
    #[arg(long, value_name = "X", allow_hyphen_values = true)]
    at_deg: Option<f64>,
    /// What the firmware answers at this couple, in N m (tables with a couple applied).
    #[arg(long, value_name = "X", allow_hyphen_values = true)]
    at_n_m: Option<f64>,
}

/// The firmware's answer at one setpoint.
#[derive(Serialize)]
struct Answer {
    setpoint: f32,
    rest_states: Vec<Listed>,
}

/// One rest state and whether it may be commanded.
#[derive(Serialize)]
struct Listed {
    #[serde(flatten)]
    state: RestState,
    usable: bool,
}

pub fn run(arguments: &Arguments) -> Result<(), Failure> {
    let path = arguments.table.display();
    let bytes = std::fs::read(&arguments.table)
        .map_err(|error| Failure::input(format!("{path}: {error}")))?;
    let table = Table::new(&bytes).map_err(|error| Failure::input(format!("{path}: {error}")))?;
    match asked(arguments, &table)? {
        Some(setpoint) => answer(arguments, &table, setpoint),
        None => contents(arguments, &table),
    }
}

/// The setpoint asked for in SI, when it suits the table's drive.
fn asked(arguments: &Arguments, table: &Table) -> Result<Option<f32>, Failure> {
    let limits = table.limits();
    let (value, option) = match (
        limits.drive,
        arguments.setpoint.at_deg,
        arguments.setpoint.at_n_m,
    ) {
        (_, None, None) => return Ok(None),
        (Drive::HeldTip, Some(angle_deg), _) => (angle_deg.to_radians() as f32, "--at-deg"),
        (Drive::AppliedCouple, _, Some(couple)) => (couple as f32, "--at-n-m"),
        (Drive::HeldTip, None, _) => {
            return Err(Failure::input(
                "--at-n-m: this table is for a held tip, ask with --at-deg",
            ));
        }
        (Drive::AppliedCouple, _, None) => {
            return Err(Failure::input(
                "--at-deg: this table is for an applied couple, ask with --at-n-m",
            ));
        }
    };
    if (limits.setpoint_lo..=limits.setpoint_hi).contains(&value) {
        return Ok(Some(value));
    }
    let unit = Unit::of(limits.drive);
    Err(Failure::input(format!(
        "{option}: {} is outside the table; {} to {} is allowed",
        unit.of_value(value),
        unit.of_value(limits.setpoint_lo),
        unit.of_value(limits.setpoint_hi)
    )))
}

fn answer(arguments: &Arguments, table: &Table, setpoint: f32) -> Result<(), Failure> {
    for slice in table.slices() {
        let usable = |branch: u8| {
            slice
                .stretches(branch)
                .any(|stretch| stretch.contains(setpoint))
        };
        let rest_states: Vec<Listed> = slice
            .all_at(setpoint)
            .map(|state| Listed {
                state,
                usable: usable(state.branch),
            })
            .collect();
        if arguments.json {
            let answer = Answer {
                setpoint,
                rest_states,
            };
            println!(
                "{}",
                serde_json::to_string(&answer).expect("numbers serialise")
            );
            continue;
        }
        println!(
            "payload {} kg, setpoint {}",
            slice.payload_kg,
            Unit::of(table.limits().drive).of_value(setpoint)
        );
        println!("branch  mean angle   tip angle      couple      energy     barrier");
        println!("               deg         deg         N m           J           J");
        for Listed { state, usable } in rest_states {
            let barrier = state.well.and_then(|well| well.barrier_j);
            let verdict = match (state.index, usable) {
                (0, true) => "stable, usable",
                (0, false) => "stable, not usable",
                _ => "unstable",
            };
            println!(
                "{:6} {:11.3} {:11.3} {:11.5} {:11.5} {:>11}  {verdict}",
                state.branch,
                f64::from(state.mean_angle_rad).to_degrees(),
                f64::from(state.tip_angle_rad).to_degrees(),
                state.couple_n_m,
                state.energy_j,
                barrier.map_or("-".to_string(), |barrier| format!("{barrier:.5}")),
            );
        }
    }
    Ok(())
}

fn contents(arguments: &Arguments, table: &Table) -> Result<(), Failure> {
    let readable = Readable::new(table).map_err(Failure::job)?;
    if arguments.json {
        println!(
            "{}",
            serde_json::to_string(&readable).expect("numbers serialise")
        );
        return Ok(());
    }
    let header = &readable.header;
    let unit = Unit::of(header.drive);
    let fingerprint: String = header
        .fingerprint
        .iter()
        .map(|byte| format!("{byte:02x}"))
        .collect();
    println!(
        "{}: {} bytes, format {}, fingerprint {fingerprint}",
        header.name, readable.bytes, readable.format_version
    );
    println!(
        "gamma {:.4}, {} curvature modes, length {} m, mass {:.4} kg, tilt {:.2} deg",
        header.gamma,
        header.modes,
        header.length_m,
        header.mass_kg,
        f64::from(header.tilt_rad).to_degrees()
    );
    println!(
        "setpoints {} to {}, tensions {} to {} N at {} m",
        unit.of_value(header.setpoint_lo),
        unit.of_value(header.setpoint_hi),
        header.pretension_n,
        header.max_tension_n,
        header.offset_m
    );
    for slice in &readable.slices {
        println!("\npayload {} kg", slice.payload_kg);
        for branch in &slice.branches {
            let fold = |is_fold: bool| if is_fold { " (fold)" } else { "" };
            println!(
                "branch {}  index {}  {}{} to {}{}  {} knots",
                branch.number,
                branch.entry.index,
                unit.of_value(branch.entry.from),
                fold(branch.entry.fold_from && branch.entry.anchor_from == branch.entry.from),
                unit.of_value(branch.entry.to),
                fold(branch.entry.fold_to && branch.entry.anchor_to == branch.entry.to),
                branch.entry.knots
            );
            for stretch in slice.stretches.iter().filter(|s| s.branch == branch.number) {
                println!(
                    "          usable  {} to {}",
                    unit.of_value(stretch.from),
                    unit.of_value(stretch.to)
                );
                println!(
                    "                  below: {}; above: {}",
                    stretch.from_limit, stretch.to_limit
                );
            }
        }
    }
    Ok(())
}
