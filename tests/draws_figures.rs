//! Figures of pairs of every kind: legible, whole, and the same bytes each time.
//!
//! `INRUSH_FIGURES_TO=DIRECTORY cargo test --test draws_figures` also writes the PNGs to look at.
#![cfg(feature = "figures")]
#![allow(clippy::unwrap_used)]

use std::sync::Arc;

use inrush::numeric::Estimate;
use inrush::report::ReportError;
use inrush::report::figure::{
    Curve, PairFigure, Panel, PosteriorPart, SpeedAndDepth, svg_to_pdf, svg_to_png,
};
use inrush::spectrum::Window;
use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use resvg::usvg::{self, fontdb};

/// What a case varies.
struct Case {
    name: &'static str,
    source: &'static str,
    lines: [&'static str; 2],
    models: &'static [&'static str],
    peak_over_noise: f64,
    sigma_km_s: f64,
    channel_km_s: f64,
    v_km_s: f64,
    masked: bool,
    scale: f64,
    numbers: usize,
    cautions: usize,
}

const PLAIN: Case = Case {
    name: "plain",
    source: "Invented clump 7",
    lines: ["HCO+ 1-0", "H13CO+ 1-0"],
    models: &["two-layer", "hill"],
    peak_over_noise: 30.0,
    sigma_km_s: 0.45,
    channel_km_s: 0.1,
    v_km_s: -2.3,
    masked: false,
    scale: 1.0,
    numbers: 6,
    cautions: 1,
};

const CASES: [Case; 12] = [
    PLAIN,
    Case {
        name: "no model",
        models: &[],
        numbers: 0,
        cautions: 0,
        ..PLAIN
    },
    Case {
        name: "one model, faint",
        models: &["hill"],
        peak_over_noise: 3.0,
        ..PLAIN
    },
    Case {
        name: "four models, bright",
        models: &[
            "two-layer",
            "hill",
            "two-layer with continuum",
            "hill, free surface",
        ],
        peak_over_noise: 200.0,
        numbers: 9,
        ..PLAIN
    },
    Case {
        name: "masked",
        masked: true,
        ..PLAIN
    },
    Case {
        name: "long names",
        source: "An invented clump with a remarkably long name <A & B> in an invented cloud with another one, seen from afar on a cloudy day",
        lines: [
            "a line of the user's own with a very long name at 86.754 GHz",
            "o-H2C18O 2(1,2)-1(1,1)",
        ],
        models: &[
            "a model whose name is much too long for any key in a narrow figure",
            "hill",
        ],
        cautions: 3,
        ..PLAIN
    },
    Case {
        name: "narrow",
        sigma_km_s: 0.08,
        channel_km_s: 0.05,
        v_km_s: 104.2,
        ..PLAIN
    },
    Case {
        name: "broad",
        sigma_km_s: 4.0,
        channel_km_s: 0.25,
        v_km_s: 48.6,
        ..PLAIN
    },
    Case {
        name: "many cautions",
        cautions: 14,
        numbers: 15,
        ..PLAIN
    },
    Case {
        name: "millikelvin",
        scale: 0.004,
        ..PLAIN
    },
    Case {
        name: "absorption",
        scale: -1.0,
        ..PLAIN
    },
    Case {
        name: "far and narrow",
        sigma_km_s: 0.06,
        channel_km_s: 0.02,
        v_km_s: -1104.2,
        source: "\u{6e90} \u{3b1}\u{3b2}",
        ..PLAIN
    },
];

const CAUTIONS: [&str; 4] = [
    "Noise is correlated from channel to channel; errors take that into account.",
    "The thin line shows two peaks: two clouds on one line of sight would look the same as infall.",
    "Optical depth of the two-layer model ended at its bound of 30.",
    "The dip of the thick line lies 0.4 km/s from the thin line's velocity, three times its error.",
];

const NUMBERS: [(&str, &str); 6] = [
    ("inward speed", "0.48 -0.04 +0.05 km/s"),
    ("velocity difference", "-0.52 +- 0.04"),
    ("hill, v_{in}", "0.48 +- 0.03 km/s"),
    ("mass infall rate", "(1.2 -0.4 +0.8)e-5 Msun/yr"),
    ("profile", "blue"),
    ("P(infall)", "0.987"),
];

fn gauss(v: f64, centre: f64, sigma: f64) -> f64 {
    (-0.5 * ((v - centre) / sigma).powi(2)).exp()
}

/// Sum of twelve uniform deviates less six: near enough normal for a picture.
fn deviate(random: &mut ChaCha8Rng) -> f64 {
    (0..12).map(|_| random.random::<f64>()).sum::<f64>() - 6.0
}

