//! Line evidence in a picture that has no bare reference: how far a pixel's surroundings look like a line of either
//! polarity, at widths from about 2 to 25 px.
//!
//! Method: at every scale and orientation the mean along a short piece of line is compared with the means along both
//! of its flanks; the *lesser* of the two differences counts, so that a step edge, whose crest has only one flank, gives
//! nothing, and the median over three pieces in a row counts, so that a speck gives nothing. Scales from a pyramid of
//! halved planes (Burt & Adelson 1983, IEEE Trans. Commun. 31, 532–540), the Gaussian scale matched to the half width
//! (Lindeberg 1998, Int. J. Comput. Vis. 30, 117–154; both from memory). The difference is divided by what the *opposite* polarity shows
//! round about: texture has no preferred sign, filaments do.
//! Limit: texture whose own lines have the filaments' sign is not told from filaments.

use ndarray::{Array2, Zip};
use rayon::prelude::*;

use crate::scene::light::{Window, background};
use crate::scene::plane::{blur, quantile, rows_mut, sample};

/// Halvings of the plane.
const LEVELS: usize = 4;
/// Standard deviations of the Gaussians at each level, px of that level: half an octave apart.
const SIGMAS: [f32; 2] = [1.0, std::f32::consts::SQRT_2];
/// Orientations, evenly over 180°; a multiple of 4, so that mirrored and turned pictures are looked at alike.
pub(crate) const ORIENTATIONS: usize = 16;
/// Half the length of a piece, px of its level.
const PIECE: i32 = 2;
/// Distance between the middles of neighbouring pieces, px of its level.
const PIECE_STEP: f64 = 5.0;
/// Distance of the flanks from the middle, Gaussian standard deviations: where a matched bar has fallen to a few per cent.
const FLANK: f64 = 2.0;
/// Window over which clutter is pooled, px of its level.
const CLUTTER: Window = Window { block: 12, reach: 4 };
/// Clutter is never taken for less than this share of the picture's own.
const LEAST_CLUTTER: f32 = 0.5;
/// Power of the scale by which evidence is lowered: of a pair of lines or a line with a soft rim the finer reading is taken. Chosen by hand
/// between 0 and 0.5 with nine photographs in view, no source.
const COARSE: f32 = 0.25;
/// Evidence above which a line is clear, and casts a shadow at coarser scales.
const CLEAR: f32 = 8.0;
/// How far the shadow reaches, coarser Gaussian standard deviations.
const SHADOW: f32 = 2.0;

/// What a picture shows of lines of one polarity.
#[derive(Debug, Clone)]
pub(crate) struct Evidence {
    /// Contrast of a line here over the clutter's; 0 where there is none.
    pub z: Array2<f32>,
    /// Its orientation: steps of 180°/[`ORIENTATIONS`], from +x towards +y.
    pub angle: Array2<u8>,
    /// Its Gaussian scale, px: about its half width.
    pub sigma: Array2<f32>,
    /// Its contrast, in the plane's units.
    height: Array2<f32>,
}

impl Evidence {
    fn none(shape: (usize, usize)) -> Self {
        let zeros = || Array2::zeros(shape);
        Self { z: zeros(), angle: Array2::zeros(shape), sigma: zeros(), height: zeros() }
    }
}

/// Line evidence of `plane` (positive on filaments, what is not a number unknown) for filaments and for the opposite
/// polarity.
#[must_use]
pub(crate) fn look(plane: &Array2<f32>) -> [Evidence; 2] {
    let shape = plane.dim();
    let mut found = [Evidence::none(shape), Evidence::none(shape)];
    let mut level = plane.mapv(|v| if v.is_finite() { v } else { 0.0 });
    for halvings in 0..LEVELS {
        if halvings > 0 {
            level = halved(&level);
        }
        if level.nrows().min(level.ncols()) < 16 {
            break;
        }
        for sigma in SIGMAS {
            let answers = answers(&blur(&level, f64::from(sigma)), sigma);
            let clutter = clutter(&answers[1].height);
            for (best, answer) in found.iter_mut().zip(&answers) {
                best.take(answer, &clutter, halvings, sigma);
            }
        }
    }
    found
}

/// The greatest answer over orientations at one scale.
struct Answer {
    height: Array2<f32>,
    angle: Array2<u8>,
}

