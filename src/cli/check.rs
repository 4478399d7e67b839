//! `veerlog check RUN`: what was understood of a run and what is missing, in one screen, without
//! analysing it. Every frame is decoded once, so that those that would be set aside are named.

use std::path::{Path, PathBuf};

use clap::Args;
use rayon::prelude::*;

use super::Outcome;
use super::sketch::Sketch;
use crate::Error;
use crate::load::{AxisRule, Fixture, Load};
use crate::run::manifest::{Ended, Filament};
use crate::run::{CellLog, Decoded, FrameFault, FrameSequence, LoadLog, LogFacts, Manifest, Series, repeats};

/// Shown below the help.
const EXAMPLES: &str = "\
Examples:
  veerlog check RUN
  veerlog check RUN --picture edges.png   # see the two edges on the first usable frame
  veerlog check RUN --strict              # exit code 1 when something needs a look";

/// Say what is understood of a run and what is missing, without analysing it
#[derive(Debug, Args)]
#[command(after_help = EXAMPLES)]
pub(super) struct CheckArgs {
    /// Run folder
    run: PathBuf,
    /// Also draw the first usable frame with both edges into this PNG file
    #[arg(long, value_name = "FILE")]
    picture: Option<PathBuf>,
}

/// Reads everything a run holds and says what was understood.
///
/// # Errors
/// The first fault that would stop an analysis.
pub(super) fn run(args: &CheckArgs) -> Result<Outcome, Error> {
    let manifest = Manifest::load(&args.run)?;
    let sequence = FrameSequence::open(&args.run, &manifest)?;
    let load = Load::new(&manifest, LoadLog::open(&manifest, &sequence.clock)?)?;
    let cell = CellLog::open(&manifest, &sequence.clock)?;
    let look = look_at_frames(&sequence)?;
    if let Some(path) = &args.picture {
        draw(path, &manifest, &look.first)?;
    }
    let screen = Screen { manifest: &manifest, sequence: &sequence, load: &load, cell: &cell, look: &look };
    Ok(Outcome { text: screen.text(), warnings: screen.warnings(), ..Outcome::default() })
}

/// What decoding every frame showed.
struct Look {
    /// The first usable frame.
    first: Decoded,
    /// Frames that would be set aside, and why.
    aside: Vec<(usize, FrameFault)>,
}

fn look_at_frames(sequence: &FrameSequence) -> Result<Look, Error> {
    let decoded: Vec<Result<[u8; 32], FrameFault>> = (0..sequence.entries.len())
        .into_par_iter()
        .map(|frame| sequence.decode(frame).map(|decoded| decoded.sha256))
        .collect();
    let hashes: Vec<_> = decoded.iter().map(|frame| frame.as_ref().ok().copied()).collect();
    let mut aside: Vec<(usize, FrameFault)> = Vec::new();
    for (frame, (decoded, repeated)) in decoded.iter().zip(repeats(&hashes)).enumerate() {
        match (decoded, repeated) {
            (Err(fault), _) => aside.push((frame, fault.clone())),
            (Ok(_), Some(of)) => aside.push((frame, FrameFault::Repeat { of })),
            (Ok(_), None) => {}
        }
    }
    let usable = decoded.iter().position(Result::is_ok);
    let Some(first) = usable else {
        let fault = aside.into_iter().next().map_or(FrameFault::Empty, |(_, fault)| fault);
        return Err(sequence.all_broken(fault).into());
    };
    let first = sequence.decode(first).map_err(|fault| sequence.all_broken(fault))?;
    Ok(Look { first, aside })
}

fn draw(path: &Path, manifest: &Manifest, first: &Decoded) -> Result<(), Error> {
    let io = |source| Error::Io { path: path.to_path_buf(), source };
    let sketch = Sketch { plane: &first.plane, plating: &manifest.cell.plating_edge, far: &manifest.cell.far_edge };
    let mut bytes = std::io::Cursor::new(Vec::new());
    let written = sketch.picture().write_to(&mut bytes, image::ImageFormat::Png);
    written.map_err(|error| io(std::io::Error::other(error)))?;
    std::fs::write(path, bytes.into_inner()).map_err(io)
}

