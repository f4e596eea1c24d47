//! The built-in transitions: rest frequencies with an uncertainty each, and multiplets.
//!
//! The uncertainty of a rest frequency is, in this order,
//! 1. the one that its source states;
//! 2. else the larger of what two sources disagree by (or one unit of the last digit given) and
//!    the floor of its [`SourceClass`];
//! 3. widened where unresolved structure leaves the centre open; the row says so.
//!
//! The floors are velocities. Two published tables of HCO+ 1-0 and 3-2 disagree by 5.7 and 7.7 m/s:
//! hence 7 m/s for a value read in a table. A value quoted by a second source gets three times
//! that, one from memory 50 m/s (half the hyperfine width that such a value may be centred on).

use super::{Component, Line};
use crate::constants::SPEED_OF_LIGHT_KM_S;

/// How well the source of a transition's frequency is known.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum SourceClass {
    /// Read in a published data file or table.
    Tabulated,
    /// Quoted by a secondary source.
    Quoted,
    /// Written down from memory.
    Memory,
}

impl SourceClass {
    /// Least uncertainty of a rest frequency whose source states none, as a velocity in km/s.
    pub const fn floor_km_s(self) -> f64 {
        match self {
            Self::Tabulated => 0.007,
            Self::Quoted => 0.021,
            Self::Memory => 0.05,
        }
    }

    /// The class in words, as shown in listings.
    pub const fn describe(self) -> &'static str {
        match self {
            Self::Tabulated => "published table",
            Self::Quoted => "secondary source",
            Self::Memory => "from memory",
        }
    }
}

/// One hyperfine component as spectroscopy states it.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct HyperfineComponent {
    /// Quantum numbers, such as `F1 F = 2 3-1 2`.
    pub label: &'static str,
    /// Frequency, MHz.
    pub frequency_mhz: f64,
    /// Relative intensity; only ratios within a multiplet count.
    pub relative: f64,
}

/// A built-in transition.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Transition {
    /// Species, such as `H13CO+`.
    pub species: &'static str,
    /// Upper and lower state, such as `1-0`.
    pub quantum_label: &'static str,
    /// Rest frequency, GHz: zero of the velocity scale. For a multiplet it is the frequency without
    /// hyperfine splitting, not that of a component.
    pub rest_frequency_ghz: f64,
    /// Standard uncertainty of the rest frequency, GHz; never zero.
    pub rest_frequency_err_ghz: f64,
    /// Einstein coefficient of spontaneous emission, s-1.
    pub einstein_a_per_s: Option<f64>,
    /// Energy of the upper state over k, K.
    pub upper_energy_k: Option<f64>,
    /// How well the source of the frequency is known.
    pub class: SourceClass,
    /// Source of the values, and what it leaves open.
    pub source: &'static str,
    /// Hyperfine components; empty where the line is treated as single.
    pub hyperfine: &'static [HyperfineComponent],
}

impl Transition {
    const fn new(
        species: &'static str,
        quantum_label: &'static str,
        rest_frequency_ghz: f64,
        class: SourceClass,
        source: &'static str,
    ) -> Self {
        Self {
            species,
            quantum_label,
            rest_frequency_ghz,
            rest_frequency_err_ghz: class.floor_km_s() / SPEED_OF_LIGHT_KM_S * rest_frequency_ghz,
            einstein_a_per_s: None,
            upper_energy_k: None,
            class,
            source,
            hyperfine: &[],
        }
    }

    const fn rates(mut self, einstein_a_per_s: f64, upper_energy_k: f64) -> Self {
        self.einstein_a_per_s = Some(einstein_a_per_s);
        self.upper_energy_k = Some(upper_energy_k);
        self
    }

    /// The uncertainty that the source states, kHz.
    const fn stated_khz(mut self, uncertainty_khz: f64) -> Self {
        self.rest_frequency_err_ghz = uncertainty_khz * 1e-6;
        self
    }

