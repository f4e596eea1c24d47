//! The table of a paper: a few columns of a ranking as LaTeX, rounded to their errors, and as a table of
//! numbers with the same columns.

use super::{ReportError, Row, Schema, Table, Value, rounded, rounded_interval};
use std::fmt::Write as _;

/// Columns of the machine-readable twin, as in the ranking.
const TWIN: [&str; 23] = [
    "rank",
    "id",
    "group",
    "thick_line",
    "thin_line",
    "v_lsr_km_s",
    "v_lsr_km_s_err",
    "sigma_km_s",
    "sigma_km_s_err",
    "delta_v",
    "delta_v_err",
    "profile",
    "p_infall",
    "v_in_km_s",
    "v_in_km_s_lo68",
    "v_in_km_s_hi68",
    "v_in_limit_km_s",
    "mass_rate_msun_yr",
    "mass_rate_msun_yr_lo68",
    "mass_rate_msun_yr_hi68",
    "mass_rate_msun_yr_hi95",
    "p_top",
    "cautions",
];

/// Rows of a ranking as they come, until they are written.
#[derive(Debug)]
pub struct PaperTable {
    twin: Table,
    lines: String,
    /// Cautions in the order of their letters.
    notes: Vec<String>,
    limits: bool,
    errors: &'static str,
}

impl PaperTable {
    /// An empty table; `ranking` are the columns of the rows that will come, `formal` is whether speeds have
    /// formal errors alone.
    ///
    /// # Errors
    ///
    /// [`ReportError::UnknownColumn`] where they are not those of a ranking.
    pub fn new(ranking: &Schema, formal: bool) -> Result<Self, ReportError> {
        let find = |name: &str| {
            let known = ranking.columns().iter().find(|column| column.name == name);
            known.cloned().ok_or_else(|| ReportError::UnknownColumn {
                name: name.to_owned(),
                nearest: None,
            })
        };
        let columns = TWIN
            .iter()
            .map(|name| find(name))
            .collect::<Result<_, _>>()?;
        Ok(Self {
            twin: Table::new(Schema::new(columns)?),
            lines: String::new(),
            notes: Vec::new(),
            limits: false,
            errors: if formal {
                "Errors are formal."
            } else {
                "Errors of inward speeds and rates are central 68\\,\\% intervals of the posterior."
            },
        })
    }

    /// Takes a row of the ranking.
    ///
    /// # Errors
    ///
    /// [`ReportError`] where it is not one.
    pub fn push(&mut self, row: &Row) -> Result<(), ReportError> {
        let mut twin = self.twin.schema().row();
        for name in TWIN {
            twin.set(name, row.get(name)?.clone())?;
        }
        self.twin.push(twin)?;
        let number = |name: &str| row.get(name).map(Value::number);
        let text = |name: &str| {
            row.get(name)
                .map(|value| value.text().unwrap_or_default().to_owned())
        };
        let with_err = |name: &str| -> Result<String, ReportError> {
            let err = number(&format!("{name}_err"))?.unwrap_or(f64::NAN);
            Ok(number(name)?.map_or(NO_DATA.to_owned(), |value| {
                mathematics(&rounded(value, err))
            }))
        };
        let place = match row.get("rank")? {
            Value::Integer(place) => place.to_string(),
            _ => NO_DATA.to_owned(),
        };
        let p_infall = number("p_infall")?.map_or(NO_DATA.to_owned(), |p| format!("{p:.2}"));
        let limit = number("v_in_limit_km_s")?;
        let speed = match limit {
            Some(limit) => below(limit),
            None => interval(row, "v_in_km_s")?,
        };
        let rate = match (limit, number("mass_rate_msun_yr_hi95")?) {
            (Some(_), Some(high)) => below(high),
            _ => interval(row, "mass_rate_msun_yr")?,
        };
        self.limits |= limit.is_some();
        let marks = self.marks(&text("cautions")?);
        let cells = [
            place,
            format!("{}{marks}", escaped(&text("id")?)),
            with_err("v_lsr_km_s")?,
            with_err("sigma_km_s")?,
            with_err("delta_v")?,
            p_infall,
            speed,
            rate,
        ];
        // writing to a string cannot fail
        let _ = writeln!(self.lines, "{} \\\\", cells.join(" & "));
        Ok(())
    }

