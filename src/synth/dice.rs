//! Seeded draws that give the same bytes on every machine and any number of threads.
//! Method: ChaCha8 with one stream an idea (and an index), normal values by Box & Muller (1958), Ann. Math. Stat. 29,
//! 610–611, with `libm` for the transcendental functions. Limit: two uniforms are spent on every normal value.

use rand::SeedableRng;
use rand::distr::{Distribution, StandardUniform};
use rand_chacha::ChaCha8Rng;

/// What a stream of numbers is for; each has its own range of stream numbers.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stream {
    /// The scenario itself, when it is drawn from a grade.
    Scenario = 1,
    /// Roots, widths, speeds.
    Roots = 2,
    /// Directions and speeds of one filament's tips.
    Growth = 3,
    /// Grains, pores, scratches.
    Ceramic = 4,
    /// Drift, light, focus and dust over the run.
    Recorder = 5,
    /// Noise of one frame.
    Noise = 6,
    /// Noise of the load and cell logs.
    Logs = 7,
}

/// A die of one stream.
#[derive(Debug, Clone)]
pub struct Dice(ChaCha8Rng);

impl Dice {
    /// The die of `stream` number `index` under `seed`.
    #[must_use]
    pub fn new(seed: u64, stream: Stream, index: usize) -> Self {
        let mut rng = ChaCha8Rng::seed_from_u64(seed);
        rng.set_stream(((stream as u64) << 32) + index as u64);
        Self(rng)
    }

    /// Uniform in [0, 1).
    pub fn unit(&mut self) -> f64 {
        StandardUniform.sample(&mut self.0)
    }

    /// Uniform in [low, high).
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.unit()
    }

    /// Uniform between the two ends of `range`.
    pub fn within(&mut self, range: [f64; 2]) -> f64 {
        self.between(range[0], range[1])
    }

    /// Log-uniform between the two ends of `range` (both > 0).
    pub fn log_within(&mut self, range: [f64; 2]) -> f64 {
        libm::exp(self.between(libm::log(range[0]), libm::log(range[1])))
    }

    /// A whole number in 0..n (0 when n is 0).
    pub fn below(&mut self, n: usize) -> usize {
        ((self.unit() * n as f64) as usize).min(n.saturating_sub(1))
    }

    /// One of `choices`, which must not be empty.
    pub fn pick<T: Copy>(&mut self, choices: &[T]) -> T {
        choices[self.below(choices.len())]
    }

    /// True with probability `p`.
    pub fn chance(&mut self, p: f64) -> bool {
        self.unit() < p
    }

    /// Standard normal.
    pub fn normal(&mut self) -> f64 {
        let radius = (-2.0 * libm::log(1.0 - self.unit())).sqrt();
        radius * libm::cos(std::f64::consts::TAU * self.unit())
    }

    /// Exponential with mean `mean`.
    pub fn wait(&mut self, mean: f64) -> f64 {
        -mean * libm::log(1.0 - self.unit())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn streams_repeat_and_differ() {
        let draw = |seed, index| Dice::new(seed, Stream::Noise, index).unit().to_bits();
        assert_eq!(draw(5, 2), draw(5, 2));
        assert_ne!(draw(5, 2), draw(5, 3));
        assert_ne!(draw(5, 2), draw(6, 2));
    }

    #[test]
    fn normal_has_its_moments() {
        let mut dice = Dice::new(11, Stream::Noise, 0);
        let values: Vec<f64> = (0..40_000).map(|_| dice.normal()).collect();
        let mean = values.iter().sum::<f64>() / 40_000.0;
        let variance = values.iter().map(|v| (v - mean) * (v - mean)).sum::<f64>() / 40_000.0;
        // Five standard errors: 5/√n for the mean, 5·√(2/n) for the variance.
        assert!(mean.abs() < 0.025, "{mean}");
        assert!((variance - 1.0).abs() < 0.036, "{variance}");
    }

    #[test]
    fn whole_numbers_stay_below() {
        let mut dice = Dice::new(3, Stream::Roots, 0);
        assert!((0..1000).all(|_| dice.below(7) < 7));
        assert_eq!(dice.below(0), 0);
    }
}
