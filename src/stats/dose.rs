//! Share of a yes against dose: binomial regression on a straight line, and the dose for a given share.
//! Sources: Fisher scoring as in McCullagh & Nelder (1989), Generalized Linear Models, section 2.5; dose and its limits by the
//! delta method, Fieller (Finney 1971, Probit Analysis, section 4.7) and the profile of the deviance.
//! Limits: independent trials; where specimens share a fate, take [`clustered`]. Complete separation has no finite fit.

use super::distributions::{normal_cdf, normal_pdf, normal_quantile};

pub mod clustered;
pub mod predict;
pub mod rising;

/// Trials at one dose.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Trials {
    /// Dose, any unit.
    pub dose: f64,
    /// Number tried, > 0.
    pub tried: f64,
    /// Number of yes, 0 to `tried`.
    pub yes: f64,
}

/// From the straight line η = a + b·dose to a share.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Link {
    /// 1/(1 + e^−η).
    Logit,
    /// Φ(η).
    Probit,
    /// 1 − exp(−e^η).
    ComplementaryLogLog,
}

/// Shares nearer to 0 or 1 than this are kept off it, so that logarithms stay finite.
const SHARE_FLOOR: f64 = 1e-15;

impl Link {
    /// Share and its slope at η.
    fn share(self, eta: f64) -> (f64, f64) {
        let (share, slope) = match self {
            Self::Logit => {
                let p = 1.0 / (1.0 + libm::exp(-eta));
                (p, p * (1.0 - p))
            }
            Self::Probit => (normal_cdf(eta), normal_pdf(eta)),
            Self::ComplementaryLogLog => {
                let rate = libm::exp(eta.min(700.0));
                (-libm::expm1(-rate), rate * libm::exp(-rate))
            }
        };
        (share.clamp(SHARE_FLOOR, 1.0 - SHARE_FLOOR), slope)
    }

    /// η of a share, 0 < share < 1.
    #[must_use]
    pub fn eta(self, share: f64) -> f64 {
        match self {
            Self::Logit => libm::log(share / (1.0 - share)),
            Self::Probit => normal_quantile(share),
            Self::ComplementaryLogLog => libm::log(-libm::log1p(-share)),
        }
    }
}

/// Why there is no fit.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum NoFit {
    /// A dose divides all yes from all no: the slope has no finite estimate and no standard error.
    #[error("a single dose divides every yes from every no: the slope has no finite estimate")]
    Separated,
    /// Every trial gave the same answer, or all had one dose.
    #[error("all answers or all doses are the same: nothing changes with dose")]
    NothingVaries,
    /// The iteration did not settle.
    #[error("the fit did not settle")]
    Unsettled,
}

/// A fitted dose–response line.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct DoseFit {
    /// The link.
    pub link: Link,
    /// η at dose 0.
    pub intercept: f64,
    /// Change of η per unit of dose.
    pub slope: f64,
    /// Variances of intercept and slope and their covariance, in the order aa, ab, bb.
    pub covariance: [f64; 3],
    /// Deviance from the saturated model.
    pub deviance: f64,
}

/// Steps of Fisher scoring at most.
const MAX_STEPS: usize = 100;

/// Fits the line.
///
/// ```
/// use veerlog::stats::dose::{fit, Link, NoFit, Trials};
/// let at = |dose, yes| Trials { dose, tried: 10.0, yes };
/// let line = fit(&[at(0.0, 1.0), at(50.0, 3.0), at(100.0, 8.0), at(150.0, 9.0)], Link::Logit).unwrap();
/// assert!((60.0..90.0).contains(&line.dose_for(0.5)));
/// assert_eq!(fit(&[at(0.0, 0.0), at(50.0, 10.0)], Link::Logit), Err(NoFit::Separated));
/// ```
///
/// # Errors
/// [`NoFit`] when the data hold no finite line.
pub fn fit(trials: &[Trials], link: Link) -> Result<DoseFit, NoFit> {
    refuse_without_overlap(trials)?;
    // Doses are centred and scaled, so that intercept and slope are of one size.
    let total: f64 = trials.iter().map(|t| t.tried).sum();
    let centre = trials.iter().map(|t| t.tried * t.dose).sum::<f64>() / total;
    let scale = trials.iter().map(|t| (t.dose - centre).abs()).fold(0.0, f64::max);
    let scaled: Vec<Trials> = trials.iter().map(|t| Trials { dose: (t.dose - centre) / scale, ..*t }).collect();
    let (a, b, [aa, ab, bb]) = score_to_convergence(&scaled, link)?;
    // Back: slope b/s, intercept a − c·b/s, and their covariance by the same linear map.
    let k = centre / scale;
    let intercept = a - k * b;
    let slope = b / scale;
    Ok(DoseFit {
        link,
        intercept,
        slope,
        covariance: [aa - 2.0 * k * ab + k * k * bb, (ab - k * bb) / scale, bb / (scale * scale)],
        deviance: deviance(&scaled, link, |x| a + b * x),
    })
}

