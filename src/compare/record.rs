//! A run as a comparison needs it: plain records, read from a finished output or made by a simulation.

use std::path::PathBuf;

use crate::run::manifest::Ended;
use crate::stats::angles::acute;

/// A run.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct RunRecord {
    /// Its name, different from every other.
    pub run: String,
    /// What was tested; a run without it is taken as a specimen of its own.
    pub specimen: Option<String>,
    /// The load.
    pub load: LoadRecord,
    /// Filaments rooted on the plating edge.
    pub filaments: Vec<FilamentRecord>,
    /// Time (s) and depth (µm) at the usable frames.
    pub depths: Vec<(f64, f64)>,
    /// Rate of depth, µm/s.
    pub rate_um_per_s: Option<f64>,
    /// Time of the short or of the last look, s.
    pub followed_s: f64,
    /// Charge passed by then over the electrode area, mAh/cm².
    pub charge_mah_per_cm2: Option<f64>,
    /// How it ended; [`Ended::Short`] is the event.
    pub ended: Ended,
    /// What should be the same for all.
    pub conditions: Conditions,
    /// What is odd about this run.
    pub warnings: Vec<String>,
    /// Its own report.
    pub report: Option<PathBuf>,
}

/// The load of a run.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct LoadRecord {
    /// At each usable frame.
    pub samples: Vec<LoadSample>,
}

/// The load at one time.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct LoadSample {
    /// MPa, positive in compression.
    pub stress_mpa: Option<f64>,
    /// Angle from the plating edge to the load axis, degrees in [0, 180).
    pub axis_to_edge_deg: Option<f64>,
}

/// A filament rooted on the plating edge.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct FilamentRecord {
    /// Length at the end, µm.
    pub length_um: f64,
    /// Free ends and contacts with the far edge at the end.
    pub ends: usize,
    /// Whether its last 100 µm run more than 45° off the plating edge's normal; absent when shorter.
    pub turned: Option<bool>,
    /// Its growth.
    pub pieces: Vec<PieceRecord>,
}

/// A piece of growth.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct PieceRecord {
    /// Arc length, µm.
    pub length_um: f64,
    /// Angle from the plating edge at the filament's root, degrees in [0, 180): 0 along the plates, 90 straight across.
    pub to_edge_deg: f64,
    /// Where the load of its time makes growth expected, counted likewise; absent without stress or axis.
    pub expected_deg: Option<f64>,
    /// Acute angle to the load axis of its time, degrees.
    pub to_load_deg: Option<f64>,
}

/// What should be the same for all runs; absent is not known.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Conditions {
    /// Median current over the electrode area while plating, mA/cm².
    pub current_ma_per_cm2: Option<f64>,
    /// How the cell was driven.
    pub control: Option<String>,
    /// Least distance of the electrodes, µm.
    pub gap_um: Option<f64>,
    /// Electrode area, mm².
    pub area_mm2: Option<f64>,
    /// Temperature, °C.
    pub temperature_c: Option<f64>,
    /// Thickness of the specimen, mm.
    pub thickness_mm: Option<f64>,
    /// Scale, µm/px.
    pub um_per_px: Option<f64>,
    /// Median time between frames, s.
    pub interval_s: Option<f64>,
    /// Settings of the analysis that can move its numbers.
    pub settings: Option<String>,
    /// Version of the program that made the output.
    pub version: Option<String>,
    /// Darker or brighter filaments.
    pub polarity: Option<String>,
    /// Share of the frames that were set aside.
    pub set_aside: f64,
}

/// Growth within this of the expected axis runs along it, degrees.
pub const NEAR_DEG: f64 = 15.0;

impl RunRecord {
    /// Name of its specimen: its own name where none is given.
    #[must_use]
    pub fn specimen_name(&self) -> &str {
        self.specimen.as_deref().unwrap_or(&self.run)
    }

    /// All growth pieces.
    fn pieces(&self) -> impl Iterator<Item = &PieceRecord> {
        self.filaments.iter().flat_map(|filament| &filament.pieces)
    }

