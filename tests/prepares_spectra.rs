//! Line windows, baselines, noise and its correlation on simulated spectra of known truth.

#![allow(clippy::unwrap_used, clippy::print_stdout)]

use inrush::fit::Workspace;
use inrush::fit::{
    Averaging, Caution, Channels, FitRange, FitSettings, Judgement, PairFacts, cautions, fit_pair,
    fit_thin,
};
use inrush::line::{Component, find};
use inrush::measure::{MeasureSettings, measure};
use inrush::model::{LineShape, Model};
use inrush::prepare::{
    Expected, PairLine, PrepareError, PrepareSettings, Prepared, prepare, prepare_pair, rebin,
};
use inrush::spectrum::{Spectrum, Window};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};

const CHANNEL_KM_S: f64 = 0.1;

fn velocity(channel: usize, count: usize) -> f64 {
    (channel as f64 - 0.5 * (count as f64 - 1.0)) * CHANNEL_KM_S
}

fn spectrum(temperature_k: Vec<f64>) -> Spectrum {
    let count = temperature_k.len();
    let velocity_km_s = (0..count).map(|channel| velocity(channel, count)).collect();
    Spectrum::new(velocity_km_s, vec![CHANNEL_KM_S; count], temperature_k).unwrap()
}

fn gaussian(v: f64, centre: f64, sigma: f64) -> f64 {
    (-0.5 * ((v - centre) / sigma).powi(2)).exp()
}

fn white(count: usize, generator: &mut ChaCha8Rng) -> Vec<f64> {
    (0..count)
        .map(|_| StandardNormal.sample(generator))
        .collect()
}

/// Noise smoothed with weights 1/4, 1/2, 1/4, unit variance.
fn hanning(count: usize, generator: &mut ChaCha8Rng) -> Vec<f64> {
    let norm = (6.0_f64 / 16.0).sqrt();
    white(count + 2, generator)
        .windows(3)
        .map(|x| (0.25 * x[0] + 0.5 * x[1] + 0.25 * x[2]) / norm)
        .collect()
}

fn with_noise(count: usize, noise: &[f64], rms_k: f64, line: impl Fn(f64) -> f64) -> Spectrum {
    spectrum(
        (0..count)
            .map(|channel| line(velocity(channel, count)) + rms_k * noise[channel])
            .collect(),
    )
}

fn prepare_plainly(spectrum: &Spectrum) -> Prepared {
    prepare(spectrum, &PrepareSettings::default(), &Expected::default()).unwrap()
}

/// A self-absorbed line: broad emission with a dip.
fn self_absorbed(v: f64) -> f64 {
    6.0 * gaussian(v, 0.0, 1.2) - 5.0 * gaussian(v, 0.2, 0.45)
}

struct Tally {
    trials: u64,
    cut: usize,
    too_wide: usize,
    undetected: usize,
    correlated: usize,
    rms: Vec<f64>,
}

/// A line that windows are tried on.
struct Case {
    name: &'static str,
    channels: usize,
    smoothed: bool,
    rms_k: f64,
    line: fn(f64) -> f64,
    /// What the window must hold.
    inner: (f64, f64),
    /// What it must not exceed.
    outer: (f64, f64),
    /// Realisations of 200 in which it may cut, and in which it may be too wide.
    allowed: (usize, usize),
}

/// Prepares many realisations of a line.
fn tally(case: &Case) -> Tally {
    let mut tally = Tally {
        trials: 200,
        cut: 0,
        too_wide: 0,
        undetected: 0,
        correlated: 0,
        rms: Vec::new(),
    };
    for seed in 0..tally.trials {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        let noise = if case.smoothed {
            hanning(case.channels, &mut generator)
        } else {
            white(case.channels, &mut generator)
        };
        let noisy = with_noise(case.channels, &noise, case.rms_k, case.line);
        match prepare(&noisy, &PrepareSettings::default(), &Expected::default()) {
            Ok(prepared) => {
                let window = prepared.window;
                tally.cut +=
                    usize::from(window.low_km_s > case.inner.0 || window.high_km_s < case.inner.1);
                tally.too_wide +=
                    usize::from(window.low_km_s < case.outer.0 || window.high_km_s > case.outer.1);
                tally.correlated += usize::from(!prepared.noise.process.is_white());
                tally.rms.push(prepared.noise.rms_k / case.rms_k);
            }
            Err(PrepareError::NoLine { .. }) => tally.undetected += 1,
            Err(error) => panic!("{error}"),
        }
    }
    tally
}

impl Tally {
    fn report(&self, name: &str) -> f64 {
        let n = self.rms.len() as f64;
        let mean = self.rms.iter().sum::<f64>() / n;
        println!(
            "{name}: cut {}, too wide {}, undetected {}, correlated {}, rms {mean:.3} of {}",
            self.cut, self.too_wide, self.undetected, self.correlated, self.trials
        );
        mean
    }
}

