//! Input made to break a program: it is refused or set aside, never a panic, never a number that is wrong.

use std::fs;
use std::path::Path;

use super::kit::{FRAMES, MANIFEST, Sheet, report, run, summary, with_log, with_manifest, write};

/// Puts `bytes` in the place of frame 4 and expects the run to go on without it.
#[track_caller]
fn set_aside(bytes: &[u8], reason: &str) {
    let folder = run();
    fs::write(folder.path().join("frames/f4.png"), bytes).unwrap();
    report(folder.path(), &["--quiet"]).with(0, &["the first is frame 4", reason]);
    let frames = Sheet::read(&folder.path().join("veerlog"), "frames");
    assert_eq!(
        frames.text("usable").iter().filter(|word| word.as_deref() == Some("true")).count(),
        FRAMES as usize - 1
    );
}

/// The bytes of a picture in a format.
fn encoded(picture: &image::DynamicImage, format: image::ImageFormat) -> Vec<u8> {
    let mut bytes = std::io::Cursor::new(Vec::new());
    picture.write_to(&mut bytes, format).unwrap();
    bytes.into_inner()
}

#[test]
fn frames_that_are_cut_mislabelled_or_not_numbers() {
    let good = image::GrayImage::from_fn(64, 40, |x, y| image::Luma([(3 * x + y) as u8]));
    let png = encoded(&good.clone().into(), image::ImageFormat::Png);
    for part in [1, 8, 40, png.len() / 2, png.len() - 13] {
        set_aside(&png[..part], "set aside");
    }
    let mut flipped = png.clone();
    let middle = flipped.len() / 2;
    flipped[middle] ^= 0x55;
    set_aside(&flipped, "cannot be decoded");
    let floats =
        image::Rgb32FImage::from_fn(64, 40, |x, y| image::Rgb([if x == y { f32::NAN } else { (x * y) as f32 }; 3]));
    set_aside(&encoded(&floats.into(), image::ImageFormat::Tiff), "not finite");
    set_aside(b"P5\n4294967295 4294967295\n255\n", "set aside");
    set_aside(b"P2 64 40 255 -1 nan", "set aside");
}

#[test]
fn a_picture_under_another_name_is_read_for_what_it_is() {
    let folder = run();
    let path = folder.path().join("frames/f4.png");
    let picture = image::open(&path).unwrap();
    for format in [image::ImageFormat::Bmp, image::ImageFormat::Tiff, image::ImageFormat::Pnm] {
        fs::write(&path, encoded(&picture, format)).unwrap();
        report(folder.path(), &["--quiet", "--strict"]).with(0, &[]);
    }
}

/// The small run with other frames, drawn by `level` from frame, x and y.
fn with_frames(width: u32, height: u32, level: fn(u32, u32, u32) -> u8) -> tempfile::TempDir {
    let folder = run();
    for frame in 0..FRAMES {
        let picture = image::GrayImage::from_fn(width, height, |x, y| image::Luma([level(frame, x, y)]));
        picture.save(folder.path().join(format!("frames/f{frame}.png"))).unwrap();
    }
    folder
}

#[test]
fn frames_too_small_to_hold_a_line() {
    let speckle: fn(u32, u32, u32) -> u8 = |frame, x, y| (100 + (x * 7 + y * 13 + frame) % 40) as u8;
    for (width, height) in [(2, 2), (400, 1), (2, 400), (15, 400)] {
        let folder = with_frames(width, height, speckle);
        write(folder.path(), "run.toml", MANIFEST.replace("[[8, 0], [8, 39]]", "[[0, 0], [0, 39]]"));
        refused(folder.path(), &["line 3", "too small to trace a line in"]);
    }
}

#[test]
fn frames_of_which_none_shows_anything() {
    let folder = with_frames(64, 40, |frame, x, _| if x > 8 + frame { 255 } else { 0 });
    refused(folder.path(), &["line 3", "none of the 8 frames can be used", "saturated"]);
    assert!(!folder.path().join("veerlog").exists());
}

