//! Whether the sphere's inward speed is right: pairs of clumps in statistical equilibrium, full mode, with
//! noise, against their truth.
//!
//! `cargo run --release --example sphere_recovery -- draw FILE PAIRS SEED [constant | free-fall]` makes
//! noiseless pairs, `... -- trapped` the same of lines that are excited by themselves, `... -- judge FILE [PAIRS] [constant | free-fall] [SHAPE_ERROR] [SNR]` adds noise and
//! infers, `... -- folder [FOLDER]` takes pairs with a truth.csv such as tests/data/spheres.
#![allow(
    clippy::print_stdout,
    clippy::print_stderr,
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss
)]

mod drawn;
mod folder;
mod trapped;

use drawn::Drawn;
use inrush::fit::clump::{ClumpPosterior, ClumpSettings, SpeedLaw, clump_posterior};
use inrush::fit::{FitSettings, fit_thin};
use inrush::line::Line;
use inrush::prepare::{Expected, PrepareSettings, prepare_pair};
use inrush::spectrum::Spectrum;
use std::error::Error;
use std::io::Write;
use std::process::ExitCode;
use std::time::Instant;

fn main() -> ExitCode {
    let arguments: Vec<String> = std::env::args().skip(1).collect();
    match run(&arguments) {
        Ok(()) => ExitCode::SUCCESS,
        Err(error) => {
            eprintln!("error: {error}");
            ExitCode::from(2)
        }
    }
}

fn law(text: Option<&String>) -> Result<SpeedLaw, Box<dyn Error>> {
    match text.map_or("constant", String::as_str) {
        "constant" => Ok(SpeedLaw::Constant),
        "free-fall" => Ok(SpeedLaw::FreeFall),
        other => Err(format!("law `{other}`, expected constant or free-fall").into()),
    }
}

fn run(arguments: &[String]) -> Result<(), Box<dyn Error>> {
    let number = |index: usize, default: f64| {
        arguments
            .get(index)
            .map_or(Ok(default), |text| text.parse::<f64>())
    };
    let name = arguments.get(1).cloned().unwrap_or_default();
    match arguments.first().map_or("", String::as_str) {
        "draw" | "trapped" => {
            let mut file = std::io::BufWriter::new(std::fs::File::create(&name)?);
            let pairs = number(2, 100.0)? as usize;
            let seed = number(3, 1.0)? as u64;
            let slope = law(arguments.get(4))?.slope();
            let drawn: Box<dyn Iterator<Item = _>> = if arguments[0] == "draw" {
                Box::new(drawn::draw(pairs, seed, slope))
            } else {
                Box::new(trapped::draw(pairs, seed, slope))
            };
            for drawn in drawn {
                writeln!(file, "{}", serde_json::to_string(&drawn?)?)?;
            }
            file.flush()?;
            Ok(())
        }
        "judge" => {
            let law = law(arguments.get(3))?;
            let settings = ClumpSettings {
                shape_error: number(4, inrush::fit::clump::SHAPE_ERROR)?,
                ..ClumpSettings::default()
            };
            let snr = number(5, 0.0)?;
            let text = std::fs::read_to_string(&name)?;
            let count = number(2, 1e9)? as usize;
            let pairs: Vec<Drawn> = text
                .lines()
                .take(count)
                .map(serde_json::from_str)
                .collect::<Result<_, _>>()?;
            let mut rows = Vec::new();
            for (index, drawn) in pairs.iter().enumerate() {
                let snr = if snr > 0.0 { snr } else { drawn.snr };
                let (thick, thin) = drawn.observed(snr, index as u64)?;
                let lines = drawn.lines()?;
                match infer(&thick, &thin, &lines, law, &settings) {
                    Ok(found) => {
                        let row = Row::new(&drawn.thick_line, &found, drawn.v_in_km_s, snr);
                        println!("{index} {} {}", drawn.text(), row.text());
                        rows.push(row);
                    }
                    Err(error) => println!("{index} {}: {error}", drawn.text()),
                }
            }
            summary("all", &rows);
            for line in ["HCO+ 1-0", "HCO+ 3-2", "HCO+ 4-3", "CS 2-1"] {
                let some: Vec<Row> = rows
                    .iter()
                    .filter(|row| row.line == line)
                    .cloned()
                    .collect();
                if !some.is_empty() {
                    summary(line, &some);
                }
            }
            Ok(())
        }
        "folder" => folder::print(&name, &ClumpSettings::default()),
        other => Err(format!("`{other}`, expected draw, judge or folder").into()),
    }
}

/// A posterior with the time that it took.
struct Found {
    posterior: ClumpPosterior,
    milliseconds: f64,
}

