//! Spectra of spheres in thermal equilibrium against integrals that can be written down.
//!
//! Level shares, opacities and the transfer equation are written out here a second time; molecular
//! constants are those of HCO+ as its data file states them.

#![allow(clippy::unwrap_used)]

use inrush::line::Component;
use inrush::sphere::{Beam, Clump, Fineness, LineField, Molecule, Populations, Shells, emergent};

const SINGLE: [Component; 1] = [Component::SINGLE];

fn clump() -> Clump {
    Clump {
        inner_radius_pc: 1e-3,
        outer_radius_pc: 0.2,
        n_h2_cm3: 3e4,
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
    (-60..=60).map(|step| f64::from(step) * 0.04).collect()
}

fn spectrum(clump: &Clump, shells: usize, beam: Beam, fineness: &Fineness) -> Vec<f64> {
    let molecule = Molecule::built_in("HCO+").unwrap();
    let shells = Shells::of_clump(clump, shells).unwrap();
    let populations = Populations::thermal(&shells, &molecule);
    let field = LineField::new(&shells, &molecule, 0, &populations);
    emergent(&shells, &field, &SINGLE, beam, &velocities(), fineness).unwrap()
}

/// HCO+ 1-0: frequency in GHz, A in s^-1.
const LINE: (f64, f64) = (89.188_523, 4.2512e-5);

/// h nu/k in K with the exact SI constants.
fn photon_k() -> f64 {
    6.626_070_15e-34 * LINE.0 * 1e9 / 1.380_649e-23
}

fn radiation_k(temperature_k: f64) -> f64 {
    photon_k() / ((photon_k() / temperature_k).exp() - 1.0)
}

/// Opacity of HCO+ 1-0 at the line's centre for one molecule a cm^3 and sigma = 1 km/s, pc^-1:
/// c^3 A/(8 pi nu^3) (n_0 3 - n_1)/(sqrt(2 pi) sigma), shares of a rigid rotor's levels.
fn opacity(temperature_k: f64) -> f64 {
    // energies of the file's levels, cm^-1; higher ones hold less than 1e-9 at 15 K
    let energies = [
        0.0, 2.975, 8.925, 17.8497, 29.7491, 44.6228, 62.4706, 83.2919, 107.0864, 133.8536,
        163.5927, 196.3033, 231.9844,
    ];
    let kelvin = 6.626_070_15e-34 * 2.997_924_58e10 / 1.380_649e-23;
    let weighted: Vec<f64> = energies
        .iter()
        .enumerate()
        .map(|(j, e)| (2.0 * j as f64 + 1.0) * (-kelvin * e / temperature_k).exp())
        .collect();
    let sum: f64 = weighted.iter().sum();
    let difference = 3.0 * weighted[0] / sum - weighted[1] / sum;
    let wavelength_cm = 2.997_924_58e10 / (LINE.0 * 1e9);
    wavelength_cm.powi(3) * LINE.1 / (8.0 * std::f64::consts::PI) * difference
        / (1e5 * std::f64::consts::TAU.sqrt())
        * 3.085_677_581_491_367e18
}

fn phi(velocity: f64, sigma: f64) -> f64 {
    (-0.5 * (velocity / sigma).powi(2)).exp()
}

fn largest(values: &[f64]) -> f64 {
    values.iter().copied().fold(0.0, f64::max)
}

/// Largest difference over the larger of the two peaks.
fn difference(a: &[f64], b: &[f64]) -> f64 {
    let worst = a
        .iter()
        .zip(b)
        .map(|(a, b)| (a - b).abs())
        .fold(0.0, f64::max);
    worst / largest(a).max(largest(b))
}

#[test]
fn one_line_of_sight_through_a_uniform_sphere_has_the_spectrum_of_a_layer() {
    for (abundance, offset) in [(1e-11, 0.0), (1e-9, 0.05), (3e-8, 0.19)] {
        let clump = Clump {
            abundance,
            ..clump()
        };
        let path = 2.0 * (0.2_f64.powi(2) - offset * offset).sqrt()
            - if offset == 0.0 { 2e-3 } else { 0.0 };
        let depth = opacity(12.0) * 3e4 * abundance * path / 0.3;
        let expected: Vec<f64> = velocities()
            .iter()
            .map(|v| {
                (radiation_k(12.0) - radiation_k(2.725_48)) * (1.0 - (-depth * phi(*v, 0.3)).exp())
            })
            .collect();
        let found = spectrum(
            &clump,
            7,
            Beam::Pencil { offset_pc: offset },
            &Fineness::default(),
        );
        let difference = difference(&found, &expected);
        println!("depth {depth:.3}: {difference:.1e}");
        // the file's level energies and frequencies agree to 3e-6
        assert!(difference < 1e-5, "{abundance} {offset}: {difference}");
    }
}

#[test]
fn a_beam_on_a_uniform_sphere_averages_over_its_disc() {
    let outer = 0.2;
    for (fwhm, offset) in [(0.1, 0.0), (0.3, 0.0), (0.25, 0.1), (0.08, 0.19)] {
        let s = fwhm / (8.0 * 2.0_f64.ln()).sqrt();
        let clump = Clump {
            abundance: 5e-9,
            ..clump()
        };
        let depth = opacity(12.0) * 3e4 * 5e-9 * 2.0 * outer / 0.3;
        let contrast = radiation_k(12.0) - radiation_k(2.725_48);
        // midpoint rule in two dimensions over the disc, 400 by 400
        let cells = 400;
        let step = 2.0 * outer / f64::from(cells);
        let expected: Vec<f64> = velocities()
            .iter()
            .map(|v| {
                let mut sum = 0.0;
                for i in 0..cells {
                    for k in 0..cells {
                        let x = -outer + (f64::from(i) + 0.5) * step;
                        let y = -outer + (f64::from(k) + 0.5) * step;
                        let chord = 1.0 - (x * x + y * y) / (outer * outer);
                        if chord > 0.0 {
                            let beam = (-((x - offset).powi(2) + y * y) / (2.0 * s * s)).exp();
                            sum += beam * (1.0 - (-depth * chord.sqrt() * phi(*v, 0.3)).exp());
                        }
                    }
                }
                contrast * sum * step * step / (std::f64::consts::TAU * s * s)
            })
            .collect();
        let beam = Beam::Gaussian {
            fwhm_pc: fwhm,
            offset_pc: offset,
        };
        let found = spectrum(&clump, 10, beam, &Fineness::default());
        let difference = difference(&found, &expected);
        println!("depth {depth:.0}, FWHM {fwhm}, offset {offset}: {difference:.1e}");
        assert!(difference < 1e-3, "{fwhm} {offset}: {difference}");
    }
}

#[test]
fn the_integral_of_a_thin_line_is_the_column_whatever_moves() {
    let still = Clump {
        density_slope: 1.7,
        inner_radius_pc: 0.004,
        abundance: 1e-14,
        ..clump()
    };
    let offset = 0.02_f64;
    // column along the line of sight, in units of n_R pc: Simpson's rule in z = b sinh t
    let n = |z: f64| (z.hypot(offset) / 0.2).powf(-1.7);
    let far = (0.2_f64.powi(2) - offset * offset).sqrt();
    let end = (far / offset).asinh();
    let intervals = 2000;
    let column: f64 = (0..=intervals)
        .map(|i| {
            let t = end * f64::from(i) / f64::from(intervals);
            let weight = if i == 0 || i == intervals {
                1.0
            } else if i % 2 == 1 {
                4.0
            } else {
                2.0
            };
            weight * n(offset * t.sinh()) * offset * t.cosh()
        })
        .sum::<f64>()
        * end
        / f64::from(intervals)
        / 3.0
        * 2.0;
    let expected = (radiation_k(12.0) - radiation_k(2.725_48))
        * opacity(12.0)
        * 3e4
        * 1e-14
        * column
        * std::f64::consts::TAU.sqrt();
    for (v_in_km_s, velocity_slope) in [(0.0, 0.0), (0.3, 0.0), (-0.5, 0.0), (0.2, 0.5)] {
        let clump = Clump {
            v_in_km_s,
            velocity_slope,
            ..still
        };
        let found: f64 = 0.04
            * spectrum(
                &clump,
                12,
                Beam::Pencil { offset_pc: offset },
                &Fineness::default(),
            )
            .iter()
            .sum::<f64>();
        assert!(
            (found / expected - 1.0).abs() < 1e-3,
            "{v_in_km_s}: {found} {expected}"
        );
    }
}

#[test]
fn spectra_of_clumps_at_rest_are_symmetric_and_reversed_motion_mirrors_them() {
    let beam = Beam::Gaussian {
        fwhm_pc: 0.15,
        offset_pc: 0.03,
    };
    let warm_inside = Clump {
        inner_radius_pc: 0.005,
        density_slope: 1.5,
        temperature_slope: 0.4,
        abundance: 3e-9,
        ..clump()
    };
    let of = |v_in_km_s: f64| {
        let clump = Clump {
            v_in_km_s,
            velocity_slope: 0.5,
            ..warm_inside
        };
        spectrum(&clump, 16, beam, &Fineness::default())
    };
    let reversed = |mut values: Vec<f64>| {
        values.reverse();
        values
    };
    assert!(difference(&of(0.0), &reversed(of(0.0))) < 1e-12);
    for v_in in [0.05, 0.2, 0.6] {
        let infall = of(v_in);
        assert!(difference(&infall, &reversed(of(-v_in))) < 1e-12);
        // warmer inside and falling in: brighter at lower velocities
        let (blue, red) = infall.split_at(60);
        assert!(largest(blue) > 1.05 * largest(red), "{v_in}");
    }
}

#[test]
fn a_moving_sphere_with_gradients_agrees_with_the_transfer_equation_in_small_steps() {
    for (v_in, q) in [(0.15, 0.0), (0.2, 0.5), (-0.4, 0.5)] {
        let clump = Clump {
            inner_radius_pc: 0.01,
            density_slope: 1.5,
            temperature_slope: 0.4,
            abundance: 2e-9,
            v_in_km_s: v_in,
            velocity_slope: q,
            ..clump()
        };
        for offset in [0.0_f64, 0.03, 0.12] {
            let far = (0.2_f64.powi(2) - offset * offset).sqrt();
            let steps = 20_000;
            let dz = 2.0 * far / f64::from(steps);
            let mut expected = vec![radiation_k(2.725_48); velocities().len()];
            for i in 0..steps {
                let z = -far + (f64::from(i) + 0.5) * dz;
                let r = z.hypot(offset);
                if r < 0.01 {
                    continue;
                }
                let x = r / 0.2;
                let t = 12.0 * x.powf(-0.4);
                let alpha = opacity(t) * 3e4 * x.powf(-1.5) * 2e-9 / 0.3;
                let speed = v_in * x.powf(-q) * z / r;
                for (intensity, v) in expected.iter_mut().zip(velocities()) {
                    let tau = alpha * phi(v - speed, 0.3) * dz;
                    *intensity = *intensity * (-tau).exp() + radiation_k(t) * -(-tau).exp_m1();
                }
            }
            for value in &mut expected {
                *value -= radiation_k(2.725_48);
            }
            let beam = Beam::Pencil { offset_pc: offset };
            let differences = [20, 40, 80, 160].map(|shells| {
                difference(
                    &spectrum(&clump, shells, beam, &Fineness::default()),
                    &expected,
                )
            });
            println!("v_in {v_in}, q {q}, offset {offset}: {differences:?}");
            assert!(
                differences[3] < 1e-3,
                "{v_in} {q} {offset}: {differences:?}"
            );
            // three times twice as many shells: of second order where steps of speed do not divide them
            assert!(differences[3] < differences[0] / 8.0, "{differences:?}");
        }
    }
}

#[test]
fn components_of_a_thin_multiplet_add_up_at_their_offsets() {
    let thin = Clump {
        abundance: 1e-14,
        density_slope: 1.5,
        inner_radius_pc: 0.01,
        v_in_km_s: 0.2,
        ..clump()
    };
    let molecule = Molecule::built_in("HCN").unwrap();
    let shells = Shells::of_clump(&thin, 12).unwrap();
    let field = LineField::new(
        &shells,
        &molecule,
        0,
        &Populations::thermal(&shells, &molecule),
    );
    let beam = Beam::Gaussian {
        fwhm_pc: 0.2,
        offset_pc: 0.0,
    };
    let seen = |components: &[Component], velocity: &[f64]| {
        emergent(
            &shells,
            &field,
            components,
            beam,
            velocity,
            &Fineness::default(),
        )
        .unwrap()
    };
    // HCN 1-0: offsets and shares of F = 1-1, 2-1 and 0-1
    let multiplet =
        [(4.8433, 3.0), (0.0, 5.0), (-7.0632, 1.0)].map(|(offset_km_s, parts)| Component {
            offset_km_s,
            weight: parts / 9.0,
        });
    let velocity: Vec<f64> = (-90..=60).map(|step| f64::from(step) * 0.1).collect();
    let found = seen(&multiplet, &velocity);
    let mut expected = vec![0.0; velocity.len()];
    for component in multiplet {
        let shifted: Vec<f64> = velocity.iter().map(|v| v - component.offset_km_s).collect();
        for (sum, value) in expected.iter_mut().zip(seen(&SINGLE, &shifted)) {
            *sum += component.weight * value;
        }
    }
    assert!(difference(&found, &expected) < 1e-3);
}
