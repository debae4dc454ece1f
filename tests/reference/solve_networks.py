"""Operating points of transistor networks, computed apart from the program, to 30 digits.

Equations: currents at every node, the nodes inside terminal resistances included, as sums of element laws over node
voltages. Devices: transport form of Ebers and Moll (Proc. IRE 42, 1954) with the base charge of Gummel and Poon (Bell
Syst. Tech. J. 49, 1970). Implicit steps of C dV/dt = -I let the network settle, scipy's `root` and then
mpmath's `findroot` sharpen what it settled to. In thermal equilibrium the junction temperatures are unknowns too.

Usage: python3 solve_networks.py > solve_networks.json
"""
import json
import sys

import mpmath as mp
import numpy as np
from scipy.optimize import root

mp.mp.dps = 40
Q, K, T_REF = mp.mpf("1.602176634e-19"), mp.mpf("1.380649e-23"), mp.mpf("298.15")
NONE = 1e300

IDEAL = dict(
    saturation_current=1e-14, emission_coefficient=1.0, gain_forward=200.0, gain_reverse=4.0,
    early_voltage_forward=NONE, early_voltage_reverse=NONE, knee_current_forward=NONE,
    emitter_leakage=0.0, emitter_leakage_emission=2.0,
    base_resistance=0.0, collector_resistance=0.0, emitter_resistance=0.0,
    cutoff_current=0.0, cutoff_e_fold=14.4, energy_gap=1.12, saturation_exponent=3.0, gain_exponent=1.5)
RESISTIVE = dict(IDEAL, base_resistance=22.0, collector_resistance=1.3, emitter_resistance=0.2)
FULL = dict(
    RESISTIVE, early_voltage_forward=74.0, early_voltage_reverse=18.0, knee_current_forward=0.3,
    emitter_leakage=3e-13, emitter_leakage_emission=1.9, emission_coefficient=1.01, cutoff_current=2e-9)
DIODE = dict(
    saturation_current=2.5e-9, emission_coefficient=1.75, series_resistance=0.0, leakage=0.0, leakage_e_fold=14.4,
    breakdown_voltage=NONE, breakdown_current=5e-3, breakdown_slope=0.05, breakdown_coefficient=0.0,
    energy_gap=1.11, saturation_exponent=3.0)
ZENER = dict(DIODE, breakdown_voltage=6.2, breakdown_coefficient=2e-3, series_resistance=0.8, leakage=1e-8)


class Real:
    """Arithmetic in double precision, exponentials continued as straight lines so that nothing overflows."""
    num = float
    sqrt, log = staticmethod(np.sqrt), staticmethod(np.log)

    @staticmethod
    def exp(x):
        return np.exp(x) if x < 60 else np.exp(60) * (1 + x - 60)


class Exact:
    num = mp.mpf
    exp, sqrt, log = staticmethod(mp.exp), staticmethod(mp.sqrt), staticmethod(mp.log)


def thermal_voltage(t, m):
    return m.num(K) * t / m.num(Q)


def growth(p, t, m):
    """Logarithm of the saturation current over that at 25 °C."""
    ratio = t / m.num(T_REF)
    return p["saturation_exponent"] * m.log(ratio) + p["energy_gap"] / thermal_voltage(t, m) * (ratio - 1)


