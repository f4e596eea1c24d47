//! Many pairs go the way of one pair, whatever the number of threads.
#![allow(
    clippy::unwrap_used,
    reason = "a test stops where its data cannot be made"
)]

use inrush::fit::Workspace;
use inrush::line::find;
use inrush::model::Model;
use inrush::report::{Table, columns, write_csv};
use inrush::run::{
    BatchSettings, LineInput, PairInput, PairJob, PairOutcome, PairSettings, RunError, RunSheet,
    fit_pair, fit_pairs, fit_spectra, pair_row,
};
use inrush::simulate::{PairTruth, SimulatedLine, simulate_pair};
use inrush::spectrum::Spectrum;
use std::convert::Infallible;
use std::ops::ControlFlow;
use std::path::{Path, PathBuf};
use std::sync::Arc;

/// A hill with the default thin line and noise of its own.
fn simulated(seed: u64) -> PairInput {
    let lines = (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap());
    let truth = PairTruth::new((Model::Hill, Model::Gaussian), lines, seed);
    let pair = simulate_pair(&truth).unwrap();
    let line = |line, simulated: SimulatedLine| {
        LineInput::in_memory(line, simulated.spectrum, &format!("simulated {seed}"))
    };
    PairInput {
        name: Some(format!("pair {seed}")),
        source: inrush::derive::SourceProperties::default(),
        thick: line(truth.thick.line, pair.thick),
        thin: line(truth.thin.line, pair.thin),
    }
}

fn job(pair: PairInput, settings: &Arc<PairSettings>) -> PairJob {
    PairJob::Spectra {
        pair: Box::new(pair),
        settings: Arc::clone(settings),
    }
}

/// The results of a batch as the bytes of its table, and the errors with their numbers.
fn table_and_errors(threads: usize, jobs: Vec<PairJob>) -> (Vec<u8>, Vec<(u64, RunError)>) {
    let mut table = Table::new(columns::results());
    let mut errors = Vec::new();
    let count = jobs.len() as u64;
    let ended = fit_pairs(
        &BatchSettings::with_threads(threads),
        jobs,
        |outcome| pair_row(&outcome),
        |number, row| {
            match row {
                Ok(row) => table.push(row).unwrap(),
                Err(error) => errors.push((number, error)),
            }
            ControlFlow::<Infallible>::Continue(())
        },
    )
    .unwrap();
    assert_eq!(ended, ControlFlow::Continue(count));
    let mut bytes = Vec::new();
    write_csv(&table, &mut bytes).unwrap();
    (bytes, errors)
}

/// One pair that cannot be fitted among fifteen that can.
fn sixteen_pairs() -> Vec<PairJob> {
    let settings = Arc::new(PairSettings::default());
    (0..16)
        .map(|seed| {
            let mut pair = simulated(seed);
            if seed == 5 {
                let thin = &pair.thin.spectrum;
                let elsewhere: Vec<f64> = thin.velocity_km_s().iter().map(|v| v + 500.0).collect();
                pair.thin.spectrum = Spectrum::new(
                    elsewhere,
                    thin.width_km_s().to_vec(),
                    thin.temperature_k().to_vec(),
                )
                .unwrap();
            }
            job(pair, &settings)
        })
        .collect()
}

#[test]
fn every_number_of_threads_gives_the_bytes_of_one_pair_after_the_other() {
    let mut expected = Table::new(columns::results());
    for seed in (0..16).filter(|&seed| seed != 5) {
        let outcome = fit_spectra(
            simulated(seed),
            &PairSettings::default(),
            &mut Workspace::new(),
        )
        .unwrap();
        expected.push(pair_row(&outcome).unwrap()).unwrap();
    }
    let mut bytes = Vec::new();
    write_csv(&expected, &mut bytes).unwrap();
    for threads in [1, 2, 3, 8] {
        let (found, errors) = table_and_errors(threads, sixteen_pairs());
        assert!(found == bytes, "{threads} threads change the table");
        let [(5, RunError::Pair { thin, .. })] = &errors[..] else {
            panic!("{threads} threads: {errors:?}");
        };
        assert_eq!(thin, Path::new("simulated 5"));
    }
}

#[test]
fn a_panic_in_one_pair_is_that_pairs_error() {
    let settings = Arc::new(PairSettings::default());
    let jobs: Vec<PairJob> = (0..4).map(|seed| job(simulated(seed), &settings)).collect();
    let mut found = Vec::new();
    let _ = fit_pairs(
        &BatchSettings::with_threads(2),
        jobs,
        |outcome: PairOutcome| {
            assert_ne!(outcome.name, "pair 2", "that one");
            Ok(outcome.name)
        },
        |_, name| {
            found.push(name);
            ControlFlow::<Infallible>::Continue(())
        },
    )
    .unwrap();
    let failed = found.remove(2).unwrap_err();
    assert!(matches!(failed, RunError::Internal(_)));
    assert!(failed.to_string().contains("that one"));
    let names: Vec<String> = found.into_iter().map(Result::unwrap).collect();
    assert_eq!(names, ["pair 0", "pair 1", "pair 3"]);
}

#[test]
fn files_and_sheets_give_what_one_pair_gives() {
    let demo = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-spectra");
    let path = demo.join("lantern7.toml");
    let sheet = RunSheet::read(&path).unwrap();
    let mut lost = sheet.clone();
    lost.thin.file = Some(PathBuf::from("lost.csv"));
    let mut bad = sheet.clone();
    bad.fit.models = vec!["hil".to_owned()];
    let of = |sheet: &RunSheet| PairJob::Sheet {
        sheet: Box::new(sheet.clone()),
        base: demo.clone(),
    };
    let jobs = vec![
        PairJob::File(path),
        of(&lost),
        of(&sheet),
        PairJob::File(demo.join("nothing.toml")),
        of(&bad),
    ];
    let mut expected = Table::new(columns::results());
    let row = pair_row(&fit_pair(&sheet, &demo, &mut Workspace::new()).unwrap()).unwrap();
    expected.push(row.clone()).unwrap();
    expected.push(row).unwrap();
    let mut bytes = Vec::new();
    write_csv(&expected, &mut bytes).unwrap();
    let (found, errors) = table_and_errors(2, jobs);
    assert!(found == bytes);
    let numbers: Vec<u64> = errors.iter().map(|(number, _)| *number).collect();
    assert_eq!(numbers, [1, 3, 4]);
    for ((_, error), named) in errors.iter().zip(["lost.csv", "nothing.toml", "hil"]) {
        assert!(error.to_string().contains(named), "{error}");
        assert!(error.hint().is_some());
    }
}
