//! Injections into bias, scatter, coverage and false alarms.

use super::{Found, Injection, Kind};
use crate::numeric::robust::median;
use crate::numeric::samples::wilson_interval;

/// A noise level.
#[derive(Clone, Debug, PartialEq)]
pub struct Level {
    /// Noise over the observation's own.
    pub noise_factor: f64,
    /// Peak of the injected thick line over the noise.
    pub signal_to_noise: f64,
    /// The pairs that move as fitted; `found` is motion of the true sign.
    pub moving: Statistics,
    /// The pairs at rest; `found` is infall: false alarms.
    pub at_rest: Statistics,
}

/// A share of pairs with the ends of its 95 % interval.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Share {
    /// Pairs that have what is asked for.
    pub count: usize,
    /// All pairs.
    pub of: usize,
}

impl Share {
    fn new(pairs: &[&Found], has: impl Fn(&Found) -> bool) -> Self {
        Self {
            count: pairs.iter().filter(|pair| has(pair)).count(),
            of: pairs.len(),
        }
    }

    /// The share; `None` of no pairs.
    #[must_use]
    pub fn value(self) -> Option<f64> {
        (self.of > 0).then(|| self.count as f64 / self.of as f64)
    }

    /// Ends of its 95 % interval; 0 and 1 of no pairs.
    #[must_use]
    pub fn interval95(self) -> (f64, f64) {
        let [low, high] =
            wilson_interval(self.count as u64, self.of as u64, 0.95).unwrap_or([0.0, 1.0]);
        (low, high)
    }
}

/// Statistics of the pairs of one truth at one noise level.
#[derive(Clone, Debug, PartialEq)]
pub struct Statistics {
    /// Pairs injected.
    pub pairs: usize,
    /// Pairs that could not be fitted, such as those whose line was not found.
    pub refused: usize,
    /// Pairs with a speed.
    pub with_speed: usize,
    /// Median of found less true speed, km/s.
    pub bias_km_s: Option<f64>,
    /// Standard error of it, km/s.
    pub bias_err_km_s: Option<f64>,
    /// Half the width of the central 68 % of the speeds, km/s.
    pub scatter_km_s: Option<f64>,
    /// Median of half the width of the stated 68 % intervals, km/s.
    pub stated_km_s: Option<f64>,
    /// Pairs whose 68 % interval holds the truth, of those with one.
    pub in68: Share,
    /// Pairs whose 95 % interval holds the truth, of those with one.
    pub in95: Share,
    /// Pairs in which motion is found, of all injected.
    pub found: Share,
}

impl Statistics {
    fn of(injections: &[&Injection], truth_km_s: f64, inward: bool) -> Self {
        let found: Vec<&Found> = injections
            .iter()
            .filter_map(|one| one.found.as_ref().ok())
            .collect();
        let mut off: Vec<f64> = found
            .iter()
            .filter_map(|one| Some(one.v_in_km_s? - truth_km_s))
            .collect();
        off.sort_by(f64::total_cmp);
        let scatter_km_s = (off.len() > 2)
            .then(|| 0.5 * (quantile(&off, 0.841_344_75) - quantile(&off, 0.158_655_25)));
        let halves: Vec<f64> = found
            .iter()
            .filter_map(|one| one.interval68_km_s)
            .map(|(low, high)| 0.5 * (high - low))
            .collect();
        let known = |values: &[f64]| (!values.is_empty()).then(|| median(values));
        let with_interval: Vec<&Found> = found
            .iter()
            .copied()
            .filter(|one| one.interval68_km_s.is_some() && one.interval95_km_s.is_some())
            .collect();
        let holds = |ends: Option<(f64, f64)>| {
            ends.is_some_and(|(low, high)| (low..=high).contains(&truth_km_s))
        };
        // the median of normal values scatters by 1.2533 of the mean's error
        let root = (off.len() as f64).sqrt();
        let mut share = Share::new(&found, |one| one.moves(inward));
        share.of = injections.len();
        Self {
            pairs: injections.len(),
            refused: injections.len() - found.len(),
            with_speed: off.len(),
            bias_km_s: known(&off),
            bias_err_km_s: scatter_km_s.map(|scatter| 1.253_3 * scatter / root),
            scatter_km_s,
            stated_km_s: known(&halves),
            in68: Share::new(&with_interval, |one| holds(one.interval68_km_s)),
            in95: Share::new(&with_interval, |one| holds(one.interval95_km_s)),
            found: share,
        }
    }
}

/// Quantile of sorted values by linear interpolation.
fn quantile(sorted: &[f64], share: f64) -> f64 {
    let place = share * (sorted.len() - 1) as f64;
    let part = place - place.floor();
    #[expect(
        clippy::cast_possible_truncation,
        clippy::cast_sign_loss,
        reason = "a place within the slice"
    )]
    let below = place as usize;
    let above = (below + 1).min(sorted.len() - 1);
    sorted[below] + part * (sorted[above] - sorted[below])
}

