"""Writes faddeeva.csv and voigt.csv, the reference values of fit/line, and prints the Gauss-Hermite rules of its source
and the FWHM of its test.

    /usr/bin/python3 faddeeva.py        (Debian 12: python3-scipy 1.10.1, python3-mpmath 1.2.1; about four minutes)

mpmath gives w(z) = exp(-z^2) erfc(-iz) with so many digits that what cancels leaves 20, and the asymptotic series beyond
|z| = 40. SciPy's values (wofz, voigt_profile) stand beside them.
"""
import numpy as np
from mpmath import mp, mpc, mpf, erfc, exp, findroot, factorial, hermite, log, nstr, pi, sqrt
from scipy.special import voigt_profile, wofz


def w(x, y):
    """w(z) and its first two derivatives; dps is set so that the smaller part and the differences keep 20 digits."""
    x, y = mpf(x), mpf(y)
    r = max(abs(x), abs(y))
    spread = 0
    for v in (x, y):
        if v:
            spread = max(spread, -float(mp.log10(abs(v))), float(mp.log10(r / abs(v))))
    mp.dps = int(40 + 2 * spread + min(float(r), 40) ** 2 + 6 * max(0, float(mp.log10(r)) if r else 0))
    z = mpc(x, y)
    if r > 40:
        term, total, n = mpc(1), mpc(1), 0
        while abs(term) > mpf(10) ** (-mp.dps) and n < 1500:
            n += 1
            nextterm = term * (2 * n - 1) / (2 * z * z)
            if abs(nextterm) > abs(term):
                break
            term = nextterm
            total += term
        f = mpc(0, 1) / (sqrt(pi) * z) * total
    else:
        f = exp(-z * z) * erfc(mpc(y, -x))
    f1 = mpc(0, 2) / sqrt(pi) - 2 * z * f
    f2 = -2 * f - 2 * z * f1
    return f, f1, f2


def text(v):
    return nstr(v, 20)


def rules():
    mp.dps = 60
    for n in (14, 8, 4):
        nodes, _ = np.polynomial.hermite.hermgauss(n)
        print("hermite%d" % n)
        for t in nodes[nodes > 0]:
            t = findroot(lambda t: hermite(n, t), mpf(float(t)))
            weight = mpf(2) ** (n - 1) * factorial(n) * sqrt(pi) / (n * hermite(n - 1, t)) ** 2
            print("\t{%s, %s}," % (text(t * t), text(2 * weight / pi)))


def points():
    """The plane on logarithmic grids, the grid of the trapezoidal rule, the circles where the rules change, the axes."""
    r = np.random.default_rng(1)
    out = []
    for x in (0, 1e-300, 1e-100, 1e-20, 1e-9, 1e-6, 1e-3, 0.1, 0.3, 0.6, 0.9241, 1, 1.5, 2.2, 3, 4, 5, 6, 7, 7.9, 9, 12, 20, 27, 60, 1e3, 1e5):
        for y in (0, 1e-300, 1e-100, 1e-20, 1e-12, 1e-9, 1e-6, 1e-4, 1e-2, 0.1, 0.4, 1, 1.7, 3, 4.9, 6.2, 8.1, 15, 100, 1e4):
            out.append((x, y))
    for x in np.arange(0, 8, 0.125):
        for y in (0, 1e-8, 0.05, 0.7):
            out.append((x + 1e-9 * (y > 0), y))
    for x in np.arange(8.03, 26.5, 0.31):  # beside the real axis Re w is exp(-x^2), then the wing
        for y in (0, 1e-120, 1e-30):
            out.append((x, y))
    for radius in (7.999999, 8.000001, 15.99999, 16.00001, 173.2, 173.3, 0.99e9, 1.01e9):
        for ratio in (1e-6, 1e-4, 1e-2, 0.2, 1, 5, 1e2, 1e4, 1e6):
            x = radius / np.hypot(1, ratio)
            out.append((x, ratio * x))
    for decade in range(-300, 301, 20):
        for ratio in (1e-6, 1e-3, 1, 1e3, 1e6):
            out.append((10.0 ** decade * 1.234, 10.0 ** decade * 1.234 * ratio))
    for _ in range(600):
        out.append((10 ** r.uniform(-2, 1.2), 10 ** r.uniform(-7, 1.2)))
    for _ in range(400):
        out.append((r.uniform(0, 9), r.uniform(0, 9)))
    for _ in range(200):
        x = 10 ** r.uniform(-3, 6)
        out.append((x, x * 10 ** r.uniform(-6, 6)))
    return [(float(x), float(y)) for x, y in out]