/// Stress at frame 0 of a run with this log: 1.5 N must come out as 108 MPa (6FL/(bh²)).
#[track_caller]
fn reads_108_mpa(log: &[u8]) {
    let folder = run();
    fs::write(folder.path().join("load.csv"), log).unwrap();
    report(folder.path(), &["--quiet"]).with(0, &[]);
    let stress = Sheet::read(&folder.path().join("veerlog"), "frames").numbers("stress_mpa");
    assert!(stress.iter().all(|s| s.is_some_and(|s| (s - 108.0).abs() < 1e-6)), "{stress:?}");
}

#[test]
fn logs_in_other_dialects() {
    let rows = |line: fn(u32) -> String| (0..8).map(|k| line(10 * k)).collect::<String>();
    reads_108_mpa(format!("\u{feff}time_s;force_n\r\n{}", rows(|t| format!("{t},0;1,5\r\n"))).as_bytes());
    reads_108_mpa(format!("time_s\tforce_n\n{}", rows(|t| format!("{t}\t1.5\n"))).as_bytes());
    reads_108_mpa(format!("\"time_s\",\"force_n\"\n{}", rows(|t| format!("\"{t}\",\"1.5\"\n"))).as_bytes());
    reads_108_mpa(format!("made by hand\n\n\ntime_s,force_n\n{}\n\n", rows(|t| format!("{t},1.5e0\n"))).as_bytes());
}

#[test]
fn logs_with_rubbish_are_refused_or_pointed_at() {
    for text in [
        "",
        "\0\0\0\0",
        "time_s,force_n\n0,\0\n",
        "time_s,force_n\n0,1e999\n",
        "time_s,force_n\nnan,1\n",
        "\u{feff}",
        ",,,\n,,,\n",
    ] {
        let folder = with_log(text);
        let said = report(folder.path(), &["--quiet", "--strict"]);
        assert!(said.code == 1 || said.code == 2, "{text:?}: {} {}", said.code, said.err);
        assert!(!said.err.contains("panicked") && said.err.contains("load"), "{text:?}: {}", said.err);
    }
}

/// A run that is refused with exit code 2, whatever it says, within a short time.
#[track_caller]
fn refused(run: &Path, parts: &[&str]) {
    report(run, &["--quiet"]).with(2, parts);
}

#[test]
fn paths_that_climb_out() {
    for (from, to) in [
        ("log = \"load.csv\"", "log = \"/etc/hostname\""),
        ("log = \"load.csv\"", "log = \"frames/../../load.csv\""),
        ("frames/*.png", "../*.png"),
        ("frames/*.png", "/tmp/*.png"),
        ("frames/*.png", "frames/../../*.png"),
    ] {
        refused(with_manifest(from, to).path(), &["out of the run folder"]);
    }
}

#[cfg(unix)]
#[test]
fn links_that_lead_out_or_round() {
    use std::os::unix::fs::symlink;
    let outside = tempfile::tempdir().unwrap();
    write(outside.path(), "load.csv", "time_s,force_n\n0,1.5\n");
    let folder = run();
    fs::remove_file(folder.path().join("load.csv")).unwrap();
    symlink(outside.path().join("load.csv"), folder.path().join("load.csv")).unwrap();
    refused(folder.path(), &["out of the run folder"]);

    let folder = with_manifest("frames/*.png", "**/*.png");
    symlink("..", folder.path().join("frames/round")).unwrap();
    symlink("frames", folder.path().join("again")).unwrap();
    report(folder.path(), &["--quiet"]).with(0, &[]);
    let frames = Sheet::read(&folder.path().join("veerlog"), "frames");
    assert_eq!(frames.rows(), FRAMES as usize, "{:?}", frames.text("file"));

    let folder = run();
    fs::remove_file(folder.path().join("frames/f4.png")).unwrap();
    symlink("f4.png", folder.path().join("frames/f4.png")).unwrap();
    let said = report(folder.path(), &["--quiet"]);
    assert!(matches!(said.code, 0 | 2 | 3) && !said.err.contains("panicked"), "{} {}", said.code, said.err);

    // An output that is a link is not followed into a stranger's folder.
    let folder = run();
    symlink(outside.path(), folder.path().join("veerlog")).unwrap();
    report(folder.path(), &["--quiet"]).with(2, &["is not a folder"]);
    assert_eq!(fs::read_dir(outside.path()).unwrap().count(), 1);
}

