//! The verdict in words: what the data exclude, at what odds, and what they cannot.
//!
//! No commas, so that tables can be cut at commas.

use crate::fit::hypotheses::{Hypothesis, Standing, UNSEEN, Unseen, Verdict};

/// The sentences of a verdict, the first of which names the most probable hypothesis.
///
/// `detected` says whether the thick line is: one that is not excludes nothing, whatever its priors of
/// brightness do to the odds.
pub fn verdict_sentences(verdict: &Verdict, detected: bool) -> Vec<String> {
    let favoured = verdict.favoured();
    let others = |excluded: bool| -> Vec<&Standing> {
        let standings = verdict.standings.iter();
        standings
            .filter(|one| one.hypothesis != favoured)
            .filter(|one| (detected && one.is_excluded()) == excluded)
            .collect()
    };
    let mut sentences = Vec::new();
    if !detected {
        sentences.push("The thick line is not detected".to_owned());
    }
    sentences.push(format!(
        "Most probable: {} ({})",
        word(favoured),
        probability(verdict.probability(favoured))
    ));
    let excluded = others(true);
    sentences.push(if excluded.is_empty() {
        "The data exclude none of the others".to_owned()
    } else {
        format!("The data exclude {}", in_turn(&excluded, "and", at_odds))
    });
    let open = others(false);
    if !open.is_empty() {
        let with_probability = |one: &Standing| {
            format!(
                "{} ({})",
                word(one.hypothesis),
                probability(one.probability)
            )
        };
        sentences.push(format!(
            "They do not exclude {}",
            in_turn(&open, "or", with_probability)
        ));
    }
    let [one, pair] = [true, false].map(|of_position| {
        let unseen = UNSEEN
            .iter()
            .filter(|one| is_of_position(**one) == of_position);
        let words: Vec<&str> = unseen.map(|one| unseen_word(*one)).collect();
        words.join(" or ")
    });
    sentences.push(format!("One position cannot exclude {one}"));
    sentences.push(format!("One pair of lines cannot exclude {pair}"));
    sentences
}

fn word(hypothesis: Hypothesis) -> &'static str {
    match hypothesis {
        Hypothesis::Infall => "infall",
        Hypothesis::Expansion => "expansion",
        Hypothesis::Static => "rest",
        Hypothesis::TwoClouds => "two clouds",
    }
}

/// Never 0 or 1: what is not excluded by logic has a probability.
fn probability(value: f64) -> String {
    if value > 0.999 {
        "probability above 0.999".to_owned()
    } else if value < 0.001 {
        "probability below 0.001".to_owned()
    } else {
        format!("probability {value:.3}")
    }
}

/// Odds beyond this say no more: the families and priors are not that certain.
const MOST_ODDS: f64 = 10_000.0;

fn at_odds(standing: &Standing) -> String {
    let odds = standing.ln_odds_against.exp();
    let name = word(standing.hypothesis);
    if odds > MOST_ODDS {
        return format!("{name} (above {MOST_ODDS} to 1)");
    }
    let place = 10f64.powf((odds.log10().floor() - 1.0).max(0.0));
    format!("{name} ({} to 1)", (odds / place).round() * place)
}

fn in_turn(standings: &[&Standing], joint: &str, shown: impl Fn(&Standing) -> String) -> String {
    let each: Vec<String> = standings.iter().map(|one| shown(one)).collect();
    each.join(&format!(" {joint} "))
}

fn is_of_position(unseen: Unseen) -> bool {
    matches!(unseen, Unseen::Rotation | Unseen::Outflow)
}

fn unseen_word(unseen: Unseen) -> &'static str {
    match unseen {
        Unseen::Rotation => "rotation",
        Unseen::Outflow => "an outflow",
        Unseen::Foreground => "a cold cloud in front",
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::fit::hypotheses::Speed;
    use crate::fit::posterior::interval;

    fn verdict(probabilities: [f64; 4], odds_against: [f64; 4]) -> Verdict {
        Verdict {
            standings: std::array::from_fn(|index| Standing {
                hypothesis: Hypothesis::ALL[index],
                probability: probabilities[index],
                ln_odds_against: odds_against[index].ln(),
            }),
            v_in_km_s: interval(&[(0.0, 1.0)]).unwrap(),
            between_models_km_s: 0.0,
            shares: Vec::new(),
            speed: Speed::Measured,
            trusted: true,
            doubts: Vec::new(),
        }
    }

    #[test]
    fn what_is_excluded_stands_apart_from_what_is_not() {
        let found = verdict([0.9, 0.0001, 0.0199, 0.08], [1.0, 1e6, 345.0, 11.0]);
        assert_eq!(
            verdict_sentences(&found, true),
            [
                "Most probable: infall (probability 0.900)",
                "The data exclude expansion (above 10000 to 1) and rest (350 to 1)",
                "They do not exclude two clouds (probability 0.080)",
                "One position cannot exclude rotation or an outflow",
                "One pair of lines cannot exclude a cold cloud in front",
            ]
        );
        let unseen = verdict([0.29, 0.29, 0.415, 0.005], [1.4, 1.4, 1.0, 80.0]);
        let sentences = verdict_sentences(&unseen, false);
        assert_eq!(sentences[0], "The thick line is not detected");
        assert_eq!(sentences[1], "Most probable: rest (probability 0.415)");
        assert_eq!(sentences[2], "The data exclude none of the others");
        assert!(sentences[3].ends_with("or two clouds (probability 0.005)"));
        assert!(sentences.iter().all(|one| !one.contains(',')));
    }
}
