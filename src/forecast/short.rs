//! Short circuit seen from the electrical log.
//! Method: the apparent resistance |V/I| of each sample against the median of the samples before it, in logs. A lasting, abrupt
//! fall beyond the record's own noise is a soft short, a fall to a tenth or less of the record's course a full one. Rest, a
//! stated time after each reversal or change of set point, and single stray samples are left out.
//! Source: resistance collapse as the sign of a short is common practice; noise by the MAD (Rousseeuw & Croux 1993).
//! Limits: fewer than a dozen working samples tell nothing; a short during rest is seen only when current returns.

/// What gave the short away.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Sign {
    /// Voltage collapsed under constant current.
    VoltageCollapse,
    /// Current rose under constant voltage.
    CurrentRise,
    /// |V/I| collapsed while neither was held.
    ResistanceCollapse,
}

/// How complete it is.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Grade {
    /// Resistance fell, but the cell still carries part of its voltage.
    Soft,
    /// Resistance fell to [`Settings::full`] or less of the record's course.
    Full,
}

/// A short seen in the log.
#[derive(Debug, Clone, PartialEq)]
pub struct ShortEvent {
    /// Time of its first sample, s.
    pub time_s: f64,
    /// What gave it away.
    pub sign: Sign,
    /// Soft or full: the worst it came to before it recovered.
    pub grade: Grade,
    /// |V/I| just after, in parts of that just before.
    pub ratio: f64,
    /// Time from which |V/I| was back for good, s; `None` if it never was.
    pub recovered_s: Option<f64>,
    /// One sentence for the report.
    pub evidence: String,
}

/// Limits of the search. Parts are of the apparent resistance before the event.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Settings {
    /// Time left out after each reversal, start or change of set point, s; default: five samples.
    pub settle_s: Option<f64>,
    /// Share of the least usual current (lower quartile of what is above a hundredth of the greatest) below which the cell rests.
    pub rest: f64,
    /// Resistance that counts as a soft short.
    pub soft: f64,
    /// Resistance that counts as a full short.
    pub full: f64,
    /// How far a fall must exceed the record's own noise, in standard deviations.
    pub noises: f64,
}

impl Default for Settings {
    /// All common practice.
    fn default() -> Self {
        Self { settle_s: None, rest: 0.05, soft: 0.7, full: 0.1, noises: 6.0 }
    }
}

/// Working samples the level before is read from.
const BEFORE: usize = 25;
/// Fewest of them.
const LEAST_BEFORE: usize = 8;
/// The record's course is renewed when it has grown by one part in this many: long logs stay cheap.
const COURSE_RENEWED: usize = 20;
/// Samples over which a fall must last.
const LASTING: usize = 4;
/// Share within which current or voltage counts as held.
const HELD: f64 = 0.1;
/// Least step of the current, as a log, that is a new set point when the voltage follows it.
const NEW_SET_POINT: f64 = 0.25;
/// Makes the MAD estimate the SD of normal data: 1/Φ⁻¹(3/4).
const MAD_TO_SD: f64 = 1.482_602_218_505_602;
/// Least noise of the log of the resistance: a logger's last digit.
const LEAST_NOISE: f64 = 0.01;
/// Samples left out after a reversal when no time is stated.
const SETTLE_SAMPLES: f64 = 5.0;

/// A working sample: not at rest, settled.
#[derive(Debug, Clone, Copy)]
struct Sample {
    time: f64,
    current: f64,
    voltage: f64,
    log_resistance: f64,
    /// Counts the set points; the level before is read from samples of the same one.
    set_point: usize,
}

/// Every short in a log, in order of time. The slices have one length, times rise, values are in any one unit each.
/// A log that is shorter than a dozen working samples, or whose lengths differ, gives none.
///
/// # Examples
/// ```
/// use veerlog::forecast::short::{find, Grade, Settings, Sign};
/// let time: Vec<f64> = (0..60).map(|k| 10.0 * f64::from(k)).collect();
/// let current = vec![0.5; 60];
/// let voltage: Vec<f64> = (0..60).map(|k| if k < 40 { 0.080 } else { 0.002 }).collect();
/// let shorts = find(&time, &current, &voltage, &Settings::default());
/// assert_eq!(shorts.len(), 1);
/// assert_eq!((shorts[0].time_s, shorts[0].sign, shorts[0].grade), (400.0, Sign::VoltageCollapse, Grade::Full));
/// assert_eq!(shorts[0].recovered_s, None);
/// ```
pub fn find(time_s: &[f64], current: &[f64], voltage: &[f64], settings: &Settings) -> Vec<ShortEvent> {
    let samples = working(time_s, current, voltage, settings);
    if samples.len() < LEAST_BEFORE + LASTING {
        return Vec::new();
    }
    let noise = noise(&samples);
    let mut events: Vec<ShortEvent> = Vec::new();
    let mut k = LEAST_BEFORE;
    // samples that set the level: those before `k` that are not part of a short
    let mut sound: Vec<usize> = (0..k).collect();
    let (mut course, mut course_of, mut course_until) = (0.0, None, 0);
    while k < samples.len() {
        let same = sound.partition_point(|&i| samples[i].set_point < samples[k].set_point);
        if sound.len() - same < LEAST_BEFORE {
            sound.push(k);
            k += 1;
            continue;
        }
        let recent = &sound[same.max(sound.len().saturating_sub(BEFORE))..];
        let level = median(recent.iter().map(|&i| samples[i].log_resistance));
        if course_of != Some(same) || sound.len() > course_until {
            course = median(sound[same..].iter().map(|&i| samples[i].log_resistance));
            (course_of, course_until) = (Some(same), sound.len() + sound.len() / COURSE_RENEWED);
        }
        match fall(&samples, k, level, course, noise, settings) {
            None => {
                sound.push(k);
                k += 1;
            }
            Some(grade) => {
                let back = recovery(&samples, k, level, settings);
                let before: Vec<Sample> = recent.iter().map(|&i| samples[i]).collect();
                events.push(describe(
                    &samples[k..back.unwrap_or(samples.len())],
                    &before,
                    level,
                    grade,
                    settings,
                    back.map(|b| samples[b].time),
                ));
                let Some(back) = back else { break };
                k = back;
            }
        }
    }
    events
}

