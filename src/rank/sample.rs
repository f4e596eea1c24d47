//! What a sample says as a whole: blue excess, means and medians of the asymmetry, groups against each other, and
//! correlations between what was found of its sources.

use super::source::{Drawn, Finding, Grade, Profile, Source};
use crate::numeric::samples::{
    ONE_SIGMA, TWO_SIGMA, chance_of_at_least, chance_of_spearman, chance_of_split, fisher_exact,
    mann_whitney, mean, median, spearman, wilson_interval,
};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use std::collections::BTreeSet;

/// What one line pair of a source shows, without a model.
#[derive(Clone, Debug, PartialEq)]
pub struct SourceFacts {
    /// The line pair, such as `HCO+ 1-0 / H13CO+ 1-0`.
    pub line_pair: String,
    /// Group that the source belongs to.
    pub group: Option<String>,
    /// Sense of the asymmetry.
    pub profile: Profile,
    /// Normalised velocity difference.
    pub delta_v: Option<f64>,
    /// Intensity asymmetry.
    pub asymmetry: Option<f64>,
}

/// A mean with its error, and a median with its interval.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Middle {
    /// Values.
    pub count: usize,
    /// Mean.
    pub mean: f64,
    /// Its standard error from the values' scatter.
    pub mean_err: Option<f64>,
    /// Median.
    pub median: f64,
    /// Order statistics between which the population's median lies with at least 68 %.
    pub median68: Option<[f64; 2]>,
}

impl Middle {
    fn of(values: &[f64]) -> Option<Self> {
        let (mean, mean_err) = mean(values)?;
        let (median, median68) = median(values, ONE_SIGMA)?;
        Some(Self {
            count: values.len(),
            mean,
            mean_err,
            median,
            median68,
        })
    }
}

/// A share with its intervals after Wilson.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Share {
    /// How many have it.
    pub hits: u64,
    /// Of how many.
    pub tries: u64,
    /// The share.
    pub value: f64,
    /// 68 % interval.
    pub interval68: [f64; 2],
    /// 95 % interval.
    pub interval95: [f64; 2],
}

impl Share {
    fn of(hits: u64, tries: u64) -> Option<Self> {
        Some(Self {
            hits,
            tries,
            value: hits as f64 / tries as f64,
            interval68: wilson_interval(hits, tries, ONE_SIGMA)?,
            interval95: wilson_interval(hits, tries, TWO_SIGMA)?,
        })
    }
}

/// Statistics of one line pair, of the whole sample or one of its groups.
#[derive(Clone, Debug, PartialEq)]
pub struct PairStatistics {
    /// The line pair.
    pub line_pair: String,
    /// The group; `None` for all sources.
    pub group: Option<String>,
    /// Sources with both lines detected.
    pub detected: u64,
    /// Sources without.
    pub undetected: u64,
    /// Blue profiles.
    pub blue: u64,
    /// Red profiles.
    pub red: u64,
    /// Blue excess (`N_blue` - `N_red`)/N; `None` without a detection.
    pub excess: Option<f64>,
    /// Exact binomial probability that as many or more of the asymmetric profiles are blue by chance.
    pub chance_blue: f64,
    /// The same for as uneven a split to either side.
    pub chance_split: f64,
    /// Share of blue profiles among those detected.
    pub fraction_blue: Option<Share>,
    /// Share with an intensity asymmetry above 0.
    pub fraction_positive: Option<Share>,
    /// Normalised velocity difference.
    pub delta_v: Option<Middle>,
    /// Intensity asymmetry.
    pub asymmetry: Option<Middle>,
}

/// One group of a test.
#[derive(Clone, Debug, PartialEq)]
pub struct Side {
    /// Its name.
    pub group: String,
    /// Blue profiles.
    pub blue: u64,
    /// Sources with both lines detected.
    pub detected: u64,
    /// Values of the velocity difference.
    pub delta_v: usize,
}

/// Two groups against each other in one line pair.
#[derive(Clone, Debug, PartialEq)]
pub struct GroupTest {
    /// The line pair.
    pub line_pair: String,
    /// The groups.
    pub sides: [Side; 2],
    /// Fisher's exact test of the fractions of blue profiles, to either side.
    pub chance_fraction: Option<f64>,
    /// The first group's U in the test of Mann and Whitney of the velocity differences, and its probability to
    /// either side.
    pub mann_whitney: Option<(f64, f64)>,
}

