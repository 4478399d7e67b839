//! What a logger's heading most likely means: words of the trade in several languages, and the unit in
//! the heading. A guess is only ever proposed to a person, never used.

use super::textlog::split;

/// A quantity with the words and units that loggers head its column with (common practice).
struct Habit {
    column: &'static str,
    words: &'static [&'static str],
    /// Unit and factor to ours.
    units: &'static [(&'static str, f64)],
}

static HABITS: &[Habit] = &[
    Habit {
        column: "time_s",
        words: &["time_s", "time", "zeit", "temps", "tiempo", "elapsed", "t"],
        units: &[("ms", 1e-3), ("min", 60.0), ("h", 3600.0), ("s", 1.0), ("sec", 1.0)],
    },
    Habit { column: "time", words: &["timestamp", "datetime", "date", "datum", "date_time"], units: &[] },
    Habit {
        column: "force_n",
        words: &["force_n", "force", "load", "kraft", "last", "fuerza", "f"],
        units: &[("kn", 1e3), ("mn", 1e-3), ("n", 1.0), ("kgf", 9.806_65)],
    },
    Habit {
        column: "stress_mpa",
        words: &["stress_mpa", "stress", "spannung_mech", "contrainte", "sigma"],
        units: &[("gpa", 1e3), ("kpa", 1e-3), ("mpa", 1.0), ("pa", 1e-6)],
    },
    Habit {
        column: "direction_deg",
        words: &["direction_deg", "direction", "angle", "winkel", "richtung"],
        units: &[("rad", 57.295_779_513_082_32), ("deg", 1.0), ("°", 1.0)],
    },
    Habit {
        column: "current_ma",
        words: &["current_ma", "current", "strom", "courant", "i"],
        units: &[("ua", 1e-3), ("µa", 1e-3), ("na", 1e-6), ("ma", 1.0), ("a", 1e3)],
    },
    Habit {
        column: "voltage_v",
        words: &["voltage_v", "voltage", "ewe", "potential", "spannung", "tension", "u", "v"],
        units: &[("mv", 1e-3), ("v", 1.0)],
    },
    Habit {
        column: "temperature_c",
        words: &["temperature_c", "temperature", "temperatur", "temp"],
        units: &[("°c", 1.0), ("c", 1.0)],
    },
];

/// Splits a heading into its words and its unit: "Kraft [kN]" → "kraft", "kn"; "I/mA" → "i", "ma".
fn parts(heading: &str) -> (String, String) {
    let lower = heading.trim().to_lowercase();
    let cut = lower.find(['[', '(', '/', '<', ',']);
    let (word, unit) = cut.map_or((lower.as_str(), ""), |at| lower.split_at(at));
    let trim = |text: &str| text.trim_matches(|letter: char| " _[]()/<>,".contains(letter)).to_owned();
    (trim(word), trim(unit))
}

/// The heading among `headings` that most likely stands for a column of ours.
pub(super) fn heading_for<'a>(column: &str, headings: &'a [String]) -> Option<&'a str> {
    let habit = HABITS.iter().find(|habit| habit.column == column)?;
    let score = |heading: &str| {
        let (word, unit) = parts(heading);
        let first = word.split([' ', '_', '-']).next().unwrap_or("");
        let named = habit.words.iter().any(|known| *known == word || (known.len() > 1 && *known == first));
        let united = habit.units.iter().any(|(known, _)| *known == unit);
        match (named, united, unit.is_empty()) {
            (true, true, _) => 2,
            (true, _, true) => 1,
            _ => 0,
        }
    };
    let best = headings.iter().max_by_key(|heading| score(heading))?;
    let first = headings.iter().find(|heading| score(heading) == score(best))?;
    (score(first) > 0).then_some(first.as_str())
}

/// The factor from the unit in a heading to ours, where it is not 1.
pub(super) fn factor_for(column: &str, heading: &str) -> Option<f64> {
    let habit = HABITS.iter().find(|habit| habit.column == column)?;
    let (_, unit) = parts(heading);
    let factor = habit.units.iter().find(|(known, _)| *known == unit)?.1;
    ((factor - 1.0).abs() > f64::EPSILON).then_some(factor)
}

/// The headings of a text log: the line with most fields, none of them a number, among the first lines.
pub(super) fn heading_line(text: &str) -> Option<Vec<String>> {
    /// Lines looked at (common practice).
    const LINES: usize = 200;
    let mut best: Option<Vec<String>> = None;
    let mut fields = Vec::new();
    for line in text.lines().take(LINES) {
        for separator in [',', ';', '\t'] {
            split(line, separator, &mut fields);
            let words = fields.iter().all(|field| field.parse::<f64>().is_err())
                && fields.iter().filter(|field| !field.is_empty()).count() >= 2;
            if words && best.as_ref().is_none_or(|best| fields.len() > best.len()) {
                best = Some(fields.iter().map(|field| (*field).to_owned()).collect());
            }
        }
    }
    best
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn headings_of_many_loggers() {
        let headings =
            ["Zeit (min)", "Kraft [kN]", "I/mA", "Ewe/V", "Spannung (MPa)", "Temperatur [°C]"].map(str::to_owned);
        for (column, heading) in [
            ("time_s", "Zeit (min)"),
            ("force_n", "Kraft [kN]"),
            ("current_ma", "I/mA"),
            ("voltage_v", "Ewe/V"),
            ("temperature_c", "Temperatur [°C]"),
        ] {
            assert_eq!(heading_for(column, &headings), Some(heading), "{column}");
        }
        assert_eq!(heading_for("direction_deg", &headings), None);
        assert_eq!(factor_for("force_n", "Kraft [kN]"), Some(1000.0));
        assert_eq!(factor_for("time_s", "Zeit (min)"), Some(60.0));
        assert_eq!(factor_for("voltage_v", "Ewe/V"), None);
    }
}
