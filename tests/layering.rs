//! Which module may use which, as a table, and what only some modules may do.
//!
//! Comments, strings and `#[cfg(test)]` items do not count.

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

/// Every module and the ones it may use, in reading order: only what stands above it. A module need
/// not exist yet. `cli` is the binary: `main.rs` and `cli/`.
const MAY_USE: &[(&str, &str)] = &[
    ("constants", ""),
    ("line", "constants"),
    ("numeric", "constants"),
    ("model", "constants line numeric"),
    ("sphere", "constants line numeric model"),
    ("spectrum", "constants line numeric"),
    ("read", "constants line numeric spectrum"),
    ("prepare", "constants line numeric spectrum read"),
    ("measure", "constants line numeric spectrum prepare"),
    (
        "fit",
        "constants line numeric model sphere spectrum prepare measure",
    ),
    (
        "derive",
        "constants line numeric model spectrum prepare measure fit",
    ),
    (
        "grid",
        "constants line numeric model spectrum read prepare measure fit derive",
    ),
    (
        "rank",
        "constants line numeric model spectrum read prepare measure fit derive",
    ),
    ("simulate", "constants line numeric model spectrum"),
    (
        "report",
        "constants line numeric model spectrum read prepare measure fit derive grid rank simulate",
    ),
    (
        "run",
        "constants line numeric model spectrum read prepare measure fit derive grid rank simulate report",
    ),
    (
        "cli",
        "constants line numeric model spectrum read prepare measure fit derive grid rank simulate report run",
    ),
];

/// Words that only some modules may hold.
const RESERVED: &[(&str, &str, &str)] = &[
    ("unsafe", "numeric", "vector mathematics alone needs it"),
    (
        "println print eprintln eprint dbg stdout stderr",
        "cli",
        "the library never prints",
    ),
    (
        "TRANSITIONS",
        "line derive simulate run cli",
        "models and fits know no species",
    ),
    (
        "SystemTime Instant",
        "run cli",
        "results do not depend on the clock",
    ),
];

/// One breach of the tables, in words.
fn breaches(module_path: &[&str], source: &str) -> Vec<String> {
    let module = module_path[0];
    let Some((_, allowed)) = MAY_USE.iter().find(|(name, _)| *name == module) else {
        return vec![format!("module `{module}` is not in the table")];
    };
    let code = without_tests(&code_only(source));
    let uses = modules_used(&code, module_path)
        .into_iter()
        .filter(|used| used != module && !holds(allowed, used))
        .map(|used| format!("`{module}` uses `{used}`"));
    let words: BTreeSet<&str> = words_of(&code).map(|(_, word)| word).collect();
    let reserved = RESERVED
        .iter()
        .filter(|(_, only_in, _)| !holds(only_in, module))
        .flat_map(|(reserved, _, why)| {
            reserved
                .split(' ')
                .filter(|word| words.contains(word))
                .map(move |word| format!("`{module}` holds `{word}`: {why}"))
        });
    uses.chain(reserved).collect()
}

/// Whether a list of the tables holds a name.
fn holds(list: &str, name: &str) -> bool {
    list.split(' ').any(|listed| listed == name)
}

/// Words (identifiers and keywords) with their positions.
fn words_of(code: &str) -> impl Iterator<Item = (usize, &str)> {
    let is_word = |character: char| character.is_alphanumeric() || character == '_';
    code.split(move |character| !is_word(character))
        .filter(|word| !word.is_empty())
        .map(|word| (word.as_ptr() as usize - code.as_ptr() as usize, word))
}

/// Top-level modules that a file's code names by `crate::`, `inrush::` or enough `super::`.
fn modules_used(code: &str, module_path: &[&str]) -> BTreeSet<String> {
    let mut used = BTreeSet::new();
    for (start, word) in words_of(code) {
        let after = &code[start + word.len()..];
        match word {
            "crate" | "inrush" => used.extend(names_after(after)),
            // The first of a chain; the others are looked at from here.
            "super" if !code[..start].trim_end().ends_with("super::") => {
                let mut rest = after;
                let mut levels = 1;
                while let Some(next) = path_step(rest).and_then(|step| step.strip_prefix("super")) {
                    rest = next;
                    levels += 1;
                }
                if levels >= module_path.len() {
                    used.extend(names_after(rest));
                }
            }
            _ => {}
        }
    }
    used.remove("self");
    used
}

