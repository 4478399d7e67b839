//! The figures, one file each: `fn(&Results, Format) -> Option<Drawing>`. A figure that has nothing to
//! show is `None`, so that the page can say so in words instead of drawing empty axes.

mod alignment;
pub(in crate::report) mod arrival;
mod charge;
pub mod data;
mod depth;
mod electrical;
mod key;
mod kink;
mod load;
pub(in crate::report) mod overlay;
mod record;
mod rose;
mod speed;
mod steering;

use super::axes::{Panel, Range, TimeUnit};
use super::drawing::Drawing;
use crate::results::Results;

/// For which width a figure is laid out.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Format {
    /// A page's column or a double column in print.
    Wide,
    /// A phone or a single column in print.
    Narrow,
}

impl Format {
    /// Width of the drawing.
    pub fn width(self) -> f64 {
        match self {
            Self::Wide => 760.0,
            Self::Narrow => 350.0,
        }
    }

    fn is_narrow(self) -> bool {
        self == Self::Narrow
    }
}

/// A figure of the report.
pub struct Figure {
    /// File name without extension.
    pub name: &'static str,
    /// Its heading in the page.
    pub title: &'static str,
    /// How to read it.
    pub caption: &'static str,
    /// Draws it; `None` where there is nothing to show.
    pub draw: fn(&Results, Format) -> Option<Drawing>,
}

/// All figures, in the order of the page.
pub static FIGURES: [Figure; 10] = [
    Figure {
        name: "overlay",
        title: "What grew, and when",
        caption: "Last usable frame with every traced centre-line, coloured by the time it arrived.",
        draw: overlay::draw,
    },
    Figure {
        name: "depth",
        title: "How deep",
        caption: "Depth of the deepest filament from the plating edge, with two standard uncertainties. The fan is the last \
                  forecast: where contact with the far edge falls in 80 % and in 50 % of cases, given that it comes.",
        draw: depth::draw,
    },
    Figure {
        name: "forecast-record",
        title: "What was forecast when",
        caption: "Each column is the forecast as issued at that time, from what was known then. Where forecasts hold, the band \
                  narrows onto the time of contact.",
        draw: record::draw,
    },
    Figure {
        name: "rose",
        title: "Which way it grew",
        caption: "Directions of the growth pieces about the load axis of their time. The area of a petal is its share of the \
                  length; directions have no sign, so both halves are alike. The dashed ring is growth even in all directions.",
        draw: rose::draw,
    },
    Figure {
        name: "alignment",
        title: "Direction and load over time",
        caption: "Above: mean cos 2Δ of all that was traced (line) and of each frame's new pieces (dots); +1 runs along the load \
                  axis, −1 across it. Below: the load in force; the small strokes show its axis in the picture.",
        draw: alignment::draw,
    },
    Figure {
        name: "electrical",
        title: "The cell's log",
        caption: "Voltage, current and load on one clock. Current above zero plates at the plating edge.",
        draw: electrical::draw,
    },
    Figure {
        name: "steering",
        title: "Direction of new growth under the load",
        caption: "Each dot is a piece of new growth, as large as it is long, at its direction in the picture; the scale is half a \
                  turn, so its top and bottom are one direction. The broad line is the load axis (where the load pulls, growth is \
                  expected across it, along the dashed line); upright lines are steps of the load, a shaded band is the 95 % \
                  interval of the time at which growth turned.",
        draw: steering::draw,
    },
    Figure {
        name: "kink",
        title: "Turns, measured and by a model",
        caption: "A model, not a measurement: the kink of a pressed crack by the maximum tangential stress (Erdogan & Sih 1963, \
                  with the T-stress after Cotterell & Rice 1980). It takes the whole cell voltage for the overpotential, so the \
                  pressure is the most the metal can exert; with less of it the model turns further. Bars: 95 % interval, \
                  filaments as sampling units; pale dots rest on too few filaments for one.",
        draw: kink::draw,
    },
    Figure {
        name: "speed",
        title: "Tip speed against stress and current",
        caption: "Mean speed of a free end in each frame against the stress and the current then in force. What did not vary in \
                  this run takes no panel. Bars: median and quartiles. Frames of one run are not independent.",
        draw: speed::draw,
    },
    Figure {
        name: "charge",
        title: "Growth against charge",
        caption: "Depth of the deepest filament against the net charge passed (thin: what is still visible), and the volume of the \
                  visible track beside the metal that the charge deposits by Faraday's law.",
        draw: charge::draw,
    },
];

