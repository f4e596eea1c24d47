//! Two cubes at one beam on one grid: flux and widths of sources, coverage, and what is refused.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

mod cubes;

use cubes::Plan;
use inrush::grid::cubes::{CubeError, CubeNote, CubePair, CubePairSettings, pair};
use inrush::read::ReadOptions;
use inrush::read::cube::{Cube, SkyBeam};
use std::path::Path;

/// FWHM of a Gaussian in its standard deviation.
const FWHM: f64 = 2.354_820_045_030_949;

/// Covariance (east, north) of a beam, arcsec^2.
fn covariance([major, minor, angle]: [f64; 3]) -> [f64; 3] {
    let (sin, cos) = angle.to_radians().sin_cos();
    let [a, b] = [major, minor].map(|width| (width / FWHM).powi(2));
    [
        a * sin * sin + b * cos * cos,
        (a - b) * sin * cos,
        a * cos * cos + b * sin * sin,
    ]
}

/// A point source of 1 K arcsec^2 at an offset, seen with a beam.
fn point(beam: [f64; 3], at: [f64; 2]) -> impl Fn([f64; 2], usize) -> f64 {
    let [xx, xy, yy] = covariance(beam);
    let determinant = xx * yy - xy * xy;
    move |[east, north], channel| {
        let (x, y) = (east - at[0], north - at[1]);
        let form = (yy * x * x - 2.0 * xy * x * y + xx * y * y) / determinant;
        let height = 1.0 / (2.0 * std::f64::consts::PI * determinant.sqrt());
        (1 + channel) as f64 * height * (-0.5 * form).exp()
    }
}

fn joined(thick: &Path, thin: &Path) -> Result<CubePair, CubeError> {
    joined_with(thick, thin, &CubePairSettings::default())
}

fn joined_with(
    thick: &Path,
    thin: &Path,
    settings: &CubePairSettings,
) -> Result<CubePair, CubeError> {
    let scratch = thick.parent().unwrap();
    let open = |path: &Path| Cube::open(path, &ReadOptions::default(), scratch).unwrap();
    pair(open(thick), open(thin), settings, scratch)
}

/// Sum over pixels times pixel area, middle and covariance (east, north) of a plane, within 62 arcsec of a
/// place: 4.5 dispersions of the sources here, beyond which rounding would weigh more than they do.
fn moments(plan: &Plan, plane: &[f32], about: [f64; 2]) -> (f64, [f64; 2], [f64; 3]) {
    let pixels: Vec<([f64; 2], f64)> = plane
        .iter()
        .enumerate()
        .map(|(index, value)| {
            let offsets = plan.offsets(index % plan.width, index / plan.width);
            (offsets, f64::from(*value))
        })
        .filter(|(at, _)| (at[0] - about[0]).hypot(at[1] - about[1]) < 62.0)
        .collect();
    let sum: f64 = pixels.iter().map(|(_, value)| value).sum();
    let mean = |of: &dyn Fn(&[f64; 2]) -> f64| {
        pixels.iter().map(|(at, value)| value * of(at)).sum::<f64>() / sum
    };
    let middle = [mean(&|at| at[0]), mean(&|at| at[1])];
    let spread = [
        mean(&|at| (at[0] - middle[0]).powi(2)),
        mean(&|at| (at[0] - middle[0]) * (at[1] - middle[1])),
        mean(&|at| (at[1] - middle[1]).powi(2)),
    ];
    (sum * plan.pixel_arcsec.powi(2), middle, spread)
}

/// Widths along the principal axes, arcsec.
fn widths([xx, xy, yy]: [f64; 3]) -> [f64; 2] {
    let radius = (0.5 * (xx - yy)).hypot(xy);
    [0.5 * (xx + yy) + radius, 0.5 * (xx + yy) - radius].map(|variance| FWHM * variance.sqrt())
}

