//! What maps of known motions are taken for: simulated maps of every mixture of infall, rotation and
//! outflow, through preparation, measures and diagnosis.
//!
//!     cargo run --release --example maps -- judge FIRST_SEED COUNT SN_THICK SN_THIN
//!     cargo run --release --example maps -- speeds FIRST_SEED COUNT SN_THICK SN_THIN
//!     cargo run --release --example maps -- rows FIRST_SEED COUNT SN_THICK SN_THIN
//!
//! `judge` prints verdicts in per cent of the maps of a scene, `speeds` slopes of the inward speed of
//! infalling maps (fits every pointing), `rows` a line a map. Odd seeds have noise that goes together over
//! the beam, even ones independent pointings.
#![allow(clippy::print_stdout)]

mod drawn;
mod measured;

use drawn::{Observation, SCENES, Scene, draw};
use inrush::fit::Workspace;
use inrush::grid::{Diagnosis, Even, Odd};
use inrush::line::find;
use inrush::run::{BatchSettings, RunError};
use inrush::simulate::grid::GridTruth;
use measured::diagnosed;
use std::convert::Infallible;
use std::error::Error;
use std::ops::ControlFlow;

/// A map's truth and what it says.
struct Outcome {
    truth: GridTruth,
    diagnosis: Diagnosis,
}

fn main() -> Result<(), Box<dyn Error>> {
    let arguments: Vec<String> = std::env::args().collect();
    let [_, mode, first, count, thick, thin] = &arguments[..] else {
        return Err(
            "expected judge, speeds or rows, then FIRST_SEED COUNT SN_THICK SN_THIN".into(),
        );
    };
    let seeds = first.parse::<u64>()?..first.parse::<u64>()? + count.parse::<u64>()?;
    let signal_to_noise = [thick.parse()?, thin.parse()?];
    if mode == "judge" {
        println!(
            "| scene | noise | infall | along an axis only | expansion | neither | rotation | outflow | outflow along the gradient | both | neither | failed |"
        );
        println!("| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |");
    }
    if mode == "speeds" {
        println!("| scene | true q | maps | found q: median (16 to 84 %) |");
        println!("| --- | --- | --- | --- |");
    }
    for scene in SCENES {
        match mode.as_str() {
            "judge" => {
                let outcomes = outcomes(scene, seeds.clone(), signal_to_noise, false)?;
                for (noise, smooth) in [("independent", false), ("over the beam", true)] {
                    let maps = seeds
                        .clone()
                        .filter(|seed| (seed % 2 == 1) == smooth)
                        .count();
                    let alike: Vec<&Outcome> = outcomes
                        .iter()
                        .filter(|one| (one.truth.noise_fwhm_arcsec > 0.0) == smooth)
                        .collect();
                    println!("{}", judged(scene, noise, &alike, maps));
                }
            }
            "speeds" if scene.infall => {
                print_speeds(
                    scene,
                    &outcomes(scene, seeds.clone(), signal_to_noise, true)?,
                );
            }
            "speeds" => {}
            _ => {
                for outcome in outcomes(scene, seeds.clone(), signal_to_noise, false)? {
                    println!("{}", row(scene, &outcome));
                }
            }
        }
    }
    Ok(())
}

/// All maps of a scene that can be diagnosed.
fn outcomes(
    scene: Scene,
    seeds: std::ops::Range<u64>,
    signal_to_noise: [f64; 2],
    with_fits: bool,
) -> Result<Vec<Outcome>, Box<dyn Error>> {
    let lines = (find("HCO+ 1-0")?, find("H13CO+ 1-0")?);
    let mut outcomes = Vec::new();
    let ended = BatchSettings::default().run(
        seeds,
        Workspace::default,
        |workspace, seed| {
            let observation = Observation {
                signal_to_noise,
                smooth_noise: seed % 2 == 1,
            };
            let truth = draw(scene, seed, observation);
            let diagnosis = diagnosed(&truth, &lines, with_fits, workspace)
                .map_err(|error| RunError::Internal(error.to_string()))?;
            Ok::<Outcome, RunError>(Outcome { truth, diagnosis })
        },
        |_, outcome| {
            match outcome {
                Ok(outcome) => outcomes.push(outcome),
                Err(error) => println!("failed: {error}"),
            }
            ControlFlow::<Infallible>::Continue(())
        },
    )?;
    let ControlFlow::Continue(_) = ended;
    Ok(outcomes)
}

