"""Fits problems read as JSON from standard input with scipy and writes the estimates.

Input: a list of {"kind": "fit" or "eiv", "model": name, "x": [..], "y": [..],
"ux": [..], "uy": [..], "start": [..]}. Output: a list of {"values", "u"}; the
standard uncertainties are not scaled by residuals.
"""
import json
import sys

import numpy as np
from scipy import odr
from scipy.optimize import curve_fit

MODELS = {
    "decay": lambda x, a, b, c: a * np.exp(-x / b) + c,
    "line": lambda x, a, b: a + b * x,
    "gap": lambda x, a, b, c: a / (x + b) + c,
    "saturation": lambda x, a, b: a * x / (b + x),
    "parabola": lambda x, a, b, c: a + b * x + c * x * x,
}


def fit(p):
    model = MODELS[p["model"]]
    v, c = curve_fit(model, np.array(p["x"]), np.array(p["y"]), p["start"], sigma=np.array(p["uy"]),
                     absolute_sigma=True, method="lm", ftol=1e-15, xtol=1e-15, gtol=1e-15, maxfev=20000)
    return v, np.sqrt(np.diag(c))


def eiv(p):
    model = MODELS[p["model"]]
    data = odr.RealData(np.array(p["x"]), np.array(p["y"]), sx=np.array(p["ux"]), sy=np.array(p["uy"]))
    beta = p["start"]
    for _ in range(3):  # from the end of the one before: its default tolerances stop early
        run = odr.ODR(data, odr.Model(lambda b, x: model(x, *b)), beta0=beta,
                      sstol=1e-15, partol=1e-15, maxit=1000)
        run.set_job(fit_type=0, deriv=1)
        r = run.run()
        beta = r.beta
    return r.beta, np.sqrt(np.diag(r.cov_beta))


out = []
for p in json.load(sys.stdin):
    v, u = (fit if p["kind"] == "fit" else eiv)(p)
    out.append({"values": list(map(float, v)), "u": list(map(float, u))})
json.dump(out, sys.stdout)
