//! How slab fits are compared with scipy's: the settings of `benches/against_scipy.py` and of
//! `tests/data/spheres/least-squares.csv`.

use inrush::fit::{Averaging, FitRange, FitSettings};
use inrush::model::Model;

/// All channels, models at the channels' centres, and the comparison's bounds; v_lsr about `middle_km_s`.
pub fn settings(model: Model, middle_km_s: f64) -> FitSettings {
    let (tau, temperature) = match model {
        Model::Hill => (200.0, 400.0),
        _ => (80.0, 150.0),
    };
    let bounds = [
        ("v_lsr_km_s", (middle_km_s - 3.0, middle_km_s + 3.0)),
        ("v_in_km_s", (-3.0, 3.0)),
        ("sigma_km_s", (0.15, 4.0)),
        ("tau", (0.05, tau)),
        ("t_front_k", (2.73, temperature)),
        ("t_rear_k", (2.73, temperature)),
        ("t_peak_k", (2.73, temperature)),
        ("peak_thin_k", (0.0, 100.0)),
    ];
    FitSettings {
        models: vec![model],
        range: Some(FitRange::All),
        averaging: Averaging::Centre,
        bounds: bounds
            .into_iter()
            .filter(|(name, _)| *name == "peak_thin_k" || model.position(name).is_some())
            .map(|(name, bounds)| (name.to_owned(), bounds))
            .collect(),
        ..FitSettings::default()
    }
}
