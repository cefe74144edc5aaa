# Writes golden_limits_mp.csv: python3 golden_limits.py > golden_limits_mp.csv, in this
# folder, with Python 3.11, SciPy 1.10 and mpmath 1.2.1. Limits beside an offset for each
# source under every error model: a start by Nelder-Mead of SciPy on the definition of
# the likelihood, then Newton's method on difference quotients in 60 digits. lower and
# upper are the ends of the 95 % interval of n, as in golden_limits.R.
import csv
import math
import numpy as np
from mpmath import mp, mpf
from scipy.optimize import brentq, minimize
from scipy.stats import norm
from scipy.stats import t as student

mp.dps = 60
rows = list(csv.DictReader(open("limits_sources.csv")))
names = sorted({r["source"] for r in rows})
R, TREF = mpf("8.31446261815324"), 300


def contrast(source):  # they add up to 0
    if source == names[-1]:
        return [-1] * (len(names) - 1)
    return [int(source == n) for n in names[:-1]]


def entries(model):
    for r in rows:
        t, k, u = (mpf(r[c]) for c in ("T_K", "k", "u_k"))
        s = {"stated": u / k, "scaled": u / k, "stated-absolute": u}.get(model, mpf(1))
        yield t, k, s, {"": 0, "<": 1, ">": -1}[r["limit"]], contrast(r["source"])


def negative(model, curve, sources, lib, held=None):
    """-ln L of k as measured as a function of the unknowns."""
    known, in_k = model.startswith("stated"), model.endswith("absolute")
    data = list(entries(model))
    unit = max(d[1] for d in data)

    def f(q):
        q = list(q)
        if held is not None:
            q.insert(2, held if lib is mp else float(held))
        ln_sigma = 0 if known else q.pop()
        total = 0
        for t, k, s, side, z in data:
            x = 1 / t - mpf(1) / TREF
            row = [1, 1000 * x]
            if curve == "power-prefactor":
                row.append(mp.log(t / TREF))
            if sources:
                row += z
            if lib is np:
                row, k, s = [float(v) for v in row], float(k), float(s)
            eta = sum(a * b for a, b in zip(row, q))
            y = lib.log(k)
            if in_k:
                # σ in units of the largest k
                eta, y = lib.exp(eta), k
                s = s if known else s * (float(unit) if lib is np else unit)
            sd = s * lib.exp(ln_sigma)
            if side:
                p = side * (y - eta) / sd
                total -= norm.logcdf(p) if lib is np else mp.log(mp.ncdf(p))
            else:
                total += (y - eta) ** 2 / (2 * sd * sd) + lib.log(sd) + lib.log(2 * lib.pi) / 2
                if not in_k:
                    total += lib.log(k)
        return total

    return f, (not known)


def derivatives(f, q):
    n, h = len(q), mpf(10) ** -15

    def at(*moves):
        p = list(q)
        for i, d in moves:
            p[i] += d * h
        return f(p)

    middle = f(q)
    plus, minus = [at((i, 1)) for i in range(n)], [at((i, -1)) for i in range(n)]
    g = mp.matrix([(plus[i] - minus[i]) / (2 * h) for i in range(n)])
    hess = mp.matrix(n, n)
    for i in range(n):
        hess[i, i] = (plus[i] - 2 * middle + minus[i]) / h**2
        for j in range(i):
            hess[i, j] = hess[j, i] = (at((i, 1), (j, 1)) - at((i, 1), (j, -1)) - at((i, -1), (j, 1)) + at((i, -1), (j, -1))) / (4 * h * h)
    return g, hess


def solve(model, curve, sources, held=None):
    f, sigma = negative(model, curve, sources, np, held)
    q = [-5.8, -9.0]
    if curve == "power-prefactor" and held is None:
        q.append(0.0)
    if sources:
        q += [0.07, -0.22, -0.07]
    if sigma:
        q.append({"relative": -3.0, "absolute": -4.0}.get(model, 0.0))
    if model.endswith("absolute"):  # from the fit in ln k, where minima are few
        g, more = negative("relative", curve, sources, np, held)
        w = minimize(g, q + ([] if sigma else [-3.0]), method="Nelder-Mead", options={"maxiter": 40000, "maxfev": 40000}).x
        q[: len(q) - sigma] = list(w[: len(q) - sigma])
    for _ in range(6):
        q = minimize(f, q, method="Nelder-Mead", options={"maxiter": 40000, "maxfev": 40000, "xatol": 1e-10, "fatol": 1e-12, "adaptive": True}).x
    q = [mpf(float(v)) for v in q]
    f, _ = negative(model, curve, sources, mp, held)
    for _ in range(60):
        g, hess = derivatives(f, q)
        step = mp.lu_solve(hess, g)
        q = [a - b for a, b in zip(q, step)]
        if max(abs(b) for b in step) < mpf(10) ** -25:
            break
    else:
        raise SystemExit(f"{model}, {curve}: no convergence")
    mp.cholesky(hess)  # it is a minimum
    return q, mp.inverse(hess), -f(q)


def out(model, curve, quantity, value):
    print(f"{model},{curve},{quantity},{mp.nstr(value, 17)}")


print("dataset,fit,quantity,value")
for model in ("relative", "scaled", "stated", "absolute", "stated-absolute"):
    for curve in ("straight", "power-prefactor"):
        for sources in (True, False):
            q, cov, log_lik = solve(model, curve, sources)
            name = model if sources else model + "-pooled"
            last = 1 if curve == "straight" else 2
            out(name, curve, "slope" if last == 1 else "n", q[last])
            out(name, curve, "sd", mp.sqrt(cov[last, last]))
            if sources:
                for i in range(3):
                    out(name, curve, f"offset{i + 1}", q[last + 1 + i])
                    out(name, curve, f"sd:offset{i + 1}", mp.sqrt(cov[last + 1 + i, last + 1 + i]))
            if not model.startswith("stated"):
                unit = max(mpf(r["k"]) for r in rows) if model == "absolute" else 1
                out(name, curve, "sigma", mp.exp(q[-1]) * unit)
            out(name, curve, "logLik", log_lik)

w = 14 * math.log1p(student.ppf(0.975, 8) ** 2 / 8)
_, _, best = solve("absolute", "power-prefactor", True)
for quantity, low, high in (("lower", -40, 20), ("upper", 35, 120)):
    end = brentq(lambda n: float(2 * (best - solve("absolute", "power-prefactor", True, mpf(n))[2])) - w, low, high, xtol=1e-10, rtol=1e-12)
    out("absolute", "power-prefactor", quantity, mpf(end))
