//! `rehearse`: the control loop of the firmware against the simulated arm.

use clap::Parser;
use firmware_core::supervisor::Mode;
use host_tests::rehearsal::closed_loop::{Run, play};
use host_tests::rehearsal::random_cases::{Counts, Outcome, monte_carlo};
use host_tests::rehearsal::scenario::{self, SHIPPED, Scenario};
use host_tests::rehearsal::stage::{Stage, StageError};
use host_tests::rehearsal::timeline::Who;
use host_tests::rehearsal::words::{mode_name, refusal_name};
use host_tests::rehearsal::{page, verdict};
use indicatif::{ProgressBar, ProgressStyle};
use rayon::prelude::*;
use serde_json::{Value, json};
use std::fmt::Display;
use std::io::{self, Write};
use std::path::{Path, PathBuf};
use std::process::ExitCode;
use std::time::Instant;
use table_gen::arm_file::{self, Arm};
use table_gen::plan::swing::plan_or_kept;
use table_gen::table::crossings::with_crossings;
use table_gen::table::tabulate;

/// Plays scenarios: the firmware's control loop against the simulated arm. Without a choice, lists the scenarios there are.
#[derive(Parser)]
#[command(name = "rehearse", version, arg_required_else_help = true)]
struct Arguments {
    /// The arm file.
    arm: PathBuf,
    /// A scenario: its name, the name of its file, or a path to a TOML file.
    #[arg(long, value_name = "NAME", conflicts_with = "all")]
    scenario: Option<String>,
    /// Every scenario.
    #[arg(long)]
    all: bool,
    /// Directory of scenarios [default: those shipped, written for the greenhouse wand].
    #[arg(long, value_name = "DIR")]
    scenarios: Option<PathBuf>,
    /// Seed of sensor noise and drawn cases.
    #[arg(long, default_value_t = 1)]
    seed: u64,
    /// A table of this arm [default: one is made].
    #[arg(long, value_name = "FILE")]
    table: Option<PathBuf>,
    /// Plan crossings for the table that is made; they are kept in this directory. Takes minutes the first time.
    #[arg(long, value_name = "DIR", conflicts_with = "table")]
    plans: Option<PathBuf>,
    /// Print JSON instead of words.
    #[arg(long)]
    json: bool,
    /// Directory for the pages [default: target/rehearsals/NAME, NAME being the arm file's, or its folder's when the file
    /// is just called arm.toml].
    #[arg(long, value_name = "DIR")]
    out: Option<PathBuf>,
    /// Run so many drawn cases and count how they end.
    #[arg(long, value_name = "N", conflicts_with_all = ["all", "scenario"])]
    monte_carlo: Option<u64>,
}

/// Why the program ends early.
struct Failure {
    message: String,
    exit_code: u8,
}

impl Failure {
    fn input(message: impl Display) -> Self {
        Self {
            message: format!("error: {message}"),
            exit_code: 2,
        }
    }

    fn job(message: impl Display) -> Self {
        Self {
            message: format!("error: {message}"),
            exit_code: 1,
        }
    }
}

impl From<StageError> for Failure {
    fn from(error: StageError) -> Self {
        Self {
            exit_code: error.exit_code(),
            message: format!("error: {error}"),
        }
    }
}

fn main() -> ExitCode {
    match run(&Arguments::parse()) {
        Ok(true) => ExitCode::SUCCESS,
        Ok(false) => ExitCode::from(1),
        Err(failure) => {
            eprintln!("{}", failure.message);
            ExitCode::from(failure.exit_code)
        }
    }
}

