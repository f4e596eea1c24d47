//! `inrush map` on the demonstration and on input that makes no map.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

mod command;

use command::Folder;
use std::path::Path;

/// A folder with a copy of the demonstration's map, but for most of its pointings.
fn demo(rows: usize) -> Folder {
    let folder = Folder::new();
    let from = Path::new(env!("CARGO_MANIFEST_DIR")).join("demo-spectra/lantern7-map");
    let read = |name: &str| std::fs::read(from.join(name)).unwrap();
    for name in [
        "map.toml",
        "cubes.toml",
        "thick-cube.fits",
        "thin-cube.fits",
    ] {
        folder.write(name, &read(name));
    }
    let table = String::from_utf8(read("grid.csv")).unwrap();
    let kept: Vec<&str> = table.lines().take(1 + rows).collect();
    for file in kept[1..].iter().flat_map(|row| row.split(',').skip(3)) {
        folder.write(file, &read(file));
    }
    folder.write("grid.csv", (kept.join("\n") + "\n").as_bytes());
    folder
}

#[test]
fn a_table_becomes_products_and_a_summary() {
    let folder = demo(45);
    let run = folder.inrush(&["map", "map.toml", "--out", "out", "--formal"]);
    assert!(
        run.stdout
            .starts_with("Lantern 7: HCO+ 1-0 (thick) and H13CO+ 1-0 (thin)\n")
            && run
                .stdout
                .contains("\nMotions\n  - The core of the thick line is "),
        "{}",
        run.stdout
    );
    assert!(
        run.stderr.contains(" of 45 pointings fitted; "),
        "{}",
        run.stderr
    );
    let files = folder.files();
    for name in [
        "out/pointings.csv",
        "out/pointings.ecsv",
        "out/pointings.fits",
        "out/motions.csv",
        "out/motions.ecsv",
        "out/motions.fits",
        "out/figures/radius.png",
        "out/figures/asymmetry_even.png",
        "out/figures/delta_v_odd.svg",
        "out/maps/v_in_km_s.fits",
        "out/maps/v_in_km_s_err.fits",
        "out/maps/cautions.fits",
        "out/figures/hill_v_in_km_s.svg",
        "out/figures/hill_v_in_km_s.png",
        "out/figures/hill_v_in_km_s.pdf",
        "out/figures/spectra.pdf",
        "out/run.toml",
        "out/record.toml",
    ] {
        assert!(files.iter().any(|file| file == name), "{name}: {files:?}");
    }
    assert!(files.iter().all(|file| !file.contains("unfinished")));
    let svg = String::from_utf8(folder.read("out/figures/v_thin_km_s.svg")).unwrap();
    assert!(
        svg.contains("Lantern 7, 17:30:00.0") && svg.contains(" pc\n"),
        "{svg}"
    );
    // Done is done.
    let again = folder.inrush(&["map", "map.toml", "--out", "out", "--formal", "--resume"]);
    assert_eq!(again.code, run.code);
    assert!(
        again.stderr.contains("nothing is left to do"),
        "{}",
        again.stderr
    );
    // The run sheet beside the products repeats the run.
    let sheet = folder.inrush(&["map", "out/run.toml", "--out", "again", "--no-figures"]);
    assert_eq!(sheet.code, run.code, "{}", sheet.stderr);
    for table in ["pointings.csv", "motions.csv"] {
        assert!(folder.read(&format!("out/{table}")) == folder.read(&format!("again/{table}")));
    }
}

#[test]
fn a_map_that_cannot_be_read_for_motions_says_so() {
    // Three pointings, and a table without a beam.
    let folder = demo(3);
    let run = |sheet: &str, out: &str| {
        let run = folder.inrush(&["map", sheet, "--out", out, "--formal", "--no-figures"]);
        assert_eq!(run.code, 0, "{}", run.stderr);
        // sentences are wrapped
        run.stdout.split_whitespace().collect::<Vec<_>>().join(" ")
    };
    let few = run("map.toml", "few");
    assert!(
        few.contains("not read: ") && few.contains("expected at least"),
        "{few}"
    );
    assert!(
        few.contains("infall is neither shown nor excluded"),
        "{few}"
    );
    let sheet = String::from_utf8(folder.read("map.toml")).unwrap();
    folder.write(
        "bare.toml",
        sheet.replace("beam_arcsec = 24.0", "").as_bytes(),
    );
    let bare = run("bare.toml", "bare");
    assert!(
        bare.contains("no beam is known; give beam_arcsec"),
        "{bare}"
    );
    // Nothing but noise: every pointing is below the threshold.
    let faint = sheet + "threshold_sigma = 1000.0\n";
    folder.write("faint.toml", faint.as_bytes());
    let faint = run("faint.toml", "faint");
    assert!(
        faint.contains("not read for motions: no significant brightness in 0 readings"),
        "{faint}"
    );
}

#[test]
fn pages_are_drawn_where_they_are_asked_for() {
    let folder = demo(12);
    let run = folder.inrush(&[
        "map", "map.toml", "--out", "out", "--formal", "--pages", "--quiet",
    ]);
    assert!(run.code <= 1 && run.stderr.is_empty(), "{}", run.stderr);
    let files = folder.files();
    assert!(
        files
            .iter()
            .any(|file| file.starts_with("out/pages/p00") && file.contains(".pdf"))
    );
}

#[test]
fn cubes_become_the_same_kind_of_products() {
    let folder = demo(0);
    let run = folder.inrush(&[
        "map",
        "cubes.toml",
        "--out",
        "out",
        "--formal",
        "--no-figures",
    ]);
    assert_eq!(run.code, 0, "{}", run.stderr);
    // One pointing is blank: outside of the coverage.
    assert!(
        run.stderr.contains("of 81 pointings fitted"),
        "{}",
        run.stderr
    );
    assert!(
        run.stderr
            .contains(", 1 outside of the coverage, 0 unusable"),
        "{}",
        run.stderr
    );
}

#[test]
fn what_makes_no_map_is_told() {
    let folder = demo(1);
    for (sheet, message) in [
        (
            "[thick]\nline = \"HCO+ 1-0\"\n[thin]\nline = \"H13CO+ 1-0\"\n",
            "error: sheet.toml: no file of the thick line",
        ),
        (
            "[thick]\nline = \"HCO+ 1-0\"\nfile = \"thick-cube.fits\"\n[thin]\nline = \"H13CO+ 1-0\"\nfile = \"map.toml\"\n",
            "error: map.toml: starts with `# A 9 x ",
        ),
        (
            "[grid]\ncenter_deg = [1, 2]\n",
            "error: sheet.toml:2: the key `center_deg`, expected one of",
        ),
        (
            "[thick]\nline = \"HCO+ 1-0\"\nfile = \"thick-cube.fits\"\n[thin]\nline = \"H13CO+ 1-0\"\nfile = \"thin-cube.fits\"\n[grid]\ncentre_deg = [1, 200]\n",
            "error: sheet.toml: grid.centre_deg: [1, 200], expected right ascension",
        ),
    ] {
        folder.write("sheet.toml", sheet.as_bytes());
        let run = folder.inrush(&["map", "sheet.toml", "--out", "out"]);
        assert_eq!(run.code, 2);
        assert!(run.stderr.starts_with(message), "{}\n{message}", run.stderr);
        assert!(run.stderr.contains("\nhint: "), "{}", run.stderr);
        assert!(folder.files().iter().all(|file| !file.starts_with("out/")));
    }
    let run = folder.inrush(&["map", "map.toml"]);
    assert_eq!(run.code, 2);
}
