"""The same fits by a general-purpose library, as a floor to be measured in the same run.

Reads a CSV with the columns time, voltage, speed (voltage held since the row
before, evenly spaced, at rest in steady state before the first row) and fits

    first-order     G / (T s + 1)            with dead time and offset
    second-order    G / ((T1 s + 1)(T2 s + 1)) with dead time and offset

with scipy.optimize.least_squares in six settings: three methods with and
without scaling by the Jacobian's columns, and the linear parameters eliminated.
Prints one JSON object: the best setting's time and every setting's residual.
The responses are exact (zero-order hold, fractional dead time) and vectorised
(scipy.signal.lfilter), so that the library is not held up by Python loops.
"""
import json
import sys
import time

import numpy as np
import scipy
from scipy.optimize import least_squares
from scipy.signal import lfilter


def responses(u, h, before, theta, taus):
    """Unit-gain first-order responses at t - theta, one for each time constant."""
    n = len(u)
    whole = int(np.floor(theta / h))
    a = (whole + 1) * h - theta  # how far behind the knot that lies before the instant
    j = np.arange(n) - whole - 1
    inside = j >= 0
    ks = np.where(inside, j, 0)
    out = []
    for tau in taus:
        e = np.exp(-h / tau)
        x, _ = lfilter([0.0, 1 - e], [1.0, -e], u, zi=[before * e])
        x = np.concatenate(([before], x[1:])) if n else x
        z = u[ks] + (x[ks] - u[ks]) * np.exp(-a / tau)
        out.append(np.where(inside, z, before))
    return out


def shape(kind, p, u, h, before):
    if kind == "first-order":
        return responses(u, h, before, p[1], [np.exp(p[0])])[0]
    total, product = np.exp(p[0]), np.exp(p[1])  # T1 + T2, T1 T2
    root = np.sqrt(max(total * total / 4 - product, 1e-12 * total * total))
    t1, t2 = total / 2 + root, total / 2 - root
    y1, y2 = responses(u, h, before, p[2], [t1, t2])
    return (t1 * y1 - t2 * y2) / (t1 - t2)


def main(path, kind, start, repeats):
    t, v, y = np.loadtxt(path, delimiter=",", skiprows=2, unpack=True)
    h = (t[-1] - t[0]) / (len(t) - 1)
    u = np.append(v[1:], v[-1])
    before = v[0]

    def whole(q):
        return q[0] * shape(kind, q[2:], u, h, before) + q[1] - y

    def eliminated(p):
        a = np.column_stack((shape(kind, p, u, h, before), np.ones_like(y)))
        c, *_ = np.linalg.lstsq(a, y, rcond=None)
        return a @ c - y

    full = np.concatenate(([40.0, 0.0], start))
    jac = dict(x_scale="jac")
    settings = {
        "lm": lambda: least_squares(whole, full, method="lm"),
        "lm, scaled": lambda: least_squares(whole, full, method="lm", **jac),
        "trf": lambda: least_squares(whole, full, method="trf"),
        "trf, scaled": lambda: least_squares(whole, full, method="trf", **jac),
        "dogbox, scaled": lambda: least_squares(whole, full, method="dogbox", **jac),
        "lm, linear parameters eliminated": lambda: least_squares(eliminated, start, method="lm", **jac),
    }
    found = {}
    for name, fit in settings.items():
        times = []
        for _ in range(repeats):
            begun = time.perf_counter()
            r = fit()
            times.append(time.perf_counter() - begun)
        found[name] = {"ms": 1e3 * float(np.median(times)), "rss": 2 * float(r.cost), "x": [float(x) for x in r.x]}
    least = min(f["rss"] for f in found.values())
    good = {k: f for k, f in found.items() if f["rss"] <= least * (1 + 1e-5)}
    best = min(good, key=lambda k: good[k]["ms"])
    print(json.dumps({"version": scipy.__version__, "best": best, "ms": good[best]["ms"], "rss": good[best]["rss"], "settings": found}))


if __name__ == "__main__":
    main(sys.argv[1], sys.argv[2], np.array([float(x) for x in sys.argv[3].split(",")]), int(sys.argv[4]))