/// Whether everything went as expected.
fn run(arguments: &Arguments) -> Result<bool, Failure> {
    let arm = arm_file::read(&arguments.arm).map_err(|error| Failure {
        message: error.to_string(),
        exit_code: 2,
    })?;
    if let Some(cases) = arguments.monte_carlo {
        return draw_cases(&stage(arguments, arm)?, cases, arguments);
    }
    let scenarios = chosen(arguments, &arm)?;
    if !arguments.all && arguments.scenario.is_none() {
        for scenario in &scenarios {
            println!("{}\n    {}", scenario.name, scenario.shows);
        }
        return Ok(true);
    }
    let out = arguments
        .out
        .clone()
        .unwrap_or_else(|| default_directory(&arguments.arm));
    let stage = stage(arguments, arm)?;
    let runs = scenarios
        .par_iter()
        .map(|scenario| play(&stage, scenario, arguments.seed))
        .collect::<Result<Vec<Run>, StageError>>()?;
    let mut written = Vec::new();
    for run in &runs {
        let path = out.join(file_name(&run.scenario.name));
        write(&path, &page::render(&stage, run)).map_err(|error| {
            Failure::job(format_args!(
                "{}: cannot be written: {error}",
                path.display()
            ))
        })?;
        written.push(path);
    }
    if arguments.json {
        let all: Vec<Value> = runs
            .iter()
            .zip(&written)
            .map(|(run, path)| as_json(run, path))
            .collect();
        println!("{:#}", json!({ "seed": arguments.seed, "rehearsals": all }));
    } else {
        for (run, path) in runs.iter().zip(&written) {
            print(run, path);
        }
    }
    let failed = runs
        .iter()
        .filter(|run| !verdict::unmet(run).is_empty())
        .count();
    if !arguments.json {
        match failed {
            0 => println!("{} of {} went as expected", runs.len(), runs.len()),
            _ => println!("{failed} of {} did not go as expected", runs.len()),
        }
    }
    Ok(failed == 0)
}

fn chosen(arguments: &Arguments, arm: &Arm) -> Result<Vec<Scenario>, Failure> {
    let directory = arguments.scenarios.as_deref().unwrap_or(Path::new(SHIPPED));
    let Some(wanted) = &arguments.scenario else {
        return scenario::read_all(directory, arm).map_err(Failure::input);
    };
    if Path::new(wanted)
        .extension()
        .is_some_and(|end| end == "toml")
    {
        let scenario = scenario::read(Path::new(wanted), arm).map_err(Failure::input)?;
        return Ok(vec![scenario]);
    }
    let by_file = directory.join(format!("{wanted}.toml"));
    if by_file.is_file() {
        let scenario = scenario::read(&by_file, arm).map_err(Failure::input)?;
        return Ok(vec![scenario]);
    }
    let all = scenario::read_all(directory, arm).map_err(Failure::input)?;
    let names: Vec<String> = all.iter().map(|scenario| scenario.name.clone()).collect();
    match all.into_iter().find(|scenario| scenario.name == *wanted) {
        Some(scenario) => Ok(vec![scenario]),
        None => Err(Failure::input(format_args!(
            "--scenario {wanted}: there is none of this name; there are: {}",
            names.join(", ")
        ))),
    }
}

fn stage(arguments: &Arguments, arm: Arm) -> Result<Stage, Failure> {
    if let Some(path) = &arguments.table {
        let bytes = std::fs::read(path).map_err(|error| {
            Failure::input(format_args!("{}: cannot be read: {error}", path.display()))
        })?;
        return Ok(Stage::new(arm, bytes)?);
    }
    let bar = progress_bar(1000);
    let tabulation =
        tabulate(&arm, &|done| bar.set_position((1000.0 * done) as u64)).map_err(Failure::job)?;
    let mut bytes = tabulation.bytes.clone();
    if let Some(directory) = &arguments.plans {
        let (corners, usable) = (&tabulation.corners, &tabulation.usable);
        let progress = |done| bar.set_position((1000.0 * done) as u64);
        let plans = plan_or_kept(&arm, corners, usable, &bytes, directory, &progress)
            .map_err(Failure::job)?;
        bytes = with_crossings(&bytes, &plans.by_slice(corners.payloads_kg.len()))
            .map_err(Failure::job)?;
    }
    bar.finish_and_clear();
    Ok(Stage::of(&tabulation, bytes)?)
}

