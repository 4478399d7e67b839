//! `run.toml` → [`Manifest`]: what a person states about a run.
//! Method: serde over TOML with unknown keys refused; every fault names file, line and key, the nearest
//! known key, and what to type. Checks that need the frame size ([`Manifest::check_frame`]) are called
//! once that is known. Limit: a `run.toml` above [`MAX_BYTES`] is refused unread.

use std::ops::Range;
use std::path::{Component, Path, PathBuf};
use std::sync::Arc;

use miette::{NamedSource, SourceSpan};
use serde::{Deserialize, Serialize};
use toml::de::{DeTable, DeValue};

use super::keys::{self, SECTIONS};
use super::load_section::{FixtureName, Hold, LoadSection};
use super::plan_section::PlanSection;

/// Name of the manifest in a run folder.
pub const FILE_NAME: &str = "run.toml";

/// Largest `run.toml` that is read, bytes: a thousand times what a person writes (common practice).
pub const MAX_BYTES: u64 = 1 << 20;

/// A point of a polyline, px (x right, y down).
pub type Polyline = Vec<[f64; 2]>;

/// Whether filaments are darker or brighter than the electrolyte around them.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Filament {
    /// Darker than what is around.
    Darker,
    /// Brighter than what is around.
    Brighter,
}

/// Why the run ended.
#[derive(Debug, Clone, Copy, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Ended {
    /// The cell shorted.
    Short,
    /// A person or a program stopped it.
    Stopped,
    /// The plate broke.
    Broke,
    /// Not known.
    #[default]
    Unknown,
}

/// `[frames]`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct FramesSection {
    /// Glob from the run folder, or one multi-page TIFF.
    pub files: String,
    /// Seconds from frame to frame.
    pub interval_s: Option<f64>,
    /// Table of times, from the run folder.
    pub times: Option<String>,
    /// Whether frames are timed by the number in their name: a gap in the numbering is then a gap in time.
    #[serde(default)]
    pub by_number: bool,
    /// Date and time of the first frame.
    pub start: Option<String>,
    /// UTC offset of stamps that have none.
    pub utc_offset: Option<String>,
    /// Scale, µm per px.
    pub um_per_px: f64,
    /// Darker or brighter.
    pub filament: Filament,
    /// Leading frames taken before any growth.
    pub bare: usize,
}

/// `[cell]`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct CellSection {
    /// Where metal deposits and filaments start, px.
    pub plating_edge: Polyline,
    /// The opposite electrode, px.
    pub far_edge: Polyline,
    /// Cell log, from the run folder.
    pub log: Option<String>,
    /// Seconds to add to the log's clock.
    #[serde(default)]
    pub clock_offset_s: f64,
    /// How long a sample stays in force.
    pub hold_s: Option<Hold>,
    /// UTC offset of stamps that have none.
    pub utc_offset: Option<String>,
    /// The logger's own headings, by our column name.
    #[serde(default)]
    pub columns: std::collections::BTreeMap<String, String>,
    /// Factors to our units, by our column name.
    #[serde(default)]
    pub scale: std::collections::BTreeMap<String, f64>,
    /// Electrode area, mm².
    pub area_mm2: Option<f64>,
    /// Specimen depth seen through, mm.
    pub view_depth_mm: Option<f64>,
    /// Symbol of the plated metal.
    pub metal: Option<String>,
    /// Temperature of the run, °C.
    pub temperature_c: Option<f64>,
    /// Why the run ended.
    #[serde(default)]
    pub ended: Ended,
}

/// `[trace]`.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct TraceSection {
    /// Later frames within which an arrival is decided.
    pub confirm_frames: usize,
}

impl Default for TraceSection {
    fn default() -> Self {
        Self { confirm_frames: 2 }
    }
}

/// `[settings]`.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields, default)]
pub struct SettingsSection {
    /// Seed of every random draw of the analysis.
    pub seed: u64,
}

