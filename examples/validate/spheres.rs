//! The pairs of tests/data/spheres through the whole pipeline with default settings, against their
//! truth.

use super::statistics::{percent, quantile, spread};
use inrush::fit::Workspace;
use inrush::fit::{Caution, ModelFit};
use inrush::measure::ProfileClass;
use inrush::model::Model;
use inrush::numeric::Estimate;
use inrush::run::{LineSection, PairOutcome, RunSheet, fit_pair};
use inrush::spectrum::Window;
use std::collections::{BTreeMap, HashMap};
use std::error::Error;
use std::fmt::Write as _;
use std::path::{Path, PathBuf};

/// A pair with its truth.
pub struct Sphere {
    /// Row of the truth table.
    pub truth: HashMap<String, String>,
    /// What the pipeline made of it, or why it refused.
    pub outcome: Result<PairOutcome, String>,
}

impl Sphere {
    fn number(&self, column: &str) -> f64 {
        self.truth[column].parse().unwrap_or(f64::NAN)
    }

    fn kind(&self) -> &str {
        &self.truth["kind"]
    }

    /// The true speed, km/s: where it rises inward, that at the sphere's radius.
    fn v_true_km_s(&self) -> f64 {
        let column = if self.kind() == "infall-ff" {
            "v_at_radius_km_s"
        } else {
            "v_in_km_s"
        };
        self.number(column)
    }

    fn is_fast(&self) -> bool {
        self.v_true_km_s().abs() > 0.7 * self.number("sigma_km_s")
    }

    fn is_two_peaked(&self) -> bool {
        let outcome = self.outcome.as_ref();
        outcome.is_ok_and(|outcome| outcome.measures.two_peaks.is_some())
    }

    fn fit(&self, model: Model) -> Option<&ModelFit> {
        let fits = &self.outcome.as_ref().ok()?.fit.models;
        fits.iter().find(|fit| fit.model == model)
    }

    fn speed(&self, model: Model) -> Option<Fitted> {
        let parameter = self.fit(model)?.parameter("v_in_km_s")?;
        Some(Fitted {
            value: parameter.value,
            err: parameter.err,
            truth: self.v_true_km_s(),
            sigma_km_s: self.number("sigma_km_s"),
        })
    }
}

/// A fitted speed beside the true one, km/s.
struct Fitted {
    value: f64,
    err: Option<f64>,
    truth: f64,
    sigma_km_s: f64,
}

impl Fitted {
    fn within(&self, errors: f64) -> bool {
        self.err
            .is_some_and(|err| (self.value - self.truth).abs() < errors * err)
    }
}

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/spheres")
}

/// All pairs, fitted with the default models or those named.
///
/// # Errors
///
/// Where the truth table cannot be read.
pub fn results(models: &[&str]) -> Result<Vec<Sphere>, Box<dyn Error>> {
    let mut spheres = Vec::new();
    for row in csv::Reader::from_path(folder().join("truth.csv"))?.deserialize() {
        let truth: HashMap<String, String> = row?;
        let line = |which: &str| LineSection {
            line: Some(truth[&format!("{which}_line")].clone()),
            file: Some(format!("{}-{which}.csv", truth["id"]).into()),
            ..LineSection::default()
        };
        let mut sheet = RunSheet {
            thick: line("thick"),
            thin: line("thin"),
            ..RunSheet::default()
        };
        if !models.is_empty() {
            sheet.fit.models = models.iter().map(|name| (*name).to_owned()).collect();
        }
        let outcome =
            fit_pair(&sheet, &folder(), &mut Workspace::new()).map_err(|error| error.to_string());
        spheres.push(Sphere { truth, outcome });
    }
    Ok(spheres)
}

/// Kinds of pairs, those with a speed first.
const KINDS: [&str; 5] = ["infall", "expand", "infall-ff", "static", "twocloud"];
const SPEEDS: [(&str, Model); 2] = [("two-layer", Model::TwoLayer), ("hill", Model::Hill)];

/// Optical depth of a layer below which nothing absorbs itself.
pub const TRANSPARENT: f64 = 0.5;

/// A group of pairs under its name.
type Group<'a> = (String, Vec<&'a Sphere>);

fn of_kinds<'a>(spheres: &'a [Sphere], kinds: &[&str]) -> Vec<&'a Sphere> {
    spheres
        .iter()
        .filter(|sphere| kinds.contains(&sphere.kind()))
        .collect()
}

fn by_kind(spheres: &[Sphere]) -> Vec<Group<'_>> {
    KINDS
        .iter()
        .map(|kind| ((*kind).to_owned(), of_kinds(spheres, &[kind])))
        .collect()
}

