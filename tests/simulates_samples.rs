//! A simulated sample holds what its table of truths says, and each pair is the same in any sample.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

use inrush::line::{Line, find};
use inrush::model::{LineShape, Model, Sampling};
use inrush::read::{ReadOptions, read_spectrum};
use inrush::run::simulate::{SampleRun, write_sample};
use inrush::simulate::{
    Correlation, Kind, Range, SampleSettings, SampleTruth, Slab, Spacing, simulate_pair,
};
use std::collections::HashMap;
use std::num::NonZeroUsize;
use std::path::Path;
use std::process::{Command, Output};

type Row = HashMap<String, String>;

fn lines() -> (Line, Line) {
    (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap())
}

fn run(settings: SampleSettings, directory: &Path, threads: usize) -> SampleRun {
    SampleRun {
        settings,
        thick_line: "HCO+ 1-0".to_owned(),
        thin_line: "H13CO+ 1-0".to_owned(),
        directory: directory.to_owned(),
        threads: NonZeroUsize::new(threads).unwrap(),
    }
}

fn pairs(count: u64) -> SampleSettings {
    SampleSettings {
        pairs: count,
        ..SampleSettings::default()
    }
}

fn even(low: f64, high: f64) -> Range {
    Range {
        low,
        high,
        spacing: Spacing::Even,
    }
}

fn drawn(settings: &SampleSettings, count: u64) -> Vec<SampleTruth> {
    let lines = lines();
    (0..count)
        .map(|index| settings.pair((&lines.0, &lines.1), index).unwrap())
        .collect()
}

fn table(path: &Path) -> Vec<Row> {
    let mut reader = csv::Reader::from_path(path).unwrap();
    reader.deserialize().map(Result::unwrap).collect()
}

fn number(row: &Row, column: &str) -> f64 {
    row[column].parse().unwrap()
}

/// Means over channels of a truth row's profile, by a midpoint sum that shares nothing with how
/// spectra are made.
fn profile_k(row: &Row, which: &str, velocity_km_s: &[f64]) -> Vec<f64> {
    const PARTS: u32 = 40;
    let model = Model::from_name(&row[&format!("{which}_model")]).unwrap();
    let parameters: Vec<f64> = model
        .parameters()
        .iter()
        .map(|parameter| match (which, parameter.name) {
            ("thin", "peak_k") => number(row, "peak_thin_k"),
            ("thin", "peak_second_k") => number(row, "peak_second_thin_k"),
            (_, name) => number(row, name),
        })
        .collect();
    let lines = lines();
    let line = if which == "thick" { lines.0 } else { lines.1 };
    let shape = LineShape::new(line.rest_frequency_ghz, line.components);
    let width_km_s = number(row, "channel_km_s");
    let fine: Vec<f64> = velocity_km_s
        .iter()
        .flat_map(|centre| {
            (0..PARTS).map(move |part| {
                centre + width_km_s * ((f64::from(part) + 0.5) / f64::from(PARTS) - 0.5)
            })
        })
        .collect();
    let mut value = vec![0.0; fine.len()];
    model.evaluate(&shape, &Sampling::at(fine), &parameters, &mut value, None);
    value
        .chunks(PARTS as usize)
        .map(|parts| parts.iter().sum::<f64>() / f64::from(PARTS))
        .collect()
}

