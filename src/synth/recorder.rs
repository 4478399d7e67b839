//! What happens to the recording over the run: stage drift, shake, jumps and rotation; light and focus; dust; lost frames.
//! Method: smooth wandering as a sum of slow sines, jumps at random frames, all drawn before the first frame so that frames can be
//! rendered in any order. Limit: dust is a soft round shadow fixed to the camera.

use std::f64::consts::TAU;

use super::dice::{Dice, Stream};
use super::scenario::Scenario;

/// What is wrong with a frame's file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Loss {
    /// The file is cut short.
    Broken,
    /// It repeats the frame before, byte for byte.
    Repeated,
    /// It shows nothing.
    Blank,
}

/// A dust particle's shadow in one frame.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Speck {
    /// Place in the frame, px.
    pub place: [f64; 2],
    /// Radius, px.
    pub radius: f64,
    /// Share of light lost in its middle.
    pub loss: f64,
}

/// How one frame is taken.
#[derive(Debug, Clone, PartialEq)]
pub struct Shot {
    /// Shift of the scene against the first usable frame, px.
    pub drift: [f64; 2],
    /// Rotation of the scene about the picture's centre, degrees anticlockwise as displayed.
    pub rotation_deg: f64,
    /// Brightness against the first frame.
    pub gain: f64,
    /// Relative slope of light over half the picture, x and y.
    pub tilt: [f64; 2],
    /// Added blur (standard deviation), px.
    pub defocus_px: f64,
    /// Dust in view.
    pub dust: Vec<Speck>,
    /// What is wrong with the file, if anything.
    pub loss: Option<Loss>,
}

/// Draws how every frame of a settled scenario is taken.
#[must_use]
pub fn shots(scenario: &Scenario) -> Vec<Shot> {
    let imaging = &scenario.imaging;
    let n = scenario.frames;
    let mut dice = Dice::new(scenario.seed, Stream::Recorder, 0);
    let mut path = |size: f64| wander(&mut dice, n, size);
    let (drift_x, drift_y, turn) = (path(imaging.drift_px), path(imaging.drift_px), path(imaging.rotation_deg));
    let (light, tilt_x, tilt_y) = (path(imaging.light_drift), path(imaging.light_drift), path(imaging.light_drift));
    let focus = path(imaging.focus_px);
    let jumps = jumps(&mut dice, n, imaging.jumps, imaging.jump_px);
    let dust = specks(&mut dice, scenario);
    let losses = losses(&mut dice, scenario);
    let mut shots: Vec<Shot> = (0..n)
        .map(|k| Shot {
            drift: [
                drift_x[k] + jumps[k][0] + imaging.shake_px * dice.normal(),
                drift_y[k] + jumps[k][1] + imaging.shake_px * dice.normal(),
            ],
            rotation_deg: turn[k],
            gain: (1.0 + light[k]) * libm::exp(imaging.flicker * dice.normal()),
            tilt: [tilt_x[k], tilt_y[k]],
            defocus_px: focus[k].abs(),
            dust: dust[k].clone(),
            loss: losses[k],
        })
        .collect();
    // Coordinates are those of the first usable frame: it has no drift by definition.
    let zero = shots.iter().find(|s| s.loss.is_none()).map(|s| (s.drift, s.rotation_deg));
    if let Some((drift, rotation)) = zero {
        for shot in &mut shots {
            shot.drift = [shot.drift[0] - drift[0], shot.drift[1] - drift[1]];
            shot.rotation_deg -= rotation;
        }
    }
    shots
}

/// A slow wandering that starts at 0 and whose largest value over the run is `size`.
fn wander(dice: &mut Dice, n: usize, size: f64) -> Vec<f64> {
    let waves: Vec<[f64; 3]> = (1..=4)
        .map(|i| [dice.normal() / f64::from(i), dice.between(0.3, 1.0) * f64::from(i), dice.between(0.0, TAU)])
        .collect();
    let at = |k: usize| {
        let share = k as f64 / n.max(2) as f64;
        waves
            .iter()
            .map(|[a, turns, phase]| a * (libm::sin(TAU * turns * share + phase) - libm::sin(*phase)))
            .sum::<f64>()
    };
    let raw: Vec<f64> = (0..n).map(at).collect();
    let largest = raw.iter().fold(1e-9, |m: f64, v| m.max(v.abs()));
    raw.iter().map(|v| v * size / largest).collect()
}