#[test]
fn edges_that_make_no_sense() {
    for edge in [
        "[[8, 0]]",
        "[[8, 0], [8, 0]]",
        "[]",
        "[[8, 0], [nan, 39]]",
        "[[8, 0], [inf, 39]]",
        "[[1e308, 0], [-1e308, 0]]",
    ] {
        let folder = with_manifest("plating_edge = [[8, 0], [8, 39]]", &format!("plating_edge = {edge}"));
        let said = report(folder.path(), &["--quiet"]);
        assert!(said.code == 2 && said.err.contains("plating_edge"), "{edge}: {} {}", said.code, said.err);
    }
    // Edges that cross or coincide leave no gap to cross.
    for edge in ["[[8, 0], [8, 39]]", "[[0, 20], [63, 20]]"] {
        let folder = with_manifest("far_edge = [[55, 0], [55, 39]]", &format!("far_edge = {edge}"));
        let said = report(folder.path(), &["--quiet"]);
        assert!(said.code == 2 && said.err.contains("far_edge"), "{edge}: {} {}", said.code, said.err);
    }
}

#[test]
fn numbers_at_the_ends_of_their_range() {
    for (from, to) in [
        ("interval_s = 10.0", "interval_s = 1e-300"),
        ("interval_s = 10.0", "interval_s = 1e300"),
        ("um_per_px = 1.25", "um_per_px = 1e-300"),
        ("um_per_px = 1.25", "um_per_px = 1e300"),
        ("bare = 2", "bare = 18446744073709551615"),
        ("bare = 2", "bare = 8"),
        ("bare = 2", "bare = 0"),
        ("[[55, 0], [55, 39]]", "[[1e9, 0], [1e9, 39]]"),
        ("direction_deg = 90.0", "direction_deg = 1e18"),
        ("thickness_mm = 0.5", "thickness_mm = 1e-200"),
    ] {
        let folder = with_manifest(from, to);
        let said = report(folder.path(), &["--quiet"]);
        assert!(matches!(said.code, 0 | 2) && !said.err.contains("panicked"), "{to}: {} {}", said.code, said.err);
        let tables = folder.path().join("veerlog/tables");
        if tables.exists() {
            for entry in fs::read_dir(tables).unwrap().map(|entry| entry.unwrap().path()) {
                let text = fs::read(&entry).unwrap();
                let csv = entry.extension().is_some_and(|e| e == "csv");
                let rubbish = |word: &str| String::from_utf8_lossy(&text).to_lowercase().contains(word);
                assert!(!csv || !(rubbish("nan,") || rubbish(",inf") || rubbish(",-inf")), "{to}: {}", entry.display());
            }
        }
    }
}

#[test]
fn one_frame_and_two_frames() {
    for kept in [1, 2] {
        let folder = run();
        for frame in kept..FRAMES {
            fs::remove_file(folder.path().join(format!("frames/f{frame}.png"))).unwrap();
        }
        write(folder.path(), "run.toml", MANIFEST.replace("bare = 2", "bare = 1"));
        report(folder.path(), &["--quiet"]).with(0, &[]);
        let summary = summary(&folder.path().join("veerlog"));
        assert_eq!(summary["frames"]["total"], kept);
        assert!(summary["forecast"].is_null());
    }
}