/// 3 % of 200.
const FEW: (usize, usize) = (6, 6);

const CASES: [Case; 12] = [
    Case {
        name: "thin line at S/N 6",
        channels: 240,
        smoothed: false,
        rms_k: 1.0 / 6.0,
        line: |v| gaussian(v, 1.0, 0.6),
        inner: (0.2, 1.8),
        outer: (-4.0, 6.0),
        allowed: FEW,
    },
    Case {
        name: "thin line at S/N 3",
        channels: 240,
        smoothed: false,
        rms_k: 1.0 / 3.0,
        line: |v| gaussian(v, 1.0, 0.6),
        inner: (0.6, 1.4),
        outer: (-4.0, 6.0),
        allowed: FEW,
    },
    Case {
        name: "thin line at S/N 4, Hanning noise",
        channels: 240,
        smoothed: true,
        rms_k: 1.0 / 4.0,
        line: |v| gaussian(v, 1.0, 0.6),
        inner: (0.6, 1.4),
        outer: (-4.0, 6.0),
        allowed: FEW,
    },
    Case {
        name: "bright line",
        channels: 240,
        smoothed: false,
        rms_k: 0.06,
        line: |v| 6.0 * gaussian(v, 1.0, 0.8),
        inner: (-1.3, 3.3),
        outer: (-5.0, 7.0),
        allowed: FEW,
    },
    Case {
        name: "bright line, Hanning noise",
        channels: 240,
        smoothed: true,
        rms_k: 0.06,
        line: |v| 6.0 * gaussian(v, 1.0, 0.8),
        inner: (-1.3, 3.3),
        outer: (-5.0, 7.0),
        allowed: FEW,
    },
    Case {
        name: "self-absorbed",
        channels: 240,
        smoothed: false,
        rms_k: 0.2,
        line: self_absorbed,
        inner: (-2.5, 2.5),
        outer: (-6.0, 6.0),
        allowed: FEW,
    },
    Case {
        name: "self-absorbed to zero",
        channels: 240,
        smoothed: false,
        rms_k: 0.2,
        line: |v| 4.0 * gaussian(v, -1.2, 0.5) + 2.0 * gaussian(v, 1.2, 0.5),
        inner: (-2.3, 2.2),
        outer: (-6.0, 6.0),
        allowed: FEW,
    },
    Case {
        name: "two clouds, Hanning noise",
        channels: 240,
        smoothed: true,
        rms_k: 0.2,
        line: |v| 4.0 * gaussian(v, -2.0, 0.7) + 3.0 * gaussian(v, 2.0, 0.7),
        inner: (-3.4, 3.3),
        outer: (-7.0, 7.0),
        allowed: FEW,
    },
    Case {
        name: "slope",
        channels: 240,
        smoothed: false,
        rms_k: 0.2,
        line: |v| self_absorbed(v) + 2.0 + 0.15 * v,
        inner: (-2.5, 2.5),
        outer: (-6.0, 6.0),
        allowed: FEW,
    },
    Case {
        name: "60 % of the band",
        channels: 120,
        smoothed: false,
        rms_k: 0.2,
        line: |v| 6.0 * gaussian(v, 0.3, 1.3),
        inner: (-2.8, 3.4),
        outer: (-5.5, 5.5),
        allowed: FEW,
    },
    Case {
        name: "narrow: two channels",
        channels: 240,
        smoothed: false,
        rms_k: 0.1,
        line: |v| 2.0 * gaussian(v, 0.3, 0.09),
        inner: (0.15, 0.45),
        outer: (-2.0, 2.6),
        allowed: FEW,
    },
    Case {
        name: "ripple",
        channels: 480,
        smoothed: false,
        rms_k: 0.2,
        line: |v| self_absorbed(v) + 0.15 * (v * 0.6).sin(),
        inner: (-2.5, 2.5),
        outer: (-8.0, 8.0),
        allowed: FEW,
    },
];

#[test]
fn windows_hold_many_kinds_of_line() {
    for case in CASES {
        let tally = tally(&case);
        let mean = tally.report(case.name);
        assert!(tally.cut <= case.allowed.0, "{}", case.name);
        assert!(tally.too_wide <= case.allowed.1, "{}", case.name);
        assert!(tally.undetected <= FEW.0, "{}", case.name);
        if case.name != "ripple" {
            assert!((mean - 1.0).abs() < 0.03, "{}", case.name);
        }
    }
}

