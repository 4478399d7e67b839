//! What was true (`RUN/truth/`) and what was reported (`RUN/veerlog/`), read into plain records.
//! Tables are read by column name, so columns may be added; a missing one is an error that names it.

use std::fs;
use std::path::{Path, PathBuf};

use polars::prelude::{CsvParseOptions, CsvReadOptions, DataFrame, DataType, NullValues, SerReader};
use serde::Deserialize;
use serde::de::DeserializeOwned;

use super::super::SynthError;
use super::super::truth::{FrameTruth, PathTruth, ShortTruth};

/// Truth of a run.
#[derive(Debug, Clone, PartialEq)]
pub struct Recorded {
    /// A row a frame.
    pub frames: Vec<FrameTruth>,
    /// All paths.
    pub paths: Vec<PathTruth>,
    /// The short.
    pub short: ShortTruth,
    /// µm per px.
    pub um_per_px: f64,
}

/// Output of a run.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Reported {
    /// `tables/frames.csv`.
    pub frames: Vec<ReportedFrame>,
    /// `tables/growth.csv`.
    pub growth: Vec<ReportedPiece>,
    /// `tables/filaments.csv`: the roots' names.
    pub roots: Vec<String>,
    /// `traces.ndjson`: points of each path, [x px, y px, time s, width px].
    pub paths: Vec<Vec<[f64; 4]>>,
    /// Free ends of the last frame, px, from `tables/paths.csv`.
    pub tips: Vec<[f64; 2]>,
    /// `tables/forecasts.csv`.
    pub forecasts: Vec<ReportedForecast>,
}

/// What is scored of a row of `frames.csv`.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct ReportedFrame {
    /// Frame number.
    pub frame: usize,
    /// Whether it was used.
    pub usable: bool,
    /// Drift, px.
    pub drift: Option<[f64; 2]>,
    /// Depth, µm.
    pub depth_um: Option<f64>,
    /// Its standard uncertainty.
    pub u_depth_um: Option<f64>,
    /// Length, µm.
    pub length_um: Option<f64>,
    /// Filaments rooted on the plating edge.
    pub filaments: usize,
    /// Filaments rooted elsewhere.
    pub unrooted: usize,
    /// Growth alignment.
    pub growth_alignment: Option<f64>,
}

/// What is scored of a row of `growth.csv`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ReportedPiece {
    /// Frame number.
    pub frame: usize,
    /// Its middle, px.
    pub place: [f64; 2],
    /// Its direction, degrees.
    pub angle_deg: f64,
    /// Standard uncertainty of that.
    pub u_angle_deg: Option<f64>,
}

/// What is scored of a row of `forecasts.csv`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ReportedForecast {
    /// Frame that issued it.
    pub frame: usize,
    /// When, s.
    pub issued_at_s: f64,
    /// p10, p50, p90, s.
    pub p10_p50_p90: Option<[f64; 3]>,
}

impl Recorded {
    /// Reads `run/truth`.
    /// # Errors
    /// [`SynthError::Io`] or [`SynthError::Unscorable`] naming the file.
    pub fn read(run: &Path) -> Result<Self, SynthError> {
        let folder = run.join("truth");
        must_exist(&folder, "there is no truth here: only runs of `veerlog synth` can be scored")?;
        let table = Table::read(&folder.join("frames.csv"))?;
        let about: serde_json::Value = json(&folder.join("truth.json"))?;
        let scale = about.pointer("/scenario/um_per_px").and_then(serde_json::Value::as_f64);
        let um_per_px = scale.ok_or_else(|| unscorable(&folder.join("truth.json"), "it has no scenario.um_per_px"))?;
        Ok(Self {
            frames: truth_frames(&table)?,
            paths: ndjson(&folder.join("paths.ndjson"))?,
            short: json(&folder.join("short.json"))?,
            um_per_px,
        })
    }

    /// First arrival of any metal, s; infinite where nothing grew.
    #[must_use]
    pub fn first_s(&self) -> f64 {
        self.paths.iter().filter_map(|p| p.points.first()).map(|p| p[2]).fold(f64::INFINITY, f64::min)
    }
}

