//! Where a profile is evaluated: channel centres and widths, and the quadrature inside a channel.

/// Gauss-Legendre nodes (in channel widths from the centre) and weights, for one to five points.
/// Abramowitz & Stegun 1964, table 25.4, halved to the interval -1/2..1/2.
const GAUSS_LEGENDRE: [&[(f64, f64)]; 5] = [
    &[(0.0, 1.0)],
    &[
        (-0.288_675_134_594_812_9, 0.5),
        (0.288_675_134_594_812_9, 0.5),
    ],
    &[
        (-0.387_298_334_620_741_7, 0.277_777_777_777_777_8),
        (0.0, 0.444_444_444_444_444_4),
        (0.387_298_334_620_741_7, 0.277_777_777_777_777_8),
    ],
    &[
        (-0.430_568_155_797_026_3, 0.173_927_422_568_726_93),
        (-0.169_990_521_792_428_13, 0.326_072_577_431_273_07),
        (0.169_990_521_792_428_13, 0.326_072_577_431_273_07),
        (0.430_568_155_797_026_3, 0.173_927_422_568_726_93),
    ],
    &[
        (-0.453_089_922_969_332, 0.118_463_442_528_094_54),
        (-0.269_234_655_052_841_54, 0.239_314_335_249_683_23),
        (0.0, 0.284_444_444_444_444_44),
        (0.269_234_655_052_841_54, 0.239_314_335_249_683_23),
        (0.453_089_922_969_332, 0.118_463_442_528_094_54),
    ],
];

/// Channels on which a profile is evaluated.
#[derive(Clone, Debug, PartialEq)]
pub struct Sampling {
    velocity_km_s: Vec<f64>,
    width_km_s: Vec<f64>,
    points: usize,
}

impl Sampling {
    /// Most quadrature points a channel can have.
    pub const MOST_POINTS: usize = GAUSS_LEGENDRE.len();

    /// Channel centres and widths (km/s, of one length), each channel averaged over `points`
    /// Gauss-Legendre points (clamped to 1..=5). One point is the value at the centre.
    #[must_use]
    pub fn new(velocity_km_s: Vec<f64>, width_km_s: Vec<f64>, points: usize) -> Self {
        assert_eq!(
            velocity_km_s.len(),
            width_km_s.len(),
            "a width for each channel"
        );
        Self {
            velocity_km_s,
            width_km_s,
            points: points.clamp(1, Self::MOST_POINTS),
        }
    }

    /// Values at the given velocities (km/s), without averaging.
    #[must_use]
    pub fn at(velocity_km_s: Vec<f64>) -> Self {
        let width_km_s = vec![0.0; velocity_km_s.len()];
        Self::new(velocity_km_s, width_km_s, 1)
    }

    /// Some of the channels.
    #[must_use]
    pub fn part(&self, channels: std::ops::Range<usize>) -> Self {
        Self {
            velocity_km_s: self.velocity_km_s[channels.clone()].to_vec(),
            width_km_s: self.width_km_s[channels].to_vec(),
            points: self.points,
        }
    }

    /// Number of channels.
    #[must_use]
    pub fn len(&self) -> usize {
        self.velocity_km_s.len()
    }

    /// Whether there are none.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.velocity_km_s.is_empty()
    }

    /// Channel centres, km/s.
    #[must_use]
    pub fn velocity_km_s(&self) -> &[f64] {
        &self.velocity_km_s
    }

    /// Channel widths, km/s.
    #[must_use]
    pub fn width_km_s(&self) -> &[f64] {
        &self.width_km_s
    }

    /// Quadrature nodes, in channel widths from the centre, and their weights, which sum to 1.
    #[must_use]
    pub fn nodes(&self) -> &'static [(f64, f64)] {
        GAUSS_LEGENDRE[self.points - 1]
    }

    /// Fewest points for which averaging a Gaussian of dispersion `sigma_km_s` and height
    /// `peak_over_noise` (in units of a channel's noise) over a channel of `width_km_s` is off by
    /// less than `tolerance` noise units at its worst; the most that there are where none is.
    ///
    /// The slab models' sharpest features are narrower than sigma: pass the dispersion of those.
    #[must_use]
    pub fn points_needed(
        width_km_s: f64,
        sigma_km_s: f64,
        peak_over_noise: f64,
        tolerance: f64,
    ) -> usize {
        let mean = |points: usize, centre: f64| -> f64 {
            GAUSS_LEGENDRE[points - 1]
                .iter()
                .map(|(node, weight)| {
                    let z = (centre + node * width_km_s) / sigma_km_s;
                    weight * (-0.5 * z * z).exp()
                })
                .sum()
        };
        let exact = |centre: f64| -> f64 {
            // sixteen sub-channels of five points each
            (0..16)
                .map(|part| {
                    let middle = centre + width_km_s * ((f64::from(part) + 0.5) / 16.0 - 0.5);
                    GAUSS_LEGENDRE[4]
                        .iter()
                        .map(|(node, weight)| {
                            let z = (middle + node * width_km_s / 16.0) / sigma_km_s;
                            weight * (-0.5 * z * z).exp()
                        })
                        .sum::<f64>()
                        / 16.0
                })
                .sum()
        };
        let centres: Vec<f64> = (0..=24)
            .map(|i| 0.125 * f64::from(i) * sigma_km_s)
            .collect();
        let exact: Vec<f64> = centres.iter().map(|centre| exact(*centre)).collect();
        (1..Self::MOST_POINTS)
            .find(|points| {
                centres.iter().zip(&exact).all(|(centre, exact)| {
                    (mean(*points, *centre) - exact).abs() * peak_over_noise < tolerance
                })
            })
            .unwrap_or(Self::MOST_POINTS)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn quadrature_integrates_polynomials_of_degree_two_n_minus_one() {
        for (points, nodes) in (1..=5).zip(GAUSS_LEGENDRE) {
            for degree in 0..2 * points {
                let sum: f64 = nodes.iter().map(|(x, w)| w * x.powi(degree)).sum();
                let exact = if degree % 2 == 1 {
                    0.0
                } else {
                    0.5f64.powi(degree) / (f64::from(degree) + 1.0)
                };
                assert!(
                    (sum - exact).abs() < 1e-15,
                    "{points} points, degree {degree}"
                );
            }
        }
    }

    #[test]
    fn wide_channels_and_bright_lines_need_more_points() {
        assert_eq!(Sampling::points_needed(0.02, 0.5, 10.0, 0.01), 1);
        assert!(Sampling::points_needed(0.2, 0.5, 100.0, 0.01) >= 2);
        assert!(
            Sampling::points_needed(0.5, 0.5, 100.0, 0.01)
                > Sampling::points_needed(0.2, 0.5, 30.0, 0.01)
        );
    }
}