def transistor(p, v_be, v_bc, t, m):
    """Currents into collector and base of an NPN transistor inside its terminal resistances."""
    p = {k: m.num(v) for k, v in p.items()}
    v_t, grown = thermal_voltage(t, m), growth(p, t, m)
    gain = m.exp(p["gain_exponent"] * m.log(t / m.num(T_REF)))
    i_s = p["saturation_current"] * m.exp(grown)
    forward = i_s * (m.exp(v_be / (p["emission_coefficient"] * v_t)) - 1)
    reverse = i_s * (m.exp(v_bc / (p["emission_coefficient"] * v_t)) - 1)
    leak = p["emitter_leakage"] * m.exp(grown / p["emitter_leakage_emission"]) / gain
    leak = leak * (m.exp(v_be / (p["emitter_leakage_emission"] * v_t)) - 1)
    q_1 = 1 / (1 - v_bc / p["early_voltage_forward"] - v_be / p["early_voltage_reverse"])
    q_b = q_1 / 2 * (1 + m.sqrt(1 + 4 * forward / p["knee_current_forward"]))
    cutoff = m.num(0)
    if v_bc < 0:
        cutoff = p["cutoff_current"] * m.exp((t - m.num(T_REF)) / p["cutoff_e_fold"]) * (1 - m.exp(v_bc / v_t)) ** 2
    back = reverse / (p["gain_reverse"] * gain)
    i_c = (forward - reverse) / q_b - back + cutoff
    return i_c, forward / (p["gain_forward"] * gain) + leak + back - cutoff


def diode(p, v, t, m):
    p = {k: m.num(v) for k, v in p.items()}
    v_t, n = thermal_voltage(t, m), p["emission_coefficient"]
    i = p["saturation_current"] * m.exp(growth(p, t, m) / n) * (m.exp(v / (n * v_t)) - 1)
    if v < 0:
        i -= p["leakage"] * m.exp((t - m.num(T_REF)) / p["leakage_e_fold"]) * (1 - m.exp(v / v_t)) ** 2
    if p["breakdown_voltage"] < 1e6:
        v_z = p["breakdown_voltage"] + p["breakdown_coefficient"] * (t - m.num(T_REF))
        i -= p["breakdown_current"] * m.exp((-v - v_z) / p["breakdown_slope"])
    return i


def settle(f, x, nodes):
    """Implicit steps of C dx/dt = -f(x), each of one linear solution and at most 50 mV or 5 K, the time step growing."""
    storage = np.array([1e-6] * nodes + [0.1] * (len(x) - nodes))
    most = np.array([0.05] * nodes + [5.0] * (len(x) - nodes))
    step, now = 1e-6, f(x)
    for _ in range(4000):
        slope = np.array([(f(x + h) - now) / 1e-7 for h in 1e-7 * np.eye(len(x))]).T
        move = np.linalg.solve(np.diag(storage / step) + slope, -now)
        over = np.max(np.abs(move) / most)
        x = x + move / max(1.0, over)
        now = f(x)
        step = min(step * (2.0 if over < 1 else 0.7), 1e6)
        if over < 1e-8 and step > 1.0:
            break
    return x


