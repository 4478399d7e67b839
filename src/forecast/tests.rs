//! The forecast as a whole: scale, order, drives, stalls, silence, cost.

use super::histories::{Fleet, Law, draw};
use super::*;

/// One filament of depth `depth(k)` at frames 1.. of one a minute, across 400 µm.
fn record(frames: usize, depth: impl Fn(f64) -> f64) -> Record {
    let depth_um: Vec<f64> = (1..=frames).map(|k| depth(k as f64)).collect();
    let tip = TipSeries {
        filament: 1,
        first: 1,
        u_depth_um: vec![1.0; frames],
        remaining_um: depth_um.iter().map(|d| 400.0 - d).collect(),
        depth_um,
    };
    let times_s: Vec<f64> = (0..=frames).map(|k| 60.0 * k as f64).collect();
    let issued_at_s = 60.0 * frames as f64;
    Record { times_s, tips: vec![tip], gap_um: 400.0, issued_at_s, ..Record::default() }
}

fn told(record: &Record) -> [f64; 7] {
    forecast(record, &Settings::default()).quantiles_s.unwrap()
}

fn median_of(record: &Record) -> f64 {
    told(record)[3]
}

#[test]
fn slowing_and_speeding_growth_are_told_apart() {
    let steady = median_of(&record(20, |k| 10.0 * k));
    let slowing = median_of(&record(20, |k| 200.0 * (k / 20.0).sqrt()));
    let speeding = median_of(&record(20, |k| 200.0 * (k / 20.0).powi(2)));
    // true contacts: frames 40, 80 and 28.3
    assert!((steady / 60.0 - 40.0).abs() < 4.0, "{steady}");
    assert!((60.0..100.0).contains(&(slowing / 60.0)), "{slowing}");
    assert!((speeding / 60.0 - 28.3).abs() < 2.0, "{speeding}");
}

#[test]
fn units_of_time_and_length_do_not_matter() {
    let run = draw(Law::Jumps, &Fleet { frames: 40, roughness: 1.0, seed: 5 }, 2);
    let plain = run.record_at(20, 0).unwrap();
    let mut other = plain.clone();
    other.times_s.iter_mut().for_each(|t| *t *= 1024.0);
    other.issued_at_s *= 1024.0;
    other.gap_um *= 0.25;
    for tip in &mut other.tips {
        for series in [&mut tip.depth_um, &mut tip.u_depth_um, &mut tip.remaining_um] {
            series.iter_mut().for_each(|x| *x *= 0.25);
        }
    }
    for (a, b) in told(&plain).iter().zip(told(&other)) {
        approx::assert_relative_eq!(1024.0 * a, b, max_relative = 1e-9);
    }
}

#[test]
fn order_of_filaments_does_not_matter() {
    for index in 0..20 {
        let run = draw(Law::Steady, &Fleet { frames: 40, roughness: 1.0, seed: 8 }, index);
        let Some(mut record) = run.record_at(20, 0).filter(|r| r.tips.len() > 1) else {
            continue;
        };
        let before = told(&record);
        record.tips.reverse();
        for (a, b) in before.iter().zip(told(&record)) {
            approx::assert_relative_eq!(*a, b, max_relative = 1e-6);
        }
    }
}

#[test]
fn quantiles_rise_and_lie_after_issue() {
    for (number, law) in super::histories::LAWS.into_iter().enumerate() {
        let run = draw(law, &Fleet { frames: 40, roughness: 1.0, seed: 21 }, number as u64);
        for frame in 0..run.times_s.len() {
            let Some(record) = run.record_at(frame, 2) else {
                continue;
            };
            let forecast = forecast(&record, &Settings::default());
            let Some(quantiles) = forecast.quantiles_s else {
                continue;
            };
            assert!(quantiles.windows(2).all(|pair| pair[0] <= pair[1]), "{law:?} {frame} {quantiles:?}");
            assert!(quantiles[0] >= record.issued_at_s && quantiles[6].is_finite());
            assert!((0.0..=1.0).contains(&forecast.chance_by_horizon.unwrap()));
            assert!(forecast.hazard_now_per_s.unwrap() >= 0.0);
        }
    }
}

#[test]
fn a_second_filament_in_the_lead_brings_contact_forward() {
    let alone = record(20, |k| 10.0 * k);
    let mut both = alone.clone();
    let mut quick = record(20, |k| 14.0 * k).tips[0].clone();
    quick.filament = 2;
    both.tips.push(quick);
    assert!(median_of(&both) < median_of(&alone) - 300.0);
}

#[test]
fn a_filament_first_seen_when_already_deep_is_not_taken_for_a_sprinter() {
    let left = told(&record(20, |k| 50.0 + 10.0 * k)).map(|time| (time - 1200.0) / 60.0);
    // true: 15 frames
    assert!(left[1] < 15.0 && 15.0 < left[5] && (left[3] - 15.0).abs() < 3.0, "{left:?}");
}

#[test]
fn waiting_without_contact_moves_the_forecast_on() {
    let early = record(30, |k| 12.0 * k);
    let mut late = early.clone();
    late.issued_at_s = told(&early)[3];
    assert!(told(&late)[0] >= late.issued_at_s);
    assert!(told(&late)[3] > told(&early)[3]);
}

#[test]
fn a_standing_filament_is_called_off_and_a_growing_one_is_not() {
    let chance = |stood: usize| {
        let record = record(20 + stood, |k| 13.0 * k.min(20.0));
        forecast(&record, &Settings::default()).chance_by_horizon.unwrap()
    };
    println!("{:?}", (0..12).map(chance).collect::<Vec<_>>());
    assert!(chance(0) > 0.8, "{}", chance(0));
    assert!(chance(3) > 0.5, "{}", chance(3));
    assert!(chance(10) < 0.2, "{}", chance(10));
}

