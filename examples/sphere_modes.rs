//! How far the fast mode of the sphere is from the full one, over random clumps: profiles, and the
//! inward speed that the fast mode finds in spectra of the full one.
//!
//! `cargo run --release --example sphere_modes -- 100`

#![allow(
    clippy::print_stdout,
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss
)]

use inrush::line::Component;
use inrush::sphere::{Beam, Clump, LineView, Mode, Molecule, PairView, SphereError, pair_spectra};
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use std::time::Instant;

/// Parameters of the small fit: inward speed, dispersion, and an amplitude for each line.
const PARAMETERS: usize = 4;

struct Case {
    clump: Clump,
    ratio: f64,
    view: PairView,
    label: String,
}

/// A clump of the documented range.
fn draw(random: &mut ChaCha8Rng) -> Result<Case, SphereError> {
    let mut log = |low: f64, high: f64| (random.random_range(low.ln()..high.ln())).exp();
    let sigma_km_s = log(0.15, 1.0);
    let outer_radius_pc = log(0.05, 0.5);
    let n_h2_cm3 = log(1e3, 1e5);
    let abundance = log(1e-10, 1e-8);
    let inner_radius_pc = outer_radius_pc * log(0.01, 0.1);
    let fwhm_pc = outer_radius_pc * log(0.2, 2.0);
    let speed = log(0.05, 1.5);
    let ratio = log(20.0, 80.0);
    let t_kin_k = log(8.0, 30.0);
    let clump = Clump {
        inner_radius_pc,
        outer_radius_pc,
        n_h2_cm3,
        density_slope: random.random_range(1.0..2.2),
        t_kin_k,
        temperature_slope: random.random_range(0.0..0.4),
        v_in_km_s: speed * sigma_km_s * if random.random_bool(0.3) { -1.0 } else { 1.0 },
        velocity_slope: if random.random_bool(0.5) { 0.5 } else { 0.0 },
        sigma_km_s,
        abundance,
    };
    let (name, transition, upper) = [
        ("HCO+", 0, 1),
        ("HCO+", 2, 3),
        ("HCO+", 3, 4),
        ("HCN", 2, 3),
        ("CS", 1, 2),
    ][random.random_range(0..5)];
    let molecule = Molecule::built_in(name)?;
    let step = 0.3 * sigma_km_s;
    let reach = 4.0 * sigma_km_s + clump.v_in_km_s.abs();
    let count = (reach / step).ceil() as i32;
    let velocity_km_s = (-count..=count)
        .map(|index| f64::from(index) * step)
        .collect();
    let line = LineView {
        transition,
        components: vec![Component::SINGLE],
        beam: Beam::Gaussian {
            fwhm_pc,
            offset_pc: 0.0,
        },
        velocity_km_s,
    };
    Ok(Case {
        clump,
        ratio,
        view: PairView {
            thin_molecule: molecule.isotopologue(0.973),
            thick_molecule: molecule,
            thick: line.clone(),
            thin: line,
        },
        label: format!("{name} {upper}-{transition}"),
    })
}

/// Both spectra after each other, each over its own peak in `peaks`.
fn scaled(spectra: (&[f64], &[f64]), peaks: [f64; 2]) -> Vec<f64> {
    let thick = spectra.0.iter().map(|value| value / peaks[0]);
    thick
        .chain(spectra.1.iter().map(|value| value / peaks[1]))
        .collect()
}

fn peak(values: &[f64]) -> f64 {
    values.iter().copied().map(f64::abs).fold(0.0, f64::max)
}

fn solve_normal(matrix: &mut [[f64; PARAMETERS]; PARAMETERS], right: &mut [f64; PARAMETERS]) {
    for i in 0..PARAMETERS {
        for row in i + 1..PARAMETERS {
            let factor = matrix[row][i] / matrix[i][i];
            for column in i..PARAMETERS {
                matrix[row][column] -= factor * matrix[i][column];
            }
            right[row] -= factor * right[i];
        }
    }
    for i in (0..PARAMETERS).rev() {
        for column in i + 1..PARAMETERS {
            right[i] -= matrix[i][column] * right[column];
        }
        right[i] /= matrix[i][i];
    }
}

