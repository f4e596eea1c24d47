//! Raw spectra into calibrated, baseline-free spectra with a line window and measured noise.
//!
//! The line window is found by significance: boxes of many widths, grown into the wings, on
//! residuals of a baseline that no line can pull; baseline, noise and its correlation are measured
//! again outside until nothing changes. A pair shares what its stronger line shows.

mod baseline;
mod rebin;
mod regions;
pub mod scale;
mod search;

pub use rebin::rebin;

use crate::line::Component;
use crate::spectrum::{Noise, Spectrum, SpectrumError, Window};
use baseline::Channels;
use search::Search;

/// A spectrum ready to be measured and fitted.
#[derive(Clone, Debug, PartialEq)]
pub struct Prepared {
    /// Baseline-subtracted spectrum.
    pub spectrum: Spectrum,
    /// Line window.
    pub window: Window,
    /// Whether the window was found here (`true`) or given by the user (`false`).
    pub window_automatic: bool,
    /// Whether the line seems to go on beyond the window or the band.
    pub window_cuts_line: bool,
    /// Significant signal apart from the line, such as another species' or another cloud's, ascending:
    /// neither baseline nor noise is measured on it, and it does not count in fits.
    pub other_signal: Vec<Window>,
    /// The baseline that was subtracted.
    pub baseline: Baseline,
    /// Noise in the line-free channels.
    pub noise: Noise,
}

impl Prepared {
    /// A spectrum that needs no preparation: no baseline is subtracted, and there is no other signal in it.
    pub fn as_given(spectrum: Spectrum, window: Window, noise: Noise) -> Self {
        let channels = spectrum.len();
        Self {
            spectrum,
            window,
            window_automatic: false,
            window_cuts_line: false,
            other_signal: Vec::new(),
            baseline: Baseline {
                order: None,
                values_k: vec![0.0; channels],
                channels,
                clipped: 0,
            },
            noise,
        }
    }

    /// Whether a velocity (km/s) is in other signal than the line's.
    pub fn is_other_signal(&self, velocity_km_s: f64) -> bool {
        self.other_signal
            .iter()
            .any(|other| other.contains(velocity_km_s))
    }

    /// Whether a velocity (km/s) is in neither the line's window nor other signal.
    pub fn is_line_free(&self, velocity_km_s: f64) -> bool {
        !self.window.contains(velocity_km_s) && !self.is_other_signal(velocity_km_s)
    }
}

/// A fitted and subtracted polynomial baseline.
#[derive(Clone, Debug, PartialEq)]
pub struct Baseline {
    /// Polynomial order, 0 to 3; `None` where none was asked for.
    pub order: Option<usize>,
    /// Value of the subtracted baseline in each channel, K.
    pub values_k: Vec<f64>,
    /// Channels it was fitted on, after clipping.
    pub channels: usize,
    /// Line-free channels that clipping left out.
    pub clipped: usize,
}

/// How a spectrum is prepared.
#[derive(Clone, Debug, PartialEq)]
pub struct PrepareSettings {
    /// Line window of the user's; `None` to find it.
    pub window: Option<Window>,
    /// Order of the polynomial baseline, 0 to 3; `None` subtracts nothing.
    pub baseline_order: Option<usize>,
    /// Width of the channels to average to, km/s; `None` leaves them.
    pub smooth_to_km_s: Option<f64>,
    /// Line-free channels beyond this many standard deviations are left out of the baseline.
    pub clip_sigma: f64,
    /// Significance from which signal counts as a line, in standard deviations.
    pub detection_sigma: f64,
    /// Highest order of the noise process; 0 takes noise as white without looking.
    pub noise_order: usize,
}

impl Default for PrepareSettings {
    fn default() -> Self {
        Self {
            window: None,
            baseline_order: Some(1),
            smooth_to_km_s: None,
            clip_sigma: 3.0,
            detection_sigma: 4.5,
            noise_order: 10,
        }
    }
}

/// What is known of a line before it is looked at.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Expected {
    /// Components of the line, so that a multiplet's satellites lie in the window; empty or a single
    /// one for a line without structure.
    pub components: Vec<Component>,
    /// Where the line is looked for, and the window that is taken if it is not found there.
    pub window: Option<Window>,
}

