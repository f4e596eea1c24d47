//! Levels, Einstein coefficients and collision rates of a molecule, from text in the format of the
//! Leiden Atomic and Molecular Database (Schöier et al. 2005, A&A 432, 369,
//! doi:10.1051/0004-6361:20041729).
//!
//! Reads text that someone else has fetched; opens no file. Rates between tabulated temperatures
//! are interpolated linearly, and outside keep the value of the nearest one.

use super::error::SphereError;
use crate::constants::{BOLTZMANN, PLANCK, SPEED_OF_LIGHT};
use std::str::FromStr;

/// An energy level.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Level {
    /// Energy above the lowest, over k, K.
    pub energy_k: f64,
    /// Statistical weight.
    pub weight: f64,
}

/// A radiative transition; levels count from 0.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Radiative {
    /// Upper level.
    pub upper: usize,
    /// Lower level.
    pub lower: usize,
    /// Einstein coefficient of spontaneous emission, s^-1.
    pub einstein_a_per_s: f64,
    /// Frequency, GHz.
    pub frequency_ghz: f64,
}

/// What molecules collide with.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Partner {
    /// Molecular hydrogen, ortho and para together.
    Hydrogen,
    /// Para-H2.
    ParaHydrogen,
    /// Ortho-H2.
    OrthoHydrogen,
    /// Electrons, hydrogen atoms, helium atoms or protons: read, not used.
    Other,
}

/// Rates of collisions with one partner.
#[derive(Clone, Debug, PartialEq)]
pub struct Collisions {
    /// The partner.
    pub partner: Partner,
    /// Temperatures of the rates, K, ascending.
    pub temperature_k: Vec<f64>,
    /// Upper and lower level, from 0, of each downward collision.
    pub levels: Vec<(usize, usize)>,
    /// Rates in cm^3 s^-1: one row a collision, one value a temperature.
    pub rates_cm3_per_s: Vec<f64>,
}

/// Molecular data.
#[derive(Clone, Debug, PartialEq)]
pub struct Molecule {
    /// Name as the file states it.
    pub name: String,
    /// Levels, lowest first.
    pub levels: Vec<Level>,
    /// Radiative transitions.
    pub radiative: Vec<Radiative>,
    /// Collisions, one entry a partner.
    pub collisions: Vec<Collisions>,
}

/// Names of [`Molecule::built_in`].
const BUILT_IN: [(&str, &str); 3] = [
    ("HCO+", include_str!("data/hco+.dat")),
    ("HCN", include_str!("data/hcn.dat")),
    ("CS", include_str!("data/cs.dat")),
];

/// Widest relative distance of a line's frequency from the one in the data file.
const FREQUENCY_TOLERANCE: f64 = 1e-4;

/// Share of H2 in its ortho form in thermal equilibrium at a temperature in K.
///
/// ortho/para = min(3, 9 exp(-170.5 K/T)), its two lowest levels; share = ratio/(1 + ratio).
#[must_use]
pub fn ortho_share(temperature_k: f64) -> f64 {
    let ratio = (9.0 * (-170.5 / temperature_k).exp()).min(3.0);
    ratio / (1.0 + ratio)
}

impl Molecule {
    /// The built-in data of a molecule: `HCO+`, `HCN` or `CS`.
    ///
    /// # Errors
    ///
    /// [`SphereError::NotBuiltIn`] for any other name.
    ///
    /// ```
    /// let molecule = inrush::sphere::Molecule::built_in("HCO+")?;
    /// assert_eq!(molecule.levels.len(), 31);
    /// assert_eq!(molecule.radiative[0].einstein_a_per_s, 4.2512e-5);
    /// # Ok::<(), inrush::sphere::SphereError>(())
    /// ```
    pub fn built_in(name: &str) -> Result<Self, SphereError> {
        let (name, text) = BUILT_IN
            .iter()
            .find(|(known, _)| *known == name)
            .ok_or_else(|| SphereError::NotBuiltIn {
                found: name.to_owned(),
                known: "HCO+, HCN, CS",
            })?;
        Self::parse(text, name)
    }

