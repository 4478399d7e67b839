//! The forecast of each frame, issued from what was decided by then and from nothing later.

use super::Input;
use crate::forecast::short::{self, Grade};
use crate::forecast::{PlanStep, Record, Settings, Silence, TipSeries, forecast, record};
use crate::load::dose_mpa;
use crate::measure::{ForecastRow, tip_uncertainty_px};
use crate::run::PlannedStep;
use crate::trace::Tracer;

/// How much surer a decided depth is than one still provisional: on filmed runs the depth before the newest scattered by 0.4 px
/// about what was decided later, at an uncertainty of 0.5 px.
const PROVISIONAL: f64 = 2.0;
/// Newest frames whose depth is not used: what a frame shows is the median of the last three, so that a moving tip stands up to
/// a frame's growth behind there and would be taken for a slower one.
const LAGGING: usize = 1;
/// Samples of the cell log before an issue that are searched for a short.
const SEARCHED: usize = 4000;
/// What the model's name is followed by where the plan goes beyond the record.
const EXTRAPOLATES: &str = ", extrapolated to a planned load or current that the run has not seen";
/// Records kept to judge the forecasts by what came.
const KEPT: usize = 60;

/// The run's own record of forecasts, in words.
#[derive(Debug, Clone, Default)]
pub(super) struct Calibration {
    /// What is off; `None` where chance explains it.
    pub(super) off: Option<String>,
    /// The coverages.
    pub(super) shown: Option<String>,
}

/// Issues forecasts while the run is followed.
pub(super) struct Forecasts<'a> {
    input: &'a Input,
    u_px: f64,
    times_s: Vec<f64>,
    /// The rows so far.
    pub(super) rows: Vec<ForecastRow>,
    records: Vec<Record>,
    keep_every: usize,
    ended: bool,
}

impl<'a> Forecasts<'a> {
    pub(super) fn new(input: &'a Input, noise: f64) -> Self {
        let keep_every = input.sequence.entries.len().div_ceil(KEPT).max(1);
        Self {
            input,
            u_px: tip_uncertainty_px(noise),
            times_s: Vec::new(),
            rows: Vec::new(),
            records: Vec::new(),
            keep_every,
            ended: false,
        }
    }

    /// Issues the forecast of a used frame, unless the cell has shorted by then.
    pub(super) fn issue(&mut self, frame: usize, time_s: f64, tracer: &Tracer) {
        self.times_s.push(time_s);
        if self.ended {
            return;
        }
        let tips = self.tips(tracer);
        if tips.is_empty() {
            return;
        }
        self.ended = self.shorted_by(time_s);
        let record = self.record(tips, time_s);
        let told = forecast(&record, &Settings::default());
        if told.silence == Some(Silence::Contact) || self.ended {
            self.ended = true;
            return;
        }
        let q = |i: usize| told.quantiles_s.map(|all| all[i]);
        self.rows.push(ForecastRow {
            frame,
            issued_at_s: time_s,
            p025_s: q(0),
            p10_s: q(1),
            p25_s: q(2),
            p50_s: q(3),
            p75_s: q(4),
            p90_s: q(5),
            p975_s: q(6),
            horizon_s: told.horizon_s,
            chance_by_horizon: told.chance_by_horizon,
            model: if told.extrapolates { format!("{}{EXTRAPOLATES}", told.model) } else { told.model },
        });
        if self.rows.len().is_multiple_of(self.keep_every) {
            self.records.push(record);
        }
    }

    /// How depths predicted 1, 3 and 10 frames ahead compared with those then measured.
    pub(super) fn calibration(&self) -> Calibration {
        let Some(outcome) = self.records.last() else { return Calibration::default() };
        let scores = record::score(&self.records, outcome);
        Calibration { off: record::verdict(&scores), shown: record::shown(&scores) }
    }

    fn tips(&self, tracer: &Tracer) -> Vec<TipSeries> {
        let um = self.input.um_per_px();
        let sure = self.times_s.len().saturating_sub(self.input.manifest.trace.confirm_frames);
        let courses = tracer.depth_courses();
        let um_of = |px: &[f64]| px.iter().map(|d| d * um).collect::<Vec<f64>>();
        courses
            .into_iter()
            .map(|course| {
                let mut remaining_um = um_of(&course.remaining_px);
                if let Some(last) = remaining_um.last_mut().filter(|_| course.bridged) {
                    *last = 0.0;
                }
                let u = |k: usize| if course.first + k < sure { self.u_px } else { PROVISIONAL * self.u_px };
                TipSeries {
                    filament: course.filament as u32 + 1,
                    first: course.first,
                    u_depth_um: (0..course.depth_px.len()).map(|k| u(k) * um).collect(),
                    depth_um: um_of(&course.depth_px),
                    remaining_um,
                }
            })
            .collect()
    }

