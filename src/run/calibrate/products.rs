//! A calibration into tables, text and files.

use super::{Calibration, Injection, Level, NINE_IN_TEN, Needed, Share};
use crate::report::{
    self, Column, Kind, Row, Schema, Table, TableFiles, Value, rounded, rounded_plain,
};
use crate::run::{PairOutcome, RunError, RunSheet};
use std::fmt::Write as _;
use std::path::{Path, PathBuf};

/// Shares of found pairs that a needed signal-to-noise ratio is given for, with their words.
const ASKED: [(f64, &str, &str); 2] = [
    (0.5, "half", "half of the pairs"),
    (NINE_IN_TEN, "nine_in_ten", "nine pairs in ten"),
];

fn column(name: &str, unit: Option<&str>, kind: Kind, description: &str) -> Column {
    Column {
        name: name.to_owned(),
        unit: unit.map(str::to_owned),
        description: description.to_owned(),
        kind,
    }
}

fn schema(columns: Vec<Column>) -> Result<Schema, RunError> {
    Ok(Schema::new(columns)?)
}

const KM_S: Option<&str> = Some("km/s");

#[rustfmt::skip]
fn calibration_schema() -> Result<Schema, RunError> {
    use Kind::{Integer, Real, Text};
    let mut columns = vec![
        column("id", None, Text, "Name of the source"),
        column("thick_line", None, Text, "The optically thick line"),
        column("thin_line", None, Text, "The optically thin line"),
        column("model", None, Text, "The injected model"),
        column("errors", None, Text, "Where speeds and errors come from: posterior, or formal"),
        column("noise_factor", None, Real, "Noise over the observation's own"),
        column("signal_to_noise", None, Real, "Peak of the injected thick line over the noise of a channel"),
        column("true_v_in_km_s", KM_S, Real, "Inward speed of the pairs that move"),
    ];
    for (prefix, pairs) in [("", "pairs that move"), ("rest_", "pairs at rest")] {
        let mut add = |name: &str, unit, kind, text: &str| {
            let name = format!("{prefix}{name}");
            columns.push(column(&name, unit, kind, &format!("{text}, {pairs}")));
        };
        add("pairs", None, Integer, "Pairs injected");
        add("refused", None, Integer, "Pairs that could not be fitted");
        add("with_speed", None, Integer, "Pairs with a speed");
        add("bias_km_s", KM_S, Real, "Median of found less true speed");
        add("bias_km_s_err", KM_S, Real, "Standard error of the bias");
        add("scatter_km_s", KM_S, Real, "Half the width of the central 68 % of the speeds");
        add("stated_km_s", KM_S, Real, "Median of half the width of the stated 68 % intervals");
        add("in68", None, Real, "Share of 68 % intervals that hold the truth");
        add("in95", None, Real, "Share of 95 % intervals that hold the truth");
    }
    columns.extend([
        column("found", None, Real, "Share of the pairs that move in which motion of that sign is found"),
        column("found_lo95", None, Real, "Lower end of the 95 % interval of found"),
        column("found_hi95", None, Real, "Upper end of the 95 % interval of found"),
        column("false_alarms", None, Real, "Share of the pairs at rest in which infall is found"),
        column("false_alarms_lo95", None, Real, "Lower end of the 95 % interval of false_alarms"),
        column("false_alarms_hi95", None, Real, "Upper end of the 95 % interval of false_alarms"),
    ]);
    for (_, name, words) in ASKED {
        columns.push(column(
            &format!("needed_signal_to_noise_{name}"),
            None,
            Real,
            &format!("Signal-to-noise ratio at which {words} that move are found; in the row of the observation's own noise"),
        ));
        columns.push(column(
            &format!("needed_time_factor_{name}"),
            None,
            Real,
            "Integration time for it over the observation's own",
        ));
    }
    schema(columns)
}

