//! Result tables: what is written reads back, and the documentation lists what is written.
#![allow(clippy::unwrap_used)]

use inrush::numeric::Estimate;
use inrush::report::files::write_atomically;
use inrush::report::{
    Column, Kind, ReportError, Row, Schema, Table, TableFiles, Value, columns, summary, write_csv,
    write_ecsv, write_fits, write_json_rows,
};

/// Numbers that lose bits in careless writers.
const AWKWARD: [f64; 10] = [
    0.1 + 0.2,
    1.0 / 3.0,
    -0.0,
    5e-324,
    f64::MAX,
    f64::MIN_POSITIVE,
    1e22,
    123_456_789.123_456_78,
    -2.5e-7,
    9_007_199_254_740_993.0,
];

const AWKWARD_NAMES: [&str; 6] = [
    "plain",
    "comma, \"quoted\"",
    "two\nlines\r\nand a third",
    "#hash first",
    " blanks around ",
    "caf\u{e9} \u{2212}3\u{b0}",
];

fn small_schema() -> Schema {
    let column = |name: &str, unit: Option<&str>, kind| Column {
        name: name.to_owned(),
        unit: unit.map(str::to_owned),
        description: format!("The {name}"),
        kind,
    };
    Schema::new(vec![
        column("name", None, Kind::Text),
        column("speed_km_s", Some("km/s"), Kind::Real),
        column("count", None, Kind::Integer),
    ])
    .unwrap()
}

fn small_table() -> Table {
    let schema = small_schema();
    let mut table = Table::new(schema.clone());
    for (index, number) in AWKWARD.into_iter().enumerate() {
        let mut row = schema.row();
        row.set("name", AWKWARD_NAMES[index % AWKWARD_NAMES.len()])
            .unwrap();
        row.set("speed_km_s", number).unwrap();
        row.set("count", i64::try_from(index).unwrap() - 5).unwrap();
        table.push(row).unwrap();
    }
    table.push(schema.row()).unwrap();
    table
}

fn bytes(write: impl FnOnce(&mut Vec<u8>) -> Result<(), ReportError>) -> Vec<u8> {
    let mut output = Vec::new();
    write(&mut output).unwrap();
    output
}

fn check_csv(records: &[u8], table: &Table) {
    let mut reader = csv::Reader::from_reader(records);
    let names: Vec<_> = table.columns().iter().map(|c| c.name.as_str()).collect();
    assert_eq!(reader.headers().unwrap().iter().collect::<Vec<_>>(), names);
    let records: Vec<_> = reader.records().map(Result::unwrap).collect();
    assert_eq!(records.len(), table.rows().len());
    for (record, row) in records.iter().zip(table.rows()) {
        for (found, expected) in record.iter().zip(row.values()) {
            match expected {
                Value::Text(text) => assert_eq!(found, text),
                Value::Real(number) => {
                    assert_eq!(found.parse::<f64>().unwrap().to_bits(), number.to_bits());
                }
                Value::Integer(number) => assert_eq!(found.parse::<i64>().unwrap(), *number),
                Value::Empty => assert_eq!(found, ""),
            }
        }
    }
}

#[test]
fn csv_reads_back_bit_by_bit() {
    let table = small_table();
    check_csv(&bytes(|output| write_csv(&table, output)), &table);
}

#[test]
fn ecsv_is_a_header_over_the_same_csv() {
    let mut table = small_table();
    table.meta.push(("seed".to_owned(), Value::Integer(7)));
    table
        .meta
        .push(("note: odd".to_owned(), Value::from("a \"b\"\n#c")));
    let ecsv = bytes(|output| write_ecsv(&table, output));
    let csv = bytes(|output| write_csv(&table, output));
    let header = ecsv.strip_suffix(csv.as_slice()).unwrap();
    assert_eq!(
        String::from_utf8(header.to_vec()).unwrap(),
        r#"# %ECSV 1.0
# ---
# delimiter: ','
# datatype:
# - {name: "name", datatype: string, description: "The name"}
# - {name: "speed_km_s", unit: "km/s", datatype: float64, description: "The speed_km_s"}
# - {name: "count", datatype: int64, description: "The count"}
# meta: !!omap
# - {"seed": 7}
# - {"note: odd": "a \"b\"\n#c"}
"#
    );
}

