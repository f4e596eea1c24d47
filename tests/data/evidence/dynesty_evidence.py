"""Evidences of slab models of simulated pairs by nested sampling (dynesty), against which tests/evidences.rs
checks the program's. Everything is written out here a second time, brightnesses, noise levels, baselines and
shape errors included: no closed form of the program is used but the noise level's, chi2^(-n/2).

    python dynesty_evidence.py        writes cases.json and case-N-thick.csv, case-N-thin.csv beside itself

Made with dynesty 3.1.0, numpy 2.4.6, scipy 1.17.1. About ten minutes.
"""
import json
import pathlib

import dynesty
import numpy as np
from scipy.special import ndtri

HERE = pathlib.Path(__file__).parent
PHOTON_K = 6.62607015e-34 * 89.188526e9 / 1.380649e-23  # h nu/k
RANGE = (-4.0, 4.0)  # velocities that hold the line
PRIORS = dict(sigma=(0.6, 0.8), v_in=1.0, tau=(4.0, 1.0), excess=8.0, peak_thin=2.0, thin_width=(1.08, 0.1))
SHAPE_ERROR = 0.03


def gaussian(v, centre, sigma):
    return np.exp(-0.5 * ((v - centre) / sigma) ** 2)


def escape(x):
    return np.where(x < 1e-6, 1 - x / 2, -np.expm1(-x) / np.maximum(x, 1e-300))


def thick(model, v, v_lsr, sigma, v_in, tau, steps):
    """Profile of a slab, K; steps of J(T) in K."""
    tau_f = tau * gaussian(v, v_lsr + v_in, sigma)
    tau_r = tau * gaussian(v, v_lsr - v_in, sigma)
    if model == "two-layer":
        # J(T_f) (1 - E_f) + J(T_r) (1 - E_r) E_f - J_bg (1 - E_r E_f), in excess of the background
        front, rear = steps[0], steps[0] + steps[1]
        return front * -np.expm1(-tau_f) + rear * -np.expm1(-tau_r) * np.exp(-tau_f)
    return steps[0] * (escape(tau_f) - np.exp(-tau_f) * escape(tau_r))


def bumps(v, deviation, middle, reach, sigma):
    """Shape errors: bumps of dispersion 0.6 sigma every 0.85 sigma under an envelope."""
    half, step = 2 * reach, 0.85 * sigma
    step = max(step, 2 * half / 15)
    width = 0.6 / 0.85 * step
    count = int(half / step)
    scale = deviation / np.sqrt(np.sqrt(np.pi) * width / step)
    return np.array([
        scale * np.exp(-0.5 * ((v - middle - k * step) / width) ** 2 - 0.5 * ((v - middle) / reach) ** 2)
        for k in range(-count, count + 1)
    ]).T


class Line:
    """Whitening of everything but the line: noise, a straight baseline (flat prior), shape errors."""

    def __init__(self, v, data, noise, errors):
        self.noise = noise
        inside = (v >= RANGE[0]) & (v <= RANGE[1])
        baseline = np.stack([np.ones_like(v), v]).T / noise
        shape = np.where(inside[:, None], bumps(v, **errors), 0.0) / noise
        covariance = np.eye(len(v)) + shape @ shape.T
        inverse = np.linalg.inv(covariance)
        precision = inverse - inverse @ baseline @ np.linalg.inv(baseline.T @ inverse @ baseline) @ baseline.T @ inverse
        whole = np.where(inside, data / noise, np.clip(data / noise, -4, 4))
        # r^T precision r with r = data - profile, and the profile zero outside the range
        self.precision = precision[np.ix_(inside, inside)]
        self.pull = (precision @ whole)[inside]
        self.square = whole @ precision @ whole
        self.n = len(v) - 2
        self.v = v[inside]

    def ln_likelihood(self, profile):
        scaled = profile / self.noise
        chi2 = self.square - 2 * scaled @ self.pull + scaled @ self.precision @ scaled
        return -0.5 * self.n * (1 + np.log(chi2 / self.n))


def moments(v, t, window):
    """Centre and dispersion of the positive intensity in the window, and its peak."""
    inside = (v >= window[0]) & (v <= window[1]) & (t > 0)
    w, x = t[inside], v[inside]
    mean = (w * x).sum() / w.sum()
    variance = max((w * x * x).sum() / w.sum() - mean ** 2, (0.05 * (window[1] - window[0])) ** 2)
    return mean, np.sqrt(variance), w.max()


