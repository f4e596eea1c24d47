//! CSV, ECSV and plain columns: what is accepted, and what a bad file is told.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

use std::path::Path;

use inrush::read::{ReadError, ReadOptions, read_spectrum, spectrum_from_bytes};
use inrush::spectrum::{AxisKind, BrightnessUnit, Frame, RawSpectrum};

fn read_with(text: &str, options: &ReadOptions) -> Result<RawSpectrum, ReadError> {
    spectrum_from_bytes(Path::new("clump.csv"), text.as_bytes(), options)
}

fn read(text: &str) -> RawSpectrum {
    read_with(text, &ReadOptions::default()).unwrap_or_else(|error| panic!("{error}"))
}

fn columns(text: &str) -> ReadOptions {
    ReadOptions {
        columns: Some(text.parse().unwrap()),
        ..ReadOptions::default()
    }
}

/// Message and hint of a refusal.
fn refused_with(text: &str, options: &ReadOptions) -> (String, String) {
    let error = read_with(text, options).unwrap_err();
    (error.to_string(), error.hint().unwrap_or_default())
}

fn refused(text: &str) -> (String, String) {
    refused_with(text, &ReadOptions::default())
}

// --- accepted

#[test]
fn column_names_carry_the_units() {
    let raw = read("# a comment\nvelocity_km_s,tmb_k\n-1.5,0.5\n\n# another\n0,1.5\n1.5,\n3,nan\n");
    assert_eq!(raw.axis_kind, AxisKind::RadioVelocity);
    assert_eq!(raw.axis, [-1500.0, 0.0, 1500.0, 3000.0]);
    assert_eq!(raw.values[..2], [0.5, 1.5]);
    assert!(raw.values[2].is_nan() && raw.values[3].is_nan());
    assert_eq!(raw.unit, BrightnessUnit::MainBeamKelvin);
    assert_eq!((raw.frame, raw.rest_frequency_hz), (None, None));

    let raw = read("id,Frequency_GHz,TA_mK,tmb_err\n1,89.2,100,1\n2,89.1,200,1\n");
    assert_eq!(raw.axis_kind, AxisKind::Frequency);
    assert_eq!(raw.unit, BrightnessUnit::AntennaKelvin);
    assert_eq!(raw.values, [0.1, 0.2]);

    let raw = read("velocity [m/s] , flux_mjy_beam\n1,100\n2,200\n");
    assert_eq!((raw.axis, raw.values), (vec![1.0, 2.0], vec![0.1, 0.2]));
    assert_eq!(raw.unit, BrightnessUnit::JanskyPerBeam);
}

#[test]
fn line_endings_byte_order_marks_and_separators_make_no_difference() {
    let plain = "velocity_km_s,tmb_k\n1,2\n2,3\n";
    let expected = read(plain);
    let crlf = plain.replace('\n', "\r\n");
    let variants = [
        crlf.clone(),
        format!("\u{feff}{crlf}"),
        plain.replace('\n', "\r"),
        plain.replace(',', ";"),
        plain.replace(',', "\t"),
        plain.replace(',', "   "),
        plain.replace("1,2", " 1.0e0 , \"2\" "),
        plain.trim_end().to_string(),
    ];
    for text in variants {
        assert_eq!(read(&text), expected, "{text:?}");
    }
}

#[test]
fn gzip_is_told_by_its_bytes() {
    use std::io::Write;
    let text = "velocity_km_s,tmb_k\n1,2\n2,3\n";
    let mut packer = flate2::write::GzEncoder::new(Vec::new(), flate2::Compression::default());
    packer.write_all(text.as_bytes()).unwrap();
    let packed = packer.finish().unwrap();
    let read_bytes =
        |bytes: &[u8]| spectrum_from_bytes(Path::new("clump.csv"), bytes, &ReadOptions::default());
    assert_eq!(read_bytes(&packed).unwrap(), read(text));
    let error = read_bytes(&packed[..packed.len() - 9]).unwrap_err();
    assert!(
        error.to_string().contains("clump.csv: damaged gzip stream"),
        "{error}"
    );
}

