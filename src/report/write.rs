//! The output folder: built beside its place and swapped in whole, so that a reader never sees half of one.
//!
//! Order: write `.NAME.veerlog-new-PID-LETTERS`, move the old folder aside, move the new one in, remove the old one. A
//! program that is killed meanwhile leaves hidden folders beside the target, which the next run sweeps away
//! ([`stale`]); killed between the two moves, it leaves the old output whole under its hidden name, and the next run
//! moves it back first. If the last move fails, the old folder is moved back. A folder without our mark is never
//! touched unless it is empty.

use std::fs::{self, File};
use std::io::{BufWriter, Write};
use std::path::{Path, PathBuf};

use image::GrayImage;
use ndarray::Array2;

use super::schema::{CHARGE, DIRECTIONS, FILAMENTS, FORECASTS, FRAMES, GROWTH, HALF_CYCLES, PATHS, TURNS, Table};
use super::{Error, animation, page, paper, records, stale, tables};
use crate::results::{NEVER, Results};

/// The file that marks a folder as ours.
pub const MARK: &str = ".veerlog-output";

/// What the mark says to someone who opens it.
const MARK_TEXT: &str =
    "Written by veerlog, which replaces this whole folder when it runs again: keep nothing of your own here.\n";

/// What is written beyond the standing files.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq)]
pub struct Save<'a> {
    /// `masks/000000.png …`, one a usable frame.
    pub masks: bool,
    /// A folder of pictures `000000.jpg …`, one a usable frame, drift and light removed: moved to `frames/`, and
    /// shown by the page.
    pub frames: Option<&'a Path>,
}

/// The folder of [`Save::frames`] in the output folder.
const FRAMES_FOLDER: &str = "frames";

/// Writes the whole output folder of a run to `target`; its parents are made where missing.
///
/// # Errors
/// As [`replace_folder`].
pub fn write(results: &Results, target: &Path, save: Save<'_>) -> Result<(), Error> {
    replace_folder(target, &OURS, |folder| fill(results, folder, save))
}

/// Puts a folder made by `fill` in the place of `target`, whole. `ours` names all that may stand at the
/// top of such a folder; the mark is added here. `fill` gets an empty folder.
///
/// # Errors
/// [`Error::Foreign`] when `target` holds files and no mark of ours, [`Error::NotAFolder`] when it is a
/// file, [`Error::Io`] when the disc refuses, and what `fill` fails with. In every case `target` is left as
/// it was.
pub fn replace_folder(
    target: &Path,
    ours: &[&str],
    fill: impl FnOnce(&Path) -> Result<(), Error>,
) -> Result<(), Error> {
    refuse_foreign(target, ours)?;
    let target = &std::path::absolute(target).map_err(|source| Error::io(target, source))?;
    stale::sweep(target);
    let built = stale::beside(target)?;
    put(&built.path().join(MARK), MARK_TEXT.as_bytes())?;
    fill(built.path())?;
    open_to_readers(built.path())?;
    swap(built.keep(), target)
}

/// A temporary folder is closed to others; the output is made as open as a folder made here.
#[cfg(unix)]
fn open_to_readers(folder: &Path) -> Result<(), Error> {
    let probe = folder.join("probe");
    make(&probe)?;
    let open = fs::metadata(&probe).map_err(|source| Error::io(&probe, source))?.permissions();
    fs::remove_dir(&probe).map_err(|source| Error::io(&probe, source))?;
    fs::set_permissions(folder, open).map_err(|source| Error::io(folder, source))
}

/// Elsewhere a temporary folder is as open as any other.
#[cfg(not(unix))]
fn open_to_readers(_folder: &Path) -> Result<(), Error> {
    Ok(())
}

