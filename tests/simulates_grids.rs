//! Simulated maps look as their clump's motions say, and their files hold them.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

mod command;

use command::Folder;
use inrush::line::{Line, find};
use inrush::model::RadiationTemperature;
use inrush::read::{ReadOptions, read_spectrum};
use inrush::run::BatchSettings;
use inrush::run::simulate::{GridProducts, GridRun, read_grid_settings, write_grid};
use inrush::simulate::grid::{
    Flaw, GridTruth, PointingLine, SimulatedGrid, SimulatedPointing, simulate_grid,
};
use inrush::simulate::{Correlation, NoiseLevel};
use std::path::Path;

fn lines() -> (Line, Line) {
    (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap())
}

fn simulated(truth: &GridTruth) -> SimulatedGrid {
    let lines = lines();
    simulate_grid(truth, (&lines.0, &lines.1)).unwrap()
}

/// A map of 5 by 5 pointings.
fn small() -> GridTruth {
    GridTruth {
        columns: 5,
        rows: 5,
        spacing_arcsec: 15.0,
        ..GridTruth::default()
    }
}

/// The pointing of an offset.
fn at(grid: &SimulatedGrid, x: f64, y: f64) -> &SimulatedPointing {
    grid.pointings
        .iter()
        .find(|one| one.dx_arcsec == x && one.dy_arcsec == y)
        .unwrap()
}

/// Mean velocity of a line without noise, km/s.
fn mean(grid: &SimulatedGrid, line: &PointingLine) -> f64 {
    let weighted = line.noiseless_k.iter().zip(&grid.velocity_km_s);
    weighted.map(|(value, v)| value * v).sum::<f64>() / line.noiseless_k.iter().sum::<f64>()
}

/// Largest difference of two lines without noise, the second with its velocities reversed.
fn mirrored_difference(one: &PointingLine, other: &PointingLine) -> f64 {
    let pairs = one.noiseless_k.iter().zip(other.noiseless_k.iter().rev());
    pairs.map(|(a, b)| (a - b).abs()).fold(0.0, f64::max)
}

#[test]
fn infall_is_blue_everywhere_and_bluest_in_the_centre() {
    for slope in [0.0, 0.5] {
        let mut truth = small();
        truth.clump.infall.speed_km_s = 0.4;
        truth.clump.infall.slope = slope;
        let grid = simulated(&truth);
        let means: Vec<f64> = [0.0, 15.0, 30.0]
            .map(|x| mean(&grid, &at(&grid, x, 0.0).thick))
            .to_vec();
        assert!(
            means[0] < means[1] && means[1] < means[2] && means[2] < 0.0,
            "{means:?}"
        );
        for pointing in &grid.pointings {
            let thin = mean(&grid, &pointing.thin);
            assert!(mean(&grid, &pointing.thick) < thin - 0.005);
        }
    }
}

#[test]
fn expansion_mirrors_infall_and_rest_is_symmetric() {
    let mut truth = small();
    let at_rest = simulated(&truth);
    truth.clump.infall.speed_km_s = 0.4;
    let infall = simulated(&truth);
    truth.clump.infall.speed_km_s = -0.4;
    let expansion = simulated(&truth);
    for index in 0..25 {
        for (one, other) in [(&infall, &expansion), (&at_rest, &at_rest)] {
            for line in [
                |pointing: &SimulatedPointing| pointing.thick.clone(),
                |pointing: &SimulatedPointing| pointing.thin.clone(),
            ] {
                let (one, other) = (line(&one.pointings[index]), line(&other.pointings[index]));
                // rounding of velocities of 1e-9 km/s
                assert!(mirrored_difference(&one, &other) < 1e-7);
            }
        }
    }
}

#[test]
fn rotation_is_mirrored_across_its_axis() {
    // about an axis to the north, tilted: east approaches, and is what the west is, reversed
    let mut truth = small();
    truth.clump.rotation.speed_km_s = 0.6;
    truth.clump.rotation.tilt_deg = 30.0;
    for slope in [1.0, 0.0, -0.5] {
        truth.clump.rotation.slope = slope;
        let grid = simulated(&truth);
        for pointing in &grid.pointings {
            let other = at(&grid, -pointing.dx_arcsec, pointing.dy_arcsec);
            assert!(mirrored_difference(&pointing.thick, &other.thick) < 1e-7);
            assert!(mirrored_difference(&pointing.thin, &other.thin) < 1e-7);
        }
        let east = mean(&grid, &at(&grid, 30.0, 0.0).thin);
        assert!(east < -0.1, "slope {slope}: {east}");
    }
    // a solid body about an axis in the sky moves as one along each line of sight: 0.6 km/s times x/R
    truth.clump.rotation.tilt_deg = 0.0;
    truth.clump.rotation.slope = 1.0;
    truth.beam_arcsec = [4.0, 4.0];
    let grid = simulated(&truth);
    let east = mean(&grid, &at(&grid, 30.0, 15.0).thin);
    // the beam sees a little more of the denser gas inward
    assert!((east + 0.3).abs() < 0.003, "{east}");
}

