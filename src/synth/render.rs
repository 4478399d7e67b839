//! One frame: scene and filaments at drifted places, through lens, light and camera.
//!
//! Ink is the union of discs of the local width along the true centre-line, anti-aliased at half a pixel and drawn at the frame's own drifted
//! coordinates (never interpolated); it takes a share `contrast` of the local brightness. Then point spread, pixel area, light, dust, noise whose
//! variance is half read-out, half proportional to the light, and rounding. Limit: intensities add up linearly, no saturation but full scale.

use super::canvas::{OVER, Plane};
use super::ceramic::Ceramic;
use super::dice::{Dice, Stream};
use super::imaging::{Light, Psf};
use super::plan::TipShape;
use super::polyline::{distance, dot, minus, plus, scaled};
use super::recorder::{Shot, Speck};
use super::scenario::{Polarity, Scenario};
use super::track::{GrownPoint, Growth, Track, TrackEnd};

/// Samples around the frame so that blur has something to draw on.
const PAD: usize = 12;
/// Newborn tracks start at this share of their full width (`widen_s`).
const NEWBORN: f64 = 0.6;

/// Grey levels of a frame, 0 to 1, row-major `height` × `width`.
#[must_use]
pub fn frame(scenario: &Scenario, ceramic: &Ceramic, growth: &Growth, shot: &Shot, k: usize) -> Vec<f64> {
    let view = View::new(scenario, shot);
    let ink = ink(scenario, growth, &view, k);
    let sign = if scenario.filament == Polarity::Darker { -1.0 } else { 1.0 };
    let contrast = (sign * scenario.imaging.contrast) as f32;
    let scene = Plane::from_fn(view.cols, view.rows, |col, row| {
        let place = view.scene(view.sample(col, row));
        let cover = ink.data[row * view.cols + col];
        // Only ink needs to know how much ceramic there is.
        let inked = if cover > 0.0 { contrast * ceramic.window(place) * cover } else { 0.0 };
        ceramic.brightness(place) * (1.0 + inked)
    });
    let lit = binned(&through_lens(&scene, scenario, shot), scenario);
    exposed(&lit, scenario, shot, k)
}

/// Where the scene lies in a frame.
struct View {
    cols: usize,
    rows: usize,
    centre: [f64; 2],
    drift: [f64; 2],
    cos: f64,
    sin: f64,
}

impl View {
    fn new(scenario: &Scenario, shot: &Shot) -> Self {
        let (sin, cos) = libm::sincos(shot.rotation_deg.to_radians());
        Self {
            cols: scenario.width as usize * OVER + 2 * PAD,
            rows: scenario.height as usize * OVER + 2 * PAD,
            centre: [0.5 * (f64::from(scenario.width) - 1.0), 0.5 * (f64::from(scenario.height) - 1.0)],
            drift: shot.drift,
            cos,
            sin,
        }
    }

    /// Frame coordinates of a sample.
    fn sample(&self, col: usize, row: usize) -> [f64; 2] {
        let at = |i: usize| (i as f64 - PAD as f64 + 0.5) / OVER as f64 - 0.5;
        [at(col), at(row)]
    }

    /// Sample coordinates of a place in the frame.
    fn in_samples(&self, p: [f64; 2]) -> [f64; 2] {
        let to = |v: f64| (v + 0.5) * OVER as f64 - 0.5 + PAD as f64;
        [to(p[0]), to(p[1])]
    }

    /// Scene place shown at a place in the frame.
    fn scene(&self, p: [f64; 2]) -> [f64; 2] {
        let [x, y] = minus(minus(p, self.drift), self.centre);
        plus(self.centre, [self.cos * x - self.sin * y, self.sin * x + self.cos * y])
    }

    /// Frame place at which a scene place is shown.
    fn shown(&self, p: [f64; 2]) -> [f64; 2] {
        let [x, y] = minus(p, self.centre);
        plus(plus(self.centre, [self.cos * x + self.sin * y, self.cos * y - self.sin * x]), self.drift)
    }
}

/// Share of each sample covered by filament, weighted by what is left of its contrast.
fn ink(scenario: &Scenario, growth: &Growth, view: &View, k: usize) -> Plane {
    let mut ink = Plane::filled(view.cols, view.rows, 0.0);
    let time = scenario.time(k);
    for track in &growth.tracks {
        let grown = track.grown(time);
        let front = track.front.get(k).copied().unwrap_or(grown).min(grown);
        let stripped = scenario.growth.stripped_contrast as f32;
        if stripped > 0.0 && front < grown {
            stroke(&mut ink, view, &discs(scenario, track, grown, time), stripped);
        }
        stroke(&mut ink, view, &discs(scenario, track, front, time), 1.0);
    }
    ink
}

