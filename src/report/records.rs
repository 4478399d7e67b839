//! `traces.ndjson` (a line a path) and `summary.json`.

use std::io::Write;
use std::path::Path;

use serde::Serialize;

use super::Error;
use super::schema::round;
use crate::results::{Results, Summary};

/// Decimals of px and s in `traces.ndjson`: a thousandth of a pixel is far below what a trace can know.
const DECIMALS: u8 = 3;

#[derive(Serialize)]
struct Line {
    filament: u32,
    path: u32,
    points: Vec<[f64; 4]>,
}

/// Writes a line a path, in order of path: `{"filament":1,"path":3,"points":[[x_px,y_px,time_s,width_px],…]}`.
///
/// # Errors
/// [`Error::Io`] when `out` fails, [`Error::Made`] when a point names a frame that has no row.
pub fn write_traces(results: &Results, path: &Path, mut out: impl Write) -> Result<(), Error> {
    for trace in &results.trace.paths {
        let points = trace.points.iter().map(|p| {
            let row = results.frames.get(p.arrival).ok_or_else(|| {
                Error::made("traces.ndjson", format!("path {} names frame {}", trace.path, p.arrival))
            })?;
            Ok([p.x, p.y, row.time_s, p.width].map(|v| round(v, DECIMALS).unwrap_or(v)))
        });
        let line = Line { filament: trace.filament, path: trace.path, points: points.collect::<Result<_, Error>>()? };
        let json = serde_json::to_string(&line).map_err(|why| Error::made("traces.ndjson", why))?;
        writeln!(out, "{json}").map_err(|source| Error::io(path, source))?;
    }
    Ok(())
}

/// `summary.json`: indented, keys in the order of [`Summary`].
///
/// # Errors
/// [`Error::Made`] when a value cannot be written as JSON.
pub fn summary_json(summary: &Summary) -> Result<String, Error> {
    let mut json = serde_json::to_string_pretty(summary).map_err(|why| Error::made("summary.json", why))?;
    json.push('\n');
    Ok(json)
}
