//! Is it the load alone that differs? What should be the same for all runs, what differs, and which of it would bias.
//!
//! Each condition has a tolerance (common practice, by what it does to depth rates, times and traced lengths). A difference
//! beyond it is shown; one that moves the results compared is refused unless the user accepts mixed runs. Limit: a condition
//! that was not recorded cannot be judged; that is shown, too.

use std::collections::BTreeSet;

use serde::Serialize;

use super::RunRecord;

/// A condition that differs between the runs, or is not known for some.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Difference {
    /// The condition.
    pub what: &'static str,
    /// Its values, or their range.
    pub values: String,
    /// Why it matters.
    pub why: &'static str,
    /// Whether it would bias the comparison.
    pub biases: bool,
    /// Runs for which it is not known.
    pub unknown: usize,
}

/// How far numbers may lie apart.
#[derive(Clone, Copy)]
enum Apart {
    /// Largest over least.
    Factor(f64),
    /// Largest less least.
    Span(f64),
}

/// Share of frames set aside above which a run is no longer like the others (the rule of the house, 10 %).
const MANY_SET_ASIDE: f64 = 0.1;

/// All conditions that differ or are not known for some runs only.
#[must_use]
pub fn differences(records: &[RunRecord]) -> Vec<Difference> {
    let number = |what, unit, apart, biases, why, of: fn(&RunRecord) -> Option<f64>| {
        numbers(records, what, unit, apart, biases, why, of)
    };
    let word = |what, biases, why, of: fn(&RunRecord) -> Option<&String>| words(records, what, biases, why, of);
    let speeds = "growth follows the current";
    [
        number("current density", "mA/cm²", Apart::Factor(1.1), true, speeds, |r| r.conditions.current_ma_per_cm2),
        word("control of the cell", true, "growth follows the current", |r| r.conditions.control.as_ref()),
        number("gap", "µm", Apart::Factor(1.1), true, "a wider gap takes longer to cross", |r| r.conditions.gap_um),
        number("electrode area", "mm²", Apart::Factor(1.1), false, "more edge, more filaments", |r| {
            r.conditions.area_mm2
        }),
        number("temperature", "°C", Apart::Span(5.0), true, "a warmer cell plates and conducts otherwise", |r| {
            r.conditions.temperature_c
        }),
        number("thickness", "mm", Apart::Factor(1.1), true, "stress and depth of view change with it", |r| {
            r.conditions.thickness_mm
        }),
        number("scale", "µm/px", Apart::Factor(1.25), true, "a coarser picture misses thin filaments", |r| {
            r.conditions.um_per_px
        }),
        number("frame interval", "s", Apart::Factor(2.0), true, "longer intervals date growth later", |r| {
            r.conditions.interval_s
        }),
        word("settings of the analysis", true, "other settings trace otherwise", |r| r.conditions.settings.as_ref()),
        word("program version", true, "another version may trace otherwise", |r| r.conditions.version.as_ref()),
        word("polarity", true, "dark and bright filaments are not seen alike", |r| r.conditions.polarity.as_ref()),
        set_aside(records),
    ]
    .into_iter()
    .flatten()
    .collect()
}

fn numbers(
    records: &[RunRecord],
    what: &'static str,
    unit: &str,
    apart: Apart,
    biases: bool,
    why: &'static str,
    of: fn(&RunRecord) -> Option<f64>,
) -> Option<Difference> {
    let known: Vec<f64> = records.iter().filter_map(of).collect();
    let (low, high) = known.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |r, v| (r.0.min(*v), r.1.max(*v)));
    let differs = match apart {
        Apart::Factor(factor) => low <= 0.0 || high > low * factor,
        Apart::Span(span) => high - low > span,
    };
    let unknown = records.len() - known.len();
    let differs = differs && known.len() > 1 && high > low;
    let partly = unknown > 0 && !known.is_empty();
    let values = if known.is_empty() { String::new() } else { range(low, high, unit) };
    (differs || partly).then_some(Difference { what, values, why, biases: biases && differs, unknown })
}

