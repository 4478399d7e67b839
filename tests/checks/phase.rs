//! Sub-pixel shift against the reference library's value and against the shift applied.
//! Source: `fixtures/phase/phase.provenance.md` (scikit-image 0.26.0, phase_cross_correlation; Guizar-Sicairos 2008).

use std::path::Path;

use ndarray::Array2;
use veerlog::scene::drift::{Spectrum, Whitening};

const TOLERANCE_PX: f64 = 0.02;

fn plane(name: &str, value: impl Fn(f32) -> f32) -> image::ImageResult<Array2<f32>> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/phase").join(name);
    let picture = image::open(path)?.into_luma16();
    let (width, height) = picture.dimensions();
    let grey = |(y, x): (usize, usize)| value(f32::from(picture.get_pixel(x as u32, y as u32)[0]));
    Ok(Array2::from_shape_fn((height as usize, width as usize), grey))
}

#[test]
fn a_fourier_shift_is_found_with_and_without_whitening() {
    // An 8-bit picture is widened to 16 bits by 257.
    let still = Spectrum::new(&plane("microaneurysms.png", |v| v / 257.0).unwrap());
    let moved = Spectrum::new(&plane("microaneurysms_shifted_u16.png", |v| v / 128.0 - 64.0).unwrap());
    for whitening in [Whitening::None, Whitening::Half, Whitening::Full] {
        let shift = still.shift_to(&moved, whitening, 100);
        // Rows are y. The scene moved by the shift applied: the negative of what brings it back.
        assert!((shift.px[0] - 5.31).abs() <= TOLERANCE_PX, "{whitening:?}: {shift:?}");
        assert!((shift.px[1] + 3.47).abs() <= TOLERANCE_PX, "{whitening:?}: {shift:?}");
        assert!(shift.peak > 6.0, "{whitening:?}: {shift:?}");
        let back = moved.shift_to(&still, whitening, 100);
        assert!((back.px[0] + shift.px[0]).abs() < TOLERANCE_PX && (back.px[1] + shift.px[1]).abs() < TOLERANCE_PX);
    }
}
