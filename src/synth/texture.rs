//! Patterns of the ceramic: Voronoi grains on a jittered grid (Worley 1996, SIGGRAPH, 291–294), value noise with smooth blending
//! (after Perlin 1985, SIGGRAPH, 287–296), soft lines. Limit: noise repeats after 64 cells.

use super::dice::Dice;
use super::polyline::{dot, minus, plus, scaled};

/// Profile of a soft line at `away` from its middle.
pub(super) fn line(away: f64, half_width: f64) -> f64 {
    libm::exp(-(away * away) / (half_width * half_width))
}

/// Voronoi grains on a jittered grid.
pub(super) struct Grains {
    pub(super) size: f64,
    origin: [f64; 2],
    cols: usize,
    rows: usize,
    seeds: Vec<([f64; 2], f64)>,
}

/// What the grains are at a place.
pub(super) struct Grain {
    /// Distance to the nearest boundary, px.
    pub(super) to_border: f64,
    /// Tone of the grain, standard normal.
    pub(super) tone: f64,
    /// Strength of the nearest boundary, 0.2 to 1.
    pub(super) seam: f64,
}

impl Grains {
    pub(super) fn draw(dice: &mut Dice, size: f64, low: [f64; 2], high: [f64; 2]) -> Self {
        let count = |axis: usize| ((high[axis] - low[axis]) / size).ceil() as usize + 4;
        let (cols, rows) = (count(0), count(1));
        let origin = [low[0] - 2.0 * size, low[1] - 2.0 * size];
        let seeds = (0..cols * rows)
            .map(|i| {
                let cell = [(i % cols) as f64 + dice.between(0.05, 0.95), (i / cols) as f64 + dice.between(0.05, 0.95)];
                (plus(origin, scaled(cell, size)), dice.normal())
            })
            .collect();
        Self { size, origin, cols, rows, seeds }
    }

    pub(super) fn at(&self, p: [f64; 2]) -> Grain {
        let cell = |axis: usize, n: usize| {
            (((p[axis] - self.origin[axis]) / self.size).floor() as isize).clamp(2, n as isize - 3)
        };
        let (cx, cy) = (cell(0, self.cols), cell(1, self.rows));
        let (mut first, mut second) = ((f64::INFINITY, 0), (f64::INFINITY, 0));
        for y in cy - 2..=cy + 2 {
            for x in cx - 2..=cx + 2 {
                let i = y as usize * self.cols + x as usize;
                let off = minus(p, self.seeds[i].0);
                let away = dot(off, off);
                if away < first.0 {
                    (second, first) = (first, (away, i));
                } else if away < second.0 {
                    second = (away, i);
                }
            }
        }
        let between = minus(self.seeds[first.1].0, self.seeds[second.1].0);
        let apart = dot(between, between).sqrt().max(1e-9);
        let pair = self.seeds[first.1].1 + self.seeds[second.1].1;
        let seam = 0.2 + 0.8 * (pair * 7.0 - (pair * 7.0).floor());
        Grain { to_border: (second.0 - first.0) / (2.0 * apart), tone: self.seeds[first.1].1, seam }
    }
}

/// Value noise: standard normal values on a 64 × 64 torus, blended smoothly.
pub(super) struct Noise(Vec<f64>);

const TORUS: usize = 64;

impl Noise {
    pub(super) fn draw(dice: &mut Dice) -> Self {
        Self((0..TORUS * TORUS).map(|_| dice.normal()).collect())
    }

    pub(super) fn at(&self, p: [f64; 2]) -> f64 {
        let (x0, y0) = (p[0].floor(), p[1].floor());
        let fade = |t: f64| t * t * (3.0 - 2.0 * t);
        let (fx, fy) = (fade(p[0] - x0), fade(p[1] - y0));
        let value = |dx: f64, dy: f64| {
            let wrap = |v: f64| v.rem_euclid(TORUS as f64) as usize % TORUS;
            self.0[wrap(y0 + dy) * TORUS + wrap(x0 + dx)]
        };
        let top = value(0.0, 0.0) + fx * (value(1.0, 0.0) - value(0.0, 0.0));
        let low = value(0.0, 1.0) + fx * (value(1.0, 1.0) - value(0.0, 1.0));
        top + fy * (low - top)
    }
}
