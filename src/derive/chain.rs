//! The one place that strings the formulas together, for the given values and for every draw.

use super::cautions::{self, DISAGREEMENT, DeriveCaution};
use super::draws::{Drawn, FitDraws, draw_source};
use super::source::{Input, SourceProperties};
use super::{
    DeriveError, Emitter, Molecule, alfven_speed_km_s, column_density_cm2, depth_from_brightness,
    doubling_time_yr, dust_mass_msun, field_from_angles_ug, free_fall_speed_km_s,
    free_fall_time_yr, h2_density_at_radius_cm3, isothermal_rate_msun_yr, mach_number,
    mass_from_density_msun, mass_rate_from_density_msun_yr, mass_rate_from_mass_msun_yr,
    mass_to_flux, mean_h2_density_cm3, non_thermal_dispersion_km_s, sound_speed_km_s,
    thermal_dispersion_km_s, total_dispersion_km_s, virial_parameter,
};
use crate::line::Line;
use crate::model::{Model, RadiationTemperature};

/// A derived quantity.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Quantity {
    /// Mass from the dust's flux.
    MassDust,
    /// Mass within the radius.
    Mass,
    /// Mean density of H2.
    MeanDensity,
    /// Mass infall rate.
    MassRate,
    /// Free-fall speed.
    FreeFallSpeed,
    /// Inward over free-fall speed.
    SpeedRatio,
    /// Free-fall time.
    FreeFallTime,
    /// Doubling time.
    DoublingTime,
    /// Sound speed.
    SoundSpeed,
    /// Non-thermal dispersion.
    NonThermal,
    /// Total dispersion.
    TotalDispersion,
    /// Sonic Mach number.
    Mach,
    /// Virial parameter.
    Virial,
    /// Its thermal part.
    VirialThermal,
    /// Its non-thermal part.
    VirialNonThermal,
    /// Rate of the isothermal sphere.
    IsothermalRate,
    /// Field strength.
    Field,
    /// Mass-to-flux ratio.
    MassToFlux,
    /// Alfven speed.
    AlfvenSpeed,
    /// Inward over Alfven speed.
    AlfvenRatio,
    /// Column density of the thick line's species.
    ColumnThick,
    /// Column density of the thin line's species.
    ColumnThin,
}

impl Quantity {
    /// Every quantity, in the order of the results.
    pub const ALL: [Self; 22] = [
        Self::MassDust,
        Self::Mass,
        Self::MeanDensity,
        Self::MassRate,
        Self::FreeFallSpeed,
        Self::SpeedRatio,
        Self::FreeFallTime,
        Self::DoublingTime,
        Self::SoundSpeed,
        Self::NonThermal,
        Self::TotalDispersion,
        Self::Mach,
        Self::Virial,
        Self::VirialThermal,
        Self::VirialNonThermal,
        Self::IsothermalRate,
        Self::Field,
        Self::MassToFlux,
        Self::AlfvenSpeed,
        Self::AlfvenRatio,
        Self::ColumnThick,
        Self::ColumnThin,
    ];

    /// Its result column.
    #[must_use]
    pub const fn column(self) -> &'static str {
        match self {
            Self::MassDust => "mass_dust_msun",
            Self::Mass => "mass_msun",
            Self::MeanDensity => "n_h2_mean_cm3",
            Self::MassRate => "mass_rate_msun_yr",
            Self::FreeFallSpeed => "v_ff_km_s",
            Self::SpeedRatio => "v_in_over_v_ff",
            Self::FreeFallTime => "t_ff_yr",
            Self::DoublingTime => "doubling_time_yr",
            Self::SoundSpeed => "sound_speed_km_s",
            Self::NonThermal => "sigma_nonthermal_km_s",
            Self::TotalDispersion => "sigma_total_km_s",
            Self::Mach => "mach_number",
            Self::Virial => "virial_parameter",
            Self::VirialThermal => "virial_thermal",
            Self::VirialNonThermal => "virial_nonthermal",
            Self::IsothermalRate => "isothermal_rate_msun_yr",
            Self::Field => "field_ug",
            Self::MassToFlux => "mass_to_flux",
            Self::AlfvenSpeed => "v_alfven_km_s",
            Self::AlfvenRatio => "v_in_over_v_alfven",
            Self::ColumnThick => "column_thick_cm2",
            Self::ColumnThin => "column_thin_cm2",
        }
    }
}

