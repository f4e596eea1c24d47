#!/usr/bin/env python3
"""FITS cubes that `inrush simulate grid` writes, read by astropy: cards, checksums, places, values.

Simulates a map as cubes and as a pointing table in a temporary folder and compares the two. Any warning is
an error. Needs astropy; run from the project's root.
"""

import csv
import subprocess
import tempfile
import warnings
from pathlib import Path

import astropy.units as u
import numpy as np
from astropy.coordinates import SkyCoord
from astropy.io import fits
from astropy.wcs import WCS

warnings.simplefilter("error")

# The places of pixels are those of the table to rounding.
PLACE_TOLERANCE_ARCSEC = 1e-6
VELOCITY_TOLERANCE_KM_S = 1e-9

MAP = ["--columns", "5", "--rows", "4", "--ra-deg", "359.999", "--dec-deg", "71.5", "--spacing-arcsec", "12"]
CLUMP = ["--v-in-km-s", "0.4", "--outflow-km-s", "2", "--bad-pointings", "1", "--beam-arcsec", "25,18", "--beam-angle-deg", "40"]


def simulate(folder):
    command = ["cargo", "run", "--quiet", "--locked", "--", "--quiet", "simulate", "grid"]
    subprocess.run([*command, "--out", folder, "--write", "both", *MAP, *CLUMP], check=True)


def offsets(celestial, shape):
    """Offsets from the map's centre in the tangent plane, arcsec, by spherical trigonometry."""
    rows, columns = np.indices(shape)
    places = celestial.pixel_to_world(columns, rows)
    centre = SkyCoord(*celestial.wcs.crval, unit="deg")
    turn = places.ra - centre.ra
    height = np.sin(centre.dec) * np.sin(places.dec) + np.cos(centre.dec) * np.cos(places.dec) * np.cos(turn)
    east = np.cos(places.dec) * np.sin(turn) / height
    north = np.cos(centre.dec) * np.sin(places.dec) - np.sin(centre.dec) * np.cos(places.dec) * np.cos(turn)
    return [(plane * u.rad).to_value(u.arcsec) for plane in (east.value, (north / height).value)]


def check(folder, which, table):
    with fits.open(folder / f"{which}-cube.fits", checksum=True) as units:
        units.verify("exception")
        header, values = units[0].header, units[0].data
        assert (header["SPECSYS"], header["BUNIT"], header["RADESYS"]) == ("LSRK", "K", "ICRS")
        beam = [header[name] * 3600 for name in ("BMAJ", "BMIN")] + [header["BPA"]]
        assert np.allclose(beam, [25, 18, 40], rtol=1e-12), beam
        assert values.shape[1:] == (4, 5)
        east, north = offsets(WCS(header).celestial, values.shape[1:])
        spectral = WCS(header).spectral.pixel_to_world(np.arange(len(values))).to_value(u.km / u.s)
        compared = 0
        for row in table:
            apart = np.hypot(east - float(row["dx_arcsec"]), north - float(row["dy_arcsec"]))
            assert apart.min() < PLACE_TOLERANCE_ARCSEC, f"{row['id']}: {apart.min()} arcsec apart"
            place = np.unravel_index(apart.argmin(), apart.shape)
            spectrum = np.genfromtxt(folder / row[f"{which}_file"], delimiter=",", skip_header=6)
            assert abs(spectral - spectrum[:, 0]).max() < VELOCITY_TOLERANCE_KM_S
            found, expected = values[:, place[0], place[1]], spectrum[:, 1].astype(np.float32)
            assert np.array_equal(found, expected, equal_nan=True), f"{row['id']}: other values"
            compared += 1
    return compared


def main():
    with tempfile.TemporaryDirectory() as folder:
        folder = Path(folder)
        simulate(folder / "map")
        with open(folder / "map" / "grid.csv", newline="") as file:
            table = list(csv.DictReader(file))
        compared = sum(check(folder / "map", which, table) for which in ("thick", "thin"))
    print(f"astropy finds {compared} spectra of 2 cubes where the pointing table has them")


if __name__ == "__main__":
    main()
