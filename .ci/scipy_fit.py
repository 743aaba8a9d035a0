#!/usr/bin/python3
"""`guardring fit --json` against SciPy on 50 random problems.

Usage: scipy_fit.py GUARDRING [PROBLEMS [SEED]]

30 problems with errors of the response (scipy.optimize.curve_fit, half of them with
noise that is not stated), 20 with errors in both variables (scipy.odr). Estimates must
agree to 2e-5 of their standard uncertainty, standard uncertainties and correlations to
2e-5. Columns carry units, so that conversion is tried too.
"""
import json
import math
import subprocess
import sys
import tempfile

import numpy as np
from scipy import odr
from scipy.optimize import curve_fit

guardring = sys.argv[1]
problems = int(sys.argv[2]) if len(sys.argv) > 2 else 50
rng = np.random.default_rng(int(sys.argv[3]) if len(sys.argv) > 3 else 17)

# name, formula, function, truth of the parameters; x in mm, y in pF
MODELS = [
    ("line", "a + b*x", lambda x, a, b: a + b * x, [1, 2]),
    ("gap", "a/(x + b) + k", lambda x, a, b, k: a / (x + b) + k, [8, 0.4, 0.3]),
    ("decay", "a*exp(-x/b) + k", lambda x, a, b, k: a * np.exp(-x / b) + k, [5, 3, 0.5]),
    ("saturation", "a*x/(b + x)", lambda x, a, b: a * x / (b + x), [4, 1.5]),
    ("parabola", "a + b*x + k*x*x", lambda x, a, b, k: a + b * x + k * x * x, [1, -2, 0.7]),
]
# powers of mm and pF in each parameter, to convert what guardring gives in SI
UNITS = {
    "line": [(0, 1), (-1, 1)],
    "gap": [(1, 1), (1, 0), (0, 1)],
    "decay": [(0, 1), (1, 0), (0, 1)],
    "saturation": [(0, 1), (1, 0)],
    "parabola": [(0, 1), (-1, 1), (-2, 1)],
}
TOLERANCE = 2e-5

worst = 0.0
bad = 0
for n in range(problems):
    name, formula, f, truth = MODELS[n % len(MODELS)]
    both = n >= problems * 3 // 5
    stated = both or n % 2 == 0
    truth = np.array(truth) * rng.uniform(0.7, 1.3, len(truth))
    start = truth * rng.uniform(0.8, 1.2, len(truth))
    rows = int(rng.integers(8, 38))
    x = rng.uniform(0.5, 8.5, rows)
    y = f(x, *truth)
    ux = rng.uniform(0.01, 0.03, rows)
    uy = rng.uniform(0.005, 0.015, rows) * (1 + abs(y)) if stated else np.full(rows, 0.02)
    y = y + uy * rng.standard_normal(rows)
    if both:
        x = x + ux * rng.standard_normal(rows)

    names = ["a", "b", "k"][: len(truth)]
    scale = np.array([1e-3**p * 1e-12**q for p, q in UNITS[name]])
    with tempfile.NamedTemporaryFile("w", suffix=".csv") as csv:
        csv.write("x/mm,y/pF,u_x/mm,u_y/pF\n")
        for row in zip(x, y, ux, uy):
            csv.write(",".join(repr(float(v)) for v in row) + "\n")
        csv.flush()
        command = [guardring, "fit", csv.name, "--formula", formula, "--response", "y", "--json",
                   "--start", ",".join(f"{p}={v!r}" for p, v in zip(names, (start * scale).tolist()))]
        if stated:
            command += ["--noise", "u_y"]
        if both:
            command += ["--predictor-noise", "x=u_x"]
        run = subprocess.run(command, capture_output=True, text=True)
    if run.returncode != 0:
        sys.exit(f"problem {n} ({name}): exit code {run.returncode}: {run.stderr}")
    fit = json.loads(run.stdout)["fit"]
    order = [names.index(p["name"]) for p in fit["parameters"]]
    theirs, u = np.empty(len(names)), np.empty(len(names))
    cov = np.empty((len(names), len(names)))
    for i, p in zip(order, fit["parameters"]):
        theirs[i], u[i] = p["value"] / scale[i], p["u"] / scale[i]
    for i, row in zip(order, fit["covariance"]):
        for j, v in zip(order, row):
            cov[i, j] = v / scale[i] / scale[j]

    if both:
        data = odr.RealData(x, y, sx=ux, sy=uy)
        job = odr.ODR(data, odr.Model(lambda b, v: f(v, *b)), beta0=start, sstol=1e-15, partol=1e-15, maxit=1000)
        out = job.run()
        mine, want = out.beta, out.cov_beta
    elif stated:
        mine, want = curve_fit(f, x, y, start, sigma=uy, absolute_sigma=True, xtol=1e-15, ftol=1e-15, gtol=1e-15, maxfev=100000)
    else:
        mine, want = curve_fit(f, x, y, start, xtol=1e-15, ftol=1e-15, gtol=1e-15, maxfev=100000)
    us = np.sqrt(np.diag(want))
    off = max(np.max(abs(theirs - mine) / us), np.max(abs(u / us - 1)),
              np.max(abs(cov / np.outer(u, u) - want / np.outer(us, us))))
    worst = max(worst, off)
    if not off < TOLERANCE or fit["status"] != "converged":
        bad += 1
        print(f"problem {n} ({name}, {'both' if both else 'response'}): {off:.1e}\n  scipy     {mine} ± {us}\n  guardring {theirs} ± {u}")
print(f"{problems} fits against SciPy: largest difference {worst:.1e} of a standard uncertainty, {TOLERANCE:.0e} allowed")
sys.exit(1 if bad or not math.isfinite(worst) else 0)
