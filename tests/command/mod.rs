//! The binary in a folder of its own, and small invented spectra to feed it.

#![allow(dead_code, clippy::unwrap_used)] // every test file uses its part; test support

use inrush::line::find;
use inrush::model::{LineShape, Model, Sampling};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal};
use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

/// What a run of the binary left.
pub struct Run {
    pub code: i32,
    pub stdout: String,
    pub stderr: String,
}

/// A folder that goes away with its value.
pub struct Folder(tempfile::TempDir);

impl Folder {
    pub fn new() -> Self {
        Self(tempfile::tempdir().unwrap())
    }

    /// A folder with the invented pair as `thick.csv` and `thin.csv`.
    pub fn with_pair() -> Self {
        let folder = Self::new();
        let (thick, thin) = Pair::default().csv();
        folder.write("thick.csv", thick.as_bytes());
        folder.write("thin.csv", thin.as_bytes());
        folder
    }

    pub fn path(&self) -> &Path {
        self.0.path()
    }

    pub fn write(&self, name: &str, bytes: &[u8]) -> PathBuf {
        let path = self.path().join(name);
        std::fs::create_dir_all(path.parent().unwrap()).unwrap();
        std::fs::write(&path, bytes).unwrap();
        path
    }

    pub fn read(&self, name: &str) -> Vec<u8> {
        std::fs::read(self.path().join(name)).unwrap_or_else(|error| panic!("{name}: {error}"))
    }

    /// Every file below the folder, relative and sorted.
    pub fn files(&self) -> Vec<String> {
        fn walk(directory: &Path, base: &Path, found: &mut Vec<String>) {
            for entry in std::fs::read_dir(directory).unwrap() {
                let path = entry.unwrap().path();
                if path.is_dir() {
                    walk(&path, base, found);
                } else {
                    let name = path.strip_prefix(base).unwrap();
                    found.push(name.to_string_lossy().into_owned());
                }
            }
        }
        let mut found = Vec::new();
        walk(self.path(), self.path(), &mut found);
        found.sort();
        found
    }

    /// Runs the binary in the folder.
    pub fn inrush(&self, arguments: &[&str]) -> Run {
        self.inrush_in(".", arguments)
    }

    /// Runs the binary in a folder below this one.
    pub fn inrush_in(&self, below: &str, arguments: &[&str]) -> Run {
        let output = Command::new(env!("CARGO_BIN_EXE_inrush"))
            .args(arguments)
            .current_dir(self.path().join(below))
            .stdin(Stdio::null())
            .output()
            .unwrap();
        Run {
            code: output.status.code().expect("an exit code, not a signal"),
            stdout: String::from_utf8(output.stdout).expect("stdout in UTF-8"),
            stderr: String::from_utf8(output.stderr).expect("stderr in UTF-8"),
        }
    }

    /// Fits `thick.csv` and `thin.csv` as HCO+ and H13CO+ 1-0, with further arguments.
    pub fn fit(&self, arguments: &[&str]) -> Run {
        let mut all = PAIR.to_vec();
        all.extend(arguments);
        self.inrush(&all)
    }

    /// The same as one JSON object.
    pub fn fit_json(&self, arguments: &[&str]) -> serde_json::Map<String, serde_json::Value> {
        let mut all = arguments.to_vec();
        all.push("--json");
        let run = self.fit(&all);
        assert_eq!(run.code, 0, "{}", run.stderr);
        object(&run.stdout)
    }
}

pub fn object(text: &str) -> serde_json::Map<String, serde_json::Value> {
    match serde_json::from_str(text) {
        Ok(serde_json::Value::Object(object)) => object,
        other => panic!("no JSON object: {other:?} in {text}"),
    }
}

pub fn number(object: &serde_json::Map<String, serde_json::Value>, name: &str) -> f64 {
    object[name]
        .as_f64()
        .unwrap_or_else(|| panic!("{name} is {}", object[name]))
}

pub const PAIR: &[&str] = &[
    "fit",
    "--thick",
    "thick.csv",
    "--thin",
    "thin.csv",
    "--thick-line",
    "HCO+ 1-0",
    "--thin-line",
    "H13CO+ 1-0",
];

/// An invented pair with known truth: a hill and a thin layer or Gaussian, with white noise.
#[derive(Clone)]
pub struct Pair {
    pub thick_line: &'static str,
    pub thin_line: &'static str,
    pub thick_model: Model,
    pub thick: Vec<f64>,
    pub thin_model: Model,
    pub thin: Vec<f64>,
    pub first_km_s: f64,
    pub channel_km_s: f64,
    pub channels: usize,
    pub noise_k: (f64, f64),
    pub seed: u64,
}

impl Default for Pair {
    /// v_lsr 7.35 km/s, sigma 0.62 km/s, v_in 0.45 km/s (docs/demo-scenario.md).
    fn default() -> Self {
        Self {
            thick_line: "HCO+ 1-0",
            thin_line: "H13CO+ 1-0",
            thick_model: Model::Hill,
            thick: vec![7.35, 0.62, 0.45, 4.0, 16.0],
            thin_model: Model::Layer,
            thin: vec![7.35, 0.62, 0.118, 11.0],
            first_km_s: -7.0,
            channel_km_s: 0.1,
            channels: 291,
            noise_k: (0.06, 0.03),
            seed: 20,
        }
    }
}

impl Pair {
    pub fn velocity_km_s(&self) -> Vec<f64> {
        (0..self.channels)
            .map(|channel| self.first_km_s + self.channel_km_s * channel as f64)
            .collect()
    }