/// Rank correlation of two quantities over the sources where infall is likely.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Correlation {
    /// Column of the first.
    pub first: &'static str,
    /// Column of the second.
    pub second: &'static str,
    /// Sources.
    pub count: usize,
    /// Spearman's coefficient of the values.
    pub rho: f64,
    /// Probability of as strong a correlation by chance, to either side.
    pub chance: f64,
    /// Central 68 % of the coefficients when every source's values are replaced by a draw.
    pub interval68: [f64; 2],
    /// Central 95 %.
    pub interval95: [f64; 2],
}

/// What a sample says as a whole.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Sample {
    /// Each line pair: all sources, then each group.
    pub line_pairs: Vec<PairStatistics>,
    /// Groups against each other.
    pub groups: Vec<GroupTest>,
    /// Groups that are too many to be tested against each other; 0 where they were.
    pub untested_groups: usize,
    /// Correlations.
    pub correlations: Vec<Correlation>,
}

/// Most groups that are tested against each other, two and two.
const MOST_GROUPS: usize = 12;
/// Draws of a correlation.
const DRAWS: usize = 1000;
/// Fewest sources of a correlation.
const FEWEST_SOURCES: usize = 5;

/// The statistics of a sample. `facts` are line pairs of sources, `sources` the sources that are ranked. The same
/// seed gives the same intervals.
#[must_use]
pub fn sample(facts: &[SourceFacts], sources: &[&Source], seed: u64) -> Sample {
    let pairs: BTreeSet<&str> = facts.iter().map(|one| one.line_pair.as_str()).collect();
    let groups: BTreeSet<&str> = (facts.iter())
        .filter_map(|one| one.group.as_deref())
        .collect();
    let mut sample = Sample {
        correlations: correlations(sources, seed),
        ..Sample::default()
    };
    let tested = groups.len() <= MOST_GROUPS;
    if !tested {
        sample.untested_groups = groups.len();
    }
    for pair in pairs {
        let own: Vec<&SourceFacts> = facts.iter().filter(|one| one.line_pair == pair).collect();
        sample.line_pairs.push(pair_statistics(pair, None, &own));
        if !tested {
            continue;
        }
        let of_groups: Vec<(&str, Vec<&SourceFacts>)> = (groups.iter())
            .map(|group| (*group, of_group(&own, group)))
            .filter(|(_, members)| !members.is_empty())
            .collect();
        for (index, (group, members)) in of_groups.iter().enumerate() {
            let statistics = pair_statistics(pair, Some(group), members);
            sample.line_pairs.push(statistics);
            for (other, others) in &of_groups[index + 1..] {
                let test = group_test(pair, (group, members), (other, others));
                sample.groups.push(test);
            }
        }
    }
    sample
}

fn of_group<'a>(facts: &[&'a SourceFacts], group: &str) -> Vec<&'a SourceFacts> {
    let members = facts
        .iter()
        .filter(|one| one.group.as_deref() == Some(group));
    members.copied().collect()
}

fn count(facts: &[&SourceFacts], profile: Profile) -> u64 {
    facts.iter().filter(|one| one.profile == profile).count() as u64
}

fn values(facts: &[&SourceFacts], of: fn(&SourceFacts) -> Option<f64>) -> Vec<f64> {
    let detected = facts
        .iter()
        .filter(|one| one.profile != Profile::Undetected);
    detected.filter_map(|one| of(one)).collect()
}

fn pair_statistics(pair: &str, group: Option<&str>, facts: &[&SourceFacts]) -> PairStatistics {
    let undetected = count(facts, Profile::Undetected);
    let detected = facts.len() as u64 - undetected;
    let (blue, red) = (count(facts, Profile::Blue), count(facts, Profile::Red));
    let asymmetries = values(facts, |one| one.asymmetry);
    let positive = asymmetries.iter().filter(|value| **value > 0.0).count() as u64;
    PairStatistics {
        line_pair: pair.to_owned(),
        group: group.map(str::to_owned),
        detected,
        undetected,
        blue,
        red,
        excess: (detected > 0).then(|| (blue as f64 - red as f64) / detected as f64),
        chance_blue: chance_of_at_least(blue, blue + red),
        chance_split: chance_of_split(blue, blue + red),
        fraction_blue: Share::of(blue, detected),
        fraction_positive: Share::of(positive, asymmetries.len() as u64),
        delta_v: Middle::of(&values(facts, |one| one.delta_v)),
        asymmetry: Middle::of(&asymmetries),
    }
}

