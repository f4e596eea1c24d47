//! `inrush rank` as its users meet it: what it writes, in which order, and what it says to bad input.
#![allow(
    clippy::unwrap_used,
    reason = "a test stops where its data cannot be made"
)]

mod command;

use command::{Folder, Run};
use inrush::line::find;
use inrush::report::columns;
use std::collections::HashMap;

/// A folder with a simulated sample, `sample.csv` and its spectra.
fn simulated(pairs: u64, further: &[&str]) -> Folder {
    let folder = Folder::new();
    simulate(&folder, "s", pairs, further);
    folder
}

fn simulate(folder: &Folder, name: &str, pairs: u64, further: &[&str]) {
    let pairs = pairs.to_string();
    let mut arguments = vec![
        "simulate",
        "sample",
        "--out",
        name,
        "--pairs",
        &pairs,
        "--kinds",
        "infall=2,static,expansion",
        "--signal-to-noise",
        "20,50",
        "--signal-to-noise-thin",
        "20,50",
        "--quiet",
    ];
    if !further.contains(&"--seed") {
        arguments.extend(["--seed", "5"]);
    }
    arguments.extend(further);
    let run = folder.inrush(&arguments);
    assert_eq!(run.code, 0, "{}", run.stderr);
}

type Cells = HashMap<String, String>;

/// Rows of a table by the names of their columns.
fn rows(folder: &Folder, name: &str) -> Vec<Cells> {
    let bytes = folder.read(name);
    let mut reader = csv::Reader::from_reader(&bytes[..]);
    let names = reader.headers().unwrap().clone();
    let row = |record: csv::StringRecord| -> Cells {
        let cells = names.iter().zip(&record);
        cells
            .map(|(name, cell)| (name.to_owned(), cell.to_owned()))
            .collect()
    };
    reader
        .records()
        .map(|record| row(record.unwrap()))
        .collect()
}

fn number(cells: &Cells, name: &str) -> f64 {
    cells[name]
        .parse()
        .unwrap_or_else(|_| panic!("{name} is `{}`", cells[name]))
}

/// The simulated table with columns of properties behind it, the same for all sources.
fn with_properties(folder: &Folder, names: &str, values: &str) {
    let table = String::from_utf8(folder.read("s/sample.csv")).unwrap();
    let lines = table.lines().enumerate().map(|(index, line)| {
        let further = if index == 0 { names } else { values };
        format!("{line},{further}\n")
    });
    folder.write("s/sample.csv", lines.collect::<String>().as_bytes());
}

fn refused(run: &Run, found: &str, hint: &str) {
    assert_eq!(run.code, 2, "{}{}", run.stdout, run.stderr);
    assert!(run.stdout.is_empty());
    assert!(run.stderr.contains(found), "{found} in {}", run.stderr);
    assert!(run.stderr.contains(hint), "{hint} in {}", run.stderr);
}

