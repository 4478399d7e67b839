//! Hidden folders beside an output: what is being built, and what a run that was killed left behind.
//!
//! A folder is named `.NAME.veerlog-new-PID-LETTERS` after the output and the process that builds it. The next run removes
//! those whose process is gone. Limit: where processes cannot be asked after (no `/proc`), a folder is taken for left
//! behind once it was not touched for a day.

use std::fs;
use std::path::{Path, PathBuf};
use std::sync::Mutex;
use std::time::Duration;

use tempfile::TempDir;

use super::Error;

/// Between the output's name and the number of the process.
const INFIX: &str = ".veerlog-new-";

/// Age from which a folder counts as left behind where processes cannot be asked after.
const LEFT: Duration = Duration::from_secs(86_400);

/// Outputs that this process builds, for [`abandon`].
static BUILDING: Mutex<Vec<PathBuf>> = Mutex::new(Vec::new());

/// An empty hidden folder beside `target`, which goes when dropped; `target`'s parents are made where missing.
///
/// # Errors
/// [`Error::Io`] when the disc refuses.
pub fn beside(target: &Path) -> Result<TempDir, Error> {
    let target = std::path::absolute(target).map_err(|source| Error::io(target, source))?;
    if let Ok(mut building) = BUILDING.lock() {
        building.push(target.clone());
    }
    let parent = target.parent().unwrap_or(&target);
    fs::create_dir_all(parent).map_err(|source| Error::io(parent, source))?;
    let prefix = format!("{}{}-", start(&target), std::process::id());
    tempfile::Builder::new().prefix(&prefix).tempdir_in(parent).map_err(|source| Error::io(parent, source))
}

/// What the hidden folders of an output start with.
fn start(target: &Path) -> String {
    format!(".{}{INFIX}", target.file_name().unwrap_or_default().to_string_lossy())
}

/// Removes what killed runs left beside `target`, as far as that can be done: it is in nobody's way. A whole output that
/// was moved aside while no other stands in its place is moved back.
pub fn sweep(target: &Path) {
    clear(target, alive);
}

/// Removes what this process has half-built, when it is about to end; a whole output that it moved aside goes back.
pub fn abandon() {
    let targets = BUILDING.lock().map(|building| building.clone()).unwrap_or_default();
    for target in targets {
        let own = format!("{}-", std::process::id());
        clear(&target, |rest, folder| !rest.starts_with(&own) && alive(rest, folder));
    }
}

fn clear(target: &Path, alive: impl Fn(&str, &Path) -> bool) {
    let Ok(target) = std::path::absolute(target) else { return };
    let (Some(parent), start) = (target.parent(), start(&target)) else { return };
    let Ok(entries) = fs::read_dir(parent) else { return };
    for entry in entries.flatten() {
        let name = entry.file_name().to_string_lossy().into_owned();
        let Some(rest) = name.strip_prefix(&start) else { continue };
        if !entry.file_type().is_ok_and(|kind| kind.is_dir()) || alive(rest, &entry.path()) {
            continue;
        }
        if rest.ends_with("-old") && !target.exists() && fs::rename(entry.path(), &target).is_ok() {
            continue;
        }
        // A folder that cannot be removed stays hidden; the run goes on.
        let _ = fs::remove_dir_all(entry.path());
    }
}

/// Whether the process that built a folder may still be at it.
fn alive(rest: &str, folder: &Path) -> bool {
    let Some(pid) = rest.split('-').next().and_then(|digits| digits.parse::<u32>().ok()) else { return young(folder) };
    if Path::new("/proc/self").exists() { Path::new(&format!("/proc/{pid}")).exists() } else { young(folder) }
}

fn young(folder: &Path) -> bool {
    let age = fs::metadata(folder).and_then(|found| found.modified()).ok().and_then(|at| at.elapsed().ok());
    age.is_none_or(|age| age < LEFT)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_the_dead_left_goes_and_what_the_living_build_stays() {
        let home = tempfile::tempdir().unwrap();
        let target = home.path().join("out");
        let make = |name: &str| {
            let path = home.path().join(name);
            fs::create_dir_all(path.join("tables")).unwrap();
            path
        };
        // No process has the highest number: the kernel gives none above 2^22.
        let dead = make(".out.veerlog-new-4294967295-abc");
        let other = make(".other.veerlog-new-4294967295-abc");
        let young = make(".out.veerlog-new-abcdef");
        let ours = beside(&target).unwrap();
        sweep(&target);
        assert!(!dead.exists() && other.exists() && young.exists() && ours.path().exists());
    }

    #[test]
    fn an_output_that_was_moved_aside_comes_back() {
        let home = tempfile::tempdir().unwrap();
        let target = home.path().join("out");
        fs::create_dir_all(home.path().join(".out.veerlog-new-4294967295-abc-old/tables")).unwrap();
        sweep(&target);
        assert!(target.join("tables").exists());
        assert_eq!(fs::read_dir(home.path()).unwrap().count(), 1);
    }
}