#[test]
fn white_noise_has_no_line_and_no_correlation() {
    let trials = 300_u32;
    let (mut lines, mut correlated, mut ratios) = (0, 0, Vec::new());
    for seed in 0..u64::from(trials) {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        let noise = with_noise(240, &white(240, &mut generator), 0.3, |_| 1.0);
        let outcome = prepare(&noise, &PrepareSettings::default(), &Expected::default());
        lines += usize::from(!matches!(outcome, Err(PrepareError::NoLine { .. })));
        let given = PrepareSettings {
            window: Some(Window {
                low_km_s: -3.0,
                high_km_s: 3.0,
            }),
            ..PrepareSettings::default()
        };
        let prepared = prepare(&noise, &given, &Expected::default()).unwrap();
        correlated += usize::from(!prepared.noise.process.is_white());
        ratios.push(prepared.noise.rms_k / 0.3);
    }
    let mean = ratios.iter().sum::<f64>() / f64::from(trials);
    let scatter =
        (ratios.iter().map(|r| (r - mean).powi(2)).sum::<f64>() / f64::from(trials - 1)).sqrt();
    println!("lines {lines}, correlated {correlated}, rms {mean:.4} +- {scatter:.4}");
    // 2 % and 5 % of 300.
    assert!(lines <= 6);
    assert!(correlated <= 15);
    assert!((mean - 1.0).abs() < 0.01);
    // The standard deviation of n values scatters by 1/sqrt(2 n) at best; 180 are line-free.
    let best = 1.0 / (2.0 * 180.0_f64).sqrt();
    assert!(scatter < 1.15 * best);
}

#[test]
fn correlation_of_smoothed_noise_is_measured() {
    let trials = 400_u32;
    let (mut rms, mut first, mut second) = (0.0, 0.0, 0.0);
    for seed in 0..u64::from(trials) {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        let noise = hanning(240, &mut generator);
        let prepared = prepare_plainly(&with_noise(240, &noise, 0.2, self_absorbed));
        let correlation = prepared.noise.process.autocorrelation(3);
        rms += prepared.noise.rms_k / 0.2 / f64::from(trials);
        first += correlation[1] / f64::from(trials);
        second += correlation[2] / f64::from(trials);
    }
    println!("rms {rms:.3}, correlation {first:.3} {second:.3}");
    // Hanning weights 1/4, 1/2, 1/4: 2/3 and 1/6 by definition.
    assert!((rms - 1.0).abs() < 0.02);
    assert!((first - 2.0 / 3.0).abs() < 0.03);
    assert!((second - 1.0 / 6.0).abs() < 0.05);
}

#[test]
fn an_undetected_thin_line_takes_the_thick_lines_window() {
    let mut generator = ChaCha8Rng::seed_from_u64(1);
    let thick = with_noise(240, &white(240, &mut generator), 0.2, self_absorbed);
    let thin = with_noise(300, &white(300, &mut generator), 0.2, |_| 0.0);
    let settings = PrepareSettings::default();
    let single = Expected::default();
    let (first, second) =
        prepare_pair((&thick, &settings, &single), (&thin, &settings, &single)).unwrap();
    // Whole channels: within one channel on the thin line's own axis.
    assert!((first.window.low_km_s - second.window.low_km_s).abs() <= CHANNEL_KM_S);
    assert!((first.window.high_km_s - second.window.high_km_s).abs() <= CHANNEL_KM_S);
    // The other way round.
    let (second, first) =
        prepare_pair((&thin, &settings, &single), (&thick, &settings, &single)).unwrap();
    assert!((first.window.low_km_s - second.window.low_km_s).abs() <= CHANNEL_KM_S);
    let error = prepare_pair((&thin, &settings, &single), (&thin, &settings, &single)).unwrap_err();
    assert_eq!(error.line, PairLine::Thick);
    assert!(matches!(error.error, PrepareError::NoLine { .. }));
    assert!(error.hint().is_some());
}

/// A multiplet of three groups as of N2H+ 1-0: offsets in round numbers, statistical weights 1, 5, 3.
fn multiplet() -> Expected {
    let component = |offset_km_s, weight| Component {
        offset_km_s,
        weight,
    };
    Expected {
        components: vec![
            component(-8.0, 1.0 / 9.0),
            component(0.0, 5.0 / 9.0),
            component(6.0, 3.0 / 9.0),
        ],
        window: None,
    }
}

#[test]
fn a_multiplets_satellites_lie_in_the_window() {
    let settings = PrepareSettings::default();
    for (rms, centre) in [(0.02, 1.0), (0.1, 1.0), (0.15, -2.0)] {
        for seed in 0..30 {
            let mut generator = ChaCha8Rng::seed_from_u64(seed);
            let line = |v: f64| -> f64 {
                multiplet()
                    .components
                    .iter()
                    .map(|one| one.weight * gaussian(v, centre + one.offset_km_s, 0.5))
                    .sum()
            };
            let noise = white(400, &mut generator);
            let prepared =
                prepare(&with_noise(400, &noise, rms, line), &settings, &multiplet()).unwrap();
            let window = prepared.window;
            assert!(
                window.low_km_s < centre - 8.3 && window.high_km_s > centre + 6.3,
                "{rms} {seed} {window:?}"
            );
            assert!(
                window.low_km_s > centre - 13.0 && window.high_km_s < centre + 11.0,
                "{rms} {seed} {window:?}"
            );
        }
    }
}

