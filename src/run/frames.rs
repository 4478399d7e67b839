//! The frames of a run: found by a glob, put in natural order, timed, decoded one at a time.
//! Method: the manifest's pattern is matched inside the run folder; one multi-page TIFF counts a frame a
//! page. Times come from the interval, from `times.csv`, or from the number in each name. The size of
//! the run's frames is the one most headers of the first nine readable files agree on. Memory: a list of
//! names; no picture is kept.

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use glob::{MatchOptions, Pattern};

use super::clock::{Clock, parse_offset, parse_stamp};
use super::decode::{self, Decoded, FrameFault};
use super::manifest::{Manifest, leaves};
use super::{order, textlog, times};

/// Readable files whose headers settle the size of the run's frames (common practice).
const PROBED: usize = 9;

/// One frame as recorded.
#[derive(Debug, Clone, PartialEq)]
pub struct FrameEntry {
    /// 0-based, over all files.
    pub frame: usize,
    /// Path from the run folder, with `#page` for a page of a multi-page file.
    pub file: String,
    /// Seconds since the first frame.
    pub time_s: f64,
    /// Path on disk.
    pub path: PathBuf,
    /// Page of a multi-page file.
    pub page: Option<usize>,
}

/// The frames of a run, in order.
#[derive(Debug, Clone, PartialEq)]
pub struct FrameSequence {
    /// At least one.
    pub entries: Vec<FrameEntry>,
    /// Width of the run's frames, px.
    pub width: u32,
    /// Height of the run's frames, px.
    pub height: u32,
    /// Bits a sample of the run's frames.
    pub bits: u8,
    /// The clock shared with the logs.
    pub clock: Clock,
    /// What looks odd: a gap in the numbering, pages left out.
    pub warnings: Vec<String>,
}

/// The frames cannot be found, ordered or timed.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
pub enum FramesError {
    /// Reading failed.
    #[error("{path} cannot be read or written")]
    #[diagnostic(code(frames::io), help("see that the file exists and may be read"))]
    Io {
        /// The file or folder.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
    /// Nothing matches the pattern.
    #[error("{folder}: no file matches files = \"{pattern}\"")]
    #[diagnostic(code(frames::none))]
    None {
        /// The run folder.
        folder: PathBuf,
        /// The pattern.
        pattern: String,
        /// What to type.
        #[help]
        help: String,
    },
    /// Not one file holds a readable picture.
    #[error("none of the {count} frames can be used; the first, {file}, {fault}")]
    #[diagnostic(
        code(frames::all_broken),
        help("open one of them in an image viewer; copy the frames again, or correct `files` in run.toml")
    )]
    AllBroken {
        /// Frames found.
        count: usize,
        /// The first of them.
        file: String,
        /// What is wrong with it.
        fault: FrameFault,
    },
    /// A name is not UTF-8.
    #[error("{folder}: the file name `{name}` is not UTF-8, so its place in the order is not known")]
    #[diagnostic(code(frames::name), help("rename the file"))]
    Name {
        /// The folder.
        folder: PathBuf,
        /// The name as far as it can be shown.
        name: String,
    },
    /// Frames cannot be timed by their numbers.
    #[error("{file}: by_number = true, but {what}")]
    #[diagnostic(
        code(frames::number),
        help("name the frames with rising numbers, or type interval_s or times in place of by_number")
    )]
    Number {
        /// The frame.
        file: String,
        /// What is wrong.
        what: String,
    },
    /// Times do not rise.
    #[error("{file}: taken at {time_s} s, not after the frame before it ({before}, {before_s} s)")]
    #[diagnostic(
        code(frames::order),
        help(
            "frames are in the natural order of their names and their times must rise: correct the times, or rename the files. Where summer time ended, write the UTC offset into each stamp"
        )
    )]
    Order {
        /// The frame.
        file: String,
        /// Its time, s.
        time_s: f64,
        /// The frame before.
        before: String,
        /// Its time, s.
        before_s: f64,
    },
    /// A fault in the table of times.
    #[error("{path}, line {line}: {what}")]
    #[diagnostic(code(frames::times))]
    Times {
        /// The file.
        path: PathBuf,
        /// Line, from 1.
        line: usize,
        /// What is wrong.
        what: String,
        /// What to type.
        #[help]
        help: String,
    },
}

