//! A folder → a proposed `run.toml`, commented, with a mark on every line that a person must confirm.
//! What is looked at: names and counts of frame files, headers and tags of the first, up to sixteen frames decoded,
//! headings of text logs. Nothing is taken for granted: a guess is always marked.

use std::collections::BTreeMap;
use std::fmt::Write;
use std::path::{Path, PathBuf};

use super::logs::{CELL_COLUMNS, LOAD_COLUMNS};
use super::propose::{self, ProposedEdges};
use super::stamps::NameTimes;
use super::{decode, guess, order, stamps, tags, textlog};

/// The mark on lines that a person must confirm.
pub const MARK: &str = "CONFIRM";

/// Frames decoded at most to see where growth begins (common practice).
const LOOKED: usize = 16;

/// Extensions of frame files.
const FRAME_TYPES: [&str; 11] = ["png", "tif", "tiff", "jpg", "jpeg", "bmp", "pgm", "ppm", "pbm", "pnm", "pam"];
/// Extensions of text logs.
const LOG_TYPES: [&str; 5] = ["csv", "txt", "tsv", "dat", "log"];

/// A proposed manifest.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Draft {
    /// The text of `run.toml`.
    pub text: String,
    /// What was found, a line each.
    pub found: Vec<String>,
    /// Lines that a person must confirm.
    pub confirm: usize,
}

/// Patterns that match frame files in a folder and directly below it, with their counts, most files first.
#[must_use]
pub fn frame_patterns(folder: &Path) -> Vec<(String, usize)> {
    let mut counts: BTreeMap<String, usize> = BTreeMap::new();
    for file in files(folder) {
        let (place, name) =
            file.rsplit_once('/').map_or((String::new(), file.as_str()), |(place, name)| (format!("{place}/"), name));
        if let Some((_, kind)) = name.rsplit_once('.').filter(|(_, kind)| is_one_of(kind, &FRAME_TYPES)) {
            *counts.entry(format!("{place}*.{kind}")).or_default() += 1;
        }
    }
    let mut patterns: Vec<(String, usize)> = counts.into_iter().collect();
    patterns.sort_by(|a, b| b.1.cmp(&a.1).then_with(|| a.0.cmp(&b.0)));
    patterns
}

/// Proposes a manifest for a folder.
///
/// # Errors
/// [`crate::Error::NoRunFolder`] and [`crate::Error::NothingToDraft`].
pub fn propose(folder: &Path) -> Result<Draft, crate::Error> {
    if !folder.is_dir() {
        return Err(crate::Error::NoRunFolder { folder: folder.to_path_buf() });
    }
    let patterns = frame_patterns(folder);
    let Some((pattern, count)) = patterns.first() else {
        return Err(crate::Error::NothingToDraft { folder: folder.to_path_buf() });
    };
    let frames = Frames::look(folder, pattern);
    let mut page = Page::default();
    page.plain(
        "# Proposed from what the folder holds. Settle each line marked CONFIRM, then type: veerlog check FOLDER",
    );
    page.plain("# Lines that begin with # say what else could be given.");
    page.plain("");
    page.plain("# run = \"…\"                   the folder's name unless given");
    page.plain("# specimen = \"…\"              what was tested; runs on one specimen are not independent");
    write_frames(&mut page, pattern, *count, &frames, times_table(folder).as_deref());
    write_cell(&mut page, &frames, log_of(folder, CELL_COLUMNS, &["current_ma", "voltage_v"]).as_ref());
    write_load(&mut page, log_of(folder, LOAD_COLUMNS, &["force_n", "stress_mpa"]).as_ref());
    for (other, count) in patterns.iter().skip(1) {
        page.found.push(format!("{count} more files match {other}; they were left out"));
    }
    let confirm = page.text.lines().filter(|line| line.contains(&format!("# {MARK}"))).count();
    Ok(Draft { text: page.text, found: page.found, confirm })
}

/// The text as it is written, and what to tell.
#[derive(Default)]
struct Page {
    text: String,
    found: Vec<String>,
}

impl Page {
    fn plain(&mut self, line: &str) {
        self.text.push_str(line);
        self.text.push('\n');
    }

    fn table(&mut self, name: &str) {
        self.plain("");
        self.plain(&format!("[{name}]"));
    }

    fn sure(&mut self, line: &str, why: &str) {
        self.plain(&format!("{line:<42} # {why}"));
    }

