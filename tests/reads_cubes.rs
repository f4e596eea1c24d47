//! Cubes: every axis order, celestial projections and frames, packed files, and what is refused.
//!
//! Sky positions, positions in other frames and unpacked pixels are those of astropy 8.0.2 with wcslib 8.6:
//! `.ci/interop/cubes_astropy.py --data tests/data/cubes` made them. `INRUSH_CUBES` names another folder.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

mod cubes;

use std::path::{Path, PathBuf};

use cubes::{Cards, Plan, card, image, text};
use inrush::read::cube::{Cube, SkyBeam};
use inrush::read::sky::{SkyFrame, SkyPosition};
use inrush::read::{ReadError, ReadOptions};
use inrush::spectrum::{AxisKind, BrightnessUnit, Frame};
use serde_json::Value;

fn data() -> PathBuf {
    std::env::var_os("INRUSH_CUBES").map_or_else(
        || Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/cubes"),
        PathBuf::from,
    )
}

fn json(name: &str) -> Value {
    serde_json::from_slice(&std::fs::read(data().join(name)).unwrap()).unwrap()
}

fn open(path: &Path) -> Result<Cube, ReadError> {
    Cube::open(path, &ReadOptions::default(), path.parent().unwrap())
}

fn opened(bytes: &[u8]) -> Result<Cube, ReadError> {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("cube.fits");
    std::fs::write(&path, bytes).unwrap();
    open(&path)
}

fn refused(bytes: &[u8]) -> String {
    let error = opened(bytes).unwrap_err();
    assert!(error.hint().is_some());
    let message = error.to_string();
    message.split_once("cube.fits").unwrap().1.to_owned()
}

fn frame(name: &str) -> SkyFrame {
    match name {
        "icrs" => SkyFrame::Icrs,
        "fk5" => SkyFrame::Fk5 { equinox: 2000.0 },
        "fk4" => SkyFrame::Fk4 { equinox: 1950.0 },
        "galactic" => SkyFrame::Galactic,
        other => panic!("{other}"),
    }
}

fn numbers(value: &Value) -> Vec<f64> {
    let list = value.as_array().unwrap();
    list.iter().map(|number| number.as_f64().unwrap()).collect()
}

/// Both do the same in double precision: degrees keep 1e-13, of which projections lose a few digits.
const POSITION_TOLERANCE_ARCSEC: f64 = 1e-6;
/// The same in pixels of at least 3 arcsec.
const PIXEL_TOLERANCE: f64 = 1e-6;
/// Of the FK4: the elliptic terms are taken off in another order (1e-11), and come back by iteration.
const FRAME_TOLERANCE_ARCSEC: f64 = 1e-4;

#[test]
fn pixels_are_where_astropy_has_them_in_every_projection_and_frame() {
    let cases = json("sky.json");
    let mut worst: f64 = 0.0;
    for case in cases.as_array().unwrap() {
        let name = case["name"].as_str().unwrap();
        let axes: Vec<usize> = numbers(&case["naxis"])
            .iter()
            .map(|n| *n as usize)
            .collect();
        let mut cards: Cards = vec![text("BUNIT", "K"), card("RESTFRQ", "89188524700.0")];
        for (keyword, value) in case["cards"].as_object().unwrap() {
            cards.push(match value.as_str() {
                Some(value) => text(keyword, value),
                None => card(keyword, value),
            });
        }
        let cube = opened(&image(&axes, &cards, |_| 1.0)).unwrap_or_else(|e| panic!("{name}: {e}"));
        let sky = cube.sky();
        assert_eq!(
            sky.frame(),
            frame(case["frame"].as_str().unwrap()),
            "{name}"
        );
        let places = case["pixels"].as_array().unwrap().iter().map(numbers);
        let positions = case["positions"].as_array().unwrap().iter().map(numbers);
        for (pixel, position) in places.zip(positions) {
            let expected = SkyPosition {
                frame: sky.frame(),
                longitude_deg: position[0],
                latitude_deg: position[1],
            };
            let found = sky.position([pixel[0], pixel[1]]).unwrap();
            let off = found.separation_arcsec(&expected);
            worst = worst.max(off);
            assert!(off < POSITION_TOLERANCE_ARCSEC, "{name}: {off} arcsec");
            let [x, y] = sky.pixel(expected).unwrap().unwrap();
            assert!(
                (x - pixel[0]).abs() < PIXEL_TOLERANCE,
                "{name}: {x} {pixel:?}"
            );
            assert!(
                (y - pixel[1]).abs() < PIXEL_TOLERANCE,
                "{name}: {y} {pixel:?}"
            );
        }
        let first = numbers(&case["pixels"][0]);
        for (other, position) in case["first_elsewhere"].as_object().unwrap() {
            let position = numbers(position);
            let there = SkyPosition {
                frame: frame(other),
                longitude_deg: position[0],
                latitude_deg: position[1],
            };
            let here = sky.position([first[0], first[1]]).unwrap();
            let off = here
                .converted(there.frame)
                .unwrap()
                .separation_arcsec(&there);
            assert!(
                off < FRAME_TOLERANCE_ARCSEC,
                "{name} to {other}: {off} arcsec"
            );
        }
    }
    assert!(worst > 0.0 && cases.as_array().unwrap().len() > 100);
}

