"""Tables that Inrush writes, read by astropy: values, units, descriptions, blanks, meta data.

Two sets are made and checked: the awkward tables of `cargo run --example write_tables`, and the products
of `inrush fit` on the demonstration pair. Any warning is an error, so that checksums, cards and units must all be in order.
"""

import json
import math
import re
import subprocess
import tempfile
import warnings
from pathlib import Path

import numpy as np
from astropy.io import fits
from astropy.table import QTable, Table
import astropy.units as u

warnings.simplefilter("error")


def is_blank(value):
    return value is None or np.ma.is_masked(value) or value == "" or (isinstance(value, float) and math.isnan(value))


def unescaped(text):
    r"""FITS text holds other than printable ASCII as \u{HEX}."""
    return re.sub(r"\\u\{([0-9a-f]+)\}", lambda match: chr(int(match[1], 16)), text)


def check_same(name, table, records, decode=lambda text: text):
    assert len(table) == len(records), f"{name}: {len(table)} rows, expected {len(records)}"
    assert not records or table.colnames == list(records[0]), f"{name}: other columns"
    compared = 0
    for row, record in zip(table, records):
        for column, expected in record.items():
            found = row[column]
            if expected is None:
                assert is_blank(found), f"{name}: {column} is {found!r}, expected a blank"
            elif isinstance(expected, str):
                assert decode(str(found)) == expected, f"{name}: {column} is {found!r}, expected {expected!r}"
            else:
                assert float(found) == expected, f"{name}: {column} is {found!r}, expected {expected!r}"
                compared += 1
    return compared


def check_units(name, columns):
    """Each unit is one that FITS and VOUnit know (which deprecates the gauss), and agrees with the column's name."""
    suffixes = {"_km_s": "km/s", "_arcsec": "arcsec", "_msun_yr": "solMass/yr", "_msun": "solMass"}
    suffixes |= {"_cm3": "cm-3", "_cm2": "cm-2", "_ug": "uG"}
    for column in columns:
        if column.unit is not None:
            u.Unit(column.unit.to_string("fits"), format="fits")
            if column.unit != u.uG:
                u.Unit(column.unit.to_string("vounit"), format="vounit")
        for suffix, unit in suffixes.items():
            if column.name.endswith(suffix) and not column.name.endswith("_k_km_s"):
                assert column.unit == u.Unit(unit), f"{name}: {column.name} is in {column.unit}"


def check_whole(units):
    """Cards, checksums and data sums of every unit."""
    units.verify("exception")
    for unit in units:
        assert unit.verify_checksum() == 1 and unit.verify_datasum() == 1, "checksum"


def check_products(directory, record):
    """The tables that a fit writes hold what it prints with --json."""
    csv = Table.read(directory / "pair.csv", format="ascii.csv")
    numbers = check_same("pair.csv", csv, [record])
    ecsv = Table.read(directory / "pair.ecsv", format="ascii.ecsv")
    assert check_same("pair.ecsv", ecsv, [record]) == numbers
    check_units("pair.ecsv", ecsv.columns.values())
    with fits.open(directory / "pair.fits", checksum=True) as units:
        check_whole(units)
    table = Table.read(directory / "pair.fits")
    assert check_same("pair.fits", table, [record], unescaped) == numbers
    assert numbers > 40, f"only {numbers} numbers were compared"
    print(f"astropy agrees on {numbers} numbers of a fit's CSV, ECSV and FITS")


def cargo(*arguments):
    return subprocess.run(["cargo", "run", "--quiet", "--locked", *arguments], check=True, capture_output=True).stdout


def check_tables(directory):
    records = json.loads((directory / "results.json").read_text())

    csv = Table.read(directory / "results.csv", format="ascii.csv")
    numbers = check_same("CSV", csv, records)

    ecsv = Table.read(directory / "results.ecsv", format="ascii.ecsv")
    assert check_same("ECSV", ecsv, records) == numbers
    check_units("ECSV", ecsv.columns.values())
    assert all(column.description for column in ecsv.columns.values())
    assert ecsv.meta["seed"] == 42 and ecsv.meta["ratio"] == 1e-7, ecsv.meta
    assert ecsv.meta["settings"].endswith("one card"), ecsv.meta

    with fits.open(directory / "results.fits", checksum=True) as units:
        check_whole(units)
        header = units[1].header
        assert header["SEED"] == 42 and header["RATIO"] == 1e-7
        assert header["SETTINGS"] == ecsv.meta["settings"], repr(header["SETTINGS"])
        for index, name in enumerate(ecsv.colnames, start=1):
            assert header[f"TTYPE{index}"] == name
            assert header[f"TCOMM{index}"] == ecsv[name].description
            unit = header.get(f"TUNIT{index}")
            assert (unit is None) == (ecsv[name].unit is None)
            assert unit is None or u.Unit(unit, format="fits") == ecsv[name].unit

    table = Table.read(directory / "results.fits")
    assert check_same("FITS", table, records, unescaped) == numbers
    check_units("FITS", table.columns.values())
    QTable.read(directory / "results.fits")

    assert len(Table.read(directory / "empty.ecsv", format="ascii.ecsv")) == 0
    with fits.open(directory / "empty.fits", checksum=True) as units:
        units.verify("exception")
        assert len(units[1].data) == 0

    assert numbers > 10, f"only {numbers} numbers were compared"
    print(f"astropy agrees on {numbers} numbers in CSV, ECSV and FITS")


def main():
    with tempfile.TemporaryDirectory() as temporary:
        directory = Path(temporary)
        cargo("--example", "write_tables", "--", str(directory))
        check_tables(directory)
        fit = ["--", "fit", "demo-spectra/lantern7.toml", "--no-figures", "--json", "--out", str(directory)]
        check_products(directory, json.loads(cargo(*fit)))


if __name__ == "__main__":
    main()
