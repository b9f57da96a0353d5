"""Standard errors of least squares by the textbook formulas, with numpy alone: HC0-HC4, clusters one-way and two-way, Newey-West.

    /usr/bin/python3 .ci/reference/errors.py > testdata/reference-errors/values.json

It shares nothing with the Go code: whole matrices, a loop over rows, the augmented design solved by QR. Formulas: MacKinnon and White (1985), Cribari-Neto
(2004), Liang and Zeger (1986) with the factor of Petersen (2009), Cameron, Gelbach and Miller (2011), Newey and West (1987).
"""
import csv
import json
import platform
import numpy as np


def table(path):
    with open(path, newline="") as f:
        rows = list(csv.DictReader(f))
    return rows


def fit(x, y):
    q, r = np.linalg.qr(x)
    inverse = np.linalg.inv(r)
    b = inverse @ (q.T @ y)
    return b, y - x @ b, inverse @ inverse.T, (q**2).sum(axis=1)


def errors(v):
    return [float(a) for a in np.sqrt(np.diag(v))]


def robust(x, y):
    n, k = x.shape
    b, e, bread, h = fit(x, y)
    weights = {
        "HC0": np.ones(n),
        "HC1": np.full(n, n / (n - k)),
        "HC2": 1 / (1 - h),
        "HC3": 1 / (1 - h) ** 2,
        "HC4": (1 - h) ** -np.minimum(4, n * h / k),
    }
    return {name: errors(bread @ (x.T @ np.diag(w * e**2) @ x) @ bread) for name, w in weights.items()}


def clustered(x, y, groups):
    n, k = x.shape
    b, e, bread, _ = fit(x, y)

    def part(g):
        same = np.equal.outer(g, g).astype(float)
        count = len(set(g.tolist()))
        return count / (count - 1) * (n - 1) / (n - k) * (x * e[:, None]).T @ same @ (x * e[:, None])

    middle = part(groups[0])
    if len(groups) == 2:
        both = np.array([f"{a}|{b}" for a, b in zip(*groups)])
        middle = middle + part(groups[1]) - part(both)
    return errors(bread @ middle @ bread)


def series(x, y, lags):
    b, e, bread, _ = fit(x, y)
    u = x * e[:, None]
    middle = u.T @ u
    for lag in range(1, lags + 1):
        g = u[lag:].T @ u[:-lag]
        middle = middle + (1 - lag / (lags + 1)) * (g + g.T)
    return errors(bread @ middle @ bread)


def main():
    longley = table("testdata/longley/data.csv")
    names = ["deflator", "gnp", "unemployed", "armed_forces", "population", "year"]
    column = lambda rows, name: np.array([float(r[name]) for r in rows])
    # The design about its means: least squares of this set loses digits otherwise. Slopes and their errors are the same.
    x = np.column_stack([column(longley, n) for n in names])
    x = np.column_stack([np.ones(16), x - x.mean(axis=0)])
    y = column(longley, "employed")
    out = {"python": platform.python_version(), "numpy": np.__version__}
    slopes = lambda v: v[1:]
    out["longley"] = {"regressors": names, "robust": {k: slopes(v) for k, v in robust(x, y).items()},
                      "autocorrelation": {str(lags): slopes(series(x, y, lags)) for lags in (0, 1, 2, 4)}}
    wages = table("testdata/wages/data.csv")
    names = ["education", "experience", "union"]
    w = np.column_stack([np.ones(len(wages))] + [column(wages, n) for n in names])
    y = np.log(column(wages, "wage"))
    groups = {g: np.array([r[g] for r in wages]) for g in ("occupation", "sector")}
    out["wages"] = {"regressors": ["constant"] + names, "robust": robust(w, y), "occupation": clustered(w, y, [groups["occupation"]]),
                    "occupation and sector": clustered(w, y, [groups["occupation"], groups["sector"]])}
    print(json.dumps(out, indent=1))


main()
