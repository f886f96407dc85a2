"""A small network solver for the reference solutions: f(x, t) + d/dt q(x, t) = 0, x = node voltages and inductor currents.

Method, independent of the program under test:
  bias       Newton's method in double precision with complex-step derivatives, then refined on residuals of 50 digits (mpmath)
  response   (G + j w C) X = B with G and C by central differences of 80-digit evaluations
  transient  Radau IIA collocation with 5 stages (order 9, L-stable; Hairer & Wanner, Solving Ordinary Differential Equations II,
             section IV.5) on charges and fluxes, full Newton; steps land on every corner of the drives and on every output time and
             grow geometrically after a corner; each run is repeated with half the steps to state its error
Nodes driven by an ideal source have known voltages and are not unknowns; a source's current is the sum of the currents that leave its node.
"""
import json
import os

import mpmath
import numpy as np

from equations import Double, Exact, bjt_at, bjt_branches, bjt_core, bjt_outer_charges, diode_at, diode_branches

HERE = os.path.dirname(os.path.abspath(__file__))


class Network:
    def __init__(self, T=300.15):
        self.T, self.nodes, self.linear, self.coils, self.devices, self.known = T, ["gnd"], [], [], [], {"gnd": 0.0}

    def node(self, name):
        if name not in self.nodes:
            self.nodes.append(name)
        return self.nodes.index(name)

    def hold(self, **volts):
        for name, v in volts.items():
            self.node(name)
            self.known[name] = v

    def resistor(self, a, b, R):
        self.linear.append(("f", self.node(a), self.node(b), R, True))

    def capacitor(self, a, b, C):
        self.linear.append(("q", self.node(a), self.node(b), C, False))

    def inductor(self, a, b, L):
        self.coils.append((self.node(a), self.node(b), L))

    def bjt(self, name, params, b, c, e, s="gnd", sign=1, area=1):
        h = bjt_at(params, self.T, Double, area)
        inner = [outer if h[r] == 0 else outer_name for outer, outer_name, r in ((b, name + ".b'", "rB"), (c, name + ".c'", "rC"), (e, name + ".e'", "rE"))]
        idx = [self.node(n) for n in [b, c, e, s] + inner]
        self.devices.append(dict(name=name, kind="bjt", idx=idx, sign=sign, double=h, make=lambda: bjt_at(params, self.T, Exact, area)))

    def diode(self, name, params, a, k, area=1):
        h = diode_at(params, self.T, Double, area)
        idx = [self.node(n) for n in (a, k, a if h["rS"] == 0 else name + ".a'")]
        self.devices.append(dict(name=name, kind="diode", idx=idx, sign=1, double=h, make=lambda: diode_at(params, self.T, Exact, area)))

    def build(self):
        N, L = len(self.nodes), len(self.coils)
        self.N, self.size = N, N + L
        self.G0, self.C0 = np.zeros((N + L, N + L)), np.zeros((N + L, N + L))
        for kind, a, b, value, inverse in self.linear:
            m, y = (self.G0 if kind == "f" else self.C0), (1 / value if inverse else value)
            m[a, a] += y
            m[b, b] += y
            m[a, b] -= y
            m[b, a] -= y
        for n, (a, b, value) in enumerate(self.coils):  # row: v_a - v_b - d/dt (L i) = 0
            k = N + n
            self.G0[a, k] += 1
            self.G0[b, k] -= 1
            self.G0[k, a] += 1
            self.G0[k, b] -= 1
            self.C0[k, k] -= value
        held = [self.nodes.index(n) for n in self.known]
        self.held = np.array(held)
        self.free = np.array([k for k in range(N + L) if k not in held])
        return self

    # Double precision: values and exact derivatives for a batch of states. q holds the charges of the devices alone: those of the linear
    # parts are C0 X, which the integrator takes from increments of X, so that short steps do not lose them in rounding.
    def evaluate(self, X):
        X = np.atleast_2d(X)
        B, n = X.shape
        f, q = X @ self.G0.T, np.zeros((B, n))
        G, C = np.repeat(self.G0[None], B, 0), np.repeat(self.C0[None], B, 0)
        step = 1e-30
        for d in self.devices:
            idx = d["idx"]
            m = len(idx)
            V = X[:, idx].astype(complex)[None].repeat(m, 0)  # direction, batch, terminal
            for j in range(m):
                V[j, :, j] += 1j * step
            v = [V[:, :, j] for j in range(m)]
            I, Q = bjt_branches(v, d["double"], d["sign"], Double) if d["kind"] == "bjt" else diode_branches(v, d["double"], Double)
            for r in range(m):
                f[:, idx[r]] += I[r][0].real
                q[:, idx[r]] += Q[r][0].real
                for j in range(m):
                    G[:, idx[r], idx[j]] += I[r][j].imag / step
                    C[:, idx[r], idx[j]] += Q[r][j].imag / step
        return f, q, G, C

    # mpmath: values only.
    def evaluate_exact(self, x):
        M = mpmath
        f, q = [M.mpf(0)] * self.size, [M.mpf(0)] * self.size
        for kind, a, b, value, inverse in self.linear:
            t, y = (f if kind == "f" else q), (1 / M.mpf(value) if inverse else M.mpf(value))
            flow = y * (x[a] - x[b])
            t[a] += flow
            t[b] -= flow
        for n, (a, b, value) in enumerate(self.coils):
            k = self.N + n
            f[a] += x[k]
            f[b] -= x[k]
            f[k] += x[a] - x[b]
            q[k] -= M.mpf(value) * x[k]
        for d in self.devices:
            if "exact" not in d:
                d["exact"] = d["make"]()
            v = [x[k] for k in d["idx"]]
            I, Q = bjt_branches(v, d["exact"], d["sign"], Exact) if d["kind"] == "bjt" else diode_branches(v, d["exact"], Exact)
            for r, k in enumerate(d["idx"]):
                f[k] += I[r]
                q[k] += Q[r]
        return f, q

    def full(self, free, held=None):
        x = np.zeros(self.size)
        x[self.held] = list(self.known.values()) if held is None else held
        x[self.free] = free
        return x

    def bias(self, guess=None):
        """Quiescent state in double precision: sources raised in steps, Newton with a limit on the voltage update."""
        target = np.array(list(self.known.values()))
        guess = guess or {}
        x = self.full([guess.get(self.nodes[k], 0.0) if k < self.N else 0.0 for k in self.free], target)
        before = np.inf
        for _ in range(2000):
            f, _q, G, _C = self.evaluate(x)
            d = np.linalg.solve(G[0][np.ix_(self.free, self.free)], -f[0][self.free])
            worst = np.max(np.abs(d))
            x[self.free] += d * (0.1 / max(worst, 0.1))
            if worst < 1e-13 or (worst < 1e-9 and worst >= before):
                break
            before = worst
        else:
            raise RuntimeError("no bias")
        return x

    def bias_exact(self, guess=None, digits=50):
        """Quiescent state refined on exact residuals; returns it with the size of the last update."""
        x = self.bias(guess)
        G = self.evaluate(x)[2][0][np.ix_(self.free, self.free)]
        with mpmath.workdps(digits):
            X = [mpmath.mpf(float(v)) for v in x]
            for _ in range(12):
                f, _q = self.evaluate_exact(X)
                scale = max(abs(f[k]) for k in self.free)
                if scale == 0:
                    d = np.zeros(len(self.free))
                    break
                d = np.linalg.solve(G, [float(-f[k] / scale) for k in self.free])
                for k, u in zip(self.free, d):
                    X[k] += mpmath.mpf(float(u)) * scale
                last = max(abs(float(u)) for u in d) * scale
                if last < mpmath.mpf(10) ** -(digits - 15):
                    break
            else:
                raise RuntimeError("refinement stalls")
        return X

    def derivatives_exact(self, X, digits=80):
        with mpmath.workdps(digits):
            h = mpmath.mpf(10) ** -25
            G, C = mpmath.zeros(self.size), mpmath.zeros(self.size)
            for j in range(self.size):
                up, down = list(X), list(X)
                up[j] += h
                down[j] -= h
                fu, qu = self.evaluate_exact(up)
                fd, qd = self.evaluate_exact(down)
                for r in range(self.size):
                    G[r, j] = (fu[r] - fd[r]) / (2 * h)
                    C[r, j] = (qu[r] - qd[r]) / (2 * h)
        return G, C

    def response_exact(self, GC, frequency, drives, injections=None, digits=40):
        """Solutions for known-node drives {name: volts} and node injections {name: amperes}: node voltages and, for held nodes,
        the current each source delivers."""
        G, C = GC
        with mpmath.workdps(digits):
            w = 2 * mpmath.pi * mpmath.mpf(frequency)
            A = G + mpmath.mpc(0, 1) * w * C
            x = [mpmath.mpc(0)] * self.size
            for n, v in drives.items():
                x[self.nodes.index(n)] = mpmath.mpc(v)
            free = list(self.free)
            rhs = mpmath.matrix(len(free), 1)
            for r, k in enumerate(free):
                rhs[r] = -sum(A[k, int(j)] * x[int(j)] for j in self.held)
            for n, v in (injections or {}).items():
                rhs[free.index(self.nodes.index(n))] += v
            S = mpmath.matrix(len(free), len(free))
            for r, k in enumerate(free):
                for c, j in enumerate(free):
                    S[r, c] = A[int(k), int(j)]
            y = mpmath.lu_solve(S, rhs)
            for r, k in enumerate(free):
                x[k] = y[r]
            delivered = {self.nodes[int(k)]: sum(A[int(k), j] * x[j] for j in range(self.size)) for k in self.held}
            return {n: x[i] for i, n in enumerate(self.nodes)}, delivered

    def transient(self, drive, stops, corners, h, first, growth=1.6, stages=5, cold=False, guess=None, progress=False):
        """Voltages at the times `stops` from the bias at drive(0), or uncharged if cold. drive(t) gives {node: volts}; `h` is the longest
        step, `first` the first after a corner."""
        c, A = radau(stages)
        Ainv = np.linalg.inv(A)
        names = list(self.known)

        def held(t):
            u = drive(t)
            return np.array([u.get(n, self.known[n]) for n in names])

        keep = dict(self.known)
        self.known.update(drive(0.0))
        x = np.zeros(self.size) if cold else self.bias(guess)
        self.known = keep
        if cold:
            x[self.held] = held(0.0)
        q = np.zeros(self.size) if cold else self.evaluate(x)[1][0]
        pending = self.C0 @ x if cold else np.zeros(self.size)  # a cold start has no charge even where a source holds a voltage
        free, n = self.free, len(self.free)
        marks = sorted(set(stops) | set(corners))
        results = {}
        if 0.0 in stops:
            results[0.0] = x.copy()
        t, step, old, steps, iterations = 0.0, first, None, 0, 0
        for mark in [m for m in marks if m > 0]:
            while t < mark:
                left = mark - t
                count = max(1, int(np.ceil(left / min(step, h) * (1 - 1e-12))))
                dt = left / count if step >= h or count < 4 else step
                times = t + c * dt
                Z = np.array([self.full(0 * x[free], held(s) - x[self.held]) for s in times])  # increments from the left end
                if old is not None and abs(dt / old[0] - 1) < 1.0:
                    Z[:, free] = lagrange(old[1], 1 + c * dt / old[0]) @ old[2] - x[free]
                before = np.inf
                for attempt in range(60):
                    f, Q, G, C = self.evaluate(x + Z)
                    # residual: sum_j Ainv_ij (charge_j - charge at the left end)/dt + f_i
                    R = ((Ainv @ (Q - q + pending + Z @ self.C0.T)) / dt + f)[:, free]
                    J = np.einsum("ij,jab->iajb", Ainv / dt, C[:, free][:, :, free])
                    for i in range(stages):
                        J[i, :, i, :] += G[i][np.ix_(free, free)]
                    J = J.reshape(stages * n, stages * n)
                    scale = np.max(np.abs(J), axis=1)
                    d = np.linalg.solve(J / scale[:, None], -R.reshape(-1) / scale)
                    worst = np.max(np.abs(d))
                    Z[:, free] += (d * (0.3 / max(worst, 0.3))).reshape(stages, n)
                    iterations += 1
                    if worst < 3e-11 or (worst < 1e-9 and worst > before / 2):
                        break
                    before = worst
                else:
                    raise RuntimeError(f"Newton fails at {t}")
                X = x + Z
                Q = self.evaluate(X)[1]
                # The left end may hold algebraic unknowns from before a jump: it serves the prediction only after the first step.
                old = (dt, c, X[:, free]) if old is None else (dt, np.concatenate([[0], c]), np.vstack([x[free], X[:, free]]))
                x, t, steps = X[-1].copy(), t + dt, steps + 1
                if abs(t - mark) < 1e-12 * mark:
                    t = mark
                q, pending = Q[-1], np.zeros(self.size)
                step = min(step * growth, h)
            if mark in corners:
                step, old = first, None
            if mark in stops:
                results[mark] = x.copy()
        if progress:
            print(f"   {steps} steps, {iterations} iterations", flush=True)
        return np.array([results[s] for s in stops])