#[test]
fn spectra_are_the_truths_model_and_noise_of_the_stated_rms() {
    const PAIRS: u64 = 60;
    let directory = tempfile::tempdir().unwrap();
    let files = write_sample(&run(pairs(PAIRS), &directory.path().join("sample"), 2)).unwrap();
    let truths = table(&files.truth);
    let rows = table(&files.table);
    assert_eq!((truths.len(), rows.len()), (60, 60));
    let mut kinds: Vec<&str> = truths.iter().map(|truth| truth["kind"].as_str()).collect();
    kinds.sort_unstable();
    kinds.dedup();
    assert_eq!(kinds.len(), Kind::ALL.len(), "{kinds:?}");
    let (mut squares, mut channels, mut worst) = (0.0f64, 0.0f64, 0.0f64);
    let mut noises: Vec<Vec<f64>> = Vec::new();
    for (row, truth) in rows.iter().zip(&truths) {
        assert_eq!(row["id"], truth["id"]);
        for which in ["thick", "thin"] {
            let path = files
                .table
                .parent()
                .unwrap()
                .join(&row[&format!("{which}_file")]);
            let raw = read_spectrum(&path, &ReadOptions::default()).unwrap();
            let velocity: Vec<f64> = raw.axis.iter().map(|m_s| m_s * 1e-3).collect();
            assert_eq!(velocity.len(), 200);
            assert!((velocity[0] - number(truth, "first_channel_km_s")).abs() < 1e-9);
            let profile = profile_k(truth, which, &velocity);
            let noise_k = number(truth, &format!("noise_{which}_k"));
            let brightest = profile.iter().fold(0.0f64, |a, b| a.max(b.abs()));
            let stated = number(truth, &format!("brightest_{which}_k"));
            // a midpoint sum over 40 parts of at most 0.3 dispersions
            assert!((brightest / stated - 1.0).abs() < 1e-4, "{}", truth["id"]);
            let ratio = if which == "thick" {
                "signal_to_noise"
            } else {
                "signal_to_noise_thin"
            };
            assert!((stated / noise_k / number(truth, ratio) - 1.0).abs() < 1e-12);
            let noise: Vec<f64> = raw
                .values
                .iter()
                .zip(&profile)
                .map(|(value, profile)| (value - profile) / noise_k)
                .collect();
            let sum: f64 = noise.iter().map(|noise| noise * noise).sum();
            // chi2 of 200 channels in units of its standard deviation, sqrt(2 * 200)
            worst = worst.max(((sum - 200.0) / 20.0).abs());
            squares += sum;
            channels += 200.0;
            noises.push(noise);
        }
    }
    // 120 lines: beyond 4.5 standard deviations in one of 1000 samples
    assert!(worst < 4.5, "{worst}");
    let error = (2.0 / channels).sqrt();
    let variance = squares / channels;
    assert!(
        (variance - 1.0).abs() < 4.0 * error,
        "{variance} +- {error}"
    );
    for (first, second) in noises.iter().zip(&noises[1..]) {
        let product: f64 = first.iter().zip(second).map(|(a, b)| a * b).sum();
        // the correlation of independent lines scatters by 1/sqrt(200)
        assert!(product.abs() < 4.5 * 200f64.sqrt(), "{product}");
    }
}

#[test]
fn a_pair_is_the_same_in_a_larger_sample_and_for_any_number_of_threads() {
    let directory = tempfile::tempdir().unwrap();
    let small = directory.path().join("small");
    let large = directory.path().join("large");
    write_sample(&run(pairs(5), &small, 1)).unwrap();
    // more than one folder of spectra
    write_sample(&run(pairs(1013), &large, 3)).unwrap();
    for name in ["sample.csv", "truth.csv"] {
        let read = |folder: &Path| std::fs::read_to_string(folder.join(name)).unwrap();
        let (small, large) = (read(&small), read(&large));
        assert_eq!(small.lines().count(), 6);
        assert_eq!(large.lines().count(), 1014);
        assert!(large.starts_with(&small), "{name}");
    }
    for row in table(&large.join("sample.csv")) {
        for column in ["thick_file", "thin_file"] {
            assert!(large.join(&row[column]).is_file(), "{}", row[column]);
        }
    }
    for row in table(&small.join("sample.csv")) {
        for column in ["thick_file", "thin_file"] {
            let read = |folder: &Path| std::fs::read(folder.join(&row[column])).unwrap();
            assert_eq!(read(&small), read(&large), "{}", row[column]);
        }
    }
}

