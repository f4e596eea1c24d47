//! What a map as a whole says of motions: the readings of its pointings to the diagnosis, its findings to
//! entries of a table.

use super::super::RunError;
use super::pointing::{Motions, Work};
use crate::grid::{
    CentralSpot, Centre, Diagnosis, Gradient, GridError, Parity, PointingMotions, SpeedProfile,
    centre, clump_maps, diagnose, noise_width_arcsec,
};
use crate::numeric::Estimate;
use crate::prepare::Prepared;
use crate::report::motions::{Entry, Part};
use crate::report::{Row, Value};

/// What a map says of motions.
#[cfg_attr(
    not(feature = "figures"),
    expect(dead_code, reason = "figures alone show all of it")
)]
pub(super) struct MapMotions {
    /// Everything that was found; else why not.
    pub diagnosis: Result<Diagnosis, String>,
    /// The pointings behind it.
    pub pointings: Vec<PointingMotions>,
    /// The same as entries of a table.
    pub entries: Vec<Entry>,
}

/// What one fitted pointing says, from its row and beside it; what rests on a mean of the thin line is left
/// out, since it is not of this place.
pub(super) fn of_row(row: &Row, motions: &Motions) -> Option<PointingMotions> {
    let number = |name: &str| row.find(name).and_then(Value::number);
    let estimate = |name: &str| {
        Some(Estimate {
            value: number(name)?,
            err: number(&format!("{name}_err"))?,
        })
    };
    let own = |name| estimate(name).filter(|_| motions.own_thin);
    Some(PointingMotions {
        at_arcsec: [number("dx_arcsec")?, number("dy_arcsec")?],
        integral_thin_k_km_s: own("integral_thin_k_km_s"),
        v_thin_km_s: own("v_thin_km_s"),
        sides: motions.sides.filter(|_| motions.own_thin),
        asymmetry: own("asymmetry").zip(motions.asymmetry_systematic),
        delta_v: own("delta_v").zip(number("delta_v_systematic")),
        thick_moment_km_s: motions.thick_moment_km_s,
        v_in_km_s: own("v_in_km_s"),
    })
}

/// Reads the map of all fitted pointings; `fitted` are their numbers. Never fails: what cannot be read is said
/// in words.
pub(super) fn read(
    work: &Work<'_>,
    fitted: &[usize],
    pointings: Vec<PointingMotions>,
    distance_kpc: Option<Estimate>,
) -> Result<MapMotions, RunError> {
    let noise_fwhm_arcsec = noise_width(work, fitted)?;
    let diagnosis = diagnosed(work, &pointings, noise_fwhm_arcsec);
    let entries = entries(&diagnosis, noise_fwhm_arcsec, distance_kpc);
    Ok(MapMotions {
        diagnosis,
        pointings,
        entries,
    })
}

fn diagnosed(
    work: &Work<'_>,
    pointings: &[PointingMotions],
    noise_fwhm_arcsec: f64,
) -> Result<Diagnosis, String> {
    let Some(beam) = work.field.beam() else {
        return Err(
            "The map is not read for motions: no beam is known; give beam_arcsec in [thick] and [thin]."
                .to_owned(),
        );
    };
    let beam_arcsec = (beam.major_arcsec * beam.minor_arcsec).sqrt();
    let read = || {
        let (maps, integrals) = clump_maps(pointings, noise_fwhm_arcsec)?;
        Ok::<_, GridError>(diagnose(&maps, &centre(&integrals)?, beam_arcsec))
    };
    read().map_err(|error| format!("The map is not read for motions: {error}."))
}

/// Pairs of pointings whose noise is compared.
const NOISE_PAIRS: usize = 48;

/// The width over which noise goes together, from the line-free channels of pointings about half a beam apart;
/// 0 for independent ones. The wider of both lines' counts.
fn noise_width(work: &Work<'_>, fitted: &[usize]) -> Result<f64, RunError> {
    let step = work.field.step_arcsec();
    let half_beam = (work.field.beam()).map_or(step, |beam| {
        0.5 * (beam.major_arcsec * beam.minor_arcsec).sqrt()
    });
    let apart = half_beam.max(step);
    let mut lines = [NoisePairs::default(), NoisePairs::default()];
    let every = fitted.len().div_ceil(NOISE_PAIRS).max(1);
    for site in fitted.iter().step_by(every) {
        let near = work.field.around(*site, 1.5 * apart).into_iter();
        let others = near.filter(|(other, _)| other != site && fitted.binary_search(other).is_ok());
        let nearest = others.min_by(|a, b| (a.1 - apart).abs().total_cmp(&(b.1 - apart).abs()));
        let Some((other, distance)) = nearest else {
            continue;
        };
        let (Some(one), Some(two)) = (work.prepared(*site)?, work.prepared(other)?) else {
            continue;
        };
        lines[0].take(distance, &one.0, &two.0);
        lines[1].take(distance, &one.1, &two.1);
    }
    Ok(lines
        .iter()
        .map(NoisePairs::width_arcsec)
        .fold(0.0, f64::max))
}

