#!/usr/bin/env python3
"""A table of evaluations of the bipolar transistor; writes bjt.json.

Equations: equations.py (Gummel and Poon, in the form of Getreu and of Massobrio and Antognetti; see its header for the sources).
Each row states terminal voltages against ground; the internal nodes are solved by Newton's method in 60 digits (residual below 1e-45 A),
so a row is the rounding of the exact solution to double. Charges belong to the solved internal voltages.
Cross-check: the same solution by scipy.optimize.root in double precision, started from the voltages aimed at (largest differences stored), and
I_C, I_B of every row once more from the formulas written out below a second time, without equations.py.
"""
import math

import mpmath
import numpy as np
from scipy.optimize import root

from equations import Double, Exact, bjt_at, bjt_branches, bjt_core, bjt_outer_charges
from network import save

FULL = dict(Is=6.7e-15, betaF=410, betaR=4, emF=1.01, emR=1.02, earlyF=72, earlyR=14, kneeF=55e-3, kneeR=20e-3, leakE=8e-15, emE=1.7,
            leakC=4e-15, emC=1.9, rB=138, rBmin=21, rE=0.4, rC=1.5, capE=11e-12, phiE=0.72, gradE=0.36, capC=4e-12, phiC=0.6, gradC=0.34,
            splitC=0.62, capS=2.3e-12, phiS=0.58, gradS=0.41, fcap=0.5, tauF=370e-12, tauR=25e-9)
KNEE = dict(Is=1.9e-16, betaF=120, betaR=0.8, emF=1.0, emR=1.03, earlyF=38, earlyR=5.5, kneeF=8e-3, kneeR=3e-3, leakE=3e-14, emE=2.1, leakC=2e-15, emC=1.6,
            rB=310, rBmin=26, rBknee=140e-6, rE=1.7, rC=24, capE=0.9e-12, phiE=0.91, gradE=0.29, capC=0.5e-12, phiC=0.66, gradC=0.46, splitC=0.35,
            capS=1.1e-12, phiS=0.7, gradS=0, fcap=0.7, tauF=28e-12, tauR=3e-9, tauFbias=3.4, tauFvolt=2.2, tauFcurr=12e-3, bandgap=1.17, expIs=3.6,
            expBeta=1.4, tref=323.15)
COMPLEMENT = dict(Is=2.4e-14, betaF=190, betaR=6, earlyF=29, earlyR=9, kneeF=70e-3, leakE=5e-14, emE=1.5, rB=90, rE=0.8, rC=3, capE=19e-12, phiE=0.68,
                  gradE=0.4, capC=9e-12, phiC=0.55, gradC=0.5, splitC=0.8, capS=6e-12, phiS=0.62, gradS=0.33, fcap=0.35, tauF=640e-12, tauR=90e-9,
                  tauFbias=1.8, tauFvolt=6, expBeta=0.9)
PLAIN = dict(Is=1e-15, betaF=200, capE=5e-12, capC=3e-12, tauF=1e-9, tauFbias=2, tauFcurr=5e-3)
CASES = [("full", "npn", FULL, 1), ("knee", "npn", KNEE, 2.5), ("complement", "pnp", COMPLEMENT, 0.7), ("plain", "npn", PLAIN, 1)]
TEMPERATURES = [250.0, 300.15, 390.0]

# (forward, reverse): a positive entry is the transport current aimed at (A), a string a voltage (V)
AIMS = [(1e-9, "-3"), (1e-6, "-0.4"), (1e-4, "-5"), (1e-3, "-12"), (1e-2, "-2"), (4e-2, "-1"), (1e-3, 1e-5), (1e-4, 7e-5), ("-1.3", 1e-4),
        ("-0.5", 2e-3), ("-0.8", "-4"), ("-0.02", "-0.03"), ("0.05", "0.02"), (3e-3, "0.1"), (2e-2, "0.3")]
PINS = ["b", "c", "e", "s"]


def aimed(aim, emission, h):
    return float(aim) if isinstance(aim, str) else float(emission * h["vt"] * math.log(aim / h["Is"]))


def solve_exact(pins, start, h, sign):
    """Internal voltages (b', c', e') for the voltages of the pins, by Newton's method with central differences."""
    x = mpmath.matrix(start)
    resistance = ["rB", "rC", "rE"]

    def residual(x):
        current, _ = bjt_branches(list(pins) + list(x), h, sign, Exact)
        return [x[k] - pins[k] if h[resistance[k]] == 0 else current[4 + k] for k in range(3)]

    step = mpmath.mpf(10) ** -25
    for _ in range(60):
        r = residual(x)
        J = mpmath.matrix(3)
        for j in range(3):
            up, down = x.copy(), x.copy()
            up[j] += step
            down[j] -= step
            ru, rd = residual(up), residual(down)
            for i in range(3):
                J[i, j] = (ru[i] - rd[i]) / (2 * step)
        d = mpmath.lu_solve(J, -mpmath.matrix(r))
        x += d
        if max(abs(v) for v in d) < mpmath.mpf(10) ** -45:
            return list(x), max(abs(v) for v in residual(x))
    raise RuntimeError("internal nodes")


