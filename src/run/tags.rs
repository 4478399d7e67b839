//! The scale that a frame file's own tags hold, µm per px: TIFF resolution (TIFF 6.0, tags 282 and 296), OME-XML in the
//! TIFF description (`PhysicalSizeX`), PNG `pHYs` (ISO/IEC 15948, 11.3.5.3). A tag is proposed to a person, never used:
//! many cameras write a printer's or a screen's resolution there.

use std::fs::File;
use std::io::{BufReader, Read};
use std::path::Path;

use tiff::decoder::Decoder;
use tiff::tags::Tag;

/// Scales above this are screen or printer resolutions (72 to 600 dpi are 353 to 42 µm), µm per px.
const COARSE_UM: f64 = 42.0;

/// The scale in a file's tags, where it may be one of a microscope, and the tag it stands in.
pub(super) fn scale(path: &Path) -> Option<(f64, &'static str)> {
    let found = tiff_scale(path).or_else(|| png_scale(path));
    found.filter(|(um, _)| um.is_finite() && *um > 0.0 && *um < COARSE_UM)
}

fn tiff_scale(path: &Path) -> Option<(f64, &'static str)> {
    let mut decoder = Decoder::new(BufReader::new(File::open(path).ok()?)).ok()?;
    let described = decoder.get_tag_ascii_string(Tag::ImageDescription).ok();
    if let Some(um) = described.as_deref().and_then(ome_scale) {
        return Some((um, "PhysicalSizeX in the TIFF description"));
    }
    let resolution = decoder.get_tag_u32_vec(Tag::XResolution).ok()?;
    let &[numerator, denominator] = resolution.as_slice() else {
        return None;
    };
    let per_unit = f64::from(numerator) / f64::from(denominator);
    /// Resolution units of TIFF 6.0: inch (also the default) and centimetre.
    const CENTIMETRE: u32 = 3;
    const INCH: u32 = 2;
    let unit_um = match decoder.find_tag_unsigned::<u32>(Tag::ResolutionUnit).ok()?.unwrap_or(INCH) {
        CENTIMETRE => 10_000.0,
        INCH => 25_400.0,
        _ => return None,
    };
    (per_unit > 0.0).then(|| (unit_um / per_unit, "the TIFF resolution tag"))
}

/// `PhysicalSizeX="0.65"` with its unit (µm unless given), from OME-XML.
fn ome_scale(description: &str) -> Option<f64> {
    let attribute = |name: &str| description.split_once(&format!(" {name}=\""))?.1.split('"').next();
    let size: f64 = attribute("PhysicalSizeX")?.parse().ok()?;
    let unit_um = match attribute("PhysicalSizeXUnit").unwrap_or("µm") {
        "µm" | "um" => 1.0,
        "nm" => 1e-3,
        "mm" => 1e3,
        _ => return None,
    };
    Some(size * unit_um)
}

fn png_scale(path: &Path) -> Option<(f64, &'static str)> {
    /// Bytes looked through: the chunk stands before the picture data.
    const LOOKED: u64 = 1 << 16;
    let mut bytes = Vec::new();
    File::open(path).ok()?.take(LOOKED).read_to_end(&mut bytes).ok()?;
    let mut rest = bytes.strip_prefix(b"\x89PNG\r\n\x1a\n")?;
    loop {
        let length = u32::from_be_bytes(rest.get(..4)?.try_into().ok()?) as usize;
        let (kind, data) = (rest.get(4..8)?, rest.get(8..)?);
        match kind {
            b"IDAT" => return None,
            b"pHYs" if data.get(8) == Some(&1) => {
                let per_metre = u32::from_be_bytes(data.get(..4)?.try_into().ok()?);
                return Some((1e6 / f64::from(per_metre), "the PNG chunk pHYs"));
            }
            _ => rest = data.get(length.checked_add(4)?..)?,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ome_units() {
        let near = |text: &str, um: f64| (ome_scale(text).unwrap() - um).abs() < 1e-12;
        assert!(near("<Pixels ID=\"p\" PhysicalSizeX=\"0.65\" PhysicalSizeXUnit=\"µm\"/>", 0.65));
        assert!(near("<Pixels PhysicalSizeX=\"325\" PhysicalSizeXUnit=\"nm\"/>", 0.325));
        assert_eq!(ome_scale("no size"), None);
    }

    #[test]
    fn resolution_tags_of_microscopes_count_and_of_printers_do_not() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("a.tif");
        let write = |per_cm: u32| {
            let mut encoder = tiff::encoder::TiffEncoder::new(File::create(&path).unwrap()).unwrap();
            let mut image = encoder.new_image::<tiff::encoder::colortype::Gray8>(2, 2).unwrap();
            image.resolution(tiff::tags::ResolutionUnit::Centimeter, tiff::encoder::Rational { n: per_cm, d: 1 });
            image.write_data(&[1, 2, 3, 4]).unwrap();
        };
        write(8000);
        assert!((scale(&path).unwrap().0 - 1.25).abs() < 1e-6);
        write(118);
        assert_eq!(scale(&path), None);
    }

    #[test]
    fn a_png_chunk() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("a.png");
        let mut bytes = b"\x89PNG\r\n\x1a\n".to_vec();
        for (kind, data) in [
            (b"IHDR", vec![0; 13]),
            (
                b"pHYs",
                [2_000_000_u32.to_be_bytes(), 2_000_000_u32.to_be_bytes()].concat().into_iter().chain([1]).collect(),
            ),
        ] {
            bytes.extend(u32::try_from(data.len()).unwrap().to_be_bytes());
            bytes.extend(kind);
            bytes.extend(data);
            bytes.extend([0; 4]);
        }
        std::fs::write(&path, &bytes).unwrap();
        assert!((scale(&path).unwrap().0 - 0.5).abs() < 1e-9);
        std::fs::write(&path, &bytes[..20]).unwrap();
        assert_eq!(scale(&path), None);
    }
}