    /// Molecular data in LAMDA format; `file` is the name that errors show.
    ///
    /// # Errors
    ///
    /// [`SphereError::Molecule`] with the line, what stands there and what was expected.
    pub fn parse(text: &str, file: &str) -> Result<Self, SphereError> {
        let mut lines = Lines {
            file,
            rest: text.lines(),
            number: 0,
            current: "",
        };
        lines.comment("a comment line that starts with `!`")?;
        let name = lines.next("the name of the molecule")?.trim().to_owned();
        lines.comment("a comment line before the molecular weight")?;
        let weight: f64 = lines.first("the molecular weight")?;
        lines.require(weight > 0.0, "a molecular weight above 0")?;
        lines.comment("a comment line before the number of levels")?;
        let levels = lines.levels()?;
        lines.comment("a comment line before the number of radiative transitions")?;
        let radiative = lines.radiative(levels.len())?;
        lines.comment("a comment line before the number of collision partners")?;
        let partners: usize = lines.first("the number of collision partners")?;
        lines.require((1..=9).contains(&partners), "1 to 9 collision partners")?;
        let collisions = (0..partners)
            .map(|_| lines.collisions(levels.len()))
            .collect::<Result<_, _>>()?;
        Ok(Self {
            name,
            levels,
            radiative,
            collisions,
        })
    }

    /// The radiative transition at a frequency in GHz, within 1e-4 of it.
    ///
    /// # Errors
    ///
    /// [`SphereError::NoTransition`] where there is none.
    pub fn transition_at(&self, frequency_ghz: f64) -> Result<usize, SphereError> {
        let distance =
            |index: &usize| (self.radiative[*index].frequency_ghz / frequency_ghz - 1.0).abs();
        let nearest = (0..self.radiative.len())
            .min_by(|a, b| distance(a).total_cmp(&distance(b)))
            .filter(|index| distance(index).is_finite());
        match nearest {
            Some(index) if distance(&index) < FREQUENCY_TOLERANCE => Ok(index),
            found => Err(SphereError::NoTransition {
                molecule: self.name.clone(),
                frequency_ghz,
                nearest_ghz: found.map_or(f64::NAN, |index| self.radiative[index].frequency_ghz),
            }),
        }
    }

    /// The same molecule with only its lowest `count` levels.
    #[must_use]
    pub fn lowest_levels(&self, count: usize) -> Self {
        let kept = |upper: usize, lower: usize| upper < count && lower < count;
        let collisions = self.collisions.iter().map(|one| {
            let columns = one.temperature_k.len();
            let rows = one.levels.iter().zip(one.rates_cm3_per_s.chunks(columns));
            let rows: Vec<_> = rows
                .filter(|((upper, lower), _)| kept(*upper, *lower))
                .collect();
            Collisions {
                partner: one.partner,
                temperature_k: one.temperature_k.clone(),
                levels: rows.iter().map(|(levels, _)| **levels).collect(),
                rates_cm3_per_s: rows.iter().flat_map(|(_, rates)| rates.to_vec()).collect(),
            }
        });
        Self {
            name: self.name.clone(),
            levels: self.levels.iter().take(count).copied().collect(),
            radiative: self
                .radiative
                .iter()
                .filter(|line| kept(line.upper, line.lower))
                .copied()
                .collect(),
            collisions: collisions.collect(),
        }
    }

    /// An isotopologue of the molecule: energies and frequencies times `ratio`, Einstein
    /// coefficients times its cube (same dipole moment), same collision rates.
    #[must_use]
    pub fn isotopologue(&self, ratio: f64) -> Self {
        let mut scaled = self.clone();
        for level in &mut scaled.levels {
            level.energy_k *= ratio;
        }
        for line in &mut scaled.radiative {
            line.frequency_ghz *= ratio;
            line.einstein_a_per_s *= ratio.powi(3);
        }
        scaled
    }

    /// Collisions per second from each level to each other, row-major, in gas of a density in
    /// cm^-3 and a temperature in K.
    ///
    /// Upward rates follow from detailed balance. Where the data know ortho- and para-H2 only, H2
    /// has their thermal ratio, [`ortho_share`].
    ///
    /// # Errors
    ///
    /// [`SphereError::NoPartner`] where there are no rates with H2.
    pub fn collision_rates(
        &self,
        n_h2_cm3: f64,
        temperature_k: f64,
    ) -> Result<Vec<f64>, SphereError> {
        let count = self.levels.len();
        let mut rates = vec![0.0; count * count];
        let has = |partner| self.collisions.iter().any(|one| one.partner == partner);
        let share = |partner| match partner {
            Partner::Hydrogen => 1.0,
            _ if has(Partner::Hydrogen) => 0.0,
            Partner::ParaHydrogen if has(Partner::OrthoHydrogen) => {
                1.0 - ortho_share(temperature_k)
            }
            Partner::OrthoHydrogen if has(Partner::ParaHydrogen) => ortho_share(temperature_k),
            Partner::ParaHydrogen | Partner::OrthoHydrogen => 1.0,
            Partner::Other => 0.0,
        };
        let mut usable = false;
        for one in &self.collisions {
            let density = share(one.partner) * n_h2_cm3;
            if density == 0.0 {
                continue;
            }
            usable = true;
            let (index, fraction) = position(&one.temperature_k, temperature_k);
            let columns = one.temperature_k.len();
            for ((upper, lower), row) in one.levels.iter().zip(one.rates_cm3_per_s.chunks(columns))
            {
                let rate = match row.get(index + 1) {
                    Some(next) => row[index] + fraction * (next - row[index]),
                    None => row[index],
                };
                let (up, low) = (self.levels[*upper], self.levels[*lower]);
                let boltzmann = ((low.energy_k - up.energy_k) / temperature_k).exp();
                rates[upper * count + lower] += density * rate;
                rates[lower * count + upper] += density * rate * up.weight / low.weight * boltzmann;
            }
        }
        if usable {
            Ok(rates)
        } else {
            Err(SphereError::NoPartner {
                molecule: self.name.clone(),
            })
        }
    }