struct Screen<'a> {
    manifest: &'a Manifest,
    sequence: &'a FrameSequence,
    load: &'a Load,
    cell: &'a CellLog,
    look: &'a Look,
}

impl Screen<'_> {
    fn text(&self) -> String {
        let specimen =
            self.manifest.specimen.as_deref().map_or_else(String::new, |name| format!(", specimen {}", clean(name)));
        let mut lines = vec![format!("run      {}{specimen}", clean(&self.manifest.run))];
        lines.extend(self.frames());
        lines.extend(self.edges());
        lines.extend(self.load());
        lines.extend(self.cell());
        let missing = self.missing();
        if !missing.is_empty() {
            lines.push(format!("missing  {}", missing.join("; ")));
        }
        lines.join("\n")
    }

    fn frames(&self) -> Vec<String> {
        let sequence = self.sequence;
        let (width, height) = (sequence.width, sequence.height);
        let frames = &self.manifest.frames;
        let count = sequence.entries.len();
        let last = sequence.entries.last().map_or(0.0, |entry| entry.time_s);
        let timed = match (&frames.times, frames.interval_s) {
            (Some(table), _) => format!("timed by {}", clean(table)),
            (None, Some(interval)) if frames.by_number => {
                format!("timed by number, {interval} s each")
            }
            (None, interval) => format!("every {} s", interval.unwrap_or(1.0)),
        };
        let filament = match frames.filament {
            Filament::Darker => "darker",
            Filament::Brighter => "brighter",
        };
        let scale = frames.um_per_px;
        vec![
            format!(
                "frames   {} of {count} usable in {}: {width} × {height} px, {} bit; {timed}, to {last} s ({})",
                count - self.look.aside.len(),
                clean(&frames.files),
                sequence.bits,
                span(last)
            ),
            format!("         filaments {filament} than around, the first {} frames bare", frames.bare),
            format!(
                "scale    {scale} µm per px: the view is {:.0} × {:.0} µm",
                f64::from(width) * scale,
                f64::from(height) * scale
            ),
        ]
    }

    fn edges(&self) -> Vec<String> {
        let cell = &self.manifest.cell;
        let gap = gap_px(&cell.plating_edge, &cell.far_edge) * self.manifest.frames.um_per_px;
        let sketch = Sketch { plane: &self.look.first.plane, plating: &cell.plating_edge, far: &cell.far_edge };
        let mut lines = vec![format!(
            "edges    plating {} (P), far {} (F): {gap:.0} µm apart at the least",
            ends(&cell.plating_edge),
            ends(&cell.far_edge)
        )];
        lines.extend(sketch.text().into_iter().map(|line| format!("         |{line}|")));
        lines
    }

    fn load(&self) -> Vec<String> {
        let log = &self.load.log;
        let mut lines = match &log.facts {
            Some(facts) => vec![format!("load     {}", describe(facts, &self.manifest.origin.folder))],
            None if log.force_n.is_some() || log.stress_mpa.is_some() => {
                vec!["load     constant".to_owned()]
            }
            None => vec!["load     none".to_owned()],
        };
        let signed = |low: f64, high: f64, up: &'static str, down: &'static str| match (low < 0.0, high > 0.0) {
            (true, true) => format!(" ({up} and {down})"),
            (false, true) => format!(" ({up})"),
            (true, false) => format!(" ({down})"),
            (false, false) => String::new(),
        };
        let range = |series: &Option<Series>| series.as_ref().and_then(Series::range);
        let mut values = Vec::new();
        if let Some((low, high)) = range(&log.force_n) {
            values.push(format!("force {} N{}", between(low, high), signed(low, high, "pressing", "pulling")));
        }
        if let Some((low, high)) = self.stress_range() {
            values.push(format!("stress {} MPa{}", between(low, high), signed(low, high, "compression", "tension")));
        }
        values.push(self.axis());
        lines.push(format!("         {}", values.join("; ")));
        lines
    }

    /// Smallest and largest stress over the frames.
    fn stress_range(&self) -> Option<(f64, f64)> {
        let stresses: Vec<f64> =
            self.sequence.times_s().iter().filter_map(|time| self.load.at(*time, None).stress_mpa).collect();
        let low = stresses.iter().copied().reduce(f64::min)?;
        Some((low, stresses.iter().copied().fold(low, f64::max)))
    }

    fn axis(&self) -> String {
        match &self.load.axis {
            AxisRule::None => "no axis in the picture".to_owned(),
            AxisRule::Through { .. } => "axis through the plates".to_owned(),
            AxisRule::Logged { .. } => {
                let mut axes: Vec<f64> =
                    self.sequence.times_s().iter().filter_map(|time| self.load.at(*time, None).direction_deg).collect();
                axes.sort_by(f64::total_cmp);
                axes.dedup_by(|a, b| (*a - *b).abs() < 0.05);
                match axes.as_slice() {
                    [] => "no load axis given".to_owned(),
                    [axis] => format!("axis {axis:.1}° anticlockwise from x in the picture"),
                    [first, .., last] => {
                        format!("axis from {first:.1}° to {last:.1}° in the picture ({} directions)", axes.len())
                    }
                }
            }
        }
    }

    fn cell(&self) -> Vec<String> {
        let Some(facts) = &self.cell.facts else {
            return Vec::new();
        };
        let part = |series: &Option<Series>, name: &str, unit: &str| {
            series.as_ref().and_then(Series::range).map(|(low, high)| format!("{name} {} {unit}", between(low, high)))
        };
        let mut values: Vec<String> = [
            part(&self.cell.current_ma, "current", "mA (positive plates)"),
            part(&self.cell.voltage_v, "voltage", "V"),
            part(&self.cell.temperature_c, "temperature", "°C"),
        ]
        .into_iter()
        .flatten()
        .collect();
        let last = self.sequence.entries.last().map_or(0.0, |entry| entry.time_s);
        values.extend(self.cell.charge_mah(0.0, last).map(|charge| format!("charge {charge:.4} mAh")));
        vec![
            format!("cell     {}", describe(facts, &self.manifest.origin.folder)),
            format!("         {}", values.join("; ")),
        ]
    }

    fn missing(&self) -> Vec<&'static str> {
        let cell = &self.manifest.cell;
        let mut missing = Vec::new();
        if self.load.fixture == Fixture::None {
            missing.push("a fixture (no stress, no dose)");
        }
        if cell.log.is_none() {
            missing.push("a cell log (a short is seen from the picture alone)");
        } else if cell.area_mm2.is_none() {
            missing.push("area_mm2 (no current density)");
        }
        if cell.ended == Ended::Unknown {
            missing.push("ended (why the run ended)");
        }
        if self.manifest.frames.bare == 0 {
            missing.push("bare frames (each frame's own background stands in)");
        }
        missing
    }

    fn warnings(&self) -> Vec<String> {
        /// Frames set aside that are named one by one.
        const NAMED: usize = 5;
        let aside = &self.look.aside;
        let name = |(frame, fault): &(usize, FrameFault)| {
            format!("frame {frame} ({}) would be set aside: {fault}", clean(&self.sequence.entries[*frame].file))
        };
        let mut warnings: Vec<String> = aside.iter().take(NAMED).map(name).collect();
        if aside.len() > NAMED {
            warnings.push(format!("{} more frames would be set aside", aside.len() - NAMED));
        }
        let times = self.sequence.times_s();
        warnings.extend(self.sequence.warnings.iter().cloned());
        warnings.extend(self.load.log.warnings.iter().cloned());
        warnings.extend(self.load.log.coverage(&times));
        warnings.extend(self.load.warnings.iter().cloned());
        let view_mm = f64::from(self.sequence.width.max(self.sequence.height)) * self.manifest.frames.um_per_px * 1e-3;
        warnings.extend(self.load.variation_warning(view_mm));
        warnings.extend(self.cell.warnings.iter().cloned());
        warnings.extend(self.cell.coverage(&times));
        warnings
    }
}

