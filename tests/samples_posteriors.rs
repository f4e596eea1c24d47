//! Draws, means, deviations and integrals of densities whose answers are known.

#![allow(clippy::unwrap_used)]

use inrush::numeric::sampling::{
    Density, Draws, ImportanceSettings, MOST_DIMENSIONS, Point, ascend, sample,
};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::SeedableRng;

fn point(values: &[f64]) -> Point {
    let mut point = [0.0; MOST_DIMENSIONS];
    point[..values.len()].copy_from_slice(values);
    point
}

fn draws(
    density: &mut impl Density,
    starts: &[&[f64]],
    scales: &[f64],
    (seed, effective): (u64, f64),
) -> Draws {
    let peaks: Vec<_> = starts
        .iter()
        .map(|start| ascend(density, &point(start), &point(scales), 60).unwrap())
        .collect();
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    let settings = ImportanceSettings {
        effective,
        most_rounds: 60,
        round: 1000,
        ..ImportanceSettings::default()
    };
    sample(density, &peaks, &[], &settings, &mut generator).unwrap()
}

/// The Gaussian line of `tests/data/gaussian-line`.
struct GaussianLine {
    data: Vec<f64>,
}

/// Flat priors: peak, centre, full width.
const BOX: [(f64, f64); 3] = [(0.0, 5.0), (-5.0, 5.0), (0.1, 5.0)];
const NOISE: f64 = 0.1;

fn gaussian(peak: f64, centre: f64, width: f64, v: f64) -> f64 {
    peak * (-4.0 * 2f64.ln() * ((v - centre) / width).powi(2)).exp()
}

fn velocity(channel: usize) -> f64 {
    -5.0 + 0.1 * channel as f64
}

impl GaussianLine {
    fn new() -> Self {
        let data = (0..101)
            .map(|i| {
                let phase = i as f64;
                let noise = 0.07 * ((1.0 + 12.9898 * phase).sin() + (2.0 + 78.233 * phase).cos());
                gaussian(1.2, 0.35, 0.8, velocity(i)) + noise
            })
            .collect();
        Self { data }
    }
}

impl Density for GaussianLine {
    fn dimensions(&self) -> usize {
        3
    }

    fn ln(&mut self, point: &Point) -> f64 {
        if BOX
            .iter()
            .zip(point)
            .any(|((low, high), x)| x < low || x > high)
        {
            return f64::NEG_INFINITY;
        }
        let chi2: f64 = self
            .data
            .iter()
            .enumerate()
            .map(|(i, datum)| {
                let model = gaussian(point[0], point[1], point[2], velocity(i));
                ((model - datum) / NOISE).powi(2)
            })
            .sum();
        let volume: f64 = BOX.iter().map(|(low, high)| high - low).product();
        -0.5 * chi2 - volume.ln()
    }
}

/// Means, deviations and evidence from a fine grid over the three parameters
/// (`tests/data/gaussian-line`); within 0.02 deviations, 2 % and 0.05.
#[test]
fn a_gaussian_line_has_the_moments_and_evidence_of_a_grid() {
    let mut line = GaussianLine::new();
    // the first channels as the oracle's source prints them
    assert!((line.data[0] - 0.029_772_690_378_252_78).abs() < 1e-14);
    assert!((line.data.iter().sum::<f64>() - 10.135_279_331_351_004).abs() < 1e-10);
    let expected = [
        (1.108_884_230_700_699_4, 0.047_795_319_193_161_566),
        (0.352_728_830_958_214_2, 0.018_607_645_231_742_673),
        (0.886_692_369_684_709_9, 0.044_655_929_554_773_68),
    ];
    for seed in 1..=3 {
        let draws = draws(
            &mut line,
            &[&[1.0, 0.2, 1.0]],
            &[1.0, 1.0, 1.0],
            (seed, 30_000.0),
        );
        assert!(draws.quality.holds(), "{:?}", draws.quality);
        for (coordinate, (mean, deviation)) in expected.into_iter().enumerate() {
            let (found, spread) = draws.moments(|point| point[coordinate]);
            assert!((found - mean).abs() < 0.02 * deviation, "{found} {mean}");
            assert!(
                (spread / deviation - 1.0).abs() < 0.02,
                "{spread} {deviation}"
            );
        }
        let ln_evidence = -35.763_379_782_901_54;
        assert!(
            (draws.ln_integral - ln_evidence).abs() < 0.05,
            "{}",
            draws.ln_integral
        );
        assert!(draws.ln_integral_err < 0.02);
    }
}

/// Two normal peaks of deviations 0.3 and 0.5 in four coordinates, with shares 0.8 and 0.2.
struct TwoPeaks;