/// What follows `::`; `None` where nothing does.
fn path_step(rest: &str) -> Option<&str> {
    rest.trim_start().strip_prefix("::").map(str::trim_start)
}

/// The first names of a path or of a braced group of paths.
fn names_after(rest: &str) -> Vec<String> {
    let first_word = |text: &str| words_of(text).next().map(|(_, word)| word.to_owned());
    let Some(step) = path_step(rest) else {
        return Vec::new();
    };
    let Some(group) = step.strip_prefix('{') else {
        return first_word(step).into_iter().collect();
    };
    let mut depth = 0_u32;
    let mut names = Vec::new();
    let mut item = String::new();
    for character in group.chars() {
        match character {
            '}' if depth == 0 => break,
            ',' if depth == 0 => names.extend(first_word(&std::mem::take(&mut item))),
            _ => item.push(character),
        }
        match character {
            '{' => depth += 1,
            '}' => depth -= 1,
            _ => {}
        }
    }
    names.extend(first_word(&item));
    names
}

/// Source without comments and without what strings and characters hold.
fn code_only(source: &str) -> String {
    let mut code = String::with_capacity(source.len());
    let mut rest = source;
    while let Some(first) = rest.chars().next() {
        let skipped = comment_length(rest).or_else(|| literal_length(rest, &code));
        if skipped.is_some() {
            code.push(' ');
        } else {
            code.push(first);
        }
        rest = &rest[skipped.unwrap_or(first.len_utf8())..];
    }
    code
}

fn comment_length(rest: &str) -> Option<usize> {
    if rest.starts_with("//") {
        return Some(rest.find('\n').unwrap_or(rest.len()));
    }
    rest.strip_prefix("/*")?;
    let (mut depth, mut at) = (1, 2);
    while depth > 0 && at < rest.len() {
        let tail = &rest.as_bytes()[at..];
        if tail.starts_with(b"/*") {
            (depth, at) = (depth + 1, at + 2);
        } else if tail.starts_with(b"*/") {
            (depth, at) = (depth - 1, at + 2);
        } else {
            at += 1;
        }
    }
    Some(at)
}

/// Length of a string, raw string or character; `None` where none begins (a lifetime is none).
fn literal_length(rest: &str, before: &str) -> Option<usize> {
    let inside_word = before.ends_with(|last: char| last.is_alphanumeric() || last == '_');
    if rest.starts_with('"') {
        return Some(quoted_length(rest, '"'));
    }
    if rest.starts_with('r') && (!inside_word || before.ends_with('b')) {
        let hashes = rest[1..].bytes().take_while(|byte| *byte == b'#').count();
        if rest[1 + hashes..].starts_with('"') {
            let end = format!("\"{}", "#".repeat(hashes));
            let body = 2 + hashes;
            return Some(
                rest[body..]
                    .find(&end)
                    .map_or(rest.len(), |at| body + at + end.len()),
            );
        }
    }
    let mut characters = rest.strip_prefix('\'')?.chars();
    let is_character = characters.next() == Some('\\') || characters.next() == Some('\'');
    is_character.then(|| quoted_length(rest, '\''))
}

fn quoted_length(rest: &str, quote: char) -> usize {
    let mut escaped = false;
    for (at, character) in rest.char_indices().skip(1) {
        if character == quote && !escaped {
            return at + 1;
        }
        escaped = character == '\\' && !escaped;
    }
    rest.len()
}

