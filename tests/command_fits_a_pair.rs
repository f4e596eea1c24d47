//! `inrush fit`: what it prints, what it writes, and that options do what they say.

mod command;

use command::{Folder, Pair, csv, number, object};
use inrush::model::Model;
use serde_json::Value;
use std::io::Write;

const PRODUCTS: [&str; 7] = [
    "pair.csv",
    "pair.ecsv",
    "pair.fits",
    "pair.pdf",
    "pair.png",
    "pair.svg",
    "run.toml",
];

const SHEET: &str = "[source]\nname = \"Lantern 7\"\n\n[thick]\nline = \"HCO+ 1-0\"\nfile = \"thick.csv\"\n\n[thin]\nline = \"H13CO+ 1-0\"\nfile = \"thin.csv\"\n";

/// Whether a value lies within some errors of the truth.
fn agrees(results: &serde_json::Map<String, Value>, name: &str, truth: f64, errors: f64) {
    let value = number(results, name);
    let err = number(results, &format!("{name}_err"));
    assert!(
        (value - truth).abs() < errors * err,
        "{name}: {value} +- {err}, truth {truth}"
    );
}

fn cautions(results: &serde_json::Map<String, Value>) -> Vec<String> {
    let codes = results["cautions"].as_str().unwrap_or_default();
    codes
        .split(';')
        .filter(|code| !code.is_empty())
        .map(str::to_owned)
        .collect()
}

/// The truth is that of docs/demo-scenario.md; the noise is this test's.
#[test]
fn the_truth_of_a_simulated_pair_comes_back() {
    let results = Folder::with_pair().fit_json(&[]);
    assert_eq!(results["profile"], "blue");
    assert_eq!(results["v_in_model"], "hill");
    agrees(&results, "v_in_km_s", 0.45, 3.0);
    agrees(&results, "hill_v_in_km_s", 0.45, 3.0);
    agrees(&results, "hill_tau", 4.0, 3.0);
    agrees(&results, "hill_t_peak_k", 16.0, 3.0);
    agrees(&results, "v_lsr_km_s", 7.35, 3.0);
    agrees(&results, "sigma_km_s", 0.62, 3.0);
    agrees(&results, "v_thin_km_s", 7.35, 3.0);
    assert!((number(&results, "noise_thick_k") / 0.06 - 1.0).abs() < 0.1);
    assert!((number(&results, "noise_thin_k") / 0.03 - 1.0).abs() < 0.1);
    // the dip lies where the front half is, as it must in infall
    assert!(
        !cautions(&results).contains(&"dip-off-thin".to_owned()),
        "{:?}",
        results["cautions"]
    );
}

