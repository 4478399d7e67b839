//! What `report` says of the demo campaign and of cells in which nothing grows: near the truth, and in agreement with the trade.
//!
//! The facts of the trade are common practice, without a published source: they hold to signs and orders of magnitude only.

use std::path::Path;

use veerlog::synth::score::{RunScore, score_run};
use veerlog::synth::{Grade, draw_bare, write_run};

use super::kit::{DEMO, Sheet, demo, report, summary};

/// Scores a demo run and holds one of its figures to `good`.
#[track_caller]
fn every_demo_run(what: &str, figure: fn(&RunScore) -> Option<f64>, good: fn(f64) -> bool) {
    let figures: Vec<_> = DEMO.iter().map(|name| (*name, figure(&score_run(demo(name), None).unwrap()))).collect();
    assert!(figures.iter().all(|(_, value)| value.is_some_and(good)), "{what}: {figures:?}");
}

#[test]
fn depth_is_within_two_pixels_of_the_truth() {
    every_demo_run("median depth error, px", |score| score.depth_median_px, |px| px <= 2.0);
}

#[test]
fn growth_directions_are_within_five_degrees_of_the_truth() {
    every_demo_run("median direction error, degrees", |score| score.direction_median_deg, |deg| deg <= 5.0);
}

#[test]
fn drift_is_within_a_third_of_a_pixel_of_the_truth() {
    every_demo_run("drift error, RMS px", |score| score.drift_rms_px, |px| px <= 0.3);
}

#[test]
fn tips_are_those_of_the_truth() {
    every_demo_run("F1 of tips within 6 px", |score| score.tips_f1, |f1| f1 >= 0.8);
}

#[test]
fn length_is_near_the_truth() {
    every_demo_run("reported over true length", |score| score.length_ratio, |ratio| (0.9..=1.1).contains(&ratio));
}

#[test]
fn no_metal_is_reported_before_there_is_any() {
    every_demo_run("frames with metal too early", |score| score.early_frames, |frames| frames < 0.5);
}

/// A small cell of a grade in which nothing grows: no filament, no growth, no forecast, in any frame.
fn nothing_is_found(grade: Grade, seed: u64) {
    let place = tempfile::tempdir().unwrap();
    let mut scenario = draw_bare(grade, seed);
    (scenario.width, scenario.height, scenario.frames, scenario.bare) = (200, 150, 16, 5);
    (scenario.plating_edge, scenario.far_edge) = (Vec::new(), Vec::new());
    write_run(&scenario.settle().unwrap(), place.path()).unwrap();
    report(place.path(), &["--quiet"]).with(0, &[]);
    let output = place.path().join("veerlog");
    for table in ["filaments", "growth", "paths", "forecasts"] {
        assert_eq!(Sheet::read(&output, table).rows(), 0, "{table} of a {grade:?} cell without growth");
    }
    let frames = Sheet::read(&output, "frames");
    for column in ["filaments", "unrooted", "length_um", "depth_um"] {
        assert!(frames.numbers(column).iter().flatten().all(|n| n.abs() < 1e-9), "{column} of a {grade:?} cell");
    }
    assert!(summary(&output)["forecast"].is_null());
}

#[test]
fn a_clear_cell_without_growth_has_no_filament() {
    nothing_is_found(Grade::Clear, 31);
}

#[test]
fn a_typical_cell_without_growth_has_no_filament() {
    nothing_is_found(Grade::Typical, 32);
}

#[test]
fn a_hard_cell_without_growth_has_no_filament() {
    nothing_is_found(Grade::Hard, 33);
}

fn output(name: &str) -> std::path::PathBuf {
    demo(name).join("veerlog")
}

/// A number of `summary.json`.
fn said(name: &str, pointer: &str) -> Option<f64> {
    summary(&output(name)).pointer(pointer).unwrap().as_f64()
}

/// When the cell shorted, s; infinite where it did not.
fn short_s(name: &str) -> f64 {
    said(name, "/short/time_s").unwrap_or(f64::INFINITY)
}

/// Common practice: growth follows the axis of in-plane compression.
#[test]
fn growth_lies_along_the_compression() {
    for name in ["along-1", "along-2", "through-1", "turning-1"] {
        for which in ["growth", "paths"] {
            // After its turn, half of what the turning run traced lies across the axis then in force.
            if name == "turning-1" && which == "paths" {
                continue;
            }
            let value = said(name, &format!("/alignment/{which}/value")).unwrap();
            assert!(value > 0.0, "{name}: alignment of {which} {value}");
        }
    }
    assert_eq!(said("still-1", "/alignment/growth/value"), None, "no load, no axis, no alignment");
}

