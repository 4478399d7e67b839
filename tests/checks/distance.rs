//! Distance transform against scipy 1.17.1 `distance_transform_edt`: squares are integers and equal.

use approx::{assert_abs_diff_eq, assert_relative_eq};
use ndarray::Array2;
use veerlog::trace::graph::distance::distance;

#[test]
fn squares_equal_the_reference() {
    let file: serde_json::Value = serde_json::from_str(include_str!("../../fixtures/distance/edt.json")).unwrap();
    let expected = [
        ("rect5x7", 3.0, 53.0),
        ("slab_with_hole", 2.0, 45.656_854_249),
        ("diag_bar", 8.0_f32.sqrt(), 180.634_289_988),
        ("fork_Y", 3.0, 184.426_406_872),
    ];
    for (name, max, sum) in expected {
        let case = &file["cases"][name];
        let rows: Vec<String> = serde_json::from_value(case["mask"].clone()).unwrap();
        let squares: Vec<Vec<f32>> = serde_json::from_value(case["edt_squared"].clone()).unwrap();
        let mask =
            Array2::from_shape_fn((rows.len(), rows[0].len()), |(row, column)| rows[row].as_bytes()[column] == b'#');
        let found = distance(mask.view());
        for ((row, column), &value) in found.indexed_iter() {
            assert_abs_diff_eq!(value * value, squares[row][column], epsilon = 1e-5);
        }
        assert_abs_diff_eq!(found.iter().copied().fold(0.0, f32::max), max, epsilon = 1e-6);
        assert_abs_diff_eq!(found.iter().map(|&value| f64::from(value)).sum::<f64>(), sum, epsilon = 1e-5);
    }
}

#[test]
fn the_horse_has_its_largest_disc() {
    let file = image::open("fixtures/thinning/horse_mask.png").unwrap().to_luma8();
    let mask = Array2::from_shape_fn((file.height() as usize, file.width() as usize), |(row, column)| {
        file.get_pixel(column as u32, row as u32)[0] > 0
    });
    let found = distance(mask.view()).mapv(f64::from);
    // Half a unit in the last place of the stored f32 at 53 px is 2e-6.
    assert_abs_diff_eq!(found.iter().copied().fold(0.0, f64::max), 53.338_541_412, epsilon = 4e-6);
    assert_relative_eq!(found.sum(), 700_734.082_827, max_relative = 1e-8);
}

/// Closed form: a bar of odd width w along a row has 2·d − 1 = w on its middle.
#[test]
fn odd_bars_have_their_width() {
    for width in [1_usize, 3, 5, 9, 15] {
        let bar = Array2::from_shape_fn((width + 6, 40), |(row, _)| (3..3 + width).contains(&row));
        let middle = distance(bar.view())[[3 + width / 2, 20]];
        assert_abs_diff_eq!(2.0 * middle - 1.0, width as f32, epsilon = 1e-6);
    }
}

#[test]
fn no_background_is_infinitely_far_and_an_empty_mask_is_none() {
    assert!(distance(Array2::from_elem((3, 4), true).view()).iter().all(|value| value.is_infinite()));
    assert!(distance(Array2::from_elem((3, 4), false).view()).iter().all(|&value| value < 1e-9));
    assert_eq!(distance(Array2::from_elem((0, 0), false).view()).len(), 0);
}
