//! Input that is wrong: each fault ends in the right exit code and in a message that says what happened, where, and
//! what to type. The run is the small one of `kit`.

use std::fs;
use std::path::Path;

use super::kit::{FRAMES, MANIFEST, run, veerlog, with_log, with_manifest, write};

/// Exit code, standard output and standard error of `check`.
fn check(folder: &Path, more: &[&str]) -> (i32, String, String) {
    let output = veerlog().arg("check").arg(folder).args(more).output().unwrap();
    let text = |bytes: &[u8]| String::from_utf8_lossy(bytes).into_owned();
    (output.status.code().unwrap(), text(&output.stdout), text(&output.stderr))
}

/// `check` must refuse the run with exit code 2 and say all of `said`.
fn refused(folder: &Path, said: &[&str]) {
    let (code, _, message) = check(folder, &[]);
    assert_eq!(code, 2, "{message}");
    for part in said {
        assert!(message.contains(part), "`{part}` is not said in:\n{message}");
    }
}

/// `check` must take the run but point at `said`: exit code 0, or 1 with --strict.
fn looked_at(folder: &Path, said: &[&str]) {
    let (code, _, message) = check(folder, &[]);
    assert_eq!(code, 0, "{message}");
    for part in said {
        assert!(message.contains(part), "`{part}` is not said in:\n{message}");
    }
    assert_eq!(check(folder, &["--strict"]).0, 1);
}

#[test]
fn a_good_run_passes_and_fits_one_screen() {
    let folder = run();
    let (code, text, message) = check(folder.path(), &["--strict"]);
    assert_eq!((code, message.as_str()), (0, ""), "{text}");
    assert!(text.contains("8 of 8 usable") && text.contains("stress 108.0000 MPa (compression)"), "{text}");
    assert!(text.lines().count() <= 30, "{text}");
    assert_eq!(check(folder.path(), &["--threads", "1"]).1, check(folder.path(), &["--threads", "2"]).1);
    assert_eq!(check(folder.path(), &["--quiet"]).1, "");
}

#[test]
fn no_folder_and_no_manifest() {
    let folder = run();
    refused(&folder.path().join("nowhere"), &["no such folder", "run.toml"]);
    fs::remove_file(folder.path().join("run.toml")).unwrap();
    refused(folder.path(), &["no run.toml in this folder", "veerlog draft"]);
}

#[test]
fn an_unknown_key_names_its_line_and_the_nearest_known() {
    refused(
        with_manifest("um_per_px", "um_per_pixel").path(),
        &["run.toml, line 5: unknown key `um_per_pixel`", "um_per_px = 1.25"],
    );
    refused(with_manifest("arm_mm", "arm").path(), &["line 17", "unknown key `arm` in [load]", "`arm_mm`"]);
}

#[test]
fn a_manifest_that_is_none() {
    refused(with_manifest(MANIFEST, "run = ").path(), &["run.toml, line 1"]);
    refused(with_manifest("bare = 2\n", "").path(), &["`bare` is missing in [frames]", "add the line bare = 6"]);
    refused(with_manifest("bare = 2", "bare = 9").path(), &["line 7", "bare is 9, but there are only 8 frames"]);
    let folder = run();
    write(folder.path(), "run.toml", b"run = \"\xff\"");
    refused(folder.path(), &["not UTF-8"]);
    write(folder.path(), "run.toml", "#".repeat(10 << 20));
    refused(folder.path(), &["10485760 bytes are too many"]);
}

#[test]
fn no_frames() {
    refused(
        with_manifest("frames/*.png", "film/*.png").path(),
        &["no file matches files = \"film/*.png\"", "8 files match files = \"frames/*.png\""],
    );
    refused(with_manifest("frames/*.png", "frames/[.png").path(), &["line 3", "no file pattern"]);
}

