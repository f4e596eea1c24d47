//! `inrush simulate grid`.

use super::{Exit, Output, RunError, SharedArgs, THICK_LINE, THIN_LINE, level, replace};
use crate::cli::values::{number, numbers, range};
use clap::{Args, ValueEnum};
use inrush::run::BatchSettings;
use inrush::run::simulate::{GridProducts, GridRun, read_grid_settings, write_grid};
use inrush::simulate::grid::GridTruth;
use std::path::PathBuf;

/// Make the spectra of a map of a clump that falls in, rotates or drives an outflow.
///
/// Examples:
///
///   inrush simulate grid --out map --v-in-km-s 0.4
///
///   inrush simulate grid --out map --v-in-km-s 0.4 --rotation-km-s 0.5 --rotation-axis-deg 30 --write cubes
///
/// The clump is at rest but for the motions that are given a speed. Position angles are counted from
/// north through east, tilts from the plane of the sky toward us.
#[derive(Debug, Args)]
#[command(verbatim_doc_comment)]
pub struct GridArgs {
    /// Directory for the files; must not exist, or be empty.
    #[arg(long, value_name = "DIR")]
    out: PathBuf,
    /// Name of the source.
    #[arg(long, value_name = "NAME", default_value = "Simulated clump")]
    name: String,
    /// Spectra that are written.
    #[arg(long, value_enum, default_value_t = Products::Table)]
    write: Products,
    /// Settings in a file, such as a map's settings.toml; options stand above them.
    #[arg(long, value_name = "FILE")]
    settings: Option<PathBuf>,
    #[command(flatten)]
    shared: SharedArgs,
    #[command(flatten)]
    pointings: PointingArgs,
    #[command(flatten)]
    clump: ClumpArgs,
    #[command(flatten)]
    motion: MotionArgs,
    #[command(flatten)]
    noise: NoiseArgs,
}

#[derive(Debug, Args)]
#[command(next_help_heading = "Pointings and channels")]
struct PointingArgs {
    /// Pointings in a row; 9 where absent.
    #[arg(long, value_name = "N", allow_hyphen_values = true)]
    columns: Option<usize>,
    /// Rows of pointings; 9 where absent.
    #[arg(long, value_name = "N", allow_hyphen_values = true)]
    rows: Option<usize>,
    /// Distance of neighbouring pointings, arcsec; 10 where absent.
    #[arg(long, value_name = "ARCSEC", value_parser = number, allow_hyphen_values = true)]
    spacing_arcsec: Option<f64>,
    /// Full width at half maximum of the beam, or of its major and minor axis, arcsec; 20 where absent.
    #[arg(long, value_name = "FWHM[,MINOR]", value_parser = one_or_two, allow_hyphen_values = true)]
    beam_arcsec: Option<[f64; 2]>,
    /// Position angle of the beam's major axis, degrees.
    #[arg(long, value_name = "DEGREES", value_parser = number, allow_hyphen_values = true)]
    beam_angle_deg: Option<f64>,
    /// Right ascension of the map's centre, degrees; 120 where absent.
    #[arg(long, value_name = "DEGREES", value_parser = number, allow_hyphen_values = true)]
    ra_deg: Option<f64>,
    /// Declination of the map's centre, degrees; -30 where absent.
    #[arg(long, value_name = "DEGREES", value_parser = number, allow_hyphen_values = true)]
    dec_deg: Option<f64>,
    /// Offset of the clump's centre from the map's, east and north, arcsec.
    #[arg(long, value_name = "EAST,NORTH", value_parser = pair, allow_hyphen_values = true)]
    centre_arcsec: Option<[f64; 2]>,
    /// Width of the channels, km/s; 0.1 where absent.
    #[arg(long, value_name = "KM_S", value_parser = number, allow_hyphen_values = true)]
    channel_km_s: Option<f64>,
    /// First and last channel, km/s; far enough about the lines where absent.
    #[arg(long, value_name = "LOW,HIGH", value_parser = range, allow_hyphen_values = true)]
    range_km_s: Option<[f64; 2]>,
}