#[test]
fn an_outflow_shows_its_lobes_in_the_thick_line() {
    let mut truth = small();
    truth.clump.outflow.speed_km_s = 4.0;
    truth.clump.outflow.angle_deg = 90.0;
    let grid = simulated(&truth);
    let wing = |pointing: &SimulatedPointing, low: f64, high: f64| -> f64 {
        let values = pointing.thick.noiseless_k.iter().zip(&grid.velocity_km_s);
        let inside = values.filter(|(_, v)| (low..high).contains(*v));
        inside.map(|(value, _)| value * grid.channel_km_s).sum()
    };
    // blue wing to the east, red wing to the west; the lobe's own integral is 9.2 K km/s in its middle
    let (east, west) = (at(&grid, 30.0, 0.0), at(&grid, -30.0, 0.0));
    assert!(wing(east, -5.0, -2.5) > 1.0 && wing(east, 2.5, 5.0) < 0.05);
    assert!(wing(west, 2.5, 5.0) > 1.0 && wing(west, -5.0, -2.5) < 0.05);
    assert!(wing(at(&grid, 0.0, 30.0), -5.0, -2.5) < 0.2);
    // the thin line has a sixtieth of that
    let thin = at(&grid, 30.0, 0.0).thin.noiseless_k.iter();
    let thin_wing: f64 = (thin.zip(&grid.velocity_km_s))
        .filter(|(_, v)| **v < -2.5)
        .map(|(value, _)| value * grid.channel_km_s)
        .sum();
    assert!(thin_wing < 0.04 * wing(east, -5.0, -2.5), "{thin_wing}");
}

#[test]
fn a_uniform_sphere_follows_the_transfer_equation() {
    // T = (J(T_ex) - J(T_bg)) (1 - e^-tau), tau = 20 chord/(2 R) e^(-v^2/(2 sigma^2))
    let mut truth = GridTruth {
        beam_arcsec: [4.0, 4.0],
        ..small()
    };
    truth.clump.density_slope = 0.0;
    truth.clump.t_edge_k = 20.0;
    truth.clump.core_arcsec = 30.0;
    let grid = simulated(&truth);
    let lines = lines();
    for (x, y) in [(0.0, 0.0), (15.0, 30.0), (30.0, 30.0)] {
        let chord = 2.0 * (3600.0f64 - x * x - y * y).sqrt();
        let pointing = at(&grid, x, y);
        for (line, found, tau) in [
            (&lines.0, &pointing.thick, 20.0),
            (&lines.1, &pointing.thin, 20.0 / 60.0),
        ] {
            let scale = RadiationTemperature::new(line.rest_frequency_ghz);
            let excess = scale.at(20.0) - scale.background();
            for (v, found) in grid.velocity_km_s.iter().zip(&found.noiseless_k) {
                let depth = tau * chord / 120.0 * (-0.5 * (v / 0.5).powi(2)).exp();
                let expected = -excess * (-depth).exp_m1();
                // the chord bends by 0.3 % within the beam; channels are a fifth of the dispersion wide
                assert!(
                    (found - expected).abs() < 4e-3 * excess,
                    "{x} {y} {v}: {found}, expected {expected}"
                );
            }
        }
    }
}

