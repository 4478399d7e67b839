//! Flat up to a dose, then rising: η is level up to an onset and a straight line beyond it (the join-point model, Hudson 1966,
//! J. Am. Stat. Assoc. 61, 1097–1129, on the scale of the link). The onset is searched over a grid between the doses tested.
//! Limit: with few distinct doses several onsets fit alike; the profile walks over all of them.

use super::{DoseFit, Link, NoFit, Trials, fit, profiled, walk_out};

/// Onsets tried between the lowest and the highest dose.
const ONSETS: usize = 24;

/// A fitted flat-then-rising response.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rising {
    /// Dose up to which it is flat.
    pub onset: f64,
    /// The line against the dose beyond the onset (0 up to it).
    pub line: DoseFit,
}

fn beyond(trials: &[Trials], onset: f64) -> Vec<Trials> {
    trials.iter().map(|t| Trials { dose: (t.dose - onset).max(0.0), ..*t }).collect()
}

/// Onsets to try, rising, the highest dose left out.
fn onsets(trials: &[Trials]) -> Vec<f64> {
    let (low, high) = trials.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |r, t| (r.0.min(t.dose), r.1.max(t.dose)));
    (0..ONSETS).map(|i| low + (high - low) * i as f64 / ONSETS as f64).collect()
}

/// Fits the response that is flat first.
///
/// # Errors
/// [`NoFit`] when no onset has a finite line.
pub fn fit_rising(trials: &[Trials], link: Link) -> Result<Rising, NoFit> {
    let mut best: Result<Rising, NoFit> = Err(NoFit::NothingVaries);
    for onset in onsets(trials) {
        match (fit(&beyond(trials, onset), link), &best) {
            (Ok(line), Ok(known)) if line.deviance >= known.line.deviance - 1e-9 => {}
            (Ok(line), _) => best = Ok(Rising { onset, line }),
            (Err(why), Err(NoFit::NothingVaries)) => best = Err(why),
            (Err(_), _) => {}
        }
    }
    best
}

impl Rising {
    /// Fitted share at a dose.
    #[must_use]
    pub fn share(&self, dose: f64) -> f64 {
        self.line.share((dose - self.onset).max(0.0))
    }

    /// Dose at which the share is `share`; `None` where the flat part has passed it already or the line does not rise.
    #[must_use]
    pub fn dose_for(&self, share: f64) -> Option<f64> {
        let past = self.line.dose_for(share);
        (self.line.slope > 0.0 && past >= 0.0).then_some(self.onset + past)
    }

    /// Limits of that dose: where the least deviance over all onsets has risen by `rise(dose)`; an end that does not exist
    /// is `None`.
    #[must_use]
    pub fn limits(&self, trials: &[Trials], share: f64, rise: f64) -> [Option<f64>; 2] {
        let (Some(best), level) = (self.dose_for(share), self.line.link.eta(share)) else { return [None, None] };
        let moved: Vec<(f64, Vec<Trials>)> = onsets(trials).into_iter().map(|o| (o, beyond(trials, o))).collect();
        let limit = self.line.deviance + rise;
        let outside = |x: f64| {
            moved
                .iter()
                .filter(|(onset, _)| *onset <= x)
                .all(|(onset, trials)| profiled(trials, self.line.link, level, x - onset) > limit)
        };
        let spread = self.line.se_dose(share).min(best.abs() + 1.0);
        walk_out([best, best], 0.25 * spread, outside)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn at(dose: f64, yes: f64) -> Trials {
        Trials { dose, tried: 40.0, yes }
    }

    #[test]
    fn a_flat_start_is_seen() {
        let trials = [at(0.0, 4.0), at(30.0, 4.0), at(60.0, 4.0), at(90.0, 5.0), at(120.0, 20.0), at(150.0, 36.0)];
        let rising = fit_rising(&trials, Link::Logit).unwrap();
        assert!((70.0..100.0).contains(&rising.onset), "{rising:?}");
        assert!((110.0..130.0).contains(&rising.dose_for(0.5).unwrap()), "{rising:?}");
        assert!(rising.line.deviance < fit(&trials, Link::Logit).unwrap().deviance - 4.0);
        let [low, high] = rising.limits(&trials, 0.5, 3.84);
        assert!(100.0 < low.unwrap() && high.unwrap() < 140.0, "{low:?} {high:?}");
    }

    #[test]
    fn without_a_flat_start_it_is_the_straight_line() {
        let trials = [at(0.0, 4.0), at(50.0, 12.0), at(100.0, 28.0), at(150.0, 36.0)];
        let (rising, line) = (fit_rising(&trials, Link::Logit).unwrap(), fit(&trials, Link::Logit).unwrap());
        assert!((rising.dose_for(0.5).unwrap() - line.dose_for(0.5)).abs() < 5.0);
        assert!(rising.share(60.0) > rising.share(0.0));
    }

    #[test]
    fn a_share_passed_already_has_no_dose() {
        let trials = [at(0.0, 30.0), at(50.0, 30.0), at(100.0, 36.0), at(150.0, 39.0)];
        assert_eq!(fit_rising(&trials, Link::Logit).unwrap().dose_for(0.5), None);
    }
}
