//! Asymmetry measures of a pair, straight from the channels: no model here.
//!
//! Sums run over the thick line's window; peaks and dips are extrema of the profile smoothed over
//! 0.45 `FWHM_thin` to either side. Every error follows to first order from channel noise, its
//! correlation, the baseline, and the thin line's velocity and width with their covariance.
//! Sources: Mardones et al. 1997 (doi:10.1086/304812), Jackson et al. 2019
//! (doi:10.3847/1538-4357/aaef84), Myers et al. 1996 (doi:10.1086/310146), eq. 9 from memory.

mod about;
mod moment;
mod noise;
mod peaks;
mod sides;
mod smooth;

pub use moment::first_moment;
pub use sides::{Sides, sides};

use crate::line::Component;
use crate::numeric::Estimate;
use crate::prepare::Prepared;
use crate::spectrum::Window;
use about::About;
use noise::ChannelNoise;
use peaks::Profile;
use smooth::{Extremum, Smoothed};

/// The thin line's velocity and width that every measure is relative to, from its fit.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct ThinLine {
    /// Centre velocity, km/s.
    pub v_km_s: Estimate,
    /// Full width at half maximum, km/s.
    pub fwhm_km_s: Estimate,
    /// Covariance of the two, (km/s)^2.
    pub covariance_v_fwhm: f64,
    /// Peak temperature, K.
    pub peak_k: Estimate,
}

/// Sense of the thick line's asymmetry (Mardones et al. 1997).
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum ProfileClass {
    /// Normalised velocity difference below -0.25, its sign certain.
    Blue,
    /// Normalised velocity difference above 0.25, its sign certain.
    Red,
    /// In between.
    Neither,
    /// One of the lines is not detected, or the thick line's components overlap and it has no
    /// velocity of its own.
    Undetected,
}

/// Minimum between two peaks of the thick line, and the peaks.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct TwoPeaks {
    /// Velocity of the blue peak, km/s.
    pub v_blue_km_s: Estimate,
    /// Velocity of the red peak, km/s.
    pub v_red_km_s: Estimate,
    /// Velocity of the dip, km/s.
    pub v_dip_km_s: Estimate,
    /// Temperature of the blue peak, K.
    pub blue_k: Estimate,
    /// Temperature of the red peak, K.
    pub red_k: Estimate,
    /// Temperature of the dip, K.
    pub dip_k: Estimate,
}

/// All model-free measures of a pair; `None` where one cannot be had.
#[derive(Clone, Debug, PartialEq)]
pub struct Measures {
    /// Peak of the thick line, K.
    pub peak_thick_k: Option<Estimate>,
    /// Peak of the thin line, K.
    pub peak_thin_k: Option<Estimate>,
    /// Integrated intensity of the thick line in its window, K km/s.
    pub integral_thick_k_km_s: Estimate,
    /// Integrated intensity of the thin line in its window, K km/s.
    pub integral_thin_k_km_s: Estimate,
    /// Velocity of the thick line's peak, km/s.
    pub v_thick_km_s: Option<Estimate>,
    /// Normalised velocity difference (`v_thick` - `v_thin`)/`FWHM_thin`.
    pub delta_v: Option<Estimate>,
    /// Systematic of `delta_v` from the rest frequencies' uncertainties.
    pub delta_v_systematic: Option<f64>,
    /// `T_blue`/`T_red` of a two-peak line.
    pub peak_ratio: Option<Estimate>,
    /// The two peaks and the dip of a two-peak thick line.
    pub two_peaks: Option<TwoPeaks>,
    /// Whether the thin line shows two significant peaks.
    pub thin_two_peaked: bool,
    /// (`I_blue` - `I_red`)/(`I_blue` + `I_red`) about the thin line's velocity.
    pub asymmetry: Option<Estimate>,
    /// Change of `asymmetry` where the thin line is redder by the systematic of the rest frequencies.
    pub asymmetry_systematic: Option<f64>,
    /// Skewness of the thick line about the thin line's velocity.
    pub skewness: Option<Estimate>,
    /// Sense of the asymmetry.
    pub profile: ProfileClass,
    /// Closed-form infall velocity of a two-peak line (Myers et al. 1996, eq. 9), km/s.
    pub v_closed_form_km_s: Option<Estimate>,
}

