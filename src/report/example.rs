//! Invented results for tests and for looking at the page: filaments drawn by formula, no run behind them.

use std::collections::BTreeMap;

use image::{GrayImage, Luma};
use ndarray::Array2;

use crate::measure::{FilamentRow, ForecastRow, FrameRow, GrowthRow, PathRow};
use crate::results::*;
use crate::trace::{EndsIn, Root, Trace, TracePath, TracePoint, TracedFilament};

const SIZE: [u32; 2] = [640, 420];
const FRAMES: usize = 61;
const BARE: usize = 6;
const STEP_S: f64 = 20.0;
const UM_PER_PX: f64 = 1.25;
const EDGES: [f64; 2] = [36.0, 612.0];
const FILAMENTS: u32 = 9;
/// The load turns from along the plates to 30° at this frame.
const TURN: usize = 36;

/// A cell that grows under a load that turns, not yet shorted.
pub(crate) fn growing() -> Results {
    let trace = trace();
    let frames = frames(&trace);
    let last = last_picture(&trace);
    let film = (BARE..FRAMES).step_by(6).map(|frame| film_frame(&trace, frame)).collect();
    let forecasts = forecasts(&frames);
    let mut results = Results {
        facts: facts(),
        growth: growth(&trace),
        paths: paths(&trace),
        filaments: filaments(&trace, &frames),
        pictures: Pictures {
            first: bare_picture(),
            recorded: Some(last.clone()),
            last,
            film,
            arrivals: Some(arrivals(&trace)),
        },
        load: load(),
        cell: cell(),
        trace,
        turns: vec![turn()],
        charge: charge(&frames),
        half_cycles: vec![half_cycle(&frames)],
        frames,
        forecasts,
        summary: Summary::default(),
        cautions: vec!["The specimen was handled in air between the second and the third bend.".into()],
    };
    results.summary = summary(&results);
    results
}

/// The same cell, shorted by its log at frame 52.
pub(crate) fn shorted() -> Results {
    let mut results = growing();
    let time = 52.0 * STEP_S + 8.0;
    results.summary.short =
        ShortSummary { observed: true, time_s: Some(time), evidence: Some(ShortEvidence::Electrical) };
    results.forecasts.retain(|row| row.issued_at_s < time);
    results.summary.forecast = results.forecasts.last().cloned();
    for (t, v) in results.cell.time_s.iter().zip(&mut results.cell.voltage_v) {
        *v = if *t > time { Some(0.002) } else { *v };
    }
    results
}

/// A cell in which nothing grew, with no load and no electrical log.
pub(crate) fn still() -> Results {
    let frames: Vec<FrameRow> = (0..12).map(|frame| row(frame, None)).collect();
    let mut results = Results {
        facts: RunFacts { fixture: None, ..facts() },
        frames,
        pictures: Pictures { first: bare_picture(), last: bare_picture(), ..Pictures::default() },
        ..Results::default()
    };
    results.summary = summary(&results);
    results
}

/// The step of the load, and growth that followed it.
fn turn() -> TurnRow {
    TurnRow {
        step: 1,
        time_s: TURN as f64 * STEP_S,
        axis_before_deg: Some(90.0),
        axis_after_deg: Some(30.0),
        stress_before_mpa: 150.0,
        stress_after_mpa: 120.0,
        expected_deg: Some(30.0),
        growth_before_deg: Some(98.0),
        growth_after_deg: Some(33.0),
        turned_deg: Some(52.0),
        lag_s: Some(40.0),
        lag_low_s: Some(20.0),
        lag_high_s: Some(80.0),
        lag_um: Some(11.0),
        lag_low_um: Some(4.0),
        lag_high_um: Some(19.0),
        filaments: 9,
        followed: 7,
        gain: Some(0.9),
        p: Some(0.000_4),
        verdict: TurnVerdict::Turned,
    }
}

/// Speeds that fall with the stress, charge at an even current.
fn charge(frames: &[FrameRow]) -> Vec<ChargeRow> {
    let row = |row: &FrameRow| {
        let mah = 0.032 * row.time_s / 3_600.0;
        ChargeRow {
            frame: row.frame,
            time_s: row.time_s,
            charge_mah: Some(mah),
            charge_mah_per_cm2: Some(mah / 0.032),
            plating_s: Some(row.time_s),
            current_ma: Some(0.032),
            current_ma_per_cm2: Some(1.0),
            half_cycle: Some(1),
            depth_um: row.depth_um,
            front_depth_um: row.front_depth_um,
            length_um: row.length_um,
            tip_speed_um_per_s: row.depth_um.map(|_| 0.5 + 0.2 * ragged(row.frame as u64)),
            stress_mpa: row.stress_mpa,
            visible_um3: row.length_um.map(|length| length * 4.0 * 400.0),
            faraday_um3: Some(mah * 4.849_081e8).filter(|volume| *volume > 0.0),
        }
    };
    frames.iter().filter(|row| row.usable).map(row).collect()
}

