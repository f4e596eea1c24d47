//! From the names that people write to a transition: spelling, case, brackets, sub- and superscripts.

use super::isotopologues::family;
use super::{Line, LineError, TRANSITIONS, Transition};

/// Other spellings of a species, both as [`key`] makes them.
const OTHER_SPELLINGS: &[(&str, &str)] = &[
    ("c2h", "cch"),
    ("ortho-h2co", "o-h2co"),
    ("para-h2co", "p-h2co"),
    ("12co", "co"),
    ("12c16o", "co"),
    ("13c16o", "13co"),
    ("12c18o", "c18o"),
    ("12c17o", "c17o"),
];

/// Full names that mean a transition listed under a shorter one, both as [`key`] makes them.
const OTHER_NAMES: &[(&str, &str)] = &[
    // The states' parities decide between ortho and para.
    ("h2co212-111", "o-h2co212-111"),
    ("h2co303-202", "p-h2co303-202"),
    ("cch1-03/2-1/22-1", "cch1-0"),
];

/// Number of names offered for an unknown one.
const NAMES_OFFERED: usize = 3;

/// The built-in line that a text names.
///
/// Case, blanks, brackets and the notation of isotopes and charges do not count: `HCO+ 1-0`,
/// `hco+(1-0)`, `HCO+ J=1-0`, `HCO⁺ 1→0` are one line.
///
/// ```
/// let line = inrush::line::find("H¹³CO⁺ (J = 1–0)")?;
/// assert_eq!(line.name, "H13CO+ 1-0");
/// assert_eq!(line.rest_frequency_ghz, 86.7542884);
/// # Ok::<(), inrush::line::LineError>(())
/// ```
///
/// # Errors
///
/// [`LineError::NoName`], [`LineError::SpeciesOnly`], [`LineError::NoSuchTransition`] or
/// [`LineError::Unknown`], each with the names that could have been meant.
pub fn find(text: &str) -> Result<Line, LineError> {
    transition_named(text).map_or_else(|| Err(not_found(text)), |transition| Ok(transition.line()))
}

/// The built-in transitions that a text points at, in the order of [`TRANSITIONS`].
///
/// A species gives its transitions and those of its isotopologues, a number with a decimal point
/// the frequencies (GHz) that begin with it, other text the names that contain it, none all.
pub fn search(text: &str) -> Vec<&'static Transition> {
    let wanted = key(text);
    let species: Option<Vec<&str>> = species_with_key(&wanted)
        .map(|species| family(species).map_or_else(|| vec![species], <[&str]>::to_vec));
    TRANSITIONS
        .iter()
        .filter(|transition| match &species {
            Some(species) => species.contains(&transition.species),
            None if wanted.contains('.') => {
                format!("{:.7}", transition.rest_frequency_ghz).starts_with(&wanted)
            }
            None => key(&transition.name()).contains(&wanted),
        })
        .collect()
}

/// The built-in transition that a text names.
pub(super) fn transition_named(text: &str) -> Option<&'static Transition> {
    let wanted = key(text);
    TRANSITIONS
        .iter()
        .find(|transition| key(&transition.name()) == wanted)
}

/// What is wrong with a text that names no transition.
fn not_found(text: &str) -> LineError {
    let wanted = key(text);
    if wanted.is_empty() {
        return LineError::NoName;
    }
    let text = text.trim().to_owned();
    if let Some(species) = species_with_key(&wanted) {
        return LineError::SpeciesOnly {
            text,
            transitions: names_of(species),
        };
    }
    if let Some(species) = species_before_states(&wanted) {
        return LineError::NoSuchTransition {
            text,
            species,
            transitions: names_of(species),
        };
    }
    LineError::Unknown {
        text,
        nearest: nearest_names(&wanted),
    }
}

fn species_with_key(wanted: &str) -> Option<&'static str> {
    TRANSITIONS
        .iter()
        .map(|transition| transition.species)
        .find(|species| key(species) == wanted)
}

/// The species whose key is followed by what looks like states.
fn species_before_states(wanted: &str) -> Option<&'static str> {
    TRANSITIONS
        .iter()
        .map(|transition| transition.species)
        .find(|species| {
            wanted
                .strip_prefix(key(species).as_str())
                .is_some_and(look_like_states)
        })
}

/// Whether a text reads as an upper and a lower state: `10-9`, `202-101`; not the `21-0` of `CO2 1-0`.
fn look_like_states(text: &str) -> bool {
    let Some((upper, lower)) = text.split_once('-') else {
        return false;
    };
    match (upper.parse::<u32>(), lower.parse::<u32>()) {
        (Ok(upper_number), Ok(lower_number)) => {
            upper.len() == lower.len() || upper_number.checked_sub(1) == Some(lower_number)
        }
        _ => false,
    }
}

fn names_of(species: &str) -> Vec<String> {
    TRANSITIONS
        .iter()
        .filter(|transition| transition.species == species)
        .map(Transition::name)
        .collect()
}

fn nearest_names(wanted: &str) -> Vec<String> {
    let mut names: Vec<(f64, String)> = TRANSITIONS
        .iter()
        .map(|transition| {
            let name = transition.name();
            let likeness = strsim::normalized_damerau_levenshtein(wanted, &key(&name));
            (likeness, name)
        })
        .collect();
    names.sort_by(|left, right| right.0.total_cmp(&left.0));
    names
        .into_iter()
        .take(NAMES_OFFERED)
        .map(|(_, name)| name)
        .collect()
}

/// What of a name counts: lower case, no blanks, brackets or markup, plain digits and signs.
fn key(text: &str) -> String {
    let plain: String = text.chars().filter_map(plain_character).collect();
    let bare = plain.to_lowercase().replace("j=", "").replace("n=", "");
    let spelled = OTHER_SPELLINGS
        .iter()
        .find_map(|(other, usual)| {
            bare.strip_prefix(other)
                .map(|rest| format!("{usual}{rest}"))
        })
        .unwrap_or(bare);
    OTHER_NAMES
        .iter()
        .find(|(other, _)| *other == spelled)
        .map_or(spelled, |(_, usual)| (*usual).to_owned())
}

/// A character in plain notation; `None` for one that does not count.
fn plain_character(character: char) -> Option<char> {
    const SUPERSCRIPTS: &str = "⁰¹²³⁴⁵⁶⁷⁸⁹";
    const SUBSCRIPTS: &str = "₀₁₂₃₄₅₆₇₈₉";
    for digits in [SUPERSCRIPTS, SUBSCRIPTS] {
        if let Some(digit) = digits.chars().position(|known| known == character) {
            return "0123456789".chars().nth(digit);
        }
    }
    match character {
        '⁺' => Some('+'),
        '–' | '—' | '−' | '‐' | '‑' | '→' | '⁻' => Some('-'),
        '(' | ')' | '[' | ']' | '{' | '}' | ',' | '^' | '_' | '$' | '>' => None,
        blank if blank.is_whitespace() => None,
        other => Some(other),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_name_has_its_own_key() {
        let mut keys: Vec<String> = TRANSITIONS.iter().map(|one| key(&one.name())).collect();
        keys.sort();
        keys.dedup();
        assert_eq!(keys.len(), TRANSITIONS.len());
    }

    #[test]
    fn other_spellings_lead_to_a_listed_name() {
        for (_, usual) in OTHER_SPELLINGS {
            assert!(species_with_key(usual).is_some(), "{usual}");
        }
        for (_, usual) in OTHER_NAMES {
            assert!(transition_named(usual).is_some(), "{usual}");
        }
    }
}
