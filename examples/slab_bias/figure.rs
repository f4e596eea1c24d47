//! The table as a figure: medians and 16 to 84 % of fitted over true speed.

use super::{Group, MODELS};
use std::fmt::Write;

/// Millimetres: a panel, what lies left of the first and between them, above and below.
const PANEL: (f64, f64) = (48.0, 48.0);
const LEFT: f64 = 14.0;
const BETWEEN: f64 = 10.0;
const TOP: f64 = 8.0;
const BOTTOM: f64 = 14.0;

/// Highest and lowest ratio.
const RATIOS: (f64, f64) = (-0.2, 1.8);

/// Fill and line of each model.
const COLOURS: [&str; 2] = ["#16529f", "#c8641e"];
const DASHES: [&str; 2] = ["none", "1.6 0.8"];

const FONT: &str = "font-family=\"sans-serif\" font-size=\"2.8\"";

/// An SVG document; every panel has its groups on a logarithmic axis.
pub fn svg(panels: &[(&str, Vec<Group>)]) -> String {
    let count = panels.len() as f64;
    let width = LEFT + count * PANEL.0 + (count - 1.0) * BETWEEN + 3.0;
    let height = TOP + PANEL.1 + BOTTOM;
    let mut out = format!(
        "<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"{width}mm\" height=\"{height}mm\" viewBox=\"0 0 {width} {height}\">\n\
         <title>Speeds of slab models on collapsing spheres</title>\n\
         <rect width=\"{width}\" height=\"{height}\" fill=\"white\"/>\n"
    );
    for (index, (name, groups)) in panels.iter().enumerate() {
        panel(&mut out, index, name, groups);
    }
    out.push_str("</svg>\n");
    out
}

fn text(out: &mut String, x: f64, y: f64, anchor: &str, words: &str) {
    let _ = writeln!(
        out,
        "<text x=\"{x:.2}\" y=\"{y:.2}\" text-anchor=\"{anchor}\" {FONT}>{words}</text>"
    );
}

fn panel(out: &mut String, index: usize, name: &str, groups: &[Group]) {
    let left = LEFT + index as f64 * (PANEL.0 + BETWEEN);
    let (first, last) = (groups[0].low, groups[groups.len() - 1].high);
    let x = |value: f64| left + PANEL.0 * (value / first).ln() / (last / first).ln();
    let y = |ratio: f64| {
        let share = (ratio - RATIOS.0) / (RATIOS.1 - RATIOS.0);
        TOP + PANEL.1 * (1.0 - share.clamp(0.0, 1.0))
    };
    for step in 0..=4 {
        let ratio = 0.4 * f64::from(step);
        let _ = writeln!(
            out,
            "<line x1=\"{left}\" x2=\"{:.2}\" y1=\"{1:.2}\" y2=\"{1:.2}\" stroke=\"#dddddd\" stroke-width=\"0.15\"/>",
            left + PANEL.0,
            y(ratio)
        );
        if index == 0 {
            text(
                out,
                left - 1.2,
                y(ratio) + 1.0,
                "end",
                &format!("{ratio:.1}"),
            );
        }
    }
    for (model, colour) in COLOURS.iter().enumerate() {
        let known = groups
            .iter()
            .filter_map(|group| Some(((group.low * group.high).sqrt(), group.spread[model]?)));
        let known: Vec<(f64, [f64; 3])> = known.collect();
        let points = |which: usize| {
            let each = known.iter().map(|(at, spread)| {
                let (x, y) = (x(*at), y(spread[which]));
                format!("{x:.2},{y:.2}")
            });
            each.collect::<Vec<String>>()
        };
        let mut edge = points(0);
        edge.extend(points(2).into_iter().rev());
        let _ = writeln!(
            out,
            "<polygon points=\"{}\" fill=\"{colour}\" fill-opacity=\"0.18\"/>\n\
             <polyline points=\"{}\" fill=\"none\" stroke=\"{colour}\" stroke-width=\"0.5\" stroke-dasharray=\"{}\"/>",
            edge.join(" "),
            points(1).join(" "),
            DASHES[model]
        );
        for (at, spread) in &known {
            let _ = writeln!(
                out,
                "<circle cx=\"{:.2}\" cy=\"{:.2}\" r=\"0.8\" fill=\"{colour}\"/>",
                x(*at),
                y(spread[1])
            );
        }
        if index == 0 {
            let height = 3.6 * model as f64;
            let at = TOP + 4.0 + height;
            let _ = writeln!(
                out,
                "<line x1=\"{:.2}\" x2=\"{:.2}\" y1=\"{at}\" y2=\"{at}\" stroke=\"{colour}\" stroke-width=\"0.5\" stroke-dasharray=\"{}\"/>",
                left + 24.0,
                left + 30.0,
                DASHES[model]
            );
            text(out, left + 31.5, at + 1.0, "start", MODELS[model].1);
        }
    }
    let _ = writeln!(
        out,
        "<line x1=\"{left}\" x2=\"{:.2}\" y1=\"{1:.2}\" y2=\"{1:.2}\" stroke=\"black\" stroke-width=\"0.2\"/>\n\
         <rect x=\"{left}\" y=\"{TOP}\" width=\"{2}\" height=\"{3}\" fill=\"none\" stroke=\"black\" stroke-width=\"0.25\"/>",
        left + PANEL.0,
        y(1.0),
        PANEL.0,
        PANEL.1
    );
    ticks(out, groups, &x);
    text(
        out,
        left + 0.5 * PANEL.0,
        TOP + PANEL.1 + 9.5,
        "middle",
        name,
    );
    if index == 0 {
        let middle = TOP + 0.5 * PANEL.1;
        let _ = writeln!(
            out,
            "<text x=\"4\" y=\"{middle}\" text-anchor=\"middle\" transform=\"rotate(-90 4 {middle})\" {FONT}>fitted over true speed</text>"
        );
    }
}

/// Marks and numbers at the ends of the groups.
fn ticks(out: &mut String, groups: &[Group], x: &dyn Fn(f64) -> f64) {
    let last = groups.last().map(|group| group.high);
    let ends = groups.iter().map(|group| group.low).chain(last);
    for end in ends {
        let base = TOP + PANEL.1;
        let _ = writeln!(
            out,
            "<line x1=\"{0:.2}\" x2=\"{0:.2}\" y1=\"{base}\" y2=\"{1}\" stroke=\"black\" stroke-width=\"0.2\"/>",
            x(end),
            base - 1.2
        );
        text(out, x(end), base + 4.0, "middle", &format!("{end}"));
    }
}