#[derive(Debug, Args)]
#[command(next_help_heading = "Clump")]
struct ClumpArgs {
    /// Radius, arcsec; 60 where absent.
    #[arg(long, value_name = "ARCSEC", value_parser = number, allow_hyphen_values = true)]
    radius_arcsec: Option<f64>,
    /// Radius of the flat core of density and excitation, arcsec; 10 where absent.
    #[arg(long, value_name = "ARCSEC", value_parser = number, allow_hyphen_values = true)]
    core_arcsec: Option<f64>,
    /// Slope of the density outside the core; 1.5 where absent.
    #[arg(long, value_name = "SLOPE", value_parser = number, allow_hyphen_values = true)]
    density_slope: Option<f64>,
    /// Excitation temperature in the centre, K; 20 where absent.
    #[arg(long, value_name = "K", value_parser = number, allow_hyphen_values = true)]
    t_centre_k: Option<f64>,
    /// Excitation temperature at the radius, K; 5 where absent.
    #[arg(long, value_name = "K", value_parser = number, allow_hyphen_values = true)]
    t_edge_k: Option<f64>,
    /// Slope with which the excitation falls from the core to the radius; 0.8 where absent.
    #[arg(long, value_name = "SLOPE", value_parser = number, allow_hyphen_values = true)]
    excitation_slope: Option<f64>,
    /// Optical depth of the thick line through the centre, at rest; 20 where absent.
    #[arg(long, value_name = "DEPTH", value_parser = number, allow_hyphen_values = true)]
    tau: Option<f64>,
    /// Optical depth of the thick line over that of the thin line; 60 where absent.
    #[arg(long, value_name = "RATIO", value_parser = number, allow_hyphen_values = true)]
    isotope_ratio: Option<f64>,
    /// Systemic velocity, km/s; 0 where absent.
    #[arg(long, value_name = "KM_S", value_parser = number, allow_hyphen_values = true)]
    v_lsr_km_s: Option<f64>,
    /// Velocity dispersion, km/s; 0.5 where absent.
    #[arg(long, value_name = "KM_S", value_parser = number, allow_hyphen_values = true)]
    sigma_km_s: Option<f64>,
}

#[derive(Debug, Args)]
#[command(next_help_heading = "Motion")]
struct MotionArgs {
    /// Inward speed at the radius, km/s; negative for expansion.
    #[arg(long, value_name = "KM_S", value_parser = number, allow_hyphen_values = true)]
    v_in_km_s: Option<f64>,
    /// Slope with which it rises inward: 0 for the same speed everywhere, 0.5 for free fall onto a point.
    #[arg(long, value_name = "SLOPE", value_parser = number, allow_hyphen_values = true)]
    v_in_slope: Option<f64>,
    /// Speed of rotation at the equator, km/s.
    #[arg(long, value_name = "KM_S", value_parser = number, allow_hyphen_values = true)]
    rotation_km_s: Option<f64>,
    /// Slope of the speed of rotation with distance from the axis: 1 for a solid body (where absent), 0
    /// for the same speed, -0.5 about a point mass.
    #[arg(long, value_name = "SLOPE", value_parser = number, allow_hyphen_values = true)]
    rotation_slope: Option<f64>,
    /// Position angle of the axis of rotation, degrees; the side 90 degrees further approaches.
    #[arg(long, value_name = "DEGREES", value_parser = number, allow_hyphen_values = true)]
    rotation_axis_deg: Option<f64>,
    /// Tilt of the axis of rotation, degrees.
    #[arg(long, value_name = "DEGREES", value_parser = number, allow_hyphen_values = true)]
    rotation_tilt_deg: Option<f64>,
    /// Speed of the outflow along its axis, km/s.
    #[arg(long, value_name = "KM_S", value_parser = number, allow_hyphen_values = true)]
    outflow_km_s: Option<f64>,
    /// Position angle of the approaching lobe, degrees; 45 where absent.
    #[arg(long, value_name = "DEGREES", value_parser = number, allow_hyphen_values = true)]
    outflow_angle_deg: Option<f64>,
    /// Tilt of the approaching lobe, degrees; 45 where absent.
    #[arg(long, value_name = "DEGREES", value_parser = number, allow_hyphen_values = true)]
    outflow_tilt_deg: Option<f64>,
    /// Distance of each lobe from the centre, in space, arcsec; 35 where absent.
    #[arg(long, value_name = "ARCSEC", value_parser = number, allow_hyphen_values = true)]
    outflow_distance_arcsec: Option<f64>,
    /// Full width at half maximum of a lobe, arcsec; 25 where absent.
    #[arg(long, value_name = "ARCSEC", value_parser = number, allow_hyphen_values = true)]
    outflow_fwhm_arcsec: Option<f64>,
    /// Velocity dispersion in a lobe, km/s; 0.8 where absent.
    #[arg(long, value_name = "KM_S", value_parser = number, allow_hyphen_values = true)]
    outflow_sigma_km_s: Option<f64>,
    /// Optical depth of the thick line through a lobe; 0.5 where absent.
    #[arg(long, value_name = "DEPTH", value_parser = number, allow_hyphen_values = true)]
    outflow_tau: Option<f64>,
    /// Excitation temperature of the lobes, K; 15 where absent.
    #[arg(long, value_name = "K", value_parser = number, allow_hyphen_values = true)]
    outflow_t_ex_k: Option<f64>,
}

