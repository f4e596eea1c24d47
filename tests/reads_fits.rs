//! FITS images and tables that are damaged, incomplete or not of one spectrum: what they are told.
#![allow(clippy::unwrap_used)] // What fails below a test fails the test.

use std::path::Path;

use inrush::read::{ReadError, ReadOptions, ValueUnit, spectrum_from_bytes};
use inrush::spectrum::{AxisKind, BrightnessUnit, Frame, RawSpectrum};

const BLOCK: usize = 2880;

/// Cards padded to 80 characters and a header padded to whole blocks.
fn header(cards: &[&str]) -> Vec<u8> {
    let mut bytes: Vec<u8> = cards
        .iter()
        .chain(&["END"])
        .flat_map(|card| format!("{card:<80}").into_bytes())
        .collect();
    bytes.resize(bytes.len().next_multiple_of(BLOCK), b' ');
    bytes
}

fn padded(mut data: Vec<u8>) -> Vec<u8> {
    data.resize(data.len().next_multiple_of(BLOCK), 0);
    data
}

fn floats(values: &[f32]) -> Vec<u8> {
    values
        .iter()
        .flat_map(|value| value.to_be_bytes())
        .collect()
}

const IMAGE: [&str; 12] = [
    "SIMPLE  =                    T",
    "BITPIX  =                  -32",
    "NAXIS   =                    1",
    "NAXIS1  =                    4",
    "CTYPE1  = 'VRAD    '",
    "CRVAL1  =               1000.0",
    "CDELT1  =                100.0",
    "CRPIX1  =                  1.0",
    "CUNIT1  = 'm/s     '",
    "BUNIT   = 'K       '",
    "SPECSYS = 'LSRK    '",
    "RESTFRQ =        89188524700.0",
];

/// The image with some cards replaced (by keyword) or appended, and others left out.
fn image_with(changes: &[&str], without: &[&str]) -> Vec<u8> {
    let mut cards: Vec<&str> = IMAGE
        .into_iter()
        .filter(|card| !without.iter().any(|keyword| card.starts_with(keyword)))
        .collect();
    for change in changes {
        match cards.iter_mut().find(|card| card[..8] == change[..8]) {
            Some(card) => *card = change,
            None => cards.push(change),
        }
    }
    [header(&cards), padded(floats(&[0.5, 1.5, 0.25, -0.125]))].concat()
}

const PRIMARY: [&str; 3] = [
    "SIMPLE  =                    T",
    "BITPIX  =                    8",
    "NAXIS   =                    0",
];

const TABLE: [&str; 14] = [
    "XTENSION= 'BINTABLE'",
    "BITPIX  =                    8",
    "NAXIS   =                    2",
    "NAXIS1  =                    8",
    "NAXIS2  =                    3",
    "PCOUNT  =                    0",
    "GCOUNT  =                    1",
    "TFIELDS =                    2",
    "TTYPE1  = 'VELOCITY'",
    "TFORM1  = 'E       '",
    "TUNIT1  = 'km/s    '",
    "TTYPE2  = 'TMB     '",
    "TFORM2  = 'E       '",
    "TUNIT2  = 'K       '",
];

fn table_with(changes: &[&str]) -> Vec<u8> {
    let mut cards = TABLE.to_vec();
    for change in changes {
        match cards.iter_mut().find(|card| card[..8] == change[..8]) {
            Some(card) => *card = change,
            None => cards.push(change),
        }
    }
    let data = floats(&[1.0, 0.5, 2.0, 1.5, 3.0, 0.25]);
    [header(&PRIMARY), header(&cards), padded(data)].concat()
}

fn read_with(bytes: &[u8], options: &ReadOptions) -> Result<RawSpectrum, ReadError> {
    spectrum_from_bytes(Path::new("clump.fits"), bytes, options)
}

fn read(bytes: &[u8]) -> RawSpectrum {
    read_with(bytes, &ReadOptions::default()).unwrap_or_else(|error| panic!("{error}"))
}

fn refused_with(bytes: &[u8], options: &ReadOptions) -> (String, String) {
    let error = read_with(bytes, options).unwrap_err();
    (error.to_string(), error.hint().unwrap_or_default())
}

fn refused(bytes: &[u8]) -> (String, String) {
    refused_with(bytes, &ReadOptions::default())
}

#[track_caller]
fn assert_says(message: &str, parts: &[&str]) {
    for part in parts {
        assert!(message.contains(part), "`{part}` is not in: {message}");
    }
}