/// Sums over the line-free channels of pairs of pointings.
#[derive(Default)]
struct NoisePairs {
    products: f64,
    channels: f64,
    distances_arcsec: f64,
    pairs: f64,
}

impl NoisePairs {
    fn take(&mut self, distance_arcsec: f64, one: &Prepared, other: &Prepared) {
        let (a, b) = (&one.spectrum, &other.spectrum);
        if a.velocity_km_s() != b.velocity_km_s() {
            return;
        }
        let scale = one.noise.rms_k * other.noise.rms_k;
        // Faint wings reach beyond a window: as much again on either side is left out.
        let near = |prepared: &Prepared, v: f64| {
            let window = prepared.window;
            let margin = 0.5 * (window.high_km_s - window.low_km_s);
            (window.low_km_s - margin..=window.high_km_s + margin).contains(&v)
        };
        for (channel, v) in a.velocity_km_s().iter().enumerate() {
            let free = |prepared: &Prepared| prepared.is_line_free(*v) && !near(prepared, *v);
            if a.is_usable(channel) && b.is_usable(channel) && free(one) && free(other) {
                self.products += a.temperature_k()[channel] * b.temperature_k()[channel] / scale;
                self.channels += 1.0;
            }
        }
        self.distances_arcsec += distance_arcsec;
        self.pairs += 1.0;
    }

    fn width_arcsec(&self) -> f64 {
        if self.pairs == 0.0 || self.channels == 0.0 {
            return 0.0;
        }
        let correlation = Estimate {
            value: self.products / self.channels,
            err: self.channels.sqrt().recip(),
        };
        noise_width_arcsec(self.distances_arcsec / self.pairs, correlation)
    }
}

const ARCSEC_PER_RADIAN: f64 = 648_000.0 / std::f64::consts::PI;
const PC_PER_KPC: f64 = 1000.0;

fn entries(
    diagnosis: &Result<Diagnosis, String>,
    noise_fwhm_arcsec: f64,
    distance_kpc: Option<Estimate>,
) -> Vec<Entry> {
    let mut list = Entries(Vec::new());
    let found = match diagnosis {
        Ok(found) => found,
        Err(words) => {
            list.words(Part::Verdict, "verdict", words);
            return list.0;
        }
    };
    list.ground(&found.centre, noise_fwhm_arcsec);
    list.gradient("thin", "v_thin_km_s", &found.gradient, distance_kpc);
    list.gradient("thick", "", &found.thick_gradient, distance_kpc);
    for (name, column, label, parity) in [
        ("asymmetry", "asymmetry", "asymmetry", &found.asymmetry),
        ("delta_v", "delta_v", "velocity difference", &found.delta_v),
        ("core", "", "core of the thick line", &found.core),
        ("wings", "", "its wings", &found.wings),
    ] {
        list.parity(name, column, label, parity);
    }
    list.spot(&found.spot);
    list.speed(&found.speed);
    let verdict = &found.verdict;
    list.words(Part::Verdict, "verdict_even", &verdict.even_sentence());
    list.words(Part::Verdict, "verdict_odd", &verdict.odd_sentence());
    if let Ok(speed) = &found.speed {
        list.words(Part::Verdict, "verdict_speed", &speed.sentence());
    }
    list.0
}

/// Entries as they come.
struct Entries(Vec<Entry>);

