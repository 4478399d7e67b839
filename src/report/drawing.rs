//! A figure as a list of shapes in order of painting, in units of 1/96 inch, origin top left.
//! `svg` and `raster` paint the same list, so both files show the same figure.

use image::GrayImage;

use super::palette::Ink;

/// A point of a drawing: x to the right, y down.
pub type Point = [f64; 2];

/// A figure.
#[derive(Debug, Clone, PartialEq)]
pub struct Drawing {
    /// Width.
    pub width: f64,
    /// Height.
    pub height: f64,
    /// What it shows, for those who cannot see it.
    pub title: String,
    /// Painted in this order.
    pub shapes: Vec<Shape>,
}

/// Something painted.
#[derive(Debug, Clone, PartialEq)]
pub enum Shape {
    /// An open line.
    Line {
        /// Its corners.
        points: Vec<Point>,
        /// Colour.
        ink: Ink,
        /// Width.
        width: f64,
        /// Length of dash and gap; 0 for a full line.
        dash: f64,
        /// 0 to 1.
        opacity: f64,
    },
    /// A filled area.
    Area {
        /// Its corners.
        points: Vec<Point>,
        /// Colour.
        ink: Ink,
        /// 0 to 1.
        opacity: f64,
    },
    /// A filled disc.
    Disc {
        /// Centre.
        at: Point,
        /// Radius.
        radius: f64,
        /// Colour.
        ink: Ink,
        /// 0 to 1.
        opacity: f64,
    },
    /// A line of words.
    Text {
        /// Where it is anchored, on its base line.
        at: Point,
        /// The words.
        words: String,
        /// Height of the type.
        size: f64,
        /// Colour.
        ink: Ink,
        /// Which point of it stands at `at`.
        anchor: Anchor,
        /// Heavy type.
        bold: bool,
    },
    /// A grey picture.
    Picture {
        /// Top left corner.
        at: Point,
        /// Width and height on the drawing.
        size: Point,
        /// The picture.
        image: GrayImage,
    },
}

/// Which point of a line of words is anchored.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Anchor {
    /// Its start.
    Start,
    /// Its middle.
    Middle,
    /// Its end.
    End,
}

impl Drawing {
    /// An empty drawing on paper.
    pub fn new(width: f64, height: f64, title: impl Into<String>) -> Self {
        Self { width, height, title: title.into(), shapes: Vec::new() }
    }

    /// A full line; fewer than two points draw nothing.
    pub fn line(&mut self, points: Vec<Point>, ink: Ink, width: f64) {
        self.stroke(points, ink, width, 0.0, 1.0);
    }

    /// A dashed line; fewer than two points draw nothing.
    pub fn dashed(&mut self, points: Vec<Point>, ink: Ink, width: f64) {
        self.stroke(points, ink, width, 4.0, 1.0);
    }

    /// A line with all its properties.
    pub fn stroke(&mut self, points: Vec<Point>, ink: Ink, width: f64, dash: f64, opacity: f64) {
        if points.len() > 1 {
            self.shapes.push(Shape::Line { points, ink, width, dash, opacity });
        }
    }

    /// A filled area; fewer than three points draw nothing.
    pub fn area(&mut self, points: Vec<Point>, ink: Ink, opacity: f64) {
        if points.len() > 2 {
            self.shapes.push(Shape::Area { points, ink, opacity });
        }
    }

    /// A filled disc.
    pub fn disc(&mut self, at: Point, radius: f64, ink: Ink, opacity: f64) {
        self.shapes.push(Shape::Disc { at, radius, ink, opacity });
    }

    /// Words in the normal type.
    pub fn text(&mut self, at: Point, words: impl Into<String>, size: f64, ink: Ink, anchor: Anchor) {
        self.shapes.push(Shape::Text { at, words: words.into(), size, ink, anchor, bold: false });
    }

    /// Words in heavy type.
    pub fn bold(&mut self, at: Point, words: impl Into<String>, size: f64, ink: Ink, anchor: Anchor) {
        self.shapes.push(Shape::Text { at, words: words.into(), size, ink, anchor, bold: true });
    }
}

/// The part of a polygon with x at most `limit` (Sutherland & Hodgman 1974, one side).
pub fn clip_right(polygon: &[Point], limit: f64) -> Vec<Point> {
    let mut kept = Vec::with_capacity(polygon.len() + 2);
    for (i, &b) in polygon.iter().enumerate() {
        let a = polygon[(i + polygon.len() - 1) % polygon.len()];
        if (a[0] <= limit) != (b[0] <= limit) {
            let share = (limit - a[0]) / (b[0] - a[0]);
            kept.push([limit, a[1] + share * (b[1] - a[1])]);
        }
        if b[0] <= limit {
            kept.push(b);
        }
    }
    kept
}

/// At most about `4 × columns` of the points: of each run of equal column the first, lowest, highest
/// and last, so that the line looks the same. `points` rise in x.
pub fn thin(points: &[Point], columns: usize) -> Vec<Point> {
    let (Some(first), Some(last)) = (points.first(), points.last()) else {
        return Vec::new();
    };
    let step = (last[0] - first[0]) / columns.max(1) as f64;
    if points.len() <= 4 * columns || step <= 0.0 {
        return points.to_vec();
    }
    let column = |p: &Point| ((p[0] - first[0]) / step) as usize;
    points
        .chunk_by(|a, b| column(a) == column(b))
        .flat_map(|chunk| {
            let by_height = |&a: &usize, &b: &usize| chunk[a][1].total_cmp(&chunk[b][1]);
            let low = (0..chunk.len()).min_by(by_height).unwrap_or(0);
            let high = (0..chunk.len()).max_by(by_height).unwrap_or(0);
            let mut keep = [0, low, high, chunk.len() - 1];
            keep.sort_unstable();
            let mut kept: Vec<Point> = keep.iter().map(|&i| chunk[i]).collect();
            kept.dedup();
            kept
        })
        .collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn clipping_a_triangle_leaves_a_trapezium() {
        let cut = clip_right(&[[0.0, 0.0], [4.0, 4.0], [4.0, -4.0]], 2.0);
        assert_eq!(cut, [[2.0, -2.0], [0.0, 0.0], [2.0, 2.0]]);
        assert!(clip_right(&[[3.0, 0.0], [4.0, 4.0], [4.0, -4.0]], 2.0).is_empty());
    }

    #[test]
    fn thinning_keeps_the_peaks() {
        let mut points: Vec<Point> = (0..10_000).map(|i| [f64::from(i), 0.0]).collect();
        points[5_003][1] = 7.0;
        let thin = thin(&points, 100);
        assert!(thin.len() <= 404);
        assert!(thin.contains(&[5_003.0, 7.0]));
        assert_eq!(thin.last(), points.last());
    }
}