/// `run.toml`, read and checked.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Manifest {
    /// Name of the run; the folder's name unless given. Never empty after [`Manifest::load`].
    #[serde(default)]
    pub run: String,
    /// What was tested.
    pub specimen: Option<String>,
    /// Free text.
    pub note: Option<String>,
    /// `[frames]`.
    pub frames: FramesSection,
    /// `[cell]`.
    pub cell: CellSection,
    /// `[load]`; absent means no load.
    #[serde(default)]
    pub load: LoadSection,
    /// `[plan]`; absent means that all goes on as it was.
    #[serde(default, skip_serializing_if = "PlanSection::is_empty")]
    pub plan: PlanSection,
    /// `[trace]`.
    #[serde(default)]
    pub trace: TraceSection,
    /// `[settings]`.
    #[serde(default)]
    pub settings: SettingsSection,
    /// Where it was read from.
    #[serde(skip)]
    pub origin: Origin,
}

/// The text a manifest was read from, kept to point at lines later.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Origin {
    /// The run folder.
    pub folder: PathBuf,
    /// The text of `run.toml`.
    pub text: String,
}

/// A fault in `run.toml` or `review.toml`, with the line it is on.
#[derive(Debug, thiserror::Error, miette::Diagnostic)]
#[error("{path}, line {line}: {what}")]
#[diagnostic(code(run::manifest))]
pub struct ManifestError {
    /// The file.
    pub path: String,
    /// Line, from 1.
    pub line: usize,
    /// What is wrong.
    pub what: String,
    /// What to type.
    #[help]
    pub help: String,
    #[source_code]
    text: Arc<NamedSource<String>>,
    #[label("here")]
    span: SourceSpan,
}

impl Manifest {
    /// Reads and checks `run.toml` of a run folder.
    ///
    /// # Errors
    /// [`crate::Error::NoManifest`] where there is none, [`crate::Error::Io`] where it cannot be read,
    /// [`ManifestError`] for everything in it that does not hold.
    pub fn load(folder: &Path) -> Result<Self, crate::Error> {
        let path = folder.join(FILE_NAME);
        let io = |source| crate::Error::Io { path: path.clone(), source };
        if !folder.is_dir() {
            return Err(crate::Error::NoRunFolder { folder: folder.to_path_buf() });
        }
        if !path.is_file() {
            return Err(crate::Error::NoManifest { folder: folder.to_path_buf() });
        }
        let bytes = std::fs::metadata(&path).map_err(io)?.len();
        if bytes > MAX_BYTES {
            return Err(crate::Error::HugeManifest { path, bytes });
        }
        let bytes = std::fs::read(&path).map_err(io)?;
        let text = String::from_utf8(bytes).map_err(|_| crate::Error::NotText { path: path.clone() })?;
        Ok(Self::parse(&text, folder)?)
    }