/// Fails when `target` exists and is not ours to replace. Cheap: call it before a long analysis, too.
///
/// # Errors
/// [`Error::Foreign`], [`Error::NotAFolder`], [`Error::Io`].
pub fn refuse_foreign(target: &Path, ours: &[&str]) -> Result<(), Error> {
    match fs::symlink_metadata(target) {
        Err(why) if why.kind() == std::io::ErrorKind::NotFound => return Ok(()),
        Err(source) => return Err(Error::io(target, source)),
        Ok(found) if !found.is_dir() => {
            return Err(Error::NotAFolder { path: target.to_owned() });
        }
        Ok(_) => {}
    }
    let mut names = Vec::new();
    for entry in fs::read_dir(target).map_err(|source| Error::io(target, source))? {
        let entry = entry.map_err(|source| Error::io(target, source))?;
        names.push(entry.file_name().to_string_lossy().into_owned());
    }
    names.sort();
    let ours = |name: &String| name == MARK || ours.contains(&name.as_str());
    let marked = names.iter().any(|name| name == MARK);
    match names.into_iter().find(|name| !marked || !ours(name)) {
        Some(found) => Err(Error::Foreign { path: target.to_owned(), found }),
        None => Ok(()),
    }
}

/// All that stands at the top of a run's output folder, beside the mark.
pub const OURS: [&str; 7] =
    ["report.html", "summary.json", "tables", "traces.ndjson", "figures", "masks", FRAMES_FOLDER];

/// Puts `built` in the place of `target`.
fn swap(built: PathBuf, target: &Path) -> Result<(), Error> {
    let old = built.with_file_name(format!("{}-old", built.file_name().unwrap_or_default().to_string_lossy()));
    let had_one = match fs::rename(target, &old) {
        Ok(()) => true,
        Err(why) if why.kind() == std::io::ErrorKind::NotFound => false,
        Err(source) => return Err(clean(&built, Error::io(target, source))),
    };
    if let Err(source) = fs::rename(&built, target) {
        if had_one {
            fs::rename(&old, target).map_err(|source| Error::io(&old, source))?;
        }
        return Err(clean(&built, Error::io(target, source)));
    }
    if had_one { fs::remove_dir_all(&old).map_err(|source| Error::io(&old, source)) } else { Ok(()) }
}

/// Removes what was built in vain and passes the error on.
fn clean(built: &Path, error: Error) -> Error {
    match fs::remove_dir_all(built) {
        Ok(()) => error,
        Err(source) => Error::io(built, source),
    }
}

/// Writes every file into an empty folder.
fn fill(results: &Results, folder: &Path, save: Save<'_>) -> Result<(), Error> {
    put(&folder.join(MARK), MARK_TEXT.as_bytes())?;
    put(&folder.join("summary.json"), records::summary_json(&results.summary)?.as_bytes())?;
    let traces = folder.join("traces.ndjson");
    stream(&traces, |out| records::write_traces(results, &traces, out))?;
    make(&folder.join("tables"))?;
    table(folder, &FRAMES, &results.frames)?;
    table(folder, &PATHS, &results.paths)?;
    table(folder, &GROWTH, &results.growth)?;
    table(folder, &FILAMENTS, &results.filaments)?;
    table(folder, &FORECASTS, &results.forecasts)?;
    table(folder, &TURNS, &results.turns)?;
    table(folder, &DIRECTIONS, &results.summary.directions)?;
    table(folder, &CHARGE, &results.charge)?;
    table(folder, &HALF_CYCLES, &results.half_cycles)?;
    figures(results, &folder.join("figures"))?;
    if save.masks {
        masks(results, &folder.join("masks"))?;
    }
    if let Some(made) = save.frames {
        let place = folder.join(FRAMES_FOLDER);
        fs::rename(made, &place).map_err(|source| Error::io(&place, source))?;
        open_to_readers(&place)?;
    }
    put(&folder.join("report.html"), page::render(results, save.frames.map(|_| FRAMES_FOLDER))?.as_bytes())
}

pub(super) fn table<R>(folder: &Path, schema: &Table<R>, rows: &[R]) -> Result<(), Error> {
    let path = |extension: &str| folder.join("tables").join(format!("{}.{extension}", schema.name));
    stream(&path("csv"), |out| tables::write_csv(schema, rows, out))?;
    stream(&path("parquet"), |out| tables::write_parquet(schema, rows, out))
}

fn figures(results: &Results, folder: &Path) -> Result<(), Error> {
    make(folder)?;
    paper::write(results, folder)?;
    match animation::growth(results)? {
        Some(file) => put(&folder.join("growth.gif"), &file),
        None => Ok(()),
    }
}