#[test]
fn json_reads_back_with_nulls() {
    let table = small_table();
    let text = bytes(|output| write_json_rows(&table, output));
    let rows: Vec<serde_json::Map<String, serde_json::Value>> =
        serde_json::from_slice(&text).unwrap();
    assert_eq!(rows.len(), table.rows().len());
    for (found, row) in rows.iter().zip(table.rows()) {
        let names: Vec<_> = table.columns().iter().map(|c| &c.name).collect();
        assert_eq!(found.keys().collect::<Vec<_>>(), names);
        match row.get("speed_km_s").unwrap() {
            Value::Real(number) => assert_eq!(found["speed_km_s"], *number),
            _ => assert!(found["speed_km_s"].is_null()),
        }
        assert_eq!(
            found["name"].as_str(),
            row.get("name").unwrap().text(),
            "names"
        );
    }
    let one = inrush::report::json(&table.rows()[0]).unwrap();
    let one: serde_json::Value = serde_json::from_str(&one).unwrap();
    assert_eq!(one["count"], -5);
}

/// Cards of a header that starts at a block, and the byte where its data start.
fn cards(file: &[u8], start: usize) -> (Vec<String>, usize) {
    let mut cards = Vec::new();
    for card in file[start..].chunks(80) {
        cards.push(String::from_utf8(card.to_vec()).unwrap());
        if card.starts_with(b"END ") {
            break;
        }
    }
    let length = (cards.len() * 80).next_multiple_of(2880);
    (cards, start + length)
}

#[test]
fn fits_cells_are_where_the_header_says() {
    let table = small_table();
    let file = bytes(|output| write_fits(&table, output));
    assert_eq!(file.len() % 2880, 0);
    let (_, table_start) = cards(&file, 0);
    let (header, data_start) = cards(&file, table_start);
    let value = |keyword: &str| {
        let card = header
            .iter()
            .find(|card| card.starts_with(&format!("{keyword:<8}= ")));
        card.map(|card| card[10..].trim().trim_matches('\'').trim().to_owned())
    };
    let width: usize = value("NAXIS1").unwrap().parse().unwrap();
    let text_width: usize = value("TFORM1")
        .unwrap()
        .trim_end_matches('A')
        .parse()
        .unwrap();
    assert_eq!(width, text_width + 16);
    assert_eq!(value("NAXIS2").unwrap(), table.rows().len().to_string());
    assert_eq!(value("TFORM2").unwrap(), "D");
    assert_eq!(value("TUNIT2").unwrap(), "km/s");
    assert_eq!(value("TUNIT1"), None);
    assert_eq!(value("TFORM3").unwrap(), "K");
    assert_eq!(value("TNULL3").unwrap(), i64::MIN.to_string());
    assert!(
        header
            .iter()
            .any(|card| card.starts_with("COMMENT Characters other than"))
    );

    for (index, row) in table.rows().iter().enumerate() {
        let cells = &file[data_start + index * width..][..width];
        let name = std::str::from_utf8(&cells[..text_width]).unwrap();
        if let Some(text) = row
            .get("name")
            .unwrap()
            .text()
            .filter(|text| text.is_ascii())
        {
            let escaped = text.replace('\n', "\\u{a}").replace('\r', "\\u{d}");
            assert_eq!(name.trim_end(), escaped.trim_end());
        }
        let real = f64::from_be_bytes(cells[text_width..][..8].try_into().unwrap());
        match row.get("speed_km_s").unwrap() {
            Value::Real(number) => assert_eq!(real.to_bits(), number.to_bits()),
            _ => assert!(real.is_nan()),
        }
        let integer = i64::from_be_bytes(cells[text_width + 8..].try_into().unwrap());
        match row.get("count").unwrap() {
            Value::Integer(number) => assert_eq!(integer, *number),
            _ => assert_eq!(integer, i64::MIN),
        }
    }
}

#[test]
fn empty_tables_have_a_header_and_no_rows() {
    let table = Table::new(small_schema());
    check_csv(&bytes(|output| write_csv(&table, output)), &table);
    let json = bytes(|output| write_json_rows(&table, output));
    assert_eq!(json, b"[]\n");
    let file = bytes(|output| write_fits(&table, output));
    assert_eq!(file.len(), 2 * 2880);
}

#[test]
fn cells_refuse_what_does_not_belong() {
    let mut row = columns::results().row();
    let unknown = row.set("dleta_v", 1.0).unwrap_err();
    assert_eq!(unknown.to_string(), "no result column is named `dleta_v`");
    assert_eq!(
        unknown.hint().unwrap(),
        "the nearest column is `delta_v`".to_owned()
    );
    let kind = row.set("delta_v", "blue").unwrap_err();
    assert_eq!(
        kind.to_string(),
        "column `delta_v` got text, expected a real number"
    );
    let infinite = row.set("delta_v", f64::INFINITY).unwrap_err();
    assert!(infinite.to_string().contains("infinite"));
    row.set("delta_v", f64::NAN).unwrap();
    assert_eq!(*row.get("delta_v").unwrap(), Value::Empty);

    let foreign = Table::new(small_schema()).push(row).unwrap_err();
    assert!(matches!(
        foreign,
        ReportError::ForeignRow { expected: 3, .. }
    ));

    let twice = vec![small_schema().columns()[0].clone(); 2];
    assert!(matches!(
        Schema::new(twice),
        Err(ReportError::RepeatedColumn { .. })
    ));
}

