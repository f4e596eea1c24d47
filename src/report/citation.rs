//! What results rest on: a paragraph of methods and the publications behind them.
//!
//! A method counts as used where a result column that only it fills has a value. Years, journals and pages are
//! from memory where no DOI stands; the DOI is what identifies a publication.

use std::collections::BTreeSet;
use std::fmt::Write as _;

/// A publication.
struct Publication {
    key: &'static str,
    authors: &'static str,
    year: u16,
    title: &'static str,
    journal: &'static str,
    volume: &'static str,
    pages: &'static str,
    doi: &'static str,
}

#[allow(clippy::too_many_arguments, reason = "a table's row")]
const fn publication(
    key: &'static str,
    authors: &'static str,
    year: u16,
    title: &'static str,
    journal: &'static str,
    volume: &'static str,
    pages: &'static str,
    doi: &'static str,
) -> Publication {
    Publication {
        key,
        authors,
        year,
        title,
        journal,
        volume,
        pages,
        doi,
    }
}

const APJ: &str = "The Astrophysical Journal";

#[rustfmt::skip]
const PUBLICATIONS: &[Publication] = &[
    publication("Bertoldi1992", "Bertoldi, F. and McKee, C. F.", 1992, "Pressure-confined clumps in magnetized molecular clouds", APJ, "395", "140", "10.1086/171638"),
    publication("Birge1932", "Birge, R. T.", 1932, "The Calculation of Errors by the Method of Least Squares", "Physical Review", "40", "207", "10.1103/PhysRev.40.207"),
    publication("Chandrasekhar1953", "Chandrasekhar, S. and Fermi, E.", 1953, "Magnetic Fields in Spiral Arms", APJ, "118", "113", "10.1086/145731"),
    publication("Cornuet2012", "Cornuet, J.-M. and Marin, J.-M. and Mira, A. and Robert, C. P.", 2012, "Adaptive Multiple Importance Sampling", "Scandinavian Journal of Statistics", "39", "798", "10.1111/j.1467-9469.2011.00756.x"),
    publication("Davis1951", "Davis, L.", 1951, "The Strength of Interstellar Magnetic Fields", "Physical Review", "81", "890", "10.1103/PhysRev.81.890"),
    publication("DeVries2005", "De Vries, C. H. and Myers, P. C.", 2005, "Molecular Line Profile Fitting with Analytic Radiative Transfer Models", APJ, "620", "800", "10.1086/427141"),
    publication("DiFrancesco2001", "Di Francesco, J. and Myers, P. C. and Wilner, D. J. and Ohashi, N. and Mardones, D.", 2001, "Infall, Outflow, Rotation, and Turbulent Motions of Dense Gas within NGC 1333 IRAS 4", APJ, "562", "770", "10.1086/323854"),
    publication("Fixsen2009", "Fixsen, D. J.", 2009, "The Temperature of the Cosmic Microwave Background", APJ, "707", "916", "10.1088/0004-637X/707/2/916"),
    publication("Gregersen1997", "Gregersen, E. M. and Evans, N. J. and Zhou, S. and Choi, M.", 1997, "New Protostellar Collapse Candidates: An HCO+ Survey of the Class 0 Sources", APJ, "484", "256", ""),
    publication("Hildebrand1983", "Hildebrand, R. H.", 1983, "The determination of cloud masses and dust characteristics from submillimetre thermal emission", "Quarterly Journal of the Royal Astronomical Society", "24", "267", ""),
    publication("Jackson2019", "Jackson, J. M. and others", 2019, "Asymmetric Line Profiles in Dense Molecular Clumps Observed in MALT90: Evidence for Global Collapse", APJ, "870", "5", "10.3847/1538-4357/aaef84"),
    publication("Kauffmann2008", "Kauffmann, J. and Bertoldi, F. and Bourke, T. L. and Evans, N. J. and Lee, C. W.", 2008, "MAMBO mapping of Spitzer c2d small clouds and cores", "Astronomy and Astrophysics", "487", "993", "10.1051/0004-6361:200809481"),
    publication("Mangum2015", "Mangum, J. G. and Shirley, Y. L.", 2015, "How to Calculate Molecular Column Density", "Publications of the Astronomical Society of the Pacific", "127", "266", "10.1086/680323"),
    publication("Mann1947", "Mann, H. B. and Whitney, D. R.", 1947, "On a Test of Whether one of Two Random Variables is Stochastically Larger than the Other", "The Annals of Mathematical Statistics", "18", "50", ""),
    publication("Mardones1997", "Mardones, D. and Myers, P. C. and Tafalla, M. and Wilner, D. J. and Bachiller, R. and Garay, G.", 1997, "A Search for Infall Motions toward Nearby Young Stellar Objects", APJ, "489", "719", "10.1086/304812"),
    publication("Marquardt1963", "Marquardt, D. W.", 1963, "An Algorithm for Least-Squares Estimation of Nonlinear Parameters", "Journal of the Society for Industrial and Applied Mathematics", "11", "431", ""),
    publication("Myers1996", "Myers, P. C. and Mardones, D. and Tafalla, M. and Williams, J. P. and Wilner, D. J.", 1996, "A Simple Model of Spectral-Line Profiles from Contracting Clouds", APJ, "465", "L133", "10.1086/310146"),
    publication("Nakano1978", "Nakano, T. and Nakamura, T.", 1978, "Gravitational Instability of Magnetized Gaseous Disks", "Publications of the Astronomical Society of Japan", "30", "671", ""),
    publication("Ostriker2001", "Ostriker, E. C. and Stone, J. M. and Gammie, C. F.", 2001, "Density, Velocity, and Magnetic Field Structure in Turbulent Molecular Cloud Models", APJ, "546", "980", "10.1086/318290"),
    publication("Shu1977", "Shu, F. H.", 1977, "Self-similar collapse of isothermal spheres and star formation", APJ, "214", "488", "10.1086/155274"),
    publication("Spearman1904", "Spearman, C.", 1904, "The Proof and Measurement of Association between Two Things", "The American Journal of Psychology", "15", "72", ""),
    publication("Vehtari2024", "Vehtari, A. and Simpson, D. and Gelman, A. and Yao, Y. and Gabry, J.", 2024, "Pareto Smoothed Importance Sampling", "Journal of Machine Learning Research", "25", "72", ""),
    publication("Wilson1927", "Wilson, E. B.", 1927, "Probable Inference, the Law of Succession, and Statistical Inference", "Journal of the American Statistical Association", "22", "209", "10.1080/01621459.1927.10502953"),
];

