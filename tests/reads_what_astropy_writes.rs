//! Files written by astropy, with velocities and temperatures worked out by astropy 8.0.2 and
//! wcslib 8.6. `.ci/interop/reads_astropy.py --data tests/data/read` made both.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

use std::path::Path;

use inrush::prepare::scale::{ScaleSettings, Scaled, to_spectrum};
use inrush::read::{ReadOptions, read_spectrum};
use serde_json::Value;

const LINE_HZ: f64 = 89.188_524_7e9;
/// Where frequencies near 1e11 Hz are subtracted, c eps and a few roundings are lost.
const VELOCITY_TOLERANCE_KM_S: f64 = 2e-9;
/// Of the peak; only the order of operations differs.
const TEMPERATURE_TOLERANCE: f64 = 1e-12;

fn read(case: &Value) -> Result<Scaled, String> {
    let mut options = ReadOptions::default();
    let mut scale = ScaleSettings::for_line(LINE_HZ);
    for (name, value) in case["settings"].as_object().unwrap() {
        let value = value.as_str().unwrap();
        match name.as_str() {
            "eta" => scale.eta_mb = Some(value.parse().unwrap()),
            "offset" => scale.frame_offset_km_s = Some(value.parse().unwrap()),
            "columns" => options.columns = Some(value.parse().unwrap()),
            "select" => options.select = Some(value.parse().unwrap()),
            other => panic!("unknown setting {other}"),
        }
    }
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/read");
    let path = folder.join(case["file"].as_str().unwrap());
    let raw = read_spectrum(&path, &options).map_err(|error| error.to_string())?;
    to_spectrum(&raw, &scale).map_err(|error| error.to_string())
}

fn check(case: &Value) {
    let result = read(case);
    if let Some(text) = case["refused"].as_str() {
        let message = result.unwrap_err();
        assert!(message.contains(text), "{case}: {message}");
        return;
    }
    let spectrum = result
        .unwrap_or_else(|message| panic!("{case}: {message}"))
        .spectrum;
    let velocity = case["velocity_km_s"].as_array().unwrap();
    let temperature = case["tmb_k"].as_array().unwrap();
    assert_eq!(spectrum.len(), velocity.len(), "{case}");
    let peak = temperature
        .iter()
        .filter_map(Value::as_f64)
        .fold(0.0, |peak: f64, value| peak.max(value.abs()));
    for channel in 0..spectrum.len() {
        let expected = velocity[channel].as_f64().unwrap();
        let found = spectrum.velocity_km_s()[channel];
        assert!(
            (found - expected).abs() <= VELOCITY_TOLERANCE_KM_S,
            "{}: {found} km/s, expected {expected}",
            case["file"]
        );
        let found = spectrum.temperature_k()[channel];
        match temperature[channel].as_f64() {
            None => assert!(
                found.is_nan(),
                "{}: {found} K, expected blank",
                case["file"]
            ),
            Some(expected) => assert!(
                (found - expected).abs() <= TEMPERATURE_TOLERANCE * peak,
                "{}: {found} K, expected {expected}",
                case["file"]
            ),
        }
    }
}

#[test]
fn every_file_reads_as_astropy_reads_it() {
    let text = include_str!("data/read/expected.json");
    let cases: Vec<Value> = serde_json::from_str(text).unwrap();
    assert_eq!(cases.len(), 62);
    for case in &cases {
        check(case);
    }
}

#[test]
fn what_a_file_says_of_itself_is_kept() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/read");
    let raw = read_spectrum(
        &folder.join("table_frequency.fits.gz"),
        &ReadOptions::default(),
    )
    .unwrap();
    assert_eq!(raw.object.as_deref(), Some("invented"));
    assert_eq!(raw.rest_frequency_hz, Some(LINE_HZ));
    assert_eq!(raw.origin.format, "FITS binary table, one channel a row");
    let raw = read_spectrum(&folder.join("image_jy_beam.fits"), &ReadOptions::default()).unwrap();
    let beam = raw.beam.unwrap();
    assert!((beam.major - 30.0).abs() < 1e-12 && (beam.minor - 20.0).abs() < 1e-12);
}