/// One of the lines of a pair: heights and centres (km/s) of what its spectrum shows, each of dispersion
/// 0.6 km/s, over noise of 0.1 K.
struct Shown<'a> {
    features: &'a [(f64, f64)],
    expected: Expected,
}

impl Shown<'_> {
    fn spectrum(&self, generator: &mut ChaCha8Rng) -> Spectrum {
        let main = [Component {
            offset_km_s: 0.0,
            weight: 1.0,
        }];
        let line = |v: f64| -> f64 {
            let one = |(index, &(height, centre)): (usize, &(f64, f64))| -> f64 {
                // The first is the line itself, with its components.
                let components: &[Component] = if index == 0 && !self.expected.components.is_empty()
                {
                    &self.expected.components
                } else {
                    &main
                };
                components
                    .iter()
                    .map(|part| height * part.weight * gaussian(v, centre + part.offset_km_s, 0.6))
                    .sum()
            };
            self.features.iter().enumerate().map(one).sum()
        };
        with_noise(600, &white(600, generator), 0.1, line)
    }
}

/// Pairs of 40 in which a window misses its line (its first feature) or holds another one's centre.
fn misplaced(thick: &Shown, thin: &Shown) -> (usize, usize) {
    let settings = PrepareSettings::default();
    let (mut missed_thick, mut missed_thin) = (0, 0);
    for seed in 0..40 {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        let spectra = (
            thick.spectrum(&mut generator),
            thin.spectrum(&mut generator),
        );
        let pair = prepare_pair(
            (&spectra.0, &settings, &thick.expected),
            (&spectra.1, &settings, &thin.expected),
        )
        .unwrap();
        let misses = |prepared: &Prepared, shown: &Shown| {
            let centre = shown.features[0].1;
            let held =
                prepared.window.contains(centre - 0.5) && prepared.window.contains(centre + 0.5);
            let others_apart = shown.features[1..]
                .iter()
                .all(|&(_, v)| !prepared.window.contains(v) && prepared.is_other_signal(v));
            usize::from(!held || !others_apart)
        };
        missed_thick += misses(&pair.0, thick);
        missed_thin += misses(&pair.1, thin);
    }
    (missed_thick, missed_thin)
}

#[test]
fn a_pair_decides_together_which_line_is_meant() {
    let single = |features| Shown {
        features,
        expected: Expected::default(),
    };
    let many = |features| Shown {
        features,
        expected: multiplet(),
    };
    let cases = [
        (
            "fainter neighbour",
            single(&[(4.0, 0.0), (2.0, 12.0)]),
            single(&[(1.0, 0.0)]),
        ),
        (
            "brighter neighbour",
            single(&[(2.0, 0.0), (4.0, 12.0)]),
            single(&[(1.0, 0.0)]),
        ),
        (
            "thin line shifted out",
            single(&[(2.0, 0.0), (4.0, 12.0)]),
            single(&[(1.0, -2.5)]),
        ),
        (
            "brighter in thin",
            single(&[(3.0, 0.0)]),
            single(&[(0.6, 0.0), (1.2, 12.0)]),
        ),
        (
            "a line of its own in each",
            single(&[(2.0, 0.0), (4.0, 12.0)]),
            single(&[(0.6, 0.0), (1.2, -14.0)]),
        ),
        (
            "two clouds, opposite orders",
            single(&[(2.0, 0.0), (4.0, 12.0)]),
            single(&[(1.2, 0.0), (0.6, 12.0)]),
        ),
        (
            "thick multiplet",
            many(&[(4.0, 0.0), (4.0, 20.0)]),
            single(&[(1.0, 0.0)]),
        ),
        (
            "thin multiplet",
            single(&[(2.0, 0.0), (4.0, -16.0)]),
            many(&[(2.0, 0.0)]),
        ),
        (
            "both multiplets",
            many(&[(4.0, 0.0), (4.0, -20.0)]),
            many(&[(2.0, 0.0)]),
        ),
    ];
    for (name, thick, thin) in cases {
        let (missed_thick, missed_thin) = misplaced(&thick, &thin);
        println!("{name}: thick {missed_thick}, thin {missed_thin} of 40");
        assert!(missed_thick <= 1 && missed_thin <= 2, "{name}");
    }
}