    /// Letters of a row's cautions.
    fn marks(&mut self, cautions: &str) -> String {
        let mut letters: Vec<String> = Vec::new();
        for caution in cautions.split(';').filter(|code| !code.is_empty()) {
            let index = self.notes.iter().position(|known| known == caution);
            let index = index.unwrap_or_else(|| {
                self.notes.push(caution.to_owned());
                self.notes.len() - 1
            });
            letters.push(letter(index));
        }
        letters.sort();
        if letters.is_empty() {
            String::new()
        } else {
            format!("\\tablenotemark{{{}}}", letters.join(","))
        }
    }

    /// The same columns with full precision.
    pub fn twin(&self) -> &Table {
        &self.twin
    }

    /// The table as LaTeX; it stands alone but for its class.
    pub fn latex(&self) -> String {
        let mut text = String::from(HEAD);
        text.push_str(&self.lines);
        text.push_str("\\hline\n\\end{tabular}\n\n\\smallskip\n");
        let _ = writeln!(text, "\\footnotesize Notes. {}", self.errors);
        text.push_str("The rank is by the expected rate or speed: the probability of infall times the mean of the inward draws.\n");
        if self.limits {
            text.push_str(
                "Behind $<$ stand limits: of a speed at 95\\,\\%, of a rate the upper end of its central 95\\,\\% interval.\n",
            );
        }
        for (index, note) in self.notes.iter().enumerate() {
            let _ = writeln!(
                text,
                "\\tablenotemark{{{}}}\\,{}.",
                letter(index),
                escaped(&note.replace('-', " "))
            );
        }
        text.push_str("\\end{table*}\n");
        text
    }
}

const NO_DATA: &str = "\\nodata";