/// One row a noise level, the lowest signal-to-noise ratio first.
///
/// # Errors
///
/// [`RunError::Report`] where a column does not exist or a value is infinite: a defect.
pub fn calibration_table(calibration: &Calibration) -> Result<Table, RunError> {
    let schema = calibration_schema()?;
    let mut table = Table::new(schema.clone());
    for level in &calibration.levels {
        table.push(level_row(&schema, calibration, level)?)?;
    }
    Ok(table)
}

/// The row of the observation's own noise.
///
/// # Errors
///
/// As [`calibration_table`].
pub fn json_row(calibration: &Calibration) -> Result<Row, RunError> {
    let own = calibration
        .own()
        .ok_or_else(|| RunError::Internal("no level of the observation's own noise".to_owned()))?;
    level_row(&calibration_schema()?, calibration, own)
}

fn level_row(schema: &Schema, calibration: &Calibration, level: &Level) -> Result<Row, RunError> {
    let mut row = schema.row();
    row.set("id", calibration.source.as_str())?;
    row.set("thick_line", calibration.lines.0.as_str())?;
    row.set("thin_line", calibration.lines.1.as_str())?;
    row.set("model", calibration.model.name())?;
    row.set("errors", errors(calibration))?;
    row.set("noise_factor", level.noise_factor)?;
    row.set("signal_to_noise", level.signal_to_noise)?;
    row.set("true_v_in_km_s", calibration.v_in_km_s)?;
    let count = |number: usize| i64::try_from(number).unwrap_or(i64::MAX);
    for (prefix, of) in [("", &level.moving), ("rest_", &level.at_rest)] {
        let mut set =
            |name: &str, value: Value| row.set(&format!("{prefix}{name}"), value).map(|_| ());
        set("pairs", count(of.pairs).into())?;
        set("refused", count(of.refused).into())?;
        set("with_speed", count(of.with_speed).into())?;
        set("bias_km_s", of.bias_km_s.into())?;
        set("bias_km_s_err", of.bias_err_km_s.into())?;
        set("scatter_km_s", of.scatter_km_s.into())?;
        set("stated_km_s", of.stated_km_s.into())?;
        set("in68", of.in68.value().into())?;
        set("in95", of.in95.value().into())?;
    }
    for (name, share) in [
        ("found", level.moving.found),
        ("false_alarms", level.at_rest.found),
    ] {
        let (low, high) = share.interval95();
        row.set(name, share.value())?;
        row.set(&format!("{name}_lo95"), low)?;
        row.set(&format!("{name}_hi95"), high)?;
    }
    if level.noise_factor == 1.0 {
        for (share, name, _) in ASKED {
            if let Needed::At(needed) = calibration.needed(share) {
                row.set(&format!("needed_signal_to_noise_{name}"), needed)?;
                let factor = calibration.time_factor(needed);
                row.set(&format!("needed_time_factor_{name}"), factor)?;
            }
        }
    }
    Ok(row)
}

fn errors(calibration: &Calibration) -> &'static str {
    if calibration.formal {
        "formal"
    } else {
        "posterior"
    }
}

/// One row an injection.
fn injections_table(calibration: &Calibration) -> Result<Table, RunError> {
    use Kind::{Real, Text};
    let schema = schema(vec![
        column("kind", None, Text, "moving as fitted, or rest"),
        column(
            "noise_factor",
            None,
            Real,
            "Noise over the observation's own",
        ),
        column("true_v_in_km_s", KM_S, Real, "The injected inward speed"),
        column("v_in_km_s", KM_S, Real, "Adopted inward speed"),
        column("v_in_km_s_err", KM_S, Real, "Standard error of v_in_km_s"),
        column(
            "v_in_km_s_lo68",
            KM_S,
            Real,
            "Lower end of the 68 % interval; of formal errors, one error below",
        ),
        column(
            "v_in_km_s_hi68",
            KM_S,
            Real,
            "Upper end of the 68 % interval",
        ),
        column(
            "v_in_km_s_lo95",
            KM_S,
            Real,
            "Lower end of the 95 % interval; of formal errors, two errors below",
        ),
        column(
            "v_in_km_s_hi95",
            KM_S,
            Real,
            "Upper end of the 95 % interval",
        ),
        column("p_infall", None, Real, "Probability of infall"),
        column("p_expansion", None, Real, "Probability of expansion"),
        column("p_static", None, Real, "Probability of neither"),
        column("p_two_clouds", None, Real, "Probability of two clouds"),
        column("cautions", None, Text, "Codes of the cautions"),
        column("error", None, Text, "Why there is no result"),
    ])?;
    let mut table = Table::new(schema.clone());
    for injection in &calibration.injections {
        table.push(injection_row(&schema, injection)?)?;
    }
    Ok(table)
}