#[test]
fn without_a_thin_line_or_with_a_window_the_choice_is_as_before() {
    let mut generator = ChaCha8Rng::seed_from_u64(9);
    let bright_away = Shown {
        features: &[(2.0, 0.0), (4.0, 12.0)],
        expected: Expected::default(),
    };
    let thick = bright_away.spectrum(&mut generator);
    let single = Expected::default();
    let plain = PrepareSettings::default();
    let alone = prepare(&thick, &plain, &single).unwrap();
    assert!(alone.window.contains(12.0) && alone.is_other_signal(0.0));
    // No thin line, and one far from every line of the thick spectrum.
    for features in [&[] as &[(f64, f64)], &[(1.0, -20.0)]] {
        let shown = Shown {
            features,
            expected: Expected::default(),
        };
        let thin = shown.spectrum(&mut generator);
        let pair = prepare_pair((&thick, &plain, &single), (&thin, &plain, &single)).unwrap();
        assert_eq!(pair.0, alone);
    }
    // A given window stays, and what is outside is not its line.
    let given = PrepareSettings {
        window: Some(Window {
            low_km_s: 9.0,
            high_km_s: 15.0,
        }),
        ..plain.clone()
    };
    let at_zero = Shown {
        features: &[(1.0, 0.0)],
        expected: Expected::default(),
    };
    let thin = at_zero.spectrum(&mut generator);
    let pair = prepare_pair((&thick, &given, &single), (&thin, &plain, &single)).unwrap();
    assert_eq!(Some(pair.0.window), given.window);
    assert!(pair.0.is_other_signal(0.0) && !pair.0.is_other_signal(12.0));
}

#[test]
fn other_signal_is_rare_where_there_is_none() {
    let trials = 300;
    let mut raised = 0;
    for seed in 0..trials {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        let noise = white(240, &mut generator);
        let prepared = prepare_plainly(&with_noise(240, &noise, 0.2, self_absorbed));
        raised += usize::from(!prepared.other_signal.is_empty());
    }
    println!("other signal in {raised} of {trials}");
    // 2 % of 300.
    assert!(raised <= 6);
}

#[test]
fn other_signal_does_not_count_in_fits_and_is_said() {
    let (settings, single) = (PrepareSettings::default(), Expected::default());
    let lines = ["HCO+ 1-0", "H13CO+ 1-0"].map(|name| find(name).unwrap());
    let (mut chi2, mut degrees) = (0.0, 0);
    for seed in 0..5 {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        let mut show = |features| {
            Shown {
                features,
                expected: Expected::default(),
            }
            .spectrum(&mut generator)
        };
        let thick = show(&[(3.0, 0.0), (2.0, 12.0)]);
        let thin = show(&[(1.0, 0.0), (2.0, -12.0)]);
        let (thick, thin) =
            prepare_pair((&thick, &settings, &single), (&thin, &settings, &single)).unwrap();
        assert!(thick.is_other_signal(12.0) && thin.is_other_signal(-12.0));
        let shape = LineShape::new(lines[1].rest_frequency_ghz, lines[1].components.clone());
        let counted = Channels::new(&thin, shape, None, Averaging::Centre, 0.5).len();
        let left_out = thin
            .spectrum
            .velocity_km_s()
            .iter()
            .filter(|&&v| thin.is_other_signal(v))
            .count();
        assert_eq!(counted + left_out, 600);
        let everywhere = FitSettings {
            models: vec![Model::Hill],
            range: Some(FitRange::All),
            ..FitSettings::default()
        };
        let thin_fit = fit_thin(&thin, &lines[1], &everywhere, &mut Workspace::new()).unwrap();
        let line = thin_fit.line.as_ref();
        let fit = fit_pair(
            &thick,
            &thin,
            (&lines[0], &lines[1]),
            line,
            &everywhere,
            &mut Workspace::new(),
        )
        .unwrap();
        chi2 += fit.models[0].chi2;
        degrees += fit.models[0].degrees_of_freedom;
        let measures = measure(&thick, &thin, line, 0.0, &MeasureSettings::default());
        let found = cautions(&PairFacts {
            thick: &thick,
            thin: &thin,
            thin_fit: &thin_fit,
            measures: &measures,
            fit: &fit,
            judgement: Judgement::NotAsked,
            sphere: None,
        });
        let said: Vec<String> = found
            .iter()
            .filter(|one| one.code() == "other-signal")
            .map(Caution::text)
            .collect();
        let window = thick.other_signal[0];
        assert_eq!(said.len(), 2);
        assert!(said[0].contains(&format!(
            "{:.2} to {:.2} km/s",
            window.low_km_s, window.high_km_s
        )));
    }
    // Left in, the other lines add thousands. Of five times some 1100 channels chi2 scatters by 2 %, and
    // the model is no Gaussian.
    println!("chi2 {chi2:.0} of {degrees}");
    assert!((chi2 / f64::from(u32::try_from(degrees).unwrap()) - 1.0).abs() < 0.1);
}