def worst(pairs):
    return max((abs(float(mpf(a) / b - 1)) for a, b in pairs if b and abs(b) > 1e-290), default=0)


def faddeeva():
    rows, re, im = [], [], []
    for x, y in points():
        f, f1, f2 = w(x, y)
        s = complex(wofz(complex(x, y)))
        rows.append(",".join([repr(x), repr(y), text(f.real), text(f.imag), repr(s.real), repr(s.imag)]))
        re.append((s.real, f.real))
        im.append((s.imag, f.imag))
    with open("faddeeva.csv", "w") as out:
        out.write("# w(x+iy): mpmath 1.2.1, 20 digits; scipy 1.10.1 wofz. Made by faddeeva.py.\n")
        out.write("# Largest relative difference of wofz from mpmath: real part %.1e, imaginary part %.1e.\n" % (worst(re), worst(im)))
        out.write("x,y,re,im,scipy_re,scipy_im\n" + "\n".join(rows) + "\n")
    print(len(rows), "points; wofz differs by", worst(re), worst(im))


def voigt():
    """Unit height 1, position 0: value and derivatives by the Lorentzian and the Gaussian FWHM; SciPy's unit-area profile."""
    rows, pairs = [], []
    for decade in np.arange(-6, 6.01, 0.5):
        lorentz, gauss = (16.0, 16.0 / 10 ** decade) if decade > 0 else (1.8 * 10 ** decade, 1.8)
        width = 0.5346 * lorentz + np.sqrt(0.2166 * lorentz ** 2 + gauss ** 2)
        places = np.concatenate([[0], np.geomspace(1e-3, 1e4, 41), np.linspace(0.3, 4, 42)]) * width
        for x in places:
            x = float("%.6g" % x)
            mp.dps = 60
            k = 2 * sqrt(log(2)) / mpf(gauss)
            X, Y = k * mpf(x), sqrt(log(2)) * mpf(lorentz) / mpf(gauss)
            f, f1, f2 = w(X, Y)
            c, c1, c2 = w(0, Y)
            mp.dps = 60
            value = f.real / c.real
            by_x = k * f1.real / c.real
            by_l = sqrt(log(2)) / mpf(gauss) * (-f1.imag + value * c1.imag) / c.real
            by_g = (f2.real - value * c2.real) / (2 * mpf(gauss) * c.real)  # the profile obeys the heat equation
            s = float(voigt_profile(x, gauss / np.sqrt(8 * np.log(2)), lorentz / 2))
            pairs.append((s, c.real and f.real * mpf(k) / sqrt(pi)))
            rows.append(",".join([repr(x), repr(float(lorentz)), repr(float(gauss))] + [text(v) for v in (value, by_x, by_l, by_g)] + [repr(s)]))
    with open("voigt.csv", "w") as out:
        out.write("# Voigt profile of unit height at position 0 and its derivatives by x and by the two FWHM: mpmath 1.2.1, 20 digits;\n")
        out.write("# scipy 1.10.1 voigt_profile (unit area), largest relative difference from mpmath %.1e. Made by faddeeva.py.\n" % worst(pairs))
        out.write("x,lorentz,gauss,value,by_x,by_lorentz,by_gauss,scipy\n" + "\n".join(rows) + "\n")
    print(len(rows), "points; voigt_profile differs by", worst(pairs))


def widths():
    mp.dps = 40
    for lorentz, gauss in ((14.0, 1.8), (2.0, 2.354820045030949), (0.01, 3.0), (16.0, 16.0), (1.8, 14.0)):
        k, y = 2 * sqrt(log(2)) / mpf(gauss), sqrt(log(2)) * mpf(lorentz) / mpf(gauss)

        def profile(x):
            return (exp(-mpc(x, y) ** 2) * erfc(mpc(y, -x))).real

        start = k * (0.5346 * lorentz + np.sqrt(0.2166 * lorentz**2 + gauss**2)) / 2
        root = findroot(lambda x: profile(x) / profile(mpf(0)) - 0.5, start)
        print("{%r, %r, %s}," % (lorentz, gauss, text(2 * root / k)))


rules()
widths()
faddeeva()
voigt()
