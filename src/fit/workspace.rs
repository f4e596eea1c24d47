//! Buffers that fits leave to each other.

use crate::numeric::least_squares;

/// Buffers of a thread, kept from pair to pair; they grow and never shrink.
///
/// Results do not depend on what was fitted with it before.
#[derive(Clone, Debug, Default)]
pub struct Workspace {
    /// Of the search over all parameters.
    pub(super) search: least_squares::Workspace,
    /// Of searches that compete, one each.
    pub(super) runners: Vec<least_squares::Workspace>,
    /// Of scans: columns over the channels.
    pub(super) columns: Vec<f64>,
    /// Of searches with the amplitudes solved for: one a line.
    pub(super) lines: [LineBuffers; 2],
}

impl Workspace {
    /// Empty buffers.
    #[must_use]
    pub fn new() -> Self {
        Self::default()
    }
}

/// Of one line, columns over the channels: its functions, what its slopes are made of, the slopes, and the
/// residuals.
#[derive(Clone, Debug, Default)]
pub(super) struct LineBuffers {
    pub functions: Vec<f64>,
    pub parts: Vec<f64>,
    pub slopes: Vec<f64>,
    pub residuals: Vec<f64>,
}
