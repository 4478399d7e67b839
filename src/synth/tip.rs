//! The moving end of a track, and its speed: a law of its age times a log-normal factor with memory
//! (the exponential of an Ornstein & Uhlenbeck process, 1930, Phys. Rev. 36, 823).

use super::dice::Dice;
use super::plan::{GrowthPlan, SpeedLaw};

/// The moving end of a track.
pub(super) struct Tip {
    /// Index of its track.
    pub(super) track: usize,
    /// When it starts, s.
    pub(super) start_s: f64,
    /// Nominal speed, px/s.
    pub(super) speed: f64,
    /// Nominal full width, px.
    pub(super) width: f64,
    /// Where it is, px.
    pub(super) place: [f64; 2],
    /// Heading, radians clockwise from +x as displayed.
    pub(super) angle: f64,
    /// Wandering curvature, 1/px.
    pub(super) curvature: f64,
    /// Logarithm of the speed factor.
    pub(super) log_speed: f64,
    /// Relative deviation of the width.
    pub(super) width_wave: f64,
    /// When a burst or pause ends, s.
    pub(super) toggle_s: f64,
    /// Arc length of its last branching, px.
    pub(super) branched_at: f64,
    /// Whether it is in a burst.
    pub(super) running: bool,
    /// Arc length filled with metal, px.
    pub(super) front: f64,
    /// Whether it can still grow.
    pub(super) alive: bool,
    /// Its own chance.
    pub(super) dice: Dice,
}

impl Tip {
    /// Speed at `time`, px/s, with its noise moved on by `dt`.
    pub(super) fn pace(&mut self, plan: &GrowthPlan, time: f64, dt: f64, end_s: f64) -> f64 {
        let memory = libm::exp(-dt / plan.speed_memory_s);
        self.log_speed =
            self.log_speed * memory + plan.speed_noise * self.dice.normal() * (1.0 - memory * memory).sqrt();
        let tau = 0.25 * (end_s - self.start_s).max(dt);
        let age = (time - self.start_s) / tau;
        let law = match plan.law {
            SpeedLaw::Steady => 1.0,
            // Normalised so that age 0 → 4 (the end) has mean near 1.
            SpeedLaw::Slowing => 1.6 / (1.0 + age).sqrt(),
            SpeedLaw::Accelerating => (1.0 + age) / 3.0,
            SpeedLaw::StopAndGo => {
                if time >= self.toggle_s {
                    self.running = !self.running;
                    self.toggle_s = time + self.dice.wait(0.1 * end_s);
                }
                if self.running { 1.6 } else { 0.0 }
            }
        };
        let spread = plan.speed_noise * plan.speed_noise;
        self.speed * law * libm::exp(self.log_speed - 0.5 * spread)
    }
}