    /// Temperatures of the thick and the thin line, K.
    pub fn temperature_k(&self) -> (Vec<f64>, Vec<f64>) {
        let mut generator = ChaCha8Rng::seed_from_u64(self.seed);
        let mut one = |name: &str, model: Model, parameters: &[f64], noise_k: f64| {
            let line = find(name).unwrap();
            let shape = LineShape::new(line.rest_frequency_ghz, line.components);
            let widths = vec![self.channel_km_s; self.channels];
            let sampling = Sampling::new(self.velocity_km_s(), widths, 3);
            let mut value = vec![0.0; self.channels];
            model.evaluate(&shape, &sampling, parameters, &mut value, None);
            for value in &mut value {
                let deviate: f64 = StandardNormal.sample(&mut generator);
                *value += noise_k * deviate;
            }
            value
        };
        let thick = one(
            self.thick_line,
            self.thick_model,
            &self.thick,
            self.noise_k.0,
        );
        let thin = one(self.thin_line, self.thin_model, &self.thin, self.noise_k.1);
        (thick, thin)
    }

    pub fn csv(&self) -> (String, String) {
        let velocity = self.velocity_km_s();
        let (thick, thin) = self.temperature_k();
        (csv(&velocity, &thick), csv(&velocity, &thin))
    }

    pub fn folder(&self) -> Folder {
        let folder = Folder::new();
        let (thick, thin) = self.csv();
        folder.write("thick.csv", thick.as_bytes());
        folder.write("thin.csv", thin.as_bytes());
        folder
    }
}

/// `velocity_km_s,tmb_k`; a blank channel is empty.
pub fn csv(velocity_km_s: &[f64], temperature_k: &[f64]) -> String {
    let mut text = String::from("velocity_km_s,tmb_k\n");
    for (v, t) in velocity_km_s.iter().zip(temperature_k) {
        if t.is_nan() {
            let _ = writeln!(text, "{v:.4},");
        } else {
            let _ = writeln!(text, "{v:.4},{t:.5}");
        }
    }
    text
}

/// FITS header cards, padded to whole blocks; a text value is given with its quotes.
pub fn header(cards: &[(&str, &str)]) -> Vec<u8> {
    let mut text = String::new();
    for (keyword, value) in cards {
        let card = if value.is_empty() {
            (*keyword).to_owned()
        } else if value.starts_with('\'') {
            format!("{keyword:<8}= {value}")
        } else {
            format!("{keyword:<8}= {value:>20}")
        };
        let _ = write!(text, "{card:<80}");
    }
    padded(text.into_bytes(), b' ')
}

pub fn padded(mut bytes: Vec<u8>, with: u8) -> Vec<u8> {
    bytes.resize(bytes.len().div_ceil(2880) * 2880, with);
    bytes
}

/// Cards of a one-dimensional image of the invented pair's axis, with changes: a card of the same
/// keyword is replaced (removed where the value is `-`), another one added.
pub fn image_cards<'a>(changes: &[(&'a str, &'a str)]) -> Vec<(&'a str, &'a str)> {
    let mut cards = vec![
        ("SIMPLE", "T"),
        ("BITPIX", "-64"),
        ("NAXIS", "1"),
        ("NAXIS1", "291"),
        ("CTYPE1", "'VRAD    '"),
        ("CUNIT1", "'km/s    '"),
        ("CRVAL1", "-7.0"),
        ("CDELT1", "0.1"),
        ("CRPIX1", "1.0"),
        ("BUNIT", "'K       '"),
        ("SPECSYS", "'LSRK    '"),
        ("END", ""),
    ];
    for (keyword, value) in changes {
        let place = cards.iter().position(|card| card.0 == *keyword);
        match (place, *value) {
            (Some(place), "-") => {
                cards.remove(place);
            }
            (Some(place), value) => cards[place].1 = value,
            (None, value) => cards.insert(cards.len() - 1, (keyword, value)),
        }
    }
    cards
}

/// The thick line of the invented pair as a FITS image with changed cards.
pub fn image(changes: &[(&str, &str)]) -> Vec<u8> {
    let (thick, _) = Pair::default().temperature_k();
    let mut bytes = header(&image_cards(changes));
    let data: Vec<u8> = thick.iter().flat_map(|value| value.to_be_bytes()).collect();
    bytes.extend(padded(data, 0));
    bytes
}

/// A binary table of the thick line, one channel a row, with changed cards in its extension.
pub fn table(changes: &[(&str, &str)]) -> Vec<u8> {
    let mut bytes = header(&[
        ("SIMPLE", "T"),
        ("BITPIX", "8"),
        ("NAXIS", "0"),
        ("EXTEND", "T"),
        ("END", ""),
    ]);
    let mut cards = vec![
        ("XTENSION", "'BINTABLE'"),
        ("BITPIX", "8"),
        ("NAXIS", "2"),
        ("NAXIS1", "16"),
        ("NAXIS2", "291"),
        ("PCOUNT", "0"),
        ("GCOUNT", "1"),
        ("TFIELDS", "2"),
        ("TTYPE1", "'VELOCITY'"),
        ("TFORM1", "'1D      '"),
        ("TUNIT1", "'km/s    '"),
        ("TTYPE2", "'TMB     '"),
        ("TFORM2", "'1D      '"),
        ("TUNIT2", "'K       '"),
        ("END", ""),
    ];
    for (keyword, value) in changes {
        if let Some(card) = cards.iter_mut().find(|card| card.0 == *keyword) {
            card.1 = value;
        }
    }
    bytes.extend(header(&cards));
    let pair = Pair::default();
    let (thick, _) = pair.temperature_k();
    let data: Vec<u8> = pair
        .velocity_km_s()
        .iter()
        .zip(&thick)
        .flat_map(|(v, t)| [v.to_be_bytes(), t.to_be_bytes()].concat())
        .collect();
    bytes.extend(padded(data, 0));
    bytes
}