/// Code without the items marked `#[cfg(test)]`: up to their closing brace or semicolon.
fn without_tests(code: &str) -> String {
    const MARK: &str = "#[cfg(test)]";
    let mut kept = String::new();
    let mut rest = code;
    while let Some(at) = rest.find(MARK) {
        kept.push_str(&rest[..at]);
        rest = &rest[at + MARK.len()..];
        let mut depth = 0_u32;
        let end = rest.char_indices().find(|(_, character)| {
            match character {
                '{' => depth += 1,
                '}' => depth -= 1,
                _ => {}
            }
            depth == 0 && matches!(character, '}' | ';')
        });
        rest = end.map_or("", |(at, _)| &rest[at + 1..]);
    }
    kept.push_str(rest);
    kept
}

/// Module path of a source file: `src/line/names.rs` is `line`, `names`.
fn module_path_of(file: &Path, src: &Path) -> Vec<String> {
    let relative = file
        .strip_prefix(src)
        .expect("below src")
        .with_extension("");
    let mut path: Vec<String> = relative
        .iter()
        .map(|part| part.to_str().expect("a plain name").to_owned())
        .collect();
    if path.last().is_some_and(|last| last == "mod") {
        path.pop();
    }
    if path == ["main"] {
        path = vec!["cli".into()];
    }
    path
}

fn source_files(folder: &Path) -> Vec<PathBuf> {
    let mut files = Vec::new();
    for entry in fs::read_dir(folder).expect("a readable folder") {
        let path = entry.expect("a readable entry").path();
        if path.is_dir() {
            files.extend(source_files(&path));
        } else if path.extension().is_some_and(|extension| extension == "rs") {
            files.push(path);
        }
    }
    files
}

#[test]
fn every_module_uses_only_what_stands_above_it() {
    let src = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut found = Vec::new();
    let mut modules = BTreeSet::new();
    for file in source_files(&src) {
        let path = module_path_of(&file, &src);
        if path == ["lib"] {
            continue; // declares the modules
        }
        let parts: Vec<&str> = path.iter().map(String::as_str).collect();
        let source = fs::read_to_string(&file).expect("readable source");
        found.extend(
            breaches(&parts, &source)
                .into_iter()
                .map(|breach| format!("{}: {breach}", file.display())),
        );
        modules.insert(path[0].clone());
    }
    assert!(found.is_empty(), "{}", found.join("\n"));
    for module in ["constants", "line", "numeric", "spectrum", "cli"] {
        assert!(modules.contains(module), "`{module}` was not looked at");
    }
}

#[test]
fn the_table_flows_one_way() {
    for (index, (module, allowed)) in MAY_USE.iter().enumerate() {
        for used in allowed.split_whitespace() {
            assert!(
                MAY_USE[..index].iter().any(|(above, _)| *above == used),
                "`{used}` does not stand above `{module}`"
            );
        }
    }
}

/// DEVELOPERS.md shows the table to people.
#[test]
fn the_developers_page_holds_the_same_table() {
    const START: &str = "<!-- imports: the table of tests/layering.rs -->\n";
    const END: &str = "<!-- end of imports -->";
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/DEVELOPERS.md");
    let page = fs::read_to_string(path).expect("DEVELOPERS.md");
    let (before, rest) = page.split_once(START).expect("the table's start");
    let (found, after) = rest.split_once(END).expect("the table's end");
    let mut expected = String::from("| module | may use |\n| --- | --- |\n");
    for (module, allowed) in MAY_USE {
        for part in ["| ", module, " | ", allowed, " |\n"] {
            expected.push_str(part);
        }
    }
    if std::env::var_os("INRUSH_WRITE_EXPECTED").is_some() {
        fs::write(path, format!("{before}{START}{expected}{END}{after}")).expect("written");
        return;
    }
    assert_eq!(
        found, expected,
        "DEVELOPERS.md shows another table; run \
         `INRUSH_WRITE_EXPECTED=1 cargo test --test layering` to write it anew"
    );
}