/// Where the mass comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum MassSource {
    /// Given.
    Given,
    /// From the dust's flux.
    Dust,
    /// From density, radius and slope.
    Density,
}

impl MassSource {
    /// Its formula, as in the tables.
    #[must_use]
    pub fn text(self) -> &'static str {
        match self {
            Self::Given => "given",
            Self::Dust => "S d^2/(kappa B(T_d))",
            Self::Density => "4 pi R^3 rho/(3 - p)",
        }
    }
}

/// Which formula the mass infall rate follows.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum RateFormula {
    /// From the density at the radius.
    Density,
    /// From mass, radius and slope.
    Mass,
}

impl RateFormula {
    /// The formula, as in the tables.
    #[must_use]
    pub fn text(self) -> &'static str {
        match self {
            Self::Density => "4 pi R^2 rho v_in",
            Self::Mass => "(3 - p) M v_in/R",
        }
    }
}

/// What a quantity lacks: a set of inputs and of things that lines and fits give.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Lack(u32);

impl Lack {
    const SPEED: Self = Self(1 << 20);
    const DISPERSION: Self = Self(1 << 21);
    const THIN_SPECIES: Self = Self(1 << 22);
    const THICK_EMITTER: Self = Self(1 << 23);
    const THIN_EMITTER: Self = Self(1 << 24);
    const THICK_DEPTH: Self = Self(1 << 25);
    const THIN_DEPTH: Self = Self(1 << 26);

    const fn input(input: Input) -> Self {
        Self(1 << input.index())
    }

    const fn and(self, other: Self) -> Self {
        Self(self.0 | other.0)
    }

    const fn holds(self, other: Self) -> bool {
        self.0 & other.0 != 0
    }

    /// What would fill it: keys of the run sheet, or words.
    #[must_use]
    pub fn names(self) -> Vec<&'static str> {
        let inputs = Input::ALL.into_iter().map(|input| {
            let name = match input {
                Input::Mass => "mass_msun (or a dust flux)",
                Input::Field => "field_ug (or angle_dispersion_deg)",
                other => other.key(),
            };
            (Self::input(input), name)
        });
        let others = [
            (Self::SPEED, "an inward speed"),
            (Self::DISPERSION, "a detected thin line"),
            (Self::THIN_SPECIES, "a built-in thin line"),
            (Self::THICK_EMITTER, "a built-in thick line"),
            (Self::THIN_EMITTER, "a built-in thin line"),
            (Self::THICK_DEPTH, "a model with an optical depth"),
            (Self::THIN_DEPTH, "a detected thin line in a fit"),
        ];
        inputs
            .chain(others)
            .filter(|(bit, _)| self.holds(*bit))
            .map(|(_, name)| name)
            .collect()
    }
}

/// A number, or what it lacks.
type Step = Result<f64, Lack>;

/// All of several steps, or everything that any of them lacks.
fn all<const N: usize>(steps: [Step; N]) -> Result<[f64; N], Lack> {
    let mut lack = Lack(0);
    let values = steps.map(|step| {
        step.unwrap_or_else(|own| {
            lack = lack.and(own);
            0.0
        })
    });
    if lack == Lack(0) {
        Ok(values)
    } else {
        Err(lack)
    }
}

/// The lines of a pair and the model that the fit's parameters belong to.
#[derive(Clone, Copy, Debug)]
pub struct Tracers<'a> {
    /// Thick line.
    pub thick: &'a Line,
    /// Thin line.
    pub thin: &'a Line,
    /// Model of the thick line; `None` without a fit, and for draws of several models.
    pub model: Option<Model>,
}

