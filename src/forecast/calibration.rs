//! Calibration of the forecast over fleets of drawn histories: the table that says how far it can be trusted.
//! Method: forecasts issued where the depth first passes 0.3, 0.5 and 0.7 of the gap, scored against the true contact: coverage of
//! the 80 and 50 % intervals, error and width relative to the time left, mean pinball loss (Koenker & Bassett 1978) beside that
//! of a Theil–Sen line whose interval is widened until it covers 80 %. Stalls: chance by the horizon.
//! Limits: it speaks of the laws in `courses` and `strangers` only.

use std::fmt;

use rayon::prelude::*;

use super::histories::{Fleet, History, LAWS, Law, STRANGERS, draw};
use super::{LEVELS, Settings, forecast};

/// Depth fractions at which forecasts are issued.
pub const ISSUED_AT: [f64; 3] = [0.3, 0.5, 0.7];
/// Chance by the horizon below which a run counts as called off.
pub const CALLED_OFF: f64 = 0.2;

/// One scored forecast of a contact that did come.
#[derive(Debug, Clone, Copy)]
pub struct Scored {
    /// Law of the history.
    pub law: Law,
    /// Depth fraction passed.
    pub fraction: f64,
    /// Quantiles of the time left, in parts of the true time left.
    pub quantiles: Option<[f64; 7]>,
    /// Theil–Sen's time left, in the same parts.
    pub straight: Option<f64>,
}

/// Figures of a group of scored forecasts.
#[derive(Debug, Clone, Copy, Default)]
pub struct Figures {
    /// Points, and those with quantiles.
    pub points: usize,
    /// Share with quantiles.
    pub given: f64,
    /// Coverage of p10–p90.
    pub coverage80: f64,
    /// Coverage of p25–p75.
    pub coverage50: f64,
    /// Median of |p50 − truth| / time left.
    pub error: f64,
    /// Median of (p50 − truth) / time left.
    pub signed: f64,
    /// Median width of p10–p90 / time left.
    pub width: f64,
    /// Mean pinball loss over [`LEVELS`] / time left.
    pub pinball: f64,
    /// That of the widened straight line.
    pub pinball_straight: f64,
    /// Median error of the straight line.
    pub error_straight: f64,
}

/// How the chance by the horizon behaved.
#[derive(Debug, Clone, Copy, Default)]
pub struct Calls {
    /// Runs that stalled, and the share called off max(10 frames, 3 × the longest earlier pause) later.
    pub stalled: usize,
    /// See `stalled`.
    pub called_off: f64,
    /// Frames past 0.3 of the gap in runs that bridged by the horizon, and the share called off wrongly.
    pub frames: usize,
    /// See `frames`.
    pub wrongly: f64,
}

/// Draws `runs` histories of a law and scores the forecasts issued at [`ISSUED_AT`].
pub fn score(law: Law, fleet: &Fleet, runs: u64) -> Vec<Scored> {
    let points = |index| {
        let run = draw(law, fleet, index);
        ISSUED_AT.map(|fraction| score_at(&run, fraction, lag(index)))
    };
    (0..runs).into_par_iter().flat_map_iter(points).flatten().collect()
}

/// Draws the same histories and follows the chance by the horizon over every frame of them.
pub fn call(law: Law, fleet: &Fleet, runs: u64) -> Vec<Call> {
    (0..runs).into_par_iter().map(|index| call_of(&draw(law, fleet, index), lag(index))).collect()
}

/// Depths are decided at once in every second run, two frames late in the others.
fn lag(index: u64) -> usize {
    if index.is_multiple_of(2) { 0 } else { 2 }
}

fn score_at(run: &History, fraction: f64, lag: usize) -> Option<Scored> {
    let contact = run.contact_s?;
    let passed = (0..run.times_s.len()).find(|&k| run.fraction_at(k) >= fraction)?;
    let frame = passed + lag;
    let record = run.record_at(frame.min(run.times_s.len() - 1), lag).filter(|_| frame < run.times_s.len())?;
    let left = contact - record.issued_at_s;
    let told = forecast(&record, &Settings::default());
    let straight = straight_line(run, passed).map(|time| (time - record.issued_at_s).max(0.0) / left);
    let quantiles = told.quantiles_s.map(|q| q.map(|time| (time - record.issued_at_s) / left));
    Some(Scored { law: run.law, fraction, quantiles, straight })
}

