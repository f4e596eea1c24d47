//! What `inrush fit` says of motion: posterior, probabilities, limits, and the priors they rest on.
#![allow(clippy::unwrap_used)]

mod command;

use command::{Folder, Pair, number};
use inrush::model::Model;
use serde_json::{Map, Value};

fn codes(results: &Map<String, Value>) -> Vec<&str> {
    results["cautions"]
        .as_str()
        .unwrap_or_default()
        .split(';')
        .collect()
}

const PROBABILITIES: [&str; 4] = ["p_infall", "p_expansion", "p_static", "p_two_clouds"];
const ENDS: [&str; 5] = ["_lo95", "_lo68", "", "_hi68", "_hi95"];

/// Infall on the hill's own profile is infall of a sphere too; slabs' results stay as they are.
#[test]
fn the_speed_of_a_sphere_that_fits_is_adopted() {
    let folder = Folder::with_pair();
    let without = folder.fit_json(&[]);
    let results = folder.fit_json(&["--sphere"]);
    let ends = ENDS.map(|end| number(&results, &format!("sphere_v_in_km_s{end}")));
    assert!(ends.is_sorted(), "{ends:?}");
    assert!(ends[0] > 0.0, "{ends:?}");
    assert!(["constant", "free fall"].contains(&results["sphere_law"].as_str().unwrap()));
    assert!(number(&results, "sphere_chi2_red") < 2.0);
    assert_eq!(results["v_in_model"], "sphere");
    for end in ENDS {
        let (adopted, own) = (format!("v_in_km_s{end}"), format!("sphere_v_in_km_s{end}"));
        assert_eq!(results[&adopted], results[&own], "{adopted}");
    }
    for name in ["p_infall", "hill_v_in_km_s", "hill_share", "hill_tau"] {
        assert_eq!(results[name], without[name], "{name}");
    }
    assert!(results["v_in_systematic_km_s"].is_null());
    assert!(without["sphere_v_in_km_s"].is_null());
    // what the sphere knows nothing of leaves the slabs' speed
    let given = folder.fit_json(&["--sphere", "--prior", "tau=2,0.5"]);
    assert_ne!(given["v_in_model"], "sphere");
    assert_eq!(given["sphere_v_in_km_s"], results["sphere_v_in_km_s"]);
    assert!(codes(&given).contains(&"sphere-unheard"), "{given:?}");
    let both = folder.fit(&["--sphere", "--formal"]);
    assert_eq!(both.code, 2, "{}", both.stderr);
}

#[test]
fn infall_is_found_with_intervals_and_said_in_sentences() {
    let folder = Folder::with_pair();
    let results = folder.fit_json(&[]);
    let probabilities = PROBABILITIES.map(|name| number(&results, name));
    let sum: f64 = probabilities.iter().sum();
    assert!((sum - 1.0).abs() < 1e-12, "{probabilities:?}");
    assert!(probabilities[0] > 0.9, "{probabilities:?}");
    let ends = ENDS.map(|end| number(&results, &format!("v_in_km_s{end}")));
    assert!(ends.is_sorted(), "{ends:?}");
    assert!(ends[0] < 0.45 && 0.45 < ends[4], "{ends:?}");
    assert_eq!(results["v_in_errors"], "posterior");
    assert!(results["v_in_limit_km_s"].is_null());
    let shares = ["two_layer_share", "hill_share"].map(|name| number(&results, name));
    assert!((shares[0] + shares[1] - 1.0).abs() < 1e-12, "{shares:?}");
    for model in ["two_layer", "hill"] {
        let ends = ["_lo95", "_lo68", "_hi68", "_hi95"]
            .map(|end| number(&results, &format!("{model}_v_in_km_s{end}")));
        assert!(ends.is_sorted(), "{model} {ends:?}");
    }
    let verdict = results["verdict"].as_str().unwrap();
    assert!(verdict.starts_with("Most probable: infall"), "{verdict}");
    assert!(verdict.contains("The data exclude expansion"), "{verdict}");
    for unseen in ["rotation or an outflow", "a cold cloud in front"] {
        assert!(verdict.contains(unseen), "{verdict}");
    }
    assert!(
        !verdict.contains(','),
        "tables are cut at commas: {verdict}"
    );
    let words = folder.fit(&[]).stdout;
    for sentence in [
        "  - Most probable: infall",
        "  - One position cannot exclude rotation or an outflow",
    ] {
        assert!(words.contains(sentence), "{words}");
    }
}

