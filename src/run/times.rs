//! `times.csv`: when each frame was taken. Columns `file` and `time_s` (seconds) or `time` (dates).
//! `file` is the bare file name or its path from the run folder; `stack.tif#3` is page 3, from 0. A frame
//! without a row, a row without a frame and two rows for one frame are errors.

use std::collections::BTreeMap;
use std::path::Path;

use super::clock::parse_stamp;
use super::frames::{FrameEntry, FramesError};
use super::textlog::split;

/// Times of the frames, in their order.
pub(super) struct Times {
    /// Seconds, or Unix seconds when dated.
    pub(super) seconds: Vec<f64>,
    /// Whether the table holds dates.
    pub(super) dated: bool,
}

/// Reads the table text found at `path` for the frames found.
pub(super) fn parse(
    path: &Path,
    text: &str,
    entries: &[FrameEntry],
    offset_s: Option<i32>,
) -> Result<Times, FramesError> {
    let fault = |line: usize, what: String, help: &str| FramesError::Times {
        path: path.to_path_buf(),
        line,
        what,
        help: help.to_owned(),
    };
    let Some(heading) = find_heading(text) else {
        return Err(fault(
            1,
            "no line holds the headings file and time_s, or file and time".to_owned(),
            "write the headings as the first line: file,time_s",
        ));
    };
    let known = names(entries);
    let mut seconds: Vec<Option<f64>> = vec![None; entries.len()];
    let mut fields = Vec::new();
    for (at, line) in text.lines().enumerate().skip(heading.at + 1) {
        split(line, heading.separator, &mut fields);
        if fields.iter().all(|field| field.is_empty()) {
            continue;
        }
        let line = at + 1;
        let file = fields.get(heading.file).copied().unwrap_or("");
        let time = fields.get(heading.time).copied().unwrap_or("");
        let frame = match known.get(&plain_name(file)) {
            Some(Some(frame)) => *frame,
            Some(None) => {
                return Err(fault(
                    line,
                    format!("several frames are called `{file}`"),
                    "write the file's path from the run folder",
                ));
            }
            None => {
                return Err(fault(
                    line,
                    format!("`{file}` is none of the frames found"),
                    "drop the row, correct the name, or widen `files` in run.toml",
                ));
            }
        };
        let value = if heading.dated {
            parse_stamp(time, offset_s)
                .map_err(|error| fault(line, error.to_string(), "write dates as 2026-03-05T10:00:00"))?
        } else {
            let value = time.replace(',', ".").parse::<f64>().ok().filter(|value| value.is_finite());
            value.ok_or_else(|| {
                fault(line, format!("`{time}` is no number of seconds"), "write seconds with a point, say 12.5")
            })?
        };
        if seconds[frame].replace(value).is_some() {
            return Err(fault(line, format!("`{file}` has a second row"), "keep one row a frame"));
        }
    }
    let missing = seconds.iter().position(Option::is_none);
    if let Some(frame) = missing {
        let count = seconds.iter().filter(|time| time.is_none()).count();
        let what = format!("no row for {} ({count} of {} frames have none)", entries[frame].file, entries.len());
        return Err(fault(heading.at + 1, what, "add a row for every frame"));
    }
    Ok(Times { seconds: seconds.into_iter().flatten().collect(), dated: heading.dated })
}

struct Heading {
    at: usize,
    separator: char,
    file: usize,
    time: usize,
    dated: bool,
}

fn find_heading(text: &str) -> Option<Heading> {
    /// Lines in which the headings are looked for (common practice).
    const LINES: usize = 100;
    let mut fields = Vec::new();
    text.lines().take(LINES).enumerate().find_map(|(at, line)| {
        [',', ';', '\t'].into_iter().find_map(|separator| {
            split(line, separator, &mut fields);
            let place = |name: &str| fields.iter().position(|field| field.eq_ignore_ascii_case(name));
            let file = place("file")?;
            let seconds = place("time_s").map(|time| (time, false));
            let (time, dated) = seconds.or_else(|| place("time").map(|time| (time, true)))?;
            Some(Heading { at, separator, file, time, dated })
        })
    })
}

fn plain_name(name: &str) -> String {
    let name = name.replace('\\', "/");
    name.strip_prefix("./").unwrap_or(&name).to_owned()
}

/// Every name a frame may go by; a bare name shared by several frames stands for none.
fn names(entries: &[FrameEntry]) -> BTreeMap<String, Option<usize>> {
    let mut known: BTreeMap<String, Option<usize>> = BTreeMap::new();
    for entry in entries {
        let bare = entry.file.rsplit('/').next().unwrap_or(&entry.file);
        known.entry(bare.to_owned()).and_modify(|frame| *frame = None).or_insert(Some(entry.frame));
    }
    for entry in entries {
        known.insert(entry.file.clone(), Some(entry.frame));
    }
    known
}
