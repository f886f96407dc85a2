#!/usr/bin/env python3
"""Bias, response, operating quantities and the mains-hum transient of mooring.poise; writes mooring.json.

The circuit is the whole-file example of the language's page (nominal values): Rload = e24(4.6 V/120 uA) = e24(38.33 kohm) = 39 kohm (ratio
1.017 against 1.065 for 36 kohm), Rtail = e24(8.37 V/240 uA) = e24(34.875 kohm) = 36 kohm (1.032 against 1.057 for 33 kohm), series E24 of IEC 60063.
Hum: common sine, 2 V peak to peak (1 V peak), 50 Hz, zero rising at 0; differential triangle, 20 mV peak to peak (10 mV peak), 4 Hz, zero rising at 0.
Equations: equations.py; definitions of the metrics: the design's page on analyses; method: network.py.
Cross-check: the waveform with half the steps; the differences are stored.
"""
import numpy as np

from network import Network, differential_stage, operating, quiescent, save, sources_at

PAIR = dict(Is=6.7e-15, betaF=410, earlyF=72, kneeF=55e-3, rB=38, rE=0.4, rC=1.5, capE=11e-12, capC=4e-12, tauF=370e-12)
E24 = [10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91]  # IEC 60063


def e24(x):
    candidates = [m * 10.0 ** k for k in range(-3, 9) for m in E24]
    return min(candidates, key=lambda c: abs(np.log(c / x)))


def circuit(T=300.15):
    n = Network(T)
    n.hold(vp=9.0, vn=-9.0, sp=0.0, sn=0.0)
    n.resistor("sp", "bp", 175)
    n.resistor("sn", "bn", 185)
    n.capacitor("bp", "gnd", 220e-12)
    n.capacitor("bn", "gnd", 260e-12)
    n.bjt("Q1", PAIR, b="bp", c="vp", e="e1")
    n.bjt("Q2", PAIR, b="bn", c="out", e="e2")
    n.resistor("e1", "tail", 270)
    n.resistor("tail", "e2", 270)
    n.resistor("vp", "out", e24(4.6 / 120e-6))
    n.resistor("tail", "vn", e24((9 - 0.63) / (2 * 120e-6)))
    return n.build()


def triangle(t, peak, f):
    x = (t * f + 0.25) % 1.0
    return peak * (4 * x - 1 if x < 0.5 else 3 - 4 * x)


def hum(t):
    c, d = np.sin(100 * np.pi * t), triangle(t, 0.01, 4.0)
    return dict(sp=c + d / 2, sn=c - d / 2)


def main():
    net = circuit()
    X = net.bias_exact()
    at = sources_at(net, X)
    rows = differential_stage(net, X, ("sp", "sn"), "out", ["vp", "vn"], [0.0, 50.0, 100.0, 10e3, 1e6])
    times = [round(0.0013 + 0.9987 * k / 103 * (1 + 1e-3 * np.sin(k)), 9) for k in range(1, 103)]
    corners = [0.0] + [(2 * k + 1) / 16 for k in range(8)]
    out = net.nodes.index("out")
    runs = [net.transient(hum, times, corners, h, first, growth, progress=True)[:, out]
            for h, first, growth in ((5e-4, 2e-9, 1.6), (2.5e-4, 1e-9, 1.3))]
    error = float(np.max(np.abs(runs[0] - runs[1])))
    swing = float(np.ptp(runs[1]))
    print("half the steps moves the waveform by", error, "V of", swing)
    save("mooring.json", {
        "units": "V, A, ohm, S, F, Hz, s; complex numbers as [real, imaginary]; currents of operating points into the pins",
        "accuracy": f"bias 1e-15 relative (refined on 50 digits), response 1e-13 relative, hum: half the steps moves volts(out) by at most {error:.1e} V",
        "values": {"Rload": e24(4.6 / 120e-6), "Rtail": e24((9 - 0.63) / 240e-6)}, "nodes": quiescent(net, X), "delivered": at,
        "bias_current": (at["sp"] + at["sn"]) / 2, "offset_current": at["sp"] - at["sn"],
        "transistors": {q: operating(net, q, X) for q in ("Q1", "Q2")}, "response": rows,
        "hum": {"quantity": "volts(out)", "swing": swing, "time": times, "value": [round(float(v), 14) for v in runs[1]]}})


if __name__ == "__main__":
    main()
