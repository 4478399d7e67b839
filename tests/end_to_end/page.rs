//! What surrounds the page: a reader's review honoured, frames beside it, a summary for scripts, handouts, and a run that is
//! stopped. The page itself is tested in a browser (`tests/browser/`).

use std::fs;
use std::path::Path;

use super::kit::{Sheet, copy_run, demo, report, run, summary, veerlog, with_manifest, write};

/// Names beside `name` in its folder that are hidden and ours.
fn hidden(folder: &Path) -> Vec<String> {
    let names = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().file_name().to_string_lossy().into_owned());
    names.filter(|name| name.contains(".veerlog-new-")).collect()
}

#[test]
fn a_review_is_left_out_and_both_numbers_are_given() {
    let folder = tempfile::tempdir().unwrap();
    copy_run(demo("turning-1"), folder.path());
    let before = summary(&demo("turning-1").join("veerlog"));
    let roots = Sheet::read(&demo("turning-1").join("veerlog"), "filaments");
    let [x, y] = ["root_x_px", "root_y_px"].map(|column| roots.numbers(column)[1].unwrap());
    let review = format!(
        "[[reject]]\nframe = 20\nreason = \"lamp\"\n[[reject]]\nfilament = 2\nroot_px = [{x}, {y}]\nreason = \"scratch\"\n\
         [[reject]]\nfilament = 9\nroot_px = [0, 0]\nreason = \"none there\"\n"
    );
    write(folder.path(), "review.toml", &review);
    let said = report(folder.path(), &[]).with(0, &["2 marks of review.toml honoured", "filament 9 changed nothing"]);
    assert!(said.out.contains("2 of 3 marks of review.toml"), "{}", said.out);
    let output = folder.path().join("veerlog");
    let after = summary(&output);
    let told = &after["review"];
    assert_eq!(told["without"]["depth_um"], before["depth"]["final_um"]);
    assert_eq!(told["with"]["depth_um"], after["depth"]["final_um"]);
    assert_eq!(told["without"]["filaments"].as_u64(), told["with"]["filaments"].as_u64().map(|n| n + 1));
    assert_eq!(told["with"]["frames_used"], 39);
    assert!(after["inputs"]["review.toml"].is_string());
    let reasons = Sheet::read(&output, "frames").text("reason");
    assert_eq!(reasons[20].as_deref(), Some("rejected by review: lamp"));
    let page = fs::read_to_string(output.join("report.html")).unwrap();
    assert!(page.contains("with the review") && page.contains("none there"));
    // Where the rejected filament started, none starts now.
    let left = Sheet::read(&output, "filaments");
    let near = left.numbers("root_x_px").into_iter().zip(left.numbers("root_y_px"));
    assert!(near.flat_map(|(x, y)| x.zip(y)).all(|(rx, ry)| (rx - x).hypot(ry - y) > 12.0));
}

#[test]
fn a_faulty_review_says_where_and_what_to_type() {
    for (text, parts) in [
        ("[[reject]]\nfraem = 3\nreason = \"x\"\n", ["line 2", "unknown key `fraem`", "frame = 17"]),
        ("[[reject]]\nframe = 300\nreason = \"x\"\n", ["line 1", "no frame 300", "0 to 7"]),
        ("[[reject]]\nframe = 3\n", ["line 1", "`reason` is missing", "add the line reason"]),
        ("[[reject]]\nreason = \"x\"\n", ["line 1", "names one thing", "frame = 17"]),
    ] {
        let folder = run();
        write(folder.path(), "review.toml", text);
        report(folder.path(), &[]).with(2, &["review.toml"]).with(2, &parts);
        assert!(!folder.path().join("veerlog").exists());
    }
}

#[test]
fn frames_lie_beside_the_page_when_asked_for() {
    let folder = run();
    report(folder.path(), &["--quiet", "--frames", "all"]).with(0, &[]);
    let output = folder.path().join("veerlog");
    assert_eq!(fs::read_dir(output.join("frames")).unwrap().count(), 8);
    assert!(fs::read_to_string(output.join("report.html")).unwrap().contains("frames/000003.jpg"));
    assert!(hidden(folder.path()).is_empty());
    report(folder.path(), &["--quiet"]).with(0, &[]);
    assert!(!output.join("frames").exists());
}

