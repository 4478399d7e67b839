//! Scenarios drawn by chance within a grade, for fleets.
//! Ranges are wide on purpose: what works on a fleet must not lean on one texture, one lens or one kind of growth.
//! Contrast and noise are the grade's own and are not drawn.

use super::dice::{Dice, Stream};
use super::imaging::{Grade, Imaging, Light, Psf, Texture};
use super::plan::{CellPlan, CurrentStage, FixtureKind, GrowthPlan, LoadPlan, LoadStage, Meeting, SpeedLaw, TipShape};
use super::scenario::{Polarity, Scenario};

/// A 480 × 360 run of 40 frames, six of them bare, drawn from `seed` within a grade.
///
/// # Examples
/// ```
/// use veerlog::synth::{Grade, draw};
/// assert_eq!(draw(Grade::Hard, 7), draw(Grade::Hard, 7));
/// assert_ne!(draw(Grade::Hard, 7), draw(Grade::Hard, 8));
/// ```
#[must_use]
pub fn draw(grade: Grade, seed: u64) -> Scenario {
    let mut dice = Dice::new(seed, Stream::Scenario, grade as usize);
    let blank = Scenario::default();
    let load = load(&mut dice, blank.interval_s * blank.frames as f64);
    let mut growth = growth(&mut dice);
    let cell = cell(&mut dice, &mut growth, &blank);
    let imaging = imaging(&mut dice, grade);
    let (plating_edge, far_edge) = edges(&mut dice, f64::from(blank.width), f64::from(blank.height));
    let filament = if dice.chance(0.2) { Polarity::Brighter } else { Polarity::Darker };
    let name = format!("{grade:?}-{seed}").to_lowercase();
    let note = Some("drawn by chance within its grade".to_owned());
    Scenario {
        name,
        note,
        seed,
        grade: Some(grade),
        filament,
        plating_edge,
        far_edge,
        load,
        cell,
        growth,
        imaging,
        ..blank
    }
}

/// Constant plating, or a rest or a stripping half-cycle on the way.
fn cell(dice: &mut Dice, growth: &mut GrowthPlan, blank: &Scenario) -> CellPlan {
    let plan = CellPlan::default();
    let kind = dice.below(8);
    if kind > 1 {
        return plan;
    }
    let from = (blank.end_s() * dice.between(0.4, 0.7)).round();
    let until = (from + blank.interval_s * dice.between(2.0, 5.0)).round();
    let current_ma = if kind == 0 { 0.0 } else { -plan.current_ma };
    growth.retreat_px_per_s = dice.between(0.3, 1.0);
    growth.stripped_contrast = dice.between(0.0, 0.5);
    let stages =
        vec![CurrentStage { at_s: from, current_ma }, CurrentStage { at_s: until, current_ma: plan.current_ma }];
    CellPlan { stages, ..plan }
}

/// The same picture without any growth.
#[must_use]
pub fn draw_bare(grade: Grade, seed: u64) -> Scenario {
    let mut scenario = draw(grade, seed);
    scenario.name = format!("{}-bare", scenario.name);
    scenario.growth.filaments = 0;
    scenario
}

/// Two edges across the picture, a little tilted, plating edge on either side (or above, below).
fn edges(dice: &mut Dice, w: f64, h: f64) -> (Vec<[f64; 2]>, Vec<[f64; 2]>) {
    let tilt = dice.between(-0.03, 0.03);
    let (near, far) = (dice.between(0.06, 0.12), dice.between(0.88, 0.95));
    let upright = |share: f64, bow: f64| {
        let at = |y: f64| [(share * w + tilt * (y - 0.5 * h)).round(), y];
        let mut line = vec![at(0.0), at((0.5 * h).round()), at(h - 1.0)];
        line[1][0] += bow;
        line
    };
    let lying = |share: f64, bow: f64| {
        let at = |x: f64| [x, (share * h + tilt * (x - 0.5 * w)).round()];
        let mut line = vec![at(0.0), at((0.5 * w).round()), at(w - 1.0)];
        line[1][1] += bow;
        line
    };
    let (bow_a, bow_b) = (dice.between(-4.0, 4.0).round(), dice.between(-4.0, 4.0).round());
    match dice.below(6) {
        0..=2 => (upright(near, bow_a), upright(far, bow_b)),
        3 => (upright(far, bow_a), upright(near, bow_b)),
        4 => (lying(near, bow_a), lying(far, bow_b)),
        _ => (lying(far, bow_a), lying(near, bow_b)),
    }
}

