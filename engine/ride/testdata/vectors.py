#!/usr/bin/python3
"""Writes vectors.json: what NumPy and SciPy find for the parts of the solver.

whittaker  scipy.linalg.solveh_banded for (W + mu D1'D1 + lambda D2'D2) x = W y, mu = tau^2, lambda = tau^4
gamma      scipy.optimize.minimize (trust-exact) of sum w (p 10^(-s/10) + c s)/c^2 + mu/2 |D1 s|^2 + lambda/2 |D2 s|^2
potts      every one of the 2^(n-1) ways to cut a row of phrases
range      numpy: 3 s windows of steps followed by 1.5 s of silence, gates at -70 LUFS and -20 LU, nearest rank (EBU Tech 3342)
loudness   numpy: 400 ms blocks, gates at -70 LUFS and -10 LU (ITU-R BS.1770)
pchip      scipy.interpolate.PchipInterpolator between values a tenth of a second apart
"""
import itertools, json, os
import numpy as np
from scipy.interpolate import PchipInterpolator
from scipy.linalg import solveh_banded
from scipy.optimize import minimize

rng = np.random.default_rng(20)
C = np.log(10) / 10
out = {}


def penalty(n, tau):
    d1, d2 = np.diff(np.eye(n), axis=0), np.diff(np.eye(n), 2, axis=0)
    return tau**2 * d1.T @ d1 + tau**4 * d2.T @ d2


def numbers(a):
    return [float(f"{v:.10g}") for v in np.asarray(a, float)]


out["whittaker"] = []
for n, tau in [(3, 5.0), (40, 5.0), (400, 60.0), (2000, 200.0)]:
    w = (rng.random(n) < 0.7).astype(float)
    w[0] = 1
    y = rng.normal(-25, 6, n).round(3)
    a = penalty(n, tau) if n <= 400 else None
    if a is None:  # too big to be dense: the interior and the ends of the two penalties by hand
        a = np.zeros((n, n))
        for i in range(n - 1):
            a[i:i + 2, i:i + 2] += tau**2 * np.array([[1, -1], [-1, 1]])
        for i in range(n - 2):
            a[i:i + 3, i:i + 3] += tau**4 * np.outer([1, -2, 1], [1, -2, 1])
    a = a + np.diag(w)
    band = np.zeros((3, n))
    for k in range(3):
        band[k, :n - k] = np.diag(a, -k)
    x = solveh_banded(band, w * y, lower=True)
    keep = slice(None) if n <= 400 else slice(None, None, 50)
    out["whittaker"].append({"tau": tau, "w": [int(v) for v in w], "y": numbers(y), "every": 1 if n <= 400 else 50, "x": numbers(x[keep])})

out["gamma"] = []
for n, tau, spread in [(60, 8.0, 4.0), (200, 20.0, 8.0), (120, 60.0, 6.0), (50, 5.0, 15.0)]:
    w = (rng.random(n) < 0.8).astype(float)
    level = -25 + 8 * np.sin(np.arange(n) / n * 9) + spread * rng.normal(size=n)
    level = level.round(3)
    p, a = 10**(level / 10), penalty(n, tau)
    f = lambda s: (w * (p * np.exp(-C * s) + C * s)).sum() / C**2 + s @ a @ s / 2
    g = lambda s: w * (1 - p * np.exp(-C * s)) / C + a @ s
    h = lambda s: np.diag(w * p * np.exp(-C * s)) + a
    r = minimize(f, np.full(n, level.mean()), jac=g, hess=h, method="trust-exact", options={"gtol": 1e-9, "maxiter": 5000})
    s = r.x
    for _ in range(5):  # polish
        s = s - np.linalg.solve(h(s), g(s))
    assert np.abs(g(s)).max() < 1e-4, np.abs(g(s)).max()
    out["gamma"].append({"tau": tau, "w": [int(v) for v in w], "level": numbers(level), "s": numbers(s)})

out["potts"] = []
for n in (1, 2, 7, 12, 14):
    for worth in (5.0, 15.0, 40.0):
        heard = rng.uniform(0.3, 4, n).round(2)
        level = (-25 + 8 * (rng.random(n) < 0.5) + rng.normal(0, 2.5, n)).round(2)
        cost = np.where(rng.random(n) < 0.3, 4.0, 1.0)
        best = None
        for cuts in itertools.product((False, True), repeat=n - 1):
            at = [0] + [i + 1 for i, c in enumerate(cuts) if c] + [n]
            total = sum(worth * cost[a] for a in at[1:-1])
            for a, b in zip(at, at[1:]):
                m = np.average(level[a:b], weights=heard[a:b])
                total += (heard[a:b] * (level[a:b] - m)**2).sum()
            if best is None or total < best[0]:
                best = (total, at[1:-1])
        out["potts"].append({"worth": worth, "heard": numbers(heard), "level": numbers(level), "cost": numbers(cost), "cuts": best[1]})

out["range"], out["loudness"] = [], []
for kind in range(4):
    n = [400, 1234, 900, 600][kind]
    level = -23 + 9 * np.sin(np.arange(n) / 70) + rng.normal(0, 3, n)
    if kind == 1:
        level[200:500] -= 30
    if kind == 2:
        level[:450] -= 60
    level = level.round(2)
    p = 10**(level / 10)
    q = np.concatenate([p, np.zeros(15)])
    st = np.array([q[i - 30:i].mean() for i in range(30, len(q) + 1)])
    st = st[st >= 10**-7]
    st = np.sort(st[st >= st.mean() / 100])
    at = lambda share: st[int(np.floor((len(st) - 1) * share + 0.5))]
    out["range"].append({"level": numbers(level), "lra": float(10 * np.log10(at(.95) / at(.10)))})
    b = np.array([p[i - 4:i].mean() for i in range(4, n + 1)])
    b = b[b > 10**-7]
    out["loudness"].append({"level": numbers(level), "lufs": float(10 * np.log10(b[b > b.mean() / 10].mean()))})

y = rng.normal(0, 4, 40).round(2)
y[10:14] = y[10]
f = PchipInterpolator(np.arange(40) / 10, y)
t = np.arange(int(.1 * 8000) + 3, int(3.8 * 8000), 97)
out["pchip"] = {"curve": numbers(y), "rate": 8000, "frame": [int(v) for v in t], "db": numbers(f(t / 8000))}

with open(os.path.join(os.path.dirname(os.path.abspath(__file__)), "vectors.json"), "w") as file:
    json.dump(out, file, separators=(",", ":"))
    file.write("\n")
