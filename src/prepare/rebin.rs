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
    let last = spectrum.len() - 1;
    let edges = |i: usize| {
        let half = 0.5 * spectrum.width_km_s()[i];
        (
            spectrum.velocity_km_s()[i] - half,
            spectrum.velocity_km_s()[i] + half,
        )
    };
    let (start, end) = (edges(0).0, edges(last).1);
    let count = ((end - start) / width_km_s * (1.0 + SAME_WIDTH)).floor() as usize;
    if count < 1 {
        return Err(PrepareError::SmoothingTooCoarse {
            asked_km_s: width_km_s,
            band_km_s: end - start,
        });
    }
    let mut sum = vec![0.0; count];
    let mut covered = vec![0.0; count];
    for i in (0..=last).filter(|&i| spectrum.is_usable(i)) {
        let (low, high) = edges(i);
        let first = ((low - start) / width_km_s).floor().max(0.0) as usize;
        for (bin, (sum, covered)) in sum.iter_mut().zip(&mut covered).enumerate().skip(first) {
            let bin_low = start + bin as f64 * width_km_s;
            if bin_low >= high {
                break;
            }
            let overlap = high.min(bin_low + width_km_s) - low.max(bin_low);
            // Less than rounding of the edges is no overlap.
            if overlap > SAME_WIDTH * width_km_s {
                *sum += overlap * spectrum.temperature_k()[i];
                *covered += overlap;
            }
        }
    }
    let velocity = (0..count)
        .map(|bin| start + (bin as f64 + 0.5) * width_km_s)
        .collect();
    let temperature = sum
        .iter()
        .zip(&covered)
        .map(|(sum, covered)| {
            if *covered >= COVERED_SHARE * width_km_s {
                sum / covered
            } else {
                f64::NAN
            }
        })
        .collect();
    Ok(Spectrum::new(
        velocity,
        vec![width_km_s; count],
        temperature,
    )?)
}
