//! The colours of page and figures, once.
//!
//! Every colour is chosen in OKLCH (lightness, chroma, hue), where equal steps look equally large
//! (Björn Ottosson, "A perceptual color space for image processing", 2020), and converted to sRGB here.
//! Hues of lines that meet in one plot lie far apart in lightness too, so that they stay apart without
//! colour; each line also carries its name. Light and dark sets keep the hue and mirror the lightness.

/// An sRGB colour.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Rgb(pub u8, pub u8, pub u8);

impl Rgb {
    /// `#rrggbb`.
    pub fn hex(self) -> String {
        format!("#{:02x}{:02x}{:02x}", self.0, self.1, self.2)
    }

    /// Relative luminance by WCAG 2.2, 0 to 1.
    pub fn luminance(self) -> f64 {
        let linear = |byte: u8| {
            let c = f64::from(byte) / 255.0;
            if c <= 0.040_45 { c / 12.92 } else { libm::pow((c + 0.055) / 1.055, 2.4) }
        };
        0.2126 * linear(self.0) + 0.7152 * linear(self.1) + 0.0722 * linear(self.2)
    }

    /// Contrast ratio by WCAG 2.2, 1 to 21.
    pub fn contrast(self, other: Self) -> f64 {
        let (a, b) = (self.luminance(), other.luminance());
        (a.max(b) + 0.05) / (a.min(b) + 0.05)
    }
}

/// The sRGB colour of lightness `l` (0 to 1), chroma `c` and hue `h` (degrees); chroma is lowered until
/// the colour exists.
pub fn oklch(l: f64, c: f64, h: f64) -> Rgb {
    /// Share of the chroma that is tried next while a colour does not exist.
    const STEP: f64 = 0.97;
    let mut chroma = c;
    loop {
        let rgb = linear_srgb(l, chroma, h);
        if chroma < 1e-4 || rgb.iter().all(|v| (-1e-4..=1.0 + 1e-4).contains(v)) {
            let [r, g, b] = rgb.map(encode);
            return Rgb(r, g, b);
        }
        chroma *= STEP;
    }
}

/// Linear sRGB of an OKLCH colour, with the matrices of the source.
fn linear_srgb(l: f64, c: f64, h: f64) -> [f64; 3] {
    let (a, b) = (c * libm::cos(h.to_radians()), c * libm::sin(h.to_radians()));
    let cube = |x: f64| x * x * x;
    let long = cube(l + 0.396_337_777_4 * a + 0.215_803_757_3 * b);
    let middle = cube(l - 0.105_561_345_8 * a - 0.063_854_172_8 * b);
    let short = cube(l - 0.089_484_177_5 * a - 1.291_485_548_0 * b);
    [
        4.076_741_662_1 * long - 3.307_711_591_3 * middle + 0.230_969_929_2 * short,
        -1.268_438_004_6 * long + 2.609_757_401_1 * middle - 0.341_319_396_5 * short,
        -0.004_196_086_3 * long - 0.703_418_614_7 * middle + 1.707_614_701_0 * short,
    ]
}

/// A linear component as an sRGB byte (IEC 61966-2-1).
fn encode(linear: f64) -> u8 {
    let x = linear.clamp(0.0, 1.0);
    let s = if x <= 0.003_130_8 { 12.92 * x } else { 1.055 * libm::pow(x, 1.0 / 2.4) - 0.055 };
    (s * 255.0).round() as u8
}

/// What a mark stands for; its colour follows.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Ink {
    /// Background of a figure.
    Paper,
    /// Words and values.
    Text,
    /// Lesser words, ticks, edges.
    Quiet,
    /// Grid lines.
    Grid,
    /// Metal: depth, growth.
    Metal,
    /// What the forecast says.
    Forecast,
    /// The load.
    Load,
    /// Voltage.
    Voltage,
    /// Current.
    Current,
    /// White, in both themes: lines on a picture.
    White,
    /// The load, in both themes: its mark on a picture.
    LoadMark,
    /// Near black, in both themes: casings on a picture.
    Black,
    /// Time of arrival, 0 (first) to 255 (last), the same in both themes.
    Arrival(u8),
}

/// The inks that change with the theme, with their names in the page.
pub const THEMED: [(Ink, &str); 9] = [
    (Ink::Paper, "paper"),
    (Ink::Text, "text"),
    (Ink::Quiet, "quiet"),
    (Ink::Grid, "grid"),
    (Ink::Metal, "metal"),
    (Ink::Forecast, "forecast"),
    (Ink::Load, "load"),
    (Ink::Voltage, "voltage"),
    (Ink::Current, "current"),
];

