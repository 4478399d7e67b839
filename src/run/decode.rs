//! One frame file → a float plane of luminance, or the reason why it is set aside.
//! PNG, JPEG, BMP and PNM through `image`, TIFF (8 to 64 bit, floats, pages) through `tiff`; the format
//! is told by content, not by extension. Colour becomes luma by the Rec. 709 weights (ITU-R BT.709-6, 3.2)
//! on the stored values; alpha is ignored; the orientation tag is applied first. Limits: sizes are checked
//! before anything is decoded ([`MAX_PIXELS`]); colour TIFFs must be chunky, not planar.

use std::fmt;
use std::fs::File;
use std::io::{BufReader, Cursor, Read, Seek};
use std::path::Path;

use image::{DynamicImage, ImageDecoder, ImageReader, Limits};
use ndarray::Array2;
use serde::{Deserialize, Serialize};
use sha2::{Digest, Sha256};
use tiff::decoder::{Decoder as TiffDecoder, DecodingResult};
use tiff::tags::Tag;

/// Most pixels a frame may have: 2^28, four times a 64 Mpx camera (common practice).
pub const MAX_PIXELS: u64 = 1 << 28;

/// Most bytes a frame file may have: 8 bytes a pixel at the limit.
const MAX_BYTES: u64 = MAX_PIXELS * 8;

/// Rec. 709 weights of red, green and blue (ITU-R BT.709-6, item 3.2).
const LUMA: [f32; 3] = [0.2126, 0.7152, 0.0722];

/// A decoded frame.
#[derive(Debug, Clone, PartialEq)]
pub struct Decoded {
    /// Luminance, `[row, column]`, in grey levels of the file's own depth.
    pub plane: Array2<f32>,
    /// Bits a sample.
    pub bits: u8,
    /// SHA-256 of the file, or of the page's samples in a multi-page file.
    pub sha256: [u8; 32],
}

/// Why a frame is set aside. The run goes on without it.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum FrameFault {
    /// The file cannot be read.
    Unreadable(String),
    /// The file holds nothing.
    Empty,
    /// What it holds is no picture, or a damaged one.
    Undecodable(String),
    /// It claims more pixels than are allowed.
    TooLarge {
        /// Width, px.
        width: u32,
        /// Height, px.
        height: u32,
    },
    /// Its size is not that of the run's frames.
    OtherSize {
        /// Its width and height, px.
        got: (u32, u32),
        /// The run's, px.
        want: (u32, u32),
    },
    /// Every pixel has the same value.
    Blank,
    /// It holds values that are not finite.
    NotNumbers,
    /// It is byte for byte the frame before it.
    Repeat {
        /// The frame it repeats.
        of: usize,
    },
}

impl fmt::Display for FrameFault {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Unreadable(why) => write!(out, "cannot be read: {why}"),
            Self::Empty => write!(out, "the file is empty"),
            Self::Undecodable(why) => write!(out, "cannot be decoded: {why}"),
            Self::TooLarge { width, height } => {
                write!(out, "{width} × {height} px is more than {MAX_PIXELS} px")
            }
            Self::OtherSize { got, want } => {
                write!(out, "{} × {} px, but the frames of this run are {} × {} px", got.0, got.1, want.0, want.1)
            }
            Self::Blank => write!(out, "blank: every pixel has the same value"),
            Self::NotNumbers => write!(out, "holds values that are not finite numbers"),
            Self::Repeat { of } => write!(out, "repeats frame {of} byte for byte"),
        }
    }
}

/// What a file's header says.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) struct Header {
    /// Width as displayed, px.
    pub(super) width: u32,
    /// Height as displayed, px.
    pub(super) height: u32,
    /// Bits a sample.
    pub(super) bits: u8,
}

/// For each frame the frame that it repeats: the one directly before it, where both have a hash and the
/// hashes are equal.
///
/// ```
/// use veerlog::run::repeats;
/// let (a, b) = ([1; 32], [2; 32]);
/// assert_eq!(repeats(&[Some(a), Some(b), Some(b), None, Some(b)]), [None, None, Some(1), None, None]);
/// ```
#[must_use]
pub fn repeats(hashes: &[Option<[u8; 32]>]) -> Vec<Option<usize>> {
    let repeats = |frame: usize| {
        let before = frame.checked_sub(1)?;
        (hashes[frame].is_some() && hashes[frame] == hashes[before]).then_some(before)
    };
    (0..hashes.len()).map(repeats).collect()
}