fn truth_frames(table: &Table) -> Result<Vec<FrameTruth>, SynthError> {
    let [frame, time, x, y, depth, fraction, front, tips, length, alignment, usable] = table.columns([
        "frame",
        "time_s",
        "drift_x_px",
        "drift_y_px",
        "depth_um",
        "depth_fraction",
        "front_depth_um",
        "tips",
        "length_um",
        "growth_alignment",
        "usable",
    ])?;
    let number = |v: Option<f64>| v.unwrap_or(0.0);
    Ok((0..table.rows())
        .map(|i| FrameTruth {
            frame: number(frame[i]) as usize,
            time_s: number(time[i]),
            drift_x_px: x[i],
            drift_y_px: y[i],
            depth_um: number(depth[i]),
            depth_fraction: number(fraction[i]),
            front_depth_um: number(front[i]),
            tips: number(tips[i]) as usize,
            length_um: number(length[i]),
            growth_alignment: alignment[i],
            usable: number(usable[i]) > 0.5,
        })
        .collect())
}

impl Reported {
    /// Reads an output folder.
    /// # Errors
    /// [`SynthError::Io`] or [`SynthError::Unscorable`] naming the file.
    pub fn read(folder: &Path) -> Result<Self, SynthError> {
        must_exist(folder, "there is no output here yet: run `veerlog report` on the run first")?;
        let tables = folder.join("tables");
        let paths: Vec<TracedPath> = ndjson(&folder.join("traces.ndjson"))?;
        Ok(Self {
            frames: frames(&Table::read(&tables.join("frames.csv"))?)?,
            growth: growth(&Table::read(&tables.join("growth.csv"))?)?,
            roots: Table::read(&tables.join("filaments.csv"))?.text("root")?,
            paths: paths.into_iter().map(|p| p.points).collect(),
            tips: tips(&Table::read(&tables.join("paths.csv"))?)?,
            forecasts: forecasts(&Table::read(&tables.join("forecasts.csv"))?)?,
        })
    }
}

#[derive(Deserialize)]
struct TracedPath {
    points: Vec<[f64; 4]>,
}

fn frames(table: &Table) -> Result<Vec<ReportedFrame>, SynthError> {
    let [frame, usable, x, y, depth, length, filaments, unrooted, alignment] = table.columns([
        "frame",
        "usable",
        "drift_x_px",
        "drift_y_px",
        "depth_um",
        "length_um",
        "filaments",
        "unrooted",
        "growth_alignment",
    ])?;
    let u_depth = table.optional("u_depth_um")?;
    let count = |v: Option<f64>| v.map_or(0, |v| v as usize);
    Ok((0..table.rows())
        .map(|i| ReportedFrame {
            frame: count(frame[i]),
            usable: usable[i].is_some_and(|v| v > 0.5),
            drift: x[i].zip(y[i]).map(|(x, y)| [x, y]),
            depth_um: depth[i],
            u_depth_um: u_depth[i],
            length_um: length[i],
            filaments: count(filaments[i]),
            unrooted: count(unrooted[i]),
            growth_alignment: alignment[i],
        })
        .collect())
}

fn growth(table: &Table) -> Result<Vec<ReportedPiece>, SynthError> {
    let [frame, x, y, angle] = table.columns(["frame", "x_px", "y_px", "angle_deg"])?;
    let u_angle = table.optional("u_angle_deg")?;
    Ok((0..table.rows())
        .filter_map(|i| {
            let place = [x[i]?, y[i]?];
            Some(ReportedPiece { frame: frame[i]? as usize, place, angle_deg: angle[i]?, u_angle_deg: u_angle[i] })
        })
        .collect())
}

/// Free ends of the last frame in `paths.csv`.
fn tips(table: &Table) -> Result<Vec<[f64; 2]>, SynthError> {
    let [frame, x, y] = table.columns(["frame", "x1_px", "y1_px"])?;
    let ends = table.text("ends_in")?;
    let last = frame.iter().flatten().fold(0.0, |a: f64, b| a.max(*b));
    let of_last = |i: &usize| frame[*i].is_some_and(|f| f >= last) && ends[*i] == "tip";
    Ok((0..table.rows()).filter(of_last).filter_map(|i| Some([x[i]?, y[i]?])).collect())
}