#[test]
fn another_seed_makes_other_pairs() {
    let settings = SampleSettings {
        seed: 2,
        ..pairs(3)
    };
    for (one, other) in drawn(&pairs(3), 3).iter().zip(&drawn(&settings, 3)) {
        assert_ne!(one.truth.seed, other.truth.seed);
        assert_ne!(one.truth.thick.parameters, other.truth.thick.parameters);
    }
}

#[test]
fn another_range_of_one_quantity_leaves_the_others_as_they_are() {
    let mut hotter = pairs(40);
    hotter.temperature_k = even(50.0, 60.0);
    for (before, after) in drawn(&pairs(40), 40).iter().zip(&drawn(&hotter, 40)) {
        assert_eq!(before.kind, after.kind);
        assert_eq!(before.truth.thin, after.truth.thin);
        for (name, value) in &before.truth.thick.parameters {
            let same = after.truth.thick.parameters[name] == *value;
            assert_eq!(
                same,
                !name.starts_with("t_") && !name.starts_with("peak"),
                "{name}"
            );
        }
    }
}

/// Mean of deviates that should be uniform between 0 and 1, in standard errors from 1/2.
fn unevenness(deviates: &[f64]) -> f64 {
    assert!(deviates.iter().all(|x| (0.0..=1.0).contains(x)));
    let count = deviates.len() as f64;
    let mean = deviates.iter().sum::<f64>() / count;
    (mean - 0.5) * (12.0 * count).sqrt()
}

#[test]
fn quantities_lie_in_their_ranges_as_their_spacing_says() {
    const PAIRS: u64 = 4000;
    let settings = SampleSettings::default();
    let sample = drawn(&settings, PAIRS);
    let share = |range: &Range, value: f64| match range.spacing {
        Spacing::Even => (value - range.low) / (range.high - range.low),
        Spacing::Log => (value / range.low).ln() / (range.high / range.low).ln(),
    };
    for kind in Kind::ALL {
        let count = sample.iter().filter(|pair| pair.kind == kind).count() as f64;
        // a fifth each, within 4.5 binomial standard deviations
        let error = (PAIRS as f64 * 0.2 * 0.8).sqrt();
        assert!((count - 0.2 * PAIRS as f64).abs() < 4.5 * error, "{kind:?}");
    }
    let thick = |name: &str| -> Vec<f64> {
        let parameters = sample.iter().map(|pair| &pair.truth.thick.parameters);
        parameters.filter_map(|p| p.get(name).copied()).collect()
    };
    for (name, range) in [
        ("sigma_km_s", &settings.sigma_km_s),
        ("v_lsr_km_s", &settings.v_lsr_km_s),
        ("tau", &settings.tau),
        ("t_peak_k", &settings.temperature_k),
        ("sigma_second_km_s", &settings.sigma_km_s),
    ] {
        let deviates: Vec<f64> = thick(name).iter().map(|x| share(range, *x)).collect();
        let unevenness = unevenness(&deviates);
        assert!(unevenness.abs() < 4.5, "{name}: {unevenness}");
    }
    for pair in &sample {
        let parameters = &pair.truth.thick.parameters;
        let ratio = |name: &str| parameters.get(name).map(|x| x / parameters["sigma_km_s"]);
        let v_in = ratio("v_in_km_s");
        match pair.kind {
            Kind::Infall => assert!(v_in.is_some_and(|v| (0.0..=1.0).contains(&v))),
            Kind::Expansion => assert!(v_in.is_some_and(|v| (-1.0..=0.0).contains(&v))),
            Kind::Static => assert_eq!(v_in, Some(0.0)),
            Kind::TwoClouds | Kind::Gaussian => assert_eq!(v_in, None),
        }
        if pair.truth.thick.model == Model::TwoLayer {
            assert!(parameters["t_front_k"] <= parameters["t_rear_k"]);
        }
        if pair.kind == Kind::TwoClouds {
            let thin = &pair.truth.thin.parameters;
            for name in ["v_second_km_s", "sigma_second_km_s"] {
                assert_eq!(thin[name], parameters[name]);
            }
            let apart = (parameters["v_second_km_s"] - parameters["v_lsr_km_s"]).abs();
            let apart_sigmas = apart / parameters["sigma_km_s"];
            // velocities are rounded to 1e-6 km/s
            assert!((1.5 - 1e-5..=4.0 + 1e-5).contains(&apart_sigmas));
        }
    }
}