fn panel(case: &Case, thick: bool) -> Panel {
    let mut random = ChaCha8Rng::seed_from_u64(if thick { 1 } else { 2 });
    let (centre, sigma) = (case.v_km_s, case.sigma_km_s);
    let profile = |v: f64, stretch: f64| {
        case.scale
            * if thick {
                3.2 * stretch * gauss(v, centre - 0.9 * sigma, sigma)
                    + 1.7 * gauss(v, centre + 1.2 * sigma, 0.8 * stretch * sigma)
            } else {
                0.9 * stretch * gauss(v, centre, sigma)
            }
    };
    let noise_k = 3.2 * case.scale.abs() / case.peak_over_noise / if thick { 1.0 } else { 2.0 };
    #[allow(clippy::cast_possible_truncation, clippy::cast_sign_loss)]
    let channels = (40.0 * sigma / case.channel_km_s) as usize;
    let first = centre - 20.0 * sigma;
    let velocity_km_s: Vec<f64> = (0..channels)
        .map(|i| first + case.channel_km_s * i as f64)
        .collect();
    let mut temperature_k: Vec<f64> = velocity_km_s
        .iter()
        .map(|v| profile(*v, 1.0) + noise_k * deviate(&mut random))
        .collect();
    if case.masked {
        let middle = channels / 2;
        for channel in [middle - 11, middle - 10, middle - 3, middle + 1, middle + 9] {
            temperature_k[channel] = f64::NAN;
        }
        temperature_k[..middle - 25].fill(f64::NAN);
    }
    let fine: Vec<f64> = (0..8 * channels)
        .map(|i| first + case.channel_km_s * i as f64 / 8.0)
        .collect();
    let curves = case.models.iter().enumerate().map(|(index, label)| {
        let stretch = 1.0 + 0.07 * index as f64;
        let data = velocity_km_s.iter().zip(&temperature_k);
        Curve {
            label: (*label).to_owned(),
            temperature_k: fine.iter().map(|v| profile(*v, stretch)).collect(),
            residuals: data
                .map(|(v, t)| (t - profile(*v, stretch)) / noise_k)
                .collect(),
            velocity_km_s: fine.clone(),
        }
    });
    Panel {
        line_name: case.lines[usize::from(!thick)].to_owned(),
        curves: curves.collect(),
        width_km_s: vec![case.channel_km_s; channels],
        noise_k,
        window: Window {
            low_km_s: centre - 3.6 * sigma,
            high_km_s: centre + 3.6 * sigma,
        },
        velocity_km_s,
        temperature_k,
    }
}

/// A normal posterior of each model, each farther from zero than the one before, speed and depth
/// correlated.
fn posterior(case: &Case) -> PosteriorPart {
    let (width, top) = (0.1 * case.sigma_km_s, case.models.len());
    let centre = |index: usize| width * (1.0 + 3.0 * index as f64);
    let range_km_s = (-3.0 * width, centre(top) + 4.0 * width);
    let density = |index: usize| -> Vec<(f64, f64)> {
        (0..=100)
            .map(|step| {
                let part = f64::from(step) / 100.0;
                let v = range_km_s.0 + part * (range_km_s.1 - range_km_s.0);
                let z = (v - centre(index)) / width;
                (v, (-0.5 * z * z).exp() / width)
            })
            .collect()
    };
    let around = |deviations: f64| {
        let middle = centre(0);
        (middle - deviations * width, middle + deviations * width)
    };
    let mut random = ChaCha8Rng::seed_from_u64(3);
    let draws = (0..200).map(|index| {
        let model = index % top;
        let (z, other) = (deviate(&mut random), deviate(&mut random));
        SpeedAndDepth {
            label: case.models[model].to_owned(),
            v_in_km_s: centre(model) + width * z,
            tau: (1.2 - 0.3 * z + 0.2 * other).exp(),
        }
    });
    PosteriorPart {
        range_km_s,
        adopted: density(0),
        interval68_km_s: around(1.0),
        interval95_km_s: around(2.0),
        models: case
            .models
            .iter()
            .enumerate()
            .map(|(index, label)| ((*label).to_owned(), density(index)))
            .collect(),
        draws: draws.collect(),
        correlation: Some(-0.83),
        sentences: vec![
            "Most probable: infall (probability 0.934). The data exclude expansion (above 10000 to 1) and rest (260 to 1)."
                .to_owned(),
        ],
    }
}