/// "load.csv: 40 rows, 0 to 390 s, every 10 s …"
fn describe(facts: &LogFacts, folder: &Path) -> String {
    let name = facts.path.strip_prefix(folder).unwrap_or(&facts.path).display().to_string();
    let separator = match facts.layout.separator {
        ';' => "semicolons",
        '\t' => "tabs",
        _ => "commas",
    };
    let decimal = if facts.layout.decimal == ',' { ", decimal commas" } else { "" };
    let hold = if facts.hold_s.is_finite() {
        format!("a value holds {} s", facts.hold_s)
    } else {
        "a value holds until the next".to_owned()
    };
    let dated = if facts.dated { ", dated" } else { "" };
    let columns: Vec<String> = facts
        .layout
        .found
        .iter()
        .map(
            |(ours, theirs)| {
                if ours == theirs { (*ours).to_owned() } else { format!("{ours} = \"{}\"", clean(theirs)) }
            },
        )
        .collect();
    format!(
        "{}: {} rows{dated}, {} to {} s, every {} s; {hold}\n         headings in line {} ({separator}{decimal}): {}",
        clean(&name),
        facts.rows,
        facts.from_s,
        facts.to_s,
        facts.spacing_s,
        facts.layout.heading_line,
        columns.join(", ")
    )
}