fn group_test(
    pair: &str,
    first: (&str, &[&SourceFacts]),
    second: (&str, &[&SourceFacts]),
) -> GroupTest {
    let delta_v = |facts: &[&SourceFacts]| values(facts, |one| one.delta_v);
    let side = |(group, facts): (&str, &[&SourceFacts])| Side {
        group: group.to_owned(),
        blue: count(facts, Profile::Blue),
        detected: facts.len() as u64 - count(facts, Profile::Undetected),
        delta_v: delta_v(facts).len(),
    };
    let sides = [side(first), side(second)];
    let share = |side: &Side| (side.blue, side.detected);
    GroupTest {
        line_pair: pair.to_owned(),
        chance_fraction: fisher_exact(share(&sides[0]), share(&sides[1])),
        mann_whitney: mann_whitney(&delta_v(first.1), &delta_v(second.1)),
        sides,
    }
}

type Column = (&'static str, fn(&Finding) -> Option<&Drawn>);

const SPEED: Column = ("v_in_km_s", |finding| finding.v_in_km_s.as_ref());
const RATE: Column = ("mass_rate_msun_yr", |finding| finding.rate_msun_yr.as_ref());
const MASS: Column = ("mass_msun", |finding| finding.mass_msun.as_ref());
const FREE_FALL: Column = ("v_ff_km_s", |finding| finding.v_ff_km_s.as_ref());
const SIGMA: Column = ("sigma_km_s", |finding| finding.sigma_km_s.as_ref());

/// What is correlated with what.
const CORRELATED: [(Column, Column); 5] = [
    (SPEED, MASS),
    (SPEED, FREE_FALL),
    (SPEED, SIGMA),
    (RATE, MASS),
    (RATE, SIGMA),
];

fn correlations(sources: &[&Source], seed: u64) -> Vec<Correlation> {
    let likely: Vec<&Finding> = (sources.iter())
        .map(|source| &source.finding)
        .filter(|finding| finding.grade() <= Grade::Likely)
        .collect();
    (CORRELATED.iter().enumerate())
        .filter_map(|(stream, (first, second))| {
            let mut generator = ChaCha8Rng::seed_from_u64(seed);
            generator.set_stream(stream as u64 + 1);
            correlation(&likely, *first, *second, &mut generator)
        })
        .collect()
}

fn correlation(
    findings: &[&Finding],
    first: Column,
    second: Column,
    generator: &mut ChaCha8Rng,
) -> Option<Correlation> {
    let pairs: Vec<(&Drawn, &Drawn)> = (findings.iter())
        .filter_map(|finding| Some(((first.1)(finding)?, (second.1)(finding)?)))
        .collect();
    if pairs.len() < FEWEST_SOURCES {
        return None;
    }
    let (a, b): (Vec<f64>, Vec<f64>) = pairs.iter().map(|(a, b)| (a.value, b.value)).unzip();
    let rho = spearman(&a, &b)?;
    let mut drawn = Vec::with_capacity(DRAWS);
    for _ in 0..DRAWS {
        // both of one row: what they share, such as the distance, moves them together
        let rows = pairs.iter().map(|(a, b)| {
            let rows = a.draws.len().min(b.draws.len()).max(1) as u64;
            let row = usize::try_from(generator.next_u64() % rows).unwrap_or_default();
            let at = |one: &Drawn| {
                one.draws
                    .get(row)
                    .map_or(one.value, |draw| f64::from(*draw))
            };
            (at(a), at(b))
        });
        let (a, b): (Vec<f64>, Vec<f64>) = rows.unzip();
        #[allow(clippy::cast_possible_truncation, reason = "as all draws")]
        drawn.extend(spearman(&a, &b).map(|rho| rho as f32));
    }
    let drawn = Drawn {
        value: rho,
        draws: drawn,
    };
    Some(Correlation {
        first: first.0,
        second: second.0,
        count: pairs.len(),
        rho,
        chance: chance_of_spearman(rho, pairs.len())?,
        interval68: drawn.interval68()?,
        interval95: drawn.interval95()?,
    })
}

#[cfg(test)]
#[allow(clippy::cast_possible_truncation, clippy::unwrap_used)]
mod tests {
    use super::*;

    fn facts(group: &str, profile: Profile, delta_v: f64) -> SourceFacts {
        SourceFacts {
            line_pair: "HCO+ 1-0 / H13CO+ 1-0".to_owned(),
            group: Some(group.to_owned()),
            profile,
            delta_v: Some(delta_v),
            asymmetry: Some(-delta_v / 4.0),
        }
    }

    /// Wu & Evans 2003 (abstract, astro-ph/0306543): 28 cores with 12 blue and 6 red profiles have an excess of
    /// 0.21; 18 with two peaks, 11 blue and 3 red, one of 0.44. The chances are scipy 1.17.1's `binomtest`.
    #[test]
    fn a_published_sample_has_its_published_excess() {
        for (all, blue, red, excess, chance) in [
            (28, 12, 6, 0.214, 0.118_942_260_742_187_5),
            (18, 11, 3, 0.444, 0.028_686_523_437_5),
        ] {
            let profile = |index| match index {
                _ if index < blue => Profile::Blue,
                _ if index < blue + red => Profile::Red,
                _ => Profile::Neither,
            };
            let mut many: Vec<SourceFacts> = (0..all)
                .map(|index| facts("all", profile(index), 0.0))
                .collect();
            many.push(facts("all", Profile::Undetected, 9.0));
            let found = sample(&many, &[], 1);
            let own = &found.line_pairs[0];
            assert_eq!((own.detected, own.undetected), (all, 1));
            assert!((own.excess.unwrap() - excess).abs() < 5e-4);
            assert!((own.chance_blue - chance).abs() < 1e-13);
            assert_eq!(own.delta_v.unwrap().count as u64, all);
        }
    }

    #[test]
    fn groups_are_told_apart_by_fraction_and_by_velocity_difference() {
        let mut many = Vec::new();
        for index in 0..11 {
            let profile = if index < 8 {
                Profile::Blue
            } else {
                Profile::Neither
            };
            many.push(facts("early", profile, -0.5 + 0.01 * f64::from(index)));
        }
        for index in 0..14 {
            let profile = if index < 3 {
                Profile::Blue
            } else {
                Profile::Neither
            };
            many.push(facts("late", profile, 0.1 + 0.01 * f64::from(index)));
        }
        let found = sample(&many, &[], 1);
        let [test] = &found.groups[..] else {
            panic!("{:?}", found.groups);
        };
        // scipy 1.17.1: fisher_exact([[8, 3], [3, 11]])
        assert!((test.chance_fraction.unwrap() - 0.017_183_784_268_856_285).abs() < 1e-12);
        // no value of one lies among the other's
        assert!(test.mann_whitney.unwrap().0 == 0.0 && test.mann_whitney.unwrap().1 < 1e-4);
        let named: Vec<Option<&str>> = (found.line_pairs.iter())
            .map(|one| one.group.as_deref())
            .collect();
        assert_eq!(named, [None, Some("early"), Some("late")]);
    }

    #[test]
    fn correlations_are_of_likely_infall_and_as_uncertain_as_the_draws() {
        let source = |index: u32, p_infall: f64, width: f32| {
            let value = f64::from(index);
            let draws = |value: f64| {
                (-10..=10)
                    .map(|x| value as f32 + width * x as f32)
                    .collect()
            };
            Source {
                id: format!("{index}"),
                finding: Finding {
                    probabilities: Some([p_infall, 0.0, 1.0 - p_infall, 0.0]),
                    trusted: true,
                    detected: true,
                    v_in_km_s: Some(Drawn {
                        value,
                        draws: draws(value),
                    }),
                    mass_msun: Some(Drawn {
                        value: value * value,
                        draws: draws(value * value),
                    }),
                    rate_msun_yr: None,
                    v_ff_km_s: None,
                    sigma_km_s: None,
                    line_pairs: 1,
                    disagreement: None,
                },
            }
        };
        let of = |width: f32| {
            let mut sources: Vec<Source> = (1..20).map(|index| source(index, 0.9, width)).collect();
            sources.push(source(1000, 0.1, width));
            let sources: Vec<&Source> = sources.iter().collect();
            sample(&[], &sources, 1).correlations
        };
        let [exact] = of(1e-6)[..] else { panic!() };
        assert_eq!((exact.first, exact.second), ("v_in_km_s", "mass_msun"));
        assert_eq!((exact.count, exact.rho), (19, 1.0));
        assert_eq!(exact.interval95, [1.0, 1.0]);
        let [wide] = of(3.0)[..] else { panic!() };
        assert_eq!(wide.rho, 1.0);
        assert!(wide.interval68[0] < 0.9 && wide.interval68[0] > 0.0);
    }
}
