//! The statistics of a sample as a long table, a row a statistic, and as text.

use super::{Column, Kind, ReportError, Row, Schema, Table, Value, rounded};
use crate::rank::{Correlation, GroupTest, Middle, PairStatistics, Sample, Share};
use std::fmt::Write as _;

/// Columns: name, kind, meaning.
#[rustfmt::skip]
const COLUMNS: [(&str, Kind, &str); 15] = [
    ("statistic", Kind::Text, "What is stated"),
    ("line_pair", Kind::Text, "Line pair that it is of; empty where it is of sources"),
    ("group", Kind::Text, "Group that it is of; empty for all sources"),
    ("other_group", Kind::Text, "Group that the first one is tested against"),
    ("first", Kind::Text, "First column of a correlation"),
    ("second", Kind::Text, "Second column of a correlation"),
    ("number", Kind::Integer, "Sources or line pairs behind it"),
    ("value", Kind::Real, "Value"),
    ("err", Kind::Real, "Standard error"),
    ("lo68", Kind::Real, "Lower end of the 68 % interval"),
    ("hi68", Kind::Real, "Upper end of the 68 % interval"),
    ("lo95", Kind::Real, "Lower end of the 95 % interval"),
    ("hi95", Kind::Real, "Upper end of the 95 % interval"),
    ("chance", Kind::Real, "Probability of a value as extreme by chance"),
    ("method", Kind::Text, "How error, interval or chance were found"),
];

/// The statistics as a table.
///
/// # Errors
///
/// [`ReportError`]: a defect.
pub fn table(sample: &Sample) -> Result<Table, ReportError> {
    let columns = COLUMNS.map(|(name, kind, description)| Column {
        name: name.to_owned(),
        unit: None,
        description: description.to_owned(),
        kind,
    });
    let schema = Schema::new(columns.into())?;
    let mut rows = Rows {
        table: Table::new(schema.clone()),
        schema,
    };
    for pair in &sample.line_pairs {
        rows.line_pair(pair)?;
    }
    for test in &sample.groups {
        rows.group_test(test)?;
    }
    for correlation in &sample.correlations {
        rows.correlation(correlation)?;
    }
    Ok(rows.table)
}

struct Rows {
    schema: Schema,
    table: Table,
}

impl Rows {
    fn push(&mut self, cells: &[(&str, Value)]) -> Result<(), ReportError> {
        let mut row: Row = self.schema.row();
        for (name, value) in cells {
            row.set(name, value.clone())?;
        }
        self.table.push(row)
    }

    fn line_pair(&mut self, pair: &PairStatistics) -> Result<(), ReportError> {
        let of = |statistic: &str, number: u64| {
            vec![
                ("statistic", Value::from(statistic)),
                ("line_pair", Value::from(pair.line_pair.as_str())),
                ("group", Value::from(pair.group.as_deref())),
                ("number", integer(number)),
            ]
        };
        for (statistic, number) in [
            ("detected", pair.detected),
            ("undetected", pair.undetected),
            ("blue", pair.blue),
            ("red", pair.red),
        ] {
            self.push(&of(statistic, number))?;
        }
        let asymmetric = pair.blue + pair.red;
        let mut excess = of("blue_excess", pair.detected);
        excess.push(("value", Value::from(pair.excess)));
        self.push(&excess)?;
        for (statistic, chance, method) in [
            (
                "blue_majority",
                pair.chance_blue,
                "exact binomial, as many blue or more",
            ),
            (
                "uneven_split",
                pair.chance_split,
                "exact binomial, as uneven to either side",
            ),
        ] {
            let mut cells = of(statistic, asymmetric);
            cells.push(("chance", Value::from(chance)));
            cells.push(("method", Value::from(method)));
            self.push(&cells)?;
        }
        for (statistic, share) in [
            ("fraction_blue", pair.fraction_blue),
            ("fraction_positive_asymmetry", pair.fraction_positive),
        ] {
            if let Some(share) = share {
                let mut cells = of(statistic, share.tries);
                cells.extend(share_cells(&share));
                self.push(&cells)?;
            }
        }
        for (name, middle) in [("delta_v", pair.delta_v), ("asymmetry", pair.asymmetry)] {
            let Some(middle) = middle else { continue };
            let mut cells = of(&format!("mean_{name}"), middle.count as u64);
            cells.push(("value", Value::from(middle.mean)));
            cells.push(("err", Value::from(middle.mean_err)));
            cells.push(("method", Value::from("from the scatter of the values")));
            self.push(&cells)?;
            let mut cells = of(&format!("median_{name}"), middle.count as u64);
            cells.push(("value", Value::from(middle.median)));
            cells.push(("lo68", Value::from(middle.median68.map(|ends| ends[0]))));
            cells.push(("hi68", Value::from(middle.median68.map(|ends| ends[1]))));
            cells.push(("method", Value::from("order statistics, at least 68 %")));
            self.push(&cells)?;
        }
        Ok(())
    }

