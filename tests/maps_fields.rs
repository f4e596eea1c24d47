//! Fields of pointings into maps: cubes, tables of files, FITS tables; threads, stops, weak lines.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

mod cubes;

use cubes::clump::{Clump, rest_hz};
use cubes::{Plan, card, text};
use inrush::run::map::{MapCounts, MapEnd, MapRun, make_map};
use inrush::run::{BatchSettings, RunError, RunSheet, Watch};
use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, Ordering};

/// 9 x 8 pixels of 12 arcsec, 80 channels of 0.1 km/s.
fn plan(thick: bool) -> Plan {
    Plan {
        width: 9,
        height: 8,
        channels: 80,
        pixel_arcsec: 12.0,
        first_km_s: -4.0,
        channel_km_s: 0.1,
        rest_hz: rest_hz(thick),
        beam: Some([27.0, 27.0, 0.0]),
        ..Plan::default()
    }
}

/// Writes both cubes of a clump.
fn write_cubes(folder: &Path, clump: &Clump) {
    for (name, thick, seed) in [("thick.fits", true, 1), ("thin.fits", false, 2)] {
        let plan = plan(thick);
        let seen = clump.seen(&plan, thick, seed);
        plan.write(folder, name, |at, channel| {
            let value = seen(at, channel);
            // The two easternmost columns were not observed.
            if at[0] > 30.0 { f64::NAN } else { value }
        });
    }
}

const SHEET: &str = r#"
[source]
name = "Lantern 7"
distance_kpc = 2.0

[thick]
line = "HCO+ 1-0"
file = "thick.fits"

[thin]
line = "H13CO+ 1-0"
file = "thin.fits"

[fit]
formal = true

[output]
figures = false
"#;

fn run_of(folder: &Path, sheet: &str, out: &str, threads: usize) -> MapRun {
    MapRun {
        sheet: RunSheet::parse(sheet, Path::new("map.toml")).unwrap(),
        base: folder.to_owned(),
        directory: folder.join(out),
        batch: BatchSettings::with_threads(threads),
        resume: false,
        pages: false,
    }
}

fn make(run: &MapRun) -> Result<MapEnd, RunError> {
    let stop = AtomicBool::new(false);
    make_map(
        run,
        Watch {
            stop: &stop,
            progress: &mut |_| {},
        },
    )
}

fn made(run: &MapRun) -> MapCounts {
    match make(run) {
        Ok(MapEnd::Done { counts, .. }) => counts,
        other => panic!("{other:?}"),
    }
}

/// Every file below a folder with its bytes.
fn files(folder: &Path) -> BTreeMap<PathBuf, Vec<u8>> {
    let mut found = BTreeMap::new();
    let mut folders = vec![folder.to_owned()];
    while let Some(next) = folders.pop() {
        for entry in std::fs::read_dir(next).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                folders.push(path);
            } else {
                let name = path.strip_prefix(folder).unwrap().to_owned();
                found.insert(name, std::fs::read(&path).unwrap());
            }
        }
    }
    found
}

/// The rows of a map's CSV, a column name each.
fn rows(folder: &Path) -> Vec<BTreeMap<String, String>> {
    let mut reader = csv::Reader::from_path(folder.join("pointings.csv")).unwrap();
    reader.deserialize().map(Result::unwrap).collect()
}

fn number(row: &BTreeMap<String, String>, name: &str) -> f64 {
    row[name].parse().unwrap_or(f64::NAN)
}

/// Cards and pixels of a map.
fn map(folder: &Path, name: &str) -> (String, Vec<u8>) {
    let bytes = std::fs::read(folder.join("maps").join(name)).unwrap();
    let end = bytes
        .chunks(80)
        .position(|card| card.starts_with(b"END     "))
        .unwrap();
    let header = String::from_utf8(bytes[..80 * end].to_vec()).unwrap();
    let data = bytes[(80 * (end + 1)).next_multiple_of(2880)..].to_vec();
    (header, data)
}

