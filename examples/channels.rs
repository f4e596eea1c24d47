//! Reads one spectrum, brings it onto the common scale and prints it as CSV.
//!
//! `cargo run --example channels -- FILE REST_GHZ [eta=0.8] [offset=-12.5] [columns=1:km/s,2:K]
//! [select=COLUMN=VALUE] [hdu=1] [beam=30] [unit=K]`
#![allow(clippy::print_stdout, clippy::print_stderr)]

use std::error::Error;
use std::path::Path;
use std::process::ExitCode;

use inrush::prepare::scale::{ScaleSettings, to_spectrum};
use inrush::read::{ReadOptions, ValueUnit, read_spectrum};
use inrush::spectrum::BeamArcsec;

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    match print_channels(&arguments) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

fn print_channels(arguments: &[String]) -> Result<(), Box<dyn Error>> {
    let [file, rest_ghz, settings @ ..] = arguments else {
        return Err("expected FILE REST_GHZ [NAME=VALUE]...".into());
    };
    let mut options = ReadOptions::default();
    let mut scale = ScaleSettings::for_line(rest_ghz.parse::<f64>()? * 1e9);
    for setting in settings {
        let (name, value) = setting.split_once('=').ok_or("expected NAME=VALUE")?;
        match name {
            "eta" => scale.eta_mb = Some(value.parse()?),
            "offset" => scale.frame_offset_km_s = Some(value.parse()?),
            "beam" => {
                let width = value.parse()?;
                scale.beam = Some(BeamArcsec {
                    major: width,
                    minor: width,
                });
            }
            "columns" => options.columns = Some(value.parse()?),
            "select" => options.select = Some(value.parse()?),
            "hdu" => options.hdu = Some(value.parse()?),
            "unit" => options.value_unit = Some(ValueUnit::parse(value)?),
            _ => return Err(format!("unknown setting `{name}`").into()),
        }
    }
    let raw = read_spectrum(Path::new(file), &options)?;
    let scaled = to_spectrum(&raw, &scale)?;
    for note in &scaled.notes {
        eprintln!("note: {note}");
    }
    println!("velocity_km_s,width_km_s,tmb_k");
    let spectrum = &scaled.spectrum;
    for channel in 0..spectrum.len() {
        println!(
            "{},{},{}",
            spectrum.velocity_km_s()[channel],
            spectrum.width_km_s()[channel],
            spectrum.temperature_k()[channel]
        );
    }
    Ok(())
}
