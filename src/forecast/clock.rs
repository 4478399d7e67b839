//! The clock all filaments share: how far growth should have come by a time, up to its pace.
//! Method: the pace goes as ((τ(t) − τ₀)/(τ(now) − τ₀))^(b−1), and progress is its integral, 0 at first sight and 1 at the end of
//! the record. The drive τ is time, or charge passed, or time weighted by exp(−β·dose). The bend of the course and the onset τ₀
//! have broad priors on a fixed grid; b follows from them and may fall below 0 (growth that runs into a limit).
//! Source: powers of time cover diffusion-limited (b = 1/2), steady and accelerating growth; a far τ₀ makes them exponential
//! (Box & Cox 1964 for the family). Limits: one bend a run; a change of course is left to the wandering rate in `growth`.

use super::Record;

/// Bends: log of the pace now against the pace half-way through the time seen. Below 0 slowing, above 0 speeding up;
/// growth with the square root of time from first sight has −0.35, with the square of time 0.69.
const BENDS: [f64; 10] = [-0.9, -0.6, -0.4, -0.22, -0.07, 0.07, 0.22, 0.42, 0.7, 1.1];
/// SD of the bend in the prior, which is normal about 0: steady growth is as good a guess as any other.
const BEND_SD: f64 = 0.45;
/// Onset before the first sight, in parts of the time seen so far, on top of half a frame. All are equally likely.
const ONSETS: [f64; 4] = [0.0, 0.05, 0.25, 1.5];
/// Least power of time: below it growth has practically a limit, and "when, given that contact comes" no answer.
const LEAST_POWER: f64 = 0.3;
/// Steepness of logistic courses, in parts of the time seen.
const STEEPS: [f64; 3] = [3.0, 5.0, 8.0];
/// When their pace is greatest, in the same parts: behind or still ahead.
const MIDDLES: [f64; 4] = [0.4, 0.6, 0.8, 1.1];
/// Prior weight of all of them, where that of a steady course of one onset is 1.
const SIGMOIDS: f64 = 2.0;
/// Strengths β of the dose, 1/MPa: at 100 MPa the pace falls to 78, 61 and 37 %.
const DOSE_STRENGTHS: [f64; 3] = [0.0025, 0.005, 0.01];
/// Least range of the dose, MPa, from which its effect can be told.
const LEAST_DOSE_RANGE: f64 = 20.0;
/// Departure of charge from a straight line in time, in parts of its range, from which the two drives are told apart.
const LEAST_CHARGE_BEND: f64 = 0.02;
/// Intervals whose mean drive is taken to go on after the record.
const RECENT: usize = 10;

/// What moves the clock: its reading at every time of the record, and how it goes on.
#[derive(Debug, Clone)]
pub(crate) struct Drive {
    pub(crate) name: &'static str,
    pub(crate) ticks: Vec<f64>,
    /// (time, reading, readings a second from there on), rising in time; never empty.
    ahead: Vec<(f64, f64, f64)>,
    prior: f64,
}

impl Drive {
    /// Reading at a time at or after the end of the record.
    pub(crate) fn at(&self, time: f64) -> f64 {
        let next = self.ahead.partition_point(|stretch| stretch.0 <= time).max(1);
        let (from, reading, pace) = self.ahead[next - 1];
        reading + pace * (time - from)
    }

    fn new(
        name: &'static str,
        record: &Record,
        prior: f64,
        pace: &dyn Fn(usize) -> f64,
        planned: &dyn Fn(&super::PlanStep) -> Option<f64>,
    ) -> Self {
        let times = &record.times_s;
        let mut ticks = vec![0.0];
        for k in 1..times.len() {
            ticks.push(ticks[k - 1] + pace(k) * (times[k] - times[k - 1]));
        }
        let last = times.len() - 1;
        let back = last.saturating_sub(RECENT);
        let recent = if last > back { (ticks[last] - ticks[back]) / (times[last] - times[back]) } else { 1.0 };
        let mut ahead = vec![(times[last], ticks[last], recent)];
        for step in &record.plan {
            let (from, reading, pace) = ahead[ahead.len() - 1];
            let time = step.time_s.max(from);
            ahead.push((time, reading + pace * (time - from), planned(step).unwrap_or(pace)));
        }
        Self { name, ticks, ahead, prior }
    }
}

