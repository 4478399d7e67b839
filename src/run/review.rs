//! `review.toml` → [`Review`]: what a reader of the report marked as wrong, each mark with its reason.
//!
//! ```toml
//! [[reject]]
//! frame = 17
//! reason = "the lamp was touched"
//!
//! [[reject]]
//! filament = 3                     # as numbered in a report without this mark
//! root_px = [212.4, 221.0]         # where it starts: the number alone may change
//! reason = "a scratch"
//!
//! [[reject]]
//! region_px = [[10, 20], [64, 80]] # two opposite corners
//! reason = "a drop on the window"
//! ```
//!
//! Method: serde over TOML with unknown keys refused; faults name file, line and the nearest known key, as those of
//! `run.toml` do. Limit: a file above [`MAX_BYTES`] is refused unread.

use std::ops::Range;
use std::path::Path;

use serde::Deserialize;
use toml::Spanned;

use super::manifest::{MAX_BYTES, ManifestError, quoted_after};

/// Name of the file in a run folder.
pub const FILE_NAME: &str = "review.toml";

/// The keys of a mark, with an example of what to type.
const KEYS: [(&str, &str); 5] = [
    ("frame", "17"),
    ("filament", "3"),
    ("root_px", "[212.4, 221.0]"),
    ("region_px", "[[10, 20], [64, 80]]"),
    ("reason", "\"a scratch\""),
];

/// Least likeness (Jaro–Winkler) at which a known key is offered for an unknown one (common practice).
const NEAR: f64 = 0.7;

/// One mark as written.
#[derive(Debug, Clone, PartialEq, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Rejection {
    /// A frame, over all files.
    pub frame: Option<usize>,
    /// A filament, as numbered in a report without the mark.
    pub filament: Option<u32>,
    /// Where that filament starts, px.
    pub root_px: Option<[f64; 2]>,
    /// Two opposite corners of a region, px.
    pub region_px: Option<[[f64; 2]; 2]>,
    /// Why.
    pub reason: String,
}

/// A `review.toml` that holds.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Review {
    /// Its marks, in order.
    pub reject: Vec<Rejection>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct File {
    #[serde(default)]
    reject: Vec<Spanned<Rejection>>,
}

impl Review {
    /// Reads `review.toml` of a run folder; `None` where there is none. `frames`: files of the run.
    ///
    /// # Errors
    /// [`crate::Error::Io`] where it cannot be read, [`ManifestError`] for everything in it that does not hold.
    pub fn load(folder: &Path, frames: usize) -> Result<Option<Self>, crate::Error> {
        let path = folder.join(FILE_NAME);
        let io = |source| crate::Error::Io { path: path.clone(), source };
        if !path.is_file() {
            return Ok(None);
        }
        let bytes = std::fs::metadata(&path).map_err(io)?.len();
        if bytes > MAX_BYTES {
            let io = std::io::Error::other(format!("{bytes} bytes are too many for a review (at most {MAX_BYTES})"));
            return Err(crate::Error::Io { path, source: io });
        }
        let bytes = std::fs::read(&path).map_err(io)?;
        let text = String::from_utf8(bytes).map_err(|_| crate::Error::NotText { path: path.clone() })?;
        Ok(Some(Self::parse(&text, &path, frames)?))
    }

    /// Checks the text of a `review.toml` for a run of so many frames.
    ///
    /// # Errors
    /// [`ManifestError`] names the first mark that does not hold.
    ///
    /// # Examples
    /// ```
    /// use veerlog::run::Review;
    /// let text = "[[reject]]\nframe = 17\nreason = \"the lamp was touched\"\n";
    /// assert_eq!(Review::parse(text, "review.toml".as_ref(), 40)?.reject[0].frame, Some(17));
    /// let slip = text.replace("reason", "raeson");
    /// let error = Review::parse(&slip, "review.toml".as_ref(), 40).unwrap_err();
    /// assert!(error.to_string().contains("line 3: unknown key `raeson`"));
    /// # Ok::<(), veerlog::run::ManifestError>(())
    /// ```
    pub fn parse(text: &str, path: &Path, frames: usize) -> Result<Self, ManifestError> {
        let text = text.strip_prefix('\u{feff}').unwrap_or(text);
        let file: File = toml::from_str(text).map_err(|error| explain(&error, path, text))?;
        for mark in &file.reject {
            if let Some((what, help)) = fault(mark.get_ref(), frames) {
                return Err(ManifestError::at(path, text, heading(text, mark.span()), what, help));
            }
        }
        Ok(Self { reject: file.reject.into_iter().map(Spanned::into_inner).collect() })
    }
}

/// The first line of a mark.
fn heading(text: &str, span: Range<usize>) -> Range<usize> {
    let line = text.get(span.clone()).and_then(|part| part.find('\n')).map_or(span.end, |end| span.start + end);
    span.start..line
}

