#!/usr/bin/python3
"""`guardring propagate --law-only --json` against python3-uncertainties.

Usage: uncertainties_check.py GUARDRING [BUDGETS [SEED]]

200 random budgets of three to seven inputs, half of them correlated, each with two
random formulas: values, first-order standard uncertainties and the correlation of the
outputs must agree to 1e-9 (uncertainties takes exact derivatives as well).
"""
import json
import math
import subprocess
import sys
import tempfile

import numpy as np
from uncertainties import correlated_values, correlation_matrix, umath

guardring = sys.argv[1]
budgets = int(sys.argv[2]) if len(sys.argv) > 2 else 200
rng = np.random.default_rng(int(sys.argv[3]) if len(sys.argv) > 3 else 23)
TOLERANCE = 1e-9


def expression(names, depth):
    """A random formula over positive inputs, as text that both programs read."""
    if depth == 0 or rng.random() < 0.15:
        return str(rng.choice(names)) if rng.random() < 0.85 else f"{rng.uniform(0.5, 3):.3f}"
    a = expression(names, depth - 1)
    kind = rng.integers(0, 12)
    if kind < 7:
        return f"({a} {'+-*/+*/'[kind]} {expression(names, depth - 1)})"
    return [f"sqrt({a}*{a} + 1)", f"exp(-{a}*{a}/9)", f"log(2 + {a}*{a})", f"atan({a})", f"pow({a}*{a} + 0.5, 0.7)"][kind - 7]


FUNCTIONS = {"sqrt": umath.sqrt, "exp": umath.exp, "log": umath.log, "atan": umath.atan, "pow": umath.pow}

bad = 0
worst = 0.0
done = 0
while done < budgets:
    n = int(rng.integers(3, 8))
    names = [f"x{i}" for i in range(n)]
    value = np.round(rng.uniform(0.5, 4, n), 6)
    u = np.round(value * rng.uniform(0.001, 0.05, n), 8)
    r = np.eye(n)
    if done % 2:
        g = rng.standard_normal((n, n + 2))
        c = g @ g.T
        d = np.sqrt(np.diag(c))
        r = np.round(c / np.outer(d, d), 4)
        np.fill_diagonal(r, 1)
        if np.linalg.eigvalsh(r)[0] < 1e-3:
            continue
    formulas = [expression(names, 3), expression(names, 4)]
    x = correlated_values(value, r * np.outer(u, u))
    env = dict(zip(names, x), **FUNCTIONS)
    try:
        want = [eval(f, {"__builtins__": {}}, env) for f in formulas]
        if not all(hasattr(w, "s") and w.s > 1e-6 * abs(w.n) and math.isfinite(w.n) and abs(w.n) < 1e6 for w in want):
            continue  # a constant, or a difference that cancels
    except ZeroDivisionError:
        continue
    done += 1

    with tempfile.NamedTemporaryFile("w", suffix=".toml") as f:
        f.write('format = 1\ntitle = "random"\n')
        for name, v, s in zip(names, value, u):
            f.write(f"[inputs.{name}]\nvalue = {float(v)!r}\nu = {float(s)!r}\n")
        for k, e in enumerate(formulas):
            f.write(f'[outputs.y{k}]\nformula = "{e}"\nunit = "1"\n')
        for i in range(n):
            for j in range(i):
                if r[i, j]:
                    f.write(f'[[correlations]]\nbetween = ["{names[j]}", "{names[i]}"]\nr = {float(r[i, j])!r}\n')
        f.flush()
        run = subprocess.run([guardring, "propagate", f.name, "--law-only", "--json"], capture_output=True, text=True)
    if run.returncode != 0:
        sys.exit(f"budget {done}: exit code {run.returncode}: {run.stderr}\n{formulas}")
    record = json.loads(run.stdout)
    off = 0.0
    for w, o in zip(want, record["outputs"]):
        off = max(off, abs(o["law"]["value"] - w.n) / w.s, abs(o["law"]["u"] / w.s - 1))
    off = max(off, abs(record["correlation"][0][1] - correlation_matrix(want)[0, 1]))
    worst = max(worst, off)
    if not off < TOLERANCE:
        bad += 1
        print(f"budget {done}: {off:.1e}\n  {formulas}\n  uncertainties {want}\n  guardring {[(o['law']['value'], o['law']['u']) for o in record['outputs']]}")
print(f"{budgets} budgets against uncertainties: largest difference {worst:.1e}, {TOLERANCE:.0e} allowed")
sys.exit(1 if bad else 0)
