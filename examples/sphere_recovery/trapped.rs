//! Random clumps whose lines are excited by themselves: two levels, collisions against photons that are
//! trapped where they are made. No radiation from elsewhere in the clump, no other levels.
//!
//! How photons are trapped, what opacity follows and whether the thin line shares the thick line's
//! excitation is drawn too: nobody knows which recipe other simulated spheres follow.

use crate::drawn::{Drawn, Wanted, accepted};
use inrush::line::Component;
use inrush::sphere::{
    Beam, Clump, Fineness, LineField, Molecule, Populations, Radiative, Shells, SphereError,
    emergent,
};
use rand::RngExt;
use rand_chacha::ChaCha8Rng;

/// Shells of a clump.
const SHELLS: usize = 60;

/// How often excitation and opacity are made to agree.
const ROUNDS: usize = 40;

/// What is drawn of the recipe.
#[derive(Clone, Copy, Debug)]
struct Recipe {
    /// tau of (1 - e^-tau)/tau: outward along the radius, or the mean of outward and the way through.
    outward: bool,
    /// Opacity follows the density alone, or all levels at the line's own T_ex too.
    levels: bool,
    /// The thin line has the thick line's T_ex.
    same: bool,
}

/// Clumps whose thick line is bright and thick and whose thin line stands out of the noise.
pub fn draw(
    pairs: usize,
    seed: u64,
    velocity_slope: f64,
) -> impl Iterator<Item = Result<Drawn, SphereError>> {
    accepted(pairs, seed, move |random| attempt(random, velocity_slope))
}

fn attempt(random: &mut ChaCha8Rng, velocity_slope: f64) -> Result<Option<Drawn>, SphereError> {
    let mut log = |low: f64, high: f64| (random.random_range(low.ln()..high.ln())).exp();
    let sigma_km_s = log(0.2, 1.2);
    let outer_radius_pc = log(0.1, 1.0);
    let inner_radius_pc = outer_radius_pc * log(0.01, 0.05);
    let beam_over_radius = log(0.2, 2.0);
    let speed = log(0.1, 1.3);
    let ratio = log(30.0, 90.0);
    let t_kin_k = log(10.0, 40.0);
    let n_h2_cm3 = log(3e3, 1e5);
    let depth = log(3.0, 200.0);
    let snr = log(10.0, 100.0);
    let thin_noise_ratio = log(0.2, 1.0);
    let step = sigma_km_s * log(0.1, 0.4);
    let density_slope = random.random_range(1.2..2.2);
    let temperature_slope = if random.random_bool(0.5) {
        0.0
    } else {
        random.random_range(0.0..0.4)
    };
    let recipe = Recipe {
        outward: random.random_bool(0.5),
        levels: random.random_bool(0.5),
        same: random.random_bool(0.3),
    };
    let sign = if random.random_bool(0.25) { -1.0 } else { 1.0 };
    let clump = Clump {
        inner_radius_pc,
        outer_radius_pc,
        n_h2_cm3,
        density_slope,
        t_kin_k,
        temperature_slope,
        v_in_km_s: speed * sigma_km_s * sign,
        velocity_slope,
        sigma_km_s,
        abundance: 1e-9,
    };
    let v_lsr_km_s = random.random_range(-50.0..50.0);
    let (transition, thick_line, thin_line) = if random.random_bool(0.5) {
        (0, "HCO+ 1-0", "H13CO+ 1-0")
    } else {
        (3, "HCO+ 4-3", "H13CO+ 4-3")
    };
    let molecule = Molecule::built_in("HCO+")?;
    let rare = molecule.isotopologue(0.973);
    let (velocity, near) = Drawn::velocities(&clump, step, random.random_range(-0.5..0.5));
    let t_ex = balance(&clump, &molecule, transition, depth, recipe)?;
    let thin_t_ex = if recipe.same {
        t_ex.clone()
    } else {
        balance(&clump, &rare, transition, depth / ratio, recipe)?
    };
    let beam = Beam::Gaussian {
        fwhm_pc: beam_over_radius * outer_radius_pc,
        offset_pc: 0.0,
    };
    let thick_k = spectrum(
        &clump,
        &molecule,
        transition,
        (depth, &t_ex),
        recipe,
        beam,
        &near,
    )?;
    let thin = (depth / ratio, &thin_t_ex[..]);
    let thin_k = spectrum(&clump, &rare, transition, thin, recipe, beam, &near)?;
    let wanted = Wanted {
        snr,
        thin_noise_ratio,
        depth,
    };
    if !wanted.holds(&thick_k, &thin_k) {
        return Ok(None);
    }
    let whole = |values: &[f64]| Drawn::whole(&velocity, &near, values);
    Ok(Some(Drawn {
        thick_line: thick_line.to_owned(),
        thin_line: thin_line.to_owned(),
        v_in_km_s: clump.v_in_km_s,
        v_lsr_km_s,
        sigma_km_s,
        depth,
        ratio,
        density_slope,
        beam_over_radius,
        t_kin_k,
        temperature_slope,
        n_h2_cm3,
        snr,
        thin_noise_ratio,
        thick_k: whole(&thick_k),
        thin_k: whole(&thin_k),
        velocity_km_s: velocity.iter().map(|v| v + v_lsr_km_s).collect(),
        excitation: format!("{recipe:?}"),
    }))
}

