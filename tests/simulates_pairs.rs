//! Simulated pairs look as they should, and what was put in can be got out again.
#![allow(clippy::unwrap_used, clippy::print_stdout)] // What fails below a test fails the test.

use inrush::fit::Workspace;
use inrush::fit::{FitSettings, fit_pair, fit_thin};
use inrush::line::{Component, Line, find};
use inrush::model::Model;
use inrush::numeric::Autoregression;
use inrush::prepare::{Expected, PrepareSettings, prepare_pair};
use inrush::read::{ReadOptions, read_spectrum};
use inrush::report::spectra::FitsAxis;
use inrush::run::simulate::{Formats, PairSettings, read_truth, write_pair};
use inrush::run::{RunSheet, SourceSection};
use inrush::simulate::{
    Axis, Baseline, Correlation, NoiseLevel, PairTruth, SimulatedLine, simulate_pair,
};
use inrush::spectrum::Spectrum;
use std::path::Path;
use std::process::Command;

fn lines() -> (Line, Line) {
    (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap())
}

fn truth(model: Model, seed: u64) -> PairTruth {
    PairTruth::new((model, Model::Layer), lines(), seed)
}

const INFALL: [Model; 4] = [
    Model::TwoLayer,
    Model::TwoLayerContinuum,
    Model::Hill,
    Model::HillSurface,
];

/// Noiseless lines with a model's default inward speed times a factor.
fn noiseless(model: Model, factor: f64) -> (Spectrum, Spectrum) {
    let mut truth = truth(model, 1);
    *truth.thick.parameters.get_mut("v_in_km_s").unwrap() *= factor;
    let pair = simulate_pair(&truth).unwrap();
    (pair.thick.noiseless, pair.thin.noiseless)
}

/// Channels that are brighter than both neighbours.
fn peaks(spectrum: &Spectrum) -> Vec<usize> {
    let value = spectrum.temperature_k();
    (1..value.len() - 1)
        .filter(|&i| value[i] > 1e-6 && value[i] > value[i - 1] && value[i] > value[i + 1])
        .collect()
}

#[test]
fn infall_is_blue_and_the_thin_line_peaks_in_the_dip() {
    for model in INFALL {
        let (thick, thin) = noiseless(model, 1.0);
        let found = peaks(&thick);
        let [blue, red] = found[..] else {
            panic!("{}: peaks {found:?}", model.name());
        };
        let value = thick.temperature_k();
        assert!(value[blue] > value[red], "{}", model.name());
        let dip = (blue..red)
            .min_by(|a, b| value[*a].total_cmp(&value[*b]))
            .unwrap();
        let [thin_peak] = peaks(&thin)[..] else {
            panic!("{}: the thin line has one peak", model.name());
        };
        // both axes are the same; the dip lies up to v_in to the red of the thin line
        assert_eq!(thick.velocity_km_s(), thin.velocity_km_s());
        assert!((blue..red).contains(&thin_peak), "{}", model.name());
        assert!(
            dip.abs_diff(thin_peak) < thin_peak.abs_diff(blue).min(thin_peak.abs_diff(red)),
            "{}: blue {blue}, dip {dip}, red {red}, thin {thin_peak}",
            model.name()
        );
    }
}

#[test]
fn expansion_mirrors_infall_and_no_speed_is_symmetric() {
    for model in INFALL {
        let (infall, _) = noiseless(model, 1.0);
        let (expansion, _) = noiseless(model, -1.0);
        let (at_rest, _) = noiseless(model, 0.0);
        let channels = infall.len();
        for channel in 0..channels {
            let mirror = channels - 1 - channel;
            for (one, other) in [(&infall, &expansion), (&at_rest, &at_rest)] {
                let difference = one.temperature_k()[channel] - other.temperature_k()[mirror];
                assert!(difference.abs() < 1e-12, "{} {channel}", model.name());
            }
        }
    }
}

