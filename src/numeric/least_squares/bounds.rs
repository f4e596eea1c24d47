//! The box a search stays in.

/// The values a parameter may take, both ends included.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Interval {
    /// Smallest value, or minus infinity.
    pub lower: f64,
    /// Largest value, or plus infinity.
    pub upper: f64,
}

impl Interval {
    /// Every real number.
    pub const UNBOUNDED: Self = Self {
        lower: f64::NEG_INFINITY,
        upper: f64::INFINITY,
    };

    /// From `lower` to `upper`.
    #[must_use]
    pub const fn new(lower: f64, upper: f64) -> Self {
        Self { lower, upper }
    }

    /// `lower` or more.
    #[must_use]
    pub const fn at_least(lower: f64) -> Self {
        Self::new(lower, f64::INFINITY)
    }

    /// `upper` or less.
    #[must_use]
    pub const fn at_most(upper: f64) -> Self {
        Self::new(f64::NEG_INFINITY, upper)
    }

    /// Only `value`: the parameter is not fitted.
    #[must_use]
    pub const fn fixed(value: f64) -> Self {
        Self::new(value, value)
    }

    /// Whether the interval is a single value.
    #[must_use]
    pub fn is_fixed(&self) -> bool {
        self.lower == self.upper
    }

    /// Whether `value` lies inside.
    #[must_use]
    pub fn contains(&self, value: f64) -> bool {
        self.lower <= value && value <= self.upper
    }

    /// The value of the interval nearest to `value`.
    #[must_use]
    pub fn nearest(&self, value: f64) -> f64 {
        value.max(self.lower).min(self.upper)
    }

    /// The end that `value` sits on.
    #[must_use]
    pub fn side(&self, value: f64) -> Option<Side> {
        if self.is_fixed() {
            Some(Side::Fixed)
        } else if value <= self.lower {
            Some(Side::Lower)
        } else if value >= self.upper {
            Some(Side::Upper)
        } else {
            None
        }
    }
}

/// Which end of its interval a parameter sits on.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Side {
    /// The lower end.
    Lower,
    /// The upper end.
    Upper,
    /// Both: the interval is a single value.
    Fixed,
}

/// Intervals of all real numbers for `parameters` parameters.
#[must_use]
pub fn unbounded(parameters: usize) -> Vec<Interval> {
    vec![Interval::UNBOUNDED; parameters]
}
