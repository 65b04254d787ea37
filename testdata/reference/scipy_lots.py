#!/usr/bin/python3
"""Computes the statistics of lots with SciPy and writes scipy_lots.json, the reference for report/lots.

Debian's python3-scipy (1.10.1). Data: NIST's files beside this folder, and seeded random samples that
are written into the JSON. Run in this folder: /usr/bin/python3 scipy_lots.py
"""
import json
import warnings
import numpy as np
from scipy import stats, integrate, optimize

warnings.simplefilter("ignore")
rng = np.random.default_rng(20260401)
NIST = "../nist-handbook/"


def two(x, y, exact):
    w = stats.ttest_ind(x, y, equal_var=False)
    vx, vy = np.var(x, ddof=1) / len(x), np.var(y, ddof=1) / len(y)
    df = (vx + vy)**2 / (vx**2 / (len(x) - 1) + vy**2 / (len(y) - 1))
    se = np.sqrt(vx + vy)
    h = stats.t.ppf(0.975, df) * se
    d = np.mean(x) - np.mean(y)
    margin = 0.05 * abs(np.mean(y))
    tost = max(stats.t.sf((d + margin) / se, df), stats.t.cdf((d - margin) / se, df))
    m = stats.mannwhitneyu(x, y, alternative="two-sided", method="exact" if exact else "asymptotic")
    b = stats.levene(x, y, center="median")
    crit = stats.t.ppf(1 - 0.005 / 2, df)
    power = lambda delta: stats.nct.sf(crit, df, delta) + stats.nct.cdf(-crit, df, delta) - 0.9
    detectable = optimize.brentq(power, 0, crit + 10, xtol=1e-13) * se
    return {"difference": d, "t": w.statistic, "df": df, "p": w.pvalue, "low95": d - h, "high95": d + h,
            "margin": margin, "tost_p": tost, "u": m.statistic, "u_p": m.pvalue, "exact": exact,
            "levene_w": b.statistic, "levene_p": b.pvalue, "detectable_alpha": 0.005, "detectable": detectable}


auto = np.loadtxt(NIST + "AUTO83B.DAT", skiprows=25)
us, japan = auto[:, 0], auto[auto[:, 1] > 0, 1]
zarr = np.loadtxt(NIST + "ZARR13.DAT", skiprows=25)
gear = np.loadtxt(NIST + "GEAR.DAT", skiprows=25)[:, 0]

pairs = [{"name": "AUTO83B", "x": us.tolist(), "y": japan.tolist(), **two(us, japan, False)}]
for name, nx, ny, shift, scale in [("small", 3, 3, 0.5, 1), ("few", 5, 8, 0, 1), ("uneven spread", 12, 9, 1.5, 3),
                                   ("lots of 24", 24, 24, 0.8, 1.2), ("lots of 30", 30, 30, -0.2, 0.7)]:
    x, y = rng.normal(10 + shift, scale, nx), rng.normal(10, 1, ny)
    pairs.append({"name": name, "x": x.tolist(), "y": y.tolist(), **two(x, y, True)})
x, y = rng.normal(20.5, 1, 40), rng.normal(20, 1, 45)
pairs.append({"name": "too many to count", "x": x.tolist(), "y": y.tolist(), **two(x, y, False)})
x, y = np.round(rng.normal(20.5, 1, 14), 1), np.round(rng.normal(20, 1, 15), 1)
pairs.append({"name": "ties", "x": x.tolist(), "y": y.tolist(), **two(x, y, False)})

normality = []
for name, v in [("ZARR13", zarr), ("GEAR", gear), ("AUTO83B US", us), ("normal 24", rng.normal(5, 2, 24)),
                ("exponential 24", rng.exponential(1, 24)), ("normal 8", rng.normal(5, 2, 8))]:
    normality.append({"name": name, "values": v.tolist(), "a2": stats.anderson(v, "norm").statistic})

noncentral = []
for t, nu, delta in [(1.5, 3, 0.5), (12.28834, 42, 8.4037), (-2.0, 5, 1.0), (0.0, 7, 2.0), (40.0, 499, 36.78), (30.0, 2, 5.0),
                     (1.0, 1, 0.0), (2.5, 23, 3.2)]:
    noncentral.append({"t": t, "nu": nu, "delta": delta, "p": stats.nct.cdf(t, nu, delta)})


def two_sided(n, share, confidence):
    """The exact factor, by SciPy's adaptive quadrature."""
    def radius(z):
        return optimize.brentq(lambda r: stats.norm.cdf(z + r) - stats.norm.cdf(z - r) - share, 0, 60, xtol=1e-14)

    def reached(k):
        f = lambda z: stats.chi2.sf((n - 1) * radius(z)**2 / k**2, n - 1) * stats.norm.pdf(z, scale=1 / np.sqrt(n))
        return 2 * integrate.quad(f, 0, 9 / np.sqrt(n), epsabs=1e-11, epsrel=1e-11, limit=200)[0] - confidence
    return optimize.brentq(reached, 0.5, 60, xtol=1e-11)


factors = []
for n in (3, 5, 10, 24, 43, 100):
    for share, confidence in ((0.95, 0.95), (0.9, 0.99)):
        one = stats.nct.ppf(confidence, n - 1, stats.norm.ppf(share) * np.sqrt(n)) / np.sqrt(n)
        factors.append({"n": n, "share": share, "confidence": confidence, "one_sided": one,
                        "two_sided": two_sided(n, share, confidence)})

with open("scipy_lots.json", "w") as f:
    json.dump({"pairs": pairs, "normality": normality, "noncentral_t": noncentral, "tolerance": factors}, f, indent=1)
    f.write("\n")