#[test]
fn an_image_is_read_as_its_cards_say() {
    let raw = read(&image_with(&["OBJECT  = 'made up '"], &[]));
    assert_eq!(raw.axis_kind, AxisKind::RadioVelocity);
    assert_eq!(raw.axis, [1000.0, 1100.0, 1200.0, 1300.0]);
    assert_eq!(raw.values, [0.5, 1.5, 0.25, -0.125]);
    assert_eq!(raw.unit, BrightnessUnit::Kelvin);
    assert_eq!(raw.frame, Some(Frame::Lsrk));
    assert_eq!(raw.object.as_deref(), Some("made up"));
    let raw = read(&image_with(
        &["SPECSYS = 'TOPOCENT'", "BUNIT   = 'mK (TA*)'"],
        &[],
    ));
    assert_eq!(raw.frame, Some(Frame::Other("TOPOCENT".into())));
    assert_eq!(raw.unit, BrightnessUnit::AntennaKelvin);
    assert_eq!(raw.values[1], 0.0015);
}

#[test]
fn the_frame_may_stand_in_velref_alone() {
    let raw = read(&image_with(
        &["CTYPE1  = 'VELO    '", "VELREF  =                  257"],
        &["SPECSYS"],
    ));
    assert_eq!(raw.axis_kind, AxisKind::RadioVelocity);
    assert_eq!(raw.frame, Some(Frame::Lsrk));
    let raw = read(&image_with(&["CTYPE1  = 'VELO    '"], &["SPECSYS"]));
    assert_eq!((raw.axis_kind, raw.frame), (AxisKind::RadialVelocity, None));
    assert!(!raw.convention_stated);
    let (message, _) = refused(&image_with(&["VELREF  =                  2.5"], &[]));
    assert_says(&message, &["HDU 0, card VELREF: 2.5", "1 is LSRK"]);
}

#[test]
fn missing_padding_after_the_data_is_no_damage() {
    let whole = image_with(&[], &[]);
    let cut = &whole[..BLOCK + 16];
    assert_eq!(read(cut), read(&whole));
}

#[test]
fn a_truncated_file_says_how_much_is_missing() {
    let whole = image_with(&[], &[]);
    let (message, hint) = refused(&whole[..BLOCK + 15]);
    assert_says(
        &message,
        &[
            "clump.fits: HDU 0",
            "NAXIS1 = 4",
            "need 16 bytes",
            "the file holds 15",
        ],
    );
    assert_says(&hint, &["download it again"]);
    let table = table_with(&[]);
    let (message, _) = refused(&table[..2 * BLOCK + 23]);
    assert_says(&message, &["HDU 1", "need 24 bytes", "the file holds 23"]);
}

#[test]
fn a_header_without_end_is_refused() {
    let whole = image_with(&[], &[]);
    let (message, hint) = refused(&whole[..800]);
    assert_says(&message, &["clump.fits: HDU 0: 10 cards and no END"]);
    assert_says(&hint, &["the header is damaged"]);
    let mut endless = whole[..BLOCK].to_vec();
    let end = endless
        .windows(4)
        .position(|bytes| bytes == b"END ")
        .unwrap();
    endless[end..end + 3].copy_from_slice(b"NED");
    let (message, _) = refused(&endless);
    assert_says(&message, &["36 cards and no END, expected an END card"]);
}

#[test]
fn sizes_beyond_the_file_are_refused_before_anything_is_allocated() {
    for axis in ["1000000000000", "9223372036854775807"] {
        let (message, _) = refused(&image_with(&[&format!("NAXIS1  = {axis:>20}")], &[]));
        assert_says(
            &message,
            &[&format!("NAXIS1 = {axis}"), "the file holds 2880"],
        );
    }
    let (message, _) = refused(&table_with(&["PCOUNT  =        1000000000000"]));
    assert_says(
        &message,
        &["PCOUNT = 1000000000000", "need 1000000000024 bytes"],
    );
    let huge = [
        "NAXIS   =                    3",
        "NAXIS2  =        1000000000000",
        "NAXIS3  =        1000000000000",
    ];
    let (message, _) = refused(&image_with(&huge, &[]));
    assert_says(&message, &["need 16000000000000000000000000 bytes"]);
}

