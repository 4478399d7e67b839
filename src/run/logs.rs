//! Load and cell logs: which column is what, its unit and sign, and the value in force at a time.
//! Method: rows are brought onto the frames' clock (offset added first, the first frame's time taken
//! off), sorted by time; of rows at one time the last in the file wins, column by column. Each column is
//! a [`Series`]. What had to be mended is said in warnings that name lines.

use std::collections::BTreeMap;
use std::path::PathBuf;

use super::clock::{Clock, parse_offset};
use super::load_section::{Hold, HoldWord};
use super::manifest::Manifest;
use super::series::Series;
use super::textlog::{self, Layout, LogError, TextLog, TimeKind, Wanted};

/// Columns of a load log.
pub const LOAD_COLUMNS: &[&str] = &["time_s", "time", "force_n", "stress_mpa", "direction_deg"];
/// Columns of a cell log.
pub const CELL_COLUMNS: &[&str] = &["time_s", "time", "current_ma", "voltage_v", "temperature_c"];

/// Default hold time in median spacings of the log (the contract of the tables).
const HOLD_SPACINGS: f64 = 10.0;

/// What is known about a log that was read, for a person to confirm.
#[derive(Debug, Clone, PartialEq)]
pub struct LogFacts {
    /// The file.
    pub path: PathBuf,
    /// How it is written.
    pub layout: Layout,
    /// Whether it holds dates.
    pub dated: bool,
    /// Rows.
    pub rows: usize,
    /// Time of its first row, s since the first frame.
    pub from_s: f64,
    /// Time of its last row, s since the first frame.
    pub to_s: f64,
    /// Median spacing of its rows, s; 0 with one row.
    pub spacing_s: f64,
    /// How long a sample is in force, s.
    pub hold_s: f64,
}

/// Load in force at a time.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct LoadAt {
    /// Force, N, positive when it presses.
    pub force_n: Option<f64>,
    /// Logged stress, MPa, positive in compression.
    pub stress_mpa: Option<f64>,
    /// Direction on the rig, degrees.
    pub direction_deg: Option<f64>,
}

/// Cell values in force at a time.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct CellAt {
    /// Current, mA, positive plates at the plating edge.
    pub current_ma: Option<f64>,
    /// Voltage, V.
    pub voltage_v: Option<f64>,
    /// Temperature, °C.
    pub temperature_c: Option<f64>,
}

/// The load log, or the constants in its place.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct LoadLog {
    /// Force, N.
    pub force_n: Option<Series>,
    /// Stress, MPa.
    pub stress_mpa: Option<Series>,
    /// Direction on the rig, degrees.
    pub direction_deg: Option<Series>,
    /// The file, where there is one.
    pub facts: Option<LogFacts>,
    /// What had to be mended or looks odd.
    pub warnings: Vec<String>,
}

/// The cell log.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct CellLog {
    /// Current, mA.
    pub current_ma: Option<Series>,
    /// Voltage, V.
    pub voltage_v: Option<Series>,
    /// Temperature, °C.
    pub temperature_c: Option<Series>,
    /// The file, where there is one.
    pub facts: Option<LogFacts>,
    /// What had to be mended or looks odd.
    pub warnings: Vec<String>,
}

impl LoadLog {
    /// Reads the load log of a run, or takes the constants in its place; no log and no constant is an empty log.
    ///
    /// # Errors
    /// [`crate::Error::Log`] for what is wrong in the file, [`crate::Error::Manifest`] for a path out of the run folder.
    pub fn open(manifest: &Manifest, clock: &Clock) -> Result<Self, crate::Error> {
        let load = &manifest.load;
        let constant = |value: Option<f64>| value.map(Series::constant);
        let mut log =
            Self { force_n: constant(load.force_n), stress_mpa: constant(load.stress_mpa), ..Self::default() };
        if let Some(named) = &load.log {
            let source = Source {
                path: manifest.inside("load", "log", named)?,
                columns: &load.columns,
                scale: &load.scale,
                clock_offset_s: load.clock_offset_s,
                hold: load.hold_s,
                utc_offset: load.utc_offset.as_deref(),
                clock,
            };
            let mut read = source.read(LOAD_COLUMNS)?;
            log = Self {
                force_n: read.columns.remove("force_n"),
                stress_mpa: read.columns.remove("stress_mpa"),
                direction_deg: read.columns.remove("direction_deg"),
                facts: Some(read.facts),
                warnings: read.warnings,
            };
        }
        if log.direction_deg.is_none() {
            log.direction_deg = constant(load.direction_deg);
        }
        Ok(log)
    }

