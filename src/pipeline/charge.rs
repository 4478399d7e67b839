//! Growth against charge: the frames' depth and length beside what the cell log says has passed, and half-cycles.
//!
//! A half-cycle runs from one change of the current's sign to the next; currents under 1 % of the largest are rest and end
//! none. Stretches shorter than the frames' spacing are not seen by the film and are left out. Metal by Faraday's law:
//! [`Metal`]. Limits: visible volume takes the track to fill the whole depth seen through, an upper bound; the track may be
//! an empty crack; charge may plate elsewhere.

use super::Input;
use crate::measure::{FrameRow, Metal};
use crate::results::{CellSamples, ChargeRow, ChargeSummary, Flow, HalfCycleRow};
use crate::stats::order::median;

/// Share of the largest current under which the cell rests (ours).
const REST: f64 = 0.01;
/// mm² in a cm².
const MM2_PER_CM2: f64 = 100.0;
/// µm in a mm.
const UM_PER_MM: f64 = 1_000.0;

/// Growth against charge.
#[derive(Debug, Default, PartialEq)]
pub(super) struct Charged {
    /// A row a usable frame; empty without a current log.
    pub(super) rows: Vec<ChargeRow>,
    /// A row a half-cycle.
    pub(super) half_cycles: Vec<HalfCycleRow>,
    /// Over the run.
    pub(super) summary: ChargeSummary,
}

impl Charged {
    /// Puts the frames of a run beside its cell log.
    pub(super) fn of(input: &Input, frames: &[FrameRow]) -> Self {
        let cell = &input.manifest.cell;
        let geometry = Geometry {
            area_cm2: cell.area_mm2.map(|area| area / MM2_PER_CM2),
            view_depth_um: cell.view_depth_mm.map(|depth| depth * UM_PER_MM),
            metal: cell.metal.as_deref().and_then(Metal::of),
        };
        let hold_s = input.cell.current_ma.as_ref().map_or(f64::INFINITY, |current| current.hold_s);
        Self::accounted(frames, &input.cell_samples(), hold_s, geometry, |from, to| input.cell.charge_mah(from, to))
    }

    /// The same from plain records. `hold_s`: how long a sample of the current is in force; `charge_mah`: charge between
    /// two times.
    fn accounted(
        frames: &[FrameRow],
        cell: &CellSamples,
        hold_s: f64,
        geometry: Geometry,
        charge_mah: impl Fn(f64, f64) -> Option<f64>,
    ) -> Self {
        if cell.current_ma.iter().all(Option::is_none) {
            return Self::default();
        }
        let used: Vec<&FrameRow> = frames.iter().filter(|row| row.usable).collect();
        let flows = flows(cell, hold_s);
        let cycles = half_cycles(&flows, spacing_s(&used));
        let half_cycles: Vec<HalfCycleRow> =
            (1..).zip(&cycles).map(|(n, cycle)| cycle_row(n, *cycle, &used, geometry, &charge_mah)).collect();
        let rows: Vec<ChargeRow> = (0..used.len()).map(|i| row(i, &used, &flows, &cycles, geometry)).collect();
        Self { summary: summary(&rows, &half_cycles), rows, half_cycles }
    }
}

/// What turns charge and area into densities and volumes; what was not given is absent.
#[derive(Debug, Clone, Copy, Default)]
struct Geometry {
    area_cm2: Option<f64>,
    view_depth_um: Option<f64>,
    metal: Option<Metal>,
}

impl Geometry {
    fn per_area(&self, value: Option<f64>) -> Option<f64> {
        Some(value? / self.area_cm2?)
    }
}

/// A stretch of one sign of current.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Stretch {
    flow: Flow,
    from_s: f64,
    to_s: f64,
}

