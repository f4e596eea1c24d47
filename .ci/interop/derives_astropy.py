#!/usr/bin/env python3
"""Derived quantities against the same equations with the units and constants of astropy.

Fits the demonstration pair with everything given of the source that can be, and computes each value of the
printed JSON anew. Needs astropy; run from the project's root.
"""

import json
import subprocess

import astropy.constants as c
import astropy.units as u
import numpy as np
from astropy.modeling.models import BlackBody

# Both use the constants of CODATA 2022 and IAU 2015; m_H differs in its last digits.
TOLERANCE = 1e-9
M_H = 1.00782503223 * c.u
GIVEN = {
    "distance_kpc": 1.9,
    "radius_pc": 0.3,
    "mass_msun": 350.0,
    "density_slope": 1.6,
    "t_kin_k": 18.0,
    "dust_flux_jy": 0.8,
    "dust_freq_ghz": 230.0,
    "dust_temperature_k": 17.0,
    "dust_kappa_cm2_g": 0.007,
    "angle_dispersion_deg": 12.0,
    "thin_t_ex_k": 11.0,
}


def fit(**given):
    options = [word for key, value in given.items() for word in (f"--{key.replace('_', '-')}", repr(value))]
    command = ["cargo", "run", "--quiet", "--locked", "--", "fit", "demo-spectra/lantern7.toml", "--formal", "--json", "--quiet"]
    return json.loads(subprocess.run([*command, *options], check=True, capture_output=True).stdout)


def expected(row):
    radius, mass = GIVEN["radius_pc"] * u.pc, GIVEN["mass_msun"] * u.Msun
    v_in, sigma = row["v_in_km_s"] * u.km / u.s, row["sigma_km_s"] * u.km / u.s
    t_kin = GIVEN["t_kin_k"] * u.K
    planck = BlackBody(GIVEN["dust_temperature_k"] * u.K)(GIVEN["dust_freq_ghz"] * u.GHz) * u.sr
    distance, kappa = GIVEN["distance_kpc"] * u.kpc, GIVEN["dust_kappa_cm2_g"] * u.cm**2 / u.g
    rho = mass / (4 / 3 * np.pi * radius**3)
    rate = (3 - GIVEN["density_slope"]) * mass * v_in / radius
    v_ff = np.sqrt(2 * c.G * mass / radius)
    sound = np.sqrt(c.k_B * t_kin / (2.33 * M_H))
    non_thermal = np.sqrt(sigma**2 - c.k_B * t_kin / (30 * c.u))
    total = np.sqrt(sound**2 + non_thermal**2)
    virial = lambda dispersion: 5 * dispersion**2 * radius / (c.G * mass)
    # v_A = 0.5 sigma_nt/sigma_phi; B = v_A sqrt(mu_0 rho) in the SI, with the mu_0 of 1948 as in Gaussian units
    alfven = 0.5 * non_thermal / np.radians(GIVEN["angle_dispersion_deg"])
    field = alfven * np.sqrt(4e-7 * np.pi * u.N / u.A**2 * rho)
    # M/Phi over 1/(2 pi sqrt(G)), the latter in Gaussian units
    flux = (np.pi * radius**2).to_value(u.cm**2) * field.to_value(u.uT) * 1e-2
    mass_to_flux = mass.to_value(u.g) / flux * 2 * np.pi * np.sqrt(c.G.cgs.value)
    return {
        "mass_dust_msun": (GIVEN["dust_flux_jy"] * u.Jy * distance**2 / (kappa * planck)).to_value(u.Msun),
        "n_h2_mean_cm3": (rho / (2.8 * M_H)).to_value(u.cm**-3),
        "mass_rate_msun_yr": rate.to_value(u.Msun / u.yr),
        "v_ff_km_s": v_ff.to_value(u.km / u.s),
        "v_in_over_v_ff": (v_in / v_ff).to_value(u.one),
        "t_ff_yr": np.sqrt(3 * np.pi / (32 * c.G * rho)).to_value(u.yr),
        "doubling_time_yr": (mass / rate).to_value(u.yr),
        "sound_speed_km_s": sound.to_value(u.km / u.s),
        "sigma_nonthermal_km_s": non_thermal.to_value(u.km / u.s),
        "sigma_total_km_s": total.to_value(u.km / u.s),
        "mach_number": (non_thermal / sound).to_value(u.one),
        "virial_parameter": virial(total).to_value(u.one),
        "virial_thermal": virial(sound).to_value(u.one),
        "virial_nonthermal": virial(non_thermal).to_value(u.one),
        "isothermal_rate_msun_yr": (0.975 * total**3 / c.G).to_value(u.Msun / u.yr),
        "field_ug": field.to_value(u.uT) * 1e4,
        "mass_to_flux": mass_to_flux,
        "v_alfven_km_s": alfven.to_value(u.km / u.s),
        "v_in_over_v_alfven": (v_in / alfven).to_value(u.one),
    }


def main():
    row = fit(**GIVEN)
    values = expected(row)
    for name, value in values.items():
        assert abs(row[name] / value - 1) < TOLERANCE, f"{name}: {row[name]}, expected {value}"
    # the same rate from the density at the radius
    density = values["n_h2_mean_cm3"] * (1 - GIVEN["density_slope"] / 3)
    dense = fit(**GIVEN, n_h2_cm3=float(density))
    assert dense["mass_rate_from"] == "4 pi R^2 rho v_in" != row["mass_rate_from"]
    assert abs(dense["mass_rate_msun_yr"] / values["mass_rate_msun_yr"] - 1) < TOLERANCE
    print(f"astropy agrees on {len(values) + 1} derived quantities")


if __name__ == "__main__":
    main()
