//! Gaussian beams as covariances, and the Gaussian that is missing from one to another.

use crate::constants::FWHM_PER_SIGMA;
use crate::read::cube::SkyBeam;

/// Beams that differ by less than this share of the wider one's variance are one: widths in headers are
/// rounded.
const SAME_BEAM: f64 = 2e-3;

/// Why a beam cannot be convolved to another.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum BeamProblem {
    /// The other is not wider in every direction.
    NotWider,
}

/// Covariance (east, north; arcsec^2) of a beam.
pub(super) fn covariance(beam: &SkyBeam) -> [[f64; 2]; 2] {
    let (sin, cos) = beam.angle_deg.to_radians().sin_cos();
    let [major, minor] = [beam.major_arcsec, beam.minor_arcsec].map(|width| {
        let sigma = width / FWHM_PER_SIGMA;
        sigma * sigma
    });
    [
        [
            major * sin * sin + minor * cos * cos,
            (major - minor) * sin * cos,
        ],
        [
            (major - minor) * sin * cos,
            major * cos * cos + minor * sin * sin,
        ],
    ]
}

/// Covariance (east, north; arcsec^2) of the Gaussian that a beam `from` must be convolved with to become
/// `to`; none where they are the same.
///
/// # Errors
///
/// [`BeamProblem::NotWider`] where no Gaussian does that.
pub fn kernel(from: &SkyBeam, to: &SkyBeam) -> Result<Option<[[f64; 2]; 2]>, BeamProblem> {
    let (have, want) = (covariance(from), covariance(to));
    let mut missing: [[f64; 2]; 2] =
        std::array::from_fn(|i| std::array::from_fn(|j| want[i][j] - have[i][j]));
    let (low, high, angle) = principal(&missing);
    let little = SAME_BEAM * (to.major_arcsec / FWHM_PER_SIGMA).powi(2);
    if low < -little {
        return Err(BeamProblem::NotWider);
    }
    if high <= little && low.abs() <= little {
        return Ok(None);
    }
    if low < 0.0 {
        // As wide as it is in one direction, to within what headers round.
        let (sin, cos) = angle.sin_cos();
        missing = [
            [high * cos * cos, high * sin * cos],
            [high * sin * cos, high * sin * sin],
        ];
    }
    Ok(Some(missing))
}

/// Smaller and larger eigenvalue of a symmetric matrix, and the angle of the larger one's direction from the
/// first axis, radians.
fn principal(matrix: &[[f64; 2]; 2]) -> (f64, f64, f64) {
    let [[a, b], [_, d]] = *matrix;
    let mean = f64::midpoint(a, d);
    let radius = (0.5 * (a - d)).hypot(b);
    (mean - radius, mean + radius, 0.5 * (2.0 * b).atan2(a - d))
}

#[cfg(test)]
mod tests {
    use super::*;

    fn beam(major_arcsec: f64, minor_arcsec: f64, angle_deg: f64) -> SkyBeam {
        SkyBeam {
            major_arcsec,
            minor_arcsec,
            angle_deg,
        }
    }

    #[test]
    fn covariances_of_beams_add_up() {
        let (from, to) = (beam(20.0, 14.0, 30.0), beam(30.0, 25.0, -50.0));
        let missing = kernel(&from, &to).unwrap().unwrap();
        let (have, want) = (covariance(&from), covariance(&to));
        for i in 0..2 {
            for j in 0..2 {
                assert!((have[i][j] + missing[i][j] - want[i][j]).abs() < 1e-12);
            }
        }
        // A major axis at 90 degrees lies along east.
        let east = covariance(&beam(2.0, 1.0, 90.0));
        assert!(east[0][0] > 3.9 * east[1][1] && east[0][1].abs() < 1e-15);
    }

    #[test]
    fn beams_that_cross_or_are_one_have_no_kernel() {
        let crossed = kernel(&beam(30.0, 20.0, 0.0), &beam(31.0, 21.0, 90.0));
        assert_eq!(crossed, Err(BeamProblem::NotWider));
        assert_eq!(
            kernel(&beam(30.0, 30.0, 0.0), &beam(30.0, 30.0, 40.0)),
            Ok(None)
        );
        assert!(
            kernel(&beam(27.0, 27.0, 0.0), &beam(28.0, 28.0, 0.0))
                .unwrap()
                .is_some()
        );
    }
}
