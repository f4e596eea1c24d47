//! Infall velocities from pairs of millimetre spectral lines.
//!
//! An optically thick and an optically thin line toward a star-forming clump go in; an infall
//! velocity with its errors, the asymmetry measures of the literature, tables and figures come out.
//!
//! Data flow one way, and the modules are listed in that order: a module uses only what stands
//! above it (`tests/layering.rs` holds that as a table).
//!
//! | module | turns |
//! | --- | --- |
//! | [`constants`] | nothing: physical constants with uncertainty and source |
//! | [`mod@line`] | a name into a transition with its rest frequency and multiplet |
//! | [`numeric`] | numbers into numbers: exponentials, least squares, noise processes; no astronomy |
//! | [`model`] | parameters into a line profile and its Jacobian |
//! | [`sphere`] | a clump and a molecule into level populations and the spectrum a beam sees |
//! | [`spectrum`] | arrays into one checked spectrum with noise and windows |
//! | [`read`] | files into spectra as the file states them |
//! | [`prepare`] | those into calibrated, baseline-free spectra with measured noise |
//! | [`measure`] | a prepared pair into asymmetry measures, without a model |
//! | [`fit`] | models and a prepared pair into parameters, errors and cautions |
//! | [`mod@derive`] | a fit and properties of the source into rates, time scales and support |
//! | [`grid`] | pointings on the sky into maps |
//! | [`rank`] | findings about many sources into an ordered list with reasons, and sample statistics |
//! | [`simulate`] | a truth into spectra |
//! | [`report`] | results into tables, FITS and figures |
//! | [`run`] | a run sheet into all of the above |

pub mod constants;
pub mod derive;
pub mod fit;
pub mod grid;
pub mod line;
pub mod measure;
pub mod model;
pub mod numeric;
pub mod prepare;
pub mod rank;
pub mod read;
pub mod report;
pub mod run;
pub mod simulate;
pub mod spectrum;
pub mod sphere;