#[test]
fn growth_that_follows_charge_is_forecast_by_charge() {
    // current on and off by fives; depth follows the charge exactly
    let charge: Vec<f64> = (0..=30).map(|k| (0..k).filter(|j| (j / 5) % 2 == 0).count() as f64).collect();
    let mut record = record(30, |k| 15.0 * charge[k as usize].max(1.0));
    record.charge_mah = Some(charge.iter().map(|q| q / 60.0).collect());
    let half = forecast(&record, &Settings::default());
    assert!(half.model.contains("charge"), "{}", half.model);
    assert!(!half.extrapolates);
    // from here on the current that was on half the time is planned to stay on: twice as fast as before
    let on = median_of(&Record {
        plan: vec![PlanStep { time_s: 1800.0, current_ma: Some(1.0), dose_mpa: None }],
        ..record.clone()
    });
    let before = half.quantiles_s.unwrap()[3];
    assert!((1.6..2.4).contains(&((before - 1800.0) / (on - 1800.0))), "{before} {on}");
    let more = Record { plan: vec![PlanStep { time_s: 1800.0, current_ma: Some(3.0), dose_mpa: None }], ..record };
    assert!(forecast(&more, &Settings::default()).extrapolates);
}

#[test]
fn a_planned_current_counts_even_where_charge_and_time_ran_together() {
    // 1 mA throughout; 3 mA planned
    let steady =
        Record { charge_mah: Some((0..=20).map(|k| f64::from(k) / 60.0).collect()), ..record(20, |k| 10.0 * k) };
    let planned = |current| Record {
        plan: vec![PlanStep { time_s: 1200.0, current_ma: Some(current), dose_mpa: None }],
        ..steady.clone()
    };
    let (before, three) = (median_of(&steady), forecast(&planned(3.0), &Settings::default()));
    assert!(three.extrapolates && !forecast(&planned(1.0), &Settings::default()).extrapolates);
    // by charge alone a third of 20 frames, by time alone all of them: nothing in the record tells which
    let after = three.quantiles_s.unwrap();
    assert!(after[3] < before - 120.0 && after[1] < 1200.0 + 10.0 * 60.0, "{before} {after:?}");
}

#[test]
fn growth_that_follows_the_dose_slows_when_a_higher_one_is_planned() {
    let dose: Vec<f64> = (0..=30).map(|k| if (k / 6) % 2 == 0 { 0.0 } else { 100.0 }).collect();
    let mut depth = vec![0.0];
    for k in 1..=30 {
        depth.push(depth[k - 1] + if dose[k] > 0.0 { 4.0 } else { 11.0 });
    }
    let mut record = record(30, |k| depth[k as usize]);
    record.dose_mpa = Some(dose);
    let planned = |dose| {
        median_of(&Record {
            plan: vec![PlanStep { time_s: 1800.0, current_ma: None, dose_mpa: Some(dose) }],
            ..record.clone()
        })
    };
    let ratio = (planned(100.0) - 1800.0) / (planned(0.0) - 1800.0);
    // true: 11/4 = 2.75
    assert!((1.8..3.5).contains(&ratio), "{ratio}");
}

#[test]
fn silence_has_a_reason() {
    let silence = |record: &Record| forecast(record, &Settings::default()).silence;
    let good = record(20, |k| 10.0 * k);
    assert_eq!(silence(&good), None);
    assert_eq!(silence(&Record { tips: Vec::new(), ..good.clone() }), Some(Silence::NoGrowth));
    assert_eq!(silence(&record(2, |k| 10.0 * k)), Some(Silence::TooShort));
    assert_eq!(silence(&record(20, |k| 20.0 * k)), Some(Silence::Contact));
    let mut back = good.clone();
    back.times_s[3] = 0.0;
    assert_eq!(silence(&back), Some(Silence::Unusable));
    let mut hole = good;
    hole.tips[0].depth_um[4] = f64::NAN;
    assert_eq!(silence(&hole), Some(Silence::Unusable));
}

/// Fastest of many, ms, so that a busy machine does not decide.
fn cost(record: &Record) -> f64 {
    let once = || {
        let start = std::time::Instant::now();
        std::hint::black_box(forecast(std::hint::black_box(record), &Settings::default()));
        1e3 * start.elapsed().as_secs_f64()
    };
    (0..31).map(|_| once()).fold(f64::INFINITY, f64::min)
}

#[test]
fn one_forecast_is_cheap() {
    for (frames, index) in [(40, 2), (40, 3), (300, 1), (300, 3), (3000, 1)] {
        let run = draw(Law::Power, &Fleet { frames, roughness: 1.0, seed: 3 }, index);
        let plain = run.record_at(run.times_s.len() - 1, 0).unwrap();
        let n = plain.times_s.len();
        // charge that runs ahead of time and falls back, load on and off: five drives in place of one
        let wave = |k: usize| 0.06 * n as f64 * libm::sin(6.0 * k as f64 / n as f64);
        let driven = Record {
            charge_mah: Some((0..n).map(|k| k as f64 + wave(k)).collect()),
            dose_mpa: Some((0..n).map(|k| if (6 * k / n).is_multiple_of(2) { 0.0 } else { 100.0 }).collect()),
            ..plain.clone()
        };
        let (plain, driven) = (cost(&plain), cost(&driven));
        println!("{n} frames: {plain:.2} ms, with charge and dose {driven:.2} ms");
        assert!(plain < 2.0 && driven < 4.0, "{n} frames: {plain} and {driven} ms");
    }
}
