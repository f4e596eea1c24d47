//! A spherical clump: power laws of density, temperature and inward speed between two radii.

use super::error::{SphereError, checked};

/// A spherical clump with power laws in the radius r, all referred to the outer radius R:
///
/// n(r) = n_R (r/R)^-p, T(r) = T_R (r/R)^-m, v_in(r) = v_R (r/R)^-q,
///
/// with constant dispersion and abundance. Nothing lies inside the inner and outside the outer
/// radius.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Clump {
    /// Inner radius, pc: above 0.
    pub inner_radius_pc: f64,
    /// Outer radius R, pc: above the inner one.
    pub outer_radius_pc: f64,
    /// H2 per cm^3 at R, n_R: above 0.
    pub n_h2_cm3: f64,
    /// p, falling outward where positive: -5 to 5.
    pub density_slope: f64,
    /// Kinetic temperature at R, T_R, K: 2.72548 (background) to 10000.
    pub t_kin_k: f64,
    /// m, falling outward where positive: -2 to 2.
    pub temperature_slope: f64,
    /// Inward speed at R, v_R, km/s; negative is expansion: -100 to 100.
    pub v_in_km_s: f64,
    /// q: 0 for a constant speed, 0.5 for free fall toward a central mass; -2 to 2.
    pub velocity_slope: f64,
    /// Velocity dispersion of the line, thermal and turbulent together, km/s: above 0.
    pub sigma_km_s: f64,
    /// Molecules per H2: above 0, at most 1.
    pub abundance: f64,
}

impl Clump {
    /// The clump if its properties are within their ranges.
    ///
    /// # Errors
    ///
    /// [`SphereError::Impossible`] names the first property that is not.
    ///
    /// ```
    /// use inrush::sphere::Clump;
    ///
    /// let clump = Clump {
    ///     inner_radius_pc: 0.005,
    ///     outer_radius_pc: 0.2,
    ///     n_h2_cm3: 2e4,
    ///     density_slope: 1.5,
    ///     t_kin_k: 15.0,
    ///     temperature_slope: 0.0,
    ///     v_in_km_s: 0.2,
    ///     velocity_slope: 0.5,
    ///     sigma_km_s: 0.3,
    ///     abundance: 2e-9,
    /// }
    /// .checked()?;
    /// assert_eq!(clump.inward_speed_km_s(0.05), 0.4);
    /// let inside_out = Clump { inner_radius_pc: 0.3, ..clump };
    /// assert_eq!(
    ///     inside_out.checked().unwrap_err().to_string(),
    ///     "outer_radius_pc 0.2, expected more than the inner radius"
    /// );
    /// # Ok::<(), inrush::sphere::SphereError>(())
    /// ```
    pub fn checked(self) -> Result<Self, SphereError> {
        let inner = self.inner_radius_pc;
        checked("inner_radius_pc", inner, inner > 0.0, "more than 0")?;
        let outer = self.outer_radius_pc;
        checked(
            "outer_radius_pc",
            outer,
            outer > inner,
            "more than the inner radius",
        )?;
        let n = self.n_h2_cm3;
        checked("n_h2_cm3", n, n > 0.0, "more than 0")?;
        let p = self.density_slope;
        checked("density_slope", p, p.abs() <= 5.0, "-5 to 5")?;
        let t = self.t_kin_k;
        checked(
            "t_kin_k",
            t,
            (2.725_48..=1e4).contains(&t),
            "2.72548 (the background) to 10000",
        )?;
        let m = self.temperature_slope;
        checked("temperature_slope", m, m.abs() <= 2.0, "-2 to 2")?;
        let v = self.v_in_km_s;
        checked("v_in_km_s", v, v.abs() <= 100.0, "-100 to 100")?;
        let q = self.velocity_slope;
        checked("velocity_slope", q, q.abs() <= 2.0, "-2 to 2")?;
        let sigma = self.sigma_km_s;
        checked("sigma_km_s", sigma, sigma > 0.0, "more than 0")?;
        let x = self.abundance;
        checked("abundance", x, x > 0.0 && x <= 1.0, "above 0, at most 1")?;
        Ok(self)
    }

    /// v_in(r), km/s, of r in pc.
    #[must_use]
    pub fn inward_speed_km_s(&self, radius_pc: f64) -> f64 {
        self.v_in_km_s * (radius_pc / self.outer_radius_pc).powf(-self.velocity_slope)
    }

    /// T(r), K, of r in pc.
    #[must_use]
    pub fn temperature_k(&self, radius_pc: f64) -> f64 {
        self.t_kin_k * (radius_pc / self.outer_radius_pc).powf(-self.temperature_slope)
    }

    /// n(H2)(r), cm^-3, of r in pc.
    #[must_use]
    pub fn density_cm3(&self, radius_pc: f64) -> f64 {
        self.n_h2_cm3 * (radius_pc / self.outer_radius_pc).powf(-self.density_slope)
    }

    /// H2 per cm^2 from the inner to the outer radius.
    #[must_use]
    pub fn column_cm2(&self) -> f64 {
        let ratio = self.inner_radius_pc / self.outer_radius_pc;
        self.n_h2_cm3
            * self.outer_radius_pc
            * super::CM_PER_PC
            * super::power_integral(ratio, 1.0, -self.density_slope)
    }
}