def lagrange(nodes, at):
    """Matrix that carries values at nodes to values at the points `at`."""
    out = np.ones((len(at), len(nodes)))
    for j in range(len(nodes)):
        for k in range(len(nodes)):
            if k != j:
                out[:, j] *= (at - nodes[k]) / (nodes[j] - nodes[k])
    return out


def radau(s):
    """Abscissae and matrix of the s-stage Radau IIA method, by collocation in 60 digits."""
    with mpmath.workdps(60):
        # d^(s-1)/dx^(s-1) [x^(s-1) (x-1)^s], coefficients from the highest power
        p = [mpmath.binomial(s, k) * (-1) ** k for k in range(s + 1)] + [mpmath.mpf(0)] * (s - 1)
        for _ in range(s - 1):
            deg = len(p) - 1
            p = [a * (deg - i) for i, a in enumerate(p[:-1])]
        c = sorted(mpmath.re(r) for r in mpmath.polyroots(p, maxsteps=500, extraprec=200))
        V = mpmath.matrix(s, s)
        W = mpmath.matrix(s, s)
        for i in range(s):
            for k in range(s):
                V[i, k] = c[i] ** k
                W[i, k] = c[i] ** (k + 1) / (k + 1)
        A = W * V ** -1
        return np.array([float(v) for v in c]), np.array([[float(A[i, j]) for j in range(s)] for i in range(s)])


