//! What slab models make of collapsing spheres: fitted over true speed against optical depth, speed over
//! dispersion and signal-to-noise ratio.
//!
//! `cargo run --release --example slab_bias -- PAIRS SEED FOLDER` draws spheres (as
//! `sphere_recovery -- trapped` does), fits both slab models by least squares, prints the table and writes
//! `slab-bias.svg` and `slab-bias.png`.
#![allow(clippy::print_stdout, clippy::print_stderr)]

#[path = "../sphere_recovery/drawn.rs"]
#[allow(
    dead_code,
    reason = "the other example draws in statistical equilibrium too"
)]
mod drawn;
mod figure;
#[path = "../sphere_recovery/trapped.rs"]
mod trapped;

use drawn::Drawn;
use inrush::fit::{FitSettings, Workspace, fit_pair, fit_thin};
use inrush::line::Line;
use inrush::model::Model;
use inrush::prepare::{Expected, PrepareSettings, prepare_pair};
use inrush::report::figure::svg_to_png;
use inrush::report::files::write_atomically;
use std::error::Error;
use std::path::PathBuf;
use std::process::ExitCode;

/// The models, in the order of their columns.
const MODELS: [(Model, &str); 2] = [(Model::Hill, "hill"), (Model::TwoLayer, "two layers")];

/// Fitted over true speed of a pair by both models, and what it may depend on.
struct Found {
    ratios: [Option<f64>; 2],
    depth: f64,
    speed: f64,
    snr: f64,
}

/// One dependence: its name and the ends of its groups.
struct Dependence {
    name: &'static str,
    of: fn(&Found) -> f64,
    ends: [f64; 5],
}

const DEPENDENCES: [Dependence; 3] = [
    Dependence {
        name: "optical depth along a radius",
        of: |found| found.depth,
        ends: [3.0, 8.0, 20.0, 60.0, 200.0],
    },
    Dependence {
        name: "abs(v_in) over dispersion",
        of: |found| found.speed,
        ends: [0.1, 0.2, 0.4, 0.7, 1.3],
    },
    Dependence {
        name: "signal-to-noise ratio of the thick line",
        of: |found| found.snr,
        ends: [10.0, 18.0, 32.0, 56.0, 100.0],
    },
];

/// 16 %, median and 84 % of a group, and how many pairs it has.
#[derive(Clone, Copy, Debug)]
pub struct Group {
    low: f64,
    high: f64,
    /// A value a model.
    spread: [Option<[f64; 3]>; 2],
    pairs: usize,
}

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

fn run(arguments: &[String]) -> Result<(), Box<dyn Error>> {
    let [pairs, seed, folder] = arguments else {
        return Err("expected PAIRS SEED FOLDER".into());
    };
    let folder = PathBuf::from(folder);
    std::fs::create_dir_all(&folder)?;
    let mut found = Vec::new();
    for (index, drawn) in trapped::draw(pairs.parse()?, seed.parse()?, 0.0).enumerate() {
        found.push(fitted(&drawn?, index as u64)?);
    }
    println!("| | pairs | hill: median (16 to 84 %) | two layers: median (16 to 84 %) |");
    println!("| --- | --- | --- | --- |");
    row("all", &groups(&found, |_| 1.0, &[0.0, 2.0])[0]);
    let mut panels = Vec::new();
    for dependence in &DEPENDENCES {
        let groups = groups(&found, dependence.of, &dependence.ends);
        for group in &groups {
            let name = format!("{}, {} to {}", dependence.name, group.low, group.high);
            row(&name, group);
        }
        panels.push((dependence.name, groups));
    }
    let svg = figure::svg(&panels);
    let png = svg_to_png(&svg, 2000)?;
    for (name, bytes) in [("slab-bias.svg", svg.as_bytes()), ("slab-bias.png", &png)] {
        write_atomically(&folder.join(name), |writer| Ok(writer.write_all(bytes)?))?;
    }
    Ok(())
}

fn fitted(drawn: &Drawn, seed: u64) -> Result<Found, Box<dyn Error>> {
    let (thick, thin) = drawn.observed(drawn.snr, seed)?;
    let lines = drawn.lines()?;
    let prepare = PrepareSettings::default();
    let expected = |line: &Line| Expected {
        components: line.components.clone(),
        window: None,
    };
    let (thick, thin) = prepare_pair(
        (&thick, &prepare, &expected(&lines.0)),
        (&thin, &prepare, &expected(&lines.1)),
    )?;
    let settings = FitSettings::default();
    let mut workspace = Workspace::new();
    let thin_fit = fit_thin(&thin, &lines.1, &settings, &mut workspace)?;
    let fit = fit_pair(
        &thick,
        &thin,
        (&lines.0, &lines.1),
        thin_fit.line.as_ref(),
        &settings,
        &mut workspace,
    )?;
    let ratio = |(model, _): &(Model, &str)| {
        let own = fit.models.iter().find(|fit| fit.model == *model)?;
        let usable = own.converged() && own.determined();
        let v_in = own.estimate("v_in_km_s").filter(|_| usable)?;
        Some(v_in.value / drawn.v_in_km_s)
    };
    Ok(Found {
        ratios: [ratio(&MODELS[0]), ratio(&MODELS[1])],
        depth: drawn.depth,
        speed: drawn.v_in_km_s.abs() / drawn.sigma_km_s,
        snr: drawn.snr,
    })
}

fn groups(found: &[Found], of: fn(&Found) -> f64, ends: &[f64]) -> Vec<Group> {
    let within = |low: f64, high: f64| {
        let inside = |one: &&Found| (low..high).contains(&of(one));
        let some: Vec<&Found> = found.iter().filter(inside).collect();
        let spread = |model: usize| {
            let mut ratios: Vec<f64> = some.iter().filter_map(|one| one.ratios[model]).collect();
            ratios.sort_by(f64::total_cmp);
            let last = ratios.len().checked_sub(1)?;
            #[expect(
                clippy::cast_possible_truncation,
                clippy::cast_sign_loss,
                reason = "a place in a list"
            )]
            let quantile = |share: f64| ratios[(share * last as f64).round() as usize];
            Some([quantile(0.16), quantile(0.5), quantile(0.84)])
        };
        Group {
            low,
            high,
            spread: [spread(0), spread(1)],
            pairs: some.len(),
        }
    };
    ends.windows(2).map(|two| within(two[0], two[1])).collect()
}

fn row(name: &str, group: &Group) {
    let each = group.spread.map(|spread| {
        spread.map_or_else(
            || "none".to_owned(),
            |[low, median, high]| format!("{median:.2} ({low:.2} to {high:.2})"),
        )
    });
    println!("| {name} | {} | {} | {} |", group.pairs, each[0], each[1]);
}