#[test]
fn a_channel_holds_the_mean_over_its_width() {
    // channels wider than the line, against a midpoint sum over 4000 values
    let mut truth = truth(Model::Hill, 1);
    truth.thick.axis.channel_km_s = 2.0;
    let pair = simulate_pair(&truth).unwrap();
    let shape = inrush::model::LineShape::new(
        truth.thick.line.rest_frequency_ghz,
        truth.thick.line.components.clone(),
    );
    let spectrum = &pair.thick.noiseless;
    for (centre, found) in spectrum
        .velocity_km_s()
        .iter()
        .zip(spectrum.temperature_k())
    {
        let fine: Vec<f64> = (0..4000)
            .map(|i| centre - 1.0 + (f64::from(i) + 0.5) / 2000.0)
            .collect();
        let mut value = vec![0.0; fine.len()];
        let at = inrush::model::Sampling::at(fine);
        Model::Hill.evaluate(&shape, &at, &pair.thick.parameters, &mut value, None);
        let mean = value.iter().sum::<f64>() / 4000.0;
        assert!((found - mean).abs() < 1e-6, "{centre}: {found} {mean}");
    }
}

/// Correlation at a lag by the definition of each kind.
fn theory(correlation: Correlation, lag: usize) -> f64 {
    let pi = std::f64::consts::PI;
    let among = |values: &[f64]| values.get(lag).copied().unwrap_or(0.0);
    match correlation {
        Correlation::White => among(&[1.0]),
        Correlation::Hanning => among(&[1.0, 2.0 / 3.0, 1.0 / 6.0]),
        Correlation::Boxcar { channels } => (1.0 - lag as f64 / channels as f64).max(0.0),
        Correlation::Linear => among(&[1.0, 0.75, 0.3, 0.05]),
        Correlation::BandLimited if lag == 0 => 1.0,
        Correlation::BandLimited => (0.5 * pi * lag as f64).sin() / (0.5 * pi * lag as f64),
        Correlation::Autoregressive { coefficient } => coefficient.powf(lag as f64),
    }
}

fn noise(line: &SimulatedLine) -> Vec<f64> {
    line.spectrum
        .temperature_k()
        .iter()
        .zip(line.noiseless.temperature_k())
        .map(|(value, profile)| value - profile)
        .collect()
}

#[test]
fn noise_has_the_stated_rms_and_correlation() {
    const CHANNELS: f64 = 200_000.0;
    const LAGS: i32 = 6;
    for correlation in [
        Correlation::White,
        Correlation::Hanning,
        Correlation::Boxcar { channels: 5 },
        Correlation::Linear,
        Correlation::BandLimited,
        Correlation::Autoregressive { coefficient: 0.6 },
        Correlation::Autoregressive { coefficient: -0.3 },
    ] {
        let mut truth = truth(Model::Hill, 11);
        truth.thick.axis = Axis {
            low_km_s: -1000.0,
            high_km_s: 999.99,
            channel_km_s: 0.01,
        };
        truth.thick.noise = NoiseLevel::RmsK(0.1);
        truth.thick.correlation = correlation;
        let noise = noise(&simulate_pair(&truth).unwrap().thick);
        assert_eq!(noise.len() as f64, CHANNELS);
        let covariance = |lag: usize| -> f64 {
            let products = noise.iter().zip(&noise[lag..]).map(|(a, b)| a * b);
            products.sum::<f64>() / (CHANNELS - lag as f64)
        };
        // errors of sample variance and correlations: Bartlett's formula (common practice)
        let reach = 400i32;
        let rho = |lag: i32| theory(correlation, lag.unsigned_abs() as usize);
        let squares: f64 = (-reach..=reach).map(|lag| rho(lag).powi(2)).sum();
        let variance = covariance(0) / 0.01;
        let error = (2.0 * squares / CHANNELS).sqrt();
        assert!(
            (variance - 1.0).abs() < 4.0 * error,
            "{correlation:?}: variance {variance} +- {error}"
        );
        for k in 1..=LAGS {
            let lag = k.unsigned_abs() as usize;
            let bartlett: f64 = (-reach..=reach)
                .map(|m| {
                    rho(m).powi(2) + rho(m + k) * rho(m - k) - 4.0 * rho(k) * rho(m) * rho(m - k)
                        + 2.0 * rho(m).powi(2) * rho(k).powi(2)
                })
                .sum();
            let error = (bartlett / CHANNELS).sqrt();
            let found = covariance(lag) / covariance(0);
            assert!(
                (found - rho(k)).abs() < 4.0 * error,
                "{correlation:?} at lag {lag}: {found} +- {error}, expected {}",
                rho(k)
            );
        }
    }
}