    /// What sources disagree by, or the last digit given, kHz: counts where above the floor.
    const fn at_least_khz(mut self, uncertainty_khz: f64) -> Self {
        self.rest_frequency_err_ghz = self.rest_frequency_err_ghz.max(uncertainty_khz * 1e-6);
        self
    }

    const fn multiplet(mut self, hyperfine: &'static [HyperfineComponent]) -> Self {
        self.hyperfine = hyperfine;
        self
    }

    /// Name as shown in tables and figures: species and states, such as `HCO+ 1-0`.
    pub fn name(&self) -> String {
        format!("{} {}", self.species, self.quantum_label)
    }

    /// The transition as a line to read and fit a spectrum with.
    ///
    /// Offsets of a multiplet are c (1 - nu/nu0) with nu0 the rest frequency and weights are
    /// normalised to sum 1.
    ///
    /// ```
    /// let line = inrush::line::find("HCN 1-0")?;
    /// let strongest = line.components[1]; // F = 2-1, 88.6318475 GHz
    /// assert!((strongest.offset_km_s + 0.8297).abs() < 1e-4);
    /// assert!((strongest.weight - 5.0 / 9.0).abs() < 1e-15);
    /// # Ok::<(), inrush::line::LineError>(())
    /// ```
    pub fn line(&self) -> Line {
        let total: f64 = self.hyperfine.iter().map(|part| part.relative).sum();
        let components = if self.hyperfine.is_empty() {
            vec![Component::SINGLE]
        } else {
            self.hyperfine
                .iter()
                .map(|part| Component {
                    offset_km_s: SPEED_OF_LIGHT_KM_S
                        * (1.0 - part.frequency_mhz * 1e-3 / self.rest_frequency_ghz),
                    weight: part.relative / total,
                })
                .collect()
        };
        Line {
            name: self.name(),
            rest_frequency_ghz: self.rest_frequency_ghz,
            rest_frequency_err_ghz: self.rest_frequency_err_ghz,
            components,
        }
    }
}

const LAMDA: &str = "LAMDA (Schoier et al. 2005, A&A 432, 369)";
const CDMS_QUOTED: &str = "CDMS, as quoted by a secondary source";
const HCO_PLUS: &str = "CDMS frequency (quoted), uncertain by its difference from LAMDA; CDMS's three lines obey one rotor formula within 5 kHz, LAMDA's miss it by 71 kHz in 4-3; an older file has 89.1883957 GHz for 1-0, which would shift velocities by 0.43 km/s; A_ul (dipole moment 3.93 D, 1.5 % above the 3.90 D convention) and E_u of LAMDA";
const H13CO_PLUS_ONE: &str = "LAMDA values (Schoier et al. 2005, A&A 432, 369); unresolved hyperfine structure about 0.1 km/s wide: the centre is uncertain by 0.1/sqrt(12) km/s";
const DCO_PLUS_ONE: &str = "LAMDA values (Schoier et al. 2005, A&A 432, 369); CDMS has 72.0393122 GHz, 42 kHz (0.17 km/s) lower";
const HCN_ONE: &str =
    "LAMDA (Schoier et al. 2005, A&A 432, 369), components from its hyperfine file after CDMS";
const H13CN_ONE: &str =
    "secondary source; components computed with the quadrupole coupling from memory, 2 kHz";
const N2H_PLUS_ONE: &str = "secondary source; components from memory, as in Caselli, Myers & Thaddeus 1995; authors differ by 10 kHz in the absolute zero (Pagani et al. 2009, arXiv:0811.3289)";
const NO_HYPERFINE: &str = "secondary source; hyperfine structure not included";
const MEMORY_NO_HYPERFINE: &str = "from memory; hyperfine structure not included";
const CDMS_CO: &str = "CDMS (0.5 kHz stated)";
const CDMS_C18O: &str = "CDMS values";
const SAKAI: &str = "Sakai et al. 2010, A&A 512, A31, table 1 (4 kHz stated): the component N = 1-0, J = 3/2-1/2, F = 2-1 alone";