/// Contact by the median slope between all pairs of the deepest depth (Theil 1950, Sen 1968).
fn straight_line(run: &History, upto: usize) -> Option<f64> {
    let first = (0..=upto).find(|&k| run.fraction_at(k) > 0.0)?;
    let depth: Vec<f64> = (first..=upto).map(|k| run.fraction_at(k)).collect();
    let times = &run.times_s[first..=upto];
    let mut slopes = Vec::new();
    for j in 1..depth.len() {
        slopes.extend((0..j).map(|i| (depth[j] - depth[i]) / (times[j] - times[i])));
    }
    let slope = median(slopes)?;
    (slope > 0.0).then(|| run.times_s[upto] + (1.0 - depth[depth.len() - 1]) / slope)
}

/// What the chance by the horizon did in one run.
#[derive(Debug, Clone, Copy)]
pub struct Call {
    /// For a stalled run: whether it was called off in time.
    pub in_time: Option<bool>,
    /// Frames past 0.3 with contact by their horizon.
    pub frames: usize,
    /// Those of them called off.
    pub wrongly: usize,
}

fn call_of(run: &History, lag: usize) -> Call {
    let mut result = Call { in_time: None, frames: 0, wrongly: 0 };
    let off_at = |frame: usize| {
        let told = run.record_at(frame, lag).map(|record| forecast(&record, &Settings::default()))?;
        Some((told.chance_by_horizon? < CALLED_OFF, told.horizon_s))
    };
    if let Some(stalled) = run.stalled_s {
        let Some(frame) = run.times_s.iter().position(|&t| t >= stalled) else {
            return result;
        };
        let allowed = 10.max(3 * longest_pause(run, frame));
        if run.contact_s.is_none() && frame + allowed < run.times_s.len() {
            result.in_time = off_at(frame + allowed).map(|(off, _)| off);
        }
    }
    let Some(contact) = run.contact_s else {
        return result;
    };
    for frame in (0..run.times_s.len()).filter(|&k| run.fraction_at(k) >= 0.3) {
        let Some((off, horizon)) = off_at(frame) else {
            continue;
        };
        if contact <= horizon {
            result.frames += 1;
            result.wrongly += usize::from(off);
        }
    }
    result
}

/// Longest run of frames before `end` in which the deepest depth gained less than measurement noise.
fn longest_pause(run: &History, end: usize) -> usize {
    let blur = run.tips.first().map_or(0.0, |tip| tip.u_depth_um[0]) / run.gap_um;
    let (mut longest, mut from) = (0, 0);
    for k in 1..end {
        if run.fraction_at(k) - run.fraction_at(from) > 2.0 * blur || run.fraction_at(k) <= 0.0 {
            from = k;
        }
        longest = longest.max(k - from);
    }
    longest
}

/// Figures over scored forecasts.
pub fn figures(scored: &[Scored]) -> Figures {
    let told: Vec<[f64; 7]> = scored.iter().filter_map(|s| s.quantiles).collect();
    if told.is_empty() {
        return Figures { points: scored.len(), ..Figures::default() };
    }
    let share = |hit: &dyn Fn(&[f64; 7]) -> bool| told.iter().filter(|q| hit(q)).count() as f64 / told.len() as f64;
    let middle = |value: &dyn Fn(&[f64; 7]) -> f64| median(told.iter().map(value).collect()).unwrap_or(0.0);
    let straight: Vec<f64> = scored.iter().filter_map(|s| s.straight).collect();
    Figures {
        points: scored.len(),
        given: told.len() as f64 / scored.len() as f64,
        coverage80: share(&|q| q[1] <= 1.0 && 1.0 <= q[5]),
        coverage50: share(&|q| q[2] <= 1.0 && 1.0 <= q[4]),
        error: middle(&|q| (q[3] - 1.0).abs()),
        signed: middle(&|q| q[3] - 1.0),
        width: middle(&|q| q[5] - q[1]),
        pinball: told.iter().map(pinball).sum::<f64>() / told.len() as f64,
        pinball_straight: widened(&straight),
        error_straight: median(straight.iter().map(|t| (t - 1.0).abs()).collect()).unwrap_or(0.0),
    }
}

