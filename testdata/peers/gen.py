#!/usr/bin/python3
"""Deterministic synthetic LCR sweeps: data/{A,B,C}/NNN.csv + truth.csv, and one sweep of ~20 MB, data/big.csv."""
import os, sys
import numpy as np

SEED, M = 20240601, 201
CIRCUITS = {  # nominal parameters, in the order used everywhere in this harness
    "A": dict(R=20e-3, L=5e-9, C=10e-6),
    "B": dict(L=15e-9, R=30e-3, C=100e-6, R1=200e-3, C1=20e-6),
    "C": dict(R=0.1, L=100e-6, Cp=10e-12, Rp=50e3),
}

def impedance(circ, p, w):
    if circ == "A":
        R, L, C = p
        return R + 1j*w*L + 1/(1j*w*C)
    if circ == "B":
        L, R, C, R1, C1 = p
        return 1j*w*L + R + 1/(1j*w*C) + R1/(1 + 1j*w*R1*C1)
    R, L, Cp, Rp = p
    return 1/(1/(R + 1j*w*L) + 1j*w*Cp + 1/Rp)

def main(out, n):
    f = np.logspace(2, 7, M)
    w = 2*np.pi*f
    for ci, (c, nom) in enumerate(CIRCUITS.items()):
        os.makedirs(f"{out}/{c}", exist_ok=True)
        nomv = np.array(list(nom.values()))
        with open(f"{out}/{c}/truth.csv", "w") as t:
            t.write("file," + ",".join(nom) + "\n")
            for k in range(n):
                g = np.random.default_rng([SEED, ci, k])
                p = nomv*(1 + 0.1*g.uniform(-1, 1, len(nomv)))
                # 0.1 % standard deviation in each quadrature of the relative error
                zz = impedance(c, p, w)*(1 + 1e-3*(g.standard_normal(M) + 1j*g.standard_normal(M)))
                r = [f"{a:.9g},{b:.7g},{d:.5f}" for a, b, d in zip(f, abs(zz), np.degrees(np.angle(zz)))]
                with open(f"{out}/{c}/{k:03d}.csv", "w") as h:
                    h.write("frequency_hz,impedance_ohm,phase_deg\n" + "\n".join(r) + "\n")
                t.write(f"{k:03d}.csv," + ",".join(repr(float(x)) for x in p) + "\n")
    # one rising sweep: a file that is a sweep has each frequency once
    n = 635_000
    fb = np.logspace(2, 7, n)
    z = impedance("A", list(CIRCUITS["A"].values()), 2*np.pi*fb)
    with open(f"{out}/big.csv", "w") as h:
        h.write("frequency_hz,impedance_ohm,phase_deg\n")
        for a, b, d in zip(fb, abs(z), np.degrees(np.angle(z))):
            h.write(f"{a:.9g},{b:.7g},{d:.5f}\n")

if __name__ == "__main__":
    main(sys.argv[1], int(sys.argv[2]))
