//! Centre-lines, free ends and directions against the truth.
//! Lines are compared as points every half pixel against the nearest segment of the other side, found through a grid of buckets.

use std::collections::BTreeMap;

use super::read::{Recorded, Reported, ReportedPiece};
use super::{RunScore, mean, quantile};
use crate::synth::polyline::{acute_deg, axis_deg, distance, dot, minus, plus, scaled};
use crate::synth::truth::{PathTruth, WINDOW_PX, WINDOW_WIDTHS};

/// A centre-line counts as found within this distance, px (the bound the figures are named for).
const NEAR_PX: f64 = 2.0;
/// A free end counts as found within this distance, px (likewise).
const TIP_PX: f64 = 6.0;
/// A growth piece is compared with truth no farther than this, px; beyond, it is a false line, which precision tells.
const PIECE_PX: f64 = 8.0;
/// Spacing of compared points, px.
const SPACING_PX: f64 = 0.5;

type Point = [f64; 2];

/// Fills in the figures of the last frame's lines and of the growth pieces.
pub(super) fn fill(score: &mut RunScore, recorded: &Recorded, reported: &Reported) {
    if recorded.paths.is_empty() {
        return;
    }
    let end = recorded.frames.iter().filter(|f| f.usable).map(|f| f.time_s).fold(0.0, f64::max);
    let truth: Vec<Vec<Point>> = recorded.paths.iter().map(|p| until(&p.points, end)).collect();
    let traced: Vec<Vec<Point>> = reported.paths.iter().map(|p| p.iter().map(|q| [q[0], q[1]]).collect()).collect();
    let (near_truth, near_traced) = (Buckets::of(&truth), Buckets::of(&traced));
    let to_truth: Vec<f64> = spread(&traced).map(|p| near_truth.distance(p)).collect();
    let to_traced: Vec<f64> = spread(&truth).map(|p| near_traced.distance(p)).collect();
    let found = |away: &[f64]| mean(away.iter().map(|d| if *d <= NEAR_PX { 1.0 } else { 0.0 }));
    score.precision = found(&to_truth);
    score.recall = found(&to_traced);
    score.offset_rms_px = mean(to_truth.iter().filter(|d| **d <= NEAR_PX).map(|d| d * d)).map(f64::sqrt);
    let true_length = recorded.frames.iter().rev().find(|f| f.usable).map(|f| f.length_um);
    let length = reported.frames.iter().rev().find(|f| f.usable).map(|f| f.length_um.unwrap_or(0.0));
    score.length_ratio = length.zip(true_length).filter(|(_, t)| *t > 0.0).map(|(l, t)| l / t);
    score.tips_f1 = Some(f1(&true_tips(recorded, end), &reported.tips));
    directions(score, recorded, &reported.growth);
}

/// The points that had arrived by `time`.
fn until(points: &[[f64; 4]], time: f64) -> Vec<Point> {
    points.iter().take_while(|p| p[2] <= time).map(|p| [p[0], p[1]]).collect()
}

/// Points every half pixel along all lines.
fn spread(lines: &[Vec<Point>]) -> impl Iterator<Item = Point> + '_ {
    lines.iter().flat_map(|line| {
        let mut left = 0.0;
        line.windows(2).flat_map(move |s| {
            let length = distance(s[0], s[1]);
            let mut at = left;
            let mut points = Vec::new();
            while at < length {
                points.push(plus(s[0], scaled(minus(s[1], s[0]), at / length)));
                at += SPACING_PX;
            }
            left = at - length;
            points
        })
    })
}

/// Segments of lines, findable by place.
struct Buckets(BTreeMap<(i32, i32), Vec<[Point; 2]>>);

/// Side of a bucket, px: more than the largest distance asked for.
const BUCKET_PX: f64 = 8.0;

impl Buckets {
    fn of(lines: &[Vec<Point>]) -> Self {
        let mut buckets: BTreeMap<(i32, i32), Vec<[Point; 2]>> = BTreeMap::new();
        for segment in lines.iter().flat_map(|l| l.windows(2)) {
            let (a, b) = (bucket(segment[0]), bucket(segment[1]));
            for x in a.0.min(b.0)..=a.0.max(b.0) {
                for y in a.1.min(b.1)..=a.1.max(b.1) {
                    buckets.entry((x, y)).or_default().push([segment[0], segment[1]]);
                }
            }
        }
        Self(buckets)
    }

