//! Why a truth cannot be simulated.

use crate::spectrum::SpectrumError;
use std::fmt;

/// One line of the pair.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum PairLine {
    /// The optically thick one.
    Thick,
    /// The optically thin one.
    Thin,
}

impl PairLine {
    /// Number of its stream of random numbers.
    pub(super) fn stream(self) -> u64 {
        match self {
            Self::Thick => 1,
            Self::Thin => 2,
        }
    }
}

impl fmt::Display for PairLine {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.write_str(match self {
            Self::Thick => "thick line",
            Self::Thin => "thin line",
        })
    }
}

/// Why a truth cannot be simulated.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum SimulateError {
    /// A parameter that the model does not have.
    #[error("{line}: parameter `{name}`, expected one of the {model} model: {known}")]
    UnknownParameter {
        /// Which line.
        line: PairLine,
        /// The name.
        name: String,
        /// Name of the model.
        model: &'static str,
        /// The model's parameters.
        known: String,
        /// The nearest of them.
        nearest: &'static str,
    },
    /// A parameter of the model that has no value.
    #[error("{line}: no value of `{name}`, expected one for the {model} model")]
    MissingParameter {
        /// Which line.
        line: PairLine,
        /// The parameter.
        name: &'static str,
        /// Name of the model.
        model: &'static str,
    },
    /// A value outside of what is possible.
    #[error("{line}: {quantity} {found}{unit}, expected {expected}")]
    Impossible {
        /// Which line.
        line: PairLine,
        /// What has the value.
        quantity: &'static str,
        /// The value.
        found: f64,
        /// Its unit with a blank before it; empty for a pure number.
        unit: &'static str,
        /// What is possible, in words.
        expected: String,
    },
    /// A thick line's model for the thin line.
    #[error("thin line: model {model}, expected gaussian, two-gaussians or layer")]
    ThinModel {
        /// Name of the model.
        model: &'static str,
    },
    /// The range of velocities is empty.
    #[error("{line}: velocities from {low_km_s} to {high_km_s} km/s, expected the lower first")]
    EmptyRange {
        /// Which line.
        line: PairLine,
        /// Lower end, km/s.
        low_km_s: f64,
        /// Upper end, km/s.
        high_km_s: f64,
    },
    /// Too few or too many channels.
    #[error("{line}: {channels:.0} channels, expected {fewest} to {most}")]
    ChannelCount {
        /// Which line.
        line: PairLine,
        /// Channels that range and width make.
        channels: f64,
        /// Fewest that are made.
        fewest: usize,
        /// Most that are made.
        most: usize,
    },
    /// The line's velocity lies outside the band.
    #[error(
        "{line}: {name} {found_km_s} km/s, expected within the band {low_km_s} to {high_km_s} km/s"
    )]
    OutsideBand {
        /// Which line.
        line: PairLine,
        /// The velocity's parameter.
        name: &'static str,
        /// Its value, km/s.
        found_km_s: f64,
        /// Lower end of the band, km/s.
        low_km_s: f64,
        /// Upper end of the band, km/s.
        high_km_s: f64,
    },
    /// A signal-to-noise ratio for a line without signal.
    #[error("{line}: a signal-to-noise ratio, but the line has no signal")]
    NoPeak {
        /// Which line.
        line: PairLine,
    },
    /// A ratio that links the optical depths of lines that have none, or one given twice.
    #[error("isotope ratio: {found}, expected {expected}")]
    IsotopeRatio {
        /// What stands against it.
        found: String,
        /// What it needs.
        expected: &'static str,
    },
    /// A setting of a sample or a map that cannot be used.
    #[error("{quantity} {found}, expected {expected}")]
    Sample {
        /// The setting.
        quantity: &'static str,
        /// What it is.
        found: String,
        /// What it may be.
        expected: String,
    },
    /// A seed that a truth file cannot hold.
    #[error("seed {found}, expected at most {}", i64::MAX)]
    Seed {
        /// The seed.
        found: u64,
    },
    /// The values do not make a spectrum.
    #[error("{line}: {error}")]
    Spectrum {
        /// Which line.
        line: PairLine,
        /// Why not.
        error: SpectrumError,
    },
}

impl SimulateError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> Option<String> {
        Some(match self {
            Self::UnknownParameter { nearest, .. } => format!("did you mean `{nearest}`?"),
            Self::MissingParameter { name, .. } => format!("give it a value: {name} = ..."),
            Self::ThinModel { .. } => {
                "choose gaussian, layer, or two-gaussians for two clouds".to_owned()
            }
            Self::ChannelCount { channels, most, .. } if *channels > *most as f64 => {
                "choose wider channels or a narrower range".to_owned()
            }
            Self::EmptyRange { .. } | Self::ChannelCount { .. } => {
                "choose a wider range".to_owned()
            }
            Self::OutsideBand { .. } => "choose a range that holds the line".to_owned(),
            Self::NoPeak { .. } => "give the noise in K".to_owned(),
            Self::IsotopeRatio { .. } => {
                "use it with a thick line that has an optical depth and a thin layer without its own"
                    .to_owned()
            }
            Self::Sample {
                quantity: "channels",
                ..
            } => "choose more or wider channels".to_owned(),
            Self::Impossible { .. }
            | Self::Sample { .. }
            | Self::Seed { .. } | Self::Spectrum { .. } => return None,
        })
    }
}
