#!/usr/bin/python3
"""Fits the demo sweeps with SciPy and writes scipy_fit.json, the reference for the fit tests.

Debian's python3-scipy (1.10.1). The same cost, sum of |ln(Z_model/Z_measured)|^2, and the same
statistics, (J'J)^-1 s^2 with s^2 = sum/(2n - k), from SciPy's own optimiser and Jacobian.
Run in this folder: /usr/bin/python3 scipy_fit.py
"""
import json
import numpy as np
from scipy.optimize import least_squares


def par(*z):
    return 1 / sum(1 / v for v in z)


W0 = 2 * np.pi * 1000
CASES = {
    "electrolytic": (["ESR", "ESL", "C", "R1", "C1"], [0.02, 1e-8, 3e-4, 0.05, 2e-4],
                     lambda w, r, l, c, r1, c1: r + 1j*w*l + 1/(1j*w*c) + par(r1, 1/(1j*w*c1))),
    "ceramic": (["ESR", "ESL", "C", "tand"], [0.003, 1e-9, 9e-6, 0.02],
                lambda w, r, l, c, t: r + 1j*w*l + np.sqrt(1 + t*t)*(1j*w/W0)**(2/np.pi*np.arctan(t))/(1j*w*c)),
    "film": (["ESR", "ESL", "C"], [0.01, 1e-8, 1e-6], lambda w, r, l, c: r + 1j*w*l + 1/(1j*w*c)),
    "choke": (["DCR", "L", "Rp", "Cp"], [0.05, 5e-5, 8e3, 1e-11],
              lambda w, d, l, r, c: d + par(1j*w*l, r, 1/(1j*w*c))),
    "bead": (["DCR", "L", "R", "C"], [0.1, 1e-6, 500, 1e-12],
             lambda w, d, l, r, c: d + par(1j*w*l, r, 1/(1j*w*c))),
    "resistor": (["R", "L"], [0.1, 3e-9], lambda w, r, l: r + 1j*w*l),
}

out = {}
for name, (names, start, model) in CASES.items():
    f, a, ph = np.loadtxt(f"../demo/{name}.csv", delimiter=",", comments="#", skiprows=5, unpack=True)
    z = a * np.exp(1j * np.radians(ph))
    w = 2 * np.pi * f

    def residual(x):
        r = np.log(model(w, *np.exp(x)) / z)
        return np.concatenate((r.real, r.imag))

    s = least_squares(residual, np.log(start), jac="3-point", method="trf", x_scale=1.0,
                      ftol=1e-15, xtol=1e-15, gtol=1e-15)
    n, k = 2 * len(f), len(names)
    cov = np.linalg.inv(s.jac.T @ s.jac) * 2 * s.cost / (n - k)
    p = np.exp(s.x)
    out[name] = {"points": len(f), "rms_relative": float(np.sqrt(2 * s.cost / len(f))),
                 "parameters": {q: {"value": float(v), "std_error": float(v * np.sqrt(cov[i, i]))}
                                for i, (q, v) in enumerate(zip(names, p))}}
with open("scipy_fit.json", "w") as h:
    json.dump(out, h, indent=1)
    h.write("\n")
