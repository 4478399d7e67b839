//! The output folder: the promised files, columns and keys, values that agree with each other, and nothing of the user's changed.

use std::collections::{BTreeMap, BTreeSet};
use std::fs;
use std::path::Path;

use polars::prelude::{ParquetReader, SerReader};

use super::kit::{DEMO, FRAMES, Sheet, campaign, copy_run, demo, files, hard, report, run, summary, write};

/// The promised columns, in their order; more may follow them.
const TABLES: [(&str, &str); 5] = [
    (
        "frames",
        "frame file time_s usable reason drift_x_px drift_y_px load_n load_direction_deg stress_mpa depth_um depth_fraction \
         front_depth_um deepest_x_px deepest_y_px filaments tips length_um area_um2 unrooted alignment growth_alignment",
    ),
    (
        "paths",
        "frame time_s filament path length_um chord_um width_um angle_deg angle_to_load_deg x0_px y0_px x1_px y1_px ends_in",
    ),
    (
        "growth",
        "frame time_s load_time_s filament x_px y_px length_um angle_deg load_direction_deg angle_to_load_deg stress_mpa",
    ),
    ("filaments", "filament first_time_s root root_x_px root_y_px final_depth_um final_length_um tips bridged turned"),
    ("forecasts", "frame issued_at_s p025_s p10_s p25_s p50_s p75_s p90_s p975_s horizon_s chance_by_horizon model"),
];

/// Every analysed run there is.
fn outputs() -> Vec<std::path::PathBuf> {
    DEMO.iter().map(|name| demo(name)).chain([hard()]).map(|run| run.join("veerlog")).collect()
}

#[test]
fn the_folder_holds_the_promised_files_and_no_other() {
    let folder = run();
    report(folder.path(), &["--save", "masks"]).with(0, &[]);
    let mut found: BTreeSet<String> =
        files(&folder.path().join("veerlog")).keys().map(|name| name.to_str().unwrap().to_owned()).collect();
    let mut take = |name: String| assert!(found.remove(&name), "{name} is missing");
    for name in [".veerlog-output", "report.html", "summary.json", "traces.ndjson"] {
        take(name.to_owned());
    }
    for (table, _) in TABLES {
        take(format!("tables/{table}.csv"));
        take(format!("tables/{table}.parquet"));
    }
    for table in ["turns", "directions", "charge", "half_cycles"] {
        take(format!("tables/{table}.csv"));
        take(format!("tables/{table}.parquet"));
    }
    for frame in 0..FRAMES {
        take(format!("masks/{frame:06}.png"));
    }
    let figure = |name: &String| {
        name.starts_with("figures/") && [".svg", ".png", ".csv", ".gif"].iter().any(|ending| name.ends_with(ending))
    };
    assert!(found.iter().all(figure) && !found.is_empty(), "{found:?}");
    // Without being asked for, no masks; and those of before are gone.
    report(folder.path(), &[]).with(0, &[]);
    assert!(!folder.path().join("veerlog/masks").exists());
}

#[test]
fn masks_grow_and_hold_the_line() {
    let folder = run();
    report(folder.path(), &["--save", "masks"]).with(0, &[]);
    let filament = |frame: u32| {
        let mask = image::open(folder.path().join(format!("veerlog/masks/{frame:06}.png"))).unwrap().to_luma8();
        assert_eq!(mask.dimensions(), (64, 40));
        assert!(mask.pixels().all(|p| p.0 == [0] || p.0 == [255]));
        mask.enumerate_pixels().filter(|(_, _, p)| p.0 == [255]).map(|(x, y, _)| (x, y)).collect::<BTreeSet<_>>()
    };
    let masks: Vec<_> = (0..FRAMES).map(filament).collect();
    assert!(masks[0].is_empty() && masks[1].is_empty(), "there is no line in the bare frames");
    assert!(masks.windows(2).all(|two| two[0].is_subset(&two[1])), "a track never shrinks");
    let last = &masks[FRAMES as usize - 1];
    assert!((14..34).all(|x| last.contains(&(x, 19))), "the line is 3 px wide about y = 19, x to 37: {last:?}");
    // Next to the electrode its shade leaves the root uncertain.
    let on_line = |&(x, y): &(u32, u32)| {
        (4..=41).contains(&x) && if x > 13 { (16..=22).contains(&y) } else { (10..=28).contains(&y) }
    };
    assert!(last.iter().all(on_line), "{last:?}");
}