fn figure(case: &Case) -> PairFigure {
    let estimate = |value, err| Some(Estimate { value, err });
    PairFigure {
        source: case.source.to_owned(),
        thick: panel(case, true),
        thin: panel(case, false),
        v_lsr_km_s: estimate(case.v_km_s, 0.1 * case.sigma_km_s),
        v_thin_km_s: estimate(case.v_km_s + 0.05 * case.sigma_km_s, 0.1 * case.sigma_km_s),
        posterior: (!case.models.is_empty()).then(|| posterior(case)),
        numbers: (0..case.numbers)
            .map(|i| NUMBERS[i % NUMBERS.len()])
            .map(|(label, value)| (label.to_owned(), value.to_owned()))
            .collect(),
        cautions: (0..case.cautions)
            .map(|i| CAUTIONS[i % CAUTIONS.len()].to_owned())
            .collect(),
    }
}

fn parsed(svg: &str) -> usvg::Tree {
    let mut database = fontdb::Database::new();
    for file in ["IBMPlexSans-Regular.ttf", "IBMPlexSans-SemiBold.ttf"] {
        let path = format!("{}/src/report/fonts/{file}", env!("CARGO_MANIFEST_DIR"));
        database.load_font_file(path).unwrap();
    }
    let options = usvg::Options {
        fontdb: Arc::new(database),
        ..usvg::Options::default()
    };
    usvg::Tree::from_str(svg, &options).unwrap()
}

fn write_to_look_at(name: &str, svg: &str) {
    if let Some(directory) = std::env::var_os("INRUSH_FIGURES_TO") {
        let path = std::path::Path::new(&directory).join(name.replace([' ', ','], "_"));
        std::fs::write(path.with_extension("png"), svg_to_png(svg, 900).unwrap()).unwrap();
        std::fs::write(path.with_extension("pdf"), svg_to_pdf(svg).unwrap()).unwrap();
        std::fs::write(path.with_extension("svg"), svg).unwrap();
    }
}

/// The words of each text and the box around their outlines, in pixels.
fn texts(tree: &usvg::Tree) -> Vec<(String, usvg::Rect)> {
    fn collect(group: &usvg::Group, found: &mut Vec<(String, usvg::Rect)>) {
        for node in group.children() {
            match node {
                usvg::Node::Group(group) => collect(group, found),
                usvg::Node::Text(text) => {
                    let words = text.chunks().iter().map(usvg::TextChunk::text).collect();
                    let outlines = text.flattened().bounding_box();
                    found.push((words, outlines.transform(text.abs_transform()).unwrap()));
                }
                _ => {}
            }
        }
    }
    let mut found = Vec::new();
    collect(tree.root(), &mut found);
    found
}

#[test]
fn no_text_is_cut_or_runs_into_another() {
    for case in &CASES {
        let svg = figure(case).svg().unwrap();
        write_to_look_at(case.name, &svg);
        let tree = parsed(&svg);
        let (width, height) = (tree.size().width(), tree.size().height());
        // 88 mm at 96 pixels to the inch.
        assert!((width - 88.0 / 25.4 * 96.0).abs() < 0.01, "{width}");
        let texts = texts(&tree);
        assert!(texts.len() > 15, "{}: {} texts", case.name, texts.len());
        for (index, (words, place)) in texts.iter().enumerate() {
            assert!(
                place.left() > 0.0
                    && place.top() > 0.0
                    && place.right() < width
                    && place.bottom() < height,
                "{}: `{words}` is cut: {place:?}",
                case.name
            );
            for (other, other_place) in &texts[index + 1..] {
                // A subscript may stand a quarter of a millimetre below its neighbour's overhang.
                const OVERHANG: f32 = 0.25 / 25.4 * 96.0;
                let apart = place.right() <= other_place.left() + OVERHANG
                    || other_place.right() <= place.left() + OVERHANG
                    || place.bottom() <= other_place.top() + OVERHANG
                    || other_place.bottom() <= place.top() + OVERHANG;
                assert!(
                    apart,
                    "{}: `{words}` runs into `{other}`: {place:?}, {other_place:?}",
                    case.name
                );
            }
        }
    }
}

#[test]
fn text_is_at_least_as_large_as_journals_ask() {
    // Common practice of journals: no lettering below 6 points, scripts a little smaller.
    let svg = figure(&PLAIN).svg().unwrap();
    let sizes = svg.split("font-size=\"").skip(1).map(|rest| {
        let units: f64 = rest.split('"').next().unwrap().parse().unwrap();
        units / 100.0 / 25.4 * 72.0
    });
    let mut sizes: Vec<_> = sizes.collect();
    sizes.sort_by(f64::total_cmp);
    assert!(sizes[0] > 4.9, "{}", sizes[0]);
    let below = sizes.iter().filter(|size| **size < 6.0).count();
    assert!(below <= 12, "{below} texts below 6 points");
}

