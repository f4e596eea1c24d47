//! What each pointing of a map says of motions, put together into the maps of a clump.

use super::{ClumpMaps, Field, GridError, Reading};
use crate::measure::Sides;
use crate::numeric::Estimate;
use crate::spectrum::Window;

/// What one pointing says of motions; `None` for what it does not have.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct PointingMotions {
    /// Offsets to the east and north, arcsec.
    pub at_arcsec: [f64; 2],
    /// Integral of the thin line, K km/s.
    pub integral_thin_k_km_s: Option<Estimate>,
    /// Velocity of the thin line, km/s.
    pub v_thin_km_s: Option<Estimate>,
    /// Blue less red in core and wings of the thick line.
    pub sides: Option<Sides>,
    /// Intensity asymmetry of the thick line, and its change by the systematic of the rest frequencies.
    pub asymmetry: Option<(Estimate, f64)>,
    /// Normalised velocity difference, and its change by the same.
    pub delta_v: Option<(Estimate, f64)>,
    /// First moment of the thick line over one range of velocities, km/s.
    pub thick_moment_km_s: Option<Estimate>,
    /// Inward speed, km/s.
    pub v_in_km_s: Option<Estimate>,
}

/// The maps of a clump and the brightness of its thin line, from which its centre is found.
///
/// `noise_fwhm_arcsec` is the width over which noise goes together ([`Field`]). Values without a positive
/// error are left out.
///
/// # Errors
///
/// [`GridError::Reading`] for a value or place that is not finite, [`GridError::NoiseWidth`].
pub fn clump_maps(
    pointings: &[PointingMotions],
    noise_fwhm_arcsec: f64,
) -> Result<(ClumpMaps, Field), GridError> {
    let readings = |of: &dyn Fn(&PointingMotions) -> Option<(Estimate, f64)>| {
        let (mut readings, mut systematics) = (Vec::new(), Vec::new());
        for one in pointings {
            let Some((Estimate { value, err }, systematic)) = of(one).filter(|one| one.0.err > 0.0)
            else {
                continue;
            };
            let [dx_arcsec, dy_arcsec] = one.at_arcsec;
            readings.push(Reading {
                dx_arcsec,
                dy_arcsec,
                value,
                err,
            });
            systematics.push(systematic);
        }
        Ok::<_, GridError>((Field::new(readings, noise_fwhm_arcsec)?, systematics))
    };
    let plain = |of: &dyn Fn(&PointingMotions) -> Option<Estimate>| {
        readings(&|one| Some((of(one)?, 0.0))).map(|(field, _)| field)
    };
    let (core, core_systematic) =
        readings(&|one| one.sides.map(|sides| (sides.core, sides.core_systematic)))?;
    let (asymmetry, asymmetry_systematic) = readings(&|one| one.asymmetry)?;
    let (delta_v, delta_v_systematic) = readings(&|one| one.delta_v)?;
    let maps = ClumpMaps {
        thin_velocity: plain(&|one| one.v_thin_km_s)?,
        thick_moment: plain(&|one| one.thick_moment_km_s)?,
        core,
        core_systematic,
        wings: plain(&|one| one.sides.map(|sides| sides.wings))?,
        asymmetry,
        asymmetry_systematic,
        delta_v,
        delta_v_systematic,
        speed: plain(&|one| one.v_in_km_s)?,
    };
    Ok((maps, plain(&|one| one.integral_thin_k_km_s)?))
}

/// Share of the windows that may end beyond the common range, on either side: single ones that a ripple or a
/// second line widened do not decide.
const BEYOND: f64 = 0.02;

/// The range of velocities of first moments: the windows of all pointings together, but for the few that
/// end the farthest out. Of fewer than fifty windows none is left out.
#[must_use]
pub fn common_range(windows: &[Window]) -> Option<Window> {
    let sorted = |end: fn(&Window) -> f64| {
        let mut ends: Vec<f64> = windows.iter().map(end).collect();
        ends.sort_by(f64::total_cmp);
        ends
    };
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a share of a count"
    )]
    let left_out = (BEYOND * windows.len() as f64) as usize;
    let (low, high) = (
        sorted(|window| window.low_km_s),
        sorted(|window| window.high_km_s),
    );
    Some(Window {
        low_km_s: *low.get(left_out)?,
        high_km_s: *high.get(high.len().checked_sub(1 + left_out)?)?,
    })
}

/// Full width (arcsec) of the kernel that gives noise a correlation at a distance ([`Field`]):
///
///   w = d sqrt(2 ln 2/(-ln rho))
///
/// 0 where rho is below three of its errors: independent. A correlation above 0.98 counts as that.
#[must_use]
pub fn noise_width_arcsec(distance_arcsec: f64, correlation: Estimate) -> f64 {
    const SEEN: f64 = 3.0;
    const HIGHEST: f64 = 0.98;
    let rho = correlation.value;
    if rho.is_nan() || rho < SEEN * correlation.err || rho <= 0.0 {
        return 0.0;
    }
    let rho = rho.min(HIGHEST);
    distance_arcsec * (2.0 * std::f64::consts::LN_2 / -rho.ln()).sqrt()
}

#[cfg(test)]
#[allow(clippy::unwrap_used)]
mod tests {
    use super::*;

    fn window(low_km_s: f64, high_km_s: f64) -> Window {
        Window {
            low_km_s,
            high_km_s,
        }
    }

    #[test]
    fn a_few_wide_windows_do_not_decide() {
        let mut windows = vec![window(-2.0, 2.0); 98];
        windows.push(window(-50.0, 2.0));
        windows.push(window(-2.0, 70.0));
        assert_eq!(common_range(&windows), Some(window(-2.0, 2.0)));
        let few = [window(-1.0, 2.0), window(-3.0, 1.0)];
        assert_eq!(common_range(&few), Some(window(-3.0, 2.0)));
        assert_eq!(common_range(&[]), None);
    }

    #[test]
    fn a_kernel_is_found_from_one_correlation() {
        // correlation 2^(-2 d^2/w^2) at d = w/2 is 2^(-1/2)
        let at_half = Estimate {
            value: 0.5_f64.sqrt(),
            err: 0.01,
        };
        assert!((noise_width_arcsec(10.0, at_half) - 20.0).abs() < 1e-12);
        let chance = Estimate {
            value: 0.025,
            err: 0.01,
        };
        assert_eq!(noise_width_arcsec(10.0, chance), 0.0);
    }
}