#[test]
fn maps_of_cubes_hold_what_is_in_the_sky() {
    let folder = tempfile::tempdir().unwrap();
    let clump = Clump {
        size_arcsec: 22.0,
        ..Clump::default()
    };
    write_cubes(folder.path(), &clump);
    let counts = made(&run_of(folder.path(), SHEET, "out", 2));
    assert_eq!(
        (counts.pointings, counts.blank, counts.unusable),
        (72, 16, 0)
    );
    assert_eq!(counts.fitted + counts.skipped, 56);
    let out = folder.path().join("out");
    let rows = rows(&out);
    assert_eq!(rows.len(), 56);
    let mut deviations = Vec::new();
    let mut bright = 0;
    let with_v_thin = || rows.iter().filter(|row| !row["v_thin_km_s"].is_empty());
    // A mean over the beam has the velocity of a wider piece of sky.
    for row in with_v_thin().filter(|row| !row["cautions"].contains("-mean")) {
        let truth = clump.velocity_km_s(number(row, "dx_arcsec"));
        let off = (number(row, "v_thin_km_s") - truth) / number(row, "v_thin_km_s_err");
        deviations.push(off);
        if number(row, "peak_thick_k") > 2.0 {
            bright += 1;
            // At this signal-to-noise the hill finds its own speed to a fifth.
            let v_in = number(row, "hill_v_in_km_s");
            assert!((v_in / clump.v_in_km_s - 1.0).abs() < 0.2, "{v_in}");
        }
    }
    assert!(
        bright > 8 && deviations.len() > 20,
        "{bright} {}",
        deviations.len()
    );
    assert!(
        deviations.iter().all(|off| off.abs() < 4.5),
        "{deviations:?}"
    );

    let (header, data) = map(&out, "v_thin_km_s.fits");
    for card in [
        "CTYPE1  = 'RA---TAN'",
        "CTYPE2  = 'DEC--TAN'",
        "CRVAL1  =                210.5",
        "CRPIX1  =                  5.0",
        "BUNIT   = 'km/s    '",
        "BMAJ    =               0.0075",
        "HISTORY program = Inrush",
    ] {
        assert!(header.contains(card), "{card}\n{header}");
    }
    // Pixel by pixel the table's values, blank where there is none.
    let values: Vec<f32> = data
        .as_chunks::<4>()
        .0
        .iter()
        .take(72)
        .map(|bytes| f32::from_be_bytes(*bytes))
        .collect();
    let there = values.iter().filter(|value| value.is_finite()).count();
    assert_eq!(there, with_v_thin().count());
    for row in &rows {
        let (x, y) = row["id"].split_once('-').unwrap();
        let cell = 9 * (y.parse::<usize>().unwrap() - 1) + x.parse::<usize>().unwrap() - 1;
        let ours = number(row, "v_thin_km_s");
        let same = (f64::from(values[cell]) - ours).abs() < 1e-6 || ours.is_nan();
        assert!(same, "{row:?}");
    }

    // The bits of the caution map are the codes of the table.
    let (header, data) = map(&out, "cautions.fits");
    let legend: Vec<String> = (0..63)
        .map_while(|bit| {
            let start = format!("{:<8}= '", format!("BIT{bit}"));
            let at = header.find(&start)? + start.len();
            Some(header[at..].split('\'').next().unwrap().trim().to_owned())
        })
        .collect();
    assert!(
        legend.is_sorted() && legend.contains(&"below-threshold".to_owned()),
        "{legend:?}"
    );
    for row in &rows {
        let (x, y) = row["id"].split_once('-').unwrap();
        let cell = 9 * (y.parse::<usize>().unwrap() - 1) + x.parse::<usize>().unwrap() - 1;
        let bits = u64::from_be_bytes(data[8 * cell..8 * cell + 8].try_into().unwrap());
        let named: Vec<&str> = (legend.iter().enumerate())
            .filter(|(bit, _)| bits >> bit & 1 == 1)
            .map(|(_, code)| code.as_str())
            .collect();
        let mut codes: Vec<&str> = row["cautions"]
            .split(';')
            .filter(|c| !c.is_empty())
            .collect();
        codes.sort_unstable();
        assert_eq!(named, codes);
    }
}