/// A method: columns that show its use (any of them), what is said of it, and its publications.
struct Method {
    columns: &'static [&'static str],
    /// Citations stand in `[...]`.
    sentence: &'static str,
}

#[rustfmt::skip]
const METHODS: &[Method] = &[
    Method { columns: &["noise_thick_k"], sentence: "Line windows were found automatically, polynomial baselines were subtracted, and the noise and its correlation between channels were measured in line-free channels." },
    Method { columns: &["delta_v"], sentence: "The asymmetry of the optically thick line is measured by the normalised velocity difference, with profiles beyond 0.25 blue or red [Mardones1997]." },
    Method { columns: &["asymmetry"], sentence: "The intensity asymmetry compares the integrals on either side of the optically thin line's velocity [Jackson2019]." },
    Method { columns: &["skewness"], sentence: "The skewness is taken about the same velocity, compare [Gregersen1997]." },
    Method { columns: &["v_closed_form_km_s"], sentence: "Lines with two peaks give a speed by the closed form of [Myers1996]." },
    Method { columns: &["two_layer_v_in_km_s"], sentence: "Both lines were fitted together with the two-layer model [Myers1996] above a background of 2.725 K [Fixsen2009]." },
    Method { columns: &["two_layer_continuum_v_in_km_s"], sentence: "The two-layer model with an embedded continuum source is that of [DiFrancesco2001]." },
    Method { columns: &["hill_v_in_km_s", "hill_surface_v_in_km_s"], sentence: "The hill model, whose excitation rises toward the middle of the cloud, is that of [DeVries2005]; the background is at 2.725 K [Fixsen2009]." },
    Method { columns: &["two_layer_chi2_red", "hill_chi2_red", "hill_surface_chi2_red", "gaussian_chi2_red", "layer_chi2_red", "two_gaussians_chi2_red", "two_layer_continuum_chi2_red"], sentence: "Least squares were found by damped Gauss-Newton steps from several starts [Marquardt1963]." },
    Method { columns: &["p_infall"], sentence: "The probabilities of infall, expansion, rest and two clouds are those of the evidences of families of profiles, and the inward speed is the posterior averaged over the moving models; posteriors were sampled by adaptive importance sampling [Cornuet2012] with smoothed weights [Vehtari2024]." },
    Method { columns: &["mass_dust_msun"], sentence: "Masses from the flux of optically thin dust follow [Hildebrand1983]." },
    Method { columns: &["n_h2_mean_cm3", "mass_rate_msun_yr"], sentence: "Densities count 2.8 atomic masses of hydrogen a molecule [Kauffmann2008]." },
    Method { columns: &["mass_rate_msun_yr"], sentence: "The mass infall rate is that through the source's radius, with uncertainties sampled from the speed's and from the given mass, radius, density and distance together." },
    Method { columns: &["virial_parameter"], sentence: "The virial parameter is that of [Bertoldi1992]." },
    Method { columns: &["isothermal_rate_msun_yr"], sentence: "The rate of a singular isothermal sphere is that of [Shu1977]." },
    Method { columns: &["field_ug"], sentence: "Field strengths are given, or follow from the dispersion of polarisation angles [Davis1951; Chandrasekhar1953] with the correction of [Ostriker2001]." },
    Method { columns: &["mass_to_flux"], sentence: "The critical mass-to-flux ratio is that of [Nakano1978]." },
    Method { columns: &["column_thick_cm2", "column_thin_cm2"], sentence: "Column densities follow [Mangum2015]." },
    Method { columns: &["rank"], sentence: "Sources are ranked by the grade of their probability of infall, then by the lower end of the 68 per cent interval of the mass infall rate, or of the inward speed where no rate is known; how firm each place is follows from draws of hypothesis and rate." },
    Method { columns: &["pair_disagreement"], sentence: "Speeds of several line pairs of a source were averaged with weights of their variances, and their errors widened where they disagree [Birge1932]." },
    Method { columns: &["fraction_blue"], sentence: "The blue excess is that of [Mardones1997], with the exact binomial probability of as many blue profiles by chance; intervals of fractions are those of [Wilson1927]." },
    Method { columns: &["delta_v_differs"], sentence: "Groups were compared by Fisher's exact test and by the test of [Mann1947]." },
    Method { columns: &["rank_correlation"], sentence: "Rank correlations are those of [Spearman1904], with intervals from the posteriors' draws." },
];

