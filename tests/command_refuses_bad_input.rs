//! Bad input through the binary: each gets exit code 2, a message that names file and place, what
//! was found, what was expected and a hint, nothing on stdout and nothing in the output directory.

// tables of cases; messages are shown on demand: SHOW_MESSAGES=1 cargo test ... -- --nocapture
#![allow(
    clippy::too_many_lines,
    clippy::print_stdout,
    clippy::format_push_string
)]

mod command;

use command::{Folder, PAIR, Pair, csv, image, table};

/// One bad input and what its message has to say.
struct Case {
    name: &'static str,
    /// Files beside the good pair, or in place of one of it.
    files: Vec<(&'static str, Vec<u8>)>,
    arguments: Vec<&'static str>,
    /// What stderr has to hold, in this order.
    says: Vec<&'static str>,
}

fn case(name: &'static str) -> Case {
    Case {
        name,
        files: Vec::new(),
        arguments: PAIR.to_vec(),
        says: Vec::new(),
    }
}

impl Case {
    fn thick(self, content: impl Into<Vec<u8>>) -> Self {
        self.file("thick.csv", content)
    }

    fn thin(self, content: impl Into<Vec<u8>>) -> Self {
        self.file("thin.csv", content)
    }

    fn file(mut self, name: &'static str, content: impl Into<Vec<u8>>) -> Self {
        self.files.push((name, content.into()));
        self
    }