impl FrameSequence {
    /// Finds, orders and times the frames of a run, and checks the plating edge against their size.
    ///
    /// # Errors
    /// [`FramesError`] where no frame is found or timed, or none can be read;
    /// [`crate::run::ManifestError`] where `run.toml` does not fit the frames.
    pub fn open(folder: &Path, manifest: &Manifest) -> Result<Self, crate::Error> {
        let mut warnings = Vec::new();
        let found = find(folder, manifest)?;
        let mut entries = entries(folder, found, &mut warnings);
        let clock = time(&mut entries, manifest, &mut warnings)?;
        let (width, height, bits) = common_size(&entries)?;
        manifest.check_frame(width, height)?;
        if manifest.frames.bare >= entries.len().max(2) {
            let what = format!("bare is {}, but there are only {} frames", manifest.frames.bare, entries.len());
            return Err(manifest
                .fault("frames", "bare", what, "type how many leading frames were taken before any growth, or 0")
                .into());
        }
        Ok(Self { entries, width, height, bits, clock, warnings })
    }

    /// Decodes frame `i`, from any thread.
    ///
    /// # Errors
    /// [`FrameFault`] says why the frame is to be set aside. Repeats are found by [`super::repeats`].
    ///
    /// # Panics
    /// Where `i` is no index of `entries`.
    pub fn decode(&self, i: usize) -> Result<Decoded, FrameFault> {
        let entry = &self.entries[i];
        decode::decode(&entry.path, entry.page, Some((self.width, self.height)))
    }

    /// Frame times, s since the first frame.
    #[must_use]
    pub fn times_s(&self) -> Vec<f64> {
        self.entries.iter().map(|entry| entry.time_s).collect()
    }

    /// The error for a run of which no frame could be decoded. `fault`: of the first frame.
    #[must_use]
    pub fn all_broken(&self, fault: FrameFault) -> FramesError {
        let file = self.entries.first().map_or_else(String::new, |entry| entry.file.clone());
        FramesError::AllBroken { count: self.entries.len(), file, fault }
    }
}

/// Files that match the pattern, in natural order, as paths from the run folder.
fn find(folder: &Path, manifest: &Manifest) -> Result<Vec<String>, crate::Error> {
    let pattern = &manifest.frames.files;
    manifest.inside("frames", "files", pattern)?;
    let parts = pattern.split('/').filter(|part| !matches!(*part, "" | "."));
    let parts: Result<Vec<Pattern>, _> = parts.map(Pattern::new).collect();
    let parts = parts.map_err(|error| {
        let what = format!("`{pattern}` is no file pattern: {error}");
        manifest.fault("frames", "files", what, "type one like files = \"frames/*.png\"")
    })?;
    let mut names = Vec::new();
    expand(folder, "", &parts, &mut names)?;
    if names.is_empty() {
        return Err(nothing_found(folder, pattern).into());
    }
    if let Some(name) = names.iter().find(|name| leaves(folder, &folder.join(name))) {
        let what = format!("{name} is a link that leads out of the run folder");
        return Err(manifest.fault("frames", "files", what, "copy the file into the run folder").into());
    }
    names.sort_by(|a, b| order::natural(a, b));
    names.dedup();
    Ok(names)
}

