//! What a map says of infall, rotation and outflow, and what it cannot tell apart.

use super::{
    CentralSpot, Centre, Field, Gradient, GridError, Parity, SpeedProfile, central_spot, gradient,
    parity, speed_profile,
};

/// The maps of one clump. Each holds the pointings that have the quantity.
#[derive(Clone, Debug, PartialEq)]
pub struct ClumpMaps {
    /// Velocity of the thin line, km/s.
    pub thin_velocity: Field,
    /// First moment of the thick line over one range of velocities, km/s
    /// ([`first_moment`](crate::measure::first_moment)).
    pub thick_moment: Field,
    /// Blue less red in the core of the thick line ([`sides`](crate::measure::sides)).
    pub core: Field,
    /// Blue less red in its wings.
    pub wings: Field,
    /// Change of each reading of `core` by the systematic of the rest frequencies; empty for none.
    pub core_systematic: Vec<f64>,
    /// Intensity asymmetry of the thick line.
    pub asymmetry: Field,
    /// Change of each of its readings by the systematic of the rest frequencies; empty for none.
    pub asymmetry_systematic: Vec<f64>,
    /// Normalised velocity difference.
    pub delta_v: Field,
    /// The same of it.
    pub delta_v_systematic: Vec<f64>,
    /// Inward speed of the pair fits, km/s.
    pub speed: Field,
}

/// All that a map says.
#[derive(Clone, Debug, PartialEq)]
pub struct Diagnosis {
    /// The clump's centre.
    pub centre: Centre,
    /// Velocity gradient of the thin line.
    pub gradient: Result<Gradient, GridError>,
    /// The same of the thick line's first moment.
    pub thick_gradient: Result<Gradient, GridError>,
    /// Even and odd part of the core.
    pub core: Result<Parity, GridError>,
    /// Even and odd part of the wings.
    pub wings: Result<Parity, GridError>,
    /// Even and odd part of the intensity asymmetry; not in the verdict.
    pub asymmetry: Result<Parity, GridError>,
    /// Even and odd part of the normalised velocity difference; not in the verdict.
    pub delta_v: Result<Parity, GridError>,
    /// First moment of the thick line against radius.
    pub spot: Result<CentralSpot, GridError>,
    /// Inward speed against radius.
    pub speed: Result<SpeedProfile, GridError>,
    /// What follows.
    pub verdict: SpatialVerdict,
}

/// What the core of the thick line shows on all sides of the centre.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Even {
    /// Blue on all sides: infall.
    Blue {
        /// Of the even part, its mean and its change with radius together.
        significance: f64,
    },
    /// Red on all sides: expansion.
    Red {
        /// Of the even part, its mean and its change with radius together.
        significance: f64,
    },
    /// Blue or red in the mean, but not beside the axis of what is odd: an outflow's lobes in front of and
    /// behind the clump can do that.
    AlongAxisOnly {
        /// Of the even part, its mean and its change with radius together.
        significance: f64,
    },
    /// Neither blue nor red in the mean.
    Neither {
        /// Largest even part, of either sign, that 95 % of the error leave possible.
        limit: f64,
    },
    /// Too few pointings.
    Untold,
}

/// What makes the map odd about its centre.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Odd {
    /// The thin line has a gradient, the thick line's asymmetry is not odd or is so along that gradient:
    /// rotation or another shear. No outflow is seen.
    Rotation {
        /// Position angle in which the thin line recedes, deg.
        angle_deg: f64,
        /// Of the thin line's gradient.
        significance: f64,
    },
    /// The thick line is odd, the thin line has no gradient: an outflow.
    Outflow {
        /// Position angle of the approaching lobe, deg.
        angle_deg: f64,
        /// Of the odd part.
        significance: f64,
    },
    /// The thick line is odd along the thin line's gradient, and moves by more than twice of it: an
    /// outflow, whose lobes the thin line may show; rotation is not told from that.
    OutflowAlongGradient {
        /// Position angle of the approaching lobe, deg.
        angle_deg: f64,
        /// Of the odd part.
        significance: f64,
    },
    /// The thick line is odd along another axis than the thin line's gradient: rotation and an outflow.
    Both {
        /// Position angle in which the thin line recedes, deg.
        rotation_deg: f64,
        /// Position angle of the approaching lobe, deg.
        outflow_deg: f64,
    },
    /// Neither the thin line nor the thick line's asymmetry changes along any axis.
    Neither,
    /// Too few pointings.
    Untold,
}

