//! Synthetic runs: the same bytes every time, nothing overwritten, a truth that scores itself perfectly, and a demo campaign that
//! shows the facts of the trade.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

use tempfile::tempdir;
use veerlog::synth::score::{Recorded, Summary, score_run};
use veerlog::synth::{Grade, Imaging, Scenario, SynthError, draw_bare, grow, rebuild, write_run};

fn campaign() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("synthetic-frames")
}

/// Every file under `folder`, by its path from there.
fn files(folder: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
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

/// Only what a rebuild writes: outputs and caches of other commands may lie beside it.
fn rebuilt(folder: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
    let ours = ["frames", "truth", "run.toml", "load.csv", "cell.csv", "scenario.toml"];
    let own = |path: &PathBuf| ours.iter().any(|name| path.starts_with(name));
    files(folder).into_iter().filter(|(path, _)| own(path)).collect()
}

/// A small hard run of few frames.
fn small(seed: u64) -> Scenario {
    let mut scenario = Scenario { width: 96, height: 80, frames: 9, bare: 3, seed, ..Scenario::default() };
    scenario.imaging = Imaging::of(Grade::Hard);
    scenario.growth.filaments = 2;
    scenario.settle().unwrap()
}

#[test]
fn the_smallest_demo_run_is_rebuilt_byte_for_byte() {
    let size = |path: &PathBuf| rebuilt(path).values().map(Vec::len).sum::<usize>();
    let runs =
        fs::read_dir(campaign()).unwrap().map(|e| e.unwrap().path()).filter(|p| p.join("scenario.toml").exists());
    let smallest = runs.min_by_key(size).expect("the campaign holds runs");
    let folder = tempdir().unwrap();
    fs::copy(smallest.join("scenario.toml"), folder.path().join("scenario.toml")).unwrap();
    rebuild(folder.path()).unwrap();
    let (then, now) = (rebuilt(&smallest), rebuilt(folder.path()));
    assert_eq!(then.keys().collect::<Vec<_>>(), now.keys().collect::<Vec<_>>());
    for (path, bytes) in &then {
        assert!(now[path] == *bytes, "{} differs in {}", path.display(), smallest.display());
    }
}

#[test]
fn bytes_do_not_depend_on_the_number_of_threads() {
    let written = |threads: usize| {
        let folder = tempdir().unwrap();
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| write_run(&small(5), folder.path())).unwrap();
        files(folder.path())
    };
    assert!(written(1) == written(3));
}

#[test]
fn lost_frames_are_as_the_truth_says() {
    let folder = tempdir().unwrap();
    write_run(&small(5), folder.path()).unwrap();
    let truth = Recorded::read(folder.path()).unwrap();
    let mut last = Vec::new();
    for row in &truth.frames {
        let bytes = fs::read(folder.path().join(format!("frames/frame_{:05}.png", row.frame))).unwrap();
        let good = image::load_from_memory(&bytes).is_ok() && bytes != last;
        assert_eq!(good, row.usable, "frame {}", row.frame);
        last = bytes;
    }
    assert!(truth.frames.iter().any(|f| !f.usable));
}

#[test]
fn nothing_is_overwritten() {
    let folder = tempdir().unwrap();
    fs::write(folder.path().join("mine.txt"), "keep").unwrap();
    assert!(matches!(write_run(&small(1), folder.path()), Err(SynthError::Occupied { .. })));
    fs::write(folder.path().join("scenario.toml"), "seed = 1").unwrap();
    fs::write(folder.path().join("run.toml"), "mine").unwrap();
    assert!(matches!(rebuild(folder.path()), Err(SynthError::Occupied { .. })));
    assert_eq!(files(folder.path()).len(), 3);
}

/// Writes an output that repeats the truth of a run.
fn write_perfect_output(run: &Path) {
    let truth = Recorded::read(run).unwrap();
    let tables = run.join("veerlog/tables");
    fs::create_dir_all(&tables).unwrap();
    let shown = |v: Option<f64>| v.map_or(String::new(), |v| v.to_string());
    let mut frames = String::from(
        "frame,usable,reason,drift_x_px,drift_y_px,depth_um,u_depth_um,length_um,filaments,unrooted,growth_alignment\n",
    );
    for f in &truth.frames {
        let filaments = truth.paths.iter().filter(|p| p.parent.is_none() && p.points[0][2] <= f.time_s).count();
        frames += &format!(
            "{},{},,{},{},{},0.1,{},{filaments},0,{}\n",
            f.frame,
            f.usable,
            shown(f.drift_x_px),
            shown(f.drift_y_px),
            f.depth_um,
            f.length_um,
            shown(f.growth_alignment)
        );
    }
    let last = truth.frames.len() - 1;
    let (mut paths, mut traces, mut growth) = (
        String::from("frame,x1_px,y1_px,ends_in\n"),
        String::new(),
        String::from("frame,x_px,y_px,angle_deg,u_angle_deg\n"),
    );
    let mut filaments = String::from("filament,root\n");
    for p in &truth.paths {
        let [x, y, ..] = *p.points.last().unwrap();
        paths += &format!("{last},{x},{y},{}\n", p.ends_in);
        traces += &format!("{}\n", serde_json::json!({ "filament": p.filament, "path": p.path, "points": p.points }));
        if p.parent.is_none() {
            filaments += &format!("{},plating\n", p.filament);
        }
        let i = p.points.len() / 2;
        let ([x, y, time, _], [x0, y0, ..], [x1, y1, ..]) =
            (p.points[i], p.points[i.saturating_sub(9)], p.points[(i + 9).min(p.points.len() - 1)]);
        let frame = truth.frames.iter().position(|f| f.time_s >= time).unwrap_or(last);
        let angle = (y0 - y1).atan2(x1 - x0).to_degrees().rem_euclid(180.0);
        growth += &format!("{frame},{x},{y},{angle},1\n");
    }
    let forecasts = String::from("frame,issued_at_s,p10_s,p50_s,p90_s\n");
    let tables =
        [("frames", frames), ("paths", paths), ("growth", growth), ("filaments", filaments), ("forecasts", forecasts)];
    for (name, text) in tables {
        fs::write(run.join(format!("veerlog/tables/{name}.csv")), text).unwrap();
    }
    fs::write(run.join("veerlog/traces.ndjson"), traces).unwrap();
}

