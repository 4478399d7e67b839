//! The same run gives the same bytes: again, on other numbers of threads, and for what an earlier end leaves of it.

use std::collections::BTreeMap;
use std::fs;
use std::path::{Path, PathBuf};

use super::kit::{DEMO, campaign, demo, files, hard, report};

/// All an output holds that a script reads: tables, traces, summary.
fn read_by_scripts(output: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
    let mut all = files(output);
    all.retain(|name, _| {
        name.starts_with("tables") || name.starts_with("traces.ndjson") || name.starts_with("summary.json")
    });
    assert_eq!(all.len(), 20, "{:?}", all.keys());
    all
}

/// Reports a run that has its output already, elsewhere and with other arguments: nothing may differ.
fn same_again(run: &Path, more: &[&str]) {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    report(run, &[&["--quiet", "--out", out.to_str().unwrap()], more].concat()).with(0, &[]);
    let (then, now) = (read_by_scripts(&run.join("veerlog")), read_by_scripts(&out));
    for (name, bytes) in &then {
        assert!(now[name] == *bytes, "{} of {} differs with {more:?}", name.display(), run.display());
    }
}

/// The demo run with the fewest bytes.
fn smallest() -> &'static str {
    let size = |name: &&&str| files(&campaign().join(name)).values().map(Vec::len).sum::<usize>();
    DEMO.iter().min_by_key(size).unwrap()
}

#[test]
fn a_demo_run_gives_the_same_bytes_on_one_and_on_two_threads() {
    same_again(demo(smallest()), &["--threads", "1"]);
    same_again(demo(smallest()), &["--threads", "2"]);
}

#[test]
fn a_hard_run_gives_the_same_bytes_again_and_on_any_number_of_threads() {
    same_again(hard(), &[]);
    for threads in ["1", "2", "5"] {
        same_again(hard(), &["--threads", threads]);
    }
}

/// The rows of `forecasts.csv` that were issued by `until`, as bytes, and how many there are.
fn issued_by(output: &Path, until: f64) -> (String, usize) {
    let text = fs::read_to_string(output.join("tables/forecasts.csv")).unwrap();
    let (head, rows) = text.split_once('\n').unwrap();
    let early = |row: &&str| row.split(',').nth(1).unwrap().parse::<f64>().unwrap() <= until;
    let early: Vec<&str> = rows.lines().filter(early).collect();
    (format!("{head}\n{}\n", early.join("\n")), early.len())
}

/// Cuts a run at `until`: its forecasts are those of the whole run up to there, and nothing later is in any table.
fn forecasts_do_not_look_ahead(run: &Path, until: f64) {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    report(run, &["--quiet", "--out", out.to_str().unwrap(), "--until", &until.to_string()]).with(0, &[]);
    let (whole, rows) = issued_by(&run.join("veerlog"), until);
    assert!(rows > 1, "{} has issued {rows} forecasts by {until} s: nothing to compare", run.display());
    assert_eq!(fs::read_to_string(out.join("tables/forecasts.csv")).unwrap(), whole, "{} to {until} s", run.display());
    for table in ["frames", "paths", "growth", "filaments"] {
        let column = if table == "filaments" { "first_time_s" } else { "time_s" };
        let times = super::kit::Sheet::read(&out, table).numbers(column);
        assert!(times.iter().flatten().all(|t| *t <= until), "{table} of {} looks past {until} s", run.display());
    }
}

#[test]
fn a_run_that_shorts_forecast_no_later_than_it_knew() {
    forecasts_do_not_look_ahead(demo("still-1"), 400.0);
    forecasts_do_not_look_ahead(demo("still-1"), 815.0);
}

#[test]
fn a_run_that_does_not_short_forecast_no_later_than_it_knew() {
    forecasts_do_not_look_ahead(demo("turning-1"), 450.0);
    forecasts_do_not_look_ahead(demo("turning-1"), 900.0);
}

#[test]
fn a_hard_run_forecast_no_later_than_it_knew() {
    let output = hard().join("veerlog");
    let issued: Vec<f64> =
        super::kit::Sheet::read(&output, "forecasts").numbers("issued_at_s").into_iter().flatten().collect();
    assert!(issued.len() >= 4, "the hard run has issued only {issued:?}");
    forecasts_do_not_look_ahead(hard(), issued[issued.len() / 3]);
    forecasts_do_not_look_ahead(hard(), issued[2 * issued.len() / 3] + 0.5);
}