    /// Further options over the good pair.
    fn with(mut self, options: &[&'static str]) -> Self {
        self.arguments.extend(options);
        self
    }

    /// Other arguments altogether.
    fn run(mut self, arguments: &[&'static str]) -> Self {
        self.arguments = arguments.to_vec();
        self
    }

    /// A run sheet in place of the options.
    fn sheet(self, text: &str) -> Self {
        self.file("pair.toml", text).run(&["fit", "pair.toml"])
    }

    fn says(mut self, parts: &[&'static str]) -> Self {
        self.says = parts.to_vec();
        self
    }

    /// What is wrong with how the binary takes the case; `None` where nothing is.
    fn trouble(&self) -> Option<String> {
        let folder = Folder::with_pair();
        for (name, content) in &self.files {
            folder.write(name, content);
        }
        let before = folder.files();
        let mut arguments = self.arguments.clone();
        if arguments[0] == "fit" && !arguments.contains(&"--out") {
            arguments.extend(["--out", "results"]);
        }
        let run = folder.inrush(&arguments);
        let mut troubles = Vec::new();
        if run.code != 2 {
            troubles.push(format!("exit code {}, expected 2", run.code));
        }
        if !run.stdout.is_empty() {
            troubles.push(format!("stdout is not empty: {}", run.stdout));
        }
        if !run.stderr.starts_with("error: ") {
            troubles.push("stderr does not begin with `error: `".to_owned());
        }
        let mut rest = run.stderr.as_str();
        let hinted = self.says.iter().any(|part| part.starts_with("\nhint: "));
        let hint = (!hinted).then_some("\nhint: ");
        for part in self.says.iter().copied().chain(hint) {
            match rest.find(part) {
                Some(at) => rest = &rest[at + part.len()..],
                None => troubles.push(format!("stderr does not say `{part}` in its place")),
            }
        }
        let hint = run
            .stderr
            .split_once("\nhint: ")
            .map_or("", |(_, hint)| hint);
        if hint.trim().is_empty() {
            troubles.push("the hint is empty".to_owned());
        }
        if run.stderr.contains("panicked") {
            troubles.push("it panicked".to_owned());
        }
        if folder.files() != before {
            troubles.push(format!("it left {:?}", folder.files()));
        }
        if std::env::var_os("SHOW_MESSAGES").is_some() {
            println!("--- {}\n{}", self.name, run.stderr);
        }
        (!troubles.is_empty()).then(|| {
            format!(
                "{}:\n  {}\n  stderr: {}",
                self.name,
                troubles.join("\n  "),
                run.stderr
            )
        })
    }
}

/// Runs every case and names those that fail.
fn check(cases: &[Case]) {
    let troubles: Vec<String> = cases.iter().filter_map(Case::trouble).collect();
    assert!(
        troubles.is_empty(),
        "{} of {} cases:\n{}",
        troubles.len(),
        cases.len(),
        troubles.join("\n")
    );
}

/// The good thick spectrum's text.
fn good() -> String {
    Pair::default().csv().0
}

/// The good text with its line `number` (from 1) replaced.
fn with_line(number: usize, line: &str) -> String {
    let text = good();
    let mut lines: Vec<&str> = text.lines().collect();
    lines[number - 1] = line;
    lines.join("\n") + "\n"
}

#[test]
fn files_that_hold_no_spectrum() {
    let velocity = Pair::default().velocity_km_s();
    let blank = csv(&velocity, &vec![f64::NAN; velocity.len()]);
    let constant = csv(&velocity, &vec![1.25; velocity.len()]);
    check(&[
        case("missing file")
            .run(&[
                "fit",
                "--thick",
                "tick.csv",
                "--thin",
                "thin.csv",
                "--thick-line",
                "HCO+ 1-0",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&["tick.csv", "no such file"]),
        case("a folder in a file's place")
            .run(&[
                "fit",
                "--thick",
                ".",
                "--thin",
                "thin.csv",
                "--thick-line",
                "HCO+ 1-0",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&["cannot be read"]),
        case("empty file")
            .thick("")
            .says(&["thick.csv", "empty", "expected a spectrum"]),
        case("only comments")
            .thick("# one\n# two\n")
            .says(&["thick.csv", "no rows", "expected"]),
        case("only column names")
            .thick("velocity_km_s,tmb_k\n")
            .says(&["thick.csv", "no rows", "expected"]),
        case("one channel")
            .thick("velocity_km_s,tmb_k\n1,2\n")
            .says(&["thick.csv", "1 channel", "expected at least two"]),
        case("one column").thick("tmb_k\n1\n2\n3\n").says(&[
            "thick.csv:1",
            "one column (`tmb_k`)",
            "expected two",
        ]),
        case("all blank").thick(blank).says(&[
            "thick.csv",
            "all 291 channels are blank",
            "expected numbers",
        ]),
        case("constant").thick(constant).says(&[
            "thick.csv",
            "all 291 channels hold 1.25",
            "expected",
        ]),
        case("random bytes")
            .thick(
                (0..4000u32)
                    .map(|i| (i.wrapping_mul(2_654_435_761) >> 24) as u8 | 0x80)
                    .collect::<Vec<u8>>(),
            )
            .says(&["thick.csv", "expected FITS", "text"]),
        case("an empty .gz")
            .file("thick.csv.gz", "")
            .run(&[
                "fit",
                "--thick",
                "thick.csv.gz",
                "--thin",
                "thin.csv",
                "--thick-line",
                "HCO+ 1-0",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&["thick.csv.gz", "empty", "expected a spectrum"]),
        case("a broken .gz")
            .thick(b"\x1f\x8b\x08\x00\x00\x00\x00\x00\x00\x03\x01\x02\x03".to_vec())
            .says(&["thick.csv", "damaged gzip", "expected a whole .gz file"]),
    ]);
}

#[test]
fn text_that_is_not_as_it_should_be() {
    let mut repeated = good();
    repeated = repeated.replace("\n-6.9000,", "\n-7.0000,");
    check(&[
        case("text in a number's place")
            .thick(with_line(12, "-6.0000,bad"))
            .says(&["thick.csv:12: `bad` in column `tmb_k`", "expected a number"]),
        case("text in a velocity's place")
            .thick(with_line(5, "minus,0.1"))
            .says(&[
                "thick.csv:5: `minus` in column `velocity_km_s`",
                "expected a number",
            ]),
        case("a row with a field too many")
            .thick(with_line(12, "-6.0000,0.01,3"))
            .says(&["thick.csv:12", "3 fields", "expected 2"]),
        case("decimal commas between semicolons")
            .thick("velocity_km_s;tmb_k\n1,5;0,25\n1,6;0,26\n")
            .says(&[
                "thick.csv:2",
                "`1,5`",
                "decimal comma",
                "expected a decimal point",
                "\nhint: write 1.5",
            ]),
        case("decimal commas between commas")
            .thick("velocity_km_s,tmb_k\n1,5,0,25\n1,6,0,26\n")
            .says(&["thick.csv:2", "decimal comma", "expected a decimal point"]),
        case("semicolons and commas")
            .thick("velocity_km_s;tmb_k,x\n1;2,3\n")
            .says(&["thick.csv:1", "both `;` and `,`", "expected one separator"]),
        case("unsorted velocities")
            .thick(with_line(20, "3.0000,0.01"))
            .says(&[
                "thick.csv:21: -5.1 after 3",
                "expected strictly ascending or descending",
            ]),
        case("repeated velocities").thick(repeated).says(&[
            "thick.csv:3: -7 repeats",
            "expected strictly ascending or descending",
        ]),
        case("a blank velocity")
            .thick(with_line(9, ",0.01"))
            .says(&[
                "thick.csv:9",
                "blank velocity",
                "expected a number in every channel",
            ]),
        case("unknown unit in a name")
            .thick(good().replace("velocity_km_s", "velocity_mph"))
            .says(&["thick.csv:1", "velocity_mph", "expected", "velocity_km_s"]),
        case("unknown unit of temperature")
            .thick(good().replace("tmb_k", "tmb [kelvins]"))
            .says(&[
                "thick.csv:1",
                "unknown unit `kelvins`",
                "expected one of K, ",
            ]),
        case("unknown unit in an ECSV header")
            .thick(std::fs::read("tests/data/read/text_unknown_unit.ecsv").unwrap())
            .says(&["thick.csv:7", "unknown unit `mJy`", "expected one of"]),
        case("columns without names")
            .thick("1 2\n2 3\n3 1\n")
            .says(&[
                "thick.csv:1",
                "2 columns without names",
                "expected column names",
                "\nhint: ",
                "--columns",
            ]),
        case("a chosen column that is not there")
            .with(&["--columns", "velocity_km_s:km/s,tbm_k:K"])
            .says(&[
                "thick.csv",
                "tbm_k",
                "expected",
                "\nhint: did you mean `tmb_k`?",
            ]),
        case("text that is not UTF-8")
            .thick(b"# na\xefve\nvelocity_km_s,tmb_k\n1,2\n2,3\n".to_vec())
            .says(&["thick.csv:1: byte 0xef", "expected text in UTF-8"]),
    ]);
}

#[test]
fn lines_that_do_not_fit_the_files() {
    let by_frequency = |line_ghz: f64| {
        let mut text = String::from("frequency_ghz,tmb_k\n");
        let pair = Pair::default();
        for (v, t) in pair.velocity_km_s().iter().zip(pair.temperature_k().0) {
            text += &format!("{:.9},{t:.5}\n", line_ghz * (1.0 - v / 299_792.458));
        }
        text
    };
    let far = Pair {
        first_km_s: 100.0,
        thick: vec![114.35, 0.62, 0.45, 4.0, 16.0],
        thin: vec![114.35, 0.62, 0.118, 11.0],
        ..Pair::default()
    };
    let bright_thin = Pair {
        thin: vec![7.35, 0.62, 3.0, 40.0],
        ..Pair::default()
    };
    let (few, few_thin) = (Pair {
        channels: 60,
        first_km_s: -7.0,
        channel_km_s: 0.5,
        ..Pair::default()
    })
    .csv();
    check(&[
        case("unknown line")
            .run(&[
                "fit",
                "--thick",
                "thick.csv",
                "--thin",
                "thin.csv",
                "--thick-line",
                "HCOO 1-0",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&[
                "unknown line `HCOO 1-0`",
                "expected a species and its states",
                "\nhint: ",
                "HCO+ 1-0",
            ]),
        case("a species without its states")
            .run(&[
                "fit",
                "--thick",
                "thick.csv",
                "--thin",
                "thin.csv",
                "--thick-line",
                "HCO+",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&["`HCO+` names a species", "expected a transition of it"]),
        case("a transition that is not built in")
            .run(&[
                "fit",
                "--thick",
                "thick.csv",
                "--thin",
                "thin.csv",
                "--thick-line",
                "HCO+ 9-8",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&[
                "`HCO+ 9-8` is not built in",
                "expected a known transition of HCO+",
            ]),
        case("no line")
            .run(&[
                "fit",
                "--thick",
                "thick.csv",
                "--thin",
                "thin.csv",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&["no name of the thick line", "expected", "--thick-line"]),
        case("no thin file")
            .run(&[
                "fit",
                "--thick",
                "thick.csv",
                "--thick-line",
                "HCO+ 1-0",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&["no file of the thin line", "expected", "--thin"]),
        case("line outside the band")
            .thick(by_frequency(93.1737))
            .says(&[
                "thick.csv",
                "the band 93.16",
                "from the line at 89.18",
                "expected the line inside",
            ]),
        case("swapped by the frequency axis")
            .thick(by_frequency(86.754_288_4))
            .thin(by_frequency(89.188_524_7))
            .says(&[
                "thick.csv",
                "the band 86.7",
                "expected the line inside",
                "\nhint: ",
                "swap",
            ]),
        case("swapped by name")
            .run(&[
                "fit",
                "--thick",
                "thick.csv",
                "--thin",
                "thin.csv",
                "--thick-line",
                "H13CO+ 1-0",
                "--thin-line",
                "HCO+ 1-0",
            ])
            .says(&[
                "H13CO+ 1-0 as the thick line of HCO+ 1-0",
                "swapped",
                "\nhint: exchange",
            ]),
        case("swapped by brightness")
            .thin(bright_thin.csv().1)
            .says(&[
                "thick.csv: HCO+ 1-0 peaks at",
                "thin.csv H13CO+ 1-0",
                "swapped",
                "\nhint: exchange",
            ]),
        case("swapped files")
            .run(&[
                "fit",
                "--thick",
                "thin.csv",
                "--thin",
                "thick.csv",
                "--thick-line",
                "HCO+ 1-0",
                "--thin-line",
                "H13CO+ 1-0",
            ])
            .says(&[
                "thin.csv: HCO+ 1-0 peaks at",
                "thick.csv H13CO+ 1-0",
                "swapped",
                "\nhint: exchange",
            ]),
        case("no common velocities").thin(far.csv().1).says(&[
            "thick.csv and thin.csv: thick line covers -7",
            "thin line 100",
            "expected common velocities",
        ]),
        case("fewer channels than parameters")
            .thick(few)
            .thin(few_thin)
            .with(&["--range-km-s", "7.0,8.0"])
            .says(&[
                "thick.csv and thin.csv: 3 channels for the 7 parameters of the two-layer model",
                "expected more channels",
            ]),
        case("far fewer channels than a baseline needs")
            .thick("velocity_km_s,tmb_k\n1,0.1\n2,3\n3,0.3\n4,0.1\n")
            .says(&["thick.csv", "line-free channels", "expected at least"]),
        case("window outside the band")
            .with(&["--window-km-s", "50,60"])
            .says(&[
                "thick.csv",
                "line window 50 to 60 km/s",
                "expected a range within the band -7.000 to 22.000 km/s",
            ]),
        case("window the wrong way round")
            .with(&["--window-km-s", "10,5"])
            .says(&["window_km_s", "[10, 5]", "the lower first"]),
        case("noise only")
            .thick(csv(
                &Pair::default().velocity_km_s(),
                &Pair {
                    noise_k: (0.06, 0.03),
                    thick: vec![7.35, 0.62, 0.45, 0.02, 2.73],
                    ..Pair::default()
                }
                .temperature_k()
                .0,
            ))
            .thin(csv(
                &Pair::default().velocity_km_s(),
                &Pair {
                    thin: vec![7.35, 0.62, 0.001, 2.73],
                    ..Pair::default()
                }
                .temperature_k()
                .1,
            ))
            .says(&["thick.csv", "no line found", "sigma, expected"]),
        case("a model without noise")
            .thick(csv(
                &Pair::default().velocity_km_s(),
                &Pair {
                    noise_k: (0.0, 0.0),
                    ..Pair::default()
                }
                .temperature_k()
                .0,
            ))
            .says(&["thick.csv", "no noise", "expected noise"]),
    ]);
}

#[test]
fn scales_that_cannot_be() {
    const FITS: &[&str] = &[
        "fit",
        "--thick",
        "thick.fits",
        "--thin",
        "thin.csv",
        "--thick-line",
        "HCO+ 1-0",
        "--thin-line",
        "H13CO+ 1-0",
    ];
    let fits = |name: &'static str, changes: &[(&str, &str)]| {
        case(name).file("thick.fits", image(changes)).run(FITS)
    };
    let antenna = good().replace("tmb_k", "ta_k");
    check(&[
        fits("topocentric frame", &[("SPECSYS", "'TOPOCENT'")]).says(&[
            "thick.fits",
            "in the frame TOPOCENT",
            "expected LSRK",
            "\nhint: ",
            "--frame-offset-km-s",
        ]),
        fits(
            "negative beam",
            &[
                ("BUNIT", "'Jy/beam '"),
                ("BMAJ", "-0.01"),
                ("BMIN", "-0.01"),
                ("RESTFRQ", "89188524700.0"),
            ],
        )
        .says(&[
            "thick.fits",
            "a beam of -36 x -36 arcsec",
            "expected full widths above 0",
            "\nhint: BMAJ",
        ]),
        fits(
            "beam in arcsec in the file",
            &[
                ("BUNIT", "'Jy/beam '"),
                ("BMAJ", "33.0"),
                ("BMIN", "33.0"),
                ("RESTFRQ", "89188524700.0"),
            ],
        )
        .says(&["thick.fits", "118800", "expected", "7200 arcsec"]),
        fits(
            "Jy/beam without a beam",
            &[("BUNIT", "'Jy/beam '"), ("RESTFRQ", "89188524700.0")],
        )
        .says(&["thick.fits", "Jy/beam and no beam", "expected"]),
        case("negative beam option")
            .with(&["--thick-beam-arcsec", "-30"])
            .says(&["thick.csv", "-30", "expected full widths above 0"]),
        case("absurd beam option")
            .with(&["--thick-beam-arcsec", "30000"])
            .says(&["thick.csv", "30000", "expected full widths", "7200"]),
        case("eta_mb of 0")
            .thick(antenna.clone())
            .with(&["--thick-eta-mb", "0"])
            .says(&[
                "thick.csv",
                "eta_mb = 0",
                "expected a main-beam efficiency in (0, 1]",
            ]),
        case("eta_mb in per cent")
            .thick(antenna.clone())
            .with(&["--thick-eta-mb", "81"])
            .says(&["thick.csv", "eta_mb = 81", "(0, 1]", "\nhint: ", "0.81"]),
        case("negative eta_mb")
            .thick(antenna.clone())
            .with(&["--thick-eta-mb", "-0.8"])
            .says(&["thick.csv", "eta_mb = -0.8", "(0, 1]"]),
        case("eta_mb that is no number")
            .with(&["--thick-eta-mb", "NaN"])
            .says(&["NaN", "expected"]),
        case("T_A* without eta_mb").thick(antenna).says(&[
            "thick.csv",
            "T_A* and no eta_mb",
            "expected a main-beam efficiency",
            "\nhint: ",
            "--thick-eta-mb",
        ]),
        case("rest frequency in MHz")
            .with(&["--thick-rest-freq-ghz", "89188.5247"])
            .says(&[
                "thick line",
                "89188.5247 GHz",
                "expected",
                "\nhint: ",
                "GHz",
            ]),
    ]);
}

#[test]
fn fits_files_that_are_damaged() {
    const FITS: &[&str] = &[
        "fit",
        "--thick",
        "thick.fits",
        "--thin",
        "thin.csv",
        "--thick-line",
        "HCO+ 1-0",
        "--thin-line",
        "H13CO+ 1-0",
    ];
    let fits = |name: &'static str, bytes: Vec<u8>| case(name).file("thick.fits", bytes).run(FITS);
    let whole = image(&[]);
    check(&[
        fits("truncated data", whole[..2880 + 1000].to_vec()).says(&[
            "thick.fits: HDU 0",
            "need 2328 bytes",
            "holds 1000",
            "expected a whole file",
        ]),
        fits("truncated header", whole[..700].to_vec()).says(&[
            "thick.fits: HDU 0: 8 cards and no END",
            "expected an END card",
        ]),
        fits("NAXIS1 = 1e12", image(&[("NAXIS1", "1000000000000")])).says(&[
            "thick.fits: HDU 0",
            "NAXIS1",
            "1000000000000",
            "expected",
        ]),
        fits("NAXIS1 = 1e12 as a real", image(&[("NAXIS1", "1E12")]))
            .says(&["thick.fits: HDU 0, card NAXIS1", "expected"]),
        fits("NAXIS = -1", image(&[("NAXIS", "-1")])).says(&[
            "thick.fits: HDU 0, card NAXIS",
            "-1",
            "expected",
        ]),
        fits("TFIELDS = -1", table(&[("TFIELDS", "-1")])).says(&[
            "thick.fits: HDU 1, card TFIELDS",
            "-1",
            "expected",
        ]),
        fits("TFORM of another width", table(&[("TFORM2", "'7D      '")])).says(&[
            "thick.fits: HDU 1",
            "NAXIS1",
            "expected",
        ]),
        fits("BITPIX = 7", image(&[("BITPIX", "7")]))
            .says(&["thick.fits: HDU 0, card BITPIX: 7", "expected"]),
        fits("missing END", image(&[("END", "-")])).says(&[
            "thick.fits: HDU 0: byte 0x",
            "in card 37",
            "up to an END card",
        ]),
        fits(
            "missing END before no data",
            image(&[("END", "-")])[..2880].to_vec(),
        )
        .says(&[
            "thick.fits: HDU 0: 36 cards and no END",
            "expected an END card",
        ]),
        fits("no spectral axis", image(&[("CTYPE1", "'RA---SIN'")])).says(&[
            "thick.fits: HDU 0, card CTYPE1",
            "RA---SIN",
            "expected FREQ, VRAD, VOPT or VELO",
        ]),
        fits(
            "no axis at all",
            image(&[("CTYPE1", "-"), ("CRVAL1", "-"), ("CDELT1", "-")]),
        )
        .says(&["thick.fits: HDU 0", "expected"]),
        fits("CDELT1 = 0", image(&[("CDELT1", "0.0")])).says(&[
            "thick.fits: HDU 0, card CDELT1",
            "0",
            "expected",
        ]),
        fits(
            "unknown unit of the axis",
            image(&[("CUNIT1", "'furlong '")]),
        )
        .says(&[
            "thick.fits: HDU 0, card CUNIT1",
            "unknown unit `furlong`",
            "expected one of",
        ]),
        fits(
            "unknown unit of the values",
            image(&[("BUNIT", "'Kelvins '")]),
        )
        .says(&[
            "thick.fits: HDU 0, card BUNIT",
            "unknown unit `Kelvins`",
            "expected one of",
        ]),
        fits("no unit of the values", image(&[("BUNIT", "-")])).says(&[
            "thick.fits: HDU 0",
            "BUNIT",
            "no unit",
            "expected one of",
        ]),
        fits("random bytes called .fits", vec![0xa7; 5760]).says(&["thick.fits", "expected FITS"]),
        fits("text called .fits", good().into_bytes()).says(&[
            "thick.fits",
            "`velocity_km_s,tmb_k`",
            "expected FITS",
            "\nhint: ",
            ".csv",
        ]),
    ]);
}

const SHEET: &str = "[thick]\nline = \"HCO+ 1-0\"\nfile = \"thick.csv\"\n\n[thin]\nline = \"H13CO+ 1-0\"\nfile = \"thin.csv\"\n";

#[test]
fn run_sheets_that_are_none() {
    let plus = |text: &str| format!("{SHEET}{text}");
    check(&[
        case("missing run sheet")
            .run(&["fit", "pear.toml"])
            .says(&["pear.toml", "no such file"]),
        case("unknown key")
            .sheet(&SHEET.replace("file = \"thin.csv\"", "flie = \"thin.csv\""))
            .says(&[
                "pair.toml:7",
                "the key `flie`",
                "expected one of",
                "\nhint: did you mean `file`?",
            ]),
        case("unknown section")
            .sheet(&plus("[prepair]\nbaseline_order = 1\n"))
            .says(&[
                "pair.toml:8",
                "the key `prepair`",
                "expected one of",
                "\nhint: did you mean `prepare`?",
            ]),
        case("text for a number")
            .sheet(&plus("[prepare]\nclip_sigma = \"three\"\n"))
            .says(&["pair.toml:9", "\"three\"", "expected"]),
        case("number for a text")
            .sheet(&SHEET.replace("\"HCO+ 1-0\"", "89.19"))
            .says(&["pair.toml:2", "89.19", "expected"]),
        case("a list for a number or pair")
            .sheet(&SHEET.replace(
                "file = \"thick.csv\"",
                "file = \"thick.csv\"\nrest_freq_ghz = [89.1, 0.1, 3.0]",
            ))
            .says(&["pair.toml:4", "expected a number, or [value, error]"]),
        case("unknown property of the source")
            .sheet(&plus("[source]\nmass_sun = 350\n"))
            .says(&[
                "pair.toml:9",
                "the key `mass_sun`",
                "\nhint: did you mean `mass_msun`?",
            ]),
        case("negative mass")
            .sheet(&plus("[source]\nmass_msun = -350\n"))
            .says(&[
                "pair.toml: mass_msun: -350 Msun",
                "it is positive",
                "\nhint: give mass_msun in Msun",
            ]),
        case("negative error")
            .sheet(&plus("[source]\nradius_pc = [0.3, -0.1]\n"))
            .says(&[
                "pair.toml: radius_pc: 0.3 with an error of -0.1",
                "\nhint: ",
            ]),
        case("too few draws")
            .sheet(&plus("[derive]\ndraws = 3\n"))
            .says(&["pair.toml: 3 draws, expected 100 to 1000000", "\nhint: "]),
        case("the same by check")
            .file("source.toml", plus("[source]\nt_kin_k = 1e6\n"))
            .run(&["check", "source.toml"])
            .says(&[
                "source.toml: t_kin_k: 1000000 K",
                "molecules are dissociated",
            ]),
        case("a word for a window")
            .sheet(&plus("[prepare]\nwindow_km_s = \"wide\"\n"))
            .says(&["pair.toml:9", "\"wide\"", "expected"]),
        case("missing file key")
            .sheet(&SHEET.replace("file = \"thin.csv\"\n", ""))
            .says(&[
                "pair.toml: no file of the thin line",
                "expected `[thin] file`",
            ]),
        case("missing line key")
            .sheet(&SHEET.replace("line = \"HCO+ 1-0\"\n", ""))
            .says(&[
                "pair.toml: no name of the thick line",
                "expected `[thick] line`",
            ]),
        case("a spectrum for a run sheet")
            .run(&["fit", "thick.csv"])
            .says(&["thick.csv:1", "expected", "\nhint: ", "--thick"]),
        case("not TOML")
            .sheet("[thick\nline = 3\n")
            .says(&["pair.toml:1", "expected"]),
        case("no UTF-8")
            .file("pair.toml", vec![0xff, 0xfe, 0x00])
            .run(&["fit", "pair.toml"])
            .says(&["pair.toml", "UTF-8", "expected a run sheet"]),
        case("a key twice")
            .sheet(&plus("line = \"HCO+ 1-0\"\n"))
            .says(&["pair.toml:8", "the key `line` twice", "expected it once"]),
        case("unknown model")
            .sheet(&plus("[fit]\nmodels = [\"hil\"]\n"))
            .says(&[
                "models",
                "`hil`",
                "expected one of",
                "\nhint: did you mean `hill`?",
            ]),
        case("no model")
            .sheet(&plus("[fit]\nmodels = []\n"))
            .says(&["fit.models", "expected at least one"]),
        case("baseline order 4")
            .sheet(&plus("[prepare]\nbaseline_order = 4\n"))
            .says(&["baseline order 4", "expected 0 to 3"]),
        case("baseline order in words")
            .sheet(&plus("[prepare]\nbaseline_order = \"cubic\"\n"))
            .says(&["baseline_order", "`cubic`", "expected 0 to 3 or \"none\""]),
        case("negative smoothing")
            .sheet(&plus("[prepare]\nsmooth_to_km_s = -0.3\n"))
            .says(&["-0.3", "expected"]),
        case("a sheet's file that is missing")
            .sheet(&SHEET.replace("thin.csv", "thn.csv"))
            .says(&["thn.csv", "no such file"]),
        case("unknown parameter")
            .sheet(&plus("[fit.given]\ntaus = 3\n"))
            .says(&["`taus`", "expected one of", "\nhint: did you mean `tau`?"]),
    ]);
}

#[test]
fn options_that_cannot_be() {
    check(&[
        case("no arguments").run(&["fit"]).says(&["no name of the thick line", "expected"]),
        case("radius of a kiloparsec").with(&["--radius-pc", "1000"]).says(&["radius_pc: 1000 pc", "expected 0.00001 to 300 pc", "no molecular cloud is as large", "\nhint: "]),
        case("kinetic temperature of a corona").with(&["--t-kin-k", "1e6"]).says(&["t_kin_k: 1000000 K", "molecules are dissociated", "\nhint: "]),
        case("field of a tesla").with(&["--field-ug", "1e10"]).says(&["field_ug: 10000000000 uG", "less than a gauss", "\nhint: give field_ug in uG"]),
        case("distance of parsecs as kiloparsecs").with(&["--distance-kpc", "1900,200"]).says(&["distance_kpc: 1900 kpc", "megaparsec", "\nhint: give distance_kpc in kpc"]),
        case("density slope without a mass").with(&["--density-slope", "3"]).says(&["density_slope: 3", "infinite", "\nhint: "]),
        case("density that rises outward").with(&["--density-slope", "-1"]).says(&["density_slope: -1", "rise outward", "\nhint: "]),
        case("angles beyond random ones").with(&["--angle-dispersion-deg", "70"]).says(&["angle_dispersion_deg: 70 deg", "without any order", "\nhint: "]),
        case("dust hotter than dust").with(&["--dust-temperature-k", "5000"]).says(&["dust_temperature_k: 5000 K", "sublimates", "\nhint: "]),
        case("gas colder than the background").with(&["--t-kin-k", "1.5"]).says(&["t_kin_k: 1.5 K", "background", "\nhint: "]),
        case("negative mass of an option").with(&["--mass-msun", "-350,90"]).says(&["mass_msun: -350 Msun", "it is positive", "\nhint: "]),
        case("negative error of an option").with(&["--mass-msun", "350,-90"]).says(&["mass_msun: 350 with an error of -90", "\nhint: "]),
        case("an error that says nothing is known").with(&["--mass-msun", "350,9000"]).says(&["mass_msun: 350 with an error of 9000", "expected an error of 0 to 3500", "\nhint: "]),
        case("no number of a mass").with(&["--mass-msun", "heavy"]).says(&["--mass-msun", "`heavy`, expected a number"]),
        case("unknown option").with(&["--thik", "x"]).says(&["--thik", "\nhint: ", "--thick"]),
        case("unknown command").run(&["fot"]).says(&["fot", "\nhint: ", "fit"]),
        case("a number that is none").with(&["--window-km-s", "4,x"]).says(&["`x`", "expected"]),
        case("one number of two").with(&["--window-km-s", "4"]).says(&["--window-km-s", "expected LOW,HIGH"]),
        case("given without a value").with(&["--given", "tau"]).says(&["'tau'", "--given", "expected NAME=VALUE"]),
        case("given twice a comma").with(&["--given", "tau=1,2,3"]).says(&["--given", "expected VALUE or VALUE,ERR"]),
        case("given unknown").with(&["--given", "tua=1"]).says(&["`tua`", "expected one of", "\nhint: did you mean `tau`?"]),
        case("given outside the bounds").with(&["--given", "tau=-3"]).says(&["tau", "-3", "expected a value from 0.1 to 200"]),
        case("negative error").with(&["--given", "tau=3,-1"]).says(&["tau", "-1", "expected"]),
        case("empty bounds").with(&["--bounds", "tau=5,1"]).says(&["bounds 5 to 1 of tau", "expected the lower below the upper"]),
        case("bounds of nothing").with(&["--bounds", "tauu=1,5"]).says(&["`tauu`", "\nhint: did you mean `tau`?"]),
        case("bounds beyond physics").with(&["--bounds", "tau=-5,5"]).says(&["bounds -5 to 5 of tau", "expected positive numbers"]),
        case("given of a model that is not chosen").with(&["--given", "filling=0.1"])
            .says(&["parameter `filling`, expected one of the chosen models': v_lsr_km_s", "\nhint: choose the model"]),
        case("a continuum source that nothing determines").with(&["--models", "hill,two-layer-continuum"])
            .says(&["two-layer-continuum model without filling and t_continuum_k, expected", "given", "\nhint: ", "--given filling="]),
        case("a continuum source of open temperature").with(&["--models", "two-layer-continuum", "--given", "filling=0.1", "--bounds", "t_continuum_k=20,60"])
            .says(&["two-layer-continuum model without t_continuum_k, expected filling and t_continuum_k given"]),
        case("isotope ratio below 1").with(&["--isotope-ratio", "0.02"]).says(&["isotope_ratio", "0.02", "expected", "at least 1"]),
        case("isotope ratio without optical depth").with(&["--isotope-ratio", "60", "--models", "gaussian"]).says(&["isotope ratio", "gaussian", "expected"]),
        case("unknown model").with(&["--models", "hill,two-layers"]).says(&["models", "`two-layers`", "expected one of", "\nhint: did you mean `two-layer`?"]),
        case("smoothing to finer channels").with(&["--smooth-to-km-s", "0.01"]).says(&["smoothing to 0.01 km/s", "expected at least the channel width 0.1"]),
        case("smoothing to the whole band").with(&["--smooth-to-km-s", "100"]).says(&["smoothing to 100 km/s", "expected"]),
        case("range without channels").with(&["--range-km-s", "500,600"]).says(&["0 channels", "expected"]),
        case("a range word").with(&["--range-km-s", "some"]).says(&["some", "expected"]),
        case("threads of 0").with(&["--threads", "0"]).says(&["'0'", "--threads"]),
        case("a seed that is none").with(&["--seed", "-1"]).says(&["'-1'", "--seed"]),
        case("columns without a unit").with(&["--columns", "1,2"]).says(&["columns", "1", "expected"]),
        case("a row of a text").with(&["--thick-row", "3"]).says(&["thick.csv", "a choice of a row (`3`)", "no table"]),
        case("an offset in LSRK").with(&["--frame-offset-km-s", "2000"]).says(&["thick.csv", "2000 km/s", "expected"]),
    ]);
}

#[test]
fn output_directories_that_cannot_be() {
    check(&[
        case("--out is a file")
            .file("results.txt", "mine")
            .with(&["--out", "results.txt"])
            .says(&["results.txt", "expected a directory"]),
        case("--out below a file")
            .file("results.txt", "mine")
            .with(&["--out", "results.txt/a/b"])
            .says(&["results.txt", "expected a directory"]),
    ]);
}

/// Root may write anywhere; the system's own read-only places stay closed to it too.
#[test]
fn an_output_directory_that_cannot_be_made() {
    let folder = Folder::with_pair();
    let run = folder.fit(&["--out", "/proc/inrush-results"]);
    assert_eq!(run.code, 2, "{}", run.stderr);
    assert!(run.stdout.is_empty());
    assert!(
        run.stderr.contains("error: /proc/inrush-results: "),
        "{}",
        run.stderr
    );
    assert!(run.stderr.contains("\nhint: "), "{}", run.stderr);
}

/// A product that cannot be written leaves none of the others half written.
#[test]
fn a_product_that_cannot_be_written_leaves_no_temporary_file() {
    let folder = Folder::with_pair();
    std::fs::create_dir_all(folder.path().join("results/pair.fits/in-the-way")).unwrap();
    let run = folder.fit(&["--out", "results"]);
    assert_eq!(run.code, 2, "{}", run.stderr);
    assert!(run.stdout.is_empty());
    assert!(
        run.stderr.contains("pair.fits: cannot be written"),
        "{}",
        run.stderr
    );
    assert!(run.stderr.contains("\nhint: "), "{}", run.stderr);
    let left = folder.files();
    assert!(
        !left.iter().any(|name| name.contains("unfinished")),
        "{left:?}"
    );
}

/// The results of the good pair, and of the same pair in another disguise of the same text.
#[test]
fn crlf_and_byte_order_mark_are_accepted() {
    let plain = Folder::with_pair().fit(&["--json"]);
    assert_eq!(plain.code, 0, "{}", plain.stderr);
    let (thick, thin) = Pair::default().csv();
    for (name, disguise) in [
        (
            "CRLF",
            (|text: &str| text.replace('\n', "\r\n")) as fn(&str) -> String,
        ),
        ("byte-order mark", |text| format!("\u{feff}{text}")),
        ("both", |text| {
            format!("\u{feff}{}", text.replace('\n', "\r\n"))
        }),
        ("CR", |text| text.replace('\n', "\r")),
        ("semicolons", |text| text.replace(',', ";")),
        ("no newline at the end", |text| text.trim_end().to_owned()),
        ("empty lines at the end", |text| format!("{text}\n\n")),
    ] {
        let folder = Folder::new();
        folder.write("thick.csv", disguise(&thick).as_bytes());
        folder.write("thin.csv", disguise(&thin).as_bytes());
        let run = folder.fit(&["--json"]);
        assert_eq!(run.code, 0, "{name}: {}", run.stderr);
        assert_eq!(run.stdout, plain.stdout, "{name}");
    }
}

#[test]
fn a_run_sheet_with_crlf_and_byte_order_mark_is_accepted() {
    let folder = Folder::with_pair();
    folder.write("pair.toml", SHEET.as_bytes());
    let plain = folder.inrush(&["fit", "pair.toml", "--json"]);
    assert_eq!(plain.code, 0, "{}", plain.stderr);
    folder.write(
        "pair.toml",
        format!("\u{feff}{}", SHEET.replace('\n', "\r\n")).as_bytes(),
    );
    let run = folder.inrush(&["fit", "pair.toml", "--json"]);
    assert_eq!((run.code, run.stdout), (0, plain.stdout), "{}", run.stderr);
}