    /// Checks the text of a `run.toml` that stands (or would stand) in `folder`.
    ///
    /// # Errors
    /// [`ManifestError`] names the first key that does not hold.
    ///
    /// # Examples
    /// ```
    /// use veerlog::run::Manifest;
    /// let text = r#"
    /// [frames]
    /// files = "frames/*.png"
    /// interval_s = 10
    /// um_per_px = 1.25
    /// filament = "darker"
    /// bare = 6
    /// [cell]
    /// plating_edge = [[40, 0], [40, 767]]
    /// far_edge = [[984, 0], [984, 767]]
    /// "#;
    /// let manifest = Manifest::parse(text, "ridge-03".as_ref())?;
    /// assert_eq!(manifest.run, "ridge-03");
    /// let slip = text.replace("um_per_px", "um_per_pixel");
    /// let error = Manifest::parse(&slip, "ridge-03".as_ref()).unwrap_err();
    /// assert!(error.to_string().contains("line 5: unknown key `um_per_pixel`"));
    /// assert!(error.help.contains("um_per_px = 1.25"));
    /// # Ok::<(), veerlog::run::ManifestError>(())
    /// ```
    pub fn parse(text: &str, folder: &Path) -> Result<Self, ManifestError> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let origin = Origin { folder: folder.to_path_buf(), text: text.to_owned() };
        let mut manifest: Self = toml::from_str(text).map_err(|error| origin.explain(&error))?;
        manifest.origin = origin;
        if manifest.run.trim().is_empty() {
            manifest.run = folder_name(folder);
        }
        manifest.check()?;
        Ok(manifest)
    }

    /// The fault of a key, pointing at its line; a key that is absent points at its table.
    #[must_use]
    pub fn fault(&self, section: &str, key: &str, what: impl Into<String>, help: impl Into<String>) -> ManifestError {
        let span = self.origin.span_of(section, key);
        self.origin.error(span, what.into(), help.into())
    }

    /// Checks what needs the frame size: the plating edge must touch the picture.
    /// A far edge outside it is allowed.
    ///
    /// # Errors
    /// [`ManifestError`] where the plating edge lies wholly outside.
    pub fn check_frame(&self, width: u32, height: u32) -> Result<(), ManifestError> {
        let (w, h) = (f64::from(width), f64::from(height));
        let inside = self.cell.plating_edge.windows(2).any(|ends| touches(ends[0], ends[1], w, h));
        if inside {
            return Ok(());
        }
        Err(self.fault(
            "cell",
            "plating_edge",
            format!("the plating edge lies wholly outside the frames, which are {width} × {height} px"),
            format!(
                "give points with x from 0 to {} and y from 0 to {} (x right, y down; the top-left pixel is 0, 0)",
                width.saturating_sub(1),
                height.saturating_sub(1)
            ),
        ))
    }

    /// A path named in `run.toml`, as a path on disk; it must stay inside the run folder.
    ///
    /// # Errors
    /// [`ManifestError`] for an absolute path and for one that climbs out, by `..` or by a link.
    pub fn inside(&self, section: &str, key: &str, named: &str) -> Result<PathBuf, ManifestError> {
        let climbs = || {
            self.fault(
                section,
                key,
                format!("`{named}` leads out of the run folder"),
                "name a file inside the run folder (copy it there if it lies elsewhere)",
            )
        };
        let downward = |part: Component| matches!(part, Component::Normal(_) | Component::CurDir);
        if !Path::new(named).components().all(downward) || named.contains('\0') {
            return Err(climbs());
        }
        let path = self.origin.folder.join(named);
        if leaves(&self.origin.folder, &path) {
            return Err(climbs());
        }
        Ok(path)
    }

    fn check(&self) -> Result<(), ManifestError> {
        self.check_scale()?;
        self.check_times()?;
        self.check_edge("plating_edge", &self.cell.plating_edge)?;
        self.check_edge("far_edge", &self.cell.far_edge)?;
        self.check_positive()?;
        self.check_logs()?;
        self.plan.check(self)?;
        self.check_load()
    }

    fn check_scale(&self) -> Result<(), ManifestError> {
        let scale = self.frames.um_per_px;
        if scale.is_finite() && scale > 0.0 {
            return Ok(());
        }
        Err(self.fault(
            "frames",
            "um_per_px",
            format!("the scale is {scale} µm per px, but must be above 0"),
            "measure a known length in the picture and type its µm divided by its px, say um_per_px = 1.25",
        ))
    }

    fn check_times(&self) -> Result<(), ManifestError> {
        let frames = &self.frames;
        let help = "type interval_s = 10.0 (seconds from frame to frame), or times = \"times.csv\"";
        match (frames.interval_s, &frames.times) {
            (None, None) => {
                return Err(self.fault("frames", "", "nothing says when the frames were taken", help));
            }
            (Some(_), Some(_)) => {
                return Err(self.fault(
                    "frames",
                    "times",
                    "both interval_s and times are given",
                    "keep one of the two",
                ));
            }
            (None, Some(_)) if frames.by_number => {
                return Err(self.fault(
                    "frames",
                    "by_number",
                    "by_number needs interval_s, but times is given",
                    "drop by_number, or type interval_s in place of times",
                ));
            }
            (Some(interval), None) if !(interval.is_finite() && interval > 0.0) => {
                return Err(self.fault(
                    "frames",
                    "interval_s",
                    format!("the interval is {interval} s, but must be above 0"),
                    help,
                ));
            }
            _ => {}
        }
        let offsets =
            [("frames", &frames.utc_offset), ("cell", &self.cell.utc_offset), ("load", &self.load.utc_offset)];
        for (section, offset) in offsets {
            let parsed = offset.as_deref().map(super::clock::parse_offset);
            if let (Some(offset), Some(None)) = (offset, parsed) {
                return Err(self.fault(
                    section,
                    "utc_offset",
                    format!("`{offset}` is no UTC offset"),
                    "type hours and minutes with their sign, say utc_offset = \"+01:00\"",
                ));
            }
        }
        Ok(())
    }

    fn check_edge(&self, key: &str, edge: &[[f64; 2]]) -> Result<(), ManifestError> {
        let what = if edge.len() < 2 {
            format!("{key} has {} point(s), but a line needs two", edge.len())
        } else if edge.iter().flatten().any(|value| !value.is_finite()) {
            format!("{key} holds a number that is not finite")
        } else if edge.windows(2).all(|ends| distance(ends[0], ends[1]) <= 0.0) {
            format!("all points of {key} are the same")
        } else {
            return Ok(());
        };
        Err(self.fault(
            "cell",
            key,
            what,
            format!("type at least two points as [x, y] in px, say {key} = [[40, 0], [40, 767]]"),
        ))
    }

    fn check_positive(&self) -> Result<(), ManifestError> {
        let cell = [("area_mm2", self.cell.area_mm2), ("view_depth_mm", self.cell.view_depth_mm)];
        let load: Vec<_> = self.load.dimensions().into_iter().map(|given| (given.name, given.value)).collect();
        let holds = [("cell", self.cell.hold_s), ("load", self.load.hold_s)];
        for (section, hold) in holds {
            if let Some(Hold::Seconds(hold)) = hold
                && !(hold.is_finite() && hold > 0.0)
            {
                let help = "type seconds, say hold_s = 60.0, or hold_s = \"until-next\"";
                return Err(self.fault(section, "hold_s", format!("hold_s is {hold}, but must be above 0"), help));
            }
        }
        for (key, value) in cell.into_iter().filter_map(|(key, value)| Some((key, value?))) {
            self.positive("cell", key, value)?;
        }
        for (key, value) in load {
            match key {
                "film_stress_mpa" | "radius_m" | "expansion_difference_per_k" | "temperature_change_k" => {
                    self.finite("load", key, value)?
                }
                "from_midspan_mm" | "below_face_mm" | "poisson" => self.not_negative("load", key, value)?,
                _ => self.positive("load", key, value)?,
            }
        }
        for (key, value) in self.load.uncertainties() {
            self.not_negative("load", key, value)?;
        }
        if let Some(orphan) = self.load.orphan_uncertainties().first() {
            let name = orphan.trim_start_matches("u_");
            return Err(self.fault(
                "load",
                orphan,
                format!("{orphan} is given, but {name} is not"),
                format!("type {name} too, or drop {orphan}"),
            ));
        }
        let plain = [
            ("cell", "clock_offset_s", self.cell.clock_offset_s),
            ("load", "clock_offset_s", self.load.clock_offset_s),
            ("load", "zero_deg", self.load.zero_deg),
            ("load", "direction_deg", self.load.direction_deg.unwrap_or(0.0)),
            ("load", "force_n", self.load.force_n.unwrap_or(0.0)),
            ("load", "stress_mpa", self.load.stress_mpa.unwrap_or(0.0)),
            ("cell", "temperature_c", self.cell.temperature_c.unwrap_or(0.0)),
        ];
        plain.into_iter().try_for_each(|(section, key, value)| self.finite(section, key, value))
    }

    fn finite(&self, section: &str, key: &str, value: f64) -> Result<(), ManifestError> {
        if value.is_finite() {
            return Ok(());
        }
        Err(self.fault(section, key, format!("{key} is {value}, but must be a finite number"), "type a number"))
    }

    fn not_negative(&self, section: &str, key: &str, value: f64) -> Result<(), ManifestError> {
        self.finite(section, key, value)?;
        if value >= 0.0 {
            return Ok(());
        }
        Err(self.fault(
            section,
            key,
            format!("{key} is {value}, but must not be negative"),
            "type its size without a sign",
        ))
    }

    fn positive(&self, section: &str, key: &str, value: f64) -> Result<(), ManifestError> {
        self.not_negative(section, key, value)?;
        if value > 0.0 {
            return Ok(());
        }
        Err(self.fault(
            section,
            key,
            format!("{key} is 0, but must be above 0"),
            "type its size in the unit of the key, or drop the line",
        ))
    }

    fn check_logs(&self) -> Result<(), ManifestError> {
        let sections = [
            ("load", &self.load.columns, &self.load.scale, super::logs::LOAD_COLUMNS),
            ("cell", &self.cell.columns, &self.cell.scale, super::logs::CELL_COLUMNS),
        ];
        for (section, columns, scale, known) in sections {
            let named = columns.keys().map(|name| ("columns", name)).chain(scale.keys().map(|name| ("scale", name)));
            for (key, name) in named {
                if !known.contains(&name.as_str()) {
                    return Err(self.fault(
                        section,
                        key,
                        format!("`{name}` is no column of the {section} log"),
                        format!("its columns are {}", known.join(", ")),
                    ));
                }
            }
            if let Some((name, factor)) = scale.iter().find(|(_, factor)| !factor.is_finite() || factor.abs() <= 0.0) {
                return Err(self.fault(
                    section,
                    "scale",
                    format!("the scale of {name} is {factor}"),
                    "type the factor from the logger's unit to ours, say 1000.0 for kN to N; negative where the logger signs the other way",
                ));
            }
            if scale.get("time_s").is_some_and(|factor| *factor < 0.0) {
                return Err(self.fault(
                    section,
                    "scale",
                    "the scale of time_s is negative",
                    "type 1.0 for seconds, 60.0 for minutes",
                ));
            }
        }
        Ok(())
    }

    fn check_load(&self) -> Result<(), ManifestError> {
        let load = &self.load;
        let sources = [load.log.is_some(), load.force_n.is_some(), load.stress_mpa.is_some()];
        if sources.iter().filter(|given| **given).count() > 1 {
            return Err(self.fault(
                "load",
                "log",
                "more than one of log, force_n and stress_mpa is given",
                "keep the one that was measured",
            ));
        }
        let loadless = matches!(load.fixture, FixtureName::None | FixtureName::Film | FixtureName::Bimetal);
        if !loadless && !sources.contains(&true) {
            return Err(self.fault(
                "load",
                "fixture",
                "a fixture is named, but no load is given",
                "type log = \"load.csv\", or a constant: force_n = 1.5 or stress_mpa = 150.0; or fixture = \"none\"",
            ));
        }
        Ok(())
    }
}