const HCN_COMPONENTS: &[HyperfineComponent] = &[
    part("F = 1-1", 88_630.415_6, 3.0),
    part("F = 2-1", 88_631.847_5, 5.0),
    part("F = 0-1", 88_633.935_7, 1.0),
];

const H13CN_COMPONENTS: &[HyperfineComponent] = &[
    part("F = 1-1", 86_338.734_5, 3.0),
    part("F = 2-1", 86_340.166_8, 5.0),
    part("F = 0-1", 86_342.255_3, 1.0),
];

/// By the upper state's F1 F; the relative intensities 2F+1 are exact.
const N2H_PLUS_COMPONENTS: &[HyperfineComponent] = &[
    part("F1 F = 1 0", 93_171.621_0, 1.0),
    part("F1 F = 1 2", 93_171.916_8, 5.0),
    part("F1 F = 1 1", 93_172.053_3, 3.0),
    part("F1 F = 2 2", 93_173.479_6, 5.0),
    part("F1 F = 2 3", 93_173.776_7, 7.0),
    part("F1 F = 2 1", 93_173.966_6, 3.0),
    part("F1 F = 0 1", 93_176.265_0, 3.0),
];

const fn part(label: &'static str, frequency_mhz: f64, relative: f64) -> HyperfineComponent {
    HyperfineComponent {
        label,
        frequency_mhz,
        relative,
    }
}

const fn tabulated(
    species: &'static str,
    states: &'static str,
    ghz: f64,
    source: &'static str,
) -> Transition {
    Transition::new(species, states, ghz, SourceClass::Tabulated, source)
}

const fn quoted(
    species: &'static str,
    states: &'static str,
    ghz: f64,
    source: &'static str,
) -> Transition {
    Transition::new(species, states, ghz, SourceClass::Quoted, source)
}

const fn memory(
    species: &'static str,
    states: &'static str,
    ghz: f64,
    source: &'static str,
) -> Transition {
    Transition::new(species, states, ghz, SourceClass::Memory, source)
}

