//! What the tests of the program share: a small invented run, the demo campaign analysed once, the program run on a folder, and its
//! tables read back. Nothing is written into the project: copies lie in temporary folders or below the build's own `tmp`.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::OnceLock;

use polars::prelude::{CsvReadOptions, DataFrame, SerReader};
use tempfile::TempDir;
use veerlog::synth::{Scenario, write_run};

/// `run.toml` of the small run.
pub(crate) const MANIFEST: &str = r#"run = "invented"
[frames]
files = "frames/*.png"
interval_s = 10.0
um_per_px = 1.25
filament = "darker"
bare = 2
[cell]
plating_edge = [[8, 0], [8, 39]]
far_edge = [[55, 0], [55, 39]]
[load]
log = "load.csv"
direction_deg = 90.0
fixture = "cantilever"
width_mm = 4.0
thickness_mm = 0.5
arm_mm = 12.0
side = "compressed"
"#;

/// Frames of the small run.
pub(crate) const FRAMES: u32 = 8;

/// A good run of eight frames, 10 s apart: two dark bands, and a line that grows between them.
pub(crate) fn run() -> TempDir {
    let folder = tempfile::tempdir().unwrap();
    fs::create_dir(folder.path().join("frames")).unwrap();
    for frame in 0..FRAMES {
        let picture = image::GrayImage::from_fn(64, 40, |x, y| {
            let grain = (x / 2 * 193 + y / 2 * 71 + (x / 2) * (y / 2) * 37) % 23;
            let noise = (x * 37 + y * 91 + x * y + frame) % 5;
            let texture = u8::try_from(grain + noise).unwrap();
            let line = (18..21).contains(&y) && (8..8 + 5 * frame.saturating_sub(1)).contains(&x);
            let level = if !(8..=55).contains(&x) {
                60
            } else if line {
                80
            } else {
                150
            };
            image::Luma([level + texture])
        });
        picture.save(folder.path().join(format!("frames/f{frame}.png"))).unwrap();
    }
    let rows: String = (0..FRAMES).map(|row| format!("{},1.5\n", 10 * row)).collect();
    write(folder.path(), "load.csv", format!("time_s,force_n\n{rows}"));
    write(folder.path(), "run.toml", MANIFEST);
    folder
}

/// Writes a file of a run.
pub(crate) fn write(folder: &Path, name: &str, text: impl AsRef<[u8]>) {
    fs::write(folder.join(name), text).unwrap();
}

/// The program.
pub(crate) fn veerlog() -> Command {
    Command::new(env!("CARGO_BIN_EXE_veerlog"))
}

/// The small run with one thing changed in its `run.toml`.
pub(crate) fn with_manifest(from: &str, to: &str) -> TempDir {
    let folder = run();
    assert!(MANIFEST.contains(from));
    write(folder.path(), "run.toml", MANIFEST.replace(from, to));
    folder
}

/// The small run with another load log.
pub(crate) fn with_log(text: &str) -> TempDir {
    let folder = run();
    write(folder.path(), "load.csv", text);
    folder
}

/// What the program said and how it ended.
pub(crate) struct Said {
    pub(crate) code: i32,
    pub(crate) out: String,
    pub(crate) err: String,
}

impl Said {
    /// The exit code was `code` and standard error holds all of `parts`.
    #[track_caller]
    pub(crate) fn with(self, code: i32, parts: &[&str]) -> Self {
        assert_eq!(self.code, code, "{}{}", self.out, self.err);
        for part in parts {
            assert!(self.err.contains(part), "`{part}` is not said in:\n{}", self.err);
        }
        assert!(!self.err.contains("panicked"), "{}", self.err);
        self
    }
}

/// `veerlog report RUN` with more arguments.
pub(crate) fn report(run: &Path, more: &[&str]) -> Said {
    let output = veerlog().arg("report").arg(run).args(more).output().unwrap();
    let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
    Said { code: output.status.code().unwrap_or(-1), out: text(&output.stdout), err: text(&output.stderr) }
}

