//! `report` on input and places that are wrong: what stops it, what it goes on without, and what it says to type next.

use std::fs;
use std::path::Path;

use super::kit::{FRAMES, Sheet, report, run, summary, veerlog, with_log, with_manifest, write};

/// Refused with exit code 2 and all of `parts`, and nothing is written.
#[track_caller]
fn refused(run: &Path, parts: &[&str]) {
    report(run, &[]).with(2, &[parts, &["help: "]].concat());
    assert!(!run.join("veerlog").exists(), "a refused run has written an output");
}

/// Goes on with exit code 0, or 1 with `--strict`, saying all of `parts` on standard error, in the summary and on the page.
#[track_caller]
fn looked_at(run: &Path, parts: &[&str]) {
    report(run, &["--strict"]).with(1, parts);
    let said = report(run, &["--quiet"]).with(0, parts);
    assert_eq!(said.out, "");
    let output = run.join("veerlog");
    let warnings = summary(&output)["warnings"].to_string();
    let page = fs::read_to_string(output.join("report.html")).unwrap();
    for part in parts.iter().filter(|part| !part.contains(['<', '>', '&', '"', '\'', '/'])) {
        assert!(warnings.contains(part), "`{part}` is not in the summary: {warnings}");
        assert!(page.contains(part), "`{part}` is not on the page");
    }
}

/// Frame 4 is set aside for `reason`; the frames beside it are used and the depth still grows past it.
#[track_caller]
fn goes_on_without_frame_4(run: &Path, reason: &str) {
    looked_at(run, &["1 frame was set aside", "the first is frame 4", reason]);
    let frames = Sheet::read(&run.join("veerlog"), "frames");
    assert_eq!(frames.rows(), FRAMES as usize);
    for (frame, stated) in frames.text("reason").iter().enumerate() {
        assert_eq!(stated.is_some(), frame == 4, "frame {frame}: {stated:?}");
    }
    assert!(frames.text("reason")[4].as_ref().unwrap().contains(reason));
    let depth = frames.numbers("depth_um");
    assert!(depth[4].is_none() && depth[7].unwrap() > depth[3].unwrap() + 10.0, "{depth:?}");
    assert_eq!(summary(&run.join("veerlog"))["frames"]["set_aside"][0]["frame"], 4);
}

#[test]
fn a_good_run_is_reported_in_ten_lines() {
    let folder = run();
    let said = report(folder.path(), &["--strict"]).with(0, &[]);
    assert_eq!(said.err, "");
    assert!(said.out.lines().count() <= 10 && said.out.contains("8 of 8 frames used"), "{}", said.out);
    assert!(said.out.contains("no interlock") && said.out.contains("report.html"), "{}", said.out);
    // The line grows 5 px of 1.25 µm a frame from frame 2 on, from x = 8: its centre-line ends half a width short of 38.
    let depth = Sheet::read(&folder.path().join("veerlog"), "frames").numbers("depth_um");
    assert!(depth[1].unwrap().abs() < 1e-9);
    for (frame, depth) in depth.iter().enumerate().skip(3) {
        let true_um = 1.25 * (5.0 * (frame as f64 - 1.0) - 2.0);
        assert!((depth.unwrap() - true_um).abs() < 2.5, "frame {frame}: {depth:?} µm, true {true_um} µm");
    }
}

#[test]
fn a_broken_frame() {
    let folder = run();
    let path = folder.path().join("frames/f4.png");
    let bytes = fs::read(&path).unwrap();
    fs::write(&path, &bytes[..bytes.len() / 2]).unwrap();
    goes_on_without_frame_4(folder.path(), "cannot be decoded");
    fs::write(&path, "").unwrap();
    goes_on_without_frame_4(folder.path(), "the file is empty");
}