def solve_double(pins, start, h, sign):
    resistance = ["rB", "rC", "rE"]

    def residual(x):
        current, _ = bjt_branches(list(pins) + list(x), h, sign, Double)
        return [x[k] - pins[k] if h[resistance[k]] == 0 else float(current[4 + k]) * (h["rB"] + h["rC"] + h["rE"]) for k in range(3)]

    return root(residual, start, tol=1e-15).x


def written_again(v1, v2, h):
    """I_C and I_B in plain floats, a second writing of the same equations."""
    vt = h["vt"]
    f = h["Is"] * math.expm1(v1 / h["emF"] / vt)
    r = h["Is"] * math.expm1(v2 / h["emR"] / vt)
    base = 1 / (1 - v2 / h["earlyF"] - v1 / h["earlyR"])
    base *= 0.5 + math.sqrt(0.25 + f / h["kneeF"] + r / h["kneeR"])
    lc, le = h["leakC"] * math.expm1(v2 / h["emC"] / vt), h["leakE"] * math.expm1(v1 / h["emE"] / vt)
    return (f - r) / base - r / h["betaR"] - lc, f / h["betaF"] + r / h["betaR"] + le + lc


def row(name, sign, T, h, hd, k, aim, area):
    v1 = aimed(aim[0], hd["emF"], hd)
    v2 = aimed(aim[1], hd["emR"], hd)
    x = bjt_core(mpmath.mpf(v1), mpmath.mpf(v2), h, Exact)
    ei = -0.37 + 0.11 * k
    inner = [ei + v1, ei + v1 - v2, ei]
    # pins from the internal nodes, rounded to the microvolt, then the internal nodes again from the pins
    pins = [inner[0] + float(x["r_bb"] * x["I_B"]), inner[1] + float(h["rC"] * x["I_C"]), inner[2] - float(h["rE"] * (x["I_C"] + x["I_B"])),
            inner[1] + (0.52 if k == 13 else -2.1)]
    pins = [round(sign * p, 6) for p in pins]
    start = [sign * v for v in inner]
    solved, left = solve_exact([mpmath.mpf(p) for p in pins], start, h, sign)
    current, charge = bjt_branches([mpmath.mpf(p) for p in pins] + solved, h, sign, Exact)
    v1, v2 = sign * (solved[0] - solved[2]), sign * (solved[0] - solved[1])
    x = bjt_core(v1, v2, h, Exact)
    Q_X, Q_S = bjt_outer_charges(sign * (pins[0] - solved[1]), sign * (pins[3] - solved[1]), h, Exact)
    flow = [sign * x["I_B"], sign * x["I_C"], -sign * (x["I_B"] + x["I_C"])]
    again = written_again(float(v1), float(v2), hd)
    size = max(abs(float(x["I_C"])), abs(float(x["I_B"])))
    checks = (float(left), float(np.max(np.abs(solve_double(pins, start, hd, sign) - [float(v) for v in solved]))),
              max(abs(again[0] - float(x["I_C"])), abs(again[1] - float(x["I_B"]))) / (size + 1e-30))
    return dict(v=dict(zip(PINS, pins)), inner=dict(zip(["b", "c", "e"], map(float, solved))), i=dict(zip(PINS, map(float, flow))), v1=float(v1), v2=float(v2),
                IC=float(x["I_C"]), IB=float(x["I_B"]), qb=float(x["q_b"]), rbb=float(x["r_bb"]), QE=float(x["Q_E"]), QC=float(x["Q_C"]), QX=float(Q_X),
                QS=float(Q_S)), checks


def main():
    mpmath.mp.dps = 60
    cases, worst = {}, np.zeros(3)
    for name, family, given, area in CASES:
        sign = 1 if family == "npn" else -1
        for T in TEMPERATURES:
            h, hd = bjt_at(given, T, Exact, area), bjt_at(given, T, Double, area)
            rows = []
            for k, aim in enumerate(AIMS):
                r, checks = row(name, sign, T, h, hd, k, aim, area)
                worst = np.maximum(worst, checks)
                rows.append(r)
            at_T = bjt_at(given, T, Exact)  # for unit area
            scaled = {n: float(at_T[n]) for n in "Is betaF betaR leakE leakC capE phiE capC phiC capS phiS".split()}
            cases[f"{name} at {T} K"] = dict(family=family, area=area, temperature=T, parameters=given, scaled=scaled, points=rows)
    print("largest residual (A), against scipy (V), formulas written twice (relative):", worst)
    flat = []
    for key, case in cases.items():
        flat.append(dict(case=key, **{k: v for k, v in case.items() if k != "points"}, points=case["points"]))
    save("bjt.json", {
        "units": "SI: V, A, ohm, F, C, s, K (tref too); bandgap in eV",
        "conventions": "v: pins against ground; inner: b', c', e' (equal to the pin where its resistance is 0); i: currents into the pins at rest; v1 v2 IC IB QE QC "
                       "QX QS as in the equations, for pnp with voltages, currents and charges reversed; parameters: as given, the rest at their defaults; scaled: at the temperature, for area 1",
        "accuracy": "every number is the double nearest to a solution in 60 digits",
        "crosscheck": dict(zip(["largest residual current (A)", "largest difference of an internal voltage from scipy.optimize.root (V)",
                                "largest relative difference of I_C, I_B written twice"], map(float, worst))),
        "cases": flat})


if __name__ == "__main__":
    main()