class Network:
    """Nodes held by a supply against ground, free nodes (those inside devices last), temperatures of warming devices."""

    def __init__(self, elements, ambient):
        self.elements, self.ambient = elements, ambient
        self.held = {e["nodes"][0]: e["volts"] for e in elements if e["kind"] == "supply"}
        self.held["ground"] = 0.0
        names = []
        for e in elements:
            for node in e["nodes"]:
                if node not in names and node not in self.held:
                    names.append(node)
        self.outer = list(names)
        for k, e in enumerate(elements):
            if e["kind"] in ("npn", "pnp"):
                for end, key in (("c", "collector_resistance"), ("b", "base_resistance"), ("e", "emitter_resistance")):
                    if e["parameters"][key] > 0:
                        names.append((k, end))
            if e["kind"] == "diode" and e["parameters"]["series_resistance"] > 0:
                names.append((k, "a"))
        self.names = names
        self.hot = [k for k, e in enumerate(elements) if e.get("r_th") is not None]

    def currents(self, x, m):
        """Currents out of free nodes, then excess of temperatures; and what each device carries."""
        at = {name: x[j] for j, name in enumerate(self.names)}
        v = lambda node: at[node] if node in at else m.num(self.held[node])
        temperature = {k: x[len(self.names) + j] for j, k in enumerate(self.hot)}
        out = {name: m.num(0) for name in self.names}
        carried, excess = [], []

        def flow(a, b, i):
            if a in out:
                out[a] += i
            if b in out:
                out[b] -= i

        def inner(k, end, node, ohms):
            if ohms == 0:
                return node
            flow(node, (k, end), (v(node) - v((k, end))) / m.num(ohms))
            return (k, end)

        for k, e in enumerate(self.elements):
            t, p = temperature.get(k, m.num(self.ambient)), e.get("parameters")
            if e["kind"] == "resistor":
                a, b = e["nodes"]
                flow(a, b, (v(a) - v(b)) / m.num(e["ohms"]))
            elif e["kind"] == "current":
                flow(*e["nodes"], m.num(e["amperes"]))
            elif e["kind"] == "diode":
                a, c = e["nodes"]
                j = inner(k, "a", a, p["series_resistance"])
                i = diode(p, v(j) - v(c), t, m)
                flow(j, c, i)
                carried.append([k, i, m.num(0)])
                heat = i * (v(a) - v(c))
            elif e["kind"] in ("npn", "pnp"):
                s = 1 if e["kind"] == "npn" else -1
                c, b, em = e["nodes"]
                jc, jb = inner(k, "c", c, p["collector_resistance"]), inner(k, "b", b, p["base_resistance"])
                je = inner(k, "e", em, p["emitter_resistance"])
                i_c, i_b = transistor(p, s * (v(jb) - v(je)), s * (v(jb) - v(jc)), t, m)
                flow(jc, je, s * i_c)
                flow(jb, je, s * i_b)
                carried.append([k, s * i_c, s * i_b])
                heat = s * (i_c * (v(c) - v(em)) + i_b * (v(b) - v(em)))
            if k in temperature:
                excess.append(t - m.num(self.ambient) - m.num(e["r_th"]) * heat)
        return [out[name] for name in self.names] + excess, carried

    def solve(self):
        f = lambda x: np.array([float(i) for i in self.currents(list(x), Real)[0]])
        cold = [0.0] * len(self.names) + [self.ambient] * len(self.hot)
        x = root(f, settle(f, np.array(cold), len(self.names)), tol=1e-15).x
        exact = lambda *x: self.currents(list(x), Exact)[0]
        x = mp.findroot(exact, [mp.mpf(float(v)) for v in x], tol=mp.mpf("1e-60"), maxsteps=60, verify=False)
        left, carried = self.currents(list(x), Exact)
        biggest = max(abs(i) for _, i, _ in carried)
        assert max(abs(i) for i in left) < mp.mpf("1e-24") * biggest + mp.mpf("1e-32"), left
        at = dict(zip(self.names, x))
        return {
            "voltages": {name: float(at[name]) for name in self.outer},
            "currents": [[k, float(i), float(i_b)] for k, i, i_b in carried],
            "temperatures": [[k, float(t)] for k, t in zip(self.hot, x[len(self.names):])],
        }


def r(a, b, ohms):
    return {"kind": "resistor", "nodes": [a, b], "ohms": ohms}


def supply(node, volts):
    return {"kind": "supply", "nodes": [node, "ground"], "volts": volts}


def q(kind, c, b, e, p, r_th=None):
    return {"kind": kind, "nodes": [c, b, e], "parameters": p, "r_th": r_th}


def d(a, c, p, r_th=None):
    return {"kind": "diode", "nodes": [a, c], "parameters": p, "r_th": r_th}


G = "ground"