    /// The load in force at a time.
    #[must_use]
    pub fn at(&self, time_s: f64) -> LoadAt {
        LoadAt {
            force_n: at(self.force_n.as_ref(), time_s),
            stress_mpa: at(self.stress_mpa.as_ref(), time_s),
            direction_deg: at(self.direction_deg.as_ref(), time_s),
        }
    }

    /// Whether every force logged is negative (and some are not 0): then the sign is worth asking about.
    #[must_use]
    pub fn force_is_all_negative(&self) -> bool {
        let range = self.force_n.as_ref().and_then(Series::range);
        range.is_some_and(|(low, high)| low < 0.0 && high <= 0.0)
    }

    /// Warnings about frames for which the log says nothing. `times_s`: frame times.
    #[must_use]
    pub fn coverage(&self, times_s: &[f64]) -> Vec<String> {
        let columns =
            [("force_n", &self.force_n), ("stress_mpa", &self.stress_mpa), ("direction_deg", &self.direction_deg)];
        coverage("load", columns, times_s)
    }
}

impl CellLog {
    /// Reads the cell log of a run; without one, an empty log with the constant temperature.
    ///
    /// # Errors
    /// As [`LoadLog::open`].
    pub fn open(manifest: &Manifest, clock: &Clock) -> Result<Self, crate::Error> {
        let cell = &manifest.cell;
        let mut log = Self::default();
        if let Some(named) = &cell.log {
            let source = Source {
                path: manifest.inside("cell", "log", named)?,
                columns: &cell.columns,
                scale: &cell.scale,
                clock_offset_s: cell.clock_offset_s,
                hold: cell.hold_s,
                utc_offset: cell.utc_offset.as_deref(),
                clock,
            };
            let mut read = source.read(CELL_COLUMNS)?;
            log = Self {
                current_ma: read.columns.remove("current_ma"),
                voltage_v: read.columns.remove("voltage_v"),
                temperature_c: read.columns.remove("temperature_c"),
                facts: Some(read.facts),
                warnings: read.warnings,
            };
        }
        if log.temperature_c.is_none() {
            log.temperature_c = cell.temperature_c.map(Series::constant);
        }
        Ok(log)
    }

    /// The cell's values in force at a time.
    #[must_use]
    pub fn at(&self, time_s: f64) -> CellAt {
        CellAt {
            current_ma: at(self.current_ma.as_ref(), time_s),
            voltage_v: at(self.voltage_v.as_ref(), time_s),
            temperature_c: at(self.temperature_c.as_ref(), time_s),
        }
    }

    /// Charge passed from `from_s` to `to_s`, mAh, positive plates. Absent where more of that time than
    /// ten median spacings of the log is not covered by a sample in force.
    #[must_use]
    pub fn charge_mah(&self, from_s: f64, to_s: f64) -> Option<f64> {
        let current = self.current_ma.as_ref()?;
        let (ma_s, covered_s) = current.integral(from_s, to_s);
        let slack_s = self.facts.as_ref().map_or(0.0, |facts| HOLD_SPACINGS * facts.spacing_s);
        (to_s - from_s - covered_s <= slack_s).then_some(ma_s / SECONDS_PER_HOUR)
    }

    /// Warnings about frames for which the log says nothing. `times_s`: frame times.
    #[must_use]
    pub fn coverage(&self, times_s: &[f64]) -> Vec<String> {
        let columns =
            [("current_ma", &self.current_ma), ("voltage_v", &self.voltage_v), ("temperature_c", &self.temperature_c)];
        coverage("cell", columns, times_s)
    }
}

/// Seconds in an hour (exact).
const SECONDS_PER_HOUR: f64 = 3600.0;

fn at(series: Option<&Series>, time_s: f64) -> Option<f64> {
    series?.at(time_s)
}

fn coverage(log: &str, columns: [(&str, &Option<Series>); 3], times_s: &[f64]) -> Vec<String> {
    let mut said: Vec<(Vec<super::Gap>, Vec<&str>)> = Vec::new();
    for (name, series) in columns {
        let Some(series) = series else { continue };
        let gaps = series.gaps(times_s);
        match said.iter_mut().find(|(known, _)| *known == gaps) {
            Some((_, names)) => names.push(name),
            None => said.push((gaps, vec![name])),
        }
    }
    let warning = |(gaps, names): (Vec<super::Gap>, Vec<&str>)| {
        super::describe_gaps(&format!("the {log} log ({})", names.join(", ")), &gaps, times_s.len())
    };
    said.into_iter().filter_map(warning).collect()
}

