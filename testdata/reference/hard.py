#!/usr/bin/env python3
"""Reference end values of stiff problems for integrators; writes hard.json.

Equations after E. Hairer and G. Wanner, Solving Ordinary Differential Equations II (1996): HIRES, Robertson and Van der Pol of section IV.10, the transistor
amplifier of section VI.1; all written from memory, as are the published end values that some are compared with.

  hires       t = 321.8122                    A: Taylor series, order 40, 40 digits (mpmath)       B: Radau IIA, 5 stages, doubles
  robertson   t = 40                          A: Taylor series, order 40, 40 digits                B: Radau IIA, 5 stages, doubles
              t = 4e4, 4e7                    A: Radau IIA, 5 stages, doubles                      B: the same with 7 stages
  vanderpol   y'' = mu (1 - y^2) y' - y, mu = 1000, from (2, 0): t = 2000 (past both jumps of the first relaxation)
                                              A: Radau IIA, 7 stages, doubles                      B: scipy Radau (order 5)
  amplifier   t = 0.2 (8 voltages, index 1)   A: Radau IIA, 5 stages, fixed steps on M y           B: scipy Radau on the five charges, voltages solved inside

`digits` counts the decimal digits in which A and B agree, for each component; the value is A's. A method of order p with variable steps takes the error from the
same step in two halves.
"""
import math

import mpmath
import numpy as np
from scipy.integrate import solve_ivp

from network import radau, lagrange, save


# ---- Right-hand sides and Jacobians

def hires(t, y):
    a = 280 * y[5] * y[7]
    return np.array([-1.71 * y[0] + 0.43 * y[1] + 8.32 * y[2] + 0.0007, 1.71 * y[0] - 8.75 * y[1], -10.03 * y[2] + 0.43 * y[3] + 0.035 * y[4],
                     8.32 * y[1] + 1.71 * y[2] - 1.12 * y[3], -1.745 * y[4] + 0.43 * y[5] + 0.43 * y[6],
                     -a + 0.69 * y[3] + 1.71 * y[4] - 0.43 * y[5] + 0.69 * y[6], a - 1.81 * y[6], -a + 1.81 * y[6]])


def robertson(t, y):
    a, b, c = 0.04 * y[0], 1e4 * y[1] * y[2], 3e7 * y[1] * y[1]
    return np.array([-a + b, a - b - c, c])


MU = 1000.0


def vanderpol(t, y):
    return np.array([y[1], MU * (1 - y[0] * y[0]) * y[1] - y[0]])


def jacobian(f, t, y):
    """By complex steps: exact to rounding for these polynomials."""
    n = len(y)
    J = np.empty((n, n))
    for j in range(n):
        z = y.astype(complex)
        z[j] += 1e-30j
        J[:, j] = f(t, z).imag / 1e-30
    return J


# ---- Taylor series in many digits, for sums of constant, linear and bilinear terms

def taylor(linear, bilinear, constant, y0, t_end, order=40, digits=40):
    """y_i' = constant_i + sum linear[i][j] y_j + sum k y_a y_b over bilinear[(a, b)] = {i: k}. Steps from the last two coefficients."""
    M = mpmath
    with M.workdps(digits):
        n = len(y0)
        num = lambda v: M.mpf(repr(v)) if isinstance(v, float) else M.mpf(v)
        lin = [[(j, num(k)) for j, k in row.items()] for row in linear]
        bil = [(a, b, [(i, num(k)) for i, k in target.items()]) for (a, b), target in bilinear.items()]
        con = [num(v) for v in constant]
        y, t, end, steps = [num(v) for v in y0], M.mpf(0), num(t_end), 0
        small = M.mpf(10) ** -30
        while t < end:
            c = [[v] for v in y]
            for k in range(order):
                d = [sum(w * c[j][k] for j, w in row) for row in lin]
                for a, b, target in bil:
                    ca, cb = c[a], c[b]
                    s = M.fdot(ca[:k + 1], cb[k::-1])
                    for i, w in target:
                        d[i] += w * s
                if k == 0:
                    d = [u + v for u, v in zip(d, con)]
                for i in range(n):
                    c[i].append(d[i] / (k + 1))
            scale = max(abs(v) for v in y)
            h = min(min((small * scale / max(abs(c[i][m]) for i in range(n))) ** (M.mpf(1) / m) for m in (order - 1, order)), end - t)
            y = [M.polyval(ci[::-1], h) for ci in c]
            t += h
            steps += 1
        print("   Taylor:", steps, "steps", flush=True)
        return [float(v) for v in y]


# ---- Radau IIA with variable steps, for y' = f(t, y)