#[test]
fn baselines_leave_the_line_alone() {
    let mut generator = ChaCha8Rng::seed_from_u64(2);
    let noise = white(240, &mut generator);
    let flat = prepare_plainly(&with_noise(240, &noise, 0.2, self_absorbed));
    let sloped = prepare_plainly(&with_noise(240, &noise, 0.2, |v| {
        self_absorbed(v) + 3.0 - 0.4 * v
    }));
    // A straight baseline takes a straight line exactly.
    assert_eq!(flat.window, sloped.window);
    for (a, b) in flat
        .spectrum
        .temperature_k()
        .iter()
        .zip(sloped.spectrum.temperature_k())
    {
        assert!((a - b).abs() < 1e-9);
    }
    let curved = with_noise(240, &noise, 0.2, |v| {
        self_absorbed(v) + 0.02 * v * v - 0.003 * v.powi(3)
    });
    let settings = PrepareSettings {
        baseline_order: Some(3),
        ..PrepareSettings::default()
    };
    let prepared = prepare(&curved, &settings, &Expected::default()).unwrap();
    assert!((prepared.noise.rms_k / 0.2 - 1.0).abs() < 0.12);
    assert_eq!(prepared.baseline.order, Some(3));
    let none = PrepareSettings {
        baseline_order: None,
        ..PrepareSettings::default()
    };
    let original = with_noise(240, &noise, 0.2, self_absorbed);
    let untouched = prepare(&original, &none, &Expected::default()).unwrap();
    assert_eq!(untouched.spectrum, original);
    assert!(
        untouched
            .baseline
            .values_k
            .iter()
            .all(|value| *value == 0.0)
    );
}

#[test]
fn the_scale_of_temperature_and_velocity_does_not_matter() {
    let mut generator = ChaCha8Rng::seed_from_u64(3);
    let original = with_noise(240, &white(240, &mut generator), 0.2, self_absorbed);
    let plain = prepare_plainly(&original);
    let bright = prepare_plainly(&original.map_temperature_k(|_, t| 1000.0 * t));
    assert_eq!(plain.window, bright.window);
    assert!((bright.noise.rms_k / plain.noise.rms_k / 1000.0 - 1.0).abs() < 1e-9);
    assert_eq!(plain.baseline.clipped, bright.baseline.clipped);
}

#[test]
fn interference_and_blank_channels_do_no_harm() {
    let mut generator = ChaCha8Rng::seed_from_u64(4);
    let noise = white(240, &mut generator);
    let clean = prepare_plainly(&with_noise(240, &noise, 0.2, self_absorbed));
    let mut spoilt: Vec<f64> = with_noise(240, &noise, 0.2, self_absorbed)
        .temperature_k()
        .to_vec();
    spoilt[20] = 50.0;
    spoilt[200] = -40.0;
    spoilt[60..70].fill(f64::NAN);
    spoilt[118] = f64::NAN;
    let prepared = prepare_plainly(&spectrum(spoilt));
    // The blank channels change the noise that the window's ends grow on: a tenth of its width.
    assert!((prepared.window.low_km_s - clean.window.low_km_s).abs() < 0.9);
    assert!((prepared.window.high_km_s - clean.window.high_km_s).abs() < 0.9);
    assert!((prepared.noise.rms_k / clean.noise.rms_k - 1.0).abs() < 0.1);
    assert!(
        prepared.spectrum.temperature_k()[60..70]
            .iter()
            .all(|t| t.is_nan())
    );
    assert!(prepared.noise.process.is_white());
}

#[test]
fn a_window_that_cuts_the_line_is_said_so() {
    let mut generator = ChaCha8Rng::seed_from_u64(5);
    let whole = with_noise(240, &white(240, &mut generator), 0.2, self_absorbed);
    assert!(!prepare_plainly(&whole).window_cuts_line);
    let given = |low_km_s, high_km_s| PrepareSettings {
        window: Some(Window {
            low_km_s,
            high_km_s,
        }),
        ..PrepareSettings::default()
    };
    let narrow = prepare(&whole, &given(-1.0, 4.0), &Expected::default()).unwrap();
    assert!(narrow.window_cuts_line && !narrow.window_automatic);
    assert_eq!(narrow.window.low_km_s, -1.0);
    // What the window leaves out of the line does not enter the baseline or the noise.
    assert!((narrow.noise.rms_k / 0.2 - 1.0).abs() < 0.15);
    let enough = prepare(&whole, &given(-5.0, 5.0), &Expected::default()).unwrap();
    assert!(!enough.window_cuts_line);
    let at_edge = with_noise(240, &white(240, &mut generator), 0.2, |v| {
        5.0 * gaussian(v, 11.5, 0.8)
    });
    assert!(prepare_plainly(&at_edge).window_cuts_line);
}