/// SHA-256 of bytes.
pub(super) fn sha256(bytes: &[u8]) -> [u8; 32] {
    Sha256::digest(bytes).into()
}

/// Decodes a file, or one page of a multi-page TIFF. `want`: the size that the frame must have.
pub(super) fn decode(path: &Path, page: Option<usize>, want: Option<(u32, u32)>) -> Result<Decoded, FrameFault> {
    let decoded = match page {
        Some(page) => decode_tiff(BufReader::new(open(path)?), page, want, None)?,
        None => {
            let bytes = read(path)?;
            let hash = sha256(&bytes);
            if is_tiff(&bytes) {
                decode_tiff(Cursor::new(&bytes), 0, want, Some(hash))?
            } else {
                decode_plain(&bytes, want, hash)?
            }
        }
    };
    checked(decoded)
}

/// What the header of a file, or of one page of it, says.
pub(super) fn probe(path: &Path, page: Option<usize>) -> Result<Header, FrameFault> {
    let mut file = BufReader::new(open(path)?);
    let mut start = [0; 4];
    let got = file.read(&mut start).map_err(|error| unreadable(&error))?;
    if got == 0 {
        return Err(FrameFault::Empty);
    }
    file.rewind().map_err(|error| unreadable(&error))?;
    if is_tiff(&start[..got]) {
        let mut decoder = tiff_at(file, page.unwrap_or(0))?;
        return tiff_header(&mut decoder);
    }
    plain_header(&mut plain_decoder(file)?)
}

/// Pages of a file: 1 for everything but a TIFF; 0 pages where it cannot be read.
pub(super) fn pages(path: &Path) -> usize {
    let count = || -> Option<usize> {
        let mut file = BufReader::new(File::open(path).ok()?);
        let mut start = [0; 4];
        file.read_exact(&mut start).ok()?;
        file.rewind().ok()?;
        if !is_tiff(&start) {
            return Some(1);
        }
        let mut decoder = TiffDecoder::new(file).ok()?;
        let mut pages = 1;
        while decoder.more_images() && decoder.next_image().is_ok() {
            pages += 1;
        }
        Some(pages)
    };
    count().unwrap_or(0)
}

fn unreadable(error: &std::io::Error) -> FrameFault {
    FrameFault::Unreadable(error.to_string())
}

fn damaged(error: impl fmt::Display) -> FrameFault {
    FrameFault::Undecodable(error.to_string())
}

fn open(path: &Path) -> Result<File, FrameFault> {
    let facts = std::fs::metadata(path).map_err(|error| unreadable(&error))?;
    if !facts.is_file() {
        return Err(FrameFault::Unreadable("not a file".to_owned()));
    }
    File::open(path).map_err(|error| unreadable(&error))
}

fn read(path: &Path) -> Result<Vec<u8>, FrameFault> {
    let mut bytes = Vec::new();
    let mut file = open(path)?.take(MAX_BYTES + 1);
    file.read_to_end(&mut bytes).map_err(|error| unreadable(&error))?;
    if bytes.is_empty() {
        return Err(FrameFault::Empty);
    }
    if bytes.len() as u64 > MAX_BYTES {
        return Err(FrameFault::Unreadable(format!("more than {MAX_BYTES} bytes")));
    }
    Ok(bytes)
}

/// Byte-order marks of TIFF and BigTIFF.
fn is_tiff(bytes: &[u8]) -> bool {
    [b"II\x2a\0", b"MM\0\x2a", b"II\x2b\0", b"MM\0\x2b"].iter().any(|mark| bytes.starts_with(*mark))
}

fn allowed(width: u32, height: u32, want: Option<(u32, u32)>) -> Result<(), FrameFault> {
    let pixels = u64::from(width) * u64::from(height);
    if pixels > MAX_PIXELS {
        return Err(FrameFault::TooLarge { width, height });
    }
    match want {
        Some(want) if want != (width, height) => Err(FrameFault::OtherSize { got: (width, height), want }),
        _ if pixels == 0 => Err(damaged("no pixels")),
        _ => Ok(()),
    }
}

/// Sets aside what holds no picture: one value everywhere, or values that are not finite.
fn checked(decoded: Decoded) -> Result<Decoded, FrameFault> {
    let first = decoded.plane.first().copied().unwrap_or(0.0);
    let (mut finite, mut low, mut high) = (true, first, first);
    for &value in &decoded.plane {
        finite &= value.is_finite();
        low = low.min(value);
        high = high.max(value);
    }
    if !finite {
        return Err(FrameFault::NotNumbers);
    }
    if high <= low { Err(FrameFault::Blank) } else { Ok(decoded) }
}