/// None, constant, stepped, ramped, turning or alternating load.
fn load(dice: &mut Dice, duration_s: f64) -> LoadPlan {
    let stage = |at_s: f64, stress_mpa: f64, direction_deg: f64, ramp_s: f64| LoadStage {
        at_s: at_s.round(),
        stress_mpa: stress_mpa.round(),
        direction_deg: direction_deg.rem_euclid(180.0).round(),
        ramp_s: ramp_s.round(),
    };
    let (stress, axis) = (dice.between(20.0, 200.0), dice.between(0.0, 180.0));
    let turn = dice.between(40.0, 90.0) * if dice.chance(0.5) { 1.0 } else { -1.0 };
    let middle = duration_s * dice.between(0.4, 0.65);
    let ramp = duration_s * dice.between(0.05, 0.3);
    let stages = match dice.below(8) {
        0 => return LoadPlan::default(),
        1 | 2 => vec![stage(0.0, stress, axis, 0.0)],
        3 => vec![stage(0.0, stress, axis, 0.0), stage(middle, stress, axis + turn, 0.0)],
        4 => vec![stage(0.0, stress, axis, 0.0), stage(middle, stress, axis + turn, ramp)],
        5 => vec![stage(0.0, 0.0, axis, 0.0), stage(middle, stress, axis, ramp)],
        6 => vec![stage(0.0, stress, axis, 0.0), stage(middle, -stress, axis, 0.0)],
        _ => {
            let period = duration_s * dice.between(0.12, 0.25);
            let swings = (duration_s / period) as usize;
            (0..=swings)
                .map(|i| stage(i as f64 * period, stress, axis + if i % 2 == 0 { 0.0 } else { turn }, 0.0))
                .collect()
        }
    };
    LoadPlan { fixture: FixtureKind::Stress, stages, noise_mpa: dice.between(0.1, 2.0), ..LoadPlan::default() }
}

fn growth(dice: &mut Dice) -> GrowthPlan {
    let thin = dice.between(2.0, 4.0);
    GrowthPlan {
        filaments: 2 + dice.below(5),
        start_s: [2.0, dice.between(20.0, 150.0)],
        width_px: [thin, (thin + dice.between(0.5, 3.0)).min(6.0)],
        law: dice.pick(&[SpeedLaw::Steady, SpeedLaw::Slowing, SpeedLaw::Accelerating, SpeedLaw::StopAndGo]),
        speed_noise: dice.between(0.1, 0.5),
        speed_memory_s: dice.log_within([10.0, 100.0]),
        steering_per_px: dice.log_within([0.015, 0.08]),
        field_per_px: dice.log_within([0.006, 0.02]),
        wander_per_px: dice.log_within([0.006, 0.03]),
        wander_memory_px: dice.log_within([12.0, 60.0]),
        root_spread_deg: dice.between(5.0, 25.0),
        branch_limit: 1 + dice.below(5),
        branches_per_100_px: dice.pick(&[0.0, 0.15, 0.3, 0.6]),
        width_noise: dice.between(0.0, 0.1),
        widen_s: dice.pick(&[0.0, 0.0, 30.0, 80.0]),
        tip: dice.pick(&[TipShape::Round, TipShape::Round, TipShape::Tapered]),
        meeting: dice.pick(&[Meeting::Stop, Meeting::Stop, Meeting::Stop, Meeting::Cross]),
        ..GrowthPlan::default()
    }
}

fn imaging(dice: &mut Dice, grade: Grade) -> Imaging {
    let base = Imaging::of(grade);
    let mut about = |value: f64| value * dice.log_within([0.5, 1.6]);
    let drawn = Imaging {
        uneven: about(base.uneven),
        texture_contrast: about(base.texture_contrast),
        flicker: about(base.flicker),
        drift_px: about(base.drift_px),
        light_drift: about(base.light_drift),
        focus_px: about(base.focus_px),
        edge_blur_px: about(base.edge_blur_px),
        ..base
    };
    Imaging {
        psf: dice.pick(&[Psf::Gaussian, Psf::Gaussian, Psf::Halo, Psf::Disc]),
        psf_px: dice.between(0.5, 1.0),
        level: dice.between(0.4, 0.65),
        texture: dice.pick(&[
            Texture::Grains,
            Texture::Grains,
            Texture::Tones,
            Texture::Cloud,
            Texture::Brushed,
            Texture::Plain,
        ]),
        grain_px: dice.log_within([12.0, 60.0]),
        light: dice.pick(&[Light::Tilt, Light::Vignette, Light::Spot]),
        plating_level: dice.pick(&[0.35, 0.5, 1.35]),
        far_level: dice.pick(&[0.4, 0.6, 1.3]),
        bits: if dice.chance(0.2) { 16 } else { 8 },
        ..drawn
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_draw_is_a_valid_scenario_that_survives_its_file() {
        for grade in [Grade::Clear, Grade::Typical, Grade::Hard] {
            for seed in 0..50 {
                let scenario = draw(grade, seed).settle().unwrap();
                let text = toml::to_string(&scenario).unwrap();
                let back = Scenario::parse(&text, std::path::Path::new("drawn.toml")).unwrap();
                assert_eq!(back, scenario);
                assert!((2..=6).contains(&scenario.growth.filaments));
            }
        }
    }

    #[test]
    fn grades_keep_their_contrast_and_noise() {
        let scenario = draw(Grade::Typical, 3);
        assert!((scenario.imaging.contrast - 0.18).abs() < 1e-12 && (scenario.imaging.noise - 2.6).abs() < 1e-12);
    }
}
