//! Two levels with escaping photons in place of a molecule: limits that can be written down.

#![allow(clippy::unwrap_used)]

use inrush::line::Component;
use inrush::model::RadiationTemperature;
use inrush::sphere::{Beam, Clump, Fineness, LineField, Shells, SphereError, TwoLevel, emergent};

const FREQUENCY_GHZ: f64 = 93.173_4;

fn clump() -> Clump {
    Clump {
        inner_radius_pc: 1e-3,
        outer_radius_pc: 0.2,
        n_h2_cm3: 1e4,
        density_slope: 0.0,
        t_kin_k: 12.0,
        temperature_slope: 0.0,
        v_in_km_s: 0.0,
        velocity_slope: 0.0,
        sigma_km_s: 0.3,
        abundance: 1e-9,
    }
}

fn velocities() -> Vec<f64> {
    (-30..=30).map(|step| f64::from(step) * 0.06).collect()
}

fn spectrum(clump: &Clump, radial_depth: f64, collision_ratio: f64, offset_pc: f64) -> Vec<f64> {
    let shells = Shells::of_clump(clump, 20).unwrap();
    let line = TwoLevel {
        frequency_ghz: FREQUENCY_GHZ,
        radial_depth,
        collision_ratio,
    };
    let field = LineField::two_level(&shells, clump, &line).unwrap();
    assert!((field.radial_depth(&shells) / radial_depth - 1.0).abs() < 2e-3);
    let beam = Beam::Pencil { offset_pc };
    let single = [Component::SINGLE];
    emergent(
        &shells,
        &field,
        &single,
        beam,
        &velocities(),
        &Fineness::default(),
    )
    .unwrap()
}

/// A layer of a depth at the line's centre and a source in K.
fn layer(depth: f64, source_k: f64) -> Vec<f64> {
    let background = RadiationTemperature::new(FREQUENCY_GHZ).background();
    velocities()
        .iter()
        .map(|v| (source_k - background) * -(-depth * (-0.5 * (v / 0.3).powi(2)).exp()).exp_m1())
        .collect()
}

fn difference(a: &[f64], b: &[f64]) -> f64 {
    let peak = b.iter().copied().fold(0.0, f64::max);
    a.iter()
        .zip(b)
        .map(|(a, b)| (a - b).abs())
        .fold(0.0, f64::max)
        / peak
}

#[test]
fn many_collisions_make_the_gas_temperature() {
    let gas = RadiationTemperature::new(FREQUENCY_GHZ).at(12.0);
    let found = spectrum(&clump(), 5.0, 1e6, 0.0);
    assert!(difference(&found, &layer(10.0, gas)) < 1e-3);
}

#[test]
fn thin_gas_has_the_source_of_two_levels_without_trapping() {
    // S = (J_bg + e J)/(1 + e)
    let radiation = RadiationTemperature::new(FREQUENCY_GHZ);
    for ratio in [0.03, 0.5, 4.0] {
        let source = (radiation.background() + ratio * radiation.at(12.0)) / (1.0 + ratio);
        let found = spectrum(&clump(), 1e-4, ratio, 0.0);
        assert!(difference(&found, &layer(2e-4, source)) < 1e-3, "{ratio}");
    }
}

#[test]
fn no_collisions_leave_the_background() {
    let found = spectrum(&clump(), 20.0, 1e-9, 0.05);
    assert!(found.iter().all(|value| value.abs() < 1e-5));
}

#[test]
fn trapping_brightens_lines_and_reversed_motion_mirrors_them() {
    let middle = |v_in_km_s: f64, depth: f64| {
        let clump = Clump {
            density_slope: 1.5,
            inner_radius_pc: 0.01,
            v_in_km_s,
            velocity_slope: 0.5,
            ..clump()
        };
        let spectrum = spectrum(&clump, depth, 0.02, 0.02);
        let reversed: Vec<f64> = spectrum.iter().rev().copied().collect();
        (
            spectrum.iter().copied().fold(0.0, f64::max),
            spectrum,
            reversed,
        )
    };
    let (thin, thick) = (middle(0.0, 0.3), middle(0.0, 30.0));
    assert!(thick.0 > 2.0 * thin.0);
    // mirrored where the motion is reversed
    assert!(difference(&middle(0.3, 30.0).1, &middle(-0.3, 30.0).2) < 1e-12);
}

#[test]
fn impossible_lines_are_refused() {
    let shells = Shells::of_clump(&clump(), 4).unwrap();
    let line = TwoLevel {
        frequency_ghz: FREQUENCY_GHZ,
        radial_depth: -1.0,
        collision_ratio: 1.0,
    };
    let error = LineField::two_level(&shells, &clump(), &line).unwrap_err();
    assert!(matches!(error, SphereError::Impossible { .. }));
    assert_eq!(error.to_string(), "radial_depth -1, expected more than 0");
}
