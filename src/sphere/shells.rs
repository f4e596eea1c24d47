//! A clump cut into shells: mean density, temperature and motion of each.
//!
//! Inside a shell the density keeps its power law and the speed is that of the clump at every
//! point; temperature, dispersion and level populations are one value a shell.

use super::clump::Clump;
use super::error::{SphereError, checked};
use super::power_integral;

/// Shells are even in this power of the radius: between linear and logarithmic.
const SPACING: f64 = 1.0 / 3.0;

/// And become thinner toward the surface, where the excitation falls steeply: the distance from it
/// grows with this power of the number of shells. Both powers are those, of a few tried, with which
/// spectra on 12 and 16 shells are nearest to those on 40.
const GRADING: f64 = 1.5;

/// Columns of a table of shells, innermost first.
#[derive(Clone, Debug, PartialEq)]
pub struct ShellTable {
    /// Radii of the edges, pc: one more than shells, ascending.
    pub edge_pc: Vec<f64>,
    /// H2 per cm^3 in each shell.
    pub n_h2_cm3: Vec<f64>,
    /// Kinetic temperature, K.
    pub t_kin_k: Vec<f64>,
    /// Inward speed, km/s; negative is expansion.
    pub v_in_km_s: Vec<f64>,
    /// Velocity dispersion of the line, km/s.
    pub sigma_km_s: Vec<f64>,
    /// Molecules per H2.
    pub abundance: Vec<f64>,
}

/// Concentric shells.
#[derive(Clone, Debug, PartialEq)]
pub struct Shells {
    pub(super) table: ShellTable,
    /// Radii that the shells' populations stand for, pc.
    pub(super) centre_pc: Vec<f64>,
    /// The clump that they are cut from; `None` for a table.
    pub(super) clump: Option<Clump>,
}

impl Shells {
    /// A clump cut into `count` shells, at least 1.
    ///
    /// # Errors
    ///
    /// [`SphereError::Impossible`] for a clump that [`Clump::checked`] refuses.
    pub fn of_clump(clump: &Clump, count: usize) -> Result<Self, SphereError> {
        let clump = clump.checked()?;
        let count = count.max(1);
        let (inner, outer) = (clump.inner_radius_pc, clump.outer_radius_pc);
        let (low, high) = (inner.powf(SPACING), outer.powf(SPACING));
        let mut edge_pc: Vec<f64> = (0..=count)
            .map(|index| {
                let t = 1.0 - (1.0 - index as f64 / count as f64).powf(GRADING);
                (low + (high - low) * t).powf(1.0 / SPACING)
            })
            .collect();
        edge_pc[0] = inner;
        edge_pc[count] = outer;
        let n_h2_cm3 = edge_pc
            .windows(2)
            .map(|edges| {
                // mean over the volume, scaled to the outer radius
                let (a, b) = (edges[0] / outer, edges[1] / outer);
                clump.n_h2_cm3 * power_integral(a, b, 2.0 - clump.density_slope)
                    / power_integral(a, b, 2.0)
            })
            .collect();
        let centre_pc: Vec<f64> = edge_pc
            .windows(2)
            .map(|edges| outer * centre_of_collisions(edges, &clump))
            .collect();
        let table = ShellTable {
            n_h2_cm3,
            t_kin_k: centre_pc.iter().map(|r| clump.temperature_k(*r)).collect(),
            v_in_km_s: centre_pc
                .iter()
                .map(|r| clump.inward_speed_km_s(*r))
                .collect(),
            sigma_km_s: vec![clump.sigma_km_s; count],
            abundance: vec![clump.abundance; count],
            edge_pc,
        };
        Ok(Self {
            table,
            centre_pc,
            clump: Some(clump),
        })
    }