// ---- PNG, JPEG, BMP, PNM ----

fn plain_decoder<'a, R: std::io::BufRead + Seek + 'a>(input: R) -> Result<impl ImageDecoder + 'a, FrameFault> {
    let mut reader = ImageReader::new(input).with_guessed_format().map_err(|error| unreadable(&error))?;
    if reader.format().is_none() {
        return Err(damaged("not a PNG, TIFF, JPEG, BMP or PNM file"));
    }
    let mut limits = Limits::default();
    limits.max_alloc = Some(MAX_BYTES);
    reader.limits(limits);
    reader.into_decoder().map_err(damaged)
}

fn plain_header(decoder: &mut impl ImageDecoder) -> Result<Header, FrameFault> {
    let (width, height) = decoder.dimensions();
    let turned = orientation_turns(decoder.orientation().map_err(damaged)?.to_exif());
    let (width, height) = if turned { (height, width) } else { (width, height) };
    let color = decoder.color_type();
    let bits = 8 * (color.bytes_per_pixel() / color.channel_count());
    Ok(Header { width, height, bits })
}

/// Whether an orientation (TIFF 6.0, tag 274) swaps width and height.
fn orientation_turns(exif: u8) -> bool {
    (5..=8).contains(&exif)
}

fn decode_plain(bytes: &[u8], want: Option<(u32, u32)>, hash: [u8; 32]) -> Result<Decoded, FrameFault> {
    let mut decoder = plain_decoder(Cursor::new(bytes))?;
    let header = plain_header(&mut decoder)?;
    allowed(header.width, header.height, want)?;
    if bytes.starts_with(&[0xff, 0xd8]) && !jpeg_ends(bytes) {
        return Err(damaged("the JPEG file is cut off"));
    }
    let orientation = decoder.orientation().map_err(damaged)?;
    let mut picture = DynamicImage::from_decoder(decoder).map_err(damaged)?;
    picture.apply_orientation(orientation);
    let plane = match &picture {
        DynamicImage::ImageLuma8(image) => luminance(image, 1, f32::from),
        DynamicImage::ImageLumaA8(image) => luminance(image, 2, f32::from),
        DynamicImage::ImageRgb8(image) => luminance(image, 3, f32::from),
        DynamicImage::ImageRgba8(image) => luminance(image, 4, f32::from),
        DynamicImage::ImageLuma16(image) => luminance(image, 1, f32::from),
        DynamicImage::ImageLumaA16(image) => luminance(image, 2, f32::from),
        DynamicImage::ImageRgb16(image) => luminance(image, 3, f32::from),
        DynamicImage::ImageRgba16(image) => luminance(image, 4, f32::from),
        DynamicImage::ImageRgb32F(image) => luminance(image, 3, |value| value),
        DynamicImage::ImageRgba32F(image) => luminance(image, 4, |value| value),
        _ => return Err(damaged("a colour type that is not known")),
    };
    shaped(plane, header.width, header.height, header.bits, hash)
}

/// Whether a JPEG file holds its end mark near its end: decoders fill in what is cut off.
fn jpeg_ends(bytes: &[u8]) -> bool {
    /// Bytes that some cameras write behind the end mark (common practice).
    const TRAILER: usize = 1 << 16;
    let tail = &bytes[bytes.len().saturating_sub(TRAILER)..];
    tail.windows(2).any(|pair| pair == [0xff, 0xd9])
}

/// Luma of interleaved samples; of one or two channels the first, else red, green, blue weighted.
fn luminance<T: Copy>(samples: &[T], channels: usize, level: impl Fn(T) -> f32) -> Vec<f32> {
    if channels < 3 {
        return samples.iter().step_by(channels).map(|sample| level(*sample)).collect();
    }
    let weigh = |pixel: &[T]| LUMA.iter().zip(pixel).map(|(weight, sample)| weight * level(*sample)).sum();
    samples.chunks_exact(channels).map(weigh).collect()
}

fn shaped(plane: Vec<f32>, width: u32, height: u32, bits: u8, sha256: [u8; 32]) -> Result<Decoded, FrameFault> {
    let shape = (height as usize, width as usize);
    let plane = Array2::from_shape_vec(shape, plane).map_err(damaged)?;
    Ok(Decoded { plane, bits, sha256 })
}

// ---- TIFF ----

