//! The whole way from an arm file to its outputs: what a build script calls.

use crate::arm_file::{self, Arm, ArmFileError, Drive};
use crate::plan::swing::{Plans, plan_or_kept};
use crate::report;
use crate::table::crossings::with_crossings;
use crate::table::readable::Readable;
use crate::table::{Tabulation, TabulationError, tabulate};
use firmware_core::Table;
use std::fmt;
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// Why no table came about.
#[derive(Debug)]
pub enum BuildError {
    /// The arm file is absent, unreadable or wrong.
    ArmFile(ArmFileError),
    /// The arm cannot be tabulated.
    Tabulation(TabulationError),
    /// An output could not be written.
    Output {
        /// Which file or directory.
        path: PathBuf,
        /// What the system said.
        error: io::Error,
    },
}

impl BuildError {
    /// Exit code of a program that ends with this error: 2 for bad input, 1 for a failed job.
    pub fn exit_code(&self) -> u8 {
        match self {
            Self::ArmFile(_) => 2,
            Self::Tabulation(_) | Self::Output { .. } => 1,
        }
    }
}

impl fmt::Display for BuildError {
    fn fmt(&self, f: &mut fmt::Formatter) -> fmt::Result {
        match self {
            Self::ArmFile(error) => error.fmt(f),
            Self::Tabulation(error) => error.fmt(f),
            Self::Output { path, error } => {
                write!(f, "{}: cannot be written: {error}", path.display())
            }
        }
    }
}

impl std::error::Error for BuildError {}

impl From<ArmFileError> for BuildError {
    fn from(error: ArmFileError) -> Self {
        Self::ArmFile(error)
    }
}

impl From<TabulationError> for BuildError {
    fn from(error: TabulationError) -> Self {
        Self::Tabulation(error)
    }
}

/// The bytes of the table for the arm in `arm_file`, ready to be embedded in firmware. The same file gives the same bytes.
///
/// ```no_run
/// // build.rs of a board
/// let arm_file = std::path::Path::new("arm.toml");
/// println!("cargo::rerun-if-changed={}", arm_file.display());
/// match table_gen::table_bytes(arm_file) {
///     Ok(bytes) => std::fs::write(format!("{}/table.bin", std::env::var("OUT_DIR").unwrap()), bytes).unwrap(),
///     Err(error) => panic!("{error}"),
/// }
/// ```
///
/// # Errors
/// [`BuildError::ArmFile`] or [`BuildError::Tabulation`], whose messages say what to change.
pub fn table_bytes(arm_file: &Path) -> Result<Vec<u8>, BuildError> {
    let arm = arm_file::read(arm_file)?;
    Ok(tabulate(&arm, &|_| {})?.bytes)
}

/// Everything that is written for an arm.
pub struct Outputs {
    /// The table and what it was made from.
    pub tabulation: Tabulation,
    /// The table's content to read, as JSON.
    pub table_json: String,
    /// The report page.
    pub report_html: String,
    /// The crossings in the table, with why some are not allowed.
    pub plans: Plans,
}

/// Shares of the progress that table, plan and report take, when there is a plan.
const SHARES: [f64; 2] = [0.1, 0.85];

/// Names of the three files.
const FILE_NAMES: [&str; 3] = ["table.bin", "table.json", "report.html"];

impl Outputs {
    /// Makes the outputs of `arm`, whose table then has no crossings. `progress` is called with the fraction done, 0 to 1.
    ///
    /// # Errors
    /// [`BuildError::Tabulation`].
    pub fn make(arm: &Arm, progress: &(dyn Fn(f64) + Sync)) -> Result<Self, BuildError> {
        let tabulation = tabulate(arm, &|done| progress(0.7 * done))?;
        Self::of(tabulation, Plans::default(), progress)
    }

    /// The same with crossings, where the arm file has a `[swing]` section. They are planned once, which takes minutes, and kept
    /// in `plans`, a directory that is made if need be.
    ///
    /// # Errors
    /// [`BuildError::Tabulation`]; [`BuildError::Output`] when the plan cannot be kept.
    pub fn make_planned(
        arm: &Arm,
        plans: &Path,
        progress: &(dyn Fn(f64) + Sync),
    ) -> Result<Self, BuildError> {
        if arm.swing.is_none() || !matches!(arm.drive, Drive::HeldTip { .. }) {
            return Self::make(arm, progress);
        }
        let mut tabulation = tabulate(arm, &|done| progress(SHARES[0] * done))?;
        let planning = |done| progress(SHARES[0] + (SHARES[1] - SHARES[0]) * done);
        let plans = plan_or_kept(
            arm,
            &tabulation.corners,
            &tabulation.usable,
            &tabulation.bytes,
            plans,
            &planning,
        )?;
        let by_slice = plans.by_slice(tabulation.corners.payloads_kg.len());
        tabulation.bytes = with_crossings(&tabulation.bytes, &by_slice)?;
        Self::of(tabulation, plans, progress)
    }

    fn of(
        tabulation: Tabulation,
        plans: Plans,
        progress: &(dyn Fn(f64) + Sync),
    ) -> Result<Self, BuildError> {
        let table = Table::new(&tabulation.bytes).map_err(TabulationError::Refused)?;
        let readable = Readable::new(&table).map_err(TabulationError::Refused)?;
        let table_json =
            serde_json::to_string_pretty(&readable).expect("numbers and names serialise") + "\n";
        let data = report::gather(&tabulation).map_err(TabulationError::RestStates)?;
        progress(0.95);
        let report_html = report::render(&data);
        progress(1.0);
        Ok(Self {
            tabulation,
            table_json,
            report_html,
            plans,
        })
    }

    /// Writes the files into `directory`, which is made if need be: each is written beside its place and moved there when all
    /// are complete.
    ///
    /// # Errors
    /// [`BuildError::Output`].
    pub fn write(&self, directory: &Path) -> Result<(), BuildError> {
        let failed = |path: &Path| {
            let path = path.to_path_buf();
            move |error| BuildError::Output { path, error }
        };
        std::fs::create_dir_all(directory).map_err(failed(directory))?;
        let contents = [
            &self.tabulation.bytes[..],
            self.table_json.as_bytes(),
            self.report_html.as_bytes(),
        ];
        let mut written = Vec::new();
        for content in contents {
            let mut file = tempfile::NamedTempFile::new_in(directory).map_err(failed(directory))?;
            file.write_all(content)
                .and_then(|()| file.flush())
                .map_err(failed(file.path()))?;
            written.push(file);
        }
        for (file, name) in written.into_iter().zip(FILE_NAMES) {
            let path = directory.join(name);
            let file = file.persist(&path).map_err(|error| BuildError::Output {
                path: path.clone(),
                error: error.error,
            })?;
            share(&file, &path)?;
        }
        Ok(())
    }
}

/// Gives a file the permissions a plainly created one has: temporary files are private to their owner.
#[cfg(unix)]
fn share(file: &std::fs::File, path: &Path) -> Result<(), BuildError> {
    use std::os::unix::fs::PermissionsExt;
    file.set_permissions(std::fs::Permissions::from_mode(0o644))
        .map_err(|error| BuildError::Output {
            path: path.to_path_buf(),
            error,
        })
}

#[cfg(not(unix))]
fn share(_file: &std::fs::File, _path: &Path) -> Result<(), BuildError> {
    Ok(())
}