impl Density for TwoPeaks {
    fn dimensions(&self) -> usize {
        4
    }

    fn ln(&mut self, point: &Point) -> f64 {
        let peak = |share: f64, centre: f64, deviation: f64| -> f64 {
            let square: f64 = point[..4].iter().map(|x| (x - centre).powi(2)).sum();
            share * (-0.5 * square / (deviation * deviation)).exp() / deviation.powi(4)
        };
        let norm = std::f64::consts::TAU.powi(2);
        ((peak(0.8, -2.0, 0.3) + peak(0.2, 2.0, 0.5)) / norm).ln()
    }
}

#[test]
fn two_peaks_get_their_shares() {
    let draws = draws(
        &mut TwoPeaks,
        &[&[-1.8; 4], &[1.8; 4]],
        &[0.3; 4],
        (4, 5000.0),
    );
    let (share, _) = draws.moments(|point| f64::from(u8::from(point[0] > 0.0)));
    assert!((share - 0.2).abs() < 0.02, "{share}");
    assert!(draws.ln_integral.abs() < 0.03, "{}", draws.ln_integral);
}

/// A bent valley: x normal, y normal about x^2 with deviation 1, z normal.
struct Valley;

impl Density for Valley {
    fn dimensions(&self) -> usize {
        3
    }

    fn ln(&mut self, point: &Point) -> f64 {
        let y = point[1] - point[0] * point[0];
        -0.5 * (point[0] * point[0] + y * y + point[2] * point[2])
    }
}

/// Its integral, mean and variance follow by hand: (2 pi)^1.5, E(y) = 1, E(x^2) = 1.
#[test]
fn a_bent_valley_is_followed() {
    let draws = draws(&mut Valley, &[&[0.5, 0.5, 0.5]], &[1.0; 3], (5, 5000.0));
    let expected = 1.5 * std::f64::consts::TAU.ln();
    assert!(
        (draws.ln_integral - expected).abs() < 0.05,
        "{} {expected}",
        draws.ln_integral
    );
    let (y, _) = draws.moments(|point| point[1]);
    let (x, deviation) = draws.moments(|point| point[0]);
    assert!((y - 1.0).abs() < 0.1, "{y}");
    assert!(
        x.abs() < 0.06 && (deviation - 1.0).abs() < 0.06,
        "{x} {deviation}"
    );
}

#[test]
fn the_same_seed_gives_the_same_draws_and_another_others() {
    let of = |seed| draws(&mut Valley, &[&[0.5, 0.5, 0.5]], &[1.0; 3], (seed, 5000.0));
    assert_eq!(of(1), of(1));
    assert_ne!(of(1).points, of(2).points);
}

/// A proposal about one of two far peaks cannot know of the other; one about a tail is found out.
#[test]
fn draws_about_the_wrong_place_are_flagged() {
    struct FarPeak;
    impl Density for FarPeak {
        fn dimensions(&self) -> usize {
            4
        }
        fn ln(&mut self, point: &Point) -> f64 {
            point[..4]
                .iter()
                .map(|x| -0.5 * ((x - 9.0) / 0.01).powi(2))
                .sum()
        }
    }
    let mut generator = ChaCha8Rng::seed_from_u64(6);
    // no ascent: the scatter is that of a start far away
    let peak = inrush::numeric::sampling::Peak {
        point: point(&[0.0; 4]),
        ln: 0.0,
        scatter: {
            let mut unit = [[0.0; MOST_DIMENSIONS]; MOST_DIMENSIONS];
            for (i, row) in unit.iter_mut().enumerate().take(4) {
                row[i] = 1.0;
            }
            unit
        },
    };
    let settings = ImportanceSettings {
        most_rounds: 2,
        ..ImportanceSettings::default()
    };
    let draws = sample(&mut FarPeak, &[peak], &[], &settings, &mut generator).unwrap();
    assert!(!draws.quality.holds(), "{:?}", draws.quality);
}

#[test]
fn equal_weight_draws_have_the_weighted_means() {
    let draws = draws(
        &mut TwoPeaks,
        &[&[-1.8; 4], &[1.8; 4]],
        &[0.3; 4],
        (7, 5000.0),
    );
    let mut generator = ChaCha8Rng::seed_from_u64(8);
    let chosen = draws.equal(2000, &mut generator);
    let share = chosen
        .iter()
        .filter(|index| draws.points[**index][0] > 0.0)
        .count();
    let (weighted, _) = draws.moments(|point| f64::from(u8::from(point[0] > 0.0)));
    // four standard errors of a share of 0.2 among 2000
    assert!((share as f64 / 2000.0 - weighted).abs() < 4.0 * (0.2f64 * 0.8 / 2000.0).sqrt());
}
