//! Circular and axial statistics against worked examples: Zar (2010) Biostatistical Analysis, Fisher (1993) Statistical
//! Analysis of Circular Data, and reference libraries. Data: `fixtures/stats/circular.json`.

use approx::{assert_abs_diff_eq, assert_relative_eq};
use veerlog::stats::axial::{Moments, alignment, axial_mean};
use veerlog::stats::calibration::{alignment_coverage, isotropic_p_values, turn_rates};
use veerlog::stats::concentration::kappa;
use veerlog::stats::uniformity::{kuiper, rayleigh_p, rayleigh_p_wilkie, rayleigh_p_zar, v_test};

fn data(name: &str) -> Option<Vec<f64>> {
    let json: serde_json::Value = serde_json::from_str(include_str!("../../fixtures/stats/circular.json")).ok()?;
    json[name].as_array()?.iter().map(serde_json::Value::as_f64).collect()
}

#[test]
fn zar_example_26_4_and_27_1() {
    let degrees = data("zar_D1").unwrap();
    let m = Moments::of_directions(&degrees).unwrap();
    // Zar ex. 26.4: 99°, 0.82522; pycircstat2 and astropy give the digits.
    assert_abs_diff_eq!(m.mean_deg.unwrap(), 98.987_751_950, epsilon = 1e-6);
    assert_abs_diff_eq!(m.resultant, 0.825_217_744_8, epsilon = 1e-9);
    // Zar ex. 27.1: z 5.448, 0.001 < p < 0.002.
    assert_abs_diff_eq!(8.0 * m.resultant * m.resultant, 5.447_875, epsilon = 1e-6);
    // Exact: Bessel integral by mpmath; approximations: pingouin 0.7.0, astropy 8.0.2 = R circular 0.4-95.
    assert_abs_diff_eq!(rayleigh_p(8, m.resultant), 0.001_655_114, epsilon = 1e-7);
    assert_abs_diff_eq!(rayleigh_p_zar(8, m.resultant), 0.001_851_638, epsilon = 1e-7);
    assert_abs_diff_eq!(rayleigh_p_wilkie(8, m.resultant), 0.001_644_197_395, epsilon = 1e-7);
    // Zar ex. 26.7: 68° to 130°; pycircstat2 68.054 to 129.921.
    let half = m.zar_half_width(0.95).unwrap();
    assert_abs_diff_eq!(m.mean_deg.unwrap() - half, 68.054, epsilon = 0.01);
    assert_abs_diff_eq!(m.mean_deg.unwrap() + half, 129.921, epsilon = 0.01);
    // scipy 1.17.1 vonmises.fit.
    assert_abs_diff_eq!(kappa(m.resultant), 3.223_136_209, epsilon = 1e-6);
}

#[test]
fn zar_example_27_2() {
    let degrees = data("zar_D7").unwrap();
    let m = Moments::of_directions(&degrees).unwrap();
    let test = v_test(&degrees, 90.0).unwrap();
    // Zar ex. 27.2: V 9.498, u 4.248, p < 0.0005; pingouin the digits and the normal p.
    assert_abs_diff_eq!(test.v, 9.497_612, epsilon = 1e-6);
    assert_abs_diff_eq!(test.u, 4.247_461, epsilon = 1e-6);
    assert_relative_eq!(test.p, 1.081_033e-5, max_relative = 1e-4);
    // mpmath; Zar's approximation by pingouin; Wilkie's series is negative here and must be clamped.
    assert_relative_eq!(rayleigh_p(10, m.resultant), 6.149_188e-7, max_relative = 1e-3);
    assert_relative_eq!(rayleigh_p_zar(10, m.resultant), 5.303_859e-6, max_relative = 1e-5);
    assert_abs_diff_eq!(rayleigh_p_wilkie(10, m.resultant), 0.0, epsilon = 0.0);
    // scipy vonmises.fit.
    assert_abs_diff_eq!(kappa(m.resultant), 10.717_031_07, epsilon = 1e-6);
}

#[test]
fn fisher_b5_axes() {
    let axes = data("fisher_B5_axes").unwrap();
    let mean = axial_mean(&axes).unwrap();
    // R circular and pingouin on doubled angles.
    assert_abs_diff_eq!(mean.axis_deg.unwrap(), 19.877_640_71, epsilon = 1e-4);
    assert_abs_diff_eq!(mean.resultant, 0.237_021_692, epsilon = 1e-6);
    assert_abs_diff_eq!(mean.kappa, 0.488_017_743, epsilon = 1e-6);
    assert_abs_diff_eq!(rayleigh_p_zar(60, mean.resultant), 0.033_695_24, epsilon = 1e-6);
    assert_abs_diff_eq!((-60.0 * mean.resultant * mean.resultant).exp(), 0.034_363_62, epsilon = 1e-6);
    // Fisher's table through pycircstat2's tests; R kuiper.test agrees.
    let doubled: Vec<f64> = axes.iter().map(|a| 2.0 * a).collect();
    assert_abs_diff_eq!(kuiper(&doubled).unwrap(), 1.586_39, epsilon = 1e-4);
    // numpy; V and u of axes follow from the alignment: V = n·alignment, u = V√(2/n).
    let value = alignment(axes.iter().map(|&a| (a, 1.0)), 90.0).unwrap();
    assert_abs_diff_eq!(value, -0.182_218_220_6, epsilon = 1e-8);
    let test = v_test(&doubled, 180.0).unwrap();
    assert_abs_diff_eq!(test.v, -10.933_093, epsilon = 1e-6);
    assert_abs_diff_eq!(test.u, -1.996_101, epsilon = 1e-6);
}