impl ManifestError {
    /// The fault at some bytes of the text of a file.
    pub(super) fn at(path: &Path, text: &str, span: Range<usize>, what: String, help: String) -> Self {
        let path = path.display().to_string();
        let start = span.start.min(text.len());
        let line = text.as_bytes()[..start].iter().filter(|byte| **byte == b'\n').count() + 1;
        Self {
            text: Arc::new(NamedSource::new(&path, text.to_owned()).with_language("toml")),
            span: SourceSpan::from(start..span.end.clamp(start, text.len())),
            path,
            line,
            what,
            help,
        }
    }
}

impl Origin {
    fn error(&self, span: Range<usize>, what: String, help: String) -> ManifestError {
        ManifestError::at(&self.folder.join(FILE_NAME), &self.text, span, what, help)
    }

    /// What the TOML reader found, in words that say what to type.
    fn explain(&self, error: &toml::de::Error) -> ManifestError {
        let span = error.span().unwrap_or(0..0);
        let section = self.section_at(span.start);
        let message = error.message().lines().next().unwrap_or("not TOML").to_owned();
        if let Some(typed) = quoted_after(&message, "unknown field ") {
            return self.unknown(span, section, &typed);
        }
        if let Some(name) = quoted_after(&message, "missing field ") {
            let table = if SECTIONS.contains(&name.as_str()) { "" } else { section };
            let help = keys::find(table, &name).map_or_else(
                || format!("add the table [{name}]; `veerlog draft FOLDER` writes a whole run.toml to start from"),
                |key| format!("add the line {} = {}", key.name, key.example),
            );
            let place = if section.is_empty() { String::new() } else { format!(" in [{section}]") };
            return self.error(span, format!("`{name}` is missing{place}"), help);
        }
        let key = self.key_at(span.start);
        let help = keys::find(section, &key).map_or_else(
            || "each line is `key = value`; text stands in quotes, points are [x, y]".to_owned(),
            |key| format!("type it like {} = {}", key.name, key.example),
        );
        self.error(span, message, help)
    }