/// Speed and dispersion that the fast mode finds in `data`, over the true ones.
fn refit(
    case: &Case,
    data: &[f64],
    peaks: [f64; 2],
    mode: &Mode,
) -> Result<(f64, f64), SphereError> {
    let model = |x: &[f64; PARAMETERS]| -> Result<Vec<f64>, SphereError> {
        let clump = Clump {
            v_in_km_s: x[0],
            sigma_km_s: x[1],
            ..case.clump
        };
        let spectra = pair_spectra(&clump, case.ratio, &case.view, mode, None)?;
        let over = [peaks[0] / x[2], peaks[1] / x[3]];
        Ok(scaled((&spectra.thick_k, &spectra.thin_k), over))
    };
    let sigma = case.clump.sigma_km_s;
    let mut x = [case.clump.v_in_km_s, sigma, 1.0, 1.0];
    for _ in 0..6 {
        let value = model(&x)?;
        let mut columns = Vec::new();
        for (index, step) in [0.03 * sigma, 0.03 * sigma, 0.01, 0.01]
            .into_iter()
            .enumerate()
        {
            let (mut up, mut down) = (x, x);
            up[index] += step;
            down[index] -= step;
            let (up, down) = (model(&up)?, model(&down)?);
            columns.push(
                up.iter()
                    .zip(&down)
                    .map(|(u, d)| (u - d) / (2.0 * step))
                    .collect::<Vec<f64>>(),
            );
        }
        let mut matrix = [[0.0; PARAMETERS]; PARAMETERS];
        let mut right = [0.0; PARAMETERS];
        for i in 0..PARAMETERS {
            for k in 0..PARAMETERS {
                matrix[i][k] = columns[i].iter().zip(&columns[k]).map(|(a, b)| a * b).sum();
            }
            right[i] = columns[i]
                .iter()
                .zip(data.iter().zip(&value))
                .map(|(c, (d, v))| c * (d - v))
                .sum();
        }
        solve_normal(&mut matrix, &mut right);
        for (x, step) in x.iter_mut().zip(right) {
            *x += step;
        }
        x[1] = x[1].clamp(0.3 * sigma, 3.0 * sigma);
    }
    Ok((x[0] / case.clump.v_in_km_s, x[1] / sigma))
}

fn quantile(sorted: &[f64], share: f64) -> f64 {
    sorted[((sorted.len() - 1) as f64 * share).round() as usize]
}

fn main() -> Result<(), SphereError> {
    let wanted: usize = std::env::args()
        .nth(1)
        .and_then(|text| text.parse().ok())
        .unwrap_or(40);
    let verbose = std::env::args().nth(2).is_some();
    let mut random = ChaCha8Rng::seed_from_u64(7);
    let (full, fast) = (Mode::full(), Mode::fast());
    let mut rows: Vec<[f64; 6]> = Vec::new();
    while rows.len() < wanted {
        let case = draw(&mut random)?;
        let start = Instant::now();
        let exact = match pair_spectra(&case.clump, case.ratio, &case.view, &full, None) {
            Ok(exact) => exact,
            Err(error) => {
                println!("{}: {error}", case.label);
                continue;
            }
        };
        let full_ms = 1e3 * start.elapsed().as_secs_f64();
        let peaks = [peak(&exact.thick_k), peak(&exact.thin_k)];
        // a line that a telescope would fit: bright and thick enough
        if !(2.0..=200.0).contains(&exact.thick_depth) || peaks[0] < 0.3 {
            continue;
        }
        let start = Instant::now();
        let quick = pair_spectra(&case.clump, case.ratio, &case.view, &fast, None)?;
        let fast_ms = 1e3 * start.elapsed().as_secs_f64();
        let data = scaled((&exact.thick_k, &exact.thin_k), peaks);
        let found = scaled((&quick.thick_k, &quick.thin_k), peaks);
        let thick = exact.thick_k.len();
        let worst = |range: std::ops::Range<usize>| {
            range
                .map(|i| (found[i] - data[i]).abs())
                .fold(0.0, f64::max)
        };
        let (speed, sigma) = refit(&case, &data, peaks, &fast)?;
        let row = [
            worst(0..thick),
            worst(thick..data.len()),
            speed - 1.0,
            sigma - 1.0,
            full_ms,
            fast_ms,
        ];
        if verbose {
            println!(
                "{:9} depth {:6.1} v/sigma {:5.2} q {:.1} p {:.1} beam {:.2} rin {:.3}: profile {:.4} {:.4}, v_in {:+.3}, sigma {:+.3}; {} {} {} iterations, {:.0} and {:.2} ms",
                case.label,
                exact.thick_depth,
                case.clump.v_in_km_s / case.clump.sigma_km_s,
                case.clump.velocity_slope,
                case.clump.density_slope,
                match case.view.thick.beam {
                    Beam::Gaussian { fwhm_pc, .. } => fwhm_pc / case.clump.outer_radius_pc,
                    Beam::Pencil { .. } => 0.0,
                },
                case.clump.inner_radius_pc / case.clump.outer_radius_pc,
                row[0],
                row[1],
                row[2],
                row[3],
                exact.thick.iterations,
                quick.thick.iterations,
                quick.thin.iterations,
                full_ms,
                fast_ms
            );
        }
        rows.push(row);
    }
    println!("{wanted} clumps: median, 84 %, 95 % and largest");
    for (index, name) in [
        "thick profile, of its peak",
        "thin profile, of its peak",
        "v_in, relative",
        "sigma, relative",
        "full mode, ms",
        "fast mode, ms",
    ]
    .iter()
    .enumerate()
    {
        let mut sorted: Vec<f64> = rows.iter().map(|row| row[index].abs()).collect();
        sorted.sort_by(f64::total_cmp);
        println!(
            "{name:27} {:9.4} {:9.4} {:9.4} {:9.4}",
            quantile(&sorted, 0.5),
            quantile(&sorted, 0.84),
            quantile(&sorted, 0.95),
            quantile(&sorted, 1.0)
        );
    }
    Ok(())
}