#[test]
fn plain_columns_are_read_as_chosen() {
    let raw = read_with("# v  i  T\n1 0 20\n2 0 30\n", &columns("1:km/s,3:mK (TA*)")).unwrap();
    assert_eq!((raw.axis, raw.values), (vec![1e3, 2e3], vec![0.02, 0.03]));
    assert_eq!(raw.unit, BrightnessUnit::AntennaKelvin);
    assert!(!raw.convention_stated);
    let raw = read_with("89.2, 1\n89.1, 2\n", &columns("1:GHz,2:K")).unwrap();
    assert_eq!(raw.axis, [89.2e9, 89.1e9]);
    // The same option chooses among named columns.
    let raw = read_with("v,w,t\n1,9,2\n2,9,3\n", &columns("w:km/s,t:K")).unwrap_err();
    assert!(raw.to_string().contains("clump.csv:3: 9 repeats"), "{raw}");
    let raw = read_with("v,w,t\n1,9,2\n2,9,3\n", &columns("v:km/s (optical),t:K")).unwrap();
    assert_eq!(raw.axis_kind, AxisKind::OpticalVelocity);
}

#[test]
fn ecsv_takes_units_and_meta_data_from_its_header() {
    let raw = read(
        "# %ECSV 1.0\n# ---\n# datatype:\n# - {name: v, unit: km / s, datatype: float64}\n# - {name: T, unit: mK, datatype: float64}\n# meta: !!omap\n# - {RESTFRQ: 89188524700.0}\n# - {SPECSYS: BARYCENT}\n# - {BMAJ: 0.01}\n# schema: astropy-2.0\nv T\n1 20\n2 \"\"\n3 10\n",
    );
    assert_eq!(raw.axis, [1e3, 2e3, 3e3]);
    assert!(raw.values[1].is_nan());
    assert_eq!(raw.rest_frequency_hz, Some(89.188_524_7e9));
    assert_eq!(raw.frame, Some(Frame::Other("BARYCENT".into())));
    assert_eq!(raw.beam.unwrap().major, 36.0);
    assert!(!raw.convention_stated);
}

// --- refused

#[test]
fn a_missing_file_is_named() {
    let path = Path::new("no/such/clump.csv");
    let error = read_spectrum(path, &ReadOptions::default()).unwrap_err();
    assert_eq!(error.to_string(), "no/such/clump.csv: no such file");
    assert!(error.hint().unwrap().contains("check the name"));
    let error = read_spectrum(Path::new("tests"), &ReadOptions::default()).unwrap_err();
    assert!(
        error.to_string().contains("tests: cannot be read"),
        "{error}"
    );
}

#[test]
fn an_empty_file_is_called_empty() {
    for text in ["", "\n \n", "\u{feff}"] {
        let (message, _) = refused(text);
        assert!(
            message.starts_with("clump.csv: the file is empty, expected"),
            "{message}"
        );
    }
    let (message, hint) = refused("# only\n# comments\n");
    assert!(message.contains("no rows of data"), "{message}");
    assert!(hint.contains('#'), "{hint}");
    let (message, _) = refused("velocity_km_s,tmb_k\n");
    assert!(message.contains("no rows of data"), "{message}");
    let (message, _) = refused("velocity_km_s,tmb_k\n1,2\n");
    assert!(
        message.contains("1 channel(s), expected at least two"),
        "{message}"
    );
}

#[test]
fn one_column_is_named_with_its_line() {
    for text in ["# x\ntmb_k\n1\n2\n", "# x\n1\n2\n"] {
        let (message, hint) = refused(text);
        assert!(message.starts_with("clump.csv:2: one column"), "{message}");
        assert!(message.contains("expected two"), "{message}");
        assert!(hint.contains("commas"), "{hint}");
    }
    let (message, _) = refused("velocity_km_s,tmb_k\n1,2\n3\n");
    assert!(
        message.contains("clump.csv:3: one column (`3`)"),
        "{message}"
    );
    let (message, _) = refused("velocity_km_s,tmb_k\n1,2\n3,4,5\n");
    assert!(
        message.contains("clump.csv:3: 3 fields, expected 2"),
        "{message}"
    );
}

#[test]
fn text_in_a_numbers_place_is_shown() {
    let (message, hint) = refused("velocity_km_s,tmb_k\n1,2\n2,n/a\n");
    assert_eq!(
        message,
        "clump.csv:3: `n/a` in column `tmb_k`, expected a number"
    );
    assert!(hint.contains("nan"), "{hint}");
    let (message, _) = refused_with("1 2\n2 x\n", &columns("1:km/s,2:K"));
    assert!(
        message.contains("clump.csv:2: `x` in column `2`"),
        "{message}"
    );
}

