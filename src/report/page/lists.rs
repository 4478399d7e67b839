//! Lists of names and values: facts under the title, numbers beside figures, frames set aside, settings.

use crate::report::words::{
    bind, counted, duration, figures as digits, fixed, sentence, signed, trimmed, with_uncertainty,
};
use crate::results::{Alignment, Results, Summary};

/// The numbers that belong to a figure; what is absent takes no line.
pub(super) fn numbers(figure: &str, results: &Results) -> Vec<[String; 2]> {
    let summary = &results.summary;
    let list: Vec<(&str, Option<String>)> = match figure {
        "depth" => {
            let depth = &summary.depth;
            let um = |value: f64| format!("{} µm", with_uncertainty(value, depth.u_final_um));
            let rate = |[low, high]: [f64; 2]| format!("{} to {} µm/s", digits(low, 3), digits(high, 3));
            vec![
                ("depth at the end", depth.final_um.map(um)),
                ("share of the way", depth.final_fraction.map(|share| format!("{} %", fixed(share * 100.0, 1)))),
                ("rate", depth.rate_um_per_s.map(|rate| format!("{} µm/s", digits(rate, 3)))),
                ("its 95 % interval", depth.rate_ci95.map(rate)),
            ]
        }
        "rose" => {
            let Alignment { value, ci95, mean_angle_to_load_deg, n } = &summary.alignment.growth;
            vec![
                ("alignment of growth", value.map(|value| signed(value, 2))),
                ("its 95 % interval", ci95.map(|[low, high]| format!("{} to {}", signed(low, 2), signed(high, 2)))),
                ("mean angle to load", mean_angle_to_load_deg.map(|angle| format!("{}°", fixed(angle, 1)))),
                ("filaments", Some(n.to_string())),
                ("pieces", Some(results.growth.len().to_string())),
            ]
        }
        "alignment" => {
            let mpa = |value: f64| format!("{} MPa", digits(value, 3));
            let paths = &summary.alignment.paths;
            vec![
                ("alignment of all paths", paths.value.map(|value| signed(value, 2))),
                (
                    "its 95 % interval",
                    paths.ci95.map(|[low, high]| format!("{} to {}", signed(low, 2), signed(high, 2))),
                ),
                ("median stress", summary.load.stress_mpa.map(|stress| mpa(stress.median))),
                ("median dose", summary.load.dose_mpa.map(mpa)),
            ]
        }
        "forecast-record" => {
            let last = summary.forecast.as_ref();
            let chance = |share: f64| format!("{} %", fixed(share * 100.0, 0));
            vec![
                ("last issued at", last.map(|row| duration(row.issued_at_s))),
                ("median of contact", last.and_then(|row| row.p50_s).map(duration)),
                ("horizon", last.map(|row| duration(row.horizon_s))),
                ("chance by then", last.and_then(|row| row.chance_by_horizon).map(chance)),
            ]
        }
        "kink" => return crate::report::effect::kink_inputs(results).unwrap_or_default(),
        _ => Vec::new(),
    };
    list.into_iter().filter_map(|(name, value)| Some([name.to_owned(), bind(&value?)])).collect()
}

/// What stands under the name of the run.
pub(super) fn facts(results: &Results) -> Vec<[String; 2]> {
    let (facts, summary) = (&results.facts, &results.summary);
    let last = results.frames.iter().map(|row| row.time_s).fold(0.0, f64::max);
    let [w, h] = facts.frame_size;
    let mut list = vec![
        ["Frames".to_owned(), format!("{} of {} used", summary.frames.usable, summary.frames.total)],
        ["Run time".to_owned(), duration(last)],
        ["Picture".to_owned(), format!("{w} × {h} px, {} µm/px", trimmed(facts.um_per_px, 4))],
    ];
    if let Some(gap) = facts.gap_um {
        list.push(["Gap".to_owned(), format!("{} µm", trimmed(gap, 4))]);
    }
    let load = match (&facts.fixture, summary.load.stress_mpa) {
        (fixture, Some(s)) if (s.max - s.min).abs() > 0.05 => {
            let range = format!("{} to {} MPa", digits(s.min, 3), digits(s.max, 3));
            fixture.as_ref().map_or(range.clone(), |name| format!("{name}, {range}"))
        }
        (fixture, Some(s)) => {
            let stress = format!("{} MPa", digits(s.median, 3));
            fixture.as_ref().map_or(stress.clone(), |name| format!("{name}, {stress}"))
        }
        (Some(fixture), None) => fixture.clone(),
        (None, None) => "none logged".to_owned(),
    };
    list.push(["Load".to_owned(), load]);
    list
}

/// Frames set aside, gathered by reason: "blank" → "3 frames: 4, 9, 17".
pub(super) fn set_aside(summary: &Summary) -> Vec<[String; 2]> {
    /// Numbers that are spelled out; the table of frames has them all.
    const SPELLED: usize = 40;
    let mut by_reason: Vec<(&str, Vec<usize>)> = Vec::new();
    for frame in &summary.frames.set_aside {
        match by_reason.iter_mut().find(|(reason, _)| *reason == frame.reason) {
            Some((_, frames)) => frames.push(frame.frame),
            None => by_reason.push((&frame.reason, vec![frame.frame])),
        }
    }
    let spell = |(reason, frames): (&str, Vec<usize>)| {
        let mut numbers: Vec<String> = frames.iter().take(SPELLED).map(usize::to_string).collect();
        if frames.len() > SPELLED {
            numbers.push("…".into());
        }
        [reason.to_owned(), format!("{}: {}", sentence(&counted(frames.len(), "frame", "frames")), numbers.join(", "))]
    };
    by_reason.into_iter().map(spell).collect()
}

/// Nested settings as `a.b` and value, in order.
pub(super) fn flat(settings: &serde_json::Value) -> Vec<[String; 2]> {
    fn walk(prefix: &str, value: &serde_json::Value, out: &mut Vec<[String; 2]>) {
        match value {
            serde_json::Value::Object(map) => {
                for (key, value) in map {
                    let dot = if prefix.is_empty() { "" } else { "." };
                    walk(&format!("{prefix}{dot}{key}"), value, out);
                }
            }
            serde_json::Value::Null if prefix.is_empty() => {}
            serde_json::Value::String(text) => out.push([prefix.to_owned(), text.clone()]),
            other => out.push([prefix.to_owned(), other.to_string()]),
        }
    }
    let mut out = Vec::new();
    walk("", settings, &mut out);
    out
}
