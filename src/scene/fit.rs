//! Joint fit of one frame to the reference: shift, turn, light and sharpness together.
//! Model: frame(x + d) = L(x) · (R + Σ sₖ Bₖ)(x); L is a polynomial of second order, Bₖ = (Gaussian blur k of R) − R.
//! Method: Gauss–Newton with the reference's own gradient (Baker & Matthews 2004, Int. J. Comput. Vis. 56, 221) and
//! Tukey's biweight (c = 4.685). The score uses the gradient of the *smoothed* reference as an instrument, and what
//! the reference's own noise adds to the normal equations is taken off: noise then neither pulls the shift nor
//! feigns texture. A direction in which the picture tells nothing keeps the value guessed for it.
//! Limit: the start must lie within about two px of a level; `drift` finds it.

use ndarray::Array2;
use rayon::prelude::*;

use super::plane::{blur, gaussian_kernel, kernel_chain, kernel_dot, median, separable};
use super::resample::{Interpolator, Motion, centre};

/// Terms of the light polynomial: 1, u, v, u², uv, v², with u, v in −1..1 over the picture.
const LIGHT: usize = 6;
/// Blurs whose difference to the reference models a change of focus, px.
pub(crate) const BLURS: [f64; 2] = [0.8, 1.8];
/// Most of each blur that is taken from or added to the reference.
const BLUR_MOST: f64 = 1.5;
/// Weight of "as sharp as the reference" against the fit, as a share of what the reference's noise feigns.
const BLUR_DOUBT: f64 = 0.1;
const TURN: usize = LIGHT + BLURS.len();
const SHIFT: usize = TURN + 1;
const UNKNOWNS: usize = SHIFT + 2;

/// Tukey's biweight: 95 % efficient for normal errors. Holland & Welsch (1977), Commun. Stat. A6, 813.
const TUKEY: f32 = 4.685;
/// Smoothing of the gradient used as instrument, px.
const INSTRUMENT_SIGMA: f64 = 1.0;
/// Central difference of fourth order.
const DERIVATIVE: [f32; 5] = [1.0 / 12.0, -8.0 / 12.0, 0.0, 8.0 / 12.0, -1.0 / 12.0];
/// Standard deviation at which a direction counts as half unknown, px of the picture.
const UNSURE_PX: f64 = 1.0;
/// Texture counts from this share of what the reference's noise feigns (how well that noise is known),
const NOISE_DOUBT: f64 = 0.05;
/// plus this many times its scatter: the sum runs over pixels correlated over about five neighbours, three sigma.
const NOISE_SCATTER: f64 = 10.0;
/// Slope less than this many times what noise feigns must be confirmed by the frame's own slope,
const DOUBTFUL: f64 = 4.0;
/// of which at least this share must be found (a blurred frame shows less),
const CONFIRMED: f64 = 0.15;
/// and this many times its own scatter.
const CONFIRMED_SIGMA: f64 = 5.0;
/// Cosine from which two axes are one.
const SAME_DIRECTION: f64 = 0.8;
/// Shift below which the fit has settled, px of the level.
const SETTLED_PX: f64 = 0.002;
/// Pixels whose sums are taken in one piece: fixes the order of additions on any number of threads.
const PIECE: usize = 8192;
/// A turn is taken as real from this many standard uncertainties,
const TURN_SIGNIFICANCE: f64 = 5.0;
/// and from this much movement of the picture's corner, px.
const TURN_LEAST_PX: f64 = 0.1;

/// One pixel of a template.
#[derive(Debug, Clone, Copy)]
struct Pixel {
    x: f32,
    y: f32,
    value: f32,
    /// Gradient of the reference.
    raw: [f32; 2],
    /// Gradient of the smoothed reference.
    smooth: [f32; 2],
    /// Change of the reference by each blur, and the same smoothed.
    blurs: [f32; 2],
    smooth_blurs: [f32; 2],
    inverse_sd: f32,
    index: u32,
}

/// The reference at one level, reduced to what the fit needs.
pub(crate) struct Template {
    /// Binning of the level.
    pub(crate) bin: usize,
    shape: (usize, usize),
    pixels: Vec<Pixel>,
    /// Noise variance of the reference over that of a frame.
    noise_share: f64,
    /// What unit white noise in the reference adds per pixel to instrument × gradient.
    gradient_noise: f64,
    /// The same for blur j × blur k, and for blur j × the reference itself.
    blur_noise: [[f64; 2]; 2],
    blur_self: [f64; 2],
}

