//! Columns and rows of a sample's two tables.

use crate::report::{Column, Kind, Row, Schema};
use crate::run::RunError;
use crate::simulate::{LineTruth, SampleTruth, SimulatedLine, SimulatedPair};

/// Name, unit, kind and meaning of the truth's columns. Empty where a pair has none of it.
const TRUTH: [(&str, &str, Kind, &str); 28] = [
    ("id", "", Kind::Text, "Name of the pair"),
    ("kind", "", Kind::Text, "What the pair shows"),
    ("thick_model", "", Kind::Text, "Model of the thick line"),
    ("thin_model", "", Kind::Text, "Model of the thin line"),
    (
        "v_lsr_km_s",
        "km/s",
        Kind::Real,
        "Systemic velocity, of the first cloud where there are two",
    ),
    (
        "sigma_km_s",
        "km/s",
        Kind::Real,
        "Velocity dispersion, of the first cloud where there are two",
    ),
    (
        "v_in_km_s",
        "km/s",
        Kind::Real,
        "Inward speed, positive for infall",
    ),
    (
        "tau",
        "",
        Kind::Real,
        "Peak optical depth of a half or layer",
    ),
    (
        "t_peak_k",
        "K",
        Kind::Real,
        "Excitation temperature at the peak of the hill",
    ),
    (
        "t_front_k",
        "K",
        Kind::Real,
        "Excitation temperature of the front layer",
    ),
    (
        "t_rear_k",
        "K",
        Kind::Real,
        "Excitation temperature of the rear layer",
    ),
    (
        "peak_k",
        "K",
        Kind::Real,
        "Peak of the thick line's (first) Gaussian",
    ),
    (
        "peak_thin_k",
        "K",
        Kind::Real,
        "Peak of the thin line's (first) Gaussian",
    ),
    (
        "v_second_km_s",
        "km/s",
        Kind::Real,
        "Velocity of the second cloud, both lines",
    ),
    (
        "sigma_second_km_s",
        "km/s",
        Kind::Real,
        "Velocity dispersion of the second cloud, both lines",
    ),
    (
        "peak_second_k",
        "K",
        Kind::Real,
        "Peak of the second cloud in the thick line",
    ),
    (
        "peak_second_thin_k",
        "K",
        Kind::Real,
        "Peak of the second cloud in the thin line",
    ),
    (
        "brightest_thick_k",
        "K",
        Kind::Real,
        "Brightest channel of the thick line without noise",
    ),
    (
        "brightest_thin_k",
        "K",
        Kind::Real,
        "Brightest channel of the thin line without noise",
    ),
    (
        "noise_thick_k",
        "K",
        Kind::Real,
        "Noise of a channel of the thick line, standard deviation",
    ),
    (
        "noise_thin_k",
        "K",
        Kind::Real,
        "Noise of a channel of the thin line, standard deviation",
    ),
    (
        "signal_to_noise",
        "",
        Kind::Real,
        "Brightest channel over noise, thick line",
    ),
    (
        "signal_to_noise_thin",
        "",
        Kind::Real,
        "Brightest channel over noise, thin line",
    ),
    ("correlation", "", Kind::Text, "Correlation of the noise"),
    ("channels", "", Kind::Integer, "Channels of each line"),
    ("channel_km_s", "km/s", Kind::Real, "Width of a channel"),
    (
        "first_channel_km_s",
        "km/s",
        Kind::Real,
        "Centre of the first channel",
    ),
    ("noise_seed", "", Kind::Integer, "Seed of the pair's noise"),
];

/// Columns of the sample table.
const SAMPLE: [(&str, &str, Kind, &str); 5] = [
    ("id", "", Kind::Text, "Name of the pair"),
    ("thick_file", "", Kind::Text, "Spectrum of the thick line"),
    ("thin_file", "", Kind::Text, "Spectrum of the thin line"),
    ("thick_line", "", Kind::Text, "Name of the thick line"),
    ("thin_line", "", Kind::Text, "Name of the thin line"),
];

/// Columns of names, units, kinds and meanings.
pub(super) fn made(columns: &[(&str, &str, Kind, &str)]) -> Result<Schema, RunError> {
    let columns = columns
        .iter()
        .map(|(name, unit, kind, description)| Column {
            name: (*name).to_owned(),
            unit: (!unit.is_empty()).then(|| (*unit).to_owned()),
            description: (*description).to_owned(),
            kind: *kind,
        });
    Ok(Schema::new(columns.collect())?)
}

/// The columns of the truth.
pub(super) fn schema() -> Result<Schema, RunError> {
    made(&TRUTH)
}

/// The columns of the sample table.
pub(super) fn sample_schema() -> Result<Schema, RunError> {
    made(&SAMPLE)
}

/// The truth of one pair.
pub(super) fn row(
    schema: &Schema,
    id: &str,
    drawn: &SampleTruth,
    pair: &SimulatedPair,
) -> Result<Row, RunError> {
    let truth = &drawn.truth;
    let mut row = schema.row();
    row.set("id", id)?;
    row.set("kind", drawn.kind.name())?;
    row.set("thick_model", truth.thick.model.name())?;
    row.set("thin_model", truth.thin.model.name())?;
    set_parameters(&mut row, &truth.thick, str::to_owned)?;
    set_parameters(&mut row, &truth.thin, thin_name)?;
    for (which, ratio, line) in [
        ("thick", "signal_to_noise", &pair.thick),
        ("thin", "signal_to_noise_thin", &pair.thin),
    ] {
        let brightest_k = brightest_k(line);
        row.set(&format!("brightest_{which}_k"), brightest_k)?;
        row.set(&format!("noise_{which}_k"), line.noise_k)?;
        row.set(ratio, brightest_k / line.noise_k)?;
    }
    let axis = &truth.thick.axis;
    row.set("correlation", truth.thick.correlation.to_string())?;
    row.set("channels", integer(pair.thick.spectrum.len() as u64))?;
    row.set("channel_km_s", axis.channel_km_s)?;
    row.set("first_channel_km_s", axis.low_km_s)?;
    row.set("noise_seed", integer(truth.seed))?;
    Ok(row)
}

fn set_parameters(
    row: &mut Row,
    line: &LineTruth,
    column: impl Fn(&str) -> String,
) -> Result<(), RunError> {
    for (name, value) in &line.parameters {
        row.set(&column(name), *value)?;
    }
    Ok(())
}

/// Column of a parameter of the thin line; the clouds' velocities and dispersions are both lines'.
fn thin_name(name: &str) -> String {
    match name.strip_suffix("_k") {
        Some(stem) => format!("{stem}_thin_k"),
        None => name.to_owned(),
    }
}

/// Largest value without noise, of either sign as in a signal-to-noise ratio.
fn brightest_k(line: &SimulatedLine) -> f64 {
    let values = line.noiseless.temperature_k().iter();
    values.fold(0.0, |peak, value| peak.max(value.abs()))
}

/// A count or seed, each at most 2^63 - 1.
fn integer(value: u64) -> i64 {
    i64::try_from(value).unwrap_or(i64::MAX)
}