#[test]
fn a_single_value_is_that_value_and_weights_of_zero_draw_nothing() {
    let settings = SampleSettings {
        kinds: [(Kind::Infall, 1.0), (Kind::Static, 0.0)].into(),
        models: [(Slab::Hill, 2.0), (Slab::TwoLayer, 0.0)].into(),
        v_in_sigmas: even(0.4, 0.4),
        sigma_km_s: even(0.5, 0.5),
        channel_km_s: Some(even(0.1, 0.1)),
        signal_to_noise: even(30.0, 30.0),
        correlation: Correlation::Hanning,
        ..pairs(50)
    };
    for pair in drawn(&settings, 50) {
        assert_eq!(pair.kind, Kind::Infall);
        let thick = &pair.truth.thick;
        assert_eq!(thick.model, Model::Hill);
        assert_eq!(thick.parameters["v_in_km_s"], 0.2);
        assert_eq!(thick.axis.channel_km_s, 0.1);
        assert_eq!(pair.truth.thin.correlation, Correlation::Hanning);
        let made = simulate_pair(&pair.truth).unwrap();
        let peak = made.thick.noiseless.temperature_k();
        let brightest = peak.iter().copied().fold(0.0, f64::max);
        assert_eq!(made.thick.noise_k, brightest / 30.0);
        assert_eq!(made.thick.spectrum.len(), 200);
    }
}

#[test]
fn settings_that_make_no_sample_are_refused_with_what_was_found() {
    type Change = fn(&mut SampleSettings);
    let cases: [(Change, &str); 16] = [
        (|s| s.pairs = 0, "pairs 0, expected at least 1"),
        (|s| s.seed = u64::MAX, "seed 18446744073709551615"),
        (|s| s.channels = 3, "channels 3, expected 10 to 1000000"),
        (
            |s| s.sigma_km_s = even(-0.2, 1.0),
            "sigma_km_s -0.2 to 1, expected values from 0.001",
        ),
        (
            |s| s.tau = even(3.0, 2.0),
            "tau 3 to 2, expected the lower end first",
        ),
        (
            |s| s.tau = even(0.0, 2.0),
            "tau 0 to 2, expected values above 0",
        ),
        (
            |s| s.tau.high = f64::NAN,
            "tau 0.5 to NaN, expected finite numbers",
        ),
        (
            |s| s.temperature_k = even(2.0, 9.0),
            "temperature_k 2 to 9, expected values above the background's 2.72548",
        ),
        (
            |s| s.signal_to_noise = even(-5.0, 9.0),
            "signal_to_noise -5 to 9",
        ),
        (
            |s| s.v_in_sigmas.spacing = Spacing::Log,
            "v_in_sigmas -1 to 1 spaced by factors, expected a lower end above 0",
        ),
        (
            |s| s.v_in_sigmas = even(0.0, 1.0),
            "v_in_sigmas 0 to 1, expected some of it below 0, since expansion is drawn",
        ),
        (
            |s| s.second_over_first = even(0.5, 1.5),
            "second_over_first 0.5 to 1.5, expected values from 0 to 1",
        ),
        (
            |s| s.kinds = [(Kind::Infall, -1.0)].into(),
            "kinds weight -1, expected 0 or a positive number",
        ),
        (
            |s| s.models.clear(),
            "models weights of 0 in all, expected a positive sum",
        ),
        (
            |s| s.channels = 60,
            "expected a band that reaches the line, up to 5 from its middle",
        ),
        (
            |s| s.channel_km_s = Some(even(0.0, 0.1)),
            "channel_km_s 0 to 0.1",
        ),
    ];
    let lines = lines();
    for (change, expected) in cases {
        let mut settings = pairs(10);
        change(&mut settings);
        let error = settings.pair((&lines.0, &lines.1), 0).unwrap_err();
        let error = error.to_string();
        assert!(error.contains(expected), "{error}\nexpected: {expected}");
    }
}

