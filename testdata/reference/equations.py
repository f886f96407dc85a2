"""Device equations of the reference solutions, written from the design's page on devices.

Sources: H. K. Gummel and H. C. Poon, An Integral Charge Control Model of Bipolar Transistors, Bell Syst. Tech. J. 49 (1970)
827-852; I. Getreu, Modeling the Bipolar Transistor (1976); G. Massobrio and P. Antognetti, Semiconductor Device Modeling (1993);
C. D. Thurmond, J. Electrochem. Soc. 122 (1975) 1133 (band gap). Constants: exact SI values of 2019.

Every function takes an arithmetic (`Double`: numpy arrays, also complex for complex-step derivatives; `Exact`: mpmath), so the
same lines serve both. Voltages in V, currents in A, charges in C, temperatures in K; parameters by their names in the
language, in SI units, `tref` in K. The guards for wild voltages (exponent above 80, pole of q1) are left out: no reference point goes there.
"""
from types import SimpleNamespace

import mpmath
import numpy as np

INF = float("inf")


Double = SimpleNamespace(exp=np.exp, log=np.log, sqrt=np.sqrt, tan=np.tan, pi=np.pi, k=1.380649e-23, q=1.602176634e-19, num=float,
                         choose=np.where, real=np.real)

with mpmath.workdps(100):
    Exact = SimpleNamespace(exp=mpmath.exp, log=mpmath.log, sqrt=mpmath.sqrt, tan=mpmath.tan, pi=mpmath.pi, num=mpmath.mpf,
                            k=mpmath.mpf("1.380649e-23"), q=mpmath.mpf("1.602176634e-19"),
                            choose=lambda condition, a, b: a if condition else b, real=mpmath.re)

BJT_DEFAULTS = dict(
    Is=1e-16, betaF=100, betaR=1, emF=1, emR=1, earlyF=INF, earlyR=INF, kneeF=INF, kneeR=INF, leakE=0, emE=1.5, leakC=0, emC=2,
    rB=0, rBmin=None, rBknee=None, rE=0, rC=0, capE=0, phiE=0.75, gradE=0.33, capC=0, phiC=0.75, gradC=0.33, splitC=1,
    capS=0, phiS=0.75, gradS=0, fcap=0.5, tauF=0, tauR=0, tauFbias=0, tauFvolt=INF, tauFcurr=0, bandgap=1.11, expIs=3, expBeta=0,
    tref=300.15)
BJT_CURRENTS = "Is kneeF kneeR leakE leakC rBknee tauFcurr".split()
BJT_CAPACITANCES = "capE capC capS".split()
BJT_RESISTANCES = "rB rBmin rE rC".split()

DIODE_DEFAULTS = dict(Is=1e-14, em=1, rS=0, breakdown=INF, kneeBreak=1e-3, cap=0, phi=1, grad=0.5, fcap=0.5, tau=0, bandgap=1.11, expIs=3,
                      tref=300.15)


def complete(given, defaults):
    """Adds the defaults; an unknown name is an error."""
    assert set(given) <= set(defaults), set(given) - set(defaults)
    p = dict(defaults, **given)
    if "rBmin" in p and p["rBmin"] is None:
        p["rBmin"] = p["rB"]
    return p


def thermal(T, M):
    return M.k * M.num(T) / M.q


def gap(T, M):
    """Band gap Eg(T) in eV."""
    return M.num("1.16") - M.num("7.02e-4") * T * T / (T + 1108)


def junction_at(cj, phi, m, T, T0, M):
    """Depletion capacitance and built-in potential at T."""
    r, vt = T / T0, thermal(T, M)
    hot = phi * r - 3 * vt * M.log(r) - gap(T0, M) * r + gap(T, M)
    return cj * (1 + m * (M.num("4e-4") * (T - T0) - (hot - phi) / phi)), hot


def bjt_at(given, T, M, area=1):
    """Parameters of a transistor at temperature T (K) for its area."""
    p = {n: (None if v is None else M.num(v)) for n, v in complete(given, BJT_DEFAULTS).items()}
    T, T0 = M.num(T), p["tref"]
    r, vt = T / T0, thermal(T, M)
    rise = r ** p["expIs"] * M.exp(p["bandgap"] * (r - 1) / vt)  # Is(T)/Is
    h = dict(p)
    h["Is"] = p["Is"] * rise
    h["betaF"], h["betaR"] = p["betaF"] * r ** p["expBeta"], p["betaR"] * r ** p["expBeta"]
    h["leakE"] = p["leakE"] * r ** -p["expBeta"] * rise ** (1 / p["emE"])
    h["leakC"] = p["leakC"] * r ** -p["expBeta"] * rise ** (1 / p["emC"])
    for x in "ECS":
        h["cap" + x], h["phi" + x] = junction_at(p["cap" + x], p["phi" + x], p["grad" + x], T, T0, M)
    a = M.num(area)
    for n in BJT_CURRENTS + BJT_CAPACITANCES:
        if h[n] is not None:
            h[n] = h[n] * a
    for n in BJT_RESISTANCES:
        h[n] = h[n] / a
    h["vt"] = vt
    return h


def depletion(v, C, phi, m, fcap, M):
    """D(v; C, phi, m)."""
    edge = fcap * phi
    low = M.real(v) < edge
    under = M.choose(low, v, edge)
    below = C * phi / (1 - m) * (1 - (1 - under / phi) ** (1 - m))
    over = v - edge
    tangent = C * (1 - fcap) ** -m * over + C * m / (2 * phi) * (1 - fcap) ** (-m - 1) * over * over
    return M.choose(low, below, below + tangent)