#[test]
fn every_column_of_the_contract_exists_in_its_order() {
    // The result columns that every output promises, in their order.
    let promised = [
        "id",
        "dx_arcsec",
        "dy_arcsec",
        "thick_line",
        "thin_line",
        "noise_thick_k",
        "noise_thin_k",
        "peak_thick_k",
        "peak_thin_k",
        "v_thin_km_s",
        "v_thin_km_s_err",
        "fwhm_thin_km_s",
        "fwhm_thin_km_s_err",
        "v_thick_km_s",
        "v_thick_km_s_err",
        "delta_v",
        "delta_v_err",
        "peak_ratio",
        "peak_ratio_err",
        "asymmetry",
        "asymmetry_err",
        "skewness",
        "skewness_err",
        "profile",
        "v_closed_form_km_s",
        "two_layer_v_in_km_s",
        "two_layer_v_in_km_s_err",
        "two_layer_chi2_red",
        "hill_v_in_km_s",
        "hill_v_in_km_s_err",
        "hill_chi2_red",
        "sphere_v_in_km_s",
        "sphere_v_in_km_s_err",
        "sphere_chi2_red",
        "v_lsr_km_s",
        "v_lsr_km_s_err",
        "sigma_km_s",
        "sigma_km_s_err",
        "v_in_km_s",
        "v_in_km_s_lo68",
        "v_in_km_s_hi68",
        "v_in_km_s_lo95",
        "v_in_km_s_hi95",
        "v_in_model",
        "p_infall",
        "p_expansion",
        "p_static",
        "p_two_clouds",
        "mass_rate_msun_yr",
        "mass_rate_msun_yr_lo68",
        "mass_rate_msun_yr_hi68",
        "mass_rate_msun_yr_lo95",
        "mass_rate_msun_yr_hi95",
        "v_ff_km_s",
        "t_ff_yr",
        "doubling_time_yr",
        "virial_parameter",
        "cautions",
    ];
    let schema = columns::results();
    let mut names = schema.columns().iter().map(|column| column.name.as_str());
    for name in promised {
        assert!(names.any(|found| found == name), "{name}");
    }
}

#[test]
fn documentation_lists_the_columns() {
    const START: &str = "<!-- columns: made from the registry -->\n";
    const END: &str = "<!-- end of columns -->";
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/docs/outputs.md");
    let page = std::fs::read_to_string(path).unwrap();
    let (before, rest) = page.split_once(START).unwrap();
    let (found, after) = rest.split_once(END).unwrap();
    let expected = columns::markdown();
    if std::env::var_os("INRUSH_WRITE_EXPECTED").is_some() {
        std::fs::write(path, format!("{before}{START}{expected}{END}{after}")).unwrap();
        return;
    }
    assert_eq!(
        found, expected,
        "docs/outputs.md is not what the registry says; run \
         `INRUSH_WRITE_EXPECTED=1 cargo test --test writes_tables` to write it anew"
    );
}