/// Length-weighted mean of cos 2Δ of the pieces grown between two times against a fixed axis, from `growth.csv`.
fn alignment_to(axis_deg: f64, from_s: f64, to_s: f64) -> f64 {
    let growth = Sheet::read(&output("turning-1"), "growth");
    let [times, angles, lengths] = ["load_time_s", "angle_deg", "length_um"].map(|column| growth.numbers(column));
    let (mut sum, mut total) = (0.0, 0.0);
    for ((time, angle), length) in times.iter().zip(&angles).zip(&lengths) {
        if (from_s..to_s).contains(&time.unwrap()) {
            let (angle, length) = (angle.unwrap(), length.unwrap());
            sum += length * (2.0 * (angle - axis_deg)).to_radians().cos();
            total += length;
        }
    }
    assert!(total > 50.0, "only {total} µm grew from {from_s} to {to_s} s");
    sum / total
}

/// Common practice: a turned load turns growth. The demo run's axis goes from 40° to 130° at 660 s.
#[test]
fn growth_turns_after_the_load_has_turned() {
    assert!(alignment_to(40.0, 500.0, 660.0) > 0.3, "before the step growth lies along the first axis");
    assert!(alignment_to(130.0, 1000.0, 1200.0) > 0.3, "long after it growth lies along the second");
    let growth = Sheet::read(&output("turning-1"), "growth");
    for (time, axis) in growth.numbers("load_time_s").iter().zip(growth.numbers("load_direction_deg")) {
        let logged = if time.unwrap() < 660.0 { 40.0 } else { 130.0 };
        assert!((axis.unwrap() - logged).abs() < 1e-6, "a piece of {time:?} s met the axis {axis:?}");
    }
}

/// Common practice: 150–200 MPa of in-plane compression keep filaments from crossing.
#[test]
fn compression_along_the_plates_keeps_filaments_from_crossing() {
    for name in ["along-1", "along-2"] {
        let dose = said(name, "/load/dose_mpa").unwrap();
        assert!((dose - 180.0).abs() < 5.0, "{name}: dose {dose} MPa");
        assert!(short_s(name).is_infinite(), "{name} bridged");
        assert!(said(name, "/depth/final_fraction").unwrap() < 1.0);
        assert!(Sheet::read(&output(name), "filaments").text("bridged").iter().all(|b| b.as_deref() == Some("false")));
    }
}

/// Common practice: pressing the plates together hastens the short.
#[test]
fn pressing_the_plates_together_hastens_the_short() {
    let dose = said("through-1", "/load/dose_mpa").unwrap();
    assert!((dose + 180.0).abs() < 5.0, "dose {dose} MPa");
    let (pressed, unloaded) = (short_s("through-1"), short_s("still-1").min(short_s("still-2")));
    assert!(pressed < unloaded && unloaded.is_finite(), "pressed {pressed} s, unloaded {unloaded} s");
}

/// Length of all filaments at the last frame by `until`, µm.
fn length_by(run: &Path, until: f64) -> f64 {
    let frames = Sheet::read(&run.join("veerlog"), "frames");
    let rows = frames.numbers("time_s").into_iter().zip(frames.numbers("length_um"));
    rows.filter(|(time, _)| time.unwrap() <= until).filter_map(|(_, length)| length).next_back().unwrap()
}

/// Common practice: a load steers growth, it does not stop it. Two unloaded runs give a scatter of their own difference either way.
#[test]
fn a_load_does_not_stop_growth() {
    let until = short_s("through-1").min(short_s("still-1")).min(short_s("still-2"));
    let [one, other] = ["still-1", "still-2"].map(|name| length_by(demo(name), until));
    // Two unloaded runs tell their scatter poorly: twice their difference about their mean.
    let (mean, scatter) = (0.5 * (one + other), 2.0 * (one - other).abs());
    for name in ["along-1", "along-2", "through-1", "turning-1"] {
        let length = length_by(demo(name), until);
        assert!(
            (mean - scatter..=mean + scatter).contains(&length),
            "{name}: {length} µm by {until} s, unloaded {one} and {other} µm"
        );
    }
}