/// What counts as detected, and the lines' multiplets.
#[derive(Clone, Debug, PartialEq)]
pub struct MeasureSettings {
    /// Significance of a smoothed peak or an integral from which a line is measured.
    pub detection_sigma: f64,
    /// Significance of the dip below the lower peak from which a line has two peaks.
    pub dip_sigma: f64,
    /// Significance of the normalised velocity difference from which a profile can be blue or red;
    /// 0 leaves the limit of 0.25 alone. Of a line with two equal peaks one is always higher: its
    /// error spans both, and the profile is neither. (Mardones et al. 1997 set 0.25 at five times
    /// their typical error; from memory.)
    pub class_sigma: f64,
    /// Components of the thick line; empty or one for a line without structure. Of a multiplet the
    /// main component alone is measured, and only if its nearest neighbour is at least three thin
    /// line widths away; otherwise there is no more than peak and integral.
    pub thick_components: Vec<Component>,
    /// Components of the thin line: whether it shows two peaks is asked of its main component.
    pub thin_components: Vec<Component>,
}

impl Default for MeasureSettings {
    fn default() -> Self {
        Self {
            detection_sigma: 5.0,
            dip_sigma: 3.0,
            class_sigma: 3.0,
            thick_components: Vec::new(),
            thin_components: Vec::new(),
        }
    }
}

/// Reach of the smoothing kernel to either side, in widths of the thin line: half of it is about
/// half of a self-absorbed line's peak.
const REACH_PER_FWHM: f64 = 0.45;

/// A component is measured alone if its neighbours are at least this many thin line widths away.
const ISOLATED_FROM: f64 = 3.0;

/// Significance of the thin line's peak from which it counts as detected.
const THIN_DETECTED: f64 = 3.0;

/// Significance of the dip, and of the lower peak, from which a thin line has two peaks: noise makes
/// many small peaks on a line's wings, and of each it is asked.
const THIN_DIP_SIGMA: f64 = 4.5;

/// Normalised velocity difference beyond which a profile is blue or red (Mardones et al. 1997).
pub const CLASS_LIMIT: f64 = 0.25;