def radau_variable(f, y0, ends, stages, tol, floor, first):
    """Values at the times `ends`; error of a step from two half steps, relative to |y| + floor."""
    c, A = radau(stages)
    n = len(y0)
    order = 2 * stages - 1
    eye = np.eye(n)
    Ainv = np.linalg.inv(A)

    def step(t, y, h):
        Z = np.zeros((stages, n))
        before = np.inf
        for k in range(40):
            F = np.array([f(t + c[i] * h, y + Z[i]) for i in range(stages)])
            J = np.kron(Ainv / h, eye)
            for i in range(stages):
                J[i * n:(i + 1) * n, i * n:(i + 1) * n] -= jacobian(f, t + c[i] * h, y + Z[i])
            d = np.linalg.solve(J, (F - Ainv @ Z / h).reshape(-1)).reshape(stages, n)
            Z = Z + d
            worst = np.max(np.abs(d) / (np.abs(y) + np.abs(Z) + floor))
            if worst < 1e-15 or (worst < 1e-9 and worst > before / 2):
                return y + Z[-1]
            if not worst < 1e6:
                return None
            before = worst
        return None

    y, t, h, out, steps = np.array(y0, float), 0.0, first, [], 0
    for end in ends:
        while t < end:
            hh = h
            if t + h * 1.0000001 > end:
                hh = end - t
            whole = step(t, y, hh)
            half = None if whole is None else step(t, y, hh / 2)
            two = None if half is None else step(t + hh / 2, half, hh / 2)
            if two is None:
                h = hh / 4
                continue
            e = np.max(np.abs(two - whole) / (np.abs(two) + floor)) / (2 ** (stages + 1) - 1)
            grow = 0.85 * (tol / max(e, 1e-30)) ** (1 / (stages + 1))
            if e <= tol:
                y, t, steps = two, t + hh, steps + 1
                if hh == h or grow < 1:
                    h = hh * min(3.0, max(0.3, grow))
            else:
                h = hh * min(0.7, max(0.1, grow))
        out.append(y.copy())
    print("   Radau IIA,", stages, "stages:", steps, "steps", flush=True)
    return out


def agree(a, b):
    return [round(float(min(16, -math.log10(abs(x - y) / abs(x) if x != y else 1e-16))), 1) for x, y in zip(a, b)]


# ---- The transistor amplifier

UB, UF, ALPHA, BETA, R0, R = 6.0, 0.026, 0.99, 1e-6, 1000.0, 9000.0
CAP = np.array([1e-6, 2e-6, 3e-6, 4e-6, 5e-6])
START = np.array([0, UB / 2, UB / 2, UB, UB / 2, UB / 2, UB, 0.0])
# charges: z1 = C1 (y1 - y2), z2 = C2 y3, z3 = C3 (y4 - y5), z4 = C4 y6, z5 = C5 (y7 - y8)
CHARGE = np.zeros((5, 8))
for row, (plus, minus) in enumerate([(0, 1), (2, None), (3, 4), (5, None), (6, 7)]):
    CHARGE[row, plus] = CAP[row]
    if minus is not None:
        CHARGE[row, minus] = -CAP[row]
# current into each node from the charges' derivatives: + at the first node, - at the second
INCIDENCE = np.sign(CHARGE).T


def amplifier_currents(t, y):
    """Resistive currents leaving the eight nodes; INCIDENCE dz/dt + these = 0."""
    g = lambda v: BETA * (np.exp(v / UF) - 1)
    g1, g2 = g(y[1] - y[2]), g(y[4] - y[5])
    ue = 0.1 * np.sin(200 * np.pi * t)
    return np.array([(y[0] - ue) / R0, y[1] / R + (y[1] - UB) / R + (1 - ALPHA) * g1, y[2] / R - g1, (y[3] - UB) / R + ALPHA * g1,
                     y[4] / R + (y[4] - UB) / R + (1 - ALPHA) * g2, y[5] / R - g2, (y[6] - UB) / R + ALPHA * g2, y[7] / R])


def amplifier_fixed(steps, until, stages=5):
    c, A = radau(stages)
    Ainv = np.linalg.inv(A)
    M = INCIDENCE @ CHARGE
    y, h, old = START.copy(), until / steps, None
    for k in range(steps):
        t = k * h
        Z = np.zeros((stages, 8)) if old is None else lagrange(np.concatenate([[0], c]), 1 + c) @ old - y
        for _ in range(40):
            R_ = Ainv @ Z @ M.T / h + np.array([amplifier_currents(t + c[i] * h, y + Z[i]) for i in range(stages)])
            J = np.kron(Ainv / h, M)
            for i in range(stages):
                J[8 * i:8 * i + 8, 8 * i:8 * i + 8] += jacobian(amplifier_currents, t + c[i] * h, y + Z[i])
            d = np.linalg.solve(J, -R_.reshape(-1)).reshape(stages, 8)
            Z += d
            if np.max(np.abs(d)) < 1e-12:
                break
        old = np.vstack([y, y + Z])
        y = y + Z[-1]
    return y