/// Columns of what the formulas use, looked up once.
struct Plan<'a> {
    given: [Option<Drawn>; Input::ALL.len()],
    speed: Option<&'a Drawn>,
    sigma_thick: Option<&'a Drawn>,
    sigma_thin: Option<&'a Drawn>,
    /// Of the gas: a sphere's, else the thin line's.
    sigma_gas: Option<&'a Drawn>,
    molecule: Option<&'static Molecule>,
    thick: Option<Emitter>,
    thin: Option<Emitter>,
    thick_depth: Option<ThickDepth<'a>>,
    thin_depth: Option<ThinDepth<'a>>,
    mass_source: Option<MassSource>,
}

/// The thick line's optical depth and excitation, by model.
enum ThickDepth<'a> {
    Layers {
        tau: &'a Drawn,
        t_ex_k: Vec<&'a Drawn>,
    },
    /// J rises linearly with depth from the surface to the middle: taken at its mean.
    Hill {
        tau: &'a Drawn,
        t_peak_k: &'a Drawn,
        t_surface_k: Option<&'a Drawn>,
        radiation: RadiationTemperature,
    },
}

/// The thin line's optical depth, or its brightness.
enum ThinDepth<'a> {
    Layer {
        tau: &'a Drawn,
        ratio: Option<&'a Drawn>,
        t_ex_k: &'a Drawn,
    },
    Peak {
        peak_k: &'a Drawn,
    },
}

impl<'a> Plan<'a> {
    fn new(source: &SourceProperties, fit: &'a FitDraws, tracers: &Tracers<'_>, seed: u64) -> Self {
        let mut plan = Self {
            given: draw_source(source, seed, fit.rows()),
            speed: fit.column("v_in_km_s"),
            sigma_thick: fit.column("sigma_km_s"),
            sigma_thin: fit.column("sigma_thin_km_s").or(fit.column("sigma_km_s")),
            sigma_gas: ["sigma_gas_km_s", "sigma_thin_km_s", "sigma_km_s"]
                .iter()
                .find_map(|name| fit.column(name)),
            molecule: tracers
                .thin
                .transition()
                .and_then(|transition| Molecule::of(transition.species)),
            thick: Emitter::of(tracers.thick),
            thin: Emitter::of(tracers.thin),
            thick_depth: ThickDepth::of(fit, tracers),
            thin_depth: ThinDepth::of(fit),
            mass_source: None,
        };
        plan.mass_source = if source.get(Input::Mass).is_some() {
            Some(MassSource::Given)
        } else if plan.mass_dust(None).is_ok() {
            Some(MassSource::Dust)
        } else {
            plan.mass_density(None).ok().map(|_| MassSource::Density)
        };
        plan
    }

    fn given(&self, input: Input, row: Option<usize>) -> Step {
        let drawn = self.given[input.index()].as_ref();
        drawn.map_or(Err(Lack::input(input)), |drawn| Ok(drawn.at(row)))
    }

    fn mass_dust(&self, row: Option<usize>) -> Step {
        let [flux, distance, kappa, frequency, temperature] = all([
            self.given(Input::DustFlux, row),
            self.given(Input::Distance, row),
            self.given(Input::DustOpacity, row),
            self.given(Input::DustFrequency, row),
            self.given(Input::DustTemperature, row),
        ])?;
        Ok(dust_mass_msun(
            flux,
            distance,
            kappa,
            frequency,
            temperature,
        ))
    }

    fn mass_density(&self, row: Option<usize>) -> Step {
        let [radius, density, slope] = all([
            self.given(Input::Radius, row),
            self.given(Input::Density, row),
            self.given(Input::Slope, row),
        ])?;
        Ok(mass_from_density_msun(radius, density, slope))
    }

    fn mass(&self, row: Option<usize>) -> Step {
        match self.mass_source {
            Some(MassSource::Given) => self.given(Input::Mass, row),
            Some(MassSource::Dust) => self.mass_dust(row),
            Some(MassSource::Density) => self.mass_density(row),
            // what is begun is asked for first
            None if self.given[Input::DustFlux.index()].is_some() => self.mass_dust(row),
            None => Err(Lack::input(Input::Mass)),
        }
    }

