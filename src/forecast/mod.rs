//! Forecast of the short circuit: when, given that contact comes, and whether it comes by a horizon.
//! Method: every filament's depth is a growth process seen through measurement noise (`growth`), run by one clock whose shape,
//! onset and drive are unknown and integrated over (`clock`); contact is the first passage of the remaining gap by any filament
//! (`contact`); a standing filament is judged against its own earlier pauses (`pauses`). Nothing is fitted to a training set.
//! Limits: what the record has not shown (a lasting change of rate, a turn, a new leader) is only in the width. A forecast is
//! no interlock: follow the lab's own rules, local codes and qualified people.

mod ahead;
pub mod calibration;
mod clock;
mod contact;
mod courses;
mod first_passage;
mod growth;
pub mod histories;
mod pauses;
pub mod record;
pub mod short;
mod strangers;

pub use ahead::depth_ahead;
pub use first_passage::FirstPassage;

/// The levels of [`Forecast::quantiles_s`].
pub const LEVELS: [f64; 7] = [0.025, 0.10, 0.25, 0.50, 0.75, 0.90, 0.975];

/// What had been decided about a run when a forecast is issued. Times in run seconds, rising; nothing later belongs in it.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Record {
    /// Times of the usable frames, s, strictly rising. They end at the last depth known, which may lie before `issued_at_s`.
    pub times_s: Vec<f64>,
    /// One series a filament rooted on the plating edge, in any order.
    pub tips: Vec<TipSeries>,
    /// Least distance between the edges, µm: what a filament not yet seen has to cross.
    pub gap_um: f64,
    /// Charge passed at each time, mAh (same length as `times_s`); growth may then follow it instead of time.
    pub charge_mah: Option<Vec<f64>>,
    /// Dose at each time, MPa (contract sign: positive turns growth along the plates); growth may then depend on it.
    pub dose_mpa: Option<Vec<f64>>,
    /// When the forecast is issued, s. No contact had come by then.
    pub issued_at_s: f64,
    /// What is planned after `issued_at_s`; empty: current and dose go on as they were.
    pub plan: Vec<PlanStep>,
}

/// The depth of one filament at the frames from `first` on.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct TipSeries {
    /// Number of the filament.
    pub filament: u32,
    /// Index into [`Record::times_s`] of its first depth.
    pub first: usize,
    /// Depth at `times_s[first..]`, µm.
    pub depth_um: Vec<f64>,
    /// Standard uncertainty of each depth, µm.
    pub u_depth_um: Vec<f64>,
    /// Distance of the deepest point to the far edge at each of them, µm; 0 when it touches.
    pub remaining_um: Vec<f64>,
}

/// A step of a planned load or current, in force from `time_s` to the next step.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct PlanStep {
    /// Run time from which it holds, s.
    pub time_s: f64,
    /// Cell current, mA.
    pub current_ma: Option<f64>,
    /// Dose, MPa.
    pub dose_mpa: Option<f64>,
}

/// What a user may set.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Settings {
    /// Run time of the horizon, s; default: as long again as the record at issue.
    pub horizon_s: Option<f64>,
}

/// Why a record allows no forecast.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Silence {
    /// No filament has been seen.
    NoGrowth,
    /// Fewer than three depths of any filament.
    TooShort,
    /// A filament already touches the far edge.
    Contact,
    /// Lengths differ, times do not rise, or a value is not finite.
    Unusable,
}

/// The forecast at one moment. Caution: it is no interlock.
#[derive(Debug, Clone, PartialEq)]
pub struct Forecast {
    /// Run time of first contact at [`LEVELS`], given that contact comes, s. Never cut at the horizon. `None`: see `silence`.
    pub quantiles_s: Option<[f64; 7]>,
    /// Run time of the horizon, s.
    pub horizon_s: f64,
    /// Chance of contact by the horizon, stalls and turns included.
    pub chance_by_horizon: Option<f64>,
    /// Chance of contact per second just after issue, given none before.
    pub hazard_now_per_s: Option<f64>,
    /// Chance that growth goes on: 1 while the leading filament grows, near 0 when all have stood far longer than ever before.
    pub growing: Option<f64>,
    /// The growth law with the most weight, in words.
    pub model: String,
    /// Whether the plan holds a dose or current outside those of the record.
    pub extrapolates: bool,
    /// Why there is no forecast.
    pub silence: Option<Silence>,
}