/// Samples under current, with the settling time after each start, reversal or change of set point left out.
fn working(time_s: &[f64], current: &[f64], voltage: &[f64], settings: &Settings) -> Vec<Sample> {
    if time_s.len() != current.len() || time_s.len() != voltage.len() || time_s.len() < 2 {
        return Vec::new();
    }
    let finite = |x: &f64| x.is_finite();
    let greatest = current.iter().filter(|x| finite(x)).fold(0.0_f64, |most, x| most.max(x.abs()));
    let usual = quantile(current.iter().map(|x| x.abs()).filter(|x| finite(x) && *x > 0.01 * greatest).collect(), 0.25);
    let typical = quantile(voltage.iter().filter(|x| finite(x)).map(|x| x.abs()).collect(), 0.5);
    let spacing = quantile(time_s.windows(2).map(|pair| pair[1] - pair[0]).collect(), 0.5);
    let settle = settings.settle_s.unwrap_or(SETTLE_SAMPLES * spacing);
    let mut all: Vec<Sample> = Vec::new();
    let (mut last, mut rested, mut from, mut set_point): (Option<(f64, f64)>, bool, f64, usize) =
        (None, false, time_s[0], 0);
    for ((&time, &i), &v) in time_s.iter().zip(current).zip(voltage) {
        let works = i.is_finite() && v.is_finite() && i.abs() > settings.rest * usual;
        if !works {
            rested = true;
            continue;
        }
        let change = last.map_or(Between::Nothing, |before| between(before, (i, v)));
        if rested || change != Between::Nothing {
            from = time + settle;
        }
        set_point += usize::from(change == Between::SetPoint);
        (last, rested) = (Some((i, v)), false);
        if time >= from {
            // a thousandth of the typical voltage stands for a voltage of 0
            let log_resistance = libm::log(v.abs().max(1e-3 * typical).max(f64::MIN_POSITIVE) / i.abs());
            all.push(Sample { time, current: i, voltage: v, log_resistance, set_point });
        }
    }
    all
}

/// What lies between two samples under current.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
enum Between {
    Nothing,
    Reversal,
    SetPoint,
}

/// A new set point: the current steps and the voltage with it, so that the resistance changes less than the current does.
fn between(before: (f64, f64), now: (f64, f64)) -> Between {
    let step = |old: f64, new: f64| libm::log(new.abs().max(f64::MIN_POSITIVE) / old.abs().max(f64::MIN_POSITIVE));
    let (current, voltage) = (step(before.0, now.0), step(before.1, now.1));
    if before.0 * now.0 < 0.0 {
        Between::Reversal
    } else if current.abs() > NEW_SET_POINT && voltage.abs() > HELD && (voltage - current).abs() < current.abs() {
        Between::SetPoint
    } else {
        Between::Nothing
    }
}

/// SD of the log resistance from sample to sample.
fn noise(samples: &[Sample]) -> f64 {
    let steps = samples.windows(2).map(|pair| (pair[1].log_resistance - pair[0].log_resistance).abs());
    (MAD_TO_SD * median(steps) / std::f64::consts::SQRT_2).max(LEAST_NOISE)
}

/// Whether a lasting fall begins at `k`, against the level just before and the course of the whole record.
fn fall(samples: &[Sample], k: usize, level: f64, course: f64, noise: f64, settings: &Settings) -> Option<Grade> {
    let after = &samples[k..(k + LASTING).min(samples.len())];
    // a log that ends in the fall must be judged by what there is, but never by one sample
    if after.len() < 2 {
        return None;
    }
    let highest = after.iter().map(|s| s.log_resistance).fold(f64::NEG_INFINITY, f64::max);
    let (full, soft) = (libm::log(settings.full), libm::log(settings.soft));
    if highest <= course + full && highest <= level - settings.noises * noise.min(0.2) {
        Some(Grade::Full)
    } else if highest <= level + soft.min(-settings.noises * noise) {
        Some(Grade::Soft)
    } else {
        None
    }
}