fn tiff_at<R: Read + Seek>(input: R, page: usize) -> Result<TiffDecoder<R>, FrameFault> {
    let mut limits = tiff::decoder::Limits::default();
    let most = usize::try_from(MAX_BYTES).unwrap_or(usize::MAX);
    limits.decoding_buffer_size = most;
    limits.intermediate_buffer_size = most;
    let mut decoder = TiffDecoder::new(input).map_err(damaged)?.with_limits(limits);
    if page > 0 {
        decoder.seek_to_image(page).map_err(damaged)?;
    }
    Ok(decoder)
}

fn tiff_orientation<R: Read + Seek>(decoder: &mut TiffDecoder<R>) -> u8 {
    let tag = decoder.find_tag_unsigned::<u8>(Tag::Orientation);
    tag.ok().flatten().filter(|turn| (1..=8).contains(turn)).unwrap_or(1)
}

fn tiff_header<R: Read + Seek>(decoder: &mut TiffDecoder<R>) -> Result<Header, FrameFault> {
    let (width, height) = decoder.dimensions().map_err(damaged)?;
    let bits = decoder.colortype().map_err(damaged)?.bit_depth();
    let turned = orientation_turns(tiff_orientation(decoder));
    let (width, height) = if turned { (height, width) } else { (width, height) };
    Ok(Header { width, height, bits })
}

fn decode_tiff<R: Read + Seek>(
    input: R,
    page: usize,
    want: Option<(u32, u32)>,
    hash: Option<[u8; 32]>,
) -> Result<Decoded, FrameFault> {
    let mut decoder = tiff_at(input, page)?;
    let header = tiff_header(&mut decoder)?;
    allowed(header.width, header.height, want)?;
    let channels = tiff_channels(&mut decoder)?;
    let orientation = tiff_orientation(&mut decoder);
    let (width, height) = decoder.dimensions().map_err(damaged)?;
    let samples = decoder.read_image().map_err(damaged)?;
    let hash = hash.unwrap_or_else(|| sha256(&sample_bytes(&samples)));
    let plane = tiff_luminance(&samples, channels)?;
    let plane = shaped(plane, width, height, header.bits, hash)?;
    Ok(Decoded { plane: turned(plane.plane, orientation), ..plane })
}

fn tiff_channels<R: Read + Seek>(decoder: &mut TiffDecoder<R>) -> Result<usize, FrameFault> {
    use tiff::ColorType::{Gray, GrayA, Multiband, RGB, RGBA};
    let color = decoder.colortype().map_err(damaged)?;
    if color.bit_depth() < 8 {
        return Err(damaged(format!("{} bits a sample; save it with 8 or 16", color.bit_depth())));
    }
    let channels = match color {
        Gray(_) => 1,
        GrayA(_) => 2,
        RGB(_) => 3,
        RGBA(_) => 4,
        Multiband { num_samples: 1, .. } => 1,
        other => {
            return Err(damaged(format!("colour type {other:?}; save it as grey or RGB")));
        }
    };
    /// Planar storage (TIFF 6.0, tag 284).
    const PLANAR: u16 = 2;
    let planar = decoder.find_tag_unsigned::<u16>(Tag::PlanarConfiguration).ok().flatten() == Some(PLANAR);
    if planar && channels > 1 {
        return Err(damaged("colour planes stored apart; save it with interleaved colours, or as grey"));
    }
    Ok(channels)
}

fn tiff_luminance(samples: &DecodingResult, channels: usize) -> Result<Vec<f32>, FrameFault> {
    #[expect(clippy::cast_possible_truncation, reason = "planes are single precision by design")]
    let single = |value: f64| value as f32;
    #[expect(clippy::cast_precision_loss, reason = "planes are single precision by design")]
    let plane = match samples {
        DecodingResult::U8(samples) => luminance(samples, channels, f32::from),
        DecodingResult::U16(samples) => luminance(samples, channels, f32::from),
        DecodingResult::U32(samples) => luminance(samples, channels, |value| value as f32),
        DecodingResult::I8(samples) => luminance(samples, channels, f32::from),
        DecodingResult::I16(samples) => luminance(samples, channels, f32::from),
        DecodingResult::I32(samples) => luminance(samples, channels, |value| value as f32),
        DecodingResult::F32(samples) => luminance(samples, channels, |value| value),
        DecodingResult::F64(samples) => luminance(samples, channels, single),
        _ => {
            return Err(damaged("a sample type that is not read; save it with 8 or 16 bits or 32-bit floats"));
        }
    };
    Ok(plane)
}

