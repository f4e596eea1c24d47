//! The file of settings that a folder of simulated spectra holds, to make it again.

use super::folder::file_error;
use crate::run::RunError;
use serde::{Serialize, de::DeserializeOwned};
use std::path::Path;

/// Its name.
pub(super) const SETTINGS: &str = "settings.toml";

/// Its content; `command` of `inrush simulate` makes `what` again.
pub(super) fn text(
    settings: &impl Serialize,
    what: &str,
    command: &str,
) -> Result<String, RunError> {
    let text = toml::to_string(settings).map_err(|error| RunError::Internal(error.to_string()))?;
    Ok(format!(
        "# Make this {what} again: inrush simulate {command} --settings {SETTINGS} --out DIR\n\n{text}"
    ))
}

/// Reads one.
///
/// # Errors
///
/// [`RunError::File`] where it cannot be read, [`RunError::Sheet`] where it holds no settings.
pub(super) fn read<S: DeserializeOwned>(path: &Path) -> Result<S, RunError> {
    let text = std::fs::read_to_string(path).map_err(|source| file_error(path, source))?;
    toml::from_str(&text).map_err(|error| RunError::of_toml(&error, &text, path))
}
