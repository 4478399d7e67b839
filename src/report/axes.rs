//! Panels: a rectangle of a drawing with a scale on each side. Quantities are written level, above the
//! panel, as "quantity (unit)"; grid lines are horizontal only, the eye follows time along the bottom.

use super::drawing::{Anchor, Drawing, Point};
use super::palette::Ink;
use super::words::fixed;

/// Height of tick labels.
pub const SMALL: f64 = 11.0;
/// Height of headings of panels and of names on lines.
pub const NORMAL: f64 = 12.5;

/// A linear scale: the values at the two ends of a side.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Range {
    /// Value at the left or bottom.
    pub low: f64,
    /// Value at the right or top, above `low`.
    pub high: f64,
}

impl Range {
    /// From `low` to `high`, made one wide where they do not differ.
    pub fn new(low: f64, high: f64) -> Self {
        if high - low > f64::EPSILON * low.abs().max(high.abs()) {
            Self { low, high }
        } else {
            Self { low: low - 0.5, high: low + 0.5 }
        }
    }

    /// Around finite `values`, widened to whole ticks; `None` without any.
    pub fn around(values: impl IntoIterator<Item = f64>) -> Option<Self> {
        let (low, high) = values
            .into_iter()
            .filter(|v| v.is_finite())
            .fold((f64::INFINITY, f64::NEG_INFINITY), |(l, h), v| (l.min(v), h.max(v)));
        (low <= high).then(|| {
            let raw = Self::new(low, high);
            let step = step(raw.high - raw.low, 5);
            Self { low: (raw.low / step).floor() * step, high: (raw.high / step).ceil() * step }
        })
    }

    /// Round values inside, about `count` of them.
    pub fn ticks(self, count: usize) -> Vec<f64> {
        let step = step(self.high - self.low, count);
        let (first, last) = ((self.low / step - 1e-9).ceil() as i64, (self.high / step + 1e-9).floor() as i64);
        (first..=last).map(|i| i as f64 * step).collect()
    }
}

/// 1, 2 or 5 times a power of ten, the nearest step that gives at most `count` intervals.
fn step(span: f64, count: usize) -> f64 {
    let raw = span / count.max(1) as f64;
    let power = 10_f64.powf(raw.log10().floor());
    let lead = [1.0, 2.0, 5.0].into_iter().find(|m| m * power >= raw * (1.0 - 1e-9)).unwrap_or(10.0);
    lead * power
}

/// Tick labels with as many decimals as their step needs.
fn labels(ticks: &[f64]) -> Vec<String> {
    let gap = ticks.windows(2).map(|p| p[1] - p[0]).fold(f64::INFINITY, f64::min);
    let decimals = if gap.is_finite() { (-(gap * 1.000_1).log10().floor()).max(0.0) as usize } else { 2 };
    ticks.iter().map(|t| fixed(*t, decimals)).collect()
}

/// The unit in which a span of time is best read.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TimeUnit {
    /// Its sign.
    pub name: &'static str,
    /// Its length.
    pub seconds: f64,
}

impl TimeUnit {
    /// Seconds up to 5 min, minutes up to 4 h, hours up to 4 d, then days.
    pub fn of(span_s: f64) -> Self {
        let (name, seconds) = match span_s {
            s if s <= 300.0 => ("s", 1.0),
            s if s <= 4.0 * 3_600.0 => ("min", 60.0),
            s if s <= 96.0 * 3_600.0 => ("h", 3_600.0),
            _ => ("d", 86_400.0),
        };
        Self { name, seconds }
    }
}

/// A rectangle with its scales.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Panel {
    /// Left side on the drawing.
    pub left: f64,
    /// Top.
    pub top: f64,
    /// Width.
    pub width: f64,
    /// Height.
    pub height: f64,
    /// Scale from left to right.
    pub x: Range,
    /// Scale from bottom to top.
    pub y: Range,
}

impl Panel {
    /// Where the values stand on the drawing.
    pub fn at(&self, x: f64, y: f64) -> Point {
        [self.across(x), self.up(y)]
    }

    /// Where an x value stands.
    pub fn across(&self, x: f64) -> f64 {
        self.left + self.width * (x - self.x.low) / (self.x.high - self.x.low)
    }

    /// Where a y value stands.
    pub fn up(&self, y: f64) -> f64 {
        self.top + self.height * (1.0 - (y - self.y.low) / (self.y.high - self.y.low))
    }

    /// The right side.
    pub fn right(&self) -> f64 {
        self.left + self.width
    }

    /// The lower side.
    pub fn bottom(&self) -> f64 {
        self.top + self.height
    }

