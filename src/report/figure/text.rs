//! Text: the typeface, its measures, sub- and superscripts, formulas, wrapping.

use std::fmt::Write as _;
use std::sync::Once;

use plotters::style::{FontDesc, FontFamily, FontStyle, register_font};

use super::style::POINT_MM;

pub(super) const FAMILY: &str = "IBM Plex Sans";
pub(super) const REGULAR: &[u8] = include_bytes!("../fonts/IBMPlexSans-Regular.ttf");
pub(super) const SEMIBOLD: &[u8] = include_bytes!("../fonts/IBMPlexSans-SemiBold.ttf");

/// Ascent plus descent of the typeface in units of its size, by which its measures are scaled.
const LINE_HEIGHT: f64 = 1.3;
/// Size of sub- and superscripts relative to the text.
pub(super) const SCRIPT_SIZE: f64 = 0.72;

#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Weight {
    Regular,
    SemiBold,
}

impl Weight {
    pub(super) fn font_style(self) -> FontStyle {
        match self {
            Self::Regular => FontStyle::Normal,
            Self::SemiBold => FontStyle::Bold,
        }
    }
}

/// Where a span stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Script {
    Normal,
    Sub,
    Super,
}

impl Script {
    pub(super) fn size(self) -> f64 {
        if self == Self::Normal {
            1.0
        } else {
            SCRIPT_SIZE
        }
    }

    /// Rise above the baseline in units of the text's size.
    pub(super) fn rise(self) -> f64 {
        match self {
            Self::Normal => 0.0,
            Self::Sub => -0.16,
            Self::Super => 0.34,
        }
    }
}

pub(super) type Spans = Vec<(Script, String)>;

/// A text as it is, except that characters an XML document cannot hold become blanks.
pub(super) fn plain(text: &str) -> Spans {
    vec![(Script::Normal, clean(text))]
}

fn clean(text: &str) -> String {
    text.chars()
        .map(|character| {
            if character.is_control() {
                ' '
            } else {
                character
            }
        })
        .collect()
}

/// Text with `_{...}` and `^{...}`.
pub(super) fn markup(text: &str) -> Spans {
    let text = clean(text);
    let mut spans = Spans::new();
    let mut rest = text.as_str();
    loop {
        let next = [("_{", Script::Sub), ("^{", Script::Super)]
            .into_iter()
            .filter_map(|(open, script)| Some((rest.find(open)?, script)))
            .min_by_key(|(start, _)| *start);
        let Some((start, script)) = next else {
            break;
        };
        let Some(length) = rest[start + 2..].find('}') else {
            break;
        };
        push(&mut spans, Script::Normal, &rest[..start]);
        push(&mut spans, script, &rest[start + 2..start + 2 + length]);
        rest = &rest[start + 3 + length..];
    }
    push(&mut spans, Script::Normal, rest);
    spans
}

fn push(spans: &mut Spans, script: Script, text: &str) {
    if text.is_empty() {
        return;
    }
    match spans.last_mut() {
        Some((last, existing)) if *last == script => existing.push_str(text),
        _ => spans.push((script, text.to_owned())),
    }
}

/// A value as text for print: `+-` as one sign, minus signs, powers of ten, the Sun's symbol as `sun`.
pub(super) fn number(text: &str) -> Spans {
    let mut result = String::with_capacity(text.len() + 8);
    let characters: Vec<char> = text
        .replace("+-", "\u{b1}")
        .replace("Msun", "M_{sun}")
        .chars()
        .collect();
    let mut index = 0;
    while index < characters.len() {
        let character = characters[index];
        let before = index.checked_sub(1).map(|previous| characters[previous]);
        let after = characters.get(index + 1).copied();
        let follows_number = before.is_some_and(|c| c.is_ascii_digit() || c == ')');
        if character == 'e' && follows_number {
            let length = exponent_length(&characters[index + 1..]);
            if length > 0 {
                let exponent: String = characters[index + 1..=index + length].iter().collect();
                let exponent = exponent.trim_start_matches('+').replace('-', "\u{2212}");
                // Writing to a string cannot fail.
                let _ = write!(result, " \u{d7} 10^{{{exponent}}}");
                index += length + 1;
                continue;
            }
        }
        let begins = before.is_none_or(|c| c == ' ' || c == '(');
        if character == '-' && begins && after.is_some_and(|c| c.is_ascii_digit()) {
            result.push('\u{2212}');
        } else {
            result.push(character);
        }
        index += 1;
    }
    markup(&result)
}