class AmplifierCharges:
    """The same amplifier as five ordinary differential equations: INCIDENCE dz/dt = -currents splits into five rates and three constraints."""
    left = np.linalg.pinv(INCIDENCE)
    null = np.linalg.svd(INCIDENCE.T)[2][5:]  # combinations of nodes without charge

    def __init__(self):
        self.y = START.copy()

    def voltages(self, t, z):
        y = self.y.copy()
        for _ in range(60):
            r = np.concatenate([(CHARGE @ y - z) / CAP, 1e4 * self.null @ amplifier_currents(t, y)])
            J = np.vstack([CHARGE / CAP[:, None], 1e4 * self.null @ jacobian(amplifier_currents, t, y)])
            d = np.linalg.solve(J, -r)
            y += d * min(1, 0.05 / max(np.max(np.abs(d)), 1e-300))
            if np.max(np.abs(d)) < 1e-13:
                break
        self.y = y
        return y

    def rate(self, t, s):
        return -(self.left @ amplifier_currents(t, self.voltages(t, s * CAP))) / CAP

    def run(self, until):
        s = solve_ivp(self.rate, (0, until), CHARGE @ START / CAP, method="Radau", rtol=1e-11, atol=1e-12, max_step=2e-4)
        return self.voltages(until, s.y[:, -1] * CAP)


PUBLISHED = dict(
    hires=[0.7371312573325668e-3, 0.1442485726316185e-3, 0.5888729740967575e-4, 0.1175651343283149e-2, 0.2386356198831331e-2, 0.6238968252742796e-2,
           0.2849998395185769e-2, 0.2850001604814231e-2],
    vanderpol=[0.1706167732170483e1, -0.8928097010247975e-3],
    amplifier=[-0.5562145012262709e-2, 0.3006522471903042e1, 0.2849958788608128e1, 0.2926422536206241e1, 0.2704617865010554e1, 0.2761837778393145e1,
               0.4770927631616772e1, 0.1236995868091548e1])


def main():
    results = []

    def add(problem, t, a, b, methods):
        d = agree(a, b)
        entry = dict(problem=problem, t=t, value=[float(v) for v in a], digits=d, methods=methods)
        if problem in PUBLISHED:
            entry["digits_of_published"] = agree(a, PUBLISHED[problem])
        results.append(entry)
        print(problem, t, entry["value"], d, entry.get("digits_of_published"), flush=True)

    lin = [{0: -1.71, 1: 0.43, 2: 8.32}, {0: 1.71, 1: -8.75}, {2: -10.03, 3: 0.43, 4: 0.035}, {1: 8.32, 2: 1.71, 3: -1.12}, {4: -1.745, 5: 0.43, 6: 0.43},
           {3: 0.69, 4: 1.71, 5: -0.43, 6: 0.69}, {6: -1.81}, {6: 1.81}]
    y0 = [1.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0057]
    a = taylor(lin, {(5, 7): {5: -280.0, 6: 280.0, 7: -280.0}}, [0.0007] + [0.0] * 7, y0, 321.8122)
    b = radau_variable(hires, y0, [321.8122], 5, 1e-13, 1e-9, 1e-6)[0]
    add("hires", 321.8122, a, b, ["Taylor 40", "Radau IIA 5 stages"])

    b = radau_variable(robertson, [1.0, 0.0, 0.0], [40.0, 4e4, 4e7], 5, 1e-13, 1e-9, 1e-8)
    c = radau_variable(robertson, [1.0, 0.0, 0.0], [4e4, 4e7], 7, 1e-13, 1e-9, 1e-8)
    a = taylor([{0: -0.04}, {0: 0.04}, {}], {(1, 2): {0: 1e4, 1: -1e4}, (1, 1): {1: -3e7, 2: 3e7}}, [0.0] * 3, [1.0, 0.0, 0.0], 40.0)
    add("robertson", 40.0, a, b[0], ["Taylor 40", "Radau IIA 5 stages"])
    add("robertson", 4e4, c[0], b[1], ["Radau IIA 7 stages", "Radau IIA 5 stages"])
    add("robertson", 4e7, c[1], b[2], ["Radau IIA 7 stages", "Radau IIA 5 stages"])

    a = radau_variable(vanderpol, [2.0, 0.0], [2000.0], 7, 1e-13, 1e-9, 1e-5)[0]
    s = solve_ivp(vanderpol, (0, 2000.0), [2.0, 0.0], method="Radau", jac=lambda t, y: jacobian(vanderpol, t, y), rtol=2e-12, atol=1e-14)
    add("vanderpol", 2000.0, a, s.y[:, -1], ["Radau IIA 7 stages", "scipy Radau"])

    a = amplifier_fixed(4000, 0.2)
    print("amplifier, half the steps:", np.max(np.abs(a - amplifier_fixed(2000, 0.2))))
    add("amplifier", 0.2, a, AmplifierCharges().run(0.2), ["Radau IIA 5 stages, fixed steps", "scipy Radau on the charges"])
    save("hard.json", {"units": "as the equations in hard.py state them", "accuracy": "digits: decimal digits in which two methods agree; digits_of_published: with values from memory",
                       "amplifier_start": list(START), "results": results})


if __name__ == "__main__":
    main()