    /// Distance to the nearest segment; infinite beyond a bucket's side.
    fn distance(&self, p: Point) -> f64 {
        let (x, y) = bucket(p);
        let around = (x - 1..=x + 1).flat_map(|x| (y - 1..=y + 1).map(move |y| (x, y)));
        let segments = around.filter_map(|cell| self.0.get(&cell)).flatten();
        segments.map(|s| to_segment(p, s)).fold(f64::INFINITY, f64::min)
    }
}

fn bucket(p: Point) -> (i32, i32) {
    ((p[0] / BUCKET_PX).floor() as i32, (p[1] / BUCKET_PX).floor() as i32)
}

fn to_segment(p: Point, s: &[Point; 2]) -> f64 {
    let along = minus(s[1], s[0]);
    let share = (dot(minus(p, s[0]), along) / dot(along, along).max(1e-12)).clamp(0.0, 1.0);
    distance(p, plus(s[0], scaled(along, share)))
}

/// True free ends at `time`: ends of tracks that stick out of their parent's ink and met nothing by then.
fn true_tips(recorded: &Recorded, time: f64) -> Vec<Point> {
    let width_of = |path: u32| {
        let parent = recorded.paths.iter().find(|p| p.path == path);
        parent.and_then(|p| p.points.first()).map_or(0.0, |p| p[3])
    };
    let end = |path: &PathTruth| {
        let line = until(&path.points, time);
        let finished = line.len() == path.points.len();
        let length: f64 = line.windows(2).map(|s| distance(s[0], s[1])).sum();
        let hidden = path.parent.map_or(1.0, width_of);
        let free = path.ends_in == "tip" || !finished;
        (free && length > hidden).then(|| line.last().copied()).flatten()
    };
    recorded.paths.iter().filter_map(end).collect()
}

/// F1 of two sets of points, matched one to one from the closest pair on.
fn f1(truth: &[Point], found: &[Point]) -> f64 {
    if truth.is_empty() && found.is_empty() {
        return 1.0;
    }
    let mut pairs: Vec<(f64, usize, usize)> = Vec::new();
    for (i, t) in truth.iter().enumerate() {
        pairs.extend(found.iter().enumerate().map(|(j, f)| (distance(*t, *f), i, j)).filter(|p| p.0 <= TIP_PX));
    }
    pairs.sort_by(|a, b| a.0.total_cmp(&b.0).then((a.1, a.2).cmp(&(b.1, b.2))));
    let (mut used_truth, mut used_found) = (vec![false; truth.len()], vec![false; found.len()]);
    let mut hits = 0;
    for (_, i, j) in pairs {
        if !used_truth[i] && !used_found[j] {
            (used_truth[i], used_found[j]) = (true, true);
            hits += 1;
        }
    }
    2.0 * f64::from(hits) / (truth.len() + found.len()) as f64
}

/// Directions of growth pieces against the true ones.
fn directions(score: &mut RunScore, recorded: &Recorded, pieces: &[ReportedPiece]) {
    let (mut errors, mut covered) = (Vec::new(), Vec::new());
    for piece in pieces {
        let Some(truth) = true_direction(recorded, piece) else {
            continue;
        };
        let error = acute_deg(piece.angle_deg, truth);
        errors.push(error);
        covered.extend(piece.u_angle_deg.map(|u| if error <= 2.0 * u { 1.0 } else { 0.0 }));
    }
    score.direction_median_deg = quantile(&errors, 0.5);
    score.angle_covered = mean(covered);
}