#[test]
fn a_breach_is_found_however_it_is_written() {
    let cases: &[(&[&str], &str, &str)] = &[
        (
            &["model"],
            "use crate::spectrum::Spectrum;",
            "`model` uses `spectrum`",
        ),
        (
            &["numeric", "sums"],
            "use crate::{constants, line::Line};",
            "`numeric` uses `line`",
        ),
        (
            &["fit"],
            "use crate::{\n    model::{self, Hill},\n    read,\n};",
            "`fit` uses `read`",
        ),
        (
            &["fit", "start"],
            "fn f() { crate :: run::start() }",
            "`fit` uses `run`",
        ),
        (&["grid"], "pub use crate::rank;", "`grid` uses `rank`"),
        (
            &["rank"],
            "let x = crate::grid::Grid::new();",
            "`rank` uses `grid`",
        ),
        (&["report"], "use inrush::run;", "`report` uses `run`"),
        (&["line"], "use super::model;", "`line` uses `model`"),
        (
            &["line", "names"],
            "use super::super::{fit};",
            "`line` uses `fit`",
        ),
        (
            &["line"],
            "type T<'a> = &'a crate::read::File;",
            "`line` uses `read`",
        ),
        (
            &["line"],
            "const Q: char = '\"'; use crate::fit; const S: &str = \"\";",
            "`line` uses `fit`",
        ),
        (
            &["line"],
            "#[cfg(test)]\nmod tests { fn f() {} }\nuse crate::fit;",
            "`line` uses `fit`",
        ),
        (
            &["model"],
            "use crate::unheard_of;",
            "`model` uses `unheard_of`",
        ),
        (&["misc"], "", "module `misc` is not in the table"),
        (
            &["fit"],
            "unsafe { f() }",
            "`fit` holds `unsafe`: vector mathematics alone needs it",
        ),
        (
            &["run"],
            "println!(\"x\");",
            "`run` holds `println`: the library never prints",
        ),
        (
            &["report"],
            "std::io::stdout().lock()",
            "`report` holds `stdout`: the library never prints",
        ),
        (
            &["fit"],
            "crate::line::TRANSITIONS",
            "`fit` holds `TRANSITIONS`: models and fits know no species",
        ),
    ];
    for (module_path, source, expected) in cases {
        assert_eq!(breaches(module_path, source), [*expected], "{source}");
    }
}

#[test]
fn what_is_allowed_is_not_a_breach() {
    let cases: &[(&[&str], &str)] = &[
        (
            &["model"],
            "use crate::numeric; use crate::line::Component; use crate::model::Hill;",
        ),
        (
            &["line", "names"],
            "use super::{Line, fit}; use super::super::constants;",
        ),
        (
            &["spectrum"],
            "//! Downstream of [`crate::prepare`].\n/* use crate::fit; /* nested */ use crate::run; */",
        ),
        (
            &["spectrum"],
            "const TEXT: &str = \"use crate::fit; \\\" println!\";",
        ),
        (
            &["spectrum"],
            "const TEXT: &str = r#\"use crate::fit; \" unsafe\"#;",
        ),
        (
            &["fit"],
            "#[cfg(test)]\nmod tests { use crate::simulate; fn f() { println!() } }",
        ),
        (&["numeric"], "#[allow(unsafe_code)] unsafe { f() }"),
        (
            &["line"],
            "#![deny(unsafe_code)] pub(crate) fn f<'a>(x: &'a str) {}",
        ),
        (
            &["cli"],
            "mod cli; use inrush::{run, report}; fn main() { println!() }",
        ),
    ];
    for (module_path, source) in cases {
        assert_eq!(breaches(module_path, source), [""; 0], "{source}");
    }
}

#[test]
fn files_belong_to_their_modules() {
    let src = Path::new("src");
    for (file, expected) in [
        ("src/constants.rs", &["constants"][..]),
        ("src/line/mod.rs", &["line"]),
        ("src/line/names.rs", &["line", "names"]),
        ("src/main.rs", &["cli"]),
        ("src/cli/lines.rs", &["cli", "lines"]),
    ] {
        assert_eq!(module_path_of(Path::new(file), src), expected);
    }
}