/// Text from a file without control characters, which a terminal would obey.
fn clean(text: &str) -> String {
    text.chars().filter(|letter| !letter.is_control()).collect()
}

fn between(low: f64, high: f64) -> String {
    if high - low <= f64::EPSILON * high.abs() { format!("{low:.4}") } else { format!("{low:.4} to {high:.4}") }
}

fn ends(edge: &[[f64; 2]]) -> String {
    let point = |at: Option<&[f64; 2]>| at.map_or_else(String::new, |[x, y]| format!("({x}, {y})"));
    format!("{} to {}", point(edge.first()), point(edge.last()))
}

/// A span of time in the two largest units that say something.
fn span(seconds: f64) -> String {
    let (minutes, hours) = (seconds / 60.0, seconds / 3600.0);
    if hours >= 1.0 {
        format!("{hours:.1} h")
    } else if minutes >= 1.0 {
        format!("{minutes:.1} min")
    } else {
        format!("{seconds:.1} s")
    }
}

/// Least distance between two polylines that do not cross, px: it is met at a corner of one of them.
fn gap_px(a: &[[f64; 2]], b: &[[f64; 2]]) -> f64 {
    let to_line = |point: &[f64; 2], line: &[[f64; 2]]| {
        let to_segment = |ends: &[[f64; 2]]| {
            let (dx, dy) = (ends[1][0] - ends[0][0], ends[1][1] - ends[0][1]);
            let length2 = (dx * dx + dy * dy).max(f64::MIN_POSITIVE);
            let share = (((point[0] - ends[0][0]) * dx + (point[1] - ends[0][1]) * dy) / length2).clamp(0.0, 1.0);
            libm::hypot(point[0] - ends[0][0] - share * dx, point[1] - ends[0][1] - share * dy)
        };
        line.windows(2).map(to_segment).fold(f64::INFINITY, f64::min)
    };
    let from_a = a.iter().map(|point| to_line(point, b));
    let from_b = b.iter().map(|point| to_line(point, a));
    from_a.chain(from_b).fold(f64::INFINITY, f64::min)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_gap_is_the_least_distance() {
        let slanted = gap_px(&[[0.0, 0.0], [0.0, 10.0]], &[[3.0, 5.0], [9.0, 20.0]]);
        assert!((slanted - 3.0).abs() < 1e-12);
    }
}