fn sample_bytes(samples: &DecodingResult) -> Vec<u8> {
    match samples {
        DecodingResult::U8(samples) => samples.clone(),
        DecodingResult::U16(samples) => samples.iter().flat_map(|sample| sample.to_le_bytes()).collect(),
        DecodingResult::U32(samples) => samples.iter().flat_map(|sample| sample.to_le_bytes()).collect(),
        DecodingResult::I8(samples) => samples.iter().flat_map(|sample| sample.to_le_bytes()).collect(),
        DecodingResult::I16(samples) => samples.iter().flat_map(|sample| sample.to_le_bytes()).collect(),
        DecodingResult::I32(samples) => samples.iter().flat_map(|sample| sample.to_le_bytes()).collect(),
        DecodingResult::F32(samples) => samples.iter().flat_map(|sample| sample.to_le_bytes()).collect(),
        DecodingResult::F64(samples) => samples.iter().flat_map(|sample| sample.to_le_bytes()).collect(),
        _ => Vec::new(),
    }
}

/// Applies an orientation (TIFF 6.0, tag 274): which corner and edge row 0 and column 0 stand for.
fn turned(plane: Array2<f32>, orientation: u8) -> Array2<f32> {
    let mut view = plane.view();
    if orientation_turns(orientation) {
        view.swap_axes(0, 1);
    }
    // After the swap, 6 and 7 run right to left, 7 and 8 bottom to top.
    if matches!(orientation, 2 | 3 | 6 | 7) {
        view.invert_axis(ndarray::Axis(1));
    }
    if matches!(orientation, 3 | 4 | 7 | 8) {
        view.invert_axis(ndarray::Axis(0));
    }
    if orientation == 1 { plane } else { view.as_standard_layout().into_owned() }
}

#[cfg(test)]
mod tests {
    use super::*;
    use ndarray::array;

    #[test]
    fn orientations_follow_the_standard_and_the_image_library() {
        let plane = array![[1.0, 2.0, 3.0], [4.0, 5.0, 6.0]];
        assert_eq!(turned(plane.clone(), 6), array![[4.0, 1.0], [5.0, 2.0], [6.0, 3.0]]);
        for exif in 1..=8 {
            let grey = image::GrayImage::from_raw(3, 2, vec![1, 2, 3, 4, 5, 6]).unwrap();
            let mut other = DynamicImage::ImageLuma8(grey);
            other.apply_orientation(image::metadata::Orientation::from_exif(exif).unwrap());
            let ours: Vec<f32> = turned(plane.clone(), exif).iter().copied().collect();
            let theirs: Vec<f32> = other.to_luma8().iter().map(|level| f32::from(*level)).collect();
            assert_eq!(ours, theirs, "orientation {exif}");
        }
    }

    #[test]
    fn every_format_gives_the_same_plane() {
        let folder = tempfile::tempdir().unwrap();
        let grey = image::GrayImage::from_fn(7, 5, |x, y| image::Luma([u8::try_from(x * 20 + y).unwrap()]));
        for name in ["a.png", "a.tif", "a.bmp", "a.pgm"] {
            let path = folder.path().join(name);
            grey.save(&path).unwrap();
            let frame = decode(&path, None, Some((7, 5))).unwrap();
            assert!((frame.plane[[3, 6]] - 123.0).abs() < 1e-6, "{name}");
            assert_eq!((frame.bits, frame.plane.dim()), (8, (5, 7)), "{name}");
            assert_eq!(probe(&path, None).unwrap(), Header { width: 7, height: 5, bits: 8 }, "{name}");
        }
        let path = folder.path().join("a.jpg");
        grey.save(&path).unwrap();
        assert!((decode(&path, None, None).unwrap().plane[[3, 6]] - 123.0).abs() < 8.0);
    }

    #[test]
    fn sixteen_bits_and_colour_are_kept() {
        let folder = tempfile::tempdir().unwrap();
        for name in ["b.png", "b.tif"] {
            let path = folder.path().join(name);
            image::ImageBuffer::from_fn(3, 2, |x, _| image::Luma([u16::try_from(x * 30_001).unwrap()]))
                .save(&path)
                .unwrap();
            let frame = decode(&path, None, None).unwrap();
            assert_eq!((frame.plane[[1, 2]], frame.bits), (60_002.0, 16), "{name}");
            image::RgbImage::from_fn(3, 2, |x, _| image::Rgb([200, u8::try_from(x).unwrap(), 100]))
                .save(&path)
                .unwrap();
            let luma = decode(&path, None, None).unwrap().plane[[0, 1]];
            assert!((luma - (0.2126 * 200.0 + 0.7152 + 7.22)).abs() < 1e-3, "{name}");
        }
    }