#[test]
fn formal_stops_after_least_squares() {
    let folder = Folder::with_pair();
    let results = folder.fit_json(&["--formal"]);
    for name in PROBABILITIES.iter().chain(&[
        "verdict",
        "v_in_km_s_lo68",
        "hill_v_in_km_s_lo68",
        "hill_share",
        "v_in_systematic_km_s",
        "v_in_limit_km_s",
    ]) {
        assert!(results[*name].is_null(), "{name} is {}", results[*name]);
    }
    assert_eq!(results["v_in_errors"], "formal");
    assert_eq!(results["v_in_km_s"], results["hill_v_in_km_s"]);
    assert_eq!(results["v_in_km_s_err"], results["hill_v_in_km_s_err"]);
    let posterior = folder.fit_json(&[]);
    assert_eq!(posterior["hill_v_in_km_s"], results["hill_v_in_km_s"]);
    folder.write(
        "formal.toml",
        b"[thick]\nline = \"HCO+ 1-0\"\nfile = \"thick.csv\"\n\n[thin]\nline = \"H13CO+ 1-0\"\nfile = \"thin.csv\"\n\n[fit]\nformal = true\n",
    );
    let by_sheet = folder.inrush(&["fit", "formal.toml", "--json"]);
    assert_eq!(command::object(&by_sheet.stdout), results);
}

#[test]
fn the_seed_decides_the_draws() {
    let folder = Folder::with_pair();
    let one = folder.fit_json(&["--seed", "4"]);
    assert_eq!(folder.fit_json(&["--seed", "4", "--threads", "3"]), one);
    let other = folder.fit_json(&["--seed", "5"]);
    assert_ne!(other["v_in_km_s"], one["v_in_km_s"]);
    assert_eq!(other["hill_v_in_km_s"], one["hill_v_in_km_s"]);
    // 500 effective draws: the medians of two seeds differ by about 1.25 sqrt(2/500) deviations
    let difference = number(&one, "v_in_km_s") - number(&other, "v_in_km_s");
    assert!(
        difference.abs() < 0.4 * number(&one, "v_in_km_s_err"),
        "{difference}"
    );
}

#[test]
fn a_clump_at_rest_gets_a_limit_and_a_rate_about_zero() {
    let pair = Pair {
        thick: vec![7.35, 0.62, 0.0, 4.0, 16.0],
        ..Pair::default()
    };
    let source = [
        "--radius-pc",
        "0.3",
        "--mass-msun",
        "350",
        "--density-slope",
        "1.6",
    ];
    let results = pair.folder().fit_json(&source);
    let limit = number(&results, "v_in_limit_km_s");
    let [low, _, _, _, high] = ENDS.map(|end| number(&results, &format!("v_in_km_s{end}")));
    assert!(low < 0.0 && 0.0 < high, "{low} {high}");
    assert!(limit > 0.0 && limit < 0.3, "{limit}");
    assert!(
        codes(&results).contains(&"speed-limit"),
        "{:?}",
        codes(&results)
    );
    assert!(number(&results, "p_infall") < 0.9);
    let rate = ENDS.map(|end| number(&results, &format!("mass_rate_msun_yr{end}")));
    assert!(
        rate[0] < 0.0 && 0.0 < rate[4] && rate.is_sorted(),
        "{rate:?}"
    );
    assert!(codes(&results).contains(&"rate-holds-zero"));
}

#[test]
fn without_a_line_there_is_no_speed_but_a_statement() {
    let no_thick = Pair {
        thick: vec![7.35, 0.62, 0.45, 4.0, 2.73],
        ..Pair::default()
    };
    let neither = Pair {
        thin: vec![7.35, 0.62, 0.118, 2.73],
        ..no_thick.clone()
    };
    for (pair, window, empty) in [
        (no_thick, &[][..], &[][..]),
        (
            neither,
            &["--window-km-s", "5,10"],
            &["v_lsr_km_s", "sigma_km_s"],
        ),
    ] {
        let results = pair
            .folder()
            .fit_json(&[window, &["--radius-pc", "0.3"]].concat());
        for name in ["v_in_km_s", "v_in_km_s_lo68", "v_in_km_s_err"]
            .iter()
            .chain(empty)
        {
            assert!(results[*name].is_null(), "{name} is {}", results[*name]);
        }
        let codes = codes(&results);
        assert!(codes.contains(&"thick-undetected"), "{codes:?}");
        let stated = codes.contains(&"speed-unconstrained") || codes.contains(&"speed-limit");
        assert!(stated, "{codes:?}");
        let verdict = results["verdict"].as_str().unwrap();
        assert!(
            verdict.starts_with("The thick line is not detected"),
            "{verdict}"
        );
        for name in PROBABILITIES {
            assert!(number(&results, name) < 0.9, "{name} {}", results[name]);
        }
        if codes.contains(&"speed-unconstrained") {
            let missing = results["missing_inputs"].as_str().unwrap();
            assert!(missing.contains("an inward speed"), "{missing}");
        }
    }
}

