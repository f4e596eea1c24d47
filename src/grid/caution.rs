//! What a reader of one pointing of a map has to know beside the cautions of its pair.

/// Which mean stands in the place of a pointing's thin line.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ThinMean {
    /// Over the beam.
    Beam,
    /// Over the map.
    Map,
}

/// A reason to take a pointing with care, or why it has no result.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum GridCaution {
    /// The thick line is below the threshold: nothing was fitted.
    BelowThreshold,
    /// The spectra could not be used.
    Unusable,
    /// The thin line is too weak: a mean took its place.
    ThinMean(ThinMean),
}

impl GridCaution {
    /// The short code of the tables.
    #[must_use]
    pub fn code(self) -> &'static str {
        match self {
            Self::BelowThreshold => "below-threshold",
            Self::Unusable => "unusable",
            Self::ThinMean(ThinMean::Beam) => "thin-beam-mean",
            Self::ThinMean(ThinMean::Map) => "thin-map-mean",
        }
    }

    /// The sentence for people.
    #[must_use]
    pub fn text(self) -> &'static str {
        match self {
            Self::BelowThreshold => "the thick line is below the threshold: nothing was fitted",
            Self::Unusable => "the spectra could not be used",
            Self::ThinMean(ThinMean::Beam) => {
                "the thin line is too weak here: its mean over the beam took its place"
            }
            Self::ThinMean(ThinMean::Map) => {
                "the thin line is too weak here: its mean over the map took its place"
            }
        }
    }
}