    fn mass_rate(&self, row: Option<usize>, mass: Step) -> Step {
        let (radius, speed) = (self.given(Input::Radius, row), self.speed(row));
        match self.rate_formula() {
            RateFormula::Density => {
                let [radius, density, v_in] =
                    all([radius, self.given(Input::Density, row), speed])?;
                Ok(mass_rate_from_density_msun_yr(radius, density, v_in))
            }
            RateFormula::Mass => {
                let [radius, mass, slope, v_in] =
                    all([radius, mass, self.given(Input::Slope, row), speed])?;
                Ok(mass_rate_from_mass_msun_yr(mass, radius, slope, v_in))
            }
        }
    }

    fn rate_formula(&self) -> RateFormula {
        if self.given[Input::Density.index()].is_some() {
            RateFormula::Density
        } else {
            RateFormula::Mass
        }
    }

    fn speed(&self, row: Option<usize>) -> Step {
        self.speed
            .map_or(Err(Lack::SPEED), |speed| Ok(speed.at(row)))
    }

    fn thermal(&self, row: Option<usize>) -> Step {
        let mass_u = self.molecule.map_or(Err(Lack::THIN_SPECIES), |molecule| {
            Ok(f64::from(molecule.mass_number))
        });
        let [t_kin, mass_u] = all([self.given(Input::Kinetic, row), mass_u])?;
        Ok(thermal_dispersion_km_s(t_kin, mass_u))
    }

    fn sigma_thin(&self, row: Option<usize>) -> Step {
        self.sigma_thin
            .map_or(Err(Lack::DISPERSION), |sigma| Ok(sigma.at(row)))
    }

    fn sigma_gas(&self, row: Option<usize>) -> Step {
        self.sigma_gas
            .map_or(Err(Lack::DISPERSION), |sigma| Ok(sigma.at(row)))
    }

    fn column_thick(&self, row: Option<usize>) -> Step {
        let emitter = self.thick.ok_or(Lack::THICK_EMITTER);
        let depth = self.thick_depth.as_ref().ok_or(Lack::THICK_DEPTH);
        let sigma = self.sigma_thick.ok_or(Lack::DISPERSION);
        let (emitter, depth, sigma) = (emitter?, depth?, sigma?.at(row));
        Ok(match depth {
            ThickDepth::Layers { tau, t_ex_k } => t_ex_k
                .iter()
                .map(|t_ex| column_density_cm2(&emitter, tau.at(row), sigma, t_ex.at(row)))
                .sum(),
            ThickDepth::Hill {
                tau,
                t_peak_k,
                t_surface_k,
                radiation,
            } => {
                let surface = t_surface_k.map_or(radiation.background(), |surface| {
                    radiation.at(surface.at(row))
                });
                let mean = 0.5 * (radiation.at(t_peak_k.at(row)) + surface);
                let t_ex = radiation.inverse(mean);
                column_density_cm2(&emitter, 2.0 * tau.at(row), sigma, t_ex)
            }
        })
    }

    fn column_thin(&self, row: Option<usize>) -> Step {
        let emitter = self.thin.ok_or(Lack::THIN_EMITTER);
        let depth = self.thin_depth.as_ref().ok_or(Lack::THIN_DEPTH);
        let (emitter, depth, sigma) = (emitter?, depth?, self.sigma_thin(row)?);
        let (tau, t_ex) = match depth {
            ThinDepth::Layer { tau, ratio, t_ex_k } => {
                let linked = ratio.map_or(1.0, |ratio| 2.0 / ratio.at(row));
                (tau.at(row) * linked, t_ex_k.at(row))
            }
            ThinDepth::Peak { peak_k } => {
                let t_ex = self.given(Input::ThinExcitation, row)?;
                let tau = depth_from_brightness(emitter.frequency_ghz, peak_k.at(row), t_ex);
                (tau, t_ex)
            }
        };
        Ok(column_density_cm2(&emitter, tau, sigma, t_ex))
    }