/// The verdict on a map.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct SpatialVerdict {
    /// Infall or expansion.
    pub even: Even,
    /// Rotation or outflow.
    pub odd: Odd,
}

/// Significance from which anything counts as seen: chance makes one in 370.
const SEEN: f64 = 3.0;

/// Significance that what is even needs beside the axis of what is odd: once it is seen at all, nothing there
/// would pass this in 2 % of maps.
const BESIDE: f64 = 2.0;

/// Angle within which axes count as one however small their errors: clumps are not that regular.
const ALIGNED_DEG: f64 = 30.0;

/// How many times the thin line's gradient the thick line may have by rotation: opaque gas near the
/// surface weighs radii other than thin gas does, but not more than that.
const THICK_OVER_THIN: f64 = 2.0;

/// Deviations of a normal variable within which 95 % lie.
const LIMIT: f64 = 1.96;

/// Everything that a map says, given its centre.
#[must_use]
pub fn diagnose(maps: &ClumpMaps, centre: &Centre, beam_fwhm_arcsec: f64) -> Diagnosis {
    let at = centre.at_arcsec;
    let thin = gradient(&maps.thin_velocity, at);
    let thick = gradient(&maps.thick_moment, at);
    let split = |map, systematic: &[f64]| parity(map, centre, systematic, beam_fwhm_arcsec);
    let core = split(&maps.core, &maps.core_systematic);
    let wings = split(&maps.wings, &[]);
    let verdict = SpatialVerdict {
        even: even(core.as_ref().ok(), wings.as_ref().ok()),
        odd: odd(&thin, &thick, core.as_ref().ok(), wings.as_ref().ok()),
    };
    Diagnosis {
        centre: *centre,
        gradient: thin,
        thick_gradient: thick,
        core,
        wings,
        asymmetry: split(&maps.asymmetry, &maps.asymmetry_systematic),
        delta_v: split(&maps.delta_v, &maps.delta_v_systematic),
        spot: central_spot(&maps.thick_moment, centre),
        speed: speed_profile(&maps.speed, centre, beam_fwhm_arcsec),
        verdict,
    }
}

fn even(core: Option<&Parity>, wings: Option<&Parity>) -> Even {
    let Some(core) = core else {
        return Even::Untold;
    };
    let significance = core.even_significance;
    if significance.abs() < SEEN {
        let mean = core.even;
        return Even::Neither {
            limit: mean.value.abs() + LIMIT * mean.err,
        };
    }
    // lobes that act on the core show as something odd: beside their axis there is nothing of them
    let has_axis = [Some(core), wings]
        .into_iter()
        .flatten()
        .any(|map| map.odd_significance >= SEEN);
    let beside = core.across.map(|part| part * significance.signum());
    if has_axis && beside.is_none_or(|beside| beside < BESIDE) {
        return Even::AlongAxisOnly { significance };
    }
    if significance > 0.0 {
        Even::Blue { significance }
    } else {
        Even::Red {
            significance: -significance,
        }
    }
}

fn odd(
    thin: &Result<Gradient, GridError>,
    thick: &Result<Gradient, GridError>,
    core: Option<&Parity>,
    wings: Option<&Parity>,
) -> Odd {
    let Ok(thin) = thin else {
        return Odd::Untold;
    };
    let most = [wings, core]
        .into_iter()
        .flatten()
        .filter(|map| map.odd_significance >= SEEN)
        .max_by(|a, b| a.odd_significance.total_cmp(&b.odd_significance));
    let turns = thin.significance >= SEEN;
    match (most, turns) {
        (None, false) => Odd::Neither,
        (None, true) => Odd::Rotation {
            angle_deg: thin.angle_deg.value,
            significance: thin.significance,
        },
        (Some(map), false) => Odd::Outflow {
            angle_deg: map.odd_angle_deg.value,
            significance: map.odd_significance,
        },
        (Some(map), true) => {
            // blue lies where the thin line approaches, if rotation makes both
            let apart = turned(map.odd_angle_deg.value, thin.angle_deg.value + 180.0);
            let error = map.odd_angle_deg.err.hypot(thin.angle_deg.err);
            let other_axis = apart > ALIGNED_DEG.max(SEEN * error);
            if other_axis {
                Odd::Both {
                    rotation_deg: thin.angle_deg.value,
                    outflow_deg: map.odd_angle_deg.value,
                }
            } else if exceeds(thick, thin) {
                Odd::OutflowAlongGradient {
                    angle_deg: map.odd_angle_deg.value,
                    significance: map.odd_significance,
                }
            } else {
                Odd::Rotation {
                    angle_deg: thin.angle_deg.value,
                    significance: thin.significance,
                }
            }
        }
    }
}

