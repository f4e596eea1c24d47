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
    /// Density and speed inside each shell.
    inside: Vec<Inside>,
    /// The clump that they are cut from; `None` for a table.
    clump: Option<Clump>,
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
        let shells = table.edge_pc.windows(2).zip(&table.n_h2_cm3);
        Ok(Self {
            inside: shells
                .map(|(edges, mean)| {
                    Inside::new(edges, |radius| {
                        let speed = clump.inward_speed_km_s(radius) / radius;
                        [clump.density_cm3(radius) / mean, speed]
                    })
                })
                .collect(),
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
            inside: table
                .edge_pc
                .windows(2)
                .zip(&table.v_in_km_s)
                .map(|(edges, speed)| Inside::new(edges, |radius| [1.0, speed / radius]))
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

    /// Density over the shell's mean, and inward speed over radius in km/s per pc, in a shell at a
    /// radius in pc.
    #[inline]
    pub(super) fn inside(&self, shell: usize, radius_pc: f64) -> [f64; 2] {
        self.inside[shell].at(radius_pc)
    }

    /// Largest speed, km/s.
    pub(super) fn fastest_km_s(&self) -> f64 {
        (0..self.count())
            .flat_map(|shell| {
                let edges = &self.table.edge_pc[shell..shell + 2];
                [edges[0], edges[1]].map(|radius| self.inside(shell, radius)[1].abs() * radius)
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

/// Points through which polynomials inside a shell go.
const ORDER: usize = 6;

/// Polynomials in the radius through six points of each of two functions: for power laws in a shell
/// whose radii are as 1 to 2, good to 5e-4; as 1 to 1.1, to 3e-9.
#[derive(Clone, Copy, Debug, PartialEq)]
struct Inside {
    middle_pc: f64,
    per_half_width: f64,
    coefficients: [[f64; 2]; ORDER],
}

impl Inside {
    fn new(edges: &[f64], functions: impl Fn(f64) -> [f64; 2]) -> Self {
        // Chebyshev's nodes, and the polynomial through them by divided differences
        const NODES: [f64; ORDER] = [
            -0.965_925_826_289_068_2,
            -std::f64::consts::FRAC_1_SQRT_2,
            -0.258_819_045_102_520_6,
            0.258_819_045_102_520_7,
            std::f64::consts::FRAC_1_SQRT_2,
            0.965_925_826_289_068_3,
        ];
        let middle_pc = 0.5 * (edges[0] + edges[1]);
        let half = 0.5 * (edges[1] - edges[0]);
        let mut newton = NODES.map(|x| functions(middle_pc + half * x));
        for order in 1..ORDER {
            for k in (order..ORDER).rev() {
                for one in 0..2 {
                    newton[k][one] =
                        (newton[k][one] - newton[k - 1][one]) / (NODES[k] - NODES[k - order]);
                }
            }
        }
        let mut coefficients = [[0.0; 2]; ORDER];
        for one in 0..2 {
            // from Newton's form to powers
            for k in (0..ORDER).rev() {
                for power in (0..ORDER).rev() {
                    let lower = if power > 0 {
                        coefficients[power - 1][one]
                    } else {
                        0.0
                    };
                    coefficients[power][one] = lower - NODES[k] * coefficients[power][one];
                }
                coefficients[0][one] += newton[k][one];
            }
        }
        Self {
            middle_pc,
            per_half_width: 1.0 / half,
            coefficients,
        }
    }

    #[inline]
    fn at(&self, radius_pc: f64) -> [f64; 2] {
        let x = (radius_pc - self.middle_pc) * self.per_half_width;
        let highest = self.coefficients[ORDER - 1];
        let rest = self.coefficients[..ORDER - 1].iter().rev();
        rest.fold(highest, |[density, speed], lower| {
            [density * x + lower[0], speed * x + lower[1]]
        })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn power_laws_inside_a_shell_are_kept() {
        for (outer, tolerance) in [(2.0, 6e-4), (1.1, 1e-8)] {
            let functions = |radius: f64| [radius.powf(-2.0), 0.3 * radius.powf(-1.5)];
            let inside = Inside::new(&[1.0, outer], functions);
            for step in 0..=20 {
                let radius = 1.0 + (outer - 1.0) * f64::from(step) / 20.0;
                let (found, exact) = (inside.at(radius), functions(radius));
                for one in 0..2 {
                    let error = (found[one] / exact[one] - 1.0).abs();
                    assert!(error < tolerance, "{radius}: {error}");
                }
            }
        }
    }
}