fn infer(
    thick: &Spectrum,
    thin: &Spectrum,
    lines: &(Line, Line),
    law: SpeedLaw,
    settings: &ClumpSettings,
) -> Result<Found, String> {
    let prepare = PrepareSettings::default();
    let expected = |line: &Line| Expected {
        components: line.components.clone(),
        window: None,
    };
    let (thick, thin) = prepare_pair(
        (thick, &prepare, &expected(&lines.0)),
        (thin, &prepare, &expected(&lines.1)),
    )
    .map_err(|error| error.to_string())?;
    let thin_fit = fit_thin(
        &thin,
        &lines.1,
        &FitSettings::default(),
        &mut inrush::fit::Workspace::new(),
    )
    .map_err(|error| error.to_string())?;
    let start = Instant::now();
    let posterior = clump_posterior(
        &thick,
        &thin,
        (&lines.0, &lines.1),
        thin_fit.line.as_ref(),
        law,
        settings,
    )
    .map_err(|error| error.to_string())?;
    Ok(Found {
        posterior,
        milliseconds: 1e3 * start.elapsed().as_secs_f64(),
    })
}

/// What a pair's posterior says against the truth.
#[derive(Clone)]
struct Row {
    line: String,
    snr: f64,
    ratio: f64,
    width: f64,
    in68: bool,
    in95: bool,
    trusted: bool,
    z: f64,
    text: String,
    milliseconds: f64,
}

impl Row {
    fn new(line: &str, found: &Found, truth: f64, snr: f64) -> Self {
        let v = found.posterior.v_in_km_s;
        let inside = |(low, high): (f64, f64)| (low..=high).contains(&truth);
        let half = 0.5 * (v.interval68.1 - v.interval68.0);
        Self {
            line: line.to_owned(),
            snr,
            ratio: v.median / truth,
            width: half / truth.abs(),
            in68: inside(v.interval68),
            in95: inside(v.interval95),
            trusted: found.posterior.quality.holds(),
            z: (v.median - truth) / half * truth.signum(),
            text: format!(
                "neff {:.0} k {:.2} h {:.2} n {} chi2 {:.0}/{} {:+.1} {:.0}/{} {:+.1} {:?} with {}",
                found.posterior.quality.effective,
                found.posterior.quality.tail_shape.unwrap_or(0.0),
                found.posterior.quality.halves,
                found.posterior.evaluations,
                found.posterior.residuals.thick.chi2,
                found.posterior.residuals.thick.channels,
                found.posterior.residuals.thick.correlation,
                found.posterior.residuals.thin.chi2,
                found.posterior.residuals.thin.channels,
                found.posterior.residuals.thin.correlation,
                found.posterior.residuals.misfit,
                found.posterior.speed_depends_on()[1].0,
            ),
            milliseconds: found.milliseconds,
        }
    }

    fn text(&self) -> String {
        format!(
            "snr {:.0} ratio {:.3} +- {:.3} z {:+.2} {} {} {:.0} ms",
            self.snr,
            self.ratio,
            self.width,
            self.z,
            if self.trusted { "ok" } else { "bad" },
            self.text,
            self.milliseconds
        )
    }
}

fn quantile(sorted: &[f64], share: f64) -> f64 {
    sorted[((sorted.len() - 1) as f64 * share).round() as usize]
}

fn summary(name: &str, rows: &[Row]) {
    let bins = [
        (0.0, 1e9),
        (0.0, 15.0),
        (15.0, 30.0),
        (30.0, 55.0),
        (55.0, 1e9),
    ];
    for (low, high) in bins {
        let some: Vec<&Row> = rows
            .iter()
            .filter(|row| row.snr >= low && row.snr < high)
            .collect();
        if some.is_empty() {
            continue;
        }
        let sorted = |value: fn(&Row) -> f64| {
            let mut values: Vec<f64> = some.iter().map(|row| value(row)).collect();
            values.sort_by(f64::total_cmp);
            values
        };
        let share = |test: fn(&Row) -> bool| {
            some.iter().filter(|row| test(row)).count() as f64 / some.len() as f64
        };
        let ratios = sorted(|row| row.ratio);
        let widths = sorted(|row| row.width);
        let times = sorted(|row| row.milliseconds);
        println!(
            "{name} S/N {low:.0} to {high:.0}: {} pairs, v/v_true median {:.3}, 16-84 % {:.3} to {:.3}; stated half-width {:.3}; in 68 % {:.3}, in 95 % {:.3}; trusted {:.3}; {:.0} ms",
            some.len(),
            quantile(&ratios, 0.5),
            quantile(&ratios, 0.16),
            quantile(&ratios, 0.84),
            quantile(&widths, 0.5),
            share(|row| row.in68),
            share(|row| row.in95),
            share(|row| row.trusted),
            quantile(&times, 0.5),
        );
    }
}