/// Length of an integer with an optional sign.
fn exponent_length(characters: &[char]) -> usize {
    let sign = usize::from(matches!(characters.first(), Some('-' | '+')));
    let digits = characters[sign..]
        .iter()
        .take_while(|c| c.is_ascii_digit())
        .count();
    if digits == 0 { 0 } else { sign + digits }
}

/// A line's name with its formula set as chemists do: `H13CO+ 1-0`, `N2H+`.
///
/// A first word that is no formula of common interstellar elements stays as it is.
pub(super) fn line_name(name: &str) -> Spans {
    let name = clean(name);
    let (word, rest) = name.split_once(' ').unwrap_or((&name, ""));
    let Some(mut spans) = formula(word) else {
        return plain(&name);
    };
    if !rest.is_empty() {
        let rest = rest.replace('-', "\u{2013}");
        push(&mut spans, Script::Normal, &format!(" {rest}"));
    }
    spans
}

fn formula(word: &str) -> Option<Spans> {
    const ELEMENTS: [&str; 9] = ["Si", "Cl", "H", "D", "C", "N", "O", "S", "P"];
    const ISOTOPES: [&str; 8] = ["13C", "18O", "17O", "15N", "34S", "33S", "29Si", "30Si"];
    let mut spans = Spans::new();
    let mut rest = word;
    // Cyclic, ortho, para, linear.
    if let Some((prefix @ ("c" | "o" | "p" | "l"), molecule)) = rest.split_once('-') {
        push(&mut spans, Script::Normal, &format!("{prefix}-"));
        rest = molecule;
    }
    let mut elements = 0;
    while !rest.is_empty() {
        if let Some(isotope) = ISOTOPES.iter().find(|isotope| rest.starts_with(**isotope)) {
            let mass = isotope.trim_end_matches(char::is_alphabetic);
            push(&mut spans, Script::Super, mass);
            rest = &rest[mass.len()..];
        }
        if let Some(element) = ELEMENTS.iter().find(|element| rest.starts_with(**element)) {
            push(&mut spans, Script::Normal, element);
            rest = &rest[element.len()..];
            elements += 1;
        } else if elements > 0 && matches!(rest, "+" | "-") {
            push(
                &mut spans,
                Script::Super,
                if rest == "+" { "+" } else { "\u{2212}" },
            );
            rest = "";
        } else {
            return None;
        }
        let isotope_next = ISOTOPES.iter().any(|isotope| rest.starts_with(*isotope));
        if !isotope_next && rest.starts_with(|c: char| ('2'..='9').contains(&c)) {
            push(&mut spans, Script::Sub, &rest[..1]);
            rest = &rest[1..];
        }
    }
    (elements > 0).then_some(spans)
}

/// Width of spans on the page, mm.
pub(super) fn width_mm(spans: &Spans, size_pt: f64, weight: Weight) -> f64 {
    spans
        .iter()
        .map(|(script, text)| span_width_mm(text, size_pt * script.size(), weight))
        .sum()
}

/// Width of one plain text, mm; zero where the typeface cannot be measured.
pub(super) fn span_width_mm(text: &str, size_pt: f64, weight: Weight) -> f64 {
    // Measured large, because the library returns whole numbers.
    const UNITS_PER_SIZE: f64 = 1000.0;
    ensure_registered();
    let font = FontDesc::new(
        FontFamily::Name(FAMILY),
        UNITS_PER_SIZE * LINE_HEIGHT,
        weight.font_style(),
    );
    let units = font
        .layout_box(text)
        .map_or(0, |(low, high)| high.0 - low.0);
    f64::from(units) / UNITS_PER_SIZE * size_pt * POINT_MM
}

/// Makes the typeface known to the drawing library, once.
fn ensure_registered() {
    static REGISTERED: Once = Once::new();
    REGISTERED.call_once(|| {
        // The bytes are part of the program and known to be good, see the test.
        let _ = register_font(FAMILY, FontStyle::Normal, REGULAR);
        let _ = register_font(FAMILY, FontStyle::Bold, SEMIBOLD);
    });
}

/// Breaks a text at blanks into lines no wider than `limit_mm`; a longer word is broken anywhere.
pub(super) fn wrap(text: &str, limit_mm: f64, size_pt: f64, weight: Weight) -> Vec<String> {
    let fits = |line: &str| span_width_mm(line, size_pt, weight) <= limit_mm;
    let mut lines = Vec::new();
    let mut line = String::new();
    for word in clean(text).split_whitespace() {
        let longer = if line.is_empty() {
            word.to_owned()
        } else {
            format!("{line} {word}")
        };
        if fits(&longer) {
            line = longer;
            continue;
        }
        if !line.is_empty() {
            lines.push(std::mem::take(&mut line));
        }
        for character in word.chars() {
            line.push(character);
            if !fits(&line) && line.chars().count() > 1 {
                line.pop();
                lines.push(std::mem::take(&mut line));
                line.push(character);
            }
        }
    }
    if !line.is_empty() {
        lines.push(line);
    }
    lines
}