/// Stretches of one sign in order of time, without those at rest or without a value.
fn flows(cell: &CellSamples, hold_s: f64) -> Vec<Stretch> {
    let largest = cell.current_ma.iter().flatten().fold(0.0_f64, |most, current| most.max(current.abs()));
    let flow = |current: Option<f64>| match current {
        Some(i) if i > REST * largest => Some(Flow::Plating),
        Some(i) if i < -REST * largest => Some(Flow::Stripping),
        _ => None,
    };
    let mut found: Vec<Stretch> = Vec::new();
    let next = cell.time_s.iter().skip(1).chain(cell.time_s.last());
    for ((&from_s, &to_s), current) in cell.time_s.iter().zip(next).zip(&cell.current_ma) {
        let Some(flow) = flow(*current) else { continue };
        let to_s = to_s.min(from_s + hold_s);
        match found.last_mut() {
            Some(last) if last.flow == flow && last.to_s >= from_s => last.to_s = to_s,
            _ => found.push(Stretch { flow, from_s, to_s }),
        }
    }
    found
}

/// Half-cycles: stretches that the film can see, joined across rests until the sign changes.
fn half_cycles(flows: &[Stretch], spacing_s: f64) -> Vec<Stretch> {
    let mut joined: Vec<Stretch> = Vec::new();
    for stretch in flows.iter().filter(|stretch| stretch.to_s - stretch.from_s >= spacing_s) {
        match joined.last_mut() {
            Some(last) if last.flow == stretch.flow => last.to_s = stretch.to_s,
            _ => joined.push(*stretch),
        }
    }
    joined
}

/// Median spacing of the used frames, s; 0 under two.
fn spacing_s(used: &[&FrameRow]) -> f64 {
    let gaps: Vec<f64> = used.windows(2).map(|pair| pair[1].time_s - pair[0].time_s).collect();
    median(&gaps).unwrap_or(0.0)
}

fn row(i: usize, used: &[&FrameRow], flows: &[Stretch], cycles: &[Stretch], geometry: Geometry) -> ChargeRow {
    let frame = used[i];
    let plating = flows.iter().filter(|s| s.flow == Flow::Plating && s.from_s < frame.time_s);
    let cycle = cycles.iter().position(|c| (c.from_s..=c.to_s).contains(&frame.time_s));
    let plated_mah = frame.charge_mah.filter(|charge| *charge > 0.0);
    ChargeRow {
        frame: frame.frame,
        time_s: frame.time_s,
        charge_mah: frame.charge_mah,
        charge_mah_per_cm2: geometry.per_area(frame.charge_mah),
        plating_s: Some(plating.map(|s| s.to_s.min(frame.time_s) - s.from_s).sum()),
        current_ma: frame.current_ma,
        current_ma_per_cm2: geometry.per_area(frame.current_ma),
        half_cycle: cycle.map(|index| index + 1),
        depth_um: frame.depth_um,
        front_depth_um: frame.front_depth_um,
        length_um: frame.length_um,
        tip_speed_um_per_s: tip_speed(i, used),
        stress_mpa: frame.stress_mpa,
        visible_um3: frame.area_um2.zip(geometry.view_depth_um).map(|(area, depth)| area * depth),
        faraday_um3: geometry.metal.zip(plated_mah).map(|(metal, charge)| metal.volume_um3(charge)),
    }
}

/// Growth in length from the used frame before to the one after (one side at the ends), by the free ends then.
fn tip_speed(i: usize, used: &[&FrameRow]) -> Option<f64> {
    let (before, after) = (used[i.saturating_sub(1)], used[(i + 1).min(used.len() - 1)]);
    let tips = used[i].tips.filter(|tips| *tips > 0)?;
    let grown = after.length_um? - before.length_um?;
    let over_s = after.time_s - before.time_s;
    (over_s > 0.0).then(|| grown / over_s / tips as f64)
}