#[test]
fn a_beam_keeps_the_flux_and_has_its_shape() {
    // all of a small clump, in an elliptical beam and in a round one
    let mut truth = GridTruth {
        columns: 41,
        rows: 41,
        spacing_arcsec: 4.0,
        beam_arcsec: [30.0, 15.0],
        beam_angle_deg: 30.0,
        channel_km_s: 0.5,
        ..GridTruth::default()
    };
    truth.clump.radius_arcsec = 12.0;
    truth.clump.core_arcsec = 3.0;
    let moments = |truth: &GridTruth| {
        let grid = simulated(truth);
        let mut sums = [0.0; 4];
        for pointing in &grid.pointings {
            let value: f64 = pointing.thin.noiseless_k.iter().sum();
            let (x, y) = (pointing.dx_arcsec, pointing.dy_arcsec);
            for (sum, factor) in sums.iter_mut().zip([1.0, x * x, x * y, y * y]) {
                *sum += value * factor;
            }
        }
        sums
    };
    let elliptical = moments(&truth);
    truth.beam_arcsec = [15.0, 15.0];
    let round = moments(&truth);
    assert!((elliptical[0] / round[0] - 1.0).abs() < 1e-4);
    // variances of the two beams differ along 30 deg east of north, by (30^2 - 15^2)/(8 ln 2)
    let more = (900.0 - 225.0) / (8.0 * std::f64::consts::LN_2);
    let (sin, cos) = 30.0f64.to_radians().sin_cos();
    for (index, expected) in [(1, sin * sin), (2, sin * cos), (3, cos * cos)] {
        let found = elliptical[index] / elliptical[0] - round[index] / round[0];
        assert!(
            (found / (more * expected) - 1.0).abs() < 2e-3,
            "{index}: {found}"
        );
    }
}

#[test]
fn noise_has_the_stated_rms_growth_and_correlation() {
    let truth = GridTruth {
        columns: 12,
        rows: 12,
        spacing_arcsec: 10.0,
        noise: NoiseLevel::RmsK(0.2),
        noise_edge_ratio: 2.0,
        noise_fwhm_arcsec: 20.0,
        correlation: Correlation::Hanning,
        range_km_s: Some([-100.0, 100.0]),
        ..GridTruth::default()
    };
    let grid = simulated(&truth);
    let noise = |x: f64, y: f64| -> Vec<f64> {
        let line = &at(&grid, x, y).thick;
        let values = line.temperature_k.iter().zip(&line.noiseless_k);
        values
            .map(|(all, line_alone)| (all - line_alone) / line.noise_k)
            .collect()
    };
    // farthest corner at (55, 55); noise grows with the square of the distance
    assert!((at(&grid, 55.0, -55.0).thick.noise_k - 0.4).abs() < 1e-12);
    let near = 0.2 * (1.0 + 50.0 / 6050.0);
    assert!((at(&grid, 5.0, 5.0).thick.noise_k - near).abs() < 1e-12);
    // correlations between pointings: 2001 channels smoothed by Hanning are 2001/1.94 independent
    // ones; the mean over the 100 pairs of a distance is within a tenth of its expectation by far
    for (step, expected) in [
        (0.0, 1.0),
        (10.0, 2f64.powf(-0.5)),
        (20.0, 0.25),
        (60.0, 0.0),
    ] {
        let (mut sum, mut pairs) = (0.0, 0);
        for row in 0..12 {
            for column in 0..6 {
                let (x, y) = (
                    f64::from(column) * 10.0 - 55.0,
                    f64::from(row) * 10.0 - 55.0,
                );
                let (one, other) = (noise(x, y), noise(x + step, y));
                let product: f64 = one.iter().zip(&other).map(|(a, b)| a * b).sum();
                sum += product / one.len() as f64;
                pairs += 1;
            }
        }
        let found = sum / f64::from(pairs);
        assert!(
            (found - expected).abs() < 0.02,
            "{step}: {found}, expected {expected}"
        );
    }
    // the two lines share nothing
    let thin = &at(&grid, 5.0, 5.0).thin;
    let thin_noise = thin.temperature_k.iter().zip(&thin.noiseless_k);
    let thin_noise: Vec<f64> = thin_noise.map(|(a, b)| (a - b) / thin.noise_k).collect();
    let thick_noise = noise(5.0, 5.0);
    let product: f64 = thin_noise
        .iter()
        .zip(&thick_noise)
        .map(|(a, b)| a * b)
        .sum();
    // four standard errors of about 1000 independent channels
    assert!((product / thin_noise.len() as f64).abs() < 4.0 / 1000f64.sqrt());
}

#[test]
fn bad_pointings_are_blank_or_rippled() {
    let truth = GridTruth {
        bad_pointings: 5,
        ..small()
    };
    let grid = simulated(&truth);
    let with = |flaw| {
        let all = grid.pointings.iter();
        all.filter(move |one| one.flaw == flaw).collect::<Vec<_>>()
    };
    assert_eq!(with(Some(Flaw::Blank)).len(), 3);
    assert_eq!(with(Some(Flaw::Ripple)).len(), 2);
    for one in with(Some(Flaw::Blank)) {
        let lines = one
            .thick
            .temperature_k
            .iter()
            .chain(&one.thin.temperature_k);
        assert!(lines.copied().all(f64::is_nan));
    }
    let good = simulated(&small());
    for one in with(None) {
        assert_eq!(at(&good, one.dx_arcsec, one.dy_arcsec), one);
    }
    let spread = |line: &PointingLine| {
        let extra = line.temperature_k.iter().zip(&line.noiseless_k);
        let squares: f64 = extra.map(|(a, b)| (a - b).powi(2)).sum();
        (squares / line.noiseless_k.len() as f64).sqrt() / line.noise_k
    };
    for one in with(Some(Flaw::Ripple)) {
        // half of a brightest channel of 40 times the noise, over the root of 2
        assert!(spread(&one.thick) > 10.0, "{}", spread(&one.thick));
    }
}