#[derive(Debug, Args)]
#[command(next_help_heading = "Noise")]
struct NoiseArgs {
    /// Noise of one channel in the middle of the map, K.
    #[arg(long, value_name = "K", value_parser = number, conflicts_with = "signal_to_noise", allow_hyphen_values = true)]
    noise_k: Option<f64>,
    /// Brightest channel of the map over that noise; 40 for the thick and 20 for the thin line where
    /// nothing is given.
    #[arg(long, value_name = "RATIO", value_parser = number, allow_hyphen_values = true)]
    signal_to_noise: Option<f64>,
    /// Noise of one channel of the thin line, K.
    #[arg(long, value_name = "K", value_parser = number, conflicts_with = "signal_to_noise_thin", allow_hyphen_values = true)]
    noise_thin_k: Option<f64>,
    /// Brightest channel over noise of the thin line.
    #[arg(long, value_name = "RATIO", value_parser = number, allow_hyphen_values = true)]
    signal_to_noise_thin: Option<f64>,
    /// Noise in the corners of the map over that in its middle; 1 where absent.
    #[arg(long, value_name = "RATIO", value_parser = number, allow_hyphen_values = true)]
    noise_edge_ratio: Option<f64>,
    /// Full width of the kernel that smooths the noise from pointing to pointing, arcsec; independent
    /// pointings where absent.
    #[arg(long, value_name = "ARCSEC", value_parser = number, allow_hyphen_values = true)]
    noise_fwhm_arcsec: Option<f64>,
    /// Pointings that are spoilt: blank and with a standing wave in turn.
    #[arg(long, value_name = "N", allow_hyphen_values = true)]
    bad_pointings: Option<usize>,
}

#[derive(Clone, Copy, Debug, ValueEnum)]
enum Products {
    /// A pointing table and a CSV file a spectrum.
    Table,
    /// A FITS cube a line.
    Cubes,
    /// Both.
    Both,
}

/// Simulates and writes.
pub fn run(arguments: &GridArgs, threads: Option<u16>, output: &Output) -> Result<Exit, RunError> {
    let files = write_grid(&arguments.run(threads)?)?;
    for path in &files.written {
        output.note(&format!("wrote {}", path.display()));
    }
    let pointings = files.grid.pointings.len();
    if let Some(spectra) = &files.spectra {
        output.note(&format!(
            "wrote the spectra of {pointings} pointings into {}",
            spectra.display()
        ));
    }
    Ok(Exit::Done)
}

impl GridArgs {
    fn run(&self, threads: Option<u16>) -> Result<GridRun, RunError> {
        let (truth, thick_line, thin_line) = match &self.settings {
            Some(path) => read_grid_settings(path)?,
            None => (GridTruth::default(), None, None),
        };
        let line = |option: &Option<String>, file: Option<String>, default: &str| {
            option.clone().or(file).unwrap_or(default.to_owned())
        };
        Ok(GridRun {
            truth: self.over(truth),
            name: self.name.clone(),
            thick_line: line(&self.shared.thick_line, thick_line, THICK_LINE),
            thin_line: line(&self.shared.thin_line, thin_line, THIN_LINE),
            directory: self.out.clone(),
            products: match self.write {
                Products::Table => GridProducts::Table,
                Products::Cubes => GridProducts::Cubes,
                Products::Both => GridProducts::Both,
            },
            threads: BatchSettings::with_threads(threads.map_or(0, usize::from)),
        })
    }

