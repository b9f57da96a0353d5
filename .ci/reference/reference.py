"""Values of a general-purpose library for the tests: ordinary least squares, ridge, principal components and nested cross-validation.

Run from the project's folder with Debian's python3 (packages python3-numpy, python3-scipy, python3-sklearn):

    /usr/bin/python3 .ci/reference/reference.py

It writes testdata/reference-library/CASE.json. It shares nothing with the Go code: loops are spelled out so that a reader can check
them, fits are those of scikit-learn and numpy. Definitions: the penalty k is on the correlation form, slopes in raw units solve
(S + k D) b = Xc'y with S the centred cross-products and D their diagonal, which is scikit-learn's Ridge(alpha=k) on columns centred and
scaled to unit length; the constant is never penalised; scaling is learned again in every training set. Inner folds of an outer fold are
the remaining outer folds; ties go to the larger penalty and to the fewer components.
"""
import csv, json, os
import numpy, scipy, sklearn
from scipy import stats
from sklearn.decomposition import PCA
from sklearn.linear_model import LinearRegression, Ridge

HERE = os.path.join(os.path.dirname(__file__), "..", "..", "testdata")
np = numpy
PENALTIES = (0.001, 0.01, 0.04, 0.1, 1)
METHOD = {
    "leastSquares": "singular values of centred, unit-length columns (numpy.linalg.lstsq, rcond 1e-13: the shortest solution in standardised "
    "units where training rows are exactly dependent); coefficients in raw units, constant first; standard errors and inflation factors "
    "(diagonal of the inverse correlation matrix) of the slopes from the same singular values",
    "ridge": "sklearn.linear_model.Ridge(alpha=penalty) on centred, unit-length columns, constant not penalised, raw units",
    "components": "sklearn.decomposition.PCA on centred, unit-length columns, then sklearn.linear_model.LinearRegression, raw units",
    "folds": "mean squared error of the held-out rows, repeat by repeat and fold by fold; scaling learned in each training set",
    "nested": "chosen: place in grid (ridge; ties to the larger penalty) or number of components (ties to the fewer), by squared errors "
    "pooled over the other outer folds, each predicted from all rows outside it and outside the outer fold",
    "difference": "mean, lower and upper end of the mean squared errors minus those of as-is: S^2 (1/J + n_test/n_train), t with J-1 df; "
    "for all components it is rounding, since they are least squares",
}


def read(name):
    with open(os.path.join(HERE, name, "data.csv")) as f:
        return list(csv.DictReader(f))


def unit(x):
    mean = x.mean(axis=0)
    centred = x - mean
    length = np.sqrt((centred ** 2).sum(axis=0))
    return mean, length


def raw(mean, length, ymean, standardised):
    b = standardised / length
    return np.concatenate([[ymean - mean @ b], b])


def least_squares(x, y):
    """Least squares by singular values of the centred, unit-length columns; where they are exactly dependent (smallest singular value
    under 1e-13 of the largest), the shortest solution in standardised units."""
    mean, length = unit(x)
    slopes, *_ = np.linalg.lstsq((x - mean) / length, y - y.mean(), rcond=1e-13)
    return raw(mean, length, y.mean(), slopes)


def ridge(x, y, k):
    if k == 0:
        return least_squares(x, y)
    mean, length = unit(x)
    fit = Ridge(alpha=k, fit_intercept=False, solver="svd").fit((x - mean) / length, y - y.mean())
    return raw(mean, length, y.mean(), fit.coef_)


def components(x, y, m):
    mean, length = unit(x)
    if m == 0:
        return raw(mean, length, y.mean(), np.zeros(x.shape[1]))
    z = (x - mean) / length
    pca = PCA(n_components=m, svd_solver="full").fit(z)
    scores = z @ pca.components_.T
    gamma = LinearRegression(fit_intercept=False).fit(scores, y - y.mean()).coef_
    return raw(mean, length, y.mean(), pca.components_.T @ gamma)


def drop(x, y, j):
    keep = [i for i in range(x.shape[1]) if i != j]
    b = np.zeros(x.shape[1] + 1)
    b[[0] + [i + 1 for i in keep]] = least_squares(x[:, keep], y)
    return b


def sse(b, x, y):
    return float(((y - b[0] - x @ b[1:]) ** 2).sum())


def same(want, got, tolerance, *place):
    gap = np.max(np.abs(np.asarray(got) - want) / np.abs(want))  # the worst single value
    assert gap < tolerance, (place, gap)


