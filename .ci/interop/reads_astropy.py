#!/usr/bin/env python3
"""Inrush reads what astropy writes.

Builds files with astropy, works out velocities and temperatures with astropy (units, wcs), lets
Inrush read the files and compares. Needs astropy; run from the project's root:

    python3 .ci/interop/reads_astropy.py              # build in a temporary folder and compare
    python3 .ci/interop/reads_astropy.py --data DIR   # only write small files and expected.json

The second form made tests/data/read.
"""

import argparse
import gzip
import json
import pathlib
import subprocess
import sys
import tempfile
import warnings

import numpy as np
from astropy import constants, units as u
from astropy.io import fits
from astropy.table import MaskedColumn, QTable, Table
from astropy.wcs import WCS

LINE = 89.1885247 * u.GHz
# Velocities lose digits where frequencies of 1e11 Hz are subtracted: c eps and a few roundings.
VELOCITY_TOLERANCE_KM_S = 2e-9
# Single-precision files are compared through double, so only rounding remains.
TEMPERATURE_TOLERANCE = 1e-12


def profile(channels):
    """An invented line with a dip, and no two equal values."""
    x = np.linspace(-4.0, 4.0, channels)
    return 3.0 * np.exp(-0.5 * x**2) * (1 - 0.6 * np.exp(-2 * (x - 0.3) ** 2)) + 0.01 * np.sin(9 * x)


def radio(frequency):
    return frequency.to_value(u.km / u.s, equivalencies=u.doppler_radio(LINE))


def image_header(channels, ctype, crval, cdelt, crpix, cunit, **cards):
    header = fits.Header()
    header["CTYPE1"] = ctype
    header["CRVAL1"] = crval
    header["CDELT1"] = cdelt
    header["CRPIX1"] = crpix
    if cunit:
        header["CUNIT1"] = cunit
    header["RESTFRQ"] = LINE.to_value(u.Hz)
    header["SPECSYS"] = "LSRK"
    header["BUNIT"] = "K"
    for keyword, value in cards.items():
        header[keyword] = value
    return header


def axis_by_wcslib(header, channels):
    """Radio velocities (km/s) of a one-dimensional header, by wcslib."""
    wcs = WCS(header, naxis=[1])
    world = wcs.all_pix2world(np.arange(channels)[:, None], 0)[:, 0]
    kind = wcs.wcs.ctype[0][:4]
    rest = wcs.wcs.restfrq * u.Hz
    if kind == "FREQ":
        return radio(world * u.Hz)
    rule = {"VRAD": u.doppler_radio, "VOPT": u.doppler_optical, "VELO": u.doppler_relativistic}[kind]
    return radio((world * u.m / u.s).to(u.Hz, equivalencies=rule(rest)))