/// All measures of a pair.
///
/// `thin_line` is the fitted thin line (of its main component's velocity scale); without it there is
/// nothing to be blue or red of. `rest_frequency_systematic_km_s` is the combined uncertainty of
/// both rest frequencies.
pub fn measure(
    thick: &Prepared,
    thin: &Prepared,
    thin_line: Option<&ThinLine>,
    rest_frequency_systematic_km_s: f64,
    settings: &MeasureSettings,
) -> Measures {
    let thick_noise = ChannelNoise::of(thick);
    let thin_noise = ChannelNoise::of(thin);
    let fwhm_km_s = thin_line.map_or_else(
        || 0.5 * equivalent_width_km_s(thick),
        |line| line.fwhm_km_s.value,
    );
    let detected = thin_line.filter(|line| line.peak_k.value >= THIN_DETECTED * line.peak_k.err);
    let span = Span::of(thick, &settings.thick_components, thin_line);
    let smoothed = Smoothed::new(&thick.spectrum, REACH_PER_FWHM * fwhm_km_s);
    let extrema = smoothed.extrema(thick.window.low_km_s, thick.window.high_km_s);
    let peak_of_all = highest(&extrema)
        .map(|peak| estimate(peak.value_k, peak.value_err(&thick_noise)))
        .filter(|peak| peak.value >= settings.detection_sigma * peak.err);
    let profile = Profile {
        spectrum: &thick.spectrum,
        noise: &thick_noise,
        extrema: span
            .filter(|_| peak_of_all.is_some())
            .map(|span| span.extrema(&smoothed, extrema, thick.window))
            .unwrap_or_default(),
        reach_km_s: smoothed.reach_km_s(),
        dip_sigma: settings.dip_sigma,
    };
    let v_thick_km_s = span.and_then(|span| {
        let v = profile.velocity()?;
        Some(estimate(v.value - span.offset_km_s, v.err))
    });
    let two = profile.two_peaks();
    let about = span.zip(thin_line).and_then(|(span, line)| {
        About::new(
            &thick.spectrum,
            &thick_noise,
            &smoothed,
            span,
            line,
            settings.detection_sigma,
        )
    });
    let delta_v = v_thick_km_s
        .zip(detected)
        .map(|(v, line)| normalised_difference(v, line));
    let (peak_thin_k, thin_two_peaked) =
        thin_shape(thin, &thin_noise, fwhm_km_s, thin_line, settings);
    Measures {
        peak_thick_k: peak_of_all,
        peak_thin_k,
        integral_thick_k_km_s: integral(thick, &thick_noise),
        integral_thin_k_km_s: integral(thin, &thin_noise),
        v_thick_km_s,
        delta_v,
        delta_v_systematic: delta_v.map(|_| rest_frequency_systematic_km_s / fwhm_km_s),
        peak_ratio: two.as_ref().map(|two| two.ratio(&thick_noise)),
        two_peaks: two.as_ref().map(|two| two.estimates(&thick_noise)),
        thin_two_peaked,
        asymmetry: about.as_ref().and_then(About::asymmetry),
        asymmetry_systematic: (about.as_ref())
            .map(|about| about.asymmetry_systematic(rest_frequency_systematic_km_s)),
        skewness: about.as_ref().and_then(About::skewness),
        profile: class(delta_v, settings.class_sigma),
        v_closed_form_km_s: two
            .as_ref()
            .zip(detected)
            .and_then(|(two, line)| two.closed_form(line, &thick_noise)),
    }
}

fn estimate(value: f64, err: f64) -> Estimate {
    Estimate { value, err }
}

/// Blue or red where the velocity difference is beyond the limit and its sign is certain.
fn class(delta_v: Option<Estimate>, sigma: f64) -> ProfileClass {
    let Some(Estimate { value, err }) = delta_v else {
        return ProfileClass::Undetected;
    };
    if value.abs() <= CLASS_LIMIT || value.abs() < sigma * err {
        ProfileClass::Neither
    } else if value < 0.0 {
        ProfileClass::Blue
    } else {
        ProfileClass::Red
    }
}

/// dV = (`v_thick` - v)/F with v and F of the thin line: the variance is
/// (`s_thick`^2 + `s_v`^2 + dV^2 `s_F`^2 + 2 dV cov(v, F))/F^2.
fn normalised_difference(v_thick: Estimate, line: &ThinLine) -> Estimate {
    let fwhm = line.fwhm_km_s.value;
    let difference = (v_thick.value - line.v_km_s.value) / fwhm;
    let variance = v_thick.err.powi(2)
        + line.v_km_s.err.powi(2)
        + (difference * line.fwhm_km_s.err).powi(2)
        + 2.0 * difference * line.covariance_v_fwhm;
    estimate(difference, variance.max(0.0).sqrt() / fwhm)
}

/// Channels of the window with a number.
fn window_channels(prepared: &Prepared) -> impl Iterator<Item = usize> + '_ {
    let spectrum = &prepared.spectrum;
    (0..spectrum.len()).filter(|&channel| {
        spectrum.is_usable(channel) && prepared.window.contains(spectrum.velocity_km_s()[channel])
    })
}

/// Integrated intensity over the window, K km/s.
fn integral(prepared: &Prepared, noise: &ChannelNoise) -> Estimate {
    let spectrum = &prepared.spectrum;
    let mut weights = vec![0.0; spectrum.len()];
    let mut sum = 0.0;
    for channel in window_channels(prepared) {
        weights[channel] = spectrum.width_km_s()[channel];
        sum += weights[channel] * spectrum.temperature_k()[channel];
    }
    estimate(sum, noise.error(&weights))
}