    fn unknown(&self, span: Range<usize>, section: &str, typed: &str) -> ManifestError {
        let place = if section.is_empty() { "at the top".to_owned() } else { format!("in [{section}]") };
        let help = keys::nearest(section, typed).map_or_else(
            || format!("drop the line; known keys {place}: {}", known(section)),
            |key| {
                let table = if key.section == section { String::new() } else { format!(" in [{}]", key.section) };
                format!("the nearest known key is `{}`{table}: type {} = {}", key.name, key.name, key.example)
            },
        );
        self.error(span, format!("unknown key `{typed}` {place}"), help)
    }

    /// The table that the byte at `at` stands in, one of [`SECTIONS`] or the top level.
    fn section_at(&self, at: usize) -> &'static str {
        let before = self.text.get(..at).unwrap_or(&self.text);
        let line_end = self.text.get(at..).and_then(|rest| rest.find('\n')).map_or(self.text.len(), |end| at + end);
        let upto = self.text.get(..line_end).unwrap_or(before);
        upto.lines()
            .rev()
            .find_map(|line| line.trim().strip_prefix('[')?.split(']').next().map(str::trim))
            .and_then(|name| SECTIONS.into_iter().find(|section| *section == name))
            .unwrap_or("")
    }

    /// The key on the line of the byte at `at`.
    fn key_at(&self, at: usize) -> String {
        let start = self.text.get(..at).and_then(|before| before.rfind('\n')).map_or(0, |end| end + 1);
        let line = self.text.get(start..).unwrap_or("").lines().next().unwrap_or("");
        line.split('=').next().unwrap_or("").trim().to_owned()
    }

    /// Bytes of a key, else of its table's heading, else of the start.
    fn span_of(&self, section: &str, key: &str) -> Range<usize> {
        let Ok(table) = DeTable::parse(&self.text) else {
            return 0..0;
        };
        let top = table.get_ref();
        if section.is_empty() {
            return key_span(top, key).unwrap_or(0..0);
        }
        let Some((heading, value)) = top.get_key_value(section) else {
            return 0..0;
        };
        let inner = match value.get_ref() {
            DeValue::Table(inner) => key_span(inner, key),
            _ => None,
        };
        inner.unwrap_or_else(|| heading.span())
    }
}