fn refuse_without_overlap(trials: &[Trials]) -> Result<(), NoFit> {
    let range = |has: &dyn Fn(&Trials) -> bool| {
        trials
            .iter()
            .filter(|t| has(t))
            .fold((f64::INFINITY, f64::NEG_INFINITY), |r, t| (r.0.min(t.dose), r.1.max(t.dose)))
    };
    let (yes, no, all) = (range(&|t| t.yes > 0.0), range(&|t| t.yes < t.tried), range(&|_| true));
    if yes.0 > yes.1 || no.0 > no.1 || all.0 >= all.1 {
        return Err(NoFit::NothingVaries);
    }
    if no.1 <= yes.0 || yes.1 <= no.0 {
        return Err(NoFit::Separated);
    }
    Ok(())
}

/// Fisher scoring with step halving: intercept, slope and their covariance.
fn score_to_convergence(trials: &[Trials], link: Link) -> Result<(f64, f64, [f64; 3]), NoFit> {
    let (mut a, mut b) = (0.0, 0.0);
    let mut fit = deviance(trials, link, |_| 0.0);
    for _ in 0..MAX_STEPS {
        let [u, v, aa, ab, bb] = score(trials, link, |x| a + b * x);
        let det = aa * bb - ab * ab;
        if det.is_nan() || det <= 0.0 {
            return Err(NoFit::Unsettled);
        }
        let (da, db) = ((bb * u - ab * v) / det, (aa * v - ab * u) / det);
        if da.abs() + db.abs() < 1e-12 * (1.0 + a.abs() + b.abs()) {
            return Ok((a, b, [bb / det, -ab / det, aa / det]));
        }
        let mut share = 1.0;
        loop {
            let (na, nb) = (a + share * da, b + share * db);
            let next = deviance(trials, link, |x| na + nb * x);
            if next <= fit + 1e-12 * (1.0 + fit) || share < 1e-6 {
                (a, b, fit) = (na, nb, next);
                break;
            }
            share *= 0.5;
        }
    }
    Err(NoFit::Unsettled)
}

/// Score and information of (intercept, slope): u_a, u_b, i_aa, i_ab, i_bb.
fn score(trials: &[Trials], link: Link, eta: impl Fn(f64) -> f64) -> [f64; 5] {
    trials.iter().fold([0.0; 5], |mut sum, t| {
        let (p, slope) = link.share(eta(t.dose));
        let pull = (t.yes - t.tried * p) * slope / (p * (1.0 - p));
        let weight = t.tried * slope * slope / (p * (1.0 - p));
        for (s, add) in sum.iter_mut().zip([pull, pull * t.dose, weight, weight * t.dose, weight * t.dose * t.dose]) {
            *s += add;
        }
        sum
    })
}

fn deviance(trials: &[Trials], link: Link, eta: impl Fn(f64) -> f64) -> f64 {
    let part = |seen: f64, expected: f64| if seen > 0.0 { seen * libm::log(seen / expected) } else { 0.0 };
    2.0 * trials
        .iter()
        .map(|t| {
            let (p, _) = link.share(eta(t.dose));
            part(t.yes, t.tried * p) + part(t.tried - t.yes, t.tried * (1.0 - p))
        })
        .sum::<f64>()
}

impl DoseFit {
    /// Standard errors of intercept and slope.
    #[must_use]
    pub fn se(&self) -> [f64; 2] {
        [libm::sqrt(self.covariance[0]), libm::sqrt(self.covariance[2])]
    }

    /// Fitted share at a dose.
    #[must_use]
    pub fn share(&self, dose: f64) -> f64 {
        self.link.share(self.intercept + self.slope * dose).0
    }