/// Every table.
///
/// # Errors
///
/// As [`results`].
pub fn summary() -> Result<String, Box<dyn Error>> {
    let spheres = &results(&[])?;
    let mut text = String::new();
    ratios(&mut text, spheres);
    zero_speeds(&mut text, spheres);
    classes(&mut text, spheres);
    cautions(&mut text, spheres);
    two_gaussians(&mut text, &results(&["hill", "two-gaussians"])?);
    preparation(&mut text, spheres);
    Ok(text)
}

/// Whether a pair belongs to a group.
type Belongs = fn(&Sphere) -> bool;

/// Groups that the pairs of one speed are split into.
const SPLITS: [(&str, Belongs); 12] = [
    ("S/N 10", |one| one.truth["snr_thick"] == "10"),
    ("S/N 20", |one| one.truth["snr_thick"] == "20"),
    ("S/N 40", |one| one.truth["snr_thick"] == "40"),
    ("S/N 100", |one| one.truth["snr_thick"] == "100"),
    ("thick line with two peaks", Sphere::is_two_peaked),
    ("thick line without", |one| !one.is_two_peaked()),
    ("abs(v_in) up to 0.7 sigma", |one| !one.is_fast()),
    ("abs(v_in) above 0.7 sigma", Sphere::is_fast),
    ("HCO+ 1-0", |one| one.truth["thick_line"] == "HCO+ 1-0"),
    ("HCO+ 4-3", |one| one.truth["thick_line"] == "HCO+ 4-3"),
    ("thin line's tau up to 1", |one| {
        one.number("tau_thin") <= 1.0
    }),
    ("thin line's tau above 1", |one| {
        one.number("tau_thin") > 1.0
    }),
];

/// Pairs with a speed, whole and split.
fn moving_groups(spheres: &[Sphere]) -> Vec<Group<'_>> {
    let moving = of_kinds(spheres, &["infall", "expand"]);
    let split = SPLITS.map(|(name, belongs)| {
        let chosen = moving.iter().filter(|one| belongs(one)).copied();
        (format!("- {name}"), chosen.collect())
    });
    let kinds = by_kind(spheres).into_iter().take(3);
    let whole = ("infall and expand".to_owned(), moving.clone());
    std::iter::once(whole).chain(split).chain(kinds).collect()
}

fn ratios(text: &mut String, spheres: &[Sphere]) {
    let groups = &moving_groups(spheres);
    text.push_str(
        "| group | pairs | two-layer v_in/v_true: median (16 to 84 %) | wrong sign | truth in err | in 2 err | hill v_in/v_true: median (16 to 84 %) | wrong sign | truth in err | in 2 err |\n| --- | --- | --- | --- | --- | --- | --- | --- | --- | --- |\n",
    );
    for (group, members) in groups {
        let cells = SPEEDS.map(|(_, model)| speed_cells(members, model));
        let _ = writeln!(
            text,
            "| {group} | {} | {} |",
            members.len(),
            cells.join(" | ")
        );
    }
    text.push('\n');
}

/// Ratio to the true speed, wrong signs, and how often intervals hold the truth.
fn speed_cells(members: &[&Sphere], model: Model) -> String {
    let fitted: Vec<Fitted> = members.iter().filter_map(|one| one.speed(model)).collect();
    let ratio: Vec<f64> = fitted.iter().map(|one| one.value / one.truth).collect();
    format!(
        "{} | {} | {} | {}",
        spread(&ratio),
        ratio.iter().filter(|ratio| **ratio < 0.0).count(),
        percent(&fitted, |one| one.within(1.0)),
        percent(&fitted, |one| one.within(2.0)),
    )
}

fn zero_speeds(text: &mut String, spheres: &[Sphere]) {
    text.push_str(
        "| kind | speed | pairs | v_in/sigma: median (16 to 84 %) | largest abs | beyond 3 err | tau below 0.5 |\n| --- | --- | --- | --- | --- | --- | --- |\n",
    );
    for kind in ["static", "twocloud"] {
        for (name, model) in SPEEDS {
            let members = of_kinds(spheres, &[kind]);
            let fitted: Vec<Fitted> = members.iter().filter_map(|one| one.speed(model)).collect();
            let ratio: Vec<f64> = fitted
                .iter()
                .map(|one| one.value / one.sigma_km_s)
                .collect();
            let largest = ratio.iter().map(|ratio| ratio.abs()).fold(0.0, f64::max);
            let _ = writeln!(
                text,
                "| {kind} | {name} | {} | {} | {largest:.2} | {} | {} |",
                fitted.len(),
                spread(&ratio),
                fitted
                    .iter()
                    .filter(|one| one.err.is_some() && !one.within(3.0))
                    .count(),
                members
                    .iter()
                    .filter_map(|one| one.fit(model)?.parameter("tau"))
                    .filter(|tau| tau.value < TRANSPARENT)
                    .count(),
            );
        }
    }
    text.push('\n');
}