fn cycle_row(
    number: usize,
    cycle: Stretch,
    used: &[&FrameRow],
    geometry: Geometry,
    charge_mah: impl Fn(f64, f64) -> Option<f64>,
) -> HalfCycleRow {
    let upto = |time_s: f64| used.partition_point(|row| row.time_s <= time_s);
    let (start, end) = (upto(cycle.from_s), upto(cycle.to_s));
    // Before anything grew there is no depth: nothing had grown.
    let gain = |of: fn(&FrameRow) -> Option<f64>| {
        let last = used[..end].iter().rev().find_map(|row| of(row))?;
        Some(last - used[..start].iter().rev().find_map(|row| of(row)).unwrap_or(0.0))
    };
    let front = used[..start].iter().rev().find_map(|row| row.front_depth_um);
    let least = used[start..end].iter().filter_map(|row| row.front_depth_um).reduce(f64::min);
    let charge = charge_mah(cycle.from_s, cycle.to_s);
    HalfCycleRow {
        half_cycle: number,
        flow: cycle.flow,
        from_s: cycle.from_s,
        to_s: cycle.to_s,
        charge_mah: charge,
        charge_mah_per_cm2: geometry.per_area(charge),
        depth_gain_um: gain(|row| row.depth_um),
        length_gain_um: gain(|row| row.length_um),
        retreat_um: front.zip(least).map(|(front, least)| (front - least).max(0.0)),
    }
}