#[test]
fn promised_columns_stand_first_and_in_order() {
    for output in outputs() {
        for (table, promised) in TABLES {
            let promised: Vec<&str> = promised.split_whitespace().collect();
            let headings = Sheet::read(&output, table).headings();
            assert!(
                headings.len() >= promised.len() && headings[..promised.len()] == promised,
                "{table}: {headings:?}"
            );
        }
    }
}

#[test]
fn a_table_is_the_same_in_both_formats() {
    for output in outputs() {
        for (table, _) in TABLES {
            let csv = Sheet::read(&output, table);
            let file = fs::File::open(output.join(format!("tables/{table}.parquet"))).unwrap();
            let parquet = ParquetReader::new(file).finish().unwrap();
            assert_eq!(parquet.height(), csv.rows(), "{table}");
            let names: Vec<String> = parquet.get_column_names().iter().map(|name| name.to_string()).collect();
            assert_eq!(names, csv.headings(), "{table}");
            let absent = |name: &String| parquet.column(name).unwrap().null_count();
            for name in &names {
                assert_eq!(
                    absent(name),
                    csv.text(name).iter().filter(|field| field.is_none()).count(),
                    "{table}: {name}"
                );
            }
        }
    }
}

#[test]
fn what_is_missing_is_empty_and_what_is_there_is_finite() {
    for output in outputs() {
        for (table, _) in TABLES {
            let text = fs::read_to_string(output.join(format!("tables/{table}.csv"))).unwrap().to_lowercase();
            for word in [",nan", ",inf", ",-inf", ",null", ",none", "nan,"] {
                assert!(!text.contains(word), "{table} of {} holds {word:?}", output.display());
            }
        }
    }
    // A run without a load has no load, no axis, no alignment.
    let frames = Sheet::read(&demo("still-1").join("veerlog"), "frames");
    for column in ["load_n", "load_direction_deg", "stress_mpa", "alignment", "growth_alignment"] {
        assert!(frames.text(column).iter().all(Option::is_none), "{column}");
    }
}

/// Rows agree with each other and with the definitions of the columns.
#[test]
fn tables_agree_with_each_other() {
    for output in outputs() {
        let frames = Sheet::read(&output, "frames");
        let of = |column: &str| frames.numbers(column);
        let usable: Vec<bool> = frames.text("usable").iter().map(|word| word.as_deref() == Some("true")).collect();
        let reasons = frames.text("reason");
        assert!(usable.iter().zip(&reasons).all(|(usable, reason)| *usable == reason.is_none()));
        let depth: Vec<f64> = of("depth_um").into_iter().flatten().collect();
        assert_eq!(depth.len(), usable.iter().filter(|u| **u).count(), "a depth in every usable frame and no other");
        assert!(depth.windows(2).all(|two| two[1] >= two[0]), "depth never falls: {depth:?}");
        let within = |column: &str, low: f64, high: f64| {
            assert!(of(column).iter().flatten().all(|v| (low..=high).contains(v)), "{column} of {}", output.display());
        };
        within("depth_fraction", 0.0, 1.0);
        within("alignment", -1.0, 1.0);
        within("growth_alignment", -1.0, 1.0);
        within("load_direction_deg", 0.0, 179.999_999);
        paths_add_up(&output, &frames);
        forecasts_are_in_order(&output);
    }
}

