//! Densities of kinematics and optical depth: those of the table of priors, or what is given in their
//! place, within bounds and normalised there.

use super::settings::{PosteriorError, PosteriorSettings};
use crate::fit::priors::Prior;
use crate::numeric::Estimate;
use crate::spectrum::Window;
use statrs::function::erf::erfc;
use std::collections::BTreeMap;
use std::f64::consts::{FRAC_1_SQRT_2, TAU};

/// Probability below which a density has no mass somewhere.
const NO_MASS: f64 = 1e-9;

/// The unit normal distribution function.
fn below(z: f64) -> f64 {
    0.5 * erfc(-z * FRAC_1_SQRT_2)
}

fn ln_normal(z: f64, deviation: f64) -> f64 {
    -0.5 * z * z - deviation.ln() - 0.5 * TAU.ln()
}

/// A normal density of a value or its logarithm, or a constant one.
#[derive(Clone, Copy, Debug)]
enum Kind {
    Flat,
    Normal(Estimate),
    OfLogarithm { mean: f64, deviation: f64 },
}

/// The density of one value.
#[derive(Clone, Copy, Debug)]
pub(super) struct Constrained {
    kind: Kind,
    bounds: (f64, f64),
    held: Option<f64>,
    /// ln of the factor that makes it a density.
    ln_factor: f64,
}

impl Constrained {
    /// The density of a parameter: `table` where the settings give nothing else, `None` being flat;
    /// within `reach` and the settings' bounds.
    fn new(
        name: &'static str,
        table: Option<Prior>,
        settings: &PosteriorSettings,
        reach: (f64, f64),
    ) -> Result<Self, PosteriorError> {
        let bounds = settings.bounds.get(name).copied().unwrap_or(reach);
        let bounds = (bounds.0.max(reach.0), bounds.1.min(reach.1));
        let given = settings.given.get(name).copied();
        let held = given.filter(|given| given.err == 0.0);
        let held = held.map(|given| given.value);
        let kind = match (given, table) {
            (Some(given), _) => Kind::Normal(given),
            (
                None,
                Some(Prior::LogNormal {
                    median,
                    ln_deviation,
                }),
            ) => Kind::OfLogarithm {
                mean: median.ln(),
                deviation: ln_deviation,
            },
            _ => Kind::Flat,
        };
        let (mass, ln_scale) = match kind {
            _ if held.is_some_and(|value| value >= bounds.0 && value <= bounds.1) => (1.0, 0.0),
            _ if held.is_some() => (0.0, 0.0),
            Kind::Flat => (bounds.1 - bounds.0, 0.0),
            Kind::Normal(Estimate { value, err }) => {
                let z = |x: f64| (x - value) / err;
                (below(z(bounds.1)) - below(z(bounds.0)), ln_normal(0.0, err))
            }
            Kind::OfLogarithm { mean, deviation } => {
                let z = |x: f64| (x.max(0.0).ln() - mean) / deviation;
                (
                    below(z(bounds.1)) - below(z(bounds.0)),
                    ln_normal(0.0, deviation),
                )
            }
        };
        if mass.is_nan() || mass < NO_MASS {
            return Err(PosteriorError::NoPriorMass {
                name,
                lower: bounds.0,
                upper: bounds.1,
            });
        }
        Ok(Self {
            kind,
            bounds,
            held,
            ln_factor: ln_scale - mass.ln(),
        })
    }

    /// ln of the density at a value.
    fn ln_density(&self, value: f64) -> f64 {
        if self.held.is_some() {
            return 0.0;
        }
        if !(value >= self.bounds.0 && value <= self.bounds.1) {
            return f64::NEG_INFINITY;
        }
        let z = match self.kind {
            Kind::Flat => 0.0,
            Kind::Normal(Estimate { value: mean, err }) => (value - mean) / err,
            Kind::OfLogarithm { mean, deviation } => (value.ln() - mean) / deviation,
        };
        let per_logarithm = if matches!(self.kind, Kind::OfLogarithm { .. }) {
            -value.ln()
        } else {
            0.0
        };
        self.ln_factor - 0.5 * z * z + per_logarithm
    }