/// Figures over calls.
pub fn calls(all: &[Call]) -> Calls {
    let judged: Vec<bool> = all.iter().filter_map(|c| c.in_time).collect();
    let frames: usize = all.iter().map(|c| c.frames).sum();
    let wrongly: usize = all.iter().map(|c| c.wrongly).sum();
    Calls {
        stalled: judged.len(),
        called_off: judged.iter().filter(|&&hit| hit).count() as f64 / judged.len().max(1) as f64,
        frames,
        wrongly: wrongly as f64 / frames.max(1) as f64,
    }
}

/// Mean pinball loss over [`LEVELS`] of quantiles given in parts of the true time left.
fn pinball(quantiles: &[f64; 7]) -> f64 {
    let loss = |(level, q): (f64, &f64)| {
        if *q <= 1.0 { level * (1.0 - q) } else { (1.0 - level) * (q - 1.0) }
    };
    LEVELS.into_iter().zip(quantiles).map(loss).sum::<f64>() / LEVELS.len() as f64
}

/// Mean pinball loss of straight lines whose log-normal interval is widened until p10–p90 covers 80 %.
fn widened(straight: &[f64]) -> f64 {
    const NORMAL: [f64; 7] = [-1.959_964, -1.281_552, -0.674_490, 0.0, 0.674_490, 1.281_552, 1.959_964];
    let mut misses: Vec<f64> = straight.iter().map(|t| libm::log(t.max(1e-3)).abs()).collect();
    misses.sort_by(f64::total_cmp);
    let Some(&cut) = misses.get(misses.len() * 4 / 5) else {
        return 0.0;
    };
    let sd = cut / NORMAL[5];
    straight.iter().map(|t| pinball(&NORMAL.map(|z| t.max(1e-3) * libm::exp(sd * z)))).sum::<f64>()
        / straight.len() as f64
}

fn median(mut values: Vec<f64>) -> Option<f64> {
    values.sort_by(f64::total_cmp);
    let n = values.len();
    (n > 0).then(|| 0.5 * (values[(n - 1) / 2] + values[n / 2]))
}

/// The whole table: every law at every fraction, pooled rows, calls.
#[derive(Debug, Clone)]
pub struct Table {
    /// What was drawn.
    pub fleet: Fleet,
    /// All scored forecasts.
    pub scored: Vec<Scored>,
    /// All calls.
    pub calls: Vec<Call>,
}

/// Runs the calibration: `runs` histories a law, law k under seed `fleet.seed` + k. The same on any number of threads.
pub fn run(laws: &[Law], fleet: &Fleet, runs: u64) -> Table {
    let mut table = Table { fleet: *fleet, scored: Vec::new(), calls: Vec::new() };
    for (k, &law) in laws.iter().enumerate() {
        let fleet = Fleet { seed: fleet.seed.wrapping_add(k as u64), ..*fleet };
        table.scored.extend(score(law, &fleet, runs));
        table.calls.extend(call(law, &fleet, runs));
    }
    table
}