    /// Dose at which the fitted share is `share`; infinite on a flat line.
    #[must_use]
    pub fn dose_for(&self, share: f64) -> f64 {
        (self.link.eta(share) - self.intercept) / self.slope
    }

    /// Standard error of that dose by the delta method.
    #[must_use]
    pub fn se_dose(&self, share: f64) -> f64 {
        let x = self.dose_for(share);
        let [aa, ab, bb] = self.covariance;
        libm::sqrt(aa + 2.0 * x * ab + x * x * bb) / self.slope.abs()
    }

    /// Limits of that dose by the delta method.
    #[must_use]
    pub fn wald(&self, share: f64, confidence: f64) -> [f64; 2] {
        let half = normal_quantile(0.5 + 0.5 * confidence) * self.se_dose(share);
        [self.dose_for(share) - half, self.dose_for(share) + half]
    }

    /// Fieller's g = z²·var(b)/b²: from 1 on, the slope may be nothing and Fieller's set has no two ends.
    #[must_use]
    pub fn fieller_g(&self, confidence: f64) -> f64 {
        let z = normal_quantile(0.5 + 0.5 * confidence);
        z * z * self.covariance[2] / (self.slope * self.slope)
    }

    /// Fieller's limits of that dose; `None` when unbounded (g ≥ 1).
    #[must_use]
    pub fn fieller(&self, share: f64, confidence: f64) -> Option<[f64; 2]> {
        let g = self.fieller_g(confidence);
        if g >= 1.0 {
            return None;
        }
        let z = normal_quantile(0.5 + 0.5 * confidence);
        let x = self.dose_for(share);
        let [aa, ab, bb] = self.covariance;
        let centre = x + g / (1.0 - g) * (x + ab / bb);
        let inner = aa + 2.0 * x * ab + x * x * bb - g * (aa - ab * ab / bb);
        let half = z / (self.slope.abs() * (1.0 - g)) * libm::sqrt(inner.max(0.0));
        Some([centre - half, centre + half])
    }

    /// Limits of that dose by the profile of the deviance; an end that does not exist is `None`. `trials` as given to [`fit`].
    #[must_use]
    pub fn profile(&self, trials: &[Trials], share: f64, confidence: f64) -> [Option<f64>; 2] {
        let z = normal_quantile(0.5 + 0.5 * confidence);
        self.profile_to(trials, share, |_| z * z)
    }

    /// As [`DoseFit::profile`], to where the deviance has risen by `rise(dose)`, which may differ from dose to dose.
    #[must_use]
    pub fn profile_to(&self, trials: &[Trials], share: f64, rise: impl Fn(f64) -> f64) -> [Option<f64>; 2] {
        let level = self.link.eta(share);
        let best = self.dose_for(share);
        let beyond = |x: f64| profiled(trials, self.link, level, x) > self.deviance + rise(x);
        let step = 0.5 * self.se_dose(share);
        if best.is_finite() { walk_out([best, best], step, beyond) } else { [None, None] }
    }
}

/// Walks out from either end of `inside` in steps that grow by half, until `beyond` holds, then halves the last step: the two
/// ends of the set around it. An end that is not met within a factor of 10⁷ of `step` is `None`.
pub(crate) fn walk_out(inside: [f64; 2], step: f64, beyond: impl Fn(f64) -> bool) -> [Option<f64>; 2] {
    let end = |start: f64, direction: f64| {
        let (mut reach, mut last) = (step, start);
        for _ in 0..WALK_STEPS {
            let next = start + direction * reach;
            if beyond(next) {
                return Some(cross(last, next, &beyond));
            }
            last = next;
            reach *= 1.5;
        }
        None
    };
    [end(inside[0], -1.0), end(inside[1], 1.0)]
}

/// Halvings of a last step: a part in 10¹² of it.
const HALVINGS: usize = 40;

fn cross(mut inside: f64, mut outside: f64, beyond: impl Fn(f64) -> bool) -> f64 {
    for _ in 0..HALVINGS {
        let middle = 0.5 * (inside + outside);
        if beyond(middle) {
            outside = middle;
        } else {
            inside = middle;
        }
    }
    0.5 * (inside + outside)
}