#[test]
fn maps_are_the_same_bytes_for_any_threads_and_after_any_stop() {
    let folder = tempfile::tempdir().unwrap();
    write_cubes(folder.path(), &Clump::default());
    made(&run_of(folder.path(), SHEET, "one", 1));
    let expected = files(&folder.path().join("one"));
    assert!(expected.len() > 20, "{}", expected.len());
    made(&run_of(folder.path(), SHEET, "three", 3));
    assert!(files(&folder.path().join("three")) == expected);

    // Eight blocks in each of two passes.
    for stop_at in [1, 8, 11] {
        let name = format!("stopped-{stop_at}");
        let mut run = run_of(folder.path(), SHEET, &name, 2);
        let stop = AtomicBool::new(false);
        let ended = make_map(
            &run,
            Watch {
                stop: &stop,
                progress: &mut |progress| {
                    stop.fetch_or(progress.done >= stop_at, Ordering::Relaxed);
                },
            },
        );
        assert!(matches!(ended, Ok(MapEnd::Stopped(_))), "{ended:?}");
        // Without being asked to go on, it is left as it is.
        assert!(matches!(make(&run), Err(RunError::Journal(_))));
        run.resume = true;
        made(&run);
        assert!(files(&run.directory) == expected, "{stop_at}");
        assert!(matches!(make(&run), Ok(MapEnd::Before(_))));
    }
}

#[test]
fn motions_of_a_map_are_those_of_its_clump() {
    let folder = tempfile::tempdir().unwrap();
    let clump = Clump {
        size_arcsec: 30.0,
        ..Clump::default()
    };
    write_cubes(folder.path(), &clump);
    let run = run_of(folder.path(), SHEET, "out", 2);
    made(&run);
    let mut reader = csv::Reader::from_path(run.directory.join("motions.csv")).unwrap();
    let table: Vec<BTreeMap<String, String>> = reader.deserialize().map(Result::unwrap).collect();
    let of = |quantity: &str| {
        table
            .iter()
            .find(|row| row["quantity"] == quantity)
            .unwrap()
    };
    // The clump's velocity rises by as much to the east, and not to the north.
    let gradient = clump.velocity_km_s(1.0) - clump.velocity_km_s(0.0);
    let found = of("thin_gradient_km_s_arcsec");
    let off = (number(found, "value") - gradient.abs()) / number(found, "err");
    assert!(off.abs() < 4.0, "{gradient} {found:?}");
    // 2 kpc: 0.009696 pc an arcsec.
    let per_pc = number(of("thin_gradient_km_s_pc"), "value") / number(found, "value");
    assert!((per_pc * 0.009_696_27 - 1.0).abs() < 1e-5, "{per_pc}");
    // Every pixel has noise of its own.
    assert_eq!(number(of("noise_width_arcsec"), "value"), 0.0);
    let verdict = &of("verdict_even")["words"];
    assert!(verdict.contains("blue on all sides"), "{verdict}");
    assert!(of("verdict_odd")["words"].starts_with("The thin line has a gradient"));
    // Headers hold what is read from their map, and the verdict.
    let (header, _) = map(&run.directory, "v_thin_km_s.fits");
    assert!(
        header.contains("HISTORY thin_gradient_km_s_arcsec = "),
        "{header}"
    );
    assert!(
        header.contains("HISTORY verdict_even = The core of"),
        "{header}"
    );
    assert!(!header.contains("HISTORY speed_slope = "), "{header}");
}

