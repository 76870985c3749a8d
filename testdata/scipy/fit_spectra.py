#!/usr/bin/python3
"""Fits noisy spectra with an independent least-squares library, for tests to compare with.

Run it in its own folder: /usr/bin/python3 fit_spectra.py
It writes spectra.csv (what was fitted) and fits.csv (what came out). The seed is fixed, so a second run with the same library
versions writes the same files. Nothing in it comes from bandgrid.

Model of spectrum s at shift x, all shifts and widths in cm-1, heights in counts:

    y(x) = b0 + b1 (x - xmid)/half + sum over bands of height / (1 + ((x - position)/(width/2))^2)

xmid = (first shift + last shift)/2 and half = (last shift - first shift)/2 of the spectrum: 1475 and 275 in the d_g window, 2700
and 150 in the 2d window. width is the FWHM. The weight of a channel is 1/sigma^2 with the sigma given for it, which stays as it
is (not re-estimated from the fit). Standard errors are the roots of the diagonal of inv(J^T W J) at the optimum; they are not
scaled by chi2. chi2 is the sum of squared weighted residuals, not reduced.
"""

import csv
import platform

import numpy as np
import scipy
from scipy.optimize import least_squares

SEED = 20240611
READ_NOISE = 5.0  # counts; together with photon noise at one electron a count
BANDS = {"d_g": ["d", "g", "dprime"], "2d": ["2d"]}
RANGE = {"d_g": (1200.0, 1750.0, 459), "2d": (2550.0, 2850.0, 151)}  # from, to, channels: steps of 1.2009 and 2


def names(window):
    return ["b0", "b1"] + [f"{b}_{q}" for b in BANDS[window] for q in ("height", "position", "width")]


def model(p, x):
    t = (x - (x[0] + x[-1]) / 2) / ((x[-1] - x[0]) / 2)
    y = p[0] + p[1] * t
    for h, c, w in p[2:].reshape(-1, 3):
        y = y + h / (1 + ((x - c) / (w / 2)) ** 2)
    return y


def jacobian(p, x):
    t = (x - (x[0] + x[-1]) / 2) / ((x[-1] - x[0]) / 2)
    columns = [np.ones_like(x), t]
    for h, c, w in p[2:].reshape(-1, 3):
        u = (x - c) / (w / 2)
        q = 1 / (1 + u * u)
        columns += [q, h * q * q * 4 * u / w, h * q * q * 2 * u * u / w]
    return np.column_stack(columns)


def truths(rng):
    """Twelve spectra a window; the G or 2D height over its noise runs from about 9 to 130."""
    strength = np.geomspace(120, 20000, 12)
    for s in strength:
        background = s * rng.uniform(0.1, 0.6)
        p = [background, background * rng.uniform(-0.3, 0.3)]
        p += [s * rng.uniform(0.6, 1.6), 1341 + rng.uniform(-6, 6), rng.uniform(20, 40)]
        p += [s, 1582 + rng.uniform(-5, 8), rng.uniform(12, 22)]
        p += [s * rng.uniform(0.35, 0.7), 1621 + rng.uniform(-3, 3), rng.uniform(9, 15)]
        yield "d_g", np.array(p)
    for s in strength:
        background = s * rng.uniform(0.05, 0.5)
        p = [background, background * rng.uniform(-0.3, 0.3)]
        p += [s, 2670 + rng.uniform(-15, 25), rng.uniform(20, 70)]
        yield "2d", np.array(p)


def solve(x, y, sigma, start):
    fit = least_squares(
        lambda p: (model(p, x) - y) / sigma, start, jac=lambda p: jacobian(p, x) / sigma[:, None],
        method="lm", x_scale="jac", xtol=1e-15, ftol=1e-15, gtol=1e-15, max_nfev=5000)
    return fit.x


def main():
    rng = np.random.Generator(np.random.PCG64(SEED))
    made_by = (f"# made by fit_spectra.py with scipy {scipy.__version__} (optimize.least_squares, method lm: MINPACK), "
               f"numpy {np.__version__}, python {platform.python_version()}")
    with open("spectra.csv", "w", newline="") as fs, open("fits.csv", "w", newline="") as ff:
        fs.write(made_by + "\n# shift in cm-1; counts; sigma: standard deviation of the channel, counts\n")
        ff.write(made_by + "\n# standard errors absolute, from inv(J^T W J); chi2 not reduced; the model is in fit_spectra.py\n")
        spectra, fits = csv.writer(fs, lineterminator="\n"), csv.writer(ff, lineterminator="\n")
        spectra.writerow(["spectrum", "window", "shift", "counts", "sigma"])
        fits.writerow(["spectrum", "window", "parameter", "value", "standard_error", "chi2"])
        for number, (window, truth) in enumerate(truths(rng), 1):
            # What is written is what is fitted: numbers are rounded before.
            rounded = lambda values: np.array([float(f"{v:.12g}") for v in values])
            low, high, n = RANGE[window]
            x = rounded(np.linspace(low, high, n))
            mean = model(truth, x)
            sigma = rounded(np.sqrt(mean + READ_NOISE**2))
            y = rounded(mean + sigma * rng.standard_normal(n))
            best = solve(x, y, sigma, truth)
            j = jacobian(best, x) / sigma[:, None]
            se = np.sqrt(np.diag(np.linalg.inv(j.T @ j)))
            # Two other starts must lead to the same optimum, and a further Gauss-Newton step must be nothing.
            for scale in (0.7, 1.4):
                start = truth.copy()
                start[2::3] *= scale
                start[4::3] *= scale
                start[3::3] += 3 * (scale - 1)
                other = solve(x, y, sigma, start)
                assert np.max(np.abs(other - best) / se) < 1e-6, (number, (other - best) / se)
            r = (model(best, x) - y) / sigma
            step = np.linalg.lstsq(j, -r, rcond=None)[0]
            assert np.max(np.abs(step) / se) < 1e-6, (number, step / se)
            for row in zip(x, y, sigma):
                spectra.writerow([number, window] + [f"{v:.12g}" for v in row])
            chi2 = float(r @ r)
            for name, value, error in zip(names(window), best, se):
                fits.writerow([number, window, name, f"{value:.12g}", f"{error:.12g}", f"{chi2:.12g}"])


if __name__ == "__main__":
    main()