/// What the fit found.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) struct Fitted {
    pub(crate) light: [f64; LIGHT],
    pub(crate) blur: [f64; 2],
    pub(crate) motion: Motion,
    /// Robust standard deviation of the residual over the noise expected.
    pub(crate) noise: f64,
    /// Mean of Tukey's loss at the noise expected of the pixel, for comparing starts.
    pub(crate) cost: f64,
    /// Standard uncertainty along the worse and the better determined direction, px; infinite when nothing tells.
    pub(crate) u_shift: [f64; 2],
}

impl Fitted {
    /// A start: plain light, given shift.
    pub(crate) fn start(shift: [f64; 2]) -> Self {
        let mut light = [0.0; LIGHT];
        light[0] = 1.0;
        let motion = Motion { shift, turn: 0.0 };
        Self { light, blur: [0.0; 2], motion, noise: 1.0, cost: f64::INFINITY, u_shift: [f64::INFINITY; 2] }
    }

    /// Light over a picture of this shape.
    pub(crate) fn light_at(&self, shape: (usize, usize), x: f64, y: f64) -> f64 {
        dot(&self.light, &light_terms(shape, x, y))
    }

    /// Amplitude that detail of this wavelength (px) keeps against the reference; 1 = as sharp.
    pub(crate) fn transfer(&self, wavelength: f64) -> f64 {
        let exponent = |sigma: f64| -2.0 * (std::f64::consts::PI * sigma / wavelength).powi(2);
        1.0 + self.blur.iter().zip(BLURS).map(|(s, sigma)| s * (libm::exp(exponent(sigma)) - 1.0)).sum::<f64>()
    }
}

/// What unit white noise adds per pixel to smoothed blur j × blur k, and to smoothed blur j × the noise itself. The
/// kernels are G_s∗G_j − G_s and G_k − 1; two-dimensional Gaussians are products of two equal ones.
fn blur_noise(smoothing: &[f32]) -> ([[f64; 2]; 2], [f64; 2]) {
    let kernels = BLURS.map(gaussian_kernel);
    let chained = [0, 1].map(|j| kernel_chain(smoothing, &kernels[j]));
    let dot2 = |a: &[f32], b: &[f32]| kernel_dot(a, b).powi(2);
    let own = [0, 1].map(|j| dot2(&chained[j], &[1.0]) - dot2(smoothing, &[1.0]));
    let pairs = [0, 1].map(|j| [0, 1].map(|k| dot2(&chained[j], &kernels[k]) - dot2(smoothing, &kernels[k]) - own[j]));
    (pairs, own)
}

fn light_terms(shape: (usize, usize), x: f64, y: f64) -> [f64; LIGHT] {
    let (cx, cy) = centre(shape);
    let (u, v) = ((x - cx) / cx.max(1.0), (y - cy) / cy.max(1.0));
    [1.0, u, v, u * u, u * v, v * v]
}

fn dot<const N: usize>(a: &[f64; N], b: &[f64; N]) -> f64 {
    a.iter().zip(b).map(|(x, y)| x * y).sum()
}

impl Template {
    /// Prepares a level. `plane`: the reference binned by `bin`; `sd`: noise of one frame at each of its pixels;
    /// `noise_share`: the reference's own noise variance over one frame's; at most `most` pixels, the steepest of
    /// each tile.
    pub(crate) fn new(plane: &Array2<f32>, bin: usize, sd: &Array2<f32>, noise_share: f64, most: usize) -> Self {
        let gaussian = gaussian_kernel(INSTRUMENT_SIGMA);
        let smooth_slope = kernel_chain(&gaussian, &DERIVATIVE);
        let slopes = |along: &[f32], other: &[f32]| [separable(plane, along, other), separable(plane, other, along)];
        let raw = slopes(&DERIVATIVE, &[1.0]);
        let smooth = slopes(&smooth_slope, &gaussian);
        let blurs = BLURS.map(|sigma| blur(plane, sigma) - plane);
        let smooth_blurs = [0, 1].map(|j| blur(&blurs[j], INSTRUMENT_SIGMA));
        let pixels = informative(&smooth, most)
            .into_iter()
            .map(|(y, x)| Pixel {
                x: x as f32,
                y: y as f32,
                value: plane[[y, x]],
                raw: [raw[0][[y, x]], raw[1][[y, x]]],
                smooth: [smooth[0][[y, x]], smooth[1][[y, x]]],
                blurs: [blurs[0][[y, x]], blurs[1][[y, x]]],
                smooth_blurs: [smooth_blurs[0][[y, x]], smooth_blurs[1][[y, x]]],
                inverse_sd: 1.0 / sd[[y, x]],
                index: (y * plane.ncols() + x) as u32,
            })
            .collect();
        let (blur_noise, blur_self) = blur_noise(&gaussian);
        Self {
            bin,
            shape: plane.dim(),
            pixels,
            noise_share,
            gradient_noise: kernel_dot(&smooth_slope, &DERIVATIVE) * f64::from(gaussian[gaussian.len() / 2]),
            blur_noise,
            blur_self,
        }
    }

