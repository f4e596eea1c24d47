//! Transitions: rest frequencies with uncertainties, multiplets, and the names people write.

/// One hyperfine component of a transition.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Component {
    /// Velocity offset from the line's rest frequency, km/s; positive is toward lower frequency.
    pub offset_km_s: f64,
    /// Share of the total optical depth; the shares of a multiplet sum to 1.
    pub weight: f64,
}

/// A line that a spectrum is read and fitted with: built in, or the user's own.
#[derive(Clone, Debug, PartialEq)]
pub struct Line {
    /// Name as shown in tables and figures, such as `HCO+ 1-0`.
    pub name: String,
    /// Rest frequency, GHz.
    pub rest_frequency_ghz: f64,
    /// Standard uncertainty of the rest frequency, GHz.
    pub rest_frequency_err_ghz: f64,
    /// Components; a single one of weight 1 at offset 0 for a line without resolved structure.
    pub components: Vec<Component>,
}