/// Every built-in transition, by family of isotopologues, then frequency.
pub const TRANSITIONS: &[Transition] = &[
    // The two tables' difference is the stated uncertainty here.
    quoted("HCO+", "1-0", 89.188_524_7, HCO_PLUS)
        .stated_khz(1.7)
        .rates(4.2512e-5, 4.28),
    quoted("HCO+", "3-2", 267.557_625_9, HCO_PLUS)
        .stated_khz(6.9)
        .rates(1.4757e-3, 25.68),
    quoted("HCO+", "4-3", 356.734_223_0, HCO_PLUS)
        .stated_khz(65.0)
        .rates(3.6269e-3, 42.80),
    tabulated("H13CO+", "1-0", 86.754_288_4, H13CO_PLUS_ONE)
        .at_least_khz(8.4)
        .rates(3.8534e-5, 4.1635),
    tabulated("H13CO+", "3-2", 260.255_339_0, LAMDA).rates(1.3374e-3, 24.981),
    tabulated("H13CO+", "4-3", 346.998_338_1, LAMDA).rates(3.2879e-3, 41.634),
    quoted("HC18O+", "1-0", 85.162_223, CDMS_QUOTED),
    tabulated("DCO+", "1-0", 72.039_354_0, DCO_PLUS_ONE)
        .at_least_khz(41.8)
        .rates(2.2247e-5, 3.457),
    tabulated("DCO+", "2-1", 144.077_319_0, LAMDA).rates(2.1358e-4, 10.372),
    tabulated("DCO+", "3-2", 216.112_604_5, LAMDA).rates(7.7217e-4, 20.744),
    tabulated("HCN", "1-0", 88.631_602_2, HCN_ONE)
        .rates(2.407e-5, 4.25)
        .multiplet(HCN_COMPONENTS),
    tabulated("HCN", "3-2", 265.886_433_9, LAMDA).rates(8.356e-4, 25.52),
    tabulated("HCN", "4-3", 354.505_477_3, LAMDA).rates(2.054e-3, 42.53),
    quoted("H13CN", "1-0", 86.339_921_4, H13CN_ONE).multiplet(H13CN_COMPONENTS),
    quoted("H13CN", "3-2", 259.011_797_6, CDMS_QUOTED),
    quoted("H13CN", "4-3", 345.339_769_3, CDMS_QUOTED),
    quoted("HNC", "1-0", 90.663_568_0, CDMS_QUOTED),
    quoted("HNC", "2-1", 181.324_758_0, CDMS_QUOTED),
    quoted("HNC", "3-2", 271.981_142_0, CDMS_QUOTED),
    quoted("HN13C", "1-0", 87.090_85, CDMS_QUOTED).at_least_khz(10.0),
    quoted("HN13C", "3-2", 261.263_310_1, CDMS_QUOTED),
    Transition {
        einstein_a_per_s: Some(3.628e-5),
        ..quoted("N2H+", "1-0", 93.173_397_7, N2H_PLUS_ONE)
            .at_least_khz(10.0)
            .multiplet(N2H_PLUS_COMPONENTS)
    },
    memory("N2H+", "3-2", 279.511_75, MEMORY_NO_HYPERFINE),
    quoted("N2D+", "1-0", 77.109_243_3, NO_HYPERFINE),
    tabulated("CS", "2-1", 97.980_953_3, LAMDA).rates(1.679e-5, 7.1),
    tabulated("CS", "3-2", 146.969_028_7, LAMDA).rates(6.071e-5, 14.1),
    tabulated("CS", "5-4", 244.935_556_5, LAMDA).rates(2.981e-4, 35.3),
    tabulated("CS", "7-6", 342.882_850_3, LAMDA).rates(8.395e-4, 65.8),
    quoted("C34S", "2-1", 96.412_949_5, CDMS_QUOTED),
    quoted("C34S", "3-2", 144.617_100_7, CDMS_QUOTED),
    quoted("C34S", "5-4", 241.016_089_2, CDMS_QUOTED),
    quoted("C34S", "7-6", 337.396_459, CDMS_QUOTED),
    tabulated("CO", "1-0", 115.271_201_8, CDMS_CO)
        .stated_khz(0.5)
        .rates(7.203e-8, 5.53),
    tabulated("CO", "2-1", 230.538_000_0, CDMS_CO)
        .stated_khz(0.5)
        .rates(6.910e-7, 16.60),
    tabulated("CO", "3-2", 345.795_989_9, CDMS_CO)
        .stated_khz(0.5)
        .rates(2.497e-6, 33.19),
    quoted("13CO", "1-0", 110.201_354_3, CDMS_QUOTED),
    quoted("13CO", "2-1", 220.398_684_2, CDMS_QUOTED),
    quoted("13CO", "3-2", 330.587_97, CDMS_QUOTED),
    tabulated("C18O", "1-0", 109.782_173_4, CDMS_C18O).rates(6.266e-8, 5.268_68),
    tabulated("C18O", "2-1", 219.560_354_1, CDMS_C18O).rates(6.011e-7, 15.8058),
    tabulated("C18O", "3-2", 329.330_552_5, CDMS_C18O).rates(2.172e-6, 31.6112),
    memory("C17O", "1-0", 112.359_28, MEMORY_NO_HYPERFINE),
    quoted("C17O", "2-1", 224.714_743_8, NO_HYPERFINE),
    tabulated("o-H2CO", "2(1,2)-1(1,1)", 140.839_502, LAMDA).rates(5.304e-5, 21.9),
    tabulated("p-H2CO", "3(0,3)-2(0,2)", 218.222_192, LAMDA).rates(2.818e-4, 21.0),
    tabulated("CCH", "1-0", 87.316_925, SAKAI).stated_khz(4.0),
];
