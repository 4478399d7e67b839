//! Numbers, times and counts as a reader expects them in a sentence.

/// `value` with `digits` significant figures, without exponent for everyday sizes.
pub fn figures(value: f64, digits: i32) -> String {
    if value == 0.0 || !value.is_finite() {
        return if value == 0.0 { "0".into() } else { "not a number".into() };
    }
    let order = value.abs().log10().floor() as i32;
    if !(-4..9).contains(&order) {
        let decimals = usize::try_from(digits - 1).unwrap_or(0);
        return format!("{value:.decimals$e}").replace('-', "−");
    }
    let unit = 10_f64.powi(order + 1 - digits);
    let decimals = usize::try_from(digits - 1 - order).unwrap_or(0);
    minus(&format!("{:.decimals$}", (value / unit).round() * unit))
}

/// `value` with so many decimals and a true minus sign.
pub fn fixed(value: f64, decimals: usize) -> String {
    let text = format!("{value:.decimals$}");
    let zero = text.trim_start_matches('-').chars().all(|c| matches!(c, '0' | '.'));
    if zero { text.trim_start_matches('-').to_owned() } else { minus(&text) }
}

/// As [`fixed`], a plus sign before what is above zero.
pub fn signed(value: f64, decimals: usize) -> String {
    let text = fixed(value, decimals);
    if text.starts_with('−') || fixed(0.0, decimals) == text { text } else { format!("+{text}") }
}

fn minus(text: &str) -> String {
    text.replace('-', "−")
}

/// A run time or duration: "12 s", "4.5 min", "1 h 20 min", "3 d 4 h".
pub fn duration(seconds: f64) -> String {
    let sign = if seconds < 0.0 { "−" } else { "" };
    let s = seconds.abs();
    let text = if s < 120.0 {
        format!("{} s", trimmed(s, 3))
    } else if s < 3_600.0 {
        format!("{} min", trimmed(s / 60.0, 3))
    } else if s < 48.0 * 3_600.0 {
        pair(s / 60.0, 60.0, "h", "min")
    } else {
        pair(s / 3_600.0, 24.0, "d", "h")
    };
    format!("{sign}{text}")
}

/// As [`figures`], without zeros that end a decimal fraction.
pub fn trimmed(value: f64, digits: i32) -> String {
    let text = figures(value, digits);
    if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text }
}

/// `small` units of which `per` make a large one.
fn pair(small: f64, per: f64, large: &str, little: &str) -> String {
    let whole = small.round();
    let (many, rest) = ((whole / per).floor(), whole % per);
    if rest < 1.0 { format!("{many} {large}") } else { format!("{many} {large} {rest} {little}") }
}

/// Keeps a number and its unit on one line: the space between them becomes one that does not break.
pub fn bind(text: &str) -> String {
    const UNITS: [&str; 8] = ["µm", "µm/s", "µm/min", "min", "s", "h", "MPa", "%"];
    let mut out = String::with_capacity(text.len() + 16);
    for (i, word) in text.split(' ').enumerate() {
        let unit = word.trim_end_matches([',', ';', '.', ')']);
        let after_number = out.chars().last().is_some_and(|c| c.is_ascii_digit());
        if i > 0 {
            out.push(if after_number && UNITS.contains(&unit) { '\u{a0}' } else { ' ' });
        }
        out.push_str(word);
    }
    out
}

/// "no filament", "one filament", "12 filaments".
pub fn counted(n: usize, one: &str, many: &str) -> String {
    match n {
        0 => format!("no {one}"),
        1 => format!("one {one}"),
        _ => format!("{n} {many}"),
    }
}

/// The text with its first letter large.
pub fn sentence(text: &str) -> String {
    let mut letters = text.chars();
    letters.next().map_or_else(String::new, |first| first.to_uppercase().chain(letters).collect())
}

/// A value and its standard uncertainty, rounded to the uncertainty's first two figures at most:
/// "612.4 ± 1.3".
pub fn with_uncertainty(value: f64, u: Option<f64>) -> String {
    match u {
        Some(u) if u > 0.0 && u.is_finite() => {
            let digits = if u.log10().fract().rem_euclid(1.0) < 0.4 { 1 } else { 0 };
            let decimals = usize::try_from(digits - u.log10().floor() as i32).unwrap_or(0);
            format!("{} ± {}", fixed(value, decimals), fixed(u, decimals))
        }
        _ => figures(value, 3),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_read_well() {
        assert_eq!(figures(0.012_345, 3), "0.0123");
        assert_eq!(figures(-612.44, 3), "−612");
        assert_eq!(figures(123_456.0, 3), "123000");
        assert_eq!(figures(0.0, 3), "0");
        assert_eq!(figures(2.5e-9, 2), "2.5e−9");
        assert_eq!(signed(0.621, 2), "+0.62");
        assert_eq!(signed(-0.001, 2), "0.00");
        assert_eq!(with_uncertainty(612.44, Some(1.34)), "612.4 ± 1.3");
        assert_eq!(with_uncertainty(612.44, Some(7.1)), "612 ± 7");
        assert_eq!(with_uncertainty(612.44, None), "612");
    }

    #[test]
    fn units_stay_with_their_numbers() {
        assert_eq!(bind("over 20 min, 82 % of 5 cells"), "over 20\u{a0}min, 82\u{a0}% of 5 cells");
    }

    #[test]
    fn times_read_well() {
        assert_eq!(duration(12.0), "12 s");
        assert_eq!(duration(270.0), "4.5 min");
        assert_eq!(duration(4_800.0), "1 h 20 min");
        assert_eq!(duration(7_199.0), "2 h");
        assert_eq!(duration(273_600.0), "3 d 4 h");
        assert_eq!(duration(0.0), "0 s");
    }
}