#[test]
fn rebinning_conserves_flux() {
    let line = with_noise(241, &[0.0; 241], 0.0, self_absorbed);
    let flux = |spectrum: &Spectrum| -> f64 {
        spectrum
            .temperature_k()
            .iter()
            .zip(spectrum.width_km_s())
            .map(|(t, width)| t * width)
            .sum()
    };
    for width_km_s in [0.2, 0.25, 0.3, 0.777] {
        let coarse = rebin(&line, width_km_s).unwrap();
        assert!(
            (flux(&coarse) / flux(&line) - 1.0).abs() < 1e-9,
            "{width_km_s}"
        );
        assert!(
            (coarse.velocity_km_s()[0] - 0.5 * width_km_s - (line.velocity_km_s()[0] - 0.05)).abs()
                < 1e-9
        );
    }
    let same = rebin(&line, 0.1).unwrap();
    assert_eq!(same, line);
    // Whole multiples average whole channels.
    let double = rebin(&line, 0.2).unwrap();
    assert_eq!(double.len(), 120);
    let expected = 0.5 * (line.temperature_k()[100] + line.temperature_k()[101]);
    assert!((double.temperature_k()[50] - expected).abs() < 1e-9);
    // A masked channel has no weight; a new channel without half of its width is masked.
    let holes = spectrum(
        (0..24)
            .map(|i| {
                if i == 3 || (8..12).contains(&i) {
                    f64::NAN
                } else {
                    f64::from(i)
                }
            })
            .collect(),
    );
    let coarse = rebin(&holes, 0.4).unwrap();
    assert!((coarse.temperature_k()[0] - 1.0).abs() < 1e-9);
    assert!(coarse.temperature_k()[2].is_nan());
}

#[test]
fn noise_of_rebinned_spectra_is_measured_afterwards() {
    let (mut ratio, trials) = (0.0, 100_u32);
    for seed in 0..u64::from(trials) {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        let fine = with_noise(960, &white(960, &mut generator), 0.4, self_absorbed);
        let settings = PrepareSettings {
            smooth_to_km_s: Some(0.4),
            ..PrepareSettings::default()
        };
        let prepared = prepare(&fine, &settings, &Expected::default()).unwrap();
        // Mean of four white channels.
        ratio += prepared.noise.rms_k / 0.2 / f64::from(trials);
    }
    println!("{ratio:.4}");
    assert!((ratio - 1.0).abs() < 0.02);
}

#[test]
fn errors_of_integrals_hold_after_a_baseline() {
    let settings = PrepareSettings {
        window: Some(Window {
            low_km_s: -4.0,
            high_km_s: 4.0,
        }),
        ..PrepareSettings::default()
    };
    for smoothed in [false, true] {
        let (mut values, mut stated) = (Vec::new(), 0.0);
        for seed in 0..500 {
            let mut generator = ChaCha8Rng::seed_from_u64(seed);
            let noise = if smoothed {
                hanning(160, &mut generator)
            } else {
                white(160, &mut generator)
            };
            let line = with_noise(160, &noise, 0.2, self_absorbed);
            let prepared = prepare(&line, &settings, &Expected::default()).unwrap();
            let measures = measure(&prepared, &prepared, None, 0.0, &MeasureSettings::default());
            values.push(measures.integral_thick_k_km_s.value);
            stated += measures.integral_thick_k_km_s.err / 500.0;
        }
        let mean = values.iter().sum::<f64>() / 500.0;
        let scatter = (values.iter().map(|x| (x - mean).powi(2)).sum::<f64>() / 499.0).sqrt();
        println!("smoothed {smoothed}: scatter {scatter:.4}, stated {stated:.4}");
        assert!((stated / scatter - 1.0).abs() < 0.15);
    }
}

#[test]
fn bad_settings_and_spectra_are_refused_with_numbers() {
    let mut generator = ChaCha8Rng::seed_from_u64(6);
    let line = with_noise(240, &white(240, &mut generator), 0.2, self_absorbed);
    let refuse = |spectrum: &Spectrum, settings: PrepareSettings| {
        let error = prepare(spectrum, &settings, &Expected::default()).unwrap_err();
        println!("{error}\n  hint: {:?}", error.hint());
        error
    };
    let plain = PrepareSettings::default;
    let order = PrepareSettings {
        baseline_order: Some(4),
        ..plain()
    };
    assert_eq!(
        refuse(&line, order),
        PrepareError::OrderTooHigh { order: 4 }
    );
    for (low_km_s, high_km_s) in [(50.0, 60.0), (3.0, -3.0), (f64::NAN, 3.0)] {
        let outside = PrepareSettings {
            window: Some(Window {
                low_km_s,
                high_km_s,
            }),
            ..plain()
        };
        assert!(matches!(
            refuse(&line, outside),
            PrepareError::WindowOutsideBand { .. }
        ));
    }
    let all = PrepareSettings {
        window: Some(Window {
            low_km_s: -11.5,
            high_km_s: 30.0,
        }),
        ..plain()
    };
    let PrepareError::TooFewLineFree {
        found,
        usable,
        needed,
    } = refuse(&line, all)
    else {
        panic!("another error");
    };
    assert!(found < needed && usable == 240);
    for width in [0.05, f64::NAN, -1.0] {
        let fine = PrepareSettings {
            smooth_to_km_s: Some(width),
            ..plain()
        };
        assert!(matches!(
            refuse(&line, fine),
            PrepareError::SmoothingTooFine { .. }
        ));
    }
    let coarse = PrepareSettings {
        smooth_to_km_s: Some(100.0),
        ..plain()
    };
    assert!(matches!(
        refuse(&line, coarse),
        PrepareError::SmoothingTooCoarse { .. }
    ));
    let clip = PrepareSettings {
        clip_sigma: f64::NAN,
        ..plain()
    };
    assert!(matches!(refuse(&line, clip), PrepareError::Setting { .. }));
    assert!(matches!(
        refuse(&spectrum(vec![1.5; 100]), plain()),
        PrepareError::ZeroNoise { .. }
    ));
    assert!(matches!(
        refuse(&spectrum(vec![0.0; 100]), plain()),
        PrepareError::ZeroNoise { .. }
    ));
    let noiseless = with_noise(240, &[0.0; 240], 0.0, |v| {
        if v.abs() < 3.0 { self_absorbed(v) } else { 0.0 }
    });
    assert!(matches!(
        refuse(&noiseless, plain()),
        PrepareError::ZeroNoise { .. }
    ));
    let short = with_noise(8, &white(8, &mut generator), 0.2, self_absorbed);
    assert!(matches!(
        refuse(&short, plain()),
        PrepareError::TooFewLineFree { .. }
    ));
}

