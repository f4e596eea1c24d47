//! Simulated pairs into files.
