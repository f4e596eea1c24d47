//! Every command that a page shows is run, and has to print what the page says; every caution is
//! explained.
//!
//! Blocks marked `console` are read: `$ ` begins a command, `> ` continues it, other lines are what it
//! prints on both streams; `...` stands for any lines. The commands of a page run in order in one
//! folder that holds `demo-spectra`, shown as `/data`. `INRUSH_WRITE_EXPECTED=1` writes anew what commands
//! print; where `...` stands, the other lines are found again by how they begin.
#![cfg(all(unix, feature = "figures"))]
#![allow(clippy::unwrap_used)]

use std::path::Path;
use std::process::Command;

const PAGES: [&str; 3] = ["README.md", "docs/tutorial.md", "docs/how-to.md"];

/// A command and what the page says it prints.
#[derive(Default)]
struct Step {
    command: Vec<String>,
    printed: Vec<String>,
}

impl Step {
    /// Its command as the page shows it.
    fn shown_command(&self) -> impl Iterator<Item = String> {
        let marks = std::iter::once("$ ").chain(std::iter::repeat("> "));
        marks
            .zip(&self.command)
            .map(|(mark, line)| format!("{mark}{line}").trim_end().to_owned())
    }
}

/// A page as text and blocks of steps, in turn.
enum Part {
    Text(String),
    Steps(Vec<Step>),
}

fn parts(page: &str) -> Vec<Part> {
    let mut parts = Vec::new();
    let mut steps: Option<Vec<Step>> = None;
    for line in page.lines() {
        match &mut steps {
            None => {
                parts.push(Part::Text(line.to_owned()));
                if line == "```console" {
                    steps = Some(Vec::new());
                }
            }
            Some(_) if line == "```" => {
                parts.push(Part::Steps(steps.take().unwrap()));
                parts.push(Part::Text(line.to_owned()));
            }
            Some(steps) => {
                if let Some(command) = line.strip_prefix("$ ") {
                    steps.push(Step::default());
                    steps.last_mut().unwrap().command.push(command.to_owned());
                    continue;
                }
                let step = steps.last_mut().expect("a block begins with a command");
                match line.strip_prefix("> ").or((line == ">").then_some("")) {
                    Some(more) if step.printed.is_empty() => step.command.push(more.to_owned()),
                    _ => step.printed.push(line.to_owned()),
                }
            }
        }
    }
    assert!(steps.is_none(), "a block without end");
    parts
}

/// Both streams of a command, a line each.
fn run(step: &Step, folder: &Path) -> Vec<String> {
    let program = Path::new(env!("CARGO_BIN_EXE_inrush"));
    let path = format!(
        "{}:{}",
        program.parent().unwrap().display(),
        std::env::var("PATH").unwrap_or_default()
    );
    let command = step
        .command
        .join("\n")
        .replace("cargo run --release --", "inrush");
    let output = Command::new("sh")
        .arg("-c")
        .arg(format!("exec 2>&1\n{command}"))
        .current_dir(folder)
        .env("PATH", path)
        .env("COLUMNS", "80")
        .output()
        .unwrap();
    let here = folder.canonicalize().unwrap();
    String::from_utf8(output.stdout)
        .unwrap()
        .replace(here.to_str().unwrap(), "/data")
        .lines()
        .map(|line| line.trim_end().to_owned())
        .collect()
}

/// Whether lines are those expected, `...` standing for any.
fn agree(expected: &[String], found: &[String]) -> bool {
    match expected.split_first() {
        None => found.is_empty(),
        Some((first, rest)) if first == "..." => {
            (0..=found.len()).any(|skipped| agree(rest, &found[skipped..]))
        }
        Some((first, rest)) => found.first() == Some(first) && agree(rest, &found[1..]),
    }
}

/// What a page should say now: all lines, or the same selection of them.
fn renewed(printed: &[String], found: &[String]) -> Vec<String> {
    // what stands before the first wide gap tells a line from the others
    let label = |line: &str| line.trim_start().split("  ").next().map(str::to_owned);
    if !printed.iter().any(|line| line == "...") {
        return found.to_vec();
    }
    printed
        .iter()
        .map(|old| {
            let same = found.iter().find(|new| label(new) == label(old));
            same.unwrap_or(old).clone()
        })
        .collect()
}

#[test]
fn every_shown_command_prints_what_its_page_says() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let write = std::env::var_os("INRUSH_WRITE_EXPECTED").is_some();
    let (mut wrong, mut commands) = (Vec::new(), 0);
    for name in PAGES {
        let folder = tempfile::tempdir().unwrap();
        std::os::unix::fs::symlink(
            root.join("demo-spectra"),
            folder.path().join("demo-spectra"),
        )
        .unwrap();
        let page = std::fs::read_to_string(root.join(name)).unwrap();
        let mut written: Vec<String> = Vec::new();
        for part in parts(&page) {
            match part {
                Part::Text(line) => written.push(line),
                Part::Steps(steps) => {
                    for step in steps {
                        commands += 1;
                        let found = run(&step, folder.path());
                        let shown = if write {
                            renewed(&step.printed, &found)
                        } else {
                            step.printed.clone()
                        };
                        if !agree(&shown, &found) {
                            wrong.push(format!(
                                "{name}: $ {}\nprints\n{}\n",
                                step.command.join("\n"),
                                found.join("\n")
                            ));
                        }
                        written.extend(step.shown_command());
                        written.extend(shown);
                    }
                }
            }
        }
        if write {
            std::fs::write(root.join(name), written.join("\n") + "\n").unwrap();
        }
    }
    assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    assert!(commands > 10, "{commands} commands");
}

#[test]
fn the_tutorial_explains_every_caution() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let tutorial = std::fs::read_to_string(root.join("docs/tutorial.md")).unwrap();
    for (file, fewest) in [
        ("src/fit/cautions.rs", 11),
        ("src/derive/cautions.rs", 11),
        ("src/grid/caution.rs", 4),
    ] {
        let source = std::fs::read_to_string(root.join(file)).unwrap();
        let (_, codes) = source.split_once("fn code(").unwrap();
        let (codes, _) = codes.split_once("\n    }\n").unwrap();
        let codes: Vec<&str> = codes.split('"').skip(1).step_by(2).collect();
        assert!(codes.len() >= fewest, "{codes:?}");
        for code in codes {
            assert!(tutorial.contains(&format!("| `{code}` |")), "{code}");
        }
    }
}