#[test]
fn noise_that_goes_together_over_pixels_is_found() {
    use inrush::run::simulate::{GridProducts, GridRun, write_grid};
    use inrush::simulate::grid::GridTruth;
    let folder = tempfile::tempdir().unwrap();
    let truth = GridTruth {
        seed: 4,
        noise_fwhm_arcsec: 20.0,
        ..GridTruth::default()
    };
    let grid = GridRun {
        truth,
        name: "Lantern 7".to_owned(),
        thick_line: "HCO+ 1-0".to_owned(),
        thin_line: "H13CO+ 1-0".to_owned(),
        directory: folder.path().join("sky"),
        products: GridProducts::Cubes,
        threads: BatchSettings::with_threads(2),
    };
    write_grid(&grid).unwrap();
    let sheet = std::fs::read_to_string(grid.directory.join("cubes.toml")).unwrap()
        + "\n[fit]\nformal = true\n[output]\nfigures = false\n";
    let run = run_of(&grid.directory, &sheet, "out", 2);
    made(&run);
    let mut reader = csv::Reader::from_path(run.directory.join("motions.csv")).unwrap();
    let rows: Vec<BTreeMap<String, String>> = reader.deserialize().map(Result::unwrap).collect();
    let width = rows
        .iter()
        .find(|row| row["quantity"] == "noise_width_arcsec")
        .unwrap();
    // Some 48 pairs of some 60 line-free channels tell a correlation to 0.02, the width to a tenth; the
    // wider of both lines' is taken.
    let found = number(width, "value");
    assert!((found / 20.0 - 1.0).abs() < 0.25, "{found}");
}

#[test]
fn cubes_that_make_no_map_are_told() {
    let folder = tempfile::tempdir().unwrap();
    let thick = plan(true);
    thick.write(folder.path(), "thick.fits", |_, _| 1.0);
    let message = |sheet: &str, thin: &Plan, change: &dyn Fn(Vec<u8>) -> Vec<u8>| {
        let path = folder.path().join("thin.fits");
        thin.write(folder.path(), "thin.fits", |_, _| 1.0);
        std::fs::write(&path, change(std::fs::read(&path).unwrap())).unwrap();
        let run = run_of(folder.path(), sheet, "out", 1);
        let error = make(&run).unwrap_err();
        assert!(error.hint().is_some(), "{error}");
        assert!(!run.directory.exists());
        error.to_string()
    };
    let same = |bytes: Vec<u8>| bytes;
    let away = Plan {
        centre_deg: [210.5, -28.0],
        ..plan(false)
    };
    assert!(message(SHEET, &away, &same).contains("have no pixel in common"));
    let bare = Plan {
        beam: None,
        ..plan(false)
    };
    assert!(message(SHEET, &bare, &same).contains("thin.fits: no beam (BMAJ), expected one"));
    // The sheet's name stands above the files'.
    let nameless = SHEET.replace("name = \"Lantern 7\"\n", "");
    let other = Plan {
        object: Some("Lantern 9"),
        ..plan(false)
    };
    Plan {
        object: Some("Lantern 7"),
        ..thick.clone()
    }
    .write(folder.path(), "thick.fits", |_, _| 1.0);
    assert!(message(&nameless, &other, &same).contains("expected one source"));
    let renamed = |from: &'static str, to: &'static str| {
        move |bytes: Vec<u8>| {
            let at = (bytes.windows(from.len())).position(|part| part == from.as_bytes());
            let mut bytes = bytes;
            bytes[at.unwrap()..][..to.len()].copy_from_slice(to.as_bytes());
            bytes
        }
    };
    let found = message(SHEET, &plan(false), &renamed("'VRAD    '", "'TIME    '"));
    assert!(found.contains("TIME (80), expected RA and DEC"), "{found}");
    // A line that is not built in, without its rest frequency.
    let unknown = SHEET.replace("H13CO+ 1-0", "our line");
    let found = message(&unknown, &plan(false), &same);
    assert!(found.starts_with("thin line: "), "{found}");
}

#[test]
fn weak_thin_lines_are_replaced_by_means_and_say_so() {
    let folder = tempfile::tempdir().unwrap();
    let clump = Clump {
        noise_thin_k: 0.25,
        ..Clump::default()
    };
    write_cubes(folder.path(), &clump);
    let counts = made(&run_of(folder.path(), SHEET, "out", 2));
    let rows = rows(&folder.path().join("out"));
    let with = |code: &str| {
        let has = |row: &&BTreeMap<String, String>| row["cautions"].split(';').any(|c| c == code);
        rows.iter().filter(has).collect::<Vec<_>>()
    };
    let (beam, map) = (with("thin-beam-mean"), with("thin-map-mean"));
    assert!(
        !beam.is_empty() && beam.len() + map.len() > 5,
        "{} {}",
        beam.len(),
        map.len()
    );
    assert!(beam.len() + map.len() < counts.fitted);
    for row in beam.iter().chain(&map) {
        assert!(!row["v_thin_km_s"].is_empty(), "{row:?}");
        assert!(number(row, "noise_thin_k") < 0.2);
    }
}