#[test]
fn one_broken_frame_among_good_ones_is_set_aside() {
    let folder = run();
    let path = folder.path().join("frames/f4.png");
    let bytes = fs::read(&path).unwrap();
    fs::write(&path, &bytes[..bytes.len() / 2]).unwrap();
    looked_at(folder.path(), &["frame 4 (frames/f4.png) would be set aside: cannot be decoded"]);
    fs::copy(folder.path().join("frames/f3.png"), &path).unwrap();
    looked_at(folder.path(), &["frame 4 (frames/f4.png) would be set aside: repeats frame 3"]);
    image::GrayImage::new(64, 40).save(&path).unwrap();
    looked_at(folder.path(), &["blank"]);
    image::GrayImage::from_fn(32, 40, |x, _| image::Luma([u8::try_from(x).unwrap()])).save(&path).unwrap();
    looked_at(folder.path(), &["32 × 40 px, but the frames of this run are 64 × 40 px"]);
    fs::remove_file(&path).unwrap();
    looked_at(
        folder.path(),
        &["frame numbers jump 1 time(s), first from frames/f3.png to frames/f5.png", "by_number = true"],
    );
}

#[test]
fn all_frames_broken() {
    let folder = run();
    for frame in 0..FRAMES {
        write(folder.path(), &format!("frames/f{frame}.png"), "not a picture");
    }
    refused(folder.path(), &["none of the 8 frames can be used", "frames/f0.png"]);
    // Headers that read, pictures that do not.
    let folder = run();
    for frame in 0..FRAMES {
        let path = folder.path().join(format!("frames/f{frame}.png"));
        let bytes = fs::read(&path).unwrap();
        fs::write(&path, &bytes[..100]).unwrap();
    }
    refused(folder.path(), &["none of the 8 frames can be used"]);
}

#[test]
fn logs_with_gaps_disorder_repeats_and_an_early_end() {
    let rows = |times: &[u32]| -> String {
        times.iter().fold("time_s,force_n\n".to_owned(), |text, time| format!("{text}{time},1.5\n"))
    };
    let seconds: Vec<u32> = (0..=70).collect();
    let gap: Vec<u32> = seconds.iter().copied().filter(|time| !(5..=45).contains(time)).collect();
    looked_at(
        with_log(&rows(&gap)).path(),
        &["the load log (force_n) says nothing from 20 s to 40 s (frames 2 to 4)", "hold_s"],
    );
    looked_at(with_log(&rows(&seconds[..31])).path(), &["says nothing from 50 s to 70 s"]);
    looked_at(with_log(&rows(&[0, 10, 30, 20, 40, 50, 60, 70])).path(), &["load.csv: time goes back at line 5"]);
    looked_at(
        with_log(&rows(&[0, 10, 20, 20, 30, 40, 50, 60, 70])).path(),
        &["load.csv: times repeat at line 5", "the last one counts"],
    );
    looked_at(with_log(&rows(&[5000, 5010])).path(), &["no frame is covered", "clock_offset_s"]);
}

#[test]
fn logs_that_cannot_be_read() {
    refused(
        with_log("time_s,force_n\n0,1.5\n10,OVL\n").path(),
        &["load.csv, line 3: `OVL` under `force_n` is no number"],
    );
    refused(
        with_log("Zeit;Kraft [kN]\n0;1\n").path(),
        &["no line holds the headings", "columns = { time_s = \"Zeit\", force_n = \"Kraft [kN]\" }"],
    );
    refused(with_log("time,force_n\n2026-03-05 10:00:00,1.5\n").path(), &["nothing dates the frames", "start = "]);
    refused(with_log("time_s,force_n\n").path(), &["no row below the headings"]);
    refused(with_log("time_s,stress_mpa\n0,5\n").path(), &["needs force_n", "fixture"]);
    refused(
        with_manifest("log = \"load.csv\"", "log = \"../load.csv\"").path(),
        &["line 12", "leads out of the run folder"],
    );
    let (code, _, message) = check(with_manifest("log = \"load.csv\"", "log = \"lode.csv\"").path(), &[]);
    assert_eq!(code, 3, "{message}");
    assert!(message.contains("lode.csv"), "{message}");
}