/// A log as `run.toml` describes it.
struct Source<'a> {
    path: PathBuf,
    columns: &'a BTreeMap<String, String>,
    scale: &'a BTreeMap<String, f64>,
    clock_offset_s: f64,
    hold: Option<Hold>,
    utc_offset: Option<&'a str>,
    clock: &'a Clock,
}

struct Read {
    columns: BTreeMap<&'static str, Series>,
    facts: LogFacts,
    warnings: Vec<String>,
}

impl Source<'_> {
    fn read(&self, known: &'static [&'static str]) -> Result<Read, LogError> {
        // A heading named for `time` leaves no room for the default heading `time_s`.
        let by_date = self.columns.contains_key("time") && !self.columns.contains_key("time_s");
        let wanted: Vec<Wanted> = known
            .iter()
            .filter(|name| !(by_date && **name == "time_s"))
            .map(|name| Wanted {
                name,
                heading: self.columns.get(*name).cloned().unwrap_or_else(|| (*name).to_owned()),
            })
            .collect();
        let offset = self.utc_offset.and_then(parse_offset).or(self.clock.utc_offset_s);
        let log = textlog::read(&self.path, &wanted, offset)?;
        self.check_named(&log, &wanted)?;
        self.on_the_clock(log)
    }

    /// A heading that `columns` names must be there.
    fn check_named(&self, log: &TextLog, wanted: &[Wanted]) -> Result<(), LogError> {
        let missing = wanted.iter().find(|want| {
            self.columns.contains_key(want.name) && !log.layout.found.iter().any(|found| found.0 == want.name)
        });
        let Some(want) = missing else { return Ok(()) };
        Err(LogError::Headings {
            path: self.path.clone(),
            wanted: format!("`{}` (for {})", want.heading, want.name),
            help: format!("line {} is taken for the headings; correct `columns` in run.toml", log.layout.heading_line),
        })
    }

    fn on_the_clock(&self, mut log: TextLog) -> Result<Read, LogError> {
        let mut warnings = std::mem::take(&mut log.warnings);
        let zero_s = match (log.kind, self.clock.start_unix_s) {
            (TimeKind::Seconds, _) => self.clock.zero_s,
            (TimeKind::Dates, Some(start)) => start,
            (TimeKind::Dates, None) => {
                return Err(LogError::NoStart { path: self.path.clone() });
            }
        };
        let unit = if log.kind == TimeKind::Seconds { self.scale.get("time_s").copied().unwrap_or(1.0) } else { 1.0 };
        for time in &mut log.times {
            *time = *time * unit + self.clock_offset_s - zero_s;
        }
        let order = self.sorted(&log, &mut warnings);
        let spacing_s = median_spacing(&log.times, &order);
        let hold_s = self.hold_s(spacing_s);
        let columns = log.values.iter().filter_map(|(name, values)| {
            let factor = self.scale.get(*name).copied().unwrap_or(1.0);
            let series = series(&log.times, values, &order, factor, hold_s);
            (!series.value.is_empty()).then_some((*name, series))
        });
        let columns = columns.collect();
        let facts = LogFacts {
            path: self.path.clone(),
            dated: log.kind == TimeKind::Dates,
            rows: log.lines.len(),
            from_s: order.first().map_or(0.0, |first| log.times[*first]),
            to_s: order.last().map_or(0.0, |last| log.times[*last]),
            spacing_s,
            hold_s,
            layout: log.layout,
        };
        Ok(Read { columns, facts, warnings })
    }

    fn hold_s(&self, spacing_s: f64) -> f64 {
        match self.hold {
            Some(Hold::Seconds(hold)) => hold,
            Some(Hold::Word(HoldWord::UntilNext)) => f64::INFINITY,
            None => HOLD_SPACINGS * spacing_s,
        }
    }

    /// Rows in order of time, and a warning where that is not the order of the file or times repeat.
    fn sorted(&self, log: &TextLog, warnings: &mut Vec<String>) -> Vec<usize> {
        let path = self.path.display();
        let back: Vec<usize> = (1..log.times.len()).filter(|row| log.times[*row] < log.times[row - 1]).collect();
        let mut order: Vec<usize> = (0..log.times.len()).collect();
        order.sort_by(|a, b| log.times[*a].total_cmp(&log.times[*b]));
        if !back.is_empty() {
            let by_s = back.iter().map(|row| log.times[row - 1] - log.times[*row]).fold(0.0, f64::max);
            warnings.push(format!(
                "{path}: time goes back at {} (by up to {by_s} s); the rows were sorted by time. If the logger restarted or its clock was set, correct the times",
                lines(&back, log)
            ));
        }
        let repeats: Vec<usize> =
            order.windows(2).filter(|pair| log.times[pair[1]] <= log.times[pair[0]]).map(|pair| pair[1]).collect();
        if !repeats.is_empty() {
            warnings.push(format!(
                "{path}: times repeat at {}; of rows at one time the last one counts",
                lines(&repeats, log)
            ));
        }
        order
    }
}