    /// Every quantity, in the order of [`Quantity::ALL`].
    fn evaluate(&self, row: Option<usize>) -> [Step; Quantity::ALL.len()] {
        let given = |input| self.given(input, row);
        let (radius, speed) = (given(Input::Radius), self.speed(row));
        let mass = self.mass(row);
        let mean_density = all([mass, radius]).map(|[m, r]| mean_h2_density_cm3(m, r));
        let rate = self.mass_rate(row, mass);
        let free_fall = all([mass, radius]).map(|[m, r]| free_fall_speed_km_s(m, r));
        let sound = given(Input::Kinetic).map(sound_speed_km_s);
        let non_thermal = all([self.sigma_gas(row), self.thermal(row)])
            .map(|[sigma, thermal]| non_thermal_dispersion_km_s(sigma, thermal));
        let total = all([non_thermal, sound]).map(|[n, c]| total_dispersion_km_s(n, c));
        let virial = |sigma| all([sigma, radius, mass]).map(|[s, r, m]| virial_parameter(s, r, m));
        let field = match (given(Input::Field), given(Input::AngleDispersion)) {
            (Err(_), Ok(angles)) => all([mean_density, non_thermal])
                .map(|[n, sigma]| field_from_angles_ug(n, sigma, angles)),
            (field, _) => field,
        };
        let alfven = all([field, mean_density]).map(|[b, n]| alfven_speed_km_s(b, n));
        let over = |speed, other| all([speed, other]).map(|[v, o]| v / o);
        [
            self.mass_dust(row),
            mass,
            mean_density,
            rate,
            free_fall,
            over(speed, free_fall),
            mean_density.map(free_fall_time_yr),
            all([mass, rate]).map(|[m, rate]| doubling_time_yr(m, rate)),
            sound,
            non_thermal,
            total,
            all([non_thermal, sound]).map(|[n, c]| mach_number(n, c)),
            virial(total),
            virial(sound),
            virial(non_thermal),
            total.map(isothermal_rate_msun_yr),
            field,
            all([mass, radius, field]).map(|[m, r, b]| mass_to_flux(m, r, b)),
            alfven,
            over(speed, alfven),
            self.column_thick(row),
            self.column_thin(row),
        ]
    }
}

impl<'a> ThickDepth<'a> {
    fn of(fit: &'a FitDraws, tracers: &Tracers<'_>) -> Option<Self> {
        let layers = |tau: &str, temperatures: &[&str]| -> Option<Self> {
            Some(Self::Layers {
                tau: fit.column(tau)?,
                t_ex_k: temperatures
                    .iter()
                    .map(|name| fit.column(name))
                    .collect::<Option<_>>()?,
            })
        };
        let Some(model) = tracers.model else {
            return layers("tau", &["t_front_k", "t_rear_k"]);
        };
        match model {
            Model::Layer => layers("tau_total", &["t_ex_k"]),
            Model::TwoLayer | Model::TwoLayerContinuum => layers("tau", &["t_front_k", "t_rear_k"]),
            Model::Hill | Model::HillSurface => Some(Self::Hill {
                tau: fit.column("tau")?,
                t_peak_k: fit.column("t_peak_k")?,
                t_surface_k: fit.column("t_surface_k"),
                radiation: RadiationTemperature::new(tracers.thick.rest_frequency_ghz),
            }),
            _ => None,
        }
    }
}

impl<'a> ThinDepth<'a> {
    fn of(fit: &'a FitDraws) -> Option<Self> {
        let ratio = fit.column("isotope_ratio");
        let tau = match ratio {
            Some(_) => fit.column("tau"),
            None => fit.column("tau_thin"),
        };
        if let (Some(tau), Some(t_ex_k)) = (tau, fit.column("t_ex_thin_k")) {
            return Some(Self::Layer { tau, ratio, t_ex_k });
        }
        Some(Self::Peak {
            peak_k: fit.column("peak_thin_k")?,
        })
    }
}

/// A value with its central intervals.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Spread {
    /// The formula at the given and the fitted values.
    pub value: f64,
    /// Ends of the 68 % interval; `None` where an end is infinite.
    pub interval68: [Option<f64>; 2],
    /// Ends of the 95 % interval; `None` where an end is infinite.
    pub interval95: [Option<f64>; 2],
}

/// A quantity with its draws.
#[derive(Clone, Debug, PartialEq)]
pub struct DrawnQuantity {
    /// The formula at the given and the fitted values; infinite where it has none.
    pub value: f64,
    /// One value a draw, in the order of the fit's; some may be infinite.
    pub draws: Vec<f64>,
}

