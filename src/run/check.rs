//! What a file holds and what is doubtful of it, without fitting anything.

use super::{LineSection, RunError};
use crate::line::Line;
use crate::prepare::scale::{ScaleNote, to_spectrum};
use crate::prepare::{Expected, PrepareSettings, Prepared, prepare};
use crate::read::read_spectrum;
use crate::spectrum::{RawSpectrum, Spectrum};
use std::path::Path;

/// What a file holds.
#[derive(Clone, Debug)]
pub struct FileCheck {
    /// The spectrum as the file states it.
    pub raw: RawSpectrum,
    /// The line it was read for, where one was given.
    pub line: Option<Line>,
    /// On the common scale, where its rest frequency is known.
    pub spectrum: Option<Spectrum>,
    /// What was assumed on the way there.
    pub notes: Vec<ScaleNote>,
    /// Window, baseline and noise, where the spectrum allows them.
    pub prepared: Option<Prepared>,
    /// Why not, in words, where it does not.
    pub doubts: Vec<String>,
}

/// Reads a file and says what it holds. With a line name in `section` the velocities refer to that
/// line; without one they refer to the file's own rest frequency.
///
/// # Errors
///
/// [`RunError`] where the file, its scale or the line cannot be used.
pub fn check_file(
    section: &LineSection,
    which: &'static str,
    path: &Path,
    settings: &PrepareSettings,
) -> Result<FileCheck, RunError> {
    let raw = read_spectrum(path, &section.read_options()?)?;
    let line = section
        .line
        .as_ref()
        .map(|_| section.line(which))
        .transpose()?;
    let mut check = FileCheck {
        raw,
        line,
        spectrum: None,
        notes: Vec::new(),
        prepared: None,
        doubts: Vec::new(),
    };
    let own_frequency = check
        .raw
        .rest_frequency_hz
        .map(|frequency| frequency * 1e-9);
    let reference = match (&check.line, own_frequency) {
        (Some(line), _) => line.clone(),
        (None, Some(rest_frequency_ghz)) => {
            Line::custom("the file's line", rest_frequency_ghz, None, None)
                .map_err(|error| RunError::Line { which, error })?
        }
        (None, None) => {
            check.doubts.push(
                "no rest frequency in the file and no line given (--line): velocities stay open"
                    .to_owned(),
            );
            return Ok(check);
        }
    };
    let scaled = to_spectrum(&check.raw, &section.scale_settings(&reference))?;
    check.notes = scaled.notes;
    let expected = Expected {
        components: reference.components.clone(),
        window: None,
    };
    match prepare(&scaled.spectrum, settings, &expected) {
        Ok(prepared) => {
            if prepared.window_cuts_line {
                check
                    .doubts
                    .push("the line goes on beyond its window or the band".to_owned());
            }
            for window in &prepared.other_signal {
                check.doubts.push(format!(
                    "signal outside the line window, {:.2} to {:.2} km/s: another line or cloud",
                    window.low_km_s, window.high_km_s
                ));
            }
            check.prepared = Some(prepared);
        }
        Err(error) => check.doubts.push(error.to_string()),
    }
    check.spectrum = Some(scaled.spectrum);
    Ok(check)
}
