#!/usr/bin/env python3
"""Inrush against scipy's bounded least squares on the same simulated pairs: time and depth of the minimum.

Both fit the two-layer and the hill model, each jointly with a Gaussian thin line that shares velocity and
dispersion, to all channels of both lines, with the noise held at the truth's and the model taken at the channels'
centres, within the same bounds. scipy (method trf, numerical Jacobian, steps scaled by it: no slower here than unscaled ones, and
stuck less often) starts ten times and the best counts; Inrush chooses its own starts.

    python3 benches/against_scipy.py --pairs 100

simulates the pairs, and times both in turns on one core: pairs go in blocks first to Inrush, then to scipy. A time is
processor time, of the fits alone: files are read before, and what only holds for the pair as a whole (the fit of the
thin line that gives the starts) counts on both sides. The chi2 of Inrush's parameters is computed here once more and
has to agree.

--scipy-results FILE keeps what scipy found, a line a pair and model, under the checksum of the pair's spectra and
noise; pairs that are in it are not fitted by scipy again. Times of such pairs come from another run, so their ratio is
no measurement, and the table says so. --jobs 2 lets scipy use two processes; then no ratio is printed.

Needs numpy and scipy 1.17.
"""

import os

# Before numpy is imported: one thread.
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ[_name] = "1"

import argparse
import csv
import hashlib
import json
import math
import multiprocessing
import re
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import scipy
from scipy.optimize import least_squares

ROOT = Path(__file__).resolve().parent.parent

SEED = 2026
SAMPLE = ["--kinds", "infall,expansion", "--models", "hill,two-layer", "--signal-to-noise", "5,100",
          "--signal-to-noise-thin", "5,100", "--v-in-sigmas=-1,1", "--tau", "0.5,30", "--channels", "200"]

# Exact SI constants; the background of Fixsen 2009 (doi:10.1088/0004-637X/707/2/916).
KELVIN_PER_GHZ = 6.62607015e-34 * 1e9 / 1.380649e-23
T_BACKGROUND_K = 2.72548

MODELS = {
    "two-layer": ["v_lsr_km_s", "sigma_km_s", "v_in_km_s", "tau", "t_front_k", "t_rear_k", "peak_thin_k"],
    "hill": ["v_lsr_km_s", "sigma_km_s", "v_in_km_s", "tau", "t_peak_k", "peak_thin_k"],
}
BOUNDS = {
    "two-layer": {"tau": (0.05, 80.0), "t_front_k": (2.73, 150.0), "t_rear_k": (2.73, 150.0)},
    "hill": {"tau": (0.05, 200.0), "t_peak_k": (2.73, 400.0)},
}
# v_lsr: about the middle of the band.
BOUNDS_OF_BOTH = {"v_lsr_km_s": (-3.0, 3.0), "v_in_km_s": (-3.0, 3.0), "sigma_km_s": (0.15, 4.0),
                  "peak_thin_k": (0.0, 100.0)}
START_SPEEDS_SIGMAS = (-0.5, -0.2, 0.2, 0.5, 1.0)
START_DEPTHS = (1.5, 5.0)

# From which relative difference one chi2 counts as lower than the other.
LOWER = 1e-6
# Two programs' chi2 of the same parameters: rounding alone, with models that cancel to 1e-10 of their terms.
SAME = 1e-9
# What --bars asks for: how much faster in all, and the share of pairs in which scipy may be lower.
LEAST_RATIO = 300.0
MOST_WORSE = 1e-3
# Pairs that one side fits before it is the other's turn.
BLOCK = 20


class Pair:
    """Spectra and noise of one pair."""

    def __init__(self, folder, files, truth):
        contents = [(folder / files[column]).read_bytes() for column in ("thick_file", "thin_file")]
        self.id = files["id"]
        self.noise = [float(truth["noise_thick_k"]), float(truth["noise_thin_k"])]
        digest = hashlib.sha256()
        for content, noise in zip(contents, self.noise):
            digest.update(content)
            digest.update(f"\n{noise!r}\n".encode())
        self.checksum = digest.hexdigest()
        (self.v_thick, self.thick), (self.v_thin, self.thin) = [channels(content) for content in contents]
        rest_ghz = float(re.search(rb"# line: .*, ([0-9.]+) GHz", contents[0]).group(1))
        self.photon_k = KELVIN_PER_GHZ * rest_ghz
        self.background = self.radiation(T_BACKGROUND_K)

    def radiation(self, temperature_k):
        """J(T), K."""
        return self.photon_k / math.expm1(self.photon_k / temperature_k)

    def temperature(self, radiation_k):
        """T of a J, K."""
        return self.photon_k / math.log1p(self.photon_k / radiation_k)

    def middle_km_s(self):
        return 0.5 * (self.v_thick[0] + self.v_thick[-1])