fn run(directory: &Path, truth: GridTruth, threads: usize) -> GridRun {
    GridRun {
        truth,
        name: "Simulated clump".to_owned(),
        thick_line: "HCO+ 1-0".to_owned(),
        thin_line: "H13CO+ 1-0".to_owned(),
        directory: directory.to_owned(),
        products: GridProducts::Both,
        threads: BatchSettings::with_threads(threads),
    }
}

#[test]
fn files_are_the_same_for_any_number_of_threads_and_from_their_settings() {
    let folder = Folder::new();
    let mut truth = small();
    truth.clump.infall.speed_km_s = 0.4;
    let files = write_grid(&run(&folder.path().join("one"), truth.clone(), 1)).unwrap();
    assert!(files.grid == simulated(&truth));
    write_grid(&run(&folder.path().join("three"), truth, 3)).unwrap();
    let settings = folder.path().join("one/settings.toml");
    let (read, thick, thin) = read_grid_settings(&settings).unwrap();
    assert_eq!(
        (thick.as_deref(), thin.as_deref()),
        (Some("HCO+ 1-0"), Some("H13CO+ 1-0"))
    );
    write_grid(&run(&folder.path().join("again"), read, 2)).unwrap();
    let names: Vec<String> = folder
        .files()
        .iter()
        .filter_map(|name| name.strip_prefix("one/").map(str::to_owned))
        .collect();
    // tables, settings, run sheets and cubes, and the spectra
    assert_eq!(names.len(), 7 + 50);
    for name in names {
        for other in ["three", "again"] {
            let one = folder.read(&format!("one/{name}"));
            assert!(
                one == folder.read(&format!("{other}/{name}")),
                "{other}/{name}"
            );
        }
    }
}

#[test]
fn a_pointing_tables_spectra_read_back() {
    let folder = Folder::new();
    let mut truth = small();
    truth.bad_pointings = 1;
    let files = write_grid(&run(&folder.path().join("map"), truth, 1)).unwrap();
    let table = String::from_utf8(folder.read("map/grid.csv")).unwrap();
    let mut rows = table.lines();
    assert_eq!(
        rows.next().unwrap(),
        "id,dx_arcsec,dy_arcsec,thick_file,thin_file"
    );
    let mut blank = 0;
    for (row, pointing) in rows.zip(&files.grid.pointings) {
        let cells: Vec<&str> = row.split(',').collect();
        assert_eq!(cells[1].parse::<f64>().unwrap(), pointing.dx_arcsec);
        assert_eq!(cells[2].parse::<f64>().unwrap(), pointing.dy_arcsec);
        for (file, line) in [(cells[3], &pointing.thick), (cells[4], &pointing.thin)] {
            let path = folder.path().join("map").join(file);
            let read = read_spectrum(&path, &ReadOptions::default());
            if pointing.flaw == Some(Flaw::Blank) {
                assert!(read.is_err(), "a blank spectrum");
                blank += 1;
            } else {
                let read = read.unwrap();
                assert_eq!(read.values, line.temperature_k);
            }
        }
    }
    assert_eq!(blank, 2);
}