fn pair() -> Row {
    let estimate = |value, err| Some(Estimate { value, err });
    let mut row = columns::results().row();
    row.set("id", "invented clump").unwrap();
    row.set("thick_line", "HCO+ 1-0").unwrap();
    row.set("thin_line", "H13CO+ 1-0").unwrap();
    row.set("noise_thick_k", 0.0512).unwrap();
    row.set_estimate("peak_thick_k", estimate(3.214, 0.051))
        .unwrap();
    row.set_estimate("integral_thick_k_km_s", estimate(5.377, 0.118))
        .unwrap();
    row.set_estimate("v_thin_km_s", estimate(-0.0214, 0.0131))
        .unwrap();
    row.set_estimate("delta_v", estimate(-0.5213, 0.0412))
        .unwrap();
    row.set("profile", "blue").unwrap();
    row.set_estimate("hill_v_in_km_s", estimate(0.4812, 0.0347))
        .unwrap();
    row.set_estimate("hill_tau", estimate(4.21, 0.63)).unwrap();
    row.set("hill_chi2_red", 1.0432).unwrap();
    row.set("v_in_km_s", 0.4812).unwrap();
    row.set("v_in_km_s_lo68", 0.441).unwrap();
    row.set("v_in_km_s_hi68", 0.532).unwrap();
    row.set("v_in_systematic_km_s", 0.1234).unwrap();
    row.set("v_in_model", "two-layer+hill").unwrap();
    row.set("v_in_errors", "posterior").unwrap();
    row.set("hill_v_in_km_s_lo68", 0.4397).unwrap();
    row.set("hill_v_in_km_s_hi68", 0.5204).unwrap();
    row.set("hill_share", 0.91234).unwrap();
    row.set("p_infall", 0.9871).unwrap();
    row.set(
        "verdict",
        "Most probable: infall (probability 0.987). The data exclude none of the others.",
    )
    .unwrap();
    row.set("mass_rate_msun_yr", 1.234e-4).unwrap();
    row.set("mass_rate_msun_yr_lo68", 0.81e-4).unwrap();
    row.set("mass_rate_msun_yr_hi68", 2.04e-4).unwrap();
    row.set("t_ff_yr", 2.3456e5).unwrap();
    row.set(
        "missing_inputs",
        "t_kin_k would fill sound_speed_km_s + sigma_nonthermal_km_s + sigma_total_km_s + \
         mach_number + virial_parameter; field_ug would fill mass_to_flux",
    )
    .unwrap();
    row
}

#[test]
fn summary_of_a_pair_is_readable() {
    let cautions = [
        "The thin line has two peaks: two clouds on one line of sight would look the same as infall \
         here."
            .to_owned(),
        "Channels are correlated.".to_owned(),
    ];
    let found = summary(&pair(), &cautions);
    let expected = "\
invented clump: HCO+ 1-0 (thick) and H13CO+ 1-0 (thin)

Noise and strength of the lines
  noise, thick line             0.0512 K
  peak, thick line              3.21 +- 0.05 K
  integral, thick line          5.38 +- 0.12 K km/s

Velocities and widths
  velocity, thin line           -0.021 +- 0.013 km/s

Asymmetry of the thick line, without a model
  velocity difference           -0.52 +- 0.04
  profile                       blue

Hill model, surface at the background (formal errors)
  inward speed                  0.48 +- 0.03 km/s
  68 % of its posterior         0.44 to 0.52 km/s
  optical depth of a half       4.2 +- 0.6
  reduced chi2                  1.04
  share of the evidence         0.912

Inward speed (68 % intervals)
  adopted inward speed          0.48 -0.04 +0.05 km/s
  systematic, between models    0.123 km/s
  adopted from                  two-layer+hill
  errors                        posterior

Probabilities
  infall                        0.987
  - Most probable: infall (probability 0.987)
  - The data exclude none of the others

Collapse (68 % intervals)
  mass infall rate              (1.2 -0.4 +0.8)e-4 Msun/yr
  free-fall time                235000 yr

Not derived
  - t_kin_k would fill sound_speed_km_s + sigma_nonthermal_km_s +
    sigma_total_km_s + mach_number + virial_parameter
  - field_ug would fill mass_to_flux

Cautions
  - The thin line has two peaks: two clouds on one line of sight would look
    the same as infall here.
  - Channels are correlated.
";
    assert_eq!(found, expected);
}

#[test]
fn summary_stays_in_its_lines_whatever_the_name() {
    let mut row = columns::results().row();
    row.set("id", "a\nb\u{1b}[31m").unwrap();
    row.set("dx_arcsec", 12.25).unwrap();
    row.set("dy_arcsec", -4.0).unwrap();
    let found = summary(&row, &[]);
    assert_eq!(
        found,
        "a\\nb\\u{1b}[31m at (12.25, -4.0) arcsec: ? (thick) and ? (thin)\n"
    );
}

fn names_in(directory: &std::path::Path) -> Vec<String> {
    let entries = std::fs::read_dir(directory).unwrap();
    entries
        .map(|entry| entry.unwrap().file_name().into_string().unwrap())
        .collect()
}

#[test]
fn a_failed_write_leaves_the_old_file_and_nothing_else() {
    let directory = tempfile::tempdir().unwrap();
    let path = directory.path().join("results.csv");
    std::fs::write(&path, "old").unwrap();
    let error = write_atomically(&path, |writer| {
        writer.write_all(&vec![b'x'; 100_000])?;
        Err(std::io::Error::other("disk on fire").into())
    })
    .unwrap_err();
    assert_eq!(
        error.to_string(),
        format!("{}: cannot be written: disk on fire", path.display())
    );
    assert_eq!(std::fs::read_to_string(&path).unwrap(), "old");
    assert_eq!(names_in(directory.path()), ["results.csv"]);

    write_atomically(&path, |writer| Ok(writer.write_all(b"new")?)).unwrap();
    assert_eq!(std::fs::read_to_string(&path).unwrap(), "new");
    assert_eq!(names_in(directory.path()), ["results.csv"]);
}

