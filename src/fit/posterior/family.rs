//! Families of profiles of a pair: their coordinates, and the physical parameters of a draw.
//! Brightnesses are amplitudes of the shapes and no coordinates.

use crate::model::{Model, RadiationTemperature};
use crate::numeric::sampling::{Point, padded};

/// A family of profiles.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Family {
    /// A slab model, its halves moving.
    Moving(Model),
    /// The same at rest.
    Still(Model),
    /// One Gaussian in both lines, nothing absorbed.
    Unabsorbed,
    /// Two clouds of two velocities, of comparable brightness in the thin line, each a Gaussian there;
    /// in the thick line each a layer of one optical depth, the front one absorbing the rear one.
    TwoClouds,
}

impl Family {
    /// Name for tables.
    #[must_use]
    pub fn name(self) -> String {
        match self {
            Self::Moving(model) => model.name().to_owned(),
            Self::Still(model) => format!("{} at rest", model.name()),
            Self::Unabsorbed => "unabsorbed Gaussian".to_owned(),
            Self::TwoClouds => "two clouds".to_owned(),
        }
    }

    /// Whether posteriors are known of it: slabs whose temperatures are their amplitudes.
    #[must_use]
    pub fn is_known(self) -> bool {
        match self {
            Self::Moving(model) | Self::Still(model) => {
                matches!(model, Model::TwoLayer | Model::Hill | Model::HillSurface)
            }
            Self::Unabsorbed | Self::TwoClouds => true,
        }
    }

    /// Number of coordinates.
    pub(super) fn dimensions(self) -> usize {
        match self {
            Self::Moving(_) => 5,
            Self::Still(_) => 4,
            Self::Unabsorbed => 3,
            Self::TwoClouds => 7,
        }
    }

    /// The coordinate of the thin line's width: the last one.
    pub(super) fn thin_width(self) -> usize {
        self.dimensions() - 1
    }

    /// Coordinates of v_lsr, ln of the dispersion, inward speed over it and ln of the optical depth, as
    /// far as there are such that can be given.
    pub(super) fn constrained(self) -> [Option<usize>; 4] {
        match self {
            Self::Moving(_) => [Some(0), Some(1), Some(2), Some(3)],
            Self::Still(_) => [Some(0), Some(1), None, Some(2)],
            Self::Unabsorbed => [Some(0), Some(1), None, None],
            Self::TwoClouds => [None; 4],
        }
    }

    /// Whether its optical depth can be linked to the thin line's.
    pub(super) fn has_depth(self) -> bool {
        matches!(self, Self::Moving(_) | Self::Still(_))
    }

    /// Rough sizes of the coordinates, the first in units of `sigma_km_s`.
    pub(super) fn scales(self, sigma_km_s: f64) -> Point {
        let v = 0.3 * sigma_km_s;
        match self {
            Self::Moving(_) => padded(&[v, 0.3, 0.3, 0.5, 0.1]),
            Self::Still(_) => padded(&[v, 0.3, 0.5, 0.1]),
            Self::Unabsorbed => padded(&[v, 0.3, 0.1]),
            Self::TwoClouds => padded(&[v, 0.3, 0.4, 0.3, 0.5, 0.4, 0.1]),
        }
    }

    /// Middle and deviations of the priors, with velocity and dispersion about given ones.
    pub(super) fn broad(self, v_km_s: f64, sigma_km_s: f64) -> (Point, Point) {
        let (v, sigma) = (0.5 * sigma_km_s, 0.35);
        let ln_sigma = sigma_km_s.ln();
        let thin = 1.08f64.ln();
        match self {
            Self::Moving(_) => (
                padded(&[v_km_s, ln_sigma, 0.0, 4f64.ln(), thin]),
                padded(&[v, sigma, 1.0, 1.0, 0.1]),
            ),
            Self::Still(_) => (
                padded(&[v_km_s, ln_sigma, 4f64.ln(), thin]),
                padded(&[v, sigma, 1.0, 0.1]),
            ),
            Self::Unabsorbed => (padded(&[v_km_s, ln_sigma, thin]), padded(&[v, sigma, 0.1])),
            Self::TwoClouds => (
                padded(&[v_km_s, ln_sigma, 0.0, 0.0, 4f64.ln(), 0.0, thin]),
                padded(&[2.0 * v, sigma, 2.0, 0.4, 1.0, 0.7, 0.1]),
            ),
        }
    }

    /// Names of the physical parameters; where optical depths are linked, `isotope_ratio` and
    /// `t_ex_thin_k` follow.
    #[must_use]
    pub fn parameters(self) -> Vec<&'static str> {
        let thin = ["peak_thin_k", "thin_width_ratio"];
        match self {
            Self::Moving(model) => {
                let own = model.parameters().iter().map(|parameter| parameter.name);
                own.chain(thin).collect()
            }
            Self::Still(model) => {
                let own = model.parameters().iter().map(|parameter| parameter.name);
                own.filter(|name| *name != "v_in_km_s")
                    .chain(thin)
                    .collect()
            }
            Self::Unabsorbed => [&["v_lsr_km_s", "sigma_km_s", "peak_k"][..], &thin].concat(),
            Self::TwoClouds => vec![
                "v_front_km_s",
                "sigma_front_km_s",
                "v_rear_km_s",
                "sigma_rear_km_s",
                "tau_cloud",
                "excess_front_k",
                "excess_rear_k",
                "peak_thin_k",
                "thin_brightness_ratio",
                "thin_width_ratio",
            ],
        }
    }

    /// Physical parameters, in the order of [`Family::parameters`], of a point and the brightnesses of
    /// both lines.
    pub(super) fn physical(
        self,
        point: &Point,
        radiation: &RadiationTemperature,
        [x, y]: [f64; 2],
        thin_k: f64,
    ) -> Vec<f64> {
        let t = |excess: f64| radiation.inverse(radiation.background() + excess);
        let (v, sigma) = (point[0], point[1].exp());
        let temperatures = |model: Model| match model {
            Model::TwoLayer => vec![t(x), t(x + y)],
            Model::HillSurface => vec![t(x + y), t(x)],
            _ => vec![t(x)],
        };
        let kinematics = match self {
            Self::Moving(_) => vec![v, sigma, point[2] * sigma, point[3].exp()],
            Self::Still(_) => vec![v, sigma, point[2].exp()],
            Self::Unabsorbed => vec![v, sigma],
            Self::TwoClouds => vec![
                v,
                sigma,
                v + point[2] * sigma,
                sigma * point[3].exp(),
                point[4].exp(),
            ],
        };
        let rest = match self {
            Self::Moving(model) | Self::Still(model) => {
                let mut rest = temperatures(model);
                rest.push(thin_k);
                rest
            }
            Self::Unabsorbed => vec![x, thin_k],
            Self::TwoClouds => vec![x, y, thin_k, point[5].exp()],
        };
        let ratio = point[self.thin_width()].exp();
        [kinematics, rest, vec![ratio]].concat()
    }
}