    /// ln of the density of the value's logarithm.
    fn ln_density_of_logarithm(&self, ln_value: f64) -> f64 {
        if self.held.is_some() {
            return 0.0;
        }
        if let Kind::OfLogarithm { mean, deviation } = self.kind
            && self.bounds == (0.0, f64::INFINITY)
        {
            let z = (ln_value - mean) / deviation;
            return self.ln_factor - 0.5 * z * z;
        }
        self.ln_density(ln_value.exp()) + ln_value
    }
}

/// The density of the inward speed over the dispersion, u.
#[derive(Clone, Copy, Debug)]
struct Speed {
    /// Of the table, about zero, where none is given.
    deviation: f64,
    given: Option<Estimate>,
    bounds_km_s: (f64, f64),
}

impl Speed {
    /// Mean, deviation and bounds of u.
    fn scaled(&self, sigma_km_s: f64) -> (f64, f64, (f64, f64)) {
        let (mean, deviation) = match self.given {
            Some(given) => (given.value / sigma_km_s, given.err / sigma_km_s),
            None => (0.0, self.deviation),
        };
        let (low, high) = self.bounds_km_s;
        (mean, deviation, (low / sigma_km_s, high / sigma_km_s))
    }

    fn is_bounded(&self) -> bool {
        self.bounds_km_s != (f64::NEG_INFINITY, f64::INFINITY)
    }

    fn ln_density(&self, u: f64, sigma_km_s: f64) -> f64 {
        let (mean, deviation, (low, high)) = self.scaled(sigma_km_s);
        if deviation == 0.0 {
            return 0.0;
        }
        let z = |u: f64| (u - mean) / deviation;
        if !self.is_bounded() {
            return ln_normal(z(u), deviation);
        }
        if u < low || u > high {
            return f64::NEG_INFINITY;
        }
        ln_normal(z(u), deviation) - (below(z(high)) - below(z(low))).ln()
    }

    /// Probability of u > 0 before the data.
    fn inward(&self, sigma_km_s: f64) -> f64 {
        let (mean, deviation, (low, high)) = self.scaled(sigma_km_s);
        if deviation == 0.0 {
            return if mean > 0.0 { 1.0 } else { 0.0 };
        }
        let part = |low: f64, high: f64| {
            (below((high - mean) / deviation) - below((low - mean) / deviation)).max(0.0)
        };
        part(low.max(0.0), high.max(0.0)) / part(low, high)
    }
}

/// The densities of a family's coordinates that can be given or bounded.
#[derive(Clone, Copy, Debug)]
pub(super) struct Constraints {
    v_lsr: Constrained,
    sigma: Constrained,
    tau: Constrained,
    speed: Speed,
    /// v_lsr and dispersion of clouds, which nothing is given of.
    free_v_lsr: Constrained,
    free_sigma: Constrained,
}

impl Constraints {
    /// Those of settings for velocities in a range.
    pub fn new(settings: &PosteriorSettings, range: Window) -> Result<Self, PosteriorError> {
        let reach = (range.low_km_s, range.high_km_s);
        let positive = (0.0, f64::INFINITY);
        let (sigma, tau) = (settings.priors.of("sigma_km_s"), settings.priors.of("tau"));
        let bounds_km_s = settings.bounds.get("v_in_km_s").copied();
        let speed = Speed {
            deviation: match settings.priors.of("v_in_over_sigma") {
                Prior::Normal { deviation } => deviation,
                other => panic!("{}: a speed's prior is normal", other.text()),
            },
            given: settings.given.get("v_in_km_s").copied(),
            bounds_km_s: bounds_km_s.unwrap_or((f64::NEG_INFINITY, f64::INFINITY)),
        };
        let nothing = PosteriorSettings {
            bounds: BTreeMap::default(),
            given: BTreeMap::default(),
            ..settings.clone()
        };
        Ok(Self {
            v_lsr: Constrained::new("v_lsr_km_s", None, settings, reach)?,
            sigma: Constrained::new("sigma_km_s", Some(sigma), settings, positive)?,
            tau: Constrained::new("tau", Some(tau), settings, positive)?,
            speed,
            free_v_lsr: Constrained::new("v_lsr_km_s", None, &nothing, reach)?,
            free_sigma: Constrained::new("sigma_km_s", Some(sigma), &nothing, positive)?,
        })
    }