/// A 3 x 3 table of spectra in files; what is wrong comes by `change` (a file's text by its name).
fn write_table(folder: &Path, change: impl Fn(&str, String) -> Option<String>) {
    let clump = Clump::default();
    let mut table = "id,dx_arcsec,dy_arcsec,thick_file,thin_file\n".to_owned();
    for index in 0..9_u32 {
        let at = [
            24.0 - 24.0 * f64::from(index % 3),
            24.0 * f64::from(index / 3) - 24.0,
        ];
        for (which, thick) in [("thick", true), ("thin", false)] {
            let plan = plan(thick);
            let seen = clump.seen(&plan, thick, 10 + u64::from(index));
            let mut csv = "velocity_km_s,tmb_k\n".to_owned();
            for channel in 0..plan.channels {
                let velocity = plan.first_km_s + plan.channel_km_s * channel as f64;
                writeln!(csv, "{velocity:.3},{:.5}", seen(at, channel)).unwrap();
            }
            let name = format!("p{index}-{which}.csv");
            if let Some(csv) = change(&name, csv) {
                std::fs::write(folder.join(name), csv).unwrap();
            }
        }
        writeln!(
            table,
            "p{index},{},{},p{index}-thick.csv,p{index}-thin.csv",
            at[0], at[1]
        )
        .unwrap();
    }
    let table = change("pointings.csv", table).unwrap();
    std::fs::write(folder.join("pointings.csv"), table).unwrap();
}

fn table_sheet() -> String {
    SHEET
        .replace("file = \"thick.fits\"", "beam_arcsec = 27.0")
        .replace("file = \"thin.fits\"", "beam_arcsec = 27.0")
        + "\n[grid]\npointings = \"pointings.csv\"\n"
}

#[test]
fn tables_of_pointings_become_maps_and_a_bad_spectrum_stops_nothing() {
    let folder = tempfile::tempdir().unwrap();
    write_table(folder.path(), |name, content| match name {
        "p2-thin.csv" => None,
        "p5-thick.csv" => Some(content.replace("-2.000,", "-2.000,x")),
        _ => Some(content),
    });
    let run = run_of(folder.path(), &table_sheet(), "out", 2);
    let counts = made(&run);
    assert_eq!(
        (counts.pointings, counts.fitted, counts.unusable),
        (9, 7, 2)
    );
    assert!(
        counts.problems[0].starts_with("p2: "),
        "{:?}",
        counts.problems
    );
    assert!(counts.problems[0].contains("p2-thin.csv: no such file"));
    assert!(
        counts.problems[1].contains("p5-thick.csv:22: `x"),
        "{:?}",
        counts.problems
    );
    let rows = rows(&run.directory);
    assert_eq!(rows.len(), 9);
    assert_eq!(rows[2]["cautions"], "unusable");
    assert!(!rows[4]["hill_v_in_km_s"].is_empty());
    // Offsets alone: the map has an axis of offsets.
    let (header, _) = map(&run.directory, "v_thin_km_s.fits");
    assert!(
        header.contains("CTYPE1  = 'XOFFSET '")
            && header.contains("CRVAL1  =                 24.0")
    );
    // With a centre it lies on the sky.
    let sheet = table_sheet() + "centre_deg = [210.5, -31.25]\n";
    let run = run_of(folder.path(), &sheet, "sky", 2);
    made(&run);
    let (header, _) = map(&run.directory, "v_thin_km_s.fits");
    assert!(
        header.contains("CTYPE1  = 'RA---TAN'")
            && header.contains("CRPIX1  =                  2.0")
    );
    assert!(header.contains("BMAJ    =               0.0075"));
}