#[test]
fn the_command_says_what_it_wrote_and_takes_its_settings_again() {
    let folder = Folder::new();
    let map = ["simulate", "grid", "--columns", "3", "--rows", "2"];
    let with = |more: &[&str]| {
        let all = [&map[..], more].concat();
        folder.inrush(&all)
    };
    let run = with(&[
        "--out",
        "map",
        "--v-in-km-s",
        "0.4",
        "--beam-arcsec",
        "25,15",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert_eq!(
        run.stderr,
        "note: wrote map/grid.csv\nnote: wrote map/truth.csv\nnote: wrote map/map.toml\n\
         note: wrote map/settings.toml\n\
         note: wrote the spectra of 6 pointings into map/spectra\n"
    );
    assert_eq!(run.stdout, "");
    let run = with(&[
        "--out",
        "again",
        "--settings",
        "map/settings.toml",
        "--quiet",
    ]);
    assert_eq!((run.code, run.stderr.as_str()), (0, ""));
    assert!(folder.read("map/truth.csv") == folder.read("again/truth.csv"));
    // what is there stays
    let run = with(&["--out", "map"]);
    assert_eq!(run.code, 2);
    assert!(
        run.stderr.contains("hint: give --out another name"),
        "{}",
        run.stderr
    );
    // cubes alone
    let run = with(&["--out", "cubes", "--write", "cubes"]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert_eq!(
        run.stderr,
        "note: wrote cubes/thick-cube.fits\nnote: wrote cubes/thin-cube.fits\n\
         note: wrote cubes/truth.csv\nnote: wrote cubes/cubes.toml\nnote: wrote cubes/settings.toml\n"
    );
}

#[test]
fn a_simulated_map_is_mapped_as_it_is() {
    let folder = Folder::new();
    let run = folder.inrush(&[
        "simulate",
        "grid",
        "--out",
        "sky",
        "--columns",
        "5",
        "--rows",
        "5",
        "--v-in-km-s",
        "0.5",
        "--beam-arcsec",
        "26,22",
        "--write",
        "both",
        "--signal-to-noise",
        "60",
        "--quiet",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    for (sheet, out) in [("sky/map.toml", "of-table"), ("sky/cubes.toml", "of-cubes")] {
        let run = folder.inrush(&["map", sheet, "--out", out, "--formal", "--no-figures"]);
        assert_eq!(run.code, 0, "{sheet}: {}", run.stderr);
        assert!(
            run.stderr.contains("25 of 25 pointings fitted"),
            "{}",
            run.stderr
        );
    }
    // One map, two ways: the same beam and place, pixels in another order.
    let beam = |out: &str| {
        let map = folder.read(&format!("{out}/maps/v_thin_km_s.fits"));
        let header = String::from_utf8_lossy(&map[..2880]).into_owned();
        ["BMAJ", "BMIN", "BPA", "CRVAL1", "CRVAL2"].map(|keyword| {
            let at = header.find(&format!("{keyword:<8}=")).unwrap() + 10;
            header[at..at + 20].trim().parse::<f64>().unwrap()
        })
    };
    let (table, cubes) = (beam("of-table"), beam("of-cubes"));
    for (one, other) in table.into_iter().zip(cubes) {
        assert!((one - other).abs() < 1e-9, "{table:?} {cubes:?}");
    }
}

#[test]
fn impossible_maps_are_refused() {
    let folder = Folder::new();
    for (arguments, expected) in [
        (
            &["--columns", "0"][..],
            "error: columns and rows 0 by 9, expected 1 to 1000000 pointings",
        ),
        (
            &["--bad-pointings", "82"],
            "error: bad_pointings 82, expected at most the map's 81",
        ),
        (
            &["--beam-arcsec", "10,20"],
            "error: beam_arcsec 10, 20, expected the major axis first",
        ),
        (
            &["--beam-arcsec", "0"],
            "error: beam_arcsec 0, expected above 0, up to 100000",
        ),
        (
            &["--beam-arcsec", "0.1"],
            "error: beam_arcsec 0.1 for a reach of 60 arcsec, expected a beam and a core that ask for at most 1000000 rays, not 18095574",
        ),
        (
            &["--core-arcsec", "60"],
            "error: core_arcsec 60, expected less than radius_arcsec, 60",
        ),
        (
            &["--t-edge-k", "2"],
            "error: t_edge_k 2, expected from 2.72548 to 100000",
        ),
        (
            &["--dec-deg", "91"],
            "error: dec_deg 91, expected -90 to 90",
        ),
        (
            &["--signal-to-noise", "0"],
            "error: thick line: signal-to-noise ratio 0, expected a positive ratio",
        ),
        (
            &["--range-km-s", "2,1"],
            "error: thick line: velocities from 2 to 1 km/s, expected the lower first",
        ),
        (&["--thick-line", "HCO+ 1-9"], "error: thick line:"),
    ] {
        let all = [&["simulate", "grid", "--out", "map"][..], arguments].concat();
        let run = folder.inrush(&all);
        assert_eq!(run.code, 2, "{arguments:?}: {}", run.stderr);
        assert!(
            run.stderr.starts_with(expected),
            "{arguments:?}: {}",
            run.stderr
        );
        assert!(folder.files().is_empty(), "{arguments:?}");
    }
}
