//! The figures of a ranking: what is drawn, handed to the report.

use super::{Member, Ordered, PairRecord, RankRun};
use crate::measure::CLASS_LIMIT;
use crate::rank::{Drawn, Finding, Grade, Profile, Quantity};
use crate::report::figure::{
    DistributionFigure, Interval, ProfilePanel, ProfileSheet, RankBar, RankFigure, ScatterFigure,
    ScatterPoint,
};
use crate::report::rounded_interval;
use crate::run::products::{make_directory, write_figure};
use crate::run::{BatchSettings, Journal, RunError};
use std::ops::ControlFlow;
use std::path::PathBuf;

/// Folder of the figures.
const FOLDER: &str = "figures";
/// Sources in the figure of the ranking: more do not fit a page.
const MOST_BARS: usize = 50;
/// Pages of profiles.
const MOST_SHEETS: usize = 5;
/// Width of PNG images of a column and of a page, pixels.
const COLUMN_PX: u32 = 1400;
const PAGE_PX: u32 = 2400;

/// Draws and writes every figure, on as many threads as the batch has.
pub(super) fn write(
    ordered: &Ordered<'_>,
    journal: &Journal<PairRecord>,
    run: &RankRun,
    batch: &BatchSettings,
) -> Result<Vec<PathBuf>, RunError> {
    let folder = run.directory.join(FOLDER);
    make_directory(&folder)?;
    let groups = Groups::of(ordered);
    let mut drawn: Vec<(String, u32, String)> = Vec::new();
    let mut add = |name: &str, width_px: u32, svg: String| {
        drawn.push((name.to_owned(), width_px, svg));
    };
    if let Some(figure) = distribution(ordered, &groups) {
        add("velocity-differences", COLUMN_PX, figure.svg()?);
    }
    for (name, figure) in [
        ("speed-free-fall", speed_free_fall(ordered, &groups)),
        ("rate-mass", rate_mass(ordered, &groups)),
    ] {
        if let Some(figure) = figure {
            add(name, COLUMN_PX, figure.svg()?);
        }
    }
    add("ranking", PAGE_PX, ranking(ordered, &groups).svg()?);
    let pages = ordered.members.chunks(ProfileSheet::PANELS);
    for (page, members) in pages.take(MOST_SHEETS).enumerate() {
        let first = page * ProfileSheet::PANELS;
        let sheet = profiles(ordered, journal, members, first)?;
        add(&format!("profiles-{}", page + 1), PAGE_PX, sheet.svg()?);
    }
    let mut written = Vec::new();
    let ended = batch.run(
        drawn,
        || (),
        |(), (name, width_px, svg): (String, u32, String)| {
            write_figure(&folder, &name, &svg, width_px)
        },
        |_, paths: Result<Vec<PathBuf>, RunError>| match paths {
            Ok(paths) => {
                written.extend(paths);
                ControlFlow::Continue(())
            }
            Err(error) => ControlFlow::Break(error),
        },
    )?;
    match ended {
        ControlFlow::Continue(_) => Ok(written),
        ControlFlow::Break(error) => Err(error),
    }
}

/// The sample's groups in order; none where no source has one.
struct Groups(Vec<String>);

/// What a source without a group is called beside others with one.
const NO_GROUP: &str = "no group";

impl Groups {
    fn of(ordered: &Ordered<'_>) -> Self {
        let mut names: Vec<String> = (ordered.facts.iter())
            .filter_map(|one| one.group.clone())
            .collect();
        names.sort();
        names.dedup();
        let alone = ordered.facts.iter().any(|one| one.group.is_none());
        if alone && !names.is_empty() {
            names.push(NO_GROUP.to_owned());
        }
        Self(names)
    }

    fn index(&self, group: Option<&str>) -> usize {
        let name = group.unwrap_or(NO_GROUP);
        self.0.iter().position(|known| known == name).unwrap_or(0)
    }
}

fn distribution(ordered: &Ordered<'_>, groups: &Groups) -> Option<DistributionFigure> {
    let detected = ordered
        .facts
        .iter()
        .filter(|one| one.profile != Profile::Undetected);
    let values: Vec<(f64, usize)> = detected
        .filter_map(|one| Some((one.delta_v?, groups.index(one.group.as_deref()))))
        .collect();
    (!values.is_empty()).then(|| DistributionFigure {
        title: format!("Asymmetry of {} line pairs", values.len()),
        groups: groups.0.clone(),
        values,
        limit: CLASS_LIMIT,
    })
}

