//! From scenes to filaments. The result, [`Trace`], is one forest of centre-lines that only grows;
//! every table reads from it: at frame k the filament is what has `arrival <= k`.

mod attach;
pub mod centreline;
mod dating;
pub mod edges;
mod finish;
mod forest;
pub mod graph;
mod growth;
mod link;
mod prune;
pub mod recent;
pub mod ridge;
mod settle;
mod shoulders;
mod still;
pub mod thin;
pub mod threshold;
mod tip;

pub use forest::disc;
pub use growth::{DepthCourse, TraceSettings, Tracer, WINDOW};

use serde::{Deserialize, Serialize};

/// Where a filament starts.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum Root {
    /// On the plating edge.
    Plating,
    /// On the far edge.
    Far,
    /// Inside the electrolyte.
    Inside,
}

/// What a path ends in, away from its root.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, Serialize, Deserialize)]
#[serde(rename_all = "lowercase")]
pub enum EndsIn {
    /// A free end.
    Tip,
    /// A node from which two or more paths go on.
    Branch,
    /// Another filament or path, which it ran into.
    Meeting,
    /// The far edge.
    Far,
}

/// One point of a centre-line, in pixels of the first usable frame (x right, y down).
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct TracePoint {
    /// Sub-pixel x.
    pub x: f64,
    /// Sub-pixel y.
    pub y: f64,
    /// Index over all files of the frame at which it arrived.
    pub arrival: usize,
    /// Index of the frame from which it is no longer visible (metal stripped), if any.
    pub retreat: Option<usize>,
    /// Full width of the track here, px.
    pub width: f64,
    /// Standard uncertainty of the position across the line, px.
    pub u_across: f64,
}

/// A stretch of centre-line between two nodes, root to tip, points half a pixel apart.
/// Arrivals never fall along it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TracePath {
    /// Number of the path, unique in the run, from 1.
    pub path: u32,
    /// The filament it belongs to.
    pub filament: u32,
    /// The path at whose end it starts; `None` at the filament's root.
    pub parent: Option<u32>,
    /// At least two points; a child repeats its parent's last point as its first.
    pub points: Vec<TracePoint>,
    /// What its last point is.
    pub ends_in: EndsIn,
}

/// All paths that grew from one root.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TracedFilament {
    /// Number of the filament, from 1, in order of first arrival.
    pub filament: u32,
    /// Where it starts.
    pub root: Root,
    /// Root position, px.
    pub root_px: [f64; 2],
    /// Frame from which its ink touches the far edge.
    pub bridged: Option<usize>,
}

/// The filaments of a run: the best final geometry from all frames.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct Trace {
    /// In order of `filament`.
    pub filaments: Vec<TracedFilament>,
    /// In order of `path`; a parent stands before its children.
    pub paths: Vec<TracePath>,
    /// Paths withdrawn because they gained no evidence later.
    pub withdrawn: usize,
}