class Cases:
    """Files in a folder, with what is expected of each."""

    def __init__(self, folder, channels):
        self.folder = folder
        self.channels = channels
        self.expected = []

    def add(self, name, velocity, temperature, **settings):
        order = np.argsort(velocity)
        temperature = np.ma.filled(np.ma.asarray(temperature, dtype=float), np.nan)
        self.expected.append(
            {
                "file": name,
                "settings": settings,
                "velocity_km_s": [float(v) for v in np.asarray(velocity)[order]],
                "tmb_k": [None if np.isnan(t) else float(t) for t in temperature[order]],
            }
        )

    def refuse(self, name, text, **settings):
        self.expected.append({"file": name, "settings": settings, "refused": text})

    def path(self, name):
        return self.folder / name

    def pack(self, name, packed):
        """The same bytes every time: no date, no name in the stream."""
        content = self.path(name).read_bytes()
        self.path(packed).write_bytes(gzip.compress(content, mtime=0))

    def image(self, name, data, header, expected=None, **settings):
        fits.PrimaryHDU(data, header).writeto(self.path(name), overwrite=True)
        channels = max(np.shape(data))
        values = np.asarray(data, dtype=float).ravel() if expected is None else expected
        self.add(name, axis_by_wcslib(header, channels), values, **settings)

    # --- images

    def images(self):
        n = self.channels
        t = profile(n).astype("f4")
        mid = n / 2
        step = 102.5
        axes = {
            "freq_hz": ("FREQ", 89.187e9, 30.5e3, "Hz"),
            "freq_ghz": ("FREQ", 89.187, 30.5e-6, "GHz"),
            "freq_mhz_descending": ("FREQ", 89187.0, -0.0305, "MHz"),
            "freq_no_cunit": ("FREQ", 89.187e9, 30.5e3, None),
            "vrad_m_s": ("VRAD", 5e3, step, "m/s"),
            "vrad_km_s_descending": ("VRAD", 5.0, -step / 1e3, "km/s"),
            "vopt": ("VOPT", 5e3, step, "m/s"),
            "vopt_f2w": ("VOPT-F2W", 5e3, step, "m/s"),
            "velo": ("VELO", 5e3, step, "m/s"),
            "velo_f2v_km_s": ("VELO-F2V", 5.0, step / 1e3, "km/s"),
            "vrad_w2f": ("VRAD-W2F", 5e3, step, "m/s"),
            "vrad_v2f": ("VRAD-V2F", 5e3, step, "m/s"),
            "vopt_v2w": ("VOPT-V2W", 5e3, step, "m/s"),
            "velo_w2v": ("VELO-W2V", 5e3, step, "m/s"),
            "freq_w2f": ("FREQ-W2F", 89.187e9, 30.5e3, "Hz"),
            "freq_v2f": ("FREQ-V2F", 89.187e9, 30.5e3, "Hz"),
        }
        for name, (ctype, crval, cdelt, cunit) in axes.items():
            self.image(f"image_{name}.fits", t, image_header(n, ctype, crval, cdelt, mid, cunit))

        for velref in (1, 257):
            header = image_header(n, "VELO-LSR", 5e3, step, mid, "m/s", VELREF=velref)
            del header["SPECSYS"]
            self.image(f"image_velo_lsr_{velref}.fits", t, header)
        header = image_header(n, "FELO-LSR", 5e3, step, mid, "m/s")
        del header["SPECSYS"]
        self.image("image_felo_lsr.fits", t, header)

        # Another rest frequency: frequencies stay, velocities move.
        header = image_header(n, "VRAD", 5e3, step, mid, "m/s", RESTFRQ=LINE.to_value(u.Hz) - 29e3)
        self.image("image_other_rest.fits", t, header)
        header = image_header(n, "VRAD", 5e3, step, mid, "m/s")
        header.rename_keyword("RESTFRQ", "RESTFREQ")
        fits.PrimaryHDU(t, header).writeto(self.path("image_restfreq.fits"), overwrite=True)
        header.rename_keyword("RESTFREQ", "RESTFRQ")
        self.add("image_restfreq.fits", axis_by_wcslib(header, n), t)

        base = image_header(n, "VRAD", 5e3, step, mid, "m/s")
        self.image("image_double.fits", profile(n), base)
        blanked = t.copy()
        blanked[[0, 3]] = np.nan
        self.image("image_nan.fits", blanked, base)

        # Scaled integers with BLANK; astropy's own reading of them is the expected value.
        for bits, dtype, blank in ((8, "u1", 255), (16, "i2", -32768), (32, "i4", -(2**31)), (64, "i8", -(2**63))):
            stored = np.round((profile(n) + 0.5) / 0.02).astype(dtype)
            stored[2] = blank
            hdu = fits.PrimaryHDU(stored, base)
            name = f"image_int{bits}.fits"
            hdu.writeto(self.path(name), overwrite=True)
            # astropy rescales data whose header it sees change, so the cards are set in the file.
            with fits.open(self.path(name), mode="update", do_not_scale_image_data=True) as opened:
                opened[0].header["BSCALE"], opened[0].header["BZERO"] = 0.02, -0.5
                opened[0].header["BLANK"] = blank
            # astropy scales 8 and 16 bits in single precision; the standard's equation in double.
            expected = -0.5 + 0.02 * stored.astype(float)
            expected[2] = np.nan
            self.add(name, axis_by_wcslib(base, n), expected)

        # Degenerate axes; the spectral one first, third, fourth.
        for position in (1, 3, 4):
            header = fits.Header()
            sky = iter([("RA---SIN", 83.0, -1e-3), ("DEC--SIN", -5.0, 1e-3), ("STOKES", 1.0, 1.0)])
            for axis in range(1, 5):
                spectral = axis == position
                ctype, crval, cdelt = ("VRAD", 5e3, step) if spectral else next(sky)
                header[f"CTYPE{axis}"], header[f"CRVAL{axis}"] = ctype, crval
                header[f"CDELT{axis}"], header[f"CRPIX{axis}"] = cdelt, mid if spectral else 1.0
            for keyword in ("RESTFRQ", "SPECSYS", "BUNIT"):
                header[keyword] = base[keyword]
            shape = [1, 1, 1, 1]
            shape[4 - position] = n
            name = f"image_axis{position}_of_4.fits"
            fits.PrimaryHDU(t.reshape(shape), header).writeto(self.path(name), overwrite=True)
            self.add(name, axis_by_wcslib(base, n), t)

        # CD instead of CDELT, an extension instead of the primary HDU.
        header = base.copy()
        header["CD1_1"] = header.pop("CDELT1")
        self.image("image_cd.fits", t, header)
        hdus = fits.HDUList([fits.PrimaryHDU(), fits.ImageHDU(t, base)])
        hdus.writeto(self.path("image_extension.fits"), overwrite=True)
        self.add("image_extension.fits", axis_by_wcslib(base, n), t)
        self.pack("image_double.fits", "image.fits.gz")
        self.add("image.fits.gz", axis_by_wcslib(base, n), profile(n))

        # Units of the values.
        header = base.copy()
        header["BUNIT"] = "mK"
        self.image("image_mk.fits", (1000 * t).astype("f4"), header, (1000 * t).astype("f4").astype(float) / 1000)
        header["BUNIT"] = "K (Ta*)"
        self.image("image_ta.fits", t, header, t.astype(float) / 0.8, eta="0.8")
        header["BUNIT"], header["BMAJ"], header["BMIN"] = "Jy/beam", 30 / 3600, 20 / 3600
        velocity = axis_by_wcslib(base, n)
        area = 2 * np.pi * (30 * u.arcsec) * (20 * u.arcsec) / (8 * np.log(2))
        frequency = (velocity * u.km / u.s).to(u.GHz, equivalencies=u.doppler_radio(LINE))
        kelvin = [
            (s * u.Jy / u.beam).to_value(u.K, u.brightness_temperature(f, beam_area=area))
            for s, f in zip(t.astype(float), frequency)
        ]
        self.image("image_jy_beam.fits", t, header, np.array(kelvin))

        # A topocentric file: refused, or moved by one factor on all frequencies.
        header = base.copy()
        header["SPECSYS"] = "TOPOCENT"
        fits.PrimaryHDU(t, header).writeto(self.path("image_topocentric.fits"), overwrite=True)
        moved = frequency * (1 - (-12.5 * u.km / u.s / constants.c).to_value(u.one))
        self.add("image_topocentric.fits", radio(moved), t, offset="-12.5")
        self.refuse("image_topocentric.fits", "TOPOCENT")

        with warnings.catch_warnings():
            warnings.simplefilter("ignore")
            compressed = fits.CompImageHDU(np.tile(t, (4, 1)), name="SPECTRUM")
            compressed.writeto(self.path("image_compressed.fits"), overwrite=True)
        self.refuse("image_compressed.fits", "tile-compressed")
        fits.PrimaryHDU(np.tile(t, (2, 1)), base).writeto(self.path("image_2d.fits"), overwrite=True)
        self.refuse("image_2d.fits", f"{n} x 2")

    # --- binary tables

    def tables(self):
        n = self.channels
        velocity = 5.0 + 0.1025 * (np.arange(n) - n / 2)
        t = profile(n)
        frequency = (velocity * u.km / u.s).to(u.GHz, equivalencies=u.doppler_radio(LINE))

        table = QTable({"velocity": velocity * u.km / u.s, "Tmb": t * u.K, "noise": 0.1 * np.ones(n) * u.K})
        table.write(self.path("table_velocity.fits"), overwrite=True)
        self.add("table_velocity.fits", velocity, t)
        single = (1000 * t).astype("f4")
        table = QTable({"flag": np.arange(n, dtype="i2"), "freq": frequency[::-1], "ta": single * u.mK})
        table.meta.update(RESTFRQ=LINE.to_value(u.Hz), SPECSYS="LSRK", OBJECT="invented")
        table.write(self.path("table_frequency.fits"), overwrite=True)
        self.pack("table_frequency.fits", "table_frequency.fits.gz")
        self.path("table_frequency.fits").unlink()
        self.add("table_frequency.fits.gz", velocity[::-1], single.astype(float) / 1000 / 0.8, eta="0.8")
        masked = MaskedColumn(np.arange(100, 100 + n), dtype="i4", unit="mK", name="tmb")
        masked.mask = np.arange(n) % 5 == 1
        Table([MaskedColumn(velocity, name="v relativistic", unit="km s-1"), masked]).write(
            self.path("table_masked.fits"), overwrite=True
        )
        relativistic = (velocity * u.km / u.s).to(u.Hz, equivalencies=u.doppler_relativistic(LINE))
        self.add("table_masked.fits", radio(relativistic), np.ma.masked_array(masked.data, masked.mask) / 1000)
        plain = fits.BinTableHDU.from_columns(
            [fits.Column("x", "D", array=frequency.value), fits.Column("y", "E", array=t)]
        )
        plain.writeto(self.path("table_unnamed.fits"), overwrite=True)
        self.add("table_unnamed.fits", velocity, t.astype("f4"), columns="x:GHz,y:K")

        # One spectrum a row; the axis from a vector column, from cards, from columns that stand
        # for cards, and from the cards of a vector column.
        scale = np.array([1.0, 2.0, 4.0])
        spectra = (scale[:, None] * t).astype("f4")
        names = ["clump a", "clump b", "clump c"]
        table = QTable(
            {
                "SOURCE": names,
                "OFFSET": [0.0, 15.0, -15.0] * u.arcsec,
                "VRAD": np.tile(velocity, (3, 1)) * u.km / u.s,
                "TMB": spectra * u.K,
            }
        )
        table.write(self.path("rows_vector_axis.fits"), overwrite=True)
        self.add("rows_vector_axis.fits", velocity, spectra[1], select="SOURCE=clump b")
        self.add("rows_vector_axis.fits", velocity, spectra[2], select="OFFSET=-15")
        self.add("rows_vector_axis.fits", velocity, spectra[0], select="1")
        self.refuse("rows_vector_axis.fits", "3 spectra, one a row")
        self.refuse("rows_vector_axis.fits", "no rows fit", select="SOURCE=clump d")

        header = image_header(n, "FREQ", 89.187e9, 30.5e3, n / 2, "Hz")
        by_cards = axis_by_wcslib(header, n)
        hdu = fits.BinTableHDU.from_columns(
            [fits.Column("OBJECT", "16A", array=names), fits.Column("DATA", f"{n}E", unit="K", array=spectra)]
        )
        for keyword in ("CTYPE1", "CRVAL1", "CDELT1", "CRPIX1", "CUNIT1", "RESTFRQ", "SPECSYS"):
            hdu.header[keyword] = header[keyword]
        hdu.writeto(self.path("rows_cards.fits"), overwrite=True)
        self.add("rows_cards.fits", by_cards, spectra[2], select="object=clump c")
        hdu = fits.BinTableHDU.from_columns(
            [
                fits.Column("DATA", f"{n}E", unit="K", array=spectra),
                fits.Column("CTYPE1", "8A", array=["FREQ"] * 3),
                fits.Column("CRVAL1", "D", unit="Hz", array=89.187e9 + 1e6 * np.arange(3)),
                fits.Column("CDELT1", "D", unit="Hz", array=[30.5e3] * 3),
                fits.Column("CRPIX1", "D", array=[n / 2] * 3),
                fits.Column("RESTFREQ", "D", unit="Hz", array=[LINE.to_value(u.Hz)] * 3),
            ]
        )
        hdu.writeto(self.path("rows_columns.fits"), overwrite=True)
        header["CRVAL1"] += 2e6
        self.add("rows_columns.fits", axis_by_wcslib(header, n), spectra[2], select="3")
        hdu = fits.BinTableHDU.from_columns([fits.Column("SPECTRUM", f"{n}D", unit="K", array=t[None, :])])
        for keyword, value in {
            "1CTYP1": "VOPT-F2W", "1CRVL1": 5.0, "1CDLT1": 0.1025, "1CRPX1": n / 2, "1CUNI1": "km/s",
            "RFRQ1": LINE.to_value(u.Hz), "SPEC1": "LSRK",
        }.items():
            hdu.header[keyword] = value
        hdu.writeto(self.path("rows_vector_cards.fits"), overwrite=True)
        header = image_header(n, "VOPT-F2W", 5.0, 0.1025, n / 2, "km/s")
        self.add("rows_vector_cards.fits", axis_by_wcslib(header, n), t)

        ragged = np.empty(2, dtype=object)
        ragged[:] = [t.astype("f4"), t[:-2].astype("f4")]
        hdu = fits.BinTableHDU.from_columns(
            [fits.Column("TMB", "PE()", unit="K", array=ragged), fits.Column("ID", "J", array=[1, 2])]
        )
        hdu.writeto(self.path("rows_variable_length.fits"), overwrite=True)
        self.refuse("rows_variable_length.fits", "variable-length", select="1")

    # --- text

    def texts(self):
        n = self.channels
        velocity = 5.0 + 0.1025 * (np.arange(n) - n / 2)
        t = profile(n)
        frequency = (velocity * u.km / u.s).to(u.MHz, equivalencies=u.doppler_radio(LINE))
        mask = np.arange(n) % 6 == 2
        masked = np.ma.masked_array(t, mask)

        table = Table({"velocity_km_s": velocity, "tmb_k": MaskedColumn(t, mask=mask)})
        table.write(self.path("text.csv"), format="ascii.csv", overwrite=True)
        self.add("text.csv", velocity, masked)
        table = Table({"frequency_mhz": frequency.value[::-1], "ta_mk": 1000 * t})
        table.write(self.path("text_tab.csv"), format="ascii.tab", overwrite=True)
        self.add("text_tab.csv", velocity[::-1], t / 0.5, eta="0.5")
        table.write(self.path("text_columns.txt"), format="ascii.no_header", overwrite=True)
        self.add("text_columns.txt", velocity[::-1], t, columns="1:MHz,2:mK (Tmb)")
        self.pack("text.csv", "text.csv.gz")
        self.add("text.csv.gz", velocity, masked)

        table = QTable({"velocity": velocity * u.km / u.s, "Ta*": 1000 * t * u.mK})
        table["comment"] = ['a "quoted", word' if i % 2 else "" for i in range(n)]
        table["velocity"].info.description = "radio convention, {LSRK}: 'v'"
        table.meta["RESTFRQ"] = LINE.to_value(u.Hz)
        table.meta["SPECSYS"] = "LSRK"
        table.meta["notes"] = {"a": [1, 2], "b": "c: d"}
        for delimiter, name in ((" ", "text_space.ecsv"), (",", "text_comma.ecsv")):
            table.write(self.path(name), format="ascii.ecsv", delimiter=delimiter, overwrite=True)
            self.add(name, velocity, t / 0.8, eta="0.8")
        table = Table([MaskedColumn(frequency.to_value(u.GHz), name="Frequency", unit="GHz"),
                       MaskedColumn(t, mask=mask, name="T_mb", unit="K")])
        for delimiter, name in ((" ", "text_masked_space.ecsv"), (",", "text_masked_comma.ecsv")):
            table.write(self.path(name), format="ascii.ecsv", delimiter=delimiter, overwrite=True)
            self.add(name, velocity, masked)
        table["T_mb"].unit = "mJy"
        table.write(self.path("text_unknown_unit.ecsv"), format="ascii.ecsv", overwrite=True)
        self.refuse("text_unknown_unit.ecsv", "unknown unit `mJy`")


