#!/usr/bin/env python3
"""A table of evaluations of the diode; writes diode.json.

Equations: equations.py, `diode`. Rows state the voltage across the pins; the internal node behind rS is solved by Newton's method in 60 digits.
Cross-check: without breakdown the current behind a series resistance has the closed form of the Lambert function, I = (n V_T/R) W(...) - Is
(Corless et al., On the Lambert W Function, Adv. Comput. Math. 5 (1996) 329-359), computed here with mpmath.lambertw; with breakdown, scipy.optimize.brentq.
"""
import mpmath
import numpy as np
from scipy.optimize import brentq

from equations import Double, Exact, INF, diode_at, diode_core
from network import save

SIGNAL = dict(Is=3.1e-9, em=1.83, rS=0.62, cap=3.7e-12, phi=0.74, grad=0.37, fcap=0.55, tau=5.1e-9, bandgap=1.14, expIs=3.3)
ZENER = dict(Is=4e-15, em=1.08, rS=7.5, breakdown=5.6, kneeBreak=2.5e-3, cap=130e-12, phi=0.81, grad=0.44, tau=60e-9, tref=298.15)
PLAIN = dict()
CASES = [("signal", SIGNAL, 1), ("zener", ZENER, 1.6), ("plain", PLAIN, 1)]
TEMPERATURES = [250.0, 300.15, 390.0]
VOLTS = [-7.3, -6.1, -5.45, -2.9, -0.7, -0.03, 0.0, 0.01, 0.25, 0.38, 0.47, 0.55, 0.62, 0.68, 0.75]


def solve(v, h):
    j = mpmath.mpf(float(solve_double(float(v), {k: float(x) for k, x in h.items()})))
    for _ in range(40):
        step = mpmath.mpf(10) ** -25

        def residual(u):
            return v - u - h["rS"] * diode_core(u, h, Exact)[0]

        d = residual(j) * 2 * step / (residual(j - step) - residual(j + step))
        j += d
        if abs(d) < mpmath.mpf(10) ** -45:
            return j
    raise RuntimeError("internal node")


def solve_double(v, h):
    if h["rS"] == 0:
        return v
    return brentq(lambda u: v - u - h["rS"] * float(diode_core(u, h, Double)[0]), min(v, 0) - 1e-9, max(v, 0) + 1e-9, xtol=1e-16, rtol=8.9e-16)


def lambert(v, h):
    """Current by the closed form, for rS > 0 and no breakdown."""
    a = h["em"] * h["vt"]
    w = mpmath.lambertw(h["Is"] * h["rS"] / a * mpmath.exp((v + h["Is"] * h["rS"]) / a))
    return a / h["rS"] * w.real - h["Is"]


def main():
    mpmath.mp.dps = 60
    out, worst = [], np.zeros(2)
    for name, given, area in CASES:
        for T in TEMPERATURES:
            h = diode_at(given, T, Exact, area)
            points = []
            for volts in VOLTS:
                v = mpmath.mpf(volts)
                u = solve(v, h)
                current, charge = diode_core(u, h, Exact)
                if h["rS"] > 0 and h["breakdown"] == INF:
                    worst[0] = max(worst[0], float(abs(current - lambert(v, h)) / h["Is"]))
                worst[1] = max(worst[1], abs(float(u) - solve_double(volts, {k: float(x) for k, x in h.items()})))
                points.append(dict(v=volts, junction=float(u), i=float(current), q=float(charge)))
            one = diode_at(given, T, Exact)
            out.append(dict(case=f"{name} at {T} K", family="diode", area=area, temperature=T, parameters=given,
                            scaled={n: float(one[n]) for n in ("Is", "cap", "phi")}, points=points))
    print("against Lambert W (of Is), against brentq (V):", worst)
    save("diode.json", {
        "units": "SI: V, A, ohm, F, C, s, K (tref too); bandgap in eV",
        "conventions": "v: anode against cathode; junction: voltage behind rS; i: current into the anode at rest; q: charge on the anode's side; parameters: as given, the rest at their defaults; scaled: at the temperature, for area 1",
        "accuracy": "every number is the double nearest to a solution in 60 digits",
        "crosscheck": {"largest difference from the Lambert form, of Is": float(worst[0]), "largest difference of the junction voltage from brentq (V)": float(worst[1])},
        "cases": out})


if __name__ == "__main__":
    main()
