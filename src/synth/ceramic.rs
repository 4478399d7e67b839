//! The still scene: ceramic with grains, clouds, polishing lines, pores and scratches between two electrodes.
//! Method: patterns of `texture` multiplied together, electrodes laid over them with a soft, rough boundary.
//! Values are brightness relative to the clean ceramic (1). Limit: two-dimensional; nothing refracts.

use super::canvas::{OVER, Plane};
use super::dice::{Dice, Stream};
use super::imaging::Texture;
use super::polyline::{Polyline, dot, minus, plus, scaled, unit};
use super::scenario::Scenario;
use super::texture::{Grains, Noise, line};

/// The still scene on an oversampled plane, with room around the picture for drift.
#[derive(Debug, Clone)]
pub struct Ceramic {
    /// Brightness, ceramic and electrodes.
    brightness: Plane,
    /// Share of ceramic (1) as against electrode (0).
    window: Plane,
    margin: f64,
}

impl Ceramic {
    /// Draws the scene of a settled scenario, with `margin` px around the picture.
    #[must_use]
    pub fn draw(scenario: &Scenario, margin: f64) -> Self {
        let margin = margin.ceil();
        let across = |n: u32| (f64::from(n) + 2.0 * margin) as usize * OVER;
        let (cols, rows) = (across(scenario.width), across(scenario.height));
        let place =
            move |col: usize, row: usize| [col as f64 / OVER as f64 - margin, row as f64 / OVER as f64 - margin];
        let window = electrodes(scenario, cols, rows, &place);
        let body = Body::draw(scenario, margin);
        let imaging = &scenario.imaging;
        let (plating, far) = (imaging.plating_level as f32, imaging.far_level as f32);
        let mut ceramic = Plane::from_fn(cols, rows, |col, row| body.at(place(col, row)) as f32);
        body.mark(&mut ceramic, margin);
        let brightness = Plane::from_fn(cols, rows, |col, row| {
            let i = row * cols + col;
            let (p, f) = (window.0.data[i], window.1.data[i]);
            let metal = 1.0 + 0.4 * (ceramic.data[i] - 1.0);
            ceramic.data[i] * (1.0 - p) * (1.0 - f) + metal * (plating * p + far * f * (1.0 - p))
        });
        let window = Plane::from_fn(cols, rows, |col, row| {
            let i = row * cols + col;
            (1.0 - window.0.data[i]) * (1.0 - window.1.data[i])
        });
        Self { brightness, window, margin }
    }

    /// Brightness at a place of the picture (px of the first usable frame).
    #[must_use]
    pub fn brightness(&self, p: [f64; 2]) -> f32 {
        let [x, y] = self.in_samples(p);
        self.brightness.cubic(x, y)
    }

    /// Share of ceramic at a place of the picture, 0 (electrode) to 1.
    #[must_use]
    pub fn window(&self, p: [f64; 2]) -> f32 {
        let [x, y] = self.in_samples(p);
        self.window.cubic(x, y).clamp(0.0, 1.0)
    }

    fn in_samples(&self, p: [f64; 2]) -> [f64; 2] {
        p.map(|v| (v + self.margin) * OVER as f64)
    }
}

/// Share of plating and of far electrode on every sample.
fn electrodes(
    scenario: &Scenario,
    cols: usize,
    rows: usize,
    place: &(impl Fn(usize, usize) -> [f64; 2] + Sync),
) -> (Plane, Plane) {
    let (Some(plating), Some(far)) = (Polyline::new(&scenario.plating_edge), Polyline::new(&scenario.far_edge)) else {
        return (Plane::filled(cols, rows, 0.0), Plane::filled(cols, rows, 0.0));
    };
    let imaging = &scenario.imaging;
    let cover = |edge: &Polyline, inner: f64, index: usize| {
        let mut dice = Dice::new(scenario.seed, Stream::Ceramic, 10 + index);
        let rough = Waves::draw(&mut dice, imaging.edge_rough_px);
        Plane::from_fn(cols, rows, |col, row| {
            let p = place(col, row);
            let near = edge.nearest(p, true);
            let depth = near.distance * near.side * inner + rough.at(dot(near.point, near.tangent));
            (0.5 * libm::erfc(depth / (std::f64::consts::SQRT_2 * imaging.edge_blur_px.max(0.2)))) as f32
        })
    };
    (cover(&plating, plating.side_of(&far), 0), cover(&far, far.side_of(&plating), 1))
}