#[test]
fn the_truth_itself_scores_perfectly() {
    for seed in [3, 8] {
        let folder = tempdir().unwrap();
        let mut scenario = Scenario { width: 240, height: 180, frames: 24, seed, ..Scenario::default() };
        scenario.growth.width_px = [2.0, 4.0];
        write_run(&scenario.settle().unwrap(), folder.path()).unwrap();
        write_perfect_output(folder.path());
        let score = score_run(folder.path(), None).unwrap();
        assert!(score.depth_p95_px.unwrap() < 1e-9 && score.drift_rms_px.unwrap() < 1e-9, "{score:?}");
        assert!(score.precision.unwrap() > 0.999 && score.recall.unwrap() > 0.999, "{score:?}");
        assert!(score.offset_rms_px.unwrap() < 0.05 && (score.length_ratio.unwrap() - 1.0).abs() < 1e-9, "{score:?}");
        assert!(score.tips_f1.unwrap() > 0.85 && score.direction_median_deg.unwrap() < 3.0, "{score:?}");
        assert_eq!((score.early_frames, score.usable_wrong), (Some(0.0), Some(0.0)));
        assert_eq!(score.filament_ratio, Some(1.0));
        assert!(Summary::of(vec![score]).to_string().contains("drift error"));
    }
}

#[test]
fn a_cell_without_growth_has_an_empty_truth() {
    let folder = tempdir().unwrap();
    let mut scenario = draw_bare(Grade::Typical, 2);
    scenario.frames = 4;
    scenario.bare = 2;
    write_run(&scenario.settle().unwrap(), folder.path()).unwrap();
    write_perfect_output(folder.path());
    let score = score_run(folder.path(), None).unwrap();
    assert_eq!((score.false_filaments, score.precision, score.depth_median_px), (Some(0.0), None, None));
}

#[test]
fn a_missing_output_is_named() {
    let folder = tempdir().unwrap();
    write_run(&small(2), folder.path()).unwrap();
    let message = score_run(folder.path(), None).unwrap_err().to_string();
    assert!(message.contains("veerlog report"), "{message}");
}

/// Common practice (no published source): growth follows the axis of in-plane compression; 150–200 MPa along the plates keep filaments
/// from crossing; pressing the plates together hastens the short; a load steers growth, it does not stop it.
#[test]
fn the_demo_campaign_shows_the_facts_of_the_trade() {
    let truth = |name: &str| Recorded::read(&campaign().join(name)).unwrap();
    let mean_alignment = |truth: &Recorded, from: f64, to: f64| {
        let rows = truth.frames.iter().filter(|f| f.time_s > from && f.time_s <= to);
        let values: Vec<f64> = rows.filter_map(|f| f.growth_alignment).collect();
        values.iter().sum::<f64>() / values.len() as f64
    };
    let still = [truth("still-1"), truth("still-2")];
    let first_short = still.iter().filter_map(|t| t.short.time_s).fold(f64::INFINITY, f64::min);
    let length = |truth: &Recorded| truth.frames.iter().rev().find(|f| f.time_s <= first_short).unwrap().length_um;
    let (low, high) = (length(&still[0]).min(length(&still[1])), length(&still[0]).max(length(&still[1])));

    for along in [truth("along-1"), truth("along-2")] {
        assert_eq!(along.short.time_s, None);
        assert!(along.frames.last().unwrap().depth_fraction < 0.8);
        assert!(mean_alignment(&along, 0.0, 1e9) > 0.3);
        // Two unloaded runs give a scatter of their own difference either way.
        assert!(length(&along) > low - (high - low) && length(&along) < high + (high - low), "{}", length(&along));
    }
    let through = truth("through-1");
    assert!(through.short.time_s.unwrap() < first_short);
    assert!(mean_alignment(&through, 0.0, 1e9) > 0.5);
    let turning = truth("turning-1");
    assert!(mean_alignment(&turning, 500.0, 660.0) > 0.3, "before the turn growth lies along the load");
    assert!(mean_alignment(&turning, 660.0, 780.0) < 0.0, "just after it growth lies across the new axis");
    assert!(mean_alignment(&turning, 1000.0, 1200.0) > 0.3, "and then follows it");
}

/// The same facts on other seeds of the same scenarios, so that they are the law's and not one draw's.
#[test]
fn the_facts_do_not_hang_on_one_seed() {
    let contact = |name: &str, seed: u64| {
        let mut scenario = Scenario::load(&campaign().join(name).join("scenario.toml")).unwrap();
        scenario.seed = seed;
        grow(&scenario).contact.map_or(f64::INFINITY, |(time, _)| time)
    };
    let middle = |name: &str| {
        let mut times: Vec<f64> = (100..121).map(|seed| contact(name, seed)).collect();
        times.sort_by(f64::total_cmp);
        times[times.len() / 2]
    };
    let bridged_along = (100..121).filter(|&seed| contact("along-1", seed).is_finite()).count();
    assert!(bridged_along <= 1, "{bridged_along} of 21 bridged at +180 MPa");
    let (through, still) = (middle("through-1"), middle("still-1").min(middle("still-2")));
    assert!(through < still, "pressed {through} s, unloaded {still} s");
}