#[test]
fn packed_cubes_hold_what_astropy_unpacks() {
    for (name, expected) in json("packed.json").as_object().unwrap() {
        let path = data().join(name);
        let cube = match open(&path) {
            Ok(cube) => cube,
            Err(error) => {
                // The decoder gets it wrong, so it is refused.
                assert_eq!(name, "gzip2_lossless.fits.fz", "{error}");
                let message = error.to_string();
                assert!(message.contains("by the method GZIP_2, expected RICE_1 or GZIP_1"));
                continue;
            }
        };
        assert_ne!(name, "gzip2_lossless.fits.fz");
        assert_eq!(
            (cube.width(), cube.height(), cube.channels()),
            (6, 5, 7),
            "{name}"
        );
        let mut planes = Vec::new();
        cube.planes(0..7, &mut planes).unwrap();
        for (found, expected) in planes.iter().zip(expected.as_array().unwrap()) {
            let expected = expected.as_f64().unwrap_or(f64::NAN);
            // Single precision, of values up to 3 K.
            let same = (f64::from(*found) - expected).abs() < 5e-7
                || (found.is_nan() && expected.is_nan());
            assert!(same, "{name}: {found} {expected}");
        }
        assert_eq!(
            cube.beam(),
            Some(SkyBeam {
                major_arcsec: 18.0,
                minor_arcsec: 14.4,
                angle_deg: 30.0
            })
        );
    }
}

/// A number that tells column, row and channel.
fn mark(x: usize, y: usize, channel: usize) -> f64 {
    (1000 * channel + 20 * y + x) as f64
}

#[test]
fn axes_may_stand_in_any_order_with_others_of_length_1_between() {
    let plan = Plan {
        width: 4,
        height: 3,
        channels: 5,
        ..Plan::default()
    };
    let stems = ["CTYPE", "CUNIT", "CRVAL", "CRPIX", "CDELT"];
    for order in [[1, 2, 3], [3, 1, 2], [2, 3, 1], [1, 3, 2], [3, 2, 1]] {
        for stokes in [None, Some(0), Some(1), Some(3)] {
            // The number that each axis of the plan has here.
            let mut kinds: Vec<usize> = order.to_vec();
            if let Some(at) = stokes {
                kinds.insert(at, 0);
            }
            let number = |kind: usize| kinds.iter().position(|k| *k == kind).unwrap() + 1;
            let mut cards: Cards = plan
                .cards()
                .into_iter()
                .map(|(keyword, value)| {
                    let stem = stems.iter().find(|stem| keyword.starts_with(*stem));
                    let renamed = stem.map(|stem| {
                        let kind: usize = keyword[stem.len()..].parse().unwrap();
                        format!("{stem}{}", number(kind))
                    });
                    (renamed.unwrap_or(keyword), value)
                })
                .collect();
            if stokes.is_some() {
                cards.push(text(&format!("CTYPE{}", number(0)), "STOKES"));
            }
            let lengths = [1, plan.width, plan.height, plan.channels];
            let axes: Vec<usize> = kinds.iter().map(|kind| lengths[*kind]).collect();
            let bytes = image(&axes, &cards, |index| {
                let of = |kind: usize| index[number(kind) - 1];
                mark(of(1), of(2), of(3))
            });
            let cube = opened(&bytes).unwrap();
            assert_eq!((cube.width(), cube.height(), cube.channels()), (4, 3, 5));
            let mut values = Vec::new();
            cube.spectra(1..3, &mut values).unwrap();
            for (place, value) in values.iter().enumerate() {
                let (channel, x, y) = (place % 5, place / 5 % 4, 1 + place / 20);
                assert_eq!(
                    f64::from(*value),
                    mark(x, y, channel),
                    "{order:?} {stokes:?}"
                );
            }
            cube.planes(2..4, &mut values).unwrap();
            for (place, value) in values.iter().enumerate() {
                let (x, y, channel) = (place % 4, place / 4 % 3, 2 + place / 12);
                assert_eq!(
                    f64::from(*value),
                    mark(x, y, channel),
                    "{order:?} {stokes:?}"
                );
            }
            cube.spectrum([3, 2], &mut values).unwrap();
            assert_eq!(f64::from(values[4]), mark(3, 2, 4));
        }
    }
}

