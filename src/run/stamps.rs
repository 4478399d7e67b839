//! When frames were taken, as their names tell: a date and time (`20260305_100000`, `2026-03-05T10-00-00`)
//! or seconds (`t0120s`). Proposed to a person, never used unasked.

use super::clock::parse_stamp;

/// Times in the names of the frames.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct NameTimes {
    /// Seconds since the first frame.
    pub(super) times_s: Vec<f64>,
    /// Date of the first frame as TOML text, where names hold dates.
    pub(super) start: Option<String>,
}

impl NameTimes {
    /// Median interval, and whether all intervals are within 1 % of it.
    pub(super) fn interval_s(&self) -> Option<(f64, bool)> {
        /// Relative deviation that still counts as even (common practice).
        const EVEN: f64 = 0.01;
        let mut steps: Vec<f64> = self.times_s.windows(2).map(|pair| pair[1] - pair[0]).collect();
        steps.sort_by(f64::total_cmp);
        let median = *steps.get(steps.len() / 2)?;
        let even = steps.iter().all(|step| (step - median).abs() <= EVEN * median);
        (median > 0.0).then_some((median, even))
    }
}

/// Reads the times out of names in order; absent unless every name has one and they rise.
pub(super) fn read(names: &[String]) -> Option<NameTimes> {
    let dates: Option<Vec<String>> = names.iter().map(|name| date(name)).collect();
    let (stamps, start) = match dates {
        Some(dates) => {
            let stamps: Option<Vec<f64>> = dates.iter().map(|date| parse_stamp(date, None).ok()).collect();
            (stamps?, dates.into_iter().next())
        }
        None => (names.iter().map(|name| seconds(name)).collect::<Option<Vec<f64>>>()?, None),
    };
    let zero = *stamps.first()?;
    let rising = stamps.windows(2).all(|pair| pair[1] > pair[0]);
    rising.then(|| NameTimes { times_s: stamps.iter().map(|stamp| stamp - zero).collect(), start })
}

/// Fourteen digits that are a date and a time, with or without separators between them.
fn date(name: &str) -> Option<String> {
    let bytes = name.as_bytes();
    (0..bytes.len()).find_map(|start| {
        if start > 0 && bytes[start - 1].is_ascii_digit() {
            return None;
        }
        let digits = fourteen(&bytes[start..])?;
        let part = |from: usize, to: usize| digits.get(from..to);
        let text = format!(
            "{}-{}-{}T{}:{}:{}",
            part(0, 4)?,
            part(4, 6)?,
            part(6, 8)?,
            part(8, 10)?,
            part(10, 12)?,
            part(12, 14)?
        );
        (digits.starts_with("19") || digits.starts_with("20")).then_some(())?;
        parse_stamp(&text, None).ok().map(|_| text)
    })
}

fn fourteen(bytes: &[u8]) -> Option<String> {
    let mut digits = String::new();
    for &byte in bytes {
        match byte {
            b'0'..=b'9' => digits.push(char::from(byte)),
            b'-' | b'_' | b'T' | b':' | b' ' | b'.' if matches!(digits.len(), 4 | 6 | 8 | 10 | 12) => {}
            _ => return None,
        }
        if digits.len() == 14 {
            return Some(digits);
        }
    }
    None
}

/// Digits (with a point) directly before an `s` that ends a word.
fn seconds(name: &str) -> Option<f64> {
    let stem = name.rsplit_once('.').map_or(name, |(stem, _)| stem);
    stem.split(['_', '-', ' ', '/']).find_map(|word| {
        let digits = word.strip_suffix('s')?.trim_start_matches(|letter: char| letter.is_ascii_alphabetic());
        let plain = !digits.is_empty() && digits.bytes().all(|byte| byte.is_ascii_digit() || byte == b'.');
        plain.then(|| digits.parse().ok())?
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    fn times(names: &[&str]) -> Option<NameTimes> {
        read(&names.iter().map(|name| (*name).to_owned()).collect::<Vec<_>>())
    }

    #[test]
    fn dates_and_seconds() {
        let dated =
            times(&["cell_20260305_100000.png", "cell_20260305_100010.png", "cell_20260305_100020.png"]).unwrap();
        assert_eq!(dated.start.as_deref(), Some("2026-03-05T10:00:00"));
        assert_eq!(dated.interval_s(), Some((10.0, true)));
        let dashed = times(&["2026-03-05T10-00-00.tif", "2026-03-05T10-01-00.tif"]).unwrap();
        assert_eq!(dashed.times_s, [0.0, 60.0]);
        let counted = times(&["f_t0010s.png", "f_t0020s.png", "f_t0045s.png"]).unwrap();
        assert_eq!(counted.interval_s(), Some((25.0, false)));
        assert_eq!(times(&["f1.png", "f2.png"]), None);
        assert_eq!(times(&["t20s.png", "t10s.png"]), None);
    }
}
