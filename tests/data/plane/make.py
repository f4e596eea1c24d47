#!/usr/bin/env python3
"""Planes through velocities on the sky, fitted by numpy and scipy; writes the files beside it.

    python3 make.py        (numpy 2.4, scipy 1.17)

velocities.csv holds invented pointings of a clump with a gradient; expected.json what the fits give:
`scipy` is scipy.optimize.curve_fit with absolute errors (independent pointings), `sandwich` numpy's normal
equations with weights 1/error^2 and the full covariance error_i error_j 2^(-2 d_ij^2/width^2).
"""

import json
from pathlib import Path

import numpy as np
from scipy.optimize import curve_fit

HERE = Path(__file__).parent
NOISE_FWHM_ARCSEC = 22.0


def pointings():
    """An irregular raster: 7 by 6, jittered, three left out, errors that grow outward."""
    generator = np.random.default_rng(20261201)
    x, y = np.meshgrid(11.0 * (np.arange(7) - 3.2), 10.0 * (np.arange(6) - 2.4))
    x, y = [(axis + generator.normal(0, 1.0, axis.shape)).ravel() for axis in (x, y)]
    kept = np.delete(np.arange(x.size), [4, 17, 30])
    x, y = x[kept], y[kept]
    error = 0.02 * (1 + (x**2 + y**2) / 1500)
    velocity = 7.3 + 0.0061 * x - 0.0043 * y + 0.03 * np.sin(x / 15) + generator.normal(0, error)
    return [axis.round(6) for axis in (x, y, velocity, error)]


def size_and_angle(parameters, covariance):
    """Gradient, its position angle (north through east) and both errors, to first order."""
    a, b = parameters[1:]
    size = np.hypot(a, b)
    slopes = np.array([[0, a / size, b / size], [0, b / size**2, -a / size**2]])
    errors = np.sqrt(np.diag(slopes @ covariance @ slopes.T))
    return {
        "v_centre_km_s": parameters[0],
        "v_centre_err_km_s": covariance[0, 0] ** 0.5,
        "size_km_s_arcsec": size,
        "size_err_km_s_arcsec": errors[0],
        "angle_deg": np.degrees(np.arctan2(a, b)) % 360,
        "angle_err_deg": np.degrees(errors[1]),
    }


def main():
    x, y, velocity, error = pointings()
    lines = ["dx_arcsec,dy_arcsec,v_km_s,v_err_km_s"]
    lines += [",".join(map(str, row)) for row in zip(x, y, velocity, error)]
    (HERE / "velocities.csv").write_text("\n".join(lines) + "\n")

    def plane(place, v, a, b):
        return v + a * place[0] + b * place[1]

    by_scipy = curve_fit(plane, (x, y), velocity, sigma=error, absolute_sigma=True)
    design = np.column_stack([np.ones_like(x), x, y])
    weights = np.diag(error**-2)
    inverse = np.linalg.inv(design.T @ weights @ design)
    parameters = inverse @ design.T @ weights @ velocity
    square = (x[:, None] - x) ** 2 + (y[:, None] - y) ** 2
    covariance = np.outer(error, error) * 2 ** (-2 * square / NOISE_FWHM_ARCSEC**2)
    spread = inverse @ design.T @ weights @ covariance @ weights @ design @ inverse
    residual = (velocity - design @ parameters) / error
    expected = {
        "noise_fwhm_arcsec": NOISE_FWHM_ARCSEC,
        "chi2": residual @ residual,
        "scipy": size_and_angle(*by_scipy),
        "sandwich": size_and_angle(parameters, spread),
    }
    (HERE / "expected.json").write_text(json.dumps(expected, indent=2) + "\n")


if __name__ == "__main__":
    main()