#[test]
fn a_signal_to_noise_ratio_is_peak_over_noise() {
    let mut truth = truth(Model::Hill, 1);
    truth.thick.noise = NoiseLevel::SignalToNoise(40.0);
    let thick = simulate_pair(&truth).unwrap().thick;
    let peak = thick
        .noiseless
        .temperature_k()
        .iter()
        .copied()
        .fold(0.0, f64::max);
    assert_eq!(thick.noise_k, peak / 40.0);
}

#[test]
fn a_seed_gives_the_same_pair_on_any_thread_and_another_seed_another() {
    let pair = simulate_pair(&truth(Model::Hill, 3)).unwrap();
    let threads: Vec<_> = (0..4)
        .map(|_| std::thread::spawn(|| simulate_pair(&truth(Model::Hill, 3)).unwrap()))
        .collect();
    for thread in threads {
        assert_eq!(thread.join().unwrap(), pair);
    }
    let other = simulate_pair(&truth(Model::Hill, 4)).unwrap();
    assert_eq!(other.thick.noiseless, pair.thick.noiseless);
    assert_ne!(other.thick.spectrum, pair.thick.spectrum);
    assert_ne!(other.thin.spectrum, pair.thin.spectrum);
    // two lines of one seed share nothing: |r| below 4 standard errors of 261 channels
    let (thick, thin) = (noise(&pair.thick), noise(&pair.thin));
    let dot = |a: &[f64], b: &[f64]| a.iter().zip(b).map(|(a, b)| a * b).sum::<f64>();
    let r = dot(&thick, &thin) / (dot(&thick, &thick) * dot(&thin, &thin)).sqrt();
    assert!(r.abs() < 4.0 / (thick.len() as f64).sqrt(), "{r}");
}

#[test]
fn changing_one_line_leaves_the_other_as_it_is() {
    let pair = simulate_pair(&truth(Model::Hill, 3)).unwrap();
    let mut changed = truth(Model::Hill, 3);
    changed.thick.axis.channel_km_s = 0.05;
    changed.thick.correlation = Correlation::Hanning;
    let changed = simulate_pair(&changed).unwrap();
    assert_ne!(changed.thick.spectrum.len(), pair.thick.spectrum.len());
    assert_eq!(changed.thin, pair.thin);
}

#[test]
fn a_baseline_is_polynomial_and_ripple_about_the_middle_of_the_band() {
    let mut truth = truth(Model::Hill, 1);
    truth.thick.noise = NoiseLevel::RmsK(0.0);
    truth.thick.axis = Axis {
        low_km_s: -8.0,
        high_km_s: 12.0,
        channel_km_s: 1.0,
    };
    truth.thick.baseline = Baseline {
        offset_k: 1.0,
        slope_k_per_km_s: 0.1,
        curvature_k_per_km2_s2: 0.01,
        ripple_k: 0.5,
        ripple_period_km_s: 8.0,
        ripple_phase_deg: 90.0,
    };
    let baseline = noise(&simulate_pair(&truth).unwrap().thick);
    // x = -10, 0, 2, 4: worked out by hand
    for (channel, expected) in [(0, 1.0 - 1.0 + 1.0), (10, 1.5), (12, 1.24), (14, 1.06)] {
        assert!((baseline[channel] - expected).abs() < 1e-12, "{channel}");
    }
}

#[test]
fn an_isotope_ratio_links_the_optical_depths() {
    let mut linked = truth(Model::Hill, 1);
    linked.link(68.0);
    let pair = simulate_pair(&linked).unwrap();
    // v_lsr, sigma, tau_total = 2 * 4/68, T_ex
    assert_eq!(pair.thin.parameters, [0.0, 0.62, 8.0 / 68.0, 11.0]);
}

