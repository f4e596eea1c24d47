//! Raw spectra into calibrated, baseline-free spectra with a line window and measured noise.
//!
//! The line window is found by significance: boxes of many widths, grown into the wings, on
//! residuals of a baseline that no line can pull; baseline, noise and its correlation are measured
//! again outside until nothing changes. A pair shares what its stronger line shows.

mod baseline;
mod rebin;
mod regions;
pub mod scale;

pub use rebin::rebin;

use crate::line::Component;
use crate::numeric::Autoregression;
use crate::numeric::robust::clipped_scale;
use crate::spectrum::{Noise, Spectrum, SpectrumError, Window};
use baseline::{Channels, Clipped, NOISE_CLIP, clipped_fit, robust_start};
use regions::{Boxes, Region};

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
    /// The baseline that was subtracted.
    pub baseline: Baseline,
    /// Noise in the line-free channels.
    pub noise: Noise,
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

/// Rounds of window, baseline and noise; they mostly settle in two or three.
const MOST_ROUNDS: usize = 12;

/// In the first round, which takes noise as white, regions beside the line must be this much more
/// significant: smoothed noise must not be sorted into line-free and not.
const FIRST_ROUND: f64 = 2.0;

/// Per cent of a line's width that are added to its window on either side.
const MARGIN_PERCENT: usize = 20;

/// A line seen over a straight baseline is kept if it takes at most this share of the band.
const WIDEST_KEPT: f64 = 0.5;

/// Significance of signal just outside a window from which the window cuts the line.
const CUT_SIGMA: f64 = 4.0;

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
    let outcome = attempt(spectrum, settings, expected)?;
    outcome.require()
}

/// Both lines of a pair, each with its own settings and expectations.
///
/// A line that is not detected takes the window of the other (moved by nothing: both are on the
/// velocity scale of their own rest frequency), widened by its own components. A detected thin
/// line is looked for where the thick line is.
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
    let first = attempt(thick.0, thick.1, thick.2).map_err(thick_error)?;
    if first.detected || thick.1.window.is_some() {
        let window = narrowed(first.prepared.window, &thick.2.components);
        let expected = thin.2.or_window(window);
        let second = attempt(thin.0, thin.1, &expected).map_err(thin_error)?;
        return Ok((first.prepared, second.prepared));
    }
    let second = attempt(thin.0, thin.1, thin.2).map_err(thin_error)?;
    if !second.detected && thin.1.window.is_none() {
        // Neither is seen: the expected windows, if there are any.
        let thick = first.require().map_err(thick_error)?;
        let thin = second.require().map_err(thin_error)?;
        return Ok((thick, thin));
    }
    let window = narrowed(second.prepared.window, &thin.2.components);
    let expected = thick.2.or_window(window);
    let first = attempt(thick.0, thick.1, &expected).map_err(thick_error)?;
    Ok((first.prepared, second.prepared))
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

fn attempt(
    original: &Spectrum,
    settings: &PrepareSettings,
    expected: &Expected,
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
    let mut search = Search {
        channels: &channels,
        settings,
        expected,
        order: order.min(1),
        needed,
        step_km_s: spectrum.channel_width_km_s(),
        at_least: None,
    };
    if order > 1 {
        // A parabola or cubic can follow the faint side of a line: what a straight baseline shows
        // as line stays in the window.
        search.at_least = search
            .run()
            .ok()
            .and_then(|found| found.exclusion.line)
            .filter(|line| line.width() as f64 <= WIDEST_KEPT * channels.len() as f64);
        search.order = order;
    }
    let found = search.run()?;
    Ok(search.finish(spectrum, &found))
}

/// What one round found.
struct Found {
    fit: Clipped,
    scale: f64,
    process: Autoregression,
    exclusion: Exclusion,
}

/// The channels that are not line-free, and why.
struct Exclusion {
    /// The line without margin; `None` where nothing stands out.
    line: Option<Region>,
    /// First and last channel of the window.
    window: Option<(usize, usize)>,
    channels: Vec<bool>,
    /// Significance of the strongest signal.
    significance: f64,
}

impl Exclusion {
    /// Channels that are line-free.
    fn free(&self) -> Vec<usize> {
        (0..self.channels.len())
            .filter(|&i| !self.channels[i])
            .collect()
    }
}