/// h nu/k, K.
fn photon_k(line: &Radiative) -> f64 {
    0.047_992_430_7 * line.frequency_ghz
}

/// Opacity of a molecule at T_ex over that without radiation and warmth, up to a constant.
fn response(molecule: &Molecule, line: &Radiative, t_ex: f64, recipe: Recipe) -> f64 {
    if !recipe.levels {
        return 1.0;
    }
    let shares = molecule.boltzmann(t_ex);
    let weights = molecule.levels[line.upper].weight / molecule.levels[line.lower].weight;
    shares[line.lower] * weights - shares[line.upper]
}

/// T_ex at the shells' middles, K: S = (b J_bg + e J(T))/(b + e) with b = (1 - e^-tau)/tau of the gas's own
/// depth and e = C (1 - exp(-h nu/kT))/A.
fn balance(
    clump: &Clump,
    molecule: &Molecule,
    transition: usize,
    depth: f64,
    recipe: Recipe,
) -> Result<Vec<f64>, SphereError> {
    let shells = Shells::of_clump(clump, SHELLS)?;
    let line = &molecule.radiative[transition];
    let photon = photon_k(line);
    let brightness = |t: f64| photon / ((photon / t).exp() - 1.0);
    let background = brightness(2.725_48);
    let edges = &shells.table().edge_pc;
    let middles = shells.centre_pc();
    let mut t_ex = vec![10.0; SHELLS];
    for _ in 0..ROUNDS {
        // depth of each shell along the radius
        let mut share: Vec<f64> = (0..SHELLS)
            .map(|i| {
                let width = edges[i + 1] - edges[i];
                clump.density_cm3(middles[i]) * width * response(molecule, line, t_ex[i], recipe)
            })
            .collect();
        let total: f64 = share.iter().sum();
        for one in &mut share {
            *one *= depth / total;
        }
        for i in 0..SHELLS {
            let out: f64 = 0.5 * share[i] + share[i + 1..].iter().sum::<f64>();
            let escape = |tau: f64| -(-tau).exp_m1() / tau;
            let escape = if recipe.outward {
                escape(out)
            } else {
                0.5 * (escape(out) + escape(2.0 * depth - out))
            };
            let t = clump.temperature_k(middles[i]);
            let rates = molecule.collision_rates(clump.density_cm3(middles[i]), t)?;
            let down = rates[line.upper * molecule.levels.len() + line.lower];
            let e = down / line.einstein_a_per_s * -(-photon / t).exp_m1();
            let source = (escape * background + e * brightness(t)) / (escape + e);
            let wanted = photon / (photon / source).ln_1p();
            t_ex[i] = (t_ex[i] * wanted).sqrt();
        }
    }
    Ok(t_ex)
}

/// Spectrum of a line of a radial depth and T_ex in each shell.
fn spectrum(
    clump: &Clump,
    molecule: &Molecule,
    transition: usize,
    (depth, t_ex): (f64, &[f64]),
    recipe: Recipe,
    beam: Beam,
    velocity_km_s: &[f64],
) -> Result<Vec<f64>, SphereError> {
    let line = &molecule.radiative[transition];
    let weights = molecule.levels[line.upper].weight / molecule.levels[line.lower].weight;
    let levels = molecule.levels.len();
    let mut shares = Vec::new();
    for t_ex in t_ex {
        if recipe.levels {
            shares.extend(molecule.boltzmann(*t_ex));
        } else {
            // as much opacity in every shell; the rest of the molecules waits in another level
            let photons = 1.0 / ((photon_k(line) / t_ex).exp() - 1.0);
            let mut own = vec![0.0; levels];
            let unit = 1e-4;
            own[line.upper] = unit * photons;
            own[line.lower] = unit * (1.0 + photons) / weights;
            own[levels - 1] = 1.0 - own[line.upper] - own[line.lower];
            shares.extend(own);
        }
    }
    let populations = Populations::new(levels, shares)?;
    let of = |abundance: f64| {
        let clump = Clump {
            abundance,
            ..*clump
        };
        let shells = Shells::of_clump(&clump, SHELLS)?;
        let field = LineField::new(&shells, molecule, transition, &populations);
        Ok::<_, SphereError>((shells, field))
    };
    let (shells, field) = of(1e-12)?;
    let abundance = 1e-12 * depth / field.radial_depth(&shells);
    let (shells, field) = of(abundance)?;
    let components = [Component::SINGLE];
    let fineness = Fineness::default();
    emergent(&shells, &field, &components, beam, velocity_km_s, &fineness)
}