    fn record(&self, tips: Vec<TipSeries>, issued_at_s: f64) -> Record {
        let times_s = self.times_s[..self.times_s.len().saturating_sub(LAGGING)].to_vec();
        Record {
            tips: tips.into_iter().filter_map(|tip| upto(tip, times_s.len())).collect(),
            gap_um: self.input.gap_um(),
            charge_mah: times_s.iter().map(|&t| self.input.charge_mah(t)).collect(),
            dose_mpa: times_s.iter().map(|&t| self.dose(t)).collect(),
            times_s,
            issued_at_s,
            plan: self.plan(issued_at_s),
        }
    }

    /// The steps still to come. What a step leaves out of the load goes on as it is now.
    fn plan(&self, issued_at_s: f64) -> Vec<PlanStep> {
        let ahead = self.input.manifest.plan.steps.iter().filter(|step| step.time_s > issued_at_s);
        let dose = |step: &PlannedStep| {
            let root = self.input.edges.plating.middle();
            let now = self.input.load.at(issued_at_s, Some(root));
            let turned = step.direction_deg.and_then(|rig| self.input.load.axis.axis_deg(Some(rig), Some(root)));
            step.stress_mpa.or(step.direction_deg)?;
            Some(dose_of(self.input, step.stress_mpa.or(now.stress_mpa)?, turned.or(now.direction_deg)?))
        };
        ahead.map(|s| PlanStep { time_s: s.time_s, current_ma: s.current_ma, dose_mpa: dose(s) }).collect()
    }

    /// Dose at the middle of the plating edge.
    fn dose(&self, time_s: f64) -> Option<f64> {
        dose_at(self.input, time_s)
    }

    /// Whether the cell log up to now shows a full short.
    fn shorted_by(&self, time_s: f64) -> bool {
        if self.input.manifest.cell.ended == crate::run::manifest::Ended::Broke {
            return false;
        }
        electrical_shorts(self.input, time_s, SEARCHED).iter().any(|e| e.grade == Grade::Full)
    }
}

/// A filament as known before the newest frames; contact is known at once.
fn upto(mut tip: TipSeries, frames: usize) -> Option<TipSeries> {
    let touches = tip.remaining_um.last().is_some_and(|&left| left <= 0.0);
    let known = frames.checked_sub(tip.first).filter(|&n| n > 0)?;
    for series in [&mut tip.depth_um, &mut tip.u_depth_um, &mut tip.remaining_um] {
        series.truncate(known);
    }
    if let Some(last) = tip.remaining_um.last_mut().filter(|_| touches) {
        *last = 0.0;
    }
    Some(tip)
}

/// Dose at the middle of the plating edge, MPa.
pub(super) fn dose_at(input: &Input, time_s: f64) -> Option<f64> {
    let root = input.edges.plating.middle();
    let state = input.load.at(time_s, Some(root));
    Some(dose_of(input, state.stress_mpa?, state.direction_deg?))
}

/// Dose of a stress along a load axis, at the middle of the plating edge, MPa.
fn dose_of(input: &Input, stress_mpa: f64, axis_deg: f64) -> f64 {
    let direction = input.edges.plating.nearest(input.edges.plating.middle()).direction;
    let edge = crate::measure::geometry::axial_deg(direction[0], direction[1]);
    dose_mpa(stress_mpa, axis_deg, edge)
}

/// Shorts in the last `most` samples of the cell log up to a time.
pub(super) fn electrical_shorts(input: &Input, until_s: f64, most: usize) -> Vec<short::ShortEvent> {
    let (Some(current), Some(voltage)) = (&input.cell.current_ma, &input.cell.voltage_v) else { return Vec::new() };
    let times = if voltage.time_s.is_empty() { &current.time_s } else { &voltage.time_s };
    let end = times.partition_point(|&t| t <= until_s);
    let start = end.saturating_sub(most);
    let samples: Vec<(f64, f64, f64)> =
        times[start..end].iter().filter_map(|&t| Some((t, current.at(t)?, voltage.at(t)?))).collect();
    let column = |pick: fn(&(f64, f64, f64)) -> f64| samples.iter().map(pick).collect::<Vec<f64>>();
    short::find(&column(|s| s.0), &column(|s| s.1), &column(|s| s.2), &short::Settings::default())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_newest_depth_is_left_out_but_contact_is_not() {
        let tip = |left: f64| TipSeries {
            filament: 1,
            first: 3,
            depth_um: vec![4.0, 6.0, 9.0],
            u_depth_um: vec![1.0; 3],
            remaining_um: vec![6.0, 4.0, left],
        };
        assert_eq!(upto(tip(1.0), 5).unwrap().remaining_um, [6.0, 4.0]);
        assert_eq!(upto(tip(0.0), 5).unwrap().remaining_um, [6.0, 0.0]);
        assert_eq!(upto(tip(1.0), 3), None);
    }
}