#[test]
fn decimal_commas_are_refused_however_columns_are_separated() {
    for (text, line, found) in [
        ("velocity_km_s;tmb_k\n1,5;2\n", 2, "1,5"),
        ("velocity_km_s,tmb_k\n1,5,2,25\n", 2, "1,5"),
        ("velocity_km_s tmb_k\n1.0 2\n1,5 2\n", 3, "1,5"),
        ("velocity_km_s\ttmb_k\n1\t-2,5\n", 2, "-2,5"),
        ("velocity_km_s,tmb_k\n1,2\n2,\"2,5\"\n", 3, "2,5"),
        ("1,5;2,0\n2,5;3,0\n", 1, "1,5"),
        ("1,5 2,0\n2,5 3,0\n", 1, "1,5"),
    ] {
        let (message, hint) = refused(text);
        assert_eq!(
            message,
            format!("clump.csv:{line}: `{found}` has a decimal comma, expected a decimal point"),
            "{text:?}"
        );
        assert!(hint.contains("1.5, not 1,5"), "{hint}");
    }
}

#[test]
fn two_separators_in_one_header_are_refused() {
    let (message, hint) = refused("velocity_km_s;tmb_k,weight\n1;2,3\n");
    assert!(
        message.contains("clump.csv:1: both `;` and `,`"),
        "{message}"
    );
    assert!(hint.contains("commas"), "{hint}");
}

#[test]
fn numbers_without_names_need_a_choice_of_columns() {
    let (message, hint) = refused("# x\n1 2\n2 3\n");
    assert!(
        message.contains("clump.csv:2: 2 columns without names"),
        "{message}"
    );
    assert!(hint.contains("--columns \"1:km/s,2:K\""), "{hint}");
    let (message, _) = refused_with("1 2\n2 3\n", &columns("1:km/s,3:K"));
    assert!(
        message.contains("no column 3, expected one of `1`, `2`"),
        "{message}"
    );
    let (message, hint) = refused_with("vel,t\n1,2\n2,3\n", &columns("velo:km/s,t:K"));
    assert!(
        message.contains("no column `velo`, expected one of `vel`, `t`"),
        "{message}"
    );
    assert!(hint.contains("`vel`"), "{hint}");
}

#[test]
fn unsorted_and_repeated_velocities_are_refused_with_their_line() {
    let (message, hint) = refused("velocity_km_s,tmb_k\n1,2\n1.1,3\n1.1,4\n");
    assert!(
        message.contains("clump.csv:4: 1.1 repeats the channel before"),
        "{message}"
    );
    assert!(hint.contains("sort"), "{hint}");
    let (message, _) = refused("# x\nvelocity_km_s,tmb_k\n1,2\n1.1,3\n0.9,4\n");
    assert!(
        message.contains("clump.csv:5: 0.9 after 1.1, expected strictly"),
        "{message}"
    );
    let (message, _) = refused("frequency_ghz,tmb_k\n90,2\n89,3\n89.5,4\n");
    assert!(message.contains("clump.csv:4: 89.5 after 89"), "{message}");
    let (message, hint) = refused("velocity_km_s,tmb_k\n1,2\n,3\n");
    assert!(
        message.contains("clump.csv:3: blank velocity or frequency"),
        "{message}"
    );
    assert!(hint.contains("every channel"), "{hint}");
}

#[test]
fn all_blank_and_constant_spectra_are_refused() {
    let (message, _) = refused("velocity_km_s,tmb_k\n1,\n2,nan\n3,NaN\n");
    assert_eq!(
        message,
        "clump.csv: all 3 channels are blank, expected numbers"
    );
    let (message, hint) = refused("velocity_km_s,tmb_k\n1,0.5\n2,\n3,0.5\n");
    assert!(message.contains("all 2 channels hold 0.5"), "{message}");
    assert!(hint.contains("noise"), "{hint}");
}