fn summary(rows: &[ChargeRow], cycles: &[HalfCycleRow]) -> ChargeSummary {
    let last = rows.last();
    let of = |flow: Flow| cycles.iter().filter(move |cycle| cycle.flow == flow);
    let gains: Vec<f64> = of(Flow::Plating).filter_map(|cycle| cycle.depth_gain_um).collect();
    let retreats: Vec<f64> = of(Flow::Stripping).filter_map(|cycle| cycle.retreat_um).collect();
    ChargeSummary {
        logged: true,
        charge_mah: last.and_then(|row| row.charge_mah),
        charge_mah_per_cm2: last.and_then(|row| row.charge_mah_per_cm2),
        plating_half_cycles: of(Flow::Plating).count(),
        depth_gain_um: median(&gains),
        stripping_half_cycles: of(Flow::Stripping).count(),
        retreat_um: median(&retreats),
        visible_um3: last.and_then(|row| row.visible_um3),
        faraday_um3: last.and_then(|row| row.faraday_um3),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use approx::assert_relative_eq;

    /// 40 frames, 10 s apart; 0.1 mA for 100 s, then −0.1 mA for 100 s, and so on. Depth grows by 1 µm/s while plating,
    /// the front draws back by 0.2 µm/s while stripping.
    fn cycled() -> (Vec<FrameRow>, CellSamples) {
        let plates = |t: f64| ((t / 100.0) as u32).is_multiple_of(2);
        let mut depth = 0.0;
        let mut front = 0.0;
        let frames = (0..40_u32)
            .map(|i| {
                let time_s = 10.0 * f64::from(i);
                let plated = i > 0 && plates(time_s - 5.0);
                depth += if plated { 10.0 } else { 0.0 };
                front = if plated { depth } else { (front - 2.0_f64).max(0.0) };
                let charge_mas = (0..i).map(|k| if plates(10.0 * f64::from(k)) { 1.0 } else { -1.0 }).sum::<f64>();
                FrameRow {
                    frame: i as usize,
                    time_s,
                    usable: true,
                    depth_um: (i > 0).then_some(depth),
                    front_depth_um: (i > 0).then_some(front),
                    length_um: (i > 0).then_some(2.0 * depth),
                    area_um2: Some(3.0 * depth),
                    tips: Some(2),
                    current_ma: Some(if plates(time_s) { 0.1 } else { -0.1 }),
                    charge_mah: Some(charge_mas / 3_600.0),
                    ..FrameRow::default()
                }
            })
            .collect();
        let time_s: Vec<f64> = (0..391).map(f64::from).collect();
        let current_ma = time_s.iter().map(|t| Some(if plates(*t) { 0.1 } else { -0.1 })).collect();
        (frames, CellSamples { time_s, current_ma, voltage_v: vec![None; 391] })
    }

    fn account(geometry: Geometry) -> Charged {
        let (frames, cell) = cycled();
        Charged::accounted(&frames, &cell, 10.0, geometry, |from, to| Some(0.1 * (to - from) / 3_600.0))
    }

    #[test]
    fn half_cycles_hold_growth_and_retreat() {
        let charged = account(Geometry::default());
        let flows: Vec<Flow> = charged.half_cycles.iter().map(|cycle| cycle.flow).collect();
        assert_eq!(flows, [Flow::Plating, Flow::Stripping, Flow::Plating, Flow::Stripping]);
        let [first, second, ..] = &charged.half_cycles[..] else { panic!("four half-cycles") };
        assert_relative_eq!(first.depth_gain_um.unwrap(), 100.0);
        assert_relative_eq!(second.depth_gain_um.unwrap(), 0.0);
        assert_relative_eq!(second.retreat_um.unwrap(), 20.0);
        assert_eq!(first.charge_mah_per_cm2, None);
        assert_relative_eq!(charged.summary.depth_gain_um.unwrap(), 100.0);
        assert_eq!((charged.summary.plating_half_cycles, charged.summary.stripping_half_cycles), (2, 2));
        let last = charged.rows.last().unwrap();
        assert_relative_eq!(last.plating_s.unwrap(), 200.0);
        assert_eq!(last.half_cycle, Some(4));
    }

    #[test]
    fn speed_is_that_of_one_free_end() {
        // 2 µm of length a second over two free ends.
        assert_relative_eq!(account(Geometry::default()).rows[5].tip_speed_um_per_s.unwrap(), 1.0);
    }

    /// 4.849081 µm of lithium for each mAh/cm² (Faraday; 6.94 g/mol, 0.534 g/cm³).
    #[test]
    fn volumes_follow_faraday_and_the_view() {
        let geometry = Geometry { area_cm2: Some(0.05), view_depth_um: Some(400.0), metal: Metal::of("Li") };
        let charged = account(geometry);
        let row = &charged.rows[10];
        let density = row.charge_mah_per_cm2.unwrap();
        assert_relative_eq!(density, 10.0 * 0.1 / 3.6 / 1_000.0 / 0.1 / 0.05, max_relative = 1e-9);
        assert_relative_eq!(row.faraday_um3.unwrap(), 4.849_081 * density * 0.05 * 1e8, max_relative = 1e-6);
        assert_relative_eq!(row.visible_um3.unwrap(), 300.0 * 400.0);
        assert_eq!(charged.rows[0].faraday_um3, None);
    }

    #[test]
    fn rests_blips_and_a_missing_log() {
        let at = |from: usize, values: &[f64]| CellSamples {
            time_s: (from..from + values.len()).map(|t| t as f64).collect(),
            current_ma: values.iter().map(|i| Some(*i)).collect(),
            voltage_v: Vec::new(),
        };
        let mut values = vec![0.1; 100];
        values[30..50].fill(0.0005);
        values[70] = -0.1;
        let flows = flows(&at(0, &values), 10.0);
        assert_eq!(flows.len(), 4);
        let joined = half_cycles(&flows, 10.0);
        assert_eq!(joined, [Stretch { flow: Flow::Plating, from_s: 0.0, to_s: 99.0 }]);
        let (frames, _) = cycled();
        let none = Charged::accounted(&frames, &CellSamples::default(), 10.0, Geometry::default(), |_, _| None);
        assert_eq!(none, Charged::default());
        let dead = Charged::accounted(&frames, &at(0, &[0.0; 20]), 10.0, Geometry::default(), |_, _| Some(0.0));
        assert!(dead.half_cycles.is_empty() && dead.rows.len() == 40);
    }

    #[test]
    fn a_hole_of_the_log_is_no_plating() {
        let holed =
            CellSamples { time_s: vec![0.0, 5.0, 105.0, 110.0], current_ma: vec![Some(0.1); 4], voltage_v: Vec::new() };
        let seen = |from_s, to_s| Stretch { flow: Flow::Plating, from_s, to_s };
        assert_eq!(flows(&holed, 10.0), [seen(0.0, 15.0), seen(105.0, 110.0)]);
    }
}
