//! Plans kept from one build to the next.

use super::{PLANNER_VERSION, Plans, plan};
use crate::arm_file::Arm;
use crate::build::BuildError;
use crate::margins::corners::Corners;
use crate::margins::usable::Usable;
use serde::{Deserialize, Serialize};
use sha2::{Digest, Sha256};
use std::io::Write;
use std::path::{Path, PathBuf};

/// A file of plans.
#[derive(Serialize, Deserialize)]
struct Kept {
    /// What they were made from: see [`origin`].
    origin: [u8; 32],
    plans: Plans,
}

/// Everything a plan depends on: the planner, the arm and its table without crossings.
fn origin(arm: &Arm, draft: &[u8]) -> [u8; 32] {
    let mut hash = Sha256::new();
    hash.update(PLANNER_VERSION.to_le_bytes());
    hash.update(arm.fingerprint());
    hash.update(draft);
    hash.finalize().into()
}

/// Where the plans of an arm are kept within `directory`.
pub fn plan_path(directory: &Path, arm: &Arm) -> PathBuf {
    let fingerprint: String = arm
        .fingerprint()
        .iter()
        .map(|b| format!("{b:02x}"))
        .collect();
    directory.join(format!("{fingerprint}-v{PLANNER_VERSION}.plan"))
}

/// The plans kept in `directory` for this arm and this draft of its table, or new ones, which are then kept. A file that is
/// damaged or was made from something else counts as none.
///
/// # Errors
/// [`BuildError::Tabulation`] as [`plan`]; [`BuildError::Output`] when the file cannot be written.
pub fn plan_or_kept(
    arm: &Arm,
    corners: &Corners,
    usable: &Usable,
    draft: &[u8],
    directory: &Path,
    progress: &(dyn Fn(f64) + Sync),
) -> Result<Plans, BuildError> {
    let (path, origin) = (plan_path(directory, arm), origin(arm, draft));
    if let Some(plans) = read(&path, origin) {
        progress(1.0);
        return Ok(plans);
    }
    let plans = plan(arm, corners, usable, draft, progress)?;
    let kept = Kept { origin, plans };
    write(directory, &path, &kept).map_err(|error| BuildError::Output { path, error })?;
    Ok(kept.plans)
}

fn read(path: &Path, origin: [u8; 32]) -> Option<Plans> {
    let bytes = std::fs::read(path).ok()?;
    let (content, digest) = bytes.split_at_checked(bytes.len().checked_sub(32)?)?;
    let kept: Kept = postcard::from_bytes(content).ok()?;
    let whole = Sha256::digest(content).as_slice() == digest;
    (whole && kept.origin == origin).then_some(kept.plans)
}

fn write(directory: &Path, path: &Path, kept: &Kept) -> std::io::Result<()> {
    std::fs::create_dir_all(directory)?;
    let content = postcard::to_stdvec(kept).map_err(std::io::Error::other)?;
    let mut file = tempfile::NamedTempFile::new_in(directory)?;
    file.write_all(&content)?;
    file.write_all(&Sha256::digest(&content))?;
    file.flush()?;
    file.persist(path)?;
    Ok(())
}