#[test]
fn spectral_axes_beams_and_units_are_those_of_the_header() {
    let plan = Plan {
        object: Some("Lantern 7"),
        ..Plan::default()
    };
    let mut cards = plan.cards();
    for (keyword, value) in &mut cards {
        match keyword.as_str() {
            "CTYPE3" => *value = "'FREQ    '".into(),
            "CUNIT3" => *value = "'GHz     '".into(),
            "CRVAL3" => *value = "89.19".into(),
            "CDELT3" => *value = "-0.0001".into(),
            "BUNIT" => *value = "'mJy/beam'".into(),
            _ => {}
        }
    }
    let cube = opened(&image(&[21, 19, 5], &cards, |_| 250.0)).unwrap();
    let found = cube.description();
    assert_eq!(found.axis_kind, AxisKind::Frequency);
    assert!((found.axis[4] - 89.1896e9).abs() < 1.0);
    assert_eq!(found.unit, BrightnessUnit::JanskyPerBeam);
    assert_eq!(found.frame, Some(Frame::Lsrk));
    assert_eq!(found.object.as_deref(), Some("Lantern 7"));
    assert_eq!(found.rest_frequency_hz, Some(89.188_524_7e9));
    let mut values = Vec::new();
    cube.spectrum([0, 0], &mut values).unwrap();
    assert_eq!(values, [0.25; 5]);
}

#[test]
fn pixels_outside_the_coverage_are_blank() {
    let folder = tempfile::tempdir().unwrap();
    let path = Plan::default().write(folder.path(), "cube.fits", |[east, _], channel| {
        if east > 0.0 {
            f64::NAN
        } else if channel == 3 {
            f64::INFINITY
        } else {
            1.5
        }
    });
    let cube = open(&path).unwrap();
    let mut values = Vec::new();
    cube.spectrum([3, 4], &mut values).unwrap();
    assert!(values.iter().all(|value| value.is_nan()));
    cube.spectrum([14, 4], &mut values).unwrap();
    assert_eq!(values[2], 1.5);
    assert!(values[3].is_nan());
}