CASES = [
    # model made and judged, v_lsr, sigma, v_in, tau, steps, thin peak, noise of both lines
    ("hill", 0.05, 0.5, 0.25, 5.0, [12.0], 1.0, 0.15, 0.08),
    ("two-layer", -0.1, 0.6, 0.12, 3.0, [3.0, 9.0], 1.2, 0.3, 0.1),
    ("hill", 0.0, 0.45, -0.5, 2.0, [6.0], 0.8, 0.35, 0.15),
]
WINDOW = (-2.0, 2.0)


def main():
    cases = []
    for number, (model, v_lsr, sigma, v_in, tau, steps, peak, noise, noise_thin) in enumerate(CASES, 1):
        generator = np.random.default_rng(number)
        v = np.round(np.arange(-100, 101) * 0.08, 10)
        data = thick(model, v, v_lsr, sigma, v_in, tau, steps) + noise * generator.standard_normal(len(v))
        data_thin = peak * gaussian(v, v_lsr, 1.05 * sigma) + noise_thin * generator.standard_normal(len(v))
        data, data_thin = np.round(data, 6), np.round(data_thin, 6)
        for name, values in (("thick", data), ("thin", data_thin)):
            rows = "".join(f"{a:.2f},{b:.6f}\n" for a, b in zip(v, values))
            (HERE / f"case-{number}-{name}.csv").write_text("velocity_km_s,tmb_k\n" + rows)
        # the gas's dispersion is the thin line's, given here as its fit would find it
        lines = []
        for values, rms in ((data, noise), (data_thin, noise_thin)):
            middle, spread, top = moments(v, values, WINDOW)
            errors = dict(deviation=SHAPE_ERROR * (top - rms), middle=middle, reach=1.5 * spread, sigma=sigma)
            lines.append(Line(v, values, rms, errors))
        depth = len(steps)

        def transform(u):
            s, t, w = PRIORS["sigma"], PRIORS["tau"], PRIORS["thin_width"]
            return np.concatenate([
                [RANGE[0] + (RANGE[1] - RANGE[0]) * u[0]],
                [s[0] * np.exp(s[1] * ndtri(u[1]))],
                [PRIORS["v_in"] * ndtri(u[2])],
                [t[0] * np.exp(t[1] * ndtri(u[3]))],
                [w[0] * np.exp(w[1] * ndtri(u[4]))],
                [-PRIORS["peak_thin"] * np.log1p(-u[5])],
                -PRIORS["excess"] * np.log1p(-u[6:]),
            ])

        def ln_likelihood(p):
            v_lsr, sigma, ratio, tau, width, peak = p[:6]
            profile = thick(model, lines[0].v, v_lsr, sigma, ratio * sigma, tau, p[6:])
            thin = peak * gaussian(lines[1].v, v_lsr, width * sigma)
            return lines[0].ln_likelihood(profile) + lines[1].ln_likelihood(thin)

        sampler = dynesty.NestedSampler(
            ln_likelihood, transform, 6 + depth, nlive=1500, sample="rwalk", rstate=np.random.default_rng(100 + number))
        sampler.run_nested(dlogz=0.02, print_progress=False)
        result = sampler.results
        weights = np.exp(result.logwt - result.logz[-1])
        weights /= weights.sum()
        speed = result.samples[:, 1] * result.samples[:, 2]
        mean = (weights * speed).sum()
        cases.append(dict(
            model=model, noise_thick_k=noise, noise_thin_k=noise_thin, sigma_km_s=sigma,
            ln_evidence=float(result.logz[-1]), ln_evidence_err=float(result.logzerr[-1]),
            v_in_mean_km_s=float(mean), v_in_deviation_km_s=float(np.sqrt((weights * (speed - mean) ** 2).sum())),
            share_inward=float(weights[speed > 0].sum()), calls=int(result.ncall.sum())))
        print(cases[-1], flush=True)
    (HERE / "cases.json").write_text(json.dumps(dict(made_by=f"dynesty {dynesty.__version__}", cases=cases), indent=1) + "\n")


if __name__ == "__main__":
    main()
