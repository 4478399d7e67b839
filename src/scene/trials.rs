//! Trials of the whole scene stage on generated films with known drift, light, focus and metal.
//! The generator draws on a canvas of [`FINE`] × finer pixels and integrates over each camera pixel, so that it shares
//! no interpolation with the code under test.

use ndarray::Array2;
use rand::{Rng, RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use rand_distr::StandardNormal;

use super::plane::{blur, rows_mut};
use super::{Corrected, Scene, SceneBuilder, SceneSettings};
use rayon::prelude::*;

/// Canvas pixels per camera pixel.
const FINE: usize = 4;
/// Camera pixels around the view, so that drift stays on the canvas.
const MARGIN: usize = 44;

#[derive(Debug, Clone, Copy, PartialEq)]
enum Texture {
    Grain,
    Paper,
    /// Straight electrode edges and slow gradients only.
    Edges,
}

#[derive(Debug, Clone, Copy)]
struct Grade {
    texture: Texture,
    contrast: f32,
    noise: f32,
    drift: f64,
    jumps: usize,
    focus: f64,
    flicker: f32,
    light: f64,
    dust: bool,
    size: (usize, usize),
    frames: usize,
    bare: usize,
}

const CLEAR: Grade = Grade {
    texture: Texture::Paper,
    contrast: 0.35,
    noise: 1.0,
    drift: 0.15,
    jumps: 0,
    focus: 0.0,
    flicker: 0.01,
    light: 0.01,
    dust: false,
    size: (360, 480),
    frames: 14,
    bare: 6,
};
const TYPICAL: Grade = Grade {
    texture: Texture::Grain,
    contrast: 0.18,
    noise: 2.6,
    drift: 0.3,
    jumps: 0,
    focus: 0.15,
    flicker: 0.05,
    light: 0.03,
    ..CLEAR
};
const HARD: Grade =
    Grade { contrast: 0.09, noise: 7.0, drift: 0.4, jumps: 2, focus: 0.4, flicker: 0.1, dust: true, ..TYPICAL };

struct Film {
    frames: Vec<Array2<f32>>,
    drift: Vec<[f64; 2]>,
    /// Frame of arrival per pixel of the first frame; `usize::MAX` where none comes within 6 px.
    near_metal: Array2<usize>,
    /// Middles of a metal line 3 px wide, (row, col), and their arrivals.
    core: Vec<(usize, usize, usize)>,
    /// What a perfect correction would leave on those middles, mean over frames.
    ideal_depth: f64,
}

fn normal(rng: &mut impl Rng) -> f64 {
    rng.sample(StandardNormal)
}

fn canvas(grade: &Grade, rng: &mut ChaCha8Rng) -> Array2<f32> {
    let (h, w) = ((grade.size.0 + 2 * MARGIN) * FINE, (grade.size.1 + 2 * MARGIN) * FINE);
    let mut seeds = ChaCha8Rng::seed_from_u64(rng.random());
    let amplitude = match grade.texture {
        Texture::Grain => 0.012,
        Texture::Paper => 0.05,
        Texture::Edges => 0.0,
    };
    let white = Array2::from_shape_simple_fn((h / 2, w / 2), || normal(&mut seeds) as f32);
    let grainy = blur(&white, 1.4);
    let sites: Vec<(f32, f32)> =
        (0..(h * w) / 40_000).map(|_| (seeds.random_range(0.0..h as f32), seeds.random_range(0.0..w as f32))).collect();
    let mut out = Array2::<f32>::zeros((h, w));
    let (left, right) = ((MARGIN + 40) * FINE, (MARGIN + grade.size.1 - 40) * FINE);
    rows_mut(&mut out).for_each(|(y, row)| {
        let near: Vec<(f32, f32)> =
            sites.iter().filter(|s| (s.0 - y as f32).abs() < 900.0).map(|s| ((s.0 - y as f32).powi(2), s.1)).collect();
        for (x, value) in row.iter_mut().enumerate() {
            let mut level = 128.0 * (1.0 + amplitude * 5.0 * grainy[[(y / 2).min(h / 2 - 1), (x / 2).min(w / 2 - 1)]]);
            if grade.texture == Texture::Grain {
                let (mut first, mut second) = (f32::INFINITY, f32::INFINITY);
                for &(dy2, sx) in &near {
                    let d2 = dy2 + (sx - x as f32).powi(2);
                    if d2 < first {
                        second = first;
                        first = d2;
                    } else if d2 < second {
                        second = d2;
                    }
                }
                let distance = second.sqrt() - first.sqrt();
                level *= 1.0 - 0.12 * (-(distance / 8.0).powi(2)).exp();
            }
            level *= 1.0 + 0.1 * (y as f32 / h as f32 - 0.5) + 0.06 * (6.0 * x as f32 / w as f32).sin();
            let step = |edge: usize| 1.0 / (1.0 + (-(x as f32 - edge as f32) / 5.0).exp());
            *value = level * (0.55 + 0.45 * step(left) * (1.0 - step(right)));
        }
    });
    out
}

/// Arrival (frame, fractional) of metal on the canvas: wandering lines from the plating edge.
fn metal(grade: &Grade, rng: &mut ChaCha8Rng, shape: (usize, usize)) -> (Array2<f32>, Vec<[f64; 3]>) {
    let mut arrival = Array2::from_elem(shape, f32::INFINITY);
    let mut middles = Vec::new();
    let lines = 6;
    for line in 0..lines {
        let width = if line == 0 { 3.0 } else { rng.random_range(2.0..9.0) };
        let mut y = (MARGIN as f64 + rng.random_range(0.1..0.9) * grade.size.0 as f64) * FINE as f64;
        let mut x = ((MARGIN + 38) * FINE) as f64;
        let mut heading = 0.0_f64;
        let speed = rng.random_range(0.6..1.0) * (grade.size.1 as f64 - 80.0) / (grade.frames - grade.bare) as f64;
        let mut time = grade.bare as f64;
        while time < grade.frames as f64 {
            heading += 0.02 * normal(rng) - 0.002 * heading;
            x += heading.cos();
            y += heading.sin();
            time += 1.0 / (speed * FINE as f64);
            let radius = width / 2.0 * FINE as f64;
            let reach = radius.ceil() as i64 + 1;
            for oy in -reach..=reach {
                for ox in -reach..=reach {
                    let (px, py) = ((x.round() as i64 + ox) as f64, (y.round() as i64 + oy) as f64);
                    let inside = (px - x).hypot(py - y) <= radius;
                    if inside && px >= 0.0 && py >= 0.0 && (px as usize) < shape.1 && (py as usize) < shape.0 {
                        let slot = &mut arrival[[py as usize, px as usize]];
                        *slot = slot.min(time as f32);
                    }
                }
            }
            if line == 0 {
                middles.push([x, y, time]);
            }
        }
    }
    (arrival, middles)
}

fn film(grade: &Grade, seed: u64) -> Film {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let bare = canvas(grade, &mut rng);
    let (arrival, middles) = metal(grade, &mut rng, bare.dim());
    let (mut drift, mut at, mut trend) = (Vec::new(), [0.0_f64; 2], [0.0_f64; 2]);
    let jumps: Vec<usize> = (0..grade.jumps).map(|_| rng.random_range(1..grade.frames)).collect();
    let origin: [f64; 2] = [rng.random(), rng.random()];
    let (mut light, mut focus) = ([0.0_f64; 6], 0.6_f64);
    let mut dust = [rng.random_range(50.0..400.0), rng.random_range(50.0..300.0_f64)];
    let mut frames = Vec::new();
    let mut looks = Vec::new();
    for k in 0..grade.frames {
        if k > 0 {
            for i in 0..2 {
                trend[i] += 0.3 * grade.drift * normal(&mut rng) - 0.1 * trend[i];
                at[i] += trend[i] + grade.drift * normal(&mut rng);
                at[i] += jumps.iter().filter(|&&j| j == k).map(|_| rng.random_range(-25.0..25.0)).sum::<f64>();
                at[i] = at[i].clamp(-38.0, 38.0);
            }
            light.iter_mut().for_each(|l| *l = 0.8 * *l + grade.light * normal(&mut rng));
            focus = (focus + grade.focus * normal(&mut rng)).clamp(0.5, 1.6);
        }
        drift.push(at);
        dust = [dust[0] + 4.0 * normal(&mut rng), dust[1] + 4.0 * normal(&mut rng)];
        let gain = 1.0 + grade.flicker * rng.random_range(-1.0..1.0_f32);
        let look = Look { at, origin, light, gain, dust: grade.dust.then_some(dust), focus };
        frames.push(shoot(grade, &bare, &arrival, k, &look, rng.random()));
        looks.push(look);
    }
    let from_canvas = |p: f64, axis: usize| (p + 0.5) / FINE as f64 - 0.5 - MARGIN as f64 - origin[axis];
    let core = middles
        .iter()
        .map(|m| (from_canvas(m[1], 1).round() as usize, from_canvas(m[0], 0).round() as usize, m[2].ceil() as usize))
        .filter(|&(y, x, _)| y < grade.size.0 && x < grade.size.1)
        .collect::<Vec<_>>();
    let ideal_depth = ideal_depth(grade, &bare, &arrival, &looks, &core);
    Film { ideal_depth, frames, drift, near_metal: near(&arrival, grade, origin), core }
}

/// Depth of the 3-px line in noiseless frames against the same frames without metal.
fn ideal_depth(
    grade: &Grade,
    bare: &Array2<f32>,
    arrival: &Array2<f32>,
    looks: &[Look],
    core: &[(usize, usize, usize)],
) -> f64 {
    let never = Array2::from_elem(arrival.dim(), f32::INFINITY);
    let (mut sum, mut count) = (0.0, 0.0);
    for (k, look) in looks.iter().enumerate().skip(grade.bare) {
        let still = Look { at: [0.0; 2], light: [0.0; 6], dust: None, ..*look };
        let clean = Grade { noise: 0.0, ..*grade };
        let with = shoot(&clean, bare, arrival, k, &still, 0);
        let without = shoot(&clean, bare, &never, k, &still, 0);
        for &(y, x, _) in core.iter().filter(|c| c.2 < k) {
            sum += f64::from(1.0 - with[[y, x]] / without[[y, x]]);
            count += 1.0;
        }
    }
    sum / count
}

/// Arrival of the earliest metal within 6 px.
fn near(arrival: &Array2<f32>, grade: &Grade, origin: [f64; 2]) -> Array2<usize> {
    let mut out = Array2::from_elem(grade.size, usize::MAX);
    rows_mut(&mut out).for_each(|(y, row)| {
        for (x, value) in row.iter_mut().enumerate() {
            let place = |p: usize, axis: usize| (p as f64 + MARGIN as f64 + origin[axis]) * FINE as f64;
            let (cx, cy) = (place(x, 0) as i64, place(y, 1) as i64);
            for oy in (-24..=24).step_by(3) {
                for ox in (-24..=24).step_by(3) {
                    let time = arrival[[(cy + oy) as usize, (cx + ox) as usize]];
                    if time.is_finite() {
                        *value = (*value).min(time.floor() as usize);
                    }
                }
            }
        }
    });
    out
}

#[derive(Debug, Clone, Copy)]
struct Look {
    at: [f64; 2],
    origin: [f64; 2],
    light: [f64; 6],
    gain: f32,
    dust: Option<[f64; 2]>,
    focus: f64,
}

fn shoot(grade: &Grade, bare: &Array2<f32>, arrival: &Array2<f32>, k: usize, look: &Look, seed: u64) -> Array2<f32> {
    let mut out = Array2::<f32>::zeros(grade.size);
    let fine = |y: usize, x: usize| bare[[y, x]] * if arrival[[y, x]] <= k as f32 { 1.0 - grade.contrast } else { 1.0 };
    rows_mut(&mut out).for_each(|(y, row)| {
        for (x, value) in row.iter_mut().enumerate() {
            // Top left corner of the camera pixel on the canvas.
            let left = (x as f64 - look.at[0] + look.origin[0] + MARGIN as f64) * FINE as f64;
            let top = (y as f64 - look.at[1] + look.origin[1] + MARGIN as f64) * FINE as f64;
            let cover = |start: f64, i: usize| {
                let cell = start.floor() + i as f64;
                ((cell + 1.0).min(start + FINE as f64) - cell.max(start)).max(0.0) as f32
            };
            let mut sum = 0.0;
            for j in 0..=FINE {
                let wy = cover(top, j);
                for i in 0..=FINE {
                    sum += wy * cover(left, i) * fine(top.floor() as usize + j, left.floor() as usize + i);
                }
            }
            *value = sum / (FINE * FINE) as f32;
        }
    });
    let mut out = blur(&out, look.focus);
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let (h, w) = grade.size;
    for ((y, x), value) in out.indexed_iter_mut() {
        let (u, v) = (2.0 * x as f64 / w as f64 - 1.0, 2.0 * y as f64 / h as f64 - 1.0);
        let terms = [1.0, u, v, u * u, u * v, v * v];
        let slow = 1.0 + terms.iter().zip(look.light).map(|(t, l)| t * l).sum::<f64>();
        let mut level = *value * look.gain * slow as f32;
        if let Some(dust) = look.dust {
            let distance = (x as f64 - dust[0]).hypot(y as f64 - dust[1]);
            level *= 1.0 - 0.2 / (1.0 + ((distance - 6.0) / 0.8).exp()) as f32;
        }
        let sd = grade.noise * (0.4 + 0.6 * level / 128.0).sqrt();
        let draw: f32 = rng.sample(StandardNormal);
        *value = (level + sd * draw).round().clamp(0.0, 255.0);
    }
    out
}

/// A film after correction.
struct Trial {
    film: Film,
    scene: Scene,
    corrected: Vec<Corrected>,
}

impl Trial {
    /// Corrects a film frame by frame, each told of the metal there was a frame ago.
    fn run(grade: &Grade, seed: u64) -> Self {
        let film = film(grade, seed);
        let mut builder = SceneBuilder::new(SceneSettings { darker: true });
        film.frames[..grade.bare].iter().for_each(|f| builder.push(f));
        let scene = builder.finish().unwrap();
        let mut guess = [0.0; 2];
        let mut corrected = Vec::new();
        for (k, frame) in film.frames.iter().enumerate() {
            let metal = film.near_metal.mapv(|arrival| arrival < k);
            let one = scene.correct(frame, Some(&metal), guess);
            assert_eq!(one.verdict, None, "frame {k}");
            guess = one.drift_px;
            corrected.push(one);
        }
        Self { film, scene, corrected }
    }

    /// Root mean square of the drift's error along one axis (0 x, 1 y), px.
    fn drift_rms(&self, axis: usize) -> f64 {
        let pairs = self.corrected.iter().zip(&self.film.drift);
        let sum: f64 = pairs.map(|(c, truth)| (c.drift_px[axis] - truth[axis]).powi(2)).sum();
        (sum / self.corrected.len() as f64).sqrt()
    }

    /// Mean and standard deviation of residual / noise / noise factor away from metal.
    fn bare_ground(&self) -> (f64, f64) {
        let (mut sum, mut squares, mut count) = (0.0, 0.0, 0.0);
        for (k, one) in self.corrected.iter().enumerate().skip(6) {
            for ((at, &residual), &noise) in one.residual.indexed_iter().zip(self.scene.noise()) {
                let z = f64::from(residual / noise / one.noise_factor);
                // Dust is no part of the ground.
                if self.film.near_metal[at] > k && z.abs() < 5.0 {
                    sum += z;
                    squares += z * z;
                    count += 1.0;
                }
            }
        }
        (sum / count, (squares / count).sqrt())
    }

    /// Mean residual on the middle of the 3-px line over what a perfect correction leaves there.
    fn line_kept(&self) -> f64 {
        let (mut sum, mut count) = (0.0, 0.0);
        for (k, one) in self.corrected.iter().enumerate().skip(6) {
            for &(y, x, arrival) in &self.film.core {
                let value = one.residual[[y, x]];
                if arrival < k && value.is_finite() {
                    sum += f64::from(value);
                    count += 1.0;
                }
            }
        }
        sum / count / self.film.ideal_depth
    }
}

fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

/// Drift (RMS over both axes, px), share of the line lost or gained, and evenness of the ground: medians over three films.
fn holds(grade: &Grade, drift_px: f64, line: f64) {
    let trials: Vec<Trial> = (1..=3).map(|seed| Trial::run(grade, seed)).collect();
    let drift = median(trials.iter().map(|t| t.drift_rms(0).hypot(t.drift_rms(1))).collect());
    let kept = median(trials.iter().map(Trial::line_kept).collect());
    println!("drift {drift:.4} px, line kept {kept:.3}, ground {:.3?}", trials[0].bare_ground());
    assert!(drift < drift_px, "drift {drift}");
    assert!((kept - 1.0).abs() < line, "line kept {kept}");
    for trial in &trials {
        let (mean, spread) = trial.bare_ground();
        assert!(mean.abs() < 0.1 && (0.75..1.15).contains(&spread), "ground {mean} {spread}");
    }
}

#[test]
fn clear_films() {
    holds(&CLEAR, 0.06, 0.03);
}

#[test]
fn typical_films() {
    holds(&TYPICAL, 0.05, 0.03);
}

#[test]
fn hard_films() {
    holds(&HARD, 0.10, 0.05);
}

#[test]
fn hard_films_on_fine_texture() {
    holds(&Grade { texture: Texture::Paper, ..HARD }, 0.10, 0.05);
}

#[test]
fn along_straight_edges_the_guess_is_kept() {
    let trial = Trial::run(&Grade { texture: Texture::Edges, ..TYPICAL }, 2);
    assert!(trial.drift_rms(0) < 0.05, "across {}", trial.drift_rms(0));
    for one in &trial.corrected[1..] {
        assert!(one.drift_px[1].abs() < 0.5 && one.u_drift_px[0] > 1.0, "{:?} {:?}", one.drift_px, one.u_drift_px);
    }
}

/// A frame of another cell, lying on its side.
fn another(grade: &Grade) -> Array2<f32> {
    let size = (grade.size.1, grade.size.0);
    let other = film(&Grade { size: (size.0.max(size.1), size.0.max(size.1)), frames: 7, ..*grade }, 99);
    Array2::from_shape_fn(grade.size, |(y, x)| other.frames[0][[x, y]])
}

#[test]
fn another_picture_is_set_aside_and_a_blurred_one_is_not() {
    let film = film(&TYPICAL, 4);
    let mut builder = SceneBuilder::new(SceneSettings { darker: true });
    film.frames[..6].iter().for_each(|f| builder.push(f));
    let scene = builder.finish().unwrap();
    let other = another(&TYPICAL);
    let verdict = scene.correct(&other, None, [0.0; 2]).verdict;
    assert!(verdict.is_some_and(|reason| reason.contains("does not show the scene")));
    let blurred = scene.correct(&blur(&film.frames[6], 1.5), None, [0.0; 2]);
    assert_eq!(blurred.verdict, None);
    assert!(blurred.sharpness < 0.8, "{}", blurred.sharpness);
    let still = scene.correct(&Array2::from_elem(TYPICAL.size, 90.0), None, [3.0, 1.0]);
    assert!(still.verdict.is_some_and(|reason| reason.starts_with("blank")));
    assert!(still.residual.iter().all(|r| r.is_nan()));
}

#[test]
fn a_turn_of_the_stage_is_measured_and_taken_out() {
    let film = film(&CLEAR, 5);
    let mut builder = SceneBuilder::new(SceneSettings { darker: true });
    film.frames[..6].iter().for_each(|f| builder.push(f));
    let scene = builder.finish().unwrap();
    let turned = |degrees: f64| {
        let back = super::resample::Motion { shift: [0.0; 2], turn: -degrees.to_radians() };
        super::resample::Interpolator::new()
            .resample(&film.frames[6], &back)
            .mapv(|v| if v.is_nan() { 100.0 } else { v })
    };
    let found = scene.correct(&turned(0.4), None, [0.0; 2]);
    assert!((found.rotation_deg - 0.4).abs() < 0.01, "{}", found.rotation_deg);
    assert!(found.noise_factor < 1.3, "{}", found.noise_factor);
    assert!(scene.correct(&film.frames[7], None, [0.0; 2]).rotation_deg.abs() < 1e-9);
}

#[test]
fn results_do_not_depend_on_the_number_of_threads() {
    let film = film(&Grade { frames: 8, ..HARD }, 6);
    let on = |threads: usize| {
        let pool = rayon::ThreadPoolBuilder::new().num_threads(threads).build().unwrap();
        pool.install(|| {
            let mut builder = SceneBuilder::new(SceneSettings { darker: true });
            film.frames[..6].iter().for_each(|f| builder.push(f));
            let scene = builder.finish().unwrap();
            let one = scene.correct(&film.frames[7], None, [0.0; 2]);
            let bits: Vec<u32> = one.residual.iter().chain(scene.noise()).map(|v| v.to_bits()).collect();
            (bits, one.drift_px.map(f64::to_bits))
        })
    };
    assert!(on(1) == on(3));
}

#[test]
fn without_bare_frames_lines_stand_out_from_the_frames_own_background() {
    let film = film(&TYPICAL, 7);
    let last = film.frames.len() - 1;
    let inverted = |frame: &Array2<f32>| frame.mapv(|v| 255.0 - v);
    for darker in [true, false] {
        let frame = |k: usize| {
            if darker { film.frames[k].clone() } else { inverted(&film.frames[k]) }
        };
        let scene = Scene::without_bare(&frame(0), SceneSettings { darker });
        let one = scene.correct(&frame(last), None, [0.0; 2]);
        assert_eq!(one.verdict, None);
        let error = (one.drift_px[0] - film.drift[last][0]).hypot(one.drift_px[1] - film.drift[last][1]);
        assert!(error < 0.1, "{error}");
        let on_line = film
            .core
            .iter()
            .filter(|c| c.2 < last)
            .map(|&(y, x, _)| f64::from(one.residual[[y, x]] / scene.noise()[[y, x]]));
        assert!(median(on_line.filter(|z| z.is_finite()).collect()) > 3.0);
    }
}
