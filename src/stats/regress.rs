//! Ordinary least squares of a straight line, with standard errors.
//! Sums are centred on the means first, which keeps the digits of near-collinear data (Golub & Van Loan, 5.3).
//! Limit: independent errors of equal variance; growth curves are neither, so their rate uses [`super::theil_sen`].

use super::distributions::t_critical;

/// A fitted straight line y = intercept + slope·x.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Line {
    /// y at x = 0.
    pub intercept: f64,
    /// Change of y per unit of x.
    pub slope: f64,
    /// Standard error of the intercept; `None` with two points.
    pub se_intercept: Option<f64>,
    /// Standard error of the slope; `None` with two points.
    pub se_slope: Option<f64>,
    /// Residual standard deviation (divides by n − 2); `None` with two points.
    pub residual_sd: Option<f64>,
    /// Points used.
    pub n: usize,
}

impl Line {
    /// y on the line at `x`.
    #[must_use]
    pub fn at(&self, x: f64) -> f64 {
        self.intercept + self.slope * x
    }

    /// Interval of the slope by Student's t; `None` with two points.
    #[must_use]
    pub fn slope_interval(&self, confidence: f64) -> Option<[f64; 2]> {
        let half = self.se_slope? * t_critical(confidence, self.n as f64 - 2.0);
        Some([self.slope - half, self.slope + half])
    }
}

/// Least-squares line through points (x, y). `None` with under two points or all x equal.
///
/// ```
/// let line = veerlog::stats::regress::least_squares(&[(0.0, 1.0), (1.0, 3.0), (2.0, 5.0)]).unwrap();
/// assert!((line.slope - 2.0).abs() < 1e-12 && (line.intercept - 1.0).abs() < 1e-12);
/// ```
#[must_use]
pub fn least_squares(points: &[(f64, f64)]) -> Option<Line> {
    if points.len() < 2 {
        return None;
    }
    let n = points.len() as f64;
    let mean_x = points.iter().map(|p| p.0).sum::<f64>() / n;
    let mean_y = points.iter().map(|p| p.1).sum::<f64>() / n;
    let (mut sxx, mut sxy) = (0.0, 0.0);
    for (x, y) in points {
        sxx += (x - mean_x) * (x - mean_x);
        sxy += (x - mean_x) * (y - mean_y);
    }
    if sxx <= 0.0 {
        return None;
    }
    let slope = sxy / sxx;
    let intercept = mean_y - slope * mean_x;
    let residual_sd = (points.len() > 2).then(|| {
        let rss: f64 = points.iter().map(|(x, y)| y - mean_y - slope * (x - mean_x)).map(|e| e * e).sum();
        libm::sqrt(rss / (n - 2.0))
    });
    Some(Line {
        intercept,
        slope,
        se_intercept: residual_sd.map(|s| s * libm::sqrt(1.0 / n + mean_x * mean_x / sxx)),
        se_slope: residual_sd.map(|s| s / libm::sqrt(sxx)),
        residual_sd,
        n: points.len(),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_line_without_spread() {
        assert_eq!(least_squares(&[(1.0, 2.0)]), None);
        assert_eq!(least_squares(&[(1.0, 2.0), (1.0, 3.0)]), None);
    }

    #[test]
    fn two_points_have_no_error() {
        let line = least_squares(&[(0.0, 0.0), (2.0, 1.0)]).unwrap();
        assert_eq!(line.se_slope, None);
        assert_eq!(line.slope_interval(0.95), None);
        assert!((line.at(4.0) - 2.0).abs() < 1e-12);
    }
}