/// Answers of both polarities in one smoothed plane.
fn answers(smooth: &Array2<f32>, sigma: f32) -> [Answer; 2] {
    let shape = smooth.dim();
    let mut best = [(); 2].map(|()| Answer { height: Array2::zeros(shape), angle: Array2::zeros(shape) });
    for step in 0..ORIENTATIONS {
        let probe = Probe::new(step, f64::from(sigma));
        let along = probe.along(smooth);
        let [up, down] = &mut best;
        let lines = rows_mut(&mut up.height).zip(rows_mut(&mut up.angle));
        let under = rows_mut(&mut down.height).zip(rows_mut(&mut down.angle));
        lines.zip(under).for_each_init(
            || Pieces::new(shape.1),
            |pieces, (((row, up), (_, up_angle)), ((_, down), (_, down_angle)))| {
                pieces.read(&probe, &along, row);
                pieces.raise(0, up, up_angle, step as u8);
                pieces.raise(1, down, down_angle, step as u8);
            },
        );
    }
    best
}

/// What the three pieces answer along a row, for both polarities.
struct Pieces {
    /// Middle, left and right of a piece.
    means: [Vec<f32>; 3],
    /// By piece and polarity.
    lines: [[Vec<f32>; 2]; 3],
}

impl Pieces {
    fn new(width: usize) -> Self {
        let blank = || vec![0.0; width];
        Self { means: [(); 3].map(|()| blank()), lines: [(); 3].map(|()| [blank(), blank()]) }
    }

    fn read(&mut self, probe: &Probe, along: &Array2<f32>, row: usize) {
        for (places, lines) in probe.places.iter().zip(&mut self.lines) {
            for (offset, means) in places.iter().zip(&mut self.means) {
                means.fill(0.0);
                add_shifted(means, along, row, *offset);
            }
            let [middle, left, right] = &self.means;
            let [up, down] = lines;
            for (((m, (l, r)), up), down) in middle.iter().zip(left.iter().zip(right)).zip(up).zip(down) {
                (*up, *down) = (lesser(m - l, m - r), lesser(l - m, r - m));
            }
        }
    }

    /// Takes the median of the pieces where it is greater than what was found before.
    fn raise(&self, polarity: usize, best: &mut [f32], angle: &mut [u8], step: u8) {
        let [a, b, c] = [0, 1, 2].map(|piece: usize| &self.lines[piece][polarity]);
        for (x, (best, angle)) in best.iter_mut().zip(angle).enumerate() {
            let value = middle_of(a[x], b[x], c[x]);
            if value > *best {
                (*best, *angle) = (value, step);
            }
        }
    }
}

/// Offsets (row, column) of one orientation.
struct Probe {
    piece: Vec<[i32; 2]>,
    /// Middle, left and right of each of the three pieces.
    places: [[[i32; 2]; 3]; 3],
}

impl Probe {
    fn new(step: usize, sigma: f64) -> Self {
        let angle = std::f64::consts::PI * step as f64 / ORIENTATIONS as f64;
        let (s, c) = (libm::sin(angle), libm::cos(angle));
        let place = |along: f64, across: f64| {
            [libm::round(along * s + across * c) as i32, libm::round(along * c - across * s) as i32]
        };
        let flank = (FLANK * sigma).max(2.0);
        let at = |along: f64| [place(along, 0.0), place(along, flank), place(along, -flank)];
        Self {
            piece: (-PIECE..=PIECE).map(|t| place(f64::from(t), 0.0)).collect(),
            places: [at(-PIECE_STEP), at(0.0), at(PIECE_STEP)],
        }
    }

    /// Mean along the piece about every pixel; NaN where the piece leaves the plane.
    fn along(&self, plane: &Array2<f32>) -> Array2<f32> {
        let mut out = Array2::<f32>::zeros(plane.dim());
        let share = 1.0 / self.piece.len() as f32;
        rows_mut(&mut out).for_each(|(row, line)| {
            self.piece.iter().for_each(|&offset| add_shifted(line, plane, row, offset));
            line.iter_mut().for_each(|v| *v *= share);
        });
        out
    }
}

/// Adds the plane's row `row + offset`, moved by the offset's columns; NaN where there is none.
fn add_shifted(line: &mut [f32], plane: &Array2<f32>, row: usize, offset: [i32; 2]) {
    let (width, right) = (line.len(), offset[1] as isize);
    let source = row.checked_add_signed(offset[0] as isize).filter(|&r| r < plane.nrows());
    let (Some(source), Some(all)) = (source.filter(|_| right.unsigned_abs() < width), plane.as_slice()) else {
        line.fill(f32::NAN);
        return;
    };
    let (from, to) = ((-right).max(0) as usize, width - right.max(0) as usize);
    line[..from].fill(f32::NAN);
    line[to..].fill(f32::NAN);
    let first = source * width + from.wrapping_add_signed(right);
    line[from..to].iter_mut().zip(&all[first..first + to - from]).for_each(|(a, b)| *a += b);
}

/// The lesser of two values; not a number when either is not.
fn lesser(a: f32, b: f32) -> f32 {
    if a.is_nan() || a < b { a } else { b }
}

