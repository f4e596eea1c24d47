//! What is given of an invented source, and its truth.

use inrush::derive::{DeriveError, Input, SourceProperties, mass_rate_from_mass_msun_yr};
use inrush::numeric::Estimate;
use rand::RngExt as _;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng as _;
use rand_distr::{Distribution as _, StandardNormal};

/// Standard errors over the values of distance, mass and radius.
const ERRORS: [f64; 3] = [0.15, 0.25, 0.1];
/// Standard error of the slope.
const SLOPE_ERROR: f64 = 0.15;

/// What is given, and what is true: drawn from what is given, as positive quantities with these means
/// and errors (log-normal), mass and radius at the true distance.
pub struct Given {
    pub properties: SourceProperties,
    mass_msun: f64,
    radius_pc: f64,
    slope: f64,
}

impl Given {
    /// Masses of 30 to 3000 Msun, radii of 0.1 to 1 pc, distances of 0.5 to 8 kpc.
    pub fn draw(seed: u64) -> Result<Self, DeriveError> {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        generator.set_stream(77);
        let mut log_uniform =
            |low: f64, high: f64| low * (high / low).powf(generator.random::<f64>());
        let given = [
            log_uniform(0.5, 8.0),
            log_uniform(30.0, 3000.0),
            log_uniform(0.1, 1.0),
        ];
        let slope = 1.4 + 0.6 * generator.random::<f64>();
        let mut properties = SourceProperties::default();
        let inputs = [Input::Distance, Input::Mass, Input::Radius];
        for ((input, value), share) in inputs.into_iter().zip(given).zip(ERRORS) {
            let err = share * value;
            properties.set(input, Estimate { value, err })?;
        }
        let err = SLOPE_ERROR;
        properties.set(Input::Slope, Estimate { value: slope, err })?;
        let mut factor = |share: f64| {
            let variance = (share * share).ln_1p();
            let z: f64 = StandardNormal.sample(&mut generator);
            (variance.sqrt() * z - 0.5 * variance).exp()
        };
        let [distance, mass, radius] = ERRORS.map(&mut factor);
        let z: f64 = StandardNormal.sample(&mut generator);
        Ok(Self {
            properties,
            mass_msun: given[1] * mass * distance * distance,
            radius_pc: given[2] * radius * distance,
            slope: slope + SLOPE_ERROR * z,
        })
    }

    /// The true rate of a true speed.
    pub fn rate_msun_yr(&self, v_in_km_s: f64) -> f64 {
        mass_rate_from_mass_msun_yr(self.mass_msun, self.radius_pc, self.slope, v_in_km_s)
    }
}