def pair_of(z):
    return [float(mpmath.re(z)), float(mpmath.im(z))]


def operating(net, name, X):
    """Operating quantities of a transistor. Derivatives in mpmath; terminal currents into the pins."""
    d = next(d for d in net.devices if d["name"] == name)
    h, sign = d["exact"], d["sign"]
    with mpmath.workdps(50):
        b, c, e, s, bi, ci, ei = [X[k] for k in d["idx"]]
        v1, v2 = sign * (bi - ei), sign * (bi - ci)
        x = bjt_core(v1, v2, h, Exact)
        step = mpmath.mpf(10) ** -20

        def slope(key, d1, d2):
            return (bjt_core(v1 + d1 * step, v2 + d2 * step, h, Exact)[key] - bjt_core(v1 - d1 * step, v2 - d2 * step, h, Exact)[key]) / (2 * step)

        # v_ce constant: v1 and v2 move together; v1 constant: v_ce rises as v2 falls
        gm, gpi = slope("I_C", 1, 1), slope("I_B", 1, 1)
        cpi, cmu = slope("Q_E", 1, 0), slope("Q_C", 0, 1)
        I_C, I_B = sign * x["I_C"], sign * x["I_B"]
        out = dict(ic=I_C, ib=I_B, ie=-I_C - I_B, vbe=b - e, vce=c - e, vbc=b - c, beta=I_C / I_B, gm=gm, ro=-1 / slope("I_C", 0, 1), rpi=1 / gpi,
                   re=1 / (gm + gpi), cpi=cpi, cmu=cmu, ft=gm / (2 * mpmath.pi * (cpi + cmu)), v1=v1, v2=v2, qb=x["q_b"], rbb=x["r_bb"],
                   cpi_at_constant_vce=slope("Q_E", 1, 1), cx=outer_slope(sign * (b - ci), h))
        return {k: float(v) for k, v in out.items()}


