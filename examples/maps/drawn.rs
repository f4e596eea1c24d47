//! Maps drawn at random: a clump, its motions, its centre and its noise.

use inrush::simulate::NoiseLevel;
use inrush::simulate::grid::GridTruth;
use rand::RngExt as _;
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng as _;

/// What moves in a map.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Scene {
    pub name: &'static str,
    pub infall: bool,
    pub rotation: bool,
    pub outflow: bool,
}

const fn scene(name: &'static str, infall: bool, rotation: bool, outflow: bool) -> Scene {
    Scene {
        name,
        infall,
        rotation,
        outflow,
    }
}

pub const SCENES: [Scene; 8] = [
    scene("static", false, false, false),
    scene("rotation", false, true, false),
    scene("outflow", false, false, true),
    scene("rotation-outflow", false, true, true),
    scene("infall", true, false, false),
    scene("infall-rotation", true, true, false),
    scene("infall-outflow", true, false, true),
    scene("infall-rotation-outflow", true, true, true),
];

/// How a map is observed.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Observation {
    /// Brightest channel of the map over the noise, thick and thin line.
    pub signal_to_noise: [f64; 2],
    /// Whether noise goes together over the beam.
    pub smooth_noise: bool,
}

/// A map of a scene. Everything is drawn whether the scene has it or not, so that scenes of one seed have
/// the same clump.
///
/// A clump of 2 to 3.5 beams radius in a 9 by 9 raster at half a beam, its centre up to a quarter of a
/// beam from the map's; optical depth 5 to 50, excitation from 12 to 30 K down to 4 to 8 K; inward speed 0.3
/// to 1 dispersions at the radius; rotation at 0.5 to 2 dispersions as a solid body, at one speed or about
/// a point mass, axis tilted up to 60 deg; lobes at 2 to 8 dispersions, tilted 15 to 75 deg, 0.3 to 0.8
/// radii out.
pub fn draw(scene: Scene, seed: u64, observation: Observation) -> GridTruth {
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    generator.set_stream(7);
    let mut even = |low: f64, high: f64| low + (high - low) * generator.random::<f64>();
    let mut truth = GridTruth {
        seed,
        noise: NoiseLevel::SignalToNoise(observation.signal_to_noise[0]),
        noise_thin: NoiseLevel::SignalToNoise(observation.signal_to_noise[1]),
        noise_edge_ratio: even(1.0, 1.5),
        centre_arcsec: [even(-5.0, 5.0), even(-5.0, 5.0)],
        ..GridTruth::default()
    };
    if observation.smooth_noise {
        truth.noise_fwhm_arcsec = truth.beam_arcsec[0];
    }
    let clump = &mut truth.clump;
    clump.radius_arcsec = even(40.0, 70.0);
    clump.core_arcsec = clump.radius_arcsec * even(0.1, 0.3);
    clump.density_slope = even(1.0, 2.0);
    clump.excitation_slope = even(0.5, 1.0);
    clump.t_centre_k = even(12.0, 30.0);
    clump.t_edge_k = even(4.0, 8.0);
    clump.tau = 5.0 * 10f64.powf(even(0.0, 1.0));
    clump.isotope_ratio = even(40.0, 80.0);
    clump.sigma_km_s = even(0.3, 0.8);
    let sigma = clump.sigma_km_s;
    let speed = sigma * even(0.3, 1.0);
    clump.infall.slope = if even(0.0, 1.0) < 0.5 { 0.0 } else { 0.5 };
    clump.infall.speed_km_s = if scene.infall { speed } else { 0.0 };
    let speed = sigma * even(0.5, 2.0);
    let kind = even(0.0, 3.0);
    clump.rotation.slope = if kind < 1.0 {
        1.0
    } else if kind < 2.0 {
        0.0
    } else {
        -0.5
    };
    clump.rotation.axis_deg = even(0.0, 360.0);
    clump.rotation.tilt_deg = even(-60.0, 60.0);
    clump.rotation.speed_km_s = if scene.rotation { speed } else { 0.0 };
    let outflow = &mut clump.outflow;
    let speed = sigma * even(2.0, 8.0);
    outflow.angle_deg = even(0.0, 360.0);
    outflow.tilt_deg = even(15.0, 75.0);
    outflow.distance_arcsec = clump.radius_arcsec * even(0.3, 0.8);
    outflow.fwhm_arcsec = clump.radius_arcsec * even(0.3, 0.6);
    outflow.sigma_km_s = sigma * even(1.0, 2.0);
    outflow.tau = even(0.2, 1.5);
    outflow.t_ex_k = even(8.0, 20.0);
    outflow.speed_km_s = if scene.outflow { speed } else { 0.0 };
    truth
}