    /// Fits a frame (binned like the template) from `start`; `turning`: whether a turn may be looked for.
    pub(crate) fn fit(&self, view: &View<'_>, start: Fitted, turning: bool, steps: usize) -> Fitted {
        let mut state = self.scaled(start, 1.0 / self.bin as f64);
        let view = View { guess: view.guess.map(|g| g / self.bin as f64), ..*view };
        let last = self.settle(&view, &mut state, turning, &[], steps);
        let held = last.map_or(Vec::new(), |sums| self.unconfirmed(&view, &state, &sums));
        if !held.is_empty() {
            self.settle(&view, &mut state, turning, &held, steps);
        }
        self.residuals(&view, &mut state);
        self.scaled(state, self.bin as f64)
    }

    /// Gauss–Newton steps until the shift stays; `held`: directions that keep their guess. Returns the last sums.
    fn settle(
        &self,
        view: &View<'_>,
        state: &mut Fitted,
        turning: bool,
        held: &[[f64; 2]],
        steps: usize,
    ) -> Option<Sums> {
        let mut turn_free = state.motion.turns();
        let mut last = None;
        for step in 0..steps {
            let residuals = self.residuals(view, state)?;
            let sums = self.sums(&residuals, state);
            let update = self.solve(&sums, state, view.guess, held, turn_free)?;
            last = Some(sums);
            let moved = update.shift.map(f64::abs);
            state.motion.shift = [state.motion.shift[0] + update.shift[0], state.motion.shift[1] + update.shift[1]];
            state.light.iter_mut().zip(update.light).for_each(|(l, d)| *l += d);
            state.blur.iter_mut().zip(update.blur).for_each(|(s, d)| *s = (*s + d).clamp(-BLUR_MOST, BLUR_MOST));
            state.motion.turn += if turn_free { update.turn } else { 0.0 };
            state.u_shift = update.u_shift;
            let settled = moved[0].max(moved[1]) < SETTLED_PX && step > 1;
            if settled && turning && !turn_free && self.turn_is_real(&update) {
                turn_free = true;
            } else if settled {
                break;
            }
        }
        last
    }

    /// Directions in which the slope of the reference is not found again in the frame: there it was noise. Only asked
    /// where noise could feign the slope; the frame's own noise is independent of the reference's.
    fn unconfirmed(&self, view: &View<'_>, state: &Fitted, sums: &Sums) -> Vec<[f64; 2]> {
        let shift = [0, 1].map(|i| [0, 1].map(|k| sums.matrix[SHIFT + i][SHIFT + k]));
        let (values, axes) = eigen2(shift);
        let feigned = self.noise_share * sums.light_squared * self.gradient_noise;
        let doubtful = |i: &usize| values[*i] < DOUBTFUL * feigned;
        if !(0..2).any(|i| doubtful(&i)) {
            return Vec::new();
        }
        let seen = self.seen_slope(view, state);
        let confirmed = |i: &usize| {
            let found = quadratic(&seen, &axes[*i]);
            // A central difference of white noise has half its variance.
            let scatter = state.noise * (0.5 * quadratic(&sums.score_variance, &axes[*i])).sqrt();
            found > CONFIRMED * values[*i] && found > CONFIRMED_SIGMA * scatter
        };
        (0..2).filter(|i| doubtful(i) && !confirmed(i)).map(|i| axes[i]).collect()
    }