fn range(low: f64, high: f64, unit: &str) -> String {
    let [a, b] = [low, high].map(short);
    if a == b { format!("{a} {unit}") } else { format!("{a} to {b} {unit}") }
}

/// Four significant figures at most.
fn short(value: f64) -> String {
    let decimals = if value.abs() >= 1000.0 { 0 } else { (3 - value.abs().max(1e-9).log10().floor() as i32).max(0) };
    let text = format!("{value:.*}", usize::try_from(decimals).unwrap_or(0));
    let text = if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.') } else { &text };
    text.replace('-', "−")
}

fn words(
    records: &[RunRecord],
    what: &'static str,
    biases: bool,
    why: &'static str,
    of: fn(&RunRecord) -> Option<&String>,
) -> Option<Difference> {
    let known: BTreeSet<&String> = records.iter().filter_map(of).collect();
    let unknown = records.iter().filter(|r| of(r).is_none()).count();
    let differs = known.len() > 1;
    let values = known.iter().map(|v| v.as_str()).collect::<Vec<_>>().join("; ");
    let partly = unknown > 0 && !known.is_empty();
    (differs || partly).then_some(Difference { what, values, why, biases: biases && differs, unknown })
}

fn set_aside(records: &[RunRecord]) -> Option<Difference> {
    let many: Vec<String> = records
        .iter()
        .filter(|r| r.conditions.set_aside > MANY_SET_ASIDE)
        .map(|r| format!("{} ({:.0} %)", r.run, 100.0 * r.conditions.set_aside))
        .collect();
    (!many.is_empty()).then(|| Difference {
        what: "more than 10 % of the frames set aside",
        values: many.join(", "),
        why: "growth that was not seen is dated later or missed",
        biases: true,
        unknown: 0,
    })
}

#[cfg(test)]
mod tests {
    use super::super::record::Conditions;
    use super::*;

    fn like(run: &str, change: impl Fn(&mut Conditions)) -> RunRecord {
        let mut conditions = Conditions {
            current_ma_per_cm2: Some(0.6),
            gap_um: Some(330.0),
            um_per_px: Some(1.6),
            interval_s: Some(30.0),
            version: Some("1".into()),
            polarity: Some("darker".into()),
            ..Conditions::default()
        };
        change(&mut conditions);
        RunRecord { run: run.into(), conditions, ..RunRecord::default() }
    }

    #[test]
    fn like_runs_differ_in_nothing() {
        assert!(differences(&[like("a", |_| ()), like("b", |c| c.gap_um = Some(335.0))]).is_empty());
        assert!(differences(&[]).is_empty());
    }

    #[test]
    fn what_would_bias_is_told_from_what_would_not() {
        let runs = [
            like("a", |_| ()),
            like("b", |c| {
                c.current_ma_per_cm2 = Some(1.2);
                c.area_mm2 = Some(3.0);
                c.polarity = Some("brighter".into());
                c.set_aside = 0.25;
            }),
            like("c", |c| c.area_mm2 = Some(6.0)),
        ];
        let found = differences(&runs);
        let told: Vec<(&str, bool)> = found.iter().map(|d| (d.what, d.biases)).collect();
        assert_eq!(
            told,
            [
                ("current density", true),
                ("electrode area", false),
                ("polarity", true),
                ("more than 10 % of the frames set aside", true)
            ]
        );
        assert_eq!(found[0].values, "0.6 to 1.2 mA/cm²");
        assert_eq!(found[1].unknown, 1);
    }

    #[test]
    fn not_known_for_some_is_shown_and_does_not_bias() {
        let found = differences(&[like("a", |_| ()), like("b", |c| c.gap_um = None)]);
        assert_eq!((found.len(), found[0].what, found[0].biases, found[0].unknown), (1, "gap", false, 1));
    }
}