/// A rough line: a few sines of random phase and length.
struct Waves(Vec<[f64; 3]>);

impl Waves {
    fn draw(dice: &mut Dice, deviation: f64) -> Self {
        const COUNT: usize = 6;
        let size = deviation * (2.0 / COUNT as f64).sqrt();
        Self(
            (0..COUNT)
                .map(|_| [size, 1.0 / dice.log_within([2.0, 25.0]), dice.between(0.0, std::f64::consts::TAU)])
                .collect(),
        )
    }

    fn at(&self, s: f64) -> f64 {
        self.0.iter().map(|[size, k, phase]| size * libm::sin(k * s + phase)).sum()
    }
}

/// A pore: a round dark spot.
struct Pore {
    place: [f64; 2],
    radius: f64,
    loss: f64,
}

/// A scratch: a straight thin line.
struct Scratch {
    from: [f64; 2],
    to: [f64; 2],
    half_width: f64,
    gain: f64,
}

/// The ceramic's pattern.
struct Body {
    texture: Texture,
    strength: f64,
    grains: Grains,
    cloud: Noise,
    fine: Noise,
    brush: [f64; 2],
    pores: Vec<Pore>,
    scratches: Vec<Scratch>,
}

impl Body {
    fn draw(scenario: &Scenario, margin: f64) -> Self {
        let imaging = &scenario.imaging;
        let mut dice = Dice::new(scenario.seed, Stream::Ceramic, 0);
        let (w, h) = (f64::from(scenario.width), f64::from(scenario.height));
        let anywhere = |dice: &mut Dice| [dice.between(-margin, w + margin), dice.between(-margin, h + margin)];
        let pores = (0..imaging.pores)
            .map(|_| Pore {
                place: anywhere(&mut dice),
                radius: dice.log_within([0.6, 3.5]),
                loss: dice.between(0.08, 0.4),
            })
            .collect();
        let scratches = (0..imaging.scratches)
            .map(|_| {
                let (from, along) = (anywhere(&mut dice), dice.between(0.0, 180.0));
                let to = plus(from, scaled(unit(along), dice.log_within([40.0, 300.0])));
                let sign = if dice.chance(0.5) { 1.0 } else { -1.0 };
                Scratch { from, to, half_width: dice.between(0.35, 0.8), gain: sign * dice.between(0.03, 0.12) }
            })
            .collect();
        Self {
            texture: imaging.texture,
            strength: imaging.texture_contrast,
            grains: Grains::draw(&mut dice, imaging.grain_px.max(4.0), [-margin, -margin], [w + margin, h + margin]),
            cloud: Noise::draw(&mut dice),
            fine: Noise::draw(&mut dice),
            brush: unit(dice.between(0.0, 180.0)),
            pores,
            scratches,
        }
    }

    /// Brightness of the pattern at `p`, without pores and scratches.
    fn at(&self, p: [f64; 2]) -> f64 {
        let roughness = 0.25 * self.fine.at(scaled(p, 1.0 / 1.6)) + 0.25 * self.fine.at(scaled(p, 1.0 / 4.0));
        let pattern = match self.texture {
            Texture::Plain => 0.0,
            Texture::Cloud => {
                let octave = |size: f64| self.cloud.at(scaled(p, 1.0 / (size * self.grains.size)));
                octave(1.6) + 0.6 * octave(0.7) + 0.4 * octave(0.3)
            }
            Texture::Brushed => {
                let (along, across) = (dot(p, self.brush), dot(p, [-self.brush[1], self.brush[0]]));
                self.cloud.at([along / 90.0, across / 1.8]) + 0.6 * self.cloud.at([along / 40.0 + 50.0, across / 5.0])
            }
            Texture::Grains => {
                let grain = self.grains.at(p);
                0.25 * grain.tone - 1.6 * grain.seam * line(grain.to_border, 0.8)
            }
            Texture::Tones => {
                let grain = self.grains.at(p);
                0.9 * grain.tone - 0.4 * grain.seam * line(grain.to_border, 0.7)
            }
        };
        (1.0 + self.strength * (pattern + roughness)).max(0.05)
    }