impl Ink {
    /// On light paper, as figures are written.
    pub fn light(self) -> Rgb {
        match self {
            Self::Paper => oklch(0.988, 0.004, 95.0),
            Self::Text => oklch(0.27, 0.025, 220.0),
            Self::Quiet => oklch(0.50, 0.02, 220.0),
            Self::Grid => oklch(0.90, 0.008, 120.0),
            Self::Metal => oklch(0.50, 0.20, 12.0),
            Self::Forecast => oklch(0.46, 0.14, 262.0),
            Self::Load => oklch(0.54, 0.115, 68.0),
            Self::Voltage => oklch(0.42, 0.09, 185.0),
            Self::Current => oklch(0.54, 0.17, 325.0),
            Self::White => Rgb(255, 255, 255),
            Self::LoadMark => oklch(0.86, 0.15, 88.0),
            Self::Black => oklch(0.20, 0.02, 220.0),
            Self::Arrival(step) => arrival(f64::from(step) / 255.0),
        }
    }

    /// On dark paper.
    pub fn dark(self) -> Rgb {
        match self {
            Self::Paper => oklch(0.21, 0.018, 220.0),
            Self::Text => oklch(0.93, 0.01, 100.0),
            Self::Quiet => oklch(0.74, 0.015, 200.0),
            Self::Grid => oklch(0.33, 0.018, 220.0),
            Self::Metal => oklch(0.72, 0.17, 12.0),
            Self::Forecast => oklch(0.76, 0.11, 258.0),
            Self::Load => oklch(0.80, 0.12, 78.0),
            Self::Voltage => oklch(0.78, 0.09, 185.0),
            Self::Current => oklch(0.70, 0.15, 325.0),
            same => same.light(),
        }
    }

    /// The class that a themed ink carries in an SVG.
    pub fn name(self) -> Option<&'static str> {
        THEMED.iter().find(|(ink, _)| *ink == self).map(|(_, name)| *name)
    }
}

/// Arrival ramp: lightness rises evenly from first (0) to last (1), so the order reads without colour;
/// hue turns from deep sea through crimson to apricot, chroma is highest where the lightness is that of
/// the ceramic.
pub fn arrival(t: f64) -> Rgb {
    let t = t.clamp(0.0, 1.0);
    let chroma = 0.10 + 0.42 * t * (1.0 - t);
    oklch(0.37 + 0.56 * t, chroma, 225.0 + 205.0 * t)
}

/// Angle to the load from 0 (along it) to 1 (across it), on pictures in both themes: from sea blue through near white to
/// orange, so that which side of 45° a line runs reads with any colour vision.
pub fn angle(t: f64) -> Rgb {
    let side = 2.0 * t.clamp(0.0, 1.0) - 1.0;
    let far = side.abs();
    oklch(0.95 - 0.22 * far, 0.17 * far, if side < 0.0 { 235.0 } else { 50.0 })
}

/// Colours told apart by [`kind`].
pub const KINDS: usize = 8;

/// One of [`KINDS`] colours for things without order, on pictures in both themes; neighbours differ in lightness too.
pub fn kind(i: usize) -> Rgb {
    const STEPS: [(f64, f64); KINDS] = [
        (0.86, 95.0),
        (0.70, 245.0),
        (0.90, 150.0),
        (0.66, 15.0),
        (0.84, 200.0),
        (0.72, 310.0),
        (0.92, 60.0),
        (0.68, 135.0),
    ];
    let (lightness, hue) = STEPS[i % KINDS];
    oklch(lightness, 0.16, hue)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Reference values: the table of test colours in Ottosson 2020 (white, red, green, blue in OKLab),
    /// from memory; white is (1, 0, 0), red is (0.628, 0.225, 0.126).
    #[test]
    fn known_colours_come_out() {
        assert_eq!(oklch(1.0, 0.0, 0.0), Rgb(255, 255, 255));
        let (a, b) = (0.224_863, 0.125_846_f64);
        let red = oklch(0.627_955, libm::hypot(a, b), libm::atan2(b, a).to_degrees());
        assert!(red.0 >= 254 && red.1 <= 2 && red.2 <= 2, "{red:?}");
    }

    #[test]
    fn words_can_be_read_on_both_papers() {
        let words = THEMED.into_iter().filter(|(ink, _)| !matches!(ink, Ink::Paper | Ink::Grid));
        for (ink, name) in words {
            assert!(ink.light().contrast(Ink::Paper.light()) >= 4.5, "{name} on light paper");
            assert!(ink.dark().contrast(Ink::Paper.dark()) >= 4.5, "{name} on dark paper");
        }
    }

    /// Along and across stay apart for readers without red or green cones: blue and orange differ in their blue part.
    #[test]
    fn along_and_across_stay_apart_without_red_or_green() {
        let (along, across) = (angle(0.0), angle(1.0));
        assert!(along.2.abs_diff(across.2) > 90, "{along:?} {across:?}");
        assert!(angle(0.5).luminance() > along.luminance().max(across.luminance()));
    }

    #[test]
    fn kinds_that_follow_each_other_differ_in_lightness() {
        for i in 0..KINDS {
            assert!(kind(i).contrast(kind(i + 1)) > 1.15, "{i}");
        }
    }

    #[test]
    fn arrival_gets_lighter_with_time() {
        let steps: Vec<f64> = (0..=50).map(|i| arrival(f64::from(i) / 50.0).luminance()).collect();
        assert!(steps.windows(2).all(|pair| pair[1] > pair[0]), "{steps:?}");
    }
}
