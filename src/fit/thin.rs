//! The thin line alone: the velocity and width that asymmetries are measured against.

use super::channels::Channels;
use super::joint::Layout;
use super::starts::{self, Kinematics};
use super::{Averaging, FitError, FitSettings, FittedParameter, MERGED, Workspace, fitted, minima};
use crate::constants::FWHM_PER_SIGMA;
use crate::line::Line;
use crate::measure::ThinLine;
use crate::model::{LineShape, Model, Sampling};
use crate::numeric::Estimate;
use crate::numeric::least_squares::{Interval, Minimum, Termination};
use crate::prepare::Prepared;
use crate::spectrum::Window;

/// Height over its formal error from which the thin line counts as detected.
const DETECTION: f64 = 5.0;

/// The fit of the thin line alone.
#[derive(Clone, Debug, PartialEq)]
pub struct ThinFit {
    /// Model: a Gaussian, or a layer where the line is a multiplet.
    pub model: Model,
    /// Parameters at the best minimum.
    pub parameters: Vec<FittedParameter>,
    /// chi2 over the channels that count.
    pub chi2: f64,
    /// Channels less free parameters.
    pub degrees_of_freedom: usize,
    /// Why the search ended.
    pub termination: Termination,
    /// Height over its error.
    pub significance: f64,
    /// Velocity, width and height where the line is detected (5 standard errors).
    pub line: Option<ThinLine>,
}

/// Fits the thin line alone: a Gaussian, or a layer with its multiplet.
///
/// # Errors
///
/// [`FitError`] where there are fewer channels than parameters.
pub fn fit_thin(
    thin: &Prepared,
    line: &Line,
    settings: &FitSettings,
    workspace: &mut Workspace,
) -> Result<ThinFit, FitError> {
    let model = if line.components.len() > 1 {
        Model::Layer
    } else {
        Model::Gaussian
    };
    let shape = LineShape::new(line.rest_frequency_ghz, line.components.clone());
    let margin = thin.window.high_km_s - thin.window.low_km_s;
    let mut range = thin.window;
    range.low_km_s -= margin;
    range.high_km_s += margin;
    let spectrum = &thin.spectrum;
    let everywhere = Sampling::new(
        spectrum.velocity_km_s().to_vec(),
        spectrum.width_km_s().to_vec(),
        1,
    );
    let intensity = starts::intensity_moments(
        &everywhere,
        spectrum.temperature_k(),
        thin.window.low_km_s,
        thin.window.high_km_s,
    );
    let narrowest = 0.7 * intensity.sigma_km_s;
    let channels = Channels::new(thin, shape, Some(range), settings.averaging, narrowest);
    let reach = Interval::new(range.low_km_s, range.high_km_s);
    let plain = FitSettings {
        averaging: Averaging::Channel,
        ..FitSettings::default()
    };
    let layout = Layout::thin_alone(model, &plain, reach)?;
    if channels.len() <= layout.parameters().len() {
        return Err(FitError::TooFewChannels {
            channels: channels.len(),
            parameters: layout.parameters().len(),
            model: model.name(),
        });
    }
    let starts = thin_starts(&layout, &channels, intensity, thin);
    let narrowest_start = (starts.iter().map(|start| start[1])).fold(f64::INFINITY, f64::min);
    let everywhere = Window {
        low_km_s: f64::NEG_INFINITY,
        high_km_s: f64::INFINITY,
    };
    let near = channels.near(everywhere, MERGED * narrowest_start);
    let (minima, _) = minima(
        &layout,
        (None, &near),
        (None, &channels),
        &starts,
        workspace,
    )?;
    let best = &minima[0];
    let peak = peak(model, &channels, best);
    let significance = peak.map_or(0.0, |peak| peak.value / peak.err);
    let line = peak
        .filter(|_| significance >= DETECTION)
        .and_then(|peak_k| {
            let covariance = best.covariance().ok()?;
            let sigma = best.parameters[1];
            Some(ThinLine {
                v_km_s: Estimate {
                    value: best.parameters[0],
                    err: covariance.standard_error(0)?,
                },
                fwhm_km_s: Estimate {
                    value: FWHM_PER_SIGMA * sigma,
                    err: FWHM_PER_SIGMA * covariance.standard_error(1)?,
                },
                covariance_v_fwhm: FWHM_PER_SIGMA * covariance.get(0, 1)?,
                peak_k,
            })
        });
    Ok(ThinFit {
        model,
        parameters: fitted(&layout, best),
        chi2: best.chi2,
        degrees_of_freedom: best.degrees_of_freedom(),
        termination: best.termination,
        significance,
        line,
    })
}