fn judged(scene: Scene, noise: &str, outcomes: &[&Outcome], maps: usize) -> String {
    let share = |holds: &dyn Fn(&Diagnosis) -> bool| {
        let found = outcomes.iter().filter(|one| holds(&one.diagnosis)).count();
        format!("{:.1}", 100.0 * found as f64 / maps as f64)
    };
    let even = |one: &Diagnosis| one.verdict.even;
    let odd = |one: &Diagnosis| one.verdict.odd;
    [
        scene.name.to_owned(),
        noise.to_owned(),
        share(&|one| matches!(even(one), Even::Blue { .. })),
        share(&|one| matches!(even(one), Even::AlongAxisOnly { .. })),
        share(&|one| matches!(even(one), Even::Red { .. })),
        share(&|one| matches!(even(one), Even::Neither { .. })),
        share(&|one| matches!(odd(one), Odd::Rotation { .. })),
        share(&|one| matches!(odd(one), Odd::Outflow { .. })),
        share(&|one| matches!(odd(one), Odd::OutflowAlongGradient { .. })),
        share(&|one| matches!(odd(one), Odd::Both { .. })),
        share(&|one| matches!(odd(one), Odd::Neither)),
        (maps - outcomes.len()).to_string(),
    ]
    .iter()
    .fold(String::from("|"), |row, cell| format!("{row} {cell} |"))
}

fn print_speeds(scene: Scene, outcomes: &[Outcome]) {
    for slope in [0.0, 0.5] {
        let mut found: Vec<f64> = outcomes
            .iter()
            .filter(|one| one.truth.clump.infall.slope == slope)
            .filter_map(|one| one.diagnosis.speed.as_ref().ok())
            .map(|speed| speed.slope.value)
            .collect();
        found.sort_by(f64::total_cmp);
        let at = |share: f64| {
            let last = found.len().saturating_sub(1) as f64;
            #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
            let place = (share * last).round() as usize;
            found.get(place).copied().unwrap_or(f64::NAN)
        };
        println!(
            "| {} | {slope} | {} | {:.2} ({:.2} to {:.2}) |",
            scene.name,
            found.len(),
            at(0.5),
            at(0.16),
            at(0.84)
        );
    }
}

fn row(scene: Scene, outcome: &Outcome) -> String {
    let (truth, found) = (&outcome.truth, &outcome.diagnosis);
    let (outflow, sigma) = (&truth.clump.outflow, truth.clump.sigma_km_s);
    let centre = found.centre.at_arcsec;
    let parity = |map: &Result<inrush::grid::Parity, inrush::grid::GridError>| {
        map.as_ref().map_or("-".to_owned(), |map| {
            format!(
                "even {:.3} z {:.1} along {:.1} across {:.1} odd z {:.1} at {:.0}+-{:.0} chi2 {:.1} n {}",
                map.even.value,
                map.even_significance,
                map.along.unwrap_or(f64::NAN),
                map.across.unwrap_or(f64::NAN),
                map.odd_significance,
                map.odd_angle_deg.value,
                map.odd_angle_deg.err,
                map.chi2_reduced,
                map.readings
            )
        })
    };
    let gradient = |one: &Result<inrush::grid::Gradient, inrush::grid::GridError>| {
        one.as_ref().map_or("-".to_owned(), |one| {
            format!(
                "{:.4} z {:.1} at {:.0}+-{:.0}",
                one.size_km_s_arcsec.value,
                one.significance,
                one.angle_deg.value,
                one.angle_deg.err
            )
        })
    };
    format!(
        "{} {}: core [{}] wings [{}] thin [{}] thick [{}] spot {:.1} centre off {:.2},{:.2} (+-{:.2}) truth v_in/s {:.2} q {:.1} rot/s {:.2} axis {:.0} out/s {:.2} at {:.0} tilt {:.0} tau {:.1} r_lobe {:.0}: {:?} {:?}",
        scene.name,
        truth.seed,
        parity(&found.core),
        parity(&found.wings),
        gradient(&found.gradient),
        gradient(&found.thick_gradient),
        found
            .spot
            .as_ref()
            .map_or(f64::NAN, |spot| spot.significance),
        centre[0] - truth.centre_arcsec[0],
        centre[1] - truth.centre_arcsec[1],
        found.centre.covariance[0][0].sqrt(),
        truth.clump.infall.speed_km_s / sigma,
        truth.clump.infall.slope,
        truth.clump.rotation.speed_km_s / sigma,
        truth.clump.rotation.axis_deg,
        outflow.speed_km_s / sigma,
        outflow.angle_deg,
        outflow.tilt_deg,
        outflow.tau,
        outflow.distance_arcsec,
        found.verdict.even,
        found.verdict.odd
    )
}