/// True local direction nearest to a piece among what grew about its frame (one frame either way).
fn true_direction(recorded: &Recorded, piece: &ReportedPiece) -> Option<f64> {
    let time = |k: usize| recorded.frames.get(k).map(|f| f.time_s);
    let from = time(piece.frame.saturating_sub(2))?;
    let to = time(piece.frame + 1).or_else(|| time(piece.frame))?;
    let mut best: Option<(f64, f64)> = None;
    for path in &recorded.paths {
        for (i, p) in path.points.iter().enumerate().filter(|(_, p)| p[2] >= from && p[2] <= to) {
            let away = distance([p[0], p[1]], piece.place);
            if away <= PIECE_PX && best.is_none_or(|b| away < b.0) {
                best = Some((away, local_direction(&path.points, i)));
            }
        }
    }
    best.map(|b| b.1)
}

/// Direction of the chord over ± max(1.5 widths, 4 px) of centre-line, degrees.
fn local_direction(points: &[[f64; 4]], i: usize) -> f64 {
    let reach = (WINDOW_WIDTHS * points[i][3]).max(WINDOW_PX);
    let place = |k: usize| [points[k][0], points[k][1]];
    let walk = |step: isize| {
        let (mut at, mut way) = (i as isize, 0.0);
        while way < reach && (0..points.len() as isize).contains(&(at + step)) {
            way += distance(place(at as usize), place((at + step) as usize));
            at += step;
        }
        place(at as usize)
    };
    axis_deg(minus(walk(1), walk(-1)))
}

#[cfg(test)]
mod tests {
    use super::super::super::truth::ShortTruth;
    use super::*;

    fn straight(y: f64, ends_in: &str) -> PathTruth {
        let points = (0..=60).map(|i| [f64::from(i), y, 1.0 + f64::from(i), 3.0]).collect();
        PathTruth { filament: 1, path: 1, parent: None, ends_in: ends_in.into(), points }
    }

    fn recorded(paths: Vec<PathTruth>) -> Recorded {
        let frames = (0..8)
            .map(|k| super::super::super::truth::FrameTruth {
                frame: k,
                time_s: 10.0 * k as f64,
                drift_x_px: None,
                drift_y_px: None,
                depth_um: 0.0,
                depth_fraction: 0.0,
                front_depth_um: 0.0,
                tips: 0,
                length_um: 60.0,
                growth_alignment: None,
                usable: true,
            })
            .collect();
        Recorded { frames, paths, short: ShortTruth { time_s: None, filament: None }, um_per_px: 1.0 }
    }

    #[test]
    fn a_line_one_px_off_and_half_as_long() {
        let recorded = recorded(vec![straight(10.0, "tip")]);
        let traced = (0..=30).map(|i| [f64::from(i), 11.0, 0.0, 3.0]).collect();
        let piece = ReportedPiece { frame: 2, place: [15.0, 11.0], angle_deg: 176.0, u_angle_deg: Some(1.0) };
        let reported =
            Reported { paths: vec![traced], tips: vec![[59.0, 12.0]], growth: vec![piece], ..Reported::default() };
        let mut score = RunScore::default();
        fill(&mut score, &recorded, &reported);
        assert!((score.precision.unwrap() - 1.0).abs() < 1e-12);
        // The half found, and √3 px beyond its end that lie within 2 px of it.
        assert!((score.recall.unwrap() - 0.53).abs() < 0.01, "{:?}", score.recall);
        assert!((score.offset_rms_px.unwrap() - 1.0).abs() < 1e-9);
        assert!((score.tips_f1.unwrap() - 1.0).abs() < 1e-12);
        assert!((score.direction_median_deg.unwrap() - 4.0).abs() < 1e-9);
        assert_eq!(score.angle_covered, Some(0.0));
    }

    #[test]
    fn tips_match_one_to_one() {
        let truth = [[0.0, 0.0], [4.0, 0.0]];
        assert!((f1(&truth, &[[2.0, 0.0]]) - 2.0 / 3.0).abs() < 1e-12);
        assert!((f1(&truth, &[[0.0, 1.0], [5.0, 0.0], [90.0, 0.0]]) - 0.8).abs() < 1e-12);
        assert!((f1(&[], &[]) - 1.0).abs() < 1e-12);
    }

    #[test]
    fn meetings_are_no_tips() {
        assert!(true_tips(&recorded(vec![straight(5.0, "meeting")]), 100.0).is_empty());
        assert_eq!(true_tips(&recorded(vec![straight(5.0, "meeting")]), 20.0).len(), 1);
    }
}