/// Fits the hill model to `count` hill pairs and returns mean and standard deviation of the pulls of
/// the inward speed, with the noise as measured or (white and Hanning) as put in.
fn pulls(correlation: Correlation, noise_known: bool, count: u64) -> (f64, f64) {
    let mut pulls = Vec::new();
    for seed in 0..count {
        let lines = lines();
        let mut truth = PairTruth::new((Model::Hill, Model::Gaussian), lines.clone(), seed);
        truth.thick.noise = NoiseLevel::SignalToNoise(50.0);
        truth.thin.noise = NoiseLevel::SignalToNoise(50.0);
        truth.thick.correlation = correlation;
        truth.thin.correlation = correlation;
        truth.thick.baseline.slope_k_per_km_s = 0.01;
        let pair = simulate_pair(&truth).unwrap();
        let (settings, expected) = (PrepareSettings::default(), Expected::default());
        let (mut thick, mut thin) = prepare_pair(
            (&pair.thick.spectrum, &settings, &expected),
            (&pair.thin.spectrum, &settings, &expected),
        )
        .unwrap();
        if noise_known {
            for (prepared, line) in [(&mut thick, &pair.thick), (&mut thin, &pair.thin)] {
                let lags: Vec<f64> = (1..=20).map(|lag| theory(correlation, lag)).collect();
                prepared.noise.rms_k = line.noise_k;
                prepared.noise.process = Autoregression::from_autocorrelation(&lags).unwrap();
            }
        }
        let settings = FitSettings {
            models: vec![Model::Hill],
            ..FitSettings::default()
        };
        let thin_line = fit_thin(&thin, &lines.1, &settings, &mut Workspace::new())
            .unwrap()
            .line;
        let lines = (&lines.0, &lines.1);
        let fit = fit_pair(
            &thick,
            &thin,
            lines,
            thin_line.as_ref(),
            &settings,
            &mut Workspace::new(),
        )
        .unwrap();
        let v_in = fit.models[0].estimate("v_in_km_s").unwrap();
        pulls.push((v_in.value - 0.45) / v_in.err);
    }
    let mean = pulls.iter().sum::<f64>() / count as f64;
    let square: f64 = pulls.iter().map(|pull| (pull - mean).powi(2)).sum();
    (mean, (square / (count as f64 - 1.0)).sqrt())
}

#[test]
fn fitting_hill_pairs_gives_back_their_inward_speed() {
    const PAIRS: u64 = 250;
    let error = (PAIRS as f64).sqrt().recip();
    for correlation in [Correlation::White, Correlation::Hanning] {
        for noise_known in [true, false] {
            let (mean, deviation) = pulls(correlation, noise_known, PAIRS);
            println!("{correlation:?}, known {noise_known}: pulls {mean:.3} +- {deviation:.3}");
            // three standard errors of the mean of as many unit pulls
            assert!(mean.abs() < 3.0 * error, "{correlation:?}: {mean}");
            // and of their standard deviation; noise measured on some 190 channels adds its own error
            let allowed = if noise_known {
                1.0 - 3.0 * error / 2f64.sqrt()..1.0 + 3.0 * error / 2f64.sqrt()
            } else {
                0.75..1.3
            };
            assert!(
                allowed.contains(&deviation),
                "{correlation:?}, known {noise_known}: {deviation}"
            );
        }
    }
}

fn settings(truth: PairTruth, directory: &Path) -> PairSettings {
    PairSettings {
        truth,
        name: "Paper clump".to_owned(),
        directory: directory.to_owned(),
        stem: None,
        formats: Formats::Both,
        fits_axis: FitsAxis::Velocity,
    }
}

/// Truths with something of everything.
fn varied_truths() -> Vec<PairTruth> {
    let mut truths: Vec<PairTruth> = Model::ALL
        .into_iter()
        .map(|model| truth(model, 5))
        .collect();
    let kinds = [
        Correlation::Hanning,
        Correlation::Boxcar { channels: 3 },
        Correlation::Linear,
        Correlation::BandLimited,
        Correlation::Autoregressive {
            coefficient: 0.1 + 0.2,
        },
        Correlation::White,
        Correlation::Hanning,
    ];
    for (truth, kind) in truths.iter_mut().zip(kinds) {
        truth.thick.correlation = kind;
        truth.thin.noise = NoiseLevel::RmsK(1.0 / 30.0);
        truth.thin.baseline.ripple_k = 0.1;
        truth.thin.baseline.ripple_period_km_s = 7.0;
    }
    let lines = (find("HCN 1-0").unwrap(), find("N2H+ 1-0").unwrap());
    let mut multiplets =
        PairTruth::new((Model::Hill, Model::Layer), lines, i64::MAX.unsigned_abs());
    multiplets.link(60.0);
    truths.push(multiplets);
    let components = [(0.0, 0.3), (1.7, 0.6), (-3.0, 0.2)].map(|(offset_km_s, weight)| Component {
        offset_km_s,
        weight,
    });
    let own = Line::custom("own", 100.1, Some(1e-5), Some(components.to_vec())).unwrap();
    let lines = (own, find("H13CO+ 1-0").unwrap());
    truths.push(PairTruth::new((Model::TwoLayer, Model::Gaussian), lines, 0));
    truths
}