#[test]
fn tables_that_contradict_themselves_are_refused() {
    let refused = |change: &dyn Fn(String) -> String| {
        let folder = tempfile::tempdir().unwrap();
        write_table(folder.path(), |name, content| {
            Some(if name == "pointings.csv" {
                change(content)
            } else {
                content
            })
        });
        let run = run_of(folder.path(), &table_sheet(), "out", 1);
        let error = make(&run).unwrap_err();
        assert!(error.hint().is_some());
        assert!(!run.directory.exists());
        let message = error.to_string();
        message.split_once("pointings.csv").unwrap().1.to_owned()
    };
    for (from, to, message) in [
        (
            "p4,0,0,",
            "p4,24,-24,",
            ":6: the position 24, -24 arcsec stands in line 2 already, expected each once",
        ),
        (
            "p4,0,0,",
            "p3,0,0,",
            ":6: the name `p3` stands in line 5 already, expected each once",
        ),
        (
            "p4,0,0,",
            "p4,north,0,",
            ":6: `north` in column `dx_arcsec`, expected a number",
        ),
        ("p4,0,0,", "p4,0,", ":6: 4 fields, expected 5"),
        (
            "dx_arcsec,dy_arcsec",
            "dx,dy",
            ":1: no pointing's column among id, dx, dy, thick_file, thin_file, expected one such as id, dx_arcsec and dy_arcsec (or ra_deg and dec_deg), thick_file and thin_file",
        ),
    ] {
        assert_eq!(refused(&|table| table.replace(from, to)), message);
    }
    assert_eq!(
        refused(&|table| table.lines().next().unwrap().to_owned()),
        ": no rows of data, expected at least two channels"
    );
}

#[test]
fn pointings_of_other_lines_are_unusable_and_named() {
    let folder = tempfile::tempdir().unwrap();
    write_cubes(folder.path(), &Clump::default());
    // The thin line's cube with velocities of the thick line.
    let plan = Plan {
        rest_hz: rest_hz(true),
        ..plan(false)
    };
    plan.write(folder.path(), "thin.fits", |_, channel| {
        (channel as f64).sin()
    });
    let error = make(&run_of(folder.path(), SHEET, "out", 1)).unwrap_err();
    let message = error.to_string();
    assert!(
        message.contains("velocities of a line at 89.188525 GHz (RESTFRQ)"),
        "{message}"
    );

    // One spectrum of another line among a table's.
    let fits = cubes::image(
        &[80],
        &vec![
            text("CTYPE1", "VRAD"),
            text("CUNIT1", "km/s"),
            card("CRVAL1", "-4.0"),
            card("CRPIX1", "1.0"),
            card("CDELT1", "0.1"),
            card("RESTFRQ", rest_hz(true)),
            text("SPECSYS", "LSRK"),
            text("BUNIT", "K"),
        ],
        |index| (index[0] as f64).sin(),
    );
    write_table(folder.path(), |name, content| {
        Some(if name == "pointings.csv" {
            content.replace("p6-thin.csv", "p6-thin.fits")
        } else {
            content
        })
    });
    std::fs::write(folder.path().join("p6-thin.fits"), fits).unwrap();
    let counts = made(&run_of(folder.path(), &table_sheet(), "table", 1));
    assert_eq!((counts.fitted, counts.unusable), (8, 1));
    assert!(counts.problems[0].contains("p6-thin.fits: velocities of a line at 89.188525 GHz"));
}

#[test]
fn folders_of_another_run_are_left_alone() {
    let folder = tempfile::tempdir().unwrap();
    write_cubes(folder.path(), &Clump::default());
    let run = run_of(folder.path(), SHEET, "out", 2);
    std::fs::create_dir(&run.directory).unwrap();
    std::fs::write(run.directory.join("notes.txt"), "mine").unwrap();
    assert!(matches!(make(&run), Err(RunError::Occupied { .. })));
    assert_eq!(files(&run.directory).len(), 1);
    let run = run_of(folder.path(), SHEET, "done", 2);
    made(&run);
    let before = files(&run.directory);
    let other = run_of(folder.path(), &SHEET.replace("2.0", "3.0"), "done", 2);
    let message = make(&other).unwrap_err().to_string();
    assert!(message.contains("other settings"), "{message}");
    assert!(files(&run.directory) == before);
}
