//! What `inrush fit` says of a source whose distance, size, mass and so on are given.
#![allow(clippy::unwrap_used)]

mod command;

use command::{Folder, number, object};

const SHEET: &str = "\
[source]
name = \"clump\"
distance_kpc = [1.9, 0.2]
radius_pc = [0.3, 0.03]
mass_msun = [350, 90]
density_slope = 1.6
t_kin_k = [18, 2]

[thick]
line = \"HCO+ 1-0\"
file = \"thick.csv\"

[thin]
line = \"H13CO+ 1-0\"
file = \"thin.csv\"
";

const OPTIONS: &[&str] = &[
    "--name",
    "clump",
    "--distance-kpc",
    "1.9,0.2",
    "--radius-pc",
    "0.3,0.03",
    "--mass-msun",
    "350,90",
    "--density-slope",
    "1.6",
    "--t-kin-k",
    "18,2",
];

#[test]
fn options_and_run_sheet_say_the_same() {
    let folder = Folder::with_pair();
    folder.write("pair.toml", SHEET.as_bytes());
    let by_sheet = folder.inrush(&["fit", "pair.toml", "--json"]);
    assert_eq!(by_sheet.code, 0, "{}", by_sheet.stderr);
    let by_options = folder.fit_json(OPTIONS);
    assert_eq!(object(&by_sheet.stdout), by_options);
    // plain arithmetic: (3 - 1.6) 350 Msun v_in/0.3 pc, 1 km/s = 1.0227121650e-6 pc/yr
    let v_in = number(&by_options, "v_in_km_s");
    let expected = 1.4 * 350.0 * v_in / 0.3 * 1.022_712_165e-6;
    let rate = number(&by_options, "mass_rate_msun_yr");
    assert!((rate / expected - 1.0).abs() < 1e-9, "{rate} {expected}");
    let ends = ["_lo95", "_lo68", "", "_hi68", "_hi95"]
        .map(|end| number(&by_options, &format!("mass_rate_msun_yr{end}")));
    assert!(ends.is_sorted(), "{ends:?}");
    assert_eq!(by_options["mass_rate_from"], "(3 - p) M v_in/R");
    // an option stands above the sheet
    let exact = folder.inrush(&["fit", "pair.toml", "--json", "--mass-msun", "700"]);
    let doubled = number(&object(&exact.stdout), "mass_rate_msun_yr");
    assert!((doubled / rate - 2.0).abs() < 1e-12);
}

#[test]
fn a_written_run_sheet_repeats_the_intervals_for_any_number_of_threads() {
    let folder = Folder::with_pair();
    folder.write("pair.toml", SHEET.as_bytes());
    let all = ["--no-figures", "--seed", "3", "--draws", "500", "--out"];
    let run = |sheet: &str, threads: &str, directory: &str, options: &[&str]| {
        let mut arguments = vec!["fit", sheet, "--threads", threads];
        arguments.extend(options);
        arguments.push(directory);
        let run = folder.inrush(&arguments);
        assert_eq!(run.code, 0, "{}", run.stderr);
    };
    run("pair.toml", "1", "first", &all);
    run("first/run.toml", "2", "second", &["--out"]);
    let table = |directory: &str| folder.read(&format!("{directory}/pair.ecsv"));
    assert_eq!(table("first"), table("second"));
    assert_eq!(
        folder.read("first/run.toml"),
        folder.read("second/run.toml")
    );
    run(
        "pair.toml",
        "1",
        "other",
        &["--no-figures", "--seed", "4", "--draws", "500", "--out"],
    );
    assert_ne!(table("first"), table("other"));
}

#[test]
fn what_is_not_given_is_asked_for_and_nothing_is_assumed() {
    let folder = Folder::with_pair();
    let bare = folder.fit_json(&[]);
    for column in [
        "mass_rate_msun_yr",
        "mass_msun",
        "v_ff_km_s",
        "mach_number",
        "mass_from",
    ] {
        assert!(bare[column].is_null(), "{column}");
    }
    let missing = bare["missing_inputs"].as_str().unwrap();
    assert!(
        missing.starts_with("radius_pc + mass_msun + density_slope"),
        "{missing}"
    );
    let size = folder.fit(&["--radius-pc", "0.3", "--mass-msun", "350"]);
    assert!(size.stdout.contains("free-fall speed"), "{}", size.stdout);
    let (_, not_derived) = size.stdout.split_once("\nNot derived\n").unwrap();
    assert!(
        not_derived.contains("- density_slope would fill mass_rate_msun_yr + doubling_time_yr\n"),
        "{not_derived}"
    );
}

#[test]
fn odd_properties_are_cautioned_in_tables_and_words() {
    let folder = Folder::with_pair();
    let odd = ["--distance-kpc", "45", "--angle-dispersion-deg", "40"];
    let cautions = folder.fit_json(&odd)["cautions"]
        .as_str()
        .unwrap()
        .to_owned();
    for code in ["odd-input", "wide-field-angles"] {
        assert!(cautions.split(';').any(|one| one == code), "{cautions}");
    }
    let words = folder.fit(&odd).stdout;
    assert!(
        words.contains("distance_kpc of 45 kpc lies outside"),
        "{words}"
    );
}