fn key_span(table: &DeTable<'_>, key: &str) -> Option<Range<usize>> {
    table.get_key_value(key).map(|(name, value)| name.span().start..value.span().end)
}

fn known(section: &str) -> String {
    let names: Vec<_> = super::KEYS.iter().filter(|key| key.section == section).map(|key| key.name).collect();
    names.join(", ")
}

/// The name in backquotes after a lead: "unknown field `x`, expected …" → `x`.
pub(super) fn quoted_after(message: &str, lead: &str) -> Option<String> {
    let rest = message.strip_prefix(lead)?.strip_prefix('`')?;
    rest.split_once('`').map(|(name, _)| name.to_owned())
}

fn folder_name(folder: &Path) -> String {
    let whole = std::fs::canonicalize(folder).unwrap_or_else(|_| folder.to_path_buf());
    whole.file_name().map_or_else(|| "run".to_owned(), |name| name.to_string_lossy().into_owned())
}

/// Whether a path that exists resolves, through links, to a place outside the folder.
pub(super) fn leaves(folder: &Path, path: &Path) -> bool {
    match (std::fs::canonicalize(folder), std::fs::canonicalize(path)) {
        (Ok(folder), Ok(path)) => !path.starts_with(folder),
        _ => false,
    }
}

fn distance(a: [f64; 2], b: [f64; 2]) -> f64 {
    libm::hypot(a[0] - b[0], a[1] - b[1])
}