    /// ln of the density of v_lsr (km/s) and of the logarithm of the dispersion.
    pub fn ln_kinematics(&self, v_km_s: f64, ln_sigma: f64, clouds: bool) -> f64 {
        if clouds {
            self.free_v_lsr.ln_density(v_km_s) + self.free_sigma.ln_density_of_logarithm(ln_sigma)
        } else {
            self.v_lsr.ln_density(v_km_s) + self.sigma.ln_density_of_logarithm(ln_sigma)
        }
    }

    /// ln of the density of the optical depth's logarithm.
    pub fn ln_tau(&self, ln_tau: f64) -> f64 {
        self.tau.ln_density_of_logarithm(ln_tau)
    }

    /// ln of the density of the inward speed over the dispersion.
    pub fn ln_speed(&self, u: f64, sigma_km_s: f64) -> f64 {
        self.speed.ln_density(u, sigma_km_s)
    }

    /// Probability of an inward speed before the data.
    pub fn inward(&self, sigma_km_s: f64) -> f64 {
        self.speed.inward(sigma_km_s)
    }

    /// v_lsr, dispersion (km/s), inward speed (km/s) and optical depth that are held.
    pub fn held(&self) -> [Option<f64>; 4] {
        let speed = self.speed.given.filter(|given| given.err == 0.0);
        [
            self.v_lsr.held,
            self.sigma.held,
            speed.map(|given| given.value),
            self.tau.held,
        ]
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const RANGE: Window = Window {
        low_km_s: -4.0,
        high_km_s: 4.0,
    };

    fn settings(bounds: &[(&str, (f64, f64))], given: &[(&str, f64, f64)]) -> PosteriorSettings {
        let named = |(name, bounds): &(&str, (f64, f64))| ((*name).to_owned(), *bounds);
        let estimate = |(name, value, err): &(&str, f64, f64)| {
            (
                (*name).to_owned(),
                Estimate {
                    value: *value,
                    err: *err,
                },
            )
        };
        PosteriorSettings {
            bounds: bounds.iter().map(named).collect(),
            given: given.iter().map(estimate).collect(),
            ..PosteriorSettings::default()
        }
    }

    /// Sums of the densities over fine grids.
    #[test]
    fn bounded_and_given_densities_integrate_to_one() {
        let cases = [
            settings(&[], &[]),
            settings(
                &[
                    ("sigma_km_s", (0.3, 0.7)),
                    ("tau", (2.0, 9.0)),
                    ("v_in_km_s", (-0.2, 0.5)),
                ],
                &[],
            ),
            settings(
                &[("v_lsr_km_s", (-1.0, 0.2))],
                &[
                    ("v_lsr_km_s", 0.1, 0.3),
                    ("sigma_km_s", 0.5, 0.1),
                    ("v_in_km_s", 0.1, 0.3),
                    ("tau", 5.0, 1.0),
                ],
            ),
        ];
        for settings in cases {
            let constraints = Constraints::new(&settings, RANGE).unwrap();
            let steps = 200_000;
            let sum = |low: f64, high: f64, ln: &dyn Fn(f64) -> f64| {
                let width = (high - low) / f64::from(steps);
                (0..steps)
                    .map(|step| ln(low + (f64::from(step) + 0.5) * width).exp() * width)
                    .sum::<f64>()
            };
            let totals = [
                sum(-5.0, 5.0, &|v| constraints.v_lsr.ln_density(v)),
                sum(-9.0, 9.0, &|x| constraints.sigma.ln_density_of_logarithm(x)),
                sum(-9.0, 9.0, &|x| constraints.ln_tau(x)),
                sum(-9.0, 9.0, &|u| constraints.ln_speed(u, 0.4)),
            ];
            for total in totals {
                assert!((total - 1.0).abs() < 1e-3, "{settings:?}: {totals:?}");
            }
            let inward = sum(0.0, 9.0, &|u| constraints.ln_speed(u, 0.4));
            assert!((constraints.inward(0.4) - inward).abs() < 1e-3);
        }
    }

    #[test]
    fn densities_without_mass_in_the_range_are_refused() {
        let far = settings(&[], &[("v_lsr_km_s", 9.0, 0.1)]);
        let held = settings(&[], &[("v_lsr_km_s", 9.0, 0.0)]);
        let narrow = settings(&[("tau", (1e6, 1e7))], &[]);
        for settings in [far, held, narrow] {
            assert!(matches!(
                Constraints::new(&settings, RANGE),
                Err(PosteriorError::NoPriorMass { .. })
            ));
        }
    }
}
