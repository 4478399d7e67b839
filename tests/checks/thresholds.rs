//! Thresholds against scikit-image 0.26.0; Otsu equals OpenCV 5.0.0.93 as well. Foreground is above the threshold.

use approx::assert_abs_diff_eq;
use ndarray::Array2;
use veerlog::trace::threshold::{otsu, sauvola::Sauvola, triangle};

/// Name, Otsu, triangle by scikit-image, triangle by OpenCV, pixels above Otsu.
const EXPECTED: [(&str, usize, usize, usize, u64); 6] = [
    ("camera", 102, 42, 43, 177_984),
    ("coins", 107, 80, 81, 45_117),
    ("page", 157, 206, 205, 46_818),
    ("text", 109, 104, 103, 66_801),
    ("gravel", 117, 67, 66, 167_035),
    ("microaneurysms", 93, 101, 100, 8_139),
];

#[test]
fn otsu_is_exact_and_triangle_within_the_libraries_difference() {
    let file: serde_json::Value =
        serde_json::from_str(include_str!("../../fixtures/threshold/histograms.json")).unwrap();
    for (name, by_otsu, by_skimage, by_opencv, above) in EXPECTED {
        let counts: Vec<u64> = serde_json::from_value(file["hist"][name].clone()).unwrap();
        assert_eq!(otsu(&counts), Some(by_otsu), "{name}");
        assert_eq!(counts[by_otsu + 1..].iter().sum::<u64>(), above, "{name}");
        let found = triangle(&counts).unwrap();
        assert!(found.abs_diff(by_skimage) <= 1 && found.abs_diff(by_opencv) <= 1, "{name}: {found}");
    }
}

#[test]
fn sauvola_on_a_photograph() {
    let file = image::open("fixtures/threshold/microaneurysms.png").unwrap().to_luma8();
    let values = Array2::from_shape_fn((file.height() as usize, file.width() as usize), |(row, column)| {
        f32::from(file.get_pixel(column as u32, row as u32)[0])
    });
    let sauvola = Sauvola { radius: 7, k: 0.2, range: 127.5 };
    let mut thresholds = Vec::new();
    sauvola.for_each_row(values.view(), |_, row| thresholds.extend_from_slice(row));
    let columns = values.ncols();
    assert_abs_diff_eq!(thresholds[0], 78.354_748_953, epsilon = 1e-6);
    assert_abs_diff_eq!(thresholds[51 * columns + 51], 77.895_931_009, epsilon = 1e-6);
    let mean = thresholds.iter().sum::<f64>() / thresholds.len() as f64;
    assert_abs_diff_eq!(mean, 80.566_114_779, epsilon = 1e-6);
    assert_eq!(sauvola.above(&values).iter().filter(|on| **on).count(), 9_987);
}