#[test]
fn a_pair_without_common_velocities_is_refused() {
    let mut generator = ChaCha8Rng::seed_from_u64(7);
    let thick = with_noise(240, &white(240, &mut generator), 0.2, self_absorbed);
    let elsewhere = Spectrum::new(
        (0..240).map(|i| 100.0 + 0.1 * f64::from(i)).collect(),
        vec![CHANNEL_KM_S; 240],
        white(240, &mut generator),
    )
    .unwrap();
    let (settings, single) = (PrepareSettings::default(), Expected::default());
    let error = prepare_pair(
        (&thick, &settings, &single),
        (&elsewhere, &settings, &single),
    )
    .unwrap_err();
    assert_eq!(error.line, PairLine::Thin);
    assert!(error.to_string().starts_with("thin line: no line found"));
}

#[test]
fn channels_of_unequal_width_are_understood() {
    let mut generator = ChaCha8Rng::seed_from_u64(8);
    // Width growing by half over the band.
    let width: Vec<f64> = (0..240)
        .map(|i| 0.08 + 0.04 * f64::from(i) / 239.0)
        .collect();
    let mut edge = -12.0;
    let velocity: Vec<f64> = width
        .iter()
        .map(|w| {
            edge += w;
            edge - 0.5 * w
        })
        .collect();
    let noise = white(240, &mut generator);
    let temperature = velocity
        .iter()
        .zip(&noise)
        .map(|(&v, n)| self_absorbed(v) + 0.2 * n)
        .collect();
    let prepared = prepare_plainly(&Spectrum::new(velocity, width, temperature).unwrap());
    assert!(prepared.window.low_km_s < -2.5 && prepared.window.high_km_s > 2.5);
    assert!(prepared.window.low_km_s > -6.0 && prepared.window.high_km_s < 6.0);
    let coarse = rebin(&prepared.spectrum, 0.25).unwrap();
    assert!(coarse.width_km_s().iter().all(|w| *w == 0.25));
}

proptest::proptest! {
    #![proptest_config(proptest::prelude::ProptestConfig::with_cases(300))]

    /// Whatever the channels hold, there is a result with a positive noise or an error.
    #[test]
    fn strange_spectra_do_not_panic(
        values in proptest::collection::vec(
            proptest::prop_oneof![
                6 => -1.0..1.0_f64,
                1 => proptest::prelude::Just(0.0),
                1 => proptest::prelude::Just(f64::NAN),
                1 => -1e12..1e12_f64,
                1 => 0.0..1e-12_f64,
            ],
            1..160,
        ),
        order in 0..4_usize,
        smooth in proptest::option::of(0.1..3.0_f64),
    ) {
        let count = values.len();
        let velocity_km_s = (0..count).map(|channel| velocity(channel, count)).collect();
        if let Ok(spectrum) = Spectrum::new(velocity_km_s, vec![CHANNEL_KM_S; count], values) {
            let settings = PrepareSettings {
                baseline_order: Some(order),
                smooth_to_km_s: smooth,
                ..PrepareSettings::default()
            };
            if let Ok(prepared) = prepare(&spectrum, &settings, &multiplet()) {
                assert!(prepared.noise.rms_k > 0.0 && prepared.noise.rms_k.is_finite());
                assert!(prepared.window.low_km_s < prepared.window.high_km_s);
                let measures =
                    measure(&prepared, &prepared, None, 0.0, &MeasureSettings::default());
                assert!(measures.integral_thick_k_km_s.err >= 0.0);
            }
        }
    }
}