/// Why a spectrum cannot be prepared.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
pub enum PrepareError {
    /// Too few channels are free of signal for a baseline and its noise.
    #[error("{found} line-free channels of {usable} usable ones, expected at least {needed}")]
    TooFewLineFree {
        /// Channels without signal.
        found: usize,
        /// Channels that hold a number.
        usable: usize,
        /// Channels needed.
        needed: usize,
    },
    /// The given window holds no channel, or its ends are not in order.
    #[error(
        "line window {low_km_s} to {high_km_s} km/s, expected a range within the band \
         {band_low_km_s:.3} to {band_high_km_s:.3} km/s"
    )]
    WindowOutsideBand {
        /// Lower end of the window, km/s.
        low_km_s: f64,
        /// Upper end of the window, km/s.
        high_km_s: f64,
        /// First channel, km/s.
        band_low_km_s: f64,
        /// Last channel, km/s.
        band_high_km_s: f64,
    },
    /// The baseline order is above 3.
    #[error("baseline order {order}, expected 0 to 3")]
    OrderTooHigh {
        /// The order asked for.
        order: usize,
    },
    /// Smoothing asks for channels narrower than there are.
    #[error(
        "smoothing to {asked_km_s} km/s, expected at least the channel width {channel_km_s:.4} km/s"
    )]
    SmoothingTooFine {
        /// Width asked for, km/s.
        asked_km_s: f64,
        /// Widest present channel, km/s.
        channel_km_s: f64,
    },
    /// Smoothing asks for a channel wider than the band.
    #[error("smoothing to {asked_km_s} km/s, expected less than the band of {band_km_s:.3} km/s")]
    SmoothingTooCoarse {
        /// Width asked for, km/s.
        asked_km_s: f64,
        /// Width of the band, km/s.
        band_km_s: f64,
    },
    /// The line-free channels do not vary.
    #[error("no noise: most line-free channels hold the same value ({value_k} K), expected noise")]
    ZeroNoise {
        /// The value, K.
        value_k: f64,
    },
    /// No signal stands out, and no window was given.
    #[error(
        "no line found: the most significant signal has {significance:.1} sigma, expected {needed}"
    )]
    NoLine {
        /// Significance of the strongest signal, in standard deviations.
        significance: f64,
        /// Significance needed.
        needed: f64,
    },
    /// A setting has a value that makes no sense.
    #[error("{name} = {value}, expected {expected}")]
    Setting {
        /// Name of the setting.
        name: &'static str,
        /// Its value.
        value: f64,
        /// What it should be.
        expected: &'static str,
    },
    /// Nothing usable is left.
    #[error(transparent)]
    Spectrum(#[from] SpectrumError),
}

impl PrepareError {
    /// What to do about it.
    pub fn hint(&self) -> Option<String> {
        let text = match self {
            Self::TooFewLineFree { .. } => {
                "give a narrower line window, a lower baseline order, or a spectrum with more band"
            }
            Self::WindowOutsideBand { .. } => {
                "give the window in LSRK km/s, lower end first, or leave it out to have it found"
            }
            Self::OrderTooHigh { .. } => {
                "higher orders follow the line; remove strong ripple before"
            }
            Self::SmoothingTooFine { .. } => "leave smoothing out, or give a wider channel",
            Self::SmoothingTooCoarse { .. } => "give a narrower channel",
            Self::ZeroNoise { .. } => {
                "the noise is measured outside the line; is this a model, or were channels filled?"
            }
            Self::NoLine { .. } => "give the line window, or a pair whose other line is detected",
            Self::Setting { .. } => "leave it out for the default",
            Self::Spectrum(_) => "smooth less, or check the blank channels",
        };
        Some(text.to_owned())
    }
}

/// Which line of a pair.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum PairLine {
    /// The optically thick line.
    Thick,
    /// The optically thin line.
    Thin,
}

/// A line of a pair that cannot be prepared.
#[derive(Clone, Debug, PartialEq, thiserror::Error)]
#[error("{} line: {error}", match line { PairLine::Thick => "thick", PairLine::Thin => "thin" })]
pub struct PairError {
    /// Which line.
    pub line: PairLine,
    /// Why.
    #[source]
    pub error: PrepareError,
}