fn classes(text: &mut String, spheres: &[Sphere]) {
    text.push_str(
        "| kind | pairs | blue | red | neither | undetected | two peaks | thin line between them |\n| --- | --- | --- | --- | --- | --- | --- | --- |\n",
    );
    for (kind, members) in by_kind(spheres) {
        let count = |class: ProfileClass| {
            let of_class = |sphere: &&&Sphere| {
                let outcome = sphere.outcome.as_ref();
                outcome.is_ok_and(|outcome| outcome.measures.profile == class)
            };
            members.iter().filter(of_class).count()
        };
        let peaks: Vec<bool> = members
            .iter()
            .filter_map(|sphere| thin_between_peaks(sphere.outcome.as_ref().ok()?))
            .collect();
        let _ = writeln!(
            text,
            "| {kind} | {} | {} | {} | {} | {} | {} | {} |",
            members.len(),
            count(ProfileClass::Blue),
            count(ProfileClass::Red),
            count(ProfileClass::Neither),
            count(ProfileClass::Undetected),
            peaks.len(),
            peaks.iter().filter(|between| **between).count(),
        );
    }
    text.push('\n');
}

/// Whether the thin line lies between the peaks of a two-peaked thick line; `None` for any other.
fn thin_between_peaks(outcome: &PairOutcome) -> Option<bool> {
    let peaks = outcome.measures.two_peaks?;
    let thin_km_s = outcome.thin_fit.line?.v_km_s.value;
    Some(peaks.v_blue_km_s.value < thin_km_s && thin_km_s < peaks.v_red_km_s.value)
}

fn cautions(text: &mut String, spheres: &[Sphere]) {
    let kinds = by_kind(spheres);
    let mut counts: BTreeMap<&str, Vec<usize>> = BTreeMap::new();
    for (column, (_, members)) in kinds.iter().enumerate() {
        for outcome in members.iter().filter_map(|one| one.outcome.as_ref().ok()) {
            for code in codes(outcome) {
                counts.entry(code).or_insert_with(|| vec![0; kinds.len()])[column] += 1;
            }
        }
    }
    let heads: Vec<String> = kinds
        .iter()
        .map(|(kind, members)| format!("{kind} ({})", members.len()))
        .collect();
    let _ = writeln!(
        text,
        "| caution | {} |\n| --- |{}",
        heads.join(" | "),
        " --- |".repeat(kinds.len())
    );
    for (code, counts) in counts {
        let cells: Vec<String> = counts.iter().map(usize::to_string).collect();
        let _ = writeln!(text, "| `{code}` | {} |", cells.join(" | "));
    }
    text.push('\n');
}

/// chi2 + k ln n over k free parameters and n channels (Schwarz 1978, doi:10.1214/aos/1176344136).
fn information(fit: &ModelFit) -> f64 {
    let channels = fit.channels as f64;
    fit.chi2 + (channels - fit.degrees_of_freedom as f64) * channels.ln()
}

/// How much better two Gaussians in both lines describe a pair than the hill does.
fn two_gaussians(text: &mut String, spheres: &[Sphere]) {
    text.push_str(
        "| kind | pairs | two Gaussians better by 10 or more | within 10 | hill better by 10 or more |\n| --- | --- | --- | --- | --- |\n",
    );
    for (kind, members) in by_kind(spheres) {
        let better: Vec<f64> = members
            .iter()
            .filter_map(|sphere| {
                let hill = information(sphere.fit(Model::Hill)?);
                Some(hill - information(sphere.fit(Model::TwoGaussians)?))
            })
            .collect();
        let count = |holds: fn(f64) -> bool| better.iter().filter(|gain| holds(**gain)).count();
        let _ = writeln!(
            text,
            "| {kind} | {} | {} | {} | {} |",
            better.len(),
            count(|gain| gain >= 10.0),
            count(|gain| gain.abs() < 10.0),
            count(|gain| gain <= -10.0),
        );
    }
    text.push('\n');
}

/// Codes of an outcome's cautions, each once.
fn codes(outcome: &PairOutcome) -> Vec<&'static str> {
    let mut codes: Vec<&'static str> = outcome.cautions.iter().map(Caution::code).collect();
    codes.sort_unstable();
    codes.dedup();
    codes
}