def channels(content):
    start = content.index(b"velocity_km_s,tmb_k\n") + len(b"velocity_km_s,tmb_k\n")
    values = np.array(content[start:].replace(b"\n", b",").rstrip(b",").split(b","), dtype=float)
    return values[0::2].copy(), values[1::2].copy()


def two_layer(pair, v_lsr, sigma, v_in, tau, t_front, t_rear):
    scale = -0.5 / (sigma * sigma)
    offset = pair.v_thick - v_lsr
    front = offset - v_in
    rear = offset + v_in
    through_front = np.exp(-tau * np.exp(scale * front * front))
    through_rear = np.exp(-tau * np.exp(scale * rear * rear))
    j_front, j_rear = pair.radiation(t_front), pair.radiation(t_rear)
    # J_f (1 - e_f) + J_r (1 - e_r) e_f - J_bg (1 - e_r e_f), by powers of e_f
    return (j_front - pair.background) + through_front * (
        (j_rear - j_front) - (j_rear - pair.background) * through_rear)


def hill(pair, v_lsr, sigma, v_in, tau, t_peak):
    scale = -0.5 / (sigma * sigma)
    offset = pair.v_thick - v_lsr
    front = offset - v_in
    rear = offset + v_in
    # far from the line exp underflows: (1 - e^-x)/x is 1 there
    tau_front = np.maximum(tau * np.exp(scale * front * front), 1e-300)
    tau_rear = np.maximum(tau * np.exp(scale * rear * rear), 1e-300)
    less_front = np.expm1(-tau_front)
    less_rear = np.expm1(-tau_rear)
    height = pair.radiation(t_peak) - pair.background
    return height * ((1.0 + less_front) * less_rear / tau_rear - less_front / tau_front)


PROFILES = {"two-layer": two_layer, "hill": hill}


def residuals(pair, profile):
    """Residuals over noise, thick line first, as a function of the parameters."""
    channels_thick = len(pair.thick)
    scales = 1.0 / pair.noise[0], 1.0 / pair.noise[1]

    def of(parameters):
        *thick, peak_thin = parameters.tolist()
        v_lsr, sigma = thick[0], thick[1]
        result = np.empty(channels_thick + len(pair.thin))
        result[:channels_thick] = (profile(pair, *thick) - pair.thick) * scales[0]
        offset = pair.v_thin - v_lsr
        thin = peak_thin * np.exp((-0.5 / (sigma * sigma)) * offset * offset)
        result[channels_thick:] = (thin - pair.thin) * scales[1]
        return result

    return of


def bounds_of(pair, model):
    bounds = {**BOUNDS_OF_BOTH, **BOUNDS[model]}
    middle = pair.middle_km_s()
    low, high = zip(*(bounds[name] for name in MODELS[model]))
    low, high = np.array(low), np.array(high)
    low[0] += middle
    high[0] += middle
    return low, high


def fit_thin(pair):
    """Velocity, dispersion and peak of a Gaussian: brightest of a few smoothed channels, then least squares."""
    width = (pair.v_thin[-1] - pair.v_thin[0]) / (len(pair.v_thin) - 1)
    smooth = np.convolve(pair.thin, np.full(7, 1 / 7), mode="same")
    brightest = int(np.argmax(smooth))
    peak = max(float(smooth[brightest]), pair.noise[1])
    # integral over peak: sqrt(2 pi) sigma
    near = pair.thin[max(0, brightest - 25):brightest + 26]
    sigma = min(max(float(near.sum()) * width / peak / math.sqrt(2.0 * math.pi), 0.16), 3.9)

    def of(parameters):
        v, sigma, peak = parameters.tolist()
        offset = pair.v_thin - v
        return (peak * np.exp((-0.5 / (sigma * sigma)) * offset * offset) - pair.thin) / pair.noise[1]

    middle = pair.middle_km_s()
    low, high = np.array([middle - 3.0, 0.15, 0.0]), np.array([middle + 3.0, 4.0, 100.0])
    start = np.array([pair.v_thin[brightest], sigma, peak])
    return least_squares(of, inside(start, low, high), bounds=(low, high), method="trf", x_scale="jac").x


