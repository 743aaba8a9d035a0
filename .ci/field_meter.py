"""Fits the field meter's demonstration with SciPy and compares with a record.

usage: field_meter.py DATASET RECORD.json

Generalised least squares, written out here and sharing nothing with the Go code:
the reference field between the plates, the covariance of the readings (noise,
resolution, one error a mounting of spacing and of indication, interpolated zeros)
and its re-evaluation at the fit. The responses of all ranges, their covariance
(readings only) and the correction factors must agree to 1e-6.
"""
import csv
import json
import math
import sys
import tomllib

import numpy as np
from scipy.linalg import cho_factor, cho_solve

folder, record = sys.argv[1], json.load(open(sys.argv[2]))
bench = tomllib.load(open(f"{folder}/bench.toml", "rb"))
rows = list(csv.DictReader(open(f"{folder}/readings.csv")))
num = lambda text: float(text.split()[0])

width = num(bench["corrections"]["finite_plates"]["width"]["value"]) * 1e-3
radius = num(bench["corrections"]["head_image"]["radius"]["value"]) * 1e-3
wedge2 = (num(bench["corrections"]["wedge"]["half_difference"]["half_width"]) * 1e-3) ** 2 / 3
zeta3 = 1.2020569031595943
noise, relative = 1.5, 0.12e-2          # V/m, of the reading
noise_v, relative_v = 0.05, 0.003e-2    # V, of the reading
step, step_v = 1.0, 0.01                # resolution
per_mount, gap_mount = 0.15e-2, 0.15e-3

use = [r for r in rows if r["kind"] == "reading"]
zeros = [r for r in rows if r["kind"] == "zero"]
col = lambda name, scale, which: np.array([float(r[name]) for r in which]) * scale
v, d, raw = col("U/kV", 1e3, use), col("gap/mm", 1e-3, use), col("E/(kV/m)", 1e3, use)
t, tz, z = col("t/s", 1, use), col("t/s", 1, zeros), col("E/(kV/m)", 1e3, zeros)
names = []
for r in use:
    n = f"{r['phase']}, {r['range']}"
    if n not in names:
        names.append(n)
which = np.array([names.index(f"{r['phase']}, {r['range']}") for r in use])
mount = [r["mount"] for r in use]
same = np.array([[a == b for b in mount] for a in mount], float)

W = np.zeros((len(use), len(zeros)))
for i, ti in enumerate(t):
    k = np.searchsorted(tz, ti)
    w = (ti - tz[k - 1]) / (tz[k] - tz[k - 1])
    W[i, k - 1], W[i, k] = 1 - w, w
y = raw - W @ z


def field(v, d):
    """What a head of response one reads."""
    e = v / d
    e = e * (1 + wedge2 / (4 * d ** 2))                             # disc-shaped head
    e = e * (1 - 4 * np.exp(-(1 + math.pi * width / d)))            # balanced plates, mid-gap
    return e * (1 + 4 * zeta3 * (radius / d) ** 3)                  # images of the head


u2 = noise ** 2 + (relative * raw) ** 2 + step ** 2 / 12
u2_v = noise_v ** 2 + (relative_v * v) ** 2 + step_v ** 2 / 12
u2_z = noise ** 2 + step ** 2 / 12
x = np.zeros((len(use), len(names)))
x[np.arange(len(use)), which] = field(v, d)
by_v = (field(v + 1, d) - field(v - 1, d)) / 2                      # linear in v
h = 1e-5
by_d = (8 * (field(v, d + h) - field(v, d - h)) - (field(v, d + 2 * h) - field(v, d - 2 * h))) / (12 * h)

k = np.ones(len(names))
for _ in range(50):
    f, kr = x @ k, k[which]
    v_all = np.diag(u2 + (kr * by_v) ** 2 * u2_v) + W @ W.T * u2_z
    v_all += same * np.outer(f, f) * per_mount ** 2
    v_all += same * np.outer(kr * by_d, kr * by_d) * gap_mount ** 2
    c = cho_factor(v_all)
    cov = np.linalg.inv(x.T @ cho_solve(c, x))
    new = cov @ (x.T @ cho_solve(c, y))
    moved = np.max(np.abs(new / k - 1))
    k = new
    if moved < 1e-14:
        break

bad = 0


def compare(name, mine, theirs, limit=1e-6):
    global bad
    off = abs(mine - theirs) / abs(theirs) if mine != theirs else 0.0
    print(f"{name:48s} scipy {mine:.10g}  guardring {theirs:.10g}  relative difference {off:.1e}")
    bad += not off <= limit


parameters = [p["name"] for p in record["fit"]["parameters"]]
at = [parameters.index(f"response ({n})") for n in names]
for i, n in enumerate(names):
    compare(f"response ({n})", k[i], record["fit"]["parameters"][at[i]]["value"])
    factor = next(m for m in record["measurands"] if m["name"] == f"correction_factor ({n})")
    compare(f"correction_factor ({n})", 1 / k[i], factor["value"])
    for j in range(i + 1):
        compare(f"  covariance with {names[j]}", cov[i, j], record["fit"]["covariance"][at[i]][at[j]])
r = y - x @ k
compare("chi-squared", float(r @ cho_solve(c, r)), record["fit"]["chi_squared"])
sys.exit(1 if bad else 0)
