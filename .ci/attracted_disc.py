"""Refits the demonstration bench with SciPy and compares with a record.

usage: attracted_disc.py DATASET RECORD.json

Nothing is shared with the Go code: the formulas, the covariance of the readings
(noise, resolution, gap settings, interpolated zeros) and its re-evaluation at
the fit are written out here. Permittivity and its statistical standard
uncertainty must agree to 1e-6.
"""
import csv
import json
import math
import sys
import tomllib

import numpy as np
from scipy.linalg import solve_triangular
from scipy.optimize import least_squares

folder, record = sys.argv[1], json.load(open(sys.argv[2]))
bench = tomllib.load(open(f"{folder}/bench.toml", "rb"))
rows = list(csv.DictReader(open(f"{folder}/readings.csv")))
excluded = {e["row"] for e in bench["exclude"]}

num = lambda text: float(text.split()[0])
R = num(bench["quantities"]["disc_radius"]["value"]) * 1e-3
Rg = R + num(bench["quantities"]["guard_gap"]["value"]) * 1e-3
prior, u_prior = 12e-6, 8e-6
g = num(bench["environment"]["gravity"]["value"])
rho = num(bench["corrections"]["balance"]["air_density"]["value"])
wedge2 = 12e-6 ** 2 / 12        # mean square of a half-difference within ±6 µm
alpha = (Rg - R) / (2 * math.pi)


def mass(theta, v, d0):
    eps, vc, off = theta
    d = d0 + off
    area = math.pi / 2 * (R * R + Rg * Rg - (Rg * Rg - R * R) * alpha * (2 * d + alpha) / (d + alpha) ** 2)
    force = 0.5 * eps * area * ((v - vc) / d) ** 2 * (1 + 0.75 * wedge2 / d ** 2)
    return force / (g * (1 - rho / 8000))


use = [i for i, r in enumerate(rows) if r["kind"] == "reading" and i + 1 not in excluded]
zeros = [i for i, r in enumerate(rows) if r["kind"] == "zero"]
col = lambda name, scale, which: np.array([float(rows[i][name]) for i in which]) * scale
v, d, m = col("V/kV", 1e3, use), col("gap/mm", 1e-3, use), col("m/g", 1e-3, use)
t, tz, mz = col("t/s", 1, use), col("t/s", 1, zeros), col("m/g", 1e-3, zeros)
setting = [rows[i]["gap_no"] for i in use]

# Zeros interpolated in time: y = m − W z.
W = np.zeros((len(use), len(zeros)))
for i, ti in enumerate(t):
    k = np.searchsorted(tz, ti)
    w = (ti - tz[k - 1]) / (tz[k] - tz[k - 1])
    W[i, k - 1], W[i, k] = 1 - w, w
y = m - W @ mz

resolution_m, resolution_v = 0.1e-6, 0.1
u_m2 = (0.25e-6) ** 2 + (5e-5 * m) ** 2 + resolution_m ** 2 / 12
u_z2 = (0.25e-6) ** 2 + resolution_m ** 2 / 12
u_v2 = 0.3 ** 2 + (2e-5 * v) ** 2 + resolution_v ** 2 / 12
same = np.array([[a == b for b in setting] for a in setting])


def covariance(theta):
    h = 1e-6
    dv = (mass(theta, v * (1 + h), d) - mass(theta, v * (1 - h), d)) / (2 * h * v)
    dd = (mass(theta, v, d * (1 + h)) - mass(theta, v, d * (1 - h))) / (2 * h * d)
    return np.diag(u_m2 + dv ** 2 * u_v2) + same * np.outer(dd, dd) * (2e-6) ** 2 + W @ W.T * u_z2


scale = np.array([8.86e-12, 1.0, 1e-5])
theta = np.array([8.9e-12, 0.0, 12e-6])
for _ in range(20):
    L = np.linalg.cholesky(covariance(theta))

    def residual(p):
        r = solve_triangular(L, y - mass(p * scale, v, d), lower=True)
        return np.append(r, (p[2] * scale[2] - prior) / u_prior)

    fit = least_squares(residual, theta / scale, method="lm", xtol=1e-15, ftol=1e-15, gtol=1e-15)
    moved = np.max(np.abs(fit.x * scale - theta) / np.abs(fit.x * scale))
    theta = fit.x * scale
    if moved < 1e-12:
        break


def jacobian(p):
    cols = []
    for k in range(3):
        e = np.zeros(3)
        e[k] = 1e-4 * max(abs(p[k]), 1e-2)
        cols.append((8 * (residual(p + e) - residual(p - e)) - (residual(p + 2 * e) - residual(p - 2 * e))) / (12 * e[k]))
    return np.array(cols).T


J = jacobian(fit.x)
u = np.sqrt(np.diag(np.linalg.inv(J.T @ J))) * scale
bad = 0
for k, par in enumerate(record["fit"]["parameters"]):
    for what, mine, theirs in (("value", theta[k], par["value"]), ("u", u[k], par["u"])):
        # The contact potential is determined to 20 % only: its digits are compared in units of u.
        limit = 1e-6 if par["name"] == "permittivity" or what == "u" else 1e-4 * u[k] / abs(theta[k])
        off = abs(mine - theirs) / abs(theirs)
        print(f"{par['name']:20s} {what:6s} scipy {mine:.10g}  guardring {theirs:.10g}  relative difference {off:.1e}")
        bad += off > max(limit, 1e-6)
chi2 = float(fit.fun @ fit.fun)
off = abs(chi2 - record["fit"]["chi_squared"]) / chi2
print(f"chi-squared                 scipy {chi2:.10g}  guardring {record['fit']['chi_squared']:.10g}  relative difference {off:.1e}")
bad += off > 1e-6
sys.exit(1 if bad else 0)