#[test]
fn a_truth_file_reads_back_to_the_same_pair() {
    for truth in varied_truths() {
        let directory = tempfile::tempdir().unwrap();
        let files = write_pair(&settings(truth.clone(), directory.path())).unwrap();
        let again = read_truth(&directory.path().join("truth.toml")).unwrap();
        assert_eq!(again, truth);
        assert_eq!(simulate_pair(&again).unwrap(), files.pair);
    }
}

fn read(path: &Path) -> inrush::spectrum::RawSpectrum {
    read_spectrum(path, &ReadOptions::default()).unwrap()
}

#[test]
fn files_read_back_to_the_simulated_values() {
    for fits_axis in [FitsAxis::Velocity, FitsAxis::Frequency] {
        let directory = tempfile::tempdir().unwrap();
        let mut settings = settings(truth(Model::Hill, 1), directory.path());
        settings.fits_axis = fits_axis;
        let files = write_pair(&settings).unwrap();
        let spectrum = &files.pair.thick.spectrum;
        let csv = read(&directory.path().join("thick.csv"));
        assert_eq!(csv.values, spectrum.temperature_k());
        let fits = read(&directory.path().join("thick.fits"));
        assert_eq!(fits.values, spectrum.temperature_k());
        assert_eq!(fits.object.as_deref(), Some("Paper clump"));
        let rest_hz = fits.rest_frequency_hz.unwrap();
        assert!((rest_hz - 89.188_524_7e9).abs() < 1e-3);
        for (axis, velocity) in fits.axis.iter().zip(spectrum.velocity_km_s()) {
            let found = match fits_axis {
                FitsAxis::Velocity => axis * 1e-3,
                FitsAxis::Frequency => 299_792.458 * (1.0 - axis / rest_hz),
            };
            // frequencies of 1e11 Hz hold velocities to a few 1e-11 km/s
            assert!((found - velocity).abs() < 1e-9, "{found} {velocity}");
        }
    }
}

#[test]
fn the_run_sheet_names_lines_and_files_and_nothing_else_is_left_behind() {
    let directory = tempfile::tempdir().unwrap();
    let mut settings = settings(truth(Model::Hill, 1), directory.path());
    settings.stem = Some("paper".to_owned());
    settings.formats = Formats::Fits;
    let files = write_pair(&settings).unwrap();
    let sheet = RunSheet::read(&files.sheet).unwrap();
    assert_eq!(sheet.source.name.as_deref(), Some("Paper clump"));
    assert_eq!(sheet.thick.line.as_deref(), Some("HCO+ 1-0"));
    assert_eq!(sheet.thin.file, Some("paper-thin.fits".into()));
    let mut names: Vec<String> = std::fs::read_dir(directory.path())
        .unwrap()
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    let expected = [
        "paper-thick.fits",
        "paper-thin.fits",
        "paper-truth.toml",
        "paper.toml",
    ];
    assert_eq!(names, expected);
}

