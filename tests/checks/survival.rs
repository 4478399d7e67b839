//! Survival and dose–response against published data: the leukaemia remission trial (Freireich et al. 1963) and the beetle
//! mortality of Bliss (1935). Reference: R 4.2.2 with survival 3.5-3 and MASS, lifelines 0.30.3, statsmodels 0.15.0.

use approx::assert_abs_diff_eq;
use veerlog::stats::dose::{DoseFit, Link, NoFit, Trials, fit};
use veerlog::stats::survival::Follow;
use veerlog::stats::survival::cox::{Exposed, Ties, cox};
use veerlog::stats::survival::kaplan_meier::Curve;
use veerlog::stats::survival::logrank::{Member, Weight, logrank};

/// Group 0: treated (6-MP); group 1: control.
fn freireich() -> Vec<Member> {
    include_str!("../../fixtures/stats/freireich.csv")
        .lines()
        .filter(|line| line.starts_with(|c: char| c.is_ascii_digit()))
        .filter_map(|line| {
            let cells: Vec<&str> = line.split(',').collect();
            Some(Member {
                follow: Follow { time: cells[0].parse().ok()?, event: cells[1] == "1" },
                group: usize::from(cells[2] == "control"),
                stratum: 0,
            })
        })
        .collect()
}

fn curve(group: usize) -> Curve {
    Curve::of(&freireich().iter().filter(|m| m.group == group).map(|m| m.follow).collect::<Vec<_>>())
}

#[test]
fn log_rank_and_its_kin() {
    let units = freireich();
    assert_eq!(units.len(), 42);
    let test = logrank(&units, 2, Weight::Equal).unwrap();
    // lifelines = statsmodels = R survdiff.
    assert_abs_diff_eq!(test.chi_squared, 16.792_940_989, epsilon = 1e-6);
    assert_abs_diff_eq!(test.p, 4.168_809e-5, epsilon = 1e-10);
    assert_abs_diff_eq!(test.expected[0], 19.2505, epsilon = 1e-4);
    assert_abs_diff_eq!(test.expected[1], 10.7495, epsilon = 1e-4);
    assert_abs_diff_eq!(test.observed[0], 9.0);
    assert_abs_diff_eq!(test.observed[1], 21.0);
    // lifelines (Gehan–Breslow, Tarone–Ware); R survdiff rho = 1 (Peto–Peto).
    let chi = |weight| logrank(&units, 2, weight).unwrap().chi_squared;
    assert_abs_diff_eq!(chi(Weight::AtRisk), 13.457_852_05, epsilon = 1e-5);
    assert_abs_diff_eq!(chi(Weight::RootAtRisk), 15.123_575_30, epsilon = 1e-5);
    assert_abs_diff_eq!(chi(Weight::Survival), 14.457_150_82, epsilon = 1e-5);
}

#[test]
fn kaplan_meier() {
    let (treated, control) = (curve(0), curve(1));
    // R survfit = lifelines.
    for (time, share) in [
        (6.0, 0.857_142_857),
        (7.0, 0.806_722_689),
        (10.0, 0.752_941_176),
        (13.0, 0.690_196_078),
        (16.0, 0.627_450_980),
        (22.0, 0.537_815_126),
        (23.0, 0.448_179_272),
    ] {
        assert_abs_diff_eq!(treated.survival_at(time), share, epsilon = 1e-8);
    }
    let (six, last) = (treated.step_at(6.0).unwrap(), treated.step_at(23.0).unwrap());
    assert_abs_diff_eq!(six.se(), 0.076_360_4, epsilon = 1e-6);
    assert_abs_diff_eq!(last.se(), 0.134_591_5, epsilon = 1e-6);
    let ([a, b], [c, d]) = (six.interval(0.95).unwrap(), last.interval(0.95).unwrap());
    for (found, expected) in [(a, 0.619_718), (b, 0.951_552), (c, 0.188_052), (d, 0.680_143)] {
        assert_abs_diff_eq!(found, expected, epsilon = 1e-6);
    }
    assert_eq!((treated.median(), control.median()), (Some(23.0), Some(8.0)));
    // R survfit, conf.type = "log-log".
    assert_eq!(treated.median_interval(0.95), [Some(13.0), None]);
    assert_eq!(control.median_interval(0.95), [Some(4.0), Some(11.0)]);
    // R = lifelines, to 21 weeks.
    assert_abs_diff_eq!(treated.restricted_mean(21.0), 16.743_977_591, epsilon = 1e-5);
    assert_abs_diff_eq!(control.restricted_mean(21.0), 8.523_809_524, epsilon = 1e-5);
}