/// Starts of the thin line.
const THIN_STARTS: usize = 3;

/// Starts over the window's velocities and a few widths, the best that differ by their linear amplitude.
fn thin_starts(
    layout: &Layout,
    channels: &Channels,
    intensity: Kinematics,
    thin: &Prepared,
) -> Vec<Vec<f64>> {
    let window = thin.window;
    let width = window.high_km_s - window.low_km_s;
    let mut candidates = Vec::new();
    let mut column = vec![0.0; channels.len()];
    let centres = (0..=20)
        .map(|step| window.low_km_s + width * f64::from(step) / 20.0)
        .chain(std::iter::once(intensity.v_km_s));
    for v_km_s in centres {
        for sigma_km_s in [0.06 * width, 0.15 * width, intensity.sigma_km_s] {
            let at = Kinematics { v_km_s, sigma_km_s };
            let (chi2, peak) = starts::one_gaussian(channels, at, &mut column);
            if peak > 0.0 {
                candidates.push((chi2, at));
            }
        }
    }
    candidates.sort_by(|a, b| a.0.total_cmp(&b.0));
    let mut distinct: Vec<(f64, Kinematics)> = Vec::with_capacity(THIN_STARTS);
    for candidate in candidates {
        let near = |(_, other): &(f64, Kinematics)| candidate.1.is_near(other);
        if distinct.len() < THIN_STARTS && !distinct.iter().any(near) {
            distinct.push(candidate);
        }
    }
    let mut candidates = distinct;
    if candidates.is_empty() {
        candidates.push((0.0, intensity));
    }
    candidates
        .into_iter()
        .map(|(_, at)| starts::start_alone(layout, at))
        .collect()
}

/// Height of the line (of the brightest point of a multiplet) with its formal error, K.
///
/// A layer's height is (J(T_ex) - J(T_bg))(1 - e^-tau): its error follows from that of both, which are
/// strongly correlated for a thin line.
fn peak(model: Model, channels: &Channels, minimum: &Minimum) -> Option<Estimate> {
    let covariance = minimum.covariance().ok();
    if model == Model::Gaussian {
        return Some(Estimate {
            value: minimum.parameters[2],
            err: covariance?.standard_error(2)?,
        });
    }
    let line = channels.line();
    let reference = line
        .components
        .iter()
        .max_by(|a, b| a.weight.total_cmp(&b.weight))?;
    let at = Sampling::at(vec![minimum.parameters[0] + reference.offset_km_s]);
    let mut value = [0.0];
    let mut jacobian = [0.0; 4];
    model.evaluate(
        line,
        &at,
        &minimum.parameters,
        &mut value,
        Some(&mut jacobian),
    );
    let variance = match covariance {
        Some(covariance) => (0..4)
            .flat_map(|i| (0..4).map(move |j| (i, j)))
            .map(|(i, j)| jacobian[i] * jacobian[j] * covariance.get(i, j).unwrap_or(0.0))
            .sum::<f64>(),
        // tau and T_ex of a thin line cannot be told apart: the height alone still can
        None => return linear_peak(channels, minimum),
    };
    Some(Estimate {
        value: value[0],
        err: variance.sqrt(),
    })
    .filter(|peak| peak.err > 0.0)
}

/// The height with centre and width held.
fn linear_peak(channels: &Channels, minimum: &Minimum) -> Option<Estimate> {
    let mut column = vec![0.0; channels.len()];
    let held = [minimum.parameters[0], minimum.parameters[1], 1.0];
    Model::Gaussian.evaluate(
        channels.line(),
        channels.sampling(),
        &held,
        &mut column,
        None,
    );
    channels.whiten(&mut column);
    let square: f64 = column.iter().map(|value| value * value).sum();
    let product: f64 = column
        .iter()
        .zip(channels.whitened_data())
        .map(|(a, b)| a * b)
        .sum();
    (square > 0.0).then(|| Estimate {
        value: product / square,
        err: 1.0 / square.sqrt(),
    })
}