def inside(start, low, high):
    margin = 1e-3 * (high - low)
    return np.clip(start, low + margin, high - margin)


def starts(pair, model, thin):
    v_lsr, sigma, peak_thin = (float(value) for value in thin)
    bright_k = pair.temperature(max(float(pair.thick.max()), 0.1) + pair.background)
    # the peak is what is left behind the absorbing front
    temperatures = {"two-layer": [0.6 * bright_k, 1.2 * bright_k], "hill": [1.5 * bright_k]}[model]
    low, high = bounds_of(pair, model)
    for speed in START_SPEEDS_SIGMAS:
        for depth in START_DEPTHS:
            start = np.array([v_lsr, sigma, speed * sigma, depth, *temperatures, peak_thin])
            yield inside(start, low, high)


def fit_by_scipy(pair):
    """Both models' best minima of ten starts, and the processor time of all of it."""
    began = time.process_time()
    thin = fit_thin(pair)
    thin_seconds = time.process_time() - began
    results = []
    for model, profile in PROFILES.items():
        began = time.process_time()
        of = residuals(pair, profile)
        bounds = bounds_of(pair, model)
        best, evaluations = None, 0
        for start in starts(pair, model, thin):
            found = least_squares(of, start, bounds=bounds, method="trf", x_scale="jac")
            # without those of the Jacobian
            evaluations += found.nfev
            if best is None or found.cost < best.cost:
                best = found
        seconds = time.process_time() - began
        results.append({"pair": pair.checksum, "id": pair.id, "model": model, "chi2": 2.0 * float(best.cost),
                        "parameters": dict(zip(MODELS[model], best.x.tolist())), "seconds": seconds,
                        "thin_seconds": thin_seconds, "evaluations": evaluations})
    return results


class Inrush:
    """The example that fits pairs named on its standard input."""

    def __init__(self, program, sample):
        self.process = subprocess.Popen([program, sample], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True)

    def fit(self, pairs):
        self.process.stdin.write(" ".join(pair.id for pair in pairs) + "\n")
        self.process.stdin.flush()
        results = []
        for pair in pairs:
            for model in MODELS:
                line = self.process.stdout.readline()
                if not line:
                    sys.exit("error: fit_sample ended early")
                result = json.loads(line)
                assert (result["id"], result["model"]) == (pair.id, model), f"unexpected result {line}"
                self.check(pair, result)
                results.append(result)
        return results

    @staticmethod
    def check(pair, result):
        names = MODELS[result["model"]]
        values = np.array([result["parameters"][name] for name in names])
        low, high = bounds_of(pair, result["model"])
        assert (values >= low - 1e-9).all() and (values <= high + 1e-9).all(), f"outside of the bounds: {result}"
        again = float(np.square(residuals(pair, PROFILES[result["model"]])(values)).sum())
        assert abs(again / result["chi2"] - 1.0) < SAME, f"chi2 is {again!r} by this script: {result}"

    def close(self):
        self.process.stdin.close()
        self.process.wait()


class Results:
    """What scipy found, kept in a file where there is one."""

    def __init__(self, path):
        self.path = path
        self.found = {}
        if path and path.exists():
            for line in path.read_text().splitlines():
                try:
                    result = json.loads(line)
                except json.JSONDecodeError:
                    continue  # a line that a killed run left half written
                self.found[result["pair"], result["model"]] = result

    def of(self, pair):
        """Results of a pair, where both models' are there."""
        results = [self.found.get((pair.checksum, model)) for model in MODELS]
        return results if all(results) else None

    def keep(self, results):
        for result in results:
            self.found[result["pair"], result["model"]] = result
        if self.path:
            with self.path.open("a") as file:
                file.writelines(json.dumps(result) + "\n" for result in results)


def read_pairs(folder, count):
    def table(name):
        with (folder / name).open(newline="") as file:
            return list(csv.DictReader(file))

    rows = list(zip(table("sample.csv"), table("truth.csv")))
    if count is not None:
        if count > len(rows):
            sys.exit(f"error: {len(rows)} pairs in {folder}, expected at least {count}")
        rows = rows[:count]
    for files, truth in rows:
        assert files["id"] == truth["id"], f"{files['id']} beside {truth['id']}"
        yield Pair(folder, files, truth)