impl fmt::Display for Table {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        writeln!(
            f,
            "runs of at most {} frames, roughness {}, seed {}",
            self.fleet.frames, self.fleet.roughness, self.fleet.seed
        )?;
        writeln!(
            f,
            "{:<22} {:>5} {:>5} {:>6} {:>6} {:>6} {:>7} {:>6} {:>8} {:>10} {:>10}",
            "group", "n", "given", "80 %", "50 %", "error", "signed", "width", "pinball", "/ straight", "error str."
        )?;
        let row = |f: &mut fmt::Formatter<'_>, name: &str, keep: &dyn Fn(&Scored) -> bool| {
            let group: Vec<Scored> = self.scored.iter().copied().filter(|s| keep(s)).collect();
            let g = figures(&group);
            writeln!(
                f,
                "{name:<22} {:>5} {:>5.2} {:>6.3} {:>6.3} {:>6.3} {:>7.3} {:>6.2} {:>8.4} {:>10.2} {:>10.3}",
                g.points,
                g.given,
                g.coverage80,
                g.coverage50,
                g.error,
                g.signed,
                g.width,
                g.pinball,
                g.pinball / g.pinball_straight,
                g.error_straight
            )
        };
        row(f, "all", &|_| true)?;
        for fraction in ISSUED_AT {
            row(f, &format!("all at {fraction}"), &|s| s.fraction.total_cmp(&fraction).is_eq())?;
        }
        for law in LAWS.into_iter().chain(STRANGERS).filter(|&law| self.scored.iter().any(|s| s.law == law)) {
            row(f, &format!("{law:?}"), &|s| s.law == law)?;
        }
        let c = calls(&self.calls);
        writeln!(
            f,
            "stalled runs {}: called off in time {:.3}; bridging frames {}: called off wrongly {:.4}",
            c.stalled, c.called_off, c.frames, c.wrongly
        )
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn table(laws: &[Law], frames: usize, roughness: f64, runs: u64) -> Table {
        let table = run(laws, &Fleet { frames, roughness, seed: 4242 }, runs);
        println!("{table}");
        table
    }

    /// 76–84 % and 45–55 % at the size of the full set; small fleets get room for chance (three standard errors).
    fn holds(tables: &[Table]) {
        let scored: Vec<Scored> = tables.iter().flat_map(|t| t.scored.iter().copied()).collect();
        let all: Vec<Call> = tables.iter().flat_map(|t| t.calls.iter().copied()).collect();
        let (pool, calls) = (figures(&scored), calls(&all));
        // points of one run are not independent: count runs
        let room = |p: f64| 3.0 * (p * (1.0 - p) / (pool.points as f64 / ISSUED_AT.len() as f64)).sqrt();
        assert!((pool.coverage80 - 0.8).abs() < 0.02 + room(0.8), "{pool:?}");
        assert!((pool.coverage50 - 0.5).abs() < 0.02 + room(0.5), "{pool:?}");
        assert!(pool.given >= 0.95 && pool.signed.abs() < 0.10, "{pool:?}");
        assert!(pool.error < 0.8 * pool.error_straight, "{pool:?}");
        assert!(calls.called_off >= 0.85 && calls.wrongly <= 0.03, "{calls:?}");
    }

    /// `VEERLOG_FULL=1 cargo test --release --lib forecast::calibration -- --nocapture` prints the whole table.
    #[test]
    fn intervals_cover_and_stalls_are_called_off() {
        let sizes: &[(usize, f64, u64)] = if std::env::var_os("VEERLOG_FULL").is_some() {
            &[(40, 0.4, 120), (40, 1.0, 120), (300, 0.4, 40), (300, 1.0, 40)]
        } else {
            &[(40, 0.7, 40)]
        };
        let tables = |laws| sizes.iter().map(|&(frames, rough, runs)| table(laws, frames, rough, runs)).collect();
        let own: Vec<Table> = tables(&LAWS);
        let strange: Vec<Table> = tables(&STRANGERS);
        holds(&own);
        // growth of another family: as far off as a fleet nobody has seen may be
        let scored: Vec<Scored> = strange.iter().flat_map(|t| t.scored.iter().copied()).collect();
        let pool = figures(&scored);
        assert!((0.70..0.90).contains(&pool.coverage80) && pool.error < pool.error_straight, "{pool:?}");
    }

    #[test]
    fn pinball_agrees_with_a_hand_sum() {
        // all quantiles at 1.1: (1 − level)·0.1 on average over symmetric levels = 0.05
        assert!((pinball(&[1.1; 7]) - 0.05).abs() < 1e-12);
        assert!((pinball(&[0.9; 7]) - 0.05).abs() < 1e-12);
    }

    #[test]
    fn fleets_are_the_same_on_any_number_of_threads() {
        let fleet = Fleet { frames: 40, roughness: 1.0, seed: 2 };
        let text = |threads| {
            let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
            pool.install(|| run(&[Law::Jumps, Law::Stretches], &fleet, 4).to_string())
        };
        assert_eq!(text(1), text(2));
    }
}