/// Whether a segment meets the picture.
fn touches(a: [f64; 2], b: [f64; 2], width: f64, height: f64) -> bool {
    clip(a, b, width, height).is_some()
}

/// The part of a segment inside the picture, as shares of its length; none where it lies outside. Pixels reach half a
/// pixel beyond their centres (Liang & Barsky 1984, ACM Trans. Graphics 3, 1–22).
pub(crate) fn clip(a: [f64; 2], b: [f64; 2], width: f64, height: f64) -> Option<(f64, f64)> {
    let (mut enter, mut leave) = (0.0_f64, 1.0_f64);
    for (axis, size) in [width, height].into_iter().enumerate() {
        let (from, step) = (a[axis], b[axis] - a[axis]);
        for (toward, room) in [(-step, from + 0.5), (step, size - 0.5 - from)] {
            if toward.abs() <= 0.0 {
                if room < 0.0 {
                    return None;
                }
            } else if toward < 0.0 {
                enter = enter.max(room / toward);
            } else {
                leave = leave.min(room / toward);
            }
        }
    }
    (enter <= leave).then_some((enter, leave))
}

#[cfg(test)]
mod tests {
    use super::super::{KEYS, keys};
    use super::*;

    const PLAIN: &str = r#"
[frames]
files = "frames/*.png"
interval_s = 10
um_per_px = 1.25
filament = "darker"
bare = 6
[cell]
plating_edge = [[40, 0], [40, 767]]
far_edge = [[984, 0], [984, 767]]
[load]
force_n = 1.5
fixture = "cantilever"
width_mm = 4.0
"#;

    fn fault(text: &str) -> ManifestError {
        Manifest::parse(text, Path::new("ridge")).unwrap_err()
    }

    #[test]
    fn every_listed_key_parses_with_its_example() {
        for key in KEYS {
            let line = format!("{} = {}\n", key.name, key.example);
            let table: toml::Table = PLAIN.parse().unwrap();
            let mut value = toml::Value::Table(table);
            let example: toml::Table = line.parse().unwrap();
            let target = value.as_table_mut().unwrap();
            let target = if key.section.is_empty() {
                target
            } else {
                let inner = target.entry(key.section).or_insert_with(|| toml::Value::Table(toml::Table::new()));
                inner.as_table_mut().unwrap()
            };
            target.extend(example);
            let text = toml::to_string(&value).unwrap();
            assert!(toml::from_str::<Manifest>(&text).is_ok(), "{key:?}");
        }
    }

    #[test]
    fn every_key_of_the_types_is_listed() {
        let manifest = Manifest::parse(PLAIN, Path::new("ridge")).unwrap();
        let value = toml::Value::try_from(&manifest.load).unwrap();
        for name in value.as_table().unwrap().keys() {
            assert!(keys::find("load", name).is_some(), "{name}");
        }
    }