fn inrush(arguments: &[&str]) -> Output {
    let program = env!("CARGO_BIN_EXE_inrush");
    let command = Command::new(program).args(arguments).output();
    command.unwrap()
}

fn names(directory: &Path) -> Vec<String> {
    let entries = std::fs::read_dir(directory).unwrap();
    let mut names: Vec<String> = entries
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect();
    names.sort();
    names
}

#[test]
fn the_settings_file_makes_the_same_sample_again_and_options_stand_above_it() {
    let directory = tempfile::tempdir().unwrap();
    let folder = |name: &str| directory.path().join(name);
    let path = |name: &str| folder(name).to_str().unwrap().to_owned();
    let first = inrush(&[
        "simulate",
        "sample",
        "--out",
        &path("first"),
        "--pairs",
        "7",
        "--seed",
        "5",
        "--kinds",
        "infall=3,two-clouds",
        "--tau",
        "2,9",
        "--channel-km-s",
        "even:0.1,0.2",
        "--correlation",
        "hanning",
        "--thin-line",
        "N2H+ 1-0",
        "--threads",
        "1",
    ]);
    assert!(first.status.success(), "{first:?}");
    assert_eq!(
        names(&folder("first")),
        ["sample.csv", "settings.toml", "spectra", "truth.csv"]
    );
    let settings = path("first/settings.toml");
    let again = inrush(&[
        "simulate",
        "sample",
        "--out",
        &path("again"),
        "--settings",
        &settings,
    ]);
    assert!(again.status.success(), "{again:?}");
    let read = |name: &str| std::fs::read(folder(name)).unwrap();
    for name in [
        "sample.csv",
        "truth.csv",
        "settings.toml",
        "spectra/0000/pair-0000007-thin.csv",
    ] {
        let same = read(&format!("first/{name}")) == read(&format!("again/{name}"));
        assert!(same, "{name}");
    }
    let fewer = inrush(&[
        "simulate",
        "sample",
        "--out",
        &path("fewer"),
        "--settings",
        &settings,
        "--pairs",
        "2",
    ]);
    assert!(fewer.status.success(), "{fewer:?}");
    assert!(read("first/truth.csv").starts_with(&read("fewer/truth.csv")));
}

#[test]
fn a_folder_that_holds_something_is_left_as_it_is_and_a_refused_sample_leaves_none() {
    let directory = tempfile::tempdir().unwrap();
    let out = directory.path().join("out");
    std::fs::create_dir(&out).unwrap();
    // an empty one is taken
    write_sample(&run(pairs(2), &out, 2)).unwrap();
    let before = std::fs::read(out.join("truth.csv")).unwrap();
    let error = write_sample(&run(pairs(3), &out, 2)).unwrap_err();
    assert!(
        error.to_string().contains("a directory that holds files"),
        "{error}"
    );
    assert_eq!(std::fs::read(out.join("truth.csv")).unwrap(), before);
    let file = directory.path().join("file");
    std::fs::write(&file, "").unwrap();
    assert!(write_sample(&run(pairs(2), &file, 1)).is_err());
    assert!(write_sample(&run(pairs(0), &directory.path().join("none"), 1)).is_err());
    assert_eq!(names(directory.path()), ["file", "out"]);
}