fn injection_row(schema: &Schema, injection: &Injection) -> Result<Row, RunError> {
    let mut row = schema.row();
    row.set(
        "kind",
        match injection.kind {
            super::Kind::Moving => "moving",
            super::Kind::AtRest => "rest",
        },
    )?;
    row.set("noise_factor", injection.noise_factor)?;
    row.set("true_v_in_km_s", injection.true_v_in_km_s)?;
    let found = match &injection.found {
        Ok(found) => found,
        Err(error) => {
            row.set("error", error.as_str())?;
            return Ok(row);
        }
    };
    row.set("v_in_km_s", found.v_in_km_s)?;
    row.set("v_in_km_s_err", found.err_km_s)?;
    for (percent, ends) in [("68", found.interval68_km_s), ("95", found.interval95_km_s)] {
        row.set(&format!("v_in_km_s_lo{percent}"), ends.map(|ends| ends.0))?;
        row.set(&format!("v_in_km_s_hi{percent}"), ends.map(|ends| ends.1))?;
    }
    if let Some(probabilities) = found.probabilities {
        let names = ["p_infall", "p_expansion", "p_static", "p_two_clouds"];
        for (name, probability) in names.into_iter().zip(probabilities) {
            row.set(name, probability)?;
        }
    }
    row.set("cautions", found.cautions.as_str())?;
    Ok(row)
}

/// What a calibration found, in words and numbers for a terminal.
#[must_use]
pub fn calibration_summary(calibration: &Calibration) -> String {
    let mut text = String::new();
    let Some(own) = calibration.own() else {
        return text;
    };
    let mut line = |label: &str, value: String| {
        // writing to a string cannot fail
        let _ = writeln!(text, "  {label:<30}{value}");
    };
    let speed = |value: Option<f64>, err: Option<f64>| match (value, err) {
        (Some(value), Some(err)) => format!("{} km/s", rounded(value, err)),
        (Some(value), None) => format!("{} km/s", rounded_plain(value)),
        (None, _) => "-".to_owned(),
    };
    let moving = &own.moving;
    line(
        "injected inward speed",
        speed(Some(calibration.v_in_km_s), None),
    );
    line(
        "signal-to-noise ratio",
        rounded_plain(calibration.signal_to_noise),
    );
    line("pairs", counts(moving.pairs, moving.refused));
    line("bias", speed(moving.bias_km_s, moving.bias_err_km_s));
    line("scatter", speed(moving.scatter_km_s, None));
    line("stated error", speed(moving.stated_km_s, None));
    line("truth in the 68 % interval", percent(moving.in68));
    line("truth in the 95 % interval", percent(moving.in95));
    line(&found_label(calibration), percent(moving.found));
    text.push_str("\nThe same at rest\n");
    let mut line = |label: &str, value: String| {
        let _ = writeln!(text, "  {label:<30}{value}");
    };
    let at_rest = &own.at_rest;
    line("pairs", counts(at_rest.pairs, at_rest.refused));
    line("bias", speed(at_rest.bias_km_s, at_rest.bias_err_km_s));
    line("scatter", speed(at_rest.scatter_km_s, None));
    line("false alarms", percent(at_rest.found));
    let _ = write!(text, "\nSignal-to-noise ratio needed\n");
    for (share, _, words) in ASKED {
        let _ = writeln!(
            text,
            "  {:<30}{}",
            format!("to find {words}"),
            needed(calibration, share)
        );
    }
    let kind = if calibration.formal {
        "formal errors"
    } else {
        "posteriors"
    };
    format!(
        "{}: {} and {}, the {} model with this observation's noise, {kind}\n\nAs fitted\n{text}",
        calibration.source,
        calibration.lines.0,
        calibration.lines.1,
        calibration.model.name()
    )
}