/// Adds the files below `folder/place` that match the parts of a pattern. A name that is not UTF-8 is an error where it could
/// match: a frame must not be lost without a word. `**` does not follow links.
fn expand(folder: &Path, place: &str, parts: &[Pattern], found: &mut Vec<String>) -> Result<(), FramesError> {
    let here = folder.join(place);
    let Some((part, rest)) = parts.split_first() else {
        if !here.is_dir() {
            found.push(place.to_owned());
        }
        return Ok(());
    };
    let below = |name: &str| {
        if place.is_empty() { name.to_owned() } else { format!("{place}/{name}") }
    };
    if Pattern::escape(part.as_str()) == part.as_str() {
        let next = below(part.as_str());
        let there = folder.join(&next).symlink_metadata().is_ok();
        return if there { expand(folder, &next, rest, found) } else { Ok(()) };
    }
    if !here.is_dir() {
        return Ok(());
    }
    let deep = part.as_str() == "**";
    if deep {
        expand(folder, place, rest, found)?;
    }
    let options = MatchOptions { require_literal_leading_dot: true, ..MatchOptions::new() };
    let io = |source| FramesError::Io { path: here.clone(), source };
    for entry in std::fs::read_dir(&here).map_err(io)? {
        let entry = entry.map_err(io)?;
        let name = entry
            .file_name()
            .into_string()
            .map_err(|name| FramesError::Name { folder: here.clone(), name: name.to_string_lossy().into_owned() })?;
        let real_folder = entry.file_type().is_ok_and(|kind| kind.is_dir()) && !name.starts_with('.');
        if deep && real_folder {
            expand(folder, &below(&name), parts, found)?;
        } else if !deep && part.matches_with(&name, options) {
            expand(folder, &below(&name), rest, found)?;
        }
    }
    Ok(())
}

fn nothing_found(folder: &Path, pattern: &str) -> FramesError {
    let there = super::draft::frame_patterns(folder);
    let help = match there.first() {
        Some((other, count)) => format!("{count} files match files = \"{other}\""),
        None => "put the frames (PNG, TIFF, JPEG, BMP or PNM) into the run folder, or correct the pattern".to_owned(),
    };
    FramesError::None { folder: folder.to_path_buf(), pattern: pattern.to_owned(), help }
}

fn entries(folder: &Path, files: Vec<String>, warnings: &mut Vec<String>) -> Vec<FrameEntry> {
    let entry =
        |(frame, file): (usize, String)| FrameEntry { frame, path: folder.join(&file), file, time_s: 0.0, page: None };
    let mut entries: Vec<FrameEntry> = files.into_iter().enumerate().map(entry).collect();
    let pages = entries.first().map_or(1, |first| decode::pages(&first.path));
    if pages > 1 && entries.len() == 1 {
        let stack = entries.remove(0);
        let page = |page| FrameEntry {
            frame: page,
            file: format!("{}#{page}", stack.file),
            page: Some(page),
            ..stack.clone()
        };
        entries = (0..pages).map(page).collect();
    } else if pages > 1 {
        warnings.push(format!("{} has {pages} pages; of each file only the first page is read", entries[0].file));
    }
    entries
}

/// Width, height and bits that most of the first readable headers agree on; the first such in a tie.
fn common_size(entries: &[FrameEntry]) -> Result<(u32, u32, u8), FramesError> {
    let mut counts: BTreeMap<(u32, u32, u8), (usize, usize)> = BTreeMap::new();
    let mut first_fault = None;
    let mut readable = 0;
    for entry in entries {
        match decode::probe(&entry.path, entry.page) {
            Ok(header) if u64::from(header.width) * u64::from(header.height) <= decode::MAX_PIXELS => {
                let count = counts.entry((header.width, header.height, header.bits)).or_insert((0, entry.frame));
                count.0 += 1;
                readable += 1;
            }
            Ok(header) => {
                first_fault.get_or_insert((entry, FrameFault::TooLarge { width: header.width, height: header.height }));
            }
            Err(fault) => {
                first_fault.get_or_insert((entry, fault));
            }
        }
        if readable == PROBED {
            break;
        }
    }
    let best = counts.into_iter().max_by_key(|(_, (count, first))| (*count, std::cmp::Reverse(*first)));
    best.map(|(size, _)| size).ok_or_else(|| {
        let (file, fault) =
            first_fault.map_or((String::new(), FrameFault::Empty), |(entry, fault)| (entry.file.clone(), fault));
        FramesError::AllBroken { count: entries.len(), file, fault }
    })
}