fn half_cycle(frames: &[FrameRow]) -> HalfCycleRow {
    HalfCycleRow {
        half_cycle: 1,
        flow: Flow::Plating,
        from_s: 100.0,
        to_s: 1_239.0,
        charge_mah: Some(0.0101),
        charge_mah_per_cm2: Some(0.316),
        depth_gain_um: frames.last().and_then(|row| row.depth_um),
        length_gain_um: frames.last().and_then(|row| row.length_um),
        retreat_um: Some(0.0),
    }
}

fn direction_row() -> DirectionRow {
    DirectionRow {
        stress: "compression".into(),
        filaments: 9,
        pieces: 330,
        length_um: 2_900.0,
        mean_axis_deg: Some(18.0),
        resultant: 0.41,
        kappa: Some(0.9),
        rayleigh_p: Some(0.02),
        alignment: Some(0.27),
        toward_expected: Some(0.27),
        toward_expected_low: Some(0.08),
        toward_expected_high: Some(0.47),
        v_p: Some(0.04),
    }
}

fn kink_model() -> KinkModel {
    let bin = |i: u32| KinkBin {
        from_deg: 15.0 * f64::from(i),
        to_deg: 15.0 * f64::from(i + 1),
        measured_deg: 1.0 + ragged(u64::from(i)),
        measured_ci95: (i != 2).then(|| [ragged(u64::from(i)) - 1.0, 3.0 + ragged(u64::from(i))]),
        predicted_deg: [3.0, 8.0, 13.0, 16.0, 14.0, 6.0][i as usize],
        pieces: 40,
        filaments: 9,
    };
    let inputs = KinkInputs {
        metal: "Li".into(),
        molar_volume_cm3: 12.996,
        overpotential_mv: 55.0,
        pressure_mpa: 408.3,
        stress_mpa: 150.0,
        u_stress_mpa: Some(6.2),
        half_length_um: 90.0,
        distance_um: 4.0,
        pieces: 240,
        closed: 3,
    };
    KinkModel { inputs, bins: (0..6).map(bin).collect() }
}

fn facts() -> RunFacts {
    RunFacts {
        run: "sill-07".into(),
        specimen: Some("bar C".into()),
        note: Some("third bend, load axis turned after 12 min".into()),
        um_per_px: UM_PER_PX,
        gap_um: Some((EDGES[1] - EDGES[0]) * UM_PER_PX),
        frame_size: SIZE,
        plating_edge: vec![[EDGES[0], 0.0], [EDGES[0], f64::from(SIZE[1] - 1)]],
        far_edge: vec![[EDGES[1], 0.0], [EDGES[1], f64::from(SIZE[1] - 1)]],
        darker: true,
        bare: BARE,
        fixture: Some("cantilever".into()),
    }
}

fn direction(frame: usize) -> f64 {
    if frame < TURN { 90.0 } else { 30.0 }
}

