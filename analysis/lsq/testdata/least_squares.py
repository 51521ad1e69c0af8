"""The same least-squares problems by NumPy and SciPy.

Reads {"linear": [...], "nonlinear": [...]} as JSON on standard input. A
linear problem has design, y and the full covariance of y; it is whitened by
the covariance's Cholesky factor and solved by scipy.linalg.lstsq (singular
values). A nonlinear one has t, y, u and a start, for the model
a + b (1 - exp(-t/c)); it is solved by scipy.optimize.least_squares (MINPACK).
"""
import json
import sys

import numpy as np
import scipy.linalg
import scipy.optimize


def linear(p):
    a, y, v = (np.array(p[k]) for k in ("design", "y", "covariance"))
    l = scipy.linalg.cholesky(v, lower=True)
    wa = scipy.linalg.solve_triangular(l, a, lower=True)
    wy = scipy.linalg.solve_triangular(l, y, lower=True)
    x, _, _, _ = scipy.linalg.lstsq(wa, wy, lapack_driver="gelsd")
    u, s, vt = scipy.linalg.svd(wa, full_matrices=False)
    covariance = (vt.T / s ** 2) @ vt
    rest = wy - wa @ x
    return {"x": x.tolist(), "u": np.sqrt(np.diag(covariance)).tolist(), "chi2": float(rest @ rest)}


def nonlinear(p):
    t, y, u = (np.array(p[k]) for k in ("t", "y", "u"))
    model = lambda q: q[0] + q[1] * -np.expm1(-t / q[2])

    def slopes(q):
        e = np.exp(-t / q[2])
        return np.stack([np.ones_like(t), 1 - e, -q[1] * e * t / q[2] ** 2], axis=1) / u[:, None]

    r = scipy.optimize.least_squares(lambda q: (model(q) - y) / u, p["start"], jac=slopes,
                                     method="lm", xtol=1e-15, ftol=1e-15, gtol=1e-15, max_nfev=10000)
    covariance = np.linalg.inv(r.jac.T @ r.jac)
    return {"x": r.x.tolist(), "u": np.sqrt(np.diag(covariance)).tolist(), "chi2": float(2 * r.cost)}


problems = json.load(sys.stdin)
json.dump({"linear": [linear(p) for p in problems["linear"]],
           "nonlinear": [nonlinear(p) for p in problems["nonlinear"]]}, sys.stdout)
