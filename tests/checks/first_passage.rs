//! First passage of a drifting Brownian motion: a = 100, v = 2, σ = 5.
//! Mean and variance: Chhikara & Folks (1989), The Inverse Gaussian Distribution, chapter 2 (closed forms). Quantiles, cdf and
//! pdf: scipy 1.17.1, `invgauss(mu = mean / shape, scale = shape)`, confirmed there by numerical integration. Drift away from
//! the barrier: Cox & Miller (1965), section 5.7 (closed form).

use approx::assert_abs_diff_eq;
use veerlog::forecast::FirstPassage;

fn reference() -> Option<FirstPassage> {
    FirstPassage::new(100.0, 2.0, 5.0)
}

#[test]
fn mean_and_variance_are_the_inverse_gaussian_ones() {
    assert_abs_diff_eq!(reference().unwrap().mean().unwrap(), 50.0, epsilon = 1e-6);
    assert_abs_diff_eq!(reference().unwrap().variance().unwrap(), 312.5, epsilon = 1e-6);
    assert_abs_diff_eq!(reference().unwrap().mode(), 41.496_314, epsilon = 1e-6);
}

#[test]
fn quantiles_cdf_and_pdf_agree_with_scipy() {
    for (p, t) in [(0.1, 30.299_370), (0.5, 47.084_028), (0.9, 73.433_959)] {
        assert_abs_diff_eq!(reference().unwrap().quantile(p).unwrap(), t, epsilon = 1e-6);
    }
    for (t, p) in [(25.0, 0.031_517_058_8), (50.0, 0.568_499_728_8), (60.0, 0.756_926_040_6)] {
        assert_abs_diff_eq!(reference().unwrap().cdf(t), p, epsilon = 1e-9);
    }
    assert_abs_diff_eq!(reference().unwrap().pdf(50.0), 0.022_567_583_3, epsilon = 1e-9);
}

#[test]
fn moments_follow_from_the_density() {
    let step = 0.01;
    let (mut mass, mut first, mut second) = (0.0, 0.0, 0.0);
    for k in 0..60_000 {
        let t = (f64::from(k) + 0.5) * step;
        let density = reference().unwrap().pdf(t) * step;
        mass += density;
        first += t * density;
        second += t * t * density;
    }
    assert_abs_diff_eq!(mass, 1.0, epsilon = 1e-6);
    assert_abs_diff_eq!(first, 50.0, epsilon = 1e-3);
    assert_abs_diff_eq!(second - first * first, 312.5, epsilon = 0.1);
}

#[test]
fn without_drift_it_comes_surely_but_without_a_mean() {
    let still = FirstPassage::new(100.0, 0.0, 5.0).unwrap();
    assert_abs_diff_eq!(still.ever(), 1.0);
    assert_eq!(still.mean(), None);
    // median of the Lévy law: a²/(σ²·(Φ⁻¹(3/4))²)
    assert_abs_diff_eq!(still.quantile(0.5).unwrap(), 400.0 / (0.674_489_750_196_f64).powi(2), epsilon = 1e-5);
}

#[test]
fn drift_away_leaves_a_chance_of_never() {
    let away = FirstPassage::new(100.0, -0.1, 5.0).unwrap();
    let ever = (2.0 * -0.1 * 100.0 / 25.0_f64).exp();
    assert_abs_diff_eq!(away.ever(), ever, epsilon = 1e-12);
    assert_abs_diff_eq!(away.cdf(1e7), ever, epsilon = 1e-6);
    assert_eq!(away.quantile(ever + 0.01), None);
}