    /// The heading, grid lines and values of the upright scale.
    pub fn draw_y(&self, drawing: &mut Drawing, heading: &str, ink: Ink) {
        drawing.bold([0.0, self.top - 16.0], heading, NORMAL, ink, Anchor::Start);
        let ticks = self.y.ticks((self.height / 34.0).floor().clamp(2.0, 6.0) as usize);
        for (value, label) in ticks.iter().zip(labels(&ticks)) {
            let y = self.up(*value);
            drawing.line(vec![[self.left, y], [self.right(), y]], Ink::Grid, 1.0);
            drawing.text([self.left - 7.0, y + 4.0], label, SMALL, Ink::Quiet, Anchor::End);
        }
    }

    /// The time along the bottom, in `unit`, with its heading at the right end.
    pub fn draw_time(&self, drawing: &mut Drawing, unit: TimeUnit) {
        let scaled = Range { low: self.x.low / unit.seconds, high: self.x.high / unit.seconds };
        let heading = format!("time ({})", unit.name);
        self.draw_bottom(drawing, &heading, unit.seconds, &scaled.ticks(self.room()));
    }

    /// A quantity along the bottom, with its heading at the right end.
    pub fn draw_x(&self, drawing: &mut Drawing, heading: &str) {
        self.draw_bottom(drawing, heading, 1.0, &self.x.ticks(self.room()));
    }

    /// A quantity along the bottom with ticks of one's own, as angles need them.
    pub fn draw_x_at(&self, drawing: &mut Drawing, heading: &str, ticks: &[f64]) {
        self.draw_bottom(drawing, heading, 1.0, ticks);
    }

    /// Ticks that the lower scale has room for.
    fn room(&self) -> usize {
        (self.width / 62.0).floor().clamp(2.0, 9.0) as usize
    }

    /// The lower scale: ticks in units of `unit`.
    fn draw_bottom(&self, drawing: &mut Drawing, heading: &str, unit: f64, ticks: &[f64]) {
        let y = self.bottom();
        drawing.line(vec![[self.left, y], [self.right(), y]], Ink::Quiet, 1.0);
        for (value, label) in ticks.iter().zip(labels(ticks)) {
            let x = self.across(value * unit);
            drawing.line(vec![[x, y], [x, y + 5.0]], Ink::Quiet, 1.0);
            drawing.text([x, y + 18.0], label, SMALL, Ink::Quiet, Anchor::Middle);
        }
        drawing.bold([self.right(), y + 36.0], heading, NORMAL, Ink::Quiet, Anchor::End);
    }

    /// A line through those samples that are there, broken where they are not.
    pub fn line(&self, drawing: &mut Drawing, samples: impl Iterator<Item = (f64, Option<f64>)>, ink: Ink, width: f64) {
        for run in runs(samples) {
            let points = run.iter().map(|[x, y]| self.at(*x, *y)).collect::<Vec<_>>();
            if let [alone] = points[..] {
                drawing.disc(alone, width, ink, 1.0);
            }
            drawing.line(super::drawing::thin(&points, self.width as usize), ink, width);
        }
    }

    /// Like [`Panel::line`], each sample holding until the next.
    pub fn steps(
        &self,
        drawing: &mut Drawing,
        samples: impl Iterator<Item = (f64, Option<f64>)>,
        ink: Ink,
        width: f64,
    ) {
        let mut held = Vec::new();
        let mut last: Option<Option<f64>> = None;
        for (x, y) in samples {
            if let Some(before) = last {
                held.push((x, before));
            }
            held.push((x, y));
            last = Some(y);
        }
        if let Some(Some(value)) = last {
            held.push((self.x.high, Some(value)));
        }
        self.line(drawing, held.into_iter().filter(|(x, _)| *x <= self.x.high), ink, width);
    }
}

/// The stretches of samples that are there.
fn runs(samples: impl Iterator<Item = (f64, Option<f64>)>) -> Vec<Vec<Point>> {
    let mut all: Vec<Vec<Point>> = vec![Vec::new()];
    for (x, y) in samples {
        match (y, all.last_mut()) {
            (Some(y), Some(run)) => run.push([x, y]),
            _ => all.push(Vec::new()),
        }
    }
    all.retain(|run| !run.is_empty());
    all
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ticks_are_round_and_inside() {
        assert_eq!(Range::new(0.0, 944.0).ticks(5), [0.0, 200.0, 400.0, 600.0, 800.0]);
        assert_eq!(labels(&Range::new(-1.0, 1.0).ticks(4)), ["−1.0", "−0.5", "0.0", "0.5", "1.0"]);
        assert_eq!(Range::around([3.0, 3.0]).map(|r| r.low < 3.0 && r.high > 3.0), Some(true));
        assert_eq!(Range::around([]), None);
    }

    #[test]
    fn gaps_break_a_line() {
        let samples = [(0.0, Some(1.0)), (1.0, None), (2.0, Some(2.0)), (3.0, Some(2.0))];
        assert_eq!(runs(samples.into_iter()), [vec![[0.0, 1.0]], vec![[2.0, 2.0], [3.0, 2.0]]]);
    }
}
