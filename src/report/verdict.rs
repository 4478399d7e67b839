//! The run in four sentences: what grew, which way, whether the load did it, and when contact is to be expected.
//! Says "too few", "none was logged" or "nothing was seen" where that is so.

use super::words::{counted, duration, figures, fixed, sentence, signed, with_uncertainty};
use crate::measure::ForecastRow;
use crate::results::{Results, ShortEvidence};

/// Stands with every forecast.
pub const CAUTION: &str = "A forecast is no interlock: a cell on test can vent, burn or shatter at any time.";

/// What a person must know before acting on a report of a cell on test.
pub const SAFETY: &str = "A cell on test can vent, burn or shatter, and lithium reacts with water. Nothing on this page is an interlock \
     or a safety limit. Follow your lab's own rules, local codes and qualified people.";

/// What happened, which way it grew, whether the load did it, what is to come.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Verdict {
    /// Filaments, depth, rate, short.
    pub growth: String,
    /// Alignment with the load axis.
    pub direction: String,
    /// Whether growth turned when the load did.
    pub load: String,
    /// The last forecast, always with the caution.
    pub forecast: String,
}

impl Verdict {
    /// Puts the numbers of `results` into words.
    pub fn of(results: &Results) -> Self {
        Self {
            growth: growth(results),
            direction: direction(results),
            load: super::effect::load_in_short(results),
            forecast: forecast(results),
        }
    }

    /// The sentences in order.
    pub fn sentences(&self) -> [&str; 4] {
        [&self.growth, &self.direction, &self.load, &self.forecast]
    }
}

/// Whether any metal was traced.
fn grew(results: &Results) -> bool {
    !results.filaments.is_empty() || results.summary.depth.final_um.is_some_and(|depth| depth > 0.0)
}

fn length_of_run(results: &Results) -> f64 {
    results.frames.iter().map(|row| row.time_s).fold(0.0, f64::max)
}

fn growth(results: &Results) -> String {
    let summary = &results.summary;
    let over = format!(
        "in {} over {}",
        counted(summary.frames.usable, "usable frame", "usable frames"),
        duration(length_of_run(results))
    );
    if summary.frames.usable == 0 {
        return "No frame could be used, so nothing can be said about growth.".into();
    }
    if !grew(results) {
        return format!("No growth was seen {over}{}.", short_clause(results));
    }
    let rooted = results.filaments.iter().filter(|f| f.final_depth_um.is_some()).count();
    let elsewhere = match results.filaments.len() - rooted {
        0 => String::new(),
        n => format!(" and {n} elsewhere"),
    };
    let Some(depth) = summary.depth.final_um else {
        let all = counted(results.filaments.len(), "filament", "filaments");
        return format!("{} grew {over}, none of them from the plating edge{}.", sentence(&all), short_clause(results));
    };
    let deepest = format!("{} µm", with_uncertainty(depth, summary.depth.u_final_um));
    let share = match (summary.depth.final_fraction, summary.gap_um) {
        (Some(fraction), _) if fraction >= 1.0 => ", all the way to the far edge".to_owned(),
        (Some(fraction), Some(gap)) => {
            format!(
                ", {} % of its way across (the gap is {} µm at its narrowest)",
                fixed(fraction * 100.0, 0),
                figures(gap, 3)
            )
        }
        (Some(fraction), None) => format!(", {} % of its way across", fixed(fraction * 100.0, 0)),
        _ => String::new(),
    };
    format!(
        "{} grew from the plating edge {over}{elsewhere}; the deepest reached {deepest}{share}{}{}{}.",
        sentence(&counted(rooted, "filament", "filaments")),
        drawn_back(results),
        rate(results),
        short_clause(results),
    )
}

/// Where what is visible at the end lies behind what had grown.
fn drawn_back(results: &Results) -> String {
    /// Share of the depth by which it must lie behind to be told.
    const TOLD: f64 = 0.02;
    let last = results.frames.iter().rev().find(|row| row.usable);
    match last.and_then(|row| Some((row.depth_um?, row.front_depth_um?))) {
        Some((depth, front)) if front < depth * (1.0 - TOLD) => {
            format!(", of which {} µm can still be seen", figures(front, 3))
        }
        _ => String::new(),
    }
}

/// Rate per hour, minute or second, whichever reads well.
fn rate(results: &Results) -> String {
    let depth = &results.summary.depth;
    let Some(per_s) = depth.rate_um_per_s else {
        return String::new();
    };
    let (unit, seconds) = match per_s.abs() {
        r if r >= 0.1 => ("s", 1.0),
        r if r >= 0.1 / 60.0 => ("min", 60.0),
        _ => ("h", 3_600.0),
    };
    let value = figures(per_s * seconds, 3);
    match depth.rate_ci95 {
        Some([low, high]) => format!(
            ", growing {value} µm/{unit} (95 % interval {} to {})",
            figures(low * seconds, 3),
            figures(high * seconds, 3)
        ),
        None => format!(", growing {value} µm/{unit} (too little to give an interval)"),
    }
}

