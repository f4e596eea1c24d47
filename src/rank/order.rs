//! The order of sources, and how firm each place in it is.

use super::source::{Drawn, Finding, Grade, Source};
use crate::fit::hypotheses::Hypothesis;
use rand::distr::{Distribution, StandardUniform};
use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};
use std::cmp::Ordering;

/// What sources are ordered by.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Quantity {
    /// Mass infall rate.
    Rate,
    /// Inward speed.
    Speed,
}

impl Quantity {
    /// Its result column.
    #[must_use]
    pub fn column(self) -> &'static str {
        match self {
            Self::Rate => "mass_rate_msun_yr",
            Self::Speed => "v_in_km_s",
        }
    }

    /// Draws of it.
    #[must_use]
    pub fn of(self, finding: &Finding) -> Option<&Drawn> {
        match self {
            Self::Rate => finding.rate_msun_yr.as_ref(),
            Self::Speed => finding.v_in_km_s.as_ref(),
        }
    }
}

/// Rates where any source has one, else speeds.
#[must_use]
pub fn quantity<'a>(sources: impl IntoIterator<Item = &'a Source>) -> Quantity {
    let any = |source: &Source| source.finding.rate_msun_yr.is_some();
    if sources.into_iter().any(any) {
        Quantity::Rate
    } else {
        Quantity::Speed
    }
}

/// Share of the draws below what counts as certain of a rate or speed: one standard deviation.
const CERTAIN: f64 = 0.16;

/// What infall into a source brings by expectation: the probability of infall times the mean of the inward draws, in the
/// quantity's unit; `None` without draws, a detection or a model with an inward speed.
#[must_use]
pub fn expected(finding: &Finding, quantity: Quantity) -> Option<f64> {
    let draws = &quantity.of(finding)?.draws;
    if draws.is_empty() || finding.grade() == Grade::Unknown {
        return None;
    }
    let inward = || draws.iter().filter(|draw| **draw > 0.0).copied();
    let count = inward().count().max(1) as f64;
    let mean = inward().map(f64::from).sum::<f64>() / count;
    Some(finding.p_infall()? * mean).filter(|value| value.is_finite())
}

/// What a source surpasses with 84 % probability: the lower end of its 68 % interval.
pub(super) fn certain(finding: &Finding, quantity: Quantity) -> Option<f64> {
    quantity.of(finding)?.quantile(CERTAIN)
}

/// The order of two sources, the first one first:
///
/// 1. the [`expected`] rate, the larger first;
/// 2. one without a rate stands behind those with one, by its expected speed;
/// 3. the name.
#[must_use]
pub fn compare(a: &Source, b: &Source, quantity: Quantity) -> Ordering {
    let key = |source: &Source| {
        (
            expected(&source.finding, quantity),
            expected(&source.finding, Quantity::Speed),
        )
    };
    // without one is less than any
    let descending = |a: Option<f64>, b: Option<f64>| match (a, b) {
        (Some(a), Some(b)) => b.total_cmp(&a),
        (a, b) => b.is_some().cmp(&a.is_some()),
    };
    let ((first_a, second_a), (first_b, second_b)) = (key(a), key(b));
    descending(first_a, first_b)
        .then_with(|| descending(second_a, second_b))
        .then_with(|| a.id.cmp(&b.id))
}

/// How firm a source's place is.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct RankSpread {
    /// Ends of the central 68 % of its places, from 1.
    pub interval68: [u32; 2],
    /// Probability of being among the `top` first.
    pub p_top: f64,
}

/// Most numbers of places that are kept at once: 64 MB.
const MOST_PLACES: usize = 1 << 24;
/// Most and fewest draws of the whole order.
const DRAWS: (usize, usize) = (2000, 200);

