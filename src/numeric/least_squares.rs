//! Bounded nonlinear least squares.