    /// Sums of instrument × the frame's own slope.
    fn seen_slope(&self, view: &View<'_>, state: &Fitted) -> [[f64; 2]; 2] {
        let (cx, cy) = centre(self.shape);
        let pieces: Vec<[[f64; 2]; 2]> = self
            .pixels
            .par_chunks(PIECE)
            .map(|pixels| {
                let mut sums = [[0.0; 2]; 2];
                for p in pixels.iter().filter(|p| !view.is_metal(p)) {
                    let (x, y) = state.motion.apply(f64::from(p.x) - cx, f64::from(p.y) - cy);
                    let at = |dx: f64, dy: f64| view.interpolator.at(view.frame, x + cx + dx, y + cy + dy);
                    let (Some(e), Some(w), Some(s), Some(n)) =
                        (at(1.0, 0.0), at(-1.0, 0.0), at(0.0, 1.0), at(0.0, -1.0))
                    else {
                        continue;
                    };
                    let scale = f64::from(p.inverse_sd * p.inverse_sd);
                    let slope = [e - w, s - n].map(|d| f64::from(d / 2.0) * scale);
                    for (row, z) in sums.iter_mut().zip(p.smooth) {
                        row.iter_mut().zip(slope).for_each(|(sum, g)| *sum += f64::from(z) * g);
                    }
                }
                sums
            })
            .collect();
        [0, 1].map(|i| [0, 1].map(|k| pieces.iter().map(|piece| piece[i][k]).sum()))
    }

    /// Converts lengths between px of the full picture and of the level.
    fn scaled(&self, mut state: Fitted, factor: f64) -> Fitted {
        state.motion.shift = state.motion.shift.map(|s| s * factor);
        state.u_shift = state.u_shift.map(|u| u * factor);
        state
    }

    fn turn_is_real(&self, update: &Update) -> bool {
        let corner = centre(self.shape);
        let moved = update.turn.abs() * corner.0.hypot(corner.1) * self.bin as f64;
        update.turn.abs() > TURN_SIGNIFICANCE * update.u_turn && moved > TURN_LEAST_PX
    }

    /// Residual of every pixel over its expected noise (NaN where left out); sets the state's noise and cost.
    fn residuals(&self, view: &View<'_>, state: &mut Fitted) -> Option<Vec<f32>> {
        let (cx, cy) = centre(self.shape);
        let residuals: Vec<f32> = self
            .pixels
            .par_iter()
            .map(|p| {
                if view.is_metal(p) {
                    return f32::NAN;
                }
                let (x, y) = state.motion.apply(f64::from(p.x) - cx, f64::from(p.y) - cy);
                let Some(value) = view.interpolator.at(view.frame, x + cx, y + cy) else {
                    return f32::NAN;
                };
                let light = state.light_at(self.shape, f64::from(p.x), f64::from(p.y)) as f32;
                let model = p.value + state.blur[0] as f32 * p.blurs[0] + state.blur[1] as f32 * p.blurs[1];
                (value - light * model) * p.inverse_sd
            })
            .collect();
        let step = (residuals.len() / 50_000).max(1) | 1;
        let mut sizes: Vec<f32> = residuals.iter().step_by(step).map(|r| r.abs()).collect();
        let middle = median(&mut sizes)?;
        state.noise = f64::from((super::plane::MAD_TO_SD * middle).max(1e-6));
        let limit = 2.0 * TUKEY;
        let loss = |r: f32| f64::from(1.0 - (1.0 - (r / limit).powi(2)).max(0.0).powi(3));
        let count = residuals.iter().filter(|r| r.is_finite()).count();
        let total: f64 = residuals.iter().filter(|r| r.is_finite()).map(|&r| loss(r)).sum();
        state.cost = total / count.max(1) as f64;
        Some(residuals)
    }

    /// Sums of the normal equations.
    fn sums(&self, residuals: &[f32], state: &Fitted) -> Sums {
        let cut = TUKEY * state.noise as f32;
        let pieces: Vec<Sums> = self
            .pixels
            .par_chunks(PIECE)
            .zip(residuals.par_chunks(PIECE))
            .map(|(pixels, residuals)| {
                let mut sums = Sums::default();
                for (pixel, &residual) in pixels.iter().zip(residuals) {
                    if residual.abs() < cut {
                        let ratio = residual / cut;
                        let weight = (1.0 - ratio * ratio).powi(2);
                        sums.add(self.shape, pixel, residual, weight, state);
                    }
                }
                sums
            })
            .collect();
        let mut total = Sums::default();
        pieces.iter().for_each(|piece| total.merge(piece));
        self.take_off_noise(&mut total, state);
        total
    }

