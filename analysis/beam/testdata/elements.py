"""An independent beam code: Timoshenko elements assembled with NumPy.

Reads a list of rigs as JSON on standard input and writes, for each, the
deflections at the asked places and the supports' reactions. The element is
the exact two-node Timoshenko element (Przemieniecki 1968; from memory), the
mesh is this script's own: nodes at everything named and a random number of
nodes between. Rigid supports are constraints (Lagrange multipliers), yielding
ones and springs are stiffnesses. Units: mm, N; down positive.
"""
import json
import sys

import numpy as np
import scipy.linalg


def mesh(rig, rng):
    first, last = rig["from"], rig["from"] + rig["length"]
    x = [first, last] + list(rig["places"])
    x += [s["at"] for s in rig["supports"]] + [s["at"] for s in rig["springs"]]
    for load in rig["loads"]:
        x += [load["from"], load["to"]]
    x += list(rng.uniform(first, last, rng.integers(0, 12)))
    x = np.sort(np.array(x))
    keep = np.concatenate([[True], np.diff(x) > 1e-7 * rig["length"]])
    return x[keep]


def element(l, ei, s):
    phi = 0.0 if s is None else 12 * ei / (s * l * l)
    c = ei / (l ** 3 * (1 + phi))
    return c * np.array([
        [12, 6 * l, -12, 6 * l],
        [6 * l, (4 + phi) * l * l, -6 * l, (2 - phi) * l * l],
        [-12, -6 * l, 12, -6 * l],
        [6 * l, (2 - phi) * l * l, -6 * l, (4 + phi) * l * l]])


def solve(rig, rng):
    x = mesh(rig, rng)
    node = lambda at: int(np.argmin(np.abs(x - at)))
    n = 2 * len(x)
    k, f = np.zeros((n, n)), np.zeros(n)
    for i in range(len(x) - 1):
        l = x[i + 1] - x[i]
        at = slice(2 * i, 2 * i + 4)
        k[at, at] += element(l, rig["ei"], rig["s"])
        for load in rig["loads"]:
            middle = (x[i] + x[i + 1]) / 2
            if load["from"] < middle < load["to"]:
                q = load["force"] / (load["to"] - load["from"])
                f[at] += q * np.array([l / 2, l * l / 12, l / 2, -l * l / 12])
    for load in rig["loads"]:
        if load["from"] == load["to"]:
            f[2 * node(load["from"])] += load["force"]
    for spring in rig["springs"]:
        k[2 * node(spring["at"]), 2 * node(spring["at"])] += spring["stiffness"]
    rows, values = [], []
    for s in rig["supports"]:
        w = 2 * node(s["at"])
        if s["compliance"] > 0:
            k[w, w] += 1 / s["compliance"]
            f[w] += s["settlement"] / s["compliance"]
        else:
            rows.append(w)
            values.append(s["settlement"])
        if s["clamp"]:
            rows.append(w + 1)
            values.append(0.0)
    # Rotations are taken times the beam's length, all divided by a stiffness
    # of the beam's own, so that the system is well scaled.
    scale = np.ones(n)
    scale[1::2] = 1 / rig["length"]
    unit = rig["ei"] / rig["length"] ** 3
    k = k * scale[:, None] * scale[None, :] / unit
    free = np.ones(n, bool)
    free[rows] = False
    u = np.zeros(n)
    u[rows] = values
    right = (f * scale / unit - k @ u)[free]
    u[free] = scipy.linalg.solve(k[np.ix_(free, free)], right, assume_a="sym")
    # One step of refinement: short elements make the system stiff.
    rest = right - k[np.ix_(free, free)] @ u[free]
    u[free] += scipy.linalg.solve(k[np.ix_(free, free)], rest, assume_a="sym")
    pull = (k @ u * unit - f * scale) / scale
    out = []
    for s in rig["supports"]:
        w = 2 * node(s["at"])
        yields = s["compliance"] > 0
        out.append((u[w] - s["settlement"]) / s["compliance"] if yields else -pull[w])
    return {"deflections": [float(u[2 * node(p)]) for p in rig["places"]], "reactions": [float(r) for r in out]}


def main():
    rigs = json.load(sys.stdin)
    rng = np.random.default_rng(1)
    json.dump([solve(r, rng) for r in rigs], sys.stdout)


main()