/// Columns that some method is known by.
pub fn known_columns() -> impl Iterator<Item = &'static str> {
    METHODS.iter().flat_map(|method| method.columns).copied()
}

/// What results with values in these columns rest on.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Citation {
    /// A paragraph with citations as LaTeX's `\citep{...}` and `\citet{...}`.
    pub paragraph: String,
    /// The publications as BibTeX, by key.
    pub bibtex: String,
}

/// Paragraph and publications for results with values in `columns`.
#[must_use]
pub fn citation(columns: &BTreeSet<String>, version: &str) -> Citation {
    let mut keys = BTreeSet::new();
    let mut sentences = vec![format!(
        "Spectra were analysed with Inrush {version} \\citep{{Inrush}}."
    )];
    let used = |method: &&Method| {
        method
            .columns
            .iter()
            .any(|column| columns.contains(*column))
    };
    for method in METHODS.iter().filter(used) {
        sentences.push(cited(method.sentence, &mut keys));
    }
    let mut bibtex = format!(
        "% Authors, titles and pages from memory; the DOI identifies a publication.\n\
         @software{{Inrush,\n  author = {{{{the Inrush contributors}}}},\n  title = {{Inrush}},\n  \
         version = {{{version}}}\n}}\n"
    );
    let published = PUBLICATIONS.iter().filter(|one| keys.contains(one.key));
    for one in published {
        let _ = write!(
            bibtex,
            "\n@article{{{},\n  author = {{{}}},\n  year = {{{}}},\n  title = {{{{{}}}}},\n  \
             journal = {{{}}},\n  volume = {{{}}},\n  pages = {{{}}}",
            one.key, one.authors, one.year, one.title, one.journal, one.volume, one.pages
        );
        if !one.doi.is_empty() {
            let _ = write!(bibtex, ",\n  doi = {{{}}}", one.doi);
        }
        bibtex.push_str("\n}\n");
    }
    let mut paragraph = sentences.join(" ");
    paragraph.push('\n');
    Citation { paragraph, bibtex }
}

/// A sentence with `[KEY]` as a citation: in brackets, or as the authors behind `of`, `follow` and `compare`.
fn cited(sentence: &'static str, keys: &mut BTreeSet<&'static str>) -> String {
    let mut text = String::new();
    let mut rest = sentence;
    while let Some((before, after)) = rest.split_once('[') {
        let (inside, after) = after.split_once(']').unwrap_or((after, ""));
        keys.extend(inside.split("; "));
        let last = before.split_whitespace().next_back().unwrap_or_default();
        let by_name = matches!(last, "of" | "follow" | "compare");
        let command = if by_name { "citet" } else { "citep" };
        let _ = write!(text, "{before}\\{command}{{{}}}", inside.replace("; ", ","));
        rest = after;
    }
    text.push_str(rest);
    text
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::report::columns;

    #[test]
    fn every_citation_has_its_publication_and_every_publication_its_citation() {
        let mut keys = BTreeSet::new();
        for method in METHODS {
            cited(method.sentence, &mut keys);
        }
        let known: BTreeSet<&str> = PUBLICATIONS.iter().map(|one| one.key).collect();
        assert_eq!(keys, known);
        assert!(PUBLICATIONS.is_sorted_by_key(|one| one.key));
    }

    #[test]
    fn methods_are_known_by_columns_that_exist() {
        let results = columns::results();
        let beside = [
            "rank",
            "pair_disagreement",
            "fraction_blue",
            "delta_v_differs",
            "rank_correlation",
        ];
        for column in known_columns() {
            let exists = results.columns().iter().any(|known| known.name == column);
            assert!(exists || beside.contains(&column), "{column}");
        }
    }

    #[test]
    fn what_is_cited_follows_the_columns() {
        let columns = ["delta_v", "hill_v_in_km_s"].map(str::to_owned);
        let found = citation(&columns.into_iter().collect(), "0.1.0");
        assert!(found.paragraph.contains("\\citep{Mardones1997}"));
        assert!(found.paragraph.contains("that of \\citet{DeVries2005}"));
        assert!(found.bibtex.contains("doi = {10.1086/427141}"));
        assert!(!found.bibtex.contains("Shu1977"));
    }
}