#[test]
fn impossible_cards_are_named_with_what_was_expected() {
    for (card, parts) in [
        (
            "BITPIX  =                    7",
            ["card BITPIX: 7", "8, 16, 32, 64, -32 or -64"],
        ),
        ("BITPIX  = 'float   '", ["card BITPIX: 'float'", "8, 16"]),
        (
            "NAXIS   =                   -1",
            ["card NAXIS: -1", "from 0 to 999"],
        ),
        (
            "NAXIS   =              1000000",
            ["card NAXIS: 1000000", "from 0 to 999"],
        ),
        (
            "NAXIS1  =                   -4",
            ["card NAXIS1: -4", "a whole number from 0"],
        ),
        (
            "NAXIS1  =                  4.5",
            ["card NAXIS1: 4.5", "a whole number from 0"],
        ),
        (
            "NAXIS   =                    2",
            ["card NAXIS2: no such card", "a whole number"],
        ),
        (
            "BUNIT   = 'K",
            ["card BUNIT: `BUNIT   = 'K`", "a card such as"],
        ),
        ("CRVAL1  = 'zero    '", ["card CRVAL1: 'zero'", "a number"]),
        (
            "CRVAL1  =                1E999",
            ["card CRVAL1: inf", "a number"],
        ),
        (
            "CD1_2   =                  0.1",
            ["card CD1_2: 0.1", "independent of the others"],
        ),
    ] {
        let changes = if card.starts_with("CD1_2") {
            vec![
                card,
                "NAXIS   =                    2",
                "NAXIS2  =                    1",
            ]
        } else {
            vec![card]
        };
        let (message, hint) = refused(&image_with(&changes, &[]));
        assert_says(&message, &["clump.fits: HDU 0, "]);
        assert_says(&message, &parts);
        assert_eq!(hint, "correct the card");
    }
    for keyword in ["CRVAL1", "CDELT1", "CRPIX1"] {
        let (message, _) = refused(&image_with(&[], &[keyword]));
        assert_says(
            &message,
            &[&format!("card {keyword}: no such card, expected a number")],
        );
    }
    for (card, parts) in [
        (
            "TFIELDS =                   -1",
            ["card TFIELDS: -1", "from 0 to 999"],
        ),
        (
            "TFIELDS =                    3",
            ["card TFORM3: ``", "such as 1D"],
        ),
        ("TFORM2  = '5       '", ["card TFORM2: `5`", "such as 1D"]),
        (
            "TFORM2  = '9999999999999999999J'",
            ["card TFORM2: `9999999999999999999J`", "such as 1D"],
        ),
        (
            "TFORM2  = 'D       '",
            ["card NAXIS1: 8", "12, the bytes that the 2 columns take"],
        ),
        (
            "NAXIS   =                    1",
            ["card NAXIS: 1", "from 2 to 2"],
        ),
    ] {
        let (message, _) = refused(&table_with(&[card]));
        assert_says(&message, &["clump.fits: HDU 1, "]);
        assert_says(&message, &parts);
    }
}

#[test]
fn a_header_with_other_bytes_than_ascii_is_refused() {
    let mut bytes = image_with(&[], &[]);
    bytes[4 * 80 + 30] = 0xc3;
    let (message, _) = refused(&bytes);
    assert_says(
        &message,
        &["HDU 0: byte 0xc3 in card 5, expected printable ASCII"],
    );
}

#[test]
fn units_are_needed_and_known() {
    let (message, hint) = refused(&image_with(&[], &["BUNIT"]));
    assert_says(
        &message,
        &["HDU 0, card BUNIT: no unit for the values, expected one of K"],
    );
    assert_says(&hint, &["option"]);
    let options = ReadOptions {
        value_unit: Some(ValueUnit::parse("K (Tmb)").unwrap()),
        ..ReadOptions::default()
    };
    let raw = read_with(&image_with(&[], &["BUNIT"]), &options).unwrap();
    assert_eq!(raw.unit, BrightnessUnit::MainBeamKelvin);

    let (message, hint) = refused(&image_with(&["BUNIT   = 'Jy/bm   '"], &[]));
    assert_says(&message, &["HDU 0, card BUNIT: unknown unit `Jy/bm`"]);
    assert_says(&hint, &["Jy/beam"]);
    let (message, hint) = refused(&image_with(&["CUNIT1  = 'kms     '"], &[]));
    assert_says(&message, &["HDU 0, card CUNIT1: unknown unit `kms`"]);
    assert_says(&hint, &["km/s"]);
    let (message, _) = refused(&image_with(&["CUNIT1  = 'GHz     '"], &[]));
    assert_says(
        &message,
        &["card CUNIT1: unknown unit `GHz`, expected one of km/s, m/s"],
    );
}