fn draw_cases(stage: &Stage, cases: u64, arguments: &Arguments) -> Result<bool, Failure> {
    let begun = Instant::now();
    let bar = progress_bar(cases);
    let outcomes = monte_carlo(stage, cases, arguments.seed, &|| bar.inc(1))?;
    bar.finish_and_clear();
    let counts = Counts::of(&outcomes);
    let elapsed_s = begun.elapsed().as_secs_f64();
    if arguments.json {
        println!(
            "{:#}",
            json!({ "seed": arguments.seed, "counts": counts, "cases": outcomes })
        );
    } else {
        for (what, count) in counts.rows() {
            println!("{what:66} {count:6}");
        }
        for outcome in outcomes.iter().filter(|outcome| is_remarkable(outcome)) {
            println!(
                "case {}: {:?}, ended {:?}, wrong side {}, unnoticed {}; noted: {}",
                outcome.number,
                outcome.task,
                outcome.end,
                outcome.wrong_side,
                outcome.unnoticed.unwrap_or("nothing"),
                outcome.seen
            );
        }
        println!(
            "{:.0} s simulated in {elapsed_s:.1} s: {:.0} times real time",
            counts.simulated_s,
            counts.simulated_s / elapsed_s
        );
    }
    Ok(counts.sound())
}

/// Worth a line of its own: what must not happen, and crossings that failed undisturbed.
fn is_remarkable(outcome: &Outcome) -> bool {
    use host_tests::rehearsal::random_cases::End;
    outcome.wrong_side
        || outcome.unnoticed.is_some()
        || outcome.end == End::UnderWay
        || outcome.begun
            && !outcome.knocked_hard
            && !(outcome.end == End::Holds && outcome.on_wanted)
}

fn print(run: &Run, path: &Path) {
    println!("{}: {}", run.scenario.name, run.scenario.shows);
    for line in &run.timeline {
        let who = match line.who {
            Who::Caller => "the caller",
            Who::Arm => "the arm",
            Who::Firmware => "the firmware",
        };
        println!("{:8.2} s  {who} {}", line.at_s, line.text);
    }
    let unmet = verdict::unmet(run);
    if unmet.is_empty() {
        println!("  as expected");
    }
    for line in unmet {
        println!("  NOT AS EXPECTED: {line}");
    }
    println!(
        "  {:.0} times real time; look at {}\n",
        run.times_real_time,
        path.display()
    );
}

fn as_json(run: &Run, path: &Path) -> Value {
    let unmet = verdict::unmet(run);
    let (last, extremes) = (&run.last, &run.extremes);
    json!({
        "scenario": run.scenario.name,
        "shows": run.scenario.shows,
        "as_expected": unmet.is_empty(),
        "unmet": unmet,
        "mode": mode_name(last.mode),
        "stopped": last.mode == Mode::Stopped,
        "branch_reported": last.branch,
        "branch_really": run.true_branch,
        "refused": last.refused.map(refusal_name),
        "tip_angle_deg": run.tip_rad.to_degrees(),
        "planned_crossing": run.planned,
        "events": run.seen.names().collect::<Vec<_>>(),
        "timeline": run.timeline,
        "tip_speed_m_s": extremes.tip_speed_m_s,
        "couple_n_m": extremes.couple_n_m,
        "tension_n": extremes.tension_n,
        "strain": extremes.strain,
        "clearance_m": extremes.clearance_m,
        "times_real_time": run.times_real_time,
        "page": path.display().to_string(),
    })
}

fn progress_bar(parts: u64) -> ProgressBar {
    let style = ProgressStyle::with_template("{bar:40} {percent:>3} %  {elapsed}")
        .expect("the template is valid");
    ProgressBar::new(parts).with_style(style)
}

fn default_directory(arm_file: &Path) -> PathBuf {
    let stem = arm_file.file_stem().unwrap_or_default();
    let folder = arm_file.parent().and_then(Path::file_name);
    let name = match folder {
        Some(folder) if stem == "arm" => folder,
        _ => stem,
    };
    Path::new("target").join("rehearsals").join(name)
}

/// A scenario's name as the name of its page.
fn file_name(name: &str) -> String {
    let kept = |c: char| if c.is_alphanumeric() { c } else { '-' };
    format!(
        "{}.html",
        name.chars().map(kept).collect::<String>().to_lowercase()
    )
}

/// Writes the file whole or not at all.
fn write(path: &Path, text: &str) -> io::Result<()> {
    let directory = path.parent().unwrap_or(Path::new("."));
    std::fs::create_dir_all(directory)?;
    let mut file = tempfile::NamedTempFile::new_in(directory)?;
    file.write_all(text.as_bytes())?;
    file.flush()?;
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        // Temporary files are private to their owner; a page is not.
        file.as_file()
            .set_permissions(std::fs::Permissions::from_mode(0o644))?;
    }
    file.persist(path)?;
    Ok(())
}
