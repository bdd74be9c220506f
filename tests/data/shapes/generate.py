"""Writes the reference values of this folder.

Needs numpy, scipy and mpmath. Truth is mpmath at 80 digits; where scipy is listed beside it, its
value is there for comparison: scipy's real part of w is less exact than 1e-13 in places.

    python tests/data/shapes/generate.py            # rewrites the CSV files
    python tests/data/shapes/generate.py --nodes    # prints the tables of src/numeric/faddeeva.rs
"""

import csv
import pathlib
import sys

import mpmath as mp
import numpy as np
from scipy import special, stats

HERE = pathlib.Path(__file__).parent
mp.mp.dps = 80


def faddeeva(x, y):
    """w(x + iy) in the closed upper half plane; the real part on the axis is exp(-x^2)."""
    z = mp.mpc(mp.mpf(x), mp.mpf(y))
    w = mp.exp(-z * z) * mp.erfc(-1j * z)
    return (mp.exp(-mp.mpf(x) ** 2) if y == 0 else w.real), w.imag


def num(value):
    return mp.nstr(value, 18, strip_zeros=False)


def write(name, header, rows, comment):
    with open(HERE / name, "w", newline="\n") as file:
        file.write(f"# {comment}\n")
        out = csv.writer(file, lineterminator="\n")
        out.writerow(header)
        out.writerows(rows)


def voigt_rows():
    xs = [0.0] + [float(f"{v:.6g}") for v in np.logspace(-6, 6, 25)]
    xs += [0.25, 0.5117, 0.7, 1.28, 2.05, 2.7, 3.7, 4.4, 5.1, 5.7, 6.14, 6.65, 7.3, 8.2, 9.1, 9.99, 10.01, 14.0, 20.0]
    ys = [0.0] + [float(f"{v:.6g}") for v in np.logspace(-12, 6, 19)]
    ys += [0.3, 0.7, 2.3, 4.5, 6.0, 6.13, 6.15, 7.9, 9.9]
    worst = 0.0
    for x in sorted(xs):
        for y in sorted(ys):
            if y == 0.0 and x > 26:
                continue  # exp(-x^2) leaves the range of doubles
            re, im = faddeeva(x, y)
            s = special.wofz(complex(x, y))
            worst = max(worst, abs(s.real / float(re) - 1))
            yield [repr(x), repr(y), num(re), num(im), repr(float(s.real)), repr(float(s.imag))]
    print(f"scipy's largest relative deviation of Re w: {worst:.2e}", file=sys.stderr)


def statistics_rows():
    for x in [0, 1e-8, 0.1, 0.5, 1, 1.96, 3, 5, 8, 12, 20, 37]:
        for sign in ([1] if x == 0 else [1, -1]):
            yield ["normal_cdf", repr(float(sign * x)), "", num(mp.erfc(-mp.mpf(sign * x) / mp.sqrt(2)) / 2)]
    for p in [1e-300, 1e-100, 1e-20, 1e-9, 1e-3, 0.025, 0.2, 0.5, 0.8, 0.975, 0.999999]:
        start = float(stats.norm.ppf(p))
        f = lambda q: mp.log(mp.erfc(-q / mp.sqrt(2)) / 2) - mp.log(mp.mpf(p))
        q = mp.mpf(0) if p == 0.5 else mp.findroot(f, mp.mpf(start))
        yield ["normal_quantile", repr(p), "", num(q)]
    for x in [0.0, 1e-6, 0.1, 0.5, 1, 2.5, 5, 10, 20, 26]:
        yield ["erfc", repr(float(x)), "", num(mp.erfc(mp.mpf(x)))]
    for x in [0.01, 0.5, 1, 1.5, 2, 3.7, 10, 55.5, 1000.25, 1e6]:
        yield ["ln_gamma", repr(float(x)), "", num(mp.loggamma(mp.mpf(x)))]
    for k in [1, 2, 3, 7, 30, 201, 1000, 20000]:
        for ratio in [0.01, 0.5, 0.9, 1.0, 1.1, 1.5, 3.0]:
            x = k * ratio
            q = mp.gammainc(mp.mpf(k) / 2, mp.mpf(x) / 2, mp.inf, regularized=True)
            if q < mp.mpf(10) ** -290:
                continue
            yield ["chi_squared_survival", repr(float(x)), str(k), num(q)]


def nodes():
    h = mp.sqrt(mp.pi / 12)
    show = lambda v: print(f"    {mp.nstr(v, 20, min_fixed=-3, max_fixed=6)},")
    for name, shift in [("INTEGER", mp.mpf(1)), ("HALF", mp.mpf(1) / 2)]:
        print(f"{name} squares, weights 2h/pi exp(-t^2)")
        ts = [(k + shift) * h for k in range(12)]
        for t in ts:
            show(t * t)
        print()
        for t in ts:
            show(2 * h / mp.pi * mp.exp(-t * t))
    print("Gauss-Hermite, 10 points: squares, weights 2 W/pi")
    poly = np.polynomial.hermite.hermgauss(10)[0]
    ts = [mp.findroot(lambda t: mp.hermite(10, t), mp.mpf(float(v))) for v in poly if v > 0]
    for t in ts:
        show(t * t)
    print()
    for t in ts:
        weight = mp.mpf(2) ** 9 * mp.factorial(10) * mp.sqrt(mp.pi) / (100 * mp.hermite(9, t) ** 2)
        show(2 * weight / mp.pi)
    print("h/pi", mp.nstr(h / mp.pi, 20), "2pi/h", mp.nstr(2 * mp.pi / h, 20), "1/h", mp.nstr(1 / h, 20))


if "--nodes" in sys.argv:
    nodes()
else:
    write("faddeeva.csv", ["x", "y", "re", "im", "scipy_re", "scipy_im"], voigt_rows(),
          "w(x + iy): mpmath at 80 digits beside scipy's wofz; written by generate.py")
    write("statistics.csv", ["function", "argument", "degrees", "value"], statistics_rows(),
          "mpmath at 80 digits; written by generate.py")