impl PairError {
    /// What to do about it.
    pub fn hint(&self) -> Option<String> {
        self.error.hint()
    }
}

/// Line-free channels needed beyond the terms of the baseline: with fewer, the noise is known to
/// worse than about 20 %.
const LINE_FREE_NEEDED: usize = 12;

/// Baseline-free spectrum with its line window and noise.
///
/// Smooths first if asked to, then finds the window (unless given), subtracts the baseline and
/// measures noise and correlation on the line-free channels.
///
/// # Errors
///
/// [`PrepareError`]; [`PrepareError::NoLine`] where no line stands out and neither the settings nor
/// `expected` hold a window.
pub fn prepare(
    spectrum: &Spectrum,
    settings: &PrepareSettings,
    expected: &Expected,
) -> Result<Prepared, PrepareError> {
    let outcome = attempt(spectrum, settings, expected, None)?;
    outcome.require()
}

/// Both lines of a pair, each with its own settings and expectations.
///
/// A line that is not detected takes the window of the other (moved by nothing: both are on the
/// velocity scale of their own rest frequency), widened by its own components. A detected thin
/// line is looked for where the thick line is. Where the thick spectrum shows several lines, the
/// one that the thin line overlaps is taken, or the nearest if it is no farther away than the thin
/// line is wide; else the brightest. A window given for either line is taken as it is.
///
/// # Errors
///
/// [`PairError`] with the line; [`PrepareError::NoLine`] for the thick line where neither is detected
/// and no window was given.
pub fn prepare_pair(
    thick: (&Spectrum, &PrepareSettings, &Expected),
    thin: (&Spectrum, &PrepareSettings, &Expected),
) -> Result<(Prepared, Prepared), PairError> {
    let thick_error = |error| PairError {
        line: PairLine::Thick,
        error,
    };
    let thin_error = |error| PairError {
        line: PairLine::Thin,
        error,
    };
    let mut first = attempt(thick.0, thick.1, thick.2, None).map_err(thick_error)?;
    let windows = [thick.1.window, thick.2.window, thin.1.window, thin.2.window];
    if first.lines.len() > 1 && windows.iter().all(Option::is_none) {
        // A thin spectrum that cannot be prepared by itself tells nothing here.
        let toward = attempt(thin.0, thin.1, thin.2, None)
            .ok()
            .and_then(|alone| better_placed(&first.lines, &alone.lines));
        if toward.is_some() {
            first = attempt(thick.0, thick.1, thick.2, toward).map_err(thick_error)?;
        }
    }
    if first.detected || thick.1.window.is_some() {
        let window = narrowed(first.prepared.window, &thick.2.components);
        let expected = thin.2.or_window(window);
        let second = attempt(thin.0, thin.1, &expected, None).map_err(thin_error)?;
        let second = second.require().map_err(thin_error)?;
        return Ok((first.prepared, second));
    }
    let second = attempt(thin.0, thin.1, thin.2, None).map_err(thin_error)?;
    if !second.detected && thin.1.window.is_none() {
        // Neither is seen: the expected windows, if there are any.
        let thick = first.require().map_err(thick_error)?;
        let thin = second.require().map_err(thin_error)?;
        return Ok((thick, thin));
    }
    let window = narrowed(second.prepared.window, &thin.2.components);
    let expected = thick.2.or_window(window);
    let first = attempt(thick.0, thick.1, &expected, None)
        .and_then(Outcome::require)
        .map_err(thick_error)?;
    Ok((first, second.prepared))
}

/// Where the thick line is to be looked for, if not in its brightest line: the thin spectrum's most
/// significant line that overlaps a line of the thick spectrum, or its most significant one.
///
/// Both lists are of systemic velocities, the most significant first.
fn better_placed(thick: &[Window], thin: &[Window]) -> Option<Window> {
    let overlaps = |line: &&Window| thick.iter().any(|one| one.apart_km_s(line) == 0.0);
    let thin = thin.iter().find(overlaps).or(thin.first())?;
    let brightest = thick.first()?.apart_km_s(thin);
    let nearest = thick
        .iter()
        .map(|one| one.apart_km_s(thin))
        .fold(f64::INFINITY, f64::min);
    let near_enough = nearest <= thin.high_km_s - thin.low_km_s;
    (near_enough && nearest < brightest).then_some(*thin)
}