#[test]
fn other_axes_and_shapes_are_refused() {
    for kind in ["WAVE", "VRAD-LOG", "RA---SIN"] {
        let (message, _) = refused(&image_with(&[&format!("CTYPE1  = '{kind:<8}'")], &[]));
        assert_says(
            &message,
            &[
                &format!("HDU 0, card CTYPE1: axis type `{kind}`"),
                "FREQ, VRAD, VOPT or VELO",
            ],
        );
    }
    let (message, _) = refused(&image_with(
        &["CTYPE1  = 'FREQ-V2F'", "CUNIT1  = 'Hz'", "CRVAL1  = 89E9"],
        &["RESTFRQ"],
    ));
    assert_says(
        &message,
        &[
            "HDU 0, card RESTFRQ: no such card, expected a rest frequency, which the axis type FREQ-V2F needs",
        ],
    );
    let (message, _) = refused(&image_with(
        &["CTYPE1  = 'VOPT-F2W'", "CDELT1  =                1.5E8"],
        &[],
    ));
    assert_says(
        &message,
        &["card CTYPE1: VOPT-F2W with channels at no possible frequency"],
    );
    let square = [
        "NAXIS   =                    2",
        "NAXIS1  =                    2",
        "NAXIS2  =                    2",
    ];
    let (message, hint) = refused(&image_with(&square, &[]));
    assert_says(
        &message,
        &["HDU 0: an image of 2 x 2, expected one axis longer than 1"],
    );
    assert_says(&hint, &["one position"]);
    let (message, _) = refused(&image_with(&["NAXIS1  =                    1"], &[]));
    assert_says(&message, &["1 channel(s), expected at least two"]);
    let (message, _) = refused(&image_with(&["CDELT1  =                  0.0"], &[]));
    assert_says(
        &message,
        &["HDU 0, card CDELT1: 0, expected a number other than 0"],
    );
}

#[test]
fn a_file_without_a_spectrum_or_with_several_lists_its_units() {
    let (message, _) = refused(&header(&PRIMARY));
    assert_says(&message, &["no spectrum among HDU 0: no data"]);
    let twice = [image_with(&[], &[]), table_with(&[])[BLOCK..].to_vec()].concat();
    let (message, hint) = refused(&twice);
    assert_says(
        &message,
        &["several HDUs with data (HDU 0: image of 4; HDU 1: table of 3 rows)"],
    );
    assert_says(&hint, &["0 is the primary HDU"]);
    let chosen = |hdu| ReadOptions {
        hdu: Some(hdu),
        ..ReadOptions::default()
    };
    assert_eq!(
        read_with(&twice, &chosen(0)).unwrap().origin.format,
        "FITS image"
    );
    let raw = read_with(&twice, &chosen(1)).unwrap();
    assert_eq!(
        (raw.axis, raw.values),
        (vec![1e3, 2e3, 3e3], vec![0.5, 1.5, 0.25])
    );
    let (message, _) = refused_with(&twice, &chosen(2));
    assert_says(&message, &["no spectrum among HDU 0"]);
}

#[test]
fn cells_with_several_axes_are_refused() {
    let vector = [
        "NAXIS1  =                   20",
        "NAXIS2  =                    1",
        "TFORM2  = '4E      '",
        "CTYPE1  = 'VRAD    '",
        "CRVAL1  =                  1.0",
        "CDELT1  =                  1.0",
        "CRPIX1  =                  1.0",
    ];
    let with_shape = |shape: &'static str| table_with(&[&vector[..], &[shape]].concat());
    let raw = read(&with_shape("TDIM2   = '(4,1,1) '"));
    assert_eq!(raw.axis, [1.0, 2.0, 3.0, 4.0]);
    assert_eq!(raw.values, [0.5, 2.0, 1.5, 3.0]);
    for shape in ["TDIM2   = '(2,2)   '", "TDIM2   = '(1,4)   '"] {
        let (message, _) = refused(&with_shape(shape));
        assert_says(
            &message,
            &[
                "HDU 1, card TDIM2: cells of (",
                "expected one axis longer than 1",
            ],
        );
    }
}

#[test]
fn tables_name_the_row_or_column_that_is_wrong() {
    let (message, hint) = refused(&table_with(&[
        "TTYPE1  = 'SPEED   '",
        "TUNIT1  = 'furlong '",
    ]));
    assert_says(
        &message,
        &["HDU 1, card TTYPE: no velocity or frequency column among `SPEED`, `TMB`"],
    );
    assert_says(&hint, &["--columns"]);
    let (message, hint) = refused(&table_with(&["TUNIT1  = 'kms     '"]));
    assert_says(&message, &["HDU 1, card TTYPE: unknown unit `kms`"]);
    assert_says(&hint, &["km/s"]);
    let (message, _) = refused(&table_with(&["TFORM1  = '4A      '"]));
    assert_says(
        &message,
        &["HDU 1, row 1: `", "in column `VELOCITY`, expected a number"],
    );
    let (message, _) = refused(&table_with(&["TSCAL1  =                  0.0"]));
    assert_says(&message, &["HDU 1, row 2: 0 repeats the channel before"]);
    let (message, _) = refused(&table_with(&[
        "NAXIS2  =                    0",
        "PCOUNT  =                    8",
    ]));
    assert_says(&message, &["no rows of data"]);
}
