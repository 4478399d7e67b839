//! What a reader rejected, and what the run says with it and without it: rows and numbers, no computing.

use serde::{Deserialize, Serialize};

/// A review that was honoured.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct ReviewSummary {
    /// Its marks, in the order of the file.
    pub marks: Vec<ReviewMark>,
    /// The run with the marked parts left out: what all else in these results says.
    pub with: ReviewNumbers,
    /// The run as if nothing had been marked.
    pub without: ReviewNumbers,
}

/// One mark: a frame, a filament or a region that is wrong.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct ReviewMark {
    /// The frame, over all files.
    pub frame: Option<usize>,
    /// The filament, as numbered without the review.
    pub filament: Option<u32>,
    /// Where that filament starts, px.
    pub root_px: Option<[f64; 2]>,
    /// Two opposite corners of the region, px.
    pub region_px: Option<[[f64; 2]; 2]>,
    /// Why it is wrong.
    pub reason: String,
    /// Why the mark changed nothing; absent where it was honoured.
    pub not_applied: Option<String>,
}

impl ReviewMark {
    /// What it marks, in words.
    #[must_use]
    pub fn what(&self) -> String {
        match (self.frame, self.filament, self.region_px) {
            (Some(frame), ..) => format!("frame {frame}"),
            (_, Some(filament), _) => format!("filament {filament}"),
            (.., Some([[x0, y0], [x1, y1]])) => format!("the region from {x0:.0}, {y0:.0} to {x1:.0}, {y1:.0} px"),
            _ => "nothing".to_owned(),
        }
    }
}

/// The numbers that stand side by side.
#[derive(Debug, Clone, Default, PartialEq, Serialize, Deserialize)]
pub struct ReviewNumbers {
    /// Frames used.
    pub frames_used: usize,
    /// Filaments traced.
    pub filaments: usize,
    /// Depth at the last usable frame, µm.
    pub depth_um: Option<f64>,
    /// Its rate, µm/s.
    pub rate_um_per_s: Option<f64>,
    /// Alignment of growth.
    pub growth_alignment: Option<f64>,
    /// Median of contact of the last forecast, s.
    pub contact_p50_s: Option<f64>,
    /// Its chance by the horizon.
    pub chance_by_horizon: Option<f64>,
}