    /// A truth with what is given as options.
    fn over(&self, mut truth: GridTruth) -> GridTruth {
        let (pointings, given, motion, noise) =
            (&self.pointings, &self.clump, &self.motion, &self.noise);
        replace(&mut truth.seed, self.shared.seed);
        replace(&mut truth.correlation, self.shared.correlation);
        replace(&mut truth.columns, pointings.columns);
        replace(&mut truth.rows, pointings.rows);
        replace(&mut truth.beam_arcsec, pointings.beam_arcsec);
        replace(&mut truth.centre_arcsec, pointings.centre_arcsec);
        replace(&mut truth.bad_pointings, noise.bad_pointings);
        truth.range_km_s = pointings.range_km_s.or(truth.range_km_s);
        let own = level(noise.noise_k, noise.signal_to_noise);
        replace(&mut truth.noise, own);
        let thin = level(noise.noise_thin_k, noise.signal_to_noise_thin);
        replace(&mut truth.noise_thin, thin);
        let clump = &mut truth.clump;
        let (infall, rotation) = (&mut clump.infall, &mut clump.rotation);
        let outflow = &mut clump.outflow;
        for (setting, option) in [
            (&mut truth.spacing_arcsec, pointings.spacing_arcsec),
            (&mut truth.beam_angle_deg, pointings.beam_angle_deg),
            (&mut truth.ra_deg, pointings.ra_deg),
            (&mut truth.dec_deg, pointings.dec_deg),
            (&mut truth.channel_km_s, pointings.channel_km_s),
            (&mut truth.noise_edge_ratio, noise.noise_edge_ratio),
            (&mut truth.noise_fwhm_arcsec, noise.noise_fwhm_arcsec),
            (&mut clump.radius_arcsec, given.radius_arcsec),
            (&mut clump.core_arcsec, given.core_arcsec),
            (&mut clump.density_slope, given.density_slope),
            (&mut clump.t_centre_k, given.t_centre_k),
            (&mut clump.t_edge_k, given.t_edge_k),
            (&mut clump.excitation_slope, given.excitation_slope),
            (&mut clump.tau, given.tau),
            (&mut clump.isotope_ratio, given.isotope_ratio),
            (&mut clump.v_lsr_km_s, given.v_lsr_km_s),
            (&mut clump.sigma_km_s, given.sigma_km_s),
            (&mut infall.speed_km_s, motion.v_in_km_s),
            (&mut infall.slope, motion.v_in_slope),
            (&mut rotation.speed_km_s, motion.rotation_km_s),
            (&mut rotation.slope, motion.rotation_slope),
            (&mut rotation.axis_deg, motion.rotation_axis_deg),
            (&mut rotation.tilt_deg, motion.rotation_tilt_deg),
            (&mut outflow.speed_km_s, motion.outflow_km_s),
            (&mut outflow.angle_deg, motion.outflow_angle_deg),
            (&mut outflow.tilt_deg, motion.outflow_tilt_deg),
            (&mut outflow.distance_arcsec, motion.outflow_distance_arcsec),
            (&mut outflow.fwhm_arcsec, motion.outflow_fwhm_arcsec),
            (&mut outflow.sigma_km_s, motion.outflow_sigma_km_s),
            (&mut outflow.tau, motion.outflow_tau),
            (&mut outflow.t_ex_k, motion.outflow_t_ex_k),
        ] {
            replace(setting, option);
        }
        truth
    }
}

fn one_or_two(text: &str) -> Result<[f64; 2], String> {
    match numbers(text)?[..] {
        [one] => Ok([one, one]),
        [major, minor] => Ok([major, minor]),
        _ => Err("expected FWHM or MAJOR,MINOR".to_owned()),
    }
}

fn pair(text: &str) -> Result<[f64; 2], String> {
    match numbers(text)?[..] {
        [east, north] => Ok([east, north]),
        _ => Err("expected EAST,NORTH".to_owned()),
    }
}
