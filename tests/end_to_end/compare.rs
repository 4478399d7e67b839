//! `veerlog compare` as its user runs it: the demo campaign, groupings, refusals, runs without an output, finished outputs alone.

use std::fs;
use std::path::{Path, PathBuf};

use super::kit::{DEMO, Said, Sheet, copy_run, demo, files, run, veerlog, write};

fn compare(args: &[&str]) -> Said {
    let output = veerlog().arg("compare").args(args).output().unwrap();
    let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
    Said { code: output.status.code().unwrap_or(-1), out: text(&output.stdout), err: text(&output.stderr) }
}

fn text(path: &Path) -> &str {
    path.to_str().unwrap()
}

/// The demo runs, each with its report.
fn campaign() -> Vec<&'static str> {
    DEMO.iter().map(|name| text(demo(name))).collect()
}

fn json(out: &Path) -> serde_json::Value {
    serde_json::from_slice(&fs::read(out.join("comparison.json")).unwrap()).unwrap()
}

#[test]
fn the_demo_campaign_is_compared_and_claims_no_more_than_it_can() {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    let mut args = campaign();
    args.extend(["--out", text(&out)]);
    let said = compare(&args).with(0, &[]);
    // Three specimens: whatever the effect's size, no test of theirs can reach p = 0.05, and it is said.
    assert!(said.out.contains("Cannot be shown with these specimens."), "{}", said.out);
    assert!(said.out.contains("No load above the highest tested (180 MPa)"), "{}", said.out);
    let found = json(&out);
    assert_eq!(found["contrast"], serde_json::json!(["no load", "along the plates, 180 MPa"]));
    assert_eq!(found["specimens"], 3);
    // Common practice: compression along the plates turns growth along them; through them, growth goes straight across.
    let groups = Sheet::read(&out, "groups");
    assert_eq!(groups.text("kind").iter().flatten().collect::<Vec<_>>(), ["through", "none", "along", "turning"]);
    let along = groups.numbers("along_plates");
    assert!(along[0] < along[1] && along[1] < along[2], "{along:?}");
    assert_eq!(groups.text("short").iter().flatten().collect::<Vec<_>>(), ["1", "2", "0", "0"]);
    let runs = Sheet::read(&out, "runs");
    assert_eq!(runs.rows(), 6);
    for (run, link) in runs.text("run").iter().zip(runs.text("report")) {
        assert!(out.join(link.unwrap()).is_file(), "{run:?} leads nowhere");
    }
    let names: Vec<PathBuf> = files(&out).into_keys().collect();
    for name in [
        "comparison.html",
        "tables/effects.parquet",
        "figures/depth.svg",
        "figures/roses.png",
        "figures/time-to-short.svg",
    ] {
        assert!(names.contains(&PathBuf::from(name)), "{name} is not in {names:?}");
    }
}

#[test]
fn the_same_runs_give_the_same_bytes_on_any_number_of_threads() {
    let place = tempfile::tempdir().unwrap();
    let [one, other] = ["one", "other"].map(|name| place.path().join(name));
    for (out, threads) in [(&one, "1"), (&other, "3")] {
        let mut args = campaign();
        args.extend(["--out", text(out), "--threads", threads, "--quiet"]);
        compare(&args).with(0, &[]);
    }
    assert_eq!(files(&one), files(&other));
}

#[test]
fn the_user_may_group_and_name_the_contrast() {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    let lines: String =
        DEMO.iter().map(|run| format!("{run},{}\n", if run.starts_with("still") { "free" } else { "held" })).collect();
    write(place.path(), "grouping.csv", format!("run,group\n{lines}"));
    let grouping = place.path().join("grouping.csv");
    let mut args = campaign();
    args.extend(["--out", text(&out), "--grouping", text(&grouping), "--contrast", "free", "held"]);
    compare(&args).with(0, &[]);
    assert_eq!(json(&out)["contrast"], serde_json::json!(["free", "held"]));
    args[campaign().len() + 5] = "fre";
    compare(&args).with(2, &["there is no group \"fre\"", "the groups are"]);
    write(place.path(), "grouping.csv", "run,group\nstill-1,free\n");
    compare(&args).with(2, &["leaves out the run", "add the line"]);
}

#[test]
fn a_reference_band_is_drawn_under_the_name_of_its_source_only() {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    let mut args = campaign();
    args.extend(["--out", text(&out), "--reference-mpa", "150", "200"]);
    assert_eq!(compare(&args).code, 2, "a band without its source is refused");
    args.extend(["--reference-source", "our own pilot"]);
    compare(&args).with(0, &[]);
    let page = fs::read_to_string(out.join("comparison.html")).unwrap();
    assert!(page.contains("The band from 150 to 200 MPa is from: our own pilot. It enters no fit."));
}

