#!/usr/bin/env python3
"""Inrush and astropy agree on cubes.

Writes sky positions of pixels by astropy.wcs, positions in other frames by astropy.coordinates and
packed cubes by astropy.io.fits, and lets tests/reads_cubes.rs compare. Needs astropy; run from the
project's root:

    python3 .ci/interop/cubes_astropy.py              # new random headers, in a temporary folder
    python3 .ci/interop/cubes_astropy.py --data DIR   # only write the files

The second form made tests/data/cubes, with the seed below.
"""

import argparse
import gzip
import json
import os
import pathlib
import subprocess
import sys
import tempfile
import warnings

import numpy as np
from astropy import units as u
from astropy.coordinates import FK4, FK5, ICRS, Galactic, SkyCoord
from astropy.io import fits
from astropy.wcs import WCS

SEED = 20261201
SHAPE = (23, 17)  # columns, rows of the images whose pixels are placed


def header(cards):
    made = fits.Header()
    for keyword, value in cards.items():
        made[keyword] = value
    return made


def sky_cards(random, projection, frame, form):
    """Celestial axes as 1 and 2, or as 3 and 1 where the form says so."""
    lon, lat = ("GLON", "GLAT") if frame == "galactic" else ("RA", "DEC")
    longitude = random.uniform(0, 360)
    latitude = random.uniform(-65, 65)
    if projection in ("CAR", "SFL") and random.random() < 0.5:
        latitude = 0.0
    step = random.uniform(3, 25) / 3600
    steps = (-step, step * random.uniform(0.8, 1.25))
    first, second = (3, 1) if form == "latitude_first" else (1, 2)
    naxis = {first: SHAPE[0], second: SHAPE[1]}
    code = f"{projection:>{8 - len(lon)}}".replace(" ", "-")
    code_lat = f"{projection:>{8 - len(lat)}}".replace(" ", "-")
    cards = {
        f"CTYPE{first}": lon + code,
        f"CTYPE{second}": lat + code_lat,
        f"CRVAL{first}": longitude,
        f"CRVAL{second}": latitude,
        f"CRPIX{first}": random.uniform(-20, 40),
        f"CRPIX{second}": random.uniform(-20, 40),
    }
    angle = np.radians(random.uniform(-180, 180))
    rotation = np.array([[np.cos(angle), -np.sin(angle)], [np.sin(angle), np.cos(angle)]])
    axes = (first, second)
    if form == "cd":
        matrix = np.diag(steps) @ rotation @ np.array([[1, 0.05], [0, 1]])
        for i in range(2):
            for j in range(2):
                cards[f"CD{axes[i]}_{axes[j]}"] = matrix[i, j]
    else:
        cards[f"CDELT{first}"], cards[f"CDELT{second}"] = steps
    if form == "pc":
        for i in range(2):
            for j in range(2):
                cards[f"PC{axes[i]}_{axes[j]}"] = rotation[i, j]
    if form == "crota":
        cards[f"CROTA{second}"] = np.degrees(angle)
    if form == "arcsec":
        for axis in axes:
            cards[f"CUNIT{axis}"] = "arcsec"
            cards[f"CRVAL{axis}"] *= 3600
            cards[f"CDELT{axis}"] *= 3600
    if form == "lonpole":
        cards["LONPOLE"] = random.uniform(0, 360)
        if projection in ("CAR", "SFL"):
            # There is a pole for angles near 0 in the north, near 180 in the south.
            near = 0.0 if latitude >= 0 else 180.0
            cards["LONPOLE"] = near + random.choice([0.0, 15.0, -20.0])
    if frame == "fk5":
        cards["EQUINOX"] = 2000.0
    elif frame == "fk4":
        cards["RADESYS"] = "FK4"
        cards["EQUINOX"] = 1950.0
    elif frame == "icrs":
        cards["RADESYS"] = "ICRS"
    return cards, naxis, (first, second)


FRAMES = {
    "icrs": ICRS(),
    "fk5": FK5(equinox="J2000"),
    "fk4": FK4(equinox="B1950", obstime="B1950"),
    "galactic": Galactic(),
}


def sky_cases(random):
    cases = []
    for projection in ("TAN", "SIN", "CAR", "SFL", "GLS"):
        for frame in FRAMES:
            for form in ("plain", "crota", "cd", "pc", "arcsec", "latitude_first", "lonpole"):
                if projection == "GLS" and form == "lonpole":
                    continue
                cards, naxis, (first, second) = sky_cards(random, projection, frame, form)
                spectral = ({1, 2, 3} - {first, second}).pop()
                cards |= {
                    f"CTYPE{spectral}": "VRAD",
                    f"CRVAL{spectral}": 0.0,
                    f"CRPIX{spectral}": 1.0,
                    f"CDELT{spectral}": 100.0,
                    f"CUNIT{spectral}": "m/s",
                }
                if form == "cd":
                    cards[f"CD{spectral}_{spectral}"] = 100.0
                naxis[spectral] = 2
                wcs = WCS(header(cards), naxis=3)
                world_lon, world_lat = wcs.wcs.lng, wcs.wcs.lat
                pixels = [
                    [random.uniform(0, SHAPE[0] - 1), random.uniform(0, SHAPE[1] - 1)] for _ in range(6)
                ]
                positions = []
                for x, y in pixels:
                    pixel = np.zeros((1, 3))
                    pixel[0, first - 1], pixel[0, second - 1] = x, y
                    world = wcs.all_pix2world(pixel, 0)[0]
                    positions.append([world[world_lon], world[world_lat]])
                if not np.all(np.isfinite(positions)):
                    sys.exit(f"astropy has no position: {cards}")
                # In the other frames: the first pixel.
                here = SkyCoord(*positions[0], unit="deg", frame=FRAMES[frame])
                elsewhere = {}
                for name, other in FRAMES.items():
                    there = here.transform_to(other).spherical
                    elsewhere[name] = [there.lon.to_value(u.deg) % 360, there.lat.to_value(u.deg)]
                cases.append(
                    {
                        "name": f"{projection} {frame} {form}",
                        "frame": frame,
                        "naxis": [naxis[axis] for axis in (1, 2, 3)],
                        "cards": cards,
                        "pixels": pixels,
                        "positions": positions,
                        "first_elsewhere": elsewhere,
                    }
                )
    return cases