def blocks(pairs):
    block = []
    for pair in pairs:
        block.append(pair)
        if len(block) == BLOCK:
            yield block
            block = []
    if block:
        yield block


def race(pairs, inrush, kept, pool):
    """Results of both for every pair; whether all of scipy's times are of this run."""
    compared, fresh = [], True
    for block in blocks(pairs):
        ours = inrush.fit(block) if inrush else [None] * (len(MODELS) * len(block))
        missing = [pair for pair in block if kept.of(pair) is None]
        fresh = fresh and len(missing) == len(block)
        for results in pool.imap(fit_by_scipy, missing) if pool else map(fit_by_scipy, missing):
            kept.keep(results)
        theirs = [result for pair in block for result in kept.of(pair)]
        compared.extend(zip(ours, theirs))
        if sys.stderr.isatty():
            print(f"\r{len(compared) // len(MODELS)} pairs", end="", file=sys.stderr)
    if sys.stderr.isatty():
        print(file=sys.stderr)
    return compared, fresh


def seconds_a_pair(results):
    """Time of both models and of the thin line for each pair."""
    count = len(MODELS)
    return [sum(result["seconds"] for result in results[first:first + count]) + results[first]["thin_seconds"]
            for first in range(0, len(results), count)]


def summary(compared, fresh):
    ours, theirs = [our for our, _ in compared], [their for _, their in compared]
    times, scipy_times = seconds_a_pair(ours), seconds_a_pair(theirs)
    relative = [our["chi2"] / their["chi2"] - 1.0 for our, their in compared]
    worse = [(our, their) for (our, their), excess in zip(compared, relative) if excess > LOWER]
    return {
        "pairs": len(times),
        "scipy": scipy.__version__,
        "numpy": np.__version__,
        "times_of_one_run": fresh,
        "inrush_ms_a_pair": {"median": 1e3 * statistics.median(times), "mean": 1e3 * statistics.fmean(times)},
        "scipy_ms_a_pair": {"median": 1e3 * statistics.median(scipy_times), "mean": 1e3 * statistics.fmean(scipy_times)},
        "ratio": {"median": statistics.median(b / a for a, b in zip(times, scipy_times)),
                  "total": sum(scipy_times) / sum(times)},
        "models": {
            model: {
                "inrush_lower": sum(excess < -LOWER for excess, our in zip(relative, ours) if our["model"] == model),
                "same": sum(abs(excess) <= LOWER for excess, our in zip(relative, ours) if our["model"] == model),
                "scipy_lower": sum(excess > LOWER for excess, our in zip(relative, ours) if our["model"] == model),
                "inrush_ms": 1e3 * statistics.median(our["seconds"] for our in ours if our["model"] == model),
                "scipy_ms": 1e3 * statistics.median(their["seconds"] for their in theirs if their["model"] == model),
            }
            for model in MODELS
        },
        "pairs_inrush_worse": len({our["id"] for our, _ in worse}),
        "worse": [{"id": our["id"], "model": our["model"], "relative": our["chi2"] / their["chi2"] - 1.0,
                   "inrush_chi2": our["chi2"], "scipy_chi2": their["chi2"],
                   "inrush": our["parameters"], "scipy": their["parameters"]} for our, their in worse],
    }


def show(numbers, jobs):
    print(f"{numbers['pairs']} pairs, two-layer and hill, thin line included; scipy {numbers['scipy']}, "
          f"numpy {numbers['numpy']}")
    print("\nprocessor time a pair, ms       median      mean")
    print("  Inrush                    {median:10.3f}{mean:10.3f}".format(**numbers["inrush_ms_a_pair"]))
    print("  scipy, ten starts         {median:10.3f}{mean:10.3f}".format(**numbers["scipy_ms_a_pair"]))
    if jobs > 1:
        print("  ratio                       not measured: scipy ran in several processes")
    else:
        print("  ratio                     {median:10.1f}{total:10.1f}".format(**numbers["ratio"]))
        if not numbers["times_of_one_run"]:
            print("  (scipy's times are of another run: the ratio is no measurement)")
    print(f"\nlower chi2 by more than {LOWER:g}, fits  Inrush    same   scipy    ms Inrush  ms scipy")
    for model, row in numbers["models"].items():
        print(f"  {model:<34}{row['inrush_lower']:>6}{row['same']:>8}{row['scipy_lower']:>8}"
              f"{row['inrush_ms']:>13.3f}{row['scipy_ms']:>10.3f}")
    share = 100.0 * numbers["pairs_inrush_worse"] / numbers["pairs"]
    print(f"\npairs with a model in which scipy is lower: {numbers['pairs_inrush_worse']} ({share:.2f} %)")
    for fit in sorted(numbers["worse"], key=lambda fit: -fit["relative"]):
        print(f"  {fit['id']} {fit['model']}: chi2 {fit['inrush_chi2']:.6f}, scipy {fit['scipy_chi2']:.6f}, "
              f"{fit['relative']:.2g} more")
        for who in ("inrush", "scipy"):
            values = ", ".join(f"{name} {value:.6g}" for name, value in fit[who].items())
            print(f"    {who:<7}{values}")