    /// Removes from the normal equations what the reference's own noise adds on average.
    fn take_off_noise(&self, sums: &mut Sums, state: &Fitted) {
        let noise = self.noise_share * sums.light_squared;
        for axis in 0..2 {
            sums.matrix[SHIFT + axis][SHIFT + axis] -= noise * self.gradient_noise;
        }
        for j in 0..2 {
            for k in 0..2 {
                sums.matrix[LIGHT + j][LIGHT + k] -= noise * self.blur_noise[j][k];
            }
            let own = self.blur_self[j] + dot(&state.blur, &self.blur_noise[j]);
            sums.right[LIGHT + j] += noise * own;
            // Holds the focus terms where there is no texture to tell them.
            let doubt = 1.0 + BLUR_DOUBT * noise * self.blur_noise[j][j];
            sums.matrix[LIGHT + j][LIGHT + j] += doubt;
            sums.right[LIGHT + j] -= doubt * state.blur[j];
        }
    }

    /// One Gauss–Newton step.
    fn solve(
        &self,
        sums: &Sums,
        state: &Fitted,
        guess: [f64; 2],
        held: &[[f64; 2]],
        turn_free: bool,
    ) -> Option<Update> {
        let nuisance = if turn_free { SHIFT } else { TURN };
        let reduced = eliminate(sums, nuisance)?;
        let noise2 = state.noise * state.noise;
        let (eigenvalues, axes) = eigen2(reduced.shift);
        let feigned = self.noise_share * sums.light_squared * self.gradient_noise;
        let floor = feigned * (NOISE_DOUBT + NOISE_SCATTER / sums.count.max(1.0).sqrt());
        let unsure = UNSURE_PX / self.bin as f64;
        let mut shift = [0.0; 2];
        let mut u_shift = [f64::INFINITY; 2];
        for (i, axis) in axes.iter().enumerate() {
            let along = |v: [f64; 2]| v[0] * axis[0] + v[1] * axis[1];
            let to_guess = along([guess[0] - state.motion.shift[0], guess[1] - state.motion.shift[1]]);
            let score = along(reduced.score);
            let variance = noise2 * quadratic(&sums.score_variance, axis);
            let mut step = to_guess;
            let is_held = held.iter().any(|h| along(*h).abs() > SAME_DIRECTION);
            if eigenvalues[i] > floor && !is_held {
                let newton = score / eigenvalues[i];
                u_shift[i] = variance.max(0.0).sqrt() / eigenvalues[i];
                let keep = 1.0 / (1.0 + (u_shift[i] / unsure).powi(4));
                step = (to_guess + keep * (newton - to_guess)).clamp(-2.0, 2.0);
            }
            shift[0] += step * axis[0];
            shift[1] += step * axis[1];
        }
        let nuisances: Vec<f64> = (0..nuisance)
            .map(|i| reduced.rest[i][2] - reduced.rest[i][0] * shift[0] - reduced.rest[i][1] * shift[1])
            .collect();
        let (turn, u_turn) = if turn_free {
            (nuisances[TURN], 0.0)
        } else {
            let information = sums.matrix[TURN][TURN].max(f64::MIN_POSITIVE);
            (sums.right[TURN] / information, (noise2 * sums.turn_variance).sqrt() / information)
        };
        let mut light = [0.0; LIGHT];
        light.copy_from_slice(&nuisances[..LIGHT]);
        Some(Update { light, blur: [nuisances[LIGHT], nuisances[LIGHT + 1]], turn, u_turn, shift, u_shift })
    }
}

/// A frame as the fit sees it, binned like the template.
#[derive(Clone, Copy)]
pub(crate) struct View<'a> {
    pub(crate) interpolator: &'a Interpolator,
    pub(crate) frame: &'a Array2<f32>,
    /// Pixels left out.
    pub(crate) metal: Option<&'a Array2<bool>>,
    /// Shift kept in directions the picture does not tell, px of the full picture (of the level while fitting).
    pub(crate) guess: [f64; 2],
}

impl View<'_> {
    fn is_metal(&self, pixel: &Pixel) -> bool {
        self.metal.and_then(|m| m.as_slice()).is_some_and(|m| m[pixel.index as usize])
    }
}