/// Least deviance of lines that pass η = `level` at dose `at`. The likelihood of each link is log-concave in the slope, so that
/// halving the bracket of its score finds the minimum.
pub(crate) fn profiled(trials: &[Trials], link: Link, level: f64, at: f64) -> f64 {
    let moved: Vec<Trials> = trials.iter().map(|t| Trials { dose: t.dose - at, ..*t }).collect();
    let reach = moved.iter().map(|t| t.dose.abs()).fold(0.0, f64::max);
    if reach <= 0.0 {
        return deviance(&moved, link, |_| level);
    }
    let pull = |b: f64| score(&moved, link, |x| level + b * x)[1];
    let uphill = if pull(0.0) > 0.0 { 1.0 } else { -1.0 };
    // Slopes from a hundredth of a unit of η over the doses to one where every share is 0 or 1.
    let (mut inside, mut outside) = (0.0, uphill * 0.01 / reach);
    for _ in 0..WALK_STEPS {
        if pull(outside) * uphill <= 0.0 {
            break;
        }
        inside = outside;
        outside *= 1.6;
    }
    for _ in 0..HALVINGS {
        let middle = 0.5 * (inside + outside);
        if pull(middle) * uphill > 0.0 {
            inside = middle;
        } else {
            outside = middle;
        }
    }
    deviance(&moved, link, |x| level + 0.5 * (inside + outside) * x)
}

/// Steps of a search outwards, each half as long again: a factor of 10⁷ in reach.
const WALK_STEPS: usize = 40;

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    fn at(dose: f64, tried: f64, yes: f64) -> Trials {
        Trials { dose, tried, yes }
    }

    #[test]
    fn no_finite_fit_is_said() {
        assert_eq!(fit(&[], Link::Logit), Err(NoFit::NothingVaries));
        assert_eq!(fit(&[at(0.0, 5.0, 0.0), at(1.0, 5.0, 0.0)], Link::Logit), Err(NoFit::NothingVaries));
        assert_eq!(fit(&[at(1.0, 5.0, 2.0)], Link::Logit), Err(NoFit::NothingVaries));
        for link in [Link::Logit, Link::Probit, Link::ComplementaryLogLog] {
            let separated = [at(0.0, 5.0, 0.0), at(1.0, 5.0, 0.0), at(2.0, 5.0, 5.0)];
            assert_eq!(fit(&separated, link), Err(NoFit::Separated));
            // One mixed dose between pure ones still has no finite slope.
            let touching = [at(0.0, 5.0, 0.0), at(1.0, 5.0, 2.0), at(2.0, 5.0, 5.0)];
            assert_eq!(fit(&touching, link), Err(NoFit::Separated));
        }
    }

    #[test]
    fn a_weak_slope_has_no_bounded_limits() {
        let trials = [at(0.0, 10.0, 4.0), at(1.0, 10.0, 5.0), at(2.0, 10.0, 5.0)];
        let line = fit(&trials, Link::Logit).unwrap();
        assert!(line.fieller_g(0.95) >= 1.0);
        assert_eq!(line.fieller(0.5, 0.95), None);
        assert!(line.profile(&trials, 0.5, 0.95).contains(&None));
    }

    #[test]
    fn unit_of_dose_does_not_matter() {
        let trials = [at(0.0, 20.0, 2.0), at(50.0, 20.0, 7.0), at(100.0, 20.0, 15.0), at(150.0, 20.0, 18.0)];
        let shifted = trials.map(|t| Trials { dose: 1e3 * t.dose + 7.0, ..t });
        let (a, b) = (fit(&trials, Link::Logit).unwrap(), fit(&shifted, Link::Logit).unwrap());
        assert_relative_eq!(a.dose_for(0.5) * 1e3 + 7.0, b.dose_for(0.5), max_relative = 1e-9);
        assert_relative_eq!(a.deviance, b.deviance, max_relative = 1e-9);
        let (pa, pb) = (a.profile(&trials, 0.5, 0.95), b.profile(&shifted, 0.5, 0.95));
        assert_relative_eq!(pa[0].unwrap() * 1e3 + 7.0, pb[0].unwrap(), max_relative = 1e-6);
    }

    #[test]
    fn a_falling_line_works_too() {
        let trials = [at(0.0, 20.0, 18.0), at(50.0, 20.0, 12.0), at(100.0, 20.0, 4.0)];
        let line = fit(&trials, Link::Probit).unwrap();
        assert!(line.slope < 0.0);
        let [low, high] = line.profile(&trials, 0.5, 0.95);
        assert!(low.unwrap() < line.dose_for(0.5) && line.dose_for(0.5) < high.unwrap());
    }
}