#[test]
fn fisher_b6_set_2() {
    let m = Moments::of_directions(&data("fisher_B6_set2").unwrap()).unwrap();
    // R circular, scipy.
    assert_abs_diff_eq!(m.mean_deg.unwrap(), 247.616_562_9, epsilon = 1e-5);
    assert_abs_diff_eq!(m.dispersion(), 0.517_297, epsilon = 1e-5);
    assert_abs_diff_eq!(kappa(m.resultant), 2.675_733_78, epsilon = 1e-5);
    assert_relative_eq!(rayleigh_p(30, m.resultant), 1.7474e-10, max_relative = 0.2);
    // Fisher p. 78: 232.7 to 262.5.
    let half = m.fisher_half_width(0.95).unwrap();
    assert_abs_diff_eq!(m.mean_deg.unwrap() - half, 232.702_522_18, epsilon = 1e-3);
    assert_abs_diff_eq!(m.mean_deg.unwrap() + half, 262.530_603_6, epsilon = 1e-3);
}

#[test]
fn von_mises_sample() {
    let degrees: Vec<f64> = data("circstats_vm_rad").unwrap().iter().map(|r| r.to_degrees()).collect();
    let m = Moments::of_directions(&degrees).unwrap();
    // R CircStats `vm.ml` (through astropy's tests): μ 3.006514; exact κ by scipy.
    assert_abs_diff_eq!(m.mean_deg.unwrap().to_radians(), 3.006_514_317_8, epsilon = 1e-6);
    assert_abs_diff_eq!(kappa(m.resultant), 1.480_706_458_9, epsilon = 1e-6);
}

#[test]
fn concentration_from_resultant() {
    // scipy ive + brentq.
    let known = [
        (0.1, 0.201_008_4),
        (0.3, 0.629_215_4),
        (0.5, 1.159_319_9),
        (0.7, 2.013_627_8),
        (0.9, 5.304_689_1),
        (0.99, 50.253_847_4),
    ];
    for (resultant, expected) in known {
        assert_relative_eq!(kappa(resultant), expected, max_relative = 3e-7);
    }
}

/// Number of simulated runs: `full` with `VEERLOG_FULL=1` in the environment, else `reduced`.
fn runs(full: usize, reduced: usize) -> usize {
    if std::env::var_os("VEERLOG_FULL").is_some_and(|v| v == "1") { full } else { reduced }
}

/// Isotropic filament axes, strong correlation within filaments: p-values must be uniform.
#[test]
fn full_p_values_are_uniform_without_a_preferred_axis() {
    for p in isotropic_p_values(runs(500, 100), 31) {
        assert!(p.unwrap() > 0.01, "{p:?}");
    }
}

/// 95 % intervals of alignment must hold the law's alignment in 90–98 % of runs with 8 to 20 filaments. The reduced set
/// allows three standard errors more on either side.
#[test]
fn full_alignment_intervals_cover() {
    let (n, slack) = (runs(200, 80), if runs(1, 0) == 1 { 0.0 } else { 0.073 });
    for spread in [5.0, 20.0, 45.0] {
        let share = alignment_coverage(n, 33, spread) as f64 / n as f64;
        assert!((0.90 - slack..=0.98 + slack).contains(&share), "spread {spread}: {share}");
    }
}

/// Runs that cross the gap with no effect of the load: the test rejects in at most 8 %, a turn is reported in at most 5 %.
#[test]
fn full_no_effect_is_reported_as_none() {
    let rates = turn_rates(runs(500, 100) as u64, 35, 0.0);
    println!("{rates:?}");
    assert!(rates.rejected * 100 <= 8 * rates.runs, "{rates:?}");
    assert!(rates.reported * 100 <= 5 * rates.runs, "{rates:?}");
    assert!(rates.untested * 20 <= rates.runs, "{rates:?}");
}

/// Steps of 60–90° at 100–200 MPa, growth that follows at once or by 30 % of the way a frame, up to 4 frames late.
#[test]
fn full_turns_are_timed_within_two_frames() {
    for response in [1.0, 0.6, 0.3] {
        let rates = turn_rates(runs(200, 40) as u64, 37, response);
        println!("{response}: {rates:?}");
        assert!(rates.found * 100 >= 95 * rates.steps, "{rates:?}");
        assert!(rates.timed * 100 >= 97 * rates.found, "{rates:?}");
        assert!(rates.covered * 100 >= 88 * rates.found, "{rates:?}");
    }
}