/// The track up to arc length `s` with the widths it shows at `time`: (place, half width).
fn discs(scenario: &Scenario, track: &Track, s: f64, time: f64) -> Vec<([f64; 2], f64)> {
    let plan = &scenario.growth;
    let live = track.end == TrackEnd::Free || time < track.stopped_s;
    let width = |p: &GrownPoint, to_end: f64| {
        let age = time - p.time_s;
        let grown =
            if plan.widen_s > 0.0 { 1.0 - (1.0 - NEWBORN) * libm::exp(-age.max(0.0) / plan.widen_s) } else { 1.0 };
        let tapered = plan.tip == TipShape::Tapered && live;
        let taper = if tapered { (1.0 / 3.0 + to_end / (3.0 * p.width) * 2.0 / 3.0).min(1.0) } else { 1.0 };
        p.width * grown * taper
    };
    let points = track.until(s);
    let mut discs = Vec::with_capacity(points.len());
    for (i, p) in points.iter().enumerate() {
        let arc = track.arc.get(i).copied().unwrap_or(s).min(s);
        discs.push((p.place(), 0.5 * width(p, s - arc)));
    }
    discs
}

/// Draws the union of discs swept along `discs`, keeping the larger cover.
fn stroke(ink: &mut Plane, view: &View, discs: &[([f64; 2], f64)], weight: f32) {
    let softness = 1.0 / OVER as f64;
    for pair in discs.windows(2) {
        let (a, b) = (view.shown(pair[0].0), view.shown(pair[1].0));
        let reach = pair[0].1.max(pair[1].1) + softness;
        let (sa, sb) = (view.in_samples(a), view.in_samples(b));
        let span = |axis: usize, n: usize| {
            let r = reach * OVER as f64 + 1.0;
            let low = (sa[axis].min(sb[axis]) - r).max(0.0) as usize;
            let high = (sa[axis].max(sb[axis]) + r + 1.0).clamp(0.0, n as f64) as usize;
            low..high
        };
        let along = minus(b, a);
        let size = dot(along, along).max(1e-12);
        for row in span(1, view.rows) {
            for col in span(0, view.cols) {
                let p = view.sample(col, row);
                let share = (dot(minus(p, a), along) / size).clamp(0.0, 1.0);
                let half_width = pair[0].1 + share * (pair[1].1 - pair[0].1);
                let away = distance(p, plus(a, scaled(along, share)));
                let cover = weight * (0.5 + (half_width - away) / softness).clamp(0.0, 1.0) as f32;
                let sample = &mut ink.data[row * view.cols + col];
                *sample = sample.max(cover);
            }
        }
    }
}

/// Point spread and defocus.
fn through_lens(scene: &Plane, scenario: &Scenario, shot: &Shot) -> Plane {
    let imaging = &scenario.imaging;
    let sigma = (imaging.psf_px * imaging.psf_px + shot.defocus_px * shot.defocus_px).sqrt() * OVER as f64;
    match imaging.psf {
        Psf::Gaussian => scene.gaussian(sigma),
        // A disc of radius r has variance r²/4 along each axis.
        Psf::Disc => scene.disc(2.0 * sigma),
        Psf::Halo => {
            let (core, halo) = (scene.gaussian(sigma), scene.gaussian(3.0 * sigma));
            Plane::from_fn(scene.cols, scene.rows, |col, row| {
                let i = row * scene.cols + col;
                0.85 * core.data[i] + 0.15 * halo.data[i]
            })
        }
    }
}

/// Mean over each pixel's area.
fn binned(plane: &Plane, scenario: &Scenario) -> Plane {
    Plane::from_fn(scenario.width as usize, scenario.height as usize, |col, row| {
        let mut sum = 0.0;
        for j in 0..OVER {
            for i in 0..OVER {
                sum += plane.data[(PAD + row * OVER + j) * plane.cols + PAD + col * OVER + i];
            }
        }
        sum / (OVER * OVER) as f32
    })
}

/// Light, dust, camera: grey levels 0 to 1.
fn exposed(lit: &Plane, scenario: &Scenario, shot: &Shot, k: usize) -> Vec<f64> {
    let imaging = &scenario.imaging;
    let mut noise = Dice::new(scenario.seed, Stream::Noise, k + 1);
    let mut pattern = Dice::new(scenario.seed, Stream::Noise, 0);
    let deviation = imaging.noise / 255.0;
    lit.data
        .iter()
        .enumerate()
        .map(|(i, &value)| {
            let p = [(i % lit.cols) as f64, (i / lit.cols) as f64];
            let light = light(scenario, shot, p) * shot.dust.iter().map(|s| shadow(s, p)).product::<f64>();
            let level = imaging.level * f64::from(value) * light;
            let spread = deviation * (0.5 + 0.5 * level / imaging.level).max(0.0).sqrt();
            level + spread * noise.normal() + imaging.camera_pattern / 255.0 * pattern.normal()
        })
        .collect()
}