#[test]
fn a_whole_negative_force_log_is_asked_about() {
    looked_at(
        with_log("time_s,force_n\n0,-1.5\n10,-1.5\n20,-1.5\n").path(),
        &["the whole force log is negative", "scale = { force_n = -1.0 }"],
    );
}

#[test]
fn a_plating_edge_outside_the_frame() {
    let outside = with_manifest("[[8, 0], [8, 39]]", "[[800, 0], [800, 39]]");
    refused(outside.path(), &["line 9", "wholly outside the frames, which are 64 × 40 px", "x from 0 to 63"]);
    let far = with_manifest("[[55, 0], [55, 39]]", "[[1e9, -1e9], [1e9, 1e9]]");
    assert_eq!(check(far.path(), &["--strict"]).0, 0);
}

#[test]
fn zero_and_negative_scale() {
    for scale in ["0.0", "-1.25", "nan"] {
        let folder = with_manifest("um_per_px = 1.25", &format!("um_per_px = {scale}"));
        refused(folder.path(), &["line 5", "must be above 0", "um_per_px = 1.25"]);
    }
}

#[test]
fn a_dimension_that_is_missing_or_unlikely() {
    refused(with_manifest("arm_mm = 12.0\n", "").path(), &["line 14", "needs arm_mm", "arm_mm = 12.0"]);
    looked_at(with_manifest("thickness_mm = 0.5", "thickness_mm = 5").path(), &["is the plate that thick?"]);
}

#[cfg(unix)]
#[test]
fn a_frame_name_that_is_not_utf8() {
    use std::os::unix::ffi::OsStrExt;
    let folder = run();
    let name = std::ffi::OsStr::from_bytes(b"frames/f\xff.png");
    fs::copy(folder.path().join("frames/f1.png"), folder.path().join(name)).unwrap();
    refused(folder.path(), &["is not UTF-8", "rename the file"]);
}

#[test]
fn a_place_that_cannot_be_written() {
    let folder = run();
    let nowhere = folder.path().join("nowhere/edges.png");
    let (code, _, message) = check(folder.path(), &["--picture", nowhere.to_str().unwrap()]);
    assert_eq!(code, 3, "{message}");
    assert!(message.contains("edges.png"), "{message}");
    let here = folder.path().join("edges.png");
    assert_eq!(check(folder.path(), &["--picture", here.to_str().unwrap()]).0, 0);
    assert_eq!(image::open(here).unwrap().to_rgb8().dimensions(), (64, 40));
}

#[test]
fn usage_and_help() {
    assert_eq!(veerlog().output().unwrap().status.code(), Some(2));
    assert_eq!(veerlog().arg("chekc").output().unwrap().status.code(), Some(2));
    let help = veerlog().arg("--help").output().unwrap();
    assert_eq!(help.status.code(), Some(0));
    assert!(String::from_utf8_lossy(&help.stdout).contains("A forecast is no interlock"));
}

#[test]
fn a_draft_never_overwrites_and_leads_to_a_check() {
    let folder = run();
    let draft = |folder: &Path| veerlog().arg("draft").arg(folder).output().unwrap();
    let refused = draft(folder.path());
    assert_eq!(refused.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&refused.stderr).contains("never overwrites"));
    assert_eq!(fs::read_to_string(folder.path().join("run.toml")).unwrap(), MANIFEST);
    fs::remove_file(folder.path().join("run.toml")).unwrap();
    let written = draft(folder.path());
    assert_eq!(written.status.code(), Some(0));
    let text = fs::read_to_string(folder.path().join("run.toml")).unwrap();
    assert!(text.contains("CONFIRM") && text.contains("load.csv"), "{text}");
    assert_eq!(check(folder.path(), &[]).0, 0);
    let empty = tempfile::tempdir().unwrap();
    assert_eq!(draft(empty.path()).status.code(), Some(2));
}
