//! Whether a frame can be used, and the reason when not.
//! A frame is set aside only when nothing can be read from it: blank, clipped, or no likeness to the scene. A blurred or
//! noisy one stays, with its noise factor raised.

use ndarray::Array2;

use super::plane::{quantile, sample};

/// Pixels looked at.
const LOOKED_AT: usize = 50_000;
/// Spread between the 1st and 99th percentile under which a frame is blank, grey levels.
const BLANK_SPREAD: f32 = 1.5;
/// Share of pixels at the very darkest or brightest value from which a frame is clipped.
const CLIPPED_SHARE: f64 = 0.4;
/// Share of the usual likeness under which a frame shows something else.
const LIKENESS_SHARE: f64 = 0.25;
/// The usual likeness must exceed this many standard errors of a correlation before it can be missed.
const LIKENESS_SIGNIFICANCE: f64 = 12.0;
/// Noise over that of an ordinary frame from which nothing can be read.
const HOPELESS_NOISE: f32 = 25.0;

/// Reason to set a frame aside by its grey levels alone.
pub(crate) fn unreadable(frame: &Array2<f32>) -> Option<String> {
    let values = sample(frame, LOOKED_AT);
    if values.iter().any(|v| !v.is_finite()) {
        return Some("holds values that are no numbers".into());
    }
    let low = quantile(&mut values.clone(), 0.01)?;
    let high = quantile(&mut values.clone(), 0.99)?;
    if high - low < BLANK_SPREAD {
        return Some(format!("blank: 98 % of its pixels lie within {:.1} grey levels", high - low));
    }
    let (darkest, brightest) =
        values.iter().fold((f32::INFINITY, f32::NEG_INFINITY), |(a, b), &v| (a.min(v), b.max(v)));
    let share =
        |level: f32| values.iter().filter(|&&v| (v - level).abs() < f32::EPSILON).count() as f64 / values.len() as f64;
    for (level, name) in [(brightest, "saturated"), (darkest, "black")] {
        if share(level) > CLIPPED_SHARE {
            return Some(format!("{name}: {:.0} % of its pixels are at grey level {level}", 100.0 * share(level)));
        }
    }
    None
}

/// Reason to set a frame aside by its likeness to the scene: correlation of fine detail, `usual` among the bare frames,
/// over `pixels` pixels.
pub(crate) fn unlike(likeness: f64, usual: f64, pixels: usize) -> Option<String> {
    let error = 1.0 / (pixels.max(1) as f64).sqrt();
    (usual > LIKENESS_SIGNIFICANCE * error && likeness < LIKENESS_SHARE * usual).then(|| {
        format!("does not show the scene: correlation {likeness:.2} with the bare frames, {usual:.2} is usual")
    })
}

/// Reason to set a frame aside by the noise left after the fit.
pub(crate) fn hopeless(noise_factor: f32) -> Option<String> {
    (noise_factor > HOPELESS_NOISE)
        .then(|| format!("unreadable: its noise is {noise_factor:.0} times that of the bare frames"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_blank_and_a_saturated_frame_are_told() {
        let blank = Array2::from_elem((50, 60), 12.0);
        assert!(unreadable(&blank).is_some_and(|r| r.starts_with("blank")));
        let clipped = Array2::from_shape_fn((50, 60), |(y, x)| if x < 40 { 255.0 } else { (y * x % 97) as f32 });
        assert!(unreadable(&clipped).is_some_and(|r| r.starts_with("saturated")));
        let fine = Array2::from_shape_fn((50, 60), |(y, x)| 100.0 + ((y * 31 + x * 17) % 23) as f32);
        assert_eq!(unreadable(&fine), None);
    }

    #[test]
    fn likeness_is_missed_only_where_there_was_some() {
        assert!(unlike(0.02, 0.6, 40_000).is_some());
        assert!(unlike(0.5, 0.6, 40_000).is_none());
        assert!(unlike(0.0, 0.01, 40_000).is_none());
    }
}