def inrush_channels(path, settings):
    """Exit code, (velocity, temperature) and messages of Inrush for one file."""
    arguments = [str(path), repr(float(LINE.to_value(u.GHz)))] + [f"{key}={value}" for key, value in settings.items()]
    command = ["cargo", "run", "-q", "--example", "channels", "--"]
    done = subprocess.run(command + arguments, capture_output=True, text=True, check=False)
    rows = [line.split(",") for line in done.stdout.splitlines()[1:]]
    velocity = np.array([float(row[0]) for row in rows])
    temperature = np.array([float(row[2]) for row in rows])
    return done.returncode, velocity, temperature, done.stderr


def compare(case, folder):
    """None where Inrush does as expected, else what is wrong."""
    code, velocity, temperature, messages = inrush_channels(folder / case["file"], case["settings"])
    if "refused" in case:
        if code == 2 and case["refused"] in messages:
            return None
        return f"expected a refusal with `{case['refused']}`, found exit code {code}: {messages}"
    if code != 0:
        return f"exit code {code}: {messages}"
    expected = np.array(case["velocity_km_s"])
    if len(expected) != len(velocity):
        return f"{len(velocity)} channels, expected {len(expected)}"
    off = np.max(np.abs(velocity - expected))
    if not off <= VELOCITY_TOLERANCE_KM_S:
        return f"velocities off by {off} km/s"
    values = np.array([np.nan if t is None else t for t in case["tmb_k"]])
    if not np.array_equal(np.isnan(values), np.isnan(temperature)):
        return "other channels are blank"
    off = np.nanmax(np.abs(temperature - values)) / np.nanmax(np.abs(values))
    if not off <= TEMPERATURE_TOLERANCE:
        return f"temperatures off by {off} of the peak"
    return None


def build(folder, channels):
    cases = Cases(folder, channels)
    cases.images()
    cases.tables()
    cases.texts()
    return cases.expected


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--data", type=pathlib.Path, help="write small files and expected.json here, compare nothing")
    arguments = parser.parse_args()
    warnings.simplefilter("ignore", fits.verify.VerifyWarning)
    if arguments.data:
        expected = build(arguments.data, 12)
        text = ",\n".join(json.dumps(case) for case in expected)
        (arguments.data / "expected.json").write_text(f"[\n{text}\n]\n")
        return 0
    with tempfile.TemporaryDirectory() as folder:
        folder = pathlib.Path(folder)
        expected = build(folder, 300)
        wrong = [(case, compare(case, folder)) for case in expected]
    failures = [(case, text) for case, text in wrong if text]
    for case, text in failures:
        print(f"{case['file']} {case['settings']}: {text}")
    print(f"{len(expected) - len(failures)} of {len(expected)} files read as astropy reads them")
    return 1 if failures else 0


if __name__ == "__main__":
    sys.exit(main())
