//! The two streams: data on stdout, messages on stderr. A reader that closes stdout early ends the
//! program quietly.

use inrush::run::RunError;
use std::io::{ErrorKind, IsTerminal, Write};
use std::path::{Path, PathBuf};

/// Where messages go, and which of them.
#[derive(Clone, Copy, Debug)]
pub struct Output {
    quiet: bool,
}

impl Output {
    /// Messages below errors are left out where `quiet`.
    pub fn new(quiet: bool) -> Self {
        Self { quiet }
    }

    /// Data.
    pub fn data(text: &str) -> Result<(), RunError> {
        let mut stdout = std::io::stdout().lock();
        match stdout
            .write_all(text.as_bytes())
            .and_then(|()| stdout.flush())
        {
            Err(error) if error.kind() == ErrorKind::BrokenPipe => Ok(()),
            result => result.map_err(|source| RunError::File {
                path: PathBuf::from("stdout"),
                source,
            }),
        }
    }

    /// What was assumed or done.
    pub fn note(&self, text: &str) {
        if !self.quiet {
            Self::message(&format!("note: {text}\n"));
        }
    }

    /// Which files were written into a directory; nothing of none.
    pub fn wrote(&self, files: &[PathBuf], directory: &Path) {
        let names: Vec<String> = files
            .iter()
            .filter_map(|path| Some(path.file_name()?.to_string_lossy().into_owned()))
            .collect();
        if !names.is_empty() {
            self.note(&format!(
                "wrote {} into {}",
                names.join(", "),
                directory.display()
            ));
        }
    }

    /// What could not be used while the rest was done.
    pub fn warning(text: &str) {
        Self::message(&format!("warning: {text}\n"));
    }

    /// What went wrong, and what to do about it.
    pub fn error(text: &str, hint: Option<&str>) {
        let hint = hint.map_or(String::new(), |hint| format!("\nhint: {hint}\n"));
        Self::message(&format!("error: {text}\n{hint}"));
    }

    /// Whether somebody watches.
    pub fn shows_progress(&self) -> bool {
        !self.quiet && std::io::stderr().is_terminal()
    }

    /// A line on a terminal that the next one is written over.
    pub fn transient(text: &str) {
        const CLEAR_LINE: &str = "\r\x1b[K";
        Self::message(&format!("{CLEAR_LINE}{text}"));
    }

    fn message(text: &str) {
        // a closed stderr leaves nobody to tell
        let _ = std::io::stderr().lock().write_all(text.as_bytes());
    }
}