/// Per frame: paths of rooted filaments sum to the frame's length, free ends to its tips; angles are axial.
fn paths_add_up(output: &Path, frames: &Sheet) {
    let paths = Sheet::read(output, "paths");
    let roots: BTreeMap<String, String> = {
        let filaments = Sheet::read(output, "filaments");
        let names = filaments.text("filament").into_iter().flatten();
        names.zip(filaments.text("root").into_iter().flatten()).collect()
    };
    let mut sums: BTreeMap<String, (f64, f64)> = BTreeMap::new();
    let columns = paths.text("frame").into_iter().zip(paths.text("filament")).zip(paths.numbers("length_um"));
    for (((frame, filament), length), end) in columns.zip(paths.text("ends_in")) {
        let root = roots.get(filament.as_ref().unwrap()).expect("a path belongs to a filament of the table");
        if root == "plating" {
            let sum = sums.entry(frame.unwrap()).or_default();
            sum.0 += length.unwrap();
            sum.1 += if end.as_deref() == Some("tip") { 1.0 } else { 0.0 };
        }
    }
    for ((frame, length), tips) in
        frames.text("frame").iter().zip(frames.numbers("length_um")).zip(frames.numbers("tips"))
    {
        let Some(length) = length else { continue };
        let (sum, ends) = sums.get(frame.as_ref().unwrap()).copied().unwrap_or_default();
        assert!((sum - length).abs() < 0.05 + 0.01 * length, "frame {frame:?}: paths {sum} µm, frame {length} µm");
        assert!(
            (ends - tips.unwrap()).abs() < 0.5,
            "frame {frame:?} of {}: {ends} free ends, tips {tips:?}",
            output.display()
        );
    }
    for table in ["paths", "growth"] {
        let sheet = Sheet::read(output, table);
        assert!(sheet.numbers("angle_deg").iter().flatten().all(|a| (0.0..180.0).contains(a)), "{table}");
        assert!(sheet.numbers("angle_to_load_deg").iter().flatten().all(|a| (0.0..=90.0).contains(a)), "{table}");
    }
}

/// Quantiles rise, none lies before its issue, the chance is one.
fn forecasts_are_in_order(output: &Path) {
    let forecasts = Sheet::read(output, "forecasts");
    let columns = ["issued_at_s", "p025_s", "p10_s", "p25_s", "p50_s", "p75_s", "p90_s", "p975_s"];
    let columns = columns.map(|column| forecasts.numbers(column));
    for row in 0..forecasts.rows() {
        let values: Vec<f64> = columns.iter().filter_map(|column| column[row]).collect();
        assert!(values.windows(2).all(|two| two[0] <= two[1]), "row {row} of {}: {values:?}", output.display());
    }
    assert!(forecasts.numbers("chance_by_horizon").iter().flatten().all(|chance| (0.0..=1.0).contains(chance)));
}

#[test]
fn traces_are_lines_of_json_from_root_to_tip() {
    for output in outputs() {
        let filaments = Sheet::read(&output, "filaments").text("filament");
        let mut seen = BTreeSet::new();
        for line in fs::read_to_string(output.join("traces.ndjson")).unwrap().lines() {
            let path: serde_json::Value = serde_json::from_str(line).unwrap();
            let filament = path["filament"].as_u64().unwrap().to_string();
            assert!(filaments.contains(&Some(filament.clone())), "{line}");
            assert!(seen.insert(path["path"].as_u64().unwrap()), "path numbers repeat: {line}");
            let points = path["points"].as_array().unwrap();
            assert!(!points.is_empty());
            for point in points {
                assert_eq!(point.as_array().unwrap().len(), 4);
                assert!(point[3].as_f64().unwrap() > 0.0, "a width of nothing: {line}");
            }
            let times: Vec<f64> = points.iter().map(|point| point[2].as_f64().unwrap()).collect();
            assert!(
                times.windows(2).all(|two| two[0] <= two[1]),
                "{}: arrivals fall from root to tip: {times:?}",
                output.display()
            );
        }
    }
}

#[test]
fn the_summary_has_its_keys() {
    for output in outputs() {
        let summary = summary(&output);
        let promised = "/tool /version /format /run /specimen /frames/total /frames/usable /frames/set_aside /um_per_px /gap_um \
                        /depth/final_um /depth/final_fraction /depth/rate_um_per_s /depth/rate_ci95 /alignment/paths/value \
                        /alignment/paths/ci95 /alignment/paths/mean_angle_to_load_deg /alignment/paths/n /alignment/growth/value \
                        /alignment/growth/ci95 /alignment/growth/mean_angle_to_load_deg /alignment/growth/n /load/stress_mpa \
                        /load/dose_mpa /short/observed /short/time_s /short/evidence /forecast /settings /inputs /warnings";
        for pointer in promised.split_whitespace() {
            assert!(summary.pointer(pointer).is_some(), "{pointer} is missing in {}", output.display());
        }
        assert_eq!((&summary["tool"], &summary["format"]), (&"veerlog".into(), &1.into()));
        let frames = Sheet::read(&output, "frames");
        assert_eq!(summary["frames"]["total"].as_u64().unwrap() as usize, frames.rows());
        let aside = frames.text("reason").iter().filter(|reason| reason.is_some()).count();
        assert_eq!(summary["frames"]["set_aside"].as_array().unwrap().len(), aside);
    }
}