/// Every drive that the record has evidence about or the plan changes; time always comes first.
pub(crate) fn drives(record: &Record) -> Vec<Drive> {
    let mut drives = vec![Drive::new("time", record, 1.0, &|_| 1.0, &|_| None)];
    if let Some(charge) = record.charge_mah.as_ref().filter(|charge| told_apart(record, charge)) {
        let span = record.times_s[record.times_s.len() - 1] - record.times_s[0];
        // readings in seconds of mean current, so that drives are comparable; stripping does not turn the clock back
        let mean = charge.windows(2).map(|pair| (pair[1] - pair[0]).max(0.0)).sum::<f64>() / span;
        let pace =
            |k: usize| ((charge[k] - charge[k - 1]).max(0.0) / (record.times_s[k] - record.times_s[k - 1])) / mean;
        let planned = |step: &super::PlanStep| step.current_ma.map(|current| current.max(0.0) / 3600.0 / mean);
        drives.push(Drive::new("charge passed", record, 1.0, &pace, &planned));
    }
    let planned_doses: Vec<f64> = record.plan.iter().filter_map(|step| step.dose_mpa).collect();
    if let Some(dose) =
        record.dose_mpa.as_ref().filter(|dose| range(dose.iter().chain(&planned_doses)) >= LEAST_DOSE_RANGE)
    {
        for strength in DOSE_STRENGTHS {
            let pace = |k: usize| libm::exp(-strength * dose[k]);
            let planned = |step: &super::PlanStep| step.dose_mpa.map(|dose| libm::exp(-strength * dose));
            drives.push(Drive::new(
                "time under the logged load",
                record,
                0.5 / DOSE_STRENGTHS.len() as f64,
                &pace,
                &planned,
            ));
        }
    }
    drives
}

/// Whether charge and time say different things: in the past, or because the plan changes the current.
fn told_apart(record: &Record, charge: &[f64]) -> bool {
    let times = &record.times_s;
    let (Some(&t0), Some(&t1), Some(&q0), Some(&q1)) = (times.first(), times.last(), charge.first(), charge.last())
    else {
        return false;
    };
    let straight = |t: f64| q0 + (q1 - q0) * (t - t0) / (t1 - t0);
    let off = times.iter().zip(charge).map(|(&t, &q)| (q - straight(t)).abs()).fold(0.0, f64::max);
    let planned = record.plan.iter().any(|step| step.current_ma.is_some());
    q1 > q0 && (planned || off > LEAST_CHARGE_BEND * (q1 - q0))
}

fn range<'a>(values: impl Iterator<Item = &'a f64>) -> f64 {
    let (low, high) = values.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), &v| (low.min(v), high.max(v)));
    high - low
}

/// Whether the plan asks for a dose or current outside those of the record.
pub(crate) fn extrapolates(record: &Record) -> bool {
    let outside = |value: f64, low: f64, high: f64| {
        let margin = 0.05 * (high - low).max(high.abs().max(low.abs()));
        value < low - margin || value > high + margin
    };
    let currents = record.charge_mah.as_ref().map(|charge| {
        let paces =
            charge.windows(2).zip(record.times_s.windows(2)).map(|(q, t)| 3600.0 * (q[1] - q[0]) / (t[1] - t[0]));
        paces.fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), i| (low.min(i), high.max(i)))
    });
    let doses = record
        .dose_mpa
        .as_ref()
        .map(|dose| dose.iter().fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), &d| (low.min(d), high.max(d))));
    let unknown = (f64::INFINITY, f64::NEG_INFINITY);
    record.plan.iter().any(|step| {
        let off = |value: Option<f64>, seen: Option<(f64, f64)>| {
            value.is_some_and(|value| {
                let (low, high) = seen.unwrap_or(unknown);
                low > high || outside(value, low, high)
            })
        };
        off(step.current_ma, currents) || off(step.dose_mpa, doses)
    })
}