/// Times every frame and settles the clock shared with the logs.
fn time(entries: &mut [FrameEntry], manifest: &Manifest, warnings: &mut Vec<String>) -> Result<Clock, crate::Error> {
    let frames = &manifest.frames;
    let utc_offset_s = frames.utc_offset.as_deref().and_then(parse_offset);
    let start = frames.start.as_deref().map(|text| parse_stamp(text, utc_offset_s)).transpose();
    let start_unix_s = start.map_err(|error| {
        manifest.fault("frames", "start", error.to_string(), "type start = \"2026-03-05T10:00:00\"")
    })?;
    let mut clock = Clock { zero_s: 0.0, start_unix_s, utc_offset_s };
    match (&frames.times, frames.interval_s) {
        (Some(named), _) => {
            let path = manifest.inside("frames", "times", named)?;
            let text = textlog::read_text(&path)?;
            let times = times::parse(&path, &text, entries, utc_offset_s)?;
            let zero = times.seconds.first().copied().unwrap_or(0.0);
            if times.dated {
                clock.start_unix_s = Some(zero);
            } else {
                clock.zero_s = zero;
            }
            entries.iter_mut().zip(times.seconds).for_each(|(entry, time)| entry.time_s = time - zero);
        }
        (None, interval) if frames.by_number => by_number(entries, interval.unwrap_or(1.0))?,
        (None, interval) => {
            let interval = interval.unwrap_or(1.0);
            for entry in entries.iter_mut() {
                entry.time_s = index(entry.frame) * interval;
            }
            warnings.extend(numbering_gaps(entries, interval));
        }
    }
    match entries.windows(2).find(|pair| pair[1].time_s <= pair[0].time_s) {
        None => Ok(clock),
        Some(pair) => Err(FramesError::Order {
            file: pair[1].file.clone(),
            time_s: pair[1].time_s,
            before: pair[0].file.clone(),
            before_s: pair[0].time_s,
        }
        .into()),
    }
}

#[expect(clippy::cast_precision_loss, reason = "frame numbers are far below 2^53")]
fn index(frame: usize) -> f64 {
    frame as f64
}

fn by_number(entries: &mut [FrameEntry], interval_s: f64) -> Result<(), FramesError> {
    let fault = |file: &str, what: String| FramesError::Number { file: file.to_owned(), what };
    let mut first = None;
    for entry in entries {
        let number = match entry.page {
            Some(page) => Some(page as u64),
            None => order::number(&entry.file),
        };
        let number = number.ok_or_else(|| fault(&entry.file, "its name holds no number".to_owned()))?;
        let zero = *first.get_or_insert(number);
        let step = number.checked_sub(zero).and_then(|step| usize::try_from(step).ok());
        let step = step.ok_or_else(|| {
            fault(&entry.file, format!("its number {number} is below that of the first frame, {zero}"))
        })?;
        entry.time_s = index(step) * interval_s;
    }
    Ok(())
}