/// A copy of a demo run with its output, changed in its `summary.json` or `run.toml`.
fn changed(place: &Path, name: &str, file: &str, from: &str, to: &str) -> PathBuf {
    let copy = place.join(format!("{name}-changed"));
    for (path, bytes) in files(demo(name)) {
        fs::create_dir_all(copy.join(&path).parent().unwrap()).unwrap();
        fs::write(copy.join(&path), bytes).unwrap();
    }
    let path = copy.join(file);
    let text = fs::read_to_string(&path).unwrap();
    assert!(text.contains(from), "{from} is not in {file}");
    fs::write(&path, text.replace(from, to)).unwrap();
    copy
}

#[test]
fn mixed_runs_are_refused_unless_accepted_and_then_it_is_said() {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    let other = changed(place.path(), "along-1", "veerlog/summary.json", "\"um_per_px\": 1.6", "\"um_per_px\": 3.2");
    let args = [text(demo("still-1")), text(demo("still-2")), text(&other), "--out", text(&out)];
    compare(&args).with(2, &["differ in more than the load", "scale (1.6 to 3.2 µm/px)", "--accept-mixed"]);
    assert!(!out.exists());
    let mut args = args.to_vec();
    args.push("--accept-mixed");
    let said = compare(&args).with(0, &["look at: scale differs"]);
    assert!(said.out.contains("The runs differ in more than the load (scale)"), "{}", said.out);
}

#[test]
fn one_recording_twice_is_refused() {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    let twin = changed(place.path(), "still-1", "veerlog/summary.json", "\"run\": \"still-1\"", "\"run\": \"twin\"");
    compare(&[text(demo("still-1")), text(&twin), "--out", text(&out)]).with(2, &["have the same frames"]);
}

#[test]
fn a_changed_run_toml_is_told() {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    let other = changed(place.path(), "along-1", "run.toml", "180 MPa along the plates", "another note");
    compare(&[text(demo("still-1")), text(&other), "--out", text(&out)])
        .with(0, &["look at: along-1: run.toml has changed since its report was made"]);
}

#[test]
fn a_folder_of_runs_is_searched_and_what_is_not_analysed_yet_is() {
    let place = tempfile::tempdir().unwrap();
    let runs = place.path().join("runs");
    for name in ["a", "b"] {
        let small = run();
        copy_run(small.path(), &runs.join(name));
        let toml = runs.join(name).join("run.toml");
        let text = fs::read_to_string(&toml).unwrap().replace("run = \"invented\"", &format!("run = \"{name}\""));
        fs::write(&toml, text).unwrap();
    }
    // The same frames in both would be one recording twice: the second is filmed a grey level brighter.
    let frame = runs.join("b/frames/f7.png");
    let mut picture = image::open(&frame).unwrap().to_luma8();
    picture.pixels_mut().for_each(|p| p.0[0] = p.0[0].saturating_add(1));
    picture.save(&frame).unwrap();
    let out = place.path().join("out");
    compare(&[text(&runs), "--out", text(&out), "--quiet"]).with(0, &["no specimen is named for a, b"]);
    assert!(runs.join("a/veerlog/report.html").is_file());
    // Finished outputs stand alone, without their run folders.
    for name in ["a", "b"] {
        fs::rename(runs.join(name).join("veerlog"), place.path().join(format!("out-{name}"))).unwrap();
    }
    fs::remove_dir_all(&runs).unwrap();
    let [a, b] = ["out-a", "out-b"].map(|name| place.path().join(name));
    compare(&[text(&a), text(&b), "--out", text(&out), "--quiet"]).with(0, &[]);
}

#[test]
fn what_cannot_be_compared_is_said() {
    let place = tempfile::tempdir().unwrap();
    let out = place.path().join("out");
    compare(&[text(demo("still-1")), "--out", text(&out)]).with(2, &["1 of the two or more runs"]);
    compare(&[text(place.path()), "--out", text(&out)]).with(2, &["0 of the two or more runs"]);
    compare(&[text(&place.path().join("none")), "--out", text(&out)]).with(3, &["none"]);
    let broken = changed(place.path(), "along-1", "veerlog/tables/growth.csv", "angle_deg", "angel_deg");
    compare(&[text(demo("still-1")), text(&broken), "--out", text(&out)]).with(2, &["growth.csv", "angle_deg"]);
    let foreign = place.path().join("mine");
    fs::create_dir(&foreign).unwrap();
    write(&foreign, "thesis.txt", "mine");
    compare(&[text(demo("still-1")), text(demo("along-1")), "--out", text(&foreign)]).with(2, &["thesis.txt"]);
}
