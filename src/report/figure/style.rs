//! Colours, dashes and sizes. Lengths are millimetres on the page, text sizes points.
//!
//! Model colours differ in hue for every common kind of colour vision and in lightness in grey; each
//! has its own dashes and width besides.

use plotters::style::RGBColor;

use super::text::Weight;

/// One printer's point in millimetres.
pub(super) const POINT_MM: f64 = 25.4 / 72.0;

pub(super) const INK: RGBColor = RGBColor(31, 36, 42);
pub(super) const SOFT_INK: RGBColor = RGBColor(88, 96, 105);
pub(super) const DATA: RGBColor = RGBColor(70, 76, 84);
pub(super) const GUIDE: RGBColor = RGBColor(229, 231, 234);
pub(super) const ZERO: RGBColor = RGBColor(150, 156, 163);
pub(super) const WINDOW: RGBColor = RGBColor(240, 243, 246);
pub(super) const V_LSR: RGBColor = RGBColor(25, 110, 100);
pub(super) const V_LSR_BAND: RGBColor = RGBColor(184, 221, 214);
pub(super) const POSTERIOR_68: RGBColor = RGBColor(205, 186, 148);
pub(super) const POSTERIOR_95: RGBColor = RGBColor(236, 228, 210);
pub(super) const CAUTION: RGBColor = RGBColor(150, 50, 20);
pub(super) const PAPER: RGBColor = RGBColor(255, 255, 255);

pub(super) const CONTOUR: RGBColor = RGBColor(20, 20, 24);
/// Cells of a map without a value.
pub(super) const MISSING: RGBColor = RGBColor(238, 238, 236);

pub(super) const TITLE_PT: f64 = 8.6;
pub(super) const NAME_PT: f64 = 7.6;
pub(super) const LABEL_PT: f64 = 7.0;
pub(super) const TICK_PT: f64 = 6.4;

/// How a line is drawn.
#[derive(Clone, Copy, Debug)]
pub(super) struct Stroke {
    pub(super) color: RGBColor,
    pub(super) width_mm: f64,
    /// Alternating lengths of dash and gap, mm; empty for a whole line.
    pub(super) dashes: &'static [f64],
}

pub(super) const fn solid(color: RGBColor, width_mm: f64) -> Stroke {
    Stroke {
        color,
        width_mm,
        dashes: &[],
    }
}

/// Strokes of the models, in their order.
pub(super) const MODELS: [Stroke; 5] = [
    Stroke {
        color: RGBColor(200, 62, 18),
        width_mm: 0.42,
        dashes: &[],
    },
    Stroke {
        color: RGBColor(22, 82, 160),
        width_mm: 0.36,
        dashes: &[1.7, 0.7],
    },
    Stroke {
        color: RGBColor(222, 150, 10),
        width_mm: 0.44,
        dashes: &[0.55, 0.55],
    },
    Stroke {
        color: RGBColor(92, 30, 104),
        width_mm: 0.32,
        dashes: &[2.2, 0.6, 0.5, 0.6],
    },
    Stroke {
        color: RGBColor(70, 150, 205),
        width_mm: 0.40,
        dashes: &[1.0, 1.0],
    },
];

/// The stroke of the model with that index; strokes repeat after the fifth.
pub(super) fn model(index: usize) -> Stroke {
    MODELS[index % MODELS.len()]
}

/// Colours of a scale from 0 to 1. One goes evenly from light to dark; the others are lightest in the
/// middle and as dark at either end.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Colours {
    Sequential,
    BlueToRed,
    RedToBlue,
}

const SEQUENTIAL: [(u8, u8, u8); 6] = [
    (250, 246, 232),
    (224, 205, 142),
    (168, 172, 104),
    (92, 136, 110),
    (42, 90, 108),
    (22, 38, 78),
];
const BLUE_TO_RED: [(u8, u8, u8); 7] = [
    (16, 52, 112),
    (58, 112, 176),
    (160, 194, 222),
    (248, 246, 242),
    (232, 180, 148),
    (190, 88, 58),
    (112, 24, 22),
];