    /// Puts pores and scratches on a plane, each only where it is.
    fn mark(&self, plane: &mut Plane, margin: f64) {
        for pore in &self.pores {
            mark_within(plane, margin, pore.place, pore.place, pore.radius + 1.5, |p| {
                let away = dot(minus(p, pore.place), minus(p, pore.place)).sqrt();
                1.0 - pore.loss * (0.5 + (pore.radius - away) / 1.5).clamp(0.0, 1.0)
            });
        }
        for scratch in &self.scratches {
            let Some(edge) = Polyline::new(&[scratch.from, scratch.to]) else {
                continue;
            };
            mark_within(plane, margin, scratch.from, scratch.to, 3.0, |p| {
                1.0 + scratch.gain * line(edge.nearest(p, false).distance, scratch.half_width)
            });
        }
    }
}

/// Multiplies the samples in a box around two places by `factor`.
fn mark_within(plane: &mut Plane, margin: f64, a: [f64; 2], b: [f64; 2], reach: f64, factor: impl Fn([f64; 2]) -> f64) {
    let span = |axis: usize, n: usize| {
        let to = |v: f64| ((v + margin) * OVER as f64).clamp(0.0, n as f64 - 1.0) as usize;
        to(a[axis].min(b[axis]) - reach)..=to(a[axis].max(b[axis]) + reach)
    };
    for row in span(1, plane.rows) {
        for col in span(0, plane.cols) {
            let p = [col as f64 / OVER as f64 - margin, row as f64 / OVER as f64 - margin];
            plane.data[row * plane.cols + col] *= factor(p) as f32;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn electrodes_lie_behind_their_edges() {
        let mut scenario = Scenario { width: 160, height: 120, ..Scenario::default() };
        scenario.imaging.pores = 0;
        let scenario = scenario.settle().unwrap();
        let ceramic = Ceramic::draw(&scenario, 8.0);
        let levels = [2.0, 80.0, 158.0].map(|x| (ceramic.brightness([x, 60.0]), ceramic.window([x, 60.0])));
        assert!((f64::from(levels[0].0) - scenario.imaging.plating_level).abs() < 0.05, "{levels:?}");
        assert!(levels[1].1 > 0.99 && levels[0].1 < 0.01 && levels[2].1 < 0.01);
        assert!((levels[1].0 - 1.0).abs() < 0.15);
        // On the edge itself half is ceramic, but for the roughness.
        let edge = scenario.plating_edge[0][0];
        let mean = (0..100).map(|y| ceramic.window([edge, f64::from(y)])).sum::<f32>() / 100.0;
        assert!((mean - 0.5).abs() < 0.15, "{mean}");
    }

    #[test]
    fn every_texture_varies_but_keeps_its_mean() {
        for texture in [Texture::Grains, Texture::Tones, Texture::Cloud, Texture::Brushed, Texture::Plain] {
            let mut scenario = Scenario { width: 200, height: 200, ..Scenario::default() };
            scenario.imaging = super::super::Imaging { texture, texture_contrast: 0.1, pores: 0, ..scenario.imaging };
            let ceramic = Ceramic::draw(&scenario.settle().unwrap(), 4.0);
            let values: Vec<f32> = (0..80)
                .flat_map(|i| (0..80).map(move |j| (i, j)))
                .map(|(i, j)| ceramic.brightness([60.0 + f64::from(i), 60.0 + f64::from(j)]))
                .collect();
            let mean = values.iter().sum::<f32>() / values.len() as f32;
            let deviation = (values.iter().map(|v| (v - mean) * (v - mean)).sum::<f32>() / values.len() as f32).sqrt();
            assert!(
                (mean - 1.0).abs() < 0.12 && deviation > 0.01 && deviation < 0.25,
                "{texture:?} {mean} {deviation}"
            );
        }
    }
}
