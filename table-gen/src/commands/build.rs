//! `table-gen build`.

use crate::Failure;
use firmware_core::{Drive, Table};
use indicatif::{ProgressBar, ProgressStyle};
use std::path::{Path, PathBuf};
use std::time::Instant;
use table_gen::margins::usable::EndLimit;
use table_gen::rest_states::curve::{Branch, BranchEnd};
use table_gen::table::Tabulation;
use table_gen::{Outputs, arm_file};

#[derive(clap::Args)]
pub struct Arguments {
    /// The arm file.
    arm: PathBuf,
    /// Directory for table.bin, table.json and report.html [default: target/tables/NAME, NAME being the arm file's, or its
    /// folder's when the file is just called arm.toml].
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
}

pub fn run(arguments: &Arguments) -> Result<(), Failure> {
    let begun = Instant::now();
    let arm = arm_file::read(&arguments.arm).map_err(table_gen::BuildError::from)?;
    let bar = progress_bar();
    let outputs = Outputs::make(&arm, &|done| bar.set_position((1000.0 * done) as u64));
    bar.finish_and_clear();
    let outputs = outputs?;
    let directory = arguments
        .out
        .clone()
        .unwrap_or_else(|| default_directory(&arguments.arm));
    outputs.write(&directory)?;
    summarise(&outputs.tabulation);
    println!(
        "\n{} bytes of table in {:.2} s: {}",
        outputs.tabulation.bytes.len(),
        begun.elapsed().as_secs_f64(),
        directory.join("table.bin").display()
    );
    println!("Look at {}", directory.join("report.html").display());
    Ok(())
}

/// A bar of a thousand parts, shown on a terminal only.
pub fn progress_bar() -> ProgressBar {
    let style = ProgressStyle::with_template("{bar:40} {percent:>3} %  {elapsed}")
        .expect("the template is valid");
    ProgressBar::new(1000).with_style(style)
}

fn default_directory(arm_file: &Path) -> PathBuf {
    let stem = arm_file.file_stem().unwrap_or_default();
    let folder = arm_file.parent().and_then(Path::file_name);
    let name = match folder {
        Some(folder) if stem == "arm" => folder,
        _ => stem,
    };
    Path::new("target").join("tables").join(name)
}

fn summarise(tabulation: &Tabulation) {
    let corners = &tabulation.corners;
    let rest = &corners.nominal;
    println!(
        "{}: gamma {:.4}, {} curvature modes",
        tabulation.arm.name,
        tabulation.arm.gamma(),
        rest.modal.modes()
    );
    println!(
        "rest states audited by shooting at {} setpoints, and in {} corners of the tolerances",
        rest.audited,
        corners.arms.len()
    );
    println!("usable means: whatever the payload, in every corner\n");
    let table = Table::new(&tabulation.bytes).expect("the table was checked when it was made");
    let unit = Unit::of(table.limits().drive);
    for (number, branch) in rest.branches.iter().enumerate() {
        let [from, to] = [0, 1].map(|end| end_in_words(tabulation, branch, end, unit));
        let kind = match branch.index {
            0 => "stable",
            1 => "pass",
            _ => "hilltop",
        };
        println!("branch {number}  {kind:7}  {from} to {to}");
        for ([from, to], limits) in tabulation
            .usable
            .any_payload(number, corners.payloads_kg.len())
        {
            let [below, above] = limits.map(|limit| limit_in_words(tabulation, &limit));
            println!(
                "          usable   {} ({below}) to {} ({above})",
                unit.of_value(from as f32),
                unit.of_value(to as f32)
            );
        }
    }
    let worst = &tabulation.worst_error;
    let scale = rest.rod.energy_scale_j;
    println!(
        "\nworst interpolation errors in {} comparisons with fresh solves:",
        tabulation.compared
    );
    println!(
        "  mean angle  {:.4} deg",
        f64::from(worst.mean_angle_rad).to_degrees()
    );
    match table.limits().drive {
        Drive::HeldTip => println!(
            "  couple      {:.4} % of m g L",
            100.0 * f64::from(worst.couple_n_m) / scale
        ),
        Drive::AppliedCouple => println!(
            "  tip angle   {:.4} deg",
            f64::from(worst.tip_angle_rad).to_degrees()
        ),
    }
    println!(
        "  energy      {:.4} % of m g L",
        100.0 * f64::from(worst.energy_j) / scale
    );
    println!(
        "  barrier     {:.4} % of m g L",
        100.0 * f64::from(worst.barrier_j) / scale
    );
    println!("  tip         {:.3} mm", 1e3 * f64::from(worst.tip_m));
    println!("  restoring   {:.2e} N m/rad", worst.restoring_n_m_per_rad);
}

/// The requirement that ends a usable stretch, with its limit.
fn limit_in_words(tabulation: &Tabulation, limit: &EndLimit) -> String {
    let Some(kind) = limit.kind else {
        return "end of range".to_string();
    };
    let drive = &tabulation.arm.drive;
    let (name, unit) = kind.key_and_unit(drive);
    format!("{name} {:.4} {unit}", kind.as_typed(drive, limit.limit))
}

fn end_in_words(tabulation: &Tabulation, branch: &Branch, end: usize, unit: Unit) -> String {
    let rod = &tabulation.corners.nominal.rod;
    let [lo, hi] = rod.setpoints;
    let (at, kind) = if end == 0 {
        (branch.from(), branch.from_end)
    } else {
        (branch.to(), branch.to_end)
    };
    let is_fold = kind == BranchEnd::Fold && (lo..=hi).contains(&at);
    let value = unit.of_value(rod.setpoint_si(at.clamp(lo, hi)) as f32);
    if is_fold {
        format!("{value} (fold)")
    } else {
        value
    }
}

/// How setpoints are shown to people.
#[derive(Clone, Copy)]
pub enum Unit {
    Degrees,
    NewtonMetres,
}

impl Unit {
    pub fn of(drive: Drive) -> Self {
        match drive {
            Drive::HeldTip => Self::Degrees,
            Drive::AppliedCouple => Self::NewtonMetres,
        }
    }

    pub fn of_value(self, setpoint: f32) -> String {
        match self {
            Self::Degrees => format!("{:.3} deg", f64::from(setpoint).to_degrees()),
            Self::NewtonMetres => format!("{setpoint:.5} N m"),
        }
    }
}