def packed_cubes(random, folder):
    """A small cube, packed in several ways; what astropy unpacks is what is expected."""
    shape = (7, 5, 6)  # channels, rows, columns
    data = random.normal(0, 0.1, shape).astype("f4")
    data += 3 * np.exp(-0.5 * ((np.arange(7)[:, None, None] - 3) / 1.2) ** 2)
    cards = {
        "CTYPE1": "RA---TAN",
        "CTYPE2": "DEC--TAN",
        "CTYPE3": "VRAD",
        "CRVAL1": 83.0,
        "CRVAL2": -5.0,
        "CRVAL3": 1000.0,
        "CRPIX1": 3.0,
        "CRPIX2": 3.0,
        "CRPIX3": 1.0,
        "CDELT1": -0.002,
        "CDELT2": 0.002,
        "CDELT3": 200.0,
        "CUNIT3": "m/s",
        "BMAJ": 0.005,
        "BMIN": 0.004,
        "BPA": 30.0,
        "BUNIT": "K",
        "RESTFRQ": 89.1885247e9,
        "SPECSYS": "LSRK",
    }
    head = header(cards)
    expected = {}

    def keep(name, values):
        expected[name] = [None if not np.isfinite(v) else float(v) for v in np.asarray(values, "f4").ravel()]

    with_blank = data.copy()
    with_blank[:, 1, 2] = np.nan
    for name, values, settings in [
        ("rice.fits.fz", with_blank, {"compression_type": "RICE_1", "quantize_level": 16}),
        (
            "rice_dithered.fits.fz",
            with_blank,
            {"compression_type": "RICE_1", "quantize_level": 16, "quantize_method": 1, "dither_seed": 77},
        ),
        ("rice_plane_tiles.fits.fz", data, {"compression_type": "RICE_1", "tile_shape": (1, 5, 6)}),
        ("rice_odd_tiles.fits.fz", data, {"compression_type": "RICE_1", "tile_shape": (2, 2, 4)}),
        ("gzip1_lossless.fits.fz", with_blank, {"compression_type": "GZIP_1", "quantize_level": 0.0}),
        ("gzip2_lossless.fits.fz", with_blank, {"compression_type": "GZIP_2", "quantize_level": 0.0}),
        ("hcompress.fits.fz", data, {"compression_type": "HCOMPRESS_1", "tile_shape": (1, 5, 6)}),
    ]:
        hdu = fits.CompImageHDU(values, head, **settings)
        fits.HDUList([fits.PrimaryHDU(), hdu]).writeto(folder / name, overwrite=True)
        with fits.open(folder / name) as read:
            keep(name, read[1].data)

    integers = np.round(data * 1000).astype("i2")
    integers[:, 4, 5] = -32768
    head_integers = head.copy()
    head_integers["BLANK"] = -32768
    hdu = fits.CompImageHDU(integers, head_integers, compression_type="RICE_1")
    # astropy takes both away while it has the pixels.
    hdu.header["BSCALE"] = 0.001
    hdu.header["BZERO"] = 0.25
    fits.HDUList([fits.PrimaryHDU(), hdu]).writeto(folder / "rice_integers.fits.fz", overwrite=True)
    values = integers * 0.001 + 0.25
    values[integers == -32768] = np.nan
    keep("rice_integers.fits.fz", values)

    plain = folder / "plain.fits"
    fits.PrimaryHDU(with_blank, head).writeto(plain, overwrite=True)
    (folder / "plain.fits.gz").write_bytes(gzip.compress(plain.read_bytes(), mtime=0))
    plain.unlink()
    keep("plain.fits.gz", with_blank)
    return expected


def write(folder, seed):
    random = np.random.default_rng(seed)
    folder.mkdir(parents=True, exist_ok=True)
    warnings.simplefilter("ignore")
    (folder / "sky.json").write_text(json.dumps(sky_cases(random), indent=1) + "\n")
    (folder / "packed.json").write_text(json.dumps(packed_cubes(random, folder), indent=None) + "\n")


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--data", type=pathlib.Path, help="only write the files into this folder")
    data = parser.parse_args().data
    if data:
        write(data, SEED)
        return
    with tempfile.TemporaryDirectory() as folder:
        seed = int(np.random.default_rng().integers(1 << 31))
        print(f"seed {seed}")
        write(pathlib.Path(folder), seed)
        subprocess.run(
            ["cargo", "test", "--quiet", "--test", "reads_cubes"],
            check=True,
            env=os.environ | {"INRUSH_CUBES": folder},
        )


if __name__ == "__main__":
    main()
