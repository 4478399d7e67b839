//! A comparison of runs as a folder: `comparison.html`, `comparison.json`, tables, figures; swapped in whole, under the same
//! mark as a run's output. Formats what [`crate::compare`] found and computes nothing.

use std::path::{Component, Path, PathBuf};

use rayon::prelude::*;

use super::Error;
use super::figures::Format;
use super::paper::put_drawing;
use super::schema::{EFFECTS, GROUPS, RUNS};
use super::write::{make, put, replace_folder, table};
use crate::compare::{Comparison, RunRecord};
use figures::{FIGURES, Shown};

pub mod figures;
pub mod page;
pub mod rows;
pub mod verdict;

/// All that stands at the top of a comparison's folder, beside the mark.
pub const OURS: [&str; 4] = ["comparison.html", "comparison.json", "tables", "figures"];

/// Width of a figure for print, mm: two columns.
const WIDTH_MM: f64 = 170.0;

/// Writes the whole folder of a comparison to `target`; `records` are those it was made from. Links to the runs' reports are
/// relative to `target`.
///
/// # Errors
/// As [`replace_folder`].
pub fn write(records: &[RunRecord], found: &Comparison, target: &Path) -> Result<(), Error> {
    let mut found = found.clone();
    for row in &mut found.runs {
        let report = records.iter().find(|r| r.run == row.run).and_then(|r| r.report.as_deref());
        row.report = report.and_then(|page| relative(page, target));
    }
    replace_folder(target, &OURS, |folder| fill(Shown { found: &found, records }, folder))
}

fn fill(shown: Shown<'_>, folder: &Path) -> Result<(), Error> {
    let found = shown.found;
    let mut json = serde_json::to_string_pretty(found).map_err(|why| Error::made("comparison.json", why))?;
    json.push('\n');
    put(&folder.join("comparison.json"), json.as_bytes())?;
    make(&folder.join("tables"))?;
    table(folder, &RUNS, &found.runs)?;
    table(folder, &GROUPS, &rows::groups(found))?;
    table(folder, &EFFECTS, &rows::effects(found))?;
    let pictures = folder.join("figures");
    make(&pictures)?;
    FIGURES.par_iter().try_for_each(|figure| {
        let Some(drawing) = (figure.draw)(shown, Format::Wide) else { return Ok(()) };
        put_drawing(&drawing, WIDTH_MM, &pictures, figure.name)
    })?;
    put(&folder.join("comparison.html"), page::render(shown)?.as_bytes())
}

/// The way from a folder to a file, as a link: parts apart by `/`, all but unreserved letters escaped (RFC 3986). `None` where
/// there is none (another drive).
fn relative(file: &Path, folder: &Path) -> Option<String> {
    let [file, folder] = [file, folder].map(|p| plain(&std::path::absolute(p).ok()?));
    let (file, folder) = (file?, folder?);
    let shared = file.iter().zip(&folder).take_while(|(a, b)| a == b).count();
    if shared == 0 {
        return None;
    }
    let up = folder[shared..].iter().map(|_| "..".to_owned());
    let down = file[shared..].iter().map(|part| escaped(part));
    Some(up.chain(down).collect::<Vec<_>>().join("/"))
}

/// The parts of an absolute path, `.` and `..` resolved by name.
fn plain(path: &Path) -> Option<Vec<String>> {
    let mut out = PathBuf::new();
    for part in path.components() {
        match part {
            Component::ParentDir => {
                out.pop();
            }
            Component::CurDir => {}
            other => out.push(other),
        }
    }
    out.components().map(|part| part.as_os_str().to_str().map(str::to_owned)).collect()
}

fn escaped(part: &str) -> String {
    part.bytes()
        .map(|b| match b {
            b'A'..=b'Z' | b'a'..=b'z' | b'0'..=b'9' | b'-' | b'_' | b'.' | b'~' => char::from(b).to_string(),
            other => format!("%{other:02X}"),
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::compare::campaign::Campaign;
    use crate::compare::{Plan, compare};

    fn drawn() -> (Vec<RunRecord>, Comparison) {
        let records = Campaign::default().draw(7, 0).measured;
        let found = compare(&records, &Plan::default()).unwrap();
        (records, found)
    }

    #[test]
    fn links_lead_from_the_folder_to_the_report() {
        let link = |file: &str, folder: &str| relative(Path::new(file), Path::new(folder)).unwrap();
        assert_eq!(link("/a/runs/r 1/veerlog/report.html", "/a/out"), "../runs/r%201/veerlog/report.html");
        assert_eq!(link("/a/b/x#?.html", "/a/b"), "x%23%3F.html");
        assert_eq!(link("/a/b/../c/r.html", "/a/./d"), "../c/r.html");
    }

    #[test]
    fn the_folder_is_whole_and_the_same_on_any_number_of_threads() {
        let (records, found) = drawn();
        let home = tempfile::tempdir().unwrap();
        let read = |name: &str, file: &str| std::fs::read(home.path().join(name).join(file)).unwrap();
        write(&records, &found, &home.path().join("a")).unwrap();
        let alone = rayon::ThreadPoolBuilder::new().num_threads(1).build().unwrap();
        alone
            .install(|| write(&records, &compare(&records, &Plan::default()).unwrap(), &home.path().join("b")))
            .unwrap();
        for file in [
            "comparison.html",
            "comparison.json",
            "tables/runs.csv",
            "tables/runs.parquet",
            "tables/groups.csv",
            "tables/effects.csv",
            "figures/roses.svg",
            "figures/dose-response.png",
            "figures/time-to-short.svg",
        ] {
            assert_eq!(read("a", file), read("b", file), "{file}");
        }
    }

    #[test]
    fn a_foreign_folder_is_refused() {
        let (records, found) = drawn();
        let home = tempfile::tempdir().unwrap();
        std::fs::write(home.path().join("mine.txt"), "mine").unwrap();
        assert!(matches!(write(&records, &found, home.path()), Err(Error::Foreign { .. })));
    }
}
