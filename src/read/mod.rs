//! Files into spectra, one file per format.
