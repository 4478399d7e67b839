//! What the reader must know: warnings that could change a result, and the cautions.

use super::Input;
use super::film::Filmed;
use super::forecasts::electrical_shorts;
use crate::forecast::short::{self, Grade};
use crate::measure::FrameRow;
use crate::run::manifest::Ended;

/// Turn of the scene beyond which it matters, degrees: half a pixel at 300 px from the middle.
const TURN_MATTERS_DEG: f64 = 0.1;
/// Share of frames set aside that is worth a warning.
const MANY_ASIDE: f64 = 0.1;

/// Warnings, cautions and the short.
pub(super) struct Notes {
    /// What could change a result, most weighty first.
    pub(super) warnings: Vec<String>,
    /// Beside the standing caution.
    pub(super) cautions: Vec<String>,
    /// Log and picture put together.
    pub(super) short: short::Verdict,
}

impl Notes {
    pub(super) fn of(input: &Input, filmed: &Filmed, frames: &[FrameRow]) -> Self {
        let end = frames.last().map_or(0.0, |f| f.time_s);
        let events = electrical_shorts(input, end, usize::MAX);
        let bridged_s = bridged_s(filmed);
        let broke = input.manifest.cell.ended == Ended::Broke;
        let short = short::verdict(&events, bridged_s, broke);
        let mut warnings = Vec::new();
        warnings.extend(filmed.calibration.off.clone().map(|c| format!("the run's own record of forecasts: {c}")));
        warnings.extend(short_warnings(&events, short, broke));
        warnings.extend(aside(frames));
        warnings.extend(scene_warnings(filmed));
        let times = input.sequence.times_s();
        warnings.extend(input.sequence.warnings.iter().cloned());
        warnings.extend(input.load.warnings.iter().cloned());
        warnings.extend(input.load.log.warnings.iter().cloned());
        warnings.extend(input.load.log.coverage(&times));
        warnings.extend(input.load.variation_warning(view_mm(input)));
        warnings.extend(input.cell.warnings.iter().cloned());
        warnings.extend(input.cell.coverage(&times));
        let mut seen = std::collections::HashSet::new();
        warnings.retain(|w| seen.insert(w.clone()));
        Self { warnings, cautions: filmed.calibration.shown.iter().cloned().collect(), short }
    }
}

/// Time of the first frame in which ink touches the far edge.
fn bridged_s(filmed: &Filmed) -> Option<f64> {
    let plated = filmed.trace.filaments.iter().filter(|f| f.root == crate::trace::Root::Plating);
    plated.filter_map(|f| f.bridged).min().map(|frame| filmed.times_s[frame])
}

fn short_warnings(events: &[short::ShortEvent], verdict: short::Verdict, broke: bool) -> Vec<String> {
    let mut out: Vec<String> = Vec::new();
    for event in events.iter().filter(|e| e.grade == Grade::Soft) {
        out.push(format!("the cell log shows a partial short: {}", event.evidence));
    }
    if let Some(lag) = verdict.lag_s.filter(|l| l.abs() > 0.0) {
        let word = if lag > 0.0 { "after" } else { "before" };
        out.push(format!("the cell log shows the short {:.6} s {word} the picture shows contact", lag.abs()));
    }
    if broke {
        out.push("the specimen broke (`ended = \"broke\"`): its end is no short".to_owned());
    }
    out
}

fn aside(frames: &[FrameRow]) -> Option<String> {
    let count = frames.iter().filter(|f| !f.usable).count();
    let first = frames.iter().find(|f| !f.usable)?;
    let share = count as f64 / frames.len() as f64;
    let weight = if share > MANY_ASIDE { format!(" ({:.0} % of all)", 100.0 * share) } else { String::new() };
    let frames = if count == 1 { "1 frame was" } else { &format!("{count} frames were") };
    Some(format!("{frames} set aside{weight}; the first is frame {} ({}): {}", first.frame, first.file, first.reason))
}

fn scene_warnings(filmed: &Filmed) -> Vec<String> {
    let mut out = Vec::new();
    let turned = filmed.fates.iter().map(|f| f.rotation_deg).fold(0.0f64, |a, b| if b.abs() > a.abs() { b } else { a });
    if turned.abs() > TURN_MATTERS_DEG {
        out.push(format!("the stage turned by up to {turned:.2}°: drift is taken out, the turn is not"));
    }
    if filmed.trace.withdrawn > 0 {
        let n = filmed.trace.withdrawn;
        let paths = if n == 1 { "1 path was" } else { &format!("{n} paths were") };
        out.push(format!("{paths} withdrawn because later frames did not bear them out"));
    }
    out
}

/// Longer side of the view, mm.
fn view_mm(input: &Input) -> f64 {
    f64::from(input.sequence.width.max(input.sequence.height)) * input.um_per_px() / 1000.0
}
