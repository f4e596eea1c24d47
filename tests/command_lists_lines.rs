//! `inrush lines`: the built-in transitions, all or those that a text points at.

mod command;

use command::{Folder, Run};
use inrush::line::TRANSITIONS;

fn lines(arguments: &[&str]) -> Run {
    let mut all = vec!["lines"];
    all.extend(arguments);
    Folder::new().inrush(&all)
}

/// Names in the first column: everything before the rest frequency, two blanks or more away.
fn names(run: &Run) -> Vec<String> {
    run.stdout
        .lines()
        .skip(1)
        .map(|line| line[..24].trim().to_owned())
        .collect()
}

#[test]
fn all_lines_without_a_text() {
    let run = lines(&[]);
    assert_eq!((run.code, run.stderr.as_str()), (0, ""));
    let header = run.stdout.lines().next().unwrap();
    for column in [
        "line",
        "rest_freq_ghz",
        "err_khz",
        "err_km_s",
        "a_ul_per_s",
        "e_u_k",
        "parts",
        "source",
    ] {
        assert!(header.contains(column), "no {column} in {header}");
    }
    let expected: Vec<String> = TRANSITIONS
        .iter()
        .map(inrush::line::Transition::name)
        .collect();
    assert_eq!(names(&run), expected);
    let widths: Vec<usize> = run
        .stdout
        .lines()
        .map(|line| line.trim_end().len())
        .collect();
    assert!(widths.iter().all(|width| *width <= 110), "{}", run.stdout);
}

#[test]
fn a_species_with_its_isotopologues() {
    let run = lines(&["HCO+"]);
    assert_eq!((run.code, run.stderr.as_str()), (0, ""));
    let names = names(&run);
    for name in ["HCO+ 1-0", "HCO+ 3-2", "H13CO+ 1-0", "HC18O+ 1-0"] {
        assert!(
            names.iter().any(|found| found == name),
            "no {name} in {names:?}"
        );
    }
    assert!(
        names
            .iter()
            .all(|name| name.ends_with(|c: char| c.is_ascii_digit()) && name.contains("O+")),
        "{names:?}"
    );
    // as the spectral catalogues give it
    assert!(run.stdout.contains("89.1885247"), "{}", run.stdout);
    for spelling in ["hco+", " HCO⁺ ", "HCO^+"] {
        assert_eq!(lines(&[spelling]).stdout, run.stdout, "{spelling}");
    }
}

#[test]
fn a_frequency() {
    let run = lines(&["93.17"]);
    assert_eq!((run.code, run.stderr.as_str()), (0, ""));
    assert_eq!(names(&run), ["N2H+ 1-0"]);
    // a multiplet says how many components it has; N2H+ 1-0 has 7 resolved ones
    let row: Vec<&str> = run
        .stdout
        .lines()
        .nth(1)
        .unwrap()
        .split_whitespace()
        .collect();
    assert_eq!(row[row.len() - 2], "7", "{}", run.stdout);
}

#[test]
fn a_transition() {
    let run = lines(&["H13CO+ 1-0"]);
    assert_eq!(names(&run), ["H13CO+ 1-0"]);
}

#[test]
fn a_text_that_nothing_matches() {
    let run = lines(&["unobtainium"]);
    assert_eq!(run.code, 2);
    assert_eq!(run.stdout, "");
    assert!(
        run.stderr
            .starts_with("error: no built-in line matches `unobtainium`, expected "),
        "{}",
        run.stderr
    );
    assert!(run.stderr.contains("\nhint: "), "{}", run.stderr);
}