#[test]
fn the_command_refuses_what_it_cannot_draw_from() {
    let directory = tempfile::tempdir().unwrap();
    let out = directory.path().join("out");
    let out = out.to_str().unwrap();
    for (option, value, expected) in [
        ("--pairs", "0", "pairs 0, expected at least 1"),
        ("--pairs", "-3", "invalid value '-3'"),
        ("--sigma-km-s", "-0.5,1", "sigma_km_s -0.5 to 1"),
        ("--tau", "1,2,3", "expected LOW,HIGH or one value"),
        ("--tau", "linear:1,2", "expected log: or even:"),
        ("--tau", "1,x", "`x`, expected a number"),
        ("--kinds", "infal", "`infal`, expected infall, expansion"),
        ("--kinds", "infall,infall", "`infall` twice"),
        ("--models", "two-layers", "expected hill, two-layer"),
        ("--settings", "absent.toml", "absent.toml"),
        ("--thick-line", "HCO+ 9-9", "thick line"),
    ] {
        let refused = inrush(&["simulate", "sample", "--out", out, option, value]);
        assert_eq!(refused.status.code(), Some(2), "{option} {value}");
        let message = String::from_utf8(refused.stderr).unwrap();
        assert!(
            message.contains(expected),
            "{message}\nexpected: {expected}"
        );
    }
    assert!(names(directory.path()).is_empty());
}

#[test]
fn pages_and_help_state_the_ranges_and_columns() {
    let page = |name: &str| {
        let path = Path::new(env!("CARGO_MANIFEST_DIR"))
            .join("docs")
            .join(name);
        std::fs::read_to_string(path).unwrap()
    };
    let help = inrush(&["simulate", "sample", "--help"]);
    let help = String::from_utf8(help.stdout).unwrap();
    let help = help.split_whitespace().collect::<Vec<_>>().join(" ");
    let methods = page("methods.md");
    let settings = SampleSettings::default();
    for (option, range) in [
        ("--signal-to-noise", settings.signal_to_noise),
        ("--signal-to-noise-thin", settings.signal_to_noise_thin),
        ("--v-in-sigmas", settings.v_in_sigmas),
        ("--tau", settings.tau),
        ("--temperature-k", settings.temperature_k),
        ("--sigma-km-s", settings.sigma_km_s),
        ("--v-lsr-km-s", settings.v_lsr_km_s),
        ("--peak-thin-k", settings.peak_thin_k),
        ("--separation-sigmas", settings.separation_sigmas),
        ("--second-over-first", settings.second_over_first),
        ("--channel-sigmas", settings.channel_sigmas),
        ("--band-offset-sigmas", settings.band_offset_sigmas),
    ] {
        let word = match range.spacing {
            Spacing::Even => "even",
            Spacing::Log => "log",
        };
        let text = format!("{word}:{},{}", range.low, range.high);
        let row = format!("| `{option}` | {text} |");
        assert!(methods.contains(&row), "docs/methods.md: {row}");
        let (_, of_option) = help.split_once(&format!("{option} <RANGE>")).unwrap();
        let of_option = of_option.split(" --").next().unwrap();
        assert!(
            of_option.contains(&format!("[{text}]")),
            "{option}: {of_option}"
        );
    }
    let directory = tempfile::tempdir().unwrap();
    let files = write_sample(&run(pairs(1), &directory.path().join("sample"), 1)).unwrap();
    let text = std::fs::read_to_string(&files.truth).unwrap();
    let formats = page("formats.md");
    let (_, stated) = formats.split_once("Columns of `truth.csv`").unwrap();
    let stated: Vec<&str> = stated
        .lines()
        .take_while(|line| !line.starts_with('#'))
        .filter_map(|line| line.strip_prefix("| `")?.split('`').next())
        .collect();
    let columns: Vec<&str> = text.lines().next().unwrap().split(',').collect();
    assert_eq!(stated, columns);
}
