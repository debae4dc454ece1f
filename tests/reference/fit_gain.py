"""Coefficients of the gain curve by scipy's non-negative least squares (Lawson and Hanson, Solving Least Squares Problems,
1974, chapter 23).

    1 / h_FE = a + b I_C + c sqrt(1 + I_C / I_K) / sqrt(I_C),   I_K = a / b

Each equation is divided by its value, so that relative deviations are what is small. I_K stands in the third column: it is
taken from the last solution until it stays. The rows are invented.

Usage: python3 fit_gain.py > fit_gain.json
"""
import json

import numpy as np
from scipy.optimize import nnls

# Collector currents (A) and typical h_FE.
ROWS = [
    [(1e-3, 100), (1e-2, 130), (0.1, 120), (0.5, 60)],
    [(1e-5, 190), (2e-3, 290), (0.1, 130)],
    [(1e-4, 60), (1e-3, 90), (1e-2, 110), (0.15, 105), (0.5, 55), (1.0, 30)],
    [(1e-3, 200), (1e-2, 180), (0.1, 120)],
    [(1e-5, 40), (1e-3, 90), (1e-2, 100)],
    [(1e-3, 80), (0.2, 80)],
]


def fit(rows):
    i, h = np.array(rows).T
    knee, last = np.inf, None
    for _ in range(500):
        columns = np.stack([np.ones_like(i), i, np.sqrt((1 + i / knee) / i)], axis=1)
        scale = np.abs(columns * h[:, None]).max(axis=0)
        found, _ = nnls(columns * h[:, None] / scale, np.ones_like(i))
        # A share of the value below rounding is none.
        found = np.where(found < 1e-12, 0, found) / scale
        if last is not None and np.allclose(found, last, rtol=1e-14, atol=0):
            break
        last, knee = found, found[0] / found[1] if found[1] > 0 else np.inf
    return found.tolist()


print(json.dumps([{"rows": rows, "coefficients": fit(rows)} for rows in ROWS], indent=1))