#[test]
fn sources_keep_flux_place_and_the_common_beams_widths() {
    let folder = tempfile::tempdir().unwrap();
    // Grids from a third of the beam down, shifted by parts of a pixel.
    let coarse = Plan {
        width: 41,
        height: 37,
        beam: Some([32.0, 28.0, 65.0]),
        ..Plan::default()
    };
    for (pixel_arcsec, size, beam, shift) in [
        (4.0, 92, [20.0, 16.0, -30.0], [0.3, -0.45]),
        (9.0, 41, [27.0, 27.0, 0.0], [0.5, 0.5]),
        (7.3, 50, [31.0, 27.5, 62.0], [0.21, 0.77]),
        (9.0, 41, [22.0, 12.0, 64.0], [0.0, 0.0]),
    ] {
        let fine = Plan {
            width: size,
            height: size - 2,
            pixel_arcsec,
            beam: Some(beam),
            shift,
            ..Plan::default()
        };
        let at = [13.0, -21.0];
        let target = coarse.beam.unwrap();
        let thick = coarse.write(folder.path(), "thick.fits", point(target, at));
        let thin = fine.write(folder.path(), "thin.fits", point(beam, at));
        let pair = joined(&thick, &thin).unwrap();
        assert_eq!((pair.thin.width(), pair.thin.height()), (41, 37));
        assert!(matches!(pair.notes[0], CubeNote::Convolved { .. }));
        let (mut ours, mut theirs) = (Vec::new(), Vec::new());
        for channel in [0, 4] {
            pair.thin.planes(channel..channel + 1, &mut ours).unwrap();
            pair.thick
                .planes(channel..channel + 1, &mut theirs)
                .unwrap();
            let (flux, middle, spread) = moments(&coarse, &ours, at);
            let height = (1 + channel) as f64;
            // The bars: flux within 0.1 %, widths within 1 %.
            assert!(
                (flux / height - 1.0).abs() < 1e-3,
                "{pixel_arcsec}: flux {flux}"
            );
            for (found, wanted) in widths(spread).iter().zip(widths(covariance(target))) {
                assert!((found / wanted - 1.0).abs() < 0.01, "{found} {wanted}");
            }
            for axis in 0..2 {
                // A thousandth of the beam.
                assert!((middle[axis] - at[axis]).abs() < 0.03, "{middle:?}");
            }
            // Pixel by pixel what the other cube shows, to 0.3 % of the peak: what the kernel loses on pixels
            // of a third of a beam. Pixels of three quarters of the beam's minor axis do not hold all of it.
            let coarse_pixels = pixel_arcsec > 0.5 * beam[1];
            let limit = if coarse_pixels { 0.004 } else { 0.003 };
            let peak = theirs.iter().fold(0.0_f32, |a, b| a.max(*b));
            for (a, b) in ours.iter().zip(&theirs) {
                // the other grid may end before this one
                let outside = a.is_nan() && *b < 1e-3 * peak;
                assert!(outside || (a - b).abs() < limit * peak, "{a} {b} {peak}");
            }
        }
    }
}

#[test]
fn the_thick_line_is_moved_where_its_beam_is_the_finer() {
    let folder = tempfile::tempdir().unwrap();
    let wide = Plan {
        beam: Some([40.0, 40.0, 0.0]),
        pixel_arcsec: 12.0,
        ..Plan::default()
    };
    let thick = Plan::default().write(folder.path(), "thick.fits", |_, _| 2.0);
    let thin = wide.write(folder.path(), "thin.fits", |_, _| 1.0);
    let pair = joined(&thick, &thin).unwrap();
    assert_eq!(pair.beam.major_arcsec, 40.0);
    assert_eq!(pair.thick.sky(), pair.thin.sky());
    let words: Vec<String> = pair.notes.iter().map(ToString::to_string).collect();
    assert!(words[0].ends_with(
        "thick.fits: convolved from a beam of 27.00 x 27.00 arcsec to 40.00 x 40.00 arcsec"
    ));
    assert!(words[1].contains("thick.fits: interpolated onto the pixels of "));
    let mut values = Vec::new();
    pair.thick.spectra(9..10, &mut values).unwrap();
    // A uniform sky stays uniform, up to the edge of the coverage (84 of 90 arcsec).
    let row: Vec<f32> = values.chunks_exact(5).map(|spectrum| spectrum[0]).collect();
    for (x, value) in row.iter().enumerate() {
        let inside = (3..18).contains(&x);
        assert_eq!(value.is_finite(), inside, "{x}");
        assert!(!inside || (value - 2.0).abs() < 1e-5);
    }
}

#[test]
fn cubes_of_one_grid_and_beam_stay_as_they_are() {
    let folder = tempfile::tempdir().unwrap();
    let value = |[east, north]: [f64; 2], channel: usize| {
        if east > 60.0 {
            f64::NAN
        } else {
            east + 0.01 * north + channel as f64
        }
    };
    let thick = Plan::default().write(folder.path(), "thick.fits", value);
    let thin = Plan::default().write(folder.path(), "thin.fits", value);
    let pair = joined(&thick, &thin).unwrap();
    assert!(pair.notes.is_empty());
    let (mut one, mut other) = (Vec::new(), Vec::new());
    pair.thick.planes(0..5, &mut one).unwrap();
    pair.thin.planes(0..5, &mut other).unwrap();
    assert!(
        one.iter()
            .zip(&other)
            .all(|(a, b)| a.to_bits() == b.to_bits())
    );
}

