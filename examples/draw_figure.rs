//! Draws the figure of an invented pair as SVG, PNG and PDF.
//!
//!     cargo run --example draw_figure -- DIRECTORY

use std::path::PathBuf;

use inrush::numeric::Estimate;
use inrush::report::figure::{Curve, PairFigure, Panel, svg_to_pdf, svg_to_png};
use inrush::report::files::write_atomically;
use inrush::spectrum::Window;

fn main() -> Result<(), Box<dyn std::error::Error>> {
    let directory: PathBuf = std::env::args_os()
        .nth(1)
        .ok_or("expected a directory as the only argument")?
        .into();
    std::fs::create_dir_all(&directory)?;
    let svg = figure().svg()?;
    let outputs = [
        ("figure.png", svg_to_png(&svg, 2000)?),
        ("figure.pdf", svg_to_pdf(&svg)?),
        ("figure.svg", svg.into_bytes()),
    ];
    for (name, bytes) in outputs {
        write_atomically(
            &directory.join(name),
            |writer| Ok(writer.write_all(&bytes)?),
        )?;
    }
    Ok(())
}

fn figure() -> PairFigure {
    let blue_peak = |v: f64| 3.2 * gauss(v, -0.35, 0.42) + 1.7 * gauss(v, 0.55, 0.34);
    let single = |v: f64| 0.9 * gauss(v, 0.02, 0.45);
    PairFigure {
        source: "Invented clump 7".to_owned(),
        thick: panel("HCO+ 1-0", blue_peak, 0.12, 1),
        thin: panel("H13CO+ 1-0", single, 0.08, 2),
        v_lsr_km_s: Some(Estimate {
            value: 0.03,
            err: 0.04,
        }),
        v_thin_km_s: Some(Estimate {
            value: 0.02,
            err: 0.05,
        }),
        posterior: None,
        numbers: vec![
            (
                "inward speed".to_owned(),
                "0.48 -0.04 +0.05 km/s".to_owned(),
            ),
            ("velocity difference".to_owned(), "-0.52 +- 0.04".to_owned()),
        ],
        cautions: vec!["Noise is correlated from channel to channel.".to_owned()],
    }
}

fn gauss(v: f64, centre: f64, sigma: f64) -> f64 {
    (-0.5 * ((v - centre) / sigma).powi(2)).exp()
}

/// A spectrum of a profile with a made-up ripple for noise, and the profile as its model.
fn panel(line_name: &str, profile: impl Fn(f64) -> f64, noise_k: f64, phase: u32) -> Panel {
    let velocity_km_s: Vec<f64> = (0..120).map(|i| -6.0 + 0.1 * f64::from(i)).collect();
    let residuals: Vec<f64> = (0..120)
        .map(|i| 1.4 * (f64::from(i * i % 97 + phase) * 2.4).sin())
        .collect();
    let temperature_k = velocity_km_s
        .iter()
        .zip(&residuals)
        .map(|(v, residual)| profile(*v) + noise_k * residual)
        .collect();
    let fine: Vec<f64> = (0..600).map(|i| -6.0 + 0.02 * f64::from(i)).collect();
    Panel {
        line_name: line_name.to_owned(),
        width_km_s: vec![0.1; velocity_km_s.len()],
        velocity_km_s,
        temperature_k,
        noise_k,
        window: Window {
            low_km_s: -1.8,
            high_km_s: 1.9,
        },
        curves: vec![Curve {
            label: "hill".to_owned(),
            temperature_k: fine.iter().map(|v| profile(*v)).collect(),
            velocity_km_s: fine,
            residuals,
        }],
    }
}