/// Offset of the stage at every frame from `count` jumps of about `size` px, none in the first two frames.
fn jumps(dice: &mut Dice, n: usize, count: usize, size: f64) -> Vec<[f64; 2]> {
    let mut offsets = vec![[0.0, 0.0]; n];
    for _ in 0..count {
        let at = 2 + dice.below(n.saturating_sub(2));
        let (angle, length) = (dice.between(0.0, TAU), size * dice.between(0.6, 1.4));
        for offset in offsets.iter_mut().skip(at) {
            offset[0] += length * libm::cos(angle);
            offset[1] += length * libm::sin(angle);
        }
    }
    offsets
}

/// Dust: each particle wanders from place to place and now and then lies still for a few frames.
fn specks(dice: &mut Dice, scenario: &Scenario) -> Vec<Vec<Speck>> {
    let (w, h) = (f64::from(scenario.width), f64::from(scenario.height));
    let mut frames = vec![Vec::new(); scenario.frames];
    for _ in 0..scenario.imaging.dust {
        let (radius, loss) = (dice.log_within([1.5, 7.0]), dice.between(0.06, 0.3));
        let mut place = [dice.between(0.0, w), dice.between(0.0, h)];
        let mut velocity = [dice.normal() * 4.0, dice.normal() * 4.0];
        let mut resting = 0;
        for frame in &mut frames {
            frame.push(Speck { place, radius, loss });
            if resting > 0 {
                resting -= 1;
                continue;
            }
            if dice.chance(0.1) {
                resting = dice.below(3);
            }
            if dice.chance(0.05) {
                place = [dice.between(0.0, w), dice.between(0.0, h)];
            }
            for axis in 0..2 {
                velocity[axis] = 0.8 * velocity[axis] + 2.5 * dice.normal();
                place[axis] += velocity[axis];
            }
        }
    }
    frames
}

/// Which frames are lost; the first one never, and no two neighbours.
fn losses(dice: &mut Dice, scenario: &Scenario) -> Vec<Option<Loss>> {
    let imaging = &scenario.imaging;
    let mut losses = vec![None; scenario.frames];
    for (kind, count) in
        [(Loss::Broken, imaging.broken), (Loss::Repeated, imaging.repeated), (Loss::Blank, imaging.blank)]
    {
        for _ in 0..count {
            for _ in 0..200 {
                let k = 1 + dice.below(scenario.frames.saturating_sub(1));
                let free = |i: usize| losses.get(i).is_none_or(Option::is_none);
                if k < losses.len() && free(k) && free(k - 1) && free(k + 1) {
                    losses[k] = Some(kind);
                    break;
                }
            }
        }
    }
    losses
}

#[cfg(test)]
mod tests {
    use super::super::{Grade, Imaging};
    use super::*;

    fn hard() -> Scenario {
        Scenario { seed: 9, imaging: Imaging::of(Grade::Hard), ..Scenario::default() }.settle().unwrap()
    }

    #[test]
    fn the_first_usable_frame_has_no_drift() {
        let shots = shots(&hard());
        assert!(shots[0].loss.is_none() && shots[0].drift.iter().all(|d| d.abs() < 1e-12));
        let far = shots.iter().map(|s| s.drift[0].abs().max(s.drift[1].abs())).fold(0.0, f64::max);
        assert!(far > 2.0 && far < 30.0, "{far}");
    }

    #[test]
    fn losses_are_as_many_as_asked_for_and_apart() {
        let shots = shots(&hard());
        let lost: Vec<usize> = (0..shots.len()).filter(|&k| shots[k].loss.is_some()).collect();
        assert_eq!(lost.len(), 2);
        assert!(lost[1] - lost[0] > 1);
    }

    #[test]
    fn wandering_has_the_size_asked_for() {
        let path = wander(&mut Dice::new(2, Stream::Recorder, 3), 50, 4.0);
        let largest = path.iter().fold(0.0, |m: f64, v| m.max(v.abs()));
        assert!((largest - 4.0).abs() < 1e-9 && path[0].abs() < 1e-12);
    }
}