#[test]
fn unknown_units_and_columns_are_answered_with_the_nearest() {
    for (names, found, nearest) in [
        ("velocity_kms,tmb_k", "velocity_kms", "velocity_km_s"),
        ("velocity_km_s,tmb_kelvin", "tmb_kelvin", "tmb_k"),
        ("frequency_ghzz,tmb_k", "frequency_ghzz", "frequency_ghz"),
        ("velocity (kms),tmb_k", "kms", "km/s"),
        ("velocity_km_s,T (mk)", "mk", "mK"),
    ] {
        let (message, hint) = refused(&format!("{names}\n1,2\n2,3\n"));
        assert!(
            message.contains(&format!("clump.csv:1: unknown unit `{found}`")),
            "{message}"
        );
        assert_eq!(hint, format!("did you mean `{nearest}`?"));
    }
    let (message, _) = refused("speed,tmb_k\n1,2\n2,3\n");
    assert!(
        message.contains("clump.csv:1: no velocity or frequency column among `speed`, `tmb_k`"),
        "{message}"
    );
    let (message, hint) = refused("velocity_km_s,frequency_ghz,tmb_k\n1,2,3\n2,3,4\n");
    assert!(
        message
            .contains("several velocity or frequency columns (`velocity_km_s`, `frequency_ghz`)"),
        "{message}"
    );
    assert!(hint.contains("--columns"), "{hint}");
    let (message, _) = refused("velocity_km_s (m/s),tmb_k\n1,2\n2,3\n");
    assert!(
        message.contains("column `velocity_km_s` has the unit `m/s`"),
        "{message}"
    );
}

#[test]
fn damaged_ecsv_headers_are_refused_with_their_line() {
    let header = "# %ECSV 1.0\n# ---\n# datatype:\n# - {name: v, unit: km/s, datatype: float64}\n# - {name: T, unit: K, datatype: float64}\n";
    let (message, _) = refused(&format!("{header}v,T\n1,2\n"));
    assert!(
        message.contains("clump.csv:6: `v,T`, other columns than in the ECSV header"),
        "{message}"
    );
    let (message, _) = refused("# %ECSV 1.0\n# ---\nv T\n1 2\n2 3\n");
    assert!(
        message.contains("no `datatype` list in the ECSV header"),
        "{message}"
    );
    let bars = header.replace("# datatype:", "# delimiter: '|'\n# datatype:");
    let (message, _) = refused(&format!("{bars}v|T\n1|2\n"));
    assert!(
        message.contains("clump.csv:3: the delimiter `|` in the ECSV header"),
        "{message}"
    );
    let unnamed = header.replace("name: T, ", "");
    let (message, _) = refused(&format!("{unnamed}v T\n1 2\n"));
    assert!(message.contains("clump.csv:5: `{unit: K"), "{message}");
    let (message, hint) = refused(&format!("{}v T\n1 2\n2 3\n", header.replace("km/s", "kms")));
    assert!(
        message.contains("clump.csv:6: unknown unit `kms`"),
        "{message}"
    );
    assert!(hint.contains("`km/s`"), "{hint}");
}

#[test]
fn a_choice_of_a_row_is_refused_for_text() {
    let options = ReadOptions {
        select: Some("3".parse().unwrap()),
        ..ReadOptions::default()
    };
    let (message, _) = refused_with("velocity_km_s,tmb_k\n1,2\n2,3\n", &options);
    assert!(message.contains("a choice of a row (`3`)"), "{message}");
}

#[test]
fn text_in_another_encoding_is_named_with_its_line() {
    let error = spectrum_from_bytes(
        Path::new("clump.csv"),
        b"velocity_km_s,tmb_k\n# \xb1 5 %\n1,2\n2,3\n",
        &ReadOptions::default(),
    )
    .unwrap_err();
    assert_eq!(
        error.to_string(),
        "clump.csv:2: byte 0xb1, expected text in UTF-8"
    );
    assert!(error.hint().unwrap().contains("UTF-8"));
}

#[test]
fn text_under_a_fits_name_is_not_read_as_text() {
    for name in ["clump.fits", "clump.FITS.gz"] {
        let error = spectrum_from_bytes(
            Path::new(name),
            b"<!DOCTYPE html><html>not found</html>",
            &ReadOptions::default(),
        )
        .unwrap_err();
        let message = error.to_string();
        assert!(
            message.contains("starts with `<!DOCTYPE html><html`"),
            "{message}"
        );
    }
}

#[test]
fn random_bytes_are_recognised_as_nothing() {
    let bytes: Vec<u8> = (0..4000_u32)
        .map(|index| index.wrapping_mul(2_654_435_761).to_be_bytes()[1])
        .collect();
    let path = Path::new("clump.fits");
    let error = spectrum_from_bytes(path, &bytes, &ReadOptions::default()).unwrap_err();
    let message = error.to_string();
    assert!(
        message.starts_with("clump.fits: starts with the bytes 00 "),
        "{message}"
    );
    assert!(
        message.contains("expected FITS (`SIMPLE  =`) or text"),
        "{message}"
    );
    assert!(
        error
            .hint()
            .unwrap()
            .contains("CSV, ECSV, plain columns or FITS")
    );
}
