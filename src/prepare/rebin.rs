//! Flux-conserving rebinning onto wider channels.

use super::PrepareError;
use crate::spectrum::Spectrum;

/// A new channel keeps a value if at least this share of it is covered by usable channels.
const COVERED_SHARE: f64 = 0.5;

/// Widths within this share of the present one count as equal.
const SAME_WIDTH: f64 = 1e-6;

/// Averages a spectrum onto uniform channels of `width_km_s`, starting at the lower edge of its
/// first channel; what does not fill a last channel is left out.
///
/// T' = `sum_i` `o_i` `T_i`/`sum_i` `o_i`, `o_i` the overlap (km/s) of channel i with the new one. Masked
/// channels have no weight, and a new channel that they cover by more than half is masked. Where
/// the widths are no whole multiples, neighbours share channels and their noise is correlated.
///
/// # Errors
///
/// [`PrepareError::SmoothingTooFine`], [`PrepareError::SmoothingTooCoarse`] and
/// [`PrepareError::Spectrum`] where nothing usable is left.
pub fn rebin(spectrum: &Spectrum, width_km_s: f64) -> Result<Spectrum, PrepareError> {
    let widest = spectrum.width_km_s().iter().copied().fold(0.0, f64::max);
    if width_km_s.is_nan() || width_km_s < widest * (1.0 - SAME_WIDTH) {
        return Err(PrepareError::SmoothingTooFine {
            asked_km_s: width_km_s,
            channel_km_s: widest,
        });
    }
    if width_km_s <= spectrum.channel_width_km_s() * (1.0 + SAME_WIDTH) {
        return Ok(spectrum.clone());
    }
    let edges: Vec<(f64, f64)> = spectrum
        .velocity_km_s()
        .iter()
        .zip(spectrum.width_km_s())
        .map(|(v, width)| (v - 0.5 * width, v + 0.5 * width))
        .collect();
    let (start, end) = (edges[0].0, edges[edges.len() - 1].1);
    let mut velocity = Vec::new();
    let mut temperature = Vec::new();
    let mut first = 0;
    loop {
        let low = start + velocity.len() as f64 * width_km_s;
        let high = low + width_km_s;
        // Rounding of the edges must not cost the last channel.
        if high > end + SAME_WIDTH * width_km_s {
            break;
        }
        while edges[first].1 <= low {
            first += 1;
        }
        let (mut sum, mut covered) = (0.0, 0.0);
        for (channel, edge) in edges.iter().enumerate().skip(first) {
            if edge.0 >= high {
                break;
            }
            let overlap = edge.1.min(high) - edge.0.max(low);
            if spectrum.is_usable(channel) && overlap > SAME_WIDTH * width_km_s {
                sum += overlap * spectrum.temperature_k()[channel];
                covered += overlap;
            }
        }
        velocity.push(0.5 * (low + high));
        temperature.push(if covered >= COVERED_SHARE * width_km_s {
            sum / covered
        } else {
            f64::NAN
        });
    }
    if velocity.is_empty() {
        return Err(PrepareError::SmoothingTooCoarse {
            asked_km_s: width_km_s,
            band_km_s: end - start,
        });
    }
    let count = velocity.len();
    Ok(Spectrum::new(
        velocity,
        vec![width_km_s; count],
        temperature,
    )?)
}