    fn ask(&mut self, line: &str, why: &str) {
        self.plain(&format!("{line:<42} # {MARK}: {why}"));
    }

    fn found(&mut self, what: String) {
        self.found.push(what);
    }
}

/// What the frame files tell.
struct Frames {
    names: Vec<String>,
    header: Option<decode::Header>,
    pages: usize,
    scale: Option<(f64, &'static str)>,
    times: Option<NameTimes>,
    pictures: Option<Pictures>,
}

/// What the pictures tell.
struct Pictures {
    edges: ProposedEdges,
    factor: usize,
    darker: bool,
    grown: bool,
    bare: usize,
}

impl Frames {
    fn look(folder: &Path, pattern: &str) -> Self {
        let (place, kind) = pattern.split_once('*').unwrap_or((pattern, ""));
        let matching =
            |file: &String| file.strip_prefix(place).is_some_and(|name| !name.contains('/') && name.ends_with(kind));
        let mut names: Vec<String> = files(folder).into_iter().filter(matching).collect();
        names.sort_by(|a, b| order::natural(a, b));
        let paths: Vec<PathBuf> = names.iter().map(|name| folder.join(name)).collect();
        let pages = if paths.len() == 1 { decode::pages(&paths[0]) } else { 1 };
        let places: Vec<(PathBuf, Option<usize>)> = if pages > 1 {
            (0..pages).map(|page| (paths[0].clone(), Some(page))).collect()
        } else {
            paths.iter().map(|path| (path.clone(), None)).collect()
        };
        Self {
            header: paths.iter().find_map(|path| decode::probe(path, None).ok()),
            scale: paths.first().and_then(|path| tags::scale(path)),
            times: if names.len() > 1 { stamps::read(&names) } else { None },
            pictures: Pictures::look(&places),
            names,
            pages,
        }
    }
}

impl Pictures {
    fn look(places: &[(PathBuf, Option<usize>)]) -> Option<Self> {
        let frame = |(path, page): &(PathBuf, Option<usize>)| {
            decode::decode(path, *page, None).ok().map(|frame| propose::shrunk(&frame.plane))
        };
        let (start, (first, factor)) = places.iter().enumerate().find_map(|(at, place)| Some((at, frame(place)?)))?;
        let (_, (last, _)) = places.iter().enumerate().rev().find_map(|(at, place)| Some((at, frame(place)?)))?;
        let same = |other: &ndarray::Array2<f32>| other.dim() == first.dim();
        let whole = same(&last).then(|| propose::change(&first, &last));
        let shares: Vec<f64> = places[start..]
            .iter()
            .take(LOOKED)
            .map_while(frame)
            .map(|(later, _)| if same(&later) { propose::change(&first, &later).share() } else { 0.0 })
            .collect();
        // Halfway through the run, growth is still nearer to where it began.
        let half = frame(&places[start + (places.len() - start) / 2]).filter(|(half, _)| same(half));
        let grown = whole.is_some_and(|change| change.told());
        let centre = half.and_then(|(half, _)| propose::change(&first, &half).centre).filter(|_| grown);
        Some(Self {
            edges: propose::edges(&first, centre),
            factor,
            darker: !grown || whole.is_none_or(|change| change.darker >= change.brighter),
            grown,
            bare: if places.len() == 1 { 0 } else { propose::bare(&shares).min(places.len() - 1) },
        })
    }
}

fn write_frames(page: &mut Page, pattern: &str, count: usize, frames: &Frames, times: Option<&str>) {
    page.table("frames");
    let size = frames
        .header
        .map_or_else(String::new, |header| format!(", {} × {} px, {} bit", header.width, header.height, header.bits));
    let files = match (frames.names.as_slice(), frames.pages) {
        ([only], 2..) => only.clone(),
        _ => pattern.to_owned(),
    };
    let what = if frames.pages > 1 { format!("{} pages{size}", frames.pages) } else { format!("{count} frames{size}") };
    page.sure(&format!("files = {}", quote(&files)), &what);
    page.found(format!("{what} ({files})"));
    match (times, &frames.times) {
        (Some(table), _) => {
            page.sure(
                &format!("times = {}", quote(table)),
                "a table with the headings file and time_s, or file and time",
            );
            page.found(format!("frame times in {table}"));
        }
        (None, Some(times)) => write_name_times(page, times),
        (None, None) => page.ask("interval_s = 1.0", "seconds from frame to frame; nothing in the folder tells them"),
    }
    match frames.scale {
        Some((um, tag)) => {
            page.ask(&format!("um_per_px = {um:.6}"), &format!("from {tag}; check it against a known length"));
            page.found(format!("scale {um:.4} µm per px in {tag}"));
        }
        None => page.ask("um_per_px = 1.0", "µm of a known length divided by its px; no tag tells it"),
    }
    let pictures = frames.pictures.as_ref();
    let darker = pictures.is_none_or(|pictures| pictures.darker);
    let grown = pictures.is_some_and(|pictures| pictures.grown);
    let word = if darker { "darker" } else { "brighter" };
    let why = if grown {
        "what changed from the first frame to the last became so"
    } else {
        "no change was seen that would tell, so this is a mere default"
    };
    page.ask(
        &format!("filament = \"{word}\""),
        &format!("\"darker\" or \"brighter\" than the electrolyte around; {why}"),
    );
    let bare = pictures.map_or(0, |pictures| pictures.bare);
    page.ask(&format!("bare = {bare}"), "leading frames taken before any growth; 0 = none");
}

fn write_name_times(page: &mut Page, times: &NameTimes) {
    let Some((interval, even)) = times.interval_s() else {
        page.ask("interval_s = 1.0", "seconds from frame to frame; nothing in the folder tells them");
        return;
    };
    let why = if even {
        "from the file names"
    } else {
        "median of the file names' times, which are uneven: better write a table and type times = \"times.csv\""
    };
    page.ask(&format!("interval_s = {interval}"), why);
    if let Some(start) = &times.start {
        page.ask(
            &format!("start = \"{start}\""),
            "date of the first frame, from its name; only to join logs that hold dates",
        );
    }
    page.found(format!("an interval of {interval} s in the file names{}", if even { "" } else { " (uneven)" }));
}

fn write_cell(page: &mut Page, frames: &Frames, log: Option<&FoundLog>) {
    page.table("cell");
    let (width, height) = frames.header.map_or((1024, 768), |header| (header.width, header.height));
    match &frames.pictures {
        Some(pictures) => {
            let told = if pictures.edges.told_apart {
                "growth begins nearer to it"
            } else {
                "which of the two plates is not seen: swap them if need be"
            };
            for (key, edge, which) in [
                ("plating_edge", pictures.edges.plating, told),
                ("far_edge", pictures.edges.far, "the opposite electrode"),
            ] {
                let how = if edge.clear {
                    "a step in brightness"
                } else {
                    "the side of the picture, for want of a clear step; it may lie outside"
                };
                page.ask(
                    &format!("{key} = {}", points(edge.ends, pictures.factor)),
                    &format!("[x, y] in px; {how}; {which}"),
                );
            }
            page.found("both electrode edges proposed from the picture".to_owned());
        }
        None => {
            page.ask(
                &format!("plating_edge = [[0, 0], [0, {}]]", height.saturating_sub(1)),
                "[x, y] in px; no frame could be decoded",
            );
            page.ask(
                &format!("far_edge = [[{0}, 0], [{0}, {1}]]", width.saturating_sub(1), height.saturating_sub(1)),
                "[x, y] in px",
            );
        }
    }
    if let Some(log) = log {
        log.write(page, "current_ma > 0 must plate at the plating edge");
    } else {
        page.plain("# log = \"cell.csv\"            time_s,current_ma,voltage_v[,temperature_c]");
    }
    page.plain("# area_mm2 = 3.2              electrode area; metal = \"Li\"; temperature_c = 25.0; ended = \"short\"");
}

fn write_load(page: &mut Page, log: Option<&FoundLog>) {
    page.table("load");
    let Some(log) = log else {
        page.ask(
            "fixture = \"none\"",
            "no load log was found; give log = \"load.csv\", or force_n or stress_mpa where the load was constant",
        );
        return;
    };
    log.write(page, "force > 0 must press");
    if !log.columns.iter().any(|(name, _)| *name == "direction_deg") {
        page.ask("direction_deg = 90.0", "load axis, degrees anticlockwise from x to the right");
    }
    let stress = log.columns.iter().any(|(name, _)| *name == "stress_mpa");
    let fixture = if stress { "stress" } else { "none" };
    page.ask(&format!("fixture = \"{fixture}\""), "none, stress, uniaxial, stack, cantilever, three-point, four-point-quarter, normal, ring-on-ring, film or bimetal; its dimensions follow");
}

/// A text log whose headings are known.
struct FoundLog {
    file: String,
    /// Our column and the heading in the file.
    columns: Vec<(&'static str, String)>,
}

impl FoundLog {
    fn write(&self, page: &mut Page, sign: &str) {
        let quantities = self.columns.iter().filter(|(name, _)| !matches!(*name, "time_s" | "time")).count();
        page.ask(&format!("log = {}", quote(&self.file)), sign);
        let renamed: Vec<String> = self
            .columns
            .iter()
            .filter(|(name, heading)| *name != heading)
            .map(|(name, heading)| format!("{name} = {}", quote(heading)))
            .collect();
        if !renamed.is_empty() {
            page.ask(&format!("columns = {{ {} }}", renamed.join(", ")), "which heading is what");
        }
        let factors: Vec<String> = self
            .columns
            .iter()
            .filter_map(|(name, heading)| guess::factor_for(name, heading).map(|factor| format!("{name} = {factor:?}")))
            .collect();
        if !factors.is_empty() {
            page.ask(
                &format!("scale = {{ {} }}", factors.join(", ")),
                "from the units in the headings to s, N, MPa, mA, V, °C",
            );
        }
        page.found(format!("{} with {quantities} quantities", self.file));
    }
}

/// The log in the folder that holds a time and one of the `needed` columns; with most columns, first by name.
fn log_of(folder: &Path, columns: &'static [&'static str], needed: &[&str]) -> Option<FoundLog> {
    let mut best: Option<FoundLog> = None;
    for (file, headings) in text_tables(folder) {
        let mut known: Vec<(&'static str, String)> = Vec::new();
        for column in columns {
            let heading = guess::heading_for(column, &headings);
            if let Some(heading) = heading.filter(|heading| !known.iter().any(|(_, taken)| taken == heading)) {
                known.push((column, heading.to_owned()));
            }
        }
        if known.iter().any(|(name, _)| *name == "time_s") {
            known.retain(|(name, _)| *name != "time");
        }
        let has = |names: &[&str]| known.iter().any(|(name, _)| names.contains(name));
        let more = best.as_ref().is_none_or(|best| known.len() > best.columns.len());
        if has(&["time_s", "time"]) && has(needed) && more {
            best = Some(FoundLog { file, columns: known });
        }
    }
    best
}

/// A table that times the frames.
fn times_table(folder: &Path) -> Option<String> {
    let has = |headings: &[String], names: &[&str]| {
        headings.iter().any(|heading| names.contains(&heading.to_lowercase().as_str()))
    };
    text_tables(folder)
        .into_iter()
        .find(|(_, headings)| has(headings, &["file"]) && has(headings, &["time_s", "time"]))
        .map(|(file, _)| file)
}

/// Text files with their headings, in natural order.
fn text_tables(folder: &Path) -> Vec<(String, Vec<String>)> {
    let mut names: Vec<String> = files(folder);
    names.sort_by(|a, b| order::natural(a, b));
    let is_log = |name: &String| name.rsplit_once('.').is_some_and(|(_, kind)| is_one_of(kind, &LOG_TYPES));
    let headings = |name: String| {
        let text = textlog::read_text(&folder.join(&name)).ok()?;
        guess::heading_line(&text).map(|headings| (name, headings))
    };
    names.into_iter().filter(is_log).filter_map(headings).collect()
}

/// Files in a folder and directly below it, as paths from it. Hidden ones and our own output are left out.
fn files(folder: &Path) -> Vec<String> {
    let listed = |place: &Path| -> Vec<(String, PathBuf)> {
        let Ok(entries) = std::fs::read_dir(place) else {
            return Vec::new();
        };
        let named = |entry: std::fs::DirEntry| Some((entry.file_name().into_string().ok()?, entry.path()));
        let mut found: Vec<_> =
            entries.flatten().filter_map(named).filter(|(name, _)| !name.starts_with('.')).collect();
        found.sort();
        found
    };
    let mut found = Vec::new();
    for (name, path) in listed(folder) {
        if path.is_file() {
            found.push(name);
        } else if path.is_dir() && name != "veerlog" {
            let below = listed(&path).into_iter().filter(|(_, path)| path.is_file());
            found.extend(below.map(|(inner, _)| format!("{name}/{inner}")));
        }
    }
    found
}

fn is_one_of(kind: &str, known: &[&str]) -> bool {
    known.contains(&kind.to_lowercase().as_str())
}

/// Text as a TOML string.
fn quote(text: &str) -> String {
    toml::Value::String(text.to_owned()).to_string()
}

/// Ends of an edge as TOML, from px of a shrunk picture to px of the frame.
fn points(ends: [[f64; 2]; 2], factor: usize) -> String {
    #[expect(clippy::cast_precision_loss, reason = "a shrink factor is a small number")]
    let factor = factor as f64;
    let mut text = String::from("[");
    for (at, point) in ends.iter().enumerate() {
        // A shrunk pixel's centre lies in the middle of the pixels it stands for.
        let [x, y] = point.map(|value| (value + 0.5) * factor - 0.5);
        let comma = if at == 0 { "" } else { ", " };
        // Writing to a String cannot fail.
        let _ = write!(text, "{comma}[{x:.1}, {y:.1}]");
    }
    text.push(']');
    text
}

#[cfg(test)]
mod tests {
    use super::super::manifest::Filament;
    use super::super::{FrameSequence, Manifest};
    use super::*;

    /// A small invented run: two dark bands and a bright line that grows from the right one.
    fn folder() -> tempfile::TempDir {
        let folder = tempfile::tempdir().unwrap();
        std::fs::create_dir(folder.path().join("film")).unwrap();
        for frame in 0..8_u32 {
            let picture = image::GrayImage::from_fn(160, 100, |x, y| {
                let noise = u8::try_from((x * 37 + y * 91 + x * y) % 7).unwrap();
                let depth = 12 * frame.saturating_sub(2);
                let line = (50..53).contains(&y) && x < 140 && x + depth >= 140;
                let level = if !(15..140).contains(&x) {
                    60
                } else if line {
                    200
                } else {
                    120
                };
                image::Luma([level + noise])
            });
            picture.save(folder.path().join(format!("film/c_20260305_10{:02}00.png", frame))).unwrap();
        }
        std::fs::write(folder.path().join("rig.txt"), "Prüfstand 2\nZeit (min);Kraft [kN]\n0;0,001\n1;0,002\n")
            .unwrap();
        std::fs::write(folder.path().join("potentiostat.csv"), "time_s,I/mA,Ewe/V\n0,0.1,0.2\n").unwrap();
        folder
    }

    #[test]
    fn a_draft_is_a_manifest_that_reads_the_run() {
        let folder = folder();
        let draft = propose(folder.path()).unwrap();
        let manifest = Manifest::parse(&draft.text, folder.path()).unwrap();
        assert_eq!(manifest.frames.files, "film/*.png");
        assert_eq!(manifest.frames.interval_s, Some(60.0));
        assert_eq!(manifest.frames.start.as_deref(), Some("2026-03-05T10:00:00"));
        assert_eq!(manifest.frames.filament, Filament::Brighter);
        assert_eq!(manifest.frames.bare, 3);
        assert!((manifest.cell.plating_edge[0][0] - 139.5).abs() < 1.5, "{:?}", manifest.cell.plating_edge);
        assert!((manifest.cell.far_edge[0][0] - 14.5).abs() < 1.5, "{:?}", manifest.cell.far_edge);
        assert_eq!(manifest.cell.columns["current_ma"], "I/mA");
        assert_eq!(manifest.load.columns["force_n"], "Kraft [kN]");
        assert_eq!((manifest.load.scale["force_n"], manifest.load.scale["time_s"]), (1000.0, 60.0));
        assert!(draft.confirm >= 8);
        let sequence = FrameSequence::open(folder.path(), &manifest).unwrap();
        assert_eq!(sequence.entries.len(), 8);
    }

    #[test]
    fn an_empty_folder_has_nothing_to_draft() {
        let folder = tempfile::tempdir().unwrap();
        assert!(matches!(propose(folder.path()), Err(crate::Error::NothingToDraft { .. })));
    }

    #[test]
    fn undecodable_frames_still_give_a_manifest() {
        let folder = tempfile::tempdir().unwrap();
        std::fs::write(folder.path().join("a\"b.png"), b"broken").unwrap();
        let draft = propose(folder.path()).unwrap();
        assert!(Manifest::parse(&draft.text, folder.path()).is_ok(), "{}", draft.text);
    }
}
