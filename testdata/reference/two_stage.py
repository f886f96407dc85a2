#!/usr/bin/env python3
"""Bias at three temperatures, response at six frequencies and a 2 ms transient of two_stage.poise; writes two_stage.json.

Drive of the transient (27 degC) at `src`: a 1 kHz square wave of 60 mV peak whose rises begin at 0.1 ms and 1.1 ms and whose falls begin at 0.6 ms and 1.6 ms,
each a straight line of 1.25 us (1 us from 10 to 90 %); -60 mV before the first rise. two_stage.poise writes it as a sum of steps; the same wave is
pulse(-60mV, 60mV, at: 100us, width: 500us, edge: 1us, every: 1ms).
Equations: equations.py; method: network.py.
Cross-check: half the steps; the same run by Radau IIA with 3 stages (order 5), and the response against central differences of the bias at 0 Hz.
"""
import mpmath
import numpy as np
import scipy.linalg

from network import Network, operating, pair_of, quiescent, save, sources_at

FIRST = dict(Is=4.2e-15, betaF=330, betaR=3, earlyF=85, earlyR=12, kneeF=60e-3, leakE=20e-15, emE=1.8, rB=85, rBmin=12, rE=0.3, rC=2.4, capE=14e-12, phiE=0.71,
             gradE=0.35, capC=5e-12, phiC=0.58, gradC=0.36, splitC=0.7, capS=3e-12, phiS=0.6, gradS=0.4, tauF=480e-12, tauFbias=2, tauFvolt=4, tauFcurr=50e-3,
             tauR=40e-9, expBeta=1.5)
SECOND = dict(Is=11e-15, betaF=160, betaR=5, earlyF=34, kneeF=45e-3, leakE=60e-15, emE=1.6, rB=120, rBmin=20, rBknee=300e-6, rE=0.6, rC=3.5, capE=17e-12, phiE=0.69,
              gradE=0.38, capC=8e-12, phiC=0.57, gradC=0.42, capS=4e-12, phiS=0.65, gradS=0.3, tauF=760e-12, tauR=70e-9, expBeta=1.2)
GUESS = {"b1": 1.8, "e1": 1.15, "c1": 10.7, "e2": 11.4, "out": 4.5, "y": 4.5, "Q1.b'": 1.8, "Q1.c'": 10.7, "Q1.e'": 1.15, "Q2.b'": 10.7, "Q2.c'": 4.5, "Q2.e'": 11.4}


def circuit(T=300.15, src=0.0):
    n = Network(T)
    n.hold(vcc=12.0, src=src)
    n.resistor("src", "x", 600)
    n.capacitor("x", "b1", 1e-6)
    n.resistor("vcc", "b1", 180e3)
    n.resistor("b1", "gnd", 33e3)
    n.bjt("Q1", FIRST, b="b1", c="c1", e="e1")
    n.resistor("vcc", "c1", 2.7e3)
    n.resistor("vcc", "e2", 100)
    n.bjt("Q2", SECOND, b="c1", c="out", e="e2", s="vcc", sign=-1)
    n.capacitor("c1", "out", 47e-12)
    n.resistor("out", "e1", 2.2e3)
    n.resistor("e1", "gnd", 560)
    n.inductor("out", "y", 10e-3)
    n.resistor("y", "gnd", 1e3)
    n.capacitor("out", "gnd", 1e-9)
    return n.build()


def drive(t):
    u = (t - 0.1e-3) % 1e-3 if t >= 0.1e-3 else -1.0
    if u < 0:
        level = -1.0
    elif u < 0.3e-3:
        level = min(-1 + 2 * u / 1.25e-6, 1.0)
    else:
        level = max(min(1 - 2 * (u - 0.5e-3) / 1.25e-6, 1.0), -1.0)
    return dict(src=0.06 * level)


def main():
    temperatures, operating_points, responses = [263.15, 300.15, 333.15], {}, {}
    checks = {}
    for T in temperatures:
        net = circuit(T)
        X = net.bias_exact(GUESS)
        operating_points[f"{T}"] = dict(nodes=quiescent(net, X), delivered=sources_at(net, X), coil_current=float(X[net.N]),
                                        transistors={q: operating(net, q, X) for q in ("Q1", "Q2")})
        GC = net.derivatives_exact(X)
        rows = []
        for f in (0.0, 10.0, 100.0, 1e3, 10e3, 100e3, 1e6):
            r, delivered = net.response_exact(GC, f, {"src": 1})
            p, _ = net.response_exact(GC, f, {"vcc": 1})
            z, _ = net.response_exact(GC, f, {}, {"out": 1})
            rows.append(dict(frequency=f, gain=pair_of(r["out"]), gain_from_vcc=pair_of(p["out"]), out_impedance=pair_of(z["out"])))
            if f > 0:
                rows[-1]["input_impedance"] = pair_of(1 / delivered["src"])
        responses[f"{T}"] = rows
        if T == 300.15:
            G, C = net.evaluate(np.array([float(v) for v in X]))[2:]
            free = net.free
            s = scipy.linalg.eigvals(-G[0][np.ix_(free, free)], C[0][np.ix_(free, free)])
            s = s[np.isfinite(s) & (abs(s) < 1e14)]
            print("slowest and fastest poles", sorted(s, key=abs)[:4], max(abs(s)), "largest real part", max(s.real))
            assert max(s.real) < 0
            step = mpmath.mpf("1e-4")
            up, down = circuit(T), circuit(T)
            up.hold(vcc=12 + 1e-4)
            down.hold(vcc=12 - 1e-4)
            o = net.nodes.index("out")
            d = float((up.bias_exact(GUESS)[o] - down.bias_exact(GUESS)[o]) / (2 * step))
            checks["gain from vcc at 0 Hz against differences of the bias"] = d - rows[0]["gain_from_vcc"][0]
    net = circuit(300.15, -0.06)
    out = net.nodes.index("out")
    edges = [0.1e-3, 0.6e-3, 1.1e-3, 1.6e-3]
    corners = [0.0] + [e for t in edges for e in (t, t + 1.25e-6)]
    times = sorted([round(2e-3 * k / 83 * (1 + 4e-4 * np.sin(3 * k)), 10) for k in range(1, 83)] + [round(e + 3.1e-7 * k ** 2, 12) for e in edges for k in range(1, 12)])
    runs = [net.transient(drive, times, corners, h, first, growth, stages, guess=GUESS, progress=True)[:, out]
            for h, first, growth, stages in ((5e-7, 5e-12, 1.3, 5), (2.5e-7, 2e-12, 1.14, 5), (2.5e-7, 1e-12, 1.1, 3))]
    checks["half the steps (V)"] = float(np.max(np.abs(runs[0] - runs[1])))
    checks["three stages of order 5 (V)"] = float(np.max(np.abs(runs[1] - runs[2])))
    print(checks, "swing", np.ptp(runs[1]))
    save("two_stage.json", {
        "units": "V, A, ohm, S, F, Hz, s, K; complex numbers as [real, imaginary]; currents of operating points into the pins",
        "accuracy": "bias 1e-15 relative (refined on 50 digits), response 1e-13 relative, transient: see crosscheck, the first figure bounds the error",
        "crosscheck": checks, "bias": operating_points, "response at 263.15 K": responses["263.15"], "response at 300.15 K": responses["300.15"],
        "response at 333.15 K": responses["333.15"],
        "square": {"quantity": "volts(out)", "temperature": 300.15, "swing": float(np.ptp(runs[1])), "time": times, "value": [round(float(v), 14) for v in runs[1]]}})


if __name__ == "__main__":
    main()