/// SHA-256 of every input, from another implementation than the program's own walk: the files as they lie there.
#[test]
fn the_summary_names_what_was_read() {
    use sha2::{Digest, Sha256};
    let run = demo("along-1");
    let inputs = summary(&run.join("veerlog"))["inputs"].clone();
    let hex = |bytes: &[u8]| Sha256::digest(bytes).iter().map(|b| format!("{b:02x}")).collect::<String>();
    for name in ["run.toml", "load.csv", "cell.csv", "frames/frame_00000.png", "frames/frame_00039.png"] {
        assert_eq!(inputs[name], hex(&fs::read(run.join(name)).unwrap()), "{name}");
    }
    assert_eq!(inputs.as_object().unwrap().len(), 43);
}

#[test]
fn the_page_loads_nothing_and_carries_the_caution() {
    for output in outputs() {
        let page = fs::read_to_string(output.join("report.html")).unwrap();
        let lower = page.to_lowercase();
        for loading in [
            "src=\"http",
            "src='http",
            "src=\"//",
            "href=\"http",
            "href='http",
            "href=\"//",
            "@import",
            "url(http",
            "url(\"http",
        ] {
            assert!(!lower.contains(loading), "{loading} in {}", output.display());
        }
        for loading in ["fetch(", "xmlhttprequest", "<iframe", "<link", "websocket", "import("] {
            assert!(!lower.contains(loading), "{loading} in {}", output.display());
        }
        assert!(lower.contains("no interlock") && lower.contains("reacts with water"));
    }
}

#[test]
fn names_cannot_become_markup() {
    let folder = run();
    let manifest = fs::read_to_string(folder.path().join("run.toml")).unwrap();
    let name = "<script>alert(1)</script><img src=x onerror=alert(2)>\\\"'&</title>";
    let hostile =
        manifest.replace("run = \"invented\"", &format!("run = \"{name}\"\nspecimen = \"{name}\"\nnote = \"{name}\""));
    write(folder.path(), "run.toml", hostile);
    report(folder.path(), &[]).with(0, &[]);
    let page = fs::read_to_string(folder.path().join("veerlog/report.html")).unwrap();
    assert!(!page.contains("<script>alert") && !page.contains("<img src=x"));
    assert!(summary(&folder.path().join("veerlog"))["run"].as_str().unwrap().starts_with("<script>alert(1)"));
}

#[test]
fn nothing_of_the_user_is_changed() {
    let folder = tempfile::tempdir().unwrap();
    copy_run(hard(), folder.path());
    let before = files(folder.path());
    report(folder.path(), &["--quiet", "--save", "masks"]).with(0, &[]);
    let mut after = files(folder.path());
    after.retain(|name, _| !name.starts_with("veerlog") && !name.starts_with(".veerlog-cache"));
    assert!(before == after, "a file of the run has changed");
    let names: BTreeSet<_> = fs::read_dir(folder.path()).unwrap().map(|entry| entry.unwrap().file_name()).collect();
    assert!(names.iter().all(|name| !name.to_string_lossy().contains("-new-")), "{names:?}");
}

#[test]
fn a_run_that_fails_leaves_the_report_of_before() {
    let folder = run();
    report(folder.path(), &[]).with(0, &[]);
    let before = files(&folder.path().join("veerlog"));
    for frame in 0..FRAMES {
        write(folder.path(), &format!("frames/f{frame}.png"), "no longer a picture");
    }
    report(folder.path(), &[]).with(2, &["none of the 8 frames can be used"]);
    assert!(files(&folder.path().join("veerlog")) == before);
    assert_eq!(fs::read_dir(folder.path()).unwrap().count(), 4, "frames, load.csv, run.toml, veerlog");
}

#[test]
fn the_demo_campaign_itself_is_not_written_to() {
    let _ = outputs();
    for name in DEMO {
        assert!(files(&campaign().join(name)).iter().all(|(path, bytes)| {
            path.starts_with("veerlog")
                || path.starts_with(".veerlog-cache")
                || fs::read(demo(name).join(path)).unwrap() == *bytes
        }));
    }
}