#[test]
fn a_repeated_a_blank_and_an_odd_sized_frame() {
    let folder = run();
    let path = folder.path().join("frames/f4.png");
    fs::copy(folder.path().join("frames/f3.png"), &path).unwrap();
    goes_on_without_frame_4(folder.path(), "repeats frame 3");
    image::GrayImage::from_pixel(64, 40, image::Luma([90])).save(&path).unwrap();
    goes_on_without_frame_4(folder.path(), "blank");
    image::GrayImage::from_fn(32, 40, |x, y| image::Luma([(7 * x + y) as u8])).save(&path).unwrap();
    goes_on_without_frame_4(folder.path(), "32 × 40 px, but the frames of this run are 64 × 40 px");
    image::GrayImage::from_pixel(1, 1, image::Luma([90])).save(&path).unwrap();
    goes_on_without_frame_4(folder.path(), "1 × 1 px");
}

#[test]
fn all_frames_broken() {
    let folder = run();
    for frame in 0..FRAMES {
        write(folder.path(), &format!("frames/f{frame}.png"), "not a picture");
    }
    refused(folder.path(), &["none of the 8 frames can be used", "frames/f0.png", "image viewer"]);
}

#[test]
fn broken_bare_frames() {
    let folder = run();
    for frame in 0..2 {
        write(folder.path(), &format!("frames/f{frame}.png"), "not a picture");
    }
    looked_at(folder.path(), &["2 frames were set aside"]);
}

#[test]
fn no_frames_no_manifest_no_folder() {
    refused(with_manifest("frames/*.png", "film/*.png").path(), &["no file matches", "8 files match"]);
    let folder = run();
    refused(&folder.path().join("nowhere"), &["no such folder"]);
    fs::remove_file(folder.path().join("run.toml")).unwrap();
    refused(folder.path(), &["no run.toml", "veerlog draft"]);
}

#[test]
fn a_manifest_that_does_not_hold() {
    refused(with_manifest("um_per_px", "um_per_pixel").path(), &["line 5", "`um_per_pixel`", "um_per_px = 1.25"]);
    for scale in ["0.0", "-1.25", "nan"] {
        let folder = with_manifest("um_per_px = 1.25", &format!("um_per_px = {scale}"));
        refused(folder.path(), &["line 5", "must be above 0", "um_per_px = 1.25"]);
    }
    let outside = with_manifest("[[8, 0], [8, 39]]", "[[800, 0], [800, 39]]");
    refused(outside.path(), &["line 9", "wholly outside the frames, which are 64 × 40 px", "x from 0 to 63"]);
    refused(with_manifest("log = \"load.csv\"", "log = \"../load.csv\"").path(), &["leads out of the run folder"]);
}

/// A log of 1.5 N at these times.
fn log(times: impl IntoIterator<Item = u32>) -> String {
    times.into_iter().fold("time_s,force_n\n".to_owned(), |text, time| format!("{text}{time},1.5\n"))
}

/// Stress of each frame, as reported.
fn stress(run: &Path) -> Vec<Option<f64>> {
    Sheet::read(&run.join("veerlog"), "frames").numbers("stress_mpa")
}

#[test]
fn a_log_with_a_gap() {
    // Samples every second hold for ten: after 4 s, until 14 s. Then nothing up to 46 s.
    let folder = with_log(&log((0..=80).filter(|time| !(5..=45).contains(time))));
    looked_at(folder.path(), &["the load log (force_n) says nothing from 20 s to 40 s (frames 2 to 4)", "hold_s"]);
    let known: Vec<bool> = stress(folder.path()).iter().map(Option::is_some).collect();
    assert_eq!(known, [true, true, false, false, false, true, true, true]);
    let growth = Sheet::read(&folder.path().join("veerlog"), "growth");
    for (time, stress) in growth.numbers("load_time_s").iter().zip(growth.numbers("stress_mpa")) {
        assert_eq!(stress.is_some(), time.unwrap() <= 14.0 || time.unwrap() >= 46.0, "piece of {time:?} s");
    }
}

#[test]
fn a_log_that_ends_early() {
    let folder = with_log(&log(0..=30));
    looked_at(folder.path(), &["says nothing from 50 s to 70 s"]);
    assert_eq!(stress(folder.path()).iter().filter(|s| s.is_some()).count(), 5);
}

