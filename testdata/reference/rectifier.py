#!/usr/bin/env python3
"""The first 5 ms of rectifier.poise; writes rectifier.json.

Bench `biased`: source 1.5 V + 5 V sine 1 kHz zero rising at 0, from the bias point at 1.5 V. Bench `cold`: source 5 V sine alone, everything uncharged
(here that is the bias point too). Bench `cold_offset`: source 1.5 V + 5 V sine, everything uncharged.
Equations: equations.py, `diode`; method: network.py (Radau IIA, order 9, on charges).
Cross-check: half the steps; and scipy's Radau (order 5, variable step, rtol 1e-10) on the two charges of the junction and the load, with the
algebraic voltages solved inside by Newton's method.
"""
import numpy as np
from scipy.integrate import solve_ivp

from equations import Double, depletion, diode_at
from network import Network, quiescent, save, sources_at

SIGNAL = dict(Is=3.1e-9, em=1.83, rS=0.62, cap=3.7e-12, phi=0.74, grad=0.37, fcap=0.55, tau=50e-9, bandgap=1.14, expIs=3.3)


def source(offset):
    return lambda t: dict(src=offset + 5 * np.sin(2000 * np.pi * t))


def circuit():
    n = Network()
    n.hold(src=1.5)
    n.resistor("src", "a", 50)
    n.diode("D1", SIGNAL, "a", "out")
    n.capacitor("out", "gnd", 10e-6)
    n.resistor("out", "gnd", 1e3)
    return n.build()


class Reduced:
    """The states are the junction's charge and the load's voltage: dq/dt = (v_src - v_out - u)/(R + rS) - i(u), C dv_out/dt = (v_src - v_out - u)/(R + rS) - v_out/R_L."""
    h = diode_at(SIGNAL, 300.15, Double)

    def charge(self, u):
        h = self.h
        i = h["Is"] * np.expm1(u / (h["em"] * h["vt"]))
        return h["tau"] * i + float(depletion(u, h["cap"], h["phi"], h["grad"], h["fcap"], Double)), i

    def voltage(self, q, guess):
        u = guess
        for _ in range(200):
            f = self.charge(u)[0] - q
            slope = (self.charge(u + 1e-7)[0] - self.charge(u - 1e-7)[0]) / 2e-7
            d = -f / slope
            d = np.clip(d, -0.3, 0.05)
            u += d
            if abs(d) < 1e-14:
                break
        return u

    def run(self, offset, u0, out0, times):
        self.u = u0

        def f(t, y):
            u = self.voltage(y[0] * 1e-9, self.u)
            self.u = u
            through = (offset + 5 * np.sin(2000 * np.pi * t) - y[1] - u) / (50 + 0.62)
            return [(through - self.charge(u)[1]) * 1e9, (through - y[1] / 1e3) / 10e-6]

        s = solve_ivp(f, (0, times[-1]), [self.charge(u0)[0] * 1e9, out0], method="Radau", t_eval=times, rtol=1e-9, atol=[1e-9, 1e-11])
        return s.y[1]


def main():
    net = circuit()
    X = net.bias_exact({"src": 1.5})
    q = quiescent(net, X)
    times = [round(5e-3 * k / 97 * (1 + 3e-4 * np.sin(3 * k)), 10) for k in range(1, 97)] + [5e-3]
    out, inner = net.nodes.index("out"), net.nodes.index("D1.a'")
    benches, notes = {}, {}
    for name, offset, cold in (("biased", 1.5, False), ("cold", 0.0, True), ("cold_offset", 1.5, True)):
        runs = [net.transient(source(offset), times, [0.0], h, first, growth, cold=cold, progress=True)[:, out]
                for h, first, growth in ((1e-6, 1e-13, 1.5), (5e-7, 5e-14, 1.3))]
        other = Reduced().run(offset, 0.0 if cold else q["D1.a'"] - q["out"], 0.0 if cold else q["out"], times)
        notes[name] = {"half the steps (V)": float(np.max(np.abs(runs[0] - runs[1]))), "scipy Radau on the reduced equations (V)": float(np.max(np.abs(runs[1] - other)))}
        print(name, notes[name], flush=True)
        benches[name] = {"swing": float(np.ptp(runs[1])), "value": [round(float(v), 14) for v in runs[1]]}
    save("rectifier.json", {"units": "V, A, s; values are volts(out)", "accuracy": "see crosscheck: the first figure bounds the error", "crosscheck": notes, "nodes": q,
                            "delivered": sources_at(net, X), "time": times, "benches": benches})


if __name__ == "__main__":
    main()