/// Angle between two directions, deg, 0 to 180.
fn turned(one_deg: f64, other_deg: f64) -> f64 {
    let apart = (one_deg - other_deg).rem_euclid(360.0);
    apart.min(360.0 - apart)
}

/// Whether the thick line's gradient is more than the thin line's by rotation.
fn exceeds(thick: &Result<Gradient, GridError>, thin: &Gradient) -> bool {
    thick.as_ref().is_ok_and(|thick| {
        let (thick, thin) = (thick.size_km_s_arcsec, thin.size_km_s_arcsec);
        thick.value - THICK_OVER_THIN * thin.value
            > SEEN * thick.err.hypot(THICK_OVER_THIN * thin.err)
    })
}

impl SpatialVerdict {
    /// Whether infall is seen.
    #[must_use]
    pub fn infall(&self) -> bool {
        matches!(self.even, Even::Blue { .. })
    }

    /// The verdict in a sentence or two.
    #[must_use]
    pub fn sentence(&self) -> String {
        format!("{} {}", self.even_sentence(), self.odd_sentence())
    }

    /// What is even about the centre, in a sentence.
    #[must_use]
    pub fn even_sentence(&self) -> String {
        match self.even {
            Even::Blue { significance } => format!(
                "The core of the thick line is blue on all sides of the centre ({significance:.1} sigma): infall, which neither rotation nor an outflow makes."
            ),
            Even::Red { significance } => format!(
                "The core of the thick line is red on all sides of the centre ({significance:.1} sigma): expansion, which neither rotation nor an outflow makes."
            ),
            Even::AlongAxisOnly { significance } => format!(
                "The core of the thick line is {} in the mean ({:.1} sigma), but not beside the axis of what is odd: an outflow can do that, and infall is not shown.",
                if significance > 0.0 { "blue" } else { "red" },
                significance.abs()
            ),
            Even::Neither { limit } => format!(
                "The core of the thick line is neither blue nor red about the centre (even part below {limit:.3} at 95 %): infall is not seen."
            ),
            Even::Untold => {
                "Too few pointings tell blue from red: infall is neither shown nor excluded."
                    .to_owned()
            }
        }
    }

    /// What is odd along an axis, in a sentence.
    #[must_use]
    pub fn odd_sentence(&self) -> String {
        match self.odd {
            Odd::Rotation {
                angle_deg,
                significance,
            } => format!(
                "The thin line has a gradient toward {angle_deg:.0} deg ({significance:.1} sigma): rotation or another shear; an outflow along the same axis is not excluded."
            ),
            Odd::Outflow {
                angle_deg,
                significance,
            } => format!(
                "The thick line is blue toward {angle_deg:.0} deg and red opposite ({significance:.1} sigma), without a gradient of the thin line: an outflow, not rotation."
            ),
            Odd::OutflowAlongGradient {
                angle_deg,
                significance,
            } => format!(
                "The thick line is blue toward {angle_deg:.0} deg and red opposite ({significance:.1} sigma), by more than twice what the thin line does: an outflow; rotation along the same axis is not excluded."
            ),
            Odd::Both {
                rotation_deg,
                outflow_deg,
            } => format!(
                "The thin line has a gradient toward {rotation_deg:.0} deg, and the thick line is blue toward {outflow_deg:.0} deg: rotation and an outflow."
            ),
            Odd::Neither => {
                "No line changes along any axis: neither rotation nor an outflow is seen."
                    .to_owned()
            }
            Odd::Untold => {
                "Too few pointings have a thin line: rotation and outflow are not told apart."
                    .to_owned()
            }
        }
    }
}