/// Forecasts the first contact of any filament with the far edge. Deterministic; well under 2 ms.
///
/// # Examples
/// ```
/// use veerlog::forecast::{forecast, Record, Settings, TipSeries};
/// // 10 µm a minute across a gap of 400 µm, seen for 20 minutes
/// let times_s: Vec<f64> = (0..=20).map(|k| 60.0 * f64::from(k)).collect();
/// let depth_um: Vec<f64> = (1..=20).map(|k| 10.0 * f64::from(k)).collect();
/// let tip = TipSeries {
///     filament: 1,
///     first: 1,
///     u_depth_um: vec![1.0; 20],
///     remaining_um: depth_um.iter().map(|d| 400.0 - d).collect(),
///     depth_um,
/// };
/// let record = Record { times_s, tips: vec![tip], gap_um: 400.0, issued_at_s: 1200.0, ..Record::default() };
/// let told = forecast(&record, &Settings::default());
/// let [_, p10, _, p50, _, p90, _] = told.quantiles_s.unwrap();
/// assert!(p10 < 2400.0 && 2400.0 < p90 && (p50 - 2400.0).abs() < 300.0);
/// assert!(told.chance_by_horizon.unwrap() > 0.3);
/// ```
pub fn forecast(record: &Record, settings: &Settings) -> Forecast {
    let silent = |silence| Forecast {
        quantiles_s: None,
        horizon_s: horizon(record, settings),
        chance_by_horizon: None,
        hazard_now_per_s: None,
        growing: None,
        model: String::new(),
        extrapolates: clock::extrapolates(record),
        silence: Some(silence),
    };
    if let Err(silence) = readable(record) {
        return silent(silence);
    }
    let fits = growth::fit(record);
    let Some(leader) = fits.hypotheses.first() else {
        return silent(Silence::TooShort);
    };
    let growing: Vec<f64> = fits.tips.iter().map(|&tip| pauses::growing(record, &record.tips[tip])).collect();
    let contact = contact::Contact::new(record, &fits, &growing);
    let horizon_s = horizon(record, settings);
    Forecast {
        quantiles_s: contact.quantiles(),
        horizon_s,
        chance_by_horizon: Some(contact.chance_by(horizon_s)),
        hazard_now_per_s: Some(contact.hazard_now()),
        growing: Some(contact.growing()),
        model: leader.clock.words(),
        extrapolates: clock::extrapolates(record),
        silence: None,
    }
}

/// As long again as the record at issue.
fn horizon(record: &Record, settings: &Settings) -> f64 {
    let start = record.times_s.first().copied().unwrap_or(0.0).min(0.0);
    settings.horizon_s.unwrap_or(record.issued_at_s + (record.issued_at_s - start))
}

/// Whether the record can be forecast from at all.
fn readable(record: &Record) -> Result<(), Silence> {
    let n = record.times_s.len();
    let rising = record.times_s.windows(2).all(|pair| pair[1] > pair[0]);
    let finite = record.times_s.iter().all(|t| t.is_finite()) && record.issued_at_s.is_finite() && record.gap_um > 0.0;
    let beside =
        |values: &Option<Vec<f64>>| values.as_ref().is_none_or(|v| v.len() == n && v.iter().all(|x| x.is_finite()));
    let whole = record.tips.iter().all(|tip| tip.is_whole(n));
    if !(rising && finite && whole && beside(&record.charge_mah) && beside(&record.dose_mpa)) {
        return Err(Silence::Unusable);
    }
    if record.tips.is_empty() {
        return Err(Silence::NoGrowth);
    }
    let touching = record.tips.iter().any(|tip| tip.remaining_um.last().is_some_and(|&left| left <= 0.0));
    if touching { Err(Silence::Contact) } else { Ok(()) }
}

impl TipSeries {
    /// Lengths agree with `frames` usable frames and all values are finite.
    fn is_whole(&self, frames: usize) -> bool {
        let n = self.depth_um.len();
        let series = [&self.depth_um, &self.u_depth_um, &self.remaining_um];
        n > 0
            && self.first + n == frames
            && series.iter().all(|s| s.len() == n && s.iter().all(|x| x.is_finite() && *x >= 0.0))
    }
}

#[cfg(test)]
mod tests;