/// Median of three, the lesser of two where one is unknown, 0 where more are.
fn middle_of(a: f32, b: f32, c: f32) -> f32 {
    if !(a + b + c).is_nan() {
        return a.min(b).max(a.max(b).min(c));
    }
    match (a.is_nan(), b.is_nan(), c.is_nan()) {
        (true, false, false) => b.min(c),
        (false, true, false) => a.min(c),
        (false, false, true) => a.min(b),
        _ => 0.0,
    }
}

/// What texture answers round about.
fn clutter(opposite: &Array2<f32>) -> Array2<f32> {
    let mut values: Vec<f32> = sample(opposite, 100_000);
    let usual = quantile(&mut values, 0.75).unwrap_or(0.0).max(f32::MIN_POSITIVE);
    let mut local = background(opposite, None, CLUTTER);
    let mut all: Vec<f32> = sample(&local, 100_000);
    // Scaled so that its median over the picture is the picture's own.
    let scale = usual / quantile(&mut all, 0.5).unwrap_or(0.0).max(f32::MIN_POSITIVE);
    local.mapv_inplace(|v| (v * scale).max(LEAST_CLUTTER * usual));
    local
}

impl Evidence {
    /// Takes the answers of a coarser scale where they are clearer than what was found at finer ones and are not the
    /// shadow of a clear finer line near by: a blurred thin line has less contrast than itself, a wide one has more.
    fn take(&mut self, answer: &Answer, clutter: &Array2<f32>, halvings: usize, sigma: f32) {
        let fine = (1usize << halvings) as f32;
        let own = sigma * fine;
        let share = libm::powf(own, -COARSE);
        let z = Zip::from(&answer.height).and(clutter).par_map_collect(|h, c| share * h / c);
        let clear = Zip::from(&self.z).and(&self.height).par_map_collect(|&z, &h| if z >= CLEAR { h } else { 0.0 });
        let cast = greatest_within(&clear, (SHADOW * own).round() as usize);
        let (rows, columns) = z.dim();
        Zip::indexed(&mut self.z)
            .and(&mut self.angle)
            .and(&mut self.sigma)
            .and(&mut self.height)
            .and(&cast)
            .par_for_each(|(r, c), best, angle, scale, height, &cast| {
                let y = ((r as f32 + 0.5) / fine - 0.5).clamp(0.0, (rows - 1) as f32);
                let x = ((c as f32 + 0.5) / fine - 0.5).clamp(0.0, (columns - 1) as f32);
                let nearest = [y.round() as usize, x.round() as usize];
                let value = between(&z, y, x);
                let contrast = answer.height[nearest];
                if value > *best && contrast >= cast {
                    (*best, *height) = (value, contrast);
                    *angle = answer.angle[nearest];
                    *scale = own;
                }
            });
    }
}

/// Bilinear value at (y, x), both inside the plane.
fn between(plane: &Array2<f32>, y: f32, x: f32) -> f32 {
    let (y0, x0) = (y.floor() as usize, x.floor() as usize);
    let (y1, x1) = ((y0 + 1).min(plane.nrows() - 1), (x0 + 1).min(plane.ncols() - 1));
    let (fy, fx) = (y - y0 as f32, x - x0 as f32);
    let top = plane[[y0, x0]] + fx * (plane[[y0, x1]] - plane[[y0, x0]]);
    let bottom = plane[[y1, x0]] + fx * (plane[[y1, x1]] - plane[[y1, x0]]);
    top + fy * (bottom - top)
}

/// Greatest value within a square of half side `reach` about every pixel.
fn greatest_within(plane: &Array2<f32>, reach: usize) -> Array2<f32> {
    let along_rows = |plane: &Array2<f32>| {
        let mut out = Array2::<f32>::zeros(plane.dim());
        rows_mut(&mut out).for_each(|(row, out)| {
            let line: Vec<f32> = plane.row(row).to_vec();
            for (at, value) in out.iter_mut().enumerate() {
                let span = at.saturating_sub(reach)..(at + reach + 1).min(line.len());
                *value = line[span].iter().fold(0.0f32, |a, &b| a.max(b));
            }
        });
        out.t().as_standard_layout().to_owned()
    };
    along_rows(&along_rows(plane))
}

/// Means of 2 × 2 pixels; the last ones may be of fewer.
fn halved(plane: &Array2<f32>) -> Array2<f32> {
    let (rows, columns) = plane.dim();
    Array2::from_shape_fn((rows.div_ceil(2), columns.div_ceil(2)), |(r, c)| {
        let block = (2 * r..(2 * r + 2).min(rows)).flat_map(|y| (2 * c..(2 * c + 2).min(columns)).map(move |x| [y, x]));
        let (sum, count) = block.fold((0.0, 0.0), |(sum, count), at| (sum + plane[at], count + 1.0));
        sum / count
    })
}