fn forecasts(table: &Table) -> Result<Vec<ReportedForecast>, SynthError> {
    let [frame, issued, p10, p50, p90] = table.columns(["frame", "issued_at_s", "p10_s", "p50_s", "p90_s"])?;
    Ok((0..table.rows())
        .filter_map(|i| {
            let quantiles = p10[i].zip(p50[i]).zip(p90[i]).map(|((a, b), c)| [a, b, c]);
            Some(ReportedForecast { frame: frame[i]? as usize, issued_at_s: issued[i]?, p10_p50_p90: quantiles })
        })
        .collect())
}

/// A CSV table read by column name.
struct Table {
    path: PathBuf,
    data: DataFrame,
}

impl Table {
    fn read(path: &Path) -> Result<Self, SynthError> {
        if let Err(source) = fs::metadata(path) {
            return Err(SynthError::io(path, source));
        }
        let parse = CsvParseOptions::default().with_null_values(Some(NullValues::AllColumnsSingle("".into())));
        let options = CsvReadOptions::default().with_has_header(true).with_infer_schema_length(Some(0));
        let reader = options.with_parse_options(parse).try_into_reader_with_file_path(Some(path.to_owned()));
        let data = reader.and_then(SerReader::finish).map_err(|e| unscorable(path, &e.to_string()))?;
        Ok(Self { path: path.to_owned(), data })
    }

    fn rows(&self) -> usize {
        self.data.height()
    }

    /// Text of a column, empty where absent.
    fn text(&self, name: &str) -> Result<Vec<String>, SynthError> {
        let wrong = |e: polars::error::PolarsError| unscorable(&self.path, &format!("column {name}: {e}"));
        let column = self.data.column(name).map_err(wrong)?.cast(&DataType::String).map_err(wrong)?;
        Ok(column.str().map_err(wrong)?.iter().map(|v| v.unwrap_or("").to_owned()).collect())
    }

    /// Numbers of a column; `true` is 1 and `false` 0.
    fn numbers(&self, name: &str) -> Result<Vec<Option<f64>>, SynthError> {
        let number = |(i, text): (usize, &String)| match text.as_str() {
            "" => Ok(None),
            "true" => Ok(Some(1.0)),
            "false" => Ok(Some(0.0)),
            text => text.parse().map(Some).map_err(|_| {
                unscorable(&self.path, &format!("line {}: {name} is {text:?}, a number was expected", i + 2))
            }),
        };
        self.text(name)?.iter().enumerate().map(number).collect()
    }

    /// Several columns at once.
    fn columns<const N: usize>(&self, names: [&str; N]) -> Result<[Vec<Option<f64>>; N], SynthError> {
        let mut columns = [const { Vec::new() }; N];
        for (column, name) in columns.iter_mut().zip(names) {
            *column = self.numbers(name)?;
        }
        Ok(columns)
    }

    /// A column that may be missing: then all absent.
    fn optional(&self, name: &str) -> Result<Vec<Option<f64>>, SynthError> {
        if self.data.column(name).is_ok() { self.numbers(name) } else { Ok(vec![None; self.rows()]) }
    }
}

fn must_exist(folder: &Path, otherwise: &str) -> Result<(), SynthError> {
    if folder.is_dir() { Ok(()) } else { Err(unscorable(folder, otherwise)) }
}

fn unscorable(path: &Path, message: &str) -> SynthError {
    SynthError::Unscorable { path: path.to_owned(), message: message.to_owned() }
}

fn json<T: DeserializeOwned>(path: &Path) -> Result<T, SynthError> {
    let text = fs::read_to_string(path).map_err(|e| SynthError::io(path, e))?;
    serde_json::from_str(&text).map_err(|e| unscorable(path, &e.to_string()))
}

fn ndjson<T: DeserializeOwned>(path: &Path) -> Result<Vec<T>, SynthError> {
    let text = fs::read_to_string(path).map_err(|e| SynthError::io(path, e))?;
    let parsed = text
        .lines()
        .enumerate()
        .filter(|(_, line)| !line.trim().is_empty())
        .map(|(i, line)| serde_json::from_str(line).map_err(|e| unscorable(path, &format!("line {}: {e}", i + 1))));
    parsed.collect()
}
