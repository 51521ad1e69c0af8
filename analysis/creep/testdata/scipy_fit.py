"""Fits simulated histories by SciPy, by other code than the package's.

Reads a list of histories from the file named, prints a list of answers. Laws
and ramps are written out anew here: a ramp is a mean over its parts, taken in
closed form for t^n and by Gauss-Legendre quadrature otherwise.
"""
import json
import sys

import numpy as np
from scipy.optimize import curve_fit, nnls

X, W = np.polynomial.legendre.leggauss(40)


def over_ramp(term, age, ramp):
    """The mean of term over the ages a ramp's parts have by now."""
    age = np.clip(np.asarray(age, float), 0, None)
    if ramp == 0:
        return term(age)
    lo, width = np.clip(age - ramp, 0, None), np.minimum(age, ramp)
    return term(lo[:, None] + width[:, None] * (X + 1) / 2) @ (W / 2) * width / ramp


def power_over_ramp(age, ramp, n):
    age = np.asarray(age, float)
    lo, hi = np.clip(age - ramp, 0, None), np.clip(age, 0, None)
    if ramp == 0:
        return np.where(age > 0, hi**n, 0.0)
    return (hi ** (n + 1) - lo ** (n + 1)) / ((n + 1) * ramp)


def columns(h, model, shape, taus=()):
    t = np.array(h["time"])
    names = {"power": 2, "log": 2, "standard-solid": 2, "burgers": 3, "kelvin-chain": 1 + len(taus)}
    out = np.zeros((len(t), names[model]))
    for c in h["changes"]:
        age, ramp, p = t - c["at"], c["ramp"], c["newton"]
        on = np.clip(age / ramp if ramp > 0 else (age >= 0) * 1.0, 0, 1)
        out[:, 0] += p * on
        if model == "power":
            out[:, 1] += p * power_over_ramp(age, ramp, shape)
        elif model == "log":
            out[:, 1] += p * over_ramp(lambda x: np.log1p(x / shape), age, ramp)
        elif model in ("standard-solid", "burgers"):
            out[:, 1] += p * over_ramp(lambda x: -np.expm1(-x / shape), age, ramp)
            if model == "burgers":
                out[:, 2] += p * over_ramp(lambda x: x, age, ramp)
        else:
            for j, tau in enumerate(taus):
                out[:, 1 + j] += p * over_ramp(lambda x: -np.expm1(-x / tau), age, ramp)
    return out


def noise(h):
    t, u = np.array(h["time"]), np.array(h["u"])
    c = np.diag((h["scale"] * u) ** 2)
    if h["slow"] > 0:
        c = c + h["slow"] ** 2 * np.exp(-np.abs(t[:, None] - t[None, :]) / h["fade"])
    return c


def by_curve_fit(h):
    t, y, c = np.array(h["time"]), np.array(h["sag"]), noise(h)
    step = np.array([1.0 if x >= h["knock"] else 0.0 for x in t])
    k = len(h["start"]) - 2  # the law's coefficients, then knock, then shape

    def f(_, *p):
        a = columns(h, h["model"], p[-1])
        return a @ np.array(p[:k]) + p[k] * step

    # In units of the start, so that no parameter is tiny beside another.
    s = np.array([abs(v) if v else 1e-3 for v in h["start"]])
    p, cov = curve_fit(lambda x, *q: f(x, *(s * q)), t, y, p0=np.array(h["start"]) / s, sigma=c, absolute_sigma=True,
                       method="lm", ftol=1e-15, xtol=1e-15, gtol=1e-15, maxfev=20000)
    p = p * s
    r = np.linalg.solve(np.linalg.cholesky(c), y - f(t, *p))
    return {"p": list(p), "u": list(np.sqrt(np.diag(cov)) * s), "objective": float(r @ r), "fitted": list(f(t, *p))}


def by_nnls(h):
    y, c = np.array(h["sag"]), noise(h)
    a = columns(h, "kelvin-chain", None, h["taus"])
    low = np.linalg.cholesky(c)
    n = len(h["taus"])
    d = np.zeros((n - 2, n + 1))
    for i in range(n - 2):
        d[i, 1 + i : 4 + i] = [1, -2, 1]
    full = np.vstack([np.linalg.solve(low, a), h["lambda"] * d])
    b = np.concatenate([np.linalg.solve(low, y), np.zeros(n - 2)])
    scale = np.linalg.norm(full, axis=0)
    x, _ = nnls(full / scale, b, maxiter=10000)
    x = x / scale
    r = full @ x - b
    return {"p": list(x), "u": [], "objective": float(r @ r), "fitted": list(a @ x)}


with open(sys.argv[1]) as f:
    histories = json.load(f)
print(json.dumps([by_nnls(h) if h["model"] == "kelvin-chain" else by_curve_fit(h) for h in histories]))