fn masks(results: &Results, folder: &Path) -> Result<(), Error> {
    make(folder)?;
    let Some(arrivals) = &results.pictures.arrivals else {
        return Ok(());
    };
    for row in results.frames.iter().filter(|row| row.usable) {
        let path = folder.join(format!("{:06}.png", row.frame));
        mask(arrivals, row.frame).save(&path).map_err(|why| Error::made(&path.to_string_lossy(), why))?;
    }
    Ok(())
}

/// 255 where metal had arrived by `frame`.
fn mask(arrivals: &Array2<u32>, frame: usize) -> GrayImage {
    let (rows, columns) = arrivals.dim();
    GrayImage::from_fn(columns as u32, rows as u32, |x, y| {
        let arrival = arrivals[[y as usize, x as usize]];
        image::Luma([if arrival != NEVER && arrival as usize <= frame { 255 } else { 0 }])
    })
}

pub(super) fn make(folder: &Path) -> Result<(), Error> {
    fs::create_dir(folder).map_err(|source| Error::io(folder, source))
}

pub(super) fn put(path: &Path, bytes: &[u8]) -> Result<(), Error> {
    fs::write(path, bytes).map_err(|source| Error::io(path, source))
}

pub(super) fn stream(path: &Path, fill: impl FnOnce(&mut BufWriter<File>) -> Result<(), Error>) -> Result<(), Error> {
    let mut out = BufWriter::new(File::create(path).map_err(|source| Error::io(path, source))?);
    fill(&mut out)?;
    out.flush().map_err(|source| Error::io(path, source))
}

#[cfg(test)]
mod tests {
    use std::collections::BTreeMap;

    use super::*;
    use crate::report::example;

    /// Every file below `folder` by its path, with its bytes.
    fn contents(folder: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
        let mut all = BTreeMap::new();
        for entry in fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                all.extend(contents(&path));
            } else {
                let bytes = fs::read(&path).unwrap();
                all.insert(path, bytes);
            }
        }
        all
    }

    #[test]
    fn writing_again_on_one_thread_gives_the_same_bytes_and_leaves_nothing_beside() {
        let home = tempfile::tempdir().unwrap();
        let out = home.path().join("deep/out");
        write(&example::growing(), &out, Save { masks: true, ..Save::default() }).unwrap();
        let first = contents(&out);
        for name in [
            "report.html",
            "summary.json",
            "traces.ndjson",
            "tables/frames.csv",
            "tables/growth.parquet",
            "figures/rose.svg",
            "figures/depth.png",
            "masks/000006.png",
        ] {
            assert!(first.contains_key(&out.join(name)), "{name}");
        }
        fs::write(out.join("figures/stale.png"), "old").unwrap();
        let alone = rayon::ThreadPoolBuilder::new().num_threads(1).build().unwrap();
        alone.install(|| write(&example::growing(), &out, Save { masks: true, ..Save::default() })).unwrap();
        assert_eq!(contents(&out), first);
        assert_eq!(fs::read_dir(home.path().join("deep")).unwrap().count(), 1);
    }

    #[test]
    fn foreign_files_are_left_alone() {
        let home = tempfile::tempdir().unwrap();
        let out = home.path().join("notes");
        fs::create_dir(&out).unwrap();
        fs::write(out.join("thesis.txt"), "mine").unwrap();
        let error = write(&example::still(), &out, Save::default()).unwrap_err();
        assert!(error.to_string().contains("thesis.txt"), "{error}");
        assert_eq!(fs::read_dir(home.path()).unwrap().count(), 1);
        write(&example::still(), &home.path().join("out"), Save::default()).unwrap();
        fs::write(home.path().join("out/mine.txt"), "mine").unwrap();
        assert!(matches!(
            write(&example::still(), &home.path().join("out"), Save::default()),
            Err(Error::Foreign { found, .. }) if found == "mine.txt"
        ));
    }

    #[test]
    fn an_empty_folder_is_used_and_a_file_is_not() {
        let home = tempfile::tempdir().unwrap();
        write(&example::still(), home.path(), Save::default()).unwrap();
        let file = home.path().join("report.html");
        assert!(matches!(write(&example::still(), &file, Save::default()), Err(Error::NotAFolder { .. })));
    }

    #[test]
    fn a_mask_shows_what_had_arrived() {
        let arrivals = ndarray::array![[NEVER, 3], [5, 4]];
        assert_eq!(mask(&arrivals, 4).into_raw(), [0, 255, 0, 255]);
    }
}
