#!/usr/bin/env python3
"""FITS spectra that `inrush simulate` writes, read by astropy: cards, checksums, axis, values.

Simulates pairs in a temporary folder and compares both FITS axes with the CSV files. Any warning is an
error. Needs astropy; run from the project's root.
"""

import subprocess
import tempfile
import warnings
from pathlib import Path

import astropy.units as u
import numpy as np
from astropy.io import fits
from astropy.wcs import WCS

warnings.simplefilter("error")

# Frequencies of 1e11 Hz hold velocities to a few 1e-11 km/s.
VELOCITY_TOLERANCE_KM_S = 1e-9


def simulate(folder, axis):
    command = ["cargo", "run", "--quiet", "--locked", "--", "--quiet", "simulate", "pair"]
    options = ["--out", folder, "--format", "both", "--fits-axis", axis, "--name", "O'Clump \N{GREEK SMALL LETTER ALPHA}"]
    subprocess.run([*command, *options], check=True)


def check(folder, which, axis):
    csv = np.loadtxt(folder / f"{which}.csv", delimiter=",", comments=["#", "velocity_km_s"])
    with fits.open(folder / f"{which}.fits", checksum=True) as units:
        units.verify("exception")
        header, values = units[0].header, units[0].data
        assert (values == csv[:, 1]).all(), f"{which}: other values"
        assert header["OBJECT"].startswith("O'Clump "), header["OBJECT"]
        assert (header["SPECSYS"], header["BUNIT"]) == ("LSRK", "K")
        world = WCS(header).pixel_to_world(np.arange(len(values))).quantity
        rest = u.doppler_radio(header["RESTFRQ"] * u.Hz)
        velocity = world.to_value(u.km / u.s, equivalencies=rest if axis == "frequency" else [])
        worst = abs(velocity - csv[:, 0]).max()
        assert worst < VELOCITY_TOLERANCE_KM_S, f"{which}: velocities off by {worst} km/s"
    return len(values)


def main():
    channels = 0
    for axis in ("velocity", "frequency"):
        with tempfile.TemporaryDirectory() as folder:
            simulate(folder, axis)
            channels += sum(check(Path(folder), which, axis) for which in ("thick", "thin"))
    print(f"astropy reads {channels} channels of 4 FITS spectra as the CSV files have them")


if __name__ == "__main__":
    main()
