//! Stretches of frames for which a log says nothing, in words.

use super::series::Series;

/// A stretch of frames without a value.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Gap {
    /// Its first frame.
    pub first: usize,
    /// Its last frame.
    pub last: usize,
    /// Time of the first, s.
    pub from_s: f64,
    /// Time of the last, s.
    pub to_s: f64,
}

impl Series {
    /// Stretches of the given times (rising) at which nothing is in force.
    #[must_use]
    pub fn gaps(&self, times_s: &[f64]) -> Vec<Gap> {
        let mut gaps: Vec<Gap> = Vec::new();
        for (frame, &time_s) in times_s.iter().enumerate() {
            if self.at(time_s).is_some() {
                continue;
            }
            match gaps.last_mut() {
                Some(gap) if gap.last + 1 == frame => (gap.last, gap.to_s) = (frame, time_s),
                _ => gaps.push(Gap { first: frame, last: frame, from_s: time_s, to_s: time_s }),
            }
        }
        gaps
    }
}

/// Gaps listed in a warning; more are counted.
const LISTED: usize = 3;

/// A warning about the gaps of a log, or none when there are none. `what` names it: "the load log (force_n)".
#[must_use]
pub fn describe_gaps(what: &str, gaps: &[Gap], frames: usize) -> Option<String> {
    let missing: usize = gaps.iter().map(|gap| gap.last - gap.first + 1).sum();
    if missing == 0 {
        return None;
    }
    let listed: Vec<String> = gaps
        .iter()
        .take(LISTED)
        .map(|gap| format!("from {} s to {} s (frames {} to {})", gap.from_s, gap.to_s, gap.first, gap.last))
        .collect();
    let more = gaps.len().saturating_sub(LISTED);
    let more = if more > 0 { format!(" and {more} more stretches") } else { String::new() };
    let whole = if missing == frames {
        ": no frame is covered; see clock_offset_s and the unit of time_s"
    } else {
        ": these frames have no value; see hold_s if the logger writes changes only"
    };
    Some(format!("{what} says nothing {}{more}{whole}", listed.join(", ")))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn gaps_are_joined_and_told() {
        let series = Series::new(vec![0.0, 10.0, 60.0], vec![1.0; 3], 15.0);
        let times: Vec<f64> = (0..9).map(|frame| f64::from(frame) * 10.0).collect();
        let gaps = series.gaps(&times);
        assert_eq!(
            gaps,
            [Gap { first: 3, last: 5, from_s: 30.0, to_s: 50.0 }, Gap { first: 8, last: 8, from_s: 80.0, to_s: 80.0 },]
        );
        let text = describe_gaps("the load log", &gaps, 9).unwrap();
        assert!(text.contains("from 30 s to 50 s (frames 3 to 5), from 80 s"), "{text}");
        assert_eq!(describe_gaps("x", &[], 9), None);
    }
}