/// Statistics of every noise level, the lowest signal-to-noise ratio first.
pub(super) fn levels(injections: &[Injection], v_in_km_s: f64, signal_to_noise: f64) -> Vec<Level> {
    let mut factors: Vec<f64> = injections.iter().map(|one| one.noise_factor).collect();
    factors.sort_by(|a, b| b.total_cmp(a));
    factors.dedup();
    factors
        .into_iter()
        .map(|noise_factor| {
            let of = |kind: Kind| -> Vec<&Injection> {
                let own = injections.iter();
                own.filter(|one| one.noise_factor == noise_factor && one.kind == kind)
                    .collect()
            };
            Level {
                noise_factor,
                signal_to_noise: signal_to_noise / noise_factor,
                moving: Statistics::of(&of(Kind::Moving), v_in_km_s, v_in_km_s > 0.0),
                at_rest: Statistics::of(&of(Kind::AtRest), 0.0, true),
            }
        })
        .collect()
}

/// A share that is asked for where a pair has to be found almost surely.
pub const NINE_IN_TEN: f64 = 0.9;

/// The signal-to-noise ratio that something needs.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Needed {
    /// This one, between two of the levels.
    At(f64),
    /// Less than the lowest level's.
    Below(f64),
    /// More than the highest level's, if any is enough.
    Above(f64),
}

/// The signal-to-noise ratio from which the share of found pairs stays above one that is asked for:
/// between two levels, by linear interpolation in its logarithm.
pub(super) fn needed(levels: &[Level], share: f64) -> Needed {
    let found = |level: &Level| level.moving.found.value().unwrap_or(0.0);
    let (Some(first), Some(last)) = (levels.first(), levels.last()) else {
        return Needed::Above(0.0);
    };
    if found(last) < share {
        return Needed::Above(last.signal_to_noise);
    }
    for pair in levels.windows(2).rev() {
        let (low, high) = (found(&pair[0]), found(&pair[1]));
        if low < share {
            let [from, to] = [&pair[0], &pair[1]].map(|level| level.signal_to_noise.ln());
            let part = (share - low) / (high - low);
            return Needed::At((from + part * (to - from)).exp());
        }
    }
    Needed::Below(first.signal_to_noise)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn injection(v_in_km_s: f64, half: f64, p_infall: f64) -> Injection {
        Injection {
            kind: Kind::Moving,
            noise_factor: 1.0,
            true_v_in_km_s: 0.3,
            found: Ok(Found {
                v_in_km_s: Some(v_in_km_s),
                err_km_s: Some(half),
                interval68_km_s: Some((v_in_km_s - half, v_in_km_s + half)),
                interval95_km_s: Some((v_in_km_s - 2.0 * half, v_in_km_s + 2.0 * half)),
                formal: false,
                probabilities: Some([p_infall, 0.0, 1.0 - p_infall, 0.0]),
                cautions: String::new(),
            }),
        }
    }

    #[test]
    fn statistics_are_those_of_a_few_pairs() {
        let mut all: Vec<Injection> = [0.2, 0.3, 0.4, 0.5, 0.6]
            .into_iter()
            .map(|v| injection(v, 0.1001, if v > 0.35 { 0.95 } else { 0.5 }))
            .collect();
        all.push(Injection {
            found: Err("no line found".to_owned()),
            ..all[0].clone()
        });
        let levels = levels(&all, 0.3, 20.0);
        let [level] = &levels[..] else {
            panic!("{levels:?}");
        };
        let moving = &level.moving;
        assert_eq!((moving.pairs, moving.refused, moving.with_speed), (6, 1, 5));
        assert!((moving.bias_km_s.unwrap() - 0.1).abs() < 1e-12);
        // quantiles of five values: places 0.635 and 3.365
        assert!((moving.scatter_km_s.unwrap() - 0.136_538).abs() < 1e-4);
        assert!((moving.stated_km_s.unwrap() - 0.1001).abs() < 1e-12);
        assert_eq!(moving.in68, Share { count: 3, of: 5 });
        assert_eq!(moving.in95, Share { count: 4, of: 5 });
        assert_eq!(moving.found, Share { count: 3, of: 6 });
        assert_eq!(level.at_rest.pairs, 0);
        assert_eq!(level.at_rest.found.value(), None);
    }

    #[test]
    fn what_is_needed_lies_between_two_levels() {
        let level = |signal_to_noise: f64, count: usize| {
            let injections = [injection(0.3, 0.1, 0.5)];
            let mut level = levels(&injections, 0.3, signal_to_noise).remove(0);
            level.moving.found = Share { count, of: 10 };
            level
        };
        let found = |counts: [usize; 3], share: f64| {
            let [a, b, c] = counts;
            needed(&[level(10.0, a), level(20.0, b), level(40.0, c)], share)
        };
        let Needed::At(half_way) = found([0, 4, 6], 0.5) else {
            panic!();
        };
        assert!((half_way - 800f64.sqrt()).abs() < 1e-9, "{half_way}");
        assert_eq!(found([0, 4, 4], 0.5), Needed::Above(40.0));
        assert_eq!(found([6, 6, 6], 0.5), Needed::Below(10.0));
        // what falls again counts from where it stays
        let Needed::At(stays) = found([6, 4, 6], 0.5) else {
            panic!();
        };
        assert!(stays > 20.0, "{stays}");
    }
}