    #[test]
    fn an_unknown_key_names_itself_its_line_and_the_nearest() {
        let error = fault(&PLAIN.replace("interval_s", "intervall"));
        assert_eq!(error.line, 4);
        assert!(error.to_string().contains("unknown key `intervall` in [frames]"), "{error}");
        assert!(error.help.contains("interval_s = 10.0"), "{}", error.help);
        let error = fault(&PLAIN.replace("width_mm", "widht_mm"));
        assert!(error.help.contains("`width_mm`"), "{}", error.help);
        let error = fault(&format!("zzqq = 1\n{PLAIN}"));
        assert!(error.help.contains("known keys at the top: run, specimen, note"), "{}", error.help);
    }

    #[test]
    fn a_wrong_type_and_a_missing_key_say_what_to_type() {
        let error = fault(&PLAIN.replace("um_per_px = 1.25", "um_per_px = \"1.25\""));
        assert_eq!(error.line, 5);
        assert!(error.help.contains("um_per_px = 1.25"), "{}", error.help);
        let error = fault(&PLAIN.replace("filament = \"darker\"\n", ""));
        assert!(error.what.contains("`filament` is missing in [frames]"), "{}", error.what);
        assert!(error.help.contains("filament = \"darker\""), "{}", error.help);
        assert!(fault("x").what.len() > 3);
    }

    #[test]
    fn scale_times_and_edges_are_checked() {
        for bad in ["0", "-1.25", "nan", "inf"] {
            let error = fault(&PLAIN.replace("um_per_px = 1.25", &format!("um_per_px = {bad}")));
            assert_eq!(error.line, 5, "{bad}");
        }
        assert!(fault(&PLAIN.replace("interval_s = 10\n", "")).what.contains("when the frames were taken"));
        assert!(fault(&PLAIN.replace("[[40, 0], [40, 767]]", "[[40, 0]]")).what.contains("a line needs two"));
        assert!(fault(&PLAIN.replace("[[40, 0], [40, 767]]", "[[40, 0], [40, 0]]")).what.contains("are the same"));
    }

    #[test]
    fn the_plating_edge_must_meet_the_picture() {
        let manifest = Manifest::parse(PLAIN, Path::new("ridge")).unwrap();
        assert!(manifest.check_frame(1024, 768).is_ok());
        let error = manifest.check_frame(32, 32).unwrap_err();
        assert_eq!(error.line, 9);
        // A line that crosses the picture with both ends outside meets it.
        assert!(touches([-5.0, 4.0], [50.0, 4.0], 10.0, 10.0));
        assert!(!touches([-5.0, 11.0], [50.0, 11.0], 10.0, 10.0));
        assert!(!touches([-5.0, 8.0], [2.0, -9.0], 10.0, 10.0));
    }

    #[test]
    fn paths_stay_inside_the_run_folder() {
        let manifest = Manifest::parse(PLAIN, Path::new("ridge")).unwrap();
        for bad in ["../load.csv", "/etc/hosts", "logs/../../x.csv"] {
            assert!(manifest.inside("load", "log", bad).is_err(), "{bad}");
        }
        assert!(manifest.inside("load", "log", "logs/load.csv").is_ok());
    }

    proptest::proptest! {
        #[test]
        fn a_damaged_manifest_never_panics(at in 0_usize..300, length in 0_usize..30, put in "[\\PC\n]{0,12}") {
            let letters: Vec<char> = PLAIN.chars().collect();
            let (from, to) = (at.min(letters.len()), (at + length).min(letters.len()));
            let text: String = letters[..from].iter().copied().chain(put.chars()).chain(letters[to..].iter().copied()).collect();
            match Manifest::parse(&text, Path::new("ridge")) {
                Ok(manifest) => proptest::prop_assert!(manifest.frames.um_per_px > 0.0),
                Err(error) => {
                    proptest::prop_assert!(error.line >= 1 && error.line <= text.lines().count() + 1);
                    let shown = format!("{:?}", miette::Report::new(error));
                    proptest::prop_assert!(shown.contains("run.toml"));
                }
            }
        }
    }
}