impl DrawnQuantity {
    /// Value and intervals; `None` where the value is infinite.
    #[must_use]
    pub fn spread(&self) -> Option<Spread> {
        if !self.value.is_finite() {
            return None;
        }
        let [low95, low68, high68, high95] = quantiles(&self.draws, [0.025, 0.16, 0.84, 0.975]);
        Some(Spread {
            value: self.value,
            interval68: [low68, high68],
            interval95: [low95, high95],
        })
    }
}

/// Quantiles of draws at ascending shares, by linear interpolation between neighbours in order; `None`
/// at an infinite one.
fn quantiles<const N: usize>(draws: &[f64], shares: [f64; N]) -> [Option<f64>; N] {
    let mut draws = draws.to_vec();
    let last = draws.len().saturating_sub(1);
    // everything before this is in its place
    let mut done = 0;
    shares.map(|share| {
        let place = share * last as f64;
        #[allow(
            clippy::cast_possible_truncation,
            clippy::cast_sign_loss,
            reason = "a place within the slice"
        )]
        let below = place as usize;
        let part = place - below as f64;
        let rest = draws.get_mut(done..)?;
        if below >= done + rest.len() {
            return None;
        }
        let (_, low, above) = rest.select_nth_unstable_by(below - done, f64::total_cmp);
        let low = *low;
        done = below;
        let high = above.iter().copied().min_by(f64::total_cmp).unwrap_or(low);
        let between = if part == 0.0 {
            low
        } else {
            low + part * (high - low)
        };
        between.is_finite().then_some(between)
    })
}

/// Every derived quantity with its draws.
#[derive(Clone, Debug, PartialEq)]
pub struct Sampled {
    quantities: Vec<Result<DrawnQuantity, Lack>>,
    mass_from: Option<MassSource>,
    rate_from: Option<RateFormula>,
    cautions: Vec<DeriveCaution>,
}

/// Every derived quantity with its intervals.
#[derive(Clone, Debug, PartialEq)]
pub struct Derived {
    quantities: Vec<Result<Spread, Option<Lack>>>,
    /// Where the mass comes from; `None` without one.
    pub mass_from: Option<MassSource>,
    /// Which formula the mass infall rate follows; `None` without one.
    pub rate_from: Option<RateFormula>,
    /// Cautions.
    pub cautions: Vec<DeriveCaution>,
}

impl Sampled {
    /// A quantity with its draws; what it lacks where it has none.
    ///
    /// # Errors
    ///
    /// The [`Lack`].
    pub fn get(&self, quantity: Quantity) -> Result<&DrawnQuantity, Lack> {
        self.quantities[quantity as usize]
            .as_ref()
            .map_err(|lack| *lack)
    }

    /// Values and intervals, without the draws.
    #[must_use]
    pub fn derived(&self) -> Derived {
        Derived {
            quantities: self
                .quantities
                .iter()
                .map(|quantity| match quantity {
                    Ok(drawn) => drawn.spread().ok_or(None),
                    Err(lack) => Err(Some(*lack)),
                })
                .collect(),
            mass_from: self.mass_from,
            rate_from: self.rate_from,
            cautions: self.cautions.clone(),
        }
    }
}

impl Derived {
    /// A quantity; `None` where it lacks something or has no finite value.
    #[must_use]
    pub fn get(&self, quantity: Quantity) -> Option<Spread> {
        self.quantities[quantity as usize].ok()
    }

    /// What is missing, and which quantities each would fill, in the order of the quantities.
    ///
    /// A second way to a mass that is there is not missed.
    #[must_use]
    pub fn missing(&self) -> Vec<(Lack, Vec<Quantity>)> {
        let mut missing: Vec<(Lack, Vec<Quantity>)> = Vec::new();
        for quantity in Quantity::ALL {
            let Err(Some(lack)) = self.quantities[quantity as usize] else {
                continue;
            };
            if quantity == Quantity::MassDust && !lack_begun(lack) {
                continue;
            }
            match missing.iter_mut().find(|(other, _)| *other == lack) {
                Some((_, quantities)) => quantities.push(quantity),
                None => missing.push((lack, vec![quantity])),
            }
        }
        missing
    }
}