def bjt_core(v1, v2, h, M):
    """I_C, I_B, I_F, I_R, q_b, r_bb and the charges Q_E, Q_C of an npn at its internal junction voltages."""
    vt = h["vt"]
    I_F, I_R = h["Is"] * (M.exp(v1 / (h["emF"] * vt)) - 1), h["Is"] * (M.exp(v2 / (h["emR"] * vt)) - 1)
    I_LE = h["leakE"] * (M.exp(v1 / (h["emE"] * vt)) - 1)
    I_LC = h["leakC"] * (M.exp(v2 / (h["emC"] * vt)) - 1)
    q1 = 1 / (1 - v2 / h["earlyF"] - v1 / h["earlyR"])
    q2 = I_F / h["kneeF"] + I_R / h["kneeR"]
    q_b = q1 / 2 * (1 + M.sqrt(1 + 4 * q2))
    I_T = (I_F - I_R) / q_b
    I_C = I_T - I_R / h["betaR"] - I_LC
    I_B = I_F / h["betaF"] + I_LE + I_R / h["betaR"] + I_LC
    if h["rBknee"] is None:
        r_bb = h["rBmin"] + (h["rB"] - h["rBmin"]) / q_b
    else:
        flows = M.real(I_B) > 0
        x = M.choose(flows, I_B, h["rBknee"]) / h["rBknee"]
        z = (-1 + M.sqrt(1 + 144 * x / M.pi ** 2)) / (24 / M.pi ** 2 * M.sqrt(x))
        falls = h["rBmin"] + 3 * (h["rB"] - h["rBmin"]) * (M.tan(z) - z) / (z * M.tan(z) ** 2)
        r_bb = M.choose(flows, falls, h["rB"])
    share = 1 if h["tauFcurr"] == 0 else I_F / (I_F + h["tauFcurr"])
    lift = M.num("1.44") * h["tauFvolt"]
    tau = h["tauF"] * (1 + h["tauFbias"] * share ** 2 * M.exp(v2 / lift))
    Q_E = tau * I_F / q_b + depletion(v1, h["capE"], h["phiE"], h["gradE"], h["fcap"], M)
    Q_C = h["tauR"] * I_R + depletion(v2, h["splitC"] * h["capC"], h["phiC"], h["gradC"], h["fcap"], M)
    return dict(I_C=I_C, I_B=I_B, I_F=I_F, I_R=I_R, q_b=q_b, r_bb=r_bb, Q_E=Q_E, Q_C=Q_C)


def bjt_outer_charges(v_bci, v_sci, h, M):
    """Q_X across (b, c') and Q_S across (s, c')."""
    return (depletion(v_bci, (1 - h["splitC"]) * h["capC"], h["phiC"], h["gradC"], h["fcap"], M),
            depletion(v_sci, h["capS"], h["phiS"], h["gradS"], h["fcap"], M))


def bjt_branches(v, h, sign, M):
    """Currents into and charges at (b, c, e, s, b', c', e') for the seven node voltages; sign +1 npn, -1 pnp."""
    b, c, e, s, bi, ci, ei = [sign * u for u in v]
    x = bjt_core(bi - ei, bi - ci, h, M)
    Q_X, Q_S = bjt_outer_charges(b - ci, s - ci, h, M)
    i_b = (b - bi) / x["r_bb"] if h["rB"] > 0 else 0 * b
    i_c = (c - ci) / h["rC"] if h["rC"] > 0 else 0 * c
    i_e = (e - ei) / h["rE"] if h["rE"] > 0 else 0 * e
    current = [i_b, i_c, i_e, 0 * s, x["I_B"] - i_b, x["I_C"] - i_c, -x["I_B"] - x["I_C"] - i_e]
    charge = [Q_X, 0 * c, 0 * e, Q_S, x["Q_E"] + x["Q_C"], -x["Q_C"] - Q_X - Q_S, -x["Q_E"]]
    return [sign * u for u in current], [sign * u for u in charge]


def diode_at(given, T, M, area=1):
    """Parameters of a diode at temperature T (K) for its area."""
    h = {n: M.num(v) for n, v in complete(given, DIODE_DEFAULTS).items()}
    T, T0, a = M.num(T), h["tref"], M.num(area)
    r, vt = T / T0, thermal(T, M)
    h["Is"] = a * h["Is"] * r ** (h["expIs"] / h["em"]) * M.exp(h["bandgap"] * (r - 1) / (h["em"] * vt))
    h["cap"], h["phi"] = junction_at(h["cap"], h["phi"], h["grad"], T, T0, M)
    h["cap"], h["kneeBreak"], h["rS"], h["vt"] = a * h["cap"], a * h["kneeBreak"], h["rS"] / a, vt
    return h


def diode_core(v, h, M):
    """Current and charge of the junction."""
    forward = h["Is"] * (M.exp(v / (h["em"] * h["vt"])) - 1)
    charge = h["tau"] * forward + depletion(v, h["cap"], h["phi"], h["grad"], h["fcap"], M)
    if h["breakdown"] < INF:
        return forward - h["kneeBreak"] * M.exp(-(v + h["breakdown"]) / h["vt"]), charge
    return forward, charge


def diode_branches(v, h, M):
    """Currents into and charges at (a, k, a'), the series resistance lying between a and a'."""
    a, k, ai = v
    current, charge = diode_core(ai - k, h, M)
    through = (a - ai) / h["rS"] if h["rS"] > 0 else 0 * a
    return [through, -current, current - through], [0 * a, -charge, charge]
