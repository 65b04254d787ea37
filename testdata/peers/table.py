#!/usr/bin/python3
"""The table of run.sh: medians over the rounds, and ratios of realpart to its peers. usage: table.py FILE FILES"""
import json, sys
from statistics import median

rows = [json.loads(x) for x in open(sys.argv[1]) if x.strip()]
files = int(sys.argv[2])

def of(key, name, field, circuit=None):
    v = [r[field] for r in rows if r.get(key) == name and (circuit is None or r.get("circuit") == circuit) and field in r]
    return median(v) if v else float("nan")

def each(key, name, field, scale=1.0):
    return [scale*of(key, name, field, c) for c in "ABC"]

def line(title, values, fmt="{:9.4g}"):
    print(f"{title:58s}" + " ".join(fmt.format(v) for v in values))

def ratio(a, b):
    return [x/y for x, y in zip(a, b)]

print(f"{'':58s}" + " ".join(f"{c:>9s}" for c in "ABC"))
print("fit of 201 points, sweep already read, µs")
start = each("engine", "realpart from-start", "fit_us")
free = each("engine", "realpart no-start", "fit_us")
choice = each("engine", "realpart choice", "fit_us")
c = each("engine", "c_cminpack", "fit_us")
fused = each("engine", "c_fusedlm", "fit_us")
lm = each("engine", "scipy_lm_analytic", "fit_us")
lmfit = each("engine", "lmfit_leastsq", "fit_us")
line("  realpart, start 3x off, with uncertainty", start)
line("  realpart, no start", free)
line("  realpart, choice among all circuits of the kind", choice)
line("  C, cminpack, derivative by hand, start 3x off", c)
line("  C, fused kernel and solver for the one circuit", fused)
line("  SciPy lm, analytic Jacobian", lm)
line("  lmfit", lmfit)
line("  start: realpart / cminpack      (0.5, 0.6, 0.8 or less)", ratio(start, c), "{:9.2f}")
line("  start: realpart / fused C                   (3 or less)", ratio(start, fused), "{:9.2f}")
line("  SciPy lm / realpart                        (10 or more)", ratio(lm, start), "{:9.1f}")
line("  lmfit / realpart                           (40 or more)", ratio(lmfit, start), "{:9.1f}")
line("  no start / start                            (4 or less)", ratio(free, start), "{:9.2f}")
line("  choice / start                             (15 or less)", ratio(choice, start), "{:9.2f}")
print("Z and all derivatives, ns a point")
ours, kernel = each("micro", "realpart", "fj_ns"), each("micro", "fused C", "fj_ns")
line("  realpart", ours)
line("  fused C", kernel)
line("  realpart / fused C                          (4 or less)", ratio(ours, kernel), "{:9.2f}")
print("whole process, files a second")
a = [files/(ms/1e3) for ms in each("wall", "realpart, circuit named", "ms")]
b = [files/(ms/1e3) for ms in each("wall", "C cminpack given its starts, 1 process", "ms")]
d = [files/(ms/1e3) for ms in each("wall", "SciPy lm, 2 processes", "ms")]
line("  realpart, circuit named, no start, JSON", a)
line("  C, cminpack given its starts, 1 process", b)
line("  SciPy lm, 2 processes", d)
line("  realpart / C                                (1 or more)", ratio(a, b), "{:9.2f}")
print("reading a plain CSV")
mine, go, raw = (of("parse", n, "mbs") for n in ("realpart", "encoding/csv + ParseFloat", "C read + strtod loop"))
line("  19 MB sweep, MB/s: realpart, C, encoding/csv", [mine, raw, go])
line("  realpart / C, realpart / encoding/csv     (1, 1.5 or more)", [mine/raw, mine/go], "{:9.2f}")
mine, go = (of("parse", n, "mbs") for n in ("realpart, 201 points", "encoding/csv + ParseFloat, 201 points"))
line("  files of 201 points, MB/s: realpart, encoding/csv", [mine, go])
line("  realpart / encoding/csv                   (1.5 or more)", [mine/go], "{:9.2f}")
print("one process, ms")
line("  --version, fit of one file with choice (wall)", [of("wall", "realpart --version", "ms"), of("wall", "realpart fit of one file", "ms")])