def outer_slope(v, h):
    step = mpmath.mpf(10) ** -20
    return (bjt_outer_charges(v + step, mpmath.mpf(0), h, Exact)[0] - bjt_outer_charges(v - step, mpmath.mpf(0), h, Exact)[0]) / (2 * step)


def differential_stage(net, X, port, output, rails, frequencies):
    """All port metrics of a circuit with one differential port and a single output node."""
    GC = net.derivatives_exact(X)
    a, b = port
    rows = []
    for f in frequencies:
        dm, im = net.response_exact(GC, f, {a: 0.5, b: -0.5})
        cm, ic = net.response_exact(GC, f, {a: 1, b: 1})
        zo, _ = net.response_exact(GC, f, {}, {output: 1})
        row = dict(frequency=f, dm_gain=pair_of(dm[output]), cm_gain=pair_of(cm[output]), cmrr=float(abs(dm[output] / cm[output])),
                   cmrr_dB=float(20 * mpmath.log10(abs(dm[output] / cm[output]))), dm_impedance=pair_of(2 / (im[a] - im[b])),
                   cm_impedance=pair_of(1 / (ic[a] + ic[b])), out_impedance=pair_of(zo[output]), gain_from_rail={}, psrr={})
        for r in rails:
            g, _ = net.response_exact(GC, f, {r: 1})
            row["gain_from_rail"][r] = pair_of(g[output])
            row["psrr"][r] = float(abs(dm[output] / g[output]))
        rows.append(row)
    return rows