#[test]
fn two_clouds_do_not_pass_as_infall() {
    let pair = Pair {
        thick_model: Model::TwoGaussians,
        thick: vec![6.6, 0.5, 5.0, 8.2, 0.5, 3.0],
        thin_model: Model::TwoGaussians,
        thin: vec![6.6, 0.5, 0.8, 8.2, 0.5, 0.6],
        ..Pair::default()
    };
    let results = pair.folder().fit_json(&[]);
    assert!(number(&results, "p_two_clouds") > 0.9);
    assert!(codes(&results).contains(&"two-clouds-favoured"));
    assert!(
        results["verdict"]
            .as_str()
            .unwrap()
            .starts_with("Most probable: two clouds")
    );
}

#[test]
fn settings_that_posteriors_do_not_know_leave_the_formal_speed() {
    let folder = Folder::with_pair();
    let results = folder.fit_json(&["--free-thin-sigma"]);
    assert_eq!(results["v_in_errors"], "formal");
    assert_eq!(results["v_in_km_s"], results["hill_v_in_km_s"]);
    assert!(results["v_in_km_s_lo68"].is_null());
    assert!(number(&results, "p_infall") > 0.9);
    assert!(codes(&results).contains(&"settings-unheard"));
    let words = folder
        .fit(&[
            "--free-thin-velocity",
            "--given",
            "tau=3",
            "--given",
            "peak_thin_k=0.7",
            "--bounds",
            "v_in_km_s=0,2",
        ])
        .stdout;
    let words = words.split_whitespace().collect::<Vec<_>>().join(" ");
    assert!(
        words.contains("knows nothing of free_thin_velocity, given peak_thin_k:"),
        "{words}"
    );
    let none = folder.fit_json(&["--models", "gaussian"]);
    assert!(none["p_infall"].is_null());
    assert!(codes(&none).contains(&"no-posterior"));
}

#[test]
fn given_values_and_bounds_reach_the_posterior() {
    let folder = Folder::with_pair();
    let free = folder.fit_json(&[]);
    let ends = |results: &Map<String, Value>| {
        ["_lo95", "_hi95"].map(|end| number(results, &format!("v_in_km_s{end}")))
    };
    let adopted = |options: &[&str]| {
        let results = folder.fit_json(options);
        assert_eq!(results["v_in_errors"], "posterior", "{options:?}");
        let codes = codes(&results);
        assert!(
            !codes.contains(&"settings-unheard"),
            "{options:?} {codes:?}"
        );
        results
    };
    let held = adopted(&["--given", "tau=2"]);
    assert_ne!(held["v_in_km_s"], free["v_in_km_s"]);
    let speed = adopted(&["--given", "v_in_km_s=0.3"]);
    let [low, high] = ends(&speed);
    // held: every draw is the value, up to the rounding of its scaling by the dispersion
    assert!(
        (low - 0.3).abs() < 1e-9 && (high - 0.3).abs() < 1e-9,
        "{low} {high}"
    );
    assert_eq!(number(&speed, "p_expansion"), 0.0);
    // held at rest: motion of neither sign has a part of the prior
    let rest = adopted(&["--given", "v_in_km_s=0"]);
    for name in ["p_infall", "p_expansion"] {
        assert_eq!(number(&rest, name), 0.0, "{name}");
    }
    let bounded = adopted(&["--bounds", "v_in_km_s=0.1,0.4"]);
    let [low, high] = ends(&bounded);
    // bounds hold up to the rounding of that scaling
    assert!(low >= 0.1 - 1e-9 && high <= 0.4 + 1e-9, "{low} {high}");
    let pulled = adopted(&["--given", "sigma_km_s=0.9,0.02"]);
    assert!(number(&pulled, "sigma_km_s") > number(&free, "sigma_km_s"));
    let linked = adopted(&["--isotope-ratio", "20,2"]);
    assert_ne!(linked["p_two_clouds"], free["p_two_clouds"]);
}