/// First sample from which the resistance is back near its level and stays there.
fn recovery(samples: &[Sample], from: usize, level: f64, settings: &Settings) -> Option<usize> {
    let back = level + 0.5 * libm::log(settings.soft);
    (from..samples.len().saturating_sub(LASTING - 1))
        .find(|&k| samples[k..k + LASTING].iter().all(|s| s.log_resistance >= back))
}

fn describe(
    during: &[Sample],
    before: &[Sample],
    level: f64,
    grade: Grade,
    settings: &Settings,
    recovered_s: Option<f64>,
) -> ShortEvent {
    let first = &during[..during.len().min(LASTING)];
    let of = |samples: &[Sample], value: &dyn Fn(&Sample) -> f64| median(samples.iter().map(value));
    let (i0, i1) = (of(before, &|s| s.current.abs()), of(first, &|s| s.current.abs()));
    let (v0, v1) = (of(before, &|s| s.voltage.abs()), of(first, &|s| s.voltage.abs()));
    let held = |old: f64, new: f64| (new - old).abs() <= HELD * old;
    let ratio = libm::exp(of(first, &|s| s.log_resistance) - level);
    // a soft short that runs on into a full one is told as full
    let worst = libm::exp(during.iter().map(|s| s.log_resistance).fold(f64::INFINITY, f64::min) - level);
    let grade = if worst <= settings.full && during.len() >= LASTING { Grade::Full } else { grade };
    let (sign, what) = if held(i0, i1) {
        (
            Sign::VoltageCollapse,
            format!(
                "voltage fell to {:.1} % of its level under constant current",
                100.0 * v1 / v0.max(f64::MIN_POSITIVE)
            ),
        )
    } else if held(v0, v1) {
        (
            Sign::CurrentRise,
            format!("current rose to {:.3} times its level under constant voltage", i1 / i0.max(f64::MIN_POSITIVE)),
        )
    } else {
        (Sign::ResistanceCollapse, format!("|V/I| fell to {:.1} % of its level", 100.0 * ratio))
    };
    let end = match (recovered_s, grade) {
        (Some(time), _) => format!(", back at {time:.6} s"),
        (None, Grade::Full) => ", full short".to_owned(),
        (None, Grade::Soft) => ", soft short".to_owned(),
    };
    let time_s = during[0].time;
    ShortEvent { time_s, sign, grade, ratio, recovered_s, evidence: format!("at {time_s:.6} s {what}{end}") }
}

/// What the run's short is told by.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Evidence {
    /// A full short in the electrical log.
    Electrical,
    /// The picture: a filament touches the far edge.
    Bridging,
}

/// The log and the picture put together.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Verdict {
    /// Time of the short, s; `None` when none was observed.
    pub time_s: Option<f64>,
    /// What it is told by.
    pub evidence: Option<Evidence>,
    /// Electrical time minus bridging time, s, where both are there: positive when the picture was first.
    pub lag_s: Option<f64>,
}

/// Puts the log (`events`) and the picture (`bridged_s`) together. Where the specimen broke (`broke`), the log's collapse is its
/// breaking and no short. Only a full short is observed electrically; a soft one is a warning.
///
/// # Examples
/// ```
/// use veerlog::forecast::short::{verdict, Evidence};
/// assert_eq!(verdict(&[], Some(120.0), false).evidence, Some(Evidence::Bridging));
/// assert_eq!(verdict(&[], None, false).time_s, None);
/// ```
pub fn verdict(events: &[ShortEvent], bridged_s: Option<f64>, broke: bool) -> Verdict {
    let full = events.iter().find(|event| event.grade == Grade::Full).filter(|_| !broke).map(|event| event.time_s);
    let lag_s = full.zip(bridged_s).map(|(electrical, picture)| electrical - picture);
    match (full, bridged_s) {
        (Some(time), _) => Verdict { time_s: Some(time), evidence: Some(Evidence::Electrical), lag_s },
        (None, Some(time)) => Verdict { time_s: Some(time), evidence: Some(Evidence::Bridging), lag_s },
        (None, None) => Verdict { time_s: None, evidence: None, lag_s },
    }
}

fn median(values: impl Iterator<Item = f64>) -> f64 {
    quantile(values.collect(), 0.5)
}

/// Quantile by the nearest lower rank; 0 for nothing.
fn quantile(mut values: Vec<f64>, level: f64) -> f64 {
    values.sort_by(f64::total_cmp);
    if values.is_empty() { 0.0 } else { values[((values.len() - 1) as f64 * level) as usize] }
}

#[cfg(test)]
mod tests;