fn short_clause(results: &Results) -> String {
    let short = &results.summary.short;
    match (short.observed, short.time_s, short.evidence) {
        (true, Some(t), Some(ShortEvidence::Electrical)) => {
            format!("; the cell's log shows a short at {}", duration(t))
        }
        (true, Some(t), Some(ShortEvidence::Bridging)) => {
            format!("; metal touched the far edge at {}", duration(t))
        }
        (true, Some(t), None) => format!("; a short was recorded at {}", duration(t)),
        (true, None, _) => "; a short was recorded".into(),
        (false, ..) => String::new(),
    }
}

fn direction(results: &Results) -> String {
    if !grew(results) {
        return "With nothing grown there is no direction to judge.".into();
    }
    let growth = &results.summary.alignment.growth;
    let Some(value) = growth.value else {
        let logged = results.frames.iter().any(|row| row.load_direction_deg.is_some());
        return if logged {
            "No growth could be matched with the load of its time, so its alignment is not given.".into()
        } else {
            "No load axis was logged, so growth is not judged against one.".into()
        };
    };
    let filaments = counted(growth.n, "filament", "filaments");
    let angle = growth.mean_angle_to_load_deg.map_or_else(String::new, |a| format!(", mean angle {}°", fixed(a, 0)));
    let stress = match results.summary.load.stress_mpa {
        Some(s) if s.median > 0.0 => format!(", under a median of {} MPa of compression", figures(s.median, 3)),
        Some(s) if s.median < 0.0 => format!(", under a median of {} MPa of tension", figures(-s.median, 3)),
        _ => String::new(),
    };
    let Some([low, high]) = growth.ci95 else {
        return format!(
            "Growth stood at an alignment of {} to the load axis{angle}{stress}; {filaments} are too few to say more.",
            signed(value, 2)
        )
        .replace("one filament are", "one filament is");
    };
    let lead = if low > 0.0 {
        "Growth ran along the load axis more than across it"
    } else if high < 0.0 {
        "Growth ran across the load axis more than along it"
    } else {
        "Growth showed no clear preference for or against the load axis"
    };
    format!(
        "{lead}: alignment {} (95 % interval {} to {}, {filaments}){angle}{stress}.",
        signed(value, 2),
        signed(low, 2),
        signed(high, 2)
    )
}

fn forecast(results: &Results) -> String {
    let short = &results.summary.short;
    let said = match &results.summary.forecast {
        None if short.observed => "No forecast was issued before the short.".to_owned(),
        None if grew(results) => "The record allows no forecast yet.".to_owned(),
        None => "Without growth there is no forecast; absence of growth in these frames does not show that the cell is safe.".to_owned(),
        Some(row) if short.observed => {
            let when = duration(row.issued_at_s);
            format!("The last forecast before the short, issued at {when}, put {}.", quantiles(row))
        }
        Some(row) => {
            let chance = row.chance_by_horizon.map_or_else(String::new, |chance| {
                format!("; the chance that it comes by {} is {}", duration(row.horizon_s), chance_words(chance))
            });
            format!("If metal reaches the far edge, the forecast puts {}{chance}.", quantiles(row))
        }
    };
    if results.summary.forecast.is_some() { format!("{said} {CAUTION}") } else { said }
}

fn quantiles(row: &ForecastRow) -> String {
    match (row.p10_s, row.p50_s, row.p90_s) {
        (Some(low), Some(middle), Some(high)) => {
            format!("contact at {} (80 % interval {} to {})", duration(middle), duration(low), duration(high))
        }
        _ => "no time to contact, for the record allows none".into(),
    }
}

/// A chance in per cent, never a certainty.
fn chance_words(chance: f64) -> String {
    match chance {
        c if c < 0.01 => "below 1 %".into(),
        c if c > 0.99 => "above 99 %".into(),
        c => format!("{} %", fixed(c * 100.0, 0)),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::example;

    #[test]
    fn a_growing_cell_is_told_with_its_uncertainty() {
        let verdict = Verdict::of(&example::growing());
        assert!(verdict.growth.contains("±"), "{}", verdict.growth);
        assert!(verdict.direction.contains("95 % interval"), "{}", verdict.direction);
        assert!(verdict.forecast.contains("80 % interval"), "{}", verdict.forecast);
        assert!(verdict.forecast.ends_with(CAUTION));
    }

    #[test]
    fn nothing_is_told_as_nothing() {
        let verdict = Verdict::of(&example::still());
        assert!(verdict.growth.starts_with("No growth was seen in 12 usable frames"), "{}", verdict.growth);
        assert!(verdict.forecast.contains("does not show that the cell is safe"));
    }

    #[test]
    fn few_filaments_and_no_load_are_said() {
        let mut results = example::growing();
        results.summary.alignment.growth.ci95 = None;
        results.summary.alignment.growth.n = 1;
        assert!(Verdict::of(&results).direction.contains("one filament is too few to say more"));
        results.summary.alignment.growth.value = None;
        results.frames.iter_mut().for_each(|row| row.load_direction_deg = None);
        assert!(Verdict::of(&results).direction.starts_with("No load axis was logged"));
    }

    #[test]
    fn a_short_is_told_with_its_evidence() {
        let verdict = Verdict::of(&example::shorted());
        assert!(verdict.growth.contains("the cell's log shows a short at"), "{}", verdict.growth);
        assert!(verdict.forecast.starts_with("The last forecast before the short"));
    }
}
