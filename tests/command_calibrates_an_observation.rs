//! `inrush calibrate`: injections of a pair's own model with its own noise.
#![allow(clippy::unwrap_used)]

mod command;

use command::{Folder, Pair, number, object};
use serde_json::{Map, Value};

/// A pair at a peak signal-to-noise ratio of about 25.
fn noisy() -> Folder {
    Pair {
        noise_k: (0.2, 0.06),
        ..Pair::default()
    }
    .folder()
}

fn calibrate(folder: &Folder, arguments: &[&str]) -> Map<String, Value> {
    let mut all = vec!["calibrate"];
    all.extend(&command::PAIR[1..]);
    all.extend(arguments);
    all.push("--json");
    let run = folder.inrush(&all);
    assert_eq!(run.code, 0, "{}", run.stderr);
    object(&run.stdout)
}

#[test]
fn formal_fits_of_the_right_model_are_unbiased_and_their_errors_hold() {
    let results = calibrate(
        &noisy(),
        &["--formal", "--models", "hill", "--pairs", "200"],
    );
    assert_eq!(results["errors"], "formal");
    assert_eq!(results["model"], "hill");
    let truth = number(&results, "true_v_in_km_s");
    assert!((truth - 0.45).abs() < 0.1, "{truth}");
    let scatter = number(&results, "scatter_km_s");
    // four standard errors; a bias of the order of the scatter squared over the speed is real
    let bias = number(&results, "bias_km_s").abs();
    let allowed = 4.0 * number(&results, "bias_km_s_err") + scatter * scatter / truth;
    assert!(bias < allowed, "{bias} {allowed}");
    // a linear model's errors are right: 68.3 +- 3.3 % and 95.4 +- 1.5 % of 200, three standard errors
    let held = number(&results, "in68");
    assert!((held - 0.683).abs() < 0.1, "{held}");
    assert!(number(&results, "in95") > 0.95 - 0.05);
    assert!((number(&results, "stated_km_s") / scatter - 1.0).abs() < 0.3);
    assert!(number(&results, "found") > 0.9);
    assert!(number(&results, "false_alarms") < 0.05);
    assert!(number(&results, "rest_bias_km_s").abs() < 0.1);
    // half of them are found at a lower ratio than nine in ten, and both in less time than this
    let half = number(&results, "needed_signal_to_noise_half");
    let most = number(&results, "needed_signal_to_noise_nine_in_ten");
    let own = number(&results, "signal_to_noise");
    assert!(half < most && most < own, "{half} {most} {own}");
    let factor = number(&results, "needed_time_factor_half");
    assert!((factor - (half / own).powi(2)).abs() < 1e-12, "{factor}");
}

#[test]
fn posteriors_are_calibrated_with_the_same_bytes_for_any_number_of_threads() {
    let folder = noisy();
    let run = |threads: &str, directory: &str| {
        let mut all = vec!["calibrate"];
        all.extend(&command::PAIR[1..]);
        all.extend([
            "--models",
            "hill",
            "--pairs",
            "20",
            "--posterior-draws",
            "100",
        ]);
        all.extend(["--seed", "3", "--threads", threads, "--out", directory]);
        let run = folder.inrush(&all);
        assert_eq!(run.code, 0, "{}", run.stderr);
        assert!(
            run.stderr.contains("wrote calibration.csv"),
            "{}",
            run.stderr
        );
        run.stdout
    };
    let text = run("1", "one");
    assert_eq!(run("2", "two"), text);
    for words in [
        "the hill model with this observation's noise, posteriors",
        "\nThe same at rest\n",
        "  false alarms ",
        "  to find nine pairs in ten ",
        " of this integration time",
    ] {
        assert!(text.contains(words), "no `{words}` in\n{text}");
    }
    let files = [
        "calibration.csv",
        "calibration.ecsv",
        "calibration.fits",
        "calibration.pdf",
        "calibration.png",
        "calibration.svg",
        "injections.csv",
        "injections.ecsv",
        "injections.fits",
        "run.toml",
    ];
    for file in files {
        let (one, two) = (
            folder.read(&format!("one/{file}")),
            folder.read(&format!("two/{file}")),
        );
        assert!(one == two, "{file} depends on the number of threads");
    }
    // a row a noise level, and a row an injection: 2 x 20 and 2 x 10 at seven other levels
    let rows = |name: &str| {
        let text = String::from_utf8(folder.read(name)).unwrap();
        text.lines().count() - 1
    };
    assert_eq!(rows("one/calibration.csv"), 8);
    assert_eq!(rows("one/injections.csv"), 2 * 20 + 7 * 2 * 10);
}

#[test]
fn what_cannot_be_calibrated_is_refused() {
    let folder = noisy();
    for (options, message) in [
        (&["--pairs", "3"][..], "pairs: 3, expected 20 to 100000"),
        (
            &["--models", "gaussian"],
            "fit.models: no model with an inward speed that describes the pair, expected one to inject",
        ),
        (
            &["--posterior-draws", "1"],
            "fit.posterior_draws: 1, expected 100 to 100000",
        ),
    ] {
        let mut all = vec!["calibrate"];
        all.extend(&command::PAIR[1..]);
        all.extend(options);
        let run = folder.inrush(&all);
        assert_eq!(run.code, 2, "{options:?}: {}", run.stderr);
        assert!(run.stderr.contains(message), "{options:?}: {}", run.stderr);
        assert!(run.stderr.contains("hint: "), "{}", run.stderr);
    }
}