/// Every file under a folder, by its path from there, with its bytes.
pub(crate) fn files(folder: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
    let mut found = BTreeMap::new();
    let mut open = vec![folder.to_owned()];
    while let Some(next) = open.pop() {
        for entry in fs::read_dir(&next).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                open.push(path);
            } else {
                found.insert(path.strip_prefix(folder).unwrap().to_owned(), fs::read(&path).unwrap());
            }
        }
    }
    found
}

/// Copies what a user put into a run folder.
pub(crate) fn copy_run(from: &Path, to: &Path) {
    for (name, bytes) in files(from) {
        if !name.starts_with("veerlog") && !name.starts_with(".veerlog-cache") {
            fs::create_dir_all(to.join(&name).parent().unwrap()).unwrap();
            fs::write(to.join(&name), bytes).unwrap();
        }
    }
}

/// The folder of the demo campaign.
pub(crate) fn campaign() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("synthetic-frames")
}

/// The runs of the demo campaign.
pub(crate) const DEMO: [&str; 6] = ["still-1", "still-2", "along-1", "along-2", "through-1", "turning-1"];

/// A place for a run that several tests read, empty; below the build folder, so that each test run takes the same one.
fn shared(name: &str) -> PathBuf {
    let place = Path::new(env!("CARGO_TARGET_TMPDIR")).join("end_to_end").join(name);
    if place.exists() {
        fs::remove_dir_all(&place).unwrap();
    }
    fs::create_dir_all(&place).unwrap();
    place
}

/// A copy of a demo run with its report in `veerlog/`: made once, for reading only.
pub(crate) fn demo(name: &str) -> &'static Path {
    static RUNS: [OnceLock<PathBuf>; DEMO.len()] = [const { OnceLock::new() }; DEMO.len()];
    let at = DEMO.iter().position(|n| *n == name).unwrap();
    RUNS[at].get_or_init(|| {
        let place = shared(name);
        copy_run(&campaign().join(name), &place);
        report(&place, &["--quiet"]).with(0, &[]);
        place
    })
}

/// A small run of the hardest grade, with a broken and a repeated frame, and its report: made once, for reading only.
pub(crate) fn hard() -> &'static Path {
    static RUN: OnceLock<PathBuf> = OnceLock::new();
    RUN.get_or_init(|| {
        let text = "name = \"hard\"\nseed = 21\ngrade = \"hard\"\nwidth = 200\nheight = 150\nframes = 24\nbare = 5\n\
                    [load]\nfixture = \"stress\"\nstages = [{ at_s = 0.0, stress_mpa = 120.0, direction_deg = 20.0 }]\n\
                    [growth]\nfilaments = 3\nwidth_px = [3.0, 5.0]\n[imaging]\ncontrast = 0.16\nbroken = 2\nrepeated = 1\n";
        let place = shared("hard");
        write_run(&Scenario::parse(text, Path::new("hard")).unwrap(), &place).unwrap();
        report(&place, &["--quiet"]).with(0, &[]);
        place
    })
}

/// A table of an output.
pub(crate) struct Sheet(DataFrame);

impl Sheet {
    /// Reads `tables/NAME.csv`, every field as text; an empty one is absent.
    pub(crate) fn read(output: &Path, name: &str) -> Self {
        let path = output.join(format!("tables/{name}.csv"));
        let options = CsvReadOptions::default().with_infer_schema_length(Some(0));
        Self(options.try_into_reader_with_file_path(Some(path)).unwrap().finish().unwrap())
    }

    /// Its headings.
    pub(crate) fn headings(&self) -> Vec<String> {
        self.0.get_column_names().iter().map(|name| name.to_string()).collect()
    }

    /// Number of rows.
    pub(crate) fn rows(&self) -> usize {
        self.0.height()
    }

    /// A column as text.
    pub(crate) fn text(&self, column: &str) -> Vec<Option<String>> {
        self.0.column(column).unwrap().str().unwrap().iter().map(|field| field.map(str::to_owned)).collect()
    }

    /// A column as numbers.
    pub(crate) fn numbers(&self, column: &str) -> Vec<Option<f64>> {
        self.text(column).into_iter().map(|field| field.map(|text| text.parse().unwrap())).collect()
    }
}

/// `summary.json` of an output.
pub(crate) fn summary(output: &Path) -> serde_json::Value {
    serde_json::from_slice(&fs::read(output.join("summary.json")).unwrap()).unwrap()
}
