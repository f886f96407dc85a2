#!/usr/bin/env python3
"""Response and step of geophone.poise, a linear network, in closed form; writes geophone.json.

Equations: Kirchhoff's laws with three states, x = (i, v_a, v_b), i the coil current from p towards a:
  L di/dt = v_p - v_a - (Rcoil + Rlead1) i
  C1 dv_a/dt = i - v_a/Rin1 - (v_a - v_b)/Rdamp
  C2 dv_b/dt = (v_n - v_b)/Rlead2 - v_b/Rin2 + (v_a - v_b)/Rdamp
Drives: v_p = common + differential/2, v_n = common - differential/2. Response: (j w - A)^-1 B. A drive that rises in a straight line for a time W and
then stays (edge, 10 to 90 % time, = 0.8 W): x(t) = r(t) - r(t - W), r(t) = A^-2 (exp(A t) - 1 - A t) B/W, the response to a ramp, with the
exponential from the eigenvalues in 50 digits.
Cross-check: the same numbers by network.py (Radau IIA on node equations; response from its own matrices).
"""
import mpmath
import numpy as np

from network import Network, pair_of, save

M = mpmath
M.mp.dps = 50
RC, LC, R1, R2, RD, C1, C2, RA, RB = [M.mpf(v) for v in ("380", "0.3", "30", "45", "5e3", "10e-9", "13e-9", "1e6", "1.2e6")]
A = M.matrix([[-(RC + R1) / LC, -1 / LC, 0], [1 / C1, -(1 / RA + 1 / RD) / C1, 1 / RD / C1], [0, 1 / RD / C2, -(1 / R2 + 1 / RB + 1 / RD) / C2]])
B = M.matrix([[1 / LC, 0], [0, 0], [0, 1 / R2 / C2]])
MODES = dict(differential=M.matrix(["0.5", "-0.5"]), common=M.matrix([1, 1]))


def response(f, mode):
    s = M.mpc(0, 2 * M.pi * M.mpf(f))
    return M.lu_solve(s * M.eye(3) - A, B * MODES[mode])


def port_currents(f, mode):
    x = response(f, mode)
    return x[0], (MODES[mode][1] - x[2]) / R2  # into the network at p and at n


def metrics(f):
    dm, cm = response(f, "differential"), response(f, "common")
    ip, i_n = port_currents(f, "differential")
    cp, cn = port_currents(f, "common")
    gd, gc = dm[1] - dm[2], cm[1] - cm[2]
    zo = output_impedance(f)
    return dict(frequency=f, dm_gain=pair_of(gd), cm_to_dm=pair_of(gc), dm_to_cm=pair_of((dm[1] + dm[2]) / 2), cmrr=float(abs(gd / gc)), cmrr_dB=float(20 * M.log10(abs(gd / gc))),
                dm_impedance=pair_of(2 / (ip - i_n)), cm_impedance=pair_of(1 / (cp + cn)), out_impedance=pair_of(zo))


def output_impedance(f):
    s = M.mpc(0, 2 * M.pi * M.mpf(f))
    x = M.lu_solve(s * M.eye(3) - A, M.matrix([0, 1 / C1, -1 / C2]))  # 1 A into a, out of b
    return x[1] - x[2]


E, V = M.eig(A)
U = V ** -1


def ramp(t, mode, W):
    if t <= 0:
        return M.matrix(3, 1)
    b = U * (B * MODES[mode])
    return (V * M.matrix([(M.expm1(e * t) - e * t) / e ** 2 * y / W for e, y in zip(E, b)])).apply(M.re)


def step(t, mode, at, W, height):
    return height * (ramp(t - at, mode, W) - ramp(t - at - W, mode, W))


def network():
    n = Network()
    n.hold(p=0.0, n=0.0)
    n.resistor("p", "x", 380)
    n.inductor("x", "y", 0.3)
    n.resistor("y", "a", 30)
    n.resistor("n", "b", 45)
    n.resistor("a", "b", 5e3)
    n.capacitor("a", "gnd", 10e-9)
    n.capacitor("b", "gnd", 13e-9)
    n.resistor("a", "gnd", 1e6)
    n.resistor("b", "gnd", 1.2e6)
    return n.build()


def main():
    frequencies = ["0", "10", "470", "3e3", "41e3", "1e6"]
    rows = [metrics(float(f)) for f in frequencies]
    at, W, height = M.mpf("0.4e-3"), M.mpf("125e-6"), M.mpf("0.02")
    times = [round(0.4e-3 + 3.3e-3 * ((k / 60) ** 2) * (1 + 0.01 * np.sin(2 * k)), 9) for k in range(1, 61)]
    net = network()
    GC = net.derivatives_exact([mpmath.mpf(0)] * net.size)
    off = 0.0
    for f, r in zip(frequencies, rows):
        x, _ = net.response_exact(GC, f, {"p": 0.5, "n": -0.5})
        y, _ = net.response_exact(GC, f, {"p": 1, "n": 1})
        z, _ = net.response_exact(GC, f, {}, {"a": 1, "b": -1})
        for mine, theirs in ((r["dm_gain"], x["a"] - x["b"]), (r["cm_to_dm"], y["a"] - y["b"]), (r["out_impedance"], z["a"] - z["b"])):
            off = max(off, float(abs(M.mpc(*mine) - theirs) / abs(theirs)))
    steps, differences = {}, []
    for mode in MODES:
        exact = [step(M.mpf(t), mode, at, W, height) for t in times]

        def drive(t):
            x = 0.02 * min(max((t - 0.4e-3) / 125e-6, 0), 1)
            return dict(p=x / 2, n=-x / 2) if mode == "differential" else dict(p=x, n=x)

        run = net.transient(drive, times, [0.0, 0.4e-3, 525e-6], 5e-6, 1e-9)
        a, b = net.nodes.index("a"), net.nodes.index("b")
        differences.append(max(float(abs(run[k, a] - x[1]) + abs(run[k, b] - x[2])) for k, x in enumerate(exact)))
        steps[mode] = {"volts(a)": [float(x[1]) for x in exact], "volts(b)": [float(x[2]) for x in exact], "coil current": [float(x[0]) for x in exact]}
    print("response against node equations:", off, "steps against Radau IIA (V):", differences)
    save("geophone.json", {
        "units": "V, A, ohm, Hz, s, rad/s; complex numbers as [real, imaginary]",
        "accuracy": "closed forms in 50 digits, rounded to double",
        "crosscheck": {"largest relative difference of the response from the node equations": off, "largest difference of the steps from Radau IIA (V)": max(differences)},
        "poles": [pair_of(e) for e in E], "response": rows,
        "drive": "step(0V, 20mV, at: 0.4ms, edge: 100us) on one mode of the port: rises in a straight line from 0.4 ms to 0.525 ms",
        "time": times, "steps": steps})


if __name__ == "__main__":
    main()