    /// Shares of the levels in equilibrium at a temperature in K; they sum to 1.
    #[must_use]
    pub fn boltzmann(&self, temperature_k: f64) -> Vec<f64> {
        let mut shares: Vec<f64> = self
            .levels
            .iter()
            .map(|level| level.weight * (-level.energy_k / temperature_k).exp())
            .collect();
        let sum: f64 = shares.iter().sum();
        for share in &mut shares {
            *share /= sum;
        }
        shares
    }
}

/// Where a value stands between ascending ones: index and fraction; at the ends, the end.
fn position(ascending: &[f64], value: f64) -> (usize, f64) {
    let above = ascending.partition_point(|one| *one <= value);
    if above == 0 {
        return (0, 0.0);
    }
    if above == ascending.len() {
        return (above - 1, 0.0);
    }
    let (low, high) = (ascending[above - 1], ascending[above]);
    (above - 1, (value - low) / (high - low))
}

/// The lines of a file, one after the other.
struct Lines<'a> {
    file: &'a str,
    rest: std::str::Lines<'a>,
    number: usize,
    current: &'a str,
}

/// Longest piece of a line that an error shows.
const SHOWN: usize = 60;

impl<'a> Lines<'a> {
    fn error(&self, found: impl Into<String>, expected: &str) -> SphereError {
        SphereError::Molecule {
            file: self.file.to_owned(),
            line: self.number,
            found: found.into(),
            expected: expected.to_owned(),
        }
    }