    /// Shells of a table; everything is constant inside a shell, the speed included.
    ///
    /// # Errors
    ///
    /// [`SphereError::Length`] where columns do not go together, [`SphereError::Impossible`] where a
    /// value is not that of a shell.
    pub fn of_table(table: ShellTable) -> Result<Self, SphereError> {
        let count = table.edge_pc.len().saturating_sub(1);
        checked("number of shells", count as f64, count > 0, "at least 1")?;
        let columns = [
            ("n_h2_cm3", &table.n_h2_cm3),
            ("t_kin_k", &table.t_kin_k),
            ("sigma_km_s", &table.sigma_km_s),
            ("abundance", &table.abundance),
            ("v_in_km_s", &table.v_in_km_s),
        ];
        for (quantity, column) in columns {
            if column.len() != count {
                return Err(SphereError::Length {
                    quantity,
                    found: column.len(),
                    expected: count,
                });
            }
            for value in column {
                let possible = quantity == "v_in_km_s" || *value > 0.0;
                checked(quantity, *value, possible, "more than 0")?;
            }
        }
        checked(
            "edge_pc",
            table.edge_pc[0],
            table.edge_pc[0] > 0.0,
            "more than 0",
        )?;
        for edges in table.edge_pc.windows(2) {
            let ascending = edges[1] > edges[0];
            checked("edge_pc", edges[1], ascending, "more than the edge before")?;
        }
        Ok(Self {
            centre_pc: table
                .edge_pc
                .windows(2)
                .map(|edges| 0.5 * (edges[0] + edges[1]))
                .collect(),
            table,
            clump: None,
        })
    }

    /// Number of shells.
    #[must_use]
    pub fn count(&self) -> usize {
        self.table.n_h2_cm3.len()
    }

    /// The columns.
    #[must_use]
    pub fn table(&self) -> &ShellTable {
        &self.table
    }

    /// Radii that the shells' populations stand for, pc: where the density is the mean over a
    /// shell's mass, or the middles of the shells of a table.
    #[must_use]
    pub fn centre_pc(&self) -> &[f64] {
        &self.centre_pc
    }

    /// H2 per cm^3 that the molecules of a shell collide with: the mean over its mass.
    pub(super) fn collider_cm3(&self, shell: usize) -> f64 {
        match &self.clump {
            Some(clump) => clump.density_cm3(self.centre_pc[shell]),
            None => self.table.n_h2_cm3[shell],
        }
    }

    /// Inward speed in a shell at a radius in pc, km/s.
    pub(super) fn inward_speed_km_s(&self, shell: usize, radius_pc: f64) -> f64 {
        match &self.clump {
            Some(clump) if clump.velocity_slope != 0.0 => clump.inward_speed_km_s(radius_pc),
            Some(clump) => clump.v_in_km_s,
            None => self.table.v_in_km_s[shell],
        }
    }

    /// Density in a shell at a radius in pc over the shell's mean.
    pub(super) fn relative_density(&self, shell: usize, radius_pc: f64) -> f64 {
        match &self.clump {
            Some(clump) if clump.density_slope != 0.0 => {
                clump.density_cm3(radius_pc) / self.table.n_h2_cm3[shell]
            }
            _ => 1.0,
        }
    }

    /// Largest speed, km/s.
    pub(super) fn fastest_km_s(&self) -> f64 {
        let at_edge = |shell: usize, radius: f64| self.inward_speed_km_s(shell, radius).abs();
        (0..self.count())
            .flat_map(|shell| {
                let edges = &self.table.edge_pc[shell..shell + 2];
                [at_edge(shell, edges[0]), at_edge(shell, edges[1])]
            })
            .fold(0.0, f64::max)
    }

    /// Where the edges lie between the radii that shells stand for; the first and the last lie
    /// beyond them.
    pub(super) fn edges(&self) -> impl Iterator<Item = Between> {
        let centres = &self.centre_pc;
        let last = centres.len() - 1;
        self.table
            .edge_pc
            .iter()
            .enumerate()
            .map(move |(edge, radius)| {
                let shell = edge.saturating_sub(1).min(last.saturating_sub(1));
                let next = (shell + 1).min(last);
                let width = (centres[next] / centres[shell]).ln();
                Between {
                    shell,
                    next,
                    fraction: if next == shell {
                        0.0
                    } else {
                        (radius / centres[shell]).ln() / width
                    },
                }
            })
    }
}

/// A place between two shells, in the logarithm of the radius.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Between {
    pub(super) shell: usize,
    pub(super) next: usize,
    /// 0 at the first, 1 at the next.
    pub(super) fraction: f64,
}

/// Radius over the outer one at which the density is its mean over the mass between two edges.
fn centre_of_collisions(edges: &[f64], clump: &Clump) -> f64 {
    // a power close to 0 in place of 0: the limit is the mean logarithm
    let p = clump.density_slope;
    let p = if p.abs() < 1e-4 { 1e-4 } else { p };
    let [a, b] = [edges[0], edges[1]].map(|edge| edge / clump.outer_radius_pc);
    let mean = power_integral(a, b, 2.0 - 2.0 * p) / power_integral(a, b, 2.0 - p);
    mean.powf(-1.0 / p).clamp(a, b)
}
