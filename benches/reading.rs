//! What does a pair cost before it is fitted: reading, preparing, measuring? Each answer is checked.
#![allow(
    missing_docs,
    clippy::unwrap_used,
    reason = "a bench stops where it cannot go on"
)]

use criterion::{Criterion, criterion_group, criterion_main};
use inrush::fit::{FitSettings, Workspace, fit_thin};
use inrush::line::find;
use inrush::measure::{MeasureSettings, measure};
use inrush::model::Model;
use inrush::prepare::{Expected, PrepareSettings, prepare_pair};
use inrush::read::{ReadOptions, RowChoice, spectrum_from_bytes};
use inrush::simulate::{PairTruth, simulate_pair};
use std::fmt::Write as _;
use std::hint::black_box;
use std::path::Path;

const LINES: usize = 300;

/// Rows of a velocity and a temperature, as many digits as a reduction writes.
fn rows() -> String {
    let mut rows = String::new();
    for i in 0..LINES {
        let v = 0.1 * i as f64 - 10.0;
        writeln!(rows, "{v:.4},{:.7}", (-0.5 * v * v).exp()).unwrap();
    }
    rows
}

fn reading(criterion: &mut Criterion) {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let file = |name: &str| std::fs::read(root.join(name)).unwrap();
    let csv = format!("velocity_km_s,tmb_k\n{}", rows());
    let ecsv = format!(
        "# %ECSV 1.0\n# ---\n# datatype:\n\
         # - {{name: velocity, unit: km / s, datatype: float64}}\n\
         # - {{name: tmb, unit: K, datatype: float64}}\n\
         # delimiter: ','\n# schema: astropy-2.0\nvelocity,tmb\n{}",
        rows()
    );
    let third_row = ReadOptions {
        select: Some(RowChoice::Number(3)),
        ..ReadOptions::default()
    };
    let mut group = criterion.benchmark_group("reading");
    for (name, path, content, options, channels) in [
        (
            "csv_of_300_lines",
            "x.csv",
            csv.into_bytes(),
            ReadOptions::default(),
            LINES,
        ),
        (
            "ecsv_of_300_lines",
            "x.ecsv",
            ecsv.into_bytes(),
            ReadOptions::default(),
            LINES,
        ),
        (
            "fits_image_of_291_channels",
            "x.fits",
            file("demo-spectra/lantern7-thick.fits"),
            ReadOptions::default(),
            291,
        ),
        (
            "fits_table_row_of_12_channels",
            "y.fits",
            file("tests/data/read/rows_vector_axis.fits"),
            third_row,
            12,
        ),
    ] {
        group.bench_function(name, |bencher| {
            bencher.iter(|| {
                let raw =
                    spectrum_from_bytes(path.as_ref(), black_box(&content), &options).unwrap();
                assert_eq!(raw.values.len(), channels);
                raw
            });
        });
    }
    group.finish();
}

/// The default simulated pair: HCO+ 1-0 and H13CO+ 1-0 of a hill.
fn preparing(criterion: &mut Criterion) {
    let lines = (find("HCO+ 1-0").unwrap(), find("H13CO+ 1-0").unwrap());
    let truth = PairTruth::new((Model::Hill, Model::Gaussian), lines.clone(), 7);
    let pair = simulate_pair(&truth).unwrap();
    let settings = PrepareSettings::default();
    let expected = Expected::default();
    let prepared = || {
        prepare_pair(
            (black_box(&pair.thick.spectrum), &settings, &expected),
            (black_box(&pair.thin.spectrum), &settings, &expected),
        )
        .unwrap()
    };
    let (thick, thin) = prepared();
    let thin_fit = fit_thin(
        &thin,
        &lines.1,
        &FitSettings::default(),
        &mut Workspace::new(),
    )
    .unwrap();
    let mut group = criterion.benchmark_group("before_the_fit");
    group.bench_function("prepare", |bencher| {
        bencher.iter(|| {
            let pair = prepared();
            assert!(pair.0.window_automatic && pair.1.window_automatic);
            pair
        });
    });
    group.bench_function("measure", |bencher| {
        bencher.iter(|| {
            let measures = measure(
                black_box(&thick),
                &thin,
                thin_fit.line.as_ref(),
                0.01,
                &MeasureSettings::default(),
            );
            assert!(measures.delta_v.unwrap().value < -0.25);
            measures
        });
    });
    group.finish();
}

criterion_group!(benches, reading, preparing);
criterion_main!(benches);
