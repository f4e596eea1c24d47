#!/usr/bin/env python3
"""astropy reads what `inrush map` writes, and finds pixels where Inrush has them.

Makes the maps of the demonstration's cubes and table. Needs astropy; run from the project's root:

    python3 .ci/interop/maps_astropy.py [PROGRAM]

PROGRAM is the binary; without it cargo builds and runs it.
"""

import pathlib
import subprocess
import sys
import tempfile
import warnings

import numpy as np
from astropy import units as u
from astropy.coordinates import SkyCoord
from astropy.io import fits
from astropy.table import Table
from astropy.wcs import WCS

DEMO = pathlib.Path("demo-spectra/lantern7-map")
# The bar for sky positions.
POSITION_TOLERANCE_ARCSEC = 0.01


def run(program, sheet, out):
    command = [*program, "map", str(DEMO / sheet), "--out", str(out), "--formal", "--quiet"]
    result = subprocess.run(command, capture_output=True, text=True)
    if result.returncode not in (0, 1):
        sys.exit(f"{' '.join(command)}: {result.stderr}")


def check(out):
    products = sorted(out.rglob("*.fits"))
    for path in products:
        with fits.open(path, checksum=True) as units:
            units.verify("exception")
    table = Table.read(out / "pointings.fits")
    ecsv = Table.read(out / "pointings.ecsv")
    assert len(table) == len(ecsv) > 60, len(table)
    assert table["dx_arcsec"].unit == u.arcsec and ecsv["v_in_km_s"].unit == u.km / u.s
    motions = Table.read(out / "motions.ecsv")
    assert len(motions) == len(Table.read(out / "motions.fits")) > 30, len(motions)
    by_name = {row["quantity"]: row for row in motions}
    # The clump rotates about an axis at 30 deg: the thin line recedes at a right angle to it.
    off = (by_name["thin_gradient_angle_deg"]["value"] - 30.0) % 180.0 - 90.0
    assert abs(off) < 15.0, off
    centre = SkyCoord(262.5, -34.2, unit="deg", frame="icrs")
    maps = [path for path in products if path.parent.name == "maps"]
    assert len(maps) > 40, len(maps)
    worst = 0.0
    for path in maps:
        with fits.open(path) as units:
            header, data = units[0].header, units[0].data
        wcs = WCS(header)
        name = path.stem
        rows, columns = np.nonzero(np.isfinite(data)) if name != "cautions" else np.nonzero(data)
        sky = wcs.pixel_to_world(columns, rows).icrs
        # The same plane: TAN about the centre.
        offset = sky.transform_to(centre.skyoffset_frame())
        east = np.tan(offset.lon.wrap_at("180d").rad)
        north = np.tan(offset.lat.rad) / np.cos(offset.lon.wrap_at("180d").rad)
        east, north = np.degrees(east) * 3600, np.degrees(north) * 3600
        for x, y, a, b in zip(columns, rows, east, north):
            distance = np.hypot(table["dx_arcsec"] - a, table["dy_arcsec"] - b)
            row = int(np.argmin(distance))
            worst = max(worst, float(distance[row]))
            if name != "cautions":
                value = float(table[name][row])
                assert abs(data[y, x] - value) <= 1e-6 * abs(value), (path, x, y, data[y, x], value)
        if name == "cautions":
            legend = {bit: header[f"BIT{bit}"] for bit in range(63) if f"BIT{bit}" in header}
            cautions = ["" if np.ma.is_masked(codes) else str(codes) for codes in table["cautions"]]
            seen = {code for codes in cautions for code in codes.strip().split(";") if code}
            assert set(legend.values()) == seen, (legend, seen)
        assert abs(header["BMAJ"] * 3600 - 24.0) < 1e-9
        assert any("program = Inrush" in line for line in header["HISTORY"])
    assert worst < POSITION_TOLERANCE_ARCSEC, worst
    print(f"{len(products)} FITS files; pixels within {worst:.2g} arcsec")


def main():
    program = sys.argv[1:] or ["cargo", "run", "--quiet", "--locked", "--"]
    warnings.simplefilter("error")
    with tempfile.TemporaryDirectory() as folder:
        for sheet in ("cubes.toml", "map.toml"):
            out = pathlib.Path(folder) / sheet.replace(".toml", "")
            run(program, sheet, out)
            check(out)


if __name__ == "__main__":
    main()
