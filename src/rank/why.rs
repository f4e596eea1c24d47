//! One sentence a source: why it stands where it stands.

use super::order::{Quantity, certain, expected};
use super::source::{Finding, Grade};
use crate::fit::hypotheses::Hypothesis;

/// Pairs whose speeds lie further apart than this many standard deviations are said to disagree.
const DISAGREE: f64 = 2.0;

/// Why a source stands at its place, in the order in which that was decided. Without commas and semicolons,
/// so that tables can be cut there.
#[must_use]
pub fn why(finding: &Finding, quantity: Quantity) -> String {
    let mut parts = vec![graded(finding)];
    if finding.grade() != Grade::Unknown {
        parts.push(surpassed(finding, quantity));
    }
    if finding.line_pairs > 1 {
        parts.push(together(finding));
    }
    if !finding.trusted {
        parts.push("the probabilities are uncertain".to_owned());
    }
    parts.join(" - ")
}

fn graded(finding: &Finding) -> String {
    if !finding.detected {
        return "no infall without a detected line".to_owned();
    }
    let grade = finding.grade().words();
    let Some(p_infall) = finding.p_infall() else {
        return format!("{grade}: no model with an inward speed fits");
    };
    let Some(all) = finding.probabilities else {
        return format!(
            "{grade}: a share of {p_infall:.2} of the speed's draws is inward (formal)"
        );
    };
    let other = Hypothesis::ALL
        .into_iter()
        .filter(|hypothesis| *hypothesis != Hypothesis::Infall)
        .max_by(|a, b| all[*a as usize].total_cmp(&all[*b as usize]));
    match other {
        Some(other) if all[other as usize] >= 0.005 => format!(
            "{grade} (probability {p_infall:.2} against {:.2} of {})",
            all[other as usize],
            other.name().replace('_', " ")
        ),
        _ => format!("{grade} (probability {p_infall:.2})"),
    }
}

fn surpassed(finding: &Finding, quantity: Quantity) -> String {
    let both = |quantity| Some((expected(finding, quantity)?, certain(finding, quantity)?));
    let rate = |(expected, certain): (f64, f64)| match certain {
        ..=0.0 => format!("expected mass rate {expected:.1e} Msun/yr (inward or not is open)"),
        _ => format!(
            "expected mass rate {expected:.1e} Msun/yr (above {certain:.1e} at 84 % if it falls in)"
        ),
    };
    let speed = |(expected, certain): (f64, f64)| match certain {
        ..=0.0 => format!("expected inward speed {expected:.2} km/s (inward or not is open)"),
        _ => format!(
            "expected inward speed {expected:.2} km/s (above {certain:.2} at 84 % if it falls in)"
        ),
    };
    match (both(quantity), both(Quantity::Speed)) {
        (Some(found), _) if quantity == Quantity::Rate => rate(found),
        (_, Some(found)) if quantity == Quantity::Rate => {
            format!("no mass rate without mass and radius - {}", speed(found))
        }
        (_, Some(found)) => speed(found),
        _ => "the lines hardly constrain the speed".to_owned(),
    }
}

fn together(finding: &Finding) -> String {
    let pairs = finding.line_pairs;
    match finding.disagreement {
        Some(apart) if apart > DISAGREE => {
            format!("{pairs} line pairs disagree by {apart:.1} standard deviations")
        }
        Some(apart) => format!("{pairs} line pairs agree within {apart:.1} standard deviations"),
        None => format!("one of {pairs} line pairs counts"),
    }
}
