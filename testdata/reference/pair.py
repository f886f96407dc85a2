#!/usr/bin/env python3
"""Bias, response and operating quantities of pair.poise; writes pair.json.

Equations: equations.py (Gummel and Poon); definitions of the metrics: the design's page on analyses. Method: network.py.
Cross-check: the values at rest, at 50 Hz, 10 kHz and 1 MHz that were made by another hand on SUNDIALS IDA (README.md), and the golden
waveforms of pair-golden.txt, which this file recomputes for the benches hum and burst with Radau IIA of order 9.
"""
import os

import mpmath
import numpy as np

from network import HERE, Network, differential_stage, operating, quiescent, save, sources_at

LEFT = dict(Is=6.7e-15, betaF=410, betaR=4, earlyF=72, earlyR=14, kneeF=55e-3, kneeR=20e-3, leakE=8e-15, emE=1.7, leakC=4e-15, emC=1.9,
            rB=38, rE=0.4, rC=1.5, capE=11e-12, phiE=0.72, gradE=0.36, capC=4e-12, phiC=0.6, gradC=0.34, fcap=0.5, tauF=370e-12, tauR=25e-9)
RIGHT = dict(LEFT, Is=6.8005e-15, betaF=393.6)


def circuit(T=300.15):
    n = Network(T)
    n.hold(vp=9.0, vn=-9.0, sp=0.0, sn=0.0)
    n.resistor("sp", "bp", 175)
    n.resistor("sn", "bn", 185)
    n.capacitor("bp", "gnd", 220e-12)
    n.capacitor("bn", "gnd", 260e-12)
    n.bjt("Q1", LEFT, b="bp", c="vp", e="e1")
    n.bjt("Q2", RIGHT, b="bn", c="out", e="e2")
    n.resistor("e1", "tail", 270)
    n.resistor("tail", "e2", 270.54)
    n.resistor("vp", "out", 39e3)
    n.resistor("tail", "vn", 36e3)
    return n.build()


def golden(bench):
    rows = [line.split() for line in open(os.path.join(HERE, "pair-golden.txt"))]
    return np.array([[float(t), float(v)] for b, t, v in rows if b == bench]).T


def against_golden(net, bench, drive, corners, h, first):
    t, v = golden(bench)
    x = net.transient(drive, list(t), corners, h, first, progress=True)
    return float(np.max(np.abs(x[:, net.nodes.index("out")] - v)) / {"hum": 1.819916, "burst": 6.291400}[bench])


def main():
    net = circuit()
    X = net.bias_exact()
    at = sources_at(net, X)
    frequencies = [0.0, 50.0, 10e3, 1e6]
    rows = differential_stage(net, X, ("sp", "sn"), "out", ["vp", "vn"], frequencies)
    nodes = quiescent(net, X)
    check = {
        "out - golden (V)": nodes["out"] - 4.53088782944, "tail - golden (V)": nodes["tail"] + 0.639805861831,
        "dm_gain at 50 Hz - golden": [rows[1]["dm_gain"][0] - 38.7443694, rows[1]["dm_gain"][1] + 0.0017045606],
        "cm_gain at 50 Hz - golden": [rows[1]["cm_gain"][0] + 0.5251119394, rows[1]["cm_gain"][1] - 0.0001643715],
        "cmrr (dB) at 50 Hz, 10 kHz, 1 MHz - golden": [r["cmrr_dB"] - g for r, g in zip(rows[1:], [37.35913366, 37.34761686, 23.25549265])]}

    def hum(t):
        c, d = np.sin(100 * np.pi * t), 0.01 * np.sin(8 * np.pi * t)
        return dict(sp=c + d / 2, sn=c - d / 2)

    def burst(t):
        u = max(t - 1e-6, 0)
        c = 5 * 1.26977455856 * (np.exp(-u / 55.6097010238e-9) - np.exp(-u / 3.29097434884e-9))
        return dict(sp=c, sn=c)

    check["hum: largest difference from golden / swing"] = against_golden(net, "hum", hum, [0.0], 4e-4, 1e-8)
    check["burst: largest difference from golden / swing"] = against_golden(net, "burst", burst, [0.0, 1e-6], 1e-8, 1e-12)
    print(check)
    save("pair.json", {
        "units": "V, A, ohm, S, F, Hz; complex numbers as [real, imaginary]; currents of operating points into the pins",
        "accuracy": "bias 1e-15 relative (refined on 50 digits), response 1e-13 relative of the largest part",
        "crosscheck": check, "nodes": nodes, "delivered": at, "bias_current": (at["sp"] + at["sn"]) / 2, "offset_current": at["sp"] - at["sn"],
        "transistors": {q: operating(net, q, X) for q in ("Q1", "Q2")}, "response": rows})


if __name__ == "__main__":
    main()