fn scatter(
    ordered: &Ordered<'_>,
    groups: &Groups,
    title: &str,
    (x_name, x): (&str, fn(&Finding) -> Option<&Drawn>),
    (y_name, y): (&str, fn(&Finding) -> Option<&Drawn>),
) -> Option<ScatterFigure> {
    let (mut points, mut below) = (Vec::new(), 0usize);
    for member in &ordered.members {
        let finding = &member.source.finding;
        if finding.grade() == Grade::Unknown {
            continue;
        }
        let (Some(x), Some(y)) = (x(finding).and_then(interval), y(finding).and_then(interval))
        else {
            continue;
        };
        if x.value <= 0.0 || y.value <= 0.0 {
            below += 1;
            continue;
        }
        points.push(ScatterPoint {
            x,
            y,
            group: groups.index(member.group.as_deref()),
            likely: finding.grade() <= Grade::Likely,
        });
    }
    let left_out = match below {
        0 => Vec::new(),
        1 => vec!["one source with a speed below zero is left out".to_owned()],
        some => vec![format!(
            "{some} sources with a speed below zero are left out"
        )],
    };
    (!points.is_empty()).then(|| ScatterFigure {
        title: title.to_owned(),
        groups: groups.0.clone(),
        axes: (x_name.to_owned(), y_name.to_owned()),
        points,
        ratios: Vec::new(),
        left_out,
    })
}

fn speed_free_fall(ordered: &Ordered<'_>, groups: &Groups) -> Option<ScatterFigure> {
    let figure = scatter(
        ordered,
        groups,
        "Inward speed and free fall",
        ("free-fall speed (km/s)", |finding| {
            finding.v_ff_km_s.as_ref()
        }),
        ("inward speed (km/s)", |finding| finding.v_in_km_s.as_ref()),
    )?;
    Some(ScatterFigure {
        ratios: vec![
            (1.0, "free fall".to_owned()),
            (0.1, "a tenth of it".to_owned()),
        ],
        ..figure
    })
}

fn rate_mass(ordered: &Ordered<'_>, groups: &Groups) -> Option<ScatterFigure> {
    scatter(
        ordered,
        groups,
        "Mass infall rate and mass",
        ("mass (M_{sun})", |finding| finding.mass_msun.as_ref()),
        ("mass infall rate (M_{sun}/yr)", |finding| {
            finding.rate_msun_yr.as_ref()
        }),
    )
}

/// A quantity with its 68 % interval.
fn interval(drawn: &Drawn) -> Option<Interval> {
    let [low, high] = drawn.interval68()?;
    Some(Interval {
        value: drawn.value,
        low,
        high,
    })
}

fn ranking(ordered: &Ordered<'_>, groups: &Groups) -> RankFigure {
    let shown = ordered.members.iter().take(MOST_BARS);
    let bars: Vec<RankBar> = (1..)
        .zip(shown)
        .map(|(place, member)| {
            let finding = &member.source.finding;
            let known = finding.grade() != Grade::Unknown;
            let quantity = ordered.quantity.of(finding);
            RankBar {
                name: member.source.id.clone(),
                place,
                places: member.spread.map(|spread| {
                    let [low, high] = spread.interval68.map(f64::from);
                    (low, high)
                }),
                p_infall: finding.p_infall().filter(|_| known),
                quantity: quantity.filter(|_| known).and_then(interval),
                group: groups.index(member.group.as_deref()),
            }
        })
        .collect();
    let all = ordered.members.len();
    RankFigure {
        title: if bars.len() < all {
            format!("Ranking: the first {} of {all} sources", bars.len())
        } else {
            format!("Ranking of {all} sources")
        },
        groups: groups.0.clone(),
        quantity: match ordered.quantity {
            Quantity::Rate => "mass infall rate (M_{sun}/yr)".to_owned(),
            Quantity::Speed => "inward speed (km/s)".to_owned(),
        },
        bars,
        sources: all,
    }
}

fn profiles(
    ordered: &Ordered<'_>,
    journal: &Journal<PairRecord>,
    members: &[Member],
    first: usize,
) -> Result<ProfileSheet, RunError> {
    let mut panels = Vec::with_capacity(members.len());
    for (place, member) in (first + 1..).zip(members) {
        let sketch = ordered.record(journal, member.leading)?.sketch;
        let finding = &member.source.finding;
        let line = |line: &super::LineSketch| -> Vec<(f64, f64)> {
            let channels = line.velocity_km_s.iter().zip(&line.temperature_k);
            channels
                .map(|(velocity, temperature)| (f64::from(*velocity), f64::from(*temperature)))
                .collect()
        };
        let chance = match finding.p_infall() {
            Some(p_infall) if finding.detected => format!("{p_infall:.2}"),
            _ => "not detected".to_owned(),
        };
        let speed = finding.v_in_km_s.as_ref().and_then(interval);
        panels.push(ProfilePanel {
            name: format!("{place}  {}", member.source.id),
            note: match speed {
                Some(one) if finding.detected => format!(
                    "{chance}; {} km/s",
                    rounded_interval(one.value, one.low, one.high)
                ),
                _ => chance,
            },
            thick: line(&sketch.thick),
            thin: line(&sketch.thin),
            v_thin_km_s: sketch.v_thin_km_s,
        });
    }
    Ok(ProfileSheet {
        title: format!("Profiles {} to {}", first + 1, first + panels.len()),
        panels,
    })
}