/// Space left of panels, for tick labels.
const LEFT: f64 = 52.0;
/// Space right of panels.
const RIGHT: f64 = 12.0;
/// Space above a panel, for its heading.
const ABOVE: f64 = 42.0;
/// Space below the lowest panel, for the time axis.
const BELOW: f64 = 44.0;

/// Panels of one width on one time axis, one below the other, and the height of the whole drawing.
fn stack<const N: usize>(format: Format, time: Range, sides: [(f64, Range); N]) -> ([Panel; N], f64) {
    let mut top = 0.0;
    let panels = sides.map(|(height, y)| {
        top += ABOVE;
        let width = format.width() - LEFT - RIGHT;
        let panel = Panel { left: LEFT, top, width, height, x: time, y };
        top += height;
        panel
    });
    (panels, top + BELOW)
}

/// From the first frame to the last, and the unit it is read in.
fn run_time(results: &Results) -> (Range, TimeUnit) {
    let last = results.frames.iter().map(|row| row.time_s).fold(0.0, f64::max);
    (Range::new(0.0, if last > 0.0 { last } else { 1.0 }), TimeUnit::of(last))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::drawing::{Point, Shape};
    use crate::report::example;

    /// Runs as they come: without a load, pulled, with a single frame, with no end in sight, at rest.
    fn odd_runs() -> Vec<(&'static str, Results)> {
        let change = |change: fn(&mut Results)| {
            let mut results = example::growing();
            change(&mut results);
            results
        };
        vec![
            ("growing", example::growing()),
            ("shorted", example::shorted()),
            ("still", example::still()),
            ("empty", Results::default()),
            (
                "no load",
                change(|r| {
                    r.load = Default::default();
                    r.frames.iter_mut().for_each(|row| {
                        (row.load_n, row.stress_mpa, row.load_direction_deg) = (None, None, None);
                    });
                    r.growth.iter_mut().for_each(|row| row.load_direction_deg = None);
                }),
            ),
            (
                "pulled",
                change(|r| {
                    r.load.stress_mpa.iter_mut().flatten().for_each(|s| *s = -*s);
                }),
            ),
            (
                "one frame",
                change(|r| {
                    r.frames.truncate(7);
                    r.frames.drain(..6);
                    r.forecasts.truncate(1);
                }),
            ),
            (
                "no end in sight",
                change(|r| {
                    r.forecasts
                        .iter_mut()
                        .for_each(|row| (row.p50_s, row.p75_s, row.p90_s) = (Some(1e9), Some(1e12), None));
                    r.summary.forecast = r.forecasts.last().cloned();
                }),
            ),
            (
                "at rest",
                change(|r| {
                    r.frames.iter_mut().for_each(|row| row.depth_um = row.depth_um.map(|_| 0.0));
                    r.facts.gap_um = None;
                    r.cell.current_ma.iter_mut().for_each(|i| *i = Some(0.0));
                }),
            ),
        ]
    }

    fn points(shape: &Shape) -> Vec<Point> {
        match shape {
            Shape::Line { points, .. } | Shape::Area { points, .. } => points.clone(),
            Shape::Disc { at, .. } | Shape::Text { at, .. } | Shape::Picture { at, .. } => {
                vec![*at]
            }
        }
    }

    #[test]
    fn every_mark_lies_on_the_paper() {
        for (name, results) in odd_runs() {
            for figure in &FIGURES {
                for format in [Format::Wide, Format::Narrow] {
                    let Some(drawing) = (figure.draw)(&results, format) else {
                        continue;
                    };
                    for shape in &drawing.shapes {
                        for [x, y] in points(shape) {
                            let inside =
                                (-1.0..=drawing.width + 1.0).contains(&x) && (-1.0..=drawing.height + 1.0).contains(&y);
                            assert!(inside, "{name}, {}, {format:?}: {shape:?}", figure.name);
                        }
                    }
                }
            }
        }
    }

    #[test]
    fn a_run_with_everything_shows_every_figure() {
        let results = example::growing();
        assert!(FIGURES.iter().all(|figure| (figure.draw)(&results, Format::Wide).is_some()));
    }
}