/// One hypothesis about the clock.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Clock {
    pub(crate) drive: usize,
    name: &'static str,
    onset: f64,
    span: f64,
    course: Course,
    /// Integral of the pace from onset to first sight, and from there to the end of the record.
    unseen: f64,
    whole: f64,
    /// Log of the pace now against the pace half-way through the time seen.
    bend: f64,
    /// Log of its prior weight, up to a constant.
    pub(crate) log_prior: f64,
}

/// How the pace goes with the part of the span passed.
#[derive(Debug, Clone, Copy)]
enum Course {
    /// part^(power − 1).
    Power(f64),
    /// Logistic: steepness, and the part at which the pace is greatest.
    Sigmoid(f64, f64),
}

impl Course {
    /// Integral of the pace up to `part`, up to a constant.
    fn integral(self, part: f64) -> f64 {
        match self {
            Self::Power(power) if power.abs() < 1e-6 => libm::log(part),
            Self::Power(power) => libm::pow(part, power) / power,
            Self::Sigmoid(steep, middle) => 1.0 / (1.0 + libm::exp(-steep * (part - middle))),
        }
    }

    fn pace(self, part: f64) -> f64 {
        match self {
            Self::Power(power) => libm::pow(part, power - 1.0),
            Self::Sigmoid(..) => {
                let passed = self.integral(part);
                passed * (1.0 - passed)
            }
        }
    }
}

impl Clock {
    /// `seen`: reading half a frame before first sight; `now`: at the end of the record; `before`: from onset to `seen`.
    fn new(drive: usize, source: &Drive, seen: f64, now: f64, before: f64, course: Course, log_prior: f64) -> Self {
        let span = now - seen + before;
        let (first, half) = (before / span, (before + 0.5 * (now - seen)) / span);
        let unseen = course.integral(first);
        Self {
            drive,
            name: source.name,
            onset: seen - before,
            span,
            course,
            unseen,
            whole: course.integral(1.0) - unseen,
            bend: libm::log(course.pace(1.0) / course.pace(half)),
            log_prior: log_prior + libm::log(source.prior),
        }
    }

    /// Progress at a reading of the drive: 0 at first sight (or earlier), 1 at the end of the record.
    pub(crate) fn progress(&self, tick: f64) -> f64 {
        let part = (tick - self.onset) / self.span;
        if part <= 0.0 { 0.0 } else { ((self.course.integral(part) - self.unseen) / self.whole).max(0.0) }
    }

    /// The law in words, for a table.
    pub(crate) fn words(&self) -> String {
        let course = match self.bend {
            bend if bend < -0.15 => "slowing",
            bend if bend > 0.15 => "speeding up",
            _ => "near steady",
        };
        format!("growth {course} with {}", self.name)
    }
}

/// All hypotheses over the given drives. `first`: index of the first depth of any filament.
pub(crate) fn clocks(drives: &[Drive], first: usize) -> Vec<Clock> {
    let mut all = Vec::with_capacity(drives.len() * (BENDS.len() * ONSETS.len() + STEEPS.len() * MIDDLES.len()));
    for (index, drive) in drives.iter().enumerate() {
        let now = drive.ticks[drive.ticks.len() - 1];
        let sight = drive.ticks[first];
        let elapsed = now - sight;
        if elapsed <= 0.0 {
            continue;
        }
        let frame = if first > 0 { sight - drive.ticks[first - 1] } else { drive.ticks[first + 1] - sight };
        let half = 0.5 * frame.max(1e-3 * elapsed);
        let seen = sight - half;
        for part in ONSETS {
            let before = 0.2 * half + part * elapsed;
            let halfway = libm::log((now - seen + before) / (0.5 * (now - seen) + before));
            for bend in BENDS {
                let (power, off) = (1.0 + bend / halfway, bend / BEND_SD);
                if power >= LEAST_POWER {
                    let course = Course::Power(power);
                    all.push(Clock::new(index, drive, seen, now, before, course, -0.5 * off * off));
                }
            }
        }
        let share = libm::log(SIGMOIDS / (STEEPS.len() * MIDDLES.len()) as f64);
        for steep in STEEPS {
            let sigmoids = MIDDLES.map(|middle| Course::Sigmoid(steep, middle));
            all.extend(sigmoids.map(|course| Clock::new(index, drive, seen, now, 0.2 * half, course, share)));
        }
    }
    all
}