/// Whether a mass from dust lacks less than its flux: somebody meant to have it.
fn lack_begun(lack: Lack) -> bool {
    !lack.holds(Lack::input(Input::DustFlux))
}

/// Derives every quantity from what is given of a source and what a fit says of its lines, as often as
/// the fit has draws.
///
/// Inputs are drawn by `seed`; the same seed and draws give the same bits for any number of threads.
///
/// ```
/// use inrush::derive::{FitDraws, Input, Quantity, SourceProperties, Tracers, sample};
/// use inrush::numeric::Estimate;
///
/// let mut source = SourceProperties::default();
/// for (input, value, err) in [
///     (Input::Mass, 1000.0, 250.0),
///     (Input::Radius, 0.5, 0.05),
///     (Input::Slope, 1.5, 0.2),
/// ] {
///     source.set(input, Estimate { value, err })?;
/// }
/// let fit = FitDraws::new(1000).with("v_in_km_s", 1.0, vec![1.0; 1000])?;
/// let lines = (inrush::line::find("HCO+ 1-0")?, inrush::line::find("H13CO+ 1-0")?);
/// let tracers = Tracers { thick: &lines.0, thin: &lines.1, model: None };
/// let derived = sample(&source, &fit, &tracers, 7)?.derived();
/// let rate = derived.get(Quantity::MassRate).expect("mass, radius, slope and speed");
/// assert!((rate.value - 3.068e-3).abs() < 1e-6); // (3 - p) M v/R
/// assert!(rate.interval68[0] < Some(rate.value) && Some(rate.value) < rate.interval68[1]);
/// assert!(derived.get(Quantity::Mach).is_none()); // needs t_kin_k
/// # Ok::<(), Box<dyn std::error::Error>>(())
/// ```
///
/// # Errors
///
/// [`DeriveError::Draws`] where the fit has none.
pub fn sample(
    source: &SourceProperties,
    fit: &FitDraws,
    tracers: &Tracers<'_>,
    seed: u64,
) -> Result<Sampled, DeriveError> {
    let rows = fit.rows();
    if rows == 0 {
        return Err(DeriveError::Draws { found: rows });
    }
    let plan = Plan::new(source, fit, tracers, seed);
    let values = plan.evaluate(None);
    let mut quantities: Vec<Result<DrawnQuantity, Lack>> = values
        .iter()
        .map(|value| {
            value.map(|value| DrawnQuantity {
                value,
                draws: Vec::with_capacity(rows),
            })
        })
        .collect();
    let columns = [Quantity::ColumnThick, Quantity::ColumnThin];
    let mut take = |quantity: Quantity, drawn: Step| {
        if let (Ok(quantity), Ok(drawn)) = (&mut quantities[quantity as usize], drawn) {
            quantity.draws.push(drawn);
        }
    };
    // Of a source of which nothing is given there are columns alone: no draw asks for the rest.
    let is_there = |quantity: &&Quantity| values[**quantity as usize].is_ok();
    let only_columns = (Quantity::ALL.iter().filter(is_there)).all(|one| columns.contains(one));
    for row in (0..rows).map(Some) {
        if only_columns {
            take(Quantity::ColumnThick, plan.column_thick(row));
            take(Quantity::ColumnThin, plan.column_thin(row));
        } else {
            for (quantity, drawn) in Quantity::ALL.into_iter().zip(plan.evaluate(row)) {
                take(quantity, drawn);
            }
        }
    }
    let has = |quantity: Quantity| values[quantity as usize].is_ok();
    let mut found = Vec::new();
    cautions::of_inputs(source, &mut found);
    of_results(source, &plan, &quantities, &mut found);
    Ok(Sampled {
        mass_from: plan.mass_source,
        rate_from: has(Quantity::MassRate).then(|| plan.rate_formula()),
        quantities,
        cautions: found,
    })
}