#[test]
fn an_error_of_the_efficiency_widens_temperatures_and_leaves_the_speed() {
    let folder = Folder::with_pair();
    let text = String::from_utf8(folder.read("thin.csv")).unwrap();
    folder.write("antenna.csv", text.replace("tmb_k", "ta_k").as_bytes());
    let sheet = |eta_mb: &str, file: &str| {
        format!(
            "[source]\nthin_t_ex_k = 11.0\n\n[thick]\nline = \"HCO+ 1-0\"\nfile = \"thick.csv\"\n\n[thin]\nline = \"H13CO+ 1-0\"\nfile = \"{file}\"\neta_mb = {eta_mb}\n"
        )
    };
    for (name, eta_mb, file) in [
        ("certain.toml", "0.8", "antenna.csv"),
        ("uncertain.toml", "[0.8, 0.16]", "antenna.csv"),
        ("unused.toml", "[0.8, 0.16]", "thin.csv"),
        ("none.toml", "0.8", "thin.csv"),
    ] {
        folder.write(name, sheet(eta_mb, file).as_bytes());
    }
    let fit = |arguments: &[&str]| {
        let run = folder.inrush(&[&["fit"], arguments, &["--json"]].concat());
        assert_eq!(run.code, 0, "{}", run.stderr);
        command::object(&run.stdout)
    };
    let certain = fit(&["certain.toml"]);
    let uncertain = fit(&["uncertain.toml"]);
    for name in ["v_in_km_s", "v_in_km_s_lo95", "sigma_km_s", "p_infall"] {
        assert_eq!(certain[name], uncertain[name], "{name}");
    }
    let width = |results: &Map<String, Value>| {
        let [low, high] =
            ["_lo68", "_hi68"].map(|end| number(results, &format!("column_thin_cm2{end}")));
        (high / low).ln()
    };
    // a fifth either way adds 0.4 in quadrature; of 2000 draws the ends scatter by a few per cent
    let expected = width(&certain).hypot(0.4);
    let relative = width(&uncertain) / expected;
    assert!(
        (relative - 1.0).abs() < 0.15,
        "{} {} {expected}",
        width(&certain),
        width(&uncertain)
    );
    let by_option = fit(&["certain.toml", "--thin-eta-mb", "0.8,0.16"]);
    assert_eq!(by_option, uncertain);
    // main-beam temperatures are not divided by the efficiency: its error is not theirs
    assert_eq!(fit(&["unused.toml"]), fit(&["none.toml"]));
    let run = folder.inrush(&[
        "fit",
        "uncertain.toml",
        "--no-figures",
        "--quiet",
        "--out",
        "out",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let resolved = String::from_utf8(folder.read("out/run.toml")).unwrap();
    assert!(resolved.contains("eta_mb = [0.8, 0.16]"), "{resolved}");
    for (eta_mb, message) in [
        ("0.8,-0.1", "eta_mb = 0.8 with error -0.1"),
        ("0.8,0.9", "eta_mb = 0.8 with error 0.9"),
    ] {
        let run = folder.inrush(&["fit", "certain.toml", "--thin-eta-mb", eta_mb]);
        assert_eq!(run.code, 2, "{}", run.stderr);
        assert!(run.stderr.contains(message), "{}", run.stderr);
        assert!(
            run.stderr
                .contains("expected an error of at least 0 and below the value"),
            "{}",
            run.stderr
        );
    }
}

#[test]
fn replaced_priors_pull_and_are_recorded() {
    let folder = Folder::with_pair();
    let wide = folder.fit_json(&[]);
    let narrow = folder.fit_json(&["--prior", "v_in_over_sigma=0.2"]);
    let speed = |results| number(results, "v_in_km_s");
    assert!(
        speed(&narrow) < speed(&wide),
        "{} {}",
        speed(&narrow),
        speed(&wide)
    );
    assert!(speed(&narrow) > 0.3);
    let still = folder.fit_json(&["--odds", "static=1e12", "--odds", "two_clouds=0"]);
    assert_eq!(number(&still, "p_two_clouds"), 0.0);
    assert!(number(&still, "p_static") > number(&wide, "p_static"));
    let run = folder.fit(&[
        "--prior",
        "tau=3,0.9",
        "--odds",
        "static=2",
        "--posterior-draws",
        "700",
        "--no-figures",
        "--out",
        "first",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    let sheet = String::from_utf8(folder.read("first/run.toml")).unwrap();
    let table = sheet.parse::<toml::Table>().unwrap();
    assert_eq!(table["priors"]["tau"][0].as_float(), Some(3.0));
    assert_eq!(table["priors"].as_table().unwrap().len(), 10);
    assert_eq!(table["odds"]["static"].as_float(), Some(2.0));
    assert_eq!(table["fit"]["posterior_draws"].as_integer(), Some(700));
    let again = folder.inrush(&["fit", "first/run.toml", "--out", "second"]);
    assert_eq!(again.code, 0, "{}", again.stderr);
    for file in ["pair.csv", "pair.ecsv", "run.toml"] {
        assert!(
            folder.read(&format!("first/{file}")) == folder.read(&format!("second/{file}")),
            "{file}"
        );
    }
}

#[test]
fn settings_that_cannot_be_are_refused_with_what_to_do() {
    let folder = Folder::with_pair();
    for (options, message, hint) in [
        (
            &["--prior", "v_in_over_sigmas=1"][..],
            "priors: `v_in_over_sigmas`, expected one of sigma_km_s, v_in_over_sigma, ",
            "did you mean `v_in_over_sigma`?",
        ),
        (
            &["--prior", "tau=4"],
            "priors.tau: [4.0], expected median and deviation in ln",
            "the kind of density is part of the method",
        ),
        (
            &["--prior", "tau=-4,1"],
            "priors.tau: prior of tau: log-normal, median -4, deviation 1 in ln, expected positive numbers",
            "leave it out for the default",
        ),
        (
            &["--prior", "tau=0.01,0.1"],
            "prior of tau: all but a millionth of its mass from 0.006 to 0.016, expected some where the data are",
            "widen the prior of tau",
        ),
        (
            &["--prior", "peak_thin_k=0.001"],
            "prior of peak_thin_k: all but a millionth of its mass from 0.000 to 0.014",
            "widen the prior of peak_thin_k",
        ),
        (
            &["--prior", "tau=3,0.5", "--given", "tau=3"],
            "priors.tau: a prior beside tau as given, expected one of the two",
            "a given value stands in the place of the prior",
        ),
        (
            &["--odds", "rest=3"],
            "odds: `rest`, expected one of infall, expansion, static, two_clouds",
            "",
        ),
        (
            &["--odds", "infall=-1"],
            "odds: prior odds of infall -1, expansion 1, static 1, two_clouds 1, expected four numbers of at least 0, not all 0",
            "leave the odds out",
        ),
        (
            &["--posterior-draws", "0"],
            "fit.posterior_draws: 0, expected 100 to 100000",
            "leave it out for the default",
        ),
        (
            &["--draws", "0"],
            "0 draws, expected 100 to 1000000",
            "leave the number out for the default, 2000",
        ),
        (
            &["--posterior-draws", "-3"],
            "invalid value '-3' for '--posterior-draws <N>'",
            "",
        ),
        (
            &["--isotope-ratio", "-68"],
            "fit.isotope_ratio: -68 +- 0, expected thick over thin, at least 1",
            "such as 68 for 12C/13C",
        ),
    ] {
        let run = folder.fit(options);
        assert_eq!(run.code, 2, "{options:?}: {}", run.stderr);
        assert!(run.stdout.is_empty(), "{options:?}");
        assert!(run.stderr.contains(message), "{options:?}: {}", run.stderr);
        assert!(run.stderr.contains(hint), "{options:?}: {}", run.stderr);
    }
    // the nearest name is named for a run sheet too, with the sheet
    folder.write(
        "pair.toml",
        b"[thick]\nline = \"HCO+ 1-0\"\nfile = \"thick.csv\"\n\n[thin]\nline = \"H13CO+ 1-0\"\nfile = \"thin.csv\"\n\n[priors]\nthin_width = [1.0, 0.1]\n",
    );
    let run = folder.inrush(&["fit", "pair.toml"]);
    assert_eq!(run.code, 2);
    assert!(
        run.stderr.contains("pair.toml: priors: `thin_width`"),
        "{}",
        run.stderr
    );
    assert!(
        run.stderr.contains("did you mean `thin_width_ratio`?"),
        "{}",
        run.stderr
    );
}

/// Nothing of the band is left outside the fitted range, and neighbours are correlated.
#[test]
fn correlated_noise_in_a_narrow_band_is_judged() {
    let pair = Pair {
        first_km_s: 2.0,
        channels: 108,
        ..Pair::default()
    };
    let (thick, thin) = pair.temperature_k();
    let smooth = |values: &[f64]| -> Vec<f64> {
        let around = |i: usize, by: usize| values[(i + by).clamp(1, values.len()) - 1];
        (0..values.len())
            .map(|i| 0.25 * around(i, 0) + 0.5 * values[i] + 0.25 * around(i, 2))
            .collect()
    };
    let folder = Folder::new();
    for (name, values) in [("thick.csv", &thick), ("thin.csv", &thin)] {
        let text = command::csv(&pair.velocity_km_s(), &smooth(values));
        folder.write(name, text.as_bytes());
    }
    let results = folder.fit_json(&["--range-km-s", "0,15"]);
    assert!(
        codes(&results).contains(&"correlated-noise"),
        "{:?}",
        codes(&results)
    );
    assert!(number(&results, "p_infall") > 0.9);
}