#[test]
fn the_table_names_source_lines_results_and_cautions() {
    let folder = Folder::with_pair();
    folder.write("pair.toml", SHEET.as_bytes());
    let run = folder.inrush(&["fit", "pair.toml"]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let mut lines = run.stdout.lines();
    assert_eq!(
        lines.next(),
        Some("Lantern 7: HCO+ 1-0 (thick) and H13CO+ 1-0 (thin)")
    );
    let results = folder.fit_json(&[]);
    let row = |label: &str| {
        run.stdout
            .lines()
            .find_map(|line| line.trim_start().strip_prefix(label))
            .unwrap_or_else(|| panic!("no `{label}` in\n{}", run.stdout))
            .trim()
            .to_owned()
    };
    assert_eq!(row("profile"), "blue");
    assert_eq!(row("adopted from"), "hill");
    // rounded to the interval, with the unit behind
    let speed = row("adopted inward speed");
    let (value, rest) = speed.split_once(" -").unwrap();
    let (below, rest) = rest.split_once(" +").unwrap();
    let (_, unit) = rest.split_once(' ').unwrap();
    assert_eq!(unit, "km/s");
    let decimals = |text: &str| text.split_once('.').unwrap().1.len();
    assert_eq!(decimals(value), decimals(below), "{speed}");
    let half_step = 0.5 * 10f64.powi(-i32::try_from(decimals(value)).unwrap());
    let full = number(&results, "v_in_km_s");
    assert!(
        (value.parse::<f64>().unwrap() - full).abs() <= half_step * 1.000_001,
        "{speed} of {full}"
    );
    for heading in ["Hill model", "Two-layer model", "Cautions"] {
        assert!(
            run.stdout.contains(heading),
            "no `{heading}` in\n{}",
            run.stdout
        );
    }
    assert!(
        run.stdout.lines().all(|line| line.chars().count() <= 80),
        "{}",
        run.stdout
    );
}

#[test]
fn json_is_one_object_with_the_columns_of_the_manual() {
    let run = Folder::with_pair().fit(&["--json"]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let results = object(&run.stdout);
    let manual = std::fs::read_to_string("docs/outputs.md").unwrap();
    let columns: Vec<&str> = manual
        .lines()
        .skip_while(|line| !line.starts_with("<!-- columns"))
        .filter_map(|line| line.strip_prefix("| `"))
        .map(|line| line.split_once('`').unwrap().0)
        .collect();
    assert!(columns.len() > 50);
    assert_eq!(results.keys().collect::<Vec<_>>(), columns);
    assert!(run.stdout.ends_with("}\n"));
}

#[test]
fn out_gets_every_product_and_stdout_the_table() {
    let folder = Folder::with_pair();
    let plain = folder.fit(&[]);
    let run = folder.fit(&["--out", "a/new/folder"]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert_eq!(run.stdout, plain.stdout);
    let mut expected: Vec<String> = PRODUCTS
        .iter()
        .map(|name| format!("a/new/folder/{name}"))
        .collect();
    expected.extend(["thick.csv".to_owned(), "thin.csv".to_owned()]);
    assert_eq!(folder.files(), expected);
    let begins = |name: &str, start: &[u8]| {
        let bytes = folder.read(&format!("a/new/folder/{name}"));
        assert!(bytes.starts_with(start), "{name}");
    };
    begins("pair.csv", b"id,dx_arcsec,");
    begins("pair.ecsv", b"# %ECSV 1.0\n");
    begins("pair.fits", b"SIMPLE  =                    T");
    begins("pair.svg", b"<svg");
    begins("pair.png", b"\x89PNG\r\n\x1a\n");
    begins("pair.pdf", b"%PDF-");
    let sheet = String::from_utf8(folder.read("a/new/folder/run.toml")).unwrap();
    assert!(sheet.contains("file = \"../../../thick.csv\""), "{sheet}");
    assert!(
        sheet.contains(concat!("version = \"", env!("CARGO_PKG_VERSION"), "\"")),
        "{sheet}"
    );
}

#[test]
fn the_table_files_hold_the_values_of_json() {
    let folder = Folder::with_pair();
    let json = folder.fit(&["--json", "--out", "results"]).stdout;
    let results = object(&json);
    let text = String::from_utf8(folder.read("results/pair.csv")).unwrap();
    let mut lines = text.lines().map(|line| line.split(','));
    let (names, cells) = (lines.next().unwrap(), lines.next().unwrap());
    let mut compared = 0;
    for (name, cell) in names.zip(cells) {
        match &results[name] {
            Value::Null => assert_eq!(cell, "", "{name}"),
            Value::Number(_) => {
                // as text: the JSON parser is not exact to the last bit
                let (_, rest) = json.split_once(&format!("\"{name}\":")).unwrap();
                let number = rest.trim_start().split([',', '\n', '}']).next().unwrap();
                assert_eq!(cell.parse::<f64>(), number.parse::<f64>(), "{name}");
                compared += 1;
            }
            value => assert_eq!(Some(cell), value.as_str(), "{name}"),
        }
    }
    assert!(compared > 30);
}

#[test]
fn no_figures_leaves_them_out_and_says_so_in_the_sheet() {
    let folder = Folder::with_pair();
    let run = folder.fit(&["--out", "results", "--no-figures"]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert_eq!(
        folder.files(),
        [
            "results/pair.csv",
            "results/pair.ecsv",
            "results/pair.fits",
            "results/run.toml",
            "thick.csv",
            "thin.csv"
        ]
    );
    let sheet = String::from_utf8(folder.read("results/run.toml")).unwrap();
    assert!(sheet.contains("figures = false"), "{sheet}");
}

fn products(folder: &Folder, directory: &str) -> Vec<(&'static str, Vec<u8>)> {
    PRODUCTS
        .iter()
        .map(|name| (*name, folder.read(&format!("{directory}/{name}"))))
        .collect()
}

fn assert_same(one: &[(&str, Vec<u8>)], other: &[(&str, Vec<u8>)], what: &str) {
    for ((name, one), (_, other)) in one.iter().zip(other) {
        assert!(one == other, "{what}: {name} differs");
    }
}

/// A run with as many settings as can be had in one.
const SETTINGS: &[&str] = &[
    "--window-km-s",
    "4,11",
    "--thin-window-km-s",
    "5,10",
    "--baseline-order",
    "2",
    "--models",
    "two-layer,hill,hill-surface",
    "--given",
    "tau=4,1",
    "--bounds",
    "v_in_km_s=-2,2",
    "--isotope-ratio",
    "68,15",
    "--range-km-s",
    "0,15",
    "--name",
    "a \"named\" source",
    "--seed",
    "7",
    "--free-thin-sigma",
    "--thick-rest-freq-ghz",
    "89.1885247,0.0000051",
];

#[test]
fn the_resolved_sheet_gives_the_same_bytes_again() {
    let folder = Folder::with_pair();
    for settings in [&[][..], SETTINGS] {
        let mut arguments = settings.to_vec();
        arguments.extend(["--out", "first"]);
        let run = folder.fit(&arguments);
        assert_eq!(run.code, 0, "{}", run.stderr);
        let first = products(&folder, "first");

        let again = folder.inrush(&["fit", "first/run.toml", "--out", "second"]);
        assert_eq!(again.code, 0, "{}", again.stderr);
        assert_same(&first, &products(&folder, "second"), "another directory");
        assert_eq!(again.stdout, run.stdout);

        // into the directory of the sheet itself, from inside it
        let again = folder.inrush_in("first", &["fit", "run.toml", "--out", "."]);
        assert_eq!(again.code, 0, "{}", again.stderr);
        assert_same(&first, &products(&folder, "first"), "the same directory");
    }
}

#[test]
fn a_sheet_run_again_on_changed_data_says_so() {
    let folder = Folder::with_pair();
    assert_eq!(folder.fit(&["--out", "first", "--no-figures"]).code, 0);
    let other = Pair {
        seed: 21,
        ..Pair::default()
    };
    folder.write("thick.csv", other.csv().0.as_bytes());
    let run = folder.inrush(&["fit", "first/run.toml"]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert!(
        run.stderr
            .contains("thick.csv: not the file of the recorded run"),
        "{}",
        run.stderr
    );
    assert!(
        !run.stderr.contains("thin.csv: not the file"),
        "{}",
        run.stderr
    );
}

#[test]
fn threads_change_no_byte() {
    let folder = Folder::with_pair();
    for threads in ["1", "2", "7"] {
        let run = folder.fit(&["--threads", threads, "--out", threads]);
        assert_eq!(run.code, 0, "{}", run.stderr);
    }
    let one = products(&folder, "1");
    assert_same(&one, &products(&folder, "2"), "2 threads");
    assert_same(&one, &products(&folder, "7"), "7 threads");
}

#[test]
fn quiet_keeps_stderr_empty() {
    let folder = Folder::with_pair();
    let loud = folder.fit(&["--out", "results"]);
    assert!(loud.stderr.contains("note: thick.csv: "), "{}", loud.stderr);
    assert!(
        loud.stderr.contains("note: wrote pair.csv, "),
        "{}",
        loud.stderr
    );
    for quiet in ["--quiet", "-q"] {
        let run = folder.fit(&[quiet, "--out", "results"]);
        assert_eq!((run.code, run.stderr.as_str()), (0, ""));
        assert_eq!(run.stdout, loud.stdout);
    }
}

#[cfg(unix)]
#[test]
fn a_reader_that_closes_stdout_is_no_error() {
    let folder = Folder::with_pair();
    let mut all = command::PAIR.to_vec();
    all.extend(["--out", "results", "--no-figures"]);
    let mut child = std::process::Command::new(env!("CARGO_BIN_EXE_inrush"))
        .args(all)
        .current_dir(folder.path())
        .stdout(std::process::Stdio::piped())
        .stderr(std::process::Stdio::piped())
        .spawn()
        .unwrap();
    drop(child.stdout.take());
    let output = child.wait_with_output().unwrap();
    let stderr = String::from_utf8(output.stderr).unwrap();
    assert_eq!(output.status.code(), Some(0), "{stderr}");
    assert!(!stderr.contains("error"), "{stderr}");
    assert!(folder.files().contains(&"results/run.toml".to_owned()));
}

#[test]
fn options_stand_above_the_sheet() {
    let folder = Folder::with_pair();
    let sheet = format!(
        "{SHEET}window_km_s = [6.0, 9.0]\n\n[prepare]\nbaseline_order = 3\nwindow_km_s = [0.0, 14.0]\n\n[fit]\nmodels = [\"gaussian\"]\n"
    );
    folder.write("pair.toml", sheet.as_bytes());
    let resolved = |arguments: &[&str]| {
        let mut all = vec!["fit", "pair.toml", "--no-figures", "--out", "results"];
        all.extend(arguments);
        let run = folder.inrush(&all);
        assert_eq!(run.code, 0, "{}", run.stderr);
        let text = String::from_utf8(folder.read("results/run.toml")).unwrap();
        text.parse::<toml::Table>().unwrap()
    };
    let plain = resolved(&[]);
    assert_eq!(plain["thin"]["window_km_s"][0].as_float(), Some(6.0));
    assert_eq!(plain["prepare"]["baseline_order"].as_integer(), Some(3));
    assert_eq!(plain["fit"]["models"][0].as_str(), Some("gaussian"));
    let over = resolved(&[
        "--window-km-s",
        "4,11",
        "--baseline-order",
        "none",
        "--models",
        "hill",
        "--given",
        "tau=3",
        "--bounds",
        "v_in_km_s=0,1",
        "--name",
        "other",
        "--seed",
        "5",
        "--range-km-s",
        "all",
        "--smooth-to-km-s",
        "0.2",
        "--free-thin-velocity",
    ]);
    assert_eq!(over["prepare"]["window_km_s"][0].as_float(), Some(4.0));
    assert!(
        over["thin"].get("window_km_s").is_none(),
        "the option is for both lines"
    );
    assert_eq!(over["prepare"]["baseline_order"].as_str(), Some("none"));
    assert_eq!(over["prepare"]["smooth_to_km_s"].as_float(), Some(0.2));
    assert_eq!(over["fit"]["models"].as_array().map(Vec::len), Some(1));
    assert_eq!(over["fit"]["given"]["tau"].as_float(), Some(3.0));
    assert_eq!(over["fit"]["bounds"]["v_in_km_s"][1].as_float(), Some(1.0));
    assert_eq!(over["fit"]["range_km_s"].as_str(), Some("all"));
    assert_eq!(over["fit"]["free_thin_velocity"].as_bool(), Some(true));
    assert_eq!(over["source"]["name"].as_str(), Some("other"));
    assert_eq!(over["seed"].as_integer(), Some(5));
}

#[test]
fn a_held_parameter_stays_and_has_no_error() {
    let results = Folder::with_pair().fit_json(&["--given", "tau=3"]);
    assert_eq!(number(&results, "hill_tau"), 3.0);
    assert!(results["hill_tau_err"].is_null());
    assert!(number(&results, "hill_v_in_km_s_err") > 0.0);
    // a held value is no parameter at its bound
    let text = Folder::with_pair().fit(&["--given", "tau=3"]).stdout;
    assert!(!text.contains("tau of hill sits at"), "{text}");
}

#[test]
fn a_prior_pulls_by_its_weight() {
    let folder = Folder::with_pair();
    let free = folder.fit_json(&[]);
    let wide = folder.fit_json(&["--given", "tau=3,0.5"]);
    let narrow = folder.fit_json(&["--given", "tau=3,0.01"]);
    let tau = |results| number(results, "hill_tau");
    assert!(
        tau(&narrow) < tau(&wide) && tau(&wide) < tau(&free),
        "{} {} {}",
        tau(&narrow),
        tau(&wide),
        tau(&free)
    );
    assert!(number(&wide, "hill_tau_err") < number(&free, "hill_tau_err"));
    // the free error is far below the wide prior's: it hardly moves
    assert!((tau(&wide) - tau(&free)).abs() < number(&free, "hill_tau_err"));
}

#[test]
fn bounds_hold_and_a_parameter_on_them_is_said() {
    let results =
        Folder::with_pair().fit_json(&["--bounds", "v_in_km_s=-0.3,0.3", "--models", "hill"]);
    assert_eq!(number(&results, "hill_v_in_km_s"), 0.3);
    assert!(results["hill_v_in_km_s_err"].is_null());
    assert!(cautions(&results).contains(&"parameter-at-bound".to_owned()));
}

#[test]
fn the_isotope_ratio_links_the_optical_depths() {
    let folder = Folder::with_pair();
    // 2 x 4.0 over 0.118 is 67.8: the pair was made with this ratio
    let linked = folder.fit_json(&["--isotope-ratio", "68", "--models", "hill"]);
    agrees(&linked, "hill_tau", 4.0, 3.0);
    let wrong = folder.fit_json(&["--isotope-ratio", "50,10", "--models", "hill"]);
    assert!(number(&wrong, "hill_tau") > 2.0 && number(&wrong, "hill_tau_err") > 0.0);
}

#[test]
fn a_freed_thin_line_leaves_sigma_to_the_thick_line() {
    let pair = Pair {
        thin: vec![7.35, 0.40, 0.118, 11.0],
        ..Pair::default()
    };
    let folder = pair.folder();
    let shared = folder.fit_json(&["--models", "hill"]);
    let freed = folder.fit_json(&["--models", "hill", "--free-thin-sigma"]);
    agrees(&freed, "sigma_km_s", 0.62, 3.0);
    assert!(number(&shared, "hill_chi2_red") > number(&freed, "hill_chi2_red") + 0.2);
    let shifted = Pair {
        thin: vec![7.75, 0.62, 0.118, 11.0],
        ..Pair::default()
    };
    let freed = shifted
        .folder()
        .fit_json(&["--models", "hill", "--free-thin-velocity"]);
    agrees(&freed, "v_lsr_km_s", 7.35, 3.0);
    agrees(&freed, "v_thin_km_s", 7.75, 3.0);
}

#[test]
fn range_and_smoothing_are_used() {
    let folder = Folder::with_pair();
    let all = folder.fit_json(&["--range-km-s", "all", "--models", "hill"]);
    agrees(&all, "v_in_km_s", 0.45, 3.0);
    let smooth = folder.fit_json(&["--smooth-to-km-s", "0.3", "--models", "hill"]);
    agrees(&smooth, "v_in_km_s", 0.45, 3.0);
    // three channels of white noise in one: smaller by the root of three
    let ratio = number(&folder.fit_json(&[]), "noise_thick_k") / number(&smooth, "noise_thick_k");
    assert!((ratio / 3f64.sqrt() - 1.0).abs() < 0.15, "{ratio}");
    let none = folder.fit_json(&["--baseline-order", "none", "--models", "hill"]);
    agrees(&none, "v_in_km_s", 0.45, 3.0);
}

#[test]
fn a_line_of_the_users_own_needs_a_rest_frequency_only() {
    let folder = Folder::with_pair();
    let built_in = folder.fit_json(&["--models", "hill"]);
    let own = folder.inrush(&[
        "fit",
        "--thick",
        "thick.csv",
        "--thin",
        "thin.csv",
        "--thick-line",
        "my line",
        "--thick-rest-freq-ghz",
        "89.1885247,0.00001",
        "--thin-line",
        "H13CO+ 1-0",
        "--models",
        "hill",
        "--json",
    ]);
    assert_eq!(own.code, 0, "{}", own.stderr);
    let own = object(&own.stdout);
    assert_eq!(own["thick_line"], "my line");
    for name in ["v_in_km_s", "v_lsr_km_s", "hill_tau"] {
        assert_eq!(own[name], built_in[name], "{name}");
    }
    // 10 kHz are 0.034 km/s at 89.19 GHz; with the thin line's, over the thin line's width
    assert!(number(&own, "delta_v_systematic") > number(&built_in, "delta_v_systematic"));
}

#[test]
fn a_thin_multiplet_gives_its_velocity() {
    let pair = Pair {
        thin_line: "N2H+ 1-0",
        thin: vec![7.35, 0.3, 2.0, 8.0],
        thick: vec![7.35, 0.3, 0.2, 4.0, 16.0],
        first_km_s: -25.0,
        channels: 601,
        ..Pair::default()
    };
    let folder = pair.folder();
    let run = folder.inrush(&[
        "fit",
        "--thick",
        "thick.csv",
        "--thin",
        "thin.csv",
        "--thick-line",
        "HCO+ 1-0",
        "--thin-line",
        "N2H+ 1-0",
        "--json",
        "--out",
        "results",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let results = object(&run.stdout);
    agrees(&results, "v_in_km_s", 0.2, 3.0);
    agrees(&results, "v_thin_km_s", 7.35, 3.0);
    agrees(&results, "sigma_km_s", 0.3, 3.0);
    assert_eq!(results["profile"], "blue");
    assert!(
        !cautions(&results).contains(&"thin-two-peaked".to_owned()),
        "satellites are no second cloud"
    );
}

#[test]
fn a_thick_multiplet_is_fitted_with_its_components() {
    let pair = Pair {
        thick_line: "HCN 1-0",
        thin_line: "H13CN 1-0",
        thick: vec![7.35, 0.5, 0.3, 6.0, 14.0],
        thin: vec![7.35, 0.5, 0.18, 10.0],
        first_km_s: -20.0,
        channels: 551,
        noise_k: (0.05, 0.01),
        ..Pair::default()
    };
    let folder = pair.folder();
    let run = folder.inrush(&[
        "fit",
        "--thick",
        "thick.csv",
        "--thin",
        "thin.csv",
        "--thick-line",
        "HCN 1-0",
        "--thin-line",
        "H13CN 1-0",
        "--json",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let results = object(&run.stdout);
    agrees(&results, "v_in_km_s", 0.3, 3.0);
    agrees(&results, "v_lsr_km_s", 7.35, 3.0);
    agrees(&results, "hill_tau", 6.0, 3.0);
    assert!(number(&results, "hill_chi2_red") < 1.3);
}

#[test]
fn an_undetected_thin_line_is_said_and_takes_nothing_along() {
    let pair = Pair {
        thin: vec![7.35, 0.62, 0.001, 3.0],
        ..Pair::default()
    };
    let results = pair.folder().fit_json(&[]);
    assert!(
        cautions(&results).contains(&"thin-undetected".to_owned()),
        "{:?}",
        results["cautions"]
    );
    for name in ["v_thin_km_s", "fwhm_thin_km_s", "delta_v", "asymmetry"] {
        assert!(results[name].is_null(), "{name} is {}", results[name]);
    }
    assert_eq!(results["profile"], "undetected");
    // the thick line alone still has its fit
    agrees(&results, "v_in_km_s", 0.45, 4.0);
}

#[test]
fn blank_channels_are_left_out_not_filled() {
    let pair = Pair::default();
    let velocity = pair.velocity_km_s();
    let (mut thick, thin) = pair.temperature_k();
    for channel in [3, 4, 130, 141, 142, 143, 160, 250] {
        thick[channel] = f64::NAN;
    }
    let folder = Folder::new();
    folder.write("thick.csv", csv(&velocity, &thick).as_bytes());
    folder.write("thin.csv", csv(&velocity, &thin).as_bytes());
    let run = folder.fit(&["--json", "--out", "results"]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert!(
        run.stderr.contains("8 of 291 channels are blank"),
        "{}",
        run.stderr
    );
    let results = object(&run.stdout);
    agrees(&results, "v_in_km_s", 0.45, 3.0);
    let svg = String::from_utf8(folder.read("results/pair.svg")).unwrap();
    assert!(!svg.contains("NaN"), "a figure with NaN coordinates");
}

#[test]
fn a_gzipped_file_gives_the_same_results() {
    let folder = Folder::with_pair();
    let plain = folder.fit_json(&[]);
    let mut packed = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::default());
    packed.write_all(&folder.read("thick.csv")).unwrap();
    folder.write("packed.csv.gz", &packed.finish().unwrap());
    let run = folder.inrush(&[
        "fit",
        "--thick",
        "packed.csv.gz",
        "--thin",
        "thin.csv",
        "--thick-line",
        "HCO+ 1-0",
        "--thin-line",
        "H13CO+ 1-0",
        "--json",
        "--name",
        "thick",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    assert_eq!(object(&run.stdout), plain);
}

#[test]
fn antenna_temperatures_are_divided_by_the_efficiency() {
    let folder = Folder::with_pair();
    let main_beam = folder.fit_json(&[]);
    let pair = Pair::default();
    let (thick, thin) = pair.temperature_k();
    let scaled =
        |values: &[f64], eta: f64| -> Vec<f64> { values.iter().map(|value| value * eta).collect() };
    for (name, values, eta) in [("thick.csv", thick, 0.8), ("thin.csv", thin, 0.5)] {
        let text = csv(&pair.velocity_km_s(), &scaled(&values, eta)).replace("tmb_k", "ta_k");
        folder.write(name, text.as_bytes());
    }
    let results = folder.fit_json(&["--thick-eta-mb", "0.8", "--thin-eta-mb", "0.5"]);
    // the texts hold five decimals
    for (name, tolerance) in [
        ("peak_thick_k", 1e-4),
        ("peak_thin_k", 1e-4),
        ("v_in_km_s", 1e-4),
        ("noise_thin_k", 1e-4),
    ] {
        assert!(
            (number(&results, name) - number(&main_beam, name)).abs() < tolerance,
            "{name}"
        );
    }
}

#[test]
fn a_continuum_source_that_is_given_is_used() {
    let pair = Pair {
        thick_model: Model::TwoLayerContinuum,
        thick: vec![7.35, 0.62, 0.3, 2.0, 6.0, 14.0, 0.2, 60.0],
        ..Pair::default()
    };
    let folder = pair.folder();
    let results = folder.fit_json(&[
        "--models",
        "two-layer-continuum",
        "--given",
        "filling=0.2",
        "--given",
        "t_continuum_k=60",
    ]);
    assert_eq!(results["v_in_model"], "two-layer-continuum");
    agrees(&results, "v_in_km_s", 0.3, 3.0);
    agrees(&results, "two_layer_continuum_t_front_k", 6.0, 3.0);
    agrees(&results, "two_layer_continuum_t_rear_k", 14.0, 3.0);
    assert_eq!(number(&results, "two_layer_continuum_filling"), 0.2);
    // priors widen the errors of what they stand for, and nothing else is lost
    let with_errors = folder.fit_json(&[
        "--models",
        "two-layer-continuum",
        "--given",
        "filling=0.2,0.02",
        "--given",
        "t_continuum_k=60,5",
    ]);
    agrees(&with_errors, "v_in_km_s", 0.3, 3.0);
    assert!(
        number(&with_errors, "two_layer_continuum_t_rear_k_err")
            > number(&results, "two_layer_continuum_t_rear_k_err")
    );
}

/// The correlation of [1/4, 1/2, 1/4] smoothing between neighbours is 2/3.
#[test]
fn correlated_noise_is_said_with_its_size() {
    let pair = Pair::default();
    let smooth = |values: Vec<f64>| -> Vec<f64> {
        let last = values.len() - 1;
        (0..values.len())
            .map(|i| {
                0.25 * values[i.saturating_sub(1)]
                    + 0.5 * values[i]
                    + 0.25 * values[last.min(i + 1)]
            })
            .collect()
    };
    let (thick, thin) = pair.temperature_k();
    let folder = Folder::new();
    folder.write(
        "thick.csv",
        csv(&pair.velocity_km_s(), &smooth(thick)).as_bytes(),
    );
    folder.write(
        "thin.csv",
        csv(&pair.velocity_km_s(), &smooth(thin)).as_bytes(),
    );
    let run = folder.fit(&[]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let text = run.stdout.split_whitespace().collect::<Vec<_>>().join(" ");
    for line in ["thick", "thin"] {
        let begin = format!("{line} line's noise is correlated from channel to channel (");
        let (_, rest) = text.split_once(&begin).unwrap_or_else(|| panic!("{text}"));
        let adjacent: f64 = rest.split_once(' ').unwrap().0.parse().unwrap();
        assert!((adjacent - 2.0 / 3.0).abs() < 0.15, "{line}: {adjacent}");
    }
}

/// The thin line's own fit takes one of the clouds; the searches must not stay there.
#[test]
fn two_clouds_are_found_and_said() {
    let pair = Pair {
        thick_model: Model::TwoGaussians,
        thick: vec![6.0, 0.5, 5.0, 9.0, 0.5, 3.0],
        thin_model: Model::TwoGaussians,
        thin: vec![6.0, 0.5, 0.8, 9.0, 0.5, 0.5],
        ..Pair::default()
    };
    let results = pair.folder().fit_json(&["--models", "two-gaussians,hill"]);
    agrees(&results, "two_gaussians_v_lsr_km_s", 6.0, 3.0);
    agrees(&results, "two_gaussians_v_second_km_s", 9.0, 3.0);
    agrees(&results, "two_gaussians_peak_k", 5.0, 3.0);
    agrees(&results, "two_gaussians_peak_second_k", 3.0, 3.0);
    assert!(number(&results, "two_gaussians_chi2_red") < 1.2);
    let codes = cautions(&results);
    for code in ["thin-two-peaked", "dip-off-thin", "poor-fit"] {
        assert!(
            codes.iter().any(|found| found == code),
            "no {code} in {codes:?}"
        );
    }
    assert_eq!(results["profile"], "neither");
}

/// A hill above the background cannot be in absorption: nothing is adopted from it.
#[test]
fn absorption_is_said_and_no_speed_is_adopted_from_models_without_a_source() {
    let pair = Pair {
        thick_model: Model::TwoLayerContinuum,
        thick: vec![7.35, 0.62, 0.3, 2.0, 6.0, 14.0, 0.6, 100.0],
        ..Pair::default()
    };
    let folder = pair.folder();
    let results = folder.fit_json(&[]);
    assert!(
        cautions(&results).contains(&"thick-absorbed".to_owned()),
        "{:?}",
        results["cautions"]
    );
    assert!(!cautions(&results).contains(&"maybe-swapped".to_owned()));
    assert!(results["v_in_km_s"].is_null(), "{}", results["v_in_km_s"]);
    assert!(results["v_in_model"].is_null());
    let source = folder.fit_json(&[
        "--models",
        "two-layer-continuum",
        "--given",
        "filling=0.6",
        "--given",
        "t_continuum_k=100",
    ]);
    agrees(&source, "v_in_km_s", 0.3, 3.0);
}

#[test]
fn velocities_may_descend_and_lie_anywhere() {
    let folder = Folder::with_pair();
    let ascending = folder.fit(&["--json"]).stdout;
    let pair = Pair::default();
    let reversed = |mut values: Vec<f64>| {
        values.reverse();
        values
    };
    let (thick, thin) = pair.temperature_k();
    let velocity = reversed(pair.velocity_km_s());
    folder.write("thick.csv", csv(&velocity, &reversed(thick)).as_bytes());
    folder.write("thin.csv", csv(&velocity, &reversed(thin)).as_bytes());
    assert_eq!(folder.fit(&["--json"]).stdout, ascending);

    let moved = Pair {
        thick: vec![-200.0, 0.62, 0.45, 4.0, 16.0],
        thin: vec![-200.0, 0.62, 0.118, 11.0],
        first_km_s: -214.35,
        ..Pair::default()
    };
    let results = moved.folder().fit_json(&[]);
    agrees(&results, "v_lsr_km_s", -200.0, 3.0);
    agrees(&results, "v_in_km_s", 0.45, 3.0);
}

#[test]
fn a_very_broad_line_is_fitted_in_its_own_units() {
    let pair = Pair {
        thick: vec![7.0, 20.0, 8.0, 4.0, 16.0],
        thin: vec![7.0, 20.0, 0.118, 11.0],
        first_km_s: -300.0,
        channel_km_s: 1.0,
        channels: 601,
        ..Pair::default()
    };
    let results = pair.folder().fit_json(&[]);
    agrees(&results, "v_in_km_s", 8.0, 3.0);
    agrees(&results, "sigma_km_s", 20.0, 3.0);
    assert_eq!(results["profile"], "blue");
}

#[test]
fn expansion_is_the_mirror_of_infall() {
    let pair = Pair {
        thick: vec![7.35, 0.62, -0.45, 4.0, 16.0],
        ..Pair::default()
    };
    let results = pair.folder().fit_json(&[]);
    assert_eq!(results["profile"], "red");
    agrees(&results, "v_in_km_s", -0.45, 3.0);
}

#[test]
fn a_static_clump_is_neither() {
    let pair = Pair {
        thick: vec![7.35, 0.62, 0.0, 4.0, 16.0],
        ..Pair::default()
    };
    let results = pair.folder().fit_json(&[]);
    assert_eq!(results["profile"], "neither");
    agrees(&results, "v_in_km_s", 0.0, 3.0);
}

#[test]
fn everything_held_is_no_undetermined_fit() {
    let results = Folder::with_pair().fit_json(&[
        "--models",
        "hill",
        "--given",
        "v_lsr_km_s=7.35",
        "--given",
        "sigma_km_s=0.62",
        "--given",
        "tau=4",
        "--given",
        "t_peak_k=16",
        "--given",
        "v_in_km_s=0.45",
        "--given",
        "peak_thin_k=0.875",
    ]);
    assert_eq!(number(&results, "v_in_km_s"), 0.45);
    assert!(
        !cautions(&results).contains(&"parameter-undetermined".to_owned()),
        "{:?}",
        results["cautions"]
    );
}