def sources_at(net, X):
    """Current each ideal source delivers at the bias point (A)."""
    with mpmath.workdps(50):
        f, _ = net.evaluate_exact(X)
        return {net.nodes[int(k)]: float(f[int(k)]) for k in net.held}


def quiescent(net, X):
    return {n: float(X[i]) for i, n in enumerate(net.nodes) if n != "gnd"}


def compact(v):
    if isinstance(v, dict):
        return "{" + ", ".join(f"{json.dumps(k)}: {compact(x)}" for k, x in v.items()) + "}"
    if isinstance(v, (list, tuple)):
        return "[" + ", ".join(compact(x) for x in v) + "]"
    return json.dumps(v)


def save(name, data):
    """JSON with one line for each entry of the second level."""
    lines = []
    for k, v in data.items():
        if isinstance(v, dict) and any(isinstance(x, (dict, list)) for x in v.values()):
            body = ",\n".join(f"    {json.dumps(a)}: {compact(b)}" for a, b in v.items())
            lines.append(f"  {json.dumps(k)}: {{\n{body}\n  }}")
        elif isinstance(v, list) and v and isinstance(v[0], (dict, list)):
            body = ",\n".join("    " + compact(a) for a in v)
            lines.append(f"  {json.dumps(k)}: [\n{body}\n  ]")
        else:
            lines.append(f"  {json.dumps(k)}: {compact(v)}")
    with open(os.path.join(HERE, name), "w") as out:
        out.write("{\n" + ",\n".join(lines) + "\n}\n")
    print("wrote", name, flush=True)
