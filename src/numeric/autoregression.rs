//! Stationary noise with correlation between neighbours, as an autoregressive process.

/// x_i = sum_k a_k x_(i-k) + e_i with unit variance of x; order 0 is white noise.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Autoregression {
    /// a_1, a_2, ... ; empty for white noise.
    pub coefficients: Vec<f64>,
}