    /// Mean over the length grown of what `of` says of a piece; `None` without such a piece.
    fn over_length(&self, of: impl Fn(&PieceRecord) -> Option<f64>) -> Option<f64> {
        let known = self.pieces().filter_map(|p| Some((p.length_um, of(p)?)));
        let (length, sum) = known.fold((0.0, 0.0), |(l, s), (length, value)| (l + length, s + length * value));
        (length > 0.0).then(|| sum / length)
    }

    /// Mean cos 2γ over the length grown, γ the angle to the plating edge: +1 along the plates, −1 straight across (so its
    /// negative is the alignment with the edge's normal).
    #[must_use]
    pub fn along_plates(&self) -> Option<f64> {
        self.over_length(|p| Some(libm::cos((2.0 * p.to_edge_deg).to_radians())))
    }

    /// Mean cos 2Δ to the load axis.
    #[must_use]
    pub fn to_load(&self) -> Option<f64> {
        self.over_length(|p| p.to_load_deg.map(|deg| libm::cos((2.0 * deg).to_radians())))
    }

    /// Share of the length that runs within [`NEAR_DEG`] of the expected axis, or of `otherwise` where the load makes none.
    #[must_use]
    pub fn near_expected(&self, otherwise: Option<f64>) -> Option<f64> {
        self.over_length(|p| {
            let axis = p.expected_deg.or(otherwise)?;
            Some(if acute(p.to_edge_deg, axis) <= NEAR_DEG { 1.0 } else { 0.0 })
        })
    }

    /// The expected axis over the length grown, from the plating edge, degrees; `None` where it moved or there was none.
    #[must_use]
    pub fn expected_axis(&self) -> Option<f64> {
        let axes = self.pieces().filter_map(|p| Some((p.expected_deg?, p.length_um)));
        let mean = crate::stats::axial::weighted_axial_mean(axes)?;
        mean.axis_deg.filter(|_| mean.resultant > STEADY)
    }

    /// Filaments long enough to tell, and those turned aside.
    #[must_use]
    pub fn turned(&self) -> (usize, usize) {
        let known = self.filaments.iter().filter_map(|f| f.turned);
        known.fold((0, 0), |(tried, yes), turned| (tried + 1, yes + usize::from(turned)))
    }

    /// Ends of filaments on each millimetre of length.
    #[must_use]
    pub fn ends_per_mm(&self) -> Option<f64> {
        let length: f64 = self.filaments.iter().map(|f| f.length_um).sum();
        let ends: usize = self.filaments.iter().map(|f| f.ends).sum();
        (length > 0.0).then(|| 1000.0 * ends as f64 / length)
    }
}

/// Mean resultant length of the doubled expected axes above which they are one axis: under 10° of scatter (common practice).
const STEADY: f64 = 0.94;

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_abs_diff_eq;

    fn piece(length_um: f64, to_edge_deg: f64, expected: Option<f64>) -> PieceRecord {
        PieceRecord { length_um, to_edge_deg, expected_deg: expected, to_load_deg: None }
    }

    #[test]
    fn directions_are_weighed_by_length() {
        let pieces = vec![piece(30.0, 0.0, Some(0.0)), piece(10.0, 90.0, Some(178.0)), piece(10.0, 175.0, Some(2.0))];
        let filaments = vec![FilamentRecord { pieces, ends: 2, length_um: 50.0, turned: Some(true) }];
        let run = RunRecord { filaments, ..RunRecord::default() };
        let tilted = libm::cos(350_f64.to_radians());
        assert_abs_diff_eq!(run.along_plates().unwrap(), (30.0 - 10.0 + 10.0 * tilted) / 50.0, epsilon = 1e-12);
        assert_abs_diff_eq!(run.near_expected(None).unwrap(), 0.8, epsilon = 1e-12);
        assert_abs_diff_eq!(run.ends_per_mm().unwrap(), 40.0, epsilon = 1e-12);
        assert_eq!((run.turned(), run.to_load()), ((1, 1), None));
        assert!(acute(run.expected_axis().unwrap(), 0.0) < 1.0);
    }

    #[test]
    fn a_bare_run_has_no_values() {
        let run = RunRecord { run: "r".into(), ..RunRecord::default() };
        assert_eq!((run.along_plates(), run.near_expected(Some(0.0)), run.ends_per_mm()), (None, None, None));
        assert_eq!((run.turned(), run.expected_axis(), run.specimen_name()), ((0, 0), None, "r"));
    }
}