impl Colours {
    pub(super) fn at(self, share: f64) -> RGBColor {
        let anchors: &[(u8, u8, u8)] = match self {
            Self::Sequential => &SEQUENTIAL,
            Self::BlueToRed | Self::RedToBlue => &BLUE_TO_RED,
        };
        let share = if self == Self::RedToBlue {
            1.0 - share
        } else {
            share
        };
        let place = share.clamp(0.0, 1.0) * (anchors.len() - 1) as f64;
        // Below the number of anchors.
        #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
        let below = (place as usize).min(anchors.len() - 2);
        let part = place - below as f64;
        let (a, b) = (anchors[below], anchors[below + 1]);
        // Between two bytes.
        #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
        let mix =
            |a: u8, b: u8| (f64::from(a) + part * (f64::from(b) - f64::from(a))).round() as u8;
        RGBColor(mix(a.0, b.0), mix(a.1, b.1), mix(a.2, b.2))
    }
}

/// Size, weight and colour of a text.
#[derive(Clone, Copy, Debug)]
pub(super) struct Look {
    pub(super) size_pt: f64,
    pub(super) weight: Weight,
    pub(super) color: RGBColor,
}

/// Baseline to baseline, in units of the text's size.
pub(super) const LEADING: f64 = 1.32;

pub(super) const TITLE: Look = look(TITLE_PT, Weight::SemiBold, INK);
pub(super) const NAME: Look = look(NAME_PT, Weight::SemiBold, INK);
pub(super) const LABEL: Look = look(LABEL_PT, Weight::Regular, INK);
pub(super) const SOFT_LABEL: Look = look(LABEL_PT, Weight::Regular, SOFT_INK);
pub(super) const VALUE: Look = look(LABEL_PT, Weight::SemiBold, INK);
pub(super) const TICK: Look = look(TICK_PT, Weight::Regular, INK);
pub(super) const NOTE: Look = look(TICK_PT, Weight::Regular, SOFT_INK);
pub(super) const CAUTION_HEADING: Look = look(LABEL_PT, Weight::SemiBold, CAUTION);

const fn look(size_pt: f64, weight: Weight, color: RGBColor) -> Look {
    Look {
        size_pt,
        weight,
        color,
    }
}

pub(super) fn leading_mm(look: Look) -> f64 {
    look.size_pt * POINT_MM * LEADING
}

#[cfg(test)]
mod tests {
    use super::*;

    /// CIE 1976 lightness, 0 to 100, of an sRGB colour (IEC 61966-2-1).
    fn lightness(color: RGBColor) -> f64 {
        let linear = |byte: u8| {
            let value = f64::from(byte) / 255.0;
            if value <= 0.04045 {
                value / 12.92
            } else {
                ((value + 0.055) / 1.055).powf(2.4)
            }
        };
        let RGBColor(red, green, blue) = color;
        let luminance = 0.2126 * linear(red) + 0.7152 * linear(green) + 0.0722 * linear(blue);
        116.0 * luminance.cbrt() - 16.0
    }

    #[test]
    fn colour_scales_tell_values_in_grey() {
        let grey = |colours: Colours, share: f64| lightness(colours.at(share));
        for step in 0..20 {
            let (here, next) = (f64::from(step) / 20.0, f64::from(step + 1) / 20.0);
            assert!(grey(Colours::Sequential, here) > grey(Colours::Sequential, next) + 1.5);
            let (a, b) = (0.5 + 0.5 * here, 0.5 + 0.5 * next);
            for colours in [Colours::BlueToRed, Colours::RedToBlue] {
                assert!(grey(colours, a) > grey(colours, b) + 1.0, "{colours:?} {b}");
                let asymmetry = grey(colours, a) - grey(colours, 1.0 - a);
                assert!(asymmetry.abs() < 12.0, "{colours:?} {a}: {asymmetry}");
            }
        }
    }

    #[test]
    fn models_differ_in_grey_and_in_dashes() {
        for (index, one) in MODELS.iter().enumerate() {
            assert!(lightness(one.color) < 75.0, "{index} is too faint on paper");
            for other in &MODELS[index + 1..] {
                let difference = lightness(one.color) - lightness(other.color);
                assert!(difference.abs() > 8.0, "{one:?} {other:?}");
                assert_ne!(one.dashes, other.dashes);
            }
        }
    }
}
