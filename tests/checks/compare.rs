//! Comparisons of invented campaigns with known truth: does the threshold's interval hold it, how often is an effect claimed
//! where there is none, how long do many runs take. No published values: the truth is drawn. A reduced set always; the full set
//! by `VEERLOG_FULL=1 cargo test --release --test checks full_compare -- --nocapture`.

use std::time::Instant;

use veerlog::compare::campaign::{Campaign, Coverage, FalseEffects, coverage, false_effects};
use veerlog::compare::{Plan, compare};

/// Set to run the full sets.
fn full() -> bool {
    std::env::var_os("VEERLOG_FULL").is_some()
}

/// Holds an interval at 95 %: 90 of 100, or 16 of 20, are at least so many (binomial, below 2 % short of it by chance).
fn holds(found: Coverage) {
    println!("{found:?}");
    let least = if found.campaigns >= 100 { found.campaigns * 90 / 100 } else { found.campaigns * 80 / 100 };
    assert!(found.held >= least, "{found:?}");
    assert!(
        found.half_width_mpa <= 1.5 * found.half_width_of_truth_mpa && found.half_width_mpa.is_finite(),
        "{found:?}"
    );
}

fn claims_little(found: &FalseEffects, naive_fails: bool) {
    println!("{found:?}");
    // 16 of 200: above the 97.5 % of the binomial at 5 %. Fewer campaigns in proportion, three more for chance.
    let most = if found.campaigns >= 200 { found.campaigns * 16 / 200 } else { found.campaigns * 16 / 200 + 3 };
    assert!(found.claimed.len() >= 6, "{found:?}");
    assert!(found.claimed.iter().all(|(_, n)| *n <= most), "{found:?}");
    assert!(found.any_after_holm <= most, "{found:?}");
    // The campaigns are hard: filaments pooled as if independent claim effects far too often.
    assert!(!naive_fails || found.pooled * 100 > found.campaigns * 15, "{found:?}");
}

fn strong() -> Campaign {
    Campaign { specimen_logit: 2.0, run_logit: 0.6, ..Campaign::default() }
}

/// Eight specimens that see one load each, three runs each: the hardest for tests that forget specimens.
fn nested() -> Campaign {
    let doses_mpa = vec![0.0, 180.0];
    Campaign { one_dose_each: true, specimens: 8, repeats: 3, doses_mpa, ..strong() }
}

#[test]
fn threshold_intervals_hold_the_truth() {
    holds(coverage(&Campaign::default(), 20, 11));
}

#[test]
fn effects_are_not_claimed_where_there_is_none() {
    claims_little(&false_effects(&strong(), 40, 12), false);
    claims_little(&false_effects(&nested(), 40, 13), true);
}

#[test]
fn full_compare_threshold() {
    if full() {
        for (seed, campaign) in [
            (101, Campaign::default()),
            (102, Campaign { threshold_mpa: Some(75.0), rise_mpa: 12.0, ..Campaign::default() }),
            (103, Campaign { threshold_mpa: Some(120.0), rise_mpa: 30.0, ..Campaign::default() }),
            (104, Campaign { specimen_logit: 1.5, ..Campaign::default() }),
        ] {
            println!(
                "threshold {:?}, rise {} MPa, specimens ± {}",
                campaign.threshold_mpa, campaign.rise_mpa, campaign.specimen_logit
            );
            holds(coverage(&campaign, 100, seed));
        }
    }
}

#[test]
fn full_compare_no_effect() {
    if full() {
        claims_little(&false_effects(&strong(), 200, 201), false);
        claims_little(&false_effects(&nested(), 200, 202), true);
    }
}

#[test]
fn full_compare_many_runs_in_seconds() {
    let campaign = Campaign { specimens: 50, ..Campaign::default() };
    let records = campaign.draw(31, 0).measured;
    assert_eq!(records.len(), 200);
    let start = Instant::now();
    let found = compare(&records, &Plan::default()).unwrap();
    let seconds = start.elapsed().as_secs_f64();
    println!("200 runs compared in {seconds:.1} s");
    // Ten seconds on a machine that does nothing else, which only the full set may take for granted.
    let most = if full() { 10.0 } else { 60.0 };
    assert!(found.turned.half_mpa.is_some() && seconds < most, "{seconds} s");
}