/// A Gauss–Newton step.
struct Update {
    light: [f64; LIGHT],
    blur: [f64; 2],
    turn: f64,
    u_turn: f64,
    shift: [f64; 2],
    u_shift: [f64; 2],
}

/// Normal equations: instruments × model derivatives, and instruments × residual.
#[derive(Clone, Copy, Default)]
struct Sums {
    matrix: [[f64; UNKNOWNS]; UNKNOWNS],
    right: [f64; UNKNOWNS],
    score_variance: [[f64; 2]; 2],
    turn_variance: f64,
    light_squared: f64,
    count: f64,
}

impl Sums {
    fn add(&mut self, shape: (usize, usize), p: &Pixel, residual: f32, weight: f32, state: &Fitted) {
        let (x, y) = (f64::from(p.x), f64::from(p.y));
        let terms = light_terms(shape, x, y);
        let inverse_sd = f64::from(p.inverse_sd);
        let light = dot(&state.light, &terms) * inverse_sd;
        let value = f64::from(p.value) + state.blur[0] * f64::from(p.blurs[0]) + state.blur[1] * f64::from(p.blurs[1]);
        let (cx, cy) = centre(shape);
        let mut model = [0.0; UNKNOWNS];
        for (slot, term) in model.iter_mut().zip(terms) {
            *slot = value * inverse_sd * term;
        }
        model[LIGHT] = light * f64::from(p.blurs[0]);
        model[LIGHT + 1] = light * f64::from(p.blurs[1]);
        let mut instrument = model;
        instrument[LIGHT] = light * f64::from(p.smooth_blurs[0]);
        instrument[LIGHT + 1] = light * f64::from(p.smooth_blurs[1]);
        for (row, gradient) in [(&mut model, p.raw), (&mut instrument, p.smooth)] {
            let (gx, gy) = (f64::from(gradient[0]), f64::from(gradient[1]));
            row[TURN] = -light * (gx * (y - cy) - gy * (x - cx));
            row[SHIFT] = -light * gx;
            row[SHIFT + 1] = -light * gy;
        }
        let weight = f64::from(weight);
        for (i, z) in instrument.iter().enumerate() {
            let z = z * weight;
            self.right[i] += z * f64::from(residual);
            for (slot, m) in self.matrix[i].iter_mut().zip(&model) {
                *slot += z * m;
            }
        }
        for i in 0..2 {
            for k in 0..2 {
                self.score_variance[i][k] += weight * instrument[SHIFT + i] * instrument[SHIFT + k];
            }
        }
        self.turn_variance += weight * instrument[TURN] * instrument[TURN];
        self.light_squared += weight * light * light / (inverse_sd * inverse_sd);
        self.count += weight;
    }

    fn merge(&mut self, other: &Self) {
        let pairs = self.matrix.iter_mut().flatten().zip(other.matrix.iter().flatten());
        pairs.for_each(|(a, b)| *a += b);
        self.right.iter_mut().zip(other.right).for_each(|(a, b)| *a += b);
        let pairs = self.score_variance.iter_mut().flatten().zip(other.score_variance.iter().flatten());
        pairs.for_each(|(a, b)| *a += b);
        self.turn_variance += other.turn_variance;
        self.light_squared += other.light_squared;
        self.count += other.count;
    }
}

/// The equations for the shift alone, and how the rest follows from it.
struct Reduced {
    shift: [[f64; 2]; 2],
    score: [f64; 2],
    /// For each other unknown: its response to the shift's two components, and its value without them.
    rest: Vec<[f64; 3]>,
}

/// Eliminates the first `nuisance` unknowns.
fn eliminate(sums: &Sums, nuisance: usize) -> Option<Reduced> {
    let mut matrix: Vec<Vec<f64>> = (0..nuisance).map(|i| sums.matrix[i][..nuisance].to_vec()).collect();
    let mut rest: Vec<[f64; 3]> =
        (0..nuisance).map(|i| [sums.matrix[i][SHIFT], sums.matrix[i][SHIFT + 1], sums.right[i]]).collect();
    solve_in_place(&mut matrix, &mut rest)?;
    let mut shift = [[0.0; 2]; 2];
    let mut score = [0.0; 2];
    for i in 0..2 {
        let row = &sums.matrix[SHIFT + i];
        for k in 0..2 {
            shift[i][k] = row[SHIFT + k] - (0..nuisance).map(|j| row[j] * rest[j][k]).sum::<f64>();
        }
        score[i] = sums.right[SHIFT + i] - (0..nuisance).map(|j| row[j] * rest[j][2]).sum::<f64>();
    }
    let cross = (shift[0][1] + shift[1][0]) / 2.0;
    shift[0][1] = cross;
    shift[1][0] = cross;
    Some(Reduced { shift, score, rest })
}