def cargo_build():
    """Builds the program and the example; their paths."""
    subprocess.run(["cargo", "build", "--release", "--locked", "--bin", "inrush", "--example", "fit_sample"],
                   cwd=ROOT, check=True)
    target = Path(os.environ.get("CARGO_TARGET_DIR", ROOT / "target")) / "release"
    return target / "inrush", target / "examples" / "fit_sample"


def arguments():
    parser = argparse.ArgumentParser(description=__doc__.split("\n")[0])
    parser.add_argument("--pairs", type=int, help="number of pairs; 100, or all of --sample")
    parser.add_argument("--seed", type=int, default=SEED, help=f"seed of the pairs, {SEED} by default")
    parser.add_argument("--sample", type=Path, help="a sample that `inrush simulate sample` wrote, in place of a new one")
    parser.add_argument("--scipy-results", type=Path, help="file that keeps scipy's results; see above")
    parser.add_argument("--scipy-only", action="store_true", help="fill --scipy-results, run nothing else")
    parser.add_argument("--jobs", type=int, default=1, help="processes of scipy; with more than 1 no ratio is printed")
    parser.add_argument("--json", type=Path, help="file for all numbers")
    parser.add_argument("--bars", action="store_true",
                        help=f"fail where scipy is lower in more than {MOST_WORSE:g} of the pairs, or less than "
                             f"{LEAST_RATIO:g} times slower where that is measured")
    parser.add_argument("--no-build", action="store_true", help="take the release programs as they are")
    given = parser.parse_args()
    if given.scipy_only and not (given.scipy_results and given.sample):
        parser.error("--scipy-only needs --sample and --scipy-results")
    return given


def main():
    given = arguments()
    inrush = None
    with tempfile.TemporaryDirectory() as folder:
        sample = given.sample
        if not given.scipy_only:
            if given.no_build:
                program, example = ROOT / "target/release/inrush", ROOT / "target/release/examples/fit_sample"
            else:
                program, example = cargo_build()
            if sample is None:
                sample = Path(folder) / "sample"
                subprocess.run([program, "--quiet", "simulate", "sample", "--out", sample, "--seed", str(given.seed),
                                "--pairs", str(given.pairs or 100), *SAMPLE], check=True)
        if given.jobs == 1 and hasattr(os, "sched_setaffinity"):
            # inherited by the example: both on one core, one after the other
            os.sched_setaffinity(0, {max(os.sched_getaffinity(0))})
        if not given.scipy_only:
            inrush = Inrush(example, sample)
        pool = multiprocessing.Pool(given.jobs) if given.jobs > 1 else None
        kept = Results(given.scipy_results)
        compared, fresh = race(read_pairs(sample, given.pairs), inrush, kept, pool)
        if pool:
            pool.terminate()
        if given.scipy_only:
            return
        inrush.close()
    numbers = summary(compared, fresh)
    show(numbers, given.jobs)
    if given.json:
        given.json.write_text(json.dumps(numbers, indent=2) + "\n")
    if given.bars:
        measured = numbers["times_of_one_run"] and given.jobs == 1
        if numbers["pairs_inrush_worse"] > MOST_WORSE * numbers["pairs"]:
            sys.exit(f"error: scipy lower in {numbers['pairs_inrush_worse']} pairs")
        if measured and numbers["ratio"]["total"] < LEAST_RATIO:
            sys.exit(f"error: {numbers['ratio']['total']:.1f} times faster, expected {LEAST_RATIO:g}")


if __name__ == "__main__":
    main()
