//! Run-time choice of vector instructions.
