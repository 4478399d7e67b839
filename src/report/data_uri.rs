//! A grey picture as a `data:` address: JPEG inside base64 (RFC 4648, section 4).

use std::path::Path;

use image::GrayImage;
use image::codecs::jpeg::JpegEncoder;

use super::Error;

/// JPEG quality: on ceramic texture the loss is below the recorded noise (common practice).
const QUALITY: u8 = 86;

/// Longest side of a picture to look at closely, px.
pub(crate) const LARGE: u32 = 1600;

/// Longest side of a picture of many, px.
pub(crate) const SMALL: u32 = 800;

/// `data:image/jpeg;base64,…` of the picture, made smaller where a side is longer than `longest`.
pub(crate) fn jpeg(picture: &GrayImage, longest: u32) -> Result<String, Error> {
    Ok(format!("data:image/jpeg;base64,{}", base64(&encoded(picture, longest)?)))
}

/// The same as a file.
pub(crate) fn write_jpeg(picture: &GrayImage, longest: u32, path: &Path) -> Result<(), Error> {
    std::fs::write(path, encoded(picture, longest)?).map_err(|source| Error::io(path, source))
}

fn encoded(picture: &GrayImage, longest: u32) -> Result<Vec<u8>, Error> {
    let (w, h) = picture.dimensions();
    let largest = w.max(h);
    let small;
    let shown = if largest > longest {
        let side = |s: u32| (u64::from(s) * u64::from(longest) / u64::from(largest)).max(1) as u32;
        small = image::imageops::resize(picture, side(w), side(h), image::imageops::FilterType::CatmullRom);
        &small
    } else {
        picture
    };
    let mut bytes = Vec::new();
    JpegEncoder::new_with_quality(&mut bytes, QUALITY)
        .encode_image(shown)
        .map_err(|why| Error::made("an embedded picture", why))?;
    Ok(bytes)
}

fn base64(bytes: &[u8]) -> String {
    const DIGITS: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    let mut text = String::with_capacity(bytes.len().div_ceil(3) * 4);
    for chunk in bytes.chunks(3) {
        let word = (0..3).fold(0_u32, |w, i| w << 8 | u32::from(*chunk.get(i).unwrap_or(&0)));
        for i in 0..4 {
            let digit = DIGITS[(word >> (18 - 6 * i) & 63) as usize];
            text.push(if i <= chunk.len() { char::from(digit) } else { '=' });
        }
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Test vectors of RFC 4648, section 10.
    #[test]
    fn base64_of_the_standard() {
        for (plain, coded) in [
            ("", ""),
            ("f", "Zg=="),
            ("fo", "Zm8="),
            ("foo", "Zm9v"),
            ("foob", "Zm9vYg=="),
            ("fooba", "Zm9vYmE="),
            ("foobar", "Zm9vYmFy"),
        ] {
            assert_eq!(base64(plain.as_bytes()), coded);
        }
    }
}