/// How firm each source's place is when sources are ordered by their true rate (or speed).
///
/// In each of up to 2000 draws, every source is given a hypothesis by its probabilities: infall with a rate drawn from those
/// above zero, expansion with one from those below, else a rate of zero; then all are ordered, equal ones
/// by lot. `None` where a source has no such quantity or was not detected. The same seed gives the same places.
#[must_use]
pub fn rank_spreads(
    sources: &[&Source],
    quantity: Quantity,
    top: usize,
    seed: u64,
) -> Vec<Option<RankSpread>> {
    let drawn: Vec<Option<Outcomes<'_>>> = (sources.iter())
        .map(|source| Outcomes::of(&source.finding, quantity))
        .collect();
    let placed: Vec<(usize, &Outcomes<'_>)> = (drawn.iter().enumerate())
        .filter_map(|(index, outcomes)| Some((index, outcomes.as_ref()?)))
        .collect();
    let mut spreads = vec![None; sources.len()];
    if placed.is_empty() {
        return spreads;
    }
    let draws = (MOST_PLACES / placed.len()).clamp(DRAWS.1, DRAWS.0);
    let mut places = vec![0u32; draws * placed.len()];
    let mut generator = ChaCha8Rng::seed_from_u64(seed);
    let mut order: Vec<(f32, u32, u32)> = Vec::with_capacity(placed.len());
    for draw in 0..draws {
        order.clear();
        for (member, (_, outcomes)) in placed.iter().enumerate() {
            let value = outcomes.draw(&mut generator);
            #[allow(clippy::cast_possible_truncation, reason = "fewer than 2^32 sources")]
            order.push((value, generator.next_u32(), member as u32));
        }
        order.sort_unstable_by(|a, b| b.0.total_cmp(&a.0).then(a.1.cmp(&b.1)).then(a.2.cmp(&b.2)));
        for (place, (_, _, member)) in (1..).zip(&order) {
            places[*member as usize * draws + draw] = place;
        }
    }
    for ((index, _), places) in placed.iter().zip(places.chunks_exact_mut(draws)) {
        let among = places
            .iter()
            .filter(|place| **place as usize <= top)
            .count();
        let low = *places.select_nth_unstable(draws * 16 / 100).1;
        let high = *places.select_nth_unstable(draws * 84 / 100).1;
        spreads[*index] = Some(RankSpread {
            interval68: [low, high],
            p_top: among as f64 / draws as f64,
        });
    }
    spreads
}

/// What a source's true rate may be.
struct Outcomes<'a> {
    p_infall: f64,
    p_expansion: f64,
    inward: Vec<f32>,
    outward: Vec<f32>,
    /// All draws, where there are no hypotheses.
    all: Option<&'a [f32]>,
}

impl<'a> Outcomes<'a> {
    fn of(finding: &'a Finding, quantity: Quantity) -> Option<Self> {
        let draws = &quantity.of(finding)?.draws;
        if draws.is_empty() || finding.grade() == Grade::Unknown {
            return None;
        }
        let probability = |hypothesis: Hypothesis| {
            (finding.probabilities).map_or(0.0, |all| all[hypothesis as usize])
        };
        let part = |wanted: fn(f32) -> bool| draws.iter().copied().filter(|x| wanted(*x)).collect();
        Some(Self {
            p_infall: probability(Hypothesis::Infall),
            p_expansion: probability(Hypothesis::Expansion),
            inward: part(|draw| draw > 0.0),
            outward: part(|draw| draw < 0.0),
            all: finding.probabilities.is_none().then_some(draws),
        })
    }

    fn draw(&self, generator: &mut ChaCha8Rng) -> f32 {
        let lot: f64 = StandardUniform.sample(generator);
        let which = generator.next_u64();
        let one_of = |draws: &[f32]| -> f32 {
            let count = draws.len() as u64;
            if count == 0 {
                return 0.0;
            }
            // a remainder favours some by less than 1e-15
            draws[usize::try_from(which % count).unwrap_or_default()]
        };
        match self.all {
            Some(draws) => one_of(draws),
            None if lot < self.p_infall => one_of(&self.inward),
            None if lot < self.p_infall + self.p_expansion => one_of(&self.outward),
            None => 0.0,
        }
    }
}