pub(in crate::run) fn found_label(calibration: &Calibration) -> String {
    let motion = if calibration.v_in_km_s < 0.0 {
        "expansion"
    } else {
        "infall"
    };
    format!("found as {motion}")
}

fn counts(pairs: usize, refused: usize) -> String {
    if refused == 0 {
        pairs.to_string()
    } else {
        format!("{pairs}, of which {refused} could not be fitted")
    }
}

/// `71 % (64 to 77 %)`.
pub(in crate::run) fn percent(share: Share) -> String {
    let Some(value) = share.value() else {
        return "-".to_owned();
    };
    let (low, high) = share.interval95();
    format!(
        "{:.0} % ({:.0} to {:.0} %)",
        100.0 * value,
        100.0 * low,
        100.0 * high
    )
}

/// `12.3, 0.046 of this integration time`.
pub(in crate::run) fn needed(calibration: &Calibration, share: f64) -> String {
    let times = |signal_to_noise: f64| {
        let factor = calibration.time_factor(signal_to_noise);
        format!("{} of this integration time", report::rounded_plain(factor))
    };
    match calibration.needed(share) {
        Needed::At(needed) => format!("{needed:.0}, {}", times(needed)),
        Needed::Below(lowest) => format!("below {lowest:.0}, less than {}", times(lowest)),
        Needed::Above(highest) => format!("more than {highest:.0}, if any is enough"),
    }
}

/// Writes every product of a calibration into a directory and returns their paths, in order.
///
/// # Errors
///
/// [`RunError::File`] or [`RunError::Report`] naming the file that cannot be written.
pub fn write_calibration(
    calibration: &Calibration,
    outcome: &PairOutcome,
    sheet: &RunSheet,
    base: &Path,
    directory: &Path,
) -> Result<Vec<PathBuf>, RunError> {
    crate::run::products::make_directory(directory)?;
    let mut meta = crate::run::products::meta(outcome, sheet);
    let pairs = calibration.own().map_or(0, |own| own.moving.pairs);
    let pairs = i64::try_from(pairs).unwrap_or(i64::MAX);
    meta.push(("pairs".to_owned(), Value::Integer(pairs)));
    let mut written = Vec::new();
    let tables = [
        ("calibration", calibration_table(calibration)?),
        ("injections", injections_table(calibration)?),
    ];
    for (stem, table) in tables {
        let mut files = TableFiles::begin(directory, stem, table.schema(), meta.clone())?;
        for row in table.rows() {
            files.push(row)?;
        }
        written.extend(files.finish()?);
    }
    #[cfg(feature = "figures")]
    if sheet.output.figures {
        let svg = crate::run::figure::calibration_figure(calibration).svg()?;
        let width_px = crate::run::figure::WIDTH_PX;
        let write_figure = crate::run::products::write_figure;
        written.extend(write_figure(directory, "calibration", &svg, width_px)?);
    }
    let resolved = crate::run::products::resolved(outcome, sheet, base, directory).to_toml()?;
    let path = directory.join("run.toml");
    report::files::write_atomically(&path, |writer| Ok(writer.write_all(resolved.as_bytes())?))?;
    written.push(path);
    Ok(written)
}