#[test]
fn a_missing_or_taken_place_is_an_error_with_the_path() {
    let directory = tempfile::tempdir().unwrap();
    for path in [
        directory.path().join("nowhere/results.csv"),
        directory.path().to_owned(),
    ] {
        let error = write_atomically(&path, |_| Ok(())).unwrap_err();
        assert!(error.to_string().starts_with(&path.display().to_string()));
        assert!(error.hint().is_some());
    }
    assert!(names_in(directory.path()).is_empty());
}

/// A table written a row at a time has the bytes of one written whole.
fn check_row_by_row(table: &Table) {
    let directory = tempfile::tempdir().unwrap();
    let meta = table.meta.clone();
    let mut files = TableFiles::begin(directory.path(), "table", table.schema(), meta).unwrap();
    for row in table.rows() {
        files.push(row).unwrap();
    }
    assert!(
        (names_in(directory.path()).iter()).all(|name| name.starts_with(".unfinished-")),
        "nothing has its name before the end"
    );
    let paths = files.finish().unwrap();
    let whole = [
        bytes(|output| write_csv(table, output)),
        bytes(|output| write_ecsv(table, output)),
        bytes(|output| write_fits(table, output)),
    ];
    for (path, whole) in paths.iter().zip(whole) {
        assert!(std::fs::read(path).unwrap() == whole, "{}", path.display());
    }
    let mut names = names_in(directory.path());
    names.sort_unstable();
    assert_eq!(names, ["table.csv", "table.ecsv", "table.fits"]);
}

#[test]
fn rows_one_at_a_time_make_the_bytes_of_the_whole_table() {
    let mut small = small_table();
    check_row_by_row(&small);
    small.meta = vec![
        ("seed".to_owned(), Value::Integer(7)),
        ("note".to_owned(), Value::from("caf\u{e9}")),
    ];
    check_row_by_row(&small);
    check_row_by_row(&Table::new(small_schema()));
    // Many chunks of a FITS file, with the widest text at the end.
    let mut long = Table::new(columns::results());
    for number in 0..3000u32 {
        let mut row = pair();
        row.set("id", format!("clump {number}")).unwrap();
        row.set("v_in_km_s", f64::from(number).sin()).unwrap();
        if number == 2999 {
            row.set("cautions", "x".repeat(400)).unwrap();
        }
        long.push(row).unwrap();
    }
    check_row_by_row(&long);
}

#[test]
fn a_table_that_is_not_finished_leaves_old_files_and_nothing_else() {
    let directory = tempfile::tempdir().unwrap();
    std::fs::write(directory.path().join("table.fits"), "old").unwrap();
    let table = small_table();
    let mut files =
        TableFiles::begin(directory.path(), "table", table.schema(), Vec::new()).unwrap();
    files.push(&table.rows()[0]).unwrap();
    let foreign = files.push(&pair()).unwrap_err();
    assert!(matches!(foreign, ReportError::ForeignRow { .. }));
    drop(files);
    assert_eq!(names_in(directory.path()), ["table.fits"]);

    let nowhere = directory.path().join("nowhere");
    let error = TableFiles::begin(&nowhere, "table", table.schema(), Vec::new()).unwrap_err();
    let named = nowhere.join("table.csv");
    assert!(error.to_string().starts_with(&named.display().to_string()));
}

/// Where there is a device that is always full.
#[cfg(target_os = "linux")]
#[test]
fn a_full_disk_is_an_error() {
    let error = write_csv(&small_table(), std::fs::File::create("/dev/full").unwrap()).unwrap_err();
    assert!(matches!(error, ReportError::Stream(_)));
}

#[cfg(unix)]
#[test]
fn files_are_as_readable_as_any_new_file() {
    use std::os::unix::fs::PermissionsExt;
    let directory = tempfile::tempdir().unwrap();
    let (ours, plain) = (
        directory.path().join("ours"),
        directory.path().join("plain"),
    );
    write_atomically(&ours, |_| Ok(())).unwrap();
    std::fs::write(&plain, "").unwrap();
    let mode = |path| std::fs::metadata(path).unwrap().permissions().mode();
    assert_eq!(mode(&ours), mode(&plain));
}
