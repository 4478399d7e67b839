//! Progress that also keeps a picture of every used frame, for a report that shows them all: written as they come,
//! so that memory holds one.

use std::path::Path;
use std::sync::Mutex;

use image::GrayImage;
use tempfile::TempDir;

use super::progress::Bar;
use crate::Error;
use crate::pipeline::Progress;
use crate::report::{self, data_uri, stale};
use crate::results::Results;

/// A bar, and a folder of pictures beside the output.
pub(super) struct Keeper<'a> {
    bar: &'a Bar,
    folder: TempDir,
    fault: Mutex<Option<report::Error>>,
}

impl<'a> Keeper<'a> {
    /// Keeps pictures in a hidden folder beside `target`, on the same disc.
    ///
    /// # Errors
    /// Where that folder cannot be made.
    pub(super) fn new(bar: &'a Bar, target: &Path) -> Result<Self, Error> {
        Ok(Self { bar, folder: stale::beside(target)?, fault: Mutex::new(None) })
    }

    /// The folder, with one picture a usable frame and nothing else.
    ///
    /// # Errors
    /// Where a picture could not be written.
    pub(super) fn finished(&self, results: &Results) -> Result<&Path, Error> {
        if let Some(fault) = self.fault.lock().ok().and_then(|mut fault| fault.take()) {
            return Err(fault.into());
        }
        // A first pass may have kept frames that a review has since set aside.
        for row in results.frames.iter().filter(|row| !row.usable) {
            let path = self.folder.path().join(name(row.frame));
            if path.exists() {
                std::fs::remove_file(&path).map_err(|source| Error::Io { path, source })?;
            }
        }
        Ok(self.folder.path())
    }
}

fn name(frame: usize) -> String {
    format!("{frame:06}.jpg")
}

impl Progress for Keeper<'_> {
    fn stage(&self, name: &str, frames: Option<usize>) {
        self.bar.stage(name, frames);
    }

    fn frame(&self) {
        self.bar.frame();
    }

    fn corrected(&self, frame: usize, draw: &dyn Fn() -> GrayImage) {
        let path = self.folder.path().join(name(frame));
        if let (Err(fault), Ok(mut first)) = (data_uri::write_jpeg(&draw(), data_uri::LARGE, &path), self.fault.lock())
        {
            first.get_or_insert(fault);
        }
    }
}