#[test]
fn the_same_pair_gives_the_same_bytes() {
    let first = figure(&PLAIN);
    assert!(first.svg().unwrap() == figure(&PLAIN).svg().unwrap());
    assert!(first.png(600).unwrap() == figure(&PLAIN).png(600).unwrap());
    for _ in 0..8 {
        assert!(first.pdf().unwrap() == figure(&PLAIN).pdf().unwrap());
    }
}

#[test]
fn png_has_the_width_asked_for() {
    let png = figure(&PLAIN).png(777).unwrap();
    // The width stands in bytes 16 to 19 of a PNG (ISO/IEC 15948, section 11.2.2).
    assert_eq!(png[16..20], 777_u32.to_be_bytes());
    let error = figure(&PLAIN).png(0).unwrap_err();
    assert!(error.to_string().contains("PNG"), "{error}");
}

#[test]
fn pdf_embeds_both_faces() {
    let pdf = figure(&PLAIN).pdf().unwrap();
    let contains = |needle: &[u8]| pdf.windows(needle.len()).any(|window| window == needle);
    assert!(contains(b"FontFile"));
    assert!(contains(b"IBMPlexSans"));
    assert!(!contains(b"CreationDate"));
}

#[test]
fn names_with_markup_characters_are_escaped() {
    let mut drawn = figure(&PLAIN);
    drawn.source = "A & B <script> \"q\" \u{1b}[0m _{x}".to_owned();
    let svg = drawn.svg().unwrap();
    let texts = texts(&parsed(&svg));
    let title = texts
        .iter()
        .map(|(words, _)| words.as_str())
        .next()
        .unwrap();
    assert_eq!(title, "A & B <script> \"q\" [0m _{x}");
}

#[test]
fn masked_channels_are_gaps() {
    let whole = figure(&PLAIN).svg().unwrap();
    let gaps = figure(&Case {
        masked: true,
        ..PLAIN
    })
    .svg()
    .unwrap();
    // The data's stroke in the thick and the thin panel and in the notes.
    let runs = |svg: &str| svg.matches("stroke=\"#464C54\"").count();
    assert_eq!(runs(&whole), 3);
    assert_eq!(runs(&gaps), 2 * 5 + 1);
}

#[test]
fn a_pair_with_nothing_known_is_still_drawn() {
    let mut drawn = figure(&Case {
        models: &[],
        numbers: 0,
        cautions: 0,
        ..PLAIN
    });
    drawn.source = String::new();
    drawn.v_lsr_km_s = None;
    drawn.v_thin_km_s = None;
    for panel in [&mut drawn.thick, &mut drawn.thin] {
        panel.noise_k = f64::NAN;
        panel.temperature_k.fill(f64::NAN);
        panel.window = Window {
            low_km_s: f64::NAN,
            high_km_s: f64::NAN,
        };
    }
    let svg = drawn.svg().unwrap();
    assert!(!svg.contains("NaN") && !svg.contains("214748364"), "{svg}");
    svg_to_pdf(&svg).unwrap();
}

#[test]
fn extreme_pairs_are_drawn_on_their_page() {
    type Change = fn(&mut Panel);
    let cases: [(&str, Change); 5] = [
        ("no channels", |panel| keep_channels(panel, 0)),
        ("one channel", |panel| keep_channels(panel, 1)),
        ("no noise", |panel| panel.noise_k = 0.0),
        ("huge", |panel| panel.temperature_k.fill(1e30)),
        ("no width", |panel| panel.width_km_s.fill(0.0)),
    ];
    for (name, change) in cases {
        let mut drawn = figure(&PLAIN);
        change(&mut drawn.thick);
        change(&mut drawn.thin);
        let svg = drawn.svg().unwrap();
        assert!(!svg.contains("NaN") && !svg.contains("214748364"), "{name}");
        svg_to_pdf(&svg).unwrap();
    }
}

fn keep_channels(panel: &mut Panel, channels: usize) {
    panel.velocity_km_s.truncate(channels);
    panel.width_km_s.truncate(channels);
    panel.temperature_k.truncate(channels);
    for curve in &mut panel.curves {
        curve.residuals.truncate(channels);
    }
}

#[test]
fn arrays_of_other_lengths_are_refused() {
    let mut drawn = figure(&PLAIN);
    drawn.thin.curves[1].residuals.pop();
    let error = drawn.svg().unwrap_err();
    assert!(matches!(error, ReportError::LengthMismatch { .. }));
    assert_eq!(
        error.to_string(),
        "thin line, model `hill`, residuals: 179 values, expected 180"
    );
}
