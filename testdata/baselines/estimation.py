"""Timings that the benchmarks of pkg/lsq are compared with: python3 estimation.py CASE N

CASE is fit (weighted fit of the attracted disc with scipy.optimize.leastsq,
residuals and Jacobian in preallocated arrays), eiv (the same with errors in both
predictors, scipy.odr with analytic derivatives) or lines (York lines of eleven
points, vectorised in blocks). Prints the least time of a run in seconds. Set
OPENBLAS_NUM_THREADS=1.
"""
import sys
import time

import numpy as np

K = 0.5 * 1e-12 * 1e-2 / 1e-6
TRUTH, START = (8.8541878128, 1.5, 0.05), np.array([10.0, 0.5, 0.01])


def force(p, v, d):
    return K * p[0] * ((v - p[1]) / (d + p[2])) ** 2


def readings(n):
    rng = np.random.default_rng(7)
    v, d = rng.uniform(100, 1000, n), rng.uniform(1, 5, n)
    f = force(TRUTH, v, d)
    return rng, v, d, f, 1e-6 + 1e-3 * f


def fit(n):
    from scipy.optimize import leastsq
    rng, v, d, f, u = readings(n)
    y, w = f + u * rng.standard_normal(n), 1 / u
    jac, r = np.empty((3, n)), np.empty(n)

    def residual(p):
        np.subtract(v, p[1], out=r)
        np.divide(r, d + p[2], out=r)
        np.multiply(r, r, out=r)
        np.multiply(r, K * p[0], out=r)
        np.subtract(r, y, out=r)
        return r * w

    def derivatives(p):
        a, b = v - p[1], d + p[2]
        g = w * (a / b) ** 2
        g *= K
        jac[0] = g
        g *= -2 * p[0]
        np.divide(g, a, out=jac[1])
        np.divide(g, b, out=jac[2])
        return jac

    return lambda: leastsq(residual, START, Dfun=derivatives, col_deriv=True, full_output=True)


def eiv(n):
    from scipy import odr
    rng, v, d, f, u = readings(n)
    uv, ud = 0.05 + 2e-4 * v, np.full(n, 2e-3)
    x = np.array([v + uv * rng.standard_normal(n), d + ud * rng.standard_normal(n)])
    data = odr.RealData(x, f + u * rng.standard_normal(n), sx=np.array([uv, ud]), sy=u)

    def parts(p, x):
        a, b = x[0] - p[1], x[1] + p[2]
        g = K * (a / b) ** 2
        return a, b, g

    def by_parameter(p, x):
        a, b, g = parts(p, x)
        return np.array([g, -2 * p[0] * g / a, -2 * p[0] * g / b])

    def by_predictor(p, x):
        a, b, g = parts(p, x)
        return np.array([2 * p[0] * g / a, -2 * p[0] * g / b])

    model = odr.Model(lambda p, x: force(p, x[0], x[1]), fjacb=by_parameter, fjacd=by_predictor)

    def run():
        o = odr.ODR(data, model, beta0=START, maxit=100)
        o.set_job(fit_type=0, deriv=3)
        return o.run()
    return run


def lines(m):
    rng = np.random.default_rng(3)
    x = np.tile(np.arange(11.0), (m, 1))
    ux, uy = rng.uniform(0.02, 0.05, x.shape), rng.uniform(0.05, 0.1, x.shape)
    y = 1 + 2 * x + uy * rng.standard_normal(x.shape)
    x = x + ux * rng.standard_normal(x.shape)

    def block(x, y, ux, uy):
        p, q = ux * ux, uy * uy
        mean = lambda w, v: (w * v).sum(1, keepdims=True) / w.sum(1, keepdims=True)
        one = np.ones_like(x)
        u, v = x - mean(one, x), y - mean(one, y)
        b = (u * v).sum(1, keepdims=True) / (u * u).sum(1, keepdims=True)
        for _ in range(50):
            w = 1 / (q + b * b * p)
            u, v = x - mean(w, x), y - mean(w, y)
            beta = w * (u * q + b * v * p)
            t = w * beta
            new = (t * v).sum(1, keepdims=True) / (t * u).sum(1, keepdims=True)
            done = (np.abs(new - b) <= 1e-13 * np.abs(new)).all()
            b = new
            if done:
                break
        return mean(w, y) - b * mean(w, x), b

    return lambda: [block(*(z[i:i + 500] for z in (x, y, ux, uy))) for i in range(0, m, 500)]


case, n = sys.argv[1], int(sys.argv[2])
job = {"fit": fit, "eiv": eiv, "lines": lines}[case](n)
inner = max(1, min(200, 20000 // n))
best = float("inf")
for _ in range(15):
    t = time.perf_counter()
    for _ in range(inner):
        job()
    best = min(best, (time.perf_counter() - t) / inner)
print(f"{best:.4g}")