    fn group_test(&mut self, test: &GroupTest) -> Result<(), ReportError> {
        let [first, second] = &test.sides;
        let of = |statistic: &str, number: u64| {
            vec![
                ("statistic", Value::from(statistic)),
                ("line_pair", Value::from(test.line_pair.as_str())),
                ("group", Value::from(first.group.as_str())),
                ("other_group", Value::from(second.group.as_str())),
                ("number", integer(number)),
            ]
        };
        let mut cells = of("fraction_blue_differs", first.detected + second.detected);
        cells.push(("chance", Value::from(test.chance_fraction)));
        cells.push(("method", Value::from("Fisher's exact test, to either side")));
        self.push(&cells)?;
        if let Some((u, chance)) = test.mann_whitney {
            let mut cells = of("delta_v_differs", (first.delta_v + second.delta_v) as u64);
            cells.push(("value", Value::from(u)));
            cells.push(("chance", Value::from(chance)));
            cells.push((
                "method",
                Value::from("Mann and Whitney's U of the first group, to either side"),
            ));
            self.push(&cells)?;
        }
        Ok(())
    }

    fn correlation(&mut self, one: &Correlation) -> Result<(), ReportError> {
        self.push(&[
            ("statistic", Value::from("rank_correlation")),
            ("first", Value::from(one.first)),
            ("second", Value::from(one.second)),
            ("number", integer(one.count as u64)),
            ("value", Value::from(one.rho)),
            ("lo68", Value::from(one.interval68[0])),
            ("hi68", Value::from(one.interval68[1])),
            ("lo95", Value::from(one.interval95[0])),
            ("hi95", Value::from(one.interval95[1])),
            ("chance", Value::from(one.chance)),
            ("method", Value::from("Spearman's rho of sources where infall is likely; interval of draws of both columns, which their errors weaken")),
        ])
    }
}

fn integer(number: u64) -> Value {
    Value::Integer(i64::try_from(number).unwrap_or(i64::MAX))
}

fn share_cells(share: &Share) -> [(&'static str, Value); 6] {
    [
        ("value", Value::from(share.value)),
        ("lo68", Value::from(share.interval68[0])),
        ("hi68", Value::from(share.interval68[1])),
        ("lo95", Value::from(share.interval95[0])),
        ("hi95", Value::from(share.interval95[1])),
        ("method", Value::from("Wilson's interval")),
    ]
}

/// The statistics for people.
pub fn text(sample: &Sample) -> String {
    let mut text = String::from("The sample\n");
    // writing to a string cannot fail
    for pair in &sample.line_pairs {
        let _ = match &pair.group {
            None => write!(text, "\n{}", pair.line_pair),
            Some(group) => write!(text, "\n{}, group {group}", pair.line_pair),
        };
        let _ = writeln!(
            text,
            "\n  profiles            {} blue and {} red of {} detected, {} undetected",
            pair.blue, pair.red, pair.detected, pair.undetected
        );
        if let Some(excess) = pair.excess {
            let _ = writeln!(
                text,
                "  blue excess         {excess:.2}; as many blue by chance: {}",
                chance(pair.chance_blue)
            );
        }
        if let Some(share) = pair.fraction_blue {
            let [low, high] = share.interval68;
            let _ = writeln!(
                text,
                "  fraction blue       {:.2} ({low:.2} to {high:.2}; Wilson, 68 %)",
                share.value
            );
        }
        for (name, middle) in [
            ("velocity difference", pair.delta_v),
            ("intensity asymmetry", pair.asymmetry),
        ] {
            if let Some(middle) = middle {
                let _ = writeln!(text, "  {name:<20}{}", middle_words(&middle));
            }
        }
    }
    if !sample.groups.is_empty() {
        text.push_str(
            "\nGroups against each other (probability of a difference as large by chance)\n",
        );
    }
    for test in &sample.groups {
        let [first, second] = &test.sides;
        let shown = |probability: Option<f64>| probability.map_or("-".to_owned(), chance);
        let _ = writeln!(
            text,
            "  {} and {}: fractions blue {}/{} and {}/{}, {} (Fisher); velocity differences, {} (Mann-Whitney)",
            first.group,
            second.group,
            first.blue,
            first.detected,
            second.blue,
            second.detected,
            shown(test.chance_fraction),
            shown(test.mann_whitney.map(|(_, chance)| chance)),
        );
    }
    if sample.untested_groups > 0 {
        let _ = writeln!(
            text,
            "\n{} groups are too many to be tested against each other.",
            sample.untested_groups
        );
    }
    if !sample.correlations.is_empty() {
        text.push_str(
            "\nRank correlations where infall is likely (Spearman), and 68 % of those of draws, which errors weaken\n",
        );
    }
    for one in &sample.correlations {
        let [low, high] = one.interval68;
        let _ = writeln!(
            text,
            "  {} and {}: {:.2}, draws {low:.2} to {high:.2}, of {} sources; by chance: {}",
            one.first,
            one.second,
            one.rho,
            one.count,
            chance(one.chance)
        );
    }
    text
}

fn middle_words(middle: &Middle) -> String {
    let mean = rounded(middle.mean, middle.mean_err.unwrap_or(f64::NAN));
    let median = match middle.median68 {
        Some([low, high]) => format!("{:.2} ({low:.2} to {high:.2})", middle.median),
        None => format!("{:.2}", middle.median),
    };
    format!("mean {mean}, median {median}")
}

fn chance(probability: f64) -> String {
    if probability < 1e-3 {
        format!("{probability:.0e}")
    } else {
        format!("{probability:.3}")
    }
}