/// What does not hold in a mark, and what to type.
fn fault(mark: &Rejection, frames: usize) -> Option<(String, String)> {
    let said = |what: &str, help: &str| Some((what.to_owned(), help.to_owned()));
    let named = [mark.frame.is_some(), mark.filament.is_some(), mark.region_px.is_some()];
    if named.iter().filter(|given| **given).count() != 1 {
        let help = "give each [[reject]] one of them: frame = 17, or filament = 3, or region_px = [[10, 20], [64, 80]]";
        return said("a mark names one thing: a frame, a filament or a region_px", help);
    }
    if mark.reason.trim().is_empty() {
        return said("the reason is empty", "say why, in words others will understand: reason = \"a scratch\"");
    }
    if mark.root_px.is_some() && mark.filament.is_none() {
        return said("root_px says where a filament starts, and none is named", "add filament = 3, or drop root_px");
    }
    let places = mark.root_px.iter().chain(mark.region_px.iter().flatten());
    if places.flatten().any(|value| !value.is_finite()) {
        return said("a coordinate is no number", "type pixels of the picture, x right, y down");
    }
    if let Some(frame) = mark.frame.filter(|frame| *frame >= frames) {
        let help = format!("frames are counted from 0: type 0 to {}", frames.saturating_sub(1));
        return Some((format!("the run has no frame {frame}"), help));
    }
    None
}

/// What the TOML reader found, in words that say what to type.
fn explain(error: &toml::de::Error, path: &Path, text: &str) -> ManifestError {
    let span = error.span().unwrap_or(0..0);
    let message = error.message().lines().next().unwrap_or("not TOML").to_owned();
    let known = KEYS.map(|(name, _)| name).join(", ");
    let (what, help) = if let Some(typed) = quoted_after(&message, "unknown field ") {
        let likeness = |name: &str| strsim::jaro_winkler(&typed, name);
        let names = KEYS.iter().copied().chain([("[[reject]]", "")]);
        let nearest =
            names.max_by(|a, b| likeness(a.0).total_cmp(&likeness(b.0))).filter(|key| likeness(key.0) >= NEAR);
        let help = match nearest {
            Some((name, "")) => format!("each mark starts with a line {name}"),
            Some((name, example)) => format!("the nearest known key is `{name}`: type {name} = {example}"),
            None => format!("drop the line; each [[reject]] holds some of: {known}"),
        };
        (format!("unknown key `{typed}`"), help)
    } else if let Some(name) = quoted_after(&message, "missing field ") {
        let example = KEYS.iter().find(|(key, _)| *key == name).map_or("…", |(_, example)| example);
        (format!("`{name}` is missing"), format!("add the line {name} = {example}"))
    } else {
        (message, format!("each mark is [[reject]] and lines `key = value` below it; keys: {known}"))
    };
    let span = if span.is_empty() { span } else { heading(text, span) };
    ManifestError::at(path, text, span, what, help)
}

#[cfg(test)]
mod tests {
    use super::*;

    const GOOD: &str = "[[reject]]\nframe = 3\nreason = \"lamp\"\n\n[[reject]]\nfilament = 2\nroot_px = [4, 5.5]\n\
                        reason = \"scratch\"\n\n[[reject]]\nregion_px = [[1, 2], [30, 40]]\nreason = \"drop\"\n";

    fn fails(text: &str) -> ManifestError {
        Review::parse(text, Path::new("r/review.toml"), 10).unwrap_err()
    }

    #[test]
    fn a_good_one_is_read() {
        let review = Review::parse(GOOD, Path::new("review.toml"), 10).unwrap();
        assert_eq!(review.reject.len(), 3);
        assert_eq!(review.reject[1].root_px, Some([4.0, 5.5]));
        assert_eq!(Review::parse("", Path::new("review.toml"), 10).unwrap(), Review::default());
    }

    #[test]
    fn faults_name_line_and_nearest_key() {
        for (from, to, line, says) in [
            ("frame = 3", "fraem = 3", 2, "`frame`"),
            ("filament = 2", "filement = 2", 6, "`filament`"),
            ("[[reject]]\nframe", "[[rejct]]\nframe", 1, "[[reject]]"),
            ("frame = 3", "frame = 10", 1, "type 0 to 9"),
            ("frame = 3", "frame = 3\nfilament = 1", 1, "one of them"),
            ("reason = \"lamp\"", "reason = \" \"", 1, "say why"),
            ("reason = \"lamp\"\n", "", 1, "add the line reason"),
            ("[4, 5.5]", "[4, nan]", 5, "pixels"),
            ("frame = 3", "frame = \"x\"", 2, "keys: frame"),
        ] {
            assert!(GOOD.contains(from), "{from}");
            let error = fails(&GOOD.replacen(from, to, 1));
            assert_eq!(error.line, line, "{to}: {error}");
            assert!(error.to_string().contains("review.toml"), "{error}");
            assert!(error.help.contains(says), "{to}: {}", error.help);
        }
    }

    proptest::proptest! {
        #[test]
        fn a_damaged_review_never_panics(at in 0_usize..160, length in 0_usize..30, put in "[\\PC\n]{0,12}") {
            let letters: Vec<char> = GOOD.chars().collect();
            let (from, to) = (at.min(letters.len()), (at + length).min(letters.len()));
            let text: String = letters[..from].iter().copied().chain(put.chars()).chain(letters[to..].iter().copied()).collect();
            if let Err(error) = Review::parse(&text, Path::new("review.toml"), 10) {
                proptest::prop_assert!(error.line >= 1 && error.line <= text.lines().count() + 1);
            }
        }
    }
}