#[test]
fn a_sample_becomes_a_ranking_with_every_result_column_and_reasons() {
    let folder = simulated(7, &[]);
    with_properties(
        &folder,
        "mass_msun,mass_msun_err,radius_pc,density_slope,group",
        "400,80,0.3,1.7,early",
    );
    let run = folder.inrush(&[
        "rank",
        "s/sample.csv",
        "--out",
        "r",
        "--top",
        "2",
        "--latex",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let ranking = rows(&folder, "r/ranking.csv");
    let text = String::from_utf8(folder.read("r/ranking.csv")).unwrap();
    let names: Vec<&str> = text.lines().next().unwrap().split(',').collect();
    assert_eq!(names[0], "rank");
    let results = columns::results();
    let expected = results.columns().iter().map(|column| column.name.as_str());
    assert!(
        names[1..]
            .iter()
            .copied()
            .zip(expected)
            .all(|(a, b)| a == b)
    );
    let expected = |row: &Cells| number(row, "mass_rate_expected_msun_yr");
    assert_eq!(ranking.len(), 7);
    for (place, row) in (1..).zip(&ranking) {
        assert_eq!(row["rank"], place.to_string());
        assert_eq!(row["group"], "early");
        assert!(row["why"].contains("infall"), "{}", row["why"]);
        let [low, high] = ["rank_lo68", "rank_hi68"].map(|name| number(row, name));
        assert!(1.0 <= low && low <= high && high <= 7.0);
    }
    for pair in ranking.windows(2) {
        assert!(expected(&pair[0]) >= expected(&pair[1]));
    }
    // two of the sources are among the first two
    let all: f64 = ranking.iter().map(|row| number(row, "p_top")).sum();
    assert!((all - 2.0).abs() < 1e-9, "{all}");
    // the likeliest is a true infall
    let truth = rows(&folder, "s/truth.csv");
    let kind = truth
        .iter()
        .find(|row| row["id"] == ranking[0]["id"])
        .unwrap()["kind"]
        .clone();
    assert_eq!(kind, "infall");
    for name in [
        "ranking.ecsv",
        "ranking.fits",
        "statistics.csv",
        "statistics.txt",
        "run.toml",
        "record.toml",
        "paper.ecsv",
    ] {
        assert!(!folder.read(&format!("r/{name}")).is_empty());
    }
    assert!(run.stdout.contains("Ranking of 7 sources") && run.stdout.contains("blue excess"));
    let paper = String::from_utf8(folder.read("r/paper.tex")).unwrap();
    let body: Vec<&str> = paper
        .lines()
        .filter(|line| line.ends_with("\\\\"))
        .collect();
    assert_eq!(body.len(), 2 + 7);
    assert!(
        body.iter().all(|line| line.matches('&').count() == 7),
        "{paper}"
    );
    assert!(!paper.contains("NaN") && paper.contains("\\begin{tabular}"));
}

#[test]
fn the_number_of_threads_changes_no_byte() {
    let folder = simulated(9, &[]);
    for (out, threads) in [("one", "1"), ("three", "3")] {
        let run = folder.inrush(&[
            "rank",
            "s/sample.csv",
            "--out",
            out,
            "--threads",
            threads,
            "--formal",
            "--latex",
        ]);
        assert!(run.code <= 1, "{}", run.stderr);
    }
    let names = |out: &str| -> Vec<String> {
        let of = format!("{out}/");
        let files = folder.files().into_iter();
        files
            .filter_map(|name| name.strip_prefix(&of).map(str::to_owned))
            .collect()
    };
    assert_eq!(names("one"), names("three"));
    assert!(names("one").len() >= 8, "{:?}", names("one"));
    for name in names("one") {
        let same = folder.read(&format!("one/{name}")) == folder.read(&format!("three/{name}"));
        assert!(same, "{name}");
    }
}

#[test]
fn a_missing_file_is_reported_and_the_rest_is_ranked() {
    let folder = simulated(5, &[]);
    std::fs::remove_file(folder.path().join("s/spectra/0000/pair-0000003-thin.csv")).unwrap();
    let run = folder.inrush(&[
        "rank",
        "s/sample.csv",
        "--out",
        "r",
        "--formal",
        "--no-figures",
    ]);
    assert_eq!(run.code, 1, "{}", run.stderr);
    assert!(
        run.stderr.contains("warning: pair-0000003")
            && run.stderr.contains("pair-0000003-thin.csv")
    );
    let ranking = rows(&folder, "r/ranking.csv");
    assert_eq!(ranking.len(), 5);
    assert!(ranking[..4].iter().all(|row| !row["rank"].is_empty()));
    let last = &ranking[4];
    assert_eq!(
        (last["id"].as_str(), last["rank"].as_str()),
        ("pair-0000003", "")
    );
    assert!(
        last["why"].contains("not ranked") && last["why"].contains("no such file"),
        "{}",
        last["why"]
    );
}

#[test]
fn spectra_in_mixed_units_are_ranked_as_in_one_unit() {
    let folder = simulated(4, &[]);
    let arguments = |out| {
        [
            "rank",
            "s/sample.csv",
            "--out",
            out,
            "--formal",
            "--no-figures",
        ]
    };
    assert_eq!(folder.inrush(&arguments("one")).code, 0);
    // the second source's thick line against frequency, the third one's in mK
    let rest_ghz = find("HCO+ 1-0").unwrap().rest_frequency_ghz;
    let name = |pair: u32| format!("s/spectra/0000/pair-000000{pair}-thick.csv");
    let changed = |pair: u32, header: &str, change: &dyn Fn(f64, f64) -> (f64, f64)| {
        let text = String::from_utf8(folder.read(&name(pair))).unwrap();
        let lines = text.lines().map(|line| {
            let cells: Vec<&str> = line.split(',').collect();
            match cells[..] {
                [v, t] if v.parse::<f64>().is_ok() => {
                    let (x, y) = change(v.parse().unwrap(), t.parse().unwrap());
                    format!("{x:?},{y:?}\n")
                }
                [_, _] if !line.starts_with('#') => format!("{header}\n"),
                _ => format!("{line}\n"),
            }
        });
        folder.write(&name(pair), lines.collect::<String>().as_bytes());
    };
    changed(2, "frequency_ghz,tmb_k", &|v, t| {
        (rest_ghz * (1.0 - v / 299_792.458), t)
    });
    changed(3, "velocity_m_s,tmb_mk", &|v, t| (1e3 * v, 1e3 * t));
    let run = folder.inrush(&arguments("mixed"));
    assert_eq!(run.code, 0, "{}", run.stderr);
    let (one, mixed) = (
        rows(&folder, "one/ranking.csv"),
        rows(&folder, "mixed/ranking.csv"),
    );
    for (a, b) in one.iter().zip(&mixed) {
        assert_eq!((&a["id"], &a["rank"]), (&b["id"], &b["rank"]));
        let difference = number(a, "v_in_km_s") - number(b, "v_in_km_s");
        // frequencies in single steps of the last digit move velocities by 1e-7 km/s
        assert!(difference.abs() < 1e-4, "{difference}");
    }
}

#[test]
fn errors_larger_than_values_widen_rates_or_are_refused_for_that_source_alone() {
    let folder = simulated(3, &[]);
    let table = String::from_utf8(folder.read("s/sample.csv")).unwrap();
    let further = [
        "mass_msun,mass_msun_err,radius_pc,density_slope",
        "400,40,0.3,1.5",
        "400,900,0.3,1.5",
        "400,9000,0.3,1.5",
    ];
    let lines = table
        .lines()
        .zip(further)
        .map(|(line, more)| format!("{line},{more}\n"));
    folder.write("s/sample.csv", lines.collect::<String>().as_bytes());
    let run = folder.inrush(&[
        "rank",
        "s/sample.csv",
        "--out",
        "r",
        "--formal",
        "--no-figures",
    ]);
    assert_eq!(run.code, 1, "{}", run.stderr);
    let ranking = rows(&folder, "r/ranking.csv");
    let of = |id: &str| ranking.iter().find(|row| row["id"] == id).unwrap();
    let width = |id: &str| {
        let end = |suffix| number(of(id), &format!("mass_msun_{suffix}"));
        (end("hi68") / end("lo68")).ln()
    };
    // log-normal: ln of the ends' ratio is twice sqrt(ln(1 + (err/value)^2)), 0.199 and 2.69
    assert!(
        (width("pair-0000001") - 0.199).abs() < 0.03,
        "{}",
        width("pair-0000001")
    );
    assert!(
        (width("pair-0000002") - 2.69).abs() < 0.3,
        "{}",
        width("pair-0000002")
    );
    let refused = of("pair-0000003");
    assert!(
        refused["rank"].is_empty() && refused["why"].contains("error of 9000"),
        "{}",
        refused["why"]
    );
}

#[test]
fn several_line_pairs_of_a_source_are_combined_and_their_agreement_is_told() {
    let folder = simulated(3, &[]);
    simulate(
        &folder,
        "t",
        3,
        &["--thick-line", "HCO+ 3-2", "--thin-line", "H13CO+ 3-2"],
    );
    let other = String::from_utf8(folder.read("t/sample.csv")).unwrap();
    let mut table = String::from_utf8(folder.read("s/sample.csv")).unwrap();
    for line in other.lines().skip(1) {
        table.push_str(&line.replace("spectra/", "../t/spectra/"));
        table.push('\n');
    }
    folder.write("s/both.csv", table.as_bytes());
    // with formal errors too, since draws of two pairs must not go together there either
    for (out, formal) in [("r", None), ("f", Some("--formal"))] {
        let mut command = vec!["rank", "s/both.csv", "--out", out, "--no-figures"];
        command.extend(formal);
        let run = folder.inrush(&command);
        assert_eq!(run.code, 0, "{}", run.stderr);
        let ranking = rows(&folder, &format!("{out}/ranking.csv"));
        let pairs = rows(&folder, &format!("{out}/pairs.csv"));
        assert_eq!((ranking.len(), pairs.len()), (3, 6));
        let mut combined = 0;
        for row in &ranking {
            assert_eq!(row["line_pairs"], "2");
            let own: Vec<&Cells> = pairs
                .iter()
                .filter(|pair| pair["id"] == row["id"])
                .collect();
            if own.iter().any(|pair| pair["v_in_km_s"].is_empty()) {
                continue;
            }
            combined += 1;
            assert_eq!(row["v_in_model"], "several line pairs");
            let err = number(row, "v_in_km_s_err");
            let apart = number(row, "pair_disagreement");
            let errs = own.iter().map(|pair| number(pair, "v_in_km_s_err"));
            let together = errs.map(|err| err.powi(-2)).sum::<f64>().powf(-0.5);
            // 400 draws: a standard deviation to 4 %
            let expected = together * apart.max(1.0);
            assert!((err / expected - 1.0).abs() < 0.2, "{err} {expected}");
            assert!(row["why"].contains("2 line pairs"), "{}", row["why"]);
            let speeds: Vec<f64> = own.iter().map(|pair| number(pair, "v_in_km_s")).collect();
            let (low, high) = (speeds[0].min(speeds[1]), speeds[0].max(speeds[1]));
            assert!((low..=high).contains(&number(row, "v_in_km_s")));
        }
        assert!(combined >= 2);
        assert!(run.stdout.contains("HCO+ 3-2 / H13CO+ 3-2"));
    }
}

#[test]
fn tables_that_are_none_are_refused_with_their_line() {
    let folder = Folder::new();
    let good = "id,thick_file,thin_file,thick_line,thin_line";
    let row = "a,x.csv,y.csv,HCO+ 1-0,H13CO+ 1-0";
    for (text, found, hint) in [
        (String::new(), "t.csv:1: an empty table", "id,thick_file"),
        (
            format!("# nothing\n{good}\n"),
            "t.csv:2: no row below the column names",
            "",
        ),
        (
            format!("id,thick_file,thin_file,thick_lin,thin_line\n{row}\n"),
            "no column `thick_line`",
            "did you mean `thick_line` by `thick_lin`?",
        ),
        (
            format!("{good}\n{row}\nb,x.csv,y.csv,HCO+ 1-0,H13CO+ 1-0\n{row}\n"),
            "t.csv:4: `a` with HCO+ 1-0 / H13CO+ 1-0 as in line 2",
            "name the sources apart",
        ),
        (
            // the same lines by other names
            format!("{good}\n{row}\na,x.csv,y.csv,hco+(1-0),H13CO+ 1-0\n"),
            "as in line 2",
            "name the sources apart",
        ),
        (
            format!("{good},distance_pc\n{row},2100\n"),
            "the column `distance_pc`, expected `distance_kpc`",
            "give it in kpc",
        ),
        (
            format!("{good},mass_kg\n{row},1e33\n"),
            "the column `mass_kg`, expected `mass_msun`",
            "give it in Msun",
        ),
        (
            format!("{good},mass_msum\n{row},10\n"),
            "the column `mass_msum`, expected `mass_msun`",
            "did you mean `mass_msun`?",
        ),
        (
            format!("{good},mass_msun,mass_msun\n{row},1,1\n"),
            "the column `mass_msun` twice",
            "rename",
        ),
        (
            format!("{good},mass_msun_err\n{row},1\n"),
            "`mass_msun_err` without `mass_msun`",
            "",
        ),
        (
            format!("{good},mass_msun,mass_msun_err\n{row},,1\n"),
            "an error of `mass_msun` without its value",
            "",
        ),
        (
            format!("{good},distance_kpc\n{row},2.1 kpc\n"),
            "`2.1 kpc` in column `distance_kpc`, expected a number",
            "leave the cell empty",
        ),
        (
            format!("{good},mass_msun\n{row}\n"),
            "t.csv:2: 5 cells, expected 6",
            "quote",
        ),
        (
            format!("{good}\na,,y.csv,HCO+ 1-0,H13CO+ 1-0\n"),
            "nothing in column `thick_file`",
            "",
        ),
        (
            format!("{good},mass_msun\n{row},10\na,x.csv,y.csv,HCO+ 3-2,H13CO+ 3-2,20\n"),
            "t.csv:3: other properties of `a` than in line 2",
            "the same group and properties",
        ),
    ] {
        folder.write("t.csv", text.as_bytes());
        let run = folder.inrush(&["rank", "t.csv", "--out", "r"]);
        refused(&run, found, hint);
        assert!(!folder.path().join("r").exists(), "{text}");
    }
    let run = folder.inrush(&["rank", "nothing.csv", "--out", "r"]);
    refused(&run, "nothing.csv", "check the path");
    folder.write("t.csv", format!("{good}\n{row}\n").as_bytes());
    let run = folder.inrush(&["rank", "t.csv", "--out", "r", "--top", "0"]);
    refused(&run, "top: 0, expected at least 1", "");
}

#[test]
fn columns_that_serve_nothing_are_named() {
    let folder = simulated(2, &[]);
    with_properties(&folder, "observer_note", "cloudy");
    let run = folder.inrush(&[
        "rank",
        "s/sample.csv",
        "--out",
        "r",
        "--formal",
        "--no-figures",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert!(
        run.stderr.contains("nothing is done with: observer_note"),
        "{}",
        run.stderr
    );
}

#[test]
fn what_results_rest_on_follows_from_their_columns() {
    let folder = simulated(2, &[]);
    let run = folder.inrush(&[
        "rank",
        "s/sample.csv",
        "--out",
        "r",
        "--formal",
        "--no-figures",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let cited = folder.inrush(&["cite", "r"]);
    assert_eq!(cited.code, 0, "{}", cited.stderr);
    for expected in [
        "Mardones1997",
        "DeVries2005",
        "Wilson1927",
        "doi = {10.1086/427141}",
        "@software{Inrush",
    ] {
        assert!(cited.stdout.contains(expected), "{expected}");
    }
    // no mass, no posterior
    assert!(!cited.stdout.contains("Bertoldi1992") && !cited.stdout.contains("Cornuet2012"));
    let chosen = folder.inrush(&["cite", "--for", "mass_to_flux", "--bibtex"]);
    assert!(chosen.stdout.contains("Nakano1978") && !chosen.stdout.contains("citep"));
    refused(
        &folder.inrush(&["cite", "s"]),
        "s: no table of results",
        "--out of a run",
    );
    refused(
        &folder.inrush(&["cite", "--for", "mass_to_flix"]),
        "`mass_to_flix`",
        "did you mean `mass_to_flux`?",
    );
}
