//! Why a clump, a molecule or a solution cannot be had.

/// Why there is no sphere. `Display` says what was found and what was expected;
/// [`SphereError::hint`] what to do.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SphereError {
    /// A property of the clump, the beam or the solution that is outside of what is possible.
    #[error("{quantity} {found}, expected {expected}")]
    Impossible {
        /// What has the value, with its unit in the name.
        quantity: &'static str,
        /// The value.
        found: f64,
        /// What is possible, in words.
        expected: &'static str,
    },
    /// A table of shells whose columns have different lengths.
    #[error("{found} values of {quantity}, expected {expected}")]
    Length {
        /// The column.
        quantity: &'static str,
        /// Its length.
        found: usize,
        /// The length that goes with the others.
        expected: usize,
    },
    /// A molecular data file that cannot be understood.
    #[error("{file}:{line}: {found}, expected {expected}")]
    Molecule {
        /// Name of the file.
        file: String,
        /// The line, from 1.
        line: usize,
        /// What stands there.
        found: String,
        /// What should.
        expected: String,
    },
    /// No molecular data of that name are built in.
    #[error("no collision data of `{found}` are built in, expected one of {known}")]
    NotBuiltIn {
        /// The name.
        found: String,
        /// Those that are.
        known: &'static str,
    },
    /// The molecular data hold no such transition.
    #[error("{molecule} has no transition at {frequency_ghz} GHz, nearest is {nearest_ghz} GHz")]
    NoTransition {
        /// The molecule.
        molecule: String,
        /// The frequency, GHz.
        frequency_ghz: f64,
        /// The nearest that there is, GHz.
        nearest_ghz: f64,
    },
    /// The molecular data hold no collision partner that a clump has.
    #[error("{molecule} has no rates of collisions with H2, expected partner 1, 2 or 3")]
    NoPartner {
        /// The molecule.
        molecule: String,
    },
    /// Levels that nothing connects with the lower ones.
    #[error("{molecule}: level {level} has no way down, expected collisions or radiation")]
    LevelUnconnected {
        /// The molecule.
        molecule: String,
        /// The level, from 1.
        level: usize,
    },
    /// The populations did not settle.
    #[error(
        "level populations still uncertain by {found:.1e} after {iterations} iterations, expected {tolerance:.1e}"
    )]
    NotConverged {
        /// The estimated relative error of the worst population.
        found: f64,
        /// What was asked for.
        tolerance: f64,
        /// Iterations made.
        iterations: usize,
    },
}

impl SphereError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        match self {
            Self::Impossible { .. } => None,
            Self::Length { .. } => Some("give one value a shell, and one edge more".to_owned()),
            Self::Molecule { .. } => Some(
                "the file has to be in LAMDA format: a comment line that starts with `!` before each part"
                    .to_owned(),
            ),
            Self::NotBuiltIn { .. } => {
                Some("give a file with its molecular data in LAMDA format".to_owned())
            }
            Self::NoTransition { .. } => {
                Some("check that the line belongs to the molecule of the data file".to_owned())
            }
            Self::NoPartner { .. } => {
                Some("use a data file with rates of collisions with H2".to_owned())
            }
            Self::LevelUnconnected { .. } => Some("keep fewer levels".to_owned()),
            Self::NotConverged { .. } => {
                Some("allow more iterations, or lower the abundance".to_owned())
            }
        }
    }
}

/// A value if it is within what is possible.
pub(super) fn checked(
    quantity: &'static str,
    found: f64,
    possible: bool,
    expected: &'static str,
) -> Result<f64, SphereError> {
    if possible && found.is_finite() {
        Ok(found)
    } else {
        Err(SphereError::Impossible {
            quantity,
            found,
            expected,
        })
    }
}