/// Light at a place of the frame, relative.
fn light(scenario: &Scenario, shot: &Shot, p: [f64; 2]) -> f64 {
    let half = [0.5 * f64::from(scenario.width), 0.5 * f64::from(scenario.height)];
    let (u, v) = (p[0] / half[0] - 1.0, p[1] / half[1] - 1.0);
    let still = match scenario.imaging.light {
        Light::Tilt => 0.8 * u - 0.6 * v,
        Light::Vignette => 0.5 - 0.75 * (u * u + v * v),
        Light::Spot => 1.5 * libm::exp(-1.5 * ((u - 0.3) * (u - 0.3) + (v + 0.2) * (v + 0.2))) - 0.7,
    };
    shot.gain * (1.0 + scenario.imaging.uneven * still) * (1.0 + shot.tilt[0] * u + shot.tilt[1] * v)
}

/// Share of light that passes a speck at a place of the frame.
fn shadow(speck: &Speck, p: [f64; 2]) -> f64 {
    let away = distance(p, speck.place);
    if away > speck.radius + 2.0 { 1.0 } else { 1.0 - speck.loss * (0.5 + (speck.radius - away) / 3.0).clamp(0.0, 1.0) }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn still() -> Shot {
        Shot {
            drift: [0.0, 0.0],
            rotation_deg: 0.0,
            gain: 1.0,
            tilt: [0.0, 0.0],
            defocus_px: 0.0,
            dust: vec![],
            loss: None,
        }
    }

    fn plain() -> Scenario {
        let mut scenario = Scenario { width: 120, height: 90, ..Scenario::default() };
        scenario.imaging.noise = 0.0;
        scenario.imaging.uneven = 0.0;
        scenario.imaging.pores = 0;
        scenario.imaging.texture_contrast = 0.0;
        scenario.settle().unwrap()
    }

    /// One straight track of `width` at height y from x = 20 to 70, grown at once.
    fn bar(y: f64, width: f64) -> Growth {
        let points: Vec<GrownPoint> =
            (0..=50).map(|i| GrownPoint { x: 20.0 + f64::from(i), y, time_s: 60.0, width }).collect();
        let arc = (0..=50).map(f64::from).collect();
        let track =
            Track { filament: 1, parent: None, points, arc, end: TrackEnd::Free, front: vec![], stopped_s: 1e9 };
        Growth { tracks: vec![track], contact: None }
    }

    /// Lost light across the bar at column x, in px of full contrast, and its centre of gravity.
    fn profile(scenario: &Scenario, growth: &Growth, shot: &Shot, x: usize) -> (f64, f64) {
        let ceramic = Ceramic::draw(scenario, 10.0);
        let picture = frame(scenario, &ceramic, growth, shot, 20);
        let (mut sum, mut moment) = (0.0, 0.0);
        for row in 10..80 {
            let loss = (1.0 - picture[row * 120 + x] / scenario.imaging.level) / scenario.imaging.contrast;
            sum += loss;
            moment += loss * row as f64;
        }
        (sum, moment / sum)
    }

    #[test]
    fn ink_has_the_width_and_place_of_the_truth_at_any_drift() {
        let scenario = plain();
        for (y, width, drift) in [(45.0, 2.0, [0.0, 0.0]), (44.3, 3.5, [0.4, -0.7]), (40.9, 6.0, [-2.6, 3.25])] {
            let shot = Shot { drift, ..still() };
            let (lost, centre) = profile(&scenario, &bar(y, width), &shot, 45);
            assert!((lost - width).abs() < 0.03, "width {width}: {lost}");
            assert!((centre - (y + drift[1])).abs() < 0.02, "at {y} drifted by {drift:?}: {centre}");
        }
    }

    #[test]
    fn a_shifted_frame_is_the_shifted_scene() {
        let mut scenario = plain();
        scenario.imaging.texture_contrast = 0.1;
        let ceramic = Ceramic::draw(&scenario, 10.0);
        let nothing = Growth { tracks: vec![], contact: None };
        let here = frame(&scenario, &ceramic, &nothing, &still(), 0);
        let there = frame(&scenario, &ceramic, &nothing, &Shot { drift: [3.0, -2.0], ..still() }, 0);
        for row in 20..70 {
            for col in 20..100 {
                assert!((here[row * 120 + col] - there[(row - 2) * 120 + col + 3]).abs() < 1e-6);
            }
        }
    }

    #[test]
    fn rotation_is_anticlockwise_and_goes_back() {
        let view = View::new(&plain(), &Shot { rotation_deg: 10.0, drift: [1.0, 2.0], ..still() });
        let p = [80.0, 30.0];
        assert!(distance(view.scene(view.shown(p)), p) < 1e-9);
        let right = plus(view.centre, [10.0, 0.0]);
        assert!(
            view.shown(right)[1] < view.shown(view.centre)[1],
            "anticlockwise as displayed lifts what lies to the right"
        );
    }
}