#[test]
fn cubes_in_different_frames_meet_on_the_sky() {
    let folder = tempfile::tempdir().unwrap();
    // The same position in galactic coordinates, by astropy 8.0.2:
    // SkyCoord(210.5, -31.25, unit="deg").galactic
    let galactic = [320.204_583_965_635_15, 29.244_064_413_369_26];
    let mut cards = Plan {
        centre_deg: galactic,
        width: 61,
        height: 61,
        ..Plan::default()
    }
    .cards();
    for (keyword, value) in &mut cards {
        match keyword.as_str() {
            "CTYPE1" => *value = "'GLON-TAN'".into(),
            "CTYPE2" => *value = "'GLAT-TAN'".into(),
            _ => {}
        }
    }
    let source = |x: f64, y: f64| (-(x * x + y * y) / 800.0).exp();
    let bytes = cubes::image(&[61, 61, 5], &cards, |index| {
        source(
            9.0 * (index[0] as f64 - 30.0),
            9.0 * (index[1] as f64 - 30.0),
        )
    });
    let thin = folder.path().join("thin.fits");
    std::fs::write(&thin, bytes).unwrap();
    let thick = Plan::default().write(folder.path(), "thick.fits", |[east, north], _| {
        source(east, north)
    });
    let pair = joined(&thick, &thin).unwrap();
    let (mut one, mut other) = (Vec::new(), Vec::new());
    pair.thick.planes(0..1, &mut one).unwrap();
    pair.thin.planes(0..1, &mut other).unwrap();
    for (a, b) in one.iter().zip(&other) {
        // Of the peak, 1: a source of 47 arcsec on pixels of 9.
        assert!((a - b).abs() < 1e-3, "{a} {b}");
    }
}

#[test]
fn cubes_that_do_not_belong_together_are_refused() {
    let folder = tempfile::tempdir().unwrap();
    let plan = Plan::default();
    let write = |name: &str, plan: Plan| plan.write(folder.path(), name, |_, _| 1.0);
    let thick = write("thick.fits", plan.clone());
    let message = |thin: &Path, settings: &CubePairSettings| {
        let error = joined_with(&thick, thin, settings).unwrap_err();
        assert!(error.hint().is_some());
        error.to_string()
    };
    let default = CubePairSettings::default();

    let away = write(
        "away.fits",
        Plan {
            centre_deg: [210.5, -31.0],
            ..plan.clone()
        },
    );
    let found = message(&away, &default);
    assert!(
        found.contains("have no pixel in common (their centres are 900 arcsec apart)"),
        "{found}"
    );

    let bare = write(
        "bare.fits",
        Plan {
            beam: None,
            ..plan.clone()
        },
    );
    assert!(
        message(&bare, &default)
            .ends_with("bare.fits: no beam (BMAJ), expected one: cubes are compared at one beam")
    );
    let given = CubePairSettings {
        beams: [
            None,
            Some(SkyBeam {
                major_arcsec: 27.0,
                minor_arcsec: 27.0,
                angle_deg: 0.0,
            }),
        ],
        ..CubePairSettings::default()
    };
    assert!(joined_with(&thick, &bare, &given).is_ok());

    let crossed = write(
        "crossed.fits",
        Plan {
            beam: Some([30.0, 20.0, 0.0]),
            ..plan.clone()
        },
    );
    let found = message(&crossed, &default);
    assert!(
        found.contains("expected one to be the wider in every direction"),
        "{found}"
    );

    let none = write(
        "none.fits",
        Plan {
            beam: Some([27.0, 0.0, 0.0]),
            ..plan.clone()
        },
    );
    assert!(message(&none, &default).contains("a beam of 27 x 0 arcsec"));

    let named = |name: &str, object: &'static str| {
        write(
            name,
            Plan {
                object: Some(object),
                ..plan.clone()
            },
        )
    };
    let (one, other) = (
        named("one.fits", "Lantern 7"),
        named("other.fits", "Lantern 9"),
    );
    let strict = CubePairSettings {
        one_object: true,
        ..CubePairSettings::default()
    };
    let error = joined_with(&one, &other, &strict).unwrap_err().to_string();
    assert!(
        error.starts_with("`Lantern 7` (") && error.contains("expected one source"),
        "{error}"
    );
    let same = named("same.fits", "LANTERN-7");
    assert!(joined_with(&one, &same, &strict).is_ok());
    assert!(joined_with(&one, &other, &default).is_ok());
}