/// "line 7", "lines 7, 9, 11 and 4 more".
fn lines(rows: &[usize], log: &TextLog) -> String {
    /// Lines named in one warning.
    const NAMED: usize = 3;
    let named: Vec<String> = rows.iter().take(NAMED).map(|row| log.lines[*row].to_string()).collect();
    let more = rows.len().saturating_sub(NAMED);
    let more = if more > 0 { format!(" and {more} more") } else { String::new() };
    let word = if rows.len() == 1 { "line" } else { "lines" };
    format!("{word} {}{more}", named.join(", "))
}

fn median_spacing(times: &[f64], order: &[usize]) -> f64 {
    let mut steps: Vec<f64> =
        order.windows(2).map(|pair| times[pair[1]] - times[pair[0]]).filter(|step| *step > 0.0).collect();
    if steps.is_empty() {
        return 0.0;
    }
    let middle = steps.len() / 2;
    *steps.select_nth_unstable_by(middle, f64::total_cmp).1
}

/// The values of one column in order of time; of several at one time the last stays.
fn series(times: &[f64], values: &[Option<f64>], order: &[usize], factor: f64, hold_s: f64) -> Series {
    let mut time_s: Vec<f64> = Vec::new();
    let mut value: Vec<f64> = Vec::new();
    for (row, found) in order.iter().filter_map(|row| values[*row].map(|found| (*row, found))) {
        if time_s.last().is_some_and(|last| times[row] <= *last) {
            if let Some(last) = value.last_mut() {
                *last = found * factor;
            }
        } else {
            time_s.push(times[row]);
            value.push(found * factor);
        }
    }
    Series::new(time_s, value, hold_s)
}

#[cfg(test)]
mod tests {
    use super::*;

    const PLAIN: Clock = Clock { zero_s: 0.0, start_unix_s: None, utc_offset_s: None };

    fn manifest(folder: &std::path::Path, load: &str) -> Manifest {
        let text = format!(
            "[frames]\nfiles = \"*.png\"\ninterval_s = 1\num_per_px = 1\nfilament = \"darker\"\nbare = 0\n\
             [cell]\nplating_edge = [[0, 0], [0, 9]]\nfar_edge = [[9, 0], [9, 9]]\nlog = \"cell.csv\"\n[load]\n{load}"
        );
        Manifest::parse(&text, folder).unwrap()
    }

    fn load_log(text: &str, section: &str, clock: &Clock) -> Result<LoadLog, crate::Error> {
        let folder = tempfile::tempdir().unwrap();
        std::fs::write(folder.path().join("load.csv"), text).unwrap();
        LoadLog::open(&manifest(folder.path(), &format!("log = \"load.csv\"\n{section}")), clock)
    }

    #[test]
    fn headings_scales_and_offsets() {
        let text = "# rig 2\nZeit (min);Kraft [kN]\n0;0,001\n1;0,002\n";
        let section = "columns = { time_s = \"Zeit (min)\", force_n = \"Kraft [kN]\" }\nscale = { time_s = 60.0, force_n = 1000.0 }\nclock_offset_s = 5.0";
        let clock = Clock { zero_s: 2.0, ..PLAIN };
        let log = load_log(text, section, &clock).unwrap();
        let force = log.force_n.unwrap();
        assert_eq!(force.time_s, [3.0, 63.0]);
        assert_eq!(force.value, [1.0, 2.0]);
        assert!((log.facts.unwrap().hold_s - 600.0).abs() < 1e-9);
    }