#[test]
fn images_that_are_no_cubes_of_spectra_are_refused() {
    let cards = |changes: &[(&str, &str)]| -> Cards {
        let mut cards = Plan::default().cards();
        for (keyword, value) in changes {
            match cards.iter_mut().find(|card| card.0 == *keyword) {
                Some(card) => card.1 = (*value).to_owned(),
                None => cards.push(card(keyword, value)),
            }
        }
        cards
    };
    let axes = [21, 19, 5];
    for (changes, message) in [
        (
            &[("CTYPE3", "'TIME    '")][..],
            ": HDU 0: axes RA---TAN (21), DEC--TAN (19), TIME (5), expected RA and DEC or GLON and GLAT, a spectral one, and others of length 1",
        ),
        (
            &[("CTYPE2", "'GLAT-TAN'")],
            ": HDU 0: axes RA---TAN (21), GLAT-TAN (19), VRAD (5), expected RA and DEC or GLON and GLAT, a spectral one, and others of length 1",
        ),
        (
            &[("CTYPE1", "'RA---AIT'"), ("CTYPE2", "'DEC--AIT'")],
            ": HDU 0, card CTYPE1: the projections `AIT` and `AIT`, expected TAN, SIN, CAR, SFL or GLS, on both axes",
        ),
        (
            &[("CTYPE2", "'DEC--SIN'")],
            ": HDU 0, card CTYPE1: the projections `TAN` and `SIN`, expected TAN, SIN, CAR, SFL or GLS, on both axes",
        ),
        (
            &[("CTYPE3", "'WAVE    '")],
            ": HDU 0, card CTYPE3: axis type `WAVE`, expected FREQ, VRAD, VOPT or VELO",
        ),
        (
            &[("PV2_1", "0.02")],
            ": HDU 0, card PV2_1: 0.02, expected 0: projections without parameters are read",
        ),
        (
            &[("PC3_1", "0.1")],
            ": HDU 0, card PC3_1: 0.1, expected 0: sky axes independent of the others",
        ),
        (
            &[("CDELT1", "0.0")],
            ": HDU 0, card CDELT1: a matrix [[0.0, -0.0], [0.0, 0.0025]] without an inverse, expected two axes that span the sky",
        ),
        (
            &[("CRVAL2", "-131.0")],
            ": HDU 0, card CRVAL2: -131, expected a latitude from -90 to 90 degrees",
        ),
        (
            &[("RADESYS", "'GAPPT   '")],
            ": HDU 0, card RADESYS: `GAPPT`, expected ICRS, FK5 or FK4",
        ),
        (
            &[("CUNIT1", "'hour    '")],
            ": HDU 0, card CUNIT1: `hour`, expected deg, arcmin, arcsec or rad",
        ),
        (
            &[("BUNIT", "'erg     '")],
            ": HDU 0, card BUNIT: unknown unit `erg`, expected one of ",
        ),
    ] {
        let found = refused(&image(&axes, &cards(changes), |_| 1.0));
        assert!(found.starts_with(message), "{found}\n{message}");
    }
    let text = Cube::open(
        "tests/reads_cubes.rs".as_ref(),
        &ReadOptions::default(),
        ".".as_ref(),
    );
    let message = text.unwrap_err().to_string();
    assert!(message.contains("expected FITS"), "{message}");
}

#[test]
fn sizes_in_headers_are_checked_against_the_file() {
    let bytes = image(&[21, 19, 5], &Plan::default().cards(), |_| 1.0);
    let found = refused(&bytes[..bytes.len() - 2880]);
    assert!(
        found.contains("need 7980 bytes of data, but the file holds 5760"),
        "{found}"
    );
    let with = |from: &str, to: &str| {
        let at = bytes
            .windows(from.len())
            .position(|window| window == from.as_bytes());
        let mut changed = bytes.clone();
        changed[at.unwrap()..][..to.len()].copy_from_slice(to.as_bytes());
        changed
    };
    let huge = with(
        "NAXIS1  =                   21",
        "NAXIS1  =     9000000000000000",
    );
    assert!(refused(&huge).contains("bytes of data, but the file holds"));

    // Of a packed image: rows, tiles, arrays.
    let packed = std::fs::read(data().join("rice_plane_tiles.fits.fz")).unwrap();
    let change = |keyword: &str, value: &str| {
        let start = format!("{keyword:<8}=");
        let at = packed
            .windows(start.len())
            .position(|window| window == start.as_bytes())
            .unwrap();
        let mut changed = packed.clone();
        changed[at + 10..at + 30].copy_from_slice(format!("{value:>20}").as_bytes());
        changed
    };
    for (keyword, value, message) in [
        ("ZNAXIS3", "70", "7 rows, expected 70, one a tile"),
        (
            "ZNAXIS1",
            "0",
            "card ZNAXIS1: 0, expected a whole number from 1",
        ),
        ("ZTILE1", "5", "7 rows, expected 14, one a tile"),
        ("PCOUNT", "99999999", "bytes of data, but the file holds"),
    ] {
        let found = refused(&change(keyword, value));
        assert!(found.contains(message), "{keyword}: {found}");
    }
    let mut tall = change("ZNAXIS1", "600000000");
    let at = tall.windows(9).position(|w| w == b"ZTILE1  =").unwrap();
    tall[at + 10..at + 30].copy_from_slice(format!("{:>20}", "600000000").as_bytes());
    assert!(
        refused(&tall).contains("pixels, expected at most"),
        "{}",
        refused(&tall)
    );
    // Cut before the end of its data (the last block holds them), a packed cube is an error, never a panic or
    // a wrong value.
    for cut in (0..packed.len() - 2880).step_by(719) {
        assert!(opened(&packed[..cut]).is_err(), "{cut}");
    }
}
