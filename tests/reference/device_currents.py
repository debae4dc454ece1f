"""Currents of a transistor and of diodes over dense grids of junction voltages and temperatures, to 40 digits.

Equations written down apart from the program: transport form of Ebers and Moll (Proc. IRE 42, 1954, p. 1761) with the
base charge of Gummel and Poon (Bell Syst. Tech. J. 49, 1970, p. 827); Shockley's junction (Bell Syst. Tech. J. 28, 1949,
p. 435); saturation current over temperature as in Sze, Physics of Semiconductor Devices, 1969 (T^m e^(-E_g / kT)).

Usage: python3 device_currents.py > device_currents.json
"""
import json

import mpmath as mp

mp.mp.dps = 40
Q, K, T_0 = mp.mpf("1.602176634e-19"), mp.mpf("1.380649e-23"), mp.mpf("298.15")

TRANSISTORS = {
    "plain": dict(
        saturation_current=2e-14, emission_coefficient=1.0, gain_forward=180.0, gain_reverse=5.0,
        early_voltage_forward=None, early_voltage_reverse=None, knee_current_forward=None, emitter_leakage=0.0,
        emitter_leakage_emission=2.0, cutoff_current=0.0, cutoff_e_fold=14.4, energy_gap=1.12,
        saturation_exponent=3.0, gain_exponent=1.5),
    "full": dict(
        saturation_current=3e-14, emission_coefficient=1.02, gain_forward=210.0, gain_reverse=3.0,
        early_voltage_forward=85.0, early_voltage_reverse=12.0, knee_current_forward=0.4, emitter_leakage=2e-12,
        emitter_leakage_emission=1.8, cutoff_current=1e-9, cutoff_e_fold=15.0, energy_gap=1.15,
        saturation_exponent=2.8, gain_exponent=1.3),
}
DIODES = {
    "diode": dict(
        saturation_current=3e-9, emission_coefficient=1.8, leakage=5e-9, leakage_e_fold=14.4, breakdown_voltage=None,
        breakdown_current=1e-3, breakdown_slope=1.0, breakdown_coefficient=0.0, energy_gap=1.12,
        saturation_exponent=3.0),
    "Zener": dict(
        saturation_current=1e-14, emission_coefficient=1.05, leakage=1e-8, leakage_e_fold=14.4, breakdown_voltage=5.1,
        breakdown_current=5e-3, breakdown_slope=0.15, breakdown_coefficient=-6e-4, energy_gap=1.12,
        saturation_exponent=3.0),
    "soft Zener": dict(
        saturation_current=1e-14, emission_coefficient=1.05, leakage=0.0, leakage_e_fold=14.4, breakdown_voltage=2.4,
        breakdown_current=5e-3, breakdown_slope=0.5, breakdown_coefficient=-1.6e-3, energy_gap=1.12,
        saturation_exponent=3.0),
}


def exact(p):
    return {k: None if v is None else mp.mpf(v) for k, v in p.items()}


def grown(p, t):
    return (t / T_0) ** p["saturation_exponent"] * mp.exp(p["energy_gap"] * Q / K * (1 / T_0 - 1 / t))


def slot(current, v, v_t):
    return -current * (1 - mp.exp(v / v_t)) ** 2 if v < 0 else mp.mpf(0)


def transistor(p, v_be, v_bc, t):
    v_t = K * t / Q
    gain = (t / T_0) ** p["gain_exponent"]
    i_s = p["saturation_current"] * grown(p, t)
    n_vt = p["emission_coefficient"] * v_t
    forward, reverse = i_s * mp.expm1(v_be / n_vt), i_s * mp.expm1(v_bc / n_vt)
    inverse = lambda v: mp.mpf(0) if v is None else 1 / v
    width = 1 - v_bc * inverse(p["early_voltage_forward"]) - v_be * inverse(p["early_voltage_reverse"])
    q_b = (1 + mp.sqrt(1 + 4 * forward * inverse(p["knee_current_forward"]))) / (2 * width)
    m = p["emitter_leakage_emission"]
    leak = p["emitter_leakage"] * grown(p, t) ** (1 / m) / gain * mp.expm1(v_be / (m * v_t))
    cutoff = slot(p["cutoff_current"] * mp.exp((t - T_0) / p["cutoff_e_fold"]), v_bc, v_t)
    back = reverse / (p["gain_reverse"] * gain)
    return (forward - reverse) / q_b - back - cutoff, forward / (p["gain_forward"] * gain) + leak + back + cutoff


def diode(p, v, t):
    v_t, n = K * t / Q, p["emission_coefficient"]
    i = p["saturation_current"] * grown(p, t) ** (1 / n) * mp.expm1(v / (n * v_t))
    i += slot(p["leakage"] * mp.exp((t - T_0) / p["leakage_e_fold"]), v, v_t)
    if p["breakdown_voltage"] is not None:
        v_z = p["breakdown_voltage"] + p["breakdown_coefficient"] * (t - T_0)
        at_zero = mp.exp(-v_z / p["breakdown_slope"])
        i -= p["breakdown_current"] * (mp.exp((-v - v_z) / p["breakdown_slope"]) - at_zero) / (1 - at_zero)
    return i


def number(x):
    return float(mp.nstr(x, 17))


temperatures = [218.15, 253.15, 298.15, 358.15, 423.15]
across = [-60.0, -5.0, -0.3, -0.01, -1e-4, 0.0, 1e-4, 0.02, 0.2, 0.4, 0.55, 0.65, 0.75, 0.9]
out = {"transistors": {}, "diodes": {}}
for name, p in TRANSISTORS.items():
    e = exact(p)
    points = [
        [t, v_be, v_bc, *map(number, transistor(e, mp.mpf(v_be), mp.mpf(v_bc), mp.mpf(t)))]
        for t in temperatures for v_be in across for v_bc in across]
    out["transistors"][name] = {"parameters": p, "points": points}
for name, p in DIODES.items():
    e, points = exact(p), []
    ends = [v for v in across if v > -6 or p["breakdown_voltage"] is None]
    ends += [] if p["breakdown_voltage"] is None else [-p["breakdown_voltage"] + d for d in (1.5, 0.4, 0.1, 0, -0.1, -0.4)]
    points = [[t, v, number(diode(e, mp.mpf(v), mp.mpf(t)))] for t in temperatures for v in ends]
    out["diodes"][name] = {"parameters": p, "points": points}
print(json.dumps(out, separators=(",", ":")))
