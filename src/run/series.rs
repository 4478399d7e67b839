//! One logged quantity against time, held from each sample to the next.
//! A sample holds until the next one comes, at most `hold_s`; beyond it the value is absent. A value
//! given as a constant holds always. Lookup is a binary search; integrals use running sums.

/// A quantity at sorted, distinct times. All values are finite.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Series {
    /// Sample times, seconds since the first frame, rising.
    pub time_s: Vec<f64>,
    /// The values, one a time.
    pub value: Vec<f64>,
    /// How long the last sample before a gap stays in force, s; infinite for loggers of changes only.
    pub hold_s: f64,
    /// Set in place of samples: the quantity did not change.
    pub constant: Option<f64>,
    /// Integral up to each sample, value · s, and time covered up to it, s.
    running: Vec<(f64, f64)>,
}

impl Series {
    /// A series from sorted samples.
    #[must_use]
    pub fn new(time_s: Vec<f64>, value: Vec<f64>, hold_s: f64) -> Self {
        let mut series = Self { time_s, value, hold_s, constant: None, running: Vec::new() };
        let mut sum = (0.0, 0.0);
        for at in 0..series.time_s.len() {
            series.running.push(sum);
            let held = series.held(at, f64::INFINITY);
            sum = (sum.0 + series.value[at] * held, sum.1 + held);
        }
        series
    }

    /// A quantity that did not change.
    #[must_use]
    pub fn constant(value: f64) -> Self {
        Self { constant: Some(value), hold_s: f64::INFINITY, ..Self::default() }
    }

    /// The value in force at a time.
    ///
    /// ```
    /// use veerlog::run::Series;
    /// let force = Series::new(vec![0.0, 10.0, 20.0, 90.0], vec![1.0, 2.0, 3.0, 4.0], 30.0);
    /// assert_eq!(force.at(19.9), Some(2.0));
    /// assert_eq!(force.at(50.0), Some(3.0));
    /// assert_eq!(force.at(51.0), None); // the gap is longer than a sample holds
    /// assert_eq!(force.at(-1.0), None);
    /// ```
    #[must_use]
    pub fn at(&self, time_s: f64) -> Option<f64> {
        if self.constant.is_some() {
            return self.constant;
        }
        let last = self.last_before(time_s)?;
        (time_s - self.time_s[last] <= self.hold_s).then(|| self.value[last])
    }

    /// Integral of the value from `from_s` to `to_s` (value · s) and the time of it that is covered (s).
    #[must_use]
    pub fn integral(&self, from_s: f64, to_s: f64) -> (f64, f64) {
        if let Some(value) = self.constant {
            return (value * (to_s - from_s), to_s - from_s);
        }
        let upto = |time_s: f64| {
            self.last_before(time_s).map_or((0.0, 0.0), |last| {
                let held = self.held(last, time_s);
                let (sum, covered) = self.running[last];
                (sum + self.value[last] * held, covered + held)
            })
        };
        let (from, to) = (upto(from_s), upto(to_s));
        (to.0 - from.0, to.1 - from.1)
    }

    /// Smallest and largest value.
    #[must_use]
    pub fn range(&self) -> Option<(f64, f64)> {
        if let Some(value) = self.constant {
            return Some((value, value));
        }
        let low = self.value.iter().copied().reduce(f64::min)?;
        let high = self.value.iter().copied().reduce(f64::max)?;
        Some((low, high))
    }

    /// Index of the last sample at or before a time.
    fn last_before(&self, time_s: f64) -> Option<usize> {
        self.time_s.partition_point(|sample| *sample <= time_s).checked_sub(1)
    }

    /// How long sample `at` is in force before the next one and before `until`.
    fn held(&self, at: usize, until: f64) -> f64 {
        let start = self.time_s[at];
        let next = self.time_s.get(at + 1).copied().unwrap_or(until).min(until);
        let held = (next - start).min(self.hold_s);
        if held.is_finite() { held.max(0.0) } else { 0.0 }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_integral_holds_each_sample_and_knows_what_it_covers() {
        let current = Series::new(vec![0.0, 10.0, 100.0], vec![2.0, -1.0, 5.0], 20.0);
        assert_eq!(current.integral(0.0, 10.0), (20.0, 10.0));
        assert_eq!(current.integral(5.0, 15.0), (5.0, 10.0));
        // The sample at 10 s holds for 20 s of the 90 s to the next.
        assert_eq!(current.integral(0.0, 100.0), (0.0, 30.0));
        assert_eq!(current.integral(100.0, 500.0), (100.0, 20.0));
    }

    #[test]
    fn empty_one_and_constant() {
        assert_eq!(Series::default().at(0.0), None);
        assert_eq!(Series::default().range(), None);
        let one = Series::new(vec![5.0], vec![1.5], f64::INFINITY);
        assert_eq!((one.at(4.9), one.at(1e9)), (None, Some(1.5)));
        assert_eq!(Series::constant(3.0).at(-7.0), Some(3.0));
        assert_eq!(Series::constant(3.0).integral(1.0, 3.0), (6.0, 2.0));
    }

    proptest::proptest! {
        #[test]
        fn the_integral_equals_a_slow_sum(values in proptest::collection::vec(-5.0..5.0_f64, 1..9), hold in 1_u8..6) {
            let times: Vec<f64> = (0..values.len()).map(|at| f64::from(u8::try_from(at * at).unwrap())).collect();
            let series = Series::new(times, values, f64::from(hold));
            let slow: f64 = (0..300_u16).map(|at| series.at(f64::from(at) + 0.5).unwrap_or(0.0)).sum();
            let (fast, _) = series.integral(0.0, 300.0);
            proptest::prop_assert!((fast - slow).abs() < 1e-9, "{} {}", fast, slow);
        }
    }
}