#[test]
fn cox_hazard_ratio() {
    let units: Vec<Exposed> = freireich()
        .iter()
        .zip(0..)
        .map(|(m, cluster)| Exposed { follow: m.follow, x: m.group as f64, cluster })
        .collect();
    // R coxph, control against 6-MP.
    assert_abs_diff_eq!(cox(&units, Ties::Efron).unwrap().log_ratio, 1.572_125_149, epsilon = 1e-5);
    assert_abs_diff_eq!(cox(&units, Ties::Breslow).unwrap().log_ratio, 1.509_191_413, epsilon = 1e-5);
}

fn beetles() -> Vec<Trials> {
    include_str!("../../fixtures/stats/beetle.csv")
        .lines()
        .filter(|line| line.starts_with(|c: char| c.is_ascii_digit()))
        .filter_map(|line| {
            let cells: Vec<f64> = line.split(',').map(|c| c.parse().ok()).collect::<Option<_>>()?;
            Some(Trials { dose: cells[0], tried: cells[1], yes: cells[2] })
        })
        .collect()
}

#[test]
fn beetle_mortality() {
    let trials = beetles();
    assert_eq!(trials.len(), 8);
    let line: DoseFit = fit(&trials, Link::Logit).unwrap();
    // Dobson (from memory): −60.72 (5.18), 34.27 (2.91), deviance 11.23; digits R glm = statsmodels.
    assert_abs_diff_eq!(line.intercept, -60.717_454_56, epsilon = 1e-5);
    assert_abs_diff_eq!(line.slope, 34.270_325_73, epsilon = 1e-5);
    assert_abs_diff_eq!(line.se()[0], 5.180_711, epsilon = 1e-5);
    assert_abs_diff_eq!(line.se()[1], 2.912_140, epsilon = 1e-5);
    assert_abs_diff_eq!(line.covariance[1], -15.082_09, epsilon = 1e-4);
    assert_abs_diff_eq!(line.deviance, 11.232_231_1, epsilon = 1e-6);
    // Dobson: 10.12 and 3.45; R glm.
    assert_abs_diff_eq!(fit(&trials, Link::Probit).unwrap().deviance, 10.119_758, epsilon = 1e-5);
    assert_abs_diff_eq!(fit(&trials, Link::ComplementaryLogLog).unwrap().deviance, 3.446_439, epsilon = 1e-5);
}

#[test]
fn beetle_lethal_dose() {
    let trials = beetles();
    let line = fit(&trials, Link::Logit).unwrap();
    // R MASS dose.p.
    assert_abs_diff_eq!(line.dose_for(0.5), 1.771_720_964_5, epsilon = 1e-7);
    assert_abs_diff_eq!(line.se_dose(0.5), 0.003_858_055_3, epsilon = 1e-7);
    assert_abs_diff_eq!(line.dose_for(0.1), 1.707_606_471, epsilon = 1e-7);
    assert_abs_diff_eq!(line.se_dose(0.1), 0.007_126_466, epsilon = 1e-7);
    assert_abs_diff_eq!(line.dose_for(0.9), 1.835_835_458, epsilon = 1e-7);
    assert_abs_diff_eq!(line.se_dose(0.9), 0.006_192_525, epsilon = 1e-7);
    let near = |found: [f64; 2], expected: [f64; 2]| {
        assert_abs_diff_eq!(found[0], expected[0], epsilon = 1e-6);
        assert_abs_diff_eq!(found[1], expected[1], epsilon = 1e-6);
    };
    // Finney's formula in numpy; profile by scipy.
    near(line.wald(0.5, 0.95), [1.764_159_3, 1.779_282_6]);
    assert_abs_diff_eq!(line.fieller_g(0.95), 0.027_738_580_6, epsilon = 1e-8);
    near(line.fieller(0.5, 0.95).unwrap(), [1.763_858_171_8, 1.779_200_475_4]);
    near(line.profile(&trials, 0.5, 0.95).map(Option::unwrap), [1.763_982_1, 1.779_187_2]);
}

#[test]
fn complete_separation_has_no_finite_standard_error() {
    let trials: Vec<Trials> =
        beetles().iter().map(|t| Trials { yes: if t.dose > 1.77 { t.tried } else { 0.0 }, ..*t }).collect();
    for link in [Link::Logit, Link::Probit, Link::ComplementaryLogLog] {
        assert_eq!(fit(&trials, link), Err(NoFit::Separated));
    }
}
