//! Depth some frames ahead: the chance that the deepest measured depth at a later time is at most a given one.
//! Method: the same hypotheses as the forecast of contact; depth is normal about each outlook's mean with its growth noise, the
//! measurement noise of the later frame on top; a filament that has stalled stays where it is.
//! Limits: meant for a few frames; far ahead `contact` is the better law.

use super::first_passage::normal_cdf;
use super::growth::{self, Outlook};
use super::{Record, pauses, readable};

/// Chance that the deepest depth measured at `time_s` is at most `depth_um`; `u_um`: standard uncertainty of that measurement.
/// `None` where the record allows no forecast. `time_s` lies after the record's last time.
pub fn depth_ahead(record: &Record, time_s: f64, depth_um: f64, u_um: f64) -> Option<f64> {
    readable(record).ok()?;
    let fits = growth::fit(record);
    let growing: Vec<f64> = fits.tips.iter().map(|&tip| pauses::growing(record, &record.tips[tip])).collect();
    let deepest = |tip: usize| {
        record.tips[tip].depth_um[record.tips[tip].depth_um.len() - 1]
            + record.tips[tip].remaining_um[record.tips[tip].remaining_um.len() - 1]
    };
    let (mut below, mut weight) = (0.0, 0.0);
    for hypothesis in &fits.hypotheses {
        let ahead = hypothesis.clock.progress(fits.drives[hypothesis.clock.drive].at(time_s)) - 1.0;
        let chances = hypothesis.outlooks.iter().enumerate().map(|(k, outlook)| {
            let now = deepest(fits.tips[k]) - outlook.remaining;
            let stays = outlook.within(depth_um - now, 0.0, u_um);
            growing[k] * outlook.within(depth_um - now, ahead.max(0.0), u_um) + (1.0 - growing[k]) * stays
        });
        // half as independent, half as moved by one cause, like contact
        let (all, least) = chances.fold((1.0, 1.0_f64), |(all, least), chance| (all * chance, least.min(chance)));
        below += hypothesis.weight * 0.5 * (all + least);
        weight += hypothesis.weight;
    }
    (weight > 0.0).then(|| below / weight)
}

impl Outlook {
    /// Chance that no more than `gain` is measured after `ahead` units of progress.
    fn within(&self, gain: f64, ahead: f64, u_um: f64) -> f64 {
        let variance = (self.variance(ahead) + u_um * u_um).max(f64::MIN_POSITIVE);
        normal_cdf((gain - self.rate.max(0.0) * ahead) / variance.sqrt())
    }
}
