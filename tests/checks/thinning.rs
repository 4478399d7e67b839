//! Thinning against OpenCV 5.0.0.93 (`THINNING_GUOHALL`; Guo & Hall 1989): the same pixels.

use ndarray::Array2;
use veerlog::trace::{thin::thin, threshold::for_each_component};

fn picture(rows: &[String]) -> Array2<bool> {
    Array2::from_shape_fn((rows.len(), rows[0].len()), |(row, column)| rows[row].as_bytes()[column] == b'#')
}

fn count(mask: &Array2<bool>) -> usize {
    mask.iter().filter(|on| **on).count()
}

#[test]
fn every_mask_equals_the_reference_pixel_for_pixel() {
    let file: serde_json::Value = serde_json::from_str(include_str!("../../fixtures/thinning/thinning.json")).unwrap();
    let expected = [
        ("cross", 165, 29),
        ("ring", 224, 39),
        ("diag_bar", 109, 15),
        ("letter_H", 140, 29),
        ("letter_T", 82, 20),
        ("square_2x2", 4, 1),
        ("rect_touching_border_5x9", 45, 5),
        ("doc_ellipse", 41, 5),
        ("fork_Y", 123, 30),
    ];
    assert_eq!(file["masks"].as_object().unwrap().len(), expected.len());
    for (name, area, pixels) in expected {
        let rows = |key: &str| serde_json::from_value::<Vec<String>>(file["masks"][name][key].clone()).unwrap();
        let mask = picture(&rows("mask"));
        let skeleton = thin(mask.view());
        assert_eq!((count(&mask), count(&skeleton)), (area, pixels), "{name}");
        assert_eq!(skeleton, picture(&rows("opencv_guohall")), "{name}");
    }
}

#[test]
fn the_horse_keeps_one_component_and_1184_pixels() {
    let file = image::open("fixtures/thinning/horse_mask.png").unwrap().to_luma8();
    let mask = Array2::from_shape_fn((file.height() as usize, file.width() as usize), |(row, column)| {
        file.get_pixel(column as u32, row as u32)[0] > 0
    });
    let skeleton = thin(mask.view());
    let mut components = 0;
    for_each_component(skeleton.view(), |_| components += 1);
    assert_eq!((count(&mask), count(&skeleton), components), (43412, 1184, 1));
}