/// A text shortened to `limit_mm` with an ellipsis.
pub(super) fn shortened(text: &str, limit_mm: f64, size_pt: f64, weight: Weight) -> String {
    if span_width_mm(text, size_pt, weight) <= limit_mm {
        return text.to_owned();
    }
    let mut kept: Vec<char> = text.chars().collect();
    while kept.pop().is_some() {
        let shorter = format!("{}\u{2026}", kept.iter().collect::<String>().trim_end());
        if span_width_mm(&shorter, size_pt, weight) <= limit_mm {
            return shorter;
        }
    }
    String::new()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn shown(spans: &Spans) -> String {
        spans
            .iter()
            .map(|(script, text)| match script {
                Script::Normal => text.clone(),
                Script::Sub => format!("_{{{text}}}"),
                Script::Super => format!("^{{{text}}}"),
            })
            .collect()
    }

    #[test]
    fn formulas_are_set_and_other_names_left_alone() {
        for (name, expected) in [
            ("HCO+ 1-0", "HCO^{+} 1\u{2013}0"),
            ("H13CO+ 1-0", "H^{13}CO^{+} 1\u{2013}0"),
            ("N2H+ 1-0", "N_{2}H^{+} 1\u{2013}0"),
            ("HC18O+ 1-0", "HC^{18}O^{+} 1\u{2013}0"),
            ("13CO 2-1", "^{13}CO 2\u{2013}1"),
            ("c-C3H2 2-1", "c-C_{3}H_{2} 2\u{2013}1"),
            ("H2CO 2(1,2)-1(1,1)", "H_{2}CO 2(1,2)\u{2013}1(1,1)"),
            ("C34S 2-1", "C^{34}S 2\u{2013}1"),
            ("my line-5", "my line-5"),
            (
                "o-H2C18O 2(1,2)-1(1,1)",
                "o-H_{2}C^{18}O 2(1,2)\u{2013}1(1,1)",
            ),
            ("CS", "CS"),
            ("", ""),
        ] {
            assert_eq!(shown(&line_name(name)), expected, "{name}");
        }
    }

    #[test]
    fn numbers_are_set_for_print() {
        for (text, expected) in [
            ("0.48 +- 0.03 km/s", "0.48 \u{b1} 0.03 km/s"),
            ("-0.52 +- 0.04", "\u{2212}0.52 \u{b1} 0.04"),
            (
                "(1.2 -0.4 +0.8)e-5 Msun/yr",
                "(1.2 \u{2212}0.4 +0.8) \u{d7} 10^{\u{2212}5} M_{sun}/yr",
            ),
            ("two-layer", "two-layer"),
            ("3e5 yr", "3 \u{d7} 10^{5} yr"),
            ("hill, one", "hill, one"),
        ] {
            assert_eq!(shown(&number(text)), expected, "{text}");
        }
    }

    #[test]
    fn broken_markup_stays_as_it_is() {
        for text in ["a_{b", "^{", "a}b", "x_y"] {
            assert_eq!(shown(&markup(text)), text);
        }
    }

    #[test]
    fn the_typeface_measures_like_its_metrics() {
        // Advance widths of IBM Plex Sans Regular and SemiBold 3.005, read with fontTools, in
        // thousandths of the size.
        for (text, weight, thousandths) in [
            ("0", Weight::Regular, 600.0),
            ("0", Weight::SemiBold, 600.0),
        ] {
            let width = span_width_mm(text, 10.0, weight) / (10.0 * POINT_MM);
            assert!(
                (width * 1000.0 - thousandths).abs() <= 1.0,
                "{text} {width}"
            );
        }
    }

    #[test]
    fn wrapped_lines_fit_and_lose_nothing() {
        let text =
            "A caution of several words and one_word_that_is_far_too_long_for_any_line_here end";
        let lines = wrap(text, 25.0, 7.0, Weight::Regular);
        assert!(lines.len() > 3);
        for line in &lines {
            assert!(span_width_mm(line, 7.0, Weight::Regular) <= 25.0, "{line}");
        }
        let joined: String = lines.concat().split_whitespace().collect();
        assert_eq!(joined, text.split_whitespace().collect::<String>());
    }
}