struct Search<'a> {
    channels: &'a Channels,
    settings: &'a PrepareSettings,
    expected: &'a Expected,
    order: usize,
    needed: usize,
    step_km_s: f64,
    /// A line seen before, which the line contains if it overlaps it.
    at_least: Option<Region>,
}

impl Search<'_> {
    /// Rounds of window, baseline and noise until the excluded channels no longer change.
    fn run(&self) -> Result<Found, PrepareError> {
        let channels = self.channels;
        let count = channels.len();
        let mut fit = robust_start(channels, self.order).ok_or_else(|| self.too_few(count))?;
        let residual_scale = fit.scale;
        self.check_scale(residual_scale)?;
        // The line is still in the residuals and would count as correlated noise: white at first.
        let boxes = self.boxes(&fit, residual_scale, &Autoregression::white());
        let mut exclusion = self.exclude(&boxes, FIRST_ROUND * self.settings.detection_sigma);
        for round in 1..=MOST_ROUNDS {
            let free = exclusion.free();
            if free.len() < self.needed {
                return Err(self.too_few(free.len()));
            }
            fit = clipped_fit(channels, self.order, &free, self.settings.clip_sigma)
                .ok_or_else(|| self.too_few(free.len()))?;
            self.check_scale(fit.scale)?;
            let (scale, process) = self.noise(&fit, &self.far(&exclusion));
            let boxes = self.boxes(&fit, scale, &process);
            let next = self.exclude(&boxes, self.settings.detection_sigma);
            if next.channels == exclusion.channels || round == MOST_ROUNDS {
                break;
            }
            exclusion = next;
        }
        let (scale, process) = self.noise(&fit, &exclusion.channels);
        Ok(Found {
            fit,
            scale,
            process,
            exclusion,
        })
    }

    fn too_few(&self, found: usize) -> PrepareError {
        PrepareError::TooFewLineFree {
            found,
            usable: self.channels.len(),
            needed: self.needed,
        }
    }

    /// The excluded channels and, where enough others are left, as many again beside the line: a
    /// faint part that is not seen yet must not count as correlated noise.
    fn far(&self, exclusion: &Exclusion) -> Vec<bool> {
        let excluded = &exclusion.channels;
        let mut far = excluded.clone();
        let Some(line) = exclusion.line else {
            return far;
        };
        let low = line.low.saturating_sub(line.width());
        let high = (line.high + line.width()).min(far.len() - 1);
        far[low..=high].fill(true);
        let left = |mask: &[bool]| mask.iter().filter(|&&is_excluded| !is_excluded).count();
        if left(&far) >= (left(excluded) * 2 / 5).max(2 * self.needed) {
            far
        } else {
            excluded.clone()
        }
    }

    /// Noise and its process on channels that are not excluded, corrected for what the baseline took.
    fn noise(&self, fit: &Clipped, excluded: &[bool]) -> (f64, Autoregression) {
        let residuals = self.channels.residuals(&fit.baseline);
        let free: Vec<f64> = (0..residuals.len())
            .filter(|&i| !excluded[i])
            .map(|i| residuals[i])
            .collect();
        let scale = clipped_scale(&free, NOISE_CLIP);
        let process = self.process(&residuals, scale, excluded);
        let terms = self.order + 1;
        let process = process.before_subtraction(terms, free.len());
        (corrected_scale(scale, terms, free.len(), &process), process)
    }

    fn boxes(&self, fit: &Clipped, scale: f64, process: &Autoregression) -> Boxes {
        let power = scale * scale * process.power_at_zero();
        let variance = self
            .channels
            .leverage(self.order, &fit.kept)
            .iter()
            .map(|leverage| leverage * power)
            .collect();
        let residuals = self.channels.residuals(&fit.baseline);
        Boxes::new(&residuals, scale, process, variance)
    }

    fn check_scale(&self, scale: f64) -> Result<(), PrepareError> {
        let largest = self
            .channels
            .value
            .iter()
            .fold(0.0_f64, |largest, value| largest.max(value.abs()));
        // Below this is the rounding of the values themselves.
        if scale > 1e-12 * largest {
            return Ok(());
        }
        Err(PrepareError::ZeroNoise {
            value_k: crate::numeric::robust::median(&self.channels.value),
        })
    }

    fn process(&self, residuals: &[f64], scale: f64, excluded: &[bool]) -> Autoregression {
        if self.settings.noise_order == 0 {
            return Autoregression::white();
        }
        let limit = 4.0 * scale;
        let segments = self
            .channels
            .segments(|i| !excluded[i] && residuals[i].abs() < limit);
        let slices: Vec<&[f64]> = segments
            .iter()
            .map(|segment| &residuals[segment.clone()])
            .collect();
        Autoregression::fit(&slices, self.settings.noise_order, scale)
    }

    /// First and last channel within a window; `None` where it holds none.
    fn channel_range(&self, window: Window) -> Option<(usize, usize)> {
        let velocity = &self.channels.velocity;
        let low = velocity.partition_point(|&v| v < window.low_km_s);
        let high = velocity.partition_point(|&v| v <= window.high_km_s);
        (low < high).then(|| (low, high - 1))
    }

    /// The line, its window and the channels that are not line-free.
    ///
    /// Regions beyond the line are left out from `other_sigma` standard deviations.
    fn exclude(&self, boxes: &Boxes, other_sigma: f64) -> Exclusion {
        let given = self.settings.window.and_then(|w| self.channel_range(w));
        let favoured = given.or_else(|| self.expected.window.and_then(|w| self.channel_range(w)));
        let (regions, significance) = boxes.regions(self.settings.detection_sigma, favoured);
        let found = self.line(&regions, favoured);
        let line = found.map(|(line, _)| line);
        let mut channels = vec![false; self.channels.len()];
        for region in &regions {
            let of_line = line.is_some_and(|line| line.gap(region) == 0);
            if of_line || region.significance.abs() >= other_sigma {
                let low = region.low.saturating_sub(1);
                let high = (region.high + 1).min(self.channels.len() - 1);
                channels[low..=high].fill(true);
            }
        }
        let window = given
            .or_else(|| found.map(|(line, width)| self.with_margin(line, width, &channels)))
            .or(favoured);
        if let Some((low, high)) = window {
            channels[low..=high].fill(true);
        }
        Exclusion {
            line,
            window,
            channels,
            significance,
        }
    }

    /// The line among the regions, its satellites and companions joined, and the width in channels of
    /// its main part.
    fn line(
        &self,
        regions: &[Region],
        favoured: Option<(usize, usize)>,
    ) -> Option<(Region, usize)> {
        let inside = |region: &&Region| {
            favoured.is_none_or(|(low, high)| region.low <= high && region.high >= low)
        };
        let emission = regions
            .iter()
            .filter(inside)
            .filter(|region| region.significance > 0.0)
            .max_by(|a, b| a.significance.total_cmp(&b.significance));
        let main = emission.or_else(|| {
            regions
                .iter()
                .filter(inside)
                .min_by(|a, b| a.significance.total_cmp(&b.significance))
        })?;
        let mut line = *main;
        if let Some(seen) = self.at_least
            && seen.gap(main) == 0
        {
            line = line.join(&seen);
        }
        if self.expected.components.len() > 1 {
            line = self.with_satellites(line, regions);
        }
        // What lies nearer than the line is wide belongs to it: the other side of a
        // self-absorbed line, a second cloud.
        loop {
            let reach = main.width().max(2);
            let joined = regions
                .iter()
                .filter(|region| region.gap(&line) <= reach)
                .fold(line, |line, region| line.join(region));
            if joined.low == line.low && joined.high == line.high {
                return Some((line, main.width()));
            }
            line = joined;
        }
    }

    /// The main region's line with room for every component of the multiplet.
    ///
    /// The systemic velocity is where the regions' significance, summed over the components'
    /// positions with their weights, is largest.
    fn with_satellites(&self, main: Region, regions: &[Region]) -> Region {
        let velocity = &self.channels.velocity;
        let components = &self.expected.components;
        let signal = |v: f64| {
            let at = velocity.partition_point(|&x| x < v);
            regions
                .iter()
                .filter(|region| region.low <= at && at <= region.high)
                .map(|region| region.significance)
                .fold(0.0, f64::max)
        };
        let score = |v: f64| -> f64 {
            components
                .iter()
                .map(|component| component.weight * signal(v + component.offset_km_s))
                .sum()
        };
        let main_centre = 0.5 * (velocity[main.low] + velocity[main.high]);
        let Some(best) = components
            .iter()
            .map(|component| (component.weight, main_centre - component.offset_km_s))
            .max_by(|a, b| score(a.1).total_cmp(&score(b.1)).then(a.0.total_cmp(&b.0)))
        else {
            return main;
        };
        let half = 0.5 * (velocity[main.high] - velocity[main.low]).max(self.step_km_s);
        let last = velocity.len() - 1;
        components.iter().fold(main, |line, component| {
            let centre = best.1 + component.offset_km_s;
            let low = velocity.partition_point(|&v| v < centre - half).min(last);
            let high = velocity
                .partition_point(|&v| v <= centre + half)
                .clamp(1, last + 1)
                - 1;
            line.join(&Region {
                low,
                high: high.max(low),
                significance: 0.0,
            })
        })
    }

    /// The line's channels with a margin of a share of its main part's width, or of its own if that is
    /// not much more, which leaves enough line-free channels.
    fn with_margin(&self, line: Region, main_width: usize, excluded: &[bool]) -> (usize, usize) {
        let last = self.channels.len() - 1;
        let free = excluded.iter().filter(|&&is_excluded| !is_excluded).count();
        let spare = free.saturating_sub(self.needed.max(self.channels.len() / 5)) / 2;
        let wanted = (line.width().min(2 * main_width) * MARGIN_PERCENT / 100).max(2);
        let margin = wanted.min(spare);
        (
            line.low.saturating_sub(margin),
            (line.high + margin).min(last),
        )
    }

    /// Whether signal goes on beyond the window or the band.
    fn cuts(&self, found: &Found, boxes: &Boxes, window: (usize, usize)) -> bool {
        let last = self.channels.len() - 1;
        let at_band_edge = found
            .exclusion
            .line
            .is_some_and(|line| line.low <= 1 || line.high + 1 >= last);
        let outside = [3, 6, 12].iter().any(|&width| {
            let below =
                window.0 >= width && boxes.significance(window.0 - width, width) > CUT_SIGMA;
            let above =
                window.1 + width <= last && boxes.significance(window.1 + 1, width) > CUT_SIGMA;
            below || above
        });
        at_band_edge || outside
    }

    fn finish(&self, spectrum: &Spectrum, found: &Found) -> Outcome {
        let channels = self.channels;
        let boxes = self.boxes(&found.fit, found.scale, &found.process);
        let last = channels.len() - 1;
        let range = found.exclusion.window.unwrap_or((0, last));
        let edge = |i: usize, side: f64| {
            channels.velocity[i] + side * 0.5 * spectrum.width_km_s()[channels.index[i]]
        };
        let window = self.settings.window.unwrap_or(Window {
            low_km_s: edge(range.0, -1.0),
            high_km_s: edge(range.1, 1.0),
        });
        let values_k: Vec<f64> = if self.settings.baseline_order.is_some() {
            spectrum
                .velocity_km_s()
                .iter()
                .map(|&v| found.fit.baseline.evaluate(v))
                .collect()
        } else {
            vec![0.0; spectrum.len()]
        };
        let subtracted = spectrum.map_temperature_k(|channel, t| t - values_k[channel]);
        let free = found.exclusion.free().len();
        let kept = found.fit.kept.len();
        Outcome {
            detected: found.exclusion.line.is_some(),
            has_window: found.exclusion.window.is_some(),
            significance: found.exclusion.significance,
            needed: self.settings.detection_sigma,
            prepared: Prepared {
                window_cuts_line: self.cuts(found, &boxes, range),
                spectrum: subtracted,
                window,
                window_automatic: self.settings.window.is_none(),
                baseline: Baseline {
                    order: self.settings.baseline_order,
                    values_k,
                    channels: kept,
                    clipped: free - kept,
                },
                noise: Noise {
                    rms_k: found.scale,
                    channels: free,
                    process: found.process.clone(),
                },
            },
        }
    }
}

/// The noise before `terms` of a baseline were fitted to `count` channels of it.
///
/// A smooth component takes the noise's power at frequency zero, S(0) sigma^2, with it: the expected
/// sum of squares is (n - p S(0)) sigma^2.
fn corrected_scale(scale: f64, terms: usize, count: usize, process: &Autoregression) -> f64 {
    let n = count as f64;
    let lost = (terms as f64 * process.power_at_zero()).min(0.5 * n);
    scale * (n / (n - lost)).sqrt()
}