#[test]
fn json_is_the_summary_and_nothing_else() {
    let folder = run();
    let said = report(folder.path(), &["--quiet", "--json"]).with(0, &[]);
    let printed: serde_json::Value = serde_json::from_str(&said.out).unwrap();
    assert_eq!(printed, summary(&folder.path().join("veerlog")));
}

#[test]
fn handouts_are_printed() {
    for (what, holds) in [("bash", "_veerlog()"), ("fish", "complete -c veerlog"), ("manual", ".TH veerlog")] {
        let output = veerlog().args(["handout", what]).output().unwrap();
        let text = String::from_utf8_lossy(&output.stdout);
        assert!(output.status.success() && text.contains(holds), "{what}: {}", &text[..text.len().min(300)]);
    }
}

#[test]
fn every_command_has_an_example_in_its_help() {
    for command in ["draft", "check", "report", "synth", "score", "handout"] {
        let output = veerlog().args([command, "--help"]).output().unwrap();
        let text = String::from_utf8_lossy(&output.stdout);
        assert!(text.contains(&format!("  veerlog {command} ")), "{command}: {text}");
    }
}

/// Names that would clear the screen, set a title, turn the reading direction or fill the screen.
#[test]
fn names_cannot_steer_a_terminal() {
    let name = format!("a\\u001b[2J\\u001b]0;title\\u0007\\u202eb{}", "x".repeat(5000));
    let folder = with_manifest("run = \"invented\"", &format!("run = \"{name}\""));
    let said = report(folder.path(), &[]).with(0, &[]);
    let steering = ['\u{1b}', '\u{7}', '\u{202e}'];
    assert!(!said.out.contains(steering) && !said.err.contains(steering));
    assert!(said.out.contains("\\u{1b}[2J"), "{}", said.out);
    assert!(said.out.lines().all(|line| line.chars().count() < 2200));
    write(folder.path(), "review.toml", "[[reject]]\nframe = 0\nreason = \"\\u001b[2J\"\n\"\\u001b[2J\" = 1\n");
    let said = report(folder.path(), &[]).with(2, &["review.toml"]);
    assert!(!said.err.contains(steering), "{}", said.err);
}

#[test]
fn what_a_killed_run_left_is_swept() {
    let folder = run();
    let left = folder.path().join(".veerlog.veerlog-new-4294967295-abc");
    fs::create_dir_all(left.join("tables")).unwrap();
    report(folder.path(), &["--quiet"]).with(0, &[]);
    assert!(!left.exists());
}

#[cfg(unix)]
#[test]
fn a_stopped_run_leaves_nothing_half_written_and_says_how_to_go_on() {
    use std::process::Stdio;
    use std::time::{Duration, Instant};
    let folder = tempfile::tempdir().unwrap();
    copy_run(demo("turning-1"), folder.path());
    let mut child = veerlog();
    child.args(["report", "--frames", "all"]).arg(folder.path()).stdout(Stdio::null()).stderr(Stdio::piped());
    let child = child.spawn().unwrap();
    let start = Instant::now();
    while hidden(folder.path()).is_empty() && start.elapsed() < Duration::from_secs(60) {
        std::thread::sleep(Duration::from_millis(20));
    }
    let stopped = std::process::Command::new("kill").args(["-INT", &child.id().to_string()]).status().unwrap();
    assert!(stopped.success());
    let output = child.wait_with_output().unwrap();
    assert_eq!(output.status.code(), Some(130));
    assert!(String::from_utf8_lossy(&output.stderr).contains("Type the same command to start again"));
    // A frame that was being written while the folder went may leave its name; the next run sweeps it.
    report(folder.path(), &["--quiet"]).with(0, &[]);
    assert!(hidden(folder.path()).is_empty());
}