const HEAD: &str = "\
% A class without these two commands gets them here.
\\providecommand{\\tablenotemark}[1]{\\textsuperscript{#1}}
\\providecommand{\\nodata}{\\ldots}
\\begin{table*}
\\centering
\\caption{Infall of the sample}
\\begin{tabular}{rlcccccc}
\\hline
Rank & Source & $v_\\mathrm{LSR}$ & $\\sigma$ & $\\delta V$ & $P_\\mathrm{infall}$ & $v_\\mathrm{in}$ & $\\dot M$ \\\\
 & & (km\\,s$^{-1}$) & (km\\,s$^{-1}$) & & & (km\\,s$^{-1}$) & ($M_\\odot$\\,yr$^{-1}$) \\\\
\\hline
";

fn interval(row: &Row, name: &str) -> Result<String, ReportError> {
    let at = |suffix: &str| row.get(&format!("{name}{suffix}")).map(Value::number);
    Ok(match (at("")?, at("_lo68")?, at("_hi68")?) {
        (Some(value), Some(low), Some(high)) => mathematics(&rounded_interval(value, low, high)),
        (Some(value), ..) => {
            let err = row.find(&format!("{name}_err")).and_then(Value::number);
            mathematics(&rounded(value, err.unwrap_or(f64::NAN)))
        }
        _ => NO_DATA.to_owned(),
    })
}

/// A limit, rounded up to two digits: it stays one.
fn below(limit: f64) -> String {
    if limit <= 0.0 || !limit.is_finite() {
        return NO_DATA.to_owned();
    }
    #[allow(clippy::cast_possible_truncation, reason = "a power of ten of a float")]
    let power = limit.log10().floor() as i32 - 1;
    let unit = 10_f64.powi(power);
    let up = (limit / unit - 1e-9).ceil();
    if (-4..=2).contains(&power) {
        let decimals = usize::try_from(-power).unwrap_or(0);
        format!("$<{:.decimals$}$", up * unit)
    } else {
        format!("$<{:.1}\\times10^{{{}}}$", up / 10.0, power + 1)
    }
}

/// Text of a rounded number as LaTeX: `0.48 +- 0.03`, `0.48 -0.04 +0.05`, `(1.2 +- 0.4)e-5`.
fn mathematics(text: &str) -> String {
    let (body, power) = match text.split_once(")e") {
        Some((body, power)) => (body.trim_start_matches('('), Some(power)),
        None => match text.split_once('e') {
            Some((body, power)) => (body, Some(power)),
            None => (text, None),
        },
    };
    let words: Vec<&str> = body.split(' ').collect();
    let bracketed = power.is_some() && words.len() > 1;
    let number = match words[..] {
        [value, "+-", err] => format!("{value}\\pm{err}"),
        [value, low, high] if low.starts_with('-') && high.starts_with('+') => {
            format!("{value}^{{{high}}}_{{{low}}}")
        }
        _ => body.to_owned(),
    };
    match power {
        Some(power) if bracketed => format!("$({number})\\times10^{{{power}}}$"),
        Some(power) => format!("${number}\\times10^{{{power}}}$"),
        None => format!("${number}$"),
    }
}

/// `a` to `z`, then `aa` on.
fn letter(index: usize) -> String {
    let last = char::from(b'a' + u8::try_from(index % 26).unwrap_or(0));
    match index / 26 {
        0 => last.to_string(),
        more => format!("{}{last}", letter(more - 1)),
    }
}

/// A text without LaTeX's own characters.
fn escaped(text: &str) -> String {
    let mut escaped = String::with_capacity(text.len());
    for character in text.chars() {
        match character {
            '&' | '%' | '$' | '#' | '_' | '{' | '}' => {
                escaped.push('\\');
                escaped.push(character);
            }
            '~' => escaped.push_str("\\textasciitilde{}"),
            '^' => escaped.push_str("\\textasciicircum{}"),
            '\\' => escaped.push_str("\\textbackslash{}"),
            other if other.is_control() => escaped.push(' '),
            other => escaped.push(other),
        }
    }
    escaped
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rounded_numbers_become_mathematics() {
        for (text, expected) in [
            ("0.48 +- 0.03", "$0.48\\pm0.03$"),
            ("-0.52 -0.04 +0.05", "$-0.52^{+0.05}_{-0.04}$"),
            ("(1.2 +- 0.4)e-5", "$(1.2\\pm0.4)\\times10^{-5}$"),
            ("(5.1 -1.5 +1.6)e-4", "$(5.1^{+1.6}_{-1.5})\\times10^{-4}$"),
            ("1.23e-5", "$1.23\\times10^{-5}$"),
            ("12.3", "$12.3$"),
        ] {
            assert_eq!(mathematics(text), expected);
        }
    }

    #[test]
    fn limits_are_rounded_up() {
        for (limit, expected) in [
            (0.1213, "$<0.13$"),
            (0.12, "$<0.12$"),
            (1.04, "$<1.1$"),
            (34.2, "$<35$"),
            (0.0996, "$<0.100$"),
            (2.31e-5, "$<2.4\\times10^{-5}$"),
            (9.96e-5, "$<10.0\\times10^{-5}$"),
            (-0.1, "\\nodata"),
        ] {
            assert_eq!(below(limit), expected, "{limit}");
        }
    }

    #[test]
    fn names_cannot_break_the_table() {
        assert_eq!(
            escaped("G1&2_3 100%\\x"),
            "G1\\&2\\_3 100\\%\\textbackslash{}x"
        );
        assert_eq!([0, 25, 26, 27].map(letter), ["a", "z", "aa", "ab"]);
    }
}