#[test]
fn a_log_out_of_order_and_with_repeats() {
    let folder = with_log("time_s,force_n\n0,1.5\n10,1.5\n30,3\n20,1.5\n40,3\n40,4.5\n50,3\n60,3\n70,3\n");
    looked_at(folder.path(), &["time goes back at line 5", "times repeat at line 7", "the last one counts"]);
    // 1.5 N make 108 MPa (6FL/(bh²), 12 mm, 4 × 0.5 mm).
    let stress = stress(folder.path());
    for (frame, newtons) in [1.5, 1.5, 1.5, 3.0, 4.5, 3.0, 3.0, 3.0].into_iter().enumerate() {
        assert!((stress[frame].unwrap() - 72.0 * newtons).abs() < 1e-6, "frame {frame}: {stress:?}");
    }
}

#[test]
fn logs_that_cannot_be_read() {
    refused(with_log("time_s,force_n\n0,1.5\n10,OVL\n").path(), &["load.csv, line 3", "`OVL`"]);
    let folder = with_manifest("log = \"load.csv\"", "log = \"lode.csv\"");
    report(folder.path(), &[]).with(3, &["lode.csv", "help: "]);
}

#[test]
fn a_place_that_cannot_be_written() {
    let folder = run();
    write(folder.path(), "notes.txt", "mine");
    let below = folder.path().join("notes.txt/out");
    report(folder.path(), &["--out", below.to_str().unwrap()]).with(3, &["notes.txt", "--out DIR"]);
    let file = folder.path().join("notes.txt");
    report(folder.path(), &["--out", file.to_str().unwrap()]).with(2, &["notes.txt", "is not a folder", "--out DIR"]);
    assert_eq!(fs::read_to_string(file).unwrap(), "mine");
}

#[test]
fn a_folder_that_holds_files_of_others() {
    let folder = run();
    fs::create_dir(folder.path().join("veerlog")).unwrap();
    write(folder.path(), "veerlog/thesis.txt", "mine");
    report(folder.path(), &[]).with(2, &["thesis.txt", "nothing was changed", "--out DIR"]);
    // A mark of ours does not make a file of the user ours.
    let marked = folder.path().join("marked");
    report(folder.path(), &["--out", marked.to_str().unwrap()]).with(0, &[]);
    write(folder.path(), "marked/mine.txt", "mine");
    report(folder.path(), &["--out", marked.to_str().unwrap()]).with(2, &["mine.txt"]);
    // The run folder itself and the frames are no place for an output.
    for place in ["", "frames"] {
        report(folder.path(), &["--out", folder.path().join(place).to_str().unwrap()])
            .with(2, &["nothing was changed"]);
    }
    assert!(folder.path().join("frames/f7.png").exists() && folder.path().join("veerlog/thesis.txt").exists());
}

#[test]
fn an_end_that_is_no_time_of_the_run() {
    let folder = run();
    for until in ["-1", "nan", "inf"] {
        refused_until(folder.path(), until);
    }
    report(folder.path(), &["--until", "0"]).with(0, &[]);
    let frames = Sheet::read(&folder.path().join("veerlog"), "frames");
    assert_eq!(frames.rows(), 1, "the first frame is at 0 s");
    report(folder.path(), &["--until", "1e300"]).with(0, &[]);
    assert_eq!(Sheet::read(&folder.path().join("veerlog"), "frames").rows(), FRAMES as usize);
}

#[track_caller]
fn refused_until(run: &Path, until: &str) {
    report(run, &["--until", until]).with(2, &["no time of the run", "type seconds"]);
}

#[test]
fn usage_that_is_wrong() {
    let folder = run();
    for wrong in [&["--thread", "2"][..], &["--threads", "0"], &["--until", "soon"], &["--save", "videos"]] {
        let said = report(folder.path(), wrong).with(2, &["error: "]);
        assert_eq!(said.out, "");
    }
    assert_eq!(veerlog().arg("report").output().unwrap().status.code(), Some(2));
}
