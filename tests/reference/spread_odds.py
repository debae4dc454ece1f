#!/usr/bin/env python3
"""Limits of shares, sums of uniform variables and a product of normal ones, by numpy and scipy.

Writes spread_odds.json beside itself. Irwin-Hall sums by their exact piecewise polynomial; the product of normal variables by
quadrature; the rest by scipy.stats and scipy.special.
"""
import json, math, pathlib
from scipy import integrate, optimize, special, stats

def irwin_hall(n, x):
    """P(sum of n uniform variables on 0..1 <= x)."""
    return sum((-1) ** k * math.comb(n, k) * (x - k) ** n for k in range(int(math.floor(x)) + 1)) / math.factorial(n)

def product(limit, one, other):
    """P(X Y <= limit) for normal X (mean, deviation) and Y, both far from zero, cut at three deviations and rescaled."""
    cut = stats.truncnorm(-3, 3)
    def inner(z):
        x = one[0] + one[1] * z
        return cut.pdf(z) * cut.cdf((limit / x - other[0]) / other[1])
    return integrate.quad(inner, -3, 3, epsabs=1e-13)[0]

shares = [(k, n, c) for k, n in ((0, 20), (20, 20), (1, 7), (97, 100), (9950, 10000), (99_970, 100_000), (299_999, 300_000))
          for c in (0.90, 0.95, 0.99)]
out = {
    "proportion": [
        {"passed": k, "total": n, "confidence": c,
         "low": 0.0 if k == 0 else float(stats.beta.ppf((1 - c) / 2, k, n - k + 1)),
         "high": 1.0 if k == n else float(stats.beta.ppf((1 + c) / 2, k + 1, n - k))}
        for k, n, c in shares],
    "incomplete_beta": [
        {"a": a, "b": b, "x": x, "value": float(special.betainc(a, b, x))}
        for a, b, x in ((0.5, 0.5, 0.3), (2, 3, 0.4), (1, 1, 0.7), (5000, 20, 0.9955), (20, 5000, 0.0041), (1e5, 2, 0.99999))],
    "coverage_factor": [[p, float(stats.norm.ppf((1 + p) / 2))] for p in (0.5, 0.9, 0.95, 0.99, 0.9973, 0.9999)],
    "irwin_hall": [
        {"n": n, "share": p, "quantile": float(optimize.brentq(lambda x: irwin_hall(n, x) - p, 0, n, xtol=1e-14))}
        for n in (2, 3, 4, 6) for p in (0.005, 0.025, 0.5, 0.975)],
    "product": [
        {"share": p, "quantile": float(optimize.brentq(lambda y: product(y, (10, 0.5), (3, 0.3)) - p, 10, 60, xtol=1e-12))}
        for p in (0.01, 0.5, 0.99)],
}
pathlib.Path(__file__).with_suffix(".json").write_text(json.dumps(out, indent=1) + "\n")