def published(name, out):
    """Stops where a value differs from those beside the data: certified by NIST (Longley), or recomputed from the same rows in 50-digit
    arithmetic (values.json). The held-out errors of Longley are known to two decimals."""
    place = {"longley": ("longley", "full"), "hald": ("hald", None), "imports": ("french-imports", "sample_1949_1959")}.get(name)
    if place is None:
        return
    with open(os.path.join(HERE, place[0], "values.json")) as f:
        exact = json.load(f)["recomputed"]
    exact = exact[place[1]] if place[1] else exact
    number = lambda texts: np.array([float(v) for v in texts])
    same(number(exact["coef"]), out["leastSquares"]["coefficients"], 1e-9, name, "coefficients")
    same(number(exact["se"])[1:], out["leastSquares"]["standardErrors"], 1e-9, name, "standard errors")
    same(number(exact["vif"]), out["leastSquares"]["vif"], 1e-9, name, "inflation factors")
    penalties = [float(r["k"]) for r in exact["ridge"]]
    for r in out["ridge"]:
        if r["penalty"] in penalties:
            same(number(exact["ridge"][penalties.index(r["penalty"])]["coef"]), r["coefficients"], 1e-9, name, "ridge", r["penalty"])
    for m, known in exact["pcr"].items():
        same(number(known["coef"]), out["components"][int(m)], 1e-9, name, "components", m)
    if name == "longley":
        with open(os.path.join(HERE, "nist", "longley", "values.json")) as f:
            certified = json.load(f)["certified"]
        for j, value in enumerate(number(certified["coef"])):
            same(value, out["leastSquares"]["coefficients"][j], 1e-9, name, "certified", j)
        for penalty, rmse in ((0.001, 428.72), (0.01, 501.27), (0.04, 525.26), (0.1, 598.60)):
            found = [r["rmse"] for r in out["fixed"]["ridge"] if r["penalty"] == penalty]
            assert abs(found[0] - rmse) < 0.0051, (penalty, found)
        assert abs(out["asIs"]["rmse"] - 424.771449) < 1e-6, out["asIs"]


def folds_errors(x, y, assignment, fit):
    out = []
    for folds in assignment:
        for f in range(max(folds) + 1):
            held = folds == f
            out.append(sse(fit(x[~held], y[~held]), x[held], y[held]) / held.sum())
    return out


def nested(x, y, assignment, count, fit, later):
    chosen, errors = [], []
    for folds in assignment:
        k = max(folds) + 1
        for f in range(k):
            best, place = np.inf, None
            for c in range(count):
                total = 0.0
                for g in range(k):
                    if g == f:
                        continue
                    inner = (folds != f) & (folds != g)
                    total += sse(fit(x[inner], y[inner], c), x[folds == g], y[folds == g])
                if total < best or (later and total == best):
                    best, place = total, c
            held = folds == f
            chosen.append(place)
            errors.append(sse(fit(x[~held], y[~held], place), x[held], y[held]) / held.sum())
    return chosen, errors


def summary(x, y, assignment, errors, base):
    """Pooled error, out-of-sample R2 and the overlap-corrected interval of the difference to base (Nadeau and Bengio 2003)."""
    total = sst = rows = 0.0
    test, train = [], []
    i = 0
    for folds in assignment:
        for f in range(max(folds) + 1):
            held = folds == f
            total += errors[i] * held.sum()
            sst += ((y[held] - y[~held].mean()) ** 2).sum()
            rows += held.sum()
            test.append(held.sum())
            train.append((~held).sum())
            i += 1
    d = np.array(errors) - np.array(base)
    j = len(d)
    half = stats.t.ppf(0.975, j - 1) * np.sqrt(d.var(ddof=1) * (1 / j + np.mean(test) / np.mean(train)))
    return {"rmse": np.sqrt(total / rows), "r2": 1 - total / sst, "difference": [d.mean(), d.mean() - half, d.mean() + half]}


def grid(x):
    mean, length = unit(x)
    sigma = np.linalg.svd((x - mean) / length, compute_uv=False)
    sigma = sigma[sigma > 1e-13 * sigma[0]]
    lo, hi = max(1e-10, 1e-3 * sigma[-1] ** 2), 10 * sigma[0] ** 2
    return [0.0] + [float(v) for v in np.exp(np.linspace(np.log(lo), np.log(hi), 100))]