#[test]
fn nonsense_is_refused_with_what_was_found() {
    type Change = fn(&mut PairTruth);
    let cases: [(Change, &str); 12] = [
        (
            |truth| {
                truth.thick.parameters.insert("v_in".into(), 0.1);
            },
            "parameter `v_in`",
        ),
        (
            |truth| {
                truth.thick.parameters.remove("tau");
            },
            "no value of `tau`",
        ),
        (
            |truth| {
                truth.thick.parameters.insert("t_peak_k".into(), 2.0);
            },
            "t_peak_k 2 K, expected at least the background's 2.72548 K",
        ),
        (
            |truth| {
                truth.thick.parameters.insert("v_lsr_km_s".into(), f64::NAN);
            },
            "v_lsr_km_s NaN km/s, expected -100000 to 100000",
        ),
        (
            |truth| truth.thin.axis.channel_km_s = 0.0,
            "thin line: channel width 0 km/s",
        ),
        (
            |truth| truth.thin.axis.channel_km_s = 1e-9,
            "channels, expected 2 to 1000000",
        ),
        (
            |truth| truth.thick.axis.high_km_s = -99.0,
            "expected the lower first",
        ),
        (
            |truth| truth.thick.axis.low_km_s = 5.0,
            "v_lsr_km_s 0 km/s, expected within the band",
        ),
        (
            |truth| truth.thick.noise = NoiseLevel::RmsK(-0.1),
            "noise -0.1 K",
        ),
        (
            |truth| truth.thick.noise = NoiseLevel::SignalToNoise(0.0),
            "signal-to-noise ratio 0",
        ),
        (|truth| truth.thin.model = Model::Hill, "parameter `t_ex_k`"),
        (
            |truth| truth.isotope_ratio = Some(68.0),
            "its own `tau_total`",
        ),
    ];
    for (change, expected) in cases {
        let mut truth = truth(Model::Hill, 1);
        change(&mut truth);
        let error = simulate_pair(&truth).unwrap_err().to_string();
        assert!(error.contains(expected), "{error}\nexpected: {expected}");
    }
    let mut unknown = truth(Model::Hill, 1);
    unknown.thick.parameters.insert("v_in".into(), 0.1);
    let hint = simulate_pair(&unknown).unwrap_err().hint().unwrap();
    assert_eq!(hint, "did you mean `v_in_km_s`?");
}

#[test]
fn a_refused_pair_leaves_no_files() {
    let directory = tempfile::tempdir().unwrap();
    let out = directory.path().join("pair");
    let mut truth = truth(Model::Hill, 1);
    truth.thin.axis.channel_km_s = 0.0;
    assert!(write_pair(&settings(truth, &out)).is_err());
    assert!(!out.exists());
}

/// Words of a command, quotes taken off.
fn words(command: &str) -> Vec<String> {
    command
        .split('"')
        .enumerate()
        .flat_map(|(index, part)| -> Vec<String> {
            if index % 2 == 1 {
                vec![part.to_owned()]
            } else {
                part.split_whitespace().map(str::to_owned).collect()
            }
        })
        .collect()
}

#[test]
fn the_command_in_their_readme_makes_the_demonstration_spectra() {
    let demo = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-spectra");
    let readme = std::fs::read_to_string(demo.join("README.md")).unwrap();
    let start = readme.find("inrush simulate pair").unwrap();
    let command = readme[start..].split("```").next().unwrap();
    let directory = tempfile::tempdir().unwrap();
    let arguments = words(&command.replace("\\\n", " "))
        .into_iter()
        .skip(1)
        .map(|word| match word.as_str() {
            "demo-spectra" => directory.path().display().to_string(),
            _ => word,
        });
    let output = Command::new(env!("CARGO_BIN_EXE_inrush"))
        .args(arguments)
        .output()
        .unwrap();
    assert!(output.status.success(), "{output:?}");
    let made = |name: &str| directory.path().join(name);
    for name in [
        "lantern7-thick.csv",
        "lantern7-thin.csv",
        "lantern7-thick.fits",
        "lantern7-thin.fits",
    ] {
        let (kept, made) = (read(&demo.join(name)), read(&made(name)));
        assert_eq!(kept.axis, made.axis, "{name}");
        for (kept, made) in kept.values.iter().zip(&made.values) {
            // processors with and without fused multiplication differ in the last bits
            assert!((kept - made).abs() < 1e-12, "{name}: {kept} {made}");
        }
    }
    let truth = "lantern7-truth.toml";
    assert_eq!(
        read_truth(&demo.join(truth)).unwrap(),
        read_truth(&made(truth)).unwrap()
    );
    let sheet = "lantern7.toml";
    let mut kept = RunSheet::read(&demo.join(sheet)).unwrap();
    assert!(kept.source.distance_kpc.is_some());
    // distance, mass and so on are no part of what is simulated
    kept.source = SourceSection {
        name: kept.source.name,
        ..SourceSection::default()
    };
    assert_eq!(kept, RunSheet::read(&made(sheet)).unwrap());
}