/// A warning where the numbers in the names jump by more than their usual step.
fn numbering_gaps(entries: &[FrameEntry], interval_s: f64) -> Option<String> {
    let numbers: Option<Vec<u64>> =
        entries.iter().map(|entry| if entry.page.is_some() { None } else { order::number(&entry.file) }).collect();
    let numbers = numbers?;
    let steps: Vec<u64> = numbers.windows(2).map(|pair| pair[1].saturating_sub(pair[0])).collect();
    let mut sorted: Vec<u64> = steps.iter().copied().filter(|step| *step > 0).collect();
    sorted.sort_unstable();
    // The lower median, so that of two steps the smaller counts as usual.
    let usual = *sorted.get(sorted.len().saturating_sub(1) / 2)?;
    let jumps: Vec<usize> = (0..steps.len()).filter(|at| steps[*at] > usual).collect();
    let first = *jumps.first()?;
    let missing: u64 = jumps.iter().map(|at| (steps[*at] - usual) / usual).sum();
    Some(format!(
        "frame numbers jump {} time(s), first from {} to {} ({missing} missing in all): with interval_s = {interval_s} the frames behind a jump \
         are timed as if none were missing; by_number = true times frames by their number",
        jumps.len(),
        entries[first].file,
        entries[first + 1].file
    ))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn run(files: &[&str], frames: &str) -> (tempfile::TempDir, Result<FrameSequence, crate::Error>) {
        let folder = tempfile::tempdir().unwrap();
        std::fs::create_dir(folder.path().join("frames")).unwrap();
        for (at, file) in files.iter().enumerate() {
            let level = u8::try_from(at).unwrap();
            let picture = image::GrayImage::from_fn(8, 6, |x, _| image::Luma([level + u8::try_from(x).unwrap()]));
            picture.save(folder.path().join("frames").join(file)).unwrap();
        }
        let sequence = open(folder.path(), frames);
        (folder, sequence)
    }

    fn open(folder: &Path, frames: &str) -> Result<FrameSequence, crate::Error> {
        let text = format!(
            "[frames]\nfiles = \"frames/*.png\"\num_per_px = 1\nfilament = \"darker\"\nbare = 0\n{frames}\n\
             [cell]\nplating_edge = [[0, 0], [0, 5]]\nfar_edge = [[7, 0], [7, 5]]\n"
        );
        FrameSequence::open(folder, &Manifest::parse(&text, folder)?)
    }

    #[test]
    fn natural_order_and_interval() {
        let (_folder, sequence) = run(&["f10.png", "f2.png", "f1.png"], "interval_s = 5");
        let sequence = sequence.unwrap();
        let files: Vec<_> = sequence.entries.iter().map(|entry| entry.file.as_str()).collect();
        assert_eq!(files, ["frames/f1.png", "frames/f2.png", "frames/f10.png"]);
        assert_eq!(sequence.times_s(), [0.0, 5.0, 10.0]);
        assert_eq!((sequence.width, sequence.height, sequence.bits), (8, 6, 8));
        assert!(
            sequence.warnings[0].contains("from frames/f2.png to frames/f10.png (7 missing"),
            "{:?}",
            sequence.warnings
        );
        assert!(sequence.decode(2).unwrap().plane[[0, 0]].abs() < 1e-6);
        let (_folder, sequence) = run(&["f10.png", "f2.png", "f1.png"], "interval_s = 5\nby_number = true");
        assert_eq!(sequence.unwrap().times_s(), [0.0, 5.0, 45.0]);
    }

    #[test]
    fn a_table_of_times() {
        let (folder, _) = run(&["a.png", "b.png"], "interval_s = 1");
        let timed = |table: &str| {
            std::fs::write(folder.path().join("times.csv"), table).unwrap();
            open(folder.path(), "times = \"times.csv\"")
        };
        let sequence = timed("file,time_s\nb.png,17.5\nframes/a.png,10\n").unwrap();
        assert_eq!((sequence.times_s(), sequence.clock.zero_s), (vec![0.0, 7.5], 10.0));
        let sequence = timed("file;time\na.png;2026-03-05 10:00:00\nb.png;2026-03-05 10:00:30\n").unwrap();
        assert_eq!((sequence.times_s()[1], sequence.clock.start_unix_s), (30.0, Some(1_772_704_800.0)));
        for (table, what) in [
            ("file,time_s\na.png,1\n", "no row for frames/b.png"),
            ("file,time_s\na.png,1\nb.png,2\nc.png,3\n", "line 4: `c.png` is none of the frames"),
            ("file,time_s\na.png,1\na.png,2\nb.png,3\n", "line 3: `a.png` has a second row"),
            ("file,time_s\na.png,x\nb.png,3\n", "line 2: `x` is no number"),
            ("file,time_s\na.png,5\nb.png,3\n", "not after the frame before it"),
            ("a.png,5\n", "no line holds the headings"),
        ] {
            let error = timed(table).unwrap_err().to_string();
            assert!(error.contains(what), "{error}");
        }
    }

    #[test]
    fn broken_frames_do_not_stop_a_run_but_nothing_else_does_not_do() {
        let (folder, _) = run(&["a.png", "b.png", "c.png"], "interval_s = 1");
        std::fs::write(folder.path().join("frames/a.png"), b"broken").unwrap();
        let sequence = open(folder.path(), "interval_s = 1").unwrap();
        assert!(sequence.decode(0).is_err() && sequence.decode(1).is_ok());
        for name in ["b", "c"] {
            std::fs::write(folder.path().join(format!("frames/{name}.png")), b"").unwrap();
        }
        let error = open(folder.path(), "interval_s = 1").unwrap_err();
        assert!(error.to_string().contains("none of the 3 frames can be used"), "{error}");
    }

    #[test]
    fn no_frames_names_what_is_there() {
        let (folder, _) = run(&["a.png"], "interval_s = 1");
        std::fs::rename(folder.path().join("frames"), folder.path().join("film")).unwrap();
        let error = open(folder.path(), "interval_s = 1").unwrap_err();
        let help = miette::Diagnostic::help(&error).unwrap().to_string();
        assert!(help.contains("1 files match files = \"film/*.png\""), "{help}");
    }

    #[test]
    fn one_stack_is_a_frame_a_page() {
        let folder = tempfile::tempdir().unwrap();
        std::fs::create_dir(folder.path().join("frames")).unwrap();
        let file = std::fs::File::create(folder.path().join("frames/stack.png")).unwrap();
        let mut encoder = tiff::encoder::TiffEncoder::new(file).unwrap();
        for page in 0..3_u16 {
            let samples: Vec<u16> = (0..48).map(|at| page * 1000 + at).collect();
            encoder.write_image::<tiff::encoder::colortype::Gray16>(8, 6, &samples).unwrap();
        }
        drop(encoder);
        let sequence = open(folder.path(), "interval_s = 2").unwrap();
        assert_eq!(sequence.entries[2].file, "frames/stack.png#2");
        let frame = sequence.decode(2).unwrap();
        assert_eq!((frame.plane[[0, 1]], frame.bits), (2001.0, 16));
    }

    #[test]
    fn patterns_over_folders() {
        let (folder, _) = run(&["a.png", "b.png"], "interval_s = 1");
        let deep = folder.path().join("frames/day 2");
        std::fs::create_dir_all(deep.join(".thumbs")).unwrap();
        std::fs::copy(folder.path().join("frames/a.png"), deep.join("c[1].png")).unwrap();
        std::fs::copy(folder.path().join("frames/a.png"), deep.join(".thumbs/a.png")).unwrap();
        let found = |pattern: &str| {
            let parts: Vec<Pattern> = pattern.split('/').map(|part| Pattern::new(part).unwrap()).collect();
            let mut found = Vec::new();
            expand(folder.path(), "", &parts, &mut found).unwrap();
            found.sort();
            found
        };
        assert_eq!(found("frames/*.png"), ["frames/a.png", "frames/b.png"]);
        assert_eq!(found("*/day ?/*.png"), ["frames/day 2/c[1].png"]);
        assert_eq!(found("**/*.png"), ["frames/a.png", "frames/b.png", "frames/day 2/c[1].png"]);
        assert_eq!(found("frames/day 2/c[[]1].png"), ["frames/day 2/c[1].png"]);
        assert!(found("nowhere/*.png").is_empty() && found("frames/c.png").is_empty());
        assert_eq!(found("frames/a.png"), ["frames/a.png"]);
    }

    #[cfg(unix)]
    #[test]
    fn links_that_leave_the_folder_or_loop() {
        let (folder, _) = run(&["a.png", "b.png"], "interval_s = 1");
        let outside = tempfile::NamedTempFile::new().unwrap();
        let link = folder.path().join("frames/c.png");
        std::os::unix::fs::symlink(&link, &link).unwrap();
        let sequence = open(folder.path(), "interval_s = 1").unwrap();
        assert!(sequence.entries.len() == 2 || matches!(sequence.decode(2), Err(FrameFault::Unreadable(_))));
        std::fs::remove_file(&link).unwrap();
        std::os::unix::fs::symlink(outside.path(), &link).unwrap();
        let error = open(folder.path(), "interval_s = 1").unwrap_err();
        assert!(error.to_string().contains("leads out of the run folder"), "{error}");
    }
}