    #[test]
    fn pages_and_floats() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("stack.tif");
        let mut encoder = tiff::encoder::TiffEncoder::new(File::create(&path).unwrap()).unwrap();
        for page in 0..3_u8 {
            let samples = [f32::from(page), 0.5, 0.25, 9.0];
            encoder.write_image::<tiff::encoder::colortype::Gray32Float>(2, 2, &samples).unwrap();
        }
        encoder.write_image::<tiff::encoder::colortype::Gray32Float>(2, 2, &[f32::NAN, 1.0, 2.0, 3.0]).unwrap();
        drop(encoder);
        assert_eq!(pages(&path), 4);
        let frame = decode(&path, Some(2), None).unwrap();
        assert_eq!((frame.plane[[0, 0]], frame.plane[[0, 1]], frame.bits), (2.0, 0.5, 32));
        assert_eq!(decode(&path, Some(3), None), Err(FrameFault::NotNumbers));
        assert!(matches!(decode(&path, Some(4), None), Err(FrameFault::Undecodable(_))));
    }

    #[test]
    fn what_is_no_frame_says_why() {
        let folder = tempfile::tempdir().unwrap();
        let at = |name: &str, bytes: &[u8]| {
            let path = folder.path().join(name);
            std::fs::write(&path, bytes).unwrap();
            path
        };
        let good = at("good.png", &[]);
        image::GrayImage::from_fn(40, 40, |x, y| image::Luma([u8::try_from((x * 7 + y * 13) % 251).unwrap()]))
            .save(&good)
            .unwrap();
        let bytes = std::fs::read(&good).unwrap();
        assert_eq!(decode(&at("empty.png", &[]), None, None), Err(FrameFault::Empty));
        assert!(matches!(decode(&at("text.png", b"not a picture"), None, None), Err(FrameFault::Undecodable(_))));
        assert!(matches!(
            decode(&at("cut.png", &bytes[..bytes.len() / 2]), None, None),
            Err(FrameFault::Undecodable(_))
        ));
        assert!(matches!(decode(&folder.path().join("none.png"), None, None), Err(FrameFault::Unreadable(_))));
        assert!(matches!(decode(folder.path(), None, None), Err(FrameFault::Unreadable(_))));
        assert_eq!(decode(&good, None, Some((40, 41))), Err(FrameFault::OtherSize { got: (40, 40), want: (40, 41) }));
        let blank = at("blank.png", &[]);
        image::GrayImage::from_pixel(4, 4, image::Luma([7])).save(&blank).unwrap();
        assert_eq!(decode(&blank, None, None), Err(FrameFault::Blank));
        // A header that claims 2^31 × 2^31 px.
        let mut bomb = bytes.clone();
        bomb[16..24].copy_from_slice(&[0x7f, 0xff, 0xff, 0xff, 0x7f, 0xff, 0xff, 0xff]);
        assert!(decode(&at("bomb.png", &bomb), None, None).is_err());
        let jpeg = at("cut.jpg", &[]);
        image::GrayImage::from_fn(64, 64, |x, y| image::Luma([u8::try_from((x * 7 + y * 13) % 251).unwrap()]))
            .save(&jpeg)
            .unwrap();
        let bytes = std::fs::read(&jpeg).unwrap();
        assert!(matches!(
            decode(&at("cut2.jpg", &bytes[..bytes.len() / 2]), None, None),
            Err(FrameFault::Undecodable(_))
        ));
    }

    proptest::proptest! {
        #![proptest_config(proptest::prelude::ProptestConfig::with_cases(64))]
        #[test]
        fn damaged_bytes_never_panic(at in 0_usize..400, byte in 0_u8.., tiff in proptest::bool::ANY) {
            let folder = tempfile::tempdir().unwrap();
            let path = folder.path().join(if tiff { "a.tif" } else { "a.png" });
            image::GrayImage::from_fn(12, 9, |x, y| image::Luma([u8::try_from(x * y).unwrap()])).save(&path).unwrap();
            let mut bytes = std::fs::read(&path).unwrap();
            let at = at % bytes.len();
            bytes[at] ^= byte;
            std::fs::write(&path, bytes).unwrap();
            if let Ok(frame) = decode(&path, None, Some((12, 9))) {
                proptest::prop_assert_eq!(frame.plane.dim(), (9, 12));
            }
        }
    }
}