/// Ragged, repeatable numbers in −1..1 (a hash of the counter; nothing statistical rests on it).
fn ragged(i: u64) -> f64 {
    let mixed = (i + 1).wrapping_mul(0x9E37_79B9_7F4A_7C15);
    let mixed = (mixed ^ (mixed >> 31)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    ((mixed ^ (mixed >> 27)) >> 11) as f64 / (1_u64 << 52) as f64 - 1.0
}

/// Points 1 px apart that turn toward the load axis of their time.
fn trace() -> Trace {
    let mut trace = Trace::default();
    for i in 0..FILAMENTS {
        let start = BARE + (i as usize * 5) % 17;
        let mut at = [EDGES[0], 30.0 + 43.0 * f64::from(i)];
        let mut heading: f64 = 20.0 * ragged(u64::from(i));
        let mut points = vec![point(at, start)];
        for frame in start..FRAMES {
            let pixels = (3.0 + 3.5 * f64::from(i % 4)) * (1.0 + 0.5 * ragged(u64::from(i) * 97 + frame as u64));
            let aim = if frame < TURN { 34.0 * if i % 2 == 0 { 1.0 } else { -1.0 } } else { 30.0 };
            for _ in 0..pixels.round() as usize {
                heading +=
                    0.12 * (aim - heading) + 5.0 * ragged(frame as u64 * 31 + u64::from(i) + points.len() as u64);
                at = [at[0] + heading.to_radians().cos(), at[1] - heading.to_radians().sin()];
                if at[1] < 4.0 || at[1] > f64::from(SIZE[1]) - 4.0 || at[0] > EDGES[1] - 40.0 {
                    break;
                }
                points.push(point(at, frame));
            }
        }
        trace.filaments.push(TracedFilament {
            filament: i + 1,
            root: Root::Plating,
            root_px: [points[0].x, points[0].y],
            bridged: None,
        });
        if points.len() > 1 {
            let ends_in = EndsIn::Tip;
            trace.paths.push(TracePath { path: i + 1, filament: i + 1, parent: None, points, ends_in });
        }
    }
    trace
}

fn point(at: [f64; 2], arrival: usize) -> TracePoint {
    TracePoint { x: at[0], y: at[1], arrival, retreat: None, width: 3.0, u_across: 0.2 }
}

fn bare_picture() -> GrayImage {
    GrayImage::from_fn(SIZE[0], SIZE[1], |x, y| {
        let slow = 14.0 * (f64::from(x) / 190.0).sin() + 9.0 * (f64::from(y) / 130.0).cos();
        let grain = 5.0 * ragged(u64::from(x) * 7919 + u64::from(y) * 104_729);
        let electrode = f64::from(x) < EDGES[0] || f64::from(x) > EDGES[1];
        Luma([(if electrode { 96.0 } else { 164.0 } + slow + grain) as u8])
    })
}

fn last_picture(trace: &Trace) -> GrayImage {
    film_frame(trace, FRAMES - 1).picture
}

fn film_frame(trace: &Trace, frame: usize) -> FilmFrame {
    let mut picture = bare_picture();
    for p in trace.paths.iter().flat_map(|path| &path.points).filter(|p| p.arrival <= frame) {
        for (dx, dy) in [(0, 0), (1, 0), (0, 1), (-1, 0), (0, -1)] {
            let (x, y) = ((p.x as i64 + dx) as u32, (p.y as i64 + dy) as u32);
            if let Some(pixel) = picture.get_pixel_mut_checked(x, y) {
                pixel.0[0] = (f64::from(pixel.0[0]) * 0.86) as u8;
            }
        }
    }
    FilmFrame { frame, time_s: frame as f64 * STEP_S, recorded: Some(picture.clone()), picture }
}

fn arrivals(trace: &Trace) -> Array2<u32> {
    let mut map = Array2::from_elem((SIZE[1] as usize, SIZE[0] as usize), NEVER);
    for p in trace.paths.iter().flat_map(|path| &path.points) {
        let cell = &mut map[[p.y as usize, p.x as usize]];
        *cell = (*cell).min(p.arrival as u32);
    }
    map
}

/// A frame's row; `trace` gives what had grown by then.
fn row(frame: usize, trace: Option<&Trace>) -> FrameRow {
    let points = || trace.into_iter().flat_map(|t| &t.paths).flat_map(|p| &p.points).filter(|p| p.arrival <= frame);
    let deepest = points().map(|p| p.x).reduce(f64::max);
    let depth = deepest.map(|x| (x - EDGES[0]) * UM_PER_PX);
    let loaded = trace.is_some();
    let usable = !(loaded && (frame == 23 || frame == 24));
    let time = frame as f64 * STEP_S;
    let measured = |value: f64| usable.then_some(value);
    let roots = trace.map_or(0, |t| t.paths.iter().filter(|p| p.points[0].arrival <= frame).count());
    FrameRow {
        frame,
        file: format!("frames/f{frame:04}.png"),
        time_s: time,
        usable,
        reason: if usable { String::new() } else { "repeats the frame before it, byte for byte".into() },
        drift_x_px: measured(0.4 * (time / 300.0).sin()),
        drift_y_px: measured(0.3 * (time / 410.0).cos()),
        load_n: loaded.then_some(2.08),
        load_direction_deg: loaded.then(|| direction(frame)),
        stress_mpa: loaded.then_some(if frame < TURN { 150.0 } else { 120.0 }),
        depth_um: depth.filter(|_| usable),
        u_depth_um: depth.filter(|_| usable).map(|_| 2.2),
        depth_fraction: depth.map(|d| d / ((EDGES[1] - EDGES[0]) * UM_PER_PX)),
        front_depth_um: depth.filter(|_| usable),
        deepest_x_px: deepest,
        filaments: Some(roots),
        tips: Some(roots),
        length_um: Some(points().count() as f64 * UM_PER_PX),
        alignment: deepest.filter(|_| usable && loaded).map(|_| -0.2 + 0.7 * (time / 1_200.0)),
        growth_alignment: deepest
            .filter(|_| usable && loaded)
            .map(|_| (if frame < TURN { -0.35 } else { 0.8 } + 0.2 * ragged(frame as u64)).clamp(-1.0, 1.0)),
        ..FrameRow::default()
    }
}

fn frames(trace: &Trace) -> Vec<FrameRow> {
    (0..FRAMES).map(|frame| row(frame, Some(trace))).collect()
}

fn growth(trace: &Trace) -> Vec<GrowthRow> {
    let mut rows = Vec::new();
    for path in &trace.paths {
        for piece in path.points.chunk_by(|a, b| a.arrival == b.arrival).filter(|piece| piece.len() > 3) {
            let (a, b) = (piece[0], piece[piece.len() - 1]);
            let angle = (-(b.y - a.y)).atan2(b.x - a.x).to_degrees().rem_euclid(180.0);
            let load = direction(a.arrival);
            let off = (angle - load).rem_euclid(180.0);
            rows.push(GrowthRow {
                frame: a.arrival,
                time_s: a.arrival as f64 * STEP_S,
                load_time_s: (a.arrival as f64 - 0.5) * STEP_S,
                filament: path.filament,
                x_px: (a.x + b.x) / 2.0,
                y_px: (a.y + b.y) / 2.0,
                length_um: piece.len() as f64 * UM_PER_PX,
                angle_deg: angle,
                u_angle_deg: Some(1.5),
                load_direction_deg: Some(load),
                angle_to_load_deg: Some(off.min(180.0 - off)),
                stress_mpa: Some(150.0),
            });
        }
    }
    rows.sort_by_key(|row| (row.frame, row.filament));
    rows
}

fn paths(trace: &Trace) -> Vec<PathRow> {
    let at_end = |path: &TracePath| {
        let (a, b) = (path.points[0], path.points[path.points.len() - 1]);
        PathRow {
            frame: FRAMES - 1,
            time_s: (FRAMES - 1) as f64 * STEP_S,
            filament: path.filament,
            path: path.path,
            length_um: path.points.len() as f64 * UM_PER_PX,
            u_length_um: None,
            chord_um: (b.x - a.x).hypot(b.y - a.y) * UM_PER_PX,
            width_um: Some(3.0 * UM_PER_PX),
            u_width_um: None,
            angle_deg: Some(20.0),
            u_angle_deg: None,
            angle_to_load_deg: Some(70.0),
            x0_px: a.x,
            y0_px: a.y,
            x1_px: b.x,
            y1_px: b.y,
            ends_in: path.ends_in,
        }
    };
    trace.paths.iter().map(at_end).collect()
}

fn filaments(trace: &Trace, frames: &[FrameRow]) -> Vec<FilamentRow> {
    let one = |path: &TracePath| FilamentRow {
        filament: path.filament,
        first_time_s: frames[path.points[0].arrival].time_s,
        root: Root::Plating,
        root_x_px: path.points[0].x,
        root_y_px: path.points[0].y,
        final_depth_um: path.points.iter().map(|p| (p.x - EDGES[0]) * UM_PER_PX).reduce(f64::max),
        final_length_um: path.points.len() as f64 * UM_PER_PX,
        tips: 1,
        bridged: false,
        turned: (!path.filament.is_multiple_of(3)).then_some(path.filament.is_multiple_of(2)),
    };
    trace.paths.iter().map(one).collect()
}

/// Quantiles that close in on 1500 s as the run goes on.
fn forecasts(frames: &[FrameRow]) -> Vec<ForecastRow> {
    let issue = |row: &FrameRow| {
        let now = row.time_s;
        let middle =
            1_500.0 + 240.0 * ragged(row.frame as u64) * (1.0 - now / 1_400.0) + 700.0 * (-now / 300.0_f64).exp();
        let at = |z: f64| Some(now + (middle - now) * (z * (0.75 - now / 2_400.0)).exp());
        ForecastRow {
            frame: row.frame,
            issued_at_s: now,
            p025_s: at(-1.96),
            p10_s: at(-1.28),
            p25_s: at(-0.67),
            p50_s: at(0.0),
            p75_s: at(0.67),
            p90_s: at(1.28),
            p975_s: at(1.96),
            horizon_s: 2.0 * now,
            chance_by_horizon: Some(0.35 + 0.5 * now / 1_200.0),
            model: "first passage".into(),
        }
    };
    frames.iter().filter(|row| row.usable && row.depth_um.is_some()).map(issue).collect()
}

fn load() -> LoadSamples {
    let time_s: Vec<f64> = (0..1_240).map(f64::from).collect();
    let turned = |t: &f64| *t >= TURN as f64 * STEP_S;
    LoadSamples {
        force_n: time_s.iter().map(|t| Some(if turned(t) { 1.67 } else { 2.08 })).collect(),
        stress_mpa: time_s
            .iter()
            .map(|t| Some(if turned(t) { 120.0 } else { 150.0 } + 1.5 * ragged(*t as u64)))
            .collect(),
        direction_deg: time_s.iter().map(|t| Some(if turned(t) { 30.0 } else { 90.0 })).collect(),
        time_s,
    }
}

fn cell() -> CellSamples {
    let time_s: Vec<f64> = (0..1_240).map(f64::from).collect();
    CellSamples {
        current_ma: time_s.iter().map(|t| Some(if *t < 100.0 { 0.0 } else { 0.032 })).collect(),
        voltage_v: time_s
            .iter()
            .map(|t| {
                (!(700.0..740.0).contains(t))
                    .then_some(if *t < 100.0 { 0.0 } else { 0.061 - t / 60_000.0 } + 0.0008 * ragged(*t as u64))
            })
            .collect(),
        time_s,
    }
}

fn summary(results: &Results) -> Summary {
    let last = results.frames.iter().rev().find(|row| row.usable);
    let usable = results.frames.iter().filter(|row| row.usable).count();
    let set_aside = results.frames.iter().filter(|row| !row.usable);
    let grew = !results.filaments.is_empty();
    let alignment = |value: f64, ci95| Alignment {
        value: grew.then_some(value),
        ci95: if grew { Some(ci95) } else { None },
        mean_angle_to_load_deg: grew.then_some(38.0),
        n: results.filaments.len(),
    };
    Summary {
        tool: "veerlog".into(),
        version: "0.1.0".into(),
        format: 1,
        run: results.facts.run.clone(),
        specimen: results.facts.specimen.clone(),
        frames: FrameCount {
            total: results.frames.len(),
            usable,
            set_aside: set_aside.map(|r| SetAside { frame: r.frame, reason: r.reason.clone() }).collect(),
        },
        um_per_px: UM_PER_PX,
        gap_um: results.facts.gap_um,
        depth: DepthSummary {
            final_um: last.and_then(|row| row.depth_um),
            u_final_um: last.and_then(|row| row.u_depth_um),
            final_fraction: last.and_then(|row| row.depth_fraction),
            rate_um_per_s: grew.then_some(0.412),
            rate_ci95: grew.then_some([0.371, 0.455]),
        },
        alignment: AlignmentSummary { paths: alignment(0.31, [0.12, 0.50]), growth: alignment(0.27, [0.08, 0.47]) },
        load: LoadSummary {
            stress_mpa: grew.then_some(Spread { min: 120.0, median: 150.0, max: 150.0 }),
            dose_mpa: grew.then_some(126.0),
        },
        turns: if grew {
            TurnsSummary {
                load: LoadKnown::Stress,
                steps: 1,
                turned: 1,
                p: Some(0.000_4),
                filaments: Some(9),
                ..TurnsSummary::default()
            }
        } else {
            TurnsSummary::default()
        },
        directions: if grew { vec![direction_row()] } else { Vec::new() },
        kink_model: grew.then(kink_model),
        charge: if grew {
            ChargeSummary {
                logged: true,
                charge_mah: Some(0.0107),
                charge_mah_per_cm2: Some(0.333),
                plating_half_cycles: 1,
                depth_gain_um: Some(520.0),
                visible_um3: Some(4.2e6),
                faraday_um3: Some(5.2e6),
                ..ChargeSummary::default()
            }
        } else {
            ChargeSummary::default()
        },
        review: None,
        short: ShortSummary::default(),
        forecast: results.forecasts.last().cloned(),
        settings: serde_json::json!({ "confirm_frames": 2, "trace": { "false_alarms": 0.01 }, "seed": 20_260_305 }),
        inputs: BTreeMap::from([
            ("run.toml".into(), "6b86b273ff34fce19d6b804eff5a3f5747ada4eaa22f1d49c01e52ddb7875b4b".into()),
            ("load.csv".into(), "d4735e3a265e16eee03f59718b9b5d03019c07d8b6c51f90da3a666eec13ab35".into()),
        ]),
        warnings: if grew {
            vec![
                "The load log has no sample from 11 min 40 s to 12 min 20 s; the load is absent there.".into(),
                "Two frames were set aside.".into(),
            ]
        } else {
            Vec::new()
        },
    }
}