    #[test]
    fn dates_join_by_the_first_frame() {
        let text = "time,force_n\n2026-03-05 10:00:10,1\n2026-03-05 10:00:20,2\n";
        let clock = Clock { start_unix_s: super::super::parse_stamp("2026-03-05T10:00:00", None).ok(), ..PLAIN };
        assert_eq!(load_log(text, "", &clock).unwrap().at(15.0).force_n, Some(1.0));
        // The logger ran an hour ahead of UTC.
        let east = load_log(text, "utc_offset = \"+01:00\"", &clock).unwrap();
        assert_eq!(east.at(15.0 - 3600.0).force_n, Some(1.0));
        assert!(matches!(load_log(text, "", &PLAIN), Err(crate::Error::Log(LogError::NoStart { .. }))));
    }

    #[test]
    fn unsorted_and_repeated_times_are_mended_and_told() {
        let log = load_log("time_s,force_n\n0,1\n20,3\n10,2\n20,4\n", "", &PLAIN).unwrap();
        assert_eq!(log.force_n.as_ref().unwrap().value, [1.0, 2.0, 4.0]);
        assert!(log.warnings[0].contains("goes back at line 4 (by up to 10 s)"), "{:?}", log.warnings);
        assert!(log.warnings[1].contains("repeat at line 5"), "{:?}", log.warnings);
    }

    #[test]
    fn a_gap_and_an_early_end_are_told_and_absent() {
        let log = load_log("time_s,force_n\n0,1\n10,1\n20,1\n60,1\n", "hold_s = 15.0", &PLAIN).unwrap();
        let times: Vec<f64> = (0..10).map(|frame| f64::from(frame) * 10.0).collect();
        let warnings = log.coverage(&times);
        assert_eq!(warnings.len(), 1);
        assert!(warnings[0].contains("from 40 s to 50 s") && warnings[0].contains("from 80 s to 90 s"), "{warnings:?}");
        assert_eq!((log.at(45.0).force_n, log.at(75.0).force_n), (None, Some(1.0)));
        let changes = load_log("time_s,force_n\n0,1\n60,2\n", "hold_s = \"until-next\"", &PLAIN).unwrap();
        assert_eq!(changes.at(1e6).force_n, Some(2.0));
    }

    #[test]
    fn a_negative_scale_turns_the_sign_and_columns_fill_apart() {
        let log =
            load_log("time_s,force_n,direction_deg\n0,-1,90\n10,,45\n20,-2,\n", "scale = { force_n = -1.0 }", &PLAIN)
                .unwrap();
        assert_eq!(log.at(12.0), LoadAt { force_n: Some(1.0), stress_mpa: None, direction_deg: Some(45.0) });
        assert!(!log.force_is_all_negative());
        assert!(load_log("time_s,force_n\n0,-1\n1,0\n", "", &PLAIN).unwrap().force_is_all_negative());
    }

    #[test]
    fn a_named_heading_that_is_not_there_is_an_error() {
        let error = load_log("time_s,force_n\n0,1\n", "columns = { direction_deg = \"phi\" }", &PLAIN).unwrap_err();
        assert!(error.to_string().contains("`phi` (for direction_deg)"), "{error}");
    }

    #[test]
    fn charge_is_the_current_held_and_absent_over_gaps() {
        let folder = tempfile::tempdir().unwrap();
        std::fs::write(
            folder.path().join("cell.csv"),
            "time_s,current_ma,voltage_v\n0,1,3\n1800,2,3\n3600,-1,3\n100000,1,3\n",
        )
        .unwrap();
        let cell = CellLog::open(&manifest(folder.path(), ""), &PLAIN).unwrap();
        let near = |a: Option<f64>, b: f64| a.is_some_and(|a| (a - b).abs() < 1e-12);
        assert!(near(cell.charge_mah(0.0, 3600.0), 1.5));
        assert!(near(cell.charge_mah(0.0, 5400.0), 1.0));
        assert_eq!(cell.charge_mah(0.0, 99_999.0), None);
    }

    #[test]
    fn a_million_rows_read_in_a_few_seconds() {
        use std::fmt::Write;
        let mut text = String::from("time_s;force_n;direction_deg\n");
        for row in 0..1_000_000 {
            writeln!(text, "{row},5;{},25;90", row % 7).unwrap();
        }
        let started = std::time::Instant::now();
        let log = load_log(&text, "", &PLAIN).unwrap();
        assert_eq!(log.facts.unwrap().rows, 1_000_000);
        assert!(started.elapsed().as_secs() < 20, "{:?}", started.elapsed());
    }
}