impl Window {
    /// Velocities between two windows, km/s; 0 where they touch or overlap.
    fn apart_km_s(&self, other: &Self) -> f64 {
        (self.low_km_s - other.high_km_s)
            .max(other.low_km_s - self.high_km_s)
            .max(0.0)
    }
}

impl Expected {
    /// The same with a window, widened by the components, where there is none yet.
    fn or_window(&self, window: Window) -> Self {
        let (below, above) = spread(&self.components);
        Self {
            components: self.components.clone(),
            window: self.window.or(Some(Window {
                low_km_s: window.low_km_s + below,
                high_km_s: window.high_km_s + above,
            })),
        }
    }
}

/// A multiplet's window without the room for its satellites.
fn narrowed(window: Window, components: &[Component]) -> Window {
    let (below, above) = spread(components);
    let (low, high) = (window.low_km_s - below, window.high_km_s - above);
    if low < high {
        Window {
            low_km_s: low,
            high_km_s: high,
        }
    } else {
        window
    }
}

/// Lowest and highest offset of the components, km/s; zero for a single line.
fn spread(components: &[Component]) -> (f64, f64) {
    components
        .iter()
        .fold((0.0, 0.0), |(low, high): (f64, f64), component| {
            (
                low.min(component.offset_km_s),
                high.max(component.offset_km_s),
            )
        })
}

/// A spectrum prepared with or without a line in it.
struct Outcome {
    prepared: Prepared,
    /// Whether a line stands out.
    detected: bool,
    /// Systemic velocities of all lines in emission, the most significant first.
    lines: Vec<Window>,
    /// Whether the window rests on anything: a detection, the user, an expectation.
    has_window: bool,
    significance: f64,
    needed: f64,
}

impl Outcome {
    fn require(self) -> Result<Prepared, PrepareError> {
        if self.has_window {
            Ok(self.prepared)
        } else {
            Err(PrepareError::NoLine {
                significance: self.significance,
                needed: self.needed,
            })
        }
    }
}

fn check(settings: &PrepareSettings) -> Result<(), PrepareError> {
    if let Some(order) = settings.baseline_order
        && order > 3
    {
        return Err(PrepareError::OrderTooHigh { order });
    }
    for (name, value) in [
        ("clip_sigma", settings.clip_sigma),
        ("detection_sigma", settings.detection_sigma),
    ] {
        if !value.is_finite() || value < 2.0 {
            return Err(PrepareError::Setting {
                name,
                value,
                expected: "a number of at least 2",
            });
        }
    }
    Ok(())
}

fn check_window(window: Window, channels: &Channels) -> Result<(), PrepareError> {
    let holds_any = channels.velocity.iter().any(|&v| window.contains(v));
    if holds_any {
        return Ok(());
    }
    Err(PrepareError::WindowOutsideBand {
        low_km_s: window.low_km_s,
        high_km_s: window.high_km_s,
        band_low_km_s: channels.velocity[0],
        band_high_km_s: channels.velocity[channels.len() - 1],
    })
}

/// `toward` are systemic velocities to which the line is chosen among several.
fn attempt(
    original: &Spectrum,
    settings: &PrepareSettings,
    expected: &Expected,
    toward: Option<Window>,
) -> Result<Outcome, PrepareError> {
    check(settings)?;
    let rebinned = match settings.smooth_to_km_s {
        Some(width_km_s) => Some(rebin(original, width_km_s)?),
        None => None,
    };
    let spectrum = rebinned.as_ref().unwrap_or(original);
    let channels = Channels::of(spectrum);
    let order = settings.baseline_order.unwrap_or(0);
    let needed = LINE_FREE_NEEDED + order + 1;
    if channels.len() < needed {
        return Err(PrepareError::TooFewLineFree {
            found: channels.len(),
            usable: channels.len(),
            needed,
        });
    }
    if let Some(window) = settings.window {
        check_window(window, &channels)?;
    }
    Search::new(spectrum, &channels, settings, expected, needed)
        .toward(toward)
        .outcome(spectrum)
}
