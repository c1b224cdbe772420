//! Pictures in files of their own: the envelope, and a plan's current over time.
//!
//! What is drawn is taken from the same views that are printed and given as JSON.

mod envelope;
mod plan;

use std::fs;
use std::path::Path;

use anyhow::Result;

use crate::exit::hinted;

pub(crate) use envelope::envelope;
pub(crate) use plan::plan;

/// Writes a picture, over an earlier one of that name.
///
/// # Errors
/// What the operating system says, with the file's name.
pub(crate) fn write(path: &Path, picture: &str) -> Result<()> {
    fs::write(path, picture).map_err(|error| {
        hinted(
            format!("cannot write the picture {}: {error}", path.display()),
            "name a file in a folder that is there with --plot",
        )
    })
}