def case(name, data, equation, rows, names, x, y, assignment):
    n, p = x.shape
    mean, length = unit(x)
    z = (x - mean) / length
    u, sigma, vt = np.linalg.svd(z, full_matrices=False)
    b = least_squares(x, y)
    s2 = sse(b, x, y) / (n - p - 1)
    inverse = (vt.T / sigma ** 2) @ vt
    g = grid(x)
    for k in PENALTIES:  # the library's ridge equals the closed form, in standardised units
        closed = np.linalg.solve(z.T @ z + k * np.eye(p), z.T @ (y - y.mean()))
        same(closed, ridge(x, y, k)[1:] * length, 1e-9, name, "ridge", k)
    plain = LinearRegression().fit(z, y)  # least squares equals the library's, and ridge without a penalty and all components are both it
    for fit in (b, ridge(x, y, 0), components(x, y, p)):
        same(plain.coef_, fit[1:] * length, 1e-9, name, "least squares")
    # Where one held-out row is all that breaks an identity, the training rows are exactly dependent: see least_squares.
    base = folds_errors(x, y, assignment, least_squares)
    out = {
        "library": f"numpy {numpy.__version__}, scipy {scipy.__version__}, scikit-learn {sklearn.__version__}",
        "command": "/usr/bin/python3 .ci/reference/reference.py",
        "data": data, "equation": equation, "rows": rows, "regressors": names,
        "assignment": [[int(v) for v in folds] for folds in assignment],
        "grid": g,
        "method": METHOD,
        "leastSquares": {"coefficients": list(b), "standardErrors": list(np.sqrt(s2 * np.diag(inverse)) / length), "vif": list(np.diag(inverse))},
        "ridge": [{"penalty": k, "coefficients": list(ridge(x, y, k)), "degrees": float((sigma ** 2 / (sigma ** 2 + k)).sum())} for k in PENALTIES],
        "components": [list(components(x, y, m)) for m in range(p + 1)],
        "folds": {
            "as-is": base,
            "ridge": [{"penalty": k, "mse": folds_errors(x, y, assignment, lambda a, c: ridge(a, c, k))} for k in (0.001, 0.04, 1, 0.01, 0.1)],
            "components": [folds_errors(x, y, assignment, lambda a, c: components(a, c, m)) for m in range(p + 1)],
            "drop": [folds_errors(x, y, assignment, lambda a, c: drop(a, c, j)) for j in range(p)],
        },
    }
    for key, count, fit, later in (("ridge", len(g), lambda a, c, i: ridge(a, c, g[i]), True), ("components", p + 1, components, False)):
        chosen, errors = nested(x, y, assignment, count, fit, later)
        out.setdefault("nested", {})[key] = {"chosen": chosen, "mse": errors, **summary(x, y, assignment, errors, base)}
    out["asIs"] = summary(x, y, assignment, base, base)
    out["fixed"] = {  # nothing chosen: pooled error and difference of each fixed alternative, in the order of "folds"
        "ridge": [{"penalty": r["penalty"], **summary(x, y, assignment, r["mse"], base)} for r in out["folds"]["ridge"]],
        "components": [summary(x, y, assignment, e, base) for e in out["folds"]["components"]],
        "drop": [summary(x, y, assignment, e, base) for e in out["folds"]["drop"]],
    }
    published(name, out)
    path = os.path.join(HERE, "reference-library", name + ".json")
    with open(path, "w") as f:
        json.dump(out, f, indent=0)
        f.write("\n")
    print(name, os.path.getsize(path))


def column(table, name):
    return np.array([float(r[name]) for r in table])


def matrix(table, names):
    return np.column_stack([column(table, n) for n in names])


def main():
    t = read("longley")
    names = ["deflator", "gnp", "unemployed", "armed_forces", "population", "year"]
    case("longley", "longley", "employed = " + " + ".join(names), "", names, matrix(t, names), column(t, "employed"), [np.arange(len(t))])
    t = read("hald")
    names = ["x1_c3a", "x2_c3s", "x3_c4af", "x4_c2s"]
    case("hald", "hald", "heat = " + " + ".join(names), "", names, matrix(t, names), column(t, "heat"), [np.arange(len(t))])
    t = [r for r in read("french-imports") if int(r["year"]) <= 1959]
    names = ["doprod", "stock", "consum"]
    case("imports", "french-imports", "import = " + " + ".join(names), "year <= 1959", names, matrix(t, names), column(t, "import"), [np.arange(len(t))])
    t = read("wages")
    rng = np.random.default_rng(7)
    assignment = [rng.permutation(np.arange(len(t)) % 10) for _ in range(2)]
    y = np.log(column(t, "wage"))
    male = np.array([float(r["gender"] == "male") for r in t])
    sectors = sorted({r["sector"] for r in t})[1:]
    dummies = [np.array([float(r["sector"] == s) for r in t]) for s in sectors]
    tail = ["gender=male"] + ["sector=" + s for s in sectors]
    for label, numbers in (("wages", ["education", "experience", "union"]), ("wages-age", ["education", "experience", "age", "union"])):
        x = np.column_stack([column(t, n) for n in numbers] + [male] + dummies)
        case(label, "wages", "ln(wage) = " + " + ".join(numbers) + " + gender + sector", "", numbers + tail, x, y, assignment)


main()