impl Entries {
    fn push(
        &mut self,
        part: Part,
        (quantity, column): (&str, &'static str),
        (label, unit): (&str, &'static str),
        estimate: Option<Estimate>,
    ) -> &mut Entry {
        self.0.push(Entry {
            part,
            quantity: quantity.to_owned(),
            column,
            label: label.to_owned(),
            unit,
            estimate,
            significance: None,
            fit: None,
            words: String::new(),
        });
        let last = self.0.len() - 1;
        &mut self.0[last]
    }

    fn words(&mut self, part: Part, quantity: &str, words: &str) {
        let entry = self.push(part, (quantity, ""), ("", ""), None);
        words.clone_into(&mut entry.words);
    }

    /// What could not be read, and why.
    fn none(&mut self, part: Part, names: (&str, &'static str), label: &str, error: &GridError) {
        let entry = self.push(part, names, (label, ""), None);
        entry.words = format!("not read: {error}");
    }

    fn ground(&mut self, centre: &Centre, noise_fwhm_arcsec: f64) {
        for (axis, (quantity, label)) in [
            ("centre_dx_arcsec", "centre, offset east"),
            ("centre_dy_arcsec", "centre, offset north"),
        ]
        .into_iter()
        .enumerate()
        {
            let estimate = Some(Estimate {
                value: centre.at_arcsec[axis],
                err: centre.covariance[axis][axis].sqrt(),
            });
            self.push(
                Part::Ground,
                (quantity, "integral_thin_k_km_s"),
                (label, "arcsec"),
                estimate,
            );
        }
        let estimate = Some(Estimate {
            value: noise_fwhm_arcsec,
            err: 0.0,
        });
        let entry = self.push(
            Part::Ground,
            ("noise_width_arcsec", ""),
            ("noise goes together over", "arcsec"),
            estimate,
        );
        if noise_fwhm_arcsec == 0.0 {
            "the noise of neighbouring pointings is independent".clone_into(&mut entry.words);
        }
    }

    fn gradient(
        &mut self,
        which: &str,
        column: &'static str,
        gradient: &Result<Gradient, GridError>,
        distance_kpc: Option<Estimate>,
    ) {
        let name = format!("{which}_gradient");
        let line = if which == "thin" {
            "thin line"
        } else {
            "thick line's first moment"
        };
        let found = match gradient {
            Ok(found) => found,
            Err(error) => return self.none(Part::Gradient, (&name, column), line, error),
        };
        let size = found.size_km_s_arcsec;
        let fit = Some((found.chi2_reduced, found.readings));
        let quantity = format!("{name}_km_s_arcsec");
        let entry = self.push(
            Part::Gradient,
            (&quantity, column),
            (line, "km/s/arcsec"),
            Some(size),
        );
        entry.significance = Some(found.significance);
        entry.fit = fit;
        if let Some(distance) = distance_kpc {
            let per_pc = ARCSEC_PER_RADIAN / (distance.value * PC_PER_KPC);
            let relative = (size.err / size.value).hypot(distance.err / distance.value);
            let estimate = Estimate {
                value: size.value * per_pc,
                err: size.value * per_pc * relative,
            };
            let entry = self.push(
                Part::Gradient,
                (&format!("{name}_km_s_pc"), column),
                ("  at the distance", "km/s/pc"),
                Some(estimate),
            );
            entry.fit = fit;
        }
        let entry = self.push(
            Part::Gradient,
            (&format!("{name}_angle_deg"), column),
            ("  recedes toward", "deg"),
            Some(found.angle_deg),
        );
        entry.fit = fit;
    }

    fn parity(
        &mut self,
        name: &str,
        column: &'static str,
        label: &str,
        parity: &Result<Parity, GridError>,
    ) {
        let found = match parity {
            Ok(found) => found,
            Err(error) => return self.none(Part::Parity, (name, column), label, error),
        };
        for (part, label, unit, estimate, significance) in [
            (
                "even",
                format!("{label}, even"),
                "",
                found.even,
                Some(found.even_significance),
            ),
            (
                "even_at_centre",
                String::new(),
                "",
                found.even_at_centre,
                None,
            ),
            (
                "odd_per_arcsec",
                "  odd, per arcsec".to_owned(),
                "",
                found.odd_per_arcsec,
                Some(found.odd_significance),
            ),
            (
                "odd_angle_deg",
                "  rises toward".to_owned(),
                "deg",
                found.odd_angle_deg,
                None,
            ),
        ] {
            let entry = self.push(
                Part::Parity,
                (&format!("{name}_{part}"), column),
                (&label, unit),
                Some(estimate),
            );
            entry.significance = significance;
            entry.fit = Some((found.chi2_reduced, found.readings));
        }
    }

    fn spot(&mut self, spot: &Result<CentralSpot, GridError>) {
        let found = match spot {
            Ok(found) => found,
            Err(error) => return self.none(Part::Spot, ("moment_slope", ""), "not fitted", error),
        };
        for (quantity, label, unit, estimate, significance) in [
            (
                "moment_at_centre_km_s",
                "at the centre",
                "km/s",
                found.v_centre_km_s,
                None,
            ),
            (
                "moment_slope_km_s_arcsec",
                "rise outward",
                "km/s/arcsec",
                found.slope_km_s_arcsec,
                Some(found.significance),
            ),
        ] {
            let entry = self.push(Part::Spot, (quantity, ""), (label, unit), Some(estimate));
            entry.significance = significance;
            entry.fit = Some((found.chi2_reduced, found.readings));
        }
    }

    fn speed(&mut self, speed: &Result<SpeedProfile, GridError>) {
        let column = "v_in_km_s";
        let found = match speed {
            Ok(found) => found,
            Err(error) => {
                return self.none(Part::Speed, ("speed_slope", column), "not fitted", error);
            }
        };
        let plain = |value| Estimate { value, err: 0.0 };
        for (quantity, label, unit, estimate) in [
            (
                "speed_constant_km_s",
                "one speed",
                "km/s",
                found.constant_km_s,
            ),
            ("speed_slope", "slope q of r^-q", "", found.slope),
            (
                "speed_at_reference_km_s",
                "speed at the mean radius",
                "km/s",
                found.speed_km_s,
            ),
            (
                "speed_reference_arcsec",
                "the mean radius",
                "arcsec",
                plain(found.reference_arcsec),
            ),
            (
                "speed_chi2_over_constant",
                "",
                "",
                plain(found.chi2_over_constant),
            ),
            (
                "speed_chi2_over_free_fall",
                "",
                "",
                plain(found.chi2_over_free_fall),
            ),
        ] {
            let entry = self.push(
                Part::Speed,
                (quantity, column),
                (label, unit),
                Some(estimate),
            );
            entry.fit = Some((found.chi2_reduced, found.readings));
        }
    }
}
