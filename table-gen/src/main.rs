//! `table-gen`: rest states, tables and reports of a slender tendon-driven arm.

#[path = "commands/build.rs"]
mod build;
#[path = "commands/equilibria.rs"]
mod equilibria;
#[path = "commands/setpoint.rs"]
mod setpoint;
#[path = "commands/show.rs"]
mod show;
#[path = "commands/why.rs"]
mod why;

use clap::{Parser, Subcommand};
use std::io::IsTerminal;
use std::process::ExitCode;
use table_gen::BuildError;

/// Finds every rest state of a measured tendon-driven arm and writes the table its firmware answers from.
#[derive(Parser)]
#[command(version, arg_required_else_help = true)]
struct Arguments {
    #[command(subcommand)]
    command: Command,
}

#[derive(Subcommand)]
enum Command {
    /// Write the table for the board, the same to read, and a report with pictures.
    Build(build::Arguments),
    /// List every rest state at one setpoint, and what the two-coordinate model says there.
    Equilibria(equilibria::Arguments),
    /// Show what a table holds, or what the firmware answers from it at a setpoint.
    Show(show::Arguments),
    /// Judge one setpoint: every requirement with its value, limit and worst corner, and the nearest usable setpoint.
    Why(why::Arguments),
}

/// Why a command ended early: the message for people and the exit code.
struct Failure {
    message: String,
    exit_code: u8,
}

impl Failure {
    /// Bad input: exit code 2.
    fn input(message: impl std::fmt::Display) -> Self {
        Self {
            message: format!("error: {message}"),
            exit_code: 2,
        }
    }

    /// A failed job: exit code 1.
    fn job(message: impl std::fmt::Display) -> Self {
        Self {
            message: format!("error: {message}"),
            exit_code: 1,
        }
    }
}

impl From<BuildError> for Failure {
    fn from(error: BuildError) -> Self {
        let exit_code = error.exit_code();
        match error {
            // It brings its own heading, and colours for a terminal.
            BuildError::ArmFile(error) => Self {
                message: error.render(std::io::stderr().is_terminal()),
                exit_code,
            },
            error => Self {
                message: format!("error: {error}"),
                exit_code,
            },
        }
    }
}

fn main() -> ExitCode {
    let done = match Arguments::parse().command {
        Command::Build(arguments) => build::run(&arguments),
        Command::Equilibria(arguments) => equilibria::run(&arguments),
        Command::Show(arguments) => show::run(&arguments),
        Command::Why(arguments) => why::run(&arguments),
    };
    match done {
        Ok(()) => ExitCode::SUCCESS,
        Err(failure) => {
            eprintln!("{}", failure.message);
            ExitCode::from(failure.exit_code)
        }
    }
}
