"""Values of e^x beside which the program's own exponential function is checked, and the table that it uses.

Usage: python3 numeric_exp.py > numeric_exp.csv        x and e^x rounded to the nearest double, both as bits
       python3 numeric_exp.py table                    2^(j/64) in two parts, as bits
"""
import random
import struct
import sys

import mpmath as mp

mp.mp.dps = 60


def bits(x):
    return "%016x" % struct.unpack(">Q", struct.pack(">d", x))[0]


if "table" in sys.argv:
    for j in range(64):
        power = mp.mpf(2) ** (mp.mpf(j) / 64)
        high = float(power)
        print(bits(high), bits(float(power - mp.mpf(high))))
    sys.exit()

random.seed(20261201)
points = [0.0, -0.0, 1.0, -1.0, 1e-300, -1e-17, 709.78, 709.0, 708.0, -708.0, -709.5, -720.0, -745.0]
points += [random.uniform(-708, 709) for _ in range(1500)]
points += [random.uniform(-1, 1) for _ in range(500)]
points += [random.choice((-1, 1)) * 10 ** random.uniform(-20, 0) for _ in range(300)]
# Half-way between two steps of the table, where the remainder is largest.
points += [float((k + mp.mpf("0.5")) * mp.log(2) / 64) for k in range(-3000, 3000, 13)]
for x in points:
    print(bits(x), bits(float(mp.exp(mp.mpf(x)))), sep=",")