/// Cautions about what was computed.
fn of_results(
    source: &SourceProperties,
    plan: &Plan<'_>,
    quantities: &[Result<DrawnQuantity, Lack>],
    found: &mut Vec<DeriveCaution>,
) {
    let value = |quantity: Quantity| -> Option<f64> {
        quantities[quantity as usize]
            .as_ref()
            .ok()
            .map(|drawn| drawn.value)
    };
    let far_apart = |a: f64, b: f64| (a / b).max(b / a) > DISAGREEMENT;
    if let (Some(taken_msun), Some(dust_msun)) = (value(Quantity::Mass), value(Quantity::MassDust))
        && far_apart(taken_msun, dust_msun)
    {
        found.push(DeriveCaution::MassesDisagree {
            taken_msun,
            dust_msun,
        });
    }
    if let (Some(given), Ok([mass, radius, slope])) = (
        source.get(Input::Density),
        all([
            plan.mass(None),
            plan.given(Input::Radius, None),
            plan.given(Input::Slope, None),
        ]),
    ) {
        let from_mass_cm3 = h2_density_at_radius_cm3(mass, radius, slope);
        if far_apart(given.value, from_mass_cm3) {
            found.push(DeriveCaution::DensityDisagrees {
                given_cm3: given.value,
                from_mass_cm3,
            });
        }
    }
    if let Ok(rate) = &quantities[Quantity::MassRate as usize] {
        let v_in_km_s = plan.speed(None).unwrap_or_default();
        let outward = rate.draws.iter().filter(|rate| **rate <= 0.0).count() as f64;
        if (0.025..=0.975).contains(&(outward / rate.draws.len() as f64)) {
            found.push(DeriveCaution::RateHoldsZero);
        } else if v_in_km_s < 0.0 {
            found.push(DeriveCaution::OutwardSpeed { v_in_km_s });
        }
    }
    if let Some(ratio) = value(Quantity::SpeedRatio).filter(|ratio| *ratio > 1.0) {
        found.push(DeriveCaution::FasterThanFreeFall { ratio });
    }
    if let (Ok(sigma_km_s), Ok(thermal_km_s)) = (plan.sigma_gas(None), plan.thermal(None))
        && sigma_km_s < thermal_km_s
    {
        found.push(DeriveCaution::NarrowerThanThermal {
            sigma_km_s,
            thermal_km_s,
        });
    }
    if let Some(given) = source.get(Input::ThinExcitation) {
        if matches!(plan.thin_depth, Some(ThinDepth::Layer { .. })) {
            found.push(DeriveCaution::UnusedInput {
                input: Input::ThinExcitation,
                beside: "the fit's t_ex_thin_k",
            });
        } else if value(Quantity::ColumnThin).is_some_and(f64::is_infinite) {
            found.push(DeriveCaution::BrighterThanExcitation {
                t_ex_k: given.value,
            });
        }
    }
    let both_fields = [Input::Field, Input::AngleDispersion]
        .iter()
        .all(|input| source.get(*input).is_some());
    if both_fields {
        found.push(DeriveCaution::UnusedInput {
            input: Input::AngleDispersion,
            beside: "field_ug",
        });
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// numpy 2.4.6, `quantile`, linear interpolation.
    #[test]
    fn quantiles_are_those_of_numpy() {
        let draws = [9.0, 1.0, 4.0, 16.0, 25.0, 36.0, 2.0];
        let expected = [1.15, 1.96, 25.44, 34.35];
        let found = quantiles(&draws, [0.025, 0.16, 0.84, 0.975]);
        for (found, expected) in found.into_iter().zip(expected) {
            assert!((found.unwrap() - expected).abs() < 1e-12, "{found:?}");
        }
        assert_eq!(quantiles(&[3.0], [0.16, 0.84]), [Some(3.0); 2]);
        assert_eq!(quantiles(&[], [0.16, 0.84]), [None; 2]);
        let open = [1.0, 2.0, 3.0, f64::INFINITY];
        assert_eq!(
            quantiles(&open, [0.0, 0.5, 0.9]),
            [Some(1.0), Some(2.5), None]
        );
    }

    #[test]
    fn quantities_are_in_the_order_of_their_index() {
        for (index, quantity) in Quantity::ALL.into_iter().enumerate() {
            assert_eq!(quantity as usize, index);
        }
    }
}