def networks(p):
    """Ten networks with transistors of parameters `p`, NPN and PNP alike."""
    yield "fixed bias", [supply("vs", 12.0), r("vs", "b", 820e3), r("vs", "c", 2.2e3), q("npn", "c", "b", G, p)]
    yield "fixed bias, PNP", [supply("vs", -9.0), r("vs", "b", 390e3), r("vs", "c", 1e3), q("pnp", "c", "b", G, p)]
    yield "divider bias", [
        supply("vs", 15.0), r("vs", "b", 68e3), r("b", G, 12e3), r("vs", "c", 3.3e3), r("e", G, 680.0),
        q("npn", "c", "b", "e", p)]
    yield "saturated switch", [
        supply("vs", 12.6), supply("drive", 4.6), r("vs", "c", 220.0), r("drive", "b", 1.2e3), r("b", G, 10e3),
        q("npn", "c", "b", G, p)]
    for name, drive in (("on", 3.3), ("off", 0.2)):
        yield f"high side switch with level shift, {name}", [
            supply("vs", 14.8), supply("drive", drive), r("drive", "b1", 10e3), r("b1", G, 47e3),
            q("npn", "c1", "b1", G, p), r("c1", "b2", 2.2e3), r("vs", "b2", 4.7e3),
            q("pnp", "out", "b2", "vs", p), r("out", G, 150.0)]
    yield "Darlington", [
        supply("vs", 24.0), supply("drive", 5.0), r("drive", "b", 100e3), q("npn", "c", "b", "m", p),
        q("npn", "c", "m", G, p), r("m", G, 22e3), r("vs", "c", 330.0)]
    yield "differential pair", [
        supply("vs", 12.0), supply("vn", -12.0), r("vs", "c1", 10e3), r("vs", "c2", 10e3), r("b1", G, 1e3),
        r("b2", G, 2.7e3), q("npn", "c1", "b1", "e", p), q("npn", "c2", "b2", "e", p), r("e", "vn", 12e3)]
    yield "regulator", [
        supply("vs", 13.5), r("vs", "z", 680.0), d(G, "z", ZENER), q("npn", "vs", "z", "out", p), r("out", G, 120.0)]
    yield "two stages", [
        supply("vs", 12.0), r("vs", "b", 120e3), r("b", G, 22e3), r("vs", "c1", 5.6e3), r("e1", G, 1.2e3),
        q("npn", "c1", "b", "e1", p), q("pnp", "c2", "c1", "e2", p), r("vs", "e2", 820.0), r("c2", G, 1.5e3)]


def warm(p):
    """Networks in thermal equilibrium."""
    yield "emitter follower regulator, warm", [
        supply("vs", 13.5), r("vs", "z", 680.0), d(G, "z", ZENER, 300.0), q("npn", "vs", "z", "out", p, 180.0),
        r("out", G, 120.0)]
    yield "fixed bias, warm", [
        supply("vs", 12.0), r("vs", "b", 220e3), r("vs", "c", 330.0), q("npn", "c", "b", G, p, 300.0)]
    yield "saturated switch, warm", [
        supply("vs", 12.6), supply("drive", 4.6), r("vs", "c", 47.0), r("drive", "b", 390.0),
        q("npn", "c", "b", G, p, 200.0)]
    yield "push-pull, warm", [
        supply("vs", 12.0), supply("vn", -12.0), supply("in", 4.0), q("npn", "vs", "in", "x", p, 150.0),
        q("pnp", "vn", "in", "y", p, 150.0), r("x", "out", 1.0), r("y", "out", 1.0), r("out", G, 100.0)]


cases = []
for name, p in (("ideal", IDEAL), ("resistive", RESISTIVE), ("full", FULL)):
    for ambient in (253.15, 298.15, 358.15):
        for source in ((networks, warm) if name != "ideal" and ambient != 253.15 else (networks,)):
            for title, elements in source(p):
                case = {"name": f"{title}, {name}, {ambient} K", "ambient": ambient, "elements": elements}
                case.update(Network(elements, ambient).solve())
                cases.append(case)
                print(case["name"], case["voltages"], case["temperatures"], file=sys.stderr)
lines = ",\n".join(json.dumps(case, separators=(",", ":")) for case in cases)
print(f'{{"cases":[\n{lines}\n]}}')