/// Integral over peak channel, km/s: a width where there is no thin line.
fn equivalent_width_km_s(prepared: &Prepared) -> f64 {
    let spectrum = &prepared.spectrum;
    let (sum, peak) = window_channels(prepared).fold((0.0, 0.0_f64), |(sum, peak), channel| {
        let value = spectrum.temperature_k()[channel];
        (
            sum + value * spectrum.width_km_s()[channel],
            peak.max(value),
        )
    });
    if sum > 0.0 && peak > 0.0 {
        sum / peak
    } else {
        0.0
    }
}

fn highest(extrema: &[Extremum]) -> Option<&Extremum> {
    extrema
        .iter()
        .filter(|extremum| extremum.is_maximum)
        .max_by(|a, b| a.value_k.total_cmp(&b.value_k))
}

/// The thin line's peak, and whether it has two.
fn thin_shape(
    thin: &Prepared,
    noise: &ChannelNoise,
    fwhm_km_s: f64,
    line: Option<&ThinLine>,
    settings: &MeasureSettings,
) -> (Option<Estimate>, bool) {
    let smoothed = Smoothed::new(&thin.spectrum, REACH_PER_FWHM * fwhm_km_s);
    let extrema = smoothed.extrema(thin.window.low_km_s, thin.window.high_km_s);
    // Faint thin lines are common: their peak is given from 3 sigma.
    let peak = highest(&extrema)
        .map(|peak| estimate(peak.value_k, peak.value_err(noise)))
        .filter(|peak| peak.value >= settings.detection_sigma.min(THIN_DETECTED) * peak.err);
    let span = line.and_then(|line| Span::of(thin, &settings.thin_components, Some(line)));
    let two_peaked = span.is_some_and(|span| {
        let profile = Profile {
            spectrum: &thin.spectrum,
            noise,
            extrema: span.extrema(&smoothed, extrema, thin.window),
            reach_km_s: smoothed.reach_km_s(),
            dip_sigma: settings.dip_sigma.max(THIN_DIP_SIGMA),
        };
        profile.two_peaks().is_some()
    });
    (peak, two_peaked)
}

/// The range in which one component stands alone.
#[derive(Clone, Copy, Debug)]
struct Span {
    window: Window,
    /// Offset of that component from the line's rest frequency.
    offset_km_s: f64,
}

impl Span {
    /// Extrema in the range, given those in the whole window.
    fn extrema(self, smoothed: &Smoothed, whole: Vec<Extremum>, window: Window) -> Vec<Extremum> {
        if self.window == window {
            return whole;
        }
        smoothed.extrema(self.window.low_km_s, self.window.high_km_s)
    }

    /// The window, or its part around a multiplet's main component; `None` where that is blended.
    fn of(prepared: &Prepared, components: &[Component], line: Option<&ThinLine>) -> Option<Self> {
        let window = prepared.window;
        let whole = Self {
            window,
            offset_km_s: components.first().map_or(0.0, |one| one.offset_km_s),
        };
        if components.len() < 2 {
            return Some(whole);
        }
        let main = components
            .iter()
            .max_by(|a, b| a.weight.total_cmp(&b.weight))?;
        let line = line?;
        let gap = components
            .iter()
            .map(|other| (other.offset_km_s - main.offset_km_s).abs())
            .filter(|&gap| gap > 0.0)
            .fold(f64::INFINITY, f64::min);
        if gap < ISOLATED_FROM * line.fwhm_km_s.value {
            return None;
        }
        let centre = line.v_km_s.value + main.offset_km_s;
        Some(Self {
            window: Window {
                low_km_s: window.low_km_s.max(centre - 0.5 * gap),
                high_km_s: window.high_km_s.min(centre + 0.5 * gap),
            },
            offset_km_s: main.offset_km_s,
        })
    }
}
