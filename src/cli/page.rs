//! Pages and pictures to their files.

use super::args::PageArguments;
use super::exit::{Exit, Failure};
use super::files;
use crate::page::KeptText;
use crate::plot::{Medium, Picture};
use std::io::Write;

/// Writes the page and the picture that were asked for; each is made only then.
pub(super) fn put(
    arguments: &PageArguments,
    page: impl FnOnce() -> Result<String, Failure>,
    picture: impl FnOnce() -> Picture,
) -> Result<(), Failure> {
    if let Some(place) = &arguments.report {
        write(place, &page()?)?;
    }
    if let Some(place) = &arguments.plot {
        write(place, &picture().svg(Medium::File))?;
    }
    Ok(())
}

/// Writes a text whole or not at all.
pub(super) fn write(place: &str, text: &str) -> Result<(), Failure> {
    files::write_atomically(place, |out| out.write_all(text.as_bytes())).map_err(|error| Failure::file(place, &error))
}

/// A page, or the message that there is none.
pub(super) fn written(page: serde_json::Result<String>) -> Result<String, Failure> {
    page.map_err(|error| Failure::Told(Exit::File, format!("the page cannot be made: {error}")))
}

/// The text of a bench file, to be kept in a page.
pub(super) fn kept_text(name: &str) -> Result<KeptText, Failure> {
    let text = files::read_text(name).map_err(|error| Failure::file(name, &error))?;
    Ok(KeptText { file: name.to_owned(), text })
}