fn preparation(text: &mut String, spheres: &[Sphere]) {
    let done: Vec<(&Sphere, &PairOutcome)> = spheres
        .iter()
        .filter_map(|sphere| Some((sphere, sphere.outcome.as_ref().ok()?)))
        .collect();
    text.push_str(
        "| line | noise, measured/true: median (16 to 84 %), extremes | taken as correlated | window within 2 sigma of v_lsr |\n| --- | --- | --- | --- |\n",
    );
    for which in ["thick", "thin"] {
        let prepared = |outcome: &PairOutcome| match which {
            "thick" => outcome.thick.prepared.clone(),
            _ => outcome.thin.prepared.clone(),
        };
        let ratio: Vec<f64> = done
            .iter()
            .map(|(sphere, outcome)| {
                prepared(outcome).noise.rms_k / sphere.number(&format!("noise_{which}_k"))
            })
            .collect();
        let correlated = done
            .iter()
            .filter(|(_, outcome)| !prepared(outcome).noise.process.is_white())
            .count();
        let narrow = done
            .iter()
            .filter(|(sphere, outcome)| {
                let reach = 2.0 * sphere.number("sigma_km_s");
                let window = prepared(outcome).window;
                let v_lsr = sphere.number("v_lsr_km_s");
                window.low_km_s > v_lsr - reach || window.high_km_s < v_lsr + reach
            })
            .count();
        let extreme = |part| quantile(&ratio, part).unwrap_or(f64::NAN);
        let _ = writeln!(
            text,
            "| {which} | {}, {:.2} to {:.2} | {correlated} | {narrow} |",
            spread(&ratio),
            extreme(0.0),
            extreme(1.0),
        );
    }
    let refused: Vec<String> = spheres
        .iter()
        .filter_map(|sphere| {
            let error = sphere.outcome.as_ref().err()?;
            Some(format!("{}: {error}", sphere.truth["id"]))
        })
        .collect();
    let adopted = |outcome: &&PairOutcome| {
        let fit = outcome.fit.adopted();
        fit.is_some_and(|fit| fit.model == Model::Hill)
    };
    let hills = done.iter().filter(|(_, outcome)| adopted(outcome)).count();
    let _ = writeln!(
        text,
        "\nPairs whose adopted speed is the hill's: {hills} of {}. Pairs that could not be used: {}{}{}.",
        spheres.len(),
        refused.len(),
        if refused.is_empty() { "" } else { " - " },
        refused.join("; ")
    );
}

fn cell(estimate: Option<Estimate>) -> String {
    estimate.map_or_else(String::new, |estimate| {
        format!("{:.3}+-{:.3}", estimate.value, estimate.err)
    })
}

/// A row a pair, as CSV.
pub fn rows(spheres: &[Sphere]) -> String {
    let mut text = String::from(
        "id,kind,snr,v_true,sigma,tau_thin,two_layer,two_layer_chi2_red,hill,hill_tau,hill_sigma,hill_chi2_red,profile,delta_v,two_peaks,window_thick,window_thin,cautions\n",
    );
    for sphere in spheres {
        let Ok(outcome) = &sphere.outcome else {
            let _ = writeln!(text, "{},{}", sphere.truth["id"], sphere.kind());
            continue;
        };
        let parameter = |model, name: &str| {
            let found = sphere.fit(model).and_then(|fit| fit.parameter(name));
            found.map_or_else(String::new, |one| match one.err {
                Some(err) => format!("{:.3}+-{err:.3}", one.value),
                None => format!("{:.3}", one.value),
            })
        };
        let chi2 = |model| sphere.fit(model).map_or(f64::NAN, ModelFit::chi2_reduced);
        let v_lsr = sphere.number("v_lsr_km_s");
        let window = |window: Window| {
            let sigma = sphere.number("sigma_km_s");
            let ends = [window.low_km_s, window.high_km_s].map(|end| (end - v_lsr) / sigma);
            format!("{:.1}:{:.1}", ends[0], ends[1])
        };
        let _ = writeln!(
            text,
            "{},{},{},{},{},{},{},{:.2},{},{},{},{:.2},{:?},{},{},{},{},{}",
            sphere.truth["id"],
            sphere.kind(),
            sphere.truth["snr_thick"],
            sphere.v_true_km_s(),
            sphere.truth["sigma_km_s"],
            sphere.truth["tau_thin"],
            parameter(Model::TwoLayer, "v_in_km_s"),
            chi2(Model::TwoLayer),
            parameter(Model::Hill, "v_in_km_s"),
            parameter(Model::Hill, "tau"),
            parameter(Model::Hill, "sigma_km_s"),
            chi2(Model::Hill),
            outcome.measures.profile,
            cell(outcome.measures.delta_v),
            outcome.measures.two_peaks.is_some(),
            window(outcome.thick.prepared.window),
            window(outcome.thin.prepared.window),
            codes(outcome).join(" "),
        );
    }
    text
}
