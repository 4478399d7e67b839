//! Logs drawn with and without shorts, under the usual cell programmes.

use super::*;
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

/// A log of `n` samples 10 s apart: (current, voltage) by sample, with relative noise on both.
fn log(n: usize, noise: f64, seed: u64, at: impl Fn(usize) -> (f64, f64)) -> (Vec<f64>, Vec<f64>, Vec<f64>) {
    let mut rng = ChaCha8Rng::seed_from_u64(seed);
    let mut shaken = |x: f64| -> f64 {
        let z: f64 = StandardNormal.sample(&mut rng);
        x * (1.0 + noise * z)
    };
    let (mut i, mut v) = (Vec::new(), Vec::new());
    for k in 0..n {
        let (current, voltage) = at(k);
        i.push(shaken(current));
        v.push(shaken(voltage));
    }
    ((0..n).map(|k| 10.0 * k as f64).collect(), i, v)
}

fn found(n: usize, noise: f64, at: impl Fn(usize) -> (f64, f64)) -> Vec<ShortEvent> {
    let (t, i, v) = log(n, noise, 3, at);
    find(&t, &i, &v, &Settings::default())
}

#[test]
fn current_rise_under_constant_voltage() {
    let events = found(100, 0.01, |k| (if k < 70 { 0.2 } else { 4.0 }, 0.1));
    assert_eq!(events.len(), 1);
    assert_eq!((events[0].sign, events[0].grade), (Sign::CurrentRise, Grade::Full));
    assert!((events[0].time_s - 700.0).abs() < 1e-9);
}

#[test]
fn soft_short_recovers_and_full_one_does_not() {
    let events = found(200, 0.01, |k| {
        (
            0.5,
            match k {
                60..90 => 0.04,
                150.. => 0.001,
                _ => 0.08,
            },
        )
    });
    assert_eq!(events.len(), 2);
    assert_eq!((events[0].grade, events[0].recovered_s), (Grade::Soft, Some(900.0)));
    assert_eq!((events[1].grade, events[1].recovered_s), (Grade::Full, None));
}

#[test]
fn rest_reversals_set_points_and_stray_samples_are_no_shorts() {
    let cycling = found(400, 0.02, |k| {
        let (half, sign) = (k % 40, if (k / 40) % 2 == 0 { 1.0 } else { -1.0 });
        // voltage builds up after each reversal; then a rest
        if half >= 34 { (0.0, 0.0) } else { (sign * 0.5, sign * (0.08 - 0.05 * (-(half as f64) / 1.5).exp())) }
    });
    assert!(cycling.is_empty(), "{cycling:?}");
    let stray = found(200, 0.02, |k| (0.5, if k == 77 || k == 130 { 0.002 } else { 0.08 }));
    assert!(stray.is_empty(), "{stray:?}");
    let stepped = found(200, 0.02, |k| if k < 100 { (0.2, 0.05) } else { (0.8, 0.12) });
    assert!(stepped.is_empty(), "{stepped:?}");
}

#[test]
fn slow_decline_and_pure_noise_are_no_shorts() {
    let decline = found(500, 0.03, |k| (0.5, 0.08 * (-(k as f64) / 400.0).exp()));
    assert!(decline.is_empty(), "{decline:?}");
    for seed in 0..50 {
        let (t, i, v) = log(400, 0.15, seed, |_| (0.5, 0.08));
        assert!(find(&t, &i, &v, &Settings::default()).is_empty(), "seed {seed}");
    }
}

#[test]
fn short_during_noisy_cycling_is_found() {
    for seed in 0..20 {
        let (t, i, v) = log(400, 0.05, seed, |k| {
            let sign = if (k / 40) % 2 == 0 { 1.0 } else { -1.0 };
            (sign * 0.5, sign * if k < 305 { 0.08 } else { 0.003 })
        });
        let events = find(&t, &i, &v, &Settings::default());
        assert_eq!(events.len(), 1, "seed {seed}: {events:?}");
        assert!((events[0].time_s - 3050.0).abs() <= 20.0, "seed {seed}: {}", events[0].time_s);
    }
}

#[test]
fn broken_specimen_is_no_short() {
    let event = found(100, 0.0, |k| (0.5, if k < 60 { 0.08 } else { 0.001 }));
    assert_eq!(verdict(&event, None, true).time_s, None);
    let both = verdict(&event, Some(550.0), false);
    assert_eq!((both.evidence, both.lag_s), (Some(Evidence::Electrical), Some(50.0)));
}

#[test]
fn long_logs_stay_cheap() {
    let events = found(200_000, 0.03, |k| (0.5, if k < 150_000 { 0.08 } else { 0.004 }));
    assert_eq!(events.len(), 1);
    assert!((events[0].time_s - 1_500_000.0).abs() < 1.0);
}

#[test]
fn poor_logs_give_nothing() {
    assert!(find(&[], &[], &[], &Settings::default()).is_empty());
    assert!(find(&[0.0, 1.0], &[1.0], &[1.0, 1.0], &Settings::default()).is_empty());
    let zeros = vec![0.0; 50];
    let time: Vec<f64> = (0..50).map(f64::from).collect();
    assert!(find(&time, &zeros, &zeros, &Settings::default()).is_empty());
}