    fn next(&mut self, expected: &str) -> Result<&'a str, SphereError> {
        self.number += 1;
        self.current = self
            .rest
            .next()
            .ok_or_else(|| self.error("the file ends", expected))?;
        Ok(self.current)
    }

    fn require(&self, fulfilled: bool, expected: &str) -> Result<(), SphereError> {
        if fulfilled {
            Ok(())
        } else {
            Err(self.error(shown(self.current), expected))
        }
    }

    fn comment(&mut self, expected: &str) -> Result<(), SphereError> {
        let line = self.next(expected)?;
        if line.trim_start().starts_with('!') {
            Ok(())
        } else {
            Err(self.error(shown(line), expected))
        }
    }

    /// The fields of the next line.
    fn fields(&mut self, least: usize, expected: &str) -> Result<Vec<&'a str>, SphereError> {
        let line = self.next(expected)?;
        let fields: Vec<&str> = line.split_whitespace().collect();
        if fields.len() < least {
            return Err(self.error(shown(line), expected));
        }
        Ok(fields)
    }

    fn number<T: FromStr>(&self, field: &str, expected: &str) -> Result<T, SphereError> {
        field
            .replace(['D', 'd'], "E")
            .parse()
            .map_err(|_| self.error(shown(field), expected))
    }

    fn finite(&self, field: &str, expected: &str) -> Result<f64, SphereError> {
        let number: f64 = self.number(field, expected)?;
        if number.is_finite() && number >= 0.0 {
            Ok(number)
        } else {
            Err(self.error(shown(field), expected))
        }
    }

    /// The first field of the next line.
    fn first<T: FromStr>(&mut self, expected: &str) -> Result<T, SphereError> {
        let fields = self.fields(1, expected)?;
        self.number(fields[0], expected)
    }

    /// A number of rows that a file of sane length can hold.
    fn count(&mut self, expected: &str) -> Result<usize, SphereError> {
        let count = self.first(expected)?;
        if (1..=100_000).contains(&count) {
            Ok(count)
        } else {
            Err(self.error(count.to_string(), expected))
        }
    }

    /// A level number, made to count from 0.
    fn level(&self, field: &str, levels: usize) -> Result<usize, SphereError> {
        let expected = format!("a level from 1 to {levels}");
        let level: usize = self.number(field, &expected)?;
        if (1..=levels).contains(&level) {
            Ok(level - 1)
        } else {
            Err(self.error(shown(field), &expected))
        }
    }

    fn levels(&mut self) -> Result<Vec<Level>, SphereError> {
        let count = self.count("the number of energy levels, at least 1")?;
        self.comment("a comment line before the levels")?;
        let kelvin_per_wavenumber = PLANCK.value * SPEED_OF_LIGHT.value * 100.0 / BOLTZMANN.value;
        let mut levels = Vec::new();
        for index in 1..=count {
            let expected = format!("level {index} of {count}: number, energy in cm^-1, weight");
            let fields = self.fields(3, &expected)?;
            let number: usize = self.number(fields[0], &expected)?;
            if number != index {
                return Err(self.error(format!("level {number}"), &expected));
            }
            let weight = self.finite(fields[2], &expected)?;
            self.require(weight > 0.0, "a statistical weight above 0")?;
            levels.push(Level {
                energy_k: kelvin_per_wavenumber * self.finite(fields[1], &expected)?,
                weight,
            });
        }
        Ok(levels)
    }

    fn radiative(&mut self, levels: usize) -> Result<Vec<Radiative>, SphereError> {
        let count = self.count("the number of radiative transitions, at least 1")?;
        self.comment("a comment line before the radiative transitions")?;
        let mut radiative = Vec::new();
        for index in 1..=count {
            let expected = format!(
                "radiative transition {index} of {count}: number, upper and lower level, A in s^-1, frequency in GHz"
            );
            let fields = self.fields(5, &expected)?;
            let (upper, lower) = (
                self.level(fields[1], levels)?,
                self.level(fields[2], levels)?,
            );
            self.require(upper != lower, "two different levels")?;
            let frequency_ghz = self.finite(fields[4], &expected)?;
            self.require(frequency_ghz > 0.0, "a frequency above 0")?;
            radiative.push(Radiative {
                upper,
                lower,
                einstein_a_per_s: self.finite(fields[3], &expected)?,
                frequency_ghz,
            });
        }
        Ok(radiative)
    }

    fn collisions(&mut self, levels: usize) -> Result<Collisions, SphereError> {
        self.comment("a comment line before a collision partner")?;
        let expected = "a collision partner's number: 1 H2, 2 para-H2, 3 ortho-H2, 4 electrons, 5 H, 6 He, 7 H+";
        let partner = match self.first::<usize>(expected)? {
            1 => Partner::Hydrogen,
            2 => Partner::ParaHydrogen,
            3 => Partner::OrthoHydrogen,
            4..=7 => Partner::Other,
            number => return Err(self.error(number.to_string(), expected)),
        };
        self.comment("a comment line before the number of collisions")?;
        let count = self.count("the number of collisional transitions, at least 1")?;
        self.comment("a comment line before the number of temperatures")?;
        let temperatures = self.count("the number of temperatures, at least 1")?;
        self.comment("a comment line before the temperatures")?;
        let expected = format!("{temperatures} ascending temperatures in K");
        let fields = self.fields(temperatures, &expected)?;
        let temperature_k = fields[..temperatures]
            .iter()
            .map(|field| self.finite(field, &expected))
            .collect::<Result<Vec<f64>, _>>()?;
        self.require(temperature_k.is_sorted_by(|a, b| a < b), &expected)?;
        self.comment("a comment line before the rates")?;
        let mut transitions = Vec::new();
        let mut rates_cm3_per_s = Vec::new();
        for index in 1..=count {
            let expected = format!(
                "collision {index} of {count}: number, upper and lower level, {temperatures} rates in cm^3 s^-1"
            );
            let fields = self.fields(3 + temperatures, &expected)?;
            let (upper, lower) = (
                self.level(fields[1], levels)?,
                self.level(fields[2], levels)?,
            );
            self.require(upper != lower, "two different levels")?;
            transitions.push((upper, lower));
            for field in &fields[3..3 + temperatures] {
                rates_cm3_per_s.push(self.finite(field, &expected)?);
            }
        }
        Ok(Collisions {
            partner,
            temperature_k,
            levels: transitions,
            rates_cm3_per_s,
        })
    }
}

/// A piece of a line as an error shows it.
fn shown(line: &str) -> String {
    let piece: String = line.trim().chars().take(SHOWN).collect();
    if piece.is_empty() {
        "an empty line".to_owned()
    } else {
        format!("`{piece}`")
    }
}