/// Gaussian elimination with partial pivoting on unknowns scaled by their diagonal; `None` when singular.
fn solve_in_place(matrix: &mut [Vec<f64>], right: &mut [[f64; 3]]) -> Option<()> {
    let n = matrix.len();
    let scale: Vec<f64> = (0..n).map(|i| matrix[i][i].abs().sqrt().max(f64::MIN_POSITIVE)).collect();
    for i in 0..n {
        (0..n).for_each(|k| matrix[i][k] /= scale[i] * scale[k]);
        right[i].iter_mut().for_each(|r| *r /= scale[i]);
    }
    for col in 0..n {
        let pivot = (col..n).max_by(|&a, &b| matrix[a][col].abs().total_cmp(&matrix[b][col].abs()))?;
        if matrix[pivot][col].abs() < 1e-10 {
            return None;
        }
        matrix.swap(col, pivot);
        right.swap(col, pivot);
        let (pivot_row, pivot_right) = (matrix[col].clone(), right[col]);
        for row in (0..n).filter(|&row| row != col) {
            let factor = matrix[row][col] / pivot_row[col];
            matrix[row].iter_mut().zip(&pivot_row).skip(col).for_each(|(m, p)| *m -= factor * p);
            right[row].iter_mut().zip(pivot_right).for_each(|(r, p)| *r -= factor * p);
        }
    }
    for i in 0..n {
        right[i].iter_mut().for_each(|r| *r /= matrix[i][i] * scale[i]);
    }
    Some(())
}

/// Eigenvalues (ascending) and unit eigenvectors of a symmetric 2 × 2 matrix.
fn eigen2(m: [[f64; 2]; 2]) -> ([f64; 2], [[f64; 2]; 2]) {
    let (half, mean) = ((m[0][0] - m[1][1]) / 2.0, f64::midpoint(m[0][0], m[1][1]));
    let radius = half.hypot(m[0][1]);
    let angle = 0.5 * libm::atan2(m[0][1], half);
    let (sin, cos) = (libm::sin(angle), libm::cos(angle));
    ([mean - radius, mean + radius], [[-sin, cos], [cos, sin]])
}

fn quadratic(m: &[[f64; 2]; 2], v: &[f64; 2]) -> f64 {
    v[0] * (m[0][0] * v[0] + m[0][1] * v[1]) + v[1] * (m[1][0] * v[0] + m[1][1] * v[1])
}

/// Side of the tiles within which pixels are chosen, px.
const TILE: usize = 32;

/// The (row, col) of at most about `most` pixels: the same share of each tile, its steepest; all when they fit.
fn informative(gradient: &[Array2<f32>; 2], most: usize) -> Vec<(usize, usize)> {
    let (height, width) = gradient[0].dim();
    let everywhere = |y0: usize, x0: usize, y1: usize, x1: usize| -> Vec<(usize, usize)> {
        (y0..y1).flat_map(|y| (x0..x1).map(move |x| (y, x))).collect()
    };
    if height * width <= most {
        return everywhere(0, 0, height, width);
    }
    let share = most as f64 / (height * width) as f64;
    let mut chosen = Vec::with_capacity(most);
    for y0 in (0..height).step_by(TILE) {
        for x0 in (0..width).step_by(TILE) {
            let mut tile = everywhere(y0, x0, (y0 + TILE).min(height), (x0 + TILE).min(width));
            let keep = ((tile.len() as f64 * share).round() as usize).clamp(1, tile.len());
            let steepness = |&(y, x): &(usize, usize)| gradient[0][[y, x]].powi(2) + gradient[1][[y, x]].powi(2);
            tile.sort_by(|a, b| steepness(b).total_cmp(&steepness(a)).then(a.cmp(b)));
            tile.truncate(keep);
            tile.sort_unstable();
            chosen.extend(tile);
        }
    }
    chosen
}
